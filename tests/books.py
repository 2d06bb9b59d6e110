"""Reading a workbook that was written: what its cells hold, and where."""

from __future__ import annotations

import io
from pathlib import Path
from typing import Any

import openpyxl


def book_of(content: bytes | Path, values: bool = False) -> Any:
    """A workbook; its cells give formulas, or with `values` their results."""
    return openpyxl.load_workbook(io.BytesIO(content) if isinstance(content, bytes) else content, data_only=values)


def formulas(book: Any) -> list[tuple[str, str]]:
    """Sheet and place of every formula."""
    return [(s.title, cell.coordinate) for s in book for row in s.iter_rows() for cell in row if cell.data_type == "f"]


def row_of(sheet: Any, text: str, column: int = 1) -> int:
    """The first row whose cell in a column says so."""
    return next(row for row in range(1, sheet.max_row + 1) if sheet.cell(row, column).value == text)
