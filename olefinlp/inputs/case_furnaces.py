"""Cracking: which modes can occur, their hours and decokes, yields of each parcel."""

from __future__ import annotations

import itertools

from olefinlp.inputs.case import Reader
from olefinlp.inputs.findings import path_text
from olefinlp.inputs.measures import Measure
from olefinlp.inputs.plant import Mode
from olefinlp.inputs.scenario_file import Outage
from olefinlp.inputs.units import UnitError, convert, dims, share

HOURS = Measure("h", dims(time=1))


def read_furnaces(reader: Reader) -> None:
    """Modes of the feeds that are there this time, their hours, and the hours of each group."""
    case, plant = reader.case, reader.plant
    case.loss = share(plant.file.loss.share)
    reader.note("loss.share", "", plant.file.loss.share.text, case.loss, "fraction", plant.place("loss", "share"))
    modes = [mode for mode in plant.modes if mode.feed in case.parcels]
    case.modes = tuple(mode.name for mode in modes)
    for mode in modes:
        _read_mode(reader, mode)
        for parcel in case.parcels[mode.feed]:
            case.yields[mode.name, parcel] = _yields(reader, mode, parcel)
    there = {(feed, parcel): _months_there(reader, feed, parcel) for feed, parcels in case.parcels.items() for parcel in parcels}
    case.charges = tuple(
        (mode.name, parcel, month)
        for mode in modes
        for month in case.months
        for parcel in case.parcels[mode.feed]
        if month in there[mode.feed, parcel]
    )
    for group in plant.file.furnace_groups:
        _read_hours(reader, group)
    _read_crews(reader)


def _read_mode(reader: Reader, mode: Mode) -> None:
    case, name = reader.case, mode.name
    case.mode_group[name], case.mode_feed[name], case.mode_severity[name] = mode.key
    share_of_run = mode.decoke / mode.run_length if mode.run_length else 0.0
    hours = 1000 / mode.charge if mode.charge else 0.0
    case.hours_per_kt[name] = hours * (1 + share_of_run)
    case.decoke_hours_per_kt[name] = hours * share_of_run
    case.decokes_per_kt[name] = hours / mode.run_length if mode.run_length else 0.0
    numbers = {
        "charge": (mode.charge, "t/h"),
        "run_length": (mode.run_length, "h"),
        "decoke": (mode.decoke, "h"),
        "fired_heat": (mode.fired_heat, "GJ LHV/t"),
    }
    for column, (value, unit) in numbers.items():
        if value is not None:
            reader.note(f"modes.{name}.{column}", "", f"{value:g}", value, unit, mode.place)


def _yields(reader: Reader, mode: Mode, parcel: str) -> dict[str, float]:
    """Yields of a parcel: the base row plus slope times (property − reference).

    A quality whose slopes would take a yield below zero is refused, never cut off in silence.
    """
    plant, quality = reader.plant, reader.case.qualities[parcel]
    table = plant.file.furnace_groups[mode.group].yields
    row = plant.yields[table, mode.feed, mode.severity]
    shares = dict(row.shares)
    for slope in plant.slopes:
        if slope.table == table and slope.feed == mode.feed and slope.property in quality:
            step = quality[slope.property] - slope.reference
            for component, change in slope.shares.items():
                shares[component] += step * change
    for component, value in shares.items():
        if value < -1e-6:
            text = f"with this quality the yield of {component} at {mode.severity} severity would be {100 * value:.3f} wt%"
            reader.findings.error(row.place, f"yields.{parcel}", text, "the slopes reach too far: check them or the quality")
    if not quality:
        for component, written in row.written.items():
            reader.note(
                f"yields.{table}.{mode.feed}.{mode.severity}.{component}", "", written, shares[component], "t/t", row.place
            )
    return shares


def _months_there(reader: Reader, feed: str, parcel: str) -> frozenset[str]:
    """Months in which a parcel can be there: bought in it, or before it into a tank, or a recycle."""
    case = reader.case
    stocked = feed in reader.scenario.file.stocks
    if feed in reader.plant.recycle_feeds() or (stocked and parcel in case.opening):
        return frozenset(case.months)
    bought = {month for (_, month), own in case.parcel_of.items() if own == parcel}
    if not stocked:
        return frozenset(bought)
    return frozenset(itertools.dropwhile(lambda month: month not in bought, case.months))


def _read_hours(reader: Reader, group: str) -> None:
    plant, scenario = reader.plant, reader.scenario
    written = plant.file.furnace_groups[group]
    if written.furnaces == "unlimited":
        return
    place = plant.place("furnace_groups", group)
    loss = share(written.unplanned_loss)
    reader.note(f"furnace_groups.{group}.furnaces", "", str(written.furnaces), float(written.furnaces), "furnaces", place)
    reader.note(f"furnace_groups.{group}.unplanned_loss", "", written.unplanned_loss.text, loss, "fraction", place)
    outages: dict[str, list[tuple[int, Outage]]] = {}
    for index, outage in enumerate(scenario.file.outages):
        if outage.group == group:
            outages.setdefault(outage.month, []).append((index, outage))
    for period in scenario.periods:
        lost, reasons = 0.0, []
        for index, outage in outages.get(period.name, ()):
            path = ("outages", index, "hours")
            place = scenario.document.place(path)
            try:
                hours = convert(outage.hours, HOURS.dimensions)
            except UnitError as error:
                reader.findings.error(place, path_text(path), str(error), error.hint)
                continue
            lost += hours
            reasons.append(outage.reason)
            reader.note(path_text(path), period.name, outage.hours.text, hours, "h", place, outage.reason)
        available = (written.furnaces * period.hours - lost) * (1 - loss)
        if available < 0:
            text = f"{lost:g} h are lost, but {group} has only {written.furnaces * period.hours:g} furnace-hours in {period.name}"
            reader.findings.error(place, "outages", text)
        reader.limit(
            "furnace_hours",
            (group, period.name),
            f"{group} hours",
            (None, available),
            month=period.name,
            unit="h",
            worth=("furnace-hour", 1000.0),
            places=(None, place),
            reason="; ".join(reasons),
        )


def _read_crews(reader: Reader) -> None:
    crews = reader.plant.file.decoke_crews.crews
    if crews == "unlimited" or not any(reader.case.decoke_hours_per_kt.values()):
        return
    place = reader.plant.place("decoke_crews", "crews")
    reader.note("decoke_crews.crews", "", str(crews), float(crews), "at once", place)
    for period in reader.scenario.periods:
        reader.limit(
            "decoke_crew_hours",
            (period.name,),
            "decoke crew hours",
            (None, crews * period.hours),
            month=period.name,
            unit="h",
            worth=("crew-hour", 1000.0),
            places=(None, place),
        )
