"""One optimum, and the same program solved again around it with other prices and limits.

One loaded program, one saved basis: every neighbour is changed, restarted from the basis of the
base optimum, solved, proven and put back, so that no answer depends on the order of the questions.
A row `margin_kept`, free in the base, lets a question hold the margin and optimise something else.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from olefinlp.lp.certificate import CertificateError, certify
from olefinlp.lp.compile import Floats, LabelledLp
from olefinlp.lp.solver import Outcome, Solution, Solver, Status

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
