"""The kinds of field that the files are made of: quantities, per-month values, prices, terms."""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass
from typing import Annotated, Any, Generic, TypeVar

from pydantic import BaseModel, ConfigDict, Field, PlainSerializer, PlainValidator, WithJsonSchema
from pydantic_core import PydanticCustomError

from olefinlp.inputs.units import Quantity, UnitError, parse_quantity

T = TypeVar("T")
NAME = r"^[A-Za-z][A-Za-z0-9_]*$"
UNLIMITED = "unlimited"
RELATIVE = frozenset(("of", "times", "plus", "freight"))


class FileModel(BaseModel):
    """Base of everything read from YAML: frozen, unknown names refused."""

    model_config = ConfigDict(extra="forbid", frozen=True, arbitrary_types_allowed=True, defer_build=True)


@dataclass(frozen=True)
class Monthly(Generic[T]):
    """A value for every month, or one per month with an optional rest (`other_months`)."""

    always: T | None
    by_month: tuple[tuple[str, T], ...] = ()

    def at(self, month: str) -> T | None:
        """The value in a month; None when that month is not written."""
        return dict(self.by_month).get(month, self.always)

    def values(self) -> list[T]:
        """All values written."""
        rest = [] if self.always is None else [self.always]
        return rest + [value for _, value in self.by_month]

    @property
    def text(self) -> str | dict[str, str]:
        """The value as written."""
        if not self.by_month:
            return str(self.always)
        rest = {} if self.always is None else {"other_months": str(self.always)}
        return {month: str(value) for month, value in self.by_month} | rest


@dataclass(frozen=True)
class PriceWritten:
    """A price as written: a quantity, or another price times a factor plus amounts."""

    quantity: Quantity | None
    of: str = ""
    times: float = 1.0
    plus: Quantity | None = None
    freight: Quantity | None = None

    def __str__(self) -> str:
        if self.quantity:
            return str(self.quantity)
        parts = [f"{self.times:g} × {self.of}" if self.times != 1 else self.of]
        parts += [f"plus {part}" for part in (self.plus, self.freight) if part]
        return " ".join(parts)


def refuse(message: str, hint: str = "") -> PydanticCustomError:
    """A validation error with a hint, in a form that pydantic carries."""
    return PydanticCustomError("written", "{message}", {"message": message, "hint": hint})


def to_quantity(value: Any) -> Quantity:
    """A quantity from `30 kt`."""
    if isinstance(value, Quantity):
        return value
    if isinstance(value, bool) or not isinstance(value, (str, int, float)):
        raise refuse("a number with its unit is needed", "write for example `30 kt`")
    try:
        return parse_quantity(str(value))
    except UnitError as error:
        raise refuse(str(error), error.hint) from None


def to_cap(value: Any) -> Quantity | None:
    """A quantity, or None for `unlimited`."""
    return None if value == UNLIMITED or value is None else to_quantity(value)


@dataclass(frozen=True)
class Cap:
    """A maximum: a quantity, or none because `unlimited` is written."""

    quantity: Quantity | None

    def __str__(self) -> str:
        return str(self.quantity) if self.quantity else UNLIMITED


def to_maximum(value: Any) -> Cap:
    """A maximum as written."""
    if isinstance(value, Cap):
        return value
    if value is None:
        raise refuse("is empty", f"write a quantity, or `{UNLIMITED}`")
    return Cap(to_cap(value))


def to_number(value: Any) -> float:
    """A pure number."""
    if isinstance(value, bool) or not isinstance(value, (int, float)):
        raise refuse(f"`{value}` is not a number", "write a number without a unit")
    if abs(value) > 1e15:
        raise refuse(f"`{value}` is too large a number")
    return float(value)


def to_price(value: Any) -> PriceWritten:
    """A price: `41 USc/gal`, or `{of: outlets.x, times: 0.8, plus: -2 USc/lb, freight: 18 USD/t}`."""
    if isinstance(value, PriceWritten):
        return value
    if not isinstance(value, dict):
        return PriceWritten(to_quantity(value))
    unknown = set(value) - RELATIVE
    if unknown:
        raise refuse(f"unknown name `{sorted(unknown)[0]}`; a relative price takes: of, times, plus, freight")
    if not isinstance(value.get("of"), str):
        raise refuse("a relative price needs `of:`, the item it leans on", "for example `of: outlets.<outlet>`")
    return PriceWritten(
        None,
        value["of"],
        to_number(value["times"]) if "times" in value else 1.0,
        to_quantity(value["plus"]) if "plus" in value else None,
        to_quantity(value["freight"]) if "freight" in value else None,
    )


def monthly(read: Callable[[Any], T]) -> Callable[[Any], Monthly[T]]:
    """A reader of one value for all months, or of `{2031-08: ..., other_months: ...}`."""

    def reader(value: Any) -> Monthly[T]:
        if isinstance(value, Monthly):
            return value
        if not isinstance(value, dict) or not RELATIVE.isdisjoint(value):
            return Monthly(read(value))
        rest = read(value["other_months"]) if "other_months" in value else None
        by_month = tuple((str(month), read(v)) for month, v in value.items() if month != "other_months")
        return Monthly(rest, by_month)

    return reader


def _schema(description: str, *extra: dict[str, Any]) -> WithJsonSchema:
    text = {"type": "string", "pattern": r"^\s*[-+0-9.].*$|^unlimited$", "examples": ["30 kt"]}
    month = {"type": "object", "additionalProperties": {"anyOf": [{"type": "number"}, {"type": "string"}, *extra]}}
    return WithJsonSchema({"anyOf": [text, month, *extra], "description": description})


_AS_TEXT = PlainSerializer(lambda v: v.text if isinstance(v, Monthly) else str(v))
_RELATIVE = {
    "type": "object",
    "properties": {
        "of": {"type": "string"},
        "times": {"type": "number"},
        "plus": {"type": "string"},
        "freight": {"type": "string"},
    },
    "required": ["of"],
    "additionalProperties": False,
}
_NUMBER_SCHEMA = WithJsonSchema({"anyOf": [{"type": "number"}, {"type": "object", "additionalProperties": {"type": "number"}}]})

OneQuantity = Annotated[
    Quantity,
    PlainValidator(to_quantity),
    _AS_TEXT,
    WithJsonSchema({"type": "string", "description": "number and unit, for example `30 kt`"}),
]
OneMaximum = Annotated[
    Cap,
    PlainValidator(to_maximum),
    _AS_TEXT,
    WithJsonSchema({"type": "string", "description": "number and unit, or `unlimited`"}),
]
MonthlyQuantity = Annotated[
    Monthly[Quantity], PlainValidator(monthly(to_quantity)), _AS_TEXT, _schema("number and unit, or one per month")
]
MonthlyMaximum = Annotated[
    Monthly[Cap], PlainValidator(monthly(to_maximum)), _AS_TEXT, _schema("number and unit, `unlimited`, or one per month")
]
MonthlyNumber = Annotated[Monthly[float], PlainValidator(monthly(to_number)), _AS_TEXT, _NUMBER_SCHEMA]
MonthlyPrice = Annotated[
    Monthly[PriceWritten],
    PlainValidator(monthly(to_price)),
    _AS_TEXT,
    _schema("price with its unit, or `{of: item, times, plus, freight}`, or one per month", _RELATIVE),
]


def _names(value: Any) -> tuple[str, ...]:
    items = value if isinstance(value, (list, tuple)) else [value]
    if not items or not all(isinstance(item, str) and item for item in items):
        raise refuse("a name, or a list of names, is needed")
    return tuple(items)


Names = Annotated[
    tuple[str, ...],
    PlainValidator(_names),
    WithJsonSchema({"anyOf": [{"type": "string"}, {"type": "array", "items": {"type": "string"}}]}),
]


def _name(value: Any) -> str:
    if not isinstance(value, str) or not re.match(NAME, value):
        raise refuse(f"`{value}` is not a name", "letters, digits and _ only, a letter first")
    return value


Name = Annotated[str, PlainValidator(_name), WithJsonSchema({"type": "string", "pattern": NAME})]
Text = Annotated[str, Field(min_length=1)]

TERM_KINDS = ("bought", "charged", "component", "cut", "sold", "unit_load", "imported", "exported", "emitted", "converted")


class Term(FileModel):
    """One part of a sum: exactly one of the quantities below, times a number."""

    bought: Names | None = Field(None, description="feed, feed.source, side stream or side_stream.source bought")
    charged: Names | None = Field(None, description="feed, group.feed, group, or all: charged to furnaces")
    component: Names | None = Field(None, description="component in the cracked gas")
    cut: Names | None = Field(None, description="cut made")
    sold: Names | None = Field(None, description="what goes to an outlet")
    unit_load: Names | None = Field(None, description="load of a recovery unit")
    imported: Names | None = Field(None, description="utility import")
    exported: Names | None = Field(None, description="utility export")
    emitted: Names | None = Field(None, description="emission")
    converted: Names | None = Field(None, description="activity of a conversion")
    times: float = Field(1.0, description="factor, 1 if not written")

    def model_post_init(self, _: Any) -> None:
        """Exactly one kind must be written."""
        if sum(getattr(self, kind) is not None for kind in TERM_KINDS) != 1:
            raise refuse("a term takes exactly one of: " + ", ".join(TERM_KINDS))

    @property
    def kind(self) -> str:
        """Which quantity the term counts."""
        return next(kind for kind in TERM_KINDS if getattr(self, kind) is not None)

    @property
    def names(self) -> tuple[str, ...]:
        """The names it counts."""
        names: tuple[str, ...] = getattr(self, self.kind)
        return names


class RatioLimit(FileModel):
    """One sum held to a multiple of another, multiplied out so that it stays linear."""

    of: tuple[Term, ...] = Field(min_length=1, description="terms above the line")
    to: tuple[Term, ...] = Field(min_length=1, description="terms below the line")
    at_most: float | None = Field(None, description="largest ratio")
    at_least: float | None = Field(None, description="smallest ratio")
    source: Text | None = Field(None, description="where the number comes from")

    def model_post_init(self, _: Any) -> None:
        """One side at least must be written."""
        if self.at_most is None and self.at_least is None:
            raise refuse("needs `at_most:` or `at_least:`")


class NamedLimit(FileModel):
    """A minimum or maximum on a written sum of quantities of one unit."""

    sum: tuple[Term, ...] = Field(min_length=1, description="terms, all of one unit")
    min: MonthlyQuantity | None = Field(None, description="smallest sum")
    max: MonthlyMaximum | None = Field(None, description="largest sum, or `unlimited`")
    source: Text | None = Field(None, description="where the number comes from")

    def model_post_init(self, _: Any) -> None:
        """One side at least must be written."""
        if self.min is None and self.max is None:
            raise refuse("needs `min:` or `max:`")
