"""Units in a plant: every number with a unit is of the kind that its use needs, before anything is worked out."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from math import inf
from typing import ParamSpec, TypeVar

from olefinlp.inputs.fields import Cap
from olefinlp.inputs.findings import Findings, Place
from olefinlp.inputs.measures import MEASURES, Measure
from olefinlp.inputs.plant import HEAT_PER_TONNE, Plant
from olefinlp.inputs.plant_file import Outlet, Specification
from olefinlp.inputs.plant_references import ALL, at, known_items
from olefinlp.inputs.ratios import (
    conversion_measure,
    load_per_tonne,
    outlet_measure,
    unit_measure,
    unit_rate,
    use_measure,
    utility_amount,
    utility_quantity,
)
from olefinlp.inputs.units import Basis, Quantity, UnitError, convert, dims, parse_unit, share
from olefinlp.inputs.yaml_files import Path_

P = ParamSpec("P")
T = TypeVar("T")
DENSITY = dims(mass=1, volume=-1)
# Only the kind of a limit is looked at here, so any hours serve: the scenario's periods come later.
_ANY_PERIOD = Basis(hours=1.0, calendar_month=True)


def check_units(plant: Plant, findings: Findings) -> None:
    """Every quantity of the plant has a unit of the kind that is needed there."""
    for check in (
        check_feed_quantities,
        check_densities,
        check_compositions,
        check_hour_shares,
        check_capacities,
        check_loads,
        check_mode_columns,
        check_use_amounts,
        check_outlet_limits,
        check_specifications,
        check_conversion_amounts,
    ):
        check(plant, findings)


def attempt(findings: Findings, place: Place, path: str, action: Callable[P, T], *args: P.args, **kwargs: P.kwargs) -> T | None:
    """What an action gives; None with a finding when a unit does not serve."""
    try:
        return action(*args, **kwargs)
    except UnitError as error:
        findings.error(place, path, str(error), error.hint)
        return None


def weight_share(quantity: Quantity) -> float:
    """A share by weight as a fraction. Raises `UnitError` for shares by mole or volume."""
    if quantity.unit.share in ("mol%", "vol%"):
        raise UnitError(f"`{quantity}` is no share by weight", "turn it into wt%")
    return share(quantity)


def _density(quantity: Quantity) -> float:
    return convert(quantity, DENSITY)


def _heating_value(quantity: Quantity) -> float:
    return convert(quantity, HEAT_PER_TONNE)


@dataclass(frozen=True)
class Kind:
    """What a quantity must be: how it is read, and from where to where it may lie."""

    read: Callable[[Quantity], float]
    low: float
    high: float
    allowed: str


WEIGHT = Kind(weight_share, 0.0, 1.0, "0 to 100 wt%")
SHARE = Kind(weight_share, 0.0, 1.0, "0 to 100 %")
LIQUID = Kind(_density, 1e-6, 3.0, "above 0, up to 3 t/m3")
FUEL = Kind(_heating_value, 1e-6, 121.0, "above 0, up to 121 GJ/t LHV (hydrogen)")


def check_kind(plant: Plant, findings: Findings, path: Path_, quantity: Quantity | None, kind: Kind) -> None:
    """A quantity of plant.yaml is of its kind and within the range of it."""
    if quantity is None:
        return
    place, text = plant.place(*path), ".".join(map(str, path))
    value = attempt(findings, place, text, kind.read, quantity)
    if value is not None and not kind.low <= value <= kind.high:
        findings.error(place, text, f"`{quantity}` is out of range, allowed is {kind.allowed}")


def check_feed_quantities(plant: Plant, findings: Findings) -> None:
    """Hydrogen and carbon of a feed are weight shares of one tonne, its heating value a lower one."""
    for name, feed in plant.file.feeds.items():
        check_kind(plant, findings, ("feeds", name, "hydrogen"), feed.hydrogen, WEIGHT)
        check_kind(plant, findings, ("feeds", name, "carbon"), feed.carbon, WEIGHT)
        check_kind(plant, findings, ("feeds", name, "lower_heating_value"), feed.lower_heating_value, FUEL)
        parts = [part for part in (feed.hydrogen, feed.carbon) if part and part.unit.share]
        total = sum(part.number * part.unit.factor for part in parts)
        if len(parts) == 2 and total > 1.0005:
            message = f"hydrogen and carbon are {100 * total:.2f} wt% together, allowed is 100 wt%"
            findings.error(plant.place("feeds", name, "carbon"), f"feeds.{name}.carbon", message)


def check_densities(plant: Plant, findings: Findings) -> None:
    """A density is mass per volume, and that of a liquid (mostly a slip of kg/m3 and t/m3 if not)."""
    file = plant.file
    sections: Mapping[str, Mapping[str, Quantity | None]] = {
        "feeds": {name: item.density for name, item in file.feeds.items()},
        "side_streams": {name: item.density for name, item in file.side_streams.items()},
        "cuts": {name: item.density for name, item in file.cuts.items()},
        "outlets": {name: item.density for name, item in file.outlets.items()},
    }
    for section, densities in sections.items():
        for name, density in densities.items():
            check_kind(plant, findings, (section, name, "density"), density, LIQUID)


def check_compositions(plant: Plant, findings: Findings) -> None:
    """The composition of a side stream is by weight."""
    for name, stream in plant.file.side_streams.items():
        for component, value in stream.composition.items():
            path = ("side_streams", name, "composition", component)
            attempt(findings, plant.place(*path), ".".join(path), weight_share, value)


def check_hour_shares(plant: Plant, findings: Findings) -> None:
    """The loss, the hours lost unplanned and minimum loads are shares between nothing and all."""
    check_kind(plant, findings, ("loss", "share"), plant.file.loss.share, WEIGHT)
    for name, group in plant.file.furnace_groups.items():
        check_kind(plant, findings, ("furnace_groups", name, "unplanned_loss"), group.unplanned_loss, SHARE)
        check_kind(plant, findings, ("furnace_groups", name, "min_load"), group.min_load, SHARE)
    for unit in plant.units.values():
        if not 0.0 <= unit.min_load <= 1.0:
            message = f"{100 * unit.min_load:g} % is out of range, allowed is 0 to 100 %"
            findings.error(at(unit.place, "min_load"), f"recovery_units.{unit.name}", message)
        elif unit.min_load and unit.capacity is None:
            message = "a minimum load is a share of the capacity, which is unlimited"
            findings.error(at(unit.place, "min_load"), f"recovery_units.{unit.name}", message, "write 0, or the capacity")


def check_capacities(plant: Plant, findings: Findings) -> None:
    """The capacity of a recovery unit is a rate and not negative."""
    for name, unit in plant.units.items():
        path = f"recovery_units.{name}"
        good = attempt(findings, at(unit.place, "capacity_unit"), path, unit_measure, unit)
        if good is None or attempt(findings, at(unit.place, "capacity_unit"), path, unit_rate, unit) is None:
            continue
        if unit.capacity and unit.capacity.number < 0:
            findings.error(at(unit.place, "capacity"), path, f"the capacity `{unit.capacity}` is negative")


def measurable(plant: Plant, of: str, item: str) -> bool:
    """Whether it is known what an item is counted in (names that are not are found elsewhere)."""
    if item not in known_items(plant, of):
        return False
    if of == "outlet":
        return plant.file.outlets[item].from_[0] in plant.file.cuts
    return of != "unit_load" or good_rate(plant, item)


def good_rate(plant: Plant, unit: str) -> bool:
    """Whether a recovery unit is known and its capacity is a rate."""
    try:
        return unit in plant.units and unit_rate(plant.units[unit]) > 0
    except UnitError:
        return False


def same_kind(amount: Quantity, of: Measure, per: Measure) -> None:
    """Refuse `t/t` where GJ per GJ is meant: both are numbers without dimensions.

    Raises `UnitError`.
    """
    if amount.unit.dimensions or amount.unit.share or of.dimensions != per.dimensions:
        return
    first = parse_unit(amount.unit.text.split()[0].split("/")[0])
    if first.dimensions != of.dimensions:
        raise UnitError(f"`{amount}` is not {of.unit} per {per.unit}, as is needed here")


def check_loads(plant: Plant, findings: Findings) -> None:
    """A load is in the unit of its capacity times hours, per tonne (or GJ) of the item."""
    for row in plant.unit_loads:
        if good_rate(plant, row.unit) and measurable(plant, row.of, row.item):
            per, unit = use_measure(plant, row.of, row.item), plant.units[row.unit]
            place, path = at(row.place, "load_unit"), f"unit_loads.{row.unit}"
            if attempt(findings, place, path, load_per_tonne, unit, row.load, per) is not None:
                attempt(findings, place, path, same_kind, row.load, unit_measure(unit), per)


def check_mode_columns(plant: Plant, findings: Findings) -> None:
    """What a mode uses, makes and loads per tonne charged is in units of that utility or recovery unit."""
    for mode in plant.modes:
        path = f"modes.{mode.name}"
        for name, amount in mode.utilities.items():
            if name in plant.file.utilities:
                attempt(findings, mode.place, path, utility_amount, plant, name, "charge", ALL, amount)
        for name, load in mode.loads.items():
            if good_rate(plant, name):
                attempt(findings, mode.place, path, load_per_tonne, plant.units[name], load)


def check_use_amounts(plant: Plant, findings: Findings) -> None:
    """An amount is in units of its utility per unit of the item, and its direction says its sign."""
    for row in plant.utility_uses:
        path, place = f"utility_uses.{row.utility}", at(row.place, "unit")
        if row.amount.number < 0:
            findings.error(at(row.place, "amount"), path, f"`{row.amount}` is negative", "write the other direction instead")
        if row.utility not in plant.file.utilities or not measurable(plant, row.of, row.item):
            continue
        value = attempt(findings, place, path, utility_amount, plant, row.utility, row.of, row.item, row.amount)
        if value is not None and row.of != "fixed":
            measure = MEASURES[plant.file.utilities[row.utility].measured_in]
            attempt(findings, place, path, same_kind, row.amount, measure, use_measure(plant, row.of, row.item))


def _known_density(quantity: Quantity | None) -> float | None:
    try:
        return convert(quantity, DENSITY) if quantity else None
    except UnitError:
        return None


def outlet_basis(plant: Plant, outlet: Outlet) -> Basis:
    """What turns limits of an outlet into its own unit: its density and heating values, else its cut's."""
    cut = plant.file.cuts.get(outlet.from_[0])
    density = _known_density(outlet.density) or _known_density(cut.density if cut else None)
    ratio = outlet.lhv_over_hhv or (cut.lhv_over_hhv if cut else None)
    return Basis(density=density, lhv_over_hhv=ratio, hours=1.0, calendar_month=True)


def check_outlet_limits(plant: Plant, findings: Findings) -> None:
    """Limits of own use and flare are amounts or rates of what the outlet is counted in."""
    for name, outlet in plant.file.outlets.items():
        if outlet.from_[0] not in plant.file.cuts:
            continue
        measure, basis = outlet_measure(plant, name), outlet_basis(plant, outlet)
        for key, written in (("min", outlet.min), ("max", outlet.max)):
            path = ("outlets", name, key)
            for value in written.values() if written else ():
                check_amount(findings, plant.place(*path), ".".join(path), value, measure, basis, low=0.0)


def check_amount(
    findings: Findings,
    place: Place,
    path: str,
    value: Quantity | Cap,
    measure: Measure,
    basis: Basis = _ANY_PERIOD,
    low: float = -inf,
) -> None:
    """A minimum or maximum becomes the unit of what it limits."""
    quantity = value.quantity if isinstance(value, Cap) else value
    if quantity is None:
        return
    amount = attempt(findings, place, path, convert, quantity, measure.dimensions, basis, measure.energy)
    if amount is not None and amount < low:
        findings.error(place, path, f"`{quantity}` is negative")


def check_specifications(plant: Plant, findings: Findings) -> None:
    """A specification blends by weight in one unit, and some mix of its cuts can meet it."""
    for name, outlet in plant.file.outlets.items():
        for wanted, specification in outlet.specifications.items():
            path = f"outlets.{name}.specifications.{wanted}"
            place = plant.place("outlets", name, "specifications", wanted)
            numbers = attempt(findings, place, path, _specification_numbers, specification)
            if numbers:
                _check_reachable(findings, place, path, specification, *numbers)


def _specification_numbers(specification: Specification) -> tuple[list[float], float | None, float | None]:
    """Values, minimum and maximum as numbers of one unit. Raises `UnitError` when they are not."""
    written = [*specification.values.values(), specification.min, specification.max]
    if len({isinstance(value, Quantity) for value in written if value is not None}) > 1:
        raise UnitError("some of its numbers have a unit and some have none", "write all of them with it, or none")
    values = [_property_number(value) for value in specification.values.values()]
    low, high = (None if value is None else _property_number(value) for value in (specification.min, specification.max))
    return values, low, high


def _property_number(value: Quantity | float) -> float:
    return weight_share(value) if isinstance(value, Quantity) else value


def _check_reachable(
    findings: Findings,
    place: Place,
    path: str,
    written: Specification,
    values: list[float],
    low: float | None,
    high: float | None,
) -> None:
    if low is not None and high is not None and low > high:
        findings.error(place, path, f"the minimum {written.min} is above the maximum {written.max}")
    elif low is not None and max(values, default=low) < low:
        findings.warn(place, path, f"no ingredient reaches the minimum {written.min}", "nothing can be sold through this outlet")
    elif high is not None and min(values, default=high) > high:
        findings.warn(place, path, f"no ingredient is below the maximum {written.max}", "nothing can be sold through this outlet")


def check_conversion_amounts(plant: Plant, findings: Findings) -> None:
    """A conversion turns positive amounts of utilities, up to a rate or amount of the first thing made."""
    for name, conversion in plant.file.conversions.items():
        for side in ("makes", "uses"):
            for utility, amount in getattr(conversion, side).items():
                path = ("conversions", name, side, utility)
                if utility in plant.file.utilities:
                    place, text = plant.place(*path), ".".join(path)
                    value = attempt(findings, place, text, utility_quantity, plant, utility, amount)
                    if value is not None and value <= 0:
                        findings.error(place, text, f"`{amount}` is not above 0")
        if next(iter(conversion.makes)) in plant.file.utilities:
            path_ = ("conversions", name, "max")
            measure = conversion_measure(plant, name)
            check_amount(findings, plant.place(*path_), ".".join(path_), conversion.max, measure, low=0.0)
