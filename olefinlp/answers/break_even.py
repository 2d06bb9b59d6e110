"""Break-even prices of every feed on offer: first tonne, last tonne planned, next tonne, parcels.

For one source the best margin without its own cost, V(q), is concave in the volume q that is
forced in; its slope is what the next tonne is worth at the gate. A source is bought up to where
that falls to its price.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

from olefinlp.answers.answer import Answer
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.answers.words import percent, tonnage
from olefinlp.lp.compile import Label
from olefinlp.lp.neighbours import Neighbours
from olefinlp.lp.steps import Point, Side, side

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan
    from olefinlp.inputs.prices import Price

QUARTERS = (0.25, 0.5, 0.75, 1.0)
REACH = 0.25


@dataclass(frozen=True)
class Offer:
    """One source in one month: what is bought and what is offered, kt (inf: unlimited).

    `must` is its minimum, `paid_anyway` the share of the price that is paid for a tonne below the
    take-or-pay quantity `committed`, taken or not. The last tonne bought is in the price step from
    `start` to `end` kt, at the price `marginal`.
    """

    source: str
    month: str
    bought: float
    offered: float
    must: float
    committed: float
    paid_anyway: float
    price: Price
    marginal: Price
    start: float
    end: float

    @property
    def held(self) -> bool:
        """Whether nothing less may be bought, whatever it costs."""
        return 0 < self.bought <= self.must

    def turns_at(self, worth: float | None, below: bool) -> float | None:
        """The price of the marginal step at which a tonne of this worth is neither wanted nor refused.

        Inside the take-or-pay quantity not taking a tonne saves only the rest of its price. None where
        no such price changes the volume: a minimum, all paid anyway, no such tonne in this step.
        """
        if worth is None or (self.held if below else self.bought >= self.end):
            return None
        inside = self.bought <= self.committed if below else self.bought < self.committed
        if not inside or not self.committed:
            return worth
        return worth / (1 - self.paid_anyway) if self.paid_anyway < 1 else None

    def next_volume(self, found: Side, below: bool) -> float | None:
        """Where the volume goes just past the price at which it turns; None when that is not known.

        The worth changes there, or what a tonne costs: end of the step, take-or-pay, minimum.
        """
        if found.until is None:
            return None
        near = 1e-9 * self.bought
        if below:
            ends = [v for v in (self.start, self.committed, self.must) if v < self.bought - near and v >= found.until - near]
            return max([*ends, *([found.until] if found.next_slope is not None else [])], default=None)
        ends = [v for v in (self.end, self.committed, self.offered) if v > self.bought + near and v <= found.until + near]
        return min([*ends, *([found.until] if found.next_slope is not None else [])], default=None)


class Value:
    """V(q) of one offer: best margin without any cost of its own, with q kt of it forced in."""

    def __init__(self, neighbours: Neighbours, offer: Offer, tiers: tuple[int, ...]) -> None:
        lp = neighbours.lp
        self.neighbours = neighbours
        self.columns = [lp.column_at["bought", offer.source, str(k), offer.month] for k in tiers]
        own = [*self.columns, *_found(lp.column_at, ("shortfall", offer.source, offer.month))]
        row = lp.row_at.get(("purchase_limit", offer.source, offer.month))
        self.rows = {} if row is None else {row: (-math.inf, math.inf)}
        self.cost = lp.cost.copy()
        self.cost[own] = 0.0

    def __call__(self, volume: float) -> Point | None:
        """V and its slope; None when so much cannot be taken or done without."""
        first, *others = self.columns
        columns = {first: (volume, volume)} | dict.fromkeys(others, (0.0, 0.0))
        solution = self.neighbours.solve(cost=self.cost, rows=self.rows, columns=columns)
        return None if solution is None else Point(volume, solution.objective, solution.reduced_cost(first))


def _found(places: dict[Label, int], label: Label) -> list[int]:
    return [places[label]] if label in places else []


def offers(plan: Plan) -> list[Offer]:
    """Every source of every month."""
    case = plan.quantities.case
    return [_offer(plan, source, month) for month in case.months for source in case.sources]


def _offer(plan: Plan, source: str, month: str) -> Offer:
    q, case = plan.quantities, plan.quantities.case
    limit, pay = case.limits.get(("purchase", source, month)), case.limits.get(("take_or_pay", source, month))
    tiers = case.sources[source].tiers
    ends = list(itertools.accumulate(case.tier_size[source, k, month] for k in tiers))
    offered = limit.high if limit and limit.high is not None else math.inf
    must, committed = limit.low if limit and limit.low else 0.0, pay.low if pay and pay.low else 0.0
    bought = _on(q.bought(source, month), (*ends, offered, must, committed))
    step = next((k for k, end in zip(tiers, ends, strict=True) if bought <= end), tiers[-1])
    return Offer(
        source=source,
        month=month,
        bought=bought,
        offered=offered,
        must=must,
        committed=committed,
        paid_anyway=case.shortfall_pays.get((source, month), 0.0),
        price=case.prices[case.purchase_item(source, tiers[0]), month],
        marginal=case.prices[case.purchase_item(source, step), month],
        start=ends[step - 2] if step > 1 else 0.0,
        end=min(ends[step - 1], offered),
    )


def _on(value: float, places: Sequence[float]) -> float:
    """A value without the rounding that keeps it off one of some places."""
    return next((place for place in places if abs(value - place) <= 1e-9 * place < math.inf), value)


def break_even_prices(plan: Plan, parcels: Sequence[float] | None = None) -> Answer:
    """Entry, exit and parcel break-even prices of every source, bought or not.

    `parcels` are sizes in kt; quarters of what is offered if not given. Prices are per t and in
    the unit in which the source is priced. A parcel's value is what it is worth on average,
    against buying nothing from that source; the last parcel's own value is its increment.
    """
    columns = _columns(plan.currency)
    size = sum(abs(line.amount) for line in plan.lines)
    rows: list[Record] = []
    parcel_rows: list[Record] = []
    for row, own in plan.neighbours.together(lambda: [_of_offer(plan, offer, size, parcels) for offer in offers(plan)]):
        rows.append(row)
        parcel_rows += own
    note = (
        "All else re-optimised, other prices held. A worth below the price of a feed that is bought shows a contract that binds."
    )
    table = Table("break_even", "Break-even prices", columns, rows, note)
    sizes = Table(
        "parcels", "Value of parcels", _parcel_columns(plan.currency), parcel_rows, "Against buying nothing from the source."
    )
    return Answer(
        "break_even", "Break-even prices of feeds", (table, sizes), tuple(_sentence(row, plan.currency) for row in rows), note
    )


def _columns(currency: str) -> tuple[Column, ...]:
    per_tonne = f"{currency}/t"
    return (
        Column("month", "Month"),
        Column("feed", "Feed"),
        Column("source", "Source"),
        Column("bought", "Bought", "kt", "quantity"),
        Column("offered", "Offered", "kt", "quantity"),
        Column("price", "Price", per_tonne, "price"),
        Column("entry", "First tonne worth", per_tonne, "price"),
        Column("exit", "Last tonne planned worth", per_tonne, "price"),
        Column("next", "Next tonne worth", per_tonne, "price"),
        Column("walk_away", "Walk-away price", per_tonne, "price"),
        Column("headroom", "Headroom", per_tonne, "price"),
        Column("step_down", "Next step down", "kt", "quantity"),
        Column("step_up", "Next step up", "kt", "quantity"),
        Column("trade_unit", "Trade unit"),
        Column("price_trade", "Price", "trade unit", "price"),
        Column("walk_away_trade", "Walk-away price", "trade unit", "price"),
        Column("stays_from", "Volume stays from", "trade unit", "price"),
        Column("stays_to", "Volume stays to", "trade unit", "price"),
        Column("paid_anyway", "Paid anyway", "%", "share"),
    )


def _parcel_columns(currency: str) -> tuple[Column, ...]:
    per_tonne = f"{currency}/t"
    return (
        Column("month", "Month"),
        Column("feed", "Feed"),
        Column("source", "Source"),
        Column("size", "Parcel", "kt", "quantity"),
        Column("value", "Worth on average", per_tonne, "price"),
        Column("increment", "Worth of the last part", per_tonne, "price"),
        Column("trade_unit", "Trade unit"),
        Column("value_trade", "Worth on average", "trade unit", "price"),
    )


def _of_offer(plan: Plan, offer: Offer, size: float, parcels: Sequence[float] | None) -> tuple[Record, list[Record]]:
    value = Value(plan.neighbours, offer, plan.quantities.case.sources[offer.source].tiers)
    return _break_even(offer, value, size), _parcels(offer, value, parcels)


def _break_even(offer: Offer, value: Value, size: float) -> Record:
    down, up, entry = _slopes(offer, value, size)
    factor, unit = _trade(offer.marginal)
    feed, _, name = offer.source.partition(".")
    stays_to = offer.turns_at(down.slope, below=True) if offer.bought else None
    stays_from = offer.turns_at(up.slope, below=False)
    walk_away = stays_to if offer.bought else stays_from
    return {
        "month": offer.month,
        "feed": feed,
        "source": name,
        "bought": offer.bought,
        "offered": offer.offered if math.isfinite(offer.offered) else None,
        "price": offer.marginal.value,
        "entry": entry,
        "exit": down.slope,
        "next": up.slope,
        "walk_away": walk_away,
        "headroom": None if walk_away is None else walk_away - offer.marginal.value,
        "step_down": None if stays_to is None else offer.next_volume(down, below=True),
        "step_up": None if stays_from is None else offer.next_volume(up, below=False),
        "trade_unit": unit,
        "price_trade": offer.marginal.value / factor,
        "walk_away_trade": None if walk_away is None else walk_away / factor,
        "stays_from": None if stays_from is None or not offer.bought else stays_from / factor,
        "stays_to": None if stays_to is None else stays_to / factor,
        "paid_anyway": offer.paid_anyway if offer.committed and offer.bought <= offer.committed else None,
        "must_take": offer.held,
        "exit_trade": None if down.slope is None else down.slope / factor,
    }


def _slopes(offer: Offer, value: Value, size: float) -> tuple[Side, Side, float | None]:
    """Worth below and above today's volume, with the next steps, and worth of the first tonne."""
    base = value(offer.bought)
    none = Side(None, None, None)
    if base is None:
        return none, none, None
    whole = offer.offered if math.isfinite(offer.offered) else max(2 * offer.bought, 1.0)
    reach = REACH * whole
    down = side(value, base, -min(offer.bought, reach), size)
    up = side(value, base, max(0.0, min(whole - offer.bought, reach)), size)
    if not offer.bought:
        return down, up, up.slope
    nothing = value(0.0)
    return down, up, None if nothing is None else side(value, nothing, min(offer.bought, reach), size).slope


def _trade(price: Price) -> tuple[float, str]:
    """The unit in which a source is priced, and what one of it is per t."""
    return (price.factor, price.unit) if not price.of else (1.0, price.unit_used)


def _parcels(offer: Offer, value: Value, sizes: Sequence[float] | None) -> list[Record]:
    wanted = list(sizes) if sizes is not None else [q * offer.offered for q in QUARTERS if math.isfinite(offer.offered)]
    nothing = value(0.0) if wanted and max(wanted) > 0 else None
    if nothing is None:
        return []
    factor, unit = _trade(offer.price)
    feed, _, name = offer.source.partition(".")
    rows: list[Record] = []
    before = nothing
    for size in sorted(size for size in wanted if 0 < size <= offer.offered * (1 + 1e-9)):
        point = value(size)
        if point is None:
            break
        average = (point.value - nothing.value) / size
        rows.append(
            {
                "month": offer.month,
                "feed": feed,
                "source": name,
                "size": size,
                "value": average,
                "increment": (point.value - before.value) / (size - before.at),
                "trade_unit": unit,
                "value_trade": average / factor,
            }
        )
        before = point
    return rows


def _sentence(row: Record, currency: str) -> str:
    name, unit = f"{row['month']}: {row['feed']} {row['source']}", row["trade_unit"]
    today, walk_away, paid = f"today {row['price_trade']:,.1f}", row["walk_away_trade"], row["paid_anyway"]
    planned = f"the planned {tonnage(row['bought'])}"
    if row["must_take"]:
        worth = "cannot be left out" if row["exit"] is None else f"is worth {row['exit_trade']:,.1f} {unit}"
        return f"{name}: {planned} must be taken; the last tonne {worth} ({today})."
    if not row["bought"]:
        if row["next"] is None:
            return f"{name} cannot be taken at any price."
        if paid:
            at = "at no price" if walk_away is None else f"below {walk_away:,.1f} {unit}"
            return f"{name} is not bought though {percent(paid)} of the price is paid anyway: it would be {at} ({today})."
        return f"{name} is not bought: its first tonne is worth {walk_away:,.1f} {unit}, {today}."
    if row["exit"] is None:
        return f"{name}: {planned} cannot be done without at any price."
    if walk_away is None:
        return f"{name}: {planned} are paid for in any case ({today})."
    text = f"{name}: buy {planned} up to {walk_away:,.1f} {unit} ({today})"
    if paid:
        text += f", as {percent(paid)} is paid even if it is not taken"
        if row["exit"] < row["price"]:
            text += f"; each tonne taken loses {row['price'] - row['exit']:,.1f} {currency}/t, which is less"
    if row["step_down"] is not None:
        text += f"; above that the next step down is to {tonnage(row['step_down'])}"
    return text + "."


def first_tonne_worths(plan: Plan) -> dict[tuple[str, str], float | None]:
    """Worth of the first tonne of sources whose feed would make what the plan makes nothing of.

    What is not made has a shadow price that may stand anywhere, so these are found by solving with
    a little of the feed forced in. Elsewhere the shadow prices tell, and nothing is solved.
    """
    q, found = plan.quantities, {}
    for offer in offers(plan):
        if _makes_new(plan, offer):
            value = Value(plan.neighbours, offer, q.case.sources[offer.source].tiers)
            none = value(0.0)
            size = min(offer.offered, 1.0) * 1e-3
            moved = sum(abs(line.amount) for line in plan.lines) or 1.0
            slope = None if none is None else side(value, none, size, moved).slope
            found[offer.source, offer.month] = slope
    return found


def _makes_new(plan: Plan, offer: Offer) -> bool:
    """Whether a source that is not bought would make a component that the plan has none of."""
    q, case = plan.quantities, plan.quantities.case
    if offer.bought or case.sources[offer.source].kind != "feeds":
        return False
    parcel = case.parcel_of[offer.source, offer.month]
    modes = [mode for mode, p, _ in case.charges_in[offer.month] if p == parcel]
    made = {c for mode in modes for c, share in case.yields[mode, parcel].items() if share}
    return any(not q.value("component_made", c, offer.month) for c in made)
