"""The commands `cases` and `bridge`: what they write and print, what they refuse, and that nothing is lost."""

from __future__ import annotations

import csv
import json
import re
from pathlib import Path

import openpyxl
import pytest
from conftest import ROOT
from test_cli import HEAVY, loaded, run, run_apart

MARCH = ROOT / "scenarios" / "brackwater_2031_03.yaml"
APRIL = ROOT / "scenarios" / "brackwater_2031_04.yaml"
THERMAL = ROOT / "scenarios" / "thermal_cracker.yaml"
MARRAM = ROOT / "scenarios" / "marram_point_2031_03.yaml"


@pytest.fixture(autouse=True)
def elsewhere(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Commands are started in an empty folder."""
    monkeypatch.chdir(tmp_path)


def listed(*cases: str, scenario: Path = MARCH) -> Path:
    """A YAML list of cases in the present folder."""
    path = Path("cases.yaml")
    path.write_text(
        "\n".join([f"scenario: {scenario.as_posix()}", "cases:", *(f"  - {case}" for case in cases)]), encoding="utf-8"
    )
    return path


def test_a_sheet_is_written_changed_and_compared() -> None:
    written = run("cases", "--write", "prices.xlsx", MARCH)
    assert (written.code, written.out) == (0, "")
    assert written.err.splitlines()[0] == "written: prices.xlsx"
    assert "olefinlp cases prices.xlsx -o comparison.xlsx" in written.err
    book = openpyxl.load_workbook("prices.xlsx")
    sheet = book["Prices"]
    header = next(row for row in range(1, 20) if "Item" in [cell.value for cell in sheet[row]])
    headings = [cell.value for cell in sheet[header]]
    column, item = len(headings) + 1, headings.index("Item") + 1
    while not headings[-1]:
        headings, column = headings[:-1], column - 1
    sheet.cell(header, column, "Dear naphtha")
    row = next(
        r for r in range(header + 1, sheet.max_row + 1) if sheet.cell(r, item).value == "feeds.full_range_naphtha.spot_cargo"
    )
    sheet.cell(row, column, 590)
    book.save("prices.xlsx")
    found = run("cases", "prices.xlsx", "-o", "comparison.xlsx", "--quick")
    assert found.code == 0, found.err
    assert re.search(r"Base +26,808\.7", found.out)
    assert re.search(r"Dear naphtha +2\d,\d{3}\.\d +-\d", found.out)
    assert Path("comparison.xlsx").exists()
    assert "written: comparison.xlsx" in found.err


def test_every_output_of_a_comparison(tmp_path: Path) -> None:
    found = run("cases", MARCH, "--json", "c.json", "--csv", "tables", "-o", "c.xlsx", "--risk", "30", "--worst", "25")
    assert found.code == 0, found.err
    record = json.loads(Path("c.json").read_text(encoding="utf-8"))
    assert [case["name"] for case in record["cases"]][:2] == ["Base", "High crude"]
    assert round(record["cases"][4]["margin"]) == 30_135_475
    assert {answer["name"] for answer in record["answers"]} == {"regret", "buying"}
    with (tmp_path / "tables" / "case_feeds.csv").open(encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    assert {"month", "group", "item", "unit", "Base", "minus_High crude"} <= set(rows[0])
    assert sum(float(row["Base"]) for row in rows) == pytest.approx(172.4, abs=0.05)
    assert "worst 25 %" in found.out


def test_json_on_standard_output_is_alone() -> None:
    found = run("cases", MARCH, "--json", "-", "--quick", "-o", "c.xlsx")
    assert len(found.record()["cases"]) == 6


def test_a_workbook_is_named_after_its_cases() -> None:
    assert run("cases", MARCH, "--quick").code == 0
    assert Path("brackwater_2031_03_comparison.xlsx").exists()


def test_a_case_without_a_plan_does_not_hold_back_the_others() -> None:
    path = listed(
        "{name: base}",
        "{name: too much, changes: {outlets.ethylene_contract.min: 57.9 kt, outlets.polymer_grade_propylene.min: 31 kt}}",
    )
    found = run("cases", path, "-o", "c.xlsx")
    assert found.code == 0
    assert "1 case without a plan: too much" in found.err
    assert re.search(r"too much +no plan", found.out)
    assert re.search(r"c3_splitter, at most 36 t/h .*\n\nPlanning aid", found.out)
    assert Path("c.xlsx").exists()


def test_no_plan_at_all_ends_with_the_reasons_and_writes_nothing() -> None:
    path = listed("{name: only, changes: {outlets.ethylene_contract.min: 57.9 kt, outlets.polymer_grade_propylene.min: 31 kt}}")
    found = run("cases", path, "-o", "c.xlsx")
    assert found.code == 3
    assert found.err.startswith("no case has a plan\nonly: ")
    assert not Path("c.xlsx").exists()


def test_weights_travel_into_the_answers() -> None:
    path = listed(
        "{name: Base, weight: 1}",
        "{name: High crude, weight: 4, price_case: High crude}",
        "{name: Cheap ethane, weight: 4, price_case: Cheap ethane}",
    )
    found = run("cases", path, "-o", "c.xlsx")
    assert re.search(r"High crude .* 44 %", found.out)
    assert "Buying for High crude or Cheap ethane costs least on average" in found.out


@pytest.mark.parametrize(
    ("arguments", "expected"),
    [
        (["no_such.xlsx"], "no such file"),
        ([MARCH, "-o", "c.csv"], "--output c.csv: a workbook's name ends in .xlsx"),
        ([MARCH, "--risk", "100"], "--risk is from 0 to below 100 %"),
        ([MARCH, "--worst", "0"], "--worst above 0"),
        ([MARCH, "--held", "purchaces"], "did you mean `purchases`?"),
        (["--write", "sheet.xls", MARCH], "--write sheet.xls: a workbook's name ends in .xlsx"),
        (["--write", "sheet.xlsx", "prices.csv"], "is a list of cases already"),
        ([ROOT / "scenarios" / "prices" / "brackwater.csv"], "does not say its scenario\nhint: name it: `--scenario FILE`"),
    ],
)
def test_what_cannot_be_done_is_said_in_a_line(arguments: list[object], expected: str) -> None:
    found = run("cases", *arguments)
    assert found.code == 2
    assert expected in found.err
    assert not list(Path.cwd().iterdir())


def test_a_workbook_that_cannot_be_written_keeps_the_old_one_and_what_was_printed(monkeypatch: pytest.MonkeyPatch) -> None:
    import os

    target = Path("c.xlsx")
    target.write_bytes(b"what was there")

    def refuse(*_: object) -> None:
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(os, "replace", refuse)
    found = run("cases", MARCH, "--quick", "-o", target)
    assert found.code == 1
    assert "c.xlsx cannot be written; the old file is as it was\nhint: is it open in another program" in found.err
    assert "26,808.7" in found.out
    assert target.read_bytes() == b"what was there"


def test_no_traceback_in_a_process_of_its_own() -> None:
    Path("empty.xlsx").write_bytes(b"")
    found = run_apart("cases", "empty.xlsx", folder=Path.cwd())
    assert found.code == 2
    assert found.err.startswith("empty.xlsx\n")


# ---------------------------------------------------------------------------------- bridge


def test_the_bridge_between_two_cases() -> None:
    found = run("bridge", "Base", "Strong propylene", "--cases", MARCH, "-o", "b.xlsx", "--csv", "b.csv")
    assert found.code == 0, found.err
    assert (
        "Base 26,808.7 + 3,202.4 by prices on the old plan + 124.4 by re-optimising = Strong propylene 30,135.5 kUSD" in found.out
    )
    assert "written: b.xlsx, b.csv" in found.err
    assert openpyxl.load_workbook("b.xlsx").sheetnames[0] == "Bridge"
    with Path("b.csv").open(encoding="utf-8") as file:
        assert len(list(csv.reader(file))) > 5


def test_the_bridge_between_two_files_both_ways_round() -> None:
    found = run("bridge", MARCH, APRIL)
    assert found.code == 0
    assert "− 534.1 by changed limits and other data" in found.out
    other = run("bridge", MARCH, APRIL, "--order", "limits-first")
    assert other.code == 0
    assert "26,274.6" in other.out


@pytest.mark.parametrize(
    ("arguments", "code", "expected"),
    [
        (["Base", "High crude"], 2, "Base: no such file\nhint: name two scenario files, or two cases and where they stand"),
        (["Base", "Hihg crude", "--cases", MARCH], 2, "`Hihg crude` is no case of"),
        ([MARCH, MARRAM], 2, "USD"),
        ([MARCH, APRIL, "--order", "prices"], 2, "known: prices-first, limits-first"),
        ([MARCH, APRIL, "-o", "b.csv"], 2, "a workbook's name ends in .xlsx"),
    ],
)
def test_what_the_bridge_refuses(arguments: list[object], code: int, expected: str) -> None:
    found = run("bridge", *arguments)
    assert found.code == code
    assert expected in found.err


def test_a_case_without_a_plan_has_no_bridge() -> None:
    path = listed(
        "{name: base}",
        "{name: too much, changes: {outlets.ethylene_contract.min: 57.9 kt, outlets.polymer_grade_propylene.min: 31 kt}}",
    )
    found = run("bridge", "base", "too much", "--cases", path)
    assert found.code == 3
    assert "too much has no plan: " in found.err


@pytest.mark.parametrize("command", ["cases", "bridge"])
def test_help_of_the_commands_loads_nothing_heavy(command: str) -> None:
    """Pydantic apart, with which newer versions of typer read the arguments."""
    assert loaded(command, "--help", folder=Path.cwd()) & (set(HEAVY) - {"pydantic"}) == set()


def test_a_textbook_scenario_is_one_case() -> None:
    found = run("cases", THERMAL, "-o", "c.xlsx")
    assert found.code == 0
    assert re.search(r"As written +3\.7", found.out)
    assert "Regret" not in openpyxl.load_workbook("c.xlsx").sheetnames
