"""The figures to write for a set of relaxed limits, and the best plan with just these.

Each figure is rounded to the loose side, so that a file with the figures as printed can be planned. A
ratio or a specification is multiplied out in the program; here its written number is changed.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass, replace

import numpy as np

from olefinlp.inputs.case import Case, Limit, Part, Reader
from olefinlp.inputs.case_recovery import KIND_OF_TERM, item_parts
from olefinlp.inputs.findings import Findings
from olefinlp.inputs.units import Quantity, share
from olefinlp.lp.certificate import certify
from olefinlp.lp.clash import Side
from olefinlp.lp.compile import Floats, LabelledLp
from olefinlp.lp.relax import Relaxation, least_ratio, relaxed, with_ratio
from olefinlp.lp.solver import Outcome, Status, solve

NOTCHES = 3
"""How often a figure is rounded one notch looser before its plan is given up."""
MULTIPLIED_OUT = ("ratio", "specification")
FIGURES = 4
NOTHING_LEFT = 1e-9
"""A minimum of which less than this share remains is dropped."""


@dataclass(frozen=True, slots=True)
class Change:
    """One side of a limit to relax, in the unit in which people read it; `to` is None when it is dropped.

    `least` is the smallest change that does (None for a ratio to nothing); `to` is it rounded to the loose side.
    """

    limit: Limit
    side: Side
    name: str
    which: str
    written: float
    to: float | None
    least: float | None
    unit: str

    @property
    def share(self) -> float | None:
        """Change as a share of the limit; None for a limit of zero, a ratio or a specification."""
        if not self.written or self.limit.family in MULTIPLIED_OUT:
            return None
        return ((self.to or 0.0) - self.written) / abs(self.written)


@dataclass(frozen=True)
class WayOut:
    """Limits to relax together; the best margin that is then possible, None (and why) when there is none."""

    changes: tuple[Change, ...]
    relaxation: Relaxation
    margin: float | None
    ending: str


def limit_of(case: Case, lp: LabelledLp, side: Side) -> Limit:
    """The written limit that a side of a row stands for."""
    family, *key = lp.rows[side.row]
    return case.limits[(family.removesuffix("_limit"), *key)]


def way_out(case: Case, lp: LabelledLp, relaxation: Relaxation) -> WayOut:
    """The figures to write and the best plan with them; a notch looser should rounding stand in the way."""
    for notch in range(NOTCHES):
        changes, program = _written(case, lp, relaxation, notch)
        outcome = solve(program)
        if outcome.status is not Status.INFEASIBLE:
            break
    margin, ending = _margin(program, outcome)
    return WayOut(tuple(changes), relaxation, margin, ending)


def _margin(program: LabelledLp, outcome: Outcome) -> tuple[float | None, str]:
    if outcome.solution is None:
        endless = outcome.status is Status.UNBOUNDED
        return None, "the margin then has no end: check the prices" if endless else f"its margin is not known: {outcome.message}"
    if not certify(program, outcome.solution).holds:
        return None, "its margin could not be proven"
    return outcome.solution.objective, ""


def _written(case: Case, lp: LabelledLp, relaxation: Relaxation, notch: int) -> tuple[list[Change], LabelledLp]:
    """The changes as a person would write them, and the program with just these."""
    amounts = relaxation.amounts
    changes: dict[Side, Change] = {}
    ratios: dict[Side, Limit] = {}
    program = lp
    for side, need in amounts.items():
        limit = limit_of(case, lp, side)
        if limit.family in MULTIPLIED_OUT:
            ratios[side] = limit
            continue
        changes[side] = _plain_change(limit, side, need, notch)
        program = relaxed(program, {side: _amount_of(changes[side])})
    left = dict(ratios)
    for side, limit in ratios.items():
        del left[side]
        others = relaxed(program, {other: amounts[other] * (1 + 1e-6) for other in left})
        changes[side], program = _ratio_change(case, others, program, limit, side, notch)
    return [changes[side] for side in amounts], program


def _plain_change(limit: Limit, side: Side, need: float, notch: int) -> Change:
    written = (limit.low if side.low else limit.high) or 0.0
    target = written + (-need if side.low else need)
    to = _outward(target * limit.scale, need * limit.scale, side.low, notch)
    dropped = side.low and (to <= 0 or target < NOTHING_LEFT * written)
    which = "minimum" if side.low else "maximum"
    return Change(limit, side, limit.label, which, written * limit.scale, None if dropped else to, need * limit.scale, limit.unit)


def _amount_of(change: Change) -> float:
    """By how much a change is looser, in units of the plan."""
    return math.inf if change.to is None else abs(change.to - change.written) / change.limit.scale


def _outward(target: float, need: float, down: bool, notch: int) -> float:
    """A figure rounded to the loose side, to four figures or finer where the change is small, and some notches more.

    >>> _outward(67.9553, 8.0447, True, 0), _outward(3747.2703, 845.2, False, 0), _outward(73.1, 6.9, True, 0)
    (67.95, 3748.0, 73.1)
    """
    if target == 0:
        return 0.0
    decimals = FIGURES - 1 - math.floor(math.log10(abs(target)))
    finest = decimals + 5
    while need * 10.0**decimals < 50 and decimals < finest:
        decimals += 1
    steps = round(target * 10.0**decimals, 5)
    steps = math.floor(steps) - notch if down else math.ceil(steps) + notch
    return float(round(steps / 10.0**decimals, max(decimals, 0)))


# ---------------------------------------------------------------------------------- ratios and specifications


@dataclass(frozen=True, slots=True)
class Written:
    """A ratio or specification as written: name, side, number, its unit, size of that unit, sum below the line."""

    name: str
    which: str
    number: float
    unit: str
    one: float
    below: tuple[Part, ...]


def _ratio_change(
    case: Case, others: LabelledLp, program: LabelledLp, limit: Limit, side: Side, notch: int
) -> tuple[Change, LabelledLp]:
    """The least change of the written ratio; where nothing is below the line, it must be dropped."""
    written = _as_written(case, limit)
    below = _coefficients(program, written.below, limit.month)
    down = written.which == "minimum"
    change = least_ratio(others, side, below)
    least = None if change is None else change / written.one
    to = None if least is None else _outward(written.number + (-least if down else least), least, down, notch)
    if to is None or (down and to <= 0):
        dropped = Change(limit, side, written.name, written.which, written.number, None, least, written.unit)
        return dropped, relaxed(program, {side: math.inf})
    found = Change(limit, side, written.name, written.which, written.number, to, least, written.unit)
    return found, with_ratio(program, side, below, abs(to - written.number) * written.one)


def _as_written(case: Case, limit: Limit) -> Written:
    plant = case.scenario.plant.file
    if limit.family == "specification":
        outlet, prop, which = limit.key[:3]
        spec = plant.outlets[outlet].specifications[prop]
        below = tuple(Part("ingredient", (outlet, cut), 1.0) for cut in spec.values)
        number, unit, one = _number(spec.min if which == "min" else spec.max)
        return Written(f"{outlet} {prop}", f"{which}imum", number, unit, one, below)
    name, which = limit.key[:2]
    ratio = case.scenario.file.ratio_limits.get(name) or plant.ratio_limits[name]
    reader = Reader(case.scenario, Findings())
    reader.case = case
    terms = [(KIND_OF_TERM[term.kind], item, term.times) for term in ratio.to for item in term.names]
    parts = tuple(part for kind, item, times in terms for part in item_parts(reader, kind, item, times))
    limit_number, side = (ratio.at_most, "maximum") if which == "at_most" else (ratio.at_least, "minimum")
    return Written(f"{name} ratio", side, limit_number or 0.0, "", 1.0, parts)


def _number(written: Quantity | float | None) -> tuple[float, str, float]:
    """A property as written: its number, its unit, and what one of that unit is in the plan."""
    if isinstance(written, Quantity):
        return written.number, written.unit.text, share(replace(written, number=1.0))
    return written or 0.0, "", 1.0


def _coefficients(lp: LabelledLp, parts: Iterable[Part], month: str) -> Floats:
    """A sum of quantities of one month as coefficients of the program's columns."""
    names = {"component": "component_made", "cut": "cut_made", "outlet": "disposition", "ingredient": "disposition"}
    found = np.zeros(len(lp.columns))
    for part in parts:
        start = (names.get(part.kind, part.kind), *part.item)
        for column, label in enumerate(lp.columns):
            if label[: len(start)] == start and label[-1] == month:
                found[column] += part.coefficient
    return found
