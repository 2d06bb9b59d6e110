"""The answers that come with every plan unless it is asked for quickly."""

from __future__ import annotations

from typing import TYPE_CHECKING

from olefinlp.answers.answer import Answer
from olefinlp.answers.break_even import break_even_prices
from olefinlp.answers.cash_cost import cash_cost
from olefinlp.answers.margin_owners import who_earns_the_margin
from olefinlp.answers.room import room_to_move
from olefinlp.answers.worth import worth_of_limits

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan


def default_answers(plan: Plan) -> tuple[Answer, ...]:
    """Break-evens, worth of limits, who earns the margin, room to move, cash cost; under 400 solves for a month."""
    return (
        break_even_prices(plan),
        worth_of_limits(plan),
        who_earns_the_margin(plan),
        room_to_move(plan),
        cash_cost(plan),
    )
