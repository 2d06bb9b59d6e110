"""One answer on its own: printed, as csv, or as a workbook with its chart."""

from __future__ import annotations

import io
import math
import os
import textwrap
from pathlib import Path
from typing import Any

from olefinlp.answers.answer import Answer, Chart
from olefinlp.answers.tables import Column, Table
from olefinlp.outputs.files import write_bytes, write_text
from olefinlp.outputs.records import table_csv
from olefinlp.outputs.text import INDENT, aligned, number, significant

MOST_ROWS = 60
FORMATS = {"quantity": "#,##0.00", "price": "#,##0.00", "money": "#,##0.0", "share": "0.0%", "hours": "#,##0", "count": "0"}
FORMATS["number"] = SMALL = "#,##0.0000"
WIDE, LINE = 90, 170
"""Widest column of words, and longest line above a table, in characters; longer texts go on in the next line."""
INK, MARK = "#1F4E5F", "#B4581A"
EDGE = 1e-6
"""Share of a unit of an axis within which an end stands on it."""
ROW_HEIGHT, CHART_WIDTH = 15, 700
"""Height of one line of words in points, width of a chart in pixels."""


def answer_text(answer: Answer) -> str:
    """An answer as people read it on a terminal: sentences, then the main table."""
    lines = [answer.title, *(INDENT + sentence for sentence in answer.sentences), ""]
    columns = [c for c in answer.table.columns if any(row[c.key] not in (None, "") for row in answer.table.rows)]
    rows = [[c.heading for c in columns]]
    rows += [[_cell(c, row[c.key]) for c in columns] for row in answer.table.rows[:MOST_ROWS]]
    lines += aligned(rows, left=[at for at, column in enumerate(columns) if column.kind == "text"])
    if len(answer.table.rows) > MOST_ROWS:
        lines.append(f"{INDENT}and {len(answer.table.rows) - MOST_ROWS} rows more: write them with --csv or --output")
    return "\n".join([*lines, *([f"{INDENT}{answer.note}"] if answer.note else [])])


def _cell(column: Column, value: Any) -> str:
    if value is None or isinstance(value, str):
        return value or ""
    if column.kind == "share":
        return f"{100 * value:.1f} %"
    if column.kind == "count":
        return number(value, 0)
    return number(value, 1) if column.kind == "money" else significant(value)


def write_answer_csv(answer: Answer, path: str | os.PathLike[str]) -> Path:
    """Write the main table of an answer as csv, whole or not at all. Raises `OutputError`."""
    return write_text(path, table_csv(answer.table))


def write_answer(answer: Answer, path: str | os.PathLike[str]) -> Path:
    """Write an answer as a workbook with its chart, whole or not at all. Raises `OutputError`."""
    return write_bytes(path, answer_bytes(answer))


def answer_bytes(answer: Answer) -> bytes:
    """The workbook of an answer; the same answer gives the same bytes."""
    import datetime

    import xlsxwriter

    memory = io.BytesIO()
    options = {"in_memory": True, "strings_to_formulas": False, "strings_to_numbers": False, "strings_to_urls": False}
    book = xlsxwriter.Workbook(memory, options)
    book.set_properties({"created": datetime.datetime(2000, 1, 1)})
    styles = {kind: book.add_format({"num_format": code, "valign": "top"}) for kind, code in FORMATS.items()}
    for position, table in enumerate(answer.tables):
        sheet = book.add_worksheet(table.title[:31].translate({ord(c): " " for c in r"[]:*?/\'"}))
        first = _write_words(book, sheet, answer) if position == 0 else 0
        write_plain_table(book, sheet, table, styles, first)
        if position == 0 and answer.chart:
            _write_charts(book, sheet, answer, (answer.chart, *answer.charts), first + len(table.rows) + 3)
    book.close()
    return memory.getvalue()


def _write_words(book: Any, sheet: Any, answer: Answer) -> int:
    """Title, sentences and note above the table; gives the row of its header."""
    sheet.write_string(0, 0, answer.title, book.add_format({"bold": True, "font_size": 13}))
    plain, quiet = book.add_format(), book.add_format({"italic": True, "font_color": "#555555"})
    said = [(line, plain) for sentence in answer.sentences for line in textwrap.wrap(sentence, LINE)]
    said += [(line, quiet) for line in textwrap.wrap(answer.note, LINE) or [""]]
    for row, (line, style) in enumerate(said, 1):
        sheet.write_string(row, 0, line, style)
    return len(said) + 2


def write_plain_table(book: Any, sheet: Any, table: Table, styles: dict[str, Any], first: int) -> None:
    """A table with one header row from row `first` on, frozen below it, printed on one page width."""
    head = book.add_format({"bold": True, "text_wrap": True, "bottom": 1, "valign": "top"})
    long = book.add_format({"text_wrap": True, "valign": "top"})
    for j, column in enumerate(table.columns):
        sheet.write_string(first, j, column.heading, head)
        width = max([len(str(row[column.key] or "")) for row in table.rows if isinstance(row[column.key], str)], default=0)
        sheet.set_column(j, j, min(max(width + 2, 14), WIDE))
        for i, row in enumerate(table.rows, first + 1):
            value = row[column.key]
            if isinstance(value, (int, float)):
                sheet.write_number(i, j, value + 0.0, styles.get(column.kind))
            elif value:
                sheet.write_string(i, j, value, long if len(value) > WIDE else None)
    shown = [column.key for column in table.columns]
    for i, row in enumerate(table.rows, first + 1):
        lines = max((len(textwrap.wrap(text, WIDE - 4)) for key in shown if isinstance(text := row[key], str)), default=1)
        if lines > 1:
            sheet.set_row(i, ROW_HEIGHT * lines)
    sheet.set_row(first, 32)
    sheet.freeze_panes(first + 1, 1)
    sheet.set_landscape()
    sheet.set_paper(9)
    sheet.fit_to_pages(1, 0)
    sheet.repeat_rows(first)
    sheet.set_footer("&LPlanning aid; not for operating limits&RPage &P of &N")


def _write_charts(book: Any, sheet: Any, answer: Answer, charts: tuple[Chart, ...], below: int) -> None:
    """Charts beside each other, over points on a sheet of their own."""
    data = book.add_worksheet("Chart points")
    for k, chart in enumerate(charts):
        picture = _chart(book, data, answer, chart, 3 * k)
        sheet.insert_chart(below, 0, picture, {"x_offset": k * (CHART_WIDTH + 20)})


def _chart(book: Any, data: Any, answer: Answer, chart: Chart, column: int) -> Any:
    """The curve over its points, which stand in two columns, with a mark at today's value."""
    points = _points(answer, chart)
    head = book.add_format({"bold": True, "bottom": 1})
    digits = book.add_format({"num_format": SMALL})
    data.set_column(column, column + 1, 24)
    for j, text in enumerate((chart.x_unit, chart.y_unit), column):
        data.write_string(0, j, text, head)
    top = max((y for _, y in points), default=1.0)
    bottom = min(0.0 if chart.kind == "steps" else top, *(y for _, y in points))
    for i, (x, y) in enumerate([*points, (chart.today, bottom), (chart.today, top)], 1):
        data.write_number(i, column, x, digits)
        data.write_number(i, column + 1, y, digits)
    last = len(points)
    picture = book.add_chart({"type": "scatter", "subtype": "straight"})
    picture.add_series(_series(chart.y_unit or "value", 1, last, column, {"color": INK, "width": 2.25}))
    picture.add_series(_series("today", last + 1, last + 2, column, {"color": MARK, "dash_type": "dash"}))
    picture.set_title({"name": chart.title, "name_font": {"size": 12}})
    ends = _ends([x for x, _ in points], chart.kind)
    picture.set_x_axis({"name": chart.x_unit, **ends, "major_gridlines": {"visible": False}})
    picture.set_y_axis({"name": chart.y_unit})
    picture.set_legend({"position": "bottom"})
    picture.set_size({"width": CHART_WIDTH, "height": 360})
    return picture


def _ends(places: list[float], kind: str) -> dict[str, float]:
    """Ends of the lower axis: those of steps as asked for, those of a line at round numbers outside.

    >>> _ends([40.24, 66.2], "line"), _ends([30.0, 230.0], "steps")
    ({'min': 40.0, 'max': 70.0, 'major_unit': 5.0}, {'min': 30.0, 'max': 230.0})
    """
    low, high = min(places), max(places)
    if kind == "steps" or not low < high:
        return {"min": low, "max": high}
    size = 10.0 ** math.floor(math.log10((high - low) / 4))
    unit = max(size * times for times in (1, 2, 5) if size * times <= (high - low) / 4)
    digits = max(0, 1 - math.floor(math.log10(unit)))
    first, last = math.floor(low / unit + EDGE) * unit, math.ceil(high / unit - EDGE) * unit
    return {"min": round(first, digits), "max": round(last, digits), "major_unit": round(unit, digits)}


def _series(name: str, first: int, last: int, column: int, line: dict[str, Any]) -> dict[str, Any]:
    return {
        "name": name,
        "categories": ["Chart points", first, column, last, column],
        "values": ["Chart points", first, column + 1, last, column + 1],
        "line": line,
    }


def _points(answer: Answer, chart: Chart) -> list[tuple[float, float]]:
    """Corners of the steps (both ends of each), or the points of the line."""
    rows = answer.table.rows
    if chart.kind == "steps":
        return [(float(row[x]), float(row[chart.y])) for row in rows for x in (chart.x, chart.x_end)]
    return [(float(row[chart.x]), float(row[chart.y])) for row in rows]
