"""Proof that a solution is an optimum, worked out from the arrays alone, outside the solver.

Each residual is relative to the size of its own row or column, so that a plant of 0.02 kt is held
as tightly as one of 200 kt. A failed certificate is an error, never a plan.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from olefinlp.lp.compile import Floats, LabelledLp
from olefinlp.lp.solver import Solution

TOLERANCE = 1e-6
FLOOR = 1e-5
"""Where nothing moves, a residual is compared with this share of the largest that moves elsewhere."""


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
        """Whether every residual is within the tolerance."""
        return max(self.primal, self.dual, self.complementarity, self.gap) <= self.tolerance


def certify(lp: LabelledLp, solution: Solution) -> Certificate:
    """The certificate of a solution; it may hold or not.

    primal: how far a row or bound is broken, over Σ|a x| + |limit| of that row;
    dual: how far a reduced cost (worked out again as c − Aᵀy) has the wrong sign, over |c| + Σ|a y|,
    and how much money a row's dual of the wrong sign stands for, over the money that moves, Σ|c x|;
    complementarity: |dual × slack| over the money that moves, Σ|c x|;
    gap: margin less Σ dual × limit, over the same.
    """
    x, y = solution.x, solution.row_dual
    activity = lp.activity(x)
    reduced = lp.cost - lp.gathered(y)
    primal, worst_row = _primal(lp, x, activity)
    dual, worst_column = _dual(lp, x, y, reduced)
    money = _money(lp, x)
    row_limit, row_slack = _active(y, lp.row_low, lp.row_high, activity)
    column_limit, column_slack = _active(_kept(lp, reduced, y), lp.low, lp.high, x)
    kept = _kept(lp, reduced, y)
    complementarity = max(_largest(np.abs(y * row_slack)), _largest(np.abs(kept * column_slack))) / money
    dual_objective = float(y @ row_limit + kept @ column_limit) + lp.offset
    margin = float(lp.cost @ x) + lp.offset
    gap = abs(margin - dual_objective) / money
    worst = worst_row if primal >= dual else worst_column
    return Certificate(primal, dual, complementarity, gap, dual_objective, worst)


def prove(lp: LabelledLp, solution: Solution) -> Certificate:
    """The certificate of a solution.

    Raises `CertificateError` when the solution is not a proven optimum.
    """
    certificate = certify(lp, solution)
    if not certificate.holds:
        raise CertificateError(
            "the solver's answer is not a proven optimum: "
            f"primal {certificate.primal:.1e}, dual {certificate.dual:.1e}, "
            f"complementarity {certificate.complementarity:.1e}, gap {certificate.gap:.1e} "
            f"(allowed {certificate.tolerance:.0e}); worst at {certificate.worst}"
        )
    return certificate


def _primal(lp: LabelledLp, x: Floats, activity: Floats) -> tuple[float, str]:
    row_size = lp.sizes(x) + _finite_size(lp.row_low) + _finite_size(lp.row_high)
    rows = _violation(activity, lp.row_low, lp.row_high) / _at_least(row_size, lp.sizes(x))
    column_size = np.abs(x) + _finite_size(lp.low) + _finite_size(lp.high)
    columns = _violation(x, lp.low, lp.high) / _at_least(column_size, np.abs(x))
    worst = max((rows, lp.rows), (columns, lp.columns), key=lambda pair: _largest(pair[0]))
    return _largest(worst[0]), _name(worst[1], worst[0])


def _dual(lp: LabelledLp, x: Floats, y: Floats, reduced: Floats) -> tuple[float, str]:
    size = _dual_size(lp, y)
    wrong = np.where(np.isinf(lp.high), np.maximum(reduced, 0), 0) + np.where(np.isinf(lp.low), np.maximum(-reduced, 0), 0)
    columns = wrong / _at_least(size, size)
    wrong_rows = np.where(np.isinf(lp.row_high), np.maximum(y, 0), 0) + np.where(np.isinf(lp.row_low), np.maximum(-y, 0), 0)
    sizes = lp.sizes(x)
    rows = wrong_rows * _at_least(sizes, sizes) / _money(lp, x)
    worst = max((columns, lp.columns), (rows, lp.rows), key=lambda pair: _largest(pair[0]))
    return _largest(worst[0]), _name(worst[1], worst[0])


def _money(lp: LabelledLp, x: Floats) -> float:
    """The money that moves, Σ|c x|; where next to none does, a small share of what could."""
    size = np.abs(x)
    could = float(np.abs(lp.cost).max(initial=0.0)) * float(size.max(initial=0.0))
    return max(float(np.abs(lp.cost) @ size) + abs(lp.offset), FLOOR * could, 1e-300)


def _dual_size(lp: LabelledLp, y: Floats) -> Floats:
    work = np.abs(lp.value * np.repeat(y, np.diff(lp.starts)))
    return np.abs(lp.cost) + np.bincount(lp.index, weights=work, minlength=len(lp.columns))


def _kept(lp: LabelledLp, reduced: Floats, y: Floats) -> Floats:
    """Reduced costs without the rounding left of sums that cancel."""
    return np.where(np.abs(reduced) <= 1e-12 * _dual_size(lp, y), 0.0, reduced)


def _active(dual: Floats, low: Floats, high: Floats, value: Floats) -> tuple[Floats, Floats]:
    """The limit that a dual's sign points at (maximising), and the slack to it; 0 where there is none."""
    limit = np.where(dual > 0, high, low)
    usable = (dual != 0) & np.isfinite(limit)
    return np.where(usable, limit, 0.0), np.where(usable, limit - value, 0.0)


def _violation(value: Floats, low: Floats, high: Floats) -> Floats:
    return np.maximum(np.maximum(low - value, value - high), 0.0)


def _finite_size(bound: Floats) -> Floats:
    return np.where(np.isfinite(bound), np.abs(bound), 0.0)


def _at_least(size: Floats, all_sizes: Floats) -> Floats:
    """Sizes with a floor: a row in which nothing moves is compared with what moves elsewhere."""
    floor = FLOOR * float(np.max(all_sizes, initial=0.0))
    return np.maximum(size, max(floor, 1e-300))


def _largest(values: Floats) -> float:
    return float(np.max(values, initial=0.0))


def _name(labels: tuple[tuple[str, ...], ...], values: Floats) -> str:
    return ".".join(labels[int(np.argmax(values))]) if len(values) else ""
