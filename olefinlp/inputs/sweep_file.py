"""The YAML file of a sweep: its scenario, and its cases as values, as a table, or as random draws."""

from __future__ import annotations

import os
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Annotated, Any, Literal

from pydantic import Field, PlainValidator, WithJsonSchema

from olefinlp.inputs.case_files import scenario_of
from olefinlp.inputs.fields import FileModel, Text, refuse
from olefinlp.inputs.findings import Findings
from olefinlp.inputs.scenario import Scenario
from olefinlp.inputs.sweep_cases import SweepCases
from olefinlp.inputs.sweep_draws import TAKES, Draws, drawn_cases
from olefinlp.inputs.sweep_values import WAYS, mapping_cases, read_case_table, table_cases
from olefinlp.inputs.validate import validate
from olefinlp.inputs.yaml_files import Document, read_yaml

WAYS_TO_VARY = ("vary", "table", "draws")


def _any(value: Any) -> Any:
    """What is read by hand, number by number, so that every finding has its line."""
    return value


def _mapping(value: Any) -> Any:
    if not isinstance(value, dict):
        raise refuse("`name: value` lines are needed here")
    return value


def _by_path(inside: dict[str, Any]) -> dict[str, Any]:
    return {"type": "object", "additionalProperties": inside, "minProperties": 1}


_NUMBER: dict[str, Any] = {"anyOf": [{"type": "number"}, {"type": "string", "examples": ["520 USD/t"]}]}
_LIST = {"type": "array", "items": _NUMBER, "minItems": 1}
_STEPS: dict[str, Any] = {"from": _NUMBER, "to": _NUMBER, "step": _NUMBER, "count": {"type": "integer", "minimum": 2}}
_STEPPED = {"type": "object", "properties": _STEPS, "required": ["from", "to"], "additionalProperties": False}
_MONTH = {"type": "string", "description": "the one month in which it varies"}
_FORMS = {
    "type": "object",
    "properties": {
        **_STEPS,
        "values": {"anyOf": [_LIST, _STEPPED]},
        "percent": {"anyOf": [_LIST, _STEPPED], "description": "changes in per cent of today's number"},
        "month": _MONTH,
    },
    "additionalProperties": False,
}
_SPREAD = {
    "type": ["object", "null"],
    "properties": {
        "distribution": {"enum": list(TAKES)},
        "sd": _NUMBER,
        "low": _NUMBER,
        "mode": _NUMBER,
        "high": _NUMBER,
        "month": _MONTH,
    },
    "additionalProperties": False,
}
_PAIRS = {"anyOf": [{"type": "number"}, {"type": "object", "additionalProperties": {"type": "number"}}]}

Vary = Annotated[dict[str, Any], PlainValidator(_mapping), WithJsonSchema(_by_path({"anyOf": [_NUMBER, _LIST, _FORMS]}))]
Spreads = Annotated[
    Any,
    PlainValidator(_any),
    WithJsonSchema({"anyOf": [_by_path(_SPREAD), {"type": "array", "items": {"type": "string"}, "minItems": 1}]}),
]
CorrelationWritten = Annotated[
    Any, PlainValidator(_any), WithJsonSchema({"anyOf": [{"type": "string"}, {"type": "object", "additionalProperties": _PAIRS}]})
]
WholeNumber = Annotated[Any, PlainValidator(_any), WithJsonSchema({"type": "integer", "minimum": 0})]


class DrawsWritten(FileModel):
    """Random cases."""

    count: WholeNumber = Field(None, description="how many; must be written")
    seed: WholeNumber = Field(None, description="any whole number; with the same one the draws are the same; must be written")
    numbers: Spreads = Field(description="path: spread, such as `{sd: 10 %}`; without a spread it comes from the history")
    correlation: CorrelationWritten = Field(
        None, description="csv matrix from this file, or `path: {path: 0.6}` with every pair or `other_pairs: 0`"
    )
    history: Text | None = Field(None, description="csv table of past prices by date, from this file")
    antithetic: bool = Field(False, description="draws in mirrored pairs")


class SweepWritten(FileModel):
    """The whole of a sweep file."""

    scenario: Text = Field(description="scenario file, from this file")
    title: Text | None = Field(None, description="shown in all output")
    vary: Vary | None = Field(
        None, description="path (or `path @ month`): values, `{from, to, step}`, `{from, to, count}` or `{percent: [...]}`"
    )
    table: Text | None = Field(None, description="csv table from this file, a row a case and a column a path")
    draws: DrawsWritten | None = Field(None, description="random cases")
    how: Literal["list", "grid", "one at a time"] | None = Field(
        None, description="with `vary` of several numbers: all combinations (grid, if not written), or one number at a time"
    )
    measures: tuple[Text, ...] = Field((), description="what is shown of each case")

    def model_post_init(self, _: Any) -> None:
        """Cases are written in one way."""
        written = [name for name in WAYS_TO_VARY if getattr(self, name) is not None]
        if not written:
            raise refuse("does not say what varies", "write one of `vary:`, `table:` and `draws:`")
        if len(written) > 1:
            raise refuse(f"`{'`, `'.join(written)}` are written; a sweep has one of them", "write a file for each")
        if self.how and self.vary is None:
            raise refuse("`how:` belongs to `vary:`", "take `how:` away")


@dataclass(frozen=True)
class SweepFile:
    """A sweep as read: its cases, its title (the scenario's where none is written), and the measures asked for."""

    cases: SweepCases
    title: str
    measures: tuple[str, ...]
    file: str


def read_sweep_file(path: str | os.PathLike[str], scenario: str | os.PathLike[str] | None = None) -> SweepFile:
    """The sweep of a YAML file; `scenario` overrides the scenario file that it names.

    Raises `InputError` with everything that is wrong, by line, or by row and column of its tables.

    >>> sweep = read_sweep_file("scenarios/sweeps/naphtha_price.yaml")
    >>> len(sweep.cases), sweep.cases.varied[0].unit
    (22, 'USD/t')
    """
    findings = Findings()
    sweep = load_sweep_file(path, findings, scenario)
    findings.stop_on_errors()
    assert sweep is not None
    return sweep


def load_sweep_file(
    path: str | os.PathLike[str], findings: Findings, scenario: str | os.PathLike[str] | None = None
) -> SweepFile | None:
    """As `read_sweep_file`, with all findings added to the list given and none raised."""
    document = read_yaml(path, findings)
    if document is None:
        return None
    file = validate(document, SweepWritten, findings)
    named = document.data.get("scenario")
    known = isinstance(named, str) or scenario is not None
    own = Findings()  # of its own: what is wrong with the sweep does not keep its scenario from being read
    base = scenario_of(scenario, str(named), Path(path), document.place(("scenario",)), own) if known else None
    findings.items += [finding for finding in own if finding not in findings.items]
    if base is None:
        return None
    cases = _cases(document.data if file is None else dict(file), base, document, Path(path).parent, findings)
    if file is None or cases is None or findings.errors:
        return None
    return SweepFile(cases, file.title or base.title, file.measures, document.file)


def _cases(
    written: Mapping[str, Any], scenario: Scenario, document: Document, folder: Path, findings: Findings
) -> SweepCases | None:
    """The cases, whichever way they are written; of a file that is wrong elsewhere, what of it can be read."""
    vary, table, draws, how = (written.get(name) for name in (*WAYS_TO_VARY, "how"))
    cases = None
    if isinstance(vary, dict):
        cases = mapping_cases(scenario, vary, how if how in WAYS else None, (), document.place, findings)
    if isinstance(table, str):
        read = read_case_table(folder / table, findings)
        cases = table_cases(scenario, read, findings) if read else None
    if isinstance(draws, dict | DrawsWritten) and "numbers" in dict(draws):
        cases = drawn_cases(scenario, _draws(dict(draws), folder), document.place, findings)
    return cases


def _draws(written: Mapping[str, Any], folder: Path) -> Draws:
    """Draws whose files are looked for from the folder of the sweep file."""
    correlation, history = written.get("correlation"), written.get("history")
    return Draws(
        written["numbers"],
        written.get("count"),
        written.get("seed"),
        folder / correlation if isinstance(correlation, str) else correlation,
        folder / history if isinstance(history, str) else None,
        written.get("antithetic") is True,
    )
