"""How time and memory grow with periods and furnaces, against the same program written by hand into HiGHS.

The demo plant is written with 1, 12, 52 and 365 periods linked by tanks, and with 12 and 60 single furnaces. For each
size a process of its own times, in turn:

read      reading and checking all files (`read_scenario`)
build     the algebra and its arrays (`program_of`)
hand      the same program from the same labelled numbers, as plain loops that fill arrays: no Pyomo, no labels of rows
solve     HiGHS on the arrays of `build`
hand run  HiGHS on the arrays of `hand`, with the same options
prove     from the solution to a plan (`plan_of`): the certificate, every balance again from the tables, the money

Both programs must have the same size and the same best margin. Peak memory is that of further processes, which go as far
as one of these things, once, above that of a process that only loads the libraries. What takes longer than half a minute
is done once.
The aims: build at most 4 times hand; between 12 periods and the most, build grows with an exponent of at most 1.1.
Run it from anywhere: `python tests/benchmarks/bench_growth.py --periods 1 12 52 365 --furnaces 12 60 --repetitions 5`.
"""

from __future__ import annotations

import argparse
import json
import math
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Iterable, Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any

# Nothing else is imported here: a process begins with the peak memory of the one that started it.
if TYPE_CHECKING:
    from olefinlp.inputs.case import Case, Part

ROOT = Path(__file__).resolve().parents[2]
AIM, EXPONENT = 4.0, 1.1
LONG = 30.0
TIMED = ("read", "build", "hand", "solve", "hand run", "prove")
MEMORY = ("read", "hand", "build", "prove")
Row = dict[int, float]


# ---------------------------------------------------------------------------------- the program by hand


class ByHand:
    """The program of a case as a person would write it without tools: loops over months that fill lists, then arrays.

    max cost · x, row_low ≤ A x ≤ row_high, low ≤ x ≤ high; the rows of A stand one after another.
    """

    def __init__(self, case: Case) -> None:
        import numpy as np

        self.case = case
        self.recycled = case.scenario.plant.recycle_feeds()
        kept = 1 - case.loss
        self.made_from = {key: [(c, kept * n) for c, n in shares.items() if n] for key, shares in case.yields.items()}
        self.limits: dict[str, list[Any]] = {}
        for limit in case.limits.values():
            self.limits.setdefault(limit.month, []).append(limit)
        self.cost, self.low, self.high = list[float](), list[float](), list[float]()
        self.starts, self.index, self.value = [0], list[int](), list[float]()
        self.row_low, self.row_high = list[float](), list[float]()
        before: Mapping[str, int] = {}
        for month in case.months:
            one = MonthByHand(self, month, before)
            one.write()
            before = one.stock
        one.end()
        self.matrix = (np.array(self.starts, np.int32), np.array(self.index, np.int32), np.array(self.value))
        self.prices = np.array(self.cost)
        self.bounds = [np.array(side) for side in (self.low, self.high, self.row_low, self.row_high)]

    def column(self, cost: float = 0.0, low: float = 0.0, high: float = math.inf) -> int:
        """One more column; its number."""
        self.cost.append(cost)
        self.low.append(low)
        self.high.append(high)
        return len(self.cost) - 1

    def row(self, low: float | None, terms: Row, high: float | None) -> None:
        """One more row, unless there is nothing in it and it says nothing."""
        low, high = -math.inf if low is None else low, math.inf if high is None else high
        if terms or not low <= 0 <= high:
            self.index += terms.keys()
            self.value += terms.values()
            self.starts.append(len(self.index))
            self.row_low.append(low)
            self.row_high.append(high)

    def pay(self, rate: float, terms: Row) -> None:
        """Money for every unit of a sum."""
        for j, share in terms.items():
            self.cost[j] += rate * share

    def margin(self) -> float:
        """The best margin, by HiGHS with the options and the scale that the package uses."""
        import highspy
        import numpy as np

        from olefinlp.lp.solver import OPTIONS

        largest = max(float(np.abs(side[np.isfinite(side)]).max(initial=0.0)) for side in self.bounds)
        scale = 2.0 ** round(math.log2(1000 / largest))
        model = highspy.HighsLp()
        model.num_col_, model.num_row_, model.sense_ = len(self.cost), len(self.row_low), highspy.ObjSense.kMaximize
        model.col_cost_ = self.prices
        model.col_lower_, model.col_upper_, model.row_lower_, model.row_upper_ = (side * scale for side in self.bounds)
        model.a_matrix_.format_ = highspy.MatrixFormat.kRowwise
        model.a_matrix_.start_, model.a_matrix_.index_, model.a_matrix_.value_ = self.matrix
        highs = highspy.Highs()
        for name, value in OPTIONS.items():
            highs.setOptionValue(name, value)
        if highs.passModel(model) == highspy.HighsStatus.kError:
            raise RuntimeError("HiGHS refused the program written by hand")
        highs.run()
        if highs.getModelStatus() != highspy.HighsModelStatus.kOptimal:
            raise RuntimeError("the program written by hand has no optimum")
        return float(highs.getObjectiveValue()) / scale


class MonthByHand:
    """Columns and rows of one month; `before` are the columns of the stocks that it opens with."""

    def __init__(self, lp: ByHand, t: str, before: Mapping[str, int]) -> None:
        self.lp, self.case, self.t, self.before = lp, lp.case, t, before
        case, column, price = lp.case, lp.column, lp.case.rate
        self.charge: dict[str, list[tuple[str, int]]] = {}
        for mode, parcel, _ in case.charges_in[t]:
            self.charge.setdefault(mode, []).append((parcel, column()))
        self.bought = {
            s: [column(-price(case.purchase_item(s, k), t), high=case.tier_size[s, k, t]) for k in data.tiers]
            for s, data in case.sources.items()
        }
        self.short = {
            s: column(-case.shortfall_pays[s, t] * price(case.purchase_item(s, 1), t))
            for s, data in case.sources.items()
            if data.take_or_pay
        }
        sign = {o: -1 if o in case.deductions else 1 for o in case.sale_tiers}
        self.sold = {
            o: [column(sign[o] * price(case.sale_item(o, k), t), high=case.sale_size[o, k, t]) for k in steps]
            for o, steps in case.sale_tiers.items()
        }
        self.sent = {(o, k): column() for o, cuts in case.outlets.items() for k in cuts}
        self.component, self.cut, self.load = (
            {name: column(low=-math.inf) for name in names} for names in (case.components, case.cuts, case.units)
        )
        self.trade = {
            name: column((1 if kind == "exports" else -1) * price(f"utilities.{name}", t))
            for name, (_, kind) in case.trades.items()
        }
        self.conversion = {name: column() for name in case.conversions}
        self.stock = {line: column(-price(f"stocks.{item}.holding", t)) for item in case.stocks for line in self.lines(item)}

    def lines(self, item: str) -> tuple[str, ...]:
        """What is kept apart in a tank."""
        data = self.case.stocks[item]
        return data.parcels if data.is_feed else (item,)

    def write(self) -> None:
        """All rows."""
        self.feeds()
        self.components()
        self.cuts()
        self.utilities()
        self.money()
        self.hold()

    def columns(self, part: Part) -> Iterable[int]:
        """The columns of one term of a written sum."""
        kind, item = part.kind, part.item
        if kind == "charge":
            return [j for _, j in self.charge.get(item[0], ())]
        if kind == "bought":
            return self.bought[item[0]]
        if kind == "outlet":
            return [self.sent[item[0], k] for k in self.case.outlets[item[0]]]
        if kind == "ingredient":
            return (self.sent[item[0], item[1]],)
        of = {"component": self.component, "cut": self.cut, "unit_load": self.load, "trade": self.trade}
        return (of.get(kind, self.conversion)[item[0]],)

    def summed(self, parts: Iterable[Part], terms: Row | None = None) -> Row:
        """A written sum."""
        terms = {} if terms is None else terms
        for part in parts:
            if part.coefficient:
                for j in self.columns(part):
                    terms[j] = terms.get(j, 0.0) + part.coefficient
        return terms

    def balance(self, line: str, uses: Row) -> None:
        """uses + closing stock = opening stock, where there is a tank."""
        there = 0.0
        if line in self.stock:
            uses[self.stock[line]] = 1.0
            if self.before:
                uses[self.before[line]] = -1.0
            else:
                there = self.case.opening.get(line, 0.0)
        self.lp.row(there, uses, there)

    def feeds(self) -> None:
        """What is charged of a delivery was bought, or kept."""
        uses: dict[str, Row] = {parcel: {} for data in self.case.stocks.values() for parcel in data.parcels}
        for mode, charges in self.charge.items():
            if self.case.mode_feed[mode] not in self.lp.recycled:
                for parcel, j in charges:
                    uses.setdefault(parcel, {})[j] = 1.0
        for s, steps in self.bought.items():
            if (s, self.t) in self.case.parcel_of:
                uses.setdefault(self.case.parcel_of[s, self.t], {}).update(dict.fromkeys(steps, -1.0))
        for parcel, terms in uses.items():
            self.balance(parcel, terms)

    def components(self) -> None:
        """What charges and side streams bring of each component."""
        made: dict[str, Row] = {c: {j: -1.0} for c, j in self.component.items()}
        for mode, charges in self.charge.items():
            for parcel, j in charges:
                for c, share in self.lp.made_from[mode, parcel]:
                    made[c][j] = share
        for s, data in self.case.sources.items():
            if data.kind == "side_streams":
                for c, share in self.case.compositions[data.feed].items():
                    made[c].update(dict.fromkeys(self.bought[s], share))
        for terms in made.values():
            self.lp.row(0, terms, 0)

    def cuts(self) -> None:
        """Cuts, loads of units, and where the cuts go."""
        case, row = self.case, self.lp.row
        for k, shares in case.recovery.items():
            row(0, {self.cut[k]: 1.0} | {self.component[c]: -n for c, n in shares.items()}, 0)
            leaves = {j: 1.0 for (_, own), j in self.sent.items() if own == k}
            if k in case.heat_cuts:
                row(0, leaves | {self.component[c]: -n * case.heating_values[c] for c, n in shares.items()}, 0)
                continue
            again = [feed for feed, source in self.lp.recycled.items() if source == k]
            leaves |= {j: 1.0 for mode, pairs in self.charge.items() if case.mode_feed[mode] in again for _, j in pairs}
            leaves[self.cut[k]] = -1.0
            tank = k in case.stocks and not case.stocks[k].is_feed
            if tank:
                self.balance(k, leaves)
            else:
                row(0, leaves, 0)
        for u, parts in case.unit_parts.items():
            row(0, self.summed(parts, {self.load[u]: -1.0}), 0)
        for o, steps in self.sold.items():
            row(0, dict.fromkeys(steps, 1.0) | {self.sent[o, k]: -1.0 for k in case.outlets[o]}, 0)

    def utilities(self) -> None:
        """Used + exported + emitted = made + imported."""
        for u, parts in self.case.utilities.items():
            terms = self.summed(parts)
            for name, flows in self.case.conversions.items():
                if u in flows:
                    terms[self.conversion[name]] = terms.get(self.conversion[name], 0.0) + flows[u]
            for name, (own, kind) in self.case.trades.items():
                if own == u:
                    terms[self.trade[name]] = terms.get(self.trade[name], 0.0) + (-1.0 if kind == "imports" else 1.0)
            there = -self.case.fixed_use.get((u, self.t), 0.0)
            self.lp.row(there, terms, there)

    def money(self) -> None:
        """Prices that are not of one column."""
        for (k, item), parts in self.case.content.items():
            self.lp.pay(self.case.rate(f"contents.{k}.{item}", self.t), self.summed(parts))
        for line in self.case.costs:
            self.lp.pay(-self.case.rate(line.price_item, self.t), self.summed(line.parts))

    def hold(self) -> None:
        """The written limits; that on the end is for the end."""
        case = self.case
        hours, decoking = dict[str, Row](), Row()
        for mode, charges in self.charge.items():
            group = hours.setdefault(case.mode_group[mode], {})
            for _, j in charges:
                group[j] = case.hours_per_kt[mode]
                decoking[j] = case.decoke_hours_per_kt[mode]
        sums: dict[str, Callable[[Any], Row]] = {
            "purchase": lambda key: dict.fromkeys(self.bought[key[0]], 1.0),
            "take_or_pay": lambda key: dict.fromkeys([*self.bought[key[0]], self.short[key[0]]], 1.0),
            "furnace_hours": lambda key: hours.get(key[0], {}),
            "decoke_crew_hours": lambda key: decoking,
            "outlet": lambda key: {self.sent[key[0], k]: 1.0 for k in case.outlets[key[0]]},
            "unit_load": lambda key: {self.load[key[0]]: 1.0},
            "ratio": lambda key: self.summed(case.ratios[key[:2]]),
            "specification": lambda key: self.summed(case.specifications[key[:3]]),
            "named": lambda key: self.summed(case.sums[key[0]]),
            "trade": lambda key: {self.trade[key[0]]: 1.0},
            "conversion": lambda key: {self.conversion[key[0]]: 1.0},
            "stock": lambda key: {self.stock[line]: 1.0 for line in self.lines(key[0])},
        }
        for limit in self.lp.limits.get(self.t, ()):
            if limit.family != "end_stock":
                self.lp.row(limit.low, sums[limit.family](limit.key), limit.high)

    def end(self) -> None:
        """What is in the tanks at the end: its worth, and what must be there."""
        for item, data in self.case.stocks.items():
            self.lp.pay(data.end_value, {self.stock[line]: 1.0 for line in self.lines(item)})
        for limit in self.lp.limits.get(self.t, ()):
            if limit.family == "end_stock":
                self.lp.row(limit.low, {self.stock[line]: 1.0 for line in self.lines(limit.key[0])}, limit.high)


# ---------------------------------------------------------------------------------- times and memory


def timed(path: Path, repetitions: int, solving: bool) -> dict[str, Any]:
    """Seconds of work of each thing, as medians, and the sizes and margins of both programs."""
    import gc

    from olefinlp.answers.plan import plan_of
    from olefinlp.inputs.scenario import read_scenario
    from olefinlp.lp.compile import program_of
    from olefinlp.lp.solver import Solver

    gc.set_threshold(100_000, 50, 100)  # as the program does at its start
    seconds: dict[str, list[float]] = {}

    def clocked(name: str, thing: Callable[[], Any]) -> Any:
        gc.collect()
        start = time.process_time()
        result = thing()
        seconds.setdefault(name, []).append(time.process_time() - start)
        return result

    scenario = read_scenario(path)
    for _ in range(repetitions):
        clocked("read", lambda: read_scenario(path))
        lp = clocked("build", lambda: program_of(scenario.case))
        hand = clocked("hand", lambda: ByHand(scenario.case))
    found: dict[str, Any] = {
        "size": [len(lp.rows), len(lp.columns) - 1, len(lp.value)],  # less the column that is always nothing
        "hand size": [len(hand.row_low), len(hand.cost), len(hand.value)],
    }
    for repetition in range(repetitions if solving else 0):
        if repetition and max(seconds["solve"]) > LONG:
            break
        solution = clocked("solve", lambda: Solver(lp).solve()).solution
        found["margin"], found["hand margin"] = solution.objective, clocked("hand run", hand.margin)
        clocked("prove", lambda: plan_of(scenario, lp, solution))  # noqa: B023 - called at once
    found["seconds"] = {name: statistics.median(times) for name, times in seconds.items()}
    found["ratio"] = statistics.median(b / h for b, h in zip(seconds["build"], seconds["hand"], strict=True))
    return found


def peak(path: Path, thing: str) -> float:
    """Peak memory of this process in MB after it has gone as far as one thing, once."""
    import resource

    from olefinlp.answers.plan import make_plan
    from olefinlp.inputs.scenario import read_scenario
    from olefinlp.lp.compile import program_of

    if thing != "libraries":
        scenario = read_scenario(path)
        further: dict[str, Callable[[], object]] = {
            "read": lambda: None,
            "hand": lambda: ByHand(scenario.case),
            "build": lambda: program_of(scenario.case),
            "prove": lambda: make_plan(scenario),
        }
        further[thing]()
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024


def step(name: str, path: Path, *arguments: object) -> Any:
    """What one step prints last, as JSON, run in a process of its own."""
    command = [sys.executable, str(Path(__file__).resolve()), "--step", name, "--path", str(path), *map(str, arguments)]
    done = subprocess.run(command, capture_output=True, encoding="utf-8", check=False)
    if done.returncode:
        raise SystemExit(f"{name} {path.name} ended with {done.returncode}\n{done.stderr}")
    return json.loads(done.stdout.splitlines()[-1])


def taken(options: argparse.Namespace) -> Any:
    """One step, in this process."""
    sys.path.append(str(ROOT))
    if options.step == "write":
        from large_plant import write_scenario

        return str(write_scenario(options.path, options.periods[0], options.furnaces[0]))
    if options.step == "time":
        return timed(options.path, options.repetitions, options.solve_up_to > 0)
    return peak(options.path, options.step)


def measured(folder: Path, periods: int, furnaces: int, options: argparse.Namespace) -> dict[str, Any]:
    """Times and memory of one size. Raises `SystemExit` when the two programs differ."""
    path = Path(step("write", folder / f"{periods}_{furnaces}", "--periods", periods, "--furnaces", furnaces))
    solving = int(periods * furnaces <= options.solve_up_to)
    found: dict[str, Any] = step("time", path, "--repetitions", options.repetitions, "--solve-up-to", solving)
    if found["size"] != found["hand size"]:
        raise SystemExit(f"{periods} periods, {furnaces} furnaces: the sizes differ, {found['size']} and {found['hand size']}")
    if solving and not math.isclose(found["margin"], found["hand margin"], rel_tol=1e-7):
        raise SystemExit(f"the best margins differ: {found['margin']} and {found['hand margin']}")
    libraries = step("libraries", path)
    found["memory"] = {name: step(name, path) - libraries for name in (MEMORY if solving else MEMORY[:3])}
    return found | {"periods": periods}


# ---------------------------------------------------------------------------------- report


def exponent(sizes: list[dict[str, Any]], of: str, name: str) -> float | None:
    """How something grows from 12 periods (or the fewest above one) to the most: it is ∝ periods^exponent."""
    there = [one for one in sizes if one["periods"] > 1 and name in one[of]]
    there = [one for one in there if one["periods"] >= 12] or there
    if len(there) < 2:
        return None
    first, last = there[0], there[-1]
    return math.log(last[of][name] / first[of][name]) / math.log(last["periods"] / first["periods"])


def line(name: str, cells: Iterable[str], last: str = "") -> str:
    """One line of the report."""
    return f"{name:<26}" + "".join(f"{cell:>12}" for cell in cells) + f"{last:>10}"


def grown(sizes: list[dict[str, Any]], of: str, name: str, form: str) -> str:
    """A line of what was measured of one thing at each size, and how it grows."""
    power = exponent(sizes, of, name)
    cells = [format(one[of][name], form) if name in one[of] else "-" for one in sizes]
    return line(f"  {name}", cells, "-" if power is None else f"{power:.2f}")


def report(furnaces: int, sizes: list[dict[str, Any]]) -> str:
    """The measurements of one number of furnaces."""
    lines = [line(f"{furnaces} furnaces, periods", (str(one["periods"]) for one in sizes), "exponent")]
    for position, name in enumerate(("rows", "columns", "non-zeros")):
        lines.append(line(name, (str(one["size"][position]) for one in sizes)))
    lines.append("seconds of work (medians)")
    lines += [grown(sizes, "seconds", name, ".3f") for name in TIMED]
    lines.append(line("ratio build / hand", (f"{one['ratio']:.2f}" for one in sizes)))
    lines.append("peak memory above that of the libraries, MB")
    lines += [grown(sizes, "memory", name, ".0f") for name in MEMORY]
    for name in ("hand", "build"):
        cells = (f"{one['memory'][name] / one['periods']:.2f}" for one in sizes)
        lines.append(line(f"{name}, MB a period", cells))
    return "\n".join(lines)


def main() -> None:
    """Measure every size and print."""
    parser = argparse.ArgumentParser(description=(__doc__ or "").splitlines()[0])
    parser.add_argument("--periods", type=int, nargs="+", default=[1, 12, 52, 365])
    parser.add_argument("--furnaces", type=int, nargs="+", default=[12, 60])
    parser.add_argument("--repetitions", type=int, default=5)
    parser.add_argument("--solve-up-to", type=int, default=700, help="periods × furnaces beyond which nothing is solved")
    parser.add_argument("--step", help="take one step in this process and print what it finds as JSON")
    parser.add_argument("--path", type=Path)
    options = parser.parse_args()
    if options.step:
        print(json.dumps(taken(options)))
        return
    with tempfile.TemporaryDirectory() as name:
        for furnaces in options.furnaces:
            sizes = [measured(Path(name), periods, furnaces, options) for periods in options.periods]
            print(report(furnaces, sizes), flush=True)
    print(f"aims: build / hand at most {AIM:g}; exponent of build at most {EXPONENT:g}")


if __name__ == "__main__":
    main()
