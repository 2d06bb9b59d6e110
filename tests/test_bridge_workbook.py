"""The workbook of a bridge: live effects that agree with the solver, a waterfall that stands where it should."""

from __future__ import annotations

import io
import itertools
import re
import zipfile
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import openpyxl
import pytest
from conftest import ROOT, Recalculate, needs_office
from plants import ONE_FEED, planned

from olefinlp import make_plan, read_scenario, who_earns_the_margin
from olefinlp.answers.bridge import LIMITS_FIRST, Bridge, bridge, bridge_of
from olefinlp.answers.plan import Plan
from olefinlp.outputs.bridge_workbook import (
    BRIDGE,
    CHANGES,
    EFFECTS,
    HELPERS,
    axis_ends,
    bar,
    bridge_bytes,
    bridge_sheet_names,
    write_bridge,
    write_bridge_sheets,
)
from olefinlp.outputs.files import OutputError
from olefinlp.outputs.workbook_book import Book

HEADER = 2
"""Row of the headers of the two plain tables."""


@pytest.fixture(scope="module")
def month() -> Plan:
    return make_plan(read_scenario(ROOT / "scenarios" / "brackwater_2031_03.yaml"))


@pytest.fixture(scope="module")
def strong(month: Plan) -> Bridge:
    return bridge_of(month, make_plan(month.scenario.with_(price_case="Strong propylene")))


@pytest.fixture(scope="module")
def bridges(
    month: Plan, strong: Bridge, shipped_scenario: Callable[[str], Any], tmp_path_factory: pytest.TempPathFactory
) -> dict[str, Bridge]:
    """Only prices, other limits in both orders, a margin that becomes a loss, a loss that becomes larger, no change."""
    april = make_plan(shipped_scenario("brackwater_2031_04.yaml").with_(price_case="High crude"))
    folder = tmp_path_factory.mktemp("plants")
    gains, loses = one_feed(folder / "a", 1200, 200, 500), one_feed(folder / "b", 900, 250, 650)
    more = one_feed(folder / "c", 800, 250, 660)
    return {
        "prices": strong,
        "limits last": bridge_of(month, april),
        "limits first": bridge_of(month, april, LIMITS_FIRST),
        "into loss": bridge_of(gains, loses, names=("last month", "this month")),
        "deeper": bridge_of(loses, more),
        "none": bridge_of(month, month),
    }


def one_feed(folder: Path, ethylene: float, residue: float, naphtha: float) -> Plan:
    """5 to 8 kt of a feed that gives 40 % ethylene and 60 % residue."""
    scenario = f"feeds: {{naphtha: {{spot: {{min: 5 kt, max: 8 kt, price: {naphtha} USD/t}}}}}}"
    return planned(folder, **{**ONE_FEED, "prices": {"ethylene": ethylene, "residue": residue}}, scenario=scenario)


def read(source: bytes | Path, values: bool = False) -> Any:
    return openpyxl.load_workbook(io.BytesIO(source) if isinstance(source, bytes) else source, data_only=values)


def formulas(book: Any) -> Iterator[tuple[str, str, str]]:
    for sheet in book:
        for row in sheet.iter_rows():
            yield from ((sheet.title, cell.coordinate, str(cell.value)) for cell in row if cell.data_type == "f")


def row_of(sheet: Any, label: str) -> int:
    """The first row whose first cell says so."""
    return next(row for row in range(1, sheet.max_row + 1) if sheet.cell(row, 1).value == label)


def steps(sheet: Any) -> dict[str, tuple[Any, Any]]:
    """Step → effect and margin after it."""
    first, last = row_of(sheet, "Step") + 1, row_of(sheet, "residual")
    return {sheet.cell(r, 1).value: (sheet.cell(r, 2).value, sheet.cell(r, 3).value) for r in range(first, last + 1)}


def chart_rows(sheet: Any) -> list[tuple[Any, ...]]:
    """The chart's numbers: name, from, to, base, margin, rise, fall, rise below zero, fall below zero."""
    title = next(r for r in range(1, sheet.max_row + 1) if str(sheet.cell(r, 1).value).startswith("Numbers of the chart"))
    return [tuple(c.value for c in row[: 1 + len(HELPERS)]) for row in sheet.iter_rows(min_row=title + 2, max_col=9)]


def chart_of(bridge: Bridge) -> str:
    with zipfile.ZipFile(io.BytesIO(bridge_bytes(bridge))) as file:
        (name,) = [name for name in file.namelist() if name.startswith("xl/charts/chart")]
        return file.read(name).decode()


# ---------------------------------------------------------------------------------- what stands where


def test_sheets_in_order_none_hidden_and_set_up_for_print(strong: Bridge) -> None:
    book = read(bridge_bytes(strong))
    assert book.sheetnames == [BRIDGE, EFFECTS, CHANGES]
    for sheet in book:
        assert sheet.sheet_state == "visible"
        assert (sheet.page_setup.orientation, int(sheet.page_setup.paperSize)) == ("landscape", 9)
        assert (sheet.page_setup.fitToWidth or 1, sheet.page_setup.fitToHeight) == (1, 0)
        assert sheet.oddFooter.left.text == "Planning aid; not for operating limits"
        assert "Base to Strong propylene" in sheet.oddHeader.left.text
        assert not sheet.merged_cells.ranges
    assert book[EFFECTS].freeze_panes == "C3"
    assert book[BRIDGE].freeze_panes == f"B{row_of(book[BRIDGE], 'Step') + 1}"
    assert not any(column.hidden for sheet in book for column in sheet.column_dimensions.values())


def test_the_first_sheet_says_the_message_and_the_sentences(strong: Bridge, month: Plan) -> None:
    sheet = read(bridge_bytes(strong))[BRIDGE]
    assert sheet["A1"].value == "Strong propylene earns 3,326.8 kUSD more than Base: prices + 3,202.4, re-optimising + 124.4"
    texts = " ".join(str(sheet.cell(row, 1).value) for row in range(2, row_of(sheet, "Step")))
    for sentence in bridge(strong.first, strong.second).sentences:
        assert sentence in texts


def test_written_values_are_those_of_the_bridge(bridges: dict[str, Bridge]) -> None:
    for name, found in bridges.items():
        sheet = read(bridge_bytes(found), values=True)[BRIDGE]
        rows = steps(sheet)
        assert list(rows) == [step.words for step in found.steps()], name
        for step in found.steps()[:-1]:
            effect, margin = rows[step.words]
            assert margin == pytest.approx(step.margin, rel=1e-9), (name, step.words)
            assert (effect or 0.0) == pytest.approx(step.effect or 0.0, rel=1e-9, abs=1e-9), (name, step.words)
        assert rows["residual"] == (0, "agrees"), name


def test_effects_and_margins_are_formulas_of_cells(bridges: dict[str, Bridge]) -> None:
    """No number stands in a formula but the zero and the places of a rounding; only plain functions."""
    for name, found in bridges.items():
        book = read(bridge_bytes(found))
        for label, (effect, margin) in steps(book[BRIDGE]).items():
            if label.startswith("margin: "):
                assert effect is None
            else:
                assert str(effect).startswith("="), (name, label)
            assert str(margin).startswith("="), (name, label)
        effects = book[EFFECTS]
        for row in range(HEADER + 1, effects.max_row + 1):
            assert effects.cell(row, 8).value == f"=C{row}*(F{row}-E{row})"
        for sheet, at, formula in formulas(book):
            numbers = re.findall(r"(?<![A-Z$\d.'])\d+(?:\.\d+)?(?![\d'])", formula)
            assert set(numbers) <= {"0", "6"}, (name, sheet, at, formula)
            assert set(re.findall(r"[A-Z]{2,}(?=\()", formula)) <= {"SUM", "SUMPRODUCT", "IF", "ABS", "MAX", "MIN", "ROUND"}


def test_every_named_effect_sums_its_rows_and_the_rest_is_the_other(bridges: dict[str, Bridge]) -> None:
    found = bridges["limits last"]
    book = read(bridge_bytes(found))
    rows = steps(book[BRIDGE])
    last = book[EFFECTS].max_row
    span, items = f"'{EFFECTS}'!$H$3:$H${last}", f"'{EFFECTS}'!$A$3:$A${last}"
    top = row_of(book[BRIDGE], "Step") + 2
    for number, item in enumerate(found.named):
        assert rows[item][0] == f"=SUMPRODUCT(({items}=A{top + number})*{span})"
    other = next(words for words in rows if words.startswith("other prices"))
    assert rows[other][0] == f"=SUM({span})-SUM(B{top}:B{top + len(found.named) - 1})"
    gain, limits = str(rows["gain from re-optimising"][0]), str(rows["changed limits and other data"][0])
    solved = {book[BRIDGE].cell(r, 1).value: r for r in range(row_of(book[BRIDGE], "Solved margins, kUSD"), book[BRIDGE].max_row)}
    middle = solved["best margin, prices of High crude, limits of Base"]
    assert gain == f"=$B${middle}-$B${solved['plan of Base at the prices of High crude']}"
    assert limits == f"=$B${solved['best margin of High crude']}-$B${middle}"


def test_prices_may_be_changed_and_nothing_else(strong: Bridge) -> None:
    book = read(bridge_bytes(strong))
    sheet = book[EFFECTS]
    for row in range(HEADER + 1, sheet.max_row + 1):
        open_cells = [cell.column_letter for cell in sheet[row] if not cell.protection.locked]
        assert open_cells == ["E", "F"]
    assert sheet.protection.sheet
    assert sheet.protection.password is None
    assert all(cell.protection.locked for row in book[BRIDGE].iter_rows() for cell in row)


def test_effects_stand_by_size(strong: Bridge) -> None:
    sheet = read(bridge_bytes(strong), values=True)[EFFECTS]
    sizes = [abs(sheet.cell(row, 8).value) for row in range(HEADER + 1, sheet.max_row + 1)]
    assert sizes == sorted(sizes, reverse=True)
    assert len(sizes) == len(strong.effects)
    assert sizes[0] > 3000


def test_no_minus_zero_and_the_same_bytes(bridges: dict[str, Bridge], strong: Bridge, tmp_path: Path) -> None:
    for found in bridges.values():
        with zipfile.ZipFile(io.BytesIO(bridge_bytes(found))) as file:
            sheets = b"".join(file.read(name) for name in file.namelist() if name.startswith("xl/worksheets/sheet"))
            assert not [name for name in file.namelist() if "vba" in name.lower() or "external" in name.lower()]
        assert not re.search(rb"<v>-0(\.0)?</v>", sheets)
        assert b"nan</v>" not in sheets.lower()
    once = bridge(strong.first, strong.second)
    assert write_bridge(strong, tmp_path / "a.xlsx").read_bytes() == write_bridge(once, tmp_path / "b.xlsx").read_bytes()


def test_what_is_no_bridge_is_refused_and_files_are_whole(strong: Bridge, month: Plan, tmp_path: Path) -> None:
    with pytest.raises(ValueError, match="no margin bridge"):
        write_bridge(who_earns_the_margin(month), tmp_path / "a.xlsx")
    with pytest.raises(OutputError, match=r"the folder .* is not there"):
        write_bridge(strong, tmp_path / "nowhere" / "a.xlsx")
    assert not list(tmp_path.iterdir())


def test_the_sheets_can_stand_in_a_larger_workbook(bridges: dict[str, Bridge]) -> None:
    """Two bridges in one book, after a sheet of another; each one's formulas stay on its own sheets."""
    first, second = bridges["prices"], bridges["limits first"]
    book = Book(first.second.scenario)
    book.sheet("Comparison")
    given = {name: book.sheet(name) for name in bridge_sheet_names("1 ")}
    assert write_bridge_sheets(book, first, "1 ", given) == ("1 Bridge", "1 Price effects", "1 What changed")
    write_bridge_sheets(book, second, "2 ")
    made = read(book.to_bytes())
    assert made.sheetnames == ["Comparison", *bridge_sheet_names("1 "), *bridge_sheet_names("2 ")]
    for sheet, _, formula in formulas(made):
        assert set(re.findall(r"'(\d) ", formula)) <= {sheet[0]}
    with pytest.raises(ValueError, match="too long to begin the name of a sheet"):
        bridge_sheet_names("a rather long beginning ")


# ---------------------------------------------------------------------------------- the waterfall


@pytest.mark.parametrize(
    ("start", "end", "base", "rise", "fall", "rise_below", "fall_below"),
    [
        (3, 5, 3, 2, 0, 0, 0),
        (5, 3, 3, 0, 2, 0, 0),
        (-5, -3, -3, 0, 0, -2, 0),
        (-3, -5, -3, 0, 0, 0, -2),
        (-2, 3, 0, 3, 0, -2, 0),
        (3, -2, 0, 0, 3, 0, -2),
        (0, 4, 0, 4, 0, 0, 0),
        (4, 4, 4, 0, 0, 0, 0),
    ],
)
def test_bars_by_hand(
    start: float, end: float, base: float, rise: float, fall: float, rise_below: float, fall_below: float
) -> None:
    found = bar(start, end)
    assert (found.base, found.total) == (base, 0)
    assert (found.rise, found.fall, found.rise_below, found.fall_below) == (rise, fall, rise_below, fall_below)


def test_a_margin_stands_on_zero() -> None:
    assert (bar(None, -7).total, bar(None, -7).base) == (-7, 0)


def test_bars_of_a_margin_that_becomes_a_loss(bridges: dict[str, Bridge]) -> None:
    """800, feed −1200 to −400 (across zero), ethylene −960 to −1360, residue +240 to −1120, gain +420, −700."""
    rows = chart_rows(read(bridge_bytes(bridges["into loss"]), values=True)[BRIDGE])
    numbers = [tuple(None if v is None else round(v, 6) for v in row[1:]) for row in rows]
    assert numbers == [
        (None, 800, None, 800, None, None, None, None),
        (800, -400, 0, None, 0, 800, 0, -400),
        (-400, -1360, -400, None, 0, 0, 0, -960),
        (-1360, -1120, -1120, None, 0, 0, -240, 0),
        (-1120, -700, -700, None, 0, 0, -420, 0),
        (None, -700, None, -700, None, None, None, None),
    ]


@pytest.mark.parametrize("name", ["prices", "limits last", "limits first", "into loss", "deeper", "none"])
def test_bars_stack_to_the_levels(bridges: dict[str, Bridge], name: str) -> None:
    """Above zero base and parts reach the higher of both levels, below zero the lower; the parts together are the effect."""
    found = bridges[name]
    rows = chart_rows(read(bridge_bytes(found), values=True)[BRIDGE])
    assert len(rows) == len(found.steps()) - 1
    for row, step in zip(rows, found.steps(), strict=False):
        start, end, base, margin, rise, fall, rise_below, fall_below = (value or 0.0 for value in row[1:])
        if step.effect is None:
            assert margin == end
            continue
        assert rise - rise_below - fall + fall_below == pytest.approx(step.effect, abs=1e-6)
        assert max(base, 0) + rise + fall == pytest.approx(max(start, end, 0), abs=1e-6)
        assert min(base, 0) + rise_below + fall_below == pytest.approx(min(start, end, 0), abs=1e-6)


def test_the_axis_starts_below_the_lowest_bar_and_says_so(bridges: dict[str, Bridge]) -> None:
    chart = chart_of(bridges["prices"])
    assert '<c:min val="26000' in chart
    assert "the axis starts at 26,000, not at zero" in chart
    assert "not at zero" not in chart_of(bridges["into loss"])
    assert '<c:max val="-650' in chart_of(bridges["deeper"])
    for found in bridges.values():
        levels = [step.margin or 0.0 for step in found.steps()[:-1]]
        low, high = axis_ends(levels)
        assert low is None or 0 < low < min(levels)
        assert high is None or 0 > high > max(levels)


def test_the_chart_is_native_stacked_and_readable_in_grey(strong: Bridge) -> None:
    """Stacked columns on an unseen base; the three shades are at least a fifth of the grey scale apart."""
    chart = chart_of(strong)
    assert '<c:grouping val="stacked"/>' in chart
    assert '<c:barDir val="col"/>' in chart
    series = re.findall(r"<c:ser>.*?</c:ser>", chart, re.DOTALL)
    assert len(series) == 6
    assert "<a:noFill/>" in series[0]
    shades = {re.findall(r'<a:solidFill><a:srgbClr val="(\w{6})"/>', one)[0] for one in series[1:]}
    greys = sorted(sum(w * int(s[i : i + 2], 16) for w, i in ((0.299, 0), (0.587, 2), (0.114, 4))) / 255 for s in shades)
    assert len(greys) == 3
    assert all(b - a > 0.2 for a, b in itertools.pairwise(greys))
    title = "".join(re.findall(r"<a:t>(.*?)</a:t>", chart)[:1])
    assert title == "Strong propylene earns 3,326.8 kUSD more than Base"


# ---------------------------------------------------------------------------------- recalculated


@needs_office
@pytest.mark.slow
def test_recalculation_gives_every_value_that_was_written(
    bridges: dict[str, Bridge], recalculate: Recalculate, tmp_path: Path
) -> None:
    files = [write_bridge(found, tmp_path / f"{name}.xlsx") for name, found in bridges.items()]
    for (name, found), file, again in zip(bridges.items(), files, recalculate(*files), strict=True):
        new, old, count = read(again, values=True), read(file, values=True), 0
        for sheet, at, formula in formulas(read(file)):
            one, other = new[sheet][at].value, old[sheet][at].value
            same = one == pytest.approx(other, rel=1e-9, abs=1e-7) if isinstance(other, int | float) else one == other
            assert same, (name, sheet, at, formula, other, one)
            count += 1
        assert count > 20, name
        rows = steps(new[BRIDGE])
        assert rows["residual"] == (0, "agrees"), name
        assert rows[f"margin: {found.names[1]}"][1] == pytest.approx(found.new, rel=1e-9), name


@needs_office
@pytest.mark.slow
def test_a_changed_price_changes_its_effect_and_the_check_tells(strong: Bridge, recalculate: Recalculate, tmp_path: Path) -> None:
    """10 USD/t more for 21.24 kt of polymer-grade propylene in the second plan's prices; 5 more for an item without a step."""
    book = read(write_bridge(strong, tmp_path / "before.xlsx"))
    sheet = book[EFFECTS]
    changes = (("outlets.polymer_grade_propylene", 10.0), ("outlets.ethylene_contract", 5.0))
    sold = {}
    for item, more in changes:
        row = next(row for row in range(HEADER + 1, sheet.max_row + 1) if sheet.cell(row, 1).value == item)
        sheet.cell(row, 6).value += more
        sold[item] = more * sheet.cell(row, 3).value
    book.save(tmp_path / "changed.xlsx")
    (again,) = recalculate(tmp_path / "changed.xlsx")
    before, after = (steps(read(file, values=True)[BRIDGE]) for file in (tmp_path / "before.xlsx", again))
    propylene, ethylene = sold.values()
    assert (propylene, ethylene) == (pytest.approx(212.4, abs=0.01), pytest.approx(290.0))
    item = changes[0][0]
    assert after[item][0] - before[item][0] == pytest.approx(propylene, rel=1e-9)
    other = next(words for words in before if words.startswith("other prices"))
    assert after[other][0] - before[other][0] == pytest.approx(ethylene, rel=1e-9)
    assert after["residual"][0] == pytest.approx(-propylene - ethylene, abs=1e-5)
    assert after["residual"][1] == "DOES NOT AGREE"
