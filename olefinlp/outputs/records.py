"""The tables of a plan for scripts: one JSON object, or a folder of csv files."""

from __future__ import annotations

import csv
import io
import json
import math
import os
from pathlib import Path
from typing import Any

from olefinlp.answers.answer import Answer
from olefinlp.answers.plan import Plan
from olefinlp.answers.tables import Column, Table
from olefinlp.outputs.files import OutputError, write_text

Answers = tuple[Answer, ...]


def plan_record(plan: Plan, answers: Answers = ()) -> dict[str, Any]:
    """A plan as plain values: margins in the currency itself, tables as lists of records.

    Keys: status, title, plant, currency, price_case, margin (before fixed cost, all months),
    fixed_cost, months, then one list a table (feeds, furnaces, slate, limits …, and those of the
    answers), and the sentences of the answers.
    """
    tables = _tables(plan, answers)
    months = [
        {
            "month": p.name,
            "hours": p.hours,
            "margin": plan.margin_of(p.name),
            "fixed_cost": plan.fixed_cost(p.name),
            "main_product_t": plan.main_product(p.name),
            "margin_per_t": plan.margin_per_tonne(p.name),
        }
        for p in plan.quantities.case.periods
    ]
    head: dict[str, Any] = {
        "status": plan.status,
        "title": plan.scenario.title,
        "plant": plan.scenario.plant.name,
        "currency": plan.currency,
        "price_case": plan.scenario.price_case or None,
        "margin": plan.margin,
        "fixed_cost": plan.fixed_cost(),
        "months": months,
        "units": {t.name: {c.key: _unit(c) for c in t.columns if _unit(c)} for t in tables},
        "warnings": [str(w) for w in plan.warnings],
        "answers": [{"name": a.name, "title": a.title, "sentences": list(a.sentences), "note": a.note} for a in answers],
    }
    return head | {table.name: [plain(row) for row in table.rows] for table in tables}


def _tables(plan: Plan, answers: Answers) -> list[Table]:
    """The plan's tables, then those of its answers."""
    return [*plan.tables(), *(table for answer in answers for table in answer.tables)]


def _unit(column: Column) -> str:
    """The unit of the numbers themselves: a share is a fraction of one, which only people read in per cent."""
    return "fraction" if column.kind == "share" else column.unit


def plain(row: dict[str, Any]) -> dict[str, Any]:
    """A record that JSON can hold."""
    return {key: _value(value) for key, value in row.items()}


def _value(value: Any) -> Any:
    """A value without infinities and without a minus zero."""
    if isinstance(value, float):
        return value + 0.0 if math.isfinite(value) else None
    return value


def plan_json(plan: Plan, answers: Answers = ()) -> str:
    """A plan as one JSON object, ending in a line feed."""
    return json.dumps(plan_record(plan, answers), indent=1, ensure_ascii=False, allow_nan=False) + "\n"


def write_json(plan: Plan, path: str | os.PathLike[str], answers: Answers = ()) -> Path:
    """Write a plan as JSON, whole or not at all. Raises `OutputError`."""
    return write_text(path, plan_json(plan, answers))


def table_csv(table: Table) -> str:
    """A table as csv text: one header row of keys (with units in brackets), unrounded numbers."""
    text = io.StringIO(newline="")
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow([f"{c.key} [{_unit(c)}]" if _unit(c) else c.key for c in table.columns])
    for row in table.rows:
        writer.writerow([_value(row[c.key]) for c in table.columns])
    return text.getvalue()


def write_csv(plan: Plan, folder: str | os.PathLike[str], answers: Answers = ()) -> list[Path]:
    """Write every table of a plan as a csv file into a folder, which is made if it is not there."""
    target = folder_of(folder)
    return [write_text(target / f"{table.name}.csv", table_csv(table)) for table in _tables(plan, answers)]


def folder_of(path: str | os.PathLike[str]) -> Path:
    """A folder to write into, made if it is not there. Raises `OutputError`."""
    folder = Path(path)
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise OutputError(f"{folder} is no folder that can be written to: {error.strerror or error}") from error
    return folder
