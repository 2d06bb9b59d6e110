"""CSV tables with the place of every cell; a column of numbers carries its unit in its header."""

from __future__ import annotations

import csv
import io
import math
import os
import re
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass

from olefinlp.inputs.findings import Findings, Place, near_name, shown
from olefinlp.inputs.units import Quantity, Unit, UnitError, parse_unit
from olefinlp.inputs.yaml_files import read_text

_HEADER = re.compile(r"^(?P<name>[^\[\]]+?)\s*(?:\[(?P<unit>[^\[\]]+)\])?$")
MAX_TABLE_BYTES = 64 * 1024 * 1024


@dataclass(frozen=True, slots=True)
class Column:
    """A column: its name, and the unit in its header (empty for texts and pure numbers)."""

    name: str
    unit: Unit | None
    header: str


@dataclass(frozen=True, slots=True)
class Row:
    """One row of a table: cells by column name, stripped; `line` in the file."""

    table: Table
    line: int
    cells: dict[str, str]

    def place(self, column: str = "") -> Place:
        """Where this row, or one cell of it, stands."""
        return Place(self.table.file, self.line, column)

    def text(self, column: str) -> str:
        """The text of a cell."""
        return self.cells[column]

    def number(self, column: str, findings: Findings) -> float | None:
        """The number in a cell; None when blank, or not a number (with a finding)."""
        text = self.cells[column]
        if not text:
            return None
        try:
            value = float(text) if re.fullmatch(r"[-+0-9.eE]+", text) else math.nan
        except ValueError:
            value = math.nan
        if not math.isfinite(value):
            findings.error(
                self.place(column),
                "",
                f"`{text}` is not a number",
                "a point for decimals, no thousands mark, no unit in the cell",
            )
            return None
        return value

    def quantity(self, column: str, findings: Findings, unit: Unit | None = None) -> Quantity | None:
        """The number in a cell with its column's unit (or the unit given)."""
        value = self.number(column, findings)
        used = unit or self.table.columns[column].unit
        if value is None or used is None:
            return None
        return Quantity(value, used, f"{self.cells[column]} {used.text}")


@dataclass(frozen=True)
class Table:
    """A CSV table as read: columns by name, rows in order."""

    file: str
    columns: dict[str, Column]
    rows: tuple[Row, ...]

    def __iter__(self) -> Iterator[Row]:
        return iter(self.rows)

    def unit(self, column: str) -> Unit | None:
        """The unit in a column's header."""
        return self.columns[column].unit


def read_table(
    path: str | os.PathLike[str],
    findings: Findings,
    *,
    required: Sequence[str],
    optional: Iterable[str] = (),
    others: bool = False,
    unit_columns: Iterable[str] = (),
) -> Table | None:
    """Read a CSV table; None with findings when its header does not serve.

    `required` columns must be there, `optional` may be; `others` lets more columns in
    (components, cuts, price cases). `unit_columns` must carry a unit in their header.
    """
    text = read_text(path, findings, MAX_TABLE_BYTES)
    if text is None:
        return None
    file = shown(path)
    try:
        reader = csv.reader(io.StringIO(text, newline=""), strict=True)
        header = next(reader)
        lines = [(reader.line_num, cells) for cells in reader]
    except (csv.Error, StopIteration) as error:
        findings.error(Place(file), "", f"is not a comma-separated table: {error}")
        return None
    columns = _columns(header, file, findings, required, list(optional), others, set(unit_columns))
    if columns is None:
        return None
    return _table(file, columns, lines, findings)


def _columns(
    header: list[str],
    file: str,
    findings: Findings,
    required: Sequence[str],
    optional: list[str],
    others: bool,
    unit_columns: set[str],
) -> dict[str, Column] | None:
    place = Place(file, 1)
    if len(header) == 1 and any(mark in header[0] for mark in ";\t"):
        findings.error(place, "", "columns must be separated by commas")
        return None
    columns: dict[str, Column] = {}
    before = len(findings.errors)
    for title in header:
        found = _HEADER.match(title.strip())
        if not found:
            findings.error(place, "", f"`{title}` is not a column name", "write `name` or `name [unit]`")
            continue
        name, unit_text = found["name"].strip(), found["unit"]
        known = [*required, *optional]
        if name in columns:
            findings.error(place, "", f"the column `{name}` is there twice")
        elif not others and name not in known:
            findings.error(place, "", f"unknown column `{name}`", near_name(name, known))
        columns[name] = Column(name, _header_unit(unit_text, name, place, findings), title.strip())
        if name in unit_columns and not unit_text:
            findings.error(place, "", f"the column `{name}` does not carry its unit", f"write `{name} [unit]`")
    for name in required:
        if name not in columns:
            findings.error(place, "", f"the column `{name}` is missing", near_name(name, columns))
    return columns if len(findings.errors) == before else None


def _header_unit(text: str | None, name: str, place: Place, findings: Findings) -> Unit | None:
    if not text:
        return None
    try:
        return parse_unit(text.strip())
    except UnitError as error:
        findings.error(place, "", f"column `{name}`: {error}", error.hint)
        return None


def _table(file: str, columns: dict[str, Column], lines: list[tuple[int, list[str]]], findings: Findings) -> Table:
    names = list(columns)
    rows: list[Row] = []
    table = Table(file, columns, ())
    for line, cells in lines:
        if not any(cell.strip() for cell in cells):
            continue
        if len(cells) != len(names):
            findings.error(
                Place(file, line),
                "",
                f"has {len(cells)} cells, the header has {len(names)}",
                'put text that holds a comma into double quotes: "…"',
            )
            continue
        rows.append(Row(table, line, {name: cell.strip() for name, cell in zip(names, cells, strict=True)}))
    if not rows:
        findings.error(Place(file, 1), "", "has no rows")
    object.__setattr__(table, "rows", tuple(rows))
    return table
