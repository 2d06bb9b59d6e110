"""Workbooks that people hand over: damaged ones and the whole of what is said of each, odd ones that are read all the same.

The workbooks stand in `damaged_cases` and `odd_but_good_cases`; `damaged_cases/make_damaged.py` makes them.
"""

from __future__ import annotations

import importlib.util
import sys
from pathlib import Path
from types import ModuleType

import pytest
from conftest import ROOT, TESTS

from olefinlp import read_cases
from olefinlp.inputs.cases import CaseSet
from olefinlp.inputs.findings import InputError

DAMAGED, GOOD = TESTS / "damaged_cases", TESTS / "odd_but_good_cases"
NAMES = sorted(path.stem for path in DAMAGED.glob("*.xlsx"))


@pytest.fixture(autouse=True)
def in_the_project(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(ROOT)


@pytest.fixture(scope="module")
def maker() -> ModuleType:
    spec = importlib.util.spec_from_file_location("make_damaged", DAMAGED / "make_damaged.py")
    assert spec
    assert spec.loader
    module = importlib.util.module_from_spec(spec)
    sys.modules["make_damaged"] = module
    spec.loader.exec_module(module)
    return module


def said(path: Path) -> str:
    with pytest.raises(InputError) as caught:
        read_cases(path.relative_to(ROOT) if path.is_relative_to(ROOT) else path)
    return str(caught.value)


@pytest.mark.parametrize("name", NAMES)
def test_all_that_is_said_of_a_damaged_workbook(name: str) -> None:
    expected = (DAMAGED / f"{name}.txt").read_text(encoding="utf-8").rstrip("\n")
    assert said(DAMAGED / f"{name}.xlsx") == expected
    assert "Traceback" not in expected


def test_every_workbook_has_its_message_and_is_small(maker: ModuleType) -> None:
    assert len(NAMES) > 50
    assert sorted(path.stem for path in DAMAGED.glob("*.txt")) == NAMES
    assert {*maker.DAMAGED_FILES, *maker.DAMAGED_BOOKS} <= set(NAMES)
    assert max(path.stat().st_size for folder in (DAMAGED, GOOD) for path in folder.glob("*.xlsx")) < 15_000


@pytest.mark.parametrize("name", ["several_at_once", "merged_cells", "too_many_cells", "one_byte_wrong", "document_type"])
def test_a_workbook_made_anew_is_as_damaged(maker: ModuleType, name: str, tmp_path: Path) -> None:
    """What the script makes today is what stands in the folder: same faults in the same cells."""
    file = tmp_path / f"{name}.xlsx"
    make = maker.DAMAGED_FILES.get(name)
    file.write_bytes(make() if make else maker.saved(maker.DAMAGED_BOOKS[name]()))
    with pytest.raises(InputError) as caught:
        read_cases(file, ROOT / "scenarios" / "thermal_cracker.yaml")
    places = [(f.place.column, f.message.partition(", first in")[0]) for f in caught.value.findings]
    with pytest.raises(InputError) as kept:
        read_cases(DAMAGED / f"{name}.xlsx")
    assert places == [(f.place.column, f.message.partition(", first in")[0]) for f in kept.value.findings]


@pytest.mark.parametrize("name", sorted(path.stem for path in GOOD.glob("odd*.xlsx")))
def test_a_workbook_as_people_leave_it_is_read(name: str) -> None:
    """Texts for numbers, blanks of all kinds, a percentage, a remark, merged titles, hidden parts, a title line between."""
    cases = read_cases(GOOD / f"{name}.xlsx")
    assert (cases.names, [case.weight for case in cases.cases]) == (("2031", "Dear"), [0.75, 0.25])
    assert numbers(cases, "feeds.ethane.purchase") == [6.55, 7.55]
    assert numbers(cases, "feeds.propane.purchase") == [9.73, 9.73]
    for case in cases.cases:
        assert case.scenario
        used = case.scenario.case.prices
        assert used["outlets.gasoline_sale", "hour"].value == pytest.approx(0.72 * used["outlets.propylene_sale", "hour"].value)
    first, dear = (case.scenario.case.limits for case in cases.cases if case.scenario)
    assert ("purchase", "ethane.purchase", "hour") not in first
    assert dear["purchase", "ethane.purchase", "hour"].high == pytest.approx(40 * 0.45359237 / 1000)
    assert dear["unit_load", "cracker", "hour"].reason == "slow exchanger"
    assert dear["unit_load", "cracker", "hour"].high == pytest.approx(0.95 * (first["unit_load", "cracker", "hour"].high or 0))
    file = f"tests/odd_but_good_cases/{name}.xlsx"
    assert [str(warning) for warning in cases.warnings] == [
        f"{file} [Prices]\n  warning: row 8 is hidden, and is read all the same\nhint: show the row to see what is planned with",
        f"{file} [Prices]\n  warning: column C is hidden, and is read all the same\n"
        "hint: show the column to see what is planned with",
    ]


@pytest.mark.parametrize("name", sorted(path.stem for path in GOOD.glob("moved*.xlsx")))
def test_columns_stand_where_people_put_them(name: str) -> None:
    cases = read_cases(GOOD / f"{name}.xlsx")
    assert cases.names == ("Base", "Dear", "As base")
    assert numbers(cases, "feeds.ethane.purchase") == [6.55, 7.55, 6.55]
    assert numbers(cases, "utilities.natural_gas") == [2.5, 2.5, 2.5]
    assert not cases.warnings


def test_a_linked_workbook_says_so() -> None:
    cases = read_cases(GOOD / "linked.xlsx")
    assert numbers(cases, "feeds.ethane.purchase") == [6.55, 7.55]
    assert [str(warning) for warning in cases.warnings] == [
        "tests/odd_but_good_cases/linked.xlsx\n  warning: is linked to other files: the values saved with it are read\n"
        "hint: write the values themselves"
    ]


def test_a_size_that_is_not_so_is_not_believed() -> None:
    assert numbers(read_cases(GOOD / "size_that_is_not_so.xlsx"), "feeds.ethane.purchase") == [6.55, 7.55]


def numbers(cases: CaseSet, item: str) -> list[float]:
    """The numbers of an item as written, case by case."""
    return [case.scenario.case.prices[item, "hour"].number for case in cases.cases if case.scenario]


def test_what_is_no_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    (tmp_path / "prices.xlsx").mkdir()
    (tmp_path / "march.xlsx").write_bytes(b"")
    assert said(Path("prices.xlsx")) == "prices.xlsx\n  is a folder, a workbook is needed here"
    assert said(Path("marsh.xlsx")) == "marsh.xlsx\n  no such file\nhint: did you mean `march.xlsx`?"
    assert said(Path("nowhere/marsh.xlsx")) == "nowhere/marsh.xlsx\n  no such file\nhint: the folder is not there either"


def test_a_file_that_may_not_be_read(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def refuse(self: Path) -> bytes:
        raise PermissionError(13, "Permission denied")

    monkeypatch.chdir(tmp_path)
    Path("prices.xlsx").write_bytes(b"PK")
    monkeypatch.setattr(Path, "read_bytes", refuse)
    assert said(Path("prices.xlsx")) == "prices.xlsx\n  cannot be read: Permission denied\nhint: is it open in another program?"


def test_a_file_that_is_too_large(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    with Path("prices.xlsx").open("wb") as file:
        file.truncate(33 * 1024 * 1024)
    assert said(Path("prices.xlsx")) == "prices.xlsx\n  is larger than 32 MB\nhint: is it the right file?"
