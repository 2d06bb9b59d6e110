"""Why a month is impossible: small plants whose ways out are known by hand, and brute force over all sets of limits.

The hand-made plants crack 10 t/h in one furnace for 1,000 hours (10 kt) to 40 % ethylene and 60 % residue, so a kilotonne of
feed takes 100 hours. Prices USD/t, margins kUSD. Brute force solves the program with scipy for every set of sides in turn.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable, Iterable, Iterator, Mapping
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from plants import ONE_FEED, dense_lp, merged, near, planned, read, write
from scipy.optimize import linprog
from scipy.sparse import csr_array, hstack, vstack
from typer.testing import CliRunner

from olefinlp.answers.answer import Answer
from olefinlp.answers.clash import find_clash
from olefinlp.answers.impossible import _sizes, explain_impossible
from olefinlp.answers.impossible_changes import _outward
from olefinlp.answers.plan import make_plan
from olefinlp.cli import app
from olefinlp.inputs.scenario import Scenario
from olefinlp.lp.algebra import build_model
from olefinlp.lp.clash import Side, limit_sides
from olefinlp.lp.compile import LabelledLp, compile_model
from olefinlp.lp.relax import Relaxer

MARCH = "brackwater_2031_03.yaml"
SIX = "brackwater_2031_03_to_08.yaml"
FEED = "feeds: {naphtha: {spot: {max: 10 kt, price: 500 USD/t}}}"
BIG = {"furnace_groups": {"furnaces": {"furnaces": 9}}}
"""Furnaces enough for anything."""

MAY = {
    "months": ["2031-05"],
    "unit_factors": [],
    "outages": [{"month": "2031-05", "group": "flexible_furnaces", "hours": "744 h", "reason": "retube of one furnace"}],
    "outlets.ethylene_contract": {"min": "76 kt", "max": "80 kt"},
    "outlets.polymer_grade_propylene.min": "27 kt",
}
"""May of the demo alone, one furnace short, with two promises too many."""


def compiled(scenario: Scenario) -> LabelledLp:
    return compile_model(build_model(scenario.case))


def small(folder: Path, scenario: str, plant: Mapping[str, Any] | str = "", **parts: Any) -> Answer:
    """The explanation of the one-feed plant with this scenario."""
    return explain_impossible(read(folder, **merged(ONE_FEED, parts), plant=plant, scenario=scenario))


def ways(answer: Answer) -> list[dict[str, tuple[float, float | None]]]:
    """Each way out as `limit side` → (written, relax to)."""
    found: dict[int, dict[str, tuple[float, float | None]]] = {}
    for row in answer.table.rows:
        found.setdefault(row["way"], {})[f"{row['limit']} {row['side']}"] = (row["written"], row["to"])
    return list(found.values())


def margins(answer: Answer) -> list[float]:
    return [row["margin"] for row in answer.tables[1].rows]


def sizes_of_ways(answer: Answer) -> list[float]:
    return [row["size"] for row in answer.tables[1].rows]


# ---------------------------------------------------------------------------------- independent: scipy and brute force


class Independent:
    """A program for scipy, every finite side of a row as one line a · x ≤ b."""

    def __init__(self, lp: LabelledLp) -> None:
        matrix = csr_array((lp.value, lp.index, lp.starts), copy=True, shape=(len(lp.rows), len(lp.columns)))
        high, low = np.flatnonzero(np.isfinite(lp.row_high)), np.flatnonzero(np.isfinite(lp.row_low))
        self.matrix = vstack([matrix[high], -matrix[low]]).tocsr()
        self.bounds = np.concatenate([lp.row_high[high], -lp.row_low[low]])
        self.line = {side: i for i, side in enumerate([*(Side(int(r), False) for r in high), *(Side(int(r), True) for r in low)])}
        self.columns = list(zip(lp.low, lp.high, strict=True))

    def optimum(self, soft: Mapping[Side, float], lifted: Iterable[Side] = ()) -> float | None:
        """min Σ amount / size with only these sides (size) soft and those lifted; None when it is impossible."""
        width = len(self.columns)
        lines = [self.line[side] for side in soft]
        slack = csr_array((-np.ones(len(soft)), (lines, range(len(soft)))), shape=(len(self.bounds), max(1, len(soft))))
        bounds = self.bounds.copy()
        bounds[[self.line[side] for side in lifted]] = 1e6
        cost = [0.0] * width + ([1 / size for size in soft.values()] or [0.0])
        every = [*self.columns, *([(0, None)] * max(1, len(soft)))]
        found = linprog(cost, A_ub=hstack([self.matrix, slack]), b_ub=bounds, bounds=every, method="highs")
        assert found.status in (0, 2), found.message
        return float(found.fun) if found.status == 0 else None


def soft_optimum(lp: LabelledLp, soft: Mapping[Side, float], lifted: Iterable[Side] = ()) -> float | None:
    return Independent(lp).optimum(soft, lifted)


def brute(lp: LabelledLp, sizes: Mapping[Side, float], most: int) -> Iterator[tuple[frozenset[Side], float]]:
    """Every smallest set of sides of up to `most`, fewest first, then least size."""
    found: list[frozenset[Side]] = []
    program = Independent(lp)
    for count in range(1, most + 1):
        level = []
        for sides in itertools.combinations(sizes, count):
            if not any(one <= set(sides) for one in found):
                size = program.optimum({side: sizes[side] for side in sides})
                level += [] if size is None else [(frozenset(sides), size)]
        found += [sides for sides, _ in level]
        yield from sorted(level, key=lambda pair: pair[1])


def agree(relaxer: Relaxer, expected: list[tuple[frozenset[Side], float]]) -> None:
    """The sets listed are those of brute force, in its order but for ties, until it has no more."""
    for sides, size in expected:
        found = relaxer.next()
        assert found is not None
        assert found.fewest
        assert found.least
        assert len(found.amounts) == len(sides)
        assert found.size == pytest.approx(size, rel=1e-6, abs=1e-9)
        assert frozenset(found.amounts) in [one for one, other in expected if other == pytest.approx(size, rel=1e-6, abs=1e-9)]


# ---------------------------------------------------------------------------------- known by hand


def test_one_minimum_too_high(tmp_path: Path) -> None:
    """5 kt of ethylene ask for 12.5 kt of feed (10 offered) and 1,250 furnace-hours (1,000 there): the minimum clashes with
    each. Lowering it to 4 kt is the one single limit (0.2 of it), else both maxima must go up by a quarter (0.5), and nothing
    else helps. Margins 4 · 1200 + 6 · 200 − 10 · 500 = 1000, and a quarter more."""
    answer = small(tmp_path, f"{{{FEED}, outlets: {{ethylene_sale: {{min: 5 kt}}}}}}")
    assert ways(answer) == [
        {"ethylene_sale minimum": (near(5), 4)},
        {"naphtha spot bought maximum": (near(10), 12.5), "furnaces hours maximum": (near(1000), 1250)},
    ]
    assert sizes_of_ways(answer) == [near(0.2), near(0.5)]
    assert margins(answer) == [near(1000), near(1250)]
    assert answer.sentences[1:] == (
        "Relax 1 limit: ethylene_sale minimum from 5 kt to 4 kt (−20.0 %); "
        "the best plan then earns 1,000 kUSD before fixed cost.",
        "No other single limit would do.",
        "Or relax 2 limits: naphtha spot bought maximum from 10 kt to 12.5 kt (+25.0 %) and furnaces hours maximum from 1,000 h "
        "to 1,250 h (+25.0 %); the best plan then earns 1,250 kUSD before fixed cost, 250 kUSD more than the first.",
        "There is no other way out.",
    )


def test_places_of_each_limit(tmp_path: Path) -> None:
    """The line of the file in which each side is written."""
    path = write(tmp_path, **ONE_FEED, scenario=f"{{{FEED}, outlets: {{ethylene_sale: {{min: 5 kt}}}}}}")
    from olefinlp.inputs.scenario import read_scenario

    answer = explain_impossible(read_scenario(path))
    lines = path.read_text(encoding="utf-8").splitlines()
    first, feed, hours = (row["place"].rsplit(":", 1) for row in answer.table.rows)
    assert lines[int(first[1]) - 1].strip() == "min: 5 kt"
    assert lines[int(feed[1]) - 1].strip() == "max: 10 kt"
    assert hours[0].endswith("plant/plant.yaml")


def test_two_promises_against_one_feed(tmp_path: Path) -> None:
    """5 kt of ethylene and 7.5 kt of residue both ask for 12.5 kt of feed, 10 are offered: one limit more feed (+25 %), or
    both promises down a fifth."""
    answer = small(tmp_path, f"{{{FEED}, outlets: {{ethylene_sale: {{min: 5 kt}}, residue_sale: {{min: 7.5 kt}}}}}}", BIG)
    assert ways(answer) == [
        {"naphtha spot bought maximum": (near(10), 12.5)},
        {"ethylene_sale minimum": (near(5), 4), "residue_sale minimum": (near(7.5), 6)},
    ]
    assert sizes_of_ways(answer) == [near(0.25), near(0.4)]


def test_ways_with_as_many_limits_come_in_the_order_of_their_size(tmp_path: Path) -> None:
    """Must-take of 8 kt against 3 kt of residue sold (8 kt give 4.8): the must-take down to 5 kt (0.375) comes before the
    residue up to 4.8 kt (0.6)."""
    feed = "feeds: {naphtha: {spot: {min: 8 kt, max: 10 kt, price: 500 USD/t}}}"
    answer = small(tmp_path, f"{{{feed}, outlets: {{residue_sale: {{max: 3 kt}}}}}}")
    assert ways(answer) == [
        {"naphtha spot bought minimum": (near(8), 5)},
        {"residue_sale maximum": (near(3), 4.8)},
    ]
    assert sizes_of_ways(answer) == [near(0.375), near(0.6)]
    assert "There is no other way out." in answer.sentences


def test_more_sets_than_are_listed(tmp_path: Path) -> None:
    """9 kt must be taken, 2 of them may stay in the tank, so 7 are cracked to 4.2 kt of residue, for which 3 + 0.6 kt have a
    way out: must-take down to 8 (0.11), sale up to 3.6 (0.2), tank up to 3 (0.5), burnt up to 1.2 kt (1): the last is not
    listed, but said to be there."""
    scenario = """
        feeds: {naphtha: {spot: {min: 9 kt, max: 10 kt, price: 500 USD/t}}}
        outlets: {residue_sale: {max: 3 kt}}
        stocks: {naphtha: {opening: 0 kt, min: 0 kt, max: 2 kt, holding: 0 USD/t/d, end: {at_least: 0 kt}}}
    """
    outlets = {"residue_sale": {"from": "residue", "to": "sale"}, "burnt": {"from": "residue", "to": "flare", "max": "0.6 kt"}}
    answer = small(tmp_path, scenario, {"outlets": outlets})
    assert ways(answer) == [
        {"naphtha spot bought minimum": (near(9), 8)},
        {"residue_sale maximum": (near(3), 3.6)},
        {"naphtha closing stock maximum": (near(2), 3)},
    ]
    assert sizes_of_ways(answer) == [near(1 / 9), near(0.2), near(0.5)]
    assert "There are more single limits that would do; these three change the least." in answer.sentences


def test_five_limits_at_once(tmp_path: Path) -> None:
    """4 kt of ethylene and 6 kt of residue each ask for 10 kt of feed; 9 kt and four caps below stand in the way."""
    limits = {f"cap_{n}": {"sum": [{"charged": "naphtha"}], "max": f"{n} kt"} for n in (5, 6, 7, 8)}
    scenario: dict[str, Any] = {"feeds": {"naphtha": {"spot": {"max": "9 kt", "price": "500 USD/t"}}}, "limits": limits}
    scenario["outlets"] = {"ethylene_sale": {"min": "4 kt"}, "residue_sale": {"min": "6 kt"}}
    answer = explain_impossible(read(tmp_path, **ONE_FEED, scenario=scenario))
    assert [len(way) for way in ways(answer)] == [2, 5]
    assert ways(answer)[0] == {"ethylene_sale minimum": (near(4), 2), "residue_sale minimum": (near(6), 3)}
    assert "No other set of two limits would do." in answer.sentences
    assert "There is no other way out." in answer.sentences


def test_steps_of_a_contract_are_relaxed_as_a_whole(tmp_path: Path) -> None:
    """8 kt taken and 3 kt of residue sold, in two steps: the end of the last is moved."""
    scenario = """
        feeds: {naphtha: {spot: {min: 8 kt, max: 10 kt, price: 500 USD/t}}}
        outlets: {residue_sale: {max: null, price: null, tiers: TIERS}}
    """
    tiers = "[{up_to: 2 kt, price: 300 USD/t}, {up_to: 3 kt, price: 200 USD/t}]"
    answer = small(tmp_path, scenario.replace("TIERS", tiers))
    assert ways(answer)[1] == {"residue_sale maximum": (near(3), 4.8)}
    assert margins(answer)[1] == near(3.2 * 1200 + 2 * 300 + 2.8 * 200 - 8 * 500)


def test_a_closed_outlet_is_measured_by_its_amount(tmp_path: Path) -> None:
    """Residue may not leave at all, so 4 kt of ethylene (6 kt of residue) cannot be made. The zero is measured against the
    largest limit in kt, 10: 0.6, less than the whole of the minimum; it is worded without a percentage."""
    answer = small(tmp_path, f"{{{FEED}, outlets: {{ethylene_sale: {{min: 4 kt}}, residue_sale: {{max: 0 kt}}}}}}")
    assert ways(answer) == [{"residue_sale maximum": (0, 6)}, {"ethylene_sale minimum": (near(4), None)}]
    assert sizes_of_ways(answer) == [near(0.6), near(1)]
    first, second = (s for s in answer.sentences if "elax 1 limit" in s)
    assert first.startswith("Relax 1 limit: residue_sale maximum from 0 to 6 kt; the best plan then earns")
    assert second.startswith("Or relax 1 limit: ethylene_sale minimum from 4 kt to none (") or "to none; " in second
    assert margins(answer)[1] == near(0)


def test_a_tank_that_must_be_full_again(tmp_path: Path) -> None:
    """4 kt of ethylene need 10 kt of feed: 6 bought and 5 in the tank, which must be there again at the end, are 4 short.
    Ethylene down by 1.6 kt (0.4), feed up by 4 (0.667) or the end down to 1 kt (0.8)."""
    scenario = """
        feeds: {naphtha: {spot: {max: 6 kt, price: 500 USD/t}}}
        outlets: {ethylene_sale: {min: 4 kt}}
        stocks: {naphtha: {opening: 5 kt, min: 0 kt, max: 9 kt, holding: 0 USD/t/d, end: at least opening}}
    """
    answer = small(tmp_path, scenario)
    assert ways(answer) == [
        {"ethylene_sale minimum": (near(4), 2.4)},
        {"naphtha spot bought maximum": (near(6), 10)},
        {"naphtha stock at the end minimum": (near(5), 1)},
    ]
    assert sizes_of_ways(answer) == [near(0.4), near(2 / 3), near(0.8)]


def test_take_or_pay_is_never_the_cause(tmp_path: Path) -> None:
    """What is not taken is paid for: the take-or-pay quantity stands among what could be lifted to no avail."""
    feed = "feeds: {naphtha: {spot: {max: 10 kt, price: 500 USD/t, take_or_pay: 9 kt, shortfall_pays: 40 %}}}"
    answer = small(tmp_path, f"{{{feed}, outlets: {{ethylene_sale: {{min: 5 kt}}}}}}")
    assert [row["limit"] for row in answer.tables[3].rows] == ["naphtha spot take-or-pay"]
    assert answer.sentences[-1] == (
        "Not the cause: naphtha spot take-or-pay. All of these could be lifted at once and no plan would be possible."
    )


def test_several_months(tmp_path: Path) -> None:
    """Two months without a tank, each with a minimum 1 kt above what 10 kt of feed give, a third without: two limits."""
    scenario = """
        months: [{name: a, hours: 1000}, {name: b, hours: 1000}, {name: c, hours: 1000}]
        feeds: {naphtha: {spot: {max: 10 kt, price: 500 USD/t}}}
        outlets: {ethylene_sale: {min: {a: 5 kt, b: 8 kt, c: 1 kt}}}
    """
    answer = small(tmp_path, scenario)
    rows = [row for row in answer.table.rows if row["way"] == 1]
    assert [(row["month"], row["limit"], row["to"]) for row in rows] == [("a", "ethylene_sale", 4), ("b", "ethylene_sale", 4)]
    assert next(s for s in answer.sentences if s.startswith("Relax")).startswith(
        "Relax 2 limits: ethylene_sale minimum in a from 5 kt to 4 kt (−20.0 %), in b from 8 kt to 4 kt (−50.0 %); the best plan"
    )
    assert answer.title == "Why a to c cannot be planned"
    assert [row["limits"] for row in answer.tables[1].rows] == [2, 3, 3]


# ---------------------------------------------------------------------------------- ratios and specifications

GOOD_AND_BAD: dict[str, Any] = {
    "yields": "feed, severity, propylene, propane\ngood, base, 90, 10\nbad, base, 0, 100",
    "modes": "group, feed, severity, charge\nfurnaces, good, base, 20\nfurnaces, bad, base, 20",
    "prices": {"blend": 800},
    "scenario": "feeds: {good: {spot: {max: 10 kt, price: 500 USD/t}}, bad: {spot: {min: 1 kt, max: 2 kt, price: 100 USD/t}}}",
}


def blend_plant(least: str) -> str:
    return f"""
        outlets:
          blend_sale:
            from: [propylene, propane]
            to: sale
            specifications: {{content: {{values: {{propylene: 100 %, propane: 0 %}}, min: {least}}}}}
    """


def test_a_specification_is_changed_as_it_is_written(tmp_path: Path) -> None:
    """One good feed just meets 90 % propylene, a must-take of 1 kt of propane spoils it: the sum missed is 0.9 kt whatever is
    made, but 10 kt of good feed dilute it best: 9 of 11 kt, 81.818 %. Else the must-take goes. With 81.81 % it is
    9/0.8181 = 11.0011 kt of blend: margin 11.0011 · 800 − 10 · 500 − 1.0011 · 100, and the plant file so written gives it."""
    answer = explain_impossible(read(tmp_path / "as_written", **GOOD_AND_BAD, plant=blend_plant("90 %")))
    first, second = answer.table.rows
    assert (first["limit"], first["side"]) == ("blend_sale content", "minimum")
    assert (first["written"], first["to"], first["unit"]) == (near(90), 81.81, "%")
    assert first["least_change"] == pytest.approx(90 - 900 / 11, rel=1e-9)
    assert (second["limit"], second["side"], second["to"]) == ("bad spot bought", "minimum", None)
    assert sizes_of_ways(answer) == [near(0.09), near(1)]
    assert any(s.startswith("Relax 1 limit: blend_sale content minimum from 90 % to 81.81 %; the best") for s in answer.sentences)
    again = planned(tmp_path / "relaxed", **GOOD_AND_BAD, plant=blend_plant("81.81 %"))
    assert again.margin / 1000 == near(margins(answer)[0])
    assert margins(answer)[0] == near(9 / 0.8181 * 700 - 5000 + 10 * 100)


def test_a_ratio_is_changed_as_it_is_written(tmp_path: Path) -> None:
    """Residue is 1.5 times the ethylene, at most 1.2 is asked for; 2 kt of ethylene miss it by 0.6 kt (0.06 of 10 kt)."""
    scenario = f"""{{{FEED}, outlets: {{ethylene_sale: {{min: 2 kt}}}},
        ratio_limits: {{residue_to_ethylene: {{of: [{{cut: residue}}], to: [{{cut: ethylene}}], at_most: 1.2}}}}}}"""
    answer = small(tmp_path, scenario)
    assert ways(answer) == [
        {"residue_to_ethylene ratio maximum": (near(1.2), 1.5)},
        {"ethylene_sale minimum": (near(2), None)},
    ]
    assert sizes_of_ways(answer) == [near(0.06), near(1)]
    assert "residue_to_ethylene ratio maximum from 1.2 to 1.5; the best plan then earns 1,000 kUSD" in str(answer)
    again = planned(tmp_path / "again", **ONE_FEED, scenario=scenario.replace("1.2", "1.5"))
    assert again.margin / 1000 == near(margins(answer)[0])


def test_a_ratio_at_least(tmp_path: Path) -> None:
    """Ethylene is two thirds of the residue, at least 0.7 is asked for."""
    scenario = f"""{{{FEED}, outlets: {{ethylene_sale: {{min: 2 kt}}}},
        ratio_limits: {{split: {{of: [{{cut: ethylene}}], to: [{{cut: residue}}], at_least: 0.7}}}}}}"""
    assert ways(small(tmp_path, scenario))[0] == {"split ratio minimum": (near(0.7), 0.6666)}


def test_a_ratio_to_nothing_must_be_dropped(tmp_path: Path) -> None:
    """Ethylene is held to a multiple of a feed that is not on offer: no number of it would do."""
    parts = merged(ONE_FEED, {})
    parts["yields"] += "\ngas_oil, base, 20, 80"
    parts["modes"] += "\nfurnaces, gas_oil, base, 9"
    scenario = f"""{{{FEED}, outlets: {{ethylene_sale: {{min: 2 kt}}}},
        ratio_limits: {{held: {{of: [{{cut: ethylene}}], to: [{{charged: gas_oil}}], at_most: 1}}}}}}"""
    answer = explain_impossible(read(tmp_path, **parts, scenario=scenario))
    assert ways(answer)[0] == {"held ratio maximum": (near(1), None)}
    assert "held ratio maximum from 1 to none; the best plan" in str(answer)


# ---------------------------------------------------------------------------------- nothing to relax


def test_a_possible_month_is_said_to_be_possible(tmp_path: Path) -> None:
    answer = small(tmp_path, f"{{{FEED}}}")
    assert answer.sentences == ("A plan is possible for month: no limits clash, nothing need be relaxed.",)
    assert answer.title == "month can be planned"
    assert all(len(table) == 0 for table in answer.tables)


def test_another_reason_is_asked_for_only_when_limits_do_not_clash(tmp_path: Path) -> None:
    """The place for decisions that are not limits: its answer is given, or none."""
    mine = Answer("other", "another reason", (), ("words",))
    possible = read(tmp_path / "a", **ONE_FEED, scenario=f"{{{FEED}}}")
    impossible = read(tmp_path / "b", **ONE_FEED, scenario=f"{{{FEED}, outlets: {{ethylene_sale: {{min: 5 kt}}}}}}")
    assert explain_impossible(possible, otherwise=lambda _: mine) is mine
    assert explain_impossible(possible, otherwise=lambda _: None).title == "month can be planned"
    assert explain_impossible(impossible, otherwise=lambda _: mine).name == "impossible"


def test_balances_alone_can_clash(tmp_path: Path) -> None:
    """Steam is used at a fixed rate and nothing makes it: there is no limit to relax, and that is said."""
    answer = small(
        tmp_path,
        f"{{{FEED}}}",
        "utilities: {steam: {measured_in: mass}}",
        utility_uses="utility, direction, of, item, amount, unit\nsteam, uses, fixed, all, 3, t/h",
    )
    assert answer.sentences[0].startswith("No plan is possible, and no written limit is the cause")
    assert len(answer.table) == 0


# ---------------------------------------------------------------------------------- against brute force


@pytest.mark.parametrize("seed", [0, 1, 2, *(pytest.param(seed, marks=pytest.mark.slow) for seed in range(3, 12))])
def test_random_programs_agree_with_brute_force(seed: int) -> None:
    """Seven sides on four variables, many of them in each other's way: every smallest set there is, in order."""
    draw = np.random.default_rng(seed)
    rows = {}
    for i in range(5):
        line = [float(a) for a in draw.integers(0, 4, 4) * draw.uniform(0.5, 1.5, 4)]
        bound = float(draw.uniform(2, 9))
        rows["draw_limit", str(i)] = (bound, line, math.inf) if i % 2 else (-math.inf, line, bound)
    rows["draw_limit", "both"] = (3.0, [1.0, -1.0, 1.0, 1.0], 3.5)
    rows["balance", "x"] = (0.0, [1.0, 1.0, -1.0, 0.0], 0.0)
    lp = dense_lp([0.0] * 4, rows)
    sizes = {side: abs(float(lp.row_low[side.row] if side.low else lp.row_high[side.row])) for side in limit_sides(lp)}
    relaxer = Relaxer(lp, sizes)
    assert relaxer.impossible() == (soft_optimum(lp, {}) is None)
    if relaxer.impossible():
        expected = list(brute(lp, sizes, 7))
        agree(relaxer, expected)
        assert relaxer.next() is None
        assert relaxer.fewest().proven


def test_sizes_far_apart_do_not_matter() -> None:
    """x ≥ 1 (or y ≥ 1) against x + y ≤ 1e-6, relaxed a million times itself, and z ≥ 1e6 against z ≤ 1: by hand."""
    rows = {
        ("low_limit", "x"): (1.0, [1.0, 0.0], math.inf),
        ("tiny_limit", "x"): (-math.inf, [1.0, 0.0], 1e-4),
        ("large_limit", "z"): (1e4, [0.0, 1.0], math.inf),
        ("small_limit", "z"): (-math.inf, [0.0, 1.0], 1.0),
    }
    lp = dense_lp([0.0, 0.0], rows)
    sizes = {side: abs(float(lp.row_low[side.row] if side.low else lp.row_high[side.row])) for side in limit_sides(lp)}
    relaxer = Relaxer(lp, sizes)
    found = [relaxer.next() for _ in range(4)]
    assert [one and one.size for one in found] == [
        pytest.approx(1 - 1e-4 + 1 - 1e-4, rel=1e-9),
        pytest.approx(1 - 1e-4 + 9999, rel=1e-9),
        pytest.approx(9999 + 1 - 1e-4, rel=1e-9),
        pytest.approx(9999 + 9999, rel=1e-9),
    ]
    assert all(one and one.fewest and one.least for one in found)
    assert relaxer.next() is None


@pytest.fixture(scope="module")
def may(shipped_scenario: Callable[[str], Scenario]) -> Scenario:
    return shipped_scenario(MARCH).with_(MAY)


@pytest.fixture(scope="module")
def may_answer(may: Scenario) -> Answer:
    return explain_impossible(may)


def test_may_of_the_demo(may_answer: Answer) -> None:
    """Figures from an independent route on the same data: 67.96 and 24.93 kt; the C3 splitter 12 % up with 11.8 kt of ethylene
    less; compressor 6.2 % up with 845 gas-furnace hours and 2.2 kt of propylene less."""
    assert ways(may_answer) == [
        {"ethylene_contract minimum": (near(76), 67.95), "polymer_grade_propylene minimum": (near(27), 24.92)},
        {"ethylene_contract minimum": (near(76), 64.21), "c3_splitter maximum": (near(36), 40.33)},
        {
            "gas_furnaces hours maximum": (near(2901.6), 3747),
            "polymer_grade_propylene minimum": (near(27), 24.77),
            "cracked_gas_compressor maximum": (near(229), 243.1),
        },
    ]
    assert "No other set of two limits would do." in may_answer.sentences
    assert "There are more sets of three limits; this one changes the least." in may_answer.sentences


def test_figures_as_printed_can_be_planned(may: Scenario, may_answer: Answer) -> None:
    """The scenario with the two minima as printed has a plan, and it earns what is said."""
    figures = {f"outlets.{row['limit']}.min": f"{row['to']:g} kt" for row in may_answer.table.rows if row["way"] == 1}
    assert make_plan(may.with_(figures)).margin / 1000 == near(margins(may_answer)[0])


def test_each_set_is_enough_and_no_part_of_it_is(may: Scenario) -> None:
    """Asked of scipy: with the set lifted a plan is possible, without any one of it none, and 0.1 % less does not do."""
    lp = compiled(may)
    sizes = _sizes(may.case, lp)
    relaxer = Relaxer(lp, sizes)
    for _ in range(4):
        found = relaxer.next()
        assert found is not None
        assert soft_optimum(lp, {side: sizes[side] for side in found.amounts}) == pytest.approx(found.size, rel=1e-6)
        for side in found.amounts:
            assert soft_optimum(lp, {}, set(found.amounts) - {side}) is None


def test_what_is_not_the_cause_can_be_lifted_at_once(may: Scenario, may_answer: Answer) -> None:
    """Asked of scipy; nothing that is to be relaxed stands in the list."""
    lp = compiled(may)
    listed = {(row["family"], row["limit"], row["side"]) for row in may_answer.tables[3].rows}
    sides = []
    for side in limit_sides(lp):
        family, *key = lp.rows[side.row]
        limit = may.case.limits[(family.removesuffix("_limit"), *key)]
        if (limit.family.replace("_", " "), limit.label, "minimum" if side.low else "maximum") in listed:
            sides.append(side)
    assert len(sides) == len(listed) > 20
    assert soft_optimum(lp, {}, sides) is None
    assert not {(limit, side) for _, limit, side in listed} & {(row["limit"], row["side"]) for row in may_answer.table.rows}


@pytest.mark.slow
def test_may_agrees_with_all_pairs(may: Scenario) -> None:
    """All 49 sides alone and all 1,176 pairs of them, by scipy."""
    lp = compiled(may)
    sizes = _sizes(may.case, lp)
    expected = list(brute(lp, sizes, 2))
    assert len(expected) == 2
    agree(Relaxer(lp, sizes), expected)


@pytest.mark.slow
@pytest.mark.parametrize("least", [("90 kt", "10 kt"), ("76 kt", "27 kt")])
def test_six_impossible_months(shipped_scenario: Callable[[str], Scenario], least: tuple[str, str]) -> None:
    """A first way out is proven the fewest and the least, and what is said of it holds: the months as printed can be planned."""
    changes = {
        "outlets.ethylene_contract": {"min": least[0], "max": "95 kt"},
        "outlets.polymer_grade_propylene.min": least[1],
    }
    scenario = shipped_scenario(SIX).with_(changes)
    answer = explain_impossible(scenario)
    first = answer.tables[1].rows[0]
    assert (first["fewest"], first["least"]) == ("yes", "yes")
    assert first["limits"] == (6 if least[1] == "10 kt" else 12)
    figures: dict[str, Any] = {}
    for row in answer.table.rows:
        if row["way"] == 1:
            figures.setdefault(f"outlets.{row['limit']}.min", {})[row["month"]] = f"{row['to']:g} kt"
    assert make_plan(scenario.with_(figures)).margin / 1000 == pytest.approx(first["margin"], rel=1e-8)


# ---------------------------------------------------------------------------------- stopped, rounded, printed


def test_a_stopped_search_says_so(may: Scenario) -> None:
    """Without any time a set is still given of which none can be left out; it is not called the fewest."""
    answer = explain_impossible(may, seconds=0.0)
    assert "This is not proven to be the fewest limits: the search was stopped after 0 s." in answer.sentences
    assert [row["fewest"] for row in answer.tables[1].rows] == ["no"]
    assert margins(answer)[0] is not None
    relaxer = Relaxer(compiled(may), _sizes(may.case, compiled(may)), 0.0)
    found = relaxer.next()
    assert found is not None
    assert not relaxer.impossible(found.amounts)
    assert all(relaxer.impossible(set(found.amounts) - {side}) for side in found.amounts)


@pytest.mark.parametrize(
    ("target", "need", "down", "figure"),
    [
        (67.9553, 8.0447, True, 67.95),
        (67.9553, 8.0447, False, 67.96),
        (73.1, 6.9, True, 73.1),
        (2902.4123, 845.0, False, 2903.0),
        (2902.4123, 0.0123, False, 2902.4123),
        (0.0226796, 0.004, True, 0.02267),
        (123456.7, 1e4, False, 123500.0),
        (-0.5, 1.0, True, -0.5),
        (0.0, 3.0, True, 0.0),
    ],
)
def test_figures_are_rounded_to_the_loose_side(target: float, need: float, down: bool, figure: float) -> None:
    found = _outward(target, need, down, 0)
    assert found == figure
    assert (found <= target) if down else (found >= target)
    if target:
        looser = _outward(target, need, down, 1)
        assert (looser < found) if down else (looser > found)


def test_the_clash_points_to_the_explanation(tmp_path: Path) -> None:
    path = write(tmp_path, **ONE_FEED, scenario=f"{{{FEED}, outlets: {{ethylene_sale: {{min: 5 kt}}}}}}")
    from olefinlp.inputs.scenario import read_scenario

    scenario = read_scenario(path)
    clash = find_clash(scenario.case, compiled(scenario))
    assert str(clash).splitlines()[-1].startswith("hint: relax one of")
    assert "; `olefinlp explain " in str(clash)
    assert "scenario.yaml` says which" in str(clash)


def test_the_command(tmp_path: Path) -> None:
    """An impossible month is explained with code 0 and as a workbook; a slip in the file is an input error."""
    path = write(tmp_path, **ONE_FEED, scenario=f"{{{FEED}, outlets: {{ethylene_sale: {{min: 5 kt}}}}}}")
    book = tmp_path / "why.xlsx"
    done = CliRunner().invoke(app, ["explain", str(path), "-o", str(book)])
    assert done.exit_code == 0, done.output
    assert "Relax 1 limit: ethylene_sale minimum from 5 kt to 4 kt (−20.0 %)" in done.output
    assert "scenario.yaml:" in done.output
    assert book.stat().st_size > 0
    path.write_text(path.read_text(encoding="utf-8").replace("min: 5 kt", "minn: 5 kt"), encoding="utf-8")
    assert CliRunner().invoke(app, ["explain", str(path)]).exit_code == 2


def test_the_command_for_a_possible_month(tmp_path: Path) -> None:
    path = write(tmp_path, **ONE_FEED, scenario=f"{{{FEED}}}")
    done = CliRunner().invoke(app, ["explain", str(path)])
    assert done.exit_code == 0
    assert "Every feed on offer is bought." in done.output
    assert CliRunner().invoke(app, ["explain", str(path), "--feed", "naphta"]).exit_code == 2
