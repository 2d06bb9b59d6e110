"""A sheet of cases as a table: its heading row, its columns by their text, its rows with every cell's place."""

from __future__ import annotations

import datetime
import functools
import math
import re
from collections.abc import Callable, Container, Iterator
from dataclasses import dataclass, field

from olefinlp.inputs.case_rows import CaseCell, CaseName, CaseRow, item_of
from olefinlp.inputs.case_sheet_file import MAX_COLUMNS, MAX_ROWS, Sheet, SheetCell
from olefinlp.inputs.case_sheet_names import COLUMN_OF, heading_key, letters, plain
from olefinlp.inputs.cases import FACTOR
from olefinlp.inputs.fields import UNLIMITED
from olefinlp.inputs.findings import Findings, Place, near_name
from olefinlp.inputs.units import SHARES

HEADINGS_WITHIN = 40
"""The heading row is looked for in this many rows."""
READ = ("item", "month", "unit", "basis", "relative_to", "times", "source", "date", "note")
"""Columns of texts that are read; `group` and what is used are for people."""
_NUMBER = re.compile(r"[-+]?(\d+\.?\d*|\.\d+)([eE][-+]?\d+)?", re.ASCII)
_LIKE_A_NUMBER = re.compile(r"[-+(]?[\d.,'\s]*\d[\d.,'\s]*[)%]?", re.ASCII)
NO_VALUE = "holds a formula without a value"
CALCULATE = "open the file in a spreadsheet program and save it"
Resolve = Callable[[SheetCell], SheetCell]


@dataclass
class CaseTable:
    """A sheet while it is read.

    `aside` are columns whose heading is wrong, `bad` the cells that could not be read and hold a number in their place,
    `unread` the items of rows without a readable unit.
    """

    sheet: Sheet
    findings: Findings
    header: int = 0
    columns: dict[str, int] = field(default_factory=dict)
    cases: dict[int, CaseName] = field(default_factory=dict)
    aside: set[int] = field(default_factory=set)
    rows: list[CaseRow] = field(default_factory=list)
    bad: set[Place] = field(default_factory=set)
    unread: set[str] = field(default_factory=set)

    @property
    def items(self) -> set[str]:
        """Items that have a row."""
        return {item_of(row) for row in self.rows} | self.unread

    @property
    def headed(self) -> set[int]:
        """Columns that have a heading."""
        return {*self.columns.values(), *self.cases, *self.aside}

    def error(self, row: int, column: int, path: str, message: str, hint: str = "") -> None:
        """A finding at a cell."""
        self.findings.error(self.sheet.place(row, column), path, message, hint)

    @functools.cached_property
    def filled(self) -> dict[int, dict[int, SheetCell]]:
        """Rows of the sheet that hold something: row → column → cell, in order."""
        found: dict[int, dict[int, SheetCell]] = {}
        for (row, column), cell in sorted(self.sheet.cells.items(), key=lambda entry: entry[0]):
            if not cell.is_blank:
                found.setdefault(row, {})[column] = cell
        return found

    def below(self) -> Iterator[tuple[int, dict[int, SheetCell]]]:
        """Rows below the headings that hold something."""
        yield from ((row, cells) for row, cells in self.filled.items() if row > self.header)


def read_table(sheet: Sheet, findings: Findings, resolve: Resolve | None = None, cases: Container[str] = ()) -> CaseTable | None:
    """The headings and rows of a sheet; None with a finding where it is no table of cases.

    `resolve` gives the value of a heading that is a formula without one; `cases` are headings known to be cases.
    """
    table = CaseTable(sheet, findings)
    rows, columns = max(table.filled, default=0), max((max(cells) for cells in table.filled.values()), default=0)
    if rows > MAX_ROWS or columns > MAX_COLUMNS:
        text = f"reaches to {letters(columns)}{rows}: more than {MAX_ROWS:,} rows or {MAX_COLUMNS:,} columns"
        findings.error(sheet.place(), "", text, "delete what stands far away from the table")
        return None
    for row in range(1, HEADINGS_WITHIN + 1):
        keys = {heading_key(cell.value) for cell in table.filled.get(row, {}).values() if isinstance(cell.value, str)}
        if {"item", "unit"} <= keys:
            table.header = row
            break
    else:
        hint = "the row of headings holds `Item`, `Unit` and the names of the cases"
        findings.error(sheet.place(), "", f"none of its first {HEADINGS_WITHIN} rows has the headings Item and Unit", hint)
        return None
    _read_headings(table, resolve, cases)
    _check_columns(table)
    _check_merged(table)
    for row, cells in table.below():
        _read_row(table, row, cells)
    _warn_of_hidden(table)
    return table


def _read_headings(table: CaseTable, resolve: Resolve | None, cases: Container[str]) -> None:
    seen: dict[str, int] = {}
    for column, cell in table.filled[table.header].items():
        if cell.formula and cell.value is None and resolve:
            cell = resolve(cell)
        text = _heading(table, column, cell)
        if not text:
            continue
        key = heading_key(text)
        if key in seen:
            first = f"the first: {table.sheet.place(table.header, seen[key]).column}"
            table.error(table.header, column, "", f"two columns have the heading `{text}`", first)
            table.aside.add(column)
        elif key in COLUMN_OF:
            table.columns[COLUMN_OF[key]] = column
        elif key not in cases and _holds_words(table, column):
            known = near_name(text, [known.capitalize() for known in COLUMN_OF])
            message = f"`{text}` is no column of a case sheet, and no case: a case holds numbers"
            table.error(
                table.header, column, "", message, known if known.startswith("did") else "take its heading and texts away"
            )
            table.aside.add(column)
        else:
            table.cases[column] = CaseName(text, table.sheet.place(table.header, column))
        seen.setdefault(key, column)


def _heading(table: CaseTable, column: int, cell: SheetCell) -> str:
    """The text of a heading; empty with a finding where it is none."""
    wrong = _not_a_value(cell, "heading")
    if wrong:
        table.error(table.header, column, "", *wrong)
        table.aside.add(column)
        return ""
    return f"{cell.value:.15g}" if isinstance(cell.value, float | int) else plain(str(cell.value or ""))


def _not_a_value(cell: SheetCell, what: str = "cell") -> tuple[str, str] | None:
    """Message and hint for what is neither a number nor a text."""
    if cell.is_error:
        return f"holds the error `{cell.value}`", "mend its formula, or write the value itself"
    if cell.formula and cell.value is None:
        return NO_VALUE, CALCULATE
    if isinstance(cell.value, bool):
        return f"holds {str(cell.value).upper()}", "write a number" if what == "cell" else "write the name of a case as text"
    if isinstance(cell.value, datetime.date | datetime.time | datetime.timedelta):
        if what == "heading":
            return "is a date, not a heading", "write it as text: an apostrophe before it, or the cell formatted as text"
        return (
            f"holds a date or time ({str(cell.value).removesuffix(' 00:00:00')})",
            "give the cell the format of a number and write the number again",
        )
    return None


def _holds_words(table: CaseTable, column: int) -> bool:
    """Whether a column holds texts and nothing that could have been meant as a number."""
    values = [cells[column] for _, cells in table.below() if column in cells]
    texts = [plain(cell.value) for cell in values if isinstance(cell.value, str) and not cell.is_error]
    words = [text for text in texts if not _LIKE_A_NUMBER.fullmatch(text) and text.lower() != UNLIMITED]
    return bool(values) and len(words) == len(values)


def _check_columns(table: CaseTable) -> None:
    """A column without a heading holds nothing: else it would be a case that nobody sees."""
    told: set[int] = set()
    for row, cells in table.below():
        for column in cells:
            if column not in table.headed | told:
                told.add(column)
                hint = f"write the name of the case into {letters(column)}{table.header}, or clear the column"
                table.error(row, column, "", f"column {letters(column)} holds values but has no heading", hint)


def _check_merged(table: CaseTable) -> None:
    last = max((row for row, _ in table.below()), default=table.header)
    for text, top, bottom, left, right in table.sheet.merged:
        if bottom >= table.header and top <= last and any(left <= column <= right for column in table.headed):
            place = Place(table.sheet.file, 0, f"{table.sheet.name}!{text}")
            table.findings.error(place, "", "cells of the table are merged", "unmerge them, so that each has its own value")


def _is_merged(table: CaseTable, row: int, column: int) -> bool:
    return any(top <= row <= bottom and left <= column <= right for _, top, bottom, left, right in table.sheet.merged)


def _read_row(table: CaseTable, row: int, cells: dict[int, SheetCell]) -> None:
    read = {key: _text(table, row, key, cells) for key in READ if key in table.columns}
    if read["item"] is None or read["unit"] is None:
        table.unread.add(read["item"] or "")
        return
    texts = {key: text or "" for key, text in read.items()}
    item = texts["item"]
    own = {column: cells[column] for column in table.cases if column in cells}
    if not item:
        if (own or texts["unit"]) and not _is_merged(table, row, table.columns["item"]):
            place = next(iter(own), table.columns["unit"])
            table.error(
                row, place, "", "this row holds values but no item", f"write its item into {letters(table.columns['item'])}{row}"
            )
        return
    if not own and not texts["unit"]:
        return  # a title between rows
    places = {key: table.sheet.place(row, column) for key, column in table.columns.items() if key in READ}
    unit, scale = texts["unit"], 1.0
    if item.endswith(f".{FACTOR}") and unit in SHARES:
        scale, texts["unit"] = SHARES[unit], ""  # a factor is written without a unit in the scenario
    found: dict[str, CaseCell] = {}
    for column, cell in own.items():
        value = _value(table, row, column, item, unit, cell)
        if value is not None:
            if isinstance(value, float) and scale != 1.0:
                value = float(f"{value * scale:.14g}")
            found[table.cases[column].name] = CaseCell(value, table.sheet.place(row, column))
    table.rows.append(
        CaseRow(places["item"], texts, found, places | {c.name: table.sheet.place(row, n) for n, c in table.cases.items()})
    )


def _text(table: CaseTable, row: int, key: str, cells: dict[int, SheetCell]) -> str | None:
    """The text in a column of texts, a date as text where a program has made one of it; None where it cannot be read."""
    cell = cells.get(table.columns[key])
    if cell is None:
        return ""
    value = cell.value
    if isinstance(value, datetime.datetime | datetime.date) and not cell.is_error:
        return value.strftime("%Y-%m" if key == "month" else "%Y-%m-%d")
    wrong = _not_a_value(cell)
    if wrong:
        table.error(row, table.columns[key], "", *wrong)
        return None
    return f"{value:.15g}" if isinstance(value, float | int) else plain(str(value))


def _value(table: CaseTable, row: int, column: int, item: str, unit: str, cell: SheetCell) -> float | str | None:
    """What a case says in a cell; where that is nothing sensible a finding, and a number that stands for it."""
    wrong = _not_a_value(cell)
    value = cell.value
    if not wrong and isinstance(value, str):
        text = plain(value)
        if not text:
            return None
        if "," in text and _LIKE_A_NUMBER.fullmatch(text):
            wrong = (f"`{text}` can be read in two ways", "write it as a number: a point for decimals, no thousands mark")
        elif _NUMBER.fullmatch(text):
            value = float(text)
        else:
            return text
    if not wrong and not math.isfinite(float(value)):
        wrong = ("holds no finite number", "write a number")
    if not wrong and cell.percent and isinstance(cell.value, float | int) and unit and unit not in SHARES:
        wrong = (f"is formatted as a percentage, but the unit of its row is {unit}", "give the cell the format of a number")
    if wrong:
        table.error(row, column, item, *wrong)
        table.bad.add(table.sheet.place(row, column))
        return 1.0
    if cell.percent and isinstance(cell.value, float | int) and unit in SHARES and unit != "fraction":
        return float(f"{value * 100:.14g}")  # what is shown: 7 for 0.07, and no digits from the multiplication
    return float(value)


def _warn_of_hidden(table: CaseTable) -> None:
    hidden = [row for row, cells in table.below() if row in table.sheet.hidden_rows and table.columns["item"] in cells]
    columns = [column for column in (*table.columns.values(), *table.cases) if column in table.sheet.hidden_columns]
    for word, names in (("row", [str(row) for row in hidden]), ("column", [letters(column) for column in sorted(columns)])):
        if names:
            verb = "are hidden, and are" if len(names) > 1 else "is hidden, and is"
            plural = "s" if len(names) > 1 else ""
            message = f"{word}{plural} {', '.join(names)} {verb} read all the same"
            table.findings.warn(table.sheet.place(), "", message, f"show the {word}{plural} to see what is planned with")
