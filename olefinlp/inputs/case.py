"""The labelled numbers of a scenario: what the algebra is written with.

`build_case` turns a validated scenario into plain dictionaries in the units of the plan: kt, TJ
(LHV), GWh, furnace-hours, thousands of the currency. Every number used is noted with its place,
and every written minimum or maximum becomes a `Limit` that knows who wrote it.
"""

from __future__ import annotations

import functools
from collections.abc import Iterable
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

from olefinlp.inputs.fields import Cap, Monthly
from olefinlp.inputs.findings import Findings, Place, near_name, path_text
from olefinlp.inputs.measures import EACH, MASS, Measure
from olefinlp.inputs.periods import Period
from olefinlp.inputs.units import Basis, Quantity, UnitError, convert
from olefinlp.inputs.yaml_files import Document, Path_

if TYPE_CHECKING:
    from olefinlp.inputs.prices import Price
    from olefinlp.inputs.scenario import Scenario

PER_THOUSAND = 1e-3
"""Base units (t, GJ, MWh) to units of the plan (kt, TJ, GWh)."""

PLAN_UNITS = {"t": "kt", "GJ LHV": "TJ LHV", "MWh": "GWh"}


@dataclass(frozen=True, slots=True)
class InputUsed:
    """A number of the files as written and as used, with its place."""

    item: str
    month: str
    written: str
    value: float
    unit: str
    place: Place
    note: str = ""


@dataclass(frozen=True, slots=True)
class Limit:
    """A minimum or maximum that a person wrote.

    `low` and `high` (None: no such side) are in units of the plan; times `scale` they are in
    `unit`, in which people read them. `worth_unit` is one unit of relaxation, and a dual value
    times `worth_scale` is currency per that unit.
    """

    family: str
    key: tuple[str, ...]
    label: str
    low: float | None
    high: float | None
    unit: str
    scale: float
    worth_unit: str
    worth_scale: float
    month: str
    place_low: Place | None = None
    place_high: Place | None = None
    reason: str = ""
    measure: str = ""


@dataclass(frozen=True, slots=True)
class Part:
    """One term of a sum: coefficient times a quantity of the plan.

    `kind` is one of bought, charge, component, cut, outlet, ingredient, unit_load, trade,
    conversion; `item` its name(s).
    """

    kind: str
    item: tuple[str, ...]
    coefficient: float


@dataclass(frozen=True, slots=True)
class CostLine:
    """A variable cost: price item, and what it is per."""

    name: str
    price_item: str
    of: str
    parts: tuple[Part, ...]


@dataclass(frozen=True, slots=True)
class SourceData:
    """One way to buy a feed or side stream; `tiers` are its steps, 1 the first."""

    label: str
    kind: str
    feed: str
    name: str
    tiers: tuple[int, ...]
    take_or_pay: bool


@dataclass(frozen=True, slots=True)
class StockData:
    """A tank: its parcels (feeds) or nothing (cuts), its end rule and value at the end."""

    item: str
    is_feed: bool
    parcels: tuple[str, ...]
    end_value: float


@dataclass
class Case:
    """Everything that the algebra needs, by label; see the field comments for units and keys."""

    scenario: Scenario
    periods: tuple[Period, ...]
    prices: dict[tuple[str, str], Price] = field(default_factory=dict)
    inputs: list[InputUsed] = field(default_factory=list)
    limits: dict[tuple[str, ...], Limit] = field(default_factory=dict)
    """(family, *key) → limit."""

    # buying
    sources: dict[str, SourceData] = field(default_factory=dict)
    tier_size: dict[tuple[str, int, str], float] = field(default_factory=dict)
    """(source, tier, month) → kt, inf where unlimited."""
    shortfall_pays: dict[tuple[str, str], float] = field(default_factory=dict)
    """(source, month) → share of the price."""
    parcel_of: dict[tuple[str, str], str] = field(default_factory=dict)
    """(source, month) → parcel."""
    parcels: dict[str, tuple[str, ...]] = field(default_factory=dict)
    """feed → its parcels (deliveries of one quality)."""
    qualities: dict[str, dict[str, float]] = field(default_factory=dict)
    """parcel → property → value, reference quality left out."""
    stocks: dict[str, StockData] = field(default_factory=dict)
    opening: dict[str, float] = field(default_factory=dict)
    """parcel or cut → kt."""

    # cracking
    modes: tuple[str, ...] = ()
    mode_group: dict[str, str] = field(default_factory=dict)
    mode_feed: dict[str, str] = field(default_factory=dict)
    mode_severity: dict[str, str] = field(default_factory=dict)
    charges: tuple[tuple[str, str, str], ...] = ()
    """(mode, parcel, month) that can occur."""
    yields: dict[tuple[str, str], dict[str, float]] = field(default_factory=dict)
    """(mode, parcel) → component → t/t."""
    loss: float = 0.0
    hours_per_kt: dict[str, float] = field(default_factory=dict)
    """mode → furnace-hours per kt charged, decokes inside."""
    decoke_hours_per_kt: dict[str, float] = field(default_factory=dict)
    decokes_per_kt: dict[str, float] = field(default_factory=dict)
    compositions: dict[str, dict[str, float]] = field(default_factory=dict)
    """side stream → component → t/t."""

    # recovering
    components: tuple[str, ...] = ()
    cuts: tuple[str, ...] = ()
    heat_cuts: tuple[str, ...] = ()
    recovery: dict[str, dict[str, float]] = field(default_factory=dict)
    """cut → component → t/t."""
    heating_values: dict[str, float] = field(default_factory=dict)
    """component → GJ LHV/t, only those known."""
    units: tuple[str, ...] = ()
    unit_parts: dict[str, tuple[Part, ...]] = field(default_factory=dict)
    """recovery unit → terms of its load (thousands of base units)."""

    # disposing
    outlets: dict[str, tuple[str, ...]] = field(default_factory=dict)
    """outlet → cuts it takes."""
    sale_tiers: dict[str, tuple[int, ...]] = field(default_factory=dict)
    """outlet to sale → its steps."""
    sale_size: dict[tuple[str, int, str], float] = field(default_factory=dict)
    deductions: frozenset[str] = frozenset()
    """outlets whose price is a deduction."""
    content: dict[tuple[str, str], tuple[Part, ...]] = field(default_factory=dict)
    """(cut, content item) → what of it is in the cut."""
    specifications: dict[tuple[str, ...], tuple[Part, ...]] = field(default_factory=dict)
    """(outlet, property, side) → terms ≥ 0."""
    ratios: dict[tuple[str, ...], tuple[Part, ...]] = field(default_factory=dict)
    """(name, side) → terms ≤ 0 (at_most) or ≥ 0 (at_least)."""
    sums: dict[str, tuple[Part, ...]] = field(default_factory=dict)
    """named limit → terms."""

    # utilities
    utilities: dict[str, tuple[Part, ...]] = field(default_factory=dict)
    """utility → uses (+) and makes (−); trades and conversions left out."""
    fixed_use: dict[tuple[str, str], float] = field(default_factory=dict)
    """(utility, month) → used whatever is done."""
    trades: dict[str, tuple[str, str]] = field(default_factory=dict)
    """trade → (utility, imports | exports | emissions)."""
    conversions: dict[str, dict[str, float]] = field(default_factory=dict)
    """conversion → utility → used (+) or made (−) per unit of activity."""

    # money
    costs: tuple[CostLine, ...] = ()
    fixed_costs: dict[tuple[str, str], float] = field(default_factory=dict)
    """(name, month) → thousands of the currency; printed, never optimised."""

    @functools.cached_property
    def months(self) -> tuple[str, ...]:
        """Names of the periods in order."""
        return tuple(p.name for p in self.periods)

    @property
    def currency(self) -> str:
        """ISO code of the money."""
        return self.scenario.currency

    @functools.cached_property
    def charges_in(self) -> dict[str, list[tuple[str, str, str]]]:
        """Charges that can occur, by month."""
        found: dict[str, list[tuple[str, str, str]]] = {month: [] for month in self.months}
        for charge in self.charges:
            found[charge[2]].append(charge)
        return found

    @functools.cached_property
    def charged_parcels(self) -> dict[tuple[str, str], tuple[str, ...]]:
        """(mode, month) → parcels it can charge."""
        found: dict[tuple[str, str], tuple[str, ...]] = {}
        for mode, parcel, month in self.charges:
            found[mode, month] = (*found.get((mode, month), ()), parcel)
        return found

    @functools.cached_property
    def modes_in(self) -> dict[tuple[str, str], tuple[str, ...]]:
        """(furnace group, month) → modes that can charge something."""
        found: dict[tuple[str, str], list[str]] = {}
        for mode, month in self.charged_parcels:
            found.setdefault((self.mode_group[mode], month), []).append(mode)
        return {key: tuple(modes) for key, modes in found.items()}

    @functools.cached_property
    def cuts_given(self) -> dict[tuple[str, ...], frozenset[str]]:
        """(mode, parcel), or (side stream,) → the cuts that a tonne of it gives."""
        made: list[tuple[tuple[str, ...], dict[str, float]]] = [*self.yields.items()]
        made += [((stream,), shares) for stream, shares in self.compositions.items()]
        rows = {cut: {c for c, share in row.items() if share > 0} for cut, row in self.recovery.items()}
        found: dict[tuple[str, ...], frozenset[str]] = {}
        for key, shares in made:
            there = {c for c, share in shares.items() if share > 0}
            found[key] = frozenset(cut for cut, components in rows.items() if components & there)
        return found

    @functools.cached_property
    def _hours(self) -> dict[str, float]:
        return {p.name: p.hours for p in self.periods}

    @functools.cached_property
    def _before(self) -> dict[str, str | None]:
        return dict(zip(self.months, (None, *self.months[:-1]), strict=True))

    def hours(self, month: str) -> float:
        """Hours of a period."""
        return self._hours[month]

    def before(self, month: str) -> str | None:
        """The period before, None for the first."""
        return self._before[month]

    def rate(self, item: str, month: str) -> float:
        """Effective price in thousands of the currency per unit of the plan (per piece for a piece)."""
        price = self.prices[item, month]
        return price.value * self.per_unit(item, month)

    def per_unit(self, item: str, month: str) -> float:
        """Thousands of the currency in one of the price's own unit: a thousandth where it is per piece, else one."""
        return PER_THOUSAND if self.prices[item, month].unit_used == self.currency else 1.0

    def purchase_item(self, source: str, tier: int) -> str:
        """The price item of one step of a source."""
        data = self.sources[source]
        item = f"{data.kind}.{source}"
        return f"{item}.tiers.{tier}" if self.has_tiers(item) else item

    def sale_item(self, outlet: str, tier: int) -> str:
        """The price item of one step of an outlet."""
        item = f"outlets.{outlet}"
        if outlet in self.deductions:
            return f"{item}.deduction"
        return f"{item}.tiers.{tier}" if self.has_tiers(item) else item

    def has_tiers(self, item: str) -> bool:
        """Whether a source or outlet has steps of its own prices."""
        return (f"{item}.tiers.1", self.months[0]) in self.prices


class Reader:
    """Turns written quantities into units of the plan, noting each with its place."""

    def __init__(self, scenario: Scenario, findings: Findings) -> None:
        self.scenario = scenario
        self.plant = scenario.plant
        self.findings = findings
        self.case = Case(scenario, scenario.periods)
        self._months = {period.name for period in scenario.periods}
        self._by_month: dict[tuple[str, Path_], dict[str, Any]] = {}

    def known(self, name: str, names: Iterable[str], path: Path_, what: str, document: Document | None = None) -> bool:
        """Whether a name is known; a finding with the nearest one if not."""
        options = list(names)
        if name in options:
            return True
        place = (document or self.scenario.document).place(path)
        self.findings.error(place, path_text(path), f"`{name}` is not {what}", near_name(name, options))
        return False

    def of_month(self, written: Monthly[Any], period: Period, path: Path_, document: Document | None = None) -> Any:
        """What is written for a month; a finding when nothing is."""
        document = document or self.scenario.document
        if not written.by_month:
            value = written.always
        else:
            if (document.file, path) not in self._by_month:
                self._check_months(written, path, document)
                self._by_month[document.file, path] = dict(written.by_month)
            value = self._by_month[document.file, path].get(period.name, written.always)
        if value is None:
            place, message = document.place(path), f"has no value for {period.name}"
            self.findings.error(place, path_text(path), message, "add it, or `other_months:`")
        return value

    def _check_months(self, written: Monthly[Any], path: Path_, document: Document) -> None:
        """What is written for another time has no effect; what is no month at all is a slip."""
        place = document.place(path)
        for month, _ in written.by_month:
            if month not in self._months and not _is_month(month):
                hint = near_name(month, [*self.case.months, "other_months"])
                self.findings.error(place, path_text(path), f"`{month}` is not a month", hint)
            elif month not in self._months:
                self.findings.warn(place, path_text(path), f"has no effect: {month} is not in this scenario")

    def amount(
        self,
        written: Monthly[Any] | Quantity | Cap | None,
        period: Period,
        path: Path_,
        measure: Measure = MASS,
        basis: Basis | None = None,
        document: Document | None = None,
    ) -> float | None:
        """A quantity of one period in units of the plan; None where none is written or it is unlimited."""
        if written is None:
            return None
        value = self.of_month(written, period, path, document) if isinstance(written, Monthly) else written
        quantity = value.quantity if isinstance(value, Cap) else value
        place = (document or self.scenario.document).place(path)
        if quantity is None:
            return None
        try:
            base = convert(quantity, measure.dimensions, basis or self.scenario.basis(period), measure.energy)
        except UnitError as error:
            self.findings.error(place, path_text(path), str(error), error.hint)
            return None
        used = base * (1.0 if measure is EACH else PER_THOUSAND)
        self.note(path_text(path), period.name, quantity.text, used, PLAN_UNITS.get(measure.unit, measure.unit), place)
        if base < 0:
            self.findings.error(place, path_text(path), f"`{quantity.text}` is below zero")
        return used

    def note(self, item: str, month: str, written: str, value: float, unit: str, place: Place, note: str = "") -> None:
        """Put a number on the list of inputs as used."""
        self.case.inputs.append(InputUsed(item, month, written, value, unit, place, note))

    def _section(self, family: str, name: str) -> str:
        """The part of the files in which the limits of a family are written."""
        return self.case.sources[name].kind if family == "purchase" else SECTIONS.get(family, family)

    def limit(
        self,
        family: str,
        key: tuple[str, ...],
        label: str,
        sides: tuple[float | None, float | None],
        *,
        month: str,
        unit: str = "kt",
        scale: float = 1.0,
        worth: tuple[str, float] | None = None,
        places: tuple[Place | None, Place | None] = (None, None),
        reason: str = "",
        measure: str = "",
    ) -> None:
        """Add a limit with at least one side; a minimum of zero says nothing and is left out."""
        low, high = sides
        low = None if low == 0.0 and family not in ZERO_LIMITS else low
        if low is None and high is None:
            return
        if low is not None and high is not None and low > high:
            place = places[0] or places[1] or Place("")
            text = f"{label}: the minimum {low * scale:g} {unit} is above the maximum {high * scale:g} {unit}"
            self.findings.error(place, f"{self._section(family, key[0])}.{key[0]}", text)
        worth_unit, worth_scale = worth or (unit.removeprefix("k"), 1.0)
        self.case.limits[family, *key] = Limit(
            family, key, label, low, high, unit, scale, worth_unit, worth_scale, month, places[0], places[1], reason, measure
        )


SECTIONS = {"outlet": "outlets", "trade": "utilities", "stock": "stocks", "named": "limits"}
ZERO_LIMITS = ("specification", "ratio")


def _is_month(text: str) -> bool:
    return len(text) == 7 and text[:4].isdigit() and text[4] == "-" and text[5:].isdigit() and 1 <= int(text[5:]) <= 12


def build_case(scenario: Scenario, findings: Findings) -> Case | None:
    """The labelled numbers of a scenario; None with findings when it cannot be planned.

    All sections are read even when one is wrong, so that all faults show at once.
    """
    from olefinlp.inputs import case_furnaces, case_outlets, case_recovery, case_supply, case_utilities
    from olefinlp.inputs.prices import PriceBook, price_items_of
    from olefinlp.inputs.scenario_checks import check_case, check_references

    before = len(findings.errors)
    reader = Reader(scenario, findings)
    check_references(scenario, findings)
    if len(findings.errors) > before:
        return None
    reader.case.prices = PriceBook(scenario, price_items_of(scenario).values(), findings).prices()
    case_recovery.read_recovery(reader)
    case_supply.read_supply(reader)
    case_furnaces.read_furnaces(reader)
    case_outlets.read_outlets(reader)
    case_utilities.read_utilities(reader)
    case_recovery.read_units(reader)
    case_recovery.read_sums(reader)
    if len(findings.errors) > before:
        return None
    check_case(reader.case, findings)
    return reader.case if len(findings.errors) == before else None
