"""The arrays of every shipped scenario in another solver, and a certificate that must tell right from wrong.

The other solver is scipy's interface to HiGHS, dual simplex and interior point: other code hands the matrices over, ranged
rows become pairs of one-sided ones, the sense is turned to minimise. Its values and marginals must pass our certificate, which
is what makes the sign convention the same for both: d(margin)/d(limit), ≥ 0 on a binding maximum, ≤ 0 on a binding minimum.
"""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from plants import dense_lp
from scipy.optimize import linprog
from scipy.sparse import csr_matrix, vstack

from olefinlp.answers.plan import Plan
from olefinlp.lp.certificate import Certificate, CertificateError, certify, prove
from olefinlp.lp.compile import Floats, LabelledLp
from olefinlp.lp.solver import Solution, solve

SAME_OPTIMUM = 1e-9


def by_scipy(lp: LabelledLp, method: str) -> Solution:
    """scipy's optimum of the arrays as a `Solution`.

    All limits are multiplied by one power of two first, so that scipy's absolute tolerances mean the same for a plant of
    0.02 kt as for one of 200 kt; the values are divided by it again.
    """
    written = np.concatenate([side[np.isfinite(side)] for side in (lp.row_low, lp.row_high, lp.low, lp.high)])
    scale = 2.0 ** round(math.log2(1000 / np.abs(written).max()))
    matrix = csr_matrix((lp.value, lp.index, lp.starts), copy=True, shape=(len(lp.rows), len(lp.columns)))
    equal = np.flatnonzero(lp.row_low == lp.row_high)
    most = np.flatnonzero(np.isfinite(lp.row_high) & (lp.row_low != lp.row_high))
    least = np.flatnonzero(np.isfinite(lp.row_low) & (lp.row_low != lp.row_high))
    found = linprog(
        -lp.cost,
        A_ub=vstack([matrix[most], -matrix[least]]),
        b_ub=scale * np.concatenate([lp.row_high[most], -lp.row_low[least]]),
        A_eq=matrix[equal],
        b_eq=scale * lp.row_low[equal],
        bounds=np.column_stack([scale * lp.low, scale * lp.high]),
        method=method,
        options={"primal_feasibility_tolerance": 1e-9, "dual_feasibility_tolerance": 1e-9},
    )
    assert found.status == 0, found.message
    x, dual = found.x / scale, np.zeros(len(lp.rows))
    dual[equal] = -found.eqlin.marginals
    dual[most] -= found.ineqlin.marginals[: len(most)]
    dual[least] += found.ineqlin.marginals[len(most) :]
    reduced = -(found.lower.marginals + found.upper.marginals)
    return Solution(x, lp.activity(x), dual, reduced, float(lp.cost @ x) + lp.offset, int(found.nit))


@pytest.mark.parametrize("method", ["highs-ds", "highs-ipm"])
def test_scipy_finds_the_same_optimum(every_plan: Plan, method: str) -> None:
    other = by_scipy(every_plan.lp, method)
    assert other.objective == pytest.approx(every_plan.solution.objective, rel=SAME_OPTIMUM)
    assert certify(every_plan.lp, other).holds
    assert certify(every_plan.lp, other).dual_objective == pytest.approx(other.objective, rel=1e-6)


def test_the_duals_recomputed_are_the_reduced_costs(every_plan: Plan) -> None:
    """c − Aᵀy by a matrix product of its own is what the solver calls reduced costs, to rounding."""
    lp, solution = every_plan.lp, every_plan.solution
    matrix = csr_matrix((lp.value, lp.index, lp.starts), copy=True, shape=(len(lp.rows), len(lp.columns)))
    assert matrix @ solution.x == pytest.approx(lp.activity(solution.x), abs=1e-12)
    size = np.abs(lp.cost) + abs(matrix).T @ np.abs(solution.row_dual)
    assert np.abs(lp.cost - matrix.T @ solution.row_dual - solution.reduced) == pytest.approx(
        np.zeros(len(size)), abs=1e-9 * size.max()
    )


# ---------------------------------------------------------------------------------- the certificate tells right from wrong


def moved(plan: Plan, x: Floats | None = None, dual: Floats | None = None) -> Solution:
    """The solution with other values or duals."""
    lp, solution = plan.lp, plan.solution
    x = solution.x if x is None else x
    return replace(solution, x=x, activity=lp.activity(x), row_dual=solution.row_dual if dual is None else dual)


def test_the_solution_itself_holds(every_plan: Plan) -> None:
    assert prove(every_plan.lp, every_plan.solution).tolerance == 1e-6


def test_every_corrupted_value_is_caught(every_plan: Plan) -> None:
    """Each flow of the plan in turn, 1 % too large."""
    x = every_plan.solution.x
    flows = np.flatnonzero(np.abs(x) > 1e-6 * np.abs(x).max())
    assert len(flows) > 10
    for column in flows:
        wrong = x.copy()
        wrong[column] *= 1.01
        with pytest.raises(CertificateError, match="not a proven optimum"):
            prove(every_plan.lp, moved(every_plan, x=wrong))


def test_every_corrupted_dual_is_caught(every_plan: Plan) -> None:
    """Each dual that matters in turn, its sign turned."""
    y = every_plan.solution.row_dual
    rows = np.flatnonzero(np.abs(y) > 1e-6 * np.abs(y).max())
    assert len(rows) > 5
    for row in rows:
        wrong = y.copy()
        wrong[row] *= -1
        assert not certify(every_plan.lp, moved(every_plan, dual=wrong)).holds, every_plan.lp.rows[row]


def test_a_row_broken_by_one_in_ten_thousand_is_caught(every_plan: Plan) -> None:
    """Each row in turn: its limits moved past what it comes to by 1e-4 of what moves in it; the worst row is named."""
    lp, solution = every_plan.lp, every_plan.solution
    sizes = lp.sizes(solution.x)
    for row in np.flatnonzero(sizes > 1e-6 * sizes.max()):
        high = lp.row_high.copy()
        low = lp.row_low.copy()
        high[row] = solution.activity[row] - 1e-4 * sizes[row]
        low[row] = min(low[row], high[row])
        found = certify(replace(lp, row_high=high, row_low=low), solution)
        assert found.primal > found.tolerance
        assert found.worst == ".".join(lp.rows[row])


def test_a_feasible_plan_that_is_not_the_best_is_caught(every_plan: Plan) -> None:
    """Half way to the plan that buys the least: every row holds, yet neither plan's duals, nor none at all, prove it."""
    lp, best = every_plan.lp, every_plan.solution
    buying = np.array([-1.0 if label[0] == "bought" else 0.0 for label in lp.columns])
    least = solve(replace(lp, cost=buying)).solution
    assert least is not None
    half = moved(every_plan, x=(best.x + least.x) / 2)
    assert lp.cost @ half.x + lp.offset < best.objective - 1e-3 * abs(best.objective)
    for dual in (best.row_dual, least.row_dual, np.zeros(len(lp.rows))):
        found = certify(lp, replace(half, row_dual=dual))
        assert found.primal <= found.tolerance
        assert not found.holds
    of_best, of_none = (certify(lp, replace(half, row_dual=dual)) for dual in (best.row_dual, np.zeros(len(lp.rows))))
    assert of_best.dual <= of_best.tolerance < min(of_best.complementarity, of_best.gap)
    assert of_none.dual > of_none.tolerance


def test_each_residual_alone_breaks_a_certificate() -> None:
    """The four follow from each other only when all hold, so none may be left out of the verdict; nor may one be no number."""
    good = (0.0, 1e-6, 0.0, 1e-6)
    assert Certificate(*good, dual_objective=0.0, worst="").holds
    for place in range(4):
        for wrong in (1.1e-6, math.nan):
            assert not Certificate(*good[:place], wrong, *good[place + 1 :], dual_objective=0.0, worst="").holds


def test_an_endless_margin_is_not_proven_by_a_dual_of_the_wrong_sign() -> None:
    """max x + z, x ≥ 0 as a row, z ≤ 4 as a row. At x = 0, z = 4 with duals 1 and 1 every reduced cost is 0, every dual × slack
    is 0 and 4 = 1 · 0 + 1 · 4: only the sign of the first dual, on a row without a maximum, shows that x has no end."""
    rows = {("least_limit",): (0.0, [1.0, 0.0], math.inf), ("most_limit",): (-math.inf, [0.0, 1.0], 4.0)}
    lp = dense_lp([1.0, 1.0], rows)
    x, dual = np.array([0.0, 4.0]), np.array([1.0, 1.0])
    found = certify(lp, Solution(x, lp.activity(x), dual, np.zeros(2), 4.0, 0))
    assert (found.primal, found.complementarity, found.gap) == (0, 0, 0)
    assert found.dual > found.tolerance
    assert not found.holds


# ---------------------------------------------------------------------------------- signs


def test_signs_of_duals() -> None:
    """max 5 a + 2 b − 3 c with a ≤ 4 (row), b = 1 (row), c ≥ 2 (row), a + b + c ≤ 100: one more of the maximum earns 5, of
    the fixed row 2, of the minimum −3, of the slack row nothing. Margin 5 · 4 + 2 · 1 − 3 · 2 = 16 = Σ dual × limit."""
    inf = math.inf
    rows = {
        ("most_limit",): (-inf, [1.0, 0.0, 0.0], 4.0),
        ("fixed_balance",): (1.0, [0.0, 1.0, 0.0], 1.0),
        ("least_limit",): (2.0, [0.0, 0.0, 1.0], inf),
        ("slack_limit",): (-inf, [1.0, 1.0, 1.0], 100.0),
    }
    lp = dense_lp([5.0, 2.0, -3.0], rows)
    for found in (solve(lp).solution, by_scipy(lp, "highs-ds")):
        assert found is not None
        assert found.objective == pytest.approx(16, rel=1e-12)
        assert list(found.row_dual) == pytest.approx([5, 2, -3, 0], abs=1e-12)
        assert certify(lp, found).holds


def test_signs_of_reduced_costs() -> None:
    """max 5 a − 3 b with a ≤ 4 and b ≥ 2 as bounds: +5 at the upper bound, −3 at the lower."""
    lp = dense_lp([5.0, -3.0], {("slack_limit",): (-math.inf, [1.0, 1.0], 100.0)}, [(0.0, 4.0), (2.0, 9.0)])
    found = solve(lp).solution
    assert found is not None
    assert list(found.x) == [4, 2]
    assert list(found.reduced) == [5, -3]


def test_signs_in_shipped_plans(every_plan: Plan) -> None:
    """On a row with one side only the dual has that side's sign, and it is zero where the row does not bind."""
    lp, solution = every_plan.lp, every_plan.solution
    only_most, only_least = np.isinf(lp.row_low), np.isinf(lp.row_high)
    assert solution.row_dual[only_most].min(initial=0.0) >= 0
    assert solution.row_dual[only_least].max(initial=0.0) <= 0
    room = np.minimum(lp.row_high - solution.activity, solution.activity - lp.row_low)
    assert np.abs(solution.row_dual[room > 1e-6 * np.abs(solution.activity).max()]).max(initial=0.0) == 0
