"""The workbook of a sweep: every formula gives the tool's number, whatever varies and whatever fails."""

from __future__ import annotations

import io
import re
import zipfile
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from books import book_of, formulas, row_of
from conftest import Recalculate, needs_office
from made_sweeps import CONTRACT, ETHYLENE, NAPHTHA, made

from olefinlp.answers.plan import Plan
from olefinlp.answers.sweep import Sweep, sweep
from olefinlp.answers.sweep_distribution import feeds_bought, figures_table, limits_binding
from olefinlp.answers.sweep_figures import planned
from olefinlp.answers.sweep_tornado import tornado_bars, tornado_table
from olefinlp.inputs.scenario import Scenario
from olefinlp.inputs.sweep_cases import DRAWS, GRID, LIST, ONE_AT_A_TIME
from olefinlp.inputs.sweep_draws import draw_cases
from olefinlp.outputs import sweep_cases_sheet
from olefinlp.outputs.files import OutputError
from olefinlp.outputs.sweep_page import cell_format, difference_format
from olefinlp.outputs.sweep_workbook import sweep_bytes, write_sweep

FACTOR = "recovery_units.cracked_gas_compressor.factor"
LOAD = "load.cracked_gas_compressor"
PLAIN = {
    "ABS",
    "AND",
    "AVERAGE",
    "COUNT",
    "COUNTIF",
    "IF",
    "MAX",
    "MIN",
    "NOT",
    "PERCENTILE",
    "ROUND",
    "STDEV",
    "SUMIF",
    "SUMPRODUCT",
}
CHARTS = {"draws": 2, "tornado": 1, "steps": 2, "heat": 0}


def drawn(scenario: Plan | Scenario, count: int) -> Sweep:
    """Every price that stands for itself and is not nothing, 8 % each."""
    case = (scenario.scenario if isinstance(scenario, Plan) else scenario).case
    month = case.months[0]
    items = [item for item, at in case.prices if at == month and not case.prices[item, at].of and case.prices[item, at].value > 0]
    return sweep(scenario, draw_cases(case.scenario, {item: {"sd": "8 %"} for item in items}, count=count, seed=3))


@pytest.fixture(scope="module")
def kinds(march: Plan) -> dict[str, Sweep]:
    """One sweep of each kind; the tornado and the heat map have cases without a plan."""
    naphtha = {"from": 500, "to": 570, "step": 5}
    return {
        "draws": drawn(march, 120),
        "tornado": sweep(march, {NAPHTHA: [500, 560], CONTRACT: [20, 80], FACTOR: [0.9, 1.1], ETHYLENE: [30]}, how=ONE_AT_A_TIME),
        "steps": sweep(march, {NAPHTHA: naphtha}),
        "heat": sweep(march, {FACTOR: [0.6, 0.8, 1.0], CONTRACT: [40, 50, 57]}),
    }


@pytest.fixture(scope="module")
def odd(march: Plan, shipped_scenario: Callable[[str], Scenario]) -> dict[str, Sweep]:
    """Cases at the edges: one, none with a plan, some without, other currencies and months, ends on one side of today."""
    today = march.margin / 1000
    nothing = {0: "limits clash: a", 1: ""}
    return {
        "one": made(march, [[500]], [100], how=DRAWS),
        "none_drawn": made(march, [[500], [510]], [0, 0], how=DRAWS, failed=nothing),
        "none_steps": made(march, [[500], [510]], [0, 0], how=LIST, failed=nothing),
        "none_tornado": made(
            march, [[1, np.nan], [np.nan, 2]], [0, 0], paths=[NAPHTHA, ETHYLENE], how=ONE_AT_A_TIME, failed=nothing
        ),
        "none_heat": made(march, [[1, 2], [1, 3]], [0, 0], paths=[NAPHTHA, ETHYLENE], how=GRID, failed=nothing),
        "some": made(
            march,
            [[at] for at in range(8)],
            [-5, 0, 9499.5, 9500, 12000, 7, 8, 9],
            held=[-6, 0, 9000, 9500, 11000, 6, 8, 9],
            how=DRAWS,
            failed={5: "limits clash: a", 7: "limits clash: b"},
            readings={"bought.gas_oil.spot_barge": [0, 0.1, 0.2, 0.3, 5, 9, 9, 9]},
        ),
        "one_side": made(
            march,
            [[500, np.nan], [560, np.nan], [np.nan, 30], [np.nan, 36]],
            today + np.array([100, 250, -90, -20]),
            paths=[NAPHTHA, ETHYLENE],
            how=ONE_AT_A_TIME,
        ),
        "other_plant": drawn(shipped_scenario("marram_point_2031_03.yaml"), 45),
        "six_months": drawn(shipped_scenario("brackwater_2031_03_to_08.yaml"), 12),
        "textbook": drawn(shipped_scenario("thermal_cracker.yaml"), 40),
    }


def texts(sheet: Any) -> str:
    """All of the first column."""
    return "\n".join(str(cell.value) for (cell,) in sheet.iter_rows(max_col=1) if cell.value is not None)


# ---------------------------------------------------------------------------------- shape


@pytest.mark.parametrize(
    ("kind", "view"), [("draws", "Distribution"), ("tornado", "Tornado"), ("steps", "Steps"), ("heat", "Heat map")]
)
def test_each_kind_has_its_sheets_and_charts_and_plain_formulas(kinds: dict[str, Sweep], kind: str, view: str) -> None:
    content = sweep_bytes(kinds[kind])
    book = book_of(content)
    assert book.sheetnames == ["Sweep", view, "How often", "Cases"]
    assert {sheet.sheet_state for sheet in book} == {"visible"}
    used = {word for sheet, at in formulas(book) for word in re.findall(r"[A-Z]{2,}(?=\()", str(book[sheet][at].value))}
    assert used <= PLAIN
    with zipfile.ZipFile(io.BytesIO(content)) as file:
        assert not [name for name in file.namelist() if "vba" in name.lower() or "external" in name.lower()]
        assert sum(name.startswith("xl/charts/chart") for name in file.namelist()) == CHARTS[kind]
    for sheet in book:
        assert (sheet.page_setup.orientation, sheet.page_setup.paperSize) == ("landscape", 9)
    assert book["Cases"].freeze_panes == "B3"


def test_the_same_sweep_gives_the_same_bytes(kinds: dict[str, Sweep]) -> None:
    for found in kinds.values():
        assert sweep_bytes(found) == sweep_bytes(found)


def test_the_first_sheet_says_what_was_varied_and_what_failed(kinds: dict[str, Sweep]) -> None:
    sheet = book_of(sweep_bytes(kinds["tornado"]), values=True)["Sweep"]
    said = texts(sheet)
    assert str(sheet["A1"].value).startswith("March 2031, base prices: full range naphtha spot cargo moves the margin most")
    for words in (
        "Notes",
        "Cautions",
        "SHA-256 of",
        "Planning aid",
        "proven optimum",
        "Cases without a plan",
        "the minimum 80 kt",
    ):
        assert words in said
    varied = [cell.value for cell in sheet[row_of(sheet, FACTOR)]]
    assert varied[:7] == [FACTOR, 1.02, None, 0.9, 1.1, None, 2]
    ended = [sheet.cell(row_of(sheet, words), 2).value for words in ("all", "with a plan, each proven", "without a plan")]
    assert ended == [8, 7, 1]


def test_the_seed_is_in_the_workbook(kinds: dict[str, Sweep]) -> None:
    said = texts(book_of(sweep_bytes(kinds["draws"]))["Sweep"])
    assert "120 draws, seed 3" in said
    assert "no correlation is written" in said


def test_every_case_is_a_row_with_its_numbers(kinds: dict[str, Sweep]) -> None:
    found = kinds["tornado"]
    sheet = book_of(sweep_bytes(found), values=True)["Cases"]
    heads = [cell.value for cell in sheet[2]]
    at = {head: heads.index(head) for head in ("Case", "Margin, kUSD", f"{NAPHTHA}, USD/t", "Outcome")}
    rows = list(sheet.iter_rows(min_row=3, values_only=True))
    assert [row[at["Case"]] for row in rows] == list(range(1, len(found) + 1))
    for row, margin, good in zip(rows, found.margin, planned(found), strict=True):
        assert row[at["Margin, kUSD"]] == (pytest.approx(margin, rel=1e-12) if good else None)
        assert (row[at["Outcome"]] == "plan") == good
    assert [row[at[f"{NAPHTHA}, USD/t"]] for row in rows] == [None, 500, 560, *[None] * 5]


def test_a_heat_map_has_its_first_number_down_and_today_beside_it(kinds: dict[str, Sweep]) -> None:
    found = kinds["heat"]
    sheet = book_of(sweep_bytes(found, [LOAD]), values=True)["Heat map"]
    assert "Down: recovery_units.cracked_gas_compressor.factor. Across: outlets.ethylene_contract.min, kt." in texts(sheet)
    assert "cracked gas compressor factor 1.02 and ethylene contract min 44 kt" in texts(sheet)
    first = row_of(sheet, "Margin, kUSD") + 2
    numbers = [[sheet.cell(first + down, 2 + across).value for across in range(3)] for down in range(3)]
    expected = np.where(planned(found), found.margin, np.nan).reshape(3, 3)
    assert np.isnan(expected).any()
    for line, values in zip(numbers, expected, strict=True):
        assert line == [None if np.isnan(value) else pytest.approx(value) for value in values]
    load = sheet.cell(row_of(sheet, "load cracked gas compressor") + 2 + 1, 2).value
    assert load == pytest.approx(found.columns()[LOAD][3], abs=1e-12)
    assert sheet.conditional_formatting


def test_a_tornados_bars_stand_end_to_end(odd: dict[str, Sweep]) -> None:
    """Ends on the same side of today: the farther one begins where the nearer one ends."""
    sheet = book_of(sweep_bytes(odd["one_side"]), values=True)["Tornado"]
    first = row_of(sheet, "full range naphtha spot cargo, 500 to 560 USD/t")
    parts = [[sheet.cell(row, column).value for column in range(2, 6)] for row in (first, first + 1)]
    assert parts[0] == pytest.approx([100, 0, 0, 150], abs=1e-6)
    assert parts[1] == pytest.approx([0, -20, -70, 0], abs=1e-6)


def test_too_many_cases_are_left_to_the_part_files(march: Plan, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(sweep_cases_sheet, "MOST_ROWS", 30)
    values, margin = np.arange(31.0)[:, None], np.arange(31.0)
    book = book_of(sweep_bytes(made(march, values, margin, how=DRAWS)))
    assert "31 cases are more than the 30 that this sheet holds" in str(book["Cases"]["A1"].value)
    assert book["Cases"].max_row < 5
    sheet = book["Distribution"]
    assert sheet.cell(row_of(sheet, "P50"), 2).value == 15  # a value, as there is nothing to work it out from
    for how in (LIST, GRID):
        book_of(sweep_bytes(made(march, values, margin, how=how)))
    fits = book_of(sweep_bytes(made(march, values[:30], margin[:30], how=DRAWS)))
    assert fits["Cases"].max_row == 32


def test_readings_for_which_there_is_no_room_are_left_out_and_said(
    kinds: dict[str, Sweep], monkeypatch: pytest.MonkeyPatch
) -> None:
    found = kinds["steps"]
    monkeypatch.setattr(sweep_cases_sheet, "MOST_CELLS", 10 * len(found))
    book = book_of(sweep_bytes(found, [LOAD]))
    heads = [cell.value for cell in book["Cases"][2]]
    assert len(heads) == 10
    assert "load cracked gas compressor" in heads
    assert "more for want of room" in str(book["Cases"]["A1"].value)


def test_an_unknown_reading_is_refused(kinds: dict[str, Sweep], tmp_path: Path) -> None:
    with pytest.raises(ValueError, match=r"did you mean `load\.cracked_gas_compressor`"):
        write_sweep(kinds["steps"], tmp_path / "steps.xlsx", ["load.cracked_gas_compresor"])
    assert not list(tmp_path.iterdir())


def test_written_whole_or_not_at_all(kinds: dict[str, Sweep], tmp_path: Path) -> None:
    with pytest.raises(OutputError):
        write_sweep(kinds["heat"], tmp_path / "nowhere" / "sweep.xlsx")
    path = write_sweep(kinds["heat"], tmp_path / "sweep.xlsx")
    assert path.read_bytes() == sweep_bytes(kinds["heat"])
    assert [file.name for file in tmp_path.iterdir()] == ["sweep.xlsx"]


def test_formats_show_neither_digits_without_end_nor_minus_zero() -> None:
    assert cell_format("number", [41.23456789, 40.1]) == "#,##0.00"
    assert cell_format("number", [0.0123456789, 0.5]) == "0.0000"
    assert cell_format("money", [3.684]) == "#,##0.0000"
    assert difference_format(26808.7).split(";") == ["[>=0]#,##0.0", "[<=-0.05]-#,##0.0", "0.0"]
    assert difference_format(3.684).split(";")[1] == "[<=-0.00005]-#,##0.0000"


# ---------------------------------------------------------------------------------- recalculation


@needs_office
@pytest.mark.slow
def test_every_formula_gives_the_tools_number(
    kinds: dict[str, Sweep], odd: dict[str, Sweep], recalculate: Recalculate, tmp_path: Path
) -> None:
    sweeps = kinds | odd
    readings = {"heat": [LOAD]}
    files = [write_sweep(found, tmp_path / f"{name}.xlsx", readings.get(name)) for name, found in sweeps.items()]
    counts = {}
    for file, again in zip(files, recalculate(*files), strict=True):
        new, old = book_of(again, values=True), book_of(file, values=True)
        cells = formulas(book_of(file))
        wrong = []
        for sheet, at in cells:
            now, was = new[sheet][at].value, old[sheet][at].value
            numbers = isinstance(was, int | float) and isinstance(now, int | float)
            same = now == pytest.approx(was, rel=1e-9, abs=2e-6) if numbers else (now or "") == (was or "")
            if not same:
                wrong.append((sheet, at, was, now))
        assert not wrong, file.name
        counts[file.stem] = len(cells)
    assert counts["draws"] > 300
    assert min(counts[name] for name in ("tornado", "steps", "heat", "some", "six_months", "textbook")) > 15


@needs_office
@pytest.mark.slow
def test_recalculated_statistics_are_the_answers(kinds: dict[str, Sweep], recalculate: Recalculate, tmp_path: Path) -> None:
    found = kinds["draws"]
    again = book_of(recalculate(write_sweep(found, tmp_path / "again.xlsx"))[0], values=True)
    sheet = again["Distribution"]
    for one in figures_table(found).rows:
        cells = [sheet.cell(row_of(sheet, one["figure"]), column).value for column in (2, 3, 4)]
        assert cells == pytest.approx([one["replanned"], one["held"], one["flexibility"]], rel=1e-9, abs=2e-6)
    sheet = again["How often"]
    for one in feeds_bought(found).rows:
        cells = [cell.value for cell in sheet[row_of(sheet, one["source"])]][1:7]
        assert cells == pytest.approx([one[key] for key in ("cases", "share", "mean", "p10", "p50", "p90")], rel=1e-9, abs=1e-9)
    for one in limits_binding(found).rows:
        cells = [cell.value for cell in sheet[row_of(sheet, one["limit"])]][2:6]
        assert [cell or 0 for cell in cells] == pytest.approx(
            [one[key] or 0 for key in ("cases", "share", "mean", "high")], rel=1e-9
        )


@needs_office
@pytest.mark.slow
def test_a_changed_case_changes_what_is_worked_out_from_it(
    kinds: dict[str, Sweep], recalculate: Recalculate, tmp_path: Path
) -> None:
    """The proof that the tests above recalculate."""
    for name in ("draws", "tornado"):
        book = book_of(sweep_bytes(kinds[name]))
        sheet = book["Cases"]
        heads = [cell.value for cell in sheet[2]]
        cell = sheet.cell(4, heads.index("Margin, kUSD") + 1)
        cell.value += 1e6
        book.save(tmp_path / f"{name}_dearer.xlsx")
    draws, tornado = (
        book_of(file, values=True) for file in recalculate(*(tmp_path / f"{n}_dearer.xlsx" for n in ("draws", "tornado")))
    )
    sheet, before = draws["Distribution"], figures_table(kinds["draws"]).where(figure="mean")[0]
    assert sheet.cell(row_of(sheet, "mean"), 2).value - before["replanned"] == pytest.approx(1e6 / 120)
    assert sheet.cell(row_of(sheet, "mean"), 4).value - before["flexibility"] == pytest.approx(1e6 / 120)
    sheet = tornado["Tornado"]
    swing = [one.value for one in sheet[row_of(sheet, NAPHTHA)]][10]
    found = kinds["tornado"]
    assert swing > 1e6 > tornado_table(found, tornado_bars(found)).rows[0]["swing"]
