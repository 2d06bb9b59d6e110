"""The rules of the invented plant Brackwater once more, as a linear program of its own.

Nothing of the package is used: the csv tables and YAML files are read with the standard library and ruamel.yaml,
units are turned with the factors below, and scipy solves. What is long (yields, recovery, loads, modes, prices) comes
from the files; the plant's scalar rules are written here as numbers, so that a slip in either place shows.

Flows kt, heat TJ LHV, steam kt, power GWh, money kUSD. `route(...)` gives margin, values and rates by name.
"""

from __future__ import annotations

import calendar
import csv
from collections import defaultdict
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from ruamel.yaml import YAML
from scipy.optimize import linprog
from scipy.sparse import coo_matrix

ROOT = Path(__file__).resolve().parents[1]
PLANT = ROOT / "models" / "brackwater"

# Exact factors: pound (1959), US gallon, barrel of 42 gallons, MMBtu (international table).
TONNES_PER_LB = 0.45359237e-3
M3_PER_GAL = 3.785411784e-3
M3_PER_BBL = 42 * M3_PER_GAL
GJ_PER_MMBTU = 1.05505585262

# The plant's rules, per tonne unless said otherwise.
LOSS, LOSS_CO2 = 0.002, 3.0
HYDROGEN_HEAT, ETHANE_HEAT, FUEL_OIL_HEAT = 119.96, 47.5, 39.6  # GJ LHV
BOILER_FUEL = 3.05  # GJ LHV per t of steam
PROCESS_STEAM, COMPRESSOR_STEAM, REFRIGERATION_STEAM = 0.12, 0.76, 4.6  # t/t charged, t/kNm3, t/MWh
POWER = 0.045  # MWh/t charged
TREATING_HYDROGEN = 0.0065  # t/t of hydrotreated pygas
GAS_CO2, EXPORT_CO2 = 0.0561, 0.0549  # t/GJ LHV
ETHANE_CO2, FUEL_OIL_CO2 = 2.927, 3.30
GAS_LHV_OVER_HHV = 0.9015
VISCOSITY = 1.2
PURITY = {"propylene": 0.995, "propane": 0.012}
GRADE = 0.93
CHEMICALS, DECOKE, TREATING = 5.0, 18_000.0, 22.0  # USD/t, USD each, USD/t
FUEL_OIL_BURNT_MAX = 3.0  # kt a month
Terms = dict[str, float]
Row = tuple[str, Terms, float]
OUTLETS_OF = {
    "hydrogen": ("hydrogen_sale", "hydrogen_burnt"),
    "ethylene": ("ethylene_contract", "ethylene_spot"),
    "ethane": ("ethane_burnt",),
    "propylene": ("polymer_grade_propylene", "propylene_in_chemical_grade"),
    "propane": ("propane_sale", "propane_in_chemical_grade"),
    "crude_c4": ("crude_c4_contract", "crude_c4_secondary"),
    "c5_cut": ("c5_sale",),
    "pygas": ("hydrotreated_pygas", "raw_pygas"),
    "fuel_oil": ("fuel_oil_sale", "fuel_oil_burnt"),
}
RECYCLE_OF = {"ethane": "recycle_ethane", "propane": "recycle_propane"}


def table(path: Path) -> list[dict[str, str]]:
    """Rows of a csv, the units taken out of the headers."""
    with open(path, newline="", encoding="utf-8") as file:
        return [{key.split(" [")[0]: cell for key, cell in row.items()} for row in csv.DictReader(file)]


def number(text: object) -> float:
    """`30 kt` → 30.0."""
    return float(str(text).split()[0])


def capacity(text: object) -> float:
    return np.inf if text == "unlimited" else number(text)


def monthly(written: object, month: str) -> object:
    return written.get(month, written.get("other_months")) if isinstance(written, dict) else written


def prices(rows: list[dict[str, str]], case: str, density: dict[str, float]) -> dict[str, float]:
    """USD/t, USD/GJ LHV, USD/MWh by item."""
    by_item = {row["item"]: row for row in rows}

    def price(item: str) -> float:
        row = by_item[item]
        value, unit = float(row[case] or row["Base"]), row["unit"]
        if unit == "fraction":
            return value * price(row["relative_to"])
        if unit == "USc/gal":
            value *= 0.01 / M3_PER_GAL / density[item.split(".")[1]]
        elif unit == "USD/bbl":
            value /= M3_PER_BBL * density[item.split(".")[1]]
        elif unit == "USc/lb":
            value *= 0.01 / TONNES_PER_LB
        elif unit == "USD/MMBtu HHV":
            value /= GJ_PER_MMBTU * GAS_LHV_OVER_HHV
        elif unit not in ("USD/t", "USD/MWh"):
            raise ValueError(unit)
        return value + (price(row["relative_to"]) if row["relative_to"] else 0.0)

    return {item: price(item) for item in by_item}


class Program:
    """Rows and columns by name; max Σ value · x with rows low ≤ Σ ≤ high."""

    def __init__(self) -> None:
        self.at: dict[str, int] = {}
        self.bounds: list[tuple[float, float]] = []
        self.worth: dict[str, float] = defaultdict(float)
        self.equal: list[Row] = []
        self.most: list[Row] = []

    def column(self, name: str, high: float = np.inf, low: float = 0.0) -> str:
        self.at[name] = len(self.bounds)
        self.bounds.append((low, high))
        return name

    def solve(self) -> Answer:
        most = [row for row in self.most if np.isfinite(row[2])]
        cost = np.zeros(len(self.bounds))
        for name, value in self.worth.items():
            cost[self.at[name]] -= value
        found = linprog(
            cost,
            *(side for rows in (most, self.equal) for side in (self.matrix(rows), np.array([row[2] for row in rows]))),
            bounds=np.array(self.bounds),
            method="highs-ds",
        )
        if found.status != 0:
            raise RuntimeError(found.message)
        rates = {name: -float(rate) for (name, _, _), rate in zip(most, found.ineqlin.marginals, strict=True)}
        return Answer(-float(found.fun), {name: float(found.x[j]) for name, j in self.at.items()}, rates)

    def matrix(self, rows: list[Row]) -> coo_matrix:
        cells = [(i, self.at[name], value) for i, (_, terms, _) in enumerate(rows) for name, value in terms.items()]
        i, j, value = zip(*cells, strict=True)
        return coo_matrix((value, (i, j)), shape=(len(rows), len(self.bounds)))


@dataclass(frozen=True)
class Answer:
    margin: float
    value: dict[str, float]
    rate: dict[str, float]


def total(*parts: tuple[float, Terms]) -> Terms:
    """A sum of multiples of sums."""
    terms: Terms = defaultdict(float)
    for factor, part in parts:
        for name, value in part.items():
            terms[name] += factor * value
    return terms


class Route:
    """One scenario of Brackwater, month after month."""

    def __init__(self, scenario: Path, case: str, minimum_loads: bool) -> None:
        yaml = YAML(typ="safe", pure=True)
        self.plant = yaml.load(PLANT / "plant.yaml")
        self.scenario = yaml.load(scenario)
        self.density = {name: number(feed["density"]) / 1000 for name, feed in self.plant["feeds"].items()}
        self.price = prices(table(scenario.parent / self.scenario["prices"]), case, self.density)
        self.modes = table(PLANT / "furnace_modes.csv")
        self.yields = {(row["feed"], row["severity"]): row for row in table(PLANT / "yields.csv")}
        self.recovery = {row["component"]: row for row in table(PLANT / "recovery.csv")}
        self.parts = {row["component"]: row for row in table(PLANT / "components.csv")}
        self.units = table(PLANT / "recovery_units.csv")
        self.loads = table(PLANT / "unit_loads.csv")
        self.minimum_loads = minimum_loads
        self.lp = Program()
        before: dict[str, str] = {}
        for month in map(str, self.scenario["months"]):
            before = self.month(month, before)
        for feed, tank in self.scenario.get("stocks", {}).items():
            self.at_least(f"end {feed}", {before[feed]: 1}, number(tank["opening"]))

    def at_most(self, name: str, terms: Terms, limit: float) -> None:
        self.lp.most.append((name, terms, limit))

    def at_least(self, name: str, terms: Terms, limit: float) -> None:
        self.lp.most.append((name, total((-1, terms)), -limit))

    def equal(self, name: str, terms: Terms, value: float = 0.0) -> None:
        self.lp.equal.append((name, terms, value))

    def earn(self, terms: Terms, price: float) -> None:
        for name, value in terms.items():
            self.lp.worth[name] += price * value

    def month(self, t: str, before: dict[str, str]) -> dict[str, str]:
        """All rules of one month; gives the names of its closing stocks."""
        year, number_of_month = map(int, t.split("-"))
        self.t, self.hours = t, 24.0 * calendar.monthrange(year, number_of_month)[1]
        self.charge = [self.lp.column(f"{t} charge {m['group']} {m['feed']} {m['severity']}") for m in self.modes]
        charged = dict.fromkeys(self.charge, 1.0)
        closing = self.buy(before)
        self.furnaces()
        made = self.components()
        self.at_most(
            f"{t} quench_oil_viscosity",
            total((1, made["pyrolysis_oil"]), (-VISCOSITY, made["c8_aromatics"]), (-VISCOSITY, made["c9_c10_pygas"])),
            0.0,
        )
        cut = {k: total(*((float(r[k]), made[c]) for c, r in self.recovery.items())) for k in (*OUTLETS_OF, "tail_gas")}
        out = self.outlets(cut)
        load = self.unit_loads(made, cut, out)
        self.content(made)
        self.energy(made, charged, out, load)
        return closing

    def of(self, key: str, name: str) -> list[tuple[dict[str, str], str]]:
        return [(m, x) for m, x in zip(self.modes, self.charge, strict=True) if m[key] == name]

    def buy(self, before: dict[str, str]) -> dict[str, str]:
        closing: dict[str, str] = {}
        for feed, sources in self.scenario["feeds"].items():
            balance = {x: 1.0 for _, x in self.of("feed", feed)}
            for source, terms in sources.items():
                bought = self.lp.column(f"{self.t} bought {feed} {source}", capacity(terms["max"]))
                balance[bought] = -1.0
                price = self.price[f"feeds.{feed}.{source}"]
                self.earn({bought: -1}, price)
                if "take_or_pay" in terms:
                    short = self.lp.column(f"{self.t} short {feed} {source}")
                    self.earn({short: -1}, price * number(terms["shortfall_pays"]) / 100)
                    taken = {bought: 1, short: 1}
                    self.at_least(f"{self.t} take_or_pay {feed} {source}", taken, number(terms["take_or_pay"]))
            tank = self.scenario.get("stocks", {}).get(feed)
            opening = 0.0
            if tank:
                closing[feed] = self.lp.column(f"{self.t} stock {feed}", number(tank["max"]), number(tank["min"]))
                balance[closing[feed]] = 1.0
                self.earn({closing[feed]: -1}, number(tank["holding"]))
                if before:
                    balance[before[feed]] = -1.0
                else:
                    opening = number(tank["opening"])
            self.equal(f"{self.t} feed {feed}", balance, opening)
        return closing

    def furnaces(self) -> None:
        decoking: Terms = {}
        for m, x in zip(self.modes, self.charge, strict=True):
            rate, run = float(m["charge"]), 24 * float(m["run_length"])
            decoking[x] = 1000 / rate * float(m["decoke"]) / run
            self.earn({x: -1}, CHEMICALS + POWER * self.price["utilities.grid_power"] + DECOKE / (rate * run))
        for group, data in self.plant["furnace_groups"].items():
            lost = sum(
                number(outage["hours"])
                for outage in self.scenario.get("outages", [])
                if (outage["month"], outage["group"]) == (self.t, group)
            )
            there = (data["furnaces"] * self.hours - lost) * (1 - number(data["unplanned_loss"]) / 100)
            used = {x: 1000 / float(m["charge"]) + decoking[x] for m, x in self.of("group", group)}
            self.at_most(f"{self.t} {group}", used, there)
        self.at_most(f"{self.t} decoke crew", decoking, self.plant["decoke_crews"]["crews"] * self.hours)

    def components(self) -> dict[str, Terms]:
        kept = (1 - LOSS) / 100
        rows = [self.yields[m["feed"], m["severity"]] for m in self.modes]
        return {c: {x: kept * float(row[c]) for x, row in zip(self.charge, rows, strict=True)} for c in self.parts}

    def outlets(self, cut: dict[str, Terms]) -> dict[str, str]:
        """Every cut leaves in full; two of them also go round again."""
        t, written = self.t, self.scenario["outlets"]
        out = {name: self.lp.column(f"{t} {name}") for names in OUTLETS_OF.values() for name in names}
        for k, names in OUTLETS_OF.items():
            leaves = {out[name]: 1.0 for name in names}
            if k in RECYCLE_OF:
                leaves |= {x: 1.0 for _, x in self.of("feed", RECYCLE_OF[k])}
            if k == "hydrogen":
                leaves[out["hydrotreated_pygas"]] = TREATING_HYDROGEN
            self.equal(f"{t} cut {k}", total((1, leaves), (-1, cut[k])))
        blend = {out[f"{k}_in_chemical_grade"]: 1.0 for k in PURITY}
        sold = {name: {out[name]: 1.0} for name in out} | {"chemical_grade_propylene": blend}
        pure = {out[f"{k}_in_chemical_grade"]: purity - GRADE for k, purity in PURITY.items()}
        self.at_least(f"{t} chemical grade", pure, 0.0)
        self.at_most(f"{t} fuel_oil_burnt", sold["fuel_oil_burnt"], FUEL_OIL_BURNT_MAX)
        for name in written:
            if name == "fuel_gas_export":
                continue
            self.at_most(f"{t} {name}", sold[name], capacity(monthly(written[name]["max"], t)))
            if "min" in written[name]:
                self.at_least(f"{t} {name} min", sold[name], number(written[name]["min"]))
            deduction = written[name].get("deduction")
            if deduction is not None:
                self.earn(sold[name], -number(deduction))
            elif f"outlets.{name}.deduction" in self.price:
                self.earn(sold[name], -self.price[f"outlets.{name}.deduction"])
            else:
                self.earn(sold[name], self.price[f"outlets.{name}"])
        self.earn(sold["hydrotreated_pygas"], -TREATING)
        return out

    def unit_loads(self, made: dict[str, Terms], cut: dict[str, Terms], out: dict[str, str]) -> dict[str, Terms]:
        load: dict[str, Terms] = {}
        for row in self.units:
            unit = row["unit"]
            terms: list[tuple[float, Terms]] = []
            for item in (one for one in self.loads if one["unit"] == unit):
                name = item["item"]
                if item["of"] == "ingredient":
                    outlet, k = name.split(".")
                    what = {out[f"{k}_in_{outlet.removesuffix('_propylene')}"]: 1.0}
                else:
                    what = made[name] if item["of"] == "component" else cut[name] if item["of"] == "cut" else {out[name]: 1.0}
                terms.append((float(item["load"]), what))
            if unit == "dilution_steam_generation":
                column = "load dilution_steam_generation"
                terms.append((1.0, {x: float(m[column]) for m, x in zip(self.modes, self.charge, strict=True)}))
            factors = [
                one["factor"] for one in self.scenario.get("unit_factors", []) if (one["month"], one["unit"]) == (self.t, unit)
            ]
            most = float(row["capacity"]) * float(np.prod(factors)) * self.hours / 1000
            load[unit] = total(*terms)
            self.at_most(f"{self.t} {unit}", load[unit], most)
            if self.minimum_loads:
                self.at_least(f"{self.t} {unit} min", load[unit], most * float(row["min_load"]) / 100)
        return load

    def content(self, made: dict[str, Terms]) -> None:
        for k in ("crude_c4", "pygas"):
            for item, names in self.plant["cuts"][k]["content_items"].items():
                for c in names:
                    self.earn(made[c], float(self.recovery[c][k]) * self.price[f"contents.{k}.{item}"])

    def energy(self, made: dict[str, Terms], charged: Terms, out: dict[str, str], load: dict[str, Terms]) -> None:
        """Tail gas as heat, fuel, steam and CO2."""
        t, gas_price = self.t, self.price["utilities.natural_gas"]
        burnt, flared = self.lp.column(f"{t} tail_gas_burnt"), self.lp.column(f"{t} tail_gas_flared")
        export = self.lp.column(f"{t} fuel_gas_export", number(self.scenario["outlets"]["fuel_gas_export"]["max"]))
        gas, steam, surplus = (self.lp.column(f"{t} {name}") for name in ("natural_gas", "boiler_steam", "surplus_steam"))
        tail = {c: float(row["tail_gas"]) for c, row in self.recovery.items() if float(row["tail_gas"])}
        heat = total(*((share * float(self.parts[c]["lower_heating_value"]), made[c]) for c, share in tail.items()))
        self.equal(f"{t} tail gas", total((1, {burnt: 1, flared: 1, export: 1}), (-1, heat)))
        fuels = {burnt: 1.0, gas: 1.0, out["hydrogen_burnt"]: HYDROGEN_HEAT}
        fuels |= {out["ethane_burnt"]: ETHANE_HEAT, out["fuel_oil_burnt"]: FUEL_OIL_HEAT}
        fired = {x: float(m["fired_heat"]) for m, x in zip(self.modes, self.charge, strict=True)}
        self.equal(f"{t} fuel", total((1, fired), (BOILER_FUEL, {steam: 1}), (-1, fuels)))
        raised = {x: float(m["makes high_pressure_steam"]) for m, x in zip(self.modes, self.charge, strict=True)}
        turbines = total(
            (COMPRESSOR_STEAM, load["cracked_gas_compressor"]), (REFRIGERATION_STEAM, load["propylene_refrigeration"])
        )
        made_steam = total((1, raised), (-PROCESS_STEAM, charged), (1, {steam: 1, surplus: -1}))
        self.equal(f"{t} steam", total((1, turbines), (-1, made_steam)))
        co2 = total(
            *((share * float(self.parts[c]["burnt_co2"]), made[c]) for c, share in tail.items()),
            (LOSS * LOSS_CO2, charged),
            (1, {gas: GAS_CO2, export: -EXPORT_CO2, out["ethane_burnt"]: ETHANE_CO2, out["fuel_oil_burnt"]: FUEL_OIL_CO2}),
        )
        self.earn(co2, -self.price["utilities.carbon"])
        self.earn({gas: -1}, gas_price)
        self.earn({export: 1}, self.price["outlets.fuel_gas_export"])


def route(scenario: str, case: str = "Base", minimum_loads: bool = True) -> Answer:
    """Margin (kUSD, before fixed cost), values and rates of a scenario file of Brackwater."""
    return Route(ROOT / "scenarios" / scenario, case, minimum_loads).lp.solve()
