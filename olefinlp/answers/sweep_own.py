"""Cases of a sweep that cannot share a program: each is built, solved and proven on its own."""

from __future__ import annotations

import dataclasses
from collections.abc import Iterable
from typing import TYPE_CHECKING

import numpy as np

from olefinlp.answers.sweep_readings import ReadOut, assembled
from olefinlp.answers.sweep_refused import in_a_line
from olefinlp.answers.sweep_terms import lp_of
from olefinlp.inputs.case import Case
from olefinlp.inputs.findings import InputError
from olefinlp.inputs.sweep_cases import SweepCases, Values
from olefinlp.lp.certificate import certify
from olefinlp.lp.compile import Label, LabelledLp
from olefinlp.lp.neighbours import from_nothing
from olefinlp.lp.solver import Solver, Status
from olefinlp.lp.sweep import (
    ENDLESS,
    IMPOSSIBLE,
    NO_CASE,
    OPTIMAL,
    UNPROVEN,
    SolvedBlock,
    clashing_rows,
    read_values,
    shares_of,
)

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan

ENDS = {Status.INFEASIBLE: IMPOSSIBLE, Status.UNBOUNDED: ENDLESS}


def solve_own(cases: SweepCases, base: Plan, read: ReadOut, first: int, count: int) -> tuple[SolvedBlock, dict[int, str]]:
    """A block of cases, each on a program of its own, with the reasons of those that have no plan."""
    status = np.full(count, OPTIMAL, dtype=np.int8)
    margin, held = np.full(count, np.nan), np.full(count, np.nan)
    readings = np.full((count, len(read.names)), np.nan)
    reasons: dict[int, str] = {}
    for at in range(count):
        try:
            scenario = cases.scenario_of(first + at)
        except InputError as error:
            status[at] = NO_CASE
            reasons[first + at] = in_a_line(error)
            continue
        lp = lp_of(scenario)
        status[at], rows = _solve(lp, base.lp, read, margin[at : at + 1], readings[at])
        if rows:
            reasons[first + at] = clash_words(scenario.case, [lp.rows[row] for row in rows])
    return SolvedBlock(first, status, margin, held, readings), reasons


def clash_words(case: Case, labels: Iterable[Label]) -> str:
    """Limits that clash, by the names that people read; empty where none of the rows is a limit."""
    limits = [case.limits.get((label[0].removesuffix("_limit"), *label[1:])) for label in labels]
    months = len(case.months) > 1
    words = [f"{limit.label} {limit.month}" if months else limit.label for limit in limits if limit]
    return f"limits clash: {', '.join(words)}" if words else ""


def _solve(lp: LabelledLp, base: LabelledLp, read: ReadOut, margin: Values, into: Values) -> tuple[int, tuple[int, ...]]:
    """One program: how it ended, and which rows clash."""
    outcome = from_nothing(Solver(lp))
    solution = outcome.solution
    if solution is None:
        return ENDS.get(outcome.status, UNPROVEN), clashing_rows(outcome)
    if not certify(lp, solution).holds:
        return UNPROVEN, ()
    own = relabelled(read, base, lp)
    rows = own.arrays.share_rows
    shares = shares_of(solution.activity[rows], lp.row_high[rows])[None]
    values = read_values(own.arrays, solution.x[None], solution.row_dual[None], shares)[0]
    margin[0] = solution.objective
    places = {reading.name: at for at, reading in enumerate(own.readings)}
    for at, reading in enumerate(read.readings):
        if reading.name in places:
            into[at] = values[places[reading.name]]
    return OPTIMAL, ()


def relabelled(read: ReadOut, base: LabelledLp, lp: LabelledLp) -> ReadOut:
    """The same readings on another program, by label; those of which it has nothing are left out."""
    found = []
    for reading in read.readings:
        columns = tuple(lp.column_at[base.columns[c]] for c in reading.columns if base.columns[c] in lp.column_at)
        row = lp.row_at.get(base.rows[reading.row], -1) if reading.row >= 0 else -1
        if (reading.row >= 0) == (row >= 0):
            found.append(dataclasses.replace(reading, columns=columns, row=row))
    return assembled(found)
