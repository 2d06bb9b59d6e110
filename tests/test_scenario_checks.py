"""Every check of a scenario, each shown by one change of a shipped scenario."""

from __future__ import annotations

import functools
import shutil
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from olefinlp.inputs.findings import InputError
from olefinlp.inputs.scenario import Scenario, read_scenario
from olefinlp.inputs.scenario_prices import window_key

ROOT = Path(__file__).parents[1]
TANK = {"opening": "1 kt", "min": "0 kt", "max": "3 kt", "holding": "1 USD/t/month", "end": "at least opening"}
TEXTBOOK_UNITS = "models/thermal_cracker/recovery_units.csv"
UNLIMITED = [
    (TEXTBOOK_UNITS, "cracker,200000", "cracker,unlimited"),
    (TEXTBOOK_UNITS, "ethylene,50000", "ethylene,unlimited"),
    (TEXTBOOK_UNITS, "propylene,20000", "propylene,unlimited"),
]
Edit = tuple[str, str, str]


@pytest.fixture(autouse=True)
def in_the_project(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(ROOT)


@functools.cache
def shipped(name: str) -> Scenario:
    return read_scenario(ROOT / "scenarios" / f"{name}.yaml")


MARCH, MONTHS, MARRAM, TEXTBOOK = ("brackwater_2031_03", "brackwater_2031_03_to_08", "marram_point_2031_03", "thermal_cracker")


def found(name: str, changes: dict[str, Any]) -> list[str]:
    """All findings of a changed scenario, without their lines."""
    try:
        findings = shipped(name).with_(changes).warnings
    except InputError as error:
        findings = error.findings
    return [str(f).split("  ", 1)[1] for f in findings]


def place(name: str, *path: str | int) -> str:
    return str(shipped(name).document.place(path))


def places(name: str, changes: dict[str, Any]) -> list[str]:
    try:
        return [str(f.place) for f in shipped(name).with_(changes).warnings]
    except InputError as error:
        return [str(f.place) for f in error.findings]


@pytest.fixture
def edited(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Callable[[str, list[Edit]], list[str]]:
    """Findings of a scenario in a copy of the shipped files, after edits of their text."""

    def read(name: str, edits: list[Edit]) -> list[str]:
        for folder in ("models", "scenarios"):
            shutil.copytree(ROOT / folder, tmp_path / folder, dirs_exist_ok=True)
        for file, old, new in edits:
            text = (tmp_path / file).read_text(encoding="utf-8")
            assert old in text, f"{old} is not in {file}"
            (tmp_path / file).write_text(text.replace(old, new), encoding="utf-8")
        monkeypatch.chdir(tmp_path)
        try:
            return [str(w) for w in read_scenario(f"scenarios/{name}.yaml").warnings]
        except InputError as error:
            return [str(f) for f in error.findings]

    return read


def line(file: str, text: str) -> str:
    """Place of the first line of a shipped file that holds a text."""
    lines = (ROOT / file).read_text(encoding="utf-8").splitlines()
    return f"{file}:{next(i for i, row in enumerate(lines, 1) if text in row)}"


# ---------------------------------------------------------------------------------- names


def test_feeds_must_be_of_the_plant_and_recycles_are_never_bought():
    source = {"spot": {"max": "3 kt", "price": "300 USD/t"}}
    assert found(MARCH, {"feeds.etane": source, "feeds.recycle_ethane": source}) == [
        "feeds.etane\n  unknown feed `etane`\nhint: did you mean `ethane`?",
        "feeds.recycle_ethane\n  `recycle_ethane` is a recycle feed, it is never bought\n"
        "hint: it comes back from the cut `ethane`; take the entry away",
    ]
    assert places(MARCH, {"feeds.etane": source}) == [place(MARCH, "feeds")]


def test_side_streams_must_be_of_the_plant_and_take_no_quality():
    source = {"spot": {"max": "3 kt", "price": "300 EUR/t"}}
    changes = {"side_streams.refinery_propylen": source, "side_streams.refinery_propylene.neighbour.quality": {"share": 3}}
    assert found(MARRAM, changes) == [
        "side_streams.refinery_propylene.neighbour.quality\n"
        "  a side stream has no quality, slopes are for what is cracked\n"
        "hint: write another side stream with its composition in the plant",
        "side_streams.refinery_propylen\n  unknown side stream `refinery_propylen`\nhint: did you mean `refinery_propylene`?",
    ]


def test_every_sale_outlet_is_in_the_scenario_and_no_other():
    outlets = dict(shipped(MARCH).document.data["outlets"])
    del outlets["c5_sale"], outlets["fuel_gas_export"]
    entry = {"max": "3 kt", "price": "1 USD/t"}
    assert found(MARCH, {"outlets": {**outlets, "hydrogen_burnt": entry, "c5_sail": entry}}) == [
        "outlets.hydrogen_burnt\n  `hydrogen_burnt` is no sale, it goes to own_use\n"
        f"hint: its limits stand in the plant: {line('models/brackwater/plant.yaml', 'hydrogen_burnt:')}",
        "outlets.c5_sail\n  unknown outlet `c5_sail`\nhint: did you mean `c5_sale`?",
        "outlets.fuel_gas_export\n  the outlet `fuel_gas_export` of the plant is missing\n"
        "hint: write `max: 0 TJ LHV` to close it",
        "outlets.c5_sale\n  the outlet `c5_sale` of the plant is missing\nhint: write `max: 0 kt` to close it",
    ]


def test_outlets_have_a_deduction_where_the_cut_is_valued_by_content_and_a_price_elsewhere():
    changes = {
        "outlets.crude_c4_contract": {"max": "3 kt", "price": "100 USD/t"},
        "outlets.c5_sale": {"max": "3 kt", "deduction": "100 USD/t"},
        "outlets.raw_pygas": {"tiers": [{"up_to": "3 kt", "price": "3 USD/t"}]},
    }
    assert found(MARCH, changes) == [
        "outlets.crude_c4_contract.price\n  the cut is valued by content, so this outlet has no price\n"
        "hint: write `deduction:`, what is taken off the content value",
        "outlets.c5_sale.deduction\n  the cut is not valued by content, so nothing is deducted\nhint: write `price:`",
        "outlets.raw_pygas.tiers\n  an outlet of a cut valued by content has no price steps\nhint: write `max:` and `deduction:`",
    ]


def test_contents_are_of_cuts_valued_by_content():
    entry = {"price": "3 USD/t"}
    changes = {"contents": {"crude_c4": {"butadien": entry}, "c5_cut": {"c5": entry}, "crud_c4": {"c5": entry}}}
    assert found(MARCH, changes) == [
        "contents.crude_c4.butadien\n  unknown content item `butadien`\nhint: did you mean `butadiene`?",
        "contents.c5_cut\n  `c5_cut` is not valued by content\nhint: write the price at its outlets",
        "contents.crud_c4\n  unknown cut valued by content `crud_c4`\nhint: did you mean `crude_c4`?",
    ]


def test_every_import_export_and_emission_is_in_the_scenario_and_no_other():
    utilities = {
        "fuel": {"max": "unlimited", "price": "5 USD/GJ LHV"},
        "grid_powr": {"max": "unlimited", "price": "5 USD/MWh"},
        "hydrogen_for_treating": {"max": "unlimited", "price": "5 USD/t"},
        "natural_gas": {"max": "unlimited"},
    }
    assert found(MARCH, {"utilities": utilities}) == [
        "utilities.fuel\n  `fuel` is a utility, it has no price itself\n"
        "hint: write the name of its import, export or emission: natural_gas",
        "utilities.grid_powr\n  unknown import, export or emission `grid_powr`\nhint: did you mean `grid_power`?",
        "utilities.hydrogen_for_treating\n  `hydrogen_for_treating` is a utility, it has no price itself\n"
        "hint: write the name of its import, export or emission, it has none",
        "utilities.surplus_steam\n  the export `surplus_steam` of the plant is missing\nhint: write `max: 0 kt` to close it",
        "utilities.grid_power\n  the import `grid_power` of the plant is missing\nhint: write `max: 0 GWh` to close it",
        "utilities.carbon\n  the emission `carbon` of the plant is missing\nhint: write `max: unlimited` if it has no cap",
    ]


def test_variable_costs_grow_with_what_there_is():
    changes = {
        "variable_costs.a": {"of": "charge", "item": ["naphta", "gas_furnaces", "gas_furnaces.ethane", "all"], "cost": "5 USD/t"},
        "variable_costs.b": {"of": "decoke", "item": "liquid_furnaces.ethane", "cost": "5 USD"},
        "variable_costs.c": {"of": "cut", "item": "all", "cost": "5 USD/t"},
        "variable_costs.d": {"of": "conversion", "item": "boler", "cost": "5 USD/t"},
        "variable_costs.e": {"of": "unit_load", "item": "c3_spliter", "cost": "5 USD/t"},
        "variable_costs.f": {"of": "outlet", "item": "raw_pygass", "cost": "5 USD/t"},
    }
    cuts = ", ".join(shipped(MARCH).plant.file.cuts)
    assert found(MARCH, changes) == [
        "variable_costs.a.item\n  unknown feed, group, `group.feed` or `all` `naphta`\nhint: did you mean `light_naphtha`?",
        "variable_costs.b.item\n  unknown feed, group, `group.feed` or `all` `liquid_furnaces.ethane`\n"
        "hint: did you mean `liquid_furnaces`?",
        f"variable_costs.c.item\n  `all` is for charge and decoke, not for cut\nhint: write the names: {cuts}",
        "variable_costs.d.item\n  unknown conversion `boler`\nhint: did you mean `boiler`?",
        "variable_costs.e.item\n  unknown recovery unit `c3_spliter`\nhint: did you mean `c3_splitter`?",
        "variable_costs.f.item\n  unknown outlet `raw_pygass`\nhint: did you mean `raw_pygas`?",
    ]


def test_unit_factors_name_a_unit_and_a_month():
    changes = {
        "unit_factors": [
            {"month": "2031-3", "unit": "c3_spliter", "factor": 1, "reason": "slip"},
            {"month": "2031-08", "unit": "c3_splitter", "factor": 1, "reason": "another month"},
        ]
    }
    assert found(MARCH, changes) == [
        "unit_factors.1.unit\n  unknown recovery unit `c3_spliter`\nhint: did you mean `c3_splitter`?",
        "unit_factors.1.month\n  `2031-3` is not a month\nhint: did you mean `2031-03`?",
        "unit_factors.2.month\n  warning: has no effect: 2031-08 is not in this scenario",
    ]
    assert places(MARCH, {"unit_factors.2.unit": "c3_spliter"}) == [place(MARCH, "unit_factors", 1)]


def test_a_factor_on_an_unlimited_unit_has_no_effect(edited):
    factor = "{month: hour, unit: propylene, factor: 2, reason: x}"
    edits = [
        ("models/thermal_cracker/recovery_units.csv", "propylene,20000", "propylene,unlimited"),
        ("scenarios/thermal_cracker.yaml", "feeds:", f"unit_factors:\n  - {factor}\nfeeds:"),
    ]
    where = f"scenarios/thermal_cracker.yaml:{int(place(TEXTBOOK, 'feeds').split(':')[1]) + 1}"
    assert edited(TEXTBOOK, edits) == [
        f"{where}  unit_factors.1.unit\n  warning: has no effect: the capacity of propylene is unlimited"
    ]


def test_outages_name_a_group_with_hours_and_a_month():
    outages = [
        {"month": "2031-08", "group": "gas_furnace", "hours": "3 h", "reason": "slip"},
        {"month": "2031-03", "group": "gas_furnaces", "hours": "-3 h", "reason": "slip"},
    ]
    assert found(MARCH, {"outages": outages}) == [
        "outages.1.group\n  unknown furnace group `gas_furnace`\nhint: did you mean `gas_furnaces`?",
        "outages.1.month\n  warning: has no effect: 2031-08 is not in this scenario",
        "outages.2.hours\n  `-3 h` is below zero",
    ]
    outage = [{"month": "hour", "group": "cracker", "hours": "3 h", "reason": "x"}]
    where = line("models/thermal_cracker/plant.yaml", "  cracker:")
    assert found(TEXTBOOK, {"outages": outage}) == [
        "outages.1.group\n  cracker has unlimited furnaces, so no hours can be lost\n"
        f"hint: write how many furnaces it has: {where}"
    ]


def test_tanks_are_for_fresh_feeds_and_priced_cuts():
    stocks = {
        "recycle_ethane": TANK,
        "tail_gas": TANK,
        "crude_c4": TANK,
        "naphta": TANK,
        "ethylene": {**TANK, "quality": {"share": 1}},
        "propane": TANK,
    }
    assert found(MARCH, {"stocks": stocks}) == [
        "stocks.recycle_ethane\n  `recycle_ethane` is a recycle feed, it has no tank\nhint: a tank holds the cut `ethane`",
        "stocks.tail_gas\n  the cut `tail_gas` is balanced as heat, so it has no tank\nhint: take the entry away",
        "stocks.crude_c4\n  the cut `crude_c4` is valued by content, so it has no tank\nhint: take the entry away",
        "stocks.naphta\n  unknown feed or cut `naphta`\nhint: did you mean `light_naphtha`?",
        "stocks.ethylene.quality\n  a cut has no quality, slopes are for what is cracked\nhint: take it away",
    ]


def test_limits_count_what_there_is_under_names_of_their_own():
    limits = {
        "jetty": {"sum": [{"bought": "ethane"}], "max": "3 kt"},
        "naphthas": {"sum": [{"bought": ["light_naphtha.spot", "recycle_ethane", "light_naphtha.contract"]}], "max": "3 kt"},
        "mixed": {"sum": [{"sold": "ethylene_sal"}, {"bought": "ethane.cargo"}], "max": "3 kt"},
        "units": {"sum": [{"sold": "ethylene_sale"}, {"imported": "natural_gas"}], "max": "3 kt"},
    }
    where = line("models/marram_point/plant.yaml", "  jetty:")
    assert found(MARRAM, {"limits": limits}) == [
        "limits.naphthas.sum.1.bought\n  `recycle_ethane` is a recycle feed, it is never bought\nhint: take `charged:` for it",
        "limits.mixed.sum.1.sold\n  unknown outlet `ethylene_sal`\nhint: did you mean `ethylene_sale`?",
        "limits.units.sum\n  its terms are counted in t and GJ LHV: they must all be counted in one unit",
        f"limits.jetty\n  the plant has `jetty` already: {where}\nhint: give this one another name",
        "limits.naphthas.sum.1.bought\n  `light_naphtha.spot` is not a source of this scenario\n"
        "hint: known: contract, spot_cargo",
        "limits.mixed.sum.2.bought\n  `ethane.cargo` is not a source of this scenario\nhint: known: pipeline",
    ]


def test_ratio_limits_too():
    ratio = {"of": [{"bought": "gas_oil.barge"}], "to": [{"charged": "gas_furnace"}], "at_most": 1}
    plain = {"of": [{"component": "benzene"}], "to": [{"cut": "pygas"}], "at_most": 1}
    where = line("models/brackwater/plant.yaml", "  quench_oil_viscosity:")
    assert found(MARCH, {"ratio_limits": {"heavy": ratio, "quench_oil_viscosity": plain}}) == [
        "ratio_limits.heavy.to.1.charged\n  unknown feed, `group.feed`, group or `all` `gas_furnace`\n"
        "hint: did you mean `gas_furnaces`?",
        f"ratio_limits.quench_oil_viscosity\n  the plant has `quench_oil_viscosity` already: {where}\n"
        "hint: give this one another name",
        "ratio_limits.heavy.of.1.bought\n  `gas_oil.barge` is not a source of this scenario\nhint: did you mean `spot_barge`?",
    ]


# ---------------------------------------------------------------------------------- prices


def test_a_price_outside_its_window_asks_for_its_unit(edited):
    table = "scenarios/prices/brackwater.csv"
    edits = [
        (table, "feeds.ethane.contract,USc/gal", "feeds.ethane.contract,USc/lb"),
        (table, "feeds.light_naphtha.contract,USD/bbl", "feeds.light_naphtha.contract,USD/t"),
        (table, "utilities.grid_power,USD/MWh", "utilities.grid_power,USD/kWh"),
    ]
    plant = "models/brackwater/plant.yaml"
    assert edited(MARCH, edits) == [
        f"{line(table, 'feeds.ethane.contract')} [Base]  feeds.ethane.contract\n"
        f"  warning: `41.0 USc/lb` is 903.9 USD/t, outside the plausible 100 to 800 USD/t "
        f"({line(plant, '  feeds.ethane: 100')})\n"
        "hint: is the unit right? `41 USc/gal` would be 304.24 USD/t",
        f"{line(table, 'feeds.light_naphtha.contract')} [Base]  feeds.light_naphtha.contract\n"
        f"  warning: `57.0 USD/t`, outside the plausible 150 to 1200 USD/t ({line(plant, '  feeds: 150')})\n"
        "hint: is the unit right? `57 USD/bbl` would be 539.13 USD/t",
        f"{line(table, 'utilities.grid_power')} [Base]  utilities.grid_power\n"
        f"  warning: `72.0 USD/kWh` is 72000 USD/MWh, outside the plausible 10 to 400 USD/MWh "
        f"({line(plant, '  utilities.grid_power: 10')})\n"
        "hint: is the unit right? `72 USD/MWh` would be 72 USD/MWh",
    ]


def test_a_leaning_price_outside_its_window_points_to_what_it_leans_on():
    assert found(MARRAM, {"feeds.heavy_naphtha.cargo.price.times": 0.1, "outlets.fuel_oil_sale.price": "34000 EUR/t"}) == [
        "feeds.heavy_naphtha.cargo\n  warning: `0.1 × indexes.naphtha` is 49.68 EUR/t, outside the plausible 150 to 1100 EUR/t "
        f"({line('models/marram_point/plant.yaml', '  feeds: 150')})\n"
        "hint: it leans on indexes.naphtha: is that right, and what is added to it?",
        "outlets.fuel_oil_sale\n  warning: `34000 EUR/t`, outside the plausible 150 to 1500 EUR/t "
        f"({line('models/marram_point/plant.yaml', '  outlets: 150')})\n"
        "hint: is the unit right? `34000 cEUR/t` would be 340 EUR/t",
    ]


def test_a_window_in_another_currency_takes_the_rate_or_is_not_compared(edited):
    plant = "models/brackwater/plant.yaml"
    to_euro = (plant, "  feeds.ethane: 100 to 800 USD/t", "  feeds.ethane.contract: 100 to 200 EUR/t")
    table = f"{line('scenarios/prices/brackwater.csv', 'feeds.ethane.contract')} [Base]  feeds.ethane.contract\n"
    where = line(plant, "  feeds.ethane: 100")
    assert edited(MARCH, [to_euro]) == [
        f"{table}  warning: could not be compared with the window 100 to 200 EUR/t of the plant ({where}): "
        "`EUR` is not the scenario's currency (USD)\nhint: write `exchange_rates: {EUR: ... USD}`"
    ]
    rate = ("scenarios/brackwater_2031_03.yaml", "currency: USD", "currency: USD\nexchange_rates: {EUR: 1.1 USD}")
    assert edited(MARCH, [to_euro, rate]) == [
        f"{table}  warning: `41.0 USc/gal` is 276.58 EUR/t, outside the plausible 100 to 200 EUR/t ({where})\n"
        "hint: are the number and its unit right?"
    ]


def test_the_most_specific_window_holds():
    windows = {"feeds": "", "feeds.ethane": "", "feeds.ethane.contract": "", "outlets": ""}
    assert window_key("feeds.ethane.contract", windows) == "feeds.ethane.contract"
    assert window_key("feeds.ethane.contract.tiers.2", windows) == "feeds.ethane.contract"
    assert window_key("feeds.ethane.spot", windows) == "feeds.ethane"
    assert window_key("feeds.ethane_rich.spot", windows) == "feeds"
    assert window_key("outlets.raw_pygas.deduction", windows) == ""
    assert window_key("indexes.naphtha", windows) == ""


def test_steps_grow_dearer_in_a_purchase_and_cheaper_in_a_sale():
    hint = "hint: a quantity discount needs whole-number decisions, which are not on"
    changes = {"feeds.ethane.pipeline.tiers.2.price": "300 EUR/t", "outlets.ethylene_sale.tiers.2.price": "950 EUR/t"}
    assert found(MARRAM, changes) == [
        f"feeds.ethane.pipeline.tiers.2\n  step 2 costs 300 EUR/t, less than step 1 with 335\n{hint}",
        f"outlets.ethylene_sale.tiers.2\n  step 2 pays 950 EUR/t, more than step 1 with 905\n{hint}",
    ]
    assert places(MARRAM, changes) == [
        place(MARRAM, "feeds", "ethane", "pipeline", "tiers", 1),
        place(MARRAM, "outlets", "ethylene_sale", "tiers", 1),
    ]
    equal = {"feeds.ethane.pipeline.tiers.2.price": "335 EUR/t", "outlets.ethylene_sale.tiers.2.price": "905 EUR/t"}
    assert found(MARRAM, equal) == []


@pytest.mark.parametrize(
    ("most", "level", "end", "hint"),
    [
        ("unlimited", "", ": money from nothing, without a limit", "\nhint: write the `max:` of one of them"),
        ("10 kt", "warning: ", ": the plan will buy to sell", ""),
    ],
)
def test_an_export_dearer_than_an_import_of_the_same_utility(edited, most, level, end, hint):
    scenario, exports = "scenarios/brackwater_2031_03.yaml", "    exports:\n      surplus_steam"
    edits = [
        ("models/brackwater/plant.yaml", exports, f"    imports: {{bought_steam: {{}}}}\n{exports}"),
        (scenario, "max: unlimited, price: 0 USD/t", "max: unlimited, price: 12 USD/t"),
        (scenario, "  surplus_steam:", f"  bought_steam: {{max: {most}, price: 10 USD/t}}\n  surplus_steam:"),
    ]
    number = int(line(scenario, "  surplus_steam:").split(":")[1])
    assert edited(MARCH, edits) == [
        f"{scenario}:{number + 1}  utilities.surplus_steam\n"
        f"  {level}surplus_steam earns 12 USD/t, more than bought_steam costs with 10 ({scenario}:{number}){end}{hint}"
    ]


def test_prices_below_zero_without_and_with_a_maximum(edited):
    scenario = "scenarios/thermal_cracker.yaml"
    assert edited(
        TEXTBOOK,
        [
            (scenario, "price: 6.55 USc/lb", "price: -1 USD/t"),
            (scenario, "max: unlimited, price: 9.73 USc/lb", "max: 9 t, price: -1 USD/t"),
            (scenario, "price: 9.93 USc/lb", "price: -1 USD/t"),
            (scenario, "price: 2.50 USD/MMBtu LHV", "price: -1 USD/GJ LHV"),
            (scenario, "utilities:", "variable_costs:\n  burning: {of: outlet, item: methane_burnt, cost: -1 USD/t}\nutilities:"),
        ],
    ) == [
        f"{line(scenario, '  ethane:')}  feeds.ethane.purchase\n"
        "  the purchase has a price below zero, -1 USD/t, and no maximum\nhint: write its maximum, or mend the sign",
        f"{line(scenario, '  propane:')}  feeds.propane.purchase\n"
        "  warning: the purchase has a price below zero, -1 USD/t: the plan earns by it\nhint: is the sign right?",
        f"{scenario}:{int(line(scenario, '  natural_gas:').split(':')[1]) + 2}  utilities.natural_gas\n"
        "  the import has a price below zero, -1 USD/GJ LHV, and no maximum\nhint: write its maximum, or mend the sign",
        f"{scenario}:{int(line(scenario, 'utilities:').split(':')[1]) + 1}  variable_costs.burning\n"
        "  the cost has a price below zero, -1 USD/t, and no maximum\nhint: write its maximum, or mend the sign",
        f"{line(scenario, '  gasoline_sale:')}  outlets.gasoline_sale\n"
        "  warning: the sale costs money: -1 USD/t\nhint: is the sign right?",
    ]  # fmt: skip


def test_costs_below_zero_are_limited_by_furnace_hours():
    assert found(MARCH, {"variable_costs.chemicals.cost": "-5 USD/t", "variable_costs.decoking.cost": "-5 USD"}) == [
        "variable_costs.chemicals\n  warning: the cost has a price below zero, -5 USD/t: the plan earns by it\n"
        "hint: is the sign right?",
        "variable_costs.decoking\n  warning: the cost has a price below zero, -5 USD: the plan earns by it\n"
        "hint: is the sign right?",
    ]


def test_a_deduction_below_zero_adds_to_the_price():
    window = line("models/brackwater/plant.yaml", "  outlets.crude_c4_contract: 0")
    assert found(MARCH, {"outlets.crude_c4_contract.deduction": "-9 USD/t"}) == [
        f"outlets.crude_c4_contract.deduction\n  warning: `-9 USD/t`, outside the plausible 0 to 500 USD/t ({window})\n"
        "hint: are the number and its unit right?",
        "outlets.crude_c4_contract.deduction\n  warning: a deduction below zero adds to the price: -9 USD/t\n"
        "hint: is the sign right?",
    ]


# ---------------------------------------------------------------------------------- takes


def test_take_or_pay_can_be_had_and_pays_a_share():
    changes = {"feeds.ethane.contract.take_or_pay": "31 kt", "feeds.ethane.contract.shortfall_pays": "140 %"}
    assert found(MARCH, changes) == [
        "feeds.ethane.contract.take_or_pay\n  take-or-pay of 31 kt is more than can be bought, 30 kt",
        "feeds.ethane.contract.shortfall_pays\n  a shortfall pays 140 % of the price, it must be from 0 to 100 %",
    ]
    assert places(MARCH, changes) == [place(MARCH, "feeds", "ethane", "contract")] * 2


def test_what_must_be_bought_has_a_mode(edited):
    modes = "models/marram_point/modes.csv"
    rows = [row for row in (ROOT / modes).read_text(encoding="utf-8").splitlines() if ",heavy_naphtha," in row]
    scenario = "scenarios/marram_point_2031_03.yaml"
    edits = [(modes, f"{row}\n", "") for row in rows]
    edits += [(scenario, "max: 28 kt", "min: 1 kt\n      max: 28 kt"), (scenario, ", catalytic_crackers.heavy_naphtha]", "]")]
    errors = [text for text in edited(MARRAM, edits) if "warning:" not in text]
    assert errors == [
        f"{line(scenario, 'max: 28 kt')}  feeds.heavy_naphtha.cargo.min\n"
        "  1 kt of heavy_naphtha must be bought, but no mode cracks it\n"
        "hint: take the minimum away, or add a mode to the plant"
    ]


def least_hours(name: str, feed: str) -> float:
    case = shipped(name).case
    return min(case.hours_per_kt[mode] for mode in case.modes if case.mode_feed[mode] == feed)


def test_minimum_purchases_fit_into_the_furnaces_that_can_crack_them():
    """Least hours of condensate and gas oil: 1000 / charge × (1 + decoke / run length) of their best modes."""
    changes = {f"feeds.{source}.{side}": amount for source in ("gas_oil.spot_barge", "condensate.spot_cargo")
               for side, amount in (("min", "90 kt"), ("max", "900 kt"))}  # fmt: skip
    least = least_hours(MARCH, "gas_oil") + least_hours(MARCH, "condensate")
    there = 3 * 744 * 0.975
    group = line("models/brackwater/plant.yaml", "  liquid_furnaces:")
    condensate, gas_oil = (place(MARCH, "feeds", *f.split(".")) for f in ("condensate.spot_cargo", "gas_oil.spot_barge"))
    assert found(MARCH, changes) == [
        "feeds\n  90 kt of condensate, 90 kt of gas_oil must be cracked in 2031-03: "
        f"this needs at least {90 * least:,.0f} h of liquid_furnaces, there are {there:,.0f} h\n"
        f"hint: see also {gas_oil}, {group}"
    ]
    assert places(MARCH, changes) == [condensate]


def test_minimum_purchases_that_share_groups():
    """Each of two naphthas alone would fit into the flexible and liquid furnaces, together they do not."""
    case = shipped(MARCH).case
    groups = ("flexible_furnaces", "liquid_furnaces")
    hours = sum(case.limits["furnace_hours", group, "2031-03"].high or 0 for group in groups)
    least = {f: least_hours(MARCH, f) for f in ("light_naphtha", "full_range_naphtha")}
    changes = {
        "feeds.light_naphtha.spot": {"min": f"{0.6 * hours / least['light_naphtha']:.3f} kt", "max": "900 kt"},
        "feeds.full_range_naphtha.spot_cargo": {"min": f"{0.6 * hours / least['full_range_naphtha']:.3f} kt", "max": "900 kt"},
    }
    (message,) = found(MARCH, changes)
    needed = f"this needs at least {1.2 * hours:,.0f} h of flexible_furnaces and liquid_furnaces"
    assert f"{needed}, there are {hours:,.0f} h\n" in message
    for key, entry in changes.items():
        assert found(MARCH, {key: entry}) == []


def test_what_the_tank_cannot_keep_must_be_cracked():
    changes = {"stocks.gas_oil.opening": "199 kt", "stocks.gas_oil.end": {"at_least": "0 kt"}}
    least = least_hours(MONTHS, "gas_oil")
    group = line("models/brackwater/plant.yaml", "  liquid_furnaces:")
    assert found(MONTHS, changes) == [
        f"feeds\n  190 kt of gas_oil must be cracked in 2031-03: this needs at least {190 * least:,.0f} h of liquid_furnaces, "
        f"there are {3 * 744 * 0.975:,.0f} h\nhint: see also {group}",
        "stocks.gas_oil.opening\n  warning: the tank opens with 199 kt, above its largest stock of 9 kt\n"
        "hint: the rest must leave in 2031-03",
    ]
    assert places(MONTHS, changes) == [place(MONTHS, "stocks", "gas_oil")] * 2


def test_minimum_purchases_of_several_months_may_wait_in_the_tank():
    """One big month fits since the tank takes the rest; two big months do not."""
    least = least_hours(MONTHS, "gas_oil")
    month = 3 * 744 * 0.975 / least
    entry = {"max": "900 kt", "min": {"2031-03": f"{month + 5:.3f} kt", "other_months": "0 kt"}}
    assert found(MONTHS, {"feeds.gas_oil.spot_barge": entry}) == []
    april = 3 * 720 * 0.975 / least
    entry["min"]["2031-04"] = f"{april:.3f} kt"
    assert found(MONTHS, {"feeds.gas_oil.spot_barge": entry}) == []
    entry["min"]["2031-04"] = f"{april + 5:.3f} kt"
    (message,) = found(MONTHS, {"feeds.gas_oil.spot_barge": entry})
    assert "must be cracked in 2031-03 to 2031-04: this needs at least" in message


# ---------------------------------------------------------------------------------- tanks and ways out


def test_a_tank_opens_inside_its_limits():
    assert found(MONTHS, {"stocks.propane.opening": "1 kt"}) == [
        "stocks.propane.opening\n  warning: the tank opens with 1 kt, below its smallest stock of 2 kt\n"
        "hint: the rest must come in 2031-03"
    ]


def test_the_end_rule_fits_into_the_tank():
    where = place(MONTHS, "stocks", "propane")
    assert found(MONTHS, {"stocks.propane.end": {"at_least": "15 kt"}}) == [
        f"stocks.propane.end\n  15 kt must be there at the end, but the tank holds 14 kt\nhint: its largest stock: {where}"
    ]
    assert found(MONTHS, {"stocks.propane.opening": "16 kt"}) == [
        "stocks.propane.opening\n  warning: the tank opens with 16 kt, above its largest stock of 14 kt\n"
        "hint: the rest must leave in 2031-03",
        f"stocks.propane.end\n  16 kt must be there at the end, but the tank holds 14 kt\nhint: its largest stock: {where}",
    ]


def test_a_cut_that_is_made_has_a_way_out():
    changes = {"outlets.c5_sale.max": {"2031-04": "0 kt", "2031-06": "0 kt", "other_months": "12 kt"}}
    assert found(MONTHS, changes) == [
        "outlets.c5_sale.max\n  warning: every way out of c5_cut is closed in 2031-04, 2031-06 (c5_sale): "
        "what makes it cannot run"
    ]
    assert places(MONTHS, changes) == [place(MONTHS, "outlets", "c5_sale")]
    assert found(MARCH, {"outlets.hydrogen_sale.max": "0 kt"}) == []  # may be burnt
    assert found(MARCH, {"outlets.propane_sale.max": "0 kt", "outlets.chemical_grade_propylene.max": "0 kt"}) == []  # recycled
    tank = {"stocks.c5_cut": {**TANK, "end": {"value": "400 USD/t"}}}
    assert found(MARCH, {"outlets.c5_sale.max": "0 kt", **tank}) == []


# ---------------------------------------------------------------------------------- limits that are missing


def unbounded(feed: str, outlet: str = "ethylene_sale") -> str:
    scenario = "scenarios/thermal_cracker.yaml"
    return (
        f"{line(scenario, f'  {feed}:')}  feeds.{feed}.purchase.max\n"
        f"  can be unbounded: nothing ends what is bought here and sold as {outlet} ({line(scenario, f'  {outlet}:')})\n"
        "hint: write a maximum for one of them, or hours or capacities that they use"
    )


def test_what_nothing_limits_is_refused(edited):
    feeds = ("ethane", "propane", "gas_oil", "natural_gasoline")
    assert edited(TEXTBOOK, UNLIMITED) == [unbounded(feed) for feed in feeds]


SCENARIO = "scenarios/thermal_cracker.yaml"


@pytest.mark.parametrize(
    "edits",
    [
        UNLIMITED[1:],
        UNLIMITED[:1],
        UNLIMITED[:2],
        [*UNLIMITED, (SCENARIO, "gasoline_sale:  {max: unlimited", "gasoline_sale:  {max: 9 t")],
        [*UNLIMITED, (SCENARIO, "natural_gas: {max: unlimited", "natural_gas: {max: 9 GJ LHV")],
        [*UNLIMITED, (SCENARIO, "utilities:", "limits:\n  made: {sum: [{cut: ethylene}], max: 9 t}\nutilities:")],
        [*UNLIMITED, (SCENARIO, "utilities:", "limits:\n  made: {sum: [{component: ethylene}], max: 9 t}\nutilities:")],
        [*UNLIMITED, (SCENARIO, "utilities:", "limits:\n  load: {sum: [{unit_load: cracker}], max: 9 t}\nutilities:")],
        [*UNLIMITED, (SCENARIO, "utilities:", "limits:\n  gas: {sum: [{imported: natural_gas}], max: 9 GJ LHV}\nutilities:")],
        [*UNLIMITED, ("models/thermal_cracker/plant.yaml", "furnaces: unlimited  ", "furnaces: 3  "),
         ("models/thermal_cracker/modes.csv", "design,,,,,", "design,,20,,,")],
        [*UNLIMITED, ("models/thermal_cracker/plant.yaml", "methane_burnt:  {from: methane,  to: own_use, max: unlimited",
                      "methane_burnt:  {from: methane,  to: own_use, max: 9 t")],
    ],
)  # fmt: skip
def test_one_limit_on_the_way_is_enough(edited, edits):
    assert [text for text in edited(TEXTBOOK, edits) if "warning:" not in text] == []


def test_a_limit_on_one_feed_leaves_the_others(edited):
    limit = (SCENARIO, "utilities:", "limits:\n  some: {sum: [{bought: [ethane, propane]}], max: 9 t}\nutilities:")
    assert edited(TEXTBOOK, [*UNLIMITED, limit]) == [unbounded("gas_oil"), unbounded("natural_gasoline")]


def test_a_closed_recycle_ends_what_makes_it(edited):
    """Ethane leaves only as a recycle feed: with hours on that mode alone, nothing that gives ethane is without end."""
    group = "  cracker:\n    furnaces: unlimited "
    other = '  second: {furnaces: 1, kind: thermal, yields: thermal, fired_with: fuel, unplanned_loss: 0 %, source: "assumed"}\n'
    edits = [
        *UNLIMITED,
        ("models/thermal_cracker/plant.yaml", group, other + group),
        ("models/thermal_cracker/modes.csv", "cracker,recycle_ethane,design,,,,,", "second,recycle_ethane,design,,20,,,"),
    ]
    assert [text for text in edited(TEXTBOOK, edits) if "warning:" not in text] == []


def test_a_side_stream_that_nothing_limits_is_refused(edited):
    units, scenario = "models/marram_point/recovery_units.csv", "scenarios/marram_point_2031_03.yaml"
    edits = [
        (units, "propylene_splitter,33,t/h,propylene equivalent,45", "propylene_splitter,unlimited,t/h,propylene equivalent,0"),
        (units, "refinery_propylene_treater,5", "refinery_propylene_treater,unlimited"),
        (scenario, "crude_c4_sale:  {max: 22 kt", "crude_c4_sale:  {max: unlimited"),
        (scenario, "neighbour: {max: 3.2 kt", "neighbour: {max: unlimited"),
        (scenario, "propylene_sale: {min: 12 kt, max: 32 kt", "propylene_sale: {min: 12 kt, max: unlimited"),
    ]
    assert edited(MARRAM, edits) == []  # propane is still limited
    edits.append((scenario, "propane_sale:   {max: 8 kt", "propane_sale:   {max: unlimited"))
    assert edited(MARRAM, edits) == [
        f"{line(scenario, '    neighbour:')}  side_streams.refinery_propylene.neighbour.max\n"
        f"  can be unbounded: nothing ends what is bought here and sold as propylene_sale "
        f"({line(scenario, '  propylene_sale:')})\n"
        "hint: write a maximum for one of them, or hours or capacities that they use"
    ]


def test_the_same_outage_or_factor_twice():
    """Outages add up and factors multiply: the same line again is a slip, another of the same month is not."""
    outage = {"month": "2031-03", "group": "gas_furnaces", "hours": "24 h", "reason": "inspection"}
    (message,) = found(MARCH, {"outages": [outage, outage]})
    assert message.startswith("outages.2\n  is written twice, first in line ")
    assert found(MARCH, {"outages": [outage, {**outage, "reason": "another furnace"}]}) == []
    factor = {"month": "2031-03", "unit": "c2_splitter", "factor": 0.9, "reason": "fouled"}
    (message,) = found(MARCH, {"unit_factors": [factor, factor]})
    assert message.startswith("unit_factors.2\n  is written twice, first in line ")


def test_a_stock_at_the_end_worth_far_more_than_its_feed():
    tank = {"opening": "6 kt", "min": "0 kt", "max": "22 kt", "holding": "0.35 USD/t/month"}
    (message,) = found(MARCH, {"stocks.condensate": {**tank, "end": {"value": "5000 USD/t"}}})
    assert message == (
        "stocks.condensate.end.value\n  warning: 5,000 USD/t at the end, while condensate costs 508.7 to 508.7\n"
        "hint: is the unit right?"
    )
    assert found(MARCH, {"stocks.condensate": {**tank, "end": {"value": "505 USD/t"}}}) == []


def test_a_named_limit_in_barrels_or_higher_heating_value():
    """350 kbbl of 715 kg/m3: 350,000 · 0.158987294928 · 0.715 / 1e6 = 39.7866 kt; 200 TJ HHV · 0.9015 = 180.3 TJ LHV.

    Two feeds of different densities have none in common, so barrels of both cannot be added up."""
    march = shipped(MARCH)
    barrels = {"sum": [{"bought": "full_range_naphtha"}], "max": "350 kbbl"}
    heat = {"sum": [{"imported": "natural_gas"}], "max": "200 TJ HHV"}
    limits = march.with_({"limits": {"barrels": barrels, "heat": heat}}).case.limits
    assert limits["named", "barrels", "2031-03"].high == pytest.approx(350 * 0.158987294928 * 0.715, rel=1e-12)
    assert limits["named", "heat", "2031-03"].high == pytest.approx(180.3, rel=1e-12)
    both = {"sum": [{"bought": ["full_range_naphtha", "condensate"]}], "max": "350 kbbl"}
    (message,) = found(MARCH, {"limits": {"both": both}})
    assert "a volume needs a density to become a mass" in message
