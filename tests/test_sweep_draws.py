"""Random cases: the same for the same seed, spread and correlated as written, or one clear list of what is wrong."""

from __future__ import annotations

import math
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from conftest import ROOT
from scipy import stats

from olefinlp import InputError, Scenario
from olefinlp.inputs.prices import AMOUNT, typed_of
from olefinlp.inputs.sweep_cases import SweepCases
from olefinlp.inputs.sweep_correlation import correlated
from olefinlp.inputs.sweep_draws import draw_cases, log_sd
from olefinlp.inputs.sweep_file import read_sweep_file
from olefinlp.inputs.varied import find_varied

NAPHTHA = "feeds.full_range_naphtha.spot_cargo"
ETHANE = "feeds.ethane.contract"
ETHYLENE = "outlets.ethylene_contract"
C5 = "outlets.c5_sale"
FACTOR = "recovery_units.cracked_gas_compressor.factor"
ONE_MONTH = "brackwater_2031_03.yaml"
SIX_MONTHS = "brackwater_2031_03_to_08.yaml"
TEN = {"sd": "10 %"}
COUNT = 4000
Shipped = Callable[[str], Scenario]


@pytest.fixture
def march(shipped_scenario: Shipped) -> Scenario:
    return shipped_scenario(ONE_MONTH)


@pytest.fixture
def six(shipped_scenario: Shipped) -> Scenario:
    return shipped_scenario(SIX_MONTHS)


def column(cases: SweepCases, path: str) -> Any:
    return cases.values[:, [varied.path for varied in cases.varied].index(path)]


def wrong(call: Callable[..., object], *arguments: Any, **named: Any) -> str:
    """The whole message of what is wrong."""
    with pytest.raises(InputError) as caught:
        call(*arguments, **named)
    return str(caught.value)


# ---------------------------------------------------------------------------------- seeds and streams


def test_the_draws_of_a_seed_are_these(march: Scenario) -> None:
    """Written out once: another machine, or another version of a library, must give the same.

    Worked out apart from the package: SHA-256 of the path keys a PCG64 stream, whose upper 53 bits are shares.
    """
    cases = draw_cases(march, {NAPHTHA: {"sd": 53.4, "distribution": "normal"}}, count=3, seed=7)
    raw = np.random.PCG64(np.random.SeedSequence(7, spawn_key=NAPHTHA_KEY)).random_raw(3)
    shares = [((int(bits) >> 11) + 0.5) / 2**53 for bits in raw]
    assert cases.values[:, 0] == pytest.approx(534 + 53.4 * stats.norm.ppf(shares), rel=1e-11)
    assert cases.values[:, 0].tolist() == NAPHTHA_DRAWS


NAPHTHA_KEY = (2780006087, 1232333343, 2930571322, 2606389449)
NAPHTHA_DRAWS = [574.231447533, 496.742447808, 477.426001077]


def test_the_same_seed_gives_the_same_draws_and_another_others(march: Scenario) -> None:
    spreads = {NAPHTHA: TEN, ETHANE: TEN}
    first, again, other = (draw_cases(march, spreads, count=50, seed=seed).values for seed in (7, 7, 8))
    np.testing.assert_array_equal(first, again)
    assert not np.any(first == other)
    assert not np.any(first[:, 0] / 534 == first[:, 1] / 41)


def test_draws_of_a_number_stay_when_others_come_or_more_are_drawn(march: Scenario) -> None:
    alone = draw_cases(march, {NAPHTHA: TEN}, count=50, seed=7)
    longer = draw_cases(march, {ETHANE: TEN, f"{NAPHTHA}.price": TEN, FACTOR: {"sd": 0.02}}, count=80, seed=7)
    np.testing.assert_array_equal(column(longer, NAPHTHA)[:50], column(alone, NAPHTHA))
    pairs = {NAPHTHA: {ETHANE: 0.8}}
    two = draw_cases(march, {NAPHTHA: TEN, ETHANE: TEN}, count=50, seed=7, correlation=pairs)
    three = draw_cases(march, {NAPHTHA: TEN, ETHANE: TEN, C5: TEN}, 50, 7, pairs | {C5: {NAPHTHA: 0.5}, "other_pairs": 0.3})
    np.testing.assert_array_equal(three.values[:, :2], two.values)
    np.testing.assert_array_equal(column(two, NAPHTHA), column(alone, NAPHTHA))


def test_mirrored_draws_stand_in_pairs_around_the_median(march: Scenario) -> None:
    spreads = {NAPHTHA: TEN, FACTOR: {"sd": 0.02}}
    cases = draw_cases(march, spreads, 200, 7, {NAPHTHA: {FACTOR: 0.5}}, antithetic=True)
    naphtha, factor = column(cases, NAPHTHA), column(cases, FACTOR)
    assert naphtha[::2] * naphtha[1::2] == pytest.approx(np.full(100, 534.0**2), rel=1e-10)
    assert factor[::2] + factor[1::2] == pytest.approx(np.full(100, 2 * 1.02), rel=1e-10)
    assert len(np.unique(naphtha)) == 200
    plain = draw_cases(march, {NAPHTHA: TEN}, 100, 7)
    np.testing.assert_array_equal(naphtha[::2], column(plain, NAPHTHA))
    assert ", in mirrored pairs." in cases.note


# ---------------------------------------------------------------------------------- each number's own spread


def fits(values: Any, distribution: Any) -> bool:
    """Kolmogorov and Smirnov: at a fixed seed, a level that one right sample in a thousand would miss."""
    return bool(stats.kstest(values, distribution.cdf).pvalue > 1e-3)


def test_a_price_is_lognormal_around_today_with_the_sd_of_the_values(march: Scenario) -> None:
    values = column(draw_cases(march, {NAPHTHA: {"sd": "30 %"}}, COUNT, 11), NAPHTHA)
    exact = stats.lognorm(log_sd(0.3), scale=534)
    assert exact.median() == pytest.approx(534)
    assert exact.std() == pytest.approx(0.3 * 534)
    assert fits(values, exact)
    assert not fits(values, stats.norm(534, 0.3 * 534))
    fourth = float(exact.stats(moments="k")) + 2  # the variance of a sample's variance, over the variance squared
    assert values.mean() == pytest.approx(exact.mean(), abs=4 * exact.std() / math.sqrt(COUNT))
    assert values.var() == pytest.approx(exact.var(), rel=4 * math.sqrt(fourth / COUNT))
    assert values.min() > 0


@pytest.mark.parametrize(
    ("spread", "exact"),
    [
        ({"sd": 30, "distribution": "normal"}, stats.norm(534, 30)),
        ({"sd": "30 USD/t", "distribution": "normal"}, stats.norm(534, 30)),
        ({"distribution": "uniform", "low": 480, "high": 600}, stats.uniform(480, 120)),
        ({"distribution": "uniform", "low": "-10 %", "high": "20 %"}, stats.uniform(534 * 0.9, 534 * 0.3)),
        ({"distribution": "triangular", "low": 480, "mode": 500, "high": 600}, stats.triang(20 / 120, 480, 120)),
        ({"distribution": "triangular", "low": 480, "high": 600}, stats.triang(54 / 120, 480, 120)),
        ({"distribution": "triangular", "low": 534, "high": 600}, stats.triang(0, 534, 66)),
    ],
    ids=["normal", "normal with its unit", "uniform", "uniform from today", "triangular", "mode today", "mode at an end"],
)
def test_each_distribution_is_what_it_says(march: Scenario, spread: dict[str, object], exact: Any) -> None:
    values = column(draw_cases(march, {NAPHTHA: spread}, COUNT, 5), NAPHTHA)
    assert fits(values, exact)
    assert values.mean() == pytest.approx(exact.mean(), abs=4 * exact.std() / math.sqrt(COUNT))


def test_what_is_no_price_of_its_own_is_normal(march: Scenario) -> None:
    leaning = next(item for (item, _), price in march.case.prices.items() if typed_of(price)[0] == AMOUNT)
    spreads = {FACTOR: {"sd": 0.05}, leaning: {"sd": 10}, "outlets.crude_c4_contract.deduction": {"sd": 5}}
    cases = draw_cases(march, spreads, COUNT, 3)
    for path, sd in ((FACTOR, 0.05), (leaning, 10), ("outlets.crude_c4_contract.deduction", 5)):
        assert fits(column(cases, path), stats.norm(find_varied(march, path).first, sd)), path
    assert cases.note.count(": normal, mean ") == 3


def test_a_number_of_different_months_changes_by_percentages(six: Scenario) -> None:
    path = "outlets.crude_c4_contract.max"
    cases = draw_cases(six, {path: {"sd": "5 %"}}, COUNT, 3)
    assert cases.percent == (True,)
    assert fits(cases.values[:, 0], stats.norm(0, 5))
    today, drawn = (dict(find_varied(one, path).today) for one in (six, cases.scenario_of(0)))
    assert drawn == {month: pytest.approx(value * (1 + cases.values[0, 0] / 100)) for month, value in today.items()}


def test_a_draw_is_a_scenario_with_those_prices(march: Scenario) -> None:
    cases = draw_cases(march, {NAPHTHA: TEN, ETHANE: TEN}, 5, 3, {NAPHTHA: {ETHANE: 0.5}})
    for number in range(5):
        prices = cases.scenario_of(number).case.prices
        assert [prices[path, "2031-03"].number for path in (NAPHTHA, ETHANE)] == cases.values[number].tolist()


def test_the_note_says_all_that_makes_the_draws(march: Scenario) -> None:
    spreads: dict[str, Any] = {NAPHTHA: TEN, FACTOR: {"distribution": "triangular", "low": 0.9, "high": 1.05}}
    words = (
        f"1,000 draws, seed 7. {NAPHTHA}: lognormal, median 534, sd 53.4 USD/t; "
        f"{FACTOR}: triangular, low 0.9, mode 1.02, high 1.05. "
    )
    plain = draw_cases(march, spreads, 1000, 7)
    assert plain.note == words + "Those with a distribution are drawn independently: no correlation is written."
    assert plain.how == "draws"
    correlated_ = draw_cases(march, spreads, 1000, 7, {(NAPHTHA, FACTOR): 0.2})
    assert correlated_.note == words + "Correlated as written with them."


# ---------------------------------------------------------------------------------- correlation

MATRIX = pd.DataFrame(
    [[1, 0.9, 0.6], [0.9, 1, 0.5], [0.6, 0.5, 1]], index=[NAPHTHA, ETHANE, FACTOR], columns=[NAPHTHA, ETHANE, FACTOR]
)
SPREADS: dict[str, Any] = {
    NAPHTHA: TEN,
    ETHANE: {"sd": 3, "distribution": "normal"},
    FACTOR: {"distribution": "uniform", "low": 0.9, "high": 1.1},
}


def test_correlation_of_normal_scores_is_found_again_and_spreads_stay_exact(march: Scenario) -> None:
    cases = draw_cases(march, SPREADS, COUNT, 17, MATRIX)
    values = cases.values
    scores = np.column_stack(
        [np.log(values[:, 0] / 534) / log_sd(0.1), (values[:, 1] - 41) / 3, stats.norm.ppf((values[:, 2] - 0.9) / 0.2)]
    )
    found = np.corrcoef(scores.T)
    for row, column_ in ((0, 1), (0, 2), (1, 2)):
        exact = MATRIX.to_numpy()[row, column_]
        assert found[row, column_] == pytest.approx(exact, abs=4 * (1 - exact**2) / math.sqrt(COUNT))
        rank = stats.spearmanr(values[:, row], values[:, column_]).statistic
        assert rank == pytest.approx(6 / math.pi * math.asin(exact / 2), abs=4 / math.sqrt(COUNT))
    assert fits(values[:, 0], stats.lognorm(log_sd(0.1), scale=534))
    assert fits(values[:, 1], stats.norm(41, 3))
    assert fits(values[:, 2], stats.uniform(0.9, 0.2))


def test_ways_to_write_a_correlation(march: Scenario, tmp_path: Path) -> None:
    path = tmp_path / "correlation.csv"
    shuffled = MATRIX.loc[[FACTOR, NAPHTHA, ETHANE], [ETHANE, FACTOR, NAPHTHA]]
    path.write_text(shuffled.to_csv(index_label="number"), encoding="utf-8")
    ways: list[object] = [
        shuffled,
        path,
        MATRIX.to_dict(),
        {NAPHTHA: {ETHANE: 0.9, FACTOR: 0.6}, f"{FACTOR} @ 2031-03": {}, FACTOR: {f"{ETHANE}.price": 0.5}},
        {(NAPHTHA, ETHANE): 0.9, (FACTOR, NAPHTHA): 0.6, "other_pairs": 0.5},
    ]
    first = draw_cases(march, SPREADS, 20, 17, MATRIX)
    for way in ways:
        np.testing.assert_array_equal(draw_cases(march, SPREADS, 20, 17, way).values, first.values)
    assert "Correlated as in " in draw_cases(march, SPREADS, 20, 17, path).note


def test_numbers_may_move_together_wholly_or_against_each_other(march: Scenario) -> None:
    pairs = {NAPHTHA: {ETHANE: 1, C5: -1}, ETHANE: {C5: -1}}
    values = draw_cases(march, {NAPHTHA: TEN, ETHANE: TEN, C5: TEN}, 100, 3, pairs).values
    assert values[:, 1] / 41 == pytest.approx(values[:, 0] / 534, rel=1e-10)
    assert values[:, 2] * values[:, 0] == pytest.approx(np.full(100, 534 * find_varied(march, C5).first), rel=1e-10)


@pytest.mark.parametrize("size", [1, 2, 3, 6])
def test_the_root_of_a_matrix_gives_it_back(size: int) -> None:
    factor = np.random.default_rng(size).normal(size=(size, max(1, size - 2)))  # singular from 3 on
    matrix = factor @ factor.T
    scale = np.sqrt(np.diag(matrix))
    matrix = matrix / scale[:, None] / scale[None, :]
    root = correlated(np.eye(size), matrix)
    np.testing.assert_allclose(root.T @ root, matrix, atol=1e-9)


# ---------------------------------------------------------------------------------- history

PAST = pd.DataFrame(
    {
        "date": ["2030-01", "2030-02", "2030-03", "2030-04"],
        NAPHTHA: [500.0, 550.0, 495.0, 500.0],
        ETHANE: [40.0, 42.0, 42.0, 35.0],
        "something else": [None, 1, 2, 3],
    }
)


def test_rows_of_a_history_are_drawn_whole(march: Scenario, tmp_path: Path) -> None:
    path = tmp_path / "past.csv"
    path.write_text(PAST.to_csv(index=False).replace(f"{NAPHTHA},", f"{NAPHTHA} [EUR/t],"), encoding="utf-8")
    dated = PAST.drop(columns="date").set_index(pd.to_datetime(PAST["date"] + "-28"))
    changes = {(1.1, 1.05), (0.9, 1.0), (500 / 495, 35 / 42)}
    exact = {(float(f"{534 * a:.12g}"), float(f"{41 * b:.12g}")) for a, b in changes}
    results = [draw_cases(march, [NAPHTHA, ETHANE], 600, 3, history=history) for history in (dated, path)]
    np.testing.assert_array_equal(results[0].values, results[1].values)
    drawn = [tuple(row) for row in results[0].values.tolist()]
    assert set(drawn) == exact
    assert stats.chisquare([drawn.count(row) for row in exact]).pvalue > 1e-3
    assert results[0].note.endswith("History: 3 changes from row to row, 2030-01-28 to 2030-04-28.")
    assert "2030-01 to 2030-04 (" in results[1].note
    assert results[1].note.endswith("past.csv).")


def test_a_history_and_spreads_go_together(six: Scenario) -> None:
    history = pd.DataFrame({NAPHTHA: [1, 2, 1]}, index=pd.PeriodIndex(["2030-01", "2030-02", "2030-03"], freq="M"))
    cases = draw_cases(six, {NAPHTHA: None, f"{ETHANE} @ 2031-05": TEN}, 50, 3, history=history)
    assert set(column(cases, NAPHTHA)) == {2 * 534.0, 0.5 * 534.0}
    alone = draw_cases(six, {f"{ETHANE} @ 2031-05": TEN}, 50, 3)
    np.testing.assert_array_equal(column(cases, ETHANE), column(alone, ETHANE))
    assert f"{NAPHTHA}: from the history" in cases.note


# ---------------------------------------------------------------------------------- what is wrong


def test_everything_wrong_with_spreads_is_said_at_once(march: Scenario) -> None:
    spreads: dict[str, Any] = {
        "feeds.ethan.contract": TEN,
        NAPHTHA: {"sd": "-3 %"},
        ETHANE: {"sd": 2, "distribution": "triangular"},
        C5: {"distribution": "uniform", "low": 5, "high": 3},
        "outlets.crude_c4_contract.deduction": TEN,
        "outlets.ethylene_spot": {"sd": "1 USD/t"},
        "outlets.hydrogen_sale": {"distribution": "beta"},
        "outlets.raw_pygas.deduction": {},
        "feeds.propane.contract": {"distribution": "triangular", "low": 90, "high": 100},
        "feeds.propane.spot_cargo": {"distribution": "lognormal"},
        "feeds.gas_oil.spot_barge": {"low": 1},
        "feeds.n_butane.spot_cargo": {"sd": math.nan},
        "feeds.condensate.spot_cargo %": TEN,
        "feeds.light_naphtha.spot": 3,
        "outlets.crude_c4_contract.deduction ": {"sd": 1, "distribution": "lognormal"},
        "feeds.ethane.contract.shortfall_pays": TEN,
    }
    assert wrong(draw_cases, march, spreads, count=0, seed=None) == (
        """sweep  count
  `0` must be at least 1
sweep  draws
  `seed` is missing
hint: any whole number; with the same one the draws are the same
sweep  feeds.ethan.contract
  `feeds.ethan.contract` is no number of the scenario or its plant
hint: did you mean `feeds.ethane.contract`?
sweep  feeds.full_range_naphtha.spot_cargo
  `sd`: `-3 %` is not above zero
sweep  feeds.ethane.contract
  unknown name `sd`; here it takes: low, mode, high, distribution, month
sweep  outlets.c5_sale
  `low` 5 is not below `high` 3
sweep  outlets.crude_c4_contract.deduction
  `sd`: this number is 0 today, so a percentage of it is nothing
hint: write it in its unit
sweep  outlets.ethylene_spot
  `sd`: `1 USD/t`: this number is written in USc/lb
hint: write the number alone, or with that unit
sweep  outlets.hydrogen_sale
  `beta` is not one of: normal, lognormal, triangular, uniform
sweep  feeds.propane.contract
  the mode 86 is not between `low` 90 and `high` 100
hint: the mode is today's number where it is not written
sweep  feeds.propane.spot_cargo
  `sd` is missing: a lognormal spread takes sd
sweep  feeds.gas_oil.spot_barge
  has no `sd`
hint: write `sd`, or `distribution` and what belongs to it
sweep  feeds.n_butane.spot_cargo
  `sd`: `nan` is not a number
sweep  feeds.condensate.spot_cargo %
  is written with `%`: that is for values, not for draws
hint: write for example `{sd: 10 %}`
sweep  feeds.light_naphtha.spot
  needs `name: value` pairs
hint: for example `{sd: 10 %}`
sweep  outlets.crude_c4_contract.deduction"""
        + """ \n  is 0 today: a lognormal spread is of a number above zero
hint: write `distribution: normal`
sweep  feeds.ethane.contract.shortfall_pays
  `sd`: `10 %` may mean per cent of today, or the unit of this number, which is %
hint: write the number alone: it is in the unit
sweep  outlets.crude_c4_contract.deduction"""
        + """ \n  is varied twice, the other time as `outlets.crude_c4_contract.deduction`
hint: take one away
sweep  outlets.raw_pygas.deduction
  has neither a spread nor a history
hint: write for example `{sd: 10 %}`"""
    )


@pytest.mark.parametrize(
    ("named", "message"),
    [
        ({"count": 2.0}, "sweep  count\n  `2.0` is not a whole number"),
        ({"count": True}, "sweep  count\n  `True` is not a whole number"),
        ({"count": 1_000_001}, "sweep  count\n  `1000001` must be at most 1,000,000"),
        ({"count": None}, "sweep  draws\n  `count` is missing"),
        ({"seed": -1}, "sweep  seed\n  `-1` must be at least 0"),
        ({"seed": "seven"}, "sweep  seed\n  `seven` is not a whole number"),
        ({"count": 3, "antithetic": True}, "sweep  count\n  `3` is odd: mirrored draws come in pairs"),
        ({"spreads": {}}, "sweep  numbers\n  no number varies"),
        ({"spreads": NAPHTHA}, "sweep  numbers\n  needs `path: {sd: 10 %}` lines"),
        ({"correlation": 3}, "sweep  correlation\n  is no matrix, mapping or path of a csv file"),
        ({"spreads": {NAPHTHA: TEN}, "correlation": {}}, "sweep  correlation\n  needs two numbers with a spread of their own"),
        ({"correlation": {NAPHTHA: {ETHANE: "high"}}}, f"sweep  {NAPHTHA}, {ETHANE}\n  `high` is not a number"),
        ({"correlation": {NAPHTHA: {ETHANE: 1.1}}}, f"sweep  {NAPHTHA}, {ETHANE}\n  the correlation 1.1 is not between -1 and 1"),
        ({"correlation": {"other_pairs": 2}}, "sweep  other_pairs\n  the correlation 2 is not between -1 and 1"),
        (
            {"correlation": {NAPHTHA: 3}},
            f"sweep  {NAPHTHA}\n  needs `path: correlation` lines\nhint: for example `{NAPHTHA}: {{<path>: 0.6}}`\n"
            f"sweep  {NAPHTHA}\n  has no correlation with {ETHANE}\n"
            "hint: write every pair, or `other_pairs: 0` in a mapping of pairs",
        ),
        (
            {"correlation": {NAPHTHA: {ETHANE: 0.9, C5: 0.1}, ETHANE: {NAPHTHA: 0.8, ETHANE: 0.5}}},
            f"sweep  {C5}\n  is not a number that is drawn from a spread of its own\nhint: known: {NAPHTHA}, {ETHANE}\n"
            f"sweep  {ETHANE}\n  correlates 0.8 with {NAPHTHA}, but the other way round 0.9\n"
            "hint: write the same number twice, or one of the two\n"
            f"sweep  {ETHANE}\n  correlates 0.5 with itself\nhint: a number correlates 1 with itself",
        ),
        (
            {"history": PAST},
            "sweep  history\n  no number comes from the history: each has a spread of its own\n"
            "hint: name a number without a spread, or take the history away",
        ),
        ({"spreads": [NAPHTHA], "history": 5}, "sweep  history\n  is no table of past prices or path of a csv file"),
        (
            {"spreads": {NAPHTHA: None, ETHANE: TEN}, "history": PAST, "count": 4, "antithetic": True},
            "sweep  antithetic\n  the rows of the history have no mirrored draws\nhint: take `antithetic` away",
        ),
    ],
    ids=lambda value: str(value)[-60:],
)
def test_one_wrong_thing(march: Scenario, named: dict[str, Any], message: str) -> None:
    arguments: dict[str, Any] = {"spreads": {NAPHTHA: TEN, ETHANE: TEN}, "count": 3, "seed": 1, **named}
    assert wrong(draw_cases, march, **arguments) == message


def test_a_number_of_different_months_has_no_one_unit(six: Scenario) -> None:
    assert wrong(draw_cases, six, {"outlets.crude_c4_contract.max": {"sd": 1}}, 5, 1) == (
        "sweep  outlets.crude_c4_contract.max\n  `sd`: this number is not the same in every month\n"
        "hint: write it in per cent of today, or vary one month: `path @ month`"
    )


def test_a_matrix_that_nothing_can_follow_is_refused_not_mended(march: Scenario) -> None:
    spreads = {NAPHTHA: TEN, ETHANE: TEN, C5: TEN}

    def pairs(times: float) -> dict[str, Any]:
        return {NAPHTHA: {ETHANE: 0.9 * times, C5: 0.9 * times}, ETHANE: {C5: -0.9 * times}}

    assert wrong(draw_cases, march, spreads, 5, 1, pairs(1)) == (
        "sweep  correlation\n  is not positive semidefinite (smallest eigenvalue -0.8): no numbers can move together like this\n"
        "hint: correlations 0.555 times as large, all of them, would be possible"
    )
    assert len(draw_cases(march, spreads, 5, 1, pairs(0.555))) == 5
    assert "is not positive semidefinite" in wrong(draw_cases, march, spreads, 5, 1, pairs(0.557))


def test_everything_wrong_with_a_history_is_said_at_once(march: Scenario, tmp_path: Path) -> None:
    path = tmp_path / "past.csv"
    path.write_text(
        f"date,{NAPHTHA},feeds.ethane.contrac\n2030-01,500,1\n2030-03,,2\n2030-02,0,3\n2030-13,x,4\n", encoding="utf-8"
    )
    text = wrong(draw_cases, march, [NAPHTHA, ETHANE], 5, 1, history=path)
    assert text.replace(f"{path.parent.parent.name}/{path.parent.name}/", "") == (
        """past.csv:4 [date]
  `2030-02` does not come after `2030-03`
hint: rows go in the order of time, each date once
past.csv:5 [date]
  `2030-13` is not a date
hint: write `2030-05` or `2030-05-31`
past.csv:3 [feeds.full_range_naphtha.spot_cargo]
  is blank: rows of the history are drawn whole
hint: take the row away, or fill it
past.csv:4 [feeds.full_range_naphtha.spot_cargo]
  0 is not above zero: it has no relative change
past.csv:5 [feeds.full_range_naphtha.spot_cargo]
  `x` is not a number
hint: a point for decimals, no thousands mark, no unit in the cell
past.csv:1  history
  the column `feeds.ethane.contract` is missing: it has no spread of its own, so its past prices are needed
hint: did you mean `feeds.ethane.contrac`?"""
    )
    short = pd.DataFrame({NAPHTHA: [1, 2]}, index=["2030-01", "2030-02"])
    assert wrong(draw_cases, march, [NAPHTHA], 5, 1, history=short) == (
        "sweep  history\n  has 2 rows; changes from row to row need three at least"
    )


# ---------------------------------------------------------------------------------- files


def test_draws_of_a_file_are_those_of_python(march: Scenario, tmp_path: Path) -> None:
    (tmp_path / "past.csv").write_text(f"date,{C5}\n2030-01,400\n2030-02,440\n2030-03,420\n", encoding="utf-8")
    (tmp_path / "correlation.csv").write_text(f"number,{NAPHTHA},{ETHANE}\n{NAPHTHA},1,0.7\n{ETHANE},0.7,1\n", encoding="utf-8")
    path = tmp_path / "sweep.yaml"
    draws = f"""scenario: {(ROOT / "scenarios" / ONE_MONTH).as_posix()}
draws:
  count: 20
  seed: 7
  numbers:
    {NAPHTHA}: {{sd: 10 %}}
    {ETHANE} @ 2031-03: {{distribution: uniform, low: 38 USc/gal, high: 45}}
    {C5}:
  history: past.csv
"""
    spreads = {NAPHTHA: TEN, f"{ETHANE} @ 2031-03": {"distribution": "uniform", "low": 38, "high": 45}, C5: None}
    pairs = {NAPHTHA: {f"{ETHANE} @ 2031-03": 0.7}}
    exact = draw_cases(march, spreads, 20, 7, pairs, tmp_path / "past.csv")
    written = f"  correlation: {{{NAPHTHA}: {{{ETHANE} @ 2031-03: 0.7}}}}\n"
    path.write_text(draws + written, encoding="utf-8")
    read = read_sweep_file(path).cases
    np.testing.assert_array_equal(read.values, exact.values)
    assert (read.varied, read.note) == (exact.varied, exact.note)
    named = (tmp_path / "correlation.csv").read_text(encoding="utf-8").replace(ETHANE, f"{ETHANE} @ 2031-03")
    (tmp_path / "correlation.csv").write_text(named, encoding="utf-8")
    path.write_text(draws + "  correlation: correlation.csv\n", encoding="utf-8")
    np.testing.assert_array_equal(read_sweep_file(path).cases.values, exact.values)


def test_wrong_draws_of_a_file_have_their_lines(tmp_path: Path) -> None:
    path = tmp_path / "sweep.yaml"
    path.write_text(
        f"""scenario: {(ROOT / "scenarios" / ONE_MONTH).as_posix()}
draws:
  count: many
  numbers:
    {NAPHTHA}: {{sd: -1}}
    {ETHANE}:
      distribution: triangular
      low: 45
      high: 40
    {C5}: {{sd: 10 %}}
  correlation:
    {NAPHTHA}: {{{ETHANE}: 2}}
    {C5}:
      {NAPHTHA}: x
""",
        encoding="utf-8",
    )
    assert wrong(read_sweep_file, path).replace(f"{path.parent.parent.name}/{path.parent.name}/", "") == (
        f"""sweep.yaml:3  count
  `many` is not a whole number
sweep.yaml:2  draws
  `seed` is missing
hint: any whole number; with the same one the draws are the same
sweep.yaml:5  {NAPHTHA}
  `sd`: `-1` is not above zero
sweep.yaml:8  {ETHANE}
  `low` 45 is not below `high` 40
sweep.yaml:12  {NAPHTHA}, {ETHANE}
  the correlation 2 is not between -1 and 1
sweep.yaml:14  {C5}, {NAPHTHA}
  `x` is not a number
sweep.yaml:11  {ETHANE}
  has no correlation with {C5}
hint: write every pair, or `other_pairs: 0` in a mapping of pairs"""
    )
