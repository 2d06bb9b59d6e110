"""What a limit is worth: its shadow price, how far it holds, both one-sided values, the next step."""

from __future__ import annotations

from typing import TYPE_CHECKING

from olefinlp.answers.answer import Answer
from olefinlp.answers.limits import limit_record
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.answers.words import amount, percent, worth
from olefinlp.inputs.case import Limit
from olefinlp.lp.neighbours import Neighbours
from olefinlp.lp.steps import Evaluate, Point, Side, side

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan

REACH = 0.10
"""How far to look on each side, as a share of the limit."""


NOTHING = 1e-9
"""A worth below this is what rounding leaves of none."""


def worth_of_limits(plan: Plan, reach: float = REACH) -> Answer:
    """The worth of every limit that is active, in an operator's unit.

    Each side is found by solving again beside the plan, so that neither a value nor a place in the
    list hangs on the basis that the solver happened to end with. A limit is listed only if it is
    reached, moving it one way or the other changes the margin, and it is no ratio or specification
    of something that is not made.

    Columns: worth_loosened and worth_tightened (currency per unit), the limit's values between
    which each holds, the worth of the next step beyond them.
    """
    q = plan.quantities
    size = sum(abs(line.amount) for line in plan.lines)
    reached = [
        (limit, record)
        for limit in q.case.limits.values()
        if (record := limit_record(q, limit))["state"] in ("at maximum", "at minimum", "fixed")
    ]
    rows = plan.neighbours.together(lambda: [_worth(plan, limit, record, reach, size) for limit, record in reached])
    rows = [row for row in rows if row["worth_loosened"] or row["worth_tightened"]]
    columns = (
        Column("month", "Month"),
        Column("limit", "Limit"),
        Column("state", "State"),
        Column("value", "Limit", kind="quantity"),
        Column("unit", "Unit"),
        Column("worth_loosened", "Worth if loosened", kind="price"),
        Column("worth_tightened", "Cost if tightened", kind="price"),
        Column("worth_unit", "Worth unit"),
        Column("holds_from", "Holds from", kind="quantity"),
        Column("holds_to", "Holds to", kind="quantity"),
        Column("next_loosened", "Next step if loosened further", kind="price"),
        Column("next_tightened", "Next step if tightened further", kind="price"),
        Column("place", "Written in"),
    )
    note = f"Looked at {reach:.0%} of each limit on both sides. Worths never add; none holds beyond its range."
    table = Table("worth_of_limits", "Worth of limits", columns, rows, note)
    return Answer("worth_of_limits", "What the limits are worth", (table,), tuple(_sentence(r) for r in rows), note)


def limit_curve(neighbours: Neighbours, limit: Limit, low_side: bool) -> Evaluate:
    """The best margin against one side of a limit, in units of the plan."""
    row = neighbours.lp.row_at[f"{limit.family}_limit", *limit.key]
    low, high = float(neighbours.lp.row_low[row]), float(neighbours.lp.row_high[row])

    def evaluate(at: float) -> Point | None:
        pair = (at, high) if low_side else (low, at)
        if pair[0] > pair[1]:
            return None
        solution = neighbours.solve(rows={row: pair})
        if solution is None:
            return None
        dual = float(solution.row_dual[row])  # where both sides meet, only a dual of this side's sign is this side's
        return Point(at, solution.objective, min(dual, 0.0) if low_side else max(dual, 0.0))

    return evaluate


def _worth(plan: Plan, limit: Limit, record: Record, reach: float, size: float) -> Record:
    """Both sides of one limit, in the unit in which people read it."""
    q, neighbours = plan.quantities, plan.neighbours
    label = (f"{limit.family}_limit", *limit.key)
    dual = q.dual(*label)
    low_side = dual < 0 or (not dual and record["state"] == "at minimum")
    at = (limit.low if low_side else limit.high) or 0.0
    base = Point(at, neighbours.base.objective, dual)
    evaluate = limit_curve(neighbours, limit, low_side)
    span = reach * (abs(at) or _typical(plan, limit))
    up, down = side(evaluate, base, span, size), side(evaluate, base, -span, size)
    loosened, tightened = (down, up) if low_side else (up, down)
    return {
        "month": limit.month,
        "family": limit.family,
        "limit": limit.label,
        "state": record["state"],
        "low_side": low_side,
        "value": at * limit.scale,
        "unit": limit.unit,
        "worth_loosened": _scaled(loosened.slope, limit),
        "worth_tightened": _scaled(tightened.slope, limit),
        "worth_unit": record["worth_unit"],
        "holds_from": _until(down, limit),
        "holds_to": _until(up, limit),
        "next_loosened": _scaled(loosened.next_slope, limit),
        "next_tightened": _scaled(tightened.next_slope, limit),
        "place": record["place"],
    }


def _typical(plan: Plan, limit: Limit) -> float:
    """A size for a limit of zero: the largest limit of the same unit."""
    sizes = [
        max(abs(other.low or 0.0), abs(other.high or 0.0))
        for other in plan.quantities.case.limits.values()
        if other.unit == limit.unit and other.scale == limit.scale
    ]
    return max(sizes, default=0.0) or 1.0


def _scaled(slope: float | None, limit: Limit) -> float | None:
    if slope is None:
        return None
    worth = abs(slope) * limit.worth_scale
    return worth if worth >= NOTHING else 0.0


def _until(found: Side, limit: Limit) -> float | None:
    return None if found.until is None else found.until * limit.scale


def _sentence(row: Record) -> str:
    start = f"{row['month']}: {row['limit']}"
    if row["family"] in ("ratio", "specification"):  # multiplied out, so their limit is no number that anyone wrote
        start += f": missing it by one {row['worth_unit'].partition('/')[2]}"
    else:
        start += f" ({amount(row['value'])} {row['unit']}): one unit {'less' if row['low_side'] else 'more'}"
    if row["worth_loosened"] is None:
        return f"{start} changes nothing that can be planned."
    text = f"{start} is worth {worth(row['worth_loosened'])} {row['worth_unit']}"
    end = row["holds_from"] if row["low_side"] else row["holds_to"]
    if end is not None and row["value"]:
        least = "" if row["next_loosened"] is not None else "at least "
        text += f", for {least}the next {percent(abs(end - row['value']) / abs(row['value']))}"
    if row["next_loosened"] is not None:
        then = worth(row["next_loosened"])
        text += f", then {then if then != worth(row['worth_loosened']) else 'a little less'}"
    tightened = row["worth_tightened"]
    if tightened is not None and abs(tightened - row["worth_loosened"]) > 1e-6 * tightened:
        text += f"; one unit tighter costs {worth(tightened)}"
    return text + "."
