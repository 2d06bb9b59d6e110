"""The command `sweep`: what it keeps and prints, what it refuses, and that a stop loses nothing."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import openpyxl
import pandas as pd
import pytest
from conftest import ROOT
from test_cli import HEAVY, PACKAGE, loaded, run

SWEEPS = ROOT / "scenarios" / "sweeps"
MARCH = ROOT / "scenarios" / "brackwater_2031_03.yaml"
NAPHTHA = "feeds.full_range_naphtha.spot_cargo"


@pytest.fixture(autouse=True)
def elsewhere(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Commands are started in an empty folder."""
    monkeypatch.chdir(tmp_path)


def rows(folder: str) -> pd.DataFrame:
    """All rows of a sweep's folder."""
    from olefinlp import read_sweep

    return read_sweep(folder)


def test_a_sweep_file_becomes_a_folder_a_workbook_and_a_summary() -> None:
    found = run("sweep", SWEEPS / "naphtha_price.yaml", "-o", "out", "--workbook", "out.xlsx", "--workers", "1")
    assert found.code == 0, found.err
    table = rows("out")
    assert len(table) == 22
    assert table[NAPHTHA].is_monotonic_increasing
    assert (table.margin.diff().dropna() <= 1e-6).all()
    assert "30,377.5" in found.out
    assert "written: out, out.xlsx" in found.err
    assert openpyxl.load_workbook("out.xlsx").sheetnames


@pytest.mark.slow
@pytest.mark.parametrize("name", sorted(path.name for path in SWEEPS.glob("*.yaml")))
def test_every_shipped_sweep_runs(name: str) -> None:
    found = run("sweep", SWEEPS / name, "-o", "out")
    assert found.code == 0, found.err
    assert (rows("out").status == "optimal").all()


def test_numbers_of_a_scenario_may_be_varied_at_once() -> None:
    found = run("sweep", MARCH, "--vary", f"{NAPHTHA}=500,534", "--vary", "utilities.carbon=0:60:30", "-o", "out")
    assert found.code == 0, found.err
    assert len(rows("out")) == 6
    percent = run("sweep", MARCH, "--vary", f"{NAPHTHA}=-10:10:10%", "-o", "percent")
    assert percent.code == 0, percent.err
    assert list(rows("percent")[NAPHTHA]) == [-10, 0, 10]
    assert rows("percent").margin[1] == pytest.approx(26_808.6667, abs=1e-3)


def test_an_impossible_value_is_a_row_with_its_reason() -> None:
    found = run("sweep", MARCH, "--vary", "outlets.polymer_grade_propylene.min=20,31.9,33", "-o", "out")
    assert found.code == 0, found.err
    table = rows("out")
    assert list(table.status) == ["optimal", "no plan", "no valid case"]
    assert "c3_splitter" in table.reason[1]
    assert "above the maximum" in table.reason[2]


def test_the_same_sweep_goes_on_and_another_is_refused() -> None:
    command = ["sweep", MARCH, "--vary", f"{NAPHTHA}=500:560:1", "-o", "out"]
    assert run(*command).code == 0
    before = {path.name: path.stat().st_mtime_ns for path in Path("out").glob("part*")}
    assert run(*command).code == 0
    assert {path.name: path.stat().st_mtime_ns for path in Path("out").glob("part*")} == before
    other = run("sweep", MARCH, "--vary", f"{NAPHTHA}=500:560:2", "-o", "out")
    assert other.code == 1
    assert "out holds another sweep" in other.err


def test_parquet_holds_the_same_rows() -> None:
    for form in ("csv", "parquet"):
        assert run("sweep", MARCH, "--vary", f"{NAPHTHA}=500,520,540", "-o", form, "--format", form).code == 0
    pd.testing.assert_frame_equal(rows("csv"), rows("parquet"), check_dtype=False)


@pytest.mark.parametrize(
    ("arguments", "code", "expected"),
    [
        (["no_such.yaml"], 2, "no such file"),
        ([MARCH], 2, "vary"),
        ([MARCH, "--vary", "feeds.ethane.contrct=1,2"], 2, "did you mean `feeds.ethane.contract`?"),
        ([MARCH, "--vary", f"{NAPHTHA}"], 2, "hint: write `path=500,534,560` or `path=500:570:5`"),
        ([MARCH, "--vary", f"{NAPHTHA}=a,b"], 2, "hint: write `path=500,534,560`"),
        ([MARCH, "--vary", f"{NAPHTHA}=1", "--workbook", "x.csv"], 2, "a workbook's name ends in .xlsx"),
        ([MARCH, "--vary", f"{NAPHTHA}=1", "--format", "xml"], 1, "known: csv, parquet"),
    ],
)
def test_what_cannot_be_swept_is_said_in_a_line(arguments: list[object], code: int, expected: str) -> None:
    found = run("sweep", *arguments)
    assert found.code == code
    assert expected in found.err
    assert "Traceback" not in found.err


@pytest.mark.slow
@pytest.mark.skipif(os.name == "nt", reason="sends a posix signal")
def test_ctrl_c_keeps_what_is_done_and_the_same_command_goes_on() -> None:
    words = ["sweep", str(MARCH), "--vary", f"{NAPHTHA}=500:560:0.01", "-o", "out", "--workers", "1"]
    command = [sys.executable, "-m", "olefinlp", *words]
    variables = {**os.environ, "PYTHONPATH": str(PACKAGE)}
    process = subprocess.Popen(command, env=variables, stdout=subprocess.PIPE, stderr=subprocess.PIPE, encoding="utf-8")
    for _ in range(600):
        if len(list(Path("out").glob("part_*.csv"))) >= 2 or process.poll() is not None:
            break
        time.sleep(0.05)
    process.send_signal(signal.SIGINT)
    _, err = process.communicate(timeout=120)
    assert process.returncode == 5, err
    assert "Traceback" not in err
    assert "are kept in out; the same command goes on from there" in err
    kept = len(rows("out"))
    assert 0 < kept < 6001
    assert run(*words).code == 0
    assert len(rows("out")) == 6001


def test_help_loads_nothing_heavy() -> None:
    """Pydantic apart, with which newer versions of typer read the arguments."""
    for command in ("sweep", "frontier"):
        assert loaded(command, "--help", folder=Path.cwd()) & (set(HEAVY) - {"pydantic"}) == set()
