"""One thing broken in a copy of a shipped plant, and the whole finding that says so.

The cases stand in `broken_plants/*.txt`, how to read them in the README beside them.
"""

from __future__ import annotations

import copy
import csv
import functools
import json
import re
import shutil
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import pytest
from ruamel.yaml import YAML

from olefinlp.inputs.findings import Finding, Findings
from olefinlp.inputs.plant import Plant, load_plant
from olefinlp.inputs.price_windows import price_window
from olefinlp.inputs.units import UnitError

HERE = Path(__file__).parent
MODELS = HERE.parent / "models"
BRACKWATER, MARRAM_POINT, TEXTBOOK = "brackwater", "marram_point", "thermal_cracker"
SHIPPED = (BRACKWATER, MARRAM_POINT, TEXTBOOK)
Keys = tuple[str | int, ...]


@functools.cache
def _written(name: str) -> Any:
    return YAML(typ="safe").load((MODELS / name / "plant.yaml").read_text(encoding="utf-8"))


def keys(path: str) -> Keys:
    """`limits.jetty.sum.1.sold` as keys; `/` is taken where a key holds a point."""
    parts = path.split("/") if "/" in path else path.split(".")
    return tuple(int(part) - 1 if part.isdigit() else part for part in parts)


@dataclass
class Copy:
    """A copy of a shipped plant in the present folder: tables as files, plant.yaml as data until it is written."""

    data: Any
    lines: dict[Keys, int] = field(default_factory=dict)

    def put(self, path: str, value: Any) -> None:
        """Write one value of plant.yaml."""
        *above, last = keys(path)
        here = self.data
        for key in above:
            here = here.setdefault(key, {}) if isinstance(here, dict) else here[key]
        if isinstance(here, list) and last == len(here):
            here.append(value)
        else:
            here[last] = value

    def delete(self, path: str) -> None:
        """Take one value of plant.yaml away."""
        *above, last = keys(path)
        del functools.reduce(lambda here, key: here[key], above, self.data)[last]

    def write(self) -> None:
        """Write plant.yaml, one value a line, and note the line of each path."""
        text: list[str] = []
        self._emit(self.data, (), text)
        Path("plant.yaml").write_text("\n".join(text) + "\n", encoding="utf-8")

    def _emit(self, value: Any, path: Keys, text: list[str]) -> None:
        items = value.items() if isinstance(value, dict) else enumerate(value)
        for key, inner in items:
            here = (*path, key)
            self.lines[here] = len(text) + 1
            name = "  " * len(path) + ("-" if isinstance(value, list) else json.dumps(key) + ":")
            if isinstance(inner, dict | list) and inner:
                text.append(name)
                self._emit(inner, here, text)
            else:
                text.append(f"{name} {json.dumps(inner, ensure_ascii=False)}")

    def line(self, where: str) -> str:
        """`file:line` of a path in plant.yaml, or of `table.csv|first,cells|column`."""
        if "|" not in where:
            return f"plant.yaml:{self.lines[keys(where)]}"
        file, begins, column = where.split("|")
        rows = _table(file)
        number = {"header": 0, "last": len(rows) - 1, "": -1}.get(begins)
        number = _row(rows, begins) if number is None else number
        return (f"{file}:{number + 1}" if number >= 0 else file) + (f" [{column}]" if column else "")

    def filled(self, text: str) -> str:
        """A finding with the places that `<<...>>` stand for."""
        text = re.sub(r"<<line (.+?)>>", lambda found: self.line(found[1]).split(":")[1], text)
        return re.sub(r"<<(.+?)>>", lambda found: self.line(found[1]), text)


def _table(file: str | Path) -> list[list[str]]:
    with Path(file).open(encoding="utf-8", newline="") as stream:
        return list(csv.reader(stream))


def _write(file: str, rows: list[list[str]]) -> None:
    with Path(file).open("w", encoding="utf-8", newline="") as stream:
        csv.writer(stream, lineterminator="\n").writerows(rows)


def _row(rows: list[list[str]], begins: str) -> int:
    """The first row with these first cells."""
    cells = begins.split(",")
    return next(index for index, row in enumerate(rows) if row[: len(cells)] == cells)


def _column(rows: list[list[str]], name: str) -> int:
    return [title.split(" [")[0] for title in rows[0]].index(name)


def cell(file: str, begins: str, column: str, value: str) -> None:
    """Write one cell of a table."""
    rows = _table(file)
    rows[_row(rows, begins)][_column(rows, column)] = value
    _write(file, rows)


def again(file: str, begins: str, **cells: str) -> None:
    """Add a row like another at the end, with some cells changed."""
    rows = _table(file)
    row = list(rows[_row(rows, begins)])
    for name, value in cells.items():
        row[_column(rows, name)] = value
    _write(file, [*rows, row])


def title(file: str, name: str, new: str) -> None:
    """Change the header of a column."""
    rows = _table(file)
    rows[0][_column(rows, name)] = new
    _write(file, rows)


def units(file: str, old: str, new: str) -> None:
    """Change the unit of all columns that carry it."""
    rows = _table(file)
    rows[0] = [name.replace(f"[{old}]", f"[{new}]") for name in rows[0]]
    _write(file, rows)


def new_column(file: str, name: str, value: str) -> None:
    """Add a column before the last one."""
    _write(file, [[*row[:-1], value if index else name, row[-1]] for index, row in enumerate(_table(file))])


def no_column(file: str, name: str) -> None:
    """Take a column away."""
    rows = _table(file)
    index = _column(rows, name)
    _write(file, [row[:index] + row[index + 1 :] for row in rows])


def no_row(file: str, begins: str) -> None:
    """Take the rows with these first cells away."""
    rows, cells = _table(file), begins.split(",")
    _row(rows, begins)
    _write(file, [row for row in rows if row[: len(cells)] != cells])


TABLE_CHANGES: dict[str, Callable[..., None]] = {
    "cell": cell,
    "again": again,
    "title": title,
    "units": units,
    "new_column": new_column,
    "no_column": no_column,
    "no_row": no_row,
}


def _value(text: str) -> Any:
    try:
        return json.loads(text)
    except ValueError:
        return text


def apply(plant: Copy, change: str) -> None:
    """Make one change of a case."""
    verb, _, rest = change.partition(" ")
    if verb == "put":
        path, _, value = rest.partition(" = ")
        plant.put(path, _value(value))
    elif verb == "delete":
        plant.delete(rest)
    elif verb == "again":
        file, begins, *cells = rest.split(" | ")
        again(file, begins, **{name: value.strip() for name, _, value in (part.partition(" =") for part in cells)})
    else:
        *texts, last = rest.split(" | ")
        name, equals, value = last.partition(" =")
        TABLE_CHANGES[verb](*texts, name, *([value.removeprefix(" ")] if equals else []))


Broken = Callable[..., tuple[Copy, Plant | None, list[Finding]]]


@pytest.fixture
def broken(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Broken:
    """Makes a copy of a shipped plant with changes, and loads it."""

    def make(name: str, *changes: str) -> tuple[Copy, Plant | None, list[Finding]]:
        folder = tmp_path / name
        shutil.copytree(MODELS / name, folder, dirs_exist_ok=True)
        monkeypatch.chdir(folder)
        plant = Copy(copy.deepcopy(_written(name)))
        for change in changes:
            apply(plant, change)
        plant.write()
        findings = Findings()
        return plant, load_plant(".", findings), list(findings)

    return make


@dataclass(frozen=True)
class Case:
    """What is changed in which plant, and the finding that must be printed."""

    plant: str
    changes: tuple[str, ...]
    finding: str


def cases() -> list[Any]:
    """All cases of the folder, named by their file and their first line."""
    found = []
    for file in sorted((HERE / "broken_plants").glob("*.txt")):
        for block in file.read_text(encoding="utf-8").strip().split("\n\n"):
            head, _, finding = block.partition("\n->\n")
            name, plant, *changes = head.split("\n")
            case = Case(plant.removeprefix("in "), tuple(changes), finding)
            found.append(pytest.param(case, id=f"{file.stem}: {name.removeprefix('# ')}"))
    return found


@pytest.mark.parametrize("case", cases())
def test_what_is_broken_is_said(broken: Broken, case: Case) -> None:
    written, plant, findings = broken(case.plant, *case.changes)
    expected, texts = written.filled(case.finding), [str(finding) for finding in findings]
    assert expected in texts, "\n\n".join([expected, "found only:", *texts])
    assert (plant is None) == any(finding.level == "error" for finding in findings)


@pytest.mark.parametrize("name", SHIPPED)
def test_a_shipped_plant_is_without_findings(name: str) -> None:
    findings = Findings()
    assert load_plant(MODELS / name, findings) is not None
    assert [str(finding) for finding in findings] == []


@pytest.mark.parametrize("name", SHIPPED)
def test_the_copy_that_cases_change_is_without_findings(broken: Broken, name: str) -> None:
    _, plant, findings = broken(name)
    assert findings == []
    assert plant is not None


CUT_NAMES = "hydrogen, tail_gas, ethylene, ethane, propylene, propane, crude_c4, c5_cut, pygas, fuel_oil"
ITEMS = {
    "charge": ("feed, `group.feed` or `all`", "propan", "did you mean `propane`?"),
    "component": ("component", "propan", "did you mean `propane`?"),
    "cut": ("cut", "propan", "did you mean `propane`?"),
    "outlet": ("outlet", "propan_sale", "did you mean `propane_sale`?"),
    "ingredient": (
        "ingredient (`outlet.cut`)",
        "chemical_grade_propylene.ethane",
        "did you mean `chemical_grade_propylene.propane`?",
    ),
    "side_stream": ("side stream", "propane", ""),
    "cut_heat": ("cut", "tailgas", "did you mean `tail_gas`?"),
    "cut_burnt_co2": ("cut", "pigas", "did you mean `pygas`?"),
    "unit_load": ("recovery unit", "c2_spliter", "did you mean `c2_splitter`?"),
    "import": ("import", "surplus_steam", "known: natural_gas, grid_power"),
    "export": ("export", "natural_gas", "known: surplus_steam"),
    "loss": ("item", "ethane", "known: all"),
    "fixed": ("item", "ethane", "known: all"),
}
LOAD_KINDS = ("charge", "component", "cut", "outlet", "ingredient", "side_stream")
USE_KINDS = tuple(kind for kind in ITEMS if kind != "side_stream")


def said(place: str, path: str, message: str, hint: str) -> str:
    """A finding as printed."""
    return f"{place}  {path}\n  {message}" + (f"\nhint: {hint}" if hint else "")


@pytest.mark.parametrize("of", LOAD_KINDS)
def test_item_of_a_load(broken: Broken, of: str) -> None:
    what, item, hint = ITEMS[of]
    plant, _, findings = broken(BRACKWATER, f"again unit_loads.csv | c2_splitter,cut,ethane | of = {of} | item = {item}")
    place = plant.line("unit_loads.csv|last|item")
    assert [str(finding) for finding in findings] == [said(place, "unit_loads.c2_splitter", f"unknown {what} `{item}`", hint)]


@pytest.mark.parametrize("of", USE_KINDS)
def test_item_of_a_use(broken: Broken, of: str) -> None:
    what, item, hint = ITEMS[of]
    plant, _, findings = broken(BRACKWATER, f"again utility_uses.csv | power,uses | of = {of} | item = {item}")
    place = plant.line("utility_uses.csv|last|item")
    assert [str(finding) for finding in findings] == [said(place, "utility_uses.power", f"unknown {what} `{item}`", hint)]


def test_a_blank_item(broken: Broken) -> None:
    plant, _, findings = broken(BRACKWATER, "cell unit_loads.csv | c2_splitter,cut,ethane | item =")
    expected = said(
        plant.line("unit_loads.csv|c2_splitter,cut,|item"), "unit_loads.c2_splitter", "the cut is blank", f"known: {CUT_NAMES}"
    )
    assert [str(finding) for finding in findings] == [expected]


CHARGED = "feed, `group.feed`, group or `all`"
BOUGHT = "bought feed or side stream"


@pytest.mark.parametrize(
    ("kind", "name", "message", "hint"),
    [
        ("bought", "propan", f"unknown {BOUGHT} `propan`", "did you mean `propane`?"),
        ("bought", "propan.spot", f"unknown {BOUGHT} `propan.spot`", "did you mean `propane`?"),
        ("bought", "recycle_ethane", "`recycle_ethane` is a recycle feed, it is never bought", "take `charged:` for it"),
        (
            "charged",
            "gas_furnaces.gas_oil",
            f"unknown {CHARGED} `gas_furnaces.gas_oil`",
            "did you mean `liquid_furnaces.gas_oil`?",
        ),
        ("component", "propan", "unknown component `propan`", "did you mean `propane`?"),
        ("cut", "propan", "unknown cut `propan`", "did you mean `propane`?"),
        ("sold", "propan_sale", "unknown outlet `propan_sale`", "did you mean `propane_sale`?"),
        ("unit_load", "c2_spliter", "unknown recovery unit `c2_spliter`", "did you mean `c2_splitter`?"),
        ("imported", "carbon", "unknown import `carbon`", "known: natural_gas, grid_power"),
        ("exported", "carbon", "unknown export `carbon`", "known: surplus_steam"),
        ("emitted", "natural_gas", "unknown emission `natural_gas`", "known: carbon"),
        ("converted", "boyler", "unknown conversion `boyler`", "did you mean `boiler`?"),
    ],
)
@pytest.mark.parametrize("side", ["limits.test.sum", "ratio_limits.quench_oil_viscosity.to"])
def test_name_in_a_term(broken: Broken, kind: str, name: str, message: str, hint: str, side: str) -> None:
    limit = 'put limits.test = {"sum": [{"cut": "ethane"}], "max": "unlimited", "source": "test"}'
    plant, _, findings = broken(BRACKWATER, limit, f'put {side}.2 = {{"{kind}": "{name}"}}')
    path = f"{side}.2.{kind}"
    assert [str(finding) for finding in findings] == [said(plant.line(path), path, message, hint)]


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
    _, _, findings = broken(BRACKWATER, f"put limits.test = {json.dumps(limit)}")
    assert findings == []


@pytest.mark.parametrize(("fired", "errors"), [("4.52", 1), ("4.55", 0)])
def test_reaction_heat_of_ethane_to_ethylene_and_hydrogen(broken: Broken, fired: str, errors: int) -> None:
    """C2H6 -> C2H4 + H2 takes up 136.34 kJ/mol at 298 K (formation enthalpies), 136.34 / 30.070 = 4.534 GJ/t.

    By heating values: 0.93296 x 47.17 + 0.06704 x 119.96 - 47.52 = 4.530 GJ/t.
    """
    begins = "recycle_ethane,high"
    names = [name.split(" [")[0] for name in _table(MODELS / MARRAM_POINT / "thermal_yields.csv")[0][2:-1]]
    yields = dict.fromkeys(names, 0.0) | {"ethylene": 100 * 28.054 / 30.07, "hydrogen": 100 * 2.016 / 30.07}
    changes = [f"cell thermal_yields.csv | {begins} | {name} = {value}" for name, value in yields.items()]
    _, _, findings = broken(MARRAM_POINT, *changes, f"cell modes.csv | thermal_furnaces,{begins} | fired_heat = {fired}")
    paths = [finding.path for finding in findings if finding.level == "error"]
    assert paths == ["modes.thermal_furnaces.recycle_ethane.high"] * errors


def test_a_row_at_the_edge_of_closing_is_taken(broken: Broken) -> None:
    """99.95 % closes, and float sums do not make it a finding."""
    _, _, findings = broken(TEXTBOOK, "cell yields.csv | ethane | ethylene = 0.4995")
    assert findings == []


def test_an_ultimate_table_may_crack_a_recycle_of_others(broken: Broken) -> None:
    """Ethane made from other feeds may be cracked to extinction: only a fresh feed is counted twice."""
    group = {
        "furnaces": "unlimited",
        "kind": "thermal",
        "yields": "extinction",
        "fired_with": "fuel",
        "unplanned_loss": "0 %",
        "source": "test",
    }
    rows = _table(MODELS / TEXTBOOK / "yields.csv")
    _, _, findings = broken(TEXTBOOK)
    _write("extinction.csv", [rows[0], rows[_row(rows, "recycle_ethane")]])
    _, _, findings = broken(
        TEXTBOOK,
        'put yields.extinction = {"table": "extinction.csv", "basis": "ultimate"}',
        f"put furnace_groups.second = {json.dumps(group)}",
        "put feeds.recycle_ethane.mainly = ethane",
        "no_row yields.csv | recycle_ethane",
        "cell modes.csv | cracker,recycle_ethane | group = second",
    )
    assert findings == []


def test_a_limited_flare_and_one_with_its_co2_are_taken(broken: Broken) -> None:
    _, _, findings = broken(
        BRACKWATER,
        'put outlets.c5_flared = {"from": "c5_cut", "to": "flare", "max": "2 t/h", "source": "test"}',
        'put outlets.ethane_flared = {"from": "ethane", "to": "flare", "max": "unlimited", "source": "test"}',
        "again utility_uses.csv | carbon_dioxide,makes,outlet,ethane_burnt | item = ethane_flared",
    )
    assert findings == []


def test_a_price_window_reads_as_two_prices() -> None:
    low, high = price_window("-2 to 1e3 USc/gal")
    assert (low.number, high.number, high.unit.text) == (-2.0, 1000.0, "USc/gal")
    with pytest.raises(UnitError, match="is not a number with a unit"):
        price_window("low to 3 USD/t")


def test_yields_in_mol_percent_are_turned_into_weight(broken: Broken) -> None:
    """Two moles of methane (16.043) to one of ethane (30.070): 2 x 16.043 / 62.156 = 51.62 wt% methane.

    A row in which 1 mol% is missing still misses it by weight: nothing is closed silently.
    """
    others = ("propane", "propylene", "butadiene", "gasoline", "fuel_oil", "ethylene")
    changes = [f"cell yields.csv | {feed} | {name} = 0" for feed in _feeds() for name in others]
    changes.append("units yields.csv | fraction = mol%")
    for methane, ethane, said_of_sums in (("66", "33", {"the yields sum to 99.00 %"}), ("66.666667", "33.333333", set())):
        parts = [f"cell yields.csv | {feed} | methane = {methane}" for feed in _feeds()]
        parts += [f"cell yields.csv | {feed} | ethane = {ethane}" for feed in _feeds()]
        _, plant, findings = broken(TEXTBOOK, *changes, *parts)
        assert {finding.message.split(",")[0] for finding in findings} == said_of_sums
    assert plant is not None
    row = plant.yields["thermal", "ethane", "design"]
    assert row.shares["methane"] == pytest.approx(2 * 16.043 / (2 * 16.043 + 30.070), abs=1e-6)
    assert row.written["methane"] == "66.666667 mol%"


def _feeds() -> list[str]:
    return [row[0] for row in _table(MODELS / TEXTBOOK / "yields.csv")[1:]]


def test_all_findings_come_at_once(broken: Broken) -> None:
    """A wrong name, a wrong unit, a wrong sum and a cut without a way out are said together."""
    _, _, findings = broken(
        BRACKWATER,
        "put main_product = ethylen",
        "put loss.share = 2 t/h",
        "delete outlets.c5_sale",
        "cell recovery.csv | methane | tail_gas = 0.9",
    )
    assert [finding.path for finding in findings] == ["main_product", "loss.share", "recovery.methane", "cuts.c5_cut"]
