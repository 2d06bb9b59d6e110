"""One optimum, and the same program solved again around it with other prices and limits.

One loaded program, one saved basis: every neighbour is changed, restarted from the basis of the
base optimum, solved, proven and put back, so that no answer depends on the order of the questions.
A row `margin_kept`, free in the base, lets a question hold the margin and optimise something else.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import highspy
import numpy as np

from olefinlp.lp.certificate import CertificateError, certify, prove
from olefinlp.lp.compile import Floats, LabelledLp
from olefinlp.lp.solver import Outcome, Solution, Solver, Status
from olefinlp.lp.steps import Point

MARGIN_ROW = ("margin_kept",)
Bounds = Mapping[int, tuple[float, float]]


class NeighbourError(Exception):
    """A neighbour that ended neither with an optimum nor as impossible."""


def with_margin_row(lp: LabelledLp) -> LabelledLp:
    """The program with its objective as a last row, free on both sides."""
    columns = np.flatnonzero(lp.cost).astype(np.int32)
    row = len(lp.rows)
    return replace(
        lp,
        rows=(*lp.rows, MARGIN_ROW),
        starts=np.append(lp.starts, lp.starts[-1] + len(columns)).astype(np.int32),
        index=np.append(lp.index, columns).astype(np.int32),
        value=np.append(lp.value, lp.cost[columns]),
        row_low=np.append(lp.row_low, -np.inf),
        row_high=np.append(lp.row_high, np.inf),
        row_at={**lp.row_at, MARGIN_ROW: row},
    )


class Neighbours:
    """Solves a program around its base optimum; `solves` counts how often."""

    def __init__(self, lp: LabelledLp) -> None:
        self.lp = with_margin_row(lp)
        self.margin_row = len(lp.rows)
        self.solver = Solver(self.lp)
        self.solver.highs.setOptionValue("simplex_strategy", 0)
        outcome = self.solver.solve()
        if outcome.solution is None:
            raise NeighbourError(f"the base has no optimum: {outcome.message}")
        self.base = outcome.solution
        self.basis = self.solver.highs.getBasis()
        self.solves = 1

    def only_one(self) -> bool:
        """Whether the base optimum is surely the only one: nothing outside the basis is free of cost."""
        money = float(np.abs(self.lp.cost) @ np.abs(self.base.x)) or 1.0
        small = 1e-10 * money
        basic = highspy.HighsBasisStatus.kBasic
        for status, dual, low, high in (
            (self.basis.col_status, self.base.reduced, self.lp.low, self.lp.high),
            (self.basis.row_status, self.base.row_dual, self.lp.row_low, self.lp.row_high),
        ):
            free = [s != basic for s in status]
            if np.any(np.array(free) & (np.abs(dual) < small) & (low < high)):
                return False
        return True

    def solve(
        self,
        *,
        cost: Floats | None = None,
        rows: Bounds | None = None,
        columns: Bounds | None = None,
        prove: bool = True,
    ) -> Solution | None:
        """The optimum with these costs (all columns) and bounds (those named); None when impossible.

        Raises `NeighbourError` when the margin has no end or the solver fails, and
        `CertificateError` when the optimum cannot be proven.
        """
        rows, columns = rows or {}, columns or {}
        try:
            self._change(cost, rows, columns)
            outcome = self._restarted()
            if outcome.status is Status.INFEASIBLE:
                return None
            if outcome.solution is None:
                raise NeighbourError(f"a neighbour ended as {outcome.message}")
            solution = self._in_terms_of(outcome.solution, cost)
            if prove:
                self._prove(solution, cost, rows, columns)
            return solution
        finally:
            self._put_back(cost, rows, columns)

    def _restarted(self) -> Outcome:
        self.solver.highs.setBasis(self.basis)
        self.solves += 1
        return self.solver.solve()

    def _change(self, cost: Floats | None, rows: Bounds, columns: Bounds) -> None:
        if cost is not None:
            self.solver.set_cost(cost)
        for row, (low, high) in rows.items():
            self.solver.set_row(row, low, high)
        for column, (low, high) in columns.items():
            self.solver.set_column(column, low, high)

    def _put_back(self, cost: Floats | None, rows: Bounds, columns: Bounds) -> None:
        if cost is not None:
            self.solver.set_cost(self.lp.cost)
        for row in rows:
            self.solver.set_row(row, self.lp.row_low[row], self.lp.row_high[row])
        for column in columns:
            self.solver.set_column(column, self.lp.low[column], self.lp.high[column])

    def _in_terms_of(self, solution: Solution, cost: Floats | None) -> Solution:
        """The solver's wrapper counts the base cost: count the one that was asked for."""
        if cost is None:
            return solution
        return replace(solution, objective=float(cost @ solution.x) + self.lp.offset)

    def _prove(self, solution: Solution, cost: Floats | None, rows: Bounds, columns: Bounds) -> None:
        changed = self.changed(cost, rows, columns)
        certificate = certify(changed, solution)
        if not certificate.holds:
            raise CertificateError(f"a neighbour of the plan cannot be proven: {certificate}")

    def changed(self, cost: Floats | None, rows: Bounds, columns: Bounds) -> LabelledLp:
        """The program as a neighbour sees it."""
        low, high = self.lp.row_low, self.lp.row_high
        if rows:
            low, high = low.copy(), high.copy()
            for row, pair in rows.items():
                low[row], high[row] = pair
        column_low, column_high = self.lp.low, self.lp.high
        if columns:
            column_low, column_high = column_low.copy(), column_high.copy()
            for column, pair in columns.items():
                column_low[column], column_high[column] = pair
        return replace(
            self.lp,
            row_low=low,
            row_high=high,
            low=column_low,
            high=column_high,
            cost=self.lp.cost if cost is None else cost,
        )


class RatioNeighbours:
    """The program with one row more, Σ of − ratio × Σ to = 0, solved for one ratio after another."""

    def __init__(self, lp: LabelledLp, of: list[int], to: list[int]) -> None:
        row = len(lp.rows)
        index = np.array([*of, *to], dtype=np.int32)
        label = ("ratio_held",)
        self.row, self.of, self.to = row, of, to
        self.lp = replace(
            lp,
            rows=(*lp.rows, label),
            starts=np.append(lp.starts, lp.starts[-1] + len(index)).astype(np.int32),
            index=np.append(lp.index, index).astype(np.int32),
            value=np.append(lp.value, np.array([1.0] * len(of) + [-1.0] * len(to))),
            row_low=np.append(lp.row_low, 0.0),
            row_high=np.append(lp.row_high, 0.0),
            row_at={**lp.row_at, label: row},
        )
        self.solver = Solver(self.lp)
        self.solver.highs.setOptionValue("simplex_strategy", 0)
        self.basis: object | None = None
        self.solves = 0

    def evaluate(self, ratio: float) -> Point | None:
        """The best margin at a ratio and its slope, dual × Σ to; None when no plan has that ratio."""
        for column in self.to:
            self.solver.highs.changeCoeff(self.row, column, -ratio)
        if self.basis is not None:
            self.solver.highs.setBasis(self.basis)
        self.solves += 1
        outcome = self.solver.solve()
        if outcome.status is Status.INFEASIBLE:
            return None
        if outcome.solution is None:
            raise NeighbourError(f"a neighbour ended as {outcome.message}")
        if self.basis is None:
            self.basis = self.solver.highs.getBasis()
        solution = outcome.solution
        value = self.lp.value.copy()
        value[len(value) - len(self.to) :] = -ratio
        prove(replace(self.lp, value=value), solution)
        slope = float(solution.row_dual[self.row]) * float(solution.x[self.to].sum())
        return Point(ratio, solution.objective, slope)
