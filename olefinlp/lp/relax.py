"""The fewest limits whose relaxing makes an impossible program possible, and by how little.

**How many.** A program becomes possible once one side of every irreducible clash is let go. Clashes
are gathered one by one; a small whole-number program picks the fewest sides that hit all that are
known; if letting these go entirely is enough, no fewer can be, otherwise what still clashes is one
clash more. No bound on the size of a relaxation enters, so the count is proven whatever the sizes.

**By how little.** With the count held, a whole-number copy of the program chooses among all sets of
that count: min Σ u, limit − size · u ≤ sum, u ≤ M b, Σ b ≤ count, b whole. Any better choice has all
u ≤ Σ u, so an optimum that is ≤ M is the optimum for every M; M grows until that holds, and needs never
be above the best already known. The amounts are then found once more by a program without whole numbers.

Whether limits clash is always asked of the elastic copy of `clash.py`.
"""

from __future__ import annotations

import time
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace

import highspy
import numpy as np

from olefinlp.lp.clash import ClashFinder, Side, elastic
from olefinlp.lp.compile import Floats, LabelledLp
from olefinlp.lp.solver import Outcome, Solver, Status

SECONDS = 10.0
"""For each question put to whole numbers; an answer found later is not proven."""
SMALL = 1e-7
"""A relaxation below this share of the limit's size is rounding of the solver."""
CLASHES_AT_ONCE = 12
"""How many clashes apart from each other are looked for before the fewest sides are asked again."""


@dataclass(frozen=True)
class Relaxation:
    """Sides to relax and by how much each, in units of the plan (above zero: looser).

    `fewest`: no smaller number of sides would do. `least`: no other set of as many sides does with a
    smaller sum of relative amounts.
    """

    amounts: Mapping[Side, float]
    size: float
    fewest: bool
    least: bool

    @property
    def sides(self) -> frozenset[Side]:
        """What is relaxed."""
        return frozenset(self.amounts)


class Relaxer:
    """Lists the sets of sides that make a program possible: fewest first, then least relative size.

    `sizes` says against what the amount of each side is measured, in units of the plan. Each call of
    `next` gives a set of which none can be left out and that holds none of the sets given before.
    """

    def __init__(self, lp: LabelledLp, sizes: Mapping[Side, float], seconds: float = SECONDS) -> None:
        self.lp = lp
        self.finder = ClashFinder(lp)
        self.sides = self.finder.sides
        self.sizes: Floats = np.array([sizes[side] for side in self.sides])
        self.seconds = seconds
        self.at = {side: position for position, side in enumerate(self.sides)}
        self.clashes: list[frozenset[Side]] = []
        self.found: list[frozenset[Side]] = []
        self.amounts = Solver(replace(elastic(lp, self.sides), cost=self._cost()))

    def _cost(self) -> Floats:
        return np.concatenate([np.zeros(len(self.lp.columns)), -1 / self.sizes])

    def impossible(self, lifted: Iterable[Side] = ()) -> bool:
        """Whether the program has no solution once these sides are lifted."""
        gone = set(lifted)
        return self.finder.clash([side for side in self.sides if side not in gone])

    def next(self) -> Relaxation | None:
        """The next set; None when there is none, or none was found in time."""
        picked = self.fewest()
        if picked is None:
            return None
        sides, fewest = picked
        best = self.least(sides) if fewest else None
        amounts = self.amounts_of(best or sides)
        if amounts is None:
            return None
        self.found.append(frozenset(amounts))
        return Relaxation(amounts, self._size(amounts), fewest, best is not None)

    def more(self, count: int) -> bool | None:
        """Whether there are sets of this count besides those found; None if time ran out."""
        picked = self.fewest()
        if picked is None:
            return False
        sides, proven = picked
        return len(sides) <= count if proven or len(sides) <= count else None

    # ------------------------------------------------------------------------------ how many

    def fewest(self) -> tuple[frozenset[Side], bool] | None:
        """The fewest sides that make it possible, besides sets found, and whether that is proven."""
        end = time.monotonic() + self.seconds
        while time.monotonic() < end:
            picked, proven = self._hitting(end - time.monotonic())
            if picked is None:
                return None if proven else self._some_set()
            if not self._still_clashing(picked, end):
                return picked, proven
        return self._some_set()

    def _still_clashing(self, picked: frozenset[Side], end: float) -> bool:
        """Whether it clashes with these sides let go; the clashes that show it are kept."""
        left = [side for side in self.sides if side not in picked]
        clashes = self.finder.clash(left)
        for _ in range(CLASHES_AT_ONCE if clashes else 0):
            used = self.finder.used
            clash = self.finder.irreducible(used if self.finder.clash(used) else left)
            self.clashes.append(frozenset(clash))
            left = [side for side in left if side not in self.clashes[-1]]
            if time.monotonic() > end or not self.finder.clash(left):
                break
        return clashes

    def _hitting(self, seconds: float) -> tuple[frozenset[Side] | None, bool]:
        """The fewest sides with one of every known clash and no whole set found before; and whether proven."""
        rows = self._cover_rows(0)
        cost = -np.ones(len(self.sides))
        program = _program(cost, np.ones(len(self.sides)), rows)
        outcome = _solve_whole(program, np.arange(len(self.sides)), seconds)
        if outcome.solution is None:
            return None, outcome.status is Status.INFEASIBLE
        return self._picked(outcome.solution.x), True

    def _cover_rows(self, start: int) -> list[Row]:
        """One of every clash, not all of any set found; `start` is the column of the first side."""
        clashes = [Row({start + self.at[side]: 1.0 for side in clash}, 1.0, np.inf) for clash in self.clashes]
        found = [Row({start + self.at[side]: 1.0 for side in sides}, -np.inf, len(sides) - 1.0) for sides in self.found]
        return clashes + found

    def _picked(self, whole: Floats) -> frozenset[Side]:
        return frozenset(side for side, value in zip(self.sides, whole, strict=True) if value > 0.5)

    def _some_set(self) -> tuple[frozenset[Side], bool] | None:
        """A set of which none can be left out, from the least sum of amounts: when time is up."""
        if self.found:
            return None
        amounts = self.amounts_of(frozenset(self.sides))
        if amounts is None:
            return None
        kept = set(amounts)
        for side in sorted(amounts, key=lambda s: amounts[s] / self.sizes[self.at[s]]):
            if not self.impossible(kept - {side}):
                kept.discard(side)
        return frozenset(kept), False

    # ------------------------------------------------------------------------------ by how little

    def least(self, known: frozenset[Side]) -> frozenset[Side] | None:
        """Of all sets with as many sides as this one, the least in relative size; None if time ran out."""
        end = time.monotonic() + self.seconds
        amounts = self.amounts_of(known)
        most = self._size(amounts) if amounts else 1.0
        bound = min(most, 1.0)
        while (seconds := end - time.monotonic()) > 0:
            outcome = self._choose(len(known), bound, seconds)
            if outcome.solution is not None:
                sides = self._picked(outcome.solution.x[-len(self.sides) :])
                if self._still_clashing(sides, end):  # tolerance of the whole-number solver: now it knows
                    continue
                if -outcome.solution.objective <= bound * (1 + 1e-9) or bound >= most:
                    return sides
            elif outcome.status is not Status.INFEASIBLE or bound >= most:
                return None
            bound = min(most, 10 * bound)
        return None

    def _choose(self, count: int, bound: float, seconds: float) -> Outcome:
        """min Σ u over sets of this count, with u ≤ bound."""
        sides, width = len(self.sides), len(self.lp.columns)
        scale = self.amounts.scale
        base = replace(
            self.lp,
            row_low=self.lp.row_low * scale,
            row_high=self.lp.row_high * scale,
            low=self.lp.low * scale,
            high=self.lp.high * scale,
        )
        soft = elastic(base, self.sides)
        value = soft.value.copy()
        added = soft.index >= width
        value[added] *= (self.sizes * scale)[soft.index[added] - width]
        links = [Row({width + i: 1.0, width + sides + i: -bound}, -np.inf, 0.0) for i in range(sides)]
        counted = Row({width + sides + i: 1.0 for i in range(sides)}, -np.inf, float(count))
        program = _with_rows(
            replace(
                soft,
                value=value,
                columns=(*soft.columns, *(("relaxed", str(i)) for i in range(sides))),
                low=np.concatenate([soft.low, np.zeros(sides)]),
                high=np.concatenate([soft.high[:width], np.full(sides, bound), np.ones(sides)]),
                cost=np.concatenate([np.zeros(width), -np.ones(sides), np.zeros(sides)]),
            ),
            [*links, counted, *self._cover_rows(width + sides)],
        )
        return _solve_whole(program, np.arange(width + sides, width + 2 * sides), seconds)

    def amounts_of(self, sides: frozenset[Side], held: Mapping[Side, float] | None = None) -> dict[Side, float] | None:
        """The least relative amounts by which only these sides must give way; None when that is not enough."""
        first = len(self.lp.columns)
        for position, side in enumerate(self.sides):
            most = (held or {}).get(side, np.inf) if side in sides else 0.0
            self.amounts.set_column(first + position, 0.0, most)
        outcome = self.amounts.solve()
        if outcome.solution is None:
            return None
        values = outcome.solution.x[first:]
        return {
            side: float(value)
            for side, value, size in zip(self.sides, values, self.sizes, strict=True)
            if side in sides and value > SMALL * size
        }

    def _size(self, amounts: Mapping[Side, float]) -> float:
        return float(sum(amount / self.sizes[self.at[side]] for side, amount in amounts.items()))


@dataclass(frozen=True, slots=True)
class Row:
    """One row to add: column → coefficient, and its range."""

    terms: Mapping[int, float]
    low: float
    high: float


def _program(cost: Floats, high: Floats, rows: Sequence[Row]) -> LabelledLp:
    """max cost · x, 0 ≤ x ≤ high, with these rows."""
    none, empty = np.zeros(0), np.zeros(0, dtype=np.int32)
    columns = tuple(("relaxed", str(i)) for i in range(len(cost)))
    start = np.zeros(1, dtype=np.int32)
    bare = LabelledLp((), columns, start, empty, none, none, none, np.zeros(len(cost)), high, cost, 0.0, {}, {})
    return _with_rows(bare, rows)


def _with_rows(lp: LabelledLp, rows: Sequence[Row]) -> LabelledLp:
    """The program with rows added at the end."""
    lengths = [len(row.terms) for row in rows]
    index = [column for row in rows for column in row.terms]
    value = [coefficient for row in rows for coefficient in row.terms.values()]
    return replace(
        lp,
        rows=(*lp.rows, *(("added", str(i)) for i in range(len(rows)))),
        starts=np.concatenate([lp.starts, lp.starts[-1] + np.cumsum(lengths, dtype=np.int32)]).astype(np.int32),
        index=np.concatenate([lp.index, index]).astype(np.int32),
        value=np.concatenate([lp.value, value]),
        row_low=np.concatenate([lp.row_low, [row.low for row in rows]]),
        row_high=np.concatenate([lp.row_high, [row.high for row in rows]]),
    )


def _solve_whole(lp: LabelledLp, whole: np.ndarray, seconds: float) -> Outcome:  # type: ignore[type-arg]
    """Solve with these columns in whole numbers, to the proven optimum or the end of the time."""
    solver = Solver(lp, scaled=False)
    columns = whole.astype(np.int32)
    kinds = np.full(len(columns), int(highspy.HighsVarType.kInteger), dtype=np.uint8)
    solver.highs.changeColsIntegrality(len(columns), columns, kinds)
    options = {"solver": "choose", "mip_rel_gap": 0.0, "mip_abs_gap": 1e-9, "mip_feasibility_tolerance": 1e-9}
    for name, value in {**options, "time_limit": max(seconds, 0.01)}.items():
        solver.highs.setOptionValue(name, value)
    return solver.solve()


def relaxed(lp: LabelledLp, amounts: Mapping[Side, float]) -> LabelledLp:
    """The program with these sides looser by these amounts."""
    low, high = lp.row_low.copy(), lp.row_high.copy()
    for side, amount in amounts.items():
        if side.low:
            low[side.row] -= amount
        else:
            high[side.row] += amount
    return replace(lp, row_low=low, row_high=high)
