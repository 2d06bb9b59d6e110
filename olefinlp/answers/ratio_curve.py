"""Best margin against the ratio of two cuts, such as propylene to ethylene.

The ratio is a coefficient of the program, so the curve is neither made of straight pieces nor
concave: points are placed where a smooth curve through their values and slopes would miss a point
between them by more than the stated error.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING

from olefinlp.answers.answer import Answer, Chart
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.inputs.findings import near_name
from olefinlp.lp.neighbours import RatioNeighbours
from olefinlp.lp.steps import Point

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan

SPAN = 0.25
ERROR = 1e-4
"""Largest miss of the curve between its points, as a share of the best margin."""
DEPTH = 8
FLAT = 0.005


@dataclass(frozen=True)
class Ends:
    """The range of ratios within which the margin gives up no more than a share."""

    low: float
    high: float


def ratio_curve(
    plan: Plan, of: str, to: str, low: float | None = None, high: float | None = None, error: float = ERROR
) -> Answer:
    """Best margin with the ratio of two cuts held, over a range of ratios.

    Ratios are by mass, over all months together. The range is a quarter on each side of the plan's
    own ratio unless given. Raises `ValueError` for an unknown cut or when none of the second is made.
    """
    cuts = plan.quantities.case.cuts
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
    best = Point(today, plan.solution.objective, 0.0)
    points, miss = _points(held.evaluate, best, start, stop, error * abs(plan.solution.objective))
    return _answer(plan, (of, to), points, today, miss)


def _columns(plan: Plan, cut: str) -> list[int]:
    return [plan.lp.column_at["cut_made", cut, month] for month in plan.quantities.case.months]


def _points(
    evaluate: Callable[[float], Point | None], best: Point, start: float, stop: float, error: float
) -> tuple[list[Point], float]:
    """Points from start to stop through the best one, close enough; and the largest miss seen."""
    worst = 0.0

    def between(a: Point, b: Point, depth: int) -> list[Point]:
        nonlocal worst
        middle = evaluate((a.at + b.at) / 2)
        if middle is None:
            return []
        miss = abs(middle.value - _smooth(a, b, middle.at))
        if miss <= error or depth == 0:
            worst = max(worst, miss)
            return [middle]
        return [*between(a, middle, depth - 1), middle, *between(middle, b, depth - 1)]

    low, high = _edge(evaluate, best.at, start), _edge(evaluate, best.at, stop)
    points = [best]
    if low is not None and low.at < best.at:
        points = [low, *between(low, best, DEPTH), *points]
    if high is not None and high.at > best.at:
        points = [*points, *between(best, high, DEPTH), high]
    return points, worst


def _edge(evaluate: Callable[[float], Point | None], inside: float, wanted: float) -> Point | None:
    """The point wanted, or the farthest towards it that has a plan."""
    point = evaluate(wanted)
    if point is not None:
        return point
    good: Point | None = None
    near, far = inside, wanted
    for _ in range(30):
        middle = (near + far) / 2
        found = evaluate(middle)
        near, far, good = (middle, far, found) if found is not None else (near, middle, good)
    return good


def _smooth(a: Point, b: Point, at: float) -> float:
    """The cubic with the values and slopes of two points (Hermite)."""
    width = b.at - a.at
    s = (at - a.at) / width
    return float(
        (1 + 2 * s) * (1 - s) ** 2 * a.value
        + s * (1 - s) ** 2 * width * a.slope
        + s * s * (3 - 2 * s) * b.value
        + s * s * (s - 1) * width * b.slope
    )


def flat_top(points: list[Point], share: float = FLAT) -> Ends:
    """Where the margin is within a share of the best, straight between points."""
    best = max(p.value for p in points)
    floor = best - share * abs(best)
    top = max(range(len(points)), key=lambda i: points[i].value)
    low = high = points[top].at
    for i in range(top, 0, -1):
        a, b = points[i - 1], points[i]
        low = a.at
        if a.value < floor:
            low = b.at - (b.at - a.at) * (b.value - floor) / (b.value - a.value)
            break
    for a, b in zip(points[top:], points[top + 1 :], strict=False):
        high = b.at
        if b.value < floor:
            high = a.at + (b.at - a.at) * (a.value - floor) / (a.value - b.value)
            break
    return Ends(low, high)


def _answer(plan: Plan, cuts: tuple[str, str], points: list[Point], today: float, miss: float) -> Answer:
    of, to = cuts
    best = plan.solution.objective
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
            "loss": best - p.value,
            "share": (best - p.value) / abs(best) if best else None,
            "today": "here" if p.at == today else "",
        }
        for p in points
    ]
    ends = flat_top(points)
    first = (
        f"The plan makes {today:.3f} t of {of} per t of {to}; any ratio from {ends.low:.3f} to {ends.high:.3f} costs less than "
    )
    first += f"{FLAT * abs(best):,.0f} {money} ({100 * FLAT:g} %)."
    second = f"Between the points shown a smooth curve misses by up to {miss:,.1f} {money}."
    third = f"Looked at {points[0].at:.3f} to {points[-1].at:.3f}: at the ends {best - points[0].value:,.0f} and "
    third += f"{best - points[-1].value:,.0f} {money} are given up."
    note = "Plant ratio by mass, all months together; it is not the ratio at one furnace's outlet."
    table = Table("ratio_curve", f"Margin against {of} to {to}", columns, rows, note)
    chart = Chart("line", f"Best margin against {of} to {to}", "ratio", "ratio", "margin", "t/t", money, today)
    return Answer("ratio_curve", f"Margin against the ratio of {of} to {to}", (table,), (first, third, second), note, chart)
