"""Margin against a second goal, exactly: what each plan between most margin and least of a quantity gives up for it.

For a weight λ on a quantity G the best of margin − λ G is convex in λ and piecewise linear, with slope −G: its steps
are the plans that no other beats in both goals, each with the weights at which it is the best. Between two of them
the frontier is a straight line, whose slope is the weight at which they are equal: the cost of the last unit saved.
"""

from __future__ import annotations

import functools
import itertools
import math
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, TypeVar

import numpy as np

from olefinlp.answers.answer import Answer, Chart
from olefinlp.answers.quantities import NOISE, Quantities
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.answers.words import amount, percent, worth
from olefinlp.answers.words import money as money_words
from olefinlp.inputs.case import PLAN_UNITS, Case
from olefinlp.inputs.findings import near_name
from olefinlp.inputs.prices import Price
from olefinlp.inputs.ratios import load_unit_text, unit_rate
from olefinlp.lp.certificate import Bounds
from olefinlp.lp.compile import Floats, Integers, Label
from olefinlp.lp.neighbours import FREE, NeighbourError, Optimum
from olefinlp.lp.steps import SAME, Point, Step, trace

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan

TIMES_TODAY = 10
"""How far a curve goes without an end given: so many times today's price, where there is one."""
BEYOND = 0.25
"""How far past its last step a curve without an end given is shown, as a share of the way to it."""
EQUAL = 1e-6
"""Share of the largest flow within which two plans have the same of a quantity."""
MOSTLY = 2 / 3
"""From this share on a fall is said to be of one kind."""
NAMED, LEAST_SHARE = 2, 0.1
"""Changes named of purchases and of sales: how many at most, and the part of the largest that each has at least."""
VERBS = {"imports": "imported", "exports": "exported", "emissions": "emitted"}
Found = TypeVar("Found")


@dataclass(frozen=True)
class Goal:
    """A quantity that is traded against margin: the sum of some columns of the plan, all months together.

    In units of the plan it is shown times `scale` in `unit`, thousands of `own`. A weight as people write it (in
    `weight_unit`) times `factor` is thousands of the currency per unit of the plan. `rates` are what the columns
    cost (`sign` 1) or bring (−1) at today's prices, empty where they have none; `price` is today's price, as weights
    are written, where it is one number.
    """

    path: str
    verb: str
    columns: Integers
    own: str
    unit: str
    scale: float
    factor: float
    weight_unit: str
    sign: int
    rates: Floats
    price: float | None

    def of(self, x: Floats) -> float:
        """The quantity, in units of the plan."""
        return float(x[self.columns].sum())

    def money(self, x: Floats) -> float:
        """What it costs or brings at today's prices, thousands of the currency."""
        return float(self.rates @ x[self.columns]) if len(self.rates) else 0.0

    def in_all(self, weight: float) -> float | None:
        """The price with a weight on top (a sale: taken off), as weights are written."""
        return None if self.price is None else self.price + self.sign * weight


# ---------------------------------------------------------------------------------- the questions


def two_goal_curve(plan: Plan, goal: str, low: float | None = None, high: float | None = None) -> Answer:
    """Every plan that is the best for some weight on a second goal, with the weights from and to which it is.

    `goal` is a path as written in the files: `utilities.<trade>` (imported, exported, emitted), `feeds.<feed>` or
    `feeds.<feed>.<source>` (bought), `outlets.<outlet>` (sold), `cuts.<cut>` (made), `recovery_units.<unit>`
    (loaded); all months together. `low` and `high` are weights in currency per unit as the goal's price is written
    (per t, GJ LHV, MWh or unit of load where it has none), 0 being today and a weight below zero a premium. Without
    `high` the curve goes on until the quantity falls no more, but not past ten times today's price, or the margin
    per unit where it has none.

    2n + 1 solves for n plans, two more for each plan and one for the least of the goal. Raises `ValueError` for an
    unknown goal (with the nearest name), an empty range, or a weight at which the margin has no end.

    >>> from olefinlp import make_plan, read_scenario
    >>> curve = two_goal_curve(make_plan(read_scenario("scenarios/thermal_cracker.yaml")), "cuts.propylene", 0, 1000)
    >>> [round(row["quantity"] * 1000, 2) for row in curve.table.rows][-1]
    0.0
    """
    return _asked(plan, goal, lambda seeker: _curve(seeker, low, high))


def at_most(plan: Plan, goal: str, quantity: float) -> Answer:
    """The best margin with no more of a goal than a quantity (as the curve shows it, kt …), and what the last unit costs.

    It lies on the frontier's straight line between the two plans beside it: no limit is added to the program.
    Raises `ValueError` for an unknown goal, and for a quantity below the least that any plan has.

    >>> from olefinlp import make_plan, read_scenario
    >>> answer = at_most(make_plan(read_scenario("scenarios/thermal_cracker.yaml")), "cuts.propylene", 1e-4)
    >>> answer.table.rows[0]["quantity"]
    0.0001
    """
    return _asked(plan, goal, lambda seeker: _point(seeker, quantity))


def _asked(plan: Plan, goal: str, ask: Callable[[Seeker], Found]) -> Found:
    against = _goal(plan.quantities.case, plan.lp.column_at, goal)
    try:
        return plan.neighbours.together(lambda: ask(Seeker(plan, against)))
    except NeighbourError as error:
        raise ValueError(f"at some of these weights on {goal} the margin has no end: ask for less") from error


# ---------------------------------------------------------------------------------- the goal


def _goal(case: Case, column_at: dict[Label, int], path: str) -> Goal:
    known = dict(_paths(case))
    if path not in known:
        hint = near_name(path, known) or "it is a utility traded, a purchase, an outlet, a cut or a recovery unit: utilities.<trade> …"
        raise ValueError(f"`{path}` is no quantity of this plan that can be a second goal; {hint}")
    kind, names = known[path]
    labels = [(month, label, item) for month in case.months for label, item in _labels(case, kind, names)]
    prices = [case.prices[item, month] for month, _, item in labels if item]
    columns = np.array([column_at[*label, month] for month, label, _ in labels], dtype=np.int32)
    verb, own, one, sign = _words(case, kind, names[0], prices)
    factor, weight_unit = 1 / one, f"{case.currency}/{own}"
    if prices and not prices[0].of:
        factor, weight_unit = prices[0].factor, prices[0].unit
    return Goal(
        path=path,
        verb=verb,
        columns=columns,
        own=own,
        unit=PLAN_UNITS.get(own, f"thousand {own}"),
        scale=1 / one,
        factor=factor,
        weight_unit=weight_unit,
        sign=sign,
        rates=np.array([price.value for price in prices]),
        price=prices[0].value / factor if len({price.value for price in prices}) == 1 else None,
    )


def _paths(case: Case) -> Iterator[tuple[str, tuple[str, tuple[str, ...]]]]:
    """Path in the files → what kind of quantity it is, and the names that it sums over."""
    yield from ((f"utilities.{trade}", ("trade", (trade,))) for trade in case.trades)
    bought: dict[str, tuple[str, ...]] = {}
    for source, data in case.sources.items():
        whole = f"{data.kind}.{data.feed}"
        bought[whole] = (*bought.get(whole, ()), source)
        bought[f"{data.kind}.{source}"] = (source,)
    yield from ((path, ("bought", sources)) for path, sources in bought.items())
    yield from ((f"outlets.{outlet}", ("sold", (outlet,))) for outlet in case.outlets)
    yield from ((f"cuts.{cut}", ("cut_made", (cut,))) for cut in case.cuts)
    yield from ((f"recovery_units.{unit}", ("unit_load", (unit,))) for unit in case.units)


def _labels(case: Case, kind: str, names: tuple[str, ...]) -> Iterator[tuple[Label, str]]:
    """Columns without their month, and the price of each; no price where it is none of the quantity itself."""
    for name in names:
        if kind == "bought":
            yield from (((kind, name, str(k)), case.purchase_item(name, k)) for k in case.sources[name].tiers)
        elif name in case.sale_tiers and kind == "sold":
            priced = name not in case.deductions  # a deduction is taken off what the contents bring
            yield from (((kind, name, str(k)), case.sale_item(name, k) if priced else "") for k in case.sale_tiers[name])
        elif kind == "sold":
            yield from ((("disposition", name, cut), "") for cut in case.outlets[name])
        else:
            yield (kind, name), f"utilities.{name}" if kind == "trade" else ""


def _words(case: Case, kind: str, name: str, prices: list[Price]) -> tuple[str, str, float, int]:
    """What is done with it, its unit and how many base units that is, and whether it costs (1) or brings (−1) money."""
    if kind == "unit_load":
        unit = case.scenario.plant.units[name]
        return "load", load_unit_text(unit.rate_unit), unit_rate(unit), 1
    own = prices[0].unit_used.partition("/")[2] if prices else "t"
    if kind == "trade":
        trade = case.trades[name][1]
        return VERBS[trade], own, 1.0, -1 if trade == "exports" else 1
    if kind == "sold":
        own = "GJ LHV" if case.outlets[name][0] in case.heat_cuts else "t"
        return "sold" if name in case.sale_tiers else "taken", own, 1.0, -1
    return {"bought": "bought", "cut_made": "made"}[kind], own, 1.0, 1


# ---------------------------------------------------------------------------------- the solves


@dataclass(frozen=True)
class Vertex:
    """A plan that is the best of all at weights from `low` to `high` (as the plan counts them)."""

    low: float
    high: float
    x: Floats
    sure: bool
    """Whether of plans that are equal in both goals it is surely the one with most main product."""


class Seeker:
    """Solves a plan's program with a weight on a goal."""

    def __init__(self, plan: Plan, goal: Goal) -> None:
        self.plan, self.goal = plan, goal
        self.case, self.lp = plan.quantities.case, plan.lp
        self.size = plan.quantities.size
        self.money = sum(abs(line.amount) for line in plan.lines)
        self.main = plan.scenario.plant.file.main_product
        self.main_columns = [plan.lp.column_at["cut_made", self.main, month] for month in self.case.months]
        self.optimum = functools.cache(self._optimum)

    def _optimum(self, weight: float) -> Optimum:
        cost = self.lp.cost.copy()
        np.subtract.at(cost, self.goal.columns, weight)
        found = self.plan.neighbours.solve(cost=cost)
        if found is None:  # prices forbid no plan, and the plan is one
            raise ArithmeticError("a plan is lost when a price moves")
        return found

    def point(self, weight: float) -> Point:
        """Best of margin − weight × goal, and its slope."""
        found = self.optimum(weight)
        return Point(weight, found.objective, -self.goal.of(found.x))

    def vertex(self, step: Step) -> Vertex:
        """The plan of a step, from inside it, where margin and goal are unique; of equal plans the one with most main product.

        What has a dual stays at its limit in all plans that are equal: one more solve chooses among them.
        """
        found = self.optimum((step.low + step.high) / 2)
        lp, small = found.lp, FREE * float(np.abs(found.cost).max(initial=0.0))
        rows = _held(found.row_dual, lp.row_low, lp.row_high, small)
        columns = _held(found.cost - lp.gathered(found.row_dual), lp.low, lp.high, small)
        most = self._extreme(self.main_columns, 1.0, rows, columns)
        same = most is not None and (
            abs(float(found.cost @ (most - found.x))) <= SAME * self.money
            and abs(self.goal.of(most) - self.goal.of(found.x)) <= EQUAL * self.size
        )
        return Vertex(step.low, step.high, most if most is not None and same else found.x, same)

    @functools.cached_property
    def least(self) -> float:
        """The least of the goal that any plan has, in units of the plan."""
        found = self._extreme(self.goal.columns, -1.0, {}, {})
        return self.quantity(self.plan.solution.x if found is None else found)

    def _extreme(self, columns: list[int] | Integers, sign: float, rows: Bounds, bounds: Bounds) -> Floats | None:
        """The plan with most (least) in some columns while rows and columns are held."""
        cost = np.zeros(len(self.lp.columns))
        cost[columns] = sign * float(np.abs(self.lp.cost).max(initial=1.0))  # duals as large as those of money, so as exact
        found = self.plan.neighbours.solve(cost=cost, rows=rows, columns=bounds)
        return None if found is None else found.x

    def quantity(self, x: Floats) -> float:
        """The goal in units of the plan; what is rounding reads as nothing."""
        return self._some(self.goal.of(x))

    def _some(self, value: float) -> float:
        return value if abs(value) > NOISE * self.size else 0.0

    def record(self, x: Floats) -> Record:
        """What a plan comes to: goal, margin, main product."""
        goal, quantity, main = self.goal, self.quantity(x), self._some(float(x[self.main_columns].sum()))
        margin = float(self.lp.cost @ x) + self.lp.offset
        return {
            "quantity": quantity * goal.scale,
            "margin": margin,
            "margin_before": margin + goal.sign * goal.money(x),
            "main": main,
            "per_main": quantity * goal.scale / main if main > 0 else None,
            "margin_per_tonne": margin / main if main > 0 else None,
        }

    def quantities(self, x: Floats) -> Quantities:
        """A plan's values by the plant's own names."""
        return Quantities(self.case, self.lp, replace(self.plan.solution, x=x))


def _held(dual: Floats, low: Floats, high: Floats, small: float) -> Bounds:
    """What stays at a limit in every optimum."""
    limit = np.where(dual > 0, high, low)
    places = np.flatnonzero((np.abs(dual) > small) & np.isfinite(limit)).tolist()
    return {place: (float(limit[place]), float(limit[place])) for place in places}


# ---------------------------------------------------------------------------------- the curve


def _curve(seeker: Seeker, low: float | None, high: float | None) -> Answer:
    goal = seeker.goal
    start = 0.0 if low is None else low * goal.factor
    stop = max(start, 0.0) + _reach(seeker) if high is None else high * goal.factor
    if not (start < stop and math.isfinite(stop - start)):
        raise ValueError(f"the range {start / goal.factor:g} to {stop / goal.factor:g} {goal.weight_unit} is empty or has no end")
    vertices = [seeker.vertex(step) for step in trace(seeker.point, start, stop, seeker.money)]
    last = vertices[-1]
    if high is None and len(vertices) > 1 and seeker.quantity(last.x) <= seeker.least + EQUAL * seeker.size:
        vertices[-1] = replace(last, high=min(last.high, last.low + BEYOND * (last.low - start)))
    rows = [_row(seeker, vertex, before) for vertex, before in zip(vertices, (None, *vertices), strict=False)]
    for before, row in itertools.pairwise(rows):
        row["throughput"] = _throughput_part(before, row)
    note = _note(seeker, all(vertex.sure for vertex in vertices))
    table = Table("frontier", f"Margin against {goal.path}", _columns(seeker), rows, note)
    charts = _charts(seeker, rows)
    sentences = _sentences(seeker, rows, vertices)
    return Answer("frontier", f"Margin against {goal.path}", (table,), sentences, note, charts[0], charts[1:])


def _reach(seeker: Seeker) -> float:
    """How far a curve goes without an end given, as the plan counts weights."""
    priced = TIMES_TODAY * float(np.abs(seeker.goal.rates).max(initial=0.0))
    if priced:
        return priced
    x, margin = seeker.plan.solution.x, abs(seeker.plan.solution.objective)
    per = seeker.quantity(x) or float(x[seeker.main_columns].sum())
    return margin / per if margin and per else float(np.abs(seeker.lp.cost).max(initial=1.0))


def _row(seeker: Seeker, vertex: Vertex, before: Vertex | None) -> Record:
    goal = seeker.goal
    low, high = vertex.low / goal.factor, vertex.high / goal.factor
    changed = "" if before is None else _changes(seeker.quantities(before.x), seeker.quantities(vertex.x))
    return {
        "low": low,
        "high": high,
        "total_low": goal.in_all(low),
        "total_high": goal.in_all(high),
        **seeker.record(vertex.x),
        "throughput": None,
        "today": "here" if low <= 0 <= high else "",
        "changed": changed,
    }


def _throughput_part(before: Record, after: Record) -> float | None:
    """The share of a fall that goes with the main product made; the rest is less per tonne of it. None where none is made.

    Each of the two factors changes at the mean of the other, so that both parts sum to the fall.
    """
    if before["per_main"] is None or after["per_main"] is None:
        return None
    mean = (before["per_main"] + after["per_main"]) / 2
    return float((before["main"] - after["main"]) * mean / (before["quantity"] - after["quantity"]))


def _columns(seeker: Seeker) -> tuple[Column, ...]:
    goal, priced = seeker.goal, "On top, " if len(seeker.goal.rates) and seeker.goal.sign > 0 else "Weight, "
    columns = [
        Column("low", f"{priced}from", goal.weight_unit, "price"),
        Column("high", f"{priced}to", goal.weight_unit, "price"),
    ]
    if goal.price is not None:
        columns += [
            Column("total_low", "In all, from", goal.weight_unit, "price"),
            Column("total_high", "In all, to", goal.weight_unit, "price"),
        ]
    columns += _measures(seeker)
    if goal.path != f"cuts.{seeker.main}":
        columns.append(Column("throughput", "Of the step, throughput", "%", "share"))
    return (*columns, Column("today", "Today"), Column("changed", "Changed against the row above"))


def _measures(seeker: Seeker) -> tuple[Column, ...]:
    """Columns of what a plan comes to."""
    goal, currency = seeker.goal, seeker.plan.currency
    before = "Margin before its cost" if goal.sign > 0 else "Margin without its revenue"
    main = seeker.main.replace("_", " ")
    return (
        Column("quantity", goal.verb.capitalize(), goal.unit, "quantity"),
        Column("margin", "Margin", f"k{currency}", "money"),
        *((Column("margin_before", before, f"k{currency}", "money"),) if len(goal.rates) else ()),
        Column("main", f"{main.capitalize()} made", "kt", "quantity"),
        Column("per_main", f"Per t of {main}", f"{goal.own}/t", "number"),
        Column("margin_per_tonne", f"Margin per t of {main}", f"{currency}/t", "price"),
    )


def _charts(seeker: Seeker, rows: list[Record]) -> tuple[Chart, ...]:
    goal, money = seeker.goal, f"k{seeker.plan.currency}"
    x, unit, today = ("low", "high"), f"weight, {goal.weight_unit}", 0.0
    if goal.price is not None:
        x, unit, today = ("total_low", "total_high"), f"in all, {goal.weight_unit}", goal.price
    steps = Chart("steps", f"{goal.path}, {goal.verb}", *x, "quantity", unit, goal.unit, today)
    if len(rows) == 1:
        return (steps,)
    here = next((row for row in rows if row["today"]), None)
    today = here["quantity"] if here else seeker.quantity(seeker.plan.solution.x) * goal.scale
    unit = f"{goal.path} {goal.verb}, {goal.unit}"
    return steps, Chart("line", f"Best margin against {goal.path}", "quantity", "quantity", "margin", unit, money, today)


def _note(seeker: Seeker, sure: bool) -> str:
    goal, main = seeker.goal, seeker.main.replace("_", " ")
    text = "A row is the best plan at every weight from and to which it reaches; margins are at today's prices, without the weight. "
    if len(goal.rates) and goal.price is None:
        text += "Its prices differ from one another today: the weight comes on top of each. "
    elif goal.sign < 0 and goal.price is not None:
        text += "In all: today's price less the weight. "
    text += "Exact; between two rows lie mixes of their plans, each unit less at the weight where the second begins. "
    text += "What is emitted is what the plant's files count as emitted. " if goal.verb == "emitted" else ""
    text += f"Other prices are held, also those that lean on it. Of equal plans the one with most {main} is shown"
    return f"{text}." if sure else f"{text}, except where that could not be decided."


# ---------------------------------------------------------------------------------- words


def _sentences(seeker: Seeker, rows: list[Record], vertices: list[Vertex]) -> tuple[str, ...]:
    goal, first, last = seeker.goal, rows[0], rows[-1]
    least = f"No plan has less than {_much(seeker, seeker.least * goal.scale)}."
    if len(rows) == 1:
        way = f"from {_weight(goal, first['low'])} to {_weight(goal, first['high'])}"
        text = f"{goal.path}: {_much(seeker, first['quantity'])} {goal.verb} {way}, nothing between changes it."
        if first["quantity"]:
            return text, least
        return f"{text} A premium, a weight below zero, shows what would bring it in.", least
    fall = f"{goal.path}: falls from {_much(seeker, first['quantity'])} {goal.verb} at {_weight(goal, first['low'])} "
    fall += f"to {_much(seeker, last['quantity'])} at {_weight(goal, last['low'])}, in {len(rows) - 1} steps"
    if first["per_main"] is not None and last["per_main"] is not None:
        fall += f"; {amount(first['per_main'])} → {amount(last['per_main'])} {goal.own} per t of {seeker.main.replace('_', ' ')}"
    at = max(range(1, len(rows)), key=lambda k: rows[k - 1]["quantity"] - rows[k]["quantity"])
    step = f"Its largest step is at {_weight(goal, rows[at]['low'])}: {amount(rows[at - 1]['quantity'])} → "
    step += f"{_much(seeker, rows[at]['quantity'])}"
    whole = _changes(seeker.quantities(vertices[0].x), seeker.quantities(vertices[-1].x))
    sentences = [f"{fall}.", f"{step}; {rows[at]['changed']}." if rows[at]["changed"] else f"{step}."]
    sentences += [f"From first to last: {whole}."] if whole and len(rows) > 2 else []
    return (*sentences, *_throughput(seeker, rows), _price_of_it(seeker, first, last), least)


def _throughput(seeker: Seeker, rows: list[Record]) -> list[str]:
    """How much of the fall is less made altogether, and where it is less per tonne made."""
    main, goal, first, last = seeker.main.replace("_", " "), seeker.goal, rows[0], rows[-1]
    parts = [row["throughput"] for row in rows[1:]]
    if goal.path == f"cuts.{seeker.main}" or None in parts:
        return []
    falls = [before["quantity"] - after["quantity"] for before, after in itertools.pairwise(rows)]
    share = sum(part * fall for part, fall in zip(parts, falls, strict=True)) / sum(falls)
    kind = f"About {percent(share)} of the fall is throughput, the rest less per tonne"
    if share >= MOSTLY:
        kind = "The fall is throughput rather than efficiency"
    elif share <= 1 - MOSTLY:
        kind = "The fall is less per tonne rather than throughput"
    text = f"{kind}: {main} made goes from {amount(first['main'])} to {amount(last['main'])} kt"
    if first["per_main"]:
        per = last["per_main"] / first["per_main"] - 1
        what = "the load" if goal.verb == "load" else f"what is {goal.verb}"
        text += f", {what} per t of it {'falls' if per <= 0 else 'rises'} by {percent(abs(per))}"
    large = [row for row, fall in zip(rows[1:], falls, strict=True) if fall >= LEAST_SHARE * sum(falls)]
    other = [row for row in large if row["throughput"] <= 1 - MOSTLY]
    if other and len(other) < len(large):
        text += f"; less per tonne at the {'step' if len(other) == 1 else 'steps'} at "
        text += ", ".join(_weight(goal, row["low"]) for row in other)
    return [f"{text}."]


def _price_of_it(seeker: Seeker, first: Record, last: Record) -> str:
    goal, currency = seeker.goal, seeker.plan.currency
    text = f"The margin goes from {money_words(first['margin'], currency)} to {money_words(last['margin'], currency)}"
    if len(goal.rates):
        word = "before its cost" if goal.sign > 0 else "without its revenue"
        ends = [money_words(row["margin_before"], currency) for row in (first, last)]
        text += f", {word} from {ends[0]} to {ends[1]}"
    if first["low"] < 0:
        return f"{text}."
    each = (first["margin"] - last["margin"]) / (first["quantity"] - last["quantity"]) * goal.scale / goal.factor
    on_top = " on top of today's price" if goal.sign > 0 and len(goal.rates) else ""
    return f"{text}: {worth(each)} {goal.weight_unit}{on_top} given up on average for what is saved."


def _much(seeker: Seeker, shown: float) -> str:
    return f"{amount(shown)} {seeker.goal.unit}"


def _weight(goal: Goal, weight: float) -> str:
    """A weight in a sentence: the price with it where there is one."""
    total = goal.in_all(weight)
    if total is not None:
        return f"{worth(_plain(total))} {goal.weight_unit} in all"
    return f"{worth(_plain(weight))} {goal.weight_unit} on top" if len(goal.rates) else f"a weight of {worth(weight)} {goal.weight_unit}"


def _plain(value: float) -> float:
    return 0.0 if abs(value) < 1e-9 else value


def _changes(before: Quantities, after: Quantities) -> str:
    """The largest changes of what is bought and sold from one plan to another, in words."""
    found = []
    for heat in (False, True):
        for word, amounts in (("bought", _bought), ("sold", _sold)):
            old, new = amounts(before, heat), amounts(after, heat)
            moved = sorted(old, key=lambda name: -abs(new[name] - old[name]))
            most = max((abs(new[name] - old[name]) for name in moved), default=0.0)
            named = [name for name in moved[:NAMED] if abs(new[name] - old[name]) > max(LEAST_SHARE * most, EQUAL * before.size)]
            unit = "TJ LHV" if heat else "kt"
            texts = [f"{name.replace('_', ' ')} {amount(old[name])} → {amount(new[name])} {unit}" for name in named]
            found += [f"{word}: {', '.join(texts)}"] if texts else []
        if found:  # heat sold is named where no tonnes move
            break
    return "; ".join(found)


def _bought(q: Quantities, heat: bool) -> dict[str, float]:
    """Feed → bought in all months, kt."""
    found: dict[str, float] = {}
    for source, data in q.case.sources.items() if not heat else ():
        found[data.feed] = found.get(data.feed, 0.0) + sum(q.bought(source, month) for month in q.case.months)
    return found


def _sold(q: Quantities, heat: bool) -> dict[str, float]:
    """Outlet → sold in all months, kt or TJ."""
    outlets = [outlet for outlet in q.case.sale_tiers if (q.case.outlets[outlet][0] in q.case.heat_cuts) == heat]
    return {outlet: sum(q.outlet(outlet, month) for month in q.case.months) for outlet in outlets}


# ---------------------------------------------------------------------------------- one point


def _point(seeker: Seeker, quantity: float) -> Answer:
    goal, plan = seeker.goal, seeker.plan
    wanted = quantity / goal.scale
    noise = EQUAL * seeker.size
    if not wanted >= seeker.least - noise:
        least = f"the least that any plan has is {_much(seeker, seeker.least * goal.scale)}"
        raise ValueError(f"at most {quantity:g} {goal.unit} {goal.verb}: no plan is possible; {least}")
    own = seeker.quantity(plan.solution.x)
    weight, x = (0.0, plan.solution.x) if wanted >= own else _between(seeker, max(wanted, seeker.least))
    row = seeker.record(x)
    lost = plan.solution.objective - row["margin"]
    lost = lost if lost > SAME * seeker.money else 0.0
    last = weight / goal.factor if lost else 0.0
    saved = own - min(wanted, own)
    row |= {
        "limit": quantity,
        "given_up": lost,
        "last": last,
        "last_in_all": goal.in_all(last),
        "average": lost / saved / goal.factor if saved > noise else 0.0,
        "changed": _changes(plan.quantities, seeker.quantities(x)),
    }
    columns = (
        Column("limit", f"{goal.verb.capitalize()} at most", goal.unit, "quantity"),
        *_measures(seeker),
        Column("given_up", "Given up against the plan", f"k{plan.currency}", "money"),
        Column("last", "Cost of the last unit", goal.weight_unit, "price"),
        *((Column("last_in_all", "In all with today's price", goal.weight_unit, "price"),) if goal.price is not None else ()),
        Column("average", "Cost on average", goal.weight_unit, "price"),
        Column("changed", "Changed against the plan"),
    )
    note = "Exact: on the straight line of the frontier between the two plans beside it. Other prices and limits are held."
    table = Table("frontier_point", f"At most so much of {goal.path}", columns, [row], note)
    return Answer("frontier_point", f"Best margin with a limit on {goal.path}", (table,), _point_sentences(seeker, row), note)


def _between(seeker: Seeker, wanted: float) -> tuple[float, Floats]:
    """The weight at which a quantity is bought out, and the mix of the two plans beside it that has just so much.

    The tangents of a plan with more and of one with no more meet at a weight; a solve there is on both or is one
    of the two from then on.
    """
    noise = EQUAL * seeker.size
    more, less = seeker.point(0.0), seeker.point(_reach(seeker))
    if -more.slope <= wanted:  # of plans that earn the same today one has no more than this
        return 0.0, seeker.optimum(0.0).x
    while -less.slope > wanted + noise:
        less = seeker.point(2 * less.at)
    while True:
        at = (less.value - more.value + more.slope * more.at - less.slope * less.at) / (more.slope - less.slope)
        middle = seeker.point(min(max(at, more.at), less.at))
        on_line = abs(middle.value - more.value - more.slope * (middle.at - more.at)) <= SAME * seeker.money
        if on_line or not more.at < at < less.at:
            share = min(max((wanted + less.slope) / (less.slope - more.slope), 0.0), 1.0)
            return middle.at, share * seeker.optimum(more.at).x + (1 - share) * seeker.optimum(less.at).x
        more, less = (middle, less) if -middle.slope > wanted + noise else (more, middle)


def _point_sentences(seeker: Seeker, row: Record) -> tuple[str, ...]:
    goal, currency = seeker.goal, seeker.plan.currency
    text = f"{goal.path}: with at most {_much(seeker, row['limit'])} {goal.verb} the best margin is {money_words(row['margin'], currency)}"
    if not row["given_up"]:
        return (f"{text}: nothing is given up.",)
    last = f"the last {goal.own} saved costs {worth(row['last'])} {goal.weight_unit}"
    if goal.price is not None and goal.sign > 0:
        last += f" on top of today's price, {_weight(goal, row['last'])}"
    first = f"{text}, {money_words(row['given_up'], currency)} less than the plan; {last}, on average {worth(row['average'])}."
    return (first, f"Against the plan: {row['changed']}.") if row["changed"] else (first,)
