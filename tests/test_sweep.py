"""Sweeps: each case is the plan that its scenario gives by itself, and the results say what is what."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from plants import ONE_FEED, read
from sweeps import ALL, NAN, agrees_with_plans, cases_of, numbers_of, optimal, quantities_of, solved

from olefinlp import NoPlan, make_plan, sweep
from olefinlp.answers.plan import Plan
from olefinlp.answers.sweep import Sweep, prepare
from olefinlp.answers.sweep_readings import MEASURES, read_out
from olefinlp.answers.sweep_refused import in_a_line
from olefinlp.inputs.findings import InputError
from olefinlp.inputs.scenario import Scenario
from olefinlp.inputs.sweep_cases import SweepCases
from olefinlp.lp.sweep import NO_CASE, OPTIMAL

MARCH, SIX = "brackwater_2031_03.yaml", "brackwater_2031_03_to_08.yaml"
MARRAM, TEXTBOOK = "marram_point_2031_03.yaml", "thermal_cracker.yaml"
Read = Callable[[str], Scenario]


def _all_prices(march: Scenario, count: int) -> SweepCases:
    items = list(dict.fromkeys(item for item, _ in march.case.prices))
    draws = np.random.default_rng(1).uniform(-10, 10, (len(items), count))
    return cases_of(march, dict(zip(items, draws, strict=True)), percent=items)


def _limits(march: Scenario, count: int) -> SweepCases:
    draw = np.random.default_rng(2).uniform
    return cases_of(
        march,
        {
            "feeds.ethane.contract.max": draw(19, 40, count),
            "feeds.full_range_naphtha.spot_cargo.max": draw(30, 90, count),
            "outlets.ethylene_contract.min": draw(30, 57, count),
            "outlets.crude_c4_contract.max": draw(10, 20, count),
            "feeds.light_naphtha.contract.take_or_pay": draw(5, 39, count),
        },
    )


def _factor_and_outage(march: Scenario, count: int) -> SweepCases:
    draw = np.random.default_rng(3).uniform
    values = {
        "recovery_units.cracked_gas_compressor.factor": draw(0.8, 1.1, count),
        "recovery_units.c3_splitter.factor": draw(0.7, 1.0, count),
        "furnace_groups.liquid_furnaces.outage_hours": draw(0, 400, count),
    }
    return cases_of(march, values)


def _minimum(march: Scenario, count: int) -> SweepCases:
    return cases_of(march, {"outlets.polymer_grade_propylene.min": np.linspace(5, 40, count)})


def _yield_and_price(march: Scenario, count: int) -> SweepCases:
    draw = np.random.default_rng(4).uniform
    values = {
        "yields.thermal.full_range_naphtha.high.ethylene": draw(26, 31, count),
        "feeds.full_range_naphtha.spot_cargo": draw(500, 570, count),
        "yields.thermal.ethane.high.ethylene": draw(-2, 2, count),
    }
    return cases_of(march, values, percent=["yields.thermal.ethane.high.ethylene"])


def _run_length(march: Scenario, count: int) -> SweepCases:
    return cases_of(march, {"modes.gas_furnaces.ethane.high.run_length": np.linspace(300, 2000, count)})


def _leaning_prices(march: Scenario, count: int) -> SweepCases:
    draw = np.random.default_rng(5).uniform
    values = {
        "utilities.natural_gas": draw(3, 8, count),
        "outlets.fuel_gas_export": draw(0.5, 1, count),
        "outlets.polymer_grade_propylene": draw(30, 45, count),
        "outlets.chemical_grade_propylene": draw(-100, 40, count),
        "outlets.c5_sale": draw(300, 600, count),
        "contents.pygas.c5": draw(0.8, 1.2, count),
    }
    return cases_of(march, values)


def _factor_times_capacity(march: Scenario, count: int) -> SweepCases:
    draw = np.random.default_rng(6).uniform
    values = {
        "recovery_units.cracked_gas_compressor.factor": draw(0.9, 1.1, count),
        "recovery_units.cracked_gas_compressor.capacity": draw(200, 240, count),
    }
    return cases_of(march, values)


def _six_months(six: Scenario, count: int) -> SweepCases:
    draw = np.random.default_rng(7).uniform
    values = {
        "feeds.full_range_naphtha.spot_cargo 2031-05": draw(480, 600, count),
        "outlets.ethylene_contract": draw(-10, 10, count),
        "stocks.light_naphtha.max": draw(15, 40, count),
        "outlets.crude_c4_contract.max 2031-08": draw(8, 15, count),
        "recovery_units.c3_splitter.factor 2031-06": draw(0.7, 1, count),
    }
    return cases_of(six, values, percent=["outlets.ethylene_contract"])


def _marram_point(marram: Scenario, count: int) -> SweepCases:
    draw = np.random.default_rng(8).uniform
    values = {
        "indexes.naphtha": draw(480, 620, count),
        "feeds.light_naphtha.contract": draw(0, 20, count),
        "feeds.heavy_naphtha.cargo": draw(0.9, 1.05, count),
        "feeds.ethane.pipeline.tiers.1": draw(300, 390, count),
        "outlets.ethylene_sale.tiers.2": draw(800, 920, count),
        "outlets.gasoline_sale": draw(40, 50, count),
        "utilities.grid_power.max": draw(20, 40, count),
    }
    return cases_of(marram, values)


def _textbook(textbook: Scenario, count: int) -> SweepCases:
    draw = np.random.default_rng(9).uniform
    values = {
        "feeds.ethane.purchase": draw(5, 8, count),
        "feeds.propane.purchase": draw(7, 11, count),
        "utilities.natural_gas": draw(1.5, 4, count),
        "recovery_units.ethylene.factor": draw(0.8, 1.2, count),
    }
    return cases_of(textbook, values)


SWEEPS: dict[str, tuple[str, Callable[[Scenario, int], SweepCases], int, int, bool]] = {
    "prices of all items": (MARCH, _all_prices, 300, 9, True),
    "limits": (MARCH, _limits, 200, 9, True),
    "a factor and an outage": (MARCH, _factor_and_outage, 150, 8, True),
    "a minimum, to where nothing is possible": (MARCH, _minimum, 36, 7, True),
    "yields and a price": (MARCH, _yield_and_price, 60, 8, True),
    "a run length, which is no straight line": (MARCH, _run_length, 18, 6, True),
    "prices that lean on each other, and shares": (MARCH, _leaning_prices, 150, 8, True),
    "factor times capacity": (MARCH, _factor_times_capacity, 10, 6, False),
    "six months": (SIX, _six_months, 20, 3, True),
    "another plant: steps, an index, another money": (MARRAM, _marram_point, 100, 10, True),
    "the textbook's cracker": (TEXTBOOK, _textbook, 100, 12, True),
}


SLOW = ("limits", "factor times capacity", "a run length, which is no straight line", "six months")


@pytest.mark.parametrize("name", [pytest.param(name, marks=[pytest.mark.slow] * (name in SLOW)) for name in SWEEPS])
def test_each_case_is_the_plan_that_its_scenario_gives(shipped_scenario: Read, name: str) -> None:
    """Margins always; quantities and worths where no other plan, and no other duals, are as good."""
    file, made, count, checked, shared = SWEEPS[name]
    found = solved(made(shipped_scenario(file), count))
    assert found.shared == shared, found.note
    with_plan, without = np.flatnonzero(found.status == OPTIMAL), np.flatnonzero(found.status == NO_CASE)
    chosen = with_plan[np.linspace(0, len(with_plan) - 1, checked).astype(int)]
    only, sure = agrees_with_plans(found, [*chosen, *without[:4]], most=0 if file == SIX else 2)  # worths of six months take long
    assert only >= checked // 2 and (sure >= 3 or file == SIX), (only, sure, "too few cases say anything of quantities or worths")
    assert len(np.unique(found.margin[with_plan])) > 3, "nothing that varies matters"


def test_cases_without_a_plan_have_none_by_themselves(shipped_scenario: Read) -> None:
    """A minimum of more than can be made: the program says what clashes, as the plan does."""
    found = solved(cases_of(shipped_scenario(MARCH), {"outlets.polymer_grade_propylene.min": [20, 29, 31, 32, 33]}))
    assert [found.reason(n) == "" for n in range(5)] == [True, False, False, False, False]
    for number in (1, 2, 3):
        with pytest.raises(NoPlan):
            found.plan(number)
        assert found.reason(number).startswith("limits clash: ")
        assert "polymer_grade_propylene" in found.reason(number)
    assert "the minimum 33 kt is above the maximum 32 kt" in found.reason(4)
    assert found.failed == 4 and np.isnan(found.margin[1:]).all() and np.isnan(found.readings[1:]).all()
    assert str(found).endswith("4 without a plan")


BOILER = """
    utilities:
      power: {measured_in: power, imports: {grid: {}}, exports: {back: {}}}
      steam: {measured_in: mass, exports: {neighbour: {}}}
    conversions: {boiler: {makes: {steam: 1 t}, uses: {power: 1 MWh}, max: unlimited}}
"""
POWER = """
    feeds: {naphtha: {spot: {max: 2 kt, price: 500 USD/t}}}
    utilities:
      grid: {max: unlimited, price: 50 USD/MWh}
      back: {max: unlimited, price: 30 USD/MWh}
      neighbour: {max: unlimited, price: 40 USD/t}
"""


def _boiler(folder: Path) -> Scenario:
    uses = "utility, direction, of, item, amount, unit\npower, uses, charge, all, 0.1, MWh/t"
    return read(folder, **ONE_FEED, plant=BOILER, scenario=POWER, utility_uses=uses)


def test_margins_without_an_end(tmp_path: Path) -> None:
    """Steam made of bought power and sold for more than the power costs, both unlimited: found case by case."""
    found = solved(cases_of(_boiler(tmp_path), {"utilities.neighbour": [40, 60, 45, 70]}))
    assert found.status.tolist() == [0, 2, 0, 2]
    assert [found.reason(n) for n in range(4)] == ["", "no plan: the margin has no end", "", "no plan: the margin has no end"]
    assert found.margin[[0, 2]] == pytest.approx([make_plan(found.cases.scenario_of(n)).margin / 1000 for n in (0, 2)])
    assert np.isnan(found.held[1])


def test_money_from_nothing_is_refused_as_in_a_scenario(tmp_path: Path) -> None:
    """An export dearer than an import of the same utility, or power that is paid for: no valid scenario, whatever the program."""
    cases = cases_of(_boiler(tmp_path), {"utilities.back": [30, 60, 30, -5, 49.9], "utilities.grid": [50, 50, -1, 50, NAN]})
    found = solved(cases)
    assert found.status.tolist() == [0, 4, 4, 0, 0]
    for number in (1, 2):
        with pytest.raises(InputError) as error:
            cases.scenario_of(number)
        assert found.reason(number).partition(" (")[0] in in_a_line(error.value)
    assert "money from nothing" in found.reason(1) and "has a price below zero, -1 USD/MWh, and no maximum" in found.reason(2)
    assert agrees_with_plans(found, [0, 3, 4])[0]


# ---------------------------------------------------------------------------------- what today's plan would earn


def test_what_todays_plan_earns_at_other_prices(shipped_scenario: Read, march: Plan) -> None:
    """The same quantities at the prices of each case, summed from the plan's own program built anew."""
    from olefinlp.lp.algebra import build_model
    from olefinlp.lp.compile import compile_model

    found = solved(_all_prices(shipped_scenario(MARCH), 40))
    for number in range(0, 40, 8):
        lp = compile_model(build_model(found.cases.scenario_of(number).case))
        assert found.held[number] == pytest.approx(float(lp.cost @ march.solution.x) + lp.offset, rel=1e-11)
    assert (found.held <= found.margin * (1 + 1e-12)).all()
    assert found.prices_only


def test_today_itself_earns_what_is_planned(shipped_scenario: Read, march: Plan) -> None:
    found = solved(cases_of(shipped_scenario(MARCH), {"feeds.ethane.contract": [NAN, 41.0]}))
    assert found.margin == pytest.approx([march.margin / 1000] * 2, rel=1e-12)
    assert found.held == pytest.approx(found.margin, rel=1e-12)


def test_nothing_is_held_under_other_limits(shipped_scenario: Read) -> None:
    found = solved(cases_of(shipped_scenario(MARCH), {"feeds.ethane.contract": [40, 41], "feeds.ethane.contract.max": [30, 31]}))
    assert np.isnan(found.held).all() and not found.prices_only


# ---------------------------------------------------------------------------------- the table of results


@pytest.fixture(scope="module")
def small(march: Plan) -> Sweep:
    values = {"feeds.ethane.contract": [38, NAN, 45], "outlets.ethylene_contract.min": [44, 50, 59]}
    return solved(cases_of(march.scenario, values, labels=("cheap", "today", "dear")), base=march)


def test_the_table_says_what_is_what(small: Sweep) -> None:
    frame = small.to_frame()
    first = ["case", "label", "feeds.ethane.contract", "outlets.ethylene_contract.min", "status", "reason", "margin", "held"]
    assert list(frame.columns) == [*first, *small.read_out.names]
    assert frame["case"].tolist() == [1, 2, 3] and frame["label"].tolist() == ["cheap", "today", "dear"]
    assert frame["status"].tolist() == ["optimal", "optimal", "no valid case"]
    assert frame["reason"][2] == small.reason(2) != ""
    assert np.array_equal(frame["margin"], small.margin, equal_nan=True)
    assert np.array_equal(frame[list(small.read_out.names)].to_numpy(), small.readings, equal_nan=True)
    assert len(small) == 3


def test_every_column_of_numbers_has_a_unit(small: Sweep) -> None:
    units = small.units
    assert set(units) == set(small.columns()) - {"case", "label", "status", "reason"}
    assert units["feeds.ethane.contract"] == "USc/gal" and units["margin"] == units["held"] == "kUSD"
    assert units["bought.ethane.contract"] == "kt" and units["sold.fuel_gas_export"] == "TJ LHV"
    assert units["traded.grid_power"] == "GWh" and units["traded.natural_gas"] == "TJ LHV"
    by_percent = solved(cases_of(small.cases.scenario, {"feeds.ethane.contract": [1.0]}, ["feeds.ethane.contract"]))
    assert by_percent.units["feeds.ethane.contract"] == "%"


def test_rows_of_the_table_alone(small: Sweep) -> None:
    whole, last = small.columns(), small.columns(2, 9)
    assert last["case"].tolist() == [3] and last["reason"] == whole["reason"][2:]
    assert np.array_equal(last["margin"], whole["margin"][2:], equal_nan=True)


def test_a_sweep_in_words(small: Sweep) -> None:
    text, page = str(small), small._repr_html_()
    assert text.startswith("3 cases of March 2031, base prices: feeds.ethane.contract, outlets.ethylene_contract.min; margin ")
    assert text.endswith("kUSD; 1 without a plan")
    assert page.startswith(f"<p>{text}</p>") and page.count("<tr") == 4


def test_only_the_first_rows_are_shown(shipped_scenario: Read) -> None:
    found = solved(cases_of(shipped_scenario(TEXTBOOK), {"feeds.ethane.purchase": np.linspace(5, 8, 25)}))
    assert found._repr_html_().count("<tr") == 11


def test_a_plan_of_a_case(small: Sweep) -> None:
    plan = small.plan(0)
    assert plan.margin / 1000 == pytest.approx(small.margin[0], rel=1e-12)
    assert quantities_of(plan)["bought.ethane.contract"] == pytest.approx(small.columns(0, 1)["bought.ethane.contract"][0])


# ---------------------------------------------------------------------------------- measures


@pytest.mark.parametrize("file", [MARCH, SIX, MARRAM, TEXTBOOK])
def test_every_measure_reads_todays_plan(shipped_plan: Callable[[str], Plan], file: str) -> None:
    """All columns have names of their own; the values of one case, today, are those of the plan's tables."""
    plan = shipped_plan(file)
    item = next(
        item
        for item, _ in plan.quantities.case.prices
        if not plan.quantities.case.prices[item, plan.quantities.case.months[0]].of
    )
    found = solved(cases_of(plan.scenario, {item: [NAN]}), base=plan)
    assert len(set(found.read_out.names)) == len(found.read_out.names) == found.read_out.arrays.count
    row = {name: column[0] for name, column in found.columns().items()}
    for name, value in quantities_of(plan).items():
        assert row[name] == pytest.approx(value, rel=1e-6, abs=1e-7), name
    months = plan.quantities.case.months
    for cut in plan.quantities.case.cuts:
        assert row[f"made.{cut}"] == pytest.approx(sum(plan.quantities.value("cut_made", cut, m) for m in months), abs=1e-9)
    for trade in plan.quantities.case.trades:
        assert row[f"traded.{trade}"] == pytest.approx(sum(plan.quantities.value("trade", trade, m) for m in months), abs=1e-9)
    for tank in plan.stocks.rows:
        if tank["month"] == months[-1] and f"stock at the end.{tank['item']}" in row:
            assert row[f"stock at the end.{tank['item']}"] == pytest.approx(tank["closing"], abs=1e-7)
    assert not np.signbit(found.readings[~np.isnan(found.readings)]).any(), "nothing here is below zero, nor minus zero"


def test_measures_are_read_in_their_order_and_once(march: Plan) -> None:
    case, lp = march.quantities.case, march.lp
    assert read_out(case, lp, ["feeds", "margin", "feeds"]).names == read_out(case, lp, ["feeds"]).names
    assert read_out(case, lp, []).names == ()
    assert {reading.split(".")[0] for reading in read_out(case, lp, ALL).names} == {
        *("bought", "sold", "charged", "made", "traded", "load", "hours", "worth")
    }


def test_an_unknown_measure_is_refused_with_the_nearest(march: Plan) -> None:
    with pytest.raises(ValueError, match="`feed` is no measure; did you mean `feeds`"):
        read_out(march.quantities.case, march.lp, ["feed"])
    assert set(MEASURES) >= {"feeds", "products", "loads", "worths"}


# ---------------------------------------------------------------------------------- from the outside


def test_a_sweep_of_a_plan_and_of_its_scenario_are_the_same(march: Plan) -> None:
    vary = {"feeds.ethane.contract": [38, 41, 45], "feeds.ethane.contract.max": [25, 30]}
    told: list[tuple[int, int]] = []
    of_plan = sweep(march, vary, measures=["feeds"], workers=1, told=lambda done, count: told.append((done, count)))
    of_scenario = sweep(march.scenario, vary, measures=["feeds"], workers=2)
    assert np.array_equal(numbers_of(of_plan), numbers_of(of_scenario), equal_nan=True)
    assert told == [(6, 6)] and optimal(of_plan) == 6


def test_today_must_have_a_plan(march: Plan) -> None:
    hopeless = march.scenario.with_({"outlets.polymer_grade_propylene.min": "31 kt"})
    with pytest.raises(NoPlan):
        prepare(cases_of(hopeless, {"feeds.ethane.contract": [40]}))
