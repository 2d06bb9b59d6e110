"""Names in a scenario: each must be known to its plant, and nothing of the plant may be forgotten.

These checks run before any number is read, so that reading never meets a name that is not there.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping

from olefinlp.inputs.case_outlets import valued_by_content
from olefinlp.inputs.findings import Findings, near_name, path_text
from olefinlp.inputs.measures import Measure
from olefinlp.inputs.plant_references import known
from olefinlp.inputs.plant_sums import check_limit_terms, check_limit_units, known_terms
from olefinlp.inputs.price_windows import priced_items
from olefinlp.inputs.prices import MONTH
from olefinlp.inputs.ratios import outlet_measure, trade_measure
from olefinlp.inputs.scenario import Scenario
from olefinlp.inputs.scenario_file import Outage, SaleOutlet, UnitFactor
from olefinlp.inputs.yaml_files import Path_

COST_WORDS = {
    "charge": "feed, group, `group.feed` or `all`",
    "decoke": "feed, group, `group.feed` or `all`",
    "outlet": "outlet",
    "cut": "cut",
    "unit_load": "recovery unit",
    "conversion": "conversion",
}
TERM_OF_COST = {"charge": "charged", "decoke": "charged", "outlet": "sold", "conversion": "converted"}
CLOSED = {"t": "0 kt", "GJ LHV": "0 TJ LHV", "MWh": "0 GWh"}


def check_references(scenario: Scenario, findings: Findings) -> None:
    """Names that are not in the plant, and outlets and utilities that the scenario forgot."""
    for check in (
        check_feeds,
        check_side_streams,
        check_outlets,
        check_outlet_prices,
        check_contents,
        check_trades,
        check_costs,
        check_unit_factors,
        check_outages,
        check_written_once,
        check_stocks,
        check_limits,
    ):
        check(scenario, findings)


def _known(scenario: Scenario, findings: Findings, path: Path_, what: str, name: str, names: Iterable[str]) -> bool:
    return known(findings, scenario.document.place(path), path_text(path), what, name, names)


def _error(scenario: Scenario, findings: Findings, path: Path_, message: str, hint: str = "") -> None:
    findings.error(scenario.document.place(path), path_text(path), message, hint)


def check_feeds(scenario: Scenario, findings: Findings) -> None:
    """What is bought is a feed of the plant; a recycle feed comes from the plant itself."""
    recycles = scenario.plant.recycle_feeds()
    for name in scenario.file.feeds:
        if name in recycles:
            hint = f"it comes back from the cut `{recycles[name]}`; take the entry away"
            _error(scenario, findings, ("feeds", name), f"`{name}` is a recycle feed, it is never bought", hint)
        else:
            _known(scenario, findings, ("feeds", name), "feed", name, priced_items(scenario.plant)["feeds"])


def check_side_streams(scenario: Scenario, findings: Findings) -> None:
    """A side stream is one of the plant's; its composition stands there, so it takes no quality."""
    for name, sources in scenario.file.side_streams.items():
        _known(scenario, findings, ("side_streams", name), "side stream", name, scenario.plant.file.side_streams)
        for source, written in sources.items():
            if written.quality:
                path = ("side_streams", name, source, "quality")
                hint = "write another side stream with its composition in the plant"
                _error(scenario, findings, path, "a side stream has no quality, slopes are for what is cracked", hint)


def check_outlets(scenario: Scenario, findings: Findings) -> None:
    """The scenario speaks of every outlet to sale of the plant, and of no other."""
    plant, sales = scenario.plant, priced_items(scenario.plant)["outlets"]
    for name in scenario.file.outlets:
        outlet = plant.file.outlets.get(name)
        if outlet and outlet.to != "sale":
            hint = f"its limits stand in the plant: {plant.place('outlets', name)}"
            _error(scenario, findings, ("outlets", name), f"`{name}` is no sale, it goes to {outlet.to}", hint)
        else:
            _known(scenario, findings, ("outlets", name), "outlet", name, sales)
    for name in sales:
        if name not in scenario.file.outlets:
            message = f"the outlet `{name}` of the plant is missing"
            _error(scenario, findings, ("outlets", name), message, _closing(outlet_measure(plant, name)))


def _closing(measure: Measure) -> str:
    return f"write `max: {CLOSED[measure.unit]}` to close it"


def check_outlet_prices(scenario: Scenario, findings: Findings) -> None:
    """A cut valued by content is paid for what is in it: its outlets have a deduction, others a price."""
    for name, sale in scenario.file.outlets.items():
        if name in priced_items(scenario.plant)["outlets"]:
            _check_outlet_price(scenario, findings, name, sale)


def _check_outlet_price(scenario: Scenario, findings: Findings, name: str, sale: SaleOutlet) -> None:
    path, by_content = ("outlets", name), valued_by_content(scenario, name)
    if by_content and sale.tiers:
        message = "an outlet of a cut valued by content has no price steps"
        _error(scenario, findings, (*path, "tiers"), message, "write `max:` and `deduction:`")
    if by_content and sale.price:
        message = "the cut is valued by content, so this outlet has no price"
        _error(scenario, findings, (*path, "price"), message, "write `deduction:`, what is taken off the content value")
    if not by_content and sale.deduction:
        message = "the cut is not valued by content, so nothing is deducted"
        _error(scenario, findings, (*path, "deduction"), message, "write `price:`")


def check_contents(scenario: Scenario, findings: Findings) -> None:
    """Content is priced for cuts valued by content, item by item."""
    cuts, valued = scenario.plant.file.cuts, priced_items(scenario.plant)["contents"]
    for name, items in scenario.file.contents.items():
        if name in cuts and name not in valued:
            message = f"`{name}` is not valued by content"
            _error(scenario, findings, ("contents", name), message, "write the price at its outlets")
        elif _known(scenario, findings, ("contents", name), "cut valued by content", name, valued):
            for item in items:
                _known(scenario, findings, ("contents", name, item), "content item", item, cuts[name].content_items)


def check_trades(scenario: Scenario, findings: Findings) -> None:
    """The scenario speaks of every import, export and emission of the plant, and of no other."""
    plant, trades = scenario.plant, scenario.plant.trades()
    for name in scenario.file.utilities:
        own = [trade for trade, (utility, _) in trades.items() if utility == name]
        if name in plant.file.utilities and name not in trades:
            hint = "write the name of its import, export or emission" + (f": {', '.join(own)}" if own else ", it has none")
            _error(scenario, findings, ("utilities", name), f"`{name}` is a utility, it has no price itself", hint)
        else:
            _known(scenario, findings, ("utilities", name), "import, export or emission", name, trades)
    for name, (_, kind) in trades.items():
        if name not in scenario.file.utilities:
            emitted = kind == "emissions"
            hint = "write `max: unlimited` if it has no cap" if emitted else _closing(trade_measure(plant, name))
            message = f"the {kind.removesuffix('s')} `{name}` of the plant is missing"
            _error(scenario, findings, ("utilities", name), message, hint)


def check_costs(scenario: Scenario, findings: Findings) -> None:
    """A variable cost grows with something of the plant."""
    plant = scenario.plant
    for name, cost in scenario.file.variable_costs.items():
        names = known_terms(plant, TERM_OF_COST.get(cost.of, cost.of))
        for item in cost.item:
            path = ("variable_costs", name, "item")
            if item == "all" and "all" not in names:
                hint = "write the names: " + ", ".join(names)
                _error(scenario, findings, path, f"`all` is for charge and decoke, not for {cost.of}", hint)
            else:
                _known(scenario, findings, path, COST_WORDS[cost.of], item, names)


def check_unit_factors(scenario: Scenario, findings: Findings) -> None:
    """A factor changes the capacity of a recovery unit that has one, in a month of this scenario."""
    for index, written in enumerate(scenario.file.unit_factors):
        path: Path_ = ("unit_factors", index)
        unit = scenario.plant.units.get(written.unit)
        _known(scenario, findings, (*path, "unit"), "recovery unit", written.unit, scenario.plant.units)
        if unit and unit.capacity is None:
            place = scenario.document.place((*path, "unit"))
            findings.warn(place, path_text((*path, "unit")), f"has no effect: the capacity of {unit.name} is unlimited")
        _check_month(scenario, findings, path, written)


def check_outages(scenario: Scenario, findings: Findings) -> None:
    """An outage takes hours from a furnace group that has them, in a month of this scenario."""
    groups = scenario.plant.file.furnace_groups
    for index, written in enumerate(scenario.file.outages):
        path: Path_ = ("outages", index)
        known_group = _known(scenario, findings, (*path, "group"), "furnace group", written.group, groups)
        if known_group and groups[written.group].furnaces == "unlimited":
            message = f"{written.group} has unlimited furnaces, so no hours can be lost"
            hint = f"write how many furnaces it has: {scenario.plant.place('furnace_groups', written.group)}"
            _error(scenario, findings, (*path, "group"), message, hint)
        if written.hours.number < 0:
            _error(scenario, findings, (*path, "hours"), f"`{written.hours}` is below zero")
        _check_month(scenario, findings, path, written)


def check_written_once(scenario: Scenario, findings: Findings) -> None:
    """Outages of a group add up and factors on a unit multiply; the same line twice is a slip."""
    for kind in ("outages", "unit_factors"):
        seen: dict[object, int] = {}
        for index, written in enumerate(getattr(scenario.file, kind)):
            first = seen.setdefault(written, index)
            if first != index:
                line = scenario.document.place((kind, first)).line
                _error(scenario, findings, (kind, index), f"is written twice, first in line {line}")


def _check_month(scenario: Scenario, findings: Findings, path: Path_, written: Outage | UnitFactor) -> None:
    """A month of another time has no effect; what is no month at all is a slip."""
    months = [period.name for period in scenario.periods]
    here = (*path, "month")
    if written.month in months:
        return
    if re.fullmatch(MONTH, written.month):
        findings.warn(scenario.document.place(here), path_text(here), f"has no effect: {written.month} is not in this scenario")
    else:
        _error(scenario, findings, here, f"`{written.month}` is not a month", near_name(written.month, months))


def check_stocks(scenario: Scenario, findings: Findings) -> None:
    """A tank holds a feed that is bought, or a cut that leaves by weight at a price of its own."""
    plant = scenario.plant.file
    feeds = priced_items(scenario.plant)["feeds"]
    cuts = [name for name, cut in plant.cuts.items() if cut.balanced_as == "mass" and cut.valued_by == "price"]
    for name, stock in scenario.file.stocks.items():
        path = ("stocks", name)
        if name in plant.feeds and name not in feeds:
            message = f"`{name}` is a recycle feed, it has no tank"
            _error(scenario, findings, path, message, f"a tank holds the cut `{plant.feeds[name].recycle_of}`")
        elif name not in feeds and name in plant.cuts and name not in cuts:
            why = "is balanced as heat" if plant.cuts[name].balanced_as == "heat" else "is valued by content"
            _error(scenario, findings, path, f"the cut `{name}` {why}, so it has no tank", "take the entry away")
        else:
            _known(scenario, findings, path, "feed or cut", name, dict.fromkeys((*feeds, *cuts)))
        if stock.quality and name in cuts and name not in feeds:
            message = "a cut has no quality, slopes are for what is cracked"
            _error(scenario, findings, (*path, "quality"), message, "take it away")


def check_limits(scenario: Scenario, findings: Findings) -> None:
    """Limits of the scenario count things that there are, in one unit, under names of their own."""
    file, plant = scenario.file, scenario.plant
    check_limit_terms(plant, file.limits, file.ratio_limits, scenario.document, findings)
    check_limit_units(plant, file.limits, file.ratio_limits, scenario.document, findings)
    sections: tuple[tuple[str, Mapping[str, object], Mapping[str, object]], ...] = (
        ("limits", file.limits, plant.file.limits),
        ("ratio_limits", file.ratio_limits, plant.file.ratio_limits),
    )
    for section, own, of_plant in sections:
        for name in own:
            if name in of_plant:
                message = f"the plant has `{name}` already: {plant.place(section, name)}"
                _error(scenario, findings, (section, name), message, "give this one another name")
    _check_bought_sources(scenario, findings)


def _check_bought_sources(scenario: Scenario, findings: Findings) -> None:
    """`{bought: feed.source}` needs that source in this scenario."""
    file = scenario.file
    sides = [(("limits", name, "sum"), limit.sum) for name, limit in file.limits.items()]
    for name, ratio in file.ratio_limits.items():
        sides += [(("ratio_limits", name, "of"), ratio.of), (("ratio_limits", name, "to"), ratio.to)]
    offers = {**file.feeds, **file.side_streams}
    for path, terms in sides:
        for position, term in enumerate(terms):
            for bought in term.bought or ():
                feed, _, source = bought.partition(".")
                if source and source not in offers.get(feed, ()):
                    here = (*path, position, "bought")
                    hint = near_name(source, offers.get(feed, ())) or f"{feed} is not bought in this scenario"
                    _error(scenario, findings, here, f"`{bought}` is not a source of this scenario", hint)
