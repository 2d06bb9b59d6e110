"""Cases of one scenario: other prices, other availability, other limits, side by side.

A case is written as what differs from the first: prices by item, and changes of numbers of the
scenario by their path. Workbooks, csv tables and YAML lists of cases all become `WrittenCase`s here, and then
scenarios, every one validated like any other and every number with the cell or line that wrote it.
"""

from __future__ import annotations

import copy
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

from olefinlp.inputs.findings import Finding, Findings, Place, near_name
from olefinlp.inputs.prices import PriceGiven, price_items_of
from olefinlp.inputs.scenario import Scenario, set_value
from olefinlp.inputs.yaml_files import Document, Path_

FACTOR, OUTAGE = "factor", "outage_hours"
"""Last parts of `recovery_units.<unit>.factor` and `furnace_groups.<group>.outage_hours`: this month's plant."""

RESERVED = frozenset(("month", "group", "item", "unit", "basis", "source", "date", "note", "times", "relative_to", "weight"))
"""Names of columns in tables of cases, which no case may have."""


@dataclass(frozen=True, slots=True)
class Change:
    """A number of the scenario that a case changes.

    `item` is its path in the scenario file, or one of the two above; `month` is empty for all months;
    `value` is as YAML would hold it: `30 kt`, `unlimited`, 0.97.
    """

    item: str
    month: str
    value: str | float
    place: Place
    reason: str = ""


@dataclass(frozen=True)
class WrittenCase:
    """A case as written, what the first case says filled in."""

    name: str
    place: Place
    prices: Mapping[tuple[str, str], PriceGiven] = field(default_factory=dict)
    changes: tuple[Change, ...] = ()
    price_case: str = ""
    weight: float | None = None
    note: str = ""


@dataclass(frozen=True)
class OneCase:
    """A case to plan; without a scenario the findings say why it has none."""

    name: str
    weight: float
    scenario: Scenario | None
    findings: tuple[Finding, ...] = ()
    note: str = ""

    @property
    def reason(self) -> str:
        """Why there is no scenario, in one line."""
        return "; ".join(f"{f.path}: {f.message}" if f.path else f.message for f in self.findings if f.level == "error")


@dataclass(frozen=True)
class CaseSet:
    """Cases of one scenario, the first the one that others are compared with. Weights sum to one."""

    source: str
    scenario: Scenario
    cases: tuple[OneCase, ...]
    weighted: bool
    warnings: tuple[Finding, ...] = ()

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the cases in order."""
        return tuple(case.name for case in self.cases)


def price_case_set(scenario: Scenario) -> CaseSet:
    """All price cases of a scenario's own price table, the scenario's own first.

    Raises `InputError` when one of them cannot be read.

    >>> from olefinlp import read_scenario
    >>> price_case_set(read_scenario("scenarios/brackwater_2031_03.yaml")).names[:2]
    ('Base', 'High crude')
    """
    first = scenario.price_case or "As written"
    names = [first, *(name for name in scenario.price_cases() if name != first)]
    place = scenario.document.place(("price_case",))
    written = [WrittenCase(name, place, price_case=name if scenario.price_cases() else "") for name in names]
    return case_set(scenario, written, Findings(), scenario.document.file)


def case_set(scenario: Scenario, written: Sequence[WrittenCase], findings: Findings, source: str) -> CaseSet:
    """Scenarios of written cases. What is wrong with a cell or line of the cases themselves stops all of them.

    What makes a case impossible beyond that (a minimum above a maximum that the scenario writes, minimum takes
    that no furnace can crack) leaves a case without a scenario, with its reason; the first must have one.
    Raises `InputError` with everything found.
    """
    _check_names(written, findings)
    weights = _weights(written, findings)
    made: list[OneCase] = []
    cells = {one.place.file for one in written} | ({scenario.price_table.file} if scenario.price_table else set())
    for number, (one, weight) in enumerate(zip(written, weights, strict=True)):
        own = Findings()
        changed = case_scenario(scenario, one, own)
        stops = number == 0 or any(f.place.file in cells - {scenario.document.file} for f in own.errors)
        for finding in own if stops else own.warnings:
            if finding not in findings.items:
                findings.items.append(finding)
        made.append(OneCase(one.name, weight, changed, own.errors, one.note))
    findings.stop_on_errors()
    return CaseSet(source, scenario, tuple(made), any(one.weight is not None for one in written), findings.warnings)


def _check_names(written: Sequence[WrittenCase], findings: Findings) -> None:
    seen: dict[str, WrittenCase] = {}
    for one in written:
        key = " ".join(one.name.split()).casefold()
        if not key:
            findings.error(one.place, "", "a case has no name")
        elif key in RESERVED:
            text = f"`{one.name}` is the name of a column, it cannot be a case"
            findings.error(one.place, "", text, "give the case another name")
        elif key in seen:
            findings.error(one.place, "", f"two cases are named `{one.name}`", f"the first: {seen[key].place}")
        seen.setdefault(key, one)
    if not written:
        findings.error(Place(""), "", "there is no case")


def _weights(written: Sequence[WrittenCase], findings: Findings) -> list[float]:
    """Weights that sum to one; equal ones where none is written."""
    given = [one for one in written if one.weight is not None]
    if not given:
        return [1 / max(len(written), 1)] * len(written)
    for one in written:
        if one.weight is None:
            findings.error(
                one.place, "weight", f"`{one.name}` has no weight, others have", "write one for each case, or for none"
            )
        elif not one.weight >= 0:
            findings.error(one.place, "weight", f"`{one.name}` has a weight below zero")
    total = sum(one.weight or 0.0 for one in written)
    if total <= 0:
        findings.error(given[0].place, "weight", "the weights sum to nothing")
        return [0.0] * len(written)
    return [(one.weight or 0.0) / total for one in written]


def case_scenario(scenario: Scenario, one: WrittenCase, findings: Findings) -> Scenario | None:
    """The scenario of one written case; None with findings where it cannot be one."""
    document = _changed(scenario, one, findings)
    _check_items(scenario, one, findings)
    return scenario.as_case(one.name, document, {**scenario.given, **one.prices}, findings)


def _check_items(scenario: Scenario, one: WrittenCase, findings: Findings) -> None:
    """A price for nothing is a slip of the pen; so is a month that the scenario does not have."""
    items = price_items_of(scenario)
    months = [period.name for period in scenario.periods]
    for (item, month), given in one.prices.items():
        if item not in items:
            findings.error(given.place, item, "is no price of this scenario", near_name(item, items))
        if month and month not in months:
            findings.error(given.place, item, f"`{month}` is not a month of this scenario", near_name(month, months))


def _changed(scenario: Scenario, one: WrittenCase, findings: Findings) -> Document:
    """The document with the changes of a case, each in its place."""
    document = scenario.document
    if not one.changes and not one.price_case:
        return document
    data, lines, places = copy.deepcopy(document.data), dict(document.lines), dict(document.places)
    if one.price_case:
        data["price_case"] = one.price_case
        places["price_case",] = one.place
    draft = replace(document, data=data, lines=lines, places=places)
    months = [period.name for period in scenario.periods]
    for change in one.changes:
        if change.month and change.month not in months:
            text = f"`{change.month}` is not a month of this scenario"
            findings.error(change.place, change.item, text, near_name(change.month, months))
            continue
        path = _put(draft, change, months, findings)
        if not path:
            continue
        for known in [known for known in (*lines, *places) if known[: len(path)] == path]:
            lines.pop(known, None)
            places.pop(known, None)
        places[path] = change.place
    return draft


def _put(draft: Document, change: Change, months: list[str], findings: Findings) -> Path_:
    """Write one change into the draft; gives its path, none with a finding."""
    head, *rest = change.item.split(".")
    if head == "recovery_units" and rest[1:] == [FACTOR]:
        return _put_this_month(draft, "unit_factors", "unit", rest[0], "factor", change, months, findings)
    if head == "furnace_groups" and rest[1:] == [OUTAGE]:
        return _put_this_month(draft, "outages", "group", rest[0], "hours", change, months, findings)
    parts = tuple(change.item.split("."))
    data: Any = draft.data
    for depth, part in enumerate(parts[:-1]):
        known = [str(k) for k in range(1, len(data) + 1)] if isinstance(data, list) else list(data)
        if part not in known:
            above = ".".join(parts[:depth]) or "the scenario"
            findings.error(change.place, change.item, f"`{part}` is not in {above}", near_name(part, known))
            return ()
        data = data[int(part) - 1] if isinstance(data, list) else data[part]
        if not isinstance(data, (dict, list)):
            findings.error(change.place, change.item, f"`{part}` is a value, it has no `{parts[depth + 1]}`")
            return ()
    if isinstance(data, dict) and data and parts[-1] not in data and all(isinstance(value, dict) for value in data.values()):
        text = f"`{parts[-1]}` belongs to one of {', '.join(map(str, data))}"
        findings.error(change.place, change.item, text, f"write `{'.'.join((*parts[:-1], str(next(iter(data))), parts[-1]))}`")
        return ()
    now = data.get(parts[-1]) if isinstance(data, dict) else None
    value = _of_month(now, change, months)
    return set_value(draft.data, parts, value, findings, draft)


def _of_month(now: Any, change: Change, months: list[str]) -> Any:
    """The value for all months, or what is written now with that of one month changed."""
    if not change.month or len(months) == 1:
        return change.value
    if isinstance(now, dict):
        return {**now, change.month: change.value}
    return {change.month: change.value} | ({} if now is None else {"other_months": now})


def _put_this_month(
    draft: Document,
    section: str,
    key: str,
    name: str,
    word: str,
    change: Change,
    months: list[str],
    findings: Findings,
) -> Path_:
    """What this month's plant can do: the entry of a unit or group in a month is set, or added with its reason."""
    entries: list[Any] = draft.data.setdefault(section, [])
    path: Path_ = ()
    nothing = 1.0 if word == "factor" else 0.0
    for month in [change.month] if change.month else months:
        own = [entry for entry in entries if str(entry.get("month")) == month and entry.get(key) == name]
        if not own and _number_of(change.value) == nothing:
            continue  # as it would be without an entry
        reason = change.reason or "; ".join(str(entry.get("reason", "")) for entry in own)
        if not reason:
            findings.error(
                change.place, change.item, "needs its reason", "write it in the note of this row: it travels into the plan"
            )
            return ()
        entry = {"month": month, key: name, word: change.value, "reason": reason}
        if own:
            at = entries.index(own[0])
            entries[at] = entry
            entries[:] = [other for other in entries if other is entry or other not in own]
            at = entries.index(entry)
        else:
            entries.append(entry)
            at = len(entries) - 1
        path = (section, at)
        draft.places[path] = change.place
    return path


def _number_of(value: str | float) -> float | None:
    """The number of a value, whatever its unit; None for a word."""
    try:
        return float(str(value).split()[0])
    except (ValueError, IndexError):
        return None
