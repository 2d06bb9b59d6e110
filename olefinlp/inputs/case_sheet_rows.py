"""The rows of a scenario's case sheet: its prices as people wrote them, one number a case."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

from olefinlp.inputs.case_sheet_units import SHARE_UNITS, factor_of, measure_of, price_units
from olefinlp.inputs.fields import PriceWritten
from olefinlp.inputs.measures import Measure
from olefinlp.inputs.periods import Period
from olefinlp.inputs.prices import LAST_WORDS, PriceItem, item_name, price_items_of
from olefinlp.inputs.scenario import Scenario
from olefinlp.inputs.tables import Row
from olefinlp.inputs.units import SHARES, parse_unit

GROUPS = {
    "feeds": "feeds",
    "side_streams": "side streams",
    "outlets": "products",
    "contents": "content values",
    "utilities": "energy and CO2",
    "variable_costs": "costs",
    "stocks": "stocks",
    "indexes": "indexes",
    "limits": "sums",
    "recovery_units": "recovery units",
    "furnace_groups": "furnaces",
}
"""First part of an item → what the column `Group` says; rows stand in this order."""
AS_WRITTEN = "As written"


@dataclass(frozen=True)
class SheetPrice:
    """One row of prices.

    `values` are the numbers of the cases in `unit`, None where a case says nothing of its own. Where `of` is
    written the price is a share of that item (`unit` fraction or %), or `times` it plus an amount.
    `factors`: unit → what one of it is in `used_in`. `base` is the row that the price leans on.
    """

    item: str
    month: str
    unit: str
    values: tuple[float | None, ...]
    used_in: str
    factors: Mapping[str, float]
    basis: str = ""
    of: str = ""
    times: float | None = None
    source: str = ""
    date: str = ""
    note: str = ""
    base: int | None = None

    @property
    def group(self) -> str:
        """What the column `Group` says."""
        return GROUPS[self.item.partition(".")[0]]

    @property
    def is_share(self) -> bool:
        """Whether the numbers are shares of another price."""
        return bool(self.of) and parse_unit(self.unit).share in SHARES

    @property
    def units(self) -> tuple[str, ...]:
        """Units that the row can be written in, its own first."""
        return tuple(dict.fromkeys((self.unit, *(SHARE_UNITS if self.of else ()), *self.factors)))


@dataclass(frozen=True)
class _Origin:
    """A price as one place writes it for one month, or for all that have no other."""

    month: str
    price: PriceWritten | None = None
    row: Row | None = None
    texts: Mapping[str, str] = field(default_factory=dict)


def case_names(scenario: Scenario) -> tuple[str, ...]:
    """Headings of the cases: the scenario's own, then the others of its price table.

    A scenario that is a case itself, with prices given, has none beside itself: they would all say the same.
    """
    own = scenario.price_case or AS_WRITTEN
    if scenario.given:
        return (own,)
    return (own, *(name for name in scenario.price_cases() if name != own))


def price_rows(scenario: Scenario) -> tuple[SheetPrice, ...]:
    """Every price of a scenario with the numbers of all its cases, grouped, each with the row that it leans on.

    >>> from olefinlp import read_scenario
    >>> price_rows(read_scenario("scenarios/thermal_cracker.yaml"))[0].values
    (6.55,)
    """
    items = sorted(price_items_of(scenario).values(), key=lambda item: list(GROUPS).index(str(item.path[0])))
    rows: list[SheetPrice] = []
    covered: list[Period] = []
    for item in items:
        for origin, period in _origins(scenario, item):
            rows.append(_sheet_price(scenario, item, origin, period))
            covered.append(period)
    return tuple(replace(row, base=_base(row, period, rows)) for row, period in zip(rows, covered, strict=True))


def used_values(rows: Sequence[SheetPrice], case: int) -> list[float]:
    """The converted prices of one case, row by row; they lean on each other as the rows say."""
    done: dict[int, float] = {}

    def used(at: int) -> float:
        if at not in done:
            row = rows[at]
            own = row.values[case]
            number = row.values[0] if own is None else own
            assert number is not None
            base = used(row.base) if row.base is not None else 0.0
            if row.is_share:
                done[at] = number * parse_unit(row.unit).factor * base
            elif row.of:
                done[at] = (1.0 if row.times is None else row.times) * base + number * row.factors[row.unit]
            else:
                done[at] = number * row.factors[row.unit]
        return done[at]

    return [used(at) for at in range(len(rows))]


def _base(row: SheetPrice, period: Period, rows: Sequence[SheetPrice]) -> int | None:
    """The row that a price leans on in the first month for which it stands."""
    if not row.of:
        return None
    of = item_name(row.of.split("."))
    found = {other.month: at for at, other in enumerate(rows) if other.item == of}
    return found.get(period.name, found.get(""))


def _origins(scenario: Scenario, item: PriceItem) -> list[tuple[_Origin, Period]]:
    """What writes the price of an item, month by month; each with the first month for which it stands."""
    found: dict[str, tuple[_Origin, Period]] = {}
    for period in scenario.periods:
        origin = _origin(scenario, item, period.name)
        if len(scenario.periods) == 1:
            origin = replace(origin, month="")
        found.setdefault(origin.month, (origin, period))
    return [found[month] for month in sorted(found)]


def _origin(scenario: Scenario, item: PriceItem, month: str) -> _Origin:
    for key in ((item.item, month), (item.item, "")):
        given = scenario.given.get(key)
        if given:
            return _Origin(key[1], given.price, None, {"basis": given.basis, "source": given.source})
    if item.written is not None:
        monthly = dict(item.written.by_month)
        texts = {"basis": item.basis, "note": _note(scenario, item)}
        return _Origin(month if month in monthly else "", item.written.at(month), None, texts)
    rows = {}
    for row in scenario.price_table or ():
        name = row.text("item")
        for word in LAST_WORDS:
            name = name.removesuffix(f".{word}")
        if name == item.item:
            rows[row.cells.get("month", "")] = row
    row = rows.get(month) or rows[""]
    return _Origin(month if month in rows else "", None, row, row.cells)


def _note(scenario: Scenario, item: PriceItem) -> str:
    """The note beside a price in the scenario file, where it is not its basis already."""
    data: Any = scenario.document.data
    note = ""
    for part in item.path[:-1]:
        data = data[int(part)] if isinstance(data, list) else data.get(part) if isinstance(data, dict) else None
        if isinstance(data, dict) and isinstance(data.get("note"), str):
            note = data["note"]
    return "" if note == item.basis else note


def _sheet_price(scenario: Scenario, item: PriceItem, origin: _Origin, period: Period) -> SheetPrice:
    used_in = scenario.case.prices[item.item, period.name].unit_used
    measure = measure_of(item, used_in)
    basis, source, date, note = (origin.texts.get(word, "") for word in ("basis", "source", "date", "note"))
    if origin.row is not None:
        unit, of, times = origin.row.text("unit"), origin.row.cells.get("relative_to", ""), None
        values = _row_values(scenario, origin.row)
    else:
        assert origin.price is not None
        of = origin.price.of
        unit, number, times = _number(scenario, item, measure, origin.price, period)
        values = (number, *[None] * (len(case_names(scenario)) - 1))
    factors = price_units(scenario, item, measure, period, [unit])
    return SheetPrice(item.item, origin.month, unit, values, used_in, factors, basis, of, times, source, date, note)


def _row_values(scenario: Scenario, row: Row) -> tuple[float | None, ...]:
    """The numbers of a row of the price table; a blank there means: as its first case, here: as the scenario's own."""
    table_first = scenario.price_cases()[0]
    own, *others = case_names(scenario)
    own = own if own in scenario.price_cases() else str(scenario.file.price_case)
    numbers = {name: float(row.text(name) or row.text(table_first)) for name in (own, *others)}
    blank = [None if not row.text(name) and numbers[name] == numbers[own] else numbers[name] for name in others]
    return (numbers[own], *blank)


def _number(
    scenario: Scenario, item: PriceItem, measure: Measure, price: PriceWritten, period: Period
) -> tuple[str, float, float | None]:
    """Unit, number and `times` of a price; what is added and freight become one amount in the unit of the first."""
    if price.quantity:
        return price.quantity.unit.text, price.quantity.number, None
    added = [quantity for quantity in (price.plus, price.freight) if quantity]
    if not added:
        return SHARE_UNITS[0], price.times, None
    unit = added[0].unit.text
    one = factor_of(scenario, item, measure, unit, period)
    number = sum(
        q.number if q.unit.text == unit else q.number * factor_of(scenario, item, measure, q.unit.text, period) / one
        for q in added
    )
    return unit, number, None if price.times == 1.0 else price.times
