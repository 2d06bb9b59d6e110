"""Sums that people limit, in a plant or a scenario: the names and units of their terms."""

from __future__ import annotations

from collections.abc import Iterable, Mapping

from olefinlp.inputs.fields import NamedLimit, RatioLimit, Term
from olefinlp.inputs.findings import Findings, Place
from olefinlp.inputs.measures import MASS, Measure
from olefinlp.inputs.plant import Plant
from olefinlp.inputs.plant_references import ALL, cracked_pairs, known, trades_of
from olefinlp.inputs.plant_units import check_amount, good_rate, measurable
from olefinlp.inputs.ratios import conversion_measure, outlet_measure, trade_measure, unit_measure
from olefinlp.inputs.units import Basis, convert, dims
from olefinlp.inputs.yaml_files import Document, Path_

TERM_WORDS = {
    "bought": "bought feed or side stream",
    "charged": "feed, `group.feed`, group or `all`",
    "component": "component",
    "cut": "cut",
    "sold": "outlet",
    "unit_load": "recovery unit",
    "imported": "import",
    "exported": "export",
    "emitted": "emission",
    "converted": "conversion",
}


def check_sums(plant: Plant, findings: Findings) -> None:
    """The plant's own limits and ratio limits."""
    check_limit_terms(plant, plant.file.limits, plant.file.ratio_limits, plant.document, findings)
    check_limit_units(plant, plant.file.limits, plant.file.ratio_limits, plant.document, findings)


def known_terms(plant: Plant, kind: str) -> list[str]:
    """What a term of one kind may name (a source after `feed.` is the scenario's)."""
    file = plant.file
    bought = [name for name, feed in file.feeds.items() if not feed.recycle_of]
    names: dict[str, Iterable[str]] = {
        "bought": (*bought, *file.side_streams),
        "charged": (*file.feeds, *file.furnace_groups, *cracked_pairs(plant), ALL),
        "component": plant.components,
        "cut": file.cuts,
        "sold": file.outlets,
        "unit_load": plant.units,
        "imported": trades_of(plant, "imports"),
        "exported": trades_of(plant, "exports"),
        "emitted": trades_of(plant, "emissions"),
        "converted": file.conversions,
    }
    return list(names[kind])


def term_known(plant: Plant, kind: str, name: str) -> bool:
    """Whether a name serves in a term of this kind."""
    return (name.partition(".")[0] if kind == "bought" else name) in known_terms(plant, kind)


def check_limit_terms(
    plant: Plant,
    limits: Mapping[str, NamedLimit],
    ratios: Mapping[str, RatioLimit],
    document: Document,
    findings: Findings,
) -> None:
    """The terms of limits and ratio limits (of a plant or a scenario) count things that there are."""
    sides: list[tuple[Path_, tuple[Term, ...]]] = [(("limits", name, "sum"), limit.sum) for name, limit in limits.items()]
    for name, ratio in ratios.items():
        sides += [(("ratio_limits", name, "of"), ratio.of), (("ratio_limits", name, "to"), ratio.to)]
    for path, terms in sides:
        for position, term in enumerate(terms):
            place = document.place((*path, position, term.kind))
            _check_term(plant, term, place, ".".join(map(str, (*path, position + 1, term.kind))), findings)


def _check_term(plant: Plant, term: Term, place: Place, path: str, findings: Findings) -> None:
    for name in term.names:
        feed = plant.file.feeds.get(name.partition(".")[0])
        if term.kind == "bought" and feed and feed.recycle_of:
            findings.error(place, path, f"`{name}` is a recycle feed, it is never bought", "take `charged:` for it")
        elif not term_known(plant, term.kind, name):
            known(findings, place, path, TERM_WORDS[term.kind], name, known_terms(plant, term.kind))


def term_measures(plant: Plant, terms: Iterable[Term]) -> dict[str, Measure]:
    """What the known names of terms are counted in, by its kind in words."""
    found: dict[str, Measure] = {}
    for term in terms:
        for name in term.names:
            if term_known(plant, term.kind, name) and (measure := _term_measure(plant, term.kind, name)):
                power = "energy" in dict(measure.dimensions) and measure.energy == "power"
                found.setdefault(f"{measure.dimensions}{power}", measure)
    return {measure.unit: measure for measure in found.values()}


def _term_measure(plant: Plant, kind: str, name: str) -> Measure | None:
    if kind == "sold":
        return outlet_measure(plant, name) if measurable(plant, "outlet", name) else None
    if kind == "unit_load":
        return unit_measure(plant.units[name]) if good_rate(plant, name) else None
    if kind in ("imported", "exported", "emitted"):
        return trade_measure(plant, name)
    if kind == "converted":
        first = next(iter(plant.file.conversions[name].makes))
        return conversion_measure(plant, name) if first in plant.file.utilities else None
    return MASS


def joined(plant: Plant, terms: tuple[Term, ...]) -> tuple[float | None, float | None]:
    """Density and ratio of heating values that all terms of a sum have in common, if they have one."""
    densities: set[float | None] = set()
    ratios: set[float | None] = set()
    trades = plant.trades()
    for name in (name for term in terms for name in term.names):
        feed = name.split(".")[0]
        item = plant.file.feeds.get(feed) or plant.file.side_streams.get(feed) or plant.file.outlets.get(name)
        written = item.density if item else None
        densities.add(convert(written, dims(mass=1, volume=-1)) if written else None)
        if name in trades:
            utility, kind = trades[name]
            ratios.add(getattr(plant.file.utilities[utility], kind)[name].lhv_over_hhv)
        elif name in plant.file.outlets:
            ratios.add(plant.file.outlets[name].lhv_over_hhv)
    return (densities.pop() if len(densities) == 1 else None), (ratios.pop() if len(ratios) == 1 else None)


def check_limit_units(
    plant: Plant,
    limits: Mapping[str, NamedLimit],
    ratios: Mapping[str, RatioLimit],
    document: Document,
    findings: Findings,
) -> None:
    """The terms of a limit (of a plant or a scenario) are counted alike, and its minimum and maximum with them."""
    for name, limit in limits.items():
        path = ("limits", name)
        measures = term_measures(plant, limit.sum)
        _one_measure(findings, document.place((*path, "sum")), f"limits.{name}.sum", measures)
        density, heat_ratio = joined(plant, limit.sum)
        basis = Basis(density, heat_ratio, hours=1.0, calendar_month=True)
        for key, written in (("min", limit.min), ("max", limit.max)):
            for value in written.values() if written and len(measures) == 1 else ():
                measure = next(iter(measures.values()))
                check_amount(findings, document.place((*path, key)), f"limits.{name}.{key}", value, measure, basis)
    for name, ratio in ratios.items():
        measures = term_measures(plant, (*ratio.of, *ratio.to))
        _one_measure(findings, document.place(("ratio_limits", name)), f"ratio_limits.{name}", measures)


def _one_measure(findings: Findings, place: Place, path: str, measures: Mapping[str, Measure]) -> None:
    if len(measures) > 1:
        message = f"its terms are counted in {' and '.join(measures)}: they must all be counted in one unit"
        findings.error(place, path, message)
