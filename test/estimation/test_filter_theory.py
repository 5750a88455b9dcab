"""Filter, gate and tracking gains against tables, closed forms and another implementation."""

from dataclasses import replace

from filterpy.kalman import KalmanFilter
import numpy as np
from numpy.testing import assert_allclose
import pytest
from scipy.linalg import solve_discrete_are

from suspended_ctrl.estimation.body import build_body
from suspended_ctrl.estimation.dynamics import ERRORS
from suspended_ctrl.estimation.filter import ErrorStateFilter
from suspended_ctrl.estimation.inputs import track, tracking_gains
from suspended_ctrl.estimation.settings import EstimatorSettings
from suspended_ctrl.physics.rotation import exponential
from suspended_ctrl.physics.values import Payload
from suspended_ctrl.rig.constants import GRAVITY_M_S2

SETTINGS = EstimatorSettings(position_noise_m=0.002, attitude_noise_rad=0.004,
                             gate_probability=1.0)
LEVEL = np.array([1.0, 0.0, 0.0, 0.0])


@pytest.mark.parametrize('index, alpha, beta', [
    # Kalata, The Tracking Index, IEEE TAES 20(2) 174-182, 1984; exact for the first two.
    (0.1, 0.36, 0.08), (1.0, 0.75, 0.5), (0.5, 0.628373, 0.304806), (5.0, 0.945040, 1.172178)])
def test_tracking_gains(index, alpha, beta):
    # Six digits.
    assert tracking_gains(index) == pytest.approx((alpha, beta), abs=5e-7)


@pytest.mark.parametrize('index', [0.1, 0.2, 0.3, 1.0, 5.0])
def test_tracking_gains_are_the_steady_kalman_gains(index):
    period = 0.02
    F, H = np.array([[1.0, period], [0.0, 1.0]]), np.array([[1.0, 0.0]])
    G = np.array([[0.5 * period**2], [period]])
    # Measurement noise one, acceleration noise by the definition of the index.
    P = solve_discrete_are(F.T, H.T, G @ G.T * (index / period**2)**2, np.eye(1))
    gain = (P @ H.T / (H @ P @ H.T + 1.0)).ravel()
    # Rounding of the solver.
    assert_allclose(tracking_gains(index), (gain[0], period * gain[1]), rtol=1e-9)


def test_tracking_settles_on_a_ramp_without_a_lag():
    alpha, beta = tracking_gains(0.3)
    z = np.zeros(4)
    for k in range(1, 400):
        track(z, np.array([0.3 * 0.02 * k, 1.0]), 0.02, alpha, beta)
    # Second-order filters follow ramps; what is left of the start shrinks by half in 3 samples.
    assert_allclose(z, [0.3 * 0.02 * 399, 1.0, 0.3, 0.0], atol=1e-12)


@pytest.mark.parametrize('probability, critical', [
    # NIST/SEMATECH e-Handbook of Statistical Methods, 1.3.6.7.4, six degrees of freedom.
    (0.90, 10.645), (0.95, 12.592), (0.99, 16.812), (0.999, 22.458)])
def test_gate_is_the_tables(probability, critical):
    settings = replace(SETTINGS, gate_probability=probability)
    spread = np.linspace(0.5, 2.0, ERRORS) * 1e-2
    direction = np.array([1.0, -2.0, 0.5])
    variance = spread[:3]**2 + settings.position_noise_m**2
    direction /= np.sqrt(direction**2 @ (1.0 / variance))
    # Rounding of the table is 5e-4 on the squared distance.
    for distance, passes in ((critical - 0.001, True), (critical + 0.001, False)):
        part = ErrorStateFilter(settings, build_body(None, Payload()))
        part.start(0.0, np.diag(spread**2))
        assert part.pose(np.sqrt(distance) * direction, LEVEL) is passes
        # Arithmetic on two matrices of six rows.
        assert part.nis == pytest.approx(distance, rel=1e-9)


class Chain:
    """Another Kalman filter of place, velocity and a force that walks."""

    def __init__(self, dt, white, walk, noise, start, pull=0.0):
        kf = KalmanFilter(dim_x=3, dim_z=1, dim_u=1)
        kf.F = np.array([[1.0, dt, dt**2 / 2.0], [0.0, 1.0, dt], [0.0, 0.0, 1.0]])
        kf.B = np.array([[dt**2 / 2.0], [dt], [0.0]])
        kf.H = np.array([[1.0, 0.0, 0.0]])
        kf.R = np.array([[noise**2]])
        # Integrals of the transition over dt, by hand.
        kf.Q = white**2 * np.array([[dt**3 / 3.0, dt**2 / 2.0, 0.0], [dt**2 / 2.0, dt, 0.0],
                                    [0.0, 0.0, 0.0]])
        kf.Q += walk**2 * np.array([[dt**5 / 20.0, dt**4 / 8.0, dt**3 / 6.0],
                                    [dt**4 / 8.0, dt**3 / 3.0, dt**2 / 2.0],
                                    [dt**3 / 6.0, dt**2 / 2.0, dt]])
        kf.P = np.diag(np.square(start))
        kf.x = np.zeros((3, 1))
        self.kf, self.pull = kf, pull

    def step(self, measured):
        self.kf.predict(u=np.array([[self.pull]]))
        self.kf.update(measured)
        return self.kf.x.ravel(), self.kf.P


def test_poses_alone_give_what_filterpy_gives():
    # Of unit mass and inertia, pushed by what nobody knows, turning about the vertical: linear.
    dt = 0.005
    start = (0.01, 0.2, 3.0)
    part = ErrorStateFilter(SETTINGS, build_body(None, Payload()))
    part.start(0.0, np.diag(np.repeat(np.square(
        (start[0], start[0], start[1], start[1], 0.01, 0.1, start[2], start[2])), 3)))
    pushed = (SETTINGS.force_white_n_s05, SETTINGS.force_walk_n_s05, SETTINGS.position_noise_m)
    twisted = (SETTINGS.torque_white_nm_s05, SETTINGS.torque_walk_nm_s05,
               SETTINGS.attitude_noise_rad)
    chains = [Chain(dt, *pushed, start, pull) for pull in (0.0, 0.0, -GRAVITY_M_S2)]
    turn = Chain(dt, *twisted, start)
    rng = np.random.default_rng(7)
    for k in range(1, 301):
        t = k * dt
        place = np.array([0.3 * t, 0.1 * np.sin(3.0 * t), -0.2 * t * t])
        place += 0.002 * rng.standard_normal(3)
        yaw = 0.4 * np.sin(2.0 * t) + 0.004 * rng.standard_normal()
        part.advance(t)
        assert part.pose(place, exponential(np.array([0.0, 0.0, yaw])))
        for i, chain in enumerate(chains):
            x, P = chain.step(place[i])
            # The same sums in another order, over hundreds of steps.
            assert_allclose(part.x[[i, 3 + i, 19 + i]], x, rtol=1e-9, atol=1e-9)
            index = [i, 6 + i, 18 + i]
            assert_allclose(part.p[np.ix_(index, index)], P, rtol=1e-9, atol=1e-12)
        x, P = turn.step(yaw)
        angle = 2.0 * np.arctan2(part.x[9], part.x[6])
        assert_allclose((angle, part.x[12], part.x[24]), x, rtol=1e-9, atol=1e-9)
        assert_allclose(part.p[np.ix_([5, 11, 23], [5, 11, 23])], P, rtol=1e-9, atol=1e-12)


def test_covariance_settles_on_the_riccati_equations_solution():
    dt = 0.005
    part = ErrorStateFilter(SETTINGS, build_body(None, Payload()))
    part.start(0.0, 1e-2 * np.eye(ERRORS))
    chain = Chain(dt, SETTINGS.force_white_n_s05, SETTINGS.force_walk_n_s05,
                  SETTINGS.position_noise_m, (1.0, 1.0, 1.0)).kf
    # Held up by what keeps it in place, it stays where the poses say that it is.
    part.x[21] = GRAVITY_M_S2
    part.linearise()
    for k in range(1, 1001):
        part.advance(k * dt)
        part.pose(np.zeros(3), LEVEL)
    before = solve_discrete_are(chain.F.T, chain.H.T, chain.Q, chain.R)
    gain = before @ chain.H.T / (chain.H @ before @ chain.H.T + chain.R)
    after = before - gain @ chain.H @ before
    for i in range(3):
        index = [i, 6 + i, 18 + i]
        # The filter forgets in about 0.1 s; what is left is the solver's rounding.
        assert_allclose(part.p[np.ix_(index, index)], after, rtol=1e-6)
