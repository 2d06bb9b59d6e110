"""One tonne followed through the definitions of the plan, and what each unit of it meets on the way."""

from __future__ import annotations

import functools
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from olefinlp.answers.quantities import Quantities
from olefinlp.inputs.case import PER_THOUSAND, Case
from olefinlp.inputs.ratios import utility_amount
from olefinlp.lp.compile import Floats, Label

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan


PRODUCTS, FEED, FIRING, UTILITIES, EMISSIONS = "products", "feed", "firing", "utilities", "emissions"
FURNACES, CREWS, UNITS, LIMITS, VARIABLE = "furnace hours", "decoke crew", "recovery units", "limits", "variable costs"
PRICE, OFFER, BUYING, GATE = "price", "terms of the offer", "limits on buying", "worth at the gate"
GROUPS = (PRODUCTS, FEED, PRICE, OFFER, BUYING, FIRING, UTILITIES, EMISSIONS, FURNACES, CREWS, UNITS, LIMITS, VARIABLE)
DEFINITIONS = {"component_balance": "component_made", "cut_balance": "cut_made", "unit_load_balance": "unit_load"}
AT_THE_GATE = (FEED, PRICE, OFFER, BUYING)
NAMED = (LIMITS, UTILITIES, OFFER, BUYING)
EXACT = 1e-9
PER = {"mass": "t", "heat": "GJ LHV", "power": "MWh"}
_CAUSES = {"component_made": " of products", "cut_made": " of products", "unit_load": " of recovery units"}
_LIMIT_GROUPS = {
    "decoke_crew_hours_limit": CREWS,
    "unit_load_limit": UNITS,
    "purchase_limit": OFFER,
    "take_or_pay_limit": OFFER,
}


@dataclass(frozen=True, slots=True)
class Term:
    """One line of an account: what is taken (or, of products, made) of something, and its value.

    Per t followed; value = amount × worth for products, − amount × worth for what is taken.
    """

    group: str
    item: str
    amount: float
    unit: str
    worth: float
    value: float


class Share(Quantities):
    """Quantities of a part of a plan, read to the last digit: nothing of it is rounding."""

    @functools.cached_property
    def size(self) -> float:
        """No flow is too small to be read."""
        return 0.0


def part_of(plan: Plan, x: Floats) -> Share:
    """The quantities of other values of the plan's variables."""
    return Share(plan.quantities.case, plan.lp, replace(plan.solution, x=x))


def follow(plan: Plan, given: Mapping[Label, float], month: str) -> Floats:
    """Variables with these values and the components, cuts and unit loads that follow from them."""
    lp, x = plan.lp, np.zeros(len(plan.lp.columns))
    for label, moved in given.items():
        x[lp.column_at[label]] += moved
    case = plan.quantities.case
    for family, names in (("component_balance", case.components), ("cut_balance", case.cuts), ("unit_load_balance", case.units)):
        for name in names:
            row, column = lp.row_at[family, name, month], lp.column_at[DEFINITIONS[family], name, month]
            entries = slice(lp.starts[row], lp.starts[row + 1])
            index, value = lp.index[entries], lp.value[entries]
            others = index != column
            x[column] -= float(value[others] @ x[index[others]]) / float(value[~others][0])
    return x


def terms(plan: Plan, given: Mapping[Label, float], month: str) -> list[Term]:
    """The account of given charges, purchases or components with all that follows; products by cut."""
    x = follow(plan, given, month)
    found: dict[tuple[str, str], Term] = {}
    met = (term for term in (*_from_rows(plan, x), *_from_money(plan, x, month)) if term.amount)
    for term in met:
        before = found.get((term.group, term.item))
        if before is not None:
            term = replace(before, amount=before.amount + term.amount, value=before.value + term.value)
        found[term.group, term.item] = term
    there = [term for term in found.values() if term.value or abs(term.amount) > EXACT]
    return sorted(there, key=lambda term: GROUPS.index(term.group))


@dataclass(frozen=True, slots=True)
class _Entry:
    """One number of the matrix that is met: what is moved in a column takes `taken` of a row."""

    row: Label
    column: Label
    moved: float
    taken: float
    y: float

    def term(self, group: str, item: str, unit: str, taken: float | None = None) -> Term:
        """A line of the account for all or for a part of it."""
        amount = self.taken if taken is None else taken
        return Term(group, item, amount, unit, self.y, -self.y * amount)


def _from_rows(plan: Plan, x: Floats) -> Iterator[Term]:
    """What every row with a shadow price takes or gives, entry by entry."""
    lp, y = plan.lp, plan.solution.row_dual
    row_of = np.repeat(np.arange(len(lp.rows)), np.diff(lp.starts))
    for at in np.flatnonzero((x[lp.index] != 0) & (y[row_of] != 0)).tolist():
        row, column = int(row_of[at]), int(lp.index[at])
        if lp.rows[row][0] not in DEFINITIONS:
            moved = float(x[column])
            entry = _Entry(lp.rows[row], lp.columns[column], moved, moved * float(lp.value[at]), float(y[row]))
            yield from _of_entry(plan.quantities, entry)


def _of_entry(q: Quantities, entry: _Entry) -> Iterator[Term]:
    family, name = entry.row[:2]
    if family in ("cut_disposal", "heat_disposal"):
        if entry.column[0] == "charge":
            yield entry.term(FEED, name, "t")
        else:
            made = entry.term(PRODUCTS, name, PER["heat" if family == "heat_disposal" else "mass"])
            yield replace(made, amount=-made.amount)
    elif family == "feed_balance":
        yield entry.term(FEED, GATE, "t")
    elif family == "utility_balance":
        yield from _of_utility(q, entry)
    elif family == "furnace_hours_limit":
        decoking = entry.moved * q.case.decoke_hours_per_kt[entry.column[1]]
        for item, hours in (("on feed", entry.taken - decoking), ("decoking", decoking)):
            yield _in_written_unit(q, entry.row, entry.term(FURNACES, f"{name} {item}", "", hours))
    else:
        label = q.case.limits[(family.removesuffix("_limit"), *entry.row[1:])].label
        of_feed = entry.column[0] == "bought" and q.case.sources[entry.column[1]].kind == "feeds"
        group = _LIMIT_GROUPS.get(family, BUYING if of_feed else LIMITS)
        yield _in_written_unit(q, entry.row, entry.term(group, label, ""))


def _in_written_unit(q: Quantities, row: Label, term: Term) -> Term:
    """A limit's term in the unit in which people read its worth."""
    limit = q.case.limits[(row[0].removesuffix("_limit"), *row[1:])]
    return replace(term, amount=term.amount / limit.worth_scale, unit=limit.worth_unit, worth=term.worth * limit.worth_scale)


def _of_utility(q: Quantities, entry: _Entry) -> Iterator[Term]:
    """A use of a utility; of a charge the firing and the flared losses stand apart."""
    utility, plant = entry.row[1], q.case.scenario.plant
    unit = PER[plant.file.utilities[utility].measured_in]
    group = EMISSIONS if (utility, "emissions") in q.case.trades.values() else UTILITIES
    kind, rest = entry.column[0], entry.taken
    if kind == "charge":
        mode = next(mode for mode in plant.modes if mode.name == entry.column[1])
        if mode.fired_heat and plant.file.furnace_groups[mode.group].fired_with == utility:
            yield entry.term(FIRING, utility, unit, entry.moved * mode.fired_heat)
            rest -= entry.moved * mode.fired_heat
        lost = entry.moved * _of_losses(q, utility)
        if lost:
            yield entry.term(group, f"{utility} of losses", unit, lost)
            rest -= lost
    if abs(rest) > EXACT * abs(entry.taken):
        yield entry.term(group, f"{utility}{_CAUSES.get(kind, '')}", unit, rest)


def _of_losses(q: Quantities, utility: str) -> float:
    """What of a utility the losses of a tonne charged use (+) or make (−)."""
    plant = q.case.scenario.plant
    uses = [use for use in plant.utility_uses if use.utility == utility and use.of == "loss"]
    return q.case.loss * sum(use.sign * utility_amount(plant, utility, use.of, use.item, use.amount) for use in uses)


def _from_money(plan: Plan, x: Floats, month: str) -> Iterator[Term]:
    """Prices and variable costs that are met directly."""
    q, case = part_of(plan, x), plan.quantities.case
    for (cut, item), parts in case.content.items():
        yield _priced(case, PRODUCTS, cut, f"contents.{cut}.{item}", month, q.total(parts, month))
    for source, data in case.sources.items():
        for step in data.tiers:
            bought = q.value("bought", source, str(step), month)
            yield _priced(case, PRICE, source, case.purchase_item(source, step), month, bought)
    for cost in case.costs:
        yield _priced(case, VARIABLE, cost.name, cost.price_item, month, q.total(cost.parts, month))


def _priced(case: Case, group: str, item: str, price_item: str, month: str, quantity: float) -> Term:
    """A quantity per t at its price; pieces (decokes) are counted per thousand t."""
    price = case.prices[price_item, month]
    per = price.unit_used.partition("/")[2]
    amount = quantity if per else quantity * PER_THOUSAND
    sign = 1 if group == PRODUCTS else -1
    return Term(group, item, amount, per or "piece", price.value, sign * amount * price.value)
