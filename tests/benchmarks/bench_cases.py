"""How long many cases take on one program, as a ratio to the solver's own time on the same matrices.

Cases are the scenario with every price drawn anew between 90 and 110 % of today's, and, every second one, the
maximum of a purchase too (seeded). Then, in turn, in the same process:

bare      one loaded HiGHS: the costs and bounds of each case, restart from the basis of the first, run, read
          objective, values and duals; nothing proven, nothing named
solved    the same cases by the package: the terms of the case worked out, solved, proven
plans     the whole plan of each case: besides, every balance recomputed from the tables, the money lines, the records
anew      the whole plan of each case on a program of its own, built for it: what sharing one program saves

Reading and checking the cases' files is in none of them.
Times are those of the process (its work, not its waiting), as medians and as the least.
Run it from anywhere: `python tests/benchmarks/bench_cases.py --cases 60 --repetitions 7`.
"""

from __future__ import annotations

import argparse
import statistics
import sys
from collections.abc import Callable
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]
sys.path[:0] = [str(Path(__file__).resolve().parent)]
sys.path.append(str(ROOT))

import numpy as np  # noqa: E402
from bench_answers import DEMO, Bare, disagreement, measured  # noqa: E402

from olefinlp.answers.comparison import CasePlanner  # noqa: E402
from olefinlp.answers.plan import Plan, make_plan  # noqa: E402
from olefinlp.inputs.fields import PriceWritten  # noqa: E402
from olefinlp.inputs.findings import Findings, Place  # noqa: E402
from olefinlp.inputs.prices import PriceGiven  # noqa: E402
from olefinlp.inputs.scenario import Scenario, read_scenario  # noqa: E402
from olefinlp.inputs.units import Quantity, parse_unit  # noqa: E402
from olefinlp.lp.case_terms import SharedProgram  # noqa: E402


def drawn(scenario: Scenario, count: int) -> list[Scenario]:
    """Cases with other prices, and every second one with another purchase maximum."""
    draws = np.random.default_rng(20310301)
    limits = [key for key, limit in scenario.case.limits.items() if key[0] == "purchase" and limit.high]
    cases: list[Scenario] = []
    while len(cases) < count:
        number = len(cases)
        given = {
            key: PriceGiven(PriceWritten(_times(price.number, price.unit, draws.uniform(0.9, 1.1))), "", "", Place("drawn"))
            for key, price in scenario.case.prices.items()
            if not price.of
        }
        document = scenario.document
        if number % 2 and limits:
            _, source, _ = limits[number % len(limits)]
            feed, _, name = source.partition(".")
            kind = scenario.case.sources[source].kind
            high = scenario.case.limits[limits[number % len(limits)]].high or 0.0
            document = scenario.with_({f"{kind}.{feed}.{name}.max": f"{high * 0.95:.6f} kt"}).document
        case = scenario.as_case(f"case {number}", document, given, Findings())
        if case is None:
            raise SystemExit("a drawn case is not valid")
        cases.append(case)
    return cases


def _times(number: float, unit: str, factor: float) -> Quantity:
    return Quantity(number * factor, parse_unit(unit), f"{number * factor:.6g} {unit}")


def solved(plan: Plan, program: SharedProgram, cases: list[Scenario]) -> None:
    """Every case solved and proven on the program of the plan."""
    for case in cases:
        terms = program.terms(case.case)
        if terms is None or plan.neighbours.solve(cost=terms.cost, rows=terms.rows, columns=terms.columns) is None:
            raise SystemExit("a case needs a program of its own, or is impossible")


def main() -> None:
    """Print the times and their ratios."""
    parser = argparse.ArgumentParser(description="Time of many cases on one program against bare solves of the same matrices.")
    parser.add_argument("scenario", nargs="?", type=Path, default=DEMO)
    parser.add_argument("--cases", type=int, default=60)
    parser.add_argument("--repetitions", type=int, default=7)
    options = parser.parse_args()
    scenario = read_scenario(options.scenario)
    plan = make_plan(scenario)
    cases = drawn(scenario, options.cases)
    planner = CasePlanner(plan)
    found = [planner.program.terms(case.case) for case in cases]
    questions = [{"cost": t.cost, "rows": t.rows, "columns": t.columns} for t in found if t is not None]
    if len(questions) < len(cases):
        sys.exit("a case needs a program of its own")
    bare = Bare(plan)
    apart = disagreement(plan, bare, questions)
    print(f"{scenario.title}: {len(plan.lp.rows)} rows, {len(plan.lp.columns)} columns, {len(plan.lp.value)} non-zeros")
    print(f"cases            {len(cases)}, best values apart by at most {apart:.1e} of the money that moves")
    if apart > 1e-7:
        sys.exit("the two do not solve the same programs")
    runs: dict[str, Callable[[], object]] = {
        "bare": lambda: [(bare.solve(question), np.asarray(bare.highs.getSolution().row_dual)) for question in questions],
        "solved": lambda: solved(plan, planner.program, cases),
        "plans": lambda: [planner.plan(case) for case in cases],
        "anew": lambda: [make_plan(case) for case in cases],
    }
    times = measured(runs, options.repetitions)
    for name, seconds in times.items():
        each = 1e3 * statistics.median(seconds) / len(cases)
        print(f"{name:<16} median {statistics.median(seconds):.3f} s, least {min(seconds):.3f} s, {each:.2f} ms a case")
    for name in ("solved", "plans", "anew"):
        pairs = [a / b for a, b in zip(times[name], times["bare"], strict=True)]
        least = min(times[name]) / min(times["bare"])
        print(f"ratio {name:<6} / bare {statistics.median(pairs):.2f} (of the least {least:.2f})")


if __name__ == "__main__":
    main()
