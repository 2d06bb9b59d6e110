"""How far each single price may go before another plan is better: found by solving, exact on both sides.

At other prices the same plan stays possible; it stays the best as long as the best margin lies on the
tangent that the plan itself draws. So no range hangs on the basis that the solver happened to end in.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from olefinlp.answers.curves import cost_direction
from olefinlp.inputs.prices import NUMBER, SHARE, typed_of
from olefinlp.lp.neighbours import NeighbourError
from olefinlp.lp.steps import Point, side

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan
    from olefinlp.inputs.prices import Price

SAME = 1e-7


@dataclass(frozen=True, slots=True)
class PriceRange:
    """One price in one month as a person would type it, and between what the plan stays the best.

    `typed` is the number in `unit`; `low` and `high` in the same unit, infinite where the plan stays
    the best as far as was looked (`looked`: how far, each way). `quantity` is d(margin)/d(price) of the effective price, in
    thousands of the currency per unit used: what the plan buys (negative) or sells of it, at its own price alone.
    """

    item: str
    month: str
    kind: str
    typed: float
    unit: str
    factor: float
    of: str
    times: float
    plus: float
    value: float
    unit_used: str
    quantity: float
    low: float
    high: float
    looked: tuple[float, float]


def price_ranges(plan: Plan) -> tuple[PriceRange, ...]:
    """The range of every price of a plan, one at a time, what leans on it moving along.

    About four solves a price and month and side. Looked for from nothing to twice the price.
    """
    return plan.neighbours.together(lambda: tuple(_range(plan, price) for price in plan.quantities.case.prices.values()))


def _range(plan: Plan, price: Price) -> PriceRange:
    case = plan.quantities.case
    kind, typed, unit, factor = typed_of(price)
    if kind == SHARE:
        factor = case.prices[price.of, price.month].value
    direction = factor * cost_direction(case, plan.price_map, price.item, (price.month,), len(plan.lp.columns))
    low, high, looked = -math.inf, math.inf, (0.0, 0.0)
    if np.any(direction):
        reach = abs(typed) or _usual(plan, price) / (abs(factor) or 1.0)
        low, high, looked = _ends(plan, direction, typed, reach)
    own = plan.price_map.get((price.item, price.month))
    scale = case.per_unit(price.item, price.month)
    quantity = 0.0 if own is None else scale * float(own[1] @ plan.solution.x[own[0]])
    if abs(quantity) < 1e-9 * plan.quantities.size:
        quantity = 0.0
    return PriceRange(
        item=price.item,
        month=price.month,
        kind=kind,
        typed=typed,
        unit=unit,
        factor=price.factor if kind == NUMBER else 1.0,
        of=price.of,
        times=price.times if kind != SHARE else 0.0,
        plus=price.plus if kind == SHARE else 0.0,
        value=price.value,
        unit_used=price.unit_used,
        quantity=quantity,
        low=low,
        high=high,
        looked=looked,
    )


def _usual(plan: Plan, price: Price) -> float:
    """The size of a usual price, for one that is nothing today."""
    same = [abs(p.value) for p in plan.quantities.case.prices.values() if p.unit_used == price.unit_used and p.value]
    return sorted(same)[len(same) // 2] if same else 1.0


def _ends(plan: Plan, direction: np.ndarray, typed: float, reach: float) -> tuple[float, float, tuple[float, float]]:
    """Where the plan stops being the best on each side, and how far was looked."""
    own = float(direction @ plan.solution.x)
    size = sum(abs(line.amount) for line in plan.lines) or 1.0
    base = Point(0.0, plan.solution.objective, own)

    def evaluate(step: float) -> Point | None:
        try:
            found = plan.neighbours.solve(cost=plan.lp.cost + step * direction)
        except NeighbourError:
            return None  # the margin has no end there: look less far
        return None if found is None else Point(step, found.objective, float(direction @ found.x))

    ends, looked = [], []
    for sign in (-1.0, 1.0):
        found = side(evaluate, base, sign * reach, size)
        if found.slope is None or found.until is None:
            ends.append(0.0)
            looked.append(0.0)
        elif abs(found.slope - own) * abs(found.until) > SAME * size:
            ends.append(0.0)  # another plan, as good today, is better from the first step on
            looked.append(0.0)
        else:
            ends.append(sign * math.inf if found.next_slope is None else found.until)
            looked.append(found.until)
    return typed + ends[0], typed + ends[1], (typed + looked[0], typed + looked[1])
