"""The fewest limits whose relaxing makes an impossible program possible, and by how little.

**How many.** A program becomes possible once one side of every irreducible clash is lifted. Clashes
are gathered one by one; a small whole-number program picks the fewest sides that hit all those
known. If lifting these is enough, no fewer can be; if not, what still clashes is one clash more. No
bound on the size of a relaxation enters, so the count is proven whatever the sizes.

**By how little.** With the count held, a whole-number copy of the program chooses among all sets of
that count: min Σ u with limits looser by size · u, u ≤ M b, Σ b ≤ count, b whole. Any better choice
has every u ≤ Σ u, so an optimum that is at most M is the optimum for every M; M grows until that
holds, and need never exceed the best already known. The amounts are then found once more without
whole numbers.

Whether limits clash is always asked of the elastic copy in `clash.py`, never of a solver's words.
"""

from __future__ import annotations

import time
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace

import highspy
import numpy as np

from olefinlp.lp.clash import ClashFinder, Side, elastic
from olefinlp.lp.compile import Floats, Integers, LabelledLp
from olefinlp.lp.solver import Outcome, Solver, Status, solve

SECONDS = 10.0
"""For each question put to whole numbers."""
SECONDS_IN_ALL = 15.0
"""After these, no further set is looked for."""
FIRST_BOUND = 100.0
"""Relative amounts are first held below this, to keep the whole-number program well scaled."""
SMALL = 1e-7
"""A relaxation below this share of the limit's size is rounding of the solver."""
CLASHES_AT_ONCE = 12
"""How many clashes without a common side are gathered before the fewest sides are asked again."""


@dataclass(frozen=True)
class Relaxation:
    """Sides to relax and by how much each, in units of the plan (above zero: looser).

    `fewest`: no smaller set does, besides those found before. `least`: no other set of as many sides
    does with a smaller sum of relative amounts.
    """

    amounts: Mapping[Side, float]
    size: float
    fewest: bool
    least: bool


@dataclass(frozen=True)
class Picked:
    """A set of sides whose lifting is enough, None if none is known; and whether it is proven the fewest."""

    sides: frozenset[Side] | None
    proven: bool


class Relaxer:
    """Lists the sets of sides that make a program possible: fewest first, then least relative size.

    `sizes` says against what the amount of each side is measured, in units of the plan. Each `next`
    gives a set of which none can be left out, and which holds none of the sets given before.
    """

    def __init__(self, lp: LabelledLp, sizes: Mapping[Side, float], seconds: float = SECONDS) -> None:
        self.lp = lp
        self.finder = ClashFinder(lp)
        self.sides = self.finder.sides
        self.at = {side: position for position, side in enumerate(self.sides)}
        self.sizes: Floats = np.array([sizes[side] for side in self.sides], dtype=float)
        self.seconds = seconds
        self.clashes: list[frozenset[Side]] = []
        self.found: list[frozenset[Side]] = []
        cost = np.concatenate([np.zeros(len(lp.columns)), -1 / self.sizes])
        self.soft = Solver(replace(elastic(lp, self.sides), cost=cost))

    def impossible(self, lifted: Iterable[Side] = ()) -> bool:
        """Whether the program has no solution although these sides are lifted."""
        gone = set(lifted)
        return self.finder.clash([side for side in self.sides if side not in gone])

    def next(self) -> Relaxation | None:
        """The next set; None when there is none, or none was found in time."""
        picked = self.fewest()
        if picked.sides is None:
            return None
        best = self.least(picked.sides) if picked.proven else None
        amounts = self.amounts_of(best or picked.sides)
        if amounts is None:
            return None
        self.found.append(frozenset(amounts))
        return Relaxation(amounts, self._size(amounts), picked.proven, best is not None)

    # ------------------------------------------------------------------------------ how many

    def fewest(self) -> Picked:
        """The fewest sides that make it possible, the sets found before left out."""
        end = time.monotonic() + self.seconds
        while (left := end - time.monotonic()) > 0:
            outcome = _solve_whole(self._hitting(), len(self.sides), left)
            if outcome.solution is None:
                return Picked(None, True) if outcome.status is Status.INFEASIBLE else self._some_set()
            picked = self._whole(outcome.solution.x)
            if not self._still_clashing(picked, end):
                return Picked(picked, True)
        return self._some_set()

    def _hitting(self) -> LabelledLp:
        """min Σ b: one side of every known clash."""
        count, none = len(self.sides), np.zeros(0)
        columns = tuple(("relaxed", str(i)) for i in range(count))
        start, no_index = np.zeros(1, dtype=np.int32), np.zeros(0, dtype=np.int32)
        low, high = np.zeros(count), np.ones(count)
        bare = LabelledLp((), columns, start, no_index, none, none, none, low, high, -high, 0.0, {}, {})
        return _with_rows(bare, self._cover_rows(0))

    def _cover_rows(self, start: int) -> list[Row]:
        """One side of every known clash, not all of any set found; `start` is the column of the first side."""
        clashes = [Row({start + self.at[side]: 1.0 for side in clash}, 1.0, np.inf) for clash in self.clashes]
        found = [Row({start + self.at[side]: 1.0 for side in sides}, -np.inf, len(sides) - 1.0) for sides in self.found]
        return clashes + found

    def _whole(self, values: Floats) -> frozenset[Side]:
        return frozenset(side for side, value in zip(self.sides, values, strict=True) if value > 0.5)

    def _still_clashing(self, lifted: frozenset[Side], end: float) -> bool:
        """Whether it clashes with these sides lifted; the clashes that show it are kept."""
        left = [side for side in self.sides if side not in lifted]
        clashing = self.finder.clash(left)
        for _ in range(CLASHES_AT_ONCE if clashing else 0):
            used = self.finder.used
            clash = self.finder.irreducible(used if self.finder.clash(used) else left)
            self.clashes.append(frozenset(clash))
            left = [side for side in left if side not in self.clashes[-1]]
            if time.monotonic() > end or not self.finder.clash(left):
                break
        return clashing

    def _some_set(self) -> Picked:
        """When time is up: a set of which none can be left out, from the least sum of amounts."""
        amounts = None if self.found else self.amounts_of(frozenset(self.sides))
        if amounts is None:
            return Picked(None, False)
        kept = set(amounts)
        for side in sorted(amounts, key=lambda s: amounts[s] / self.sizes[self.at[s]]):
            if not self.impossible(kept - {side}):
                kept.discard(side)
        return Picked(frozenset(kept), False)

    # ------------------------------------------------------------------------------ by how little

    def least(self, known: frozenset[Side]) -> frozenset[Side] | None:
        """Of all sets with as many sides as this one, the least in relative size; None if time ran out."""
        end = time.monotonic() + self.seconds
        most = self._size(self.amounts_of(known) or {})
        bound = min(most, FIRST_BOUND)
        while (left := end - time.monotonic()) > 0:
            outcome = _solve_whole(self._choice(len(known), bound), len(self.sides), left)
            if outcome.solution is not None:
                sides = self._whole(outcome.solution.x[-len(self.sides) :])
                if self._still_clashing(sides, end):  # within the solver's tolerance only: now it knows
                    continue
                if -outcome.solution.objective <= bound * (1 + 1e-9) or bound >= most:
                    return sides
                most = min(most, -outcome.solution.objective)
            elif outcome.status is not Status.INFEASIBLE or bound >= most:
                return None
            bound = min(most, 10 * bound)
        return None

    def _choice(self, count: int, bound: float) -> LabelledLp:
        """min Σ u over sets of this count, u ≤ bound · b; columns x, u, b, rows scaled as the solver does."""
        sides, width, scale = len(self.sides), len(self.lp.columns), self.soft.scale
        soft = elastic(_scaled(self.lp, scale), self.sides)
        value, of_side = soft.value.copy(), soft.index >= width
        value[of_side] *= (self.sizes * scale)[soft.index[of_side] - width]
        whole = replace(
            soft,
            value=value,
            columns=(*soft.columns, *(("relaxed", str(i)) for i in range(sides))),
            low=np.concatenate([soft.low, np.zeros(sides)]),
            high=np.concatenate([soft.high[:width], np.full(sides, bound), np.ones(sides)]),
            cost=np.concatenate([np.zeros(width), -np.ones(sides), np.zeros(sides)]),
        )
        links = [Row({width + i: 1.0, width + sides + i: -bound}, -np.inf, 0.0) for i in range(sides)]
        counted = Row({width + sides + i: 1.0 for i in range(sides)}, -np.inf, float(count))
        return _with_rows(whole, [*links, counted, *self._cover_rows(width + sides)])

    def amounts_of(self, sides: frozenset[Side]) -> dict[Side, float] | None:
        """The least relative amounts by which these sides must give way; None when that is not enough."""
        first = len(self.lp.columns)
        for position, side in enumerate(self.sides):
            self.soft.set_column(first + position, 0.0, np.inf if side in sides else 0.0)
        outcome = self.soft.solve()
        if outcome.solution is None:
            return None
        amounts = {side: float(outcome.solution.x[first + self.at[side]]) for side in self.sides if side in sides}
        large = {side: amount for side, amount in amounts.items() if amount > SMALL * self.sizes[self.at[side]]}
        return amounts if len(large) < len(amounts) and self.impossible(large) else large

    def _size(self, amounts: Mapping[Side, float]) -> float:
        return float(sum(amount / self.sizes[self.at[side]] for side, amount in amounts.items()))


def relaxed(lp: LabelledLp, amounts: Mapping[Side, float]) -> LabelledLp:
    """The program with these sides looser by these amounts (infinite: lifted)."""
    low, high = lp.row_low.copy(), lp.row_high.copy()
    for side, amount in amounts.items():
        if side.low:
            low[side.row] -= amount
        else:
            high[side.row] += amount
    return replace(lp, row_low=low, row_high=high)


# ---------------------------------------------------------------------------------- ratios


def least_ratio(lp: LabelledLp, side: Side, below: Floats) -> float | None:
    """The least change of a ratio, sum above ÷ sum below the line, that makes a program possible.

    `lp` has the multiplied-out row of the ratio lifted and is possible; `below` are the coefficients
    of the sum below the line. Change · below · x ≥ what the row misses: each step is the least missed
    at the change so far (Dinkelbach's iteration). None when nothing can be below the line.
    """
    row = _dense_row(lp, side.row) * (1.0 if side.low else -1.0)
    free = relaxed(lp, {side: np.inf})
    change: float | None = None
    for _ in range(20):
        outcome = solve(replace(free, cost=row + (change or 0.0) * below, offset=0.0))
        if outcome.solution is None:
            return change
        x = outcome.solution.x
        under = float(below @ x)
        if under <= 1e-9 * float(np.abs(x).max(initial=0.0)):
            return change
        found = max(0.0, -float(row @ x) / under)
        if change is not None and found >= change * (1 - 1e-12):
            return change
        change = found
    return change


def with_ratio(lp: LabelledLp, side: Side, below: Floats, change: float) -> LabelledLp:
    """The program with the ratio of a multiplied-out row looser by this change."""
    sign = 1.0 if side.low else -1.0
    return _with_dense_row(lp, side.row, _dense_row(lp, side.row) + sign * change * below)


def _dense_row(lp: LabelledLp, row: int) -> Floats:
    here = slice(lp.starts[row], lp.starts[row + 1])
    return np.bincount(lp.index[here], weights=lp.value[here], minlength=len(lp.columns)).astype(float)


def _with_dense_row(lp: LabelledLp, row: int, coefficients: Floats) -> LabelledLp:
    first, last = lp.starts[row], lp.starts[row + 1]
    columns: Integers = np.flatnonzero(coefficients).astype(np.int32)
    starts = lp.starts.copy()
    starts[row + 1 :] += len(columns) - (last - first)
    return replace(
        lp,
        starts=starts,
        index=np.concatenate([lp.index[:first], columns, lp.index[last:]]).astype(np.int32),
        value=np.concatenate([lp.value[:first], coefficients[columns], lp.value[last:]]),
    )


# ---------------------------------------------------------------------------------- whole numbers


@dataclass(frozen=True, slots=True)
class Row:
    """One row to add: column → coefficient, and its range."""

    terms: Mapping[int, float]
    low: float
    high: float


def _with_rows(lp: LabelledLp, rows: Sequence[Row]) -> LabelledLp:
    """The program with rows added at the end."""
    lengths = np.cumsum([len(row.terms) for row in rows], dtype=np.int32)
    index = [column for row in rows for column in row.terms]
    value = [coefficient for row in rows for coefficient in row.terms.values()]
    return replace(
        lp,
        rows=(*lp.rows, *(("added", str(i)) for i in range(len(rows)))),
        starts=np.concatenate([lp.starts, lp.starts[-1] + lengths]).astype(np.int32),
        index=np.concatenate([lp.index, index]).astype(np.int32),
        value=np.concatenate([lp.value, value]),
        row_low=np.concatenate([lp.row_low, [row.low for row in rows]]),
        row_high=np.concatenate([lp.row_high, [row.high for row in rows]]),
    )


def _scaled(lp: LabelledLp, scale: float) -> LabelledLp:
    limits = {name: getattr(lp, name) * scale for name in ("row_low", "row_high", "low", "high")}
    return replace(lp, **limits)


def _solve_whole(lp: LabelledLp, count: int, seconds: float) -> Outcome:
    """Solve with the last `count` columns in whole numbers, to the proven optimum or the end of the time."""
    solver = Solver(lp, scaled=False)
    last = np.arange(len(lp.columns) - count, len(lp.columns), dtype=np.int32)
    kinds = np.full(count, int(highspy.HighsVarType.kInteger), dtype=np.uint8)
    solver.highs.changeColsIntegrality(count, last, kinds)
    options = {"solver": "choose", "mip_rel_gap": 0.0, "mip_abs_gap": 1e-9, "mip_feasibility_tolerance": 1e-9}
    for name, value in {**options, "time_limit": max(seconds, 0.01)}.items():
        solver.highs.setOptionValue(name, value)
    return solver.solve()
