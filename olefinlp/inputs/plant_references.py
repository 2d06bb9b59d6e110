"""Names in a plant: whatever one part of the files calls by name, another part must hold, once."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import replace

from olefinlp.inputs.findings import Findings, Place, near_name
from olefinlp.inputs.plant import Plant

ALL = "all"
ITEM_WORDS = {
    "charge": "feed, `group.feed` or `all`",
    "component": "component",
    "cut": "cut",
    "cut_heat": "cut",
    "cut_burnt_co2": "cut",
    "outlet": "outlet",
    "ingredient": "ingredient (`outlet.cut`)",
    "side_stream": "side stream",
    "unit_load": "recovery unit",
    "import": "import",
    "export": "export",
    "loss": "item",
    "fixed": "item",
}


def check_references(plant: Plant, findings: Findings) -> None:
    """Every name used is known, and no name means two things."""
    for check in (
        check_main_product,
        check_unique_names,
        check_trade_names,
        check_feeds,
        check_side_streams,
        check_groups,
        check_yields,
        check_slopes,
        check_modes,
        check_recovery,
        check_unit_loads,
        check_utility_uses,
        check_outlets,
        check_content_items,
        check_conversions,
    ):
        check(plant, findings)


def at(place: Place, column: str) -> Place:
    """The cell of a column in the row at a place."""
    return replace(place, column=column)


def known(findings: Findings, place: Place, path: str, what: str, name: str, names: Iterable[str]) -> bool:
    """Whether a name is among those written; a finding with the nearest of them when it is not."""
    allowed = list(names)
    if name in allowed:
        return True
    message = f"unknown {what} `{name}`" if name else f"the {what} is blank"
    findings.error(place, path, message, near_name(name, allowed))
    return False


def cracked_pairs(plant: Plant) -> list[str]:
    """Every `group.feed` that some mode cracks."""
    return list(dict.fromkeys(f"{mode.group}.{mode.feed}" for mode in plant.modes))


def trades_of(plant: Plant, kind: str) -> list[str]:
    """The imports, exports or emissions of all utilities."""
    return [name for name, (_, own) in plant.trades().items() if own == kind]


def known_items(plant: Plant, of: str) -> list[str]:
    """What a unit load or a utility use of one kind may name."""
    file = plant.file
    names: dict[str, Iterable[str]] = {
        "charge": (*file.feeds, *cracked_pairs(plant), ALL),
        "component": plant.components,
        "cut": file.cuts,
        "cut_heat": file.cuts,
        "cut_burnt_co2": file.cuts,
        "outlet": file.outlets,
        "ingredient": [f"{name}.{cut}" for name, outlet in file.outlets.items() for cut in outlet.from_],
        "side_stream": file.side_streams,
        "unit_load": plant.units,
        "import": trades_of(plant, "imports"),
        "export": trades_of(plant, "exports"),
        "loss": (ALL,),
        "fixed": (ALL,),
    }
    return list(names[of])


def check_main_product(plant: Plant, findings: Findings) -> None:
    """Margin is shown per tonne of a cut, so it must be one."""
    known(findings, plant.place("main_product"), "main_product", "cut", plant.file.main_product, plant.file.cuts)


def check_unique_names(plant: Plant, findings: Findings) -> None:
    """Terms and prices find feeds, side streams and furnace groups by name alone, so no two may share one."""
    file, first = plant.file, dict[str, tuple[str, Place]]()
    sections: Mapping[str, Iterable[str]] = {
        "feeds": file.feeds,
        "side_streams": file.side_streams,
        "furnace_groups": file.furnace_groups,
    }
    for section, names in sections.items():
        for name in names:
            place, path = plant.place(section, name), f"{section}.{name}"
            if name == ALL:
                findings.error(place, path, "`all` means everything charged, it cannot be a name", "give it another name")
            elif name in first:
                other, line = first[name]
                findings.error(place, path, f"`{name}` is also the name in {other} ({line})", "rename one of the two")
            first.setdefault(name, (f"{section}.{name}", place))


def check_trade_names(plant: Plant, findings: Findings) -> None:
    """Prices find imports, exports and emissions by name alone, so each name stands once in the plant."""
    first: dict[str, tuple[str, Place]] = {}
    for utility, written in plant.file.utilities.items():
        for kind in ("imports", "exports", "emissions"):
            for name in getattr(written, kind):
                place, path = plant.place("utilities", utility, kind, name), f"utilities.{utility}.{kind}.{name}"
                if name in first:
                    other, line = first[name]
                    findings.error(place, path, f"`{name}` is also the name of {other} ({line})", "rename one of the two")
                first.setdefault(name, (path, place))


def check_feeds(plant: Plant, findings: Findings) -> None:
    """What a feed mainly is must be a component, what it comes back from a cut."""
    for name, feed in plant.file.feeds.items():
        for key, value, what, names in (
            ("mainly", feed.mainly, "component", list(plant.components)),
            ("recycle_of", feed.recycle_of, "cut", list(plant.file.cuts)),
        ):
            if value:
                known(findings, plant.place("feeds", name, key), f"feeds.{name}.{key}", what, value, names)


def check_side_streams(plant: Plant, findings: Findings) -> None:
    """A side stream joins the cracked gas, so it is made of the same components."""
    for name, stream in plant.file.side_streams.items():
        for component in stream.composition:
            path = ("side_streams", name, "composition", component)
            known(findings, plant.place(*path), ".".join(path), "component", component, plant.components)


def check_groups(plant: Plant, findings: Findings) -> None:
    """A furnace group uses a yields table and a fuel that are written."""
    for name, group in plant.file.furnace_groups.items():
        path = f"furnace_groups.{name}"
        place = plant.place("furnace_groups", name, "yields")
        known(findings, place, f"{path}.yields", "yields table", group.yields, plant.file.yields)
        if group.fired_with:
            place = plant.place("furnace_groups", name, "fired_with")
            known(findings, place, f"{path}.fired_with", "utility", group.fired_with, plant.file.utilities)


def check_columns(findings: Findings, file: str, path: str, what: str, found: Iterable[str], wanted: Iterable[str]) -> None:
    """A matrix must have one column for each component or cut, no more and no fewer."""
    columns, names = list(found), list(wanted)
    for column in columns:
        known(findings, Place(file, 1, column), path, f"{what} in the column", column, names)
    for name in names:
        if name not in columns:
            findings.error(Place(file, 1), path, f"the column of the {what} `{name}` is missing", "write 0 where there is none")


def check_yields(plant: Plant, findings: Findings) -> None:
    """Yields are of known feeds and count every component."""
    tables: dict[str, str] = {}
    for row in plant.yields.values():
        path = f"yields.{row.table}"
        if row.table not in tables:
            tables[row.table] = row.place.file
            check_columns(findings, row.place.file, path, "component", row.shares, plant.components)
        known(findings, at(row.place, "feed"), f"{path}.{row.feed}", "feed", row.feed, plant.file.feeds)


def check_slopes(plant: Plant, findings: Findings) -> None:
    """A slope changes yields that are written, once for each property, and counts every component."""
    first: dict[tuple[str, str, str], Place] = {}
    for row in plant.slopes:
        path = f"quality_slopes.{row.feed}.{row.property}"
        if row is plant.slopes[0]:
            check_columns(findings, row.place.file, "quality_slopes", "component", row.shares, plant.components)
        table = known(findings, at(row.place, "yields"), path, "yields table", row.table, plant.file.yields)
        feed = known(findings, at(row.place, "feed"), path, "feed", row.feed, plant.file.feeds)
        if table and feed and not any(key[:2] == (row.table, row.feed) for key in plant.yields):
            findings.error(at(row.place, "feed"), path, f"the yields table `{row.table}` has no row of `{row.feed}`")
        before = first.setdefault((row.table, row.feed, row.property), row.place)
        if before is not row.place:
            findings.error(row.place, path, f"is written twice, first in line {before.line}")


def check_modes(plant: Plant, findings: Findings) -> None:
    """A mode names its group, its feed, and in its columns utilities and recovery units."""
    utilities: dict[str, Place] = {}
    units: dict[str, Place] = {}
    for mode in plant.modes:
        path = f"modes.{mode.name}"
        known(findings, at(mode.place, "group"), path, "furnace group", mode.group, plant.file.furnace_groups)
        known(findings, at(mode.place, "feed"), path, "feed", mode.feed, plant.file.feeds)
        header = Place(mode.place.file, 1)
        utilities.update(dict.fromkeys(mode.utilities, header))
        units.update(dict.fromkeys(mode.loads, header))
    for name, place in utilities.items():
        known(findings, place, "modes", "utility in a column", name, plant.file.utilities)
    for name, place in units.items():
        known(findings, place, "modes", "recovery unit in a column", name, plant.units)


def check_recovery(plant: Plant, findings: Findings) -> None:
    """Every component is recovered, into every cut."""
    for name, place in plant.recovery_places.items():
        known(findings, at(place, "component"), f"recovery.{name}", "component", name, plant.components)
    if not plant.recovery:
        return
    file = next(iter(plant.recovery_places.values())).file
    check_columns(findings, file, "recovery", "cut", next(iter(plant.recovery.values())), plant.file.cuts)
    for name in plant.components:
        if name not in plant.recovery:
            findings.error(Place(file), f"recovery.{name}", f"the row of the component `{name}` is missing")


def check_unit_loads(plant: Plant, findings: Findings) -> None:
    """A load names its recovery unit and its item, and no load is counted twice."""
    first: dict[tuple[str, str, str], Place] = {}
    for row in plant.unit_loads:
        path = f"unit_loads.{row.unit}"
        known(findings, at(row.place, "unit"), path, "recovery unit", row.unit, plant.units)
        known(findings, at(row.place, "item"), path, ITEM_WORDS[row.of], row.item, known_items(plant, row.of))
        before = first.setdefault((row.unit, row.of, row.item), row.place)
        if before is not row.place:
            findings.error(row.place, path, f"{row.of} `{row.item}` is written twice, first in line {before.line}")


def check_utility_uses(plant: Plant, findings: Findings) -> None:
    """A use names its utility and its item, and no use is counted twice (fixed ones may be several)."""
    first: dict[tuple[str, int, str, str], Place] = {}
    for row in plant.utility_uses:
        path = f"utility_uses.{row.utility}"
        known(findings, at(row.place, "utility"), path, "utility", row.utility, plant.file.utilities)
        known(findings, at(row.place, "item"), path, ITEM_WORDS[row.of], row.item, known_items(plant, row.of))
        before = first.setdefault((row.utility, row.sign, row.of, row.item), row.place)
        if before is not row.place and row.of != "fixed":
            findings.error(row.place, path, f"{row.of} `{row.item}` is written twice, first in line {before.line}")


def check_outlets(plant: Plant, findings: Findings) -> None:
    """An outlet takes known cuts, each once, and a specification has a value for each of them."""
    for name, outlet in plant.file.outlets.items():
        place, path = plant.place("outlets", name, "from"), f"outlets.{name}"
        for cut in outlet.from_:
            known(findings, place, f"{path}.from", "cut", cut, plant.file.cuts)
        if len(set(outlet.from_)) < len(outlet.from_):
            findings.error(place, f"{path}.from", "names a cut twice")
        for wanted, specification in outlet.specifications.items():
            here = ("outlets", name, "specifications", wanted, "values")
            for cut in specification.values:
                known(findings, plant.place(*here, cut), ".".join((*here, cut)), "ingredient", cut, outlet.from_)
            for cut in outlet.from_:
                if cut not in specification.values:
                    findings.error(plant.place(*here), ".".join(here), f"the value of the ingredient `{cut}` is missing")


def check_content_items(plant: Plant, findings: Findings) -> None:
    """A content item adds up known components."""
    for cut, written in plant.file.cuts.items():
        for item, components in written.content_items.items():
            path = ("cuts", cut, "content_items", item)
            for component in components:
                known(findings, plant.place(*path), ".".join(path), "component", component, plant.components)


def check_conversions(plant: Plant, findings: Findings) -> None:
    """A conversion turns known utilities into known ones."""
    for name, conversion in plant.file.conversions.items():
        for side in ("makes", "uses"):
            for utility in getattr(conversion, side):
                path = ("conversions", name, side, utility)
                known(findings, plant.place(*path), ".".join(path), "utility", utility, plant.file.utilities)
