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
AGREES_WITHIN = 0.01
"""Thousands of the currency between the margin of the sheet and that of the solver."""

KG_PER_LB = 0.45359237
ALL_MONTHS = "All months"
ROW_PIXELS = 18
CHART_WIDTH, CHART_ROWS = 620, 15
PAGE_PIXELS = 1000


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
    breaks = [page.row]
    _feeds(page)
    _slate(page)
    breaks.append(page.row)
    _loads(page)
    _texts(page)
    _widths(page)
    sheet.set_h_pagebreaks(breaks)


def _facts(page: Page) -> None:
    scenario, months = page.plan.scenario, page.months
    put(page.sheet, 0, 0, scenario.title, page.book.style("title"))
    page.sheet.set_row(0, 24)
    span = months[0] if len(months) == 1 else f"{months[0]} to {months[-1]}, {len(months)} months"
    facts = (
        ("Plant", scenario.plant.name),
        ("Months", span),
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
    amounts = {(line.group, month): 0.0 for line in plan.lines for month in months}
    for line in plan.lines:
        amounts[line.group, line.month] += line.amount
    groups = [group for group in GROUPS if any(amounts.get((group, month)) for month in months)]
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
    formulas = [f'=IF({_up(page, c, 1)}>0,{cell(margin_row, c).replace("$", "")}/{_up(page, c, 1)},"")' for c in _number_columns(page)]
    _figure_row(page, f"Margin before fixed cost per t of {cut}", f"{plan.currency}/t", formulas, values)
    if plan.currency == "USD":
        cents = ["" if value is None else value * KG_PER_LB / 10 for value in per_tonne]
        formulas = [f'=IF({_up(page, c, 2)}>0,{_up(page, c, 1)}*{KG_PER_LB}/10,"")' for c in _number_columns(page)]
        _figure_row(page, f"Margin before fixed cost per lb of {cut}", "USc/lb", formulas, cents)


def _check(page: Page, margin_row: int) -> None:
    """The margin of the sheet against that of the solver."""
    plan, total = page.plan, cell(margin_row, 1 + len(page.headings))
    solver = plan.margin / 1000
    page.row += 1
    page.label("Check: the solver's margin", page.money_unit)
    put(page.sheet, page.row, 2, solver, page.book.style(number_format("money", [solver])))
    text = f'=IF(ABS({total}-{cell(page.row, 2)})<{AGREES_WITHIN},"agrees","DOES NOT AGREE")'
    put_formula(page.sheet, page.row, 3, text, "agrees", page.book.style("bold"))
    put(page.sheet, page.row, 5, "After a price is changed, the figures above are those of this same plan at that price.", page.book.style("note"))
    alarm = {"type": "cell", "criteria": "==", "value": '"DOES NOT AGREE"', "format": page.book.style("alarm")}
    page.sheet.conditional_format(page.row, 3, page.row, 3, alarm)
    page.row += 1


def _limits(page: Page) -> None:
    """Limits that bind, those with the largest part in the margin; every other one is on its own sheet."""
    found = binding(page.plan.limits)
    shown = top_limits(page.plan, found)
    page.block("Limits that bind, and what one more unit is worth", ("Limit", "Month", "State", "Worth", "Per", "Plan", "Unit"), texts=3)
    for at, text in ((4, "Worth unit"), (6, "Unit")):
        put(page.sheet, page.row - 1, at, text, page.book.style("header"))
    worths = page.book.style(number_format("price", [row["worth"] for row in shown]))
    for row in shown:
        put(page.sheet, page.row, 0, row["limit"])
        put(page.sheet, page.row, 1, row["month"])
        put(page.sheet, page.row, 2, row["state"])
        put(page.sheet, page.row, 3, row["worth"], worths)
        put(page.sheet, page.row, 4, row["worth_unit"])
        put(page.sheet, page.row, 5, row["value"], page.book.style(number_format("quantity", [row["value"]])))
        put(page.sheet, page.row, 6, row["unit"])
        page.row += 1
    rest = f"{len(shown)} of {len(found)} limits that bind, those with the largest part in the margin. " if len(found) > len(shown) else ""
    text = rest + page.plan.limits.note if found else "No limit is worth anything."
    put(page.sheet, page.row, 0, text, page.book.style("note"))
    page.row += 1


def top_limits(plan: Plan, found: Sequence[Record]) -> list[Record]:
    """The limits with the largest |rate × limit|, in the order of months, the largest first within one."""
    parts: dict[int, float] = {}
    for record, limit in zip(plan.limits.rows, plan.quantities.case.limits.values(), strict=True):
        bound = limit.high if record["state"] == "at maximum" else limit.low
        bound = bound if bound is not None else limit.high
        parts[id(record)] = abs(record["rate"] / limit.worth_scale * (bound or 0.0))
    months = plan.quantities.case.months
    best = sorted(found, key=lambda record: -parts[id(record)])[:TOP_LIMITS]
    return sorted(best, key=lambda record: (months.index(record["month"]), -parts[id(record)]))


def _matrix(page: Page, title: str, rows: dict[tuple[str, str], dict[str, float]], total: bool = True) -> Ranges:
    """Items by month, as values of the plan; gives where they stand. Keys are (item, unit)."""
    several = total and len(page.months) > 1
    header = page.block(title, ("", "Unit", *page.months, *([ALL_MONTHS] if several else [])))
    first = page.row
    for (item, unit), by_month in rows.items():
        page.label(item, unit)
        kind = "share" if unit == "%" else "quantity"
        style = page.book.style(number_format(kind, list(by_month.values())))
        for column, month in enumerate(page.months, 2):
            put(page.sheet, page.row, column, by_month.get(month), style)
        if several:
            put(page.sheet, page.row, 2 + len(page.months), sum(by_month.values()), style)
        page.row += 1
    return Ranges(NAME, header, first, page.row - 1, 0, tuple(range(2, 2 + len(page.months))))


def _gathered(rows: Sequence[Record], item: str, value: str, unit: Callable[[Record], str]) -> dict[tuple[str, str], dict[str, float]]:
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
    _place(page, top, quantity_chart(page.book, ranges, _leader("Feed bought, kt", rows), "kt"))


def _slate(page: Page) -> None:
    """Products sold; what is sold as heat stands last and is left out of the chart of tonnes."""
    rows = _gathered(page.plan.slate.rows, "outlet", "quantity", lambda row: str(row["unit"]))
    rows = dict(sorted(rows.items(), key=lambda entry: entry[0][1] != "kt"))
    tonnes = {key: value for key, value in rows.items() if key[1] == "kt"}
    top = page.row
    ranges = _matrix(page, "Products sold", rows)
    if tonnes:
        ranges = Ranges(NAME, ranges.header, ranges.first, ranges.first + len(tonnes) - 1, 0, ranges.months)
        _place(page, top, quantity_chart(page.book, ranges, _leader("Products sold, kt", tonnes), "kt"))


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
    title = f"Load, % of maximum: {full} of {len(rows)} are full" + (" in some month" if len(page.months) > 1 else "")
    _place(page, top, load_chart(page.book, ranges, title, limit), rows=20)


def _place(page: Page, top: int, chart: Any, rows: int = CHART_ROWS) -> None:
    """Put a chart right of the table that starts below row `top`, and go on below both."""
    high = max(page.row - top, rows)
    chart.set_size({"width": CHART_WIDTH, "height": high * ROW_PIXELS - 8})
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
    names = [*(row["limit"] for row in plan.limits.rows), *(row["outlet"] for row in plan.slate.rows)]
    first = max((len(str(name)) for name in names), default=0)
    page.sheet.set_column(0, 0, min(max(first, 42), 50))
    page.sheet.set_column(1, 1, 10)
    amount = max((abs(line.amount) for line in plan.lines), default=0.0) * 2
    number = max(len(f"{amount:,.2f}") + 2, 11)
    page.sheet.set_column(2, 2 + len(page.headings), number)
    worth = max((len(row["worth_unit"]) for row in top_limits(plan, binding(plan.limits))), default=0)
    page.sheet.set_column(4, 4, max(worth + 1, number))
