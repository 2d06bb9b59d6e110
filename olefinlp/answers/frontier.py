"""Margin against a second goal, exactly: what each plan between most margin and least of a quantity gives up for it.

For a weight λ on a quantity G the best of margin − λ G is convex in λ and piecewise linear, with slope −G: its steps
are the plans that no other beats in both goals, each with the weights at which it is the best. Between two of them
the frontier is a straight line, whose slope is the weight at which they are equal: the cost of the last unit saved.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable
from dataclasses import replace
from typing import TYPE_CHECKING, TypeVar

from olefinlp.answers.answer import Answer, Chart
from olefinlp.answers.frontier_solves import EQUAL, Goal, Seeker, Vertex, between, goal_of, reach
from olefinlp.answers.quantities import Quantities
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.answers.words import amount, percent, worth
from olefinlp.answers.words import money as money_words
from olefinlp.lp.neighbours import NeighbourError
from olefinlp.lp.steps import SAME

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan

BEYOND = 0.25
"""How far past its last step a curve without an end given is shown, as a share of the way to it."""
MOSTLY = 2 / 3
"""From this share on a fall is said to be of one kind."""
NAMED, LEAST_SHARE = 2, 0.1
"""Changes named of purchases and of sales: how many at most, and the part of the largest that each has at least."""
Found = TypeVar("Found")


# ---------------------------------------------------------------------------------- the questions


def two_goal_curve(plan: Plan, goal: str, low: float | None = None, high: float | None = None) -> Answer:
    """Every plan that is the best for some weight on a second goal, with the weights from and to which it is.

    `goal` is a path as written in the files: `utilities.<trade>` (imported, exported, emitted), `feeds.<feed>` or
    `feeds.<feed>.<source>` (bought), `outlets.<outlet>` (sold), `cuts.<cut>` (made), `recovery_units.<unit>`
    (loaded); all months together. `low` and `high` are weights in currency per unit as the goal's price is written
    (per t, GJ LHV, MWh or unit of load where it has none), 0 being today and a weight below zero a premium. Without
    `high` the curve goes on until the quantity falls no more, but not past ten times today's price, or the margin
    per unit where it has none.

    2n + 1 solves for n plans, two or three more for each plan and one for the least of the goal. Raises `ValueError` for an
    unknown goal (with the nearest name), an empty range, or a weight at which the margin has no end.

    >>> from olefinlp import make_plan, read_scenario
    >>> curve = two_goal_curve(make_plan(read_scenario("scenarios/thermal_cracker.yaml")), "feeds.ethane")
    >>> [round(1000 * row["quantity"], 2) for row in curve.table.rows]
    [27.22, 9.87, 0.0]
    """
    return _asked(plan, goal, lambda seeker: _curve(seeker, low, high))


def at_most(plan: Plan, goal: str, quantity: float) -> Answer:
    """The best margin with no more of a goal than a quantity (as the curve shows it, kt …), and what the last unit costs.

    It lies on the frontier's straight line between the two plans beside it: no limit is added to the program.
    Raises `ValueError` for an unknown goal, and for a quantity below the least that any plan has.

    >>> from olefinlp import make_plan, read_scenario
    >>> answer = at_most(make_plan(read_scenario("scenarios/thermal_cracker.yaml")), "feeds.ethane", 0.02)
    >>> round(answer.table.rows[0]["last"], 2)
    1.84
    """
    return _asked(plan, goal, lambda seeker: _point(seeker, quantity))


def _asked(plan: Plan, goal: str, ask: Callable[[Seeker], Found]) -> Found:
    against = goal_of(plan.quantities.case, plan.lp.column_at, goal)
    try:
        return plan.neighbours.together(lambda: ask(Seeker(plan, against)))
    except NeighbourError as error:
        raise ValueError(f"at some of these weights on {goal} the margin has no end: ask for less") from error


# ---------------------------------------------------------------------------------- the curve


def _curve(seeker: Seeker, low: float | None, high: float | None) -> Answer:
    goal = seeker.goal
    start = 0.0 if low is None else low * goal.factor
    stop = max(start, 0.0) + reach(seeker) if high is None else high * goal.factor
    if not (start < stop and math.isfinite(stop - start)):
        raise ValueError(f"the range {start / goal.factor:g} to {stop / goal.factor:g} {goal.weight_unit} is empty or has no end")
    vertices = seeker.vertices(start, stop)
    last = vertices[-1]
    if high is None and len(vertices) > 1 and seeker.quantity(last.x) <= seeker.least + EQUAL * seeker.size:
        vertices[-1] = replace(last, high=min(last.high, last.low + BEYOND * (last.low - start)))
    rows = [_row(seeker, vertex, before) for vertex, before in zip(vertices, (None, *vertices), strict=False)]
    for before, row in itertools.pairwise(rows):
        row["throughput"] = _throughput_part(before, row)
    note = _note(seeker, all(vertex.sure for vertex in vertices))
    table = Table("frontier", f"Margin against {goal.path}", _columns(seeker), rows, note)
    charts = _charts(seeker, rows)
    sentences = _sentences(seeker, rows, vertices)
    return Answer("frontier", f"Margin against {goal.path}", (table,), sentences, note, charts[0], charts=charts[1:])


def _row(seeker: Seeker, vertex: Vertex, before: Vertex | None) -> Record:
    goal = seeker.goal
    low, high = vertex.low / goal.factor, vertex.high / goal.factor
    changed = "" if before is None else _changes(seeker.quantities(before.x), seeker.quantities(vertex.x))
    return {
        "low": low,
        "high": high,
        "total_low": goal.in_all(low),
        "total_high": goal.in_all(high),
        **seeker.record(vertex.x),
        "throughput": None,
        "today": "here" if low <= 0 <= high else "",
        "changed": changed,
    }


def _throughput_part(before: Record, after: Record) -> float | None:
    """The share of a fall that goes with the main product made; the rest is less per tonne of it. None where none is made.

    Each of the two factors changes at the mean of the other, so that both parts sum to the fall.
    """
    if before["per_main"] is None or after["per_main"] is None:
        return None
    mean = (before["per_main"] + after["per_main"]) / 2
    share = float((before["main"] - after["main"]) * mean / (before["quantity"] - after["quantity"]))
    return share if abs(share) > EQUAL else 0.0


def _columns(seeker: Seeker) -> tuple[Column, ...]:
    goal, priced = seeker.goal, "On top, " if len(seeker.goal.rates) and seeker.goal.sign > 0 else "Weight, "
    columns = [
        Column("low", f"{priced}from", goal.weight_unit, "price"),
        Column("high", f"{priced}to", goal.weight_unit, "price"),
    ]
    if goal.price is not None:
        columns += [
            Column("total_low", "In all, from", goal.weight_unit, "price"),
            Column("total_high", "In all, to", goal.weight_unit, "price"),
        ]
    columns += _measures(seeker)
    if goal.path != f"cuts.{seeker.main}":
        columns.append(Column("throughput", "Of the step, throughput", "%", "share"))
    return (*columns, Column("today", "Today"), Column("changed", "Changed against the row above"))


def _measures(seeker: Seeker) -> tuple[Column, ...]:
    """Columns of what a plan comes to."""
    goal, currency = seeker.goal, seeker.plan.currency
    before = "Margin before its cost" if goal.sign > 0 else "Margin without its revenue"
    main = seeker.main.replace("_", " ")
    return (
        Column("quantity", goal.verb.capitalize(), goal.unit, "quantity"),
        Column("margin", "Margin", f"k{currency}", "money"),
        *((Column("margin_before", before, f"k{currency}", "money"),) if len(goal.rates) else ()),
        Column("main", f"{main.capitalize()} made", "kt", "quantity"),
        Column("per_main", f"Per t of {main}", f"{goal.own}/t", "number"),
        Column("margin_per_tonne", f"Margin per t of {main}", f"{currency}/t", "price"),
    )


def _charts(seeker: Seeker, rows: list[Record]) -> tuple[Chart, ...]:
    goal, money = seeker.goal, f"k{seeker.plan.currency}"
    x, unit, today = ("low", "high"), f"weight, {goal.weight_unit}", 0.0
    if goal.price is not None:
        x, unit, today = ("total_low", "total_high"), f"in all, {goal.weight_unit}", goal.price
    steps = Chart("steps", f"{goal.path}, {goal.verb}", *x, "quantity", unit, goal.unit, today)
    if len(rows) == 1:
        return (steps,)
    here = next((row for row in rows if row["today"]), None)
    today = here["quantity"] if here else seeker.quantity(seeker.plan.solution.x) * goal.scale
    unit = f"{goal.path} {goal.verb}, {goal.unit}"
    return steps, Chart("line", f"Best margin against {goal.path}", "quantity", "quantity", "margin", unit, money, today)


def _note(seeker: Seeker, sure: bool) -> str:
    goal, main = seeker.goal, seeker.main.replace("_", " ")
    text = (
        "A row is the best plan at every weight from and to which it reaches; margins are at today's prices, without the weight. "
    )
    if len(goal.rates) and goal.price is None:
        text += "Its prices differ from one another today: the weight comes on top of each. "
    elif goal.sign < 0 and goal.price is not None:
        text += "In all: today's price less the weight. "
    text += "Exact; between two rows lie mixes of their plans, each unit less at the weight where the second begins. "
    text += "What is emitted is what the plant's files count as emitted. " if goal.verb == "emitted" else ""
    text += f"Other prices are held, also those that lean on it. Of equal plans the one with most {main} is shown"
    return f"{text}." if sure else f"{text}, except where that could not be decided."


# ---------------------------------------------------------------------------------- words


def _sentences(seeker: Seeker, rows: list[Record], vertices: list[Vertex]) -> tuple[str, ...]:
    goal, first, last = seeker.goal, rows[0], rows[-1]
    least = [f"No plan has less than {_much(seeker, seeker.least * goal.scale)}."] if seeker.least > 0 else []
    if len(rows) == 1:
        way = f"from {_weight(goal, first['low'])} to {_weight(goal, first['high'])}"
        text = f"{goal.path}: {_much(seeker, first['quantity'])} {goal.verb} {way}, nothing between changes it."
        if first["quantity"]:
            return (text, *least)
        return f"{text} A premium, a weight below zero, shows what would bring it in.", *least
    fall = f"{goal.path}: falls from {_much(seeker, first['quantity'])} {goal.verb} at {_weight(goal, first['low'])} "
    fall += f"to {_much(seeker, last['quantity'])} at {_weight(goal, last['low'])}, "
    fall += "in 1 step" if len(rows) == 2 else f"in {len(rows) - 1} steps"
    if first["per_main"] is not None and last["per_main"] is not None:
        fall += f"; {amount(first['per_main'])} → {amount(last['per_main'])} {goal.own} per t of {seeker.main.replace('_', ' ')}"
    at = max(range(1, len(rows)), key=lambda k: rows[k - 1]["quantity"] - rows[k]["quantity"])
    step = f"Its largest step is at {_weight(goal, rows[at]['low'])}: {amount(rows[at - 1]['quantity'])} → "
    step += f"{_much(seeker, rows[at]['quantity'])}"
    whole = _changes(seeker.quantities(vertices[0].x), seeker.quantities(vertices[-1].x))
    sentences = [f"{fall}.", f"{step}; {rows[at]['changed']}." if rows[at]["changed"] else f"{step}."]
    sentences += [f"From first to last: {whole}."] if whole and len(rows) > 2 else []
    return (*sentences, *_throughput(seeker, rows), _price_of_it(seeker, first, last), *least)


def _throughput(seeker: Seeker, rows: list[Record]) -> list[str]:
    """How much of the fall is less made altogether, and where it is less per tonne made."""
    main, goal, first, last = seeker.main.replace("_", " "), seeker.goal, rows[0], rows[-1]
    parts = [row["throughput"] for row in rows[1:]]
    if goal.path == f"cuts.{seeker.main}" or None in parts:
        return []
    falls = [before["quantity"] - after["quantity"] for before, after in itertools.pairwise(rows)]
    share = sum(part * fall for part, fall in zip(parts, falls, strict=True)) / sum(falls)
    kind = f"About {percent(share)} of the fall is throughput, the rest less per tonne"
    if share >= MOSTLY:
        kind = "The fall is throughput rather than efficiency"
    elif share <= 1 - MOSTLY:
        kind = "The fall is less per tonne rather than throughput"
    text = f"{kind}: {main} made goes from {amount(first['main'])} to {amount(last['main'])} kt"
    if first["per_main"] and last["per_main"]:
        per = last["per_main"] / first["per_main"] - 1
        what = "the load" if goal.verb == "load" else f"what is {goal.verb}"
        text += f", {what} per t of it {'falls' if per <= 0 else 'rises'} by {percent(abs(per))}"
    large = [row for row, fall in zip(rows[1:], falls, strict=True) if fall >= LEAST_SHARE * sum(falls)]
    other = [row for row in large if row["throughput"] <= 1 - MOSTLY]
    if other and len(other) < len(large):
        text += f"; less per tonne at the {'step' if len(other) == 1 else 'steps'} at "
        text += ", ".join(_weight(goal, row["low"]) for row in other)
    return [f"{text}."]


def _price_of_it(seeker: Seeker, first: Record, last: Record) -> str:
    goal, currency = seeker.goal, seeker.plan.currency
    text = f"The margin goes from {money_words(first['margin'], currency)} to {money_words(last['margin'], currency)}"
    if len(goal.rates):
        word = "before its cost" if goal.sign > 0 else "without its revenue"
        ends = [money_words(row["margin_before"], currency) for row in (first, last)]
        text += f", {word} from {ends[0]} to {ends[1]}"
    if first["low"] < 0:
        return f"{text}."
    each = (first["margin"] - last["margin"]) / (first["quantity"] - last["quantity"]) * goal.scale / goal.factor
    on_top = " on top of today's price" if goal.sign > 0 and len(goal.rates) else ""
    return f"{text}: {worth(each)} {goal.weight_unit}{on_top} given up on average for what is saved."


def _much(seeker: Seeker, shown: float) -> str:
    return f"{amount(shown)} {seeker.goal.unit}"


def _weight(goal: Goal, weight: float) -> str:
    """A weight in a sentence: the price with it where there is one."""
    total = goal.in_all(weight)
    if total is not None:
        return f"{worth(_plain(total))} {goal.weight_unit} in all"
    return (
        f"{worth(_plain(weight))} {goal.weight_unit} on top"
        if len(goal.rates)
        else f"a weight of {worth(weight)} {goal.weight_unit}"
    )


def _plain(value: float) -> float:
    return 0.0 if abs(value) < 1e-9 else value


def _changes(before: Quantities, after: Quantities) -> str:
    """The largest changes of what is bought and sold from one plan to another, in words."""
    found = []
    for heat in (False, True):
        for word, amounts in (("bought", _bought), ("sold", _sold)):
            old, new = amounts(before, heat), amounts(after, heat)
            moved = sorted(old, key=lambda name: -abs(new[name] - old[name]))
            most = max((abs(new[name] - old[name]) for name in moved), default=0.0)
            named = [name for name in moved[:NAMED] if abs(new[name] - old[name]) > max(LEAST_SHARE * most, EQUAL * before.size)]
            unit = "TJ LHV" if heat else "kt"
            texts = [f"{name.replace('_', ' ')} {amount(old[name])} → {amount(new[name])} {unit}" for name in named]
            found += [f"{word}: {', '.join(texts)}"] if texts else []
        if found:  # heat sold is named where no tonnes move
            break
    return "; ".join(found)


def _bought(q: Quantities, heat: bool) -> dict[str, float]:
    """Feed, with its source where it has several → bought in all months, kt."""
    if heat:
        return {}
    feeds = [data.feed for data in q.case.sources.values()]
    names = {
        source: data.feed if feeds.count(data.feed) == 1 else f"{data.feed} {data.name}"
        for source, data in q.case.sources.items()
    }
    return {names[source]: sum(q.bought(source, month) for month in q.case.months) for source in names}


def _sold(q: Quantities, heat: bool) -> dict[str, float]:
    """Outlet → sold in all months, kt or TJ."""
    outlets = [outlet for outlet in q.case.sale_tiers if (q.case.outlets[outlet][0] in q.case.heat_cuts) == heat]
    return {outlet: sum(q.outlet(outlet, month) for month in q.case.months) for outlet in outlets}


# ---------------------------------------------------------------------------------- one point


def _point(seeker: Seeker, quantity: float) -> Answer:
    goal, plan = seeker.goal, seeker.plan
    wanted = quantity / goal.scale
    noise = EQUAL * seeker.size
    if not wanted >= seeker.least - noise:
        least = f"the least that any plan has is {_much(seeker, seeker.least * goal.scale)}"
        raise ValueError(f"at most {quantity:g} {goal.unit} {goal.verb}: no plan is possible; {least}")
    own = seeker.quantity(plan.solution.x)
    weight, x = (0.0, plan.solution.x) if wanted >= own else between(seeker, max(wanted, seeker.least))
    row = seeker.record(x)
    lost = plan.solution.objective - row["margin"]
    lost = lost if lost > SAME * seeker.money else 0.0
    last = weight / goal.factor if lost else 0.0
    saved = own - min(wanted, own)
    row |= {
        "limit": quantity,
        "given_up": lost,
        "last": last,
        "last_in_all": goal.in_all(last),
        "average": lost / saved / goal.factor if saved > noise else 0.0,
        "changed": _changes(plan.quantities, seeker.quantities(x)),
    }
    columns = (
        Column("limit", f"{goal.verb.capitalize()} at most", goal.unit, "quantity"),
        *_measures(seeker),
        Column("given_up", "Given up against the plan", f"k{plan.currency}", "money"),
        Column("last", "Cost of the last unit", goal.weight_unit, "price"),
        *((Column("last_in_all", "In all with today's price", goal.weight_unit, "price"),) if goal.price is not None else ()),
        Column("average", "Cost on average", goal.weight_unit, "price"),
        Column("changed", "Changed against the plan"),
    )
    note = "Exact: on the straight line of the frontier between the two plans beside it. Other prices and limits are held."
    table = Table("frontier_point", f"At most so much of {goal.path}", columns, [row], note)
    return Answer("frontier_point", f"Best margin with a limit on {goal.path}", (table,), _point_sentences(seeker, row), note)


def _point_sentences(seeker: Seeker, row: Record) -> tuple[str, ...]:
    goal, currency = seeker.goal, seeker.plan.currency
    text = f"{goal.path}: with at most {_much(seeker, row['limit'])} {goal.verb} the best margin is "
    text += money_words(row["margin"], currency)
    if not row["given_up"]:
        return (f"{text}: nothing is given up.",)
    last = f"the last {goal.own} saved costs {worth(row['last'])} {goal.weight_unit}"
    if goal.price is not None and goal.sign > 0:
        last += f" on top of today's price, {_weight(goal, row['last'])}"
    first = f"{text}, {money_words(row['given_up'], currency)} less than the plan; {last}, on average {worth(row['average'])}."
    return (first, f"Against the plan: {row['changed']}.") if row["changed"] else (first,)
