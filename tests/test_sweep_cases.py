"""Cases of a sweep from Python, tables and files: the values that are meant, or one clear list of what is wrong."""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from conftest import ROOT
from hypothesis import given
from hypothesis import strategies as st

from olefinlp import InputError, Scenario
from olefinlp.inputs.sweep_cases import SweepCases
from olefinlp.inputs.sweep_file import SweepWritten, read_sweep_file
from olefinlp.inputs.sweep_values import cases_of, percent
from olefinlp.inputs.varied import NoNumber, find_varied, known_paths, plant_at, scenario_at

NAPHTHA = "feeds.full_range_naphtha.spot_cargo"
ETHANE = "feeds.ethane.contract"
FACTOR = "recovery_units.cracked_gas_compressor.factor"
ONE_MONTH = "brackwater_2031_03.yaml"
SIX_MONTHS = "brackwater_2031_03_to_08.yaml"
MARCH_FILE = (ROOT / "scenarios" / ONE_MONTH).as_posix()
SHIPPED = sorted((ROOT / "scenarios" / "sweeps").glob("*.yaml"))
Shipped = Callable[[str], Scenario]


@pytest.fixture
def march(shipped_scenario: Shipped) -> Scenario:
    return shipped_scenario(ONE_MONTH)


@pytest.fixture
def six(shipped_scenario: Shipped) -> Scenario:
    return shipped_scenario(SIX_MONTHS)


def column(cases: SweepCases, number: int = 0) -> list[float]:
    return [float(value) for value in cases.values[:, number]]


def wrong(call: Callable[..., object], *arguments: Any, **named: Any) -> str:
    """The whole message of what is wrong."""
    with pytest.raises(InputError) as caught:
        call(*arguments, **named)
    return str(caught.value)


# ---------------------------------------------------------------------------------- values of one number


@pytest.mark.parametrize(
    ("written", "values"),
    [
        ([500, 520.5, 541], [500, 520.5, 541]),
        (range(500, 503), [500, 501, 502]),
        (np.array([500, 501.5]), [500, 501.5]),
        ((number for number in (1, 2)), [1, 2]),
        (["500 USD/t", 510], [500, 510]),
        (520, [520]),
        ({"values": [500, 510]}, [500, 510]),
        ({"from": 500, "to": 510, "step": 5}, [500, 505, 510]),
        ({"from": 510, "to": 500, "step": -5}, [510, 505, 500]),
        ({"from": 500, "to": 500, "step": 5}, [500]),
        ({"from": 0.1, "to": 0.7, "step": 0.1}, [0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7]),
        ({"from": "500 USD/t", "to": 510, "count": 3}, [500, 505, 510]),
        ({"values": {"from": 1, "to": 2, "count": 2}}, [1, 2]),
    ],
    ids=itertools.count(),
)
def test_ways_to_write_values(march: Scenario, written: object, values: list[float]) -> None:
    cases = cases_of(march, {NAPHTHA: written})
    assert column(cases) == values
    assert (cases.how, cases.percent, cases.varied[0].unit) == ("list", (False,), "USD/t")


@pytest.mark.parametrize(
    "vary",
    [
        {NAPHTHA: percent(-10, 0, 10)},
        {NAPHTHA: {"percent": [-10, 0, 10]}},
        {NAPHTHA: {"percent": {"from": -10, "to": 10, "step": 10}}},
        {NAPHTHA: {"percent": ["-10 %", 0, "10 %"]}},
        {f"{NAPHTHA} %": [-10, 0, 10]},
    ],
    ids=str,
)
def test_ways_to_write_changes_in_per_cent(march: Scenario, vary: dict[str, object]) -> None:
    cases = cases_of(march, vary)
    assert cases.percent == (True,)
    assert column(cases) == [-10, 0, 10]


@given(st.integers(-500, 500), st.integers(1, 40), st.integers(1, 2000), st.sampled_from([1, 10, 100, 1000]))
def test_steps_are_the_decimals_that_a_person_would_write(start: int, step: int, steps: int, scale: int) -> None:
    """Both ends included, and each value the float nearest to the decimal: no rounding adds up."""
    from olefinlp.inputs.sweep_numbers import Entry
    from olefinlp.inputs.varied import CALLED, Findings

    findings = Findings()
    entry = Entry("a", "USD/t", (), lambda _: CALLED, findings)
    end = start + steps * step
    read = entry.values({"from": start / scale, "to": end / scale, "step": step / scale})
    assert read == [number / scale for number in range(start, end + 1, step)]
    assert entry.values({"from": start / scale, "to": end / scale, "count": steps + 1}) == read
    assert not findings.items


# ---------------------------------------------------------------------------------- several numbers


def test_a_grid_has_all_combinations_the_last_fastest(march: Scenario) -> None:
    for how in (None, "grid"):
        cases = cases_of(march, {NAPHTHA: [500, 540], FACTOR: [0.9, 1.0, 1.1]}, how=how)
        assert cases.values.tolist() == [[500, 0.9], [500, 1.0], [500, 1.1], [540, 0.9], [540, 1.0], [540, 1.1]]
        assert cases.how == "grid"
    assert cases_of(march, {NAPHTHA: [500, 540]}, how="grid").how == "list"


def test_one_at_a_time_begins_with_today_and_leaves_the_others(march: Scenario) -> None:
    cases = cases_of(march, {NAPHTHA: percent(-10, 10), FACTOR: [0.9]}, how="one at a time")
    assert cases.how == "one at a time"
    assert [cases.of_case(number) for number in range(len(cases))] == [
        {},
        {cases.varied[0]: -10.0},
        {cases.varied[0]: 10.0},
        {cases.varied[1]: 0.9},
    ]


def test_labels_name_the_cases(march: Scenario) -> None:
    assert cases_of(march, {NAPHTHA: [500, 540]}, labels=["low", "high"]).labels == ("low", "high")


def test_the_largest_grid_is_taken_and_one_more_is_not(march: Scenario) -> None:
    assert len(cases_of(march, {NAPHTHA: range(1000), ETHANE: range(1000)})) == 1_000_000
    assert wrong(cases_of, march, {NAPHTHA: range(1000), ETHANE: range(1001)}) == (
        "sweep  vary\n  makes 1,001,000 cases; at most 1,000,000 are planned in one sweep\n"
        "hint: take fewer values, or `one at a time`"
    )


# ---------------------------------------------------------------------------------- what a case becomes


def test_a_case_is_a_scenario_with_that_price(march: Scenario) -> None:
    cases = cases_of(march, {NAPHTHA: [500, 571.25], ETHANE: [38]})
    for number, (naphtha, ethane) in enumerate(cases.values):
        changed = cases.scenario_of(number).case.prices
        assert changed[NAPHTHA, "2031-03"].value == naphtha
        assert changed[ETHANE, "2031-03"].number == ethane
        others = {key for key, price in changed.items() if price.value != march.case.prices[key].value}
        assert {item for item, _ in others} <= {NAPHTHA, ETHANE}


@given(st.integers(-40, 40))
def test_a_change_in_per_cent_is_the_value_that_it_makes(shipped_scenario: Shipped, change: int) -> None:
    march = shipped_scenario(ONE_MONTH)
    today = find_varied(march, NAPHTHA).first
    by_percent = cases_of(march, {NAPHTHA: percent(change)}).scenario_of(0)
    by_value = cases_of(march, {NAPHTHA: [today * (1 + change / 100)]}).scenario_of(0)
    key = (NAPHTHA, "2031-03")
    assert by_percent.case.prices[key].value == by_value.case.prices[key].value
    assert by_percent.case.prices[key].value == pytest.approx(today * (100 + change) / 100, rel=1e-14)


def test_a_change_in_per_cent_is_of_each_month_its_own(six: Scenario) -> None:
    path = "outlets.crude_c4_contract.max"
    today = dict(find_varied(six, path).today)
    assert len(set(today.values())) == 2
    changed = cases_of(six, {path: percent(10)}).scenario_of(0)
    assert dict(find_varied(changed, path).today) == {month: pytest.approx(1.1 * value) for month, value in today.items()}


@pytest.mark.parametrize("vary", [{f"{NAPHTHA} @ 2031-05": [600]}, {NAPHTHA: {"values": [600], "month": "2031-05"}}], ids=str)
def test_one_month_alone(six: Scenario, vary: dict[str, object]) -> None:
    cases = cases_of(six, vary)
    assert cases.varied[0].month == "2031-05"
    prices = {month: price.value for (item, month), price in cases.scenario_of(0).case.prices.items() if item == NAPHTHA}
    assert prices.pop("2031-05") == 600
    assert set(prices.values()) == {six.case.prices[NAPHTHA, "2031-04"].value}


def test_two_months_of_one_number_vary_apart(six: Scenario) -> None:
    cases = cases_of(six, {f"{NAPHTHA} @ 2031-05": [600], f"{NAPHTHA} @ 2031-06": [610]})
    prices = cases.scenario_of(0).case.prices
    assert [prices[NAPHTHA, month].value for month in ("2031-05", "2031-06")] == [600, 610]


# ---------------------------------------------------------------------------------- paths


@pytest.mark.parametrize("name", [ONE_MONTH, SIX_MONTHS, "marram_point_2031_03.yaml", "thermal_cracker.yaml"])
def test_every_path_that_is_offered_is_a_number_and_keeps_its_value(shipped_scenario: Shipped, name: str) -> None:
    """All are found; one of each kind is written back as it is, which must change nothing."""
    scenario = shipped_scenario(name)
    kinds: dict[tuple[str, str], str] = {}
    for path in known_paths(scenario):
        assert find_varied(scenario, path).path
        kinds.setdefault((path.split(".")[0], path.split(".")[-1]), path)
    some = [path for (head, _), path in kinds.items() if head not in ("yields", "months")]
    for path in [*some, *[path for path in kinds.values() if path.startswith("yields")][:1]]:
        varied = find_varied(scenario, path)
        again = find_varied(scenario_at(scenario, {varied: 0.0}, [varied]), path)
        assert again.unit == varied.unit, path
        assert dict(again.today) == {month: pytest.approx(value, rel=1e-12) for month, value in varied.today}, path


def test_a_number_that_takes_no_value_a_month_is_written_once(six: Scenario) -> None:
    path = "stocks.light_naphtha.opening"
    varied = find_varied(six, path)
    assert find_varied(scenario_at(six, {varied: 13.0}), path).first == 13
    with pytest.raises(NoNumber, match="is one number for all months"):
        find_varied(six, path, "2031-05")


def test_two_yields_of_a_row_are_both_as_written(march: Scenario) -> None:
    row = next(row for row in march.plant.yields if row[1] == "ethane")
    shares = march.plant.yields[row].shares
    paths = [f"yields.{'.'.join(row)}.{component}" for component in ("ethylene", "propylene")]
    new = {
        find_varied(march, paths[0]): 100 * shares["ethylene"] + 1,
        find_varied(march, paths[1]): 100 * shares["propylene"] + 0.5,
    }
    changed = plant_at(march.plant, new).yields[row].shares
    assert [100 * changed[name] for name in ("ethylene", "propylene")] == pytest.approx(list(new.values()))
    assert sum(changed.values()) == pytest.approx(sum(shares.values()))
    rest = [name for name in shares if name not in ("ethylene", "propylene") and shares[name]]
    ratios = [changed[name] / shares[name] for name in rest]
    assert max(ratios) - min(ratios) < 1e-12


@pytest.mark.parametrize(
    ("path", "month", "message"),
    [
        ("feeds.ethane.contrcat", "", "`feeds.ethane.contrcat` is no number of the scenario or its plant; did you mean `{0}`?"),
        (ETHANE, "2031-13", "`2031-13` is not a month of this scenario; did you mean `2031-03`?"),
        ("utilities.natural_gas.max", "", "`utilities.natural_gas.max` is `unlimited`, no number"),
        ("title", "", "`title` is `March to August 2031, base prices`, no number"),
        (
            "outlets.crude_c4_contract.max.2031-08",
            "",
            "`outlets.crude_c4_contract.max.2031-08` ends in a month; name the month apart from the path",
        ),
        (
            "recovery_units.cracked_gas_compressor.capacity",
            "2031-05",
            "`recovery_units.cracked_gas_compressor.capacity` belongs to the plant, whatever the month",
        ),
    ],
)
def test_what_is_no_number_says_why(six: Scenario, path: str, month: str, message: str) -> None:
    with pytest.raises(NoNumber) as caught:
        find_varied(six, path, month)
    assert str(caught.value) == message.format(ETHANE)


# ---------------------------------------------------------------------------------- wrong values


def test_everything_wrong_with_values_is_said_at_once(march: Scenario) -> None:
    vary = {
        "feeds.ethane.contrcat": [1, math.nan, "x"],
        f"{NAPHTHA} @ 2032-01": [],
        ETHANE: {"from": 1, "to": 2, "step": 0},
        "outlets.ethylene_spot": {"from": 3, "to": 1, "step": 0.5},
        "outlets.c5_sale": [400, "500 USD/lb", "10 %", None, True, 1e16],
        "utilities.natural_gas": {"from": 0, "to": 1, "step": 0.3},
        "outlets.raw_pygas.deduction": {"fro": 1, "to": 2},
        "outlets.crude_c4_contract.deduction %": [1],
        "outlets.hydrogen_sale": {"values": [1], "percent": [2]},
        "outlets.hydrogen_sale.max": {"from": 1, "to": 2},
        FACTOR: ["0.9 t", {"percent": 1}],
        "feeds.propane.contract": np.zeros((2, 2)),
        "feeds.propane.contract.price": {"percent": {"from": 1, "to": 5, "count": 1}},
        "a price": [1],
    }
    assert wrong(cases_of, march, vary, how="gird") == (
        """sweep  feeds.ethane.contrcat
  `feeds.ethane.contrcat` is no number of the scenario or its plant
hint: did you mean `feeds.ethane.contract`?
sweep  feeds.ethane.contrcat
  `nan` is not a number
sweep  feeds.ethane.contrcat
  `x` is not a number
sweep  feeds.full_range_naphtha.spot_cargo @ 2032-01
  `2032-01` is not a month of this scenario
hint: did you mean `2031-03`?
sweep  feeds.full_range_naphtha.spot_cargo @ 2032-01
  has no values
sweep  feeds.ethane.contract
  `step` is 0
sweep  outlets.ethylene_spot
  goes from 3 to 1 in steps of 0.5: that never arrives
hint: write `step: -0.5`, or change the ends over
sweep  outlets.c5_sale
  `500 USD/lb`: this number is written in USD/t
hint: write the number alone, or with that unit
sweep  outlets.c5_sale
  `10 %`: this number is written in USD/t
hint: write the number alone, or with that unit; for changes in per cent write `percent: [...]`
sweep  outlets.c5_sale
  a value is empty
sweep  outlets.c5_sale
  `True` is not a number
sweep  outlets.c5_sale
  `1e+16` is not a number
sweep  utilities.natural_gas
  1 is no whole number of steps of 0.3 from 0
hint: end at 0.9 or 1.2, or write `count` in place of `step`
sweep  outlets.raw_pygas.deduction
  unknown name `fro`; here it takes: values, percent, from, to, step, count, month
hint: did you mean `from`?
sweep  outlets.crude_c4_contract.deduction %
  is 0 today: a change in per cent of it changes nothing
hint: write values in its unit
sweep  outlets.hydrogen_sale
  needs one of: `values`, `percent`, or `from` and `to`
sweep  outlets.hydrogen_sale.max
  needs `step` or `count`, one of them
sweep  recovery_units.cracked_gas_compressor.factor
  `0.9 t`: this number has no unit
hint: write the number alone
sweep  recovery_units.cracked_gas_compressor.factor
  `{'percent': 1}` is not a number
sweep  feeds.propane.contract
  a list of values is needed, not a table of 2 × 2
sweep  feeds.propane.contract.price
  `count` is 1: a whole number from 2 up is needed
sweep  a price
  is not the path of a number
hint: write `path`, or `path @ month`
sweep  feeds.propane.contract.price
  is varied twice, the other time as `feeds.propane.contract`
hint: take one away
sweep  how
  `gird` is not one of: list, grid, one at a time
hint: did you mean `grid`?"""
    )


@pytest.mark.parametrize(
    ("vary", "named", "message"),
    [
        ({}, {}, "sweep  vary\n  no number varies"),
        (
            {NAPHTHA: {"from": 0, "to": 1, "step": 1e-12}},
            {},
            f"sweep  {NAPHTHA}\n  makes 1,000,000,000,001 cases; at most 1,000,000 are planned in one sweep",
        ),
        ({NAPHTHA: {"from": 0, "step": 1}}, {}, f"sweep  {NAPHTHA}\n  `to` is missing"),
        ({NAPHTHA: {"from": 0, "to": 4, "count": "4 USD/t"}}, {}, f"sweep  {NAPHTHA}\n  `count`: `4 USD/t` is not a number"),
        (
            {NAPHTHA: [1], f"{NAPHTHA} ": [2]},
            {},
            f"sweep  {NAPHTHA} \n  is varied twice, the other time as `{NAPHTHA}`\nhint: take one away",
        ),
        (
            {NAPHTHA: "5 USD/pound"},
            {},
            f"sweep  {NAPHTHA}\n  `pound` is not a unit of the list\nhint: see the list of units in models/README.md",
        ),
        ({NAPHTHA: [1, 2]}, {"labels": ["a"]}, "sweep  labels\n  there are 1 labels for 2 cases"),
        ({NAPHTHA: [1, 2]}, {"labels": ["a", " A"]}, "sweep  labels\n  two cases are named ` A`"),
        (
            {NAPHTHA: [1], ETHANE: [2]},
            {"how": "list"},
            "sweep  how\n  a list is of one number, several vary\n"
            "hint: write `grid` or `one at a time`; for values that move together a table with a row a case",
        ),
        (7, {}, "sweep  vary\n  is no mapping, table, list of records or path of a csv file"),
        (
            [{NAPHTHA: 1}],
            {"how": "grid", "labels": ["x"]},
            "sweep  how\n  `grid` is for values of each number, a table has a row a case\nhint: leave `how` out\n"
            "sweep  labels\n  the cases of a table are named in it\nhint: give the table a column `case`",
        ),
    ],
    ids=str,
)
def test_one_wrong_thing(march: Scenario, vary: object, named: dict[str, Any], message: str) -> None:
    assert wrong(cases_of, march, vary, **named) == message


def test_a_month_and_all_months_do_not_go_together(six: Scenario) -> None:
    text = wrong(cases_of, six, {ETHANE: [1], f"{ETHANE} @ 2031-04": {"values": [2], "month": "2031-05"}})
    assert text == (f"sweep  {ETHANE} @ 2031-04\n  names two months, `2031-04` and `2031-05`\nhint: write one of them")
    assert wrong(cases_of, six, {ETHANE: [1], f"{ETHANE} @ 2031-04": [2]}) == (
        f"sweep  {ETHANE} @ 2031-04\n  is varied twice, the other time as `{ETHANE}`\nhint: take one away"
    )


# ---------------------------------------------------------------------------------- tables


def expected_table(cases: SweepCases) -> None:
    assert cases.how == "table"
    assert [varied.path for varied in cases.varied] == [NAPHTHA, ETHANE]
    assert cases.percent == (False, True)
    np.testing.assert_array_equal(cases.values, [[500, math.nan], [math.nan, -5], [510, 5]])


def test_a_table_may_be_a_frame_records_or_a_csv(march: Scenario, tmp_path: Path) -> None:
    ethane = f"{ETHANE} %"
    expected_table(cases_of(march, pd.DataFrame({NAPHTHA: [500, None, 510], ethane: [math.nan, -5, 5]})))
    expected_table(cases_of(march, pd.DataFrame({NAPHTHA: pd.array([500, None, 510], dtype="Int64"), ethane: [None, "-5", 5]})))
    expected_table(cases_of(march, [{NAPHTHA: 500}, {ethane: -5}, {NAPHTHA: "510", ethane: 5.0}]))
    path = tmp_path / "cases.csv"
    path.write_text(f"case,{NAPHTHA} [USD/t],{ethane}\nlow,500,\n,,-5\nboth, 510 ,5\n", encoding="utf-8")
    for source in (path, str(path)):
        cases = cases_of(march, source)
        expected_table(cases)
        assert cases.labels == ("low", "case 2", "both")
        assert cases.note.startswith("cases of ")
        assert cases.note.endswith("cases.csv")


def test_a_month_in_a_heading(six: Scenario) -> None:
    cases = cases_of(six, [{f"{NAPHTHA} @ 2031-05": 600, f"{NAPHTHA}@2031-06 %": 10}])
    assert [(varied.month, by) for varied, by in zip(cases.varied, cases.percent, strict=True)] == [
        ("2031-05", False),
        ("2031-06", True),
    ]


def test_everything_wrong_with_a_csv_is_said_at_once(march: Scenario, tmp_path: Path) -> None:
    path = tmp_path / "cases.csv"
    path.write_text(
        f"case,{NAPHTHA} [USD/lb],feeds.ethan.contract,{ETHANE} [%],outlets.c5_sale %\nlow,500,1,x,\nLow,nan,,,1 USD/t\n",
        encoding="utf-8",
    )
    text = wrong(cases_of, march, path).replace(f"{path.parent.parent.name}/{path.parent.name}/", "")
    assert text == (
        """cases.csv:1 [feeds.full_range_naphtha.spot_cargo]
  the column is in USD/lb, but this number is written in USD/t
hint: head the column `feeds.full_range_naphtha.spot_cargo [USD/t]`
cases.csv:1 [feeds.ethan.contract]  feeds.ethan.contract
  `feeds.ethan.contract` is no number of the scenario or its plant
hint: did you mean `feeds.ethane.contract`?
cases.csv:1 [feeds.ethane.contract]
  the column is in %, but this number is written in USc/gal
hint: head the column `feeds.ethane.contract [USc/gal]`; for changes in per cent `feeds.ethane.contract %`
cases.csv:3 [feeds.full_range_naphtha.spot_cargo]
  `nan` is not a number
hint: a point for decimals, no thousands mark, no unit in the cell
cases.csv:2 [feeds.ethane.contract]
  `x` is not a number
hint: a point for decimals, no thousands mark, no unit in the cell
cases.csv:3 [outlets.c5_sale %]
  `1 USD/t` is not a number
hint: a point for decimals, no thousands mark, no unit in the cell
cases.csv:3 [case]
  two cases are named `Low`
hint: the first: cases.csv:2 [case]"""
    )


def test_wrong_tables_of_python(march: Scenario) -> None:
    assert wrong(cases_of, march, []) == (
        "sweep  vary\n  has no rows\nsweep\n  no number varies\nhint: head a column with the path of a number"
    )
    frame = pd.DataFrame([[1, 2]], columns=[NAPHTHA, NAPHTHA])
    assert f"sweep\n  the column `{NAPHTHA}` is there twice" in wrong(cases_of, march, frame)
    assert wrong(cases_of, march, [{NAPHTHA: 1}, {NAPHTHA: math.inf}]) == (
        f"sweep:2 [{NAPHTHA}]\n  `inf` is not a number\nhint: a point for decimals, no thousands mark, no unit in the cell"
    )


# ---------------------------------------------------------------------------------- files


def sweep_file(folder: Path, text: str) -> Path:
    path = folder / "sweep.yaml"
    path.write_text(f"scenario: {MARCH_FILE}\n{text}", encoding="utf-8")
    return path


def wrong_file(folder: Path, text: str) -> str:
    path = sweep_file(folder, text)
    return wrong(read_sweep_file, path).replace(f"{path.parent.parent.name}/{path.parent.name}/", "")


@pytest.mark.parametrize("path", SHIPPED, ids=lambda path: path.stem)
def test_shipped_sweeps_read_and_their_ends_are_scenarios(path: Path) -> None:
    sweep = read_sweep_file(path)
    assert sweep.title
    assert len(sweep.cases) >= 10
    for number in (0, len(sweep.cases) - 1):
        assert sweep.cases.scenario_of(number).case is not None


def test_shipped_sweeps_show_each_way() -> None:
    assert {read_sweep_file(path).cases.how for path in SHIPPED} == {"list", "grid", "one at a time", "draws"}


def test_a_file_says_the_same_as_python(march: Scenario, tmp_path: Path) -> None:
    text = f"""
title: a grid
vary:
  {NAPHTHA}: {{from: 500, to: 510, step: 5}}
  {ETHANE}: {{percent: [-10, 10], month: 2031-03}}
  outlets.c5_sale @ 2031-03: [480 USD/t, 490]
how: grid
measures: [margin, feeds]
"""
    sweep = read_sweep_file(sweep_file(tmp_path, text))
    vary = {NAPHTHA: [500, 505, 510], f"{ETHANE} @ 2031-03": percent(-10, 10), "outlets.c5_sale @ 2031-03": [480, 490]}
    cases = cases_of(march, vary)
    assert (sweep.title, sweep.measures, sweep.cases.how) == ("a grid", ("margin", "feeds"), "grid")
    assert sweep.cases.varied == cases.varied
    assert sweep.cases.percent == cases.percent
    np.testing.assert_array_equal(sweep.cases.values, cases.values)
    assert read_sweep_file(sweep_file(tmp_path, f"vary: {{{NAPHTHA}: [1]}}\n")).title == "March 2031, base prices"


def test_a_file_may_name_a_table_beside_it_and_another_scenario_may_be_given(tmp_path: Path) -> None:
    (tmp_path / "cases.csv").write_text(f"{NAPHTHA}\n500\n510\n", encoding="utf-8")
    path = sweep_file(tmp_path, "table: cases.csv\n")
    assert column(read_sweep_file(path).cases) == [500, 510]
    other = read_sweep_file(path, ROOT / "scenarios" / "brackwater_2031_04.yaml")
    assert [period.name for period in other.cases.scenario.periods] == ["2031-04"]


def test_everything_wrong_with_a_file_is_said_at_once(tmp_path: Path) -> None:
    text = f"""titel: x
vary:
  {NAPHTHA}:
    from: 500
    to: 490
    step: 5
  feeds.ethane.contrcat: [1, .nan, many]
  {ETHANE}: {{percent: [1], month: 2031-04}}
  outlets.c5_sale: []
how: girdle
measures: margin
"""
    assert wrong_file(tmp_path, text) == (
        f"""sweep.yaml:11  how
  `girdle` is not one of: list, grid, one at a time
hint: did you mean `grid`?
sweep.yaml:12  measures
  a list is needed here, one `- …` a line
sweep.yaml:2  titel
  unknown name `titel`; here it takes: scenario, title, vary, table, draws, how, measures
hint: did you mean `title`?
sweep.yaml:7  {NAPHTHA}
  goes from 500 to 490 in steps of 5: that never arrives
hint: write `step: -5`, or change the ends over
sweep.yaml:8  feeds.ethane.contrcat
  `feeds.ethane.contrcat` is no number of the scenario or its plant
hint: did you mean `feeds.ethane.contract`?
sweep.yaml:8  feeds.ethane.contrcat
  `.nan` is not a number
sweep.yaml:8  feeds.ethane.contrcat
  `many` is not a number
sweep.yaml:9  {ETHANE}
  `2031-04` is not a month of this scenario
hint: did you mean `2031-03`?
sweep.yaml:10  outlets.c5_sale
  has no values"""
    )


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("title: x\n", "sweep.yaml:1\n  does not say what varies\nhint: write one of `vary:`, `table:` and `draws:`"),
        (
            f"vary: {{{NAPHTHA}: [1]}}\ndraws: {{count: 1, seed: 1, numbers: {{{ETHANE}: {{sd: 1}}}}}}\n",
            "sweep.yaml:1\n  `vary`, `draws` are written; a sweep has one of them\nhint: write a file for each",
        ),
        (
            "table: gone.csv\nhow: grid\n",
            "sweep.yaml:1\n  `how:` belongs to `vary:`\nhint: take `how:` away\n"
            "gone.csv\n  no such file\nhint: known: sweep.yaml",
        ),
        ("vary: [1]\n", "sweep.yaml:2  vary\n  `name: value` lines are needed here"),
        ("vary: {}\n", "sweep.yaml:2  vary\n  no number varies"),
        ("draws: {count: 1}\n", "sweep.yaml:2  draws.numbers\n  `numbers` is missing"),
    ],
)
def test_one_wrong_thing_of_a_file(tmp_path: Path, text: str, message: str) -> None:
    assert wrong_file(tmp_path, text) == message


def test_a_file_needs_its_scenario(tmp_path: Path) -> None:
    path = tmp_path / "sweep.yaml"
    path.write_text(f"scenario: gone.yaml\nvary: {{{NAPHTHA}: [1]}}\n", encoding="utf-8")
    assert "the scenario" in wrong(read_sweep_file, path)
    assert "is not there\nhint: name it: `--scenario FILE`" in wrong(read_sweep_file, path)
    path.write_text(f"vary: {{{NAPHTHA}: [1]}}\n", encoding="utf-8")
    assert "  `scenario` is missing" in wrong(read_sweep_file, path)


def test_every_field_of_a_file_is_described() -> None:
    schema = SweepWritten.model_json_schema(by_alias=True)
    objects = [schema, *schema["$defs"].values()]
    described = {
        name: "description" in field or "$ref" in str(field) for one in objects for name, field in one["properties"].items()
    }
    assert {"scenario", "vary", "table", "draws", "how", "measures", "count", "seed", "numbers"} <= set(described)
    assert all(described.values()), described


def test_cases_can_be_taken_to_another_scenario(march: Scenario, shipped_scenario: Shipped) -> None:
    """Nothing of a case is bound to the object that it was made from."""
    cases = cases_of(march, {NAPHTHA: [500]})
    again = replace(cases, scenario=march.with_({"title": "again"}))
    assert again.scenario_of(0).case.prices[NAPHTHA, "2031-03"].value == 500
