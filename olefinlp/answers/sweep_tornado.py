"""Which numbers move the margin most: one number at a time, its lowest and highest value, the others as today."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from olefinlp.answers.answer import Answer
from olefinlp.answers.sweep_figures import (
    NOTHING_MOVES,
    counted,
    failure_sentences,
    failures,
    how_words,
    listed,
    margin_changes,
    money_words,
    or_none,
    planned,
    short_names,
    today_margin,
    today_of,
    value_words,
    varied_unit,
)
from olefinlp.answers.tables import Column, Record, Table

if TYPE_CHECKING:
    from olefinlp.answers.sweep import Sweep

NOTE = (
    "Changes are from today's margin, planned again at each end, the other numbers as today; they do not add. "
    "The swing is what lies between the lowest and the highest of today and both ends."
)


@dataclass(frozen=True, slots=True)
class Bar:
    """One number of a tornado: its column, and the cases (from 0) of its lowest and highest value; None where not tried.

    `low`, `high`: change of the margin there, in thousands; not a number where that case has no plan.
    """

    number: int
    low_case: int | None
    high_case: int | None
    low: float
    high: float

    @property
    def swing(self) -> float:
        """From the lowest to the highest of both ends and today."""
        ends = [0.0, *(end for end in (self.low, self.high) if np.isfinite(end))]
        return max(ends) - min(ends)


def tornado_bars(sweep: Sweep) -> list[Bar]:
    """The bars, the widest first; cases in which several numbers vary are no part of it.

    Raises `ValueError` where no case varies one number alone.
    """
    given = np.isfinite(sweep.cases.values)
    alone = given.sum(axis=1) == 1
    changes = margin_changes(sweep)
    bars = []
    for number in range(len(sweep.cases.varied)):
        cases = np.flatnonzero(alone & given[:, number])
        if len(cases):
            bars.append(_bar(sweep, number, cases, changes))
    if not bars:
        raise ValueError("no case varies one number alone, the others as today: there is no tornado; sweep `one at a time`")
    return sorted(bars, key=lambda bar: -bar.swing)


def _bar(sweep: Sweep, number: int, cases: np.ndarray, changes: np.ndarray) -> Bar:
    values = sweep.cases.values[cases, number]
    low, high = int(cases[values.argmin()]), int(cases[values.argmax()])
    ends: list[int | None] = [low, high]
    if values.min() == values.max():  # one value: it is one end, by the side of today on which it stands
        ends = [low, None] if values[0] < today_of(sweep, number) else [None, high]
    low_change, high_change = (float("nan") if end is None else float(changes[end]) for end in ends)
    return Bar(number, ends[0], ends[1], low_change, high_change)


def tornado(sweep: Sweep) -> Answer:
    """For each number its lowest and highest value, and what the margin changes by there; the widest swing first.

    The table `tornado` has money in thousands of the currency, before fixed cost; an end without a plan is blank.
    Raises `ValueError` where no case varies one number alone.

    >>> from olefinlp import read_scenario
    >>> from olefinlp.answers.sweep import sweep
    >>> march = read_scenario("scenarios/brackwater_2031_03.yaml")
    >>> both = {"outlets.c5_sale": {"percent": [-10, 10]}, "outlets.ethylene_contract": {"percent": [-10, 10]}}
    >>> [row["number"] for row in tornado(sweep(march, both, how="one at a time")).table.rows]
    ['outlets.ethylene_contract', 'outlets.c5_sale']
    """
    bars = tornado_bars(sweep)
    tables = [tornado_table(sweep, bars), *([failures(sweep)] if not planned(sweep).all() else [])]
    return Answer("tornado", f"What moves the margin: {how_words(sweep)}", tuple(tables), tuple(_sentences(sweep, bars)), NOTE)


def tornado_table(sweep: Sweep, bars: list[Bar]) -> Table:
    """A row a number."""
    money, today = f"k{sweep.currency}", today_margin(sweep)
    rows: list[Record] = []
    for bar in bars:
        at, varied = bar.number, sweep.cases.varied[bar.number]
        values = [None if end is None else float(sweep.cases.values[end, at]) for end in (bar.low_case, bar.high_case)]
        rows.append(
            {
                "number": varied.name,
                "today": varied.first,
                "unit": varied.unit,
                "varied_in": "% of today" if sweep.cases.percent[at] else varied.unit,
                "low_value": values[0],
                "high_value": values[1],
                "margin_low": or_none(bar.low + today),
                "margin_high": or_none(bar.high + today),
                "change_low": or_none(bar.low),
                "change_high": or_none(bar.high),
                "swing": bar.swing,
            }
        )
    columns = (
        Column("number", "Number"),
        Column("today", "Today", kind="number"),
        Column("unit", "Unit"),
        Column("low_value", "Low value", kind="number"),
        Column("high_value", "High value", kind="number"),
        Column("varied_in", "Varied in"),
        Column("margin_low", "Margin at the low value", money, "money"),
        Column("margin_high", "Margin at the high value", money, "money"),
        Column("change_low", "Change at the low value", money, "money"),
        Column("change_high", "Change at the high value", money, "money"),
        Column("swing", "Swing", money, "money"),
    )
    return Table("tornado", "What moves the margin", columns, rows, NOTE)


def _sentences(sweep: Sweep, bars: list[Bar]) -> list[str]:
    if not planned(sweep).any():
        return ["No case has a plan.", *failure_sentences(sweep)]
    names, today = short_names(sweep), today_margin(sweep)
    moving = [bar for bar in bars if bar.swing > NOTHING_MOVES * abs(today)]
    still = [
        names[bar.number] for bar in bars if bar.swing <= NOTHING_MOVES * abs(today) and np.isfinite([bar.low, bar.high]).any()
    ]
    lines = [f"Today's margin before fixed cost is {money_words(today, sweep.currency)}."]
    lines += [_bar_sentence(sweep, bar, names[bar.number]) for bar in moving[:3]]
    if still:
        lines.append(f"{counted(len(still), 'number')} {'moves' if len(still) == 1 else 'move'} nothing: {listed(still)}.")
    return [*lines, *failure_sentences(sweep)]


def _bar_sentence(sweep: Sweep, bar: Bar, name: str) -> str:
    unit = varied_unit(sweep, bar.number)
    ends = []
    for case, change in ((bar.low_case, bar.low), (bar.high_case, bar.high)):
        if case is not None:
            value = value_words(float(sweep.cases.values[case, bar.number]), unit)
            ends.append(f"at {value} {_change_words(change, sweep.currency)}")
    return f"{name[:1].upper()}{name[1:]}: {', '.join(ends)}."


def _change_words(change: float, currency: str) -> str:
    if not np.isfinite(change):
        return "there is no plan"
    if not change:
        return "the margin stays"
    return f"the margin {'rises' if change > 0 else 'falls'} by {money_words(abs(change), currency)}"
