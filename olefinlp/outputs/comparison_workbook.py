"""The workbook of a comparison: one column a case in the same row order, differences and money as formulas."""

from __future__ import annotations

import os
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from olefinlp.answers.case_tables import (
    MINUS,
    CaseTable,
    break_even_lines,
    feed_lines,
    flat_lines,
    furnace_lines,
    limit_lines,
    load_lines,
    money_of_cases,
    price_lines,
    slate_lines,
)
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.outputs.comparison_live import LIVE, LIVE_DATA, write_live
from olefinlp.outputs.comparison_page import COMPARISON, write_comparison_page
from olefinlp.outputs.comparison_why import WHY, write_why
from olefinlp.outputs.files import write_bytes
from olefinlp.outputs.workbook import answer_tables
from olefinlp.outputs.workbook_book import Book
from olefinlp.outputs.workbook_tables import Grid, grid_of, write_table

if TYPE_CHECKING:
    from olefinlp.answers.case_answers import CaseAnswers
    from olefinlp.answers.comparison import Comparison

PRICES, MONEY, NOTES, FLAT = "Prices used", "Money", "Notes", "Flat list"
BREAK_EVENS = "Break-even prices"
SHORT_TITLES = {"buying": "Buying plan", "buying_margins": "Ways to buy", "value_of_information": "Value of knowing"}
LONGEST_TITLE = 31
CHANGED = 0.01
"""A difference above this share of the number itself is coloured."""


@dataclass(frozen=True)
class MoneyOfComparison:
    """Where the amounts stand: the grid of the sheet, the keys of the amounts by case."""

    grid: Grid
    amounts: dict[str, str]


def write_comparison(comparison: Comparison, path: str | os.PathLike[str], answers: CaseAnswers | None = None) -> Path:
    """Write a comparison as a workbook, whole or not at all; the same comparison gives the same bytes.

    Raises `OutputError` when the file cannot be written, `ValueError` when no case has a plan.
    """
    return write_bytes(path, comparison_bytes(comparison, answers))


def comparison_bytes(comparison: Comparison, answers: CaseAnswers | None = None) -> bytes:
    """The whole file in memory."""
    if not comparison.plans:
        raise ValueError("no case has a plan: there is nothing to compare")
    first = next(iter(comparison.plans.values()))
    book = Book(first.scenario, f"{comparison.scenario.title}: {len(comparison.cases)} cases")
    tables = case_tables(comparison, answers)
    around = answer_tables(answers.around) if answers else []
    ranges = answers.ranges if answers else {}
    names = _sheet_names(tables, around, bool(ranges), len(comparison.plans) > 1)
    sheets = {name: book.sheet(name) for name in names}
    grids = {name: write_case_table(book, sheets[name], name, table, comparison.names) for name, table in tables.items()}
    money = _write_money(book, sheets[MONEY], comparison, grids[PRICES], tables[PRICES])
    write_comparison_page(book, sheets[COMPARISON], comparison, money.grid, money.amounts, grids)
    if WHY in sheets:
        write_why(book, sheets[WHY], comparison, grids[PRICES], tables[PRICES])
    if ranges:
        write_live(book, sheets[LIVE], sheets[LIVE_DATA], comparison, ranges)
    for table in map(_without_empty, around):
        if table.name == "regret":
            _write_regret(book, sheets[sheet_title(table)], table, comparison)
        else:
            write_table(book, sheets[sheet_title(table)], table, frozen=3 if table.columns[0].key == "month" else 1)
    write_table(book, sheets[FLAT], flat_lines(comparison), header=0, frozen=0)
    write_table(book, sheets[NOTES], _notes(comparison), frozen=0)
    return book.to_bytes()


def case_tables(comparison: Comparison, answers: CaseAnswers | None = None) -> dict[str, CaseTable]:
    """The tables with a column a case, by the name of their sheet."""
    tables = {
        PRICES: price_lines(comparison),
        "Feeds": feed_lines(comparison),
        "Products": slate_lines(comparison),
        "Furnaces": furnace_lines(comparison),
        "Loads": load_lines(comparison),
        "Limits that bind": limit_lines(comparison),
    }
    if answers and answers.break_evens:
        tables[BREAK_EVENS] = break_even_lines(comparison, answers.break_evens)
    return tables


def _sheet_names(tables: dict[str, CaseTable], around: Sequence[Table], live: bool, several: bool) -> list[str]:
    """The sheets in the order in which people see them."""
    words = [sheet_title(table) for table in around[:1]]
    others = [sheet_title(table) for table in around[1:]]
    why = [WHY] if several else []
    middle = [name for name in tables if name != PRICES]
    return [
        COMPARISON,
        *words,
        *why,
        *middle,
        *others,
        *([LIVE] if live else []),
        PRICES,
        MONEY,
        *([LIVE_DATA] if live else []),
        FLAT,
        NOTES,
    ]


def write_case_table(book: Book, sheet: Any, name: str, table: CaseTable, names: Sequence[str]) -> Grid:
    """A table with a column a case; the difference from the first is a formula."""
    plain = table.to_table(names)
    grid = grid_of(plain, name)
    first = names[0]

    def difference(number: int, row: Record, other: str) -> str | None:
        if row[MINUS + other] is None:
            return None
        return f"={grid.at(number, other)}-{grid.at(number, first)}".replace("$", "")

    formulas = {MINUS + other: [difference(n, row, other) for n, row in enumerate(plain.rows)] for other in names[1:]}
    inputs = {one: [True] * len(plain.rows) for one in names} if name == PRICES else None
    remark = CHANGE if name == PRICES else ""
    write_table(book, sheet, plain, formulas=formulas, inputs=inputs, remark=remark, frozen=4)
    if len(names) > 1 and plain.rows:
        _colour(book, sheet, grid, names)
    return grid


CHANGE = "Changing a price here prices the same plans again, it does not plan again"


def _colour(book: Book, sheet: Any, grid: Grid, names: Sequence[str]) -> None:
    """Colour the differences that are more than a small share of the number."""
    for other in names[1:]:
        cells = f"{grid.at(0, MINUS + other)}:{grid.at(grid.rows - 1, MINUS + other)}".replace("$", "")
        own, first, change = (grid.at(0, key).replace("$", "") for key in (other, names[0], MINUS + other))
        test = f"=AND(ISNUMBER({change}),ABS({change})>{CHANGED}*MAX(ABS({own}),ABS({first})),ABS({change})>0.000001)"
        sheet.conditional_format(cells, {"type": "formula", "criteria": test, "format": book.style("binds")})


def _write_money(book: Book, sheet: Any, comparison: Comparison, prices: Grid, table: CaseTable) -> MoneyOfComparison:
    """Every amount of every case: its quantity times the price cell of that case."""
    at = {(line.month, line.item): number for number, line in enumerate(table.lines)}
    plans = list(comparison.plans)
    money = f"k{comparison.scenario.currency}"
    lines = money_of_cases(comparison)
    columns = (
        Column("month", "Month"),
        Column("group", "Group"),
        Column("item", "Item"),
        Column("times", "Sign and scale", kind="number"),
        Column("unit", "Unit"),
        *(Column(f"quantity {name}", f"Quantity, {name}", kind="quantity") for name in plans),
        Column("price_unit", "Price unit"),
        *(Column(f"price {name}", f"Price, {name}", kind="price") for name in plans),
        *(Column(f"amount {name}", f"Amount, {name}", money, "money") for name in plans),
    )
    rows: list[Record] = []
    formulas: dict[str, list[str | None]] = {f"{what} {name}": [] for what in ("price", "amount") for name in plans}
    grid = Grid(MONEY, 1, tuple(column.key for column in columns), len(lines))
    for number, line in enumerate(lines):
        row: Record = {"month": line.month, "group": line.group, "item": line.item, "times": line.times}
        row |= {"unit": line.quantity_unit, "price_unit": line.price_unit}
        for name in plans:
            quantity, price = line.quantities.get(name), line.prices.get(name)
            row |= {f"quantity {name}": quantity, f"price {name}": price}
            row[f"amount {name}"] = None if quantity is None or price is None else quantity * price * line.times
            cells = [grid.at(number, key).replace("$", "") for key in (f"quantity {name}", f"price {name}", "times")]
            formulas[f"amount {name}"].append(None if quantity is None else f"={'*'.join(cells)}")
            known = (line.month, line.price_item) in at and price is not None
            formulas[f"price {name}"].append(f"={prices.on(at[line.month, line.price_item], name)}" if known else None)
        rows.append(row)
    found = Table("case_money", "Money by case", columns, rows, "Amount = quantity × price × sign and scale")
    write_table(book, sheet, found, formulas=formulas, frozen=3)
    return MoneyOfComparison(grid, {name: f"amount {name}" for name in plans})


def _write_regret(book: Book, sheet: Any, table: Table, comparison: Comparison) -> None:
    """The square of regrets, the darker the worse; worst and average of a row are formulas."""
    grid = grid_of(table, "Regret")
    square = [column.key for column in table.columns if column.key.startswith("if ")]
    weights = [comparison.weights[name] for name in comparison.plans]
    worst: list[str | None] = []
    mean: list[str | None] = []
    for number, row in enumerate(table.rows):
        cells = f"{grid.at(number, square[0])}:{grid.at(number, square[-1])}".replace("$", "")
        possible = all(row[key] is not None for key in square)
        worst.append(f"=MAX({cells})" if possible else None)
        together = "+".join(f"{w!r}*{grid.at(number, k)}" for w, k in zip(weights, square, strict=True)).replace("$", "")
        mean.append(f"={together}" if possible else None)
    write_table(book, sheet, table, formulas={"worst": worst, "mean": mean}, frozen=1)
    span = f"{grid.at(0, square[0])}:{grid.at(grid.rows - 1, square[-1])}".replace("$", "")
    sheet.conditional_format(span, {"type": "2_color_scale", "min_color": "#FFFFFF", "max_color": "#E0A673"})


def _without_empty(table: Table) -> Table:
    """The table without columns of words that say nothing in any row."""
    kept = tuple(c for c in table.columns if c.kind != "text" or any(row[c.key] for row in table.rows))
    return Table(table.name, table.title, kept, table.rows, table.note)


def sheet_title(table: Table) -> str:
    """The name of a table's sheet: its title where it fits."""
    return SHORT_TITLES.get(table.name, table.title)[:LONGEST_TITLE]


def _notes(comparison: Comparison) -> Table:
    """Where the cases come from, what was read, what to be careful about."""
    from olefinlp import __version__
    from olefinlp.answers.audit import CAUTIONS

    first = next(iter(comparison.plans.values()))
    rows: list[Record] = [
        {"what": "cases from", "text": comparison.source},
        {"what": "scenario", "text": f"{comparison.scenario.document.file}: {comparison.scenario.title}"},
        *({"what": f"note on {case.name}", "text": case.note} for case in comparison.cases if case.note),
        *({"what": f"no plan for {case.name}", "text": case.reason} for case in comparison.cases if case.plan is None),
        *({"what": "look at", "text": str(warning)} for warning in comparison.warnings),
        *({"what": f"SHA-256 of {name}", "text": value} for name, value in first.file_hashes().items()),
        {
            "what": "proof",
            "text": "every plan here is a proven optimum of its case (primal, dual and gap within 1e-6, outside the solver)",
        },
        {"what": "version", "text": f"olefinlp {__version__}"},
        *({"what": "caution", "text": text} for text in CAUTIONS),
    ]
    return Table("case_notes", "Notes", (Column("what", "What"), Column("text", "In words")), rows)


__all__ = ["case_tables", "comparison_bytes", "write_comparison"]
