"""The tables of a comparison: one row an item, one column a case, the same rows in every case."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from olefinlp.answers.limits import binding
from olefinlp.answers.money import GROUPS
from olefinlp.answers.tables import Column, Record, Table

if TYPE_CHECKING:
    from olefinlp.answers.answer import Answer
    from olefinlp.answers.comparison import Comparison
    from olefinlp.answers.plan import Plan

Key = tuple[str, str, str, str]
"""Month, group, item, unit."""
MINUS = "minus_"
"""Before the name of a case: the key of its difference from the first."""


@dataclass(frozen=True)
class CaseLine:
    """One row: what it is (month, kind, item), its unit, and a number per case that has a plan (None: nothing of it)."""

    month: str
    group: str
    item: str
    unit: str
    values: dict[str, float | None] = field(default_factory=dict)


@dataclass(frozen=True)
class CaseTable:
    """A table with a column a case. `kind` is how its numbers are shown."""

    name: str
    title: str
    group: str
    item: str
    kind: str
    lines: tuple[CaseLine, ...]
    note: str = ""

    def to_table(self, names: Iterable[str]) -> Table:
        """A plain table with a column a case, and one a case for the difference from the first."""
        first, *others = list(names)
        columns = (
            Column("month", "Month"),
            Column("group", self.group),
            Column("item", self.item),
            Column("unit", "Unit"),
            *(Column(name, name, kind=self.kind) for name in (first, *others)),
            *(Column(MINUS + name, f"{name} minus {first}", kind=self.kind) for name in others),
        )
        return Table(self.name, self.title, columns, [_record(line, first, others) for line in self.lines], self.note)


def _record(line: CaseLine, first: str, others: list[str]) -> Record:
    record: Record = {"month": line.month, "group": line.group, "item": line.item, "unit": line.unit}
    values = {name: line.values.get(name) for name in (first, *others)}
    return record | values | {MINUS + name: _less(values[name], values[first]) for name in others}


def _less(value: float | None, first: float | None) -> float | None:
    return None if value is None or first is None else value - first


def margin_lines(comparison: Comparison) -> CaseTable:
    """The margin by groups of money, before and after fixed cost, and per tonne of main product; all months together."""
    money = f"k{comparison.scenario.currency}"
    product = comparison.scenario.plant.file.main_product
    plans = comparison.plans
    lines = [
        CaseLine("", "money", group, money, {name: _group(plan, group) for name, plan in plans.items()})
        for group in GROUPS
        if any(line.amount for plan in plans.values() for line in plan.lines if line.group == group)
    ]

    def line(group: str, item: str, unit: str, value: Callable[[Plan], float | None]) -> CaseLine:
        return CaseLine("", group, item, unit, {name: value(plan) for name, plan in plans.items()})

    lines += [
        line("margin", "margin before fixed cost", money, lambda p: p.margin / 1000),
        line("margin", "fixed cost", money, lambda p: -p.fixed_cost() / 1000),
        line("margin", "margin after fixed cost", money, lambda p: (p.margin - p.fixed_cost()) / 1000),
        line("main product", f"{product} made", "kt", lambda p: p.main_product() / 1000),
        line("main product", f"margin before fixed cost per t of {product}", f"{money[1:]}/t", lambda p: p.margin_per_tonne()),
    ]
    return CaseTable("case_margins", "Margin by case", "Kind", "Item", "money", tuple(lines))


def _group(plan: Plan, group: str) -> float:
    return sum(line.amount for line in plan.lines if line.group == group)


def _by_key(cases: Iterable[tuple[str, Iterable[tuple[Key, float | None]]]]) -> dict[Key, dict[str, float | None]]:
    """Numbers by case under their key, in the order in which cases bring them."""
    rows: dict[Key, dict[str, float | None]] = {}
    for case, lines in cases:
        for key, value in lines:
            rows.setdefault(key, {})[case] = value
    return rows


def _table(
    comparison: Comparison,
    name: str,
    title: str,
    headings: tuple[str, str],
    kind: str,
    lines: Callable[[Plan], Iterator[tuple[Key, float | None]]],
    note: str = "",
) -> CaseTable:
    """Rows of all cases by their key (month, group, item, unit), in the order in which cases bring them."""
    rows = _by_key((case, lines(plan)) for case, plan in comparison.plans.items())
    months = list(comparison.scenario.case.months)
    ordered = sorted(rows, key=lambda key: months.index(key[0]) if key[0] in months else -1)
    made = tuple(CaseLine(*key, rows[key]) for key in ordered)
    return CaseTable(name, title, *headings, kind, made, note)


def price_lines(comparison: Comparison) -> CaseTable:
    """Effective prices, as the plans use them."""

    def lines(plan: Plan) -> Iterator[tuple[Key, float | None]]:
        for price in plan.quantities.case.prices.values():
            yield (price.month, price.item.split(".")[0], price.item, price.unit_used), price.value

    note = "In the unit in which the plan uses them; as written: the case sheet, or the sheet Prices of a plan"
    return _table(comparison, "case_prices", "Prices used", ("Kind", "Item"), "price", lines, note)


def feed_lines(comparison: Comparison) -> CaseTable:
    """What is bought of every source."""

    def lines(plan: Plan) -> Iterator[tuple[Key, float | None]]:
        q = plan.quantities
        for month in q.case.months:
            for source, data in q.case.sources.items():
                yield (month, data.feed, data.name, "kt"), q.bought(source, month)

    return _table(comparison, "case_feeds", "Feeds bought", ("Feed", "Source"), "quantity", lines)


def slate_lines(comparison: Comparison) -> CaseTable:
    """What is sold through every outlet."""

    def lines(plan: Plan) -> Iterator[tuple[Key, float | None]]:
        q = plan.quantities
        for month in q.case.months:
            for outlet in q.case.sale_tiers:
                heat = q.case.outlets[outlet][0] in q.case.heat_cuts
                yield (month, q.case.outlets[outlet][0], outlet, "TJ LHV" if heat else "kt"), q.outlet(outlet, month)

    return _table(comparison, "case_slate", "Products sold", ("Cut", "Outlet"), "quantity", lines)


def furnace_lines(comparison: Comparison) -> CaseTable:
    """What every furnace group cracks, by feed and severity; modes that no case uses are left out."""

    def lines(plan: Plan) -> Iterator[tuple[Key, float | None]]:
        q = plan.quantities
        for month in q.case.months:
            for mode in q.case.modes:
                feed, severity = q.case.mode_feed[mode], q.case.mode_severity[mode]
                yield (month, q.case.mode_group[mode], f"{feed} {severity}", "kt"), q.charged(mode, month)

    table = _table(comparison, "case_furnaces", "Furnace charge", ("Furnace group", "Feed and severity"), "quantity", lines)
    used = tuple(line for line in table.lines if any(line.values.values()))
    return CaseTable(table.name, table.title, table.group, table.item, table.kind, used, "What no case uses is left out")


def load_lines(comparison: Comparison) -> CaseTable:
    """How much of their maximum furnace groups and recovery units use."""

    def lines(plan: Plan) -> Iterator[tuple[Key, float | None]]:
        for row in plan.furnace_groups.rows:
            yield (row["month"], "furnace hours", row["group"], "%"), row["share"]
        for row in plan.recovery.rows:
            yield (row["month"], "recovery unit", row["unit"], "%"), row["share"]

    return _table(
        comparison, "case_loads", "Loads", ("Kind", "Group or unit"), "share", lines, "Share of the maximum of that month"
    )


def limit_lines(comparison: Comparison) -> CaseTable:
    """Limits that bind in some case, and what one more unit is worth in each; blank where it does not bind."""

    def lines(plan: Plan) -> Iterator[tuple[Key, float | None]]:
        for row in binding(plan.limits):
            state = "minimum" if row["state"] == "at minimum" else "fixed" if row["state"] == "fixed" else "maximum"
            yield (row["month"], f"{row['limit']}", state, row["worth_unit"]), row["worth"]

    note = "Worth of relaxing the limit by one unit; blank where it does not bind. It holds for the next unit; worths never add"
    return _table(comparison, "case_limits", "Limits that bind", ("Limit", "Side"), "price", lines, note)


def break_even_lines(comparison: Comparison, answers: dict[str, Answer]) -> CaseTable:
    """The price at which each source would be dropped, or taken up, in each case."""

    def lines(name: str) -> Iterator[tuple[Key, float | None]]:
        unit = f"{comparison.plan(name).currency}/t"
        for row in answers[name].table.rows:
            yield (row["month"], row["feed"], row["source"], unit), row["walk_away"]

    note = (
        "Price at which the volume would change: above today's for what is bought, below for what is not. Blank where none would"
    )
    rows = _by_key((name, lines(name)) for name in comparison.plans if name in answers)
    made = tuple(CaseLine(*key, values) for key, values in rows.items())
    return CaseTable("case_break_evens", "Break-even prices", "Feed", "Source", "price", made, note)


def flat_lines(comparison: Comparison) -> Table:
    """All quantities and money of all cases in one list, for pivoting."""
    rows: list[Record] = []
    columns: tuple[Column, ...] = ()
    for name, plan in comparison.plans.items():
        columns = plan.flat.columns
        rows += [row | {"price_case": name} for row in plan.flat.rows]
    columns = tuple(Column("price_case", "Case") if c.key == "price_case" else c for c in columns)
    return Table("case_flat", "Flat list", columns, rows)


@dataclass(frozen=True)
class MoneyOfCases:
    """One line of money in all cases: amount = quantity × price × `times`, in thousands of the currency.

    Without a price item (the value of a stock at the end) the price is a number of its own, by case.
    """

    month: str
    group: str
    item: str
    price_item: str
    times: float
    quantity_unit: str
    price_unit: str
    quantities: dict[str, float]
    prices: dict[str, float]


def money_of_cases(comparison: Comparison) -> list[MoneyOfCases]:
    """Every line of money with something in it in some case, the same rows for all of them."""
    found: dict[tuple[str, str, str, str, float], MoneyOfCases] = {}
    for case, plan in comparison.plans.items():
        for line in plan.lines:
            times = line.sign * line.factor
            key = (line.month, line.group, line.item, line.price_item, times)
            row = found.setdefault(key, MoneyOfCases(*key, line.quantity_unit, line.price_unit, {}, {}))
            row.quantities[case], row.prices[case] = line.quantity, line.price
    months = list(comparison.scenario.case.months)
    rows = [row for row in found.values() if any(row.quantities.values())]
    return sorted(rows, key=lambda row: (months.index(row.month), GROUPS.index(row.group)))
