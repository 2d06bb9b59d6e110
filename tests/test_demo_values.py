"""Brackwater by two routes: the package, and the rules written again in `independent_route` without any of its code.

26,808.667 and 26,274.560 kUSD: computed by a formulation of the same rules that shares nothing with either of the two
(an invented plant: no publication). The other margins were computed with `independent_route` and are written down so that
both routes cannot drift together. All margins are held to 1e-6 relative.
"""

from __future__ import annotations

from collections.abc import Callable

import pytest
from independent_route import route
from plants import limit

from olefinlp.answers.plan import Plan, make_plan

MARCH, APRIL, SIX = "brackwater_2031_03.yaml", "brackwater_2031_04.yaml", "brackwater_2031_03_to_08.yaml"
MARGIN = 1e-6
BINDING_IN_BOTH = ("gas_furnaces hours", "liquid_furnaces hours", "cracked_gas_compressor", "pygas_hydrotreater")
PRICE_CASES = {
    "Base": 26808.667,
    "High crude": 27897.791,
    "Low crude": 23712.786,
    "Cheap ethane": 28248.150,
    "Strong propylene": 30135.475,
    "Weak aromatics": 26761.877,
}


def near(value: float) -> object:
    return pytest.approx(value, rel=MARGIN)


@pytest.mark.parametrize(("scenario", "thousands"), [(MARCH, 26808.667), (APRIL, 26274.560), (SIX, 158039.949)])
def test_margin_by_both_routes(scenario: str, thousands: float, shipped_plan: Callable[[str], Plan]) -> None:
    """Six months hold six tanks at 0.35 USD/t on every closing stock, the last one too, which ends at its opening or above."""
    margin = shipped_plan(scenario).margin / 1000
    assert margin == near(thousands)
    assert margin == near(route(scenario).margin)


@pytest.mark.parametrize("scenario", [MARCH, APRIL, SIX])
def test_minimum_loads_do_not_decide(scenario: str) -> None:
    """The values above hold with and without the minimum loads of the recovery units."""
    assert route(scenario, minimum_loads=False).margin == near(route(scenario).margin)


@pytest.mark.parametrize(("price_case", "thousands"), PRICE_CASES.items())
def test_every_price_case_of_march(price_case: str, thousands: float, shipped_plan: Callable[[str], Plan]) -> None:
    plan = make_plan(shipped_plan(MARCH).scenario.with_(price_case=price_case))
    assert plan.margin / 1000 == near(thousands)
    assert plan.margin / 1000 == near(route(MARCH, price_case).margin)


def test_limits_that_bind_in_march(march: Plan) -> None:
    """Compressor, gas and liquid furnace hours, hydrotreater, and the take-or-pay of light naphtha."""
    for name in BINDING_IN_BOTH:
        assert limit(march, "furnace hours" if "hours" in name else "unit load", name)["state"] == "at maximum"
        assert limit(march, "furnace hours" if "hours" in name else "unit load", name)["worth"] > 0
    taken = limit(march, "take or pay", "light_naphtha contract")
    assert taken["state"] == "at minimum"
    assert taken["rate"] < 0 < taken["worth"]
    for unit in ("c2_splitter", "c3_splitter", "propylene_refrigeration", "demethaniser"):
        assert limit(march, "unit load", unit)["state"] == ""
    assert limit(march, "furnace hours", "flexible_furnaces")["state"] == ""


def test_liquid_furnace_hours_of_march(march: Plan) -> None:
    """3 furnaces · 744 h · (1 − 2.5 %) = 2,176.2 h; one more is worth 0.66 USD (two decimals as they are known)."""
    hours = limit(march, "furnace hours", "liquid_furnaces")
    assert hours["value"] == near(2176.2)
    assert hours["maximum"] == pytest.approx(3 * 744 * 0.975, rel=1e-12)
    assert round(hours["worth"], 2) == 0.66
    assert hours["worth_unit"] == "USD/furnace-hour"
    assert 1000 * route(MARCH).rate["2031-03 liquid_furnaces"] == pytest.approx(hours["worth"], rel=1e-4)


def test_purchases_of_march(march: Plan) -> None:
    """47.56 kt of full-range naphtha (two decimals as they are known), and every purchase as the other route has it."""
    assert round(march.quantities.bought("full_range_naphtha.spot_cargo", "2031-03"), 2) == 47.56
    other = route(MARCH).value
    for source in march.quantities.case.sources:
        feed, _, name = source.partition(".")
        expected = other[f"2031-03 bought {feed} {name}"]
        assert march.quantities.bought(source, "2031-03") == pytest.approx(expected, rel=1e-6, abs=1e-6)


def test_chemical_grade_is_made_in_april_only(march: Plan, shipped_plan: Callable[[str], Plan]) -> None:
    """April's fouled splitter makes it pay: 0.3843598 kt, computed by the independent route."""
    april = shipped_plan(APRIL)
    assert march.quantities.outlet("chemical_grade_propylene", "2031-03") == 0
    made = april.quantities.outlet("chemical_grade_propylene", "2031-04")
    other = route(APRIL).value
    assert made == pytest.approx(0.3843598, rel=1e-6)
    assert made == pytest.approx(sum(other[f"2031-04 {cut}_in_chemical_grade"] for cut in ("propylene", "propane")), rel=1e-6)
    assert limit(april, "unit load", "c3_splitter")["state"] == "at maximum"


def test_tanks_of_the_six_months(shipped_plan: Callable[[str], Plan]) -> None:
    """Tanks stay between minimum and maximum, end at the opening, and cost 0.35 USD/t on every closing stock (see money)."""
    plan = shipped_plan(SIX)
    months = plan.quantities.case.months
    opening = {"light_naphtha": 12, "full_range_naphtha": 14, "condensate": 6, "gas_oil": 2, "propane": 4, "n_butane": 3}
    for feed, kt in opening.items():
        held = [plan.quantities.stock(feed, month) for month in months]
        assert held[-1] >= kt - 1e-6
        lines = [line.amount for line in plan.lines if line.group == "stock holding" and line.item == feed]
        assert lines == [pytest.approx(-0.35 * stock, abs=1e-9) for stock in held]
