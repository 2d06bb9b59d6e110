"""Decisions taken before it is known which case comes: one program of all cases, which share those decisions.

Every case brings its own program; what is decided beforehand, a sum of columns in each, must be the
same in all of them:

    max (1 − λ) Σ π z + λ (η − Σ π u / w)
    z = margin of a case,   u ≥ η − z,   u ≥ 0

π are the weights of the cases. At its best η − Σ π u / w is the average of the worst share w of the
cases, the conditional value at risk of level 1 − w. Published method: Rockafellar & Uryasev, Optimization of
conditional value-at-risk, Journal of Risk 2(3), 2000; the formula is from memory.

λ stays below 1: with no weight on the mean, good cases, and among decisions that are equally good for the
bad cases the better ones, are left as they fall.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from olefinlp.lp.certificate import Certificate, certify, proven
from olefinlp.lp.compile import Floats, Integers, Label, LabelledLp
from olefinlp.lp.solver import Solution, Solver, Status

HELD_ROW, WORST_ROW = "held_decision", "worst_margin"
DECISION, FLOOR_COLUMN, BELOW = "decided_before", "floor_of_margins", "below_floor"
PRESOLVES = ("choose", "off")


class TwoStageError(Exception):
    """A program of all cases that ended neither with an optimum nor as impossible."""


@dataclass(frozen=True)
class Block:
    """One case: its weight π, its program, and for each decision the columns of it that sum to the decision."""

    name: str
    weight: float
    lp: LabelledLp
    decided: tuple[tuple[int, ...], ...]


@dataclass(frozen=True)
class TwoStagePlan:
    """A proven optimum: the decisions in order, the margin of each case as the program leaves it, and what was maximised.

    Where little of the objective hangs on a case its margin may be less than the best with these decisions.
    """

    decided: Floats
    margins: Mapping[str, float]
    objective: float
    certificate: Certificate


def check_risk(risk: float, worst: float) -> None:
    """Raises `ValueError` unless 0 ≤ risk < 1 and 0 < worst ≤ 1."""
    if not 0 <= risk < 1:
        raise ValueError(
            f"the weight on the worst cases is at least 0 and below 1, not {risk:g}: "
            "with all weight on the worst cases the good ones are left as they fall"
        )
    if not 0 < worst <= 1:
        raise ValueError(f"the worst share of the cases is above 0 and at most 1, not {worst:g}")


def worst_mean(margins: Sequence[float], weights: Sequence[float], worst: float) -> float:
    """The average of the worst share of the cases by weight, the last of them in part; weights sum to one.

    >>> worst_mean([10, 30, 20], [0.25, 0.5, 0.25], 0.5), worst_mean([10, 30, 20], [0.25, 0.5, 0.25], 0.4)
    (15.0, 13.75)
    """
    left, total = worst, 0.0
    for margin, weight in sorted(zip(margins, weights, strict=True)):
        taken = min(left, weight)
        total += taken * margin
        left -= taken
    return total / (worst - left)


def all_cases(blocks: Sequence[Block], risk: float = 0.0, worst: float = 0.2) -> LabelledLp:
    """The program of all cases; rows are labelled (family, case, …) so that a clash of limits names its case.

    The decisions are columns of their own, free, and a row for each decision and case says that the case's columns sum to it.
    So a decision keeps to the limits that the cases have in common. Its dual is what one more unit is worth in that case.
    Raises `ValueError` for a risk or a worst share outside its range.
    """
    check_risk(risk, worst)
    decisions = len(blocks[0].decided)
    firsts = [decisions, *(decisions + np.cumsum([len(block.lp.columns) for block in blocks])).tolist()]
    places = list(zip(blocks, firsts, strict=False))
    parts = [_own_rows(block, first) for block, first in places] + [_held_rows(block, first) for block, first in places]
    columns: list[Label] = [(DECISION, str(i)) for i in range(decisions)]
    columns += [label for block in blocks for label in _of_case(block, block.lp.columns)]
    low = np.concatenate([np.full(decisions, -np.inf), *(block.lp.low for block in blocks)])
    high = np.concatenate([np.full(decisions, np.inf), *(block.lp.high for block in blocks)])
    cost = np.concatenate([np.zeros(decisions), *((1 - risk) * block.weight * block.lp.cost for block in blocks)])
    if risk:
        unit = max(float(np.abs(block.lp.cost).max(initial=0.0)) for block in blocks) or 1.0
        parts.append(_worst_rows(blocks, firsts, unit))
        columns += [(FLOOR_COLUMN,), *((BELOW, block.name) for block in blocks)]
        low = np.concatenate([low, [-np.inf], np.zeros(len(blocks))])
        high = np.concatenate([high, np.full(1 + len(blocks), np.inf)])
        cost = np.concatenate([cost, [unit * risk], [-unit * risk * block.weight / worst for block in blocks]])
    offset = (1 - risk) * math.fsum(block.weight * block.lp.offset for block in blocks)
    return _joined(parts, tuple(columns), low, high, cost, offset)


@dataclass(frozen=True)
class _Rows:
    """Some rows of the program: labels, how many non-zeros each has, where they stand, what they are, limits."""

    labels: list[Label]
    counts: Integers
    index: Integers
    value: Floats
    low: Floats
    high: Floats


def _own_rows(block: Block, first: int) -> _Rows:
    """The rows of a case, its columns moved to where the case begins."""
    lp = block.lp
    return _Rows(_of_case(block, lp.rows), np.diff(lp.starts), lp.index + np.int32(first), lp.value, lp.row_low, lp.row_high)


def _of_case(block: Block, labels: Sequence[Label]) -> list[Label]:
    return [(label[0], block.name, *label[1:]) for label in labels]


def _held_rows(block: Block, first: int) -> _Rows:
    """Σ columns of the case − decision = 0."""
    counts = [1 + len(columns) for columns in block.decided]
    index = [j for i, columns in enumerate(block.decided) for j in (i, *(first + column for column in columns))]
    value = [v for columns in block.decided for v in (-1.0, *(1.0 for _ in columns))]
    labels: list[Label] = [(HELD_ROW, block.name, str(i)) for i in range(len(counts))]
    nothing = np.zeros(len(counts))
    return _Rows(labels, np.array(counts, np.int32), np.array(index, np.int32), np.array(value), nothing, nothing)


def _worst_rows(blocks: Sequence[Block], firsts: Sequence[int], unit: float) -> _Rows:
    """z + u ≥ η, in such a unit of money that the numbers are about as large as those of the plan."""
    floor = firsts[len(blocks)]
    index, value = [], []
    for k, block in enumerate(blocks):
        places = np.flatnonzero(block.lp.cost)
        index.append(np.concatenate([places + firsts[k], [floor, floor + 1 + k]]).astype(np.int32))
        value.append(np.concatenate([block.lp.cost[places] / unit, [-1.0, 1.0]]))
    labels: list[Label] = [(WORST_ROW, block.name) for block in blocks]
    counts = np.array([len(line) for line in index], np.int32)
    low = np.array([-block.lp.offset / unit for block in blocks])
    return _Rows(labels, counts, np.concatenate(index), np.concatenate(value), low, np.full(len(blocks), np.inf))


def _joined(
    parts: Sequence[_Rows], columns: tuple[Label, ...], low: Floats, high: Floats, cost: Floats, offset: float
) -> LabelledLp:
    rows = tuple(label for part in parts for label in part.labels)
    counts = np.concatenate([part.counts for part in parts])
    return LabelledLp(
        rows=rows,
        columns=columns,
        starts=np.concatenate([[0], np.cumsum(counts)]).astype(np.int32),
        index=np.concatenate([part.index for part in parts]).astype(np.int32),
        value=np.concatenate([part.value for part in parts]),
        row_low=np.concatenate([part.low for part in parts]),
        row_high=np.concatenate([part.high for part in parts]),
        low=low,
        high=high,
        cost=cost,
        offset=offset,
        row_at={label: i for i, label in enumerate(rows)},
        column_at={label: j for j, label in enumerate(columns)},
    )


# ---------------------------------------------------------------------------------- solved


def decide(blocks: Sequence[Block], risk: float = 0.0, worst: float = 0.2) -> TwoStagePlan | None:
    """The proven best decisions for all cases together; None where no decisions are possible in all of them.

    `risk` is λ, `worst` the share of the cases by weight that are the worst. Weights sum to one.
    Raises `ValueError` for a risk or share outside its range, `TwoStageError` when the solver fails or the
    margin has no end, and `CertificateError` when the optimum cannot be proven.

    >>> import numpy as np
    >>> def case(price):  # buy at 2, before the price is known; sell at most what is bought, and at most 1
    ...     rows, columns = (("sold_limit",),), (("bought",), ("sold",))
    ...     arrays = [np.array(a, float) for a in ([-1, 1], [-np.inf], [0], [0, 0], [np.inf, 1], [-2, price])]
    ...     starts, index = np.array([0, 2], np.int32), np.array([0, 1], np.int32)
    ...     return LabelledLp(rows, columns, starts, index, *arrays, 0.0, {rows[0]: 0}, {c: j for j, c in enumerate(columns)})
    >>> plan = decide([Block("good", 0.5, case(5), ((0,),)), Block("bad", 0.5, case(1), ((0,),))])
    >>> plan.decided.tolist(), plan.margins, plan.objective
    ([1.0], {'good': 3.0, 'bad': -1.0}, 1.0)
    """
    found = _solved(all_cases(blocks, risk, worst))
    if found is None:
        return None
    solution, certificate = found
    first, margins = len(blocks[0].decided), {}
    for block in blocks:
        own = solution.x[first : first + len(block.lp.columns)]
        margins[block.name] = float(block.lp.cost @ own) + block.lp.offset
        first += len(own)
    return TwoStagePlan(solution.x[: len(blocks[0].decided)], margins, solution.objective, certificate)


def _solved(lp: LabelledLp) -> tuple[Solution, Certificate] | None:
    """The proven optimum; one that is slightly off is looked for once more in another way."""
    solver = Solver(lp)
    for presolve in PRESOLVES:
        solver.highs.setOptionValue("presolve", presolve)
        solver.highs.clearSolver()
        outcome = solver.solve()
        if outcome.status is Status.INFEASIBLE:
            return None
        if outcome.solution is None:
            raise TwoStageError(f"the program of all cases ended as {outcome.message}")
        certificate = certify(lp, outcome.solution)
        if certificate.holds or presolve == PRESOLVES[-1]:
            return outcome.solution, proven(certificate)
    raise AssertionError("there is always a last way")
