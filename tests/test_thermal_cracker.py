"""The textbook's thermal cracker: data read in restatements of Edgar, Himmelblau & Lasdon, Optimization of Chemical Processes,
2nd ed., McGraw-Hill 2001, Example 14.1; optimum, worth and reduced costs computed from those data by hand and by two solvers
(the printed solution table was not readable, so none of these results is claimed to be printed there).

By hand: the ethylene limit, 50,000 lb/h at 0.50, allows 100,000 lb/h of ethane cracked; 40 % of it comes back, so 60,000 are
fresh. Heat: 8364 · 100,000 + 20e6 Btu/h fired, 21,520 · 7,000 from methane: (856.4e6 − 150.64e6)/21,520 = 32,795.54 lb/h of
gas. A lb of ethane cracked sells 0.5 · 17.75 + 0.01 · (13.79 + 26.64 + 9.93) = 9.3786 cents, fresh 6.55 less.
Margin 2.8286 · 60,000 + 9.3786 · 40,000 − 5.38 · 32,795.54 = 368,420.0 cents/h.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import pytest
from plants import limit

from olefinlp.answers.plan import Plan
from olefinlp.lp.solver import solve

LB = 0.45359237e-6  # kt
CENT_PER_LB = 0.01 / 0.45359237e-3  # USD/t
BTU = 1.05505585262e-9  # TJ
EXACT = 1e-6


@pytest.fixture(scope="module")
def plan(shipped_plan: Callable[[str], Plan]) -> Plan:
    return shipped_plan("thermal_cracker.yaml")


def near(value: float) -> object:
    return pytest.approx(value, rel=EXACT)


def pounds(plan: Plan, mode: str) -> float:
    return plan.quantities.charged(f"cracker.{mode}.design", "hour") / LB


def test_margin_of_the_hour(plan: Plan) -> None:
    """3,684.20 USD = 368,420.0 cents (computed), unrounded prices and yields."""
    assert plan.margin == near(3684.20)
    assert plan.certificate.holds


def test_plan_of_the_hour(plan: Plan) -> None:
    """Fresh ethane 60,000 lb/h, recycled 40,000, natural gas 32,795.5 lb/h at 21,520 Btu/lb, no other feed (computed)."""
    assert plan.quantities.bought("ethane.purchase", "hour") / LB == near(60_000)
    assert pounds(plan, "ethane") == near(60_000)
    assert pounds(plan, "recycle_ethane") == near(40_000)
    gas = plan.quantities.value("trade", "natural_gas", "hour") / BTU / 21_520
    assert gas == near(705.76e6 / 21_520)
    assert round(gas, 1) == 32_795.5
    for feed in ("propane", "gas_oil", "natural_gasoline"):
        assert plan.quantities.bought(f"{feed}.purchase", "hour") == 0
    assert pounds(plan, "recycle_propane") == 0


def test_worth_of_the_ethylene_limit(plan: Plan) -> None:
    """(2.8286 · 60,000 + 9.3786 · 40,000 − 5.38 · (8364 − 1506.4)/21,520 · 100,000)/50,000 = 7.4684 cents/lb (computed)."""
    row = limit(plan, "unit load", "ethylene")
    assert row["state"] == "at maximum"
    assert row["worth_unit"] == "USD/lb"
    assert 100 * row["worth"] == near((2.8286 * 60_000 + 9.3786 * 40_000 - 5.38 * 685.76e6 / 21_520) / 50_000)
    assert round(100 * row["worth"], 4) == 7.4684
    assert row["rate"] == row["worth"]
    assert row["maximum"] == near(50_000)
    for other in ("cracker", "propylene"):
        assert limit(plan, "unit load", other)["worth"] == 0


@pytest.mark.parametrize(("feed", "cents"), [("propane", -1.5312), ("gas_oil", -3.9751), ("natural_gasoline", -0.6532)])
def test_reduced_costs_of_other_feeds(plan: Plan, feed: str, cents: float) -> None:
    """Cents per lb bought and cracked (computed, four decimals). A lb bought is a lb charged, and both stand at zero, so what
    forcing it in costs is the sum of the two reduced costs, however the solver splits it between them."""
    q = plan.quantities
    forced = q.reduced_cost("bought", f"{feed}.purchase", "1", "hour") + q.reduced_cost(
        "charge", f"cracker.{feed}.design", feed, "hour"
    )
    assert round(forced / CENT_PER_LB, 4) == cents


def test_forced_feed_costs_its_reduced_cost(plan: Plan) -> None:
    """One lb of natural gasoline that must be taken: the margin falls by 0.6532 cents (the same figure by a second solve)."""
    lp = plan.lp
    column = lp.column_at["bought", "natural_gasoline.purchase", "1", "hour"]
    low = lp.low.copy()
    low[column] = LB
    forced = solve(replace(lp, low=low)).solution
    assert forced is not None
    assert round(100_000 * (forced.objective - plan.solution.objective), 4) == -0.6532


PRINTED = {
    "ethane": 2.84,
    "propane": -0.22,
    "gas_oil": -3.33,
    "natural_gasoline": 1.09,
    "recycle_ethane": 9.39,
    "recycle_propane": 9.51,
}


def test_the_plan_at_printed_coefficients(plan: Plan) -> None:
    """The rounded objective coefficients of the example, gas at 5.38 cents/lb: 369,560.0 cents/h (computed)."""
    gas = plan.quantities.value("trade", "natural_gas", "hour") / BTU / 21_520
    cents = sum(value * pounds(plan, feed) for feed, value in PRINTED.items()) - 5.38 * gas
    assert cents == near(369_560.0)


def test_printed_coefficients_choose_the_same_plan(plan: Plan) -> None:
    """Rounding added 0.0114 cents/lb to fresh and recycled ethane, so 368,420 + 0.0114 · 100,000 = 369,560 for the same plan,
    and 0.0114/0.50 to the worth of ethylene: 7.4684 + 0.0228 = 7.4912 cents/lb (computed)."""
    lp, cost = plan.lp, plan.lp.cost.copy()
    for feed in ("ethane", "recycle_ethane"):
        cost[lp.column_at["charge", f"cracker.{feed}.design", feed, "hour"]] += 0.0114 * CENT_PER_LB
    again = solve(replace(lp, cost=cost)).solution
    assert again is not None
    assert 100_000 * again.objective == near(369_560.0)
    worth = again.row_dual[lp.row_at["unit_load_limit", "ethylene", "hour"]] / CENT_PER_LB
    assert round(float(worth), 4) == 7.4912
    assert again.x[lp.column_at["bought", "ethane.purchase", "1", "hour"]] / LB == near(60_000)
