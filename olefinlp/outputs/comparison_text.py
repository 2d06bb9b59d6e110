"""A comparison on a terminal: what each case earns and why, what is bought, what the choice between them costs."""

from __future__ import annotations

import textwrap
from collections.abc import Iterator
from typing import TYPE_CHECKING

from olefinlp.outputs.text import INDENT, aligned, names, number

if TYPE_CHECKING:
    from olefinlp.answers.case_answers import CaseAnswers
    from olefinlp.answers.comparison import Comparison

WIDTH = 110
MOST_CASES = 8
"""More cases than this are listed by margin alone: a terminal has no room for their columns."""


def comparison_text(comparison: Comparison, answers: CaseAnswers | None = None) -> str:
    """The comparison as people read it on a terminal."""
    scenario = comparison.scenario
    count = len(comparison.cases)
    lines = [
        f"{scenario.title}: {count} case{'s' if count != 1 else ''}",
        f"{scenario.plant.name} · cases from {comparison.source}",
        "",
    ]
    lines += ["Margin before fixed cost, every plan proven", *_margins(comparison), ""]
    failed = [case for case in comparison.cases if case.plan is None]
    if failed:
        lines.append("No plan")
        for case in failed:
            lines += _reason(case.name, case.reason)
        lines.append("")
    if 1 < len(comparison.plans) <= MOST_CASES:
        lines += ["Why different: from the first case", *_why(comparison), ""]
        lines += ["Feeds bought, kt", *_feeds(comparison), ""]
    for answer in answers.around if answers else ():
        lines += [answer.title, *(line for sentence in answer.sentences for line in _wrapped(sentence)), ""]
    for sentence in answers.left_out if answers else ():
        lines += _wrapped(sentence)
    if comparison.warnings:
        lines += ["Look at", *(line for w in comparison.warnings for line in _warning(str(w))), ""]
    lines.append("Planning aid: estimates from the yields, limits and prices supplied; not for operating limits.")
    return "\n".join(lines)


def _wrapped(sentence: str) -> list[str]:
    return textwrap.wrap(sentence, WIDTH, initial_indent=INDENT, subsequent_indent=INDENT * 2)


def _warning(text: str) -> list[str]:
    return [INDENT + line for line in text.splitlines()]


def _reason(name: str, reason: str) -> list[str]:
    return [f"{INDENT}{name}:", *(INDENT * 2 + line for line in reason.splitlines())]


def _margins(comparison: Comparison) -> list[str]:
    currency, product = comparison.scenario.currency, names(comparison.scenario.plant.file.main_product)
    first = comparison.cases[0]
    heads = ["case", f"k{currency}", f"minus {first.name}", f"{currency}/t {product}", f"{product}, kt"]
    rows = [[*heads, *(["weight"] if comparison.weighted else [])]]
    for case in comparison.cases:
        weight = [f"{100 * case.weight:.0f} %"] if comparison.weighted else []
        if case.plan is None:
            rows.append([case.name, "no plan", "", "", "", *weight])
            continue
        less = (case.plan.margin - first.plan.margin) / 1000 if first.plan and case is not first else None
        per_tonne = case.plan.margin_per_tonne()
        made = number(case.plan.main_product() / 1000)
        rows.append([case.name, number(case.plan.margin / 1000), number(less), number(per_tonne), made, *weight])
    return aligned(rows)


def _why(comparison: Comparison) -> Iterator[str]:
    """Price effect on the first plan, gain from re-optimising, limits, case by case."""
    rows = [["case", "prices on that plan", "re-optimising", "other limits", "together"]]
    for name, found in comparison.bridges.items():
        numbers = (found.price_effect, found.gain, found.limits_effect, found.new - found.old)
        rows.append([name, *(number(value) for value in numbers)])
    yield from aligned(rows)


def _feeds(comparison: Comparison) -> list[str]:
    plans = comparison.plans
    case = comparison.scenario.case
    rows = [["", *plans]]
    for feed in dict.fromkeys(data.feed for data in case.sources.values()):
        sources = [name for name, data in case.sources.items() if data.feed == feed]
        amounts = [sum(p.quantities.bought(s, m) for s in sources for m in p.quantities.case.months) for p in plans.values()]
        if any(amounts):
            rows.append([names(feed), *(number(amount) for amount in amounts)])
    return aligned(rows)
