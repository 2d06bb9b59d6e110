"""A sheet of a sweep's workbook while it is written from top to bottom: its title, lines of text, tables below each other."""

from __future__ import annotations

import math
import textwrap
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from olefinlp.answers.bridge import decimals
from olefinlp.answers.tables import Column, Table
from olefinlp.outputs.workbook_book import Book, clean, put, put_formula
from olefinlp.outputs.workbook_charts import FONT, GRID
from olefinlp.outputs.workbook_tables import LINE_HEIGHT, Formulas, Grid, number_format, size_of

LINE_LENGTH = 165
"""Letters of a line of text across a page."""
ROW_PIXELS = 20
MOST_COLUMNS = 60


@dataclass
class Page:
    """One sheet; `row` is the next free one, from 0; `widths` are those of the first column and of all others."""

    book: Book
    sheet: Any
    name: str
    widths: tuple[float, float] = (52, 13)
    row: int = 0

    def head(self, title: str, lines: Sequence[str] = ()) -> None:
        """The title, and lines below it."""
        self.sheet.hide_gridlines(2)
        self.sheet.set_column(0, 0, self.widths[0])
        self.sheet.set_column(1, MOST_COLUMNS, self.widths[1])
        put(self.sheet, 0, 0, title[:1].upper() + title[1:], self.book.style("title"))
        self.sheet.set_row(0, 24)
        self.row = 1
        for line in lines:
            self.text(line)

    def text(self, line: str, *words: str) -> None:
        """A line of text, on as many rows as it needs."""
        for part in textwrap.wrap(clean(line), LINE_LENGTH) or [""]:
            put(self.sheet, self.row, 0, part, self.book.style(*words))
            self.row += 1

    def title(self, text: str) -> None:
        """The title of what follows, below a free row."""
        self.row += 1
        put(self.sheet, self.row, 0, text, self.book.style("block"))
        self.row += 1

    def table(
        self,
        table: Table,
        *,
        title: bool = True,
        formulas: Callable[[Grid], Formulas] | None = None,
        formats: Mapping[str, str] | None = None,
    ) -> Grid:
        """A table below its title and note; gives where it stands.

        `formulas` are asked for with that place; `formats` are number formats by key.
        """
        if title:
            self.title(table.title)
            if table.note:
                self.text(table.note, "note")
        grid = Grid(self.name, self.row, tuple(column.key for column in table.columns), len(table.rows))
        given = formulas(grid) if formulas else {}
        lines = 1
        for at, column in enumerate(table.columns):
            lines = max(lines, len(textwrap.wrap(column.heading, int(self.widths[min(at, 1)]) - 1)))
            self._column(grid, at, column, table, given, formats or {})
        self.sheet.set_row(self.row, LINE_HEIGHT * lines + 3)
        self._heights(grid, table)
        self.row += 1 + max(len(table.rows), 1)
        if not table.rows:
            put(self.sheet, self.row - 1, 0, "none", self.book.style("note"))
        return grid

    def _column(self, grid: Grid, at: int, column: Column, table: Table, formulas: Formulas, formats: Mapping[str, str]) -> None:
        number = column.kind != "text"
        after_number = at > 0 and table.columns[at - 1].kind != "text"
        words = ["right"] if number and at else ["indent"] if after_number else []
        put(self.sheet, self.row, at, column.heading, self.book.style("header", *words))
        values = [row.get(column.key) for row in table.rows]
        form = formats.get(column.key) or cell_format(column.kind, values)
        style = self.book.style(form, "top", *([] if at else ["indent"])) if number else self._text_style(at, values, words)
        given = formulas.get(column.key)
        for place, value in enumerate(values):
            formula = given[place] if given else None
            if formula:
                put_formula(self.sheet, grid.header + 1 + place, at, formula, "" if value is None else value, style)
            else:
                put(
                    self.sheet, grid.header + 1 + place, at, value, self.book.style("right", "top") if value == NO_PLAN else style
                )

    def _text_style(self, at: int, values: Sequence[Any], words: Sequence[str]) -> Any:
        """Names in the first column wrap where one of them is too long for it."""
        longest = max((len(value) for value in values if isinstance(value, str)), default=0)
        return self.book.style("wrap" if at == 0 and longest > self.widths[0] - 2 else "top", *words)

    def _heights(self, grid: Grid, table: Table) -> None:
        """Room for names that wrap."""
        key, width = table.columns[0].key, int(self.widths[0]) - 2
        for number, row in enumerate(table.rows, grid.header + 1):
            lines = len(textwrap.wrap(row[key], width)) if isinstance(row[key], str) else 1
            if lines > 1:
                self.sheet.set_row(number, LINE_HEIGHT * lines)


NO_PLAN = "no plan"


def cell_format(kind: str, values: Sequence[Any]) -> str:
    """How numbers of a column are shown: money with as many decimals as show five figures, written values as written.

    >>> cell_format("money", [26808.7, 25000.0]), cell_format("number", [534.0, 0.95]), cell_format("number", [41.23456789])
    ('#,##0.0', 'General', '#,##0.00')
    """
    if kind == "money":
        return f"#,##0.{'0' * decimals(size_of(values))}"
    if kind == "number":
        known = [value for value in values if isinstance(value, int | float) and math.isfinite(value)]
        if all(float(f"{value:.6g}") == value for value in known):
            return "General"
        return "#,##0.00" if size_of(known) >= 10 else "0.0000"
    return number_format(kind, values)


def difference_format(size: float) -> str:
    """The format of differences of amounts of a size: what rounds to zero has no sign.

    >>> difference_format(26808.7)
    '[>=0]#,##0.0;[<=-0.05]-#,##0.0;0.0'
    """
    zeros = "0" * decimals(size)
    return f"[>=0]#,##0.{zeros};[<=-{0.5 * 10.0 ** -len(zeros):.{len(zeros) + 1}f}]-#,##0.{zeros};0.{zeros}"


def relative(reference: str) -> str:
    """A cell of the same sheet, relative, so that formulas of a column read alike."""
    return reference.replace("$", "")


def axis_format(size: float) -> str:
    """The format of an axis of money: small numbers keep their decimals.

    >>> axis_format(26808.7), axis_format(3.684)
    ('#,##0', 'General')
    """
    return "#,##0" if size >= 100 else "General"


def axis(name: str, form: str, **more: Any) -> dict[str, Any]:
    """An axis of numbers with its name."""
    plain = {"name": name, "name_font": FONT | {"bold": False}, "num_font": FONT, "num_format": form, "line": {"color": GRID}}
    return plain | {"major_gridlines": {"visible": True, "line": {"color": GRID}}} | more
