"""Periods and their hours: calendar months from the calendar, any other from its written hours."""

from __future__ import annotations

import calendar
import re
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Period:
    """A period of the plan: its name, its hours, and whether it is one calendar month."""

    name: str
    hours: float
    calendar_month: bool


def period(name: str, hours: float | None) -> Period:
    """A period from its name, with its hours when it is no calendar month.

    >>> period("2031-02", None).hours
    672.0
    >>> period("hour", 1).calendar_month
    False
    """
    if hours is not None:
        return Period(name, float(hours), False)
    found = re.fullmatch(r"(\d{4})-(\d{2})", name)
    if not found:
        raise ValueError(f"{name} is no calendar month")
    return Period(name, 24.0 * calendar.monthrange(int(found[1]), int(found[2]))[1], True)
