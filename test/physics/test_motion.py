"""Equations of motion against closed forms and pinocchio."""

import numpy as np
from numpy.testing import assert_allclose
import pinocchio
import pytest
from scipy.integrate import solve_ivp

from suspended_ctrl.physics.constants import GRAVITY_M_S2
from suspended_ctrl.physics.equilibrium import anchor_at_zero, equilibrium
from suspended_ctrl.physics.loaded_body import loaded_body
from suspended_ctrl.physics.rigid_body import acceleration, point_acceleration, wrench_for
from suspended_ctrl.physics.rotation import cross, exponential, matrix, rotate
from suspended_ctrl.physics.tether import hook_force, tether_wrench
from suspended_ctrl.physics.values import Payload
from suspended_ctrl.rig.file import load_rig

LEVEL = np.array([1.0, 0, 0, 0])
INERTIA = np.diag([1.0, 2.0, 3.0])


def test_torque_free_symmetric_top_precesses():
    # Goldstein, Classical Mechanics, 3rd ed., section 5.6: at rate (I3 - I1) / I1 * w3.
    inertia = np.diag([1.0, 1.0, 2.0])
    inverse = np.linalg.inv(inertia)

    def rates(_, rate):
        return acceleration(1.0, inertia, inverse, LEVEL, rate, np.zeros(6))[3:]

    out = solve_ivp(rates, (0, 7.3), [0.1, 0, 3.0], rtol=1e-12, atol=1e-14)
    assert_allclose(out.y[:, -1], [0.1 * np.cos(21.9), 0.1 * np.sin(21.9), 3.0], atol=1e-8)
    assert_allclose(out.y[:2, -1], [-0.0995849, 0.0091022], atol=1e-7)


def test_intermediate_axis_grows_at_the_published_rate():
    # Landau and Lifshitz, Mechanics, section 37: I = (1, 2, 3), w2 = 2: 1.154701 1/s.
    inverse = np.linalg.inv(INERTIA)
    size = 1e-6

    def rates(_, rate):
        return acceleration(1.0, INERTIA, inverse, LEVEL, rate, np.zeros(6))[3:]

    start = [size * np.sqrt(3) / 2, 2.0, -size / 2]
    out = solve_ivp(rates, (0, 4.0), start, rtol=1e-12, atol=1e-16)
    grown = np.hypot(out.y[0, -1], out.y[2, -1]) / size
    assert_allclose(abs(np.log(grown)) / 4.0, 1.154701, atol=1e-6)


def test_inverse_dynamics_agrees_with_pinocchio():
    rng = np.random.default_rng(17)
    model = pinocchio.Model()
    joint = model.addJoint(0, pinocchio.JointModelFreeFlyer(), pinocchio.SE3.Identity(), 'free')
    centre = np.array([0.02, -0.03, 0.05])
    model.appendBodyToJoint(joint, pinocchio.Inertia(10.0, centre, INERTIA),
                            pinocchio.SE3.Identity())
    model.gravity.linear = np.array([0, 0, -GRAVITY_M_S2])
    data = model.createData()
    for _ in range(20):
        quaternion = exponential(rng.normal(size=3))
        velocity, rate, bend, turn = rng.normal(size=(4, 3))   # body axes, at the origin
        q = np.concatenate((rng.normal(size=3), np.roll(quaternion, -1)))
        # pinocchio's acceleration is spatial: the centripetal part comes off (its own docs).
        spatial = np.concatenate((bend - np.cross(rate, velocity), turn))
        theirs = pinocchio.rnea(model, data, q, np.concatenate((velocity, rate)), spatial)
        at_centre = point_acceleration(rotate(quaternion, bend), quaternion, rate, turn, centre)
        ours = wrench_for(10.0, INERTIA, quaternion, rate, at_centre, turn)
        ours[3:] += np.cross(centre, ours[:3])
        assert_allclose(ours, theirs, rtol=0, atol=1e-11)
        back = acceleration(10.0, INERTIA, np.linalg.inv(INERTIA), quaternion, rate,
                            np.concatenate((ours[:3], ours[3:] - np.cross(centre, ours[:3]))))
        assert_allclose(back, np.concatenate((at_centre, turn)), atol=1e-12)


def hung(mass, stiffness, rest_length, start):
    """Point mass on the tether, from rest at ``start``, anchor at the origin."""
    still = np.zeros(3)

    def rates(_, state):
        pull = hook_force(state[:3].copy(), state[3:].copy(), still, still, rest_length, stiffness,
                          0.0)
        return np.concatenate((state[3:], pull[:3] / mass - [0, 0, GRAVITY_M_S2]))

    def crossing(_, state):
        return state[3] if abs(start[0]) > 0 else state[5]

    crossing.direction = 1 if start[0] > 0 else -1
    out = solve_ivp(rates, (0.0, 12.0), np.concatenate((start, still)), rtol=1e-11, atol=1e-12,
                    events=crossing)
    return out.t_events[0][out.t_events[0] > 1e-6]


def test_elastic_pendulum_periods():
    # Vitt and Gorelik 1933: m = 10, k = 2000, l0 = 4: heave 0.4442883 s, swing 4.0373389 s.
    stretch = 10 * GRAVITY_M_S2 / 2000
    heave = hung(10.0, 2000.0, 4.0, np.array([0, 0, -4.0 - stretch + 1e-4]))
    assert_allclose(np.diff(heave)[0], 0.4442883, rtol=1e-5)
    angle = 1e-3
    length = 4.0 + stretch
    swing = hung(10.0, 2000.0, 4.0, length * np.array([np.sin(angle), 0, -np.cos(angle)]))
    # From one turning point to the next is half the period... and half again for the start.
    assert_allclose(swing[0], 4.0373389 / 2, rtol=2e-3)


def test_tether_pulls_only_and_damps_only_under_tension():
    still = np.zeros(3)
    slack = hook_force(np.array([0, 0, -2.9]), np.array([0, 0, -9.0]), still, still, 3.0, 74.0,
                       1.5)
    assert_allclose(slack, 0.0)
    recoiling = hook_force(np.array([0, 0, -3.01]), np.array([0, 0, 9.0]), still, still, 3.0, 74.0,
                           1.5)
    assert_allclose(recoiling, 0.0)
    taut = hook_force(np.array([0, 0, -3.5]), np.array([0.3, 0, -0.2]), still, still, 3.0, 74.0,
                      1.5)
    assert_allclose(taut, [0, 0, 37.3, 37.3], atol=1e-12)


@pytest.mark.parametrize('name', ['bay_head', 'seam_head'])
def test_equilibrium_balances(name):
    rig = load_rig(name)
    rest = equilibrium(rig)
    body = loaded_body(rig)
    pull = tether_wrench(rig.tether, body.centre_m, rest.position_map_m, np.zeros(3), LEVEL,
                         np.zeros(3), anchor_at_zero(rig), np.zeros(3))
    needed = wrench_for(body.mass_kg, body.inertia_kg_m2, LEVEL, np.zeros(3), np.zeros(3),
                        np.zeros(3))
    assert_allclose(pull[:6], needed, atol=1e-9)
    assert_allclose(pull[6], rest.tension_n, atol=1e-9)


def test_loaded_body_is_the_sum_of_its_points():
    rig = load_rig('bay_head')
    place = np.array([0.1, -0.2, -0.25])
    body = loaded_body(rig, Payload(0.6, place))
    parts = [(6.2, np.zeros(3)), (0.02, rig.tether.hook_m), (0.6, place)]
    mass = sum(m for m, _ in parts)
    centre = sum(m * p for m, p in parts) / mass
    rate = np.array([0.7, -0.4, 1.1])
    own = 0.5 * rate @ rig.body.inertia_kg_m2 @ rate
    energy = own + sum(0.5 * m * np.sum(np.cross(rate, p - centre) ** 2) for m, p in parts)
    assert_allclose(body.mass_kg, mass)
    assert_allclose(body.centre_m, centre)
    assert_allclose(0.5 * rate @ body.inertia_kg_m2 @ rate, energy)


def test_point_kinematics_by_finite_differences():
    rng = np.random.default_rng(2)
    rate, turn, arm = rng.normal(size=(3, 3))
    quaternion = exponential(rng.normal(size=3))
    h = 1e-4

    def place(t):
        from suspended_ctrl.physics.rotation import multiply
        return rotate(multiply(quaternion, exponential(rate * t + 0.5 * turn * t * t)), arm)

    numeric = (place(h) - 2 * place(0.0) + place(-h)) / h ** 2
    # Second difference: rounding over step squared, 1e-16 / 1e-8.
    assert_allclose(point_acceleration(np.zeros(3), quaternion, rate, turn, arm), numeric,
                    atol=1e-6)
    assert_allclose(matrix(quaternion) @ cross(rate, arm), (place(h) - place(-h)) / (2 * h),
                    atol=1e-7)
