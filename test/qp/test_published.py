"""Published programmes through the compiled path: optimum, place, optimality conditions."""

import cvxpy as cp
import numpy as np
from numpy.testing import assert_allclose
import published_problems as published
import pytest
from scipy.optimize import nnls

from suspended_ctrl.qp import CompiledQp

WELL_CONDITIONED = [
    (published.nocedal_wright_16_4, 0.8, [1.4, 1.7]),
    (published.hs21, -99.96, [2, 0]),
    (published.hs35, 0.11111111, [4 / 3, 7 / 9, 4 / 9]),
    (published.hs76, -4.6818182, [3 / 11, 23 / 11, 0, 6 / 11]),
    (published.hs118, 664.82045, [8, 49, 3, 1, 56, 0, 1, 63, 6, 3, 70, 12, 5, 77, 18])]


# Optima of the Hock-Schittkowski problems as printed by I. Maros and C. Meszaros, A Repository of
# Convex Quadratic Programming Problems, 1999: eight digits, so half a unit of the eighth behind a
# leading 1 at worst.
@pytest.mark.parametrize(('build', 'optimum', 'place'), WELL_CONDITIONED)
def test_published_optimum(build, optimum, place):
    solution = CompiledQp(build()).solve()
    assert solution.optimal
    assert solution.objective == pytest.approx(optimum, rel=5e-8)
    # An active-set method solves for the place itself: rows, scaled to unit length, are kept to
    # 1e-10, and lengths, places and conditioning take three or four decades of that.
    assert_allclose(solution['x'], place, atol=1e-6)


def test_published_optimum_of_the_ill_conditioned_one():
    # Condition number 1.2e6 about an optimum of zero: the published list itself gives 5.7e-7, and
    # rounding of terms of 1e5 leaves 1e-4 of value and a hundredth of place.
    solution = CompiledQp(published.hs268()).solve()
    assert solution.optimal
    assert solution.objective == pytest.approx(0.0, abs=1e-4)
    assert_allclose(solution['x'], [1, 2, -1, 3, -4], atol=1e-2)


@pytest.mark.parametrize(('build', 'optimum', 'place'), WELL_CONDITIONED)
def test_answer_meets_the_optimality_conditions(build, optimum, place):
    compiled = CompiledQp(build())
    solution = compiled.solve()
    data = compiled.data()
    x = solution['x']
    rows = np.vstack((np.eye(len(x)), data.matrix))
    value = rows @ x
    # The solver's own feasibility is 1e-10 on rows of unit length; these are up to 10 long.
    assert (value >= data.lower - 1e-8).all()
    assert (value <= data.upper + 1e-8).all()
    # Multipliers found here, not the solver's: the gradient is a sum of active rows' normals.
    active = np.vstack((-rows[value <= data.lower + 1e-7], rows[value >= data.upper - 1e-7]))
    gradient = data.quadratic @ x + data.linear
    _, left = nnls(active.T, -gradient)
    assert left <= 1e-7 * (1.0 + np.abs(gradient).max())
    assert max(solution.primal_residual, solution.dual_residual, solution.gap) <= 1e-7


@pytest.mark.parametrize(('build', 'optimum', 'place'), WELL_CONDITIONED)
def test_second_solver_agrees(build, optimum, place):
    problem = build()
    # A splitting method asked for 1e-9 gives the objective to some 1e-7 on these.
    other = problem.solve(solver=cp.OSQP, eps_abs=1e-9, eps_rel=1e-9, max_iter=200_000)
    assert CompiledQp(build()).solve().objective == pytest.approx(other, rel=1e-6)
