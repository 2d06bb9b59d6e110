"""Cases of a sweep whose prices make no valid scenario: looked for in all of them at once, judged by the checks of a scenario."""

from __future__ import annotations

import copy
import itertools
from collections.abc import Iterator, Mapping
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from olefinlp.inputs.case import Case
from olefinlp.inputs.findings import Findings, InputError
from olefinlp.inputs.scenario_prices import (
    check_negative_costs,
    check_negative_purchases,
    check_negative_trades,
    check_step_order,
    check_through_the_gate,
)
from olefinlp.lp.compile import Floats

Prices = Mapping[tuple[str, str], Floats]
"""(item, month) → effective price by case; of those that move."""
CHECKS = (check_step_order, check_through_the_gate, check_negative_purchases, check_negative_trades, check_negative_costs)
SOLD = ("outlets.", "contents.")


def in_a_line(error: InputError) -> str:
    """Why a case is no valid scenario."""
    return "; ".join(f"{f.path}: {f.message}" if f.path else f.message for f in error.findings if f.level == "error")


def refused_prices(case: Case, prices: Prices, count: int) -> dict[int, str]:
    """Cases (from 0) that the checks of prices refuse, and why: steps out of order, money from nothing, less than nothing
    paid for what has no maximum.
    """
    found: dict[int, str] = {}
    for at in np.flatnonzero(_doubtful(case, prices, count)).tolist():
        changed, findings = copy.copy(case), Findings()
        moved = {key: replace(case.prices[key], value=float(values[at])) for key, values in prices.items()}
        changed.prices = {**case.prices, **moved}
        for check in CHECKS:
            check(changed, findings)
        if findings.errors:
            found[at] = in_a_line(InputError(findings))
    return found


def _doubtful(case: Case, prices: Prices, count: int) -> NDArray[np.bool_]:
    """Cases that are worth a look: all others pass."""
    doubtful = np.zeros(count, dtype=bool)
    for (item, _), values in prices.items():
        if not item.startswith(SOLD):
            doubtful |= values < 0
    for cheaper, dearer in _ordered(case):
        for month in case.months:
            if (cheaper, month) in prices or (dearer, month) in prices:
                low, high = (prices.get((item, month), case.prices[item, month].value) for item in (cheaper, dearer))
                doubtful |= np.asarray(high < low)
    return doubtful


def _ordered(case: Case) -> Iterator[tuple[str, str]]:
    """Pairs of prices of which the first is not to be above the second: steps, and exports beside imports."""
    for label, source in case.sources.items():
        yield from itertools.pairwise(case.purchase_item(label, tier) for tier in source.tiers)
    for outlet, steps in case.sale_tiers.items():
        for before, after in itertools.pairwise(case.sale_item(outlet, tier) for tier in steps):
            yield after, before
    for out, (utility, kind) in case.trades.items():
        for into, (same, other) in case.trades.items():
            if kind == "exports" and other == "imports" and utility == same:
                yield f"utilities.{out}", f"utilities.{into}"
