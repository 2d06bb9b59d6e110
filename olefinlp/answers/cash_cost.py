"""Cash cost of the main product, net of co-products: of the whole plant and of each feed.

Whole plant: (all costs − all revenue other than the main product's) / main product made, from the
plan's own money lines. Fixed cost is no cash that a plan decides and is left out.

Per feed at today's prices, the plan is taken apart into what each feed brings: its charges, the
components and cuts from them, the cuts that are cracked again (until nothing is left: a small
linear system), the way of each cut to its outlets and stocks, loads and utilities. Everything is
shared as the plan does it: a recycle over its modes, a cut over its outlets, an outlet over its
price steps, each in the plan's own proportions. The parts sum to the plan, so the costs do too.

* A utility is shared by net use (uses less what the feed makes): imports, exports, conversions and
  emissions follow it, so the feed pays their average price and the emissions that imports cause.
  When a utility is bought and sold at once, the smaller side is a line of its own. When it is
  neither, one feed uses what another makes: that passes at its shadow price and sums to nothing.
* A cut valued by content is valued by the feed's own components, less the average deduction.
* A feed costs the average price paid for it; out of a tank, the average of what is in the tank
  (what was there at first counts at the first month's average price paid, else the lowest offer).
* Fixed uses, take-or-pay payments, holding, stock at the end and changes of stocks are lines of
  their own, without a cost per tonne.

At today's worths the same tonnes are valued at shadow prices: cuts at the worth of one more tonne,
utilities at theirs, and hours, loads, ratios and other limits at theirs. As used modes have no
reduced cost,

    cost − worth of the main product made = paid for the feed − worth of the feed at the gate,

so a feed that is bought up to its price makes the main product at exactly what it is worth.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

from olefinlp.answers import money
from olefinlp.answers.answer import Answer
from olefinlp.answers.money import MoneyLine, money_lines
from olefinlp.answers.quantities import Quantities
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.answers.why_not import (
    BUYING,
    CREWS,
    EMISSIONS,
    FEED,
    FIRING,
    FURNACES,
    GATE,
    LIMITS,
    PRODUCTS,
    UNITS,
    UTILITIES,
    VARIABLE,
    Share,
    Term,
    part_of,
    terms,
)
from olefinlp.inputs.case import Case
from olefinlp.inputs.units import per_lb
from olefinlp.lp.compile import Floats, Label

if TYPE_CHECKING:
    from olefinlp.answers.plan import Plan

PRICES, WORTHS = "today's prices", "today's worths"
WHOLE, ALL_MONTHS = "whole plant", "all months"
FIXED, PAYMENTS, HELD = "fixed uses", "take-or-pay payments", "stocks held"
COSTS = ("feed_cost", "co_products", "utilities", "passed", "emissions", "variable_costs", "limits", "other")
AGREES = 1e-7
_COST_OF_GROUP = {
    money.SALES: "co_products",
    money.CONTENT: "co_products",
    money.EXPORTS: "utilities",
    money.IMPORTS: "utilities",
    money.PURCHASES: "feed_cost",
    money.EMISSIONS: "emissions",
    money.VARIABLE: "variable_costs",
    money.SHORTFALL: "other",
    money.HOLDING: "other",
    money.END_VALUE: "other",
}
_COST_OF_TERM = {
    PRODUCTS: "co_products",
    FEED: "co_products",
    FIRING: "utilities",
    UTILITIES: "utilities",
    EMISSIONS: "emissions",
    VARIABLE: "variable_costs",
    **dict.fromkeys((BUYING, FURNACES, CREWS, UNITS, LIMITS), "limits"),
}


@dataclass
class CostLine:
    """One line of the account of a month: kt charged and of main product, costs in thousands (credits −)."""

    month: str
    name: str
    basis: str
    charged: float = 0.0
    main: float = 0.0
    costs: dict[str, float] = field(default_factory=lambda: dict.fromkeys(COSTS, 0.0))
    main_worth: float | None = None
    feed_worth: float | None = None

    @property
    def cost(self) -> float:
        """All costs less all credits, thousands of the currency."""
        return math.fsum(self.costs.values())


@dataclass(frozen=True, slots=True)
class Credit:
    """What one co-product brings: kt or TJ, worth per t or GJ, thousands of the currency."""

    month: str
    name: str
    basis: str
    item: str
    quantity: float
    unit: str
    amount: float


# ---------------------------------------------------------------------------------- the plan taken apart


class Parts:
    """A month of the plan as a sum of parts, one for each feed and for each line of its own.

    `x[name]` are values of the plan's variables; over all names they sum to the plan.
    """

    def __init__(self, plan: Plan, month: str) -> None:
        self.plan, self.month, self.case = plan, month, plan.quantities.case
        self.x: dict[str, Floats] = {}
        self.passed: dict[str, float] = {}
        self.opening = {k: _opening(plan.quantities, k, month) for k in self.case.cuts}
        self._start()
        self._crack_again()
        self._dispose()
        self._load_units()
        self._share_utilities()

    def value(self, *label: str) -> float:
        """A variable of the whole plan."""
        return self.plan.quantities.value(*label)

    def share(self, name: str) -> Share:
        """A part, read like the plan."""
        return part_of(self.plan, self.x[name])

    def _part(self, name: str) -> Floats:
        return self.x.setdefault(name, np.zeros(len(self.plan.lp.columns)))

    def _put(self, name: str, label: Label, value: float) -> None:
        if value:
            self._part(name)[self.plan.lp.column_at[label]] += value
