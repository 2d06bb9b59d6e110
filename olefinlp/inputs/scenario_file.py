"""What a scenario file holds: the fields, their meaning and their defaults."""

from __future__ import annotations

import re
from typing import Annotated, Any, Literal

from pydantic import BeforeValidator, Field

from olefinlp.inputs.fields import (
    FileModel,
    MonthlyMaximum,
    MonthlyNumber,
    MonthlyPrice,
    MonthlyQuantity,
    Name,
    NamedLimit,
    Names,
    OneMaximum,
    OneQuantity,
    RatioLimit,
    Text,
    refuse,
    to_quantity,
)


class Period(FileModel):
    """A calendar month (`2031-03`), or any period with its hours: a day, an hour, a fortnight."""

    name: Text = Field(description="a calendar month needs no hours")
    hours: float | None = Field(None, gt=0, le=100_000, description="length in hours")

    def model_post_init(self, _: Any) -> None:
        """What is no calendar month needs its hours."""
        if self.hours is None and not re.fullmatch(r"\d{4}-(0[1-9]|1[0-2])", self.name):
            raise refuse(f"`{self.name}` is not a month", "write `2031-03`, or `{name: ..., hours: ...}` for another period")


class Tier(FileModel):
    """A step of one contract: up to this much in all, at this price."""

    up_to: OneMaximum = Field(description="cumulative quantity, or `unlimited`")
    price: MonthlyPrice | None = Field(None, description="may stand in the price table instead")


class Source(FileModel):
    """One way to buy a feed or side stream."""

    min: MonthlyQuantity | None = Field(None, description="must be taken; 0 if not written")
    max: MonthlyMaximum | None = Field(None, description="largest purchase, or `unlimited`; the last tier's end with tiers")
    price: MonthlyPrice | None = Field(None, description="delivered to the fence; may stand in the price table instead")
    basis: Text | None = Field(None, description="what the price means: delivered, gallons at 60 F …")
    take_or_pay: MonthlyQuantity | None = Field(None, description="quantity paid for even if not taken")
    shortfall_pays: MonthlyQuantity | None = Field(None, description="share of the price paid for what is not taken, %")
    tiers: tuple[Tier, ...] = Field((), description="steps of the contract, dearest last")
    quality: dict[Name, MonthlyNumber] = Field(default_factory=dict, description="property: value")
    note: Text | None = None

    def model_post_init(self, _: Any) -> None:
        """A source has one price or tiers; a take-or-pay says what it pays."""
        if self.tiers and (self.price or self.max):
            raise refuse("tiers have their own prices and ends", "take `price:` and `max:` away")
        if not self.tiers and self.max is None:
            raise refuse("`max` is missing", "write the largest purchase, or `max: unlimited`")
        if (self.take_or_pay is None) != (self.shortfall_pays is None):
            raise refuse("`take_or_pay:` and `shortfall_pays:` belong together")
        if self.take_or_pay and self.tiers:
            raise refuse("take_or_pay with tiers is not known", "write the tiers as sources of their own")


class SaleOutlet(FileModel):
    """What this scenario says of an outlet to sale."""

    min: MonthlyQuantity | None = Field(None, description="must be delivered; 0 if not written")
    max: MonthlyMaximum | None = Field(None, description="largest sale, or `unlimited`; the last tier's end with tiers")
    price: MonthlyPrice | None = Field(None, description="netback at the fence; may stand in the price table instead")
    deduction: MonthlyPrice | None = Field(None, description="taken off the content value (cuts valued by content)")
    tiers: tuple[Tier, ...] = Field((), description="steps, dearest first")
    basis: Text | None = None
    note: Text | None = None

    def model_post_init(self, _: Any) -> None:
        """One price or tiers; a maximum must be written."""
        if self.tiers and (self.price or self.deduction or self.max):
            raise refuse("tiers have their own prices and ends", "take `price:`, `deduction:` and `max:` away")
        if not self.tiers and self.max is None:
            raise refuse("`max` is missing", "write the largest sale, or `max: unlimited` (`max: 0 kt` closes it)")
        if self.price and self.deduction:
            raise refuse("an outlet has a price or a deduction, not both")


class PricedItem(FileModel):
    """A price and nothing else (content items, indexes)."""

    price: MonthlyPrice | None = None
    density: OneQuantity | None = Field(None, description="needed when an index is priced by volume")
    basis: Text | None = None
    note: Text | None = None


class TradeTerms(FileModel):
    """What this scenario says of a utility's import, export or emission."""

    min: MonthlyQuantity | None = Field(None, description="0 if not written")
    max: MonthlyMaximum = Field(description="largest amount, or `unlimited`; for an emission its cap")
    price: MonthlyPrice | None = Field(None, description="may stand in the price table instead")
    basis: Text | None = None
    note: Text | None = None


class VariableCost(FileModel):
    """A cost that grows with what is done."""

    of: Literal["charge", "decoke", "outlet", "cut", "unit_load", "conversion"]
    item: Names = Field(description="name(s), or `all` (charge and decoke)")
    cost: MonthlyPrice | None = Field(None, description="may stand in the price table instead")
    note: Text | None = None


class UnitFactor(FileModel):
    """A recovery unit that can do more or less than its capacity in one month."""

    month: Text
    unit: Name
    factor: float = Field(ge=0, le=5, description="times capacity")
    reason: Text


class Outage(FileModel):
    """Furnace-hours lost to planned work in one month."""

    month: Text
    group: Name
    hours: OneQuantity = Field(description="furnace-hours, for example `120 h`")
    reason: Text


class EndAtLeast(FileModel):
    """The last closing stock is at least this."""

    at_least: OneQuantity


class EndValue(FileModel):
    """The last closing stock is worth this much per tonne."""

    value: OneQuantity


def _as_end(value: Any) -> Any:
    if value == "at least opening" or isinstance(value, (EndAtLeast, EndValue)):
        return value
    if isinstance(value, dict) and set(value) == {"at_least"}:
        return EndAtLeast(at_least=to_quantity(value["at_least"]))
    if isinstance(value, dict) and set(value) == {"value"}:
        return EndValue(value=to_quantity(value["value"]))
    raise refuse("is no end rule", "write `at least opening`, `{at_least: 10 kt}` or `{value: 500 USD/t}`")


EndRule = Annotated[Literal["at least opening"] | EndAtLeast | EndValue, BeforeValidator(_as_end)]


class Stock(FileModel):
    """A tank of a feed or cut."""

    opening: OneQuantity = Field(description="what is in it and free for this plan")
    min: MonthlyQuantity = Field(description="smallest closing stock")
    max: MonthlyQuantity = Field(description="largest closing stock")
    holding: MonthlyPrice | None = Field(
        None, description="cost of a tonne held to the end of a month; may stand in the price table instead"
    )
    end: EndRule = Field(description="what the last closing stock must be or is worth")
    quality: dict[Name, float] = Field(default_factory=dict, description="properties of the opening stock")
    note: Text | None = None


def _as_period(value: Any) -> Any:
    return value if isinstance(value, (dict, Period)) else {"name": str(value)}


PeriodWritten = Annotated[Period, BeforeValidator(_as_period, json_schema_input_type=str | Period)]


class ScenarioFile(FileModel):
    """The whole of a scenario file."""

    title: Text
    plant: Text = Field(description="folder of the plant, from this file")
    currency: Annotated[str, Field(pattern="^[A-Z]{3}$")] = Field(description="ISO code")
    exchange_rates: dict[str, OneQuantity] = Field(default_factory=dict, description="`EUR: 1.08 USD`: one EUR in USD")
    months: tuple[PeriodWritten, ...] = Field(min_length=1, description="`2031-03`, or `{name: hour, hours: 1}`")
    prices: Text | None = Field(None, description="csv file with one column per price case")
    price_case: Text | None = Field(None, description="which column of it")
    feeds: dict[Name, dict[Name, Source]] = Field(default_factory=dict)
    side_streams: dict[Name, dict[Name, Source]] = Field(default_factory=dict)
    outlets: dict[Name, SaleOutlet] = Field(default_factory=dict)
    contents: dict[Name, dict[Name, PricedItem]] = Field(default_factory=dict)
    utilities: dict[Name, TradeTerms] = Field(default_factory=dict)
    variable_costs: dict[Name, VariableCost] = Field(default_factory=dict)
    fixed_costs: dict[Name, MonthlyQuantity] = Field(default_factory=dict)
    indexes: dict[Name, PricedItem] = Field(default_factory=dict)
    unit_factors: tuple[UnitFactor, ...] = ()
    outages: tuple[Outage, ...] = ()
    stocks: dict[Name, Stock] = Field(default_factory=dict)
    limits: dict[Name, NamedLimit] = Field(default_factory=dict)
    ratio_limits: dict[Name, RatioLimit] = Field(default_factory=dict)

    def model_post_init(self, _: Any) -> None:
        """A price table and its case belong together."""
        if (self.prices is None) != (self.price_case is None):
            raise refuse("`prices:` and `price_case:` belong together")
