"""What a plant's yields and recovery say must add up: mass, hydrogen, carbon, heat.

A linear program takes whatever creates mass or heat, so a row that does not close decides the plan.
"""

from __future__ import annotations

from collections.abc import Iterator

from olefinlp.inputs.findings import Findings, Place
from olefinlp.inputs.plant import HEAT_PER_TONNE, Component, Mode, Plant, YieldRow
from olefinlp.inputs.plant_file import Feed
from olefinlp.inputs.plant_references import at
from olefinlp.inputs.units import Quantity, UnitError, convert, share

SUM_ERROR, SUM_WARNING = 0.005, 0.0005
RECOVERY_ERROR, RECOVERY_WARNING = 0.0005, 0.000001
RECOVERY_LOW, RECOVERY_HIGH = -1.0, 1.5
SLOPE_ERROR = 0.0001
ELEMENT_WARNING = 0.02
FORMULA_WARNING = 0.01
MAINLY = 0.5
HARDLY_LEFT = 0.05
# Common practice, no source: windows for warnings only.
COIL_OUTLET = {"thermal": (750.0, 900.0), "catalytic": (450.0, 700.0)}
_NOISE = 1e-9


def check_adding_up(plant: Plant, findings: Findings) -> None:
    """Mass, hydrogen, carbon and heat of components, yields, slopes, side streams and recovery."""
    for check in (
        check_components,
        check_yield_rows,
        check_side_stream_sums,
        check_elements,
        check_slope_rows,
        check_recovery_rows,
        check_reaction_heat,
        check_coil_outlet,
        check_recycle_counted_twice,
        check_nothing_left_to_recycle,
    ):
        check(plant, findings)


def share_or_none(quantity: Quantity | None) -> float | None:
    """A share, or None when it is not written or no share (which the unit checks say)."""
    try:
        return share(quantity) if quantity else None
    except UnitError:
        return None


def feed_heating_value(plant: Plant, feed: Feed) -> float | None:
    """Lower heating value of a feed, GJ per t: as written, else of the component it mainly is."""
    try:
        if feed.lower_heating_value:
            return convert(feed.lower_heating_value, HEAT_PER_TONNE)
    except UnitError:
        return None
    mainly = plant.components.get(feed.mainly or "")
    return mainly.lower_heating_value if mainly else None


def mode_yields(plant: Plant, mode: Mode) -> YieldRow | None:
    """The yield row that a mode uses, if all that it names is there."""
    group = plant.file.furnace_groups.get(mode.group)
    return plant.yields.get((group.yields, mode.feed, mode.severity)) if group else None


def _parts(plant: Plant, shares: dict[str, float]) -> Iterator[tuple[Component, float]]:
    """The known components of a row that are not zero."""
    return ((plant.components[name], value) for name, value in shares.items() if value and name in plant.components)


def _row_path(row: YieldRow) -> str:
    return f"yields.{row.table}.{row.feed}.{row.severity}"


def check_components(plant: Plant, findings: Findings) -> None:
    """No negative figures, and a molar mass and burnt CO2 that fit the formula."""
    for name, part in plant.components.items():
        for column in ("carbon_atoms", "hydrogen_atoms", "molar_mass", "lower_heating_value", "burnt_co2"):
            value = getattr(part, column)
            if value is not None and value < 0:
                findings.error(at(part.place, column), f"components.{name}", f"{value:g} is negative")
        if part.carbon_atoms is not None and part.hydrogen_atoms is not None:
            _check_formula(part, "molar_mass", 12.011 * part.carbon_atoms + 1.008 * part.hydrogen_atoms, findings)
            _check_formula(part, "burnt_co2", 44.009 / 12.011 * (part.carbon_share or 0.0), findings)


def _check_formula(part: Component, column: str, from_formula: float, findings: Findings) -> None:
    written = getattr(part, column)
    if written is not None and abs(written - from_formula) > FORMULA_WARNING * from_formula + _NOISE:
        message = f"{written:g} does not fit the formula, which gives {from_formula:.5g}"
        hint = "leave the atoms blank where it holds other elements than carbon and hydrogen"
        findings.warn(at(part.place, column), f"components.{part.name}", message, hint)


def _check_sum(total: float, what: str, place: Place, path: str, findings: Findings) -> None:
    """Shares must sum to one: error beyond 0.5 %, warning beyond 0.05 %."""
    away = abs(total - 1.0)
    found = findings.error if away > SUM_ERROR + _NOISE else findings.warn
    if away > SUM_WARNING + _NOISE:
        allowed = "99.5 to 100.5" if found == findings.error else "99.95 to 100.05"
        message = f"{what} to {100 * total:.2f} %, allowed is {allowed} %"
        found(place, path, message, "mend the numbers: what is missing or too much is never closed silently")


def check_yield_rows(plant: Plant, findings: Findings) -> None:
    """Yields are not negative and sum to the tonne charged: the plan would pick the row that makes mass."""
    for row in plant.yields.values():
        path = _row_path(row)
        for component, value in row.shares.items():
            if value < 0:
                findings.error(at(row.place, component), path, f"the yield {row.written[component]} is negative")
        _check_sum(sum(row.shares.values()), "the yields sum", row.place, path, findings)


def check_side_stream_sums(plant: Plant, findings: Findings) -> None:
    """The composition of a side stream is not negative and sums to one tonne."""
    for name, stream in plant.file.side_streams.items():
        path = ("side_streams", name, "composition")
        shares = {component: share_or_none(value) for component, value in stream.composition.items()}
        if None in shares.values():
            continue
        for component, value in shares.items():
            if value is not None and value < 0:
                place = plant.place(*path, component)
                findings.error(place, ".".join((*path, component)), f"{stream.composition[component]} is negative")
        total = sum(value or 0.0 for value in shares.values())
        _check_sum(total, "the composition sums", plant.place(*path), ".".join(path), findings)


def check_elements(plant: Plant, findings: Findings) -> None:
    """Hydrogen and carbon of a yield row are those of its feed: shows a row copied from another feed."""
    for row in plant.yields.values():
        feed = plant.file.feeds.get(row.feed)
        hydrogen = share_or_none(feed.hydrogen) if feed else None
        if feed is None or hydrogen is None:
            continue
        carbon = share_or_none(feed.carbon) if feed.carbon else 1.0 - hydrogen
        _check_element(plant, row, "hydrogen", hydrogen, findings)
        _check_element(plant, row, "carbon", carbon, findings)


def _check_element(plant: Plant, row: YieldRow, element: str, of_feed: float | None, findings: Findings) -> None:
    parts = [(getattr(part, f"{element}_share"), value) for part, value in _parts(plant, row.shares)]
    if not of_feed or of_feed < 0 or any(held is None for held, _ in parts):
        return
    of_yields = sum(held * value for held, value in parts)
    apart = abs(of_yields / of_feed - 1.0)
    if apart > ELEMENT_WARNING:
        message = (
            f"the yields hold {100 * of_yields:.2f} wt% {element}, the feed {100 * of_feed:.2f} wt%: "
            f"{100 * apart:.1f} % apart, allowed is 2 %"
        )
        findings.warn(row.place, _row_path(row), message, f"is it the row of another feed, or is the feed's {element} wrong?")


def check_slope_rows(plant: Plant, findings: Findings) -> None:
    """A slope moves mass between components and makes none; its reference lies where it is valid."""
    for row in plant.slopes:
        path, total = f"quality_slopes.{row.feed}.{row.property}", sum(row.shares.values())
        if abs(total) > SLOPE_ERROR + _NOISE:
            message = f"the slopes sum to {100 * total:.4f} wt%, allowed is -0.01 to 0.01 wt%"
            findings.error(row.place, path, message, "a gain of one component is a loss of others")
        if not row.valid_min <= row.reference <= row.valid_max:
            message = f"the reference {row.reference:g} is outside the valid range {row.valid_min:g} to {row.valid_max:g}"
            findings.error(at(row.place, "reference"), path, message)


def check_recovery_rows(plant: Plant, findings: Findings) -> None:
    """Each component leaves whole: its row sums to 1, with hydrogenation as negative hydrogen."""
    for name, row in plant.recovery.items():
        place, path, total = plant.recovery_places[name], f"recovery.{name}", sum(row.values())
        for cut, value in row.items():
            if not RECOVERY_LOW <= value <= RECOVERY_HIGH:
                findings.error(at(place, cut), path, f"{value:g} is outside {RECOVERY_LOW:g} to {RECOVERY_HIGH:g}")
        if not any(row.values()):
            findings.error(place, path, f"`{name}` goes to no cut", "say where it leaves: the row sums to 1")
        elif abs(total - 1.0) > RECOVERY_WARNING + _NOISE:
            found = findings.error if abs(total - 1.0) > RECOVERY_ERROR + _NOISE else findings.warn
            taken = "negative entries (hydrogenation) are taken only in a row that sums to 1"
            found(place, path, f"the row sums to {total:.6g}, it must be 1", taken if min(row.values()) < 0 else "")


def check_reaction_heat(plant: Plant, findings: Findings) -> None:
    """A thermal furnace cannot fire less than its reaction takes up.

    reaction heat at 298 K [GJ/t LHV] = sum of yield x heating value of the products - heating value of the feed
    """
    for mode in plant.modes:
        group, row, feed = plant.file.furnace_groups.get(mode.group), mode_yields(plant, mode), plant.file.feeds.get(mode.feed)
        if mode.fired_heat is None or row is None or feed is None or group is None or group.kind != "thermal":
            continue
        of_feed = feed_heating_value(plant, feed)
        parts = [(part.lower_heating_value, value) for part, value in _parts(plant, row.shares)]
        if of_feed is None or any(heat is None for heat, _ in parts):
            continue
        needed = sum((heat or 0.0) * value for heat, value in parts) - of_feed
        if mode.fired_heat < needed - _NOISE:
            message = (
                f"the fired heat is {mode.fired_heat:.3g} GJ/t LHV, the reaction heat of these yields is {needed:.3g} GJ/t LHV"
            )
            hint = "check the unit of fired_heat, the yields and the feed's heating value"
            findings.error(at(mode.place, "fired_heat"), f"modes.{mode.name}", message, hint)


def check_coil_outlet(plant: Plant, findings: Findings) -> None:
    """A coil outlet far from common practice is mostly a wrong unit."""
    for mode in plant.modes:
        group = plant.file.furnace_groups.get(mode.group)
        low, high = COIL_OUTLET.get(group.kind if group else "", (-300.0, 3000.0))
        if group and mode.coil_outlet is not None and not low <= mode.coil_outlet <= high:
            message = f"a coil outlet of {mode.coil_outlet:.0f} degC is unusual, common practice is {low:.0f} to {high:.0f} degC"
            findings.warn(at(mode.place, "coil_outlet"), f"modes.{mode.name}", message, f"the group's kind is {group.kind}")


def recycles_of(plant: Plant, component: str | None) -> list[str]:
    """Recycle feeds of a cut that takes at least half of a component."""
    row = plant.recovery.get(component or "", {})
    return [name for name, cut in plant.recycle_feeds().items() if row.get(cut, 0.0) >= MAINLY]


def check_recycle_counted_twice(plant: Plant, findings: Findings) -> None:
    """Yields to extinction have the recycle inside: a recycle feed beside them cracks the same tonne again."""
    for mode in plant.modes:
        group, feed = plant.file.furnace_groups.get(mode.group), plant.file.feeds.get(mode.feed)
        table = plant.file.yields.get(group.yields) if group else None
        if group is None or feed is None or feed.recycle_of or table is None or table.basis != "ultimate":
            continue
        for recycle in recycles_of(plant, feed.mainly):
            message = f"`{mode.feed}` is cracked with the ultimate yields `{group.yields}`, which hold its recycle already"
            hint = "take this recycle feed away, or give yields of one pass (basis: once_through)"
            findings.error(plant.place("feeds", recycle, "recycle_of"), f"feeds.{recycle}.recycle_of", message, hint)


def check_nothing_left_to_recycle(plant: Plant, findings: Findings) -> None:
    """Yields of one pass leave much of the feed unconverted: a row that does not is probably to extinction."""
    for row in plant.yields.values():
        table, feed = plant.file.yields.get(row.table), plant.file.feeds.get(row.feed)
        if table is None or table.basis != "once_through" or feed is None or not feed.mainly:
            continue
        left = row.shares.get(feed.mainly, 0.0)
        recycles = recycles_of(plant, feed.mainly)
        if left < HARDLY_LEFT and recycles:
            message = f"only {100 * left:.2f} wt% {feed.mainly} is left, although `{recycles[0]}` recycles it"
            hint = f"are these yields to extinction? then the basis of `{row.table}` is ultimate, without the recycle feed"
            findings.warn(at(row.place, feed.mainly), _row_path(row), message, hint)
