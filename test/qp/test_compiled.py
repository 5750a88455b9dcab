"""Parameters of a compiled problem against cvxpy, and what cannot be solved."""

import cvxpy as cp
import numpy as np
from numpy.testing import assert_allclose
import pytest

from suspended_ctrl.qp import CompiledQp, NotDppError, NotQpError, ParameterError, Status

# Three digits below what is asked of the objective.
CLARABEL = {'solver': cp.CLARABEL, 'tol_gap_abs': 1e-10, 'tol_gap_rel': 1e-10, 'tol_feas': 1e-10}


def fitted():
    """Parameters in the least squares' matrix, the cost, a row, the sides and a weight."""
    x = cp.Variable(4, name='x')
    y = cp.Variable(2, name='y')
    design = cp.Parameter((6, 4), name='design')
    seen = cp.Parameter(6, name='seen')
    price = cp.Parameter(4, name='price')
    weight = cp.Parameter(nonneg=True, name='weight')
    row = cp.Parameter(4, name='row')
    most = cp.Parameter(4, name='most')
    cost = (cp.sum_squares(design @ x - seen) + price @ x + weight * cp.norm1(x)
            + 0.1 * cp.sum_squares(x) + cp.sum_squares(y - x[:2]) + 3.0)
    return cp.Problem(cp.Minimize(cost), [row @ x <= 1, x <= most, x >= -5, cp.sum(y) == 0.5])


def best_share():
    """Maximised, of a matrix variable, with an equality that moves."""
    share = cp.Variable((2, 3), name='share')
    gain = cp.Parameter((2, 3), name='gain')
    total = cp.Parameter(2, name='total')
    cost = cp.sum(cp.multiply(gain, share)) - cp.sum_squares(share)
    return cp.Problem(cp.Maximize(cost), [cp.sum(share, axis=1) == total, share >= 0])


def drawn(rng, problem):
    values = {}
    for parameter in problem.parameters():
        value = rng.normal(size=parameter.shape)
        # Sides and totals above zero keep every draw feasible.
        positive = parameter.is_nonneg() or parameter.name() in ('most', 'total')
        values[parameter.name()] = np.abs(value) + 0.1 if positive else value
    return values


@pytest.mark.parametrize('build', [fitted, best_share])
def test_random_parameters_give_what_cvxpy_gives(build):
    rng = np.random.default_rng(3)
    problem = build()
    compiled = CompiledQp(problem)
    for _ in range(15):
        values = drawn(rng, problem)
        solution = compiled.solve(values)
        for parameter in problem.parameters():
            parameter.value = values[parameter.name()]
        expected = problem.solve(**CLARABEL)
        assert solution.optimal
        # The bound asked for; one more where the optimum happens to be near zero.
        assert solution.objective == pytest.approx(expected, rel=1e-6, abs=1e-8)
        for variable in problem.variables():
            # Curvature is at least 0.2: a gap of 1e-9 leaves 1e-4.
            assert_allclose(solution[variable.name()], variable.value, atol=1e-4)


def test_history_does_not_change_the_answer():
    rng = np.random.default_rng(4)
    problem = fitted()
    warm = CompiledQp(problem)
    draws = [drawn(rng, problem) for _ in range(10)]
    for values in draws:
        warm.solve(values)
    cold = CompiledQp(fitted()).solve(draws[0])
    # Two active-set paths to one minimum differ by the accepted residual.
    assert warm.solve(draws[0]).objective == pytest.approx(cold.objective, rel=1e-7)


def boxed():
    x = cp.Variable(2, name='x')
    lower, upper = cp.Parameter(2, name='lower'), cp.Parameter(2, name='upper')
    total = cp.Parameter(name='total')
    return cp.Problem(cp.Minimize(cp.sum_squares(x)), [
        lower <= x, x <= upper, x[0] + x[1] >= total])


@pytest.mark.parametrize('bad', [
    {'lower': [2.0, 0.0]},  # above its upper bound
    {'total': 3.0},  # more than both upper bounds together
])
def test_no_solution_is_flagged_and_never_the_last_one(bad):
    compiled = CompiledQp(boxed())
    good = {'lower': [0.0, 0.0], 'upper': [1.0, 1.0], 'total': 1.0}
    assert_allclose(compiled.solve(good)['x'], 0.5, atol=1e-9)
    solution = compiled.solve(bad)
    assert solution.status is Status.INFEASIBLE
    assert solution.values == {}
    assert np.isnan(solution.objective)
    assert solution.problem is not None
    with pytest.raises(KeyError):
        solution['x']
    again = compiled.solve(good | {'total': 1.6})
    assert_allclose(again['x'], 0.8, atol=1e-9)


def test_unbounded_is_flagged():
    x = cp.Variable(2, name='x')
    solution = CompiledQp(cp.Problem(cp.Minimize(cp.square(x[0]) - x[1]), [x[1] >= 0])).solve()
    assert not solution.optimal
    assert solution.values == {}


@pytest.mark.parametrize(('values', 'says'), [
    ({'total': np.nan}, 'total'), ({'upper': [np.inf, 1.0]}, 'upper'),
    ({'lower': [0.0, 0.0, 0.0]}, 'shape'), ({'uper': [1.0, 1.0]}, 'uper')])
def test_bad_parameter_raises_and_changes_nothing(values, says):
    compiled = CompiledQp(boxed())
    compiled.set({'lower': [0.0, 0.0], 'upper': [1.0, 1.0], 'total': 1.0})
    with pytest.raises(ParameterError, match=says):
        compiled.solve({'lower': [0.7, 0.0]} | values)
    assert_allclose(compiled.solve()['x'], 0.5, atol=1e-9)


def test_parameter_without_a_value_and_wrong_sign():
    with pytest.raises(ParameterError, match='lower'):
        CompiledQp(boxed()).solve({'upper': [1.0, 1.0], 'total': 1.0})
    x = cp.Variable(name='x')
    weight = cp.Parameter(nonneg=True, name='weight')
    compiled = CompiledQp(cp.Problem(cp.Minimize(weight * cp.square(x) + x), [x >= -1, x <= 1]))
    with pytest.raises(ParameterError, match='weight'):
        compiled.solve({'weight': -1.0})


def _x(**more):
    return cp.Variable(2, name='x', **more)


def _product_of_parameters():
    a, b = cp.Parameter(name='a', nonneg=True), cp.Parameter(name='b', nonneg=True)
    return cp.Problem(cp.Minimize(a * b * cp.sum_squares(_x())))


@pytest.mark.parametrize(('build', 'error'), [
    (_product_of_parameters, NotDppError),
    (lambda: cp.Problem(cp.Minimize(cp.sum(cp.exp(_x())))), NotQpError),
    (lambda: cp.Problem(cp.Minimize(cp.norm2(_x() - 1))), NotQpError),
    (lambda: cp.Problem(cp.Maximize(cp.sum_squares(_x()))), NotQpError),
    (lambda: cp.Problem(cp.Minimize(cp.sum_squares(_x(integer=True)))), NotQpError)])
def test_what_is_no_parametrised_quadratic_programme_is_refused(build, error):
    with pytest.raises(error):
        CompiledQp(build())
