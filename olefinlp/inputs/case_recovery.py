"""Recovering: components, cuts, loads and capacities of the recovery units, ratios and named sums."""

from __future__ import annotations

from olefinlp.inputs.case import Part, Reader
from olefinlp.inputs.fields import NamedLimit, RatioLimit, Term
from olefinlp.inputs.findings import Place, path_text
from olefinlp.inputs.measures import MASS, Measure
from olefinlp.inputs.periods import Period
from olefinlp.inputs.plant import RecoveryUnit
from olefinlp.inputs.plant_sums import joined
from olefinlp.inputs.ratios import (
    conversion_measure,
    load_per_tonne,
    outlet_measure,
    trade_measure,
    unit_measure,
    unit_rate,
)
from olefinlp.inputs.scenario_file import UnitFactor
from olefinlp.inputs.units import share
from olefinlp.inputs.yaml_files import Document, Path_

KIND_OF_TERM = {
    "bought": "bought",
    "charged": "charge",
    "component": "component",
    "cut": "cut",
    "sold": "outlet",
    "unit_load": "unit_load",
    "imported": "trade",
    "exported": "trade",
    "emitted": "trade",
    "converted": "conversion",
}


def read_recovery(reader: Reader) -> None:
    """Components, cuts and what of each component goes to each cut."""
    case, plant = reader.case, reader.plant
    case.components = tuple(plant.components)
    case.cuts = tuple(plant.file.cuts)
    case.heat_cuts = tuple(name for name, cut in plant.file.cuts.items() if cut.balanced_as == "heat")
    for cut in case.cuts:
        case.recovery[cut] = {c: row[cut] for c, row in plant.recovery.items() if row[cut]}
    for component, row in plant.recovery.items():
        place = plant.recovery_places[component]
        for cut, value in row.items():
            if value:
                reader.note(f"recovery.{component}.{cut}", "", f"{value:g}", value, "t/t", place)
    for name, data in plant.components.items():
        if data.lower_heating_value is not None:
            case.heating_values[name] = data.lower_heating_value
            written = f"{data.lower_heating_value:g}"
            reader.note(f"components.{name}.lower_heating_value", "", written, data.lower_heating_value, "GJ LHV/t", data.place)
    for name, stream in plant.file.side_streams.items():
        case.compositions[name] = {c: share(q) for c, q in stream.composition.items()}
        for component, quantity in stream.composition.items():
            place = plant.place("side_streams", name, "composition", component)
            reader.note(f"side_streams.{name}.{component}", "", quantity.text, share(quantity), "t/t", place)


def modes_charging(reader: Reader, item: str) -> list[str]:
    """Modes meant by a charge item: all, a feed, a group, or group.feed."""
    case = reader.case
    return [
        mode
        for mode in case.modes
        if item in ("all", case.mode_feed[mode], case.mode_group[mode], f"{case.mode_group[mode]}.{case.mode_feed[mode]}")
    ]


def sources_buying(reader: Reader, item: str) -> list[str]:
    """Sources meant by a bought item: a feed, a side stream, or one source of it."""
    return [label for label, data in reader.case.sources.items() if item in (label, data.feed)]


def item_parts(reader: Reader, kind: str, item: str, coefficient: float) -> list[Part]:
    """The terms that an item of a table or a sum stands for."""
    if kind == "charge":
        return [Part("charge", (mode,), coefficient) for mode in modes_charging(reader, item)]
    if kind in ("bought", "side_stream"):
        return [Part("bought", (source,), coefficient) for source in sources_buying(reader, item)]
    if kind == "ingredient":
        return [Part("ingredient", tuple(item.split(".")), coefficient)]
    return [Part(kind, (item,), coefficient)]


def read_units(reader: Reader) -> None:
    """What loads each recovery unit, and what it can do in each month."""
    case, plant = reader.case, reader.plant
    case.units = tuple(plant.units)
    parts: dict[str, list[Part]] = {unit: [] for unit in case.units}
    for load in plant.unit_loads:
        per = outlet_measure(plant, load.item) if load.of == "outlet" else MASS
        value = load_per_tonne(plant.units[load.unit], load.load, per)
        reader.note(f"unit_loads.{load.unit}.{load.of}.{load.item}", "", load.load.text, value, "per t", load.place)
        parts[load.unit] += item_parts(reader, load.of, load.item, value)
    for mode in plant.modes:
        for unit, quantity in mode.loads.items() if mode.name in case.mode_feed else ():
            value = load_per_tonne(plant.units[unit], quantity)
            reader.note(f"modes.{mode.name}.load.{unit}", "", quantity.text, value, "per t", mode.place)
            parts[unit].append(Part("charge", (mode.name,), value))
    case.unit_parts = {unit: tuple(terms) for unit, terms in parts.items()}
    written: dict[tuple[str, str], list[tuple[int, UnitFactor]]] = {}
    for index, one in enumerate(reader.scenario.file.unit_factors):
        written.setdefault((one.unit, one.month), []).append((index, one))
    for data in plant.units.values():
        for period in reader.scenario.periods:
            _read_capacity(reader, data, period, written.get((data.name, period.name), []))


def _read_capacity(reader: Reader, unit: RecoveryUnit, period: Period, written: list[tuple[int, UnitFactor]]) -> None:
    if unit.capacity is None:
        return
    factor, reason, place = _factor(reader, unit.name, period, written)
    rate = unit_rate(unit, unit.capacity)
    reader.note(
        f"recovery_units.{unit.name}.capacity", period.name, unit.capacity.text, rate * factor, "per h", unit.place, reason
    )
    most = rate * factor * period.hours / 1000
    one = unit_rate(unit)
    reader.limit(
        "unit_load",
        (unit.name, period.name),
        unit.name,
        (most * unit.min_load, most),
        month=period.name,
        unit=unit.rate_unit,
        scale=1000 / period.hours / one,
        worth=(unit_measure(unit).unit, one),
        places=(unit.place, place),
        reason=reason,
        measure=unit.measure,
    )


def _factor(reader: Reader, unit: str, period: Period, written: list[tuple[int, UnitFactor]]) -> tuple[float, str, Place]:
    """This month's factor on a capacity, why, and who wrote the limit that results."""
    factor, reasons, place = 1.0, [], reader.plant.units[unit].place
    for index, one in written:
        factor *= one.factor
        place = reader.scenario.document.place(("unit_factors", index))
        reasons.append(one.reason)
        path = path_text(("unit_factors", index, "factor"))
        reader.note(path, period.name, f"{one.factor:g}", one.factor, "× capacity", place)
    return factor, "; ".join(reasons), place


def read_sums(reader: Reader) -> None:
    """Ratio limits and named limits of the plant and of the scenario."""
    for document, written in ((reader.plant.document, reader.plant.file), (reader.scenario.document, reader.scenario.file)):
        for name, ratio in written.ratio_limits.items():
            _read_ratio(reader, name, ratio, document)
        for name, limit in written.limits.items():
            _read_named(reader, name, limit, document)


def term_measure(reader: Reader, term: Term) -> Measure:
    """What a term is counted in; its names must agree, the first decides."""
    plant, name = reader.plant, term.names[0]
    if term.kind == "sold":
        return outlet_measure(plant, name)
    if term.kind in ("imported", "exported", "emitted"):
        return trade_measure(plant, name)
    if term.kind == "converted":
        return conversion_measure(plant, name)
    if term.kind == "unit_load":
        return base_measure(unit_measure(plant.units[name]))
    return MASS


def base_measure(measure: Measure) -> Measure:
    """The same measure in base units: loads in lb and in t can be added, and are added in t."""
    words = {"mass": "t", "volume": "m3", "gas_volume": "kNm3", "energy": "MWh" if measure.energy == "power" else "GJ LHV"}
    return Measure(" × ".join(words[name] for name, _ in measure.dimensions), measure.dimensions, measure.energy)


def _terms(reader: Reader, terms: tuple[Term, ...], factor: float = 1.0) -> list[Part]:
    return [
        part
        for term in terms
        for name in term.names
        for part in item_parts(reader, KIND_OF_TERM[term.kind], name, factor * term.times)
    ]


def _one_measure(reader: Reader, terms: tuple[Term, ...], path: Path_, document: Document) -> Measure | None:
    measures = {term_measure(reader, term) for term in terms}
    if len(measures) == 1:
        return measures.pop()
    units = ", ".join(sorted(m.unit for m in measures))
    reader.findings.error(document.place(path), path_text(path), f"adds quantities of different units: {units}")
    return None


def _read_ratio(reader: Reader, name: str, ratio: RatioLimit, document: Document) -> None:
    path: Path_ = ("ratio_limits", name)
    measure = _one_measure(reader, (*ratio.of, *ratio.to), path, document)
    if measure is None:
        return
    for side, value in (("at_most", ratio.at_most), ("at_least", ratio.at_least)):
        if value is None:
            continue
        place = document.place((*path, side))
        reader.note(path_text((*path, side)), "", f"{value:g}", value, "ratio", place)
        parts = (*_terms(reader, ratio.of), *_terms(reader, ratio.to, -value))
        reader.case.ratios[name, side] = parts
        sides = (None, 0.0) if side == "at_most" else (0.0, None)
        words = f"{name} ratio {side.replace('_', ' ')} {value:g}"
        places = (None, place) if side == "at_most" else (place, None)
        for month in reader.case.months:
            reader.limit(
                "ratio",
                (name, side, month),
                words,
                sides,
                month=month,
                unit=plan_unit(measure),
                worth=(measure.unit, 1.0),
                places=places,
            )


def plan_unit(measure: Measure) -> str:
    """The unit in which the plan counts a measure."""
    from olefinlp.inputs.case import PLAN_UNITS

    return PLAN_UNITS.get(measure.unit, f"thousand {measure.unit}")


def _read_named(reader: Reader, name: str, limit: NamedLimit, document: Document) -> None:
    path: Path_ = ("limits", name)
    measure = _one_measure(reader, limit.sum, path, document)
    if measure is None:
        return
    reader.case.sums[name] = tuple(_terms(reader, limit.sum))
    density, ratio = joined(reader.plant, limit.sum)
    for period in reader.scenario.periods:
        basis = reader.scenario.basis(period, density, ratio)
        low = reader.amount(limit.min, period, (*path, "min"), measure, basis, document)
        high = reader.amount(limit.max, period, (*path, "max"), measure, basis, document)
        places = (document.place((*path, "min")), document.place((*path, "max")))
        reader.limit(
            "named",
            (name, period.name),
            name,
            (low, high),
            month=period.name,
            unit=plan_unit(measure),
            worth=(measure.unit, 1.0),
            places=places,
        )
