"""Steps of piecewise linear functions given exactly, as the least (concave) or greatest (convex) of lines.

Lines have whole-number slopes and offsets in thirds, so that every breakpoint is known to rounding of a division. At a
breakpoint the slope handed out is either side's or anything between: an optimum may end with any of them.
"""

from __future__ import annotations

import functools
import itertools
import random
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from fractions import Fraction

import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from olefinlp.lp.steps import Point, Side, Step, side, trace

LOW, HIGH = -8, 8
Line = tuple[int, Fraction]
LINES = st.lists(
    st.tuples(st.integers(-30, 30), st.integers(-60, 60).map(lambda n: Fraction(n, 3))), min_size=1, max_size=9, unique=True
)


@dataclass
class Exact:
    """The least (or greatest) of some lines between two ends, with a count of how often it was asked.

    `choose` picks the slope at a breakpoint from those of the lines that meet there. Beyond an end there is nothing, so that
    there any steeper slope is a tangent too: `steep` is how much steeper the one handed out is (concave functions only).
    """

    lines: Sequence[Line]
    greatest: bool = False
    low: Fraction = Fraction(LOW)
    high: Fraction = Fraction(HIGH)
    choose: Callable[[list[int]], float] = min
    steep: float = 0.0
    asked: list[float] = field(default_factory=list)

    def value(self, at: Fraction) -> Fraction:
        return (max if self.greatest else min)(slope * at + offset for slope, offset in self.lines)

    def slopes(self, at: Fraction) -> list[int]:
        """Slopes of all lines that are the function here."""
        best = self.value(at)
        return sorted({slope for slope, offset in self.lines if slope * at + offset == best})

    @functools.cached_property
    def breakpoints(self) -> list[Fraction]:
        """Where the slope changes, between the ends."""
        crossings = {Fraction(b[1] - a[1]) / (a[0] - b[0]) for a, b in itertools.combinations(self.lines, 2) if a[0] != b[0]}
        return sorted(x for x in crossings if self.low < x < self.high and len(self.slopes(x)) > 1)

    def steps(self) -> list[tuple[Fraction, Fraction, int]]:
        """(from, to, slope) of every stretch."""
        ends = [self.low, *self.breakpoints, self.high]
        return [(a, b, self.slopes((a + b) / 2)[0]) for a, b in itertools.pairwise(ends)]

    def __call__(self, at: float) -> Point | None:
        self.asked.append(at)
        near = [x for x in (*self.breakpoints, self.low, self.high) if abs(float(x) - at) <= 1e-12]
        exact = near[0] if near else Fraction(at)  # a breakpoint in thirds is no floating-point number
        if not self.low <= exact <= self.high:
            return None
        beyond = self.steep * ((exact == self.low) - (exact == self.high))
        return Point(at, float(self.value(exact)), self.choose(self.slopes(exact)) + beyond)


def between(seed: int) -> Callable[[list[int]], float]:
    """Any slope between the two sides, at random but the same in every run."""
    dice = random.Random(seed)
    return lambda slopes: slopes[0] + (slopes[-1] - slopes[0]) * dice.choice((0.0, 0.25, 0.5, 1.0))


def size_of(exact: Exact) -> float:
    """The money that moves, as the answers count it: never below what the function itself comes to."""
    return max(1.0, *(abs(float(exact.value(x))) for x in (exact.low, exact.high, *exact.breakpoints)))


def same_steps(found: list[Step], exact: Exact) -> None:
    expected = exact.steps()
    assert [step.slope for step in found] == pytest.approx([slope for _, _, slope in expected], rel=1e-6, abs=1e-6)
    for step, (low, high, _) in zip(found, expected, strict=True):
        assert (step.low, step.high) == pytest.approx((float(low), float(high)), abs=1e-7)
        assert step.value_low == pytest.approx(float(exact.value(low)), abs=1e-6)
        assert step.value_high == pytest.approx(float(exact.value(high)), abs=1e-6)


@settings(max_examples=100)
@given(LINES, st.booleans(), st.integers(0, 9))
def test_trace_finds_every_step_in_two_n_plus_one_evaluations(lines: list[Line], greatest: bool, seed: int) -> None:
    exact = Exact(lines, greatest, choose=between(seed))
    found = trace(exact, LOW, HIGH, size_of(exact))
    same_steps(found, exact)
    assert len(exact.asked) <= 2 * len(found) + 1


@settings(max_examples=100)
@given(LINES, st.booleans(), st.sampled_from([min, max]))
def test_trace_from_a_breakpoint_to_another(lines: list[Line], greatest: bool, choose: Callable[[list[int]], float]) -> None:
    """Both ends stand where the slope changes and hand out the slope of one side, which may be the wrong one."""
    whole = Exact(lines, greatest)
    corners = whole.breakpoints
    if len(corners) < 2:
        return
    exact = Exact(lines, greatest, corners[0], corners[-1], choose)
    found = trace(exact, float(exact.low), float(exact.high), size_of(exact))
    same_steps(found, exact)
    assert len(exact.asked) <= 2 * len(found) + 1


@settings(max_examples=100)
@given(LINES, st.sampled_from([1.0, 50.0, 1e4]), st.integers(0, 9))
def test_trace_between_the_ends_of_what_is_possible(lines: list[Line], steep: float, seed: int) -> None:
    """At either end the tangent is steeper than any piece: its meetings with others lie on no breakpoint."""
    exact = Exact(lines, choose=between(seed), steep=steep)
    found = trace(exact, LOW, HIGH, size_of(exact))
    same_steps(found, exact)
    assert len(exact.asked) <= 2 * len(found) + 1


def test_counts_by_hand() -> None:
    """One line takes its two ends; min(x, 1) their meeting as well; three pieces the middle one and its two ends."""
    for lines, count in (([(1, 0)], 2), ([(1, 0), (0, 1)], 3), ([(4, 0), (1, 3), (0, 5)], 5)):
        exact = Exact([(slope, Fraction(offset)) for slope, offset in lines])
        assert len(trace(exact, LOW, HIGH, 10.0)) == len(lines)
        assert len(exact.asked) == count


def test_trace_needs_a_plan_at_both_ends() -> None:
    exact = Exact([(1, Fraction(0))], low=Fraction(-1))
    with pytest.raises(ValueError, match="an end of the range has no plan"):
        trace(exact, LOW, HIGH, 1.0)


def test_trace_says_so_when_a_middle_has_no_plan() -> None:
    """A set of plans has no holes: one that shows a hole is a fault of whoever answers, not a curve."""
    exact = Exact([(4, Fraction(0)), (1, Fraction(3)), (0, Fraction(5))])
    with pytest.raises(ValueError, match="no plan at"):
        trace(lambda at: exact(at) if abs(at) == 8 else None, LOW, HIGH, 10.0)


def test_equal_slopes_a_rounding_apart_do_not_divide_by_zero() -> None:
    """Two parallel tangents that miss each other by more than equality allows are no curve of one shape: a straight step."""
    found = trace(lambda at: Point(at, 3 * at + (1e-6 if at > 0 else 0.0), 3.0), LOW, HIGH, 1.0)
    assert [step.slope for step in found] == pytest.approx([3], abs=1e-6)


# ---------------------------------------------------------------------------------- one side of a base


def expected_side(exact: Exact, base: Fraction, reach: Fraction) -> Side:
    """What lies on one side: slope, end, next slope, of the function itself."""
    end = min(exact.high, base + reach) if reach > 0 else max(exact.low, base + reach)
    inside = [x for x in exact.breakpoints if min(base, end) < x < max(base, end)]
    order = sorted(inside, reverse=reach < 0)
    until = order[0] if order else end
    slope = exact.slopes((base + until) / 2)[0]
    after = exact.slopes((until + (order[1] if len(order) > 1 else end)) / 2)[0] if order else None
    return Side(float(slope), float(until), None if after is None else float(after))


def same_side(found: Side, expected: Side) -> None:
    assert found.slope == pytest.approx(expected.slope, abs=1e-6)
    assert found.until == pytest.approx(expected.until, abs=1e-7)
    if expected.next_slope is None:
        assert found.next_slope is None
    else:
        assert found.next_slope == pytest.approx(expected.next_slope, abs=1e-6)


@settings(max_examples=100)
@given(LINES, st.booleans(), st.integers(-15, 15), st.sampled_from([-1, 1]), st.integers(0, 9))
@example([(0, Fraction(0)), (-3, Fraction(2))], False, 0, 1, 3)
def test_one_side(lines: list[Line], greatest: bool, at: int, sign: int, seed: int) -> None:
    """From halves between the ends, which may be breakpoints; the base hands out any slope that it may have."""
    base = Fraction(at, 2)
    exact = Exact(lines, greatest, choose=between(seed))
    start = exact(float(base))
    reach = sign * min(Fraction(4), HIGH - abs(base))
    assert start is not None
    found = side(exact, start, float(reach), size_of(exact))
    same_side(found, expected_side(exact, base, reach))
    assert len(exact.asked) <= 12 + 2 * len(exact.breakpoints)


@settings(max_examples=100)
@given(LINES, st.booleans(), st.sampled_from([-1, 1]), st.sampled_from([min, max]))
def test_one_side_of_a_breakpoint(lines: list[Line], greatest: bool, sign: int, choose: Callable[[list[int]], float]) -> None:
    """A degenerate base: its own slope may be that of the other side, so neighbours decide."""
    for base in Exact(lines, greatest).breakpoints:
        exact = Exact(lines, greatest, choose=choose)
        start = exact(float(base))
        reach = sign * (min(Fraction(4), HIGH - abs(base)))
        assert start is not None
        same_side(side(exact, start, float(reach), size_of(exact)), expected_side(exact, base, reach))


@settings(max_examples=100)
@given(LINES, st.integers(-6, 6), st.sampled_from([-1, 1]), st.sampled_from([1.0, 50.0, 1e4]), st.integers(0, 9))
def test_one_side_up_to_the_end_of_what_is_possible(lines: list[Line], at: int, sign: int, steep: float, seed: int) -> None:
    """The farthest point looked at is the last that is possible, with a tangent steeper than what leads to it."""
    exact = Exact(lines, choose=between(seed), steep=steep)
    start, reach = exact(float(at)), Fraction(sign * HIGH - at)
    assert start is not None
    same_side(side(exact, start, float(reach), size_of(exact)), expected_side(exact, Fraction(at), reach))


def test_a_short_step_beside_the_base_is_not_missed() -> None:
    """The slope is 9 for a ten-thousandth of the way and 2 after that; the base hands out the 40 of its other side."""
    exact = Exact([(40, Fraction(0)), (9, Fraction(0)), (2, Fraction(7, 1000))], choose=max)
    start = exact(0.0)
    assert start is not None
    assert start.slope == 40
    same_side(side(exact, start, 8.0, 20.0), Side(9.0, 0.001, 2.0))
    same_side(side(exact, start, -8.0, 400.0), Side(40.0, -8.0, None))


def test_beyond_an_edge_there_is_nothing() -> None:
    """Plans end at 1: what holds up to some point before that is told; on the other side of an edge nothing is."""
    exact = Exact([(3, Fraction(0))], low=Fraction(0), high=Fraction(1))
    start = exact(0.0)
    assert start is not None
    found = side(exact, start, 8.0, 10.0)
    assert found.slope == pytest.approx(3)
    assert found.next_slope is None
    assert 0 < found.until <= 1
    assert side(exact, start, -8.0, 10.0) == Side(None, None, None)
    assert side(exact, start, 0.0, 10.0) == Side(None, None, None)


def test_an_edge_close_to_the_base_is_found() -> None:
    """Plans end a thousandth beyond the base, and the slope halves half way there."""
    edge = Fraction(1, 1000)
    exact = Exact([(10, Fraction(0)), (5, Fraction(5, 2000))], low=Fraction(-1), high=edge)
    start = exact(0.0)
    assert start is not None
    found = side(exact, start, 8.0, 1e-3)
    assert found.slope == pytest.approx(10)
    assert found.until <= 0.0005 + 1e-9
