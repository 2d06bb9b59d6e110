"""What the commands share: reading and planning with an end for every failure, printing, exit codes."""

from __future__ import annotations

import math
from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Any, NoReturn

import typer

if TYPE_CHECKING:
    from olefinlp.answers.answer import Answer
    from olefinlp.answers.plan import NoPlan, Plan
    from olefinlp.inputs.findings import Finding, InputError
    from olefinlp.inputs.scenario import Scenario

EXIT_OUTPUT, EXIT_INPUT, EXIT_FAILED = 1, 2, 6
NOT_PROVEN = "hint: this is a fault of the tool or of extreme numbers, not a plan; please report it"


def write_all(jobs: list[tuple[Path, Callable[[Path], object]]]) -> tuple[list[str], list[str]]:
    """Write each output, a path and what writes it: those written, and why the rest was not; no failure holds back others.

    It is done before anything is printed, so that a reader who closes a pipe early loses no file.
    """
    from olefinlp.outputs.files import OutputError

    written, failed = [], []
    for target, write in jobs:
        try:
            write(target)
            written.append(shown_path(target))
        except OutputError as error:
            failed.append(str(error))
    return written, failed


def say_written(written: list[str], failed: list[str]) -> None:
    """Name the files that were written; ends the command when some were not."""
    if written:
        note(f"\nwritten: {', '.join(written)}")
    if failed:
        stop("\n".join(failed), EXIT_OUTPUT)


def say_answer(
    found: Answer, output: Path | None, csv_file: Path | None, write: Callable[[Answer, Path], object] | None = None
) -> None:
    """Print one answer, write it where it is wanted, and name the files; `write` makes its workbook, if not the usual one."""
    from olefinlp.outputs.answer_files import answer_text, write_answer, write_answer_csv
    from olefinlp.outputs.files import OutputError

    typer.echo(answer_text(found))
    try:
        if output:
            (write or write_answer)(found, output)
        if csv_file:
            write_answer_csv(found, csv_file)
    except OutputError as error:
        stop(str(error), EXIT_OUTPUT)
    if output or csv_file:
        note("\nwritten: " + ", ".join(shown_path(p) for p in (output, csv_file) if p))


def misnamed_workbook(option: str, path: Path | None) -> str:
    """What is wrong with the name of a workbook to write, else nothing; a folder has a message of its own."""
    wrong = path is not None and path.suffix.lower() != ".xlsx" and not path.is_dir()
    return f"{option} {path}: a workbook's name ends in .xlsx" if wrong else ""


def need_workbook_name(option: str, path: Path | None) -> None:
    """End the command, before anything is planned, when a workbook to write is named as something else."""
    if wrong := misnamed_workbook(option, path):
        stop(wrong, EXIT_INPUT)


def load_algebra() -> None:
    """Load the algebra before all else: it loads faster before the units."""
    import olefinlp

    _ = olefinlp.make_plan


def answer_options(parcels: str | None, room: float, json_file: str | None) -> tuple[list[float] | None, float]:
    """Sizes of parcels (kt) and share of the margin for the answers; ends the command when one does not read."""
    try:
        sizes = [float(size) for size in parcels.split(",")] if parcels else None
        if sizes and not all(0 < size < math.inf for size in sizes):
            raise ValueError
    except ValueError:
        refuse_option(json_file, f"`{parcels}` is no list of sizes\nhint: kt with commas between, for example 3,6,12")
    if not 0 <= room < 100:
        refuse_option(json_file, f"room is a share of the margin from 0 to 100 %, not {room:g}")
    return sizes, room / 100


def refuse_option(json_file: str | None, message: str) -> NoReturn:
    """End the command because of an option, before anything is planned."""
    failure_json(json_file, {"status": "input_error", "message": message, "findings": []})
    stop(message, EXIT_INPUT)


def explanations(scenario: Scenario, feed: str | None, mode: str | None) -> list[Answer]:
    """Why there is no plan; if there is one, why it leaves out a feed or mode, or every feed that it does not buy."""
    from olefinlp.answers.impossible import explain_impossible
    from olefinlp.answers.why_not import why_not_feed, why_not_mode

    made = plan_if_possible(scenario)
    if made is None:
        return [explain_impossible(scenario)]
    offered = dict.fromkeys(row["feed"] for row in made.feeds.rows)
    bought = {row["feed"] for row in made.feeds.rows if row["bought"]}
    feeds = [feed] if feed else [] if mode else [name for name in offered if name not in bought]
    try:
        return [*(why_not_feed(made, name) for name in feeds), *([why_not_mode(made, mode)] if mode else [])]
    except ValueError as error:
        stop(str(error), EXIT_INPUT)
    except ArithmeticError as error:
        stop(str(error), EXIT_FAILED)


def plan_if_possible(scenario: Scenario) -> Plan | None:
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
        stop(str(error), EXIT_CODES[error.status])
    except (CertificateError, BalanceError) as error:
        stop(f"{error}\n{NOT_PROVEN}", EXIT_FAILED)


def scenario_path(path: Path | None) -> Path:
    """The scenario asked for, else the demo month."""
    from olefinlp.starter_files import default_scenario

    return path or default_scenario()


def read(path: Path, price_case: str | None) -> Scenario:
    """A scenario; ends the command with everything that is wrong."""
    from olefinlp.inputs.findings import InputError
    from olefinlp.inputs.scenario import read_scenario

    try:
        return in_case(read_scenario(path), price_case, None)
    except InputError as error:
        stop_on_input(error)


def in_case(scenario: Scenario, price_case: str | None, json_file: str | None) -> Scenario:
    """The scenario with the price case asked for on the command line; ends the command when it has none so named."""
    from olefinlp.inputs.findings import near_name

    if price_case is None:
        return scenario
    cases = scenario.price_cases()
    if not cases:
        refuse_option(json_file, f"--price-case {price_case}: {shown_path(scenario.path)} has no price table")
    if price_case not in cases:
        refuse_option(json_file, f"--price-case {price_case}: no such price case\nhint: {near_name(price_case, cases)}")
    return scenario.with_(price_case=price_case)


def planned(path: Path, price_case: str | None, json_file: str | None) -> Plan:
    """A plan; ends the command with the reason when there is none."""
    from olefinlp.answers.balances import BalanceError
    from olefinlp.answers.plan import NoPlan, make_plan
    from olefinlp.inputs.findings import InputError
    from olefinlp.inputs.scenario import read_scenario
    from olefinlp.lp.certificate import CertificateError
    from olefinlp.lp.solver import EXIT_CODES

    warnings: tuple[Finding, ...] = ()
    try:
        scenario = in_case(read_scenario(path), price_case, json_file)
        warnings = scenario.warnings
        return make_plan(scenario)
    except InputError as error:
        failure_json(json_file, _input_record(error))
        stop_on_input(error)
    except NoPlan as error:
        print_findings(warnings)  # they may well name the cause
        failure_json(json_file, _no_plan_record(error))
        stop(str(error), EXIT_CODES[error.status])
    except (CertificateError, BalanceError) as error:
        failure_json(json_file, {"status": "not_proven", "message": str(error)})
        stop(f"{error}\n{NOT_PROVEN}", EXIT_FAILED)


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


def failure_json(target: str | None, record: dict[str, Any]) -> None:
    """A script that asked for JSON gets JSON, whatever happened."""
    if target is None:
        return
    import json

    from olefinlp.outputs.files import OutputError, write_text

    text = json.dumps(record, indent=1, ensure_ascii=False) + "\n"
    if target == "-":
        data(text)
        return
    try:
        write_text(target, text)
    except OutputError as error:
        note(str(error))


def stop_on_input(error: InputError) -> NoReturn:
    """End the command with everything that is wrong."""
    print_findings(error.findings)
    raise typer.Exit(EXIT_INPUT)


def print_findings(findings: tuple[Finding, ...]) -> None:
    """All findings, and how many."""
    for finding in findings:
        note(f"{finding}\n")
    errors = sum(f.level == "error" for f in findings)
    if errors:
        note(", ".join([count(errors, "error"), count(len(findings) - errors, "warning")]))


def count(number: int, word: str) -> str:
    """A number and its noun."""
    return f"{number} {word}{'' if number == 1 else 's'}"


def stop(message: str, code: int) -> NoReturn:
    """End the command with a message and an exit code."""
    note(message)
    raise typer.Exit(code)


def data(text: str) -> None:
    """JSON is UTF-8, whatever the terminal."""
    typer.echo(text.encode("utf-8"), nl=False)


def note(message: str) -> None:
    """Something for the person, beside the data."""
    typer.echo(message, err=True)


def shown_path(path: Path) -> str:
    """A path as a person in this folder would type it."""
    from olefinlp.inputs.findings import shown

    return shown(path)
