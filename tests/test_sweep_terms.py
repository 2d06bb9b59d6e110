"""How the cases of a sweep stand in one program: straight lines, tables, what cannot be shared, and what is refused."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from plants import ONE_FEED, dense_lp, read
from sweeps import NAN, agrees_with_plans, cases_of, solved

from olefinlp.answers import sweep_terms
from olefinlp.answers.plan import Plan, make_plan
from olefinlp.answers.sweep_terms import PARTS, Moved, OwnPrograms, SweepTerms, lp_of
from olefinlp.inputs.findings import InputError
from olefinlp.inputs.scenario import Scenario
from olefinlp.lp.compile import Floats, LabelledLp
from olefinlp.lp.sweep import IMPOSSIBLE, NO_CASE, OPTIMAL, Block

INF = float("inf")
FACTOR, CAPACITY = "recovery_units.cracked_gas_compressor.factor", "recovery_units.cracked_gas_compressor.capacity"
TAKE, MOST = "feeds.ethane.contract.take_or_pay", "feeds.ethane.contract.max"
LEAST_SOLD, MOST_SOLD = "outlets.ethylene_contract.min", "outlets.ethylene_contract.max"
Read = Callable[[str], Scenario]


def terms(plan: Plan, values: dict[str, list[float]], percent: list[str] | None = None) -> SweepTerms:
    return SweepTerms(cases_of(plan.scenario, values, percent or []), plan)


def contents(lp: LabelledLp, block: Block, at: int) -> dict[str, Floats]:
    """All arrays of the program of one case of a block."""
    found = {part: getattr(lp, part).copy() for part in PARTS}
    for part, places, own in (
        ("cost", block.cost_columns, block.cost),
        ("row_low", block.rows, block.row_low),
        ("row_high", block.rows, block.row_high),
        ("low", block.columns, block.low),
        ("high", block.columns, block.high),
        ("value", block.entries, block.entry_values),
    ):
        found[part][places] = own[at]
    return found


def is_the_program_of_each_case(made: SweepTerms) -> None:
    """Entry by entry what the scenario of each case gives."""
    block = made.block(0, len(made.cases))
    for number in range(len(made.cases)):
        whole, put = lp_of(made.cases.scenario_of(number)), contents(made.lp, block, number)
        for part in PARTS:
            assert put[part] == pytest.approx(getattr(whole, part), rel=1e-11, abs=1e-13), (number, part)


# ---------------------------------------------------------------------------------- lines and tables


@pytest.mark.parametrize(
    ("path", "values", "straight"),
    [
        (MOST, [20, 25, 33, 40], True),
        (FACTOR, [0.8, 0.9, 1.05], True),
        ("furnace_groups.liquid_furnaces.outage_hours", [0, 50, 100, 300], True),
        ("yields.thermal.full_range_naphtha.high.ethylene", [27, 28, 30], True),
        ("modes.gas_furnaces.ethane.high.run_length", [400, 700, 1500], False),
        ("modes.gas_furnaces.ethane.high.charge", [18, 20, 25], False),
    ],
)
def test_a_number_acts_along_a_line_or_value_by_value(march: Plan, path: str, values: list[float], straight: bool) -> None:
    made = terms(march, {path: values})
    assert made.moved[0] and {moved.slope is not None for moved in made.moved[0]} == {straight}
    is_the_program_of_each_case(made)


@pytest.mark.slow
def test_changes_in_per_cent_are_of_what_stands_in_each_month(shipped_plan: Callable[[str], Plan]) -> None:
    six = shipped_plan("brackwater_2031_03_to_08.yaml")
    limit, price = "outlets.crude_c4_contract.max", "feeds.full_range_naphtha.spot_cargo"
    made = terms(
        six, {limit: [-10, NAN, 5], price: [3, -3, NAN], "stocks.propane.max": [20, 0, 10]}, [limit, price, "stocks.propane.max"]
    )
    assert all(moved.slope is not None for several in made.moved.values() for moved in several)
    is_the_program_of_each_case(made)


@pytest.mark.slow
def test_one_value_for_months_that_differ_is_tabulated(shipped_plan: Callable[[str], Plan]) -> None:
    """Today is not on the line: 17.5 kt in most months, 11 kt in August."""
    made = terms(shipped_plan("brackwater_2031_03_to_08.yaml"), {"outlets.crude_c4_contract.max": [12, 14, 16]})
    assert {moved.slope is None for moved in made.moved[0]} == {True}
    is_the_program_of_each_case(made)


@pytest.mark.parametrize("path", ["yields.thermal.full_range_naphtha.high.ethylene", MOST, FACTOR])
def test_today_alone_moves_nothing(march: Plan, path: str) -> None:
    """A yield of 28.85 wt% is 0.2885 of a tonne, of which 100 times is 28.850000000000005."""
    today = cases_of(march.scenario, {path: [NAN]}).varied[0].first
    assert terms(march, {path: [today]}).moved[0] == ()
    assert terms(march, {path: [NAN, NAN]}).moved[0] == ()


def test_no_cases_are_no_trouble(march: Plan) -> None:
    cases = replace(cases_of(march.scenario, {MOST: [1.0]}), values=np.empty((0, 1)))
    found = solved(cases)
    assert len(found) == 0 and len(found.to_frame()) == 0


def test_more_values_than_are_tabulated_get_programs_of_their_own(march: Plan, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(sweep_terms, "MOST_TABULATED", 3)
    path = "modes.gas_furnaces.ethane.high.run_length"
    with pytest.raises(OwnPrograms, match=f"{path} does not act along a straight line, and has 4 values"):
        terms(march, {path: [500, 600, 700, 800]})
    found = solved(cases_of(march.scenario, {path: [500, 600, 700, 800]}))
    assert not found.shared and found.note.startswith("every case is solved on a program of its own: ")
    agrees_with_plans(found, [0, 3], most=0)


def test_a_moved_number_put_in_place() -> None:
    """Along 10 + 2 (v − 1), and by a table with an end that opens; no value, or one that is not known, changes nothing."""
    line = Moved("row_high", np.array([0]), np.array([10.0]), 1.0, np.array([2.0]), np.array([0.0, 4.0]), np.zeros((2, 1)))
    here = np.full((3, 1), 10.0)
    line.put(here, np.array([3.0, NAN, 1.0]))
    assert here.ravel().tolist() == [14.0, 10.0, 10.0]
    table = Moved(
        "high", np.array([0, 1]), np.array([10.0, INF]), 0.0, None, np.array([1.0, 2.0]), np.array([[11.0, 5.0], [INF, INF]])
    )
    here = np.tile([10.0, INF], (4, 1))
    table.put(here, np.array([2.0, 1.0, 7.0, NAN]))
    assert here.tolist() == [[INF, INF], [11.0, 5.0], [10.0, INF], [10.0, INF]]


def test_a_minimum_that_meets_its_maximum_is_not_above_it(march: Plan) -> None:
    """44 + slope × steps may end in …0000001: the case is as possible as its scenario."""
    above, high = np.nextafter(58.0, 60.0), np.array([58.0, 58.0, INF, 58.0, -INF])
    put = sweep_terms._not_above(np.array([above, 58.001, -INF, 57.0, -INF]), high)
    assert put.tolist() == [58.0, 58.001, -INF, 57.0, -INF]
    values = np.linspace(45.5, 58, 9)
    found = solved(cases_of(march.scenario, {LEAST_SOLD: values}))
    assert (found.status != NO_CASE).all() and found.status[-1] == OPTIMAL
    both = solved(cases_of(march.scenario, {LEAST_SOLD: values - 0.1, MOST_SOLD: values - 0.1}))
    assert set(both.status[both.status != OPTIMAL]) <= {IMPOSSIBLE}
    agrees_with_plans(both, np.flatnonzero(both.status == OPTIMAL)[::3])
    assert (both.status == OPTIMAL).sum() > 6


def test_a_minimum_above_its_maximum_in_one_case_is_named(march: Plan) -> None:
    """Each is possible beside today's other; together they are not."""
    found = solved(cases_of(march.scenario, {LEAST_SOLD: [50, 40], MOST_SOLD: [48, 52]}))
    assert found.status.tolist() == [IMPOSSIBLE, OPTIMAL]
    assert found.reason(0).startswith("limits clash: ethylene_contract")
    agrees_with_plans(found, [1])


# ---------------------------------------------------------------------------------- prices


def test_steps_out_of_order_are_refused(shipped_plan: Callable[[str], Plan]) -> None:
    """Steps of 335 and 372 EUR/t bought, of 905 and 838 EUR/t sold."""
    plan = shipped_plan("marram_point_2031_03.yaml")
    values = {"feeds.ethane.pipeline.tiers.1": [372, 373, 300, 300], "outlets.ethylene_sale.tiers.2": [838, 838, 906, 905]}
    found = solved(cases_of(plan.scenario, values), base=plan)
    assert found.status.tolist() == [OPTIMAL, NO_CASE, NO_CASE, OPTIMAL]
    agrees_with_plans(found, range(4))
    assert "step 2 costs 372 EUR/t, less than step 1 with 373" in found.reason(1)
    assert "step 2 pays 906 EUR/t, more than step 1 with 905" in found.reason(2)


def test_a_price_that_leans_on_one_that_leans_on_another(tmp_path: Path) -> None:
    """a = 100, b = 2 a + 0, c = b + 5: all follow a, and keep their own number when it is what varies."""
    prices = {"ethylene": 1200, "residue": 200}
    feeds = """
        indexes: {a: {price: 100 USD/t}, b: {price: {of: indexes.a, times: 2}}}
        feeds: {naphtha: {spot: {max: 2 kt, price: {of: indexes.b, plus: 5 USD/t}},
                          deal: {max: 1 kt, price: {of: indexes.a, times: 3}}}}
    """
    plan = make_plan(read(tmp_path, **{**ONE_FEED, "prices": prices}, scenario=feeds))
    values = {
        "indexes.a": [100, 110, NAN, 90, 120],
        "indexes.b": [2, NAN, 3, 1.5, 2],
        "feeds.naphtha.spot": [5, NAN, 0, 7, 1],
        "feeds.naphtha.deal": [NAN, 4, 2, NAN, 3],
    }
    made = terms(plan, values)
    found = made.effective(made.cases.values)
    assert found["feeds.naphtha.spot", "month"] == pytest.approx([205, 225, 300, 142, 241])
    assert found["feeds.naphtha.deal", "month"] == pytest.approx([300, 440, 200, 270, 360])
    is_the_program_of_each_case(made)


def test_a_price_that_makes_no_difference_to_the_program_is_passed_over(march: Plan) -> None:
    """Only what is priced in the objective moves a cost."""
    made = terms(march, {"outlets.crude_c4_contract.deduction": [0, 5]})
    assert len(made.block(0, 2).cost_columns) >= 1
    is_the_program_of_each_case(made)


# ---------------------------------------------------------------------------------- numbers that act on each other


def test_numbers_that_act_on_each_other_are_found(march: Plan) -> None:
    with pytest.raises(OwnPrograms, match="act on each other"):
        terms(march, {FACTOR: [0.9, 1.1], CAPACITY: [200, 240]})


@pytest.mark.parametrize("pair", [57, *(pytest.param(pair, marks=pytest.mark.slow) for pair in (0, 299))])
def test_a_pair_that_acts_together_in_one_case_alone_is_found(march: Plan, pair: int) -> None:
    """Of 300 cases one changes both; all others one of them: with chance alone it would be passed over."""
    factor, capacity = np.full(300, NAN), np.full(300, NAN)
    factor[::2], capacity[1::2] = 0.95, 220.0
    factor[pair], capacity[pair] = 0.9, 210.0
    with pytest.raises(OwnPrograms, match="act on each other"):
        terms(march, {FACTOR: list(factor), CAPACITY: list(capacity)})
    apart = factor.copy()
    apart[pair] = NAN
    assert terms(march, {FACTOR: list(apart), CAPACITY: list(capacity)}).moved


def test_a_pair_of_a_price_and_another_number_is_compared(march: Plan, monkeypatch: pytest.MonkeyPatch) -> None:
    """A price map that is not true of other yields: the comparison is what stands between it and wrong margins."""
    wrong = {key: (columns, 1.001 * own) for key, (columns, own) in march.price_map.items()}
    plan = make_plan(march.scenario)
    plan.__dict__["price_map"] = wrong
    price = np.full(200, NAN)
    price[101] = 50.0
    with pytest.raises(OwnPrograms):
        SweepTerms(cases_of(march.scenario, {"feeds.ethane.contract": [50.0] * 40}), plan)
    with pytest.raises(OwnPrograms):
        SweepTerms(cases_of(march.scenario, {"feeds.ethane.contract": list(price), MOST: [25.0] * 200}), plan)


@pytest.mark.parametrize("part", PARTS)
def test_the_comparison_sees_every_part_of_a_program(march: Plan, part: str, monkeypatch: pytest.MonkeyPatch) -> None:
    """One entry of a thousandth more in what is built whole, and the cases do not share a program."""
    there = sweep_terms.lp_of
    assert terms(march, {"feeds.ethane.contract": [40.0]})

    def off(scenario: Scenario) -> LabelledLp:
        lp = there(scenario)
        own = getattr(lp, part).copy()
        own[np.flatnonzero(np.isfinite(own) & (own != 0))[-1:]] *= 1.001
        if not np.array_equal(own, getattr(lp, part)):
            return replace(lp, **{part: own})
        own[-1] = 17.0
        return replace(lp, **{part: own})

    monkeypatch.setattr(sweep_terms, "lp_of", off)
    with pytest.raises(OwnPrograms, match="act on each other"):
        terms(march, {"feeds.ethane.contract": [40.0]})


def test_a_number_that_changes_what_is_in_the_program_is_not_shared(tmp_path: Path) -> None:
    """A minimum of 0 says nothing and is left out; from 0.5 kt it is a row."""
    scenario = read(tmp_path, **ONE_FEED, scenario="feeds: {naphtha: {spot: {max: 2 kt, min: 0 kt, price: 500 USD/t}}}")
    found = solved(cases_of(scenario, {"feeds.naphtha.spot.min": [0, 0.5, 1]}))
    if not found.shared:
        assert "changes what is in the program at all" in found.note
    agrees_with_plans(found, range(3), most=0)


def test_another_shape_is_seen() -> None:
    from olefinlp.lp.sweep import same_shape

    lp = dense_lp([1.0, 2.0], {("a",): (-INF, [1.0, 1.0], 4.0)})
    assert same_shape(lp, replace(lp, cost=np.array([3.0, 4.0]), row_high=np.array([9.0])))
    assert not same_shape(lp, dense_lp([1.0, 2.0], {("b",): (-INF, [1.0, 1.0], 4.0)}))
    assert not same_shape(lp, dense_lp([1.0, 2.0], {("a",): (-INF, [1.0, 0.0], 4.0)}))
    assert not same_shape(lp, replace(lp, offset=1.0))


# ---------------------------------------------------------------------------------- cases that are no valid scenario


def test_a_value_that_is_never_valid_is_a_row_with_its_reason(march: Plan) -> None:
    found = solved(cases_of(march.scenario, {MOST: [-3, 17.9, 18, 30]}))
    assert found.status.tolist() == [NO_CASE, NO_CASE, OPTIMAL, OPTIMAL]
    assert "`-3 kt` is below zero" in found.reason(0)
    assert "take-or-pay of 18 kt is more than can be bought, 17.9 kt" in found.reason(1)
    agrees_with_plans(found, range(4), most=0)


def test_two_values_that_go_together_though_neither_goes_with_today(march: Plan) -> None:
    """Today at most 30 kt, of which 18 kt are paid for whatever is taken. 10 of 15 kt is a contract like any other; the
    same values beside each other in the wrong way are none."""
    values = {MOST: [15, 15, 40, 16, NAN, 30], TAKE: [10, 16, 35, NAN, 29, 30]}
    found = solved(cases_of(march.scenario, values))
    assert found.shared
    assert found.status.tolist() == [OPTIMAL, NO_CASE, OPTIMAL, NO_CASE, OPTIMAL, OPTIMAL]
    assert agrees_with_plans(found, range(6), most=0)[0] >= 3


def test_two_values_that_each_go_with_today_but_not_together(march: Plan) -> None:
    """25 kt to be paid for are fewer than 30, and 20 kt more than 18; both at once are no contract, though a program
    would have a plan."""
    found = solved(cases_of(march.scenario, {TAKE: [25, 19, 25], MOST: [20, 20, 26]}))
    assert found.shared
    assert found.status.tolist() == [NO_CASE, OPTIMAL, OPTIMAL]
    assert "take-or-pay of 25 kt is more than can be bought, 20 kt" in found.reason(0)
    agrees_with_plans(found, range(3), most=0)


def test_a_minimum_and_a_maximum_that_move_together(march: Plan) -> None:
    """A contract of 20 to 30 kt in place of 44 to 58: neither end goes with the other of today."""
    found = solved(cases_of(march.scenario, {LEAST_SOLD: [20, 60, 50, 30], MOST_SOLD: [30, 70, 40, 100]}))
    assert found.shared
    expected = []
    for number in range(4):
        try:
            make_plan(found.cases.scenario_of(number))
            expected.append(OPTIMAL)
        except InputError:
            expected.append(NO_CASE)
    assert found.status.tolist() == expected and expected.count(OPTIMAL) >= 2
    agrees_with_plans(found, range(4), most=0)


def test_cases_that_are_apart_are_the_same_wherever_they_stand(march: Plan) -> None:
    most, take = np.full(140, NAN), np.full(140, NAN)
    most[[2, 138]], take[[2, 138]] = 15, 12
    cases = cases_of(march.scenario, {MOST: list(most), TAKE: list(take)})
    found, alone = solved(cases), solved(replace(cases, values=cases.values[2:3]))
    assert found.shared and alone.status[0] == OPTIMAL
    assert np.array_equal(found.readings[138], alone.readings[0], equal_nan=True)
    assert np.array_equal(found.readings[2], found.readings[138], equal_nan=True)


# ---------------------------------------------------------------------------------- labels and blanks


def test_a_blank_is_as_today(march: Plan) -> None:
    found = solved(cases_of(march.scenario, {"feeds.ethane.contract": [NAN, 38, NAN], MOST: [25, NAN, NAN]}))
    by_hand = [march.scenario.with_({MOST: "25 kt"}), found.cases.scenario_of(1), march.scenario]
    assert found.margin == pytest.approx([make_plan(scenario).margin / 1000 for scenario in by_hand], rel=1e-10)
