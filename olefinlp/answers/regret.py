"""Regret: what the decisions made for one case cost when another one comes."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

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
    weights_words,
)
from olefinlp.answers.room import Decision
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.answers.words import money

if TYPE_CHECKING:
    from olefinlp.answers.comparison import Comparison
    from olefinlp.answers.plan import Plan

ROUNDING = 1e-9
"""Share of the money that moves within which a regret is what rounding leaves of none."""
SAME = 1e-9
"""Share of the largest regret within which two choices are equally good."""
NO_FORECAST = "Regret compares plans, it is no forecast."


def regret_table(comparison: Comparison, held: Sequence[str] = HELD) -> Answer:
    """What is lost when the decisions made for case a are held and case b comes, thousands of the currency.

        regret[a, b] = z_b − z_b(decisions of a)

    z_b is the best margin at the prices and limits of b, everything that is not held chosen again. None where
    the decisions of a are impossible in b. Held are the words of `olefinlp.answers.held`. Cases without a
    plan are left out and named. Raises `ValueError` for unknown words or when no case has a plan, and
    `ArithmeticError` should holding decisions earn more than choosing them.
    """
    plans = cases_to_hold(comparison)
    decided = {name: held_decisions(plan, held) for name, plan in plans.items()}
    lost = {b: _regrets_in(b, plan, decided) for b, plan in plans.items()}
    rows = [_row(a, lost, comparison.weights) for a in plans]
    _flag(rows, "worst", "minimax")
    _flag(rows, "mean", "best_weighted")
    first_name, first = next(iter(plans.items()))
    held_in_words = held_words(first, held)
    note = " ".join(
        part
        for part in (
            f"Held: {held_in_words}; everything else is chosen again at the prices and limits of the case that comes.",
            NO_FORECAST,
            f"Average: {weights_words(comparison)}.",
            _others(plans),
            left_out(comparison),
        )
        if part
    )
    table = Table("regret", "Regret", _columns(list(plans), first.currency), rows, note)
    held_table = _held_table(decided, held_in_words)
    sentences = (
        *_sentences(rows, first.currency, comparison, deciding(decided[first_name])),
        f"Held: {held_in_words}. {NO_FORECAST}",
    )
    return Answer("regret", "Regret between cases", (table, held_table), sentences, note)


def _regrets_in(case: str, plan: Plan, decided: dict[str, list[Decision]]) -> dict[str, float | None]:
    """Regret of everyone's decisions when one case comes; its own have none."""
    moved = money_moved(plan)

    def regret(amounts: Amounts) -> float | None:
        found = hold(plan, decided[case], amounts)
        return None if found is None else lost_by(plan.solution.objective - found.objective, moved)

    others = {name: amounts_of(own) for name, own in decided.items() if name != case}
    return {case: 0.0} | plan.neighbours.together(lambda: {name: regret(amounts) for name, amounts in others.items()})


def lost_by(lost: float, moved: float) -> float:
    """A loss without its rounding; raises `ArithmeticError` when it is a gain, which holding decisions cannot bring."""
    if lost < -ROUNDING * moved:
        raise ArithmeticError(f"held decisions earn {-lost:g} more than the best ones")
    return lost if lost > ROUNDING * moved else 0.0


def _row(case: str, lost: dict[str, dict[str, float | None]], weights: dict[str, float]) -> Record:
    own = {name: regrets[case] for name, regrets in lost.items()}
    known = {name: regret for name, regret in own.items() if regret is not None}
    everywhere = len(known) == len(own)
    return {
        "decided_for": case,
        **{if_comes(name): regret for name, regret in own.items()},
        "worst": max(known.values()) if everywhere else None,
        "mean": sum(weights[name] * regret for name, regret in known.items()) if everywhere else None,
        "minimax": "",
        "best_weighted": "",
        "impossible_in": listed([name for name in own if name not in known], "or") if not everywhere else "",
    }


def _flag(rows: list[Record], key: str, flag: str) -> None:
    """Mark the smallest of a column; those that are as small but for rounding too."""
    known = [row[key] for row in rows if row[key] is not None]
    for row in rows:
        if row[key] is not None and row[key] <= min(known) + SAME * max(known):
            row[flag] = "yes"


def _others(plans: dict[str, Plan]) -> str:
    """A sentence on plans that may not be the only ones of their margin, since another may have another regret."""
    names = [name for name, plan in plans.items() if not plan.neighbours.only_one()]
    return f"Other decisions may be as good for {listed(names)}, with other regrets." if names else ""


# ---------------------------------------------------------------------------------- tables and words


def _columns(cases: list[str], currency: str) -> tuple[Column, ...]:
    unit = f"k{currency}"
    return (
        Column("decided_for", "Decided for"),
        *(Column(if_comes(case), f"If {case} comes", unit, "money") for case in cases),
        Column("worst", "Worst", unit, "money"),
        Column("mean", "Average", unit, "money"),
        Column("minimax", "Smallest worst"),
        Column("best_weighted", "Smallest average"),
        Column("impossible_in", "Impossible in"),
    )


def _held_table(decided: dict[str, list[Decision]], words: str) -> Table:
    every = {key_of(decision): decision for own in decided.values() for decision in own}
    amounts = {name: amounts_of(own) for name, own in decided.items()}
    rows = [
        {**decision_record(decision), **{f"for {name}": own.get(key) for name, own in amounts.items()}}
        for key, decision in every.items()
    ]
    columns = (*decision_columns(), *(Column(f"for {name}", f"For {name}", kind="quantity") for name in decided))
    return Table("held", "Decisions held", columns, rows, f"Held: {words}.")


def _sentences(rows: list[Record], currency: str, comparison: Comparison, verb: str) -> list[str]:
    cases = [row["decided_for"] for row in rows]
    out = [left_out(comparison)] if left_out(comparison) else []
    if len(cases) == 1:
        return [f"{cases[0]} is the only case with a plan: nothing to regret.", *out]
    impossible = [
        f"{verb} for {row['decided_for']} cannot be done if {row['impossible_in']} comes: its worst regret is impossible."
        for row in rows
        if row["impossible_in"]
    ]
    possible = [row for row in rows if row["worst"] is not None]
    if not possible:
        return [f"{verb} for any one case cannot be done in all the others.", *impossible, *out]
    best, mean = [row for row in rows if row["minimax"]], [row for row in rows if row["best_weighted"]]
    weighing = "by the weights written" if comparison.weighted else "with equal weights, as none are written"
    text = [
        f"{verb} for {_names(best)} costs {_at_worst(best, cases, currency, 'at most ')}.",
        f"{verb} for {_names(mean)} costs least on average, {money(mean[0]['mean'], currency)}, {weighing}.",
    ]
    top = max(row["worst"] for row in possible)
    worst = [row for row in possible if row["worst"] >= top * (1 - SAME) and row not in best]
    if worst:
        text.append(f"{verb} for {_names(worst)} can cost {_at_worst(worst, cases, currency)}.")
    return [*text, *impossible, *out]


def _names(rows: list[Record]) -> str:
    return listed([row["decided_for"] for row in rows], "or")


def _at_worst(rows: list[Record], cases: list[str], currency: str, most: str = "") -> str:
    """The worst regret of equally good choices, with the cases in which it comes."""
    worst = max(row["worst"] for row in rows)
    if not worst:
        return "nothing, whatever comes"
    when = [case for case in cases if any((row[if_comes(case)] or 0.0) >= worst * (1 - SAME) for row in rows)]
    return f"{most}{money(worst, currency)}, if {listed(when, 'or')} comes"
