"""The margin over two numbers: one row a value of the first, one column a value of the second."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from olefinlp.answers.answer import Answer
from olefinlp.answers.sweep_figures import (
    failure_sentences,
    failures,
    how_words,
    money_words,
    or_none,
    planned,
    reading_column,
    reading_of,
    short_names,
    today_margin,
    today_of,
    value_words,
    varied_unit,
)
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.inputs.sweep_cases import Values

if TYPE_CHECKING:
    from olefinlp.answers.sweep import Sweep


@dataclass(frozen=True)
class HeatGrid:
    """A full grid: values of the first number (rows) and of the second (columns), rising, and the case (from 0) of each."""

    rows: tuple[float, ...]
    columns: tuple[float, ...]
    cases: np.ndarray

    def of(self, values: Values) -> Values:
        """Numbers by case as a matrix, rows × columns."""
        matrix: Values = values[self.cases]
        return matrix


def heat_grid(sweep: Sweep) -> HeatGrid:
    """The grid of a sweep of two numbers. Raises `ValueError` where two do not vary, or some combination is missing or twice."""
    if len(sweep.cases.varied) != 2:
        raise ValueError(f"{_varies(len(sweep.cases.varied))}: a heat map is of two")
    values = sweep.cases.values
    if not np.isfinite(values).all():
        raise ValueError("some case leaves a number as today: a heat map needs a value of both numbers in every case")
    rows, columns = (tuple(np.unique(values[:, at]).tolist()) for at in (0, 1))
    if len(values) != len(rows) * len(columns) or len({tuple(row) for row in values.tolist()}) != len(values):
        raise ValueError("the cases are no full grid: a heat map needs every combination of both numbers once")
    order = np.lexsort((values[:, 1], values[:, 0]))
    return HeatGrid(rows, columns, order.reshape(len(rows), len(columns)))


def _varies(count: int) -> str:
    return "one number varies" if count == 1 else f"{count} numbers vary"


def heat_map(sweep: Sweep, reading: str | None = None) -> Answer:
    """The margin, and one reading if asked for, over a full grid of two numbers.

    Tables `heat_map` and `heat_map_reading`: a row a value of the first number (key `value`), a column a value of the
    second (keys `at 1`, `at 2`, …, in rising order). Margins in thousands of the currency; blank without a plan.
    Raises `ValueError` where the cases are no full grid of two numbers, or the reading is not there.

    >>> from olefinlp import read_scenario
    >>> from olefinlp.answers.sweep import sweep
    >>> march = read_scenario("scenarios/brackwater_2031_03.yaml")
    >>> two = {"feeds.full_range_naphtha.spot_cargo": [500, 560], "outlets.ethylene_spot": [30, 33, 36]}
    >>> found = heat_map(sweep(march, two))
    >>> len(found.table), len(found.table.columns), found.table.rows[0]["value"]
    (2, 4, 500.0)
    """
    grid = heat_grid(sweep)
    tables = [heat_table(sweep, grid)]
    if reading is not None:
        tables.append(heat_table(sweep, grid, reading))
    tables += [failures(sweep)] if not planned(sweep).all() else []
    first, second = (varied.name for varied in sweep.cases.varied)
    note = f"Rows: {first}. Columns: {second}."
    return Answer("heat_map", f"Margin over two numbers: {how_words(sweep)}", tuple(tables), tuple(_sentences(sweep)), note)


def heat_table(sweep: Sweep, grid: HeatGrid, reading: str | None = None) -> Table:
    """The margin, or a reading, over the grid."""
    values = sweep.margin if reading is None else reading_of(sweep, reading)
    matrix = grid.of(np.where(planned(sweep), values, np.nan))
    shown = None if reading is None else reading_column(sweep, reading)
    unit, kind, what = (f"k{sweep.currency}", "money", "Margin") if shown is None else (shown.unit, shown.kind, shown.title)
    keys = [f"at {number}" for number in range(1, len(grid.columns) + 1)]
    rows: list[Record] = [
        {"value": value, **{key: or_none(number) for key, number in zip(keys, line, strict=True)}}
        for value, line in zip(grid.rows, matrix, strict=True)
    ]
    across = varied_unit(sweep, 1)
    columns = (
        Column("value", sweep.cases.varied[0].name, varied_unit(sweep, 0), "number"),
        *(Column(key, value_words(value, across), "", kind) for key, value in zip(keys, grid.columns, strict=True)),
    )
    title = f"{what}, {unit}" if unit else what
    name = "heat_map" if reading is None else "heat_map_reading"
    return Table(name, title, columns, rows, f"Columns: {sweep.cases.varied[1].name}.")


def _sentences(sweep: Sweep) -> list[str]:
    good = np.flatnonzero(planned(sweep))
    if not len(good):
        return ["No case has a plan.", *failure_sentences(sweep)]
    best, worst = (int(good[pick(sweep.margin[good])]) for pick in (np.argmax, np.argmin))
    return [
        f"The margin before fixed cost is lowest, {_at(sweep, worst)}, and highest, {_at(sweep, best)}.",
        f"Today, {_numbers(sweep, [today_of(sweep, at) for at in (0, 1)])}, it is "
        f"{money_words(today_margin(sweep), sweep.currency)}.",
        *failure_sentences(sweep),
    ]


def _at(sweep: Sweep, case: int) -> str:
    values = [float(value) for value in sweep.cases.values[case]]
    return f"{money_words(float(sweep.margin[case]), sweep.currency)}, at {_numbers(sweep, values)}"


def _numbers(sweep: Sweep, values: list[float]) -> str:
    names = short_names(sweep)
    return " and ".join(
        f"{name} {value_words(value, varied_unit(sweep, at))}" for at, (name, value) in enumerate(zip(names, values, strict=True))
    )
