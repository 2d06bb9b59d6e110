"""The bridge between two plans: each margin by a solve of its own, sums that close, effects by hand."""

from __future__ import annotations

import itertools
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import pytest
from conftest import ROOT
from plants import ONE_FEED, planned

from olefinlp import make_plan, read_scenario
from olefinlp.answers import bridge as bridge_module
from olefinlp.answers.bridge import LIMITS_FIRST, ORDERS, PRICES_FIRST, Bridge, bridge, bridge_of, decimals
from olefinlp.answers.plan import Plan
from olefinlp.inputs.scenario import Scenario

BASE = "Base"
OTHERS = ("High crude", "Low crude", "Cheap ethane", "Strong propylene", "Weak aromatics")
LESS = {"outlets.polymer_grade_propylene.max": "18 kt", "feeds.full_range_naphtha.spot_cargo.max": "40 kt"}
OUTAGE = {"outages": [{"month": "2031-03", "group": "gas_furnaces", "hours": "600 h", "reason": "tube leak"}]}
BUYS = "feeds: {naphtha: {spot: {min: %s, max: %s, price: %s USD/t}}}"


@pytest.fixture(scope="module")
def month() -> Scenario:
    return read_scenario(ROOT / "scenarios" / "brackwater_2031_03.yaml")


@pytest.fixture(scope="module")
def plans(month: Scenario) -> dict[str, Plan]:
    """March at every price case."""
    return {case: make_plan(month.with_(price_case=case)) for case in (BASE, *OTHERS)}


@pytest.fixture(scope="module")
def tight(month: Scenario) -> dict[str, Plan]:
    """March with two maxima lowered and a furnace out, at two price cases."""
    return {case: make_plan(month.with_({**LESS, **OUTAGE}, price_case=case)) for case in (BASE, "High crude")}


def one_feed(
    folder: Path, ethylene: float, residue: float, naphtha: float, low: str = "5 kt", high: str = "8 kt", **parts: object
) -> Plan:
    """5 to 8 kt of a feed that gives 40 % ethylene and 60 % residue."""
    prices = {"ethylene": ethylene, "residue": residue}
    return planned(folder, **{**ONE_FEED, "prices": prices, **parts}, scenario=BUYS % (low, high, naphtha))


def near(value: float) -> object:
    return pytest.approx(value, rel=1e-7, abs=1e-6)


def closes(found: Bridge) -> None:
    """Every identity that holds in both orders."""
    steps = found.steps()
    assert abs(found.residual) <= 1e-6 * found.moved
    assert found.gain >= -1e-9 * found.moved
    assert found.old + found.price_effect + found.gain + found.limits_effect == near(found.new)
    assert found.price_effect == near(sum(effect.effect for effect in found.effects))
    assert steps[0].margin == found.old
    assert steps[-2].margin == near(found.new)
    assert sum(step.effect or 0.0 for step in steps[:-1]) == near(found.new - found.old)
    for before, after in itertools.pairwise(steps[:-2]):
        assert after.margin == near((before.margin or 0.0) + (after.effect or 0.0))


# ---------------------------------------------------------------------------------- prices only


def test_documented_sizes_of_base_to_strong_propylene(plans: dict[str, Plan]) -> None:
    """26,808.667 + 3,202.4 + 124.4 = 30,135.475 kUSD (invented demo, computed independently, printed to 0.1)."""
    found = bridge_of(plans[BASE], plans["Strong propylene"])
    assert found.old == pytest.approx(26_808.667, abs=0.06)
    assert found.price_effect == pytest.approx(3_202.4, abs=0.06)
    assert found.gain == pytest.approx(124.4, abs=0.06)
    assert found.new == pytest.approx(30_135.475, abs=0.06)
    assert found.limits_effect == 0
    assert found.same_limits


@pytest.mark.parametrize("case", OTHERS)
def test_margins_are_those_of_independent_plans(plans: dict[str, Plan], case: str) -> None:
    """Ends from the plans; the price effect is also what the old quantities earn at the new prices, line by line."""
    a, b = plans[BASE], plans[case]
    found = bridge_of(a, b)
    closes(found)
    assert (found.old, found.new) == (near(a.margin / 1000), near(b.margin / 1000))
    prices = b.scenario.case.prices
    again = sum(line.sign * line.factor * line.quantity * prices[line.price_item, line.month].value for line in a.lines)
    assert found.repriced == near(again)
    assert found.price_effect == near(again - a.margin / 1000)
    assert found.gain == near(b.margin / 1000 - again)


def test_no_gain_is_negative_and_bounds_hold_for_all_ordered_pairs(plans: dict[str, Plan]) -> None:
    """30 pairs in both orders: with the same limits both orders are one, and prices on the new plan bound the change."""
    gains = []
    for one, two in itertools.permutations(plans, 2):
        found = bridge_of(plans[one], plans[two])
        closes(found)
        assert found.same_limits
        assert found.highest is not None
        assert found.price_effect - 1e-6 <= found.new - found.old <= found.highest + 1e-6
        back = bridge_of(plans[two], plans[one])
        assert found.highest == near(-back.price_effect)
        reverse = bridge_of(plans[one], plans[two], LIMITS_FIRST)
        closes(reverse)
        assert (reverse.price_effect, reverse.gain, reverse.limits_effect) == (near(found.price_effect), near(found.gain), 0.0)
        gains.append(found.gain)
    assert len(gains) == 30
    assert max(gains) > 100


def test_a_plan_against_itself_is_all_zero(plans: dict[str, Plan]) -> None:
    found = bridge(plans[BASE], plans[BASE])
    assert found.bridge is not None
    assert found.bridge.same_limits
    assert (found.bridge.price_effect, found.bridge.gain, found.bridge.limits_effect) == (0.0, 0.0, 0.0)
    assert "No price differs." in found.sentences
    assert [row["step"] for row in found.table.rows][1] == "prices (none moves the margin)"


def test_relative_prices_count_at_what_they_come_to(shipped_scenario: Callable[[str], Scenario]) -> None:
    """An index that contracts lean on goes up by 10 USD/t at 0.92 EUR/USD: every tonne that leans on it costs its share more."""
    scenario = shipped_scenario("marram_point_2031_03.yaml")
    a = make_plan(scenario)
    number = next(row["number"] for row in a.prices.rows if row["item"] == "indexes.naphtha")
    b = make_plan(scenario.with_({"indexes.naphtha.price": f"{number + 10} USD/t"}))
    found = bridge_of(a, b)
    closes(found)
    bought = {(row["feed"], row["source"]): row["bought"] for row in a.feeds.rows}
    leaning = (
        bought["light_naphtha", "contract"] + bought["light_naphtha", "spot_cargo"] + 0.97 * bought["heavy_naphtha", "cargo"]
    )
    feeds = {item: value for item, value in found.items.items() if item.startswith("feeds.")}
    assert sum(feeds.values()) == near(-leaning * 10 * 0.92)


# ---------------------------------------------------------------------------------- by hand


def test_price_effect_and_gain_by_hand(tmp_path: Path) -> None:
    """5 to 8 kt of feed at 500, ethylene 40 % at 1200, residue 60 % at 200: 480 + 120 − 500 = 100 a tonne, so 8 kt: 800 kUSD.

    At 900, 250 and 650 a tonne loses 360 + 150 − 650 = −140, so 5 kt are bought: −700. On the old plan ethylene does
    3.2 · −300 = −960, residue 4.8 · 50 = 240, feed −8 · 150 = −1200: −1920 in all; 800 − 1920 = −1120, and buying 3 kt less
    at −140 gains 420. On the new plan prices do 5/8 of −1920 = −1200, the upper bound of −1500.
    """
    a, b = one_feed(tmp_path / "a", 1200, 200, 500), one_feed(tmp_path / "b", 900, 250, 650)
    found = bridge_of(a, b)
    closes(found)
    assert (found.old, found.repriced, found.new) == (near(800), near(-1120), near(-700))
    assert found.items == {
        "feeds.naphtha.spot": near(-1200),
        "outlets.ethylene_sale": near(-960),
        "outlets.residue_sale": near(240),
    }
    assert (found.gain, found.highest) == (near(420), near(-1200))
    assert found.names == ("first", "second")
    answer = bridge(a, b)
    assert (
        answer.sentences[0]
        == "first 800.00 − 1,920.00 by prices on the old plan + 420.00 by re-optimising = second −700.00 kUSD."
    )
    changes = {(row["kind"], row["item"]): (row["before"], row["after"]) for row in answer.tables[2].rows}
    assert changes["bought", "naphtha spot"] == (near(8), near(5))
    assert changes["sold", "ethylene_sale"] == (near(3.2), near(2.0))
    assert changes["charged", "furnaces naphtha base"] == (near(8), near(5))


def test_both_orders_by_hand(tmp_path: Path) -> None:
    """As above, but the second plan may buy 10 kt at most and must buy 4 at least.

    Prices first: 800 − 1920 + 420, then 1 kt less at −140 loses nothing but 140: limits + 140 = −560.
    Limits first: 2 kt more at 100 gain 200; on those 10 kt prices do −240 a tonne, −2400; 6 kt less at −140 gain 840: −560.
    """
    a = one_feed(tmp_path / "a", 1200, 200, 500)
    b = one_feed(tmp_path / "b", 900, 250, 650, "4 kt", "10 kt")
    first, reverse = bridge_of(a, b), bridge_of(a, b, LIMITS_FIRST)
    closes(first)
    closes(reverse)
    assert not first.same_limits
    assert first.highest is None
    assert (first.price_effect, first.gain, first.limits_effect) == (near(-1920), near(420), near(140))
    assert (reverse.limits_effect, reverse.price_effect, reverse.gain) == (near(200), near(-2400), near(840))
    assert first.new == near(-560)
    kinds = [step.kind for step in reverse.steps()]
    assert kinds == ["old", "limits", "price", "price", "price", "gain", "new", "residual"]
    assert [step.kind for step in first.steps()][-4:] == ["gain", "limits", "new", "residual"]
    assert sum(effect.quantity for effect in reverse.effects if effect.item == "feeds.naphtha.spot") == near(-10)


def test_the_thermal_cracker_by_hand(shipped_plan: Callable[[str], Plan]) -> None:
    """60,000 lb/h of fresh ethane at a cent a lb more: 600 USD an hour less (0.6 kUSD) on the plan that stays.

    A lb of fresh ethane earns 2.8286 cents, of which 1.8286 are left; the plan stays, so re-optimising gains nothing.
    """
    a = shipped_plan("thermal_cracker.yaml")
    price = next(row["price_written"] for row in a.feeds.rows if row["feed"] == "ethane")
    number, unit = price.split()
    b = make_plan(
        a.scenario.with_({"feeds.ethane.purchase.price": f"{float(number) + (1 if unit == 'USc/lb' else 0.01)} {unit}"})
    )
    found = bridge_of(a, b)
    closes(found)
    assert found.items["feeds.ethane.purchase"] == near(-0.6)
    assert (found.price_effect, found.gain) == (near(-0.6), 0.0)
    assert any("stays the best" in sentence for sentence in bridge(a, b).sentences)


def test_a_shortfall_counts_with_its_share(tmp_path: Path) -> None:
    """6 kt that must be paid at 25 %: at 160 + 60 a tonne against 650 none is taken, and 6 · 0.25 · 650 = 975 are paid.

    40 USD/t more cost 6 · 0.25 · 40 = 60 kUSD, and still none is taken.
    """
    offer = "feeds: {naphtha: {contract: {max: 8 kt, take_or_pay: 6 kt, shortfall_pays: 25 %%, price: %s USD/t}}}"
    parts = {**ONE_FEED, "prices": {"ethylene": 400, "residue": 100}}
    a, b = (planned(tmp_path / str(price), **parts, scenario=offer % price) for price in (650, 690))
    found = bridge_of(a, b)
    closes(found)
    assert (found.old, found.new) == (near(-975), near(-1035))
    assert (found.items["feeds.naphtha.contract"], found.gain) == (near(-60), 0.0)
    assert "not taken" in bridge(a, b).tables[1].note


def test_pieces_count_in_thousands(month: Scenario, plans: dict[str, Plan]) -> None:
    """2000 USD a decoke more on as many decokes as the furnaces need."""
    a = plans[BASE]
    b = make_plan(month.with_({"variable_costs.decoking.cost": "20000 USD"}))
    found = bridge_of(a, b)
    closes(found)
    decokes = sum(row["decokes"] for row in a.furnaces.rows)
    assert decokes > 1
    assert found.price_effect == near(-2 * decokes)
    assert {effect.unit for effect in found.effects if effect.before != effect.after} == {"thousand pieces"}


# ---------------------------------------------------------------------------------- limits, months, plants


@pytest.mark.parametrize("order", ORDERS)
def test_changed_limits_and_prices_at_once(plans: dict[str, Plan], tight: dict[str, Plan], order: str) -> None:
    """Margins on the way are those of plans made on their own: z(p1, b0) March at High crude, z(p0, b1) the tight one at Base."""
    a, b = plans[BASE], tight["High crude"]
    found = bridge_of(a, b, order)
    closes(found)
    assert not found.same_limits
    if order == PRICES_FIRST:
        assert found.middle == near(plans["High crude"].margin / 1000)
        assert found.limits_effect == near((b.margin - plans["High crude"].margin) / 1000)
    else:
        assert found.middle == near(tight[BASE].margin / 1000)
        assert found.limits_effect == near((tight[BASE].margin - a.margin) / 1000)
    assert found.limits_effect < -100
    assert any("changed limits" in sentence for sentence in bridge(a, b, order=order).sentences)


def test_limits_alone(plans: dict[str, Plan], tight: dict[str, Plan]) -> None:
    """No price differs: the whole change is the limits'."""
    found = bridge_of(plans[BASE], tight[BASE])
    closes(found)
    assert (found.price_effect, found.gain) == (0.0, 0.0)
    assert found.limits_effect == near((tight[BASE].margin - plans[BASE].margin) / 1000)


def test_a_limit_that_does_not_bind_is_not_called_unchanged(month: Scenario, plans: dict[str, Plan]) -> None:
    """Gas oil is not bought; offering more of it moves nothing, but it is no unchanged limit."""
    other = make_plan(month.with_({"feeds.gas_oil.spot_barge.max": "16 kt"}, price_case="High crude"))
    answer = bridge(plans["High crude"], other)
    assert answer.bridge is not None
    assert not answer.bridge.same_limits
    assert answer.bridge.limits_effect == 0.0
    assert not any("No limits changed" in sentence for sentence in answer.sentences)
    assert "Limits or other data differ, but that moves no margin here." in answer.sentences


def test_last_month_and_this_month(plans: dict[str, Plan], shipped_scenario: Callable[[str], Scenario], month: Scenario) -> None:
    """Two files, months of 744 and 720 hours, other limits, other prices; months are matched by position."""
    april = shipped_scenario("brackwater_2031_04.yaml")
    b = make_plan(april.with_(price_case="Weak aromatics"))
    for order in ORDERS:
        found = bridge_of(plans[BASE], b, order)
        closes(found)
        assert {effect.month for effect in found.effects} == {"2031-03 → 2031-04"}
        middle = plans["Weak aromatics"] if order == PRICES_FIRST else make_plan(april)
        assert found.middle == near(middle.margin / 1000)
    assert found.names == (BASE, "Weak aromatics")
    same_case = bridge_of(plans[BASE], make_plan(april))
    assert same_case.names == ("March 2031, base prices", "April 2031, base prices, C3 splitter fouled")
    assert {row["month"] for row in bridge(plans[BASE], b).tables[2].rows} == {"2031-03 → 2031-04"}


def test_the_same_month_under_another_name_has_the_same_limits(month: Scenario, plans: dict[str, Plan]) -> None:
    """May 2031 has the hours of March; without what is written for March alone only the name differs."""
    plain = month.with_(unit_factors=[])
    a, b = make_plan(plain), make_plan(plain.with_(months=["2031-05"], price_case="Low crude"))
    found = bridge_of(a, b)
    closes(found)
    assert found.same_limits
    assert not bridge_of(plans[BASE], b).same_limits


@pytest.mark.slow
def test_several_months_are_summed_by_item(shipped_plan: Callable[[str], Plan]) -> None:
    """Steps by item over the months, effects by item and month."""
    a = shipped_plan("brackwater_2031_03_to_08.yaml")
    b = make_plan(a.scenario.with_(price_case="Weak aromatics"))
    answer = bridge(a, b)
    found = answer.bridge
    assert found is not None
    closes(found)
    item = next(iter(found.items))
    rows = answer.tables[1].where(item=item)
    assert [row["month"] for row in rows] == list(a.scenario.case.months)
    assert answer.table.where(step=item)[0]["effect"] == near(sum(row["effect"] for row in rows))
    assert len(answer.tables[1]) == len({(line.price_item, line.month) for line in a.lines if line.price_item})


def test_another_plant_with_partly_the_same_items(tmp_path: Path) -> None:
    """One plant sells residue, the other oil and gas; ethylene and the feed are priced in both.

    First: 8 kt at 100 a tonne, 800. Second: 40 % ethylene at 1300, 30 % oil at 300, 30 % gas at 100, feed 540:
    520 + 90 + 30 − 540 = 100, 8 kt: 800. Prices on the first: 3.2 · 100 − 8 · 40 = 0. Residue keeps its own price.
    """
    a = one_feed(tmp_path / "a", 1200, 200, 500)
    b = planned(
        tmp_path / "b",
        yields="feed, severity, ethylene, oil, gas\nnaphtha, base, 40, 30, 30",
        modes=ONE_FEED["modes"],
        prices={"ethylene": 1300, "oil": 300, "gas": 100},
        scenario=BUYS % ("5 kt", "8 kt", 540),
    )
    for order in ORDERS:
        answer = bridge(a, b, order=order)
        found = answer.bridge
        assert found is not None
        closes(found)
        assert found.items["outlets.ethylene_sale"] == near(320)
        assert found.items["feeds.naphtha.spot"] == near(-320)
        alone = "outlets.residue_sale" if order == PRICES_FIRST else "outlets.oil_sale"
        assert found.items[alone] == 0.0
        assert found.alone == (("outlets.residue_sale",), ("outlets.gas_sale", "outlets.oil_sale"))
        assert "Priced in first only" in answer.note
        assert "outlets.gas_sale, outlets.oil_sale" in answer.note


# ---------------------------------------------------------------------------------- what cannot be


def test_what_cannot_be_compared_is_refused(shipped_plan: Callable[[str], Plan], plans: dict[str, Plan], tmp_path: Path) -> None:
    a = plans[BASE]
    with pytest.raises(ValueError, match="one plan has 1 months, the other 6: a bridge needs as many in both"):
        bridge(a, shipped_plan("brackwater_2031_03_to_08.yaml"))
    with pytest.raises(ValueError, match="one plan is in USD, the other in EUR: a bridge needs one money"):
        bridge(a, shipped_plan("marram_point_2031_03.yaml"))
    with pytest.raises(ValueError, match="no price item in common"):
        bridge(a, one_feed(tmp_path, 1200, 200, 500))
    with pytest.raises(ValueError, match="`limits` is no order of the steps; there are: prices first, limits first"):
        bridge(a, a, order="limits")


def test_a_margin_without_end_between_two_plans_is_said(tmp_path: Path) -> None:
    """Power may be bought and sold without end in the first; the second's prices would pay for that, but it may not."""
    plant = "utilities: {power: {measured_in: power, imports: {grid: {}}, exports: {back: {}}}}"
    feeds = BUYS % ("5 kt", "8 kt", 500)
    power = "\nutilities: {grid: {max: %s, price: %s USD/MWh}, back: {max: %s, price: %s USD/MWh}}"
    a = planned(tmp_path / "a", **ONE_FEED, plant=plant, scenario=feeds + power % ("unlimited", 50, "unlimited", 40))
    b = planned(tmp_path / "b", **ONE_FEED, plant=plant, scenario=feeds + power % ("5 GWh", 50, "5 GWh", 60))
    with pytest.raises(ValueError, match="at the prices of second and the limits of first the margin has no end"):
        bridge(a, b)
    closes(bridge_of(a, b, LIMITS_FIRST))
    closes(bridge_of(b, a))
    assert b.margin - a.margin == near(5 * 10 * 1000)


def test_steps_that_miss_are_no_bridge(plans: dict[str, Plan]) -> None:
    """A number that does not belong is an error, never a residual that is shown."""
    found = bridge_of(plans[BASE], plans["High crude"])
    with pytest.raises(ArithmeticError, match="miss the margin"):
        bridge_module._proven(replace(found, repriced=found.repriced - 5.0))
    with pytest.raises(ArithmeticError, match="the same program at the same prices"):
        bridge_module._proven(replace(found, middle=found.middle + 5.0))
    with pytest.raises(ArithmeticError, match="is not between"):
        bridge_module._proven(replace(found, highest=found.new - found.old - 5.0))
    with pytest.raises(ArithmeticError, match="re-optimising loses"):
        bridge_module._proven(replace(found, repriced=found.new + 5.0))


# ---------------------------------------------------------------------------------- tables and words


def test_small_effects_are_put_together(plans: dict[str, Plan]) -> None:
    """At most ten named, each at least 1 % of all that prices move; the other step is the rest."""
    found = bridge_of(plans[BASE], plans["High crude"])
    sizes = [abs(value) for value in found.named.values()]
    everything = sum(map(abs, found.items.values()))
    assert len(found.named) == 10
    assert sizes == sorted(sizes, reverse=True)
    assert min(sizes) >= 0.01 * everything
    rest = {item: value for item, value in found.items.items() if item not in found.named}
    other = next(step for step in found.steps() if step.kind == "other prices")
    count = sum(value != 0 for value in rest.values())
    assert other.words == f"other prices ({count} items)"
    assert other.effect == near(sum(rest.values()))
    assert max(map(abs, rest.values())) <= min(sizes)
    few = bridge_of(plans[BASE], plans["Strong propylene"])
    assert list(few.named) == list(few.items)[: len(few.named)]
    assert next(step for step in few.steps() if step.kind == "other prices").words == "other prices (1 item)"


def test_sentences_tables_and_names(plans: dict[str, Plan], month: Scenario) -> None:
    answer = bridge(plans[BASE], plans["Strong propylene"])
    assert answer.sentences[0] == (
        "Base 26,808.7 + 3,202.4 by prices on the old plan + 124.4 by re-optimising = Strong propylene 30,135.5 kUSD."
    )
    assert answer.sentences[1].startswith("Largest price effects: outlets.polymer_grade_propylene + 3,746.1,")
    assert answer.sentences[2].startswith("No limits changed.")
    assert [table.name for table in answer.tables] == ["bridge", "price_effects", "changes"]
    assert [step for step in (row["step"] for row in answer.table.rows) if "margin" in step] == [
        "margin: Base",
        "margin: Strong propylene",
    ]
    assert "changed limits and other data" not in [row["step"] for row in answer.table.rows]
    assert len(answer.to_frame()) == len(answer.table)
    for row in answer.tables[1].rows:
        assert row["effect"] == near(row["quantity"] * (row["after"] - row["before"]))
    for row in answer.tables[2].rows:
        assert row["change"] == row["after"] - row["before"] != 0
    named = bridge(plans[BASE], plans["Strong propylene"], names=("January", "February"))
    assert named.title == "Margin bridge from January to February"
    dearer = make_plan(month.with_(fixed_costs={"whole_plant": "9.9 MUSD/month"}))
    words = bridge(plans[BASE], dearer).sentences
    assert words[-1] == "Fixed cost is no part of it: 9,500.0 and 9,900.0 kUSD."
    assert decimals(99_999.0) == 1


def test_the_order_of_questions_does_not_matter(month: Scenario) -> None:
    """Bridges put the program back as it was."""
    a, b = make_plan(month), make_plan(month.with_(price_case="High crude"))
    first = bridge_of(a, b)
    bridge_of(b, a)
    bridge_of(a, b, LIMITS_FIRST)
    assert bridge_of(a, b) == first
