"""What `plant.yaml` holds: the fields, their meaning and their defaults."""

from __future__ import annotations

from typing import Any, Literal

from pydantic import Field

from olefinlp.inputs.fields import (
    FileModel,
    MonthlyMaximum,
    MonthlyQuantity,
    Name,
    NamedLimit,
    Names,
    OneMaximum,
    OneQuantity,
    RatioLimit,
    Text,
    refuse,
)


class YieldsFile(FileModel):
    """A table of yields and what its numbers mean."""

    table: Text = Field(description="csv file beside plant.yaml")
    basis: Literal["once_through", "ultimate"] = Field(description="per pass, or with recycle to extinction inside the numbers")
    source: Text | None = None


class Loss(FileModel):
    """Share of every charge that is lost (flare, decoke carbon, leaks)."""

    share: OneQuantity = Field(description="wt%, 0 wt% if none")
    source: Text


class Feed(FileModel):
    """Something that may be charged to a furnace."""

    density: OneQuantity | None = Field(None, description="needed when bought or limited by volume")
    hydrogen: OneQuantity | None = Field(None, description="hydrogen content, wt%")
    carbon: OneQuantity | None = Field(None, description="carbon content, wt%; the rest to 100 if not written")
    mainly: Name | None = Field(None, description="the component it mainly is")
    lower_heating_value: OneQuantity | None = Field(None, description="GJ/t LHV")
    recycle_of: Name | None = Field(None, description="the cut that comes back as this feed")
    source: Text


class SideStream(FileModel):
    """A bought stream that enters the recovery train without being cracked."""

    composition: dict[Name, OneQuantity] = Field(min_length=1, description="component: wt%")
    density: OneQuantity | None = None
    source: Text


class FurnaceGroup(FileModel):
    """Like furnaces that share their hours."""

    furnaces: int | Literal["unlimited"] = Field(description="how many, or `unlimited`")
    kind: Literal["thermal", "catalytic", "other"]
    yields: Name = Field(description="which yields table the group uses")
    fired_with: Name | None = Field(None, description="utility that carries its fired heat")
    min_load: OneQuantity | None = Field(
        None, description="smallest load of a furnace in use, %; the linear plan does not hold it"
    )
    unplanned_loss: OneQuantity = Field(description="share of the hours lost unplanned, %")
    source: Text


class DecokeCrews(FileModel):
    """How many furnaces may be decoked at the same time."""

    crews: int | Literal["unlimited"]
    source: Text


class Cut(FileModel):
    """Something that leaves the recovery train."""

    balanced_as: Literal["mass", "heat"] = Field("mass", description="heat: leaves as heat of its components")
    valued_by: Literal["price", "content"] = Field("price", description="content: valued by component as a whole")
    content_items: dict[Name, Names] = Field(
        default_factory=dict, description="priced items and their components (with content only)"
    )
    density: OneQuantity | None = None
    lhv_over_hhv: float | None = Field(None, gt=0, le=1, description="lower over higher heating value (heat cuts)")
    source: Text | None = None

    def model_post_init(self, _: Any) -> None:
        """Content items and value by content belong together."""
        if (self.valued_by == "content") != bool(self.content_items):
            raise refuse("`content_items:` and `valued_by: content` belong together")
        if self.valued_by == "content" and self.balanced_as == "heat":
            raise refuse("a cut balanced as heat cannot be valued by content")


class Specification(FileModel):
    """A property of a blend, linear by weight."""

    values: dict[Name, OneQuantity | float] = Field(description="ingredient cut: its value")
    min: OneQuantity | float | None = None
    max: OneQuantity | float | None = None
    source: Text | None = None

    def model_post_init(self, _: Any) -> None:
        """One side at least must be written."""
        if self.min is None and self.max is None:
            raise refuse("needs `min:` or `max:`")


class Outlet(FileModel):
    """Where a cut, or a blend of cuts, goes. Recycle is no outlet: see `recycle_of` of a feed."""

    from_: Names = Field(alias="from", description="cut, or list of cuts to blend")
    to: Literal["sale", "own_use", "flare"]
    specifications: dict[Name, Specification] = Field(default_factory=dict)
    min: MonthlyQuantity | None = Field(None, description="own use and flare only")
    max: MonthlyMaximum | None = Field(None, description="own use and flare only; no limit if not written")
    density: OneQuantity | None = None
    lhv_over_hhv: float | None = Field(None, gt=0, le=1)
    source: Text | None = None

    def model_post_init(self, _: Any) -> None:
        """Limits of a sale belong to the scenario."""
        if self.to == "sale" and (self.min or self.max):
            raise refuse("the limits of a sale stand in the scenario", "move min and max to `outlets:` there")


class Trade(FileModel):
    """A way in or out of a utility."""

    lhv_over_hhv: float | None = Field(None, gt=0, le=1, description="needed when priced on a higher heating value")
    source: Text | None = None


class Utility(FileModel):
    """Fuel, steam, power, treating hydrogen, carbon dioxide: used, made, bought, sold, paid for."""

    measured_in: Literal["heat", "mass", "power"]
    imports: dict[Name, Trade] = Field(default_factory=dict, description="bought")
    exports: dict[Name, Trade] = Field(default_factory=dict, description="sold")
    emissions: dict[Name, Trade] = Field(default_factory=dict, description="paid for")
    source: Text | None = None


class Conversion(FileModel):
    """Turns utilities into others (a boiler). Its activity counts the first thing it makes."""

    makes: dict[Name, OneQuantity] = Field(min_length=1)
    uses: dict[Name, OneQuantity] = Field(min_length=1)
    max: OneMaximum = Field(description="largest activity, or `unlimited`")
    source: Text


class PlantFile(FileModel):
    """The whole of `plant.yaml`."""

    name: Text
    notice: Text | None = None
    source: Text
    date: Text | None = None
    main_product: Name = Field(description="cut per tonne of which margin is shown")
    components: Text = Field(description="csv file")
    yields: dict[Name, YieldsFile] = Field(min_length=1)
    quality_slopes: Text | None = Field(None, description="csv file")
    loss: Loss
    feeds: dict[Name, Feed] = Field(min_length=1)
    side_streams: dict[Name, SideStream] = Field(default_factory=dict)
    furnace_groups: dict[Name, FurnaceGroup] = Field(min_length=1)
    modes: Text = Field(description="csv file")
    decoke_crews: DecokeCrews
    recovery: Text = Field(description="csv file")
    recovery_units: Text | None = Field(None, description="csv file")
    unit_loads: Text | None = Field(None, description="csv file")
    cuts: dict[Name, Cut] = Field(min_length=1)
    outlets: dict[Name, Outlet] = Field(min_length=1)
    ratio_limits: dict[Name, RatioLimit] = Field(default_factory=dict)
    limits: dict[Name, NamedLimit] = Field(default_factory=dict)
    utilities: dict[Name, Utility] = Field(default_factory=dict)
    utility_uses: Text | None = Field(None, description="csv file")
    conversions: dict[Name, Conversion] = Field(default_factory=dict)
    price_windows: dict[str, str] = Field(default_factory=dict, description="item or kind: `100 to 1200 USD/t`")
