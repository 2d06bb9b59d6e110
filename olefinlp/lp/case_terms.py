"""Prices and limits of another case on a program that is built already.

Cases that differ in prices, availability and limits share every coefficient; then a case is nothing
but another cost vector and other bounds. `same_program` says whether that is so, `case_terms` gives them.
"""

from __future__ import annotations

import dataclasses
import math
from dataclasses import dataclass

import numpy as np

from olefinlp.inputs.case import Case
from olefinlp.lp.certificate import Bounds, terms_of
from olefinlp.lp.compile import Floats, Label, LabelledLp, PriceMap

MAY_DIFFER = frozenset(
    ("scenario", "periods", "prices", "inputs", "limits", "tier_size", "sale_size", "opening", "fixed_use", "fixed_costs")
)
"""Fields of a case that are prices, bounds or record; all others are coefficients or the shape of the program."""


@dataclass(frozen=True)
class CaseTerms:
    """A case on a shared program: its costs (all columns), and the bounds that differ from the program's."""

    cost: Floats
    rows: Bounds
    columns: Bounds


def same_program(base: Case, other: Case) -> bool:
    """Whether two cases differ in prices and bounds alone."""
    fields = (field.name for field in dataclasses.fields(Case) if field.name not in MAY_DIFFER)
    alike = all(getattr(base, name) == getattr(other, name) for name in fields)
    keys = all(
        getattr(base, name).keys() == getattr(other, name).keys() for name in ("limits", "prices", "tier_size", "sale_size")
    )
    return alike and keys and base.months == other.months and _hours(base) == _hours(other)


def _hours(case: Case) -> list[float]:
    return [period.hours for period in case.periods]


class SharedProgram:
    """The program of one case, and what turns another case into terms on it; worked out once.

    `prices` is the price map of the base (`compile_prices`).
    """

    def __init__(self, base: Case, lp: LabelledLp, prices: PriceMap) -> None:
        self.base, self.lp = base, lp
        self.items = list(prices)
        self.rates = np.array([base.rate(*key) for key in self.items])
        self.counts = np.array([len(columns) for columns, _ in prices.values()], dtype=np.intp)
        self.columns = np.concatenate([columns for columns, _ in prices.values()] or [np.zeros(0, dtype=np.int32)])
        self.coefficients = np.concatenate([coefficients for _, coefficients in prices.values()] or [np.zeros(0)])

    def terms(self, other: Case) -> CaseTerms | None:
        """The terms of a case; None where it needs a program of its own."""
        base, lp = self.base, self.lp
        if not same_program(base, other):
            return None
        rows = _limit_rows(lp, other)
        there = _balance_rows(lp, base, other)
        if rows is None or there is None:
            return None
        return CaseTerms(lp.cost + self.cost_change(other), rows | there, _step_columns(lp, base, other))

    def cost_change(self, other: Case) -> Floats:
        """What the prices of another case add to the cost of every column; items that only the base has keep their price."""
        known = other.prices
        rates = np.array([other.rate(*key) if key in known else rate for key, rate in zip(self.items, self.rates, strict=True)])
        change = np.repeat(rates - self.rates, self.counts)
        summed: Floats = np.bincount(self.columns, change * self.coefficients, len(self.lp.columns)).astype(float)
        return summed


def _step_columns(lp: LabelledLp, base: Case, other: Case) -> dict[int, tuple[float, float]]:
    """Ranges of the columns that are price steps, where their size differs."""
    columns: dict[int, tuple[float, float]] = {}
    for name, sizes, before in (("bought", other.tier_size, base.tier_size), ("sold", other.sale_size, base.sale_size)):
        if sizes == before:
            continue
        for (item, step, month), size in sizes.items():
            column = lp.column_at[name, item, str(step), month]
            if size != lp.high[column]:
                columns[column] = (0.0, size)
    return columns


def _limit_rows(lp: LabelledLp, other: Case) -> dict[int, tuple[float, float]] | None:
    """Bounds of the rows that limits are, where they differ; None where a limit that could be left out no longer can."""
    rows: dict[int, tuple[float, float]] = {}
    for limit in other.limits.values():
        low = -math.inf if limit.low is None else limit.low
        high = math.inf if limit.high is None else limit.high
        row = lp.row_at.get((f"{limit.family}_limit", *limit.key))
        if row is not None:
            if low != lp.row_low[row] or high != lp.row_high[row]:
                rows[row] = (low, high)
        elif not low <= 0.0 <= high:
            return None  # nothing of it can occur, so it had no row; now it asks for something
    return rows


def _balance_rows(lp: LabelledLp, base: Case, other: Case) -> dict[int, tuple[float, float]] | None:
    """Bounds of the balances in which a number stands: what a tank holds at first, what is used whatever is done."""
    rows: dict[int, tuple[float, float]] = {}
    changed: dict[Label, float] = {}
    for item, data in other.stocks.items():
        for line in data.parcels if data.is_feed else (item,):
            if other.opening.get(line, 0.0) != base.opening.get(line, 0.0):
                balance = "feed_balance" if data.is_feed else "cut_disposal"
                changed[balance, line, other.months[0]] = other.opening.get(line, 0.0)
    for (utility, month), used in other.fixed_use.items():
        if used != base.fixed_use.get((utility, month)):
            changed["utility_balance", utility, month] = -used
    for label, number in changed.items():
        row = lp.row_at.get(label)
        if row is None:
            return None
        rows[row] = (number, number)
    return rows


def with_terms(lp: LabelledLp, terms: CaseTerms) -> LabelledLp:
    """The program with the terms of a case; what was worked out of its matrix is kept."""
    full = terms_of(lp).with_(terms.cost, terms.rows, terms.columns, len(lp.rows))
    rows = len(lp.rows)
    other = dataclasses.replace(
        lp, cost=full.cost, row_low=full.low[:rows], row_high=full.high[:rows], low=full.low[rows:], high=full.high[rows:]
    )
    for name in ("by_row", "by_column"):
        if name in lp.__dict__:
            other.__dict__[name] = lp.__dict__[name]
    return other
