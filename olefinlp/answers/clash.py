"""Why there is no plan, in a planner's words with the places in the files."""

from __future__ import annotations

from dataclasses import dataclass

from olefinlp.inputs.case import Case, Limit
from olefinlp.inputs.findings import Place, shown
from olefinlp.lp.clash import MOST_SETS, Side, clashing_sets
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
    """Sets of limits that cannot all be met; in each, leaving out any one makes the rest possible.

    `file` is the scenario's, as a person would type it.
    """

    sets: tuple[tuple[ClashingLimit, ...], ...]
    file: str = ""

    def __str__(self) -> str:
        if not self.sets:
            return (
                "No plan is possible, and no written limit is the cause: some material has no way out or in\n"
                "hint: look for a cut whose outlets are all closed, or a utility that nothing makes"
            )
        width = max(len(limit.text) for limits in self.sets for limit in limits)
        lines: list[str] = []
        for position, limits in enumerate(self.sets):
            lines.append(_headline(position, len(limits)))
            lines += [f"  {limit.text:<{width}}  {limit.place or ''}{_because(limit)}".rstrip() for limit in limits]
        word = "one of them" if len(self.sets) == 1 else "one of each set"
        rest = "more limits may clash beyond these" if len(self.sets) == MOST_SETS else "not every one of them helps alone"
        explain = f"; `olefinlp explain {self.file}` says which, and what it costs" if self.file else ""
        return "\n".join([*lines, f"hint: relax {word}, as little as is needed; {rest}{explain}"])


def _because(limit: ClashingLimit) -> str:
    return f"  ({limit.reason})" if limit.reason else ""


def _headline(position: int, size: int) -> str:
    start = "No plan is possible: " if position == 0 else "and apart from that, "
    return start + ("this limit cannot be met" if size == 1 else "these limits clash")


def find_clash(case: Case, lp: LabelledLp) -> Clash | None:
    """The clash of an impossible scenario; None when nothing clashes after all."""
    many = len(case.months) > 1
    sets = clashing_sets(lp)
    if sets is None:
        return None
    words = tuple(tuple(_in_words(case.limits[_key(lp, side)], side, many) for side in sides) for sides in sets)
    return Clash(words, shown(case.scenario.path))


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
