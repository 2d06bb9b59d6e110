"""The command line: what each command writes, what it refuses, with which exit code, and how little it loads."""

from __future__ import annotations

import csv
import json
import os
import re
import shutil
import subprocess
import sys
from dataclasses import replace
from pathlib import Path
from typing import Any

import highspy
import numpy as np
import openpyxl
import pytest
from conftest import ROOT, SCENARIOS
from typer.testing import CliRunner

import olefinlp
from olefinlp.answers.plan import NoPlan
from olefinlp.cli import app
from olefinlp.lp.algebra import build_model
from olefinlp.lp.compile import LabelledLp, compile_model
from olefinlp.lp.export import readable
from olefinlp.lp.solver import EXIT_CODES, OPTIONS, Solution, Solver, Status

PACKAGE = Path(olefinlp.__file__).resolve().parent.parent
HEAVY = ("numpy", "pandas", "scipy", "matplotlib", "pyomo", "highspy", "pydantic", "pint", "xlsxwriter", "openpyxl", "ruamel")
DEMO_MARGIN = 26_808_667
TEXTBOOK_MARGIN = 3684.20


class Run:
    """What a command left: exit code and both streams."""

    def __init__(self, code: int, out: str, err: str) -> None:
        self.code, self.out, self.err = code, out, err
        assert "Traceback" not in err, err

    def record(self) -> dict[str, Any]:
        """Standard output as the one JSON object it is."""
        return dict(json.loads(self.out))


def run(*arguments: object) -> Run:
    """A command in this process."""
    result = CliRunner().invoke(app, [str(a) for a in arguments])
    if result.exception is not None and not isinstance(result.exception, SystemExit):
        raise result.exception
    return Run(result.exit_code, result.stdout, result.stderr)


def run_apart(*arguments: object, folder: Path, code: str = "", **environment: str) -> Run:
    """A command in a process of its own, started in a folder; `code` is run instead of the module if given."""
    program = ["-c", code] if code else ["-m", "olefinlp"]
    variables = {**os.environ, "PYTHONPATH": str(PACKAGE), **environment}
    done = subprocess.run(
        [sys.executable, *program, *map(str, arguments)], cwd=folder, env=variables, capture_output=True, timeout=300, check=False
    )
    return Run(done.returncode, done.stdout.decode("utf-8"), done.stderr.decode("utf-8"))


@pytest.fixture
def work(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A folder of the shipped plants and scenarios, to change and to write into; commands are started there."""
    for name in ("models", "scenarios"):
        shutil.copytree(ROOT / name, tmp_path / name)
    monkeypatch.chdir(tmp_path)
    return tmp_path


def changed(path: Path, *changes: tuple[str, str]) -> Path:
    """Replace text in a file; each must be there exactly once."""
    text = path.read_text(encoding="utf-8")
    for old, new in changes:
        assert text.count(old) == 1, old
        text = text.replace(old, new)
    path.write_text(text, encoding="utf-8")
    return path


def line_of(path: Path, text: str) -> int:
    """The line (from 1) of a file on which a text stands."""
    lines = path.read_text(encoding="utf-8").splitlines()
    (found,) = (number for number, line in enumerate(lines, start=1) if text in line)
    return found


TEXTBOOK = Path("scenarios/thermal_cracker.yaml")
DEMO = Path("scenarios/brackwater_2031_03.yaml")


@pytest.fixture
def impossible(work: Path) -> Path:
    """The textbook hour with more ethylene promised than its ethylene unit can make."""
    return changed(work / TEXTBOOK, ("ethylene_sale:  {max: unlimited", "ethylene_sale:  {min: 60000 lb, max: unlimited"))


@pytest.fixture
def wrong(work: Path) -> Path:
    """The textbook hour with two slips in it."""
    return changed(
        work / TEXTBOOK,
        ("ethane:           {purchase: {max: unlimited", "ethane:           {purchase: {maxx: unlimited"),
        ("price: 13.79 USc/lb", "price: 13.79 USc/pound"),
    )


# ---------------------------------------------------------------------------------- plan


def test_plan_without_a_scenario_plans_the_demo_month(work: Path) -> None:
    """The demo of this folder if it has one; the workbook is named after it."""
    done = run("plan")
    assert done.code == 0
    assert "no scenario given: planning the invented demo, scenarios/brackwater_2031_03.yaml" in done.err
    assert done.out.startswith("March 2031, base prices\nBrackwater Olefins (invented)\n")
    assert (work / "brackwater_2031_03_plan.xlsx").stat().st_size > 0
    assert "written: brackwater_2031_03_plan.xlsx" in done.err


def test_plan_from_an_empty_folder_uses_the_demo_of_the_package(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Nothing but the package is needed for a first plan."""
    monkeypatch.chdir(tmp_path)
    done = run("plan", "--json", "-")
    assert done.code == 0
    assert done.record()["margin"] == pytest.approx(DEMO_MARGIN, abs=1)
    assert [p.name for p in tmp_path.iterdir()] == ["brackwater_2031_03_plan.xlsx"]


def test_plan_of_a_scenario_writes_a_workbook_that_opens(work: Path) -> None:
    """Data on standard output, what was written on standard error."""
    done = run("plan", TEXTBOOK, "-o", "hour.xlsx")
    assert done.code == 0
    assert "3,684.20" in done.out
    assert "written: hour.xlsx" in done.err
    assert "hour.xlsx" not in done.out
    assert openpyxl.load_workbook(work / "hour.xlsx", read_only=True).sheetnames


def test_plan_of_a_price_case(work: Path) -> None:
    """Another column of the scenario's price table."""
    done = run("plan", DEMO, "--price-case", "High crude", "--json", "-")
    assert done.code == 0
    record = done.record()
    assert record["price_case"] == "High crude"
    assert abs(record["margin"] - DEMO_MARGIN) > 1e5


def test_an_unknown_price_case_names_the_near_one(work: Path) -> None:
    """A slip in a name is an input error like any other."""
    done = run("plan", DEMO, "--price-case", "High crud")
    assert done.code == 2
    assert "--price-case High crud: no such price case\nhint: did you mean `High crude`?" in done.err
    assert "hint: did you mean `High crude`?" in done.err
    assert not list(work.glob("*.xlsx"))


def test_json_on_standard_output_is_all_that_is_there(work: Path) -> None:
    """The whole of standard output is one JSON object; the workbook is written as usual."""
    done = run("plan", TEXTBOOK, "--json", "-")
    assert done.code == 0
    assert done.out.startswith("{") and done.out.endswith("}\n")
    assert done.record()["margin"] == pytest.approx(TEXTBOOK_MARGIN, abs=0.005)
    assert (work / "thermal_cracker_plan.xlsx").exists()


def test_json_and_csv_files(work: Path) -> None:
    """Both are written beside the workbook and named in the closing line."""
    done = run("plan", TEXTBOOK, "--json", "hour.json", "--csv", "tables", "--quick")
    assert done.code == 0
    record = json.loads((work / "hour.json").read_text(encoding="utf-8"))
    assert record["status"] == "optimal"
    feeds = list(csv.reader((work / "tables" / "feeds.csv").read_text(encoding="utf-8").splitlines()))
    assert feeds[0][:3] == ["month", "feed", "source"]
    assert "hour.json" in done.err and "tables" in done.err
    assert "Margin" in done.out


def test_the_demo_plan_of_a_process_of_its_own(work: Path) -> None:
    """As a person starts it: streams apart, one workbook, exit code 0."""
    done = run_apart("plan", DEMO, "--quick", "-o", "march.xlsx", folder=work)
    assert done.code == 0
    assert "before fixed cost  26,808.7  kUSD" in done.out
    assert done.err == "\nwritten: march.xlsx\n"


def test_quick_leaves_the_further_answers_out(work: Path) -> None:
    """The plan's own tables are the same; the answers around it are in the longer form only."""
    long, short = (run("plan", TEXTBOOK, "--json", "-", *more).record() for more in ([], ["--quick"]))
    assert short["margin"] == long["margin"]
    assert short["feeds"] == long["feeds"]
    assert set(short) < set(long)
    assert len(run("plan", TEXTBOOK, "--quick").out) < len(run("plan", TEXTBOOK).out)


def test_options_of_the_answers(work: Path) -> None:
    """Sizes of parcels and the room to move are taken up."""
    done = run("plan", DEMO, "--parcels", "2,4", "--room", "1")
    assert done.code == 0
    assert " 1 % " in done.out


@pytest.mark.parametrize(
    "option", [("--parcels", "x"), ("--parcels", "nan"), ("--parcels=-3",), ("--room", "100"), ("--room=-1",)]
)
def test_options_of_the_answers_that_do_not_read(work: Path, option: tuple[str, ...]) -> None:
    """Said before anything is planned, and as JSON to who asked for it."""
    done = run("plan", TEXTBOOK, *option, "--json", "-")
    assert done.code == 2
    record = done.record()
    assert record["status"] == "input_error"
    assert record["message"] + "\n" == done.err
    assert not list(work.glob("*.xlsx"))


# ---------------------------------------------------------------------------------- what goes wrong in a plan


def test_input_errors_come_all_at_once_with_their_places(work: Path, wrong: Path) -> None:
    """Exit code 2, each finding with file and line, and no workbook."""
    done = run("plan", TEXTBOOK)
    assert done.code == 2
    assert f"{TEXTBOOK}:{line_of(wrong, 'maxx')}  feeds.ethane.purchase.maxx" in done.err
    assert f"{TEXTBOOK}:{line_of(wrong, 'USc/pound')}  outlets.propylene_sale.price" in done.err
    assert "hint: did you mean `max`?" in done.err
    assert done.err.rstrip().endswith("2 errors, 0 warnings")
    assert done.out == ""
    assert not list(work.glob("*.xlsx"))


def test_input_errors_as_json(wrong: Path, work: Path) -> None:
    """A script that asked for JSON gets status, message and findings, on standard output or in the file."""
    done = run("plan", TEXTBOOK, "--json", "-")
    assert done.code == 2
    record = done.record()
    assert record["status"] == "input_error"
    assert "unknown name `maxx`" in record["message"]
    assert len(record["findings"]) == 2
    first = record["findings"][0]
    assert first["level"] == "error"
    assert first["place"] == f"{TEXTBOOK}:{line_of(wrong, 'maxx')}"
    assert first["path"] == "feeds.ethane.purchase.maxx"
    assert run("plan", TEXTBOOK, "--json", "why.json").code == 2
    assert json.loads((work / "why.json").read_text(encoding="utf-8")) == record


def test_a_missing_scenario_is_an_input_error(work: Path) -> None:
    """With the near name, from another process too."""
    done = run_apart("plan", "scenarios/thermal_craker.yaml", folder=work)
    assert done.code == 2
    assert "scenarios/thermal_craker.yaml\n  no such file\nhint: did you mean `thermal_cracker.yaml`?" in done.err


def test_limits_that_clash_are_named_with_their_places(work: Path, impossible: Path) -> None:
    """Exit code 3: the promised ethylene and the unit that cannot make it."""
    done = run("plan", TEXTBOOK)
    assert done.code == 3
    assert "No plan is possible: these limits clash" in done.err
    assert f"{TEXTBOOK}:{line_of(impossible, 'min: 60000 lb')}" in done.err
    assert "models/thermal_cracker/recovery_units.csv:3" in done.err
    assert done.out == ""
    assert not list(work.glob("*.xlsx"))


def test_a_clash_as_json(impossible: Path, work: Path) -> None:
    """Status, message and the places of the clash."""
    done = run("plan", TEXTBOOK, "--json", "-")
    assert done.code == 3
    record = done.record()
    assert record["status"] == "infeasible"
    assert record["message"].startswith("No plan is possible")
    assert f"{TEXTBOOK}:{line_of(impossible, 'min: 60000 lb')}" in json.dumps(record["clash"])
    assert run("plan", TEXTBOOK, "--json", "why.json").code == 3
    assert json.loads((work / "why.json").read_text(encoding="utf-8")) == record


def test_each_ending_has_its_exit_code() -> None:
    """0 plan, 3 infeasible, 4 unbounded, 5 stopped, 6 failed; 1 and 2 are kept for outputs and inputs."""
    assert {status.value: code for status, code in EXIT_CODES.items()} == {
        "optimal": 0,
        "infeasible": 3,
        "unbounded": 4,
        "stopped": 5,
        "failed": 6,
    }


def unlimited(case: Any) -> LabelledLp:
    """The LP of a model as if nobody had written a limit; the input checks would have stopped such files."""
    lp = compile_model(build_model(case))
    limits = np.array([label[0].endswith("_limit") for label in lp.rows])
    return replace(lp, row_low=np.where(limits, -np.inf, lp.row_low), row_high=np.where(limits, np.inf, lp.row_high))


def test_a_margin_without_end_is_exit_code_4(work: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """What grows without end is named with its place."""
    monkeypatch.setattr("olefinlp.answers.plan.program_of", unlimited)
    done = run("plan", TEXTBOOK, "--json", "-")
    assert done.code == 4
    assert "The margin has no end" in done.err
    assert re.search(r"(bought|sold|traded) without end  scenarios/thermal_cracker\.yaml:\d+", done.err)
    assert done.record()["status"] == "unbounded"
    assert done.record()["message"] in done.err
    assert not list(work.glob("*.xlsx"))


def test_a_margin_without_end_is_no_plan_in_python(monkeypatch: pytest.MonkeyPatch) -> None:
    """The same from a script: an exception that carries the status."""
    monkeypatch.setattr("olefinlp.answers.plan.program_of", unlimited)
    with pytest.raises(NoPlan) as caught:
        olefinlp.make_plan(olefinlp.read_scenario(ROOT / TEXTBOOK))
    assert caught.value.status is Status.UNBOUNDED
    assert EXIT_CODES[caught.value.status] == 4


def test_a_solver_that_is_stopped_is_exit_code_5(work: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A limit on iterations, hit: what it had by then is no plan."""
    monkeypatch.setitem(OPTIONS, "simplex_iteration_limit", 0)
    monkeypatch.setitem(OPTIONS, "presolve", "off")
    done = run("plan", TEXTBOOK, "--json", "-")
    assert done.code == 5
    assert "stopped before it had proven a plan" in done.err
    assert done.record()["status"] == "stopped"
    assert not list(work.glob("*.xlsx"))


def test_a_solver_that_fails_is_exit_code_6(work: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Neither infeasible nor anything else that it is not."""
    monkeypatch.setattr("olefinlp.lp.solver._STATUSES", {})
    done = run("plan", TEXTBOOK, "--json", "-")
    assert done.code == 6
    assert "the solver failed" in done.err
    assert done.record()["status"] == "failed"
    assert not list(work.glob("*.xlsx"))


def test_an_answer_that_is_not_proven_is_exit_code_6(work: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A wrong answer of the solver is caught outside it; no workbook and no table is written."""
    honest = Solver._solution

    def wrong_by_a_percent(solver: Solver) -> Solution:
        solution = honest(solver)
        return replace(solution, x=solution.x * 1.01)

    monkeypatch.setattr(Solver, "_solution", wrong_by_a_percent)
    done = run("plan", TEXTBOOK, "--json", "-", "--csv", "tables")
    assert done.code == 6
    assert "not a proven optimum" in done.err
    assert "hint:" in done.err
    record = done.record()
    assert record["status"] == "not_proven"
    assert "not a proven optimum" in record["message"]
    assert not list(work.glob("*.xlsx"))
    assert not (work / "tables").exists()


def test_balances_that_do_not_close_are_exit_code_6(work: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The second proof, from the tables, stops a plan as the first one does."""
    from olefinlp.answers.balances import BalanceError

    def refuse(*_: object) -> None:
        raise BalanceError("mass of ethylene does not close")

    monkeypatch.setattr("olefinlp.answers.plan.prove_balances", refuse)
    done = run("plan", TEXTBOOK)
    assert done.code == 6
    assert "mass of ethylene does not close" in done.err
    assert not list(work.glob("*.xlsx"))


# ---------------------------------------------------------------------------------- outputs that cannot be written


def test_a_workbook_that_is_a_folder(work: Path) -> None:
    """Exit code 1; the summary was printed, nothing is left in the folder."""
    (work / "plans").mkdir()
    done = run("plan", TEXTBOOK, "-o", "plans")
    assert done.code == 1
    assert "plans is a folder; name a file\nhint: for example plans/plan.xlsx" in done.err
    assert "3,684.20" in done.out
    assert list((work / "plans").iterdir()) == []


def test_a_workbook_in_a_folder_that_is_not_there(work: Path) -> None:
    """No folder is made on the quiet."""
    done = run("plan", TEXTBOOK, "-o", "nowhere/plan.xlsx")
    assert done.code == 1
    assert "nowhere/plan.xlsx cannot be written: the folder nowhere is not there" in done.err
    assert not (work / "nowhere").exists()


def test_a_workbook_that_is_open_elsewhere_is_left_as_it_was(work: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The old bytes stay, no temporary file stays, the message says so."""
    old = work / "plan.xlsx"
    old.write_bytes(b"an older plan")

    def refuse(*_: object, **__: object) -> None:
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(os, "replace", refuse)
    before = sorted(p.name for p in work.iterdir())
    done = run("plan", TEXTBOOK, "-o", "plan.xlsx")
    assert done.code == 1
    assert "plan.xlsx cannot be written; the old file is as it was\nhint: is it open in another program" in done.err
    assert old.read_bytes() == b"an older plan"
    assert sorted(p.name for p in work.iterdir()) == before


def test_a_workbook_that_cannot_be_written_does_not_hold_back_the_other_files(work: Path) -> None:
    """A script that asked for JSON and csv has its plan; the exit code says that something is missing."""
    (work / "plans").mkdir()
    done = run("plan", TEXTBOOK, "-o", "plans", "--json", "hour.json", "--csv", "tables")
    assert done.code == 1
    assert json.loads((work / "hour.json").read_text(encoding="utf-8"))["status"] == "optimal"
    assert (work / "tables" / "feeds.csv").exists()
    assert "written: hour.json, tables" in done.err


@pytest.mark.parametrize("option", ["--json", "--csv"])
def test_tables_that_cannot_be_written(work: Path, option: str) -> None:
    """A folder that is not there, a folder that is a file."""
    (work / "file").write_text("something", encoding="utf-8")
    done = run("plan", TEXTBOOK, option, "file/inside")
    assert done.code == 1
    assert "file" in done.err
    assert (work / "file").read_text(encoding="utf-8") == "something"


# ---------------------------------------------------------------------------------- check


@pytest.mark.parametrize("name", SCENARIOS)
def test_shipped_scenarios_have_no_errors(work: Path, name: str) -> None:
    """Checked without solving."""
    done = run("check", f"scenarios/{name}")
    assert done.code == 0
    assert re.fullmatch(rf"scenarios/{name}: no errors, \d+ warnings?\n", done.out)


@pytest.mark.parametrize("plant", sorted(p.name for p in (ROOT / "models").iterdir() if p.is_dir()))
def test_shipped_plants_have_no_errors(work: Path, plant: str) -> None:
    """By their folder or by their file."""
    for path in (f"models/{plant}", f"models/{plant}/plant.yaml"):
        done = run("check", path)
        assert done.code == 0
        assert done.out.startswith(f"{path}: no errors")


def test_check_prints_every_finding_of_scenario_and_plant_at_once(work: Path, wrong: Path) -> None:
    """Two slips in the scenario and one in its plant: three findings, exit code 2."""
    plant = changed(work / "models/thermal_cracker/plant.yaml", ("kind: thermal\n", "kind: thermall\n"))
    done = run("check", TEXTBOOK)
    assert done.code == 2
    assert f"{TEXTBOOK}:{line_of(wrong, 'maxx')}" in done.err
    assert f"{TEXTBOOK}:{line_of(wrong, 'USc/pound')}" in done.err
    assert f"models/thermal_cracker/plant.yaml:{line_of(plant, 'thermall')}" in done.err
    assert "3 errors" in done.err
    assert done.out == ""


def test_check_of_a_plant_with_an_error(work: Path) -> None:
    """A plant is checked by itself."""
    changed(work / "models/thermal_cracker/plant.yaml", ("kind: thermal\n", "kind: thermall\n"))
    done = run("check", "models/thermal_cracker")
    assert done.code == 2
    assert "furnace_groups.cracker.kind" in done.err
    assert "1 error" in done.err


@pytest.mark.parametrize(
    ("name", "content"),
    [
        ("gone.yaml", None),
        ("empty.yaml", b""),
        ("latin.yaml", b"title: caf\xe9\n"),
        ("broken.yaml", b"title: [unclosed\n"),
        ("list.yaml", b"- 1\n- 2\n"),
        ("null.yaml", b"title: \x00\n"),
        ("workbook.yaml", b"PK\x03\x04" + bytes(range(256))),
    ],
)
def test_files_that_are_no_scenarios(work: Path, name: str, content: bytes | None) -> None:
    """Each is an input error in words, by `check` and by `plan`."""
    if content is not None:
        (work / name).write_bytes(content)
    for command in ("check", "plan"):
        done = run(command, name)
        assert done.code == 2
        assert done.err.startswith(name)


# ---------------------------------------------------------------------------------- export


@pytest.mark.parametrize("ending", ["mps", "lp"])
@pytest.mark.parametrize("name", SCENARIOS)
def test_exported_files_have_the_same_optimum(work: Path, name: str, ending: str, shipped_plan: Any) -> None:
    """Read back by the solver: a maximum, with offset, of the same size to 1e-9; and readable names."""
    done = run("export", f"scenarios/{name}", f"month.{ending}")
    assert done.code == 0
    assert f"written: month.{ending}" in done.err
    highs = highspy.Highs()
    highs.setOptionValue("output_flag", False)
    highs.setOptionValue("threads", 1)
    assert highs.readModel(str(work / f"month.{ending}")) == highspy.HighsStatus.kOk
    highs.run()
    assert highs.getModelStatus() == highspy.HighsModelStatus.kOptimal
    assert highs.getLp().sense_ == highspy.ObjSense.kMaximize
    plan = shipped_plan(name)
    assert highs.getInfo().objective_function_value == pytest.approx(plan.margin / 1000, rel=1e-9)
    assert sorted(highs.getLp().col_names_) == sorted(readable(plan.lp.columns))
    rows = {re.sub(r"(lo|up)$", "", name) for name in highs.getLp().row_names_}  # a range is two rows of an .lp file
    assert rows == {re.sub(r"(lo|up)$", "", name) for name in readable(plan.lp.rows)}


def test_an_offset_of_the_margin_is_exported(work: Path, shipped_scenario: Any) -> None:
    """A constant in the margin keeps its sign in both formats."""
    from olefinlp.lp.export import export

    lp = replace(compile_model(build_model(shipped_scenario("thermal_cracker.yaml").case)), offset=-1000.0)
    for ending in (".mps", ".lp"):
        path = work / f"with_offset{ending}"
        export(lp, path, ending)
        highs = highspy.Highs()
        highs.setOptionValue("output_flag", False)
        highs.readModel(str(path))
        highs.run()
        assert highs.getInfo().objective_function_value == pytest.approx(TEXTBOOK_MARGIN / 1000 - 1000, abs=1e-5)


def test_export_of_a_price_case(work: Path) -> None:
    """Other prices, the same rows."""
    assert run("export", DEMO, "base.mps").code == 0
    assert run("export", DEMO, "dear.mps", "--price-case", "High crude").code == 0
    assert (work / "base.mps").read_text() != (work / "dear.mps").read_text()


def test_readable_names_stay_apart() -> None:
    """Two labels that differ only in signs that the formats do not take get two names."""
    names = readable((("bought", "a b", "1"), ("bought", "a-b", "1"), ("bought", "x" * 300), ("bought", "x" * 299 + "y")))
    assert len(set(names)) == 4
    assert all(re.fullmatch(r"[A-Za-z][A-Za-z0-9_.]{0,254}", name) for name in names)


def test_names_that_look_like_the_repeat_of_another_stay_apart() -> None:
    """Even a label that is written like our own mark for a repeat."""
    names = readable((("a", "b"), ("a-b",), ("a.b",), ("a", "b", "again_2"), ("a.b", "again_2")))
    assert len(set(names)) == 5


def test_export_refuses_another_ending(work: Path) -> None:
    """Only the two formats that solvers read."""
    done = run("export", TEXTBOOK, "hour.txt")
    assert done.code == 1
    assert "hour.txt: the file must end in .mps or .lp" in done.err
    assert not (work / "hour.txt").exists()


def test_export_into_a_folder_that_is_not_there(work: Path) -> None:
    """No folder is made on the quiet, nothing is left behind."""
    before = sorted(p.name for p in work.iterdir())
    done = run("export", TEXTBOOK, "nowhere/hour.mps")
    assert done.code == 1
    assert "the folder nowhere is not there" in done.err
    assert sorted(p.name for p in work.iterdir()) == before


def test_export_of_a_wrong_scenario(wrong: Path) -> None:
    """All findings, exit code 2."""
    done = run("export", TEXTBOOK, "hour.mps")
    assert done.code == 2
    assert "2 errors" in done.err


def test_export_prints_nothing_on_standard_output(work: Path) -> None:
    """Neither the solver's banner nor a note."""
    done = run_apart("export", TEXTBOOK, "hour.lp", folder=work)
    assert done.code == 0
    assert done.out == ""
    assert "maximise" in done.err


# ---------------------------------------------------------------------------------- curve and explain

CAPACITY = "recovery_units.ethylene.capacity"


def test_a_curve_is_printed_and_written(work: Path) -> None:
    """Table on standard output, workbook and csv beside it."""
    done = run("curve", TEXTBOOK, CAPACITY, "--from", "30000", "--to", "60000", "-o", "curve.xlsx", "--csv", "curve.csv")
    assert done.code == 0
    assert CAPACITY in done.out
    assert "written: curve.xlsx, curve.csv" in done.err
    assert openpyxl.load_workbook(work / "curve.xlsx", read_only=True).sheetnames
    assert len((work / "curve.csv").read_text(encoding="utf-8").splitlines()) > 1


def test_a_ratio_curve(work: Path) -> None:
    """Two cuts joined by a stroke."""
    done = run("curve", DEMO, "propylene/ethylene", "--from", "0.26", "--to", "0.30")
    assert done.code == 0
    assert "propylene" in done.out and "ethylene" in done.out


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["recovery_units.ethylene.capacty"], "did you mean `recovery_units.ethylene.capacity`?"),
        ([CAPACITY, "--from", "5", "--to", "1"], "is empty"),
        ([CAPACITY, "--month", "2031-07"], "2031-07"),
        (["propylene/ethylen"], "ethylen"),
        (["propylene/ethylene", "--month", "hour"], "leave --month out"),
        ([""], "is no price or limit of this plan"),
    ],
)
def test_curves_that_cannot_be(work: Path, arguments: list[str], words: str) -> None:
    """Wrong names, empty ranges: exit code 2 and a sentence."""
    done = run("curve", TEXTBOOK, *arguments)
    assert done.code == 2
    assert words in done.err
    assert done.out == ""


def test_a_ratio_of_a_cut_to_itself(work: Path) -> None:
    """There is nothing to follow."""
    assert run("curve", TEXTBOOK, "ethylene/ethylene").code == 2


def test_a_ratio_curve_of_the_other_plant(work: Path) -> None:
    """A neighbour that cannot be solved ends in a message, not in a traceback."""
    assert run("curve", "scenarios/marram_point_2031_03.yaml", "propylene/ethylene").code == 0


def test_curves_of_what_cannot_be_planned(work: Path, impossible: Path) -> None:
    """The exit code is the plan's."""
    assert run("curve", TEXTBOOK, CAPACITY).code == 3
    assert run("curve", "scenarios/gone.yaml", CAPACITY).code == 2


@pytest.mark.parametrize("option", [("-o", "curve.xlsx"), ("--csv", "curve.csv")])
def test_curves_that_cannot_be_written(work: Path, option: tuple[str, str]) -> None:
    """The table was printed; the file is not there: exit code 1."""
    done = run("curve", TEXTBOOK, CAPACITY, option[0], f"nowhere/{option[1]}")
    assert done.code == 1
    assert CAPACITY in done.out
    assert "the folder nowhere is not there" in done.err


def test_explain_an_impossible_month(work: Path, impossible: Path) -> None:
    """What to relax, with places; the explanation is there, so the command ends well."""
    done = run("explain", TEXTBOOK, "-o", "why.xlsx")
    assert done.code == 0
    assert "ethylene_sale" in done.out.replace(" ", "_")
    assert f"thermal_cracker.yaml:{line_of(impossible, 'min: 60000 lb')}" in done.out
    assert openpyxl.load_workbook(work / "why.xlsx", read_only=True).sheetnames


def test_explain_feeds_that_are_not_bought(work: Path) -> None:
    """All of them, or the one that is asked for."""
    every = run("explain", TEXTBOOK)
    assert every.code == 0
    for feed in ("propane", "gas_oil", "natural_gasoline"):
        assert f"Why not {feed}" in every.out
    one = run("explain", TEXTBOOK, "--feed", "gas_oil", "-o", "why.xlsx")
    assert one.code == 0
    assert one.out.count("Why not") == 1
    assert (work / "why.xlsx").exists()


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["--feed", "gas_oill"], "did you mean `gas_oil`?"),
        (["--mode", "cracker.gas_oil.hard"], "cracker.gas_oil.hard"),
        (["-o", "why.xlsx"], "do not fit one workbook"),
    ],
)
def test_explanations_that_cannot_be(work: Path, arguments: list[str], words: str) -> None:
    """Wrong names: exit code 2 and a sentence."""
    done = run("explain", TEXTBOOK, *arguments)
    assert done.code == 2
    assert words in done.err
    assert done.out == ""


# ---------------------------------------------------------------------------------- new, schema, version, help


def test_new_copies_plants_and_scenarios_that_plan(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The copied demo has the margin of the shipped one, as does the textbook's hour."""
    monkeypatch.chdir(tmp_path)
    done = run("new", "mine")
    assert done.code == 0
    copied = {p.relative_to(tmp_path / "mine") for p in (tmp_path / "mine").rglob("*") if p.is_file()}
    shipped = {p.relative_to(ROOT) for name in ("models", "scenarios") for p in (ROOT / name).rglob("*") if p.is_file()}
    assert copied == {p for p in shipped if p.suffix in (".yaml", ".csv", ".md")}
    assert f"{len(copied)} files written to mine" in done.out
    assert "next: olefinlp plan mine/scenarios/brackwater_2031_03.yaml" in done.out.replace("\\", "/")
    plan = run("plan", "mine/scenarios/brackwater_2031_03.yaml", "--json", "-")
    assert plan.code == 0
    assert plan.record()["margin"] == pytest.approx(DEMO_MARGIN, abs=1)
    assert run("plan", "mine/scenarios/thermal_cracker.yaml").code == 0


def test_new_replaces_nothing(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """One file in the way and nothing at all is copied."""
    monkeypatch.chdir(tmp_path)
    own = tmp_path / "mine" / "scenarios" / "thermal_cracker.yaml"
    own.parent.mkdir(parents=True)
    own.write_text("my own", encoding="utf-8")
    done = run("new", "mine")
    assert done.code == 1
    assert "thermal_cracker.yaml is there already; nothing was copied" in done.err
    assert own.read_text(encoding="utf-8") == "my own"
    assert [p for p in (tmp_path / "mine").rglob("*") if p.is_file()] == [own]
    assert not (tmp_path / "mine" / "models").exists()


@pytest.mark.parametrize("in_the_way", ["mine", "mine/models", "mine/scenarios/prices"])
def test_new_into_something_that_is_a_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, in_the_way: str) -> None:
    """A file where a folder is needed is in the way too."""
    monkeypatch.chdir(tmp_path)
    own = tmp_path / in_the_way
    own.parent.mkdir(parents=True, exist_ok=True)
    own.write_text("my own", encoding="utf-8")
    done = run("new", "mine")
    assert done.code == 1
    assert f"{in_the_way} is there already; nothing was copied" in done.err
    assert own.read_text(encoding="utf-8") == "my own"
    assert [p for p in tmp_path.rglob("*") if p.is_file()] == [own]


def test_new_that_runs_out_of_room_leaves_nothing(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Half a plant is worse than none."""
    monkeypatch.chdir(tmp_path)
    honest, calls = shutil.copyfile, []

    def full(source: Path, target: Path) -> None:
        calls.append(target)
        if len(calls) > 5:
            raise OSError(28, "No space left on device")
        honest(source, target)

    monkeypatch.setattr(shutil, "copyfile", full)
    done = run("new", "mine")
    assert done.code == 1
    assert "mine cannot be written to: No space left on device" in done.err
    assert [p for p in tmp_path.rglob("*") if p.is_file()] == []


PLAIN_WORDS = set("title name notice source date note reason basis month unit group density price lhv_over_hhv".split())
"""Fields whose name says it all, so that a description is not asked for."""


def says_itself(name: str, field: dict[str, Any]) -> bool:
    """Whether an editor has something to show: a description, a described object inside, or the choices."""
    text = json.dumps(field)
    return name in PLAIN_WORDS or any(f'"{key}"' in text for key in ("description", "$ref", "enum", "const"))


@pytest.mark.parametrize(
    ("what", "known"), [("scenario", ("months", "feeds", "outlets")), ("plant", ("cuts", "feeds", "yields"))]
)
def test_schema_describes_objects_and_fields(tmp_path: Path, what: str, known: tuple[str, ...]) -> None:
    """A JSON Schema on standard output, and the same in a file."""
    done = run("schema", what)
    assert done.code == 0
    schema = done.record()
    assert schema["$schema"] == "https://json-schema.org/draft/2020-12/schema"
    assert set(known) <= set(schema["properties"])
    objects = {"file": schema, **schema["$defs"]}
    assert [name for name, part in objects.items() if "properties" in part and not part.get("description")] == []
    assert [name for name, part in objects.items() if "properties" in part and part["additionalProperties"] is not False] == []
    fields = [(where, name, field) for where, part in objects.items() for name, field in part.get("properties", {}).items()]
    assert [(where, name) for where, name, field in fields if not says_itself(name, field)] == []
    assert run("schema", what, "-o", tmp_path / "schema.json").code == 0
    assert json.loads((tmp_path / "schema.json").read_text(encoding="utf-8")) == schema


def test_schema_of_something_else(tmp_path: Path) -> None:
    """Known ones are named."""
    done = run("schema", "furnace")
    assert done.code == 2
    assert done.err == "`furnace` has no schema; known: scenario, plant, cases, sweep\n"
    assert run("schema", "plant", "-o", tmp_path).code == 1


def test_version() -> None:
    """The version of the package."""
    done = run("--version")
    assert done.code == 0
    assert done.out == f"olefinlp {olefinlp.__version__}\n"


@pytest.mark.parametrize("command", ["plan", "check", "export", "curve", "explain", "new", "schema"])
def test_help_of_every_command(command: str) -> None:
    """A sentence and its arguments."""
    done = run(command, "--help")
    assert done.code == 0
    assert f"{command} [OPTIONS]" in done.out


def test_help_lists_commands_and_exit_codes() -> None:
    """What there is, and what an exit code means."""
    done = run("--help")
    assert done.code == 0
    for word in ("plan", "check", "export", "curve", "explain", "new", "schema", "Exit codes", "3 no plan possible"):
        assert word in done.out


@pytest.mark.parametrize("arguments", [["--wrong"], ["plam"], ["check"], ["plan", "--price-case"], ["export", "x.yaml"]])
def test_wrong_usage_is_exit_code_2(arguments: list[str]) -> None:
    """Said in a line, as typer says it."""
    done = run(*arguments)
    assert done.code == 2
    assert "Error: " in done.err


# ---------------------------------------------------------------------------------- start-up and terminals

LOADED = """
import json, sys
from olefinlp.cli import app
try:
    app(sys.argv[1:])
except SystemExit as stop:
    code = stop.code
print(json.dumps([code, sorted({name.partition(".")[0] for name in sys.modules})]), file=sys.stderr)
"""


def loaded(*arguments: object, folder: Path) -> set[str]:
    """Top modules that a command leaves loaded in a process of its own."""
    done = run_apart(*arguments, folder=folder, code=LOADED)
    code, modules = json.loads(done.err.splitlines()[-1])
    assert not code
    return set(modules)


def test_help_loads_no_heavy_library(tmp_path: Path) -> None:
    """`--help` answers at once."""
    assert loaded("--help", folder=tmp_path) & set(HEAVY) == set()


@pytest.mark.parametrize("arguments", [["plan", "--help"], ["--version"], ["new", "mine"]])
def test_light_commands_load_no_heavy_library(tmp_path: Path, arguments: list[str]) -> None:
    """Pydantic apart, with which newer versions of typer read the arguments."""
    assert loaded(*arguments, folder=tmp_path) & (set(HEAVY) - {"pydantic"}) == set()


def test_check_loads_no_solver(work: Path) -> None:
    """Checking needs neither the algebra nor the solver."""
    assert loaded("check", TEXTBOOK, folder=work) & {"pyomo", "highspy", "pandas", "scipy", "xlsxwriter", "openpyxl"} == set()


def test_plan_loads_no_library_that_it_does_not_use(work: Path) -> None:
    """Together these would cost more than all the rest."""
    modules = loaded("plan", DEMO, "--json", "plan.json", "--csv", "tables", folder=work)
    assert modules & {"pandas", "scipy", "matplotlib", "openpyxl", "IPython", "networkx"} == set()


def test_importing_the_package_costs_nothing(tmp_path: Path) -> None:
    """Public names are loaded when they are used first."""
    code = "import olefinlp, sys; print(sorted(set(m.partition('.')[0] for m in sys.modules)))"
    done = run_apart(folder=tmp_path, code=code)
    assert done.code == 0
    assert not [name for name in (*HEAVY, "typer") if f"'{name}'" in done.out]


PLAIN = {"LANG": "C", "LC_ALL": "C", "PYTHONUTF8": "0", "PYTHONCOERCECLOCALE": "0", "PYTHONIOENCODING": "ascii"}


@pytest.mark.parametrize("arguments", [["plan", TEXTBOOK], ["schema", "plant"], ["check", TEXTBOOK], ["--help"]])
def test_a_terminal_that_knows_ascii_only(work: Path, arguments: list[object]) -> None:
    """Signs that it lacks become question marks; nothing fails."""
    done = run_apart(*arguments, folder=work, **PLAIN)
    assert done.code == 0
    assert done.out


FRENCH = "Crackage thermique – une heure, 830 °C"


def test_json_is_utf_8_whatever_the_terminal(work: Path) -> None:
    """Data are never damaged on their way out."""
    changed(work / TEXTBOOK, ("title: Thermal cracker of the textbook, one hour", f"title: {FRENCH}"))
    done = run_apart("plan", TEXTBOOK, "--json", "-", folder=work, **PLAIN)
    assert done.code == 0
    assert done.record()["title"] == FRENCH


def test_names_outside_ascii_in_paths(work: Path) -> None:
    """A scenario and a workbook with such names, on such a terminal too."""
    shutil.copy(work / TEXTBOOK, work / "scenarios" / "março.yaml")
    done = run_apart("plan", "scenarios/março.yaml", "-o", "plano de março.xlsx", folder=work)
    assert done.code == 0
    assert (work / "plano de março.xlsx").exists()


def test_a_reader_that_goes_away(work: Path) -> None:
    """`olefinlp schema plant | head -1` ends without a word."""
    process = subprocess.Popen(
        [sys.executable, "-m", "olefinlp", "schema", "plant"],
        cwd=work,
        env={**os.environ, "PYTHONPATH": str(PACKAGE)},
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
    )
    assert process.stdout is not None and process.stderr is not None
    process.stdout.close()
    errors = process.stderr.read().decode()
    process.wait(timeout=120)
    assert "Traceback" not in errors
    assert "BrokenPipe" not in errors


@pytest.mark.skipif(os.name == "nt", reason="closes a file descriptor through a shell")
def test_without_any_standard_output(work: Path) -> None:
    """A scheduled job may have none: the plan is made and written all the same."""
    command = f'"{sys.executable}" -m olefinlp plan {TEXTBOOK} -o hour.xlsx >&-'
    variables = {**os.environ, "PYTHONPATH": str(PACKAGE)}
    done = subprocess.run(["sh", "-c", command], cwd=work, env=variables, stderr=subprocess.PIPE, timeout=300, check=False)
    assert done.returncode == 0, done.stderr.decode()
    assert openpyxl.load_workbook(work / "hour.xlsx", read_only=True).sheetnames
