"""Proof that a solution is an optimum, worked out from the arrays alone, outside the solver.

Each residual is relative to the size of its own row or column, so that a plant of 0.02 kt is held
as tightly as one of 200 kt. A failed certificate is an error, never a plan.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from olefinlp.lp.compile import Floats, LabelledLp
from olefinlp.lp.solver import Solution

TOLERANCE = 1e-6
FLOOR = 1e-5
"""Where nothing moves, a residual is compared with this share of the largest that moves elsewhere."""
TINY = 1e-300
ROUNDING = 1e-12
"""Share of a sum's terms within which it is what rounding leaves of nothing."""
Bounds = Mapping[int, tuple[float, float]]


class CertificateError(Exception):
    """A solution that is not proven to be an optimum."""


@dataclass(frozen=True)
class Certificate:
    """Largest relative residuals; `gap` is primal less dual margin over the money that moves."""

    primal: float
    dual: float
    complementarity: float
    gap: float
    dual_objective: float
    worst: str
    tolerance: float = TOLERANCE

    @property
    def holds(self) -> bool:
        """Whether every residual is within the tolerance; one that is not a number is not."""
        return all(r <= self.tolerance for r in (self.primal, self.dual, self.complementarity, self.gap))


@dataclass(frozen=True, slots=True)
class Terms:
    """Prices and limits of a program, limits of rows first and then of columns.

    Programs that share a matrix differ in nothing else.
    """

    cost: Floats
    low: Floats
    high: Floats

    def with_(self, cost: Floats | None, rows: Bounds, columns: Bounds, first_column: int) -> Terms:
        """The terms with other prices, and other limits of some rows and columns."""
        cost = self.cost if cost is None else cost
        if not rows and not columns:
            return Terms(cost, self.low, self.high)
        low, high = self.low.copy(), self.high.copy()
        for row, pair in rows.items():
            low[row], high[row] = pair
        for column, pair in columns.items():
            low[first_column + column], high[first_column + column] = pair
        return Terms(cost, low, high)


def terms_of(lp: LabelledLp) -> Terms:
    """The terms that a program is written with."""
    return Terms(lp.cost, np.concatenate((lp.row_low, lp.low)), np.concatenate((lp.row_high, lp.high)))


@dataclass(frozen=True, slots=True)
class Solved:
    """Values and duals that are said to be the optimum of a program with these terms."""

    terms: Terms
    x: Floats
    y: Floats


def certify(lp: LabelledLp, solution: Solution) -> Certificate:
    """The certificate of a solution; it may hold or not.

    primal: how far a row or bound is broken, over Σ|a x| + |limit| of that row;
    dual: how far a reduced cost (worked out again as c − Aᵀy) has the wrong sign, over |c| + Σ|a y|,
    and how much money a row's dual of the wrong sign stands for, over the money that moves, Σ|c x|;
    complementarity: |dual × slack| over the money that moves, Σ|c x|;
    gap: margin less Σ dual × limit, over the same.
    """
    return certificates(lp, [Solved(terms_of(lp), solution.x, solution.row_dual)])[0]


def certificates(lp: LabelledLp, solved: Sequence[Solved]) -> list[Certificate]:
    """A certificate for each of some programs that share the matrix of `lp`; worked out together, which is quicker.

    Arrays have a line for each program, and in it the rows and then the columns of the program.
    """
    rows = len(lp.rows)
    cost, low, high = (np.array([getattr(s.terms, name) for s in solved]) for name in ("cost", "low", "high"))
    x, y = np.array([s.x for s in solved]), np.array([s.y for s in solved])
    activity, row_sizes = lp.by_row.sums_and_sizes(x)
    gathered, dual_sizes = lp.by_column.sums_and_sizes(y)
    value = np.concatenate((activity, x), axis=1)
    dual = np.concatenate((y, cost - gathered), axis=1)
    dual_sizes += np.abs(cost)
    open_low, open_high = np.isinf(low), np.isinf(high)
    money = _money(cost, x, lp.offset)

    sizes = np.concatenate((_at_least(row_sizes), _at_least(np.abs(x))), axis=1)
    written = np.where(open_low, 0.0, np.abs(low)) + np.where(open_high, 0.0, np.abs(high))
    moved = np.concatenate((row_sizes, np.abs(x)), axis=1)
    broken = np.maximum(np.maximum(low - value, value - high), 0.0) / np.maximum(moved + written, sizes)

    wrong = np.maximum(dual * open_high, -dual * open_low)
    wrong[:, :rows] *= sizes[:, :rows] / money
    wrong[:, rows:] /= _at_least(dual_sizes)

    dual[:, rows:][np.abs(dual[:, rows:]) <= ROUNDING * dual_sizes] = 0.0
    limit = np.where(dual > 0, high, low)  # the one that a dual's sign points at (maximising)
    usable = (dual != 0) & np.isfinite(limit)
    limit = np.where(usable, limit, 0.0)
    slack = (limit - value) * usable
    dual_objective = (dual * limit).sum(axis=1) + lp.offset
    margin = (cost * x).sum(axis=1) + lp.offset

    primal_at, dual_at = broken.argmax(axis=1), wrong.argmax(axis=1)
    cases = np.arange(len(solved))
    primal, wrong_most = broken[cases, primal_at], wrong[cases, dual_at]
    complementarity = np.abs(dual * slack).max(axis=1) / money[:, 0]
    gap = np.abs(margin - dual_objective) / money[:, 0]
    worst = np.where(primal >= wrong_most, primal_at, dual_at)
    numbers = [array.tolist() for array in (primal, wrong_most, complementarity, gap, dual_objective, worst)]
    return [Certificate(p, d, c, g, z, _name(lp, at)) for p, d, c, g, z, at in zip(*numbers, strict=True)]


def prove(lp: LabelledLp, solution: Solution) -> Certificate:
    """The certificate of a solution.

    Raises `CertificateError` when the solution is not a proven optimum.
    """
    return proven(certify(lp, solution))


def proven(certificate: Certificate) -> Certificate:
    """The certificate itself; raises `CertificateError` unless it holds."""
    if not certificate.holds:
        raise CertificateError(
            "the solver's answer is not a proven optimum: "
            f"primal {certificate.primal:.1e}, dual {certificate.dual:.1e}, "
            f"complementarity {certificate.complementarity:.1e}, gap {certificate.gap:.1e} "
            f"(allowed {certificate.tolerance:.0e}); worst at {certificate.worst}"
        )
    return certificate


def _money(cost: Floats, x: Floats, offset: float) -> Floats:
    """The money that moves, Σ|c x|; where next to none does, a small share of what could."""
    prices, size = np.abs(cost), np.abs(x)
    could = prices.max(axis=1, initial=0.0, keepdims=True) * size.max(axis=1, initial=0.0, keepdims=True)
    moves = (prices * size).sum(axis=1, keepdims=True) + abs(offset)
    money: Floats = np.maximum(np.maximum(moves, FLOOR * could), TINY)
    return money


def _at_least(sizes: Floats) -> Floats:
    """Sizes with a floor: what does not move is compared with what moves elsewhere."""
    floor = np.maximum(FLOOR * sizes.max(axis=1, initial=0.0, keepdims=True), TINY)
    floored: Floats = np.maximum(sizes, floor)
    return floored


def _name(lp: LabelledLp, place: int) -> str:
    """A row, or past the rows a column, in words."""
    rows = len(lp.rows)
    return ".".join(lp.rows[place] if place < rows else lp.columns[place - rows])
