"""Best margin against the ratio of two cuts, such as propylene to ethylene.

The ratio is a coefficient of the program, so the curve is neither made of straight pieces nor
concave: points are placed until straight lines between them miss by no more than an error. How far
they miss is read from the slopes at both ends; where the curve is bent one way between two points it
is inside the triangle of its chord and its two tangents.
"""

from __future__ import annotations

import functools
import itertools
import math
from collections.abc import Callable
from typing import TYPE_CHECKING

from olefinlp.answers.answer import Answer, Chart
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.answers.words import money as money_words
from olefinlp.inputs.findings import near_name
from olefinlp.lp.neighbours import RatioNeighbours
from olefinlp.lp.steps import Point

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan

SPAN = 0.25
ERROR = 1e-4
"""How far straight lines between the points may miss, as a share of the best margin."""
DEPTH = 24
FLAT = 0.005
Evaluate = Callable[[float], Point | None]


def ratio_curve(
    plan: Plan, of: str, to: str, low: float | None = None, high: float | None = None, error: float = ERROR
) -> Answer:
    """Best margin with the ratio of two cuts held, over a range of ratios.

    Ratios are by mass, over all months together. The range is a quarter on each side of the plan's
    own ratio unless given, and is cut where no plan has such a ratio. `error` is how far straight
    lines between the points may miss, as a share of the margin.

    Raises `ValueError` for an unknown cut, when none of the second is made, for an empty range, and
    when no plan has a ratio in the range.
    """
    cuts = plan.quantities.case.cuts
    if of == to:
        raise ValueError(f"a ratio needs two cuts, not `{of}` twice")
    for cut in (of, to):
        if cut not in cuts:
            raise ValueError(f"`{cut}` is no cut of this plant; {near_name(cut, cuts)}")
    made = [sum(plan.quantities.value("cut_made", cut, m) for m in plan.quantities.case.months) for cut in (of, to)]
    if not made[1]:
        raise ValueError(f"the plan makes no {to}: there is no ratio to vary")
    today = made[0] / made[1]
    start, stop = (today * (1 - SPAN) if low is None else low), (today * (1 + SPAN) if high is None else high)
    if not 0 <= start < stop:
        raise ValueError(f"the range {start:g} to {stop:g} is empty or below zero")
    held = RatioNeighbours(plan.lp, _columns(plan, of), _columns(plan, to))
    evaluate = functools.cache(held.evaluate)
    best = Point(today, plan.solution.objective, 0.0)
    points, miss = _points(evaluate, best, start, stop, error * abs(best.value))
    return _answer(plan, (of, to), points, best, miss, _flat_top(evaluate, points, best))


def _columns(plan: Plan, cut: str) -> list[int]:
    return [plan.lp.column_at["cut_made", cut, month] for month in plan.quantities.case.months]


def _points(evaluate: Evaluate, best: Point, start: float, stop: float, error: float) -> tuple[list[Point], float]:
    """Points from start to stop, with the best one if it lies between, close enough; and how far lines miss at most."""
    worst = 0.0

    def between(a: Point, b: Point, depth: int) -> list[Point]:
        nonlocal worst
        miss = _miss(a, b)
        if miss <= error or depth == 0:
            worst = max(worst, miss)
            return []
        middle = evaluate(_split(a, b))
        if middle is None:
            raise ValueError(f"no plan between two plans at ratios {a.at:g} and {b.at:g}")
        return [*between(a, middle, depth - 1), middle, *between(middle, b, depth - 1)]

    inside = best if start <= best.at <= stop else evaluate(min(max(best.at, start), stop))
    if inside is None:
        raise ValueError(f"no plan has a ratio from {start:g} to {stop:g}")
    ends = sorted({p.at: p for p in (_edge(evaluate, inside, start), inside, _edge(evaluate, inside, stop))}.values(), key=_at)
    points = [ends[0]]
    for a, b in itertools.pairwise(ends):
        points += [*between(a, b, DEPTH), b]
    return points, worst


def _at(point: Point) -> float:
    return point.at


def _edge(evaluate: Evaluate, inside: Point, wanted: float) -> Point:
    """The point wanted, or the farthest towards it that has a plan."""
    if wanted == inside.at:
        return inside
    good, bad = inside, wanted
    for step in range(41):
        at = wanted if step == 0 else (good.at + bad) / 2
        found = evaluate(at)
        if found is None:
            bad = at
        elif step == 0:
            return found
        else:
            good = found
    return good


def _bends(a: Point, b: Point) -> tuple[float, float]:
    """How far each end's tangent has left the chord at the other end; of one sign where the curve is bent one way."""
    width = b.at - a.at
    chord = b.value - a.value
    return a.slope * width - chord, chord - b.slope * width


def _miss(a: Point, b: Point) -> float:
    """How far the curve can be from its chord: the height of the triangle with the tangents."""
    first, last = _bends(a, b)
    if first * last < 0:
        return max(abs(first), abs(last)) / 2
    return abs(first * last / (first + last)) if first * last else 0.0


def _split(a: Point, b: Point) -> float:
    """Where the tangents meet, which is where a bend is if there is one; half way if they do not."""
    first, last = _bends(a, b)
    share = last / (first + last) if first * last > 0 else 0.5
    return a.at + min(max(share, 1 / 64), 63 / 64) * (b.at - a.at)


def _flat_top(evaluate: Evaluate, points: list[Point], best: Point) -> tuple[float, float]:
    """The ratios among those looked at within which no more than a share of the best margin is given up.

    The margin rises up to the best ratio and falls after it, as plans can be mixed: one range.
    """
    floor = best.value - FLAT * abs(best.value)
    inside = [point for point in points if point.value >= floor]
    if not inside:
        return math.nan, math.nan
    first, last = points.index(inside[0]), points.index(inside[-1])
    low = inside[0] if first == 0 else _crossing(evaluate, inside[0], points[first - 1], floor)
    high = inside[-1] if last == len(points) - 1 else _crossing(evaluate, inside[-1], points[last + 1], floor)
    return low.at, high.at


def _crossing(evaluate: Evaluate, inside: Point, outside: Point, floor: float) -> Point:
    """The last point at the floor or above it, between one above and one below."""
    for count in range(60):
        if inside.value - floor <= 1e-9 * abs(floor):
            break
        share = (inside.value - floor) / (inside.value - outside.value)
        at = inside.at + (share if count % 2 == 0 else 0.5) * (outside.at - inside.at)
        found = evaluate(at)
        if found is not None and found.value >= floor:
            inside = found
        elif found is not None:
            outside = found
    return inside


def _answer(
    plan: Plan, cuts: tuple[str, str], points: list[Point], best: Point, miss: float, flat: tuple[float, float]
) -> Answer:
    of, to = cuts
    money = f"k{plan.currency}"
    columns = (
        Column("ratio", f"{of} to {to}", "t/t", "price"),
        Column("margin", "Best margin", money, "money"),
        Column("loss", "Given up", money, "money"),
        Column("share", "Given up", "%", "share"),
        Column("today", "Plan"),
    )
    rows: list[Record] = [
        {
            "ratio": p.at,
            "margin": p.value,
            "loss": best.value - p.value,
            "share": (best.value - p.value) / abs(best.value) if best.value else None,
            "today": "here" if p.at == best.at else "",
        }
        for p in points
    ]
    note = "Plant ratio by mass, all months together; it is not the ratio at one furnace's outlet."
    table = Table("ratio_curve", f"Margin against {of} to {to}", columns, rows, note)
    chart = Chart("line", f"Best margin against {of} to {to}", "ratio", "ratio", "margin", "t/t", money, best.at)
    sentences = _sentences(plan.currency, cuts, points, best, miss, flat)
    return Answer("ratio_curve", f"Margin against the ratio of {of} to {to}", (table,), sentences, note, chart)


def _sentences(
    currency: str, cuts: tuple[str, str], points: list[Point], best: Point, miss: float, flat: tuple[float, float]
) -> tuple[str, ...]:
    decimals = max(3, 2 - math.floor(math.log10(max(points[-1].at, 1e-12))))
    part = 10.0**-decimals
    low, high = math.ceil(flat[0] / part - 1e-9) * part, math.floor(flat[1] / part + 1e-9) * part
    share = f"{money_words(FLAT * abs(best.value), currency)} ({100 * FLAT:g} %)"
    first = f"The plan makes {best.at:.{decimals}f} t of {cuts[0]} per t of {cuts[1]}; "
    if low <= high:
        first += f"any ratio from {low:.{decimals}f} to {high:.{decimals}f} costs less than {share}."
    else:
        first += f"no ratio shown to {decimals} decimals costs less than {share}."
    ends = [f"at {p.at:.{decimals}f} {money_words(best.value - p.value, currency)}" for p in (points[0], points[-1])]
    second = f"Given up at the ends of what was looked at: {' and '.join(ends)}."
    third = f"Between the points shown straight lines miss by up to {money_words(miss, currency)}."
    return first, second, third
