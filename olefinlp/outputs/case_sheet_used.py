"""The sheet of converted prices: what the plan makes of every price of every case, by formula."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from olefinlp.inputs.case_sheet_names import MORE_CASES, MORE_ROWS, PRICES, UNITS
from olefinlp.inputs.case_sheet_rows import SheetPrice, used_values
from olefinlp.inputs.units import SHARES
from olefinlp.outputs.case_sheet_book import CASE_WIDTH, FACTOR_FORMAT, HEADER, MAY, CaseBook, Field, widest
from olefinlp.outputs.workbook_book import letters, put, put_formula

FIRST = HEADER + 2
"""Row of the first price on both sheets of prices, from 0: a price stands in the same row of both."""


def as_used_cells(book: CaseBook) -> tuple[str, str]:
    """Letters of the columns with the unit used and with the first case, on the sheet of converted prices."""
    first = 6 if book.several_months else 5
    return letters(first - 1), letters(first)


def write_as_used(book: CaseBook, sheet: Any, columns: Mapping[str, str], first_price_case: str) -> None:
    """Every price of every case in the unit that the plan uses, by formula; `columns` are those of the sheet of prices."""
    months = [Field("month", "Month", 10)] if book.several_months else []
    fields = [
        Field("item", "Item", widest(row.item for row in book.prices)),
        *months,
        Field("unit", "Unit written", 15),
        Field("kind", "Kind", 10),
        Field("factor", "Factor", 12, style=FACTOR_FORMAT),
        Field("used_in", "Used in", 12, style="name"),
    ]
    more = MORE_ROWS if book.several_months else 0
    last = FIRST + len(book.prices) + more - 1
    several = " Where months differ, a price that leans on another shows its first month." if book.several_months else ""
    lines = (
        f"What the plan makes of each price, by formula: its number times the factor of its unit (sheet {UNITS}).",
        "A share is of the price it leans on, an amount is added to it. A blank cell counts as the number of the first case."
        + several,
    )
    for row, line in enumerate(lines):
        put(sheet, row, 0, line, book.style("note"))
    _AsUsed(book, sheet, fields, columns, first_price_case, last).write()
    sheet.protect("", MAY)


class _AsUsed:
    """Writes the sheet of converted prices; every row and every column has the same formulas."""

    def __init__(
        self, book: CaseBook, sheet: Any, fields: list[Field], columns: Mapping[str, str], first_price_case: str, last: int
    ) -> None:
        self.book, self.sheet, self.fields, self.columns, self.last = book, sheet, fields, columns, last
        self.names = list(book.names) + [""] * MORE_CASES
        self.first, self.first_price_case = len(fields), first_price_case
        self.at = {field.key: letters(at) for at, field in enumerate(fields)}
        self.keys = book.last_key

    def write(self) -> None:
        """Headings, then rows."""
        book, sheet = self.book, self.sheet
        for at, field in enumerate(self.fields):
            sheet.write_string(HEADER, at, field.heading, book.style("header", *field.heading_style))
            sheet.set_column(at, at, field.width)
        sheet.set_column(self.first, self.first + len(self.names) - 1, CASE_WIDTH)
        for number, name in enumerate(self.names):
            there = self.heading(number)
            put_formula(sheet, HEADER, self.first + number, f'=IF({there}="","",{there})', name, book.style("header", "right"))
        sheet.set_row(HEADER, 30)
        sheet.freeze_panes(HEADER + 1, 1)
        sheet.repeat_rows(HEADER)
        sheet.autofilter(HEADER, 0, self.last, self.first + len(book.names) - 1)
        sheet.print_area(0, 0, self.last, self.first + len(book.names) - 1)
        values = [used_values(book.prices, case) for case in range(len(book.names))]
        for row in range(FIRST, self.last + 1):
            number = row - FIRST
            price = book.prices[number] if number < len(book.prices) else None
            self.texts(row, price)
            for case in range(len(self.names)):
                shown = values[case][number] if price and case < len(values) else ""
                formula = self.formula(row, case, price)
                put_formula(sheet, row, self.first + case, formula, shown, book.style("#,##0.00", "top"))

    def heading(self, case: int) -> str:
        """The heading of a case on the sheet of prices."""
        return f"{PRICES}!{self.price_column(case)}${HEADER + 1}"

    def price_column(self, case: int) -> str:
        """The letters of a case's column on the sheet of prices."""
        first = 0
        for letter in self.first_price_case:
            first = first * 26 + ord(letter) - 64
        return letters(first - 1 + case)

    def texts(self, row: int, price: SheetPrice | None) -> None:
        """Item, month and unit as on the sheet of prices; factor, kind and unit used from the sheet of units."""
        item, unit = f"{PRICES}!${self.columns['item']}{row + 1}", f"{PRICES}!${self.columns['unit']}{row + 1}"
        top, name = self.book.style("top"), self.book.style("name")
        values = {"item": price.item if price else "", "unit": price.unit if price else "", "month": price.month if price else ""}
        for key in ("item", "month", "unit"):
            if key in self.at:
                there = f"{PRICES}!${self.columns[key]}{row + 1}"
                self.put(row, key, f'=IF({there}="","",{there})', values[key], top)
        match = f'MATCH({item}&"|"&{unit},{UNITS}!$A${HEADER + 2}:$A${self.keys},0)'
        factor = f"{UNITS}!$E${HEADER + 2}:$E${self.keys}"
        number: float | str = ""
        kind = used_in = ""
        if price:
            number = SHARES[price.unit] if price.is_share else price.factors[price.unit]
            kind, used_in = "share" if price.is_share else "amount" if price.of else "price", price.used_in
        own = f"${self.at['factor']}{row + 1}"
        self.put(
            row,
            "factor",
            f'=IF({item}="","",IF(ISNUMBER({match}),INDEX({factor},{match}),"unit?"))',
            number,
            self.book.style(FACTOR_FORMAT, "top"),
        )
        for key, column, value in (("kind", "D", kind), ("used_in", "F", used_in)):
            there = f"{UNITS}!${column}${HEADER + 2}:${column}${self.keys}"
            self.put(row, key, f'=IF(ISNUMBER({own}),INDEX({there},{match}),"")', value, name if key == "used_in" else top)

    def put(self, row: int, key: str, formula: str, value: float | str, style: Any) -> None:
        """A formula in the column of a key."""
        put_formula(self.sheet, row, [field.key for field in self.fields].index(key), formula, value, style)

    def formula(self, row: int, case: int, price: SheetPrice | None) -> str:
        """The converted price of a case; nothing while the case has no name."""
        own, first = self.price_column(case), self.price_column(0)
        number = f"{PRICES}!{own}{row + 1}"
        if case:
            number = f'IF({number}="",{PRICES}!${first}{row + 1},{number})'
        factor, kind = f"${self.at['factor']}{row + 1}", f"${self.at['kind']}{row + 1}"
        wrong = f'IF(ISNUMBER({factor}),"number?","unit?")'
        named = f'{self.heading(case)}=""'
        if price is None:
            of, item = (f"{PRICES}!${self.columns[key]}{row + 1}" for key in ("relative_to", "item"))
            value = f"IF(ISNUMBER({number})*ISNUMBER({factor}),{number}*{factor},{wrong})"
            return f'=IF(OR({named},{item}=""),"",IF({of}<>"","in the plan",{value}))'
        if price.base is None:
            return f'=IF({named},"",IF(ISNUMBER({number})*ISNUMBER({factor}),{number}*{factor},{wrong}))'
        base = f"{letters(self.first + case)}{FIRST + price.base + 1}"
        times = ""
        if "times" in self.columns:
            there = f"{PRICES}!${self.columns['times']}{row + 1}"
            times = f'IF({there}="",1,{there})*'
        value = f'IF({kind}="share",{number}*{factor}*{base},{times}{base}+{number}*{factor})'
        return f'=IF({named},"",IF(ISNUMBER({number})*ISNUMBER({factor})*ISNUMBER({base}),{value},{wrong}))'
