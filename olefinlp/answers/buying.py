"""Buying before the case is known: one set of purchases for all cases, everything else chosen when one has come.

Compared are the purchases of the first case's own plan, those of a plan at mean prices, those that are
best on average (risk-neutral), and those chosen with some weight on the worst cases (see `olefinlp.lp.two_stage`).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import partial
from typing import TYPE_CHECKING

import numpy as np

from olefinlp.answers.answer import Answer
from olefinlp.answers.held import (
    HELD,
    Amounts,
    amounts_of,
    cases_to_hold,
    deciding,
    decision_columns,
    decision_record,
    held_decisions,
    held_words,
    hold,
    if_comes,
    key_of,
    left_out,
    listed,
    money_moved,
    name_of,
    weights_words,
)
from olefinlp.answers.quantities import NOISE
from olefinlp.answers.room import Decision
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.answers.words import amount as amount_words
from olefinlp.answers.words import money, percent
from olefinlp.lp.clash import clashing_sets
from olefinlp.lp.neighbours import NeighbourError
from olefinlp.lp.two_stage import Block, TwoStagePlan, all_cases, check_risk, decide, worst_mean

if TYPE_CHECKING:
    from olefinlp.answers.comparison import Comparison
    from olefinlp.answers.plan import Plan

ROUNDING = 1e-8
"""Share of the money that moves within which margins of different programs are equal."""
WORTH_TAKING = 1e-4
"""A hedge is worth speaking of from this share of the best average margin."""
BASE, MEAN_PRICE, NEUTRAL, CHOSEN = "base", "mean_price", "risk_neutral", "chosen"


@dataclass(frozen=True)
class Tried:
    """Some purchases, and the best margin of every case with them, thousands; None where they are impossible."""

    amounts: Amounts
    margins: Mapping[str, float | None]
    mean: float | None
    worst: float | None

    @property
    def impossible_in(self) -> list[str]:
        """The cases in which they are impossible."""
        return [name for name, margin in self.margins.items() if margin is None]


@dataclass(frozen=True)
class Buying:
    """What the tables and sentences are made of; `tried` has all four plans but the one at mean prices, should it have no end."""

    comparison: Comparison
    plans: Mapping[str, Plan]
    decisions: list[Decision]
    tried: Mapping[str, Tried]
    held: str
    verb: str
    risk: float
    share: float
    knowing: float
    rounding: float

    @property
    def first(self) -> str:
        """The case whose plan is the base."""
        return next(iter(self.plans))

    @property
    def currency(self) -> str:
        """ISO code of the money."""
        return self.plans[self.first].currency

    def mean(self, plan: str) -> float | None:
        """Average margin of one of the plans, thousands; None where it is impossible in some case."""
        return self.tried[plan].mean if plan in self.tried else None

    @property
    def best(self) -> float:
        """The best average margin, thousands."""
        best = self.tried[NEUTRAL].mean
        assert best is not None
        return best


def buying_plan(comparison: Comparison, *, held: Sequence[str] = HELD, risk: float = 0.0, worst: float = 0.2) -> Answer:
    """What to buy before it is known which case comes, and what knowing it would be worth; thousands of the currency.

    `risk` is the weight on the average of the worst share `worst` of the cases by weight, from 0 to below 1;
    the rest is on the average of all. `held` says what is decided beforehand, in the words of `olefinlp.answers.held`.
    Published method: Rockafellar & Uryasev, Optimization of conditional value-at-risk, Journal of Risk 2(3), 2000.

    With WS the average margin were the case known, RP the best without knowing it and EEV that of buying for
    mean prices: EEV ≤ RP ≤ WS. Margins are those of every case solved again with the purchases held.

    Raises `ValueError` for a risk, a share or words that cannot be, when no case has a plan, when cases do not have the
    same decisions, and when nothing can be bought that is possible in all cases; `ArithmeticError` when what is always
    so does not come out so.
    """
    check_risk(risk, worst)
    plans = cases_to_hold(comparison)
    decided = {name: held_decisions(plan, held) for name, plan in plans.items()}
    _same_decisions(plans, decided)
    first = next(iter(plans))
    neutral = _best(comparison, decided, 0.0, worst)
    chosen = _best(comparison, decided, risk, worst) if risk else neutral
    amounts = {
        BASE: amounts_of(decided[first]),
        MEAN_PRICE: _at_mean_prices(comparison, decided[first]),
        NEUTRAL: _amounts(decided[first], neutral),
        CHOSEN: _amounts(decided[first], chosen),
    }
    tried = _tried(comparison, decided, {name: own for name, own in amounts.items() if own is not None}, worst)
    weights = comparison.weights
    knowing = sum(weights[name] * plan.solution.objective for name, plan in plans.items())
    rounding = ROUNDING * max(money_moved(plan) for plan in plans.values())
    words = held_words(plans[first], held)
    found = Buying(comparison, plans, decided[first], tried, words, deciding(decided[first]), risk, worst, knowing, rounding)
    _prove(found, neutral, chosen)
    tables = (_buying_table(found), _margins_table(found), _information_table(found))
    return Answer("buying", "Buying before the case is known", tables, tuple(_sentences(found)), _note(found))


# ---------------------------------------------------------------------------------- solved


def _same_decisions(plans: Mapping[str, Plan], decided: Mapping[str, list[Decision]]) -> None:
    first, *others = plans
    keys = {key_of(decision) for decision in decided[first]}
    columns = set(plans[first].lp.columns)
    for other in others:
        own = {key_of(decision): decision for decision in decided[other]}
        odd = [
            name_of(decision)
            for decision in (*decided[first], *own.values())
            if (key_of(decision) in keys) != (key_of(decision) in own)
        ]
        odd = odd or sorted(".".join(label) for label in columns ^ set(plans[other].lp.columns))
        if odd:
            raise ValueError(f"{first} and {other} do not have the same decisions ({odd[0]}): nothing can be decided for both")


def _blocks(comparison: Comparison, decided: Mapping[str, list[Decision]]) -> list[Block]:
    """The cases by name, so that what is chosen among equally good purchases does not hang on their order."""
    weights = comparison.weights
    blocks = []
    for name, plan in sorted(comparison.plans.items()):
        own = {key_of(decision): decision.columns for decision in decided[name]}
        blocks.append(Block(name, weights[name], plan.lp, tuple(own[key] for key in sorted(own))))
    return blocks


def _best(comparison: Comparison, decided: Mapping[str, list[Decision]], risk: float, worst: float) -> TwoStagePlan:
    blocks = _blocks(comparison, decided)
    found = decide(blocks, risk, worst)
    if found is None:
        raise ValueError(_nothing_in_common(comparison, blocks))
    return found


def _nothing_in_common(comparison: Comparison, blocks: list[Block]) -> str:
    """Why nothing can be decided that is possible in all cases: the limits that clash, each with its case."""
    lp = all_cases(blocks)
    lines = ["no decisions are possible in all cases: what is held must be the same in each, and these limits clash"]
    for side in (side for sides in clashing_sets(lp) or [] for side in sides):
        family, case, *key = lp.rows[side.row]
        limit = comparison.plans[case].quantities.case.limits[(family.removesuffix("_limit"), *key)]
        bound = amount_words(((limit.low if side.low else limit.high) or 0.0) * limit.scale)
        lines.append(f"  {case}: {limit.month} {limit.label}, at {'least' if side.low else 'most'} {bound} {limit.unit}")
    return "\n".join(lines if len(lines) > 1 else ["no decisions are possible in all cases: leave one out, or hold less"])


def _amounts(decisions: list[Decision], found: TwoStagePlan) -> dict[tuple[str, str, str], float]:
    """What the program of all cases decided, without what is rounding of the solver."""
    values = dict(zip(sorted(key_of(decision) for decision in decisions), found.decided.tolist(), strict=True))
    small = NOISE * max(map(abs, values.values()), default=0.0)
    return {key: 0.0 if abs(values[key]) <= small else values[key] for key in map(key_of, decisions)}


def _at_mean_prices(comparison: Comparison, decisions: list[Decision]) -> dict[tuple[str, str, str], float] | None:
    """What the first case would buy at mean prices, with its own limits; None where its margin has no end at these."""
    first, *_ = plans = list(comparison.plans.values())
    cost = np.zeros(len(first.lp.columns))
    for plan, weight in zip(plans, comparison.weights.values(), strict=True):
        at = plan.lp.column_at
        cost += weight * plan.lp.cost[[at[label] for label in first.lp.columns]]
    try:
        found = first.neighbours.solve(cost=cost)
    except NeighbourError:
        return None
    if found is None:
        return None
    small = NOISE * float(np.abs(found.x).max(initial=0.0))
    totals = {key_of(decision): float(found.x[list(decision.columns)].sum()) for decision in decisions}
    return {key: 0.0 if abs(total) <= small else total for key, total in totals.items()}


def _tried(
    comparison: Comparison, decided: Mapping[str, list[Decision]], amounts: Mapping[str, Amounts], worst: float
) -> dict[str, Tried]:
    """Every plan's purchases held in every case."""
    margins: dict[str, dict[str, float | None]] = {name: {} for name in amounts}
    for case, plan in comparison.plans.items():
        found = plan.neighbours.together(partial(_margins_in, plan, decided[case], amounts))
        for name, margin in found.items():
            margins[name][case] = margin
    return {name: _weighed(own, margins[name], comparison.weights, worst) for name, own in amounts.items()}


def _margins_in(plan: Plan, decisions: list[Decision], amounts: Mapping[str, Amounts]) -> dict[str, float | None]:
    found = {name: hold(plan, decisions, own) for name, own in amounts.items()}
    return {name: None if optimum is None else optimum.objective for name, optimum in found.items()}


def _weighed(amounts: Amounts, margins: Mapping[str, float | None], weights: Mapping[str, float], worst: float) -> Tried:
    known = {name: margin for name, margin in margins.items() if margin is not None}
    if len(known) < len(margins):
        return Tried(amounts, margins, None, None)
    mean = sum(weights[name] * margin for name, margin in known.items())
    return Tried(amounts, margins, mean, worst_mean(list(known.values()), [weights[name] for name in known], worst))


def _prove(found: Buying, neutral: TwoStagePlan, chosen: TwoStagePlan) -> None:
    """What is always so: EEV ≤ RP ≤ WS, the worst earn less than the mean, the best is the best, and both ways agree."""
    for plan, program, risk in ((NEUTRAL, neutral, 0.0), (CHOSEN, chosen, found.risk)):
        again = _objective(found.tried[plan], risk)
        if again is None or abs(again - program.objective) > found.rounding:
            raise ArithmeticError(f"the program of all cases earns {program.objective:.12g}, its decisions held in each {again}")
        for other, tried in found.tried.items():
            theirs = _objective(tried, risk)
            if theirs is not None and theirs > again + found.rounding:
                raise ArithmeticError(f"decisions called the best earn {again:.12g}, others ({other}) {theirs:.12g}")
    if found.best > found.knowing + found.rounding:
        raise ArithmeticError(f"not knowing the case earns {found.best:.12g}, knowing it {found.knowing:.12g}")
    for name, tried in found.tried.items():
        if tried.mean is not None and tried.worst is not None and tried.worst > tried.mean + found.rounding:
            raise ArithmeticError(f"{name}: the worst cases earn {tried.worst:.12g}, all of them {tried.mean:.12g}")


def _objective(tried: Tried, risk: float) -> float | None:
    if tried.mean is None or tried.worst is None:
        return None
    return (1 - risk) * tried.mean + risk * tried.worst


# ---------------------------------------------------------------------------------- tables


def _titles(found: Buying) -> dict[str, str]:
    chosen = f"Chosen, {100 * found.risk:.3g} % weight on the worst" if found.risk else "Chosen, no weight on the worst"
    titles = {BASE: f"As for {found.first}", MEAN_PRICE: "For mean prices", NEUTRAL: "Best on average", CHOSEN: chosen}
    return titles


def _worst_title(found: Buying) -> str:
    return f"Average of the worst {percent(found.share)}"


def _buying_table(found: Buying) -> Table:
    rows: list[Record] = []
    for decision in found.decisions:
        key = key_of(decision)
        own = {name: found.tried[name].amounts[key] if name in found.tried else None for name in _titles(found)}
        change = (own[CHOSEN] or 0.0) - (own[BASE] or 0.0)
        rows.append(
            {
                **decision_record(decision),
                **own,
                "change": 0.0 if abs(change) <= NOISE * found.plans[found.first].quantities.size else change,
            }
        )
    columns = (
        *decision_columns(),
        *(Column(name, title, kind="quantity") for name, title in _titles(found).items()),
        Column("change", f"Chosen less as for {found.first}", kind="quantity"),
    )
    return Table("buying", "Decided before the case is known", columns, rows, _note(found))


def _margins_table(found: Buying) -> Table:
    unit = f"k{found.currency}"
    rows: list[Record] = []
    for name, title in _titles(found).items():
        tried = found.tried.get(name)
        margins = tried.margins if tried else dict.fromkeys(found.plans)
        known = [margin for margin in margins.values() if margin is not None]
        rows.append(
            {
                "plan": title,
                **{if_comes(case): margin for case, margin in margins.items()},
                "mean": tried.mean if tried else None,
                "worst_mean": tried.worst if tried else None,
                "lowest": min(known) if tried and tried.mean is not None else None,
                "impossible_in": listed(tried.impossible_in) if tried and tried.impossible_in else "",
            }
        )
    columns = (
        Column("plan", "Bought"),
        *(Column(if_comes(case), f"If {case} comes", unit, "money") for case in found.plans),
        Column("mean", "Average", unit, "money"),
        Column("worst_mean", _worst_title(found), unit, "money"),
        Column("lowest", "Lowest", unit, "money"),
        Column("impossible_in", "Impossible in"),
    )
    note = (
        f"Margin before fixed cost with the decisions held. Held: {found.held}. "
        "Of the last of the worst cases by weight only the part that fills the share counts."
    )
    return Table("buying_margins", "Margins of the ways to buy", columns, rows, note)


def _information_table(found: Buying) -> Table:
    at_mean, best = found.mean(MEAN_PRICE), found.best
    lines: tuple[tuple[str, str, float | None, str], ...] = (
        (
            "knowing",
            "Average margin, the case known",
            found.knowing,
            "each case planned for itself, as if it were known before buying",
        ),
        ("best", "Best average margin, the case not known", best, "one set of decisions for all cases, the best on average"),
        (
            "mean_price",
            "Average margin of deciding for mean prices",
            at_mean,
            f"planned at the mean of the prices with the limits of {found.first}, then held",
        ),
        (
            "value_of_plan",
            "Value of planning for all cases",
            None if at_mean is None else _or_nothing(best - at_mean, found),
            "what deciding for mean prices gives up",
        ),
        (
            "value_of_knowing",
            "Value of knowing the case",
            _or_nothing(found.knowing - best, found),
            "the most that a perfect forecast could be worth",
        ),
    )
    columns = (
        Column("item", "Item"),
        Column("title", "What"),
        Column("money", "Money", f"k{found.currency}", "money"),
        Column("meaning", "Meaning"),
    )
    rows: list[Record] = [dict(zip(("item", "title", "money", "meaning"), line, strict=True)) for line in lines]
    return Table(
        "value_of_information",
        "What planning for all cases and knowing the case are worth",
        columns,
        rows,
        f"Held: {found.held}.",
    )


def _or_nothing(value: float, found: Buying) -> float:
    return value if abs(value) > found.rounding else 0.0


# ---------------------------------------------------------------------------------- words


def _note(found: Buying) -> str:
    parts = (
        f"Held: {found.held}; everything else is chosen when the case has come.",
        f"Average: {weights_words(found.comparison)}.",
        left_out(found.comparison),
    )
    return " ".join(part for part in parts if part)


def _sentences(found: Buying) -> list[str]:
    if len(found.plans) == 1:
        lines = [f"{found.first} is the only case with a plan: {found.verb.lower()} as for it is the best."]
    else:
        lines = [_against_base(found), _against_mean_prices(found)]
        knowing = _money(found.knowing - found.best, found)
        lines.append(f"Knowing the case beforehand would be worth {knowing} on average.")
        if found.risk:
            lines.append(_hedge(found))
    return [line for line in (*lines, left_out(found.comparison), f"Held: {found.held}.") if line]


def _against_base(found: Buying) -> str:
    """Honest where nothing is gained: the plan of the first case is often good enough for all."""
    base, threshold = found.mean(BASE), WORTH_TAKING * abs(found.best)
    start = f"{found.verb} as for {found.first}"
    if base is None:
        return (
            f"{start} cannot be done if {listed(found.tried[BASE].impossible_in, 'or')} comes; {_changes(found, BASE, NEUTRAL)}."
        )
    gain = found.best - base
    if gain <= found.rounding:
        return f"{start} is already the best on average; no hedge is worth taking."
    if gain <= threshold:
        said = f"a gain counts from {percent(WORTH_TAKING)} of the margin, {_money(threshold, found)}"
        return f"{start} is already within {_money(gain, found)} of the best on average; no hedge is worth taking ({said})."
    together = f"{found.verb} for all cases together gains {_money(gain, found)} on average over"
    return f"{together} {found.verb.lower()} as for {found.first}: {_changes(found, BASE, NEUTRAL)}."


def _against_mean_prices(found: Buying) -> str:
    if MEAN_PRICE not in found.tried:
        return "At mean prices the margin has no end with the limits of the first case, so there is no plan for mean prices."
    at_mean, start = found.mean(MEAN_PRICE), f"{found.verb} for mean prices"
    if at_mean is None:
        return f"{start} cannot be done if {listed(found.tried[MEAN_PRICE].impossible_in, 'or')} comes."
    gain = found.best - at_mean
    if gain <= found.rounding:
        return f"{start} is as good on average as planning for all cases."
    if gain <= WORTH_TAKING * abs(found.best):
        return f"{start} is within {_money(gain, found)} of the best on average."
    loss = f"{start} gives up {_money(gain, found)} on average against planning for all cases"
    return f"{loss}; best is {_changes(found, MEAN_PRICE, NEUTRAL)}."


def _hedge(found: Buying) -> str:
    chosen, neutral = found.tried[CHOSEN], found.tried[NEUTRAL]
    assert chosen.mean is not None and chosen.worst is not None and neutral.mean is not None and neutral.worst is not None
    start = f"With {100 * found.risk:.3g} % of the weight on the worst {percent(found.share)} of the cases"
    gained, given = chosen.worst - neutral.worst, neutral.mean - chosen.mean
    if gained <= found.rounding:
        return f"{start} nothing else would be decided: the best on average is also the best for these."
    traded = f"these gain {_money(gained, found)} and the average gives up {_money(max(given, 0.0), found)}"
    return f"{start} {traded}: {_changes(found, NEUTRAL, CHOSEN)}."


def _changes(found: Buying, before: str, after: str) -> str:
    """The largest changes of decisions between two plans."""
    old, new = found.tried[before].amounts, found.tried[after].amounts
    size = max(map(abs, (*old.values(), *new.values())), default=0.0)
    moved = [d for d in found.decisions if abs(new[key_of(d)] - old[key_of(d)]) > 1e-4 * size]
    moved.sort(key=lambda d: -abs(new[key_of(d)] - old[key_of(d)]))
    only = found.decisions[0].month + " " if len({d.month for d in found.decisions}) == 1 else ""
    text = []
    for decision in moved[:4]:
        amounts = [amount_words(own[key_of(decision)]) for own in (new, old)]
        text.append(f"{name_of(decision).removeprefix(only)} {amounts[0]} {decision.unit} instead of {amounts[1]}")
    if not text:
        return "by next to nothing in any decision"
    return "; ".join(text) + (f"; and {len(moved) - 4} more" if len(moved) > 4 else "")


def _money(thousands: float, found: Buying) -> str:
    return money(thousands if abs(thousands) > found.rounding else 0.0, found.currency)
