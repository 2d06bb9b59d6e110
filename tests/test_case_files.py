"""Files of cases: csv tables, YAML lists and price tables become validated scenarios, or one clear list of what is wrong."""

from __future__ import annotations

from pathlib import Path

import pytest
from conftest import ROOT

from olefinlp import InputError, compare_cases, make_plan, read_cases, read_scenario
from olefinlp.inputs.cases import CaseSet

MARCH = ROOT / "scenarios" / "brackwater_2031_03.yaml"
SIX_MONTHS = ROOT / "scenarios" / "brackwater_2031_03_to_08.yaml"
THERMAL = ROOT / "scenarios" / "thermal_cracker.yaml"
PRICES = ROOT / "scenarios" / "prices" / "brackwater.csv"
NAPHTHA = "feeds.full_range_naphtha.spot_cargo"


def listed(folder: Path, text: str, scenario: Path = MARCH) -> Path:
    """A YAML list of cases."""
    path = folder / "cases.yaml"
    path.write_text(f"scenario: {scenario.as_posix()}\ncases:\n{text}", encoding="utf-8")
    return path


def table(folder: Path, *rows: str, header: str = "item,unit,basis,source,date,note,Base,Dear") -> Path:
    """A csv table of cases."""
    path = folder / "cases.csv"
    path.write_text("\n".join([header, *rows]) + "\n", encoding="utf-8")
    return path


def price(found: CaseSet, name: str, item: str, month: str = "2031-03") -> float:
    """The effective price of an item in a case."""
    scenario = next(case.scenario for case in found.cases if case.name == name)
    assert scenario is not None
    return scenario.case.prices[item, month].value


def wrong(path: Path, scenario: Path | None = MARCH) -> str:
    """The whole message of what is wrong, without the folder."""
    with pytest.raises(InputError) as caught:
        read_cases(path, scenario)
    return str(caught.value).replace(f"{path.parent.parent.name}/{path.parent.name}/", "")


# ---------------------------------------------------------------------------------- price tables and csv


def test_a_scenario_gives_the_cases_of_its_price_table() -> None:
    found = read_cases(MARCH)
    assert found.names == ("Base", "High crude", "Low crude", "Cheap ethane", "Strong propylene", "Weak aromatics")
    assert [case.weight for case in found.cases] == [pytest.approx(1 / 6)] * 6
    assert not found.weighted


def test_the_scenarios_own_case_comes_first(tmp_path: Path) -> None:
    other = tmp_path / "other.yaml"
    text = MARCH.read_text(encoding="utf-8").replace("price_case: Base", "price_case: Low crude")
    text = text.replace("../models", str(ROOT / "models")).replace("prices/", f"{ROOT.as_posix()}/scenarios/prices/")
    other.write_text(text, encoding="utf-8")
    assert read_cases(other).names[:2] == ("Low crude", "Base")


def test_a_scenario_without_a_price_table_is_one_case() -> None:
    assert read_cases(THERMAL).names == ("As written",)


def test_the_price_table_itself_is_a_list_of_cases() -> None:
    found = read_cases(PRICES, MARCH)
    own = read_cases(MARCH)
    for case in own.names:
        for item, month in own.cases[0].scenario.case.prices if own.cases[0].scenario else ():
            assert price(found, case, item, month) == pytest.approx(price(own, case, item, month), rel=1e-14), (case, item)


def test_a_csv_changes_prices_limits_and_weights(tmp_path: Path) -> None:
    path = table(
        tmp_path,
        f"{NAPHTHA},USD/t,delivered,a desk,2031-02-10,,534,590",
        "outlets.fuel_gas_export,%,share of gas,a desk,2031-02-10,,80,75",
        f"{NAPHTHA}.max,kt,,,,,,20",
        "recovery_units.cracked_gas_compressor.factor,,,,,fouled,,0.9",
        "furnace_groups.gas_furnaces.outage_hours,h,,,,burner work,0,200",
        "outlets.fuel_oil_sale.max,kt,,,,,,unlimited",
        "weight,fraction,,,,,3,1",
    )
    found = read_cases(_with_base(path), MARCH)
    base, dear = (case.scenario for case in found.cases)
    assert base is not None
    assert dear is not None
    assert [case.weight for case in found.cases] == [0.75, 0.25]
    assert found.weighted
    assert price(found, "Dear", NAPHTHA) == 590
    assert price(found, "Dear", "outlets.fuel_gas_export") == pytest.approx(0.75 * price(found, "Dear", "utilities.natural_gas"))
    limits, before = dear.case.limits, base.case.limits
    assert limits["purchase", "full_range_naphtha.spot_cargo", "2031-03"].high == 20
    unit = ("unit_load", "cracked_gas_compressor", "2031-03")
    assert limits[unit].high == pytest.approx((before[unit].high or 0) * 0.9 / 1.02)
    assert limits[unit].reason == "fouled"
    hours = ("furnace_hours", "gas_furnaces", "2031-03")
    assert limits[hours].high == pytest.approx((before[hours].high or 0) - 200 * _kept(base), rel=1e-9)
    assert ("outlet", "fuel_oil_sale", "2031-03") not in limits
    assert make_plan(dear).margin < make_plan(base).margin


def _with_base(path: Path) -> Path:
    """The export is priced as a share, so the row names what it is a share of."""
    head, *rows = path.read_text(encoding="utf-8").splitlines()
    made = [f"{head},relative_to", *(f"{row}," + ("utilities.natural_gas" if "fuel_gas" in row else "") for row in rows)]
    path.write_text("\n".join(made) + "\n", encoding="utf-8")
    return path


def _kept(scenario: object) -> float:
    """What of an outage is lost beyond the share that is lost unplanned anyway."""
    groups = scenario.plant.file.furnace_groups  # type: ignore[attr-defined]
    from olefinlp.inputs.units import share

    return 1 - share(groups["gas_furnaces"].unplanned_loss)


def test_blank_is_as_the_first_case_and_a_number_may_be_a_text_with_blanks(tmp_path: Path) -> None:
    found = read_cases(table(tmp_path, f"{NAPHTHA},USD/t,delivered,desk,2031-02-10,, 540 ,"), MARCH)
    assert price(found, "Base", NAPHTHA) == price(found, "Dear", NAPHTHA) == 540


def test_an_item_without_a_row_keeps_the_scenarios_price(tmp_path: Path) -> None:
    found = read_cases(table(tmp_path, f"{NAPHTHA},USD/t,delivered,desk,2031-02-10,,540,600"), MARCH)
    assert price(found, "Dear", "outlets.ethylene_spot") == price(read_cases(MARCH), "Base", "outlets.ethylene_spot")


def test_a_price_of_one_month_alone(tmp_path: Path) -> None:
    rows = [f"{NAPHTHA},USD/t,delivered,desk,2031-02-10,,534,534,", f"{NAPHTHA},USD/t,delivered,desk,2031-02-10,,500,610,2031-05"]
    limits = [f"{NAPHTHA}.max,kt,,,,,,10,2031-05"]
    path = table(tmp_path, *rows, *limits, header="item,unit,basis,source,date,note,Base,Dear,month")
    found = read_cases(path, SIX_MONTHS)
    assert [price(found, "Dear", NAPHTHA, month) for month in ("2031-04", "2031-05", "2031-06")] == [534, 610, 534]
    case = found.cases[1].scenario
    assert case is not None
    highs = {m: case.case.limits["purchase", "full_range_naphtha.spot_cargo", m].high for m in ("2031-04", "2031-05")}
    assert highs["2031-05"] == 10
    assert highs["2031-04"] != 10


def test_everything_wrong_with_a_table_is_said_at_once(tmp_path: Path) -> None:
    path = table(
        tmp_path,
        f"{NAPHTHA},USD/t,delivered,desk,2031-02-10,,534,cheap",
        "feeds.ethane.contrcat,USc/gal,,,,,41,42",
        "outlets.ethylene_spot,USD/pound,,,,,33,34",
        "outlets.c5_sale,,,,,,480,490",
        "feeds.n_butane.spot_cargo.minn,kt,,,,,,2",
        "outlets.ethylene_contract.max,USD/t,,,,,,50",
        "recovery_units.c3_splitter.factor,,,,,,,0.8",
        "outlets.hydrogen_sale,USD/t,,,,,,1300",
        f"{NAPHTHA},USD/t,,,,,534,540",
        "wieght,fraction,,,,,1,2",
    )
    assert wrong(path) == (
        """cases.csv:2 [Dear]  feeds.full_range_naphtha.spot_cargo
  `cheap` is not a number
hint: a point for decimals, no thousands mark, no unit in the cell
cases.csv:3 [item]  feeds.ethane.contrcat
  is no price of this scenario, nor a limit
hint: did you mean `feeds.ethane.contract`?
cases.csv:4 [unit]  outlets.ethylene_spot
  `pound` is not a unit of the list
hint: see the list of units in models/README.md
cases.csv:5 [unit]  outlets.c5_sale
  has no unit
hint: choose one from the list, for example `USD/t` or `kt`
cases.csv:9 [Base]  outlets.hydrogen_sale
  has no price in the first case, Base
hint: a blank means: as the first case
cases.csv:10 [item]  feeds.full_range_naphtha.spot_cargo
  is written twice, first in cases.csv:2 [item]
cases.csv:11 [item]  wieght
  is no price of this scenario, nor a limit
hint: did you mean `weight`?
cases.csv:8 [Dear]  recovery_units.c3_splitter.factor
  needs its reason
hint: write it in the note of this row: it travels into the plan
cases.csv:6 [Dear]  feeds.n_butane.spot_cargo.minn
  unknown name `minn`; here it takes: min, max, price, basis, take_or_pay, shortfall_pays, tiers, quality, note
hint: did you mean `min`?
cases.csv:7 [Dear]  outlets.ethylene_contract.max
  `50 USD/t` is money per mass (t, lb …), but mass (t, lb …) is needed here
hint: see the list of units in models/README.md"""
    )


def test_a_csv_needs_its_scenario(tmp_path: Path) -> None:
    path = table(tmp_path, f"{NAPHTHA},USD/t,delivered,desk,2031-02-10,,534,540")
    assert wrong(path, None) == "cases.csv  scenario\n  does not say its scenario\nhint: name it: `--scenario FILE`"


# ---------------------------------------------------------------------------------- yaml lists


def test_a_list_takes_prices_changes_a_price_case_and_months(tmp_path: Path) -> None:
    found = read_cases(
        listed(
            tmp_path,
            """
  - {name: base, weight: 1}
  - name: dear
    weight: 3
    price_case: High crude
    prices:
      feeds.full_range_naphtha.spot_cargo: {2031-05: 640 USD/t, other_months: 620 USD/t}
      outlets.fuel_gas_export: {of: utilities.natural_gas, times: 0.5}
    changes: {feeds.full_range_naphtha.spot_cargo.max: {2031-05: 11 kt}}
    note: after the outage of a neighbour
""",
            SIX_MONTHS,
        )
    )
    dear = found.cases[1]
    assert [case.weight for case in found.cases] == [0.25, 0.75]
    assert dear.note == "after the outage of a neighbour"
    assert [price(found, "dear", NAPHTHA, m) for m in ("2031-04", "2031-05")] == [620, 640]
    gas = price(found, "dear", "utilities.natural_gas", "2031-04")
    assert price(found, "dear", "outlets.fuel_gas_export", "2031-04") == 0.5 * gas
    assert dear.scenario is not None
    assert dear.scenario.case.limits["purchase", "full_range_naphtha.spot_cargo", "2031-05"].high == 11
    ethane = "feeds.ethane.contract"
    assert price(found, "dear", ethane, "2031-04") > price(found, "base", ethane, "2031-04")


def test_everything_wrong_with_a_list_is_said_at_once(tmp_path: Path) -> None:
    path = listed(
        tmp_path,
        """
  - {name: base, weight: 1}
  - name: dear
    prices: {feeds.full_range_naphtha.spot: 590 USD/t, feeds.ethane.contract: 41}
    changes: {feeds.ethan.contract.max: 20 kt, outlets.ethylene_contract.max: 20 ktt}
  - {name: Dear, weight: 1, price_case: Hihg crude}
""",
    )
    assert wrong(path, None) == (
        """cases.yaml:6  cases.2.prices.feeds.ethane.contract
  `41` has no unit
hint: write the unit beside the number, for example `30 kt`
cases.yaml:8
  two cases are named `Dear`
hint: the first: cases.yaml:5
cases.yaml:5  weight
  `dear` has no weight, others have
hint: write one for each case, or for none
cases.yaml:7  feeds.ethan.contract.max
  `ethan` is not in feeds
hint: did you mean `ethane`?
cases.yaml:6  feeds.full_range_naphtha.spot
  is no price of this scenario
hint: did you mean `feeds.full_range_naphtha.spot_cargo`?
cases.yaml:7  outlets.ethylene_contract.max
  `ktt` is not a unit of the list
hint: did you mean `kt`?
cases.yaml:8  price_case
  `Hihg crude` is not a price case of scenarios/prices/brackwater.csv
hint: did you mean `High crude`?"""
    )


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        (
            "  - {name: one, weigth: 1}\n",
            "unknown name `weigth`; here it takes: name, price_case, prices, changes, reason, weight, note\n"
            "hint: did you mean `weight`?",
        ),
        ("  - {name: unit}\n", "`unit` is the name of a column, it cannot be a case\nhint: give the case another name"),
        ("  - {name: a, weight: 0}\n", "the weights sum to nothing"),
        ("  []\n", "cases"),
        ("  - {name: a, price_case: Nothing}\n", "`Nothing` is not a price case of"),
        ("  - {name: a, changes: {title: 3}}\n", "title"),
        ("  - {name: a, changes: {outages.9.hours: 3 h}}\n", "outages"),
        ("  - {name: a, changes: {recovery_units.no_such.factor: 0.5}, reason: tried}\n", "no_such"),
        ("  - {name: a, changes: {furnace_groups.no_such.outage_hours: 5 h}, reason: tried}\n", "no_such"),
        ("  - {name: a, changes: {feeds.ethane.contract.max: -3 kt}}\n", "is below zero"),
        ("  - {name: a, changes: {feeds.ethane.contract.min: 31 kt}}\n", "the minimum 31 kt is above the maximum 30 kt"),
        ("  - {name: a, prices: {feeds.ethane.contract: {2032-01: 40 USc/gal}}}\n", "`2032-01` is not a month of this scenario"),
    ],
)
def test_a_wrong_list_says_what_and_where(tmp_path: Path, text: str, expected: str) -> None:
    found = wrong(listed(tmp_path, text), None)
    assert expected in found
    assert "cases.yaml" in found


def test_a_scenario_that_is_not_there_is_named(tmp_path: Path) -> None:
    text = wrong(listed(tmp_path, "  - {name: one}\n", tmp_path / "no_such.yaml"), None)
    assert "the scenario no_such.yaml is not there\nhint: name it: `--scenario FILE`" in text


def test_the_scenario_given_overrides_the_one_that_is_named(tmp_path: Path) -> None:
    path = listed(tmp_path, "  - {name: one}\n", tmp_path / "no_such.yaml")
    assert read_cases(path, MARCH).scenario.title == "March 2031, base prices"


def test_a_reason_and_a_note_travel_into_the_plan(tmp_path: Path) -> None:
    changes = "{recovery_units.cracked_gas_compressor.factor: 0.95, furnace_groups.gas_furnaces.outage_hours: 100 h}"
    path = listed(tmp_path, f"  - {{name: base}}\n  - {{name: fouled, changes: {changes}, reason: fouled intercoolers}}\n")
    plan = compare_cases(read_cases(path)).plan("fouled")
    reasons = {row["limit"]: row["reason"] for row in plan.limits.rows if row["reason"]}
    assert reasons["cracked_gas_compressor"] == "fouled intercoolers"
    assert "fouled intercoolers" in reasons["gas_furnaces hours"]


def test_nothing_of_the_scenario_itself_is_changed(tmp_path: Path) -> None:
    scenario = read_scenario(MARCH)
    before = scenario.document.data["feeds"]["ethane"]["contract"].copy()
    read_cases(listed(tmp_path, "  - {name: a}\n  - {name: b, changes: {feeds.ethane.contract.max: 20 kt}}\n"))
    assert scenario.document.data["feeds"]["ethane"]["contract"] == before
    assert read_cases(MARCH).cases[0].scenario is not None
