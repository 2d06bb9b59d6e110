"""Files of cases: a workbook, a csv table or a YAML list; or a scenario, whose price table has cases of its own."""

from __future__ import annotations

import os
from pathlib import Path

from pydantic import Field

from olefinlp.inputs.case_rows import COLUMNS, EXTRAS, CaseCell, CaseName, CaseRow, written_cases
from olefinlp.inputs.cases import CaseSet, Change, WrittenCase, case_set, price_case_set
from olefinlp.inputs.fields import FileModel, PriceWritten, Text, to_price
from olefinlp.inputs.findings import Findings, Place, path_text, shown
from olefinlp.inputs.prices import PriceGiven
from olefinlp.inputs.scenario import Scenario, load_scenario
from olefinlp.inputs.tables import Table, read_table
from olefinlp.inputs.validate import validate
from olefinlp.inputs.yaml_files import Document, Path_, read_yaml

WORKBOOKS = (".xlsx", ".xlsm", ".xls", ".xlsb", ".ods")
"""Endings of workbooks; the reader says of each whether it can be read."""


class OneCaseFile(FileModel):
    """One case of a list."""

    name: Text = Field(description="the heading of its column in the comparison")
    price_case: Text | None = Field(None, description="a column of the scenario's price table; the scenario's own if not written")
    prices: dict[str, object] = Field(default_factory=dict, description="item: price, in place of the scenario's")
    changes: dict[str, object] = Field(default_factory=dict, description="path in the scenario: value")
    reason: Text | None = Field(None, description="why; travels into the plan where a unit or furnace group is changed")
    weight: float | None = Field(None, ge=0, description="chance of this case against the others")
    note: Text | None = None


class CasesFile(FileModel):
    """A list of cases of one scenario."""

    scenario: Text = Field(description="scenario file, from this file")
    cases: tuple[OneCaseFile, ...] = Field(min_length=1, description="the first is the one that others are compared with")


def read_cases(path: str | os.PathLike[str], scenario: str | os.PathLike[str] | None = None) -> CaseSet:
    """The cases of a file, each a validated scenario (or its reason to be none).

    `path` is a case workbook, a csv table of cases, a YAML list of cases, or a scenario, whose cases are
    those of its price table. `scenario` names the scenario of a csv table, and overrides the one that a workbook or list names.
    Raises `InputError` with everything that is wrong, by sheet and cell or by line.

    >>> from olefinlp import read_cases
    >>> len(read_cases("scenarios/brackwater_2031_03.yaml").cases)
    6
    """
    findings = Findings()
    file = Path(path)
    if file.suffix.lower() in WORKBOOKS:
        from olefinlp.inputs.case_sheet import read_case_sheet

        found = read_case_sheet(file, scenario, findings)
    elif file.suffix.lower() == ".csv":
        found = _read_csv(file, scenario, findings)
    else:
        found = _read_yaml(file, scenario, findings)
    findings.stop_on_errors()
    assert found is not None
    return found


def scenario_of(
    given: str | os.PathLike[str] | None, named: str, beside: Path, place: Place, findings: Findings
) -> Scenario | None:
    """The scenario of a file of cases: the one given, else the one that the file names, looked for from its folder."""
    if given is None and not named:
        findings.error(place, "scenario", "does not say its scenario", "name it: `--scenario FILE`")
        return None
    path = Path(given) if given is not None else beside.parent / named
    if given is None and not path.is_file():
        hint = "name it: `--scenario FILE`" + (" (a workbook keeps the way to it from its own folder)" if named else "")
        findings.error(place, "scenario", f"the scenario {shown(path)} is not there", hint)
        return None
    return load_scenario(path, findings)


def _read_yaml(path: Path, given: str | os.PathLike[str] | None, findings: Findings) -> CaseSet | None:
    document = read_yaml(path, findings)
    if document is None:
        return None
    if "cases" not in document.data:
        scenario = load_scenario(path, findings)
        return price_case_set(scenario) if scenario else None
    file = validate(document, CasesFile, findings)
    named = document.data.get("scenario")
    known = isinstance(named, str) or given is not None
    scenario = scenario_of(given, str(named), path, document.place(("scenario",)), findings) if known else None
    if file is None or scenario is None:
        return None
    written = [_case_of(document, number, one, findings) for number, one in enumerate(file.cases)]
    return case_set(scenario, written, findings, document.file)


def _case_of(document: Document, number: int, one: OneCaseFile, findings: Findings) -> WrittenCase:
    here: Path_ = ("cases", number)
    prices: dict[tuple[str, str], PriceGiven] = {}
    for item, value in one.prices.items():
        place = document.place((*here, "prices", item))
        for month, price in _monthly(value):
            read = _price(price, place, path_text((*here, "prices", item)), findings)
            if read:
                prices[item, month] = PriceGiven(read, "", one.note or "", place)
    reason = one.reason or one.note or ""
    changes = [
        Change(
            item, month, entry if isinstance(entry, int | float) else str(entry), document.place((*here, "changes", item)), reason
        )
        for item, value in one.changes.items()
        for month, entry in _monthly(value)
    ]
    return WrittenCase(one.name, document.place(here), prices, tuple(changes), one.price_case or "", one.weight, one.note or "")


def _monthly(value: object) -> list[tuple[str, object]]:
    """A value for all months, or one per month; a relative price is one value."""
    if isinstance(value, dict) and "of" not in value:
        return [("" if month == "other_months" else str(month), entry) for month, entry in value.items()]
    return [("", value)]


def _price(value: object, place: Place, path: str, findings: Findings) -> PriceWritten | None:
    from pydantic_core import PydanticCustomError

    try:
        return to_price(value)
    except PydanticCustomError as error:
        context = error.context or {}
        findings.error(place, path, error.message(), str(context.get("hint", "")))
        return None


def _read_csv(path: Path, given: str | os.PathLike[str] | None, findings: Findings) -> CaseSet | None:
    table = read_table(path, findings, required=COLUMNS, optional=EXTRAS, others=True)
    scenario = scenario_of(given, "", path, Place(shown(path)), findings)
    if table is None or scenario is None:
        return None
    names = [CaseName(name, Place(table.file, 1, name)) for name in table.columns if name not in (*COLUMNS, *EXTRAS)]
    written = written_cases(_rows(table, names), names, scenario, findings)
    return case_set(scenario, written, findings, table.file)


def _rows(table: Table, names: list[CaseName]) -> list[CaseRow]:
    known = (*COLUMNS, *EXTRAS)
    return [
        CaseRow(
            place=row.place("item"),
            texts={name: text for name, text in row.cells.items() if name in known},
            cells={one.name: CaseCell(row.text(one.name), row.place(one.name)) for one in names if row.text(one.name)},
            places={name: row.place(name) for name in row.cells},
        )
        for row in table
    ]
