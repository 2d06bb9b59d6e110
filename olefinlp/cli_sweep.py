"""The command `sweep`: thousands of cases from one file, kept while they come, gone on with after a stop."""

from __future__ import annotations

import contextlib
import sys
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from olefinlp.cli_support import (
    EXIT_FAILED,
    EXIT_INPUT,
    EXIT_OUTPUT,
    NOT_PROVEN,
    load_algebra,
    note,
    shown_path,
    stop,
    stop_on_input,
)

if TYPE_CHECKING:
    from olefinlp.answers.sweep import Job, Sweep
    from olefinlp.inputs.sweep_cases import SweepCases

EXIT_STOPPED = 5


def sweep(
    file: Annotated[Path, typer.Argument(help="Sweep file (yaml); or a scenario, with --vary.")],
    vary: Annotated[
        list[str] | None,
        typer.Option(
            metavar="PATH=VALUES",
            help="Vary a number of a scenario: `path=500,534,560` or `path=500:570:5`; several make a grid.",
        ),
    ] = None,
    output: Annotated[
        Path | None, typer.Option("--output", "-o", metavar="DIR", help="Folder for the results. <file>_sweep if left out.")
    ] = None,
    workbook: Annotated[Path | None, typer.Option(metavar="FILE", help="Also write a workbook with charts.")] = None,
    form: Annotated[str, typer.Option("--format", help="Form of the part files: csv, or parquet.")] = "csv",
    workers: Annotated[int | None, typer.Option(min=1, help="How many workers; one a processor if left out.")] = None,
    processes: Annotated[bool, typer.Option("--processes", help="Workers are processes, not threads.")] = False,
    cluster: Annotated[
        str | None, typer.Option(metavar="ADDRESS", help="Solve on a Dask cluster: address of its scheduler.")
    ] = None,
) -> None:
    """Plan thousands of cases: vary prices, limits, yields; the results are kept while they come."""
    if workbook and workbook.suffix.lower() != ".xlsx":
        stop(f"--workbook {workbook}: a workbook's name ends in .xlsx", EXIT_INPUT)
    folder = output or Path(f"{file.stem}_sweep")
    job = _job(file, vary)
    if job.note:
        note(job.note)
    found = _run(job, folder, form, workers, processes, cluster)
    _show(found, folder, workbook)


def _job(file: Path, vary: list[str] | None) -> Job:
    """What is to be swept; ends the command with everything that is wrong."""
    load_algebra()
    from olefinlp.answers.plan import NoPlan
    from olefinlp.answers.sweep import prepare
    from olefinlp.answers.sweep_readings import DEFAULT
    from olefinlp.inputs.findings import InputError
    from olefinlp.lp.solver import EXIT_CODES

    try:
        cases, measures = _cases(file, vary)
        return prepare(cases, measures or DEFAULT)
    except InputError as error:
        stop_on_input(error)
    except NoPlan as error:
        stop(f"the scenario as it stands has no plan to start from\n{error}", EXIT_CODES[error.status])
    except ValueError as error:
        stop(str(error), EXIT_INPUT)


def _cases(file: Path, vary: list[str] | None) -> tuple[SweepCases, tuple[str, ...]]:
    from olefinlp.inputs.scenario import read_scenario
    from olefinlp.inputs.sweep_file import read_sweep_file
    from olefinlp.inputs.sweep_values import cases_of

    if vary:
        return cases_of(read_scenario(file), dict(_values(text) for text in vary)), ()
    found = read_sweep_file(file)
    return found.cases, found.measures


def _values(text: str) -> tuple[str, Any]:
    """`path=1,2,3` or `path=from:to:step`, `%` at the end for changes in per cent."""
    path, there, values = text.partition("=")
    percent = values.endswith("%")
    values = values.removesuffix("%")
    try:
        if not there:
            raise ValueError
        if ":" in values:
            low, high, step = (float(part) for part in values.split(":"))
            listed: Any = {"from": low, "to": high, "step": step}
            return path.strip(), {"percent": listed} if percent else listed
        numbers = [float(part) for part in values.split(",")]
    except ValueError:
        stop(f"--vary {text}\nhint: write `path=500,534,560` or `path=500:570:5`, with % at the end for changes", EXIT_INPUT)
    return path.strip(), {"percent": numbers} if percent else numbers


def _run(job: Job, folder: Path, form: str, workers: int | None, processes: bool, cluster: str | None) -> Sweep:
    """The sweep, with a bar on a terminal; what is done is kept, whatever happens."""
    from olefinlp.answers.balances import BalanceError
    from olefinlp.answers.sweep import PROCESSES, THREADS
    from olefinlp.lp.certificate import CertificateError
    from olefinlp.lp.neighbours import NeighbourError
    from olefinlp.outputs.files import OutputError
    from olefinlp.outputs.sweep_parts import run_into

    done = [0]
    try:
        with _engine(cluster, PROCESSES if processes else THREADS) as engine, _bar(len(job.cases), done) as told:
            return run_into(job, folder, form=form, workers=workers, engine=engine, told=told)
    except KeyboardInterrupt:
        kept = f"{done[0]:,} of {len(job.cases):,} cases are kept in {shown_path(folder)}"
        stop(f"\nstopped: {kept}; the same command goes on from there", EXIT_STOPPED)
    except OutputError as error:
        stop(str(error), EXIT_OUTPUT)
    except (CertificateError, BalanceError, NeighbourError) as error:
        stop(f"{error}\n{NOT_PROVEN}", EXIT_FAILED)


@contextlib.contextmanager
def _engine(cluster: str | None, here: str) -> Iterator[Any]:
    """Threads or processes here, or the client of a cluster."""
    if cluster is None:
        yield here
        return
    try:
        from distributed import Client
    except ImportError:
        stop("--cluster needs Dask distributed\nhint: pip install 'olefinlp[cluster]'", EXIT_INPUT)
    try:
        client = Client(cluster, timeout="20s")
    except (OSError, ValueError) as error:
        stop(f"--cluster {cluster}: no scheduler answers there ({error})", EXIT_INPUT)
    try:
        yield client
    finally:
        client.close()


@contextlib.contextmanager
def _bar(count: int, done: list[int]) -> Iterator[Callable[[int, int], object]]:
    """A bar with the time that is left, where somebody watches; nothing in a pipe."""

    def counted(number: int, _: int) -> None:
        done[0] = number

    if not sys.stderr.isatty():
        yield counted
        return
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeRemainingColumn

    columns = (TextColumn("cases"), BarColumn(), MofNCompleteColumn(), TimeRemainingColumn())
    with Progress(*columns, console=Console(stderr=True), transient=True) as progress:
        task = progress.add_task("cases", total=count)

        def moved(number: int, _: int) -> None:
            done[0] = number
            progress.update(task, completed=number)

        yield moved


def _show(found: Sweep, folder: Path, workbook: Path | None) -> None:
    """Files first, then what is printed."""
    from olefinlp.outputs.files import OutputError
    from olefinlp.outputs.sweep_text import sweep_text
    from olefinlp.outputs.sweep_workbook import write_sweep

    failed = ""
    try:
        if workbook:
            write_sweep(found, workbook)
    except OutputError as error:
        failed = str(error)
    typer.echo(sweep_text(found))
    note(f"\nwritten: {shown_path(folder)}" + (f", {shown_path(workbook)}" if workbook and not failed else ""))
    if failed:
        stop(failed, EXIT_OUTPUT)
