"""Step curves and ratio curves against plans made again: just inside both ends of steps, at limits in the middle of them.

A price is written into the file and the month planned from nothing; a limit is moved in the arrays of the plan and solved cold;
a ratio is one row more, solved by another way into the solver.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from plants import ONE_FEED, planned
from scipy.optimize import linprog
from scipy.sparse import csr_matrix, vstack
from test_break_even import repriced

from olefinlp.answers.answer import Answer
from olefinlp.answers.curves import step_curve
from olefinlp.answers.plan import NoPlan, Plan, make_plan
from olefinlp.answers.ratio_curve import FLAT, ratio_curve
from olefinlp.inputs.case import Limit
from olefinlp.lp.neighbours import NeighbourError, RatioNeighbours
from olefinlp.lp.solver import Status, solve

MARCH, APRIL, MARRAM, TEXTBOOK = (
    "brackwater_2031_03.yaml",
    "brackwater_2031_04.yaml",
    "marram_point_2031_03.yaml",
    "thermal_cracker.yaml",
)
HALF_YEAR = "brackwater_2031_03_to_08.yaml"
INF = math.inf
Row = dict[str, Any]


def solves_of(plan: Plan, ask: Callable[[], Answer]) -> tuple[Answer, int]:
    """An answer and how many solves it took."""
    before = plan.neighbours.solves
    answer = ask()
    return answer, plan.neighbours.solves - before


def steps_that_fit(rows: list[Row]) -> None:
    """Steps follow one another without a gap, in prices and in money, and no two of a kind."""
    for a, b in itertools.pairwise(rows):
        assert (b["low"], b["margin_low"]) == (a["high"], a["margin_high"])
        assert a["level"] != pytest.approx(b["level"], rel=1e-9)


# ---------------------------------------------------------------------------------- prices


def bought(source: str) -> Callable[[Plan, str], float]:
    """Quantity of a source."""
    return lambda plan, month: plan.quantities.bought(source, month)


def owed(source: str, share: float) -> Callable[[Plan, str], float]:
    """What a price with take-or-pay prices: what is bought, and a share of what is not."""
    return lambda plan, month: plan.quantities.bought(source, month) + share * plan.quantities.value("shortfall", source, month)


def propylene(plan: Plan, month: str) -> float:
    """What both grades sell: the lesser leans on the better one's price."""
    return sum(plan.quantities.outlet(f"{grade}_grade_propylene", month) for grade in ("polymer", "chemical"))


def gas_sold_net(plan: Plan, month: str) -> float:
    """Fuel gas is exported at 0.8 of the price at which natural gas is bought."""
    return 0.8 * plan.quantities.outlet("fuel_gas_export", month) - plan.quantities.value("trade", "natural_gas", month)


def decokes(plan: Plan, month: str) -> float:
    """Decokes of the month, counted from the charges."""
    case = plan.quantities.case
    return sum(case.decokes_per_kt[mode] * plan.quantities.charged(mode, month) for mode in case.modes)


@pytest.mark.parametrize(
    ("name", "item", "quantity", "low", "high"),
    [
        (MARCH, "feeds.full_range_naphtha.spot_cargo", bought("full_range_naphtha.spot_cargo"), 515, 560),
        (MARCH, "feeds.ethane.spot_pipeline", bought("ethane.spot_pipeline"), None, None),
        (MARCH, "feeds.light_naphtha.contract", owed("light_naphtha.contract", 0.4), 50, 100),
        (MARCH, "outlets.polymer_grade_propylene", propylene, 37, 42),
        (MARCH, "utilities.natural_gas", gas_sold_net, 0.5, 7),
        (MARCH, "variable_costs.decoking", decokes, 0, 200_000),
        (MARRAM, "feeds.ethane.pipeline.tiers.1", bought("ethane.pipeline"), 300, None),
        (MARRAM, "outlets.fuel_oil_sale", lambda plan, month: plan.quantities.outlet("fuel_oil_sale", month), None, None),
        (TEXTBOOK, "feeds.ethane.purchase", bought("ethane.purchase"), None, None),
    ],
)
def test_a_price(
    name: str,
    item: str,
    quantity: Callable[[Plan, str], float],
    low: float | None,
    high: float | None,
    shipped_plan: Callable[[str], Plan],
    tmp_path: Path,
) -> None:
    """Close to each end of a step the plan made at that price has the step's quantity, and the margins at the ends are those of
    plans; quantities move one way with the price, so in the middle they are the same. For a step of a contract its own
    quantity counts: 9 kt of the 14."""
    plan = shipped_plan(name)
    month, answer = plan.quantities.case.months[0], step_curve(plan, item, low, high)
    rows = answer.table.rows
    steps_that_fit(rows)
    unit = answer.table.columns[0].heading.removeprefix("From, ")
    assert sum(row["today"] == "here" for row in rows) == 1

    def planned_at(price: float) -> Plan:
        if item.startswith("variable_costs"):
            return make_plan(plan.scenario.with_({f"{item}.cost": f"{price!r} {unit}"}))
        return make_plan(repriced(plan.scenario, item, f"{price!r} {unit}", tmp_path))

    for row in rows[:: max(1, len(rows) // 3)]:
        width = row["high"] - row["low"]
        for at in (row["low"] + 1e-3 * width, row["high"] - 1e-3 * width):
            expected = quantity(planned_at(at), month)
            expected = min(expected, 9.0) if item.endswith("tiers.1") else expected
            assert row["level"] == pytest.approx(expected, rel=1e-6, abs=1e-6 * plan.quantities.size), (row, at)
        margin = planned_at(row["low"] or 1e-9).margin / 1000
        assert row["margin_low"] == pytest.approx(margin, rel=1e-7)


def test_carbon(march: Plan) -> None:
    """CO2 of the plant against its price: the quantity falls; compared with programs whose prices are changed in the arrays."""
    answer = step_curve(march, "utilities.carbon", 0, 200)
    rows = answer.table.rows
    steps_that_fit(rows)
    assert len(rows) > 4
    column = march.lp.column_at["trade", "carbon", "2031-03"]
    for row in rows:
        cost = march.lp.cost.copy()
        cost[column] = -(row["low"] + row["high"]) / 2
        found = solve(replace(march.lp, cost=cost)).solution
        assert found is not None
        assert row["level"] == pytest.approx(float(found.x[column]), rel=1e-7)
    levels = [row["level"] for row in rows]
    assert levels == sorted(levels, reverse=True)
    assert rows[0]["level"] > 65 > 50 > rows[-1]["level"]


def test_a_price_at_which_what_is_bought_becomes_what_is_sold(march: Plan) -> None:
    """Cheap gas is bought, dear gas exported: the levels rise through zero, and the note says which is which."""
    answer = step_curve(march, "utilities.natural_gas", 0.5, 7)
    levels = [row["level"] for row in answer.table.rows]
    assert levels[0] < 0 < levels[-1]
    assert levels == sorted(levels)
    assert "Below zero it is bought, above it is sold. Exact" in answer.note
    assert "outlets.fuel_gas_export move with it" in answer.note
    bought = [row for row in answer.table.rows if row["own"] > 1]
    assert bought  # dear enough an export is there for gas that is bought itself only where it is cheap
    assert all(row["high"] <= min(r["low"] for r in answer.table.rows if not r["own"]) for row in bought)


def test_what_is_paid_and_not_taken_is_said(march: Plan) -> None:
    assert "What is paid for and not taken" in step_curve(march, "feeds.light_naphtha.contract").note
    assert "What is paid for and not taken" not in step_curve(march, "feeds.light_naphtha.spot").note


def test_steps_stay_between_their_neighbours(shipped_plan: Callable[[str], Plan]) -> None:
    """A price of a step may not pass the next one's: a discount is no curve of this contract. 335 and 372 EUR/t are written
    for ethane, 905 and 838 for ethylene."""
    plan = shipped_plan(MARRAM)
    ends = {}
    for item in ("feeds.ethane.pipeline.tiers.1", "feeds.ethane.pipeline.tiers.2", "outlets.ethylene_sale.tiers.1"):
        rows = step_curve(plan, item).table.rows
        ends[item] = (rows[0]["low"], rows[-1]["high"])
    assert ends["feeds.ethane.pipeline.tiers.1"] == (pytest.approx(335 * 0.7), pytest.approx(372))
    assert ends["feeds.ethane.pipeline.tiers.2"] == (pytest.approx(335), pytest.approx(372 * 1.3))
    assert ends["outlets.ethylene_sale.tiers.1"] == (pytest.approx(838), pytest.approx(905 * 1.3))


# ---------------------------------------------------------------------------------- limits


def limit_of(plan: Plan, family: str, name: str) -> Limit:
    """One limit of the first month."""
    return plan.quantities.case.limits[family, name, plan.quantities.case.months[0]]


def moved(plan: Plan, limit: Limit, low_side: bool, at: float) -> float | None:
    """The best margin with one side of a limit at another place (units in which people read it); None when there is none."""
    row = plan.lp.row_at[f"{limit.family}_limit", *limit.key]
    low, high = plan.lp.row_low.copy(), plan.lp.row_high.copy()
    (low if low_side else high)[row] = at / limit.scale
    outcome = solve(replace(plan.lp, row_low=low, row_high=high))
    assert outcome.status in (Status.OPTIMAL, Status.INFEASIBLE)
    return outcome.solution.objective if outcome.solution else None


@pytest.mark.parametrize(
    ("item", "family", "name", "low_side", "low", "high"),
    [
        ("recovery_units.cracked_gas_compressor.capacity", "unit_load", "cracked_gas_compressor", False, 220, 240),
        ("furnace_groups.gas_furnaces.hours", "furnace_hours", "gas_furnaces", False, 2500, 3500),
        ("outlets.ethylene_contract.max", "outlet", "ethylene_contract", False, 50, None),
        ("feeds.light_naphtha.contract.take_or_pay", "take_or_pay", "light_naphtha.contract", True, None, None),
        ("outlets.polymer_grade_propylene.min", "outlet", "polymer_grade_propylene", True, 10, 24),
        ("feeds.ethane.contract.max", "purchase", "ethane.contract", False, None, None),
    ],
)
def test_a_limit(item: str, family: str, name: str, low_side: bool, low: float | None, high: float | None, march: Plan) -> None:
    """Margins at the ends of steps are those of cold programs with the limit there, and the worth is their slope."""
    limit = limit_of(march, family, name)
    rows = step_curve(march, item, low, high).table.rows
    steps_that_fit(rows)
    assert len(rows) > 2
    for row in rows:
        ends = [moved(march, limit, low_side, row[end]) for end in ("low", "high")]
        middle = moved(march, limit, low_side, (row["low"] + row["high"]) / 2)
        assert [row["margin_low"], row["margin_high"]] == pytest.approx(ends, rel=1e-9)
        assert middle == pytest.approx((row["margin_low"] + row["margin_high"]) / 2, rel=1e-9)
        per_unit = (row["margin_high"] - row["margin_low"]) / (row["high"] - row["low"]) * limit.scale * limit.worth_scale
        assert row["level"] == pytest.approx(per_unit, rel=1e-6, abs=1e-6)
    changes = [row["level"] for row in rows]
    assert changes == sorted(changes, reverse=True)
    assert max(changes) <= 1e-9 if low_side else min(changes) >= 0  # a minimum costs, a maximum earns


def test_today_is_on_the_curve(march: Plan) -> None:
    """At today's value the margin is the plan's."""
    for item in ("recovery_units.cracked_gas_compressor.capacity", "feeds.gas_oil.spot_barge", "outlets.hydrogen_sale.max"):
        answer = step_curve(march, item)
        here = next(row for row in answer.table.rows if row["today"])
        today = answer.chart.today if answer.chart else math.nan
        share = (today - here["low"]) / (here["high"] - here["low"])
        value = here["margin_low"] + share * (here["margin_high"] - here["margin_low"])
        assert value == pytest.approx(march.margin / 1000, rel=1e-9)


@pytest.mark.parametrize(
    ("name", "item", "family", "key", "low_side", "which"),
    [
        (MARCH, "outlets.ethylene_contract.max", "outlet", "ethylene_contract", False, "low"),
        (MARCH, "outlets.ethylene_contract.min", "outlet", "ethylene_contract", True, "high"),
        (MARCH, "recovery_units.c2_splitter.capacity", "unit_load", "c2_splitter", False, "low"),
        (MARRAM, "recovery_units.propylene_splitter.capacity", "unit_load", "propylene_splitter", False, "low"),
    ],
)
def test_a_range_is_cut_where_no_plan_is(
    name: str, item: str, family: str, key: str, low_side: bool, which: str, shipped_plan: Callable[[str], Plan]
) -> None:
    """At the cut end there is a plan, a millionth beyond it there is none."""
    plan = shipped_plan(name)
    rows = step_curve(plan, item).table.rows
    end = rows[0]["low"] if which == "low" else rows[-1]["high"]
    beyond = end * (1 - 1e-6 if which == "low" else 1 + 1e-6)
    limit = limit_of(plan, family, key)
    assert moved(plan, limit, low_side, end) is not None
    assert moved(plan, limit, low_side, beyond) is None


def test_through_the_file(march: Plan) -> None:
    """58 kt of ethylene are in the contract: at 60 kt the plan earns what the curve says; below its minimum of 44 is none."""
    rows = step_curve(march, "outlets.ethylene_contract.max", 30, 60).table.rows
    other = make_plan(march.scenario.with_({"outlets.ethylene_contract.max": "60 kt"}))
    assert rows[-1]["margin_high"] == pytest.approx(other.margin / 1000, rel=1e-9)
    assert rows[0]["low"] == pytest.approx(44)


# ---------------------------------------------------------------------------------- words, counts, errors


@pytest.mark.parametrize(
    ("name", "item", "low", "high"),
    [
        (MARCH, "feeds.full_range_naphtha.spot_cargo", None, None),
        (MARCH, "outlets.ethylene_spot", None, None),
        (MARCH, "recovery_units.pygas_hydrotreater.capacity", None, None),
        (MARRAM, "indexes.naphtha", None, None),
        (MARRAM, "limits.jetty.max", None, None),
        (TEXTBOOK, "recovery_units.ethylene.capacity", None, None),
    ],
)
def test_counts(name: str, item: str, low: float | None, high: float | None, shipped_plan: Callable[[str], Plan]) -> None:
    """2n + 1 solves for n steps at most, and one a step more to show an item apart from the prices that lean on it."""
    plan = shipped_plan(name)
    answer, solves = solves_of(plan, lambda: step_curve(plan, item, low, high))
    steps = len(answer.table.rows)
    assert solves <= 2 * steps + 1 + (steps if "own" in answer.table.rows[0] else 0)


def test_sentences(march: Plan) -> None:
    assert step_curve(march, "feeds.full_range_naphtha.spot_cargo", 515, 560).sentences == (
        "feeds.full_range_naphtha.spot_cargo: today 534 USD/t; between 523.8 and 534.7 it is 47.56 kt, above that 43.57, below "
        "that 48.02; 18 steps between 515 and 560 USD/t.",
    )
    assert step_curve(march, "variable_costs.decoking").sentences == (
        "variable_costs.decoking: today 1.8e+04 USD; between 1.26e+04 and 2.34e+04 it is 8.552 pieces; 1 step between 1.26e+04 "
        "and 2.34e+04 USD.",
    )


def test_an_unknown_item_has_a_near_name(march: Plan) -> None:
    with pytest.raises(
        ValueError, match=r"`feeds\.ethan\.contract` is no price or limit of this plan; .*feeds\.ethane\.contract"
    ):
        step_curve(march, "feeds.ethan.contract")
    with pytest.raises(ValueError, match=r"`2031-3` is not a period of this plan"):
        step_curve(march, "feeds.ethane.contract", month="2031-3")


@pytest.mark.parametrize(("low", "high"), [(50, 50), (60, 40), (-5, -1)])
def test_an_empty_range(march: Plan, low: float, high: float) -> None:
    with pytest.raises(ValueError, match="is empty"):
        step_curve(march, "outlets.ethylene_contract.max", low, high)


def test_a_range_without_a_plan(march: Plan) -> None:
    """44 kt must be delivered under the contract: with at most 20 to 40 there is no plan."""
    with pytest.raises(ValueError, match="no plan is possible anywhere near today's value in this range"):
        step_curve(march, "outlets.ethylene_contract.max", 20, 40)


def test_a_price_at_which_the_margin_has_no_end(march: Plan, monkeypatch: pytest.MonkeyPatch) -> None:
    """What the checks of a scenario let through is an error with the range in it, not a solver's word."""

    def endless(**_: object) -> None:
        raise NeighbourError("a neighbour ended as Unbounded")

    monkeypatch.setattr(march.neighbours, "solve", endless)
    with pytest.raises(ValueError, match=r"between 373\.8 and 694\.2 USD/t the margin has no end: ask for less"):
        step_curve(march, "feeds.full_range_naphtha.spot_cargo")


# ---------------------------------------------------------------------------------- months


TWO_MONTHS = """
    months: [{{name: first, hours: 1000}}, {{name: second, hours: 500}}]
    feeds: {{naphtha: {{spot: {{max: {{first: {first} kt, second: 2 kt}}, price: {{first: 500 USD/t, second: 550 USD/t}}}}}}}}
"""


def test_months_move_together_or_one_alone(tmp_path: Path) -> None:
    """A tonne gives 600: 100 in the first month, 50 in the second. 4 and 2 kt are offered; the furnace cracks 10, then 5 kt.

    Together and in proportion, a kt more in the first brings half a kt in the second: 125 USD per t of the first. The second
    alone is worth 50. Prices: 1 USD/t more on both costs 6 kUSD; at 600 in the first month (650 in the second, where nothing
    is bought any more from 600 on, which is 550 in the first) nothing is bought."""
    plan = planned(tmp_path, **ONE_FEED, scenario=TWO_MONTHS.format(first=4))
    answer = step_curve(plan, "feeds.naphtha.spot.max", 2, 9)
    assert [(r["low"], r["high"], r["level"]) for r in answer.table.rows] == [(2, 9, pytest.approx(125))]
    assert answer.table.rows[0]["margin_low"] == pytest.approx(2 * 125)
    assert answer.note.startswith("All months move in proportion to first. Exact")
    alone = step_curve(plan, "feeds.naphtha.spot.max", 1, 9, month="second")
    rows = [(r["low"], r["high"], r["level"]) for r in alone.table.rows]
    assert rows == [(1, pytest.approx(5), pytest.approx(50)), (pytest.approx(5), 9, pytest.approx(0, abs=1e-6))]
    assert alone.note.startswith("Exact")
    price = step_curve(plan, "feeds.naphtha.spot", 450, 620)
    assert [(r["low"], r["high"], r["level"]) for r in price.table.rows] == [
        (450, pytest.approx(550), pytest.approx(6)),
        (pytest.approx(550), pytest.approx(600), pytest.approx(4)),
        (pytest.approx(600), 620, pytest.approx(0, abs=1e-6)),
    ]
    assert price.note.startswith("All months move by the same amount. Exact")


def test_from_nothing_in_the_first_month(tmp_path: Path) -> None:
    """A first month of 0 kt has no proportion: 2 kt are added to both months, and each is worth its own 100 and 50."""
    plan = planned(tmp_path, **ONE_FEED, scenario=TWO_MONTHS.format(first=0))
    rows = step_curve(plan, "feeds.naphtha.spot.max", 0, 2).table.rows
    assert [(r["low"], r["high"], r["level"]) for r in rows] == [(0, 2, pytest.approx(150))]
    assert rows[0]["margin_low"] == pytest.approx(plan.margin / 1000) == pytest.approx(100)


@pytest.mark.slow
def test_six_months(shipped_plan: Callable[[str], Plan]) -> None:
    """One month of six alone: the quantity of that month, from programs with that one price changed in the arrays. All six
    together: the sum. A limit that differs by month keeps its proportions, and today is on the curve."""
    plan = shipped_plan(HALF_YEAR)
    months, item = plan.quantities.case.months, "feeds.full_range_naphtha.spot_cargo"
    columns = {m: plan.lp.column_at["bought", item.removeprefix("feeds."), "1", m] for m in months}
    for month, own, span in (("2031-05", ("2031-05",), (532, 536)), (None, months, (533.5, 534.5))):
        answer, solves = solves_of(plan, lambda month=month, span=span: step_curve(plan, item, *span, month=month))
        rows = answer.table.rows
        steps_that_fit(rows)
        assert solves <= 2 * len(rows) + 1
        for row in rows[:: max(1, len(rows) // 3)]:
            cost = plan.lp.cost.copy()
            cost[[columns[m] for m in own]] = -(row["low"] + row["high"]) / 2
            found = solve(replace(plan.lp, cost=cost)).solution
            assert found is not None
            assert row["level"] == pytest.approx(sum(float(found.x[columns[m]]) for m in own), rel=1e-6)
    rows = step_curve(plan, "outlets.crude_c4_contract.max", 17.4, 17.6).table.rows
    here = next(row for row in rows if row["today"])
    share = (17.5 - here["low"]) / (here["high"] - here["low"])
    value = here["margin_low"] + share * (here["margin_high"] - here["margin_low"])
    assert value == pytest.approx(plan.margin / 1000, rel=1e-8)


# ---------------------------------------------------------------------------------- ratios


def best_at(plan: Plan, of: str, to: str, ratio: float) -> float | None:
    """The best margin with the ratio as a row, by scipy; None when there is none."""
    lp, month = plan.lp, plan.quantities.case.months[0]
    matrix = csr_matrix((lp.value.copy(), lp.index.copy(), lp.starts.copy()), shape=(len(lp.rows), len(lp.columns)))
    held = np.zeros((1, len(lp.columns)))
    held[0, lp.column_at["cut_made", of, month]] = 1.0
    held[0, lp.column_at["cut_made", to, month]] = -ratio
    equal = np.flatnonzero(lp.row_low == lp.row_high)
    most = np.flatnonzero(np.isfinite(lp.row_high) & (lp.row_low != lp.row_high))
    least = np.flatnonzero(np.isfinite(lp.row_low) & (lp.row_low != lp.row_high))
    found = linprog(
        -lp.cost,
        A_ub=vstack([matrix[most], -matrix[least]]),
        b_ub=np.concatenate([lp.row_high[most], -lp.row_low[least]]),
        A_eq=vstack([matrix[equal], csr_matrix(held)]),
        b_eq=np.append(lp.row_low[equal], 0.0),
        bounds=np.column_stack([lp.low, lp.high]),
        method="highs-ds",
        options={"primal_feasibility_tolerance": 1e-9, "dual_feasibility_tolerance": 1e-9},
    )
    return -float(found.fun) + lp.offset if found.status == 0 else None


RATIOS = [
    (MARCH, "propylene", "ethylene"),
    (MARRAM, "propylene", "ethylene"),
    pytest.param(APRIL, "propylene", "ethylene", marks=pytest.mark.slow),
    pytest.param(MARCH, "crude_c4", "propylene", marks=pytest.mark.slow),
    pytest.param(MARCH, "ethane", "ethylene", marks=pytest.mark.slow),
]


@pytest.mark.parametrize(("name", "of", "to"), RATIOS)
def test_a_ratio(name: str, of: str, to: str, shipped_plan: Callable[[str], Plan]) -> None:
    """At the points shown the margin is that of an independent program with that ratio, today's is the plan's, and straight
    lines between the points miss by no more than is said, looked at on a fine grid."""
    plan = shipped_plan(name)
    answer = ratio_curve(plan, of, to)
    rows = answer.table.rows
    assert [row["ratio"] for row in rows] == sorted(row["ratio"] for row in rows)
    for row in rows[1 : -1 : max(1, len(rows) // 12)]:
        assert row["margin"] == pytest.approx(best_at(plan, of, to, row["ratio"]), rel=1e-8)
    here = [row for row in rows if row["today"]]
    assert [(row["margin"], row["loss"]) for row in here] == [(pytest.approx(plan.margin / 1000), pytest.approx(0, abs=1e-6))]
    ratios, margins = [row["ratio"] for row in rows], [row["margin"] for row in rows]
    misses = [
        abs(np.interp(at, ratios, margins) - (best_at(plan, of, to, at) or INF))
        for at in np.linspace(ratios[0], ratios[-1], 101)[1:-1]
    ]
    assert max(misses) <= 1e-4 * plan.margin / 1000


@pytest.mark.slow
@pytest.mark.parametrize(("name", "of", "to"), [*RATIOS, (APRIL, "pygas", "crude_c4"), (MARCH, "hydrogen", "pygas")])
def test_a_ratio_on_a_finer_grid(name: str, of: str, to: str, shipped_plan: Callable[[str], Plan]) -> None:
    """With a tenth of the usual error, at six hundred ratios."""
    plan = shipped_plan(name)
    rows = ratio_curve(plan, of, to, error=1e-5).table.rows
    ratios, margins = [row["ratio"] for row in rows], [row["margin"] for row in rows]
    misses = [
        abs(np.interp(at, ratios, margins) - (best_at(plan, of, to, at) or INF))
        for at in np.linspace(ratios[0], ratios[-1], 601)[1:-1]
    ]
    assert max(misses) <= 1e-5 * plan.margin / 1000


def test_a_piece_is_a_hyperbola(march: Plan) -> None:
    """Between bends the margin at another ratio follows from one solve, to rounding; a straight line misses it."""
    columns = [[march.lp.column_at["cut_made", cut, "2031-03"]] for cut in ("crude_c4", "propylene")]
    held = RatioNeighbours(march.lp, *columns)
    for at in (0.60, 0.70, 0.77):
        here, there = held.evaluate(at), held.evaluate(at + 5e-4)
        assert here is not None and there is not None
        assert here.along(at + 5e-4) == pytest.approx(there.value, abs=1e-5)
        assert abs(here.value + here.slope * 5e-4 - there.value) > 1e-3


@pytest.mark.parametrize(("name", "of", "to"), RATIOS)
def test_the_flat_top(name: str, of: str, to: str, shipped_plan: Callable[[str], Plan]) -> None:
    """At both ratios that are named the loss is below half a per cent, and at the next ones that could be named above."""
    plan = shipped_plan(name)
    answer = ratio_curve(plan, of, to)
    words = answer.sentences[0].split("any ratio from ")[1].split(" costs less than")[0]
    low, high = (float(word) for word in words.split(" to "))
    best = plan.margin / 1000
    rows = answer.table.rows
    for at, step in ((low, -0.001), (high, 0.001)):
        assert best - (best_at(plan, of, to, at) or 0) <= FLAT * best
        beyond = at + step
        if rows[0]["ratio"] < beyond < rows[-1]["ratio"]:
            assert best - (best_at(plan, of, to, beyond) or 0) > FLAT * best


def test_ratio_sentences(march: Plan, shipped_plan: Callable[[str], Plan]) -> None:
    """From another program of the plant: a flat top, best at 0.288, 0.4 % less at 0.27, 0.5 % at 0.31, 3.5 % at 0.35."""
    answer = ratio_curve(march, "propylene", "ethylene")
    assert answer.sentences[0] == (
        "The plan makes 0.288 t of propylene per t of ethylene; any ratio from 0.267 to 0.309 costs less than 134 kUSD (0.5 %)."
    )
    rows = answer.table.rows
    lost = np.interp([0.27, 0.31, 0.35], [r["ratio"] for r in rows], [r["share"] for r in rows])
    assert list(lost) == pytest.approx([0.004, 0.005, 0.035], abs=6e-4)
    small = ratio_curve(shipped_plan(TEXTBOOK), "propylene", "ethylene")
    assert small.sentences[0].startswith("The plan makes 0.0200 t of propylene per t of ethylene; any ratio from 0.0200 to ")


def test_a_range_beside_the_plan(march: Plan) -> None:
    """The plan's own ratio, 0.288, is not between 0.30 and 0.35: it is not shown, and the flat top ends where it ends."""
    answer = ratio_curve(march, "propylene", "ethylene", 0.30, 0.35)
    rows = answer.table.rows
    assert (rows[0]["ratio"], rows[-1]["ratio"]) == (0.30, 0.35)
    assert not [row for row in rows if row["today"]]
    assert "any ratio from 0.300 to 0.309 costs less" in answer.sentences[0]
    beside = ratio_curve(march, "propylene", "ethylene", 0.33, 0.35)
    assert beside.sentences[0] == "The plan makes 0.288 t of propylene per t of ethylene."


def test_ratios_that_no_plan_has(march: Plan, shipped_plan: Callable[[str], Plan]) -> None:
    """A range is cut at the last ratio that a plan has; one without any is an error. Nothing of both is no ratio: the textbook's
    ethane gives 0.4 t of propylene per 20 of ethylene, and idle it would give any."""
    rows = ratio_curve(march, "propylene", "ethylene", 0.28, 5).table.rows
    assert 0.36 < rows[-1]["ratio"] < 5
    assert best_at(march, "propylene", "ethylene", rows[-1]["ratio"] - 1e-6) is not None
    assert best_at(march, "propylene", "ethylene", rows[-1]["ratio"] + 1e-6) is None
    with pytest.raises(ValueError, match="no plan has a ratio from 4 to 5"):
        ratio_curve(march, "propylene", "ethylene", 4, 5)
    assert ratio_curve(shipped_plan(TEXTBOOK), "propylene", "ethylene").table.rows[0]["ratio"] == pytest.approx(0.02, abs=1e-6)


def test_ratios_that_cannot_be_asked_for(march: Plan) -> None:
    for of, to in (("propylen", "ethylene"), ("propylene", "ethylen")):
        with pytest.raises(ValueError, match=r"is no cut of this plant; .*`(propylene|ethylene)`"):
            ratio_curve(march, of, to)
    with pytest.raises(ValueError, match="a ratio needs two cuts"):
        ratio_curve(march, "ethylene", "ethylene")
    for low, high in ((0.3, 0.2), (-1, 0.2), (0.3, 0.3)):
        with pytest.raises(ValueError, match="is empty or below zero"):
            ratio_curve(march, "propylene", "ethylene", low, high)


def test_a_plan_that_makes_nothing_has_no_ratio(tmp_path: Path) -> None:
    plan = planned(tmp_path, **ONE_FEED, scenario="feeds: {naphtha: {spot: {max: 8 kt, price: 650 USD/t}}}")
    with pytest.raises(ValueError, match="the plan makes no residue: there is no ratio to vary"):
        ratio_curve(plan, "ethylene", "residue")


def test_a_month_without_a_plan_has_no_curve(march: Plan) -> None:
    with pytest.raises(NoPlan):
        make_plan(march.scenario.with_({"outlets.ethylene_contract.min": "90 kt", "outlets.ethylene_contract.max": "95 kt"}))
