"""Months without a plan: what clashes is named with its place, nothing more than clashes is named, and endless margins are said.

Every claim about a set of limits is tested by solving copies of the arrays again: the set alone, and without one.
"""

from __future__ import annotations

import itertools
import re
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from plants import ONE_FEED, dense_lp, merged, read

from olefinlp.answers.clash import endless
from olefinlp.answers.plan import NoPlan, Plan, make_plan
from olefinlp.inputs.scenario import Scenario
from olefinlp.lp.algebra import build_model
from olefinlp.lp.clash import MOST_SETS, Side, clashing_sets
from olefinlp.lp.compile import LabelledLp, compile_model
from olefinlp.lp.solver import EXIT_CODES, Solver, Status, solve

MARCH, SIX = "brackwater_2031_03.yaml", "brackwater_2031_03_to_08.yaml"
INF = float("inf")
MOST_ETHYLENE = {"outlets.ethylene_contract.min": "76 kt", "outlets.ethylene_contract.max": "80 kt"}
MOST_HYDROGEN = {"outlets.hydrogen_sale.min": "30 kt", "outlets.hydrogen_sale.max": "40 kt"}
IMPOSSIBLE: dict[str, tuple[str, dict[str, Any]]] = {
    "more ethylene than can be made": (MARCH, MOST_ETHYLENE),
    "more propylene than the splitter lets through": (MARCH, {"outlets.polymer_grade_propylene.min": "31 kt"}),
    "two clashes at once": (MARCH, MOST_ETHYLENE | MOST_HYDROGEN),
    "one month of six": (SIX, {"outlets.polymer_grade_propylene.min": {"2031-07": "31 kt", "other_months": "10 kt"}}),
}


def impossible(scenario: Scenario) -> NoPlan:
    with pytest.raises(NoPlan) as raised:
        make_plan(scenario)
    assert raised.value.status is Status.INFEASIBLE
    assert EXIT_CODES[raised.value.status] == 3
    return raised.value


def status_without(lp: LabelledLp, dropped: list[Side]) -> Status:
    """How the program ends without some sides, prices left out: only whether a plan is possible matters."""
    low, high = lp.row_low.copy(), lp.row_high.copy()
    for side in dropped:
        (low if side.low else high)[side.row] = -INF if side.low else INF
    return solve(replace(lp, row_low=low, row_high=high, cost=np.zeros(len(lp.columns)))).status


def all_sides(lp: LabelledLp) -> list[Side]:
    limits = [row for row, label in enumerate(lp.rows) if label[0].endswith("_limit")]
    return [Side(row, low) for row in limits for low in (True, False)]


def status_of_only(lp: LabelledLp, kept: list[Side]) -> Status:
    return status_without(lp, [side for side in all_sides(lp) if side not in kept])


@pytest.fixture(params=IMPOSSIBLE)
def case(request: pytest.FixtureRequest, shipped_plan: Callable[[str], Plan]) -> Scenario:
    name, changes = IMPOSSIBLE[request.param]
    return shipped_plan(name).scenario.with_(changes)


def test_an_impossible_month_names_what_clashes(shipped_plan: Callable[[str], Plan]) -> None:
    """76 kt of ethylene: over the c2 splitter of 118 t/h · 744 h = 87.8 kt of ethylene + 0.55 ethane, among others."""
    error = impossible(shipped_plan(MARCH).scenario.with_(MOST_ETHYLENE))
    lines = str(error).splitlines()
    assert lines[0] == "No plan is possible: these limits clash"
    ethylene = next(line for line in lines if "ethylene_contract" in line)
    assert re.search(r"ethylene_contract, at least 76 kt\s+\S*scenarios/brackwater_2031_03\.yaml:39$", ethylene)
    assert any(re.search(r"cracked_gas_compressor, at most 233\.58 kNm3/h\s+\S+:\d+\s+\(cool month\)$", line) for line in lines)
    assert lines[-1].startswith("hint: ")


def test_places_lead_to_what_is_written(case: Scenario, root: Path) -> None:
    """Every limit stands with file:line, and that line of that file names the item or holds the factor of it."""
    error = impossible(case)
    assert error.clash is not None
    limits = [limit for sets in error.clash.sets for limit in sets]
    assert limits
    for limit in limits:
        assert limit.place is not None
        assert str(limit.place) in str(error)
        file, line = re.fullmatch(r"(.+):(\d+)", str(limit.place)).groups()  # type: ignore[union-attr]
        ends = [root / Path(*Path(file).parts[-k:]) for k in (2, 3)]  # from elsewhere only a path's end is shown
        path = next(path for path in (Path(file), *ends) if path.exists())
        words = limit.text.removeprefix(f"{limit.month} ").split(",")[0].split()
        written = path.read_text(encoding="utf-8").splitlines()[int(line) - 1]
        assert any(re.search(rf"\b{word}\b", written) for word in words), (limit.text, written)


def test_months_are_named_when_there_are_several(shipped_plan: Callable[[str], Plan]) -> None:
    error = impossible(shipped_plan(SIX).scenario.with_(IMPOSSIBLE["one month of six"][1]))
    assert error.clash is not None
    assert {limit.month for limit in error.clash.sets[0]} == {"2031-07"}
    assert "  2031-07 polymer_grade_propylene, at least 31 kt" in str(error)


def test_sets_are_irreducible_and_short(case: Scenario) -> None:
    """Alone a set clashes; without any one of its limits the rest of it does not. A person can read it."""
    lp = compile_model(build_model(case.case))
    sets = clashing_sets(lp)
    assert sets
    for sides in sets:
        assert 1 <= len(sides) <= 8
        assert status_of_only(lp, sides) is Status.INFEASIBLE
        for side in sides:
            assert status_of_only(lp, [one for one in sides if one is not side]) is Status.OPTIMAL


def test_nothing_clashes_apart_from_the_sets(case: Scenario) -> None:
    """With all limits of the sets left out a plan is possible; no limit is in two of them."""
    lp = compile_model(build_model(case.case))
    sets = clashing_sets(lp)
    assert sets
    assert len(sets) < MOST_SETS
    named = [side for sides in sets for side in sides]
    assert len(set(named)) == len(named)
    assert status_without(lp, named) is Status.OPTIMAL


def test_a_promise_of_the_hint_is_kept(case: Scenario) -> None:
    """`relax one of each set; not every one of them helps alone`: some choice of one limit of each set makes a plan possible
    when it is left out; not every choice need, as a limit left alone may clash with others that are not named."""
    text, lp = str(impossible(case)), compile_model(build_model(case.case))
    sets = clashing_sets(lp)
    assert sets
    assert "not every one of them helps alone" in text
    helps = {choice: status_without(lp, list(choice)) is Status.OPTIMAL for choice in itertools.product(*sets)}
    assert any(helps.values())


@pytest.mark.parametrize(
    ("limits", "text"),
    [
        ({"least": {"sum": [{"bought": "naphtha"}], "min": "3 kt"}}, "least, at least 3 kt"),
        ({"least": {"sum": [{"sold": "residue_sale"}], "min": "2.5 kt"}}, "least, at least 2.5 kt"),
    ],
)
def test_a_minimum_above_what_can_be_had(tmp_path: Path, limits: dict[str, Any], text: str) -> None:
    """2 kt can be bought, of which 1.2 kt become residue: a minimum on either sum clashes with that one purchase limit."""
    feeds = {"naphtha": {"spot": {"max": "2 kt", "price": "500 USD/t"}}}
    error = impossible(read(tmp_path, **ONE_FEED, scenario={"feeds": feeds, "limits": limits}))
    assert error.clash is not None
    assert sorted(limit.text for limit in error.clash.sets[0]) == sorted([text, "naphtha spot bought, at most 2 kt"])


def test_a_limit_of_which_nothing_can_occur(tmp_path: Path) -> None:
    """Nothing of the other feed is on offer, so a minimum of its charge cannot be met whatever else is relaxed."""
    parts = merged(ONE_FEED, {"scenario": {"feeds": {"naphtha": {"spot": {"max": "2 kt", "price": "500 USD/t"}}}}})
    parts["yields"] += "\ngas_oil, base, 20, 80"
    parts["modes"] += "\nfurnaces, gas_oil, base, 9"
    parts["scenario"]["limits"] = {"least": {"sum": [{"charged": "gas_oil"}], "min": "1 kt"}}
    error = impossible(read(tmp_path, **parts))
    lines = str(error).splitlines()
    assert lines[0] == "No plan is possible: this limit cannot be met"
    assert re.search(r"^  least, at least 1 kt\s+\S+scenario\.yaml:\d+$", lines[1])


def test_balances_alone_can_clash(tmp_path: Path) -> None:
    """Steam is used at a fixed rate and nothing makes it: no written limit is the cause, and the message says so."""
    error = impossible(
        read(
            tmp_path,
            **ONE_FEED,
            plant="utilities: {steam: {measured_in: mass}}",
            utility_uses="utility, direction, of, item, amount, unit\nsteam, uses, fixed, all, 3, t/h",
            scenario="feeds: {naphtha: {spot: {max: 2 kt, price: 500 USD/t}}}",
        )
    )
    assert error.clash is not None
    assert error.clash.sets == ()
    assert str(error).startswith("No plan is possible, and no written limit is the cause")


# ---------------------------------------------------------------------------------- a margin without end


def test_power_bought_and_sold_without_end(tmp_path: Path) -> None:
    """Power costs 50 and earns 40, both unlimited; on the arrays it is made to earn 60, which files do not let through:
    unbounded, and both lines of the file are named as what grows, the feed is not."""
    scenario = read(
        tmp_path,
        **ONE_FEED,
        plant="utilities: {power: {measured_in: power, imports: {grid: {}}, exports: {back: {}}}}",
        utility_uses="utility, direction, of, item, amount, unit\npower, uses, charge, all, 0.1, MWh/t",
        scenario="""
            feeds: {naphtha: {spot: {max: 2 kt, price: 500 USD/t}}}
            utilities: {grid: {max: unlimited, price: 50 USD/MWh}, back: {max: unlimited, price: 40 USD/MWh}}
        """,
    )
    lp = compile_model(build_model(scenario.case))
    assert solve(lp).status is Status.OPTIMAL
    cost = lp.cost.copy()
    cost[lp.column_at["trade", "back", "month"]] = 60.0
    lp = replace(lp, cost=cost)
    outcome = solve(lp)
    assert outcome.status is Status.UNBOUNDED
    assert EXIT_CODES[outcome.status] == 4
    text = endless(scenario.case, lp, outcome)
    assert text.startswith("The margin has no end")
    lines = [line.strip() for line in scenario.path.read_text(encoding="utf-8").splitlines()]
    for name in ("grid", "back"):
        line = lines.index(f"{name}:") + 1
        assert re.search(rf"^  {name} traded without end  \S+scenario\.yaml:{line}$", text, re.MULTILINE)
    assert "naphtha" not in text


def test_statuses_of_a_program() -> None:
    """max x + y with y ≤ 1: x grows without end. With x ≤ −1 as well there is no plan, whatever could grow."""
    endless = dense_lp([1.0, 1.0], {("most_limit",): (-INF, [0.0, 1.0], 1.0)})
    outcome = solve(endless)
    assert outcome.status is Status.UNBOUNDED
    assert outcome.solution is None
    assert outcome.ray is not None
    assert outcome.ray[0] > 0
    rows = {("most_limit",): (-INF, [0.0, 1.0], 1.0), ("impossible_limit",): (-INF, [0.0, 1.0], -1.0)}
    both = solve(dense_lp([1.0, 1.0], rows))
    assert both.status is Status.INFEASIBLE
    assert both.solution is None


def test_a_program_without_a_clash_has_none(march: Plan) -> None:
    assert clashing_sets(march.lp) is None


def test_two_sets_of_a_program() -> None:
    """x ≤ 1, x ≥ 2 and y ≥ 4, y ≤ 3 are two sets; z ≤ 5 is in neither."""
    rows = {
        ("a_limit",): (-INF, [1.0, 0.0, 0.0], 1.0),
        ("b_limit",): (2.0, [1.0, 0.0, 0.0], INF),
        ("c_limit",): (4.0, [0.0, 1.0, 0.0], INF),
        ("d_limit",): (-INF, [0.0, 1.0, 0.0], 3.0),
        ("e_limit",): (-INF, [0.0, 0.0, 1.0], 5.0),
    }
    sets = clashing_sets(dense_lp([1.0, 1.0, 1.0], rows))
    assert sets is not None
    assert sorted(sorted((side.row, side.low) for side in sides) for sides in sets) == [
        [(0, False), (1, True)],
        [(2, True), (3, False)],
    ]


def test_balances_stay_when_limits_are_dropped() -> None:
    """x = y (balance), x ≤ 1, y ≥ 2: the two limits are named, the balance never."""
    rows = {
        ("feed_balance",): (0.0, [1.0, -1.0], 0.0),
        ("a_limit",): (-INF, [1.0, 0.0], 1.0),
        ("b_limit",): (2.0, [0.0, 1.0], INF),
    }
    sets = clashing_sets(dense_lp([1.0, 1.0], rows))
    assert sets is not None
    assert [sorted(side.row for side in sides) for sides in sets] == [[1, 2]]


def test_a_solver_can_be_used_again_after_a_clash(march: Plan) -> None:
    """One loaded program: impossible with a limit turned round, and the same optimum again after it is put back."""
    lp = march.lp
    row = lp.row_at["outlet_limit", "ethylene_contract", "2031-03"]
    solver = Solver(lp)
    solver.set_row(row, 79.0, 80.0)
    assert solver.solve().status is Status.INFEASIBLE
    solver.set_row(row, lp.row_low[row], lp.row_high[row])
    again = solver.solve().solution
    assert again is not None
    assert again.objective == pytest.approx(march.solution.objective, rel=1e-12)
