"""Sheets with live money: prices as cells, and every amount a formula of a quantity and a price cell."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from olefinlp.answers.money import CONTENT, MoneyLine
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.inputs.case import Case
from olefinlp.outputs.workbook_book import MAY, Book
from olefinlp.outputs.workbook_tables import Grid, grid_of, with_columns, write_table

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan

FIXED = "fixed costs"
CHANGE = (
    "Filled cells may be changed: that prices this same plan again, it does not plan again. "
    "The sheet is protected against slips, without a password"
)


@dataclass(frozen=True)
class MoneySheets:
    """Where prices and amounts stand, for the formulas of other sheets.

    `price_rows` is (price item, month) → row of the price table; `content_rows` is (cut, month) →
    rows of the money table that value what is in a cut.
    """

    prices: Grid
    price_rows: dict[tuple[str, str], int]
    money: Grid
    content_rows: dict[tuple[str, str], list[int]]

    def price(self, item: str, month: str) -> str:
        """The cell of the price that the plan used."""
        return self.prices.on(self.price_rows[item, month], "value")


def write_prices(book: Book, sheet: Any, plan: Plan) -> tuple[Grid, dict[tuple[str, str], int]]:
    """Prices; what is used is worked out in the sheet from what is written."""
    table = plan.prices
    grid = grid_of(table, "Prices")
    at = {(row["item"], row["month"]): number for number, row in enumerate(table.rows)}
    formulas = [_price_formula(grid, at, number, row) for number, row in enumerate(table.rows)]
    leans = [bool(row["of"]) for row in table.rows]
    inputs = {"number": [not lean for lean in leans], "times": leans, "plus": leans}
    write_table(book, sheet, table, formulas={"value": formulas}, inputs=inputs, remark=CHANGE)
    sheet.protect("", MAY)
    return grid, at


def _price_formula(grid: Grid, at: dict[tuple[str, str], int], number: int, row: Record) -> str:
    """number × factor, or times × the price it leans on + plus."""
    if not row["of"]:
        return f"={_own(grid, number, 'number')}*{_own(grid, number, 'factor')}"
    base = grid.at(at[row["of"], row["month"]], "value")
    return f"={_own(grid, number, 'times')}*{base}+{_own(grid, number, 'plus')}"


def _own(grid: Grid, number: int, key: str) -> str:
    """A cell of the same row, relative, so that formulas of a column read alike."""
    return grid.at(number, key).replace("$", "")


def write_money(book: Book, sheet: Any, plan: Plan, prices: Grid, price_rows: dict[tuple[str, str], int]) -> MoneySheets:
    """Where the margin comes from, and the fixed costs: amount = quantity × price × times."""
    lines = [line for line in plan.lines if line.quantity or line.amount]
    rows = [_money_row(line) for line in lines] + list(_fixed_rows(plan))
    amount = next(column for column in plan.money.columns if column.key == "amount")
    table = with_columns(plan.money, [*plan.money.columns[:-1], Column("times", "Sign and scale", kind="number"), amount], rows)
    grid = grid_of(table, "Money")
    found: dict[tuple[str, str], list[int]] = {}
    for number, line in enumerate(lines):
        if line.group == CONTENT:
            found.setdefault((_cut_of(line), line.month), []).append(number)
    sheets = MoneySheets(prices, price_rows, grid, found)
    items = [(line.price_item, line.month) for line in lines] + [("", "")] * (len(rows) - len(lines))
    price = [f"={sheets.price(*item)}" if item[0] else None for item in items]
    amounts = [f"={'*'.join(_own(grid, number, key) for key in ('quantity', 'price', 'times'))}" for number in range(len(rows))]
    inputs = {"price": [not item for item, _ in items]}
    write_table(book, sheet, table, formulas={"price": price, "amount": amounts}, inputs=inputs, remark=CHANGE)
    sheet.protect("", MAY)
    return sheets


def _cut_of(line: MoneyLine) -> str:
    """The cut of a line of content: its price item is `contents.<cut>.<item>`."""
    return line.price_item.split(".")[1]


def _money_row(line: MoneyLine) -> Record:
    keys = ("month", "group", "item", "quantity", "quantity_unit", "price", "price_unit", "amount")
    return {key: getattr(line, key) for key in keys} | {"times": line.sign * line.factor}


def _fixed_rows(plan: Plan) -> Iterator[Record]:
    unit = f"k{plan.currency}"
    for (name, month), value in plan.quantities.case.fixed_costs.items():
        yield {
            "month": month,
            "group": FIXED,
            "item": name,
            "quantity": 1.0,
            "quantity_unit": "sum",
            "price": value,
            "price_unit": unit,
            "times": -1.0,
            "amount": -value,
        }


def write_feeds(book: Book, sheet: Any, plan: Plan, sheets: MoneySheets) -> None:
    """Feeds bought; the cost is what is bought times the price cell."""
    grid = grid_of(plan.feeds, "Feeds")
    price = [f"={sheets.price(*item)}" for item in _feed_items(plan.quantities.case)]
    cost = [f"={_own(grid, number, 'bought')}*{_own(grid, number, 'price')}" for number in range(grid.rows)]
    write_table(book, sheet, plan.feeds, formulas={"price": price, "cost": cost}, frozen=3)


def _feed_items(case: Case) -> Iterator[tuple[str, str]]:
    """Price item and month of each row of the feeds table."""
    for month in case.months:
        for source, data in case.sources.items():
            for step in data.tiers:
                yield case.purchase_item(source, step), month


def write_slate(book: Book, sheet: Any, plan: Plan, sheets: MoneySheets) -> None:
    """Products sold; what is valued by content is priced by the content lines of its whole cut."""
    case = plan.quantities.case
    items = [(outlet, step, month) for month in case.months for outlet, steps in case.sale_tiers.items() for step in steps]
    made = [_cut_made(plan, outlet, month) for outlet, _, month in items]
    table = _slate_table(plan.slate, made)
    grid = grid_of(table, "Slate")
    price: list[str | None] = []
    for number, (outlet, step, month) in enumerate(items):
        cell = sheets.price(case.sale_item(outlet, step), month)
        content = _content(sheets, grid, number, (case.outlets[outlet][0], month)) if made[number] else ""
        price.append(f"={content}-{cell}" if outlet in case.deductions else f"={cell}")
    revenue = [f"={_own(grid, number, 'quantity')}*{_own(grid, number, 'price')}" for number in range(grid.rows)]
    write_table(book, sheet, table, formulas={"price": price, "revenue": revenue}, frozen=3)


def _cut_made(plan: Plan, outlet: str, month: str) -> float | None:
    """What is made of a cut that is valued by content, kt; None for other outlets."""
    case = plan.quantities.case
    return plan.quantities.value("cut_made", case.outlets[outlet][0], month) if outlet in case.deductions else None


def _slate_table(table: Table, made: list[float | None]) -> Table:
    """The slate with what is made of the cuts valued by content, when there are any."""
    if all(value is None for value in made):
        return table
    rows = [row | {"made": value} for row, value in zip(table.rows, made, strict=True)]
    return with_columns(table, [*table.columns, Column("made", "Whole cut made", "kt", "quantity")], rows)


def _content(sheets: MoneySheets, grid: Grid, number: int, key: tuple[str, str]) -> str:
    """Sum of the content lines of a cut over what is made of it."""
    rows = sheets.content_rows.get(key, [])
    if not rows:
        return ""
    together = rows[-1] - rows[0] == len(rows) - 1
    cells = sheets.money.span("amount", rows[0], rows[-1]) if together else ",".join(sheets.money.on(r, "amount") for r in rows)
    return f"SUM({cells})/{_own(grid, number, 'made')}"
