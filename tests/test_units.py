"""Every unit of the strict list against its exact factor, what is refused, and what joins unlike units.

Exact factors: 1 lb = 0.45359237 kg (international pound, 1959), 1 US gal = 3.785411784 L, 1 bbl = 42 US gal,
1 MMBtu (international table) = 1.05505585262 GJ, 1 short ton = 907.18474 kg, 1 cal (international table) = 4.1868 J.
"""

from __future__ import annotations

import math

import pint
import pytest
from hypothesis import given
from hypothesis import strategies as st

from olefinlp.inputs.units import (
    SHARES,
    SYMBOLS,
    Basis,
    Quantity,
    UnitError,
    celsius,
    convert,
    dims,
    parse_quantity,
    parse_unit,
    per_lb,
    share,
)

MASS, VOLUME, GAS, ENERGY, TIME = dims(mass=1), dims(volume=1), dims(gas_volume=1), dims(energy=1), dims(time=1)
POWER, MONTH, MOLES = dims(energy=1, time=-1), dims(calendar_month=1), dims(substance=1)
PRICE, PRICE_OF_HEAT = dims(currency=1, mass=-1), dims(currency=1, energy=-1)

# A standard cubic foot (60 degF, 14.696 psi) as normal cubic metres (0 degC, 101.325 kPa): V T0/T p/p0.
# 1 ft = 0.3048 m; 1 psi = 1 lbf/in2 = 0.45359237 kg x 9.80665 m/s2 / (0.0254 m)^2.
PSI = 0.45359237 * 9.80665 / 0.0254**2
SCF = 0.3048**3 * (273.15 / ((60 - 32) / 1.8 + 273.15)) * (14.696 * PSI / 101325)

FACTORS = {
    "g": (1e-6, MASS),
    "kg": (1e-3, MASS),
    "t": (1.0, MASS),
    "kt": (1e3, MASS),
    "lb": (0.45359237e-3, MASS),
    "klb": (0.45359237, MASS),
    "MMlb": (453.59237, MASS),
    "short_ton": (0.90718474, MASS),
    "long_ton": (2240 * 0.45359237e-3, MASS),
    "L": (1e-3, VOLUME),
    "m3": (1.0, VOLUME),
    "gal": (3.785411784e-3, VOLUME),
    "bbl": (42 * 3.785411784e-3, VOLUME),
    "kbbl": (42 * 3.785411784, VOLUME),
    "Nm3": (1e-3, GAS),
    "kNm3": (1.0, GAS),
    "MNm3": (1e3, GAS),
    "scf": (SCF * 1e-3, GAS),
    "Mscf": (SCF, GAS),
    "MMscf": (SCF * 1e3, GAS),
    "kJ": (1e-6, ENERGY),
    "MJ": (1e-3, ENERGY),
    "GJ": (1.0, ENERGY),
    "TJ": (1e3, ENERGY),
    "Btu": (1.05505585262e-6, ENERGY),
    "MMBtu": (1.05505585262, ENERGY),
    "Gcal": (4.1868, ENERGY),
    "kWh": (3.6e-3, ENERGY),
    "MWh": (3.6, ENERGY),
    "GWh": (3.6e3, ENERGY),
    "kW": (3.6e-3, POWER),
    "MW": (3.6, POWER),
    "h": (1.0, TIME),
    "d": (24.0, TIME),
    "year": (8760.0, TIME),
    "month": (1.0, MONTH),
    "mol": (1.0, MOLES),
    "kmol": (1e3, MOLES),
}


@pytest.mark.parametrize("symbol", SYMBOLS)
def test_factor_of_each_symbol(symbol: str) -> None:
    factor, dimensions = FACTORS[symbol]
    unit = parse_unit(symbol)
    assert unit.factor == pytest.approx(factor, rel=1e-12)
    assert unit.dimensions == dimensions


def test_every_symbol_has_its_factor_here() -> None:
    assert set(FACTORS) == set(SYMBOLS)


@pytest.mark.parametrize(
    ("ours", "theirs", "base"),
    [
        ("g", "gram", "t"),
        ("kg", "kilogram", "t"),
        ("t", "tonne", "t"),
        ("kt", "1000 tonne", "t"),
        ("lb", "pound", "t"),
        ("klb", "1000 pound", "t"),
        ("MMlb", "1e6 pound", "t"),
        ("short_ton", "short_ton", "t"),
        ("long_ton", "long_ton", "t"),
        ("L", "liter", "m3"),
        ("gal", "gallon", "m3"),
        ("bbl", "oil_bbl", "m3"),
        ("kbbl", "1000 oil_bbl", "m3"),
        ("kJ", "kilojoule", "GJ"),
        ("MJ", "megajoule", "GJ"),
        ("TJ", "terajoule", "GJ"),
        ("Btu", "Btu_it", "GJ"),
        ("MMBtu", "1e6 Btu_it", "GJ"),
        ("Gcal", "1e9 international_calorie", "GJ"),
        ("kWh", "kilowatt_hour", "GJ"),
        ("MWh", "megawatt_hour", "GJ"),
        ("GWh", "gigawatt_hour", "GJ"),
        ("kW", "kilowatt", "GJ/hour"),
        ("MW", "megawatt", "GJ/hour"),
        ("d", "day", "hour"),
        ("mol", "mole", "mol"),
        ("kmol", "kilomole", "mol"),
    ],
)
def test_agrees_with_pints_own_registry(ours: str, theirs: str, base: str) -> None:
    in_base = pint.UnitRegistry()(theirs).to(base.replace("m3", "m**3"))
    assert parse_unit(ours).factor == pytest.approx(in_base.magnitude, rel=1e-12)


@pytest.mark.parametrize("name", ["kt", "bbl", "Btu", "year"])
def test_pints_own_meaning_of_a_name_is_not_taken(name: str) -> None:
    """There kt is a knot, bbl a beer barrel, Btu the 1055.056 J one and a year has 365.25 days."""
    registry = pint.UnitRegistry()
    trade = {"kt": "1000 tonne", "bbl": "oil_bbl", "Btu": "Btu_it", "year": "8760 hour"}[name]
    theirs = registry(name)
    assert not theirs.is_compatible_with(registry(trade)) or theirs.to_base_units() != registry(trade).to_base_units()


@pytest.mark.parametrize(
    ("text", "factor", "currency"),
    [
        ("USD", 1.0, "USD"),
        ("kUSD", 1e3, "USD"),
        ("MUSD", 1e6, "USD"),
        ("USc", 0.01, "USD"),
        ("cEUR", 0.01, "EUR"),
        ("kJPY", 1e3, "JPY"),
    ],
)
def test_money(text: str, factor: float, currency: str) -> None:
    unit = parse_unit(text)
    assert (unit.factor, unit.currency, unit.dimensions) == (factor, currency, dims(currency=1))


@pytest.mark.parametrize(
    ("text", "value"),
    [("1 fraction", 1.0), ("2.5 %", 0.025), ("0.2 wt%", 0.002), ("3 mol%", 0.03), ("4 vol%", 0.04), ("7 ppm", 7e-6)],
)
def test_shares(text: str, value: float) -> None:
    assert share(parse_quantity(text)) == pytest.approx(value, rel=1e-12)
    assert parse_quantity(text).unit.share in SHARES


def test_temperatures() -> None:
    assert celsius(parse_quantity("840 degC")) == 840
    assert celsius(parse_quantity("1500 degF")) == pytest.approx(815.5556, abs=1e-4)
    assert celsius(parse_quantity("1113.15 K")) == pytest.approx(840)


AS_WRITTEN = "write for example `30 kt` (a point for decimals, no thousands mark)"
NUMBER = "is not a number with a unit"
LIST = "is not a unit of the list"
CENTS = "write `USc` for US cents, `cEUR` for cents of another currency"
EXAMPLE = "write for example `USD/t` or `GJ/t LHV`"
ISO = "money is an ISO code, for example `USD/t` or `EUR/MWh`"


@pytest.mark.parametrize(
    ("text", "message", "hint"),
    [
        ("5 ton", f"`ton` {LIST}", "write `t`, `short_ton` or `long_ton`"),
        ("5 tons", f"`tons` {LIST}", "write `t`, `short_ton` or `long_ton`"),
        ("5 tonne", f"`tonne` {LIST}", "write `t`"),
        ("5 MT", f"`MT` {LIST}", "write `t` (tonne) or `kt`"),
        ("5 Mt", f"`Mt` {LIST}", "write `kt` (a megatonne is 1000 kt)"),
        ("5 USD/MMbtu HHV", f"`MMbtu` {LIST}", "write `MMBtu`"),
        ("5 mmbtu LHV", f"`mmbtu` {LIST}", "write `MMBtu`"),
        ("5 MBtu LHV", f"`MBtu` {LIST}", "write `MMBtu` for a million Btu; in the gas trade MBtu is a thousand"),
        ("40 c/lb", f"`c` {LIST}", CENTS),
        ("40 cents/gal", f"`cents` {LIST}", CENTS),
        ("5 t/hr", f"`hr` {LIST}", "write `h`"),
        ("5 t/day", f"`day` {LIST}", "write `d`"),
        ("5 t/y", f"`y` {LIST}", "write `year`"),
        ("5 Kg", f"`Kg` {LIST}", "write `kg`"),
        ("5 lbs", f"`lbs` {LIST}", "did you mean `lb`?"),
        ("5 barrel", f"`barrel` {LIST}", "write `bbl`"),
        ("5 usd/t", f"`usd` {LIST}", "write `USD`"),
        ("5 XYZ/t", f"`XYZ` {LIST}", ISO),
        ("5 parsec", f"`parsec` {LIST}", "see the list of units in models/README.md"),
        ("5 %/t", "`%` cannot be part of another unit, as in `%/t`", "write `%` alone"),
        ("5 t/", f"`t/` {LIST}", EXAMPLE),
        ("5 kg m3", f"`kg m3` {LIST}", EXAMPLE),
        ("5 kt / month", f"`kt / month` {LIST}", EXAMPLE),
        ("5 GJ lhv", f"`GJ lhv` {LIST}", EXAMPLE),
        ("5 t LHV", "`t LHV` has a heating basis but no energy", "take LHV or HHV away"),
        ("1,5 kt", f"`1,5 kt` {NUMBER}", AS_WRITTEN),
        ("1 000 kt", f"`1 000 kt` {NUMBER}", AS_WRITTEN),
        ("1.000.5 kt", f"`1.000.5 kt` {NUMBER}", AS_WRITTEN),
        ("nan t", f"`nan t` {NUMBER}", AS_WRITTEN),
        ("inf t", f"`inf t` {NUMBER}", AS_WRITTEN),
        ("−5 t", f"`−5 t` {NUMBER}", AS_WRITTEN),
        ("٣ kt", f"`٣ kt` {NUMBER}", AS_WRITTEN),
        ("kt", f"`kt` {NUMBER}", AS_WRITTEN),
        ("", f"`` {NUMBER}", AS_WRITTEN),
        ("30", "`30` has no unit", "write the unit beside the number, for example `30 kt`"),
        ("1e400 t", "`1e400 t` is too large a number", ""),
    ],
)
def test_refused_with_a_hint(text: str, message: str, hint: str) -> None:
    with pytest.raises(UnitError) as raised:
        parse_quantity(text)
    assert (str(raised.value), raised.value.hint) == (message, hint)


def test_price_of_gas_on_higher_heating_value() -> None:
    """5.00 / (1.05505585262 x 0.9015) = 5.257 USD/GJ LHV."""
    price = parse_quantity("5.00 USD/MMBtu HHV")
    value = convert(price, PRICE_OF_HEAT, Basis(lhv_over_hhv=0.9015, currency="USD"))
    assert value == pytest.approx(5.00 / (1.05505585262 * 0.9015), rel=1e-12)
    assert round(value, 3) == 5.257


def test_cents_per_pound() -> None:
    """0.40 / 0.00045359237 = 881.85 USD/t."""
    value = convert(parse_quantity("40 USc/lb"), PRICE, Basis(currency="USD"))
    assert round(value, 2) == 881.85
    assert per_lb(value) == pytest.approx(40)


def test_cents_per_gallon_of_propane() -> None:
    """At 507 kg/m3 one cent a gallon is 0.01 / (0.003785411784 x 0.507) = 5.21 USD/t."""
    value = convert(parse_quantity("1 USc/gal"), PRICE, Basis(density=0.507, currency="USD"))
    assert round(value, 2) == 5.21


def test_rates_take_the_hours_of_the_period() -> None:
    assert convert(parse_quantity("120 t/h"), MASS, Basis(hours=744)) == 120 * 744
    assert convert(parse_quantity("24 t/d"), MASS, Basis(hours=744)) == pytest.approx(744)
    assert convert(parse_quantity("14 kt/month"), MASS, Basis(hours=672, calendar_month=True)) == 14_000
    assert convert(parse_quantity("2 MW"), ENERGY, Basis(hours=10), "power") == pytest.approx(20)


def test_power_is_in_megawatt_hours_and_heat_in_gigajoules() -> None:
    assert convert(parse_quantity("72 USD/MWh"), PRICE_OF_HEAT, Basis(currency="USD"), "power") == 72
    assert convert(parse_quantity("36 USD/MWh LHV"), PRICE_OF_HEAT, Basis(currency="USD")) == pytest.approx(10)


@pytest.mark.parametrize(
    ("text", "want", "energy", "message", "hint"),
    [
        (
            "5 USD/MMBtu",
            PRICE_OF_HEAT,
            "heat",
            "`USD/MMBtu` does not say its heating basis",
            "write `USD/MMBtu LHV` or `USD/MMBtu HHV`",
        ),
        (
            "5 USD/MMBtu HHV",
            PRICE_OF_HEAT,
            "heat",
            "a higher heating value (HHV) needs the ratio to the lower one",
            "write `lhv_over_hhv:` for this item in the plant, or give the value as LHV",
        ),
        (
            "41 USc/gal",
            PRICE,
            "heat",
            "a volume needs a density to become a mass",
            "write `density: ... kg/m3` for this item in the plant",
        ),
        (
            "14 kt/month",
            MASS,
            "heat",
            "`/month` is for periods that are a calendar month",
            "write the amount per h or d",
        ),
        ("14 t/h", MASS, "heat", "a rate is not known here", "write the amount without `/h` or `/d`"),
        ("5 EUR/t", PRICE, "heat", "`EUR` is not the scenario's currency (USD)", "write `exchange_rates: {EUR: ... USD}`"),
        ("72 USD/MWh LHV", PRICE_OF_HEAT, "power", "electric power has no heating basis `LHV`", "take LHV or HHV away"),
        (
            "30 kt",
            ENERGY,
            "heat",
            "`30 kt` is mass (t, lb …), but energy (GJ, MWh …) is needed here",
            "see the list of units in models/README.md",
        ),
    ],
)
def test_what_is_not_written_is_an_error(text: str, want: object, energy: str, message: str, hint: str) -> None:
    with pytest.raises(UnitError) as raised:
        convert(parse_quantity(text), want, Basis(currency="USD"), energy)  # type: ignore[arg-type]
    assert (str(raised.value), raised.value.hint) == (message, hint)


def test_an_exchange_rate_joins_currencies() -> None:
    assert convert(parse_quantity("5 EUR/t"), PRICE, Basis(currency="USD", rates={"EUR": 1.08})) == pytest.approx(5.4)


def test_a_share_and_a_temperature_are_what_they_say() -> None:
    with pytest.raises(UnitError, match="`5 kt` is not a share"):
        share(parse_quantity("5 kt"))
    with pytest.raises(UnitError, match="`840 kt` is not a temperature"):
        celsius(parse_quantity("840 kt"))


def test_too_large_a_product_is_an_error() -> None:
    with pytest.raises(UnitError, match="is too large a number"):
        convert(parse_quantity("1e308 MMlb"), MASS)


same_kind = [(a, b) for a in SYMBOLS for b in SYMBOLS if FACTORS[a][1] == FACTORS[b][1]]
numbers = st.floats(min_value=-1e12, max_value=1e12, allow_nan=False).filter(lambda x: x == 0 or abs(x) > 1e-12)


@given(number=numbers, pair=st.sampled_from(same_kind))
def test_there_and_back(number: float, pair: tuple[str, str]) -> None:
    """A number turned into another unit of its kind and back is itself."""
    first, second = (parse_unit(symbol) for symbol in pair)
    there = number * first.factor / second.factor
    assert there * second.factor / first.factor == pytest.approx(number, rel=1e-12)
    energy = "power" if "energy" in dict(first.dimensions) else "heat"
    one = convert(Quantity(number, first, ""), first.dimensions, energy=energy)  # type: ignore[arg-type]
    other = convert(Quantity(there, second, ""), first.dimensions, energy=energy)  # type: ignore[arg-type]
    assert one == pytest.approx(other, rel=1e-12)


@given(number=numbers, symbol=st.sampled_from(SYMBOLS), per=st.sampled_from(SYMBOLS))
def test_what_is_written_is_read(number: float, symbol: str, per: str) -> None:
    quantity = parse_quantity(f"{number!r} {symbol}/{per}")
    assert quantity.number == number
    assert quantity.unit.factor == pytest.approx(FACTORS[symbol][0] / FACTORS[per][0], rel=1e-12)
    assert str(quantity) == f"{number!r} {symbol}/{per}"


@given(price=st.floats(0.1, 1e5), density=st.floats(0.3, 1.2), ratio=st.floats(0.8, 1.0))
def test_joins_work_both_ways(price: float, density: float, ratio: float) -> None:
    """A price per volume times the density is the price per mass; HHV and LHV prices differ by their ratio."""
    basis = Basis(density=density, lhv_over_hhv=ratio, currency="USD")
    per_tonne = convert(Quantity(price, parse_unit("USD/m3"), ""), PRICE, basis)
    assert per_tonne * density == pytest.approx(price)
    per_lhv = convert(Quantity(price, parse_unit("USD/GJ HHV"), ""), PRICE_OF_HEAT, basis)
    assert per_lhv * ratio == pytest.approx(price)
    heat = convert(Quantity(price, parse_unit("GJ HHV"), ""), ENERGY, basis)
    assert heat == pytest.approx(price * ratio)
    assert math.isclose(per_lhv * heat, price * price)
