"""A month's plan taken apart: what each feed brings, so that the parts sum to the plan."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

from olefinlp.answers import money
from olefinlp.answers.one_tonne import (
    BUYING,
    CREWS,
    EMISSIONS,
    FEED,
    FIRING,
    FURNACES,
    LIMITS,
    OFFER,
    PRICE,
    PRODUCTS,
    UNITS,
    UTILITIES,
    VARIABLE,
    Share,
    part_of,
)
from olefinlp.answers.quantities import Quantities
from olefinlp.lp.compile import Floats, Label

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan


PRICES, WORTHS = "today's prices", "today's worths"
WHOLE, ALL_MONTHS = "whole plant", "all months"
FIXED, PAYMENTS, HELD, STOCK_OF = "fixed uses", "take-or-pay payments", "stocks held", "stock of "
COSTS = ("feed_cost", "co_products", "utilities", "passed", "emissions", "variable_costs", "limits", "other")
AGREES, ROUNDING = 1e-7, 1e-12
COST_OF_GROUP = {
    money.SALES: "co_products",
    money.CONTENT: "co_products",
    money.EXPORTS: "utilities",
    money.IMPORTS: "utilities",
    money.PURCHASES: "feed_cost",
    money.EMISSIONS: "emissions",
    money.VARIABLE: "variable_costs",
    money.SHORTFALL: "other",
    money.HOLDING: "other",
    money.END_VALUE: "other",
}
COST_OF_TERM = {
    PRODUCTS: "co_products",
    FEED: "co_products",
    FIRING: "utilities",
    UTILITIES: "utilities",
    EMISSIONS: "emissions",
    VARIABLE: "variable_costs",
    **dict.fromkeys((BUYING, FURNACES, CREWS, UNITS, LIMITS), "limits"),
    PRICE: "",
    OFFER: "",
}


@dataclass
class CostLine:
    """One line of the account of a month: kt charged and of main product, costs in thousands (credits −).

    At worths: `main_value`, the main product made at its worth, and `gate_value`, the feed at its
    worth at the gate.
    """

    month: str
    name: str
    basis: str
    charged: float = 0.0
    main: float = 0.0
    costs: dict[str, float] = field(default_factory=lambda: dict.fromkeys(COSTS, 0.0))
    main_value: float = 0.0
    gate_value: float = 0.0

    @property
    def cost(self) -> float:
        """All costs less all credits, thousands of the currency."""
        return math.fsum(self.costs.values())


@dataclass(frozen=True, slots=True)
class Credit:
    """What one co-product brings: kt or TJ, thousands of the currency."""

    month: str
    name: str
    basis: str
    item: str
    quantity: float
    unit: str
    amount: float


# ---------------------------------------------------------------------------------- the plan taken apart


class Parts:
    """A month of the plan as a sum of parts: one for each feed and each line of its own.

    `x[name]` are values of the plan's variables; over all names they sum to the plan's of the
    month. `passed[name]` is what a part pays for utilities that others make (thousands).
    """

    def __init__(self, plan: Plan, month: str) -> None:
        self.q, self.plan, self.month, self.case = plan.quantities, plan, month, plan.quantities.case
        self.x: dict[str, Floats] = {}
        self.passed: dict[str, float] = {}
        self._buy_and_charge()
        self._crack_again()
        self._dispose()
        self._load_units()
        self._hold()
        self._share_utilities()

    def share(self, name: str) -> Share:
        """A part, read like a plan."""
        return part_of(self.plan, self.x[name])

    def _put(self, name: str, label: Label, value: float) -> None:
        part = self.x.setdefault(name, np.zeros(len(self.plan.lp.columns)))
        part[self.plan.lp.column_at[label]] += value

    def _buy_and_charge(self) -> None:
        """Feeds and side streams as they are bought and charged; cuts that were in a tank."""
        case, q, t = self.case, self.q, self.month
        recycles = case.scenario.plant.recycle_feeds()
        for mode, parcel, _ in case.charges_in[t]:
            charged = q.value("charge", mode, parcel, t)
            if charged and case.mode_feed[mode] not in recycles:
                self._put(case.mode_feed[mode], ("charge", mode, parcel, t), charged)
        for source, data in case.sources.items():
            for step in data.tiers:
                bought = q.value("bought", source, str(step), t)
                if bought:
                    self._put(data.feed, ("bought", source, str(step), t), bought)
        self.opening = {f"{STOCK_OF}{cut}": cut for cut in case.cuts if opening_stock(q, cut, t)}
        for name in self.opening:
            self.x.setdefault(name, np.zeros(len(self.plan.lp.columns)))

    def _crack_again(self) -> None:
        """Components and cuts of each part, what is cracked again followed until nothing is left.

        With R the recovery matrix, Y the yields of a recycle as it is cracked in the plan and s the
        share of its cut that is: c = c of the fresh feed + Y s (R c + cut from a tank).
        """
        again = self._recycles()
        recovery = np.array([[self.case.recovery[k].get(c, 0.0) for c in self.case.components] for k in self.case.cuts])
        back = sum((np.outer(r.yields, r.share * recovery[r.cut]) for r in again), np.zeros((recovery.shape[1],) * 2))
        for name in list(self.x):
            tank = np.array([opening_stock(self.q, k, self.month) * (self.opening.get(name) == k) for k in self.case.cuts])
            start = self._fresh(name) + sum(r.yields * r.share * tank[r.cut] for r in again)
            made = np.linalg.solve(np.eye(len(start)) - back, start)
            cuts = recovery @ made
            for family, names, values in (("component_made", self.case.components, made), ("cut_made", self.case.cuts, cuts)):
                for item, value in zip(names, values.tolist(), strict=True):
                    self._put(name, (family, item, self.month), value)
            for r in again:
                for label, charged in r.charges.items():
                    self._put(name, label, r.share * float(cuts[r.cut] + tank[r.cut]) * charged)

    def _fresh(self, name: str) -> Floats:
        """Components made at first from a part's own charges and purchases, kt."""
        case, q = self.case, self.share(name)
        made = dict.fromkeys(case.components, 0.0)
        for mode, parcel, t in case.charges_in[self.month]:
            _add(made, case.yields[mode, parcel], q.value("charge", mode, parcel, t) * (1 - case.loss))
        for source, data in case.sources.items():
            if data.kind == "side_streams" and data.feed == name:
                _add(made, case.compositions[name], q.bought(source, self.month))
        return np.array(list(made.values()))

    def _recycles(self) -> list[_Recycle]:
        case, q, t = self.case, self.q, self.month
        found = []
        for feed, cut in case.scenario.plant.recycle_feeds().items():
            labels = {
                ("charge", m, p, t): q.value("charge", m, p, t) for m, p, _ in case.charges_in[t] if case.mode_feed[m] == feed
            }
            total = sum(labels.values())
            if not total:
                continue
            made = dict.fromkeys(case.components, 0.0)
            for (_, mode, parcel, _), charged in labels.items():
                _add(made, case.yields[mode, parcel], charged / total * (1 - case.loss))
            share = total / (q.value("cut_made", cut, t) + opening_stock(q, cut, t))
            charges: dict[Label, float] = {label: charged / total for label, charged in labels.items()}
            found.append(_Recycle(case.cuts.index(cut), share, np.array(list(made.values())), charges))
        return found

    def _dispose(self) -> None:
        """Every cut over its outlets, every outlet over its price steps, as in the plan."""
        case, q, t = self.case, self.q, self.month
        ways = {cut: self._shares_of_cut(cut) for cut in case.cuts}
        for outlet, cuts in case.outlets.items():
            arriving = dict.fromkeys(self.x, 0.0)
            for cut in cuts:
                sent = q.value("disposition", outlet, cut, t)
                for name, share in ways[cut].items():
                    self._put(name, ("disposition", outlet, cut, t), share * sent)
                    arriving[name] += share * sent
            total = q.outlet(outlet, t)
            for step in case.sale_tiers.get(outlet, ()) if total else ():
                sold = q.value("sold", outlet, str(step), t)
                for name, amount in arriving.items():
                    self._put(name, ("sold", outlet, str(step), t), amount / total * sold)

    def _shares_of_cut(self, cut: str) -> dict[str, float]:
        """The share of each part in a cut as it is disposed of: by heat or by mass, tank included."""
        case, t = self.case, self.month
        amounts = {}
        for name in self.x:
            q = self.share(name)
            if cut in case.heat_cuts:
                made = (n * case.heating_values[c] * q.value("component_made", c, t) for c, n in case.recovery[cut].items())
                amounts[name] = sum(made)
            else:
                tank = opening_stock(self.q, cut, t) if self.opening.get(name) == cut else 0.0
                amounts[name] = q.value("cut_made", cut, t) + tank
        total = sum(amounts.values())
        there = abs(total) > 1e-9 * self.q.size
        return {name: amount / total for name, amount in amounts.items()} if there else {}

    def _load_units(self) -> None:
        for name in list(self.x):
            q = self.share(name)
            for unit in self.case.units:
                self._put(name, ("unit_load", unit, self.month), q.total(self.case.unit_parts[unit], self.month))

    def _hold(self) -> None:
        """What is paid for but not taken, and what is held to the end of the month."""
        families = {"shortfall": PAYMENTS, "closing_stock": HELD}
        for label in self.plan.lp.columns:
            if label[0] in families and label[-1] == self.month and self.q.value(*label):
                self._put(families[label[0]], label, self.q.value(*label))

    def _share_utilities(self) -> None:
        """Trades and conversions follow the net use of the utility that they serve."""
        case, t = self.case, self.month
        utilities = list(case.utilities)
        activities = _activities(self.q, t)
        net = {name: self._net_use(name) for name in self.x}
        fixed = np.array([case.fixed_use.get((u, t), 0.0) for u in utilities])
        if fixed.any():
            net[FIXED] = fixed
        sides = _larger_sides(activities, len(utilities))
        for activity in activities:
            if activity not in sides:
                self._put(activity.name, activity.label, activity.amount)
                net[activity.name] = activity.flows * activity.amount
        passing = _passing(sides, len(utilities))
        served = {activity.serves for activity in sides}
        worths = np.array([0.0 if i in served else self.q.dual("utility_balance", u, t) for i, u in enumerate(utilities)])
        for name, own in net.items():
            use = np.linalg.solve(np.eye(len(utilities)) - passing, own) if utilities else own
            for activity in sides:
                self._put(name, activity.label, activity.per_net_use(sides) * float(use[activity.serves]))
            self.passed[name] = float(worths @ use)

    def _net_use(self, name: str) -> Floats:
        """Uses less makes of every utility by a part, trades left out."""
        q = self.share(name)
        uses = (tuple(part for part in parts if part.kind != "trade") for parts in self.case.utilities.values())
        return np.array([q.total(parts, self.month) for parts in uses])


@dataclass(frozen=True, slots=True)
class _Recycle:
    """A cut cracked again: which cut, what share of it, its components per t, its charges per t."""

    cut: int
    share: float
    yields: Floats
    charges: dict[Label, float]


@dataclass(frozen=True, eq=False)
class _Activity:
    """A trade or conversion of the plan: what it uses (+) and brings (−) of each utility, per unit."""

    name: str
    label: Label
    amount: float
    serves: int
    flows: Floats

    @property
    def brought(self) -> float:
        """What it brings of the utility that it serves; below zero what it takes away."""
        return -self.amount * float(self.flows[self.serves])

    def per_net_use(self, sides: Iterable[_Activity]) -> float:
        """Its amount per unit of net use of the utility that it serves."""
        return self.amount / sum(other.brought for other in sides if other.serves == self.serves)


def _activities(q: Quantities, month: str) -> list[_Activity]:
    """What balances the utilities in the plan: trades, and conversions, which serve what they make first."""
    case, at = q.case, {utility: i for i, utility in enumerate(q.case.utilities)}
    conversions = case.scenario.plant.file.conversions
    found = []
    for trade, (utility, kind) in case.trades.items():
        flows = np.zeros(len(at))
        flows[at[utility]] = -1.0 if kind == "imports" else 1.0
        for other, parts in case.utilities.items():
            flows[at[other]] += sum(part.coefficient for part in parts if part.kind == "trade" and part.item[0] == trade)
        found.append((trade, ("trade", trade, month), at[utility], flows))
    for name, per_unit in case.conversions.items():
        flows = np.zeros(len(at))
        for utility, flow in per_unit.items():
            flows[at[utility]] = flow
        found.append((name, ("conversion", name, month), at[next(iter(conversions[name].makes))], flows))
    return [_Activity(name, label, q.value(*label), serves, flows) for name, label, serves, flows in found if q.value(*label)]


def _larger_sides(activities: list[_Activity], utilities: int) -> list[_Activity]:
    """Of each utility the activities of its larger side: what brings it, or what takes it away."""
    sums = np.zeros(utilities)
    for activity in activities:
        sums[activity.serves] += activity.brought
    return [activity for activity in activities if activity.brought * sums[activity.serves] > 0]


def _passing(sides: list[_Activity], utilities: int) -> Floats:
    """Use of each utility (rows) that a unit of net use of another (columns) brings with it."""
    passing = np.zeros((utilities, utilities))
    for activity in sides:
        brings = activity.flows * activity.per_net_use(sides)
        brings[activity.serves] = 0.0
        passing[:, activity.serves] += brings
    return passing


def _add(into: dict[str, float], shares: Mapping[str, float], amount: float) -> None:
    if amount:
        for item, share in shares.items():
            into[item] += share * amount


def opening_stock(q: Quantities, cut: str, month: str) -> float:
    """What of a cut is in its tank before a month, kt; 0.0 without a tank."""
    if cut not in q.case.stocks or q.case.stocks[cut].is_feed:  # a feed and a cut may share a name
        return 0.0
    return in_tank(q, cut, q.case.before(month))


def in_tank(q: Quantities, line: str, at_end_of: str | None) -> float:
    """What of a delivery or a cut is in its tank at the end of a month, or at first (None)."""
    return q.case.opening.get(line, 0.0) if at_end_of is None else q.value("closing_stock", line, at_end_of)
