"""The process model against finite differences, and its noise against Van Loan's method."""

from filterpy.common import Q_continuous_white_noise
import numpy as np
import pytest
from scipy.linalg import expm

from suspended_ctrl.estimation.body import build_body
from suspended_ctrl.estimation.covariance import add_noise, DENSITIES, spread
from suspended_ctrl.estimation.dynamics import (
    ERRORS,
    evaluate,
    FELT,
    inject,
    INPUTS,
    linearise,
    move,
    STATES,
)
from suspended_ctrl.physics.rotation import conjugate, logarithm, multiply, normalised
from suspended_ctrl.physics.values import Payload
from suspended_ctrl.rig.file import load_rig


def difference(after, before):
    out = np.empty(ERRORS)
    out[0:3], out[6:9] = after[0:3] - before[0:3], after[3:6] - before[3:6]
    out[3:6] = logarithm(multiply(conjugate(before[6:10]), after[6:10]))
    out[9:24] = after[10:25] - before[10:25]
    return out


@pytest.fixture(name='moving')
def _moving():
    rng = np.random.default_rng(3)
    body = build_body(load_rig('bay_head'), Payload(0.6, np.array([0.05, -0.04, -0.25])))
    x = rng.normal(size=STATES) * 0.3
    x[:3] += (0.1, -0.2, 2.4)
    x[6:10] = normalised(np.array([1.0, 0.1, -0.15, 0.2]))
    u = np.zeros(INPUTS)
    u[:3], u[3:6] = (0.2, 0.1, 6.5), (0.2, -0.1, 0.05)
    u[6:12] = rng.normal(size=6)
    # Eight rotors of 6e-5 kg m^2 at 900 rad/s have 0.05 N m s each, most of it cancels.
    u[12:15] = 0.05 * rng.normal(size=3)
    return x, u, body.vector


def test_jacobian_of_the_accelerations_is_the_finite_difference(moving):
    x, u, c = moving
    s, j, r = np.empty(7), np.empty((6, ERRORS)), np.empty((3, 3))
    linearise(x, u, c, 0.0, s, j, r)
    assert s[6] > 10.0, 'a slack tether would leave its derivatives untested'
    h = 1e-6
    for k in range(ERRORS):
        ends = []
        for sign in (1.0, -1.0):
            error = np.zeros(ERRORS)
            error[k] = sign * h
            y, out = x.copy(), np.empty(7)
            inject(y, error)
            evaluate(y, u, c, 0.0, out)
            ends.append(out[:6])
        # Central differences: truncation 1e-12 of third derivatives, rounding 1e-9.
        np.testing.assert_allclose((ends[0] - ends[1]) / (2.0 * h), j[:, k], atol=1e-6)


def test_transition_is_the_finite_difference_of_the_motion(moving):
    x, u, c = moving
    dt, h = 0.0025, 1e-6
    s, j, r = np.empty(7), np.empty((6, ERRORS)), np.empty((3, 3))
    linearise(x, u, c, 0.0, s, j, r)

    def moved(error):
        y = x.copy()
        inject(y, error)
        move(y, u, c, 0.0, dt, np.zeros(FELT))
        return y

    middle = moved(np.zeros(ERRORS))
    columns, carried = np.empty((ERRORS, ERRORS)), np.empty((ERRORS, ERRORS))
    for k in range(ERRORS):
        error = np.zeros(ERRORS)
        error[k] = h
        columns[:, k] = (difference(moved(error), middle)
                         - difference(moved(-error), middle)) / (2.0 * h)
        # The stamp monitor's vector goes through the same transition.
        lag = np.zeros(ERRORS)
        lag[k] = 1.0
        spread(np.zeros((ERRORS, ERRORS)), lag, r, j, s, x[10:13], c, dt, np.zeros(DENSITIES),
               np.empty((12, ERRORS)))
        carried[:, k] = lag
    # Left out of the rows of rates: dt**2 / 2 times damping of about 1/s times stiffness of
    # tens per s^2.
    np.testing.assert_allclose(carried, columns, atol=2e-4)
    p = np.diag(np.linspace(1.0, 2.0, ERRORS))
    want = carried @ p @ carried.T
    # The same sums in another order: rounding alone.
    spread(p, np.zeros(ERRORS), r, j, s, x[10:13], c, dt, np.zeros(DENSITIES),
           np.empty((12, ERRORS)))
    np.testing.assert_allclose(p, want, rtol=1e-12, atol=1e-14)
    assert (p == p.T).all()


def test_noise_is_van_loans():
    # Van Loan, IEEE TAC 23(3), 1978: both chains of three integrators at once.
    rng = np.random.default_rng(5)
    c = build_body(load_rig('bay_head'), Payload()).vector
    root = rng.normal(size=(3, 3))
    n = np.concatenate(((root @ root.T).ravel(), (root.T @ root).ravel(),
                        [1.0, 2.0, 3.0, 0.4, 0.5, 0.6, 0.7, 0.8]))
    a, q = np.zeros((ERRORS, ERRORS)), np.zeros((ERRORS, ERRORS))
    a[0:3, 6:9] = a[3:6, 9:12] = np.eye(3)
    a[6:9, 18:21] = np.eye(3) / c[0]
    a[9:12, 21:24] = c[10:19].reshape(3, 3)
    q[6:9, 6:9], q[9:12, 9:12] = n[:9].reshape(3, 3), n[9:18].reshape(3, 3)
    q[18:21, 18:21], q[21:24, 21:24] = np.diag(n[18:21]), np.diag(n[21:24])
    q[12:15, 12:15], q[15:18, 15:18] = n[24] * np.eye(3), n[25] * np.eye(3)
    dt = 0.02
    block = expm(dt * np.block([[-a, q], [np.zeros_like(a), a.T]]))
    p = np.zeros((ERRORS, ERRORS))
    add_noise(p, n, c, dt)
    # Rounding of the exponential; entries down to dt**5 / 20 = 1.6e-10.
    np.testing.assert_allclose(p, block[ERRORS:, ERRORS:].T @ block[:ERRORS, ERRORS:], rtol=1e-9,
                               atol=1e-15)


@pytest.mark.parametrize('dt', [0.005, 0.1, 1.0])
def test_white_noise_is_filterpys_continuous_model(dt):
    # Van Loan: q [[dt^3/3, dt^2/2], [dt^2/2, dt]], and not the piecewise constant model.
    want = Q_continuous_white_noise(2, dt, 0.7)
    body = np.zeros(28)
    body[0] = 1.0
    n, p = np.zeros(DENSITIES), np.zeros((ERRORS, ERRORS))
    n[0] = n[9] = 0.7
    add_noise(p, n, body, dt)
    for first, second in ((0, 6), (3, 9)):
        # The same closed form: rounding alone.
        np.testing.assert_allclose(p[np.ix_((first, second), (first, second))], want, rtol=1e-14)
    np.testing.assert_allclose(want, 0.7 * np.array([[dt**3 / 3.0, dt**2 / 2.0],
                                                     [dt**2 / 2.0, dt]]), rtol=1e-14)
