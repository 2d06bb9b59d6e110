"""Why a mode or a feed is not used: the account of one more tonne, at today's worths.

One tonne charged makes components, these make cuts and load units; everything it meets has a
shadow price y or a price c. With x the tonne and all that follows from it,

    reduced cost = Σ c x − Σ y (A x)     [currency per t]

over the price lines and over all rows but the definitions of components, cuts and loads, whose
variables have no reduced cost of their own. So the account sums to the reduced cost exactly.

A feed of which nothing is there has no shadow price of its own (it may stand anywhere between its
value and its price): its account buys the tonne too, and sums to both reduced costs.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

from olefinlp.answers.answer import Answer
from olefinlp.answers.one_tonne import (
    AT_THE_GATE,
    BUYING,
    EXACT,
    FEED,
    NAMED,
    OFFER,
    PRICE,
    PRODUCTS,
    UNITS,
    Term,
    follow,
    terms,
)
from olefinlp.answers.plan_tables import worth_at_gate
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.answers.words import amount as amount_words
from olefinlp.inputs.findings import near_name
from olefinlp.lp.compile import Label

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan


# ---------------------------------------------------------------------------------- accounts


@dataclass(frozen=True, slots=True)
class Worth:
    """A component: its value in the cuts and contents, and that less what it takes on its way, per t."""

    made: float
    net: float


def component_worths(plan: Plan, month: str) -> dict[str, Worth]:
    """Worth of a tonne of each component; `net` is the shadow price of its balance."""
    found = {}
    for component in plan.quantities.case.components:
        lines = terms(plan, {("component_made", component, month): 1.0}, month)
        made = math.fsum(term.value for term in lines if term.group == PRODUCTS)
        found[component] = Worth(made, math.fsum(term.value for term in lines))
    return found


@dataclass(frozen=True, slots=True)
class Account:
    """One more tonne in one way: its lines and their sum, the reduced cost."""

    month: str
    source: str
    group: str
    severity: str
    used: float
    lines: tuple[Term, ...]
    components: dict[str, float]
    worths: Mapping[str, Worth]
    total: float
    worth: float

    def sum_of(self, *groups: str) -> float:
        """What these groups of lines come to."""
        return math.fsum(line.value for line in self.lines if line.group in groups)


def _account(plan: Plan, given: Mapping[Label, float], month: str, worths: Mapping[str, Worth]) -> Account:
    """The account of a tonne charged, or bought and charged, with its products by component.

    Raises `ArithmeticError` unless it sums to the reduced costs of what is given.
    """
    q, x = plan.quantities, follow(plan, given, month)
    made = {c: float(x[plan.lp.column_at["component_made", c, month]]) for c in q.case.components}
    products = [Term(PRODUCTS, c, n, "t", worths[c].made, n * worths[c].made) for c, n in made.items() if n]
    lines = (*products, *(term for term in terms(plan, given, month) if term.group != PRODUCTS))
    total = math.fsum(line.value for line in lines)
    reduced = math.fsum(q.reduced_cost(*label) * value for label, value in given.items())
    if abs(total - reduced) > EXACT * (math.fsum(abs(line.value) for line in lines) or 1.0):
        raise ArithmeticError(f"the account sums to {total:.12g}, the reduced cost is {reduced:.12g}")
    of = {label[0]: label for label in given}
    mode, source = of.get("charge", ("", ""))[1], of.get("bought", ("", ""))[1]
    used = q.value(*of["charge" if mode else "bought"])
    at_gate = math.fsum(line.value for line in lines if line.group not in AT_THE_GATE)
    group, severity = q.case.mode_group.get(mode, ""), q.case.mode_severity.get(mode, "")
    return Account(month, source, group, severity, used, lines, made, worths, total, at_gate)


def _best(accounts: Iterable[Account]) -> Account | None:
    return max(accounts, key=lambda account: account.total, default=None)


def _ways(plan: Plan, mode: str, month: str, worths: Mapping[str, Worth], source: str | None) -> list[Account]:
    """Accounts of a mode with every delivery it could charge: out of what is there, or bought first.

    `source` is the one to buy from; None for what is there or, when nothing is, every source on offer.
    """
    case, found = plan.quantities.case, []
    for parcel in case.charged_parcels.get((mode, month), ()):
        charged: dict[Label, float] = {("charge", mode, parcel, month): 1.0}
        sellers = [s for s in case.sources if case.parcel_of.get((s, month)) == parcel and source in (None, s)]
        if source is None and _is_there(plan, parcel, month):
            sellers = []
        if source is not None and not sellers:
            continue
        ways = [charged | {("bought", s, str(next_step(plan, s, month)), month): 1.0} for s in sellers] or [charged]
        found += [_account(plan, given, month, worths) for given in ways]
    return found


def _is_there(plan: Plan, parcel: str, month: str) -> bool:
    """Whether anything of a delivery is bought, charged or stored, so that it has a worth of its own."""
    q = plan.quantities
    used = any(q.value("charge", mode, p, month) for mode, p, _ in q.case.charges_in[month] if p == parcel)
    stored = ("closing_stock", parcel, month) in plan.lp.column_at and q.value("closing_stock", parcel, month)
    bought = any(q.bought(s, month) for (s, t), p in q.case.parcel_of.items() if (p, t) == (parcel, month))
    return bool(used or stored or bought)


def next_step(plan: Plan, source: str, month: str) -> int:
    """The step of a source in which the next tonne is bought."""
    q = plan.quantities
    for step in q.case.sources[source].tiers:
        size = q.case.tier_size[source, step, month]
        if q.value("bought", source, str(step), month) < size * (1 - EXACT):
            return step
    return q.case.sources[source].tiers[-1]


def _months(plan: Plan, month: str | None) -> tuple[str, ...]:
    months = plan.quantities.case.months
    if month is not None and month not in months:
        raise ValueError(f"`{month}` is not a period of this plan; {near_name(month, months)}")
    return months if month is None else (month,)


# ---------------------------------------------------------------------------------- answers


def why_not_mode(plan: Plan, mode: str, month: str | None = None) -> Answer:
    """Why a mode (`group.feed.severity`) is not used, by month: the account of its next tonne.

    Each account sums to the reduced cost of the charge; when nothing of the feed is there, to that
    of the charge and of the purchase. Raises `ValueError` for unknown names and `ArithmeticError`
    for an account that does not sum.
    """
    known = [known.name for known in plan.scenario.plant.modes]
    if mode not in known:
        raise ValueError(f"`{mode}` is no mode of this plant; {near_name(mode, known)}")
    accounts: list[Account] = []
    sentences: list[str] = []
    for t in _months(plan, month):
        best = _best(_ways(plan, mode, t, component_worths(plan, t), None))
        accounts += [best] if best else []
        sentences.append(_mode_sentence(plan, best, mode, t))
    tables = (_lines_table(plan, accounts), _components_table(plan, accounts))
    return Answer("why_not_mode", f"Why not {_mode_words(mode)}", tables, tuple(sentences), NOTE)


NOTE = (
    "Of the next tonne only, at today's worths: each term is a quantity per t charged times a price or shadow price, "
    "and they sum to the reduced cost."
)


def why_not_feed(plan: Plan, feed: str, month: str | None = None) -> Answer:
    """Why a feed, a side stream or one source (`feed.source`) is not bought: the best mode of each group.

    The first table has a row for each source and furnace group, the second the accounts behind
    them. The worth is that of one more tonne at the gate in that group; less the price and what
    limits on buying take it is the gain, the sum of the reduced costs of buying and of charging.
    Raises `ValueError` for unknown names and `ArithmeticError` for an account that does not sum.
    """
    plant, case = plan.scenario.plant, plan.quantities.case
    known = [*plant.file.feeds, *plant.file.side_streams, *case.sources]
    if feed not in known:
        raise ValueError(f"`{feed}` is no feed, side stream or source of this plan; {near_name(feed, known)}")
    asked: list[str | None] = [label for label, data in case.sources.items() if feed in (label, data.feed)]
    asked = [None] if feed in plant.recycle_feeds() else asked
    accounts, sentences = [], []
    for t in _months(plan, month):
        worths = component_worths(plan, t)
        for source in asked:
            found = _by_group(plan, feed, source, t, worths)
            accounts += found
            sentences.append(_feed_sentence(plan, found, source or feed, t))
    sentences += [] if asked else [f"{feed} is not on offer: the scenario names no source of it."]
    tables = (_ways_table(plan, accounts), _lines_table(plan, accounts), _components_table(plan, accounts))
    return Answer("why_not_feed", f"Why not {feed}", tables, tuple(sentences), NOTE)


def _by_group(plan: Plan, feed: str, source: str | None, month: str, worths: Mapping[str, Worth]) -> list[Account]:
    """The best way in each furnace group; a side stream has one way only."""
    case = plan.quantities.case
    if source and case.sources[source].kind == "side_streams":
        return [_account(plan, {("bought", source, str(next_step(plan, source, month)), month): 1.0}, month, worths)]
    name = case.sources[source].feed if source else feed
    groups: dict[str, list[Account]] = {}
    for mode in case.modes:
        if case.mode_feed[mode] == name:
            groups.setdefault(case.mode_group[mode], []).extend(_ways(plan, mode, month, worths, source))
    best = (_best(ways) for ways in groups.values())
    return [account for account in best if account is not None]


def _ways_table(plan: Plan, accounts: list[Account]) -> Table:
    per_tonne = f"{plan.currency}/t"
    columns = (
        Column("month", "Month"),
        Column("source", "Source"),
        Column("group", "Furnace group"),
        Column("severity", "Best severity"),
        Column("used", "Used in the plan", "kt", "quantity"),
        Column("worth", "Worth of one more tonne", per_tonne, "price"),
        Column("price", "Price", per_tonne, "price"),
        Column("buying", "Limits on buying", per_tonne, "price"),
        Column("gain", "Gain", per_tonne, "price"),
    )
    rows: list[Record] = [
        {"month": a.month, "source": a.source, "group": a.group, "severity": a.severity, "used": a.used}
        | {"worth": a.worth, "price": -a.sum_of(FEED, PRICE)}
        | {"buying": a.sum_of(OFFER, BUYING), "gain": a.total}
        for a in accounts
    ]
    note = "Gain = worth − price + limits on buying. Of a recycle the price is the worth of its cut."
    return Table("why_not_ways", "Best mode of each group", columns, rows, note)


def _lines_table(plan: Plan, accounts: list[Account]) -> Table:
    """All accounts, line by line, each with its sum."""
    columns = (
        Column("month", "Month"),
        Column("source", "Bought from"),
        Column("furnaces", "Furnace group"),
        Column("severity", "Severity"),
        Column("group", "Kind"),
        Column("item", "Item"),
        Column("amount", "Amount per t", kind="number"),
        Column("unit", "Unit"),
        Column("worth", "Price or worth per unit", kind="price"),
        Column("value", "Value", f"{plan.currency}/t", "price"),
    )
    rows: list[Record] = []
    for a in accounts:
        head = {"month": a.month, "source": a.source, "furnaces": a.group, "severity": a.severity}
        for term in a.lines:
            rows.append(head | {key: getattr(term, key) for key in ("group", "item", "amount", "unit", "worth", "value")})
        total = {"amount": None, "unit": "", "worth": None, "value": a.total}
        rows.append(head | {"group": "total", "item": "gain per tonne"} | total)
    note = "Products count plus, what is taken minus. Products stand at what they are worth in their cuts."
    return Table("why_not_account", "Account of one more tonne", columns, rows, note)


def _components_table(plan: Plan, accounts: list[Account]) -> Table:
    """The yields at their net worths: the shadow prices of the component balances."""
    per_tonne = f"{plan.currency}/t"
    columns = (
        Column("month", "Month"),
        Column("source", "Bought from"),
        Column("furnaces", "Furnace group"),
        Column("severity", "Severity"),
        Column("component", "Component"),
        Column("amount", "Made per t", "t", "number"),
        Column("made", "Worth in its cuts", per_tonne, "price"),
        Column("taken", "Less units, energy and ratios on its way", per_tonne, "price"),
        Column("net", "Worth", per_tonne, "price"),
        Column("value", "Value per t charged", per_tonne, "price"),
    )
    rows: list[Record] = []
    for a in accounts:
        head = {"month": a.month, "source": a.source, "furnaces": a.group, "severity": a.severity}
        for component, amount in a.components.items():
            worth = a.worths[component]
            if amount:
                worth_record = {"made": worth.made, "taken": worth.net - worth.made, "net": worth.net}
                rows.append(head | {"component": component, "amount": amount, "value": amount * worth.net} | worth_record)
    return Table("why_not_components", "Yields at today's worths", columns, rows)


# ---------------------------------------------------------------------------------- sentences


def _mode_words(mode: str) -> str:
    group, feed, severity = mode.split(".")
    return f"{feed} in {group} at {severity} severity"


def _mode_sentence(plan: Plan, best: Account | None, mode: str, month: str) -> str:
    head, charged = f"{month}: {_mode_words(mode)}", plan.quantities.charged(mode, month)
    nothing = _nothing_of(plan, mode.split(".")[1], month)
    if charged:
        return f"{head} is used: {amount_words(charged)} kt are charged."
    if best is None or nothing:
        return f"{head} cannot be used: {nothing or 'its feed is not on offer'}."
    if _even(best):
        return f"{head} is not used, but could be at the same margin."
    loss = f"{-best.total:,.1f}" if best.total <= -0.1 else f"{-best.total:.2g}"
    return f"{head} would lose {loss} {plan.currency}/t: {_items(best)}."


def _nothing_of(plan: Plan, feed: str, month: str) -> str:
    """Why a recycle cannot be charged at all; empty for other feeds."""
    cut = plan.scenario.plant.recycle_feeds().get(feed)
    if cut is None or plan.quantities.value("cut_made", cut, month):
        return ""
    return f"no {cut} is made"


def _even(account: Account) -> bool:
    """Whether a tonne more or less leaves the margin as it is."""
    return abs(account.total) <= 1e-7 * math.fsum(abs(line.value) for line in account.lines)


def _items(a: Account) -> str:
    """The products, the feed and the three largest things taken."""
    sums: dict[str, float] = {}
    for line in a.lines:
        words = f"{line.item} load" if line.group == UNITS else line.item if line.group in NAMED else line.group
        if line.group not in (PRODUCTS, FEED, PRICE):
            sums[words] = sums.get(words, 0.0) + line.value
    largest = sorted((pair for pair in sums.items() if pair[1] < 0), key=lambda pair: pair[1])[:3]
    feed = "the feed costs" if a.source else "the feed is worth"
    text = f"its products are worth {a.sum_of(PRODUCTS):,.1f}, {feed} {-a.sum_of(FEED, PRICE):,.1f}"
    taken = [f"{-value:,.1f} of {words}" for words, value in largest]
    return text + (f" and it takes {', '.join(taken)}" if taken else "")


def _feed_sentence(plan: Plan, ways: list[Account], name: str, month: str) -> str:
    head, best = f"{month}: {name.replace('.', ' ')}", _best(ways)
    if best is None:
        return f"{head} cannot be used: no furnace can crack it."
    where = f"best in {best.group} at {best.severity} severity" if best.group else "in the recovery train"
    if not best.source:
        nothing = _nothing_of(plan, name, month)
        used = sum(plan.quantities.charged(mode, month) for mode, feed in plan.quantities.case.mode_feed.items() if feed == name)
        if used or nothing:
            return f"{head} is used: {amount_words(used)} kt are charged." if used else f"{head} cannot be used: {nothing}."
        return f"{head} is not used; {where}, where {_items(best)}."
    return _source_sentence(plan, best, head, where)


def _source_sentence(plan: Plan, best: Account, head: str, where: str) -> str:
    q, source, month = plan.quantities, best.source, best.month
    worth = worth_at_gate(q, source, next_step(plan, source, month), month)
    tank = f" in the tank ({best.worth:,.1f} if it is cracked this month)" if worth - best.worth > 0.05 else ""
    against = f"worth {worth:,.1f} {plan.currency}/t{tank} against a price of {-best.sum_of(PRICE):,.1f}"
    bought = q.bought(source, month)
    if bought:
        return f"{head} is used: {amount_words(bought)} kt are bought; one more tonne is {against}."
    even = ", so it could be bought at the same margin" if _even(best) else ""
    return f"{head} is not bought: its first tonne is {against}{even}; {where}, where {_items(best)}."
