"""Cases side by side: every case a proven plan of its own, all of them solved on one program.

Cases of one scenario share every coefficient, as long as they differ in prices, availability and
limits; a case that does not (another quality, another plant) gets a program of its own. Each is
restarted from the basis of the first, so that no plan depends on the order of the cases.
"""

from __future__ import annotations

import functools
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

from olefinlp.answers.balances import BalanceError
from olefinlp.answers.bridge import Bridge, bridge_of
from olefinlp.answers.plan import NoPlan, Plan, make_plan, plan_of
from olefinlp.inputs.cases import CaseSet
from olefinlp.inputs.findings import Finding
from olefinlp.inputs.scenario import Scenario
from olefinlp.lp.case_terms import SharedProgram, with_terms
from olefinlp.lp.certificate import CertificateError
from olefinlp.lp.neighbours import NeighbourError, Optimum
from olefinlp.lp.solver import Solution


@dataclass(frozen=True)
class CaseResult:
    """One case: its plan, or the reason why it has none."""

    name: str
    weight: float
    plan: Plan | None
    reason: str = ""
    note: str = ""


@dataclass(frozen=True)
class Comparison:
    """Cases in the order in which they were written; differences are from the first.

    `weighted` says whether somebody wrote weights; without, all weigh the same.
    """

    source: str
    scenario: Scenario
    cases: tuple[CaseResult, ...]
    weighted: bool = False
    warnings: tuple[Finding, ...] = ()
    shared: int = field(default=0, compare=False)
    """How many cases were solved on the program of the first."""

    @functools.cached_property
    def plans(self) -> dict[str, Plan]:
        """The plans there are, by case."""
        return {case.name: case.plan for case in self.cases if case.plan is not None}

    @functools.cached_property
    def first(self) -> str:
        """The case that bridges start from: the first that has a plan."""
        return next(iter(self.plans))

    @functools.cached_property
    def bridges(self) -> dict[str, Bridge]:
        """The bridge from the first case that has a plan to every other, by case; solved when first asked for."""
        from_first = self.plans[self.first]
        return {
            name: bridge_of(from_first, plan, names=(self.first, name)) for name, plan in self.plans.items() if name != self.first
        }

    @property
    def names(self) -> tuple[str, ...]:
        """Names of all cases."""
        return tuple(case.name for case in self.cases)

    @functools.cached_property
    def weights(self) -> dict[str, float]:
        """Weights of the cases that have a plan; they sum to one."""
        total = sum(case.weight for case in self.cases if case.plan) or 1.0
        return {case.name: case.weight / total for case in self.cases if case.plan}

    def plan(self, name: str) -> Plan:
        """The plan of a case; raises `KeyError` where it has none."""
        return self.plans[name]


class CasePlanner:
    """Plans cases on the program of one that is planned already."""

    def __init__(self, base: Plan) -> None:
        self.base = base
        self.program = SharedProgram(base.quantities.case, base.lp, base.price_map)
        self.shared = 0

    def plan(self, scenario: Scenario) -> Plan:
        """The proven plan of a case; raises what `make_plan` raises."""
        base = self.base
        terms = self.program.terms(scenario.case)
        if terms is None:
            return make_plan(scenario)
        try:
            optimum = base.neighbours.solve(cost=terms.cost, rows=terms.rows, columns=terms.columns)
        except (NeighbourError, CertificateError):
            optimum = None
        if optimum is None:
            return make_plan(scenario)  # which says why there is no plan
        lp = with_terms(base.lp, terms)
        plan = plan_of(scenario, lp, _solution(optimum))
        plan.__dict__["price_map"] = base.price_map
        self.shared += 1
        return plan


def _why(error: Exception) -> str:
    """Why a case has no plan; a hint is for a scenario file, which a case has not of its own."""
    return "\n".join(line for line in str(error).splitlines() if not line.startswith("hint:"))


def _solution(optimum: Optimum) -> Solution:
    """A neighbour's optimum as a solution of the program without its row of the margin."""
    lp = optimum.lp
    reduced = optimum.cost - lp.gathered(optimum.row_dual)
    activity = lp.activity(optimum.x)
    return Solution(optimum.x, activity[:-1], optimum.row_dual[:-1], reduced, optimum.objective, 0)


def compare_cases(cases: CaseSet, told: Callable[[str], Any] | None = None) -> Comparison:
    """The plan of every case, each proven, or its reason to have none.

    `told` is called with the name of each case before it is planned.

    >>> from olefinlp import compare_cases, read_cases
    >>> comparison = compare_cases(read_cases("scenarios/brackwater_2031_03.yaml"))
    >>> round(comparison.plan("Strong propylene").margin / 1000, 1)
    30135.5
    """
    planner: CasePlanner | None = None
    results: list[CaseResult] = []
    for case in cases.cases:
        if told:
            told(case.name)
        if case.scenario is None:
            results.append(CaseResult(case.name, case.weight, None, case.reason, case.note))
            continue
        try:
            plan = planner.plan(case.scenario) if planner else make_plan(case.scenario)
        except (NoPlan, CertificateError, BalanceError) as error:
            results.append(CaseResult(case.name, case.weight, None, _why(error), case.note))
            continue
        planner = planner or CasePlanner(plan)
        results.append(CaseResult(case.name, case.weight, plan, "", case.note))
    warnings = [*cases.warnings, *(w for r in results if r.plan for w in r.plan.warnings)]
    shared = planner.shared + 1 if planner else 0
    return Comparison(cases.source, cases.scenario, tuple(results), cases.weighted, tuple(dict.fromkeys(warnings)), shared)
