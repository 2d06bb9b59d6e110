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


def default_answers(plan: Plan, parcels: Sequence[float] | None = None, share: float = SHARE) -> tuple[Answer, ...]:
    """Break-evens, worth of limits, who earns the margin, room to move, cash cost.

    Under 400 solves for a month. An answer that cannot be proven says so in place of its numbers;
    the plan stands.
    """
    return (
        _or_reason("Break-even prices of feeds", lambda: break_even_prices(plan, parcels)),
        _or_reason("What the limits are worth", lambda: worth_of_limits(plan)),
        _or_reason("Who earns the margin", lambda: who_earns_the_margin(plan)),
        _or_reason("Room to move", lambda: room_to_move(plan, share)),
        _or_reason("Cash cost", lambda: cash_cost(plan)),
    )


def _or_reason(title: str, answer: Callable[[], Answer]) -> Answer:
    try:
        return answer()
    except (CertificateError, NeighbourError, ArithmeticError) as error:
        empty = Table(title.lower().replace(" ", "_"), title, (Column("reason", "Reason"),))
        return Answer(empty.name, title, (empty,), (f"This answer could not be proven and is left out: {error}",))
