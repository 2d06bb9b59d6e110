"""Utilities: uses and makes per unit of everything, trades, conversions; variable and fixed costs."""

from __future__ import annotations

from collections.abc import Iterator

from olefinlp.inputs.case import CostLine, Part, Reader
from olefinlp.inputs.case_recovery import item_parts, plan_unit
from olefinlp.inputs.findings import path_text
from olefinlp.inputs.measures import EACH, MASS, Measure
from olefinlp.inputs.plant import UtilityUse
from olefinlp.inputs.prices import PriceItem
from olefinlp.inputs.ratios import (
    conversion_measure,
    outlet_measure,
    trade_measure,
    unit_measure,
    utility_amount,
    utility_quantity,
)
from olefinlp.inputs.scenario import Scenario
from olefinlp.inputs.scenario_file import VariableCost
from olefinlp.inputs.units import UnitError, convert, dims
from olefinlp.inputs.yaml_files import Path_

MONEY = Measure("money", dims(currency=1))


def _trade_ratio(scenario: Scenario, trade: str) -> float | None:
    utility, kind = scenario.plant.trades()[trade]
    ratio: float | None = getattr(scenario.plant.file.utilities[utility], kind)[trade].lhv_over_hhv
    return ratio


def cost_measure(scenario: Scenario, cost: VariableCost) -> Measure:
    """What a variable cost is per."""
    plant, item = scenario.plant, cost.item[0]
    if cost.of == "decoke":
        return EACH
    if cost.of == "outlet":
        return outlet_measure(plant, item)
    if cost.of == "unit_load":
        return unit_measure(plant.units[item])
    if cost.of == "conversion":
        return conversion_measure(plant, item)
    return MASS


def price_items(scenario: Scenario) -> Iterator[PriceItem]:
    """The prices of trades, variable costs and indexes."""
    from olefinlp.inputs.case_supply import density_of
    from olefinlp.inputs.measures import ANY

    for trade, terms in scenario.file.utilities.items():
        measure = trade_measure(scenario.plant, trade)
        ratio = _trade_ratio(scenario, trade)
        yield PriceItem(("utilities", trade, "price"), measure, terms.price, terms.basis or "", None, ratio)
    for name, cost in scenario.file.variable_costs.items():
        yield PriceItem(("variable_costs", name, "cost"), cost_measure(scenario, cost), cost.cost, cost.note or "")
    for name, index in scenario.file.indexes.items():
        density = density_of(index.density)
        yield PriceItem(("indexes", name, "price"), ANY, index.price, index.basis or "", density)


def read_utilities(reader: Reader) -> None:
    """Uses and makes, trades with their limits, conversions, costs."""
    case, plant = reader.case, reader.plant
    parts: dict[str, list[Part]] = {name: [] for name in plant.file.utilities}
    for use in plant.utility_uses:
        _read_use(reader, use, parts)
    for mode in plant.modes:
        if mode.name not in case.mode_feed:
            continue
        fired_with = plant.file.furnace_groups[mode.group].fired_with
        if fired_with and mode.fired_heat:
            parts[fired_with].append(Part("charge", (mode.name,), mode.fired_heat))
        for utility, quantity in mode.utilities.items():
            value = utility_amount(plant, utility, "charge", "all", quantity)
            reader.note(f"modes.{mode.name}.{utility}", "", quantity.text, value, "per t", mode.place)
            parts[utility].append(Part("charge", (mode.name,), value))
    case.utilities = {name: tuple(terms) for name, terms in parts.items()}
    case.trades = {name: pair for name, pair in plant.trades().items() if name in reader.scenario.file.utilities}
    _read_trades(reader)
    _read_conversions(reader)
    _read_costs(reader)


def _read_use(reader: Reader, use: UtilityUse, parts: dict[str, list[Part]]) -> None:
    case, plant = reader.case, reader.plant
    value = use.sign * utility_amount(plant, use.utility, use.of, use.item, use.amount)
    name = f"utility_uses.{use.utility}.{use.of}.{use.item}"
    reader.note(name, "", use.amount.text, value, "uses +, makes −", use.place)
    into = parts[use.utility]
    if use.of == "fixed":
        for period in reader.scenario.periods:
            key = (use.utility, period.name)
            case.fixed_use[key] = case.fixed_use.get(key, 0.0) + value * period.hours / 1000
    elif use.of == "loss":
        into += item_parts(reader, "charge", "all", value * case.loss)
    elif use.of in ("cut_heat", "cut_burnt_co2"):
        into += _by_component(reader, use.of, use.item, value)
    elif use.of in ("import", "export"):
        if use.item in reader.scenario.file.utilities:
            into.append(Part("trade", (use.item,), value))
    else:
        into += item_parts(reader, use.of, use.item, value)


def _by_component(reader: Reader, of: str, cut: str, value: float) -> list[Part]:
    """A use per heat, or per CO2 of burning, of a cut whose composition changes."""
    parts = []
    for component, share in reader.case.recovery[cut].items():
        data = reader.plant.components[component]
        per_tonne = data.lower_heating_value if of == "cut_heat" else data.burnt_co2
        if per_tonne:
            parts.append(Part("component", (component,), value * share * per_tonne))
        if of == "cut_burnt_co2" and data.burnt_co2 is not None:
            reader.note(f"components.{component}.burnt_co2", "", f"{data.burnt_co2:g}", data.burnt_co2, "t/t", data.place)
    return parts


def _read_trades(reader: Reader) -> None:
    scenario = reader.scenario
    for trade, (_, kind) in reader.case.trades.items():
        terms = scenario.file.utilities[trade]
        measure = trade_measure(reader.plant, trade)
        path: Path_ = ("utilities", trade)
        places = (scenario.document.place((*path, "min")), scenario.document.place((*path, "max")))
        verb = {"imports": "bought", "exports": "sold", "emissions": "emitted"}[kind]
        for period in scenario.periods:
            basis = scenario.basis(period, None, _trade_ratio(scenario, trade))
            low = reader.amount(terms.min, period, (*path, "min"), measure, basis)
            high = reader.amount(terms.max, period, (*path, "max"), measure, basis)
            reader.limit(
                "trade",
                (trade, period.name),
                f"{trade} {verb}",
                (low, high),
                month=period.name,
                unit=plan_unit(measure),
                worth=(measure.unit, 1.0),
                places=places,
            )


def _read_conversions(reader: Reader) -> None:
    plant = reader.plant
    for name, written in plant.file.conversions.items():
        measure = conversion_measure(plant, name)
        first, amount = next(iter(written.makes.items()))
        size = utility_quantity(plant, first, amount)
        flows: dict[str, float] = {}
        for sign, side in ((-1.0, written.makes), (1.0, written.uses)):
            for utility, quantity in side.items():
                value = sign * utility_quantity(plant, utility, quantity) / size
                flows[utility] = flows.get(utility, 0.0) + value
                place = plant.place("conversions", name, "makes" if sign < 0 else "uses", utility)
                reader.note(f"conversions.{name}.{utility}", "", quantity.text, value, "uses +, makes −", place)
        reader.case.conversions[name] = flows
        path: Path_ = ("conversions", name, "max")
        for period in reader.scenario.periods:
            high = reader.amount(written.max, period, path, measure, document=plant.document)
            reader.limit(
                "conversion",
                (name, period.name),
                f"{name} activity",
                (None, high),
                month=period.name,
                unit=plan_unit(measure),
                worth=(measure.unit, 1.0),
                places=(None, plant.place(*path)),
            )


def _read_costs(reader: Reader) -> None:
    case, scenario = reader.case, reader.scenario
    lines = []
    for name, cost in scenario.file.variable_costs.items():
        measures = set()
        parts: list[Part] = []
        for item in cost.item:
            single = cost.model_copy(update={"item": (item,)})
            measures.add(cost_measure(scenario, single))
            if cost.of == "decoke":
                charged = item_parts(reader, "charge", item, 1.0)
                parts += [Part("charge", p.item, case.decokes_per_kt[p.item[0]]) for p in charged]
            else:
                parts += item_parts(reader, cost.of, item, 1.0)
        if len(measures) > 1:
            place = scenario.document.place(("variable_costs", name, "item"))
            reader.findings.error(place, f"variable_costs.{name}.item", "the items are counted in different units")
        lines.append(CostLine(name, f"variable_costs.{name}", cost.of, tuple(parts)))
    case.costs = tuple(lines)
    for name, written in scenario.file.fixed_costs.items():
        path: Path_ = ("fixed_costs", name)
        for period in scenario.periods:
            value = reader.of_month(written, period, path)
            if value is None:
                continue
            try:
                money = convert(value, MONEY.dimensions, scenario.basis(period)) / 1000
            except UnitError as error:
                reader.findings.error(scenario.document.place(path), path_text(path), str(error), error.hint)
                continue
            case.fixed_costs[name, period.name] = money
            reader.note(path_text(path), period.name, value.text, money, f"k{scenario.currency}", scenario.document.place(path))
