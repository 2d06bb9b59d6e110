"""Exact steps of a best margin that depends on one number: no grid, no step size.

The best margin is piecewise linear: concave in a limit, convex in a price. Two solves at the ends
give two tangents; where they meet lies a breakpoint or a point between two; a solve there decides.
A curve of n steps takes 2n + 1 solves at most.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable
from dataclasses import dataclass, replace

SAME = 1e-9


@dataclass(frozen=True, slots=True)
class Point:
    """The best margin at one number, and its slope there (either slope, at a breakpoint)."""

    at: float
    value: float
    slope: float


@dataclass(frozen=True, slots=True)
class Step:
    """A stretch on which the slope stays."""

    low: float
    high: float
    slope: float
    value_low: float
    value_high: float


@dataclass(frozen=True, slots=True)
class Side:
    """One side of a base point: the slope there, how far it holds, and the slope after that.

    `until` is None when nothing was allowed on this side, `next_slope` when the slope holds as far
    as was looked.
    """

    slope: float | None
    until: float | None
    next_slope: float | None


Evaluate = Callable[[float], Point | None]


def trace(evaluate: Evaluate, low: float, high: float, size: float) -> list[Step]:
    """All steps between two numbers; both ends must have an optimum.

    `size` is the money that moves, to which equality of margins is relative. Raises `ValueError`
    when an end has none.
    """
    first, last = evaluate(low), evaluate(high)
    if first is None or last is None:
        raise ValueError("an end of the range has no plan")
    points = [first, *_between(evaluate, first, last, size), last]
    return _steps(points, size)


def _between(evaluate: Evaluate, a: Point, b: Point, size: float) -> list[Point]:
    """Points at which the slope changes, between two points, in order."""
    if _on_line(a, b, size) or a.slope == b.slope:
        return []
    at = _meeting(a, b)
    if not a.at < at < b.at:
        return []
    middle = evaluate(at)
    if middle is None:
        raise ValueError(f"no plan at {at:g} between two plans")
    expected = a.value + a.slope * (at - a.at)
    if abs(middle.value - expected) <= SAME * size:
        return [Point(at, middle.value, b.slope)]
    return [*_between(evaluate, a, middle, size), middle, *_between(evaluate, middle, b, size)]


def _on_line(a: Point, b: Point, size: float) -> bool:
    """Whether one of two tangents passes through the other point: the stretch is straight."""
    gap_a = abs(a.value + a.slope * (b.at - a.at) - b.value)
    gap_b = abs(b.value + b.slope * (a.at - b.at) - a.value)
    return min(gap_a, gap_b) <= SAME * size


def _meeting(a: Point, b: Point) -> float:
    """Where two tangents meet."""
    return (b.value - a.value + a.slope * a.at - b.slope * b.at) / (a.slope - b.slope)


def _steps(points: list[Point], size: float) -> list[Step]:
    """Stretches between points by their chords, equal neighbours joined."""
    steps: list[Step] = []
    for a, b in itertools.pairwise(points):
        if b.at - a.at <= 0:
            continue
        slope = (b.value - a.value) / (b.at - a.at)
        if steps and abs(steps[-1].slope - slope) * (b.at - steps[-1].low) <= 4 * SAME * size:
            joined = steps.pop()
            slope = (b.value - joined.value_low) / (b.at - joined.low)
            steps.append(Step(joined.low, b.at, slope, joined.value_low, b.value))
        else:
            steps.append(Step(a.at, b.at, slope, a.value, b.value))
    return steps


def side(evaluate: Evaluate, base: Point, reach: float, size: float) -> Side:
    """What happens from a base point towards `base.at + reach` (negative: downwards).

    The slope is found from neighbours, not from the base's own dual, so that it holds whatever
    basis the base happens to have.
    """
    far = _reachable(evaluate, base, reach)
    if far is None:
        return Side(None, None, None)
    beyond: Point | None = None
    for _ in range(80):
        slope = _straight(base, far, size)
        if slope is not None:
            if beyond is None:
                return Side(slope, far.at, None)
            base, far, beyond = replace(base, slope=slope), beyond, None  # the slope is known: find its end
            continue
        at = _meeting(base, far) if base.slope != far.slope else base.at
        if abs(at - base.at) <= 1e-9 * abs(far.at - base.at) or not min(base.at, far.at) < at < max(base.at, far.at):
            at = base.at + (far.at - base.at) / 16  # rounding has put the meeting outside
        middle = evaluate(at)
        if middle is None:
            return Side(None, None, None)
        if abs(base.value + base.slope * (at - base.at) - middle.value) <= SAME * size:
            return Side(base.slope, at, far.slope)
        beyond, far = far, middle
    return Side((far.value - base.value) / (far.at - base.at), far.at, beyond.slope if beyond else None)


def _straight(base: Point, far: Point, size: float) -> float | None:
    """The slope between two points, if one of their tangents passes through the other; None if it changes.

    The far one may be the last that is possible, where a tangent may be as steep as it likes.
    """
    for slope in (far.slope, base.slope):
        if abs(base.value + slope * (far.at - base.at) - far.value) <= SAME * size:
            return slope
    return None


def _reachable(evaluate: Evaluate, base: Point, reach: float) -> Point | None:
    """The farthest of a few points on this side that has a plan."""
    if reach == 0:
        return None
    for _ in range(12):
        far = evaluate(base.at + reach)
        if far is not None:
            return far
        reach /= 4
    return None
