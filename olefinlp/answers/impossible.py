"""Why a month is impossible: which limits to relax, the fewest first, by how little, and what is not the cause.

Only limits that a person wrote are relaxed. Each relaxed figure is rounded to the loose side, so that
a file with the figures as printed here can be planned; the margin stated is that plan's, proven.
"""

from __future__ import annotations

import math
import time
from collections.abc import Callable, Iterable
from dataclasses import dataclass, replace

import numpy as np

from olefinlp.answers.answer import Answer
from olefinlp.answers.clash import Clash, ClashingLimit, find_clash
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.answers.words import amount
from olefinlp.inputs.case import Case, Limit, Part, Reader
from olefinlp.inputs.case_recovery import KIND_OF_TERM, item_parts
from olefinlp.inputs.findings import Findings
from olefinlp.inputs.scenario import Scenario
from olefinlp.inputs.units import Quantity, share
from olefinlp.lp.algebra import build_model
from olefinlp.lp.certificate import certify
from olefinlp.lp.clash import Side, limit_sides
from olefinlp.lp.compile import Floats, LabelledLp, compile_model
from olefinlp.lp.relax import SECONDS, SECONDS_IN_ALL, Relaxation, Relaxer, least_ratio, relaxed, with_ratio
from olefinlp.lp.solver import Outcome, Status, solve

MOST = 3
"""How many ways out are listed."""
NOTCHES = 3
MULTIPLIED_OUT = ("ratio", "specification")
FIGURES = 4

NOTE = (
    "Each way changes as little as makes a plan possible; to relax further may earn more. "
    "Sizes are relative to the limit as written; a limit of zero, a ratio and a specification are measured by the "
    "amount missed against the largest limit of the same unit. To relax a capacity or a specification here is a change of "
    "the plan's figures, no permission: engineering limits and contracts of the plant always win."
)
FAMILIES = {
    "purchase": "all limits on purchases",
    "take_or_pay": "take-or-pay quantities",
    "furnace_hours": "all furnace hours",
    "decoke_crew_hours": "decoke crew hours",
    "outlet": "all limits on outlets",
    "unit_load": "all recovery units",
    "ratio": "all ratio limits",
    "specification": "all specifications",
    "named": "all named limits",
    "trade": "all limits on utilities",
    "conversion": "all limits on conversions",
    "stock": "all tank limits",
    "end_stock": "all stocks at the end",
}
CLASHES_SHOWN = 2
NAMES_SHOWN = 3
NUMBERS = ("no", "one", "two", "three", "four", "five", "six", "seven", "eight", "nine", "ten")


@dataclass(frozen=True, slots=True)
class Change:
    """One side of a limit to relax, in the unit in which people read it; `to` is None when it is dropped.

    `least` is the smallest change that does (None for a ratio to nothing); `to` is it rounded to the loose side.
    """

    limit: Limit
    side: Side
    name: str
    which: str
    written: float
    to: float | None
    least: float | None
    unit: str

    @property
    def share(self) -> float | None:
        """Change as a share of the limit; None for a limit of zero, a ratio or a specification."""
        if not self.written or self.limit.family in MULTIPLIED_OUT:
            return None
        return ((self.to or 0.0) - self.written) / abs(self.written)


@dataclass(frozen=True)
class WayOut:
    """Limits to relax together; the best margin that is then possible, None (and why) when there is none."""

    changes: tuple[Change, ...]
    relaxation: Relaxation
    margin: float | None
    ending: str


@dataclass(frozen=True)
class Search:
    """The ways out, and whether others of as many limits as the last exist (None: not known)."""

    ways: tuple[WayOut, ...]
    more: bool | None
    none_at_all: bool


def explain_impossible(
    scenario: Scenario, *, otherwise: Callable[[Scenario], Answer | None] | None = None, seconds: float = SECONDS
) -> Answer:
    """Why a scenario has no plan: up to three ways out, what each would earn, what clashes, what is not the cause.

    `otherwise` is asked when the limits alone do not clash: it may know another reason (whole-number
    decisions). Each question to the solver may take `seconds`; an answer stopped then says so.

    Tables: ways_out (a row a limit to relax), ways (a row a way), clashing_limits, not_the_cause.
    """
    case = scenario.case
    lp = compile_model(build_model(case))
    relaxer = Relaxer(lp, _sizes(case, lp), seconds)
    if not relaxer.impossible():
        return (otherwise(scenario) if otherwise else None) or _possible(case)
    clash = find_clash(case, lp) or Clash(())
    if relaxer.impossible(relaxer.sides):
        return Answer(
            "impossible", _title(case), _tables(case, Search((), None, False), clash, []), tuple(str(clash).splitlines())
        )
    search = _search(case, lp, relaxer)
    innocent = _not_the_cause(relaxer)
    sentences = [*_clash_sentences(clash), *_way_sentences(case, search, seconds), *_innocent_sentence(case, lp, innocent)]
    records = [_innocent_record(_limit_of(case, lp, side), side) for side in innocent]
    return Answer("impossible", _title(case), _tables(case, search, clash, records), tuple(sentences), NOTE)


def _title(case: Case) -> str:
    return f"Why {_months(case)} cannot be planned"


def _months(case: Case) -> str:
    return case.months[0] if len(case.months) == 1 else f"{case.months[0]} to {case.months[-1]}"


def _possible(case: Case) -> Answer:
    text = f"A plan is possible for {_months(case)}: no limits clash, nothing need be relaxed."
    tables = _tables(case, Search((), None, False), Clash(()), [])
    return Answer("impossible", f"{_months(case)} can be planned", tables, (text,))


def _limit_of(case: Case, lp: LabelledLp, side: Side) -> Limit:
    family, *key = lp.rows[side.row]
    return case.limits[(family.removesuffix("_limit"), *key)]


def _sizes(case: Case, lp: LabelledLp) -> dict[Side, float]:
    """What each side's amount is measured against: the limit, or for a zero the largest of its unit."""
    largest: dict[str, float] = {}
    for limit in case.limits.values():
        size = max(abs(limit.low or 0.0), abs(limit.high or 0.0)) * limit.scale
        largest[limit.unit] = max(largest.get(limit.unit, 0.0), size)
    sizes = {}
    for side in limit_sides(lp):
        limit = _limit_of(case, lp, side)
        own = abs((limit.low if side.low else limit.high) or 0.0)
        sizes[side] = own or largest[limit.unit] / limit.scale or 1.0
    return sizes


# ---------------------------------------------------------------------------------- ways out


def _search(case: Case, lp: LabelledLp, relaxer: Relaxer) -> Search:
    """Up to `MOST` ways out; the first always, the others while time lasts."""
    end = time.monotonic() + max(SECONDS_IN_ALL, relaxer.seconds)
    ways: list[WayOut] = []
    while len(ways) < MOST and (not ways or time.monotonic() < end):
        found = relaxer.next()
        if found is None:
            break
        ways.append(_way_out(case, lp, found))
        relaxer.seconds = min(relaxer.seconds, max(0.0, end - time.monotonic()))
        if not found.fewest:
            return Search(tuple(ways), None, False)
    rest = relaxer.fewest()
    if not rest.proven or not ways:
        return Search(tuple(ways), None, False)
    more = rest.sides is not None and len(rest.sides) == len(ways[-1].changes)
    return Search(tuple(ways), more, rest.sides is None)


def _way_out(case: Case, lp: LabelledLp, relaxation: Relaxation) -> WayOut:
    """The figures to write and the best plan with them; a notch looser should rounding stand in the way."""
    for notch in range(NOTCHES):
        changes, program = _written(case, lp, relaxation, notch)
        outcome = solve(program)
        if outcome.status is not Status.INFEASIBLE:
            break
    margin, ending = _margin(program, outcome)
    return WayOut(tuple(changes), relaxation, margin, ending)


def _margin(program: LabelledLp, outcome: Outcome) -> tuple[float | None, str]:
    if outcome.solution is None:
        endless = outcome.status is Status.UNBOUNDED
        return None, "the margin then has no end: check the prices" if endless else f"its margin is not known: {outcome.message}"
    if not certify(program, outcome.solution).holds:
        return None, "its margin could not be proven"
    return outcome.solution.objective, ""


def _written(case: Case, lp: LabelledLp, relaxation: Relaxation, notch: int) -> tuple[list[Change], LabelledLp]:
    """The changes as a person would write them, and the program with just these."""
    amounts = relaxation.amounts
    changes: dict[Side, Change] = {}
    ratios: dict[Side, Limit] = {}
    program = lp
    for side, need in amounts.items():
        limit = _limit_of(case, lp, side)
        if limit.family in MULTIPLIED_OUT:
            ratios[side] = limit
            continue
        changes[side] = _plain_change(limit, side, need, notch)
        program = relaxed(program, {side: _amount_of(changes[side])})
    left = dict(ratios)
    for side, limit in ratios.items():
        del left[side]
        others = relaxed(program, {other: amounts[other] * (1 + 1e-6) for other in left})
        changes[side], program = _ratio_change(case, others, program, limit, side, notch)
    return [changes[side] for side in amounts], program


def _plain_change(limit: Limit, side: Side, need: float, notch: int) -> Change:
    written = (limit.low if side.low else limit.high) or 0.0
    to = _outward((written + (-need if side.low else need)) * limit.scale, need * limit.scale, side.low, notch)
    dropped = side.low and to <= 0
    which = "minimum" if side.low else "maximum"
    return Change(limit, side, limit.label, which, written * limit.scale, None if dropped else to, need * limit.scale, limit.unit)


def _amount_of(change: Change) -> float:
    """By how much a change is looser, in units of the plan."""
    return math.inf if change.to is None else abs(change.to - change.written) / change.limit.scale


def _outward(target: float, need: float, down: bool, notch: int) -> float:
    """A figure rounded to the loose side, to four figures or finer where the change is small, and some notches more.

    >>> _outward(67.9553, 8.0447, True, 0), _outward(3747.2703, 845.2, False, 0), _outward(73.1, 6.9, True, 0)
    (67.95, 3748.0, 73.1)
    """
    if target == 0:
        return 0.0
    decimals = FIGURES - 1 - math.floor(math.log10(abs(target)))
    finest = decimals + 5
    while need * 10.0**decimals < 50 and decimals < finest:
        decimals += 1
    steps = round(target * 10.0**decimals, 5)
    steps = math.floor(steps) - notch if down else math.ceil(steps) + notch
    return float(round(steps / 10.0**decimals, max(decimals, 0)))


# ---------------------------------------------------------------------------------- ratios and specifications


@dataclass(frozen=True, slots=True)
class Written:
    """A ratio or specification as written: name, side, number, its unit, size of that unit, sum below the line."""

    name: str
    which: str
    number: float
    unit: str
    one: float
    below: tuple[Part, ...]


def _ratio_change(
    case: Case, others: LabelledLp, program: LabelledLp, limit: Limit, side: Side, notch: int
) -> tuple[Change, LabelledLp]:
    """The least change of the written ratio; where nothing is below the line, it must be dropped."""
    written = _as_written(case, limit)
    below = _coefficients(program, written.below, limit.month)
    down = written.which == "minimum"
    change = least_ratio(others, side, below)
    least = None if change is None else change / written.one
    to = None if least is None else _outward(written.number + (-least if down else least), least, down, notch)
    if to is None or (down and to <= 0):
        dropped = Change(limit, side, written.name, written.which, written.number, None, least, written.unit)
        return dropped, relaxed(program, {side: math.inf})
    found = Change(limit, side, written.name, written.which, written.number, to, least, written.unit)
    return found, with_ratio(program, side, below, abs(to - written.number) * written.one)


def _as_written(case: Case, limit: Limit) -> Written:
    plant = case.scenario.plant.file
    if limit.family == "specification":
        outlet, prop, which = limit.key[:3]
        spec = plant.outlets[outlet].specifications[prop]
        below = tuple(Part("ingredient", (outlet, cut), 1.0) for cut in spec.values)
        number, unit, one = _number(spec.min if which == "min" else spec.max)
        return Written(f"{outlet} {prop}", f"{which}imum", number, unit, one, below)
    name, which = limit.key[:2]
    ratio = case.scenario.file.ratio_limits.get(name) or plant.ratio_limits[name]
    reader = Reader(case.scenario, Findings())
    reader.case = case
    terms = [(KIND_OF_TERM[term.kind], name, term.times) for term in ratio.to for name in term.names]
    parts = tuple(part for kind, item, times in terms for part in item_parts(reader, kind, item, times))
    number = ratio.at_most if which == "at_most" else ratio.at_least
    return Written(f"{name} ratio", "maximum" if which == "at_most" else "minimum", number or 0.0, "", 1.0, parts)


def _number(written: Quantity | float | None) -> tuple[float, str, float]:
    """A property as written: its number, its unit, and what one of that unit is in the plan."""
    if isinstance(written, Quantity):
        return written.number, written.unit.text, share(replace(written, number=1.0))
    return written or 0.0, "", 1.0


def _coefficients(lp: LabelledLp, parts: Iterable[Part], month: str) -> Floats:
    """A sum of quantities of one month as coefficients of the program's columns."""
    names = {"component": "component_made", "cut": "cut_made", "outlet": "disposition", "ingredient": "disposition"}
    found = np.zeros(len(lp.columns))
    for part in parts:
        start = (names.get(part.kind, part.kind), *part.item)
        for column, label in enumerate(lp.columns):
            if label[: len(start)] == start and label[-1] == month:
                found[column] += part.coefficient
    return found


# ---------------------------------------------------------------------------------- what is not the cause


def _not_the_cause(relaxer: Relaxer) -> list[Side]:
    """Sides in no way out and in no clash met on the way: lifting all of them at once changes nothing."""
    involved = {side for sides in (*relaxer.clashes, *relaxer.found) for side in sides}
    innocent = [side for side in relaxer.sides if side not in involved]
    return innocent if relaxer.impossible(innocent) else []


def _innocent_sentence(case: Case, lp: LabelledLp, innocent: list[Side]) -> list[str]:
    """Whole families in a word, else by name; a limit that matters in one month is left out."""
    if not innocent:
        return []
    free = set(innocent)
    families: dict[str, dict[str, list[bool]]] = {}
    for side in limit_sides(lp):
        limit = _limit_of(case, lp, side)
        families.setdefault(limit.family, {}).setdefault(limit.label, []).append(side in free)
    words = [word for family, labels in families.items() for word in _family_words(family, labels)]
    if not words:
        return []
    return [f"Not the cause: {_listed(words)}. All of these could be lifted at once and no plan would be possible."]


def _family_words(family: str, labels: dict[str, list[bool]]) -> list[str]:
    """A family's limits that are not the cause: all, all but a few, or a few by name."""
    free = [label for label, sides in labels.items() if all(sides)]
    others = [label for label in labels if label not in free]
    if len(free) <= NAMES_SHOWN or not (others or len(free) == len(labels)):
        return free
    if len(others) <= NAMES_SHOWN:
        return [f"{FAMILIES[family]}{f' but {_listed(others)}' if others else ''}"]
    return [*free[:NAMES_SHOWN], f"{len(free) - NAMES_SHOWN} more of {FAMILIES[family].removeprefix('all ')}"]


# ---------------------------------------------------------------------------------- words


def _listed(words: list[str]) -> str:
    return " and ".join([", ".join(words[:-1]), words[-1]] if len(words) > 1 else words)


def _clash_sentences(clash: Clash) -> list[str]:
    """The first clashes in full, the number of the others."""
    sentences = [_clash_sentence(limits, bool(position)) for position, limits in enumerate(clash.sets[:CLASHES_SHOWN])]
    others = len(clash.sets) - CLASHES_SHOWN
    return [*sentences, f"And {_counted(others, 'more clash', 'more clashes')}."] if others > 0 else sentences


def _clash_sentence(limits: tuple[ClashingLimit, ...], further: bool) -> str:
    texts = [f"{limit.text}{f' ({limit.reason})' if limit.reason else ''}" for limit in limits]
    start = "This limit cannot be met" if len(limits) == 1 else "These limits cannot be met together"
    return f"{'Apart from that: ' if further else ''}{start}: {'; '.join(texts)}."


def _way_sentences(case: Case, search: Search, seconds: float) -> list[str]:
    """The ways out with what is known of others between them."""
    sentences: list[str] = []
    if not search.ways:
        return [f"No way out was found within {seconds:g} s."]
    for position, way in enumerate(search.ways):
        sentences.append(_way_sentence(case, position, search.ways))
        count = len(way.changes)
        following = search.ways[position + 1] if position + 1 < len(search.ways) else None
        if not way.relaxation.fewest:
            sentences.append(f"This is not proven to be the fewest limits: the search was stopped after {seconds:g} s.")
        elif not way.relaxation.least:
            sentences.append(f"{_set_of(count, 'Another')} may need less change: the search was stopped after {seconds:g} s.")
        if following and following.relaxation.fewest and len(following.changes) > count:
            sentences.append(f"{_set_of(count, 'No other')} would do.")
    return [*sentences, *_closing(search)]


def _closing(search: Search) -> list[str]:
    last = search.ways[-1]
    count = len(last.changes)
    if search.none_at_all:
        return ["There is no other way out."]
    if search.more is None:
        return ["Other ways may exist: the search was stopped."] if last.relaxation.fewest else []
    if not search.more:
        return [f"{_set_of(count, 'No other')} would do."]
    same = sum(len(way.changes) == count for way in search.ways)
    these = "this one changes" if same == 1 else f"these {NUMBERS[same]} change"
    return [f"There are more sets of {_count(count)}{f'; {these} the least' if last.relaxation.least else ''}."]


def _count(count: int) -> str:
    return _counted(count, "limit", "limits")


def _counted(count: int, one: str, many: str) -> str:
    number = NUMBERS[count] if count < len(NUMBERS) else str(count)
    return f"{number} {one if count == 1 else many}"


def _set_of(count: int, which: str) -> str:
    return f"{which} single limit" if count == 1 else f"{which} set of {_count(count)}"


def _way_sentence(case: Case, position: int, ways: tuple[WayOut, ...]) -> str:
    way = ways[position]
    count = len(way.changes)
    verb = "Relax" if position == 0 else "Or relax"
    return f"{verb} {count} limit{'' if count == 1 else 's'}: {_changes_words(case, way.changes)}; {_earns(case, way, ways[0])}."


def _changes_words(case: Case, changes: tuple[Change, ...]) -> str:
    """The changes of one month in a row; of several months by limit."""
    if len(case.months) == 1:
        return _listed([f"{_what(change)} {_from_to(change)}" for change in changes])
    by_limit: dict[str, list[str]] = {}
    for change in changes:
        by_limit.setdefault(_what(change), []).append(f"in {change.limit.month} {_from_to(change)}")
    return "; ".join(f"{what} {', '.join(texts)}" for what, texts in by_limit.items())


def _earns(case: Case, way: WayOut, first: WayOut) -> str:
    if way.margin is None:
        return way.ending
    text = f"the best plan then earns {amount(way.margin)} k{case.currency} before fixed cost"
    if way is first or first.margin is None:
        return text
    return f"{text}, {_difference(way.margin - first.margin, case.currency)}"


def _difference(difference: float, currency: str) -> str:
    if abs(difference) < 0.5e-3:
        return "as much as the first"
    return f"{amount(abs(difference))} k{currency} {'more' if difference > 0 else 'less'} than the first"


def _what(change: Change) -> str:
    return f"{change.name} {change.which}"


def _from_to(change: Change) -> str:
    """For example: from 80 kt to 73.1 kt (−8.6 %)."""
    unit = f" {change.unit}" if change.unit else ""
    if change.to is None:
        return f"from {_figure(change.written)}{unit} to none"
    start = f"{_figure(change.written)}{unit if change.written else ''}"
    percent = "" if change.share is None else f" ({_percent(change.share)})"
    return f"from {start} to {_figure(change.to)}{unit}{percent}"


def _figure(value: float) -> str:
    return f"{value:,.10g}" if abs(value) < 1000 or value != round(value) else f"{value:,.0f}"


def _percent(part: float) -> str:
    """A change in per cent.

    >>> _percent(-0.0864), _percent(0.0004), _percent(1.0786)
    ('−8.6 %', '+0.04 %', '+108 %')
    """
    size = abs(100 * part)
    text = f"{size:.0f}" if size >= 100 else f"{size:.1f}" if size >= 0.1 else f"{size:.1g}"
    return f"{'−' if part < 0 else '+'}{text} %"


# ---------------------------------------------------------------------------------- tables

CHANGE_COLUMNS = (
    Column("way", "Way out", kind="count"),
    Column("month", "Month"),
    Column("limit", "Limit to relax"),
    Column("side", "Side"),
    Column("written", "As written", kind="quantity"),
    Column("to", "Relax to", kind="quantity"),
    Column("change", "Change", kind="quantity"),
    Column("least_change", "Least change that does", kind="quantity"),
    Column("unit", "Unit"),
    Column("share", "Change, share", kind="share"),
    Column("place", "Written in"),
    Column("reason", "Reason"),
)
CLASH_COLUMNS = (
    Column("clash", "Clash", kind="count"),
    Column("month", "Month"),
    Column("limit", "Limit"),
    Column("place", "Written in"),
    Column("reason", "Reason"),
)
INNOCENT_COLUMNS = (
    Column("month", "Month"),
    Column("family", "Kind"),
    Column("limit", "Limit"),
    Column("side", "Side"),
    Column("place", "Written in"),
)


def _tables(case: Case, search: Search, clash: Clash, innocent: list[Record]) -> tuple[Table, ...]:
    numbered = list(enumerate(search.ways, start=1))
    changes = [_change_record(number, change) for number, way in numbered for change in way.changes]
    ways = [_way_record(number, way, search.ways[0]) for number, way in numbered]
    clashing = [_clash_record(number, limit) for number, limits in enumerate(clash.sets, start=1) for limit in limits]
    money = f"k{case.currency}"
    way_columns = (
        Column("way", "Way out", kind="count"),
        Column("limits", "Limits to relax", kind="count"),
        Column("size", "Sum of relative sizes", kind="number"),
        Column("margin", "Best margin then, before fixed cost", money, "money"),
        Column("difference", "Margin less that of the first way", money, "money"),
        Column("fewest", "Proven the fewest"),
        Column("least", "Proven the least change"),
        Column("note", "Note"),
    )
    return (
        Table("ways_out", "Limits to relax", CHANGE_COLUMNS, changes, NOTE),
        Table("ways", "Ways out compared", way_columns, ways),
        Table("clashing_limits", "Limits that clash", CLASH_COLUMNS, clashing, "Of each clash none can be left out."),
        Table("not_the_cause", "Not the cause", INNOCENT_COLUMNS, innocent, "All could be lifted at once, to no avail."),
    )


def _change_record(number: int, change: Change) -> Record:
    limit = change.limit
    place = limit.place_low if change.side.low else limit.place_high
    return {
        "way": number,
        "month": limit.month,
        "limit": change.name,
        "side": change.which,
        "written": change.written,
        "to": change.to,  # None: dropped
        "change": None if change.to is None else change.to - change.written,
        "least_change": change.least,
        "unit": change.unit,
        "share": change.share,
        "place": str(place or limit.place_low or ""),
        "reason": limit.reason,
    }


def _way_record(number: int, way: WayOut, first: WayOut) -> Record:
    both = way.margin is not None and first.margin is not None
    return {
        "way": number,
        "limits": len(way.changes),
        "size": way.relaxation.size,
        "margin": way.margin,
        "difference": (way.margin or 0.0) - (first.margin or 0.0) if both else None,
        "fewest": "yes" if way.relaxation.fewest else "no",
        "least": "yes" if way.relaxation.least else "no",
        "note": way.ending,
    }


def _clash_record(number: int, limit: ClashingLimit) -> Record:
    return {
        "clash": number,
        "month": limit.month,
        "limit": limit.text,
        "place": str(limit.place or ""),
        "reason": limit.reason,
    }


def _innocent_record(limit: Limit, side: Side) -> Record:
    place = limit.place_low if side.low else limit.place_high
    return {
        "month": limit.month,
        "family": limit.family.replace("_", " "),
        "limit": limit.label,
        "side": "minimum" if side.low else "maximum",
        "place": str(place or ""),
    }
