"""Plain text tables for a terminal: readable without colour, numbers right-aligned."""

from __future__ import annotations

from collections.abc import Collection, Sequence

INDENT = "  "


def number(value: float | None, decimals: int = 1) -> str:
    """A number with thousands apart, a blank for none, never a minus zero.

    >>> number(26808.667), number(None), number(-0.0001)
    ('26,808.7', '', '0.0')
    """
    if value is None:
        return ""
    text = f"{value:,.{decimals}f}"
    return text.removeprefix("-") if not text.strip("-0.,") else text


def significant(value: float | None) -> str:
    """A number of unknown size to four figures or one decimal, whichever shows more.

    >>> significant(24.53736), significant(2176.2), significant(0.6612), significant(0)
    ('24.54', '2,176.2', '0.6612', '0')
    """
    if value is None:
        return ""
    size = abs(value)
    if size == 0:
        return "0"
    if size >= 1000:
        return number(value, 1)
    decimals = 1 if size >= 100 else 2 if size >= 10 else 3 if size >= 1 else 4
    return number(value, decimals) if size >= 1e-3 else f"{value:.2g}"


def aligned(rows: Sequence[Sequence[str]], left: int | Collection[int] = 1) -> list[str]:
    """Rows as lines: the first `left` columns, or those named, to the left, the others to the right."""
    if not rows:
        return []
    lefts = range(left) if isinstance(left, int) else left
    widths = [max(len(row[i]) for row in rows) for i in range(len(rows[0]))]
    lines = []
    for row in rows:
        sized = enumerate(zip(row, widths, strict=True))
        cells = [cell.ljust(width) if i in lefts else cell.rjust(width) for i, (cell, width) in sized]
        lines.append((INDENT + "  ".join(cells)).rstrip())
    return lines


def names(text: str) -> str:
    """A name of the files as words.

    >>> names("full_range_naphtha")
    'full range naphtha'
    """
    return text.replace("_", " ")
