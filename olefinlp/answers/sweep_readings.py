"""What a sweep reads out of every case: names of columns, their units, and where the numbers stand in the program."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass

import numpy as np

from olefinlp.inputs.case import Case
from olefinlp.inputs.findings import near_name
from olefinlp.lp.compile import LabelledLp
from olefinlp.lp.sweep import Readings, sums_of

MARGIN, HELD = "margin", "held"
DEFAULT = ("margin", "feeds", "products", "loads", "worths")


@dataclass(frozen=True, slots=True)
class Reading:
    """One column of the results: a sum of values of the program, a share of a maximum, or the worth of a limit."""

    name: str
    unit: str
    kind: str
    columns: tuple[int, ...] = ()
    row: int = -1
    scale: float = 1.0


@dataclass(frozen=True)
class ReadOut:
    """The columns of the results in order, and the same for the solver's loop."""

    readings: tuple[Reading, ...]
    arrays: Readings

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the columns."""
        return tuple(reading.name for reading in self.readings)

    @property
    def units(self) -> dict[str, str]:
        """Unit of each column."""
        return {reading.name: reading.unit for reading in self.readings}


def read_out(case: Case, lp: LabelledLp, measures: Iterable[str] = DEFAULT) -> ReadOut:
    """What the measures mean for a program.

    Raises `ValueError` for an unknown measure, with the nearest.
    """
    found: list[Reading] = []
    for measure in dict.fromkeys(measures):
        if measure in (MARGIN, HELD):
            continue  # always there
        if measure not in MEASURES:
            raise ValueError(f"`{measure}` is no measure; {near_name(measure, [MARGIN, *MEASURES])}")
        found += MEASURES[measure](case, lp)
    return assembled(found)


def assembled(found: Iterable[Reading]) -> ReadOut:
    """Readings in the order of the arrays that they become."""
    ordered = sorted(found, key=lambda reading: KINDS.index(reading.kind))
    sums = [r for r in ordered if r.kind == "sum"]
    shares, worths = [r for r in ordered if r.kind == "share"], [r for r in ordered if r.kind == "worth"]
    arrays = Readings(
        sums=sums_of([r.columns for r in sums], [r.scale for r in sums]),
        share_rows=np.array([r.row for r in shares], dtype=np.int32),
        worth_rows=np.array([r.row for r in worths], dtype=np.int32),
        worth_scales=np.array([r.scale for r in worths]),
    )
    return ReadOut(tuple(ordered), arrays)


UNITS = {"mass": "kt", "heat": "TJ LHV", "power": "GWh"}
KINDS = ("sum", "share", "worth")


def _columns(lp: LabelledLp, head: str, match: Callable[[tuple[str, ...]], bool]) -> tuple[int, ...]:
    return tuple(at for label, at in lp.column_at.items() if label[0] == head and match(label[1:]))


def _feeds(case: Case, lp: LabelledLp) -> Iterator[Reading]:
    for source in case.sources:
        yield Reading(f"bought.{source}", "kt", "sum", _columns(lp, "bought", lambda rest, s=source: rest[0] == s))  # type: ignore[misc]


def _products(case: Case, lp: LabelledLp) -> Iterator[Reading]:
    for outlet in case.sale_tiers:
        unit = "TJ LHV" if case.outlets[outlet][0] in case.heat_cuts else "kt"
        yield Reading(f"sold.{outlet}", unit, "sum", _columns(lp, "sold", lambda rest, o=outlet: rest[0] == o))  # type: ignore[misc]


def _charges(case: Case, lp: LabelledLp) -> Iterator[Reading]:
    for mode in case.modes:
        yield Reading(f"charged.{mode}", "kt", "sum", _columns(lp, "charge", lambda rest, m=mode: rest[0] == m))  # type: ignore[misc]


def _cuts(case: Case, lp: LabelledLp) -> Iterator[Reading]:
    for cut in case.cuts:
        yield Reading(f"made.{cut}", "kt", "sum", _columns(lp, "cut_made", lambda rest, c=cut: rest[0] == c))  # type: ignore[misc]


def _utilities(case: Case, lp: LabelledLp) -> Iterator[Reading]:
    for trade, (utility, _) in case.trades.items():
        unit = UNITS[case.scenario.plant.file.utilities[utility].measured_in]
        yield Reading(f"traded.{trade}", unit, "sum", _columns(lp, "trade", lambda rest, t=trade: rest[0] == t))  # type: ignore[misc]


def _stocks(case: Case, lp: LabelledLp) -> Iterator[Reading]:
    last = case.months[-1]
    for item, data in case.stocks.items():
        lines = data.parcels if data.is_feed else (item,)
        columns = tuple(lp.column_at["closing_stock", line, last] for line in lines)
        yield Reading(f"stock at the end.{item}", "kt", "sum", columns)


def _loads(case: Case, lp: LabelledLp) -> Iterator[Reading]:
    for family, head in (("unit_load", "load"), ("furnace_hours", "hours")):
        for limit in case.limits.values():
            row = lp.row_at.get((f"{family}_limit", *limit.key))
            if limit.family == family and limit.high is not None and row is not None:
                yield Reading(f"{head}.{limit.key[0]}{_month(case, limit.month)}", "share of the maximum", "share", (), row)


def _worths(case: Case, lp: LabelledLp) -> Iterator[Reading]:
    for limit in case.limits.values():
        row = lp.row_at.get((f"{limit.family}_limit", *limit.key))
        if row is not None:
            name = f"worth.{limit.label}{_month(case, limit.month)}"
            yield Reading(name, f"{case.currency}/{limit.worth_unit}", "worth", (), row, limit.worth_scale)


def _month(case: Case, month: str) -> str:
    """What a column of one month is called by, where there are several."""
    return f".{month}" if len(case.months) > 1 else ""


MEASURES: dict[str, Callable[[Case, LabelledLp], Iterator[Reading]]] = {
    "feeds": _feeds,
    "products": _products,
    "charges": _charges,
    "cuts": _cuts,
    "utilities": _utilities,
    "stocks": _stocks,
    "loads": _loads,
    "worths": _worths,
}
"""Measure → its columns. Quantities are sums over all months; loads and worths stand month by month."""
