"""Cases of a sweep from written values: lists and steps of numbers, changes in per cent, tables with a row a case."""

from __future__ import annotations

import math
import os
import re
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from olefinlp.inputs.findings import Findings, Place, near_name
from olefinlp.inputs.scenario import Scenario
from olefinlp.inputs.sweep_cases import GRID, LIST, ONE_AT_A_TIME, TABLE, SweepCases, Values
from olefinlp.inputs.sweep_numbers import (
    MOST_CASES,
    NUMBER_TEXT,
    Entry,
    Number,
    Percent,
    Where,
    named_number,
    plain_number,
    refuse_percent_of_nothing,
    refuse_twice,
    too_many,
)
from olefinlp.inputs.sweep_numbers import percent as percent
from olefinlp.inputs.tables import read_table
from olefinlp.inputs.units import parse_unit
from olefinlp.inputs.varied import CALLED
from olefinlp.inputs.yaml_files import Path_

CASE = "case"
"""The column of a table that names its cases."""
WAYS = (LIST, GRID, ONE_AT_A_TIME)
_HINT_CELL = "a point for decimals, no thousands mark, no unit in the cell"


def cases_of(scenario: Scenario, vary: object, how: str | None = None, labels: Sequence[str] = ()) -> SweepCases:
    """The cases of a sweep of one scenario.

    `vary` is one of

    * a mapping from numbers to values. A number is its path, with a month where only that month varies:
      `feeds.ethane.contract`, `feeds.ethane.contract @ 2031-05`. Values are in the unit in which the number
      is written (or texts with that unit): a list, range or array; `{"from": 500, "to": 570, "step": 5}` or
      with `"count": 15`, both ends included; `percent(-10, 0, 10)` or `{"percent": [-10, 0, 10]}` for changes
      of today's value; each mapping may have a `"month"`. `how` is `"grid"` (all combinations in the order
      written, the last fastest; what is done with several numbers if nothing is said), or `"one at a time"`
      (the first case is today, then each value of each number while the others are as today).
    * a table with a row a case: a `DataFrame`, a list of records, or the path of a csv file. Headings are
      numbers as above, with their unit in brackets if wished; `feeds.ethane.contract %` holds changes in per
      cent. A column `case` names the cases. A blank cell means as today.

    `labels` names the cases of a mapping, one each. Raises `InputError` with everything that is wrong.

    >>> from olefinlp import read_scenario
    >>> march = read_scenario("scenarios/brackwater_2031_03.yaml")
    >>> cases = cases_of(march, {"feeds.ethane.contract": {"from": 38, "to": 41, "step": 1}})
    >>> cases.how, cases.varied[0].unit, cases.values[:, 0].tolist()
    ('list', 'USc/gal', [38.0, 39.0, 40.0, 41.0])
    """
    findings, names = Findings(), tuple(labels)
    if isinstance(vary, Mapping):
        cases = mapping_cases(scenario, vary, how, names, _called, findings)
    else:
        cases = _cases_of_table(scenario, vary, how, names, findings)
    findings.stop_on_errors()
    assert cases is not None
    return cases


def _called(_: Path_) -> Place:
    return CALLED


# ---------------------------------------------------------------------------------- mappings


def mapping_cases(
    scenario: Scenario,
    vary: Mapping[Any, object],
    how: str | None,
    labels: Sequence[str],
    where: Where,
    findings: Findings,
) -> SweepCases | None:
    """Cases of values of each number; None with findings. `where` is asked for `("vary", number, …)` and `("how",)`."""
    numbers: list[Number] = []
    values: list[list[float]] = []
    for name, written in vary.items():
        number, read = _varied(scenario, name, written, where, findings)
        if number:
            numbers.append(number)
            refuse_percent_of_nothing(number, findings)
        values.append(read or [])
    refuse_twice(numbers, findings)
    way = _way(how, len(vary), where, findings)
    if not vary:
        findings.error(where(("vary",)), "vary", "no number varies")
    if findings.errors or not way:
        return None
    count = 1 + sum(map(len, values)) if way == ONE_AT_A_TIME else math.prod(map(len, values))
    if count > MOST_CASES:
        findings.error(where(("vary",)), "vary", too_many(count), "take fewer values, or `one at a time`" if way == GRID else "")
        return None
    matrix = _one_at_a_time(values) if way == ONE_AT_A_TIME else _grid(values)
    _check_labels(labels, count, where, findings)
    if findings.errors:
        return None
    return SweepCases(
        scenario, tuple(n.varied for n in numbers), tuple(n.percent for n in numbers), matrix, way, tuple(map(str, labels))
    )


def _varied(
    scenario: Scenario, name: Any, written: object, where: Where, findings: Findings
) -> tuple[Number | None, list[float] | None]:
    """One number of a mapping, and its values."""
    at: Path_ = ("vary", name)
    month = str(written.get("month") or "") if isinstance(written, Mapping) else ""
    number = named_number(scenario, name, where(at), findings, month)
    by_percent = isinstance(written, Percent) or (isinstance(written, Mapping) and "percent" in written)
    by_percent = by_percent or bool(number and number.percent)
    if number and by_percent:
        number = Number(number.written, number.varied, True, number.place)
    unit = "%" if by_percent else number.varied.unit if number else None
    return number, Entry(str(name), unit, at, where, findings).values(written)


def _way(how: str | None, numbers: int, where: Where, findings: Findings) -> str | None:
    if how is not None and how not in WAYS:
        findings.error(where(("how",)), "how", f"`{how}` is not one of: {', '.join(WAYS)}", near_name(str(how), WAYS))
        return None
    if numbers > 1 and how == LIST:
        hint = f"write `{GRID}` or `{ONE_AT_A_TIME}`; for values that move together a table with a row a case"
        findings.error(where(("how",)), "how", "a list is of one number, several vary", hint)
        return None
    if numbers == 1:
        return LIST if how in (None, GRID) else how
    return how or GRID


def _grid(values: Sequence[Sequence[float]]) -> Values:
    """All combinations, the last number fastest."""
    return np.stack([part.ravel() for part in np.meshgrid(*map(np.asarray, values), indexing="ij")], axis=1).astype(float)


def _one_at_a_time(values: Sequence[Sequence[float]]) -> Values:
    """Today, then each value of each number with the others as today."""
    matrix = np.full((1 + sum(map(len, values)), len(values)), np.nan)
    row = 1
    for column, own in enumerate(values):
        matrix[row : row + len(own), column] = own
        row += len(own)
    return matrix


def _check_labels(labels: Sequence[str], count: int, where: Where, findings: Findings) -> None:
    if labels and len(labels) != count:
        findings.error(where(("labels",)), "labels", f"there are {len(labels):,} labels for {count:,} cases")
    _check_names([(str(label), where(("labels", number))) for number, label in enumerate(labels)], "labels", findings)


def _check_names(names: Iterable[tuple[str, Place]], path: str, findings: Findings) -> None:
    """Names of cases must be told apart; a case without one is numbered."""
    seen: dict[str, Place] = {}
    for name, place in names:
        key = " ".join(name.split()).casefold()
        if not key:
            continue
        if key in seen:
            first = f"the first: {seen[key]}" if seen[key] != place else ""
            findings.error(place, path, f"two cases are named `{name}`", first)
        seen.setdefault(key, place)


# ---------------------------------------------------------------------------------- tables


@dataclass(frozen=True)
class CaseTable:
    """A table with a row a case, from a file or from Python: headings, units in them, cells (None: blank)."""

    source: str
    headings: tuple[str, ...]
    units: tuple[str, ...]
    rows: Sequence[Sequence[object]]
    place: Callable[[int, int], Place]
    """Row from 0 (−1: the heading) and column → place."""


def _cases_of_table(
    scenario: Scenario, vary: object, how: str | None, labels: Sequence[str], findings: Findings
) -> SweepCases | None:
    if how not in (None, TABLE):
        findings.error(CALLED, "how", f"`{how}` is for values of each number, a table has a row a case", "leave `how` out")
    if labels:
        findings.error(CALLED, "labels", "the cases of a table are named in it", f"give the table a column `{CASE}`")
    table = read_case_table(vary, findings) if isinstance(vary, str | os.PathLike) else _table_of(vary, findings)
    return table_cases(scenario, table, findings) if table else None


def read_case_table(path: str | os.PathLike[str], findings: Findings) -> CaseTable | None:
    """A csv table with a row a case; None with findings where it cannot be read."""
    table = read_table(path, findings, required=(), optional=(CASE,), others=True)
    if table is None:
        return None
    names = tuple(table.columns)
    lines = [row.line for row in table.rows]

    def place(row: int, column: int) -> Place:
        return Place(table.file, lines[row] if row >= 0 else 1, names[column])

    units = tuple(column.unit.text if column.unit else "" for column in table.columns.values())
    return CaseTable(table.file, names, units, [[row.cells[name] or None for name in names] for row in table.rows], place)


def _table_of(vary: object, findings: Findings) -> CaseTable | None:
    """A table given in Python: a data frame, or a list of records."""
    if hasattr(vary, "columns") and hasattr(vary, "notna"):
        frame: Any = vary
        headings = [str(name) for name in frame.columns]
        rows: Sequence[Sequence[object]] = frame.astype(object).where(frame.notna(), None).to_numpy().tolist()
    elif isinstance(vary, Sequence) and not isinstance(vary, str | bytes) and all(isinstance(row, Mapping) for row in vary):
        headings = list(dict.fromkeys(str(name) for row in vary for name in row))
        rows = [[row.get(name) for name in headings] for row in vary]
    else:
        findings.error(CALLED, "vary", "is no mapping, table, list of records or path of a csv file")
        return None
    parts = [re.fullmatch(r"([^\[\]]+?)\s*(?:\[([^\[\]]+)\])?", heading.strip()) for heading in headings]
    names = [part[1] if part else heading for part, heading in zip(parts, headings, strict=True)]

    def place(row: int, column: int) -> Place:
        return Place(CALLED.file, row + 1, names[column])

    for name in sorted({name for name in names if names.count(name) > 1}):
        findings.error(CALLED, "", f"the column `{name}` is there twice")
    if not rows:
        findings.error(CALLED, "vary", "has no rows")
    units = [(part[2] or "") if part else "" for part in parts]
    return CaseTable("", tuple(names), tuple(units), rows, place)


def table_cases(scenario: Scenario, table: CaseTable, findings: Findings) -> SweepCases | None:
    """The cases of a table; None with findings."""
    columns = [column for column, name in enumerate(table.headings) if name != CASE]
    numbers = [_column(scenario, table, column, findings) for column in columns]
    refuse_twice((number for number in numbers if number), findings)
    if not columns:
        findings.error(Place(table.source or CALLED.file), "", "no number varies", "head a column with the path of a number")
    if len(table.rows) > MOST_CASES:
        findings.error(Place(table.source or CALLED.file), "", too_many(len(table.rows)))
        return None
    matrix = np.full((len(table.rows), len(columns)), np.nan)
    for place, column in enumerate(columns):
        for row, cells in enumerate(table.rows):
            matrix[row, place] = _cell(cells[column], table, row, column, findings)
    labels = _labels(table, findings)
    if findings.errors:
        return None
    known = [number for number in numbers if number]
    return SweepCases(
        scenario,
        tuple(number.varied for number in known),
        tuple(number.percent for number in known),
        matrix,
        TABLE,
        labels,
        f"cases of {table.source}" if table.source else "",
    )


def _column(scenario: Scenario, table: CaseTable, column: int, findings: Findings) -> Number | None:
    """The number that a column varies."""
    place = table.place(-1, column)
    number = named_number(scenario, table.headings[column], place, findings)
    unit = table.units[column]
    if number is None:
        return None
    refuse_percent_of_nothing(number, findings)
    own = "%" if number.percent else number.varied.unit
    if unit and (not own or unit != parse_unit(own).text):
        written = f"is written in {own}" if own else "has no unit"
        hint = f"head the column `{number.written}" + (f" [{own}]`" if own else "`")
        if unit == "%":
            hint += f"; for changes in per cent `{number.written} %`"
        findings.error(place, "", f"the column is in {unit}, but this number {written}", hint)
    return number


def _cell(value: object, table: CaseTable, row: int, column: int, findings: Findings) -> float:
    """The number in a cell; not a number where it is blank or, with a finding, no number."""
    blank = value is None or (isinstance(value, float) and math.isnan(value)) or (isinstance(value, str) and not value.strip())
    if blank:
        return math.nan
    text = value.strip() if isinstance(value, str) else ""
    number = plain_number(float(text) if NUMBER_TEXT.fullmatch(text) else None if text else value)
    if number is None:
        findings.error(table.place(row, column), "", f"`{value}` is not a number", _HINT_CELL)
        return math.nan
    return number


def _labels(table: CaseTable, findings: Findings) -> tuple[str, ...]:
    """Names of the cases of a table; a row without one is named by its number."""
    if CASE not in table.headings:
        return ()
    column = table.headings.index(CASE)
    texts = ["" if row[column] is None else str(row[column]).strip() for row in table.rows]
    labels = [text or f"case {number}" for number, text in enumerate(texts, 1)]
    _check_names([(label, table.place(row, column)) for row, label in enumerate(labels)], "", findings)
    return tuple(labels)
