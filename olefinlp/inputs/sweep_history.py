"""Past prices by date, for draws of a sweep: which changes there were from one row to the next."""

from __future__ import annotations

import datetime
import os
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from olefinlp.inputs.findings import Findings, Place, near_name
from olefinlp.inputs.prices import item_name
from olefinlp.inputs.sweep_cases import Values
from olefinlp.inputs.sweep_numbers import NUMBER_TEXT, Number, Where, path_and_month, plain_number
from olefinlp.inputs.tables import read_table
from olefinlp.inputs.yaml_files import Path_

DATE = "date"
_AT: Path_ = ("draws", "history")


@dataclass(frozen=True)
class History:
    """Changes from row to row: `ratios` has a row a change and a column a number, later price over earlier one."""

    ratios: Values
    first: str
    last: str
    source: str


@dataclass(frozen=True)
class _Rows:
    """A table of past prices: dates, and cells by column, each with its place."""

    source: str
    place: Place
    dates: Sequence[tuple[str, Place]]
    columns: Mapping[str, Sequence[tuple[object, Place]]]


def read_history(written: object, numbers: Sequence[Number], where: Where, findings: Findings) -> History | None:
    """Past changes of all numbers given, in their order; None with findings.

    `written` is a `DataFrame` or the path of a csv file with a column `date` (`2030-05` or `2030-05-31`, in the
    order of time) and one for each number, headed by its path; other columns are not looked at. A price may be
    in any unit, since only ratios are taken. Blank cells are refused: a row is resampled whole.
    """
    rows = _rows(written, where(_AT), findings)
    if rows is None:
        return None
    before = len(findings.errors)
    _check_dates(rows, findings)
    columns = [_prices(rows, number, findings) for number in numbers]
    if len(findings.errors) > before:
        return None
    prices = np.array(columns, dtype=float).T
    return History(prices[1:] / prices[:-1], rows.dates[0][0], rows.dates[-1][0], rows.source)


def _rows(written: object, place: Place, findings: Findings) -> _Rows | None:
    if isinstance(written, str | os.PathLike):
        table = read_table(written, findings, required=(DATE,), others=True)
        if table is None:
            return None
        names = [name for name in table.columns if name != DATE]
        columns: dict[str, Sequence[tuple[object, Place]]] = {n: [(r.cells[n], r.place(n)) for r in table] for n in names}
        return _Rows(table.file, Place(table.file, 1), [(r.cells[DATE], r.place(DATE)) for r in table], columns)
    if not (hasattr(written, "columns") and hasattr(written, "index")):
        findings.error(place, "history", "is no table of past prices or path of a csv file")
        return None
    frame: Any = written
    frame = frame.astype(object).where(frame.notna(), None)
    dates = frame[DATE] if DATE in frame.columns else frame.index
    cells = {
        str(name): [(value, Place(place.file, number, str(name))) for number, value in enumerate(frame[name], 1)]
        for name in frame.columns
        if name != DATE
    }
    return _Rows("", place, [(_date_text(date), Place(place.file, number, DATE)) for number, date in enumerate(dates, 1)], cells)


def _date_text(date: object) -> str:
    return date.isoformat()[:10] if isinstance(date, datetime.date) else str(date)


def _check_dates(rows: _Rows, findings: Findings) -> None:
    """Real dates in the order of time, of at least two changes."""
    before = ""
    for text, place in rows.dates:
        if not _is_date(text):
            findings.error(place, "", f"`{text}` is not a date", "write `2030-05` or `2030-05-31`")
        elif text <= before:
            findings.error(place, "", f"`{text}` does not come after `{before}`", "rows go in the order of time, each date once")
        before = max(before, text)
    if len(rows.dates) < 3:
        findings.error(rows.place, "history", f"has {len(rows.dates)} rows; changes from row to row need three at least")


def _is_date(text: str) -> bool:
    if not re.fullmatch(r"\d{4}-\d{2}(-\d{2})?", text, re.ASCII):
        return False
    try:
        datetime.date.fromisoformat(text if len(text) == 10 else f"{text}-01")
    except ValueError:
        return False
    return True


def _prices(rows: _Rows, number: Number, findings: Findings) -> list[float]:
    """Past prices of one number; 1 where there is a finding."""
    name = next((name for name in rows.columns if _means(name, number)), None)
    if name is None:
        hint = near_name(number.varied.path, rows.columns)
        text = f"the column `{number.varied.path}` is missing: it has no spread of its own, so its past prices are needed"
        findings.error(rows.place, "history", text, hint)
        return []
    return [_price(value, place, findings) for value, place in rows.columns[name]]


def _means(heading: str, number: Number) -> bool:
    parts = path_and_month(re.sub(r"\s*\[[^\[\]]*\]$", "", heading))
    return parts is not None and item_name(parts[0].split(".")) == number.varied.path


def _price(value: object, place: Place, findings: Findings) -> float:
    text = value.strip() if isinstance(value, str) else ""
    if value is None or (isinstance(value, str) and not text):
        findings.error(place, "", "is blank: rows of the history are drawn whole", "take the row away, or fill it")
        return 1.0
    price = plain_number(float(text) if NUMBER_TEXT.fullmatch(text) else value)
    if price is None:
        findings.error(place, "", f"`{value}` is not a number", "a point for decimals, no thousands mark, no unit in the cell")
    elif price <= 0:
        findings.error(place, "", f"{price:g} is not above zero: it has no relative change")
    return price if price and price > 0 else 1.0
