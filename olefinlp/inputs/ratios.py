"""What things are counted in, and coefficients per unit of them in base units.

A coefficient (steam per tonne, load per tonne, CO2 per GJ) is written in any units of the list;
here it becomes base units of the one per base unit of the other.
"""

from __future__ import annotations

from olefinlp.inputs.measures import HEAT, MASS, MEASURES, Measure
from olefinlp.inputs.plant import Plant, RecoveryUnit
from olefinlp.inputs.units import NO_BASIS, Basis, Quantity, UnitError, convert, dims, parse_unit

_GJ_PER_MWH = 3.6


def cut_measure(plant: Plant, cut: str) -> Measure:
    """What the outlets of a cut are counted in."""
    return HEAT if plant.file.cuts[cut].balanced_as == "heat" else MASS


def outlet_measure(plant: Plant, outlet: str) -> Measure:
    """What an outlet is counted in: GJ LHV where its cut is balanced as heat, else t."""
    return cut_measure(plant, plant.file.outlets[outlet].from_[0])


def trade_measure(plant: Plant, trade: str) -> Measure:
    """What an import, export or emission is counted in: as its utility."""
    utility, _ = plant.trades()[trade]
    return MEASURES[plant.file.utilities[utility].measured_in]


def conversion_measure(plant: Plant, conversion: str) -> Measure:
    """What the activity of a conversion is counted in: the first thing it makes."""
    first = next(iter(plant.file.conversions[conversion].makes))
    return MEASURES[plant.file.utilities[first].measured_in]


def unit_measure(unit: RecoveryUnit) -> Measure:
    """What the load of a recovery unit is counted in: its capacity's unit times hours.

    Raises `UnitError` when the capacity's unit is no rate.
    """
    written = parse_unit(unit.rate_unit)
    powers = dict(written.dimensions)
    if powers.pop("time", 0) != -1 or not powers or "currency" in powers:
        raise UnitError(f"`{unit.rate_unit}` is no rate of load", "write for example `t/h`, `kNm3/h` or `MW`")
    return Measure(load_unit_text(unit.rate_unit), dims(**powers), "heat" if written.basis else "power")


def load_unit_text(rate_unit: str) -> str:
    """The amount that a rate delivers in an hour, in words.

    >>> load_unit_text("kNm3/h"), load_unit_text("MW"), load_unit_text("bbl/d")
    ('kNm3', 'MWh', 'bbl')
    """
    head, _, _ = rate_unit.partition("/")
    return head + "h" if head in ("MW", "kW") else head


def unit_rate(unit: RecoveryUnit, quantity: Quantity | None = None) -> float:
    """A rate in the unit of the capacity, in base units per hour (of one such unit if none is given)."""
    measure = unit_measure(unit)
    one = quantity or Quantity(1.0, parse_unit(unit.rate_unit), unit.rate_unit)
    powers = {**dict(measure.dimensions), "time": -1}
    return convert(one, dims(**powers), NO_BASIS, measure.energy)


def ratio(quantity: Quantity, of: Measure, per: Measure) -> float:
    """A coefficient in base units of one measure per base unit of another.

    >>> from olefinlp.inputs.units import parse_quantity
    >>> round(ratio(parse_quantity("8364 Btu/lb LHV"), HEAT, MASS), 4)
    19.4547
    """
    powers = dict(of.dimensions)
    for name, power in per.dimensions:
        powers[name] = powers.get(name, 0) - power
    kind = of if "energy" in dict(of.dimensions) else per
    value = convert(quantity, dims(**powers), Basis(), kind.energy)
    both = "energy" in dict(of.dimensions) and "energy" in dict(per.dimensions)
    if both and of.energy != per.energy:
        value *= _GJ_PER_MWH if per.energy == "power" else 1 / _GJ_PER_MWH
    return value


def load_per_tonne(unit: RecoveryUnit, load: Quantity, per: Measure = MASS) -> float:
    """Load of a recovery unit per tonne (or GJ LHV) of something, in base units."""
    return ratio(load, unit_measure(unit), per)


def use_measure(plant: Plant, of: str, item: str) -> Measure:
    """What the item of a utility use is counted in."""
    if of == "outlet":
        return outlet_measure(plant, item)
    if of in ("import", "export"):
        return trade_measure(plant, item)
    if of == "unit_load":
        return unit_measure(plant.units[item])
    return HEAT if of == "cut_heat" else MASS


def utility_amount(plant: Plant, utility: str, of: str, item: str, amount: Quantity) -> float:
    """A utility used or made, in its base unit per base unit of the item (`fixed`: per hour)."""
    measure = MEASURES[plant.file.utilities[utility].measured_in]
    if of == "fixed":
        powers = {**dict(measure.dimensions), "time": -1}
        return convert(amount, dims(**powers), NO_BASIS, measure.energy)
    return ratio(amount, measure, use_measure(plant, of, item))


def utility_quantity(plant: Plant, utility: str, quantity: Quantity) -> float:
    """An amount of a utility in its base unit."""
    measure = MEASURES[plant.file.utilities[utility].measured_in]
    return convert(quantity, measure.dimensions, NO_BASIS, measure.energy)
