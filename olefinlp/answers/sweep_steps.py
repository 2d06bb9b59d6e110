"""The margin along one number: a row a value, with what is bought or whatever else was read out."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from olefinlp.answers.answer import Answer, Chart
from olefinlp.answers.sweep_figures import (
    changing_readings,
    counted,
    failure_sentences,
    failures,
    in_words,
    is_held,
    margin_changes,
    money_words,
    or_none,
    planned,
    reading_column,
    reading_of,
    stays,
    today_of,
    value_words,
    varied_unit,
)
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.answers.words import amount, percent, worth

if TYPE_CHECKING:
    from olefinlp.answers.sweep import Sweep

NOTE = "Nothing is solved between two rows: the margin there may bend, and quantities jump somewhere on the way."


def steps_order(sweep: Sweep) -> list[int]:
    """Cases (from 0) by the value of the single number; a case as today stands at today's value.

    Raises `ValueError` where several numbers vary.
    """
    if len(sweep.cases.varied) != 1:
        raise ValueError(f"{len(sweep.cases.varied)} numbers vary: there are no steps along one")
    return [int(case) for case in np.argsort(step_values(sweep), kind="stable")]


def step_values(sweep: Sweep) -> np.ndarray:
    """The value of the single number in each case."""
    values = sweep.cases.values[:, 0]
    return np.where(np.isfinite(values), values, today_of(sweep, 0))


def steps_of_sweep(sweep: Sweep, readings: Sequence[str] | None = None) -> Answer:
    """Margin and readings along the single number that varies, from its lowest value to its highest.

    `readings` are names of columns that were read out (`bought.…`, `load.…`, `worth.…`); without them the feeds, or
    products, that change most. The table `steps` is in thousands of the currency and in the units of the readings;
    what a case without a plan lacks is blank. Raises `ValueError` where several numbers vary, or for a reading that is
    not there.

    >>> from olefinlp import read_scenario
    >>> from olefinlp.answers.sweep import sweep
    >>> march = read_scenario("scenarios/brackwater_2031_03.yaml")
    >>> found = steps_of_sweep(sweep(march, {"feeds.full_range_naphtha.spot_cargo": [560, 534, 500]}))
    >>> [(row["value"], round(row["margin"])) for row in found.table.rows]
    [(500.0, 28878), (534.0, 26809), (560.0, 26200)]
    """
    order, chosen = steps_order(sweep), changing_readings(sweep, readings)
    table = steps_table(sweep, order, chosen)
    name, unit = sweep.cases.varied[0].name, varied_unit(sweep, 0)
    title = f"Margin along {name}: {counted(len(sweep), 'case')}"
    axis = f"{name}, {unit}" if unit else name
    chart = Chart("line", title, "value", "value", "margin", axis, f"k{sweep.currency}", today_of(sweep, 0))
    tables = (table, *([failures(sweep)] if not planned(sweep).all() else []))
    return Answer("steps", title, tables, tuple(_sentences(sweep, order, chosen)), NOTE, chart if planned(sweep).all() else None)


def steps_table(sweep: Sweep, order: Sequence[int], chosen: Sequence[str]) -> Table:
    """A row a case, by its value."""
    good, changes, values = planned(sweep), margin_changes(sweep), step_values(sweep)
    held, money, unit = is_held(sweep), f"k{sweep.currency}", varied_unit(sweep, 0)
    rows: list[Record] = []
    for case in order:
        row: Record = {"value": float(values[case]), "margin": float(sweep.margin[case]) if good[case] else None}
        row["change"] = or_none(changes[case])
        if held:
            row["held"] = or_none(sweep.held[case]) if good[case] else None
        rows.append(row | {name: or_none(reading_of(sweep, name)[case]) if good[case] else None for name in chosen})
    columns = [
        Column("value", sweep.cases.varied[0].name, f"{unit} of today" if sweep.cases.percent[0] else unit, "number"),
        Column("margin", "Margin", money, "money"),
        Column("change", "Change from today", money, "money"),
        *([Column("held", "Today's plan held", money, "money")] if held else []),
        *(reading_column(sweep, name) for name in chosen),
    ]
    return Table("steps", "Margin along one number", tuple(columns), rows, NOTE)


def _sentences(sweep: Sweep, order: Sequence[int], chosen: Sequence[str]) -> list[str]:
    good = [case for case in order if planned(sweep)[case]]
    if not good:
        return ["No case has a plan.", *failure_sentences(sweep)]
    unit, values = varied_unit(sweep, 0), step_values(sweep)

    def at(case: int) -> str:
        margin = money_words(float(sweep.margin[case]), sweep.currency)
        return f"{margin} at {value_words(float(values[case]), unit)}"

    changes = margin_changes(sweep)
    best, worst = max(good, key=lambda case: changes[case]), min(good, key=lambda case: changes[case])
    today = value_words(today_of(sweep, 0), unit)
    goes = (
        f"stays at {_today(sweep)}"
        if stays(sweep)
        else f"goes from {at(worst)} to {at(best)}; today ({today}) it is {_today(sweep)}"
    )
    lines = [f"The margin before fixed cost {goes}."]
    for name in chosen[:3]:
        lines.append(_reading_sentence(sweep, name, good[0], good[-1]))
    return [*lines, *failure_sentences(sweep)]


def _today(sweep: Sweep) -> str:
    return money_words(sweep.base.margin / 1000, sweep.currency)


def _reading_sentence(sweep: Sweep, name: str, first: int, last: int) -> str:
    """What a reading is at both ends of the number."""
    column, values = reading_column(sweep, name), reading_of(sweep, name)
    say = {"share": percent, "price": worth}.get(column.kind, amount)
    ends = [say(float(values[case])) for case in (first, last)]
    words = in_words(column.title)
    return f"{words[:1].upper()}{words[1:]}: {ends[0]} at the lowest value, {ends[1]} at the highest{_in(column.unit)}."


def _in(unit: str) -> str:
    return f" ({unit})" if unit else ""
