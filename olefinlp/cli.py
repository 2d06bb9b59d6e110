"""The command line: thin commands over the Python functions of the package.

Heavy libraries are imported inside the commands, so that `--help` answers at once. Data go to
standard output, everything else to standard error.
"""

from __future__ import annotations

import os
import sys
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any, NoReturn

import typer

if TYPE_CHECKING:
    from olefinlp.answers.answer import Answer
    from olefinlp.answers.plan import NoPlan, Plan
    from olefinlp.inputs.findings import Finding, InputError
    from olefinlp.inputs.scenario import Scenario

    Writer = Callable[[Plan, Path, tuple[Answer, ...]], object]

EXIT_OUTPUT, EXIT_INPUT, EXIT_FAILED = 1, 2, 6
NOT_PROVEN = "hint: this is a fault of the tool or of extreme numbers, not a plan; please report it"

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
) -> None:
    """Make the best plan, prove it, print a summary and write a workbook."""
    import pyomo.environ  # noqa: F401  # first: it is three times slower to load after scipy

    from olefinlp.outputs import write_csv, write_json, write_workbook
    from olefinlp.outputs.records import plan_json
    from olefinlp.outputs.summary import summary

    path = _scenario_path(scenario)
    if scenario is None:
        _note(f"no scenario given: planning the invented demo, {_shown(path)}")
    made = _make_plan(path, price_case, json_file)
    answers = () if quick else _answers(made)
    if json_file == "-":
        _data(plan_json(made, answers))
    else:
        typer.echo(summary(made, answers))
    targets: list[tuple[Path, Writer]] = [(output or Path(f"{path.stem}_plan.xlsx"), write_workbook)]
    if json_file and json_file != "-":
        targets.append((Path(json_file), write_json))
    if csv_folder:
        targets.append((csv_folder, write_csv))
    _write_all(made, answers, targets)


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
    _print_findings(tuple(findings))
    if findings.errors:
        raise typer.Exit(EXIT_INPUT)
    warnings = len(findings.warnings)
    typer.echo(f"{_shown(path)}: no errors, {_count(warnings, 'warning')}")


@app.command()
def export(
    scenario: Annotated[Path, typer.Argument(help="Scenario file (yaml).")],
    file: Annotated[Path, typer.Argument(help="File to write, ending in .mps or .lp.")],
    price_case: PriceCase = None,
) -> None:
    """Write the linear program with readable names, for any solver."""
    import pyomo.environ  # noqa: F401

    from olefinlp.outputs import write_lp
    from olefinlp.outputs.files import OutputError

    try:
        write_lp(_read(scenario, price_case), file)
    except OutputError as error:
        _stop(str(error), EXIT_OUTPUT)
    _note(f"written: {_shown(file)} (kt, TJ, GWh, h, thousands of the currency; maximise)")


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
    import pyomo.environ  # noqa: F401

    from olefinlp.answers.curves import step_curve
    from olefinlp.answers.ratio_curve import ratio_curve
    from olefinlp.outputs.answer_files import answer_text, write_answer, write_answer_csv
    from olefinlp.outputs.files import OutputError

    made = _make_plan(scenario, price_case, None)
    try:
        if "/" in item:
            of, _, to = item.partition("/")
            if month is not None:
                raise ValueError("a ratio is held over all months together: leave --month out")
            found = ratio_curve(made, of, to, low, high)
        else:
            found = step_curve(made, item, low, high, month)
    except ValueError as error:
        _stop(str(error), EXIT_INPUT)
    typer.echo(answer_text(found))
    try:
        if output:
            write_answer(found, output)
        if csv_file:
            write_answer_csv(found, csv_file)
    except OutputError as error:
        _stop(str(error), EXIT_OUTPUT)
    if output or csv_file:
        _note("\nwritten: " + ", ".join(_shown(p) for p in (output, csv_file) if p))


@app.command()
def explain(
    scenario: ScenarioFile = None,
    feed: Annotated[str | None, typer.Option(help="Why this feed, or feed.source, is not bought.")] = None,
    mode: Annotated[str | None, typer.Option(metavar="GROUP.FEED.SEVERITY", help="Why this mode is not used.")] = None,
    price_case: PriceCase = None,
    output: Annotated[Path | None, typer.Option("--output", "-o", help="Workbook with all tables of the answer.")] = None,
) -> None:
    """Say which limits make a month impossible and what to relax; of a possible month, why a feed is not bought."""
    import pyomo.environ  # noqa: F401

    from olefinlp.outputs.answer_files import answer_text, write_answer
    from olefinlp.outputs.files import OutputError

    found = _explanations(_read(_scenario_path(scenario), price_case), feed, mode)
    if output and len(found) != 1:
        _stop(f"{len(found)} answers do not fit one workbook\nhint: name one --feed or one --mode", EXIT_INPUT)
    typer.echo("\n\n".join(answer_text(answer) for answer in found) or "Every feed on offer is bought.")
    try:
        if output:
            write_answer(found[0], output)
            _note(f"\nwritten: {_shown(output)}")
    except OutputError as error:
        _stop(str(error), EXIT_OUTPUT)


@app.command()
def new(folder: Annotated[Path, typer.Argument(help="Folder to put the starter plants and scenarios in.")]) -> None:
    """Put the invented starter plants and scenarios into a folder, to change into your own."""
    from olefinlp.starter_files import DEFAULT, copy_starter

    try:
        files = copy_starter(folder)
    except FileExistsError as error:
        _stop(f"{error} is there already; nothing was copied\nhint: name a new folder", EXIT_OUTPUT)
    except OSError as error:
        _stop(f"{folder} cannot be written to: {error.strerror or error}", EXIT_OUTPUT)
    typer.echo(f"{len(files)} files written to {folder}; what every field means: models/README.md and scenarios/README.md there")
    typer.echo(f"next: olefinlp plan {folder / DEFAULT}")


@app.command()
def schema(
    what: Annotated[str, typer.Argument(help="`scenario` or `plant`.")] = "scenario",
    output: Annotated[Path | None, typer.Option("--output", "-o", help="File to write; standard output if left out.")] = None,
) -> None:
    """Print the JSON Schema of a file, with which an editor completes and checks it."""
    from olefinlp.outputs.files import OutputError, write_text
    from olefinlp.outputs.schema import schema_json

    try:
        text = schema_json(what)
    except KeyError:
        _stop(f"`{what}` has no schema; known: scenario, plant", EXIT_INPUT)
    if output is None:
        _data(text)
        return
    try:
        write_text(output, text)
    except OutputError as error:
        _stop(str(error), EXIT_OUTPUT)
    _note(f"written: {_shown(output)}")


def _write_all(made: Plan, answers: tuple[Answer, ...], targets: list[tuple[Path, Writer]]) -> None:
    """Write each output; one that cannot be written does not hold back the others."""
    from olefinlp.outputs.files import OutputError

    written, failed = [], []
    for target, write in targets:
        try:
            write(made, target, answers)
            written.append(_shown(target))
        except OutputError as error:
            failed.append(str(error))
    if written:
        _note(f"\nwritten: {', '.join(written)}")
    if failed:
        _stop("\n".join(failed), EXIT_OUTPUT)


def _answers(made: Plan) -> tuple[Answer, ...]:
    from olefinlp.answers.default import default_answers

    return default_answers(made)


def _explanations(scenario: Scenario, feed: str | None, mode: str | None) -> list[Answer]:
    """Why there is no plan; if there is one, why it leaves out a feed or mode, or every feed that it does not buy."""
    from olefinlp.answers.impossible import explain_impossible
    from olefinlp.answers.why_not import why_not_feed, why_not_mode

    made = _plan_if_possible(scenario)
    if made is None:
        return [explain_impossible(scenario)]
    offered = dict.fromkeys(row["feed"] for row in made.feeds.rows)
    bought = {row["feed"] for row in made.feeds.rows if row["bought"]}
    feeds = [feed] if feed else [] if mode else [name for name in offered if name not in bought]
    try:
        return [*(why_not_feed(made, name) for name in feeds), *([why_not_mode(made, mode)] if mode else [])]
    except ValueError as error:
        _stop(str(error), EXIT_INPUT)
    except ArithmeticError as error:
        _stop(str(error), EXIT_FAILED)


def _plan_if_possible(scenario: Scenario) -> Plan | None:
    """The plan of a scenario, None when limits clash; ends the command when there is none for another reason."""
    from olefinlp.answers.balances import BalanceError
    from olefinlp.answers.plan import NoPlan, make_plan
    from olefinlp.lp.certificate import CertificateError
    from olefinlp.lp.solver import EXIT_CODES, Status

    try:
        return make_plan(scenario)
    except NoPlan as error:
        if error.status is Status.INFEASIBLE:
            return None
        _stop(str(error), EXIT_CODES[error.status])
    except (CertificateError, BalanceError) as error:
        _stop(f"{error}\n{NOT_PROVEN}", EXIT_FAILED)


def _scenario_path(path: Path | None) -> Path:
    from olefinlp.starter_files import default_scenario

    return path or default_scenario()


def _read(path: Path, price_case: str | None) -> Scenario:
    """A scenario; ends the command with everything that is wrong."""
    from olefinlp.inputs.findings import InputError
    from olefinlp.inputs.scenario import read_scenario

    try:
        scenario = read_scenario(path)
        return scenario.with_(price_case=price_case) if price_case else scenario
    except InputError as error:
        _stop_on_input(error)


def _make_plan(path: Path, price_case: str | None, json_file: str | None) -> Plan:
    """A plan; ends the command with the reason when there is none."""
    from olefinlp.answers.balances import BalanceError
    from olefinlp.answers.plan import NoPlan, make_plan
    from olefinlp.inputs.findings import InputError
    from olefinlp.inputs.scenario import read_scenario
    from olefinlp.lp.certificate import CertificateError
    from olefinlp.lp.solver import EXIT_CODES

    try:
        scenario = read_scenario(path)
        return make_plan(scenario.with_(price_case=price_case) if price_case else scenario)
    except InputError as error:
        _failure_json(json_file, _input_record(error))
        _stop_on_input(error)
    except NoPlan as error:
        _failure_json(json_file, _no_plan_record(error))
        _stop(str(error), EXIT_CODES[error.status])
    except (CertificateError, BalanceError) as error:
        _failure_json(json_file, {"status": "not_proven", "message": str(error)})
        _stop(f"{error}\n{NOT_PROVEN}", EXIT_FAILED)


def _input_record(error: InputError) -> dict[str, Any]:
    findings = [
        {"level": f.level, "place": str(f.place), "path": f.path, "message": f.message, "hint": f.hint} for f in error.findings
    ]
    return {"status": "input_error", "message": str(error), "findings": findings}


def _no_plan_record(error: NoPlan) -> dict[str, Any]:
    record: dict[str, Any] = {"status": error.status.value, "message": str(error)}
    if error.clash:
        record["clash"] = [
            [{"month": c.month, "limit": c.text, "place": str(c.place or ""), "reason": c.reason} for c in limits]
            for limits in error.clash.sets
        ]
    return record


def _failure_json(target: str | None, record: dict[str, Any]) -> None:
    """A script that asked for JSON gets JSON, whatever happened."""
    if target is None:
        return
    import json

    from olefinlp.outputs.files import OutputError, write_text

    text = json.dumps(record, indent=1, ensure_ascii=False) + "\n"
    if target == "-":
        _data(text)
        return
    try:
        write_text(target, text)
    except OutputError as error:
        _note(str(error))


def _stop_on_input(error: InputError) -> NoReturn:
    _print_findings(error.findings)
    raise typer.Exit(EXIT_INPUT)


def _print_findings(findings: tuple[Finding, ...]) -> None:
    for finding in findings:
        _note(f"{finding}\n")
    errors = sum(f.level == "error" for f in findings)
    if errors:
        _note(", ".join([_count(errors, "error"), _count(len(findings) - errors, "warning")]))


def _count(number: int, word: str) -> str:
    return f"{number} {word}{'' if number == 1 else 's'}"


def _stop(message: str, code: int) -> NoReturn:
    _note(message)
    raise typer.Exit(code)


def _data(text: str) -> None:
    """JSON is UTF-8, whatever the terminal."""
    typer.echo(text.encode("utf-8"), nl=False)


def _note(message: str) -> None:
    typer.echo(message, err=True)


def _shown(path: Path) -> str:
    from olefinlp.inputs.findings import shown

    return shown(path)
