"""The answers that come with every plan unless it is asked for quickly."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING

from olefinlp.answers.answer import Answer
from olefinlp.answers.break_even import break_even_prices
from olefinlp.answers.cash_cost import cash_cost
from olefinlp.answers.margin_owners import who_earns_the_margin
from olefinlp.answers.room import SHARE, room_to_move
from olefinlp.answers.tables import Column, Table
from olefinlp.answers.worth import worth_of_limits
from olefinlp.lp.certificate import CertificateError
from olefinlp.lp.neighbours import NeighbourError

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan


MOST_PERIODS = 12


def default_answers(
    plan: Plan, parcels: Sequence[float] | None = None, share: float = SHARE, every: bool = False
) -> tuple[Answer, ...]:
    """Break-evens, worth of limits, who earns the margin, room to move, cash cost.

    Under 400 solves for a month; those that solve once or more a decision are left out, and say so,
    where there are more than `MOST_PERIODS` periods, unless `every` is asked for. An answer that cannot be proven says so in
    place of its numbers; the plan stands.
    """
    return (
        _or_reason(plan, "Break-even prices of feeds", lambda: break_even_prices(plan, parcels), many=not every),
        _or_reason(plan, "What the limits are worth", lambda: worth_of_limits(plan), many=not every),
        _or_reason(plan, "Who earns the margin", lambda: who_earns_the_margin(plan)),
        _or_reason(plan, "Room to move", lambda: room_to_move(plan, share), many=not every),
        _or_reason(plan, "Cash cost", lambda: cash_cost(plan)),
    )


def _or_reason(plan: Plan, title: str, answer: Callable[[], Answer], many: bool = False) -> Answer:
    periods = len(plan.quantities.case.months)
    if many and periods > MOST_PERIODS:
        return _left_out(title, f"Left out, as {periods} periods would take many solves; --all-answers gives it.")
    try:
        return answer()
    except (CertificateError, NeighbourError, ArithmeticError) as error:
        return _left_out(title, f"This answer could not be proven and is left out: {error}")


def _left_out(title: str, reason: str) -> Answer:
    empty = Table(title.lower().replace(" ", "_"), title, (Column("reason", "Reason"),))
    return Answer(empty.name, title, (empty,), (reason,))
