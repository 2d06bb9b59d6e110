"""Blocks of the first sheet that show the plan: limits that bind, feeds, products, loads, with their charts."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from olefinlp.answers.limits import binding
from olefinlp.answers.tables import Record
from olefinlp.outputs.workbook_book import put
from olefinlp.outputs.workbook_charts import Ranges, load_chart, quantity_chart
from olefinlp.outputs.workbook_page import NAME, Matrix, Page, gathered, matrix, place_chart
from olefinlp.outputs.workbook_tables import number_format

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan

TOP_LIMITS = 8
WORTHS = "Limits that bind, and what relaxing each by one unit is worth"
FEED_ROWS, SLATE_ROWS, LOAD_ROWS = 13, 15, 17
"""Rows that a chart takes at least."""


def write_limits(page: Page) -> None:
    """Limits that bind, those with the largest part in the margin; every one is on its own sheet."""
    found = binding(page.plan.limits)
    shown = top_limits(page.plan, found)
    if len(page.months) > 1:
        _limits_by_month(page, shown)
    else:
        _limits_of_month(page, [records[0] for records in shown.values()])
    everything = {(row["limit"], row["state"]) for row in found}
    rest = f"{len(shown)} of {len(everything)} limits that bind, those with the largest part in the margin. "
    text = (rest if len(everything) > len(shown) else "") + page.plan.limits.note
    put(page.sheet, page.row, 0, text if found else "No limit is worth anything.", page.book.style("note"))
    page.row += 1


def _limits_of_month(page: Page, shown: Sequence[Record]) -> None:
    page.block(WORTHS, ("Limit", "Month", "State", "Worth", "", "Plan"), texts=3)
    indent = page.book.style("indent")
    for at, text in ((4, "Worth unit"), (6, "Unit")):
        put(page.sheet, page.row - 1, at, text, page.book.style("header", "indent"))
    worths = page.book.style(number_format("price", [row["worth"] for row in shown]))
    for row in shown:
        for at, key in enumerate(("limit", "month", "state")):
            put(page.sheet, page.row, at, row[key])
        put(page.sheet, page.row, 3, row["worth"], worths)
        put(page.sheet, page.row, 4, row["worth_unit"], indent)
        put(page.sheet, page.row, 5, row["value"], page.book.style(number_format("quantity", [row["value"]])))
        put(page.sheet, page.row, 6, row["unit"], indent)
        page.row += 1


def _limits_by_month(page: Page, shown: dict[tuple[str, str], list[Record]]) -> None:
    page.block(WORTHS, ("Limit", "Worth unit", *page.months))
    worths = page.book.style(number_format("price", [row["worth"] for records in shown.values() for row in records]))
    for (limit, state), records in shown.items():
        page.label(f"{limit}, {state}", records[0]["worth_unit"])
        for row in records:
            put(page.sheet, page.row, 2 + page.months.index(row["month"]), row["worth"], worths)
        page.row += 1


def top_limits(plan: Plan, found: Sequence[Record]) -> dict[tuple[str, str], list[Record]]:
    """The limits with the largest |rate × limit| over the months, by name and state, the largest first."""
    limits = {id(record): limit for record, limit in zip(plan.limits.rows, plan.quantities.case.limits.values(), strict=True)}
    parts: dict[tuple[str, str], float] = {}
    records: dict[tuple[str, str], list[Record]] = {}
    for record in found:
        limit, key = limits[id(record)], (record["limit"], record["state"])
        sides = (limit.low, limit.high) if record["state"] == "at minimum" else (limit.high, limit.low)
        bound = sides[0] if sides[0] is not None else sides[1]
        parts[key] = parts.get(key, 0.0) + abs(record["rate"] / limit.worth_scale * (bound or 0.0))
        records.setdefault(key, []).append(record)
    best = sorted(parts, key=lambda key: -parts[key])[:TOP_LIMITS]
    return {key: records[key] for key in best}


def write_feed_block(page: Page) -> None:
    """What is bought of each feed, over its sources."""
    rows = gathered(page.plan.feeds.rows, "feed", "bought", lambda _: "kt")
    top = page.row
    ranges = matrix(page, "Feeds bought", rows)
    place_chart(page, top, quantity_chart(page.book, ranges, _leader("Feed bought, kt", rows), "kt"), FEED_ROWS)


def write_slate_block(page: Page) -> None:
    """Products sold; what is sold as heat stands last and is left out of the chart of tonnes."""
    rows = gathered(page.plan.slate.rows, "outlet", "quantity", lambda row: str(row["unit"]))
    rows = dict(sorted(rows.items(), key=lambda entry: entry[0][1] != "kt"))
    tonnes = {key: value for key, value in rows.items() if key[1] == "kt"}
    top = page.row
    ranges = matrix(page, "Products sold", rows)
    if tonnes:
        ranges = Ranges(NAME, ranges.header, ranges.first, ranges.first + len(tonnes) - 1, 0, ranges.months)
        place_chart(page, top, quantity_chart(page.book, ranges, _leader("Products sold, kt", tonnes), "kt"), SLATE_ROWS)


def _leader(title: str, rows: Matrix) -> str:
    """A title that says the sum and the largest part."""
    sums = {item: sum(by_month.values()) for (item, _), by_month in rows.items()}
    total = sum(sums.values())
    if total <= 0:
        return f"{title}: nothing"
    largest = max(sums, key=lambda item: sums[item])
    return f"{title}: {total:,.4g} in all, {largest} {sums[largest] / total:.0%}"


def load_shares(page: Page) -> Matrix:
    """How much of their maximum furnace groups and recovery units use, those that have one."""
    groups = [row | {"group": f"{row['group']} hours"} for row in page.plan.furnace_groups.rows]
    rows = gathered(groups, "group", "share", lambda _: "%")
    rows |= gathered(page.plan.recovery.rows, "unit", "share", lambda _: "%")
    return {key: by_month for key, by_month in rows.items() if by_month}


def write_loads(page: Page, rows: Matrix) -> None:
    """Loads by month, with the line of the maximum in the chart."""
    if not rows:
        return
    top = page.row
    ranges = matrix(page, "Load of furnaces and recovery units", rows, total=False)
    limit = 2 + len(page.months)
    put(page.sheet, ranges.header, limit, "Maximum", page.book.style("header", "right"))
    for row in range(ranges.first, ranges.last + 1):
        put(page.sheet, row, limit, 1.0, page.book.style("0%"))
    full = sum(max(by_month.values()) > 0.9995 for by_month in rows.values())
    title = f"Load, % of maximum (the line is 100 %): {full} of {len(rows)} are full" + (
        " in some month" if len(page.months) > 1 else ""
    )
    place_chart(page, top, load_chart(page.book, ranges, title, limit), LOAD_ROWS)
