"""A table on a sheet of its own: one header row, frozen, filtered, with fitting widths and number formats."""

from __future__ import annotations

import math
import textwrap
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from olefinlp.answers.tables import Column, Record, Table
from olefinlp.outputs.workbook_book import Book, cell, clean, letters, put, put_formula

WIDEST = 45
NARROWEST = 7
LINE_HEIGHT = 13.5
ROUNDING = 1e-9
"""Quantities smaller than this part of the largest in their column are the solver's rounding."""

Formulas = Mapping[str, Sequence[str | None]]
"""Column key → a formula per row, None where the row's own value is written."""


@dataclass(frozen=True)
class Grid:
    """Where a table stands: its sheet, its header row, the column of each key; rows count from 0."""

    sheet: str
    header: int
    columns: tuple[str, ...]
    rows: int

    def at(self, row: int, key: str) -> str:
        """The cell of a row of the table, seen from the same sheet."""
        return cell(self.header + 1 + row, self.columns.index(key))

    def on(self, row: int, key: str) -> str:
        """The cell of a row of the table, seen from another sheet."""
        return f"{quoted(self.sheet)}!{self.at(row, key)}"

    def span(self, key: str, first: int = 0, last: int | None = None) -> str:
        """Cells of a column from another sheet; by default all of them."""
        end = self.at(self.rows - 1 if last is None else last, key)
        return f"{self.on(first, key)}:{end}"


def quoted(name: str) -> str:
    """A sheet name as formulas want it."""
    return name if name.isalnum() else f"'{name}'"


def grid_of(table: Table, sheet: str, header: int = 1) -> Grid:
    """Where a table will stand on its sheet."""
    return Grid(sheet, header, tuple(column.key for column in table.columns), len(table.rows))


def cell_range(grid: Grid, key: str) -> str:
    """The cells of a column, seen from the same sheet."""
    return f"{grid.at(0, key)}:{grid.at(max(grid.rows, 1) - 1, key)}"


def number_format(kind: str, values: Sequence[Any]) -> str:
    """How the numbers of a column are shown; small ones get more decimals.

    >>> number_format("quantity", [162.4, 0.2]), number_format("quantity", [0.0272])
    ('#,##0.00', '0.0000')
    """
    largest = size_of(values)
    if kind == "share":
        return "0.0%"
    if kind == "hours":
        return "#,##0" if largest >= 100 else "0.0"
    if kind == "count":
        return "0"
    if kind == "number":
        return "0.0E+00" if 0 < largest < 0.01 else "General"
    return "#,##0.00" if largest >= 1 or largest == 0 else "0.0000"


def size_of(values: Sequence[Any]) -> float:
    """The largest absolute number of a column."""
    return max((abs(v) for v in values if isinstance(v, int | float) and math.isfinite(v)), default=0.0)


def write_table(
    book: Book,
    sheet: Any,
    table: Table,
    *,
    formulas: Formulas | None = None,
    inputs: Mapping[str, Sequence[bool]] | None = None,
    remark: str = "",
    header: int = 1,
    frozen: int = 2,
) -> None:
    """Write a table below a line with its title and note; `header=0` leaves that line out.

    `inputs` marks, by key and row, the cells that people may change.
    """
    rows = table.rows
    if header:
        line = ". ".join(part.rstrip(".") for part in (table.title, table.note, remark) if part) + "."
        sheet.write_string(0, 0, clean(line), book.style("note"))
    lines = 1
    for at, column in enumerate(table.columns):
        values = [row[column.key] for row in rows]
        width = width_of(column, values)
        lines = max(lines, len(textwrap.wrap(column.heading, width - 1, break_long_words=False)))
        text = column.kind == "text"
        sheet.write_string(header, at, clean(column.heading), book.style("header") if text else book.style("header", "right"))
        sheet.set_column(at, at, width)
        given = (formulas or {}).get(column.key)
        marked = (inputs or {}).get(column.key)
        _write_column(book, sheet, (header + 1, at), column, values, given, marked)
    sheet.set_row(header, LINE_HEIGHT * lines + 3)
    sheet.freeze_panes(header + 1, frozen)
    sheet.autofilter(header, 0, header + max(len(rows), 1), len(table.columns) - 1)
    sheet.repeat_rows(header)
    whole = f"A{header + 1}:{letters(len(table.columns) - 1)}{header + 1 + max(len(rows), 1)}"
    sheet.ignore_errors({"number_stored_as_text": whole, "formula_differs": whole})
    if not rows:
        sheet.write_string(header + 1, 0, "none", book.style("note"))


def _write_column(
    book: Book,
    sheet: Any,
    start: tuple[int, int],
    column: Column,
    values: Sequence[Any],
    formulas: Sequence[str | None] | None,
    marked: Sequence[bool] | None,
) -> None:
    first, at = start
    plain = _style_words(column, values)
    style, marked_style = book.style(*plain), book.style(*plain, "input")
    tiny = ROUNDING * size_of(values) if column.kind == "quantity" else 0.0
    for number, value in enumerate(values):
        chosen = marked_style if marked and marked[number] else style
        formula = formulas[number] if formulas else None
        if formula:
            put_formula(sheet, first + number, at, formula, value, chosen)
        elif tiny and isinstance(value, float) and abs(value) < tiny:
            sheet.write_number(first + number, at, 0, chosen)
        else:
            put(sheet, first + number, at, value, chosen)


def _style_words(column: Column, values: Sequence[Any]) -> tuple[str, ...]:
    if column.kind != "text":
        return (number_format(column.kind, values), "top")
    longest = max((len(value) for value in values if isinstance(value, str)), default=0)
    return ("wrap",) if longest > WIDEST else ("top",)


def width_of(column: Column, values: Sequence[Any]) -> float:
    """A width in which the content, and every word of the heading, can be read."""
    words = max(len(word) for word in column.heading.split())
    heading = max(words, min(len(column.heading), 11)) + 3
    if column.kind == "text":
        content = max((len(value) for value in values if isinstance(value, str)), default=0)
    elif column.kind == "number":
        content = 11
    else:
        decimals = number_format(column.kind, values).partition(".")[2].count("0")
        content = len(f"{size_of(values):,.{decimals}f}") + 1
    return min(max(content + 1.5, heading, NARROWEST), WIDEST)


def with_columns(table: Table, columns: Sequence[Column], rows: list[Record]) -> Table:
    """The table with other columns and rows, its name, title and note kept."""
    return Table(table.name, table.title, tuple(columns), rows, table.note)
