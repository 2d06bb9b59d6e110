"""The whole algebra: buy → crack → recover → dispose, one named rule a constraint.

Everything is labelled by the plant's own names; months are an index from the start. Units of the
plan: kt, TJ (LHV), GWh, furnace-hours, thousands of the currency; a recovery unit's load is in
thousands of its own unit times hours.

Balances read **uses − supplies = what is there already**, so that a balance's shadow price is the
value of one more unit. Limits are ranges `(low, sum, high)` on written sums, so that the side on
which a thing stands never decides a sign. `TEXTS` says each rule in a line: `unit | sentence`.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator
from typing import Any

import pyomo.core as pyo  # not pyomo.environ, which loads solver interfaces that are not used here
from pyomo.common.gc_manager import PauseGC
from pyomo.core.expr import LinearExpression, MonomialTermExpression

from olefinlp.inputs.case import Case, Part

TEXTS = {
    "feed_balance": "kt | Of each feed (each quality apart) and month: charged + closing stock = bought + opening stock.",
    "purchase_limit": "kt | What is bought from a source stays between its minimum and maximum.",
    "take_or_pay_limit": "kt | Bought plus the shortfall paid for is at least the take-or-pay quantity.",
    "furnace_hours_limit": "h | Charge times hours per tonne (decokes inside) fits into the hours of the furnace group.",
    "decoke_crew_hours_limit": "h | Hours of decoking fit into the hours of the decoke crews.",
    "component_balance": "kt | A component is what the charges yield, less loss, plus what side streams bring.",
    "cut_balance": "kt | A cut is its recovered share of every component.",
    "cut_disposal": "kt | A cut is fully disposed of: outlets + recycle charged + closing stock = made + opening stock.",
    "heat_disposal": "TJ LHV | A cut balanced as heat is fully disposed of as the heat of its components.",
    "outlet_balance": "kt or TJ LHV | What an outlet sells, over its price steps, is what the cuts bring to it.",
    "outlet_limit": "kt or TJ LHV | What goes to an outlet stays between its minimum and maximum.",
    "unit_load_balance": "thousand unit-hours | The load of a recovery unit is the sum of its loads per tonne.",
    "unit_load_limit": "thousand unit-hours | Each recovery unit stays between minimum load and capacity × month factor × hours.",
    "ratio_limit": "kt | One sum is at most, or at least, a multiple of another (multiplied out).",
    "specification_limit": "kt | A blend meets its specification (multiplied out, linear by weight).",
    "named_limit": "as written | A written sum stays between its minimum and maximum.",
    "utility_balance": "TJ LHV, kt or GWh | Used + exported + emitted = made + imported.",
    "trade_limit": "TJ LHV, kt or GWh | An import, export or emission stays between its minimum and maximum.",
    "conversion_limit": "kt, TJ LHV or GWh | A conversion stays below its maximum.",
    "stock_limit": "kt | A closing stock stays between its minimum and maximum.",
    "end_stock_limit": "kt | The last closing stock is at least what the end rule asks for.",
}


def build_model(case: Case) -> pyo.ConcreteModel:
    """The Pyomo model of a case; every variable is ≥ 0, the margin is maximised.

    >>> from olefinlp import read_scenario
    >>> model = build_model(read_scenario("scenarios/thermal_cracker.yaml").case)
    >>> "component_balance" in {c.local_name for c in model.component_objects(pyo.Constraint)}
    True
    """
    with PauseGC():
        m = pyo.ConcreteModel()
        m.case = case
        declare_variables(m, case)
        buy(m, case)
        crack(m, case)
        recover(m, case)
        dispose(m, case)
        use_utilities(m, case)
        hold_limits(m, case)
        m.margin = pyo.Objective(expr=margin(m, case), sense=pyo.maximize)
    return m


# ---------------------------------------------------------------------------------- variables


def declare_variables(m: Any, case: Case) -> None:
    """All decisions and the quantities that follow from them."""
    months = case.months
    tiers = [(s, k, t) for s, data in case.sources.items() for k in data.tiers for t in months]
    sales = [(o, k, t) for o, steps in case.sale_tiers.items() for k in steps for t in months]
    m.bought = pyo.Var(tiers, bounds=lambda _, s, k, t: (0, _finite(case.tier_size[s, k, t])))
    m.shortfall = pyo.Var(
        [(s, t) for s, data in case.sources.items() if data.take_or_pay for t in months], within=pyo.NonNegativeReals
    )
    m.charge = pyo.Var(case.charges, within=pyo.NonNegativeReals)
    m.closing_stock = pyo.Var([(i, t) for i in _stock_lines(case) for t in months], within=pyo.NonNegativeReals)
    m.component_made = pyo.Var(case.components, months)
    m.cut_made = pyo.Var(case.cuts, months)
    dispositions = [(o, k, t) for o, cuts in case.outlets.items() for k in cuts for t in months]
    m.disposition = pyo.Var(dispositions, within=pyo.NonNegativeReals)
    m.sold = pyo.Var(sales, bounds=lambda _, o, k, t: (0, _finite(case.sale_size[o, k, t])))
    m.unit_load = pyo.Var(case.units, months)
    m.trade = pyo.Var(list(case.trades), months, within=pyo.NonNegativeReals)
    m.conversion = pyo.Var(list(case.conversions), months, within=pyo.NonNegativeReals)
    m.nothing = pyo.Var(bounds=(0, 0))
    m.charges_of = charges_of_modes(m, case)


def charges_of_modes(m: Any, case: Case) -> dict[tuple[str, str], list[Any]]:
    """(mode, month) → its charges over all parcels: sums ask for them again and again."""
    return {(mode, t): [m.charge[mode, p, t] for p in parcels] for (mode, t), parcels in case.charged_parcels.items()}


def _finite(value: float) -> float | None:
    return value if math.isfinite(value) else None


def _stock_lines(case: Case) -> list[str]:
    """What is stocked apart: each parcel of a feed, each cut."""
    return [line for data in case.stocks.values() for line in (data.parcels if data.is_feed else (data.item,))]


# ---------------------------------------------------------------------------------- buy


def buy(m: Any, case: Case) -> None:
    """Feed balances: per parcel, since each delivery quality has its own charge."""
    sources_of: dict[tuple[str, str], list[str]] = {}
    for (source, month), parcel in case.parcel_of.items():
        sources_of.setdefault((parcel, month), []).append(source)
    modes_of: dict[tuple[str, str], list[str]] = {}
    for mode, parcel, month in case.charges:
        modes_of.setdefault((parcel, month), []).append(mode)
    recycles = case.scenario.plant.recycle_feeds()
    stocked = {parcel for data in case.stocks.values() for parcel in data.parcels}
    lines = [
        (parcel, t)
        for feed, parcels in case.parcels.items()
        if feed not in recycles
        for parcel in parcels
        for t in case.months
        if (parcel, t) in sources_of or (parcel, t) in modes_of or parcel in stocked
    ]

    def feed_balance(m: Any, parcel: str, t: str) -> Any:
        charged = weighted((1.0, m.charge[mode, parcel, t]) for mode in modes_of.get((parcel, t), ()))
        bought = sum(m.bought[s, k, t] for s in sources_of.get((parcel, t), ()) for k in case.sources[s].tiers)
        if parcel not in stocked:
            return row(m, 0, charged - bought, 0)
        opening, closing = _opening(m, case, parcel, t), m.closing_stock[parcel, t]
        return _stock_row(case, parcel, charged + closing - bought, opening)

    m.feed_balance = pyo.Constraint(lines, rule=feed_balance)


def _opening(m: Any, case: Case, line: str, t: str) -> Any:
    before = case.before(t)
    return None if before is None else m.closing_stock[line, before]


def _stock_row(case: Case, line: str, uses: Any, opening: Any) -> Any:
    """uses = opening stock: a number in the first month, last month's closing stock after."""
    if opening is None:
        there = case.opening.get(line, 0.0)
        return (there, uses, there)
    return (0, uses - opening, 0)


# ---------------------------------------------------------------------------------- crack


def crack(m: Any, case: Case) -> None:
    """Charges give components; severities share furnace time, so a mix needs no row of its own."""
    kept = 1 - case.loss
    gives = {charge: {c: share * kept for c, share in shares.items()} for charge, shares in case.yields.items()}
    charged = {
        t: [(gives[mode, parcel], m.charge[mode, parcel, t]) for mode, parcel, _ in case.charges_in[t]] for t in case.months
    }

    def component_balance(m: Any, c: str, t: str) -> Any:
        yielded = weighted((shares.get(c, 0.0), charge) for shares, charge in charged[t])
        brought = sum(
            case.compositions[data.feed].get(c, 0.0) * m.bought[s, k, t]
            for s, data in case.sources.items()
            if data.kind == "side_streams" and c in case.compositions[data.feed]
            for k in data.tiers
        )
        return (0, m.component_made[c, t] - yielded - brought, 0)

    m.component_balance = pyo.Constraint(case.components, case.months, rule=component_balance)


# ---------------------------------------------------------------------------------- recover


def recover(m: Any, case: Case) -> None:
    """Cuts are recovered shares of components; units carry the load of what passes them."""

    def cut_balance(m: Any, k: str, t: str) -> Any:
        recovered = weighted((share, m.component_made[c, t]) for c, share in case.recovery[k].items())
        return (0, m.cut_made[k, t] - recovered, 0)

    def unit_load_balance(m: Any, u: str, t: str) -> Any:
        return (0, m.unit_load[u, t] - total(m, case, case.unit_parts[u], t), 0)

    m.cut_balance = pyo.Constraint(case.cuts, case.months, rule=cut_balance)
    m.unit_load_balance = pyo.Constraint(case.units, case.months, rule=unit_load_balance)


# ---------------------------------------------------------------------------------- dispose


def dispose(m: Any, case: Case) -> None:
    """Every cut goes somewhere, in full; what is sold is what arrives at the outlet."""
    recycled: dict[str, list[str]] = {k: [] for k in case.cuts}
    for feed, cut in case.scenario.plant.recycle_feeds().items():
        recycled[cut] += [mode for mode in case.modes if case.mode_feed[mode] == feed]
    outlets_of = {k: [o for o, cuts in case.outlets.items() if k in cuts] for k in case.cuts}

    def cut_disposal(m: Any, k: str, t: str) -> Any:
        to_outlets = sum(m.disposition[o, k, t] for o in outlets_of[k])
        charged = weighted((1.0, m.charge[mode, case.mode_feed[mode], t]) for mode in recycled[k])
        if k not in case.stocks or case.stocks[k].is_feed:  # a feed and a cut may share a name
            return row(m, 0, to_outlets + charged - m.cut_made[k, t], 0)
        uses = to_outlets + charged + m.closing_stock[k, t] - m.cut_made[k, t]
        return _stock_row(case, k, uses, _opening(m, case, k, t))

    def heat_disposal(m: Any, k: str, t: str) -> Any:
        heat = weighted((share * case.heating_values[c], m.component_made[c, t]) for c, share in case.recovery[k].items())
        return (0, sum(m.disposition[o, k, t] for o in outlets_of[k]) - heat, 0)

    def outlet_balance(m: Any, o: str, t: str) -> Any:
        arriving = sum(m.disposition[o, k, t] for k in case.outlets[o])
        return (0, sum(m.sold[o, step, t] for step in case.sale_tiers[o]) - arriving, 0)

    by_mass = [k for k in case.cuts if k not in case.heat_cuts]
    m.cut_disposal = pyo.Constraint(by_mass, case.months, rule=cut_disposal)
    m.heat_disposal = pyo.Constraint(case.heat_cuts, case.months, rule=heat_disposal)
    m.outlet_balance = pyo.Constraint(list(case.sale_tiers), case.months, rule=outlet_balance)


# ---------------------------------------------------------------------------------- utilities


def use_utilities(m: Any, case: Case) -> None:
    """Each utility is balanced: used + exported + emitted = made + imported."""

    def utility_balance(m: Any, u: str, t: str) -> Any:
        used_less_made = total(m, case, case.utilities[u], t)
        used_less_made += sum(flows[u] * m.conversion[name, t] for name, flows in case.conversions.items() if u in flows)
        out_less_in = sum(
            (-1 if kind == "imports" else 1) * m.trade[name, t] for name, (util, kind) in case.trades.items() if util == u
        )
        there = 0.0 - case.fixed_use.get((u, t), 0.0)  # never minus zero
        return row(m, there, used_less_made + out_less_in, there)

    m.utility_balance = pyo.Constraint(list(case.utilities), case.months, rule=utility_balance)


# ---------------------------------------------------------------------------------- limits


def hold_limits(m: Any, case: Case) -> None:
    """Every written minimum and maximum, as a named row `(low, sum, high)`."""
    sums = {
        "purchase": lambda s, t: purchased(m, case, s, t),
        "take_or_pay": lambda s, t: purchased(m, case, s, t) + m.shortfall[s, t],
        "furnace_hours": lambda g, t: hours_used(m, case, g, t),
        "decoke_crew_hours": lambda t: decoke_hours(m, case, t),
        "outlet": lambda o, t: sum(m.disposition[o, k, t] for k in case.outlets[o]),
        "unit_load": lambda u, t: m.unit_load[u, t],
        "ratio": lambda name, side, t: total(m, case, case.ratios[name, side], t),
        "specification": lambda o, prop, side, t: total(m, case, case.specifications[o, prop, side], t),
        "named": lambda name, t: total(m, case, case.sums[name], t),
        "trade": lambda name, t: m.trade[name, t],
        "conversion": lambda name, t: m.conversion[name, t],
        "stock": lambda item, t: stock(m, case, item, t),
        "end_stock": lambda item: stock(m, case, item, case.months[-1]),
    }
    for family, written_sum in sums.items():
        rows = {limit.key: limit for limit in case.limits.values() if limit.family == family}
        bounds = {key: (limit.low, limit.high) for key, limit in rows.items()}
        keys = [key[0] if len(key) == 1 else key for key in rows]

        def rule(m: Any, *key: str, written_sum: Any = written_sum, bounds: Any = bounds) -> Any:
            return row(m, bounds[key][0], written_sum(*key), bounds[key][1])

        setattr(m, f"{family}_limit", pyo.Constraint(keys, rule=rule))


def row(m: Any, low: float | None, expression: Any, high: float | None) -> Any:
    """A ranged row. A sum of which nothing can occur this time is left out, or stays as a row
    that cannot be met, so that the clash is found and named like any other."""
    if expression.__class__ not in (int, float):
        return (low, expression, high)
    if (low is None or low <= expression) and (high is None or expression <= high):
        return pyo.Constraint.Feasible
    return (low, expression + m.nothing, high)


def purchased(m: Any, case: Case, source: str, t: str) -> Any:
    """What is bought from a source, over its steps (kt)."""
    return sum(m.bought[source, k, t] for k in case.sources[source].tiers)


def hours_used(m: Any, case: Case, group: str, t: str) -> Any:
    """Furnace-hours of a group: on feed and decoking (h)."""
    modes = case.modes_in.get((group, t), ())
    return weighted((case.hours_per_kt[mode], charge) for mode in modes for charge in m.charges_of[mode, t])


def decoke_hours(m: Any, case: Case, t: str) -> Any:
    """Hours of decoking, all groups (h)."""
    charges = case.charges_in[t]
    return weighted((case.decoke_hours_per_kt[mode], m.charge[mode, parcel, t]) for mode, parcel, _ in charges)


def stock(m: Any, case: Case, item: str, t: str) -> Any:
    """What is in a tank at the end of a month, all parcels (kt)."""
    data = case.stocks[item]
    return sum(m.closing_stock[line, t] for line in (data.parcels if data.is_feed else (item,)))


def total(m: Any, case: Case, parts: Iterable[Part], t: str) -> Any:
    """A written sum of quantities of the plan in one month."""
    return weighted((part.coefficient, x) for part in parts for x in counted(m, case, part, t))


def counted(m: Any, case: Case, part: Part, t: str) -> Iterable[Any]:
    """The variables whose sum one term counts."""
    kind, item = part.kind, part.item
    if kind == "charge":
        return m.charges_of.get((item[0], t), ())  # type: ignore[no-any-return]
    if kind == "component":
        return (m.component_made[item[0], t],)
    if kind == "cut":
        return (m.cut_made[item[0], t],)
    if kind == "outlet":
        return [m.disposition[item[0], k, t] for k in case.outlets[item[0]]]
    if kind == "ingredient":
        return (m.disposition[item[0], item[1], t],)
    if kind == "bought":
        return [m.bought[item[0], k, t] for k in case.sources[item[0]].tiers]
    if kind == "unit_load":
        return (m.unit_load[item[0], t],)
    if kind == "trade":
        return (m.trade[item[0], t],)
    return (m.conversion[item[0], t],)


def weighted(terms: Iterable[tuple[float, Any]]) -> Any:
    """Σ coefficient × variable; 0 when there is nothing in it.

    A sum of products written in one piece: grown term by term it takes four times as long, and this is most of a program.
    """
    kept = [MonomialTermExpression(term) for term in terms if term[0]]
    return LinearExpression(kept) if kept else 0


# ---------------------------------------------------------------------------------- objective


Line = tuple[str, float, Any]
"""One line of money: price item, sign (and share of the price), quantity."""


def margin(m: Any, case: Case) -> Any:
    """Margin before fixed cost (thousands of the currency), all months."""
    priced = sum(sign * case.rate(item, t) * amount for t in case.months for item, sign, amount in money_of_month(m, case, t))
    return priced + end_value(m, case)


def money_of_month(m: Any, case: Case, t: str) -> Iterator[Line]:
    """Everything that is bought, sold or paid in a month: the objective is its sum at the prices."""
    yield from sales(m, case, t)
    yield from content_value(m, case, t)
    yield from traded(m, case, t)
    yield from purchases(m, case, t)
    yield from shortfall_payments(m, case, t)
    yield from variable_costs(m, case, t)
    yield from holding(m, case, t)


def sales(m: Any, case: Case, t: str) -> Iterator[Line]:
    """Sales at their prices; outlets of a cut valued by content take their deduction."""
    for o, steps in case.sale_tiers.items():
        for step in steps:
            yield case.sale_item(o, step), (-1 if o in case.deductions else 1), m.sold[o, step, t]


def content_value(m: Any, case: Case, t: str) -> Iterator[Line]:
    """Value of what is in the cuts that are valued by content, as a whole."""
    for (cut, item), parts in case.content.items():
        yield f"contents.{cut}.{item}", 1, total(m, case, parts, t)


def traded(m: Any, case: Case, t: str) -> Iterator[Line]:
    """Utilities exported, less imported, less emissions paid for."""
    for name, (_, kind) in case.trades.items():
        yield f"utilities.{name}", (1 if kind == "exports" else -1), m.trade[name, t]


def purchases(m: Any, case: Case, t: str) -> Iterator[Line]:
    """Feeds and side streams bought, step by step."""
    for s, data in case.sources.items():
        for k in data.tiers:
            yield case.purchase_item(s, k), -1, m.bought[s, k, t]


def shortfall_payments(m: Any, case: Case, t: str) -> Iterator[Line]:
    """What a take-or-pay contract is paid for quantities not taken."""
    for s, data in case.sources.items():
        if data.take_or_pay:
            yield case.purchase_item(s, 1), -case.shortfall_pays[s, t], m.shortfall[s, t]


def variable_costs(m: Any, case: Case, t: str) -> Iterator[Line]:
    """Costs per charge, decoke, outlet, cut, load or conversion."""
    for line in case.costs:
        yield line.price_item, -1, total(m, case, line.parts, t)


def holding(m: Any, case: Case, t: str) -> Iterator[Line]:
    """Cost of what is held to the end of a month, the last one included."""
    for item in case.stocks:
        yield f"stocks.{item}.holding", -1, stock(m, case, item, t)


def end_value(m: Any, case: Case) -> Any:
    """Worth of the last closing stocks that have a stated value."""
    last = case.months[-1]
    return sum(data.end_value * stock(m, case, item, last) for item, data in case.stocks.items() if data.end_value)
