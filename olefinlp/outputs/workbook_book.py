"""The workbook file itself: its sheets, their print setup, its cell styles, what may stand in a cell."""

from __future__ import annotations

import copy
import datetime
import io
import math
import re
from typing import TYPE_CHECKING, Any

import xlsxwriter

if TYPE_CHECKING:
    from olefinlp.inputs.scenario import Scenario

INK, SHADE, LINE, INPUT, BINDS, ALARM = "#12344D", "#DCE6EC", "#9FB1BC", "#FFF4CE", "#F6DFC4", "#9C2F1E"
"""Colours: of headings, of header cells, of thin lines, of cells to change, of limits that bind, of what is wrong."""

LONGEST_TEXT = 32767
FORBIDDEN = re.compile("[\x00-\x08\x0b\x0c\x0e-\x1f\ud800-\udfff\ufffe\uffff]")
"""Characters that a workbook cannot hold."""

FIXED_DATE = datetime.datetime(2000, 1, 1)
"""Written as the date of creation, so that the same plan gives the same bytes."""

STYLES: dict[str, dict[str, Any]] = {
    "title": {"bold": True, "font_size": 16, "font_color": INK},
    "block": {"bold": True, "font_size": 12, "font_color": INK},
    "note": {"italic": True, "font_color": "#404040"},
    "header": {"bold": True, "text_wrap": True, "valign": "bottom", "bg_color": SHADE, "bottom": 1, "border_color": LINE},
    "right": {"align": "right"},
    "filtered": {"align": "right", "indent": 2},
    "indent": {"align": "left", "indent": 1},
    "bold": {"bold": True},
    "sum": {"bold": True, "top": 1, "border_color": LINE},
    "wrap": {"text_wrap": True, "valign": "top"},
    "top": {"valign": "top"},
    "input": {"bg_color": INPUT, "locked": False},
    "binds": {"bg_color": BINDS},
    "alarm": {"bold": True, "font_color": ALARM, "bg_color": BINDS},
}
OPTIONS = {
    "in_memory": True,
    "strings_to_formulas": False,
    "strings_to_numbers": False,
    "strings_to_urls": False,
    "default_format_properties": {"font_name": "Arial", "font_size": 10},
}
MAY = {"autofilter": True, "format_columns": True, "format_rows": True}
"""What a protected sheet still allows."""


def clean(text: object) -> str:
    """A text as a cell can hold it.

    >>> clean("a" + chr(7) + "b")
    'ab'
    """
    return FORBIDDEN.sub("", str(text))[:LONGEST_TEXT]


def one_line(text: object) -> str:
    """A short text for a page header, where `&` is a control character."""
    return " ".join(clean(text).split()).replace("&", "&&")[:120]


class Book:
    """A workbook in memory: sheets are made first, in the order in which people see them.

    `title` stands at the edge of every page; that of the scenario if not given.
    """

    styles = STYLES

    def __init__(self, scenario: Scenario, title: str = "") -> None:
        from olefinlp import __version__

        title = title or scenario.title
        self.title = one_line(title)
        self._memory = io.BytesIO()
        self.workbook: Any = xlsxwriter.Workbook(self._memory, copy.deepcopy(OPTIONS))  # it writes into them
        self.workbook.set_properties(
            {
                "title": clean(title)[:200],
                "subject": clean(f"Monthly plan of {scenario.plant.name}")[:200],
                "author": f"olefinlp {__version__}",
                "comments": "Planning aid; not for operating limits",
                "created": FIXED_DATE,
            }
        )
        self._styles: dict[tuple[str, ...], Any] = {}

    def style(self, *words: str) -> Any:
        """The cell style of some of `styles`; any other word is a number format.

        The same words give the same style, so that each is written once.
        """
        if words not in self._styles:
            properties: dict[str, Any] = {}
            for word in words:
                properties |= self.styles.get(word, {"num_format": word, "align": "right"})
            self._styles[words] = self.workbook.add_format(properties)
        return self._styles[words]

    def sheet(self, name: str) -> Any:
        """A new sheet, set up for landscape A4, one page wide, with the scenario and the page at its edges."""
        sheet = self.workbook.add_worksheet(name)
        sheet.set_landscape()
        sheet.set_paper(9)
        sheet.set_margins(left=0.5, right=0.5, top=0.75, bottom=0.7)
        sheet.fit_to_pages(1, 0)
        sheet.set_header(f"&L&9{self.title}&R&9&A")
        sheet.set_footer("&L&9Planning aid; not for operating limits&R&9Page &P of &N")
        return sheet

    def to_bytes(self) -> bytes:
        """The finished file."""
        self.workbook.close()
        return self._memory.getvalue()


def put(sheet: Any, row: int, column: int, value: Any, style: Any = None) -> None:
    """Write a value: numbers as numbers, everything else as text, nothing for None.

    Minus zero becomes zero, what is no finite number becomes a word: neither belongs in a cell.
    """
    if value is None or value == "":
        return
    if isinstance(value, int | float):
        if math.isfinite(value):
            sheet.write_number(row, column, value + 0.0, style)
        else:
            sheet.write_string(row, column, "unlimited" if value == math.inf else "not a number", style)
    else:
        sheet.write_string(row, column, clean(value), style)


def put_formula(sheet: Any, row: int, column: int, formula: str, value: float | str, style: Any = None) -> None:
    """Write a formula with its value, which viewers show that do not calculate."""
    sheet.write_formula(row, column, formula, style, value + 0.0 if isinstance(value, int | float) else value)


def cell(row: int, column: int) -> str:
    """An absolute reference; rows and columns count from 0.

    >>> cell(2, 9)
    '$J$3'
    """
    return f"${letters(column)}${row + 1}"


def letters(column: int) -> str:
    """The letters of a column counted from 0.

    >>> letters(0), letters(25), letters(26)
    ('A', 'Z', 'AA')
    """
    name = ""
    while column >= 0:
        name, column = chr(65 + column % 26) + name, column // 26 - 1
    return name
