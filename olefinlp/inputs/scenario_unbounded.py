"""Limits that are missing: what could be bought, cracked and sold without end."""

from __future__ import annotations

from collections.abc import Iterable, Iterator

from olefinlp.inputs.case import Case, Part
from olefinlp.inputs.findings import Findings
from olefinlp.inputs.scenario_prices import high_of


def recycle_modes(case: Case, cut: str) -> list[str]:
    """The modes that take a cut back into the furnaces."""
    feeds = [feed for feed, own in case.scenario.plant.recycle_feeds().items() if own == cut]
    return [mode for mode in case.modes if case.mode_feed[mode] in feeds]


def check_unbounded(case: Case, findings: Findings) -> None:
    """A source without a maximum meets nothing that ends: no furnace hours, no capacity, no sale.

    Only what is without an end all the way is refused; what is bounded by a clash of several
    limits is left to the plan.
    """
    for month in case.months:
        unlimited = [label for label in case.sources if high_of(case, "purchase", label, month) is None]
        if not unlimited:
            continue
        open_ways = _OpenWays(case, month)
        for label in unlimited:
            source = case.sources[label]
            found = "" if open_ways.capped("bought", label) else open_ways.sale_of(label)
            if found:
                outlet_path = ("outlets", found, "max")
                place = case.scenario.document.place((source.kind, source.feed, source.name, "max"))
                other = case.scenario.document.place(outlet_path)
                message = f"can be unbounded: nothing ends what is bought here and sold as {found} ({other})"
                hint = "write a maximum for one of them, or hours or capacities that they use"
                findings.error(place, f"{source.kind}.{label}.max", message, hint)


class _OpenWays:
    """What can grow without end in one month, from the sources to the sales."""

    def __init__(self, case: Case, month: str) -> None:
        self.case = case
        self.month = month
        self.ends = set(self._sum_ends())
        self.ends |= set(self._utility_ends())
        self.ends |= set(self._unit_ends())
        self.outlets = {name for name in case.outlets if self._outlet_open(name)}
        self.modes = {mode for mode, _, _ in case.charges_in[month] if self._mode_open(mode)}
        self.cuts = set(case.cuts)
        while not self._settle():
            pass

    def capped(self, kind: str, *item: str) -> bool:
        """Whether a quantity uses up something that ends."""
        return (kind, item) in self.ends

    def sale_of(self, label: str) -> str:
        """An outlet to sale through which what is bought of a source leaves without end; empty if none."""
        case, source = self.case, self.case.sources[label]
        if source.kind == "feeds":
            parcel = case.parcel_of[label, self.month]
            ways: list[tuple[str, ...]] = [(m, p) for m, p, _ in case.charges_in[self.month] if m in self.modes and p == parcel]
        else:
            ways = [(source.feed,)] if self._open((source.feed,), case.compositions[source.feed]) else []
        cuts = set().union(*(case.cuts_given[way] for way in ways))
        sales = (name for name in case.sale_tiers if name in self.outlets and cuts & set(case.outlets[name]))
        return next(sales, "")

    def _sum_ends(self) -> Iterator[tuple[str, tuple[str, ...]]]:
        for name, parts in self.case.sums.items():
            if high_of(self.case, "named", name, self.month) is not None:
                yield from self._positive(parts)

    def _unit_ends(self) -> Iterator[tuple[str, tuple[str, ...]]]:
        for name, parts in self.case.unit_parts.items():
            if high_of(self.case, "unit_load", name, self.month) is not None or self.capped("unit_load", name):
                yield from self._positive(parts)

    def _positive(self, parts: Iterable[Part], sign: float = 1.0) -> Iterator[tuple[str, tuple[str, ...]]]:
        yield from ((part.kind, part.item) for part in parts if sign * part.coefficient > 0)

    def _utility_ends(self) -> Iterator[tuple[str, tuple[str, ...]]]:
        """What uses a utility that cannot be had without end, or makes one that cannot leave so."""
        for name, parts in self.case.utilities.items():
            if not self._trades_open(name, ("imports",)) and not self._conversion_open(name):
                yield from self._positive(parts)
            if not self._trades_open(name, ("exports", "emissions")):
                made = self._positive(parts, -1.0)
                yield from ((kind, item) for kind, item in made if kind not in ("outlet", "ingredient"))

    def _trades_open(self, utility: str, kinds: tuple[str, ...]) -> bool:
        trades = [trade for trade, (own, kind) in self.case.trades.items() if own == utility and kind in kinds]
        ended = [high_of(self.case, "trade", trade, self.month) is not None or self.capped("trade", trade) for trade in trades]
        return not all(ended)

    def _conversion_open(self, utility: str) -> bool:
        makers = [name for name, flows in self.case.conversions.items() if flows.get(utility, 0.0) < 0]
        ended = [
            high_of(self.case, "conversion", name, self.month) is not None or self.capped("conversion", name) for name in makers
        ]
        return not all(ended)

    def _outlet_open(self, outlet: str) -> bool:
        case = self.case
        limited = high_of(case, "outlet", outlet, self.month) is not None or self.capped("outlet", outlet)
        blended = any(key[0] == outlet for key in case.specifications)
        mixed = any(self.capped("ingredient", outlet, cut) for cut in case.outlets[outlet])
        return not (limited or blended or mixed)

    def _mode_open(self, mode: str) -> bool:
        case, group = self.case, self.case.mode_group[mode]
        hours = high_of(case, "furnace_hours", group, self.month)
        crews = high_of(case, "decoke_crew_hours", self.month) if case.decoke_hours_per_kt[mode] else None
        return hours is None and crews is None and not self.capped("charge", mode)

    def _open(self, way: tuple[str, ...], shares: dict[str, float]) -> bool:
        """Whether all that a tonne becomes can leave without end."""
        pieces = all(not self.capped("component", c) for c, share in shares.items() if share > 0)
        return pieces and self.case.cuts_given[way] <= self.cuts

    def _settle(self) -> bool:
        """Drop cuts and modes that no longer lead anywhere without end; True when nothing changed."""
        case = self.case
        cuts = {cut for cut in self.cuts if not self.capped("cut", cut) and self._cut_open(cut)}
        ways = {mode: (mode, parcel) for mode, parcel, _ in case.charges_in[self.month]}
        modes = {mode for mode in self.modes if self._open(ways[mode], case.yields[ways[mode]])}
        settled = (cuts, modes) == (self.cuts, self.modes)
        self.cuts, self.modes = cuts, modes
        return settled

    def _cut_open(self, cut: str) -> bool:
        outlets = any(outlet in self.outlets for outlet, cuts in self.case.outlets.items() if cut in cuts)
        return outlets or any(mode in self.modes for mode in recycle_modes(self.case, cut))
