"""Thousands of cases on one program: only what changes is sent to the solver, every optimum is proven, in blocks.

A `SweepProgram` is plain arrays, so that a thread, another process or another machine can hold it; each case
starts from the basis of the base optimum and from nothing else, so that no result depends on the order of the
cases, on how they are shared out, or on who solves them.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace

import highspy
import numpy as np
from numpy.typing import NDArray

from olefinlp.lp.certificate import CertificateError, Solved, Terms, certificates, prove, terms_of
from olefinlp.lp.compile import Floats, Integers, LabelledLp, Lines
from olefinlp.lp.neighbours import NeighbourError, from_nothing
from olefinlp.lp.solver import Outcome, Solver, Status

BLOCK = 128
"""Cases that are solved and proven together."""
PRIMAL, DUAL, CHOOSE = 4, 1, 0
"""Simplex strategies from a basis: primal where prices move (the base's plan stays possible), dual where limits do."""
OPTIMAL, IMPOSSIBLE, ENDLESS, UNPROVEN, NO_CASE = 0, 1, 2, 3, 4
"""How a case ended, in `SolvedBlock.status`; the last is no valid case, found before solving."""


@dataclass(frozen=True)
class Readings:
    """What is read out of an optimum.

    `sums` has a line for each sum of values; shares: for each a row whose activity is compared with its maximum in
    that case; worths: for each a row and the scale of its |dual|.
    """

    sums: Lines
    share_rows: Integers
    worth_rows: Integers
    worth_scales: Floats

    @property
    def count(self) -> int:
        """How many numbers a case gives."""
        return self.sums.count + len(self.share_rows) + len(self.worth_rows)


def sums_of(columns: Sequence[Sequence[int]], scales: Sequence[float]) -> Lines:
    """Sums of values of some columns, each times its scale.

    No matrix product does it: that sums in an order which depends on how many cases stand together, and on threads.
    """
    sizes = np.array([len(own) for own in columns], dtype=np.intp)
    filled = np.flatnonzero(sizes)
    across = np.array([column for own in columns for column in own], dtype=np.intp)
    starts = (np.cumsum(sizes) - sizes)[filled]
    return Lines(len(columns), filled, starts, across, np.repeat(np.array(scales, dtype=float), sizes))


@dataclass(frozen=True)
class SweepProgram:
    """A program with the basis of its optimum, and what is read out of each case."""

    lp: LabelledLp
    column_status: NDArray[np.int8]
    row_status: NDArray[np.int8]
    strategy: int
    readings: Readings
    base_x: Floats


@dataclass(frozen=True)
class Block:
    """Some cases, one line each: `cost` of all `cost_columns`, bounds of `rows` and `columns`, non-zeros at `entries`.

    Every block of a sweep moves the same places, so that nothing of one block is left in the program for the next.
    """

    first: int
    count: int
    cost_columns: Integers
    cost: Floats
    rows: Integers
    row_low: Floats
    row_high: Floats
    columns: Integers
    low: Floats
    high: Floats
    entries: Integers
    entry_values: Floats


@dataclass(frozen=True)
class SolvedBlock:
    """What became of the cases of a block: how each ended, its margin, the base plan's margin at its prices, its readings.

    `clashing` holds rows that, together, cannot be met in a case (from 0 in the block), as the solver's proof names them.
    """

    first: int
    status: NDArray[np.int8]
    margin: Floats
    held: Floats
    readings: Floats
    clashing: dict[int, tuple[int, ...]] = field(default_factory=dict)


def sweep_program(lp: LabelledLp, readings: Readings, strategy: int) -> SweepProgram:
    """The program of a sweep; its base optimum is proven.

    Raises `NeighbourError` where the base has no optimum.
    """
    solver = Solver(lp)
    outcome = solver.solve()
    if outcome.solution is None:
        raise NeighbourError(f"the base has no optimum: {outcome.message}")
    prove(lp, outcome.solution)
    basis = solver.highs.getBasis()
    columns = np.array([int(status) for status in basis.col_status], dtype=np.int8)
    rows = np.array([int(status) for status in basis.row_status], dtype=np.int8)
    return SweepProgram(lp, columns, rows, strategy, readings, outcome.solution.x)


class Sweeper:
    """One loaded program that solves block after block."""

    def __init__(self, program: SweepProgram) -> None:
        self.program = program
        self.lp = program.lp
        self.terms = terms_of(program.lp)
        self.solver = Solver(program.lp)
        self.scale = self.solver.scale
        self.solver.highs.setOptionValue("simplex_strategy", program.strategy)
        self.basis = highspy.HighsBasis()
        self.basis.col_status = [highspy.HighsBasisStatus(int(status)) for status in program.column_status]
        self.basis.row_status = [highspy.HighsBasisStatus(int(status)) for status in program.row_status]
        self.basis.valid = True
        self.row_of_entry = np.repeat(np.arange(len(self.lp.rows)), np.diff(self.lp.starts)).astype(np.int32)

    def solve(self, block: Block) -> SolvedBlock:
        """Every case of a block, each from the basis of the base."""
        highs, scale = self.solver.highs, self.scale
        columns, rows = len(self.lp.columns), len(self.lp.rows)
        status = np.full(block.count, OPTIMAL, dtype=np.int8)
        x, y = np.zeros((block.count, columns)), np.zeros((block.count, rows))
        clashing: dict[int, tuple[int, ...]] = {}
        row_low, row_high = block.row_low * scale, block.row_high * scale
        low, high = block.low * scale, block.high * scale
        upside_down: NDArray[np.bool_] = np.logical_or((row_low > row_high).any(axis=1), (low > high).any(axis=1))
        kinds = (len(block.cost_columns), len(block.rows), len(block.columns))
        optimal, ok = highspy.HighsModelStatus.kOptimal, highspy.HighsStatus.kOk
        for at in range(block.count):
            if upside_down[at]:
                status[at] = IMPOSSIBLE
                clashing[at] = tuple(block.rows[row_low[at] > row_high[at]].tolist())
                continue
            if kinds[0]:
                highs.changeColsCost(kinds[0], block.cost_columns, block.cost[at])
            if kinds[1]:
                highs.changeRowsBounds(kinds[1], block.rows, row_low[at], row_high[at])
            if kinds[2]:
                highs.changeColsBounds(kinds[2], block.columns, low[at], high[at])
            for entry, value in zip(block.entries.tolist(), block.entry_values[at].tolist(), strict=True):
                highs.changeCoeff(int(self.row_of_entry[entry]), int(self.lp.index[entry]), value)
            highs.clearSolver()  # what the solver remembers beside the basis would make results depend on the order
            highs.setBasis(self.basis)
            if highs.run() == ok and highs.getModelStatus() == optimal:
                found = highs.getSolution()
                x[at], y[at] = found.col_value, found.row_dual
            else:
                status[at] = self._from_nothing(at, x[at], y[at], clashing)
        x /= scale
        self._prove(block, status, x, y)
        margin, held = self._margins(block, x)
        readings = self._read(block, x, y)
        bad = status != OPTIMAL
        margin[bad], held[bad], readings[bad] = np.nan, np.nan, np.nan
        return SolvedBlock(block.first, status, margin, held, readings, clashing)

    def _from_nothing(self, at: int, x: Floats, y: Floats, clashing: dict[int, tuple[int, ...]]) -> int:
        """A case that did not end well from the basis, once more without; values go into x (times the scale) and y."""
        outcome = from_nothing(self.solver)
        if outcome.solution is not None:
            x[:], y[:] = outcome.solution.x * self.scale, outcome.solution.row_dual
            return OPTIMAL
        if outcome.status is Status.INFEASIBLE:
            clashing[at] = clashing_rows(outcome)
        return {Status.INFEASIBLE: IMPOSSIBLE, Status.UNBOUNDED: ENDLESS}.get(outcome.status, UNPROVEN)

    def _terms(self, block: Block, at: int) -> Terms:
        """Prices and limits of one case."""
        cost, low, high = self.terms.cost, self.terms.low, self.terms.high
        if len(block.cost_columns):
            cost = cost.copy()
            cost[block.cost_columns] = block.cost[at]
        if len(block.rows) or len(block.columns):
            low, high = low.copy(), high.copy()
            low[block.rows], high[block.rows] = block.row_low[at], block.row_high[at]
            columns = block.columns + len(self.lp.rows)
            low[columns], high[columns] = block.low[at], block.high[at]
        return Terms(cost, low, high)

    def _lp_of(self, block: Block, at: int) -> LabelledLp:
        """The program with the coefficients of one case."""
        value = self.lp.value.copy()
        value[block.entries] = block.entry_values[at]
        return replace(self.lp, value=value)

    def _prove(self, block: Block, status: NDArray[np.int8], x: Floats, y: Floats) -> None:
        """A certificate for every optimum; what is not proven is solved again from nothing, then given up."""
        found = np.flatnonzero(status == OPTIMAL)
        solved = [Solved(self._terms(block, int(at)), x[at], y[at]) for at in found]
        if not solved:
            return
        if len(block.entries):
            checked = [certificates(self._lp_of(block, int(at)), [one])[0] for at, one in zip(found, solved, strict=True)]
        else:
            checked = certificates(self.lp, solved)
        for at, certificate in zip(found.tolist(), checked, strict=True):
            if not certificate.holds:
                status[at] = self._again(block, at, x, y)

    def _again(self, block: Block, at: int, x: Floats, y: Floats) -> int:
        """One case on a program loaded anew: slow, and beyond any warm start."""
        terms = self._terms(block, at)
        rows = len(self.lp.rows)
        lp = self._lp_of(block, at)
        lp = replace(
            lp,
            cost=terms.cost,
            row_low=terms.low[:rows],
            row_high=terms.high[:rows],
            low=terms.low[rows:],
            high=terms.high[rows:],
        )
        outcome = from_nothing(Solver(lp))
        if outcome.solution is None:
            return {Status.INFEASIBLE: IMPOSSIBLE, Status.UNBOUNDED: ENDLESS}.get(outcome.status, UNPROVEN)
        try:
            prove(lp, outcome.solution)
        except CertificateError:
            return UNPROVEN
        x[at], y[at] = outcome.solution.x, outcome.solution.row_dual
        return OPTIMAL

    def _margins(self, block: Block, x: Floats) -> tuple[Floats, Floats]:
        """Margins of the plans, and of the base's plan at the prices of each case."""
        cost = np.broadcast_to(self.lp.cost, x.shape).copy()
        cost[:, block.cost_columns] = block.cost
        return _totals(cost * x) + self.lp.offset, _totals(cost * self.program.base_x) + self.lp.offset

    def _read(self, block: Block, x: Floats, y: Floats) -> Floats:
        """Readings, a line a case."""
        return read_values(self.program.readings, x, y, self._shares(block, x))

    def _shares(self, block: Block, x: Floats) -> Floats:
        """Activity of some rows over their maximum."""
        rows = self.program.readings.share_rows
        if not len(rows):
            return np.empty((block.count, 0))
        if len(block.entries):
            activity = np.array([self._lp_of(block, at).activity(x[at])[rows] for at in range(block.count)])
        else:
            activity = self.lp.activity(x)[:, rows]
        high = np.broadcast_to(self.lp.row_high[rows], activity.shape).copy()
        for place, row in enumerate(block.rows.tolist()):
            high[:, rows == row] = block.row_high[:, [place]]
        return shares_of(activity, high)


def _totals(terms: Floats) -> Floats:
    """The sum of each line, worked out by itself: what stands beside it does not change its last digits."""
    sums: Floats = np.add.reduceat(np.ascontiguousarray(terms), [0], axis=1)[:, 0]
    return sums


def read_values(readings: Readings, x: Floats, y: Floats, shares: Floats) -> Floats:
    """The readings of some optima (a line each): sums, shares of maxima, worths."""
    worths = np.abs(y[:, readings.worth_rows]) * readings.worth_scales
    values: Floats = np.hstack((readings.sums.sums(x), shares, worths)) + 0.0  # never minus zero
    return values


def shares_of(activity: Floats, high: Floats) -> Floats:
    """What sums come to over their maximum; not a number where there is none."""
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where(np.isfinite(high) & (high > 0), activity / high, np.nan)


def clashing_rows(outcome: Outcome) -> tuple[int, ...]:
    """Rows that the solver's proof of impossibility leans on; none where it gives no proof."""
    if outcome.ray is None:
        return ()
    size = float(np.abs(outcome.ray).max(initial=0.0))
    return tuple(np.flatnonzero(np.abs(outcome.ray) > 1e-9 * size).tolist())


def solve_block(program: SweepProgram, block: Block) -> SolvedBlock:
    """One block on a program loaded for it: for workers that keep nothing between blocks."""
    return Sweeper(program).solve(block)


def same_shape(lp: LabelledLp, other: LabelledLp) -> bool:
    """Whether two programs have the same rows, columns and places of non-zeros."""
    return bool(
        lp.rows == other.rows
        and lp.columns == other.columns
        and np.array_equal(lp.starts, other.starts)
        and np.array_equal(lp.index, other.index)
        and lp.offset == other.offset
    )
