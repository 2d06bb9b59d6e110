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

from collections.abc import Iterable
from typing import TYPE_CHECKING

import numpy as np

from olefinlp.answers.answer import Answer
from olefinlp.answers.cost_lines import costs_at_prices, costs_at_worths, credits_at_prices, feed_costs, main_product
from olefinlp.answers.plan_parts import ALL_MONTHS, COSTS, PRICES, ROUNDING, STOCK_OF, WHOLE, WORTHS, CostLine, Credit, Parts
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.inputs.units import per_lb

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan


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
            lines += _with_whole(costs_at_prices(parts, paid))
            credits += credits_at_prices(parts)
        at_worths, worth_credits = costs_at_worths(parts, paid)
        lines += _with_whole(_joined(at_worths))
        credits += worth_credits
    lines += _all_months(plan, lines)
    sentences += [_sentence(plan, lines, line) for line in lines if line.name == WHOLE]
    title = f"Cash cost of {main_product(plan)}"
    return Answer("cash_cost", title, (_table(plan, lines), _credits_table(plan, credits)), tuple(sentences), NOTE)


NOTE = (
    "Net of co-products, without fixed cost. A feed's cost follows its tonnes through the plan as it is: "
    "it is an average, not what one tonne more or less would change; that is the break-even price."
)


def _parts(plan: Plan, month: str) -> tuple[Parts | None, str]:
    """A month taken apart; None and why when there is nothing to divide by or to follow."""
    main = main_product(plan)
    if plan.quantities.value("cut_made", main, month) <= 0:
        return None, f"no {main} is made, so it has no cost per tonne."
    try:
        return Parts(plan, month), ""
    except np.linalg.LinAlgError:
        return None, "what goes round in the plan, cracked again or as a utility, never leaves it: no cost can be followed."


def _blend(plan: Plan, month: str) -> str:
    """Why the main product's revenue cannot be told apart from that of others; empty when it can."""
    q, main = plan.quantities, main_product(plan)
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
    main, currency = main_product(plan), plan.currency
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
    main, feeds = main_product(plan), plan.scenario.plant.file.feeds
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
