"""Live economics: a person types a price and sees the margin of that same plan, and whether it stays the best."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

from olefinlp.answers.price_ranges import PriceRange
from olefinlp.inputs.prices import AMOUNT, NUMBER, SHARE
from olefinlp.outputs.workbook_book import MAY, Book, cell, put, put_formula
from olefinlp.outputs.workbook_tables import LINE_HEIGHT, Grid

if TYPE_CHECKING:
    from olefinlp.answers.comparison import Comparison

LIVE, LIVE_DATA = "Live economics", "Live data"
CASES_BELOW = 4
"""Rows from the end of the data to the first case's name."""
TOP = 9
"""The header row of the table, from 0; what is typed stands below it."""
COLUMNS = (
    ("month", "Month", 9),
    ("item", "Price item", 40),
    ("case", "Price in the case", 12),
    ("yours", "Your price", 12),
    ("unit", "Unit", 15),
    ("leans", "Leans on", 32),
    ("low", "Plan stays best from", 13),
    ("high", "to", 13),
    ("flag", "Flag", 30),
    ("used", "Used, in the case", 12),
    ("now", "Used now", 12),
    ("unit_used", "Unit used", 12),
    ("quantity", "Quantity of the plan, thousands", 13),
    ("effect", "Effect", 12),
    ("way", "Share of the way to the end of the range", 15),
)
AT = {key: number for number, (key, _, _) in enumerate(COLUMNS)}
NUMBERS = ("case", "yours", "low", "high", "used", "now", "quantity", "effect", "way")
AFTER_NUMBERS = ("unit", "flag", "unit_used")
OUTSIDE = "outside: another plan earns more"
FARTHER = "farther than was looked"
INSIDE = "inside"
WORDS = (
    "Choose the case whose plan you hold, then type prices into the filled cells (blank: as in the case).",
    "The margin is that of the same plan at your prices: nothing is planned again. The flag says whether that plan",
    "is still the best: exactly for one price; for several, surely while the shares of the way sum to 100 % or less,",
    "since a plan that is the best at several sets of prices is the best between them. Beyond that plan again:",
    "add the prices as a case. No end: the plan stayed the best as far as was looked, from nothing to twice the price.",
)


@dataclass(frozen=True)
class _Row:
    """A price of all cases: how it is typed (the same in all of them), and what each case has there."""

    month: str
    item: str
    kind: str
    unit: str
    unit_used: str
    factor: float
    of: str
    times: float
    plus: float
    cases: dict[str, PriceRange]


def _rows(ranges: Mapping[str, Sequence[PriceRange]]) -> list[_Row]:
    """Prices in the order of the first case; one typed in different ways by case is typed as it is used."""
    found: dict[tuple[str, str], dict[str, PriceRange]] = {}
    for name, own in ranges.items():
        for one in own:
            found.setdefault((one.month, one.item), {})[name] = one
    return [_row(key, cases) for key, cases in found.items() if len(cases) == len(ranges)]


def _row(key: tuple[str, str], cases: dict[str, PriceRange]) -> _Row:
    ways = {(one.kind, one.unit, one.factor, one.of, one.times, one.plus) for one in cases.values()}
    first = next(iter(cases.values()))
    if len(ways) == 1:
        return _Row(*key, first.kind, first.unit, first.unit_used, first.factor, first.of, first.times, first.plus, cases)
    return _Row(*key, NUMBER, first.unit_used, first.unit_used, 1.0, "", 0.0, 0.0, {n: _as_used(one) for n, one in cases.items()})


def _as_used(one: PriceRange) -> PriceRange:
    """A price as if its number were typed in the unit used."""
    scale = (
        one.factor if one.kind == NUMBER else 1.0 if one.kind == AMOUNT or not one.typed else (one.value - one.plus) / one.typed
    )

    def used(number: float) -> float:
        return one.value + (number - one.typed) * scale

    ends = sorted((used(one.low), used(one.high)))
    looked = sorted((used(one.looked[0]), used(one.looked[1])))
    return replace(
        one,
        kind=NUMBER,
        typed=one.value,
        unit=one.unit_used,
        factor=1.0,
        of="",
        low=ends[0],
        high=ends[1],
        looked=(looked[0], looked[1]),
    )


def write_live(book: Book, sheet: Any, data: Any, comparison: Comparison, ranges: Mapping[str, Sequence[PriceRange]]) -> None:
    """The sheet people type into, and the sheet with what it looks up by case."""
    rows = _rows(ranges)
    names = list(ranges)
    grid = _write_data(book, data, rows, names)
    _put_names(book, data, names, comparison, grid)
    _head(book, sheet, comparison, names, grid)
    for at, (_, text, width) in enumerate(COLUMNS):
        words = (
            ["right"] if COLUMNS[at][0] in ("case", "yours", "low", "high", "used", "now", "quantity", "effect", "way") else []
        )
        put(sheet, TOP, at, text, book.style("header", *words))
        sheet.set_column(at, at, width)
    sheet.set_row(TOP, 4 * LINE_HEIGHT + 3)
    places = {(row.month, row.item): TOP + 1 + number for number, row in enumerate(rows)}
    for number, row in enumerate(rows):
        _line(book, sheet, row, number, places, grid, names)
    last = TOP + max(len(rows), 1)
    sheet.freeze_panes(TOP + 1, 2)
    sheet.autofilter(TOP, 0, last, len(COLUMNS) - 1)
    sheet.repeat_rows(TOP)
    flags = f"{cell(TOP + 1, AT['flag'])}:{cell(last, AT['flag'])}"
    for word in (OUTSIDE, FARTHER):
        sheet.conditional_format(flags, {"type": "cell", "criteria": "==", "value": f'"{word}"', "format": book.style("alarm")})
    sheet.protect("", MAY)


def _write_data(book: Book, sheet: Any, rows: list[_Row], names: list[str]) -> Grid:
    """Number, quantity and range by case, a block of columns each; plain values."""
    keys = ["month", "item", *(f"{what} {name}" for what in ("typed", "quantity", "low", "high", "open") for name in names)]
    grid = Grid(LIVE_DATA, 1, tuple(keys), len(rows))
    line = "What Live economics looks up: price as typed, quantity of the plan, range in which the plan stays the best. "
    line += "Open: it stayed the best as far as was looked, below (1), above (2) or on both sides (3)."
    put(sheet, 0, 0, line, book.style("note"))
    titles = {"typed": "Price", "quantity": "Quantity", "low": "Best from", "high": "Best to", "open": "Open"}
    for at, key in enumerate(keys):
        what, _, name = key.partition(" ")
        text = {"month": "Month", "item": "Price item"}.get(key) or f"{titles[what]}, {name}"
        put(sheet, 1, at, text, book.style("header", *(["right"] if at > 1 else [])))
    sheet.set_row(1, 3 * LINE_HEIGHT)
    number = book.style("General")
    for at, row in enumerate(rows, 2):
        put(sheet, at, 0, row.month)
        put(sheet, at, 1, row.item)
        for name in names:
            one = row.cases[name]
            low, high = max(one.low, one.looked[0]), min(one.high, one.looked[1])
            if one.low == -math.inf and one.high == math.inf and one.looked == (0.0, 0.0):
                low, high = -1e9, 1e9  # a price of nothing: no plan hangs on it
            opened = (1 if one.low == -math.inf else 0) + (2 if one.high == math.inf else 0)
            for what, value in (
                ("typed", one.typed),
                ("quantity", one.quantity),
                ("low", low),
                ("high", high),
                ("open", float(opened)),
            ):
                put(sheet, at, keys.index(f"{what} {name}"), value, number)
    sheet.set_column(0, 0, 9)
    sheet.set_column(1, 1, 40)
    sheet.set_column(2, len(keys) - 1, 12)
    sheet.freeze_panes(2, 2)
    sheet.repeat_rows(1)
    return grid


def _chosen() -> str:
    return cell(2, AT["case"])


def _pick(grid: Grid, number: int, what: str, names: list[str]) -> str:
    """The number of the chosen case: one of a block of columns."""
    return f"INDEX({grid.on(number, f'{what} {names[0]}')}:{grid.at(number, f'{what} {names[-1]}')},{cell(3, AT['case'])})"


def _head(book: Book, sheet: Any, comparison: Comparison, names: list[str], grid: Grid) -> None:
    """What to do, the case, its margin and what becomes of it."""
    put(sheet, 0, 0, "Live economics: the same plan at your prices", book.style("title"))
    sheet.set_row(0, 24)
    unit = f"k{comparison.scenario.currency}"
    at, first = AT["case"], comparison.plan(names[0])
    listed = ",".join(f'"{name}"' for name in names)
    put(sheet, 2, 1, "Plan made for the case", book.style("bold"))
    put(sheet, 2, at, names[0], book.style("input"))
    sheet.data_validation(
        2, at, 2, at, {"validate": "list", "source": names if len(listed) < 250 else f"={_names_range(names, grid)}"}
    )
    put(sheet, 3, 1, "its number")
    put_formula(sheet, 3, at, f"=MATCH({_chosen()},{_names_range(names, grid)},0)", 1.0, book.style("0"))
    rows = [TOP + 1, TOP + max(grid.rows, 1)]
    span = {key: f"{cell(rows[0], AT[key])}:{cell(rows[1], AT[key])}" for key in ("effect", "way", "yours", "flag")}
    margins = _names_range(names, grid, "margin")
    put(sheet, 4, 1, f"Its margin before fixed cost, {unit}")
    put_formula(sheet, 4, at, f"=INDEX({margins},{cell(3, at)})", first.margin / 1000, book.style("#,##0.0"))
    put(sheet, 5, 1, f"Its margin at your prices, {unit}", book.style("bold"))
    put_formula(sheet, 5, at, f"={cell(4, at)}+SUM({span['effect']})", first.margin / 1000, book.style("#,##0.0", "bold"))
    put(sheet, 6, 1, f"Change, {unit}")
    put_formula(sheet, 6, at, f"={cell(5, at)}-{cell(4, at)}", 0.0, book.style("#,##0.0"))
    put(sheet, 7, 1, "Is it still the best plan?", book.style("bold"))
    typed, way = f"COUNT({span['yours']})", f"SUM({span['way']})"
    outside = f'COUNTIF({span["flag"]},"{OUTSIDE}")'
    words = (
        f'=IF({typed}=0,"yes: the prices are those of the case",'
        f'IF({way}<=1.000000001,"yes: inside the range in which this plan stays the best",'
        f'IF(AND({typed}=1,{outside}=1),"no: outside its range, another plan earns more; plan again",'
        f'"not sure: the changes together go beyond what is proven; plan again")))'
    )
    put_formula(sheet, 7, at, words, "yes: the prices are those of the case", book.style("bold"))
    for row, line in enumerate(WORDS, 2):
        put(sheet, row, AT["leans"], line, book.style("note"))


def _names_range(names: list[str], grid: Grid, what: str = "month") -> str:
    """Names of the cases, or their margins, below the table of the data sheet."""
    first = grid.header + grid.rows + CASES_BELOW
    column = 0 if what == "month" else 2
    return f"'{LIVE_DATA}'!{cell(first, column)}:{cell(first + len(names) - 1, column)}"


def _put_names(book: Book, sheet: Any, names: list[str], comparison: Comparison, grid: Grid) -> None:
    """Names and margins of the cases, below the table of the data sheet."""
    first = grid.header + grid.rows + CASES_BELOW
    unit = f"k{comparison.scenario.currency}"
    put(sheet, first - 1, 0, "Case", book.style("header"))
    sheet.write_blank(first - 1, 1, None, book.style("header"))
    put(sheet, first - 1, 2, f"Margin, {unit}", book.style("header", "right"))
    for row, name in enumerate(names, first):
        put(sheet, row, 0, name)
        put(sheet, row, 2, comparison.plan(name).margin / 1000, book.style("#,##0.0"))


def _line(book: Book, sheet: Any, row: _Row, number: int, at: dict[tuple[str, str], int], grid: Grid, names: list[str]) -> None:
    """One price: typed, used, its effect, its flag."""
    here = TOP + 1 + number
    one = row.cases[names[0]]
    own = {key: cell(here, AT[key]).replace("$", "") for key in AT}
    prices = book.style("#,##0.0###")
    put(sheet, here, AT["month"], row.month)
    put(sheet, here, AT["item"], row.item)
    put(sheet, here, AT["unit"], row.unit, book.style("indent"))
    put(sheet, here, AT["leans"], _leans(row))
    put(sheet, here, AT["unit_used"], row.unit_used, book.style("indent"))
    sheet.write_blank(here, AT["yours"], None, book.style("#,##0.0###", "input"))
    money, plain = book.style("#,##0.0"), book.style("#,##0.00")
    put_formula(sheet, here, AT["case"], f"={_pick(grid, number, 'typed', names)}", one.typed, prices)
    low, high = _pick(grid, number, "low", names), _pick(grid, number, "high", names)
    opened = _pick(grid, number, "open", names)
    shown = _range_of(one)
    ends = book.style("#,##0.000")
    put_formula(sheet, here, AT["low"], f'=IF(OR({opened}=1,{opened}=3),"no end",{low})', shown[0], ends)
    put_formula(sheet, here, AT["high"], f'=IF({opened}>=2,"no end",{high})', shown[1], ends)
    new = f"IF(ISNUMBER({own['yours']}),{own['yours']},{own['case']})"
    put_formula(sheet, here, AT["used"], f"={_used(row, own['case'], at, 'used')}", one.value, plain)
    put_formula(sheet, here, AT["now"], f"={_used(row, new, at, 'now')}", one.value, plain)
    put_formula(sheet, here, AT["quantity"], f"={_pick(grid, number, 'quantity', names)}", one.quantity, book.style("#,##0.00"))
    put_formula(sheet, here, AT["effect"], f"={own['quantity']}*({own['now']}-{own['used']})", 0.0, money)
    y, c = own["yours"], own["case"]
    way = f"IF({y}>{c},IF({high}>{c},({y}-{c})/({high}-{c}),9),IF({y}<{c},IF({c}>{low},({c}-{y})/({c}-{low}),9),0))"
    if row.kind == SHARE and (row.month, row.of) in at:
        base = at[row.month, row.of]
        moved = f"{cell(base, AT['now'])}<>{cell(base, AT['used'])}".replace("$", "")
        way = f"IF(AND({y}<>{c},{moved}),9,{way})"  # a share and what it is a share of: their product is not a straight way
    put_formula(sheet, here, AT["way"], f"=IF(ISNUMBER({y}),{way},0)", 0.0, book.style("0%"))
    far = f'IF(OR(AND({y}>{c},{opened}>=2),AND({y}<{c},OR({opened}=1,{opened}=3))),"{FARTHER}","{OUTSIDE}")'
    inside = f"AND({y}>={low}-0.000000001*ABS({low}),{y}<={high}+0.000000001*ABS({high}))"
    flag = f'=IF({y}="","",IF(ISNUMBER({y}),IF({inside},"{INSIDE}",{far}),"not a number"))'
    put_formula(sheet, here, AT["flag"], flag, "", book.style("indent"))


def _range_of(one: PriceRange) -> tuple[float | str, float | str]:
    return ("no end" if one.low == -math.inf else one.low), ("no end" if one.high == math.inf else one.high)


def _leans(row: _Row) -> str:
    """In words how a relative price is made."""
    if row.kind == SHARE:
        return f"this share of {row.of}"
    return f"{row.of} plus this" if row.kind == AMOUNT else ""


def _used(row: _Row, typed: str, at: dict[tuple[str, str], int], key: str) -> str:
    """The effective price from what is typed, on the column of today's or of your prices."""
    if row.kind == NUMBER:
        return f"{typed}*{row.factor!r}"
    base = cell(at[row.month, row.of], AT[key]).replace("$", "")
    if row.kind == SHARE:
        return f"{typed}*{base}" + (f"+{row.plus!r}" if row.plus else "")
    return f"{base}*{row.times!r}+{typed}" if row.times != 1.0 else f"{base}+{typed}"
