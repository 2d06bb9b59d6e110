"""Exact step curves: what is bought or sold against one price, margin and worth against one limit."""

from __future__ import annotations

import functools
import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from olefinlp.answers.answer import Answer, Chart
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.inputs.case import Case, Limit
from olefinlp.inputs.findings import near_name
from olefinlp.inputs.prices import item_name
from olefinlp.lp.compile import Floats, PriceMap
from olefinlp.lp.neighbours import NeighbourError, Neighbours
from olefinlp.lp.steps import Evaluate, Point, Step, trace

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan

PRICE_SPAN, LIMIT_SPAN = 0.3, 0.5
"""How far a curve goes on each side of today, as a share, when no range is given."""
QUANTITIES = {"GJ LHV": "TJ LHV", "MWh": "GWh", "t": "kt", "t held": "kt held"}
"""What a price is per → what it prices, as the plan counts it."""


CHANGE = "Change of margin per unit"


@dataclass(frozen=True)
class Axis:
    """What a curve runs along: one number as people write it, and what it does to the program.

    `factor` turns the written number into the plan's, `slope_scale` a slope into the quantity shown;
    `low` and `high` are how far the number can go at all, as the plan counts it.
    """

    item: str
    today: float
    unit: str
    factor: float
    evaluate: Evaluate
    is_price: bool
    slope_unit: str
    slope_scale: float
    low: float
    high: float
    note: str = ""
    own: Callable[[float], float] | None = None
    """For a price that others lean on: the quantity of the item itself at a price."""


def step_curve(plan: Plan, item: str, low: float | None = None, high: float | None = None, month: str | None = None) -> Answer:
    """The exact curve of one price or limit, by tangent intersection.

    2n + 1 solves for n steps, one a step more where other prices lean on it.

    `item` is a path as written in the files: `feeds.ethane.contract` or `outlets.x` (price),
    `feeds.ethane.contract.max`, `outlets.x.min`, `recovery_units.x.capacity`,
    `furnace_groups.x.hours`, `limits.x.max`, `utilities.x.max`, `stocks.x.max` … (limit). `low` and
    `high` are in the unit in which a price is written, or in which the table of limits shows a limit.
    Several months move together unless one is named: prices by the same amount, limits in proportion
    to the first. A range is cut where no plan is possible, and where a price of a step would pass
    that of the step beside it.

    Raises `ValueError` for an unknown item (with the nearest name), an empty range, or a price at
    which the margin has no end.
    """
    axis = _axis(plan, item, month)
    span = PRICE_SPAN if axis.is_price else LIMIT_SPAN
    size = abs(axis.today) or 1.0
    start = max((axis.today - span * size if low is None else low) * axis.factor, axis.low)
    stop = min((axis.today + span * size if high is None else high) * axis.factor, axis.high)
    if not start < stop:
        raise ValueError(f"the range {start / axis.factor:g} to {stop / axis.factor:g} {axis.unit} is empty")
    money = sum(abs(line.amount) for line in plan.lines)

    def traced() -> list[Step]:
        evaluate = functools.cache(axis.evaluate)  # an end is looked at twice
        return trace(evaluate, *_possible(axis, evaluate, start, stop), money)

    try:
        steps = plan.neighbours.together(traced)
    except NeighbourError as error:
        text = f"between {start / axis.factor:g} and {stop / axis.factor:g} {axis.unit} the margin has no end: ask for less"
        raise ValueError(text) from error
    return _answer(plan, axis, steps)


def _axis(plan: Plan, item: str, month: str | None) -> Axis:
    case = plan.quantities.case
    if month is not None and month not in case.months:
        raise ValueError(f"`{month}` is not a period of this plan; {near_name(month, case.months)}")
    months = case.months if month is None else (month,)
    name = item_name(item.split("."))
    if (name, months[0]) in case.prices:
        return _price_axis(plan, name, months)
    paths = limit_paths(case)
    if item in paths:
        return _limit_axis(plan, item, [pair for pair in paths[item] if pair[0].month in months])
    known = sorted({price for price, _ in case.prices} | set(paths))
    raise ValueError(
        f"`{item}` is no price or limit of this plan; {near_name(item, known) or 'see the sheets Prices and Limits'}"
    )


def limit_paths(case: Case) -> dict[str, list[tuple[Limit, bool]]]:
    """Path in the files → the limits that it writes, and whether it is their minimum."""
    names = {
        "furnace_hours": ("furnace_groups", "hours", ""),
        "decoke_crew_hours": ("decoke_crews", "hours", ""),
        "unit_load": ("recovery_units", "capacity", "min_load"),
        "outlet": ("outlets", "max", "min"),
        "named": ("limits", "max", "min"),
        "trade": ("utilities", "max", "min"),
        "conversion": ("conversions", "max", ""),
        "stock": ("stocks", "max", "min"),
        "end_stock": ("stocks", "", "end"),
        "take_or_pay": ("", "", "take_or_pay"),
        "purchase": ("", "max", "min"),
    }
    found: dict[str, list[tuple[Limit, bool]]] = {}
    for limit in case.limits.values():
        if limit.family not in names:
            continue
        head, high_word, low_word = names[limit.family]
        body = limit.key[0]
        if not head:
            head = case.sources[body].kind
        middle = "" if limit.family == "decoke_crew_hours" else f"{body}."
        if limit.high is not None and high_word:
            found.setdefault(f"{head}.{middle}{high_word}", []).append((limit, False))
        if limit.low is not None and low_word:
            found.setdefault(f"{head}.{middle}{low_word}", []).append((limit, True))
    return found


def price_derivatives(case: Case, item: str, months: tuple[str, ...]) -> dict[tuple[str, str], float]:
    """How much each effective price moves with one: 1 for itself, `times` along prices that lean on it."""
    moved: dict[tuple[str, str], float] = {}
    for month in months:
        moved[item, month] = 1.0
        waiting = [item]
        while waiting:
            base = waiting.pop()
            for (name, when), price in case.prices.items():
                if when == month and price.of == base:
                    moved[name, month] = price.times * moved[base, month]
                    waiting.append(name)
    return moved


def cost_direction(case: Case, prices: PriceMap, item: str, months: tuple[str, ...], size: int) -> Floats:
    """What one more unit of an effective price adds to the cost of each column."""
    direction = np.zeros(size)
    for key, times in price_derivatives(case, item, months).items():
        if key in prices:
            columns, coefficients = prices[key]
            np.add.at(direction, columns, times * case.per_unit(*key) * coefficients)
    return direction


def _price_axis(plan: Plan, item: str, months: tuple[str, ...]) -> Axis:
    case, neighbours = plan.quantities.case, plan.neighbours
    price = case.prices[item, months[0]]
    today = price.value
    direction = cost_direction(case, plan.price_map, item, months, len(plan.lp.columns))

    def evaluate(value: float) -> Point | None:
        solution = neighbours.solve(cost=plan.lp.cost + (value - today) * direction)
        return None if solution is None else Point(value, solution.objective, float(direction @ solution.x))

    factor, unit = (1.0, price.unit_used) if price.of else (price.factor, price.unit)
    quantity = QUANTITIES.get(price.unit_used.partition("/")[2], "pieces")
    scale = 1 / case.per_unit(item, months[0])
    low, high = _between_steps(case, item, months)
    note = "All months move by the same amount. " if len(months) > 1 else ""
    if any(data.take_or_pay and f"{data.kind}.{source}" == item for source, data in case.sources.items()):
        note += "What is paid for and not taken is counted with the share of the price that it pays. "
    leaning = sorted({name for name, _ in price_derivatives(case, item, months)} - {item})
    if leaning:
        note += f"{', '.join(leaning)} move with it: the net quantity counts them at their share. "
    own = _own_quantity(plan, item, months, direction, today) if leaning else None
    return Axis(item, today / factor, unit, factor, evaluate, True, quantity, scale, low, high, note, own)


def _own_quantity(plan: Plan, item: str, months: tuple[str, ...], direction: Floats, today: float) -> Callable[[float], float]:
    """What is bought or sold of the item itself when its price, and those that lean on it, move."""

    def own(value: float) -> float:
        solution = plan.neighbours.solve(cost=plan.lp.cost + (value - today) * direction)
        if solution is None:
            return 0.0
        parts = [plan.price_map[item, month] for month in months if (item, month) in plan.price_map]
        return abs(sum(float(coefficients @ solution.x[columns]) for columns, coefficients in parts))

    return own


def _between_steps(case: Case, item: str, months: tuple[str, ...]) -> tuple[float, float]:
    """How far a price of a step can go before it passes the next: purchases get dearer, sales cheaper."""
    low, high = -math.inf, math.inf
    body, steps, step = item.rpartition(".tiers.")
    if not steps:
        return low, high
    first = case.prices[item, months[0]].value
    moved = price_derivatives(case, item, months)
    for by in (-1, 1):
        other = f"{body}.tiers.{int(step) + by}"
        gaps = [
            case.prices[other, m].value - case.prices[item, m].value
            for m in months
            if (other, m) in case.prices and (other, m) not in moved
        ]
        if gaps and (by < 0) != body.startswith("outlets."):
            low = first + max(gaps)
        elif gaps:
            high = first + min(gaps)
    return low, high


def _limit_axis(plan: Plan, item: str, limits: list[tuple[Limit, bool]]) -> Axis:
    neighbours = plan.neighbours
    first, low_side = limits[0]
    written = _side(first, low_side)
    rows = {neighbours.lp.row_at[f"{limit.family}_limit", *limit.key]: limit for limit, _ in limits if _there(neighbours, limit)}

    def moved(limit: Limit, value: float) -> tuple[float, float]:
        """A limit when the first is at a value, and how fast it moves: in proportion, or from zero at the same rate."""
        share = _side(limit, low_side) / written if written else first.scale / limit.scale
        return (0.0 if written else _side(limit, low_side)) + share * value, share

    def evaluate(value: float) -> Point | None:
        bounds = {}
        for row, limit in rows.items():
            low, high = float(neighbours.lp.row_low[row]), float(neighbours.lp.row_high[row])
            own, _ = moved(limit, value)
            bounds[row] = (own, high) if low_side else (low, own)
            if bounds[row][0] > bounds[row][1]:
                return None
        solution = neighbours.solve(rows=bounds)
        if solution is None:
            return None
        clip = min if low_side else max  # where both sides meet, only a dual of this side's sign is this side's
        slope = sum(clip(float(solution.row_dual[row]), 0.0) * moved(limit, value)[1] for row, limit in rows.items())
        return Point(value, solution.objective, slope)

    return Axis(
        item=item,
        today=written * first.scale,
        unit=first.unit,
        factor=1 / first.scale,
        evaluate=evaluate,
        is_price=False,
        slope_unit=f"{plan.currency}/{first.worth_unit}",
        slope_scale=first.worth_scale,
        low=0.0,
        high=math.inf,
        note=f"All months move in proportion to {first.month}. " if len(limits) > 1 else "",
    )


def _side(limit: Limit, low_side: bool) -> float:
    return float((limit.low if low_side else limit.high) or 0.0)


def _there(neighbours: Neighbours, limit: Limit) -> bool:
    return (f"{limit.family}_limit", *limit.key) in neighbours.lp.row_at


def _possible(axis: Axis, evaluate: Evaluate, start: float, stop: float) -> tuple[float, float]:
    """The part of the range that has a plan, found by halving from today's value; prices forbid none."""
    if axis.is_price:
        return start, stop
    there = [evaluate(end) is not None for end in (start, stop)]
    if all(there):
        return start, stop
    inside = min(max(axis.today * axis.factor, start), stop)
    if evaluate(inside) is None:
        raise ValueError("no plan is possible anywhere near today's value in this range")
    return start if there[0] else _edge(evaluate, inside, start), stop if there[1] else _edge(evaluate, inside, stop)


def _edge(evaluate: Evaluate, good: float, bad: float) -> float:
    """The last value with a plan on the way from one that has to one that has not."""
    for _ in range(40):
        middle = (good + bad) / 2
        good, bad = (middle, bad) if evaluate(middle) is not None else (good, middle)
    return good


def _answer(plan: Plan, axis: Axis, steps: list[Step]) -> Answer:
    currency = plan.currency
    name = ("Net quantity that moves with it" if axis.own else "Quantity that it prices") if axis.is_price else CHANGE
    columns = (
        Column("low", f"From, {axis.unit}", kind="price"),
        Column("high", f"To, {axis.unit}", kind="price"),
        Column("level", name, axis.slope_unit, "quantity"),
        *((Column("own", "Of the item itself", axis.slope_unit, "quantity"),) if axis.own else ()),
        Column("margin_low", "Margin at the start", f"k{currency}", "money"),
        Column("margin_high", "Margin at the end", f"k{currency}", "money"),
        Column("today", "Today"),
    )
    noise = 1e-9 * max(abs(step.slope) for step in steps)
    sign = -1 if axis.is_price and all(step.slope <= noise for step in steps) else 1  # what is bought is no negative quantity
    rows: list[Record] = [
        {
            "low": step.low / axis.factor,
            "high": step.high / axis.factor,
            "level": sign * step.slope * axis.slope_scale if abs(step.slope) > noise else 0.0,
            "margin_low": step.value_low,
            "margin_high": step.value_high,
            "today": "here" if step.low / axis.factor <= axis.today <= step.high / axis.factor else "",
        }
        | ({"own": _none_of_noise(plan, axis.own((step.low + step.high) / 2))} if axis.own else {})
        for step in steps
    ]
    both = "Below zero it is bought, above it is sold. " if any(row["level"] < 0 for row in rows) else ""
    note = f"{axis.note}{both}Exact: every step is where the plan changes. Other prices and limits are held. "
    note += "At a step the value is not one number."
    table = Table("curve", f"Steps of {axis.item}", columns, rows, note)
    chart = Chart(
        "steps", f"{name} against {axis.item}", "low", "high", "level", f"{axis.unit}", f"{axis.slope_unit}", axis.today
    )
    return Answer("curve", f"Curve of {axis.item}", (table,), (_sentence(axis, rows),), note, chart)


def _none_of_noise(plan: Plan, quantity: float) -> float:
    return quantity if quantity > 1e-9 * plan.quantities.size else 0.0


def _sentence(axis: Axis, rows: list[Record]) -> str:
    here = next((i for i, row in enumerate(rows) if row["today"]), 0)
    row = rows[here]
    what = f"{row['level']:,.4g} {axis.slope_unit}"
    if axis.own:
        what = f"{row['own']:,.4g} {axis.slope_unit} of itself, net {row['level']:,.4g} with what leans on it"
    elif not axis.is_price:
        what = f"{row['level']:+,.4g} {axis.slope_unit} of margin"
    text = f"{axis.item}: today {axis.today:,.4g} {axis.unit}; between {row['low']:,.4g} and {row['high']:,.4g} it is {what}"
    if here + 1 < len(rows):
        text += f", above that {rows[here + 1]['level']:,.4g}"
    if here > 0:
        text += f", below that {rows[here - 1]['level']:,.4g}"
    steps = "1 step" if len(rows) == 1 else f"{len(rows)} steps"
    return f"{text}; {steps} between {rows[0]['low']:,.4g} and {rows[-1]['high']:,.4g} {axis.unit}."
