"""What is said of a sweep, against numpy and against numbers made up so that the answer is known."""

from __future__ import annotations

import dataclasses
import itertools
import re

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from made_sweeps import CONTRACT, ETHYLENE, NAPHTHA, made

from olefinlp.answers.answer import Answer
from olefinlp.answers.limits import NOTHING
from olefinlp.answers.plan import Plan
from olefinlp.answers.sweep import Sweep, sweep
from olefinlp.answers.sweep_answers import DISTRIBUTION, HEAT_MAP, STEPS, TORNADO, message, suits, sweep_answer
from olefinlp.answers.sweep_distribution import (
    BELOW_FIXED,
    BELOW_ZERO,
    distribution,
    feeds_bought,
    limits_binding,
    specified_outlet,
)
from olefinlp.answers.sweep_figures import (
    WORTH_SEEN,
    bin_edges,
    bought_from,
    changing_readings,
    counts_in,
    failures,
    figures,
    planned,
    reading_of,
    thinned,
    todays_readings,
)
from olefinlp.answers.sweep_heat_map import heat_grid, heat_map
from olefinlp.answers.sweep_steps import steps_of_sweep
from olefinlp.answers.sweep_tornado import tornado, tornado_bars
from olefinlp.answers.tables import Column, Record, Table
from olefinlp.inputs.sweep_cases import DRAWS, GRID, LIST, ONE_AT_A_TIME
from olefinlp.inputs.sweep_draws import draw_cases
from olefinlp.outputs.sweep_text import WIDTH, sweep_text

GAS_OIL = "bought.gas_oil.spot_barge"


def row(table: Table, **match: str) -> Record:
    """The only row that matches."""
    (found,) = table.where(**match)
    return found


def table_of(answer: Answer, name: str) -> Table:
    """A table of an answer by its name."""
    return next(table for table in answer.tables if table.name == name)


@pytest.fixture(scope="module")
def drawn(march: Plan) -> Sweep:
    """All prices of the demo that stand for themselves, 5 % each; independent, which a planner would not do.

    The published reference for this demo, with correlated draws of its own, is P10 26.0 and P90 28.1 MUSD: another
    spread, the same middle.
    """
    prices = march.quantities.case.prices
    items = [item for item, month in prices if not prices[item, month].of and prices[item, month].value > 0]
    return sweep(march, draw_cases(march.scenario, {item: {"sd": "5 %"} for item in items}, count=200, seed=7))


# ---------------------------------------------------------------------------------- distribution


def test_statistics_are_those_of_numpy(march: Plan) -> None:
    rng = np.random.default_rng(5)
    margin = rng.normal(9000, 5000, 500)
    held = margin - rng.uniform(0, 900, 500)
    found = distribution(made(march, rng.uniform(500, 560, (500, 1)), margin, held=held, how=DRAWS))
    expected = {
        "mean": np.mean,
        "standard deviation": lambda v: np.std(v, ddof=1),
        "lowest": np.min,
        "P10": lambda v: np.percentile(v, 10),
        "P50": np.median,
        "P90": lambda v: np.percentile(v, 90),
        "highest": np.max,
    }
    assert [one["figure"] for one in found.table.rows] == list(expected)
    for name, of in expected.items():
        own = row(found.table, figure=name)
        assert own["replanned"] == pytest.approx(of(margin), rel=1e-12)
        assert own["held"] == pytest.approx(of(held), rel=1e-12)
        assert own["flexibility"] == pytest.approx(of(margin - held), abs=1e-6)
    chances = table_of(found, "chances")
    fixed = march.fixed_cost() / 1000
    assert fixed == 9500
    for event, level in ((BELOW_ZERO, 0.0), (BELOW_FIXED, fixed)):
        assert row(chances, event=event)["replanned"] == (margin < level).mean() > 0
        assert row(chances, event=event)["held"] == (held < level).mean()


def test_a_percentile_is_interpolated_between_the_cases(march: Plan) -> None:
    """By hand: of 0, 10, 20 and 40 the tenth percentile lies at 0.3 of the way from the first to the second."""
    found = distribution(made(march, [[1]] * 4, [40, 0, 20, 10], how=DRAWS))
    assert [row(found.table, figure=name)["replanned"] for name in ("P10", "P50", "P90")] == pytest.approx([3, 15, 34])


@given(st.lists(st.floats(-1e6, 1e6, allow_subnormal=False), min_size=1, max_size=60))
def test_every_value_is_in_one_bin(numbers: list[float]) -> None:
    values = np.array([*numbers, np.nan])
    edges = bin_edges(values)
    counts = counts_in(values, edges)
    assert sum(counts) == len(numbers)
    assert len(counts) <= 30
    assert np.all(np.diff(edges) > 0)
    by_hand = [int(((values >= low) & (values < high)).sum()) for low, high in itertools.pairwise(edges)]
    assert counts == by_hand
    assert [float(f"{edge:.15g}") for edge in edges] == edges.tolist()  # what a sheet's criterion reads of it is the same number


def test_the_histogram_counts_every_case_with_a_plan(drawn: Sweep) -> None:
    table = table_of(distribution(drawn), "histogram")
    assert sum(one["replanned"] for one in table.rows) == sum(one["held"] for one in table.rows) == 200
    assert table.rows[-1]["replanned_up_to"] == table.rows[-1]["held_up_to"] == 1
    assert all(low["to"] == high["from"] for low, high in zip(table.rows[:-1], table.rows[1:], strict=True))


def test_planning_again_never_earns_less_than_todays_plan(drawn: Sweep) -> None:
    found = distribution(drawn)
    assert row(found.table, figure="lowest")["flexibility"] >= 0
    assert row(found.table, figure="mean")["flexibility"] > 100
    text = " ".join(found.sentences)
    for words in ("optimistic", "value of flexibility", "seed 7", "no correlation is written", "in no case"):
        assert words in text
    assert "seed 7" in found.note
    assert "interpolated linearly" in found.note


def test_with_other_numbers_than_prices_todays_plan_is_left_out(march: Plan) -> None:
    found = distribution(made(march, [[40], [45], [50]], [1, 2, 3], paths=[CONTRACT]))
    assert [column.key for column in found.table.columns] == ["figure", "replanned"]
    assert any("Today's plan held is left out" in sentence for sentence in found.sentences)
    assert any("percentiles mean little" in sentence for sentence in found.sentences)


def test_few_cases_are_said_to_mean_little_and_many_are_not(march: Plan) -> None:
    for count, little in ((29, True), (30, False)):
        found = distribution(made(march, [[1]] * count, np.arange(count), how=DRAWS))
        assert any("percentiles mean little" in sentence for sentence in found.sentences) == little


def test_one_case_has_no_deviation(march: Plan) -> None:
    found = distribution(made(march, [[500]], [100], how=DRAWS))
    assert row(found.table, figure="standard deviation")["replanned"] is None
    assert row(found.table, figure="P90")["replanned"] == 100
    assert found.sentences[0] == "One case has a plan; its margin is 100 kUSD."


def test_a_fixed_cost_that_varies_is_compared_with_nothing(march: Plan) -> None:
    found = distribution(made(march, [[9], [10]], [1, 2], paths=["fixed_costs.whole_plant"]))
    assert [one["event"] for one in table_of(found, "chances").rows] == [BELOW_ZERO]


# ---------------------------------------------------------------------------------- how often


def test_how_often_feeds_are_bought_and_limits_bind(drawn: Sweep) -> None:
    least = bought_from(drawn)
    bought = feeds_bought(drawn)
    assert least == 0.2  # one figure of a thousandth of the 172 kt bought today
    assert {one["source"] for one in bought.rows} == set(drawn.base.quantities.case.sources)
    for one in bought.rows:
        values = drawn.to_frame()[f"bought.{one['source']}"].to_numpy()
        assert one["cases"] == (values > least).sum() == round(200 * one["share"])
        assert [one["mean"], one["p10"], one["p90"]] == pytest.approx([values.mean(), *np.percentile(values, (10, 90))])
        assert one["today"] == pytest.approx(drawn.base.quantities.bought(one["source"], "2031-03"), abs=1e-9)
    limits = limits_binding(drawn).rows
    assert [one["cases"] for one in limits] == sorted((one["cases"] for one in limits), reverse=True)
    for one in limits:
        values = drawn.to_frame()[f"worth.{one['limit']}"].to_numpy()
        if specified_outlet(drawn, f"worth.{one['limit']}") is None:
            assert one["cases"] == (values > WORTH_SEEN).sum()
            assert one["mean"] == pytest.approx(values[values > WORTH_SEEN].mean())
            assert one["high"] == values.max()


def test_a_specification_of_what_is_not_sold_binds_nothing(drawn: Sweep) -> None:
    """Its dual is large in every case although none is made: it would head the list."""
    (name,) = (n for n in drawn.read_out.names if n.startswith("worth.") and specified_outlet(drawn, n))
    outlet = specified_outlet(drawn, name)
    assert outlet == "sold.chemical_grade_propylene"
    raw, sold = reading_of(drawn, name), reading_of(drawn, outlet)
    expected = int(((raw > WORTH_SEEN) & (sold > bought_from(drawn))).sum())
    found = [one["cases"] for one in limits_binding(drawn).rows if one["limit"] == name.removeprefix("worth.")]
    assert (found or [0]) == [expected]
    assert expected < (raw > WORTH_SEEN).sum() == 200


def test_todays_readings_are_those_of_the_plan(drawn: Sweep) -> None:
    today, case = todays_readings(drawn), drawn.base.quantities.case
    for outlet in case.sale_tiers:
        assert today[f"sold.{outlet}"] == pytest.approx(drawn.base.quantities.outlet(outlet, "2031-03"), abs=1e-9)
    worths = {one["limit"]: one["worth"] for one in drawn.base.limits.rows if one["state"] != NOTHING}
    assert all(today[f"worth.{limit}"] == pytest.approx(worth, rel=1e-7, abs=1e-7) for limit, worth in worths.items())


# ---------------------------------------------------------------------------------- failures


def test_failures_are_counted_named_and_left_out(march: Plan) -> None:
    why = {1: "the minimum 60 kt is above the maximum 58 kt", 3: "limits clash: c2_splitter", 4: "limits clash: c3_splitter"}
    why |= {5: "the minimum 65 kt is above the maximum 58 kt", 6: ""}
    found = made(march, [[1]] * 8, [10, 1e9, 20, 1e9, 1e9, 1e9, 1e9, np.nan], how=DRAWS, failed=why)
    rows = {one["reason"]: (one["cases"], one["first"]) for one in failures(found).rows}
    assert rows == {
        "the minimum … kt is above the maximum 58 kt": (2, 2),
        "limits clash: c2_splitter": (1, 4),
        "limits clash: c3_splitter": (1, 5),
        "no plan: limits clash": (1, 7),
        "the margin is not a number": (1, 8),
    }
    answer = distribution(found)
    assert row(answer.table, figure="mean")["replanned"] == 15
    assert "6 of 8 cases have no plan and are left out: the minimum … kt is above the maximum 58 kt (2 of them)" in str(answer)
    assert sum(one["replanned"] for one in table_of(answer, "histogram").rows) == 2


@pytest.mark.parametrize(
    ("how", "paths", "values"),
    [
        (DRAWS, [NAPHTHA], [[1], [2]]),
        (LIST, [NAPHTHA], [[1], [2]]),
        (ONE_AT_A_TIME, [NAPHTHA, ETHYLENE], [[1, np.nan], [np.nan, 2]]),
        (GRID, [NAPHTHA, ETHYLENE], [[1, 2], [1, 3]]),
    ],
)
def test_without_any_plan_that_is_what_is_said(march: Plan, how: str, paths: list[str], values: list[list[float]]) -> None:
    found = made(march, values, [0, 0], paths=paths, how=how, failed={0: "limits clash: a", 1: "limits clash: a"})
    answer = sweep_answer(found)
    assert answer.sentences[:2] == ("No case has a plan.", "2 of 2 cases have no plan and are left out: limits clash: a.")
    assert message(found) == "no case has a plan"
    text = sweep_text(found)
    assert "no case has a plan" in text.splitlines()[0]
    assert "  2: limits clash: a (the first is case 1)" in text
    assert not re.search(r"\bnan\b", text)


# ---------------------------------------------------------------------------------- tornado


def test_a_tornado_is_todays_margin_and_its_changes(march: Plan) -> None:
    today, none = march.margin / 1000, np.nan
    values = [[none] * 3, [500, none, none], [560, none, none], [none, 30, none], [none, 36, none], [none, none, 40]]
    changes = [0, 300, -200, 50, 2000, 7]
    found = tornado(
        made(march, values, today + np.array(changes), paths=[NAPHTHA, ETHYLENE, "outlets.c5_sale"], how=ONE_AT_A_TIME)
    )
    assert [one["number"] for one in found.table.rows] == [ETHYLENE, NAPHTHA, "outlets.c5_sale"]
    assert [one["swing"] for one in found.table.rows] == pytest.approx([2000, 500, 7])
    for one in found.table.rows:
        for end in ("low", "high"):
            if one[f"margin_{end}"] is not None:
                assert one[f"margin_{end}"] == pytest.approx(today + one[f"change_{end}"], rel=1e-12)
    both, single = row(found.table, number=NAPHTHA), row(found.table, number="outlets.c5_sale")
    assert (both["low_value"], both["high_value"], both["change_low"], both["change_high"]) == (500, 560, 300, -200)
    assert (single["low_value"], single["change_low"], single["today"]) == (40, pytest.approx(7), 480)  # below today: a low end
    assert single["high_value"] is single["margin_high"] is single["change_high"] is None
    assert (
        "Full range naphtha spot cargo: at 500 USD/t the margin rises by 300 kUSD, at 560 USD/t the margin falls by 200 kUSD."
        in (found.sentences)
    )


def test_a_tornado_takes_the_ends_of_several_values_and_leaves_other_cases_out(march: Plan) -> None:
    today, none = march.margin / 1000, np.nan
    values = [[10, none], [-20, none], [20, none], [-10, none], [none, 5], [30, 30]]
    found = tornado_bars(made(march, values, today + np.array([1, -9, 4, -2, 3, 99]), paths=[NAPHTHA, ETHYLENE], percent=True))
    assert [(bar.number, bar.low_case, bar.high_case, bar.swing) for bar in found] == [
        (0, 1, 2, pytest.approx(13)),
        (1, None, 4, pytest.approx(3)),
    ]


def test_an_end_without_a_plan_is_blank(march: Plan) -> None:
    today, none = march.margin / 1000, np.nan
    found = made(
        march,
        [[500, none], [560, none], [none, 30]],
        [today + 9, 0, today],
        paths=[NAPHTHA, ETHYLENE],
        failed={1: "limits clash"},
    )
    one = row(tornado(found).table, number=NAPHTHA)
    assert (one["high_value"], one["margin_high"], one["change_high"], one["swing"]) == (560, None, None, pytest.approx(9))
    assert "at 560 USD/t there is no plan" in str(tornado(found))
    assert "1 number moves nothing: ethylene spot" in str(tornado(found))
    assert suits(found) == DISTRIBUTION  # a table, though its cases vary one number each


def test_no_case_of_one_number_is_no_tornado(march: Plan) -> None:
    with pytest.raises(ValueError, match="no case varies one number alone"):
        tornado(made(march, [[500, 30], [560, 36]], [1, 2], paths=[NAPHTHA, ETHYLENE]))


def test_the_tornado_of_the_demo_is_what_plans_of_their_own_say(march: Plan) -> None:
    found = sweep(march, {NAPHTHA: [500, 560], CONTRACT: [40, 50]}, how=ONE_AT_A_TIME)
    one = row(tornado(found).table, number=NAPHTHA)
    assert one["change_low"] == pytest.approx((found.plan(1).margin - march.margin) / 1000, abs=1e-6)
    assert one["change_high"] == pytest.approx((found.plan(2).margin - march.margin) / 1000, abs=1e-6)
    assert one["change_low"] > 0 > one["change_high"]
    assert tornado(found).table.rows[0] is not one
    assert tornado(found).table.rows[0]["number"] == NAPHTHA


# ---------------------------------------------------------------------------------- steps


def test_steps_stand_in_the_order_of_the_number(march: Plan) -> None:
    today = march.margin / 1000
    found = steps_of_sweep(
        made(march, [[560], [np.nan], [500]], [1, today, 3], how=LIST, readings={GAS_OIL: [5, 1, 0]}, held=[0, today, 2])
    )
    assert [one["value"] for one in found.table.rows] == [500, 534, 560]
    assert [one["margin"] for one in found.table.rows] == [3, today, 1]
    assert [one["change"] for one in found.table.rows] == pytest.approx([3 - today, 0, 1 - today], abs=1e-6)
    assert [one["held"] for one in found.table.rows] == [2, today, 0]
    assert [one[GAS_OIL] for one in found.table.rows] == [0, 1, 5]
    assert (found.chart.today, found.chart.x_unit) == (534, f"{NAPHTHA}, USD/t") if found.chart else False
    assert "Bought gas oil spot barge: 0 at the lowest value, 5 at the highest (kt)." in found.sentences


def test_readings_along_a_number_are_chosen_or_those_that_change(march: Plan) -> None:
    wide = {"bought.ethane.contract": [0, 9, 1], GAS_OIL: [1, 2, 1], "sold.c5_sale": [0, 50, 0]}
    found = made(march, [[1], [2], [3]], [1, 2, 3], how=LIST, readings=wide)
    assert changing_readings(found) == ["bought.ethane.contract", GAS_OIL]
    only_sold = made(march, [[1], [2], [3]], [1, 2, 3], how=LIST, readings={"sold.c5_sale": [0, 50, 0]})
    assert changing_readings(only_sold) == ["sold.c5_sale"]
    assert changing_readings(found, ["sold.c5_sale"]) == ["sold.c5_sale"]
    with pytest.raises(ValueError, match=r"did you mean `sold\.c5_sale`"):
        steps_of_sweep(found, ["sold.c5_sales"])
    with pytest.raises(ValueError, match="2 numbers vary"):
        steps_of_sweep(made(march, [[1, 2]], [1], paths=[NAPHTHA, ETHYLENE]))


def test_a_step_without_a_plan_is_blank(march: Plan) -> None:
    found = steps_of_sweep(made(march, [[500], [560]], [7, 0], how=LIST, failed={1: "limits clash"}))
    assert found.table.rows[1] == {"value": 560, "margin": None, "change": None, "held": None}
    assert found.chart is None  # a line cannot be drawn through what is not there


def test_a_margin_that_stays_is_said_to_stay(march: Plan) -> None:
    found = made(march, [[40], [45]], [march.margin / 1000] * 2, paths=[CONTRACT], how=LIST)
    assert message(found) == "the margin stays at 26.81 MUSD in every case that has a plan"
    assert steps_of_sweep(found).sentences[0] == "The margin before fixed cost stays at 26.81 MUSD."


# ---------------------------------------------------------------------------------- heat map


def test_rows_of_a_heat_map_are_the_first_number_whatever_the_order_of_the_cases(march: Plan) -> None:
    values = [[a, b] for a in (560.0, 500.0) for b in (36.0, 30.0, 33.0)]
    order = np.random.default_rng(1).permutation(6)
    shuffled = [values[at] for at in order]
    margin = [100 * a + b for a, b in shuffled]
    load = [b - a for a, b in shuffled]
    found = made(march, shuffled, margin, paths=[NAPHTHA, ETHYLENE], how=GRID, readings={GAS_OIL: load})
    answer = heat_map(found, GAS_OIL)
    keys = ["at 1", "at 2", "at 3"]
    assert [column.title for column in answer.table.columns] == [NAPHTHA, "30 USc/lb", "33 USc/lb", "36 USc/lb"]
    for one, value in zip(answer.table.rows, (500, 560), strict=True):
        assert one["value"] == value
        assert [one[key] for key in keys] == [100 * value + b for b in (30, 33, 36)]
    second = table_of(answer, "heat_map_reading")
    assert [second.rows[0][key] for key in keys] == [-470, -467, -464]
    grid = heat_grid(found)
    assert found.cases.values[grid.cases[1, 2]].tolist() == [560, 36]
    assert "lowest, 50.03 MUSD, at full range naphtha spot cargo 500 USD/t and ethylene spot 30 USc/lb" in answer.sentences[0]


def test_a_heat_map_needs_a_full_grid_of_two_numbers(march: Plan) -> None:
    with pytest.raises(ValueError, match="one number varies: a heat map is of two"):
        heat_map(made(march, [[1], [2]], [1, 2]))
    for values in ([[1, 1], [1, 2], [2, 1]], [[1, 1], [1, 2], [2, 1], [2, 1]]):
        with pytest.raises(ValueError, match="no full grid"):
            heat_map(made(march, values, [1] * len(values), paths=[NAPHTHA, ETHYLENE]))
    with pytest.raises(ValueError, match="leaves a number as today"):
        heat_map(made(march, [[1, np.nan], [1, 2]], [1, 2], paths=[NAPHTHA, ETHYLENE]))


def test_a_cell_without_a_plan_is_blank(march: Plan) -> None:
    found = made(march, [[1, 1], [1, 2]], [5, 0], paths=[NAPHTHA, ETHYLENE], how=GRID, failed={1: "limits clash"})
    assert heat_map(found).table.rows == [{"value": 1, "at 1": 5, "at 2": None}]


# ---------------------------------------------------------------------------------- what suits, what is printed


def test_what_suits_a_sweep(march: Plan, drawn: Sweep) -> None:
    two = [NAPHTHA, ETHYLENE]
    grid = made(march, [[1, 1], [1, 2], [2, 1], [2, 2]], [1, 2, 3, 4], paths=two, how=GRID)
    assert suits(drawn) == DISTRIBUTION
    assert suits(grid) == HEAT_MAP
    assert suits(made(march, [[1, 1], [1, 2], [2, 1]], [1, 2, 3], paths=two)) == DISTRIBUTION
    assert suits(made(march, [[np.nan] * 2, [1, np.nan]], [1, 2], paths=two, how=ONE_AT_A_TIME)) == TORNADO
    assert suits(made(march, [[1], [2]], [1, 2], how=LIST)) == STEPS
    assert sweep_answer(grid, [GAS_OIL]).tables[1].name == "heat_map_reading"


def test_what_is_printed_of_draws(drawn: Sweep) -> None:
    text = sweep_text(drawn)
    found = figures(drawn.margin[planned(drawn)])
    assert re.match(r"March 2031, base prices: the margin is 27\.\d\d MUSD on average, eight cases in ten between", text)
    assert re.search(rf"P10 +{found.p10:,.1f} ", text)
    assert "200 cases, random draws of 33 numbers" in text
    assert max(map(len, text.splitlines())) <= WIDTH
    assert "No plan in" not in text


def test_what_is_printed_is_no_longer_than_a_screen(march: Plan) -> None:
    today, count = march.margin / 1000, 300
    steps = made(march, np.arange(count)[:, None], today - np.arange(count), how=LIST)
    text = sweep_text(steps)
    assert "20 of 300 values, evenly spaced" in text
    assert len(text.splitlines()) < 40
    grid = made(march, [[a, b] for a in range(30) for b in range(30)], np.arange(900), paths=[NAPHTHA, ETHYLENE], how=GRID)
    text = sweep_text(grid)
    assert "96 of 900 cases, evenly spaced" in text
    assert max(map(len, text.splitlines())) <= WIDTH
    line = next(line for line in text.splitlines() if line.strip().startswith("29 USD/t"))
    assert line.split()[2:] == [f"{29 * 30 + at:,.1f}" for at in thinned(30, 8)]


def test_reasons_are_printed_the_most_frequent_first_and_five_at_most(march: Plan) -> None:
    why = {at: f"limits clash: {'abcdefg'[min(at, 6)]}" for at in range(9)}
    text = sweep_text(made(march, [[1]] * 10, [5] * 10, how=DRAWS, failed=why))
    block = text[text.index("No plan in 9 of 10 cases") :].splitlines()
    assert block[1] == "  3: limits clash: g (the first is case 7)"
    assert block[6] == "  2 for other reasons"
    assert text.count("limits clash: g") == 1  # said once, though the answer has a sentence of it too


def test_a_tornado_is_printed_widest_first(march: Plan) -> None:
    found = sweep(march, {NAPHTHA: [500, 560], CONTRACT: [20, 80]}, how=ONE_AT_A_TIME)
    lines = sweep_text(found).splitlines()
    at = next(number for number, line in enumerate(lines) if line.startswith("Change of the margin"))
    assert lines[at + 2].split()[:4] == [NAPHTHA, "534", "500", "560"]
    assert lines[at + 3].split()[:4] == [CONTRACT, "44", "20", "80"]
    assert "no plan" in lines[at + 3]


# ---------------------------------------------------------------------------------- in a notebook


def test_names_are_escaped_in_a_notebook(march: Plan) -> None:
    column = Column("a", "<b>A</b>", "k&", "quantity")
    table = Table("t", "<script>", (Column("n", "Name"), column), [{"n": "<i>x</i>", "a": -1e-14}] * 25)
    answer = Answer("a", "<u>", (table,), ("1 < 2",), "a & b")
    scenario = dataclasses.replace(march.scenario, file=march.scenario.file.model_copy(update={"title": "<h1>March"}))
    for shown in (table._repr_html_(), answer._repr_html_(), dataclasses.replace(march, scenario=scenario)._repr_html_()):
        assert not re.search(r"<(script|i>x|u>|h1|b>A)", shown)
    html = answer._repr_html_()
    for words in ("&lt;script&gt;", "&lt;i&gt;x", "1 &lt; 2", "a &amp; b", "k&amp;", "and 5 rows more", ">0<"):
        assert words in html, words
    assert html.count("<tr>") == 21


def test_a_plan_in_a_notebook_is_small(march: Plan, every_plan: Plan) -> None:
    shown = march._repr_html_()
    assert "26,809 kUSD" in shown
    assert "full range naphtha spot cargo 47.6 kt" in shown
    assert not re.search(r"\d\.\d{5}", every_plan._repr_html_())
    assert len(every_plan._repr_html_()) < 4000
