"""Native charts from ranges of a sheet, in colours that also read in grey."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from olefinlp.outputs.workbook_book import Book

DARK, LIGHT = (0x12, 0x34, 0x4D), (0xC4, 0xDC, 0xEA)
"""Ends of the ramp of blues: the first month darkest."""

FULL = "#B4432E"
GRID = "#D0D7DB"
FONT = {"name": "Arial", "size": 8}


@dataclass(frozen=True)
class Ranges:
    """A block of numbers on a sheet: names in one column, a column a month, headings above; from 0."""

    sheet: str
    header: int
    first: int
    last: int
    names: int
    months: tuple[int, ...]

    def categories(self) -> list[Any]:
        """The names."""
        return [self.sheet, self.first, self.names, self.last, self.names]

    def values(self, column: int) -> list[Any]:
        """The numbers of a column."""
        return [self.sheet, self.first, column, self.last, column]

    def heading(self, column: int) -> list[Any]:
        """The heading of a column."""
        return [self.sheet, self.header, column]


def shades(count: int) -> list[str]:
    """Blues from dark to light, as far apart as they can be.

    >>> shades(1), shades(2)
    (['#12344D'], ['#12344D', '#C4DCEA'])
    """
    steps = [k / max(count - 1, 1) for k in range(count)]
    return ["#" + "".join(f"{round(a + (b - a) * step):02X}" for a, b in zip(DARK, LIGHT, strict=True)) for step in steps]


def quantity_chart(book: Book, ranges: Ranges, title: str, unit: str) -> Any:
    """Lying bars, one an item; the months of a plan stand end to end."""
    chart = book.workbook.add_chart({"type": "bar", "subtype": "stacked" if len(ranges.months) > 1 else "clustered"})
    for column, shade in zip(ranges.months, shades(len(ranges.months)), strict=True):
        chart.add_series(_series(ranges, column, shade) | {"gap": 45})
    plain = {"major_gridlines": {"visible": False}, "line": {"color": GRID}, "major_tick_mark": "none"}
    chart.set_y_axis({"reverse": True, "num_font": FONT, "interval_unit": 1, **plain})
    numbers = {"num_font": FONT, "num_format": "General", "major_gridlines": {"visible": True, "line": {"color": GRID}}}
    chart.set_x_axis(
        {"name": unit, "name_font": FONT | {"bold": False}, "min": 0, "label_position": "high", "line": {"none": True}, **numbers}
    )
    finish(chart, title, legend=len(ranges.months) > 1)
    return chart


def load_chart(book: Book, ranges: Ranges, title: str, limit: int) -> Any:
    """Standing bars of the load, a line at 100 %; `limit` is the column that holds the line."""
    chart = book.workbook.add_chart({"type": "column"})
    for column, shade in zip(ranges.months, shades(len(ranges.months)), strict=True):
        chart.add_series(_series(ranges, column, shade) | {"gap": 45})
    line = book.workbook.add_chart({"type": "line"})
    line.add_series(
        {
            "name": ranges.heading(limit),
            "categories": ranges.categories(),
            "values": ranges.values(limit),
            "line": {"color": FULL, "width": 2, "dash_type": "dash"},
        }
    )
    chart.combine(line)
    chart.set_x_axis(
        {"num_font": FONT | {"rotation": -45}, "interval_unit": 1, "line": {"color": GRID}, "major_tick_mark": "none"}
    )
    numbers = {"min": 0, "num_format": "0%", "num_font": FONT, "major_gridlines": {"visible": True, "line": {"color": GRID}}}
    chart.set_y_axis({"name": "% of maximum", "name_font": FONT | {"bold": False}, **numbers})
    finish(chart, title, legend=len(ranges.months) > 1)
    return chart


def _series(ranges: Ranges, column: int, shade: str) -> dict[str, Any]:
    return {
        "name": ranges.heading(column),
        "categories": ranges.categories(),
        "values": ranges.values(column),
        "fill": {"color": shade},
        "border": {"color": "#FFFFFF", "width": 0.25},
    }


def finish(chart: Any, title: str, legend: bool) -> None:
    """Title, legend and frame, the same for every chart."""
    chart.set_title({"name": title, "name_font": {"name": "Arial", "size": 11, "bold": True}, "overlay": False})
    chart.set_legend({"position": "bottom", "font": FONT} if legend else {"none": True})
    chart.set_chartarea({"border": {"color": GRID}})
    chart.show_blanks_as("gap")
