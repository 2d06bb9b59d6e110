"""Makes the damaged workbooks of this folder, and the odd but good ones beside it.

    python tests/damaged_cases/make_damaged.py            the workbooks
    python tests/damaged_cases/make_damaged.py messages   and what is said of each today, to be looked at before it is kept

All are small sheets of the textbook's thermal cracker, one fault each or several. Those that come from LibreOffice
(`soffice`) are made anew only with the word `office`: that program writes its own dates into what it saves.
"""

from __future__ import annotations

import datetime
import io
import os
import subprocess
import sys
import tempfile
import zipfile
from collections.abc import Callable, Mapping, Sequence
from pathlib import Path
from typing import Any

import openpyxl
from openpyxl.comments import Comment
from openpyxl.utils import get_column_letter

HERE = Path(__file__).resolve().parent
GOOD = HERE.parent / "odd_but_good_cases"
ROOT = HERE.parents[1]
FIXED = (2000, 1, 1, 0, 0, 0)
WAY = "../../scenarios/thermal_cracker.yaml"
HEADINGS = ("Item", "Unit", "Basis", "Relative to", "Times", "Source", "Date", "Note", "Base", "Dear")
BASE, DEAR = 9, 10
"""Columns of the two cases, from 1."""
PRICES: tuple[tuple[str, str, float, float | None], ...] = (
    ("feeds.ethane.purchase", "USc/lb", 6.55, 7.55),
    ("feeds.propane.purchase", "USc/lb", 9.73, None),
    ("feeds.gas_oil.purchase", "USc/lb", 12.5, None),
    ("feeds.natural_gasoline.purchase", "USc/lb", 10.14, None),
    ("outlets.ethylene_sale", "USc/lb", 17.75, None),
    ("outlets.propylene_sale", "USc/lb", 13.79, None),
    ("outlets.butadiene_sale", "USc/lb", 26.64, None),
    ("outlets.gasoline_sale", "USc/lb", 9.93, None),
    ("utilities.natural_gas", "USD/MMBtu LHV", 2.5, None),
)
LIMIT_HEADINGS = ("Item", "Unit", "Note", "Base", "Dear")
ETHANE, PROPANE, GAS_OIL, GASOLINE, ETHYLENE, PROPYLENE, BUTADIENE, PRODUCT, GAS = range(4, 13)
"""Rows of the prices, from 1."""
Edit = Callable[[Any], None]


def book(edit: Edit | None = None, limits: Sequence[Sequence[object]] = (), way: str | None = WAY) -> Any:
    """A good small workbook with an edit of its sheet of prices."""
    made = openpyxl.Workbook()
    sheet = made.active
    sheet.title = "Prices"
    sheet["A1"] = "Prices of the thermal cracker, two cases"
    for column, heading in enumerate(HEADINGS, 1):
        sheet.cell(3, column, heading)
    for row, (item, unit, base, dear) in enumerate(PRICES, ETHANE):
        for column, value in ((1, item), (2, unit), (3, "as the book"), (BASE, base), (DEAR, dear)):
            if value is not None:
                sheet.cell(row, column, value)
    if limits:
        other = made.create_sheet("Limits")
        for row, cells in enumerate((LIMIT_HEADINGS, *limits), 3):
            for column, value in enumerate(cells, 1):
                if value is not None:
                    other.cell(row, column, value)
    if way is not None:
        about = made.create_sheet("Read me")
        about["A3"], about["B3"] = "Scenario", way
    if edit:
        edit(sheet)
    return made


def saved(made: Any) -> bytes:
    """The bytes of a workbook, the same every time."""
    made.properties.created = made.properties.modified = datetime.datetime(*FIXED)
    memory = io.BytesIO()
    made.save(memory)
    return repacked(memory.getvalue())


def repacked(
    content: bytes,
    change: Callable[[str, bytes], bytes] | None = None,
    more: Mapping[str, bytes] | None = None,
    without: str = "",
) -> bytes:
    """A zip file again, every part with one date, some changed, some added."""
    memory = io.BytesIO()
    with zipfile.ZipFile(io.BytesIO(content)) as old, zipfile.ZipFile(memory, "w", zipfile.ZIP_DEFLATED) as new:
        parts = {name: old.read(name) for name in old.namelist()} | dict(more or {})
        parts = {name: part for name, part in parts.items() if not (without and name.endswith(without))}
        for name, part in parts.items():
            if name == "docProps/core.xml":
                start, end = part.find(b"<dcterms:modified"), part.find(b"</dcterms:modified>")
                part = part[:start] + part[end + len(b"</dcterms:modified>") :] if start >= 0 else part
            new.writestr(zipfile.ZipInfo(name, FIXED), change(name, part) if change else part, zipfile.ZIP_DEFLATED)
    return memory.getvalue()


def put(*cells: tuple[int, int, object], formats: Mapping[tuple[int, int], str] | None = None) -> Edit:
    """An edit that writes cells by row and column."""

    def edit(sheet: Any) -> None:
        for row, column, value in cells:
            sheet.cell(row, column).value = value
        for (row, column), number_format in (formats or {}).items():
            sheet.cell(row, column).number_format = number_format

    return edit


def both(*edits: Edit) -> Edit:
    """One edit after the other."""

    def edit(sheet: Any) -> None:
        for one in edits:
            one(sheet)

    return edit


def in_sheet(part: Callable[[bytes], bytes]) -> bytes:
    """The good workbook with the text of its first sheet changed."""
    return repacked(saved(book()), lambda name, text: part(text) if name.endswith("sheet1.xml") else text)


def flipped() -> bytes:
    """The good workbook with one byte of its first sheet turned round: its check sum is wrong."""
    content = bytearray(saved(book()))
    at = content.find(b"xl/worksheets/sheet1.xml") + 120
    content[at] ^= 0xFF
    return bytes(content)


def old_container(*streams: str) -> bytes:
    """The beginning of an old container file with the names of its streams, as a program would find them."""
    return (
        b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1" + b"\0" * 504 + b"".join(name.encode("utf-16-le") for name in streams) + b"\0" * 512
    )


def unpacks_to_much() -> bytes:
    """A small file with a part of 200 MB of nothing."""
    memory = io.BytesIO()
    with zipfile.ZipFile(memory, "w") as archive:
        info = zipfile.ZipInfo("xl/worksheets/sheet1.xml", FIXED)
        info.compress_type = zipfile.ZIP_BZIP2
        with archive.open(info, "w", force_zip64=True) as part:
            for _ in range(200):
                part.write(b" " * 1024 * 1024)
    return memory.getvalue()


def zipped(**parts: bytes) -> bytes:
    """A zip file that is no workbook; `__` in names stands for `/`, the first `_` after that for a point."""
    memory = io.BytesIO()
    with zipfile.ZipFile(memory, "w", zipfile.ZIP_DEFLATED) as archive:
        for name, part in parts.items():
            archive.writestr(zipfile.ZipInfo(name.replace("__", "/").replace("_", "."), FIXED), part)
    return memory.getvalue()


CSV = "item,unit,basis,source,date,Base\nfeeds.ethane.purchase,USc/lb,,,,6.55\n"
BOMB = (
    b'<?xml version="1.0"?><!DOCTYPE worksheet [<!ENTITY a "aaaaaaaaaa"><!ENTITY b "&a;&a;&a;&a;&a;&a;&a;&a;&a;&a;">]>'
    b'<worksheet xmlns="http://schemas.openxmlformats.org/spreadsheetml/2006/main"><sheetData/></worksheet>'
)
MERGE = both(
    lambda sheet: sheet.merge_cells("I5:J5"), lambda sheet: sheet.merge_cells("A1:J1"), lambda sheet: sheet.merge_cells("A6:A7")
)


def hide(sheet: Any) -> None:
    """A hidden row and a hidden case."""
    sheet.row_dimensions[PROPANE].hidden = True
    sheet.column_dimensions[get_column_letter(DEAR)].hidden = True


def renamed(title: str) -> Any:
    """The good workbook with another name on its sheet of prices."""
    made = book()
    made["Prices"].title = title
    return made


NEEDS_REASON = [
    ("recovery_units.cracker.factor", "fraction", None, 1, 0.9),
    ("recovery_units.ethylene.factor", "%", "slow exchanger", 100, 95),
]
DAMAGED_FILES: dict[str, Callable[[], bytes]] = {
    "empty_file": lambda: b"",
    "text_renamed": lambda: b"Prices of ethane: 41 cents a gallon.\n",
    "csv_renamed": lambda: CSV.encode(),
    "web_page_renamed": lambda: b"<html><table><tr><td>Item</td></tr></table></html>",
    "picture_renamed": lambda: b"\x89PNG\r\n\x1a\n\0\0\0\rIHDR\0\0",
    "cut_off": lambda: saved(book())[:3000],
    "one_byte_wrong": flipped,
    "a_zip_of_something_else": lambda: zipped(letter_txt=b"Dear all"),
    "open_document": lambda: zipped(mimetype=b"application/vnd.oasis.opendocument.spreadsheet", content_xml=b"<x/>"),
    "binary_workbook": lambda: zipped(xl__workbook_bin=b"\0"),
    "protected_by_password": lambda: old_container("EncryptionInfo", "EncryptedPackage"),
    "old_container_of_a_letter": lambda: old_container("WordDocument"),
    "unpacks_to_too_much": unpacks_to_much,
    "too_many_cells": lambda: in_sheet(
        lambda text: text.replace(b"</sheetData>", b"<row>" + b"<c/>" * 510_000 + b"</row></sheetData>")
    ),
    "document_type": lambda: in_sheet(lambda text: BOMB),
    "not_well_formed": lambda: in_sheet(lambda text: text[: len(text) // 2]),
    "value_far_away": lambda: saved(book(put((1_048_576, 16_384, 1)))),
}
DAMAGED_BOOKS: dict[str, Callable[[], Any]] = {
    "no_sheet_prices": lambda: renamed("Price"),
    "no_sheet_like_prices": lambda: renamed("Tabelle1"),
    "no_headings": lambda: book(put((3, 1, "Artikel"))),
    "no_case": lambda: book(lambda sheet: sheet.delete_cols(BASE, 2)),
    "column_without_heading": lambda: book(put((3, DEAR, None))),
    "headings_twice": lambda: book(put((3, DEAR, " BASE "), (3, 11, "Unit"), (4, 11, "USD/t"))),
    "heading_is_a_date": lambda: book(put((3, DEAR, datetime.datetime(2031, 3, 1)))),
    "heading_misspelt": lambda: book(put((3, 6, "Sourse"), (4, 6, "trade press"), (5, 6, "trade press, page 3"))),
    "column_of_remarks": lambda: book(put((3, 11, "Remarks for Monday"), (4, 11, "ask again"))),
    "merged_cells": lambda: book(MERGE),
    "numbers_as_people_write_them": lambda: book(
        put(
            (4, BASE, "6,55"),
            (5, BASE, "1,009.73"),
            (6, BASE, "12.5 USc/lb"),
            (7, BASE, "n/a"),
            (8, DEAR, "17.75 %"),
            (9, DEAR, "13 790"),
        )
    ),
    "no_finite_number": lambda: book(put((4, BASE, "1e999"))),
    "percentage_of_money": lambda: book(put((4, DEAR, 0.07), formats={(4, DEAR): "0.0%"})),
    "dates_truths_and_errors": lambda: book(
        put(
            (4, DEAR, datetime.datetime(2031, 5, 6)),
            (5, DEAR, True),
            (6, DEAR, "#REF!"),
            (7, DEAR, datetime.time(6, 55)),
            (8, 2, "#N/A"),
        )
    ),
    "formula_without_a_value": lambda: book(put((4, DEAR, "=I4*1.1"), (5, 2, '="USc/lb"'))),
    "units_of_no_list": lambda: book(put((4, 2, "USD/ton"), (5, 2, "USD/MT"), (6, 2, "cents/lb"), (7, 2, "usd/t"))),
    "units_of_another_kind": lambda: book(
        put((4, 2, "USD/MWh"), (5, 2, "USD/gal"), (6, 2, "EUR/t"), (7, 2, "kt"), (12, 2, "USD/MMBtu"))
    ),
    "no_unit": lambda: book(put((4, 2, None))),
    "items_unknown": lambda: book(put((4, 1, "feeds.ethan.purchase"), (5, 1, "propane"), (6, 1, "Feeds.gas_oil.purchase"))),
    "item_twice": lambda: book(put((5, 1, "feeds.ethane.purchase"))),
    "no_item": lambda: book(put((5, 1, None))),
    "blank_in_the_first_case": lambda: book(put((4, BASE, None), (5, BASE, " "))),
    "month_unknown": lambda: book(put((3, 11, "Month"), (4, 11, "2031-03"), (5, 11, datetime.datetime(2031, 3, 1)))),
    "weights_missing": lambda: book(put((14, 1, "weight"), (14, BASE, 0.5))),
    "weights_below_zero": lambda: book(put((14, 1, "weight"), (14, 2, "fraction"), (14, BASE, 1), (14, DEAR, -0.5))),
    "weights_of_nothing": lambda: book(put((14, 1, "weight"), (14, BASE, 0), (14, DEAR, 0))),
    "weights_as_words": lambda: book(put((14, 1, "weight"), (14, 2, "fraction"), (14, BASE, "likely"), (14, DEAR, True))),
    "leans_on_nothing": lambda: book(put((11, 2, "%"), (11, 4, "outlets.propylen_sale"), (11, BASE, 72))),
    "leans_on_itself": lambda: book(
        put(
            (11, 2, "%"),
            (11, 4, "outlets.butadiene_sale"),
            (11, BASE, 72),
            (10, 2, "%"),
            (10, 4, "outlets.gasoline_sale"),
            (10, BASE, 140),
        )
    ),
    "leans_on_another_kind": lambda: book(put((11, 2, "fraction"), (11, 4, "utilities.natural_gas"), (11, BASE, 3))),
    "times_as_a_word": lambda: book(put((11, 4, "outlets.propylene_sale"), (11, 5, "half"), (11, BASE, 2))),
    "scenario_not_there": lambda: book(way="../../scenarios/no_such_month.yaml"),
    "scenario_not_named": lambda: book(way=None),
    "limits_of_an_unknown_case": lambda: book(
        put((3, DEAR, "Dearer feed")), limits=[("feeds.ethane.purchase.max", "kt", None, "unlimited", 20)]
    ),
    "limits_of_nothing": lambda: book(
        limits=[
            ("feeds.ethan.purchase.max", "kt", None, None, 20),
            ("outlets.ethylene_sale.max.today", "kt", None, None, 20),
            ("oulets.ethylene_sale.max", "kt", None, None, 20),
            ("feeds.ethane.max", "USD/t", None, None, 20),
            ("feeds.propane.purchase.max", None, None, None, 20),
            ("feeds.gas_oil.purchase.max", "kt", None, None, "unlimitted"),
            ("feeds.natural_gasoline.purchase.max", "Kt", None, None, 3),
        ]
    ),
    "limits_of_unknown_words": lambda: book(
        limits=[
            ("outlets.ethylene_sale.mim", "kt", None, 20, None),
            ("feeds.ethane.purchase.max", "h", None, 20, None),
            ("feeds.propane.purchase.min", "kt", None, "unlimited", None),
            ("recovery_units.crackers.factor", "fraction", "slow", 0.9, None),
            ("furnace_groups.furnaces.outage_hours", "h", "inspection", 3, None),
        ]
    ),
    "limits_below_zero": lambda: book(limits=[("feeds.ethane.purchase.max", "kt", None, -3, None)]),
    "minimum_above_maximum": lambda: book(
        limits=[("outlets.ethylene_sale.min", "kt", None, 3, None), ("outlets.ethylene_sale.max", "kt", None, 2, None)]
    ),
    "factor_without_a_reason": lambda: book(limits=NEEDS_REASON),
    "hidden_and_wrong": lambda: book(both(hide, put((4, DEAR, "7,55")))),
    "several_at_once": lambda: book(
        both(
            MERGE,
            put(
                (3, 11, datetime.datetime(2031, 3, 1)),
                (4, 11, 6),
                (4, BASE, "6,55"),
                (6, 2, "USD/ton"),
                (8, 1, "outlets.ethylen_sale"),
            ),
            put((9, BASE, None), (10, DEAR, "#DIV/0!"), (4, 12, 5), (14, 1, "weight"), (14, BASE, 1)),
        ),
        limits=[("outlets.ethylene_sale.max", "t", None, 3, "many"), ("stocks.ethane.max", "kt", None, 3, None)],
    ),
    "one_row_only": lambda: book(lambda sheet: (sheet.delete_rows(PROPANE, 8), put((4, 2, "USD/ton"))(sheet))),
}


def odd_book() -> Any:
    """A good workbook as people leave it: texts for numbers, blanks of all kinds, percentages, remarks, hidden parts."""

    def edit(sheet: Any) -> None:
        sheet.insert_rows(1, 2)  # headings now in row 5
        sheet.merge_cells("A3:J3")
        put(
            (5, 1, " ITEM\n"),
            (5, 2, "\u00a0Unit "),
            (5, 4, "relative_to"),
            (5, BASE, 2031),
            (6, 1, " feeds.ethane.purchase\u00a0"),
            (6, 2, "USc/lb "),
            (6, BASE, "  6.55 "),
            (6, DEAR, "\u00a07.550\n"),
            (7, DEAR, " "),
            (9, 7, datetime.datetime(2031, 2, 5)),
            (13, 2, "%"),
            (13, 4, "outlets.propylene_sale"),
            (13, BASE, 0.72),
            (15, 1, "weight"),
            (15, 2, "fraction"),
            (15, BASE, 0.75),
            (15, DEAR, "0.25"),
            (20, 1, "checked by two people"),
            formats={(13, BASE): "0.0%", (15, BASE): "0%"},
        )(sheet)
        sheet.cell(6, BASE).comment = Comment("from the trade press", "someone")
        sheet.row_dimensions[8].hidden = True
        sheet.column_dimensions["C"].hidden = True

    limits = [
        (" feeds.ethane.purchase.max ", "klb", None, "Unlimited", "40"),
        ("recovery_units.cracker.factor", "%", "slow exchanger", 1, 0.95),
        ("outlets.propylene_sale.min", "kt", None, None, None),
    ]
    made = book(edit, limits)
    other = made["Limits"]
    other["D3"], other["E3"] = "2031 ", "DEAR"
    other["D5"].number_format = other["E5"].number_format = "0%"
    return made


def moved_book() -> Any:
    """Columns in another order, a blank column and blank rows between, and a case without a word of its own."""

    def edit(sheet: Any) -> None:
        rows = [[sheet.cell(row, column).value for column in (DEAR, BASE, 2, 1)] for row in range(3, 13)]
        sheet.delete_rows(1, 20)
        for at, (dear, base, unit, item) in enumerate(rows):
            row = 5 + 2 * at
            for column, value in ((2, base), (3, dear), (5, unit), (8, item)):
                sheet.cell(row, column, value)
        sheet.cell(5, 10, "As base")

    return book(edit)


def linked() -> bytes:
    """A good workbook that is linked to another file."""
    return repacked(saved(book()), more={"xl/externalLinks/externalLink1.xml": b"<externalLink/>"})


GOOD_BOOKS: dict[str, Callable[[], bytes]] = {
    "odd": lambda: saved(odd_book()),
    "moved": lambda: saved(moved_book()),
    "linked": linked,
    "size_that_is_not_so": lambda: in_sheet(
        lambda text: text.replace(b'<dimension ref="A1:J12"', b'<dimension ref="A1:XFD1048576"')
    ),
}


def through_office(source: Path, ending: str, folder: Path) -> Path:
    """A workbook as LibreOffice saves it."""
    with tempfile.TemporaryDirectory() as profile:
        command = ["soffice", f"-env:UserInstallation=file://{profile}", "--headless", "--convert-to", ending]
        subprocess.run([*command, "--outdir", str(folder), str(source)], check=True, capture_output=True, timeout=300)
    return folder / f"{source.stem}.{ending}"


def make_office() -> None:
    """The files that only LibreOffice can make."""
    with tempfile.TemporaryDirectory() as folder:
        there = Path(folder)
        for name in ("odd", "moved"):
            again = through_office(GOOD / f"{name}.xlsx", "xlsx", there)
            (GOOD / f"{name}_saved_by_office.xlsx").write_bytes(repacked(again.read_bytes()))
        small = there / "small.xlsx"
        small.write_bytes(saved(book()))
        (HERE / "old_workbook.xlsx").write_bytes(through_office(small, "xls", there).read_bytes())
        open_document = repacked(through_office(small, "ods", there).read_bytes(), without=".png")
        (HERE / "open_document_of_office.xlsx").write_bytes(open_document)


def made() -> dict[Path, bytes]:
    """Every file that is made without another program."""
    damaged = {name: make() for name, make in DAMAGED_FILES.items()} | {
        name: saved(make()) for name, make in DAMAGED_BOOKS.items()
    }
    return {HERE / f"{name}.xlsx": content for name, content in damaged.items()} | {
        GOOD / f"{name}.xlsx": make() for name, make in GOOD_BOOKS.items()
    }


def message(path: Path) -> str:
    """What is said of a workbook, from the top folder of the repository."""
    from olefinlp import read_cases
    from olefinlp.inputs.findings import InputError

    os.chdir(ROOT)
    try:
        read_cases(path.relative_to(ROOT))
    except InputError as error:
        return f"{error}\n"
    return "nothing is wrong\n"


if __name__ == "__main__":
    for file, content in made().items():
        file.write_bytes(content)
    if "office" in sys.argv:
        make_office()
    if "messages" in sys.argv:
        for file in sorted(HERE.glob("*.xlsx")):
            file.with_suffix(".txt").write_text(message(file), encoding="utf-8")
