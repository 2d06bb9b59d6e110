"""HiGHS through its public calls; the one place that owns solver status.

Keep the sense of the algebra (maximise): a row's dual is d(margin)/d(its limit), ≥ 0 on a binding
maximum, ≤ 0 on a binding minimum; a column's dual is its reduced cost, ≤ 0 at a lower bound.
"""

from __future__ import annotations

import functools
import math
import os
import sys
import threading
from dataclasses import dataclass
from enum import Enum
from typing import Any

import highspy
import numpy as np

from olefinlp.lp.compile import Floats, LabelledLp

OPTIONS: dict[str, Any] = {
    "output_flag": False,
    "threads": 1,
    "solver": "simplex",
    "random_seed": 0,
    "primal_feasibility_tolerance": 1e-9,
    "dual_feasibility_tolerance": 1e-9,
}
"""Fixed, so that a plan does not depend on the machine; printed on the audit sheet."""


class Status(Enum):
    """How a solve ended. Only `OPTIMAL` carries a solution."""

    OPTIMAL = "optimal"
    INFEASIBLE = "infeasible"
    UNBOUNDED = "unbounded"
    STOPPED = "stopped"
    FAILED = "failed"


EXIT_CODES = {
    Status.OPTIMAL: 0,
    Status.INFEASIBLE: 3,
    Status.UNBOUNDED: 4,
    Status.STOPPED: 5,
    Status.FAILED: 6,
}
"""Exit code of a command that ends so; 2 is an input error."""


@dataclass(frozen=True)
class Solution:
    """A basic optimum: values and duals by column and row, in units of the plan."""

    x: Floats
    activity: Floats
    row_dual: Floats
    reduced: Floats
    objective: float
    iterations: int


@dataclass(frozen=True)
class Outcome:
    """How a solve ended, and its solution if it is an optimum."""

    status: Status
    message: str
    solution: Solution | None = None
    ray: Floats | None = None


def solver_version() -> str:
    """Name and version of the solver."""
    return f"HiGHS {highspy.Highs.version(_quiet_highs())}" if hasattr(highspy.Highs, "version") else "HiGHS"


_FIRST = threading.Lock()


@functools.cache
def _print_banner() -> None:
    """The first solver of a process prints a banner whatever the options, and standard output is ours: it is made here.

    Nothing that is printed later is put aside, by whichever thread.
    """
    sys.stdout.flush()
    try:
        kept = os.dup(1)
    except OSError:  # no standard output at all
        return
    try:
        with open(os.devnull, "w") as nowhere:
            os.dup2(nowhere.fileno(), 1)
            highspy.Highs()
    finally:
        os.dup2(kept, 1)
        os.close(kept)


def _quiet_highs() -> Any:
    with _FIRST:
        _print_banner()
    highs = highspy.Highs()
    for name, value in OPTIONS.items():
        if highs.setOptionValue(name, value) != highspy.HighsStatus.kOk:
            raise RuntimeError(f"HiGHS does not know the option {name}={value}")
    return highs


class Solver:
    """One loaded LP that can be solved again after its limits or prices change.

    All right-hand sides are scaled by one power of two (a linear program does not mind), so that a
    plant of a few pounds an hour is solved as exactly as one of a hundred kilotonnes a month.
    """

    def __init__(self, lp: LabelledLp, scaled: bool = True) -> None:
        self.lp = lp
        self.scale = _scale(lp) if scaled else 1.0
        self.highs = _quiet_highs()
        self._pass_model()

    def _pass_model(self) -> None:
        lp, model = self.lp, highspy.HighsLp()
        model.num_col_, model.num_row_ = len(lp.columns), len(lp.rows)
        model.sense_ = highspy.ObjSense.kMaximize
        model.col_cost_ = lp.cost
        model.col_lower_, model.col_upper_ = lp.low * self.scale, lp.high * self.scale
        model.row_lower_, model.row_upper_ = lp.row_low * self.scale, lp.row_high * self.scale
        model.a_matrix_.format_ = highspy.MatrixFormat.kRowwise
        model.a_matrix_.start_, model.a_matrix_.index_, model.a_matrix_.value_ = lp.starts, lp.index, lp.value
        if self.highs.passModel(model) == highspy.HighsStatus.kError:
            raise RuntimeError("HiGHS refused the model")

    def solve(self) -> Outcome:
        """Solve; a verdict of no plan is repeated once without presolve before it is believed."""
        outcome = self._run()
        if outcome.status not in (Status.INFEASIBLE, Status.FAILED):
            return outcome
        self.highs.setOptionValue("presolve", "off")
        self.highs.clearSolver()
        again = self._run()
        self.highs.setOptionValue("presolve", "choose")
        return outcome if again.status is Status.FAILED else again

    def _run(self) -> Outcome:
        run = self.highs.run()
        status = self.highs.getModelStatus()
        text = self.highs.modelStatusToString(status)
        known = _STATUSES.get(status, Status.FAILED)
        if run == highspy.HighsStatus.kError:
            known = Status.FAILED
        if status == highspy.HighsModelStatus.kUnboundedOrInfeasible:
            known = self._which()
        if known is Status.OPTIMAL:
            return Outcome(known, text, self._solution())
        return Outcome(known, text, None, self._ray(known))

    def _which(self) -> Status:
        """Unbounded or infeasible: without prices only the limits decide."""
        columns = np.arange(len(self.lp.columns), dtype=np.int32)
        self.highs.changeColsCost(len(columns), columns, np.zeros(len(columns)))
        self.highs.run()
        feasible = self.highs.getModelStatus() == highspy.HighsModelStatus.kOptimal
        self.highs.changeColsCost(len(columns), columns, self.lp.cost)
        return Status.UNBOUNDED if feasible else Status.INFEASIBLE

    def _ray(self, status: Status) -> Floats | None:
        """A direction of endless margin, or weights that prove the clash; None if HiGHS has none."""
        get = {Status.UNBOUNDED: self.highs.getPrimalRay, Status.INFEASIBLE: self.highs.getDualRay}.get(status)
        if get is None:
            return None
        _, there, ray = get()
        return np.asarray(ray, dtype=float) if there else None

    def _solution(self) -> Solution:
        found = self.highs.getSolution()
        info = self.highs.getInfo()
        x = np.asarray(found.col_value, dtype=float) / self.scale
        return Solution(
            x=x,
            activity=np.asarray(found.row_value, dtype=float) / self.scale,
            row_dual=np.asarray(found.row_dual, dtype=float),
            reduced=np.asarray(found.col_dual, dtype=float),
            objective=float(self.lp.cost @ x) + self.lp.offset,
            iterations=int(info.simplex_iteration_count),
        )

    def set_row(self, row: int, low: float, high: float) -> None:
        """Change the limits of one row."""
        self.highs.changeRowBounds(row, low * self.scale, high * self.scale)

    def set_column(self, column: int, low: float, high: float) -> None:
        """Change the range of one column."""
        self.highs.changeColBounds(column, low * self.scale, high * self.scale)

    def set_cost(self, cost: Floats) -> None:
        """Change all prices."""
        columns = np.arange(len(cost), dtype=np.int32)
        self.highs.changeColsCost(len(cost), columns, np.asarray(cost, dtype=float))


def solve(lp: LabelledLp) -> Outcome:
    """Solve an LP once."""
    return Solver(lp).solve()


def _scale(lp: LabelledLp) -> float:
    """A power of two that brings the largest written number near 1,000."""
    written = np.concatenate([lp.row_low, lp.row_high, lp.low, lp.high])
    sizes = np.abs(written[np.isfinite(written)])
    largest = float(sizes.max(initial=0.0))
    return 2.0 ** round(math.log2(1000 / largest)) if largest > 0 else 1.0


_STATUSES = {
    highspy.HighsModelStatus.kOptimal: Status.OPTIMAL,
    highspy.HighsModelStatus.kInfeasible: Status.INFEASIBLE,
    highspy.HighsModelStatus.kUnbounded: Status.UNBOUNDED,
    highspy.HighsModelStatus.kTimeLimit: Status.STOPPED,
    highspy.HighsModelStatus.kIterationLimit: Status.STOPPED,
    highspy.HighsModelStatus.kInterrupt: Status.STOPPED,
    highspy.HighsModelStatus.kModelEmpty: Status.FAILED,
}
