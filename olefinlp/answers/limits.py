"""Every written limit: what it came to, whether it binds, what one more unit is worth.

The **worth** of a limit is the change of margin per unit by which it is relaxed (≥ 0); its **rate**
is d(margin)/d(limit), negative for a binding minimum. Both are pinned by tests.
"""

from __future__ import annotations

from olefinlp.answers.quantities import Quantities
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.inputs.case import Limit

NOTHING = "nothing of it"
AT = 1e-7
"""Relative distance at which a limit counts as reached."""


def limits_table(q: Quantities) -> Table:
    """All limits of all months, in the order in which they were written."""
    columns = (
        Column("month", "Month"),
        Column("family", "Kind"),
        Column("limit", "Limit"),
        Column("minimum", "Minimum", kind="quantity"),
        Column("value", "Plan", kind="quantity"),
        Column("maximum", "Maximum", kind="quantity"),
        Column("unit", "Unit"),
        Column("measure", "Measured as"),
        Column("state", "State"),
        Column("worth", "Worth of relaxing it by one unit", kind="price"),
        Column("rate", "Rate d(margin)/d(limit)", kind="price"),
        Column("worth_unit", "Worth and rate unit"),
        Column("place", "Written in"),
        Column("reason", "Reason"),
    )
    rows = [limit_record(q, limit) for limit in q.case.limits.values()]
    note = "A worth holds for the next unit, not for any amount; worths of two limits never add."
    return Table("limits", "Limits", columns, rows, note)


def limit_record(q: Quantities, limit: Limit) -> Record:
    """One limit as a record, in the units in which people read it."""
    label = (f"{limit.family}_limit", *limit.key)
    value, dual = q.activity(label), q.dual(*label)
    state, side = _state(q, limit, value, dual)
    if abs(dual * limit.worth_scale) < 1e-9 or state == NOTHING:
        dual = 0.0  # what is not made has no limit that is worth anything
    place = limit.place_low if side == "low" else limit.place_high or limit.place_low
    return {
        "month": limit.month,
        "family": limit.family.replace("_", " "),
        "limit": limit.label,
        "minimum": None if limit.low is None else limit.low * limit.scale,
        "value": None if value is None else value * limit.scale,
        "maximum": None if limit.high is None else limit.high * limit.scale,
        "unit": limit.unit,
        "measure": limit.measure,
        "state": state,
        "worth": abs(dual) * limit.worth_scale,
        "rate": dual * limit.worth_scale,
        "worth_unit": f"{q.case.currency}/{limit.worth_unit}",
        "place": str(place) if place else "",
        "reason": limit.reason,
    }


def _state(q: Quantities, limit: Limit, value: float | None, dual: float) -> tuple[str, str]:
    """In words where the plan stands, and which side was written there."""
    if value is None:
        return NOTHING, ""
    room = AT * max(abs(limit.low or 0.0), abs(limit.high or 0.0), 1e-6 * q.size)
    at_low = limit.low is not None and value <= limit.low + room
    at_high = limit.high is not None and value >= limit.high - room
    if limit.family in ("specification", "ratio") and not _anything(q, limit):
        return NOTHING, ""
    if at_low and at_high:
        return "fixed", "high" if dual > 0 else "low"
    if at_high:
        return "at maximum", "high"
    if at_low:
        return "at minimum", "low"
    return "", ""


def _anything(q: Quantities, limit: Limit) -> bool:
    """Whether any quantity of a ratio or specification is there at all."""
    parts = q.case.specifications.get(limit.key[:3]) if limit.family == "specification" else q.case.ratios.get(limit.key[:2])
    return any(abs(q.part(part, limit.month)) > 1e-7 * q.size for part in parts or ())


def binding(table: Table) -> list[Record]:
    """Limits that bind and are worth something, in the order of the table."""
    return [row for row in table.rows if row["state"] in ("at maximum", "at minimum", "fixed") and row["worth"] > 0]
