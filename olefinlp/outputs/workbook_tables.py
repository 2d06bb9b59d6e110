"""A table on a sheet of its own: one header row, frozen, filtered, with fitting widths and number formats."""

from __future__ import annotations

import math
import textwrap
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from olefinlp.answers.tables import Column, Record, Table
from olefinlp.outputs.workbook_book import Book, cell, clean, letters, put, put_formula

WIDEST, WIDEST_WORD, NARROWEST = 45, 70, 7
"""Widths of columns, in digits: texts wrap at the first, unless a single word is longer."""

LINE_HEIGHT = 13.5
FILTER_ARROW = 4
"""Width that the arrow of the filter takes from a heading that stands at the right."""

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
    """How the numbers of a column are shown; when most are small, all get more decimals.

    >>> number_format("quantity", [162.4, 0.02]), number_format("quantity", [0.0272])
    ('#,##0.00', '0.000000')
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
    sizes = sorted(abs(v) for v in values if v and isinstance(v, int | float))
    return "0.000000" if sizes and sizes[len(sizes) // 2] < 0.1 else "#,##0.00"


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
    after_number, wrapped = False, dict[str, float]()
    for at, column in enumerate(table.columns):
        values = [row[column.key] for row in rows]
        width = width_of(column, values)
        room = width - (1 if column.kind == "text" else FILTER_ARROW)
        lines = max(lines, len(textwrap.wrap(column.heading, int(room), break_long_words=False)))
        style = _style_words(column, values)
        if "wrap" in style:
            wrapped[column.key] = width
        words = ["indent"] if after_number and column.kind == "text" else []
        after_number = column.kind != "text"
        sheet.write_string(header, at, clean(column.heading), book.style("header", *(["filtered"] if after_number else words)))
        sheet.set_column(at, at, width)
        given, marked = (formulas or {}).get(column.key), (inputs or {}).get(column.key)
        _write_column(book, sheet, (header + 1, at), (*style, *words), column, values, given, marked)
    sheet.set_row(header, LINE_HEIGHT * lines + 3)
    _set_up(sheet, table, header, frozen)
    _set_heights(sheet, table, header, wrapped)
    if not rows:
        sheet.write_string(header + 1, 0, "none", book.style("note"))


def _set_heights(sheet: Any, table: Table, header: int, wrapped: dict[str, float]) -> None:
    """Room for texts that wrap; programs differ in whether they make it themselves."""
    for number, row in enumerate(table.rows, header + 1):
        lines = max((math.ceil(len(row[key] or "") / (width - 2)) for key, width in wrapped.items()), default=1)
        if lines > 1:
            sheet.set_row(number, LINE_HEIGHT * lines)


def _set_up(sheet: Any, table: Table, header: int, frozen: int) -> None:
    """What stays in view, the filter, the rows printed on each page."""
    last, right = header + max(len(table.rows), 1), len(table.columns) - 1
    sheet.freeze_panes(header + 1, frozen)
    sheet.autofilter(header, 0, last, right)
    sheet.repeat_rows(header)
    whole = f"A{header + 1}:{letters(right)}{last + 1}"
    sheet.ignore_errors({"number_stored_as_text": whole, "formula_differs": whole})


def _write_column(
    book: Book,
    sheet: Any,
    start: tuple[int, int],
    plain: tuple[str, ...],
    column: Column,
    values: Sequence[Any],
    formulas: Sequence[str | None] | None,
    marked: Sequence[bool] | None,
) -> None:
    first, at = start
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
    return ("wrap",) if _longest(values) > WIDEST - 2 else ("top",)


def _longest(values: Sequence[Any]) -> int:
    return max((len(value) for value in values if isinstance(value, str)), default=0)


def width_of(column: Column, values: Sequence[Any]) -> float:
    """A width in which the content, and every word of the heading, can be read."""
    words = max(len(word) for word in column.heading.split())
    heading = max(words, min(len(column.heading), 11)) + (3 if column.kind == "text" else FILTER_ARROW + 1)
    if column.kind == "text":
        content = _longest(values)
        if content > WIDEST - 2:
            word = max(len(word) for value in values if isinstance(value, str) for word in value.split() or [""])
            return min(max(WIDEST, word + 2), WIDEST_WORD)
    elif column.kind == "number":
        content = 11
    else:
        decimals = number_format(column.kind, values).partition(".")[2].count("0")
        content = len(f"{size_of(values):,.{decimals}f}") + 1
    return min(max(content + 2.0, heading, NARROWEST), WIDEST)


def with_columns(table: Table, columns: Sequence[Column], rows: list[Record]) -> Table:
    """The table with other columns and rows, its name, title and note kept."""
    return Table(table.name, table.title, tuple(columns), rows, table.note)
