"""Cost lines of feeds and of the whole plant: at today's prices, and at today's worths."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Mapping
from typing import TYPE_CHECKING

import numpy as np

from olefinlp.answers import money
from olefinlp.answers.money import MoneyLine, money_lines
from olefinlp.answers.one_tonne import (
    BUYING,
    FEED,
    GATE,
    OFFER,
    PRICE,
    PRODUCTS,
    Share,
    terms,
)
from olefinlp.answers.plan_parts import (
    AGREES,
    COST_OF_GROUP,
    COST_OF_TERM,
    COSTS,
    FIXED,
    HELD,
    PAYMENTS,
    PRICES,
    STOCK_OF,
    WORTHS,
    CostLine,
    Credit,
    Parts,
    in_tank,
    opening_stock,
)
from olefinlp.inputs.case import Case
from olefinlp.lp.compile import Label

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan


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
            opening, paid = in_tank(q, parcel, case.before(month)), sum(_paid(plan, s, month) for s in sellers)
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


def main_product(plan: Plan) -> str:
    """The cut per tonne of which cost is shown."""
    return plan.scenario.plant.file.main_product


def _is_main(plan: Plan, line: MoneyLine) -> bool:
    """Whether a line of money is revenue of the main product alone."""
    kind, _, item = line.price_item.partition(".")
    item = item.split(".")[0]
    if line.group == money.END_VALUE:
        return line.item == main_product(plan) and not plan.quantities.case.stocks[line.item].is_feed
    if line.group == money.SALES:
        return plan.quantities.case.outlets[item] == (main_product(plan),)
    return line.group == money.CONTENT and kind == "contents" and item == main_product(plan)


def plant_costs(plan: Plan, lines: Iterable[MoneyLine], month: str) -> dict[str, float]:
    """Costs less credits by kind from lines of money, thousands; the main product's revenue left out."""
    costs = dict.fromkeys(COSTS, 0.0)
    for line in lines:
        if line.month == month and not _is_main(plan, line):
            costs[COST_OF_GROUP[line.group]] -= line.amount
    return costs


def costs_at_prices(parts: Parts, paid: Paid) -> list[CostLine]:
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
    return CostLine(t, name, basis, charged, q.value("cut_made", main_product(parts.plan), t))


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


def credits_at_prices(parts: Parts) -> Iterator[Credit]:
    """Co-products of every part by outlet; contents go with their cut."""
    plan, case, t = parts.plan, parts.case, parts.month
    for name in parts.x:
        q = parts.share(name)
        for outlet, steps in case.sale_tiers.items():
            amount = q.outlet(outlet, t)
            if not amount or case.outlets[outlet] == (main_product(plan),):
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


def costs_at_worths(parts: Parts, paid: Paid) -> tuple[list[CostLine], list[Credit]]:
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
        if term.group == PRODUCTS and term.item == main_product(parts.plan):
            line.main_value += term.value
        elif term.item == GATE and term.group == FEED:
            line.gate_value -= term.value
        elif COST_OF_TERM[term.group]:
            line.costs[COST_OF_TERM[term.group]] -= term.value
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
        if not stock.is_feed and cut != main_product(parts.plan):
            line = CostLine(t, f"{STOCK_OF}{cut}", WORTHS)
            drawn = opening_stock(q, cut, t) - q.value("closing_stock", cut, t)
            line.costs["co_products"] = -drawn * q.dual("cut_disposal", cut, t)
            yield line
