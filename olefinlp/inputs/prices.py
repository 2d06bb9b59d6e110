"""Prices: each written once, in the scenario or its price table, and worked out on one basis.

A price may lean on another (`of`, `times`, `plus`, `freight`); what the plan uses is the
effective price, in the scenario's currency per t, GJ LHV, MWh or piece.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from olefinlp.inputs.fields import Monthly, PriceWritten
from olefinlp.inputs.findings import Findings, Place, near_name, path_text
from olefinlp.inputs.measures import ANY, EACH, HEAT, MASS, POWER, Measure
from olefinlp.inputs.periods import Period
from olefinlp.inputs.scenario import Scenario
from olefinlp.inputs.tables import Row, Table
from olefinlp.inputs.units import SHARES, Quantity, UnitError, convert, parse_unit
from olefinlp.inputs.yaml_files import Path_

MONTH = r"\d{4}-(0[1-9]|1[0-2])"
LAST_WORDS = ("price", "cost")
NUMBER, SHARE, AMOUNT = "number", "share", "amount"
"""What of a price a person can type: its number, the share of the price that it leans on, the amount added to that."""


@dataclass(frozen=True)
class PriceItem:
    """A price that the scenario needs: where it would stand, and what it is per."""

    path: Path_
    measure: Measure
    written: Monthly[PriceWritten] | None
    basis: str = ""
    density: float | None = None
    lhv_over_hhv: float | None = None

    @property
    def item(self) -> str:
        """The name that price tables and relative prices use."""
        return item_name(self.path)


@dataclass(frozen=True)
class Price:
    """A price of one item in one month: as written, and `value` as used.

    value = number × factor for an absolute price; times × value of `of` + `plus` for a relative one.
    """

    item: str
    month: str
    text: str
    number: float
    unit: str
    factor: float
    of: str
    times: float
    plus: float
    value: float
    unit_used: str
    basis: str
    source: str
    place: Place


def typed_of(price: Price) -> tuple[str, float, str, float]:
    """What of a price is typed: kind, number, its unit, and the effective price per unit of it (0 for a share)."""
    if not price.of:
        return NUMBER, price.number, price.unit, price.factor
    if price.plus and price.times == 1.0:
        return AMOUNT, price.plus, price.unit_used, 1.0
    return SHARE, price.times, "fraction", 0.0


def price_items_of(scenario: Scenario) -> dict[str, PriceItem]:
    """Every price that a scenario needs, by item: what it is per, and what turns its units."""
    from olefinlp.inputs import case_outlets, case_supply, case_utilities

    items = [*case_supply.price_items(scenario), *case_outlets.price_items(scenario), *case_utilities.price_items(scenario)]
    return {item.item: item for item in items}


def item_name(path: Iterable[str | int]) -> str:
    """The item of a path: `feeds.ethane.contract.price` is `feeds.ethane.contract`.

    >>> item_name(("outlets", "raw_pygas", "deduction"))
    'outlets.raw_pygas.deduction'
    """
    parts = path_text(path).split(".")
    return ".".join(parts[:-1] if parts[-1] in LAST_WORDS else parts)


@dataclass(frozen=True, slots=True)
class PriceGiven:
    """One price as written for one month, before others that it leans on are known.

    A case gives its prices so, in place of those that the scenario writes.
    """

    price: PriceWritten
    basis: str
    source: str
    place: Place


class PriceBook:
    """Works out all prices of a scenario."""

    def __init__(self, scenario: Scenario, items: Iterable[PriceItem], findings: Findings) -> None:
        self.scenario = scenario
        self.findings = findings
        self.items = {item.item: item for item in items}
        self.rows = self._table_rows(scenario.price_table) if scenario.price_table else {}
        self._done: dict[tuple[str, str], Price | None] = {}
        self._busy: list[str] = []

    def prices(self) -> dict[tuple[str, str], Price]:
        """Effective prices by item and month; what is missing or wrong is found."""
        result: dict[tuple[str, str], Price] = {}
        for name in self.items:
            for month in self.scenario.periods:
                price = self._price(name, month)
                if price:
                    result[name, month.name] = price
        return result

    def _table_rows(self, table: Table) -> dict[str, dict[str, Row]]:
        rows: dict[str, dict[str, Row]] = {}
        months = [period.name for period in self.scenario.periods]
        heads = {name.split(".")[0] for name in self.items} | {"indexes"}
        for row in table:
            name = row.text("item")
            for word in LAST_WORDS:
                name = name.removesuffix(f".{word}")
            month = row.cells.get("month", "")
            if month and month not in months and not re.fullmatch(MONTH, month):
                self.findings.error(row.place("month"), name, f"`{month}` is not a month", near_name(month, months))
            first = rows.setdefault(name, {}).setdefault(month, row)
            if first is not row:
                self.findings.error(row.place("item"), name, f"is written twice, first in line {first.line}")
            if name not in self.items and not self._known_elsewhere(name):
                path = "an item is a path, for example `feeds.<feed>.<source>`"
                hint = near_name(name, self.items) if name.split(".")[0] in heads else path
                self.findings.warn(row.place("item"), name, "this price is for nothing in this scenario", hint)
        return rows

    def _known_elsewhere(self, name: str) -> bool:
        """Whether the plant knows the item although this scenario does not use it."""
        parts, plant = name.split("."), self.scenario.plant.file
        known: Mapping[str, Iterable[str]] = {
            "feeds": plant.feeds,
            "side_streams": plant.side_streams,
            "outlets": plant.outlets,
            "contents": plant.cuts,
            "utilities": self.scenario.plant.trades(),
            "stocks": (*plant.feeds, *plant.cuts),
        }
        offered = len(parts) > 1 and parts[0] in known and parts[1] in getattr(self.scenario.file, parts[0])
        return len(parts) > 1 and parts[1] in known.get(parts[0], ()) and not offered

    def _price(self, name: str, period: Period) -> Price | None:
        key = (name, period.name)
        if key not in self._done:
            if name in self._busy:
                chain = " → ".join([*self._busy[self._busy.index(name) :], name])
                given = self.scenario.given
                own = given.get(key) or given.get((name, ""))
                place = own.place if own else self._place(self.items[name])
                self.findings.error(place, name, f"the price leans on itself: {chain}")
                return None
            self._busy.append(name)
            written = self._written(self.items[name], period.name)
            self._done[key] = self._worked_out(self.items[name], written, period) if written else None
            self._busy.pop()
        return self._done[key]

    def _place(self, item: PriceItem) -> Place:
        return self.scenario.document.place(item.path)

    def _written(self, item: PriceItem, month: str) -> PriceGiven | None:
        given = self.scenario.given
        if (item.item, month) in given or (item.item, "") in given:
            return given.get((item.item, month)) or given[item.item, ""]
        rows = self.rows.get(item.item, {})
        if item.written is not None and rows:
            line = next(iter(rows.values())).place()
            self.findings.error(self._place(item), item.item, f"this price also stands in {line}", "keep one of the two")
            return None
        if item.written is not None:
            price = item.written.at(month)
            self._check_months(item, item.written)
            if price is None:
                message = f"has no {item.path[-1]} for {month}"
                self.findings.error(self._place(item), item.item, message, "add it, or `other_months:`")
                return None
            return PriceGiven(price, item.basis, "", self._place(item))
        row = rows.get(month) or rows.get("")
        if row is None:
            file = self.scenario.file.prices
            word = item.path[-1]
            where = f"`{word}:` here, or a row `{item.item}` in {file}" if file else f"`{word}:` here"
            self.findings.error(self._place(item), item.item, f"has no {word}", f"write {where}")
            return None
        return self._from_row(item, row)

    def _check_months(self, item: PriceItem, written: Monthly[PriceWritten]) -> None:
        months = [period.name for period in self.scenario.periods]
        for month, _ in written.by_month:
            if month not in months and not re.fullmatch(MONTH, month):
                hint = near_name(month, [*months, "other_months"])
                self.findings.error(self._place(item), item.item, f"`{month}` is not a month", hint)
            elif month not in months:
                self.findings.warn(self._place(item), item.item, f"has no effect: {month} is not in this scenario")

    def _from_row(self, item: PriceItem, row: Row) -> PriceGiven | None:
        case = str(self.scenario.file.price_case)
        if not row.text(case):
            case = self.scenario.price_cases()[0]  # blank: as the first case
        number = row.number(case, self.findings)
        if number is None:
            if not row.text(case):
                self.findings.error(row.place(case), item.item, "has no price in this case, nor in the first one")
            return None
        try:
            unit = parse_unit(row.text("unit"))
        except UnitError as error:
            self.findings.error(row.place("unit"), item.item, str(error), error.hint)
            return None
        quantity = Quantity(number, unit, f"{row.text(case)} {unit.text}")
        if not row.text("basis"):
            self.findings.warn(row.place("basis"), item.item, "does not say its basis", "delivered or not, which gallons …")
        of = row.cells.get("relative_to", "")
        written = PriceWritten(quantity)
        if of and unit.share in SHARES:
            written = PriceWritten(None, of, number * unit.factor)
        elif of:
            written = PriceWritten(None, of, 1.0, quantity)
        source = " ".join(part for part in (row.text("source"), row.text("date")) if part)
        return PriceGiven(written, row.text("basis"), source, row.place(case))

    def _worked_out(self, item: PriceItem, written: PriceGiven, period: Period) -> Price | None:
        price = written.price
        try:
            if price.quantity:
                factor, unit = self._factor(item, price.quantity, period)
                return self._made(item, written, period, price.quantity, factor, price.quantity.number * factor, unit)
            return self._relative(item, written, period)
        except UnitError as error:
            self.findings.error(written.place, item.item, str(error), error.hint)
            return None

    def _relative(self, item: PriceItem, written: PriceGiven, period: Period) -> Price | None:
        price = written.price
        name = item_name(price.of.split("."))
        if name not in self.items:
            self.findings.error(written.place, item.item, f"leans on the unknown item `{price.of}`", near_name(name, self.items))
            return None
        base = self._price(name, period)
        if base is None:
            return None
        unit = self._unit_used(item)
        if item.measure is ANY:
            unit = base.unit_used
        if base.unit_used != unit:
            raise UnitError(f"is in {unit}, but `{name}` is in {base.unit_used}")
        plus = sum(
            quantity.number * self._factor(item, quantity, period)[0] for quantity in (price.plus, price.freight) if quantity
        )
        value = price.times * base.value + plus
        return self._made(item, written, period, None, 1.0, value, unit, (name, price.times, plus))

    def _unit_used(self, item: PriceItem) -> str:
        currency = self.scenario.currency
        return currency if item.measure is EACH else f"{currency}/{item.measure.unit}"

    def _factor(self, item: PriceItem, quantity: Quantity, period: Period) -> tuple[float, str]:
        """What one written unit is in the unit used, and that unit."""
        basis = self.scenario.basis(period, item.density, item.lhv_over_hhv)
        one = Quantity(1.0, quantity.unit, quantity.text)
        measure = item.measure
        if measure is ANY:
            heat, power = "energy" in dict(quantity.unit.dimensions), quantity.unit.electric
            measure = POWER if power else HEAT if heat else MASS
        factor = convert(one, measure.per, basis, measure.energy)
        currency = self.scenario.currency
        return factor, currency if measure is EACH else f"{currency}/{measure.unit}"

    def _made(
        self,
        item: PriceItem,
        written: PriceGiven,
        period: Period,
        quantity: Quantity | None,
        factor: float,
        value: float,
        unit: str,
        lean: tuple[str, float, float] = ("", 0.0, 0.0),
    ) -> Price:
        return Price(
            item=item.item,
            month=period.name,
            text=str(written.price),
            number=quantity.number if quantity else 0.0,
            unit=quantity.unit.text if quantity else "",
            factor=factor,
            of=lean[0],
            times=lean[1],
            plus=lean[2],
            value=value,
            unit_used=unit,
            basis=written.basis,
            source=written.source,
            place=written.place,
        )
