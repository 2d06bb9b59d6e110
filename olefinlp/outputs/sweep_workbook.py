"""The workbook of a sweep: what it says, the chart that suits it, how often what happens, all cases."""

from __future__ import annotations

import os
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

from olefinlp.answers.audit import CAUTIONS
from olefinlp.answers.sweep_answers import message, sweep_answer
from olefinlp.answers.sweep_distribution import fixed_cost
from olefinlp.answers.sweep_figures import failures, how_words, planned, reading_of, today_margin, varied_table
from olefinlp.answers.tables import Column, Table
from olefinlp.outputs.files import write_bytes
from olefinlp.outputs.sweep_cases_sheet import CASES, CasesSheet, cases_sheet, write_cases
from olefinlp.outputs.sweep_often import OFTEN, often_tables, write_often
from olefinlp.outputs.sweep_page import Page, relative
from olefinlp.outputs.sweep_views import View, view_title, write_view
from olefinlp.outputs.workbook_book import Book
from olefinlp.outputs.workbook_tables import Grid

if TYPE_CHECKING:
    from olefinlp.answers.sweep import Sweep

SWEEP = "Sweep"
MOST_REASONS = 20
BEFORE, FIXED, AFTER = "margin before fixed cost", "fixed cost", "margin after fixed cost"
ALL, GOOD, FAILED = "all", "with a plan, each proven", "without a plan"


def write_sweep(sweep: Sweep, path: str | os.PathLike[str], readings: Sequence[str] | None = None) -> Path:
    """Write a sweep as a workbook, whole or not at all; the same sweep gives the same bytes.

    `readings` are names of columns that were read out, shown along one number; the first of them in a second heat map.
    Raises `OutputError` when the file cannot be written, `ValueError` for a reading that is not there.
    """
    return write_bytes(path, sweep_bytes(sweep, readings))


def sweep_bytes(sweep: Sweep, readings: Sequence[str] | None = None) -> bytes:
    """The whole file in memory."""
    for name in readings or ():
        reading_of(sweep, name)
    scenario = sweep.base.scenario
    book = Book(scenario, f"{scenario.title}: {len(sweep):,} cases")
    often = planned(sweep).any() and any(table.rows for table in often_tables(sweep))
    names = [SWEEP, view_title(sweep), *([OFTEN] if often else []), CASES]
    sheets = {name: book.sheet(name) for name in names}
    cases = cases_sheet(sweep, readings or ())
    facts = _write_first(book, sheets[SWEEP], sweep, cases, readings)
    today, fixed = facts.on(0, "value"), facts.on(1, "value")
    write_view(View(book, sweep, cases, today, fixed), sheets[names[1]], readings)
    if often:
        write_often(book, sheets[OFTEN], sweep, cases)
    write_cases(book, sheets[CASES], sweep, cases, today)
    return book.to_bytes()


def _write_first(book: Book, sheet: Any, sweep: Sweep, cases: CasesSheet, readings: Sequence[str] | None) -> Grid:
    """The first sheet; gives where today's margin and the fixed cost stand."""
    page = Page(book, sheet, SWEEP)
    months = sweep.base.quantities.case.months
    span = months[0] if len(months) == 1 else f"{months[0]} to {months[-1]}, {len(months)} in all, summed here"
    plant = sweep.base.scenario.plant.name
    title = f"{sweep.base.scenario.title}: {message(sweep)}"
    page.head(title, [f"{plant}. Period {span}. {how_words(sweep)[:1].upper()}{how_words(sweep)[1:]}."])
    page.row += 1
    for sentence in sweep_answer(sweep, readings).sentences:
        page.text(sentence)
    money, ended = _today(sweep), _ended(sweep)
    grid = page.table(money, formulas=_after_formula)
    page.table(ended, formulas=lambda grid: _ended_formulas(cases, grid))
    page.table(varied_table(sweep))
    failed = failures(sweep)
    if failed.rows:
        page.table(Table(failed.name, failed.title, failed.columns, failed.rows[:MOST_REASONS], failed.note))
        if len(failed.rows) > MOST_REASONS:
            page.text(f"and {len(failed.rows) - MOST_REASONS:,} more reasons", "note")
    _write_notes(page, sweep, readings)
    sheet.freeze_panes(1, 0)
    return grid


def _today(sweep: Sweep) -> Table:
    """Today's margin."""
    fixed = sweep.base.fixed_cost() / 1000
    facts = ((BEFORE, today_margin(sweep)), (FIXED, fixed), (AFTER, today_margin(sweep) - fixed))
    columns = (Column("fact", "Today's plan"), Column("value", "Amount", f"k{sweep.currency}", "money"))
    return Table("today", "Today", columns, [{"fact": fact, "value": value} for fact, value in facts])


def _after_formula(grid: Grid) -> dict[str, list[str | None]]:
    before, fixed = (relative(grid.at(number, "value")) for number in (0, 1))
    return {"value": [None, None, f"={before}-{fixed}"]}


def _ended(sweep: Sweep) -> Table:
    """How the cases ended."""
    good = int(planned(sweep).sum())
    facts = ((ALL, len(sweep)), (GOOD, good), (FAILED, len(sweep) - good))
    columns = (Column("fact", "Cases"), Column("value", "Number", kind="count"))
    return Table("ended", "Cases", columns, [{"fact": fact, "value": value} for fact, value in facts])


def _ended_formulas(cases: CasesSheet, grid: Grid) -> dict[str, list[str | None]]:
    span = cases.span("margin")
    every, good = (relative(grid.at(number, "value")) for number in (0, 1))
    return {"value": [None, f"=COUNT({span})" if span else None, f"={every}-{good}"]}


def _write_notes(page: Page, sweep: Sweep, readings: Sequence[str] | None) -> None:
    """How to read it, where it comes from, what to be careful about."""
    from olefinlp import __version__

    scenario, note = sweep.base.scenario, sweep_answer(sweep, readings).note
    page.title("Notes")
    page.text(note)
    if sweep.note:
        page.text(f"{sweep.note[:1].upper()}{sweep.note[1:]}.")
    if fixed_cost(sweep) != sweep.base.fixed_cost() / 1000:
        page.text("The fixed cost varies itself: margins are not compared with it.")
    page.text("Every plan counted here is a proven optimum of its case (primal, dual and gap within 1e-6, outside the solver).")
    page.text(f"Scenario: {scenario.document.file}. Price case: {scenario.price_case or 'prices of the scenario'}.")
    for name, digest in sweep.base.file_hashes().items():
        page.text(f"SHA-256 of {name}: {digest}")
    page.text(f"olefinlp {__version__}")
    page.title("Cautions")
    for text in CAUTIONS:
        page.text(text)


__all__ = ["sweep_bytes", "write_sweep"]
