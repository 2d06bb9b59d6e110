"""The workbook of a comparison: every formula gives the tool's number, and live economics never pretends to plan again."""

from __future__ import annotations

import io
import re
import zipfile
from pathlib import Path

import pytest
from books import book_of, formulas, row_of
from conftest import ROOT, Recalculate, needs_office

from olefinlp import compare_cases, read_cases
from olefinlp.answers.case_answers import CaseAnswers, case_answers
from olefinlp.answers.comparison import Comparison
from olefinlp.answers.plan import Plan, make_plan
from olefinlp.outputs.comparison_live import FARTHER, INSIDE, LIVE, OUTSIDE
from olefinlp.outputs.comparison_page import COMPARISON
from olefinlp.outputs.comparison_records import comparison_record, comparison_tables
from olefinlp.outputs.comparison_text import comparison_text
from olefinlp.outputs.comparison_why import WHY
from olefinlp.outputs.comparison_workbook import comparison_bytes, write_comparison

MARCH = ROOT / "scenarios" / "brackwater_2031_03.yaml"
CONDENSATE = "feeds.condensate.spot_cargo"
MARRAM = ROOT / "scenarios" / "marram_point_2031_03.yaml"
PLAIN = {"SUM", "SUMPRODUCT", "IF", "ABS", "AND", "OR", "INDEX", "MATCH", "MAX", "MIN", "ISNUMBER", "COUNT", "COUNTIF", "ROUND"}


def listed(folder: Path, scenario: Path, *cases: str) -> Comparison:
    """A comparison of a YAML list."""
    path = folder / "cases.yaml"
    path.write_text(
        "\n".join([f"scenario: {scenario.as_posix()}", "cases:", *(f"  - {case}" for case in cases)]), encoding="utf-8"
    )
    return compare_cases(read_cases(path))


@pytest.fixture(scope="module")
def comparison() -> Comparison:
    return compare_cases(read_cases(MARCH))


@pytest.fixture(scope="module")
def answers(comparison: Comparison) -> CaseAnswers:
    return case_answers(comparison, risk=0.3)


@pytest.fixture(scope="module")
def content(comparison: Comparison, answers: CaseAnswers) -> bytes:
    return comparison_bytes(comparison, answers)


@pytest.fixture(scope="module")
def mixed(tmp_path_factory: pytest.TempPathFactory) -> Comparison:
    """Another plant and currency: other prices, other limits, one impossible, one odd name, prices that lean on others."""
    return listed(
        tmp_path_factory.mktemp("mixed"),
        MARRAM,
        "{name: As planned, weight: 2}",
        "{name: 'Dear naphtha & \"gas\" (1)', weight: 1, prices: {indexes.naphtha: 590 USD/t, "
        "utilities.natural_gas: 11 EUR/GJ HHV}}",
        "{name: no plan, weight: 1, changes: {outlets.propylene_sale.min: 31.9 kt}}",
        "{name: less ethane, weight: 1, changes: {feeds.ethane.pipeline.tiers.2.up_to: 11 kt}, prices: "
        "{feeds.light_naphtha.contract: 500 EUR/t}}",
    )


# ---------------------------------------------------------------------------------- shape


def test_sheets_stand_in_the_order_of_reading(content: bytes) -> None:
    names = book_of(content).sheetnames
    assert names[:3] == [COMPARISON, "In words", WHY]
    assert {"Feeds", "Products", "Furnaces", "Loads", "Limits that bind", "Break-even prices", "Regret", "Buying plan"} <= set(
        names
    )
    assert names.index(LIVE) < names.index("Prices used") < names.index("Money") < names.index("Flat list")
    assert all(len(name) <= 31 for name in names)


def test_only_plain_functions_and_nothing_hidden(content: bytes) -> None:
    book = book_of(content)
    used = {word for sheet, at in formulas(book) for word in re.findall(r"[A-Z]{2,}(?=\()", str(book[sheet][at].value))}
    assert used <= PLAIN
    assert {sheet.sheet_state for sheet in book} == {"visible"}
    with zipfile.ZipFile(io.BytesIO(content)) as file:
        assert not [name for name in file.namelist() if "vba" in name.lower() or "external" in name.lower()]
        charts = [name for name in file.namelist() if name.startswith("xl/charts/chart")]
    assert len(charts) == 4


@needs_office
@pytest.mark.slow
def test_bridges_start_from_the_first_case_that_has_a_plan(recalculate: Recalculate, tmp_path: Path) -> None:
    found = listed(
        tmp_path,
        MARRAM,
        "{name: too much, weight: 1, changes: {outlets.propylene_sale.min: 31.9 kt}}",
        "{name: as planned, weight: 1}",
        "{name: dear, weight: 1, prices: {indexes.naphtha: 590 USD/t}}",
    )
    file = write_comparison(found, tmp_path / "first.xlsx")
    sheet = book_of(recalculate(file)[0], values=True)[WHY]
    labels = {sheet.cell(row, column).value for row in range(1, sheet.max_row + 1) for column in range(1, 6)}
    assert "margin of as planned" in labels and "margin of too much" not in labels
    row = next(cells for cells in sheet.iter_rows() if "feed prices" in [cell.value for cell in cells])
    numbers = [cell.value for cell in row if isinstance(cell.value, int | float)]
    assert numbers == pytest.approx([found.bridges["dear"].price_effect], rel=1e-9)


def test_differences_and_money_are_formulas(content: bytes, comparison: Comparison) -> None:
    book = book_of(content)
    for name in ("Feeds", "Products", "Loads", "Prices used"):
        sheet = book[name]
        first = next(at for at, cell in enumerate(sheet[2], 1) if cell.value == "High crude minus Base")
        for row in range(3, sheet.max_row + 1):
            own, base = sheet.cell(row, first - 5).coordinate, sheet.cell(row, first - 6).coordinate
            assert sheet.cell(row, first).value == f"={own}-{base}", (name, row)
    page = book[COMPARISON]
    margins = [page.cell(row_of(page, "margin before fixed cost"), at).value for at in range(3, 3 + len(comparison.names))]
    assert all(str(value).startswith("=SUM(") for value in margins)


def test_the_same_comparison_gives_the_same_bytes(comparison: Comparison, answers: CaseAnswers, content: bytes) -> None:
    assert comparison_bytes(comparison, answers) == content


def test_without_answers_the_plans_are_compared_alone(comparison: Comparison, tmp_path: Path) -> None:
    names = book_of(write_comparison(comparison, tmp_path / "quick.xlsx")).sheetnames
    assert LIVE not in names
    assert "Regret" not in names
    assert WHY in names


def test_a_case_without_a_plan_is_a_column_with_its_reason(mixed: Comparison) -> None:
    assert mixed.cases[2].plan is None
    book = book_of(comparison_bytes(mixed, case_answers(mixed)))
    page = book[COMPARISON]
    texts = [str(cell.value) for row in page.iter_rows(max_col=1) for cell in row if cell.value]
    assert any(text.startswith("no plan: ") and len(text) > 20 for text in texts)
    headings = [cell.value for cell in book["Feeds"][2]]
    assert "no plan" in headings
    at = headings.index("no plan") + 1
    assert all(book["Feeds"].cell(row, at).value is None for row in range(3, book["Feeds"].max_row + 1))


def test_no_plan_at_all_is_refused(tmp_path: Path) -> None:
    found = listed(tmp_path, MARRAM, "{name: one, changes: {outlets.propylene_sale.min: 31.9 kt}}")
    with pytest.raises(ValueError, match="no case has a plan"):
        comparison_bytes(found)


# ---------------------------------------------------------------------------------- recalculation


@needs_office
@pytest.mark.slow
def test_every_formula_gives_the_tools_number(
    comparison: Comparison, answers: CaseAnswers, mixed: Comparison, recalculate: Recalculate, tmp_path: Path
) -> None:
    kinds = {"march.xlsx": (comparison, answers), "mixed.xlsx": (mixed, case_answers(mixed)), "quick.xlsx": (mixed, None)}
    files = [write_comparison(found, tmp_path / name, around) for name, (found, around) in kinds.items()]
    for file, again, (found, _) in zip(files, recalculate(*files), kinds.values(), strict=True):
        new, old = book_of(again, values=True), book_of(file, values=True)
        wrong = []
        cells = formulas(book_of(file))
        for sheet, at in cells:
            now, was = new[sheet][at].value, old[sheet][at].value
            numbers = isinstance(was, int | float) and isinstance(now, int | float)
            same = now == pytest.approx(was, rel=1e-9, abs=1e-7) if numbers else (now or "") == (was or "")
            if not same:
                wrong.append((sheet, at, was, now))
        assert not wrong, file.name
        assert len(cells) > 300
        page = new[COMPARISON]
        row = row_of(page, "margin before fixed cost")
        for number, case in enumerate(found.cases):
            value = page.cell(row, 3 + number).value
            assert (value in (None, "")) if case.plan is None else value == pytest.approx(case.plan.margin / 1000, rel=1e-9)


@needs_office
@pytest.mark.slow
def test_a_wrong_value_would_be_put_right(content: bytes, recalculate: Recalculate, tmp_path: Path) -> None:
    """The proof that the test above recalculates: a changed price changes the margin."""
    book = book_of(content)
    sheet = book["Prices used"]
    row = row_of(sheet, "outlets.ethylene_spot", 3)
    sheet.cell(row, 5).value = sheet.cell(row, 5).value + 10
    book.save(tmp_path / "dearer.xlsx")
    again = book_of(recalculate(tmp_path / "dearer.xlsx")[0], values=True)
    before = book_of(content, values=True)
    at = (row_of(before[COMPARISON], "margin before fixed cost"), 3)
    change = again[COMPARISON].cell(*at).value - before[COMPARISON].cell(*at).value
    sold = next(r for r in before["Products"].iter_rows(values_only=True) if r[2] == "ethylene_spot")[4]
    assert change == pytest.approx(10 * sold, rel=1e-9)
    assert again[COMPARISON].cell(row_of(again[COMPARISON], "Check: formulas against the proven plan"), 3).value == "differs"
    assert again[COMPARISON].cell(row_of(again[COMPARISON], "Check: formulas against the proven plan"), 4).value == "agrees"


# ---------------------------------------------------------------------------------- live economics


class Live:
    """The sheet of live economics while it is tried: choose a case, type prices, calculate."""

    def __init__(self, content: bytes, folder: Path, recalculate: Recalculate) -> None:
        self.content, self.folder, self.recalculate, self.tries = content, folder, recalculate, 0

    def __call__(self, case: str, **typed: float | str) -> tuple[float, str, dict[str, str]]:
        """Margin at the prices typed (item → number), the verdict, and the flag of every item typed."""
        book = book_of(self.content)
        sheet = book[LIVE]
        sheet.cell(3, 3).value = case
        rows = {sheet.cell(row, 2).value: row for row in range(11, sheet.max_row + 1)}
        for item, number in typed.items():
            sheet.cell(rows[item], 4).value = number
        self.tries += 1
        path = self.folder / f"try{self.tries}.xlsx"
        book.save(path)
        found = book_of(self.recalculate(path)[0], values=True)[LIVE]
        flags = {item: found.cell(rows[item], 9).value for item in typed}
        return float(found.cell(6, 3).value), str(found.cell(8, 3).value), flags


def at_prices(plan: Plan, **typed: str) -> tuple[float, float]:
    """What a plan earns at changed prices, and the best margin there, k; planned again on its own."""
    from olefinlp.inputs.cases import WrittenCase, case_set
    from olefinlp.inputs.fields import to_price
    from olefinlp.inputs.findings import Findings, Place
    from olefinlp.inputs.prices import PriceGiven

    place = Place("typed")
    given = {(item, ""): PriceGiven(to_price(text), "", "", place) for item, text in typed.items()}
    scenario = case_set(plan.scenario, [WrittenCase("typed", place, given)], Findings(), "typed").cases[0].scenario
    assert scenario is not None
    best = make_plan(scenario)
    return float(best.lp.cost @ plan.solution.x) + plan.lp.offset, best.margin / 1000


@needs_office
@pytest.mark.slow
def test_live_economics_prices_the_same_plan_and_says_whether_it_stays_the_best(
    comparison: Comparison, answers: CaseAnswers, content: bytes, recalculate: Recalculate, tmp_path: Path
) -> None:
    live = Live(content, tmp_path, recalculate)
    naphtha, crude = "feeds.full_range_naphtha.spot_cargo", comparison.plan("High crude")
    margin, verdict, flags = live("Base", **{naphtha: 530})
    held, best = at_prices(comparison.plan("Base"), **{naphtha: "530 USD/t"})
    assert (margin, best) == pytest.approx((held, held), rel=1e-9)
    assert (flags[naphtha], verdict.partition(":")[0]) == (INSIDE, "yes")

    margin, verdict, flags = live("Base", **{naphtha: 540})
    held, best = at_prices(comparison.plan("Base"), **{naphtha: "540 USD/t"})
    assert margin == pytest.approx(held, rel=1e-9)
    assert best > held + 1
    assert (flags[naphtha], verdict.partition(":")[0]) == (OUTSIDE, "no")

    own = {one.item: one for one in answers.ranges["High crude"]}
    partly = {item: own[item].typed + 0.4 * (own[item].high - own[item].typed) for item in ("outlets.ethylene_spot", CONDENSATE)}
    margin, verdict, flags = live("High crude", **partly)
    held, best = at_prices(crude, **{item: f"{number!r} {own[item].unit}" for item, number in partly.items()})
    assert (margin, best) == pytest.approx((held, held), rel=1e-9)
    assert set(flags.values()) == {INSIDE}
    assert verdict.startswith("yes")


@needs_office
@pytest.mark.slow
def test_live_economics_with_prices_that_lean_on_each_other(
    comparison: Comparison, content: bytes, recalculate: Recalculate, tmp_path: Path
) -> None:
    live, plan = Live(content, tmp_path, recalculate), comparison.plan("Base")
    gas, export, grade = "utilities.natural_gas", "outlets.fuel_gas_export", "outlets.chemical_grade_propylene"
    margin, verdict, _ = live("Base", **{gas: 5.4})
    held, best = at_prices(plan, **{gas: "5.4 USD/MMBtu HHV"})
    assert (margin, best) == pytest.approx((held, held), rel=1e-9)
    assert verdict.startswith("yes")
    margin, verdict, flags = live("Base", **{gas: 5.4, export: 0.78})
    assert verdict.startswith("not sure")  # a share of what moves too: the product is not a straight way between them
    assert set(flags.values()) == {INSIDE}
    margin, verdict, flags = live("Base", **{grade: 10})
    assert flags[grade] == OUTSIDE
    assert verdict.startswith("no")
    assert margin == pytest.approx(plan.margin / 1000, rel=1e-9)  # none of it is sold: its price changes nothing in this plan


@needs_office
@pytest.mark.slow
def test_live_economics_with_odd_entries(
    content: bytes, recalculate: Recalculate, tmp_path: Path, comparison: Comparison
) -> None:
    live, base = Live(content, tmp_path, recalculate), comparison.plan("Base").margin / 1000
    margin, verdict, flags = live("Base", **{"outlets.hydrogen_sale": "cheap"})
    assert (margin, flags["outlets.hydrogen_sale"]) == (pytest.approx(base), "not a number")
    _, verdict, flags = live("Base", **{"outlets.hydrogen_sale": 9000})
    assert flags["outlets.hydrogen_sale"] == FARTHER
    assert verdict.startswith("not sure")
    _, verdict, flags = live("Base", **{"feeds.full_range_naphtha.spot_cargo": 534.5, "outlets.polymer_grade_propylene": 40.5})
    assert set(flags.values()) == {INSIDE}
    assert verdict.startswith("not sure")  # each alone is inside, both together are farther than is proven


# ---------------------------------------------------------------------------------- text and records


def test_what_is_printed_says_margins_reasons_and_choices(
    comparison: Comparison, answers: CaseAnswers, mixed: Comparison
) -> None:
    text = comparison_text(comparison, answers)
    assert re.search(r"Strong propylene +30,135\.5 +3,326\.8", text)
    assert re.search(r"Strong propylene +3,202\.4 +124\.4 +0\.0 +3,326\.8", text)
    assert "costs at most 1,367 kUSD" in text
    assert max(len(line) for line in text.splitlines()) <= 130
    other = comparison_text(mixed)
    assert re.search(r"no plan +no plan +20 %", other)
    assert "No plan\n  no plan:\n" in other


def test_the_record_holds_every_table(comparison: Comparison, answers: CaseAnswers) -> None:
    record = comparison_record(comparison, answers)
    assert [case["margin"] for case in record["cases"]] == [plan.margin for plan in comparison.plans.values()]
    assert {table.name for table in comparison_tables(comparison, answers)} <= set(record)
    regret = record["regret"]
    assert len(regret) == len(comparison.names)
