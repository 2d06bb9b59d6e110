"""The workbook of a plan: quantities as values, money as live formulas, charts and print setup."""

from __future__ import annotations

import os
from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING, Any

from olefinlp.answers.tables import Column, Record, Table
from olefinlp.outputs.files import write_bytes
from olefinlp.outputs.workbook_book import Book
from olefinlp.outputs.workbook_money import write_feeds, write_money, write_prices, write_slate
from olefinlp.outputs.workbook_overview import write_overview
from olefinlp.outputs.workbook_page import NAME as OVERVIEW
from olefinlp.outputs.workbook_tables import cell_range, grid_of, write_table

if TYPE_CHECKING:
    from olefinlp.answers.answer import Answer
    from olefinlp.answers.plan import Plan

IN_WORDS = "in_words"
BINDING = ("at maximum", "at minimum", "fixed")


def write_workbook(plan: Plan, path: str | os.PathLike[str], answers: tuple[Answer, ...] = ()) -> Path:
    """Write a plan as a workbook, whole or not at all; the same plan gives the same bytes.

    Raises `OutputError` when the file cannot be written; what was there before is then still there.
    """
    return write_bytes(path, workbook_bytes(plan, answers))


def workbook_bytes(plan: Plan, answers: tuple[Answer, ...] = ()) -> bytes:
    """The whole file in memory."""
    book = Book(plan.scenario)
    sheets = {name: book.sheet(name) for name in sheet_names(plan, answers)}
    prices, price_rows = write_prices(book, sheets["Prices"], plan)
    money = write_money(book, sheets["Money"], plan, prices, price_rows)
    write_overview(book, sheets[OVERVIEW], plan, money)
    write_feeds(book, sheets["Feeds"], plan, money)
    write_slate(book, sheets["Slate"], plan, money)
    _write_balances(book, sheets["Balances"], plan.closures)
    for name, table, frozen in _plain_tables(plan):
        write_table(book, sheets[name], table, frozen=frozen, header=0 if name == "Flat list" else 1)
    for table in answer_tables(answers):
        write_table(book, sheets[table.title], table, frozen=1 if table.name == IN_WORDS else 3)
    _mark(book, sheets["Limits"], plan.limits, "state", BINDING)
    _mark_full(book, sheets["Recovery load"], plan.recovery)
    _mark_full(book, sheets["Furnace hours"], plan.furnace_groups)
    return book.to_bytes()


def sheet_names(plan: Plan, answers: tuple[Answer, ...] = ()) -> list[str]:
    """The sheets in the order in which people see them."""
    stocks = ["Stocks"] if plan.stocks.rows else []
    words, *around = [table.title for table in answer_tables(answers)] or [""]
    supply = [
        OVERVIEW,
        *([words] if words else []),
        "Feeds",
        "Furnaces",
        "Furnace hours",
        "Slate",
        "Recovery load",
        *stocks,
        "Balances",
        "Balance lines",
    ]
    return [*supply, "Money", "Prices", "Limits", *around, "Reduced costs", "Inputs as used", "Audit", "Flat list"]


def answer_tables(answers: tuple[Answer, ...]) -> list[Table]:
    """The answers in words, then their tables, each of which gets a sheet under its title."""
    if not answers:
        return []
    rows: list[Record] = [{"answer": a.title, "sentence": sentence} for a in answers for sentence in a.sentences]
    words = Table(IN_WORDS, "In words", (Column("answer", "Answer"), Column("sentence", "In words")), rows)
    return [words, *(table for answer in answers for table in answer.tables if table.rows)]


def _plain_tables(plan: Plan) -> Iterator[tuple[str, Table, int]]:
    """Sheets that hold a table as it is, with the number of columns that stay in view."""
    yield "Furnaces", plan.furnaces, 3
    yield "Furnace hours", plan.furnace_groups, 2
    yield "Recovery load", plan.recovery, 2
    if plan.stocks.rows:
        yield "Stocks", plan.stocks, 2
    yield "Balance lines", plan.balances, 2
    yield "Limits", plan.limits, 3
    yield "Reduced costs", plan.reduced_costs, 3
    yield "Inputs as used", plan.inputs, 1
    yield "Audit", plan.audit, 2
    yield "Flat list", plan.flat, 0


def _write_balances(book: Book, sheet: Any, table: Table) -> None:
    """Balance checks: the difference and the verdict are formulas."""
    grid = grid_of(table, "Balances")

    def formula(number: int, row: Record, text: str) -> str | None:
        cells = {key: grid.at(number, key).replace("$", "") for key in grid.columns}
        return None if row["inflow"] is None else text.format(**cells)

    formulas = {
        "difference": [formula(n, row, "={inflow}-{outflow}") for n, row in enumerate(table.rows)],
        "closes": [formula(n, row, '=IF({relative}<={tolerance},"yes","no")') for n, row in enumerate(table.rows)],
    }
    write_table(book, sheet, table, formulas=formulas)
    alarm = {"type": "cell", "criteria": "==", "value": '"no"', "format": book.style("alarm")}
    sheet.conditional_format(cell_range(grid, "closes"), alarm)


def _mark(book: Book, sheet: Any, table: Table, key: str, words: tuple[str, ...]) -> None:
    """Colour the rows of a table in which a column says one of some words."""
    grid = grid_of(table, "")
    if not table.rows:
        return
    first = grid.at(0, key).replace("$", "")
    test = ",".join(f'${first}="{word}"' for word in words)
    rule = {"type": "formula", "criteria": f"=OR({test})", "format": book.style("binds")}
    sheet.conditional_format(grid.header + 1, 0, grid.header + grid.rows, len(grid.columns) - 1, rule)


def _mark_full(book: Book, sheet: Any, table: Table) -> None:
    """Colour the loads that stand at their maximum."""
    rule = {"type": "cell", "criteria": ">=", "value": 0.99995, "format": book.style("binds")}
    if table.rows:
        sheet.conditional_format(cell_range(grid_of(table, ""), "share"), rule)
