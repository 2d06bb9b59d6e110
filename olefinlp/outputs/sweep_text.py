"""A sweep on a terminal: what it says, the table that suits it, cases without a plan."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence
from typing import TYPE_CHECKING

from olefinlp.answers.bridge import decimals
from olefinlp.answers.sweep_answers import DISTRIBUTION, STEPS, TORNADO, message, suits, sweep_answer
from olefinlp.answers.sweep_distribution import figures_table
from olefinlp.answers.sweep_figures import (
    changing_readings,
    failure_sentences,
    failures,
    how_words,
    planned,
    reading_column,
    thinned,
    today_margin,
    value_words,
    varied_unit,
)
from olefinlp.answers.sweep_heat_map import heat_grid
from olefinlp.answers.sweep_steps import steps_order, steps_table
from olefinlp.answers.sweep_tornado import tornado_bars, tornado_table
from olefinlp.outputs.text import INDENT, aligned, names, number, significant

if TYPE_CHECKING:
    from olefinlp.answers.sweep import Sweep

WIDTH = 110
MOST_BARS, MOST_STEPS, MOST_REASONS = 20, 20, 5
MOST_DOWN, MOST_ACROSS = 12, 8
MOST_READINGS = 4
LONGEST_NAME, HEADING = 40, 16


def sweep_text(sweep: Sweep) -> str:
    """The summary of a sweep, ready to print: no line wider than a terminal, no table longer than a screen.

    >>> from olefinlp import read_scenario
    >>> from olefinlp.answers.sweep import sweep
    >>> march = read_scenario("scenarios/brackwater_2031_03.yaml")
    >>> print(sweep_text(sweep(march, {"outlets.ethylene_spot": [30, 36]})).splitlines()[0])
    March 2031, base prices: the margin goes from 25.80 to 27.85 MUSD along ethylene spot, 30 to 36 USc/lb
    """
    lines = textwrap.wrap(f"{sweep.base.scenario.title}: {message(sweep)}", WIDTH, subsequent_indent=INDENT)
    lines += [f"{sweep.base.scenario.plant.name} · {how_words(sweep)}", ""]
    if planned(sweep).any():
        lines += [*_table(sweep), ""]
        below = failure_sentences(sweep)  # they have a block of their own
        said = [sentence for sentence in sweep_answer(sweep).sentences if sentence not in below]
        lines += [part for sentence in said for part in _wrapped(sentence)]
        lines.append("")
    lines += _failures(sweep)
    if sweep.note:
        lines += [*_wrapped(f"{sweep.note[:1].upper()}{sweep.note[1:]}."), ""]
    lines.append("Planning aid: estimates from the yields, limits and prices supplied; not for operating limits.")
    return "\n".join(lines)


def _wrapped(sentence: str) -> list[str]:
    return textwrap.wrap(sentence, WIDTH, initial_indent=INDENT, subsequent_indent=INDENT * 2)


def _table(sweep: Sweep) -> list[str]:
    which = suits(sweep)
    if which == DISTRIBUTION:
        return _distribution(sweep)
    if which == TORNADO:
        return _tornado(sweep)
    return _steps(sweep) if which == STEPS else _heat_map(sweep)


def _money(sweep: Sweep, value: float | None) -> str:
    """An amount in thousands, with as many decimals as today's margin asks for."""
    return number(value, decimals(abs(today_margin(sweep))))


def _distribution(sweep: Sweep) -> list[str]:
    found = figures_table(sweep)
    columns = [column for column in found.columns if column.key != "figure"]
    short = {"replanned": "planned again", "held": "today's plan held", "flexibility": "difference, case by case"}
    rows = [["", *(short[column.key] for column in columns)]]
    rows += [[row["figure"], *(_money(sweep, row[column.key]) for column in columns)] for row in found.rows]
    return [f"Margin before fixed cost, k{sweep.currency}", *aligned(rows)]


def _tornado(sweep: Sweep) -> list[str]:
    bars = tornado_bars(sweep)
    table = tornado_table(sweep, bars[:MOST_BARS])
    rows = [["number", "today", "low", "high", "", "at low", "at high", "swing"]]
    for row in table.rows:
        values = [_value(row[key]) for key in ("today", "low_value", "high_value")]
        ends = [_end(sweep, row[f"{end}_value"], row[f"change_{end}"]) for end in ("low", "high")]
        unit = row["unit"] if row["varied_in"] == row["unit"] else f"{row['unit']}, %"
        rows.append([_short(row["number"]), *values, unit, *ends, _money(sweep, row["swing"])])
    lines = [f"Change of the margin from today's, k{sweep.currency}", *aligned(rows, left=(0, 4))]
    return [*lines, f"{INDENT}and {len(bars) - MOST_BARS} more that move it less"] if len(bars) > MOST_BARS else lines


def _end(sweep: Sweep, value: float | None, change: float | None) -> str:
    """A change at an end, or why there is none."""
    if change is None:
        return "" if value is None else "no plan"
    return _money(sweep, change)


def _short(name: str) -> str:
    """A path that leaves room for numbers; its end says more than its beginning."""
    return name if len(name) <= LONGEST_NAME else "…" + name[-LONGEST_NAME + 1 :]


def _steps(sweep: Sweep) -> list[str]:
    order, chosen = steps_order(sweep), changing_readings(sweep, most=MOST_READINGS)
    shown = thinned(len(order), MOST_STEPS)
    table = steps_table(sweep, [order[place] for place in shown], chosen)
    heads = [reading_column(sweep, name) for name in chosen]
    unit = "% of today" if sweep.cases.percent[0] else varied_unit(sweep, 0)
    rows = _headings([unit or "value", f"margin, k{sweep.currency}", "from today", *(_head(column.heading) for column in heads)])
    for row in table.rows:
        margins = ["no plan", ""] if row["margin"] is None else [_money(sweep, row["margin"]), _money(sweep, row["change"])]
        rows.append([_value(row["value"]), *margins, *(_reading(row[c.key], c.kind) for c in heads)])
    lines = [f"Margin along {sweep.cases.varied[0].name}", *aligned(rows, left=0)]
    return [*lines, *_left_out(len(shown), len(order), "values")]


def _headings(texts: Sequence[str]) -> list[list[str]]:
    """Headings over as many rows as they need, their ends at the bottom."""
    parts = [textwrap.wrap(text, HEADING, break_long_words=False) or [""] for text in texts]
    high = max(map(len, parts))
    padded = [[""] * (high - len(part)) + part for part in parts]
    return [list(row) for row in zip(*padded, strict=True)]


def _value(value: float | None) -> str:
    """A value as somebody wrote it; one of many digits to four figures."""
    if value is not None and float(f"{value:.6g}") == value:
        return f"{value:,.6g}"
    return significant(value)


def _head(heading: str) -> str:
    return names(heading).removeprefix("bought ").removeprefix("sold ")


def _reading(value: float | None, kind: str) -> str:
    if value is None:
        return ""
    return f"{100 * value:.1f} %" if kind == "share" else number(value, 1)


def _left_out(shown: int, count: int, what: str) -> list[str]:
    return [f"{INDENT}{shown:,} of {count:,} {what}, evenly spaced"] if shown < count else []


def _heat_map(sweep: Sweep) -> list[str]:
    grid = heat_grid(sweep)
    down, across = thinned(len(grid.rows), MOST_DOWN), thinned(len(grid.columns), MOST_ACROSS)
    good = planned(sweep)
    heads = [value_words(grid.columns[at], varied_unit(sweep, 1)) for at in across]
    rows = [["", *heads]]
    for line in down:
        cells = [grid.cases[line, column] for column in across]
        texts = [_money(sweep, float(sweep.margin[case])) if good[case] else "no plan" for case in cells]
        rows.append([value_words(grid.rows[line], varied_unit(sweep, 0)), *texts])
    first, second = (varied.name for varied in sweep.cases.varied)
    lines = [f"Margin, k{sweep.currency}; down: {first}; across: {second}", *aligned(rows, left=0)]
    return [*lines, *_left_out(len(down) * len(across), len(sweep), "cases")]


def _failures(sweep: Sweep) -> Sequence[str]:
    """Cases without a plan by reason, the most frequent ones."""
    rows = failures(sweep).rows
    if not rows:
        return []
    count = sum(row["cases"] for row in rows)
    lines = [f"No plan in {count:,} of {len(sweep):,} cases"]
    for row in rows[:MOST_REASONS]:
        lines += _wrapped(f"{row['cases']:,}: {row['reason']} (the first is case {row['first']:,})")
    rest = sum(row["cases"] for row in rows[MOST_REASONS:])
    return [*lines, *([f"{INDENT}{rest:,} for other reasons"] if rest else []), ""]
