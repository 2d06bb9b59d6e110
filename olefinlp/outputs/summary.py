"""The printed summary: what a planner needs to see first, in plain words."""

from __future__ import annotations

from collections.abc import Iterable

from olefinlp.answers.answer import Answer
from olefinlp.answers.audit import CAUTIONS
from olefinlp.answers.limits import binding
from olefinlp.answers.plan import Plan
from olefinlp.answers.tables import Record
from olefinlp.inputs.findings import Finding
from olefinlp.outputs.text import INDENT, aligned, names, number, significant

MOST_SENTENCES = 12
"""More sentences of one answer than these stand only in the workbook."""

MANY_MONTHS = 7
"""From so many periods on, the printed tables show totals only."""


def summary(plan: Plan, answers: tuple[Answer, ...] = ()) -> str:
    """The summary of a plan, with the sentences of its answers if there are any, ready to print.

    >>> from olefinlp import make_plan, read_scenario
    >>> print(summary(make_plan(read_scenario("scenarios/thermal_cracker.yaml"))).splitlines()[0])
    Thermal cracker of the textbook, one hour
    """
    blocks = [_head(plan), _margin(plan), _feeds(plan), _furnaces(plan), _slate(plan), _limits(plan)]
    blocks += [_answer(answer) for answer in answers]
    blocks += [_warnings(plan.warnings), _proof(plan), _cautions()]
    return "\n\n".join("\n".join(block) for block in blocks if block)


def _months(plan: Plan) -> tuple[str, ...]:
    return plan.quantities.case.months


def _head(plan: Plan) -> list[str]:
    case = plan.quantities.case
    hours = sum(p.hours for p in case.periods)
    span = case.months[0] if len(case.months) == 1 else f"{case.months[0]} to {case.months[-1]}"
    price_case = plan.scenario.price_case
    parts = [span, f"{hours:g} h", f"price case {price_case}" if price_case else "prices of the scenario", "proven optimum"]
    return [plan.scenario.title, plan.scenario.plant.name, " · ".join(parts)]


def _margin(plan: Plan) -> list[str]:
    """Margin per month and in total, per tonne and per lb of the main product."""
    months, main = _months(plan), names(plan.scenario.plant.file.main_product)
    cents = {"USD": "USc"}.get(plan.currency)
    # A small plant's money would vanish in thousands: the textbook's hour is 3,684.20 USD.
    unit, size = (plan.currency, 1.0) if abs(plan.margin) < 1e6 else (f"k{plan.currency}", 1e-3)
    decimals = 2 if size == 1.0 else 1
    columns: list[str | None] = [*months, None] if 1 < len(months) < MANY_MONTHS else [None]
    head = ["Margin", *[m or ("total" if len(months) > 1 else "") for m in columns], ""]
    lines = [head]

    def line(words: str, values: Iterable[float | None], unit: str, decimals: int) -> None:
        lines.append([words, *[number(v, decimals) for v in values], unit])

    def money(m: str | None) -> float:
        return plan.margin if m is None else plan.margin_of(m)

    line("before fixed cost", [money(m) * size for m in columns], unit, decimals)
    if plan.fixed_cost():
        line("fixed cost", [-plan.fixed_cost(m) * size for m in columns], unit, decimals)
        line("after fixed cost", [(money(m) - plan.fixed_cost(m)) * size for m in columns], unit, decimals)
    made = [plan.main_product(m) for m in columns]
    if max(made, default=0.0) >= 1000:
        line(f"{main} made", [m / 1000 for m in made], "kt", 1)
    else:
        line(f"{main} made", made, "t", 1)
    if any(made):
        line("margin per tonne", [plan.margin_per_tonne(m) for m in columns], f"{plan.currency}/t {main}", 1)
    if any(made) and cents:
        line("", [plan.margin_per_lb(m) for m in columns], f"{cents}/lb {main}", 2)
    text = [row.rstrip() for row in _left_unit(lines)]
    if len(months) > 1 and plan.quantities.case.stocks:
        text.append(f"{INDENT}months differ as stocks are filled and drawn: only the total is optimised")
    return text


def _left_unit(rows: list[list[str]]) -> list[str]:
    """As `aligned`, with the last column (units) to the left and the first line not indented."""
    widths = [max(len(row[i]) for row in rows) for i in range(len(rows[0]))]
    lines = []
    for position, row in enumerate(rows):
        cells = [
            cell.ljust(width) if i in (0, len(row) - 1) else cell.rjust(width)
            for i, (cell, width) in enumerate(zip(row, widths, strict=True))
        ]
        lines.append(INDENT + "  ".join(cells) if position else "  ".join([cells[0] + INDENT, *cells[1:]]))
    return lines


def _amount(plan: Plan) -> tuple[str, float]:
    """kt, or t where a plant moves less than a kilotonne in all."""
    largest = max((row["bought"] for row in plan.feeds.rows), default=0.0)
    return ("kt", 1.0) if largest >= 1 or not largest else ("t", 1000.0)


def _totals(rows: Iterable[Record], keys: tuple[str, ...], value: str) -> dict[tuple[str, ...], dict[str, float]]:
    """Sums by key and month."""
    result: dict[tuple[str, ...], dict[str, float]] = {}
    for row in rows:
        key = tuple(str(row[k]) for k in keys)
        by_month = result.setdefault(key, {})
        by_month[row["month"]] = by_month.get(row["month"], 0.0) + row[value]
    return result


def _by_month(plan: Plan, title: str, sums: dict[tuple[str, ...], dict[str, float]], size: float = 1.0) -> list[str]:
    """A table with one column a month and the total."""
    months = _months(plan)
    shown = months if len(months) < MANY_MONTHS else ()
    rows = [[title, *shown, "total"]]
    for key, values in sums.items():
        if any(values.values()):
            cells = [number(values.get(m, 0.0) * size) for m in shown]
            rows.append([INDENT + names(", ".join(k for k in key if k)), *cells, number(sum(values.values()) * size)])
    return [line.removeprefix(INDENT) for line in aligned(rows)]


def _feeds(plan: Plan) -> list[str]:
    unit, size = _amount(plan)
    if len(_months(plan)) > 1:
        return _by_month(plan, f"Feeds bought, {unit}", _totals(plan.feeds.rows, ("feed", "source"), "bought"), size)
    money = f"{plan.currency}/t"
    rows = [["Feeds bought", unit, "price", money, "worth of 1 t more", ""]]
    for row in plan.feeds.rows:
        if row["bought"]:
            rows.append([INDENT + _source(row), number(row["bought"] * size), row["price_written"], number(row["price"])])
            rows[-1] += [number(row["worth"]), _at(row)]
    lines = [line.removeprefix(INDENT) for line in _state_left(rows)]
    idle = [
        f"{_source(row)} {number(row['price'])} (worth {number(row['worth'])})" for row in plan.feeds.rows if not row["bought"]
    ]
    return [*lines, f"{INDENT}not bought, {money}: {'; '.join(idle)}"] if idle else lines


def _source(row: Record) -> str:
    step = f" step {row['step']}" if row["steps"] > 1 else ""
    quality = f" ({row['quality']})" if row["quality"] else ""
    return f"{names(row['feed'])}, {names(row['source'])}" + step + quality


def _at(row: Record) -> str:
    """Whether a purchase stands at its maximum, its minimum or its take-or-pay."""
    if row["maximum"] is not None and row["bought"] >= row["maximum"] * (1 - 1e-7):
        return "at maximum"
    if row["minimum"] is not None and row["bought"] <= row["minimum"] * (1 + 1e-7):
        return "at minimum"
    if row["shortfall"]:
        return f"{number(row['shortfall'])} kt paid, not taken"
    if row["take_or_pay"] is not None and row["bought"] <= row["take_or_pay"] * (1 + 1e-7):
        return "at take-or-pay"
    return ""


def _state_left(rows: list[list[str]]) -> list[str]:
    """As `aligned`, the last column to the left."""
    lines = aligned([row[:-1] for row in rows])
    width = max(len(line) for line in lines)
    return [f"{line.ljust(width)}  {row[-1]}".rstrip() for line, row in zip(lines, rows, strict=True)]


def _furnaces(plan: Plan) -> list[str]:
    unit, size = _amount(plan)
    if len(_months(plan)) > 1:
        case = plan.quantities.case
        order = {(case.mode_group[m], case.mode_feed[m], case.mode_severity[m]): i for i, m in enumerate(case.modes)}
        used = sorted(plan.furnaces.rows, key=lambda row: order[row["group"], row["feed"], row["severity"]])
        sums = _totals(used, ("group", "feed", "severity"), "charged")
        return _by_month(plan, f"Charged, {unit}", sums, size)
    rows = [["Furnaces", unit, "hours", "furnaces busy", "decokes"]]
    for group in plan.furnace_groups.rows:
        own = plan.furnaces.where(group=group["group"])
        hours = number(group["used"], 0) + (f" of {number(group['available'], 0)}" if group["available"] else "")
        busy = sum(row["furnaces"] for row in own)
        of = f" of {group['furnaces']}" if group["furnaces"] is not None else ""
        limited = group["available"] is not None
        total = [number(sum(row["charged"] for row in own) * size), hours if limited else "no limit"]
        rows.append([INDENT + names(group["group"]), *total, f"{number(busy, 2)}{of}" if limited else "", ""])
        for row in own:
            words = f"{2 * INDENT}{names(row['feed'])}, {row['severity']}" + (f" ({row['quality']})" if row["quality"] else "")
            cells = [number(row["hours"], 0), number(row["furnaces"], 2), number(row["decokes"], 1)] if limited else ["", "", ""]
            rows.append([words, number(row["charged"] * size), *cells])
    return [line.removeprefix(INDENT) for line in aligned(rows)]


def _slate(plan: Plan) -> list[str]:
    unit, size = _amount(plan)
    if len(_months(plan)) > 1:
        lines = []
        for of, factor, words in (("kt", size, unit), ("TJ LHV", 1.0, "TJ LHV")):
            sums = _totals(plan.slate.where(unit=of), ("outlet",), "quantity")
            if any(any(values.values()) for values in sums.values()):
                lines += _by_month(plan, f"Products sold, {words}", sums, factor)
        return lines
    rows = [["Products sold", "", "", "price", "", "revenue", ""]]
    money, scale = ("k" + plan.currency, 1.0) if abs(plan.margin) >= 1e6 else (plan.currency, 1000.0)
    for row in plan.slate.rows:
        if row["quantity"]:
            heat = row["unit"] != "kt"
            amount = number(row["quantity"] * (1 if heat else size))
            step = f", step {row['step']}" if row["steps"] > 1 else ""
            at = "at maximum" if row["maximum"] and row["quantity"] >= row["maximum"] * (1 - 1e-7) else ""
            at = "at minimum" if row["minimum"] and row["quantity"] <= row["minimum"] * (1 + 1e-7) else at
            cells = [amount, row["unit"] if heat else unit, number(row["price"]), row["price_unit"]]
            rows.append([INDENT + names(row["outlet"]) + step, *cells, f"{number(row['revenue'] * scale)} {money}", at])
    return [line.removeprefix(INDENT) for line in _state_left(rows)]


def _limits(plan: Plan) -> list[str]:
    """Limits that bind and are worth something."""
    found = binding(plan.limits)
    if not found:
        return ["Limits that bind", f"{INDENT}none is worth anything"]
    lines = _limits_by_month(plan, found) if len(_months(plan)) > 1 else _limits_of_one(found)
    return [*lines, f"{INDENT}each worth holds for the next unit only; worths do not add"]


def _limits_of_one(found: list[Record]) -> list[str]:
    rows = [["Limits that bind", "", "relaxing it by one unit is worth", ""]]
    for row in found:
        amount = row["minimum"] if row["state"] == "at minimum" else row["maximum"]
        side = {"at minimum": "at least", "at maximum": "at most"}.get(row["state"], "fixed at")
        text = f"{side} {significant(amount)} {row['unit']}" if row["family"] not in ("ratio", "specification") else ""
        rows.append([INDENT + names(row["limit"]), text, significant(row["worth"]), row["worth_unit"]])
    widths = [max(len(row[i]) for row in rows) for i in range(4)]
    return [f"{r[0]:<{widths[0]}}  {r[1]:<{widths[1]}}  {r[2]:>{widths[2]}} {r[3]}".rstrip() for r in rows]


def _limits_by_month(plan: Plan, found: list[Record]) -> list[str]:
    """One line a limit, one column a month: the worth where it binds."""
    months = _months(plan)
    if len(months) >= MANY_MONTHS:
        counts: dict[str, int] = {}
        for row in found:
            counts[row["limit"]] = counts.get(row["limit"], 0) + 1
        rows = [["Limits that bind", "periods"], *[[INDENT + names(limit), str(n)] for limit, n in counts.items()]]
        return [line.removeprefix(INDENT) for line in aligned(rows)]
    worth: dict[tuple[str, str, str], dict[str, float]] = {}
    for row in found:
        side = "min" if row["state"] == "at minimum" else "max"
        worth.setdefault((row["limit"], side, row["worth_unit"]), {})[row["month"]] = row["worth"]
    rows = [["Limits that bind: worth of relaxing by one unit", *months, ""]]
    for (limit, side, unit), values in worth.items():
        rows.append([f"{INDENT}{names(limit)} ({side})", *[significant(values.get(m)) for m in months], unit])
    return [line.removeprefix(INDENT) for line in _state_left(rows)]


def _answer(answer: Answer) -> list[str]:
    """An answer's sentences; of many the first, and how many more stand in the workbook."""
    shown = [INDENT + sentence for sentence in answer.sentences[:MOST_SENTENCES]]
    more = len(answer.sentences) - len(shown)
    return [answer.title, *shown, *([f"{INDENT}and {more} more in the workbook"] if more > 0 else [])]


def _warnings(warnings: tuple[Finding, ...]) -> list[str]:
    if not warnings:
        return []
    head = "1 warning" if len(warnings) == 1 else f"{len(warnings)} warnings"
    return [head, *[INDENT + line for w in warnings for line in str(w).splitlines()]]


def _proof(plan: Plan) -> list[str]:
    c = plan.certificate
    rows = [row for row in plan.closures.rows if row["relative"] is not None]
    mass = max((row["relative"] for row in rows if not row["balance"].endswith("in cracking")), default=0.0)
    elements = [row for row in rows if row["balance"].endswith("in cracking")]
    lines = [f"Proof: duality gap {c.gap:.0e}, residuals up to {max(c.primal, c.dual, c.complementarity):.0e}, "]
    lines[0] += f"balances from the tables up to {mass:.0e} (relative)"
    for element in ("carbon", "hydrogen"):
        worst = max((row["relative"] for row in elements if row["balance"].startswith(element)), default=None)
        if worst is not None:
            lines.append(f"{INDENT}{element} in cracking closes to {worst:.1e} (allowed 1e-03)")
    left_out = [row for row in plan.closures.rows if row["relative"] is None]
    lines += [f"{INDENT}{row['balance']}: {row['closes']}" for row in left_out]
    return lines


def _cautions() -> list[str]:
    return [CAUTIONS[0], CAUTIONS[1], CAUTIONS[2]]
