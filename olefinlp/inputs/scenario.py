"""A scenario: what this month is, with its plant, its periods and its price table."""

from __future__ import annotations

import contextlib
import copy
import functools
import os
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

from olefinlp.inputs.findings import Finding, Findings, near_name
from olefinlp.inputs.periods import Period, period
from olefinlp.inputs.plant import Plant, plant_even_if_wrong
from olefinlp.inputs.scenario_file import ScenarioFile
from olefinlp.inputs.tables import Table, read_table
from olefinlp.inputs.units import Basis, UnitError, convert, dims
from olefinlp.inputs.validate import validate
from olefinlp.inputs.yaml_files import Document, Path_, read_yaml

if TYPE_CHECKING:
    from olefinlp.inputs.case import Case
    from olefinlp.inputs.prices import PriceGiven

PRICE_COLUMNS = ("item", "unit", "basis", "source", "date")
PRICE_EXTRAS = ("relative_to", "month", "note")


@dataclass(frozen=True)
class Scenario:
    """A month (or months) to plan. Read it with `read_scenario`, change it with `with_`."""

    path: Path
    document: Document
    file: ScenarioFile
    plant: Plant
    periods: tuple[Period, ...]
    price_table: Table | None
    rates: dict[str, float]
    warnings: tuple[Finding, ...] = ()
    given: Mapping[tuple[str, str], PriceGiven] = field(default_factory=dict)
    """(item, month, or "" for all) → a price that a case gives in place of the one written here."""
    case_name: str = ""

    @property
    def title(self) -> str:
        """The scenario's title."""
        return self.file.title

    @property
    def currency(self) -> str:
        """ISO code of the money of this scenario."""
        return self.file.currency

    @property
    def price_case(self) -> str:
        """The name of the case: that of a case sheet, else of the column of the price table, else nothing."""
        return self.case_name or self.file.price_case or ""

    @property
    def files(self) -> tuple[str, ...]:
        """Every file that was read, the scenario first."""
        prices = (str(self.path.parent / self.file.prices),) if self.file.prices else ()
        return (str(self.path), *prices, *self.plant.files)

    @functools.cached_property
    def case(self) -> Case:
        """The labelled numbers that the plan is made with (see `Case`)."""
        from olefinlp.inputs.case import build_case

        findings = Findings()
        case = build_case(self, findings)
        findings.stop_on_errors()
        assert case is not None
        return case

    def price_cases(self) -> tuple[str, ...]:
        """The price cases of the price table."""
        if self.price_table is None:
            return ()
        return tuple(name for name in self.price_table.columns if name not in (*PRICE_COLUMNS, *PRICE_EXTRAS))

    def basis(self, period: Period, density: float | None = None, lhv_over_hhv: float | None = None) -> Basis:
        """What converts quantities of this scenario in one period."""
        return Basis(density, lhv_over_hhv, period.hours, period.calendar_month, self.currency, self.rates)

    def with_(self, changes: Mapping[str, Any] | None = None, /, **fields: Any) -> Scenario:
        """A changed and validated copy; paths are written as in the file.

        Raises `InputError` when the change does not make a valid scenario.

        >>> from olefinlp import read_scenario
        >>> march = read_scenario("scenarios/brackwater_2031_03.yaml")
        >>> dearer = march.with_({"feeds.ethane.contract.max": "25 kt"}, price_case="High crude")
        >>> dearer.file.price_case
        'High crude'
        """
        findings = Findings()
        data = copy.deepcopy(self.document.data)
        lines, places = dict(self.document.lines), dict(self.document.places)
        for name, value in {**(changes or {}), **fields}.items():
            written = set_value(data, tuple(name.split(".")), copy.deepcopy(value), findings, self.document)
            lines = {path: line for path, line in lines.items() if path[: len(written)] != written}
            places = {path: place for path, place in places.items() if path[: len(written)] != written}
        findings.stop_on_errors()
        document = replace(self.document, data=data, lines=lines, places=places)
        plant = None if "plant" in fields or "plant" in (changes or {}) else self.plant
        name = "" if "price_case" in fields or "price_case" in (changes or {}) else self.case_name
        scenario = _scenario(self.path, document, plant, findings, self.given, name)
        findings.stop_on_errors()
        assert scenario is not None
        return scenario

    def as_case(
        self, name: str, document: Document, given: Mapping[tuple[str, str], PriceGiven], findings: Findings
    ) -> Scenario | None:
        """The scenario under the name of a case, with a changed document and prices given; None with findings."""
        return _scenario(self.path, document, self.plant, findings, given, name)


def read_scenario(path: str | os.PathLike[str]) -> Scenario:
    """Read and check a scenario with its plant and prices.

    Raises `InputError` with everything that is wrong, all at once; warnings stay on the scenario.

    >>> from olefinlp import read_scenario
    >>> read_scenario("scenarios/thermal_cracker.yaml").currency
    'USD'
    """
    findings = Findings()
    scenario = load_scenario(path, findings)
    findings.stop_on_errors()
    assert scenario is not None
    return scenario


def load_scenario(path: str | os.PathLike[str], findings: Findings) -> Scenario | None:
    """As `read_scenario`, with all findings added to the list given and none raised."""
    document = read_yaml(path, findings)
    return _scenario(Path(path), document, None, findings) if document else None


def set_value(data: Any, path: Path_, value: Any, findings: Findings, document: Document) -> Path_:
    """Set one value in nested mappings and lists, making mappings that are missing; the path as lines are kept."""
    written: Path_ = ()
    for depth, part in enumerate(path):
        last = depth == len(path) - 1
        name = ".".join(map(str, path))
        if isinstance(data, list):
            if not str(part).isdigit() or not 1 <= int(part) <= len(data):
                findings.error(document.place(written), name, f"`{part}` is not in this list of {len(data)}")
                return path
            part = int(part) - 1
        elif not isinstance(data, dict):
            findings.error(document.place(written), name, f"`{path[depth - 1]}` is a value, it has no `{part}`")
            return path
        written = (*written, part)
        if last:
            data[part] = value
        elif isinstance(data, dict):
            data = data.setdefault(part, {})
        else:
            data = data[int(part)]
    return written


def _scenario(
    path: Path,
    document: Document,
    plant: Plant | None,
    findings: Findings,
    given: Mapping[tuple[str, str], PriceGiven] | None = None,
    case_name: str = "",
) -> Scenario | None:
    from olefinlp.inputs.case import build_case

    file = validate(document, ScenarioFile, findings)
    if plant is None:
        named = document.data.get("plant")
        plant = plant_even_if_wrong(path.parent / named, findings) if isinstance(named, str) else None
    else:
        findings.items += plant.warnings
    table = _price_table(path, document, file, findings)
    if file is None or plant is None or (file.prices and table is None):
        return None
    periods = _periods(file, document, findings)
    before = len(findings.errors)
    rates = _rates(file, document, findings)
    if len(findings.errors) > before:
        return None  # else every price in that money would be a finding of its own
    scenario = Scenario(path, document, file, plant, periods, table, rates, (), given or {}, case_name)
    if findings.errors:
        # There is no plan, but what else is wrong is worth saying; on what is known to be wrong a
        # later check may stumble, and then the findings so far are what there is to say.
        with contextlib.suppress(Exception):
            build_case(scenario, findings)
        return None
    case = build_case(scenario, findings)
    if case is None or findings.errors:
        return None
    scenario = replace(scenario, warnings=findings.warnings)
    case.scenario = scenario
    scenario.__dict__["case"] = case
    return scenario


def _price_table(path: Path, document: Document, file: ScenarioFile | None, findings: Findings) -> Table | None:
    named = document.data.get("prices")
    if not isinstance(named, str):
        return None
    table = read_table(path.parent / named, findings, required=PRICE_COLUMNS, optional=PRICE_EXTRAS, others=True)
    if table is None or file is None:
        return table
    cases = [name for name in table.columns if name not in (*PRICE_COLUMNS, *PRICE_EXTRAS)]
    if file.price_case not in cases:
        findings.error(
            document.place(("price_case",)),
            "price_case",
            f"`{file.price_case}` is not a price case of {table.file}",
            near_name(str(file.price_case), cases),
        )
        return None
    return table


def _periods(file: ScenarioFile, document: Document, findings: Findings) -> tuple[Period, ...]:
    periods: list[Period] = []
    for index, written in enumerate(file.months):
        if written.name in (p.name for p in periods):
            findings.error(document.place(("months", index)), "months", f"`{written.name}` is there twice")
        else:
            periods.append(period(written.name, written.hours))
    calendar_names = [p.name for p in periods if p.calendar_month]
    if calendar_names != sorted(calendar_names):
        findings.error(document.place(("months",)), "months", "the months are not in the order of time")
    return tuple(periods)


def _rates(file: ScenarioFile, document: Document, findings: Findings) -> dict[str, float]:
    """Value of one unit of each other currency, in the scenario's."""
    from olefinlp.inputs.currencies import ISO_CODES

    rates: dict[str, float] = {}
    if file.currency not in ISO_CODES:
        findings.error(document.place(("currency",)), "currency", f"`{file.currency}` is not an ISO currency code")
    for code, quantity in file.exchange_rates.items():
        name = f"exchange_rates.{code}"
        place = document.place(("exchange_rates", code))
        if code not in ISO_CODES:
            findings.error(place, name, f"`{code}` is not an ISO currency code")
            continue
        try:
            rates[code] = convert(quantity, dims(currency=1), Basis(currency=file.currency))
        except UnitError as error:
            findings.error(place, name, str(error), f"write what one {code} is worth: `{code}: 1.08 {file.currency}`")
            continue
        if rates[code] <= 0:
            del rates[code]
            findings.error(place, name, "an exchange rate must be above zero")
    return rates
