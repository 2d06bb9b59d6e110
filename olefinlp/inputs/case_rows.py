"""Rows of a table of cases, from a workbook or a csv file: one row an item, one column a case."""

from __future__ import annotations

import math
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

from olefinlp.inputs.cases import FACTOR, OUTAGE, Change, WrittenCase
from olefinlp.inputs.fields import UNLIMITED, PriceWritten
from olefinlp.inputs.findings import Findings, Place, near_name
from olefinlp.inputs.prices import LAST_WORDS, PriceGiven, price_items_of
from olefinlp.inputs.scenario import Scenario
from olefinlp.inputs.units import SHARES, Quantity, Unit, UnitError, parse_unit

LIMIT_WORDS = frozenset(("min", "max", "take_or_pay", "up_to", "opening", FACTOR, OUTAGE))
"""Last parts of items that are no price, whatever their unit."""
WEIGHT = "weight"
"""The item of the row that weighs the cases."""
COLUMNS = ("item", "unit", "basis", "source", "date")
"""Columns that a table of cases must have, beside one for each case."""
EXTRAS = ("relative_to", "times", "month", "note")
"""Columns that it may have."""
_NUMBER = re.compile(r"[-+]?(\d+\.?\d*|\.\d+)([eE][-+]?\d+)?", re.ASCII)


@dataclass(frozen=True, slots=True)
class CaseCell:
    """What one case says in a row: a number, or a text without blanks around it. A blank cell is no `CaseCell`."""

    value: float | str
    place: Place


@dataclass(frozen=True)
class CaseRow:
    """One row: texts by column (`COLUMNS` and `EXTRAS`, empty where blank), and the cells of the cases by name."""

    place: Place
    texts: Mapping[str, str]
    cells: Mapping[str, CaseCell]
    places: Mapping[str, Place] = field(default_factory=dict)

    def text(self, column: str) -> str:
        """The text of a column."""
        return self.texts.get(column, "")

    def at(self, column: str) -> Place:
        """Where the cell of a column stands."""
        return self.places.get(column, self.place)


@dataclass(frozen=True, slots=True)
class CaseName:
    """The heading of a case's column."""

    name: str
    place: Place


class _Gathered:
    """What the rows say, by case, while they are read."""

    def __init__(self, scenario: Scenario, names: Sequence[CaseName], findings: Findings) -> None:
        self.scenario, self.names, self.findings = scenario, names, findings
        self.items = price_items_of(scenario)
        self.prices: dict[str, dict[tuple[str, str], PriceGiven]] = {one.name: {} for one in names}
        self.changes: dict[str, list[Change]] = {one.name: [] for one in names}
        self.weights: dict[str, float] = {}
        self.seen: dict[tuple[str, str], Place] = {}

    def row(self, row: CaseRow) -> None:
        """One row, whatever it is."""
        item, month = item_of(row), row.text("month")
        first = self.seen.setdefault((item, month), row.place)
        if first is not row.place:
            self.findings.error(row.at("item"), item, f"is written twice, first in {first}")
        elif item == WEIGHT:
            for name, cell in row.cells.items():
                weight = self.number(item, cell)
                if weight is not None:
                    self.weights[name] = weight
        elif item in self.items:
            self.price_row(item, month, row)
        else:
            self.change_row(item, month, row)

    def price_row(self, item: str, month: str, row: CaseRow) -> None:
        """A price: every case has its own, or that of the first."""
        unit = self.unit(item, row)
        first = row.cells.get(self.names[0].name) if self.names else None
        if first is None:
            name = self.names[0].name if self.names else ""
            self.findings.error(row.at(name), item, f"has no price in the first case, {name}", "a blank means: as the first case")
        times = self.times(item, row)
        for one in self.names:
            cell = row.cells.get(one.name, first)
            number = self.number(item, cell) if cell else None
            if unit and number is not None and cell:
                written = _price(number, unit, row.text("relative_to"), times)
                source = " ".join(part for part in (row.text("source"), row.text("date")) if part)
                self.prices[one.name][item, month] = PriceGiven(written, row.text("basis"), source, cell.place)

    def times(self, item: str, row: CaseRow) -> float:
        """What a price that is added to another takes of it; all of it where nothing is written."""
        text = row.text("times")
        if not text:
            return 1.0
        if not _NUMBER.fullmatch(text):
            self.findings.error(row.at("times"), item, f"`{text}` is not a number")
            return 1.0
        return float(text)

    def change_row(self, item: str, month: str, row: CaseRow) -> None:
        """Availability or a limit: the first case's own value is that of the scenario where its cell is blank."""
        if not self.known_section(item, row):
            return
        plain = item.endswith(f".{FACTOR}") and not row.text("unit")
        unit = None if plain else self.unit(item, row)
        if unit is None and not plain:
            return
        first = row.cells.get(self.names[0].name) if self.names else None
        for one in self.names:
            cell = row.cells.get(one.name, first)
            value = self.value(item, cell, unit) if cell else None
            if value is not None and cell:
                self.changes[one.name].append(Change(item, month, value, cell.place, row.text("note")))

    def known_section(self, item: str, row: CaseRow) -> bool:
        """Whether an item begins like a path; a price that is not there gets its nearest name."""
        head = item.split(".")[0]
        sections = {"feeds", "side_streams", "outlets", "utilities", "stocks", "limits", "recovery_units", "furnace_groups"}
        if head in sections and not _like_a_price(row):
            return True
        known = [*self.items, WEIGHT] if head in {name.split(".")[0] for name in self.items} or "." not in item else []
        self.findings.error(row.at("item"), item, "is no price of this scenario, nor a limit", near_name(item, known))
        return False

    def value(self, item: str, cell: CaseCell, unit: Unit | None) -> str | float | None:
        """A changed number as YAML would hold it."""
        if isinstance(cell.value, str) and cell.value.lower() == UNLIMITED:
            return UNLIMITED
        number = self.number(item, cell)
        if number is None:
            return None
        if unit and unit.share in SHARES and item.endswith(f".{FACTOR}"):
            return number * unit.factor  # 95 % of the capacity
        return f"{shortest(number)} {unit.text}" if unit else number

    def unit(self, item: str, row: CaseRow) -> Unit | None:
        """The unit of a row."""
        if not row.text("unit"):
            self.findings.error(row.at("unit"), item, "has no unit", "choose one from the list, for example `USD/t` or `kt`")
            return None
        try:
            return parse_unit(row.text("unit"))
        except UnitError as error:
            self.findings.error(row.at("unit"), item, str(error), error.hint)
            return None

    def number(self, item: str, cell: CaseCell) -> float | None:
        """The number in a cell; a finding where it is none."""
        if isinstance(cell.value, float):
            return cell.value
        if _NUMBER.fullmatch(cell.value) and math.isfinite(float(cell.value)):
            return float(cell.value)
        hint = "a point for decimals, no thousands mark, no unit in the cell"
        self.findings.error(cell.place, item, f"`{cell.value}` is not a number", hint)
        return None


def _like_a_price(row: CaseRow) -> bool:
    """Whether a row that is no known price was meant as one: its unit is money, or it leans on a price."""
    unit = row.text("unit")
    if row.text("item").rpartition(".")[2] in LIMIT_WORDS:
        return False
    return bool(row.text("relative_to")) or bool(re.match(r"[kMc]?[A-Z]{3}/|USc/", unit))


def shortest(number: float) -> str:
    """A number with all its digits and no more.

    >>> shortest(20.0), shortest(0.1)
    ('20', '0.1')
    """
    return repr(number).removesuffix(".0")


def item_of(row: CaseRow) -> str:
    """The item of a row, without a last `price` or `cost`."""
    item = row.text("item")
    for word in LAST_WORDS:
        item = item.removesuffix(f".{word}")
    return item


def _price(number: float, unit: Unit, of: str, times: float) -> PriceWritten:
    """A price as written: absolute, a share of another, or another (times something) plus an amount."""
    quantity = Quantity(number, unit, f"{number:.12g} {unit.text}")
    if not of:
        return PriceWritten(quantity)
    if unit.share in SHARES:
        return PriceWritten(None, of, number * unit.factor)
    return PriceWritten(None, of, times, quantity)


def written_cases(
    rows: Sequence[CaseRow], names: Sequence[CaseName], scenario: Scenario, findings: Findings
) -> list[WrittenCase]:
    """The cases that rows write, the first case's cells filled in where others are blank."""
    gathered = _Gathered(scenario, names, findings)
    for row in rows:
        gathered.row(row)
    return [
        WrittenCase(
            one.name, one.place, gathered.prices[one.name], tuple(gathered.changes[one.name]), "", gathered.weights.get(one.name)
        )
        for one in names
    ]
