"""Workbook, charts, csv, json, printed summary."""

from __future__ import annotations

import os
from pathlib import Path
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    import pandas as pd

    from olefinlp.answers.answer import Answer
    from olefinlp.answers.case_answers import CaseAnswers
    from olefinlp.answers.comparison import Comparison
    from olefinlp.answers.plan import Plan
    from olefinlp.answers.sweep import Sweep
    from olefinlp.inputs.scenario import Scenario

__all__ = [
    "read_sweep",
    "sweep_into",
    "write_answer",
    "write_bridge",
    "write_case_sheet",
    "write_comparison",
    "write_csv",
    "write_json",
    "write_lp",
    "write_sweep",
    "write_workbook",
]


def sweep_into(folder: str | os.PathLike[str], scenario: Scenario | Plan, vary: object, **options: Any) -> Sweep:
    """As `sweep`, with the results written into a folder while they come; one that was stopped goes on.

    Options are those of `sweep`, and `form` of the part files, "csv" or "parquet". Raises what `sweep` raises, and
    `OutputError` when the folder holds another sweep or cannot be written to.
    """
    from olefinlp.outputs.sweep_parts import sweep_into as run

    return run(folder, scenario, vary, **options)


def write_sweep(found: Sweep, path: str | os.PathLike[str]) -> Path:
    """Write a sweep as a workbook with the charts that suit it, whole or not at all. Raises `OutputError`."""
    from olefinlp.outputs.sweep_workbook import write_sweep as write

    return write(found, path)


def read_sweep(folder: str | os.PathLike[str]) -> pd.DataFrame:
    """The rows of a sweep's folder, finished or not, in the order of the cases. Raises `OutputError` when there are none."""
    from olefinlp.outputs.sweep_parts import read_sweep as read

    return read(Path(folder))


def write_workbook(plan: Plan, path: str | os.PathLike[str], answers: tuple[Answer, ...] = ()) -> Path:
    """Write a plan as a workbook, whole or not at all.

    Quantities are values, every money cell is a live formula. Raises `OutputError`.
    """
    from olefinlp.outputs.workbook import write_workbook as write

    return write(plan, path, answers)


def write_answer(answer: Answer, path: str | os.PathLike[str]) -> Path:
    """Write one answer as a workbook with its chart, whole or not at all. Raises `OutputError`."""
    from olefinlp.outputs.answer_files import write_answer as write

    return write(answer, path)


def write_bridge(found: Answer, path: str | os.PathLike[str]) -> Path:
    """Write a bridge as a workbook with its waterfall, effects as formulas, whole or not at all. Raises `OutputError`."""
    from olefinlp.outputs.bridge_workbook import write_bridge as write

    return write(found, path)


def write_case_sheet(scenario: Scenario, path: str | os.PathLike[str]) -> Path:
    """Write the case sheet of a scenario, to be filled in and read with `read_cases`. Raises `OutputError`."""
    from olefinlp.outputs.case_sheet import write_case_sheet as write

    return write(scenario, path)


def write_comparison(comparison: Comparison, path: str | os.PathLike[str], answers: CaseAnswers | None = None) -> Path:
    """Write a comparison as a workbook, one column a case, whole or not at all. Raises `OutputError`."""
    from olefinlp.outputs.comparison_workbook import write_comparison as write

    return write(comparison, path, answers)


def write_json(plan: Plan, path: str | os.PathLike[str], answers: tuple[Answer, ...] = ()) -> Path:
    """Write a plan as one JSON object, whole or not at all. Raises `OutputError`."""
    from olefinlp.outputs.records import write_json as write

    return write(plan, path, answers)


def write_csv(plan: Plan, folder: str | os.PathLike[str], answers: tuple[Answer, ...] = ()) -> list[Path]:
    """Write every table of a plan as csv into a folder. Raises `OutputError`."""
    from olefinlp.outputs.records import write_csv as write

    return write(plan, folder, answers)


def write_lp(scenario: Scenario, path: str | os.PathLike[str]) -> Path:
    """Write the LP of a scenario as `.mps` or `.lp` with readable names. Raises `OutputError`."""
    from olefinlp.lp.algebra import build_model
    from olefinlp.lp.compile import compile_model
    from olefinlp.lp.export import ENDINGS, export
    from olefinlp.outputs.files import OutputError, write_whole

    ending = Path(path).suffix.lower()
    if ending not in ENDINGS:
        raise OutputError(f"{path}: the file must end in {' or '.join(ENDINGS)}")
    lp = compile_model(build_model(scenario.case))
    return write_whole(path, lambda temporary: export(lp, temporary, ending))
