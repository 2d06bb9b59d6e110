"""What is computed around a comparison: break-evens and price ranges of every case, regret, buying under uncertainty."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, TypeVar

from olefinlp.answers.answer import Answer
from olefinlp.answers.break_even import break_even_prices
from olefinlp.answers.buying import buying_plan
from olefinlp.answers.held import HELD
from olefinlp.answers.price_ranges import PriceRange, price_ranges
from olefinlp.answers.regret import regret_table
from olefinlp.lp.certificate import CertificateError
from olefinlp.lp.neighbours import NeighbourError

if TYPE_CHECKING:
    from olefinlp.answers.comparison import Comparison
    from olefinlp.answers.plan import Plan

T = TypeVar("T")
MOST_SOLVES = 6000
"""More than so many solves for one answer, about, are asked for before they are made."""
SOLVES_A_PRICE = 7
"""Solves that a price's range takes, about; and a source's break-even as many."""


@dataclass(frozen=True)
class CaseAnswers:
    """Answers around a comparison; `around` are those with sheets of their own (regret, buying)."""

    break_evens: dict[str, Answer] = field(default_factory=dict)
    ranges: dict[str, tuple[PriceRange, ...]] = field(default_factory=dict)
    around: tuple[Answer, ...] = ()
    left_out: tuple[str, ...] = ()


def case_answers(
    comparison: Comparison,
    *,
    held: Sequence[str] = HELD,
    risk: float = 0.0,
    worst: float = 0.2,
    every: bool = False,
    told: Callable[[str], object] | None = None,
) -> CaseAnswers:
    """Break-evens and price ranges by case, the regret table, and the plan for buying before prices are known.

    `held` are the decisions that regret and buying hold, `risk` the weight of the worst share `worst` of the cases
    against the mean. What would take more than about `MOST_SOLVES` solves is left out, and says so, unless
    `every` is asked for; an answer that cannot be proven says so in place of its numbers. `told` is called with what comes next.
    """
    tell = told or (lambda _: None)
    left_out: list[str] = []
    plans = comparison.plans
    break_evens: dict[str, Answer] = {}
    ranges: dict[str, tuple[PriceRange, ...]] = {}
    offers = sum(len(plan.quantities.case.sources) * len(plan.quantities.case.months) for plan in plans.values())
    prices = sum(len(plan.quantities.case.prices) for plan in plans.values())
    if _within(offers, "Break-even prices", plans, every, left_out):
        tell("break-even prices")
        break_evens = _each(plans, "Break-even prices", lambda plan: break_even_prices(plan, parcels=[]), left_out)
    if _within(prices, "Live economics", plans, every, left_out):
        tell("price ranges")
        ranges = _each(plans, "Price ranges", price_ranges, left_out)
    around: list[Answer] = []
    if len(plans) > 1:
        tell("regret and buying")
        questions: tuple[tuple[str, Callable[[], Answer]], ...] = (
            ("Regret", lambda: regret_table(comparison, held)),
            ("Buying before the case is known", lambda: buying_plan(comparison, held=held, risk=risk, worst=worst)),
        )
        for title, answer in questions:
            try:
                around.append(answer())
            except (CertificateError, NeighbourError, ArithmeticError) as error:
                left_out.append(f"{title} could not be proven and is left out: {error}")
    return CaseAnswers(break_evens, ranges, tuple(around), tuple(left_out))


def _within(count: int, what: str, plans: dict[str, Plan], every: bool, left_out: list[str]) -> bool:
    """Whether an answer of so many prices is given; where it is left out, that is said."""
    if every or count * SOLVES_A_PRICE <= MOST_SOLVES:
        return True
    left_out.append(f"{what} left out, as {len(plans)} cases would take many solves; --all-answers gives it.")
    return False


def _each(plans: dict[str, Plan], what: str, answer: Callable[[Plan], T], left_out: list[str]) -> dict[str, T]:
    """An answer of every case; one that cannot be proven is left out."""
    found: dict[str, T] = {}
    for name, plan in plans.items():
        try:
            found[name] = answer(plan)
        except (CertificateError, NeighbourError, ArithmeticError) as error:
            left_out.append(f"{what} of {name} could not be proven and are left out: {error}")
    return found
