"""Decisions that are held while everything else is chosen again: what is bought, sold or charged.

They are named by words: `purchases`, `feeds.<feed>`, `feeds.<feed>.<source>`, the same with `side_streams`;
`sales`, `outlets.<outlet>`; `charges`, `furnace_groups.<group>`. What follows from a purchase, such as the
shortfall of a take-or-pay contract, follows by itself.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from typing import TYPE_CHECKING

from olefinlp.answers.quantities import NOISE
from olefinlp.answers.room import Decision
from olefinlp.answers.tables import Column, Record
from olefinlp.inputs.findings import near_name
from olefinlp.lp.certificate import Bounds
from olefinlp.lp.compile import LabelledLp
from olefinlp.lp.neighbours import Optimum

if TYPE_CHECKING:
    from olefinlp.answers.comparison import Comparison
    from olefinlp.answers.plan import Plan

PURCHASES, SALES, CHARGES = "purchases", "sales", "charges"
HELD = (PURCHASES,)
Key = tuple[str, str, str]
"""(kind, item, month) of a decision: the same in all cases."""
Amounts = Mapping[Key, float]


# ---------------------------------------------------------------------------------- which


def _everything(plan: Plan) -> Iterator[tuple[dict[str, str], Decision]]:
    """Every decision that can be held, with the words that hold it and what each word means."""
    for month in plan.quantities.case.months:
        yield from _bought(plan, month)
        yield from _sold(plan, month)
        yield from _charged(plan, month)


def _bought(plan: Plan, month: str) -> Iterator[tuple[dict[str, str], Decision]]:
    """By source. Steps grow dearer, so whoever buys a total fills them in order: a total says what each step brings."""
    q, case, at = plan.quantities, plan.quantities.case, plan.lp.column_at
    kinds = {"feeds": "feeds", "side_streams": "side streams"}
    every = " and ".join(word for kind, word in kinds.items() if any(data.kind == kind for data in case.sources.values()))
    for source, data in case.sources.items():
        feed = data.feed.replace("_", " ")
        words = {
            PURCHASES: f"purchases of all {every}",
            data.kind: f"purchases of all {kinds[data.kind]}",
            f"{data.kind}.{data.feed}": f"purchases of {feed}",
            f"{data.kind}.{source}": f"purchases of {feed} {data.name.replace('_', ' ')}",
        }
        columns = tuple(at["bought", source, str(k), month] for k in data.tiers)
        yield words, Decision("bought", source.replace(".", " "), month, columns, q.bought(source, month), "kt")


def _sold(plan: Plan, month: str) -> Iterator[tuple[dict[str, str], Decision]]:
    """By outlet, over its steps, which pay less and less."""
    q, case, at = plan.quantities, plan.quantities.case, plan.lp.column_at
    for outlet, steps in case.sale_tiers.items():
        words = {SALES: "all sales", f"outlets.{outlet}": f"sales to {outlet.replace('_', ' ')}"}
        columns = tuple(at["sold", outlet, str(step), month] for step in steps)
        unit = "TJ LHV" if case.outlets[outlet][0] in case.heat_cuts else "kt"
        yield words, Decision("sold", outlet, month, columns, q.outlet(outlet, month), unit)


def _charged(plan: Plan, month: str) -> Iterator[tuple[dict[str, str], Decision]]:
    """By mode, and where deliveries of several qualities can be charged by delivery too."""
    q, case, at = plan.quantities, plan.quantities.case, plan.lp.column_at
    for mode, parcel, _ in case.charges_in[month]:
        group = case.mode_group[mode]
        words = {CHARGES: "all charges", f"furnace_groups.{group}": f"charges of {group.replace('_', ' ')}"}
        several = len(case.charged_parcels[mode, month]) > 1
        item = mode.replace(".", " ") + (f" ({parcel})" if several else "")
        columns = (at["charge", mode, parcel, month],)
        yield words, Decision("charged", item, month, columns, q.value("charge", mode, parcel, month), "kt")


def held_decisions(plan: Plan, held: Sequence[str] = HELD) -> list[Decision]:
    """The decisions that some words hold, by month, each with what the plan has.

    Raises `ValueError` for no word, and for one that holds nothing in this plan.
    """
    wanted = _wanted(held)
    found = list(_everything(plan))
    _known(found, wanted)
    return [decision for words, decision in found if any(word in words for word in wanted)]


def held_columns(plan: Plan, held: Sequence[str] = HELD) -> list[tuple[str, list[int]]]:
    """What is held in words, and the columns of the plan's program that sum to it; raises as `held_decisions`."""
    return [(name_of(decision), list(decision.columns)) for decision in held_decisions(plan, held)]


def held_words(plan: Plan, held: Sequence[str] = HELD) -> str:
    """What some words hold, in plain words; raises as `held_decisions`.

    >>> from olefinlp import make_plan, read_scenario
    >>> plan = make_plan(read_scenario("scenarios/thermal_cracker.yaml"))
    >>> held_words(plan), held_words(plan, ["feeds", "sales"])
    ('purchases of all feeds', 'purchases of all feeds, all sales')
    """
    wanted = _wanted(held)
    meanings = _known(list(_everything(plan)), wanted)
    by_start: dict[str, list[str]] = {}
    for word in wanted:
        start, of, name = meanings[word].partition(" of " if " of " in meanings[word] else " to ")
        by_start.setdefault(start + of, []).append(name)
    return ", ".join(f"{start}{listed(names) if start[-1] == ' ' else ''}" for start, names in by_start.items())


def _wanted(held: Sequence[str]) -> list[str]:
    words = [held] if isinstance(held, str) else list(dict.fromkeys(held))
    if not words:
        raise ValueError("nothing is held: name what is decided beforehand, such as `purchases`")
    return words


def _known(found: Sequence[tuple[dict[str, str], Decision]], wanted: Sequence[str]) -> dict[str, str]:
    """What every known word means; raises `ValueError` when one that is wanted is not known."""
    meanings = {word: meaning for words, _ in found for word, meaning in words.items()}
    for word in wanted:
        if word not in meanings:
            hint = near_name(word, meanings)
            raise ValueError(f"`{word}` is no decision that can be held" + (f"; {hint}" if hint else ""))
    return meanings


def key_of(decision: Decision) -> Key:
    """What a decision is called in every case."""
    return decision.kind, decision.item, decision.month


def name_of(decision: Decision) -> str:
    """A decision in words."""
    return f"{decision.month} {decision.item.replace('_', ' ')} {decision.kind}"


def deciding(decisions: Sequence[Decision]) -> str:
    """How a sentence speaks of what is held: as buying where nothing else is."""
    return "Buying" if all(decision.kind == "bought" for decision in decisions) else "Deciding"


# ---------------------------------------------------------------------------------- how much


def amounts_of(decisions: Sequence[Decision]) -> dict[Key, float]:
    """What the plan has of each decision."""
    return {key_of(decision): decision.planned for decision in decisions}


def hold(plan: Plan, decisions: Sequence[Decision], amounts: Amounts) -> Optimum | None:
    """The proven best of a case with these amounts held; None where they are impossible in it.

    `decisions` are the plan's own. Of what another case has not, nothing is held; what this case has not must be nothing.
    Amounts that are impossible by no more than the rounding of a solver are moved by so much.
    """
    small = NOISE * max(plan.quantities.size, *amounts.values(), 1e-300)
    own = {key_of(decision) for decision in decisions}
    if any(amount > small for key, amount in amounts.items() if key not in own):
        return None
    for slack in (0.0, small):
        columns: dict[int, tuple[float, float]] = {}
        for decision in decisions:
            spread = _spread(plan.lp, decision.columns, amounts.get(key_of(decision), 0.0), slack, small)
            if spread is None:
                return None
            columns |= spread
        found = plan.neighbours.solve(columns=columns)
        if found is not None:
            return found
    return None


def _spread(lp: LabelledLp, columns: Sequence[int], amount: float, slack: float, small: float) -> Bounds | None:
    """Bounds that hold a sum of columns, the best paid filled first; None where they cannot hold so much or so little."""
    low, high = lp.low[list(columns)], lp.high[list(columns)]
    left = amount - float(low.sum())
    if left < -small or amount > float(high.sum()) + small:
        return None
    bounds: dict[int, tuple[float, float]] = {}
    for column in sorted(columns, key=lambda j: -lp.cost[j]):
        least, most = float(lp.low[column]), float(lp.high[column])
        value = least + min(max(left, 0.0), most - least)
        left -= value - least
        bounds[column] = (max(least, value - slack), min(most, value + slack))
    return bounds


# ---------------------------------------------------------------------------------- cases


def cases_to_hold(comparison: Comparison) -> dict[str, Plan]:
    """The cases that have a plan; raises `ValueError` when none has, or when all of them weigh nothing."""
    if not comparison.plans:
        reasons = "; ".join(
            f"{case.name}: {case.reason.splitlines()[0] if case.reason else 'no plan'}" for case in comparison.cases
        )
        raise ValueError(f"no case has a plan: {reasons}")
    if not sum(comparison.weights.values()) > 0:
        raise ValueError("the cases that have a plan all weigh nothing: give one of them a weight")
    return comparison.plans


def left_out(comparison: Comparison) -> str:
    """A sentence on the cases without a plan; empty where there is none."""
    names = [case.name for case in comparison.cases if case.plan is None]
    if not names:
        return ""
    return f"{listed(names)} {'has' if len(names) == 1 else 'have'} no plan and {'is' if len(names) == 1 else 'are'} left out."


def weights_words(comparison: Comparison) -> str:
    """How the cases weigh, in words."""
    if not comparison.weighted:
        return "all cases weigh the same, as no weights are written"
    return "weights as written: " + ", ".join(f"{name} {weight:.3g}" for name, weight in comparison.weights.items())


def listed(names: Sequence[str], word: str = "and") -> str:
    """Names in a sentence.

    >>> listed(["Base"]), listed(["Base", "High"]), listed(["Base", "High", "Low"], "or")
    ('Base', 'Base and High', 'Base, High or Low')
    """
    return f" {word} ".join([", ".join(names[:-1]), names[-1]] if len(names) > 1 else names)


def if_comes(case: str) -> str:
    """Key of the column of what happens when a case comes: no case can be named like another column."""
    return f"if {case} comes"


def decision_columns() -> tuple[Column, ...]:
    """The columns that name a decision."""
    return Column("month", "Month"), Column("decision", "Decision"), Column("item", "Item"), Column("unit", "Unit")


def decision_record(decision: Decision) -> Record:
    """The cells of `decision_columns`."""
    return {"month": decision.month, "decision": decision.kind, "item": decision.item, "unit": decision.unit}


def money_moved(plan: Plan) -> float:
    """Σ|money lines| of a plan, in thousands: what rounding is compared with."""
    return sum(abs(line.amount) for line in plan.lines) or 1.0
