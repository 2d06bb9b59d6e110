"""Sweeps written while they run: gone on with after any stop, refused where they are others, done again where damaged."""

from __future__ import annotations

import hashlib
import json
import random
import shutil
import subprocess
import sys
import threading
import time
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from conftest import ROOT, TESTS
from sweeps import MARCH, numbers_of, same_bits, some

from olefinlp import OutputError, make_plan, read_scenario, sweep_into
from olefinlp.answers.plan import Plan
from olefinlp.answers.sweep import ENDINGS, Job, Sweep, gathered, prepare, run_sweep
from olefinlp.lp.sweep import BLOCK, ENDLESS, IMPOSSIBLE, NO_CASE, OPTIMAL, UNPROVEN, SolvedBlock
from olefinlp.outputs import sweep_parts
from olefinlp.outputs.sweep_parts import CSV, PARQUET, OtherSweep, description, part_name, read_sweep, run_into

FORMS = (CSV, PARQUET)
MEASURES = ("feeds", "loads", "worths")


@pytest.fixture(scope="module")
def job(march: Plan) -> Job:
    return prepare(some(march, 300, labels=tuple(f"NA {n}" if n else "NA" for n in range(300))), MEASURES, march)


@pytest.fixture(scope="module")
def undisturbed(job: Job) -> Sweep:
    return gathered(job, run_sweep(job, workers=1))


@pytest.fixture(scope="module", params=[CSV, pytest.param(PARQUET, marks=pytest.mark.slow)])
def whole(request: pytest.FixtureRequest, job: Job, tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, str]:
    """A finished folder: to be copied, not to be changed."""
    folder = tmp_path_factory.mktemp("whole") / "swept"
    run_into(job, folder, form=request.param, workers=1)
    return folder, request.param


@pytest.fixture
def folder(whole: tuple[Path, str], tmp_path: Path) -> Path:
    """A copy of a finished folder."""
    return Path(shutil.copytree(whole[0], tmp_path / "swept"))


def parts(folder: Path) -> dict[str, bytes]:
    """All part files with their bytes."""
    return {file.name: file.read_bytes() for file in sorted(folder.glob("part_*"))}


def counted_blocks(job: Job, folder: Path, form: str, monkeypatch: pytest.MonkeyPatch) -> tuple[Sweep, list[int]]:
    """Go on with a folder: what came out, and which blocks were solved for it."""
    solved: list[int] = []
    there = sweep_parts.run_sweep

    def watched(*arguments: Any, **options: Any) -> Any:
        running = there(*arguments, **options)

        def each() -> Any:
            for block, reasons in running:
                solved.append(block.first)
                yield block, reasons

        return each()

    with monkeypatch.context() as patch:
        patch.setattr(sweep_parts, "run_sweep", watched)
        return run_into(job, folder, form=form, workers=1), solved


# ---------------------------------------------------------------------------------- what is written


def test_a_folder_holds_a_description_and_a_part_a_block(whole: tuple[Path, str], undisturbed: Sweep, job: Job) -> None:
    folder, form = whole
    names = [f"part_{first:09d}.{form}" for first in (1, 129, 257)]
    assert sorted(file.name for file in folder.iterdir()) == ["part_000000001." + form, *names[1:], "parts.sha256", "sweep.json"]
    assert names[1] == part_name(128, form)
    written = read_sweep(folder)
    assert list(written.columns) == list(undisturbed.columns())
    pd.testing.assert_frame_equal(written, undisturbed.to_frame(), check_exact=True)


def test_csv_and_parquet_say_the_same(job: Job, tmp_path: Path) -> None:
    for form in FORMS:
        run_into(job, tmp_path / form, form=form, workers=1)
    pd.testing.assert_frame_equal(read_sweep(tmp_path / CSV), read_sweep(tmp_path / PARQUET), check_exact=True)


def test_parts_hold_all_digits_and_blanks_for_what_is_none(whole: tuple[Path, str], undisturbed: Sweep) -> None:
    folder, form = whole
    if form != CSV:
        return
    header, *lines = (folder / part_name(0, form)).read_text(encoding="utf-8").splitlines()
    assert header.startswith("case,label,feeds.full_range_naphtha.spot_cargo,feeds.ethane.contract.max,")
    cells = lines[0].split(",")
    at = header.split(",").index("margin")
    assert cells[at] == repr(float(undisturbed.margin[0])) and len(cells[at]) > 12
    assert lines[1].split(",")[3] == "" and "nan" not in "".join(lines)


def test_the_description_says_what_is_swept(whole: tuple[Path, str], job: Job) -> None:
    folder, form = whole
    said = json.loads((folder / "sweep.json").read_text(encoding="utf-8"))
    assert said == description(job, form)
    assert said["title"] == "March 2031, base prices" and said["price_case"] == "Base"
    assert (said["cases"], said["block"], said["form"], said["how"]) == (300, BLOCK, form, "table")
    assert said["varied"][1] == {"path": "feeds.ethane.contract.max", "month": "", "unit": "kt", "percent": False}
    assert said["measures"] == list(job.read_out.names)
    prices = (ROOT / "scenarios" / "prices" / "brackwater.csv").read_bytes()
    assert said["files"]["prices/brackwater.csv"] == hashlib.sha256(prices).hexdigest()
    assert {"brackwater_2031_03.yaml", "../models/brackwater/yields.csv"} <= set(said["files"])


def test_the_list_of_parts_is_one_that_other_programs_check(whole: tuple[Path, str]) -> None:
    done = subprocess.run(["sha256sum", "-c", "parts.sha256"], cwd=whole[0], capture_output=True, text=True, check=True)
    assert done.stdout.count(": OK") == 3


@pytest.mark.parametrize("form", FORMS)
def test_every_ending_is_read_back(job: Job, form: str, tmp_path: Path) -> None:
    """An optimum, a clash with and without words, no end, no proof, no valid case; words with commas, quotes and lines."""
    status = np.array([OPTIMAL, IMPOSSIBLE, IMPOSSIBLE, ENDLESS, UNPROVEN, NO_CASE], dtype=np.int8)
    reasons = {1: 'limits clash: a, "b"', 5: "one, two\nthree; über"}
    width = len(job.read_out.names)
    readings = np.where(status[:, None] == OPTIMAL, np.pi * np.arange(6 * width).reshape(6, width) / 1e7, np.nan)
    margin = np.where(status == OPTIMAL, -1 / 3, np.nan)
    six = replace(job, cases=replace(job.cases, values=job.cases.values[:6], labels=job.cases.labels[:6]))
    columns = sweep_parts.columns_of(six.cases, six.read_out, SolvedBlock(0, status, margin, margin, readings), reasons)
    tmp_path.mkdir(exist_ok=True)
    sweep_parts._write(tmp_path / part_name(0, form), columns, form)
    ((block, why),) = sweep_parts._parts(six, tmp_path, form, sweep_parts._sums(tmp_path))
    assert block.status.tolist() == status.tolist() and why == reasons
    assert np.array_equal(block.readings, readings, equal_nan=True) and np.array_equal(block.margin, margin, equal_nan=True)
    frame = read_sweep(tmp_path)
    assert frame["status"].tolist() == [ENDINGS[int(one)].partition(":")[0] for one in status]
    assert frame["reason"].tolist() == ["", reasons[1], ENDINGS[IMPOSSIBLE], ENDINGS[ENDLESS], ENDINGS[UNPROVEN], reasons[5]]


# ---------------------------------------------------------------------------------- going on


@pytest.mark.parametrize("done", [(), (0,), (1,), (0, 2), (0, 1, 2)], ids=str)
def test_gone_on_with_is_as_undisturbed(
    whole: tuple[Path, str], folder: Path, job: Job, undisturbed: Sweep, done: tuple[int, ...], monkeypatch: pytest.MonkeyPatch
) -> None:
    before = parts(folder)
    for number in {0, 1, 2} - set(done):
        (folder / part_name(number * BLOCK, whole[1])).unlink()
    found, solved = counted_blocks(job, folder, whole[1], monkeypatch)
    assert same_bits(found, undisturbed)
    assert sorted(solved) == [number * BLOCK for number in range(3) if number not in done]
    assert parts(folder) == before


def test_a_stop_keeps_what_is_done(job: Job, undisturbed: Sweep, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Ctrl-C after the second block: what was given out is there, and the rest is done the next time."""
    before = threading.active_count()

    def told(done: int, count: int) -> None:
        assert count == 300
        if done > BLOCK:
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        run_into(job, tmp_path, workers=2, told=told)
    assert threading.active_count() == before
    there = parts(tmp_path)
    assert len(there) == 2
    assert len(read_sweep(tmp_path)) in (2 * BLOCK, BLOCK + 300 - 2 * BLOCK), "what is there can be read before it is finished"
    found, solved = counted_blocks(job, tmp_path, CSV, monkeypatch)
    assert same_bits(found, undisturbed) and len(solved) == 1
    assert there.items() <= parts(tmp_path).items()


def test_an_error_in_between_keeps_what_is_done(job: Job, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A full disk at the second part."""
    there = sweep_parts.write_bytes
    calls: list[Path] = []

    def full(path: Path, content: bytes) -> Path:
        calls.append(path)
        if len(calls) == 2:
            raise OutputError("no space left")
        return there(path, content)

    monkeypatch.setattr(sweep_parts, "write_bytes", full)
    before = threading.active_count()
    with pytest.raises(OutputError, match="no space left"):
        run_into(job, tmp_path, workers=2)
    assert threading.active_count() == before and len(parts(tmp_path)) == 1


def test_how_far_it_is_counts_what_was_there(whole: tuple[Path, str], folder: Path, job: Job) -> None:
    (folder / part_name(0, whole[1])).unlink()
    told: list[int] = []
    run_into(job, folder, form=whole[1], workers=1, told=lambda done, count: told.append(done))
    assert told == [128, 172, 300]


def test_what_a_killed_run_left_half_written_is_cleared(whole: tuple[Path, str], folder: Path, job: Job) -> None:
    left = [folder / f".{part_name(0, whole[1])}.abc_1234.part", folder / ".sweep.json.zz9.part"]
    others = [folder / ".mine.part", folder / "notes.part", folder / ".part_1.csv.x.part"]
    for file in (*left, *others):
        file.write_bytes(b"half")
    run_into(job, folder, form=whole[1], workers=1)
    assert not any(file.exists() for file in left) and all(file.exists() for file in others)


def test_files_of_others_are_left_alone(whole: tuple[Path, str], folder: Path, job: Job, undisturbed: Sweep) -> None:
    others = ["notes.txt", "part_1.csv", "part_000000002.csv", f"part_000000513.{whole[1]}", "part_000000001.csv.bak"]
    for name in others:
        (folder / name).write_text("case,margin\n2,17\n")
    (folder / "part_000000005.parquet").mkdir()
    assert same_bits(run_into(job, folder, form=whole[1], workers=1), undisturbed)
    assert all((folder / name).read_text() == "case,margin\n2,17\n" for name in others)
    assert len(read_sweep(folder)) == 300


# ---------------------------------------------------------------------------------- damage


def truncated(content: bytes) -> bytes:
    return content[: len(content) // 2]


def last_digits(content: bytes) -> bytes:
    return content[:-3]


def edited(content: bytes) -> bytes:
    """Another number in the place of one, of the same length."""
    at = content.find(b"optimal", 4)
    return content[:at] + b"OPTIMAL" + content[at + 7 :]


def emptied(content: bytes) -> bytes:
    return b""


def no_text(content: bytes) -> bytes:
    return b"\xff\xfe\x00case" * 10


def renamed(content: bytes) -> bytes:
    return content.replace(b"margin", b"Margin")


@pytest.mark.parametrize("damage", [truncated, last_digits, edited, emptied, no_text, renamed])
def test_a_damaged_part_is_done_again(
    whole: tuple[Path, str],
    folder: Path,
    job: Job,
    undisturbed: Sweep,
    damage: Callable[[bytes], bytes],
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    before = parts(folder)
    part = folder / part_name(BLOCK, whole[1])
    assert damage(part.read_bytes()) != part.read_bytes()
    part.write_bytes(damage(part.read_bytes()))
    with pytest.raises(OutputError, match=r"is damaged: it is not what parts\.sha256 lists"):
        read_sweep(folder)
    found, solved = counted_blocks(job, folder, whole[1], monkeypatch)
    assert same_bits(found, undisturbed) and solved == [BLOCK]
    assert parts(folder) == before


def test_a_part_of_another_sweep_is_done_again(
    march: Plan, whole: tuple[Path, str], folder: Path, job: Job, tmp_path: Path
) -> None:
    """Same name, same columns, another base: as if somebody had copied it in."""
    base = make_plan(march.scenario.with_({"outlets.c5_sale.max": "11 kt"}))
    other = prepare(some(base, 300, labels=job.cases.labels), MEASURES, base)
    run_into(other, tmp_path / "other", form=whole[1], workers=1)
    before = parts(folder)
    shutil.copy(tmp_path / "other" / part_name(0, whole[1]), folder)
    run_into(job, folder, form=whole[1], workers=1)
    assert parts(folder) == before


@pytest.mark.parametrize("left", ["", "0123", "garbage\n"])
def test_a_list_of_parts_that_is_torn_costs_work_and_nothing_else(
    whole: tuple[Path, str], folder: Path, job: Job, undisturbed: Sweep, left: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    lines = (folder / "parts.sha256").read_text().splitlines(keepends=True)
    (folder / "parts.sha256").write_text("".join(lines[:2]) + left)
    found, solved = counted_blocks(job, folder, whole[1], monkeypatch)
    assert same_bits(found, undisturbed) and len(solved) == 1
    again, solved = counted_blocks(job, folder, whole[1], monkeypatch)
    assert same_bits(again, undisturbed) and solved == []


# ---------------------------------------------------------------------------------- other sweeps


def test_another_sweep_is_refused_and_says_what_differs(march: Plan, whole: tuple[Path, str], folder: Path, job: Job) -> None:
    form, before = whole[1], {file.name: file.read_bytes() for file in folder.iterdir()}
    cases = job.cases
    values = cases.values.copy()
    values[299, 0] += 1e-9
    other_limit = make_plan(march.scenario.with_({"outlets.c5_sale.max": "11 kt"}))
    other_bound = make_plan(march.scenario.with_({"outlets.ethylene_spot.max": "15 kt"}))
    other_case = make_plan(march.scenario.with_(price_case="High crude"))
    others = {
        "the values of its cases are others": replace(job, cases=replace(cases, values=values)),
        "it has 300 cases, not 299; the values of its cases are others": prepare(some(march, 299), MEASURES, march),
        "its price case is `Base`, not `High crude`; the numbers of its scenario or plant are others": replace(
            job, base=other_case
        ),
        "other numbers vary": replace(job, cases=replace(cases, percent=(True, False, False))),
        "other measures are read out": prepare(cases, ["feeds"], march),
        "its cases are of the kind `table`, not `grid`": replace(job, cases=replace(cases, how="grid")),
        "its note is ``, not `seed 7`": replace(job, cases=replace(cases, note="seed 7")),
    }
    for words, other in others.items():
        with pytest.raises(OtherSweep) as error:
            run_into(other, folder, form=form)
        assert f"holds another sweep: {words}\n" in str(error.value)
        assert str(error.value).endswith("hint: name a new folder, or put back what was changed")
    for base in (other_limit, other_bound):
        with pytest.raises(OtherSweep, match="the numbers of its scenario or plant are others"):
            run_into(replace(job, base=base), folder, form=form)
    with pytest.raises(OtherSweep, match="its parts are"):
        run_into(job, folder, form=PARQUET if form == CSV else CSV)
    assert {file.name: file.read_bytes() for file in folder.iterdir()} == before


def test_a_changed_file_is_named(tmp_path: Path) -> None:
    """A note in a table is no number of the program, and still another input."""
    for name in ("models", "scenarios"):
        shutil.copytree(ROOT / name, tmp_path / name)
    scenario = tmp_path / "scenarios" / "brackwater_2031_03.yaml"
    vary = {"feeds.ethane.contract": [40, 41]}
    sweep_into(tmp_path / "out", read_scenario(scenario), vary, measures=["feeds"], workers=1)
    table = tmp_path / "models" / "brackwater" / "yields.csv"
    table.write_text(table.read_text(encoding="utf-8").replace("assumed: invented", "assumed: made up"), encoding="utf-8")
    with pytest.raises(OtherSweep, match=r"holds another sweep: changed since: \.\./models/brackwater/yields\.csv\nhint"):
        sweep_into(tmp_path / "out", read_scenario(scenario), vary, measures=["feeds"], workers=1)


def test_the_folder_from_which_it_is_started_does_not_matter(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    vary = {"feeds.ethane.contract": [40, 41]}
    monkeypatch.chdir(ROOT)
    first = sweep_into(tmp_path / "out", read_scenario("scenarios/brackwater_2031_03.yaml"), vary, measures=["feeds"])
    monkeypatch.chdir(ROOT / "scenarios")
    again = sweep_into(tmp_path / "out", read_scenario("brackwater_2031_03.yaml"), vary, measures=["feeds"])
    assert np.array_equal(numbers_of(first), numbers_of(again), equal_nan=True)


@pytest.mark.parametrize("text", ["", "{", "[1]", "7", '{"hash": "no"}', "\xff"])
def test_a_description_that_is_none_is_refused(job: Job, tmp_path: Path, text: str) -> None:
    (tmp_path / "sweep.json").write_text(text, encoding="latin-1")
    with pytest.raises(OtherSweep, match="hint: name a new folder"):
        run_into(job, tmp_path)
    assert (tmp_path / "sweep.json").read_text(encoding="latin-1") == text


def test_parts_without_a_description_are_refused(job: Job, folder: Path, whole: tuple[Path, str]) -> None:
    (folder / "sweep.json").unlink()
    with pytest.raises(OtherSweep, match=r"holds parts of a sweep, but no sweep\.json"):
        run_into(job, folder, form=whole[1])


def test_what_cannot_be_written_or_read_says_so(job: Job, tmp_path: Path) -> None:
    with pytest.raises(OutputError, match="`xlsx` is no form of part files; known: csv, parquet"):
        run_into(job, tmp_path / "new", form="xlsx")
    assert not (tmp_path / "new").exists()
    (tmp_path / "file").write_text("")
    with pytest.raises(OutputError, match="is no folder that can be written to"):
        run_into(job, tmp_path / "file")
    for folder in (tmp_path / "nowhere", tmp_path, tmp_path / "file"):
        with pytest.raises(OutputError, match="holds no parts of a sweep"):
            read_sweep(folder)


def test_without_a_list_parts_are_still_read(folder: Path, whole: tuple[Path, str]) -> None:
    """Somebody may have taken the parts alone; of what is cut short he hears."""
    (folder / "parts.sha256").unlink()
    assert len(read_sweep(folder)) == 300
    part = folder / part_name(0, whole[1])
    part.write_bytes(part.read_bytes()[: len(part.read_bytes()) // 2])
    with pytest.raises(OutputError, match="is damaged"):
        read_sweep(folder)


def test_what_a_part_takes_does_not_grow_with_the_sweep(job: Job, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The table of all results is made once, at the end; each part from its own block."""
    made: list[int] = []
    there = sweep_parts.gathered
    monkeypatch.setattr(sweep_parts, "gathered", lambda *arguments: made.append(1) or there(*arguments))
    run_into(job, tmp_path, workers=1)
    assert made == [1]


# ---------------------------------------------------------------------------------- killed


KILLED = """
import sys, time
sys.path[:0] = [{tests!r}, {root!r}]
from pathlib import Path
from sweeps import some
from olefinlp import make_plan, read_scenario
from olefinlp.answers.sweep import prepare
from olefinlp.outputs.sweep_parts import run_into
plan = make_plan(read_scenario({march!r}))
run_into(prepare(some(plan, 2000), {measures}, plan), Path({folder!r}), workers=2, told=lambda *_: time.sleep(0.02))
"""


@pytest.mark.slow
def test_killed_again_and_again_it_ends_as_undisturbed(march: Plan, tmp_path: Path) -> None:
    """kill -9 eight times, at random moments after the first new part; no part that was there is lost or changed."""
    job = prepare(some(march, 2000), MEASURES, march)
    expected = gathered(job, run_sweep(job, workers=1))
    folder, moments = tmp_path / "swept", random.Random(31)
    paths = {"tests": str(TESTS), "root": str(ROOT), "march": str(ROOT / "scenarios" / MARCH), "folder": str(folder)}
    script = KILLED.format(**paths, measures=MEASURES)
    kept: dict[str, bytes] = {}
    kills = 0
    for _ in range(8):
        with subprocess.Popen([sys.executable, "-c", script]) as process:
            while process.poll() is None and len(list(folder.glob("part_*"))) <= len(kept):
                time.sleep(0.002)
            time.sleep(moments.uniform(0, 0.06))
            kills += process.poll() is None
            process.kill()
        now = parts(folder)
        assert kept.items() <= now.items() and len(now) > len(kept)
        frame = read_sweep(folder)
        assert np.array_equal(frame["margin"], expected.margin[frame["case"] - 1], equal_nan=True)
        assert len(frame) == sum(min(BLOCK, 2001 - int(name[5:14])) for name in now)
        kept = now
    assert kills == 8, "the sweep was done before it was killed"
    assert same_bits(run_into(job, folder, workers=2), expected)
    assert kept.items() <= parts(folder).items()
    assert not list(folder.glob(".*"))
    assert np.array_equal(read_sweep(folder)["margin"], expected.margin, equal_nan=True)
