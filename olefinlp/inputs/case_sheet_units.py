"""Units that a case sheet offers for a price or a limit: those that people use and that can be converted there."""

from __future__ import annotations

from collections.abc import Iterable

from olefinlp.inputs.case_supply import HOLDING
from olefinlp.inputs.measures import ANY, HEAT, MASS, POWER, Measure
from olefinlp.inputs.periods import Period
from olefinlp.inputs.prices import PriceItem
from olefinlp.inputs.scenario import Scenario
from olefinlp.inputs.units import Basis, Quantity, UnitError, convert, parse_unit

SHARE_UNITS = ("fraction", "%")
HOUR_UNITS = ("h", "d")
PRICE_UNITS = {
    "mass": ("{c}/t", "{c}/kg", "{cent}/lb", "{c}/lb", "{cent}/gal", "{c}/gal", "{c}/bbl", "{c}/m3"),
    "held": ("{c}/t/month", "{c}/t/d", "{c}/t"),
    "heat": ("{c}/GJ LHV", "{c}/GJ HHV", "{c}/MMBtu LHV", "{c}/MMBtu HHV", "{c}/MWh LHV", "{c}/MWh HHV"),
    "power": ("{c}/MWh", "{c}/kWh", "{cent}/kWh"),
    "each": ("{c}", "k{c}"),
}
"""What prices are written in, by what they are per; `{c}` is a currency and `{cent}` its hundredth."""

AMOUNT_UNITS = (
    *("kt", "t", "klb", "MMlb", "bbl", "kbbl", "m3", "t/d", "t/h", "kt/month", "bbl/d"),
    *("TJ LHV", "GJ LHV", "TJ HHV", "GJ HHV", "MMBtu LHV", "MMBtu HHV", "GJ/h LHV"),
    *("GWh", "MWh", "MW"),
)


def measure_of(item: PriceItem, unit_used: str) -> Measure:
    """What a price is per; for one that may be per anything (an index), what it is per in this scenario."""
    if item.measure is not ANY:
        return item.measure
    return next((known for known in (HEAT, POWER) if unit_used.endswith(f"/{known.unit}")), MASS)


def factor_of(scenario: Scenario, item: PriceItem, measure: Measure, unit: str, period: Period) -> float:
    """What one written unit of a price is in the unit used. Raises `UnitError` where it cannot be converted."""
    basis = scenario.basis(period, item.density, item.lhv_over_hhv)
    return convert(Quantity(1.0, parse_unit(unit), f"1 {unit}"), measure.per, basis, measure.energy)


def price_units(
    scenario: Scenario, item: PriceItem, measure: Measure, period: Period, written: Iterable[str]
) -> dict[str, float]:
    """Units in which a price can be written → what one of each is in the unit used; those written already come first."""
    currencies = [scenario.currency, *(code for code in scenario.rates if code != scenario.currency)]
    offered = [text.format(c=code, cent=cent_of(code)) for code in currencies for text in _family(measure)]
    found: dict[str, float] = {}
    for unit in (*written, *offered):
        if unit not in found and unit not in SHARE_UNITS:
            try:
                found[unit] = factor_of(scenario, item, measure, unit, period)
            except UnitError:
                continue  # not without a density, a heating value or a rate that nobody wrote
    return found


def amount_units(measure: Measure, basis: Basis, written: Iterable[str]) -> tuple[str, ...]:
    """Units in which an amount can be written, those written already first."""
    found = list(dict.fromkeys(written))
    for unit in AMOUNT_UNITS:
        try:
            convert(Quantity(1.0, parse_unit(unit), unit), measure.dimensions, basis, measure.energy)
        except UnitError:
            continue
        if unit not in found:
            found.append(unit)
    return tuple(found)


def cent_of(currency: str) -> str:
    """The hundredth of a currency, as prices write it.

    >>> cent_of("USD"), cent_of("EUR")
    ('USc', 'cEUR')
    """
    return "USc" if currency == "USD" else f"c{currency}"


def _family(measure: Measure) -> tuple[str, ...]:
    powers = dict(measure.dimensions)
    if not powers:
        return PRICE_UNITS["each"]
    if "energy" in powers:
        return PRICE_UNITS["power" if measure.energy == "power" else "heat"]
    if measure.unit in (MASS.unit, HOLDING.unit):
        return PRICE_UNITS["held" if measure == HOLDING else "mass"]
    return ("{c}/" + measure.unit,)  # load of a recovery unit, in whatever it is counted
