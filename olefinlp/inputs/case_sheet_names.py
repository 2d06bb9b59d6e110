"""Names that the writer and the reader of case sheets share: sheets, headings, room for more."""

from __future__ import annotations

PRICES, LIMITS, AS_USED, UNITS, READ_ME = "Prices", "Limits", "Prices as used", "Units", "Read me"
USED_FIRST, USED_IN = "Used, first case", "Used in"
COLUMN_OF = {
    "group": "group",
    "item": "item",
    "month": "month",
    "unit": "unit",
    "basis": "basis",
    "relative to": "relative_to",
    "times": "times",
    "source": "source",
    "date": "date",
    "note": "note",
    USED_FIRST.lower(): "used",
    USED_IN.lower(): "used_in",
}
"""A heading in lower case → the column it heads; every other heading is the name of a case."""

MORE_CASES = 12
"""Columns at the right of the last case that are free for further ones."""
MORE_ROWS = 12
"""Rows below the last one that are free for further ones."""
SCENARIO = "Scenario"
"""Label of the cell that names the scenario on the sheet `Read me`."""


def heading_key(text: str) -> str:
    """A heading as it is compared: blanks of all kinds, capitals and underscores do not matter.

    >>> heading_key(" Relative\\n to ")
    'relative to'
    """
    return plain(text.replace("_", " ")).casefold()


def letters(column: int) -> str:
    """The letters of a column counted from 1.

    >>> letters(1), letters(26), letters(27)
    ('A', 'Z', 'AA')
    """
    name = ""
    while column > 0:
        column, rest = divmod(column - 1, 26)
        name = chr(65 + rest) + name
    return name


def plain(text: str) -> str:
    """A text without stray blanks: those around it, line feeds, and the kinds that look like none.

    >>> plain(" 534\\u00a0 ")
    '534'
    """
    return " ".join(text.replace("\u200b", "").replace("\ufeff", "").split())
