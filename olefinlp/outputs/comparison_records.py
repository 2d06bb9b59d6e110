"""A comparison for scripts: one JSON object, or a folder of csv files."""

from __future__ import annotations

import json
import os
from pathlib import Path
from typing import TYPE_CHECKING, Any

from olefinlp.answers.case_tables import flat_lines, margin_lines
from olefinlp.answers.tables import Table
from olefinlp.outputs.comparison_workbook import case_tables
from olefinlp.outputs.files import write_text
from olefinlp.outputs.records import folder_of, plain, table_csv

if TYPE_CHECKING:
    from olefinlp.answers.case_answers import CaseAnswers
    from olefinlp.answers.comparison import Comparison


def comparison_tables(comparison: Comparison, answers: CaseAnswers | None = None) -> list[Table]:
    """Every table of a comparison: by case with differences from the first, those of its answers, the flat list."""
    by_case = [margin_lines(comparison), *case_tables(comparison, answers).values()]
    around = [table for answer in answers.around for table in answer.tables] if answers else []
    return [*(table.to_table(comparison.names) for table in by_case), *around, flat_lines(comparison)]


def comparison_record(comparison: Comparison, answers: CaseAnswers | None = None) -> dict[str, Any]:
    """A comparison as plain values: margins in the currency itself, tables as lists of records.

    Keys: title, plant, currency, source, cases (name, weight, status, margin, reason), answers, then one list a table.
    """
    cases = [
        {
            "name": case.name,
            "weight": case.weight,
            "status": case.plan.status if case.plan else "no plan",
            "margin": case.plan.margin if case.plan else None,
            "fixed_cost": case.plan.fixed_cost() if case.plan else None,
            "reason": case.reason,
            "note": case.note,
        }
        for case in comparison.cases
    ]
    around = [{"name": a.name, "title": a.title, "sentences": list(a.sentences)} for a in answers.around] if answers else []
    head: dict[str, Any] = {
        "title": comparison.scenario.title,
        "plant": comparison.scenario.plant.name,
        "currency": comparison.scenario.currency,
        "source": comparison.source,
        "cases": cases,
        "warnings": [str(warning) for warning in comparison.warnings],
        "answers": around,
        "left_out": list(answers.left_out) if answers else [],
    }
    return head | {table.name: [plain(row) for row in table.rows] for table in comparison_tables(comparison, answers)}


def comparison_json(comparison: Comparison, answers: CaseAnswers | None = None) -> str:
    """A comparison as one JSON object, ending in a line feed."""
    return json.dumps(comparison_record(comparison, answers), indent=1, ensure_ascii=False, allow_nan=False) + "\n"


def write_comparison_json(comparison: Comparison, path: str | os.PathLike[str], answers: CaseAnswers | None = None) -> Path:
    """Write a comparison as JSON, whole or not at all. Raises `OutputError`."""
    return write_text(path, comparison_json(comparison, answers))


def write_comparison_csv(
    comparison: Comparison, folder: str | os.PathLike[str], answers: CaseAnswers | None = None
) -> list[Path]:
    """Write every table of a comparison as a csv file into a folder. Raises `OutputError`."""
    target = folder_of(folder)
    return [write_text(target / f"{table.name}.csv", table_csv(table)) for table in comparison_tables(comparison, answers)]
