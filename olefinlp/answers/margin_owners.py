"""Who earns the margin: by strong duality it is the sum of rate × limit over all that limits it."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from olefinlp.answers.answer import Answer
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.answers.words import amount, percent
from olefinlp.lp.compile import Label

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan

MARKETS, OFFERS, FURNACES = "markets", "feed offers", "furnaces"
RECOVERY, UTILITIES, STOCKS, OTHER = "recovery units", "utilities", "stocks", "named limits"
GROUPS = (MARKETS, OFFERS, FURNACES, RECOVERY, UTILITIES, STOCKS, OTHER)
_GROUP_OF = {
    "purchase_limit": OFFERS,
    "take_or_pay_limit": OFFERS,
    "bought": OFFERS,
    "furnace_hours_limit": FURNACES,
    "decoke_crew_hours_limit": FURNACES,
    "outlet_limit": MARKETS,
    "sold": MARKETS,
    "specification_limit": MARKETS,
    "unit_load_limit": RECOVERY,
    "ratio_limit": RECOVERY,
    "named_limit": OTHER,
    "utility_balance": UTILITIES,
    "trade_limit": UTILITIES,
    "conversion_limit": UTILITIES,
    "stock_limit": STOCKS,
    "end_stock_limit": STOCKS,
    "feed_balance": STOCKS,
    "cut_disposal": STOCKS,
}


def who_earns_the_margin(plan: Plan) -> Answer:
    """The dual account: Σ rate × limit over rows, bounds and fixed terms.

    Equal to the margin before fixed cost to 1e-6 of the money that moves, or `ArithmeticError`.
    Binding minimums and fixed uses enter negative. Columns: group, item, rate, limit, earns
    (thousands of the currency).
    """
    rows = sorted((row for row in _account(plan) if abs(row["earns"]) > 1e-9), key=lambda r: GROUPS.index(r["group"]))
    total = sum(row["earns"] for row in rows) + plan.lp.offset
    moved = sum(abs(line.amount) for line in plan.lines) or 1.0
    if abs(total - plan.solution.objective) > 1e-6 * moved:
        raise ArithmeticError(f"the account sums to {total:g}, the margin is {plan.solution.objective:g}")
    money = f"k{plan.currency}"
    columns = (
        Column("month", "Month"),
        Column("group", "Group"),
        Column("item", "Item"),
        Column("limit", "Limit", kind="quantity"),
        Column("unit", "Unit"),
        Column("rate", "Rate d(margin)/d(limit)", kind="price"),
        Column("rate_unit", "Rate unit"),
        Column("earns", "Earns", money, "money"),
    )
    sums = {group: sum(row["earns"] for row in rows if row["group"] == group) for group in GROUPS}
    share = Table(
        "margin_by_owner",
        "Margin by owner",
        (Column("group", "Group"), Column("earns", "Earns", money, "money"), Column("share", "Share", "%", "share")),
        [
            {"group": group, "earns": value, "share": value / plan.solution.objective if plan.solution.objective > 0 else None}
            for group, value in sums.items()
            if value
        ],
    )
    note = "Sums to the margin before fixed cost. A rent says what limits the plan, not what a limit would fetch if it moved far."
    table = Table("margin_owners", "Who earns the margin", columns, rows, note)
    return Answer("margin_owners", "Who earns the margin", (table, share), (_sentence(plan, sums),), note)


def _account(plan: Plan) -> list[Record]:
    """Every row and column whose dual stands against a written number."""
    lp, solution = plan.lp, plan.solution
    lines = (
        *zip(lp.rows, solution.row_dual, lp.row_low, lp.row_high, strict=True),
        *zip(lp.columns, solution.reduced, lp.low, lp.high, strict=True),
    )
    sides = ((label, float(dual), float(high if dual > 0 else low)) for label, dual, low, high in lines if dual)
    return [_record(plan, label, dual, bound) for label, dual, bound in sides if bound and math.isfinite(bound)]


def _record(plan: Plan, label: Label, dual: float, bound: float) -> Record:
    case, currency = plan.quantities.case, plan.currency
    limit = case.limits.get((label[0].removesuffix("_limit"), *label[1:]))
    if limit:
        words, unit, scale, rate_unit, worth = limit.label, limit.unit, limit.scale, limit.worth_unit, limit.worth_scale
    else:
        words, unit, scale, rate_unit, worth = _fixed_term(label), "", 1.0, "", 1.0
    month = limit.month if limit else label[-1]
    return {
        "month": month,
        "group": _GROUP_OF[label[0]],
        "item": words,
        "limit": bound * scale,
        "unit": unit,
        "rate": dual * worth,
        "rate_unit": f"{currency}/{rate_unit}" if rate_unit else "",
        "earns": dual * bound,
    }


def _fixed_term(label: Label) -> str:
    """What a number in a balance is, or the end of a price step."""
    kind, name, *rest = label
    if kind == "utility_balance":
        return f"fixed use of {name}"
    if kind in ("feed_balance", "cut_disposal"):
        return f"opening stock of {name}"
    return f"{name.replace('.', ' ')} end of step {rest[0]}"


def _sentence(plan: Plan, sums: dict[str, float]) -> str:
    total = plan.solution.objective
    ordered = sorted((pair for pair in sums.items() if pair[1]), key=lambda pair: -pair[1])
    if total > 0:
        parts = [f"{group} {percent(value / total)}" for group, value in ordered]
        return f"Of the margin before fixed cost, {', '.join(parts)}."
    if not ordered:
        return "There is no margin to share."
    parts = [f"{group} {amount(value)}" for group, value in ordered]
    return f"There is no margin to share, but {amount(-total)} k{plan.currency} of loss: {', '.join(parts)}."
