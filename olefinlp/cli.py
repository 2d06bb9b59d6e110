"""The command line: thin commands over the Python functions of the package.

Heavy libraries are imported inside the commands, so that `--help` answers at once. Data go to
standard output, everything else to standard error.
"""

from __future__ import annotations

import atexit
import gc
import os
import sys
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from olefinlp import cli_cases, cli_frontier, cli_sweep
from olefinlp.cli_support import (
    EXIT_FAILED,
    EXIT_INPUT,
    EXIT_OUTPUT,
    NOT_PROVEN,
    answer_options,
    count,
    data,
    explanations,
    misnamed_workbook,
    note,
    planned,
    print_findings,
    read,
    refuse_option,
    say_answer,
    say_written,
    scenario_path,
    shown_path,
    stop,
    write_all,
)

if TYPE_CHECKING:
    from collections.abc import Callable

    from olefinlp.answers.answer import Answer

FEW_MONTHS = 3
"""From more months on, a person waiting is told for what."""

app = typer.Typer(
    help="Plan a month of a light-olefins plant: which feeds to buy, how to crack them, what to sell, for the best margin.",
    epilog="Exit codes: 0 done, 1 output not written, 2 input wrong, 3 no plan possible, 4 margin without end, "
    "5 stopped early, 6 solver or proof failed.",
    add_completion=False,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
    no_args_is_help=True,
)

ScenarioFile = Annotated[Path | None, typer.Argument(help="Scenario file (yaml). The invented demo month if left out.")]
PriceCase = Annotated[str | None, typer.Option(help="Another price case of the scenario's price table.")]


def start() -> None:
    """The program: `app`, with the search for cyclic garbage kept out of the way of a short life.

    Loading libraries makes a million objects that stay; looking through them again and again, and
    once more at the end, would be a fifth of the time of a plan.
    """
    gc.set_threshold(100_000, 50, 100)
    atexit.register(gc.freeze)
    app()


@app.callback(invoke_without_command=True)
def main(version: Annotated[bool, typer.Option("--version", help="Print the version and stop.")] = False) -> None:
    """Make sure that any terminal can show what is printed; print the version if asked."""
    for name in ("stdout", "stderr"):
        stream = getattr(sys, name)
        if stream is None:  # a scheduled job may have neither
            setattr(sys, name, Path(os.devnull).open("w", encoding="utf-8"))  # noqa: SIM115
        elif hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="replace")
    if version:
        from olefinlp import __version__

        typer.echo(f"olefinlp {__version__}")
        raise typer.Exit


@app.command()
def plan(
    scenario: ScenarioFile = None,
    output: Annotated[
        Path | None, typer.Option("--output", "-o", help="Workbook to write. <scenario>_plan.xlsx if left out.")
    ] = None,
    price_case: PriceCase = None,
    json_file: Annotated[
        str | None, typer.Option("--json", metavar="FILE", help="Also write the plan as JSON; - for standard output.")
    ] = None,
    csv_folder: Annotated[Path | None, typer.Option("--csv", metavar="DIR", help="Also write every table as csv.")] = None,
    quick: Annotated[bool, typer.Option("--quick", help="The plan and its workbook only, no further answers.")] = False,
    parcels: Annotated[str | None, typer.Option(metavar="KT,KT…", help="Sizes for the value of parcels, kt.")] = None,
    room: Annotated[float, typer.Option(metavar="PERCENT", help="Share of the margin for the room to move.")] = 0.5,
    all_answers: Annotated[
        bool, typer.Option("--all-answers", help="Every answer, however many periods; beyond 12 some are left out.")
    ] = False,
) -> None:
    """Make the best plan, prove it, print a summary and write a workbook."""
    import pyomo.core  # noqa: F401  # first: it is three times slower to load after scipy

    from olefinlp.outputs import write_csv, write_json, write_workbook
    from olefinlp.outputs.records import plan_json
    from olefinlp.outputs.summary import summary

    path = scenario_path(scenario)
    if scenario is None:
        note(f"no scenario given: planning the invented demo, {shown_path(path)}")
    sizes, share = answer_options(parcels, room, json_file)
    if wrong := misnamed_workbook("--output", output):
        refuse_option(json_file, wrong)
    made = planned(path, price_case, json_file)
    answers: tuple[Answer, ...] = ()
    if not quick:
        from olefinlp.answers.default import default_answers

        if len(made.quantities.case.months) > FEW_MONTHS:
            note("solving around the plan for its answers, a few seconds a month; --quick leaves them out")
        answers = default_answers(made, sizes, share, every=all_answers)
    jobs: list[tuple[Path, Callable[[Path], object]]] = [
        (output or Path(f"{path.stem}_plan.xlsx"), lambda target: write_workbook(made, target, answers))
    ]
    if json_file and json_file != "-":
        jobs.append((Path(json_file), lambda target: write_json(made, target, answers)))
    if csv_folder:
        jobs.append((csv_folder, lambda target: write_csv(made, target, answers)))
    written, failed = write_all(jobs)
    if json_file == "-":
        data(plan_json(made, answers))
    else:
        typer.echo(summary(made, answers))
    say_written(written, failed)


@app.command()
def check(path: Annotated[Path, typer.Argument(help="Scenario file, plant.yaml, or plant folder.")]) -> None:
    """Check a plant or a scenario without solving it; everything found is printed at once."""
    from olefinlp.inputs.findings import Findings
    from olefinlp.inputs.plant import load_plant
    from olefinlp.inputs.scenario import load_scenario

    findings = Findings()
    if path.is_dir() or path.name == "plant.yaml":
        load_plant(path, findings)
    else:
        load_scenario(path, findings)
    print_findings(tuple(findings))
    if findings.errors:
        raise typer.Exit(EXIT_INPUT)
    warnings = len(findings.warnings)
    typer.echo(f"{shown_path(path)}: no errors, {count(warnings, 'warning')}")


@app.command()
def export(
    scenario: Annotated[Path, typer.Argument(help="Scenario file (yaml).")],
    file: Annotated[Path, typer.Argument(help="File to write, ending in .mps or .lp.")],
    price_case: PriceCase = None,
) -> None:
    """Write the linear program with readable names, for any solver."""
    import pyomo.core  # noqa: F401

    from olefinlp.outputs import write_lp
    from olefinlp.outputs.files import OutputError

    try:
        write_lp(read(scenario, price_case), file)
    except OutputError as error:
        stop(str(error), EXIT_OUTPUT)
    note(f"written: {shown_path(file)} (kt, TJ, GWh, h, thousands of the currency; maximise)")


@app.command()
def curve(
    scenario: Annotated[Path, typer.Argument(help="Scenario file (yaml).")],
    item: Annotated[
        str,
        typer.Argument(
            help="A price or limit by its path in the files (feeds.<feed>.<source>, recovery_units.<unit>.capacity …), "
            "or two cuts joined by a stroke, one/other, for their ratio."
        ),
    ],
    low: Annotated[float | None, typer.Option("--from", help="Start, in the unit in which the item is written.")] = None,
    high: Annotated[float | None, typer.Option("--to", help="End, in the same unit.")] = None,
    month: Annotated[str | None, typer.Option(help="Move the item in this month only; in all together if left out.")] = None,
    price_case: PriceCase = None,
    output: Annotated[Path | None, typer.Option("--output", "-o", help="Workbook with table and chart.")] = None,
    csv_file: Annotated[Path | None, typer.Option("--csv", metavar="FILE", help="Table as csv.")] = None,
) -> None:
    """Follow the plan exactly along one price, one limit, or the ratio of two cuts."""
    import pyomo.core  # noqa: F401

    from olefinlp.answers.curves import step_curve
    from olefinlp.answers.ratio_curve import ratio_curve
    from olefinlp.lp.certificate import CertificateError
    from olefinlp.lp.neighbours import NeighbourError

    made = planned(scenario, price_case, None)
    try:
        if "/" in item:
            of, _, to = item.partition("/")
            if month is not None:
                raise ValueError("a ratio is held over all months together: leave --month out")
            found = ratio_curve(made, of, to, low, high)
        else:
            found = step_curve(made, item, low, high, month)
    except ValueError as error:
        stop(str(error), EXIT_INPUT)
    except (CertificateError, NeighbourError) as error:
        stop(f"{error}\n{NOT_PROVEN}", EXIT_FAILED)
    say_answer(found, output, csv_file)


app.command()(cli_cases.cases)
app.command()(cli_cases.bridge)
app.command()(cli_sweep.sweep)
app.command()(cli_frontier.frontier)


@app.command()
def explain(
    scenario: ScenarioFile = None,
    feed: Annotated[str | None, typer.Option(help="Why this feed, or feed.source, is not bought.")] = None,
    mode: Annotated[str | None, typer.Option(metavar="GROUP.FEED.SEVERITY", help="Why this mode is not used.")] = None,
    price_case: PriceCase = None,
    output: Annotated[Path | None, typer.Option("--output", "-o", help="Workbook with all tables of the answer.")] = None,
) -> None:
    """Say which limits make a month impossible and what to relax; of a possible month, why a feed is not bought."""
    import pyomo.core  # noqa: F401

    from olefinlp.outputs.answer_files import answer_text, write_answer
    from olefinlp.outputs.files import OutputError

    found = explanations(read(scenario_path(scenario), price_case), feed, mode)
    if output and len(found) != 1:
        stop(f"{len(found)} answers do not fit one workbook\nhint: name one --feed or one --mode", EXIT_INPUT)
    typer.echo("\n\n".join(answer_text(answer) for answer in found) or "Every feed on offer is bought.")
    try:
        if output:
            write_answer(found[0], output)
            note(f"\nwritten: {shown_path(output)}")
    except OutputError as error:
        stop(str(error), EXIT_OUTPUT)


@app.command()
def new(folder: Annotated[Path, typer.Argument(help="Folder to put the starter plants and scenarios in.")]) -> None:
    """Put the invented starter plants and scenarios into a folder, to change into your own."""
    from olefinlp.starter_files import DEFAULT, copy_starter

    try:
        files = copy_starter(folder)
    except FileExistsError as error:
        stop(f"{error} is there already; nothing was copied\nhint: name a new folder", EXIT_OUTPUT)
    except OSError as error:
        stop(f"{folder} cannot be written to: {error.strerror or error}", EXIT_OUTPUT)
    typer.echo(f"{len(files)} files written to {folder}; what every field means: models/README.md and scenarios/README.md there")
    typer.echo(f"next: olefinlp plan {folder / DEFAULT}")


@app.command()
def schema(
    what: Annotated[str, typer.Argument(help="`scenario`, `plant`, `cases` or `sweep`.")] = "scenario",
    output: Annotated[Path | None, typer.Option("--output", "-o", help="File to write; standard output if left out.")] = None,
) -> None:
    """Print the JSON Schema of a file, with which an editor completes and checks it."""
    from olefinlp.outputs.files import OutputError, write_text
    from olefinlp.outputs.schema import schema_json

    try:
        text = schema_json(what)
    except KeyError:
        stop(f"`{what}` has no schema; known: scenario, plant, cases, sweep", EXIT_INPUT)
    if output is None:
        data(text)
        return
    try:
        write_text(output, text)
    except OutputError as error:
        stop(str(error), EXIT_OUTPUT)
    note(f"written: {shown_path(output)}")
