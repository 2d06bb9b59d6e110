"""Reading files: YAML, tables, fields, prices, months; every fault with its place, all of them at once."""

from __future__ import annotations

import functools
import shutil
import sys
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from olefinlp.inputs.fields import Monthly
from olefinlp.inputs.findings import Finding, Findings, InputError, Place
from olefinlp.inputs.periods import period
from olefinlp.inputs.plant import read_plant
from olefinlp.inputs.scenario import Scenario, read_scenario
from olefinlp.inputs.tables import read_table
from olefinlp.inputs.units import UnitError, convert, dims, parse_quantity
from olefinlp.inputs.yaml_files import read_yaml

ROOT = Path(__file__).parents[1]
MARCH, MONTHS, MARRAM, TEXTBOOK = "brackwater_2031_03", "brackwater_2031_03_to_08", "marram_point_2031_03", "thermal_cracker"
TABLE = "scenarios/prices/brackwater.csv"
Edit = tuple[str, str, str]


@pytest.fixture(autouse=True)
def in_the_project(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(ROOT)


@functools.cache
def shipped(name: str) -> Scenario:
    return read_scenario(f"scenarios/{name}.yaml")


def found(name: str, changes: dict[str, Any]) -> list[str]:
    """All findings of a changed scenario, without their lines."""
    try:
        findings = shipped(name).with_(changes).warnings
    except InputError as error:
        findings = error.findings
    return [str(f).split("  ", 1)[1] for f in findings]


def line(file: str, text: str) -> str:
    """Place of the first line of a shipped file that holds a text."""
    lines = (ROOT / file).read_text(encoding="utf-8").splitlines()
    return f"{file}:{next(i for i, row in enumerate(lines, 1) if text in row)}"


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


# ---------------------------------------------------------------------------------- shipped files


@pytest.mark.parametrize("folder", sorted(p.parent.name for p in (ROOT / "models").glob("*/plant.yaml")))
def test_shipped_plants_read_without_warnings(folder):
    assert read_plant(f"models/{folder}").warnings == ()


@pytest.mark.parametrize("file", sorted(p.name for p in (ROOT / "scenarios").glob("*.yaml")))
def test_shipped_scenarios_read_without_warnings(file):
    scenario = read_scenario(f"scenarios/{file}")
    assert scenario.warnings == ()
    assert scenario.case.scenario is scenario
    assert scenario.files[0] == f"scenarios/{file}"


@pytest.mark.parametrize("case", shipped(MARCH).price_cases() if (ROOT / TABLE).exists() else ())
def test_every_price_case_reads_without_warnings(case):
    assert shipped(MARCH).with_(price_case=case).warnings == ()


# ---------------------------------------------------------------------------------- yaml


@pytest.fixture
def yaml(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Callable[[str | bytes], tuple[Any, list[str]]]:
    """Data and findings of a text read as a YAML file."""

    def read(text: str | bytes) -> tuple[Any, list[str]]:
        monkeypatch.chdir(tmp_path)
        (tmp_path / "a.yaml").write_bytes(text if isinstance(text, bytes) else text.encode())
        findings = Findings()
        document = read_yaml("a.yaml", findings)
        return (document.data if document else None), [str(f) for f in findings]

    return read


HINT = "\nhint: indent with spaces, write `name: value`, quote text that holds `: ` or `#`"
TAB = "found character '\\t' that cannot start any token"


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("a: 1\nb: 2\na: 3\n", "a.yaml:3  a\n  `a` is written twice, first in line 1"),
        ("a: {b: 1, b: 2}\n", "a.yaml:1  a.b\n  `b` is written twice, first in line 1"),
        ("a:\n\tb: 1\n", f"a.yaml:2\n  is not valid YAML: {TAB}{HINT}"),
        ("a: [1, 2\n", f"a.yaml:2\n  is not valid YAML: expected ',' or ']', but got '<stream end>'{HINT}"),
        ("a: *x\n", f"a.yaml:1\n  is not valid YAML: found undefined alias 'x'{HINT}"),
        ("a: 1\n---\nb: 2\n", f"a.yaml:2\n  is not valid YAML: but found another document{HINT}"),
        ("a: \0\n", "a.yaml\n  is not valid YAML: unacceptable character #x0000: special characters are not allowed"),
        ("", "a.yaml\n  is empty"),
        ("# a remark only\n", "a.yaml\n  is empty"),
        (b"a: \xff\n", "a.yaml\n  is not UTF-8 text (byte 3)\nhint: save it as UTF-8"),
        ("- a\n", "a.yaml:1\n  must hold `name: value` lines"),
        ("text\n", "a.yaml:1\n  must hold `name: value` lines"),
        ("? [a]\n: 1\n", "a.yaml:1\n  a name must be plain text"),
        ("a: !!python/name:os.system x\n", "a.yaml:1  a\n  the tag `tag:yaml.org,2002:python/name:os.system` is not allowed"),
        ("a: &a [*a]\n", "a.yaml:1  a" + 40 * ".1" + "\n  nested more than 40 deep"),
        ("a: " + 60 * "[" + 60 * "]", "a.yaml:1  a" + 40 * ".1" + "\n  nested more than 40 deep"),
        ("a: " + 3000 * "{b: ", "a.yaml\n  is nested more than 40 deep"),
    ],
)
def test_yaml_that_cannot_be_read(yaml, text, message):
    assert yaml(text) == (None, [message])


def test_anchors_that_expand_enormously_stop_early(yaml):
    rows = ["a: &a [x, x, x, x, x, x, x, x, x, x]"]
    rows += [f"{name}: &{name} [{', '.join(10 * ['*' + before])}]" for before, name in zip("abcdefgh", "bcdefghi", strict=True)]
    start = time.perf_counter()
    data, findings = yaml("\n".join(rows))
    assert data is None
    assert len(findings) == 1
    assert findings[0].endswith("  more than 200000 values")
    assert time.perf_counter() - start < 10


def test_a_file_too_large_is_not_read(yaml):
    data, findings = yaml("a: " + 9 * 1024 * 1024 * "x")
    assert (data, findings) == (None, ["a.yaml\n  is larger than 8 MB\nhint: is it the right file?"])


def test_a_missing_file_names_the_nearest(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    (tmp_path / "march.yaml").write_text("a: 1")
    findings = Findings()
    assert read_yaml("mrch.yaml", findings) is None
    assert read_yaml(tmp_path, findings) is None
    assert read_yaml("nowhere/march.yaml", findings) is None
    assert [f.message for f in findings] == ["no such file", "is a folder, a file is needed here", "no such file"]
    assert [f.hint for f in findings] == ["did you mean `march.yaml`?", "", "the folder is not there either"]


def test_plain_values_of_yaml(yaml):
    data, findings = yaml(
        "no: no\nthousand: 1e3\nyes: yes\ntrue: true\nmonth: 2031-03\nday: 2031-03-04\nmarks: 1_000\nhex: 0x1F\n"
        "empty: ~\nhalf: .5\nclock: 12:30\nendless: .inf\nshared: &s [1, 2]\nagain: *s\n"
    )
    assert findings == []
    assert data == {
        "no": "no", "thousand": 1000.0, "yes": "yes", "true": True, "month": "2031-03", "day": "2031-03-04", "marks": "1_000",
        "hex": "0x1F", "empty": None, "half": 0.5, "clock": "12:30", "endless": ".inf", "shared": [1, 2], "again": [1, 2],
    }  # fmt: skip


def test_no_stays_text_in_a_file_that_calls_itself_older(yaml):
    assert yaml("%YAML 1.1\n---\na: no\nb: on\nc: true\n") == ({"a": "no", "b": "on", "c": True}, [])


def test_byte_order_mark_and_line_ends_of_other_systems(yaml):
    assert yaml(b"\xef\xbb\xbfa: 1\r\nb: caf\xc3\xa9\r\n") == ({"a": 1, "b": "café"}, [])


def test_every_value_knows_its_line(tmp_path):
    (tmp_path / "a.yaml").write_text("a:\n  b: 1\n  c:\n    - 2\n    - {d: 3}\n")
    document = read_yaml(tmp_path / "a.yaml", Findings())
    assert document is not None
    assert document.lines[("a", "c", 1, "d")] == 5
    assert document.place(("a", "c", 0)).line == 4
    assert document.place(("a", "x", "y")).line == 1


# ---------------------------------------------------------------------------------- tables


@pytest.fixture
def table(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Callable[..., tuple[Any, list[str]]]:
    """Numbers in the column `charge`, and findings, of a text read as a table."""

    def read(text: str | bytes, **options: Any) -> tuple[Any, list[str]]:
        monkeypatch.chdir(tmp_path)
        (tmp_path / "t.csv").write_bytes(text if isinstance(text, bytes) else text.encode())
        findings = Findings()
        found = read_table("t.csv", findings, **{"required": ("feed", "charge"), "optional": ("note",), **options})
        return ([row.number("charge", findings) for row in found] if found else None), [str(f) for f in findings]

    return read


NUMBER_HINT = "hint: a point for decimals, no thousands mark, no unit in the cell"


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("feed;charge\nethane;1\n", "t.csv:1\n  columns must be separated by commas"),
        ("feed\tcharge\nethane\t1\n", "t.csv:1\n  columns must be separated by commas"),
        ("feed,charg\nethane,1\n", "t.csv:1\n  unknown column `charg`\nhint: did you mean `charge`?"),
        ("feed,charge,nte\nethane,1,x\n", "t.csv:1\n  unknown column `nte`\nhint: did you mean `note`?"),
        ("feed,note\nethane,x\n", "t.csv:1\n  the column `charge` is missing\nhint: known: feed, note"),
        ("feed,charge,charge\nethane,1,2\n", "t.csv:1\n  the column `charge` is there twice"),
        ("feed,charge [tt/h]\nethane,1\n", "t.csv:1\n  column `charge`: `tt` is not a unit of the list\nhint: did you mean `t`?"),
        (",feed,charge\n1,ethane,1\n", "t.csv:1\n  `` is not a column name\nhint: write `name` or `name [unit]`"),
        ("feed,charge\nethane,\"1\n", "t.csv\n  is not a comma-separated table: unexpected end of data"),
        ("", "t.csv\n  is empty"),
    ],
)  # fmt: skip
def test_tables_whose_header_does_not_serve(table, text, message):
    data, findings = table(text)
    assert data is None
    assert message in findings


def test_a_column_of_numbers_carries_its_unit(table):
    assert table("feed,charge\nethane,1\n", unit_columns=("charge",)) == (
        None,
        ["t.csv:1\n  the column `charge` does not carry its unit\nhint: write `charge [unit]`"],
    )


def test_rows_with_another_number_of_cells(table):
    hint = 'hint: put text that holds a comma into double quotes: "…"'
    assert table("feed,charge\nethane,1,2\npropane\nbutane,3\n") == (
        [3.0],
        [f"t.csv:2\n  has 3 cells, the header has 2\n{hint}", f"t.csv:3\n  has 1 cells, the header has 2\n{hint}"],
    )


def test_a_table_without_rows(table):
    assert table("feed,charge\n\n,\n") == ([], ["t.csv:1\n  has no rows"])


@pytest.mark.parametrize("cell", ["1 000", '"1,000"', "1_000", "nan", "inf", "1e999", "5 t", "1.2.3", "one", "0x1F", "١"])
def test_cells_that_are_no_numbers(table, cell):
    text = cell.strip('"')
    assert table(f"feed,charge\nethane,{cell}\n") == ([None], [f"t.csv:2 [charge]\n  `{text}` is not a number\n{NUMBER_HINT}"])


def test_cells_that_are_numbers_or_blank(table):
    text = b'\xef\xbb\xbffeed, charge [t/h] ,note\r\nethane, 1e3 ,"a, b"\r\n\r\npropane,,\r\nbutane,-.5,x\r\n'
    assert table(text) == ([1000.0, None, -0.5], [])


def test_rows_know_their_lines(tmp_path):
    (tmp_path / "t.csv").write_text('feed,charge [t/h]\nethane,1\n\n"pro\npane",2\n')
    found = read_table(tmp_path / "t.csv", Findings(), required=("feed", "charge"))
    assert found is not None
    assert [row.line for row in found] == [2, 5]
    quantity = found.rows[0].quantity("charge", Findings())
    assert str(quantity) == "1 t/h"
    assert str(found.rows[0].place("charge")).endswith("t.csv:2 [charge]")


def test_rows_of_a_plant_that_stand_twice(edited):
    file = "models/thermal_cracker/recovery_units.csv"
    row = (ROOT / file).read_text(encoding="utf-8").splitlines()[1]
    name = row.split(",")[0]
    twice = (file, f"{row}\n", f"{row}\n{row}\n")
    assert edited(TEXTBOOK, [twice]) == [f"{file}:3\n  `{name}` is written twice, first in line 2"]


# ---------------------------------------------------------------------------------- fields


SOURCE = "min, max, price, basis, take_or_pay, shortfall_pays, tiers, quality, note"
TERMS = "bought, charged, component, cut, sold, unit_load, imported, exported, emitted, converted"


@pytest.mark.parametrize(
    ("path", "value", "message"),
    [
        ("feeds.ethane.contract.maxx", "3 kt", f"\n  unknown name `maxx`; here it takes: {SOURCE}\nhint: did you mean `max`?"),
        ("feeds.ethane.contract.max", 30, "\n  `30` has no unit\nhint: write the unit beside the number, for example `30 kt`"),
        ("feeds.ethane.contract.max", "30 ktt", "\n  `ktt` is not a unit of the list\nhint: did you mean `kt`?"),
        ("feeds.ethane.contract.max", "30 MT", "\n  `MT` is not a unit of the list\nhint: write `t` (tonne) or `kt`"),
        ("feeds.ethane.contract.max", True, "\n  a number with its unit is needed\nhint: write for example `30 kt`"),
        ("feeds.ethane.contract.max", None, "\n  `max` is missing\nhint: write the largest purchase, or `max: unlimited`"),
        ("feeds.ethane.contract.min", "1,5 kt", "\n  `1,5 kt` is not a number with a unit\n"
         "hint: write for example `30 kt` (a point for decimals, no thousands mark)"),
        ("feeds.ethane.contract.take_or_pay", None, "\n  `take_or_pay:` and `shortfall_pays:` belong together"),
        ("feeds.ethane", None, "\n  `name: value` lines are needed here"),
        ("feeds.eth-ane", {}, "\n  `eth-ane` is not a name\nhint: letters, digits and _ only, a letter first"),
        ("outlets.c5_sale", {"min": "3 kt"}, "\n  `max` is missing\n"
         "hint: write the largest sale, or `max: unlimited` (`max: 0 kt` closes it)"),
        ("outlets.c5_sale", {"max": "3 kt", "price": "1 USD/t", "deduction": "1 USD/t"},
         "\n  an outlet has a price or a deduction, not both"),
        ("variable_costs.chemicals.of", "charges",
         "\n  `charges` is not one of: charge, decoke, outlet, cut, unit_load, conversion\nhint: did you mean `charge`?"),
        ("variable_costs.chemicals.item", [], "\n  a name, or a list of names, is needed"),
        ("months", [], "\n  is empty"),
        ("months", "2031-03", "\n  a list is needed here, one `- …` a line"),
        ("title", "", "\n  is empty"),
        ("title", 3, "\n  a text is needed here"),
        ("currency", "usd", "\n  `usd` is not an ISO currency code\nhint: three capital letters, for example USD"),
        ("currency", "USX", "\n  `USX` is not an ISO currency code"),
        ("unit_factors.1.factor", "x", "\n  `x` is not a number\nhint: write a number without a unit"),
        ("unit_factors.1.factor", -1, "\n  `-1` must be at least 0"),
        ("unit_factors.1.factor", 7, "\n  `7` must be at most 5"),
        ("unit_factors", {"month": "2031-03"}, "\n  a list is needed here, one `- …` a line"),
        ("limits.sum", {"sum": [{"bought": "ethane"}]}, "\n  needs `min:` or `max:`"),
        ("feeds.ethane.contract.min", "-5 kt", "\n  `-5 kt` is below zero"),
        ("feeds.ethane.contract.min", "5 GJ LHV", "\n  `5 GJ LHV` is energy (GJ, MWh …), but mass (t, lb …) is needed here\n"
         "hint: see the list of units in models/README.md"),
        ("fixed_costs.whole_plant", "9.5 GBP", "\n  `GBP` is not the scenario's currency (USD)\n"
         "hint: write `exchange_rates: {GBP: ... USD}`"),
    ],
)  # fmt: skip
def test_a_field_that_is_wrong(path, value, message):
    where = {"feeds.ethane.contract.take_or_pay": "feeds.ethane.contract", "limits.sum": "limits.sum"}.get(path, path)
    if "`max` is missing" in message:
        where = path.removesuffix(".max")
    assert found(MARCH, {path: value}) == [where + message]


def test_a_missing_field_and_a_misspelt_one_beside_it():
    changes = {"utilities.carbon": {"maximum": "unlimited"}}
    assert found(MARCH, changes) == [
        "utilities.carbon.max\n  `max` is missing",
        "utilities.carbon.maximum\n  unknown name `maximum`; here it takes: min, max, price, basis, note\n"
        "hint: did you mean `max`?",
    ]


def test_a_term_counts_one_thing():
    limit = {"sum": [{"bought": "ethane", "sold": "c5_sale"}], "max": "3 kt"}
    assert found(MARCH, {"limits.mixed": limit}) == [f"limits.mixed.sum.1\n  a term takes exactly one of: {TERMS}"]


def test_steps_replace_price_and_maximum():
    assert found(MARRAM, {"feeds.ethane.pipeline.max": "3 kt"}) == [
        "feeds.ethane.pipeline\n  tiers have their own prices and ends\nhint: take `price:` and `max:` away"
    ]
    assert found(MARRAM, {"feeds.ethane.pipeline.tiers.2.up_to": "8 kt"}) == [
        "feeds.ethane.pipeline.tiers.2.up_to\n  each step must end above the one before\nhint: `up_to` counts from zero"
    ]
    assert found(MARRAM, {"feeds.ethane.pipeline.tiers.1.up_to": "unlimited"}) == [
        "feeds.ethane.pipeline.tiers.1.up_to\n  only the last step may be unlimited"
    ]


@pytest.mark.parametrize("rule", ["at leat opening", {"at_leas": "3 kt"}, 3, None, {"at_least": "3 kt", "value": "3 USD/t"}])
def test_a_tank_says_how_it_ends(rule):
    assert found(MONTHS, {"stocks.propane.end": rule}) == [
        "stocks.propane.end\n  is no end rule\nhint: write `at least opening`, `{at_least: 10 kt}` or `{value: 500 USD/t}`"
    ]


def test_an_end_rule_in_a_wrong_unit():
    hint = "\nhint: did you mean `kt`?"
    assert found(MONTHS, {"stocks.propane.end": {"at_least": "3 ktt"}}) == [
        f"stocks.propane.end\n  `ktt` is not a unit of the list{hint}"
    ]


def test_a_minimum_above_the_maximum():
    label = "ethane contract bought: the minimum 35 kt is above the maximum 30 kt"
    assert found(MONTHS, {"feeds.ethane.contract.min": "35 kt"}) == [f"feeds.ethane.contract\n  {label}"]


# ---------------------------------------------------------------------------------- months


def test_hours_come_from_the_calendar():
    """February of a leap year has 29 days; 1900 was none, 2000 was one."""
    hours = {name: period(name, None).hours for name in ("2031-02", "2032-02", "1900-02", "2000-02", "2031-03", "2031-04")}
    assert hours == {"2031-02": 672, "2032-02": 696, "1900-02": 672, "2000-02": 696, "2031-03": 744, "2031-04": 720}
    assert period("day", 24) == period("day", 24.0)
    assert not period("2031-03", 700).calendar_month
    with pytest.raises(ValueError, match="march is no calendar month"):
        period("march", None)


def test_a_rate_is_multiplied_by_the_hours_of_its_month():
    changes = {"months": ["2031-02", "2031-03"], "unit_factors": [], "feeds.ethane.contract.max": "40 t/h"}
    limits = shipped(MARCH).with_(changes).case.limits
    assert limits["purchase", "ethane.contract", "2031-02"].high == pytest.approx(40 * 672 / 1000)
    assert limits["purchase", "ethane.contract", "2031-03"].high == pytest.approx(40 * 744 / 1000)


MONTH_HINT = "hint: write `2031-03`, or `{name: ..., hours: ...}` for another period"


@pytest.mark.parametrize(
    ("months", "message"),
    [
        (["march"], f"months.1\n  `march` is not a month\n{MONTH_HINT}"),
        (["2031-13"], f"months.1\n  `2031-13` is not a month\n{MONTH_HINT}"),
        (["2031-03", "2031-03"], "months\n  `2031-03` is there twice"),
        (["2031-04", "2031-03"], "months\n  the months are not in the order of time"),
        ([{"name": "day", "hours": 0}], "months.1.hours\n  `0` must be above 0"),
    ],
)
def test_months_that_are_wrong(months, message):
    assert found(MARCH, {"months": months, "unit_factors": []}) == [message]


def test_a_rate_per_month_needs_a_calendar_month():
    changes = {"months": [{"name": "fortnight", "hours": 336}], "unit_factors": [], "fixed_costs": {}}
    assert found(MARCH, {**changes, "feeds.ethane.contract.max": "30 kt/month"})[0] == (
        "feeds.ethane.contract.max\n  `/month` is for periods that are a calendar month\nhint: write the amount per h or d"
    )


def test_values_by_month():
    written = shipped(MONTHS).file.outlets["crude_c4_contract"].max
    assert isinstance(written, Monthly)
    assert [str(written.at(month)) for month in ("2031-07", "2031-08")] == ["17.5 kt", "11 kt"]
    assert written.text == {"2031-08": "11 kt", "other_months": "17.5 kt"}
    high = [limit.high for key, limit in shipped(MONTHS).case.limits.items() if key[:2] == ("outlet", "crude_c4_contract")]
    assert high == [17.5, 17.5, 17.5, 17.5, 17.5, 11.0]


@pytest.mark.parametrize(
    ("path", "word"), [("feeds.ethane.contract.max", "value"), ("outlets.crude_c4_contract.deduction", "deduction")]
)
def test_a_value_by_month_is_written_for_every_month(path, word):
    value = {"2031-03": "30 kt" if word == "value" else "30 USD/t"}
    hint = "\nhint: add it, or `other_months:`"
    assert found(MONTHS, {path: value}) == [f"{path}\n  has no {word} for 2031-0{month}{hint}" for month in (4, 5, 6, 7, 8)]


@pytest.mark.parametrize(
    ("path", "unit"), [("feeds.ethane.contract.max", "kt"), ("outlets.crude_c4_contract.deduction", "USD/t")]
)
def test_a_value_for_something_that_is_no_month(path, unit):
    slip = {"2031-3": f"30 {unit}", "other_months": f"20 {unit}"}
    assert found(MONTHS, {path: slip}) == [f"{path}\n  `2031-3` is not a month\nhint: did you mean `2031-03`?"]
    later = {"2032-03": f"30 {unit}", "other_months": f"20 {unit}"}
    assert found(MONTHS, {path: later}) == [f"{path}\n  warning: has no effect: 2032-03 is not in this scenario"]


# ---------------------------------------------------------------------------------- prices


def price(scenario: Scenario, item: str, month: str = "2031-03") -> float:
    return scenario.case.prices[item, month].value


def test_prices_of_the_table_on_one_basis():
    """41 USc/gal at 356 kg/m3; 57 USD/bbl at 665 kg/m3 (42 gal); 5 USD/MMBtu HHV of methane, 0.9015 LHV/HHV."""
    march, gallon = shipped(MARCH), 0.003785411784
    assert price(march, "feeds.ethane.contract") == pytest.approx(0.41 / gallon / 0.356, rel=1e-12)
    assert price(march, "feeds.light_naphtha.contract") == pytest.approx(57 / (42 * gallon) / 0.665, rel=1e-12)
    assert price(march, "utilities.natural_gas") == pytest.approx(5 / 1.05505585262 / 0.9015, rel=1e-9)
    assert price(march, "outlets.fuel_gas_export") == pytest.approx(0.8 * 5 / 1.05505585262 / 0.9015, rel=1e-9)
    assert price(march, "outlets.chemical_grade_propylene") == pytest.approx(0.37 / 0.00045359237, rel=1e-12)
    found = march.case.prices["outlets.chemical_grade_propylene", "2031-03"]
    assert (found.of, found.times, found.unit_used) == ("outlets.polymer_grade_propylene", 1.0, "USD/t")
    assert found.source == "assumed: invented price set 2031-02-05"
    assert str(found.place) == f"{line(TABLE, 'outlets.chemical_grade_propylene')} [Base]"


def test_a_blank_cell_is_as_in_the_first_case():
    high = shipped(MARCH).with_(price_case="High crude")
    assert price(high, "contents.crude_c4.c5") == price(high, "outlets.c5_sale") == 620


def test_a_blank_cell_in_the_first_case_too(edited):
    row = next(r for r in (ROOT / TABLE).read_text(encoding="utf-8").splitlines() if r.startswith("contents.crude_c4.c5"))
    assert edited(MARCH, [(TABLE, row, row.replace(",1,,,,,", ",,,,,,"))]) == [
        f"{line(TABLE, 'contents.crude_c4.c5')} [Base]  contents.crude_c4.c5\n  has no price in this case, nor in the first one"
    ]


def test_a_relative_chain_is_worked_out():
    """540 USD/t × 0.92 = 496.8 EUR/t; × 0.97 = 481.896; × 0.5 + 2 + 1 = 243.948."""
    half = {"of": "feeds.heavy_naphtha.cargo.price", "times": 0.5, "plus": "2 EUR/t", "freight": "1 EUR/t"}
    marram = shipped(MARRAM).with_(
        {
            "indexes.half": {"price": half},
            "outlets.fuel_oil_sale.price": {"of": "indexes.half"},
        }
    )
    assert price(marram, "feeds.heavy_naphtha.cargo") == pytest.approx(481.896)
    assert price(marram, "outlets.fuel_oil_sale") == pytest.approx(243.948)


def test_prices_missing_twice_and_unknown():
    assert found(MARRAM, {"feeds.heavy_naphtha.cargo": {"max": "3 kt"}}) == [
        "feeds.heavy_naphtha.cargo\n  has no price\nhint: write `price:` here"
    ]
    assert found(MARCH, {"outlets.crude_c4_contract": {"max": "3 kt"}}) == [
        "outlets.crude_c4_contract.deduction\n  has no deduction\n"
        "hint: write `deduction:` here, or a row `outlets.crude_c4_contract.deduction` in prices/brackwater.csv"
    ]
    assert found(MARCH, {"outlets.c5_sale.price": "400 USD/t"}) == [
        f"outlets.c5_sale\n  this price also stands in {line(TABLE, 'outlets.c5_sale')}\nhint: keep one of the two"
    ]
    assert found(MARCH, {"price_case": "Bas"}) == [
        f"price_case\n  `Bas` is not a price case of {TABLE}\nhint: did you mean `Base`?"
    ]


def test_relative_prices_that_cannot_be_worked_out():
    assert found(MARRAM, {"indexes.a": {"price": {"of": "indexes.b"}}, "indexes.b": {"price": {"of": "indexes.a"}}}) == [
        "indexes.a\n  the price leans on itself: indexes.a → indexes.b → indexes.a"
    ]
    assert found(MARRAM, {"indexes.a": {"price": {"of": "indexes.naphta"}}}) == [
        "indexes.a\n  leans on the unknown item `indexes.naphta`\nhint: did you mean `indexes.naphtha`?"
    ]
    assert found(MARRAM, {"feeds.heavy_naphtha.cargo.price": {"of": "utilities.natural_gas"}}) == [
        "feeds.heavy_naphtha.cargo\n  is in EUR/t, but `utilities.natural_gas` is in EUR/GJ LHV"
    ]
    assert found(MARRAM, {"feeds.heavy_naphtha.cargo.price": {"times": 2}}) == [
        "feeds.heavy_naphtha.cargo.price\n  a relative price needs `of:`, the item it leans on\n"
        "hint: for example `of: outlets.<outlet>`"
    ]
    assert found(MARRAM, {"feeds.heavy_naphtha.cargo.price": {"of": "indexes.naphtha", "tims": 2}}) == [
        "feeds.heavy_naphtha.cargo.price\n  unknown name `tims`; a relative price takes: of, times, plus, freight"
    ]


@pytest.mark.parametrize(
    ("item", "written", "message"),
    [
        ("utilities.natural_gas", "9.4 EUR/GJ",
         "`EUR/GJ` does not say its heating basis\nhint: write `EUR/GJ LHV` or `EUR/GJ HHV`"),
        ("utilities.grid_power", "88 EUR/MWh LHV", "electric power has no heating basis `LHV`\nhint: take LHV or HHV away"),
        ("outlets.propane_sale", "41 cEUR/gal",
         "a volume needs a density to become a mass\nhint: write `density: ... kg/m3` for this item in the plant"),
        ("utilities.carbon", "68 GBP/t",
         "`GBP` is not the scenario's currency (EUR)\nhint: write `exchange_rates: {GBP: ... EUR}`"),
        ("outlets.propane_sale", "41 EUR",
         "`41 EUR` is money, but money per mass (t, lb …) is needed here\nhint: see the list of units in models/README.md"),
        ("outlets.propane_sale", "41 kt",
         "`41 kt` is mass (t, lb …), but money per mass (t, lb …) is needed here\n"
         "hint: see the list of units in models/README.md"),
    ],
)  # fmt: skip
def test_prices_in_units_that_do_not_serve(item, written, message):
    assert found(MARRAM, {f"{item}.price": written}) == [f"{item}\n  {message}"]


def test_a_higher_heating_value_needs_its_ratio(edited):
    assert edited(TEXTBOOK, [("scenarios/thermal_cracker.yaml", "MMBtu LHV", "MMBtu HHV")]) == [
        f"{line('scenarios/thermal_cracker.yaml', '  natural_gas:')}  utilities.natural_gas\n"
        "  a higher heating value (HHV) needs the ratio to the lower one\n"
        "hint: write `lhv_over_hhv:` for this item in the plant, or give the value as LHV"
    ]


def test_rows_of_the_price_table_that_are_wrong(edited):
    """A row twice, one for nothing, one of another unit, one without its basis, a number that is none."""
    row = 'outlets.c5_sale,USD/t,"C5 cut, netback at the plant"'
    first = next(r for r in (ROOT / TABLE).read_text(encoding="utf-8").splitlines() if r.startswith("outlets.c5_sale"))
    edits = [
        (TABLE, row, row.replace("outlets.c5_sale", "outlets.c5_sail")),
        (TABLE, "feeds.ethane.contract,USc/gal", "feeds.ethane.contract,USc/gall"),
        (TABLE, 'feeds.ethane.spot_pipeline,USc/gal,"spot ethane, gallons at 60 degF"', "feeds.ethane.spot_pipeline,USc/gal,"),
        (TABLE, ",72.0,85.0", ",72..0,85.0"),
        (TABLE, "utilities.carbon,", f"{first}\n{first}\nutilities.carbon,"),
    ]
    place = {name: line(TABLE, name) for name in ("outlets.c5_sale", "feeds.ethane.contract", "feeds.ethane.spot_pipeline")}
    number = int(line(TABLE, "utilities.carbon").split(":")[1])
    power = f"{TABLE}:{int(line(TABLE, 'utilities.grid_power').split(':')[1]) + 2} [Base]"
    found = edited(MARCH, edits)
    assert sorted(found) == sorted(
        [
            f"{place['outlets.c5_sale']} [item]  outlets.c5_sail\n  warning: this price is for nothing in this scenario\n"
            "hint: did you mean `outlets.c5_sale`?",
            f"{TABLE}:{number + 1} [item]  outlets.c5_sale\n  is written twice, first in line {number}",
            f"{place['feeds.ethane.contract']} [unit]  feeds.ethane.contract\n"
            "  `gall` is not a unit of the list\nhint: did you mean `gal`?",
            f"{place['feeds.ethane.spot_pipeline']} [basis]  feeds.ethane.spot_pipeline\n"
            "  warning: does not say its basis\nhint: delivered or not, which gallons …",
            f"{power}\n  `72..0` is not a number\n{NUMBER_HINT}",
        ]
    )


def test_a_row_for_an_outlet_under_the_wrong_name_is_said(edited):
    wrong = [(TABLE, "outlets.raw_pygas.deduction", "outlets.raw_pygas")]
    where = line(TABLE, "outlets.raw_pygas.deduction")
    assert edited(MARCH, wrong) == [
        f"{where} [item]  outlets.raw_pygas\n  warning: this price is for nothing in this scenario\n"
        "hint: did you mean `outlets.raw_pygas.deduction`?",
        f"{line('scenarios/brackwater_2031_03.yaml', '  raw_pygas:')}  outlets.raw_pygas.deduction\n  has no deduction\n"
        "hint: write `deduction:` here, or a row `outlets.raw_pygas.deduction` in prices/brackwater.csv",
    ]


def test_prices_of_one_month_in_the_table(tmp_path):
    for folder in ("models", "scenarios"):
        shutil.copytree(ROOT / folder, tmp_path / folder)
    rows = (ROOT / TABLE).read_text(encoding="utf-8").splitlines()
    head, *body = [row.replace(",assumed", ",,assumed", 1) for row in rows]
    head = head.replace("item,unit,basis,", "item,unit,basis,month,")
    body.append("outlets.c5_sale,USD/t,netback,2031-08,a letter,2031-02-05,,,500,500,500,500,500,500")
    (tmp_path / TABLE).write_text("\n".join([head, *body]), encoding="utf-8")
    scenario = read_scenario(tmp_path / f"scenarios/{MONTHS}.yaml")
    assert [price(scenario, "outlets.c5_sale", month) for month in ("2031-07", "2031-08")] == [480, 500]
    assert price(scenario, "contents.pygas.c5", "2031-08") == 500

    (tmp_path / TABLE).write_text("\n".join([head, *body]).replace("2031-08", "2031-8"), encoding="utf-8")
    with pytest.raises(InputError) as error:
        read_scenario(tmp_path / f"scenarios/{MONTHS}.yaml")
    assert [(f.path, f.message, f.hint) for f in error.value.findings] == [
        ("outlets.c5_sale", "`2031-8` is not a month", "did you mean `2031-08`?")
    ]
    assert error.value.findings[0].place.column == "month"


def test_exchange_rates():
    marram = shipped(MARRAM)
    assert marram.rates == {"USD": 0.92}
    dearer = marram.with_({"exchange_rates.USD": "0.5 EUR"})
    assert price(dearer, "indexes.naphtha") == pytest.approx(270)
    assert found(MARRAM, {"exchange_rates": {"USX": "0.9 EUR", "USD": "-1 EUR", "GBP": "0.9 USD", "CHF": "1.1 EUR/t"}}) == [
        "exchange_rates.USX\n  `USX` is not an ISO currency code",
        "exchange_rates.USD\n  an exchange rate must be above zero",
        "exchange_rates.GBP\n  `USD` is not the scenario's currency (EUR)\nhint: write what one GBP is worth: `GBP: 1.08 EUR`",
        "exchange_rates.CHF\n  `1.1 EUR/t` is money per mass (t, lb …), but money is needed here\n"
        "hint: write what one CHF is worth: `CHF: 1.08 EUR`",
    ]


def test_conversion_needs_what_joins_the_units():
    with pytest.raises(UnitError, match="a rate is not known here"):
        convert(parse_quantity("3 t/h"), dims(mass=1))


# ---------------------------------------------------------------------------------- several faults, and changes


def test_faults_of_several_files_come_at_once(edited):
    scenario, plant = "scenarios/brackwater_2031_03.yaml", "models/brackwater/plant.yaml"
    components = "models/brackwater/components.csv"
    found = edited(
        MARCH,
        [
            (scenario, "contract:      {max: 12 kt", "contract:      {maxx: 12 kt"),
            (plant, "main_product: ethylene ", "main_produkt: ethylene "),
            (components, "component,carbon_atoms", "component;carbon_atoms"),
            (TABLE, "item,unit,basis", "item,unt,basis"),
        ],
    )
    assert [text.split("\n")[0] for text in found] == [
        f"{line(scenario, 'contract:      {max: 12 kt')}  feeds.propane.contract.maxx",
        f"{line(plant, 'name:')}  main_product",
        f"{line(plant, 'main_product:')}  main_produkt",
        f"{components}:1",  # a column that is not known …
        f"{components}:1",  # … and one that is missing
        f"{TABLE}:1",
    ]
    assert "  unknown name `main_produkt`; here it takes: " in found[2]
    assert found[2].endswith("hint: did you mean `main_product`?")
    assert found[5].endswith("the column `unit` is missing\nhint: did you mean `unt`?")


def test_a_misspelt_name_hides_no_other_fault(edited):
    """A misspelt name, yields that do not add up and a price that is missing are found in one run."""
    yields = "models/brackwater/yields.csv"
    found = edited(
        MARCH,
        [
            ("scenarios/brackwater_2031_03.yaml", "contract:      {max: 12 kt", "contract:      {maxx: 12 kt"),
            (yields, "ethane,low,3.76", "ethane,low,4.96"),
            (TABLE, "outlets.c5_sale,", "outlets.c6_sale,"),
        ],
    )
    text = "\n".join(found)
    assert "unknown name `maxx`" in text
    assert "the yields sum to 101.20 %" in text
    assert "outlets.c5_sale\n  has no price" in text
    assert "`max` is missing" not in text


def test_a_change_leaves_the_original_untouched():
    march = shipped(MARCH)
    before = march.document.data["feeds"]["ethane"]["contract"]["max"], dict(march.document.lines)
    changed = march.with_({"feeds.ethane.contract.max": "25 kt"}, price_case="High crude", title="Other")
    assert changed.case.limits["purchase", "ethane.contract", "2031-03"].high == 25
    assert (changed.title, changed.file.price_case) == ("Other", "High crude")
    assert price(changed, "feeds.ethane.contract") > price(march, "feeds.ethane.contract")
    assert changed.plant is march.plant
    assert (march.document.data["feeds"]["ethane"]["contract"]["max"], dict(march.document.lines)) == before
    assert march.case.limits["purchase", "ethane.contract", "2031-03"].high == 30


def test_a_change_keeps_no_hold_of_what_was_given():
    outage = {"month": "2031-03", "group": "gas_furnaces", "hours": "120 h", "reason": "inspection"}
    changed = shipped(MARCH).with_(outages=[outage])
    outage["hours"] = "1 h"
    assert changed.document.data["outages"][0]["hours"] == "120 h"
    assert changed.with_(title="again").case.limits["furnace_hours", "gas_furnaces", "2031-03"].high == pytest.approx(
        (4 * 744 - 120) * 0.975
    )


def test_lists_count_from_one():
    changed = shipped(MARCH).with_({"unit_factors.2.factor": 1.5, "unit_factors.2.reason": "test"})
    assert [factor.factor for factor in changed.file.unit_factors] == [1.02, 1.5]
    for part in ("0", "3", "x", "-1"):
        assert found(MARCH, {f"unit_factors.{part}.factor": 1}) == [
            f"unit_factors.{part}.factor\n  `{part}` is not in this list of 2"
        ]
    assert found(MARCH, {"title.x": 1}) == ["title.x\n  `title` is a value, it has no `x`"]


def test_a_change_that_does_not_serve_raises_with_all_findings():
    with pytest.raises(InputError) as error:
        shipped(MARCH).with_({"feeds.ethane.contract.max": "25", "outlets.c5_sale.maxx": "3 kt", "currency": "usd"})
    assert [f.path for f in error.value.findings] == ["currency", "feeds.ethane.contract.max", "outlets.c5_sale.maxx"]
    assert {f.level for f in error.value.findings} == {"error"}


def test_a_change_of_the_plant_reads_it():
    with pytest.raises(InputError, match="no such file"):
        shipped(MARCH).with_(plant="../models/brackwatr")
    assert shipped(MARCH).with_(plant="../models/brackwater").plant.name == shipped(MARCH).plant.name


def test_findings_are_kept_once_and_in_order():
    findings = Findings()
    findings.warn(Place("a.yaml", 2), "x", "look")
    findings.error(Place("a.yaml", 1), "y", "mend", "so")
    findings.error(Place("a.yaml", 1), "y", "mend", "so")
    assert [f.level for f in findings] == ["warning", "error"]
    with pytest.raises(InputError) as error:
        findings.stop_on_errors()
    assert str(error.value) == "a.yaml:2  x\n  warning: look\na.yaml:1  y\n  mend\nhint: so"
    assert error.value.findings == tuple(Finding(f.level, f.place, f.path, f.message, f.hint) for f in findings)


def test_the_inputs_know_no_solver():
    """Reading a scenario needs neither Pyomo nor HiGHS (checked in a fresh interpreter)."""
    import subprocess

    code = (
        "import sys; from olefinlp.inputs.scenario import read_scenario; read_scenario('scenarios/thermal_cracker.yaml'); "
        "print(sorted(m for m in sys.modules if m in ('pyomo', 'highspy', 'pandas')))"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True, cwd=ROOT)
    assert done.stdout.strip() == "[]"
