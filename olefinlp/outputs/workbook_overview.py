"""The first sheet: what the plan earns, what limits it, what is bought, made and loaded, what to be careful about."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from olefinlp.answers.limits import binding
from olefinlp.answers.money import GROUPS
from olefinlp.answers.tables import Record
from olefinlp.outputs.workbook_book import Book, cell, put, put_formula
from olefinlp.outputs.workbook_charts import Ranges, load_chart, quantity_chart
from olefinlp.outputs.workbook_money import FIXED, MoneySheets
from olefinlp.outputs.workbook_tables import number_format

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan

NAME = "Overview"
TOP_LIMITS = 8
WORTHS = "Limits that bind, and what one more unit is worth"
AGREES_WITHIN = 0.01
"""Thousands of the currency between the margin of the sheet and that of the solver."""

KG_PER_LB = 0.45359237
ALL_MONTHS = "All months"
ROW_PIXELS = 18
CHART_WIDTH, FEED_ROWS, SLATE_ROWS, LOAD_ROWS = 620, 13, 15, 17
PAGE_ROWS = 31
"""Rows of feeds and products that leave room for the loads on the same page."""

SEVERAL = 1.4
"""Charts of several months are taller by this; their page is wider, so that it holds more rows too."""


@dataclass
class Page:
    """The sheet while it is written from top to bottom; `row` is the next free one, from 0."""

    book: Book
    sheet: Any
    plan: Plan
    money: MoneySheets
    row: int = 0

    @property
    def months(self) -> tuple[str, ...]:
        """Months of the plan."""
        return self.plan.quantities.case.months

    @property
    def headings(self) -> tuple[str, ...]:
        """Headings of the columns of numbers: the months, and all of them when there are several."""
        return (*self.months, ALL_MONTHS) if len(self.months) > 1 else self.months

    def tall(self, rows: int) -> int:
        """Rows of a chart or a page, more of them when there are several months."""
        return round(rows * SEVERAL) if len(self.months) > 1 else rows

    @property
    def money_unit(self) -> str:
        """Unit of amounts."""
        return f"k{self.plan.currency}"

    def block(self, title: str, columns: Sequence[str], texts: int = 2) -> int:
        """The title and header row of a small table; gives the header's row."""
        self.row += 1
        put(self.sheet, self.row, 0, title, self.book.style("block"))
        for at, text in enumerate(columns):
            put(self.sheet, self.row + 1, at, text, self.book.style("header", *(["right"] if at >= texts else [])))
        self.row += 2
        return self.row - 1

    def label(self, text: str, unit: str = "", *words: str) -> None:
        """The first two cells of a row."""
        put(self.sheet, self.row, 0, text, self.book.style(*words))
        self.sheet.write_string(self.row, 1, unit, self.book.style(*words))


def write_overview(book: Book, sheet: Any, plan: Plan, money: MoneySheets) -> None:
    """All blocks, top to bottom."""
    page = Page(book, sheet, plan, money)
    sheet.hide_gridlines(2)
    sheet.set_default_row(ROW_PIXELS * 0.75)
    _facts(page)
    margin_row = _key_figures(page)
    _check(page, margin_row)
    _limits(page)
    _texts(page)
    breaks = [page.row]
    _feeds(page)
    _slate(page)
    if page.row - breaks[0] > page.tall(PAGE_ROWS):
        breaks.append(page.row)
    _loads(page)
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
        ("Price case", scenario.file.price_case or "as written in the scenario"),
        ("Status", f"{page.plan.status}, proven (see Audit)"),
    )
    for page.row, (name, value) in enumerate(facts, 1):
        put(page.sheet, page.row, 0, name, page.book.style("bold"))
        put(page.sheet, page.row, 1, value)
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
    put(
        page.sheet,
        page.row,
        5,
        "After a price is changed, the figures above are those of this same plan at that price.",
        page.book.style("note"),
    )
    alarm = {"type": "cell", "criteria": "==", "value": '"DOES NOT AGREE"', "format": page.book.style("alarm")}
    page.sheet.conditional_format(page.row, 3, page.row, 3, alarm)
    page.row += 1


def _limits(page: Page) -> None:
    """Limits that bind, those with the largest part in the margin; every one is on its own sheet."""
    found = binding(page.plan.limits)
    shown = top_limits(page.plan, found)
    if len(page.months) > 1:
        _limits_by_month(page, shown)
    else:
        _limits_of_month(page, [records[0] for records in shown.values()])
    everything = {(row["limit"], row["state"]) for row in found}
    rest = f"{len(shown)} of {len(everything)} limits that bind, those with the largest part in the margin. "
    text = (rest if len(everything) > len(shown) else "") + page.plan.limits.note
    put(page.sheet, page.row, 0, text if found else "No limit is worth anything.", page.book.style("note"))
    page.row += 1


def _limits_of_month(page: Page, shown: Sequence[Record]) -> None:
    page.block(WORTHS, ("Limit", "Month", "State", "Worth", "", "Plan"), texts=3)
    indent = page.book.style("indent")
    for at, text in ((4, "Worth unit"), (6, "Unit")):
        put(page.sheet, page.row - 1, at, text, page.book.style("header", "indent"))
    worths = page.book.style(number_format("price", [row["worth"] for row in shown]))
    for row in shown:
        for at, key in enumerate(("limit", "month", "state")):
            put(page.sheet, page.row, at, row[key])
        put(page.sheet, page.row, 3, row["worth"], worths)
        put(page.sheet, page.row, 4, row["worth_unit"], indent)
        put(page.sheet, page.row, 5, row["value"], page.book.style(number_format("quantity", [row["value"]])))
        put(page.sheet, page.row, 6, row["unit"], indent)
        page.row += 1


def _limits_by_month(page: Page, shown: dict[tuple[str, str], list[Record]]) -> None:
    page.block(WORTHS, ("Limit", "Worth unit", *page.months))
    worths = page.book.style(number_format("price", [row["worth"] for records in shown.values() for row in records]))
    for (limit, state), records in shown.items():
        page.label(f"{limit}, {state}", records[0]["worth_unit"])
        for row in records:
            put(page.sheet, page.row, 2 + page.months.index(row["month"]), row["worth"], worths)
        page.row += 1


def top_limits(plan: Plan, found: Sequence[Record]) -> dict[tuple[str, str], list[Record]]:
    """The limits with the largest |rate × limit| over the months, by name and state, the largest first."""
    limits = {id(record): limit for record, limit in zip(plan.limits.rows, plan.quantities.case.limits.values(), strict=True)}
    parts: dict[tuple[str, str], float] = {}
    records: dict[tuple[str, str], list[Record]] = {}
    for record in found:
        limit, key = limits[id(record)], (record["limit"], record["state"])
        sides = (limit.low, limit.high) if record["state"] == "at minimum" else (limit.high, limit.low)
        bound = sides[0] if sides[0] is not None else sides[1]
        parts[key] = parts.get(key, 0.0) + abs(record["rate"] / limit.worth_scale * (bound or 0.0))
        records.setdefault(key, []).append(record)
    best = sorted(parts, key=lambda key: -parts[key])[:TOP_LIMITS]
    return {key: records[key] for key in best}


def _matrix(page: Page, title: str, rows: dict[tuple[str, str], dict[str, float]], total: bool = True) -> Ranges:
    """Items by month, as values of the plan; gives where they stand. Keys are (item, unit)."""
    several = total and len(page.months) > 1
    header = page.block(title, ("", "Unit", *page.months, *([ALL_MONTHS] if several else [])))
    first = page.row
    numbers = [value for by_month in rows.values() for value in by_month.values()]
    for (item, unit), by_month in rows.items():
        page.label(item, unit)
        style = page.book.style(number_format("share" if unit == "%" else "quantity", numbers))
        for column, month in enumerate(page.months, 2):
            put(page.sheet, page.row, column, by_month.get(month), style)
        if several:
            put(page.sheet, page.row, 2 + len(page.months), sum(by_month.values()), style)
        page.row += 1
    return Ranges(NAME, header, first, page.row - 1, 0, tuple(range(2, 2 + len(page.months))))


def _gathered(
    rows: Sequence[Record], item: str, value: str, unit: Callable[[Record], str]
) -> dict[tuple[str, str], dict[str, float]]:
    """Sums of a table by item and month."""
    found: dict[tuple[str, str], dict[str, float]] = {}
    for row in rows:
        by_month = found.setdefault((row[item], unit(row)), {})
        if row[value] is not None:
            by_month[row["month"]] = by_month.get(row["month"], 0.0) + row[value]
    return found


def _feeds(page: Page) -> None:
    rows = _gathered(page.plan.feeds.rows, "feed", "bought", lambda _: "kt")
    top = page.row
    ranges = _matrix(page, "Feeds bought", rows)
    _place(page, top, quantity_chart(page.book, ranges, _leader("Feed bought, kt", rows), "kt"), FEED_ROWS)


def _slate(page: Page) -> None:
    """Products sold; what is sold as heat stands last and is left out of the chart of tonnes."""
    rows = _gathered(page.plan.slate.rows, "outlet", "quantity", lambda row: str(row["unit"]))
    rows = dict(sorted(rows.items(), key=lambda entry: entry[0][1] != "kt"))
    tonnes = {key: value for key, value in rows.items() if key[1] == "kt"}
    top = page.row
    ranges = _matrix(page, "Products sold", rows)
    if tonnes:
        ranges = Ranges(NAME, ranges.header, ranges.first, ranges.first + len(tonnes) - 1, 0, ranges.months)
        _place(page, top, quantity_chart(page.book, ranges, _leader("Products sold, kt", tonnes), "kt"), SLATE_ROWS)


def _leader(title: str, rows: dict[tuple[str, str], dict[str, float]]) -> str:
    """A title that says the sum and the largest part."""
    sums = {item: sum(by_month.values()) for (item, _), by_month in rows.items()}
    total = sum(sums.values())
    if total <= 0:
        return f"{title}: nothing"
    largest = max(sums, key=lambda item: sums[item])
    return f"{title}: {total:,.4g} in all, {largest} {sums[largest] / total:.0%}"


def _loads(page: Page) -> None:
    """Furnace groups and recovery units: how much of their maximum is used."""
    rows = _gathered(page.plan.furnace_groups.rows, "group", "share", lambda _: "%")
    rows |= _gathered(page.plan.recovery.rows, "unit", "share", lambda _: "%")
    rows = {key: by_month for key, by_month in rows.items() if by_month}
    if not rows:
        return
    top = page.row
    ranges = _matrix(page, "Load of furnaces and recovery units", rows, total=False)
    limit = 2 + len(page.months)
    put(page.sheet, ranges.header, limit, "Maximum", page.book.style("header", "right"))
    for row in range(ranges.first, ranges.last + 1):
        put(page.sheet, row, limit, 1.0, page.book.style("0%"))
    full = sum(max(by_month.values()) > 0.9995 for by_month in rows.values())
    title = f"Load, % of maximum (the line is 100 %): {full} of {len(rows)} are full" + (
        " in some month" if len(page.months) > 1 else ""
    )
    _place(page, top, load_chart(page.book, ranges, title, limit), LOAD_ROWS)


def _place(page: Page, top: int, chart: Any, rows: int) -> None:
    """Put a chart right of the table that starts below row `top`, and go on below both."""
    high = max(page.row - top, page.tall(rows))
    chart.set_size({"width": CHART_WIDTH, "height": (high - 1) * ROW_PIXELS - 8})
    page.sheet.insert_chart(top + 1, 3 + len(page.headings), chart, {"x_offset": 6, "y_offset": 2, "object_position": 2})
    page.row = max(page.row, top + high)


def _texts(page: Page) -> None:
    """Warnings of this plan, what is always to be kept in mind, and how to read the workbook."""
    from olefinlp.answers.audit import CAUTIONS

    warnings = [f"{w.place}  {w.path}: {w.message}" + (f" ({w.hint})" if w.hint else "") for w in page.plan.warnings]
    reading = (
        "Quantities are the solver's values; every amount is a formula of a quantity and a cell of the sheet Prices.",
        "Filled cells on Prices and Money may be changed; that prices this same plan again, it does not plan again.",
    )
    for title, lines in (("Warnings", warnings), ("To be kept in mind", CAUTIONS), ("How to read this workbook", reading)):
        if lines:
            page.row += 1
            put(page.sheet, page.row, 0, title, page.book.style("block"))
            for page.row, line in enumerate(lines, page.row + 1):
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
