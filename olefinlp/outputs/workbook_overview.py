"""The first sheet: what the plan earns, what limits it, what is bought, made and loaded, what to be careful about."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from olefinlp.answers.limits import binding
from olefinlp.answers.money import GROUPS
from olefinlp.outputs.workbook_blocks import (
    LOAD_ROWS,
    load_shares,
    top_limits,
    write_feed_block,
    write_limits,
    write_loads,
    write_slate_block,
)
from olefinlp.outputs.workbook_book import Book, cell, put, put_formula
from olefinlp.outputs.workbook_money import FIXED, MoneySheets
from olefinlp.outputs.workbook_page import ROW_PIXELS, Page
from olefinlp.outputs.workbook_tables import number_format

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan

AGREES_WITHIN = 0.01
"""Thousands of the currency between the margin of the sheet and that of the solver."""

KG_PER_LB = 0.45359237
PAGE_ROWS, LINE_LENGTH = 47, 130
"""Rows of a printed page, and letters across it, about."""

READING = (
    "Quantities are the solver's values; every amount is a formula of a quantity",
    "and a cell of the sheet Prices. Changing a filled cell there prices this same",
    "plan again, it does not plan again; the check below then does not agree.",
)


def write_overview(book: Book, sheet: Any, plan: Plan, money: MoneySheets) -> None:
    """All blocks, top to bottom."""
    page = Page(book, sheet, plan, money)
    sheet.hide_gridlines(2)
    sheet.set_default_row(ROW_PIXELS * 0.75)
    _facts(page)
    margin_row = _key_figures(page)
    _check(page, margin_row)
    write_limits(page)
    _texts(page)
    breaks = [page.row]
    write_feed_block(page)
    write_slate_block(page)
    loads = load_shares(page)
    if page.row - breaks[0] + max(len(loads) + 3, page.tall(LOAD_ROWS)) > page.tall(PAGE_ROWS):
        breaks.append(page.row)
    write_loads(page, loads)
    _widths(page)
    sheet.set_h_pagebreaks(breaks)


def _facts(page: Page) -> None:
    scenario, months = page.plan.scenario, page.months
    put(page.sheet, 0, 0, scenario.title, page.book.style("title"))
    page.sheet.set_row(0, 24)
    span = months[0] if len(months) == 1 else f"{months[0]} to {months[-1]}, {len(months)} in all"
    facts = (
        ("Plant", scenario.plant.name),
        ("Period", span),
        ("Price case", scenario.price_case or "as written in the scenario"),
        ("Status", f"{page.plan.status}, proven (see Audit)"),
    )
    for page.row, (name, value) in enumerate(facts, 1):
        put(page.sheet, page.row, 0, name, page.book.style("bold"))
        put(page.sheet, page.row, 1, value)
    for row, line in enumerate(READING, 1):
        put(page.sheet, row, 5, line, page.book.style("note"))
    page.row += 1


def _key_figures(page: Page) -> int:
    """Groups of money and what they sum to; gives the row of the margin."""
    plan, months = page.plan, page.months
    page.block("Margin, costs negative", ("", "Unit", *page.headings))
    first = page.row
    lines = [line for line in plan.lines if line.quantity or line.amount]
    amounts = {(line.group, month): 0.0 for line in lines for month in months}
    for line in lines:
        amounts[line.group, line.month] += line.amount
    groups = [group for group in GROUPS if (group, months[0]) in amounts]
    for group in groups:
        _group_row(page, group, [amounts[group, month] for month in months], first - 1)
    margins = [plan.margin_of(month) / 1000 for month in months]
    margin_row = page.row
    sums = [f"=SUM({cell(first, c)}:{cell(margin_row - 1, c)})".replace("$", "") for c in _number_columns(page)]
    _figure_row(page, "Margin before fixed cost", page.money_unit, sums, [*margins, sum(margins)], "sum")
    fixed = [-plan.fixed_cost(month) / 1000 for month in months]
    _group_row(page, FIXED, fixed, first - 1)
    after = [f"={_up(page, c, 2)}+{_up(page, c, 1)}" for c in _number_columns(page)]
    both = [a + b for a, b in zip(margins, fixed, strict=True)]
    _figure_row(page, "Margin after fixed cost", page.money_unit, after, [*both, sum(both)], "sum")
    _per_tonne(page, margin_row)
    return margin_row


def _number_columns(page: Page) -> range:
    return range(2, 2 + len(page.headings))


def _up(page: Page, column: int, rows: int) -> str:
    """The cell some rows above, relative."""
    return cell(page.row - rows, column).replace("$", "")


def _group_row(page: Page, group: str, amounts: list[float], header: int) -> None:
    """Sum of the money lines of a group, by month; exact matches, so that a month never reads as a date."""
    money = page.money.money
    where = f"({money.span('group')}=$A{page.row + 1})*{money.span('amount')}"
    formulas = [
        f"=SUMPRODUCT(({money.span('month')}={cell(header, c).replace('$', '', 1)})*{where})" for c in range(2, 2 + len(amounts))
    ]
    if len(amounts) > 1:
        formulas.append(f"=SUM({cell(page.row, 2)}:{cell(page.row, 1 + len(amounts))})".replace("$", ""))
    _figure_row(page, group, page.money_unit, formulas, [*amounts, sum(amounts)])


def _figure_row(page: Page, name: str, unit: str, formulas: Sequence[str], values: Sequence[float | str], *words: str) -> None:
    """A row of formulas with their values; `values` may carry a total that a plan of one month has no column for."""
    page.label(name, unit, *words)
    style = page.book.style(number_format("money", list(values)), *words)
    for column, formula, value in zip(_number_columns(page), formulas, values, strict=False):
        put_formula(page.sheet, page.row, column, formula, value, style)
    page.row += 1


def _per_tonne(page: Page, margin_row: int) -> None:
    """Main product made; margin per tonne of it, and per lb where the money is dollars."""
    plan, cut = page.plan, page.plan.scenario.plant.file.main_product
    made = [plan.main_product(month) / 1000 for month in page.months]
    made = [*made, sum(made)] if len(made) > 1 else made
    page.label(f"{cut} made", "kt")
    for column, value in zip(_number_columns(page), made, strict=True):
        put(page.sheet, page.row, column, value, page.book.style(number_format("quantity", made)))
    page.row += 1
    per_tonne = [plan.margin_per_tonne(month) for month in page.months] + [plan.margin_per_tonne()]
    values = ["" if value is None else value for value in per_tonne]
    formulas = [
        f'=IF({_up(page, c, 1)}>0,{cell(margin_row, c).replace("$", "")}/{_up(page, c, 1)},"")' for c in _number_columns(page)
    ]
    _figure_row(page, f"per t of {cut}, before fixed cost", f"{plan.currency}/t", formulas, values)
    if plan.currency == "USD":
        cents = ["" if value is None else value * KG_PER_LB / 10 for value in per_tonne]
        formulas = [f'=IF({_up(page, c, 2)}>0,{_up(page, c, 1)}*{KG_PER_LB}/10,"")' for c in _number_columns(page)]
        _figure_row(page, f"per lb of {cut}, before fixed cost", "USc/lb", formulas, cents)


def _check(page: Page, margin_row: int) -> None:
    """The margin of the sheet against that of the solver."""
    plan, total = page.plan, cell(margin_row, 1 + len(page.headings))
    solver = plan.margin / 1000
    page.row += 1
    page.label("Check: the solver's margin", page.money_unit)
    put(page.sheet, page.row, 2, solver, page.book.style(number_format("money", [solver])))
    text = f'=IF(ABS({total}-{cell(page.row, 2)})<{AGREES_WITHIN},"agrees","DOES NOT AGREE")'
    put_formula(page.sheet, page.row, 3, text, "agrees", page.book.style("bold", "indent"))
    alarm = {"type": "cell", "criteria": "==", "value": '"DOES NOT AGREE"', "format": page.book.style("alarm")}
    page.sheet.conditional_format(page.row, 3, page.row, 3, alarm)
    page.row += 1


def _texts(page: Page) -> None:
    """Warnings of this plan, and what is always to be kept in mind."""
    from olefinlp.answers.audit import CAUTIONS

    warnings = [f"{w.place}  {w.path}: {w.message}" + (f" ({w.hint})" if w.hint else "") for w in page.plan.warnings]
    for title, lines in (("Warnings", warnings), ("To be kept in mind", CAUTIONS)):
        if lines:
            page.row += 1
            put(page.sheet, page.row, 0, title, page.book.style("block"))
            page.row += 1
            for line in (part for text in lines for part in textwrap.wrap(text, LINE_LENGTH)):
                put(page.sheet, page.row, 0, line)
                page.row += 1


def _widths(page: Page) -> None:
    """Columns wide enough for their texts and amounts."""
    plan = page.plan
    shown = top_limits(plan, binding(plan.limits))
    names = [*(f"{limit}, {state}" for limit, state in shown), *(row["outlet"] for row in plan.slate.rows)]
    page.sheet.set_column(0, 0, min(max([*map(len, names), 36]) + 2, 50))
    amount = max((abs(line.amount) for line in plan.lines), default=0.0) * 2
    number = max(len(f"{amount:,.2f}") + 2, 11)
    page.sheet.set_column(2, 2 + len(page.headings), number)
    worth = max((len(record["worth_unit"]) + 2 for records in shown.values() for record in records), default=0)
    several = len(page.months) > 1
    page.sheet.set_column(1, 1, max(worth, 10) if several else 10)
    if not several:
        page.sheet.set_column(4, 4, max(worth, number))
