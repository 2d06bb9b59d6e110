"""A workbook as cells: opened with care, so that whatever a person hands over is read or refused in plain words."""

from __future__ import annotations

import io
import re
import warnings
import zipfile
import zlib
from collections.abc import Iterable
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from olefinlp.inputs.case_sheet_names import letters, plain
from olefinlp.inputs.findings import Findings, Place, near_name, shown

MAX_FILE, MAX_UNPACKED = 32 * 1024 * 1024, 128 * 1024 * 1024
MAX_CELLS, MAX_ROWS, MAX_COLUMNS = 500_000, 20_000, 2_000
"""A case sheet of a large site has some ten thousand cells; what is far larger is no case sheet."""

OLD_CONTAINER = b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1"
OPEN_DOCUMENT = b"application/vnd.oasis.opendocument"
SAVE_AS = "open it in a spreadsheet program and save it as .xlsx"
_CELL = re.compile(rb"<(?:\w+:)?c[\s/>]")


@dataclass(frozen=True, slots=True)
class SheetCell:
    """A cell that holds something: its value (of a formula: the one saved with it, None where there is none)."""

    value: Any
    formula: str = ""
    percent: bool = False
    is_error: bool = False

    @property
    def is_blank(self) -> bool:
        """Whether nothing can be seen in it."""
        return (self.value is None and not self.formula) or (isinstance(self.value, str) and not plain(self.value))


@dataclass(frozen=True)
class Sheet:
    """A sheet: cells by row and column from 1; ranges that are merged, as (text, first row, last row, first, last column)."""

    file: str
    name: str
    cells: dict[tuple[int, int], SheetCell] = field(default_factory=dict)
    merged: tuple[tuple[str, int, int, int, int], ...] = ()
    hidden_rows: frozenset[int] = frozenset()
    hidden_columns: frozenset[int] = frozenset()

    def place(self, row: int = 0, column: int = 0) -> Place:
        """Where a cell stands, or the sheet."""
        return Place(self.file, 0, f"{self.name}!{letters(column)}{row}" if row else self.name)


def read_sheets(path: Path, wanted: Iterable[str], findings: Findings) -> tuple[dict[str, Sheet], tuple[str, ...]] | None:
    """The wanted sheets of a workbook by name, and the names of all; None with a finding when it cannot be read.

    Names are found whatever their capitals and blanks.
    """
    place = Place(shown(path))
    content = _content(path, place, findings)
    if content is None or not _is_workbook(content, place, findings):
        return None
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            return _sheets(content, {_name_key(name): name for name in wanted}, place.file)
    except Exception:  # a damaged part can make the library stumble anywhere
        findings.error(place, "", "is a workbook with a damaged part", SAVE_AS)
        return None


def _name_key(name: str) -> str:
    return "".join(name.split()).casefold()


def _content(path: Path, place: Place, findings: Findings) -> bytes | None:
    try:
        if path.is_dir():
            findings.error(place, "", "is a folder, a workbook is needed here")
            return None
        if path.stat().st_size > MAX_FILE:
            findings.error(place, "", f"is larger than {MAX_FILE // 1024 // 1024} MB", "is it the right file?")
            return None
        content = path.read_bytes()
    except FileNotFoundError:
        beside = [entry.name for entry in path.parent.iterdir()] if path.parent.is_dir() else []
        hint = near_name(path.name, beside) if beside else "the folder is not there either"
        findings.error(place, "", "no such file", hint)
        return None
    except OSError as error:
        findings.error(place, "", f"cannot be read: {error.strerror or error}", "is it open in another program?")
        return None
    if not content:
        findings.error(place, "", "is empty")
        return None
    return content


def _is_workbook(content: bytes, place: Place, findings: Findings) -> bool:
    """Whether the bytes are a workbook of the kind that is read; a finding says what else they are."""
    if content.startswith(OLD_CONTAINER):
        if "EncryptedPackage".encode("utf-16-le") in content:
            findings.error(place, "", "is protected by a password", "open it, take the password away, and save it")
        elif any(name.encode("utf-16-le") in content for name in ("Workbook", "Book")):
            findings.error(place, "", "is a workbook of the old kind (.xls)", SAVE_AS)
        else:
            findings.error(place, "", "is not a workbook", SAVE_AS)
        return False
    if not content.startswith(b"PK"):
        text = b"\0" not in content[:4096] and _is_text(content)
        kind = "is a text file, not a workbook" if text else "is not a workbook"
        findings.error(place, "", kind, "a csv table of cases must end in .csv" if text else SAVE_AS)
        return False
    try:
        with zipfile.ZipFile(io.BytesIO(content)) as archive:
            return _is_sound(archive, place, findings)
    except (zipfile.BadZipFile, zlib.error, EOFError, OSError, ValueError):
        findings.error(place, "", "is a damaged workbook: it cannot be unpacked", "copy it again, or save it again")
    except (NotImplementedError, RuntimeError):
        findings.error(place, "", "is packed in a way that workbooks are not", SAVE_AS)
    return False


def _is_text(content: bytes) -> bool:
    for encoding in ("utf-8", "cp1252"):
        try:
            content[:4096].decode(encoding, errors="strict" if len(content) <= 4096 else "ignore")
        except UnicodeDecodeError:
            continue
        return True
    return False


def _is_sound(archive: zipfile.ZipFile, place: Place, findings: Findings) -> bool:
    """Every part can be unpacked, and all of them are of a size that a case sheet can have."""
    parts = {info.filename: info.file_size for info in archive.infolist()}
    if sum(parts.values()) > MAX_UNPACKED:
        findings.error(place, "", f"unpacks to more than {MAX_UNPACKED // 1024 // 1024} MB", "is it the right file?")
        return False
    if "mimetype" in parts and archive.read("mimetype").startswith(OPEN_DOCUMENT):
        findings.error(place, "", "is an OpenDocument file", SAVE_AS)
        return False
    if "xl/workbook.bin" in parts:
        findings.error(place, "", "is a binary workbook (.xlsb)", SAVE_AS)
        return False
    if "[Content_Types].xml" not in parts or not any(name.endswith("workbook.xml") for name in parts):
        findings.error(place, "", "is packed like a workbook, but holds none", SAVE_AS)
        return False
    cells = 0
    for name in parts:
        part = archive.read(name)
        if b"<!DOCTYPE" in part[:4096]:
            findings.error(place, "", f"its part {name} declares a document type, which workbooks do not", SAVE_AS)
            return False
        if "worksheets/" in name:
            cells += sum(1 for _ in _CELL.finditer(part))
    if cells > MAX_CELLS:
        findings.error(place, "", f"has more than {MAX_CELLS:,} cells", "is it the right file?")
        return False
    if any("externalLinks/" in name for name in parts):
        findings.warn(place, "", "is linked to other files: the values saved with it are read", "write the values themselves")
    return True


def _sheets(content: bytes, wanted: dict[str, str], file: str) -> tuple[dict[str, Sheet], tuple[str, ...]]:
    import openpyxl

    values = openpyxl.load_workbook(io.BytesIO(content), data_only=True, keep_links=False)
    written = openpyxl.load_workbook(io.BytesIO(content), keep_links=False)
    found: dict[str, Sheet] = {}
    for sheet in written.worksheets:
        name = wanted.get(_name_key(sheet.title))
        if name and name not in found:
            found[name] = _sheet(sheet, values[sheet.title], file)
    return found, tuple(sheet.title for sheet in written.worksheets)


def _sheet(written: Any, values: Any, file: str) -> Sheet:
    cells: dict[tuple[int, int], SheetCell] = {}
    for at, cell in written._cells.items():  # those that are in the file, not all up to the last one
        if cell.value is None:
            continue
        is_formula = cell.data_type == "f"
        value = values[cell.coordinate] if is_formula else cell
        formula = str(getattr(cell.value, "text", cell.value)) if is_formula else ""
        number_format = re.sub(r'"[^"]*"|\\.|\[[^\]]*\]', "", str(cell.number_format))
        nothing = value.value is None and value.data_type == "str"  # a formula whose result is an empty text
        cells[at] = SheetCell("" if nothing else value.value, formula, "%" in number_format, value.data_type == "e")
    merged = tuple((r.coord, r.min_row, r.max_row, r.min_col, r.max_col) for r in written.merged_cells.ranges)
    columns = {
        column
        for letter, dimension in written.column_dimensions.items()
        if dimension.hidden
        for column in range(dimension.min or _number(letter), min(dimension.max or _number(letter), MAX_COLUMNS) + 1)
    }
    rows = {row for row, dimension in written.row_dimensions.items() if dimension.hidden}
    return Sheet(file, written.title, cells, tuple(sorted(merged)), frozenset(rows), frozenset(columns))


def _number(column: str) -> int:
    from openpyxl.utils import column_index_from_string

    return int(column_index_from_string(column))
