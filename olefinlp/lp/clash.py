"""The limits that make a month impossible: a set of which none can be left out.

Only limits that a person wrote may be dropped; balances and the range of variables stay. A dual
ray gives a first set that clashes; each member is then dropped in turn and kept out if the rest
still clashes (a deletion filter), so that what remains is irreducible.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from olefinlp.lp.compile import LabelledLp
from olefinlp.lp.solver import Outcome, Solver, Status


@dataclass(frozen=True, slots=True)
class Side:
    """One side of one row: its minimum (`low` true) or maximum."""

    row: int
    low: bool


def clashing_sides(lp: LabelledLp, outcome: Outcome) -> list[Side]:
    """An irreducible set of clashing sides of limit rows; empty when balances alone clash."""
    sides = [
        Side(row, low)
        for row, label in enumerate(lp.rows)
        if label[0].endswith("_limit")
        for low in (True, False)
        if np.isfinite(lp.row_low[row] if low else lp.row_high[row])
    ]
    solver = Solver(_without_prices(lp))
    first = _from_ray(sides, outcome)
    if first and _infeasible(solver, lp, sides, keep=first):
        return _filtered(solver, lp, sides, first)
    if not _infeasible(solver, lp, sides, keep=sides):
        return []
    return _filtered(solver, lp, sides, sides)


def _without_prices(lp: LabelledLp) -> LabelledLp:
    from dataclasses import replace

    return replace(lp, cost=np.zeros_like(lp.cost), offset=0.0)


def _from_ray(sides: list[Side], outcome: Outcome) -> list[Side]:
    """Sides that carry weight in the proof of infeasibility; both sides of such a row are tried."""
    if outcome.ray is None:
        return []
    weight = np.abs(outcome.ray)
    least = 1e-9 * float(weight.max(initial=0.0))
    return [side for side in sides if weight[side.row] > least]


def _infeasible(solver: Solver, lp: LabelledLp, sides: list[Side], keep: list[Side]) -> bool:
    """Whether the rows with only these sides still clash."""
    kept = {(side.row, side.low) for side in keep}
    for row in {side.row for side in sides}:
        low = lp.row_low[row] if (row, True) in kept else -np.inf
        high = lp.row_high[row] if (row, False) in kept else np.inf
        solver.set_row(row, low, high)
    return solver.solve().status is Status.INFEASIBLE


def _filtered(solver: Solver, lp: LabelledLp, sides: list[Side], start: list[Side]) -> list[Side]:
    """Drop in halves while the rest still clashes, then one by one."""
    kept = list(start)
    step = max(1, len(kept) // 2)
    while True:
        position = 0
        while position < len(kept):
            trial = kept[:position] + kept[position + step :]
            if _infeasible(solver, lp, sides, trial):
                kept = trial
            else:
                position += step
        if step == 1:
            return kept
        step = max(1, step // 2)
