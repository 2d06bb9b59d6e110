"""How long the answers around a plan take, as a ratio to the solver's own time on the same matrices.

The default answers of a scenario are given once to write down every change of prices and limits that they ask for. Then, in
turn, in the same process:

answers   the same answers again: solved, proven and put into tables and sentences
bare      the same sequence sent to one loaded HiGHS: change, restart from the basis of the optimum, run, read the objective
          and the values, change back; nothing proven, nothing named, and what is remembered between solves is kept
primal    the same with the simplex strategy that the answers use

The aim is a ratio of answers to bare of 1.2 or less. Times are those of the process
(its work, not its waiting), as medians and as the least.
Run it from anywhere: `python tests/benchmarks/bench_answers.py --repetitions 15`.
"""

from __future__ import annotations

import argparse
import statistics
import sys
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

ROOT = Path(__file__).resolve().parents[2]
DEMO = ROOT / "scenarios" / "brackwater_2031_03.yaml"
AIM = 1.2
sys.path.append(str(ROOT))

import highspy  # noqa: E402
import numpy as np  # noqa: E402

from olefinlp.answers.default import default_answers  # noqa: E402
from olefinlp.answers.plan import Plan, make_plan  # noqa: E402
from olefinlp.inputs.scenario import read_scenario  # noqa: E402
from olefinlp.lp.neighbours import WARM  # noqa: E402
from olefinlp.lp.solver import OPTIONS  # noqa: E402

Question = dict[str, Any]


def asked(plan: Plan) -> list[Question]:
    """Every question that the default answers put to the neighbours of a plan."""
    questions: list[Question] = []
    there = plan.neighbours.solve

    def kept(**question: Any) -> Any:
        questions.append(question)
        return there(**question)

    plan.neighbours.solve = kept  # type: ignore[method-assign]
    default_answers(plan)
    del plan.neighbours.solve  # type: ignore[method-assign]
    return questions


class Bare:
    """One loaded HiGHS and nothing else; `strategy` is its simplex strategy, 0 its own choice."""

    def __init__(self, plan: Plan, strategy: int = 0) -> None:
        self.lp, self.scale = plan.neighbours.lp, plan.neighbours.solver.scale
        lp, model = self.lp, highspy.HighsLp()
        model.num_col_, model.num_row_ = len(lp.columns), len(lp.rows)
        model.sense_, model.a_matrix_.format_ = highspy.ObjSense.kMaximize, highspy.MatrixFormat.kRowwise
        model.col_cost_ = lp.cost
        model.col_lower_, model.col_upper_ = lp.low * self.scale, lp.high * self.scale
        model.row_lower_, model.row_upper_ = lp.row_low * self.scale, lp.row_high * self.scale
        model.a_matrix_.start_, model.a_matrix_.index_, model.a_matrix_.value_ = lp.starts, lp.index, lp.value
        self.highs = type(plan.neighbours.solver.highs)()
        for name, value in {**OPTIONS, "simplex_strategy": strategy}.items():
            self.highs.setOptionValue(name, value)
        self.highs.passModel(model)
        self.highs.run()
        self.basis = self.highs.getBasis()
        self.all_columns = np.arange(len(lp.columns), dtype=np.int32)

    def solve(self, question: Question) -> tuple[float, Any]:
        """Objective and values of one question."""
        highs, lp, scale = self.highs, self.lp, self.scale
        cost, rows, columns = question.get("cost"), question.get("rows") or {}, question.get("columns") or {}
        if cost is not None:
            highs.changeColsCost(len(cost), self.all_columns, cost)
        for row, (low, high) in rows.items():
            highs.changeRowBounds(row, low * scale, high * scale)
        for column, (low, high) in columns.items():
            highs.changeColBounds(column, low * scale, high * scale)
        highs.setBasis(self.basis)
        highs.run()
        found = highs.getObjectiveValue() / scale, np.asarray(highs.getSolution().col_value)
        if cost is not None:
            highs.changeColsCost(len(cost), self.all_columns, lp.cost)
        for row in rows:
            highs.changeRowBounds(row, lp.row_low[row] * scale, lp.row_high[row] * scale)
        for column in columns:
            highs.changeColBounds(column, lp.low[column] * scale, lp.high[column] * scale)
        return found


def disagreement(plan: Plan, bare: Bare, questions: list[Question]) -> float:
    """How far the two are from the same best values, relative to the money that moves: like is compared with like."""
    worst = 0.0
    for question in questions:
        found, value = plan.neighbours.solve(**question), bare.solve(question)[0]
        if found is not None:
            money = float(np.abs(found.cost) @ np.abs(found.x)) or 1.0
            worst = max(worst, abs(found.objective - plan.lp.offset - value) / money)
    return worst


def measured(runs: dict[str, Callable[[], object]], repetitions: int) -> dict[str, list[float]]:
    """Seconds of work of each, in turn."""
    times: dict[str, list[float]] = {name: [] for name in runs}
    for _ in range(repetitions):
        for name, run in runs.items():
            start = time.process_time()
            run()
            times[name].append(time.process_time() - start)
    return times


def main() -> None:
    """Print the times and their ratio."""
    parser = argparse.ArgumentParser(description="Time of the default answers against bare solves of the same matrices.")
    parser.add_argument("scenario", nargs="?", type=Path, default=DEMO)
    parser.add_argument("--repetitions", type=int, default=15)
    options = parser.parse_args()
    plan = make_plan(read_scenario(options.scenario))
    questions = asked(plan)
    bare, primal = Bare(plan), Bare(plan, WARM)
    apart = max(disagreement(plan, bare, questions), disagreement(plan, primal, questions))
    print(f"{plan.scenario.title}: {len(plan.lp.rows)} rows, {len(plan.lp.columns)} columns, {len(plan.lp.value)} non-zeros")
    print(f"solves           {len(questions)}, best values apart by at most {apart:.1e} of the money that moves")
    if apart > 1e-7:
        sys.exit("the two do not solve the same programs")
    runs: dict[str, Callable[[], object]] = {
        "answers": lambda: default_answers(plan),
        "bare": lambda: [bare.solve(question) for question in questions],
        "primal": lambda: [primal.solve(question) for question in questions],
    }
    times = measured(runs, options.repetitions)
    for name, seconds in times.items():
        each = 1e6 * statistics.median(seconds) / len(questions)
        print(f"{name:<16} median {statistics.median(seconds):.3f} s, least {min(seconds):.3f} s, {each:.0f} µs a solve")
    for floor in ("bare", "primal"):
        pairs = [a / b for a, b in zip(times["answers"], times[floor], strict=True)]
        least = min(times["answers"]) / min(times[floor])
        aim = f"; aim at most {AIM}" if floor == "bare" else ""
        print(f"ratio answers / {floor:<8} {statistics.median(pairs):.2f} (of the least {least:.2f}){aim}")


if __name__ == "__main__":
    main()
