"""The first sheet of a comparison: what each case earns, buys and sells, differences from the first, charts."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from olefinlp.answers.case_tables import margin_lines
from olefinlp.answers.money import GROUPS
from olefinlp.outputs.workbook_book import Book, cell, letters, put, put_formula
from olefinlp.outputs.workbook_charts import FONT, GRID, finish, shades
from olefinlp.outputs.workbook_tables import LINE_HEIGHT, Grid, number_format

if TYPE_CHECKING:
    from olefinlp.answers.comparison import Comparison
    from olefinlp.answers.plan import Plan
    from olefinlp.inputs.case import SourceData

COMPARISON = "Comparison"
LABELS = 2
"""Columns before those of the cases: what, and its unit."""
AGREES_WITHIN = 0.01
"""Thousands of the currency between the margin of the sheet and that of the solver."""
ROW_PIXELS = 20
CHART_ROWS = 15
PAGE_ROWS = 46
READING = (
    "Each column is the best plan of its case, proven. Differences are from the first case.",
    "Amounts are formulas of quantities and of the sheet Prices used: changing a price there prices the same plans again.",
)


@dataclass
class _Page:
    """The sheet while it is written; `row` is the next free one, from 0."""

    book: Book
    sheet: Any
    comparison: Comparison
    row: int = 0

    @property
    def names(self) -> tuple[str, ...]:
        return self.comparison.names

    @property
    def plans(self) -> list[str]:
        return list(self.comparison.plans)

    def column(self, name: str) -> int:
        """The column of a case."""
        return LABELS + self.names.index(name)

    def difference(self, name: str) -> int:
        """The column of a case's difference from the first."""
        return LABELS + len(self.names) - 1 + self.names.index(name)

    def at(self, row: int, name: str) -> str:
        """The cell of a case in a row, relative."""
        return cell(row, self.column(name)).replace("$", "")


def write_comparison_page(
    book: Book, sheet: Any, comparison: Comparison, money: Grid, amounts: dict[str, str], grids: dict[str, Grid]
) -> None:
    """Margins, feeds and products by case, with charts of them."""
    page = _Page(book, sheet, comparison)
    sheet.hide_gridlines(2)
    _head(page)
    margin = _margins(page, money, amounts)
    _check(page, margin)
    feeds = _sums(page, "Feeds bought", grids["Feeds"], "group", [data.feed for data in _sources(comparison)], {}, _bought)
    outlets = dict(_outlets(comparison))
    breaks = [page.row]
    products = _sums(page, "Products sold", grids["Products"], "item", list(outlets), outlets, _sold)
    tonnes = [row for row, unit in zip(range(products[0], products[1] + 1), outlets.values(), strict=True) if unit == "kt"]
    _failed(page)
    if page.row - breaks[0] + 2 * CHART_ROWS > PAGE_ROWS:
        breaks.append(page.row)
    sheet.set_h_pagebreaks(breaks)
    _charts(page, margin, feeds, (tonnes[0], tonnes[-1]) if tonnes else products)
    _set_up(page)


def _sources(comparison: Comparison) -> list[SourceData]:
    return list(comparison.scenario.case.sources.values())


def _outlets(comparison: Comparison) -> list[tuple[str, str]]:
    """Outlets that some case sells through, with their unit, those in kt first."""
    case = comparison.scenario.case
    sold = [o for o in case.sale_tiers if any(_sold(plan, o) for plan in comparison.plans.values())]
    found = [(o, "TJ LHV" if case.outlets[o][0] in case.heat_cuts else "kt") for o in sold]
    return sorted(found, key=lambda pair: pair[1] != "kt")


def _head(page: _Page) -> None:
    scenario, months = page.comparison.scenario, page.comparison.scenario.case.months
    put(page.sheet, 0, 0, f"{scenario.title}: {_message(page.comparison)}", page.book.style("title"))
    page.sheet.set_row(0, 24)
    span = months[0] if len(months) == 1 else f"{months[0]} to {months[-1]}, {len(months)} in all, summed here"
    put(page.sheet, 1, 0, f"{scenario.plant.name}. Period {span}. Cases from {page.comparison.source}.")
    for row, line in enumerate(READING, 2):
        put(page.sheet, row, 0, line, page.book.style("note"))
    page.row = 2 + len(READING)


def _message(comparison: Comparison) -> str:
    """What the comparison says, for its title."""
    plans = comparison.plans
    best = max(plans, key=lambda name: plans[name].margin)
    low = min(plans, key=lambda name: plans[name].margin)
    currency = comparison.scenario.currency
    if best == low:
        return f"{best} earns {plans[best].margin / 1e6:,.2f} M{currency}"
    return f"from {plans[low].margin / 1e6:,.2f} ({low}) to {plans[best].margin / 1e6:,.2f} M{currency} ({best})"


def _block(page: _Page, title: str) -> int:
    """Title and header row of a block; gives the header's row."""
    page.row += 1
    put(page.sheet, page.row, 0, title, page.book.style("block"))
    header = page.row + 1
    page.sheet.write_blank(header, 0, None, page.book.style("header"))
    put(page.sheet, header, 1, "Unit", page.book.style("header"))
    first = page.names[0]
    for name in page.names:
        put(page.sheet, header, page.column(name), name, page.book.style("header", "right"))
    for name in page.names[1:]:
        put(page.sheet, header, page.difference(name), f"{name} minus {first}", page.book.style("header", "right"))
    page.sheet.set_row(header, 3 * LINE_HEIGHT + 3)
    page.row = header + 1
    return header


def _row(
    page: _Page, text: str, unit: str, formulas: dict[str, str], values: dict[str, float | None], kind: str, *words: str
) -> int:
    """A row with a formula a case and their differences; gives its row."""
    first, row = page.names[0], page.row
    put(page.sheet, row, 0, text, page.book.style(*words))
    page.sheet.write_string(row, 1, unit, page.book.style(*words))
    style = page.book.style(number_format(kind, list(values.values())), *words)
    for name, formula in formulas.items():
        value = values[name]
        put_formula(page.sheet, row, page.column(name), formula, "" if value is None else value, style)
    base = values.get(first)
    for name in page.names[1:]:
        value = values.get(name)
        if name in formulas and first in formulas and value is not None and base is not None:
            formula = f"={page.at(row, name)}-{page.at(row, first)}"
            put_formula(page.sheet, row, page.difference(name), formula, value - base, style)
        elif words:
            page.sheet.write_blank(row, page.difference(name), None, page.book.style(*words))
    page.row += 1
    return row


def _margins(page: _Page, money: Grid, amounts: dict[str, str]) -> int:
    """Groups of money, their sum, fixed cost, per tonne; gives the row of the margin."""
    lines = {line.item: line for line in margin_lines(page.comparison).lines}
    header = _block(page, "Margin, costs negative")
    unit = f"k{page.comparison.scenario.currency}"
    start = page.row
    for group in [group for group in GROUPS if group in lines]:
        groups = money.span("group")
        formulas = {name: f"=SUMPRODUCT(({groups}=$A{page.row + 1})*{money.span(amounts[name])})" for name in page.plans}
        _row(page, group, unit, formulas, lines[group].values, "money")
    end = page.row - 1
    first, fixed, after, made, per_tonne = list(lines.values())[-5:]
    sums = {name: f"=SUM({page.at(start, name)}:{page.at(end, name)})" for name in page.plans}
    margin = _row(page, first.item, unit, sums, first.values, "money", "sum")
    fixed_row = _row(page, fixed.item, unit, {n: f"={fixed.values[n]!r}" for n in page.plans}, fixed.values, "money")
    both = {name: f"={page.at(margin, name)}+{page.at(fixed_row, name)}" for name in page.plans}
    _row(page, after.item, unit, both, after.values, "money", "sum")
    made_row = _row(page, made.item, made.unit, {n: f"={made.values[n]!r}" for n in page.plans}, made.values, "quantity")
    ratio = {n: f'=IF({page.at(made_row, n)}>0,{page.at(margin, n)}/{page.at(made_row, n)},"")' for n in page.plans}
    _row(page, per_tonne.item, per_tonne.unit, ratio, per_tonne.values, "money")
    _weights(page)
    page.sheet.freeze_panes(header + 1, LABELS)
    return margin


def _weights(page: _Page) -> None:
    if not page.comparison.weighted:
        return
    put(page.sheet, page.row, 0, "weight of the case")
    put(page.sheet, page.row, 1, "%")
    for case in page.comparison.cases:
        put(page.sheet, page.row, page.column(case.name), case.weight, page.book.style("0%"))
    page.row += 1


def _check(page: _Page, margin: int) -> None:
    """The margin of the sheet against that of the solver, case by case."""
    put(page.sheet, page.row, 0, "Check: formulas against the proven plan", page.book.style("note"))
    for case in page.comparison.cases:
        column = page.column(case.name)
        if case.plan is None:
            put(page.sheet, page.row, column, "no plan", page.book.style("alarm", "right"))
            continue
        formula = f'=IF(ABS({page.at(margin, case.name)}-{case.plan.margin / 1000!r})<{AGREES_WITHIN},"agrees","differs")'
        put_formula(page.sheet, page.row, column, formula, "agrees", page.book.style("right"))
    alarm = {"type": "cell", "criteria": "==", "value": '"differs"', "format": page.book.style("alarm")}
    page.sheet.conditional_format(page.row, LABELS, page.row, LABELS + len(page.names), alarm)
    page.row += 1


def _sums(
    page: _Page,
    title: str,
    grid: Grid,
    key: str,
    items: Sequence[str],
    units: dict[str, str],
    total: Callable[[Plan, str], float],
) -> tuple[int, int]:
    """Sums over the rows of another sheet that carry an item, `total` in a plan; gives the first and the last row."""
    _block(page, title)
    start = page.row
    plans = page.comparison.plans
    for item in dict.fromkeys(items):
        formulas = {name: f"=SUMPRODUCT(({grid.span(key)}=$A{page.row + 1})*{grid.span(name)})" for name in page.plans}
        values: dict[str, float | None] = {name: total(plans[name], item) for name in page.plans}
        _row(page, item, units.get(item, "kt"), formulas, values, "quantity")
    return start, page.row - 1


def _sold(plan: Plan, outlet: str) -> float:
    q = plan.quantities
    return sum(q.outlet(outlet, month) for month in q.case.months)


def _bought(plan: Plan, feed: str) -> float:
    q = plan.quantities
    sources = [name for name, data in q.case.sources.items() if data.feed == feed]
    return sum(q.bought(source, month) for source in sources for month in q.case.months)


def _failed(page: _Page) -> None:
    """Why a case has no plan."""
    failed = [case for case in page.comparison.cases if case.plan is None]
    if not failed:
        return
    page.row += 1
    put(page.sheet, page.row, 0, "Cases without a plan", page.book.style("block"))
    for case in failed:
        for number, line in enumerate(case.reason.splitlines() or [""]):
            page.row += 1
            put(page.sheet, page.row, 0, f"{case.name}: {line}" if number == 0 else f"    {line}")
    page.row += 1


def _charts(page: _Page, margin: int, feeds: tuple[int, int], products: tuple[int, int]) -> None:
    """Margin by case, and what is bought and sold in each."""
    page.row += 1
    last = LABELS + len(page.names) - 1
    header = feeds[0] - 1
    unit = f"k{page.comparison.scenario.currency}"
    bars = page.book.workbook.add_chart({"type": "column"})
    bars.add_series(
        {
            "name": "margin before fixed cost",
            "categories": [COMPARISON, header, LABELS, header, last],
            "values": [COMPARISON, margin, LABELS, margin, last],
            "fill": {"color": shades(1)[0]},
            "gap": 60,
        }
    )
    low = min(plan.margin for plan in page.comparison.plans.values()) / 1000
    high = max(plan.margin for plan in page.comparison.plans.values()) / 1000
    floor = low - 2 * (high - low) if 0 < high - low < 0.25 * low else None
    words = f"{unit}, the axis does not begin at zero" if floor is not None else unit
    axis: dict[str, Any] = {"name": words, "num_format": "#,##0"} | ({"min": _round(floor)} if floor is not None else {})
    _axes(bars, axis)
    finish(bars, "Margin before fixed cost by case", legend=False)
    place = [(bars, 0, 480)]
    for title, (top, bottom) in (("Feeds bought by case", feeds), ("Products sold by case", products)):
        stacked = page.book.workbook.add_chart({"type": "column", "subtype": "stacked"})
        for row, shade in zip(range(top, bottom + 1), shades(bottom - top + 1), strict=True):
            stacked.add_series(
                {
                    "name": [COMPARISON, row, 0],
                    "categories": [COMPARISON, header, LABELS, header, last],
                    "values": [COMPARISON, row, LABELS, row, last],
                    "fill": {"color": shade},
                    "border": {"color": "#FFFFFF", "width": 0.5},
                    "gap": 60,
                }
            )
        _axes(stacked, {"name": "kt", "num_format": "#,##0"})
        finish(stacked, f"{title}, kt", legend=True)
        stacked.set_legend({"position": "right", "font": FONT})
        place.append((stacked, 0, 480))
    for number, (chart, _, _) in enumerate(place):
        chart.set_size({"width": 620, "height": CHART_ROWS * ROW_PIXELS})
        page.sheet.insert_chart(page.row + CHART_ROWS * (number // 2), 0 if number % 2 == 0 else 5, chart, {"x_offset": 10})


def _round(value: float) -> float:
    """A round number below a value, for the start of an axis."""
    size = 10 ** max(len(f"{abs(value):.0f}") - 2, 0)
    return float(value // size * size)


def _axes(chart: Any, values: dict[str, Any]) -> None:
    chart.set_x_axis({"num_font": FONT, "line": {"color": GRID}, "major_tick_mark": "none", "label_position": "low"})
    numbers = {"num_font": FONT, "major_gridlines": {"visible": True, "line": {"color": GRID}}, "line": {"none": True}}
    chart.set_y_axis({"name_font": FONT | {"bold": False}, **numbers, **values})


def _set_up(page: _Page) -> None:
    page.sheet.set_column(0, 0, 38)
    page.sheet.set_column(1, 1, 8)
    page.sheet.set_column(LABELS, LABELS + 2 * len(page.names) - 2, 13)
    page.sheet.print_area(f"A1:{letters(max(LABELS + 2 * len(page.names) - 2, 12))}{page.row + 2 * CHART_ROWS + 1}")
