"""Prices that cannot be meant, or that would make money from nothing: looked at before the plan is made."""

from __future__ import annotations

import itertools
from collections.abc import Iterator, Mapping

from olefinlp.inputs.case import Case, CostLine
from olefinlp.inputs.findings import Findings
from olefinlp.inputs.periods import Period
from olefinlp.inputs.price_windows import price_window
from olefinlp.inputs.prices import Price, PriceItem, price_items_of
from olefinlp.inputs.units import Basis, Quantity, UnitError, convert, parse_unit

DISCOUNT = "a quantity discount needs whole-number decisions, which are not on"
PER_MASS = ("t", "lb", "gal", "bbl", "L", "m3")
PER_POWER = ("MWh", "kWh", "GWh")
PER_HEAT = ("GJ LHV", "GJ HHV", "MMBtu LHV", "MMBtu HHV")
SMALL = 1e-9


def check_prices(case: Case, findings: Findings) -> None:
    """All checks of prices."""
    check_plausible(case, findings)
    check_step_order(case, findings)
    check_through_the_gate(case, findings)
    check_negative_purchases(case, findings)
    check_negative_trades(case, findings)
    check_negative_costs(case, findings)
    check_negative_sales(case, findings)


def high_of(case: Case, *key: str) -> float | None:
    """The maximum of a limit; None where there is no limit."""
    limit = case.limits.get(key)
    return limit.high if limit else None


# ---------------------------------------------------------------------------------- plausible prices


def check_plausible(case: Case, findings: Findings) -> None:
    """A price outside its window is mostly one in a wrong unit, or on a wrong basis."""
    windows = case.scenario.plant.file.price_windows
    items = price_items_of(case.scenario)
    periods = {period.name: period for period in case.periods}
    keys = {name: window_key(name, windows) for name in items}
    for (name, month), price in case.prices.items():
        if keys[name]:
            _check_window(case, findings, keys[name], items[name], price, periods[month])


def window_key(item: str, windows: Mapping[str, str]) -> str:
    """The window of an item: of the longest key that it begins with. A deduction is no price of its kind.

    >>> window_key("outlets.raw_pygas.deduction", {"outlets": "1 to 2 USD/t", "outlets.raw_pygas": "0 to 1 USD/t"})
    'outlets.raw_pygas'
    >>> window_key("outlets.raw_pygas.deduction", {"outlets": "1 to 2 USD/t"})
    ''
    """
    keys = [key for key in windows if item == key or item.startswith(f"{key}.")]
    if item.endswith(".deduction"):
        keys = [key for key in keys if "." in key]
    return max(keys, key=len, default="")


def _check_window(case: Case, findings: Findings, key: str, item: PriceItem, price: Price, period: Period) -> None:
    plant = case.scenario.plant
    text = plant.file.price_windows[key]
    basis = case.scenario.basis(period, item.density, item.lhv_over_hhv)
    try:
        window = price_window(text)
        low, high = (_value(quantity, item, basis) for quantity in window)
    except UnitError as error:
        # A window of a whole kind is for those of its items that are counted so.
        if "." in key or "exchange_rates" in error.hint:
            message = f"could not be compared with the window {text} of the plant ({plant.place('price_windows', key)}): {error}"
            findings.warn(price.place, price.item, message, error.hint)
        return
    if low - SMALL <= price.value <= high + SMALL:
        return
    one = window[0].unit
    there = price.value / _value(Quantity(1.0, one, one.text), item, basis)
    same = price.unit == one.text and not price.of
    found = f"`{price.text}`" if same else f"`{price.text}` is {there:.5g} {one.text}"
    place, hint = plant.place("price_windows", key), _unit_hint(price, item, basis, low, high)
    findings.warn(price.place, price.item, f"{found}, outside the plausible {text} ({place})", hint)


def _value(quantity: Quantity, item: PriceItem, basis: Basis) -> float:
    return convert(quantity, item.measure.per, basis, item.measure.energy)


def _unit_hint(price: Price, item: PriceItem, basis: Basis, low: float, high: float) -> str:
    """Asks whether the same number in another unit was meant: one that would be inside the window."""
    if price.of:
        return f"it leans on {price.of}: is that right, and what is added to it?"
    for text in _other_units(price.unit):
        other = Quantity(price.number, parse_unit(text), f"{price.number:g} {text}")
        try:
            value = _value(other, item, basis)
        except UnitError:
            continue
        if low <= value <= high:
            return f"is the unit right? `{other}` would be {value:.5g} {price.unit_used}"
    return "are the number and its unit right?"


def _other_units(unit: str) -> Iterator[str]:
    """Units that a price may have been meant in: per another amount, in cents or whole money, as the trade quotes."""
    money, _, per = unit.partition("/")
    code = parse_unit(money).currency
    cents = "USc" if code == "USD" else f"c{code}"
    amounts = PER_HEAT if per.endswith(("LHV", "HHV")) else PER_POWER if per in PER_POWER else PER_MASS
    quoted = (f"{code}/t", f"{code}/bbl", f"{cents}/lb", f"{cents}/gal")
    texts = (*(f"{money}/{amount}" for amount in amounts), f"{code}/{per}", f"{cents}/{per}", *quoted)
    yield from (text for text in texts if text != unit)


# ---------------------------------------------------------------------------------- steps


def check_step_order(case: Case, findings: Findings) -> None:
    """Steps of a purchase grow dearer, those of a sale cheaper: a plan takes the best step first."""
    for label, source in case.sources.items():
        items = [case.purchase_item(label, tier) for tier in source.tiers]
        _check_steps(case, findings, items, 1.0, "less")
    for outlet, steps in case.sale_tiers.items():
        _check_steps(case, findings, [case.sale_item(outlet, tier) for tier in steps], -1.0, "more")


def _check_steps(case: Case, findings: Findings, items: list[str], sign: float, word: str) -> None:
    for month in case.months:
        for step, (before, after) in enumerate(itertools.pairwise(items), start=2):
            first, second = case.prices[before, month], case.prices[after, month]
            if sign * (second.value - first.value) < -SMALL:
                verb = "costs" if word == "less" else "pays"
                price = f"{second.value:.6g} {second.unit_used}"
                message = f"step {step} {verb} {price}, {word} than step {step - 1} with {first.value:.6g}"
                findings.error(second.place, second.item, message, DISCOUNT)


# ---------------------------------------------------------------------------------- money for nothing


def check_through_the_gate(case: Case, findings: Findings) -> None:
    """An export dearer than an import of the same utility earns by passing it through the plant."""
    exports = [(name, utility) for name, (utility, kind) in case.trades.items() if kind == "exports"]
    for out, utility in exports:
        for into, (same, kind) in case.trades.items():
            if same == utility and kind == "imports":
                _check_gate(case, findings, out, into)


def _check_gate(case: Case, findings: Findings, out: str, into: str) -> None:
    for month in case.months:
        sold, bought = case.prices[f"utilities.{out}", month], case.prices[f"utilities.{into}", month]
        if sold.value <= bought.value + SMALL:
            continue
        message = (
            f"{out} earns {sold.value:.5g} {sold.unit_used}, more than {into} costs with {bought.value:.5g} ({bought.place})"
        )
        if high_of(case, "trade", out, month) is None and high_of(case, "trade", into, month) is None:
            findings.error(
                sold.place, sold.item, f"{message}: money from nothing, without a limit", "write the `max:` of one of them"
            )
        else:
            findings.warn(sold.place, sold.item, f"{message}: the plan will buy to sell")


def check_negative_purchases(case: Case, findings: Findings) -> None:
    """What is paid for being taken needs an end."""
    for label, source in case.sources.items():
        for month in case.months:
            for tier in source.tiers:
                price = case.prices[case.purchase_item(label, tier), month]
                _check_negative(findings, price, "purchase", high_of(case, "purchase", label, month) is not None)


def check_negative_trades(case: Case, findings: Findings) -> None:
    """An import or emission that is paid for needs an end; an export below zero is worth a look."""
    for name, (_, kind) in case.trades.items():
        for month in case.months:
            price = case.prices[f"utilities.{name}", month]
            if kind == "exports":
                _check_sale(findings, price)
            else:
                _check_negative(findings, price, kind.removesuffix("s"), high_of(case, "trade", name, month) is not None)


def check_negative_costs(case: Case, findings: Findings) -> None:
    """A cost below zero pays for doing more: what it grows with needs an end."""
    for cost in case.costs:
        for month in case.months:
            _check_negative(findings, case.prices[cost.price_item, month], "cost", _is_limited(case, cost, month))
    for item in case.stocks:
        for month in case.months:
            _check_negative(findings, case.prices[f"stocks.{item}.holding", month], "cost", limited=True)


def _is_limited(case: Case, cost: CostLine, month: str) -> bool:
    """Whether what a cost grows with has a maximum: its own, or that of furnace hours."""
    groups = {case.mode_group[part.item[0]] for part in cost.parts if part.kind == "charge"}
    if cost.of == "cut":
        groups = set(case.mode_group.values())
    own = [part for part in cost.parts if part.kind in ("outlet", "unit_load", "conversion")]
    hours = all(high_of(case, "furnace_hours", group, month) is not None for group in groups)
    return hours and all(high_of(case, part.kind, part.item[0], month) is not None for part in own)


def _check_negative(findings: Findings, price: Price, what: str, limited: bool) -> None:
    if price.value >= -SMALL:
        return
    message = f"the {what} has a price below zero, {price.value:.5g} {price.unit_used}"
    if limited:
        findings.warn(price.place, price.item, f"{message}: the plan earns by it", "is the sign right?")
    else:
        findings.error(price.place, price.item, f"{message}, and no maximum", "write its maximum, or mend the sign")


def check_negative_sales(case: Case, findings: Findings) -> None:
    """A product that costs money to be rid of is possible, and rare. A deduction below zero adds to the content value."""
    for outlet, steps in case.sale_tiers.items():
        for month in case.months:
            for tier in steps:
                _check_sale(findings, case.prices[case.sale_item(outlet, tier), month])
    for cut, item in case.content:
        for month in case.months:
            _check_sale(findings, case.prices[f"contents.{cut}.{item}", month])


def _check_sale(findings: Findings, price: Price) -> None:
    if price.value >= -SMALL:
        return
    what = "a deduction below zero adds to the price" if price.item.endswith(".deduction") else "the sale costs money"
    findings.warn(price.place, price.item, f"{what}: {price.value:.5g} {price.unit_used}", "is the sign right?")
