"""The commands that compare: `cases` and `bridge`."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Annotated, NoReturn

import typer

from olefinlp.cli_support import (
    EXIT_FAILED,
    EXIT_INPUT,
    EXIT_OUTPUT,
    NOT_PROVEN,
    count,
    data,
    load_algebra,
    need_workbook_name,
    note,
    planned,
    print_findings,
    say_answer,
    say_written,
    shown_path,
    stop,
    stop_on_input,
    write_all,
)

if TYPE_CHECKING:
    from collections.abc import Callable

    from olefinlp.answers.case_answers import CaseAnswers
    from olefinlp.answers.comparison import Comparison
    from olefinlp.answers.plan import Plan
    from olefinlp.inputs.cases import CaseSet

EXIT_NO_PLAN = 3
FEW = 12
"""Months times cases from which on a person waiting is told for what."""
ORDERS = {"prices-first": "prices first", "limits-first": "limits first"}
CasesFile = Annotated[
    Path | None,
    typer.Option("--cases", metavar="FILE", help="Where the two cases stand: a scenario, case workbook, csv or yaml list."),
]


def cases(
    file: Annotated[
        Path, typer.Argument(help="Case workbook, csv or yaml list of cases; or a scenario, for the cases of its price table.")
    ],
    write: Annotated[
        Path | None, typer.Option("--write", metavar="FILE", help="Write a case sheet of the scenario to fill in, and stop.")
    ] = None,
    output: Annotated[
        Path | None, typer.Option("--output", "-o", help="Workbook to write. <file>_comparison.xlsx if left out.")
    ] = None,
    scenario: Annotated[
        Path | None, typer.Option(help="The scenario of a csv list; in place of the one that a workbook or list names.")
    ] = None,
    held: Annotated[
        str,
        typer.Option(
            metavar="WORDS",
            help="What regret and buying hold: purchases, feeds.<feed>, feeds.<feed>.<source>, sales, charges …, with commas.",
        ),
    ] = "purchases",
    risk: Annotated[float, typer.Option(metavar="PERCENT", help="Weight of the worst cases against the mean when buying.")] = 0.0,
    worst: Annotated[float, typer.Option(metavar="PERCENT", help="The worst share of the cases that --risk looks at.")] = 20.0,
    quick: Annotated[bool, typer.Option("--quick", help="The plans and their comparison only, no further answers.")] = False,
    all_answers: Annotated[bool, typer.Option("--all-answers", help="Every answer, however many cases.")] = False,
    json_file: Annotated[
        str | None, typer.Option("--json", metavar="FILE", help="Also write the comparison as JSON; - for standard output.")
    ] = None,
    csv_folder: Annotated[Path | None, typer.Option("--csv", metavar="DIR", help="Also write every table as csv.")] = None,
) -> None:
    """Compare price cases: write a case sheet, or plan every case of one and write a comparison workbook."""
    if write:
        _write_sheet(file, write)
        return
    target = output or Path(f"{file.stem}_comparison.xlsx")
    need_workbook_name("--output", target)
    if not 0 <= risk < 100 or not 0 < worst < 100:
        stop("--risk is from 0 to below 100 %, --worst above 0 and below 100 %: some weight stays on the mean", EXIT_INPUT)
    compared = _compared(file, scenario)
    if not compared.plans:
        print_findings(compared.warnings)
        stop("no case has a plan\n" + "\n".join(f"{case.name}: {case.reason}" for case in compared.cases), EXIT_NO_PLAN)
    answers = None if quick else _answers(compared, held, risk / 100, worst / 100, all_answers)
    _write_all(compared, answers, target, json_file, csv_folder)


def _write_sheet(file: Path, target: Path) -> None:
    from olefinlp.inputs.findings import InputError
    from olefinlp.inputs.scenario import read_scenario
    from olefinlp.outputs.case_sheet import write_case_sheet
    from olefinlp.outputs.files import OutputError

    if file.suffix.lower() in (".xlsx", ".xlsm", ".csv"):
        stop(f"{shown_path(file)} is a list of cases already\nhint: --write makes a case sheet of a scenario (yaml)", EXIT_INPUT)
    need_workbook_name("--write", target)
    try:
        write_case_sheet(read_scenario(file), target)
    except InputError as error:
        stop_on_input(error)
    except OutputError as error:
        stop(str(error), EXIT_OUTPUT)
    note(f"written: {shown_path(target)}")
    note(f"next: change it in a spreadsheet program, then olefinlp cases {shown_path(target)} -o comparison.xlsx")


def _compared(file: Path, scenario: Path | None) -> Comparison:
    """Every case planned; ends the command with everything that is wrong."""
    from olefinlp import InputError, compare_cases, read_cases

    try:
        found: CaseSet = read_cases(file, scenario)
    except InputError as error:
        stop_on_input(error)
    compared: Comparison = compare_cases(found)
    failed = [case.name for case in compared.cases if case.plan is None]
    if failed and compared.plans:
        note(f"{count(len(failed), 'case')} without a plan: {', '.join(failed)}")
    return compared


def _answers(compared: Comparison, held: str, risk: float, worst: float, every: bool) -> CaseAnswers:
    from olefinlp.answers.case_answers import case_answers

    words = [word.strip() for word in held.split(",") if word.strip()]
    try:
        return case_answers(compared, held=words, risk=risk, worst=worst, every=every, told=_telling(compared))
    except ValueError as error:
        stop(str(error), EXIT_INPUT)


def _telling(compared: Comparison) -> Callable[[str], object] | None:
    """What a person waiting is told; nothing where there is little to wait for."""
    size = sum(len(plan.quantities.case.months) for plan in compared.plans.values())
    return (lambda what: note(f"solving around each plan: {what} (--quick leaves answers out)")) if size > FEW else None


def _write_all(
    compared: Comparison, answers: CaseAnswers | None, target: Path, json_file: str | None, csv_folder: Path | None
) -> None:
    """Files first, so that a reader who closes a pipe early loses none; then what is printed."""
    from olefinlp.outputs.comparison_records import comparison_json, write_comparison_csv, write_comparison_json
    from olefinlp.outputs.comparison_text import comparison_text
    from olefinlp.outputs.comparison_workbook import write_comparison

    jobs: list[tuple[Path, Callable[[Path], object]]] = [(target, lambda path: write_comparison(compared, path, answers))]
    if json_file and json_file != "-":
        jobs.append((Path(json_file), lambda path: write_comparison_json(compared, path, answers)))
    if csv_folder:
        jobs.append((csv_folder, lambda path: write_comparison_csv(compared, path, answers)))
    written, failed = write_all(jobs)
    if json_file == "-":
        data(comparison_json(compared, answers))
    else:
        typer.echo(comparison_text(compared, answers))
    say_written(written, failed)


def bridge(
    first: Annotated[str, typer.Argument(metavar="A", help="The plan to start from: a scenario file, or a case of --cases.")],
    second: Annotated[str, typer.Argument(metavar="B", help="The plan to arrive at.")],
    cases_file: CasesFile = None,
    scenario: Annotated[Path | None, typer.Option(help="The scenario of a csv list of cases.")] = None,
    order: Annotated[str, typer.Option(help="`prices-first`, or `limits-first` for the other way round.")] = "prices-first",
    output: Annotated[Path | None, typer.Option("--output", "-o", help="Workbook with waterfall, effects and changes.")] = None,
    csv_file: Annotated[Path | None, typer.Option("--csv", metavar="FILE", help="The steps as csv.")] = None,
) -> None:
    """Explain exactly why plan B earns more or less than plan A: prices, re-optimising, limits."""
    if order not in ORDERS:
        stop(f"--order {order}: known: {', '.join(ORDERS)}", EXIT_INPUT)
    need_workbook_name("--output", output)
    a, b, names = _two_plans(first, second, cases_file, scenario)
    from olefinlp.answers.bridge import bridge as bridge_between
    from olefinlp.lp.certificate import CertificateError
    from olefinlp.outputs.bridge_workbook import write_bridge

    try:
        found = bridge_between(a, b, order=ORDERS[order], names=names)
    except ValueError as error:
        stop(str(error), EXIT_INPUT)
    except (CertificateError, ArithmeticError) as error:
        stop(f"{error}\n{NOT_PROVEN}", EXIT_FAILED)
    say_answer(found, output, csv_file, write_bridge)


def _two_plans(
    first: str, second: str, cases_file: Path | None, scenario: Path | None
) -> tuple[Plan, Plan, tuple[str, str] | None]:
    """The two plans: of two files, or of two cases."""
    if cases_file is None:
        for name in (first, second):
            if not Path(name).is_file():
                _no_such_plan(name)
        load_algebra()
        return planned(Path(first), None, None), planned(Path(second), None, None), None
    compared = _compared(cases_file, scenario)
    found: list[Plan] = []
    for name in (first, second):
        case = next((one for one in compared.cases if one.name == name), None)
        if case is None:
            from olefinlp.inputs.findings import near_name

            stop(f"`{name}` is no case of {shown_path(cases_file)}\nhint: {near_name(name, compared.names)}", EXIT_INPUT)
        if case.plan is None:
            stop(f"{name} has no plan: {case.reason}", EXIT_NO_PLAN)
        found.append(case.plan)
    return found[0], found[1], (first, second)


def _no_such_plan(name: str) -> NoReturn:
    hint = "name two scenario files, or two cases and where they stand: --cases FILE"
    stop(f"{name}: no such file\nhint: {hint}", EXIT_INPUT)
