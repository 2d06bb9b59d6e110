"""Disposing: outlets with their limits and steps, value by content, specifications of blends."""

from __future__ import annotations

from collections.abc import Iterator

from olefinlp.inputs.case import Part, Reader
from olefinlp.inputs.case_recovery import plan_unit
from olefinlp.inputs.case_supply import density_of, steps_of
from olefinlp.inputs.findings import Place, path_text
from olefinlp.inputs.measures import MASS
from olefinlp.inputs.periods import Period
from olefinlp.inputs.plant_file import Specification
from olefinlp.inputs.prices import PriceItem
from olefinlp.inputs.ratios import outlet_measure
from olefinlp.inputs.scenario import Scenario
from olefinlp.inputs.units import Basis, Quantity, UnitError, share
from olefinlp.inputs.yaml_files import Path_


def _joins(scenario: Scenario, outlet: str) -> tuple[float | None, float | None]:
    """Density and ratio of heating values of an outlet: its own, else its cut's."""
    written = scenario.plant.file.outlets[outlet]
    cut = scenario.plant.file.cuts[written.from_[0]]
    return density_of(written.density or cut.density), written.lhv_over_hhv or cut.lhv_over_hhv


def valued_by_content(scenario: Scenario, outlet: str) -> bool:
    """Whether an outlet takes a cut that is valued by content."""
    plant = scenario.plant.file
    return any(plant.cuts[cut].valued_by == "content" for cut in plant.outlets[outlet].from_)


def price_items(scenario: Scenario) -> Iterator[PriceItem]:
    """The prices of outlets and of the content of cuts."""
    for outlet, sale in scenario.file.outlets.items():
        measure = outlet_measure(scenario.plant, outlet)
        density, ratio = _joins(scenario, outlet)
        path: Path_ = ("outlets", outlet)
        for index, tier in enumerate(sale.tiers):
            yield PriceItem((*path, "tiers", index, "price"), measure, tier.price, sale.basis or "", density, ratio)
        if not sale.tiers and valued_by_content(scenario, outlet):
            yield PriceItem((*path, "deduction"), measure, sale.deduction, sale.basis or "", density, ratio)
        elif not sale.tiers:
            yield PriceItem((*path, "price"), measure, sale.price, sale.basis or "", density, ratio)
    for name, cut in scenario.plant.file.cuts.items():
        for item in cut.content_items:
            priced = scenario.file.contents.get(name, {}).get(item)
            basis = priced.basis if priced else ""
            yield PriceItem(("contents", name, item, "price"), MASS, priced.price if priced else None, basis or "")


def read_outlets(reader: Reader) -> None:
    """Outlets, their limits, content and specifications."""
    case, plant, scenario = reader.case, reader.plant, reader.scenario
    for name, outlet in plant.file.outlets.items():
        case.outlets[name] = outlet.from_
        density, ratio = _joins(scenario, name)
        for period in scenario.periods:
            basis = scenario.basis(period, density, ratio)
            if outlet.to == "sale":
                _read_sale(reader, name, period, basis)
            else:
                _read_use(reader, name, period, basis)
        for prop, spec in outlet.specifications.items():
            _read_specification(reader, name, prop, spec)
    case.deductions = frozenset(name for name in case.sale_tiers if valued_by_content(scenario, name))
    for cut, written in plant.file.cuts.items():
        for item, components in written.content_items.items():
            recovery = case.recovery[cut]
            case.content[cut, item] = tuple(Part("component", (c,), recovery[c]) for c in components if c in recovery)


def _read_sale(reader: Reader, outlet: str, period: Period, basis: Basis) -> None:
    case, sale = reader.case, reader.scenario.file.outlets[outlet]
    path: Path_ = ("outlets", outlet)
    measure = outlet_measure(reader.plant, outlet)
    low = reader.amount(sale.min, period, (*path, "min"), measure, basis)
    high = reader.amount(sale.max, period, (*path, "max"), measure, basis)
    places = (reader.scenario.document.place((*path, "min")), reader.scenario.document.place((*path, "max")))
    sizes, end = steps_of(reader, sale.tiers, period, path, measure, basis)
    case.sale_tiers[outlet] = tuple(range(1, len(sizes) + 1))
    for tier, size in zip(case.sale_tiers[outlet], sizes, strict=True):
        case.sale_size[outlet, tier, period.name] = size
    if sale.tiers:
        high = end
        places = (places[0], reader.scenario.document.place((*path, "tiers")))
    _limit(reader, outlet, f"{outlet}", period, (low, high), places)


def _read_use(reader: Reader, outlet: str, period: Period, basis: Basis) -> None:
    written, document = reader.plant.file.outlets[outlet], reader.plant.document
    path: Path_ = ("outlets", outlet)
    measure = outlet_measure(reader.plant, outlet)
    low = reader.amount(written.min, period, (*path, "min"), measure, basis, document)
    high = reader.amount(written.max, period, (*path, "max"), measure, basis, document)
    _limit(reader, outlet, outlet, period, (low, high), (document.place((*path, "min")), document.place((*path, "max"))))


def _limit(
    reader: Reader,
    outlet: str,
    words: str,
    period: Period,
    sides: tuple[float | None, float | None],
    places: tuple[Place | None, Place | None],
) -> None:
    measure = outlet_measure(reader.plant, outlet)
    reader.limit(
        "outlet",
        (outlet, period.name),
        words,
        sides,
        month=period.name,
        unit=plan_unit(measure),
        worth=(measure.unit, 1.0),
        places=places,
    )


def _number(reader: Reader, written: Quantity | float, path: Path_) -> float:
    """A property value: a share as a fraction of one, a pure number as it is."""
    if isinstance(written, Quantity):
        try:
            return share(written)
        except UnitError as error:
            reader.findings.error(reader.plant.document.place(path), path_text(path), str(error), error.hint)
            return 0.0
    return written


def _read_specification(reader: Reader, outlet: str, prop: str, spec: Specification) -> None:
    """Σ (value − limit) × ingredient ≥ 0 for a minimum, with the signs turned for a maximum."""
    path: Path_ = ("outlets", outlet, "specifications", prop)
    values = {cut: _number(reader, value, (*path, "values", cut)) for cut, value in spec.values.items()}
    for cut, value in values.items():
        place = reader.plant.document.place((*path, "values", cut))
        reader.note(path_text((*path, "values", cut)), "", str(spec.values[cut]), value, "", place)
    for side, written in (("min", spec.min), ("max", spec.max)):
        if written is None:
            continue
        bound = _number(reader, written, (*path, side))
        place = reader.plant.document.place((*path, side))
        reader.note(path_text((*path, side)), "", str(written), bound, "", place)
        sign = 1.0 if side == "min" else -1.0
        parts = tuple(Part("ingredient", (outlet, cut), sign * (value - bound)) for cut, value in values.items())
        reader.case.specifications[outlet, prop, side] = parts
        for month in reader.case.months:
            words = f"{outlet} {prop} {'at least' if side == 'min' else 'at most'} {written}"
            reader.limit("specification", (outlet, prop, side, month), words, (0.0, None), month=month, places=(place, None))
