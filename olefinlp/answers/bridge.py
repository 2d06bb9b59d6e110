"""Why the margin of one plan is not that of another: prices on the old plan, re-optimising, other limits.

With z(p, b) the best margin at prices p and limits and all other data b, and x0 the best plan at (p0, b0):

    z(p0, b0) + (p1 − p0)·x0 + [z(p1, b0) − p1·x0] + [z(p1, b1) − z(p1, b0)] = z(p1, b1)

The first bracket is never negative, for x0 is still allowed. The other order changes the limits first; both are
exact, and share the same change out differently. Every number comes from where it is proven: both margins from
their plans, the one between from a solve of its own, p·x0 from the cost vector, the effects from the money lines.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING

import numpy as np

from olefinlp.answers.answer import Answer
from olefinlp.answers.money import SHORTFALL, MoneyLine, money_lines
from olefinlp.answers.quantities import Quantities
from olefinlp.answers.room import decisions
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.inputs.case import Case
from olefinlp.lp.compile import Floats, Label
from olefinlp.lp.neighbours import NeighbourError, Optimum

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan

PRICES_FIRST, LIMITS_FIRST = "prices first", "limits first"
ORDERS = (PRICES_FIRST, LIMITS_FIRST)
OLD, PRICE, OTHER, GAIN, LIMITS, NEW, RESIDUAL = "old", "price", "other prices", "gain", "limits", "new", "residual"
"""Kinds of steps."""

AGREES, NOTHING = 1e-6, 1e-9
"""Shares of the money that moves: how far sums may miss, and below which an effect is rounding of none."""
NAMED, LEAST_SHARE = 10, 0.01
"""Prices with a step of their own: how many at most, and the part that each has at least in all that prices move."""
MATERIAL = 1e-3
"""Changes of a decision below this share of the largest of its kind are not listed."""
LARGEST = 3
"""How many prices a sentence names."""

Key = tuple[str, str]
"""Price item and month, the month as the plan calls it that the quantities are of."""


@dataclass(frozen=True, slots=True)
class PriceEffect:
    """What one price changes on a plan that stays: thousands of the currency.

    `quantity` is positive where the price is received and negative where it is paid, in units of
    the plan (pieces in thousands); a shortfall that is paid for counts with its share of the price.
    """

    item: str
    month: str
    quantity: float
    unit: str
    before: float
    after: float
    price_unit: str

    @property
    def effect(self) -> float:
        """quantity × change of the price."""
        return self.quantity * (self.after - self.before) + 0.0


@dataclass(frozen=True, slots=True)
class BridgeStep:
    """One step: its kind, its words, its effect (None for a margin), the margin after it (None for the residual)."""

    kind: str
    words: str
    effect: float | None
    margin: float | None


@dataclass(frozen=True)
class Bridge:
    """The numbers of a bridge, thousands of the currency.

    `middle` is the best margin at one plan's prices and the other's limits, `repriced` what the plan
    that stays earns at the new prices. `highest` is the price effect on the new plan, known to be a
    bound only where nothing but prices differs (`same_limits`), else None.
    """

    first: Plan = field(repr=False)
    second: Plan = field(repr=False)
    names: tuple[str, str]
    order: str
    same_limits: bool
    effects: tuple[PriceEffect, ...]
    old: float
    repriced: float
    middle: float
    new: float
    moved: float
    highest: float | None
    alone: tuple[tuple[str, ...], tuple[str, ...]] = ((), ())
    """Price items that only the first and only the second plan has."""

    @property
    def currency(self) -> str:
        """ISO code of the money."""
        return self.first.currency

    @property
    def limits_first(self) -> bool:
        """Whether limits and other data change before prices do."""
        return self.order == LIMITS_FIRST

    @property
    def price_effect(self) -> float:
        """What the prices change on the plan that stays."""
        return math.fsum(effect.effect for effect in self.effects)

    @property
    def gain(self) -> float:
        """What re-optimising adds at the new prices; never negative."""
        return (self.new if self.limits_first else self.middle) - self.repriced

    @property
    def limits_effect(self) -> float:
        """What other limits and other data change."""
        return self.middle - self.old if self.limits_first else self.new - self.middle

    @property
    def residual(self) -> float:
        """What no step explains: zero but for rounding."""
        return self.new - math.fsum((self.old, self.price_effect, self.gain, self.limits_effect)) + 0.0

    @property
    def items(self) -> dict[str, float]:
        """Price item → effect over all months, the largest first."""
        sums: dict[str, list[float]] = {}
        for effect in self.effects:
            sums.setdefault(effect.item, []).append(effect.effect)
        return dict(sorted(((item, math.fsum(parts)) for item, parts in sums.items()), key=lambda pair: (-abs(pair[1]), pair[0])))

    @property
    def named(self) -> dict[str, float]:
        """The prices that have a step of their own."""
        items = self.items
        least = max(LEAST_SHARE * math.fsum(map(abs, items.values())), NOTHING * self.moved)
        return dict([pair for pair in items.items() if abs(pair[1]) >= least][:NAMED])

    @property
    def title(self) -> str:
        """What the bridge leads from and to."""
        return f"Margin bridge from {self.names[0]} to {self.names[1]}"

    @property
    def headline(self) -> str:
        """The change in one line."""
        change = self.new - self.old
        more = f"{_figures(self)(abs(change))} k{self.currency} {'less' if change < 0 else 'more'}"
        return f"{self.names[1]} earns {more} than {self.names[0]}"

    @property
    def message(self) -> str:
        """The change and its parts in one line."""
        say = _figures(self)
        parts = [f"prices {_signed(self.price_effect, say)}", f"re-optimising {_signed(self.gain, say)}"]
        if not self.same_limits:
            parts.insert(0 if self.limits_first else 2, f"limits and other data {_signed(self.limits_effect, say)}")
        return f"{self.headline}: {', '.join(parts)}"

    def steps(self) -> tuple[BridgeStep, ...]:
        """The steps in order, each margin the sum of the effects so far."""
        rows = [(PRICE, item, value) for item, value in self.named.items()]
        others = {item: value for item, value in self.items.items() if item not in self.named}
        if others or not rows:
            rows.append((OTHER, _other_words(others, bool(rows)), math.fsum(others.values())))
        rows.append((GAIN, "gain from re-optimising", self.gain))
        if not self.same_limits:
            rows.insert(0 if self.limits_first else len(rows), (LIMITS, "changed limits and other data", self.limits_effect))
        steps, level = [BridgeStep(OLD, f"margin: {self.names[0]}", None, self.old)], self.old
        for kind, words, effect in rows:
            level += effect
            steps.append(BridgeStep(kind, words, effect + 0.0, level))
        steps.append(BridgeStep(NEW, f"margin: {self.names[1]}", None, level))
        return (*steps, BridgeStep(RESIDUAL, RESIDUAL, self.residual, None))


@dataclass(frozen=True)
class BridgeAnswer(Answer):
    """The answer of a bridge, with its numbers."""

    bridge: Bridge | None = None


def bridge(a: Plan, b: Plan, *, order: str = PRICES_FIRST, names: tuple[str, str] | None = None) -> BridgeAnswer:
    """The exact steps from the margin of plan `a` to that of plan `b`, one solve.

    Tables: `bridge` (steps in thousands of the currency), `price_effects` (every price item and
    month: signed quantity × change of the effective price), `changes` (what is bought, charged and
    sold differently). `order` is "prices first" or "limits first". Months are matched by position.

    Raises `ValueError` for another order, other currencies, another number of months, no price item
    in common, or a margin that has no end between the two; `ArithmeticError` when the steps miss the
    margin of `b` by more than 1e-6 of the money that moves; `CertificateError` from the solve.

    >>> from olefinlp import make_plan, read_scenario
    >>> march = read_scenario("scenarios/brackwater_2031_03.yaml")
    >>> print(bridge(make_plan(march), make_plan(march.with_(price_case="Strong propylene"))).sentences[0])
    Base 26,808.7 + 3,202.4 by prices on the old plan + 124.4 by re-optimising = Strong propylene 30,135.5 kUSD.
    """
    found = bridge_of(a, b, order, names)
    tables = (_steps_table(found), effects_table(found), changes_table(found))
    return BridgeAnswer("bridge", found.title, tables, sentences(found), note(found), None, found)


def bridge_of(a: Plan, b: Plan, order: str = PRICES_FIRST, names: tuple[str, str] | None = None) -> Bridge:
    """The numbers of a bridge, proven; errors as of `bridge`."""
    _refuse(a, b, order)
    names = names or _names(a, b)
    same = _same_program(a, b)
    moved = max(sum(abs(line.amount) for line in plan.lines) for plan in (a, b)) or 1.0
    ends = (a.solution.objective, b.solution.objective)
    months = _month_words(a, b)
    if order == PRICES_FIRST:
        rates = _rates(a, b)
        cost = _cost(a, rates)
        middle = _solved(a, cost, names[1], names[0])
        repriced = float(cost @ a.solution.x) + a.lp.offset
        effects = _effects(a, a.lines, _own(a), rates, months[0])
    else:
        rates = _rates(b, a)
        middle = _solved(b, _cost(b, rates), names[0], names[1])
        repriced = float(b.lp.cost @ middle.x) + b.lp.offset
        lines = tuple(money_lines(Quantities(b.quantities.case, b.lp, replace(b.solution, x=middle.x))))
        effects = _effects(b, lines, rates, _own(b), months[1])
    highest = sum(effect.effect for effect in _effects(b, b.lines, _rates(b, a), _own(b), months[1])) if same else None
    found = Bridge(a, b, names, order, same, effects, ends[0], repriced, middle.objective, ends[1], moved, highest, _alone(a, b))
    return _proven(found)


def _refuse(a: Plan, b: Plan, order: str) -> None:
    if order not in ORDERS:
        raise ValueError(f"`{order}` is no order of the steps; there are: {', '.join(ORDERS)}")
    if a.currency != b.currency:
        raise ValueError(f"one plan is in {a.currency}, the other in {b.currency}: a bridge needs one money")
    months = [len(plan.quantities.case.months) for plan in (a, b)]
    if months[0] != months[1]:
        raise ValueError(f"one plan has {months[0]} months, the other {months[1]}: a bridge needs as many in both")
    if not _items(a) & _items(b):
        raise ValueError("the two plans have no price item in common")


def _items(plan: Plan) -> set[str]:
    """Price items that enter the margin of a plan."""
    return {line.price_item for line in plan.lines if line.price_item}


def _alone(a: Plan, b: Plan) -> tuple[tuple[str, ...], tuple[str, ...]]:
    """Items that only one plan prices, or that both price per different units."""
    first, second = a.quantities.case, b.quantities.case
    return tuple(sorted(_items(a) - _shared(first, second))), tuple(sorted(_items(b) - _shared(second, first)))


def _shared(own: Case, other: Case) -> set[str]:
    """Items with a price of the same unit in both cases."""
    month, there = own.months[0], other.months[0]
    shared = {item for item, when in own.prices if when == month and (item, there) in other.prices}
    return {item for item in shared if own.prices[item, month].unit_used == other.prices[item, there].unit_used}


def _names(a: Plan, b: Plan) -> tuple[str, str]:
    """What tells the two plans apart: their price cases, else their titles, else their order."""
    cases, titles = ((a.scenario.price_case, b.scenario.price_case), (a.scenario.title, b.scenario.title))
    if all(cases) and cases[0] != cases[1]:
        return cases
    return titles if titles[0] != titles[1] else ("first", "second")


def _month_words(a: Plan, b: Plan) -> tuple[dict[str, str], dict[str, str]]:
    """Month of the first, and of the second plan → how both are called together."""
    pairs = list(zip(a.quantities.case.months, b.quantities.case.months, strict=True))
    words = [first if first == second else f"{first} → {second}" for first, second in pairs]
    first, second = ({pair[side]: word for pair, word in zip(pairs, words, strict=True)} for side in (0, 1))
    return first, second


def _own(plan: Plan) -> dict[Key, float]:
    """The plan's own effective prices."""
    return {key: price.value for key, price in plan.quantities.case.prices.items()}


def _rates(own: Plan, other: Plan) -> dict[Key, float]:
    """The other plan's prices under the items and months of this one; its own where the other has none."""
    here, there = own.quantities.case, other.quantities.case
    shared, month_of = _shared(here, there), dict(zip(here.months, there.months, strict=True))
    return {
        (item, month): there.prices[item, month_of[month]].value if item in shared else price.value
        for (item, month), price in here.prices.items()
    }


def _cost(plan: Plan, prices: dict[Key, float]) -> Floats:
    """The plan's cost vector at other effective prices."""
    case, cost = plan.quantities.case, plan.lp.cost.copy()
    for key, (columns, coefficients) in plan.price_map.items():
        price = case.prices[key]
        change = (prices[key] - price.value) * case.per_unit(*key)
        if change:
            np.add.at(cost, columns, change * coefficients)
    return cost


def _solved(plan: Plan, cost: Floats, prices: str, limits: str) -> Optimum:
    """The proven optimum of a plan's program at other prices."""
    try:
        found = plan.neighbours.solve(cost=cost)
    except NeighbourError as error:
        text = f"at the prices of {prices} and the limits of {limits} the margin has no end: no bridge leads across ({error})"
        raise ValueError(text) from error
    if found is None:
        raise ValueError(f"at the prices of {prices} no plan is found within the limits of {limits}, although prices forbid none")
    return found


def _effects(
    plan: Plan,
    lines: tuple[MoneyLine, ...],
    before: dict[Key, float],
    after: dict[Key, float],
    months: dict[str, str],
) -> tuple[PriceEffect, ...]:
    """Effect of every price on the quantities of some money lines; items by size, their months in order."""
    sums: dict[Key, list[float]] = {}
    units: dict[Key, str] = {}
    for line in lines:
        if line.price_item:
            key = (line.price_item, line.month)
            sums.setdefault(key, []).append(line.sign * line.quantity * line.factor)
            units[key] = "thousand pieces" if line.quantity_unit == "pieces" else line.quantity_unit
    case = plan.quantities.case
    effects = [
        PriceEffect(item, month, math.fsum(parts) + 0.0, units[key], before[key], after[key], case.prices[key].unit_used)
        for key, parts in sums.items()
        for item, month in (key,)
    ]
    sizes: dict[str, float] = {}
    for effect in effects:
        sizes[effect.item] = sizes.get(effect.item, 0.0) + effect.effect
    effects.sort(key=lambda e: (-abs(sizes[e.item]), e.item, case.months.index(e.month)))
    return tuple(replace(effect, month=months[effect.month]) for effect in effects)


def _same_program(a: Plan, b: Plan) -> bool:
    """Whether nothing but prices differs: all rows, columns and bounds are the same, and at the same prices all costs."""
    months = dict(zip(b.quantities.case.months, a.quantities.case.months, strict=True))

    def here(labels: tuple[Label, ...]) -> tuple[Label, ...]:
        return tuple(tuple(months.get(part, part) for part in label) for label in labels)

    if a.lp.rows != here(b.lp.rows) or a.lp.columns != here(b.lp.columns) or a.lp.offset != b.lp.offset:
        return False
    parts = ("starts", "index", "value", "row_low", "row_high", "low", "high")
    if not all(np.array_equal(getattr(a.lp, part), getattr(b.lp, part)) for part in parts):
        return False
    there = _cost(a, _rates(a, b))
    return bool(np.abs(there - b.lp.cost).max(initial=0.0) <= NOTHING * np.abs(b.lp.cost).max(initial=0.0))


def _proven(found: Bridge) -> Bridge:
    """The bridge once its steps are checked against each other, rounding of none put to none."""
    limit, rounding = AGREES * found.moved, NOTHING * found.moved
    end = found.old if found.limits_first else found.new
    if found.same_limits:
        if abs(found.middle - end) > limit:
            raise ArithmeticError(f"the same program at the same prices earns {found.middle:g} and {end:g}")
        found = replace(found, middle=end)
    elif abs(found.limits_effect) <= rounding:
        found = replace(found, middle=end)
    if found.gain < -limit:
        raise ArithmeticError(f"re-optimising loses {-found.gain:g} against a plan that is still allowed")
    if abs(found.gain) <= rounding:
        found = replace(found, repriced=found.new if found.limits_first else found.middle)
    if abs(found.residual) > limit:
        raise ArithmeticError(f"the steps of the bridge miss the margin by {found.residual:g}")
    change = found.new - found.old
    if found.highest is not None and not found.price_effect - limit <= change <= found.highest + limit:
        raise ArithmeticError(f"the change {change:g} is not between {found.price_effect:g} and {found.highest:g}")
    return found


def _other_words(others: dict[str, float], some_named: bool) -> str:
    """Words of the step of all prices that have none of their own."""
    start = "other prices" if some_named else "prices"
    count = sum(value != 0 for value in others.values())
    return f"{start} ({count} item{'s' if count > 1 else ''})" if count else f"{start} (none moves the margin)"


# ---------------------------------------------------------------------------------- tables


def _steps_table(found: Bridge) -> Table:
    money = f"k{found.currency}"
    columns = (
        Column("step", "Step"),
        Column("effect", "Effect", money, "money"),
        Column("margin", "Margin after it", money, "money"),
    )
    rows: list[Record] = [{"step": step.words, "effect": step.effect, "margin": step.margin} for step in found.steps()]
    return Table("bridge", "Bridge", columns, rows, f"Margin before fixed cost; {found.order}")


def effects_table(found: Bridge) -> Table:
    """Every price item and month: signed quantity of the plan that stays, both prices, the effect."""
    columns = (
        Column("item", "Price item"),
        Column("month", "Month"),
        Column("quantity", "Quantity, sold +, bought −", kind="quantity"),
        Column("unit", "Unit"),
        Column("before", f"Price: {found.names[0]}", kind="price"),
        Column("after", f"Price: {found.names[1]}", kind="price"),
        Column("price_unit", "Price unit"),
        Column("effect", "Effect", f"k{found.currency}", "money"),
    )
    rows: list[Record] = [{column.key: getattr(effect, column.key) for column in columns} for effect in found.effects]
    text = f"Effect = quantity × change of the price, on the plan {_kept(found)}"
    if any(line.group == SHORTFALL and line.quantity for plan in (found.first, found.second) for line in plan.lines):
        text += "; what is paid for and not taken counts with the share of the price that it pays"
    return Table("price_effects", "Price effects", columns, rows, text)


def _kept(found: Bridge) -> str:
    """Which plan the prices are changed on."""
    first, second = found.names
    both = found.limits_first and not found.same_limits
    return f"at the prices of {first} and the limits of {second}" if both else f"of {first}"


def changes_table(found: Bridge) -> Table:
    """Purchases, charges and sales that differ between the two plans, each kind by size."""
    columns = (
        Column("month", "Month"),
        Column("kind", "Kind"),
        Column("item", "Decision"),
        Column("before", found.names[0], kind="quantity"),
        Column("after", found.names[1], kind="quantity"),
        Column("change", "Change", kind="quantity"),
        Column("unit", "Unit"),
    )
    return Table("changes", "What changed", columns, _changes(found), f"Changes below {MATERIAL:.1%} of the largest are left out")


def _changes(found: Bridge) -> list[Record]:
    words = _month_words(found.first, found.second)
    months = list(words[0].values())
    pairs: dict[tuple[str, str, str, str], list[float]] = {}
    for side, plan in enumerate((found.first, found.second)):
        for one in decisions(plan):
            pairs.setdefault((one.kind, one.item, words[side][one.month], one.unit), [0.0, 0.0])[side] = one.planned
    sizes: dict[tuple[str, str], float] = {}
    for (kind, _, _, unit), values in pairs.items():
        sizes[kind, unit] = max(sizes.get((kind, unit), 0.0), *map(abs, values))
    rows: list[Record] = [
        {"month": month, "kind": kind, "item": item, "before": old, "after": new, "change": new - old, "unit": unit}
        for (kind, item, month, unit), (old, new) in pairs.items()
        if abs(new - old) > MATERIAL * sizes[kind, unit]
    ]
    order = {kind: number for number, kind in enumerate(("bought", "charged", "sold"))}
    return sorted(rows, key=lambda row: (months.index(row["month"]), order[row["kind"]], -abs(row["change"])))


# ---------------------------------------------------------------------------------- words


class _Say:
    """Amounts with as many decimals as the size of the margin asks for."""

    def __init__(self, size: float) -> None:
        self.decimals = decimals(size)

    def __call__(self, value: float) -> str:
        text = f"{value:,.{self.decimals}f}"
        return text.removeprefix("-") if not text.strip("-0.,") else text.replace("-", "−")


def decimals(size: float) -> int:
    """Decimals that show five figures of a number, one at least.

    >>> decimals(26808.7), decimals(3.684), decimals(0.0)
    (1, 4, 1)
    """
    return min(max(1, 4 - math.floor(math.log10(size))), 6) if size > 0 else 1


def _figures(found: Bridge) -> _Say:
    return _Say(max(abs(found.old), abs(found.new)))


def _signed(value: float, say: _Say) -> str:
    return f"{'−' if say(value).startswith('−') else '+'} {say(abs(value))}"


def sentences(found: Bridge) -> tuple[str, ...]:
    """A bridge in words, the sum first."""
    say = _figures(found)
    texts = [_main_sentence(found, say)]
    largest = [f"{item} {_signed(value, say)}" for item, value in list(found.named.items())[:LARGEST]]
    if largest:
        texts.append(f"Largest price effects: {', '.join(largest)} k{found.currency}.")
    if not any(effect.before != effect.after for effect in found.effects):
        texts.append("No price differs.")
    elif found.gain <= NOTHING * found.moved:
        texts.append("Re-optimising adds nothing: the old plan stays the best at the new prices.")
    if found.same_limits:
        ends = [_signed(value, say) for value in (found.new - found.old, found.price_effect, found.highest or 0.0)]
        text = f"No limits changed. The change, {ends[0]}, lies between the price effect on the old plan, {ends[1]},"
        texts.append(f"{text} and that on the new plan, {ends[2]}.")
    elif not found.limits_effect:
        texts.append("Limits or other data differ, but that moves no margin here.")
    fixed = [plan.fixed_cost() / 1000 for plan in (found.first, found.second)]
    if abs(fixed[1] - fixed[0]) > NOTHING * found.moved:
        texts.append(f"Fixed cost is no part of it: {say(fixed[0])} and {say(fixed[1])} k{found.currency}.")
    return tuple(texts)


def _main_sentence(found: Bridge, say: _Say) -> str:
    where = "the plan within the new limits" if found.limits_first and not found.same_limits else "the old plan"
    parts = [f"{_signed(found.price_effect, say)} by prices on {where}", f"{_signed(found.gain, say)} by re-optimising"]
    if not found.same_limits:
        limits = f"{_signed(found.limits_effect, say)} by changed limits and other data"
        parts.insert(0 if found.limits_first else 2, limits)
    ends = f"{found.names[0]} {say(found.old)} ", f" = {found.names[1]} {say(found.new)} k{found.currency}."
    return ends[0] + " ".join(parts) + ends[1]


def note(found: Bridge) -> str:
    """How to read a bridge, and what it leaves out."""
    texts = ["The gain from re-optimising belongs to no single price. Where another plan earns as much, its effects are its own."]
    if not found.same_limits:
        other = ORDERS[1 - ORDERS.index(found.order)]
        texts.append(f"The order is {found.order}; {other} shares the same change out differently.")
    for name, items in zip(found.names, found.alone, strict=True):
        if items:
            texts.append(f"Priced in {name} only, or per another unit, so without a price effect: {', '.join(items)}.")
    return " ".join(texts)
