"""The other sheets of a case sheet: limits, units, and how to use them."""

from __future__ import annotations

import textwrap
from typing import Any

from olefinlp.inputs.case_sheet_names import LIMITS, MORE_CASES, MORE_ROWS, PRICES, SCENARIO, UNITS
from olefinlp.inputs.case_sheet_rows import SheetPrice
from olefinlp.inputs.units import SHARES
from olefinlp.outputs.case_sheet_book import FACTOR_FORMAT, HEADER, MAY, CaseBook, Field, widest
from olefinlp.outputs.workbook_book import letters, put, put_formula

UNIT_FIELDS = (("Key", 44.0), ("Item", 36.0), ("Unit", 15.0), ("Kind", 10.0), ("Factor", 14.0), ("Used in", 11.0))
HEADING_STYLES = {"Factor": ("right",), "Used in": ("indent",)}
USE = (
    "Sheet Prices: change the filled cells. Choose the unit of a row from its list: what the plan makes of the price "
    "stands beside it at once.",
    "A further case: write its name at the right of the last case, then only what differs. A blank cell means: as the "
    "first case.",
    "A case that is no longer wanted: clear its name and its cells.",
    "Sheet Limits: what is offered, sold and held, what units and furnaces can do this month; `unlimited` is a maximum. A "
    "changed factor or outage needs its reason in the column Note: it travels into the plan.",
    "Sheet Prices as used: every price in the money and unit of the plan, by formula. Nothing is written there.",
    "Names (Item) are those of the scenario's files, headings are read by their text: columns may be moved or added.",
)
CAUTIONS = (
    "Planning aid. Results are estimates from the prices, limits and yields that are supplied: they set no operating limits, "
    "alarms, trips or furnace conditions.",
    "The plant's own engineering limits, procedures and licence terms always come first.",
    "Competition law: keep other companies' current prices and volumes out of this workbook, and mind who gets it.",
)


def write_read_me(book: CaseBook, sheet: Any, way: str, name: str) -> None:
    """What this workbook is for; the cell beside `Scenario` is read back."""
    sheet.set_column(0, 0, 16)
    sheet.set_column(1, 1, 118)
    put(sheet, 0, 0, f"Cases of {book.scenario.title}", book.style("title"))
    periods = ", ".join(period.name for period in book.scenario.periods)
    shown = f'"{name}"' if " " in name else name
    labels = (
        (SCENARIO, way),
        ("Plant", book.scenario.plant.name),
        ("Months", periods),
        ("Money", f"{book.scenario.currency}, per t, GJ LHV, MWh or piece"),
        ("Cases", ", ".join(book.names)),
        ("To compare", f"olefinlp cases {shown} -o comparison.xlsx"),
    )
    row = 2
    for label, text in labels:
        put(sheet, row, 0, label, book.style("bold", "top"))
        put(sheet, row, 1, text, book.style("wrap"))
        row += 1
    for title, lines in (("How to use it", USE), ("Cautions", CAUTIONS)):
        row += 1
        for number, line in enumerate(lines):
            put(sheet, row, 0, "" if number else title, book.style("bold", "top"))
            put(sheet, row, 1, line, book.style("wrap"))
            sheet.set_row(row, 15 * len(textwrap.wrap(line, 130)))
            row += 1
    row += 1
    legend = (("may be changed", "input"), ("blank", "as_first"))
    for (text, style), meaning in zip(legend, ("an input", "a blank cell of a case: as the first case"), strict=True):
        put(sheet, row, 0, text, book.style(style))
        put(sheet, row, 1, meaning)
        row += 1
    put(sheet, row, 0, "All else is locked, without a password: review, unprotect sheet opens it.", book.style("note"))
    sheet.protect("", MAY)


def write_units(book: CaseBook, sheet: Any) -> None:
    """What one written unit of each price is in the unit used, and the lists of units that cells offer."""
    title = "What one of a written unit is in the unit that the plan uses; both sheets of prices look here."
    put(sheet, 0, 0, title, book.style("note"))
    for at, (heading, width) in enumerate(UNIT_FIELDS):
        sheet.write_string(HEADER, at, heading, book.style("header", *HEADING_STYLES.get(heading, ())))
        sheet.set_column(at, at, width)
    row = HEADER + 1
    known: dict[str, SheetPrice] = {}
    for price in book.prices:
        first = known.setdefault(price.item, price)
        if first is price or price.units != first.units:
            book.units_at.setdefault(price.units, f"{UNITS}!$C${row + 1}:$C${row + len(price.units)}")
            row = _unit_rows(book, sheet, row, price)
    book.last_key = row
    sheet.autofilter(HEADER, 0, row - 1, len(UNIT_FIELDS) - 1)
    sheet.freeze_panes(HEADER + 1, 0)
    sheet.repeat_rows(HEADER)
    _lists_of_limits(book, sheet)
    sheet.protect("", MAY)


def _unit_rows(book: CaseBook, sheet: Any, row: int, price: SheetPrice) -> int:
    kind = "amount" if price.of else "price"
    for unit in price.units:
        share = unit in SHARES
        cells = (f"{price.item}|{unit}", price.item, unit, "share" if share else kind)
        for at, text in enumerate(cells):
            put(sheet, row, at, text, book.style("top"))
        put(sheet, row, 4, SHARES[unit] if share else price.factors[unit], book.style(FACTOR_FORMAT, "top"))
        put(sheet, row, 5, price.used_in, book.style("name"))
        row += 1
    return row


def _lists_of_limits(book: CaseBook, sheet: Any) -> None:
    first = len(UNIT_FIELDS) + 1
    sheet.set_column(first - 1, first - 1, 3)
    lists = dict.fromkeys(row.units for row in book.limits)
    put(sheet, HEADER - 1, first, f"Units that rows of the sheet {LIMITS} offer", book.style("note"))
    for at, units in enumerate(lists, first):
        sheet.set_column(at, at, 12)
        put(sheet, HEADER, at, f"List {at - first + 1}", book.style("header"))
        for number, unit in enumerate(units, HEADER + 1):
            put(sheet, number, at, unit, book.style("top"))
        column = letters(at)
        book.units_at[units] = f"{UNITS}!${column}${HEADER + 2}:${column}${HEADER + 1 + len(units)}"


def write_limits(book: CaseBook, sheet: Any, first_price_case: int) -> None:
    """What is no price: one row each, the cases as on the sheet of prices."""
    rows = book.limits
    fields = [
        Field("group", "Group", 15),
        Field("item", "Item", widest(row.item for row in rows)),
        *([Field("month", "Month", 10)] if book.several_months else []),
        Field("unit", "Unit", 12, changed=True),
        Field("note", "Note", 36, changed=True, style="wrap"),
    ]
    last, first_case, unit = HEADER + len(rows) + MORE_ROWS, len(fields), [field.key for field in fields].index("unit")
    book.head(
        sheet,
        f"A case that is added on the sheet {PRICES} appears here too. "
        "A changed factor or outage needs its reason in the column Note; rows below are free.",
    )
    book.headings(sheet, fields, last)
    for at in range(first_case, first_case + len(book.names) + MORE_CASES):
        there = f"{PRICES}!{letters(first_price_case + at - first_case)}${HEADER + 1}"
        name = book.names[at - first_case] if at - first_case < len(book.names) else ""
        put_formula(sheet, HEADER, at, f'=IF({there}="","",{there})', name, book.style("header", "right"))
    for number, row in enumerate(rows, HEADER + 1):
        values: dict[str, object] = {"group": row.group, "item": row.item, "month": row.month, "unit": row.unit, "note": row.note}
        book.texts(sheet, number, fields, values)
        sheet.data_validation(number, unit, number, unit, book.unit_list(row.units))
        _limit_cells(book, sheet, number, first_case, row.value, "row", "input")
    for number in range(HEADER + 1 + len(rows), last + 1):
        book.texts(sheet, number, fields, {}, all_free=True)
        _limit_cells(book, sheet, number, first_case, None, "free")
    right, cell = first_case + len(book.names) + MORE_CASES - 1, f"{letters(first_case)}{HEADER + 2}"
    rule = {
        "validate": "custom",
        "value": f'=OR(ISNUMBER({cell}),{cell}="unlimited")',
        "error_title": "A number is needed",
        "error_message": "Write a number, its unit stands in the column Unit; or `unlimited` for a maximum.",
    }
    sheet.data_validation(HEADER + 1, first_case, last, right, rule)
    book.grey_blanks(sheet, first_case, HEADER + 1, last)
    sheet.protect("", MAY)


def _limit_cells(book: CaseBook, sheet: Any, row: int, first_case: int, first: float | str | None, *words: str) -> None:
    for at in range(first_case, first_case + len(book.names) + MORE_CASES):
        written = at < first_case + len(book.names)
        style = book.style("General", "top", *(words if written else ("free",)))
        if at == first_case and first is not None:
            put(sheet, row, at, first, style)
        else:
            sheet.write_blank(row, at, None, style)
