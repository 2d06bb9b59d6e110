"""Cases side by side: each plan is the one that a program of its own would give, whatever the order of the cases."""

from __future__ import annotations

import dataclasses
import math
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from conftest import ROOT

from olefinlp import compare_cases, make_plan, read_cases, read_scenario
from olefinlp.answers.case_tables import (
    feed_lines,
    flat_lines,
    furnace_lines,
    limit_lines,
    load_lines,
    margin_lines,
    money_of_cases,
    price_lines,
    slate_lines,
)
from olefinlp.answers.comparison import CasePlanner, Comparison
from olefinlp.answers.plan import Plan
from olefinlp.inputs.scenario import Scenario
from olefinlp.lp.algebra import build_model
from olefinlp.lp.case_terms import SharedProgram, same_program, with_terms
from olefinlp.lp.compile import compile_model

MARCH = ROOT / "scenarios" / "brackwater_2031_03.yaml"
SIX_MONTHS = ROOT / "scenarios" / "brackwater_2031_03_to_08.yaml"
MARCH_CASES = {
    "Base": 26_808.667,
    "High crude": 27_897.791,
    "Low crude": 23_712.786,
    "Cheap ethane": 28_248.150,
    "Strong propylene": 30_135.475,
    "Weak aromatics": 26_761.877,
}
"""kUSD before fixed cost, by an independent route that shares no code (tests/independent_route.py)."""

BOUNDS: dict[str, dict[str, Any]] = {
    "a purchase": {"feeds.ethane.contract.max": "25 kt"},
    "a minimum": {"outlets.polymer_grade_propylene.min": "20 kt"},
    "a take-or-pay": {"feeds.light_naphtha.contract.take_or_pay": "30 kt"},
    "a sale": {"outlets.ethylene_contract.max": "50 kt", "outlets.ethylene_contract.min": "20 kt"},
    "a unit": {"unit_factors.1.factor": 0.9},
    "fixed cost": {"fixed_costs.whole_plant": "1 MUSD/month"},
}
"""Changes of March that leave every coefficient as it is."""


@pytest.fixture(scope="module")
def comparison() -> Comparison:
    return compare_cases(read_cases(MARCH))


def test_every_case_has_the_margin_of_the_independent_route(comparison: Comparison) -> None:
    assert {name: plan.margin / 1000 for name, plan in comparison.plans.items()} == pytest.approx(MARCH_CASES, abs=6e-4)
    assert comparison.names == tuple(MARCH_CASES)
    assert comparison.shared == len(MARCH_CASES)


def test_every_case_is_the_plan_that_a_program_of_its_own_gives(comparison: Comparison) -> None:
    for name, plan in comparison.plans.items():
        own = make_plan(plan.scenario)
        assert plan.margin == pytest.approx(own.margin, rel=1e-12), name
        assert plan.solution.x == pytest.approx(own.solution.x, abs=1e-8), name
        assert plan.certificate.holds


@pytest.mark.parametrize("change", BOUNDS, ids=str)
def test_changed_bounds_are_those_of_a_program_built_anew(march: Plan, change: str) -> None:
    scenario = march.scenario.with_(BOUNDS[change], price_case="Low crude")
    terms = SharedProgram(march.quantities.case, march.lp, march.price_map).terms(scenario.case)
    assert terms is not None
    shared, own = with_terms(march.lp, terms), compile_model(build_model(scenario.case))
    for name in ("row_low", "row_high", "low", "high", "starts", "index", "value"):
        assert np.array_equal(getattr(shared, name), getattr(own, name)), name
    assert shared.cost == pytest.approx(own.cost, abs=1e-12)
    assert CasePlanner(march).plan(scenario).margin == pytest.approx(make_plan(scenario).margin, rel=1e-12)


def test_stocks_at_the_start_are_bounds_too() -> None:
    base = make_plan(read_scenario(SIX_MONTHS))
    item = next(iter(base.scenario.file.stocks))
    scenario = base.scenario.with_({f"stocks.{item}.opening": "5 kt", f"stocks.{item}.end": {"at_least": "6 kt"}})
    terms = SharedProgram(base.quantities.case, base.lp, base.price_map).terms(scenario.case)
    assert terms is not None
    shared, own = with_terms(base.lp, terms), compile_model(build_model(scenario.case))
    assert np.array_equal(shared.row_low, own.row_low)
    assert np.array_equal(shared.row_high, own.row_high)
    planner = CasePlanner(base)
    assert planner.plan(scenario).margin == pytest.approx(make_plan(scenario).margin, rel=1e-10)
    assert planner.shared == 1


NOT_SHARED: dict[str, dict[str, Any]] = {
    "a limit that was not there": {"feeds.gas_oil.spot_barge.min": "1 kt", "feeds.n_butane.spot_cargo.take_or_pay": "2 kt"}
    | {"feeds.n_butane.spot_cargo.shortfall_pays": "10 %"},
    "what a shortfall pays": {"feeds.ethane.contract.shortfall_pays": "20 %"},
    "the length of the month": {"months": ["2031-04"], "unit_factors": []},
}


@pytest.mark.parametrize("change", NOT_SHARED, ids=str)
def test_changed_coefficients_get_a_program_of_their_own(march: Plan, change: str) -> None:
    scenario = march.scenario.with_(NOT_SHARED[change])
    assert not same_program(march.quantities.case, scenario.case)
    planner = CasePlanner(march)
    assert planner.plan(scenario).margin == pytest.approx(make_plan(scenario).margin, rel=1e-12)
    assert planner.shared == 0


def test_every_field_of_a_case_is_compared_or_known_to_be_a_bound(march: Plan) -> None:
    """A new field that nobody thought of counts as a coefficient: then a case is planned on its own, slower and right."""
    case = march.quantities.case
    for field in dataclasses.fields(case):
        value = getattr(case, field.name)
        if field.name in ("scenario", "periods", "prices", "inputs", "limits", "tier_size", "sale_size") or not value:
            continue
        other = dataclasses.replace(case, **{field.name: type(value)()})
        alike = same_program(case, other)
        assert alike == (field.name in ("opening", "fixed_use", "fixed_costs")), field.name


def test_the_order_of_the_cases_changes_nothing(tmp_path: Path, comparison: Comparison) -> None:
    names = list(MARCH_CASES)
    listed = tmp_path / "cases.yaml"
    orders = [["Base", *reversed(names[1:])], ["Base", "Strong propylene", "High crude"]]
    for order in orders:
        lines = [f"scenario: {MARCH.as_posix()}", "cases:", *(f"  - {{name: {name}, price_case: {name}}}" for name in order)]
        listed.write_text("\n".join(lines), encoding="utf-8")
        again = compare_cases(read_cases(listed))
        for name in order:
            assert again.plan(name).margin == comparison.plan(name).margin, name
            assert np.array_equal(again.plan(name).solution.x, comparison.plan(name).solution.x), name


def cases_of(folder: Path, *cases: str, scenario: Path = MARCH) -> Comparison:
    """A comparison of a YAML list."""
    listed = folder / "cases.yaml"
    listed.write_text(
        "\n".join([f"scenario: {scenario.as_posix()}", "cases:", *(f"  - {case}" for case in cases)]), encoding="utf-8"
    )
    return compare_cases(read_cases(listed))


def test_an_impossible_case_stays_as_a_column_with_its_reason(tmp_path: Path) -> None:
    found = cases_of(
        tmp_path,
        "{name: first}",
        "{name: too much, changes: {outlets.ethylene_contract.min: 57.9 kt, outlets.polymer_grade_propylene.min: 31 kt}}",
        "{name: last, price_case: High crude}",
    )
    first, impossible, last = found.cases
    assert (first.plan is not None, impossible.plan, last.plan is not None) == (True, None, True)
    assert "polymer_grade_propylene" in impossible.reason
    assert found.weights == pytest.approx({"first": 0.5, "last": 0.5})
    table = feed_lines(found).to_table(found.names)
    assert [column.key for column in table.columns][-5:] == ["first", "too much", "last", "minus_too much", "minus_last"]
    assert all(row["too much"] is None and row["minus_too much"] is None for row in table.rows)


def test_an_impossible_first_case_does_not_stop_the_others(tmp_path: Path) -> None:
    found = cases_of(
        tmp_path,
        "{name: first, changes: {outlets.ethylene_contract.min: 57.9 kt, outlets.polymer_grade_propylene.min: 31 kt}}",
        "{name: other}",
        "{name: third, price_case: Low crude}",
    )
    assert list(found.plans) == ["other", "third"]
    assert found.plan("third").margin / 1000 == pytest.approx(MARCH_CASES["Low crude"], abs=6e-4)
    assert all(row["minus_other"] is None for row in margin_lines(found).to_table(found.names).rows)


def test_tables_hold_the_plans_numbers_in_the_same_rows(comparison: Comparison) -> None:
    for lines in (price_lines, feed_lines, slate_lines, load_lines):
        table = lines(comparison)
        assert all(set(line.values) == set(MARCH_CASES) for line in table.lines), table.title
    naphtha = next(line for line in feed_lines(comparison).lines if line.group == "full_range_naphtha")
    assert naphtha.values["Base"] == pytest.approx(47.558, abs=1e-3)
    assert naphtha.values["High crude"] == 0
    for name, plan in comparison.plans.items():
        bought = {f"{line.group}.{line.item}": line.values[name] for line in feed_lines(comparison).lines}
        assert bought == {source: plan.quantities.bought(source, "2031-03") for source in plan.quantities.case.sources}
        charged = sum(line.values[name] or 0.0 for line in furnace_lines(comparison).lines)
        assert charged == pytest.approx(sum(row["charged"] for row in plan.furnaces.rows))
        worths = {line.group: line.values.get(name) for line in limit_lines(comparison).lines if line.values.get(name)}
        assert worths == {row["limit"]: row["worth"] for row in plan.limits.rows if row["worth"] and row["state"]}
    assert len(flat_lines(comparison)) == sum(len(plan.flat) for plan in comparison.plans.values())


def test_the_money_lines_sum_to_every_margin(comparison: Comparison) -> None:
    for name, plan in comparison.plans.items():
        total = math.fsum(line.quantities[name] * line.prices[name] * line.times for line in money_of_cases(comparison))
        assert total == pytest.approx(plan.margin / 1000, rel=1e-12)
        groups = [line.values[name] for line in margin_lines(comparison).lines if line.group == "money"]
        assert sum(value for value in groups if value) == pytest.approx(plan.margin / 1000, rel=1e-12)


def test_the_name_of_a_case_travels_into_its_plan(comparison: Comparison, tmp_path: Path) -> None:
    found = cases_of(
        tmp_path, "{name: first}", "{name: dearer naphtha, prices: {feeds.full_range_naphtha.spot_cargo: 540 USD/t}}"
    )
    plan = found.plan("dearer naphtha")
    assert plan.scenario.price_case == "dearer naphtha"
    assert {row["price_case"] for row in plan.flat.rows} == {"dearer naphtha"}
    price = plan.quantities.case.prices["feeds.full_range_naphtha.spot_cargo", "2031-03"]
    assert (price.value, price.place.line) == (540.0, 4)
    assert comparison.plan("Base").scenario.price_case == "Base"


def test_a_copy_with_changes_keeps_the_case(comparison: Comparison, tmp_path: Path) -> None:
    found = cases_of(tmp_path, "{name: dear, prices: {feeds.ethane.contract: 60 USc/gal}}")
    scenario: Scenario = found.plan("dear").scenario
    again = scenario.with_({"feeds.ethane.contract.max": "20 kt"})
    assert again.price_case == "dear"
    assert again.case.prices["feeds.ethane.contract", "2031-03"].number == 60.0
    assert make_plan(again).margin < found.plan("dear").margin
