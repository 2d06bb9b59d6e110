"""The tables of a plan that planners read first: feeds, furnaces, slate, recovery load, stocks."""

from __future__ import annotations

from collections.abc import Mapping

from olefinlp.answers.quantities import Quantities
from olefinlp.answers.tables import Column, Record, Table

MONTH = Column("month", "Month")


def feeds_table(q: Quantities, first_tonnes: Mapping[tuple[str, str], float | None]) -> Table:
    """Every step of every source, bought or not; `worth` is the value of one more tonne at the gate.

    `first_tonnes` are worths by (source, month) that shadow prices alone cannot tell: a feed that
    would make what nothing else makes.
    """
    case, currency = q.case, q.case.currency
    columns = (
        MONTH,
        Column("feed", "Feed"),
        Column("source", "Source"),
        Column("step", "Step", kind="count"),
        Column("steps", "of steps", kind="count"),
        Column("quality", "Quality"),
        Column("bought", "Bought", "kt", "quantity"),
        Column("minimum", "Minimum", "kt", "quantity"),
        Column("maximum", "Maximum", "kt", "quantity"),
        Column("take_or_pay", "Take-or-pay", "kt", "quantity"),
        Column("shortfall", "Paid, not taken", "kt", "quantity"),
        Column("price_written", "Price as written"),
        Column("price", "Price", f"{currency}/t", "price"),
        Column("worth", "Worth of one more tonne", f"{currency}/t", "price"),
        Column("cost", "Cost", f"k{currency}", "money"),
    )
    rows: list[Record] = []
    for month in case.months:
        for source, data in case.sources.items():
            limit = case.limits.get(("purchase", source, month))
            pay = case.limits.get(("take_or_pay", source, month))
            for step in data.tiers:
                item = case.purchase_item(source, step)
                price = case.prices[item, month]
                bought = q.value("bought", source, str(step), month)
                sizes = [case.tier_size[source, k, month] for k in data.tiers]
                high = _end_of_step(sizes, step, limit.high if limit else None)
                rows.append(
                    {
                        "month": month,
                        "feed": data.feed,
                        "source": data.name,
                        "step": step,
                        "steps": len(data.tiers),
                        "quality": _quality(q, source, month),
                        "bought": bought,
                        "minimum": (limit.low if limit else None) if step == 1 else None,
                        "maximum": high,
                        "take_or_pay": pay.low if pay else None,
                        "shortfall": q.value("shortfall", source, month) if data.take_or_pay and step == 1 else None,
                        "price_written": price.text,
                        "price": price.value,
                        "worth": first_tonnes[source, month]
                        if (source, month) in first_tonnes
                        else worth_at_gate(q, source, step, month),
                        "cost": bought * price.value,
                    }
                )
    return Table("feeds", "Feeds bought", columns, rows)


def _end_of_step(sizes: list[float], step: int, whole: float | None) -> float | None:
    """The most that one step takes; the last one takes what is left of the whole."""
    if step < len(sizes):
        return sizes[step - 1]
    return None if whole is None else whole - sum(sizes[:-1])


def _quality(q: Quantities, source: str, month: str) -> str:
    quality = q.case.qualities.get(q.case.parcel_of.get((source, month), ""), {})
    return ", ".join(f"{name} {value:g}" for name, value in quality.items())


def worth_at_gate(q: Quantities, source: str, step: int, month: str) -> float:
    """Value of one more tonne at the gate, whatever its source: the best use that there is for it.

    The shadow price of the feed balance alone is not enough for a feed that is not charged: it may
    stand anywhere between the value and the price, so the best use's own reduced cost is added.
    """
    case = q.case
    if case.sources[source].kind == "side_streams":
        price = case.rate(case.purchase_item(source, step), month)
        limits = q.dual("purchase_limit", source, month) + q.dual("take_or_pay_limit", source, month)
        return price + q.reduced_cost("bought", source, str(step), month) + limits
    parcel = case.parcel_of[source, month]
    uses = [q.reduced_cost("charge", mode, p, month) for mode, p, _ in case.charges_in[month] if p == parcel]
    feed = case.sources[source].feed
    if feed in case.stocks and case.stocks[feed].is_feed:
        tank = q.dual("stock_limit", feed, month)
        tank += q.dual("end_stock_limit", feed) if month == case.months[-1] else 0.0
        if tank <= 0:  # room in the tank: storing is a use too, at its value without the tank's minimum
            uses.append(q.reduced_cost("closing_stock", parcel, month) + tank)
    return q.dual("feed_balance", parcel, month) + max(uses, default=0.0)


def furnaces_table(q: Quantities) -> Table:
    """Modes in use: what is charged, and the furnaces it keeps busy."""
    case = q.case
    columns = (
        MONTH,
        Column("group", "Furnace group"),
        Column("feed", "Feed"),
        Column("quality", "Quality"),
        Column("severity", "Severity"),
        Column("charged", "Charged", "kt", "quantity"),
        Column("hours", "Furnace-hours", "h", "hours"),
        Column("furnaces", "Furnaces kept busy", "", "quantity"),
        Column("decokes", "Decokes", "", "quantity"),
    )
    rows: list[Record] = []
    for mode, parcel, month in case.charges:
        charged = q.value("charge", mode, parcel, month)
        if not charged:
            continue
        hours = charged * case.hours_per_kt[mode]
        rows.append(
            {
                "month": month,
                "group": case.mode_group[mode],
                "feed": case.mode_feed[mode],
                "quality": ", ".join(f"{name} {value:g}" for name, value in case.qualities[parcel].items()),
                "severity": case.mode_severity[mode],
                "charged": charged,
                "hours": hours,
                "furnaces": hours / case.hours(month),
                "decokes": charged * case.decokes_per_kt[mode],
            }
        )
    turn = {month: at for at, month in enumerate(case.months)}
    rows.sort(key=lambda row: turn[row["month"]])
    note = "Furnaces kept busy count decoking and may be fractions: a month is planned, not a calendar."
    return Table("furnaces", "Furnaces", columns, rows, note)


def groups_table(q: Quantities) -> Table:
    """Hours of each group: there, used, spare."""
    case = q.case
    columns = (
        MONTH,
        Column("group", "Furnace group"),
        Column("furnaces", "Furnaces", "", "count"),
        Column("available", "Hours available", "h", "hours"),
        Column("used", "Hours used", "h", "hours"),
        Column("spare", "Hours spare", "h", "hours"),
        Column("share", "Used", "%", "share"),
        Column("reason", "Outage"),
    )
    rows: list[Record] = []
    for month in case.months:
        for group, data in case.scenario.plant.file.furnace_groups.items():
            limit = case.limits.get(("furnace_hours", group, month))
            used = sum(
                case.hours_per_kt[mode] * q.value("charge", mode, parcel, month)
                for mode in case.modes_in.get((group, month), ())
                for parcel in case.charged_parcels[mode, month]
            )
            available = limit.high if limit else None
            rows.append(
                {
                    "month": month,
                    "group": group,
                    "furnaces": data.furnaces if isinstance(data.furnaces, int) else None,
                    "available": available,
                    "used": used,
                    "spare": None if available is None else max(available - used, 0.0),
                    "share": used / available if available else None,
                    "reason": limit.reason if limit else "",
                }
            )
    return Table("furnace_groups", "Furnace hours", columns, rows)


def slate_table(q: Quantities) -> Table:
    """Every outlet to sale; what is valued by content is shown at its average content value less deduction."""
    case, currency = q.case, q.case.currency
    columns = (
        MONTH,
        Column("outlet", "Outlet"),
        Column("step", "Step", kind="count"),
        Column("steps", "of steps", kind="count"),
        Column("cuts", "From"),
        Column("quantity", "Sold", kind="quantity"),
        Column("unit", "Unit"),
        Column("minimum", "Minimum", kind="quantity"),
        Column("maximum", "Maximum", kind="quantity"),
        Column("price_written", "Price as written"),
        Column("price", "Price or content value less deduction", kind="price"),
        Column("price_unit", "Price unit"),
        Column("revenue", "Revenue", f"k{currency}", "money"),
    )
    rows: list[Record] = []
    for month in case.months:
        for outlet, steps in case.sale_tiers.items():
            limit = case.limits.get(("outlet", outlet, month))
            for step in steps:
                price = case.prices[case.sale_item(outlet, step), month]
                sold = q.value("sold", outlet, str(step), month)
                value = content_per_tonne(q, outlet, month) - price.value if outlet in case.deductions else price.value
                sizes = [case.sale_size[outlet, k, month] for k in steps]
                high = _end_of_step(sizes, step, limit.high if limit else None)
                written = f"content less {price.text}" if outlet in case.deductions else price.text
                rows.append(
                    {
                        "month": month,
                        "outlet": outlet,
                        "step": step,
                        "steps": len(steps),
                        "cuts": " + ".join(case.outlets[outlet]),
                        "quantity": sold,
                        "unit": "TJ LHV" if case.outlets[outlet][0] in case.heat_cuts else "kt",
                        "minimum": (limit.low if limit else None) if step == 1 else None,
                        "maximum": high,
                        "price_written": written,
                        "price": value,
                        "price_unit": price.unit_used,
                        "revenue": sold * value,
                    }
                )
    return Table("slate", "Products sold", columns, rows)


def content_per_tonne(q: Quantities, outlet: str, month: str) -> float:
    """Average value of what is in a tonne of a cut valued by content."""
    cut = q.case.outlets[outlet][0]
    made = q.value("cut_made", cut, month)
    if not made:
        return 0.0
    items = [(item, parts) for (name, item), parts in q.case.content.items() if name == cut]
    return sum(q.case.rate(f"contents.{cut}.{item}", month) * q.total(parts, month) for item, parts in items) / made


def recovery_table(q: Quantities) -> Table:
    """Load of each recovery unit, as an average rate over the month."""
    case = q.case
    columns = (
        MONTH,
        Column("unit", "Recovery unit"),
        Column("load", "Load", kind="quantity"),
        Column("minimum", "Minimum", kind="quantity"),
        Column("maximum", "Maximum", kind="quantity"),
        Column("rate_unit", "Unit"),
        Column("measure", "Measured as"),
        Column("share", "Loaded", "%", "share"),
        Column("worth", "Worth of relaxing it by one unit", kind="price"),
        Column("worth_unit", "Worth unit"),
        Column("reason", "Factor"),
    )
    rows: list[Record] = []
    for month in case.months:
        for unit in case.units:
            limit = case.limits.get(("unit_load", unit, month))
            if limit is None:
                continue
            load = q.value("unit_load", unit, month)
            dual = q.dual("unit_load_limit", unit, month) * limit.worth_scale
            rows.append(
                {
                    "month": month,
                    "unit": unit,
                    "load": load * limit.scale,
                    "minimum": None if limit.low is None else limit.low * limit.scale,
                    "maximum": None if limit.high is None else limit.high * limit.scale,
                    "rate_unit": limit.unit,
                    "measure": limit.measure,
                    "share": load / limit.high if limit.high else None,
                    "worth": abs(dual) if abs(dual) > 1e-9 else 0.0,
                    "worth_unit": f"{case.currency}/{limit.worth_unit}",
                    "reason": limit.reason,
                }
            )
    return Table("recovery", "Recovery load", columns, rows, "Loads are averages over the month.")


def stocks_table(q: Quantities) -> Table:
    """Tanks: opening, closing, limits."""
    case = q.case
    columns = (
        MONTH,
        Column("item", "Tank"),
        Column("opening", "Opening", "kt", "quantity"),
        Column("closing", "Closing", "kt", "quantity"),
        Column("minimum", "Minimum", "kt", "quantity"),
        Column("maximum", "Maximum", "kt", "quantity"),
    )
    rows: list[Record] = []
    for month in case.months:
        for item, data in case.stocks.items():
            limit = case.limits.get(("stock", item, month))
            before = case.before(month)
            lines = data.parcels if data.is_feed else (item,)
            rows.append(
                {
                    "month": month,
                    "item": item,
                    "opening": q.stock(item, before) if before else sum(case.opening.get(line, 0.0) for line in lines),
                    "closing": q.stock(item, month),
                    "minimum": limit.low if limit else None,
                    "maximum": limit.high if limit else None,
                }
            )
    return Table("stocks", "Stocks", columns, rows)
