"""JSON Schema of the YAML files, from the same objects that read them."""

from __future__ import annotations

import json
from typing import Any

from pydantic import BaseModel

from olefinlp.inputs.case_files import CasesFile
from olefinlp.inputs.plant_file import PlantFile
from olefinlp.inputs.scenario_file import ScenarioFile
from olefinlp.inputs.sweep_file import SweepWritten

MODELS: dict[str, type[BaseModel]] = {
    "scenario": ScenarioFile,
    "plant": PlantFile,
    "cases": CasesFile,
    "sweep": SweepWritten,
}


def schema_of(what: str) -> dict[str, Any]:
    """The schema of `scenario`, `plant`, `cases` or `sweep`; `KeyError` for anything else."""
    schema = MODELS[what].model_json_schema(by_alias=True)
    return {"$schema": "https://json-schema.org/draft/2020-12/schema", "title": f"olefinlp {what} file"} | {
        key: value for key, value in schema.items() if key != "title"
    }


def schema_json(what: str) -> str:
    """The schema as text, ending in a line feed."""
    return json.dumps(schema_of(what), indent=1, ensure_ascii=False) + "\n"
