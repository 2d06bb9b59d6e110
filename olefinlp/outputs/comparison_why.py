"""Why each case earns something else than the first: prices on the first plan, re-optimising, limits; all as formulas."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

from olefinlp.answers.bridge import Bridge
from olefinlp.outputs.workbook_book import Book, cell, put, put_formula
from olefinlp.outputs.workbook_charts import FONT, GRID, finish
from olefinlp.outputs.workbook_tables import LINE_HEIGHT, Grid, number_format

if TYPE_CHECKING:
    from olefinlp.answers.case_tables import CaseTable
    from olefinlp.answers.comparison import Comparison

WHY = "Why different"
KINDS = {
    "feeds": "feed prices",
    "side_streams": "side stream prices",
    "outlets": "product prices",
    "contents": "content values",
    "utilities": "energy and CO2 prices",
    "variable_costs": "variable cost rates",
    "stocks": "stock holding cost",
}
"""First part of a price item → how its effect is called; any other keeps its name."""
LABELS = 5
"""Columns before those of the cases: month, kind, item, quantity, unit."""
FALL, RISE, LEVEL = "#B4581A", "#5E93B5", "#12344D"
CHART_ROWS = 18


@dataclass
class _Why:
    """The sheet while it is written; `row` is the next free one."""

    book: Book
    sheet: Any
    comparison: Comparison
    prices: Grid
    bridges: dict[str, Bridge]
    row: int = 0
    rows: dict[str, int] = field(default_factory=dict)
    """What a row of the account holds → the row."""

    @property
    def first(self) -> str:
        return self.comparison.first

    @property
    def names(self) -> list[str]:
        return list(self.bridges)

    def column(self, name: str) -> int:
        return LABELS + self.names.index(name)

    def at(self, what: str, name: str) -> str:
        """The cell of a row of the account, relative."""
        return cell(self.rows[what], self.column(name)).replace("$", "")


def write_why(book: Book, sheet: Any, comparison: Comparison, prices: Grid, table: CaseTable) -> None:
    """The bridge from the first case to every other: account, waterfall of a chosen case, effect of every price."""
    first, bridges = comparison.first, comparison.bridges
    why = _Why(book, sheet, comparison, prices, bridges)
    line = f"From {first} to each case: its prices on the plan of {first}, then what re-optimising adds, then other limits."
    put(sheet, 0, 0, line, book.style("note"))
    effects = list(next(iter(bridges.values())).effects)
    kinds = [_kind(effect.item) for effect in effects]
    why.row = 2 + 2 * len(dict.fromkeys(kinds)) + 16 + CHART_ROWS
    start = _effects(why, table, kinds)
    _account(why, list(dict.fromkeys(kinds)), (start, start + len(effects) - 1))
    _waterfall(why, list(dict.fromkeys(kinds)))
    sheet.set_h_pagebreaks([why.row, start - 2])
    sheet.freeze_panes(2, 3)
    sheet.set_column(0, 0, 9)
    sheet.set_column(1, 1, 21)
    sheet.set_column(2, 2, 36)
    sheet.set_column(3, LABELS + len(bridges), 13)


def _kind(item: str) -> str:
    head = item.split(".")[0]
    return KINDS.get(head, head.replace("_", " "))


def _header(why: _Why, row: int, texts: list[str]) -> None:
    for at, text in enumerate(texts):
        side = ["right"] if at == 3 or at >= LABELS else ["indent"] if text == "Unit" else []
        put(why.sheet, row, at, text, why.book.style("header", *side))
        if not text:
            why.sheet.write_blank(row, at, None, why.book.style("header"))
    why.sheet.set_row(row, 3 * LINE_HEIGHT + 3)


def _effects(why: _Why, table: CaseTable, kinds: list[str]) -> int:
    """quantity of the first plan × change of the price, one row a price; gives the first row."""
    at = {(line.month, line.item): number for number, line in enumerate(table.lines)}
    put(
        why.sheet,
        why.row,
        0,
        "Effect of every price on the plan of the first case: quantity × change of the price",
        why.book.style("block"),
    )
    unit = f"k{why.comparison.scenario.currency}"
    _header(
        why,
        why.row + 1,
        ["Month", "Kind", "Price item", f"Quantity in {why.first}", "Unit", *(f"{name}, {unit}" for name in why.names)],
    )
    start = why.row + 2
    bridges = list(why.bridges.values())
    quantities = why.book.style("#,##0.00", "top")
    for number, effect in enumerate(bridges[0].effects):
        row = start + number
        put(why.sheet, row, 0, effect.month)
        put(why.sheet, row, 1, kinds[number])
        put(why.sheet, row, 2, effect.item)
        put(why.sheet, row, 3, effect.quantity, quantities)
        put(why.sheet, row, 4, effect.unit, why.book.style("indent"))
        price = at[effect.month, effect.item]
        for name, found in why.bridges.items():
            own = next(e for e in found.effects if (e.item, e.month) == (effect.item, effect.month))
            cells = f"({why.prices.on(price, name)}-{why.prices.on(price, why.first)})"
            put_formula(why.sheet, row, why.column(name), f"=$D{row + 1}*{cells}", own.effect, why.book.style("#,##0.0"))
    return start


def _account(why: _Why, kinds: list[str], rows: tuple[int, int]) -> None:
    """Margin of the first, effects, margin of the case; what is left over is zero."""
    unit = f"k{why.comparison.scenario.currency}"
    _header(why, 1, ["", "", "", "", "Unit", *why.names])
    why.row = 2
    span = f"$B${rows[0] + 1}:$B${rows[1] + 1}"

    def line(what: str, formulas: dict[str, str | float], values: dict[str, float], *words: str) -> None:
        why.rows[what] = why.row
        put(why.sheet, why.row, 0, what, why.book.style(*words))
        for blank in range(1, LABELS - 1):
            if words:
                why.sheet.write_blank(why.row, blank, None, why.book.style(*words))
        put(why.sheet, why.row, 4, unit, why.book.style("indent", *words))
        style = why.book.style(number_format("money", list(values.values())), *words)
        for name, formula in formulas.items():
            if isinstance(formula, str):
                put_formula(why.sheet, why.row, why.column(name), formula, values[name], style)
            else:
                put(why.sheet, why.row, why.column(name), formula, style)
        why.row += 1

    b = why.bridges
    line(f"margin of {why.first}", {n: f.old for n, f in b.items()}, {n: f.old for n, f in b.items()}, "sum")
    for kind in kinds:
        formulas: dict[str, str | float] = {}
        for name in b:
            column = cell(0, why.column(name)).replace("$", "")[:-1]
            formulas[name] = f"=SUMPRODUCT(({span}=$A{why.row + 1})*{column}${rows[0] + 1}:{column}${rows[1] + 1})"
        line(kind, formulas, {n: sum(e.effect for e in f.effects if _kind(e.item) == kind) for n, f in b.items()})
    top, last = f"margin of {why.first}", kinds[-1]
    upto = {n: f"=SUM({why.at(top, n)}:{why.at(last, n)})" for n in b}
    line(f"the plan of {why.first} at the other prices", {**upto}, {n: f.old + f.price_effect for n, f in b.items()}, "sum")
    kept = f"the plan of {why.first} at the other prices"
    why.rows["best"] = why.row + 3
    gains: dict[str, str | float] = {n: f"={why.at('best', n)}-{why.at(kept, n)}" for n in b}
    line("gain from re-optimising", gains, {n: f.gain for n, f in b.items()})
    why.rows["own"] = why.row + 1
    limits: dict[str, str | float] = {n: f"={why.at('own', n)}-{why.at('best', n)}" for n in b}
    line("changed limits and availability", limits, {n: f.limits_effect for n, f in b.items()})
    line("margin of the case", {n: f.new for n, f in b.items()}, {n: f.new for n, f in b.items()}, "sum")
    line(
        f"solved: best at these prices, limits of {why.first}",
        {n: f.middle for n, f in b.items()},
        {n: f.middle for n, f in b.items()},
    )
    why.rows[f"solved: best at these prices, limits of {why.first}"] = why.rows["best"]
    rest: dict[str, str | float] = {}
    for n in b:
        parts = "+".join(why.at(what, n) for what in (kept, "gain from re-optimising", "changed limits and availability"))
        rest[n] = f"=ROUND({why.at('margin of the case', n)}-({parts}),6)"
    line("left over", rest, dict.fromkeys(b, 0.0))


def _waterfall(why: _Why, kinds: list[str]) -> None:
    """A chart of one case, chosen in a cell."""
    row = why.row + 1
    put(why.sheet, row, 0, "Waterfall of", why.book.style("block"))
    put(why.sheet, row, 1, why.names[0], why.book.style("input"))
    names = f"{cell(1, LABELS)}:{cell(1, LABELS + len(why.names) - 1)}"
    why.sheet.data_validation(row, 1, row, 1, {"validate": "list", "source": f"={names}"})
    chosen = cell(row, 1)
    steps = [f"margin of {why.first}", *kinds, "gain from re-optimising", "changed limits and availability", "margin of the case"]
    table = LABELS - 3
    for at, text in enumerate(("Step", "Effect", "Level after", "Hidden base", "Rise", "Fall", "Margin")):
        put(why.sheet, row, table + at, text, why.book.style("header", *(["right"] if at else [])))
    first = why.bridges[why.names[0]]
    values = [
        first.old,
        *(sum(e.effect for e in first.effects if _kind(e.item) == kind) for kind in kinds),
        first.gain,
        first.limits_effect,
        first.new,
    ]
    level = 0.0
    floor = _floor(why)
    put(why.sheet, row - 1, table, "axis begins at", why.book.style("note"))
    put(why.sheet, row - 1, table + 1, floor, why.book.style("#,##0"))
    start = cell(row - 1, table + 1)
    for number, (step, value) in enumerate(zip(steps, values, strict=True)):
        here = row + 1 + number
        effect, after = (cell(here, table + at).replace("$", "") for at in (1, 2))
        before = cell(here - 1, table + 2).replace("$", "")
        total = number in (0, len(steps) - 1)
        put(why.sheet, here, table, step if number < len(steps) - 1 else "margin of the case")
        line = f"{cell(why.rows[step], LABELS)}:{cell(why.rows[step], LABELS + len(why.names) - 1)}"
        put_formula(why.sheet, here, table + 1, f"=INDEX({line},MATCH({chosen},{names},0))", value, why.book.style("#,##0.0"))
        old = level
        level = value if total else level + value
        put_formula(
            why.sheet, here, table + 2, f"={effect}" if total else f"={before}+{effect}", level, why.book.style("#,##0.0")
        )
        numbers = why.book.style("#,##0.0")
        put_formula(
            why.sheet,
            here,
            table + 3,
            "=0" if total else f"=MAX(0,MIN({before},{after})-{start})",
            0.0 if total else max(0.0, min(old, level) - floor),
            numbers,
        )
        put_formula(
            why.sheet, here, table + 4, "=0" if total else f"=MAX(0,{effect})", 0.0 if total else max(0.0, value), numbers
        )
        put_formula(
            why.sheet, here, table + 5, "=0" if total else f"=MAX(0,-{effect})", 0.0 if total else max(0.0, -value), numbers
        )
        put_formula(why.sheet, here, table + 6, f"={after}-{start}" if total else "=0", level - floor if total else 0.0, numbers)
    _chart(why, row, table, len(steps), floor)


def _floor(why: _Why) -> float:
    """A round level below all margins, from which the bars of the chart are drawn."""
    levels = [number for found in why.bridges.values() for number in _levels(found)]
    low, high = min(levels), max(levels)
    wanted = low - 0.5 * (high - low)
    if wanted <= 0 < low:
        return 0.0
    size = 10 ** max(len(f"{abs(wanted):.0f}") - 2, 0)
    return float(wanted // size * size)


def _levels(found: Bridge) -> list[float]:
    """Every level that a waterfall of this bridge may pass, by kinds of price in any order of the sheet."""
    levels, level = [found.old], found.old
    for kind in dict.fromkeys(_kind(e.item) for e in found.effects):
        level += sum(e.effect for e in found.effects if _kind(e.item) == kind)
        levels.append(level)
    return [*levels, found.repriced, found.middle, found.new]


def _chart(why: _Why, row: int, table: int, count: int, floor: float) -> None:
    chart = why.book.workbook.add_chart({"type": "column", "subtype": "stacked"})
    categories = [WHY, row + 1, table, row + count, table]
    for at, colour in ((3, None), (6, LEVEL), (4, RISE), (5, FALL)):
        fill = {"fill": {"none": True}, "border": {"none": True}} if colour is None else {"fill": {"color": colour}}
        chart.add_series(
            {
                "name": [WHY, row, table + at],
                "categories": categories,
                "values": [WHY, row + 1, table + at, row + count, table + at],
                "gap": 40,
                **fill,
            }
        )
    unit = f"k{why.comparison.scenario.currency}"
    chart.set_x_axis({"num_font": FONT, "line": {"color": GRID}, "major_tick_mark": "none", "label_position": "low"})
    words = f"{unit} above {floor:,.0f}" if floor else unit
    chart.set_y_axis(
        {
            "name": words,
            "name_font": FONT | {"bold": False},
            "num_font": FONT,
            "num_format": "#,##0",
            "major_gridlines": {"visible": True, "line": {"color": GRID}},
        }
    )
    finish(chart, f"From {why.first} to the case chosen: prices, re-optimising, limits", legend=True)
    chart.set_legend({"position": "bottom", "font": FONT, "delete_series": [0]})
    chart.set_size({"width": 900, "height": CHART_ROWS * 18})
    why.sheet.insert_chart(row + count + 2, 0, chart)
