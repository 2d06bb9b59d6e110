"""What must hold for any plant: drawn small plants, and the shipped ones pushed a little.

Hypothesis runs the same examples every time (profile `repeatable` in conftest.py).
"""

from __future__ import annotations

import csv
import random
import shutil
import tempfile
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from plants import identity_of_duality, planned
from ruamel.yaml import YAML

from olefinlp.answers.plan import Plan, make_plan
from olefinlp.inputs.scenario import read_scenario
from olefinlp.lp.compile import LabelledLp
from olefinlp.lp.solver import Solver

CUTS = ("ethylene", "propylene", "rest", "again")
MARCH = "brackwater_2031_03.yaml"


# ---------------------------------------------------------------------------------- drawn plants


@st.composite
def shares(draw: st.DrawFn, most_again: int) -> list[int]:
    """Four whole percentages that sum to 100, the recycled one not above a limit."""
    again = draw(st.integers(0, most_again))
    first, second = sorted(draw(st.lists(st.integers(0, 100 - again), min_size=2, max_size=2)))
    return [first, second - first, 100 - again - second, again]


@st.composite
def drawn_plants(draw: st.DrawFn) -> dict[str, Any]:
    """The numbers of a plant of one to three feeds in one or two months; some plan is always possible."""
    feeds = draw(st.integers(1, 3))
    number = st.integers(1, 40)
    return {
        "yields": [draw(shares(60)) for _ in range(feeds + 1)],
        "charge": [draw(number) for _ in range(feeds + 1)],
        "bought": [draw(st.integers(0, 30)) for _ in range(feeds)],
        "feed_price": [draw(st.integers(0, 900)) for _ in range(feeds)],
        "price": [draw(st.integers(0, 1500)) for _ in CUTS],
        "furnaces": draw(st.integers(1, 5)),
        "splitter": draw(number),
        "ethylene_most": draw(number),
        "ratio": draw(st.floats(0.1, 3).map(lambda value: round(value, 3))),
        "take": draw(st.integers(0, 5)),
        "months": draw(st.integers(1, 2)),
        "tank": draw(st.integers(0, 6)),
    }


def parts(drawn: dict[str, Any], times: float = 1.0) -> dict[str, Any]:
    """The files of a drawn plant, all its prices multiplied."""
    feeds = [f"feed{k}" for k in range(len(drawn["bought"]))]
    names = [*feeds, "recycled"]
    yields = [
        {"feed": f, "severity": "base", **dict(zip(CUTS, row, strict=True))}
        for f, row in zip(names, drawn["yields"], strict=True)
    ]
    modes = [
        {"group": "furnaces", "feed": f, "severity": "base", "charge": rate, "run_length": 20, "decoke": 24}
        for f, rate in zip(names, drawn["charge"], strict=True)
    ]
    sources = {
        f: {"spot": {"max": f"{most} kt", "price": f"{times * price} USD/t"}}
        for f, most, price in zip(feeds, drawn["bought"], drawn["feed_price"], strict=True)
    }
    take = min(drawn["take"], drawn["bought"][0])
    sources["feed0"]["spot"] |= {"take_or_pay": f"{take} kt", "shortfall_pays": "30 %"}
    tank = {
        "opening": f"{drawn['tank'] / 2} kt",
        "min": "0 kt",
        "max": f"{drawn['tank']} kt",
        "end": {"value": f"{times * 200} USD/t"},
    }
    return {
        "yields": yields,
        "modes": modes,
        "recovery_units": f"unit, capacity, capacity_unit, measure, min_load\nsplitter, {drawn['splitter']}, t/h, propylene, 0",
        "unit_loads": "unit, of, item, load, load_unit\nsplitter, component, propylene, 1, t/t\nsplitter, cut, rest, 0.3, t/t",
        "plant": {
            "feeds": {"recycled": {"recycle_of": "again"}},
            "furnace_groups": {"furnaces": {"furnaces": drawn["furnaces"], "unplanned_loss": "3 %"}},
            "loss": {"share": "0.5 wt%"},
            "outlets": {"again_sale": {"from": "again", "to": "sale"}},
            "ratio_limits": {
                "heavy": {"of": [{"cut": "rest"}], "to": [{"cut": ["ethylene", "propylene"]}], "at_most": drawn["ratio"]}
            },
        },
        "prices": {name: times * price for name, price in zip(CUTS, drawn["price"], strict=True)},
        "scenario": {
            "months": [{"name": f"m{k}", "hours": 500} for k in range(drawn["months"])],
            "feeds": sources,
            "outlets": {"ethylene_sale": {"max": f"{drawn['ethylene_most']} kt"}},
            "stocks": {"feed0": {**tank, "holding": f"{times * 0.01} USD/t/h"}} if drawn["months"] > 1 else {},
            "variable_costs": {"decoking": {"of": "decoke", "item": "all", "cost": f"{times * 20000} USD"}},
        },
    }


def plan_of(drawn: dict[str, Any], times: float = 1.0) -> Plan:
    with tempfile.TemporaryDirectory() as folder:
        return planned(Path(folder), **parts(drawn, times))


@given(drawn_plants())
@settings(max_examples=30)
def test_a_drawn_plant_has_a_proven_plan(drawn: dict[str, Any]) -> None:
    """The certificate and all balances hold (`make_plan` raises if not), and what the limits earn is the margin."""
    plan = plan_of(drawn)
    assert plan.certificate.holds
    moved = sum(abs(line.amount) for line in plan.lines)
    assert identity_of_duality(plan) == pytest.approx(plan.margin / 1000, rel=1e-9, abs=1e-9 * moved)
    assert sum(line.amount for line in plan.lines) == pytest.approx(plan.margin / 1000, rel=1e-9, abs=1e-9 * moved)


@given(drawn_plants(), st.floats(0.01, 100))
@settings(max_examples=25)
def test_all_prices_times_k_is_the_margin_times_k(drawn: dict[str, Any], k: float) -> None:
    plan, scaled = plan_of(drawn), plan_of(drawn, k)
    moved = sum(abs(line.amount) for line in plan.lines)
    assert scaled.margin / 1000 == pytest.approx(k * plan.margin / 1000, rel=1e-9, abs=1e-9 * k * moved)
    same_plan_at_k = scaled.lp.cost @ plan.solution.x + scaled.lp.offset
    assert same_plan_at_k == pytest.approx(k * plan.margin / 1000, rel=1e-9, abs=1e-9 * k * moved)


@given(drawn_plants())
@settings(max_examples=25)
def test_rates_of_a_drawn_plant_bound_every_step(drawn: dict[str, Any]) -> None:
    plan = plan_of(drawn)
    for row, label in enumerate(plan.lp.rows):
        if label[0].endswith("_limit"):
            check_rate(plan, Solver(plan.lp), row)


# ---------------------------------------------------------------------------------- limits pushed a little


def margin_with(solver: Solver, lp: LabelledLp, row: int, low: float, high: float) -> float | None:
    """The margin with other limits on one row, which is put back; None when no plan is possible."""
    solver.set_row(row, low, high)
    outcome = solver.solve()
    solver.set_row(row, lp.row_low[row], lp.row_high[row])
    return outcome.solution.objective if outcome.solution else None


def check_rate(plan: Plan, solver: Solver, row: int) -> None:
    """The margin is concave in a limit, so margin + rate × step is never beaten, and where the rate is not zero it is met
    by a small step to one side at least: to the other the basis may change at once."""
    lp, rate, best = plan.lp, float(plan.solution.row_dual[row]), plan.solution.objective
    low, high = lp.row_low[row], lp.row_high[row]
    if rate == 0 or low == high:
        return
    at = high if rate > 0 else low
    size = max(float(lp.sizes(plan.solution.x)[row]), 1e-3 * float(np.abs(plan.solution.x).max()))
    rounding = 1e-10 * float(np.abs(lp.cost) @ np.abs(plan.solution.x))
    met = []
    for step in (1e-4 * size, -1e-4 * size):
        found = margin_with(solver, lp, row, *((low, at + step) if rate > 0 else (at + step, high)))
        if found is None:
            assert rate * step <= 0, f"{lp.rows[row]}: relaxed, and no plan any more"
            continue
        assert found <= best + rate * step + 1e-6 * abs(rate * step) + rounding, lp.rows[row]
        met.append(abs(found - best - rate * step) <= 1e-3 * abs(rate * step) + rounding)
    assert any(met), f"{lp.rows[row]}: rate {rate} met on neither side"


def test_every_rate_equals_a_second_solve_a_small_step_away(every_plan: Plan) -> None:
    """Each binding limit of each shipped scenario, 1e-4 of its size up and down."""
    solver = Solver(every_plan.lp)
    rows = [
        row for row, label in enumerate(every_plan.lp.rows) if label[0].endswith("_limit") and every_plan.solution.row_dual[row]
    ]
    assert rows
    for row in rows:
        check_rate(every_plan, solver, row)


def test_relaxing_any_one_limit_never_lowers_the_margin(every_plan: Plan) -> None:
    """Every side of every limit, binding or slack, 5 % of what moves in its row (or of its number) looser, then tighter."""
    lp, best = every_plan.lp, every_plan.solution.objective
    solver, sizes = Solver(lp), every_plan.lp.sizes(every_plan.solution.x)
    rounding = 1e-10 * float(np.abs(lp.cost) @ np.abs(every_plan.solution.x))
    for row, label in enumerate(lp.rows):
        if not label[0].endswith("_limit"):
            continue
        for low_side in (True, False):
            written = lp.row_low[row] if low_side else lp.row_high[row]
            if not np.isfinite(written):
                continue
            step = 0.05 * max(abs(written), sizes[row])
            bounds = [(lp.row_low[row] - way * step, lp.row_high[row]) for way in (1, -1)]
            if not low_side:
                bounds = [(lp.row_low[row], lp.row_high[row] + way * step) for way in (1, -1)]
            looser = margin_with(solver, lp, row, *bounds[0])
            assert looser is not None
            assert looser >= best - rounding, label
            tighter = margin_with(solver, lp, row, *bounds[1])
            assert tighter is None or tighter <= best + rounding, label


@pytest.mark.parametrize(
    ("item", "looser"),
    [
        ("outlets.ethylene_contract.max", "59 kt"),
        ("feeds.ethane.contract.max", "31 kt"),
        ("feeds.light_naphtha.contract.take_or_pay", "19 kt"),
        ("outlets.ethylene_contract.min", "40 kt"),
        ("outlets.hydrogen_sale.max", "1 kt"),
    ],
)
def test_relaxing_a_limit_in_the_file_never_lowers_the_margin(march: Plan, item: str, looser: str) -> None:
    assert make_plan(march.scenario.with_({item: looser})).margin >= march.margin * (1 - 1e-10)


# ---------------------------------------------------------------------------------- shipped files, other order, other prices


def shuffled(data: Any, rng: random.Random) -> Any:
    """Mappings in another order; lists keep theirs, which has a meaning (months, steps, the first cut of a blend)."""
    if isinstance(data, dict):
        keys = list(data)
        rng.shuffle(keys)
        return {key: shuffled(data[key], rng) for key in keys}
    return [shuffled(item, rng) for item in data] if isinstance(data, list) else data


def shuffle_file(path: Path, rng: random.Random) -> None:
    if path.suffix == ".yaml":
        yaml = YAML(typ="safe", pure=True)
        data = shuffled(yaml.load(path), rng)
        yaml.sort_base_mapping_type_on_output = False
        yaml.dump(data, path)
        return
    with open(path, newline="", encoding="utf-8") as file:
        header, *lines = csv.reader(file)
    rng.shuffle(lines)
    order = list(range(len(header)))
    if path.parent.name != "prices":  # there a blank cell means the first case, so the order of columns has a meaning
        rng.shuffle(order)
    with open(path, "w", newline="", encoding="utf-8") as file:
        csv.writer(file).writerows([[line[k] for k in order] for line in (header, *lines)])


def copied(root: Path, folder: Path) -> Path:
    for name in ("models", "scenarios"):
        shutil.copytree(root / name, folder / name, dirs_exist_ok=True)
    return folder


@pytest.mark.parametrize("name", [MARCH, "marram_point_2031_03.yaml", "thermal_cracker.yaml"])
@given(seed=st.integers(0, 10_000))
@settings(max_examples=4)
def test_the_order_of_rows_and_names_changes_nothing(
    name: str, root: Path, shipped_plan: Callable[[str], Plan], seed: int
) -> None:
    rng = random.Random(seed)
    with tempfile.TemporaryDirectory() as folder:
        home = copied(root, Path(folder))
        for path in (*home.rglob("*.yaml"), *home.rglob("*.csv")):
            shuffle_file(path, rng)
        scenario = read_scenario(home / "scenarios" / name)
        assert (
            list(scenario.plant.file.cuts) != list(shipped_plan(name).scenario.plant.file.cuts)
            or len(scenario.plant.file.cuts) < 3
        )
        assert make_plan(scenario).margin == pytest.approx(shipped_plan(name).margin, rel=1e-10)


@pytest.mark.parametrize("k", [0.5, 3.0])
def test_all_prices_of_march_times_k(march: Plan, root: Path, tmp_path: Path, k: float) -> None:
    """Prices of the table and costs of the scenario times k (fractions of another price stay): same purchases, k times margin."""
    home = copied(root, tmp_path)
    table = home / "scenarios" / "prices" / "brackwater.csv"
    with open(table, newline="", encoding="utf-8") as file:
        header, *rows = csv.reader(file)
    base, unit = header.index("Base"), header.index("unit")
    for row in rows:
        if row[unit] != "fraction":
            row[base:] = [str(k * float(cell)) if cell else "" for cell in row[base:]]
    with open(table, "w", newline="", encoding="utf-8") as file:
        csv.writer(file).writerows([header, *rows])
    costs = {"chemicals": f"{5 * k} USD/t", "decoking": f"{18000 * k} USD", "hydrotreating": f"{22 * k} USD/t"}
    scenario = read_scenario(home / "scenarios" / MARCH).with_(
        {f"variable_costs.{name}.cost": cost for name, cost in costs.items()}
    )
    plan = make_plan(scenario)
    assert plan.margin == pytest.approx(k * march.margin, rel=1e-10)
    for source in march.quantities.case.sources:
        assert plan.quantities.bought(source, "2031-03") == pytest.approx(
            march.quantities.bought(source, "2031-03"), rel=1e-8, abs=1e-8
        )
