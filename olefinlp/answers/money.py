"""Where the margin comes from: one line a quantity and its price, summing to the margin."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

from olefinlp.answers.quantities import Quantities
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.inputs.case import PER_THOUSAND, PLAN_UNITS

SALES = "sales"
CONTENT = "content value"
EXPORTS = "exports"
PURCHASES = "feed purchases"
SHORTFALL = "take-or-pay payments"
IMPORTS = "utilities bought"
EMISSIONS = "emissions"
VARIABLE = "variable costs"
HOLDING = "stock holding"
END_VALUE = "stock at the end"
GROUPS = (SALES, CONTENT, EXPORTS, PURCHASES, SHORTFALL, IMPORTS, EMISSIONS, VARIABLE, HOLDING, END_VALUE)


@dataclass(frozen=True, slots=True)
class MoneyLine:
    """amount = sign × quantity × price × factor, in thousands of the currency.

    `factor` is 1 where the quantity is in thousands (kt × USD/t = kUSD), 0.001 for pieces, and
    carries the share of a take-or-pay price that a shortfall pays.
    """

    month: str
    group: str
    item: str
    quantity: float
    quantity_unit: str
    price: float
    price_unit: str
    price_item: str
    sign: int
    factor: float

    @property
    def amount(self) -> float:
        """Thousands of the currency, costs negative."""
        return self.sign * self.quantity * self.price * self.factor


def money_lines(q: Quantities) -> list[MoneyLine]:
    """All lines of all months, in the order of the groups."""
    return [line for month in q.case.months for line in sorted(_month_lines(q, month), key=lambda line: GROUPS.index(line.group))]


def _month_lines(q: Quantities, month: str) -> Iterator[MoneyLine]:
    case = q.case
    for outlet, steps in case.sale_tiers.items():
        for step in steps:
            sign = -1 if outlet in case.deductions else 1
            name = outlet + (f" step {step}" if len(steps) > 1 else "")
            name += " deduction" if outlet in case.deductions else ""
            yield _line(q, month, SALES, name, q.value("sold", outlet, str(step), month), case.sale_item(outlet, step), sign)
    for (cut, item), parts in case.content.items():
        yield _line(q, month, CONTENT, f"{item} in {cut}", q.total(parts, month), f"contents.{cut}.{item}", 1)
    for trade, (_, kind) in case.trades.items():
        group = {"imports": IMPORTS, "exports": EXPORTS, "emissions": EMISSIONS}[kind]
        sign = 1 if kind == "exports" else -1
        yield _line(q, month, group, trade, q.value("trade", trade, month), f"utilities.{trade}", sign)
    for source, data in case.sources.items():
        for step in data.tiers:
            name = source + (f" step {step}" if len(data.tiers) > 1 else "")
            bought = q.value("bought", source, str(step), month)
            yield _line(q, month, PURCHASES, name, bought, case.purchase_item(source, step), -1)
        if data.take_or_pay:
            short = q.value("shortfall", source, month)
            share = case.shortfall_pays[source, month]
            yield _line(q, month, SHORTFALL, source, short, case.purchase_item(source, 1), -1, share)
    for cost in case.costs:
        yield _line(q, month, VARIABLE, cost.name, q.total(cost.parts, month), cost.price_item, -1)
    for stocked, stock in case.stocks.items():
        yield _line(q, month, HOLDING, stocked, q.stock(stocked, month), f"stocks.{stocked}.holding", -1)
        if stock.end_value and month == case.months[-1]:
            unit = f"{case.currency}/t"
            yield MoneyLine(month, END_VALUE, stocked, q.stock(stocked, month), "kt", stock.end_value, unit, "", 1, 1.0)


def _line(
    q: Quantities, month: str, group: str, item: str, quantity: float, price_item: str, sign: int, share: float = 1.0
) -> MoneyLine:
    price = q.case.prices[price_item, month]
    per = price.unit_used.partition("/")[2]
    factor = share * (1.0 if per else PER_THOUSAND)
    unit = PLAN_UNITS.get(per.removesuffix(" held"), f"thousand {per}" if per else "pieces")
    return MoneyLine(month, group, item, quantity, unit, price.value, price.unit_used, price_item, sign, factor)


def margin(lines: list[MoneyLine], month: str | None = None) -> float:
    """Margin before fixed cost, thousands of the currency; of one month or of all."""
    return sum(line.amount for line in lines if month in (None, line.month))


def money_table(q: Quantities, lines: list[MoneyLine]) -> Table:
    """Lines with something in them, then the fixed costs, which are shown and never optimised."""
    money = f"k{q.case.currency}"
    columns = (
        Column("month", "Month"),
        Column("group", "Group"),
        Column("item", "Item"),
        Column("quantity", "Quantity", kind="quantity"),
        Column("quantity_unit", "Unit"),
        Column("price", "Price", kind="price"),
        Column("price_unit", "Price unit"),
        Column("amount", "Amount", money, "money"),
    )
    rows: list[Record] = [
        {column.key: getattr(line, column.key) for column in columns} for line in lines if line.quantity or line.amount
    ]
    for (name, month), value in q.case.fixed_costs.items():
        rows.append(
            {"month": month, "group": "fixed costs", "item": name, "quantity": None, "quantity_unit": "", "price": None}
            | {"price_unit": "", "amount": -value}
        )
    return Table("money", "Money", columns, rows, "Fixed costs stand below the margin; they are no part of it.")
