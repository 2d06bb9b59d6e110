"""Reading a case sheet: a workbook in which people write cases of a scenario, one column a case."""

from __future__ import annotations

import difflib
import os
import re
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path

from olefinlp.inputs.case_rows import WEIGHT, CaseName, CaseRow, written_cases
from olefinlp.inputs.case_sheet_file import Sheet, SheetCell, read_sheets
from olefinlp.inputs.case_sheet_names import LIMITS, PRICES, READ_ME, SCENARIO, heading_key, plain
from olefinlp.inputs.case_sheet_table import CaseTable, read_table
from olefinlp.inputs.cases import CaseSet, WrittenCase, case_set
from olefinlp.inputs.findings import Findings, Place, near_name, shown
from olefinlp.inputs.prices import price_items_of
from olefinlp.inputs.scenario import Scenario

_PRICES_CELL = re.compile(rf"'?{PRICES}'?!\$?([A-Z]+)\$?(\d+)", re.IGNORECASE)


def read_case_sheet(path: Path, scenario: str | os.PathLike[str] | None, findings: Findings) -> CaseSet | None:
    """The cases of a workbook; None with findings, every one with its sheet and cell, when it cannot be read.

    The sheet `Prices` must be there; `Limits` and `Read me` (which names the scenario) may be. `scenario` is
    the scenario file where the workbook names none, or not the one that is meant. Raises `InputError` when a
    case is wrong beyond its cells.
    """
    from olefinlp.inputs.case_files import scenario_of

    found = read_sheets(path, (PRICES, LIMITS, READ_ME), findings)
    if found is None:
        return None
    sheets, names = found
    if PRICES not in sheets:
        findings.error(Place(shown(path)), "", f"has no sheet {PRICES}", _near_sheet(names))
        return None
    prices = read_table(sheets[PRICES], findings)
    limits = _limits(sheets, prices, findings)
    named, place = _scenario_named(sheets.get(READ_ME), Place(shown(path)))
    own = Findings()  # what is wrong with cells must not keep the scenario from being read
    read = scenario_of(scenario, named, path, place, own)
    findings.items += [finding for finding in own if finding not in findings.items]
    if prices is None or read is None:
        return None
    cases = list(prices.cases.values())
    if not cases:
        hint = "write the name of a case as a heading, and its prices below"
        findings.error(prices.sheet.place(), "", "no column is a case", hint)
        return None
    _warn_of_missing(prices, read, findings)
    rows = [*prices.rows, *(limits.rows if limits else [])]
    bad = prices.bad | (limits.bad if limits else set())
    return case_set(read, _written(rows, cases, read, bad, findings), findings, shown(path))


def _near_sheet(names: Sequence[str]) -> str:
    near = difflib.get_close_matches(PRICES, names, n=1)
    return f"rename `{near[0]}`" if near else f"its sheets: {', '.join(names)}"


def _limits(sheets: dict[str, Sheet], prices: CaseTable | None, findings: Findings) -> CaseTable | None:
    """The sheet of limits, its columns named as the cases on the sheet of prices."""
    if LIMITS not in sheets or prices is None:
        return None

    def resolve(cell: SheetCell) -> SheetCell:
        """A heading that points to the one on the sheet of prices, in a file that no program has calculated."""
        there = _PRICES_CELL.search(cell.formula)
        if not there:
            return cell
        column = 0
        for letter in there[1].upper():
            column = column * 26 + ord(letter) - 64
        return sheets[PRICES].cells.get((int(there[2]), column), SheetCell(""))

    known = {heading_key(one.name): one.name for one in prices.cases.values()}
    table = read_table(sheets[LIMITS], findings, resolve, known)
    if table is None:
        return None
    names = {}
    for column, one in table.cases.items():
        name = known.get(heading_key(one.name))
        if name is None:
            findings.error(one.place, "", f"`{one.name}` is no case of the sheet {PRICES}", near_name(one.name, known.values()))
        names[one.name] = name or one.name
        table.cases[column] = CaseName(names[one.name], one.place)
    table.rows = [replace(row, cells={names[name]: cell for name, cell in row.cells.items()}) for row in table.rows if row.cells]
    return table


def _scenario_named(sheet: Sheet | None, file: Place) -> tuple[str, Place]:
    """The scenario that the sheet `Read me` names, and where it does."""
    for (row, column), cell in sorted(sheet.cells.items()) if sheet else ():
        if isinstance(cell.value, str) and heading_key(cell.value) == heading_key(SCENARIO):
            beside = sorted(at for at in sheet.cells if at[0] == row and at[1] > column) if sheet else []
            texts = [(at, sheet.cells[at].value) for at in beside if isinstance(sheet.cells[at].value, str)] if sheet else []
            if sheet and texts and plain(texts[0][1]):
                return plain(texts[0][1]), sheet.place(*texts[0][0])
    return "", file


def _warn_of_missing(prices: CaseTable, scenario: Scenario, findings: Findings) -> None:
    for item in price_items_of(scenario):
        if item not in prices.items:
            findings.warn(prices.sheet.place(), item, "has no row: the scenario's own price is used in every case")


def _written(
    rows: list[CaseRow], cases: list[CaseName], scenario: Scenario, bad: set[Place], findings: Findings
) -> list[WrittenCase]:
    """The cases that the rows write, without the cells that could not be read: their findings say what to mend."""
    weighed_badly = any(cell.place in bad for row in rows if row.text("item") == WEIGHT for cell in row.cells.values())
    return [
        replace(
            one,
            prices={key: given for key, given in one.prices.items() if given.place not in bad},
            changes=tuple(change for change in one.changes if change.place not in bad),
            weight=None if weighed_badly else one.weight,
        )
        for one in written_cases(rows, cases, scenario, findings)
    ]
