"""The limits that make a month impossible: sets of which none can be left out.

Only limits that a person wrote may be dropped; balances and the range of variables stay. Whether
limits clash is asked of an elastic copy of the program, in which every limit may be broken at a
price and the price is kept as low as possible: it always has an optimum, so the answer does not
hang on how a solver words an impossible one. A set is made irreducible by dropping its members in
turn and keeping out those without which the rest still clashes (a deletion filter; Chinneck,
Feasibility and Infeasibility in Optimization, Springer 2008, from memory).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from olefinlp.lp.compile import Floats, Integers, LabelledLp
from olefinlp.lp.solver import Solver, Status

MOST_SETS = 5
BROKEN = 1e-7
"""A sum of relative violations above this is a clash."""


@dataclass(frozen=True, slots=True)
class Side:
    """One side of one row: its minimum (`low` true) or maximum."""

    row: int
    low: bool


def limit_sides(lp: LabelledLp) -> list[Side]:
    """Every written minimum and maximum."""
    return [
        Side(row, low)
        for row, label in enumerate(lp.rows)
        if label[0].endswith("_limit")
        for low in (True, False)
        if np.isfinite(lp.row_low[row] if low else lp.row_high[row])
    ]


def elastic(lp: LabelledLp, sides: list[Side]) -> LabelledLp:
    """max −Σ violation / size, each side of a limit with a violation of its own (≥ 0)."""
    count = len(sides)
    row_of = np.array([side.row for side in sides], dtype=np.int32)
    sign = np.array([1.0 if side.low else -1.0 for side in sides])
    rows = np.repeat(np.arange(len(lp.rows), dtype=np.int32), np.diff(lp.starts))
    all_rows = np.concatenate([rows, row_of])
    index = np.concatenate([lp.index, len(lp.columns) + np.arange(count, dtype=np.int32)])
    value = np.concatenate([lp.value, sign])
    order = np.argsort(all_rows, kind="stable")
    starts: Integers = np.concatenate([[0], np.cumsum(np.bincount(all_rows, minlength=len(lp.rows)))]).astype(np.int32)
    names = [("violation", *lp.rows[side.row], "low" if side.low else "high") for side in sides]
    columns = (*lp.columns, *names)
    return replace(
        lp,
        columns=columns,
        starts=starts,
        index=index[order].astype(np.int32),
        value=value[order],
        low=np.concatenate([lp.low, np.zeros(count)]),
        high=np.concatenate([lp.high, np.full(count, np.inf)]),
        cost=np.concatenate([np.zeros(len(lp.columns)), -1 / side_sizes(lp, sides)]),
        offset=0.0,
        column_at={label: j for j, label in enumerate(columns)},
    )


def side_sizes(lp: LabelledLp, sides: list[Side]) -> Floats:
    """Size of each limit; a limit of size zero has the size of the smallest other one."""
    sizes = np.array([abs(lp.row_low[s.row] if s.low else lp.row_high[s.row]) for s in sides])
    positive = sizes[sizes > 0]
    return np.where(sizes > 0, sizes, positive.min() if len(positive) else 1.0)


class ClashFinder:
    """Asks an elastic copy which limits clash."""

    def __init__(self, lp: LabelledLp) -> None:
        self.lp = lp
        self.sides = limit_sides(lp)
        self.elastic = elastic(lp, self.sides)
        self.solver = Solver(self.elastic)
        self.used: list[Side] = []

    def clash(self, keep: list[Side]) -> bool:
        """Whether these sides alone clash; the sides that carry weight in the proof are kept in `used`."""
        kept = {(side.row, side.low) for side in keep}
        for row in {side.row for side in self.sides}:
            low = self.lp.row_low[row] if (row, True) in kept else -np.inf
            high = self.lp.row_high[row] if (row, False) in kept else np.inf
            self.solver.set_row(row, low, high)
        outcome = self.solver.solve()
        if outcome.status is not Status.OPTIMAL or outcome.solution is None:
            self.used = list(keep)
            return True
        weight = outcome.solution.row_dual
        self.used = [side for side in keep if (weight[side.row] < -1e-9 if side.low else weight[side.row] > 1e-9)]
        return outcome.solution.objective < -BROKEN

    def irreducible(self, start: list[Side]) -> list[Side]:
        """Drop in halves while the rest still clashes, then one by one."""
        kept = list(start)
        step = max(1, len(kept) // 2)
        while True:
            position = 0
            while position < len(kept):
                trial = kept[:position] + kept[position + step :]
                if self.clash(trial):
                    kept = [side for side in trial if side in self.used]
                else:
                    position += step
            if step == 1:
                return kept
            step = max(1, min(step, len(kept)) // 2)


def clashes(lp: LabelledLp) -> bool:
    """Whether the limits of a program clash at all."""
    finder = ClashFinder(lp)
    return finder.clash(finder.sides)


def clashing_sets(lp: LabelledLp) -> list[list[Side]] | None:
    """Irreducible sets of clashing sides of limit rows, none sharing a side with another.

    Leaving out all sides of all sets makes a plan possible, unless there are more than `MOST_SETS`.
    Leaving out one side of each may not: what is left of a set may clash with limits that stand in
    none, so not every member helps alone. The list is empty when balances alone clash; None when nothing clashes at all,
    which means that a verdict of no plan was wrong.
    """
    finder = ClashFinder(lp)
    left = finder.sides
    if not finder.clash(left):
        return None
    if finder.clash([]):
        return []
    found: list[list[Side]] = []
    while len(found) < MOST_SETS and finder.clash(left):
        start = finder.used if finder.clash(finder.used) else left
        found.append(finder.irreducible(start))
        taken = set(found[-1])
        left = [side for side in left if side not in taken]
    return found
