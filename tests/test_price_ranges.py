"""How far a single price may go before another plan is better: checked by planning again on both sides of every end."""

from __future__ import annotations

import math
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from plants import write

from olefinlp import make_plan, read_scenario
from olefinlp.answers.curves import cost_direction
from olefinlp.answers.plan import Plan
from olefinlp.answers.price_ranges import PriceRange, price_ranges
from olefinlp.inputs.prices import AMOUNT, NUMBER, SHARE, typed_of
from olefinlp.lp.solver import solve

SMALL = 1e-4


@pytest.fixture(scope="module")
def ranges(march: Plan) -> dict[str, PriceRange]:
    return {one.item: one for one in price_ranges(march)}


def held_and_best(plan: Plan, one: PriceRange, typed: float) -> tuple[float, float]:
    """What the plan earns at a typed number, and the best margin there, from a program solved on its own."""
    from dataclasses import replace

    case = plan.quantities.case
    scale = {NUMBER: one.factor, AMOUNT: 1.0, SHARE: case.prices[one.of, one.month].value if one.of else 0.0}[one.kind]
    step = (typed - one.typed) * scale
    cost = plan.lp.cost + step * cost_direction(case, plan.price_map, one.item, (one.month,), len(plan.lp.columns))
    outcome = solve(replace(plan.lp, cost=cost))
    assert outcome.solution is not None
    return float(cost @ plan.solution.x) + plan.lp.offset, outcome.solution.objective


def test_the_plan_stays_the_best_up_to_each_end_and_no_farther(march: Plan, ranges: dict[str, PriceRange]) -> None:
    money = sum(abs(line.amount) for line in march.lines)
    ends = 0
    for one in ranges.values():
        for end, outwards in ((one.low, -1.0), (one.high, 1.0)):
            if not math.isfinite(end):
                continue
            ends += 1
            held, best = held_and_best(march, one, end)
            assert best == pytest.approx(held, abs=1e-8 * money), (one.item, end)
            past = end + outwards * max(abs(end), 1.0) * 0.02
            held, best = held_and_best(march, one, past)
            assert best > held + 1e-8 * money, (one.item, past)
    assert ends > 50


def test_the_plan_stays_the_best_as_far_as_was_looked(march: Plan, ranges: dict[str, PriceRange]) -> None:
    money = sum(abs(line.amount) for line in march.lines)
    for one in ranges.values():
        for end, looked in ((one.low, one.looked[0]), (one.high, one.looked[1])):
            if math.isinf(end):
                held, best = held_and_best(march, one, looked)
                assert best == pytest.approx(held, abs=1e-8 * money), (one.item, looked)


def test_known_ranges_of_the_demo_month(ranges: dict[str, PriceRange]) -> None:
    """Full-range naphtha between 523.8 and 534.7 USD/t: invented demo, worked out independently of this package."""
    naphtha = ranges["feeds.full_range_naphtha.spot_cargo"]
    assert (round(naphtha.low, 1), round(naphtha.high, 1), naphtha.unit) == (523.8, 534.7, "USD/t")
    assert naphtha.quantity == pytest.approx(-47.558, abs=1e-3)
    gas_oil = ranges["feeds.gas_oil.spot_barge"]
    assert (gas_oil.quantity, gas_oil.high) == (0.0, math.inf)


def test_a_relative_price_is_typed_as_it_is_written(ranges: dict[str, PriceRange], march: Plan) -> None:
    export, grade = ranges["outlets.fuel_gas_export"], ranges["outlets.chemical_grade_propylene"]
    assert (export.kind, export.typed, export.of) == (SHARE, 0.8, "utilities.natural_gas")
    assert (grade.kind, grade.of, grade.unit) == (AMOUNT, "outlets.polymer_grade_propylene", "USD/t")
    price = march.quantities.case.prices["outlets.polymer_grade_propylene", "2031-03"]
    assert typed_of(price) == (NUMBER, 39.0, "USc/lb", price.factor)


def test_a_price_that_moves_others_counts_them(march: Plan, ranges: dict[str, PriceRange]) -> None:
    """The export leans on natural gas: at another gas price both move, and the range is that of both."""
    gas = ranges["utilities.natural_gas"]
    assert gas.quantity == 0.0  # none is bought itself
    held, best = held_and_best(march, gas, gas.high * 1.05)
    assert best > held


def test_a_plan_with_an_equal_beside_it_has_no_room_on_that_side(tmp_path: Path) -> None:
    """Two sources at one price: any cent dearer, the other is bought. By hand: the range ends at today's price above.

    100 % of 10 kt of furnace capacity is used; naphtha a and naphtha b cost the same 500 USD/t, and each alone could
    fill it. The plan buys some split of them: dearer by any amount, what is bought of it is replaced.
    """
    path = write(
        tmp_path,
        yields="feed, severity, ethylene, residue\nnaphtha, base, 40, 60",
        modes="group, feed, severity, charge\nfurnaces, naphtha, base, 10",
        prices={"ethylene": 1200, "residue": 200},
        scenario={"feeds": {"naphtha": {name: {"max": "100 kt", "price": "500 USD/t"} for name in ("a", "b")}}},
    )
    plan = make_plan(read_scenario(path))
    offers = [one for one in price_ranges(plan) if one.item.startswith("feeds.")]
    bought = [one for one in offers if one.quantity]
    assert bought
    assert [one.high for one in bought] == pytest.approx([500.0] * len(bought), abs=1e-6)
    assert [one.low for one in offers if not one.quantity] == pytest.approx([500.0] * (2 - len(bought)), abs=1e-6)


def test_ranges_do_not_depend_on_what_was_asked_before(march: Plan, ranges: dict[str, PriceRange]) -> None:
    from olefinlp import break_even_prices

    fresh = make_plan(march.scenario)
    break_even_prices(fresh)
    assert {one.item: (one.low, one.high) for one in price_ranges(fresh)} == {
        item: (one.low, one.high) for item, one in ranges.items()
    }


@pytest.mark.slow
def test_every_shipped_plan_has_ranges_around_its_prices(every_plan: Plan) -> None:
    for one in price_ranges(every_plan):
        assert one.low <= one.typed <= one.high, one.item
        assert one.low <= one.looked[0] <= one.typed or math.isinf(one.low), one.item


def test_effects_of_typed_prices_sum_to_the_change_of_the_plans_margin(march: Plan, ranges: dict[str, PriceRange]) -> None:
    """Σ quantity × change of the effective price is what the plan itself would earn more: what a spreadsheet adds up."""
    changes = {"feeds.condensate.spot_cargo": 61.5, "utilities.natural_gas": 5.2, "outlets.polymer_grade_propylene": 39.4}
    items: dict[str, Any] = {}
    for item, number in changes.items():
        price = march.quantities.case.prices[item, "2031-03"]
        items[item] = f"{number} {price.unit}"
    from olefinlp.inputs.case_rows import CaseCell, CaseName, CaseRow, written_cases
    from olefinlp.inputs.cases import case_set
    from olefinlp.inputs.findings import Findings, Place

    place = Place("typed")
    rows = [
        CaseRow(place, {"item": item, "unit": text.partition(" ")[2]}, {"typed": CaseCell(float(text.split()[0]), place)})
        for item, text in items.items()
    ]
    findings = Findings()
    written = written_cases(rows, [CaseName("typed", place)], march.scenario, findings)
    scenario = case_set(march.scenario, written, findings, "typed").cases[0].scenario
    assert scenario is not None
    case, other = march.quantities.case, scenario.case
    moved = sum(
        one.quantity * (other.prices[one.item, one.month].value - case.prices[one.item, one.month].value)
        for one in ranges.values()
    )
    cost = march.lp.cost + np.array(0.0)
    for key, (columns, coefficients) in march.price_map.items():
        cost[columns] += (other.rate(*key) - case.rate(*key)) * coefficients
    assert moved == pytest.approx(float((cost - march.lp.cost) @ march.solution.x), rel=1e-9)
    assert abs(moved) > 1
