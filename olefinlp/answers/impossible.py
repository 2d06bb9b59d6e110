"""Why a month is impossible: which limits to relax, the fewest first, by how little, and what is not the cause.

Only limits that a person wrote are relaxed. Each relaxed figure is rounded to the loose side, so that
a file with the figures as printed here can be planned; the margin stated is that plan's, proven.
"""

from __future__ import annotations

import time
from collections.abc import Callable

from olefinlp.answers.answer import Answer
from olefinlp.answers.clash import Clash, find_clash
from olefinlp.answers.impossible_changes import WayOut, limit_of, way_out
from olefinlp.answers.impossible_words import (
    NOTE,
    Search,
    clash_sentences,
    innocent_record,
    innocent_sentence,
    tables_of,
    way_sentences,
)
from olefinlp.inputs.case import Case
from olefinlp.inputs.scenario import Scenario
from olefinlp.lp.algebra import build_model
from olefinlp.lp.clash import Side, limit_sides
from olefinlp.lp.compile import LabelledLp, compile_model
from olefinlp.lp.relax import SECONDS, SECONDS_IN_ALL, Relaxer

MOST = 3
"""How many ways out are listed."""
NOTHING = Search((), None, False)


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
        return Answer("impossible", _title(case), tables_of(case, NOTHING, clash, []), tuple(str(clash).splitlines()))
    search = _search(case, lp, relaxer)
    innocent = _not_the_cause(relaxer)
    sentences = [
        *clash_sentences(clash),
        *way_sentences(case, search, seconds),
        *innocent_sentence(_by_family(case, lp, set(innocent))),
    ]
    records = [innocent_record(limit_of(case, lp, side), side) for side in innocent]
    return Answer("impossible", _title(case), tables_of(case, search, clash, records), tuple(sentences), NOTE)


def _title(case: Case) -> str:
    return f"Why {_months(case)} cannot be planned"


def _months(case: Case) -> str:
    return case.months[0] if len(case.months) == 1 else f"{case.months[0]} to {case.months[-1]}"


def _possible(case: Case) -> Answer:
    text = f"A plan is possible for {_months(case)}: no limits clash, nothing need be relaxed."
    tables = tables_of(case, NOTHING, Clash(()), [])
    return Answer("impossible", f"{_months(case)} can be planned", tables, (text,))


def _sizes(case: Case, lp: LabelledLp) -> dict[Side, float]:
    """What each side's amount is measured against: the limit, or for a zero the largest of its unit."""
    largest: dict[str, float] = {}
    for limit in case.limits.values():
        size = max(abs(limit.low or 0.0), abs(limit.high or 0.0)) * limit.scale
        largest[limit.unit] = max(largest.get(limit.unit, 0.0), size)
    sizes = {}
    for side in limit_sides(lp):
        limit = limit_of(case, lp, side)
        own = abs((limit.low if side.low else limit.high) or 0.0)
        sizes[side] = own or largest[limit.unit] / limit.scale or 1.0
    return sizes


def _search(case: Case, lp: LabelledLp, relaxer: Relaxer) -> Search:
    """Up to `MOST` ways out; the first always, the others while time lasts."""
    end = time.monotonic() + max(SECONDS_IN_ALL, relaxer.seconds)
    ways: list[WayOut] = []
    while len(ways) < MOST and (not ways or time.monotonic() < end):
        found = relaxer.next()
        if found is None:
            break
        ways.append(way_out(case, lp, found))
        relaxer.seconds = min(relaxer.seconds, max(0.0, end - time.monotonic()))
        if not found.fewest:
            return Search(tuple(ways), None, False)
    rest = relaxer.fewest()
    if not rest.proven or not ways:
        return Search(tuple(ways), None, False)
    more = rest.sides is not None and len(rest.sides) == len(ways[-1].changes)
    return Search(tuple(ways), more, rest.sides is None)


def _not_the_cause(relaxer: Relaxer) -> list[Side]:
    """Sides in no way out and in no clash met on the way: lifting all of them at once changes nothing."""
    involved = {side for sides in (*relaxer.clashes, *relaxer.found) for side in sides}
    innocent = [side for side in relaxer.sides if side not in involved]
    return innocent if relaxer.impossible(innocent) else []


def _by_family(case: Case, lp: LabelledLp, innocent: set[Side]) -> dict[str, dict[str, list[bool]]]:
    """Family → limit → whether each of its sides, in every month, is not the cause."""
    families: dict[str, dict[str, list[bool]]] = {}
    for side in limit_sides(lp):
        limit = limit_of(case, lp, side)
        families.setdefault(limit.family, {}).setdefault(limit.label, []).append(side in innocent)
    return families
