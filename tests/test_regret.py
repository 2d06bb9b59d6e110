"""Regret between cases: small plants by hand, the demo by programs compiled afresh, and what is always so."""

from __future__ import annotations

import contextlib
import itertools
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from plants import ONE_FEED, THREE_STEPS, dumped, near, write

from olefinlp.answers.answer import Answer
from olefinlp.answers.comparison import CaseResult, Comparison, compare_cases
from olefinlp.answers.held import held_columns, held_decisions, held_words, hold, if_comes, key_of
from olefinlp.answers.plan import Plan
from olefinlp.answers.regret import ROUNDING, lost_by, regret_table
from olefinlp.inputs.case_files import read_cases
from olefinlp.lp.algebra import build_model
from olefinlp.lp.compile import LabelledLp, compile_model
from olefinlp.lp.solver import Status, solve

MARCH, HALF_YEAR = "brackwater_2031_03.yaml", "brackwater_2031_03_to_08.yaml"
BASE, HIGH, LOW, CHEAP, STRONG, WEAK = names = (
    "Base",
    "High crude",
    "Low crude",
    "Cheap ethane",
    "Strong propylene",
    "Weak aromatics",
)
HELD_WORDS = ["purchases", "sales", "charges", "feeds.full_range_naphtha", "feeds.ethane.contract", "furnace_groups.gas_furnaces"]


@pytest.fixture(scope="module")
def demo(root: Path) -> Comparison:
    """All price cases of March."""
    with contextlib.chdir(root):
        return compare_cases(read_cases(root / "scenarios" / MARCH))


def small_cases(folder: Path, cases: Sequence[dict[str, Any]], **parts: Any) -> Comparison:
    """Cases of a small plant, written as a list of cases."""
    write(folder, **parts)
    (folder / "cases.yaml").write_text(dumped({"scenario": "scenario.yaml", "cases": list(cases)}), encoding="utf-8")
    return compare_cases(read_cases(folder / "cases.yaml"))


def matrix(answer: Answer, cases: Sequence[str]) -> list[list[float | None]]:
    """Regrets: a line for each case decided for."""
    rows = {row["decided_for"]: row for row in answer.table.rows}
    return [[rows[a][if_comes(b)] for b in cases] for a in cases]


# ---------------------------------------------------------------------------------- by hand

ONE_SOURCE = {**ONE_FEED, "scenario": "feeds: {naphtha: {spot: {max: 10 kt, price: 500 USD/t}}}"}
DEAR_AND_CHEAP = [{"name": "Dear"}, {"name": "Cheap", "prices": {"outlets.ethylene_sale": "900 USD/t"}}]


def test_one_feed_before_two_prices(tmp_path: Path) -> None:
    """A tonne of naphtha makes 0.4 t of ethylene and 0.6 t of residue at 200: with ethylene at 1200 it is worth
    480 + 120 = 600, at 900 it is worth 360 + 120 = 480, and costs 500. So 10 kt earn 1000 when ethylene is dear and lose 200
    when it is cheap; the plan for cheap ethylene buys nothing.

    Regret of buying 10 kt: 200 if it is cheap; of buying nothing: 1000 if it is dear. On average 100 against 500."""
    answer = regret_table(small_cases(tmp_path, DEAR_AND_CHEAP, **ONE_SOURCE))
    assert matrix(answer, ["Dear", "Cheap"]) == [[0.0, near(200)], [near(1000), 0.0]]
    dear, cheap = answer.table.rows
    assert (dear["worst"], dear["mean"], cheap["worst"], cheap["mean"]) == (near(200), near(100), near(1000), near(500))
    assert [(row["minimax"], row["best_weighted"]) for row in (dear, cheap)] == [("yes", "yes"), ("", "")]
    assert answer.sentences == (
        "Buying for Dear costs at most 200 kUSD, if Cheap comes.",
        "Buying for Dear costs least on average, 100 kUSD, with equal weights, as none are written.",
        "Buying for Cheap can cost 1,000 kUSD, if Dear comes.",
        "Held: purchases of all feeds. Regret compares plans, it is no forecast.",
    )
    assert answer.note == (
        "Held: purchases of all feeds; everything else is chosen again at the prices and limits of the case that comes. "
        "Regret compares plans, it is no forecast. Average: all cases weigh the same, as no weights are written."
    )
    (row,) = answer.tables[1].rows
    assert (row["month"], row["item"], row["unit"], row["for Dear"], row["for Cheap"]) == (
        "month",
        "naphtha spot",
        "kt",
        near(10),
        0,
    )


def test_weights_move_the_average_and_not_the_worst(tmp_path: Path) -> None:
    """Cheap nine times in ten: buying 10 kt costs 0.9 · 200 = 180 on average, buying nothing 0.1 · 1000 = 100."""
    cases = [{**DEAR_AND_CHEAP[0], "weight": 1}, {**DEAR_AND_CHEAP[1], "weight": 9}]
    answer = regret_table(small_cases(tmp_path, cases, **ONE_SOURCE))
    dear, cheap = answer.table.rows
    assert (dear["mean"], cheap["mean"]) == (near(180), near(100))
    assert [(row["minimax"], row["best_weighted"]) for row in (dear, cheap)] == [("yes", ""), ("", "yes")]
    assert answer.sentences[1] == "Buying for Cheap costs least on average, 100 kUSD, by the weights written."
    assert "Average: weights as written: Dear 0.1, Cheap 0.9." in answer.note


def test_what_cannot_be_done_has_no_regret(tmp_path: Path) -> None:
    """10 kt cannot be bought where 6 are offered: Wide cannot be done in Narrow; 6 kt cost 4 · 100 = 400 where 10 are offered."""
    cases = [{"name": "Wide"}, {"name": "Narrow", "changes": {"feeds.naphtha.spot.max": "6 kt"}}]
    answer = regret_table(small_cases(tmp_path, cases, **ONE_SOURCE))
    assert matrix(answer, ["Wide", "Narrow"]) == [[0.0, None], [near(400), 0.0]]
    wide, narrow = answer.table.rows
    assert (wide["worst"], wide["mean"], wide["impossible_in"]) == (None, None, "Narrow")
    assert (narrow["worst"], narrow["minimax"], narrow["best_weighted"], narrow["impossible_in"]) == (near(400), "yes", "yes", "")
    assert "Buying for Wide cannot be done if Narrow comes: its worst regret is impossible." in answer.sentences


def test_decisions_that_fit_no_other_case(tmp_path: Path) -> None:
    """At least 8 kt in one, at most 6 in the other: neither can be bought for the other."""
    cases = [
        {"name": "Much", "changes": {"feeds.naphtha.spot.min": "8 kt"}},
        {"name": "Little", "changes": {"feeds.naphtha.spot.max": "6 kt"}},
    ]
    answer = regret_table(small_cases(tmp_path, cases, **ONE_SOURCE))
    assert matrix(answer, ["Much", "Little"]) == [[0.0, None], [None, 0.0]]
    assert answer.sentences[0] == "Buying for any one case cannot be done in all the others."
    assert all(not row["minimax"] and not row["best_weighted"] for row in answer.table.rows)


def test_a_source_is_held_as_a_whole_whatever_its_steps(tmp_path: Path) -> None:
    """A tonne of ethane is worth 500. As written 6 kt are bought: 4 · 200 + 2 · 60 = 920. With a first step of 1 kt and a
    second up to 3 kt: 1 · 200 + 2 · 60 = 320 at 3 kt; 6 kt earn 320 − 3 · 20 = 260, a regret of 60. The other way round 3 kt
    earn 600 of 920: 320."""
    short = {"feeds.ethane.pipeline.tiers.1.up_to": "1 kt", "feeds.ethane.pipeline.tiers.2.up_to": "3 kt"}
    comparison = small_cases(tmp_path, [{"name": "Long"}, {"name": "Short", "changes": short}], **THREE_STEPS)
    assert matrix(regret_table(comparison), ["Long", "Short"]) == [[0.0, near(60)], [near(320), 0.0]]
    plan = comparison.plan("Short")
    held = hold(plan, held_decisions(plan), {key_of(d): 6.0 for d in held_decisions(plan)})
    assert held is not None
    assert [held.x[plan.lp.column_at["bought", "ethane.pipeline", k, "month"]] for k in "123"] == [near(1), near(2), near(3)]


TAKE_OR_PAY = {
    **ONE_FEED,
    "scenario": "feeds: {naphtha: {spot: {max: 10 kt, price: 500 USD/t, take_or_pay: 6 kt, shortfall_pays: 40 %}}}",
    "prices": {"ethylene": 900, "residue": 200},
}


def test_cases_of_other_coefficients_have_programs_of_their_own(tmp_path: Path) -> None:
    """Naphtha worth 480 costs 500; of 6 kt not taken 40 % of the price is paid, or 2 %. Taken are 6 kt at a loss of 120, or
    nothing at a loss of 60. The shortfall follows: 6 kt lose 120 in the second, nothing loses 1200 in the first."""
    cases = [{"name": "Bound"}, {"name": "Free", "changes": {"feeds.naphtha.spot.shortfall_pays": "2 %"}}]
    comparison = small_cases(tmp_path, cases, **TAKE_OR_PAY)
    assert comparison.shared == 1
    assert matrix(regret_table(comparison), ["Bound", "Free"]) == [[0.0, near(60)], [near(1080), 0.0]]


def test_a_case_without_a_plan_is_left_out_and_named(tmp_path: Path) -> None:
    cases = [*DEAR_AND_CHEAP, {"name": "Greedy", "changes": {"outlets.ethylene_sale.min": "5 kt"}}]
    answer = regret_table(small_cases(tmp_path, cases, **ONE_SOURCE))
    assert matrix(answer, ["Dear", "Cheap"]) == [[0.0, near(200)], [near(1000), 0.0]]
    assert answer.table.rows[0]["mean"] == near(100)
    assert "Greedy has no plan and is left out." in answer.sentences
    assert answer.note.endswith("Greedy has no plan and is left out.")


def test_no_case_with_a_plan(tmp_path: Path) -> None:
    greedy = {"name": "Greedy", "changes": {"outlets.ethylene_sale.min": "5 kt"}}
    comparison = small_cases(tmp_path, [greedy], **ONE_SOURCE)
    with pytest.raises(ValueError, match="no case has a plan: Greedy: No plan is possible"):
        regret_table(comparison)


def test_one_case_alone(tmp_path: Path) -> None:
    answer = regret_table(small_cases(tmp_path, DEAR_AND_CHEAP[:1], **ONE_SOURCE))
    assert answer.table.rows[0][if_comes("Dear")] == 0.0
    assert answer.sentences[0] == "Dear is the only case with a plan: nothing to regret."


def test_plans_that_need_not_be_the_only_ones_are_named(tmp_path: Path) -> None:
    """Two sources of one price: which of them is bought is open, and another case may tell them apart."""
    twins = "feeds: {naphtha: {a: {max: 8 kt, price: 500 USD/t}, b: {max: 8 kt, price: 500 USD/t}}}"
    cases = [{"name": "Twins"}, {"name": "Apart", "prices": {"feeds.naphtha.b": "520 USD/t"}}]
    answer = regret_table(small_cases(tmp_path, cases, **ONE_FEED, scenario=twins))
    assert "Other decisions may be as good for Twins, with other regrets." in answer.note


@pytest.mark.parametrize("name", ["worst", "mean", "decided_for", "minimax"])
def test_no_name_of_a_case_is_in_the_way_of_a_column(tmp_path: Path, name: str) -> None:
    cases = [{"name": name}, DEAR_AND_CHEAP[1]]
    answer = regret_table(small_cases(tmp_path, cases, **ONE_SOURCE))
    assert matrix(answer, [name, "Cheap"]) == [[0.0, near(200)], [near(1000), 0.0]]
    keys = [column.key for column in answer.table.columns]
    assert len(keys) == len(set(keys))
    assert all(set(keys) == set(row) for row in answer.table.rows)


def test_a_gain_from_holding_is_an_error() -> None:
    assert lost_by(-0.5 * ROUNDING * 1000, 1000) == 0.0
    assert lost_by(3.0, 1000) == 3.0
    with pytest.raises(ArithmeticError, match="held decisions earn 1 more than the best ones"):
        lost_by(-1.0, 1000)


# ---------------------------------------------------------------------------------- what is held


def test_words_of_what_is_held(march: Plan) -> None:
    assert held_words(march) == "purchases of all feeds"
    assert held_words(march, ["feeds.ethane"]) == "purchases of ethane"
    assert held_words(march, ["feeds.ethane.contract", "feeds.gas_oil", "outlets.c5_sale"]) == (
        "purchases of ethane contract and gas oil, sales to c5 sale"
    )
    assert held_words(march, "charges") == "all charges"
    assert held_words(march, ["furnace_groups.gas_furnaces"]) == "charges of gas furnaces"


def test_columns_of_what_is_held(march: Plan) -> None:
    labels = march.lp.columns
    assert [(words, [labels[j] for j in columns]) for words, columns in held_columns(march, ["feeds.ethane"])] == [
        (f"2031-03 ethane {words} bought", [("bought", f"ethane.{name}", "1", "2031-03")])
        for words, name in (("contract", "contract"), ("spot pipeline", "spot_pipeline"))
    ]
    every = {j for _, columns in held_columns(march, ["purchases", "sales", "charges"]) for j in columns}
    assert every == {j for j, label in enumerate(labels) if label[0] in ("bought", "sold", "charge")}
    once = held_columns(march, ["purchases", "feeds.ethane", "purchases"])
    assert once == held_columns(march)


def test_side_streams_can_be_held_alone(shipped_plan: Any) -> None:
    plan = shipped_plan("marram_point_2031_03.yaml")
    case = plan.quantities.case
    streams = [source for source, data in case.sources.items() if data.kind == "side_streams"]
    assert streams
    found = {plan.lp.columns[j][1] for _, columns in held_columns(plan, ["side_streams"]) for j in columns}
    assert found == set(streams)
    assert held_words(plan) == "purchases of all feeds and side streams"
    stream = case.sources[streams[0]].feed
    assert held_words(plan, [f"side_streams.{stream}"]) == f"purchases of {stream.replace('_', ' ')}"


@pytest.mark.parametrize(
    ("held", "message"),
    [
        (["purchase"], "`purchase` is no decision that can be held; did you mean `purchases`?"),
        (["purchases", "feeds.etane"], "`feeds.etane` is no decision that can be held; did you mean `feeds.ethane`?"),
        ([], "nothing is held: name what is decided beforehand, such as `purchases`"),
    ],
)
def test_words_that_hold_nothing(march: Plan, demo: Comparison, held: list[str], message: str) -> None:
    for ask in (lambda: held_columns(march, held), lambda: held_words(march, held), lambda: regret_table(demo, held)):
        with pytest.raises(ValueError) as error:
            ask()
        assert str(error.value) == message


def test_what_can_be_held(tmp_path: Path) -> None:
    """10 kt are on offer and can be cracked. A little more, as the rounding of a solver leaves it, is 10 kt; 1 t more is not."""
    plan = small_cases(tmp_path, DEAR_AND_CHEAP[:1], **ONE_SOURCE).plan("Dear")
    own = held_decisions(plan)
    key = key_of(own[0])

    def margin(amount: float, **others: float) -> float | None:
        found = hold(plan, own, {key: amount, **{("bought", name, "month"): more for name, more in others.items()}})
        return None if found is None else found.objective

    assert (margin(10.0), margin(4.0), margin(0.0)) == (near(1000), near(400), 0.0)
    assert margin(10 + 5e-9) == pytest.approx(1000, abs=1e-5)
    assert margin(-5e-9) == pytest.approx(0, abs=1e-5)
    assert (margin(10.001), margin(-0.001)) == (None, None)
    assert (margin(4.0, unknown=0.0), margin(4.0, unknown=1.0)) == (near(400), None)
    assert hold(plan, own, {}) is not None


def test_what_no_step_has_room_for_cannot_be_held(tmp_path: Path) -> None:
    """Steps of 2, 1 and 1 kt, at least 1 kt of the first: 4 kt have room, 4.5 and 0.5 kt have not."""
    plan = small_cases(tmp_path, [{"name": "Long"}], **THREE_STEPS).plan("Long")
    first, *others = held_decisions(plan)[0].columns
    low, high = plan.lp.low.copy(), plan.lp.high.copy()
    low[first], high[first], high[others] = 1.0, 2.0, [1.0, 1.0]
    tight = replace(plan, lp=replace(plan.lp, low=low, high=high))
    own = held_decisions(tight)
    found = [hold(tight, own, {key_of(own[0]): amount}) for amount in (0.5, 1.0, 4.0, 4.5)]
    assert [one is None for one in found] == [True, False, False, True]


# ---------------------------------------------------------------------------------- the demo


def test_sizes_that_another_program_of_the_plant_found(demo: Comparison) -> None:
    """Buying for Base costs at most about 1.37 M USD, if crude jumps, and 0 to 0.2 M otherwise; buying for High crude or
    Cheap ethane risks 2.53 M."""
    answer = regret_table(demo)
    rows = {row["decided_for"]: row for row in answer.table.rows}
    assert round(rows[BASE][if_comes(HIGH)], -1) == 1370
    assert all(0 <= rows[BASE][if_comes(name)] < 210 for name in names if name != HIGH)
    assert [round(rows[name]["worst"], -1) for name in (HIGH, CHEAP)] == [2530, 2530]
    assert answer.sentences[0] == "Buying for Base or Weak aromatics costs at most 1,367 kUSD, if High crude comes."


def afresh(plan: Plan) -> LabelledLp:
    """The program of a case compiled again from its scenario, not the shared one."""
    return compile_model(build_model(plan.scenario.case))


def regret_afresh(comparison: Comparison, a: str, b: str, words: Sequence[str]) -> float | None:
    """Fixed in the bounds of a program compiled afresh and solved from nothing."""
    lp, own = afresh(comparison.plan(b)), comparison.plan(a)
    low, high = lp.low.copy(), lp.high.copy()
    for column, label in enumerate(own.lp.columns):
        if label[0] in words:
            value = max(0.0, float(own.solution.x[column]))
            low[lp.column_at[label]] = high[lp.column_at[label]] = value
    best, held = solve(lp), solve(replace(lp, low=low, high=high))
    assert best.solution is not None
    if held.solution is None:
        assert held.status is Status.INFEASIBLE
        return None
    return best.solution.objective - held.solution.objective


@pytest.mark.parametrize(("held", "family"), [("purchases", "bought"), ("charges", "charge")])
def test_every_regret_by_programs_compiled_afresh(demo: Comparison, held: str, family: str) -> None:
    found = matrix(regret_table(demo, [held]), names)
    for (i, a), (k, b) in itertools.product(enumerate(names), repeat=2):
        again = regret_afresh(demo, a, b, [family])
        assert (found[i][k], again) == (pytest.approx(again, abs=1e-3), pytest.approx(found[i][k], abs=1e-3)), (a, b)


@pytest.mark.slow
def test_regrets_of_six_months_by_programs_compiled_afresh(root: Path) -> None:
    with contextlib.chdir(root):
        comparison = compare_cases(read_cases(root / "scenarios" / HALF_YEAR))
    found = matrix(regret_table(comparison), names)
    for (i, a), (k, b) in itertools.product(enumerate(names), repeat=2):
        assert found[i][k] == pytest.approx(regret_afresh(comparison, a, b, ["bought"]), abs=1e-2), (a, b)


@pytest.mark.parametrize("held", HELD_WORDS)
def test_nothing_is_gained_by_holding(demo: Comparison, held: str) -> None:
    answer = regret_table(demo, [held])
    found = np.array(matrix(answer, names), dtype=float)
    assert (np.diag(found) == 0).all()
    assert (found >= 0).all()
    for row, line in zip(answer.table.rows, found, strict=True):
        assert (row["worst"], row["mean"]) == (line.max(), near(line.mean()))
    for name in names:  # what a plan has can be held in it, and is as good as the plan
        plan = demo.plan(name)
        own = held_decisions(plan, [held])
        again = hold(plan, own, {key_of(d): d.planned for d in own})
        assert again is not None
        assert again.objective == pytest.approx(plan.solution.objective, rel=1e-9)


def test_holding_less_regrets_less(demo: Comparison) -> None:
    less = np.array(matrix(regret_table(demo, ["feeds.full_range_naphtha"]), names), dtype=float)
    more = np.array(matrix(regret_table(demo), names), dtype=float)
    most = np.array(matrix(regret_table(demo, ["purchases", "charges"]), names), dtype=float)
    assert (less <= more + 1e-6).all()
    assert (more <= most + 1e-6).all()
    assert less.sum() < more.sum() < most.sum()


def test_the_order_of_cases_changes_nothing(demo: Comparison) -> None:
    want = matrix(regret_table(demo), names)
    for order in (demo.cases[::-1], (*demo.cases[2:], *demo.cases[:2])):
        answer = regret_table(replace(demo, cases=order))
        assert matrix(answer, names) == want
        flagged = {row["decided_for"] for row in answer.table.rows if row["minimax"]}
        assert flagged == {BASE, WEAK}


def test_a_case_left_out_of_the_demo(demo: Comparison) -> None:
    gone = CaseResult("Gone", 0.5, None, "no ethane")
    answer = regret_table(replace(demo, cases=(gone, *demo.cases)))
    assert matrix(answer, names) == matrix(regret_table(demo), names)
    assert "Gone has no plan and is left out." in answer.sentences


def test_cases_that_all_weigh_nothing(demo: Comparison) -> None:
    cases = tuple(replace(case, weight=0.0) for case in demo.cases)
    with pytest.raises(ValueError, match="all weigh nothing: give one of them a weight"):
        regret_table(replace(demo, cases=cases))
