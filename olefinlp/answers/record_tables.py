"""The tables of a plan that record it: prices and inputs as used, reduced costs, the flat list."""

from __future__ import annotations

from olefinlp.answers.money import MoneyLine
from olefinlp.answers.quantities import Quantities
from olefinlp.answers.tables import Column, Record, Table

MONTH = Column("month", "Month")


def prices_table(q: Quantities) -> Table:
    """Prices: as written, how they become what is used, and where they stand."""
    columns = (
        MONTH,
        Column("item", "Item"),
        Column("written", "As written"),
        Column("number", "Number", kind="price"),
        Column("unit", "Unit written"),
        Column("factor", "Factor to unit used", kind="number"),
        Column("of", "Leans on"),
        Column("times", "Times", kind="number"),
        Column("plus", "Plus", kind="price"),
        Column("value", "Price used", kind="price"),
        Column("unit_used", "Unit used"),
        Column("basis", "Basis"),
        Column("source", "Source"),
        Column("place", "Written in"),
    )
    rows: list[Record] = [
        {
            "month": p.month,
            "item": p.item,
            "written": p.text,
            "number": None if p.of else p.number,
            "unit": p.unit,
            "factor": None if p.of else p.factor,
            "of": p.of,
            "times": p.times if p.of else None,
            "plus": p.plus if p.of else None,
            "value": p.value,
            "unit_used": p.unit_used,
            "basis": p.basis,
            "source": p.source,
            "place": str(p.place),
        }
        for p in sorted(q.case.prices.values(), key=lambda p: q.case.months.index(p.month))
    ]
    return Table("prices", "Prices", columns, rows)


def reduced_costs_table(q: Quantities) -> Table:
    """Decisions that stand at a bound of their own: change of margin per unit forced in."""
    case = q.case
    columns = (
        MONTH,
        Column("decision", "Decision"),
        Column("item", "Item"),
        Column("value", "Plan", kind="quantity"),
        Column("unit", "Unit"),
        Column("reduced_cost", "Reduced cost", kind="price"),
        Column("reduced_cost_unit", "Reduced cost unit"),
    )
    names = {"bought": "bought", "charge": "charged", "disposition": "sent to outlet", "sold": "sold", "shortfall": "shortfall"}
    names |= {"trade": "utility traded", "conversion": "conversion", "closing_stock": "closing stock"}
    rows: list[Record] = []
    for column, label in enumerate(q.lp.columns):
        if label[0] not in names or abs(q.solution.reduced[column]) < 1e-9:
            continue
        unit, per = _units_of(q, label)
        rows.append(
            {
                "month": label[-1],
                "decision": names[label[0]],
                "item": _item_of(label),
                "value": q.value(*label),
                "unit": unit,
                "reduced_cost": q.reduced_cost(*label),
                "reduced_cost_unit": f"{case.currency}/{per}",
            }
        )
    return Table("reduced_costs", "Reduced costs", columns, rows)


def _item_of(label: tuple[str, ...]) -> str:
    if label[0] == "charge":
        mode, parcel = label[1], label[2]
        quality = parcel.partition(" (")[2]
        return f"{mode} ({quality}" if quality else mode
    return " ".join(label[1:-1])


def _units_of(q: Quantities, label: tuple[str, ...]) -> tuple[str, str]:
    """Unit of a decision in the plan, and the unit its reduced cost is per."""
    plant = q.case.scenario.plant
    kind = "mass"
    if label[0] in ("disposition", "sold") and q.case.outlets[label[1]][0] in q.case.heat_cuts:
        kind = "heat"
    elif label[0] == "trade":
        kind = plant.file.utilities[q.case.trades[label[1]][0]].measured_in
    elif label[0] == "conversion":
        first = next(iter(plant.file.conversions[label[1]].makes))
        kind = plant.file.utilities[first].measured_in
    return {"mass": ("kt", "t"), "heat": ("TJ LHV", "GJ LHV"), "power": ("GWh", "MWh")}[kind]


def inputs_table(q: Quantities) -> Table:
    """Every number of the files: as written, as used, and its place."""
    columns = (
        Column("item", "Item"),
        MONTH,
        Column("written", "As written"),
        Column("value", "Value used", kind="number"),
        Column("unit", "Unit used"),
        Column("place", "Written in"),
        Column("note", "Note"),
    )
    rows: list[Record] = []
    seen: set[tuple[str, str]] = set()
    for i in q.case.inputs:
        if (i.item, i.month) not in seen:
            seen.add((i.item, i.month))
            rows.append(
                {"item": i.item, "month": i.month, "written": i.written, "value": i.value, "unit": i.unit}
                | {"place": str(i.place), "note": i.note}
            )
    return Table("inputs", "Inputs as used", columns, rows, "Prices have a table of their own.")


def flat_table(q: Quantities, lines: list[MoneyLine]) -> Table:
    """Quantities and money as one list: month, case, group, item, measure, value, unit."""
    case = q.case
    columns = (
        MONTH,
        Column("price_case", "Price case"),
        Column("group", "Group"),
        Column("item", "Item"),
        Column("measure", "Measure"),
        Column("value", "Value", kind="number"),
        Column("unit", "Unit"),
    )
    price_case = case.scenario.price_case
    rows: list[Record] = []

    def add(month: str, group: str, item: str, measure: str, value: float | None, unit: str) -> None:
        if value is not None:
            rows.append(
                {"month": month, "price_case": price_case, "group": group, "item": item, "measure": measure}
                | {"value": value, "unit": unit}
            )

    for mode in case.modes:
        for month in case.months:
            add(month, "charge", mode, "charged", q.charged(mode, month), "kt")
    for month in case.months:
        for component in case.components:
            add(month, "component", component, "made", q.value("component_made", component, month), "kt")
        for cut in case.cuts:
            add(month, "cut", cut, "made", q.value("cut_made", cut, month), "kt")
        for outlet, cuts in case.outlets.items():
            unit = "TJ LHV" if cuts[0] in case.heat_cuts else "kt"
            add(month, "outlet", outlet, "taken", q.outlet(outlet, month), unit)
        for item in case.stocks:
            add(month, "stock", item, "closing", q.stock(item, month), "kt")
    for line in lines:
        add(line.month, line.group, line.item, "quantity", line.quantity, line.quantity_unit)
        add(line.month, line.group, line.item, "amount", line.amount, f"k{case.currency}")
    return Table("list", "Flat list", columns, rows)
