"""Whether the numbers of a scenario can be a plan at all: takes, tanks, exits, limits that are missing.

Names are checked in `scenario_references` before numbers are read, prices in `scenario_prices`.
What clashes only through the whole plant is for the plan itself to find.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterator

from olefinlp.inputs.case import Case, Limit
from olefinlp.inputs.findings import Findings, Place
from olefinlp.inputs.scenario_prices import check_prices, high_of
from olefinlp.inputs.scenario_references import check_references
from olefinlp.inputs.scenario_unbounded import check_unbounded, recycle_modes

__all__ = ["check_case", "check_references"]
TINY = 1e-9


def check_case(case: Case, findings: Findings) -> None:
    """Everything that is implausible, or cannot work, now that the numbers are known."""
    check_prices(case, findings)
    for check in (
        check_take_or_pay,
        check_takes_have_modes,
        check_takes_fit,
        check_opening_stocks,
        check_end_stocks,
        check_end_values,
        check_cuts_leave,
        check_unbounded,
    ):
        check(case, findings)


# ---------------------------------------------------------------------------------- buying


def check_take_or_pay(case: Case, findings: Findings) -> None:
    """What is paid for can be had, and a shortfall pays between nothing and the whole price."""
    for label, source in case.sources.items():
        for month in case.months if source.take_or_pay else ():
            limit, most = case.limits.get(("take_or_pay", label, month)), high_of(case, "purchase", label, month)
            if limit and limit.low is not None and most is not None and limit.low > most + TINY:
                message = f"take-or-pay of {limit.low:.6g} kt is more than can be bought, {most:.6g} kt"
                findings.error(_low(limit), f"{source.kind}.{label}.take_or_pay", message)
            share = case.shortfall_pays[label, month]
            if not 0 <= share <= 1:
                path = (source.kind, source.feed, source.name, "shortfall_pays")
                message = f"a shortfall pays {100 * share:.6g} % of the price, it must be from 0 to 100 %"
                findings.error(case.scenario.document.place(path), ".".join(path), message)


def _low(limit: Limit) -> Place:
    return limit.place_low or limit.place_high or Place("")


def _takes(case: Case) -> Iterator[tuple[str, Limit]]:
    """Every minimum purchase of a feed, with the feed."""
    for label, source in case.sources.items():
        for month in case.months if source.kind == "feeds" else ():
            limit = case.limits.get(("purchase", label, month))
            if limit and limit.low:
                yield source.feed, limit


def check_takes_have_modes(case: Case, findings: Findings) -> None:
    """What must be bought must be able to go into a furnace."""
    cracked = set(case.mode_feed.values())
    for feed, limit in _takes(case):
        if feed not in cracked:
            message = f"{limit.low:.6g} kt of {feed} must be bought, but no mode cracks it"
            findings.error(_low(limit), f"feeds.{limit.key[0]}.min", message, "take the minimum away, or add a mode to the plant")


# ---------------------------------------------------------------------------------- takes and furnace hours


def check_takes_fit(case: Case, findings: Findings) -> None:
    """What must be bought, and what the tanks cannot keep, fits into the hours of the furnaces that can crack it.

    Each feed counts with its least hours per kt, so what is refused here can never be a plan.
    """
    able = _able_groups(case)
    charged = {feed: _must_charge(case, feed) for feed in able}
    least = {feed: _least_hours(case, feed) for feed in able}
    hours = {group: _hours_there(case, group) for group in frozenset().union(*able.values())}
    spans = _spans(case)
    reported: list[frozenset[str]] = []
    for groups in _group_sets(able):
        if any(groups >= smaller for smaller in reported):
            continue
        feeds = [feed for feed, own in able.items() if own <= groups]
        there = [sum(ones) for ones in zip(*(hours[group] for group in groups), strict=True)]
        for at, span in enumerate(spans):
            amounts = {feed: charged[feed][at] for feed in feeds if charged[feed][at] > TINY}
            needed = sum(amount * least[feed] for feed, amount in amounts.items())
            if needed > there[at] * (1 + TINY) + TINY:
                _report_span(case, findings, span, groups, amounts, (needed, there[at]))
                reported.append(groups)
                break


def _able_groups(case: Case) -> dict[str, frozenset[str]]:
    """Feeds that must be cracked, and the groups that can; left out where some group has no end of hours."""
    must = {feed for feed, _ in _takes(case)} | {item for item, stock in case.stocks.items() if stock.is_feed}
    found = {}
    for feed in [feed for feed in case.parcels if feed in must]:
        groups = frozenset(case.mode_group[mode] for mode in case.modes if case.mode_feed[mode] == feed)
        if groups and all(("furnace_hours", group, case.months[0]) in case.limits for group in groups):
            found[feed] = groups
    return found


def _group_sets(able: dict[str, frozenset[str]]) -> list[frozenset[str]]:
    """Sets of groups worth asking, small ones first: those of one feed, of two, and of all."""
    sets = set(able.values())
    sets |= {one | other for one in able.values() for other in able.values()}
    if able:
        sets.add(frozenset().union(*able.values()))
    return sorted(sets, key=lambda groups: (len(groups), sorted(groups)))


def _spans(case: Case) -> list[tuple[str, ...]]:
    """Each month alone, and all months up to each."""
    months = case.months
    return [(month,) for month in months] + [months[:end] for end in range(2, len(months) + 1)]


def _over_spans(values: list[float]) -> list[float]:
    """Sums of the months of each span, from a value of each month."""
    return values + list(itertools.accumulate(values))[1:]


def _hours_there(case: Case, group: str) -> list[float]:
    """Hours of a furnace group in each span."""
    return _over_spans([high_of(case, "furnace_hours", group, month) or 0.0 for month in case.months])


def _must_charge(case: Case, feed: str) -> list[float]:
    """The least that can be charged of a feed in each span (kt)."""
    takes = dict.fromkeys(case.months, 0.0)
    for own, limit in _takes(case):
        if own == feed:
            takes[limit.month] += limit.low or 0.0
    amounts = _over_spans(list(takes.values()))
    if feed not in case.stocks:
        return amounts
    tanks = [case.limits["stock", feed, month] for month in case.months]
    room = [math.inf if tank.high is None else tank.high for tank in tanks]
    opening = sum(case.opening.get(parcel, 0.0) for parcel in case.stocks[feed].parcels)
    kept = [opening, *(tank.low or 0.0 for tank in tanks[:-1])] + [opening] * (len(tanks) - 1)
    return [amount + there - most for amount, there, most in zip(amounts, kept, room + room[1:], strict=True)]


def _report_span(
    case: Case,
    findings: Findings,
    span: tuple[str, ...],
    groups: frozenset[str],
    charged: dict[str, float],
    hours: tuple[float, float],
) -> None:
    """Hours needed and there, and who wrote what needs them."""
    amounts = ", ".join(f"{amount:.4g} kt of {feed}" for feed, amount in charged.items())
    names = " and ".join(group for group in case.scenario.plant.file.furnace_groups if group in groups)
    words = span[0] if len(span) == 1 else f"{span[0]} to {span[-1]}"
    needed, there = hours
    message = f"{amounts} must be cracked in {words}: this needs at least {needed:,.0f} h of {names}, there are {there:,.0f} h"
    places = [place for feed in charged for place in _wrote(case, feed, span)]
    limits = [case.limits["furnace_hours", group, span[0]].place_high for group in sorted(groups)]
    seen = dict.fromkeys(str(place) for place in [*places[1:], *limits] if place)
    findings.error(places[0], "feeds", message, "see also " + ", ".join(seen))


def _wrote(case: Case, feed: str, span: tuple[str, ...]) -> list[Place]:
    """Who wrote what must be charged of a feed in a span."""
    places = [_low(limit) for own, limit in _takes(case) if own == feed and limit.month in span]
    if feed in case.stocks:
        tank = case.limits["stock", feed, span[-1]]
        places.append(tank.place_high or _low(tank))
    return places


def _least_hours(case: Case, feed: str) -> float:
    return min(case.hours_per_kt[mode] for mode in case.modes if case.mode_feed[mode] == feed)


# ---------------------------------------------------------------------------------- tanks


def check_opening_stocks(case: Case, findings: Findings) -> None:
    """A tank begins between its smallest and its largest stock."""
    for item, stock in case.stocks.items():
        opening = sum(case.opening.get(line, 0.0) for line in (stock.parcels if stock.is_feed else (item,)))
        limit = case.limits.get(("stock", item, case.months[0]))
        if limit is None:
            continue
        place, path = case.scenario.document.place(("stocks", item, "opening")), f"stocks.{item}.opening"
        if limit.high is not None and opening > limit.high + TINY:
            message = f"the tank opens with {opening:.6g} kt, above its largest stock of {limit.high:.6g} kt"
            findings.warn(place, path, message, f"the rest must leave in {limit.month}")
        elif limit.low is not None and opening < limit.low - TINY:
            message = f"the tank opens with {opening:.6g} kt, below its smallest stock of {limit.low:.6g} kt"
            findings.warn(place, path, message, f"the rest must come in {limit.month}")


def check_end_stocks(case: Case, findings: Findings) -> None:
    """What must be in a tank at the end fits into it."""
    for item in case.stocks:
        end, tank = case.limits.get(("end_stock", item)), case.limits.get(("stock", item, case.months[-1]))
        if end and tank and end.low is not None and tank.high is not None and end.low > tank.high + TINY:
            message = f"{end.low:.6g} kt must be there at the end, but the tank holds {tank.high:.6g} kt"
            findings.error(_low(end), f"stocks.{item}.end", message, f"its largest stock: {tank.place_high}")


# ---------------------------------------------------------------------------------- ways out


def _cuts_made(case: Case, month: str) -> set[str]:
    """The cuts that the charges that can occur, and the side streams on offer, give."""
    ways: list[tuple[str, ...]] = [(mode, parcel) for mode, parcel, _ in case.charges_in[month]]
    for label, source in case.sources.items():
        if source.kind == "side_streams" and high_of(case, "purchase", label, month) != 0:
            ways.append((source.feed,))
    return set().union(*(case.cuts_given[way] for way in ways))


def check_end_values(case: Case, findings: Findings) -> None:
    """A stock at the end is not worth far more, or less, than the feed costs: the margin would be made of it."""
    for item, stock in case.stocks.items():
        tiers = [(s.label, k) for s in case.sources.values() if s.feed == item for k in s.tiers]
        prices = [case.prices[case.purchase_item(label, k), case.months[-1]].value for label, k in tiers]
        if not stock.end_value or not prices or min(prices) / 2 <= stock.end_value <= 2 * max(prices):
            continue
        path = ("stocks", item, "end", "value")
        text = f"{stock.end_value:,.6g} {case.currency}/t at the end, while {item} costs {min(prices):,.4g} to {max(prices):,.4g}"
        findings.warn(case.scenario.document.place(path), ".".join(path), text, "is the unit right?")


def check_cuts_leave(case: Case, findings: Findings) -> None:
    """A cut that is made can leave: not all of its outlets are closed."""
    closed: dict[str, list[str]] = {}
    ways = {cut: [outlet for outlet, cuts in case.outlets.items() if cut in cuts] for cut in case.cuts}
    kept = {cut for cut in case.cuts if cut in case.stocks or recycle_modes(case, cut)}
    for month in case.months:
        made = _cuts_made(case, month)
        for cut in case.cuts:
            shut = bool(ways[cut]) and all(high_of(case, "outlet", outlet, month) == 0 for outlet in ways[cut])
            if cut in made and shut and cut not in kept:
                closed.setdefault(cut, []).append(month)
    for cut, months in closed.items():
        outlets = ways[cut]
        place = case.limits["outlet", outlets[0], months[0]].place_high or Place("")
        message = f"every way out of {cut} is closed in {', '.join(months)} ({', '.join(outlets)}): what makes it cannot run"
        findings.warn(place, f"outlets.{outlets[0]}.max", message)
