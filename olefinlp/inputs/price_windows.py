"""Windows of plausible prices: which items they are of, and what they read as."""

from __future__ import annotations

import re

from olefinlp.inputs.findings import Findings
from olefinlp.inputs.measures import MASS, Measure
from olefinlp.inputs.plant import Plant
from olefinlp.inputs.plant_references import known
from olefinlp.inputs.plant_units import attempt, measurable
from olefinlp.inputs.ratios import outlet_measure, trade_measure
from olefinlp.inputs.units import Basis, Quantity, UnitError, convert, parse_quantity

_WINDOW = re.compile(r"^\s*(\S+)\s+to\s+(\S+)\s+(\S.*?)\s*$")


def check_price_windows(plant: Plant, findings: Findings) -> None:
    """Names and prices of all windows."""
    check_window_names(plant, findings)
    check_window_prices(plant, findings)


def check_window_names(plant: Plant, findings: Findings) -> None:
    """A price window belongs to a kind of item or to one item of the plant."""
    for key in plant.file.price_windows:
        place, path = plant.place("price_windows", key), f"price_windows.{key}"
        parts = key.split(".")
        items = priced_items(plant)
        if not known(findings, place, path, "kind of item", parts[0], items) or len(parts) == 1:
            continue
        one, rest = items[parts[0]], parts[2:]
        if not known(findings, place, path, f"item of {parts[0]}", parts[1], one):
            continue
        if rest and parts[0] == "contents":
            known(findings, place, path, "content item", rest[0], plant.file.cuts[parts[1]].content_items)
        if len(rest) > (1 if parts[0] in ("feeds", "side_streams", "contents") else 0):
            findings.error(place, path, f"`{key}` goes deeper than an item", f"write `{parts[0]}.{parts[1]}`")


def priced_items(plant: Plant) -> dict[str, list[str]]:
    """The items with a price, by the kind that scenarios and price windows call them."""
    file = plant.file
    return {
        "feeds": [name for name, feed in file.feeds.items() if not feed.recycle_of],
        "side_streams": list(file.side_streams),
        "outlets": [name for name, outlet in file.outlets.items() if outlet.to == "sale"],
        "contents": [name for name, cut in file.cuts.items() if cut.valued_by == "content"],
        "utilities": list(plant.trades()),
    }


def price_window(text: str) -> tuple[Quantity, Quantity]:
    """The lowest and highest plausible price.

    Raises `UnitError` when the text is no window.

    >>> [price.text for price in price_window("100 to 1200 USD/t")]
    ['100 USD/t', '1200 USD/t']
    """
    found = _WINDOW.match(text)
    if not found:
        raise UnitError(f"`{text}` is no price window", "write for example `100 to 1200 USD/t`")
    low, high = (parse_quantity(f"{number} {found[3]}") for number in (found[1], found[2]))
    if low.number > high.number:
        raise UnitError(f"`{text}`: the lowest price is above the highest", f"write `{found[2]} to {found[1]} {found[3]}`")
    return low, high


def check_window_prices(plant: Plant, findings: Findings) -> None:
    """A price window reads as two prices of the kind that its items have."""
    for key, text in plant.file.price_windows.items():
        place, path = plant.place("price_windows", key), f"price_windows.{key}"
        window = attempt(findings, place, path, price_window, text)
        measure = window_measure(plant, key)
        if window and measure:
            low = window[0]
            # The currency and the heating values are the scenario's and the item's: only the kind is looked at here.
            basis = Basis(density=1.0, lhv_over_hhv=1.0, currency=low.unit.currency)
            attempt(findings, place, path, convert, low, measure.per, basis, measure.energy)
        elif window and not window[0].unit.currency:
            findings.error(place, path, f"`{text}` is no price", "write for example `100 to 1200 USD/t`")


def window_measure(plant: Plant, key: str) -> Measure | None:
    """What the price of an item is per; None where items of one kind differ (or are not known)."""
    kind, _, item = key.partition(".")
    name = item.partition(".")[0]
    if kind in ("feeds", "side_streams", "contents"):
        return MASS
    if name not in priced_items(plant).get(kind, ()):
        return None
    if kind == "utilities":
        return trade_measure(plant, name)
    return outlet_measure(plant, name) if measurable(plant, "outlet", name) else None
