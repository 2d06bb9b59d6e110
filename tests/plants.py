"""Small plants and scenarios, written as files from Python: only what a test is about has to be said.

`write(folder, yields=..., ...)` writes `plant/` and `scenario.yaml` and gives the scenario's path. Tables are comma-separated
text without `source` and without units (the usual ones are put in the header). Everything else has a plain default:
one furnace group `furnaces`, every component a cut of its own, every cut sold as `<cut>_sale` at the price in `prices`.
"""

from __future__ import annotations

import copy
import io
import math
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from ruamel.yaml import YAML

from olefinlp.answers.plan import Plan, make_plan
from olefinlp.inputs.scenario import Scenario, read_scenario
from olefinlp.lp.compile import LabelledLp

EXACT = 1e-9
SOURCE = "assumed: small plant of a test"
Table = str | list[dict[str, Any]]
Written = str | Mapping[str, Any]

UNITS = {
    "yields": {"*": "wt%"},
    "recovery": {"*": "t/t"},
    "quality_slopes": {"*": "wt%"},
    "components": {"molar_mass": "g/mol", "lower_heating_value": "GJ/t LHV", "burnt_co2": "t/t"},
    "modes": {"coil_outlet": "degC", "charge": "t/h", "run_length": "d", "decoke": "h", "fired_heat": "GJ/t LHV"},
    "recovery_units": {"min_load": "%"},
}
TEXTS = {
    "yields": ("feed", "severity"),
    "recovery": ("component",),
    "quality_slopes": ("yields", "feed", "property", "reference", "valid_min", "valid_max"),
}
ALWAYS = {
    "modes": ("group", "feed", "severity", "coil_outlet", "charge", "run_length", "decoke", "fired_heat"),
    "recovery_units": ("unit", "capacity", "capacity_unit", "measure", "min_load"),
}

ONE_FEED = {
    "yields": "feed, severity, ethylene, residue\nnaphtha, base, 40, 60",
    "modes": "group, feed, severity, charge\nfurnaces, naphtha, base, 10",
    "prices": {"ethylene": 1200, "residue": 200},
}

DEAR_AND_CHEAP = {
    "yields": "feed, severity, ethylene, rest\ndear, base, 50, 50\ncheap, base, 30, 70",
    "modes": "group, feed, severity, charge\nfurnaces, dear, base, 20\nfurnaces, cheap, base, 25",
    "recovery_units": "unit, capacity, capacity_unit, measure, min_load\nsplitter, 9, t/h, ethylene, 0",
    "unit_loads": "unit, of, item, load, load_unit\nsplitter, cut, ethylene, 1, t/t",
    "prices": {"ethylene": 1000, "rest": 300},
}
"""Two feeds against 1000 furnace hours and 9 kt through a splitter (`test_hand_solved`); a scenario brings the offers."""

THREE_STEPS = {
    "yields": "feed, severity, ethylene, water\nethane, base, 50, 50",
    "modes": "group, feed, severity, charge\nfurnaces, ethane, base, 10",
    "prices": {"ethylene": 1000},
    "scenario": """
        feeds:
          ethane:
            pipeline:
              tiers: [{up_to: 4 kt, price: 300 USD/t}, {up_to: 6 kt, price: 440 USD/t}, {up_to: 10 kt, price: 520 USD/t}]
        outlets: {water_sale: {max: unlimited, price: 0 USD/t}}
    """,
}
"""A feed worth 500 USD/t, offered in three price steps."""


def rows_of(table: Table) -> list[dict[str, Any]]:
    """Rows from comma-separated text with a header."""
    if not isinstance(table, str):
        return [dict(row) for row in table]
    header, *lines = [[cell.strip() for cell in line.split(",")] for line in table.strip().splitlines()]
    return [dict(zip(header, line, strict=True)) for line in lines]


def _table_text(name: str, rows: list[dict[str, Any]]) -> str:
    columns = list(dict.fromkeys([*ALWAYS.get(name, ()), *rows[0]]))
    units, texts = UNITS.get(name, {}), TEXTS.get(name, ())
    titles = []
    for column in columns:
        unit = units.get(column) or (units.get("*") if column not in texts else None)
        titles.append(f"{column} [{unit}]" if unit and "[" not in column else column)
    lines = [",".join(f'"{row.get(column, "")}"' for column in columns) + f',"{SOURCE}"' for row in rows]
    return "\n".join([",".join(titles) + ",source", *lines]) + "\n"


def merged(base: dict[str, Any], changes: Mapping[str, Any]) -> dict[str, Any]:
    """Nested mappings laid over each other; None takes a key away."""
    result = copy.deepcopy(base)
    for key, value in changes.items():
        if value is None:
            result.pop(key, None)
        elif isinstance(value, Mapping) and isinstance(result.get(key), dict):
            result[key] = merged(result[key], value)
        else:
            result[key] = copy.deepcopy(value)
    return result


def _read(written: Written) -> dict[str, Any]:
    data = YAML(typ="safe", pure=True).load(written) if isinstance(written, str) else written
    return dict(data or {})


def dumped(data: Mapping[str, Any]) -> str:
    """YAML text of plain values, one name a line."""
    yaml, text = YAML(), io.StringIO()
    yaml.width = 10_000
    yaml.dump(dict(data), text)
    return text.getvalue()


def small_plant(tables: dict[str, list[dict[str, Any]]], changes: Mapping[str, Any]) -> dict[str, Any]:
    """plant.yaml: defaults from the tables, then what is said."""
    components = [row["component"] for row in tables["components"]]
    cuts = [column for column in tables["recovery"][0] if column != "component"]
    base: dict[str, Any] = {
        "name": "small plant",
        "source": SOURCE,
        "main_product": cuts[0],
        "yields": {"thermal": {"table": "yields.csv", "basis": "once_through"}},
        "loss": {"share": "0 wt%"},
        "feeds": {row["feed"]: {} for row in tables["yields"]},
        "furnace_groups": {"furnaces": {"furnaces": 1, "kind": "thermal", "yields": "thermal", "unplanned_loss": "0 %"}},
        "decoke_crews": {"crews": "unlimited"},
        "cuts": {cut: {} for cut in cuts},
    }
    base |= {name: f"{name}.csv" for name in tables if name != "yields"}
    plant = merged(base, changes)
    recycled = {feed.get("recycle_of") for feed in plant["feeds"].values()}
    taken = {c for o in plant.get("outlets", {}).values() for c in ([o["from"]] if isinstance(o["from"], str) else o["from"])}
    sales = {f"{cut}_sale": {"from": cut, "to": "sale"} for cut in plant["cuts"] if cut not in recycled | taken}
    plant["outlets"] = {**sales, **plant.get("outlets", {})}
    sourced = [plant["loss"], plant["decoke_crews"]]
    sourced += [
        one for kind in ("feeds", "side_streams", "furnace_groups", "conversions") for one in plant.get(kind, {}).values()
    ]
    for one in sourced:
        one.setdefault("source", SOURCE)
    assert components
    return plant


def small_scenario(plant: Mapping[str, Any], changes: Mapping[str, Any], prices: Mapping[str, float]) -> dict[str, Any]:
    """scenario.yaml: every sale without a maximum at its price (USD/t), then what is said."""
    base: dict[str, Any] = {
        "title": "small scenario",
        "plant": "plant",
        "currency": "USD",
        "months": [{"name": "month", "hours": 1000}],
    }
    outlets: dict[str, Any] = {}
    for name, outlet in plant["outlets"].items():
        if outlet["to"] == "sale":
            outlets[name] = {"max": "unlimited", "price": f"{prices.get(name.removesuffix('_sale'), 0)} USD/t"}
    return merged({**base, "outlets": outlets}, changes)


def write(
    folder: Path,
    *,
    yields: Table,
    modes: Table,
    plant: Written = "",
    scenario: Written = "",
    prices: Mapping[str, float] | None = None,
    **tables: Table,
) -> Path:
    """Write a plant and a scenario; gives the path of the scenario."""
    all_tables = {"yields": rows_of(yields), "modes": rows_of(modes)} | {name: rows_of(t) for name, t in tables.items()}
    components = [column for column in all_tables["yields"][0] if column not in TEXTS["yields"]]
    all_tables.setdefault("components", [{"component": name} for name in components])
    identity = [{"component": name, **{cut: int(cut == name) for cut in components}} for name in components]
    all_tables.setdefault("recovery", identity)
    home = folder / "plant"
    home.mkdir(parents=True, exist_ok=True)
    for name, rows in all_tables.items():
        (home / f"{name}.csv").write_text(_table_text(name, rows), encoding="utf-8")
    of_plant = small_plant(all_tables, _read(plant))
    (home / "plant.yaml").write_text(dumped(of_plant), encoding="utf-8")
    path = folder / "scenario.yaml"
    path.write_text(dumped(small_scenario(of_plant, _read(scenario), prices or {})), encoding="utf-8")
    return path


def read(folder: Path, **parts: Any) -> Scenario:
    """The scenario of a small plant, as `write` takes it."""
    return read_scenario(write(folder, **parts))


def planned(folder: Path, **parts: Any) -> Plan:
    """The plan of a small plant, as `write` takes it."""
    return make_plan(read(folder, **parts))


def limit(plan: Plan, family: str, name: str = "", month: str | None = None) -> dict[str, Any]:
    """The one limit of a family whose words begin with a name."""
    found = [
        row
        for row in plan.limits.rows
        if row["family"] == family and row["limit"].startswith(name) and month in (None, row["month"])
    ]
    assert len(found) == 1, [row["limit"] for row in found]
    return found[0]


def identity_of_duality(plan: Plan) -> float:
    """Σ rate × limit over rows and bounds, in thousands of the currency: must be the margin of an optimum."""
    lp, solution = plan.lp, plan.solution
    worth = lp.offset
    for dual, low, high in (
        *zip(solution.row_dual, lp.row_low, lp.row_high, strict=True),
        *zip(solution.reduced, lp.low, lp.high, strict=True),
    ):
        side = high if dual > 0 else low
        worth += dual * side if math.isfinite(side) else 0.0
    return worth


def near(value: float) -> Any:
    """Equal but for rounding of floating point numbers."""
    return pytest.approx(value, rel=EXACT, abs=EXACT)


def margin_is(plan: Plan, thousands: float) -> None:
    """The margin, that the certificate holds, and that what the limits earn is the margin."""
    assert plan.margin / 1000 == near(thousands)
    assert plan.certificate.holds
    assert identity_of_duality(plan) == near(thousands)


def bought(plan: Plan, source: str, month: str = "month") -> float:
    """Bought from a source, kt."""
    return plan.quantities.bought(source, month)


def worth_and_rate(plan: Plan, family: str, name: str = "", month: str | None = None) -> tuple[float, float, str]:
    """Worth, rate and their unit of one limit."""
    row = limit(plan, family, name, month)
    return row["worth"], row["rate"], row["worth_unit"]


def dense_lp(
    cost: list[float],
    rows: dict[tuple[str, ...], tuple[float, list[float], float]],
    bounds: list[tuple[float, float]] | None = None,
    columns: list[tuple[str, ...]] | None = None,
) -> LabelledLp:
    """A `LabelledLp` written out: row label → (low, coefficients, high); columns are ≥ 0 unless bounds are given."""
    matrix = np.array([line for _, line, _ in rows.values()], dtype=float).reshape(len(rows), len(cost))
    labels = tuple(columns or [("x", str(j)) for j in range(len(cost))])
    low, high = zip(*(bounds or [(0.0, math.inf)] * len(cost)), strict=True)
    held = [np.flatnonzero(line) for line in matrix]
    return LabelledLp(
        rows=tuple(rows),
        columns=labels,
        starts=np.array([0, *np.cumsum([len(line) for line in held])], dtype=np.int32),
        index=np.concatenate(held).astype(np.int32),
        value=matrix[matrix != 0],
        row_low=np.array([row[0] for row in rows.values()], dtype=float),
        row_high=np.array([row[2] for row in rows.values()], dtype=float),
        low=np.array(low, dtype=float),
        high=np.array(high, dtype=float),
        cost=np.array(cost, dtype=float),
        offset=0.0,
        row_at={label: i for i, label in enumerate(rows)},
        column_at={label: j for j, label in enumerate(labels)},
    )
