"""What a plant must be before it can be planned: every check of it, and those of furnaces, cuts and outlets.

Names, sums and units are checked in the modules beside this one. A check looks at one thing and adds
what it finds; all are run whatever the others found, so each passes over what is not known.
"""

from __future__ import annotations

from collections.abc import Iterable

from olefinlp.inputs.fields import Cap
from olefinlp.inputs.findings import Findings, near_name
from olefinlp.inputs.plant import Mode, Plant
from olefinlp.inputs.plant_file import Outlet
from olefinlp.inputs.plant_references import at, check_references
from olefinlp.inputs.plant_sums import check_sums
from olefinlp.inputs.plant_units import check_units
from olefinlp.inputs.plant_yields import check_adding_up, mode_yields
from olefinlp.inputs.price_windows import check_price_windows


def check_plant(plant: Plant, findings: Findings) -> None:
    """Everything that can be said of a plant before it is planned."""
    for check in (
        check_references,
        check_units,
        check_sums,
        check_price_windows,
        check_adding_up,
        check_mode_has_yields,
        check_yields_have_mode,
        check_feed_has_mode,
        check_group_has_mode,
        check_furnace_counts,
        check_mode_numbers,
        check_mode_hours,
        check_mode_columns_filled,
        check_fired_heat_counted,
        check_cut_leaves,
        check_content_cut_is_sold_whole,
        check_content_is_counted_once,
        check_heat_cut,
        check_component_data_of_cut_uses,
        check_own_use_is_used,
        check_flare_is_limited,
        check_utility_closes,
    ):
        check(plant, findings)


def check_mode_has_yields(plant: Plant, findings: Findings) -> None:
    """A mode without a yield row would make nothing of its feed."""
    for mode in plant.modes:
        group = plant.file.furnace_groups.get(mode.group)
        if group is None or group.yields not in plant.file.yields or mode.feed not in plant.file.feeds or not mode.severity:
            continue
        if mode_yields(plant, mode) is None:
            severities = [key[2] for key in plant.yields if key[:2] == (group.yields, mode.feed)]
            message = f"the yields table `{group.yields}` has no row of `{mode.feed}` at severity `{mode.severity}`"
            hint = near_name(mode.severity, severities) or "add the row, or take the mode away"
            findings.error(at(mode.place, "severity"), f"modes.{mode.name}", message, hint)


def check_yields_have_mode(plant: Plant, findings: Findings) -> None:
    """A yield row that no mode uses is mostly a mode forgotten."""
    used = {(row.table, row.feed, row.severity) for mode in plant.modes if (row := mode_yields(plant, mode))}
    for key, row in plant.yields.items():
        if key not in used:
            path = f"yields.{row.table}.{row.feed}.{row.severity}"
            findings.warn(row.place, path, "no mode uses these yields", f"add its mode to {plant.file.modes}, or delete it")


def check_feed_has_mode(plant: Plant, findings: Findings) -> None:
    """A feed without a mode can be bought, but never cracked."""
    cracked = {mode.feed for mode in plant.modes}
    for name in plant.file.feeds:
        if name not in cracked:
            message = "no mode cracks this feed"
            findings.warn(plant.place("feeds", name), f"feeds.{name}", message, f"add its modes to {plant.file.modes}")


def check_group_has_mode(plant: Plant, findings: Findings) -> None:
    """A furnace group without a mode stands idle."""
    groups = {mode.group for mode in plant.modes}
    for name in plant.file.furnace_groups:
        if name not in groups:
            place = plant.place("furnace_groups", name)
            findings.warn(place, f"furnace_groups.{name}", "no mode is in this group", f"add its modes to {plant.file.modes}")


def check_furnace_counts(plant: Plant, findings: Findings) -> None:
    """There are no negative furnaces, and decoking takes at least one crew."""
    for name, group in plant.file.furnace_groups.items():
        if group.furnaces != "unlimited" and group.furnaces < 0:
            path = ("furnace_groups", name, "furnaces")
            findings.error(plant.place(*path), ".".join(path), f"{group.furnaces} furnaces, allowed is 0 or more")
    crews = plant.file.decoke_crews.crews
    if crews != "unlimited" and crews < 1:
        message = f"{crews} crews, allowed is 1 or more"
        findings.error(plant.place("decoke_crews", "crews"), "decoke_crews.crews", message, "or write `unlimited`")


def check_mode_numbers(plant: Plant, findings: Findings) -> None:
    """A severity has a name, and nothing in a mode is negative."""
    for mode in plant.modes:
        path = f"modes.{mode.name}"
        if not mode.severity:
            findings.error(at(mode.place, "severity"), path, "the severity is blank", "write for example `medium`")
        for column in ("charge", "run_length", "decoke", "fired_heat"):
            if (getattr(mode, column) or 0.0) < 0:
                findings.error(at(mode.place, column), path, f"the {column} is negative")
        amounts = {**mode.utilities, **{f"load {name}": load for name, load in mode.loads.items()}}
        for name, amount in amounts.items():
            if amount.text.startswith("-"):
                hint = "" if name.startswith("load ") else "`uses` and `makes` say the direction"
                findings.error(mode.place, path, f"`{amount}` of {name} is negative", hint)


def check_mode_hours(plant: Plant, findings: Findings) -> None:
    """Furnace hours come from charge, run length and decoke: what counts hours needs them."""
    for mode in plant.modes:
        group = plant.file.furnace_groups.get(mode.group)
        path = f"modes.{mode.name}"
        if mode.charge == 0 or (mode.charge is None and group and group.furnaces != "unlimited"):
            found = "blank" if mode.charge is None else "0"
            hint = "only a group with `furnaces: unlimited` goes without it" if mode.charge is None else ""
            findings.error(at(mode.place, "charge"), path, f"the charge is {found}, it must be above 0", hint)
        _check_decoke(mode, path, findings)


def _check_decoke(mode: Mode, path: str, findings: Findings) -> None:
    hint = "write both, or leave both blank where nothing is decoked"
    if mode.run_length == 0:
        findings.error(at(mode.place, "run_length"), path, "the run length is 0, it must be above 0", hint)
    elif mode.run_length and not mode.decoke:
        findings.error(at(mode.place, "decoke"), path, "has a run length but no decoke hours", hint)
    elif mode.decoke and mode.run_length is None:
        findings.error(at(mode.place, "run_length"), path, "has decoke hours but no run length", hint)


def check_mode_columns_filled(plant: Plant, findings: Findings) -> None:
    """A blank cell under what a mode uses, makes or loads would silently count as none."""
    utilities = {name for mode in plant.modes for name in mode.utilities}
    loads = {name for mode in plant.modes for name in mode.loads}
    for mode in plant.modes:
        blank = [*(utilities - mode.utilities.keys()), *(f"load {name}" for name in loads - mode.loads.keys())]
        for name in sorted(blank):
            findings.error(mode.place, f"modes.{mode.name}", f"the cell of {name} is blank", "write 0 where there is none")


def check_fired_heat_counted(plant: Plant, findings: Findings) -> None:
    """Fired heat and the fuel that carries it belong together, else the firing is forgotten."""
    for mode in plant.modes:
        group = plant.file.furnace_groups.get(mode.group)
        place, path = at(mode.place, "fired_heat"), f"modes.{mode.name}"
        if group is None:
            continue
        if group.fired_with and mode.fired_heat is None:
            message = f"the fired heat is blank, but {mode.group} is fired with {group.fired_with}"
            findings.error(place, path, message, "write 0 where nothing is fired")
        elif mode.fired_heat and not group.fired_with:
            message = f"the fired heat is written, but {mode.group} is fired with nothing: it would cost no fuel"
            findings.error(place, path, message, f"write `fired_with:` for furnace_groups.{mode.group}")
    for name, group in plant.file.furnace_groups.items():
        utility = plant.file.utilities.get(group.fired_with or "")
        if utility and utility.measured_in != "heat":
            path = f"furnace_groups.{name}.fired_with"
            message = f"`{group.fired_with}` is measured in {utility.measured_in}, fired heat needs a utility measured in heat"
            findings.error(plant.place("furnace_groups", name, "fired_with"), path, message)


def outlets_of(plant: Plant, cut: str) -> dict[str, Outlet]:
    """The outlets that take a cut, alone or in a blend."""
    return {name: outlet for name, outlet in plant.file.outlets.items() if cut in outlet.from_}


def components_into(plant: Plant, cut: str) -> dict[str, float]:
    """The known components of which some goes into a cut (or is taken from it)."""
    return {name: row[cut] for name, row in plant.recovery.items() if row.get(cut) and name in plant.components}


def check_cut_leaves(plant: Plant, findings: Findings) -> None:
    """Every cut is fully disposed of, so each needs a way out that is open."""
    cracked = {mode.feed for mode in plant.modes}
    for cut in plant.file.cuts:
        recycles = [name for name, of in plant.recycle_feeds().items() if of == cut]
        place, path = plant.place("cuts", cut), f"cuts.{cut}"
        if outlets_of(plant, cut) or cracked.intersection(recycles):
            continue
        if recycles:
            message = f"leaves only as {', '.join(recycles)}, which no mode cracks"
            findings.error(place, path, message, f"add a mode to {plant.file.modes}, or an outlet")
        else:
            message = "has no way out: no outlet takes it and no feed is a recycle of it"
            findings.error(place, path, message, "add an outlet (sale, own_use or flare), or a feed with `recycle_of:`")


def check_content_cut_is_sold_whole(plant: Plant, findings: Findings) -> None:
    """Its content is valued as a whole: any other exit would need content times tonnes, which is not linear."""
    for cut, written in plant.file.cuts.items():
        if written.valued_by != "content":
            continue
        for name, outlet in outlets_of(plant, cut).items():
            path = f"outlets.{name}"
            if outlet.to != "sale":
                message = f"`{cut}` is valued by content and can only be sold, not go to {outlet.to}"
                findings.error(plant.place("outlets", name, "to"), f"{path}.to", message, f"or value {cut} by price")
            if len(outlet.from_) > 1:
                message = f"`{cut}` is valued by content and cannot be blended"
                findings.error(plant.place("outlets", name, "from"), f"{path}.from", message, f"or value {cut} by price")
        _refuse_recycle(plant, cut, "is valued by content", findings)


def _refuse_recycle(plant: Plant, cut: str, why: str, findings: Findings) -> None:
    for name, of in plant.recycle_feeds().items():
        if of == cut:
            path = f"feeds.{name}.recycle_of"
            findings.error(plant.place("feeds", name, "recycle_of"), path, f"`{cut}` {why} and cannot be recycled")


def check_content_is_counted_once(plant: Plant, findings: Findings) -> None:
    """Each component of a cut valued by content is paid for in one item, neither none nor two."""
    for cut, written in plant.file.cuts.items():
        path, place = f"cuts.{cut}.content_items", plant.place("cuts", cut, "content_items")
        inside = components_into(plant, cut)
        items = {c: [item for item, names in written.content_items.items() if c in names] for c in inside}
        for component, of in items.items() if written.valued_by == "content" else ():
            if not of:
                findings.error(place, path, f"`{component}` goes into {cut} but is in no content item", "add it to one")
            elif len(of) > 1:
                findings.error(place, path, f"`{component}` is in several content items: {', '.join(of)}", "keep one")
        for item, names in written.content_items.items():
            for component in names:
                if component in plant.components and component not in inside:
                    here = plant.place("cuts", cut, "content_items", item)
                    findings.warn(here, f"{path}.{item}", f"`{component}` never goes into {cut} by {plant.file.recovery}")


def check_heat_cut(plant: Plant, findings: Findings) -> None:
    """A cut balanced as heat has a heating value and leaves alone, never as tonnes of a feed."""
    for cut, written in plant.file.cuts.items():
        if written.balanced_as != "heat":
            continue
        _need(plant, cut, "lower_heating_value", f"`{cut}` is balanced as heat", components_into(plant, cut), findings)
        for name, outlet in outlets_of(plant, cut).items():
            if len(outlet.from_) > 1:
                message = f"`{cut}` is balanced as heat and cannot be blended"
                findings.error(plant.place("outlets", name, "from"), f"outlets.{name}.from", message)
        _refuse_recycle(plant, cut, "is balanced as heat", findings)


def _need(plant: Plant, cut: str, column: str, why: str, components: Iterable[str], findings: Findings) -> None:
    """The components of a cut have a figure that the cut's use needs."""
    for name in components:
        part = plant.components[name]
        if getattr(part, column) is None:
            message = f"the {column} is blank, but `{name}` goes into {cut} and {why}"
            findings.error(at(part.place, column), f"components.{name}", message)


def check_component_data_of_cut_uses(plant: Plant, findings: Findings) -> None:
    """A use per heat or burnt CO2 of a cut needs that figure of all that is in it."""
    columns = {"cut_heat": "lower_heating_value", "cut_burnt_co2": "burnt_co2"}
    for use in plant.utility_uses:
        if use.of in columns and use.item in plant.file.cuts:
            why = f"{use.utility} counts its {use.of} ({use.place})"
            _need(plant, use.item, columns[use.of], why, components_into(plant, use.item), findings)


def _has_use(plant: Plant, outlet: str) -> bool:
    """Whether some utility is used or made by what goes to an outlet."""
    written = plant.file.outlets[outlet]
    items = {("outlet", outlet), *(("ingredient", f"{outlet}.{cut}") for cut in written.from_)}
    return any((use.of, use.item) in items for use in plant.utility_uses)


def check_own_use_is_used(plant: Plant, findings: Findings) -> None:
    """An own use that makes nothing is a free sink: the plan would throw there what it cannot sell."""
    for name, outlet in plant.file.outlets.items():
        if outlet.to == "own_use" and not _has_use(plant, name):
            table = plant.file.utility_uses or "a table `utility_uses:`"
            message = "is an own use, but no utility is made or used by it: a free sink"
            hint = f"say in {table} what it makes (fuel, hydrogen …), or write `to: flare`"
            findings.error(plant.place("outlets", name), f"outlets.{name}", message, hint)


def _is_limited(outlet: Outlet) -> bool:
    caps = outlet.max.values() if outlet.max else []
    return bool(caps) and all(isinstance(cap, Cap) and cap.quantity is not None for cap in caps)


def check_flare_is_limited(plant: Plant, findings: Findings) -> None:
    """A flare without a limit and without CO2 makes a burdensome cut vanish at no cost."""
    for name, outlet in plant.file.outlets.items():
        burnt = any(use.of == "cut_burnt_co2" and use.item in outlet.from_ for use in plant.utility_uses)
        heat = any(cut in plant.file.cuts and plant.file.cuts[cut].balanced_as == "heat" for cut in outlet.from_)
        if outlet.to == "flare" and not heat and not burnt and not _is_limited(outlet) and not _has_use(plant, name):
            message = "is a flare without a maximum, and no utility (carbon dioxide) counts what it burns"
            hint = "write its `max:`, or the CO2 it makes in the table of utility uses"
            findings.warn(plant.place("outlets", name), f"outlets.{name}", message, hint)


def check_utility_closes(plant: Plant, findings: Findings) -> None:
    """What is used comes from somewhere and what is made goes somewhere: uses = supplies has no free sink."""
    made, used = _sides(plant)
    for name, utility in plant.file.utilities.items():
        place, path = plant.place("utilities", name), f"utilities.{name}"
        if name in used and name not in made and not utility.imports:
            hint = "write an import, a conversion or what makes it"
            findings.warn(place, path, "is used, but nothing makes it and it has no import", hint)
        if name in made and name not in used and not utility.exports and not utility.emissions:
            hint = "write an export, an emission or what uses it"
            findings.warn(place, path, "is made, but nothing uses it and it has no export or emission", hint)


def _sides(plant: Plant) -> tuple[set[str], set[str]]:
    """The utilities that something makes, and those that something uses."""
    made = {use.utility for use in plant.utility_uses if use.sign < 0 and use.amount.number}
    used = {use.utility for use in plant.utility_uses if use.sign > 0 and use.amount.number}
    for mode in plant.modes:
        made |= {name for name, amount in mode.utilities.items() if amount.number < 0}
        used |= {name for name, amount in mode.utilities.items() if amount.number > 0}
        group = plant.file.furnace_groups.get(mode.group)
        if group and group.fired_with and mode.fired_heat:
            used.add(group.fired_with)
    for conversion in plant.file.conversions.values():
        made |= set(conversion.makes)
        used |= set(conversion.uses)
    return made, used
