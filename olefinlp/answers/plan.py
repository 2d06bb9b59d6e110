"""A plan: a proven optimum of a scenario, as tables."""

from __future__ import annotations

import functools
import hashlib
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING

from olefinlp.answers.balances import Recomputed, balance_flows, balances_table, closures, closures_table, prove_balances
from olefinlp.answers.limits import limits_table
from olefinlp.answers.money import MoneyLine, margin, money_lines, money_table
from olefinlp.answers.plan_tables import (
    feeds_table,
    furnaces_table,
    groups_table,
    recovery_table,
    slate_table,
    stocks_table,
)
from olefinlp.answers.quantities import Quantities
from olefinlp.answers.record_tables import flat_table, inputs_table, prices_table, reduced_costs_table
from olefinlp.answers.tables import Table
from olefinlp.inputs.case import Case
from olefinlp.inputs.findings import Finding, Place, shown
from olefinlp.inputs.scenario import Scenario
from olefinlp.inputs.units import per_lb
from olefinlp.lp.algebra import build_model
from olefinlp.lp.certificate import Certificate, prove
from olefinlp.lp.compile import LabelledLp, PriceMap, compile_prices, program_of
from olefinlp.lp.neighbours import Neighbours
from olefinlp.lp.solver import Outcome, Solution, Solver, Status

if TYPE_CHECKING:
    from olefinlp.answers.clash import Clash

MONEY_AGREES = 1e-6


class NoPlan(Exception):
    """There is no plan; `status` and `clash` say why."""

    def __init__(self, message: str, status: Status, clash: Clash | None = None) -> None:
        super().__init__(message)
        self.status = status
        self.clash = clash


@dataclass(frozen=True)
class Plan:
    """A proven optimum. Tables are plain records; `.to_frame()` of each gives a DataFrame."""

    scenario: Scenario
    lp: LabelledLp
    solution: Solution
    certificate: Certificate
    lines: tuple[MoneyLine, ...]
    warnings: tuple[Finding, ...]
    quantities: Quantities = field(repr=False)
    recomputed: Recomputed = field(repr=False)

    @property
    def status(self) -> str:
        """Always `optimal`: nothing else becomes a plan."""
        return Status.OPTIMAL.value

    @property
    def currency(self) -> str:
        """ISO code of the money."""
        return self.scenario.currency

    @property
    def margin(self) -> float:
        """Margin before fixed cost, in the currency itself, all months."""
        return self.solution.objective * 1000

    def margin_of(self, month: str) -> float:
        """Margin before fixed cost of one month, in the currency itself."""
        return margin(list(self.lines), month) * 1000

    def fixed_cost(self, month: str | None = None) -> float:
        """Fixed cost, in the currency itself; printed, never optimised."""
        fixed = self.quantities.case.fixed_costs.items()
        return 1000 * sum(value for (_, m), value in fixed if month in (None, m))

    def main_product(self, month: str | None = None) -> float:
        """Main product made, t."""
        cut = self.scenario.plant.file.main_product
        months = [month] if month else self.quantities.case.months
        return 1000 * sum(self.quantities.value("cut_made", cut, m) for m in months)

    def margin_per_tonne(self, month: str | None = None) -> float | None:
        """Margin before fixed cost per tonne of main product; None when none is made."""
        made = self.main_product(month)
        total = self.margin if month is None else self.margin_of(month)
        return total / made if made > 0 else None

    def margin_per_lb(self, month: str | None = None) -> float | None:
        """Margin per lb of main product, in hundredths of the currency (US cents when it is USD)."""
        per_tonne = self.margin_per_tonne(month)
        return None if per_tonne is None else per_lb(per_tonne)

    @functools.cached_property
    def feeds(self) -> Table:
        """What is bought."""
        from olefinlp.answers.break_even import first_tonne_worths

        return feeds_table(self.quantities, first_tonne_worths(self))

    @functools.cached_property
    def furnaces(self) -> Table:
        """What each furnace group cracks, by feed and severity."""
        return furnaces_table(self.quantities)

    @functools.cached_property
    def furnace_groups(self) -> Table:
        """Hours of each furnace group."""
        return groups_table(self.quantities)

    @functools.cached_property
    def slate(self) -> Table:
        """What is sold."""
        return slate_table(self.quantities)

    @functools.cached_property
    def recovery(self) -> Table:
        """Load of each recovery unit."""
        return recovery_table(self.quantities)

    @functools.cached_property
    def stocks(self) -> Table:
        """Tanks."""
        return stocks_table(self.quantities)

    @functools.cached_property
    def _flows(self) -> list:  # type: ignore[type-arg]
        return balance_flows(self.recomputed)

    @functools.cached_property
    def balances(self) -> Table:
        """Every line of every balance."""
        return balances_table(self._flows)

    @functools.cached_property
    def closures(self) -> Table:
        """How well each balance closes."""
        return closures_table(self.recomputed, closures(self._flows))

    @functools.cached_property
    def money(self) -> Table:
        """Where the margin comes from."""
        return money_table(self.quantities, list(self.lines))

    @functools.cached_property
    def prices(self) -> Table:
        """Prices as written and as used."""
        return prices_table(self.quantities)

    @functools.cached_property
    def limits(self) -> Table:
        """Every written limit and what one more unit of it is worth."""
        return limits_table(self.quantities)

    @functools.cached_property
    def reduced_costs(self) -> Table:
        """Decisions at a bound, and what forcing one more unit in would change."""
        return reduced_costs_table(self.quantities)

    @functools.cached_property
    def inputs(self) -> Table:
        """Every number of the files as written and as used."""
        return inputs_table(self.quantities)

    @functools.cached_property
    def flat(self) -> Table:
        """All quantities and money in one list, for pivoting."""
        return flat_table(self.quantities, list(self.lines))

    @functools.cached_property
    def neighbours(self) -> Neighbours:
        """The plan's program, loaded once more to be solved around this optimum."""
        return Neighbours(self.lp)

    @functools.cached_property
    def price_map(self) -> PriceMap:
        """How each price enters the objective."""
        return compile_prices(build_model(self.quantities.case))

    @functools.cached_property
    def audit(self) -> Table:
        """What proves the plan."""
        from olefinlp.answers.audit import audit_table

        return audit_table(self)

    def tables(self) -> Iterator[Table]:
        """All tables, in the order in which people read them."""
        yield from (self.feeds, self.furnaces, self.furnace_groups, self.slate, self.recovery, self.stocks, self.balances)
        yield from (self.closures, self.money, self.prices, self.limits, self.reduced_costs, self.inputs, self.audit, self.flat)

    def file_hashes(self) -> dict[str, str]:
        """SHA-256 of every input file, by the path a person would type."""
        files = [Path(name) for name in self.scenario.files]
        return {shown(file): hashlib.sha256(file.read_bytes()).hexdigest() for file in files if file.exists()}

    def _repr_html_(self) -> str:
        """A plan in a notebook: its margin, what it buys and sells."""
        from olefinlp.answers.notebook import plan_html

        return plan_html(self)


def make_plan(scenario: Scenario) -> Plan:
    """The best plan of a scenario, proven.

    Raises `NoPlan` when no plan is possible, or the margin has no end, or the solver stopped;
    `CertificateError` or `BalanceError` when the answer cannot be proven.

    >>> from olefinlp import make_plan, read_scenario
    >>> round(make_plan(read_scenario("scenarios/thermal_cracker.yaml")).margin, 2)
    3684.2
    """
    case = scenario.case
    lp = program_of(case)
    solver = Solver(lp)
    outcome = solver.solve()
    if outcome.solution is None:
        raise _no_plan(case, solver, outcome)
    return plan_of(scenario, lp, outcome.solution)


def plan_of(scenario: Scenario, lp: LabelledLp, solution: Solution) -> Plan:
    """A plan from a solution, once its optimality, its balances and its money are proven."""
    certificate = prove(lp, solution)
    q = Quantities(scenario.case, lp, solution)
    again = Recomputed(q)
    found = closures(balance_flows(again))
    prove_balances(again, found)
    lines = money_lines(q)
    _prove_money(lines, solution)
    warnings = [
        Finding(
            "warning",
            Place(scenario.document.file),
            c.balance,
            f"{c.month}: closes to {c.relative:.1e} of what is charged, more than {c.tolerance:.0e}",
            "the yields of the feeds used do not carry their feed's hydrogen: see the balance checks",
        )
        for c in found
        if not c.holds
    ]
    return Plan(scenario, lp, solution, certificate, tuple(lines), (*scenario.warnings, *warnings), q, again)


def _prove_money(lines: list[MoneyLine], solution: Solution) -> None:
    from olefinlp.lp.certificate import CertificateError

    total = margin(lines)
    moved = sum(abs(line.amount) for line in lines) or 1.0
    if abs(total - solution.objective) > MONEY_AGREES * moved:
        raise CertificateError(f"the money lines sum to {total:g}, the solver says {solution.objective:g}")


def _no_plan(case: Case, solver: Solver, outcome: Outcome) -> NoPlan:
    from olefinlp.answers.clash import endless, find_clash

    if outcome.status is Status.INFEASIBLE:
        clash = find_clash(case, solver.lp)
        if clash is None:
            return NoPlan("the solver finds no plan, but no limit stands in the way: its verdict is not believed", Status.FAILED)
        return NoPlan(str(clash), outcome.status, clash)
    if outcome.status is Status.UNBOUNDED:
        return NoPlan(endless(case, solver.lp, outcome), outcome.status)
    if outcome.status is Status.STOPPED:
        return NoPlan(f"the solver was stopped before it had proven a plan: {outcome.message}", outcome.status)
    return NoPlan(f"the solver failed: {outcome.message}", outcome.status)
