"""Balances of mass, cuts, feeds, utilities and elements, recomputed from the plant's tables.

Nothing here uses the matrix of the linear program: charges, purchases and dispositions are taken
from the plan, everything that follows from them is worked out again from the tables, and the
difference is the check.
"""

from __future__ import annotations

import functools
from collections.abc import Iterator
from dataclasses import dataclass

from olefinlp.answers.quantities import NOISE, Quantities
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.inputs.case import PER_THOUSAND
from olefinlp.inputs.measures import MASS
from olefinlp.inputs.plant import Mode, Plant
from olefinlp.inputs.ratios import load_per_tonne, outlet_measure, utility_amount, utility_quantity
from olefinlp.inputs.units import share

BALANCE_TOLERANCE = 1e-6
ELEMENT_TOLERANCE = 1e-3


class BalanceError(Exception):
    """A plan whose balances, recomputed from the tables, do not close."""


@dataclass(frozen=True, slots=True)
class Flow:
    """One line of a balance: `sign` +1 comes in, −1 goes out."""

    month: str
    balance: str
    item: str
    sign: int
    amount: float
    unit: str


@dataclass(frozen=True, slots=True)
class Closure:
    """How far a balance is from closing, relative to what moves in it."""

    month: str
    balance: str
    inflow: float
    outflow: float
    unit: str
    difference: float
    relative: float
    tolerance: float
    note: str = ""

    @property
    def holds(self) -> bool:
        """Whether the balance closes within its tolerance."""
        return self.relative <= self.tolerance


class Recomputed:
    """Quantities of a plan worked out again from the plant's tables."""

    def __init__(self, q: Quantities) -> None:
        self.q = q
        self.plant: Plant = q.case.scenario.plant
        self.modes: dict[str, Mode] = {mode.name: mode for mode in self.plant.modes if mode.name in q.case.modes}
        self.modes_of: dict[str, list[str]] = {}
        for name, mode in self.modes.items():
            self.modes_of.setdefault(mode.group, []).append(name)
        self.loss = share(self.plant.file.loss.share)
        self._components: dict[str, dict[str, float]] = {}
        self._cuts: dict[str, dict[str, float]] = {}

    @functools.cached_property
    def yields(self) -> dict[tuple[str, str], dict[str, float]]:
        """(mode, parcel) → yields, t/t."""
        pairs = dict.fromkeys((name, parcel) for name, parcel, _ in self.q.case.charges)
        return {(name, parcel): self._yields(self.modes[name], parcel) for name, parcel in pairs}

    def _yields(self, mode: Mode, parcel: str) -> dict[str, float]:
        """Base yields plus slope times (property − reference), t/t."""
        table = self.plant.file.furnace_groups[mode.group].yields
        shares = dict(self.plant.yields[table, mode.feed, mode.severity].shares)
        for slope in self.plant.slopes:
            value = self.q.case.qualities[parcel].get(slope.property)
            if slope.table == table and slope.feed == mode.feed and value is not None:
                for component, change in slope.shares.items():
                    shares[component] += (value - slope.reference) * change
        return shares

    def components(self, month: str) -> dict[str, float]:
        """Components in the cracked gas, kt."""
        if month not in self._components:
            made = dict.fromkeys(self.plant.components, 0.0)
            for name, parcel, _ in self.q.case.charges_in[month]:
                charged = self.q.value("charge", name, parcel, month)
                if charged:
                    for component, value in self.yields[name, parcel].items():
                        made[component] += charged * (1 - self.loss) * value
            for source, data in self.q.case.sources.items():
                if data.kind == "side_streams":
                    for component, quantity in self.plant.file.side_streams[data.feed].composition.items():
                        made[component] += self.q.bought(source, month) * share(quantity)
            self._components[month] = made
        return self._components[month]

    def cuts(self, month: str) -> dict[str, float]:
        """Cuts, kt."""
        if month not in self._cuts:
            made, recovery = self.components(month), self.plant.recovery
            self._cuts[month] = {cut: sum(made[c] * row[cut] for c, row in recovery.items()) for cut in self.plant.file.cuts}
        return self._cuts[month]

    def heat(self, cut: str, month: str) -> float:
        """Heat of the components of a cut, TJ LHV."""
        made, known = self.components(month), self.plant.components
        return sum(
            made[c] * row[cut] * (known[c].lower_heating_value or 0.0) for c, row in self.plant.recovery.items() if row[cut]
        )

    def burnt_co2(self, cut: str, month: str) -> float:
        """CO2 if a whole cut is burnt, kt."""
        made, known = self.components(month), self.plant.components
        return sum(made[c] * row[cut] * (known[c].burnt_co2 or 0.0) for c, row in self.plant.recovery.items() if row[cut])

    def charged(self, item: str, month: str) -> float:
        """Charge of `all`, a feed, a group or group.feed, kt."""
        return sum(
            self.q.charged(name, month)
            for name, mode in self.modes.items()
            if item in ("all", mode.feed, mode.group, f"{mode.group}.{mode.feed}")
        )

    def amount(self, of: str, item: str, month: str) -> float:
        """What an item of a table comes to."""
        q = self.q
        if of == "charge":
            return self.charged(item, month)
        if of == "loss":
            return self.charged("all", month) * self.loss
        if of == "component":
            return self.components(month)[item]
        if of == "cut":
            return self.cuts(month)[item]
        if of == "cut_heat":
            return self.heat(item, month)
        if of == "cut_burnt_co2":
            return self.burnt_co2(item, month)
        if of == "outlet":
            return q.outlet(item, month)
        if of == "ingredient":
            outlet, cut = item.split(".")
            return q.value("disposition", outlet, cut, month)
        if of == "side_stream":
            return sum(q.bought(s, month) for s, data in q.case.sources.items() if item == data.feed)
        if of == "unit_load":
            return self.unit_load(item, month)
        return q.value("trade", item, month) if item in q.case.trades else 0.0

    def unit_load(self, unit: str, month: str) -> float:
        """Load of a recovery unit, thousands of its unit times hours."""
        rows, modes = self._loads[unit]
        load = sum(value * self.amount(of, item, month) for of, item, value in rows)
        return load + sum(value * self.q.charged(name, month) for name, value in modes)

    @functools.cached_property
    def _loads(self) -> dict[str, tuple[list[tuple[str, str, float]], list[tuple[str, float]]]]:
        """Recovery unit → (kind, item, load per unit of it) of its table, and (mode, load per t)."""
        plant, found = self.plant, {}
        for unit, data in plant.units.items():
            rows = []
            for row in plant.unit_loads:
                if row.unit == unit:
                    per = outlet_measure(plant, row.item) if row.of == "outlet" else MASS
                    rows.append((row.of, row.item, load_per_tonne(data, row.load, per)))
            modes = [(name, load_per_tonne(data, mode.loads[unit])) for name, mode in self.modes.items() if unit in mode.loads]
            found[unit] = (rows, modes)
        return found

    @functools.cached_property
    def elements(self) -> list[str]:
        """The elements that can be balanced."""
        return [element for element in ("hydrogen", "carbon") if element_reason(self.plant, self, element) == ""]

    @functools.cached_property
    def contents(self) -> dict[str, dict[tuple[str, str], float]]:
        """Element → (mode, parcel) → what of it a tonne charged carries, t/t."""
        return {element: {pair: _content(self, element, *pair) for pair in self.yields} for element in self.elements}


def balance_flows(again: Recomputed) -> list[Flow]:
    """Every line of every balance, all months."""
    flows: list[Flow] = []
    for month in again.q.case.months:
        flows += [*_mass(again, month), *_feeds(again, month), *_cuts(again, month)]
        for utility in again.plant.file.utilities:
            flows += _utility(again, utility, month)
        for element in again.elements:
            flows += _element(again, element, month)
    return [flow for flow in flows if abs(flow.amount) > NOISE * again.q.size]


def _mass(again: Recomputed, month: str) -> Iterator[Flow]:
    """The whole plant: feeds charged and side streams in; cuts that leave, and losses, out."""
    q, recycles = again.q, again.plant.recycle_feeds()
    for feed in q.case.parcels:
        if feed not in recycles:
            yield Flow(month, "mass", f"{feed} charged", 1, again.charged(feed, month), "kt")
    for source, data in q.case.sources.items():
        if data.kind == "side_streams":
            yield Flow(month, "mass", source, 1, q.bought(source, month), "kt")
    yield Flow(month, "mass", "loss", -1, again.charged("all", month) * again.loss, "kt")
    unclosed = _unclosed(again, month)
    yield Flow(month, "mass", "rows of the tables that do not close", 1 if unclosed > 0 else -1, abs(unclosed), "kt")
    for cut, made in again.cuts(month).items():
        back = sum(again.charged(feed, month) for feed, source in recycles.items() if source == cut)
        yield Flow(month, "mass", cut + (" less recycle" if cut in recycles.values() else ""), -1, made - back, "kt")


def _unclosed(again: Recomputed, month: str) -> float:
    """Mass that yields, side streams and recovery rows add (or lose) because they do not sum to one, kt.

    The checks allow half a per cent of rounding; what it makes is said, never hidden in another line.
    """
    q, plant = again.q, again.plant
    gained = 0.0
    for name, parcel, _ in q.case.charges_in[month]:
        excess = sum(again.yields[name, parcel].values()) - 1
        gained += q.value("charge", name, parcel, month) * (1 - again.loss) * excess
    for source, data in q.case.sources.items():
        if data.kind == "side_streams":
            whole = sum(share(quantity) for quantity in plant.file.side_streams[data.feed].composition.values())
            gained += q.bought(source, month) * (whole - 1)
    made = again.components(month)
    return gained + sum(made[c] * (sum(row.values()) - 1) for c, row in plant.recovery.items())


def _feeds(again: Recomputed, month: str) -> Iterator[Flow]:
    q, recycles = again.q, again.plant.recycle_feeds()
    for feed in q.case.parcels:
        if feed in recycles:
            continue
        name = f"feed {feed}"
        for source, data in q.case.sources.items():
            if data.feed == feed:
                yield Flow(month, name, f"bought {data.name}", 1, q.bought(source, month), "kt")
        if feed in q.case.stocks:
            yield from _stock_flows(again, name, feed, month)
        yield Flow(month, name, "charged", -1, again.charged(feed, month), "kt")


def _stock_flows(again: Recomputed, balance: str, item: str, month: str) -> Iterator[Flow]:
    q = again.q
    before = q.case.before(month)
    data = q.case.stocks[item]
    lines = data.parcels if data.is_feed else (item,)
    opening = q.stock(item, before) if before else sum(q.case.opening.get(line, 0.0) for line in lines)
    yield Flow(month, balance, "opening stock", 1, opening, "kt")
    yield Flow(month, balance, "closing stock", -1, q.stock(item, month), "kt")


def _cuts(again: Recomputed, month: str) -> Iterator[Flow]:
    q, recycles = again.q, again.plant.recycle_feeds()
    made = again.cuts(month)
    for cut in q.case.cuts:
        by_heat = cut in q.case.heat_cuts
        unit, name = ("TJ LHV" if by_heat else "kt"), f"cut {cut}"
        yield Flow(month, name, "made", 1, again.heat(cut, month) if by_heat else made[cut], unit)
        for outlet, cuts in q.case.outlets.items():
            if cut in cuts:
                yield Flow(month, name, outlet, -1, q.value("disposition", outlet, cut, month), unit)
        for feed, source in recycles.items():
            if source == cut:
                yield Flow(month, name, f"{feed} charged", -1, again.charged(feed, month), unit)
        if cut in q.case.stocks and not q.case.stocks[cut].is_feed:
            yield from _stock_flows(again, name, cut, month)


def _utility(again: Recomputed, utility: str, month: str) -> Iterator[Flow]:
    """Uses go out, makes come in; read from the tables, not from the matrix."""
    q, plant = again.q, again.plant
    unit = {"heat": "TJ LHV", "mass": "kt", "power": "GWh"}[plant.file.utilities[utility].measured_in]
    for use in plant.utility_uses:
        if use.utility != utility:
            continue
        amount = utility_amount(plant, utility, use.of, use.item, use.amount)
        size = q.case.hours(month) * PER_THOUSAND if use.of == "fixed" else again.amount(use.of, use.item, month)
        yield Flow(month, utility, f"{use.of} {use.item}".replace("_", " "), -use.sign, amount * size, unit)
    yield from _utility_of_modes(again, utility, month, unit)
    for name, conversion in plant.file.conversions.items():
        first, quantity = next(iter(conversion.makes.items()))
        activity = q.value("conversion", name, month) / utility_quantity(plant, first, quantity)
        for sign, side in ((1, conversion.makes), (-1, conversion.uses)):
            if utility in side:
                yield Flow(month, utility, name, sign, activity * utility_quantity(plant, utility, side[utility]), unit)
    for trade, (of, kind) in q.case.trades.items():
        if of == utility:
            yield Flow(month, utility, trade, 1 if kind == "imports" else -1, q.value("trade", trade, month), unit)


def _utility_of_modes(again: Recomputed, utility: str, month: str, unit: str) -> Iterator[Flow]:
    for group, data in again.plant.file.furnace_groups.items():
        fired = used = 0.0
        for name in again.modes_of.get(group, ()):
            mode = again.modes[name]
            charged = again.q.charged(name, month)
            if data.fired_with == utility and mode.fired_heat:
                fired += charged * mode.fired_heat
            if utility in mode.utilities:
                used += charged * utility_amount(again.plant, utility, "charge", "all", mode.utilities[utility])
        yield Flow(month, utility, f"{group} fired heat", -1, fired, unit)
        yield Flow(month, utility, f"{group}", -1 if used >= 0 else 1, abs(used), unit)


def element_reason(plant: Plant, again: Recomputed, element: str) -> str:
    """Why an element is not balanced; empty when it can be."""
    blank = [name for name, data in plant.components.items() if getattr(data, f"{element}_share") is None]
    if blank:
        return f"no formula for {', '.join(blank)}"
    silent = [feed for feed in again.q.case.parcels if plant.file.feeds[feed].hydrogen is None]
    if silent:
        return f"no hydrogen content for {', '.join(silent)}"
    return ""


def feed_element(plant: Plant, feed: str, element: str) -> float:
    """Hydrogen or carbon of a feed, t/t; carbon is the rest to 100 wt% when it is not written."""
    data = plant.file.feeds[feed]
    hydrogen = share(data.hydrogen) if data.hydrogen else 0.0
    if element == "hydrogen":
        return hydrogen
    return share(data.carbon) if data.carbon else 1 - hydrogen


def _content(again: Recomputed, element: str, name: str, parcel: str) -> float:
    """Hydrogen or carbon of a tonne charged, t/t; a delivery of another quality carries what its slopes move."""
    mode, plant = again.modes[name], again.plant
    content = feed_element(plant, mode.feed, element)
    base = plant.yields[plant.file.furnace_groups[mode.group].yields, mode.feed, mode.severity].shares
    for component, value in again.yields[name, parcel].items():
        content += (value - base[component]) * getattr(plant.components[component], f"{element}_share")
    return content


def _carried(again: Recomputed, element: str, month: str) -> dict[str, float]:
    """Hydrogen or carbon in what is charged of each feed, kt."""
    carried, contents = dict.fromkeys(again.q.case.parcels, 0.0), again.contents[element]
    for name, parcel, _ in again.q.case.charges_in[month]:
        carried[again.modes[name].feed] += again.q.value("charge", name, parcel, month) * contents[name, parcel]
    return carried


def _element(again: Recomputed, element: str, month: str) -> Iterator[Flow]:
    """What the charges carry against what the components and the loss carry."""
    for feed, carried in _carried(again, element, month).items():
        yield Flow(month, f"{element} in cracking", f"{feed} charged", 1, carried, "kt")
        yield Flow(month, f"{element} in cracking", f"loss of {feed}", -1, carried * again.loss, "kt")
    for name, made in again.components(month).items():
        brought = sum(
            again.q.bought(source, month) * share(again.plant.file.side_streams[data.feed].composition[name])
            for source, data in again.q.case.sources.items()
            if data.kind == "side_streams" and name in again.plant.file.side_streams[data.feed].composition
        )
        part = getattr(again.plant.components[name], f"{element}_share")
        yield Flow(month, f"{element} in cracking", name, -1, (made - brought) * part, "kt")


def closures(flows: list[Flow]) -> list[Closure]:
    """How well each balance of each month closes."""
    result: list[Closure] = []
    sums: dict[tuple[str, str], list[Flow]] = {}
    for flow in flows:
        sums.setdefault((flow.month, flow.balance), []).append(flow)
    size = max((flow.amount for flow in flows), default=1.0)
    for (month, balance), members in sums.items():
        inflow = sum(f.amount for f in members if f.sign > 0)
        outflow = sum(f.amount for f in members if f.sign < 0)
        difference = inflow - outflow
        relative = abs(difference) / max(abs(inflow), abs(outflow), 1e-6 * size, 1e-300)
        tolerance = ELEMENT_TOLERANCE if balance.endswith("in cracking") else BALANCE_TOLERANCE
        result.append(Closure(month, balance, inflow, outflow, members[0].unit, difference, relative, tolerance))
    return result


def check_loads(again: Recomputed) -> float:
    """Largest relative difference between loads, components and cuts of the plan and of the tables."""
    q, worst = again.q, 0.0
    for month in q.case.months:
        pairs = [(q.value("component_made", c, month), value) for c, value in again.components(month).items()]
        pairs += [(q.value("cut_made", k, month), value) for k, value in again.cuts(month).items()]
        pairs += [(q.value("unit_load", u, month), again.unit_load(u, month)) for u in q.case.units]
        size = max((abs(a) for a, _ in pairs), default=1.0) or 1.0
        worst = max([worst, *(abs(a - b) / size for a, b in pairs)])
    return worst


def prove_balances(again: Recomputed, found: list[Closure]) -> None:
    """Raise `BalanceError` unless every balance that must close does."""
    broken = [c for c in found if not c.holds and not c.balance.endswith("in cracking")]
    loads = check_loads(again)
    if broken or loads > BALANCE_TOLERANCE:
        lines = [f"{c.month} {c.balance}: in {c.inflow:g}, out {c.outflow:g} {c.unit}" for c in broken]
        lines += [f"loads, components or cuts differ from the tables by {loads:.1e}"] if loads > BALANCE_TOLERANCE else []
        raise BalanceError("the plan's balances do not close: " + "; ".join(lines))


def balances_table(flows: list[Flow]) -> Table:
    """Every line of every balance."""
    columns = (
        Column("month", "Month"),
        Column("balance", "Balance"),
        Column("direction", "Direction"),
        Column("item", "Item"),
        Column("amount", "Amount", kind="quantity"),
        Column("unit", "Unit"),
    )
    rows: list[Record] = [
        {
            "month": flow.month,
            "balance": flow.balance,
            "direction": "in" if flow.sign > 0 else "out",
            "item": flow.item,
            "amount": flow.amount,
            "unit": flow.unit,
        }
        for flow in flows
    ]
    return Table("balances", "Balances", columns, rows)


def closures_table(again: Recomputed, found: list[Closure]) -> Table:
    """How well each balance closes, and why an element is not balanced."""
    columns = (
        Column("month", "Month"),
        Column("balance", "Balance"),
        Column("inflow", "In", kind="quantity"),
        Column("outflow", "Out", kind="quantity"),
        Column("unit", "Unit"),
        Column("difference", "Difference", kind="number"),
        Column("relative", "Relative difference", kind="number"),
        Column("tolerance", "Allowed", kind="number"),
        Column("closes", "Closes"),
    )
    rows: list[Record] = [
        {key: getattr(c, key) for key in ("month", "balance", "inflow", "outflow", "unit", "difference", "relative", "tolerance")}
        | {"closes": "yes" if c.holds else "no"}
        for c in found
    ]
    for element in ("hydrogen", "carbon"):
        reason = element_reason(again.plant, again, element)
        if reason:
            blank: Record = {column.key: None for column in columns}
            rows.append(blank | {"month": "", "balance": f"{element} in cracking", "closes": f"left out: {reason}"})
    return Table("closures", "Balance checks", columns, rows)
