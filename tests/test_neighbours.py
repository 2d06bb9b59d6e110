"""A program solved again around its optimum: independent of order, put back each time, proven each time, same as cold."""

from __future__ import annotations

import math
import random
import subprocess
import sys
from collections.abc import Callable, Iterator
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from conftest import ROOT
from plants import dense_lp

from olefinlp.answers.break_even import break_even_prices
from olefinlp.answers.default import default_answers
from olefinlp.answers.plan import Plan, make_plan
from olefinlp.answers.room import room_to_move
from olefinlp.answers.worth import worth_of_limits
from olefinlp.lp import neighbours as neighbours_module
from olefinlp.lp.certificate import CertificateError
from olefinlp.lp.compile import Floats, LabelledLp
from olefinlp.lp.neighbours import MARGIN_ROW, NeighbourError, Neighbours, Optimum
from olefinlp.lp.solver import Status, solve

Question = dict[str, Any]

INF = math.inf


def small() -> LabelledLp:
    """max 3 a + 2 b with a + b ≤ 4, a − b ≤ 2, b ≤ 3 as a bound: a = 3, b = 1, margin 11, duals 2.5 and 0.5."""
    rows = {("sum_limit",): (-INF, [1.0, 1.0], 4.0), ("difference_limit",): (-INF, [1.0, -1.0], 2.0)}
    return dense_lp([3.0, 2.0], rows, [(0.0, INF), (0.0, 3.0)])


@pytest.fixture(scope="module")
def questions(march: Plan) -> list[Question]:
    """All that the answers around March ask, as the arguments of `Neighbours.solve`."""
    plan = make_plan(march.scenario)
    asked: list[Question] = []
    there = plan.neighbours.solve

    def kept(**question: Any) -> Optimum | None:
        asked.append(question)
        return there(**question)

    plan.neighbours.solve = kept  # type: ignore[method-assign]
    for answer in (break_even_prices, worth_of_limits, room_to_move):
        answer(plan)
    assert len(asked) > 250
    return asked


def as_asked(neighbours: Neighbours, question: Question) -> LabelledLp:
    """The program of one question, written out anew."""
    lp = neighbours.lp
    row_low, row_high, low, high = (a.copy() for a in (lp.row_low, lp.row_high, lp.low, lp.high))
    for row, pair in (question.get("rows") or {}).items():
        row_low[row], row_high[row] = pair
    for column, pair in (question.get("columns") or {}).items():
        low[column], high[column] = pair
    cost = question.get("cost")
    return replace(lp, row_low=row_low, row_high=row_high, low=low, high=high, cost=lp.cost if cost is None else cost)


# ---------------------------------------------------------------------------------- right


def test_a_small_program_by_hand() -> None:
    """As in `small`; with a ≥ 0 free of price, max 2 b gives b = 3: 6. With the sum at most 6 a = 4, b = 2 gives 16. With b
    held at 2, a = 2: 10. A sum of at least 9 is more than a ≤ b + 2, b ≤ 3 allow."""
    around = Neighbours(small())
    assert around.base.objective == pytest.approx(11)
    assert list(around.base.row_dual) == pytest.approx([2.5, 0.5, 0])
    by_price = around.solve(cost=np.array([0.0, 2.0]))
    wider = around.solve(rows={0: (-INF, 6.0)})
    held = around.solve(columns={1: (2.0, 2.0)})
    assert by_price is not None and wider is not None and held is not None
    assert (by_price.objective, by_price.x[1]) == pytest.approx((6, 3))
    assert (wider.objective, *wider.x) == pytest.approx((16, 4, 2))
    assert (held.objective, *held.x, held.reduced_cost(1)) == pytest.approx((10, 2, 2, -1))
    assert around.solve(rows={0: (9.0, INF)}) is None
    assert around.solves == 5


def test_the_margin_row_holds_the_margin() -> None:
    """Of all plans worth at least 10 the least a is 2 (a = 2, b = 2), the most 3 (b = 1/2 … 1 gives a ≤ b + 2 ≤ 3)."""
    around = Neighbours(small())
    assert around.lp.rows[around.margin_row] == MARGIN_ROW
    held = {around.margin_row: (10.0, INF)}
    ends = [around.solve(cost=np.array([sign, 0.0]), rows=held) for sign in (-1.0, 1.0)]
    assert [end.x[0] for end in ends if end] == pytest.approx([2, 3])


def test_a_sample_solved_cold_is_the_same(march: Plan, questions: list[Question]) -> None:
    """Each seventh question from nothing: the same best value, and the same plan where its duals say it is the only one."""
    for question in questions[::7]:
        warm, lp = march.neighbours.solve(**question), as_asked(march.neighbours, question)
        cold = solve(lp).solution
        assert warm is not None and cold is not None
        moved = float(np.abs(lp.cost) @ np.abs(cold.x))
        assert warm.objective == pytest.approx(cold.objective, abs=1e-9 * moved)
        assert warm.x == pytest.approx(cold.x, abs=1e-6) or not Neighbours(lp).only_one()


def test_what_it_gives_is_of_the_asked_program(march: Plan, questions: list[Question]) -> None:
    """Reduced costs and margin are those of the asked prices and limits, not of the base."""
    for question in questions[::29]:
        found, lp = march.neighbours.solve(**question), as_asked(march.neighbours, question)
        assert found is not None
        reduced = lp.cost - lp.gathered(found.row_dual)
        assert [found.reduced_cost(j) for j in range(len(lp.columns))] == pytest.approx(list(reduced), abs=1e-9)
        assert found.objective == pytest.approx(float(lp.cost @ found.x) + lp.offset, rel=1e-12)


# ---------------------------------------------------------------------------------- order


def same(a: Optimum | None, b: Optimum | None) -> bool:
    """To the last bit."""
    if a is None or b is None:
        return a is b
    return a.objective == b.objective and np.array_equal(a.x, b.x) and np.array_equal(a.row_dual, b.row_dual)


def test_order_changes_nothing(march: Plan, questions: list[Question]) -> None:
    """The same questions in order, shuffled on the same program with impossible ones between, and alone on a new one."""
    around = Neighbours(march.lp)
    first = [around.solve(**question) for question in questions]
    order = list(range(len(questions)))
    random.Random(7).shuffle(order)
    row = next(i for i, label in enumerate(around.lp.rows) if label[0] == "outlet_limit")
    for count, i in enumerate(order):
        if count % 20 == 0:
            assert around.solve(rows={row: (1e6, INF)}) is None
        assert same(around.solve(**questions[i]), first[i]), i
    for i in order[:10]:
        assert same(Neighbours(march.lp).solve(**questions[i]), first[i])


def test_proving_together_changes_nothing(march: Plan, questions: list[Question]) -> None:
    around = Neighbours(march.lp)
    together = around.together(lambda: [around.solve(**question) for question in questions[:60]])
    assert all(same(around.solve(**q), found) for q, found in zip(questions[:60], together, strict=True))


# ---------------------------------------------------------------------------------- put back


def loaded(around: Neighbours) -> tuple[list[float], ...]:
    """What the solver holds."""
    lp = around.solver.highs.getLp()
    return (
        list(lp.col_cost_),
        list(lp.col_lower_),
        list(lp.col_upper_),
        list(lp.row_lower_),
        list(lp.row_upper_),
        list(lp.a_matrix_.value_),
    )


def test_prices_and_limits_are_put_back(march: Plan, questions: list[Question]) -> None:
    around = Neighbours(march.lp)
    before, arrays = loaded(around), [a.copy() for a in (around.lp.cost, around.lp.row_low, around.lp.row_high, around.lp.high)]
    for question in questions[::5]:
        around.solve(**question)
        assert loaded(around) == before
    assert around.solve(rows={0: (1e9, INF)}) is None
    assert loaded(around) == before
    for kept, now in zip(arrays, (around.lp.cost, around.lp.row_low, around.lp.row_high, around.lp.high), strict=True):
        assert np.array_equal(kept, now)


def endless(around: Neighbours) -> None:
    around.solve(cost=np.array([3.0, 2.0]), rows={0: (-INF, INF)}, columns={1: (0.0, INF)})


def unproven(around: Neighbours) -> None:
    around.solve(rows={0: (-INF, 6.0)}, cost=np.array([1.0, 2.0]), columns={0: (1.0, 2.0)})


@pytest.fixture
def wrong_certificates(monkeypatch: pytest.MonkeyPatch) -> Iterator[list[int]]:
    """Certificates that never hold; the list has how many were made at once."""
    made, there = [], neighbours_module.certificates

    def wrong(lp: LabelledLp, solved: Any) -> Any:
        made.append(len(solved))
        return [replace(certificate, gap=1e-3) for certificate in there(lp, solved)]

    with monkeypatch.context() as patch:
        patch.setattr(neighbours_module, "certificates", wrong)
        yield made


@pytest.mark.parametrize(("ask", "error"), [(endless, NeighbourError), (unproven, CertificateError)])
def test_put_back_after_an_error(
    ask: Callable[[Neighbours], None], error: type[Exception], wrong_certificates: list[int]
) -> None:
    around = Neighbours(small())
    before = loaded(around)
    with pytest.raises(error):
        ask(around)
    assert loaded(around) == before


def test_as_good_as_new_after_an_error() -> None:
    around = Neighbours(small())
    with pytest.raises(NeighbourError, match="Unbounded"):
        endless(around)
    assert same(around.solve(columns={1: (2.0, 2.0)}), Neighbours(small()).solve(columns={1: (2.0, 2.0)}))


# ---------------------------------------------------------------------------------- no plan, no end, no proof


@pytest.mark.parametrize(
    "lp",
    [
        dense_lp([1.0], {("sum_limit",): (-INF, [1.0], -1.0)}),
        dense_lp([1.0], {("sum_limit",): (0.0, [1.0], INF)}),
    ],
    ids=["impossible", "endless"],
)
def test_a_base_without_an_optimum_is_an_error(lp: LabelledLp) -> None:
    assert solve(lp).status in (Status.INFEASIBLE, Status.UNBOUNDED)
    with pytest.raises(NeighbourError, match="the base has no optimum"):
        Neighbours(lp)


def test_every_optimum_is_proven(monkeypatch: pytest.MonkeyPatch, march: Plan, questions: list[Question]) -> None:
    """One certificate each, alone or together; all of them before the answer is given."""
    around, made, there = Neighbours(march.lp), [], neighbours_module.certificates
    monkeypatch.setattr(neighbours_module, "certificates", lambda lp, solved: made.append(len(solved)) or there(lp, solved))
    for question in questions[:5]:
        around.solve(**question)
    assert made == [1] * 5
    made.clear()

    def within() -> int:
        for question in questions[:37]:
            around.solve(**question)
        around.together(lambda: around.solve(**questions[0]))  # within another nothing ends early
        return sum(made)

    assert around.together(within) < 38
    assert sum(made) == 38
    assert max(made) > 1
    around.solve(**questions[0])
    assert sum(made) == 39


def test_the_certificate_is_of_the_asked_program(monkeypatch: pytest.MonkeyPatch) -> None:
    """A solver that sticks to the base's optimum whatever is asked is caught by each kind of change."""
    around = Neighbours(small())
    stuck = (around.base.x, around.base.row_dual)
    monkeypatch.setattr(around, "_restarted", lambda: stuck)
    monkeypatch.setattr(around, "_outcome", lambda: stuck)
    assert around.solve() is not None
    for question in ({"cost": np.array([0.0, 2.0])}, {"rows": {0: (-INF, 3.5)}}, {"columns": {1: (2.0, 2.0)}}):
        with pytest.raises(CertificateError, match="not a proven optimum"):
            around.solve(**question)
        with pytest.raises(CertificateError, match="not a proven optimum"):
            around.together(lambda question=question: around.solve(**question))


def test_a_warm_start_slightly_off_is_solved_again_from_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    """At once where each is proven at once; where they are proven together the whole question is asked again."""
    around = Neighbours(small())
    right, restarted = around.solve(rows={0: (-INF, 6.0)}), around._restarted

    def off() -> tuple[Floats, Floats] | None:
        found = restarted()
        assert found is not None
        return found[0] * (1 + 1e-4), found[1]

    monkeypatch.setattr(around, "_restarted", off)
    asked: list[int] = []

    def question() -> Optimum | None:
        asked.append(1)
        return around.solve(rows={0: (-INF, 6.0)})

    for found in (question(), around.together(question)):
        assert found is not None and right is not None
        assert found.x == pytest.approx(right.x)
    assert len(asked) == 3


def test_an_unproven_optimum_is_an_error(wrong_certificates: list[int]) -> None:
    """The warm one and the one from nothing, each by itself; together first, then once more each by itself."""
    around = Neighbours(small())
    with pytest.raises(CertificateError):
        around.solve()
    assert wrong_certificates == [1, 1]
    with pytest.raises(CertificateError):
        around.together(lambda: [around.solve(), around.solve()])
    assert wrong_certificates == [1, 1, 2, 1, 1]


def test_an_error_within_leaves_nothing_waiting(wrong_certificates: list[int]) -> None:
    """What was asked before an error of its own is given up, and the next question is proven at once again."""
    around = Neighbours(small())

    def broken() -> None:
        around.solve()
        raise KeyError

    with pytest.raises(KeyError):
        around.together(broken)
    assert wrong_certificates == []
    with pytest.raises(CertificateError):
        around.solve()


def test_a_certificate_that_is_no_number_does_not_hold(march: Plan) -> None:
    for name in ("primal", "dual", "complementarity", "gap"):
        assert not replace(march.certificate, **{name: math.nan}).holds


def test_the_default_answers_of_a_month_take_few_solves(march: Plan) -> None:
    """Under 400, so that no one has to do without them."""
    plan = make_plan(march.scenario)
    default_answers(plan)
    assert 200 < plan.neighbours.solves < 400


PRINTING = """
import dataclasses, sys, threading
import numpy as np
from olefinlp import read_scenario
from olefinlp.lp.compile import program_of
from olefinlp.lp.solver import Solver, Status

lp = program_of(read_scenario({scenario!r}).case)
never = dataclasses.replace(lp, low=np.where(np.arange(len(lp.columns)) == 0, 1e6, lp.low))
never = dataclasses.replace(never, high=np.where(np.arange(len(lp.columns)) == 0, 1e6, lp.high))
done = threading.Event()

def solve():
    while not done.is_set():
        assert Solver(never).solve().status is Status.INFEASIBLE

workers = [threading.Thread(target=solve) for _ in range(2)]
for worker in workers:
    worker.start()
for number in range(2000):
    print(number, flush=True)
done.set()
for worker in workers:
    worker.join()
"""


def test_what_others_print_while_programs_are_solved_arrives_and_nothing_else() -> None:
    """No line of another thread is lost with the solver's banner, and the banner is not among them."""
    code = PRINTING.format(scenario=str(ROOT / "scenarios" / "thermal_cracker.yaml"))
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False, cwd=ROOT, timeout=120)
    assert done.returncode == 0, done.stderr
    assert done.stdout.splitlines() == [str(number) for number in range(2000)]
