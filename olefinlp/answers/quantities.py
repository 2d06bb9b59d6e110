"""The quantities of a plan by the plant's own names, read from a solution."""

from __future__ import annotations

import functools
from dataclasses import dataclass

from olefinlp.inputs.case import Case, Part
from olefinlp.lp.compile import Label, LabelledLp
from olefinlp.lp.solver import Solution

NOISE = 1e-9


@dataclass(frozen=True)
class Quantities:
    """A solution read by label; all in units of the plan (kt, TJ, GWh, h, thousands of money)."""

    case: Case
    lp: LabelledLp
    solution: Solution

    def value(self, *label: str) -> float:
        """A variable; 0.0 for a charge that cannot occur. What is rounding of the solver reads as 0."""
        column = self.lp.column_at[label]
        value = float(self.solution.x[column])
        return 0.0 if abs(value) < NOISE * self.size else value

    @functools.cached_property
    def size(self) -> float:
        """The largest flow of the plan, which decides what is rounding."""
        return float(max((abs(v) for v in self.solution.x.tolist()), default=1.0)) or 1.0

    def reduced_cost(self, *label: str) -> float:
        """Change of the margin per unit forced into a variable that stands at a bound."""
        return float(self.solution.reduced[self.lp.column_at[label]])

    def dual(self, *label: str) -> float:
        """Shadow price of a row, d(margin)/d(limit); 0.0 for a row that was left out."""
        row = self.lp.row_at.get(label)
        return 0.0 if row is None else float(self.solution.row_dual[row])

    def activity(self, label: Label) -> float | None:
        """What a limit's sum comes to; None when nothing of it can occur."""
        row = self.lp.row_at.get(label)
        if row is None:
            return None
        value = float(self.solution.activity[row])
        return 0.0 if abs(value) < NOISE * self.size else value

    def bought(self, source: str, month: str) -> float:
        """Bought from a source over its steps, kt."""
        return sum(self.value("bought", source, str(k), month) for k in self.case.sources[source].tiers)

    def charged(self, mode: str, month: str) -> float:
        """Charged in a mode over its parcels, kt."""
        parcels = self.case.charged_parcels.get((mode, month), ())
        return sum(self.value("charge", mode, parcel, month) for parcel in parcels)

    def outlet(self, outlet: str, month: str) -> float:
        """What goes to an outlet over its cuts, kt or TJ."""
        return sum(self.value("disposition", outlet, cut, month) for cut in self.case.outlets[outlet])

    def stock(self, item: str, month: str) -> float:
        """What is in a tank at the end of a month, kt."""
        data = self.case.stocks[item]
        lines = data.parcels if data.is_feed else (item,)
        return sum(self.value("closing_stock", line, month) for line in lines)

    def total(self, parts: tuple[Part, ...], month: str) -> float:
        """A written sum in one month."""
        return sum(part.coefficient * self.part(part, month) for part in parts)

    def part(self, part: Part, month: str) -> float:
        """What one term of a sum counts."""
        kind, item = part.kind, part.item
        if kind == "charge":
            return self.charged(item[0], month)
        if kind == "outlet":
            return self.outlet(item[0], month)
        if kind == "ingredient":
            return self.value("disposition", item[0], item[1], month)
        if kind == "bought":
            return self.bought(item[0], month)
        name = {"component": "component_made", "cut": "cut_made"}.get(kind, kind)
        return self.value(name, item[0], month)
