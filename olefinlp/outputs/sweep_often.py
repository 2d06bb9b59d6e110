"""The sheet that says how often each feed is bought and how often each limit binds."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from olefinlp.answers.sweep_distribution import feeds_bought, limits_binding, specified_outlet
from olefinlp.answers.sweep_figures import WORTH_SEEN, bought_from, counted, planned
from olefinlp.answers.tables import Record, Table
from olefinlp.inputs.sweep_cases import DRAWS
from olefinlp.outputs.sweep_cases_sheet import CasesSheet
from olefinlp.outputs.sweep_page import Page, relative
from olefinlp.outputs.workbook_book import Book
from olefinlp.outputs.workbook_tables import Grid

if TYPE_CHECKING:
    from olefinlp.answers.sweep import Sweep

OFTEN = "How often"
SEEN = f"{WORTH_SEEN:.6f}"
"""The smallest worth that counts, as formulas write it."""


def often_tables(sweep: Sweep) -> tuple[Table, Table]:
    """Feeds and limits, as far as they were read out."""
    return feeds_bought(sweep), limits_binding(sweep)


def write_often(book: Book, sheet: Any, sweep: Sweep, cases: CasesSheet) -> None:
    """Both tables below each other; numbers are formulas of the cases where those are all there."""
    page = Page(book, sheet, OFTEN, (52, 17))
    feeds, limits = often_tables(sweep)
    count = counted(int(planned(sweep).sum()), "case")
    counted_alike = "" if sweep.cases.how == DRAWS else " These are shares of the cases chosen, not chances."
    page.head("How often each feed is bought and each limit binds", [f"Counted over {count} with a plan.{counted_alike}"])
    if feeds.rows:
        page.table(feeds, formulas=lambda grid: _feed_formulas(sweep, cases, feeds, grid))
    if limits.rows:
        page.table(limits, formulas=lambda grid: _limit_formulas(sweep, cases, limits, grid))
    page.sheet.freeze_panes(1, 1)


def _feed_formulas(sweep: Sweep, cases: CasesSheet, table: Table, grid: Grid) -> dict[str, list[str | None]]:
    """How often, the mean and the percentiles of what is bought."""
    found: dict[str, list[str | None]] = {key: [] for key in ("cases", "share", "mean", "p10", "p50", "p90")}
    least = repr(bought_from(sweep))
    for number, row in enumerate(table.rows):
        span = cases.span(f"bought.{row['source']}")
        found["cases"].append(f'=COUNTIF({span},">"&{least})' if span else None)
        found["share"].append(f"={relative(grid.at(number, 'cases'))}/COUNT({cases.span('margin')})" if span else None)
        found["mean"].append(f"=AVERAGE({span})" if span else None)
        for key, share in (("p10", "0.1"), ("p50", "0.5"), ("p90", "0.9")):
            found[key].append(f"=PERCENTILE({span},{share})" if span else None)
    return found


def _limit_formulas(sweep: Sweep, cases: CasesSheet, table: Table, grid: Grid) -> dict[str, list[str | None]]:
    """How often, and the mean and highest worth where it binds."""
    found: dict[str, list[str | None]] = {key: [] for key in ("cases", "share", "mean", "high")}
    for number, row in enumerate(table.rows):
        times = relative(grid.at(number, "cases"))
        formulas = _limit_row(sweep, cases, row, times)
        formulas["share"] = f"={times}/COUNT({cases.span('margin')})"
        for key, column in found.items():
            column.append(formulas[key] if "cases" in formulas and row[key] is not None else None)
    return found


def _limit_row(sweep: Sweep, cases: CasesSheet, row: Record, times: str) -> dict[str, str]:
    """Formulas of one limit; none where its worths are not on the sheet of cases."""
    name = f"worth.{row['limit']}"
    span, outlet = cases.span(name), specified_outlet(sweep, name)
    if span is None or not row["cases"]:
        return {}
    if outlet is None:
        test = f'">"&{SEEN}'
        return {
            "cases": f"=COUNTIF({span},{test})",
            "mean": f"=SUMIF({span},{test})/{times}",
            "high": f"=MAX({span})",
        }
    sold = cases.span(outlet)
    if sold is None:
        return {}
    counts = f"({sold}>{bought_from(sweep)!r})"
    return {
        "cases": f"=SUMPRODUCT({counts}*({span}>{SEEN}))",
        "mean": f"=SUMPRODUCT({counts}*({span}>{SEEN})*{span})/{times}",
        "high": f"=SUMPRODUCT(MAX({counts}*{span}))",
    }
