"""The case sheet: what is written comes back as it was, formulas show what the plan uses, people's changes become cases."""

from __future__ import annotations

import datetime
import io
import re
import shutil
import subprocess
import sys
import zipfile
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import openpyxl
import pytest
from conftest import ROOT, SCENARIOS, Recalculate, needs_office
from openpyxl.utils import get_column_letter

from olefinlp import make_plan, read_cases, read_scenario
from olefinlp.inputs.case_sheet_names import MORE_CASES
from olefinlp.inputs.case_sheet_rows import case_names, price_rows
from olefinlp.inputs.cases import CaseSet, price_case_set
from olefinlp.inputs.findings import InputError
from olefinlp.inputs.scenario import Scenario
from olefinlp.inputs.units import parse_quantity
from olefinlp.outputs.case_sheet import case_sheet_bytes, write_case_sheet
from olefinlp.outputs.files import OutputError

MARCH, HALF_YEAR, MARRAM, TEXTBOOK = SCENARIOS[0], SCENARIOS[1], "marram_point_2031_03.yaml", "thermal_cracker.yaml"
HEADER = 3
"""Row of the headings, from 1."""
SHEETS = ["Read me", "Prices", "Limits", "Prices as used", "Units"]
Shipped = Callable[[str], Scenario]


def odd(name: str, shipped: Shipped) -> Scenario:
    """A shipped scenario with what the shipped ones leave out."""
    if name == MARRAM:
        lean = {"of": "indexes.naphtha", "times": 0.9, "plus": "4 EUR/t", "freight": "3 USD/t"}
        sold = {"sum": [{"sold": ["propylene_sale", "propane_sale"]}], "min": "1 kt", "max": "38 kt"}
        tank = {"opening": "2 kt", "min": "0 kt", "max": "9 kt", "holding": "1.5 EUR/t/month", "end": {"at_least": "1 kt"}}
        changes = {
            "feeds.light_naphtha.contract.price": lean,
            "limits": {"propylene_and_propane": sold},
            "stocks": {"light_naphtha": tank},
        }
        return shipped(name).with_(changes)
    steam = {"2031-05": "1 USD/t", "2031-08": {"of": "utilities.carbon", "times": 0.05}, "other_months": "0 USD/t"}
    months = {f"2031-0{month}": f"{month} USD/t" for month in range(3, 9)}
    changes = {"utilities.surplus_steam.price": steam, "variable_costs.chemicals.cost": months}
    changes |= {"feeds.condensate.spot_cargo.max": {"2031-03": "unlimited", "other_months": "30 kt"}}
    return shipped(name).with_(changes, price_case="High crude")


@pytest.fixture(scope="module")
def scenarios(shipped_scenario: Shipped) -> dict[str, Scenario]:
    """The shipped scenarios, and two with what they leave out."""
    more = {f"odd {name}": odd(name, shipped_scenario) for name in (MARRAM, HALF_YEAR)}
    return {name: shipped_scenario(name) for name in SCENARIOS} | more


def loaded(source: bytes | Path, values: bool = False) -> Any:
    return openpyxl.load_workbook(io.BytesIO(source) if isinstance(source, bytes) else source, data_only=values)


def written(scenario: Scenario, tmp_path: Path) -> tuple[Path, Any]:
    """A case sheet and the workbook as openpyxl changes it."""
    file = write_case_sheet(scenario, tmp_path / "prices.xlsx")
    return file, loaded(file)


def column(sheet: Any, heading: str) -> int:
    return next(cell.column for cell in sheet[HEADER] if cell.value == heading)


def row(sheet: Any, item: str, month: str = "") -> int:
    """The row of an item, in a month where the sheet has months."""
    has_months = any(cell.value == "Month" for cell in sheet[HEADER])
    return next(
        at
        for at in range(HEADER + 1, sheet.max_row + 1)
        if sheet.cell(at, column(sheet, "Item")).value == item
        and (not has_months or (sheet.cell(at, column(sheet, "Month")).value or "") == month)
    )


def put(sheet: Any, item: str, heading: str, value: object, month: str = "") -> None:
    sheet.cell(row(sheet, item, month), column(sheet, heading)).value = value


def saved(book: Any, file: Path) -> Path:
    book.save(file)
    return file


def same_prices_and_limits(read: CaseSet, expected: CaseSet) -> None:
    assert read.names == expected.names
    for one, other in zip(read.cases, expected.cases, strict=True):
        assert one.scenario, one.reason
        assert other.scenario
        prices, wanted = one.scenario.case.prices, other.scenario.case.prices
        assert prices.keys() == wanted.keys()
        for key, price in wanted.items():
            assert prices[key].value == pytest.approx(price.value, rel=1e-12), (one.name, key)
            assert (prices[key].unit_used, prices[key].of) == (price.unit_used, price.of)
        limits, known = one.scenario.case.limits, other.scenario.case.limits
        assert limits.keys() == known.keys()
        for name, limit in known.items():
            assert (limits[name].low, limits[name].high, limits[name].reason) == (limit.low, limit.high, limit.reason)


# ---------------------------------------------------------------------------------- there and back


QUICK = (MARCH, TEXTBOOK, f"odd {MARRAM}")
"""Scenarios that the fast suite looks at; the whole one looks at all."""
EVERY = [*QUICK, *(pytest.param(name, marks=pytest.mark.slow) for name in (*SCENARIOS, f"odd {HALF_YEAR}") if name not in QUICK)]


@pytest.mark.parametrize("name", EVERY)
def test_what_is_written_comes_back(scenarios: dict[str, Scenario], tmp_path: Path, name: str) -> None:
    """Every shipped scenario and every price case: the same prices to the last digits, the same limits and reasons."""
    scenario, file = scenarios[name], tmp_path / "prices.xlsx"
    if name not in SCENARIOS:
        scenario = in_a_file(scenario, tmp_path)
    read = read_cases(write_case_sheet(scenario, file))
    same_prices_and_limits(read, price_case_set(scenario))
    assert len(read.cases) == (6 if "brackwater" in name else 1)
    assert not [warning for warning in read.warnings if warning.place.file.endswith("prices.xlsx")]


def test_the_sheet_of_a_case_holds_that_case(scenarios: dict[str, Scenario], tmp_path: Path) -> None:
    """A case that was read from a sheet is a scenario of its own: the columns of the price table say nothing about it."""
    crude = read_cases(write_case_sheet(scenarios[MARCH], tmp_path / "first.xlsx")).cases[1].scenario
    assert crude
    read = read_cases(write_case_sheet(crude, tmp_path / "second.xlsx"))
    assert read.names == ("High crude",)
    assert read.cases[0].scenario
    for key, price in crude.case.prices.items():
        assert read.cases[0].scenario.case.prices[key].value == pytest.approx(price.value, rel=1e-12), key
        assert read.cases[0].scenario.case.prices[key].source == price.source


def in_a_file(scenario: Scenario, folder: Path) -> Scenario:
    """A changed scenario read again from a file of its own."""
    import ruamel.yaml

    for part in ("models", "scenarios"):
        shutil.copytree(ROOT / part, folder / part)
    with (folder / "scenarios" / "odd.yaml").open("w", encoding="utf-8") as text:
        ruamel.yaml.YAML(typ="safe", pure=True).dump(scenario.document.data, text)
    return read_scenario(folder / "scenarios" / "odd.yaml")


@pytest.mark.slow
def test_plans_of_the_cases_have_the_same_margins(scenarios: dict[str, Scenario], tmp_path: Path) -> None:
    for name, cases in ((MARCH, 6), (MARRAM, 1), (TEXTBOOK, 1), (HALF_YEAR, 2)):
        read = read_cases(write_case_sheet(scenarios[name], tmp_path / "prices.xlsx"))
        expected = price_case_set(scenarios[name])
        for one, other in list(zip(read.cases, expected.cases, strict=True))[:cases]:
            assert one.scenario
            assert other.scenario
            assert make_plan(one.scenario).margin == pytest.approx(make_plan(other.scenario).margin, rel=1e-9), (name, one.name)


@needs_office
@pytest.mark.slow
def test_a_sheet_saved_by_another_program_is_the_same(
    scenarios: dict[str, Scenario], recalculate: Recalculate, tmp_path: Path
) -> None:
    files = [write_case_sheet(scenarios[name], tmp_path / name.replace("yaml", "xlsx")) for name in SCENARIOS]
    for name, again in zip(SCENARIOS, recalculate(*files), strict=True):
        read = read_cases(again, ROOT / "scenarios" / name)
        same_prices_and_limits(read, price_case_set(scenarios[name]))
        sheet = loaded(again)["Prices"]
        assert len(sheet.data_validations.dataValidation) > 3
        assert sheet.protection.sheet


def test_the_same_scenario_gives_the_same_bytes(scenarios: dict[str, Scenario], tmp_path: Path) -> None:
    for name in QUICK:
        scenario = scenarios[name]
        once = case_sheet_bytes(scenario, tmp_path)
        assert case_sheet_bytes(scenario, tmp_path) == once
        assert write_case_sheet(scenario, tmp_path / "prices.xlsx").read_bytes() == once


def test_a_sheet_is_written_whole_or_not_at_all(scenarios: dict[str, Scenario], tmp_path: Path) -> None:
    with pytest.raises(OutputError, match="is a folder"):
        write_case_sheet(scenarios[TEXTBOOK], tmp_path)
    with pytest.raises(OutputError, match=r"the folder .* is not there"):
        write_case_sheet(scenarios[TEXTBOOK], tmp_path / "nowhere" / "prices.xlsx")
    assert not list(tmp_path.iterdir())


def test_the_way_to_the_scenario_is_that_from_the_workbook(scenarios: dict[str, Scenario], tmp_path: Path) -> None:
    """Moved together they are found; alone the workbook says what it misses, and takes what it is given."""
    for folder in ("models", "scenarios"):
        shutil.copytree(ROOT / folder, tmp_path / "site" / folder)
    scenario = read_scenario(tmp_path / "site" / "scenarios" / TEXTBOOK)
    (tmp_path / "site" / "sheets").mkdir()
    file = write_case_sheet(scenario, tmp_path / "site" / "sheets" / "prices.xlsx")
    sheet = loaded(file)["Read me"]
    assert [(row[0].value, row[1].value) for row in sheet.iter_rows(min_row=3, max_row=3)] == [
        ("Scenario", "../scenarios/thermal_cracker.yaml")
    ]
    shutil.move(tmp_path / "site", tmp_path / "moved")
    assert read_cases(tmp_path / "moved" / "sheets" / "prices.xlsx").scenario.title == scenario.title
    alone = shutil.copy(tmp_path / "moved" / "sheets" / "prices.xlsx", tmp_path / "prices.xlsx")
    with pytest.raises(InputError, match=r"\[Read me!B3\]  scenario\n  the scenario .*thermal_cracker.yaml is not there"):
        read_cases(alone)
    assert read_cases(alone, ROOT / "scenarios" / TEXTBOOK).names == ("As written",)


# ---------------------------------------------------------------------------------- the pages


def test_every_price_has_a_row_with_its_words(scenarios: dict[str, Scenario], tmp_path: Path) -> None:
    scenario = scenarios[MARCH]
    sheet = loaded(case_sheet_bytes(scenario, tmp_path))["Prices"]
    items = [sheet.cell(at, column(sheet, "Item")).value for at in range(HEADER + 1, sheet.max_row + 1)]
    assert items[0] == "weight"
    assert set(items[1:]) == {item for item, _ in scenario.case.prices}
    assert len(items) == len(set(items))
    expected = {
        "feeds.ethane.contract": ("feeds", "USc/gal", "purchased ethane, gallons at 60 degF", None, 41, 45, 304.24),
        "outlets.chemical_grade_propylene": (
            *("products", "USc/lb", "below polymer grade, per lb of the whole product", "outlets.polymer_grade_propylene"),
            *(-2, -2, 815.71),
        ),
        "outlets.fuel_gas_export": (
            "products",
            "fraction",
            "share of the natural-gas price, per GJ LHV",
            "utilities.natural_gas",
            0.8,
            0.8,
            4.21,
        ),
        "utilities.surplus_steam": ("energy and CO2", "USD/t", None, None, 0, None, 0),
        "variable_costs.decoking": ("costs", "USD", None, None, 18000, None, 18000),
    }
    values = loaded(case_sheet_bytes(scenario, tmp_path), values=True)["Prices"]
    for item, (group, unit, basis, of, base, high, used) in expected.items():
        at = row(sheet, item)
        found = [
            sheet.cell(at, column(sheet, heading)).value
            for heading in ("Group", "Unit", "Basis", "Relative to", "Base", "High crude")
        ]
        assert found == [group, unit, basis, of, base, high], item
        assert values.cell(at, column(sheet, "Used, first case")).value == pytest.approx(used, abs=0.005), item


def test_what_is_added_and_freight_are_one_amount(scenarios: dict[str, Scenario], tmp_path: Path) -> None:
    """4 EUR/t and 3 USD/t at 0.92 EUR/USD are 6.76 EUR/t, on 0.9 of the index."""
    sheet = loaded(case_sheet_bytes(scenarios[f"odd {MARRAM}"], tmp_path))["Prices"]
    at = row(sheet, "feeds.light_naphtha.contract")
    found = [sheet.cell(at, column(sheet, heading)).value for heading in ("Unit", "Relative to", "Times", "As written")]
    assert found == ["EUR/t", "indexes.naphtha", 0.9, pytest.approx(6.76)]


def test_months_that_differ_have_rows_of_their_own(scenarios: dict[str, Scenario], tmp_path: Path) -> None:
    book = loaded(case_sheet_bytes(scenarios[f"odd {HALF_YEAR}"], tmp_path))
    sheet, limits = book["Prices"], book["Limits"]
    steam = {
        month: sheet.cell(row(sheet, "utilities.surplus_steam", month), column(sheet, "High crude")).value
        for month in ("", "2031-05", "2031-08")
    }
    assert steam == {"": 0, "2031-05": 1, "2031-08": 0.05}
    costs = [
        sheet.cell(at, column(sheet, "Month")).value
        for at in range(4, sheet.max_row + 1)
        if sheet.cell(at, 2).value == "variable_costs.chemicals"
    ]
    assert costs == [f"2031-0{month}" for month in range(3, 9)]
    assert limits.cell(row(limits, "feeds.condensate.spot_cargo.max", "2031-03"), column(limits, "Note") + 1).value == "unlimited"


def test_sheets_are_tidy(scenarios: dict[str, Scenario], tmp_path: Path) -> None:
    """Frozen, filtered, landscape and one page wide, protected without a password, nothing hidden."""
    for scenario in (scenarios[MARCH], scenarios[f"odd {MARRAM}"]):
        book = loaded(case_sheet_bytes(scenario, tmp_path))
        assert book.sheetnames == SHEETS
        assert {sheet.sheet_state for sheet in book} == {"visible"}
        for sheet in book:
            assert (sheet.page_setup.orientation, int(sheet.page_setup.paperSize), sheet.page_setup.fitToHeight) == (
                "landscape",
                9,
                0,
            )
            assert sheet.protection.sheet
            assert sheet.protection.password is None
            assert not sheet.merged_cells.ranges
            assert not any(dimension.hidden for dimension in [*sheet.column_dimensions.values(), *sheet.row_dimensions.values()])
        for name in SHEETS[1:]:
            assert re.fullmatch(r"[A-C]4", book[name].freeze_panes), name
            assert book[name].auto_filter.ref.startswith("A3:"), name
            assert book[name].print_title_rows == "$3:$3"
        assert not book["Prices"].protection.insertColumns  # what is locked is what is not allowed


def test_inputs_are_open_and_all_else_is_locked(scenarios: dict[str, Scenario], tmp_path: Path) -> None:
    scenario = scenarios[MARCH]
    book = loaded(case_sheet_bytes(scenario, tmp_path))
    for name, open_texts in (("Prices", {"Unit", "Basis", "Source", "Date", "Note"}), ("Limits", {"Unit", "Note"})):
        sheet = book[name]
        first = column(sheet, "Base") if name == "Prices" else column(sheet, "Note") + 1
        last = first + len(case_names(scenario)) + MORE_CASES
        at = row(sheet, "feeds.ethane.contract" if name == "Prices" else "feeds.ethane.contract.max")
        open_cells = {cell.column for cell in sheet[at] if not cell.protection.locked}
        texts = {cell.column for cell in sheet[HEADER] if cell.value in open_texts}
        assert open_cells == texts | set(range(first, last)), name
        fills = {sheet.cell(at, one).fill.fgColor.rgb for one in (*texts, *range(first, first + 6))}
        assert fills == {"FFFFF4CE"}, name
        assert sheet.cell(at, column(sheet, "Item")).fill.fill_type is None
    headings = {cell.column for cell in book["Prices"][HEADER] if not cell.protection.locked}
    first = column(book["Prices"], "Base")
    assert headings == set(range(first, first + 6 + MORE_CASES))
    assert not [cell for cell in book["Limits"][HEADER] if not cell.protection.locked]
    assert not [cell for row in book["Prices as used"].iter_rows() for cell in row if not cell.protection.locked]


def unit_lists(book: Any, name: str) -> dict[str, list[str]]:
    """The units that each row of a sheet offers, read from the range that its list points to."""
    sheet = book[name]
    unit = get_column_letter(column(sheet, "Unit"))
    found = {}
    for rule in sheet.data_validations.dataValidation:
        if rule.type == "list":
            there, _, area = rule.formula1.lstrip("=").partition("!")
            cells = [cell.value for line in book[there][area.replace("$", "")] for cell in line]
            for area in rule.sqref.ranges:
                assert get_column_letter(area.min_col) == unit
                found |= {sheet.cell(at, column(sheet, "Item")).value: cells for at in range(area.min_row, area.max_row + 1)}
    return found


def test_each_row_offers_the_units_that_can_be_converted_there(scenarios: dict[str, Scenario], tmp_path: Path) -> None:
    book = loaded(case_sheet_bytes(scenarios[MARCH], tmp_path))
    lists = unit_lists(book, "Prices")
    assert set(lists) == {item for item, _ in scenarios[MARCH].case.prices}
    by_weight = ["USD/t", "USD/kg", "USc/lb", "USD/lb"]
    assert lists["feeds.ethane.contract"] == ["USc/gal", *by_weight, "USD/gal", "USD/bbl", "USD/m3"]
    assert lists["outlets.ethylene_spot"] == ["USc/lb", "USD/t", "USD/kg", "USD/lb"]
    assert lists["contents.crude_c4.c5"] == ["fraction", "%", *by_weight]
    heat = ["USD/GJ LHV", "USD/GJ HHV", "USD/MMBtu LHV", "USD/MWh LHV", "USD/MWh HHV"]
    assert lists["utilities.natural_gas"] == ["USD/MMBtu HHV", *heat]
    assert lists["utilities.grid_power"] == ["USD/MWh", "USD/kWh", "USc/kWh"]
    limits = unit_lists(book, "Limits")
    assert limits["feeds.ethane.contract.max"][:3] == ["kt", "t", "klb"]
    assert {"bbl", "bbl/d"} <= set(limits["feeds.ethane.contract.max"])
    assert "bbl" not in limits["outlets.ethylene_spot.max"]
    assert limits["recovery_units.c3_splitter.factor"] == ["fraction", "%"]
    marram = unit_lists(loaded(case_sheet_bytes(scenarios[MARRAM], tmp_path)), "Prices")
    assert {"EUR/t", "USD/t", "cEUR/L"} <= set(marram["outlets.gasoline_sale"])
    number = next(rule for rule in book["Prices"].data_validations.dataValidation if rule.type == "decimal")
    assert len(number.sqref.ranges) == 1


def test_only_plain_functions_no_macros_no_links(scenarios: dict[str, Scenario], tmp_path: Path) -> None:
    content = case_sheet_bytes(scenarios[HALF_YEAR], tmp_path)
    book = loaded(content)
    used = {word for sheet, at in formulas(book) for word in re.findall(r"[A-Z]{2,}(?=\()", str(book[sheet][at].value))}
    assert used == {"IF", "OR", "ISNUMBER", "INDEX", "MATCH"}
    with zipfile.ZipFile(io.BytesIO(content)) as file:
        assert not [name for name in file.namelist() if "vba" in name.lower() or "external" in name.lower()]
        sheets = b"".join(file.read(name) for name in file.namelist() if name.startswith("xl/worksheets/sheet"))
    assert not re.search(rb"<v>-0(\.0)?</v>", sheets)


def formulas(book: Any) -> Iterator[tuple[str, str]]:
    for sheet in book:
        for cells in sheet.iter_rows():
            yield from ((sheet.title, cell.coordinate) for cell in cells if cell.data_type == "f")


def test_text_stays_text(scenarios: dict[str, Scenario], tmp_path: Path) -> None:
    scenario = scenarios[MARRAM].with_({"indexes.naphtha.basis": "=HYPERLINK(1)", "title": "+1 & <two>"})
    book = loaded(case_sheet_bytes(scenario, tmp_path))
    cell = book["Prices"].cell(row(book["Prices"], "indexes.naphtha"), column(book["Prices"], "Basis"))
    assert (cell.value, cell.data_type) == ("=HYPERLINK(1)", "s")
    assert book["Read me"]["A1"].value == "Cases of +1 & <two>"


def test_a_case_cannot_have_the_name_of_a_column(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    for folder in ("models", "scenarios"):
        shutil.copytree(ROOT / folder, tmp_path / folder)
    table = tmp_path / "scenarios" / "prices" / "brackwater.csv"
    table.write_text(table.read_text(encoding="utf-8").replace("Weak aromatics", "used in", 1), encoding="utf-8")
    with pytest.raises(OutputError, match="the price case `used in` has the name of a column"):
        case_sheet_bytes(read_scenario(tmp_path / "scenarios" / MARCH), tmp_path)


def test_reading_loads_no_writer_and_importing_loads_no_reader() -> None:
    code = (
        "import sys; import olefinlp.inputs.case_sheet, olefinlp.outputs; before = 'openpyxl' in sys.modules\n"
        "from olefinlp import read_cases; read_cases(sys.argv[1])\n"
        "print(before, 'openpyxl' in sys.modules, 'xlsxwriter' in sys.modules)"
    )
    file = ROOT / "tests" / "odd_but_good_cases" / "moved.xlsx"
    done = subprocess.run([sys.executable, "-c", code, str(file)], capture_output=True, text=True, check=True, cwd=ROOT)
    assert done.stdout.strip() == "False True False"


# ---------------------------------------------------------------------------------- live formulas


@pytest.mark.parametrize("name", EVERY)
def test_converted_prices_are_those_of_the_plan(scenarios: dict[str, Scenario], tmp_path: Path, name: str) -> None:
    """The values beside the formulas, against the prices of the cases as the plan has them."""
    scenario = scenarios[name]
    sheet = loaded(case_sheet_bytes(scenario, tmp_path), values=True)["Prices as used"]
    unit, months = column(sheet, "Used in"), [period.name for period in scenario.periods]
    rows = price_rows(scenario)
    own = {(price.item, price.month) for price in rows}
    for number, case in enumerate(price_case_set(scenario).cases, 1):
        assert case.scenario
        for at, price in enumerate(rows, HEADER + 2):
            month = price.month or next(name for name in months if (price.item, name) not in own)
            assert (sheet.cell(at, 1).value, sheet.cell(at, unit).value) == (price.item, price.used_in)
            used = case.scenario.case.prices[price.item, month].value
            assert sheet.cell(at, unit + number).value == pytest.approx(used, rel=1e-12), (case.name, price.item)


@needs_office
@pytest.mark.slow
def test_recalculation_gives_every_value_that_was_written(
    scenarios: dict[str, Scenario], recalculate: Recalculate, tmp_path: Path
) -> None:
    files = [write_case_sheet(scenario, tmp_path / f"{name[:-5]}.xlsx") for name, scenario in scenarios.items()]
    for file, again in zip(files, recalculate(*files), strict=True):
        found, before = loaded(again, values=True), loaded(file, values=True)
        count = 0
        for sheet, at in formulas(loaded(file)):
            new, old = found[sheet][at].value, before[sheet][at].value
            count += 1
            if isinstance(old, int | float):
                assert new == pytest.approx(old, rel=1e-9, abs=1e-12), (file.name, sheet, at)
            else:
                assert (new or "") == (old or ""), (file.name, sheet, at)
        assert count > 150, file.name


@needs_office
@pytest.mark.slow
def test_another_unit_or_price_changes_what_is_used_at_once(
    scenarios: dict[str, Scenario], recalculate: Recalculate, tmp_path: Path
) -> None:
    """USD/bbl in place of USc/gal, a unit that is none, a text for a number; what leans on a changed price moves with it."""
    _, book = written(scenarios[MARCH], tmp_path)
    sheet = book["Prices"]
    put(sheet, "feeds.ethane.contract", "Unit", "USD/bbl")
    put(sheet, "feeds.propane.contract", "Unit", "USD/ton")
    put(sheet, "feeds.n_butane.spot_cargo", "Base", "a hundred")
    put(sheet, "outlets.polymer_grade_propylene", "Unit", "USD/t")
    put(sheet, "contents.crude_c4.c5", "Unit", "%")
    put(sheet, "contents.pygas.c5", "Unit", "USD/t")  # 1 USD/t more than the price of the other, in place of 1 times it
    sheet.cell(HEADER, column(sheet, "Weak aromatics") + 1).value = "Dear power"
    sheet.cell(row(sheet, "utilities.grid_power"), column(sheet, "Weak aromatics") + 1).value = 99
    (again,) = recalculate(saved(book, tmp_path / "changed.xlsx"))
    found = loaded(again, values=True)
    used = {
        found["Prices"].cell(at, 2).value: found["Prices"].cell(at, column(sheet, "Used, first case")).value
        for at in range(HEADER + 2, found["Prices"].max_row + 1)
    }
    litres, density = 158.987294928, 0.356  # of a barrel; of ethane at 60 degF, from the plant
    assert scenarios[MARCH].plant.file.feeds["ethane"].density == parse_quantity("356 kg/m3")
    assert used["feeds.ethane.contract"] == pytest.approx(41 / (litres * density / 1000), rel=1e-9)
    assert used["feeds.propane.contract"] == "unit?"
    assert used["feeds.n_butane.spot_cargo"] == "number?"
    assert used["outlets.polymer_grade_propylene"] == pytest.approx(39)
    assert used["outlets.chemical_grade_propylene"] == pytest.approx(39 - 2 / 0.00045359237 / 100)
    assert used["contents.crude_c4.c5"] == pytest.approx(4.8)
    assert used["contents.pygas.c5"] == pytest.approx(481)
    as_used, limits = found["Prices as used"], found["Limits"]
    added = column(as_used, "Dear power")
    assert column(limits, "Dear power") == column(limits, "Weak aromatics") + 1
    assert as_used.cell(row(as_used, "utilities.grid_power"), added).value == 99
    assert as_used.cell(row(as_used, "utilities.carbon"), added).value == 30
    assert as_used.cell(row(as_used, "utilities.carbon"), added + 1).value in (None, "")


# ---------------------------------------------------------------------------------- what people change


def test_a_column_that_is_added_is_a_case(scenarios: dict[str, Scenario], tmp_path: Path) -> None:
    """It takes what it leaves blank from the first; on the sheet of limits its heading follows by formula."""
    file, book = written(scenarios[MARCH], tmp_path)
    sheet, limits = book["Prices"], book["Limits"]
    new = column(sheet, "Weak aromatics") + 1
    sheet.cell(HEADER, new).value = "Dear gas"
    sheet.cell(row(sheet, "utilities.natural_gas"), new).value = 7.5
    limits.cell(row(limits, "feeds.ethane.contract.max"), column(limits, "Note") + 7).value = 25
    read = read_cases(saved(book, file))
    assert read.names == (*case_names(scenarios[MARCH]), "Dear gas")
    first, added = read.cases[0].scenario, read.cases[-1].scenario
    assert first
    assert added
    assert added.case.prices["utilities.natural_gas", "2031-03"].number == 7.5
    changed = {"utilities.natural_gas", "outlets.fuel_gas_export"}
    for (item, month), price in added.case.prices.items():
        assert (price.value == first.case.prices[item, month].value) == (item not in changed), item
    limit = added.case.limits["purchase", "ethane.contract", "2031-03"]
    assert limit.high == 25
    assert str(limit.place_high).endswith(f"prices.xlsx [Limits!{get_column_letter(column(limits, 'Note') + 7)}5]")
    assert added.price_case == "Dear gas"


def test_blank_means_as_the_first_case(scenarios: dict[str, Scenario], tmp_path: Path) -> None:
    file, book = written(scenarios[MARCH], tmp_path)
    put(book["Prices"], "feeds.ethane.contract", "High crude", None)
    put(book["Prices"], "feeds.ethane.contract", "Base", 40)
    read = read_cases(saved(book, file))
    numbers = [case.scenario.case.prices["feeds.ethane.contract", "2031-03"].number for case in read.cases if case.scenario]
    assert numbers == [40, 40, 37, 27, 41, 41]


def test_weights(scenarios: dict[str, Scenario], tmp_path: Path) -> None:
    file, book = written(scenarios[MARCH], tmp_path)
    plain = read_cases(file)
    assert not plain.weighted
    assert [case.weight for case in plain.cases] == pytest.approx([1 / 6] * 6)
    for name, weight in zip(case_names(scenarios[MARCH]), (4, 1, 1, 1, 1, 0), strict=True):
        put(book["Prices"], "weight", name, weight)
    read = read_cases(saved(book, file))
    assert read.weighted
    assert [case.weight for case in read.cases] == pytest.approx([0.5, 0.125, 0.125, 0.125, 0.125, 0])


def test_limits_of_a_case(scenarios: dict[str, Scenario], tmp_path: Path) -> None:
    """A maximum in another unit, none at all, a minimum, a factor and an outage with their reasons, the units in percent."""
    file, book = written(scenarios[MARCH], tmp_path)
    sheet = book["Limits"]
    high, low = column(sheet, "Note") + 2, column(sheet, "Note") + 3

    def change(item: str, at: int, value: object, **texts: str) -> None:
        sheet.cell(row(sheet, item), at).value = value
        for heading, text in texts.items():
            put(sheet, item, heading, text)

    change("outlets.ethylene_contract.max", high, "Unlimited")
    change("outlets.ethylene_spot.min", high, 3)
    change("feeds.light_naphtha.spot.max", low, 10)
    change("recovery_units.c3_splitter.factor", high, 0.9, Note="fouled reboiler")
    change("recovery_units.c2_splitter.factor", low, 85, Unit="%", Note="tray damage")
    put(sheet, "recovery_units.c2_splitter.factor", "Unit", "%")
    sheet.cell(row(sheet, "recovery_units.c2_splitter.factor"), column(sheet, "Note") + 1).value = 100
    change("furnace_groups.gas_furnaces.outage_hours", high, 5, Unit="d", Note="retube")
    read = read_cases(saved(book, file))
    base, crude, cheap = (case.scenario.case.limits for case in read.cases[:3] if case.scenario)
    month = "2031-03"
    assert (base["outlet", "ethylene_contract", month].low, base["outlet", "ethylene_contract", month].high) == (44, 58)
    assert (crude["outlet", "ethylene_contract", month].low, crude["outlet", "ethylene_contract", month].high) == (44, None)
    assert (base["outlet", "ethylene_spot", month].low, crude["outlet", "ethylene_spot", month].low) == (None, 3)
    assert (base["purchase", "light_naphtha.spot", month].high, cheap["purchase", "light_naphtha.spot", month].high) == (30, 10)
    for unit, limits, factor, reason in (
        ("c3_splitter", crude, 0.9, "fouled reboiler"),
        ("c2_splitter", cheap, 0.85, "tray damage"),
    ):
        assert limits["unit_load", unit, month].high == pytest.approx(factor * (base["unit_load", unit, month].high or 0))
        assert limits["unit_load", unit, month].reason == reason
        assert base["unit_load", unit, month].reason == ""
    hours = base["furnace_hours", "gas_furnaces", month].high, crude["furnace_hours", "gas_furnaces", month].high
    loss = 1 - 0.01 * scenarios[MARCH].plant.file.furnace_groups["gas_furnaces"].unplanned_loss.number
    assert (hours[0] or 0) - (hours[1] or 0) == pytest.approx(120 * loss)
    assert crude["furnace_hours", "gas_furnaces", month].reason == "retube"


def test_a_changed_factor_needs_its_reason(scenarios: dict[str, Scenario], tmp_path: Path) -> None:
    file, book = written(scenarios[MARCH], tmp_path)
    sheet = book["Limits"]
    at, case = row(sheet, "recovery_units.c3_splitter.factor"), column(sheet, "Note") + 2
    sheet.cell(at, case).value = 0.9
    with pytest.raises(InputError) as caught:
        read_cases(saved(book, file))
    (finding,) = caught.value.findings
    assert str(finding.place).endswith(f"prices.xlsx [Limits!{get_column_letter(case)}{at}]")
    assert finding.message == "needs its reason"


def test_a_month_of_its_own_in_a_free_row(scenarios: dict[str, Scenario], tmp_path: Path) -> None:
    """Months that a program has made dates of are months all the same; on the sheet of limits too."""
    file, book = written(scenarios[HALF_YEAR], tmp_path)
    sheet, limits = book["Prices"], book["Limits"]
    for page, item, value in ((sheet, "feeds.ethane.contract", 50), (limits, "feeds.ethane.contract.max", 20)):
        free = row(page, None)  # type: ignore[arg-type]
        first = column(sheet, "Base") if page is sheet else column(page, "Note") + 1
        cells = {"Item": item, "Month": datetime.datetime(2031, 5, 1), "Unit": "USc/gal" if page is sheet else "kt"}
        for heading, text in cells.items():
            page.cell(free, column(page, heading)).value = text
            assert not page.cell(free, column(page, heading)).protection.locked
        page.cell(free, first).value = value
    sheet.cell(row(sheet, "feeds.ethane.contract", ""), column(sheet, "Basis")).value = "gallons at 60 degF"
    read = read_cases(saved(book, file), ROOT / "scenarios" / HALF_YEAR)
    for case in read.cases:
        assert case.scenario
        numbers = [case.scenario.case.prices["feeds.ethane.contract", month].number for month in ("2031-04", "2031-05")]
        assert numbers[1] == 50
        assert numbers[0] == {"High crude": 45, "Low crude": 37, "Cheap ethane": 27}.get(case.name, 41)
        highs = [case.scenario.case.limits["purchase", "ethane.contract", month].high for month in ("2031-04", "2031-05")]
        assert highs == [30, 20]


def test_a_price_without_a_row_is_said_and_kept(scenarios: dict[str, Scenario], tmp_path: Path) -> None:
    file, book = written(scenarios[TEXTBOOK], tmp_path)
    sheet = book["Prices"]
    for cell in sheet[row(sheet, "utilities.natural_gas")]:
        cell.value = None
    read = read_cases(saved(book, file))
    assert [str(warning).split("  ", 1)[1] for warning in read.warnings] == [
        "utilities.natural_gas\n  warning: has no row: the scenario's own price is used in every case"
    ]
    assert read.cases[0].scenario
    assert read.cases[0].scenario.case.prices["utilities.natural_gas", "hour"].number == 2.5


def test_words_beside_a_price_travel_into_the_plan(scenarios: dict[str, Scenario], tmp_path: Path) -> None:
    file, book = written(scenarios[TEXTBOOK], tmp_path)
    sheet = book["Prices"]
    put(sheet, "feeds.ethane.purchase", "Basis", "delivered")
    put(sheet, "feeds.ethane.purchase", "Source", "trade press")
    put(sheet, "feeds.ethane.purchase", "Date", datetime.datetime(2031, 2, 5))
    (case,) = read_cases(saved(book, file)).cases
    assert case.scenario
    price = case.scenario.case.prices["feeds.ethane.purchase", "hour"]
    assert (price.basis, price.source, price.text) == ("delivered", "trade press 2031-02-05", "6.55 USc/lb")
    assert str(price.place).endswith("prices.xlsx [Prices!K5]")
