"""Sweeps: thousands of cases of one scenario, each proven, as one row of a table; stopped and gone on with at will."""

from __future__ import annotations

import contextlib
import os
from collections.abc import Callable, Generator, Iterable, Iterator, Mapping, Sequence
from concurrent.futures import FIRST_COMPLETED, Future, ProcessPoolExecutor, ThreadPoolExecutor, wait
from concurrent.futures.process import BrokenProcessPool
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, Protocol

import numpy as np

from olefinlp.answers.plan import Plan, make_plan
from olefinlp.answers.sweep_own import clash_words, solve_own
from olefinlp.answers.sweep_readings import DEFAULT, ReadOut, read_out
from olefinlp.answers.sweep_terms import OwnPrograms, SweepTerms
from olefinlp.inputs.scenario import Scenario
from olefinlp.inputs.sweep_cases import SweepCases, Values
from olefinlp.inputs.varied import PRICE
from olefinlp.lp.sweep import BLOCK, NO_CASE, OPTIMAL, Block, SolvedBlock, Sweeper, SweepProgram, solve_block, sweep_program

if TYPE_CHECKING:
    import pandas as pd

THREADS, PROCESSES = "threads", "processes"
ENDINGS = {
    0: "optimal",
    1: "no plan: limits clash",
    2: "no plan: the margin has no end",
    3: "not proven",
    4: "no valid case",
}
"""How a case ended, in words."""
AHEAD = 4
"""Blocks that wait for each worker: enough to keep it busy, few enough to stop soon."""


@dataclass(frozen=True)
class Sweep:
    """The results of a sweep: one row a case, in the order of the cases, whoever solved them.

    `margin` and `held` in thousands of the currency, before fixed cost: the best plan's, and what today's plan would
    earn at the prices of the case (its own margin only where nothing but prices vary). `readings` has a column for each of
    `read_out.names`. Where a case has no plan its numbers are not numbers, and `reasons` says why.
    """

    cases: SweepCases
    base: Plan
    read_out: ReadOut
    status: np.ndarray
    margin: Values
    held: Values
    readings: Values
    reasons: Mapping[int, str] = field(default_factory=dict)
    shared: bool = True
    note: str = ""
    """Why the cases could not share a program, where they could not."""

    def __len__(self) -> int:
        return len(self.cases)

    @property
    def currency(self) -> str:
        """ISO code of the money."""
        return self.base.currency

    @property
    def prices_only(self) -> bool:
        """Whether nothing but prices vary, so that today's plan stays possible in every case."""
        return prices_only(self.cases)

    @property
    def failed(self) -> int:
        """How many cases have no plan."""
        return int((self.status != OPTIMAL).sum())

    @property
    def units(self) -> dict[str, str]:
        """Unit of each column of numbers."""
        money = f"k{self.currency}"
        own = {v.name: "%" if p else v.unit for v, p in zip(self.cases.varied, self.cases.percent, strict=True)}
        return {**own, "margin": money, "held": money, **self.read_out.units}

    def reason(self, number: int) -> str:
        """Why a case (from 0) has no plan; empty where it has one."""
        return _reason(self.reasons, number, int(self.status[number]))

    def columns(self, first: int = 0, last: int | None = None) -> dict[str, Any]:
        """Columns of the table, for some rows: case (from 1), label, varied numbers, status, reason, margins, readings."""
        rows = slice(first, len(self) if last is None else min(last, len(self)))
        block = SolvedBlock(first, self.status[rows], self.margin[rows], self.held[rows], self.readings[rows])
        return columns_of(self.cases, self.read_out, block, self.reasons)

    def to_frame(self) -> pd.DataFrame:
        """One row a case: `case` from 1, its `label` if it has one, the varied numbers by their path, how it ended
        (`status`, `reason`), `margin`, `held`, and the readings by their names (`bought.…`, `sold.…`, `worth.…`).
        """
        import pandas as pd

        return pd.DataFrame(self.columns())

    def plan(self, number: int) -> Plan:
        """The whole plan of one case (from 0), made on its own. Raises what `make_plan` raises."""
        return make_plan(self.cases.scenario_of(number))

    def __str__(self) -> str:
        good = self.margin[self.status == OPTIMAL]
        what = ", ".join(varied.name for varied in self.cases.varied[:4]) + (" …" if len(self.cases.varied) > 4 else "")
        text = f"{len(self):,} cases of {self.base.scenario.title}: {what}"
        if len(good):
            text += f"; margin {good.min():,.1f} to {good.max():,.1f} k{self.currency}"
        return text + (f"; {self.failed:,} without a plan" if self.failed else "")

    def _repr_html_(self) -> str:
        """A sweep in a notebook: what it says, and its first rows."""
        import html

        import pandas as pd

        rows = pd.DataFrame(self.columns(0, 10)).to_html(index=False, float_format=lambda value: f"{value:,.4g}")
        return f"<p>{html.escape(str(self))}</p>{rows}"


def columns_of(cases: SweepCases, read: ReadOut, block: SolvedBlock, reasons: Mapping[int, str]) -> dict[str, Any]:
    """Columns of the table for the cases of one block."""
    rows = slice(block.first, block.first + len(block.status))
    found: dict[str, Any] = {"case": np.arange(rows.start, rows.stop) + 1}
    if cases.labels:
        found["label"] = list(cases.labels[rows])
    found |= {varied.name: cases.values[rows, at] for at, varied in enumerate(cases.varied)}
    endings = block.status.tolist()
    found["status"] = [ENDINGS[one].partition(":")[0] for one in endings]
    found["reason"] = [_reason(reasons, number, one) for number, one in enumerate(endings, block.first)]
    found |= {"margin": block.margin, "held": block.held}
    return found | {name: block.readings[:, at] for at, name in enumerate(read.names)}


def _reason(reasons: Mapping[int, str], number: int, status: int) -> str:
    return reasons.get(number, "" if status == OPTIMAL else ENDINGS[status])


def prices_only(cases: SweepCases) -> bool:
    """Whether nothing but prices vary."""
    return all(varied.kind == PRICE for varied in cases.varied)


class Cluster(Protocol):
    """What a sweep needs of an engine that runs functions elsewhere: the client of Dask distributed has it."""

    def submit(self, function: Callable[..., Any], /, *arguments: Any, **options: Any) -> Any:
        """Run a function there; gives a future with `result()`."""

    def scatter(self, data: Any, /, **options: Any) -> Any:
        """Send what every function needs, once."""


Solved = tuple[SolvedBlock, dict[int, str]]
"""A block, and why cases of it have no plan, by their number."""


@dataclass(frozen=True)
class Job:
    """A sweep ready to be solved: cases, base plan, what is read, and how the cases stand in the program."""

    cases: SweepCases
    base: Plan
    read_out: ReadOut
    terms: SweepTerms | None
    program: SweepProgram | None
    note: str = ""

    @property
    def prices_only(self) -> bool:
        """Whether nothing but prices vary."""
        return prices_only(self.cases)


def prepare(cases: SweepCases, measures: Sequence[str] = DEFAULT, base: Plan | None = None) -> Job:
    """The job of a sweep: the plan of today, and the program that all cases share, if they can.

    Raises `NoPlan` when today has none, `ValueError` for an unknown measure.
    """
    base = base or make_plan(cases.scenario)
    read = read_out(base.quantities.case, base.lp, measures)
    try:
        terms = SweepTerms(cases, base)
    except OwnPrograms as why:
        return Job(cases, base, read, None, None, f"every case is solved on a program of its own: {why}")
    return Job(cases, base, read, terms, sweep_program(base.lp, read.arrays, terms.strategy))


def run_sweep(
    job: Job,
    *,
    workers: int | None = None,
    engine: str | Cluster = THREADS,
    skip: Iterable[int] = (),
) -> Generator[Solved, None, None]:
    """Solve block after block; gives each as it is done, with reasons by case, in any order.

    `workers` are as many as there are processors if not given; a cluster has its own. `skip` are first cases of blocks
    that are done already. Raises `ValueError` for an unknown engine, or less than one worker.
    """
    if isinstance(engine, str) and engine not in (THREADS, PROCESSES):
        raise ValueError(f"`{engine}` is no engine; known: {THREADS}, {PROCESSES}, or a client of a cluster")
    if workers is not None and workers < 1:
        raise ValueError(f"{workers} workers cannot solve anything; at least 1")
    done = frozenset(skip)
    firsts = [first for first in range(0, len(job.cases), BLOCK) if first not in done]
    if job.terms is None or job.program is None:
        return _own_blocks(job, firsts)
    return _shared_blocks(job, job.terms, job.program, firsts, workers, engine)


def _own_blocks(job: Job, firsts: Iterable[int]) -> Generator[Solved, None, None]:
    """Blocks of cases that have a program of their own each."""
    for first in firsts:
        yield solve_own(job.cases, job.base, job.read_out, first, min(BLOCK, len(job.cases) - first))


def _shared_blocks(
    job: Job, terms: SweepTerms, program: SweepProgram, firsts: Iterable[int], workers: int | None, engine: str | Cluster
) -> Generator[Solved, None, None]:
    """Blocks of cases on one program; blocks are put together as workers come free."""
    blocks = ((first, terms.block(first, BLOCK)) for first in firsts)
    with contextlib.closing(_solved(program, blocks, workers, engine)) as found:
        for first, solved in found:
            yield _judged(job, solved, *terms.judged(first, BLOCK))


def _judged(job: Job, solved: SolvedBlock, refused: dict[int, str], apart: Iterable[int]) -> Solved:
    """Why cases have no plan; cases that are not valid, whatever the program says, lose their numbers.

    Cases `apart` could not be put together and are solved by themselves.
    """
    case, rows = job.base.quantities.case, job.base.lp.rows
    clashes = {solved.first + at: clash_words(case, [rows[row] for row in found]) for at, found in solved.clashing.items()}
    reasons = {number: words for number, words in clashes.items() if words} | refused
    for number in refused:
        at = number - solved.first
        solved.status[at] = NO_CASE
        solved.margin[at], solved.held[at], solved.readings[at] = np.nan, np.nan, np.nan
    for number in apart:
        own, why = solve_own(job.cases, job.base, job.read_out, number, 1)
        at = number - solved.first
        solved.status[at], solved.margin[at], solved.held[at] = own.status[0], own.margin[0], own.held[0]
        solved.readings[at] = own.readings[0]
        reasons.pop(number, None)
        reasons |= why
    if not job.prices_only:
        solved.held[:] = np.nan  # today's plan may not be possible under other limits
    return solved, reasons


def _solved(
    program: SweepProgram, blocks: Iterator[tuple[int, Block]], workers: int | None, engine: str | Cluster
) -> Generator[tuple[int, SolvedBlock], None, None]:
    """Blocks solved by one worker here, by threads, by processes, or elsewhere."""
    count = workers or os.cpu_count() or 1
    if not isinstance(engine, str):
        sent = engine.scatter(program, broadcast=True, hash=False)  # by content: a sweep that ends would take it from the next
        most = AHEAD * max(count, _size_of(engine))
        yield from _in_flight(lambda block: engine.submit(_solve_once, sent, block, pure=False), blocks, most)
    elif count == 1:
        sweeper = Sweeper(program)
        for first, block in blocks:
            yield first, sweeper.solve(block)
    elif engine == THREADS:
        local = _Local(program)
        with ThreadPoolExecutor(count) as pool:
            yield from _in_flight(lambda block: pool.submit(local.solve, block), blocks, AHEAD * count)
    else:
        yield from _in_processes(program, blocks, count)


def _size_of(engine: Cluster) -> int:
    """How many functions a cluster runs at once, where it says so."""
    cores = getattr(engine, "ncores", None)
    return sum(cores().values()) if cores else 1


def _in_processes(
    program: SweepProgram, blocks: Iterator[tuple[int, Block]], count: int
) -> Generator[tuple[int, SolvedBlock], None, None]:
    """Blocks solved by other processes of this machine."""
    import multiprocessing

    context = multiprocessing.get_context("spawn")  # a forked copy of a running solver is nothing to rely on
    try:
        with ProcessPoolExecutor(count, context, _keep, (program,)) as pool:
            yield from _in_flight(lambda block: pool.submit(_solve_kept, block), blocks, AHEAD * count)
    except BrokenProcessPool as error:
        hint = 'hint: a script that starts processes needs `if __name__ == "__main__":` around its sweep; else use threads'
        raise RuntimeError(f"a worker process ended before its work was done\n{hint}") from error


def _in_flight(
    submit: Callable[[Block], Any], blocks: Iterator[tuple[int, Block]], most: int
) -> Generator[tuple[int, SolvedBlock], None, None]:
    """Blocks handed out as workers come free, given back as they are done; nothing new after a stop."""
    waiting: dict[Any, int] = {}
    try:
        for first, block in blocks:
            waiting[submit(block)] = first
            if len(waiting) >= most:
                yield from _done(waiting)
        while waiting:
            yield from _done(waiting)
    finally:
        for future in waiting:
            with contextlib.suppress(Exception):
                future.cancel()


def _done(waiting: dict[Any, int]) -> Iterator[tuple[int, SolvedBlock]]:
    """Those that are done, at least one."""
    if all(isinstance(future, Future) for future in waiting):
        finished = wait(waiting, return_when=FIRST_COMPLETED).done
    else:
        finished = {future for future in waiting if future.done()} or {next(iter(waiting))}
    for future in finished:
        yield waiting.pop(future), future.result()


class _Local:
    """A loaded program a thread."""

    def __init__(self, program: SweepProgram) -> None:
        import threading

        self.program = program
        self.own = threading.local()

    def solve(self, block: Block) -> SolvedBlock:
        """A block on this thread's program."""
        if not hasattr(self.own, "sweeper"):
            self.own.sweeper = Sweeper(self.program)
        sweeper: Sweeper = self.own.sweeper
        return sweeper.solve(block)


_KEPT: dict[str, Sweeper] = {}
"""The loaded program of this process, where it is a worker."""


def _keep(program: SweepProgram) -> None:
    import signal

    signal.signal(signal.SIGINT, signal.SIG_IGN)  # Ctrl-C reaches all processes of a terminal: the first one ends the others
    _KEPT["sweeper"] = Sweeper(program)


def _solve_kept(block: Block) -> SolvedBlock:
    return _KEPT["sweeper"].solve(block)


def _solve_once(program: SweepProgram, block: Block) -> SolvedBlock:
    return solve_block(program, block)


def gathered(job: Job, solved: Iterable[tuple[SolvedBlock, Mapping[int, str]]]) -> Sweep:
    """The sweep of all blocks, whatever their order."""
    count, names = len(job.cases), job.read_out.names
    status = np.full(count, NO_CASE, dtype=np.int8)
    margin, held = np.full(count, np.nan), np.full(count, np.nan)
    readings = np.full((count, len(names)), np.nan)
    reasons: dict[int, str] = {}
    for block, why in solved:
        rows = slice(block.first, block.first + len(block.status))
        status[rows], margin[rows], held[rows], readings[rows] = block.status, block.margin, block.held, block.readings
        reasons.update(why)
    return Sweep(job.cases, job.base, job.read_out, status, margin, held, readings, reasons, job.terms is not None, job.note)


def sweep(
    scenario: Scenario | Plan,
    vary: Any,
    *,
    how: str | None = None,
    measures: Sequence[str] = DEFAULT,
    workers: int | None = None,
    engine: str | Cluster = THREADS,
    told: Callable[[int, int], object] | None = None,
) -> Sweep:
    """Plan every case of a scenario in which some numbers vary; each optimum is proven.

    `vary` is a mapping of paths to values (a list, a range, `{"percent": […]}`, `{"from": …, "to": …, "step": …}`), a
    table with one row a case (a DataFrame, records, a csv file), or `SweepCases` (see `draw_cases`). `how` is "grid"
    or "one at a time" where several numbers vary. `measures` say what is read out: feeds, products, charges, cuts,
    utilities, stocks, loads, worths. `told` is called with cases done and all.

    Raises `InputError` for a wrong path or value, `NoPlan` when today has no plan.

    >>> from olefinlp import read_scenario, sweep
    >>> march = read_scenario("scenarios/brackwater_2031_03.yaml")
    >>> found = sweep(march, {"feeds.full_range_naphtha.spot_cargo": [500, 534, 560]}, measures=["feeds"])
    >>> [round(bought, 1) for bought in found.to_frame()["bought.full_range_naphtha.spot_cargo"]]
    [75.0, 47.6, 0.0]
    """
    job = job_of(scenario, vary, how, measures)
    with contextlib.closing(run_sweep(job, workers=workers, engine=engine)) as solved:
        return gathered(job, counted(solved, len(job.cases), told))


def job_of(scenario: Scenario | Plan, vary: Any, how: str | None, measures: Sequence[str]) -> Job:
    """The job of what `sweep` is asked for."""
    from olefinlp.inputs.sweep_values import cases_of

    base = scenario if isinstance(scenario, Plan) else None
    today = scenario.scenario if isinstance(scenario, Plan) else scenario
    return prepare(vary if isinstance(vary, SweepCases) else cases_of(today, vary, how), measures, base)


def counted(solved: Iterable[Solved], count: int, told: Callable[[int, int], object] | None) -> Iterator[Solved]:
    """The same blocks, with word of how many cases are done."""
    done = 0
    for block, reasons in solved:
        yield block, reasons
        done += len(block.status)
        if told:
            told(done, count)
