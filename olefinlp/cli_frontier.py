"""The command that trades margin against a second goal: `frontier`."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from olefinlp.cli_support import EXIT_FAILED, EXIT_INPUT, NOT_PROVEN, load_algebra, need_workbook_name, planned, say_answer, stop


def frontier(
    scenario: Annotated[Path, typer.Argument(help="Scenario file (yaml).")],
    goal: Annotated[
        str,
        typer.Argument(
            help="What to trade against margin, by its path in the files: utilities.<trade>, feeds.<feed>, "
            "feeds.<feed>.<source>, outlets.<outlet>, cuts.<cut> or recovery_units.<unit>; all months together."
        ),
    ],
    low: Annotated[
        float | None, typer.Option("--from", help="First weight, money per unit on top of today's price; 0 if left out.")
    ] = None,
    high: Annotated[
        float | None, typer.Option("--to", help="Last weight; if left out, until the quantity falls no more.")
    ] = None,
    limit: Annotated[
        float | None,
        typer.Option("--at-most", metavar="QUANTITY", help="Only the best margin with so much of it at most (kt …)."),
    ] = None,
    price_case: Annotated[str | None, typer.Option(help="Another price case of the scenario's price table.")] = None,
    output: Annotated[Path | None, typer.Option("--output", "-o", help="Workbook with table and charts.")] = None,
    csv_file: Annotated[Path | None, typer.Option("--csv", metavar="FILE", help="Table as csv.")] = None,
) -> None:
    """Follow margin exactly against a second goal: emissions, a purchase, a sale, a cut, a unit's load."""
    need_workbook_name("--output", output)
    if limit is not None and (low is not None or high is not None):
        stop("--at-most asks for one point: leave --from and --to out", EXIT_INPUT)
    load_algebra()
    from olefinlp.answers.frontier import at_most, two_goal_curve
    from olefinlp.lp.certificate import CertificateError

    made = planned(scenario, price_case, None)
    try:
        found = two_goal_curve(made, goal, low, high) if limit is None else at_most(made, goal, limit)
    except ValueError as error:
        stop(str(error), EXIT_INPUT)
    except (CertificateError, ArithmeticError) as error:
        stop(f"{error}\n{NOT_PROVEN}", EXIT_FAILED)
    say_answer(found, output, csv_file)
