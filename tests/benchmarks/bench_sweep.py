"""How long a sweep of 1,000 cases takes, as a ratio to a bare loop of the solver on the same matrices.

prices      every price drawn anew between 90 and 110 % of today's (seeded), all other numbers as today
capacities  the capacity factor of every recovery unit drawn between 0.85 and 1.1, and one purchase maximum

For each, in turn, in the same process, with one worker:

bare    one loaded HiGHS: the costs or bounds of each case, all at once, restart from the basis of today's optimum with the
        simplex strategy that the sweep uses, run, read objective, all values and duals; nothing proven, nothing named
sweep   the same cases by the package: put together, solved, proven in blocks, read out into the columns of the table
rebuilt (20 cases, scaled up) the Pyomo model of each case built, compiled and solved from nothing

The aim is a ratio of sweep to bare of 1.3 or less. Times are those of the process (its work, not its waiting).
Run it from anywhere: `python tests/benchmarks/bench_sweep.py --cases 1000 --repetitions 7`.
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

import highspy  # noqa: E402
import numpy as np  # noqa: E402
from bench_answers import DEMO, measured  # noqa: E402

from olefinlp.answers.sweep import Job, gathered, prepare, run_sweep  # noqa: E402
from olefinlp.inputs.scenario import Scenario, read_scenario  # noqa: E402
from olefinlp.inputs.sweep_cases import TABLE, SweepCases  # noqa: E402
from olefinlp.inputs.varied import find_varied  # noqa: E402
from olefinlp.lp.algebra import build_model  # noqa: E402
from olefinlp.lp.compile import compile_model  # noqa: E402
from olefinlp.lp.solver import OPTIONS, Solver  # noqa: E402
from olefinlp.lp.sweep import BLOCK, Block  # noqa: E402

AIM = 1.3
REBUILT = 20


def price_cases(scenario: Scenario, count: int) -> SweepCases:
    """Every price that leans on no other, between 90 and 110 %."""
    first = scenario.periods[0].name
    items = [item for item, month in scenario.case.prices if month == first and not scenario.case.prices[item, month].of]
    varied = tuple(find_varied(scenario, item) for item in items)
    values = np.random.default_rng(1).uniform(-10, 10, (count, len(items)))
    return SweepCases(scenario, varied, (True,) * len(items), values, TABLE)


def capacity_cases(scenario: Scenario, count: int) -> SweepCases:
    """The factor of every recovery unit, and the maximum of the first purchase that has one."""
    paths = [f"recovery_units.{name}.factor" for name, unit in scenario.plant.units.items() if unit.capacity]
    draws = np.random.default_rng(2)
    values = draws.uniform(0.85, 1.1, (count, len(paths)))
    limit = next((limit for limit in scenario.case.limits.values() if limit.family == "purchase" and limit.high), None)
    if limit:
        paths.append(f"{scenario.case.sources[limit.key[0]].kind}.{limit.key[0]}.max")
        today = find_varied(scenario, paths[-1]).first
        values = np.column_stack((values, draws.uniform(0.7 * today, today, count)))
    return SweepCases(scenario, tuple(find_varied(scenario, p) for p in paths), (False,) * len(paths), values, TABLE)


class Bare:
    """One loaded HiGHS and nothing else."""

    def __init__(self, job: Job) -> None:
        assert job.program is not None
        solver = Solver(job.base.lp)
        self.scale, self.highs = solver.scale, solver.highs
        solver.solve()
        self.basis = self.highs.getBasis()
        for name, value in {**OPTIONS, "simplex_strategy": job.program.strategy}.items():
            self.highs.setOptionValue(name, value)

    def solve(self, block: Block) -> list[float]:
        """Objectives of a block; values and duals are read too."""
        highs, scale, found = self.highs, self.scale, []
        low, high = block.row_low * scale, block.row_high * scale
        column_low, column_high = block.low * scale, block.high * scale
        for at in range(block.count):
            if len(block.cost_columns):
                highs.changeColsCost(len(block.cost_columns), block.cost_columns, block.cost[at])
            if len(block.rows):
                highs.changeRowsBounds(len(block.rows), block.rows, low[at], high[at])
            if len(block.columns):
                highs.changeColsBounds(len(block.columns), block.columns, column_low[at], column_high[at])
            highs.setBasis(self.basis)
            highs.run()
            solution = highs.getSolution()
            np.asarray(solution.col_value), np.asarray(solution.row_dual)
            good = highs.getModelStatus() == highspy.HighsModelStatus.kOptimal
            found.append(highs.getInfo().objective_function_value / scale if good else float("nan"))
        return found


def main() -> None:
    """Print the times and their ratios."""
    parser = argparse.ArgumentParser(description="Time of a sweep against a bare loop of the solver on the same matrices.")
    parser.add_argument("scenario", nargs="?", type=Path, default=DEMO)
    parser.add_argument("--cases", type=int, default=1000)
    parser.add_argument("--repetitions", type=int, default=7)
    options = parser.parse_args()
    scenario = read_scenario(options.scenario)
    print(f"{scenario.title}: {options.cases} cases of each kind")
    for name, cases in (("prices", price_cases), ("capacities", capacity_cases)):
        _one(name, prepare(cases(scenario, options.cases)), options.repetitions)


def _one(name: str, job: Job, repetitions: int) -> None:
    if job.terms is None:
        sys.exit(f"{name}: {job.note}")
    terms, cases = job.terms, job.cases
    blocks = [terms.block(first, BLOCK) for first in range(0, len(cases), BLOCK)]
    bare = Bare(job)
    found = gathered(job, run_sweep(job, workers=1))
    values = np.array([value for block in blocks for value in bare.solve(block)])
    apart = float(np.nanmax(np.abs(values + job.base.lp.offset - found.margin) / np.abs(found.margin)))
    print(f"{name:<11} {found.failed} without a plan, margins apart by at most {apart:.1e}")
    if apart > 1e-7 or np.isnan(values).sum() != found.failed:
        sys.exit("the two do not solve the same programs")
    few = range(0, len(cases), max(1, len(cases) // REBUILT))

    def rebuilt() -> None:
        for number in few:
            Solver(compile_model(build_model(cases.scenario_of(number).case))).solve()

    runs: dict[str, Callable[[], object]] = {
        "bare": lambda: [bare.solve(block) for block in blocks],
        "sweep": lambda: gathered(job, run_sweep(job, workers=1)),
        "rebuilt": rebuilt,
    }
    times = measured(runs, repetitions)
    times["rebuilt"] = [seconds * len(cases) / len(few) for seconds in times["rebuilt"]]
    for way, seconds in times.items():
        print(
            f"  {way:<8} median {statistics.median(seconds):.3f} s, {1e3 * statistics.median(seconds) / len(cases):.3f} ms a case"
        )
    for way in ("sweep", "rebuilt"):
        pairs = [a / b for a, b in zip(times[way], times["bare"], strict=True)]
        aim = f"; aim at most {AIM}" if way == "sweep" else ""
        least = min(times[way]) / min(times["bare"])
        print(f"  ratio {way:<7} / bare {statistics.median(pairs):.2f} (of the least {least:.2f}){aim}")


if __name__ == "__main__":
    main()
