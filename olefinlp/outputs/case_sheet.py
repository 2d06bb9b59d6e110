"""The case sheet: a workbook in which people write cases of a scenario, one column a case, without touching its files."""

from __future__ import annotations

import os
from pathlib import Path
from typing import Any

from olefinlp.inputs.case_rows import WEIGHT
from olefinlp.inputs.case_sheet_names import AS_USED, LIMITS, MORE_CASES, MORE_ROWS, PRICES, READ_ME, UNITS, USED_FIRST, USED_IN
from olefinlp.inputs.case_sheet_rows import SheetPrice, used_values
from olefinlp.inputs.scenario import Scenario
from olefinlp.outputs.case_sheet_book import HEADER, MAY, CaseBook, Field, decimals, widest
from olefinlp.outputs.case_sheet_pages import write_limits, write_read_me, write_units
from olefinlp.outputs.case_sheet_used import FIRST, as_used_cells, write_as_used
from olefinlp.outputs.files import write_bytes
from olefinlp.outputs.workbook_book import letters, put, put_formula

WEIGHTS = HEADER + 1
"""Row of the weights, from 0; prices begin below."""


def write_case_sheet(scenario: Scenario, path: str | os.PathLike[str]) -> Path:
    """Write the case sheet of a scenario, whole or not at all; the same scenario gives the same bytes.

    `read_cases` reads it back. It keeps the way from its folder to the scenario file. Raises `OutputError`.
    """
    target = Path(path)
    return write_bytes(target, case_sheet_bytes(scenario, target.parent, target.name))


def case_sheet_bytes(scenario: Scenario, folder: str | os.PathLike[str], name: str = "prices.xlsx") -> bytes:
    """The whole workbook as it would stand in a folder under a name."""
    book = CaseBook(scenario)
    sheets = {title: book.sheet(title) for title in (READ_ME, PRICES, LIMITS, AS_USED, UNITS)}
    write_read_me(book, sheets[READ_ME], scenario_way(scenario, folder), name)
    write_units(book, sheets[UNITS])
    fields = price_fields(book)
    columns = {field.key: letters(at) for at, field in enumerate(fields)}
    write_prices(book, sheets[PRICES], fields, name)
    write_as_used(book, sheets[AS_USED], columns, letters(len(fields)))
    write_limits(book, sheets[LIMITS], len(fields))
    sheets[PRICES].activate()
    return book.to_bytes()


def scenario_way(scenario: Scenario, folder: str | os.PathLike[str]) -> str:
    """The way from a folder to the scenario file, with `/` on every system."""
    full = os.path.abspath(scenario.path)
    try:
        way = os.path.relpath(full, os.path.abspath(folder))
    except ValueError:  # on another drive there is no way from here to there
        way = full
    return way.replace(os.sep, "/")


def price_fields(book: CaseBook) -> list[Field]:
    """The columns left of the cases."""
    rows = book.prices
    return [
        Field("group", "Group", 15),
        Field("item", "Item", widest(row.item for row in rows)),
        *([Field("month", "Month", 10)] if book.several_months else []),
        Field("unit", "Unit", 15, changed=True),
        Field("basis", "Basis", widest((row.basis for row in rows), 30), changed=True, style="wrap"),
        Field("relative_to", "Relative to", widest(row.of for row in rows) + 1, style="name"),
        *([Field("times", "Times", 7, style="General")] if any(row.times is not None for row in rows) else []),
        Field("source", "Source", widest((row.source for row in rows), 28), changed=True, style="wrap"),
        Field("date", "Date", 12, changed=True, style="text"),
        Field("note", "Note", 30, changed=True, style="wrap"),
        Field("used", USED_FIRST, 11, style="#,##0.00"),
        Field("used_in", USED_IN, 12, style="name"),
    ]


def write_prices(book: CaseBook, sheet: Any, fields: list[Field], name: str) -> None:
    """The sheet that people write on."""
    first_case = len(fields)
    more = MORE_ROWS if book.several_months else 0
    last = FIRST + len(book.prices) + more - 1
    shown = f'"{name}"' if " " in name else name
    several = " A blank month means all months without a row of their own; the rows below the last are free." if more else ""
    book.head(
        sheet,
        "One column a case: change what is filled, and write the name of a further case at the right of the last one. "
        f"A blank means as the first case.{several} Save, then: olefinlp cases {shown} -o comparison.xlsx",
    )
    book.headings(sheet, fields, last)
    _case_headings(book, sheet, first_case)
    weights: dict[str, object] = {"group": "cases", "item": WEIGHT, "unit": "fraction"}
    weights["note"] = "chance of each case against the others; blank: equal"
    book.texts(sheet, WEIGHTS, [Field(f.key, f.heading, f.width, style=f.style) for f in fields], weights)
    _case_cells(book, sheet, WEIGHTS, first_case, (None,) * len(book.names), "General", "row", "input")
    for row, price in enumerate(book.prices, FIRST):
        _write_price(book, sheet, row, fields, price)
    for row in range(last + 1 - more, last + 1):
        free = [field for field in fields if not field.key.startswith("used")]
        book.texts(sheet, row, free, {}, all_free=True)
        _case_cells(book, sheet, row, first_case, (None,) * len(book.names), "General", "free")
    _write_used(book, sheet, fields, last)
    _validate(book, sheet, fields, last)
    book.grey_blanks(sheet, first_case, FIRST, last)
    sheet.protect("", MAY)


def _case_headings(book: CaseBook, sheet: Any, first_case: int) -> None:
    for at, name in enumerate(book.names, first_case):
        sheet.write_string(HEADER, at, name, book.style("case", "marked"))
    for at in range(first_case + len(book.names), first_case + len(book.names) + MORE_CASES):
        sheet.write_blank(HEADER, at, None, book.style("case"))


def _case_cells(
    book: CaseBook, sheet: Any, row: int, first_case: int, values: tuple[float | None, ...], number_format: str, *words: str
) -> None:
    for at, value in enumerate(values, first_case):
        style = book.style(number_format, "top", *words)
        if value is None:
            sheet.write_blank(row, at, None, style)
        else:
            put(sheet, row, at, value, style)
    for at in range(first_case + len(values), first_case + len(values) + MORE_CASES):
        sheet.write_blank(row, at, None, book.style(number_format, "top", "free"))


def _write_price(book: CaseBook, sheet: Any, row: int, fields: list[Field], price: SheetPrice) -> None:
    values: dict[str, object] = {"group": price.group, "item": price.item, "month": price.month, "unit": price.unit}
    values |= {"basis": price.basis, "relative_to": price.of, "source": price.source, "date": price.date, "note": price.note}
    book.texts(sheet, row, fields, values)
    for at, field in enumerate(fields):
        if field.key == "times" and price.of and not price.is_share:
            put(sheet, row, at, 1.0 if price.times is None else price.times, book.style("General", "top", "row", "input"))
    _case_cells(book, sheet, row, len(fields), price.values, decimals(price.values), "row", "input")


def _write_used(book: CaseBook, sheet: Any, fields: list[Field], last: int) -> None:
    """The converted price of the first case, from the sheet where all of them stand."""
    used, used_in = (next(at for at, field in enumerate(fields) if field.key == key) for key in ("used", "used_in"))
    unit_cell, price_cell = as_used_cells(book)
    values = used_values(book.prices, 0)
    for row in range(FIRST, last + 1):
        at = row - FIRST
        price = book.prices[at] if at < len(book.prices) else None
        number = values[at] if price else ""
        words = ("row",) if price else ()
        put_formula(sheet, row, used, f"='{AS_USED}'!{price_cell}{row + 1}", number, book.style("#,##0.00", "top", *words))
        unit = price.used_in if price else ""
        put_formula(sheet, row, used_in, f"='{AS_USED}'!{unit_cell}{row + 1}", unit, book.style("name", *words))


def _validate(book: CaseBook, sheet: Any, fields: list[Field], last: int) -> None:
    """Units from their list, numbers as numbers."""
    unit = next(at for at, field in enumerate(fields) if field.key == "unit")
    for row, price in enumerate(book.prices, FIRST):
        sheet.data_validation(row, unit, row, unit, book.unit_list(price.units))
    right = len(fields) + len(book.names) + MORE_CASES - 1
    number = {
        "validate": "decimal",
        "criteria": "between",
        "minimum": -1e12,
        "maximum": 1e12,
        "error_title": "A number is needed",
        "error_message": "Write a number; its unit stands in the column Unit.",
    }
    sheet.data_validation(WEIGHTS, len(fields), last, right, number)
