"""How the margin is spread over the cases of a sweep: planned again in each, and with today's plan held."""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING

import numpy as np

from olefinlp.answers.answer import Answer
from olefinlp.answers.sweep_figures import (
    FEW,
    WORTH_SEEN,
    Figures,
    bin_edges,
    bought_from,
    counted,
    counts_in,
    failure_sentences,
    failures,
    figures,
    flexibility,
    how_words,
    in_words,
    is_held,
    listed,
    money_words,
    note_sentences,
    planned,
    reading_of,
    readings_of,
    todays_readings,
)
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.answers.words import percent, worth
from olefinlp.inputs.sweep_cases import DRAWS, Values

if TYPE_CHECKING:
    from olefinlp.answers.sweep import Sweep

PERCENTILES = (
    "P10 is the margin that one case in ten stays below; percentiles are interpolated linearly between the cases in order."
)
FIGURES: tuple[tuple[str, Callable[[Figures], float | None]], ...] = (
    ("mean", lambda f: f.mean),
    ("standard deviation", lambda f: f.deviation),
    ("lowest", lambda f: f.low),
    ("P10", lambda f: f.p10),
    ("P50", lambda f: f.p50),
    ("P90", lambda f: f.p90),
    ("highest", lambda f: f.high),
)
"""Name and value of each line of the main table."""
BELOW_ZERO, BELOW_FIXED = "margin below zero", "margin below the fixed cost"
SPECIFICATION = "specification"


def distribution(sweep: Sweep) -> Answer:
    """The distribution of the margin over the cases, how often each feed is bought and how often each limit binds.

    Tables: `distribution` (thousands of the currency, before fixed cost), `chances` (shares of the cases with a plan),
    `histogram`, and, where they were read out, `feeds_bought` and `limits_binding`; `failures` where cases have no plan.
    Every case counts alike; only of random draws the shares are chances.

    >>> from olefinlp import read_scenario
    >>> from olefinlp.answers.sweep import sweep
    >>> from olefinlp.inputs.sweep_draws import draw_cases
    >>> march = read_scenario("scenarios/brackwater_2031_03.yaml")
    >>> drawn = draw_cases(march, {"feeds.full_range_naphtha.spot_cargo": {"sd": "5 %"}}, count=40, seed=3)
    >>> [row["figure"] for row in distribution(sweep(march, drawn)).table.rows]
    ['mean', 'standard deviation', 'lowest', 'P10', 'P50', 'P90', 'highest']
    """
    tables = [figures_table(sweep), chances_table(sweep), histogram(sweep)]
    tables += [table for table in (feeds_bought(sweep), limits_binding(sweep), failures(sweep)) if table.rows]
    note = " ".join([PERCENTILES, *([sweep.cases.note] if sweep.cases.note else [])])
    return Answer(
        "distribution", f"Distribution of the margin: {how_words(sweep)}", tuple(tables), tuple(_sentences(sweep)), note
    )


def figures_table(sweep: Sweep) -> Table:
    """Statistics of the margin: planned again, today's plan held, and the difference case by case."""
    money, held = f"k{sweep.currency}", is_held(sweep)
    found = {"replanned": figures(np.where(planned(sweep), sweep.margin, np.nan))}
    if held:
        found |= {"held": figures(np.where(planned(sweep), sweep.held, np.nan)), "flexibility": figures(flexibility(sweep))}
    rows: list[Record] = [{"figure": figure, **{name: value(one) for name, one in found.items()}} for figure, value in FIGURES]
    columns = [Column("figure", "Figure"), Column("replanned", "Planned again", money, "money")]
    if held:
        columns += [
            Column("held", "Today's plan held", money, "money"),
            Column("flexibility", "What planning again earns, case by case", money, "money"),
        ]
    return Table("distribution", "Margin before fixed cost", tuple(columns), rows, PERCENTILES)


def fixed_cost(sweep: Sweep) -> float:
    """The fixed cost to compare with, in thousands; zero where there is none or it varies itself."""
    if any(varied.path.startswith("fixed_costs") for varied in sweep.cases.varied):
        return 0.0
    return sweep.base.fixed_cost() / 1000


def chances_table(sweep: Sweep) -> Table:
    """In how many of the cases with a plan the margin lies below zero, and below the fixed cost."""
    good, held, fixed = planned(sweep), is_held(sweep), fixed_cost(sweep)
    rows: list[Record] = []
    for event, level in ((BELOW_ZERO, 0.0), *([(BELOW_FIXED, fixed)] if fixed else [])):
        row: Record = {"event": event, "level": level, "replanned": _share_below(sweep.margin[good], level)}
        rows.append(row | ({"held": _share_below(sweep.held[good], level)} if held else {}))
    columns = [
        Column("event", "Margin before fixed cost"),
        Column("level", "Level", f"k{sweep.currency}", "money"),
        Column("replanned", "Planned again", kind="share"),
        *([Column("held", "Today's plan held", kind="share")] if held else []),
    ]
    title = "Chances" if sweep.cases.how == DRAWS else "Shares of the cases"
    return Table("chances", title, tuple(columns), rows, "Shares of the cases that have a plan.")


def _share_below(values: Values, level: float) -> float | None:
    known = values[np.isfinite(values)]
    return float((known < level).mean()) if len(known) else None


def histogram(sweep: Sweep) -> Table:
    """How many cases lie between equal steps of margin, and the share up to the end of each."""
    good, held, money = planned(sweep), is_held(sweep), f"k{sweep.currency}"
    samples = {"replanned": sweep.margin[good]} | ({"held": sweep.held[good]} if held else {})
    edges = bin_edges(*samples.values())
    counts = {name: counts_in(values, edges) for name, values in samples.items()}
    sums = {name: np.cumsum(count) / max(sum(count), 1) for name, count in counts.items()}
    rows: list[Record] = [
        {
            "from": float(edges[at]),
            "to": float(edges[at + 1]),
            **{name: count[at] for name, count in counts.items()},
            **{f"{name}_up_to": float(share[at]) for name, share in sums.items()},
        }
        for at in range(len(edges) - 1)
    ]
    titles = {"replanned": "planned again", "held": "today's plan held"}
    columns = [
        Column("from", "Margin from", money, "money"),
        Column("to", "to below", money, "money"),
        *(Column(name, f"Cases, {titles[name]}", kind="count") for name in samples),
        *(Column(f"{name}_up_to", f"Share up to here, {titles[name]}", kind="share") for name in samples),
    ]
    return Table(
        "histogram", "Margins in steps", tuple(columns), rows, "A margin on an edge belongs to the step that begins there."
    )


def feeds_bought(sweep: Sweep) -> Table:
    """How often each source is bought, and how much: over all cases with a plan."""
    good, today = planned(sweep), todays_readings(sweep)
    least = bought_from(sweep)
    rows: list[Record] = []
    for reading in readings_of(sweep, "bought"):
        values = reading_of(sweep, reading.name)[good]
        found = figures(values)
        if not found.count:
            continue
        times = int((values > least).sum())
        row: Record = {"source": reading.name.partition(".")[2], "cases": times, "share": times / found.count}
        rows.append(
            row | {"mean": found.mean, "p10": found.p10, "p50": found.p50, "p90": found.p90, "today": today[reading.name]}
        )
    columns = (
        Column("source", "Source"),
        Column("cases", "Cases in which it is bought", kind="count"),
        Column("share", "Share of cases", kind="share"),
        Column("mean", "Mean bought", "kt", "quantity"),
        Column("p10", "P10", "kt", "quantity"),
        Column("p50", "P50", "kt", "quantity"),
        Column("p90", "P90", "kt", "quantity"),
        Column("today", "Today's plan", "kt", "quantity"),
    )
    words = f"Bought means more than {least:g} kt; mean and percentiles are over all cases with a plan, bought or not."
    return Table("feeds_bought", "How often each feed is bought", columns, rows, words)


def limits_binding(sweep: Sweep) -> Table:
    """How often each limit binds, and what relaxing it by one unit is worth where it does; the most frequent first.

    A specification of a product of which nothing is sold counts as not binding.
    """
    today, count = todays_readings(sweep), int(planned(sweep).sum())
    least = bought_from(sweep)
    rows: list[Record] = []
    for reading in readings_of(sweep, "worth"):
        outlet = specified_outlet(sweep, reading.name)
        values = worths_that_count(sweep, reading.name)
        binds = values > WORTH_SEEN
        times = int(binds.sum())
        rows.append(
            {
                "limit": reading.name.partition(".")[2],
                "unit": reading.unit,
                "cases": times,
                "share": times / count if count else None,
                "mean": float(values[binds].mean()) if times else None,
                "high": float(values[binds].max()) if times else None,
                "today": 0.0 if outlet and today[outlet] <= least else today[reading.name],
            }
        )
    rows.sort(key=lambda row: -row["cases"])
    columns = (
        Column("limit", "Limit"),
        Column("unit", "Unit of the worth"),
        Column("cases", "Cases in which it binds", kind="count"),
        Column("share", "Share of cases", kind="share"),
        Column("mean", "Mean worth where it binds", kind="price"),
        Column("high", "Highest worth", kind="price"),
        Column("today", "Worth in today's plan", kind="price"),
    )
    words = "A limit binds where one more unit of it is worth something; a worth holds for the next unit, worths never add."
    return Table(
        "limits_binding", "How often each limit binds", columns, [row for row in rows if row["cases"] or row["today"]], words
    )


def worths_that_count(sweep: Sweep, name: str) -> Values:
    """The worth of a limit in each case with a plan, zero where it means nothing: a specification of what is not sold."""
    good = planned(sweep)
    values, outlet = reading_of(sweep, name)[good], specified_outlet(sweep, name)
    return values if outlet is None else np.where(reading_of(sweep, outlet)[good] > bought_from(sweep), values, 0.0)


def specified_outlet(sweep: Sweep, name: str) -> str | None:
    """The reading of what is sold under a specification, whose worth has a name; None for other limits, or if not read out."""
    case = sweep.base.quantities.case
    several = len(case.months) > 1
    for limit in case.limits.values():
        own = f"worth.{limit.label}" + (f".{limit.month}" if several else "")
        if own == name and limit.family == SPECIFICATION:
            outlet = f"sold.{limit.key[0]}"
            return outlet if outlet in sweep.read_out.names else None
    return None


# ---------------------------------------------------------------------------------- sentences


def _sentences(sweep: Sweep) -> list[str]:
    count = int(planned(sweep).sum())
    if not count:
        return ["No case has a plan.", *failure_sentences(sweep)]
    lines = [_spread(sweep), *_few(count), _optimistic(sweep), *_held(sweep), *_chances(sweep)]
    return [*lines, *_feeds(sweep), *_limits(sweep), *failure_sentences(sweep), *note_sentences(sweep)]


def _spread(sweep: Sweep) -> str:
    found, money = figures(np.where(planned(sweep), sweep.margin, np.nan)), _money(sweep)
    if found.count == 1:
        return f"One case has a plan; its margin is {money(found.mean)}."
    return (
        f"Planned again in each case, the margin before fixed cost is {money(found.mean)} on average (standard deviation "
        f"{money(found.deviation)}); eight cases in ten lie between {money(found.p10)} (P10) and {money(found.p90)} (P90)."
    )


def _money(sweep: Sweep) -> Callable[[float | None], str]:
    largest = figures(np.abs(np.where(planned(sweep), sweep.margin, np.nan))).high or 0.0
    return lambda value: money_words(value or 0.0, sweep.currency, largest)


def _few(count: int) -> list[str]:
    return [f"With {counted(count, 'case')}, percentiles mean little: look at the cases themselves."] if count < FEW else []


def _optimistic(sweep: Sweep) -> str:
    what = "prices" if sweep.prices_only else "numbers"
    return f"This is optimistic: every plan knows the {what} of its case perfectly, which nobody does when the feeds are bought."


def _held(sweep: Sweep) -> list[str]:
    money = _money(sweep)
    if not sweep.prices_only:
        return ["Today's plan held is left out: not only prices vary, so that it may not be possible in every case."]
    if not is_held(sweep):
        return []
    held, gain = figures(np.where(planned(sweep), sweep.held, np.nan)), figures(flexibility(sweep))
    return [
        f"With today's plan held it is {money(held.mean)} on average, {money(held.p10)} (P10) to {money(held.p90)} (P90); "
        f"planning again earns {money(gain.mean)} more on average, the value of flexibility."
    ]


def _chances(sweep: Sweep) -> list[str]:
    rows = {row["event"]: row for row in chances_table(sweep).rows}
    count = int(planned(sweep).sum())
    parts = [f"below zero in {_times(rows[BELOW_ZERO]['replanned'], count)}"]
    if BELOW_FIXED in rows:
        fixed = _money(sweep)(fixed_cost(sweep))
        parts.append(f"below the fixed cost of {fixed} in {_times(rows[BELOW_FIXED]['replanned'], count)}")
    held = [row["held"] for row in rows.values()] if is_held(sweep) else []
    more = f"; with today's plan held in {' and '.join(_times(share, count) for share in held)}" if any(held) else ""
    return [f"The margin before fixed cost is {' and '.join(parts)}{more}."]


def _times(share: float | None, count: int) -> str:
    """A share of the cases in words."""
    number = round((share or 0.0) * count)
    if number in (0, count):
        return "no case" if number == 0 else "every case"
    return f"{counted(number, 'case')} ({percent(number / count)})"


def _feeds(sweep: Sweep) -> list[str]:
    rows = feeds_bought(sweep).rows
    if not rows:
        return []
    always = [in_words(row["source"]) for row in rows if row["share"] == 1]
    never = [in_words(row["source"]) for row in rows if row["cases"] == 0]
    doubt = sorted((row for row in rows if 0 < row["share"] < 1), key=lambda row: abs(row["share"] - 0.5))
    parts = [f"in every case {listed(always)}"] if always else []
    some = [f"{in_words(row['source'])} ({percent(row['share'])})" for row in doubt]
    parts += [f"in some {listed(some)}"] if doubt else []
    parts += [f"in none {listed(never)}"] if never else []
    return [f"Bought {'; '.join(parts)}."]


def _limits(sweep: Sweep) -> list[str]:
    rows = [row for row in limits_binding(sweep).rows if row["cases"]][:3]
    parts = [
        f"{in_words(row['limit'])} in {percent(row['share'])} of cases (then worth {worth(row['mean'])} {row['unit']} on average)"
        for row in rows
    ]
    return [f"Limits that bind most often: {'; '.join(parts)}."] if parts else []
