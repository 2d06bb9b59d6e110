"""The workbook: live money that agrees with the solver, text that stays text, files written whole.

The formulas are recalculated by LibreOffice, told to recalculate on load; by default it would keep the
values that were written beside them, so one test first proves that it does not.
"""

from __future__ import annotations

import io
import os
import re
import subprocess
import sys
import zipfile
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import openpyxl
import pytest
from conftest import ROOT, SCENARIOS, Recalculate, needs_office

from olefinlp import make_plan, read_scenario
from olefinlp.answers.limits import binding
from olefinlp.answers.plan import Plan
from olefinlp.outputs import workbook_money, workbook_overview, workbook_tables
from olefinlp.outputs.files import OutputError
from olefinlp.outputs.workbook import sheet_names, workbook_bytes, write_workbook
from olefinlp.outputs.workbook_blocks import TOP_LIMITS, top_limits
from olefinlp.outputs.workbook_book import put_formula

MARCH, HALF_YEAR, MARRAM = "brackwater_2031_03.yaml", "brackwater_2031_03_to_08.yaml", "marram_point_2031_03.yaml"
HEADER = 2
"""Row of the headers, except on the flat list."""

MONEY_HEADINGS = {"Money": ("Price", "Amount"), "Feeds": ("Price,", "Cost"), "Slate": ("Price or", "Revenue")}


@pytest.fixture(scope="module")
def plans(shipped_plan: Callable[[str], Plan]) -> dict[str, Plan]:
    return {name: shipped_plan(name) for name in SCENARIOS}


@pytest.fixture(scope="module")
def odd(march: Plan) -> Plan:
    """A plan with the lines that shipped ones lack: a shortfall that is paid, a tank valued at the end."""
    tank = {"opening": "4 kt", "min": "0 kt", "max": "14 kt", "holding": "0.35 USD/t/month", "end": {"value": "600 USD/t"}}
    spot = {"feeds.light_naphtha.spot.take_or_pay": "5 kt", "feeds.light_naphtha.spot.shortfall_pays": "1 %"}
    plan = make_plan(march.scenario.with_({**spot, "stocks": {"propane": tank}}))
    paid = {line.group for line in plan.lines if line.amount}
    assert {"take-or-pay payments", "stock at the end"} <= paid
    return plan


@pytest.fixture(scope="module")
def book(march: Plan) -> Any:
    return read(workbook_bytes(march))


def read(source: bytes | Path, values: bool = False) -> Any:
    return openpyxl.load_workbook(io.BytesIO(source) if isinstance(source, bytes) else source, data_only=values)


def headings(sheet: Any, row: int = HEADER) -> list[str]:
    return [cell.value for cell in sheet[row]]


def column(sheet: Any, beginning: str) -> int:
    """The column (from 1) whose heading begins so."""
    return next(at for at, heading in enumerate(headings(sheet), 1) if heading and heading.startswith(beginning))


def body(sheet: Any) -> range:
    return range(HEADER + 1, sheet.max_row + 1)


def formulas(book: Any) -> Iterator[tuple[str, str]]:
    for sheet in book:
        for row in sheet.iter_rows():
            yield from ((sheet.title, cell.coordinate) for cell in row if cell.data_type == "f")


def margin_cell(book: Any) -> Any:
    """The margin before fixed cost, of all months."""
    for row in book["Overview"].iter_rows(max_col=12):
        if row[0].value == "Margin before fixed cost":
            return [cell for cell in row if cell.value is not None][-1]
    raise AssertionError("the overview has no margin")


def check_text(book: Any) -> str:
    return next(str(row[3].value) for row in book["Overview"].iter_rows(max_col=4) if str(row[0].value).startswith("Check"))


def price_row(book: Any, item: str) -> int:
    sheet = book["Prices"]
    return next(row for row in body(sheet) if sheet.cell(row, column(sheet, "Item")).value == item)


def test_sheets_stand_in_the_order_of_reading_and_none_is_hidden(book: Any, march: Plan, plans: dict[str, Plan]) -> None:
    assert book.sheetnames == sheet_names(march)
    assert "Stocks" not in book.sheetnames
    assert "Stocks" in sheet_names(plans[HALF_YEAR])
    assert {sheet.sheet_state for sheet in book} == {"visible"}


def test_every_table_has_its_headings_with_units_frozen_and_filtered(book: Any, march: Plan) -> None:
    tables = {"Furnaces": march.furnaces, "Recovery load": march.recovery, "Limits": march.limits, "Prices": march.prices}
    tables |= {"Inputs as used": march.inputs, "Audit": march.audit, "Balance lines": march.balances, "Feeds": march.feeds}
    for name, table in tables.items():
        assert headings(book[name]) == [column.heading for column in table.columns], name
        assert book[name].max_row == HEADER + len(table), name
    for sheet in book.worksheets[1:]:
        row = 1 if sheet.title == "Flat list" else HEADER
        assert re.fullmatch(rf"[A-D]{row + 1}", sheet.freeze_panes), sheet.title
        assert sheet.auto_filter.ref.startswith(f"A{row}:"), sheet.title
        assert sheet.print_title_rows == f"${row}:${row}", sheet.title
        assert not sheet.merged_cells.ranges


def test_the_flat_list_is_plain(book: Any, march: Plan) -> None:
    sheet = book["Flat list"]
    assert headings(sheet, 1) == ["Month", "Price case", "Group", "Item", "Measure", "Value", "Unit"]
    assert sheet.max_row == 1 + len(march.flat)


def test_print_setup(book: Any) -> None:
    for sheet in book:
        assert (sheet.page_setup.orientation, int(sheet.page_setup.paperSize)) == ("landscape", 9)
        assert (sheet.page_setup.fitToWidth or 1, sheet.page_setup.fitToHeight) == (1, 0)
        assert "March 2031, base prices" in sheet.oddHeader.left.text
        assert sheet.oddFooter.left.text == "Planning aid; not for operating limits"


def test_every_money_cell_is_a_formula(book: Any) -> None:
    for name, beginnings in MONEY_HEADINGS.items():
        sheet = book[name]
        for beginning in beginnings:
            at = column(sheet, beginning)
            for row in body(sheet):
                fixed = name == "Money" and sheet.cell(row, column(sheet, "Group")).value == "fixed costs"
                if not (fixed and beginning == "Price"):  # stands here only: an input
                    assert sheet.cell(row, at).data_type == "f", (name, row, at)
    for row in book["Overview"].iter_rows(max_col=3):
        if row[1].value in ("kUSD", "USD/t", "USc/lb") and not str(row[0].value).startswith("Check"):
            assert row[2].data_type == "f", row[0].value


def test_prices_say_how_they_become_what_is_used(book: Any) -> None:
    sheet = book["Prices"]
    used = column(sheet, "Price used")
    contract, export = price_row(book, "outlets.ethylene_contract"), price_row(book, "outlets.fuel_gas_export")
    gas = price_row(book, "utilities.natural_gas")
    assert sheet.cell(contract, used).value == f"=D{contract}*F{contract}"
    assert sheet.cell(export, used).value == f"=H{export}*$J${gas}+I{export}"
    assert not sheet.cell(contract, 4).protection.locked
    assert sheet.cell(contract, 6).protection.locked
    assert sheet.protection.sheet
    assert sheet.protection.password is None


def test_only_plain_functions_no_macros_no_links(march: Plan, book: Any) -> None:
    used = {word for sheet, at in formulas(book) for word in re.findall(r"[A-Z]{2,}(?=\()", str(book[sheet][at].value))}
    assert used <= {"SUM", "SUMPRODUCT", "IF", "ABS"}
    with zipfile.ZipFile(io.BytesIO(workbook_bytes(march))) as file:
        assert not [name for name in file.namelist() if "vba" in name.lower() or "external" in name.lower()]


def test_charts_are_native_and_titled(march: Plan) -> None:
    with zipfile.ZipFile(io.BytesIO(workbook_bytes(march))) as file:
        charts = [file.read(name).decode() for name in file.namelist() if name.startswith("xl/charts/chart")]
    titles = ["".join(re.findall(r"<a:t>(.*?)</a:t>", chart)) for chart in charts]
    assert [title.partition(",")[0] for title in titles] == ["Feed bought", "Products sold", "Load"]


def test_no_minus_zero_and_no_rounding_of_the_solver(plans: dict[str, Plan]) -> None:
    for plan in plans.values():
        with zipfile.ZipFile(io.BytesIO(workbook_bytes(plan))) as file:
            sheets = b"".join(file.read(name) for name in file.namelist() if name.startswith("xl/worksheets/sheet"))
        assert not re.search(rb"<v>-0(\.0)?</v>", sheets)
        assert b"nan</v>" not in sheets.lower()
        assert b"inf</v>" not in sheets.lower()


def test_the_overview_names_the_limits_with_the_largest_part_first(march: Plan) -> None:
    limits = list(top_limits(march, binding(march.limits)))
    assert len(limits) == TOP_LIMITS
    assert ("gas_furnaces hours", "at maximum") in limits[:3]


@pytest.mark.parametrize("text", ["=1+1", "+1", "-1", "@SUM(A1)", "\t=1", "=cmd|'/c calc'!A0", "a & b <c>", "tail\x07ing"])
def test_text_stays_text(march: Plan, text: str) -> None:
    plan = make_plan(march.scenario.with_(title=text, fixed_costs={"whole_plant": "1 kUSD/month"}))
    shown = text.replace("\x07", "")
    book = read(workbook_bytes(plan))
    title = book["Overview"]["A1"]
    assert (title.value, title.data_type) == (shown, "s")
    audit = [cell for row in book["Audit"].iter_rows() for cell in row if cell.value == shown]
    assert [cell.data_type for cell in audit] == ["s"]


def test_a_basis_that_looks_like_a_formula_stays_text(plans: dict[str, Plan]) -> None:
    scenario = plans[MARRAM].scenario.with_({"indexes.naphtha.basis": "=HYPERLINK(1)"})
    book = read(workbook_bytes(make_plan(scenario)))
    cell = book["Prices"].cell(price_row(book, "indexes.naphtha"), column(book["Prices"], "Basis"))
    assert (cell.value, cell.data_type) == ("=HYPERLINK(1)", "s")


def test_long_text_is_cut_to_what_a_cell_holds(march: Plan) -> None:
    plan = make_plan(march.scenario.with_(title="x" * 40000))
    assert len(read(workbook_bytes(plan))["Overview"]["A1"].value) == 32767


def test_the_same_plan_gives_the_same_bytes(march: Plan, tmp_path: Path) -> None:
    first, second = write_workbook(march, tmp_path / "a.xlsx"), write_workbook(march, tmp_path / "b.xlsx")
    assert first.read_bytes() == second.read_bytes()
    # read twice here: places are shown as seen from the folder in which a scenario is read
    once, again = (make_plan(read_scenario(ROOT / "scenarios" / MARCH)) for _ in range(2))
    assert workbook_bytes(again) == workbook_bytes(once)


def test_a_file_that_cannot_be_replaced_is_left_as_it_was(march: Plan, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    target = tmp_path / "plan.xlsx"
    target.write_bytes(b"what was there")

    def refuse(*_: object) -> None:
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(os, "replace", refuse)
    with pytest.raises(OutputError, match=r"plan\.xlsx cannot be written; the old file is as it was\nhint: is it open") as caught:
        write_workbook(march, target)
    assert "Traceback" not in str(caught.value)
    assert target.read_bytes() == b"what was there"
    assert [file.name for file in tmp_path.iterdir()] == ["plan.xlsx"]


def test_a_folder_is_no_file(march: Plan, tmp_path: Path) -> None:
    with pytest.raises(OutputError, match="is a folder; name a file"):
        write_workbook(march, tmp_path)


def test_a_folder_must_be_there(march: Plan, tmp_path: Path) -> None:
    with pytest.raises(OutputError, match=r"the folder .* is not there"):
        write_workbook(march, tmp_path / "nowhere" / "plan.xlsx")
    assert not list(tmp_path.iterdir())


def test_neither_pandas_nor_matplotlib_is_loaded(tmp_path: Path) -> None:
    code = (
        "import sys; from olefinlp import make_plan, read_scenario; plan = make_plan(read_scenario(sys.argv[1]))\n"
        "before = set(sys.modules); from olefinlp.outputs.workbook import write_workbook; write_workbook(plan, sys.argv[2])\n"
        "print(sorted({'pandas', 'matplotlib', 'openpyxl'} & (set(sys.modules) - before)))"
    )
    command = [sys.executable, "-c", code, str(ROOT / "scenarios" / "thermal_cracker.yaml"), str(tmp_path / "plan.xlsx")]
    done = subprocess.run(command, capture_output=True, text=True, check=True, cwd=ROOT)
    assert done.stdout.strip() == "[]"


@needs_office
@pytest.mark.slow
def test_recalculation_is_real_and_gives_every_value_that_was_written(
    plans: dict[str, Plan], odd: Plan, recalculate: Recalculate, tmp_path: Path
) -> None:
    plans = plans | {"odd": odd}
    files = [write_workbook(plan, tmp_path / Path(name).with_suffix(".xlsx")) for name, plan in plans.items()]
    for (name, plan), file, again in zip(plans.items(), files, recalculate(*files), strict=True):
        found, written = read(again, values=True), read(file, values=True)
        wrong, count = [], 0
        for sheet, at in formulas(read(file)):
            new, old = found[sheet][at].value, written[sheet][at].value
            count += 1
            same = new == pytest.approx(old, rel=1e-6, abs=1e-9) if isinstance(old, int | float) else (new or "") == (old or "")
            if not same:
                wrong.append((sheet, at, old, new))
        assert not wrong, name
        assert count > 30, name
        assert margin_cell(found).value == pytest.approx(plan.margin / 1000, rel=1e-6), name
        assert check_text(found) == "agrees", name


@needs_office
@pytest.mark.slow
def test_values_written_wrong_are_put_right_by_recalculation(
    march: Plan, recalculate: Recalculate, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """The proof that the other tests recalculate: here every value beside a formula is wrong."""

    def wrong(sheet: Any, row: int, column: int, formula: str, value: float | str, style: Any = None) -> None:
        put_formula(sheet, row, column, formula, -12345.0 if isinstance(value, float) else value, style)

    monkeypatch.setattr(workbook_tables, "put_formula", wrong)
    monkeypatch.setattr(workbook_overview, "put_formula", wrong)
    file = write_workbook(march, tmp_path / "wrong.xlsx")
    assert margin_cell(read(file, values=True)).value == -12345.0
    (again,) = recalculate(file)
    assert margin_cell(read(again, values=True)).value == pytest.approx(march.margin / 1000, rel=1e-6)


@needs_office
@pytest.mark.slow
def test_a_changed_price_moves_the_margin_by_quantity_times_change(
    plans: dict[str, Plan], recalculate: Recalculate, tmp_path: Path
) -> None:
    """Ethylene +1 USc/lb on 58 kt; the naphtha index +10 USD/t (at 0.92 EUR/USD) on all that leans on it."""
    march, marram = plans[MARCH], plans[MARRAM]
    sold = march.slate.where(outlet="ethylene_contract")[0]["quantity"]
    naphtha = {(row["feed"], row["source"]): row["bought"] for row in marram.feeds.rows}
    charged = (
        naphtha["light_naphtha", "contract"] + naphtha["light_naphtha", "spot_cargo"] + 0.97 * naphtha["heavy_naphtha", "cargo"]
    )
    cases = (
        (march, "outlets.ethylene_contract", 1.0, sold * 0.01 / 0.45359237 * 1000),
        (marram, "indexes.naphtha", 10.0, -charged * 10 * 0.92),
    )
    files = []
    for plan, item, change, _ in cases:
        book = read(write_workbook(plan, tmp_path / f"{item}.xlsx"))
        book["Prices"].cell(price_row(book, item), column(book["Prices"], "Number")).value += change
        files.append(tmp_path / f"changed {item}.xlsx")
        book.save(files[-1])
    for (plan, item, _, expected), again in zip(cases, recalculate(*files), strict=True):
        found = read(again, values=True)
        assert margin_cell(found).value - plan.margin / 1000 == pytest.approx(expected, rel=1e-6), item
        assert check_text(found) == "DOES NOT AGREE", item


def test_money_of_the_feeds_and_slate_is_that_of_the_money_sheet(march: Plan) -> None:
    """What the slate earns is sales plus content value; what feeds cost is the feed purchases."""
    by_group = {
        group: sum(line.amount for line in march.lines if line.group == group)
        for group in ("sales", "content value", "feed purchases")
    }
    assert sum(row["revenue"] for row in march.slate.rows) == pytest.approx(by_group["sales"] + by_group["content value"])
    assert sum(row["cost"] for row in march.feeds.rows) == pytest.approx(-by_group["feed purchases"])


def test_money_sheets_are_found_by_item_and_month(plans: dict[str, Plan]) -> None:
    """Prices of a plan of several months: each month leans on its own row."""
    book = read(workbook_bytes(plans[HALF_YEAR]))
    prices, money = book["Prices"], book["Money"]
    for row in body(money):
        formula = str(money.cell(row, column(money, "Price")).value)
        if formula.startswith("="):
            at = int(formula.rpartition("$")[2])
            assert prices.cell(at, 1).value == money.cell(row, 1).value
    assert workbook_money.FIXED in {money.cell(row, 2).value for row in body(money)}
