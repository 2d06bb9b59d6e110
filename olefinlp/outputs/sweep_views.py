"""The sheet of a sweep's workbook with the chart that suits it: distribution, tornado, steps or heat map."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from olefinlp.answers.sweep_answers import DISTRIBUTION, STEPS, TORNADO, message, suits
from olefinlp.answers.sweep_distribution import BELOW_ZERO, chances_table, figures_table, histogram
from olefinlp.answers.sweep_figures import (
    NOTHING_MOVES,
    changing_readings,
    planned,
    reading_column,
    short_names,
    thinned,
    today_margin,
    today_of,
    value_words,
    varied_unit,
)
from olefinlp.answers.sweep_heat_map import HeatGrid, heat_grid, heat_table
from olefinlp.answers.sweep_steps import steps_order, steps_table
from olefinlp.answers.sweep_tornado import Bar, tornado_bars, tornado_table
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.outputs.bridge_workbook import axis_ends
from olefinlp.outputs.sweep_cases_sheet import CasesSheet
from olefinlp.outputs.sweep_page import NO_PLAN, ROW_PIXELS, Page, axis, axis_format, cell_format, difference_format, relative
from olefinlp.outputs.workbook_book import Book
from olefinlp.outputs.workbook_charts import FONT, GRID, finish, shades
from olefinlp.outputs.workbook_tables import Grid

if TYPE_CHECKING:
    from olefinlp.answers.sweep import Sweep

TITLES = {DISTRIBUTION: "Distribution", TORNADO: "Tornado", STEPS: "Steps"}
HEAT = "Heat map"
WIDTHS = {DISTRIBUTION: (30, 18), TORNADO: (50, 12), STEPS: (46, 15)}
MOST_BARS, MOST_STEPS, MOST_HEAT_ROWS, MOST_HEAT_COLUMNS = 25, 2000, 200, 40
CHART_WIDTH, CHART_ROWS = 590, 19
MARK = "#B4432E"
HEAT_COLOURS = {"min_color": "#FFFFFF", "mid_color": "#C4DCEA", "max_color": "#5E94B8"}
"""From light to dark, so that they read in grey, under black digits."""


@dataclass(frozen=True)
class View:
    """What every view needs: the sweep, its cases' cells, and the cells of today's margin and fixed cost."""

    book: Book
    sweep: Sweep
    cases: CasesSheet
    today: str
    fixed: str

    @property
    def difference(self) -> str:
        """The format of changes of the margin."""
        return difference_format(today_margin(self.sweep))

    @property
    def axis_format(self) -> str:
        """The format of axes of money."""
        return axis_format(abs(today_margin(self.sweep)))

    @property
    def money(self) -> str:
        """The unit of money."""
        return f"k{self.sweep.currency}"


def view_title(sweep: Sweep) -> str:
    """The name of the sheet."""
    return TITLES.get(suits(sweep), HEAT)


def write_view(view: View, sheet: Any, readings: Sequence[str] | None) -> None:
    """The view that suits the sweep."""
    which = suits(view.sweep)
    page = Page(view.book, sheet, view_title(view.sweep), WIDTHS.get(which, (46, 11)))
    page.head(message(view.sweep))
    if which == DISTRIBUTION:
        _distribution(view, page)
    elif which == TORNADO:
        _tornado(view, page)
    elif which == STEPS:
        _steps(view, page, changing_readings(view.sweep, readings))
    else:
        _heat_map(view, page, readings[0] if readings else None)


# ---------------------------------------------------------------------------------- distribution


def _distribution(view: View, page: Page) -> None:
    """Two charts, statistics, the steps of the histogram."""
    top = page.row + 1
    steps = _histogram_steps(view.sweep)
    page.row = top + CHART_ROWS if steps.rows else page.row
    page.table(figures_table(view.sweep), formulas=lambda grid: _figure_formulas(view, grid), formats=_gain_format(view))
    page.sheet.set_h_pagebreaks([page.row + 1])
    page.table(chances_table(view.sweep), formulas=lambda grid: _chance_formulas(view, grid))
    grid = page.table(steps, formulas=lambda grid: _histogram_formulas(view, grid))
    if steps.rows:
        _place(page, _bars_of_histogram(view, grid), top, 0)
        _place(page, _cumulative(view, grid, steps), top, 1)


def _gain_format(view: View) -> dict[str, str]:
    return {"flexibility": view.difference}


def _samples(view: View, grid: Grid) -> list[tuple[str, str]]:
    """Key of a column of the page, and the cells that it is worked out from; none where those are not there."""
    spans = {"replanned": view.cases.span("margin"), "held": view.cases.span("held"), "flexibility": view.cases.span("gain")}
    return [(key, span) for key, span in spans.items() if span and key in grid.columns]


def _figure_formulas(view: View, grid: Grid) -> dict[str, list[str | None]]:
    several = planned(view.sweep).sum() > 1
    if not planned(view.sweep).any():
        return {}
    return {
        key: [
            f"=AVERAGE({span})",
            f"=STDEV({span})" if several else None,
            f"=MIN({span})",
            *(f"=PERCENTILE({span},{share})" for share in ("0.1", "0.5", "0.9")),
            f"=MAX({span})",
        ]
        for key, span in _samples(view, grid)
    }


def _chance_formulas(view: View, grid: Grid) -> dict[str, list[str | None]]:
    if not planned(view.sweep).any():
        return {}
    rows = [row["event"] for row in chances_table(view.sweep).rows]
    levels: list[str | None] = [None if event == BELOW_ZERO else f"={view.fixed}" for event in rows]
    below = [relative(grid.at(number, "level")) for number in range(len(rows))]
    found: dict[str, list[str | None]] = {"level": levels}
    for key, span in _samples(view, grid):
        found[key] = [f'=COUNTIF({span},"<"&{level})/COUNT({span})' for level in below]
    return found


def _histogram_steps(sweep: Sweep) -> Table:
    """The histogram as a page holds it: a row an edge, the first with nothing below it."""
    table = histogram(sweep)
    names = [key for key in ("replanned", "held") if any(column.key == key for column in table.columns)]
    titles = {"replanned": "planned again", "held": "today's plan held"}
    large = max((abs(row["to"]) for row in table.rows), default=0.0) >= 10_000
    rows: list[Record] = []
    if table.rows:
        none = {key: 0 for name in names for key in (name, f"{name}_below")}
        rows.append({"label": "below", "edge": table.rows[0]["from"], **none})
    for row in table.rows:
        ends = [f"{row[key] / (1000 if large else 1):,.6g}" for key in ("from", "to")]
        sums = {f"{name}_below": row[f"{name}_up_to"] for name in names}
        rows.append({"label": " to ".join(ends), "edge": row["to"], **{name: row[name] for name in names}, **sums})
    columns = (
        Column("label", "Step", f"{'M' if large else 'k'}{sweep.currency}"),
        Column("edge", "Margin below", f"k{sweep.currency}", "money"),
        *(Column(name, f"Cases, {titles[name]}", kind="count") for name in names),
        *(Column(f"{name}_below", f"Share below, {titles[name]}", kind="share") for name in names),
    )
    return Table("histogram", "Margins in steps", columns, rows, table.note)


def _histogram_formulas(view: View, grid: Grid) -> dict[str, list[str | None]]:
    """Cases below an edge less those below the edge before."""
    found: dict[str, list[str | None]] = {}
    for key, span in _samples(view, grid):
        below = [f'COUNTIF({span},"<"&{relative(grid.at(number, "edge"))})' for number in range(grid.rows)]
        found[key] = [f"={one}-{below[at - 1]}" if at else f"={one}" for at, one in enumerate(below)]
        found[f"{key}_below"] = [f"={one}/COUNT({span})" for one in below]
    return found


def _bars_of_histogram(view: View, grid: Grid) -> Any:
    names = [key for key in ("replanned", "held") if key in grid.columns]
    chart = view.book.workbook.add_chart({"type": "column"})
    for key, shade in zip(names, shades(2), strict=False):
        series = {"name": ["planned again", "today's plan held"][names.index(key)], "categories": _cells(grid, "label", 1)}
        border = {"color": "#5E7C8C", "width": 0.5}
        chart.add_series(series | {"values": _cells(grid, key, 1), "fill": {"color": shade}, "border": border, "gap": 25})
    unit = f"M{view.sweep.currency}" if _in_millions(view.sweep) else view.money
    labels = {"name": f"margin before fixed cost, {unit}", "name_font": FONT | {"bold": False}, "label_position": "low"}
    chart.set_x_axis(labels | {"num_font": FONT | {"rotation": -45}, "line": {"color": GRID}, "major_tick_mark": "none"})
    chart.set_y_axis(axis("cases", "0", min=0))
    finish(chart, "How many cases earn what", legend=len(names) > 1)
    return chart


def _in_millions(sweep: Sweep) -> bool:
    columns = {column.key: column.unit for column in _histogram_steps(sweep).columns}
    return columns["label"].startswith("M")


def _cumulative(view: View, grid: Grid, steps: Table) -> Any:
    names = [key for key in ("replanned", "held") if key in grid.columns]
    chart = view.book.workbook.add_chart({"type": "scatter", "subtype": "straight"})
    lines: list[dict[str, Any]] = [
        {"color": shades(1)[0], "width": 2.25},
        {"color": MARK, "width": 1.75, "dash_type": "dash"},
    ]
    for key, line in zip(names, lines, strict=False):
        words = ["planned again", "today's plan held"][names.index(key)]
        values = _cells(grid, f"{key}_below")
        chart.add_series({"name": words, "categories": _cells(grid, "edge"), "values": values, "line": line})
    edges = [row["edge"] for row in steps.rows]
    chart.set_x_axis(axis(f"margin before fixed cost, {view.money}", view.axis_format, min=edges[0], max=edges[-1]))
    chart.set_y_axis(axis("share of cases that earn less", "0%", min=0, max=1))
    finish(chart, "Share of cases that earn less", legend=len(names) > 1)
    return chart


# ---------------------------------------------------------------------------------- tornado

INNER_LOW, INNER_HIGH, OUTER_LOW, OUTER_HIGH = "inner_low", "inner_high", "outer_low", "outer_high"


def _tornado(view: View, page: Page) -> None:
    """The chart, the table, the parts of the bars."""
    bars = tornado_bars(view.sweep)
    shown = bars[:MOST_BARS]
    top = page.row + 1
    high = max(12, len(shown) + 6)
    page.row = top + high
    page.sheet.set_h_pagebreaks([page.row + 1])
    table = _worded(tornado_table(view.sweep, bars))
    formats = dict.fromkeys(("change_low", "change_high", "swing"), view.difference)
    grid = page.table(table, formulas=lambda grid: _tornado_formulas(view, bars, grid), formats=formats)
    page.row += 1
    parts = _parts(view.sweep, shown)
    formats = dict.fromkeys((INNER_LOW, INNER_HIGH, OUTER_LOW, OUTER_HIGH), view.difference)
    below = page.table(parts, formulas=lambda place: _part_formulas(grid, place), formats=formats)
    _place(page, _tornado_chart(view, below, len(bars)), top, 0, 2 * CHART_WIDTH, high)


def _worded(table: Table) -> Table:
    """The table with words where an end was tried and has no plan."""
    rows = [dict(row) for row in table.rows]
    for row in rows:
        for end in ("low", "high"):
            if row[f"{end}_value"] is not None and row[f"margin_{end}"] is None:
                row[f"margin_{end}"] = NO_PLAN
    return Table(table.name, table.title, table.columns, rows, table.note)


def _tornado_formulas(view: View, bars: Sequence[Bar], grid: Grid) -> dict[str, list[str | None]]:
    """Margins are those of the cases, changes are from today, the swing is from the lowest to the highest."""
    found: dict[str, list[str | None]] = {key: [] for key in ("margin_low", "margin_high", "change_low", "change_high", "swing")}
    for number, bar in enumerate(bars):
        for end, case, change in (("low", bar.low_case, bar.low), ("high", bar.high_case, bar.high)):
            there = case is not None and np.isfinite(change)
            found[f"margin_{end}"].append(f"={at}" if there and (at := view.cases.at(case or 0, "margin")) else None)
            own = relative(grid.at(number, f"margin_{end}"))
            found[f"change_{end}"].append(f"=ROUND({own}-{view.today},6)" if there else None)
        ends = f"{relative(grid.at(number, 'change_low'))}:{relative(grid.at(number, 'change_high'))}"
        found["swing"].append(f"=MAX(0,{ends})-MIN(0,{ends})")
    return found


def _parts(sweep: Sweep, bars: Sequence[Bar]) -> Table:
    """Bars of the chart in parts that stand end to end, so that both ends are seen on whichever side of today they lie."""
    names, unit = short_names(sweep), f"k{sweep.currency}"
    rows: list[Record] = []
    for bar in bars:
        low, high = (float(np.nan_to_num(end)) for end in (bar.low, bar.high))
        inner, outer = _inner(low, high), (low - high if _outer(high, low) else 0.0, high - low if _outer(low, high) else 0.0)
        words = f"{names[bar.number]}, {_values(sweep, bar)}"
        rows.append({"bar": words} | dict(zip((INNER_LOW, INNER_HIGH), inner, strict=True)))
        rows[-1] |= dict(zip((OUTER_LOW, OUTER_HIGH), (value + 0.0 for value in outer), strict=True))
    columns = (
        Column("bar", "Numbers of the chart"),
        Column(INNER_LOW, "At the low value", unit, "money"),
        Column(INNER_HIGH, "At the high value", unit, "money"),
        Column(OUTER_LOW, "Low value, beyond the high one", unit, "money"),
        Column(OUTER_HIGH, "High value, beyond the low one", unit, "money"),
    )
    note = (
        "Changes of the margin; where both ends lie on the same side of today, the farther one begins where the nearer one ends."
    )
    return Table("parts", "Numbers of the chart", columns, rows, note)


def _outer(near: float, far: float) -> bool:
    """Whether an end lies beyond the other on the same side of today."""
    return near * far > 0 and abs(far) > abs(near)


def _inner(low: float, high: float) -> tuple[float, float]:
    return (0.0 if _outer(high, low) else low), (0.0 if low * high > 0 and not _outer(high, low) else high)


def _values(sweep: Sweep, bar: Bar) -> str:
    """The values at both ends, with their unit once."""
    unit, values = varied_unit(sweep, bar.number), sweep.cases.values[:, bar.number]
    ends = [value_words(float(values[case]), "") for case in (bar.low_case, bar.high_case) if case is not None]
    return f"{' to '.join(ends)} {unit}".rstrip()


def _part_formulas(grid: Grid, parts: Grid) -> dict[str, list[str | None]]:
    found: dict[str, list[str | None]] = {key: [] for key in (INNER_LOW, INNER_HIGH, OUTER_LOW, OUTER_HIGH)}
    for number in range(parts.rows):
        low, high = (relative(grid.at(number, key)) for key in ("change_low", "change_high"))
        same, farther = f"{low}*{high}>0", f"ABS({low})>ABS({high})"
        found[INNER_LOW].append(f"=IF(AND({same},{farther}),0,{low})")
        found[INNER_HIGH].append(f"=IF(AND({same},NOT({farther})),0,{high})")
        found[OUTER_LOW].append(f"=IF(AND({same},{farther}),{low}-{high},0)")
        found[OUTER_HIGH].append(f"=IF(AND({same},ABS({high})>ABS({low})),{high}-{low},0)")
    return found


def _tornado_chart(view: View, grid: Grid, count: int) -> Any:
    chart = view.book.workbook.add_chart({"type": "bar", "subtype": "stacked"})
    dark, light = shades(2)
    series = ((INNER_LOW, dark), (INNER_HIGH, light), (OUTER_LOW, dark), (OUTER_HIGH, light))
    for key, shade in series:
        name = "at the low value" if key in (INNER_LOW, OUTER_LOW) else "at the high value"
        border = {"color": "#5E7C8C", "width": 0.5}
        one = {"name": name, "categories": _cells(grid, "bar"), "values": _cells(grid, key), "gap": 40}
        chart.add_series(one | {"fill": {"color": shade}, "border": border})
    plain = {"major_gridlines": {"visible": False}, "line": {"color": "#404040"}, "major_tick_mark": "none"}
    chart.set_y_axis({"reverse": True, "num_font": FONT, "interval_unit": 1, "label_position": "low", **plain})
    chart.set_x_axis(axis(f"change of the margin from today's, {view.money}", view.axis_format, label_position="high"))
    shown = f", the {grid.rows} widest of {count}" if grid.rows < count else ""
    finish(chart, f"Change of the margin at the low and the high value of each number{shown}", legend=True)
    chart.set_legend({"position": "bottom", "font": FONT, "delete_series": [2, 3]})
    return chart


# ---------------------------------------------------------------------------------- steps


def _steps(view: View, page: Page, chosen: Sequence[str]) -> None:
    """Margin and readings along the number, the table below."""
    sweep = view.sweep
    order = steps_order(sweep)
    shown = [order[place] for place in thinned(len(order), MOST_STEPS)]
    if len(shown) < len(order):
        page.text(f"{len(shown):,} of {len(order):,} cases are shown, evenly spaced.", "note")
    top = page.row + 1
    page.row = top + CHART_ROWS
    page.sheet.set_h_pagebreaks([page.row + 1])
    table = steps_table(sweep, shown, chosen)
    grid = page.table(table, formulas=lambda grid: _step_formulas(view, shown, grid), formats={"change": view.difference})
    mark = page.table(_mark(sweep))
    if planned(sweep).any():
        _place(page, _margin_chart(view, grid, mark, table), top, 0)
        same = [name for name in chosen if reading_column(sweep, name).unit == reading_column(sweep, chosen[0]).unit]
        if same:
            _place(page, _reading_chart(view, grid, same), top, 1)


def _step_formulas(view: View, order: Sequence[int], grid: Grid) -> dict[str, list[str | None]]:
    """All numbers are those of the sheet of cases; the change is from today."""
    good = planned(view.sweep)
    found: dict[str, list[str | None]] = {}
    for key in grid.columns:
        if key not in ("value", "change"):
            found[key] = [f"={at}" if good[case] and (at := view.cases.at(case, key)) else None for case in order]
    margins = [relative(grid.at(number, "margin")) for number in range(grid.rows)]
    found["change"] = [f"=ROUND({own}-{view.today},6)" if good[c] else None for own, c in zip(margins, order, strict=True)]
    return found


def _mark(sweep: Sweep) -> Table:
    """Both ends of the line that marks today's value."""
    margins = [*sweep.margin[planned(sweep)], today_margin(sweep)]
    rows: list[Record] = [{"value": today_of(sweep, 0), "margin": float(margin)} for margin in (min(margins), max(margins))]
    unit = varied_unit(sweep, 0)
    columns = (Column("value", "Today's value", unit, "number"), Column("margin", "Margin", f"k{sweep.currency}", "money"))
    return Table("mark", "Line of the chart at today's value", columns, rows)


def _margin_chart(view: View, grid: Grid, mark: Grid, table: Table) -> Any:
    chart = view.book.workbook.add_chart({"type": "scatter", "subtype": "straight_with_markers"})
    dark = shades(1)[0]
    x = _cells(grid, "value")
    line = {"line": {"color": dark, "width": 2}, "marker": _dot(dark)}
    chart.add_series({"name": "planned again", "categories": x, "values": _cells(grid, "margin"), **line})
    if "held" in grid.columns:
        light = {"line": {"color": "#7FA6BD", "width": 1.5, "dash_type": "dash"}, "marker": {"type": "none"}}
        chart.add_series({"name": "today's plan held", "categories": x, "values": _cells(grid, "held"), **light})
    today = {"line": {"color": MARK, "width": 1.25, "dash_type": "square_dot"}, "marker": {"type": "none"}}
    chart.add_series({"name": "today", "categories": _cells(mark, "value"), "values": _cells(mark, "margin"), **today})
    levels = [row[key] for row in table.rows for key in ("margin", "held") if row.get(key) is not None]
    levels.append(today_margin(view.sweep))
    flat = max(levels) - min(levels) <= NOTHING_MOVES * abs(levels[-1])
    low, high = (None, None) if flat else axis_ends(levels)
    words = view.money + (f"; the axis starts at {low:,g}, not at zero" if low is not None else "")
    words += f"; the axis ends at {high:,g}, not at zero" if high is not None else ""
    ends: dict[str, Any] = {key: end for key, end in (("min", low), ("max", high)) if end is not None}
    chart.set_y_axis(axis(words, view.axis_format, **ends))
    _along(chart, view.sweep)
    finish(chart, f"Margin along {short_names(view.sweep)[0]}", legend=True)
    return chart


def _dot(colour: str) -> dict[str, Any]:
    return {"type": "circle", "size": 4, "fill": {"color": colour}, "border": {"color": colour}}


def _along(chart: Any, sweep: Sweep) -> None:
    """The axis of the number that varies."""
    values = [*sweep.cases.values[np.isfinite(sweep.cases.values[:, 0]), 0], today_of(sweep, 0)]
    low, high = axis_ends([float(value) for value in values])
    unit = "% of today" if sweep.cases.percent[0] else varied_unit(sweep, 0)
    name = f"{short_names(sweep)[0]}, {unit}".removesuffix(", ")
    ends: dict[str, Any] = {key: end for key, end in (("min", low), ("max", high)) if end is not None}
    chart.set_x_axis(axis(name, "General", **ends) | {"major_gridlines": {"visible": False}, "label_position": "low"})


DASHES = ("solid", "dash", "square_dot", "long_dash", "dash_dot", "long_dash_dot")


def _reading_chart(view: View, grid: Grid, chosen: Sequence[str]) -> Any:
    """Readings of one unit; lines differ in shade and in dashes."""
    chart = view.book.workbook.add_chart({"type": "scatter", "subtype": "straight_with_markers"})
    colours = (shades(1)[0], MARK, "#5E94B8", "#D98A6A", "#404040", "#9FB1BC")
    for at, name in enumerate(chosen):
        colour = colours[at % len(colours)]
        line = {"line": {"color": colour, "width": 1.75, "dash_type": DASHES[at % len(DASHES)]}, "marker": _dot(colour)}
        column = grid.columns.index(name)
        heading = [grid.sheet, grid.header, column]
        chart.add_series({"name": heading, "categories": _cells(grid, "value"), "values": _cells(grid, name), **line})
    first = reading_column(view.sweep, chosen[0])
    chart.set_y_axis(axis(first.unit or "share of the maximum", "0%" if first.kind == "share" else "General"))
    _along(chart, view.sweep)
    finish(chart, f"What changes along {short_names(view.sweep)[0]}", legend=True)
    return chart


# ---------------------------------------------------------------------------------- heat map


def _heat_map(view: View, page: Page, reading: str | None) -> None:
    """One table of colours, or two; with too many values, some of them evenly spaced."""
    sweep = view.sweep
    full = heat_grid(sweep)
    rows, columns = thinned(len(full.rows), MOST_HEAT_ROWS), thinned(len(full.columns), MOST_HEAT_COLUMNS)
    grid = HeatGrid(
        tuple(full.rows[at] for at in rows), tuple(full.columns[at] for at in columns), full.cases[np.ix_(rows, columns)]
    )
    names, units = [varied.name for varied in sweep.cases.varied], [varied_unit(sweep, at) for at in (0, 1)]
    page.text(f"Down: {names[0]}, {units[0]}. Across: {names[1]}, {units[1]}.".replace(", .", "."))
    page.text(f"{_today(sweep)} The darker a cell, the higher its number; an empty cell has no plan.", "note")
    if grid.cases.size < full.cases.size:
        page.text(f"{grid.cases.size:,} of {full.cases.size:,} cases are shown, evenly spaced.", "note")
    for name in (None, *([reading] if reading else [])):
        table = heat_table(sweep, grid, name)
        table = Table(table.name, table.title, table.columns, table.rows)
        key = name or "margin"
        form = {"value": "General"} | _heat_formats(table, key)
        place = page.table(table, formulas=lambda _, key=key: _heat_formulas(view, grid, key), formats=form)  # type: ignore[misc]
        _colour(page, place, table)


def _heat_formats(table: Table, key: str) -> dict[str, str]:
    """One format for the whole table, so that its columns read alike."""
    numbers = [value for row in table.rows for name, value in row.items() if name != "value"]
    kind = "money" if key == "margin" else table.columns[-1].kind
    return {column.key: cell_format(kind, numbers) for column in table.columns[1:]}


def _heat_formulas(view: View, grid: HeatGrid, key: str) -> dict[str, list[str | None]]:
    """Every number is that of its case."""
    good = planned(view.sweep)
    return {
        f"at {column + 1}": [f"={at}" if good[case] and (at := view.cases.at(int(case), key)) else None for case in line]
        for column, line in enumerate(grid.cases.T)
    }


def _today(sweep: Sweep) -> str:
    words = [f"{name} {value_words(today_of(sweep, at), varied_unit(sweep, at))}" for at, name in enumerate(short_names(sweep))]
    return f"Today: {' and '.join(words)}, margin {today_margin(sweep):,.1f} k{sweep.currency}."


def _colour(page: Page, place: Grid, table: Table) -> None:
    """Three colours over all numbers."""
    if not table.rows:
        return
    cells = relative(f"{place.at(0, place.columns[1])}:{place.at(place.rows - 1, place.columns[-1])}")
    page.sheet.conditional_format(cells, {"type": "3_color_scale", **HEAT_COLOURS})


# ---------------------------------------------------------------------------------- charts


def _cells(grid: Grid, key: str, first: int = 0) -> list[Any]:
    """A column of a table as charts want it."""
    column = grid.columns.index(key)
    return [grid.sheet, grid.header + 1 + first, column, grid.header + grid.rows, column]


def _place(page: Page, chart: Any, row: int, number: int, width: int = CHART_WIDTH, rows: int = CHART_ROWS) -> None:
    """A chart at the top, beside the one before it."""
    chart.set_size({"width": width, "height": rows * ROW_PIXELS - 10})
    page.sheet.insert_chart(row, 0, chart, {"x_offset": 4 + number * (width + 8), "y_offset": 2, "object_position": 2})
