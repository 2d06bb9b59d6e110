"""Frontiers against plans made again: another price in the file, a limit in the file, arrays with another cost solved cold."""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import openpyxl
import pytest
import typer
from plants import limit, near, planned
from test_break_even import repriced
from typer.testing import CliRunner

from olefinlp import cli_frontier
from olefinlp.answers.answer import Answer
from olefinlp.answers.curves import step_curve
from olefinlp.answers.frontier import at_most, two_goal_curve
from olefinlp.answers.frontier_solves import Seeker
from olefinlp.answers.plan import NoPlan, Plan, make_plan
from olefinlp.inputs.prices import Price
from olefinlp.lp.neighbours import NeighbourError, Neighbours
from olefinlp.lp.solver import solve
from olefinlp.outputs.answer_files import answer_bytes, answer_text

MARCH, HALF_YEAR, MARRAM, TEXTBOOK = (
    "brackwater_2031_03.yaml",
    "brackwater_2031_03_to_08.yaml",
    "marram_point_2031_03.yaml",
    "thermal_cracker.yaml",
)
Row = dict[str, Any]
TWO_FEEDS: dict[str, Any] = {
    "yields": "feed, severity, ethylene, rest\ndear, base, 50, 50\ncheap, base, 30, 70",
    "modes": "group, feed, severity, charge\nfurnaces, dear, base, 20\nfurnaces, cheap, base, 25",
    "recovery_units": "unit, capacity, capacity_unit, measure, min_load\nsplitter, 9, t/h, ethylene, 0",
    "unit_loads": "unit, of, item, load, load_unit\nsplitter, cut, ethylene, 1, t/t",
    "prices": {"ethylene": 1000, "rest": 300},
}
OFFERS = """
    feeds:
      dear: {spot: {max: unlimited, price: 530 USD/t}}
      cheap: {spot: {max: unlimited, price: 420 USD/t}}
"""


@pytest.fixture
def two_feeds(tmp_path: Path) -> Plan:
    """Dear feed: 120 kUSD, 50 h and 0.5 kt of ethylene a kt. Cheap feed: 90 kUSD, 40 h, 0.3 kt. Hours 1000, splitter 9 kt."""
    return planned(tmp_path, **TWO_FEEDS, scenario=OFFERS)


def picked(answer: Answer, *keys: str) -> list[tuple[Any, ...]]:
    """Some columns of every row."""
    return [tuple(row[key] for key in keys) for row in answer.table.rows]


def columns_of(plan: Plan, *heads: tuple[str, ...]) -> list[int]:
    """Columns whose labels begin so."""
    return [at for label, at in plan.lp.column_at.items() if any(label[: len(head)] == head for head in heads)]


# ---------------------------------------------------------------------------------- by hand


def test_a_purchase_by_hand(two_feeds: Plan) -> None:
    """Both limits hold at d = 12, c = 10: 2340. Without dear feed 1000/40 = 25 kt of the cheap earn 2250, with as much of it as
    the splitter takes 18 kt earn 2160. So 12 kt less cost 90, 7.5 a tonne, and 6 kt more cost 180, 30 a tonne: a premium.
    Ethylene made 9, 9 and 0.3 · 25 = 7.5. Per tonne of it 2, 12/9 and 0 t: of the last step's 12 kt throughput is
    (9 − 7.5) · (12/9 + 0)/2 = 1, a twelfth; of the first none."""
    rows = two_goal_curve(two_feeds, "feeds.dear", -50, 200)
    assert picked(rows, "low", "high", "total_low", "total_high") == [
        (near(-50), near(-30), near(480), near(500)),
        (near(-30), near(7.5), near(500), near(537.5)),
        (near(7.5), near(200), near(537.5), near(730)),
    ]
    assert picked(rows, "quantity", "margin", "margin_before", "main", "per_main") == [
        (near(18), near(2160), near(2160 + 18 * 530), near(9), near(2)),
        (near(12), near(2340), near(2340 + 12 * 530), near(9), near(12 / 9)),
        (near(0), near(2250), near(2250), near(7.5), near(0)),
    ]
    assert picked(rows, "margin_per_tonne", "throughput", "today") == [
        (near(240), None, ""),
        (near(260), near(0), "here"),
        (near(300), near(1 / 12), ""),
    ]
    assert [row["changed"] for row in rows.table.rows] == [
        "",
        "bought: cheap 0 → 10 kt, dear 18 → 12 kt; sold: rest sale 9 → 13 kt",
        "bought: cheap 10 → 25 kt, dear 12 → 0 kt; sold: rest sale 13 → 17.5 kt, ethylene sale 9 → 7.5 kt",
    ]
    assert rows.sentences == (
        "feeds.dear: falls from 18 kt bought at 480 USD/t in all to 0 kt at 538 USD/t in all, in 2 steps; 2 → 0 t per t of "
        "ethylene.",
        "Its largest step is at 538 USD/t in all: 12 → 0 kt; bought: cheap 10 → 25 kt, dear 12 → 0 kt; sold: rest sale 13 → "
        "17.5 kt, ethylene sale 9 → 7.5 kt.",
        "From first to last: bought: cheap 0 → 25 kt, dear 18 → 0 kt; sold: rest sale 9 → 17.5 kt, ethylene sale 9 → 7.5 kt.",
        "The fall is less per tonne rather than throughput: ethylene made goes from 9 to 7.5 kt.",
        "The margin goes from 2,160 kUSD to 2,250 kUSD, before its cost from 11,700 kUSD to 2,250 kUSD.",
    )


def test_a_load_by_hand(two_feeds: Plan) -> None:
    """With λ on the splitter dear feed earns (120 − λ/2)/50 an hour and cheap (90 − 0.3 λ)/40: equal at λ = 60, and nothing is
    earned by the cheap from 90/0.3 = 300 on. Loads 9, 7.5, 0 kt. The default end would be 2340/9 = 260, before that."""
    rows = two_goal_curve(two_feeds, "recovery_units.splitter", 0, 400)
    assert picked(rows, "low", "high", "quantity", "margin") == [
        (near(0), near(60), near(9), near(2340)),
        (near(60), near(300), near(7.5), near(2250)),
        (near(300), near(400), near(0), near(0)),
    ]
    assert "total_low" not in [column.key for column in rows.table.columns]
    assert rows.table.columns[0].heading == "Weight, from, USD/t"
    assert picked(two_goal_curve(two_feeds, "recovery_units.splitter"), "high") == [(near(60),), (near(260),)]


def test_a_limit_by_hand(two_feeds: Plan) -> None:
    """Half way from 12 to 0 kt half of the 90 is given up; at 12 kt or more nothing is; none at all costs all of it."""
    row = at_most(two_feeds, "feeds.dear", 6).table.rows[0]
    assert (row["margin"], row["given_up"], row["last"], row["last_in_all"]) == (near(2295), near(45), near(7.5), near(537.5))
    assert (row["average"], row["main"], row["quantity"]) == (near(7.5), near(8.25), near(6))
    for quantity in (12, 12.5, 1e6):
        row = at_most(two_feeds, "feeds.dear", quantity).table.rows[0]
        assert (row["margin"], row["given_up"], row["last"], row["changed"]) == (near(2340), 0, 0, "")
    assert at_most(two_feeds, "feeds.dear", 0).table.rows[0]["margin"] == near(2250)
    assert at_most(two_feeds, "feeds.dear", 6).sentences == (
        "feeds.dear: with at most 6 kt bought the best margin is 2,295 kUSD, 45 kUSD less than the plan; the last t saved costs "
        "7.5 USD/t on top of today's price, 538 USD/t in all, on average 7.5.",
        "Against the plan: bought: cheap 10 → 17.5 kt, dear 12 → 6 kt; sold: rest sale 13 → 15.25 kt, ethylene sale 9 → 8.25 kt.",
    )


def test_months_with_prices_of_their_own(tmp_path: Path) -> None:
    """In the second month dear feed costs 540 and earns 110: 25 kt of the cheap earn 2250, 30 more than 12 and 10 would, so
    there it comes in at a premium of 30/12 = 2.5 and in the first month it leaves at 7.5. No one price can be shown."""
    plan = planned(
        tmp_path,
        **TWO_FEEDS,
        scenario="""
            months: [{name: one, hours: 1000}, {name: two, hours: 1000}]
            feeds:
              dear: {spot: {max: unlimited, price: {one: 530 USD/t, two: 540 USD/t}}}
              cheap: {spot: {max: unlimited, price: 420 USD/t}}
        """,
    )
    answer = two_goal_curve(plan, "feeds.dear", -5, 10)
    assert picked(answer, "low", "high", "quantity", "margin", "margin_before") == [
        (near(-5), near(-2.5), near(24), near(4560), near(4560 + 12 * 1070)),
        (near(-2.5), near(7.5), near(12), near(4590), near(4590 + 12 * 530)),
        (near(7.5), near(10), near(0), near(4500), near(4500)),
    ]
    assert "total_low" not in [column.key for column in answer.table.columns]
    assert "Its prices differ from one another today" in answer.note
    assert "at -5 USD/t on top to 0 kt at 7.5 USD/t on top" in answer.sentences[0]


def test_of_equal_plans_the_one_with_most_main_product(tmp_path: Path) -> None:
    """Both severities make 1000 USD of each tonne, so the plan may hold any mix; 5 kt at the harder make 2.5 kt of ethylene."""
    plan = planned(
        tmp_path,
        yields="feed, severity, ethylene, rest\nnaphtha, mild, 40, 60\nnaphtha, hard, 50, 50",
        modes="group, feed, severity, charge\nfurnaces, naphtha, mild, 10\nfurnaces, naphtha, hard, 10",
        prices={"ethylene": 1000, "rest": 1000},
        scenario="feeds: {naphtha: {spot: {max: 5 kt, price: 500 USD/t}}}",
    )
    answer = two_goal_curve(plan, "feeds.naphtha", 0, 600)
    assert picked(answer, "low", "quantity", "margin", "main") == [
        (near(0), near(5), near(2500), near(2.5)),
        (near(500), near(0), near(0), near(0)),
    ]
    assert answer.note.endswith("Of equal plans the one with most ethylene is shown.")
    assert picked(answer, "per_main", "throughput")[1] == (None, None)


def test_what_could_not_be_decided_is_said(two_feeds: Plan, monkeypatch: pytest.MonkeyPatch) -> None:
    """The plan of a step stays as it was solved."""
    monkeypatch.setattr(Seeker, "_equal", lambda *_: False)
    answer = two_goal_curve(two_feeds, "feeds.dear", -50, 200)
    assert answer.note.endswith("except where that could not be decided.")
    assert picked(answer, "quantity") == [(near(18),), (near(12),), (near(0),)]


# ---------------------------------------------------------------------------------- emissions of the demo month


@pytest.fixture(scope="module")
def carbon(march: Plan) -> Answer:
    """Emissions of March from 30 to 230 USD/t."""
    return two_goal_curve(march, "utilities.carbon", 0, 200)


def at_price(march: Plan, price: float, folder: Path) -> Plan:
    """March planned with another price of emissions in its file."""
    return make_plan(repriced(march.scenario, "utilities.carbon", f"{price!r} USD/t", folder))


def emitted(plan: Plan) -> float:
    """All months, kt."""
    return sum(plan.quantities.value("trade", "carbon", month) for month in plan.quantities.case.months)


def test_rows_are_the_plans_at_those_prices(march: Plan, carbon: Answer, tmp_path: Path) -> None:
    """Close to both ends of a row and in its middle the plan made at that price has its quantity, margin and main product."""
    for row in carbon.table.rows[::3]:
        for share in (1e-3, 0.5, 1 - 1e-3):
            price = row["total_low"] + share * (row["total_high"] - row["total_low"])
            plan = at_price(march, price, tmp_path)
            quantity = emitted(plan)
            assert row["quantity"] == pytest.approx(quantity, rel=1e-7)
            assert row["margin_before"] == pytest.approx(plan.margin / 1000 + price * quantity, rel=1e-9)
            assert row["margin"] == pytest.approx(plan.margin / 1000 + (price - 30) * quantity, rel=1e-9)
            assert row["main"] == pytest.approx(plan.main_product() / 1000, rel=1e-7)
            assert row["per_main"] == pytest.approx(1000 * quantity / plan.main_product(), rel=1e-7)


def test_sizes_computed_apart(march: Plan, carbon: Answer) -> None:
    """66.2 kt at 30 USD/t, 65.6 at 70, 50 just above 110, 40.6 above 165; full-range naphtha from 47.6 to 2 kt at 110; margin
    before the cost of it 28.8 to 27.2 M USD, and 0.90 to 0.83 t per t of ethylene on the way to 50 kt: these were computed by
    another formulation (an invented plant: no publication), to the digits given."""

    def at(price: float) -> Row:
        return next(row for row in carbon.table.rows if row["total_low"] <= price <= row["total_high"])

    assert [round(at(price)["quantity"], 1) for price in (30, 70, 170)] == [66.2, 65.6, 40.6]
    assert round(at(110.5)["quantity"]) == 50
    assert [round(at(price)["margin_before"] / 1000, 1) for price in (30, 110.5)] == [28.8, 27.2]
    assert [round(at(price)["per_main"], 2) for price in (30, 110.5)] == [0.90, 0.83]
    assert at(30)["today"] == "here"
    naphtha = [row["changed"] for row in carbon.table.rows if row["total_low"] < 110.5]
    assert naphtha[1].startswith("bought: full range naphtha 47.56 →")
    assert naphtha[-1].startswith("bought: full range naphtha 5.762 → 2.183 kt")


def concave(answer: Answer, factor: float = 1.0) -> None:
    """Less and less of the goal, each unit dearer than the one before, at just the weight where the rows meet."""
    rows = answer.table.rows
    assert len(rows) > 2
    for a, b in itertools.pairwise(rows):
        assert b["low"] == a["high"]
        assert b["quantity"] < a["quantity"]
        assert (a["margin"] - b["margin"]) / (a["quantity"] - b["quantity"]) / factor == pytest.approx(
            b["low"], rel=1e-6, abs=1e-6
        )
    assert [row["low"] for row in rows] == sorted(row["low"] for row in rows)


@pytest.mark.parametrize(
    ("name", "goal"),
    [
        (MARCH, "utilities.carbon"),
        (MARCH, "outlets.fuel_gas_export"),
        (MARCH, "cuts.propylene"),
        (HALF_YEAR, "outlets.hydrogen_sale"),
        (MARRAM, "utilities.carbon"),
        (MARRAM, "feeds.ethane"),
        (TEXTBOOK, "utilities.natural_gas"),
    ],
)
def test_the_frontier_is_concave(name: str, goal: str, shipped_plan: Callable[[str], Plan]) -> None:
    plan = shipped_plan(name)
    answer = two_goal_curve(plan, goal, -50)
    rows = answer.table.rows
    price = price_of(plan, goal)
    concave(answer, price.factor if price else 1.0)
    if not any(row["low"] < 0 < row["high"] for row in rows):
        return
    here = next(row for row in rows if row["low"] < 0 < row["high"])
    assert here["margin"] == pytest.approx(plan.margin / 1000, rel=1e-9)
    assert here["margin"] == max(row["margin"] for row in rows)


def price_of(plan: Plan, goal: str) -> Price | None:
    """A price of a goal, if it has one."""
    return next((price for (item, _), price in plan.quantities.case.prices.items() if f"{item}.".startswith(f"{goal}.")), None)


@pytest.mark.parametrize(
    ("name", "goal", "heads", "low", "high"),
    [
        (MARCH, "feeds.ethane", [("bought", "ethane.contract"), ("bought", "ethane.spot_pipeline")], -20, 60),
        (MARCH, "feeds.ethane.contract", [("bought", "ethane.contract")], -20, 60),
        (MARCH, "outlets.ethylene_spot", [("sold", "ethylene_spot")], -5, 8),
        (MARCH, "outlets.raw_pygas", [("sold", "raw_pygas")], -50, 100),
        (MARCH, "cuts.propylene", [("cut_made", "propylene")], -100, 300),
        (MARCH, "recovery_units.c2_splitter", [("unit_load", "c2_splitter")], -100, 200),
        (MARCH, "utilities.grid_power", [("trade", "grid_power")], -100, 500),
        (MARRAM, "feeds.light_naphtha", [("bought", "light_naphtha.contract"), ("bought", "light_naphtha.spot_cargo")], -30, 200),
        (HALF_YEAR, "feeds.gas_oil", [("bought", "gas_oil.spot_barge")], -3, 3),
    ],
)
def test_rows_against_programs_solved_cold(
    name: str, goal: str, heads: list[tuple[str, ...]], low: float, high: float, shipped_plan: Callable[[str], Plan]
) -> None:
    """In the middle of a row the program whose cost vector holds the weight has its quantity and margin."""
    plan = shipped_plan(name)
    columns, rows = columns_of(plan, *heads), two_goal_curve(plan, goal, low, high).table.rows
    price = price_of(plan, goal) if not goal.startswith("outlets.raw") else None
    factor = price.factor if price and not price.of else 1.0
    assert len(rows) > 2
    for row in rows[:: max(1, len(rows) // 6)]:
        cost = plan.lp.cost.copy()
        cost[columns] -= (row["low"] + row["high"]) / 2 * factor
        found = solve(replace(plan.lp, cost=cost)).solution
        assert found is not None
        assert row["quantity"] == pytest.approx(found.x[columns].sum(), rel=1e-6, abs=1e-6)
        assert row["margin"] == pytest.approx(plan.lp.cost @ found.x + plan.lp.offset, rel=1e-8)


def test_units_of_a_load(march: Plan) -> None:
    """What the compressor's limit is worth is the weight at which its load first falls, in the unit of its capacity."""
    row = limit(march, "unit load", "cracked_gas_compressor")
    first = two_goal_curve(march, "recovery_units.cracked_gas_compressor", 0, 50).table
    assert first.columns[0].heading == f"Weight, from, {row['worth_unit']}"
    assert first.rows[0]["high"] == pytest.approx(row["worth"], rel=1e-7)
    load = march.recovery.where(unit="cracked_gas_compressor")[0]["load"]
    assert first.rows[0]["quantity"] == pytest.approx(load * march.quantities.case.hours("2031-03") / 1000, rel=1e-9)


def test_a_purchase_falls_as_its_own_price_makes_it(march: Plan) -> None:
    """For a feed from one source the weight is its price: the same steps as the curve of the price."""
    curve = step_curve(march, "feeds.full_range_naphtha.spot_cargo", 534, 560).table.rows
    rows = two_goal_curve(march, "feeds.full_range_naphtha", 0, 26).table.rows
    assert [row["quantity"] for row in rows] == pytest.approx([row["level"] for row in curve], rel=1e-6, abs=1e-6)
    assert [row["total_low"] for row in rows] == pytest.approx([row["low"] for row in curve], rel=1e-7)


def test_six_months_together(shipped_plan: Callable[[str], Plan], tmp_path: Path) -> None:
    """Emissions of all months fall together; a plan made at the price of a row has its quantity and margin."""
    plan = shipped_plan(HALF_YEAR)
    rows = two_goal_curve(plan, "utilities.carbon", 0, 60).table.rows
    for row in (rows[0], rows[len(rows) // 2], rows[-1]):
        price = (row["total_low"] + row["total_high"]) / 2
        other = make_plan(repriced(plan.scenario, "utilities.carbon", f"{price!r} USD/t", tmp_path))
        assert row["quantity"] == pytest.approx(emitted(other), rel=1e-6)
        assert row["margin_before"] == pytest.approx(other.margin / 1000 + price * emitted(other), rel=1e-8)


# ---------------------------------------------------------------------------------- limits


@pytest.mark.parametrize("most", [65.9, 60, 50, 44.4, 35, 30])
def test_a_limit_is_the_plan_with_it_in_the_file(march: Plan, most: float) -> None:
    """The same margin, and the last tonne costs what the limit is worth there."""
    row = at_most(march, "utilities.carbon", most).table.rows[0]
    other = make_plan(march.scenario.with_({"utilities.carbon.max": f"{most} kt"}))
    assert row["margin"] == pytest.approx(other.margin / 1000, rel=1e-9)
    assert row["quantity"] == pytest.approx(most, rel=1e-9)
    assert row["last"] == pytest.approx(limit(other, "trade", "carbon")["worth"], rel=1e-6)
    assert row["last_in_all"] == pytest.approx(30 + row["last"])
    assert row["given_up"] == pytest.approx((march.margin - other.margin) / 1000, rel=1e-7)
    assert 0 < row["average"] <= row["last"] * (1 + 1e-9)  # the first saved are the cheapest


def test_a_limit_below_the_least(march: Plan) -> None:
    """29.72 kt are the least; a thousandth below it no plan is possible, in the file either; a thousandth above it one is."""
    with pytest.raises(ValueError, match=r"no plan is possible; the least that any plan has is 29\.72 kt"):
        at_most(march, "utilities.carbon", 29.69)
    with pytest.raises(ValueError, match="no plan is possible"):
        at_most(march, "utilities.carbon", math.nan)
    with pytest.raises(NoPlan):
        make_plan(march.scenario.with_({"utilities.carbon.max": "29.69 kt"}))
    row = at_most(march, "utilities.carbon", 29.75).table.rows[0]
    other = make_plan(march.scenario.with_({"utilities.carbon.max": "29.75 kt"}))
    assert row["margin"] == pytest.approx(other.margin / 1000, rel=1e-9)


def test_a_limit_on_a_sale(march: Plan) -> None:
    row = at_most(march, "outlets.ethylene_spot", 9).table.rows[0]
    other = make_plan(march.scenario.with_({"outlets.ethylene_spot.max": "9 kt"}))
    assert row["margin"] == pytest.approx(other.margin / 1000, rel=1e-9)
    pounds = limit(other, "outlet", "ethylene_spot")["worth"] / 22.0462262  # USD/t to US cents a lb
    assert row["last"] == pytest.approx(pounds, rel=1e-6)


# ---------------------------------------------------------------------------------- how it is asked


def test_order_and_repetition_change_nothing(carbon: Answer, march: Plan) -> None:
    """After other questions, and on a plan of its own, to the last digit."""
    two_goal_curve(march, "feeds.ethane", -10, 30)
    at_most(march, "cuts.propylene", 15)
    assert two_goal_curve(march, "utilities.carbon", 0, 200) == carbon
    assert two_goal_curve(make_plan(march.scenario), "utilities.carbon", 0, 200) == carbon


def test_counts(march: Plan) -> None:
    """2n + 1 solves for n plans, two for each at least, one for the least of the goal."""
    before = march.neighbours.solves
    steps = len(two_goal_curve(march, "utilities.carbon", 0, 200).table)
    assert march.neighbours.solves - before <= 4 * steps + 2


@pytest.mark.parametrize("goal", ["feeds.full_range_naphtha", "cuts.propylene", "outlets.ethylene_spot"])
def test_a_range_of_its_own_ends_past_the_least(goal: str, march: Plan) -> None:
    """It begins today and ends a quarter past the last step: weights ten times as far change nothing more."""
    rows = two_goal_curve(march, goal).table.rows
    assert (rows[0]["low"], rows[0]["today"]) == (0, "here")
    assert rows[-1]["high"] == pytest.approx(1.25 * rows[-1]["low"])
    wide = two_goal_curve(march, goal, 0, 10 * rows[-1]["high"]).table.rows
    assert [row["quantity"] for row in rows] == pytest.approx([row["quantity"] for row in wide], rel=1e-7, abs=1e-7)


@pytest.mark.parametrize(("goal", "high"), [("utilities.carbon", 300), ("utilities.surplus_steam", None)])
def test_a_range_of_its_own_ends_somewhere(goal: str, high: float | None, march: Plan) -> None:
    """Where still less is possible it ends at ten times today's 30 USD/t, or where the margin of a tonne would be gone."""
    rows = two_goal_curve(march, goal).table.rows
    assert rows[-1]["high"] == pytest.approx(high or march.margin / 1000 / rows[0]["quantity"])
    assert two_goal_curve(march, goal, 0, 20 * rows[-1]["high"]).table.rows[-1]["quantity"] < rows[-1]["quantity"]


def test_what_nothing_changes(march: Plan, shipped_plan: Callable[[str], Plan]) -> None:
    """A flat curve is one row, without a line of margins; of what the plan has none of a premium is spoken of."""
    flat = two_goal_curve(shipped_plan(TEXTBOOK), "recovery_units.ethylene", 0, 0.02)
    assert picked(flat, "low", "high", "quantity") == [(near(0), near(0.02), near(50))]
    assert flat.sentences[0].startswith("recovery_units.ethylene: 50 thousand lb load from a weight of 0 USD/lb")
    assert flat.sentences[0].endswith("nothing between changes it.")
    assert flat.charts == ()
    none = two_goal_curve(march, "feeds.gas_oil")
    assert picked(none, "quantity", "per_main", "changed") == [(0, 0, "")]
    assert none.sentences == (
        "feeds.gas_oil: 0 kt bought from 69 USD/bbl in all to 759 USD/bbl in all, nothing between changes it. A premium, a "
        "weight below zero, shows what would bring it in.",
    )
    assert at_most(march, "feeds.gas_oil", 0).sentences[0].endswith("nothing is given up.")
    premium = two_goal_curve(march, "feeds.gas_oil", -2, 0).table.rows
    entry = premium[-1]["low"]
    assert premium[-1]["quantity"] == 0 < premium[-2]["quantity"]
    assert -0.2 < entry < 0  # 0.6 USD/t, at about 7 bbl a tonne


def test_throughput_and_what_is_not(march: Plan, carbon: Answer) -> None:
    """The compressor's load is per tonne what it was; emissions to 50 kt are throughput, burning hydrogen is not. Of the whole
    fall throughput is the sum of the steps' parts."""
    load = two_goal_curve(march, "recovery_units.cracked_gas_compressor")
    assert any(
        "The fall is throughput rather than efficiency: ethylene made goes from 73.68 to" in text for text in load.sentences
    )
    down = two_goal_curve(march, "utilities.carbon", 0, 83)
    assert [text for text in down.sentences if "throughput" in text] == [
        "The fall is throughput rather than efficiency: ethylene made goes from 73.68 to 60.95 kt, what is emitted per t of it "
        "falls by 7.9 %."
    ]
    rows = carbon.table.rows
    burnt = max(rows[1:], key=lambda row: rows[rows.index(row) - 1]["quantity"] - row["quantity"])
    assert (burnt["throughput"], burnt["changed"]) == (pytest.approx(0, abs=1e-6), "sold: hydrogen sale 0.8683 → 0 kt")
    falls = [(a["quantity"] - b["quantity"], b["throughput"]) for a, b in itertools.pairwise(rows)]
    share = sum(fall * part for fall, part in falls) / (rows[0]["quantity"] - rows[-1]["quantity"])
    assert any(f"About {100 * share:.0f} % of the fall is throughput" in text for text in carbon.sentences)
    assert any("less per tonne at the step at 144 USD/t in all" in text for text in carbon.sentences)


def test_what_it_is_not_asked_of(march: Plan) -> None:
    with pytest.raises(ValueError, match=r"`utilities\.carbn` is no quantity of this plan .* did you mean `utilities\.carbon`\?"):
        two_goal_curve(march, "utilities.carbn")
    with pytest.raises(ValueError, match=r"did you mean `feeds\.ethane\.contract`\?"):
        at_most(march, "feeds.ethane.contrct", 3)
    with pytest.raises(ValueError, match=r"recovery_units\.<unit>"):
        two_goal_curve(march, "zzz")
    for low, high in ((50, 50), (60, 40), (0, math.nan), (0, math.inf), (None, -5)):
        with pytest.raises(ValueError, match="is empty or has no end"):
            two_goal_curve(march, "utilities.carbon", low, high)


def test_a_weight_at_which_the_margin_has_no_end(two_feeds: Plan, monkeypatch: pytest.MonkeyPatch) -> None:
    """What the checks of a scenario let through is an error that names the goal, not a solver's word."""

    def endless(**_: object) -> None:
        raise NeighbourError("a neighbour ended as Unbounded")

    monkeypatch.setattr(two_feeds.neighbours, "solve", endless)
    with pytest.raises(ValueError, match=r"weights on feeds\.dear the margin has no end: ask for less"):
        two_goal_curve(two_feeds, "feeds.dear", -1000, 10)


# ---------------------------------------------------------------------------------- written


def test_the_workbook_has_two_charts(carbon: Answer, tmp_path: Path) -> None:
    """Steps of the quantity and the line of margins, each with its points and a mark at today."""
    path = tmp_path / "frontier.xlsx"
    path.write_bytes(answer_bytes(carbon))
    book = openpyxl.load_workbook(path)
    sheet, points = book.worksheets[0], book["Chart points"]
    assert len(sheet._charts) == 2
    assert [points.cell(1, column).value for column in (1, 2, 4, 5)] == [
        "in all, USD/t",
        "kt",
        "utilities.carbon emitted, kt",
        "kUSD",
    ]
    rows = carbon.table.rows
    drawn = [(points.cell(2 + k, 4).value, points.cell(2 + k, 5).value) for k in range(len(rows))]
    assert drawn == [(pytest.approx(row["quantity"]), pytest.approx(row["margin"])) for row in rows]
    assert points.cell(2 + len(rows), 4).value == pytest.approx(rows[0]["quantity"])
    header = next(row for row in range(1, 30) if sheet.cell(row, 1).value == "On top, from, USD/t")
    headings = [cell.value for cell in sheet[header]]
    assert {"In all, to, USD/t", "Margin before its cost, kUSD", "Per t of ethylene, t/t"} <= set(headings)
    quantity = headings.index("Emitted, kt") + 1
    assert [sheet.cell(header + 1 + k, quantity).value for k in range(len(rows))] == pytest.approx(
        [row["quantity"] for row in rows]
    )
    above = " ".join(str(sheet.cell(row, 1).value or "") for row in range(1, header))
    assert all(sentence in above for sentence in (*carbon.sentences, carbon.note))


def test_what_is_printed(carbon: Answer) -> None:
    text = answer_text(carbon)
    assert text.startswith("Margin against utilities.carbon\n  utilities.carbon: falls from 66.23 kt emitted at 30 USD/t in all")
    assert "-0.0" not in text


app = typer.Typer()
app.command()(cli_frontier.frontier)


@app.callback()
def main() -> None:
    """One command beside others, as in the program itself."""


def run(*arguments: object) -> tuple[int, str, str]:
    """Exit code and both streams."""
    result = CliRunner().invoke(app, ["frontier", *map(str, arguments)])
    if result.exception is not None and not isinstance(result.exception, SystemExit):
        raise result.exception
    return result.exit_code, result.stdout, result.stderr


def test_the_command(root: Path, tmp_path: Path, carbon: Answer, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    march = root / "scenarios" / MARCH
    code, out, err = run(march, "utilities.carbon", "--from", 0, "--to", 200, "-o", "co2.xlsx", "--csv", "co2.csv")
    assert (code, out) == (0, answer_text(carbon) + "\n")
    assert "written: co2.xlsx, co2.csv" in err
    assert Path("co2.xlsx").read_bytes() == answer_bytes(carbon)
    assert len(Path("co2.csv").read_text(encoding="utf-8-sig").splitlines()) == len(carbon.table) + 1
    code, out, _ = run(march, "utilities.carbon", "--at-most", 50)
    assert code == 0
    assert "with at most 50 kt emitted the best margin is 25,675 kUSD" in out
    _, dearer, _ = run(march, "utilities.carbon", "--at-most", 50, "--price-case", "High crude")
    assert "with at most 50 kt" in dearer
    assert dearer != out


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (("utilities.carbn",), "did you mean `utilities.carbon`?"),
        (("utilities.carbon", "--from", 5, "--to", 5), "is empty"),
        (("utilities.carbon", "--at-most", 20), "no plan is possible; the least that any plan has is 29.72 kt"),
        (("utilities.carbon", "--at-most", 50, "--to", 5), "leave --from and --to out"),
        (("utilities.carbon", "-o", "co2.csv"), "a workbook's name ends in .xlsx"),
        (("utilities.carbon", "--price-case", "Bse"), "no such price case"),
    ],
)
def test_what_the_command_refuses(arguments: tuple[object, ...], said: str, root: Path) -> None:
    code, out, err = run(root / "scenarios" / MARCH, *arguments)
    assert (code, out) == (2, "")
    assert said in err


def test_what_is_not_written_or_not_proven(root: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Exit code 1 for a folder that is not there, 6 for a solve that loses the plan."""
    march = root / "scenarios" / MARCH
    assert run(march, "utilities.carbon", "-o", tmp_path / "no" / "such.xlsx")[0] == 1
    monkeypatch.setattr(Neighbours, "solve", lambda *_, **__: None)
    code, _, err = run(march, "utilities.carbon")
    assert code == 6
    assert "a fault of the tool" in err
