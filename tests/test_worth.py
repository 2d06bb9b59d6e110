"""What limits are worth: every number again from programs solved cold, with the limit moved, and on plants done by hand.

`Beside` moves one side of one limit in the arrays of the plan, solves from nothing, and knows nothing of neighbours, bases or
steps. Steps of a cold re-solve are a ten-thousandth of the limit, or a tenth of the stretch on which a worth is said to hold.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import pytest
from plants import DEAR_AND_CHEAP, ONE_FEED, identity_of_duality, planned

from olefinlp.answers.answer import Answer
from olefinlp.answers.limits import limit_record
from olefinlp.answers.margin_owners import who_earns_the_margin
from olefinlp.answers.plan import Plan, make_plan
from olefinlp.answers.worth import NOTHING, REACH, worth_of_limits
from olefinlp.inputs.case import Limit
from olefinlp.lp.solver import solve

MONTHS = ("brackwater_2031_03.yaml", "brackwater_2031_04.yaml", "marram_point_2031_03.yaml")


@dataclass(frozen=True)
class Beside:
    """The best margin with one side of one limit at another place, from a cold solve."""

    plan: Plan
    limit: Limit
    low_side: bool

    @property
    def at(self) -> float:
        """Where the limit stands, in units of the plan."""
        return float((self.limit.low if self.low_side else self.limit.high) or 0.0)

    def margin(self, at: float) -> float:
        lp = self.plan.lp
        row = lp.row_at[f"{self.limit.family}_limit", *self.limit.key]
        low, high = lp.row_low.copy(), lp.row_high.copy()
        (low if self.low_side else high)[row] = at
        found = solve(replace(lp, row_low=low, row_high=high)).solution
        assert found is not None
        return found.objective

    def slope(self, a: float, b: float) -> float:
        """Worth per unit in which people read it, of the way from a to b (units of the plan)."""
        return abs(self.margin(b) - self.margin(a)) / abs(b - a) * self.limit.worth_scale


@pytest.fixture(scope="module")
def answers(shipped_plan: Callable[[str], Plan]) -> dict[str, Answer]:
    """The answer for each month."""
    return {name: worth_of_limits(shipped_plan(name)) for name in MONTHS}


def limits_of(plan: Plan, answer: Answer) -> list[tuple[dict[str, Any], Beside]]:
    """Each row of an answer with its limit."""
    by_label = {(limit.month, limit.label): limit for limit in plan.quantities.case.limits.values()}
    return [(row, Beside(plan, by_label[row["month"], row["limit"]], row["low_side"])) for row in answer.table.rows]


@pytest.mark.parametrize("name", MONTHS)
def test_what_is_listed(name: str, shipped_plan: Callable[[str], Plan], answers: dict[str, Answer]) -> None:
    """All limits that are reached and whose move by a ten-thousandth changes the margin, and no other."""
    plan = shipped_plan(name)
    expected = set()
    for limit in plan.quantities.case.limits.values():
        record = limit_record(plan.quantities, limit)
        if record["state"] not in ("at maximum", "at minimum", "fixed"):
            continue
        beside = Beside(plan, limit, record["state"] == "at minimum")
        step = 1e-4 * (beside.at or 1.0)
        if beside.slope(beside.at - step, beside.at) > 1e-6 or beside.slope(beside.at, beside.at + step) > 1e-6:
            expected.add((limit.month, limit.label))
    found = [(row["month"], row["limit"]) for row in answers[name].table.rows]
    assert set(found) == expected
    assert len(found) == len(expected) >= 6


@pytest.mark.parametrize("name", MONTHS)
def test_both_sides_and_their_ranges(name: str, shipped_plan: Callable[[str], Plan], answers: dict[str, Answer]) -> None:
    """The one-sided worths hold beside the limit and up to the end that is stated; beyond it the next one does."""
    plan = shipped_plan(name)
    for row, beside in limits_of(plan, answers[name]):
        scale, at = beside.limit.scale, beside.at
        assert row["value"] == pytest.approx(at * scale)
        up, down = ("tightened", "loosened") if beside.low_side else ("loosened", "tightened")
        for side, column, sign in ((up, "holds_to", 1), (down, "holds_from", -1)):
            worth, end, after = row[f"worth_{side}"], row[column] / scale, row[f"next_{side}"]
            stretch = end - at
            assert stretch * sign > 0, row
            assert beside.slope(at, at + 0.1 * stretch) == pytest.approx(worth, rel=1e-4, abs=1e-6), row
            assert beside.slope(end - 0.1 * stretch, end) == pytest.approx(worth, rel=1e-4, abs=1e-6), row
            if after is None:
                assert not at or abs(stretch) == pytest.approx(REACH * at)
            else:
                beyond = beside.slope(end, end + 1e-5 * sign * (at or 1.0))
                assert beyond == pytest.approx(after, rel=1e-3, abs=1e-4), row
                assert abs(beyond - worth) > 1e-3


@pytest.mark.parametrize("name", MONTHS)
def test_worth_is_the_shadow_price(name: str, shipped_plan: Callable[[str], Plan], answers: dict[str, Answer]) -> None:
    """Where both sides are worth the same the dual cannot be anything else."""
    plan = shipped_plan(name)
    for row, beside in limits_of(plan, answers[name]):
        assert row["worth_loosened"] == pytest.approx(row["worth_tightened"], rel=1e-7)
        record = limit_record(plan.quantities, beside.limit)
        assert row["worth_loosened"] == pytest.approx(record["worth"], rel=1e-7)
        assert (row["worth_unit"], row["unit"], row["place"]) == (record["worth_unit"], record["unit"], record["place"])


@pytest.mark.parametrize(
    ("limit", "change", "hours"),
    [
        ("ethylene_contract", {"outlets.ethylene_contract.max": "58.01 kt"}, 1000),
        ("light_naphtha contract take-or-pay", {"feeds.light_naphtha.contract.take_or_pay": "19.99 kt"}, 1000),
        ("cracked_gas_compressor", {"unit_factors.1.factor": 1.0201}, 744),
        ("gas_furnaces hours", {"outages": [{"month": "2031-03", "group": "gas_furnaces", "hours": "1 h", "reason": "test"}]}, 1),
    ],
)
def test_units_through_the_files(
    limit: str, change: dict[str, Any], hours: float, march: Plan, answers: dict[str, Answer]
) -> None:
    """The file itself changed a little: USD gained per unit, the unit being a tonne, a kNm3 of the month, a furnace-hour.

    `hours` turns the limit as it is read into units of the worth: 1000 t in a kt, 744 h of a flow.
    """
    other = make_plan(march.scenario.with_(change))
    row = answers[MONTHS[0]].table.where(limit=limit)[0]
    now = next(r["minimum" if row["low_side"] else "maximum"] for r in other.limits.rows if r["limit"] == limit)
    gained = (other.margin - march.margin) / ((now - row["value"]) * hours)
    assert abs(now - row["value"]) > 1e-6
    assert (-gained if row["low_side"] else gained) == pytest.approx(row["worth_loosened"], rel=1e-6)


def test_the_compressor_of_march(answers: dict[str, Answer]) -> None:
    """Order of magnitude from another program of the same plant: about 24.5 USD/kNm3, about 15.2 after some 0.15 %."""
    row = answers[MONTHS[0]].table.where(limit="cracked_gas_compressor")[0]
    assert row["worth_loosened"] == pytest.approx(24.5, abs=0.1)
    assert row["next_loosened"] == pytest.approx(15.2, abs=0.1)
    assert row["holds_to"] / row["value"] - 1 == pytest.approx(0.0015, abs=2e-4)


def test_a_specification_of_something_not_made_is_not_listed(march: Plan, answers: dict[str, Answer]) -> None:
    """No chemical grade is made in March: its purity has a dual of hundreds of USD/t and means nothing."""
    key = next(key for key in march.quantities.case.limits if key[0] == "specification")
    assert march.quantities.outlet(key[1], "2031-03") == 0
    assert abs(march.quantities.dual("specification_limit", *key[1:])) > 100
    assert not [row for row in answers[MONTHS[0]].table.rows if row["family"] == "specification"]


def test_sentences(answers: dict[str, Answer]) -> None:
    sentences = answers[MONTHS[0]].sentences
    assert (
        "2031-03: cracked_gas_compressor (233.6 kNm3/h): one unit more is worth 24.5 USD/kNm3, for the next 0.15 %, then 15.2."
        in sentences
    )
    assert (
        "2031-03: light_naphtha contract take-or-pay (20 kt): one unit less is worth 6.03 USD/t, for the next 4.3 %, then 3.2."
        in sentences
    )
    assert answers[MONTHS[0]].note.startswith("Looked at 10% of each limit on both sides. Worths never add")


# ---------------------------------------------------------------------------------- by hand


def worths(answer: Answer) -> dict[str, tuple[float | None, float | None]]:
    """Limit → worth if loosened, cost if tightened."""
    return {row["limit"]: (row["worth_loosened"], row["worth_tightened"]) for row in answer.table.rows}


def test_a_degenerate_plan_has_two_worths(tmp_path: Path) -> None:
    """A tonne at 500 earns 0.4 · 1200 + 0.6 · 200 − 500 = 100, a tonne at 560 earns 40. One furnace cracks 10 kt in 1000 h,
    and just 10 kt are offered at 500: margin 1000, and both limits end at the same place.

    An hour more (10 t) lets 560 in: 400 USD; an hour less loses 10 t at 500: 1000 USD. A tonne more at 500 finds no hour: 0;
    a tonne less at 500 is replaced at 560: 60. Whichever of the two has the dual, all four are told."""
    plan = planned(
        tmp_path,
        **ONE_FEED,
        scenario="feeds: {naphtha: {spot: {max: 10 kt, price: 500 USD/t}, cargo: {max: unlimited, price: 560 USD/t}}}",
    )
    assert plan.margin == pytest.approx(1e6)
    answer = worth_of_limits(plan)
    assert worths(answer) == {
        "naphtha spot bought": (pytest.approx(0), pytest.approx(60)),
        "furnaces hours": (pytest.approx(400), pytest.approx(1000)),
    }
    assert set(answer.sentences) == {
        "month: naphtha spot bought (10 kt): one unit more is worth 0 USD/t, for at least the next 10 %; "
        "one unit tighter costs 60.",
        "month: furnaces hours (1,000 h): one unit more is worth 400 USD/furnace-hour, for at least the next 10 %; "
        "one unit tighter costs 1,000.",
    }


def test_the_list_does_not_hang_on_the_basis(tmp_path: Path) -> None:
    """As above without the dearer offer: an hour more or a tonne more gives nothing, less of either costs, and only one of
    the two can have the dual."""
    plan = planned(tmp_path, **ONE_FEED, scenario="feeds: {naphtha: {spot: {max: 10 kt, price: 500 USD/t}}}")
    duals = [abs(row["worth"]) for row in plan.limits.rows if row["state"] == "at maximum"]
    assert sorted(dual > NOTHING for dual in duals) == [False, True]
    assert worths(worth_of_limits(plan)) == {
        "naphtha spot bought": (0, pytest.approx(100)),
        "furnaces hours": (0, pytest.approx(1000)),
    }


def test_two_minimums_that_end_at_the_same_place(tmp_path: Path) -> None:
    """5 kt must be taken at 650, and just 5 kt give the 2 kt of ethylene that a customer must get. Being let off one changes
    nothing, as the other stays; a tonne more to take loses 50, a tonne more of ethylene 50/0.4 = 125. One of them has no dual."""
    plan = planned(
        tmp_path,
        **ONE_FEED,
        scenario="""
            feeds: {naphtha: {spot: {min: 5 kt, max: 9 kt, price: 650 USD/t}}}
            outlets: {ethylene_sale: {min: 2 kt}}
        """,
    )
    assert sorted(row["worth"] > NOTHING for row in plan.limits.rows if row["state"] == "at minimum") == [False, True]
    assert worths(worth_of_limits(plan)) == {
        "naphtha spot bought": (pytest.approx(0, abs=1e-6), pytest.approx(50)),
        "ethylene_sale": (pytest.approx(0, abs=1e-6), pytest.approx(125)),
    }


def test_a_reached_limit_worth_nothing_is_not_listed(tmp_path: Path) -> None:
    """Two sources at the same price fill the furnace together: one is fixed at 5 kt, and moving that changes nothing, as the
    other has room on both sides."""
    plan = planned(
        tmp_path,
        **ONE_FEED,
        scenario="feeds: {naphtha: {a: {min: 5 kt, max: 5 kt, price: 500 USD/t}, b: {max: 8 kt, price: 500 USD/t}}}",
    )
    assert [row["state"] for row in plan.limits.rows if row["limit"] == "naphtha a bought"] == ["fixed"]
    assert worths(worth_of_limits(plan)) == {"furnaces hours": (pytest.approx(1000), pytest.approx(1000))}


def test_a_limit_of_zero(tmp_path: Path) -> None:
    """Nothing may be sold dear: the first tonne moved there earns 1500 − 1200 = 300, for 4 kt (all ethylene of 10 kt), which
    is less than the tenth of the largest limit of the same unit (100 kt) that is looked at. Less than none cannot be sold."""
    plan = planned(
        tmp_path,
        **ONE_FEED,
        plant="outlets: {ethylene_sale: {from: ethylene, to: sale}, dear_sale: {from: ethylene, to: sale}}",
        scenario="""
            feeds: {naphtha: {spot: {max: 100 kt, price: 500 USD/t}}}
            outlets: {dear_sale: {max: 0 kt, price: 1500 USD/t}}
        """,
    )
    row = worth_of_limits(plan).table.where(limit="dear_sale")[0]
    assert (row["value"], row["worth_loosened"], row["worth_tightened"]) == (0, pytest.approx(300), None)
    assert (row["holds_to"], row["next_loosened"], row["holds_from"]) == (pytest.approx(4), pytest.approx(0, abs=1e-6), None)
    sentence = next(text for text in worth_of_limits(plan).sentences if "dear_sale" in text)
    assert sentence == "month: dear_sale (0 kt): one unit more is worth 300 USD/t, then 0."


@pytest.mark.parametrize(
    ("price", "low_side", "worth", "word", "holds"),
    [(500, False, 100, "more", ("holds_to", 7.7)), (650, True, 50, "less", ("holds_from", 6.3))],
)
def test_a_fixed_limit(tmp_path: Path, price: int, low_side: bool, worth: float, word: str, holds: tuple[str, float]) -> None:
    """Just 7 kt must be taken: at 500 a tonne earns 100 and more would be welcome, at 650 it loses 50 and less would.
    Loosening moves one side; the other cannot pass it."""
    offer = f"{{min: 7 kt, max: 7 kt, price: {price} USD/t}}"
    plan = planned(tmp_path, **ONE_FEED, scenario=f"feeds: {{naphtha: {{spot: {offer}}}}}")
    row = worth_of_limits(plan).table.rows[0]
    assert (row["state"], row["low_side"], row["value"]) == ("fixed", low_side, pytest.approx(7))
    assert (row["worth_loosened"], row["worth_tightened"]) == (pytest.approx(worth), None)
    assert row[holds[0]] == pytest.approx(holds[1])
    assert worth_of_limits(plan).sentences == (
        f"month: naphtha spot bought (7 kt): one unit {word} is worth {worth} USD/t, for at least the next 10 %.",
    )


def test_a_minimum_has_its_next_step(tmp_path: Path) -> None:
    """8 kt must be taken at 650, and each tonne loses 50. Being let off is worth that down to 7.6 kt, which a customer's
    0.4 · 7.6 = 3.04 kt of ethylene need anyway."""
    plan = planned(
        tmp_path,
        **ONE_FEED,
        scenario="""
            feeds: {naphtha: {spot: {min: 8 kt, max: 9 kt, price: 650 USD/t}}}
            outlets: {ethylene_sale: {min: 3.04 kt}}
        """,
    )
    row = worth_of_limits(plan).table.where(limit="naphtha spot bought")[0]
    assert (row["worth_loosened"], row["worth_tightened"]) == (pytest.approx(50), pytest.approx(50))
    assert row["next_loosened"] == pytest.approx(0, abs=1e-6)
    assert row["holds_from"] == pytest.approx(7.6)


def test_the_reach_is_what_is_asked_for(march: Plan) -> None:
    row = worth_of_limits(march, reach=0.01).table.where(limit="condensate spot_cargo bought")[0]
    assert (row["holds_from"], row["holds_to"]) == (pytest.approx(29.7), pytest.approx(30.3))


# ---------------------------------------------------------------------------------- who earns the margin


def earns(answer: Answer) -> dict[str, float]:
    """Item → what it earns, thousands of the currency."""
    return {row["item"]: row["earns"] for row in answer.table.rows}


def test_the_account_sums_to_the_margin(every_plan: Plan) -> None:
    """On every shipped scenario: fixed uses, steps, stocks of six months, minimums. Line by line it is rate × limit."""
    answer = who_earns_the_margin(every_plan)
    moved = sum(abs(line.amount) for line in every_plan.lines)
    assert sum(row["earns"] for row in answer.table.rows) == pytest.approx(every_plan.margin / 1000, abs=1e-6 * moved)
    assert identity_of_duality(every_plan) == pytest.approx(every_plan.margin / 1000, abs=1e-6 * moved)
    owners = answer.tables[1].rows
    assert sum(row["earns"] for row in owners) == pytest.approx(every_plan.margin / 1000, abs=1e-6 * moved)
    assert sum(row["share"] for row in owners) == pytest.approx(1, abs=1e-6)
    by_label = {(limit.month, limit.label): limit for limit in every_plan.quantities.case.limits.values()}
    for row in answer.table.rows:
        limit = by_label.get((row["month"], row["item"]))
        factor = 1.0 if limit is None else 1 / (limit.scale * limit.worth_scale)
        assert row["earns"] == pytest.approx(row["rate"] * row["limit"] * factor)
        assert row["rate_unit"] == ("" if limit is None else f"{every_plan.currency}/{limit.worth_unit}")


def test_signs_and_words_of_the_account(shipped_plan: Callable[[str], Plan]) -> None:
    """What must be fired whatever is cracked costs: 20.0 MMBtu/h at 2.50 USD are 50 USD of the textbook's hour. A take-or-pay
    quantity that holds costs. Steps of a contract earn what they are cheaper than the last: 9 kt · (372 − 335) EUR/t, and
    of a sale what they are dearer: 20 kt · (905 − 838). Opening stocks have their line in six months."""
    cracker = who_earns_the_margin(shipped_plan("thermal_cracker.yaml"))
    assert earns(cracker)["fixed use of fuel"] == pytest.approx(-0.05)
    assert cracker.sentences == ("Of the margin before fixed cost, recovery units 101 %, utilities -1.4 %.",)
    march = earns(who_earns_the_margin(shipped_plan(MONTHS[0])))
    assert march["light_naphtha contract take-or-pay"] == pytest.approx(-20 * 6.02636, abs=1e-3)
    marram = earns(who_earns_the_margin(shipped_plan(MONTHS[2])))
    assert marram["ethane pipeline end of step 1"] == pytest.approx(9 * (372 - 335))
    assert marram["ethylene_sale end of step 1"] == pytest.approx(20 * (905 - 838))
    months = shipped_plan("brackwater_2031_03_to_08.yaml")
    found = who_earns_the_margin(months)
    stocks = {row["item"] for row in found.table.rows if row["group"] == "stocks"}
    assert any(item.startswith("opening stock of") for item in stocks)
    assert {row["month"] for row in found.table.rows} == set(months.quantities.case.months)


def test_an_account_by_hand(tmp_path: Path) -> None:
    """Dear feed: 0.5 · 1000 + 0.5 · 300 − 530 = 120 a tonne, 50 h and 0.5 kt of ethylene a kt; cheap feed: 90, 40 h, 0.3 kt.
    1000 h and 9 kt of ethylene are full: 1.8 kUSD/h and 60 USD/t (50 · 1.8 + 0.5 · 60 = 120, 40 · 1.8 + 0.3 · 60 = 90).
    1 kt of the cheap feed must be bought at 100 more than it is worth there (a second source): −100. Margin
    1800 + 540 − 100."""
    plan = planned(
        tmp_path,
        **DEAR_AND_CHEAP,
        scenario="""
            feeds:
              dear: {spot: {max: unlimited, price: 530 USD/t}}
              cheap: {spot: {max: unlimited, price: 420 USD/t}, term: {min: 1 kt, max: 5 kt, price: 520 USD/t}}
        """,
    )
    answer = who_earns_the_margin(plan)
    assert earns(answer) == {
        "cheap term bought": pytest.approx(-100),
        "furnaces hours": pytest.approx(1800),
        "splitter": pytest.approx(540),
    }
    shares = {row["group"]: (row["earns"], row["share"]) for row in answer.tables[1].rows}
    assert shares["furnaces"] == (pytest.approx(1800), pytest.approx(1800 / 2240))
    assert answer.sentences == ("Of the margin before fixed cost, furnaces 80 %, recovery units 24 %, feed offers -4.5 %.",)


def test_a_loss_is_not_shared(tmp_path: Path) -> None:
    """3 kt must be taken and lose 50 USD/t each: shares of a loss would have the wrong sign."""
    plan = planned(tmp_path, **ONE_FEED, scenario="feeds: {naphtha: {spot: {min: 3 kt, max: 8 kt, price: 650 USD/t}}}")
    answer = who_earns_the_margin(plan)
    assert answer.sentences == ("There is no margin to share, but 150 kUSD of loss: feed offers -150.",)
    assert [row["share"] for row in answer.tables[1].rows] == [None]


def test_nothing_to_share(tmp_path: Path) -> None:
    plan = planned(tmp_path, **ONE_FEED, scenario="feeds: {naphtha: {spot: {max: 8 kt, price: 650 USD/t}}}")
    answer = who_earns_the_margin(plan)
    assert answer.sentences == ("There is no margin to share.",)
    assert answer.table.rows == []


def test_an_account_that_does_not_close_is_an_error(march: Plan) -> None:
    """One dual off by a part in a thousand; a dual that is rounding on a side without a limit is no reason."""
    y = march.solution.row_dual.copy()
    row = march.lp.row_at["furnace_hours_limit", "gas_furnaces", "2031-03"]
    y[row] *= 1.001
    with pytest.raises(ArithmeticError, match="the account sums to"):
        who_earns_the_margin(replace(march, solution=replace(march.solution, row_dual=y)))
    y[row] = march.solution.row_dual[row]
    y[march.lp.row_at["take_or_pay_limit", "ethane.contract", "2031-03"]] = 1e-18
    rounded = who_earns_the_margin(replace(march, solution=replace(march.solution, row_dual=y)))
    assert rounded.table.rows == who_earns_the_margin(march).table.rows
