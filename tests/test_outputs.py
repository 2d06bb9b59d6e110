"""JSON, csv, DataFrames, the printed summary, and files that are written whole or not at all."""

from __future__ import annotations

import csv
import itertools
import json
import math
import os
import re
import stat
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pandas as pd
import pytest
from conftest import ROOT, SCENARIOS

from olefinlp import make_plan, read_scenario, write_csv, write_json
from olefinlp.answers.plan import Plan
from olefinlp.answers.tables import Table
from olefinlp.outputs import files as files_module
from olefinlp.outputs.files import OutputError, write_text, write_whole
from olefinlp.outputs.records import plan_json, plan_record, table_csv
from olefinlp.outputs.summary import summary

GOLDEN = Path(__file__).resolve().parent / "golden" / "summary_thermal_cracker.txt"
ONE_MONTH = [name for name in SCENARIOS if "_to_" not in name]
PRICE_CASES = ("Base", "High crude", "Low crude", "Cheap ethane", "Strong propylene", "Weak aromatics")
ROUNDING = r"\d(?:\.\d)?e[+-]\d\d"
"""A residual as it is printed: rounding noise, which may differ from machine to machine."""


def strict(text: str) -> Any:
    """JSON as the standard has it: no NaN, no Infinity."""

    def refuse(name: str) -> None:
        raise AssertionError(f"{name} is not JSON")

    return json.loads(text, parse_constant=refuse)


# ---------------------------------------------------------------------------------- JSON


def test_json_of_the_textbook_hour(shipped_plan: Callable[[str], Plan]) -> None:
    """The margin of the book (3,684.20 USD), unrounded, in the currency itself."""
    plan = shipped_plan("thermal_cracker.yaml")
    record = strict(plan_json(plan))
    assert record["status"] == "optimal"
    assert record["currency"] == "USD"
    assert record["margin"] == pytest.approx(3684.20, abs=0.005)
    assert record["margin"] == pytest.approx(plan.margin, rel=1e-9)
    assert record["fixed_cost"] == 0
    assert [month["month"] for month in record["months"]] == ["hour"]
    assert record["months"][0]["margin"] == pytest.approx(plan.margin, rel=1e-9)
    assert record["months"][0]["hours"] == 1
    (ethane,) = [row for row in record["feeds"] if row["feed"] == "ethane"]
    assert ethane["bought"] == pytest.approx(60_000 * 0.00045359237 / 1000, rel=1e-9)
    assert {row["outlet"] for row in record["slate"] if row["quantity"]} == {
        "ethylene_sale",
        "propylene_sale",
        "butadiene_sale",
        "gasoline_sale",
    }
    assert {(row["feed"], row["severity"]) for row in record["furnaces"]} == {("ethane", "design"), ("recycle_ethane", "design")}
    assert [row["limit"] for row in record["limits"] if row["worth"]] == ["ethylene"]


def test_json_is_valid_and_whole(every_plan: Plan) -> None:
    """Every table of every plan is there, with the same numbers, and the months sum to the margin."""
    record = strict(plan_json(every_plan))
    for key in ("feeds", "furnaces", "slate", "recovery", "balances", "money", "prices", "limits", "inputs", "audit"):
        assert isinstance(record[key], list)
    for table in every_plan.tables():
        assert len(record[table.name]) == len(table)
        for read, row in zip(record[table.name], table.rows, strict=True):
            assert list(read) == [column.key for column in table.columns]
            assert read == row
    assert record["margin"] == pytest.approx(sum(month["margin"] for month in record["months"]), rel=1e-6, abs=1e-3)
    assert record["units"]["feeds"]["bought"] == "kt"
    assert [month["month"] for month in record["months"]] == list(every_plan.quantities.case.months)


def test_json_has_no_minus_zero(every_plan: Plan) -> None:
    """Nobody sells −0.0 kt."""
    assert not re.search(r": -0\.0\b(?!\d)", plan_json(every_plan))


def test_json_keeps_letters_as_they_are(shipped_plan: Callable[[str], Plan], tmp_path: Path) -> None:
    """UTF-8, not escapes; one object ending in a line feed."""
    path = write_json(shipped_plan("thermal_cracker.yaml"), tmp_path / "plan.json")
    text = path.read_bytes().decode("utf-8")
    assert "±1 %" in text
    assert text.startswith("{\n") and text.endswith("}\n")
    assert "\r" not in text


def test_no_infinity_gets_into_json(shipped_plan: Callable[[str], Plan]) -> None:
    """An unlimited amount is null."""
    plan = shipped_plan("thermal_cracker.yaml")
    record = plan_record(plan)
    numbers = [v for table in plan.tables() for row in record[table.name] for v in row.values() if isinstance(v, float)]
    assert numbers
    assert all(math.isfinite(number) for number in numbers)
    assert all(row["maximum"] is None for row in record["feeds"])


# ---------------------------------------------------------------------------------- csv and DataFrames


def test_csv_files_equal_the_tables(every_plan: Plan, tmp_path: Path) -> None:
    """One file a table; units in the header; unrounded numbers; an empty cell for none."""
    written = write_csv(every_plan, tmp_path / "tables")
    assert [path.name for path in written] == [f"{table.name}.csv" for table in every_plan.tables()]
    for path, table in zip(written, every_plan.tables(), strict=True):
        with path.open(encoding="utf-8", newline="") as file:
            header, *lines = list(csv.reader(file))
        units = ["fraction" if c.kind == "share" else c.unit for c in table.columns]  # per cent only where people read
        assert header == [f"{c.key} [{unit}]" if unit else c.key for c, unit in zip(table.columns, units, strict=True)]
        assert len(lines) == len(table)
        for line, row in zip(lines, table.rows, strict=True):
            for cell, column in zip(line, table.columns, strict=True):
                assert same(cell, row[column.key]), (table.name, column.key)


def same(cell: str, value: object) -> bool:
    """Whether a cell of text is this value, to the last digit."""
    if value is None:
        return cell == ""
    if isinstance(value, float | int) and not isinstance(value, bool):
        return float(cell) == value
    return cell == str(value)


def test_csv_quotes_what_needs_it() -> None:
    """Commas, quotes and line feeds inside a cell come back as they were."""
    from olefinlp.answers.tables import Column

    table = Table("notes", "Notes", (Column("text", "Text"), Column("amount", "Amount", "kt")), [])
    table.rows.extend([{"text": 'he said "no", twice\nand left', "amount": 0.1 + 0.2}, {"text": "", "amount": None}])
    rows = list(csv.reader(table_csv(table).splitlines(keepends=True)))
    assert rows == [["text", "amount [kt]"], ['he said "no", twice\nand left', "0.30000000000000004"], ["", ""]]


def test_data_frames_equal_the_tables(every_plan: Plan) -> None:
    """Keys as columns, one row a record."""
    for table in every_plan.tables():
        frame = table.to_frame()
        assert isinstance(frame, pd.DataFrame)
        assert list(frame.columns) == [column.key for column in table.columns]
        assert len(frame) == len(table)
        for column in table.columns:
            for read, row in zip(frame[column.key], table.rows, strict=True):
                assert read == row[column.key] or (pd.isna(read) and row[column.key] is None)


def test_an_empty_table_has_its_columns(shipped_plan: Callable[[str], Plan]) -> None:
    """A plant without tanks has a table of tanks without rows."""
    stocks = shipped_plan("thermal_cracker.yaml").stocks
    assert len(stocks) == 0
    assert list(stocks.to_frame().columns) == ["month", "item", "opening", "closing", "minimum", "maximum"]
    assert table_csv(stocks).count("\n") == 1


# ---------------------------------------------------------------------------------- summary


def without_rounding(text: str) -> str:
    """The summary with the residuals of its proof as #."""
    return "\n".join(re.sub(ROUNDING, "#", line) if line.startswith("Proof: ") else line for line in text.splitlines()) + "\n"


def test_summary_of_the_textbook_hour(shipped_plan: Callable[[str], Plan]) -> None:
    """The whole text, kept in a file that no test ever writes."""
    assert without_rounding(summary(shipped_plan("thermal_cracker.yaml"))) == GOLDEN.read_text(encoding="utf-8")


def test_summary_of_the_demo_month(march: Plan) -> None:
    """What a planner looks for first, in order."""
    text = summary(march)
    for first, second in itertools.pairwise(HEADINGS):
        assert text.index(first) < text.index(second)
    for words in (
        "2031-03 · 744 h · price case Base · proven optimum",
        "before fixed cost  26,808.7  kUSD",
        "after fixed cost   17,308.7  kUSD",
        "USc/lb ethylene",
        "ethane, contract                30.0   41.0 USc/gal  304.2",
        "light naphtha, contract         20.0   57.0 USD/bbl  539.1              533.1  at take-or-pay",
        "not bought, USD/t:",
        "gas oil, spot barge",
        "gas furnaces                  63.4  2,902 of 2,902      3.90 of 4",
        "polymer grade propylene",
        "cracked gas compressor",
        "USD/furnace-hour",
        "each worth holds for the next unit only; worths do not add",
        "carbon in cracking closes to",
        "Not for operating limits, alarms, trips or furnace conditions.",
    ):
        assert words in text, words


HEADINGS = ("Brackwater", "Margin", "Feeds bought", "Furnaces", "Products sold", "Limits that bind", "Proof:", "Planning aid")


def plain(text: str, widest: int) -> None:
    """Nothing that a person should not have to read."""
    for line in text.splitlines():
        assert len(line) <= widest, line
        assert line == line.rstrip()
        assert not re.search(r"(?<![\w.,])-0\.?0*(?![\d.,])", line), line
        assert not re.search(r"\b(nan|inf|None|True|False)\b", line), line
        assert "_" not in line or "left out" in line or ":" in line, line
    assert "\n\n\n" not in text
    assert "\t" not in text


@pytest.mark.parametrize("name", ONE_MONTH)
def test_summary_of_one_month_is_plain(shipped_plan: Callable[[str], Plan], name: str) -> None:
    """Fits beside a window, no odd zeros, no programmer's words."""
    plain(summary(shipped_plan(name)), widest=160)


@pytest.mark.parametrize("price_case", PRICE_CASES)
def test_summary_of_every_price_case_is_plain(shipped_scenario: Any, price_case: str) -> None:
    """Other prices, other feeds left out."""
    text = summary(make_plan(shipped_scenario("brackwater_2031_03.yaml").with_(price_case=price_case)))
    assert f"price case {price_case}" in text
    plain(text, widest=160)


def test_summary_of_many_months(shipped_plan: Callable[[str], Plan]) -> None:
    """One column a month, and the total."""
    text = summary(shipped_plan("brackwater_2031_03_to_08.yaml"))
    plain(text, widest=180)
    head = next(line for line in text.splitlines() if line.startswith("Margin"))
    assert head.split() == ["Margin", "2031-03", "2031-04", "2031-05", "2031-06", "2031-07", "2031-08", "total"]
    assert "158,039.9  kUSD" in text
    assert "only the total is optimised" in text


def test_summary_of_a_month_in_which_nothing_is_worth_doing(tmp_path: Path) -> None:
    """No feed is cracked when all of it is too dear: zeros, no division by them, a plan all the same."""
    from plants import planned

    plan = planned(
        tmp_path,
        yields="feed, severity, ethylene, residue\nnaphtha, base, 40, 60",
        modes="group, feed, severity, charge\nfurnaces, naphtha, base, 10",
        prices={"ethylene": 100, "residue": 10},
        scenario="feeds: {naphtha: {spot: {max: 10 kt, price: 500 USD/t}}}",
    )
    text = summary(plan)
    plain(text, widest=160)
    assert "before fixed cost  0.00  USD" in text
    assert "margin per tonne" not in text
    assert "not bought, USD/t: naphtha, spot 500.0" in text
    record = strict(plan_json(plan))
    assert record["margin"] == 0
    assert record["months"][0]["margin_per_t"] is None


def test_summary_shows_warnings_with_their_places(march: Plan) -> None:
    """A price outside its window is said, with file and line."""
    odd = march.scenario.with_({"outlets.crude_c4_contract.deduction": "600 USD/t"})
    text = summary(make_plan(odd))
    assert "1 warning\n" in text
    assert re.search(r"  scenarios/brackwater_2031_03\.yaml:\d+  outlets\.crude_c4_contract", text)
    assert "warning: " in text


# ---------------------------------------------------------------------------------- files whole or not at all


@pytest.fixture(params=["new", "old"])
def target(request: pytest.FixtureRequest, tmp_path: Path) -> Iterator[Path]:
    """A file to write, not there yet or there already; at the end it is as it was and alone."""
    path = tmp_path / "plan.json"
    if request.param == "old":
        path.write_bytes(b"an older plan")
    yield path
    assert [p.name for p in tmp_path.iterdir()] == (["plan.json"] if request.param == "old" else [])
    if request.param == "old":
        assert path.read_bytes() == b"an older plan"


def half(then: BaseException) -> Callable[[Path], None]:
    """A writer that fails when half of it is written."""

    def write(temporary: Path) -> None:
        temporary.write_bytes(b"half of a pl")
        raise then

    return write


def test_a_full_disk(target: Path) -> None:
    """The message names the file and the reason."""
    with pytest.raises(OutputError, match=r"plan\.json cannot be written: No space left on device"):
        write_whole(target, half(OSError(28, "No space left on device")))


def test_an_interrupted_writer(target: Path) -> None:
    """Ctrl-C passes through, and leaves nothing."""
    with pytest.raises(KeyboardInterrupt):
        write_whole(target, half(KeyboardInterrupt()))


def test_a_writer_with_a_fault(target: Path) -> None:
    """A fault of ours is not called a fault of the file."""
    with pytest.raises(ZeroDivisionError):
        write_whole(target, half(ZeroDivisionError()))


@pytest.mark.parametrize("step", ["replace", "fsync", "chmod"])
def test_a_file_that_may_not_be_replaced(target: Path, monkeypatch: pytest.MonkeyPatch, step: str) -> None:
    """Whichever step is refused."""

    def refuse(*_: object, **__: object) -> None:
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(os, step, refuse)
    with pytest.raises(OutputError, match="hint: is it open in another program") as caught:
        write_text(target, "a newer plan")
    assert ("the old file is as it was" in str(caught.value)) == target.exists()


def test_interrupted_while_it_is_moved(target: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The last moment at which anything can go wrong."""

    def interrupt(*_: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(os, "replace", interrupt)
    with pytest.raises(KeyboardInterrupt):
        write_text(target, "a newer plan")


def test_a_csv_folder_whose_third_file_fails(march: Plan, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Files before it are whole, files after it are as they were."""
    old = tmp_path / "recovery.csv"
    old.write_text("older", encoding="utf-8")
    honest, calls = os.replace, []

    def third(source: Path, to: Path) -> None:
        calls.append(to)
        if len(calls) == 3:
            raise PermissionError(13, "Permission denied")
        honest(source, to)

    monkeypatch.setattr(files_module.os, "replace", third)
    with pytest.raises(OutputError):
        write_csv(march, tmp_path)
    assert sorted(p.name for p in tmp_path.iterdir()) == ["feeds.csv", "furnaces.csv", "recovery.csv"]
    assert old.read_text(encoding="utf-8") == "older"
    assert (tmp_path / "feeds.csv").read_text(encoding="utf-8") == table_csv(march.feeds)


def test_a_file_is_replaced_whole_and_keeps_its_permissions(tmp_path: Path) -> None:
    """A new file has the usual permissions, not those of a temporary one."""
    new, old = tmp_path / "new.txt", tmp_path / "old.txt"
    old.write_text("older", encoding="utf-8")
    if os.name == "posix":
        old.chmod(0o640)
    for path in (new, old):
        assert write_text(path, "a plan ±1 %\n") == path
        assert path.read_bytes() == "a plan ±1 %\n".encode()
    assert sorted(p.name for p in tmp_path.iterdir()) == ["new.txt", "old.txt"]
    if os.name == "posix":
        mask = os.umask(0)
        os.umask(mask)
        assert stat.S_IMODE(old.stat().st_mode) == 0o640
        assert stat.S_IMODE(new.stat().st_mode) == 0o666 & ~mask


@pytest.mark.skipif(os.name == "nt", reason="links and devices of posix")
def test_a_link_stays_a_link(tmp_path: Path) -> None:
    """The file it points to gets the new text."""
    (tmp_path / "store").mkdir()
    real, link = tmp_path / "store" / "plan.json", tmp_path / "plan.json"
    real.write_text("older", encoding="utf-8")
    link.symlink_to(real)
    write_text(link, "newer")
    assert link.is_symlink()
    assert real.read_text(encoding="utf-8") == "newer"


@pytest.mark.skipif(os.name == "nt", reason="links and devices of posix")
def test_a_device_does_not_become_a_file(tmp_path: Path) -> None:
    """Someone who may do anything could else lose /dev/null."""
    pipe = tmp_path / "pipe"
    os.mkfifo(pipe)
    with pytest.raises(OutputError, match="is a device, not a file"):
        write_text(pipe, "a plan")
    assert stat.S_ISFIFO(pipe.stat().st_mode)


def test_folders_in_the_way_and_folders_that_are_missing(tmp_path: Path) -> None:
    """Both are said, and nothing is made."""
    with pytest.raises(OutputError, match="is a folder; name a file"):
        write_text(tmp_path, "a plan")
    with pytest.raises(OutputError, match=r"the folder .* is not there"):
        write_text(tmp_path / "nowhere" / "plan.json", "a plan")
    (tmp_path / "file").write_text("", encoding="utf-8")
    with pytest.raises(OutputError, match="cannot be written"):
        write_text(tmp_path / "file" / "plan.json", "a plan")
    assert [p.name for p in tmp_path.iterdir()] == ["file"]


def test_a_long_name(tmp_path: Path) -> None:
    """The temporary file's name is not longer than its target's may be."""
    path = write_text(tmp_path / ("a" * 250 + ".txt"), "a plan")
    assert path.read_text(encoding="utf-8") == "a plan"


def test_outputs_of_the_example_in_the_package(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """As a script does it, from the repository's folder."""
    monkeypatch.chdir(ROOT)
    plan = make_plan(read_scenario("scenarios/thermal_cracker.yaml"))
    assert strict(write_json(plan, str(tmp_path / "plan.json")).read_text(encoding="utf-8"))["margin"] == plan.margin
