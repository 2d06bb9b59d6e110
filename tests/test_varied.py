"""Numbers by their path: each varies what it says and nothing else, as if somebody had edited the files."""

from __future__ import annotations

import csv
import math
import re
import shutil
from collections.abc import Callable, Iterator
from pathlib import Path

import numpy as np
import pytest
from conftest import ROOT
from ruamel.yaml import YAML

from olefinlp import read_scenario
from olefinlp.answers.sweep_terms import PARTS, lp_of
from olefinlp.inputs.findings import InputError
from olefinlp.inputs.scenario import Scenario
from olefinlp.inputs.varied import NoNumber, Varied, find_varied, known_paths, plant_at, scenario_at
from olefinlp.lp.compile import LabelledLp
from olefinlp.lp.sweep import same_shape

MARCH, SIX, MARRAM = "brackwater_2031_03.yaml", "brackwater_2031_03_to_08.yaml", "marram_point_2031_03.yaml"
Read = Callable[[str], Scenario]


def same_program(one: LabelledLp, other: LabelledLp) -> bool:
    return same_shape(one, other) and all(np.allclose(getattr(one, p), getattr(other, p), rtol=1e-11, atol=1e-14) for p in PARTS)


# ---------------------------------------------------------------------------------- as if the files were edited


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """A copy of all plants and scenarios."""
    for name in ("models", "scenarios"):
        shutil.copytree(ROOT / name, tmp_path / name)
    return tmp_path


def in_yaml(file: str, *path: str | int) -> Callable[[Path, str], None]:
    """Write a value at a place of a YAML file."""

    def edit(folder: Path, written: str) -> None:
        yaml = YAML()
        data = yaml.load(folder / file)
        inner = data
        for part in path[:-1]:
            inner = inner[part]
        inner[path[-1]] = float(written) if re.fullmatch(r"[\d.]+", written) and "." in written else written
        if re.fullmatch(r"\d+", written):
            inner[path[-1]] = int(written)
        yaml.dump(data, folder / file)

    return edit


def in_csv(file: str, column: str, **row: str) -> Callable[[Path, str], None]:
    """Write the number of a value into the one row of a table that has these words."""

    def edit(folder: Path, written: str) -> None:
        with (folder / file).open(encoding="utf-8", newline="") as text:
            header, *lines = list(csv.reader(text))
        names = [re.sub(r" \[.*", "", name) for name in header]
        found = [line for line in lines if all(line[names.index(name)] == word for name, word in row.items())]
        assert len(found) == 1, (row, len(found))
        found[0][names.index(column)] = written.split()[0]
        with (folder / file).open("w", encoding="utf-8", newline="") as text:
            csv.writer(text).writerows([header, *lines])

    return edit


def yields(file: str, component: str, **row: str) -> Callable[[Path, str], None]:
    """One yield of a row; the others lose in proportion what it gains."""

    def edit(folder: Path, written: str) -> None:
        path = folder / file
        with path.open(encoding="utf-8", newline="") as text:
            header, *lines = list(csv.reader(text))
        names = [re.sub(r" \[.*", "", name) for name in header]
        line = next(line for line in lines if all(line[names.index(name)] == word for name, word in row.items()))
        places = [at for at, name in enumerate(names) if name not in ("feed", "severity", "source")]
        at, value = names.index(component), float(written.split()[0])
        others = sum(float(line[place]) for place in places if place != at)
        whole = others + float(line[at])
        for place in places:
            line[place] = repr(value if place == at else float(line[place]) * (whole - value) / others)
        with path.open("w", encoding="utf-8", newline="") as text:
            csv.writer(text).writerows([header, *lines])

    return edit


def unit_factor(file: str, month: str, unit: str) -> Callable[[Path, str], None]:
    return _entry(file, "unit_factors", {"month": month, "unit": unit}, "factor")


def outage(file: str, month: str, group: str) -> Callable[[Path, str], None]:
    return _entry(file, "outages", {"month": month, "group": group}, "hours")


def _entry(file: str, section: str, key: dict[str, str], word: str) -> Callable[[Path, str], None]:
    """Set an entry of this month's plant, or add it."""

    def edit(folder: Path, written: str) -> None:
        yaml = YAML()
        data = yaml.load(folder / file)
        entries = data.setdefault(section, [])
        entry = next((e for e in entries if all(str(e[name]) == value for name, value in key.items())), None)
        if entry is None:
            entry = {**key, "reason": "a test"}
            entries.append(entry)
        entry[word] = written if " " in written else float(written)
        yaml.dump(data, folder / file)

    return edit


PRICES, PLANT, TABLES = "scenarios/prices/brackwater.csv", "models/brackwater/plant.yaml", "models/brackwater"
MARCH_FILE, MARRAM_FILE, SIX_FILE = f"scenarios/{MARCH}", f"scenarios/{MARRAM}", f"scenarios/{SIX}"
EDITS: dict[str, tuple[str, str, float, Callable[[Path, str], None], str]] = {
    # what: scenario, path (and month), value, how the files say it, what is written there
    "a price of the table": (MARCH, "feeds.ethane.contract", 38.5, in_csv(PRICES, "Base", item="feeds.ethane.contract"), "38.5"),
    "a price in gallons of heat": (
        MARCH,
        "utilities.natural_gas",
        6.25,
        in_csv(PRICES, "Base", item="utilities.natural_gas"),
        "6.25",
    ),
    "an amount on top": (
        *(MARCH, "outlets.chemical_grade_propylene", 0.015 * 2204.6226218487757),  # USD/t
        *(in_csv(PRICES, "Base", item="outlets.chemical_grade_propylene"), "1.5"),
    ),
    "a share of a price": (
        MARCH,
        "outlets.fuel_gas_export",
        0.65,
        in_csv(PRICES, "Base", item="outlets.fuel_gas_export"),
        "0.65",
    ),
    "a price in the scenario": (
        *(MARRAM, "feeds.ethane.pipeline.tiers.1.price", 350.0),
        *(in_yaml(MARRAM_FILE, "feeds", "ethane", "pipeline", "tiers", 0, "price"), "350 EUR/t"),
    ),
    "an index in other money": (
        MARRAM,
        "indexes.naphtha",
        500.0,
        in_yaml(MARRAM_FILE, "indexes", "naphtha", "price"),
        "500 USD/t",
    ),
    "a factor on an index": (
        *(MARRAM, "feeds.heavy_naphtha.cargo", 0.9),
        *(in_yaml(MARRAM_FILE, "feeds", "heavy_naphtha", "cargo", "price", "times"), "0.9"),
    ),
    "a price by volume": (
        *(MARRAM, "outlets.gasoline_sale", 47.5),
        *(in_yaml(MARRAM_FILE, "outlets", "gasoline_sale", "price"), "47.5 cEUR/L"),
    ),
    "a cost of a piece": (
        *(MARCH, "variable_costs.decoking", 25000.0),
        *(in_yaml(MARCH_FILE, "variable_costs", "decoking", "cost"), "25000 USD"),
    ),
    "a maximum": (MARCH, "feeds.ethane.contract.max", 22.5, in_yaml(MARCH_FILE, "feeds", "ethane", "contract", "max"), "22.5 kt"),
    "a size of a step": (
        *(MARRAM, "feeds.ethane.pipeline.tiers.1.up_to", 7.0),
        *(in_yaml(MARRAM_FILE, "feeds", "ethane", "pipeline", "tiers", 0, "up_to"), "7 kt"),
    ),
    "a maximum that is a rate": (
        MARRAM,
        "utilities.grid_power.max",
        22.0,
        in_yaml(MARRAM_FILE, "utilities", "grid_power", "max"),
        "22 MW",
    ),
    "a share": (
        *(MARCH, "feeds.ethane.contract.shortfall_pays", 55.0),
        *(in_yaml(MARCH_FILE, "feeds", "ethane", "contract", "shortfall_pays"), "55 %"),
    ),
    "a rate of exchange": (MARRAM, "exchange_rates.USD", 0.8, in_yaml(MARRAM_FILE, "exchange_rates", "USD"), "0.8 EUR"),
    "a factor that is written": (
        *(MARCH, "recovery_units.cracked_gas_compressor.factor", 0.9),
        *(unit_factor(MARCH_FILE, "2031-03", "cracked_gas_compressor"), "0.9"),
    ),
    "a factor that is not written": (
        *(MARCH, "recovery_units.c3_splitter.factor", 0.8),
        *(unit_factor(MARCH_FILE, "2031-03", "c3_splitter"), "0.8"),
    ),
    "an outage that is written": (
        *(MARRAM, "furnace_groups.catalytic_crackers.outage_hours", 120.0),
        *(outage(MARRAM_FILE, "2031-03", "catalytic_crackers"), "120 h"),
    ),
    "an outage that is not written": (
        *(MARCH, "furnace_groups.liquid_furnaces.outage_hours", 100.0),
        *(outage(MARCH_FILE, "2031-03", "liquid_furnaces"), "100 h"),
    ),
    "one month of a maximum": (
        *(SIX, "outlets.crude_c4_contract.max 2031-08", 9.0),
        *(in_yaml(SIX_FILE, "outlets", "crude_c4_contract", "max", "2031-08"), "9 kt"),
    ),
    "one month of a factor": (
        *(SIX, "recovery_units.c3_splitter.factor 2031-04", 0.7),
        *(unit_factor(SIX_FILE, "2031-04", "c3_splitter"), "0.7"),
    ),
    "a stock": (SIX, "stocks.light_naphtha.opening", 9.0, in_yaml(SIX_FILE, "stocks", "light_naphtha", "opening"), "9 kt"),
    "a capacity": (
        *(MARCH, "recovery_units.demethaniser.capacity", 70.0),
        *(in_csv(f"{TABLES}/recovery_units.csv", "capacity", unit="demethaniser"), "70"),
    ),
    "a run length, in days in the table": (
        *(MARCH, "modes.gas_furnaces.ethane.high.run_length", 720.0),
        *(in_csv(f"{TABLES}/furnace_modes.csv", "run_length", group="gas_furnaces", feed="ethane", severity="high"), "30"),
    ),
    "a charge": (
        *(MARCH, "modes.gas_furnaces.ethane.high.charge", 20.0),
        *(in_csv(f"{TABLES}/furnace_modes.csv", "charge", group="gas_furnaces", feed="ethane", severity="high"), "20"),
    ),
    "hours of a decoke": (
        *(MARCH, "modes.gas_furnaces.ethane.high.decoke", 48.0),
        *(in_csv(f"{TABLES}/furnace_modes.csv", "decoke", group="gas_furnaces", feed="ethane", severity="high"), "48"),
    ),
    "a fired heat": (
        *(MARCH, "modes.gas_furnaces.ethane.high.fired_heat", 9.5),
        *(in_csv(f"{TABLES}/furnace_modes.csv", "fired_heat", group="gas_furnaces", feed="ethane", severity="high"), "9.5"),
    ),
    "a yield": (
        *(MARCH, "yields.thermal.full_range_naphtha.high.ethylene", 30.0),
        *(yields(f"{TABLES}/yields.csv", "ethylene", feed="full_range_naphtha", severity="high"), "30"),
    ),
    "a loss": (MARCH, "loss.share", 0.5, in_yaml(PLANT, "loss", "share"), "0.5 wt%"),
    "a count of furnaces": (
        *(MARCH, "furnace_groups.liquid_furnaces.furnaces", 2.0),
        *(in_yaml(PLANT, "furnace_groups", "liquid_furnaces", "furnaces"), "2"),
    ),
    "a share of hours": (
        *(MARCH, "furnace_groups.liquid_furnaces.unplanned_loss", 5.0),
        *(in_yaml(PLANT, "furnace_groups", "liquid_furnaces", "unplanned_loss"), "5 %"),
    ),
    "a ratio": (
        *(MARCH, "ratio_limits.quench_oil_viscosity.at_most", 1.0),
        *(in_yaml(PLANT, "ratio_limits", "quench_oil_viscosity", "at_most"), "1.0"),
    ),
    "a specification": (
        *(MARCH, "outlets.chemical_grade_propylene.specifications.propylene_content.min", 94.0),
        *(in_yaml(PLANT, "outlets", "chemical_grade_propylene", "specifications", "propylene_content", "min"), "94 wt%"),
    ),
    "a use of a conversion": (
        *(MARCH, "conversions.boiler.uses.fuel", 3.3),
        *(in_yaml(PLANT, "conversions", "boiler", "uses", "fuel"), "3.3 GJ LHV"),
    ),
    "a limit of a sum": (
        *(MARRAM, "limits.jetty.max", 60.0),
        *(in_yaml("models/marram_point/plant.yaml", "limits", "jetty", "max"), "60 kt/month"),
    ),
    "a density": (
        *(MARRAM, "outlets.gasoline_sale.density", 760.0),
        *(in_yaml("models/marram_point/plant.yaml", "outlets", "gasoline_sale", "density"), "760 kg/m3"),
    ),
}


QUICK = list(EDITS)[::3]


@pytest.mark.parametrize("what", [pytest.param(what, marks=[pytest.mark.slow] * (what not in QUICK)) for what in EDITS])
def test_a_number_varies_what_an_edit_of_the_files_would(shipped_scenario: Read, folder: Path, what: str) -> None:
    file, name, value, edit, written = EDITS[what]
    scenario = shipped_scenario(file)
    changed = scenario_at(scenario, {find_varied(scenario, *name.split(" ")): value})
    edit(folder, written)
    by_hand = read_scenario(folder / "scenarios" / file)
    assert same_program(lp_of(changed), lp_of(by_hand))
    assert not same_program(lp_of(changed), lp_of(scenario)), "nothing is changed at all"


def _varying(scenario: Scenario) -> Iterator[Varied]:
    for path in known_paths(scenario):
        yield find_varied(scenario, path)


@pytest.mark.parametrize("file", [MARCH, MARRAM])
def test_every_known_path_is_a_number_of_today(shipped_scenario: Read, file: str) -> None:
    """Each is found, under the path by which it was asked for; prices under their item."""
    scenario = shipped_scenario(file)
    numbers = list(_varying(scenario))
    assert len(numbers) > 200
    assert all(math.isfinite(number) for varied in numbers for _, number in varied.today)
    assert {varied.kind for varied in numbers} == {"price", "scenario", "plant"}


@pytest.mark.parametrize("file", [MARCH, MARRAM])
def test_every_number_at_its_own_value_is_today(shipped_scenario: Read, file: str) -> None:
    """Some of each part of the files; the scenario and the plant by and by, all yields at once."""
    scenario = shipped_scenario(file)
    today = lp_of(scenario)
    heads: dict[tuple[str, str], list[Varied]] = {}
    for varied in _varying(scenario):
        heads.setdefault((varied.kind, varied.path.partition(".")[0]), []).append(varied)
    assert len(heads) > 12
    for several in heads.values():
        varied = several[len(several) // 2]
        assert same_program(lp_of(scenario_at(scenario, {varied: varied.first})), today), varied.path
        assert same_program(lp_of(scenario_at(scenario, {varied: 0.0}, [varied])), today), varied.path


def test_every_yield_is_read_and_written_to_the_last_digit(shipped_scenario: Read) -> None:
    plant = shipped_scenario(MARCH).plant
    for (table, feed, severity), row in plant.yields.items():
        for component, share in row.shares.items():
            varied = find_varied(shipped_scenario(MARCH), f"yields.{table}.{feed}.{severity}.{component}")
            assert plant_at(plant, {varied: varied.first}).yields[table, feed, severity].shares[component] == share
            assert len(repr(varied.first)) <= 6, "as the table writes it"


# ---------------------------------------------------------------------------------- yields


def test_yields_keep_their_sum(shipped_scenario: Read) -> None:
    """Two of a row together: each is what it is given, the rest lose in proportion."""
    scenario = shipped_scenario(MARCH)
    path = "yields.thermal.full_range_naphtha.high."
    values = {find_varied(scenario, path + "ethylene"): 31.0, find_varied(scenario, path + "propylene"): 14.0}
    before = scenario.plant.yields["thermal", "full_range_naphtha", "high"]
    after = plant_at(scenario.plant, values).yields["thermal", "full_range_naphtha", "high"]
    assert (after.shares["ethylene"], after.shares["propylene"]) == (0.31, 0.14)
    assert sum(after.shares.values()) == pytest.approx(sum(before.shares.values()), rel=1e-14)
    ratios = {after.shares[c] / before.shares[c] for c in before.shares if c not in ("ethylene", "propylene")}
    assert max(ratios) == pytest.approx(min(ratios))
    assert after.written["ethylene"] == "31 wt%"
    others = [key for key in scenario.plant.yields if key != ("thermal", "full_range_naphtha", "high")]
    assert all(plant_at(scenario.plant, values).yields[key] is scenario.plant.yields[key] for key in others)


# ---------------------------------------------------------------------------------- values that cannot be


@pytest.mark.parametrize(
    ("path", "value", "words"),
    [
        ("yields.thermal.full_range_naphtha.high.ethylene", -1.0, "the yield -1 wt% is negative"),
        ("yields.thermal.full_range_naphtha.high.ethylene", 150.0, "is negative"),
        ("modes.gas_furnaces.ethane.high.run_length", 0.0, "the run length is 0, it must be above 0"),
        ("modes.gas_furnaces.ethane.high.run_length", -5.0, "the run_length is negative"),
        ("modes.gas_furnaces.ethane.high.charge", 0.0, "the charge is 0, it must be above 0"),
        ("modes.gas_furnaces.ethane.high.decoke", 0.0, "has a run length but no decoke hours"),
        ("recovery_units.cracked_gas_compressor.capacity", -3.0, "negative"),
        ("furnace_groups.liquid_furnaces.furnaces", -1.0, "furnaces"),
        ("furnace_groups.liquid_furnaces.furnaces", 2.5, "furnaces"),
        ("loss.share", -2.0, "loss"),
        ("feeds.ethane.contract.max", -1.0, "is below zero"),
        ("feeds.ethane.contract.shortfall_pays", 140.0, "it must be from 0 to 100 %"),
        ("furnace_groups.liquid_furnaces.outage_hours", 99_999.0, "99999 h are lost"),
    ],
)
def test_a_value_that_no_file_may_have_is_refused(shipped_scenario: Read, path: str, value: float, words: str) -> None:
    scenario = shipped_scenario(MARCH)
    with pytest.raises(InputError) as error:
        scenario_at(scenario, {find_varied(scenario, path): value})
    assert words in str(error.value)


# ---------------------------------------------------------------------------------- months, per cent, names


def test_months_of_a_number(shipped_scenario: Read) -> None:
    six = shipped_scenario(SIX)
    path = "outlets.crude_c4_contract.max"
    whole, august = find_varied(six, path), find_varied(six, path, "2031-08")
    assert dict(whole.today) == {f"2031-{m:02}": 17.5 for m in range(3, 8)} | {"2031-08": 11.0}
    assert (august.today, august.name, whole.name) == ((("2031-08", 11.0),), f"{path} 2031-08", path)
    for varied, value, expected in ((whole, 15.0, [15] * 6), (august, 15.0, [17.5] * 5 + [15])):
        lp = lp_of(scenario_at(six, {varied: value}))
        rows = [lp.row_at["outlet_limit", "crude_c4_contract", month.name] for month in six.periods]
        assert lp.row_high[rows] == pytest.approx(expected)
    by_percent = lp_of(scenario_at(six, {whole: -10.0}, [whole]))
    assert by_percent.row_high[rows] == pytest.approx([15.75] * 5 + [9.9])


def test_one_month_of_a_price(shipped_scenario: Read) -> None:
    six = shipped_scenario(SIX)
    varied = find_varied(six, "feeds.full_range_naphtha.spot_cargo", "2031-05")
    prices = scenario_at(six, {varied: 600.0}).case.prices
    found = [prices["feeds.full_range_naphtha.spot_cargo", month.name].number for month in six.periods]
    assert found == [534.0, 534.0, 600.0, 534.0, 534.0, 534.0]


@pytest.mark.parametrize(
    ("path", "month", "words"),
    [
        (
            "feeds.ethane.contrakt",
            "",
            "`feeds.ethane.contrakt` is no number of the scenario or its plant; did you mean `feeds.ethane.contract`?",
        ),
        ("recovery_units.c3_spliter.factor", "", "did you mean `recovery_units.c3_splitter.factor`?"),
        ("yields.thermal.ethane.high.ethylen", "", "did you mean `yields.thermal.ethane.high.ethylene`?"),
        ("modes.gas_furnaces.ethane.high.runlength", "", "did you mean `modes.gas_furnaces.ethane.high.run_length`?"),
        ("title", "", "`title` is `March to August 2031, base prices`, no number"),
        ("outlets.crude_c4_contract.max.2031-08", "", "ends in a month; name the month apart from the path"),
        ("outlets.crude_c4_contract.max.other_months", "", "ends in a month; vary one month after the other"),
        ("feeds.ethane.contract", "2031-09", "`2031-09` is not a month of this scenario"),
        ("loss.share", "2031-05", "`loss.share` belongs to the plant, whatever the month"),
        ("stocks.light_naphtha.opening", "2031-05", "is one number for all months"),
    ],
)
def test_what_is_no_number_is_said_so(shipped_scenario: Read, path: str, month: str, words: str) -> None:
    with pytest.raises(NoNumber) as error:
        find_varied(shipped_scenario(SIX), path, month)
    assert words in str(error.value)


def test_the_price_of_an_item_and_its_full_path_are_one(shipped_scenario: Read) -> None:
    march = shipped_scenario(MARCH)
    assert find_varied(march, "feeds.ethane.contract.price") == find_varied(march, "feeds.ethane.contract")
    assert find_varied(march, "variable_costs.decoking.cost").path == "variable_costs.decoking"


def test_several_numbers_at_once(shipped_scenario: Read, folder: Path) -> None:
    """A price, a limit, a factor, a yield and a number of the plant, as if all files were edited."""
    march = shipped_scenario(MARCH)
    values = {}
    for what in (
        "a price of the table",
        "a maximum",
        "a factor that is not written",
        "a yield",
        "a loss",
        "a capacity",
        "a charge",
    ):
        _, path, value, edit, written = EDITS[what]
        values[find_varied(march, path)] = value
        edit(folder, written)
    assert same_program(lp_of(scenario_at(march, values)), lp_of(read_scenario(folder / "scenarios" / MARCH)))
