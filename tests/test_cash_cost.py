"""Cash cost of the main product: small plants by hand, the textbook's cracker, and identities on every shipped plan.

Prices USD/t, flows kt, a period of 1,000 hours; money in kUSD in the derivations.
"""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from plants import DEAR_AND_CHEAP, ONE_FEED, near, planned

from olefinlp.answers.answer import Answer
from olefinlp.answers.cash_cost import cash_cost
from olefinlp.answers.plan import Plan
from olefinlp.answers.plan_parts import ALL_MONTHS, COSTS, PRICES, WHOLE, WORTHS, Parts

CENT_PER_LB = 0.01 / 0.45359237e-3  # USD/t
LB = 0.45359237e-6  # kt


def line(answer: Answer, feed: str, basis: str = PRICES, month: str = "month") -> dict[str, Any]:
    """The one row of a feed or line."""
    rows = answer.table.where(feed=feed, basis=basis, month=month)
    assert len(rows) == 1, [row["feed"] for row in answer.table.where(basis=basis, month=month)]
    return rows[0]


def checked(answer: Answer) -> None:
    """Every row is the sum of its costs, and the rows of a month and basis are the whole plant."""
    rows = answer.table.rows
    for row in rows:
        size = sum(abs(row[kind]) for kind in COSTS)
        assert row["cost"] == pytest.approx(sum(row[kind] for kind in COSTS), abs=1e-9 * size)
    for whole in answer.table.where(feed=WHOLE):
        parts = [r for r in rows if (r["month"], r["basis"]) == (whole["month"], whole["basis"]) and r["feed"] != WHOLE]
        for kind in (*COSTS, "cost", "charged", "main_product", "of_plant"):
            total, size = sum(r[kind] for r in parts), sum(abs(r[kind]) for r in parts)
            assert total == pytest.approx(whole[kind], abs=1e-9 * size)


def test_two_feeds_against_hours_and_a_splitter(tmp_path: Path) -> None:
    """12 kt of dear and 10 kt of cheap feed (see test_hand_solved). At prices dear costs (530 − 0.5 · 300)/0.5 = 760 a tonne
    of ethylene, cheap (420 − 0.7 · 300)/0.3 = 700, the plant (12 · 380 + 10 · 210)/9 = 740. At worths an hour is 1.8 kUSD and
    a tonne split 60: dear (530 − 150 + 50 · 1.8 + 0.5 · 60)/0.5 = 1000, cheap (210 + 72 + 18)/0.3 = 1000, what ethylene is
    worth, as both are bought up to their price."""
    answer = cash_cost(
        planned(
            tmp_path,
            **DEAR_AND_CHEAP,
            scenario="""
                feeds:
                  dear: {spot: {max: unlimited, price: 530 USD/t}}
                  cheap: {spot: {max: unlimited, price: 420 USD/t}}
            """,
        )
    )
    checked(answer)
    assert [line(answer, feed)["per_tonne"] for feed in ("dear", "cheap", WHOLE)] == [near(760), near(700), near(740)]
    for feed in ("dear", "cheap", WHOLE):
        assert line(answer, feed, WORTHS)["per_tonne"] == near(1000)
    dear = line(answer, "dear", WORTHS)
    assert (dear["limits"], dear["main_worth"], dear["gate_worth"]) == (near(12 * 120), near(1000), near(530))
    assert line(answer, "dear")["co_products"] == near(-12 * 150)
    assert line(answer, WHOLE)["per_lb"] == near(740 / 22.046226218487757)
    assert answer.sentences[0] == (
        "month, at today's prices: a tonne of ethylene costs 740.0 USD/t (33.6 US cents/lb) net of co-products, "
        "from 700 with cheap to 760 with dear."
    )


def test_cracked_again_until_nothing_is_left(tmp_path: Path) -> None:
    """6 kt of fresh ethane at 300 end as 5.16 kt of ethylene and 0.84 of gas at 100 (see test_hand_solved): (1800 − 84)/5.16 a
    tonne. All of the offer is bought and a tonne is worth 788 at the gate, so at worths (no limit but the offer) ethylene
    costs its worth of 900 less what the feed is below its own: 900 − 6 · 488/5.16, the same."""
    answer = cash_cost(
        planned(
            tmp_path,
            yields="feed, severity, ethylene, ethane, gas\nfresh, base, 50, 40, 10\nagain, base, 45, 50, 5",
            modes="group, feed, severity, charge\nfurnaces, fresh, base,\nfurnaces, again, base,",
            plant="{feeds: {again: {recycle_of: ethane}}, furnace_groups: {furnaces: {furnaces: unlimited}}}",
            prices={"ethylene": 900, "gas": 100},
            scenario="feeds: {fresh: {pipeline: {max: 6 kt, price: 300 USD/t}}}",
        )
    )
    checked(answer)
    row = line(answer, "fresh")
    assert (row["charged"], row["main_product"]) == (near(6), near(5.16))
    assert row["per_tonne"] == near((1800 - 84) / 5.16)
    worths = line(answer, "fresh", WORTHS)
    assert worths["gate_worth"] == near(788)
    assert worths["per_tonne"] == near(900 - 6 * 488 / 5.16) == near((1800 - 84) / 5.16)
    assert [r["item"] for r in answer.tables[1].rows] == ["gas_sale", "gas"]


def test_content_is_the_feeds_own_and_the_deduction_the_average(tmp_path: Path) -> None:
    """5 kt of each: a makes 2 kt of ethylene, 1 of butadiene (900) and 2 of butenes (500), b 1.5, 2.5 and 1. Of the 6.5 kt of
    C4 5 go to the first customer, 1.5 at 100 less: 150/6.5 a tonne. a: (2500 − 1900 + 3 · 150/6.5)/2, b: (2600 − 2750 +
    3.5 · 150/6.5)/1.5; together (5100 − 4650 + 150)/3.5."""
    answer = cash_cost(
        planned(
            tmp_path,
            yields="feed, severity, ethylene, butadiene, butenes\na, base, 40, 20, 40\nb, base, 30, 50, 20",
            modes="group, feed, severity, charge\nfurnaces, a, base, 10\nfurnaces, b, base, 10",
            recovery="component, ethylene, crude_c4\nethylene, 1, 0\nbutadiene, 0, 1\nbutenes, 0, 1",
            plant="""
                cuts: {crude_c4: {valued_by: content, content_items: {butadiene: [butadiene], butenes: [butenes]}}}
                outlets: {first: {from: crude_c4, to: sale}, second: {from: crude_c4, to: sale}}
            """,
            prices={"ethylene": 1000},
            scenario="""
                feeds: {a: {spot: {max: 5 kt, price: 500 USD/t}}, b: {spot: {max: 5 kt, price: 520 USD/t}}}
                contents: {crude_c4: {butadiene: {price: 900 USD/t}, butenes: {price: 500 USD/t}}}
                outlets:
                  first: {max: 5 kt, price: null, deduction: 0 USD/t}
                  second: {max: unlimited, price: null, deduction: 100 USD/t}
            """,
        )
    )
    checked(answer)
    assert line(answer, "a")["per_tonne"] == near((2500 - 1900 + 3 * 150 / 6.5) / 2)
    assert line(answer, "b")["per_tonne"] == near((2600 - 2750 + 3.5 * 150 / 6.5) / 1.5)
    assert line(answer, WHOLE)["per_tonne"] == near((5100 - 4650 + 150) / 3.5)
    second = answer.tables[1].where(feed="b", basis=PRICES, item="second")[0]
    assert (second["quantity"], second["value"]) == (near(3.5 * 1.5 / 6.5), near(2750 / 3.5 - 100))
    pooled = answer.tables[1].where(feed="b", basis=WORTHS, item="crude_c4")[0]
    assert pooled["value"] == near(2750 / 3.5 - 100)


FUEL: dict[str, Any] = {
    "yields": "feed, severity, ethylene, gas\na, base, 90, 10\nb, base, 50, 50",
    "modes": "group, feed, severity, charge, fired_heat\nfurnaces, a, base, 10, 10\nfurnaces, b, base, 10, 10",
    "prices": {"ethylene": 1000},
}
FEEDS = "feeds: {a: {spot: {max: 1 kt, price: 500 USD/t}}, b: {spot: {max: 1 kt, price: 400 USD/t}}}"


def test_fuel_of_one_feed_that_fires_another(tmp_path: Path) -> None:
    """Both feeds fire 10 TJ; a makes 0.1 kt of gas, b 0.5, of which 0.4 kt at 50 GJ/t are burnt and 0.2 sold at 200: fuel is
    worth 4 a GJ and none is bought. Of every gas 2/3 are burnt: a lacks 10 − 3.333 TJ, b has as much too much, and 26.667
    pass between them. a: (500 − 6.667 + 26.667)/0.9, b: (400 − 33.333 − 26.667)/0.5, as if all gas were sold and all fuel
    bought at 4."""
    answer = cash_cost(
        planned(
            tmp_path,
            **FUEL,
            utility_uses="utility, direction, of, item, amount, unit\nfuel, makes, outlet, gas_burnt, 50, GJ/t LHV",
            plant="""
                furnace_groups: {furnaces: {fired_with: fuel}}
                outlets:
                  gas_burnt: {from: gas, to: own_use, max: unlimited}
                  gas_sold: {from: gas, to: sale}
                utilities: {fuel: {measured_in: heat, imports: {bought_gas: {}}}}
            """,
            scenario=FEEDS
            + """
outlets: {gas_sold: {max: unlimited, price: 200 USD/t}}
utilities: {bought_gas: {max: unlimited, price: 9 USD/GJ LHV}}
""",
        )
    )
    checked(answer)
    assert (line(answer, "a")["passed"], line(answer, "b")["passed"]) == (near(80 / 3), near(-80 / 3))
    assert line(answer, "a")["per_tonne"] == near((500 - 20 + 40) / 0.9)
    assert line(answer, "b")["per_tonne"] == near((400 - 100 + 40) / 0.5)
    assert line(answer, WHOLE)["cost"] == near(900 - 40)


def test_fuel_bought_steam_raised_and_their_emissions(tmp_path: Path) -> None:
    """Gas at 6 a GJ brings 0.05 t of CO2 at 40. Each feed fires 10 TJ, and takes 0.5 kt of steam at 3 GJ a tonne from the
    boiler: 11.5 TJ cost 69 and 23 of emissions. The plant burns 5 TJ more itself, always: 30 and 10. A neighbour has a right
    to 2 TJ at 3: they cost 12 and 4 of emissions and bring 6, in a line of their own."""
    answer = cash_cost(
        planned(
            tmp_path,
            **{**FUEL, "prices": {"ethylene": 1000, "gas": 0}},
            utility_uses="utility, direction, of, item, amount, unit\nsteam, uses, charge, all, 0.5, t/t\n"
            "carbon, makes, import, bought_gas, 0.05, t/GJ LHV\nfuel, uses, fixed, all, 5, GJ/h LHV",
            plant="""
                furnace_groups: {furnaces: {fired_with: fuel}}
                utilities:
                  fuel: {measured_in: heat, imports: {bought_gas: {}}, exports: {fuel_sold: {}}}
                  steam: {measured_in: mass}
                  carbon: {measured_in: mass, emissions: {carbon: {}}}
                conversions: {boiler: {makes: {steam: 1 t}, uses: {fuel: 3 GJ LHV}, max: unlimited}}
            """,
            scenario=FEEDS
            + """
utilities:
  bought_gas: {max: unlimited, price: 6 USD/GJ LHV}
  fuel_sold: {min: 2 TJ LHV, max: 2 TJ LHV, price: 3 USD/GJ LHV}
  carbon: {max: unlimited, price: 40 USD/t}
""",
        )
    )
    checked(answer)
    for feed in ("a", "b"):
        row = line(answer, feed)
        assert (row["utilities"], row["emissions"], row["passed"]) == (near(69), near(23), near(0))
    fixed, sold = line(answer, "fixed uses"), line(answer, "fuel_sold")
    assert (fixed["utilities"], fixed["emissions"], fixed["per_tonne"]) == (near(30), near(10), None)
    assert (sold["utilities"], sold["emissions"]) == (near(12 - 6), near(4))
    assert line(answer, "a", WORTHS)["utilities"] == near(92)
    assert line(answer, WHOLE)["per_tonne"] == near((900 + 2 * 92 + 40 + 10) / 1.4)


def test_months_with_a_tank_of_feed(tmp_path: Path) -> None:
    """7 kt at 300 and 3 at 360 are bought, 5 cracked in each month, 1 and 3 kt are there at first and after the first (see
    test_hand_solved). First month: all at 300, 2 · 300 go into the tank, holding 3 kt costs 30. Second: 3 kt at 300 and 3 at
    360, 330 on average, 1080 − 1650 come from the tank, holding 10. 2 kt of ethylene and 3 · 200 of residue in each."""
    answer = cash_cost(
        planned(
            tmp_path,
            yields=ONE_FEED["yields"],
            modes="group, feed, severity, charge\nfurnaces, naphtha, base, 5",
            prices={"ethylene": 950, "residue": 200},
            scenario="""
                months: [{name: first, hours: 1000}, {name: second, hours: 1000}]
                feeds: {naphtha: {spot: {max: unlimited, price: {first: 300 USD/t, second: 360 USD/t}}}}
                stocks: {naphtha: {opening: 1 kt, min: 0 kt, max: 3 kt, holding: 0.01 USD/t/h, end: at least opening}}
            """,
        )
    )
    checked(answer)
    expected = {"first": (1500, 600, 30), "second": (1650, -570, 10), ALL_MONTHS: (3150, 30, 40)}
    for month, (feed, stock, holding) in expected.items():
        made = 4 if month == ALL_MONTHS else 2
        assert line(answer, "naphtha", month=month)["per_tonne"] == near((feed - 300 * made) / made)
        assert line(answer, "stock of naphtha", month=month)["feed_cost"] == near(stock)
        assert line(answer, "stocks held", month=month)["other"] == near(holding)
        whole = line(answer, WHOLE, month=month)
        assert whole["per_tonne"] == near((feed + stock + holding - 300 * made) / made)
        assert line(answer, WHOLE, WORTHS, month)["main_product"] == near(made)
    assert "+300 of it is change of stocks" in answer.sentences[0]
    assert "at today's worths" in answer.sentences[-1]


def test_a_tank_of_a_cut(tmp_path: Path) -> None:
    """5 kt at 490 make 2 kt of ethylene and 3 of residue; 1 kt of residue was in the tank and 2 must be: 2 are sold at 200, of
    which 3/4 are this month's. At prices the feed costs (2450 − 300)/2, the tank brings 100; at worths the feed's residue is
    600, the hours, which are full, 5 · 10, and one tonne has gone into the tank."""
    answer = cash_cost(
        planned(
            tmp_path,
            yields=ONE_FEED["yields"],
            modes="group, feed, severity, charge\nfurnaces, naphtha, base, 5",
            prices={"ethylene": 950, "residue": 200},
            scenario="""
                feeds: {naphtha: {spot: {max: unlimited, price: 490 USD/t}}}
                stocks: {residue: {opening: 1 kt, min: 0 kt, max: 3 kt, holding: 0 USD/t/h, end: {at_least: 2 kt}}}
            """,
        )
    )
    checked(answer)
    assert line(answer, "naphtha")["per_tonne"] == near(1075)
    assert line(answer, "stock of residue")["cost"] == near(-100)
    assert line(answer, WHOLE)["per_tonne"] == near((2450 - 400) / 2)
    assert line(answer, "naphtha", WORTHS)["cost"] == near(2450 - 600 + 50) == near(2 * 950)
    assert line(answer, "stock of residue", WORTHS)["cost"] == near(200)


def test_what_never_leaves_cannot_be_followed(march: Plan, monkeypatch: pytest.MonkeyPatch) -> None:
    """A system without a solution gives a sentence, not a number."""

    def singular(*_: object) -> None:
        raise np.linalg.LinAlgError

    monkeypatch.setattr(np.linalg, "solve", singular)
    answer = cash_cost(march)
    assert len(answer.table) == 0
    assert "never leaves it: no cost can be followed" in answer.sentences[0]


def test_take_or_pay_and_a_limit_on_buying(tmp_path: Path) -> None:
    """6 kt of the contract at 900 are paid for at 40 % and left: 2160. 5 kt of light naphtha over the jetty at 420 make 1.5 kt
    of ethylene and 700 of residue; the jetty is worth 0.3 · 1200 + 0.7 · 200 − 420 = 80, so at worths it costs
    (2100 − 700 + 400)/1.5 = 1200, what ethylene is worth."""
    answer = cash_cost(
        planned(
            tmp_path,
            yields="feed, severity, ethylene, residue\nnaphtha, base, 40, 60\nlight, base, 30, 70",
            modes="group, feed, severity, charge\nfurnaces, naphtha, base, 10\nfurnaces, light, base, 10",
            prices=ONE_FEED["prices"],
            scenario="""
                feeds:
                  naphtha: {term: {max: 9 kt, price: 2000 USD/t, take_or_pay: 6 kt, shortfall_pays: 18 %}}
                  light: {spot: {max: unlimited, price: 420 USD/t}}
                limits: {jetty: {sum: [{bought: [naphtha, light]}], max: 5 kt}}
            """,
        )
    )
    checked(answer)
    for basis in (PRICES, WORTHS):
        assert line(answer, "take-or-pay payments", basis)["other"] == near(2160)
    assert line(answer, WHOLE)["per_tonne"] == near((2100 - 700 + 2160) / 1.5)
    light = line(answer, "light", WORTHS)
    assert (light["limits"], light["per_tonne"], light["main_worth"]) == (near(400), near(1200), near(1200))


def test_a_blend_has_no_cost_at_prices(tmp_path: Path) -> None:
    """Propylene leaves as it is and in a blend with propane (see test_hand_solved_limits): its own revenue is not known, its
    worth is: 900 − 200/0.6, as the offer of lpg, all bought, is worth 200 more than its price."""
    answer = cash_cost(
        planned(
            tmp_path,
            yields="feed, severity, propylene, propane\nlpg, base, 60, 40",
            modes="group, feed, severity, charge\nfurnaces, lpg, base, 20",
            plant="""
                outlets:
                  propylene_sale: {from: propylene, to: sale}
                  propane_sale: {from: propane, to: sale}
                  blend_sale:
                    from: [propylene, propane]
                    to: sale
                    specifications: {content: {values: {propylene: 100 %, propane: 0 %}, min: 90 %}}
            """,
            prices={"propylene": 900, "propane": 400, "blend": 860},
            scenario="{feeds: {lpg: {spot: {max: 10 kt, price: 500 USD/t}}}, outlets: {blend_sale: {max: 5 kt}}}",
        )
    )
    assert {row["basis"] for row in answer.table.rows} == {WORTHS}
    assert answer.sentences[0] == (
        "month: propylene is sold in the blend blend_sale, whose price is of no single cut: no cost at today's prices."
    )
    assert line(answer, "lpg", WORTHS)["per_tonne"] == near(900 - 200 / 0.6)


def test_no_main_product_has_no_cost(tmp_path: Path) -> None:
    answer = cash_cost(planned(tmp_path, **ONE_FEED, scenario="feeds: {naphtha: {spot: {max: unlimited, price: 900 USD/t}}}"))
    assert len(answer.table) == 0
    assert answer.sentences == ("month: no ethylene is made, so it has no cost per tonne.",)


def test_the_thermal_cracker(shipped_plan: Callable[[str], Plan]) -> None:
    """In cents an hour (data: Edgar et al. 2001, Example 14.1; computed): fresh ethane 6.55 · 60,000 = 393,000; gas at 250 cents
    per million Btu for 8364 · 100,000 + 20e6 fired less 150.64e6 of methane burnt = 705.76e6: 176,440; sold besides ethylene
    (13.79 + 26.64 + 9.93) · 1,000 = 50,360. So 50,000 lb of ethylene cost 519,080: 10.3816 cents/lb, of which the fixed heat
    loss is 0.1. At worths firing is 209,100, methane 37,660 and the ethylene limit 7.4684 · 50,000 = 373,420:
    393,000 − 50,360 − 37,660 + 209,100 + 373,420 = 887,500, its price of 17.75, as ethane is bought up to its price."""
    answer = cash_cost(shipped_plan("thermal_cracker.yaml"))
    checked(answer)
    ethane, worths = line(answer, "ethane", month="hour"), line(answer, "ethane", WORTHS, "hour")
    assert ethane["main_product"] / LB == near(50_000)
    assert line(answer, WHOLE, month="hour")["per_lb"] == near(10.3816)
    assert ethane["per_lb"] == near(10.2816)
    assert line(answer, "fixed uses", month="hour")["of_plant"] / CENT_PER_LB == near(0.1)
    assert worths["per_lb"] == near(17.75)
    cents = {kind: worths[kind] * 1e5 for kind in COSTS}
    assert cents["feed_cost"] == near(393_000)
    assert cents["co_products"] == near(-50_360 - 37_660)
    assert cents["utilities"] == near(209_100)
    assert cents["limits"] == near(373_420)


def test_full_range_naphtha_makes_ethylene_at_what_it_is_worth(march: Plan) -> None:
    """The cargo is bought up to its price of 534, so at worths it costs what one more tonne of ethylene is worth (spot: 33
    US cents/lb); ethane, held by furnace hours and cheaper in its contract than at the margin, costs less."""
    answer = cash_cost(march)
    row = line(answer, "full_range_naphtha", WORTHS, "2031-03")
    assert row["per_tonne"] == near(row["main_worth"])
    assert row["per_lb"] == pytest.approx(33, rel=1e-9)
    ethane = line(answer, "ethane", WORTHS, "2031-03")
    below = ethane["charged"] * (ethane["gate_worth"] - ethane["feed_price"]) / ethane["main_product"]
    assert ethane["per_tonne"] == near(ethane["main_worth"] - below)


def test_the_parts_are_the_plan(every_plan: Plan) -> None:
    """Every variable of the plan is the sum of the parts' (months one by one), and passes between feeds sum to nothing."""
    labels, x = every_plan.lp.columns, every_plan.solution.x
    for month in every_plan.quantities.case.months:
        parts = Parts(every_plan, month)
        total = sum(parts.x.values(), np.zeros(len(labels)))
        of_month = np.array([label[-1] == month for label in labels])
        assert np.abs(total - x)[of_month] == pytest.approx(0, abs=1e-8 * every_plan.quantities.size)
        passed = list(parts.passed.values())
        assert sum(passed) == pytest.approx(0, abs=1e-9 * (1 + sum(map(abs, passed))))


def test_sums_and_identities_of_every_plan(every_plan: Plan) -> None:
    """At prices the plant's cost is the main product's revenue less the margin. At worths the cost of every feed less the worth
    of its main product is what was paid for it less its worth at the gate. Credits are those of the second table."""
    answer, main = cash_cost(every_plan), every_plan.scenario.plant.file.main_product
    checked(answer)
    case = every_plan.quantities.case
    for month in case.months:
        whole = line(answer, WHOLE, month=month)
        sold = [
            case.rate(case.sale_item(outlet, step), month) * every_plan.quantities.value("sold", outlet, str(step), month)
            for outlet, steps in case.sale_tiers.items()
            for step in steps
            if case.outlets[outlet] == (main,)
        ]
        assert whole["cost"] == pytest.approx(sum(sold) - every_plan.margin_of(month) / 1000, rel=1e-9)
        assert whole["main_product"] == pytest.approx(every_plan.main_product(month) / 1000, rel=1e-12)
        assert whole["per_tonne"] == pytest.approx(whole["cost"] / whole["main_product"], rel=1e-12)
        for basis in (PRICES, WORTHS):
            credit = sum(row["credit"] for row in answer.tables[1].where(month=month, basis=basis))
            assert credit == pytest.approx(-line(answer, WHOLE, basis, month)["co_products"], rel=1e-9)
        for row in answer.table.where(month=month, basis=WORTHS):
            if row["gate_worth"] is not None:
                main_value = (row["main_worth"] or 0.0) * row["main_product"]
                below = row["feed_cost"] - row["gate_worth"] * row["charged"]
                assert row["cost"] - main_value == pytest.approx(below, abs=1e-7 * row["feed_cost"])


def test_cents_per_pound_only_of_dollars(shipped_plan: Callable[[str], Plan]) -> None:
    euros, dollars = cash_cost(shipped_plan("marram_point_2031_03.yaml")), cash_cost(shipped_plan("brackwater_2031_03.yaml"))
    assert "per_lb" not in {column.key for column in euros.table.columns} | set(euros.table.rows[0])
    assert "per_lb" in {column.key for column in dollars.table.columns}
    assert all(row["per_lb"] == near(row["per_tonne"] * 100 * 0.45359237e-3) for row in dollars.table.rows)
    side = line(euros, "refinery_propylene", month="2031-03")
    assert (side["main_product"], side["per_tonne"]) == (0, None)
    assert side["cost"] < 0
