"""One optimum, and the same program solved again around it with other prices and limits.

One loaded program, one saved basis: every neighbour is changed, restarted from the basis of the
base optimum, solved, proven and put back, so that no answer depends on the order of the questions.
A row `margin_kept`, free in the base, lets a question hold the margin and optimise something else.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import TypeVar

import highspy
import numpy as np

from olefinlp.lp.certificate import Bounds, CertificateError, Solved, Terms, certificates, certify, prove, proven, terms_of
from olefinlp.lp.clash import clashes
from olefinlp.lp.compile import Floats, Integers, LabelledLp
from olefinlp.lp.solver import Outcome, Solver, Status

MARGIN_ROW = ("margin_kept",)
FREE = 1e-9
"""Share of the largest price below which a dual may be what rounding leaves of nothing."""
Answer = TypeVar("Answer")
NONE = 1e-9
"""Share of the largest flow below which nothing flows."""
WARM = 4
"""Simplex strategy from a basis, primal: at other prices, which most questions ask for, the base's plan stays possible."""
STRATEGIES = (0, 1, 4)
"""Simplex strategies without a basis: the solver's choice, dual, primal."""
TOGETHER = 16
"""How many optima are proven at once, where a question allows it."""


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


@dataclass(frozen=True, slots=True)
class Optimum:
    """A proven optimum beside the base: values by column, duals by row, in units of the plan."""

    lp: LabelledLp
    cost: Floats
    x: Floats
    row_dual: Floats

    @property
    def objective(self) -> float:
        """The margin at the prices asked for."""
        return float(self.cost @ self.x) + self.lp.offset

    def reduced_cost(self, column: int) -> float:
        """Change of the margin per unit forced into a column, from the duals."""
        rows, values = self.lp.by_column.line(column)
        return float(self.cost[column] - values @ self.row_dual[rows])


class Neighbours:
    """Solves a program around its base optimum; `solves` counts how often."""

    def __init__(self, lp: LabelledLp) -> None:
        self.lp = with_margin_row(lp)
        self.margin_row = len(lp.rows)
        self.solver = Solver(self.lp)
        outcome = self.solver.solve()
        if outcome.solution is None:
            raise NeighbourError(f"the base has no optimum: {outcome.message}")
        self.base = outcome.solution
        prove(self.lp, self.base)
        self.basis = self.solver.highs.getBasis()
        self.solver.highs.setOptionValue("simplex_strategy", WARM)
        self.terms = terms_of(self.lp)
        self.solves = 1
        self._waiting: list[Solved] | None = None

    def together(self, question: Callable[[], Answer]) -> Answer:
        """The answer to a question whose optima are proven some at a time, which is quicker, and all before it is given.

        Should one of them not be proven, the question is asked again and each is proven at once.
        Raises `CertificateError` when even then one cannot be proven.
        """
        if self._waiting is not None:
            return question()
        self._waiting = []
        try:
            answer = question()
            self._prove_waiting()
            return answer
        except CertificateError:
            pass
        finally:
            self._waiting = None
        return question()

    def _prove_waiting(self) -> None:
        if self._waiting:
            for certificate in certificates(self.lp, self._waiting):
                proven(certificate)
            self._waiting.clear()

    def _holds(self, solved: Solved) -> bool:
        """Whether an optimum is proven, or will be before the question is answered."""
        if self._waiting is None:
            return certificates(self.lp, [solved])[0].holds
        self._waiting.append(solved)
        if len(self._waiting) >= TOGETHER:
            self._prove_waiting()
        return True

    @property
    def small(self) -> float:
        """A dual up to this may be what rounding leaves of nothing."""
        return FREE * float(np.abs(self.lp.cost).max(initial=0.0))

    def only_one(self) -> bool:
        """Whether the base optimum is surely the only one: nothing outside the basis is free of cost."""
        basic = highspy.HighsBasisStatus.kBasic
        for status, dual, low, high in (
            (self.basis.col_status, self.base.reduced, self.lp.low, self.lp.high),
            (self.basis.row_status, self.base.row_dual, self.lp.row_low, self.lp.row_high),
        ):
            outside = np.array([s != basic for s in status])
            if np.any(outside & (np.abs(dual) <= self.small) & (low < high)):
                return False
        return True

    def all_optima(self) -> tuple[Bounds, Bounds]:
        """Bounds of rows and of columns that the optima keep, and no other plan: what has a dual stays at its limit."""
        rows = _held(self.base.row_dual, self.lp.row_low, self.lp.row_high, self.small)
        return rows, _held(self.base.reduced, self.lp.low, self.lp.high, self.small)

    def solve(
        self,
        *,
        cost: Floats | None = None,
        rows: Bounds | None = None,
        columns: Bounds | None = None,
    ) -> Optimum | None:
        """The proven optimum with these costs (all columns) and bounds (those named); None when impossible.

        Raises `NeighbourError` when the margin has no end or the solver fails, and
        `CertificateError` when the optimum cannot be proven.
        """
        terms = self.terms.with_(cost, rows or {}, columns or {}, len(self.lp.rows))
        dearer = None if cost is None else (cost != self.lp.cost).nonzero()[0].astype(np.int32)
        try:
            self._change(terms, dearer, rows or {}, columns or {})
            found = self._restarted()
            if found is not None and not self._holds(Solved(terms, *found)):
                found = self._outcome()  # a warm start can end slightly off: once more from nothing
                if found is not None:
                    proven(certificates(self.lp, [Solved(terms, *found)])[0])
            if found is None:
                return None
            return Optimum(self.lp, terms.cost, *found)
        finally:
            self._change(self.terms, dearer, rows or {}, columns or {})

    def _restarted(self) -> tuple[Floats, Floats] | None:
        """Values and duals from the base's basis; any end but an optimum is for the solver's wrapper to judge."""
        highs, scale = self.solver.highs, self.solver.scale
        highs.clearSolver()  # what the solver remembers beside the basis would make answers depend on their order
        highs.setBasis(self.basis)
        self.solves += 1
        if highs.run() == highspy.HighsStatus.kOk and highs.getModelStatus() == highspy.HighsModelStatus.kOptimal:
            found = highs.getSolution()
            return np.array(found.col_value) / scale, np.array(found.row_dual)
        return self._outcome()

    def _outcome(self) -> tuple[Floats, Floats] | None:
        """Values and duals as the solver's wrapper finds them from nothing."""
        outcome = from_nothing(self.solver)
        if outcome.status is Status.INFEASIBLE:
            return None
        if outcome.solution is None:
            raise NeighbourError(f"a neighbour ended as {outcome.message}")
        return outcome.solution.x, outcome.solution.row_dual

    def _change(self, terms: Terms, dearer: Integers | None, rows: Bounds, columns: Bounds) -> None:
        """Send the solver these terms, where they differ from the base's."""
        highs, scale, first = self.solver.highs, self.solver.scale, len(self.lp.rows)
        if dearer is not None and len(dearer):
            highs.changeColsCost(len(dearer), dearer, terms.cost[dearer])
        for row in rows:
            highs.changeRowBounds(row, terms.low[row] * scale, terms.high[row] * scale)
        for column in columns:
            highs.changeColBounds(column, terms.low[first + column] * scale, terms.high[first + column] * scale)


def from_nothing(solver: Solver) -> Outcome:
    """Solved without a basis; another way is tried where the solver comes to no verdict."""
    outcome = Outcome(Status.FAILED, "not solved")
    _, before = solver.highs.getOptionValue("simplex_strategy")
    for strategy in STRATEGIES:
        solver.highs.setOptionValue("simplex_strategy", strategy)
        solver.highs.clearSolver()
        outcome = solver.solve()
        if outcome.status in (Status.OPTIMAL, Status.INFEASIBLE, Status.UNBOUNDED):
            break
    solver.highs.setOptionValue("simplex_strategy", before)
    return outcome


def _held(dual: Floats, low: Floats, high: Floats, small: float) -> Bounds:
    places = np.flatnonzero(np.abs(dual) > small)
    limits = np.where(dual > 0, high, low)[places].tolist()
    return {int(place): (limit, limit) for place, limit in zip(places, limits, strict=True)}


@dataclass(frozen=True, slots=True)
class RatioPoint:
    """The best margin at a ratio, with the piece of the curve that it is on.

    As long as one basis stays the best, a plan whose ratio row is missed by δ is x + δ d, and it has the
    ratio r where δ = (r − at) (t + δ turn): t = Σ to, turn = Σ to of d. So the margin is
    value + slope (r − at) / (1 − turn (r − at)), a hyperbola, exactly.
    """

    at: float
    value: float
    slope: float
    turn: float

    def along(self, ratio: float) -> float:
        """The margin at another ratio, should it be on the same piece; infinite past the piece's pole."""
        way = ratio - self.at
        left = 1 - self.turn * way
        return self.value + self.slope * way / left if left > 0 else math.inf


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
        self.solver.highs.setOptionValue("simplex_strategy", STRATEGIES[0])
        self.basis: object | None = None
        self.solves = 0

    def evaluate(self, ratio: float) -> RatioPoint | None:
        """The best margin at a ratio, its slope dual × Σ to, its piece; None when no plan has that ratio."""
        highs = self.solver.highs
        for column in self.to:
            highs.changeCoeff(self.row, column, -ratio)
        value = self.lp.value.copy()
        value[len(value) - len(self.to) :] = -ratio
        changed = replace(self.lp, value=value)
        highs.clearSolver()
        if self.basis is not None:
            highs.setBasis(self.basis)
        self.solves += 1
        outcome = self.solver.solve()
        if outcome.solution is None or not certify(changed, outcome.solution).holds:
            outcome = from_nothing(self.solver)  # a warm start can end slightly off
        if outcome.solution is None:
            # far from what a plant can do a solver may not know: then the elastic copy decides
            if outcome.status is Status.INFEASIBLE or clashes(changed):
                return None
            raise NeighbourError(f"a neighbour ended as {outcome.message}")
        if self.basis is None:
            self.basis = highs.getBasis()
        solution = outcome.solution
        prove(changed, solution)
        made = float(solution.x[self.to].sum())
        if made <= NONE * float(np.abs(solution.x).max()):
            return None  # of neither anything is made: that is no ratio
        return RatioPoint(ratio, solution.objective, float(solution.row_dual[self.row]) * made, self._turn())

    def _turn(self) -> float:
        """Change of Σ to per unit by which the ratio row is missed, in the basis at hand; 0.0 where there is none."""
        there, basic = self.solver.highs.getBasicVariables()
        marks = np.isin(np.asarray(basic), self.to).astype(float)
        solved, weights = self.solver.highs.getBasisTransposeSolve(marks)
        ok = highspy.HighsStatus.kOk
        return float(np.asarray(weights)[self.row]) if there == ok and solved == ok else 0.0
