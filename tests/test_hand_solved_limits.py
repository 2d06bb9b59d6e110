"""Small plants whose best plan is worked out by hand in the docstring: value, blends, limits and energy.

Prices USD/t, flows kt, a period of 1,000 hours (so 1 t/h of one furnace is 1 kt), margins in kUSD in the derivations.
Worth of a limit: gain per unit of relaxation, never negative. Rate: d(margin)/d(limit), negative on a binding minimum.
"""

from __future__ import annotations

from pathlib import Path

from plants import ONE_FEED, bought, limit, margin_is, near, planned, worth_and_rate


def test_blend_with_a_specification(tmp_path: Path) -> None:
    """10 kt of feed at 500 give 6 kt of propylene (900) and 4 kt of propane (400). A blend of at least 90 % propylene sells
    at 860, up to 5 kt: 4.5 + 0.5 kt (10 t of it use 9 t propylene and 1 t propane: 8600 against 9 · 900 + 400 = 8500).
    Margin 5 · 860 + 1.5 · 900 + 3.5 · 400 − 10 · 500 = 2050. A tonne more of the blend is worth 860 − 0.9 · 900 − 0.1 · 400
    = 10. The specification is 0.1 · propylene − 0.9 · propane ≥ 0: one unit looser changes one tonne of propylene in it for
    propane, worth 900 − 400 = 500, and its rate is −500."""
    plan = planned(
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
    margin_is(plan, 2050)
    assert plan.quantities.value("disposition", "blend_sale", "propylene", "month") == near(4.5)
    assert plan.quantities.value("disposition", "blend_sale", "propane", "month") == near(0.5)
    assert worth_and_rate(plan, "outlet", "blend_sale")[:2] == (near(10), near(10))
    assert worth_and_rate(plan, "specification") == (near(500), near(-500), "USD/t")
    assert worth_and_rate(plan, "purchase")[0] == near(200)


def test_value_by_content_with_a_deduction(tmp_path: Path) -> None:
    """6 kt at 350 give 1.2 kt of butadiene (900) and 1.8 kt of butenes (500), 3 kt of crude C4 in all, and 3 kt of gas (300).
    The content earns 1.2 · 900 + 1.8 · 500 = 1980 wherever the cut goes; 2 kt go to the first customer for nothing less,
    1 kt to the second at 100 less. Margin 1980 − 100 + 900 − 2100 = 680. A tonne more with the first customer is worth the
    deduction, 100; a tonne more of feed 0.2 · 900 + 0.3 · 500 + 0.5 · 300 − 0.5 · 100 − 350 = 80."""
    plan = planned(
        tmp_path,
        yields="feed, severity, butadiene, butenes, gas\nraffinate, base, 20, 30, 50",
        modes="group, feed, severity, charge\nfurnaces, raffinate, base, 10",
        recovery="component, gas, crude_c4\nbutadiene, 0, 1\nbutenes, 0, 1\ngas, 1, 0",
        plant="""
            cuts: {crude_c4: {valued_by: content, content_items: {butadiene: [butadiene], butenes: [butenes]}}}
            outlets: {first: {from: crude_c4, to: sale}, second: {from: crude_c4, to: sale}}
        """,
        prices={"gas": 300},
        scenario="""
            feeds: {raffinate: {spot: {max: 6 kt, price: 350 USD/t}}}
            outlets:
              first: {max: 2 kt, price: null, deduction: 0 USD/t}
              second: {max: unlimited, price: null, deduction: 100 USD/t}
            contents: {crude_c4: {butadiene: {price: 900 USD/t}, butenes: {price: 500 USD/t}}}
        """,
    )
    margin_is(plan, 680)
    assert [plan.quantities.outlet(name, "month") for name in ("first", "second")] == [near(2), near(1)]
    assert worth_and_rate(plan, "outlet", "first")[:2] == (near(100), near(100))
    assert worth_and_rate(plan, "purchase")[0] == near(80)
    assert plan.slate.where(outlet="second")[0]["price"] == near(1980 / 3 - 100)


def test_ratio_limit(tmp_path: Path) -> None:
    """Feed e: 0.5 · 1000 + 0.1 · 800 + 0.4 · 100 − 520 = 100; feed p: 0.3 · 1000 + 0.22 · 800 + 0.48 · 100 − 484 = 40.
    Propylene at least 0.4 of ethylene: 0.1 e + 0.22 p ≥ 0.4 (0.5 e + 0.3 p), so e ≤ p; 10 kt can be cracked: 5 and 5,
    margin 700. With h a kt of furnace time and v the ratio: 100 = h + 0.1 v, 40 = h − 0.1 v, so h = 70 (700 an hour at 10 t/h)
    and v = 300 USD per tonne by which propylene may fall short."""
    plan = planned(
        tmp_path,
        yields="feed, severity, ethylene, propylene, rest\ne, base, 50, 10, 40\np, base, 30, 22, 48",
        modes="group, feed, severity, charge\nfurnaces, e, base, 10\nfurnaces, p, base, 10",
        plant="ratio_limits: {p_over_e: {of: [{cut: propylene}], to: [{cut: ethylene}], at_least: 0.4}}",
        prices={"ethylene": 1000, "propylene": 800, "rest": 100},
        scenario="""
            feeds: {e: {spot: {max: unlimited, price: 520 USD/t}}, p: {spot: {max: unlimited, price: 484 USD/t}}}
        """,
    )
    margin_is(plan, 700)
    assert (bought(plan, "e.spot"), bought(plan, "p.spot")) == (near(5), near(5))
    assert worth_and_rate(plan, "ratio") == (near(300), near(-300), "USD/t")
    assert worth_and_rate(plan, "furnace hours")[0] == near(700)


def test_one_decoke_at_a_time(tmp_path: Path) -> None:
    """A run of 20 d = 480 h at 10 t/h, then 96 h of decoking: 100 h on feed and 100 · 96/480 = 20 h of decoking a kt.
    Ten furnaces have 10,000 h for 120 h a kt: 83.3 kt. One crew has 1,000 h: 50 kt, so the crew decides. A kt needs
    100/480 decokes at 24,000 = 5 a tonne; 95 a tonne is left, margin 4750, 50 · 100/480 = 10.4167 decokes.
    A crew-hour is 1/20 kt: worth 4750 USD."""
    plan = planned(
        tmp_path,
        **{**ONE_FEED, "modes": "group, feed, severity, charge, run_length, decoke\nfurnaces, naphtha, base, 10, 20, 96"},
        plant="{furnace_groups: {furnaces: {furnaces: 10}}, decoke_crews: {crews: 1}}",
        scenario="""
            feeds: {naphtha: {spot: {max: unlimited, price: 500 USD/t}}}
            variable_costs: {decoking: {of: decoke, item: all, cost: 24000 USD}}
        """,
    )
    margin_is(plan, 4750)
    assert bought(plan, "naphtha.spot") == near(50)
    assert worth_and_rate(plan, "decoke crew hours") == (near(4750), near(4750), "USD/crew-hour")
    assert limit(plan, "furnace hours")["value"] == near(6000)
    assert plan.furnaces.rows[0]["decokes"] == near(50 * 100 / 480)


def test_a_side_stream_past_the_furnaces(tmp_path: Path) -> None:
    """Naphtha gives 0.2 · 900 + 0.8 · 300 − 380 = 40 a tonne and 0.2 of propylene, the refinery's stream 0.7 · 900 + 0.3 · 350
    − 600 = 135 and 0.7. The splitter takes 3.4 kt: naphtha gives 200 a tonne of propylene and is bought in full, 10 kt; the
    stream 135/0.7 = 192.86 and fills the rest, (3.4 − 2)/0.7 = 2 kt. Margin 400 + 270 = 670. The splitter is worth 135/0.7,
    a tonne more of naphtha 40 − 0.2 · 135/0.7 = 10/7, an hour nothing: the stream needs no furnace."""
    plan = planned(
        tmp_path,
        yields="feed, severity, propylene, propane, rest\nnaphtha, base, 20, 0, 80",
        modes="group, feed, severity, charge\nfurnaces, naphtha, base, 12",
        recovery_units="unit, capacity, capacity_unit, measure, min_load\nsplitter, 3.4, t/h, propylene, 0",
        unit_loads="unit, of, item, load, load_unit\nsplitter, component, propylene, 1, t/t",
        plant="side_streams: {refinery: {composition: {propylene: 70 wt%, propane: 30 wt%}}}",
        prices={"propylene": 900, "propane": 350, "rest": 300},
        scenario="""
            feeds: {naphtha: {spot: {max: 10 kt, price: 380 USD/t}}}
            side_streams: {refinery: {pipe: {max: 3 kt, price: 600 USD/t}}}
        """,
    )
    margin_is(plan, 670)
    assert bought(plan, "refinery.pipe") == near(2)
    assert plan.quantities.value("component_made", "propane", "month") == near(0.6)
    assert worth_and_rate(plan, "unit load")[:2] == (near(135 / 0.7), near(135 / 0.7))
    assert worth_and_rate(plan, "purchase", "naphtha")[0] == near(10 / 7)
    assert worth_and_rate(plan, "furnace hours")[0] == 0


def test_fuel_boiler_and_a_cap_on_carbon(tmp_path: Path) -> None:
    """A tonne needs 4 GJ of fired heat and 0.5 t of steam, which the boiler raises from 3 GJ a tonne: 5.5 GJ. Its gas gives
    0.2 t · 50 = 10 GJ, so 4.5 GJ are left over and flared. Only the gas burnt for need is carbon: 5.5 · 0.06 = 0.33 t, and
    1.2 kt of it are allowed: 1.2/0.33 = 40/11 kt. It earns 0.8 · 1000 − 500 = 300 less 0.33 · 20 = 6.6: 293.4 a tonne, margin
    293.4 · 40/11 = 1066.9090…; a tonne more of CO2 is worth 293.4/0.33 = 889.0909…"""
    plan = planned(
        tmp_path,
        yields="feed, severity, ethylene, gas\nethane, base, 80, 20",
        modes="group, feed, severity, charge, fired_heat\nfurnaces, ethane, base, 10, 4",
        components="component, lower_heating_value\nethylene, 47\ngas, 50",
        utility_uses="utility, direction, of, item, amount, unit\nfuel, makes, outlet, burnt, 1, GJ/GJ LHV\n"
        "steam, uses, charge, all, 0.5, t/t\nco2, makes, outlet, burnt, 0.06, t/GJ LHV",
        plant="""
            furnace_groups: {furnaces: {fired_with: fuel}}
            cuts: {gas: {balanced_as: heat}}
            outlets: {burnt: {from: gas, to: own_use, max: unlimited}, flared: {from: gas, to: flare, max: unlimited}}
            utilities: {fuel: {measured_in: heat}, steam: {measured_in: mass}, co2: {measured_in: mass, emissions: {carbon: {}}}}
            conversions: {boiler: {makes: {steam: 1 t}, uses: {fuel: 3 GJ LHV}, max: unlimited}}
        """,
        prices={"ethylene": 1000},
        scenario="""
            feeds: {ethane: {pipeline: {max: unlimited, price: 500 USD/t}}}
            utilities: {carbon: {max: 1.2 kt, price: 20 USD/t}}
        """,
    )
    margin_is(plan, 293.4 * 40 / 11)
    charged = 40 / 11
    assert plan.quantities.value("conversion", "boiler", "month") == near(0.5 * charged)
    assert plan.quantities.outlet("flared", "month") == near(4.5 * charged)
    assert worth_and_rate(plan, "trade", "carbon") == (near(293.4 / 0.33), near(293.4 / 0.33), "USD/t")
