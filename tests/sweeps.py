"""Cases of sweeps written out for tests, and what a case must be: the plan that its scenario gives by itself."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from typing import Any

import numpy as np
import pytest

from olefinlp.answers.plan import Plan, make_plan
from olefinlp.answers.sweep import Sweep, gathered, prepare, run_sweep
from olefinlp.answers.sweep_readings import MEASURES
from olefinlp.inputs.findings import InputError
from olefinlp.inputs.scenario import Scenario
from olefinlp.inputs.sweep_cases import TABLE, SweepCases
from olefinlp.inputs.varied import find_varied
from olefinlp.lp.sweep import OPTIMAL

ALL = tuple(MEASURES)
NAN = float("nan")
MARCH = "brackwater_2031_03.yaml"


def cases_of(scenario: Scenario, values: Mapping[str, Sequence[float]], percent: Iterable[str] = (), **more: Any) -> SweepCases:
    """Cases with a column of values a number; `path month` is one month of a number."""
    varied = [find_varied(scenario, *name.split(" ")) for name in values]
    matrix = np.array([list(map(float, column)) for column in values.values()]).T.reshape(-1, len(varied))
    return SweepCases(scenario, tuple(varied), tuple(name in set(percent) for name in values), matrix, TABLE, **more)


def mixed(plan: Plan, count: int) -> SweepCases:
    """Prices, a limit, a minimum that is sometimes more than can be made or sold, a yield, a run length: all kinds of change."""
    draw = np.random.default_rng(11).uniform
    values = {
        "feeds.full_range_naphtha.spot_cargo": draw(480, 600, count),
        "utilities.natural_gas": draw(3, 8, count),
        "feeds.ethane.contract.max": draw(20, 40, count),
        "outlets.polymer_grade_propylene.min": np.random.default_rng(13).choice([5, 20, 31, 33], count, p=[0.5, 0.4, 0.07, 0.03]),
        "yields.thermal.full_range_naphtha.high.ethylene": draw(27, 30, count),
        "recovery_units.c3_splitter.factor": np.where(draw(0, 1, count) < 0.2, NAN, draw(0.8, 1, count)),
    }
    return cases_of(plan.scenario, {name: list(column) for name, column in values.items()})


def priced(plan: Plan, count: int) -> SweepCases:
    draw = np.random.default_rng(12).uniform
    items = ("feeds.full_range_naphtha.spot_cargo", "utilities.natural_gas", "outlets.ethylene_contract", "outlets.c5_sale")
    return cases_of(plan.scenario, {item: list(draw(-15, 15, count)) for item in items}, percent=items)


def some(plan: Plan, count: int, **more: Any) -> SweepCases:
    """Cases of a price, a maximum, a minimum that is at times too much: three blocks where there are 300."""
    draw = np.random.default_rng(21).uniform
    values = {
        "feeds.full_range_naphtha.spot_cargo": list(draw(480, 600, count)),
        "feeds.ethane.contract.max": [NAN if n % 3 else 20 + n / 30 for n in range(count)],
        "outlets.polymer_grade_propylene.min": [
            33.0 if n % 60 == 7 else 31.0 if n % 20 == 1 else 10.0 + n % 2 for n in range(count)
        ],
    }
    return cases_of(plan.scenario, values, **more)


def solved(cases: SweepCases, measures: Sequence[str] = ALL, base: Plan | None = None, **options: Any) -> Sweep:
    """The sweep of cases, by one worker if nothing is said."""
    job = prepare(cases, measures, base)
    return gathered(job, run_sweep(job, **{"workers": 1, **options}))


def rows(cases: SweepCases, chosen: Sequence[int]) -> SweepCases:
    """Some of the cases, in another order."""
    return SweepCases(cases.scenario, cases.varied, cases.percent, cases.values[list(chosen)], cases.how)


def numbers_of(found: Sweep) -> np.ndarray:
    """All that a sweep says of its cases, but reasons."""
    return np.column_stack((found.status, found.margin, found.held, found.readings))


def same_bits(one: Sweep, other: Sweep) -> bool:
    """Whether two sweeps say the same to the last bit."""
    return np.array_equal(numbers_of(one), numbers_of(other), equal_nan=True) and dict(one.reasons) == dict(other.reasons)


def determined_rows(plan: Plan) -> np.ndarray:
    """Rows of which every set of duals of this plan says the same.

    Duals y are 0 where a row is inside its limits, and Σ a y = c for each column inside its own: y of a row is the same in
    all solutions of these equations when no vector that they take to nothing has anything of it.
    """
    from scipy.linalg import qr, solve_triangular

    lp, x = plan.lp, plan.solution.x
    activity = lp.activity(x)
    active = np.minimum(np.abs(activity - lp.row_low), np.abs(lp.row_high - activity)) <= 1e-7 * np.maximum(1, np.abs(activity))
    free = np.minimum(x - lp.low, lp.high - x) > 1e-7 * np.maximum(1.0, np.abs(x))
    matrix = np.zeros((len(lp.rows), len(lp.columns)))
    matrix[np.repeat(np.arange(len(lp.rows)), np.diff(lp.starts)), lp.index] = lp.value
    triangle, order = qr(matrix[np.ix_(active, free)].T, mode="r", pivoting=True)
    sizes = np.abs(np.diag(triangle))
    rank = int((sizes > 1e-9 * sizes.max(initial=0.0)).sum())
    nothing = np.zeros((len(order), len(order) - rank))
    nothing[order[rank:]] = np.eye(len(order) - rank)
    nothing[order[:rank]] = -solve_triangular(triangle[:rank, :rank], triangle[:rank, rank:])
    sure = np.ones(len(lp.rows), dtype=bool)
    sure[active] = np.abs(nothing).max(axis=1, initial=0.0) < 1e-9
    return sure


def _named(plan: Plan, name: str, month: Any) -> str:
    return f"{name}.{month}" if len(plan.quantities.case.months) > 1 else name


def quantities_of(plan: Plan) -> dict[str, float]:
    """What a plan's own tables say of bought, sold and charged quantities and of loads, by the names of a sweep."""
    found: dict[str, float] = {}

    def add(name: str, value: float) -> None:
        found[name] = found.get(name, 0.0) + value

    for row in plan.feeds.rows:
        add(f"bought.{row['feed']}.{row['source']}", row["bought"])
    for row in plan.slate.rows:
        add(f"sold.{row['outlet']}", row["quantity"])
    for row in plan.furnaces.rows:
        add(f"charged.{row['group']}.{row['feed']}.{row['severity']}", row["charged"])
    for row in plan.recovery.rows:
        if row["share"] is not None:
            found[_named(plan, f"load.{row['unit']}", row["month"])] = row["share"]
    for row in plan.furnace_groups.rows:
        if row["share"] is not None:
            found[_named(plan, f"hours.{row['group']}", row["month"])] = row["share"]
    return found


def worths_of(plan: Plan) -> dict[str, float]:
    """Worths of limits from a plan's own table, by the names of a sweep; of those alone that are beyond doubt."""
    sure = determined_rows(plan)
    families = {
        (limit.label, limit.month): (f"{limit.family}_limit", *limit.key) for limit in plan.quantities.case.limits.values()
    }
    return {
        _named(plan, f"worth.{row['limit']}", row["month"]): row["worth"]
        for row in plan.limits.rows
        if sure[plan.lp.row_at[families[row["limit"], row["month"]]]]
    }


def agrees_with_plans(found: Sweep, chosen: Iterable[int], most: int = 3) -> tuple[int, int]:
    """Cases against the plans of their scenarios; how many were the only plan, and how many worths above 0 were beyond doubt.

    Worths are looked at in `most` of them: what is beyond doubt takes long to say.
    """
    only, sure = 0, 0
    for number in chosen:
        row = {name: column[0] for name, column in found.columns(number, number + 1).items()}
        try:
            plan = make_plan(found.cases.scenario_of(number))
        except InputError as error:
            assert row["status"] == "no valid case", (number, row["status"])
            assert any(finding.message[:25] in row["reason"] for finding in error.findings)
            continue
        assert row["status"] == "optimal", (number, row["reason"])
        assert found.margin[number] == pytest.approx(plan.margin / 1000, rel=1e-9), number
        if not plan.neighbours.only_one():  # nothing outside the basis is free of cost: no other plan earns as much
            continue
        only += 1
        worths = worths_of(plan) if only <= most else {}
        sure += sum(worth > 0 for worth in worths.values())
        expected = quantities_of(plan) | worths
        for name, value in expected.items():
            assert row[name] == pytest.approx(value, rel=1e-6, abs=1e-7), (number, name)
    return only, sure


def optimal(found: Sweep) -> int:
    """How many cases have a plan."""
    return int((found.status == OPTIMAL).sum())
