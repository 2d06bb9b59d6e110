"""Room to move: how far each decision can go at equal margin, and within a share of the best one."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from olefinlp.answers.answer import Answer
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.answers.words import money as money_words
from olefinlp.answers.words import tonnage
from olefinlp.lp.certificate import Bounds
from olefinlp.lp.neighbours import Neighbours

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan

SHARE = 0.005
MOVES = 1e-6
"""A range at equal margin up to this share of the largest flow is what rounding leaves of none."""


@dataclass(frozen=True)
class Decision:
    """A quantity that a person decides: the columns that sum to it."""

    kind: str
    item: str
    month: str
    columns: tuple[int, ...]
    planned: float
    unit: str


def decisions(plan: Plan) -> Iterator[Decision]:
    """Purchases by source, charges by group, feed and severity, what goes to each outlet to sale."""
    q = plan.quantities
    case, at = q.case, plan.lp.column_at
    for month in case.months:
        for source, data in case.sources.items():
            columns = tuple(at["bought", source, str(k), month] for k in data.tiers)
            yield Decision("bought", source.replace(".", " "), month, columns, q.bought(source, month), "kt")
        for mode in case.modes:
            parcels = case.charged_parcels.get((mode, month), ())
            columns = tuple(at["charge", mode, parcel, month] for parcel in parcels)
            if columns:
                yield Decision("charged", mode.replace(".", " "), month, columns, q.charged(mode, month), "kt")
        for outlet, steps in case.sale_tiers.items():
            columns = tuple(at["sold", outlet, str(step), month] for step in steps)
            unit = "TJ LHV" if case.outlets[outlet][0] in case.heat_cuts else "kt"
            yield Decision("sold", outlet, month, columns, q.outlet(outlet, month), unit)


def room_to_move(plan: Plan, share: float = SHARE) -> Answer:
    """Smallest and largest value of every decision at equal margin, and within a share of it.

    Two solves a decision and level; those at equal margin only where the optimum may not be the
    only one. Ranges do not hold together: each is the most that one decision can do while all
    others follow. Raises `ValueError` for a share outside 0 to 1.
    """
    if not 0 <= share < 1:
        raise ValueError(f"a share of the margin is between 0 and 1, not {share:g}")
    neighbours = plan.neighbours
    alone = neighbours.only_one()
    rows = neighbours.together(lambda: [_row(plan, neighbours, decision, share, alone) for decision in decisions(plan)])
    money = share * abs(plan.solution.objective)
    columns = (
        Column("month", "Month"),
        Column("decision", "Decision"),
        Column("item", "Item"),
        Column("planned", "Planned", kind="quantity"),
        Column("unit", "Unit"),
        Column("low", f"Least within {100 * share:.3g} % of the margin", kind="quantity"),
        Column("high", f"Most within {100 * share:.3g} % of the margin", kind="quantity"),
        Column("equal_low", "Least at equal margin", kind="quantity"),
        Column("equal_high", "Most at equal margin", kind="quantity"),
        Column("could_differ", "Could differ at equal margin"),
    )
    note = f"Within {money_words(money, plan.currency)} of the best margin. Ranges do not hold together."
    table = Table("room_to_move", "Room to move", columns, rows, note)
    return Answer("room_to_move", "Room to move", (table,), _sentences(plan, rows, share, money), note)


def _row(plan: Plan, neighbours: Neighbours, decision: Decision, share: float, alone: bool) -> Record:
    equal_low = equal_high = decision.planned
    if not alone:
        equal_low, equal_high = _range(plan, neighbours, decision, *neighbours.all_optima())
        if equal_high - equal_low <= MOVES * plan.quantities.size:
            equal_low = equal_high = decision.planned
    low, high = equal_low, equal_high
    if share:
        floor = neighbours.base.objective - plan.lp.offset - share * abs(plan.solution.objective)
        low, high = _range(plan, neighbours, decision, {neighbours.margin_row: (floor, math.inf)}, {})
    return {
        "month": decision.month,
        "decision": decision.kind,
        "item": decision.item,
        "planned": decision.planned,
        "unit": decision.unit,
        "low": min(low, decision.planned),
        "high": max(high, decision.planned),
        "equal_low": equal_low,
        "equal_high": equal_high,
        "could_differ": "yes" if equal_high > equal_low else "",
    }


def _range(plan: Plan, neighbours: Neighbours, decision: Decision, rows: Bounds, columns: Bounds) -> tuple[float, float]:
    """Least and most of a decision while these rows and columns are held."""
    weight = float(np.abs(plan.lp.cost).max(initial=1.0))  # duals as large as those of money, so as exact
    own = list(decision.columns)
    ends = []
    for sign in (-1.0, 1.0):
        cost = np.zeros(len(plan.lp.columns))
        cost[own] = sign * weight
        solution = neighbours.solve(cost=cost, rows=rows, columns=columns)
        end = decision.planned if solution is None else float(solution.x[own].sum())
        ends.append(0.0 if abs(end) < plan.quantities.size * 1e-9 else end)
    return ends[0], ends[1]


def _sentences(plan: Plan, rows: list[Record], share: float, money: float) -> tuple[str, ...]:
    free = [row for row in rows if row["could_differ"]]
    if free:
        names = ", ".join(_name(row) for row in free[:6])
        more = f" and {len(free) - 6} more" if len(free) > 6 else ""
        first = f"{len(free)} decisions could differ at equal margin: {names}{more}."
    else:
        first = "The plan is the only one with this margin."
    mass = [row for row in rows if row["unit"] == "kt" and row["decision"] != "charged"]
    wide = sorted(mass, key=lambda row: row["low"] - row["high"])[:5]
    text = [f"{_name(row)} {tonnage(row['low'])} to {tonnage(row['high'])}" for row in wide if row["high"] > row["low"]]
    within = f"Within {100 * share:.3g} % of the margin ({money_words(money, plan.currency)})"
    second = f"{within}: {'; '.join(text)}." if text else f"{within} no purchase or sale can move."
    return first, second


def _name(row: Record) -> str:
    return f"{row['month']} {row['item'].replace('_', ' ')} {row['decision']}"
