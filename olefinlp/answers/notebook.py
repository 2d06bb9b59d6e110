"""Plans, answers and tables as a notebook shows them: a few lines of escaped HTML, few digits, few rows."""

from __future__ import annotations

import html
import math
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

from olefinlp.answers.words import money, tonnage

if TYPE_CHECKING:
    from olefinlp.answers.answer import Answer
    from olefinlp.answers.plan import Plan
    from olefinlp.answers.tables import Column, Table

MOST_ROWS, MOST_COLUMNS, MOST_SENTENCES = 20, 12, 12
RIGHT = ' style="text-align:right"'
LEFT = ' style="text-align:left"'


def table_html(table: Table) -> str:
    """A table: its title, its first rows, and how many more there are."""
    columns = table.columns[:MOST_COLUMNS]
    heads = "".join(_cell("th", column, column.heading) for column in columns)
    lines = "".join(
        f"<tr>{''.join(_cell('td', column, shown(row.get(column.key), column.kind)) for column in columns)}</tr>"
        for row in table.rows[:MOST_ROWS]
    )
    more = _more(len(table.rows) - MOST_ROWS, "row") + _more(len(table.columns) - MOST_COLUMNS, "column")
    title = f"<p><b>{html.escape(table.title)}</b></p>"
    return f"{title}<table><thead><tr>{heads}</tr></thead><tbody>{lines}</tbody></table>{more}"


def _cell(tag: str, column: Column, text: str) -> str:
    return f"<{tag}{LEFT if column.kind == 'text' else RIGHT}>{html.escape(text)}</{tag}>"


def _more(count: int, word: str) -> str:
    return f"<p>and {count:,} {word}{'' if count == 1 else 's'} more</p>" if count > 0 else ""


def shown(value: Any, kind: str) -> str:
    """A value in four figures, or as its kind is read; nothing for what is no number, never a minus zero.

    >>> shown(26808.667, "money"), shown(0.97312, "share"), shown(3, "count"), shown(0.01234, "price"), shown(None, "money")
    ('26,808.7', '97.3 %', '3', '0.01234', '')
    >>> shown(-1e-12, "money"), shown(float("inf"), "quantity"), shown("naphtha", "text")
    ('0', 'unlimited', 'naphtha')
    """
    if value is None or isinstance(value, str):
        return value or ""
    if not isinstance(value, int | float) or isinstance(value, bool):
        return str(value)
    if math.isnan(value):
        return ""
    if math.isinf(value):
        return "unlimited" if value > 0 else "−unlimited"
    if kind == "share":
        return f"{100 * value:.1f} %".replace("-0.0 %", "0.0 %")
    if kind == "count":
        return f"{value:,.0f}"
    size = abs(value)
    if size < 1e-9:
        return "0"
    return f"{value:,.1f}" if size >= 1000 else f"{value:,.4g}"


def answer_html(answer: Answer) -> str:
    """An answer: its title, its sentences, its main table, its note."""
    said = "".join(f"<li>{html.escape(sentence)}</li>" for sentence in answer.sentences[:MOST_SENTENCES])
    more = _more(len(answer.sentences) - MOST_SENTENCES, "sentence")
    note = f"<p><i>{html.escape(answer.note[:500])}</i></p>" if answer.note else ""
    return f"<p><b>{html.escape(answer.title)}</b></p><ul>{said}</ul>{more}{table_html(answer.table)}{note}"


def plan_html(plan: Plan) -> str:
    """A plan: what it is of, its margin, what it buys and sells."""
    case, scenario = plan.quantities.case, plan.scenario
    span = case.months[0] if len(case.months) == 1 else f"{case.months[0]} to {case.months[-1]}"
    prices = f"price case {scenario.price_case}" if scenario.price_case else "prices of the scenario"
    what = f"{scenario.plant.name} · {span} · {prices} · proven optimum"
    lines = [f"<p><b>{html.escape(scenario.title)}</b><br>{html.escape(what)}</p>", _facts_html(_money_facts(plan))]
    lines.append(_list_html("Bought", _bought(plan)))
    lines.append(_list_html("Sold", _sold(plan)))
    return "".join(lines)


def _money_facts(plan: Plan) -> list[tuple[str, str]]:
    facts = [("margin before fixed cost", money(plan.margin / 1000, plan.currency))]
    if plan.fixed_cost():
        facts.append(("margin after fixed cost", money((plan.margin - plan.fixed_cost()) / 1000, plan.currency)))
    product = _in_words(plan.scenario.plant.file.main_product)
    facts.append((f"{product} made", tonnage(plan.main_product() / 1000)))
    per_tonne = plan.margin_per_tonne()
    if per_tonne is not None:
        facts.append((f"margin per tonne of {product}", f"{per_tonne:,.1f} {plan.currency}/t"))
    return facts


def _in_words(name: str) -> str:
    """A name of the files as words."""
    return name.replace("_", " ")


def _facts_html(facts: Sequence[tuple[str, str]]) -> str:
    rows = "".join(f"<tr><td{LEFT}>{html.escape(k)}</td><td{RIGHT}>{html.escape(v)}</td></tr>" for k, v in facts)
    return f"<table><tbody>{rows}</tbody></table>"


def _bought(plan: Plan) -> list[tuple[str, str]]:
    """Sources that are bought from, over all months, the largest first."""
    q = plan.quantities
    sums = {name: sum(q.bought(name, month) for month in q.case.months) for name in q.case.sources}
    return [(name, tonnage(value)) for name, value in _largest(sums)]


def _sold(plan: Plan) -> list[tuple[str, str]]:
    """Outlets that are sold to, over all months, the largest first; what is sold as heat last."""
    q = plan.quantities
    sums = {name: sum(q.outlet(name, month) for month in q.case.months) for name in q.case.sale_tiers}
    heat = {name: value for name, value in sums.items() if q.case.outlets[name][0] in q.case.heat_cuts}
    mass = {name: value for name, value in sums.items() if name not in heat}
    return [(n, tonnage(v)) for n, v in _largest(mass)] + [(n, f"{v:,.1f} TJ LHV") for n, v in _largest(heat)]


def _largest(sums: dict[str, float]) -> list[tuple[str, float]]:
    least = 1e-7 * max((abs(value) for value in sums.values()), default=0.0)
    return sorted(((name, value) for name, value in sums.items() if value > least), key=lambda pair: -pair[1])


def _list_html(title: str, amounts: Sequence[tuple[str, str]]) -> str:
    """Amounts in a line: a table of each would fill the screen."""
    words = ", ".join(f"{_in_words(name).replace('.', ' ')} {amount}" for name, amount in amounts[:MOST_ROWS]) or "nothing"
    rest = f" and {len(amounts) - MOST_ROWS} more" if len(amounts) > MOST_ROWS else ""
    return f"<p><b>{title}</b>: {html.escape(words + rest)}</p>"
