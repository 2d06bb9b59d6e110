"""Buying: sources and their steps, parcels of one quality, take-or-pay, tanks."""

from __future__ import annotations

import math
from collections.abc import Iterator

from olefinlp.inputs.case import Reader, SourceData, StockData
from olefinlp.inputs.findings import path_text
from olefinlp.inputs.measures import MASS, Measure
from olefinlp.inputs.periods import Period
from olefinlp.inputs.prices import PriceItem
from olefinlp.inputs.scenario import Scenario
from olefinlp.inputs.scenario_file import EndAtLeast, EndValue, Source, Stock, Tier
from olefinlp.inputs.units import Basis, Quantity, UnitError, convert, dims, share
from olefinlp.inputs.yaml_files import Path_

DENSITY = dims(mass=1, volume=-1)
HOLDING = Measure("t held", dims(mass=1))


def density_of(quantity: Quantity | None) -> float | None:
    """A density in t/m3; its unit was checked with the plant."""
    return convert(quantity, DENSITY) if quantity else None


def sources(scenario: Scenario) -> Iterator[tuple[str, str, str, Source]]:
    """Every source offered: (feeds | side_streams, feed, source name, what is written)."""
    for kind in ("feeds", "side_streams"):
        for feed, offers in getattr(scenario.file, kind).items():
            for name, source in offers.items():
                yield kind, feed, name, source


def feed_density(scenario: Scenario, kind: str, feed: str) -> float | None:
    """Density of a feed or side stream, t/m3."""
    return density_of(getattr(scenario.plant.file, kind)[feed].density)


def price_items(scenario: Scenario) -> Iterator[PriceItem]:
    """The prices that buying and holding need, and the indexes that prices may lean on."""
    for kind, feed, name, source in sources(scenario):
        density = feed_density(scenario, kind, feed)
        path: Path_ = (kind, feed, name)
        for index, tier in enumerate(source.tiers):
            yield PriceItem((*path, "tiers", index, "price"), MASS, tier.price, source.basis or "", density)
        if not source.tiers:
            yield PriceItem((*path, "price"), MASS, source.price, source.basis or "", density)
    for item, stock in scenario.file.stocks.items():
        yield PriceItem(("stocks", item, "holding"), HOLDING, stock.holding)


def read_supply(reader: Reader) -> None:
    """Sources, parcels and tanks of all months."""
    case, scenario = reader.case, reader.scenario
    for kind, feed, name, source in sources(scenario):
        label = f"{feed}.{name}"
        tiers = tuple(range(1, max(1, len(source.tiers)) + 1))
        case.sources[label] = SourceData(label, kind, feed, name, tiers, source.take_or_pay is not None)
        for period in scenario.periods:
            basis = scenario.basis(period, feed_density(scenario, kind, feed))
            _read_source(reader, label, source, period, basis)
    _read_parcels(reader)
    for item, stock in scenario.file.stocks.items():
        _read_stock(reader, item, stock)


def _read_source(reader: Reader, label: str, source: Source, period: Period, basis: Basis) -> None:
    case, data, month = reader.case, reader.case.sources[label], period.name
    path: Path_ = (data.kind, data.feed, data.name)
    places = (reader.scenario.document.place((*path, "min")), reader.scenario.document.place((*path, "max")))
    low = reader.amount(source.min, period, (*path, "min"), MASS, basis)
    high = reader.amount(source.max, period, (*path, "max"), MASS, basis)
    sizes, end = steps_of(reader, source.tiers, period, path, MASS, basis)
    for tier, size in zip(data.tiers, sizes, strict=True):
        case.tier_size[label, tier, month] = size
    if source.tiers:
        high = end
        places = (places[0], reader.scenario.document.place((*path, "tiers")))
    words = f"{data.feed} {data.name} bought"
    reader.limit("purchase", (label, month), words, (low, high), month=month, places=places)
    if source.take_or_pay and source.shortfall_pays:
        quantity = reader.amount(source.take_or_pay, period, (*path, "take_or_pay"), MASS, basis)
        pays = reader.of_month(source.shortfall_pays, period, (*path, "shortfall_pays"))
        place = reader.scenario.document.place((*path, "take_or_pay"))
        try:
            case.shortfall_pays[label, month] = share(pays) if pays else 0.0
            reader.note(path_text((*path, "shortfall_pays")), month, str(pays), share(pays), "fraction of the price", place)
        except UnitError as error:
            reader.findings.error(place, path_text((*path, "shortfall_pays")), str(error), error.hint)
        words = f"{data.feed} {data.name} take-or-pay"
        reader.limit("take_or_pay", (label, month), words, (quantity, None), month=month, places=(place, None))


def steps_of(
    reader: Reader, tiers: tuple[Tier, ...], period: Period, path: Path_, measure: Measure, basis: Basis
) -> tuple[list[float], float | None]:
    """Sizes of the steps in units of the plan, from their cumulative ends, and the end of the last.

    The last step itself is left open: its end is the limit on the whole, so that one row carries
    the shadow price.
    """
    sizes: list[float] = []
    start, end = 0.0, None
    for index, tier in enumerate(tiers):
        here: Path_ = (*path, "tiers", index, "up_to")
        end = reader.amount(tier.up_to, period, here, measure, basis)
        place = reader.scenario.document.place(here)
        if end is None:
            if index < len(tiers) - 1:
                reader.findings.error(place, path_text(here), "only the last step may be unlimited")
            break
        if end <= start:
            reader.findings.error(place, path_text(here), "each step must end above the one before", "`up_to` counts from zero")
        sizes.append(end - start)
        start = end
    return [*sizes[: len(tiers) - 1], *[math.inf] * (max(1, len(tiers)) - len(sizes[: len(tiers) - 1]))], end


def _parcel(reader: Reader, feed: str, quality: dict[str, float]) -> str:
    """The parcel of a feed with these properties; the feed's own name for reference quality."""
    slopes = {s.property: s for s in reader.plant.slopes if s.feed == feed}
    own = {p: v for p, v in sorted(quality.items()) if p in slopes and v != slopes[p].reference}
    name = feed + "".join(f" ({p} {v:g})" for p, v in own.items())
    reader.case.qualities[name] = own
    return name


def _quality(reader: Reader, feed: str, written: dict[str, float], path: Path_) -> str:
    """The parcel of a written quality, checked against the range in which slopes hold."""
    slopes = {s.property: s for s in reader.plant.slopes if s.feed == feed}
    for name, value in written.items():
        here: Path_ = (*path, name)
        if not reader.known(name, slopes, here, f"a property of {feed} with a slope in the plant"):
            continue
        low, high = slopes[name].valid_min, slopes[name].valid_max
        if not low <= value <= high:
            place = reader.scenario.document.place(here)
            text = f"{value:g} is outside {low:g} to {high:g}, where the slopes hold"
            reader.findings.error(place, path_text(here), text, f"slopes: {slopes[name].place}")
    return _parcel(reader, feed, written)


def _read_parcels(reader: Reader) -> None:
    case, scenario = reader.case, reader.scenario
    found: dict[str, list[str]] = {}
    for kind, feed, name, source in sources(scenario):
        path: Path_ = (kind, feed, name, "quality")
        for period in scenario.periods if kind == "feeds" else ():
            values = {p: reader.of_month(v, period, (*path, p)) for p, v in source.quality.items()}
            written = {p: float(v) for p, v in values.items() if v is not None}
            parcel = _quality(reader, feed, written, path)
            case.parcel_of[f"{feed}.{name}", period.name] = parcel
            for prop, value in written.items():
                place = scenario.document.place((*path, prop))
                reader.note(path_text((*path, prop)), period.name, f"{value:g}", value, "", place)
            if parcel not in found.setdefault(feed, []):
                found[feed].append(parcel)
    for item, stock in scenario.file.stocks.items():
        if item in scenario.plant.file.feeds:
            parcel = _quality(reader, item, dict(stock.quality), ("stocks", item, "quality"))
            if parcel not in found.setdefault(item, []):
                found[item].append(parcel)
    for feed in scenario.plant.recycle_feeds():
        found[feed] = [feed]
        case.qualities[feed] = {}
    case.parcels = {feed: tuple(parcels) for feed, parcels in found.items()}


def _read_stock(reader: Reader, item: str, stock: Stock) -> None:
    case, scenario = reader.case, reader.scenario
    path: Path_ = ("stocks", item)
    first, last = scenario.periods[0], scenario.periods[-1]
    is_feed = item in scenario.plant.file.feeds
    kind = scenario.plant.file.feeds[item] if is_feed else scenario.plant.file.cuts[item]
    basis = Basis(density=density_of(kind.density))
    opening = reader.amount(stock.opening, first, (*path, "opening"), MASS, basis) or 0.0
    parcel = _parcel(reader, item, dict(stock.quality)) if is_feed else item
    case.opening[parcel] = opening
    for period in scenario.periods:
        month = period.name
        low = reader.amount(stock.min, period, (*path, "min"), MASS, basis)
        high = reader.amount(stock.max, period, (*path, "max"), MASS, basis)
        places = (scenario.document.place((*path, "min")), scenario.document.place((*path, "max")))
        reader.limit("stock", (item, month), f"{item} closing stock", (low, high), month=month, places=places)
    place = scenario.document.place((*path, "end"))
    end, value = opening, 0.0
    if isinstance(stock.end, EndAtLeast):
        end = reader.amount(stock.end.at_least, last, (*path, "end", "at_least"), MASS, basis) or 0.0
    elif isinstance(stock.end, EndValue):
        end, value = 0.0, _end_value(reader, stock.end.value, (*path, "end", "value"), basis.density)
    words = f"{item} stock at the end"
    reader.limit("end_stock", (item,), words, (end, None), month=last.name, places=(place, None))
    parcels = case.parcels.get(item, ()) if is_feed else ()
    case.stocks[item] = StockData(item, is_feed, parcels, value)


def _end_value(reader: Reader, quantity: Quantity, path: Path_, density: float | None) -> float:
    place = reader.scenario.document.place(path)
    basis = Basis(density=density, currency=reader.scenario.currency, rates=reader.scenario.rates)
    try:
        value = convert(quantity, MASS.per, basis)
    except UnitError as error:
        reader.findings.error(place, path_text(path), str(error), error.hint)
        return 0.0
    reader.note(path_text(path), reader.scenario.periods[-1].name, quantity.text, value, f"{reader.scenario.currency}/t", place)
    return value
