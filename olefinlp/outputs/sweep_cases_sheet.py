"""The sheet with a row a case: what its margin is, what was given, what was read out."""

from __future__ import annotations

import math
import textwrap
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from olefinlp.answers.sweep_figures import (
    bought_from,
    flexibility,
    is_held,
    margin_changes,
    or_none,
    planned,
    reading_column,
    reading_of,
    today_margin,
    varied_unit,
)
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.outputs.sweep_page import cell_format, difference_format, relative
from olefinlp.outputs.workbook_book import Book, put_formula
from olefinlp.outputs.workbook_tables import FILTER_ARROW, LINE_HEIGHT, Grid, cell_range, grid_of, width_of, write_table

if TYPE_CHECKING:
    from olefinlp.answers.sweep import Sweep

CASES = "Cases"
MOST_ROWS = 20_000
MOST_CELLS = 600_000
"""More cells than these make a workbook that nobody can open with ease."""
WIDEST_VARIED = 20
PAGE_COLUMNS = 12
"""Columns on a printed page."""
PLAN = "plan"


@dataclass(frozen=True)
class CasesSheet:
    """Where the cases stand, for formulas elsewhere; `grid` is None where there are too many cases for a sheet."""

    table: Table
    grid: Grid | None

    def span(self, key: str) -> str | None:
        """The cells of a column, seen from another sheet; None where it is not there."""
        return self.grid.span(key) if self.grid and key in self.grid.columns else None

    def at(self, case: int, key: str) -> str | None:
        """The cell of a case (from 0), seen from another sheet; None where it is not there."""
        return self.grid.on(case, key) if self.grid and key in self.grid.columns else None


def cases_sheet(sweep: Sweep, readings: Sequence[str] = ()) -> CasesSheet:
    """The table of all cases, those `readings` before others where there is no room for all."""
    fits = len(sweep) <= MOST_ROWS
    table = _table(sweep, readings) if fits else Table("cases", CASES, (Column("what", "Cases"),), [], _too_many(sweep))
    return CasesSheet(table, grid_of(table, CASES) if fits else None)


def _too_many(sweep: Sweep) -> str:
    return (
        f"{len(sweep):,} cases are more than the {MOST_ROWS:,} that this sheet holds: all of them, with every digit, are in the "
        "part files of the sweep's folder, to be read with `read_sweep`"
    )


def _table(sweep: Sweep, readings: Sequence[str]) -> Table:
    held, good, labels = is_held(sweep), planned(sweep), sweep.cases.labels
    money = f"k{sweep.currency}"
    columns = [
        Column("case", "Case", kind="count"),
        *([Column("label", "Name")] if labels else []),
        Column("margin", "Margin", money, "money"),
        Column("change", "Change from today", money, "money"),
        *(
            [Column("held", "Today's plan held", money, "money"), Column("gain", "Planning again earns", money, "money")]
            if held
            else []
        ),
        *_varied_columns(sweep),
        Column("outcome", "Outcome"),
    ]
    shown, left_out = _readings_shown(sweep, readings, len(columns))
    columns[-1:-1] = [reading_column(sweep, name) for name in shown]
    arrays: dict[str, Any] = {"margin": sweep.margin, "change": margin_changes(sweep)}
    if held:
        arrays |= {"held": sweep.held, "gain": flexibility(sweep)}
    arrays = {key: np.where(good, values, np.nan) for key, values in arrays.items()}
    arrays |= {f"varied {at}": sweep.cases.values[:, at] for at in range(len(sweep.cases.varied))}
    arrays |= {name: np.where(good, reading_of(sweep, name), np.nan) for name in shown}
    rows: list[Record] = [
        {key: or_none(values[case]) for key, values in arrays.items()}
        | {"case": case + 1, "outcome": PLAN if good[case] else sweep.reason(case) or "the margin is not a number"}
        | ({"label": labels[case]} if labels else {})
        for case in range(len(sweep))
    ]
    return Table("cases", CASES, tuple(columns), rows, _note(left_out))


def _note(left_out: int) -> str:
    words = "A blank value of a varied number means as today. Readings that are zero in every case are left out"
    return words + (f", and {left_out} more for want of room: they are in the part files" if left_out else "")


def _varied_columns(sweep: Sweep) -> list[Column]:
    """Columns of the varied numbers; short values are shown as written, those of draws to two decimals."""
    found = []
    for at, varied in enumerate(sweep.cases.varied):
        unit = "% of today" if sweep.cases.percent[at] else varied_unit(sweep, at)
        kind = "number" if cell_format("number", sweep.cases.values[:, at].tolist()) == "General" else "price"
        found.append(Column(f"varied {at}", varied.name, unit, kind))
    return found


def _readings_shown(sweep: Sweep, first: Sequence[str], others: int) -> tuple[list[str], int]:
    """Readings that say something in some case, as many as there is room for; and how many more there are."""
    good, least = planned(sweep), bought_from(sweep) * 1e-6
    said = [n for n in sweep.read_out.names if np.nanmax(np.abs(reading_of(sweep, n)[good]), initial=0.0) > least]
    said = [*first, *(name for name in said if name not in first)]
    room = max(MOST_CELLS // max(len(sweep), 1) - others, len(first))
    return said[:room], max(len(said) - room, 0)


def write_cases(book: Book, sheet: Any, sweep: Sweep, cases: CasesSheet, today: str) -> None:
    """All cases; differences are formulas. `today` is the cell of today's margin."""
    write_table(book, sheet, cases.table, frozen=2 if sweep.cases.labels else 1)
    grid = cases.grid
    if grid is None:
        return
    _narrow(sheet, cases.table, grid)
    sheet.fit_to_pages(math.ceil(len(grid.columns) / PAGE_COLUMNS), 0)
    sheet.repeat_columns(0, 1 if sweep.cases.labels else 0)
    style = book.style(difference_format(today_margin(sweep)), "top")
    pairs = [("change", today), ("gain", "")] if "gain" in grid.columns else [("change", today)]
    for key, other in pairs:
        for number, row in enumerate(cases.table.rows):
            if row[key] is not None:
                less = other or relative(grid.at(number, "held"))
                formula = f"=ROUND({relative(grid.at(number, 'margin'))}-{less},6)"
                put_formula(sheet, grid.header + 1 + number, grid.columns.index(key), formula, row[key], style)
    failed = {"type": "cell", "criteria": "!=", "value": f'"{PLAN}"', "format": book.style("binds")}
    sheet.conditional_format(relative(cell_range(grid, "outcome")), failed)


def _narrow(sheet: Any, table: Table, grid: Grid) -> None:
    """A long path above a column of numbers is broken: the column need not be as wide."""
    lines = 1
    for at, column in enumerate(table.columns):
        width = width_of(column, [row[column.key] for row in table.rows])
        if column.key.startswith("varied ") and width > WIDEST_VARIED:
            sheet.set_column(at, at, WIDEST_VARIED)
            width = WIDEST_VARIED
        lines = max(lines, len(textwrap.wrap(column.heading, max(int(width) - FILTER_ARROW, 4))))
    sheet.set_row(grid.header, LINE_HEIGHT * lines + 3)
