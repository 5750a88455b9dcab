"""Rotors, carrier and reach against closed forms, other solvers and published volumes."""

import dataclasses

import numpy as np
from numpy.testing import assert_allclose
import pytest
from scipy.optimize import linprog

from suspended_ctrl.physics.carrier import carrier_step
from suspended_ctrl.physics.reach import Reach
from suspended_ctrl.physics.rotor import lagged_speed, RotorModel
from suspended_ctrl.rig.file import load_rig
from suspended_ctrl.rig.frozen import frozen


@pytest.fixture(name='rig', scope='module')
def _rig():
    return load_rig('bay_head')


def test_thrust_follows_the_square_law_and_its_inverse(rig):
    model = RotorModel(rig.rotors, rig.body.centre_of_mass_m)
    for speed in np.random.default_rng(1).uniform(-1200, 1200, size=(20, 8)):
        assert_allclose(model.thrust(speed), 3.0e-5 * speed * np.abs(speed), rtol=1e-12)
        assert_allclose(model.speed_for_thrust(model.thrust(speed)), speed, rtol=1e-9, atol=1e-9)


def test_thrust_curve_passes_its_knots_and_is_inverted(rig):
    speeds = np.tile([0.0, 170.0, 400.0, 900.0], (8, 1))
    thrusts = np.tile([0.0, 0.7, 4.6, 24.3], (8, 1))
    rotors = dataclasses.replace(rig.rotors, curve_speed_rad_s=frozen(speeds),
                                 curve_thrust_n=frozen(thrusts))
    model = RotorModel(rotors, rig.body.centre_of_mass_m)
    for knot in range(4):
        assert_allclose(model.thrust(speeds[:, knot].copy()), thrusts[:, knot], atol=1e-12)
    for speed in np.random.default_rng(1).uniform(-1000, 1000, size=(20, 8)):
        assert_allclose(model.speed_for_thrust(model.thrust(speed)), speed, atol=1e-8)


def test_wrench_by_hand(rig):
    # Second way: cross products rotor by rotor.
    rng = np.random.default_rng(4)
    centre = np.array([0.01, 0.02, -0.03])
    model = RotorModel(rig.rotors, centre)
    speed, speed_rate = rng.uniform(170, 900, 8), rng.uniform(-3e3, 3e3, 8)
    rate = rng.normal(size=3)
    force, torque = np.zeros(3), np.zeros(3)
    for i in range(8):
        axis = rig.rotors.axis[i]
        thrust = 3.0e-5 * speed[i] ** 2 * axis
        spin = rig.rotors.spin[i]
        momentum = spin * 6.0e-5 * speed[i] * axis
        force += thrust
        torque += np.cross(rig.rotors.position_m[i] - centre, thrust)
        torque -= spin * 4.8e-7 * speed[i] ** 2 * axis
        torque -= spin * 6.0e-5 * speed_rate[i] * axis + np.cross(rate, momentum)
    assert_allclose(model.wrench(speed, speed_rate, rate), np.concatenate((force, torque)),
                    atol=1e-11)


def test_all_rotors_alike_cancel(rig):
    model = RotorModel(rig.rotors, rig.body.centre_of_mass_m)
    same = model.wrench(np.full(8, 500.0), np.zeros(8), np.zeros(3))
    assert_allclose(same, 0.0, atol=1e-12 * 60)


def test_lag_reaches_63_percent_after_its_time_constant():
    speed = lagged_speed(np.zeros(2), np.full(2, 100.0), 0.04, np.array([0.04, 0.02]))
    assert_allclose(speed, [63.2120559, 86.4664717], rtol=1e-8)


def test_carrier_keeps_its_limits_and_arrives(rig):
    place, speed = np.zeros(3), np.zeros(3)
    goal = np.array([1.5, -0.7, 0.2])
    speeds, peaks = [np.zeros(3)], []
    for _ in range(int(12 / 0.005)):
        place, speed = carrier_step(rig.carrier, place, speed, goal, 0.005)
        speeds.append(speed)
        peaks.append(np.abs(place))
    speeds = np.array(speeds)
    assert np.abs(speeds).max() <= 0.30 + 1e-12
    assert np.abs(np.diff(speeds, axis=0)).max() <= 0.35 * 0.005 + 1e-12
    # Braking at the limit leaves at most the last lag's creep.
    assert_allclose(place, goal, atol=1e-3)
    assert (np.array(peaks).max(axis=0) <= np.abs(goal) * 1.01 + 1e-3).all()


@pytest.mark.parametrize(('name', 'published'), [
    ('bay_head', [45.8, 65.9, 48.5, 30.2, 25.9, 6.4]), ('seam_head', None)])
def test_reach_agrees_with_linprog(name, published):
    rig = load_rig(name)
    reach = Reach(rig)
    box = list(zip(reach.thrust_min_n, reach.thrust_max_n, strict=True))

    def by_programme(direction):
        out = linprog([*np.zeros(8), -1.0],
                      A_eq=np.column_stack((reach.columns, -direction)), b_eq=np.zeros(6),
                      bounds=[*box, (0, None)])
        return -out.fun

    table = reach.axis_table()
    if published:
        # The rig's own data sheet, to its last digit.
        assert_allclose(table, np.array(published)[:, None] * np.ones(2), atol=0.05)
    rng = np.random.default_rng(9)
    scale = np.array([40, 60, 40, 25, 20, 6.0])
    for direction in [*np.eye(6), *(scale * rng.normal(size=(20, 6)))]:
        assert_allclose(reach.extreme(direction), by_programme(direction), rtol=1e-6)


def test_one_reversible_rotor_out_leaves_six_directions_and_one_way_rotors_do_not():
    seam = load_rig('seam_head')
    for lost in range(8):
        assert (Reach(seam, without=(lost,)).axis_table() > 1.0).all()
    # Davis 1954: a positive basis of six dimensions needs seven one-way columns; the seven that
    # are left here are none, since the box of the reference rig is symmetric.
    bay = load_rig('bay_head')
    assert any((Reach(bay, without=(lost,)).axis_table() < 1.0).any() for lost in range(8))
