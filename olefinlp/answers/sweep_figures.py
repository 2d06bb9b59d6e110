"""What every answer about a sweep leans on: which cases count, statistics, bins, failures, names and money in words."""

from __future__ import annotations

import math
import re
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from olefinlp.answers.sweep_readings import Reading
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.answers.words import amount
from olefinlp.inputs.findings import near_name
from olefinlp.inputs.sweep_cases import DRAWS, GRID, LIST, ONE_AT_A_TIME, Values
from olefinlp.lp.sweep import OPTIMAL, read_values, shares_of

if TYPE_CHECKING:
    from olefinlp.answers.sweep import Sweep
    from olefinlp.inputs.varied import Varied

FEW = 30
"""With fewer cases than these, percentiles mean little."""
PLACES = 6
"""Decimals of differences of money, in thousands: what is smaller is rounding."""
MOST_BINS = 25
WORTH_SEEN = 1e-6
"""A worth below this, in its unit, is the solver's rounding."""
BOUGHT_SHARE = 1e-3
"""A source counts as bought from this share of all that today's plan buys."""
NOTHING_MOVES = 1e-6
"""A change below this share of today's margin is none."""
WAYS = {
    LIST: " along {}",
    GRID: ", all combinations of {}",
    ONE_AT_A_TIME: " of {}, one at a time, the others as today",
    DRAWS: ", random draws of {}",
}
"""How cases came about, in words; anything else is a table of cases."""


# ---------------------------------------------------------------------------------- which cases count


def planned(sweep: Sweep) -> np.ndarray:
    """Whether each case has a plan whose margin is a number; only those enter statistics."""
    good: np.ndarray = (sweep.status == OPTIMAL) & np.isfinite(sweep.margin)
    return good


def today_margin(sweep: Sweep) -> float:
    """The margin of today's plan, in thousands."""
    return sweep.base.margin / 1000


def is_held(sweep: Sweep) -> bool:
    """Whether today's plan stays possible in every case and was priced in each."""
    return sweep.prices_only and bool(np.isfinite(sweep.held[planned(sweep)]).any())


def margin_changes(sweep: Sweep) -> Values:
    """Margin of each case less today's, in thousands; not a number where there is no plan."""
    return _less(np.where(planned(sweep), sweep.margin, np.nan), np.full(len(sweep), today_margin(sweep)))


def flexibility(sweep: Sweep) -> Values:
    """What planning again earns above today's plan at the same prices, case by case, in thousands."""
    return _less(np.where(planned(sweep), sweep.margin, np.nan), sweep.held)


def _less(values: Values, others: Values) -> Values:
    """Differences of money without the solver's rounding, and without minus zero."""
    return np.round(values - others, PLACES) + 0.0


# ---------------------------------------------------------------------------------- statistics


@dataclass(frozen=True, slots=True)
class Figures:
    """Statistics of a sample; None where there are too few values.

    Percentiles are interpolated linearly between the values in order: P10 is the low one.
    """

    count: int
    mean: float | None = None
    deviation: float | None = None
    p10: float | None = None
    p50: float | None = None
    p90: float | None = None
    low: float | None = None
    high: float | None = None


def figures(values: Values) -> Figures:
    """Statistics of the values that are numbers; the standard deviation is that of a sample.

    >>> figures(np.array([1.0, 2.0, np.nan, 4.0]))
    Figures(count=3, mean=2.3333333333333335, deviation=1.5275252316519465, p10=1.2, p50=2.0, p90=3.6, low=1.0, high=4.0)
    >>> figures(np.array([np.nan]))
    Figures(count=0, mean=None, deviation=None, p10=None, p50=None, p90=None, low=None, high=None)
    """
    known = values[np.isfinite(values)]
    if not len(known):
        return Figures(0)
    p10, p50, p90 = (float(value) for value in np.percentile(known, (10, 50, 90)))
    deviation = float(known.std(ddof=1)) if len(known) > 1 else None
    return Figures(len(known), float(known.mean()), deviation, p10, p50, p90, float(known.min()), float(known.max()))


def bin_edges(*samples: Values) -> Values:
    """Round edges of equal bins that hold every value of some samples; empty without values.

    A value belongs to the bin that starts at it or below; the last edge lies above all.

    >>> bin_edges(np.array([1.2, 2.0, 4.9])).tolist()
    [1.0, 2.0, 3.0, 4.0, 5.0]
    >>> bin_edges(np.array([7.0])).tolist()
    [7.0, 8.0]
    """
    known = np.concatenate([sample[np.isfinite(sample)] for sample in samples])
    if not len(known):
        return np.array([])
    low, high = float(known.min()), float(known.max())
    wanted = min(MOST_BINS, max(4, math.ceil(1.5 * math.sqrt(len(known) / len(samples)))))
    step = _round_step((high - low) / wanted if high > low else max(abs(low) / 10, 1.0))
    first, last = math.floor(low / step), math.floor(high / step) + 1
    # short decimals, so that a sheet's edges, read back from their digits, are the very same numbers
    edges = [float(f"{number * step:.12g}") + 0.0 for number in range(first, last + 1)]
    while edges[0] > low:
        edges.insert(0, float(f"{edges[0] - step:.12g}"))
    while edges[-1] <= high:
        edges.append(float(f"{edges[-1] + step:.12g}"))
    return np.array(edges)


def _round_step(least: float) -> float:
    """One, two or five times a power of ten, at least as large."""
    size = 10.0 ** math.floor(math.log10(least))
    return next(times * size for times in (1, 2, 5, 10) if times * size >= least * (1 - 1e-12))


def counts_in(values: Values, edges: Values) -> list[int]:
    """How many values lie in each bin.

    >>> counts_in(np.array([1.0, 1.9, 2.0]), np.array([1.0, 2.0, 3.0]))
    [2, 1]
    """
    known = np.sort(values[np.isfinite(values)])
    places = np.searchsorted(known, edges, side="left")
    return [int(count) for count in np.diff(places)]


# ---------------------------------------------------------------------------------- failures


NUMBER_ALONE = re.compile(r"(?<![\w.-])\d+(?:[.,]\d+)*(?![\w-])")


def failures(sweep: Sweep) -> Table:
    """Cases without a plan by reason, the most frequent first; reasons that differ only in their numbers are one."""
    groups: dict[str, list[int]] = {}
    for number in np.flatnonzero(~planned(sweep)):
        groups.setdefault(NUMBER_ALONE.sub("…", _reason(sweep, int(number))), []).append(int(number))
    rows: list[Record] = [
        {
            "reason": _alike([_reason(sweep, number) for number in numbers]),
            "cases": len(numbers),
            "share": len(numbers) / len(sweep),
            "first": numbers[0] + 1,
        }
        for numbers in sorted(groups.values(), key=lambda numbers: -len(numbers))
    ]
    columns = (
        Column("reason", "Why there is no plan"),
        Column("cases", "Cases", kind="count"),
        Column("share", "Share of all cases", kind="share"),
        Column("first", "First of them, case", kind="count"),
    )
    return Table("failures", "Cases without a plan", columns, rows, "They are left out of all statistics.")


def _reason(sweep: Sweep, number: int) -> str:
    return sweep.reason(number) or "the margin is not a number"


def _alike(reasons: Sequence[str]) -> str:
    """Reasons that are alike but for numbers, as one: an ellipsis stands for what differs.

    >>> _alike(["the minimum 60 kt is above 58 kt", "the minimum 65 kt is above 58 kt"])
    'the minimum … kt is above 58 kt'
    """
    numbers = [NUMBER_ALONE.findall(reason) for reason in reasons]
    same = [len(set(column)) == 1 for column in zip(*numbers, strict=True)]
    kept = iter([number if one else "…" for number, one in zip(numbers[0], same, strict=True)])
    return NUMBER_ALONE.sub(lambda _: next(kept), reasons[0])


def failure_sentences(sweep: Sweep) -> list[str]:
    """That some cases have no plan, and the most frequent reason; nothing where all have one."""
    rows = failures(sweep).rows
    failed = sum(row["cases"] for row in rows)
    if not failed:
        return []
    have = "has" if failed == 1 else "have"
    why = rows[0]["reason"] + (
        "" if len(rows) == 1 else f" ({rows[0]['cases']:,} of them), and {counted(len(rows) - 1, 'more reason')}"
    )
    return [f"{failed:,} of {counted(len(sweep), 'case')} {have} no plan and {'is' if failed == 1 else 'are'} left out: {why}."]


# ---------------------------------------------------------------------------------- words


def counted(number: int, word: str) -> str:
    """A number and its word.

    >>> counted(1, "case"), counted(1200, "case")
    ('1 case', '1,200 cases')
    """
    return f"{number:,} {word}" if number == 1 else f"{number:,} {word}s"


def money_words(thousands: float, currency: str, beside: float = 0.0) -> str:
    """An amount of money as a sentence says it, in millions if the amount `beside` it is; never with a minus zero.

    >>> money_words(26808.667, "USD"), money_words(812.44, "USD"), money_words(3.6842, "USD"), money_words(-0.0, "USD")
    ('26.81 MUSD', '812 kUSD', '3.68 kUSD', '0 kUSD')
    >>> money_words(812.44, "USD", 26808.667), money_words(-812.44, "USD")
    ('0.81 MUSD', '−812 kUSD')
    """
    size, sign = abs(thousands), "−" if thousands < 0 else ""
    if size >= 9999.5 or (beside >= 9999.5 and size >= 10):
        return f"{sign}{size / 1000:,.2f} M{currency}"
    if size >= 99.95:
        return f"{sign}{size:,.0f} k{currency}"
    return f"{sign}{size:.3g} k{currency}" if size >= 1e-5 else f"0 k{currency}"


def value_words(value: float, unit: str) -> str:
    """A number with its unit.

    >>> value_words(534.0, "USD/t"), value_words(-10.0, "%"), value_words(0.95, "")
    ('534 USD/t', '−10 %', '0.95')
    """
    text = amount(abs(value)) if value else "0"
    return f"{'−' if value < 0 else ''}{text} {unit}".rstrip()


def varied_unit(sweep: Sweep, at: int) -> str:
    """The unit in which a number is varied."""
    return "%" if sweep.cases.percent[at] else sweep.cases.varied[at].unit


def today_words(sweep: Sweep, at: int) -> str:
    """Today's value of a number, in its own unit."""
    varied = sweep.cases.varied[at]
    return value_words(varied.first, varied.unit)


def today_of(sweep: Sweep, at: int) -> float:
    """Today's value of a number on the scale on which it is varied: no change where it is varied in per cent."""
    return 0.0 if sweep.cases.percent[at] else sweep.cases.varied[at].first


def short_names(sweep: Sweep) -> list[str]:
    """Each varied number in words, for charts and sentences; by its whole path where two would be called the same.

    The first part of a path says only where it is written.
    """
    return _told_apart([varied.name for varied in sweep.cases.varied])


def _told_apart(paths: Sequence[str]) -> list[str]:
    """
    >>> _told_apart(["feeds.light_oil.spot", "feeds.light_oil.spot.max", "sale.gas.price", "buy.gas.price"])
    ['light oil spot', 'light oil spot max', 'sale gas price', 'buy gas price']
    """
    short = [in_words(path.partition(".")[2] or path) for path in paths]
    again = {name for name, count in Counter(short).items() if count > 1}
    return [in_words(path) if name in again else name for path, name in zip(paths, short, strict=True)]


def in_words(path: str) -> str:
    """A path or name as words.

    >>> in_words("light_oil.spot")
    'light oil spot'
    """
    return path.replace("_", " ").replace(".", " ")


def listed(names: Sequence[str], most: int = 5) -> str:
    """Names in a sentence.

    >>> listed(["a", "b", "c"]), listed(["a", "b", "c"], most=1)
    ('a, b and c', 'a and 2 more')
    """
    shown = list(names[:most]) + ([f"{len(names) - most} more"] if len(names) > most else [])
    return " and ".join([", ".join(shown[:-1]), shown[-1]]) if len(shown) > 1 else "".join(shown)


def varied_table(sweep: Sweep) -> Table:
    """What varies: today's value, and between which values."""
    rows: list[Record] = []
    for at, varied in enumerate(sweep.cases.varied):
        known = sweep.cases.values[:, at][np.isfinite(sweep.cases.values[:, at])]
        rows.append(
            {
                "number": varied.name,
                "today": varied.first,
                "unit": _today_unit(varied),
                "low": float(known.min()) if len(known) else None,
                "high": float(known.max()) if len(known) else None,
                "varied_in": "% of today" if sweep.cases.percent[at] else varied.unit,
                "values": len(np.unique(known)),
            }
        )
    columns = (
        Column("number", "Number"),
        Column("today", "Today", kind="number"),
        Column("unit", "Unit"),
        Column("low", "Lowest value", kind="number"),
        Column("high", "Highest value", kind="number"),
        Column("varied_in", "Varied in"),
        Column("values", "Different values", kind="count"),
    )
    return Table("varied", "What was varied", columns, rows)


def _today_unit(varied: Varied) -> str:
    """The unit of today's value, with a word where it is not the same in every month."""
    if len({value for _, value in varied.today}) == 1:
        return varied.unit
    return f"{varied.unit}, {varied.today[0][0]}; other months differ".removeprefix(", ")


def thinned(count: int, most: int) -> list[int]:
    """At most so many places of a list, evenly spaced, first and last among them.

    >>> thinned(5, 9), thinned(9, 3), thinned(0, 3)
    ([0, 1, 2, 3, 4], [0, 4, 8], [])
    """
    if count <= most:
        return list(range(count))
    return [round(place * (count - 1) / (most - 1)) for place in range(most)]


def how_words(sweep: Sweep) -> str:
    """How many cases, of how many numbers, and how they came about."""
    way = WAYS.get(sweep.cases.how, ", a table of {}")
    return f"{counted(len(sweep), 'case')}{way.format(counted(len(sweep.cases.varied), 'number'))}"


def stays(sweep: Sweep) -> bool:
    """Whether the margin is the same in every case that has a plan."""
    margins = sweep.margin[planned(sweep)]
    return bool(len(margins)) and float(np.ptp(margins)) <= NOTHING_MOVES * abs(today_margin(sweep))


def note_sentences(sweep: Sweep, longest: int = 200) -> list[str]:
    """What the cases' note says (the seed of draws), without sentences too long to be read."""
    return [f"{part.rstrip('.')}." for part in sweep.cases.note.split(". ") if part and len(part) <= longest]


# ---------------------------------------------------------------------------------- readings


def reading_of(sweep: Sweep, name: str) -> Values:
    """A reading of each case. Raises `ValueError` with the nearest name where it was not read out."""
    names = sweep.read_out.names
    if name not in names:
        raise ValueError(f"`{name}` was not read out of this sweep; {near_name(name, names)}".removesuffix("; "))
    return sweep.readings[:, names.index(name)]


def readings_of(sweep: Sweep, head: str) -> list[Reading]:
    """Readings of one kind: those whose names begin with a word."""
    return [reading for reading in sweep.read_out.readings if reading.name.startswith(f"{head}.")]


def todays_readings(sweep: Sweep) -> dict[str, float]:
    """The same readings of today's plan."""
    arrays, lp, solution = sweep.read_out.arrays, sweep.base.lp, sweep.base.solution
    shares = shares_of(solution.activity[arrays.share_rows], lp.row_high[arrays.share_rows])[None]
    values = read_values(arrays, solution.x[None], solution.row_dual[None], shares)[0]
    return {name: float(value) for name, value in zip(sweep.read_out.names, values, strict=True)}


def bought_from(sweep: Sweep) -> float:
    """The amount, kt, above which a source counts as bought: one figure of a small share of all that is bought today."""
    today = todays_readings(sweep)
    total = sum(today[reading.name] for reading in readings_of(sweep, "bought"))
    return float(f"{BOUGHT_SHARE * total:.0e}") if total > 0 else 0.0


def changing_readings(sweep: Sweep, readings: Sequence[str] | None = None, most: int = 6) -> list[str]:
    """Readings to show along a number: those asked for, or the feeds bought (products sold) that change, the most first.

    Raises `ValueError` for one that was not read out.
    """
    if readings is not None:
        for name in readings:
            reading_of(sweep, name)
        return list(readings)
    good, least = planned(sweep), bought_from(sweep)
    for head in ("bought", "sold"):
        spans = {r.name: _span(reading_of(sweep, r.name)[good]) for r in readings_of(sweep, head) if r.unit == "kt"}
        changing = [name for name, span in spans.items() if span > least]
        if changing:
            return sorted(changing, key=lambda name: -spans[name])[:most]
    return []


def _span(values: Values) -> float:
    known = values[np.isfinite(values)]
    return float(known.max() - known.min()) if len(known) else 0.0


def reading_column(sweep: Sweep, name: str) -> Column:
    """The column of a reading in a table."""
    reading = next(one for one in sweep.read_out.readings if one.name == name)
    kind = {"sum": "quantity", "share": "share", "worth": "price"}[reading.kind]
    head, _, rest = name.partition(".")
    return Column(name, f"{head} {in_words(rest)}", "" if kind == "share" else reading.unit, kind)


def or_none(value: float) -> float | None:
    """A number for a table: nothing for what is not a number."""
    return float(value) + 0.0 if math.isfinite(value) else None
