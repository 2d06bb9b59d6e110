"""Any number of the files, named by its path, and the scenario with other values of some of them.

A path is written as the reference writes it: a price item, a number of the scenario, this month's factor of
a recovery unit or outage of a furnace group, or a number of the plant and its tables.
"""

from __future__ import annotations

import copy
import difflib
import re
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, replace
from typing import Any

from olefinlp.inputs.case_rows import shortest
from olefinlp.inputs.cases import FACTOR, OUTAGE, Change, WrittenCase, case_scenario
from olefinlp.inputs.fields import PriceWritten
from olefinlp.inputs.findings import Findings, Place, near_name
from olefinlp.inputs.plant import Mode, Plant, YieldRow
from olefinlp.inputs.plant_checks import check_mode_hours, check_mode_numbers, check_plant
from olefinlp.inputs.plant_file import PlantFile
from olefinlp.inputs.plant_yields import check_yield_rows
from olefinlp.inputs.prices import AMOUNT, MONTH, NUMBER, PriceGiven, item_name, typed_of
from olefinlp.inputs.scenario import Scenario, set_value
from olefinlp.inputs.scenario_file import ScenarioFile
from olefinlp.inputs.units import SHARES, Quantity, UnitError, parse_quantity, parse_unit
from olefinlp.inputs.validate import validate

PRICE, SCENARIO, PLANT = "price", "scenario", "plant"
OTHER_MONTHS = "other_months"
MODE_NUMBERS = {"charge": "t/h", "run_length": "h", "decoke": "h", "fired_heat": "GJ/t LHV"}
CALLED = Place("sweep")
"""Where a varied number is written: in the definition of a sweep."""


class NoNumber(ValueError):
    """There is no number at a path, or none that can be varied so; `message` says why, `hint` what to write."""

    def __init__(self, message: str, hint: str = "") -> None:
        super().__init__(f"{message}; {hint}" if hint else message)
        self.message, self.hint = message, hint


@dataclass(frozen=True, slots=True)
class Varied:
    """A number that can be given other values.

    `today` is its value in each month of the scenario in `unit` (empty for a pure number); one value without a month
    where it is the same for all or belongs to the plant. The unit is the one in which the number is written; yields are in
    wt%, hours of modes in h, and an amount that is added to another price in the unit in which prices are used.
    """

    path: str
    kind: str
    unit: str
    today: tuple[tuple[str, float], ...]
    month: str = ""

    @property
    def name(self) -> str:
        """The path, with its month where it is of one month alone."""
        return f"{self.path} {self.month}" if self.month else self.path

    @property
    def first(self) -> float:
        """Today's value, of the first month."""
        return self.today[0][1]


def find_varied(scenario: Scenario, path: str, month: str = "") -> Varied:
    """The number at a path.

    Raises `NoNumber`, a `ValueError`, with the nearest path where there is none, and where a path holds no number.

    >>> from olefinlp import read_scenario
    >>> march = read_scenario("scenarios/brackwater_2031_03.yaml")
    >>> find_varied(march, "feeds.ethane.contract").first, find_varied(march, "feeds.ethane.contract.max").unit
    (41.0, 'kt')
    """
    months = [period.name for period in scenario.periods]
    if month and month not in months:
        raise NoNumber(f"`{month}` is not a month of this scenario", near_name(month, months))
    chosen = [month] if month else months
    item = item_name(path.split("."))
    if (item, months[0]) in scenario.case.prices:
        prices = [scenario.case.prices[item, one] for one in chosen]
        typed = [typed_of(price) for price in prices]
        if len({(kind, unit) for kind, _, unit, _ in typed}) > 1:
            raise NoNumber(f"`{path}` is written in different ways from month to month", "vary one month of it")
        return Varied(item, PRICE, typed[0][2], tuple(zip(chosen, (t[1] for t in typed), strict=True)), month)
    found = _this_month(scenario, path, chosen) or _in_scenario(scenario, path, chosen)
    if found:
        return replace(found, month=month)
    found = _in_plant(scenario.plant, path)
    if found is None:
        raise _no_number(scenario, path, months)
    if month:
        raise NoNumber(f"`{path}` belongs to the plant, whatever the month")
    return found


def _no_number(scenario: Scenario, path: str, months: list[str]) -> NoNumber:
    """Why there is no number at a path."""
    above, _, last = path.rpartition(".")
    if last in (*months, OTHER_MONTHS) and _at(scenario.document.data, above) is not None:
        hint = "name the month apart from the path" if last in months else "vary one month after the other"
        return NoNumber(f"`{path}` ends in a month", hint)
    value = _at(scenario.document.data, path) or _at(scenario.plant.document.data, path)
    if value is not None and not isinstance(value, dict | list):
        return NoNumber(f"`{path}` is `{value}`, no number")
    return NoNumber(f"`{path}` is no number of the scenario or its plant", _nearest(path, known_paths(scenario)))


def _nearest(path: str, known: Iterable[str]) -> str:
    near = difflib.get_close_matches(path, list(known), n=1, cutoff=0.5)
    return f"did you mean `{near[0]}`?" if near else "see models/README.md and scenarios/README.md"


def scenario_at(scenario: Scenario, values: Mapping[Varied, float], percent: Iterable[Varied] = ()) -> Scenario:
    """The scenario with other values, validated; those of `percent` are changes in per cent of what is there in each month.

    Raises `InputError` when that is no valid scenario.
    """
    findings = Findings()
    by_percent = set(percent)
    plant = plant_at(scenario.plant, {v: _new(v, value, v in by_percent)[0][1] for v, value in values.items() if v.kind == PLANT})
    prices: dict[tuple[str, str], PriceGiven] = {}
    changes: list[Change] = []
    for varied, value in values.items():
        for month, number in _written_for(varied, _new(varied, value, varied in by_percent)):
            if varied.kind == PRICE:
                prices[varied.path, month] = _given(scenario, varied, month, number)
            elif varied.kind == SCENARIO:
                written = f"{shortest(number)} {varied.unit}" if varied.unit else number
                changes.append(Change(varied.path, month, written, CALLED, "varied in a sweep"))
    base = replace(scenario, plant=plant) if plant is not scenario.plant else scenario
    changed = case_scenario(base, WrittenCase("varied", CALLED, prices, tuple(changes)), findings)
    findings.stop_on_errors()
    assert changed is not None
    return changed


def _new(varied: Varied, value: float, percent: bool) -> list[tuple[str, float]]:
    """The new number of each month."""
    return [(month, today * (1 + value / 100) if percent else value) for month, today in varied.today]


def _written_for(varied: Varied, new: list[tuple[str, float]]) -> list[tuple[str, float]]:
    """A number of the scenario that is the same in all its months is written once: some take no value a month."""
    once = varied.kind == SCENARIO and not varied.month and len({number for _, number in new}) == 1
    return [("", new[0][1])] if once else new


def _given(scenario: Scenario, varied: Varied, month: str, number: float) -> PriceGiven:
    """A price with another number, leaning on what it leans on today."""
    price = scenario.case.prices[varied.path, month]
    kind = typed_of(price)[0]
    if kind == NUMBER:
        unit = parse_unit(price.unit)
        return PriceGiven(PriceWritten(Quantity(number, unit, f"{number:.12g} {price.unit}")), price.basis, price.source, CALLED)
    per = parse_unit(price.unit_used)
    plus = number if kind == AMOUNT else price.plus
    added = Quantity(plus, per, f"{plus:.12g} {price.unit_used}") if plus else None
    times = price.times if kind == AMOUNT else number
    return PriceGiven(PriceWritten(None, price.of, times, added), price.basis, price.source, CALLED)


# ---------------------------------------------------------------------------------- numbers of the scenario


def _this_month(scenario: Scenario, path: str, months: list[str]) -> Varied | None:
    """This month's factor of a recovery unit, or outage of a furnace group, written or not."""
    head, _, rest = path.partition(".")
    name, _, word = rest.rpartition(".")
    if head == "recovery_units" and word == FACTOR and name in scenario.plant.units:
        factors = {(f.month, f.unit): f.factor for f in scenario.file.unit_factors}
        return Varied(path, SCENARIO, "", tuple((month, factors.get((month, name), 1.0)) for month in months))
    if head == "furnace_groups" and word == OUTAGE and name in scenario.plant.file.furnace_groups:
        lost = dict.fromkeys(months, 0.0)
        for outage in scenario.file.outages:
            if outage.group == name and outage.month in lost:
                lost[outage.month] += outage.hours.number * outage.hours.unit.factor
        return Varied(path, SCENARIO, "h", tuple(lost.items()))
    return None


def _in_scenario(scenario: Scenario, path: str, months: list[str]) -> Varied | None:
    """A number that the scenario file writes."""
    if path.rpartition(".")[2] in (*(period.name for period in scenario.periods), OTHER_MONTHS):
        return None
    value = _at(scenario.document.data, path)
    by_month = [(month, _month_value(value, month)) for month in months] if value is not None else []
    read = [(month, _number(one)) for month, one in by_month]
    if not read or any(one is None for _, one in read):
        return None
    units = {one[1] for _, one in read if one}
    if len(units) > 1:
        raise NoNumber(f"`{path}` is written in different units from month to month", "vary one month of it")
    one_of_several = len(months) < len(scenario.periods) and not isinstance(value, dict)
    if one_of_several and not _takes_months(scenario, path, months[0], value):
        raise NoNumber(f"`{path}` is one number for all months")
    return Varied(path, SCENARIO, units.pop(), tuple((month, one[0]) for month, one in read if one))


def _takes_months(scenario: Scenario, path: str, month: str, value: Any) -> bool:
    """Whether a number that is written once could be written for each month."""
    findings = Findings()
    data = copy.deepcopy(scenario.document.data)
    set_value(data, tuple(path.split(".")), {month: value, OTHER_MONTHS: value}, findings, scenario.document)
    validate(replace(scenario.document, data=data), ScenarioFile, findings)
    return not findings.errors


def _at(data: Any, path: str) -> Any:
    """What is written at a path; the first of a list is 1."""
    for part in path.split("."):
        if isinstance(data, list) and part.isdigit() and 1 <= int(part) <= len(data):
            data = data[int(part) - 1]
        elif isinstance(data, dict) and part in data:
            data = data[part]
        else:
            return None
    return data


def _month_value(value: Any, month: str) -> Any:
    if isinstance(value, dict):
        return value.get(month, value.get(OTHER_MONTHS))
    return value


def _number(value: Any) -> tuple[float, str] | None:
    """A written number and its unit; None for what is no number."""
    if isinstance(value, bool) or value is None:
        return None
    if isinstance(value, int | float):
        return float(value), ""
    try:
        quantity = parse_quantity(str(value))
    except UnitError:
        return None
    return quantity.number, quantity.unit.text


# ---------------------------------------------------------------------------------- numbers of the plant


def _in_plant(plant: Plant, path: str) -> Varied | None:
    """A number of the plant's file or tables."""
    head, *rest = path.split(".")
    number: tuple[float, str] | None = None
    if head == "yields" and len(rest) == 4 and (row := plant.yields.get((rest[0], rest[1], rest[2]))) and rest[3] in row.shares:
        number = (float(f"{100 * row.shares[rest[3]]:.12g}"), "wt%")  # a share times 100 may end in ...0005
    elif head == "recovery_units" and len(rest) == 2 and rest[1] == "capacity":
        unit = plant.units.get(rest[0])
        number = (unit.capacity.number, unit.capacity.unit.text) if unit and unit.capacity else None
    elif head == "modes" and len(rest) == 4 and rest[3] in MODE_NUMBERS:
        mode = next((m for m in plant.modes if m.key == tuple(rest[:3])), None)
        value = getattr(mode, rest[3]) if mode else None
        number = None if value is None else (float(value), MODE_NUMBERS[rest[3]])
    else:
        number = _number(_at(plant.document.data, path))
    return Varied(path, PLANT, number[1], (("", number[0]),)) if number else None


def plant_at(plant: Plant, values: Mapping[Varied, float]) -> Plant:
    """The plant with other numbers.

    What a yield gains, the other yields of its row lose in proportion, so that they still sum to what they did.
    Raises `InputError` where that is no valid plant: what is read from files is held to the same.
    """
    before = plant
    shares: dict[tuple[str, str, str], dict[str, float]] = {}
    for varied, value in values.items():
        head, *rest = varied.path.split(".")
        if head == "yields":
            shares.setdefault((rest[0], rest[1], rest[2]), {})[rest[3]] = value * SHARES["wt%"]  # as it is read
        elif head == "recovery_units" and rest[1:] == ["capacity"]:
            unit = plant.units[rest[0]]
            quantity = Quantity(value, parse_unit(varied.unit), f"{shortest(value)} {varied.unit}")
            plant = replace(plant, units={**plant.units, rest[0]: replace(unit, capacity=quantity)})
        elif head == "modes":
            plant = replace(plant, modes=tuple(_with_number(mode, rest, value) for mode in plant.modes))
        else:
            plant = _with_written(plant, varied, value)
    if shares:
        rows = {key: _with_shares(plant.yields[key], new) for key, new in shares.items()}
        plant = replace(plant, yields={**plant.yields, **rows})
    _check_changed(before, plant, shares)
    return plant


def _check_changed(before: Plant, plant: Plant, yields: Iterable[tuple[str, str, str]]) -> None:
    """What was changed is held to what is asked of files; the rest has been looked at when it was read."""
    findings = Findings()
    if plant.file is not before.file:
        check_plant(plant, findings)
    else:
        check_yield_rows(replace(plant, yields={key: plant.yields[key] for key in yields}), findings)
        modes = tuple(mode for mode, old in zip(plant.modes, before.modes, strict=True) if mode is not old)
        for check in (check_mode_numbers, check_mode_hours) if modes else ():
            check(replace(plant, modes=modes), findings)
    for name, unit in plant.units.items():
        if unit is not before.units[name] and unit.capacity and unit.capacity.number < 0:
            findings.error(CALLED, f"recovery_units.{name}", f"the capacity `{unit.capacity}` is negative")
    findings.stop_on_errors()


def _with_shares(row: YieldRow, new: Mapping[str, float]) -> YieldRow:
    """All new yields of a row together: one after the other, the second would change the first again."""
    rest = sum(value for name, value in row.shares.items() if name not in new)
    gained = sum(value - row.shares[name] for name, value in new.items())
    scale = (rest - gained) / rest if rest else 1.0
    shares = {name: new.get(name, value * scale) for name, value in row.shares.items()}
    return replace(row, shares=shares, written={name: f"{100 * value:.12g} wt%" for name, value in shares.items()})


def _with_number(mode: Mode, rest: list[str], value: float) -> Mode:
    if mode.key != tuple(rest[:3]):
        return mode
    changed: dict[str, Any] = {rest[3]: value}
    return replace(mode, **changed)


def _with_written(plant: Plant, varied: Varied, value: float) -> Plant:
    """A number of plant.yaml itself."""
    findings = Findings()
    data = copy.deepcopy(plant.document.data)
    number = int(value) if value == int(value) else value  # some numbers are counts
    written = f"{shortest(value)} {varied.unit}" if varied.unit else number
    path = set_value(data, tuple(varied.path.split(".")), written, findings, plant.document)
    document = replace(plant.document, data=data, places={**plant.document.places, path: CALLED})
    file = validate(document, PlantFile, findings)
    findings.stop_on_errors()
    assert file is not None
    return replace(plant, document=document, file=file)


def known_paths(scenario: Scenario) -> Iterator[str]:
    """Paths that can be varied, for hints."""
    yield from dict.fromkeys(item for item, _ in scenario.case.prices)
    yield from _numbers(scenario.document.data, ())
    yield from (f"recovery_units.{name}.{FACTOR}" for name in scenario.plant.units)
    yield from (f"furnace_groups.{name}.{OUTAGE}" for name in scenario.plant.file.furnace_groups)
    yield from (f"recovery_units.{name}.capacity" for name, unit in scenario.plant.units.items() if unit.capacity)
    for (table, feed, severity), row in scenario.plant.yields.items():
        yield from (f"yields.{table}.{feed}.{severity}.{component}" for component in row.shares)
    for mode in scenario.plant.modes:
        yield from (f"modes.{mode.name}.{word}" for word in MODE_NUMBERS if getattr(mode, word) is not None)
    yield from _numbers(scenario.plant.document.data, ())


def _numbers(data: Any, path: tuple[str, ...]) -> Iterator[str]:
    """Paths of everything that reads as a number."""
    if isinstance(data, dict):
        if data and all(name == OTHER_MONTHS or re.fullmatch(MONTH, str(name)) for name in data):
            yield from [".".join(path)] if all(_number(value) for value in data.values()) else []
            return
        for name, value in data.items():
            yield from _numbers(value, (*path, str(name)))
    elif isinstance(data, list):
        for number, value in enumerate(data, 1):
            yield from _numbers(value, (*path, str(number)))
    elif _number(data):
        yield ".".join(path)
