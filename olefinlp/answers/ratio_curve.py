"""Best margin against the ratio of two cuts, such as propylene to ethylene.

The ratio is a coefficient of the program, so the curve is neither made of straight pieces nor
concave; but as long as one basis stays the best it is a hyperbola, known from a single solve. Where
the pieces of two points meet lies a bend or a piece between; a solve there decides.
"""

from __future__ import annotations

import functools
import itertools
import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING

from olefinlp.answers.answer import Answer, Chart
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.answers.words import money as money_words
from olefinlp.inputs.findings import near_name
from olefinlp.lp.neighbours import RatioNeighbours, RatioPoint
from olefinlp.lp.steps import SAME

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan

SPAN = 0.25
ERROR = 1e-4
"""How far straight lines between the points shown may miss, as a share of the best margin."""
DEPTH = 40
FLAT = 0.005
MOST = 64
"""How many straight lines stand for one piece at most."""
PROBES = (1 / 2, 1 / 32, 31 / 32)
"""Where a piece is looked at once more, as shares of its width."""
SHARES = tuple(k / 16 for k in range(1, 16))
Evaluate = Callable[[float], RatioPoint | None]


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
    best = RatioPoint(today, plan.solution.objective, 0.0, 0.0)
    money = sum(abs(line.amount) for line in plan.lines)
    evaluate = functools.cache(held.evaluate)
    pieces = _pieces(_points(evaluate, best, start, stop, SAME * money), SAME * money)
    shown, miss = _shown(pieces, error * abs(best.value))
    return _answer(plan, (of, to), shown, best, miss, _flat_top(pieces, best))


def _columns(plan: Plan, cut: str) -> list[int]:
    return [plan.lp.column_at["cut_made", cut, month] for month in plan.quantities.case.months]


@dataclass(frozen=True)
class Piece:
    """A hyperbola from one ratio to another."""

    low: float
    high: float
    on: RatioPoint

    def chord(self) -> float:
        """How far the curve gets from the straight line between its ends."""
        width = self.high - self.low
        start, end = self.on.along(self.low), self.on.along(self.high)
        inside = [self.on.along(self.low + share * width) - start - share * (end - start) for share in SHARES]
        return max(abs(miss) for miss in inside)


def _points(evaluate: Evaluate, best: RatioPoint, start: float, stop: float, same: float) -> list[RatioPoint]:
    """Points from start to stop so that each two neighbours are on one piece."""

    def between(a: RatioPoint, b: RatioPoint, depth: int) -> list[RatioPoint]:
        at = _elsewhere(evaluate, a, b, same) if _one_piece(a, b, same) else _meeting(a, b) or (a.at + b.at) / 2
        if at is None or depth == 0 or not a.at < at < b.at:
            return []
        middle = evaluate(at)
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
    return points


def _at(point: RatioPoint) -> float:
    return point.at


def _edge(evaluate: Evaluate, inside: RatioPoint, wanted: float) -> RatioPoint:
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


def _one_piece(a: RatioPoint, b: RatioPoint, same: float) -> bool:
    """Whether the piece of one leads to the other."""
    return min(abs(a.along(b.at) - b.value), abs(b.along(a.at) - a.value)) <= same


def _elsewhere(evaluate: Evaluate, a: RatioPoint, b: RatioPoint, same: float) -> float | None:
    """A place between two points of one piece where the curve is not on it; None if it is wherever looked.

    Where several pieces meet in one point, the piece of a neighbour may lead there by a way that is
    not the curve's: so one looks half way, and close to both ends.
    """
    on = _leading(a, b, same)
    for share in PROBES:
        at = a.at + share * (b.at - a.at)
        found = evaluate(at)
        if found is not None and abs(found.value - on.along(at)) > same:
            return at
    return None


def _leading(a: RatioPoint, b: RatioPoint, same: float) -> RatioPoint:
    """Of two points of one piece the one whose piece leads to the other."""
    return a if abs(a.along(b.at) - b.value) <= same else b


def _meeting(a: RatioPoint, b: RatioPoint) -> float | None:
    """Where the pieces of two points meet between them; None where they do not."""

    def gap(at: float) -> float:
        return a.along(at) - b.along(at)

    low, high = a.at, b.at
    if not all(map(math.isfinite, (gap(low), gap(high)))) or (gap(low) > 0) == (gap(high) > 0):
        return None
    rising = gap(high) > 0
    for _ in range(80):
        middle = (low + high) / 2
        if (gap(middle) > 0) == rising:
            high = middle
        else:
            low = middle
    middle = (low + high) / 2
    return middle if a.at < middle < b.at else None


def _pieces(points: list[RatioPoint], same: float) -> list[Piece]:
    """What lies between neighbours."""
    pairs = itertools.pairwise(points)
    return [Piece(a.at, b.at, _leading(a, b, same)) for a, b in pairs] or [Piece(points[0].at, points[0].at, points[0])]


def _shown(pieces: list[Piece], error: float) -> tuple[list[tuple[float, float]], float]:
    """Ratio and margin of points so close that straight lines between them miss by no more than an error; and the miss."""
    shown, worst = [(pieces[0].low, pieces[0].on.along(pieces[0].low))], 0.0
    for piece in pieces:
        count = 1
        while (miss := max(part.chord() for part in _parts(piece, count))) > error and count < MOST:
            count *= 2
        worst = max(worst, miss)
        shown += [(part.high, piece.on.along(part.high)) for part in _parts(piece, count)]
    return shown, worst


def _parts(piece: Piece, count: int) -> list[Piece]:
    ends = [piece.low + (piece.high - piece.low) * k / count for k in range(count)] + [piece.high]
    return [Piece(low, high, piece.on) for low, high in itertools.pairwise(ends)]


def _flat_top(pieces: list[Piece], best: RatioPoint) -> tuple[float, float] | None:
    """The ratios among those looked at within which no more than a share of the best margin is given up.

    Plans can be mixed, so the margin rises up to the best ratio and falls after it: one range.
    """
    floor = best.value - FLAT * abs(best.value)
    crossings: list[float] = []
    for piece in pieces:
        ends = [at for at in (piece.low, piece.high) if piece.on.along(at) >= floor]
        if len(ends) == 1:
            other = piece.high if ends[0] == piece.low else piece.low
            ends.append(_last_above(piece.on, ends[0], other, floor))
        crossings += ends
    return (min(crossings), max(crossings)) if crossings else None


def _last_above(on: RatioPoint, above: float, below: float, floor: float) -> float:
    for _ in range(80):
        middle = (above + below) / 2
        above, below = (middle, below) if on.along(middle) >= floor else (above, middle)
    return above


def _answer(
    plan: Plan,
    cuts: tuple[str, str],
    shown: list[tuple[float, float]],
    best: RatioPoint,
    miss: float,
    flat: tuple[float, float] | None,
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
            "ratio": at,
            "margin": value,
            "loss": best.value - value,
            "share": (best.value - value) / abs(best.value) if best.value else None,
            "today": "here" if at == best.at else "",
        }
        for at, value in shown
    ]
    note = "Plant ratio by mass, all months together; it is not the ratio at one furnace's outlet."
    table = Table("ratio_curve", f"Margin against {of} to {to}", columns, rows, note)
    chart = Chart("line", f"Best margin against {of} to {to}", "ratio", "ratio", "margin", "t/t", money, best.at)
    sentences = _sentences(plan.currency, cuts, shown, best, miss, flat)
    return Answer("ratio_curve", f"Margin against the ratio of {of} to {to}", (table,), sentences, note, chart)


def _sentences(
    currency: str,
    cuts: tuple[str, str],
    shown: list[tuple[float, float]],
    best: RatioPoint,
    miss: float,
    flat: tuple[float, float] | None,
) -> tuple[str, ...]:
    decimals = max(3, 2 - math.floor(math.log10(max(shown[-1][0], 1e-12))))
    part = 10.0**-decimals
    first = f"The plan makes {best.at:.{decimals}f} t of {cuts[0]} per t of {cuts[1]}"
    if flat:  # rounded inwards, so that what is said is true
        low, high = math.ceil(flat[0] / part - 1e-6) * part, math.floor(flat[1] / part + 1e-6) * part
        share = f"{money_words(FLAT * abs(best.value), currency)} ({100 * FLAT:g} %)"
        if low <= high:
            first += f"; any ratio from {low:.{decimals}f} to {high:.{decimals}f} costs less than {share}"
    losses = [(at, loss if (loss := best.value - value) > SAME * abs(best.value) else 0.0) for at, value in (shown[0], shown[-1])]
    ends = [f"at {at:.{decimals}f} {money_words(loss, currency)}" for at, loss in losses]
    second = f"Given up at the ends of what was looked at: {' and '.join(ends)}."
    third = f"Straight lines between the points shown miss by up to {money_words(miss, currency)}."
    return f"{first}.", second, third
