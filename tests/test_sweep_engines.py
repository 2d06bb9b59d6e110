"""Who solves the cases of a sweep, in which order and beside which others, changes not one bit of what is found."""

from __future__ import annotations

import contextlib
import hashlib
import multiprocessing
import os
import pickle
import resource
import signal
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from conftest import ROOT, TESTS
from plants import dense_lp
from sweeps import ALL, MARCH, NAN, mixed, numbers_of, priced, rows, same_bits, solved

from olefinlp.answers import sweep as sweep_module
from olefinlp.answers.plan import Plan
from olefinlp.answers.sweep import AHEAD, PROCESSES, THREADS, Job, Sweep, gathered, prepare, run_sweep
from olefinlp.lp import sweep as lp_module
from olefinlp.lp.certificate import Certificate
from olefinlp.lp.compile import Lines
from olefinlp.lp.neighbours import NeighbourError
from olefinlp.lp.sweep import (
    BLOCK,
    CHOOSE,
    ENDLESS,
    IMPOSSIBLE,
    NO_CASE,
    OPTIMAL,
    UNPROVEN,
    Block,
    Readings,
    Sweeper,
    read_values,
    solve_block,
    sums_of,
    sweep_program,
)

INF = float("inf")
PATHS = {"tests": str(TESTS), "root": str(ROOT), "march": str(ROOT / "scenarios" / MARCH)}


@pytest.fixture(scope="module")
def job(march: Plan) -> Job:
    """300 cases, some without a plan: two blocks and a part of one."""
    return prepare(mixed(march, 300), ALL, march)


@pytest.fixture(scope="module")
def by_one(job: Job) -> Sweep:
    return gathered(job, run_sweep(job, workers=1))


def test_all_kinds_of_cases_are_there(by_one: Sweep) -> None:
    assert by_one.shared and set(by_one.status) == {OPTIMAL, IMPOSSIBLE, NO_CASE}
    assert (by_one.status == OPTIMAL).sum() > 100
    assert all(by_one.reason(n) for n in np.flatnonzero(by_one.status != OPTIMAL))


# ---------------------------------------------------------------------------------- order and company


def test_the_order_of_the_cases_changes_nothing(job: Job, by_one: Sweep, march: Plan) -> None:
    order = np.random.default_rng(5).permutation(300)
    again = solved(rows(job.cases, order), base=march)
    assert np.array_equal(numbers_of(again), numbers_of(by_one)[order], equal_nan=True)
    assert [again.reason(at) for at in range(300)] == [by_one.reason(n) for n in order]


def test_a_case_alone_is_the_case_in_its_block(job: Job, by_one: Sweep) -> None:
    """Margins, readings, what clashes and what is proven: from programs newly loaded, and from one after others."""
    assert job.program and job.terms
    used = Sweeper(job.program)
    for number in (0, 1, 7, 127, 128, 200, 299, *np.flatnonzero(by_one.status == IMPOSSIBLE)[:3].tolist()):
        block = job.terms.block(number, 1)
        for alone in (solve_block(job.program, block), used.solve(block)):
            if by_one.status[number] == NO_CASE:
                continue  # what a program says of it is not looked at
            assert alone.status[0] == by_one.status[number]
            assert np.array_equal(alone.margin, by_one.margin[number : number + 1], equal_nan=True)
            assert np.array_equal(alone.readings[0], by_one.readings[number], equal_nan=True)


@pytest.mark.parametrize("cut", [1, 3, 77, 300])
def test_where_a_block_is_cut_changes_nothing(job: Job, by_one: Sweep, cut: int, monkeypatch: pytest.MonkeyPatch) -> None:
    """Blocks of one case are slow, so of the first 36 alone."""
    monkeypatch.setattr(sweep_module, "BLOCK", cut)
    part = replace(job, cases=rows(job.cases, range(36 if cut < 4 else 300)))
    found = gathered(part, run_sweep(part, workers=1))
    assert np.array_equal(numbers_of(found), numbers_of(by_one)[: len(found)], equal_nan=True)


def test_prices_alone_do_not_depend_on_what_else_is_swept(march: Plan) -> None:
    """Also what is held; each case as a sweep of its own."""
    cases = priced(march, 150)
    found = solved(cases, base=march)
    for number in (0, 64, 127, 128, 149):
        alone = solved(rows(cases, [number]), base=march)
        assert np.array_equal(numbers_of(alone)[0], numbers_of(found)[number], equal_nan=True)
    assert not np.isnan(found.held).any()


def test_sums_do_not_depend_on_the_lines_beside() -> None:
    """Long sums, one line and 128 at once; empty sums, a column in two of them, scales."""
    draws = np.random.default_rng(3)
    columns = [draws.choice(500, size, replace=False).tolist() for size in (300, 0, 1, 77, 0, 130)]
    scales = [1.0, 2.0, 0.001, 3.0, 1.0, 7.0]
    sums = sums_of(columns, scales)
    readings = Readings(sums, np.zeros(0, np.int32), np.array([3], np.int32), np.array([1000.0]))
    x, y = draws.standard_normal((128, 500)), draws.standard_normal((128, 4))
    found = read_values(readings, x, y, np.empty((128, 0)))
    for line in range(128):
        alone = read_values(readings, x[line : line + 1], y[line : line + 1], np.empty((1, 0)))
        assert np.array_equal(alone[0], found[line])
        expected = [scale * x[line, own].sum() for own, scale in zip(columns, scales, strict=True)]
        assert alone[0] == pytest.approx([*expected, 1000 * abs(y[line, 3])], rel=1e-12, abs=1e-12)
    assert isinstance(sums, Lines) and readings.count == 7
    nothing = read_values(replace(readings, sums=sums_of([[0]], [1.0])), np.array([[-0.0]]), y[:1], np.empty((1, 0)))
    assert not np.signbit(nothing).any()
    assert read_values(replace(readings, sums=sums_of([], [])), x, y, np.empty((128, 0))).shape == (128, 1)


# ---------------------------------------------------------------------------------- workers


@pytest.mark.parametrize("workers", [2, 4])
def test_threads_find_the_same(job: Job, by_one: Sweep, workers: int) -> None:
    before = threading.active_count()
    assert same_bits(gathered(job, run_sweep(job, workers=workers)), by_one)
    assert threading.active_count() == before


def test_a_program_that_was_sent_finds_the_same(job: Job, by_one: Sweep) -> None:
    assert job.program and job.terms
    program, block = pickle.loads(pickle.dumps((job.program, job.terms.block(128, BLOCK))))
    there = solve_block(program, block)
    valid = by_one.status[128:256] != NO_CASE
    assert np.array_equal(there.readings[valid], by_one.readings[128:256][valid], equal_nan=True)


def test_blocks_that_are_done_are_passed_over(job: Job, by_one: Sweep) -> None:
    found = {block.first: block for block, _ in run_sweep(job, workers=1, skip=iter([0, 256]))}
    assert list(found) == [128]
    assert np.array_equal(found[128].readings, by_one.readings[128:256], equal_nan=True)


class Later:
    """A future of a cluster that is no future of Python's own."""

    def __init__(self, function: Callable[..., Any], *arguments: Any) -> None:
        self.work = (function, *arguments)

    def done(self) -> bool:
        return False

    def result(self) -> Any:
        function, *arguments = self.work
        return function(*arguments)

    def cancel(self) -> None:
        self.work = (None,)


class Elsewhere:
    """A cluster of one, which sends all that it is given."""

    def __init__(self) -> None:
        self.submitted: list[Later] = []

    def scatter(self, data: Any, /, **options: Any) -> Any:
        assert options == {"broadcast": True, "hash": False}
        return data

    def submit(self, function: Callable[..., Any], /, *arguments: Any, **options: Any) -> Later:
        assert options == {"pure": False}
        self.submitted.append(Later(*pickle.loads(pickle.dumps((function, *arguments)))))
        return self.submitted[-1]


def test_a_cluster_finds_the_same(job: Job, by_one: Sweep) -> None:
    assert same_bits(gathered(job, run_sweep(job, engine=Elsewhere())), by_one)


def test_a_cluster_is_told_to_stop(job: Job) -> None:
    cluster = Elsewhere()
    running = run_sweep(job, engine=cluster)
    next(running)
    running.close()
    assert len(cluster.submitted) == 3
    assert sum(later.work == (None,) for later in cluster.submitted) == 2


def test_the_size_of_a_cluster_is_asked_for() -> None:
    class Sized(Elsewhere):
        def ncores(self) -> dict[str, int]:
            return {"one": 4, "two": 8}

    assert sweep_module._size_of(Sized()) == 12 and sweep_module._size_of(Elsewhere()) == 1


@pytest.mark.parametrize(
    ("options", "words"),
    [
        ({"engine": "thread"}, "`thread` is no engine; known: threads, processes, or a client of a cluster"),
        ({"engine": "thread", "workers": 1}, "`thread` is no engine"),
        ({"workers": 0}, "0 workers cannot solve anything"),
        ({"workers": -2}, "-2 workers cannot solve anything"),
    ],
)
def test_an_engine_that_is_none_is_refused_at_once(job: Job, options: dict[str, Any], words: str) -> None:
    with pytest.raises(ValueError, match=words):
        run_sweep(job, **options)


@pytest.mark.slow
def test_processes_find_the_same(job: Job, by_one: Sweep) -> None:
    for workers in (2, 4):
        assert same_bits(gathered(job, run_sweep(job, workers=workers, engine=PROCESSES)), by_one)
    assert not multiprocessing.active_children()


@pytest.mark.slow
def test_a_dask_cluster_finds_the_same(job: Job, by_one: Sweep) -> None:
    """Workers in processes of their own, with two threads each; those limit the threads of numerical libraries to one."""
    from distributed import Client, LocalCluster

    with (
        LocalCluster(n_workers=2, threads_per_worker=2, dashboard_address=None) as cluster,  # type: ignore[no-untyped-call]
        Client(cluster) as client,  # type: ignore[no-untyped-call]
    ):
        assert same_bits(gathered(job, run_sweep(job, engine=client)), by_one)
        running = run_sweep(job, engine=client)
        next(running)
        running.close()
        assert same_bits(gathered(job, run_sweep(job, engine=client)), by_one)


OWN_PROCESS = """
import hashlib, sys
sys.path[:0] = [{tests!r}, {root!r}]
from sweeps import ALL, mixed, numbers_of
from olefinlp import make_plan, read_scenario
from olefinlp.answers.sweep import gathered, prepare, run_sweep
plan = make_plan(read_scenario({march!r}))
job = prepare(mixed(plan, 150), ALL, plan)
found = gathered(job, run_sweep(job, workers={workers}))
print(hashlib.sha256(numbers_of(found).tobytes() + repr(sorted(found.reasons.items())).encode()).hexdigest())
"""


@pytest.mark.slow
def test_processes_of_their_own_find_the_same() -> None:
    """Two processes, in which sets and hashes have another order, with one worker and with two."""
    digests = []
    for seed, workers in (("0", 1), ("1", 2)):
        text = OWN_PROCESS.format(**PATHS, workers=workers)
        done = subprocess.run(
            [sys.executable, "-c", text], env={**os.environ, "PYTHONHASHSEED": seed}, capture_output=True, text=True, check=True
        )
        digests.append(done.stdout.split()[-1])
    assert len(set(digests)) == 1 and len(digests[0]) == len(hashlib.sha256().hexdigest())


# ---------------------------------------------------------------------------------- stopping


def test_nothing_is_put_together_far_ahead(job: Job, monkeypatch: pytest.MonkeyPatch) -> None:
    """Of 75 blocks of 4 cases a few wait for each of 2 workers while nobody takes what is done."""
    assert job.terms
    made: list[int] = []
    there = job.terms.block
    monkeypatch.setattr(job.terms, "block", lambda first, count: made.append(first) or there(first, count))
    monkeypatch.setattr(sweep_module, "BLOCK", 4)
    running = run_sweep(job, workers=2)
    next(running)
    time.sleep(0.3)
    assert len(made) <= AHEAD * 2 + 1
    running.close()
    assert len(made) <= AHEAD * 2 + 1


@pytest.mark.parametrize("workers", [1, 2])
def test_closing_stops_the_workers(job: Job, workers: int, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(sweep_module, "BLOCK", 4)
    before = threading.active_count()
    running = run_sweep(job, workers=workers)
    next(running)
    running.close()
    assert threading.active_count() == before
    assert list(running) == []


@pytest.mark.parametrize("error", [KeyboardInterrupt, KeyError])
def test_an_error_of_who_takes_the_results_stops_the_workers(
    march: Plan, error: type[BaseException], monkeypatch: pytest.MonkeyPatch
) -> None:
    """Even while the error is held, with all that it leads to."""
    monkeypatch.setattr(sweep_module, "BLOCK", 16)
    before = threading.active_count()

    def told(done: int, count: int) -> None:
        raise error

    with pytest.raises(error) as held:
        sweep_module.sweep(march, priced(march, 300), workers=2, told=told)
    assert threading.active_count() == before
    assert held.value is not None


def test_an_error_of_a_worker_is_the_error_of_the_sweep(job: Job, monkeypatch: pytest.MonkeyPatch) -> None:
    there = Sweeper.solve

    def broken(self: Sweeper, block: Block) -> Any:
        if block.first == 128:
            raise ArithmeticError("the second block cannot be solved")
        return there(self, block)

    monkeypatch.setattr(Sweeper, "solve", broken)
    before = threading.active_count()
    for workers in (1, 2):
        with pytest.raises(ArithmeticError, match="the second block cannot be solved"):
            gathered(job, run_sweep(job, workers=workers))
    assert threading.active_count() == before


@pytest.mark.slow
def test_processes_that_cannot_begin_say_so(job: Job) -> None:
    assert job.program
    broken = replace(job.program, row_status=None)  # type: ignore[arg-type]
    with pytest.raises(RuntimeError, match=r'a worker process ended before its work was done\nhint: .*__name__ == "__main__"'):
        gathered(job, run_sweep(replace(job, program=broken), workers=2, engine=PROCESSES))
    assert not multiprocessing.active_children()


INTERRUPTED = """
import sys
sys.path[:0] = [{tests!r}, {root!r}]

if __name__ == "__main__":
    from pathlib import Path
    from sweeps import ALL, priced
    from olefinlp import make_plan, read_scenario
    from olefinlp.answers.sweep import prepare
    from olefinlp.outputs.sweep_parts import run_into
    plan = make_plan(read_scenario({march!r}))
    job = prepare(priced(plan, 200_000), ALL, plan)
    try:
        run_into(job, Path({folder!r}), workers=2, engine={engine!r}, told=lambda done, count: print(done, flush=True))
    except KeyboardInterrupt:
        print("stopped", flush=True)
"""


def _runs_in(group: int, process: Path) -> bool:
    """Whether a process of a group still runs, and is not one that nobody has asked for its end."""
    with contextlib.suppress(OSError):
        state, _, own = (process / "stat").read_text().rpartition(")")[2].split()[:3]
        return int(own) == group and state != "Z"
    return False


@pytest.mark.slow
@pytest.mark.parametrize("engine", [THREADS, PROCESSES])
def test_control_c_stops_soon_and_keeps_what_is_done(tmp_path: Path, engine: str) -> None:
    """As a terminal sends it, to all processes at once: no part is lost, no process left, no word of the workers."""
    script = tmp_path / "swept.py"
    script.write_text(INTERRUPTED.format(**PATHS, folder=str(tmp_path / "out"), engine=engine))
    pipes = {"stdout": subprocess.PIPE, "stderr": subprocess.PIPE}
    with subprocess.Popen([sys.executable, str(script)], text=True, start_new_session=True, **pipes) as process:  # type: ignore[call-overload]
        try:
            seen = [process.stdout.readline() for _ in range(3)]
            os.killpg(process.pid, signal.SIGINT)
            began = time.monotonic()
            out, errors = process.communicate(timeout=60)
        finally:
            with contextlib.suppress(ProcessLookupError):
                os.killpg(process.pid, signal.SIGKILL)
    assert time.monotonic() - began < 20 and process.returncode == 0
    assert out.splitlines()[-1] == "stopped" and errors == ""
    counts = [int(line) for line in (*seen, *out.splitlines()[:-1])]
    parts = list((tmp_path / "out").glob("part_*.csv"))
    assert len(parts) * BLOCK >= counts[-1] > 0 and len(parts) < 1000
    assert not any(_runs_in(process.pid, one) for one in Path("/proc").iterdir() if one.name.isdigit())


# ---------------------------------------------------------------------------------- what is proven


def small_program() -> tuple[Any, Sweeper]:
    """max 3 a + 2 b with a + b ≤ 4, a − b ≤ 2, b ≤ 3: a = 3, b = 1, margin 11, duals 2.5 and 0.5."""
    lp = dense_lp([3.0, 2.0], {("sum",): (-INF, [1.0, 1.0], 4.0), ("difference",): (-INF, [1.0, -1.0], 2.0)}, [(0, INF), (0, 3)])
    readings = Readings(sums_of([[0], [0, 1]], [1.0, 1.0]), np.array([0, 1], np.int32), np.array([0], np.int32), np.array([1.0]))
    program = sweep_program(lp, readings, CHOOSE)
    return program, Sweeper(program)


def small_block(cost: list[float], sums: list[float], ratio: list[float] | None = None) -> Block:
    """Cases of that program: the price of a, the maximum of the sum, and what of b counts in the sum."""
    none, count = np.zeros(0, np.int32), len(cost)
    entries = np.array([1], np.int32) if ratio else none
    return Block(
        *(0, count, np.array([0], np.int32), np.array(cost)[:, None]),
        *(np.array([0], np.int32), np.full((count, 1), -INF), np.array(sums)[:, None]),
        *(none, np.empty((count, 0)), np.empty((count, 0))),
        *(entries, np.array(ratio)[:, None] if ratio else np.empty((count, 0))),
    )


def test_a_small_program_by_hand() -> None:
    """At 3 and 4 as above. With a free, b = 3. With the sum at most 6: a = 4, b = 2. A sum below −1 is not possible. With b
    at half weight in a sum of 4, b = 3 and a = 5/2, at 3 for each of the sum. Shares: a + b over its maximum, a − b over 2."""
    _, sweeper = small_program()
    found = sweeper.solve(small_block([3.0, 0.0, 3.0, 3.0], [4.0, 4.0, 6.0, -1.0]))
    assert found.status.tolist() == [OPTIMAL, OPTIMAL, OPTIMAL, IMPOSSIBLE]
    assert found.margin == pytest.approx([11, 6, 16, NAN], nan_ok=True)
    assert found.held == pytest.approx([11, 2, 11, NAN], nan_ok=True)
    assert found.readings[0] == pytest.approx([3, 4, 1, 1, 2.5])
    assert found.readings[2] == pytest.approx([4, 6, 1, 1, 2.5])
    half = sweeper.solve(small_block([3.0], [4.0], [0.5]))
    assert half.readings[0] == pytest.approx([2.5, 5.5, 1, -0.25, 3])
    assert half.margin == pytest.approx([13.5])


def test_an_end_that_is_none(monkeypatch: pytest.MonkeyPatch) -> None:
    """Without a maximum of the sum a ≤ b + 2 and b ≤ 3 still end it; b without a price and a maximum of the sum do not matter."""
    lp = dense_lp([-1.0, 2.0], {("sum",): (-INF, [1.0, -1.0], 4.0)}, [(0, INF), (0, 3)])
    readings = Readings(sums_of([[0]], [1.0]), np.zeros(0, np.int32), np.zeros(0, np.int32), np.zeros(0))
    sweeper = Sweeper(sweep_program(lp, readings, CHOOSE))
    assert sweeper.solve(small_block([-1.0, 1.0], [4.0, INF])).status.tolist() == [OPTIMAL, ENDLESS]
    assert sweeper.solve(small_block([-1.0, 1.0], [4.0, 4.0])).margin == pytest.approx([6, 13])


def test_a_base_without_a_plan_is_an_error() -> None:
    lp = dense_lp([1.0], {("sum",): (-INF, [1.0], -1.0)})
    with pytest.raises(NeighbourError, match="the base has no optimum"):
        sweep_program(lp, Readings(sums_of([], []), *(np.zeros(0, np.int32),) * 2, np.zeros(0)), CHOOSE)


def test_every_optimum_is_proven(job: Job, monkeypatch: pytest.MonkeyPatch) -> None:
    """One certificate for each."""
    assert job.program and job.terms
    made: list[int] = []
    there = lp_module.certificates
    monkeypatch.setattr(lp_module, "certificates", lambda lp, some: made.append(len(some)) or there(lp, some))
    found = solve_block(job.program, job.terms.block(0, BLOCK))
    assert sum(made) == (found.status == OPTIMAL).sum() > 50


@pytest.fixture
def stuck(monkeypatch: pytest.MonkeyPatch) -> Iterator[None]:
    """A solver that from a basis gives the base's optimum, whatever is asked."""

    class Base:
        col_value, row_dual = (3.0, 1.0), (2.5, 0.5)

    there = Sweeper.__init__

    def made(self: Sweeper, program: Any) -> None:
        there(self, program)
        inner, scale = self.solver.highs, self.scale
        Base.col_value = (3.0 * scale, 1.0 * scale)

        class Stuck:
            def __getattr__(self, name: str) -> Any:
                return getattr(inner, name)

            def getSolution(self) -> Any:
                return Base

        self.solver.highs = Stuck()  # type: ignore[assignment]

    monkeypatch.setattr(Sweeper, "__init__", made)
    return  # type: ignore[return-value]


@pytest.mark.parametrize("block", [([0.0], [4.0]), ([3.0], [3.5]), ([3.0], [6.0]), ([3.0], [4.0], [0.5])], ids=str)
def test_the_certificate_is_of_the_case(stuck: None, block: Any) -> None:
    """Price, limit or coefficient: a wrong optimum is not believed, and solved again on a program loaded anew."""
    program, sweeper = small_program()
    expected = {(0.0, 4.0): 6.0, (3.0, 3.5): 9.75, (3.0, 6.0): 16.0}
    found = sweeper.solve(small_block(*block))
    assert found.status.tolist() == [OPTIMAL]
    assert found.margin == pytest.approx([13.5 if len(block) == 3 else expected[block[0][0], block[1][0]]])
    assert program.lp is sweeper.lp


def test_what_cannot_be_proven_is_said_to_be_so(job: Job, monkeypatch: pytest.MonkeyPatch) -> None:
    """No certificate holds: neither from the basis nor from nothing."""
    assert job.program and job.terms

    def none(lp: Any, some: Any) -> list[Certificate]:
        return [Certificate(1.0, 0.0, 0.0, 0.0, 0.0, "row") for _ in some]

    monkeypatch.setattr(lp_module, "certificates", none)
    monkeypatch.setattr("olefinlp.lp.certificate.certificates", none)
    found = solve_block(job.program, job.terms.block(0, 6))
    assert set(found.status) <= {UNPROVEN, IMPOSSIBLE} and UNPROVEN in found.status
    assert np.isnan(found.margin).all() and np.isnan(found.readings).all()


# ---------------------------------------------------------------------------------- memory

BIG = """
import resource, sys
sys.path[:0] = [{tests!r}, {root!r}]
from sweeps import priced
from olefinlp import make_plan, read_scenario
from olefinlp.answers.sweep import gathered, prepare, run_sweep
plan = make_plan(read_scenario({march!r}))
job = prepare(priced(plan, 20_000), ["feeds"], plan)
list(run_sweep(job, workers=2, skip=range(256, 20_000, 128)))
before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
found = gathered(job, run_sweep(job, workers=2))
after = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
print((after - before) * 1024, found.readings.nbytes + 2 * found.margin.nbytes, len(job.base.lp.columns) + len(job.base.lp.rows))
"""


@pytest.mark.slow
def test_twenty_thousand_cases_hold_their_results_and_little_more() -> None:
    """What grows is the table of results, not the plans: values and duals of all cases would be twenty times as much."""
    text = BIG.format(**PATHS)
    done = subprocess.run([sys.executable, "-c", text], capture_output=True, text=True, check=True)
    grown, results, width = map(int, done.stdout.split()[-3:])
    assert resource.RUSAGE_SELF == 0 and results < 4_000_000
    assert 20_000 * width * 8 > 8 * results, "the bound would say nothing"
    assert grown < 4 * results + 12_000_000, (grown, results)
