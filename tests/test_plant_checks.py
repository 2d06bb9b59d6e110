"""One thing broken in a copy of a shipped plant, and the whole finding that says so.

A case names what it changes, where the finding must point, and what it must say word for word.
"""

from __future__ import annotations

import csv
import io
import shutil
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pytest
from ruamel.yaml import YAML

from olefinlp.inputs.findings import Finding, Findings
from olefinlp.inputs.plant import Plant, load_plant
from olefinlp.inputs.price_windows import price_window
from olefinlp.inputs.units import UnitError

MODELS = Path(__file__).parents[1] / "models"
BRACKWATER, MARRAM_POINT, TEXTBOOK = "brackwater", "marram_point", "thermal_cracker"
SHIPPED = (BRACKWATER, MARRAM_POINT, TEXTBOOK)
DELETE = object()
YAML_FILE = "plant.yaml"
Change = Callable[[], None]
Keys = tuple[str | int, ...]


def _yaml() -> YAML:
    yaml = YAML()
    yaml.width = 4096
    return yaml


def keys(path: str) -> Keys:
    """`limits.jetty.sum.1.sold` as keys; `/` is taken where a key holds a point."""
    parts = path.split("/") if "/" in path else path.split(".")
    return tuple(int(part) - 1 if part.isdigit() else part for part in parts)


def put(path: str, value: Any) -> Change:
    """Write (or delete) one value of plant.yaml."""

    def change() -> None:
        data = _yaml().load(Path(YAML_FILE).read_text(encoding="utf-8"))
        here = data
        *above, last = keys(path)
        for key in above:
            if isinstance(here, dict):
                here.setdefault(key, {})
            here = here[key]
        if value is DELETE:
            del here[last]
        elif isinstance(here, list) and last == len(here):
            here.append(value)
        else:
            here[last] = value
        text = io.StringIO()
        _yaml().dump(data, text)
        Path(YAML_FILE).write_text(text.getvalue(), encoding="utf-8")

    return change


def _table(file: str) -> list[list[str]]:
    with Path(file).open(encoding="utf-8", newline="") as stream:
        return list(csv.reader(stream))


def _write(file: str, rows: list[list[str]]) -> None:
    with Path(file).open("w", encoding="utf-8", newline="") as stream:
        csv.writer(stream).writerows(rows)


def _row(rows: list[list[str]], begins: str) -> int:
    """The only row whose first cells are these."""
    cells = begins.split(",")
    found = [index for index, row in enumerate(rows) if row[: len(cells)] == cells]
    assert found, f"no row begins with {begins}"
    return found[0]


def _column(rows: list[list[str]], name: str) -> int:
    return [title.split(" [")[0] for title in rows[0]].index(name)


def cell(file: str, begins: str, column: str, value: str) -> Change:
    """Write one cell of a table."""

    def change() -> None:
        rows = _table(file)
        rows[_row(rows, begins)][_column(rows, column)] = value
        _write(file, rows)

    return change


def column(file: str, name: str, value: str) -> Change:
    """Write all cells of a column."""

    def change() -> None:
        rows = _table(file)
        for row in rows[1:]:
            row[_column(rows, name)] = value
        _write(file, rows)

    return change


def title(file: str, name: str, value: str) -> Change:
    """Rename a column."""

    def change() -> None:
        rows = _table(file)
        rows[0][_column(rows, name)] = value
        _write(file, rows)

    return change


def no_column(file: str, name: str) -> Change:
    """Take a column away."""

    def change() -> None:
        rows = _table(file)
        index = _column(rows, name)
        _write(file, [row[:index] + row[index + 1 :] for row in rows])

    return change


def new_column(file: str, name: str, value: str) -> Change:
    """Add a column before the last one."""

    def change() -> None:
        rows = _table(file)
        _write(file, [[*row[:-1], name if index == 0 else value, row[-1]] for index, row in enumerate(rows)])

    return change


def no_row(file: str, begins: str) -> Change:
    """Take the rows with these first cells away."""

    def change() -> None:
        rows, cells = _table(file), begins.split(",")
        _row(rows, begins)
        _write(file, [row for row in rows if row[: len(cells)] != cells])

    return change


def again(file: str, begins: str, **cells: str) -> Change:
    """Add a row like another at the end, with some cells changed."""

    def change() -> None:
        rows = _table(file)
        row = list(rows[_row(rows, begins)])
        for name, value in cells.items():
            row[_column(rows, name)] = value
        _write(file, [*rows, row])

    return change


def units(file: str, old: str, new: str) -> Change:
    """Change the unit of all columns that carry it."""

    def change() -> None:
        rows = _table(file)
        rows[0] = [name.replace(f"[{old}]", f"[{new}]") for name in rows[0]]
        _write(file, rows)

    return change


def line(where: str) -> str:
    """`file:line` of a path in plant.yaml, or of `table.csv|first,cells|column` (`header`, or `last` row)."""
    if "|" in where:
        file, begins, name = where.split("|")
        rows = _table(file)
        number = {"header": 0, "last": len(rows) - 1, "": -1}.get(begins)
        number = _row(rows, begins) if number is None else number
        return (f"{file}:{number + 1}" if number >= 0 else file) + (f" [{name}]" if name else "")
    here: Any = _yaml().load(Path(YAML_FILE).read_text(encoding="utf-8"))
    found = 0
    for key in keys(where):
        found = here.lc.item(key)[0] if isinstance(here, list) else here.lc.key(key)[0]
        here = here[key]
    return f"{YAML_FILE}:{found + 1}"


@dataclass(frozen=True)
class Case:
    """What is changed in which plant, where the finding points, and what it says after the place."""

    name: str
    plant: str
    changes: tuple[Change, ...]
    at: str
    says: str


def error(name: str, plant: str, *changes: Change, at: str, path: str, says: str, hint: str = "") -> Any:
    """A case whose finding stops the plan."""
    tail = f"\nhint: {hint}" if hint else ""
    return pytest.param(Case(name, plant, changes, at, f"  {path}\n  {says}{tail}"), id=name)


def warning(name: str, plant: str, *changes: Change, at: str, path: str, says: str, hint: str = "") -> Any:
    """A case whose finding is to be looked at."""
    return error(name, plant, *changes, at=at, path=path, says=f"warning: {says}", hint=hint)


CUT_NAMES = "hydrogen tail_gas ethylene ethane propylene propane crude_c4 c5_cut pygas fuel_oil".split()
Broken = Callable[..., tuple[Plant | None, list[Finding]]]


@pytest.fixture
def broken(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Broken:
    """Makes a copy of a shipped plant with changes, and loads it."""

    def make(name: str, *changes: Change) -> tuple[Plant | None, list[Finding]]:
        folder = tmp_path / name
        shutil.copytree(MODELS / name, folder)
        monkeypatch.chdir(folder)
        for change in changes:
            change()
        findings = Findings()
        return load_plant(".", findings), list(findings)

    return make


@pytest.mark.parametrize("name", SHIPPED)
def test_a_shipped_plant_is_without_findings(name: str) -> None:
    findings = Findings()
    assert load_plant(MODELS / name, findings) is not None
    assert [str(finding) for finding in findings] == []


@pytest.mark.parametrize("name", SHIPPED)
def test_the_copy_that_cases_change_is_without_findings(broken: Broken, name: str) -> None:
    _, findings = broken(name, put("name", "a copy"))
    assert findings == []


def check(broken: Broken, case: Case) -> None:
    plant, findings = broken(case.plant, *case.changes)
    expected = line(case.at) + case.says
    texts = [str(finding) for finding in findings]
    assert expected in texts, "\n\n".join([expected, "found only:", *texts])
    assert (plant is None) == any(finding.level == "error" for finding in findings)


NAMES = [
    error(
        "main product",
        BRACKWATER,
        put("main_product", "ethylen"),
        at="main_product",
        path="main_product",
        says="unknown cut `ethylen`",
        hint="did you mean `ethylene`?",
    ),
    error(
        "a feed named like a furnace group",
        MARRAM_POINT,
        put("side_streams.ethane", {"composition": {"ethane": "100 wt%"}, "source": "test"}),
        at="side_streams.ethane",
        path="side_streams.ethane",
        says="`ethane` is also the name in feeds.ethane ({other})",
        hint="rename one of the two",
    ),
    error(
        "a feed named all",
        BRACKWATER,
        put("feeds.all", {"source": "test"}),
        at="feeds.all",
        path="feeds.all",
        says="`all` means everything charged, it cannot be a name",
        hint="give it another name",
    ),
    error(
        "a trade named twice",
        BRACKWATER,
        put("utilities.power.imports.natural_gas", {}),
        at="utilities.power.imports.natural_gas",
        path="utilities.power.imports.natural_gas",
        says="`natural_gas` is also the name of utilities.fuel.imports.natural_gas ({other})",
        hint="rename one of the two",
    ),
    error(
        "mainly",
        BRACKWATER,
        put("feeds.propane.mainly", "propan"),
        at="feeds.propane.mainly",
        path="feeds.propane.mainly",
        says="unknown component `propan`",
        hint="did you mean `propane`?",
    ),
    error(
        "recycle of",
        BRACKWATER,
        put("feeds.recycle_ethane.recycle_of", "etane"),
        at="feeds.recycle_ethane.recycle_of",
        path="feeds.recycle_ethane.recycle_of",
        says="unknown cut `etane`",
        hint="did you mean `ethane`?",
    ),
    error(
        "component of a side stream",
        MARRAM_POINT,
        put("side_streams.refinery_propylene.composition.propilene", "0 wt%"),
        at="side_streams.refinery_propylene.composition.propilene",
        path="side_streams.refinery_propylene.composition.propilene",
        says="unknown component `propilene`",
        hint="did you mean `propylene`?",
    ),
    error(
        "yields of a group",
        MARRAM_POINT,
        put("furnace_groups.thermal_furnaces.yields", "termal"),
        at="furnace_groups.thermal_furnaces.yields",
        path="furnace_groups.thermal_furnaces.yields",
        says="unknown yields table `termal`",
        hint="did you mean `thermal`?",
    ),
    error(
        "fuel of a group",
        MARRAM_POINT,
        put("furnace_groups.thermal_furnaces.fired_with", "gas"),
        at="furnace_groups.thermal_furnaces.fired_with",
        path="furnace_groups.thermal_furnaces.fired_with",
        says="unknown utility `gas`",
        hint="known: fuel, power, carbon_dioxide",
    ),
    error(
        "feed of yields",
        BRACKWATER,
        cell("yields.csv", "propane,low", "feed", "propan"),
        at="yields.csv|propan,low|feed",
        path="yields.thermal.propan",
        says="unknown feed `propan`",
        hint="did you mean `propane`?",
    ),
    error(
        "a column of yields that is no component",
        BRACKWATER,
        title("yields.csv", "ethylene", "etylene [wt%]"),
        at="yields.csv|header|etylene",
        path="yields.thermal",
        says="unknown component in the column `etylene`",
        hint="did you mean `ethylene`?",
    ),
    error(
        "a component without a column of yields",
        BRACKWATER,
        no_column("yields.csv", "acetylene"),
        at="yields.csv|header|",
        path="yields.thermal",
        says="the column of the component `acetylene` is missing",
        hint="write 0 where there is none",
    ),
    error(
        "yields table of a slope",
        BRACKWATER,
        cell("quality_slopes.csv", "thermal,condensate", "yields", "termal"),
        at="quality_slopes.csv|termal|yields",
        path="quality_slopes.condensate.aromatics_wt_percent",
        says="unknown yields table `termal`",
        hint="did you mean `thermal`?",
    ),
    error(
        "feed of a slope",
        BRACKWATER,
        cell("quality_slopes.csv", "thermal,condensate", "feed", "condensat"),
        at="quality_slopes.csv|thermal,condensat|feed",
        path="quality_slopes.condensat.aromatics_wt_percent",
        says="unknown feed `condensat`",
        hint="did you mean `condensate`?",
    ),
    error(
        "a slope of yields that are not there",
        MARRAM_POINT,
        put("quality_slopes", "slopes.csv"),
        lambda: _write(
            "slopes.csv",
            [
                ["yields", "feed", "property", "reference", "valid_min", "valid_max"]
                + _table("thermal_yields.csv")[0][2:-1]
                + ["source"],
                ["catalytic", "ethane", "purity", "1", "0", "2", *["0"] * (len(_table("thermal_yields.csv")[0]) - 3), "test"],
            ],
        ),
        at="slopes.csv|catalytic|feed",
        path="quality_slopes.ethane.purity",
        says="the yields table `catalytic` has no row of `ethane`",
    ),
    error(
        "a slope written twice",
        BRACKWATER,
        again("quality_slopes.csv", "thermal,condensate"),
        at="quality_slopes.csv|last|",
        path="quality_slopes.condensate.aromatics_wt_percent",
        says="is written twice, first in line 6",
    ),
    error(
        "a component without a column of slopes",
        BRACKWATER,
        no_column("quality_slopes.csv", "butanes"),
        at="quality_slopes.csv|header|",
        path="quality_slopes",
        says="the column of the component `butanes` is missing",
        hint="write 0 where there is none",
    ),
    error(
        "group of a mode",
        BRACKWATER,
        cell("furnace_modes.csv", "gas_furnaces,propane,low", "group", "gas_furnace"),
        at="furnace_modes.csv|gas_furnace,propane,low|group",
        path="modes.gas_furnace.propane.low",
        says="unknown furnace group `gas_furnace`",
        hint="did you mean `gas_furnaces`?",
    ),
    error(
        "feed of a mode",
        BRACKWATER,
        cell("furnace_modes.csv", "gas_furnaces,propane,low", "feed", "propan"),
        at="furnace_modes.csv|gas_furnaces,propan,low|feed",
        path="modes.gas_furnaces.propan.low",
        says="unknown feed `propan`",
        hint="did you mean `propane`?",
    ),
    error(
        "utility in a column of modes",
        BRACKWATER,
        title("furnace_modes.csv", "makes high_pressure_steam", "makes high_presure_steam [t/t]"),
        at="furnace_modes.csv|header|",
        path="modes",
        says="unknown utility in a column `high_presure_steam`",
        hint="did you mean `high_pressure_steam`?",
    ),
    error(
        "recovery unit in a column of modes",
        BRACKWATER,
        title("furnace_modes.csv", "load dilution_steam_generation", "load dilution_steam [t/t]"),
        at="furnace_modes.csv|header|",
        path="modes",
        says="unknown recovery unit in a column `dilution_steam`",
        hint="did you mean `dilution_steam_generation`?",
    ),
    error(
        "component of recovery",
        BRACKWATER,
        cell("recovery.csv", "propane", "component", "propan"),
        at="recovery.csv|propan|component",
        path="recovery.propan",
        says="unknown component `propan`",
        hint="did you mean `propane`?",
    ),
    error(
        "a component without recovery",
        BRACKWATER,
        no_row("recovery.csv", "propane"),
        at="recovery.csv||",
        path="recovery.propane",
        says="the row of the component `propane` is missing",
    ),
    error(
        "a column of recovery that is no cut",
        BRACKWATER,
        title("recovery.csv", "pygas", "pigas [t/t]"),
        at="recovery.csv|header|pigas",
        path="recovery",
        says="unknown cut in the column `pigas`",
        hint="did you mean `pygas`?",
    ),
    error(
        "a cut without recovery",
        BRACKWATER,
        put("cuts.flash_gas", {}),
        at="recovery.csv|header|",
        path="recovery",
        says="the column of the cut `flash_gas` is missing",
        hint="write 0 where there is none",
    ),
    error(
        "unit of a load",
        BRACKWATER,
        cell("unit_loads.csv", "c2_splitter,cut,ethane", "unit", "c2_spliter"),
        at="unit_loads.csv|c2_spliter|unit",
        path="unit_loads.c2_spliter",
        says="unknown recovery unit `c2_spliter`",
        hint="did you mean `c2_splitter`?",
    ),
    error(
        "a load written twice",
        BRACKWATER,
        again("unit_loads.csv", "quench_oil_system,component,pyrolysis_oil"),
        at="unit_loads.csv|last|",
        path="unit_loads.quench_oil_system",
        says="component `pyrolysis_oil` is written twice, first in line 2",
    ),
    error(
        "utility of a use",
        BRACKWATER,
        cell("utility_uses.csv", "power,uses", "utility", "powr"),
        at="utility_uses.csv|powr|utility",
        path="utility_uses.powr",
        says="unknown utility `powr`",
        hint="did you mean `power`?",
    ),
    error(
        "a use written twice",
        BRACKWATER,
        again("utility_uses.csv", "power,uses"),
        at="utility_uses.csv|last|",
        path="utility_uses.power",
        says="charge `all` is written twice, first in line 9",
    ),
    error(
        "cut of an outlet",
        BRACKWATER,
        put("outlets.propane_sale.from", "propan"),
        at="outlets.propane_sale.from",
        path="outlets.propane_sale.from",
        says="unknown cut `propan`",
        hint="did you mean `propane`?",
    ),
    error(
        "a cut twice in a blend",
        BRACKWATER,
        put("outlets.chemical_grade_propylene.from", ["propylene", "propylene", "propane"]),
        at="outlets.chemical_grade_propylene.from",
        path="outlets.chemical_grade_propylene.from",
        says="names a cut twice",
    ),
    error(
        "a specification of what is not blended",
        BRACKWATER,
        put("outlets.chemical_grade_propylene.specifications.propylene_content.values.ethane", "0 wt%"),
        at="outlets.chemical_grade_propylene.specifications.propylene_content.values.ethane",
        path="outlets.chemical_grade_propylene.specifications.propylene_content.values.ethane",
        says="unknown ingredient `ethane`",
        hint="known: propylene, propane",
    ),
    error(
        "a specification without a value",
        BRACKWATER,
        put("outlets.chemical_grade_propylene.specifications.propylene_content.values.propane", DELETE),
        at="outlets.chemical_grade_propylene.specifications.propylene_content.values",
        path="outlets.chemical_grade_propylene.specifications.propylene_content.values",
        says="the value of the ingredient `propane` is missing",
    ),
    error(
        "component of a content item",
        BRACKWATER,
        put("cuts.pygas.content_items.benzene", ["benzen", "benzene"]),
        at="cuts.pygas.content_items.benzene",
        path="cuts.pygas.content_items.benzene",
        says="unknown component `benzen`",
        hint="did you mean `benzene`?",
    ),
    error(
        "utility of a conversion",
        BRACKWATER,
        put("conversions.boiler.uses.fuell", "1 GJ LHV"),
        at="conversions.boiler.uses.fuell",
        path="conversions.boiler.uses.fuell",
        says="unknown utility `fuell`",
        hint="did you mean `fuel`?",
    ),
    error(
        "kind of a price window",
        BRACKWATER,
        put("price_windows/outlet", "1 to 2 USD/t"),
        at="price_windows/outlet",
        path="price_windows.outlet",
        says="unknown kind of item `outlet`",
        hint="did you mean `outlets`?",
    ),
    error(
        "item of a price window",
        BRACKWATER,
        put("price_windows/feeds.etane", "1 to 2 USD/t"),
        at="price_windows/feeds.etane",
        path="price_windows.feeds.etane",
        says="unknown item of feeds `etane`",
        hint="did you mean `ethane`?",
    ),
    error(
        "content item of a price window",
        BRACKWATER,
        put("price_windows/contents.pygas.benzen", "1 to 2 USD/t"),
        at="price_windows/contents.pygas.benzen",
        path="price_windows.contents.pygas.benzen",
        says="unknown content item `benzen`",
        hint="did you mean `benzene`?",
    ),
    error(
        "a price window deeper than an item",
        BRACKWATER,
        put("price_windows/outlets.propane_sale.price", "1 to 2 USD/t"),
        at="price_windows/outlets.propane_sale.price",
        path="price_windows.outlets.propane_sale.price",
        says="`outlets.propane_sale.price` goes deeper than an item",
        hint="write `outlets.propane_sale`",
    ),
]


@pytest.mark.parametrize("case", NAMES)
def test_names(broken: Broken, case: Case) -> None:
    if "{other}" not in case.says:
        check(broken, case)
        return
    plant, findings = broken(case.plant, *case.changes)
    other = line(case.says.split("`")[2].split("in " if " in " in case.says.split("`")[2] else "of ")[1].split(" ")[0])
    expected = line(case.at) + case.says.replace("{other}", other)
    assert expected in [str(finding) for finding in findings]
    assert plant is None


@pytest.mark.parametrize(
    ("of", "item", "known"),
    [
        ("charge", "propan", "unknown feed, `group.feed` or `all` `propan`\nhint: did you mean `propane`?"),
        (
            "charge",
            "liquid_furnaces.ethane",
            "unknown feed, `group.feed` or `all` `liquid_furnaces.ethane`\nhint: did you mean `gas_furnaces.ethane`?",
        ),
        ("component", "propan", "unknown component `propan`\nhint: did you mean `propane`?"),
        ("cut", "propan", "unknown cut `propan`\nhint: did you mean `propane`?"),
        ("outlet", "propan_sale", "unknown outlet `propan_sale`\nhint: did you mean `propane_sale`?"),
        (
            "ingredient",
            "chemical_grade_propylene.ethane",
            "unknown ingredient (`outlet.cut`) `chemical_grade_propylene.ethane`\n"
            "hint: did you mean `chemical_grade_propylene.propane`?",
        ),
        ("side_stream", "propane", "unknown side stream `propane`"),
        (
            "cut",
            "",
            "the cut is blank\nhint: known: " + ", ".join(CUT_NAMES),
        ),
    ],
)
def test_item_of_a_load(broken: Broken, of: str, item: str, known: str) -> None:
    _, findings = broken(BRACKWATER, again("unit_loads.csv", "c2_splitter,cut,ethane", of=of, item=item))
    place = line("unit_loads.csv|last|item")
    assert [str(finding) for finding in findings] == [f"{place}  unit_loads.c2_splitter\n  {known}"]


@pytest.mark.parametrize(
    ("of", "item", "known"),
    [
        ("charge", "propan", "unknown feed, `group.feed` or `all` `propan`\nhint: did you mean `propane`?"),
        ("component", "propan", "unknown component `propan`\nhint: did you mean `propane`?"),
        ("cut", "propan", "unknown cut `propan`\nhint: did you mean `propane`?"),
        ("cut_heat", "tailgas", "unknown cut `tailgas`\nhint: did you mean `tail_gas`?"),
        ("cut_burnt_co2", "tailgas", "unknown cut `tailgas`\nhint: did you mean `tail_gas`?"),
        ("outlet", "propan_sale", "unknown outlet `propan_sale`\nhint: did you mean `propane_sale`?"),
        ("unit_load", "c2_spliter", "unknown recovery unit `c2_spliter`\nhint: did you mean `c2_splitter`?"),
        ("import", "surplus_steam", "unknown import `surplus_steam`\nhint: known: natural_gas, grid_power"),
        ("export", "natural_gas", "unknown export `natural_gas`\nhint: known: surplus_steam"),
        ("loss", "ethane", "unknown item `ethane`\nhint: known: all"),
        ("fixed", "ethane", "unknown item `ethane`\nhint: known: all"),
    ],
)
def test_item_of_a_use(broken: Broken, of: str, item: str, known: str) -> None:
    _, findings = broken(BRACKWATER, again("utility_uses.csv", "power,uses", of=of, item=item))
    place = line("utility_uses.csv|last|item")
    assert [str(finding) for finding in findings] == [f"{place}  utility_uses.power\n  {known}"]


@pytest.mark.parametrize(
    ("kind", "name", "message"),
    [
        ("bought", "propan", "unknown bought feed or side stream `propan`\nhint: did you mean `propane`?"),
        ("bought", "propan.spot", "unknown bought feed or side stream `propan.spot`\nhint: did you mean `propane`?"),
        ("bought", "recycle_ethane", "`recycle_ethane` is a recycle feed, it is never bought\nhint: take `charged:` for it"),
        (
            "charged",
            "gas_furnaces.gas_oil",
            "unknown feed, `group.feed`, group or `all` `gas_furnaces.gas_oil`\nhint: did you mean `liquid_furnaces.gas_oil`?",
        ),
        ("component", "propan", "unknown component `propan`\nhint: did you mean `propane`?"),
        ("cut", "propan", "unknown cut `propan`\nhint: did you mean `propane`?"),
        ("sold", "propan_sale", "unknown outlet `propan_sale`\nhint: did you mean `propane_sale`?"),
        ("unit_load", "c2_spliter", "unknown recovery unit `c2_spliter`\nhint: did you mean `c2_splitter`?"),
        ("imported", "carbon", "unknown import `carbon`\nhint: known: natural_gas, grid_power"),
        ("exported", "carbon", "unknown export `carbon`\nhint: known: surplus_steam"),
        ("emitted", "natural_gas", "unknown emission `natural_gas`\nhint: known: carbon"),
        ("converted", "boyler", "unknown conversion `boyler`\nhint: did you mean `boiler`?"),
    ],
)
@pytest.mark.parametrize("side", ["limits.test.sum", "ratio_limits.quench_oil_viscosity.to"])
def test_name_in_a_term(broken: Broken, kind: str, name: str, message: str, side: str) -> None:
    change = put("limits.test", {"sum": [{"cut": "ethane"}], "max": "unlimited", "source": "test"})
    _, findings = broken(BRACKWATER, change, put(f"{side}.2", {kind: name}))
    place = line(f"{side}.2.{kind}")
    assert [str(finding) for finding in findings] == [f"{place}  {side}.2.{kind}\n  {message}"]


@pytest.mark.parametrize(
    "term",
    [
        {"bought": ["propane", "propane.spot", "light_naphtha.contract"]},
        {"charged": ["all", "propane", "gas_furnaces", "gas_furnaces.propane"]},
        {"component": "propane"},
        {"cut": "tail_gas"},
        {"sold": "propane_sale", "times": 0.5},
        {"unit_load": "c2_splitter"},
        {"exported": "surplus_steam"},
        {"emitted": "carbon"},
        {"converted": "boiler"},
    ],
)
def test_terms_counted_in_tonnes(broken: Broken, term: dict[str, Any]) -> None:
    limit = {"sum": [{"cut": "ethane"}, term], "min": "1 t/h", "max": {"2031-03": "14 kt/month", "other_months": "unlimited"}}
    _, findings = broken(BRACKWATER, put("limits.test", limit))
    assert findings == []


ROWS = [
    error(
        "a mode without yields",
        BRACKWATER,
        cell("furnace_modes.csv", "gas_furnaces,propane,low", "severity", "lo"),
        at="furnace_modes.csv|gas_furnaces,propane,lo|severity",
        path="modes.gas_furnaces.propane.lo",
        says="the yields table `thermal` has no row of `propane` at severity `lo`",
        hint="did you mean `low`?",
    ),
    error(
        "a mode of a feed without yields",
        MARRAM_POINT,
        again("modes.csv", "thermal_furnaces,ethane,high", group="catalytic_crackers", run_length="", decoke="", coil_outlet=""),
        at="modes.csv|last|severity",
        path="modes.catalytic_crackers.ethane.high",
        says="the yields table `catalytic` has no row of `ethane` at severity `high`",
        hint="add the row, or take the mode away",
    ),
    warning(
        "yields without a mode",
        MARRAM_POINT,
        no_row("modes.csv", "thermal_furnaces,ethane,high"),
        at="thermal_yields.csv|ethane,high|",
        path="yields.thermal.ethane.high",
        says="no mode uses these yields",
        hint="add its mode to modes.csv, or delete it",
    ),
    warning(
        "a feed without a mode",
        BRACKWATER,
        put("feeds.wide_naphtha", {"source": "test"}),
        at="feeds.wide_naphtha",
        path="feeds.wide_naphtha",
        says="no mode cracks this feed",
        hint="add its modes to furnace_modes.csv",
    ),
    warning(
        "a group without a mode",
        BRACKWATER,
        put(
            "furnace_groups.spare",
            {"furnaces": 1, "kind": "thermal", "yields": "thermal", "unplanned_loss": "0 %", "source": "test"},
        ),
        at="furnace_groups.spare",
        path="furnace_groups.spare",
        says="no mode is in this group",
        hint="add its modes to furnace_modes.csv",
    ),
    error(
        "negative furnaces",
        BRACKWATER,
        put("furnace_groups.gas_furnaces.furnaces", -1),
        at="furnace_groups.gas_furnaces.furnaces",
        path="furnace_groups.gas_furnaces.furnaces",
        says="-1 furnaces, allowed is 0 or more",
    ),
    error(
        "no decoke crew",
        BRACKWATER,
        put("decoke_crews.crews", 0),
        at="decoke_crews.crews",
        path="decoke_crews.crews",
        says="0 crews, allowed is 1 or more",
        hint="or write `unlimited`",
    ),
    error(
        "a blank severity",
        BRACKWATER,
        cell("furnace_modes.csv", "gas_furnaces,propane,low", "severity", ""),
        at="furnace_modes.csv|gas_furnaces,propane,|severity",
        path="modes.gas_furnaces.propane.",
        says="the severity is blank",
        hint="write for example `medium`",
    ),
    error(
        "a negative decoke",
        BRACKWATER,
        cell("furnace_modes.csv", "gas_furnaces,propane,low", "decoke", "-36"),
        at="furnace_modes.csv|gas_furnaces,propane,low|decoke",
        path="modes.gas_furnaces.propane.low",
        says="the decoke is negative",
    ),
    error(
        "a negative charge",
        BRACKWATER,
        cell("furnace_modes.csv", "gas_furnaces,propane,low", "charge", "-22"),
        at="furnace_modes.csv|gas_furnaces,propane,low|charge",
        path="modes.gas_furnaces.propane.low",
        says="the charge is negative",
    ),
    error(
        "steam made negative",
        BRACKWATER,
        cell("furnace_modes.csv", "gas_furnaces,propane,low", "makes high_pressure_steam", "-1.25"),
        at="furnace_modes.csv|gas_furnaces,propane,low|",
        path="modes.gas_furnaces.propane.low",
        says="`-1.25 t/t` of high_pressure_steam is negative",
        hint="`uses` and `makes` say the direction",
    ),
    error(
        "a negative load",
        BRACKWATER,
        cell("furnace_modes.csv", "gas_furnaces,propane,low", "load dilution_steam_generation", "-0.3"),
        at="furnace_modes.csv|gas_furnaces,propane,low|",
        path="modes.gas_furnaces.propane.low",
        says="`-0.3 t/t` of load dilution_steam_generation is negative",
    ),
    error(
        "a blank charge",
        BRACKWATER,
        cell("furnace_modes.csv", "gas_furnaces,propane,low", "charge", ""),
        at="furnace_modes.csv|gas_furnaces,propane,low|charge",
        path="modes.gas_furnaces.propane.low",
        says="the charge is blank, it must be above 0",
        hint="only a group with `furnaces: unlimited` goes without it",
    ),
    error(
        "a charge of nothing",
        TEXTBOOK,
        cell("modes.csv", "cracker,propane", "charge", "0"),
        at="modes.csv|cracker,propane|charge",
        path="modes.cracker.propane.design",
        says="the charge is 0, it must be above 0",
    ),
    error(
        "a run length without a decoke",
        BRACKWATER,
        cell("furnace_modes.csv", "gas_furnaces,propane,low", "decoke", ""),
        at="furnace_modes.csv|gas_furnaces,propane,low|decoke",
        path="modes.gas_furnaces.propane.low",
        says="has a run length but no decoke hours",
        hint="write both, or leave both blank where nothing is decoked",
    ),
    error(
        "a decoke without a run length",
        BRACKWATER,
        cell("furnace_modes.csv", "gas_furnaces,propane,low", "run_length", ""),
        at="furnace_modes.csv|gas_furnaces,propane,low|run_length",
        path="modes.gas_furnaces.propane.low",
        says="has decoke hours but no run length",
        hint="write both, or leave both blank where nothing is decoked",
    ),
    error(
        "a run length of nothing",
        BRACKWATER,
        cell("furnace_modes.csv", "gas_furnaces,propane,low", "run_length", "0"),
        at="furnace_modes.csv|gas_furnaces,propane,low|run_length",
        path="modes.gas_furnaces.propane.low",
        says="the run length is 0, it must be above 0",
        hint="write both, or leave both blank where nothing is decoked",
    ),
    error(
        "a blank cell of a utility",
        BRACKWATER,
        cell("furnace_modes.csv", "gas_furnaces,propane,low", "makes high_pressure_steam", ""),
        at="furnace_modes.csv|gas_furnaces,propane,low|",
        path="modes.gas_furnaces.propane.low",
        says="the cell of high_pressure_steam is blank",
        hint="write 0 where there is none",
    ),
    error(
        "firing forgotten",
        BRACKWATER,
        cell("furnace_modes.csv", "gas_furnaces,propane,low", "fired_heat", ""),
        at="furnace_modes.csv|gas_furnaces,propane,low|fired_heat",
        path="modes.gas_furnaces.propane.low",
        says="the fired heat is blank, but gas_furnaces is fired with fuel",
        hint="write 0 where nothing is fired",
    ),
    error(
        "firing without a fuel",
        MARRAM_POINT,
        put("furnace_groups.catalytic_crackers.fired_with", DELETE),
        at="modes.csv|catalytic_crackers,light_naphtha,high|fired_heat",
        path="modes.catalytic_crackers.light_naphtha.high",
        says="the fired heat is written, but catalytic_crackers is fired with nothing: it would cost no fuel",
        hint="write `fired_with:` for furnace_groups.catalytic_crackers",
    ),
    error(
        "firing with power",
        MARRAM_POINT,
        put("furnace_groups.catalytic_crackers.fired_with", "power"),
        at="furnace_groups.catalytic_crackers.fired_with",
        path="furnace_groups.catalytic_crackers.fired_with",
        says="`power` is measured in power, fired heat needs a utility measured in heat",
    ),
]


@pytest.mark.parametrize("case", ROWS)
def test_modes_and_groups(broken: Broken, case: Case) -> None:
    check(broken, case)


MENDED = "mend the numbers: what is missing or too much is never closed silently"
SUMS = [
    error(
        "yields that lose half a tonne in a hundred",
        TEXTBOOK,
        cell("yields.csv", "ethane", "ethylene", "0.494"),
        at="yields.csv|ethane|",
        path="yields.thermal.ethane.design",
        says="the yields sum to 99.40 %, allowed is 99.5 to 100.5 %",
        hint=MENDED,
    ),
    warning(
        "yields that make a little",
        TEXTBOOK,
        cell("yields.csv", "ethane", "ethylene", "0.502"),
        at="yields.csv|ethane|",
        path="yields.thermal.ethane.design",
        says="the yields sum to 100.20 %, allowed is 99.95 to 100.05 %",
        hint=MENDED,
    ),
    error(
        "a negative yield",
        TEXTBOOK,
        cell("yields.csv", "ethane", "propylene", "-0.01"),
        at="yields.csv|ethane|propylene",
        path="yields.thermal.ethane.design",
        says="the yield -0.01 fraction is negative",
    ),
    error(
        "a side stream that makes mass",
        MARRAM_POINT,
        put("side_streams.refinery_propylene.composition.propane", "29 wt%"),
        at="side_streams.refinery_propylene.composition",
        path="side_streams.refinery_propylene.composition",
        says="the composition sums to 101.00 %, allowed is 99.5 to 100.5 %",
        hint=MENDED,
    ),
    warning(
        "a side stream that makes a little",
        MARRAM_POINT,
        put("side_streams.refinery_propylene.composition.propane", "28.1 wt%"),
        at="side_streams.refinery_propylene.composition",
        path="side_streams.refinery_propylene.composition",
        says="the composition sums to 100.10 %, allowed is 99.95 to 100.05 %",
        hint=MENDED,
    ),
    error(
        "a negative part of a side stream",
        MARRAM_POINT,
        put("side_streams.refinery_propylene.composition.propane", "-28 wt%"),
        at="side_streams.refinery_propylene.composition.propane",
        path="side_streams.refinery_propylene.composition.propane",
        says="-28 wt% is negative",
    ),
    warning(
        "hydrogen of another feed",
        MARRAM_POINT,
        put("feeds.ethane.hydrogen", "18.30 wt%"),
        at="thermal_yields.csv|ethane,moderate|",
        path="yields.thermal.ethane.moderate",
        says="the yields hold 20.06 wt% hydrogen, the feed 18.30 wt%: 9.6 % apart, allowed is 2 %",
        hint="is it the row of another feed, or is the feed's hydrogen wrong?",
    ),
    warning(
        "carbon of another feed",
        MARRAM_POINT,
        put("feeds.ethane.hydrogen", "18.30 wt%"),
        at="thermal_yields.csv|ethane,moderate|",
        path="yields.thermal.ethane.moderate",
        says="the yields hold 79.94 wt% carbon, the feed 81.70 wt%: 2.2 % apart, allowed is 2 %",
        hint="is it the row of another feed, or is the feed's carbon wrong?",
    ),
    warning(
        "carbon as written",
        MARRAM_POINT,
        put("feeds.ethane.carbon", "70 wt%"),
        at="thermal_yields.csv|ethane,moderate|",
        path="yields.thermal.ethane.moderate",
        says="the yields hold 79.94 wt% carbon, the feed 70.00 wt%: 14.2 % apart, allowed is 2 %",
        hint="is it the row of another feed, or is the feed's carbon wrong?",
    ),
    error(
        "a slope that makes mass",
        BRACKWATER,
        cell("quality_slopes.csv", "thermal,condensate", "methane", "-0.1"),
        at="quality_slopes.csv|thermal,condensate|",
        path="quality_slopes.condensate.aromatics_wt_percent",
        says="the slopes sum to 0.0227 wt%, allowed is -0.01 to 0.01 wt%",
        hint="a gain of one component is a loss of others",
    ),
    error(
        "a reference outside its range",
        BRACKWATER,
        cell("quality_slopes.csv", "thermal,condensate", "reference", "19"),
        at="quality_slopes.csv|thermal,condensate|reference",
        path="quality_slopes.condensate.aromatics_wt_percent",
        says="the reference 19 is outside the valid range 4 to 18",
    ),
    error(
        "recovery that loses mass",
        BRACKWATER,
        cell("recovery.csv", "methane", "tail_gas", "0.99"),
        at="recovery.csv|methane|",
        path="recovery.methane",
        says="the row sums to 0.99, it must be 1",
    ),
    warning(
        "recovery that loses a little",
        BRACKWATER,
        cell("recovery.csv", "methane", "tail_gas", "0.9999"),
        at="recovery.csv|methane|",
        path="recovery.methane",
        says="the row sums to 0.9999, it must be 1",
    ),
    error(
        "hydrogenation that makes no mass",
        BRACKWATER,
        cell("recovery.csv", "acetylene", "ethylene", "0.5381"),
        at="recovery.csv|acetylene|",
        path="recovery.acetylene",
        says="the row sums to 0.8916, it must be 1",
        hint="negative entries (hydrogenation) are taken only in a row that sums to 1",
    ),
    error(
        "a component that goes nowhere",
        BRACKWATER,
        cell("recovery.csv", "methane", "tail_gas", "0"),
        at="recovery.csv|methane|",
        path="recovery.methane",
        says="`methane` goes to no cut",
        hint="say where it leaves: the row sums to 1",
    ),
    error(
        "too much of a component",
        BRACKWATER,
        cell("recovery.csv", "methane", "tail_gas", "2"),
        cell("recovery.csv", "methane", "hydrogen", "-1"),
        at="recovery.csv|methane|tail_gas",
        path="recovery.methane",
        says="2 is outside -1 to 1.5",
    ),
    error(
        "less fired than the reaction takes up",
        MARRAM_POINT,
        cell("modes.csv", "thermal_furnaces,ethane,high", "fired_heat", "1.2"),
        at="modes.csv|thermal_furnaces,ethane,high|fired_heat",
        path="modes.thermal_furnaces.ethane.high",
        says="the fired heat is 1.2 GJ/t LHV, the reaction heat of these yields is 2.7 GJ/t LHV",
        hint="check the unit of fired_heat, the yields and the feed's heating value",
    ),
    error(
        "less fired than the reaction takes up, by what the feed mainly is",
        MARRAM_POINT,
        cell("modes.csv", "thermal_furnaces,recycle_ethane,high", "fired_heat", "1.2"),
        at="modes.csv|thermal_furnaces,recycle_ethane,high|fired_heat",
        path="modes.thermal_furnaces.recycle_ethane.high",
        says="the fired heat is 1.2 GJ/t LHV, the reaction heat of these yields is 2.73 GJ/t LHV",
        hint="check the unit of fired_heat, the yields and the feed's heating value",
    ),
    warning(
        "a coil outlet in another unit",
        MARRAM_POINT,
        cell("modes.csv", "thermal_furnaces,ethane,high", "coil_outlet", "1560"),
        at="modes.csv|thermal_furnaces,ethane,high|coil_outlet",
        path="modes.thermal_furnaces.ethane.high",
        says="a coil outlet of 1560 degC is unusual, common practice is 750 to 900 degC",
        hint="the group's kind is thermal",
    ),
    warning(
        "a catalytic coil outlet of a thermal furnace",
        MARRAM_POINT,
        cell("modes.csv", "catalytic_crackers,heavy_naphtha,high", "coil_outlet", "840"),
        at="modes.csv|catalytic_crackers,heavy_naphtha,high|coil_outlet",
        path="modes.catalytic_crackers.heavy_naphtha.high",
        says="a coil outlet of 840 degC is unusual, common practice is 450 to 700 degC",
        hint="the group's kind is catalytic",
    ),
    error(
        "ultimate yields with a recycle",
        BRACKWATER,
        put("yields.thermal.basis", "ultimate"),
        at="feeds.recycle_propane.recycle_of",
        path="feeds.recycle_propane.recycle_of",
        says="`propane` is cracked with the ultimate yields `thermal`, which hold its recycle already",
        hint="take this recycle feed away, or give yields of one pass (basis: once_through)",
    ),
    warning(
        "yields that look ultimate",
        TEXTBOOK,
        put("feeds.ethane.mainly", "ethane"),
        cell("yields.csv", "ethane", "ethane", "0.04"),
        cell("yields.csv", "ethane", "ethylene", "0.86"),
        at="yields.csv|ethane|ethane",
        path="yields.thermal.ethane.design",
        says="only 4.00 wt% ethane is left, although `recycle_ethane` recycles it",
        hint="are these yields to extinction? then the basis of `thermal` is ultimate, without the recycle feed",
    ),
    warning(
        "a molar mass that is not the formula's",
        BRACKWATER,
        cell("components.csv", "propane", "molar_mass", "44.97"),
        at="components.csv|propane|molar_mass",
        path="components.propane",
        says="44.97 does not fit the formula, which gives 44.097",
        hint="leave the atoms blank where it holds other elements than carbon and hydrogen",
    ),
    warning(
        "burnt CO2 that is not the formula's",
        BRACKWATER,
        cell("components.csv", "methane", "burnt_co2", "2.5"),
        at="components.csv|methane|burnt_co2",
        path="components.methane",
        says="2.5 does not fit the formula, which gives 2.7432",
        hint="leave the atoms blank where it holds other elements than carbon and hydrogen",
    ),
    error(
        "a negative heating value",
        BRACKWATER,
        cell("components.csv", "methane", "lower_heating_value", "-50"),
        at="components.csv|methane|lower_heating_value",
        path="components.methane",
        says="-50 is negative",
    ),
]


@pytest.mark.parametrize("case", SUMS)
def test_what_must_add_up(broken: Broken, case: Case) -> None:
    check(broken, case)


@pytest.mark.parametrize(("fired", "errors"), [("4.52", 1), ("4.55", 0)])
def test_reaction_heat_of_ethane_to_ethylene_and_hydrogen(broken: Broken, fired: str, errors: int) -> None:
    """C2H6 -> C2H4 + H2 takes up 136.34 kJ/mol at 298 K (formation enthalpies), 136.34 / 30.070 = 4.534 GJ/t.

    By heating values: 0.93296 x 47.17 + 0.06704 x 119.96 - 47.52 = 4.530 GJ/t.
    """
    begins = "recycle_ethane,high"
    names = [name.split(" [")[0] for name in _table(str(MODELS / MARRAM_POINT / "thermal_yields.csv"))[0][2:-1]]
    changes = [cell("thermal_yields.csv", begins, name, "0") for name in names]
    changes.append(cell("thermal_yields.csv", begins, "ethylene", str(100 * 28.054 / 30.07)))
    changes.append(cell("thermal_yields.csv", begins, "hydrogen", str(100 * 2.016 / 30.07)))
    changes.append(cell("modes.csv", f"thermal_furnaces,{begins}", "fired_heat", fired))
    _, findings = broken(MARRAM_POINT, *changes)
    paths = [finding.path for finding in findings if finding.level == "error"]
    assert paths == ["modes.thermal_furnaces.recycle_ethane.high"] * errors


def test_a_row_at_the_edge_of_closing_is_taken(broken: Broken) -> None:
    """99.95 % closes, and float sums do not make it a finding."""
    _, findings = broken(TEXTBOOK, cell("yields.csv", "ethane", "ethylene", "0.4995"))
    assert findings == []


def test_an_ultimate_table_may_crack_a_recycle_of_others(broken: Broken) -> None:
    """Ethane made from other feeds may be cracked to extinction: only a fresh feed is counted twice."""
    rows = "recycle_ethane,design"
    change = (
        put("yields.extinction", {"table": "extinction.csv", "basis": "ultimate"}),
        put("furnace_groups.second", {"furnaces": "unlimited", "kind": "thermal", "yields": "extinction"}),
        put("furnace_groups.second.unplanned_loss", "0 %"),
        put("furnace_groups.second.source", "test"),
        put("feeds.recycle_ethane.mainly", "ethane"),
        lambda: _write("extinction.csv", [_table("yields.csv")[0], _table("yields.csv")[_row(_table("yields.csv"), rows)]]),
        no_row("yields.csv", rows),
        cell("modes.csv", "cracker,recycle_ethane", "group", "second"),
        put("furnace_groups.second.fired_with", "fuel"),
    )
    _, findings = broken(TEXTBOOK, *change)
    assert findings == []


CUTS = [
    error(
        "a cut without a way out",
        BRACKWATER,
        put("outlets.c5_sale", DELETE),
        put("outlets.propane_sale.density", "507 kg/m3"),
        at="cuts.c5_cut",
        path="cuts.c5_cut",
        says="has no way out: no outlet takes it and no feed is a recycle of it",
        hint="add an outlet (sale, own_use or flare), or a feed with `recycle_of:`",
    ),
    error(
        "a cut that only a feed without a mode takes",
        TEXTBOOK,
        no_row("modes.csv", "cracker,recycle_ethane"),
        at="cuts.ethane",
        path="cuts.ethane",
        says="leaves only as recycle_ethane, which no mode cracks",
        hint="add a mode to modes.csv, or an outlet",
    ),
    error(
        "a content cut burnt",
        BRACKWATER,
        put("outlets.pygas_burnt", {"from": "pygas", "to": "own_use", "max": "1 kt", "source": "test"}),
        at="outlets.pygas_burnt.to",
        path="outlets.pygas_burnt.to",
        says="`pygas` is valued by content and can only be sold, not go to own_use",
        hint="or value pygas by price",
    ),
    error(
        "a content cut blended",
        BRACKWATER,
        put("outlets.raw_pygas.from", ["pygas", "fuel_oil"]),
        at="outlets.raw_pygas.from",
        path="outlets.raw_pygas.from",
        says="`pygas` is valued by content and cannot be blended",
        hint="or value pygas by price",
    ),
    error(
        "a content cut recycled",
        BRACKWATER,
        put("feeds.recycle_propane.recycle_of", "pygas"),
        at="feeds.recycle_propane.recycle_of",
        path="feeds.recycle_propane.recycle_of",
        says="`pygas` is valued by content and cannot be recycled",
    ),
    error(
        "a component in no content item",
        BRACKWATER,
        put("cuts.pygas.content_items.toluene", DELETE),
        at="cuts.pygas.content_items",
        path="cuts.pygas.content_items",
        says="`toluene` goes into pygas but is in no content item",
        hint="add it to one",
    ),
    error(
        "a component in two content items",
        BRACKWATER,
        put("cuts.pygas.content_items.benzene", ["benzene", "toluene"]),
        at="cuts.pygas.content_items",
        path="cuts.pygas.content_items",
        says="`toluene` is in several content items: benzene, toluene",
        hint="keep one",
    ),
    warning(
        "a content item of what is not in the cut",
        BRACKWATER,
        put("cuts.pygas.content_items.benzene", ["benzene", "ethane"]),
        at="cuts.pygas.content_items.benzene",
        path="cuts.pygas.content_items.benzene",
        says="`ethane` never goes into pygas by recovery.csv",
    ),
    error(
        "a heat cut without a heating value",
        BRACKWATER,
        cell("components.csv", "methane", "lower_heating_value", ""),
        at="components.csv|methane|lower_heating_value",
        path="components.methane",
        says="the lower_heating_value is blank, but `methane` goes into tail_gas and `tail_gas` is balanced as heat",
    ),
    error(
        "a heat cut blended",
        BRACKWATER,
        put("outlets.fuel_gas_export.from", ["tail_gas", "hydrogen"]),
        at="outlets.fuel_gas_export.from",
        path="outlets.fuel_gas_export.from",
        says="`tail_gas` is balanced as heat and cannot be blended",
    ),
    error(
        "a heat cut recycled",
        BRACKWATER,
        put("feeds.recycle_propane.recycle_of", "tail_gas"),
        at="feeds.recycle_propane.recycle_of",
        path="feeds.recycle_propane.recycle_of",
        says="`tail_gas` is balanced as heat and cannot be recycled",
    ),
    error(
        "burnt CO2 of a component that has none written",
        BRACKWATER,
        cell("components.csv", "methane", "burnt_co2", ""),
        at="components.csv|methane|burnt_co2",
        path="components.methane",
        says="the burnt_co2 is blank, but `methane` goes into tail_gas and carbon_dioxide counts its cut_burnt_co2 "
        "(utility_uses.csv:13)",
    ),
    error(
        "heat of a cut whose component has no heating value",
        TEXTBOOK,
        again("utility_uses.csv", "fuel,makes,outlet,methane_burnt", of="cut_heat", item="methane", amount="0", unit="GJ/GJ LHV"),
        at="components.csv|methane|lower_heating_value",
        path="components.methane",
        says="the lower_heating_value is blank, but `methane` goes into methane and fuel counts its cut_heat (utility_uses.csv:5)",
    ),
    error(
        "a free sink",
        BRACKWATER,
        no_row("utility_uses.csv", "fuel,makes,outlet,ethane_burnt"),
        no_row("utility_uses.csv", "carbon_dioxide,makes,outlet,ethane_burnt"),
        at="outlets.ethane_burnt",
        path="outlets.ethane_burnt",
        says="is an own use, but no utility is made or used by it: a free sink",
        hint="say in utility_uses.csv what it makes (fuel, hydrogen …), or write `to: flare`",
    ),
    warning(
        "an endless flare",
        BRACKWATER,
        put("outlets.c5_flared", {"from": "c5_cut", "to": "flare", "max": "unlimited", "source": "test"}),
        at="outlets.c5_flared",
        path="outlets.c5_flared",
        says="is a flare without a maximum, and no utility (carbon dioxide) counts what it burns",
        hint="write its `max:`, or the CO2 it makes in the table of utility uses",
    ),
    warning(
        "a utility that comes from nowhere",
        BRACKWATER,
        put("utilities.power.imports", {}),
        put("price_windows/utilities.grid_power", DELETE),
        at="utilities.power",
        path="utilities.power",
        says="is used, but nothing makes it and it has no import",
        hint="write an import, a conversion or what makes it",
    ),
    warning(
        "a utility that goes nowhere",
        BRACKWATER,
        no_row("utility_uses.csv", "carbon_dioxide,uses"),
        put("utilities.carbon_dioxide.emissions", {}),
        put("price_windows/utilities.carbon", DELETE),
        at="utilities.carbon_dioxide",
        path="utilities.carbon_dioxide",
        says="is made, but nothing uses it and it has no export or emission",
        hint="write an export, an emission or what uses it",
    ),
]


@pytest.mark.parametrize("case", CUTS)
def test_cuts_and_outlets(broken: Broken, case: Case) -> None:
    check(broken, case)


def test_a_limited_flare_and_one_with_its_co2_are_taken(broken: Broken) -> None:
    _, findings = broken(
        BRACKWATER,
        put("outlets.c5_flared", {"from": "c5_cut", "to": "flare", "max": "2 t/h", "source": "test"}),
        put("outlets.ethane_flared", {"from": "ethane", "to": "flare", "max": "unlimited", "source": "test"}),
        again("utility_uses.csv", "carbon_dioxide,makes,outlet,ethane_burnt", item="ethane_flared"),
    )
    assert findings == []


LIST = "see the list of units in models/README.md"
BY_WEIGHT = "turn it into wt%"
UNITS = [
    error(
        "hydrogen by mole",
        BRACKWATER,
        put("feeds.ethane.hydrogen", "20.13 mol%"),
        at="feeds.ethane.hydrogen",
        path="feeds.ethane.hydrogen",
        says="`20.13 mol%` is no share by weight",
        hint=BY_WEIGHT,
    ),
    error(
        "hydrogen as a fraction of a hundred",
        BRACKWATER,
        put("feeds.ethane.hydrogen", "20.13 fraction"),
        at="feeds.ethane.hydrogen",
        path="feeds.ethane.hydrogen",
        says="`20.13 fraction` is out of range, allowed is 0 to 100 wt%",
    ),
    error(
        "carbon that is no share",
        BRACKWATER,
        put("feeds.ethane.carbon", "0.8 t"),
        at="feeds.ethane.carbon",
        path="feeds.ethane.carbon",
        says="`0.8 t` is not a share",
        hint="write %, wt% or fraction",
    ),
    error(
        "more than a tonne of hydrogen and carbon",
        BRACKWATER,
        put("feeds.ethane.carbon", "81 wt%"),
        at="feeds.ethane.carbon",
        path="feeds.ethane.carbon",
        says="hydrogen and carbon are 101.13 wt% together, allowed is 100 wt%",
    ),
    error(
        "a heating value without its basis",
        MARRAM_POINT,
        put("feeds.ethane.lower_heating_value", "47.5 GJ/t"),
        at="feeds.ethane.lower_heating_value",
        path="feeds.ethane.lower_heating_value",
        says="`GJ/t` does not say its heating basis",
        hint="write `GJ/t LHV` or `GJ/t HHV`",
    ),
    error(
        "a heating value beyond hydrogen",
        MARRAM_POINT,
        put("feeds.ethane.lower_heating_value", "47500 GJ/t LHV"),
        at="feeds.ethane.lower_heating_value",
        path="feeds.ethane.lower_heating_value",
        says="`47500 GJ/t LHV` is out of range, allowed is above 0, up to 121 GJ/t LHV (hydrogen)",
    ),
    error(
        "a density of a feed",
        BRACKWATER,
        put("feeds.ethane.density", "356 kg"),
        at="feeds.ethane.density",
        path="feeds.ethane.density",
        says="`356 kg` is mass (t, lb …), but mass (t, lb …) per volume is needed here",
        hint=LIST,
    ),
    error(
        "a density of a side stream",
        MARRAM_POINT,
        put("side_streams.refinery_propylene.density", "519 t/m3"),
        at="side_streams.refinery_propylene.density",
        path="side_streams.refinery_propylene.density",
        says="`519 t/m3` is out of range, allowed is above 0, up to 3 t/m3",
    ),
    error(
        "a density of an outlet",
        MARRAM_POINT,
        put("outlets.gasoline_sale.density", "0 kg/m3"),
        at="outlets.gasoline_sale.density",
        path="outlets.gasoline_sale.density",
        says="`0 kg/m3` is out of range, allowed is above 0, up to 3 t/m3",
    ),
    error(
        "a density of a cut",
        MARRAM_POINT,
        put("cuts.gasoline.density", "0.79 fraction"),
        at="cuts.gasoline.density",
        path="cuts.gasoline.density",
        says="`0.79 fraction` is a number, but mass (t, lb …) per volume is needed here",
        hint=LIST,
    ),
    error(
        "a composition by volume",
        MARRAM_POINT,
        put("side_streams.refinery_propylene.composition.propane", "28 vol%"),
        at="side_streams.refinery_propylene.composition.propane",
        path="side_streams.refinery_propylene.composition.propane",
        says="`28 vol%` is no share by weight",
        hint=BY_WEIGHT,
    ),
    error(
        "a loss that is no share",
        BRACKWATER,
        put("loss.share", "2 t/h"),
        at="loss.share",
        path="loss.share",
        says="`2 t/h` is not a share",
        hint="write %, wt% or fraction",
    ),
    error(
        "a loss of more than all",
        BRACKWATER,
        put("loss.share", "120 wt%"),
        at="loss.share",
        path="loss.share",
        says="`120 wt%` is out of range, allowed is 0 to 100 wt%",
    ),
    error(
        "unplanned loss in hours",
        BRACKWATER,
        put("furnace_groups.gas_furnaces.unplanned_loss", "20 h"),
        at="furnace_groups.gas_furnaces.unplanned_loss",
        path="furnace_groups.gas_furnaces.unplanned_loss",
        says="`20 h` is not a share",
        hint="write %, wt% or fraction",
    ),
    error(
        "a minimum load above full",
        BRACKWATER,
        put("furnace_groups.gas_furnaces.min_load", "165 %"),
        at="furnace_groups.gas_furnaces.min_load",
        path="furnace_groups.gas_furnaces.min_load",
        says="`165 %` is out of range, allowed is 0 to 100 %",
    ),
    error(
        "a minimum load of a recovery unit above full",
        BRACKWATER,
        cell("recovery_units.csv", "c2_splitter", "min_load", "150"),
        at="recovery_units.csv|c2_splitter|min_load",
        path="recovery_units.c2_splitter",
        says="150 % is out of range, allowed is 0 to 100 %",
    ),
    error(
        "a minimum load of no capacity",
        BRACKWATER,
        cell("recovery_units.csv", "c2_splitter", "capacity", "unlimited"),
        at="recovery_units.csv|c2_splitter|min_load",
        path="recovery_units.c2_splitter",
        says="a minimum load is a share of the capacity, which is unlimited",
        hint="write 0, or the capacity",
    ),
    error(
        "a capacity without time",
        BRACKWATER,
        cell("recovery_units.csv", "c2_splitter", "capacity_unit", "t"),
        at="recovery_units.csv|c2_splitter|capacity_unit",
        path="recovery_units.c2_splitter",
        says="`t` is no rate of load",
        hint="write for example `t/h`, `kNm3/h` or `MW`",
    ),
    error(
        "a capacity in money",
        BRACKWATER,
        cell("recovery_units.csv", "c2_splitter", "capacity_unit", "USD/h"),
        at="recovery_units.csv|c2_splitter|capacity_unit",
        path="recovery_units.c2_splitter",
        says="`USD/h` is no rate of load",
        hint="write for example `t/h`, `kNm3/h` or `MW`",
    ),
    error(
        "an unlimited capacity in no unit",
        BRACKWATER,
        cell("recovery_units.csv", "pygas_hydrotreater", "capacity", "unlimited"),
        cell("recovery_units.csv", "pygas_hydrotreater", "capacity_unit", "tons/h"),
        at="recovery_units.csv|pygas_hydrotreater|capacity_unit",
        path="recovery_units.pygas_hydrotreater",
        says="`tons` is not a unit of the list",
        hint="write `t`, `short_ton` or `long_ton`",
    ),
    error(
        "a negative capacity",
        BRACKWATER,
        cell("recovery_units.csv", "c2_splitter", "capacity", "-118"),
        at="recovery_units.csv|c2_splitter|capacity",
        path="recovery_units.c2_splitter",
        says="the capacity `-118 t/h` is negative",
    ),
    error(
        "a load in another unit than the capacity",
        BRACKWATER,
        cell("unit_loads.csv", "cracked_gas_compressor,component,methane", "load_unit", "t/t"),
        at="unit_loads.csv|cracked_gas_compressor,component,methane|load_unit",
        path="unit_loads.cracked_gas_compressor",
        says="`1.39712 t/t` is a number, but gas volume (kNm3 …) per mass (t, lb …) is needed here",
        hint=LIST,
    ),
    error(
        "a load per heat of what is counted in tonnes",
        BRACKWATER,
        cell("unit_loads.csv", "quench_oil_system", "load_unit", "GJ/GJ LHV"),
        at="unit_loads.csv|quench_oil_system|load_unit",
        path="unit_loads.quench_oil_system",
        says="`1 GJ/GJ LHV` is not t per t, as is needed here",
    ),
    error(
        "a load of a mode in another unit",
        MARRAM_POINT,
        title("modes.csv", "load cracked_gas_compressor", "load cracked_gas_compressor [t/t]"),
        at="modes.csv|thermal_furnaces,ethane,high|",
        path="modes.thermal_furnaces.ethane.high",
        says="`1.204 t/t` is a number, but gas volume (kNm3 …) per mass (t, lb …) is needed here",
        hint=LIST,
    ),
    error(
        "steam of a mode in another unit",
        BRACKWATER,
        title("furnace_modes.csv", "makes high_pressure_steam", "makes high_pressure_steam [GJ/t LHV]"),
        at="furnace_modes.csv|gas_furnaces,ethane,low|",
        path="modes.gas_furnaces.ethane.low",
        says="`1.35 GJ/t LHV` is energy (GJ, MWh …) per mass (t, lb …), but a number is needed here",
        hint=LIST,
    ),
    error(
        "fuel of an outlet without its heating basis",
        BRACKWATER,
        cell("utility_uses.csv", "fuel,makes,outlet,ethane_burnt", "unit", "GJ/t"),
        at="utility_uses.csv|fuel,makes,outlet,ethane_burnt|unit",
        path="utility_uses.fuel",
        says="`GJ/t` does not say its heating basis",
        hint="write `GJ/t LHV` or `GJ/t HHV`",
    ),
    error(
        "fuel per tonne of what is counted as heat",
        BRACKWATER,
        cell("utility_uses.csv", "fuel,makes,outlet,tail_gas_burnt", "unit", "GJ/t LHV"),
        at="utility_uses.csv|fuel,makes,outlet,tail_gas_burnt|unit",
        path="utility_uses.fuel",
        says="`1 GJ/t LHV` is energy (GJ, MWh …) per mass (t, lb …), but a number is needed here",
        hint=LIST,
    ),
    error(
        "tonnes per tonne of what is counted as heat",
        BRACKWATER,
        cell("utility_uses.csv", "fuel,makes,outlet,tail_gas_burnt", "unit", "t/t"),
        at="utility_uses.csv|fuel,makes,outlet,tail_gas_burnt|unit",
        path="utility_uses.fuel",
        says="`1 t/t` is not GJ LHV per GJ LHV, as is needed here",
    ),
    error(
        "CO2 of a cut in heat",
        BRACKWATER,
        cell("utility_uses.csv", "carbon_dioxide,makes,cut_burnt_co2", "unit", "t/GJ LHV"),
        at="utility_uses.csv|carbon_dioxide,makes,cut_burnt_co2|unit",
        path="utility_uses.carbon_dioxide",
        says="`1 t/GJ LHV` is mass (t, lb …) per energy (GJ, MWh …), but a number is needed here",
        hint=LIST,
    ),
    error(
        "steam of a load in another unit than the load",
        BRACKWATER,
        cell("utility_uses.csv", "high_pressure_steam,uses,unit_load,propylene_refrigeration", "unit", "t/t"),
        at="utility_uses.csv|high_pressure_steam,uses,unit_load,propylene_refrigeration|unit",
        path="utility_uses.high_pressure_steam",
        says="`4.6 t/t` is a number, but mass (t, lb …) per energy (GJ, MWh …) is needed here",
        hint=LIST,
    ),
    error(
        "a fixed use that is no rate",
        TEXTBOOK,
        cell("utility_uses.csv", "fuel,uses,fixed", "unit", "Btu LHV"),
        at="utility_uses.csv|fuel,uses,fixed|unit",
        path="utility_uses.fuel",
        says="`20000000 Btu LHV` is energy (GJ, MWh …), but energy (GJ, MWh …) per time is needed here",
        hint=LIST,
    ),
    error(
        "a negative use",
        BRACKWATER,
        cell("utility_uses.csv", "power,uses", "amount", "-0.045"),
        at="utility_uses.csv|power,uses|amount",
        path="utility_uses.power",
        says="`-0.045 MWh/t` is negative",
        hint="write the other direction instead",
    ),
    error(
        "a maximum of an outlet in another unit",
        BRACKWATER,
        put("outlets.tail_gas_flared.max", "3 kt/month"),
        at="outlets.tail_gas_flared.max",
        path="outlets.tail_gas_flared.max",
        says="`3 kt/month` is mass (t, lb …), but energy (GJ, MWh …) is needed here",
        hint=LIST,
    ),
    error(
        "a maximum of an outlet by volume without a density",
        BRACKWATER,
        put("outlets.fuel_oil_burnt.max", {"2031-03": "3 kt/month", "other_months": "20 kbbl"}),
        at="outlets.fuel_oil_burnt.max",
        path="outlets.fuel_oil_burnt.max",
        says="a volume needs a density to become a mass",
        hint="write `density: ... kg/m3` for this item in the plant",
    ),
    error(
        "a negative minimum of an outlet",
        BRACKWATER,
        put("outlets.fuel_oil_burnt.min", "-1 kt"),
        at="outlets.fuel_oil_burnt.min",
        path="outlets.fuel_oil_burnt.min",
        says="`-1 kt` is negative",
    ),
    error(
        "a specification by mole",
        BRACKWATER,
        put("outlets.chemical_grade_propylene.specifications.propylene_content.min", "93 mol%"),
        at="outlets.chemical_grade_propylene.specifications.propylene_content",
        path="outlets.chemical_grade_propylene.specifications.propylene_content",
        says="`93 mol%` is no share by weight",
        hint=BY_WEIGHT,
    ),
    error(
        "a specification half without units",
        BRACKWATER,
        put("outlets.chemical_grade_propylene.specifications.propylene_content.min", 93),
        at="outlets.chemical_grade_propylene.specifications.propylene_content",
        path="outlets.chemical_grade_propylene.specifications.propylene_content",
        says="some of its numbers have a unit and some have none",
        hint="write all of them with it, or none",
    ),
    error(
        "a specification that excludes itself",
        BRACKWATER,
        put("outlets.chemical_grade_propylene.specifications.propylene_content.max", "92 wt%"),
        at="outlets.chemical_grade_propylene.specifications.propylene_content",
        path="outlets.chemical_grade_propylene.specifications.propylene_content",
        says="the minimum 93 wt% is above the maximum 92 wt%",
    ),
    warning(
        "a specification that nothing reaches",
        BRACKWATER,
        put("outlets.chemical_grade_propylene.specifications.propylene_content.min", "99.9 wt%"),
        at="outlets.chemical_grade_propylene.specifications.propylene_content",
        path="outlets.chemical_grade_propylene.specifications.propylene_content",
        says="no ingredient reaches the minimum 99.9 wt%",
        hint="nothing can be sold through this outlet",
    ),
    warning(
        "a specification that everything exceeds",
        BRACKWATER,
        put("outlets.chemical_grade_propylene.specifications.impurity", {"values": {"propylene": 5, "propane": 9}, "max": 3}),
        at="outlets.chemical_grade_propylene.specifications.impurity",
        path="outlets.chemical_grade_propylene.specifications.impurity",
        says="no ingredient is below the maximum 3.0",
        hint="nothing can be sold through this outlet",
    ),
    error(
        "a conversion in another unit",
        BRACKWATER,
        put("conversions.boiler.uses.fuel", "3.05 t"),
        at="conversions.boiler.uses.fuel",
        path="conversions.boiler.uses.fuel",
        says="`3.05 t` is mass (t, lb …), but energy (GJ, MWh …) is needed here",
        hint=LIST,
    ),
    error(
        "a conversion of nothing",
        BRACKWATER,
        put("conversions.boiler.makes.high_pressure_steam", "0 t"),
        at="conversions.boiler.makes.high_pressure_steam",
        path="conversions.boiler.makes.high_pressure_steam",
        says="`0 t` is not above 0",
    ),
    error(
        "the maximum of a conversion in what it uses",
        BRACKWATER,
        put("conversions.boiler.max", "80 GJ/h LHV"),
        at="conversions.boiler.max",
        path="conversions.boiler.max",
        says="`80 GJ/h LHV` is energy (GJ, MWh …), but mass (t, lb …) is needed here",
        hint=LIST,
    ),
    error(
        "a limit on tonnes and gigajoules",
        MARRAM_POINT,
        put("limits.jetty.sum.3", {"sold": "tail_gas_burnt"}),
        at="limits.jetty.sum",
        path="limits.jetty.sum",
        says="its terms are counted in t and GJ LHV: they must all be counted in one unit",
    ),
    error(
        "a ratio of megawatt hours to tonnes",
        MARRAM_POINT,
        put("ratio_limits.propylene_to_ethylene.of.1", {"imported": "grid_power"}),
        at="ratio_limits.propylene_to_ethylene",
        path="ratio_limits.propylene_to_ethylene",
        says="its terms are counted in MWh and t: they must all be counted in one unit",
    ),
    error(
        "a limit in another unit than its sum",
        MARRAM_POINT,
        put("limits.jetty.max", "84 TJ LHV"),
        at="limits.jetty.max",
        path="limits.jetty.max",
        says="`84 TJ LHV` is energy (GJ, MWh …), but mass (t, lb …) is needed here",
        hint=LIST,
    ),
    error(
        "a price window without its end",
        BRACKWATER,
        put("price_windows/feeds", "150 USD/t"),
        at="price_windows/feeds",
        path="price_windows.feeds",
        says="`150 USD/t` is no price window",
        hint="write for example `100 to 1200 USD/t`",
    ),
    error(
        "a price window upside down",
        BRACKWATER,
        put("price_windows/feeds", "1200 to 150 USD/t"),
        at="price_windows/feeds",
        path="price_windows.feeds",
        says="`1200 to 150 USD/t`: the lowest price is above the highest",
        hint="write `150 to 1200 USD/t`",
    ),
    error(
        "a price window in no unit of the list",
        BRACKWATER,
        put("price_windows/feeds", "150 to 1200 USD/ton"),
        at="price_windows/feeds",
        path="price_windows.feeds",
        says="`ton` is not a unit of the list",
        hint="write `t`, `short_ton` or `long_ton`",
    ),
    error(
        "a price window per tonne of what is sold as heat",
        BRACKWATER,
        put("price_windows/outlets.fuel_gas_export", "1 to 25 USD/t"),
        at="price_windows/outlets.fuel_gas_export",
        path="price_windows.outlets.fuel_gas_export",
        says="`1 USD/t` is money per mass (t, lb …), but money per energy (GJ, MWh …) is needed here",
        hint=LIST,
    ),
    error(
        "a price window without money",
        BRACKWATER,
        put("price_windows/outlets", "1 to 25 t"),
        at="price_windows/outlets",
        path="price_windows.outlets",
        says="`1 to 25 t` is no price",
        hint="write for example `100 to 1200 USD/t`",
    ),
]


@pytest.mark.parametrize("case", UNITS)
def test_units(broken: Broken, case: Case) -> None:
    check(broken, case)


def test_a_price_window_reads_as_two_prices() -> None:
    low, high = price_window("-2 to 1e3 USc/gal")
    assert (low.number, high.number, high.unit.text) == (-2.0, 1000.0, "USc/gal")
    with pytest.raises(UnitError, match="is not a number with a unit"):
        price_window("low to 3 USD/t")


READING = [
    error(
        "a utility used and made by modes",
        BRACKWATER,
        new_column("furnace_modes.csv", "uses high_pressure_steam [t/t]", "0.1"),
        at="furnace_modes.csv|header|uses high_pressure_steam",
        path="",
        says="`high_pressure_steam` is used and made: keep one column",
    ),
    error(
        "a coil outlet that is no temperature",
        BRACKWATER,
        title("furnace_modes.csv", "coil_outlet", "coil_outlet [t/h]"),
        at="furnace_modes.csv|gas_furnaces,ethane,low|coil_outlet",
        path="",
        says="`830 t/h` is not a temperature",
        hint="write degC, degF or K",
    ),
    error(
        "minimum loads without their unit",
        BRACKWATER,
        title("recovery_units.csv", "min_load", "min_load"),
        at="recovery_units.csv|c2_splitter|min_load",
        path="",
        says="the column does not carry its unit",
        hint="write `min_load [unit]`",
    ),
    error(
        "steam of modes without its unit",
        BRACKWATER,
        title("furnace_modes.csv", "makes high_pressure_steam", "makes high_pressure_steam"),
        at="furnace_modes.csv|gas_furnaces,ethane,low|makes high_pressure_steam",
        path="",
        says="the column does not carry its unit",
        hint="write `makes high_pressure_steam [unit]`",
    ),
    error(
        "mol% without a molar mass",
        TEXTBOOK,
        units("yields.csv", "fraction", "mol%"),
        at="components.csv|gasoline|",
        path="components.gasoline",
        says="the molar_mass is blank, but mol% becomes wt% with it (yields.csv:2)",
    ),
    error(
        "slopes in mol%",
        BRACKWATER,
        units("quality_slopes.csv", "wt%", "mol%"),
        at="quality_slopes.csv|header|",
        path="",
        says="slopes in mol% have no meaning by weight",
        hint="write them in wt%",
    ),
]


@pytest.mark.parametrize("case", READING)
def test_reading(broken: Broken, case: Case) -> None:
    plant, findings = broken(case.plant, *case.changes)
    says = case.says.removeprefix("  ") if case.says.startswith("  \n") else case.says
    assert line(case.at) + says in [str(finding) for finding in findings]
    assert plant is None


def test_yields_in_mol_percent_are_turned_into_weight(broken: Broken) -> None:
    """Two moles of methane (16.043) and one of ethane (30.070): 2 x 16.043 / 62.156 = 51.62 wt% methane.

    The row is written with 1 % missing, and what is missing stays missing.
    """
    zero = [column("yields.csv", name, "0") for name in ("propane", "propylene", "butadiene", "gasoline", "fuel_oil", "ethylene")]
    shares = [column("yields.csv", "methane", "66"), column("yields.csv", "ethane", "33")]
    _, findings = broken(TEXTBOOK, *zero, *shares, units("yields.csv", "fraction", "mol%"))
    says = "the yields sum to 99.00 %, allowed is 99.5 to 100.5 %"
    expected = f"{line('yields.csv|ethane|')}  yields.thermal.ethane.design\n  {says}\nhint: {MENDED}"
    assert expected in [str(finding) for finding in findings]
    _, findings = broken_again(shares=("66.666667", "33.333333"))
    plant = load_plant(".", Findings())
    assert plant is not None
    row = plant.yields["thermal", "ethane", "design"]
    assert row.shares["methane"] == pytest.approx(2 * 16.043 / (2 * 16.043 + 30.070), abs=1e-6)
    assert row.written["methane"] == "66.666667 mol%"
    assert findings == []


def broken_again(shares: tuple[str, str]) -> tuple[Plant | None, list[Finding]]:
    """The same copy with other yields of methane and ethane."""
    for name, value in zip(("methane", "ethane"), shares, strict=True):
        column("yields.csv", name, value)()
    findings = Findings()
    return load_plant(".", findings), list(findings)


def test_all_findings_come_at_once(broken: Broken) -> None:
    """A wrong name, a wrong unit, a wrong sum and a cut without a way out are said together."""
    _, findings = broken(
        BRACKWATER,
        put("main_product", "ethylen"),
        put("loss.share", "2 t/h"),
        put("outlets.c5_sale", DELETE),
        cell("recovery.csv", "methane", "tail_gas", "0.9"),
    )
    assert [finding.path for finding in findings] == ["main_product", "loss.share", "recovery.methane", "cuts.c5_cut"]
