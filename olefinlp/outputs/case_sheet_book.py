"""The workbook of a case sheet: its styles, its columns, and what its sheets have in common."""

from __future__ import annotations

import math
import textwrap
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any

from olefinlp.inputs.case_sheet_limits import limit_rows
from olefinlp.inputs.case_sheet_names import COLUMN_OF, MORE_CASES, UNITS, heading_key
from olefinlp.inputs.case_sheet_rows import case_names, price_rows
from olefinlp.inputs.scenario import Scenario
from olefinlp.outputs.files import OutputError
from olefinlp.outputs.workbook_book import INPUT, LINE, STYLES, Book, letters, put

AS_FIRST = "#EDEDED"
"""Colour of a blank cell of a case, which means: as the first case."""
LINE_HEIGHT = 13.5
HEADER = 2
"""Row of the headings, from 0; a title and a legend stand above."""
CASE_WIDTH = 11
FACTOR_FORMAT = "#,##0.0000"
LETTERS = 1.05
"""Letters that stand in the width of a digit, about."""
OWN_STYLES: dict[str, dict[str, Any]] = {
    "free": {"locked": False},
    "row": {"bottom": 4, "border_color": LINE},
    "as_first": {"bg_color": AS_FIRST},
    "case": {"bold": True, "text_wrap": True, "valign": "bottom", "align": "right", "locked": False},
    "marked": {"bg_color": INPUT, "bottom": 1, "border_color": LINE},
    "text": {"num_format": "@", "valign": "top"},
    "name": {"valign": "top", "align": "left", "indent": 1},
}
MAY = {"format_cells": True, "format_columns": True, "format_rows": True, "insert_columns": True, "autofilter": True}
"""What the protected sheets still allow."""


@dataclass(frozen=True)
class Field:
    """A column of texts: its heading, its width, whether people may change it."""

    key: str
    heading: str
    width: float
    changed: bool = False
    style: str = "top"
    """`top` or `indent` for names, `wrap` for sentences, else the format of a number."""

    @property
    def heading_style(self) -> tuple[str, ...]:
        """Headings stand where what is below them stands."""
        return {"top": (), "text": (), "wrap": (), "name": ("indent",)}.get(self.style, ("right",))


class CaseBook(Book):
    """The workbook while it is written: its scenario, and the rows and cases of the sheet."""

    styles = STYLES | OWN_STYLES

    def __init__(self, scenario: Scenario) -> None:
        super().__init__(scenario)
        self.scenario = scenario
        self.names, self.prices, self.limits = case_names(scenario), price_rows(scenario), limit_rows(scenario)
        self.units_at: dict[tuple[str, ...], str] = {}
        """Units that a row offers → the range where they stand on the sheet of units."""
        self.last_key = 0
        """Last row of the table of units, from 1."""
        taken = [name for name in self.names if heading_key(name) in COLUMN_OF]
        if taken:
            raise OutputError(
                f"the price case `{taken[0]}` has the name of a column of the case sheet\nhint: give it another name"
            )

    @property
    def several_months(self) -> bool:
        """Whether rows say which month they are for."""
        return len(self.scenario.periods) > 1

    def head(self, sheet: Any, title: str) -> None:
        """The message of a sheet, and what its colours mean."""
        put(sheet, 0, 0, title, self.style("note"))
        put(sheet, 1, 0, "may be changed", self.style("input"))
        put(sheet, 1, 1, "blank: as the first case", self.style("as_first"))
        put(sheet, 1, 2, "all else is locked, without a password", self.style("note"))

    def headings(self, sheet: Any, fields: Sequence[Field], last_row: int) -> None:
        """Headings and widths of the columns of texts, frozen and filtered."""
        for at, one in enumerate(fields):
            sheet.write_string(HEADER, at, one.heading, self.style("header", *one.heading_style))
            sheet.set_column(at, at, one.width)
        first = len(fields)
        sheet.set_column(first, first + len(self.names) + MORE_CASES - 1, CASE_WIDTH)
        lines = max((math.ceil((len(name) + 2) / CASE_WIDTH) for name in self.names), default=1)
        sheet.set_row(HEADER, LINE_HEIGHT * max(2, lines) + 3)
        sheet.freeze_panes(HEADER + 1, 2)
        sheet.autofilter(HEADER, 0, last_row, first + len(self.names) - 1)
        sheet.repeat_rows(HEADER)
        sheet.print_area(0, 0, last_row, first + len(self.names) - 1)
        sheet.ignore_errors({"number_stored_as_text": f"A1:{letters(first + len(self.names))}{last_row + 1}"})

    def texts(self, sheet: Any, row: int, fields: Sequence[Field], values: dict[str, object], all_free: bool = False) -> None:
        """The texts of a row, with the height that they need."""
        lines = 1
        for at, one in enumerate(fields):
            value = values.get(one.key)
            words = ["free"] if all_free else ["row", "input"] if one.changed else ["row"]
            put(sheet, row, at, value, self.style(one.style, *words))
            if value in (None, ""):
                sheet.write_blank(row, at, None, self.style(one.style, *words))
            if one.style == "wrap":
                lines = max(lines, len(textwrap.wrap(str(value or ""), int(one.width * LETTERS))))
        if lines > 1:
            sheet.set_row(row, LINE_HEIGHT * lines)

    def grey_blanks(self, sheet: Any, first_case: int, first_row: int, last_row: int) -> None:
        """Blank cells of a case are grey, filled ones of a case that was added have the colour of all inputs."""
        left, right = first_case + 1, first_case + len(self.names) + MORE_CASES - 1
        column, cell = letters(left), f"{letters(left)}{first_row + 1}"
        named = f'{column}${HEADER + 1}<>""'
        rules = ((f'=AND({named},{cell}="",$B{first_row + 1}<>"")', AS_FIRST), (f'=AND({named},{cell}<>"")', INPUT))
        for rule, colour in rules:
            format_ = self.workbook.add_format({"bg_color": colour})
            sheet.conditional_format(first_row, left, last_row, right, {"type": "formula", "criteria": rule, "format": format_})

    def unit_list(self, units: tuple[str, ...]) -> dict[str, Any]:
        """The list of units that a cell offers."""
        return {
            "validate": "list",
            "source": f"={self.units_at[units]}",
            "error_title": "A unit of the list",
            "error_message": f"Choose a unit of the list: those on the sheet {UNITS} are the ones that can be converted here.",
        }


def widest(texts: Iterable[str], at_most: float = 60.0) -> float:
    """A width in which texts can be read; longer ones than `at_most` wrap."""
    return min(at_most, max([12.0, *(len(text) + 2.0 for text in texts)]))


def decimals(values: Sequence[float | None]) -> str:
    """A number format that shows every digit of some numbers, two at least.

    >>> decimals([41.0, 0.125])
    '#,##0.000'
    """
    needed = [len(f"{value:.10f}".rstrip("0").partition(".")[2]) for value in values if value is not None]
    return "#,##0." + "0" * max(2, *needed, 2)
