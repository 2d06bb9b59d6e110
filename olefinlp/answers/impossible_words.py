"""What is said of an impossible month: sentences and tables."""

from __future__ import annotations

from dataclasses import dataclass

from olefinlp.answers.clash import Clash, ClashingLimit
from olefinlp.answers.impossible_changes import Change, WayOut
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.answers.words import amount
from olefinlp.inputs.case import Case, Limit
from olefinlp.lp.clash import Side

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


@dataclass(frozen=True)
class Search:
    """The ways out, and whether others of as many limits as the last exist (None: not known)."""

    ways: tuple[WayOut, ...]
    more: bool | None
    none_at_all: bool


def clash_sentences(clash: Clash) -> list[str]:
    """The first clashes in full, the number of the others."""
    sentences = [_clash_sentence(limits, bool(position)) for position, limits in enumerate(clash.sets[:CLASHES_SHOWN])]
    others = len(clash.sets) - CLASHES_SHOWN
    return [*sentences, f"And {_counted(others, 'more clash', 'more clashes')}."] if others > 0 else sentences


def _clash_sentence(limits: tuple[ClashingLimit, ...], further: bool) -> str:
    texts = [f"{limit.text}{f' ({limit.reason})' if limit.reason else ''}" for limit in limits]
    start = "this limit cannot be met" if len(limits) == 1 else "these limits cannot be met together"
    return f"{f'Apart from that, {start}' if further else start.capitalize()}: {'; '.join(texts)}."


def way_sentences(case: Case, search: Search, seconds: float) -> list[str]:
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
    sets = "single limits that would do" if count == 1 else f"sets of {_count(count)}"
    return [f"There are more {sets}{f'; {these} the least' if last.relaxation.least else ''}."]


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
        return f"from {_figure(change.written, 7)}{unit} to none"
    start = f"{_figure(change.written, 7)}{unit if change.written else ''}"
    percent = "" if change.share is None else f" ({_percent(change.share)})"
    return f"from {start} to {_figure(change.to)}{unit}{percent}"


def _figure(value: float, digits: int = 10) -> str:
    """All figures that were written or rounded to.

    >>> _figure(2901.6), _figure(1250000.0), _figure(0.0272155422, 7)
    ('2,901.6', '1,250,000', '0.02721554')
    """
    return f"{value:,.0f}" if abs(value) >= 1000 and value == round(value) else f"{value:,.{digits}g}"


def _percent(part: float) -> str:
    """A change in per cent.

    >>> _percent(-0.0864), _percent(0.0004), _percent(1.0786)
    ('−8.6 %', '+0.04 %', '+108 %')
    """
    size = abs(100 * part)
    text = f"{size:.0f}" if size >= 100 else f"{size:.1f}" if size >= 0.1 else f"{size:.1g}"
    return f"{'−' if part < 0 else '+'}{text} %"


def _listed(words: list[str]) -> str:
    return " and ".join([", ".join(words[:-1]), words[-1]] if len(words) > 1 else words)


def innocent_sentence(limits: dict[str, dict[str, list[bool]]]) -> list[str]:
    """Family → limit → whether each of its sides is not the cause; families in a word, else by name.

    A limit that matters in one month is left out.
    """
    words = [word for family, labels in limits.items() for word in _family_words(family, labels)]
    if not words:
        return []
    return [f"Not the cause: {_listed(words)}. All of these could be lifted at once and no plan would be possible."]


def _family_words(family: str, labels: dict[str, list[bool]]) -> list[str]:
    """A family's limits that are not the cause: a few by name, all, all but a few, or some of many."""
    free = [label for label, sides in labels.items() if all(sides)]
    others = [label for label in labels if label not in free]
    if len(free) <= NAMES_SHOWN:
        return free
    together = FAMILIES.get(family, f"all {family.replace('_', ' ')} limits")
    if len(others) <= NAMES_SHOWN:
        return [f"{together}{f' but {_listed(others)}' if others else ''}"]
    return [*free[:NAMES_SHOWN], f"{len(free) - NAMES_SHOWN} more {together.removeprefix('all ')}"]


# ---------------------------------------------------------------------------------- tables

CHANGE_COLUMNS = (
    Column("way", "Way out", kind="count"),
    Column("month", "Month"),
    Column("limit", "Limit to relax"),
    Column("side", "Side"),
    Column("written", "As written", kind="quantity"),
    Column("to", "Relax to", kind="quantity"),
    Column("change", "Change", kind="quantity"),
    Column("least_change", "Least change", kind="quantity"),
    Column("unit", "Unit"),
    Column("share", "Share", kind="share"),
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


def tables_of(case: Case, search: Search, clash: Clash, innocent: list[Record]) -> tuple[Table, ...]:
    """Limits to relax, ways compared, limits that clash, limits that are not the cause."""
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


def innocent_record(limit: Limit, side: Side) -> Record:
    """One side of a limit that is not the cause."""
    place = limit.place_low if side.low else limit.place_high
    return {
        "month": limit.month,
        "family": limit.family.replace("_", " "),
        "limit": limit.label,
        "side": "minimum" if side.low else "maximum",
        "place": str(place or ""),
    }
