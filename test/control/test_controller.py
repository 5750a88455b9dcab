"""What the controller follows in each state, how it looks ahead, how it comes to rest."""

import numpy as np
from numpy.testing import assert_allclose
import pytest
from scipy.integrate import solve_ivp

from suspended_ctrl.control.controller import ControlSettings, WrenchController
from suspended_ctrl.control.stop_path import BRAKE_M_S2, path_to_rest
from suspended_ctrl.control.values import ControlInputs
from suspended_ctrl.physics.constants import GRAVITY_M_S2
from suspended_ctrl.physics.equilibrium import equilibrium
from suspended_ctrl.physics.lead import Lead, PlatformState
from suspended_ctrl.physics.loaded_body import loaded_body
from suspended_ctrl.physics.path import minimum_jerk, straight
from suspended_ctrl.physics.reference import ReferencePoint
from suspended_ctrl.physics.rigid_body import acceleration
from suspended_ctrl.physics.rotation import matrix
from suspended_ctrl.physics.values import Estimate, Payload, Wrench
from suspended_ctrl.rig.file import load_rig

LEVEL = np.array([1.0, 0, 0, 0])
ZERO = np.zeros(3)


@pytest.fixture(name='rig', scope='module')
def _rig():
    return load_rig('bay_head')


def estimate(t, position, velocity=ZERO, force=ZERO):
    return Estimate(t, position, velocity, LEVEL, ZERO, 1e-6 * np.eye(12), force, ZERO, Payload(),
                    t, True)


class Driven:
    """A controller on an estimate that stays where it is told."""

    def __init__(self, rig):
        self.part = WrenchController(rig, ControlSettings())
        self.t = 100.0

    def step(self, state, position, **more):
        self.t += 0.005
        return self.part.step(self.t + 0.008, ControlInputs(estimate(self.t, position), state,
                                                            **more))


def move(rig, start_s, shift):
    rest = equilibrium(rig).position_map_m
    return straight(minimum_jerk(2.0), rest, rest + shift, LEVEL, LEVEL).starting_at(start_s)


def test_idle_asks_for_the_weight_and_no_more(rig):
    weight = loaded_body(rig).mass_kg * GRAVITY_M_S2
    out = Driven(rig).step('ready', equilibrium(rig).position_map_m)
    assert out.following == 'idle'
    assert_allclose(out.demand.vector()[:3], [0, 0, weight], atol=1e-9)


def test_live_without_reference_holds_the_pose_it_found(rig):
    driven = Driven(rig)
    place = equilibrium(rig).position_map_m + np.array([0.02, -0.01, 0.03])
    driven.step('ready', place)
    first = driven.step('live', place)
    assert first.following == 'hold'
    weight = loaded_body(rig).mass_kg * GRAVITY_M_S2
    assert_allclose(first.demand.vector()[:3], [0, 0, weight], atol=1e-9)
    pushed = driven.step('live', place + np.array([0.01, 0, 0]))
    assert pushed.demand.force_body_n[0] < -1.0


def test_reference_is_followed_ahead_of_time(rig):
    driven = Driven(rig)
    rest = equilibrium(rig).position_map_m
    driven.step('ready', rest)
    path = move(rig, driven.t + 0.5, np.array([0.5, 0, 0]))
    out = driven.step('live', rest, reference=path)
    assert out.following == 'path'
    felt = driven.t + 0.008 + driven.part.lead.lead_s
    assert_allclose(out.diagnostics['lead_s'], felt - driven.t, atol=1e-12)


@pytest.mark.parametrize('case', ['past', 'cleared', 'far'])
def test_unusable_references_are_not_followed(rig, case):
    driven = Driven(rig)
    rest = equilibrium(rig).position_map_m
    driven.step('ready', rest)
    driven.step('live', rest)
    path = move(rig, driven.t + 0.2, np.array([0.5, 0, 0]))
    if case == 'past':
        out = driven.step('live', rest, reference=path.starting_at(driven.t - 5.0))
    elif case == 'cleared':
        driven.step('live', rest, reference=path)
        nothing = straight(minimum_jerk(0.01), rest, rest, LEVEL, LEVEL)
        empty = type(nothing)(0.0, *(getattr(nothing, n)[:0] for n in (
            'time_s', 'position_map_m', 'velocity_map_m_s', 'acceleration_map_m_s2',
            'quaternion_wxyz', 'rate_body_rad_s', 'rate_dot_body_rad_s2')))
        out = driven.step('live', rest, reference=empty)
    else:
        out = driven.step('live', rest, reference=path.starting_at(driven.t - 1.0))
    assert out.following in ('hold', 'brake')


def test_a_stop_drops_the_path_for_good(rig):
    driven = Driven(rig)
    rest = equilibrium(rig).position_map_m
    driven.step('ready', rest)
    driven.step('live', rest, reference=move(rig, driven.t + 0.1, np.array([0.5, 0, 0])))
    assert driven.step('stopping', rest).following == 'stop'
    driven.step('ready', rest)
    assert driven.step('live', rest).following == 'hold'


def test_way_to_rest_starts_where_it_is_and_ends_over_the_equilibrium(rig):
    goal = equilibrium(rig).position_map_m
    start = ReferencePoint(goal + np.array([0.3, 0.2, 0.1]), np.array([1.5, 0, 0]),
                           np.array([2.0, 0, 0]), LEVEL, ZERO, ZERO)
    felt = PlatformState(10.0, start.position_map_m, start.velocity_map_m_s, LEVEL, ZERO)
    path = path_to_rest(start, felt, goal)
    first, last = path.at(10.0 + 1e-9), path.at(path.end_s)
    assert_allclose(first.position_map_m, start.position_map_m, atol=1e-6)
    assert_allclose(first.velocity_map_m_s, start.velocity_map_m_s, atol=1e-6)
    assert_allclose(last.position_map_m, goal, atol=1e-9)
    assert_allclose(last.velocity_map_m_s, 0, atol=1e-9)
    # The quintic's peak deceleration is at most 1.875 / 1.875 times ... of the mean's double; the
    # start's own acceleration is still in it.
    assert np.abs(path.acceleration_map_m_s2).max() < 2.0 * BRAKE_M_S2
    assert np.abs(np.diff(path.time_s)).max() <= 0.010 + 1e-9


def test_prediction_agrees_with_an_ode_solver(rig):
    rng = np.random.default_rng(6)
    lead = Lead(rig, 0.0045, 1.3)
    body = loaded_body(rig, Payload(0.6, np.array([0.05, 0.02, -0.25])))
    t0 = 50.0
    wrenches = []
    for k in range(20):
        wrench = Wrench(0.0, rng.normal(size=3) * 5 + [0, 0, 65], rng.normal(size=3) * 0.5)
        lead.record(t0 + 0.005 * k, wrench)
        wrenches.append(wrench.vector())
    now = t0 + 0.005 * 20
    given = estimate(now - 0.012, np.array([0.1, 0.2, 2.6]), np.array([0.5, -0.2, 0.1]),
                     np.array([1.0, -2.0, 0.5]))
    out = lead.predict(given, now, body)
    shift = body.nominal_centre_m - body.centre_m

    def rates(t, s):
        index = int(np.clip(np.floor((t - lead.lead_s - t0) / 0.005 + 1e-9), 0, 19))
        wrench = wrenches[index].copy()
        wrench[3:] += np.cross(shift, wrench[:3])
        quaternion = s[6:10] / np.linalg.norm(s[6:10])
        wrench[:3] += matrix(quaternion).T @ given.disturbance_force_map_n
        a = acceleration(body.mass_kg, body.inertia_kg_m2, body.inertia_inverse, quaternion,
                         s[10:].copy(), wrench)
        w = s[10:]
        q = s[6:10]
        dq = 0.5 * np.array([-q[1:] @ w, *(q[0] * w + np.cross(q[1:], w))])
        return np.concatenate((s[3:6], a[:3], dq, a[3:]))

    start = np.concatenate((given.position_map_m + body.centre_m, given.velocity_map_m_s, LEVEL,
                            ZERO))
    exact = solve_ivp(rates, (given.stamp_s, now + lead.lead_s), start, max_step=5e-4, rtol=1e-9)
    end = exact.y[:, -1]
    turn = matrix(end[6:10] / np.linalg.norm(end[6:10]))
    # Steps of 5 ms with the wrench turned at their start only: second order in the turn.
    assert_allclose(out.position_map_m, end[:3] - turn @ body.centre_m, atol=2e-5)
    assert_allclose(out.rate_body_rad_s, end[10:], atol=2e-3)
    assert_allclose(out.stamp_s, now + lead.lead_s)
