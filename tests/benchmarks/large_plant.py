"""The demo plant with many periods and many furnaces, written as files.

Every furnace becomes a group of its own with the modes of its kind, so a plant of 12 furnaces has 156 modes and one of
60 has 780; what is bought, sold, kept and recovered grows with the furnaces. Periods repeat the six months of the demo
(availability, factors, outages) at the rate of a shorter or longer period, and tanks link each to the next. Prices of
feeds are written for every period, as a price table does, and swing by a few per cent: so the tanks have work to do.
"""

from __future__ import annotations

import csv
import math
import re
import shutil
from pathlib import Path
from typing import Any

from ruamel.yaml import YAML

ROOT = Path(__file__).resolve().parents[2]
PLANT = ROOT / "models" / "brackwater"
SCENARIO = ROOT / "scenarios" / "brackwater_2031_03_to_08.yaml"
FURNACES = 12
"""Of the plant as it is; other numbers are multiples of it."""
DAYS = 31.0
"""Of a month of the demo, when its amounts are turned into rates."""
SWING = 0.08
AMOUNT = re.compile(r"([\d.]+) (kt|TJ LHV|GWh|h|MUSD)(?:/month)?")


def write_scenario(folder: Path, periods: int, furnaces: int = FURNACES) -> Path:
    """Write a plant and a scenario into a folder; gives the path of the scenario.

    Raises `ValueError` when the furnaces are no multiple of those that the plant has.
    """
    if furnaces % FURNACES:
        raise ValueError(f"the plant has {FURNACES} furnaces, so {furnaces} are not a multiple of it")
    times = furnaces // FURNACES
    shutil.copytree(PLANT, folder / "plant")  # makes the folder too
    groups = _write_plant(folder / "plant", times)
    yaml = YAML(typ="safe", pure=True)
    demo = yaml.load(SCENARIO)
    hours = 730 if periods <= 12 else 168 if periods <= 52 else 24
    names = [f"period_{number + 1:03}" for number in range(periods)]
    scenario = _scenario(demo, names, hours, times, groups)
    path = folder / "scenario.yaml"
    with open(path, "w", encoding="utf-8") as file:
        yaml.dump(scenario, file)
    _write_prices(SCENARIO.parent / demo["prices"], folder / "prices.csv", names)
    return path


def _rows(path: Path) -> list[dict[str, str]]:
    with open(path, newline="", encoding="utf-8") as file:
        return list(csv.DictReader(file))


def _write_rows(path: Path, rows: list[dict[str, str]]) -> None:
    with open(path, "w", newline="", encoding="utf-8") as file:
        writer = csv.DictWriter(file, rows[0])
        writer.writeheader()
        writer.writerows(rows)


def _write_plant(home: Path, times: int) -> dict[str, list[str]]:
    """Single furnaces for groups, larger recovery; gives the furnaces that each group has become."""
    yaml = YAML(typ="safe", pure=True)
    plant = yaml.load(home / "plant.yaml")
    groups = {
        group: [f"{group.removesuffix('s')}_{number + 1}" for number in range(data["furnaces"] * times)]
        for group, data in plant["furnace_groups"].items()
    }
    plant["furnace_groups"] = {
        furnace: {**plant["furnace_groups"][group], "furnaces": 1} for group, own in groups.items() for furnace in own
    }
    plant["decoke_crews"]["crews"] *= times
    most = plant["outlets"]["fuel_oil_burnt"]["max"]
    plant["outlets"]["fuel_oil_burnt"]["max"] = _rate(most, times)
    with open(home / "plant.yaml", "w", encoding="utf-8") as file:
        yaml.dump(plant, file)
    modes = [row | {"group": own} for row in _rows(home / "furnace_modes.csv") for own in groups[row["group"]]]
    _write_rows(home / "furnace_modes.csv", modes)
    units = _rows(home / "recovery_units.csv")
    _write_rows(home / "recovery_units.csv", [row | {"capacity": f"{float(row['capacity']) * times:g}"} for row in units])
    return groups


def _rate(text: Any, times: float) -> Any:
    """An amount of a month of the demo as a rate of a larger plant; shares, prices and `unlimited` as they are."""
    found = AMOUNT.fullmatch(str(text))
    return f"{float(found[1]) * times / DAYS:.9g} {_per_day(found[2])}" if found else text


def _per_day(unit: str) -> str:
    head, _, basis = unit.partition(" ")
    return f"{head}/d {basis}".strip()


def _amount(text: str, times: float) -> str:
    number, _, unit = text.partition(" ")
    return f"{float(number) * times:.9g} {unit}"


def _tank(tank: dict[str, str], times: int) -> dict[str, str]:
    """A larger tank; what a month of holding costs is paid by the day."""
    holding, _, unit = tank["holding"].partition(" ")
    larger = {key: _amount(tank[key], times) for key in ("opening", "min", "max")}
    return tank | larger | {"holding": f"{float(holding) / DAYS:.9g} {unit.replace('month', 'd')}"}


def _scenario(demo: dict[str, Any], names: list[str], hours: int, times: int, groups: dict[str, list[str]]) -> dict[str, Any]:
    """The demo at the rate of these periods."""
    turn = {str(month): position for position, month in enumerate(demo["months"])}

    def again(month: str) -> list[str]:
        return names[turn[month] :: len(turn)]

    def rates(written: Any) -> Any:
        if not isinstance(written, dict):
            return _rate(written, times)
        rest = {} if "other_months" not in written else {"other_months": _rate(written["other_months"], times)}
        found = {name: _rate(value, times) for month, value in written.items() if month in turn for name in again(month)}
        return found | rest if found else _rate(next(iter(written.values())), times)

    feeds = {
        feed: {name: {key: rates(value) for key, value in terms.items()} for name, terms in sources.items()}
        for feed, sources in demo["feeds"].items()
    }
    outlets = {name: {key: rates(value) for key, value in terms.items()} for name, terms in demo["outlets"].items()}
    scale = hours / 24 / DAYS
    outages = [
        outage | {"month": name, "group": groups[outage["group"]][0], "hours": _amount(outage["hours"], min(scale, 1.0))}
        for outage in demo["outages"]
        for name in again(outage["month"])
    ]
    stocks = {item: _tank(tank, times) for item, tank in demo["stocks"].items()}
    return demo | {
        "title": f"{len(names)} periods of {hours} hours, {FURNACES * times} furnaces",
        "plant": "plant",
        "prices": "prices.csv",
        "months": [{"name": name, "hours": hours} for name in names],
        "feeds": feeds,
        "outlets": outlets,
        "fixed_costs": {name: rates(value) for name, value in demo["fixed_costs"].items()},
        "unit_factors": [one | {"month": name} for one in demo["unit_factors"] for name in again(one["month"])],
        "outages": outages,
        "stocks": stocks,
    }


def _write_prices(demo: Path, path: Path, names: list[str]) -> None:
    """The prices of the demo; those of feeds apart for each period, swinging, each at a rhythm of its own."""
    rows: list[dict[str, str]] = []
    for rhythm, row in enumerate(_rows(demo), start=5):
        if not row["item"].startswith("feeds."):
            rows.append({**row, "month": ""})
            continue
        for turn, name in enumerate(names):
            factor = 1 + SWING * math.sin(2 * math.pi * turn / rhythm)
            rows.append({**row, "month": name, "Base": f"{float(row['Base']) * factor:.6g}"})
    _write_rows(path, rows)
