"""The bridge between two plans as sheets: live effects of prices, a waterfall, what is bought and sold differently.

Every effect is a formula of a quantity and two price cells, every margin a sum; the solved margins
stand as values in a block of their own, and the residual compares the two.
"""

from __future__ import annotations

import itertools
import math
import os
import textwrap
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from olefinlp.answers.answer import Answer
from olefinlp.answers.bridge import (
    AGREES,
    GAIN,
    LIMITS,
    NEW,
    OLD,
    OTHER,
    PRICE,
    RESIDUAL,
    Bridge,
    BridgeAnswer,
    BridgeStep,
    changes_table,
    decimals,
    effects_table,
    note,
    sentences,
)
from olefinlp.outputs.files import write_bytes
from olefinlp.outputs.text import names as plain
from olefinlp.outputs.workbook_book import MAY, Book, cell, one_line, put, put_formula
from olefinlp.outputs.workbook_charts import FONT, GRID
from olefinlp.outputs.workbook_tables import Grid, grid_of, write_table

BRIDGE, EFFECTS, CHANGES = "Bridge", "Price effects", "What changed"
LONGEST_NAME = 31
CHANGE = "Filled cells may be changed: that prices this same plan again, it does not plan again; the check on the bridge tells"
READING = (
    "The table and the chart follow the filled cells of the price effects; words and solved margins are those of the two plans."
)
LINE_LENGTH = 165
STEP, EFFECT, MARGIN = 0, 1, 2
"""Columns of the steps."""

CHART_COLUMN, CHART_WIDTH, ROW_PIXELS, FEWEST_ROWS = 3, 760, 20, 22
WIDTHS = ((0, 42.0), (1, 14.0), (2, 14.0))
HELPERS = ("From", "To", "Base", "Margin", "Rise", "Fall", "Rise below zero", "Fall below zero")
"""Numbers that the chart stands on: bars are stacked on an unseen base, above and below zero."""

BASE, TOTAL, RISE, FALL, RISE_BELOW, FALL_BELOW = range(3, 9)
"""Columns of the chart's numbers."""

COLOURS = {TOTAL: "#12344D", RISE: "#C4DCEA", FALL: "#D98A6A", RISE_BELOW: "#C4DCEA", FALL_BELOW: "#D98A6A"}
"""Dark, light and between: told apart in grey too."""

UNNAMED = [0, 4, 5]
"""Series that the legend leaves out: the base, and the parts below zero, which have the colours of those above."""

THINNEST = 0.05
"""Bars below this share of the span carry no number: it would hide them, and stands in the table."""

ROOM = 0.1
"""What is left free below the lowest bar, as a share of the span, where the axis does not start at zero."""


def write_bridge(source: Bridge | Answer, path: str | os.PathLike[str]) -> Path:
    """Write a bridge, or the answer of `bridge`, as a workbook, whole or not at all.

    Raises `OutputError` when the file cannot be written, `ValueError` for an answer that is no bridge.
    """
    return write_bytes(path, bridge_bytes(source))


def bridge_bytes(source: Bridge | Answer) -> bytes:
    """The whole file in memory; the same bridge gives the same bytes."""
    bridge = source.bridge if isinstance(source, BridgeAnswer) else source
    if not isinstance(bridge, Bridge):
        raise ValueError("this answer is no margin bridge")
    book = Book(bridge.second.scenario)
    book.title = one_line(bridge.title)
    write_bridge_sheets(book, bridge)
    return book.to_bytes()


def bridge_sheet_names(prefix: str = "") -> tuple[str, str, str]:
    """Names of the sheets in order. Raises `ValueError` for a prefix that makes one too long.

    >>> bridge_sheet_names("B ")
    ('B Bridge', 'B Price effects', 'B What changed')
    """
    names = (f"{prefix}{BRIDGE}", f"{prefix}{EFFECTS}", f"{prefix}{CHANGES}")
    if max(map(len, names)) > LONGEST_NAME:
        raise ValueError(f"`{prefix}` is too long to begin the name of a sheet, which holds {LONGEST_NAME} letters")
    return names


def write_bridge_sheets(
    book: Book, bridge: Bridge, prefix: str = "", sheets: Mapping[str, Any] | None = None
) -> tuple[str, str, str]:
    """Add the three sheets of a bridge to a workbook; gives their names.

    `sheets` holds sheets that are there already, by name, where their order was settled before.
    """
    names = bridge_sheet_names(prefix)
    made = sheets or {name: book.sheet(name) for name in names}
    grid = grid_of(effects_table(bridge), names[1])
    _Page(book, made[names[0]], names[0], bridge, grid).write()
    _write_effects(book, made[names[1]], bridge, grid)
    _write_changes(book, made[names[2]], bridge, names[2])
    return names


def _write_effects(book: Book, sheet: Any, bridge: Bridge, grid: Grid) -> None:
    """Effect = quantity × change of the price, the prices being cells to change."""
    rows = range(grid.rows)
    formulas = [f"={_own(grid, n, 'quantity')}*({_own(grid, n, 'after')}-{_own(grid, n, 'before')})" for n in rows]
    marked = [True] * grid.rows
    table = effects_table(bridge)
    write_table(book, sheet, table, formulas={"effect": formulas}, inputs={"before": marked, "after": marked}, remark=CHANGE)
    sheet.protect("", MAY)


def _write_changes(book: Book, sheet: Any, bridge: Bridge, name: str) -> None:
    """Decisions of both plans, the change a formula."""
    table = changes_table(bridge)
    grid = grid_of(table, name)
    formulas = [f"={_own(grid, n, 'after')}-{_own(grid, n, 'before')}" for n in range(grid.rows)]
    write_table(book, sheet, table, formulas={"change": formulas}, frozen=3)


def _own(grid: Grid, number: int, key: str) -> str:
    """A cell of the same row, relative, so that formulas of a column read alike."""
    return grid.at(number, key).replace("$", "")


@dataclass(frozen=True)
class Bar:
    """One bar of the waterfall: what it stands on, and its parts above and below zero."""

    base: float
    total: float
    rise: float
    fall: float
    rise_below: float
    fall_below: float


def bar(start: float | None, end: float) -> Bar:
    """The bar from one level to another; a margin, which has no start, stands on zero.

    >>> bar(3.0, 5.0)
    Bar(base=3.0, total=0.0, rise=2.0, fall=0.0, rise_below=0.0, fall_below=0.0)
    >>> bar(1.0, -2.0)
    Bar(base=0.0, total=0.0, rise=0.0, fall=1.0, rise_below=0.0, fall_below=-2.0)
    """
    if start is None:
        return Bar(0.0, end, 0.0, 0.0, 0.0, 0.0)
    base = (start if abs(start) < abs(end) else end) if start * end > 0 else 0.0
    above, below = max(end, 0.0) - max(start, 0.0), min(end, 0.0) - min(start, 0.0)
    rises = end >= start
    return Bar(
        base=base,
        total=0.0,
        rise=above if rises else 0.0,
        fall=0.0 if rises else 0.0 - above,
        rise_below=0.0 - below if rises else 0.0,
        fall_below=0.0 if rises else below,
    )


def axis_ends(levels: Sequence[float]) -> tuple[float | None, float | None]:
    """Where the axis starts and ends, each None where the program may choose.

    It starts below the lowest level, not at zero, where the steps are small beside the margins.

    >>> axis_ends([26808.7, 30554.7, 30135.5]), axis_ends([-2.0, 3.0]), axis_ends([-905.0, -980.0])
    ((26000.0, None), (None, None), (None, -890.0))
    """
    low, high = min(levels), max(levels)
    span = high - low
    if span <= 0:
        return None, None
    unit = 10.0 ** math.floor(math.log10(span))
    unit /= 5 if span < 2 * unit else 2 if span < 5 * unit else 1
    if low > span:
        return math.floor((low - ROOM * span) / unit) * unit or None, None
    if -high > span:
        return None, math.ceil((high + ROOM * span) / unit) * unit or None
    return None, None


class _Page:
    """The first sheet: message, sentences, steps, solved margins, the chart and its numbers."""

    def __init__(self, book: Book, sheet: Any, name: str, bridge: Bridge, effects: Grid) -> None:
        self.book, self.sheet, self.name, self.bridge, self.effects = book, sheet, name, bridge, effects
        self.steps = bridge.steps()
        self.bars = self.steps[:-1]
        self.places = decimals(max(abs(bridge.old), abs(bridge.new)))
        self.money = f"#,##0.{'0' * self.places}"
        self.texts = [part for text in (*sentences(bridge), note(bridge)) for part in textwrap.wrap(text, LINE_LENGTH)]
        self.header = len(self.texts) + 3
        self.first = self.header + 1
        self.solved_title = self.first + len(self.steps) + 1
        self.solved = {key: self.solved_title + 1 + n for n, (key, _, _) in enumerate(self._solved())}
        self.chart_title = max(self.solved_title + len(self.solved) + 2, self.header + FEWEST_ROWS)

    def write(self) -> None:
        """Everything, top to bottom."""
        self.sheet.hide_gridlines(2)
        put(self.sheet, 0, 0, _upper(self.bridge.message), self.book.style("title"))
        self.sheet.set_row(0, 24)
        for row, text in enumerate(self.texts, 1):
            put(self.sheet, row, 0, text)
        put(self.sheet, len(self.texts) + 1, 0, READING, self.book.style("note"))
        self._write_steps()
        self._write_solved()
        self._write_numbers()
        self._place_chart()
        for column, width in WIDTHS:
            self.sheet.set_column(column, column, width)
        self.sheet.set_column(CHART_COLUMN, FALL_BELOW, 11)
        self.sheet.freeze_panes(self.first, 1)
        self.sheet.set_h_pagebreaks([self.chart_title])
        self.sheet.protect("", MAY)

    def _at(self, row: int, column: int) -> str:
        """A cell of this sheet, relative."""
        return cell(row, column).replace("$", "")

    def _solved(self) -> list[tuple[str, str, float]]:
        """Margins that were solved, and the plan that stays at the new prices from the cost vector; key, words, value."""
        bridge, (first, second) = self.bridge, self.bridge.names
        rows = [("old", f"best margin of {first}", bridge.old)]
        middle = f"best margin, prices of {first}, limits of {second}"
        stays = f"plan of {first} at the prices of {second}"
        if bridge.limits_first and not bridge.same_limits:
            rows.append(("middle", middle, bridge.middle))
            rows.append(("repriced", f"that plan at the prices of {second}", bridge.repriced))
        else:
            rows.append(("repriced", stays, bridge.repriced))
        if not bridge.limits_first and not bridge.same_limits:
            rows.append(("middle", f"best margin, prices of {second}, limits of {first}", bridge.middle))
        rows.append(("new", f"best margin of {second}", bridge.new))
        return [*rows, ("within", "agrees within, a millionth of the money moved", AGREES * bridge.moved)]

    def _margin(self, key: str) -> str:
        return cell(self.solved[key], EFFECT)

    def _write_steps(self) -> None:
        money = f"k{self.bridge.currency}"
        for column, text in enumerate(("Step", f"Effect, {money}", f"Margin after it, {money}")):
            put(self.sheet, self.header, column, text, self.book.style("header", *(["right"] if column else [])))
        self.sheet.set_row(self.header, 30)
        for row, step in enumerate(self.steps, self.first):
            self._write_step(row, step)

    def _write_step(self, row: int, step: BridgeStep) -> None:
        total = ["sum"] if step.kind in (OLD, NEW) else []
        style = self.book.style(self.money, *total)
        put(self.sheet, row, STEP, step.words, self.book.style(*total))
        if total:
            self.sheet.write_blank(row, EFFECT, None, style)
        above = self._at(row - 1, MARGIN)
        if step.kind == OLD:
            put_formula(self.sheet, row, MARGIN, f"={self._margin('old')}", self.bridge.old, style)
        elif step.kind == NEW:
            put_formula(self.sheet, row, MARGIN, f"={above}", step.margin or 0.0, style)
        elif step.kind == RESIDUAL:
            self._write_residual(row, above, style)
        else:
            put_formula(self.sheet, row, EFFECT, self._effect(row, step), step.effect or 0.0, style)
            put_formula(self.sheet, row, MARGIN, f"={above}+{self._at(row, EFFECT)}", step.margin or 0.0, style)

    def _effect(self, row: int, step: BridgeStep) -> str:
        """Formula of the effect of a step."""
        bridge, effects = self.bridge, self.effects
        if step.kind == PRICE:
            return f"=SUMPRODUCT(({effects.span('item')}={self._at(row, STEP)})*{effects.span('effect')})"
        if step.kind == OTHER:
            named = [at for at, one in enumerate(self.steps, self.first) if one.kind == PRICE]
            less = f"-SUM({self._at(named[0], EFFECT)}:{self._at(named[-1], EFFECT)})" if named else ""
            return f"=SUM({effects.span('effect')}){less}"
        if step.kind == GAIN:
            best = "new" if bridge.limits_first or bridge.same_limits else "middle"
            return f"={self._margin(best)}-{self._margin('repriced')}"
        assert step.kind == LIMITS
        ends = ("middle", "old") if bridge.limits_first else ("new", "middle")
        return f"={self._margin(ends[0])}-{self._margin(ends[1])}"

    def _write_residual(self, row: int, above: str, style: Any) -> None:
        """What the steps miss of the solved margin, and whether that is rounding."""
        residual = round(self.bridge.residual, 6) + 0.0
        put_formula(self.sheet, row, EFFECT, f"=ROUND({self._margin('new')}-{above},6)+0", residual, style)
        own = self._at(row, EFFECT)
        text = f'=IF(ABS({own})<={self._margin("within")},"agrees","DOES NOT AGREE")'
        put_formula(self.sheet, row, MARGIN, text, "agrees", self.book.style("bold", "right"))
        alarm = {"type": "cell", "criteria": "==", "value": '"DOES NOT AGREE"', "format": self.book.style("alarm")}
        self.sheet.conditional_format(row, MARGIN, row, MARGIN, alarm)

    def _write_solved(self) -> None:
        put(self.sheet, self.solved_title, STEP, f"Solved margins, k{self.bridge.currency}", self.book.style("block"))
        for key, words, value in self._solved():
            form = "0.000000" if key == "within" else self.money
            put(self.sheet, self.solved[key], STEP, words)
            put(self.sheet, self.solved[key], EFFECT, value, self.book.style(form))

    def _write_numbers(self) -> None:
        """The chart's numbers, formulas of the steps."""
        put(self.sheet, self.chart_title, STEP, f"Numbers of the chart, k{self.bridge.currency}", self.book.style("block"))
        for column, text in enumerate(("Step", *HELPERS)):
            put(self.sheet, self.chart_title + 1, column, text, self.book.style("header", *(["right"] if column else [])))
        self.sheet.set_row(self.chart_title + 1, 30)
        style = self.book.style(self.money)
        start: float | None = None
        for number, step in enumerate(self.bars):
            row, end = self.chart_title + 2 + number, step.margin or 0.0
            own = bar(None if step.kind in (OLD, NEW) else start, end)
            put(self.sheet, row, STEP, _label(step, self.bridge))
            formulas = self._number_formulas(row, self.first + number, step)
            values = [start or 0.0, end, own.base, own.total, own.rise, own.fall, own.rise_below, own.fall_below]
            values[0] = 0.0 if step.kind in (OLD, NEW) else values[0]
            for column, (formula, value) in enumerate(zip(formulas, values, strict=True), 1):
                if formula:
                    put_formula(self.sheet, row, column, formula, value, style)
            start = end

    def _number_formulas(self, row: int, step_row: int, step: BridgeStep) -> list[str]:
        start, end = self._at(row, 1), self._at(row, 2)
        to = f"={self._at(step_row, MARGIN)}"
        if step.kind in (OLD, NEW):
            return ["", to, "", f"={end}", "", "", "", ""]
        above = f"MAX({end},0)-MAX({start},0)"
        below = f"MIN({end},0)-MIN({start},0)"
        return [
            f"={self._at(step_row - 1, MARGIN)}",
            to,
            f"=IF({start}*{end}>0,IF(ABS({start})<ABS({end}),{start},{end}),0)",
            "",
            f"=IF({end}>={start},{above},0)",
            f"=IF({end}>={start},0,-({above}))",
            f"=IF({end}>={start},-({below}),0)",
            f"=IF({end}>={start},0,{below})",
        ]

    def _place_chart(self) -> None:
        chart = self.book.workbook.add_chart({"type": "column", "subtype": "stacked"})
        for column in (BASE, *COLOURS):
            chart.add_series(self._series(column))
        labels = {"num_font": FONT | {"rotation": -45}, "interval_unit": 1, "label_position": "low", "major_tick_mark": "none"}
        chart.set_x_axis(labels | {"line": {"color": GRID}})
        chart.set_y_axis(self._value_axis())
        chart.set_title(
            {"name": _upper(self.bridge.headline), "name_font": {"name": "Arial", "size": 11, "bold": True}, "overlay": False}
        )
        chart.set_legend({"position": "bottom", "font": FONT, "delete_series": UNNAMED})
        chart.set_chartarea({"border": {"color": GRID}})
        chart.set_size({"width": CHART_WIDTH, "height": (self.chart_title - self.header) * ROW_PIXELS - 12})
        options = {"x_offset": 14, "y_offset": 2, "object_position": 2, "description": self.bridge.message}
        self.sheet.insert_chart(self.header, CHART_COLUMN, chart, options)

    def _value_axis(self) -> dict[str, Any]:
        low, high = axis_ends([step.margin or 0.0 for step in self.bars])
        words = f"k{self.bridge.currency}"
        if low is not None:
            words += f"; the axis starts at {low:,g}, not at zero"
        if high is not None:
            words += f"; the axis ends at {high:,g}, not at zero"
        axis: dict[str, Any] = {"name": words, "name_font": FONT | {"bold": False}, "num_font": FONT, "line": {"none": True}}
        axis |= {"num_format": "#,##0" if self.places == 1 else self.money}
        axis |= {"major_gridlines": {"visible": True, "line": {"color": GRID}}}
        return axis | {key: value for key, value in (("min", low), ("max", high)) if value is not None}

    def _series(self, column: int) -> dict[str, Any]:
        top, last = self.chart_title + 2, self.chart_title + 1 + len(self.bars)
        series: dict[str, Any] = {
            "name": [self.name, self.chart_title + 1, column],
            "categories": [self.name, top, STEP, last, STEP],
            "values": [self.name, top, column, last, column],
            "gap": 40,
        }
        if column == BASE:
            return series | {"fill": {"none": True}, "border": {"none": True}}
        series |= {"fill": {"color": COLOURS[column]}, "border": {"none": True}}
        return series | {"data_labels": self._labels(column)}

    def _labels(self, column: int) -> dict[str, Any]:
        """Effects on the bars; none where a bar crosses zero, its two parts being no effects, or is too thin for one."""
        plain_form = self.money[:-2] if self.places == 1 else self.money[:-1]
        sign = "" if column == TOTAL else "+" if column in (RISE, RISE_BELOW) else "−"
        form = f"{plain_form};-{plain_form};" if column == TOTAL else f'"{sign}"{plain_form};"{sign}"{plain_form};'
        levels = [step.margin or 0.0 for step in self.bars]
        thin = THINNEST * (max(levels) - min(levels))
        pairs = [(levels[0], levels[0]), *itertools.pairwise(levels)]
        bare = [start * end < 0 or abs(end - start) < thin for start, end in pairs]
        colour = "#FFFFFF" if column == TOTAL else "#1A1A1A"
        labels: dict[str, Any] = {"value": True, "num_format": form, "font": FONT | {"color": colour}}
        if column != TOTAL:
            labels["custom"] = [{"delete": True} if none else None for none in bare]
        return labels


def _label(step: BridgeStep, bridge: Bridge) -> str:
    """A short name below a bar."""
    if step.kind in (OLD, NEW):
        return bridge.names[0] if step.kind == OLD else bridge.names[1]
    return plain(step.words.partition(".")[2].replace(".", " ")) if step.kind == PRICE else step.words


def _upper(text: str) -> str:
    """A heading begins with a capital, whatever a plan is called."""
    return text[:1].upper() + text[1:]
