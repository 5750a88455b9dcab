"""The law's error dynamics against closed forms, its bandwidth limit against python-control."""

import control
import numpy as np
from numpy.testing import assert_allclose
import pytest

from suspended_ctrl.control.bandwidth import (
    BandwidthError,
    checked_bandwidth,
    crossover_ratio,
    highest_bandwidth_hz,
    PHASE_MARGIN_RAD,
    UNKNOWN_SHARE,
)
from suspended_ctrl.control.computed_torque import ComputedTorque
from suspended_ctrl.control.laws import LAWS
from suspended_ctrl.control.values import LawInputs
from suspended_ctrl.physics.lead import PlatformState
from suspended_ctrl.physics.loaded_body import loaded_body
from suspended_ctrl.physics.reference import held, ReferencePoint
from suspended_ctrl.physics.registry import UnknownNameError
from suspended_ctrl.physics.rigid_body import acceleration, point_acceleration
from suspended_ctrl.physics.rotation import exponential, multiply, rotate
from suspended_ctrl.physics.values import Estimate, Payload
from suspended_ctrl.rig.file import load_rig

LEVEL = np.array([1.0, 0, 0, 0])
ZERO = np.zeros(3)


@pytest.fixture(name='rig', scope='module')
def _rig():
    return load_rig('bay_head')


def inputs(rig, state, point, payload=None, force=ZERO, torque=ZERO):
    payload = payload or Payload()
    estimate = Estimate(1.0, *state, np.eye(12), force, torque, payload, 1.0, True)
    felt = PlatformState(1.04, *state)
    return LawInputs(estimate, felt, point, point.acceleration_map_m_s2,
                     held(ZERO, LEVEL, 0.0), loaded_body(rig, payload), ZERO, None, None, False)


def resulting(rig, wanted):
    """Accelerations of the origin that the law's wrench gives with the model true."""
    law = ComputedTorque(rig, 1.6, 0.9)
    body = wanted.body
    wrench = law.step(1.0, wanted).vector()
    wrench[3:] -= np.cross(body.centre_m - body.nominal_centre_m, wrench[:3])
    quaternion, rate = wanted.felt.quaternion_wxyz, wanted.felt.rate_body_rad_s
    turned = np.concatenate((rotate(quaternion * [1, -1, -1, -1],
                                    wanted.estimate.disturbance_force_map_n),
                             rotate(quaternion * [1, -1, -1, -1],
                                    wanted.estimate.disturbance_torque_map_nm)))
    out = acceleration(body.mass_kg, body.inertia_kg_m2, body.inertia_inverse, quaternion, rate,
                       wrench + turned)
    return point_acceleration(out[:3], quaternion, rate, out[3:], -body.centre_m), out[3:]


@pytest.mark.parametrize('payload', [None, Payload(0.6, np.array([0.05, 0, -0.25]))])
def test_position_error_obeys_the_second_order_equation(rig, payload):
    rng = np.random.default_rng(8)
    natural, damping = 2 * np.pi * 1.6, 2 * 0.9 * 2 * np.pi * 1.6
    for _ in range(20):
        p, v, w, goal, goal_v, goal_a, push, twist = rng.normal(size=(8, 3))
        state = (p, v, exponential(rng.normal(size=3)), w)
        point = ReferencePoint(goal, goal_v, goal_a, exponential(0.3 * rng.normal(size=3)), ZERO,
                               ZERO)
        linear, _ = resulting(rig, inputs(rig, state, point, payload, push, twist))
        assert_allclose(linear, goal_a + damping * (goal_v - v) + natural ** 2 * (goal - p),
                        atol=1e-9)


def test_attitude_error_decays_as_second_order(rig):
    # Small turn about z while the reference turns too: e'' + 2 zeta w e' + w^2 e = 0 for its sine.
    natural, damping = 2 * np.pi * 1.6, 2 * 0.9 * 2 * np.pi * 1.6
    desired = exponential(np.array([0.2, 0.1, -0.3]))
    angle, rate = 0.01, 0.05
    turn = np.array([0, 0, 0.4])
    state = (ZERO, ZERO, multiply(desired, exponential(np.array([0, 0, angle]))),
             turn + np.array([0, 0, rate]))
    point = ReferencePoint(ZERO, ZERO, ZERO, desired, turn, np.array([0, 0, 0.7]))
    _, angular = resulting(rig, inputs(rig, state, point))
    assert_allclose(angular, [0, 0, 0.7 - damping * rate - natural ** 2 * np.sin(angle)],
                    atol=1e-9)


@pytest.mark.parametrize('damping_ratio', [0.5, 0.7071, 0.9, 1.2])
def test_highest_bandwidth_keeps_the_margin_that_python_control_finds(damping_ratio):
    lag = 0.04
    natural = 2 * np.pi * highest_bandwidth_hz(lag, damping_ratio)
    loop = control.tf([2 * damping_ratio * natural, natural ** 2], [1, 0, 0])
    _, margin, _, crossover = control.margin(loop)
    assert_allclose(crossover, crossover_ratio(damping_ratio) * natural, rtol=1e-6)
    left = np.deg2rad(margin) - crossover * UNKNOWN_SHARE * lag
    assert_allclose(left, PHASE_MARGIN_RAD, atol=1e-6)


def test_what_the_lag_cannot_carry_is_refused_with_what_it_can(rig):
    highest = highest_bandwidth_hz(0.04, 0.9)
    with pytest.raises(BandwidthError, match=f'at most {highest:.2f} Hz'):
        ComputedTorque(rig, 1.01 * highest, 0.9)
    ComputedTorque(rig, 0.99 * highest, 0.9)


@pytest.mark.parametrize(('bandwidth', 'damping'), [
    (0.0, 0.9), (-1.0, 0.9), (np.nan, 0.9), (np.inf, 0.9), (1.0, 0.1), (1.0, np.nan)])
def test_numbers_out_of_range_are_refused(bandwidth, damping):
    with pytest.raises(BandwidthError):
        checked_bandwidth(bandwidth, damping, 0.04)


def test_unknown_law_names_those_there_are():
    with pytest.raises(UnknownNameError, match='computed_torque'):
        LAWS.maker('guess')
