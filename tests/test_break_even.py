"""Break-even prices against plans made again: the file says another price, and the volume moves where the answer says it does.

`repriced` writes the price in the unit of the trade into the file (or a copy of the price table) and plans from nothing.
Parcels are planned again as forced purchases at no price. Small plants are done by hand: prices USD/t, flows kt, 1,000 hours,
money in kUSD in the derivations.
"""

from __future__ import annotations

import csv
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from plants import DEAR_AND_CHEAP, ONE_FEED, bought, planned

from olefinlp.answers.answer import Answer
from olefinlp.answers.break_even import break_even_prices
from olefinlp.answers.plan import Plan, make_plan
from olefinlp.inputs.scenario import Scenario

BESIDE = 1e-5
"""How far beside a stated price a plan is made, as a share of it."""
MARCH, APRIL, MARRAM = "brackwater_2031_03.yaml", "brackwater_2031_04.yaml", "marram_point_2031_03.yaml"
SHIPPED = (MARCH, APRIL, MARRAM, "thermal_cracker.yaml")
M3_PER_GAL, M3_PER_BBL, TONNES_PER_LB = 3.785411784e-3, 0.158987294928, 0.45359237e-3

Row = dict[str, Any]


def repriced(scenario: Scenario, item: str, price: str, folder: Path) -> Scenario:
    """The scenario with one price, `12.3 USD/t`, in its price table or in its file."""
    if scenario.price_table is None:
        return scenario.with_({f"{item}.price": price})
    number, _, unit = price.partition(" ")
    with (scenario.path.parent / str(scenario.file.prices)).open(newline="", encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    row = next(row for row in rows if row["item"] == item)
    assert row["unit"] == unit
    row[str(scenario.file.price_case)] = number
    table = folder / "prices.csv"
    with table.open("w", newline="", encoding="utf-8") as file:
        writer = csv.DictWriter(file, rows[0].keys())
        writer.writeheader()
        writer.writerows(rows)
    return scenario.with_(prices=str(table))


def item_of(plan: Plan, row: Row) -> str:
    """The price that a row is about: that of the step in which the last tonne is."""
    source = f"{row['feed']}.{row['source']}"
    data, case = plan.quantities.case.sources[source], plan.quantities.case
    item = f"{data.kind}.{source}"
    reached = 0.0
    for step in data.tiers:
        reached += case.tier_size[source, step, row["month"]]
        if len(data.tiers) > 1 and row["bought"] <= reached:
            return f"{item}.tiers.{step}"
    return item


def volume_at(plan: Plan, row: Row, trade_price: float, folder: Path) -> float:
    """What is bought when that price is written."""
    scenario = repriced(plan.scenario, item_of(plan, row), f"{trade_price!r} {row['trade_unit']}", folder)
    return make_plan(scenario).quantities.bought(f"{row['feed']}.{row['source']}", row["month"])


def checked(plan: Plan, row: Row, folder: Path) -> int:
    """Volumes just below and above every price that a row states; how many prices that were."""
    volume, small = pytest.approx(row["bought"], rel=1e-6, abs=1e-9), 1e-6 * max(row["bought"], 1e-3)
    prices = 0
    if row["stays_to"] is not None:
        below, above = (volume_at(plan, row, row["stays_to"] * (1 + side), folder) for side in (-BESIDE, BESIDE))
        assert below == volume
        assert above < row["bought"] - small
        assert row["step_down"] is None or above == pytest.approx(row["step_down"], rel=1e-6, abs=1e-9)
        prices += 1
    up = row["stays_from"] if row["bought"] else row["walk_away_trade"]
    if up is not None:
        below, above = (volume_at(plan, row, up * (1 + side), folder) for side in (-BESIDE, BESIDE))
        assert above == volume
        assert below > row["bought"] + small
        assert row["step_up"] is None or below == pytest.approx(row["step_up"], rel=1e-6, abs=1e-9)
        prices += 1
    return prices


@pytest.fixture(scope="module")
def answers(shipped_plan: Callable[[str], Plan]) -> dict[str, Answer]:
    """The answer for each shipped scenario of one month."""
    return {name: break_even_prices(shipped_plan(name)) for name in SHIPPED}


def row_of(answer: Answer, feed: str, source: str) -> Row:
    """One source."""
    return answer.table.where(feed=feed, source=source)[0]


# ---------------------------------------------------------------------------------- the shipped plants


@pytest.mark.parametrize(
    ("name", "prices"),
    [(MARCH, 13), pytest.param(APRIL, 13, marks=pytest.mark.slow), (MARRAM, 6), ("thermal_cracker.yaml", 4)],
)
def test_the_volume_moves_at_the_stated_prices(
    name: str, prices: int, shipped_plan: Callable[[str], Plan], answers: dict[str, Answer], tmp_path: Path
) -> None:
    """Every walk-away price, and both ends between which the volume stays, of every source: contracts with take-or-pay, steps,
    a side stream, unlimited sources, feeds that are not bought."""
    plan = shipped_plan(name)
    assert sum(checked(plan, row, tmp_path) for row in answers[name].table.rows) == prices


@pytest.mark.parametrize("name", [MARCH, pytest.param(APRIL, marks=pytest.mark.slow), MARRAM, "thermal_cracker.yaml"])
def test_the_first_tonne(name: str, shipped_plan: Callable[[str], Plan], answers: dict[str, Answer], tmp_path: Path) -> None:
    """Just above what the first tonne is worth nothing is bought, just below it something is. A contract with take-or-pay is
    taken up to what its first tonne is worth over the share that not taking saves."""
    plan = shipped_plan(name)
    for row in answers[name].table.rows:
        if plan.quantities.case.has_tiers(f"feeds.{row['feed']}.{row['source']}") or row["entry"] is None:
            continue
        key = (f"{row['feed']}.{row['source']}", row["month"])
        limit = plan.quantities.case.limits.get(("purchase", *key))
        if limit and limit.low:
            continue
        entry = row["entry"] / (1 - plan.quantities.case.shortfall_pays.get(key, 0.0))
        trade = entry * row["price_trade"] / row["price"]
        assert volume_at(plan, row, trade * (1 + BESIDE), tmp_path) == 0
        assert volume_at(plan, row, trade * (1 - BESIDE), tmp_path) > 1e-6


@pytest.mark.parametrize(
    ("name", "source", "parcels"),
    [
        (MARCH, "feeds.gas_oil.spot_barge", (3, 9, 12)),
        (MARCH, "feeds.full_range_naphtha.spot_cargo", (12.5, 37.5, 75)),
        (MARCH, "feeds.light_naphtha.contract", (10, 40)),
        (MARRAM, "feeds.ethane.pipeline", (7, 14)),
        (MARRAM, "feeds.light_naphtha.contract", (8, 24)),
        (MARRAM, "side_streams.refinery_propylene.neighbour", (0.8, 3.2)),
    ],
)
def test_parcels(name: str, source: str, parcels: tuple[float, ...], shipped_plan: Callable[[str], Plan]) -> None:
    """(V(Q) − V(0))/Q, with V of a plan in which just Q is bought, at a price of nothing, and nothing is owed for less."""
    plan = shipped_plan(name)
    head, feed, own = source.split(".")

    def margin(volume: float) -> float:
        data = plan.scenario.document.data[head][feed][own]
        offer = {k: v for k, v in data.items() if k not in ("tiers", "take_or_pay", "shortfall_pays")}
        offer |= {"min": f"{volume} kt", "max": f"{volume} kt"}
        if plan.scenario.price_table is None:
            return make_plan(plan.scenario.with_({source: {**offer, "price": f"0 {plan.currency}/t"}})).margin / 1000
        found = make_plan(plan.scenario.with_({source: offer}))
        paid = found.quantities.case.prices[source, found.quantities.case.months[0]].value
        return found.margin / 1000 + paid * volume

    sizes = break_even_prices(plan, parcels).tables[1].where(feed=feed, source=own)
    assert [row["size"] for row in sizes] == list(parcels)
    before = (0.0, margin(0))
    for row in sizes:
        here = margin(row["size"])
        assert row["value"] == pytest.approx((here - margin(0)) / row["size"], rel=1e-7)
        assert row["increment"] == pytest.approx((here - before[1]) / (row["size"] - before[0]), rel=1e-7)
        before = (row["size"], here)


def test_quarters_of_what_is_offered_are_the_parcels(answers: dict[str, Answer]) -> None:
    """Of sources without an end none; values fall with size."""
    sizes = answers[MARCH].tables[1]
    for row in answers[MARCH].table.rows:
        own = sizes.where(feed=row["feed"], source=row["source"])
        assert [r["size"] / row["offered"] for r in own] == pytest.approx([0.25, 0.5, 0.75, 1])
        values = [r["value"] for r in own]
        assert values == pytest.approx(sorted(values, reverse=True), rel=1e-9)
        assert own[0]["value"] <= row["entry"] + 1e-6
    assert answers["thermal_cracker.yaml"].tables[1].rows == []


@pytest.mark.parametrize(
    ("name", "feed", "source", "unit", "per_tonne"),
    [
        (MARCH, "ethane", "contract", "USc/gal", 0.01 / (M3_PER_GAL * 0.356)),
        (MARCH, "n_butane", "spot_cargo", "USc/gal", 0.01 / (M3_PER_GAL * 0.584)),
        (MARCH, "light_naphtha", "contract", "USD/bbl", 1 / (M3_PER_BBL * 0.665)),
        (MARCH, "gas_oil", "spot_barge", "USD/bbl", 1 / (M3_PER_BBL * 0.845)),
        (MARCH, "full_range_naphtha", "spot_cargo", "USD/t", 1.0),
        ("thermal_cracker.yaml", "ethane", "purchase", "USc/lb", 0.01 / TONNES_PER_LB),
    ],
)
def test_units_of_the_trade(name: str, feed: str, source: str, unit: str, per_tonne: float, answers: dict[str, Answer]) -> None:
    """Gallons and barrels by the density of the feed, as written in the plant."""
    row = row_of(answers[name], feed, source)
    assert row["trade_unit"] == unit
    assert row["price"] == pytest.approx(row["price_trade"] * per_tonne)
    assert row["walk_away"] == pytest.approx(row["walk_away_trade"] * per_tonne)
    assert row["headroom"] == pytest.approx(row["walk_away"] - row["price"])
    for parcel in answers[name].tables[1].where(feed=feed, source=source):
        assert (parcel["trade_unit"], parcel["value"]) == (unit, pytest.approx(parcel["value_trade"] * per_tonne))


def test_what_another_program_of_the_plant_found(answers: dict[str, Answer]) -> None:
    """Gas oil at 513.6 USD/t: 513.0 for the first tonne; full-range naphtha at 534 stays between 523.8 and 534.7; two offers of
    ethane share a worth, so that the cheap one shows the price of the dear one."""
    rows = answers[MARCH]
    assert row_of(rows, "gas_oil", "spot_barge")["entry"] == pytest.approx(513.0, abs=0.1)
    naphtha = row_of(rows, "full_range_naphtha", "spot_cargo")
    assert (naphtha["stays_from"], naphtha["stays_to"]) == (pytest.approx(523.8, abs=0.1), pytest.approx(534.7, abs=0.1))
    assert row_of(rows, "ethane", "contract")["exit"] == pytest.approx(row_of(rows, "ethane", "spot_pipeline")["price"])


def test_sentences(answers: dict[str, Answer]) -> None:
    march = answers[MARCH].sentences
    assert (
        "2031-03: full_range_naphtha spot_cargo: buy the planned 47.6 kt up to 534.7 USD/t (today 534.0); above that the next "
        "step down is to 43.6 kt." in march
    )
    assert (
        "2031-03: light_naphtha contract: buy the planned 20.0 kt up to 93.9 USD/bbl (today 57.0), as 40 % is paid even if it "
        "is not taken; each tonne taken loses 6.0 USD/t, which is less; above that the next step down is to 19.1 kt." in march
    )
    assert "2031-03: gas_oil spot_barge is not bought: its first tonne is worth 68.9 USD/bbl, today 69.0." in march


def test_few_solves(march: Plan) -> None:
    plan = make_plan(march.scenario)
    break_even_prices(plan)
    assert plan.neighbours.solves < 130


# ---------------------------------------------------------------------------------- by hand


def test_two_feeds_by_hand(tmp_path: Path) -> None:
    """A tonne of dear gives 0.5 · 1000 + 0.5 · 300 = 650, of cheap 510 and, bought at 420, 90. Hours 50 d + 40 c ≤ 1000 and
    ethylene 0.5 d + 0.3 c ≤ 9 meet at d = 12, c = 10.

    The first 4 kt of dear fit beside the 20 kt of cheap on offer: 650. From there to 12 kt the hours limit cheap, and a tonne
    of dear displaces 1.25 t of it: 650 − 1.25 · 90 = 537.5. Above, the splitter does, 5/3 t: 500, until 18 kt fill it.
    Likewise for cheap: dear (bought at 530) gains 120, below 10 kt the splitter lets 0.6 t in: 510 − 72 = 438, above the
    hours 0.8 t: 414, up to the 20 kt offered. Four parcels of cheap: 438, 438, then (10 · 438 + 5 · 414)/15 = 430 and
    (4380 + 4140)/20 = 426."""
    plan = planned(
        tmp_path,
        **DEAR_AND_CHEAP,
        scenario="""
            feeds:
              dear: {spot: {max: unlimited, price: 530 USD/t}}
              cheap: {spot: {max: 20 kt, price: 420 USD/t}}
        """,
    )
    answer = break_even_prices(plan)
    dear, cheap = row_of(answer, "dear", "spot"), row_of(answer, "cheap", "spot")
    keys = ("bought", "offered", "entry", "exit", "next", "walk_away", "headroom", "stays_from", "stays_to")
    assert [dear[key] for key in keys] == pytest.approx([12, None, 650, 537.5, 500, 537.5, 7.5, 500, 537.5])
    assert [cheap[key] for key in keys] == pytest.approx([10, 20, 438, 438, 414, 438, 18, 414, 438])
    assert (cheap["step_up"], dear["step_up"], cheap["step_down"]) == (None, None, None)  # not within the quarter looked at
    parcels = [(row["size"], row["value"], row["increment"]) for row in answer.tables[1].rows]
    assert parcels == [pytest.approx(p) for p in ((5, 438, 438), (10, 438, 438), (15, 430, 414), (20, 426, 414))]
    assert [checked(plan, row, tmp_path) for row in (dear, cheap)] == [2, 2]


TERM = "feeds: {{naphtha: {{term: {{{limits}, price: 500 USD/t, take_or_pay: 6 kt, shortfall_pays: {share}}}}}}}"


def test_a_take_or_pay_contract(tmp_path: Path) -> None:
    """At 825 for ethylene a tonne gives 0.4 · 825 + 0.6 · 200 = 450, less than its 500; yet leaving it saves only 60 % of that.
    So 6 kt are taken up to 450/0.6 = 750, where 300 of 750 would still be owed, and more only below 450: then all 9 kt."""
    plan = planned(
        tmp_path,
        **{**ONE_FEED, "prices": {"ethylene": 825, "residue": 200}},
        scenario=TERM.format(limits="max: 9 kt", share="40 %"),
    )
    row = row_of(break_even_prices(plan, parcels=[]), "naphtha", "term")
    assert [row[k] for k in ("bought", "exit", "next", "walk_away", "stays_from", "stays_to", "paid_anyway")] == [
        pytest.approx(x) for x in (6, 450, 450, 750, 450, 750, 0.4)
    ]
    assert (row["step_up"], row["step_down"]) == (None, None)
    assert checked(plan, row, tmp_path) == 2
    assert break_even_prices(plan).sentences == (
        "month: naphtha term: buy the planned 6.0 kt up to 750.0 USD/t (today 500.0), as 40 % is paid even if it is not taken; "
        "each tonne taken loses 50.0 USD/t, which is less.",
    )


def test_above_a_take_or_pay_quantity_the_volume_falls_back_to_it(tmp_path: Path) -> None:
    """A tonne gives 600, so all 7 kt are bought at 500; above 600 only the 6 kt of which leaving saves 60 %."""
    plan = planned(tmp_path, **ONE_FEED, scenario=TERM.format(limits="max: 7 kt", share="40 %"))
    row = row_of(break_even_prices(plan), "naphtha", "term")
    assert [row[k] for k in ("bought", "walk_away", "step_down", "paid_anyway")] == [7, pytest.approx(600), 6, None]
    assert checked(plan, row, tmp_path) == 1
    assert "as 40 %" not in break_even_prices(plan).sentences[0]


def test_a_take_or_pay_contract_that_is_left(tmp_path: Path) -> None:
    """At 400 for ethylene a tonne gives 280, and taking it costs 300 more than leaving it: left, and taken below 280/0.6."""
    plan = planned(
        tmp_path,
        **{**ONE_FEED, "prices": {"ethylene": 400, "residue": 200}},
        scenario=TERM.format(limits="max: 9 kt", share="40 %"),
    )
    row = row_of(break_even_prices(plan), "naphtha", "term")
    assert [row[k] for k in ("bought", "entry", "walk_away")] == [pytest.approx(x) for x in (0, 280, 280 / 0.6)]
    assert checked(plan, row, tmp_path) == 1
    assert break_even_prices(plan).sentences == (
        "month: naphtha term is not bought though 40 % of the price is paid anyway: it would be below 466.7 USD/t (today 500.0).",
    )


@pytest.mark.parametrize(("ethylene", "sentence"), [(825, "the planned 6.0 kt are paid for in any case"), (-400, "at no price")])
def test_all_of_the_price_is_paid_anyway(tmp_path: Path, ethylene: float, sentence: str) -> None:
    """With 100 % owed the price moves no tonne of the 6 kt: taken if a tonne gives anything (450), left if it costs (−40)."""
    plan = planned(
        tmp_path,
        **{**ONE_FEED, "prices": {"ethylene": ethylene, "residue": 200}},
        scenario=TERM.format(limits="max: 9 kt", share="100 %"),
    )
    row = row_of(break_even_prices(plan), "naphtha", "term")
    assert (row["bought"], row["walk_away"], row["stays_to"]) == (6 if ethylene > 0 else 0, None, None)
    assert sentence in break_even_prices(plan).sentences[0]


STEPS = "tiers: [{up_to: 4 kt, price: 300 USD/t}, {up_to: 10 kt, price: 380 USD/t}]"


def test_steps_of_a_contract(tmp_path: Path) -> None:
    """A tonne gives 600: 10 kt bought, the last in the second step. Above 600 for that step its 6 kt go, the first 4 stay."""
    plan = planned(tmp_path, **ONE_FEED, scenario=f"feeds: {{naphtha: {{pipeline: {{{STEPS}}}}}}}")
    row = row_of(break_even_prices(plan), "naphtha", "pipeline")
    keys = ("bought", "offered", "price", "walk_away", "stays_from", "step_down")
    assert [row[k] for k in keys] == [pytest.approx(10), pytest.approx(10), 380, pytest.approx(600), None, None]
    assert checked(plan, row, tmp_path) == 1
    small = planned(tmp_path, **ONE_FEED, scenario="feeds: {naphtha: {pipeline: {" + STEPS.replace("10 kt", "5 kt") + "}}}")
    row = row_of(break_even_prices(small), "naphtha", "pipeline")
    assert (row["bought"], row["step_down"]) == (pytest.approx(5), 4)  # a fifth down: within the quarter looked at
    assert checked(small, row, tmp_path) == 1


def test_at_the_end_of_a_step_a_lower_price_buys_no_more(tmp_path: Path) -> None:
    """A tonne gives 350: the first step is bought whole and nothing of the second. Lowering the first's price cannot buy more
    of it; it goes above 350. (The next tonne is worth 350 all the same: that is what the second step would have to cost.)"""
    plan = planned(
        tmp_path,
        **{**ONE_FEED, "prices": {"ethylene": 575, "residue": 200}},
        scenario=f"feeds: {{naphtha: {{pipeline: {{{STEPS}}}}}}}",
    )
    row = row_of(break_even_prices(plan), "naphtha", "pipeline")
    keys = ("bought", "price", "next", "walk_away", "stays_from", "stays_to", "step_up")
    assert [row[k] for k in keys] == [
        pytest.approx(4),
        300,
        pytest.approx(350),
        pytest.approx(350),
        None,
        pytest.approx(350),
        None,
    ]
    assert checked(plan, row, tmp_path) == 1


def test_a_must_take(tmp_path: Path) -> None:
    """3 kt must be taken at 650 and give 600: no price moves them. At 590 all 3.5 kt are bought, and above 600 they fall back
    to the 3 kt."""
    offer = "feeds: {{naphtha: {{spot: {{min: 3 kt, max: 3.5 kt, price: {} USD/t}}}}}}"
    held = planned(tmp_path, **ONE_FEED, scenario=offer.format(650))
    answer = break_even_prices(held)
    row = row_of(answer, "naphtha", "spot")
    keys = ("bought", "exit", "walk_away", "headroom", "stays_to", "stays_from")
    assert [row[k] for k in keys] == [3, pytest.approx(600), None, None, None, pytest.approx(600)]
    assert answer.sentences == (
        "month: naphtha spot: the planned 3.0 kt must be taken; the last tonne is worth 600.0 USD/t (today 650.0).",
    )
    assert bought(make_plan(held.scenario.with_({"feeds.naphtha.spot.price": "6500 USD/t"})), "naphtha.spot") == 3
    assert checked(held, row, tmp_path) == 1
    free = planned(tmp_path, **ONE_FEED, scenario=offer.format(590))
    row = row_of(break_even_prices(free), "naphtha", "spot")
    assert (row["bought"], row["walk_away"], row["step_down"]) == (pytest.approx(3.5), pytest.approx(600), 3)
    assert checked(free, row, tmp_path) == 1


def test_a_feed_that_cannot_be_done_without(tmp_path: Path) -> None:
    """A customer must get 2 kt of ethylene, which 5 kt of naphtha give: at 650 not a tonne more or less is bought, at any
    price. Nothing is said of a first tonne, as without any there is no plan, and parcels have nothing to be compared with."""
    plan = planned(
        tmp_path,
        **ONE_FEED,
        scenario="""
            feeds: {naphtha: {spot: {max: 8 kt, price: 650 USD/t}}}
            outlets: {ethylene_sale: {min: 2 kt}}
        """,
    )
    answer = break_even_prices(plan)
    row = row_of(answer, "naphtha", "spot")
    keys = ("entry", "exit", "walk_away", "stays_to", "step_down")
    assert [row[k] for k in keys] == [None] * 5
    assert (row["bought"], row["stays_from"]) == (pytest.approx(5), pytest.approx(600))
    assert answer.sentences == ("month: naphtha spot: the planned 5.0 kt cannot be done without at any price.",)
    assert answer.tables[1].rows == []
    assert bought(make_plan(plan.scenario.with_({"feeds.naphtha.spot.price": "6500 USD/t"})), "naphtha.spot") == pytest.approx(5)


def test_a_feed_that_cannot_be_taken(tmp_path: Path) -> None:
    """Nothing of the residue can be sold, so none of the feed can be cracked, however cheap."""
    plan = planned(
        tmp_path,
        **ONE_FEED,
        scenario="""
            feeds: {naphtha: {spot: {max: 8 kt, price: 1 USD/t}}}
            outlets: {residue_sale: {max: 0 kt}}
        """,
    )
    answer = break_even_prices(plan)
    assert row_of(answer, "naphtha", "spot")["walk_away"] is None
    assert answer.sentences == ("month: naphtha spot cannot be taken at any price.",)


def test_parcels_stop_where_no_plan_is(tmp_path: Path) -> None:
    """12 kt are offered, one furnace cracks 10: the parcel of 9 kt is told, that of 12 is not; nor one larger than offered."""
    plan = planned(tmp_path, **ONE_FEED, scenario="feeds: {naphtha: {spot: {max: 12 kt, price: 500 USD/t}}}")
    assert [row["size"] for row in break_even_prices(plan).tables[1].rows] == pytest.approx([3, 6, 9])
    assert [row["size"] for row in break_even_prices(plan, [20, 2, 0, -1]).tables[1].rows] == [2]
