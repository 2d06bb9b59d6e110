"""Why there is no plan, in a planner's words with the places in the files."""

from __future__ import annotations

from dataclasses import dataclass

from olefinlp.inputs.case import Case, Limit
from olefinlp.inputs.findings import Place
from olefinlp.lp.clash import Side, clashing_sides
from olefinlp.lp.compile import LabelledLp
from olefinlp.lp.solver import Outcome


@dataclass(frozen=True, slots=True)
class ClashingLimit:
    """One limit of a clash: what it asks, and where it is written."""

    month: str
    text: str
    place: Place | None
    reason: str


@dataclass(frozen=True)
class Clash:
    """Limits that cannot all be met; leaving out any one of them would make them possible."""

    limits: tuple[ClashingLimit, ...]

    def __str__(self) -> str:
        if not self.limits:
            return (
                "No plan is possible, and no written limit is the cause: some material has no way out or in\n"
                "hint: look for a cut whose outlets are all closed, or a utility that nothing makes"
            )
        if len(self.limits) == 1:
            head = "No plan is possible: this limit cannot be met"
        else:
            head = "No plan is possible: these limits clash"
        width = max(len(limit.text) for limit in self.limits)
        lines = [f"  {limit.text:<{width}}  {limit.place or ''}".rstrip() for limit in self.limits]
        reasons = [f"  ({limit.text}: {limit.reason})" for limit in self.limits if limit.reason]
        return "\n".join([head, *lines, *reasons, "hint: relax any one of them; every other limit can be kept"])


def find_clash(case: Case, lp: LabelledLp, outcome: Outcome) -> Clash:
    """The clash of an impossible scenario."""
    sides = clashing_sides(lp, outcome)
    many = len(case.months) > 1
    return Clash(tuple(_in_words(case.limits[_key(lp, side)], side, many) for side in sides))


def _key(lp: LabelledLp, side: Side) -> tuple[str, ...]:
    family, *key = lp.rows[side.row]
    return (family.removesuffix("_limit"), *key)


def _in_words(limit: Limit, side: Side, many: bool) -> ClashingLimit:
    bound = limit.low if side.low else limit.high
    amount = f"{'at least' if side.low else 'at most'} {(bound or 0.0) * limit.scale:,.6g} {limit.unit}"
    text = limit.label if limit.family in ("ratio", "specification") else f"{limit.label}, {amount}"
    place = limit.place_low if side.low else limit.place_high
    return ClashingLimit(limit.month, f"{limit.month} {text}" if many else text, place or limit.place_low, limit.reason)


def endless(case: Case, lp: LabelledLp, outcome: Outcome) -> str:
    """A message for a margin that has no end, naming what grows with it."""
    lines = ["The margin has no end: something can be bought and sold without limit"]
    if outcome.ray is not None:
        largest = max(abs(float(v)) for v in outcome.ray) or 1.0
        for column, label in enumerate(lp.columns):
            if label[0] in ("bought", "sold", "trade") and float(outcome.ray[column]) > 1e-9 * largest:
                verb = {"bought": "bought", "sold": "sold", "trade": "traded"}[label[0]]
                name = label[1]
                lines.append(f"  {name} {verb} without end  {_place(case, label)}".rstrip())
    return "\n".join([*lines, "hint: write a `max:` for one of them, or check the prices"])


def _place(case: Case, label: tuple[str, ...]) -> str:
    document = case.scenario.document
    if label[0] == "bought":
        data = case.sources[label[1]]
        return str(document.place((data.kind, data.feed, data.name)))
    return str(document.place(("outlets" if label[0] == "sold" else "utilities", label[1])))
