"""Cash cost of the main product, net of co-products: of the whole plant and of each feed.

Whole plant: (all costs − all revenue other than the main product's) / main product made, from the
plan's own money lines. Fixed cost is no cash that a plan decides and is left out.

Per feed at today's prices, the plan is taken apart into what each feed brings: its charges, the
components and cuts from them, the cuts that are cracked again (until nothing is left: a small
linear system), the way of each cut to its outlets and stocks, loads and utilities. Everything is
shared as the plan does it: a recycle over its modes, a cut over its outlets, an outlet over its
price steps, each in the plan's own proportions. The parts sum to the plan, so the costs do too.

* A utility is shared by net use (uses less what the feed makes): imports, exports, conversions and
  emissions follow it, so the feed pays their average price and the emissions that imports cause.
  When a utility is bought and sold at once, the smaller side is a line of its own. When it is
  neither, one feed uses what another makes: that passes at its shadow price and sums to nothing.
* A cut valued by content is valued by the feed's own components, less the average deduction.
* A feed costs the average price paid for it; out of a tank, the average of what is in the tank
  (what was there at first counts at the first month's average price paid, else the lowest offer).
* Fixed uses, take-or-pay payments, holding, stock at the end and changes of stocks are lines of
  their own, without a cost per tonne.

At today's worths the same tonnes are valued at shadow prices: cuts at the worth of one more tonne,
utilities at theirs, and hours, loads, ratios and other limits at theirs (limits on buying on the
tonnes charged). As used modes have no reduced cost,

    cost − worth of the main product made = paid for the feed − worth of the feed at the gate,

so a feed that is bought up to its price makes the main product at exactly what it is worth.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

from olefinlp.answers import money
from olefinlp.answers.answer import Answer
from olefinlp.answers.money import MoneyLine, money_lines
from olefinlp.answers.quantities import Quantities
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.answers.why_not import (
    BUYING,
    CREWS,
    EMISSIONS,
    FEED,
    FIRING,
    FURNACES,
    GATE,
    LIMITS,
    OFFER,
    PRICE,
    PRODUCTS,
    UNITS,
    UTILITIES,
    VARIABLE,
    Share,
    part_of,
    terms,
)
from olefinlp.inputs.case import Case
from olefinlp.inputs.units import per_lb
from olefinlp.lp.compile import Floats, Label

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan

PRICES, WORTHS = "today's prices", "today's worths"
WHOLE, ALL_MONTHS = "whole plant", "all months"
FIXED, PAYMENTS, HELD, STOCK_OF = "fixed uses", "take-or-pay payments", "stocks held", "stock of "
COSTS = ("feed_cost", "co_products", "utilities", "passed", "emissions", "variable_costs", "limits", "other")
AGREES, ROUNDING = 1e-7, 1e-12
_COST_OF_GROUP = {
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
_COST_OF_TERM = {
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
    return _in_tank(q, cut, q.case.before(month))


def _in_tank(q: Quantities, line: str, at_end_of: str | None) -> float:
    """What of a delivery or a cut is in its tank at the end of a month, or at first (None)."""
    return q.case.opening.get(line, 0.0) if at_end_of is None else q.value("closing_stock", line, at_end_of)


# ---------------------------------------------------------------------------------- what a feed costs


def feed_costs(plan: Plan) -> dict[tuple[str, str], tuple[float, float]]:
    """(feed or side stream, month) → what the tonnes charged cost, and what was paid for those bought."""
    case = plan.quantities.case
    found: dict[tuple[str, str], tuple[float, float]] = {}
    for month in case.months:
        for source, data in case.sources.items():
            paid = _paid(plan, source, month)
            before = found.get((data.feed, month), (0.0, 0.0))
            found[data.feed, month] = (before[0] + paid, before[1] + paid)
    for item, stock in case.stocks.items():
        for month, cost in _tank_costs(plan, stock.parcels).items() if stock.is_feed else ():
            found[item, month] = (cost, found.get((item, month), (0.0, 0.0))[1])
    return found


def _paid(plan: Plan, source: str, month: str) -> float:
    q, case = plan.quantities, plan.quantities.case
    steps = case.sources[source].tiers
    return sum(case.rate(case.purchase_item(source, k), month) * q.value("bought", source, str(k), month) for k in steps)


def _tank_costs(plan: Plan, parcels: tuple[str, ...]) -> dict[str, float]:
    """What is charged out of a tank in each month, at the average of what is in it."""
    q, case = plan.quantities, plan.quantities.case
    costs = dict.fromkeys(case.months, 0.0)
    for parcel in parcels:
        value = 0.0
        for month in case.months:
            sellers = [s for s in case.sources if case.parcel_of.get((s, month)) == parcel]
            opening, paid = _in_tank(q, parcel, case.before(month)), sum(_paid(plan, s, month) for s in sellers)
            bought = sum(q.bought(s, month) for s in sellers)
            if month == case.months[0]:
                offers = (case.rate(case.purchase_item(s, 1), month) for s in sellers)
                value = opening * (paid / bought if bought else min(offers, default=0.0))
            charged = sum(q.value("charge", mode, p, month) for mode, p, _ in case.charges_in[month] if p == parcel)
            cost = charged * (value + paid) / (opening + bought) if charged else 0.0
            costs[month] += cost
            value += paid - cost
    return costs


# ---------------------------------------------------------------------------------- at today's prices


Paid = Mapping[tuple[str, str], tuple[float, float]]


def _main(plan: Plan) -> str:
    return plan.scenario.plant.file.main_product


def _is_main(plan: Plan, line: MoneyLine) -> bool:
    """Whether a line of money is revenue of the main product alone."""
    kind, _, item = line.price_item.partition(".")
    item = item.split(".")[0]
    if line.group == money.END_VALUE:
        return line.item == _main(plan) and not plan.quantities.case.stocks[line.item].is_feed
    if line.group == money.SALES:
        return plan.quantities.case.outlets[item] == (_main(plan),)
    return line.group == money.CONTENT and kind == "contents" and item == _main(plan)


def plant_costs(plan: Plan, lines: Iterable[MoneyLine], month: str) -> dict[str, float]:
    """Costs less credits by kind from lines of money, thousands; the main product's revenue left out."""
    costs = dict.fromkeys(COSTS, 0.0)
    for line in lines:
        if line.month == month and not _is_main(plan, line):
            costs[_COST_OF_GROUP[line.group]] -= line.amount
    return costs


def _at_prices(parts: Parts, paid: Paid) -> list[CostLine]:
    """Every part at the plan's prices, and the change of the stock of each feed."""
    plan, month, lines = parts.plan, parts.month, []
    for name in parts.x:
        line = _line(parts, name, PRICES)
        line.costs |= plant_costs(plan, money_lines(parts.share(name)), month)
        line.costs["passed"] = parts.passed[name]
        lines.append(line)
    lines = _with_stock_changes(lines, paid, plan.quantities.case)
    whole = plant_costs(plan, plan.lines, month)
    moved = sum(abs(line.amount) for line in plan.lines)
    for kind, cost in whole.items():
        total = math.fsum(line.costs[kind] for line in lines)
        if abs(total - cost) > AGREES * moved:
            raise ArithmeticError(f"{kind} of the parts sum to {total:.12g}, of the plan to {cost:.12g}")
    return lines


def _line(parts: Parts, name: str, basis: str) -> CostLine:
    """An empty line with what is charged and made."""
    q, case, t = parts.share(name), parts.case, parts.month
    charged = sum(q.value("charge", mode, parcel, t) for mode, parcel, _ in case.charges_in[t] if case.mode_feed[mode] == name)
    charged += sum(q.bought(s, t) for s, data in case.sources.items() if data.kind == "side_streams" and data.feed == name)
    return CostLine(t, name, basis, charged, q.value("cut_made", _main(parts.plan), t))


def _with_stock_changes(lines: list[CostLine], paid: Paid, case: Case) -> list[CostLine]:
    """Feeds at the cost of what is charged; what was paid beyond that in a line of its own."""
    changes = []
    for line in lines:
        if line.name in case.stocks and case.stocks[line.name].is_feed:
            cost, bought = paid[line.name, line.month]
            line.costs["feed_cost"] = cost
            change = CostLine(line.month, f"{STOCK_OF}{line.name}", line.basis)
            change.costs["feed_cost"] = bought - cost
            changes.append(change)
    return [*lines, *changes]


def _credits_at_prices(parts: Parts) -> Iterator[Credit]:
    """Co-products of every part by outlet; contents go with their cut."""
    plan, case, t = parts.plan, parts.case, parts.month
    for name in parts.x:
        q = parts.share(name)
        for outlet, steps in case.sale_tiers.items():
            amount = q.outlet(outlet, t)
            if not amount or case.outlets[outlet] == (_main(plan),):
                continue
            sign = -1 if outlet in case.deductions else 1
            value = sum(sign * case.rate(case.sale_item(outlet, k), t) * q.value("sold", outlet, str(k), t) for k in steps)
            unit = "TJ LHV" if case.outlets[outlet][0] in case.heat_cuts else "kt"
            yield Credit(t, name, PRICES, outlet, amount, unit, value + _content(parts, q, outlet))


def _content(parts: Parts, q: Share, outlet: str) -> float:
    """The value of what is in a part's cut, as far as the cut goes to this outlet."""
    cut, t = parts.case.outlets[outlet][0], parts.month
    items = {item: terms for (name, item), terms in parts.case.content.items() if name == cut}
    if not items:
        return 0.0
    value = sum(parts.case.rate(f"contents.{cut}.{item}", t) * q.total(terms, t) for item, terms in items.items())
    return value * parts.q.outlet(outlet, t) / parts.q.value("cut_made", cut, t)


# ---------------------------------------------------------------------------------- at today's worths


def _at_worths(parts: Parts, paid: Paid) -> tuple[list[CostLine], list[Credit]]:
    """Every part at shadow prices; payments and holding stay as they are paid."""
    plan, t = parts.plan, parts.month
    lines, credits = [], []
    for name in parts.x:
        line = _line(parts, name, WORTHS)
        if name in (PAYMENTS, HELD):
            line.costs |= plant_costs(plan, money_lines(parts.share(name)), t)
        elif name == FIXED:
            line.costs |= _fixed_at_worths(parts)
        else:
            credits += _value_part(parts, line)
            line.costs["feed_cost"] = paid.get((name, t), (0.0, 0.0))[0]
        lines.append(line)
    return _with_stock_changes([*lines, *_tanks_at_worths(parts)], paid, parts.case), credits


def _value_part(parts: Parts, line: CostLine) -> list[Credit]:
    """What is charged and bought at shadow prices, into the line; gives its co-products by cut."""
    charged, bought = (_given(parts, line.name, kind) for kind in ("charge", "bought"))
    is_feed = line.name in parts.case.parcels
    found = terms(parts.plan, charged if is_feed else charged | bought, parts.month)
    by_cut: dict[str, float] = {}
    for term in found:
        if term.group == PRODUCTS and term.item == _main(parts.plan):
            line.main_value += term.value
        elif term.item == GATE and term.group == FEED:
            line.gate_value -= term.value
        elif _COST_OF_TERM[term.group]:
            line.costs[_COST_OF_TERM[term.group]] -= term.value
            if term.group in (PRODUCTS, FEED):
                by_cut[term.item] = by_cut.get(term.item, 0.0) + term.value
    if is_feed and bought:
        share = line.charged / sum(bought.values())
        rents = [term.value for term in terms(parts.plan, bought, parts.month) if term.group == BUYING]
        line.costs["limits"] -= share * math.fsum(rents)
    elif bought:
        line.gate_value = math.fsum(term.value for term in found if term.group not in (PRICE, OFFER))
    return list(_credits_at_worths(parts, line.name, by_cut))


def _given(parts: Parts, name: str, kind: str) -> dict[Label, float]:
    """The charges or the purchases of a part."""
    columns, x = parts.plan.lp.columns, parts.x[name]
    return {columns[j]: float(x[j]) for j in np.flatnonzero(x).tolist() if columns[j][0] == kind}


def _credits_at_worths(parts: Parts, name: str, by_cut: Mapping[str, float]) -> Iterator[Credit]:
    case, t, q = parts.case, parts.month, parts.share(name)
    recycles = case.scenario.plant.recycle_feeds()
    for cut, value in by_cut.items():
        again = sum(q.charged(mode, t) for mode, feed in case.mode_feed.items() if recycles.get(feed) == cut)
        made = q.value("cut_made", cut, t)
        if abs(made - again) > 1e-9 * abs(made):  # else all of it is cracked again
            yield Credit(t, name, WORTHS, cut, made - again, "kt", value)


def _fixed_at_worths(parts: Parts) -> dict[str, float]:
    """Fixed uses at the shadow prices of the utilities."""
    costs = dict.fromkeys(COSTS, 0.0)
    for utility in parts.case.utilities:
        use = parts.case.fixed_use.get((utility, parts.month), 0.0)
        kind = "emissions" if (utility, "emissions") in parts.case.trades.values() else "utilities"
        costs[kind] += use * parts.q.dual("utility_balance", utility, parts.month)
    return costs


def _tanks_at_worths(parts: Parts) -> Iterator[CostLine]:
    """Cuts taken from their tanks less those put into them, at their worth; the main product is none of it."""
    q, t = parts.q, parts.month
    for cut, stock in parts.case.stocks.items():
        if not stock.is_feed and cut != _main(parts.plan):
            line = CostLine(t, f"{STOCK_OF}{cut}", WORTHS)
            drawn = opening_stock(q, cut, t) - q.value("closing_stock", cut, t)
            line.costs["co_products"] = -drawn * q.dual("cut_disposal", cut, t)
            yield line


# ---------------------------------------------------------------------------------- the answer


def cash_cost(plan: Plan) -> Answer:
    """Cash cost of the main product net of co-products, at today's prices and at today's worths.

    The first table is the account of every month: a row for each feed, side stream and line of its
    own, and the whole plant, their sum; costs in thousands of the currency, credits negative, and
    per t of main product (US cents per lb too when the money is USD). The second lists what every
    co-product brings. Where the cost cannot be told apart (no main product made, or sold in a
    blend) a sentence says so in place of a number. Raises `ArithmeticError` if the parts of the
    plan do not sum to its money.
    """
    lines: list[CostLine] = []
    credits: list[Credit] = []
    sentences: list[str] = []
    paid = feed_costs(plan)
    for month in plan.quantities.case.months:
        parts, reason = _parts(plan, month)
        blend = _blend(plan, month)
        sentences += [f"{month}: {text}" for text in (reason, blend) if text]
        if parts is None:
            continue
        if not blend:
            lines += _with_whole(_at_prices(parts, paid))
            credits += _credits_at_prices(parts)
        at_worths, worth_credits = _at_worths(parts, paid)
        lines += _with_whole(_joined(at_worths))
        credits += worth_credits
    lines += _all_months(plan, lines)
    sentences += [_sentence(plan, lines, line) for line in lines if line.name == WHOLE]
    title = f"Cash cost of {_main(plan)}"
    return Answer("cash_cost", title, (_table(plan, lines), _credits_table(plan, credits)), tuple(sentences), NOTE)


NOTE = (
    "Net of co-products, without fixed cost. A feed's cost follows its tonnes through the plan as it is: "
    "it is an average, not what one tonne more or less would change; that is the break-even price."
)


def _parts(plan: Plan, month: str) -> tuple[Parts | None, str]:
    """A month taken apart; None and why when there is nothing to divide by or to follow."""
    main = _main(plan)
    if plan.quantities.value("cut_made", main, month) <= 0:
        return None, f"no {main} is made, so it has no cost per tonne."
    try:
        return Parts(plan, month), ""
    except np.linalg.LinAlgError:
        return None, "what goes round in the plan, cracked again or as a utility, never leaves it: no cost can be followed."


def _blend(plan: Plan, month: str) -> str:
    """Why the main product's revenue cannot be told apart from that of others; empty when it can."""
    q, main = plan.quantities, _main(plan)
    for outlet, cuts in q.case.outlets.items():
        if main in cuts and len(cuts) > 1 and q.value("disposition", outlet, main, month):
            return f"{main} is sold in the blend {outlet}, whose price is of no single cut: no cost at today's prices."
    return ""


def _joined(lines: Iterable[CostLine]) -> list[CostLine]:
    """Lines of one name and month added up, in the order in which they are met."""
    found: dict[tuple[str, str], CostLine] = {}
    for line in lines:
        into = found.setdefault((line.name, line.basis), CostLine(line.month, line.name, line.basis))
        into.charged += line.charged
        into.main += line.main
        into.main_value += line.main_value
        into.gate_value += line.gate_value
        for kind, cost in line.costs.items():
            into.costs[kind] += cost
    return list(found.values())


def _with_whole(lines: list[CostLine]) -> list[CostLine]:
    """Lines with something in them, and their sum: the whole plant."""
    whole = _joined(CostLine(**{**vars(line), "name": WHOLE}) for line in lines)
    return [line for line in lines if not _is_empty(line, whole[0])] + whole


def _is_empty(line: CostLine, whole: CostLine) -> bool:
    """Whether there is nothing in a line but rounding."""
    size = max(map(abs, whole.costs.values()))
    return not line.charged and not line.main and all(abs(cost) <= ROUNDING * size for cost in line.costs.values())


def _all_months(plan: Plan, lines: list[CostLine]) -> list[CostLine]:
    """Sums over several months, of a basis that every month has."""
    months, found = plan.quantities.case.months, []
    for basis in (PRICES, WORTHS) if len(months) > 1 else ():
        own = [CostLine(**{**vars(line), "month": ALL_MONTHS}) for line in lines if line.basis == basis]
        if sum(line.name == WHOLE for line in own) == len(months):
            *parts, whole = sorted(_joined(own), key=lambda line: line.name == WHOLE)
            found += [line for line in parts if not _is_empty(line, whole)] + [whole]
    return found


def _table(plan: Plan, lines: list[CostLine]) -> Table:
    main, currency = _main(plan), plan.currency
    per_tonne, thousands = f"{currency}/t", f"k{currency}"
    titles = dict(zip(COSTS, ("Feed", "Co-products (credit −)", "Utilities", "Utilities passed between feeds"), strict=False))
    titles |= {"emissions": "Emissions", "variable_costs": "Variable costs", "limits": "Limits at their worth", "other": "Other"}
    columns = (
        Column("month", "Month"),
        Column("feed", "Feed"),
        Column("basis", "Basis"),
        Column("charged", "Charged", "kt", "quantity"),
        Column("main_product", main, "kt", "quantity"),
        *(Column(kind, title, thousands, "money") for kind, title in titles.items()),
        Column("cost", "Cost net of co-products", thousands, "money"),
        Column("per_tonne", f"Cash cost of its {main}", per_tonne, "price"),
        *([Column("per_lb", f"Cash cost of its {main}", "US cents/lb", "price")] if currency == "USD" else []),
        Column("of_plant", f"Per t of all {main}", per_tonne, "price"),
        Column("feed_price", "Paid for the feed", per_tonne, "price"),
        Column("gate_worth", "Worth of the feed at the gate", per_tonne, "price"),
        Column("main_worth", f"Worth of its {main}", per_tonne, "price"),
    )
    made = {(line.month, line.basis): line.main for line in lines if line.name == WHOLE}
    rows = [_record(line, made[line.month, line.basis], currency) for line in lines]
    note = (
        "Rows of a month and basis sum to the whole plant. At today's prices the whole plant is all costs less all other revenue."
    )
    return Table("cash_cost", f"Cash cost of {main}", columns, rows, note)


def _record(line: CostLine, made: float, currency: str) -> Record:
    per_tonne = _per(line.cost, line.main)
    size = ROUNDING * sum(map(abs, line.costs.values()))
    costs = {kind: cost if abs(cost) > size else 0.0 for kind, cost in line.costs.items()}
    fed = line.charged if line.name != WHOLE else 0.0
    worths = line.basis == WORTHS
    record: Record = {"month": line.month, "feed": line.name, "basis": line.basis, "charged": line.charged}
    record |= {"main_product": line.main, **costs, "cost": line.cost, "per_tonne": per_tonne}
    record |= {"per_lb": None if per_tonne is None else per_lb(per_tonne)} if currency == "USD" else {}
    record |= {"of_plant": line.cost / made, "feed_price": _per(line.costs["feed_cost"], fed)}
    record |= {"gate_worth": _per(line.gate_value, fed) if worths else None}
    return record | {"main_worth": _per(line.main_value, line.main) if worths else None}


def _per(amount: float, quantity: float) -> float | None:
    return amount / quantity if quantity > 0 else None


def _credits_table(plan: Plan, credits: Iterable[Credit]) -> Table:
    columns = (
        Column("month", "Month"),
        Column("feed", "Feed"),
        Column("basis", "Basis"),
        Column("item", "Outlet, or cut at its worth"),
        Column("quantity", "Quantity", kind="quantity"),
        Column("unit", "Unit"),
        Column("value", "Value per t or GJ", plan.currency, "price"),
        Column("credit", "Credit", f"k{plan.currency}", "money"),
    )
    rows: list[Record] = [
        {"month": c.month, "feed": c.name, "basis": c.basis, "item": c.item, "quantity": c.quantity, "unit": c.unit}
        | {"value": c.amount / c.quantity if c.quantity else None, "credit": c.amount}
        for c in credits
    ]
    return Table("co_product_credits", "Co-product credits", columns, rows, "Cuts valued by content stand at what is in them.")


def _sentence(plan: Plan, lines: list[CostLine], whole: CostLine) -> str:
    """The plant's cost, and the cheapest and dearest feed."""
    main, feeds = _main(plan), plan.scenario.plant.file.feeds
    same = (line for line in lines if _same(line, whole) and line.name in feeds)
    by_feed = sorted((line.cost / line.main, line.name) for line in same if line.main > 0)
    text = f"{whole.month}, at {whole.basis}: a tonne of {main} costs {_money(plan, whole.cost / whole.main)} net of co-products"
    if len(by_feed) > 1:
        (low, cheapest), (high, dearest) = by_feed[0], by_feed[-1]
        text += f", from {low:,.0f} with {cheapest} to {high:,.0f} with {dearest}"
    stored = sum(line.costs["feed_cost"] for line in lines if _same(line, whole) and line.name.startswith(STOCK_OF))
    if abs(stored / whole.main) > 0.5:
        text += f"; {stored / whole.main:+,.0f} of it is change of stocks"
    if whole.basis == WORTHS and whole.month != ALL_MONTHS:
        text += f"; one more tonne of it is worth {whole.main_value / whole.main:,.1f}"
    return text + "."


def _same(line: CostLine, whole: CostLine) -> bool:
    return (line.month, line.basis) == (whole.month, whole.basis)


def _money(plan: Plan, per_tonne: float) -> str:
    cents = f" ({per_lb(per_tonne):.1f} US cents/lb)" if plan.currency == "USD" else ""
    return f"{per_tonne:,.1f} {plan.currency}/t{cents}"
