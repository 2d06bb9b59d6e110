"""Small plants whose best plan is worked out by hand in the docstring: one idea of the plan each.

Prices USD/t, flows kt, a period of 1,000 hours (so 1 t/h of one furnace is 1 kt), margins in kUSD in the derivations.
Worth of a limit: gain per unit of relaxation, never negative. Rate: d(margin)/d(limit), negative on a binding minimum.
"""

from __future__ import annotations

from pathlib import Path

import pytest
from plants import DEAR_AND_CHEAP, ONE_FEED, bought, limit, margin_is, near, planned, worth_and_rate


def test_one_furnace_group_and_one_limit(tmp_path: Path) -> None:
    """A tonne earns 0.4 · 1200 + 0.6 · 200 − 500 = 100. Two furnaces give 2 · 1000 · (1 − 5 %) = 1900 h, and a tonne takes
    1/10 h: 19 kt, margin 1900. One furnace-hour more is 10 t: worth 1000 USD."""
    plan = planned(
        tmp_path,
        **ONE_FEED,
        plant="furnace_groups: {furnaces: {furnaces: 2, unplanned_loss: 5 %}}",
        scenario="feeds: {naphtha: {spot: {max: unlimited, price: 500 USD/t}}}",
    )
    margin_is(plan, 1900)
    assert bought(plan, "naphtha.spot") == near(19)
    assert plan.main_product() == near(7600)
    assert limit(plan, "furnace hours")["value"] == near(1900)
    assert worth_and_rate(plan, "furnace hours") == (near(1000), near(1000), "USD/furnace-hour")


def test_a_binding_minimum_has_a_negative_rate_and_a_positive_worth(tmp_path: Path) -> None:
    """The same tonne bought at 650 loses 50, yet 3 kt must be taken: margin −150. Taking one tonne more loses 50 (the rate),
    being let off one tonne is worth 50. The furnaces are not full: their hours are worth nothing."""
    plan = planned(tmp_path, **ONE_FEED, scenario="feeds: {naphtha: {spot: {min: 3 kt, max: 8 kt, price: 650 USD/t}}}")
    margin_is(plan, -150)
    row = limit(plan, "purchase", "naphtha spot")
    assert (row["state"], row["value"], row["worth"], row["rate"]) == ("at minimum", near(3), near(50), near(-50))
    assert worth_and_rate(plan, "furnace hours")[:2] == (0, 0)


def test_two_feeds_against_furnace_hours_and_a_splitter(tmp_path: Path) -> None:
    """Dear feed: 0.5 · 1000 + 0.5 · 300 − 530 = 120 a tonne, 1000/20 = 50 h and 0.5 kt of ethylene a kt.
    Cheap feed: 0.3 · 1000 + 0.7 · 300 − 420 = 90, 40 h and 0.3 kt. Hours 1000, splitter 9 t/h = 9 kt.
    50 d + 40 c = 1000 and 0.5 d + 0.3 c = 9 give d = 12, c = 10: margin 12 · 120 + 10 · 90 = 2340.
    Worths u, v: 50 u + 0.5 v = 120, 40 u + 0.3 v = 90 give u = 1.8 kUSD/h and v = 60 USD/t (1.8 · 1000 + 60 · 9 = 2340)."""
    plan = planned(
        tmp_path,
        **DEAR_AND_CHEAP,
        scenario="""
            feeds:
              dear: {spot: {max: unlimited, price: 530 USD/t}}
              cheap: {spot: {max: unlimited, price: 420 USD/t}}
        """,
    )
    margin_is(plan, 2340)
    assert (bought(plan, "dear.spot"), bought(plan, "cheap.spot")) == (near(12), near(10))
    assert worth_and_rate(plan, "furnace hours") == (near(1800), near(1800), "USD/furnace-hour")
    assert worth_and_rate(plan, "unit load", "splitter") == (near(60), near(60), "USD/t")
    assert limit(plan, "unit load", "splitter")["maximum"] == near(9)


def test_recycle_to_extinction(tmp_path: Path) -> None:
    """6 kt of fresh ethane leave 0.4 · 6 = 2.4 kt, of which each pass of the recycle leaves half:
    2.4 (1 + 1/2 + 1/4 + …) = 4.8 kt cracked again. Ethylene 0.5 · 6 + 0.45 · 4.8 = 5.16, gas 0.1 · 6 + 0.05 · 4.8 = 0.84
    (sum 6). Margin 5.16 · 900 + 0.84 · 100 − 6 · 300 = 2928, so a tonne more of fresh ethane is worth 2928/6 = 488.
    A tonne of recycle is worth (0.45 · 900 + 0.05 · 100)/(1 − 0.5) = 820."""
    plan = planned(
        tmp_path,
        yields="feed, severity, ethylene, ethane, gas\nfresh, base, 50, 40, 10\nagain, base, 45, 50, 5",
        modes="group, feed, severity, charge\nfurnaces, fresh, base,\nfurnaces, again, base,",
        plant="{feeds: {again: {recycle_of: ethane}}, furnace_groups: {furnaces: {furnaces: unlimited}}}",
        prices={"ethylene": 900, "gas": 100},
        scenario="feeds: {fresh: {pipeline: {max: 6 kt, price: 300 USD/t}}}",
    )
    margin_is(plan, 2928)
    assert plan.quantities.charged("furnaces.again.base", "month") == near(4.8)
    assert plan.quantities.value("cut_made", "ethylene", "month") == near(5.16)
    assert worth_and_rate(plan, "purchase") == (near(488), near(488), "USD/t")
    assert plan.quantities.dual("cut_disposal", "ethane", "month") == near(820)


@pytest.mark.parametrize(("ethylene", "taken", "margin", "rate"), [(825, 6, -300, -50), (400, 0, -1200, -200)])
def test_take_or_pay(tmp_path: Path, ethylene: float, taken: float, margin: float, rate: float) -> None:
    """6 kt at 500 must be taken or paid for at 40 % = 200 a tonne. At 825 for ethylene a tonne gives 0.4 · 825 + 0.6 · 200 =
    450 and loses 50, less than 200: taken, margin −300, a tonne more in the contract costs 50. At 400 it gives 280 and loses
    220, more than 200: left, 6 · 200 = 1200 paid, a tonne more costs 200."""
    plan = planned(
        tmp_path,
        **{**ONE_FEED, "prices": {"ethylene": ethylene, "residue": 200}},
        scenario="feeds: {naphtha: {term: {max: 9 kt, price: 500 USD/t, take_or_pay: 6 kt, shortfall_pays: 40 %}}}",
    )
    margin_is(plan, margin)
    assert bought(plan, "naphtha.term") == near(taken)
    assert plan.quantities.value("shortfall", "naphtha.term", "month") == near(6 - taken)
    assert worth_and_rate(plan, "take or pay") == (near(-rate), near(rate), "USD/t")


TIERS = {
    "yields": "feed, severity, ethylene, water\nethane, base, 50, 50",
    "scenario": """
        feeds:
          ethane:
            pipeline:
              tiers:
                - {up_to: 4 kt, price: 300 USD/t}
                - {up_to: 6 kt, price: 340 USD/t}
                - {up_to: 10 kt, price: 380 USD/t}
        outlets:
          water_sale: {max: unlimited, price: 0 USD/t}
          ethylene_sale:
            {max: null, price: null, tiers: [{up_to: 3 kt, price: 1000 USD/t}, {up_to: 10 kt, price: 800 USD/t}]}
    """,
}


def test_steps_of_a_purchase_and_a_sale(tmp_path: Path) -> None:
    """Half of a tonne is ethylene: 500 a tonne for the first 6 kt charged (3 kt sold at 1000), then 400. Ethane costs 300 for
    the first 4 kt, 340 up to 6 kt, then 380. Gains 200 up to 4 kt, 160 up to 6, 20 up to the 8 kt that one furnace of 8 t/h
    can do: 800 + 320 + 40 = 1160, an hour is worth 8 · 20 = 160."""
    plan = planned(tmp_path, **TIERS, modes="group, feed, severity, charge\nfurnaces, ethane, base, 8")
    margin_is(plan, 1160)
    q = plan.quantities
    assert [q.value("bought", "ethane.pipeline", k, "month") for k in "123"] == [near(4), near(2), near(2)]
    assert [q.value("sold", "ethylene_sale", k, "month") for k in "12"] == [near(3), near(1)]
    assert worth_and_rate(plan, "furnace hours")[0] == near(160)


def test_the_end_of_the_last_step_is_worth_what_a_tonne_more_gives(tmp_path: Path) -> None:
    """With 20 t/h the furnace is not full: all 10 kt are bought, margin 800 + 320 + 80 = 1200, a tonne beyond is worth 20."""
    plan = planned(tmp_path, **TIERS, modes="group, feed, severity, charge\nfurnaces, ethane, base, 20")
    margin_is(plan, 1200)
    row = limit(plan, "purchase", "ethane pipeline")
    assert (row["state"], row["worth"], row["rate"]) == ("at maximum", near(20), near(20))


STOCK = {
    **ONE_FEED,
    "modes": "group, feed, severity, charge\nfurnaces, naphtha, base, 5",
    "prices": {"ethylene": 950, "residue": 200},
}
STOCK_SCENARIO = """
    months: [{{name: first, hours: 1000}}, {{name: second, hours: 1000}}]
    feeds: {{naphtha: {{spot: {{max: unlimited, price: {{first: 300 USD/t, second: 360 USD/t}}}}}}}}
    stocks: {{naphtha: {{opening: 1 kt, min: 0 kt, max: 3 kt, holding: 0.01 USD/t/h, end: {end}}}}}
"""


def test_two_months_with_a_tank(tmp_path: Path) -> None:
    """Both months crack 5 kt worth 0.4 · 950 + 0.6 · 200 = 500. Holding a tonne costs 0.01 an hour = 10, waiting costs 60:
    the tank of 3 kt is filled. Bought 5 + 3 − 1 = 7 kt at 300, then 5 + 1 − 3 = 3 kt at 360 to leave the opening 1 kt. Margin
    10 · 500 − 7 · 300 − 3 · 360 − 10 · (3 + 1) = 1780 (the last closing stock pays too). A larger tank is worth
    360 − 300 − 10 = 50; a larger end stock costs 360 + 10 = 370; an hour gives 5 · 200, then 5 · 140."""
    plan = planned(tmp_path, **STOCK, scenario=STOCK_SCENARIO.format(end="at least opening"))
    margin_is(plan, 1780)
    assert (bought(plan, "naphtha.spot", "first"), bought(plan, "naphtha.spot", "second")) == (near(7), near(3))
    assert [plan.quantities.stock("naphtha", month) for month in ("first", "second")] == [near(3), near(1)]
    assert worth_and_rate(plan, "stock", "naphtha", "first") == (near(50), near(50), "USD/t")
    assert worth_and_rate(plan, "end stock") == (near(370), near(-370), "USD/t")
    assert worth_and_rate(plan, "furnace hours", month="first")[0] == near(1000)
    assert worth_and_rate(plan, "furnace hours", month="second")[0] == near(700)


def test_a_stated_value_of_the_last_stock(tmp_path: Path) -> None:
    """At 400 a tonne it pays to fill the tank at 360 + 10: bought 7 and 5 kt, margin
    10 · 500 − 7 · 300 − 5 · 360 − 10 · (3 + 3) + 3 · 400 = 2240, and a larger tank is worth 30 at the end."""
    plan = planned(tmp_path, **STOCK, scenario=STOCK_SCENARIO.format(end="{value: 400 USD/t}"))
    margin_is(plan, 2240)
    assert worth_and_rate(plan, "stock", "naphtha", "second")[0] == near(30)


def test_two_parcels_of_different_quality(tmp_path: Path) -> None:
    """A unit of paraffins moves 0.5 wt% from rest to ethylene. The cargo has 70 against 60: yields 35/65, worth
    0.35 · 1000 + 0.65 · 200 − 440 = 40 a tonne, 4 kt on offer. The spot has the reference: 30/70, 440 − 410 = 30.
    Ten kt can be cracked: 4 · 40 + 6 · 30 = 340, ethylene 4 · 0.35 + 6 · 0.30 = 3.2. A tonne more of cargo is worth 10."""
    plan = planned(
        tmp_path,
        yields="feed, severity, ethylene, rest\nnaphtha, base, 30, 70",
        modes="group, feed, severity, charge\nfurnaces, naphtha, base, 10",
        quality_slopes="yields, feed, property, reference, valid_min, valid_max, ethylene, rest\n"
        "thermal, naphtha, paraffins, 60, 50, 75, 0.5, -0.5",
        prices={"ethylene": 1000, "rest": 200},
        scenario="""
            feeds:
              naphtha:
                cargo: {max: 4 kt, price: 440 USD/t, quality: {paraffins: 70}}
                spot: {max: unlimited, price: 410 USD/t}
        """,
    )
    margin_is(plan, 340)
    mode = "furnaces.naphtha.base"
    assert plan.quantities.value("charge", mode, "naphtha (paraffins 70)", "month") == near(4)
    assert plan.quantities.value("charge", mode, "naphtha", "month") == near(6)
    assert plan.main_product() == near(3200)
    assert worth_and_rate(plan, "purchase", "naphtha cargo")[0] == near(10)
    assert worth_and_rate(plan, "furnace hours")[0] == near(300)
