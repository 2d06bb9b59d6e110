"""The solves behind a frontier: what a second goal is, plans at a weight on it, plans between two of them."""

from __future__ import annotations

import functools
from collections.abc import Iterator
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from olefinlp.answers.quantities import NOISE, Quantities
from olefinlp.answers.tables import Record
from olefinlp.inputs.case import PLAN_UNITS, Case
from olefinlp.inputs.findings import near_name
from olefinlp.inputs.prices import Price
from olefinlp.inputs.ratios import load_unit_text, unit_rate
from olefinlp.lp.certificate import Bounds
from olefinlp.lp.compile import Floats, Integers, Label
from olefinlp.lp.neighbours import FREE, Optimum
from olefinlp.lp.steps import SAME, Point, Step, trace

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan

TIMES_TODAY = 10
"""How far a curve goes without an end given: so many times today's price, where there is one."""
EQUAL, DISTINCT = 1e-6, 1e-8
"""Shares of the largest flow within which two plans have the same of a quantity, and past which they differ."""
VERBS = {"imports": "imported", "exports": "exported", "emissions": "emitted"}


@dataclass(frozen=True)
class Goal:
    """A quantity that is traded against margin: the sum of some columns of the plan, all months together.

    In units of the plan it is shown times `scale` in `unit`, thousands of `own`. A weight as people write it (in
    `weight_unit`) times `factor` is thousands of the currency per unit of the plan. `rates` are what the columns
    cost (`sign` 1) or bring (−1) at today's prices, empty where they have none; `price` is today's price, as weights
    are written, where it is one number.
    """

    path: str
    verb: str
    columns: Integers
    own: str
    unit: str
    scale: float
    factor: float
    weight_unit: str
    sign: int
    rates: Floats
    price: float | None

    def of(self, x: Floats) -> float:
        """The quantity, in units of the plan."""
        return float(x[self.columns].sum())

    def money(self, x: Floats) -> float:
        """What it costs or brings at today's prices, thousands of the currency."""
        return float(self.rates @ x[self.columns]) if len(self.rates) else 0.0

    def in_all(self, weight: float) -> float | None:
        """The price with a weight on top (a sale: taken off), as weights are written."""
        return None if self.price is None else self.price + self.sign * weight


# ---------------------------------------------------------------------------------- the goal


def goal_of(case: Case, column_at: dict[Label, int], path: str) -> Goal:
    """The goal of a path in the files; raises `ValueError` with the nearest name for one that is none."""
    known = dict(_paths(case))
    if path not in known:
        hint = (
            near_name(path, known)
            or "it is utilities.<trade>, feeds.<feed>, outlets.<outlet>, cuts.<cut> or recovery_units.<unit>"
        )
        raise ValueError(f"`{path}` is no quantity of this plan that can be a second goal; {hint}")
    kind, names = known[path]
    labels = [(month, label, item) for month in case.months for label, item in _labels(case, kind, names)]
    prices = [case.prices[item, month] for month, _, item in labels if item]
    columns = np.array([column_at[*label, month] for month, label, _ in labels], dtype=np.int32)
    verb, own, one, sign = _words(case, kind, names[0], prices)
    factor, weight_unit = 1 / one, f"{case.currency}/{own}"
    if prices and not prices[0].of:
        factor, weight_unit = prices[0].factor, prices[0].unit
    return Goal(
        path=path,
        verb=verb,
        columns=columns,
        own=own,
        unit=PLAN_UNITS.get(own, f"thousand {own}"),
        scale=1 / one,
        factor=factor,
        weight_unit=weight_unit,
        sign=sign,
        rates=np.array([price.value for price in prices]),
        price=prices[0].value / factor if len({price.value for price in prices}) == 1 else None,
    )


def _paths(case: Case) -> Iterator[tuple[str, tuple[str, tuple[str, ...]]]]:
    """Path in the files → what kind of quantity it is, and the names that it sums over."""
    yield from ((f"utilities.{trade}", ("trade", (trade,))) for trade in case.trades)
    bought: dict[str, tuple[str, ...]] = {}
    for source, data in case.sources.items():
        whole = f"{data.kind}.{data.feed}"
        bought[whole] = (*bought.get(whole, ()), source)
        bought[f"{data.kind}.{source}"] = (source,)
    yield from ((path, ("bought", sources)) for path, sources in bought.items())
    yield from ((f"outlets.{outlet}", ("sold", (outlet,))) for outlet in case.outlets)
    yield from ((f"cuts.{cut}", ("cut_made", (cut,))) for cut in case.cuts)
    yield from ((f"recovery_units.{unit}", ("unit_load", (unit,))) for unit in case.units)


def _labels(case: Case, kind: str, names: tuple[str, ...]) -> Iterator[tuple[Label, str]]:
    """Columns without their month, and the price of each; no price where it is none of the quantity itself."""
    for name in names:
        if kind == "bought":
            yield from (((kind, name, str(k)), case.purchase_item(name, k)) for k in case.sources[name].tiers)
        elif name in case.sale_tiers and kind == "sold":
            priced = name not in case.deductions  # a deduction is taken off what the contents bring
            yield from (((kind, name, str(k)), case.sale_item(name, k) if priced else "") for k in case.sale_tiers[name])
        elif kind == "sold":
            yield from ((("disposition", name, cut), "") for cut in case.outlets[name])
        else:
            yield (kind, name), f"utilities.{name}" if kind == "trade" else ""


def _words(case: Case, kind: str, name: str, prices: list[Price]) -> tuple[str, str, float, int]:
    """What is done with it, its unit and how many base units that is, and whether it costs (1) or brings (−1) money."""
    if kind == "unit_load":
        unit = case.scenario.plant.units[name]
        return "load", load_unit_text(unit.rate_unit), unit_rate(unit), 1
    own = prices[0].unit_used.partition("/")[2] if prices else "t"
    if kind == "trade":
        trade = case.trades[name][1]
        return VERBS[trade], own, 1.0, -1 if trade == "exports" else 1
    if kind == "sold":
        own = "GJ LHV" if case.outlets[name][0] in case.heat_cuts else "t"
        return "sold" if name in case.sale_tiers else "taken", own, 1.0, -1
    return {"bought": "bought", "cut_made": "made"}[kind], own, 1.0, 1


# ---------------------------------------------------------------------------------- the solves


@dataclass(frozen=True)
class Vertex:
    """A plan that is the best of all at weights from `low` to `high` (as the plan counts them), solved at one of them."""

    low: float
    high: float
    at: float
    x: Floats
    sure: bool
    """Whether of plans that are equal in both goals it is surely the one with most main product."""


class Seeker:
    """Solves a plan's program with a weight on a goal."""

    def __init__(self, plan: Plan, goal: Goal) -> None:
        self.plan, self.goal = plan, goal
        self.case, self.lp = plan.quantities.case, plan.lp
        self.size = plan.quantities.size
        self.money = sum(abs(line.amount) for line in plan.lines)
        self.main = plan.scenario.plant.file.main_product
        self.main_columns = [plan.lp.column_at["cut_made", self.main, month] for month in self.case.months]
        self.optimum = functools.cache(self._optimum)

    def _optimum(self, weight: float) -> Optimum:
        cost = self.lp.cost.copy()
        np.subtract.at(cost, self.goal.columns, weight)
        found = self.plan.neighbours.solve(cost=cost)
        if found is None:  # prices forbid no plan, and the plan is one
            raise ArithmeticError("a plan is lost when a price moves")
        return found

    def point(self, weight: float) -> Point:
        """Best of margin − weight × goal, and its slope."""
        found = self.optimum(weight)
        return Point(weight, found.objective, -self.goal.of(found.x))

    def vertices(self, start: float, stop: float) -> list[Vertex]:
        """Every plan that is the best somewhere between two weights, from the first to the last.

        Where the tangents of neighbours meet is worked out from the plans themselves; it lies between the weights
        at which they were solved. Steps too narrow to tell from rounding share the plan of the one beside them.
        """
        found: list[Vertex] = []
        for step in trace(self.point, start, stop, self.money):
            vertex = self._vertex(step)
            if found and self.goal.of(found[-1].x) - self.goal.of(vertex.x) <= DISTINCT * self.size:
                found[-1] = replace(found[-1], high=vertex.high)
                continue
            if found:
                at = min(max(self._meeting(found[-1].x, vertex.x), found[-1].at), vertex.at)
                found[-1], vertex = replace(found[-1], high=at), replace(vertex, low=at)
            found.append(vertex)
        return found

    def _meeting(self, more: Floats, less: Floats) -> float:
        """The weight at which two plans are equal."""
        return float(self.lp.cost @ (more - less)) / (self.goal.of(more) - self.goal.of(less))

    def _vertex(self, step: Step) -> Vertex:
        """The plan of a step, from inside it, where margin and goal are unique; of equal plans the one with most main product.

        What has a dual stays at its limit in all plans that are equal: one more solve chooses among them. A dual that
        is rounding may hold too much, so what keeps no plan is tried again with what has a larger dual.
        """
        at = (step.low + step.high) / 2
        found = self.optimum(at)
        lp, free = found.lp, FREE * float(np.abs(found.cost).max(initial=0.0))
        for small in (free, 100 * free):
            rows = _held(found.row_dual, lp.row_low, lp.row_high, small)
            columns = _held(found.cost - lp.gathered(found.row_dual), lp.low, lp.high, small)
            most = self._extreme(self.main_columns, 1.0, rows, columns)
            if most is not None and self._equal(found, most):
                return Vertex(step.low, step.high, at, most, True)
        return Vertex(step.low, step.high, at, found.x, False)

    def _equal(self, found: Optimum, other: Floats) -> bool:
        """Whether another plan is as good as an optimum in both goals."""
        same = abs(float(found.cost @ (other - found.x))) <= SAME * self.money
        return same and abs(self.goal.of(other) - self.goal.of(found.x)) <= EQUAL * self.size

    @functools.cached_property
    def least(self) -> float:
        """The least of the goal that any plan has, in units of the plan."""
        found = self._extreme(self.goal.columns, -1.0, {}, {})
        return self.quantity(self.plan.solution.x if found is None else found)

    def _extreme(self, columns: list[int] | Integers, sign: float, rows: Bounds, bounds: Bounds) -> Floats | None:
        """The plan with most (least) in some columns while rows and columns are held."""
        cost = np.zeros(len(self.lp.columns))
        cost[columns] = sign * float(np.abs(self.lp.cost).max(initial=1.0))  # duals as large as those of money, so as exact
        found = self.plan.neighbours.solve(cost=cost, rows=rows, columns=bounds)
        return None if found is None else found.x

    def quantity(self, x: Floats) -> float:
        """The goal in units of the plan; what is rounding reads as nothing."""
        return self._some(self.goal.of(x))

    def _some(self, value: float) -> float:
        return value if abs(value) > NOISE * self.size else 0.0

    def record(self, x: Floats) -> Record:
        """What a plan comes to: goal, margin, main product."""
        goal, quantity, main = self.goal, self.quantity(x), self._some(float(x[self.main_columns].sum()))
        margin = float(self.lp.cost @ x) + self.lp.offset
        return {
            "quantity": quantity * goal.scale,
            "margin": margin,
            "margin_before": margin + goal.sign * goal.money(x),
            "main": main,
            "per_main": quantity * goal.scale / main if main > 0 else None,
            "margin_per_tonne": margin / main if main > 0 else None,
        }

    def quantities(self, x: Floats) -> Quantities:
        """A plan's values by the plant's own names."""
        return Quantities(self.case, self.lp, replace(self.plan.solution, x=x))


def _held(dual: Floats, low: Floats, high: Floats, small: float) -> Bounds:
    """What stays at a limit in every optimum."""
    limit = np.where(dual > 0, high, low)
    places = np.flatnonzero((np.abs(dual) > small) & np.isfinite(limit)).tolist()
    return {place: (float(limit[place]), float(limit[place])) for place in places}


def reach(seeker: Seeker) -> float:
    """How far a curve goes without an end given, as the plan counts weights."""
    priced = TIMES_TODAY * float(np.abs(seeker.goal.rates).max(initial=0.0))
    if priced:
        return priced
    x, margin = seeker.plan.solution.x, abs(seeker.plan.solution.objective)
    per = seeker.quantity(x) or float(x[seeker.main_columns].sum())
    return margin / per if margin and per else float(np.abs(seeker.lp.cost).max(initial=1.0))


def between(seeker: Seeker, wanted: float) -> tuple[float, Floats]:
    """The weight at which a quantity is bought out, and the mix of the two plans beside it that has just so much.

    The tangents of a plan with more and of one with no more meet at a weight; a solve there is on both or is one
    of the two from then on.
    """
    noise = EQUAL * seeker.size
    more, less = seeker.point(0.0), seeker.point(reach(seeker))
    if -more.slope <= wanted:  # of plans that earn the same today one has no more than this
        return 0.0, seeker.optimum(0.0).x
    while -less.slope > wanted + noise:
        less = seeker.point(2 * less.at)
    while True:
        at = (less.value - more.value + more.slope * more.at - less.slope * less.at) / (more.slope - less.slope)
        middle = seeker.point(min(max(at, more.at), less.at))
        on_line = abs(middle.value - more.value - more.slope * (middle.at - more.at)) <= SAME * seeker.money
        if on_line or not more.at < at < less.at:
            share = min(max((wanted + less.slope) / (less.slope - more.slope), 0.0), 1.0)
            return middle.at, share * seeker.optimum(more.at).x + (1 - share) * seeker.optimum(less.at).x
        more, less = (middle, less) if -middle.slope > wanted + noise else (more, middle)
