"""Why a mode or a feed is not used: accounts that sum to reduced costs, by hand and on every shipped plan.

Prices USD/t, flows kt, a period of 1,000 hours; worths in USD per t charged in the derivations.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from plants import ONE_FEED, near, planned

from olefinlp.answers.answer import Answer
from olefinlp.answers.plan import Plan
from olefinlp.answers.plan_tables import worth_at_gate
from olefinlp.answers.quantities import Quantities
from olefinlp.answers.why_not import next_step, why_not_feed, why_not_mode

CENT_PER_LB = 0.01 / 0.45359237e-3  # USD/t
THREE_FEEDS: dict[str, Any] = {
    "yields": "feed, severity, ethylene, rest\ndear, base, 50, 50\ncheap, base, 30, 70\npoor, base, 20, 80",
    "modes": "group, feed, severity, charge\nfurnaces, dear, base, 20\nfurnaces, cheap, base, 25\nfurnaces, poor, base, 25",
    "recovery_units": "unit, capacity, capacity_unit, measure, min_load\nsplitter, 9, t/h, ethylene, 0",
    "unit_loads": "unit, of, item, load, load_unit\nsplitter, cut, ethylene, 1, t/t",
    "prices": {"ethylene": 1000, "rest": 300},
    "scenario": """
        feeds:
          dear: {spot: {max: unlimited, price: 530 USD/t}}
          cheap: {spot: {max: unlimited, price: 420 USD/t}}
          poor: {spot: {max: unlimited, price: 430 USD/t}}
    """,
}


def account(answer: Answer, month: str | None = None) -> dict[tuple[str, str], float]:
    """Value of every line of the one account of an answer (of a month)."""
    table = next(table for table in answer.tables if table.name == "why_not_account")
    rows = [row for row in table.rows if month in (None, row["month"])]
    found = {(row["group"], row["item"]): row["value"] for row in rows}
    assert len(found) == len(rows)
    return found


def checked(answer: Answer) -> None:
    """Lines sum to their totals, amount × worth is the value, and the net yields are the products less what they take."""
    table = next(table for table in answer.tables if table.name == "why_not_account")
    total = 0.0
    for row in table.rows:
        if row["group"] == "total":
            assert total == pytest.approx(row["value"], abs=1e-9)
            total = 0.0
        else:
            sign = 1 if row["group"] == "products" else -1
            assert row["value"] == pytest.approx(sign * row["amount"] * row["worth"], rel=1e-9, abs=1e-9)
            total += row["value"]


def test_a_feed_against_hours_and_a_splitter(tmp_path: Path) -> None:
    """Dear and cheap feed give worths of 1.8 kUSD an hour and 60 a tonne of ethylene split (see test_hand_solved). The poor
    one makes 0.2 · 1000 + 0.8 · 300 = 440, takes 40 h/kt · 1.8 = 72 of hours and 0.2 · 60 = 12 of the splitter: worth 356
    at the gate against 430, so the first tonne would lose 74."""
    plan = planned(tmp_path, **THREE_FEEDS)
    answer = why_not_feed(plan, "poor")
    checked(answer)
    lines = account(answer)
    assert lines["products", "ethylene"] == near(200)
    assert lines["products", "rest"] == near(240)
    assert lines["furnace hours", "furnaces on feed"] == near(-72)
    assert lines["recovery units", "splitter"] == near(-12)
    assert lines["price", "poor.spot"] == near(-430)
    assert lines["total", "gain per tonne"] == near(-74)
    way = answer.table.rows[0]
    assert (way["worth"], way["price"], way["buying"], way["gain"]) == (near(356), near(430), near(0), near(-74))
    assert answer.sentences == (
        "month: poor spot is not bought: its first tonne is worth 356.0 USD/t against a price of 430.0; "
        "best in furnaces at base severity, where its products are worth 440.0, the feed costs 430.0 "
        "and it takes 72.0 of furnace hours, 12.0 of splitter load.",
    )
    assert account(why_not_mode(plan, "furnaces.poor.base")) == lines


def test_a_used_mode_and_a_used_feed_say_so(tmp_path: Path) -> None:
    """The plan cracks 12 kt of dear feed; its account sums to nothing."""
    plan = planned(tmp_path, **THREE_FEEDS)
    mode = why_not_mode(plan, "furnaces.dear.base")
    assert mode.sentences == ("month: dear in furnaces at base severity is used: 12 kt are charged.",)
    assert account(mode)["total", "gain per tonne"] == pytest.approx(0, abs=1e-9)
    assert account(mode)["feed", "worth at the gate"] == near(-530)
    feed = why_not_feed(plan, "dear.spot")
    assert feed.sentences == (
        "month: dear spot is used: 12 kt are bought; one more tonne is worth 530.0 USD/t against a price of 530.0.",
    )


def test_a_limit_on_buying_stands_between_worth_and_price(tmp_path: Path) -> None:
    """Naphtha earns 0.4 · 1200 + 0.6 · 200 − 500 = 100 over a jetty of 5 kt, so the jetty is worth 100. Light naphtha makes
    0.3 · 1200 + 0.7 · 200 = 500 against 420: 80 short of the jetty's 100, so its first tonne would lose 20."""
    plan = planned(
        tmp_path,
        yields="feed, severity, ethylene, residue\nnaphtha, base, 40, 60\nlight, base, 30, 70",
        modes="group, feed, severity, charge\nfurnaces, naphtha, base, 10\nfurnaces, light, base, 10",
        prices=ONE_FEED["prices"],
        scenario="""
            feeds:
              naphtha: {spot: {max: unlimited, price: 500 USD/t}}
              light: {spot: {max: unlimited, price: 420 USD/t}}
            limits: {jetty: {sum: [{bought: [naphtha, light]}], max: 5 kt}}
        """,
    )
    answer = why_not_feed(plan, "light")
    way = answer.table.rows[0]
    assert (way["worth"], way["price"], way["buying"], way["gain"]) == (near(500), near(420), near(-100), near(-20))
    assert account(answer)["limits on buying", "jetty"] == near(-100)
    assert "100.0 of jetty" in answer.sentences[0]


def test_firing_decoking_losses_and_emissions_stand_apart(tmp_path: Path) -> None:
    """A kt takes 100 h on feed and, with 10 h of decoking every 20 h, 50 h of it; the 1,000 h are full with the soft mode,
    which earns 0.99 · (0.4 · 1200 + 0.6 · 200) − 300 − 2 · 5 − 0.01 · 3 · 20 = 283.4: 1.8893 kUSD an hour. The hard mode
    makes 0.99 · (0.5 · 1200 + 0.5 · 200) = 693, fires 4 GJ at 5, and needs 200 + 100 h: 283.4 · 2 = 566.8. So it lacks
    693 − 300 − 20 − 0.6 − 566.8 = −194.4."""
    plan = planned(
        tmp_path,
        yields="feed, severity, ethylene, residue\nnaphtha, soft, 40, 60\nnaphtha, hard, 50, 50",
        modes="group, feed, severity, charge, run_length, decoke, fired_heat\n"
        "furnaces, naphtha, soft, 10, 0.833333333333333333, 10, 2\n"
        "furnaces, naphtha, hard, 5, 0.833333333333333333, 10, 4",
        utility_uses="utility, direction, of, item, amount, unit\ncarbon, makes, loss, all, 3, t/t",
        prices=ONE_FEED["prices"],
        plant="""
            loss: {share: 1 wt%}
            furnace_groups: {furnaces: {fired_with: fuel}}
            utilities:
              fuel: {measured_in: heat, imports: {gas: {}}}
              carbon: {measured_in: mass, emissions: {carbon: {}}}
        """,
        scenario="""
            feeds: {naphtha: {spot: {max: unlimited, price: 300 USD/t}}}
            utilities: {gas: {max: unlimited, price: 5 USD/GJ LHV}, carbon: {max: unlimited, price: 20 USD/t}}
        """,
    )
    answer = why_not_mode(plan, "furnaces.naphtha.hard")
    checked(answer)
    lines = account(answer)
    assert lines["products", "ethylene"] == near(0.99 * 600)
    assert lines["firing", "fuel"] == near(-20)
    assert lines["emissions", "carbon of losses"] == near(-0.6)
    assert lines["furnace hours", "furnaces on feed"] == near(-2 / 3 * 566.8)
    assert lines["furnace hours", "furnaces decoking"] == near(-1 / 3 * 566.8)
    assert lines["total", "gain per tonne"] == near(-194.4)


def test_a_side_stream_that_is_too_dear(tmp_path: Path) -> None:
    """A tonne of it is 0.6 t of residue at 200 and 0.4 t of ethylene at 1200: worth 600, offered at 640."""
    plan = planned(
        tmp_path,
        **ONE_FEED,
        plant="side_streams: {offgas: {composition: {residue: 60 wt%, ethylene: 40 wt%}}}",
        scenario="""
            feeds: {naphtha: {spot: {max: 8 kt, price: 500 USD/t}}}
            side_streams: {offgas: {neighbour: {max: 3 kt, price: 640 USD/t}}}
        """,
    )
    answer = why_not_feed(plan, "offgas")
    assert (answer.table.rows[0]["worth"], answer.table.rows[0]["gain"]) == (near(600), near(-40))
    assert answer.sentences[0].startswith("month: offgas neighbour is not bought: its first tonne is worth 600.0 USD/t")


def test_the_better_of_two_deliveries_is_taken(tmp_path: Path) -> None:
    """70 units of paraffins against 60 move 5 wt% from rest to ethylene. The spot (reference) is cracked at base severity. At
    high severity both lose: the cargo 0.33 · 1000 + 0.67 · 200 − (0.35 · 1000 + 0.65 · 200) = −16, the spot as much; the
    account names one of them and sums to its reduced cost."""
    plan = planned(
        tmp_path,
        yields="feed, severity, ethylene, rest\nnaphtha, base, 30, 70\nnaphtha, high, 28, 72",
        modes="group, feed, severity, charge\nfurnaces, naphtha, base, 10\nfurnaces, naphtha, high, 10",
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
    assert account(why_not_mode(plan, "furnaces.naphtha.high"))["total", "gain per tonne"] == near(-16)
    ways = why_not_feed(plan, "naphtha").table.rows
    assert [(way["source"], way["severity"]) for way in ways] == [("naphtha.cargo", "base"), ("naphtha.spot", "base")]


def test_months_with_a_tank(tmp_path: Path) -> None:
    """The hard mode makes 0.35 · 950 + 0.65 · 200 = 462.5 where the base mode makes 500, and takes the same hours: 37.5 short
    in both months, whatever the naphtha in the tank is worth then."""
    plan = planned(
        tmp_path,
        yields="feed, severity, ethylene, residue\nnaphtha, base, 40, 60\nnaphtha, hard, 35, 65",
        modes="group, feed, severity, charge\nfurnaces, naphtha, base, 5\nfurnaces, naphtha, hard, 5",
        prices={"ethylene": 950, "residue": 200},
        scenario="""
            months: [{name: first, hours: 1000}, {name: second, hours: 1000}]
            feeds: {naphtha: {spot: {max: unlimited, price: {first: 300 USD/t, second: 360 USD/t}}}}
            stocks: {naphtha: {opening: 1 kt, min: 0 kt, max: 3 kt, holding: 0.01 USD/t/h, end: at least opening}}
        """,
    )
    answer = why_not_mode(plan, "furnaces.naphtha.hard")
    checked(answer)
    for month, worth in (("first", 300), ("second", 360)):
        lines = account(answer, month)
        assert lines["feed", "worth at the gate"] == near(-worth)
        assert lines["total", "gain per tonne"] == near(-37.5)
    only = why_not_mode(plan, "furnaces.naphtha.hard", "second")
    assert only.sentences == answer.sentences[1:]


@pytest.mark.parametrize(("feed", "cents"), [("propane", -1.5312), ("gas_oil", -3.9751), ("natural_gasoline", -0.6532)])
def test_the_thermal_cracker(feed: str, cents: float, shipped_plan: Callable[[str], Plan]) -> None:
    """Fresh propane, by hand in cents per lb: 0.15 · 13.79 + 0.02 · 26.64 + 0.07 · 9.93 + 0.35 · 17.75 = 9.5090 sold, 0.06 of
    ethane at 6.55 and 0.25 of methane at 5.38 burnt, 0.1 of propane at its own worth w = 8.1988; less 1.254 fired and
    0.35 · 7.4684 of the ethylene limit, less 9.73: −1.5312 (worth and reduced costs: see test_thermal_cracker)."""
    plan = shipped_plan("thermal_cracker.yaml")
    answer = why_not_feed(plan, feed)
    checked(answer)
    assert round(answer.table.rows[0]["gain"] / CENT_PER_LB, 4) == cents
    if feed == "propane":
        lines = {key: value / CENT_PER_LB for key, value in account(answer).items()}
        assert lines["products", "ethylene"] == near(0.35 * 17.75)
        assert lines["products", "methane"] == near(0.25 * 21_520 * 2.5e-4)
        assert lines["firing", "fuel"] == near(-5016 * 2.5e-4)
        assert round(lines["recovery units", "ethylene"], 4) == round(-0.35 * 7.4684, 4)
        assert round(lines["products", "propane"], 4) == 0.8199
    assert account(why_not_mode(plan, f"cracker.{feed}.design")) == account(answer)


def test_a_recycle_of_a_cut_that_is_not_made(shipped_plan: Callable[[str], Plan]) -> None:
    """The textbook's plan makes no propane."""
    plan = shipped_plan("thermal_cracker.yaml")
    assert why_not_feed(plan, "recycle_propane").sentences == ("hour: recycle_propane cannot be used: no propane is made.",)
    assert "no propane is made" in why_not_mode(plan, "cracker.recycle_propane.design").sentences[0]
    assert why_not_feed(plan, "recycle_ethane").sentences[0].endswith("is used: 0.01814 kt are charged.")


def test_gas_oil_in_march(march: Plan) -> None:
    """Gas oil's first tonne is worth 513.0 against 513.6, as its break-even price says (computed by a second route)."""
    answer = why_not_feed(march, "gas_oil")
    assert answer.sentences[0].startswith(
        "2031-03: gas_oil spot_barge is not bought: its first tonne is worth 513.0 USD/t against a price of 513.6; "
        "best in liquid_furnaces at medium severity"
    )
    assert "would lose 0.6 USD/t" in why_not_mode(march, "liquid_furnaces.gas_oil.medium").sentences[0]


def test_every_mode_of_every_plan(every_plan: Plan) -> None:
    """Each account sums to the reduced costs in the solution, the net worth of a component is its shadow price, and a mode of
    a feed that is there sums to the reduced cost of its charge alone."""
    q, case = every_plan.quantities, every_plan.quantities.case
    month = case.months[len(case.months) // 2]
    for mode in case.modes:
        answer = why_not_mode(every_plan, mode, month)
        checked(answer)
        for row in answer.tables[1].rows:
            assert row["net"] == pytest.approx(q.dual("component_balance", row["component"], month), abs=1e-9)
            assert row["net"] == pytest.approx(row["made"] + row["taken"], abs=1e-9)
        lines = account(answer)
        if lines and ("feed", "worth at the gate") in lines:
            best = max(q.reduced_cost("charge", mode, p, month) for p in case.charged_parcels[mode, month])
            assert lines["total", "gain per tonne"] == pytest.approx(best, abs=1e-9)
        if q.charged(mode, month):
            assert "is used" in answer.sentences[0]


def test_every_feed_of_every_plan(every_plan: Plan) -> None:
    """The best group's worth is the worth at the gate in the table of feeds, and a feed in use gains nothing more."""
    q, case = every_plan.quantities, every_plan.quantities.case
    month = case.months[0]
    for source, data in case.sources.items():
        answer = why_not_feed(every_plan, source, month)
        checked(answer)
        step = next_step(every_plan, source, month)
        if data.feed not in case.stocks:
            worth = max(row["worth"] for row in answer.table.rows)
            assert worth == pytest.approx(worth_at_gate(q, source, step, month), abs=1e-9)
        gain = max(row["gain"] for row in answer.table.rows)
        assert gain == pytest.approx(0, abs=1e-7) if q.bought(source, month) else gain < 1e-7


def test_the_account_does_not_hang_on_the_shadow_price_of_a_feed_that_is_not_there(
    shipped_plan: Callable[[str], Plan],
) -> None:
    """The shadow price of propane, of which nothing is bought, may stand anywhere between its value and its price."""
    plan = shipped_plan("thermal_cracker.yaml")
    lp, solution, other = plan.lp, plan.solution, None
    for shift in (0.3, 0.9):
        duals = solution.row_dual.copy()
        duals[lp.row_at["feed_balance", "propane", "hour"]] = 180.8 + shift * (214.5 - 180.8)
        moved = replace(solution, row_dual=duals, reduced=lp.cost - lp.gathered(duals))
        there = replace(plan, solution=moved, quantities=Quantities(plan.quantities.case, lp, moved))
        answer = why_not_feed(there, "propane")
        assert other is None or account(answer) == pytest.approx(other, abs=1e-9)
        assert why_not_mode(there, "cracker.propane.design").sentences == why_not_mode(plan, "cracker.propane.design").sentences
        other = account(answer)


def test_unknown_names_are_refused_with_a_hint(march: Plan) -> None:
    with pytest.raises(ValueError, match=r"`liquid_furnaces\.gas_oil\.medum` is no mode .* did you mean `liquid_furnaces"):
        why_not_mode(march, "liquid_furnaces.gas_oil.medum")
    with pytest.raises(ValueError, match=r"`gasoil` is no feed, .* did you mean `gas_oil`"):
        why_not_feed(march, "gasoil")
    with pytest.raises(ValueError, match="`2031-04` is not a period"):
        why_not_feed(march, "gas_oil", "2031-04")


def test_a_feed_that_nobody_offers(tmp_path: Path) -> None:
    plan = planned(tmp_path, **{**THREE_FEEDS, "scenario": "feeds: {dear: {spot: {max: unlimited, price: 530 USD/t}}}"})
    assert why_not_feed(plan, "cheap").sentences == ("cheap is not on offer: the scenario names no source of it.",)
    sentence = "month: cheap in furnaces at base severity cannot be used: its feed is not on offer."
    assert why_not_mode(plan, "furnaces.cheap.base").sentences == (sentence,)


def test_an_account_that_does_not_sum_is_an_error(march: Plan) -> None:
    """A solution whose reduced cost was tampered with."""
    reduced = march.solution.reduced.copy()
    reduced[march.lp.column_at["charge", "gas_furnaces.ethane.low", "ethane", "2031-03"]] += 1
    wrong = replace(march.solution, reduced=reduced)
    plan = replace(march, solution=wrong, quantities=Quantities(march.quantities.case, march.lp, wrong))
    with pytest.raises(ArithmeticError, match="the account sums to"):
        why_not_mode(plan, "gas_furnaces.ethane.low")
