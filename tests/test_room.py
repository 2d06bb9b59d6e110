"""Room to move against scipy's programs with the margin as a row, and plants whose other optima are known.

`only_one` is held to its word on random small programs: where it says so, every column's range among the optima is a point.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from plants import ONE_FEED, dense_lp, planned
from scipy.optimize import linprog
from scipy.sparse import csr_matrix, vstack

from olefinlp.answers.plan import Plan
from olefinlp.answers.room import Decision, decisions, room_to_move
from olefinlp.lp.compile import LabelledLp
from olefinlp.lp.neighbours import Neighbours
from olefinlp.lp.solver import solve

MARCH, MARRAM, HALF_YEAR = "brackwater_2031_03.yaml", "marram_point_2031_03.yaml", "brackwater_2031_03_to_08.yaml"
INF = math.inf


def ends_by_scipy(lp: LabelledLp, columns: list[int], floor: float) -> tuple[float, float]:
    """Least and most of a sum of columns, with cost · x ≥ floor, by another way into the solver."""
    matrix = csr_matrix((lp.value.copy(), lp.index.copy(), lp.starts.copy()), shape=(len(lp.rows), len(lp.columns)))
    equal = np.flatnonzero(lp.row_low == lp.row_high)
    most = np.flatnonzero(np.isfinite(lp.row_high) & (lp.row_low != lp.row_high))
    least = np.flatnonzero(np.isfinite(lp.row_low) & (lp.row_low != lp.row_high))
    unit = np.abs(lp.cost).max()
    ends = []
    for sign in (1.0, -1.0):
        objective = np.zeros(len(lp.columns))
        objective[columns] = sign
        found = linprog(
            objective,
            A_ub=vstack([matrix[most], -matrix[least], csr_matrix(-lp.cost[None, :] / unit)]),
            b_ub=np.concatenate([lp.row_high[most], -lp.row_low[least], [-floor / unit]]),
            A_eq=matrix[equal] if len(equal) else None,
            b_eq=lp.row_low[equal] if len(equal) else None,
            bounds=np.column_stack([lp.low, lp.high]),
            method="highs-ds",
            options={"primal_feasibility_tolerance": 1e-9, "dual_feasibility_tolerance": 1e-9},
        )
        assert found.status == 0, found.message
        ends.append(sign * found.fun)
    return ends[0], ends[1]


def checked(plan: Plan, share: float, some: slice) -> list[Decision]:
    """Some decisions against scipy; gives them."""
    rows = room_to_move(plan, share).table.rows
    floor = plan.solution.objective - plan.lp.offset - share * abs(plan.solution.objective)
    pairs = list(zip(decisions(plan), rows, strict=True))[some]
    for decision, row in pairs:
        low, high = ends_by_scipy(plan.lp, list(decision.columns), floor)
        small = 1e-6 * max(1.0, high)
        assert (row["low"], row["high"]) == (pytest.approx(low, abs=small), pytest.approx(high, abs=small)), row
        assert row["low"] <= row["planned"] <= row["high"]
        assert (row["decision"], row["item"], row["planned"]) == (decision.kind, decision.item, decision.planned)
    return [decision for decision, _ in pairs]


@pytest.mark.parametrize(("name", "some"), [(MARCH, slice(0, None, 4)), (MARRAM, slice(None))])
def test_ranges_within_half_a_percent(name: str, some: slice, shipped_plan: Callable[[str], Plan]) -> None:
    found = checked(shipped_plan(name), 0.005, some)
    assert {decision.kind for decision in found} == {"bought", "charged", "sold"}


def test_ranges_within_another_share(shipped_plan: Callable[[str], Plan]) -> None:
    checked(shipped_plan(MARRAM), 0.1, slice(0, None, 5))


@pytest.mark.slow
def test_ranges_over_six_months(shipped_plan: Callable[[str], Plan]) -> None:
    checked(shipped_plan(HALF_YEAR), 0.005, slice(3, None, 61))


def test_what_another_program_of_the_plant_found(march: Plan) -> None:
    """Within 0.5 %, 134 kUSD: full-range naphtha 21 to 55 kt, gas oil 0 to 11 kt, condensate 22 to 30 kt."""
    rows = {row["item"]: row for row in room_to_move(march).table.where(decision="bought")}
    for item, low, high in (
        ("full_range_naphtha spot_cargo", 21, 55),
        ("gas_oil spot_barge", 0, 11),
        ("condensate spot_cargo", 22, 30),
    ):
        assert (round(rows[item]["low"]), round(rows[item]["high"])) == (low, high)


def test_march_is_the_only_plan(march: Plan) -> None:
    answer = room_to_move(march)
    assert march.neighbours.only_one()
    for row in answer.table.rows:
        assert (row["equal_low"], row["equal_high"], row["could_differ"]) == (row["planned"], row["planned"], "")
    assert answer.sentences[0] == "The plan is the only one with this margin."
    assert answer.sentences[1].startswith("Within 0.5 % of the margin (134 kUSD): 2031-03 ")
    assert answer.note == "Within 134 kUSD of the best margin. Ranges do not hold together."
    assert {row["unit"] for row in answer.table.where(item="fuel_gas_export")} == {"TJ LHV"}


# ---------------------------------------------------------------------------------- other optima


TWINS = "feeds: {{naphtha: {{a: {{max: 8 kt, price: {a} USD/t}}, b: {{max: 8 kt, price: {b} USD/t}}{more}}}}}"


def test_two_sources_of_one_price(tmp_path: Path) -> None:
    """10 kt fill the furnace, and each of two sources offers 8 kt at 500: either may bring 2 to 8 kt at a margin of 1000 kUSD.

    Within 0.5 %, 5 kUSD, 50 t less may be cracked (100 USD/t): 1.95 to 8 kt of each, 9.95 to 10 kt charged."""
    plan = planned(tmp_path, **ONE_FEED, scenario=TWINS.format(a=500, b=500, more=""))
    assert not plan.neighbours.only_one()
    answer = room_to_move(plan)
    rows = {row["item"]: row for row in answer.table.rows}
    for name in ("naphtha a", "naphtha b"):
        row = rows[name]
        found = [row[key] for key in ("equal_low", "equal_high", "low", "high")]
        assert found == pytest.approx([2, 8, 1.95, 8])
        assert row["could_differ"] == "yes"
    charged = next(row for row in answer.table.rows if row["decision"] == "charged")
    assert (charged["equal_low"], charged["equal_high"], charged["could_differ"]) == (charged["planned"], charged["planned"], "")
    assert (charged["low"], charged["high"]) == (pytest.approx(9.95), pytest.approx(10))
    assert answer.sentences[0] == "2 decisions could differ at equal margin: month naphtha a bought, month naphtha b bought."


def test_nearly_the_same_price_is_no_other_optimum(tmp_path: Path) -> None:
    """Beside the twins a third source is dearer by a thousandth of a USD/t: not one kilo of it may be bought at equal margin,
    however little that would cost."""
    more = ", c: {max: 8 kt, price: 500.001 USD/t}"
    plan = planned(tmp_path, **ONE_FEED, scenario=TWINS.format(a=500, b=500, more=more))
    rows = {row["item"]: row for row in room_to_move(plan).table.rows}
    assert [rows[f"naphtha {name}"]["could_differ"] for name in "abc"] == ["yes", "yes", ""]
    assert rows["naphtha c"]["equal_high"] == 0
    assert rows["naphtha c"]["high"] == pytest.approx(8)


def test_no_share_is_equal_margin(tmp_path: Path, march: Plan) -> None:
    plan = planned(tmp_path, **ONE_FEED, scenario=TWINS.format(a=500, b=500, more=""))
    for row in room_to_move(plan, 0).table.rows:
        assert (row["low"], row["high"]) == (row["equal_low"], row["equal_high"])
    assert all(row["low"] == row["high"] == row["planned"] for row in room_to_move(march, 0).table.rows)


@pytest.mark.parametrize("share", [-0.01, 1, 1.5])
def test_a_share_is_between_nothing_and_all(march: Plan, share: float) -> None:
    with pytest.raises(ValueError, match=f"a share of the margin is between 0 and 1, not {share:g}"):
        room_to_move(march, share)


def test_few_solves(march: Plan) -> None:
    """Two a decision; four where other optima are looked for."""
    around = march.neighbours
    before = around.solves
    room_to_move(march)
    assert around.solves - before == 2 * len(list(decisions(march)))


# ---------------------------------------------------------------------------------- only one


SMALL = st.integers(1, 4).flatmap(
    lambda n: st.tuples(
        st.lists(st.integers(-3, 3), min_size=n, max_size=n),
        st.lists(st.tuples(st.lists(st.integers(-2, 3), min_size=n, max_size=n), st.integers(0, 6)), min_size=1, max_size=4),
        st.lists(st.integers(1, 5), min_size=n, max_size=n),
        st.integers(0, 1000),
    )
)


def program(cost: list[int], rows: list[tuple[list[int], int]], high: list[int]) -> LabelledLp:
    """max cost · x, each row (some without a number in it) at most another, 0 ≤ x ≤ high: x = 0 is possible."""
    labelled = {("row", str(i)): (-INF, [float(a) for a in line], float(most)) for i, (line, most) in enumerate(rows)}
    return dense_lp([float(c) for c in cost], labelled, [(0.0, float(h)) for h in high])


@settings(max_examples=80)
@given(SMALL)
def test_the_only_optimum_is_the_only_one(parts: tuple[list[int], list[tuple[list[int], int]], list[int], int]) -> None:
    """Where it is said, no column moves while the margin is kept, and prices a millionth different give the same plan."""
    cost, rows, high, seed = parts
    lp = program(cost, rows, high)
    around = Neighbours(lp)
    if not around.only_one():
        return
    base = around.base
    for j in range(len(cost)):
        low, most = ends_by_scipy(lp, [j], base.objective)
        assert (low, most) == (pytest.approx(base.x[j], abs=1e-6), pytest.approx(base.x[j], abs=1e-6))
    dice = np.random.default_rng(seed)
    for _ in range(3):
        moved = solve(replace(lp, cost=lp.cost + 1e-6 * dice.normal(size=len(cost)))).solution
        assert moved is not None
        assert moved.x == pytest.approx(base.x, abs=1e-7)


@settings(max_examples=80)
@given(SMALL)
def test_what_the_optima_keep_is_what_they_have_in_common(
    parts: tuple[list[int], list[tuple[list[int], int]], list[int], int],
) -> None:
    """The range of each column among the optima, by bounds held where there is a dual, and by the margin held by scipy."""
    cost, rows, high, _ = parts
    lp = program(cost, rows, high)
    if not any(cost):
        return
    around = Neighbours(lp)
    held_rows, held_columns = around.all_optima()
    for j in range(len(cost)):
        goal = np.zeros(len(cost))
        ends = []
        for sign in (-1.0, 1.0):
            goal[j] = sign
            found = around.solve(cost=goal.copy(), rows=held_rows, columns=held_columns)
            assert found is not None
            ends.append(float(found.x[j]))
        assert ends == pytest.approx(ends_by_scipy(lp, [j], around.base.objective), abs=1e-5)


def test_both_verdicts_by_hand() -> None:
    """max a + b with a + b ≤ 1: any mix. max 2 a + b: a = 1 alone. max 2 a + b, a ≤ 1 twice over: degenerate, still alone,
    and then either verdict is sound. A price of nothing leaves b free."""
    line = ("row", "0")
    assert not Neighbours(dense_lp([1.0, 1.0], {line: (-INF, [1.0, 1.0], 1.0)})).only_one()
    assert Neighbours(dense_lp([2.0, 1.0], {line: (-INF, [1.0, 1.0], 1.0)})).only_one()
    assert not Neighbours(dense_lp([1.0, 0.0], {line: (-INF, [1.0, 0.0], 1.0)}, [(0, 2), (0, 2)])).only_one()


@pytest.mark.parametrize("scale", [1e-6, 1.0, 1e6])
def test_the_verdict_does_not_hang_on_the_size_of_the_plant(scale: float) -> None:
    """A plant of a hundredth of a kt, or of a thousand, with the same prices: rounding in a dual stays rounding."""
    thirds = [1 / 3, 2 / 3, 1 / 7]
    rows = {
        ("row", "0"): (-INF, [1 / 3, 1 / 3, 0.1], 1.0 * scale),
        ("row", "1"): (-INF, [0.7, 0.7, 1.3], 1.9 * scale),
    }
    twin = dense_lp([thirds[0] * 500, thirds[0] * 500, thirds[2] * 500], rows)
    alone = dense_lp([thirds[0] * 500, thirds[0] * 499.9, thirds[2] * 500], rows)
    assert not Neighbours(twin).only_one()
    assert Neighbours(alone).only_one()
