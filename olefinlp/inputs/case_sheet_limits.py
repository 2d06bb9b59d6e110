"""The rows of a scenario's case sheet that are no prices: what is offered, sold, held, and what the plant can do."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any

from olefinlp.inputs.case import PLAN_UNITS
from olefinlp.inputs.case_sheet_rows import GROUPS
from olefinlp.inputs.case_sheet_units import HOUR_UNITS, SHARE_UNITS, amount_units
from olefinlp.inputs.case_supply import density_of, sources
from olefinlp.inputs.cases import FACTOR, OUTAGE
from olefinlp.inputs.fields import UNLIMITED, Cap, Monthly, NamedLimit
from olefinlp.inputs.measures import HEAT, MASS, POWER, Measure
from olefinlp.inputs.plant_sums import joined
from olefinlp.inputs.prices import PriceItem, price_items_of
from olefinlp.inputs.scenario import Scenario
from olefinlp.inputs.scenario_file import EndAtLeast
from olefinlp.inputs.units import Basis, Quantity, convert, dims, parse_unit

HOURS = dims(time=1)


@dataclass(frozen=True, slots=True)
class SheetLimit:
    """One row of limits: `value` is what the scenario writes, a number in `unit`, `unlimited`, or nothing."""

    item: str
    month: str
    unit: str
    value: float | str | None
    units: tuple[str, ...]
    note: str = ""

    @property
    def group(self) -> str:
        """What the column `Group` says."""
        return GROUPS[self.item.partition(".")[0]]


@dataclass(frozen=True, slots=True)
class _Kind:
    """What an amount is counted in, and what joins its units."""

    measure: Measure
    basis: Basis

    @property
    def default(self) -> str:
        """The unit of an amount that nobody has written."""
        return PLAN_UNITS.get(self.measure.unit, self.measure.unit)


def limit_rows(scenario: Scenario) -> tuple[SheetLimit, ...]:
    """Every amount that cases may change: what the scenario writes, and minima of feeds and outlets that it does not.

    >>> from olefinlp import read_scenario
    >>> [row.value for row in limit_rows(read_scenario("scenarios/thermal_cracker.yaml"))][:2]
    [None, 'unlimited']
    """
    items = price_items_of(scenario)
    found: list[SheetLimit] = []
    for section, feed, name, source in sources(scenario):
        found += _offer(scenario, f"{section}.{feed}.{name}", source, items)
    for name, sale in scenario.file.outlets.items():
        found += _offer(scenario, f"outlets.{name}", sale, items)
    for name, terms in scenario.file.utilities.items():
        kind = _kind_of(scenario, items[f"utilities.{name}"])
        found += _rows(scenario, f"utilities.{name}.min", terms.min, kind)
        found += _rows(scenario, f"utilities.{name}.max", terms.max, kind)
    found += _stocks(scenario)
    for name, limit in scenario.file.limits.items():
        found += _named(scenario, name, limit)
    found += _factors(scenario)
    found += _outages(scenario)
    return tuple(found)


def _kind_of(scenario: Scenario, item: PriceItem) -> _Kind:
    basis = scenario.basis(scenario.periods[0], item.density, item.lhv_over_hhv)
    return _Kind(item.measure, basis)


def _offer(scenario: Scenario, name: str, offer: Any, items: Mapping[str, PriceItem]) -> Iterator[SheetLimit]:
    """A source or an outlet: its minimum, maximum or steps, take-or-pay."""
    priced = next(items[known] for known in (name, f"{name}.deduction", f"{name}.tiers.1") if known in items)
    kind = _kind_of(scenario, priced)
    beside = _units_of(offer.max) or [unit for tier in offer.tiers for unit in _units_of(tier.up_to)]
    if offer.min is not None:
        yield from _rows(scenario, f"{name}.min", offer.min, kind)
    else:
        unit = beside[0] if beside else kind.default
        yield SheetLimit(f"{name}.min", "", unit, None, amount_units(kind.measure, kind.basis, [unit]))
    yield from _rows(scenario, f"{name}.max", offer.max, kind)
    for number, tier in enumerate(offer.tiers, 1):
        yield from _rows(scenario, f"{name}.tiers.{number}.up_to", tier.up_to, kind)
    yield from _rows(scenario, f"{name}.take_or_pay", getattr(offer, "take_or_pay", None), kind)


def _stocks(scenario: Scenario) -> Iterator[SheetLimit]:
    plant = scenario.plant.file
    for name, stock in scenario.file.stocks.items():
        held = plant.feeds[name] if name in plant.feeds else plant.cuts[name]
        kind = _Kind(MASS, Basis(density=density_of(held.density)))
        yield from _rows(scenario, f"stocks.{name}.opening", stock.opening, kind)
        yield from _rows(scenario, f"stocks.{name}.min", stock.min, kind)
        yield from _rows(scenario, f"stocks.{name}.max", stock.max, kind)
        if isinstance(stock.end, EndAtLeast):
            yield from _rows(scenario, f"stocks.{name}.end.at_least", stock.end.at_least, kind)


def _named(scenario: Scenario, name: str, limit: NamedLimit) -> Iterator[SheetLimit]:
    written = [*_units_of(limit.min), *_units_of(limit.max)]
    if not written:
        return  # unlimited, and nothing says what it is counted in
    density, ratio = joined(scenario.plant, limit.sum)
    month = scenario.periods[0]
    counted = scenario.case.limits.get(("named", name, month.name))
    known = {PLAN_UNITS[measure.unit]: measure for measure in (MASS, HEAT, POWER)}
    own = parse_unit(written[0])
    other = Measure(written[0], own.dimensions, "power" if own.electric else "heat")
    kind = _Kind(known.get(counted.unit if counted else "", other), scenario.basis(month, density, ratio))
    yield from _rows(scenario, f"limits.{name}.min", limit.min, kind)
    yield from _rows(scenario, f"limits.{name}.max", limit.max, kind)


def _factors(scenario: Scenario) -> Iterator[SheetLimit]:
    """Factors of a unit and month multiply where several are written."""
    for name, unit in scenario.plant.units.items():
        if unit.capacity is None:
            continue
        entries: dict[str, tuple[float, str]] = {}
        for entry in scenario.file.unit_factors:
            if entry.unit == name:
                factor, reason = entries.get(entry.month, (1.0, ""))
                entries[entry.month] = (factor * entry.factor, _joined(reason, entry.reason))
        yield from _this_month(scenario, f"recovery_units.{name}.{FACTOR}", entries, 1.0, SHARE_UNITS)


def _outages(scenario: Scenario) -> Iterator[SheetLimit]:
    """Outages of a group and month add up where several are written."""
    for name, group in scenario.plant.file.furnace_groups.items():
        if group.furnaces == "unlimited":
            continue
        entries: dict[str, tuple[float, str]] = {}
        for entry in scenario.file.outages:
            if entry.group == name:
                hours, reason = entries.get(entry.month, (0.0, ""))
                entries[entry.month] = (hours + convert(entry.hours, HOURS), _joined(reason, entry.reason))
        yield from _this_month(scenario, f"furnace_groups.{name}.{OUTAGE}", entries, 0.0, HOUR_UNITS)


def _this_month(
    scenario: Scenario, item: str, entries: Mapping[str, tuple[float, str]], usual: float, units: tuple[str, ...]
) -> Iterator[SheetLimit]:
    """One row for all months, and one for each that differs."""
    months = [period.name for period in scenario.periods]
    if len(months) == 1:
        value, reason = entries.get(months[0], (usual, ""))
        yield SheetLimit(item, "", units[0], value, units, reason)
        return
    yield SheetLimit(item, "", units[0], usual, units)
    for month in months:
        if month in entries:
            yield SheetLimit(item, month, units[0], entries[month][0], units, entries[month][1])


def _rows(scenario: Scenario, item: str, written: Any, kind: _Kind) -> Iterator[SheetLimit]:
    """One row, or one for each month that has a value of its own."""
    if written is None:
        return
    monthly = written if isinstance(written, Monthly) else Monthly(written)
    by_month = dict(monthly.by_month)
    months = [period.name for period in scenario.periods]
    found: dict[str, Any] = {}
    for month in months:
        found.setdefault(month if month in by_month and len(months) > 1 else "", monthly.at(month))
    unit = next(iter(_units_of(monthly)), kind.default)
    for month in sorted(found):
        quantity = found[month].quantity if isinstance(found[month], Cap) else found[month]
        value = quantity.number if isinstance(quantity, Quantity) else UNLIMITED
        own = quantity.unit.text if isinstance(quantity, Quantity) else unit
        yield SheetLimit(item, month, own, value, amount_units(kind.measure, kind.basis, [own]))


def _units_of(written: Any) -> list[str]:
    """Units in which an amount is written; none where it is unlimited."""
    values = written.values() if isinstance(written, Monthly) else [] if written is None else [written]
    quantities = [value.quantity if isinstance(value, Cap) else value for value in values]
    return [quantity.unit.text for quantity in quantities if isinstance(quantity, Quantity)]


def _joined(*reasons: str) -> str:
    return "; ".join(reason for reason in reasons if reason)
