"""The first sheet while it is written: small tables below each other, charts at their right."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from olefinlp.answers.tables import Record
from olefinlp.outputs.workbook_book import Book, put
from olefinlp.outputs.workbook_charts import Ranges
from olefinlp.outputs.workbook_money import MoneySheets
from olefinlp.outputs.workbook_tables import number_format

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan

NAME = "Overview"
ALL_MONTHS = "All months"
ROW_PIXELS = 18
CHART_WIDTH = 820
SEVERAL = 1.4
"""Charts of several months are taller by this; their page is wider, so that it holds more rows too."""

Matrix = dict[tuple[str, str], dict[str, float]]
"""(item, unit) → month → number."""


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


def matrix(page: Page, title: str, rows: Matrix, total: bool = True) -> Ranges:
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


def gathered(rows: Sequence[Record], item: str, value: str, unit: Callable[[Record], str]) -> Matrix:
    """Sums of a table by item and month."""
    found: Matrix = {}
    for row in rows:
        by_month = found.setdefault((row[item], unit(row)), {})
        if row[value] is not None:
            by_month[row["month"]] = by_month.get(row["month"], 0.0) + row[value]
    return found


def place_chart(page: Page, top: int, chart: Any, rows: int) -> None:
    """Put a chart right of the table that starts below row `top`, and go on below both."""
    high = max(page.row - top, page.tall(rows))
    chart.set_size({"width": CHART_WIDTH, "height": (high - 1) * ROW_PIXELS - 8})
    page.sheet.insert_chart(top + 1, 3 + len(page.headings), chart, {"x_offset": 6, "y_offset": 2, "object_position": 2})
    page.row = max(page.row, top + high)
