"""
Small published programmes, written in cvxpy as their sources state them.

Sources: W. Hock and K. Schittkowski, Test Examples for Nonlinear Programming Codes, LNEMS 187,
1981, by problem number; J. Nocedal and S. Wright, Numerical Optimization, 2nd ed. 2006, example
16.4.
"""

import cvxpy as cp
import numpy as np


def nocedal_wright_16_4():
    x = cp.Variable(2, name='x')
    cost = cp.square(x[0] - 1) + cp.square(x[1] - 2.5)
    return cp.Problem(cp.Minimize(cost), [
        x[0] - 2 * x[1] + 2 >= 0, -x[0] - 2 * x[1] + 6 >= 0, -x[0] + 2 * x[1] + 2 >= 0, x >= 0])


def hs21():
    x = cp.Variable(2, name='x')
    return cp.Problem(cp.Minimize(0.01 * cp.square(x[0]) + cp.square(x[1]) - 100), [
        10 * x[0] - x[1] >= 10, x[0] >= 2, x[0] <= 50, x[1] >= -50, x[1] <= 50])


def hs35():
    x = cp.Variable(3, name='x')
    p = np.array([[4.0, 2, 2], [2, 4, 0], [2, 0, 2]])
    cost = 0.5 * cp.quad_form(x, p) + np.array([-8.0, -6, -4]) @ x + 9
    return cp.Problem(cp.Minimize(cost), [x[0] + x[1] + 2 * x[2] <= 3, x >= 0])


def hs76():
    x = cp.Variable(4, name='x')
    p = np.array([[2.0, 0, -1, 0], [0, 1, 0, 0], [-1, 0, 2, 1], [0, 0, 1, 1]])
    cost = 0.5 * cp.quad_form(x, p) + np.array([-1.0, -3, 1, -1]) @ x
    return cp.Problem(cp.Minimize(cost), [
        x[0] + 2 * x[1] + x[2] + x[3] <= 5, 3 * x[0] + x[1] + 2 * x[2] - x[3] <= 4,
        x[1] + 4 * x[2] >= 1.5, x >= 0])


def hs118():
    x = cp.Variable(15, name='x')
    cost = (cp.sum(cp.multiply(np.tile([1e-4, 1e-4, 1.5e-4], 5), cp.square(x)))
            + np.tile([2.3, 1.7, 2.2], 5) @ x)
    rows = [cp.sum(x[3 * k:3 * k + 3]) >= least for k, least in enumerate([60, 50, 70, 85, 100])]
    for k in range(1, 5):
        change = x[3 * k:3 * k + 3] - x[3 * k - 3:3 * k]
        rows += [change >= -7, change <= np.array([6.0, 7, 6])]
    lower = np.concatenate(([8, 43, 3], np.zeros(12)))
    upper = np.concatenate(([21, 57, 16], np.tile([90, 120, 60], 4)))
    return cp.Problem(cp.Minimize(cost), [*rows, x >= lower, x <= upper])


def hs268():
    x = cp.Variable(5, name='x')
    p = np.array([[20394.0, -24908, -2026, 3896, 658], [-24908, 41818, -3466, -9828, -372],
                  [-2026, -3466, 3510, 2178, -348], [3896, -9828, 2178, 3030, -44],
                  [658, -372, -348, -44, 54]])
    q = np.array([18340.0, -34198, 4542, 8672, 86])
    rows = np.array([[-1.0, -1, -1, -1, -1], [10, 10, -3, 5, 4], [-8, 1, -2, -5, 3],
                     [8, -1, 2, 5, -3], [-4, -2, 3, -5, 1]])
    cost = 0.5 * cp.quad_form(x, cp.psd_wrap(p)) + q @ x + 14463
    return cp.Problem(cp.Minimize(cost), [rows @ x >= np.array([-5.0, 20, -40, 11, -30])])
