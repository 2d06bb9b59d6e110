"""Quantities as written, and the only place where a unit is turned into another.

A unit is one of a strict list (`SYMBOLS`), combined with `/`, then `LHV` or `HHV` where it is
heat. Factors come from pint with our own definition file (`units.txt`); what joins mass to
volume (density), upper to lower heating value, and a rate to a period is always an argument.

Base units: t, m3, kNm3, GJ (LHV), MWh, h, and whole units of the scenario's currency.
"""

from __future__ import annotations

import contextlib
import functools
import math
import re
import sys
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Literal

from olefinlp.inputs.currencies import ISO_CODES
from olefinlp.inputs.findings import near_name

EnergyKind = Literal["heat", "power"]
Dimensions = tuple[tuple[str, int], ...]

SHARES = {"fraction": 1.0, "%": 0.01, "wt%": 0.01, "mol%": 0.01, "vol%": 0.01, "ppm": 1e-6}
TEMPERATURES = ("degC", "degF", "K")
ELECTRIC = ("kWh", "MWh", "GWh", "kW", "MW")
SYMBOLS = (
    *("g", "kg", "t", "kt", "lb", "klb", "MMlb", "short_ton", "long_ton"),
    *("L", "m3", "gal", "bbl", "kbbl"),
    *("Nm3", "kNm3", "MNm3", "scf", "Mscf", "MMscf"),
    *("kJ", "MJ", "GJ", "TJ", "Btu", "MMBtu", "Gcal", *ELECTRIC),
    *("h", "d", "month", "year"),
    *("mol", "kmol"),
)
MONEY_PREFIXES = {"": 1.0, "c": 0.01, "k": 1e3, "M": 1e6}
NOT_A_UNIT = {
    "MT": "write `t` (tonne) or `kt`",
    "Mt": "write `kt` (a megatonne is 1000 kt)",
    "MBtu": "write `MMBtu` for a million Btu; in the gas trade MBtu is a thousand",
    "barrel": "write `bbl`",
    "gallon": "write `gal`",
    "ton": "write `t`, `short_ton` or `long_ton`",
    "tons": "write `t`, `short_ton` or `long_ton`",
    "tonne": "write `t`",
    "mmbtu": "write `MMBtu`",
    "hr": "write `h`",
    "day": "write `d`",
    "y": "write `year`",
    "c": "write `USc` for US cents, `cEUR` for cents of another currency",
    "cents": "write `USc` for US cents, `cEUR` for cents of another currency",
}
_NUMBER = re.compile(r"^\s*([+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)\s*(.*?)\s*$", re.ASCII)
_LB_PER_TONNE = 1 / 0.00045359237
_GJ_PER_MWH = 3.6


class UnitError(ValueError):
    """A quantity cannot be read or turned into what is needed; `hint` says what to write."""

    def __init__(self, message: str, hint: str = "") -> None:
        super().__init__(message)
        self.hint = hint


@dataclass(frozen=True, slots=True)
class Unit:
    """A unit from the strict list: `factor` turns a number into base units of `dimensions`."""

    text: str
    factor: float
    dimensions: Dimensions
    currency: str = ""
    basis: str = ""
    electric: bool = False
    share: str = ""


@dataclass(frozen=True, slots=True)
class Quantity:
    """A number with its unit, as a person wrote it.

    >>> parse_quantity("41 USc/gal").unit.currency
    'USD'
    """

    number: float
    unit: Unit
    text: str

    def __str__(self) -> str:
        return self.text


@contextlib.contextmanager
def _without(name: str) -> Iterator[None]:
    """Hide a library from an import that would only look whether it is there.

    pint looks for scipy, and where Pyomo is loaded that look alone loads all of scipy: 2 s.
    """
    if name in sys.modules:
        yield
        return
    sys.modules[name] = None  # type: ignore[assignment]
    try:
        yield
    finally:
        sys.modules.pop(name, None)


@functools.cache
def _registry() -> object:
    with _without("scipy"):
        import pint

    return pint.UnitRegistry(str(Path(__file__).with_name("units.txt")), cache_folder=None)


@functools.cache
def _symbol(symbol: str) -> tuple[float, Dimensions]:
    """Factor to base units and dimensions of one symbol of the list, from pint."""
    registry = _registry()
    factor, base = registry.get_base_units(symbol)  # type: ignore[attr-defined]
    dimensions = registry.get_dimensionality(base)  # type: ignore[attr-defined]
    pairs = sorted((str(name).strip("[]"), int(power)) for name, power in dimensions.items())
    return float(factor), tuple(pairs)


def _money(symbol: str) -> tuple[float, str] | None:
    """Factor and ISO code of `USD`, `kUSD`, `MUSD`, `cUSD` or `USc`; None if it is no money."""
    if symbol == "USc":
        return 0.01, "USD"
    prefix, code = symbol[:-3], symbol[-3:]
    if code in ISO_CODES and prefix in MONEY_PREFIXES:
        return MONEY_PREFIXES[prefix], code
    return None


def _unknown(symbol: str, whole: str) -> UnitError:
    """What is wrong with a symbol, and the one that was probably meant."""
    if symbol in (*SHARES, *TEMPERATURES):
        return UnitError(f"`{symbol}` cannot be part of another unit, as in `{whole}`", f"write `{symbol}` alone")
    if not symbol:
        return UnitError(f"`{whole}` is not a unit of the list", "write for example `USD/t` or `GJ/t LHV`")
    same = [known for known in (*SYMBOLS, *ISO_CODES) if known.lower() == symbol.lower()]
    hint = NOT_A_UNIT.get(symbol) or (f"write `{same[0]}`" if same else "") or near_name(symbol, (*SYMBOLS, *SHARES, "USc"))
    money = "money is an ISO code, for example `USD/t` or `EUR/MWh`" if re.fullmatch(r"[A-Za-z]{3}", symbol) else ""
    return UnitError(f"`{symbol}` is not a unit of the list", hint or money or "see the list of units in models/README.md")


@functools.cache
def parse_unit(text: str) -> Unit:
    """Read a unit of the strict list.

    >>> parse_unit("USD/MMBtu HHV").basis
    'HHV'
    >>> parse_unit("ton")
    Traceback (most recent call last):
    ...
    olefinlp.inputs.units.UnitError: `ton` is not a unit of the list
    """
    words = text.split()
    basis = words.pop() if len(words) > 1 and words[-1] in ("LHV", "HHV") else ""
    if len(words) != 1:
        raise UnitError(f"`{text}` is not a unit of the list", "write for example `USD/t` or `GJ/t LHV`")
    factor, powers, currency, electric, share = 1.0, dict[str, int](), "", False, ""
    for position, symbol in enumerate(words[0].split("/")):
        sign = 1 if position == 0 else -1
        if symbol in SHARES and words[0] == symbol:
            return Unit(text, SHARES[symbol], (), share=symbol)
        if symbol in TEMPERATURES and words[0] == symbol:
            return Unit(text, 1.0, (("temperature", 1),), share=symbol)
        money = _money(symbol)
        if money:
            size, currency = money
            dimensions: Dimensions = (("currency", 1),)
        elif symbol in SYMBOLS:
            size, dimensions = _symbol(symbol)
            electric = electric or symbol in ELECTRIC
        else:
            raise _unknown(symbol, words[0])
        factor *= size**sign
        for name, power in dimensions:
            powers[name] = powers.get(name, 0) + sign * power
    kept = tuple(sorted((name, power) for name, power in powers.items() if power))
    if basis and "energy" not in powers:
        raise UnitError(f"`{text}` has a heating basis but no energy", "take LHV or HHV away")
    return Unit(text, factor, kept, currency, basis, electric and not basis, share)


@functools.cache
def parse_quantity(text: str) -> Quantity:
    """Read `number unit`; a number alone is refused.

    >>> parse_quantity("30 kt").number
    30.0
    >>> parse_quantity("1,5 kt")
    Traceback (most recent call last):
    ...
    olefinlp.inputs.units.UnitError: `1,5 kt` is not a number with a unit
    """
    found = _NUMBER.match(text)
    if not found or found[2][:1] in (",", ".") or found[2][:1].isdigit():
        raise UnitError(
            f"`{text}` is not a number with a unit", "write for example `30 kt` (a point for decimals, no thousands mark)"
        )
    number = float(found[1])
    if not math.isfinite(number):
        raise UnitError(f"`{text}` is too large a number")
    if not found[2]:
        raise UnitError(f"`{text}` has no unit", "write the unit beside the number, for example `30 kt`")
    return Quantity(number, parse_unit(found[2]), text.strip())


@dataclass(frozen=True)
class Basis:
    """What joins units that are not the same kind: all of it written by a person, nothing assumed.

    `density` t/m3 · `lhv_over_hhv` GJ LHV per GJ HHV · `hours` of the period · `calendar_month`
    whether that period is one calendar month · `currency` of the scenario · `rates` value of one
    unit of another currency in it.
    """

    density: float | None = None
    lhv_over_hhv: float | None = None
    hours: float | None = None
    calendar_month: bool = False
    currency: str = ""
    rates: Mapping[str, float] = field(default_factory=dict)


NO_BASIS = Basis()
_WORDS = {
    "mass": "mass (t, lb …)",
    "volume": "volume",
    "gas_volume": "gas volume (kNm3 …)",
    "energy": "energy (GJ, MWh …)",
    "time": "time",
    "calendar_month": "month",
    "currency": "money",
    "temperature": "temperature",
    "substance": "moles",
}


def _described(dimensions: Mapping[str, int]) -> str:
    up = [_WORDS[n] for n, p in dimensions.items() if p > 0] or ["a number"]
    down = [_WORDS[n] for n, p in dimensions.items() if p < 0]
    return " per ".join([" × ".join(up), *down])


def convert(quantity: Quantity, want: Dimensions, basis: Basis = NO_BASIS, energy: EnergyKind = "heat") -> float:
    """The quantity in base units of the wanted dimensions.

    Volume becomes mass through the density, HHV becomes LHV through their ratio, a rate becomes
    an amount through the hours of the period. `energy` says whether an energy is heat (a basis
    must be written) or electric power (MWh, no basis).

    >>> price = parse_quantity("5.0 USD/MMBtu HHV")
    >>> round(convert(price, (("currency", 1), ("energy", -1)), Basis(lhv_over_hhv=0.9015, currency="USD")), 3)
    5.257
    """
    unit = quantity.unit
    value = quantity.number * unit.factor
    have, wanted = dict(unit.dimensions), dict(want)
    value *= _volume_factor(have, wanted, basis)
    value *= _period_factor(have, wanted, basis)
    if have != wanted:
        raise UnitError(
            f"`{quantity.text}` is {_described(have)}, but {_described(wanted)} is needed here",
            "see the list of units in models/README.md",
        )
    value *= _energy_factor(unit, wanted, basis, energy)
    value *= _money_factor(unit, basis)
    if not math.isfinite(value):
        raise UnitError(f"`{quantity.text}` is too large a number")
    return value


def _volume_factor(have: dict[str, int], wanted: Mapping[str, int], basis: Basis) -> float:
    power = have.get("volume", 0)
    if not power or wanted.get("volume"):
        return 1.0
    if basis.density is None:
        raise UnitError("a volume needs a density to become a mass", "write `density: ... kg/m3` for this item in the plant")
    del have["volume"]
    have["mass"] = have.get("mass", 0) + power
    if not have["mass"]:
        del have["mass"]
    return float(basis.density**power)


def _period_factor(have: dict[str, int], wanted: Mapping[str, int], basis: Basis) -> float:
    factor = 1.0
    if have.get("time", 0) == -1 and not wanted.get("time"):
        if basis.hours is None:
            raise UnitError("a rate is not known here", "write the amount without `/h` or `/d`")
        del have["time"]
        factor = basis.hours
    if have.get("calendar_month", 0) == -1 and not wanted.get("calendar_month"):
        if not basis.calendar_month:
            raise UnitError("`/month` is for periods that are a calendar month", "write the amount per h or d")
        del have["calendar_month"]
    return factor


def _energy_factor(unit: Unit, wanted: Mapping[str, int], basis: Basis, energy: EnergyKind) -> float:
    power = wanted.get("energy", 0)
    if not power:
        return 1.0
    if energy == "power":
        if unit.basis:
            raise UnitError(f"electric power has no heating basis `{unit.basis}`", "take LHV or HHV away")
        return float(_GJ_PER_MWH**-power)
    if not unit.basis:
        raise UnitError(f"`{unit.text}` does not say its heating basis", f"write `{unit.text} LHV` or `{unit.text} HHV`")
    if unit.basis == "LHV":
        return 1.0
    if basis.lhv_over_hhv is None:
        raise UnitError(
            "a higher heating value (HHV) needs the ratio to the lower one",
            "write `lhv_over_hhv:` for this item in the plant, or give the value as LHV",
        )
    return float(basis.lhv_over_hhv**power)


def _money_factor(unit: Unit, basis: Basis) -> float:
    if not unit.currency or unit.currency == basis.currency:
        return 1.0
    if unit.currency in basis.rates:
        return basis.rates[unit.currency]
    raise UnitError(
        f"`{unit.currency}` is not the scenario's currency ({basis.currency})",
        f"write `exchange_rates: {{{unit.currency}: ... {basis.currency}}}`",
    )


def dims(**powers: int) -> Dimensions:
    """Wanted dimensions by name: `dims(currency=1, mass=-1)` is money per tonne."""
    return tuple(sorted((name, power) for name, power in powers.items() if power))


def share(quantity: Quantity) -> float:
    """A share as a fraction of one.

    >>> share(parse_quantity("0.2 wt%"))
    0.002
    """
    if quantity.unit.share not in SHARES:
        raise UnitError(f"`{quantity.text}` is not a share", "write %, wt% or fraction")
    return quantity.number * quantity.unit.factor


def celsius(quantity: Quantity) -> float:
    """A temperature in degC.

    >>> round(celsius(parse_quantity("1500 degF")), 1)
    815.6
    """
    if quantity.unit.share == "degC":
        return quantity.number
    if quantity.unit.share == "K":
        return quantity.number - 273.15
    if quantity.unit.share == "degF":
        return (quantity.number - 32) / 1.8
    raise UnitError(f"`{quantity.text}` is not a temperature", "write degC, degF or K")


def per_lb(per_tonne: float) -> float:
    """Money per tonne as hundredths of it per lb (US cents per lb when the money is USD)."""
    return 100 * per_tonne / _LB_PER_TONNE
