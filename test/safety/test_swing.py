"""What follows a stop, against energy and the pendulum's formulas."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.special import ellipk

from suspended_ctrl.physics.equilibrium import equilibrium
from suspended_ctrl.rig.frozen import frozen
from suspended_ctrl.rig.rig import Rig
from suspended_ctrl.safety.capability import least_reach_n, tolerates_rotor_loss
from suspended_ctrl.safety.settings import SafetySettings
from suspended_ctrl.safety.swing import predict_cut, stopping_distance, swing_amplitude

G = 9.80665
ZERO = np.zeros(3)
# Hardly gives under a platform's weight, and slow enough for the prediction's 10 ms steps.
STIFF_N_PER_M = 2e4


def stiff_pendulum(rig: Rig, mass_kg: float, length_m: float) -> Rig:
    """Rig as a point mass on a tether that hardly gives, without losses."""
    tether = replace(rig.tether, hook_m=frozen([0.0, 0.0, 0.0]), damping_n_s_per_m=0.0,
                     stiffness_n_per_m=STIFF_N_PER_M, mass_kg=0.0,
                     rest_length_m=length_m - mass_kg * G / STIFF_N_PER_M)
    return replace(rig, tether=tether, body=replace(rig.body, mass_kg=mass_kg))


def test_stopping_distance_by_energy():
    """The brake's work over its part of the way is the kinetic energy (work-energy theorem)."""
    mass, speed, deceleration, reaction = 6.2, 2.4, 3.7, 0.15
    way = stopping_distance(speed, deceleration, reaction) - speed * reaction
    assert mass * deceleration * way == pytest.approx(0.5 * mass * speed ** 2, rel=1e-12)


def test_stopping_distance_by_integration():
    speed, deceleration, reaction = 1.5, 3.7, 0.15
    end = reaction + speed / deceleration
    way, _ = quad(lambda t: speed - deceleration * max(t - reaction, 0.0), 0.0, end,
                  points=[reaction])
    assert stopping_distance(speed, deceleration, reaction) == pytest.approx(way, rel=1e-9)


def test_swing_amplitude_is_the_small_angle_pendulum():
    """A point that passes the bottom at v swings to v sqrt(L / g) (textbook, small angles)."""
    assert swing_amplitude(0.0, 0.3, 3.7) == pytest.approx(0.3 * np.sqrt(3.7 / G), rel=1e-12)
    assert swing_amplitude(0.5, 0.0, 3.7) == 0.5


@pytest.mark.parametrize('speed', [0.3, 1.0, 2.0, 3.0])
def test_swing_amplitude_bounds_the_pendulum_by_energy(speed):
    """Exact: v^2 / 2g = L (1 - cos a), amplitude L sin a, smaller than the small-angle figure."""
    length = 3.73
    angle = np.arccos(1.0 - speed ** 2 / (2.0 * G * length))
    exact = length * np.sin(angle)
    estimate = swing_amplitude(0.0, speed, length)
    assert exact <= estimate <= 1.05 * exact


def test_released_side_load_swings_to_the_other_side(bay_head):
    """20 kg, 15 N, 8 m: 4.37339 degrees, 0.610048 m; peak on the other side (checks H18, J4)."""
    rig = stiff_pendulum(bay_head, 20.0, 8.0)
    angle = np.arctan(15.0 / (20.0 * G))
    assert np.degrees(angle) == pytest.approx(4.37339, abs=1e-5)
    anchor = np.array([0.0, 0.0, 10.0])
    # With the side load the tether pulls a little more and is that much longer.
    length = 8.0 + (np.hypot(15.0, 20.0 * G) - 20.0 * G) / STIFF_N_PER_M
    start = anchor + length * np.array([np.sin(angle), 0.0, -np.cos(angle)])
    swing = predict_cut(rig, start, ZERO, anchor, ZERO)
    assert start[0] == pytest.approx(0.610048, abs=1e-5)
    # J4's tolerance is 1 %; the prediction samples the peak every 10 ms, which costs far less.
    assert swing.lower_map_m[0] == pytest.approx(-0.610048, rel=1e-3)
    assert swing.radius_m == pytest.approx(0.610048, rel=1e-4)


@pytest.mark.parametrize(('degrees', 'ratio'), [(5, 1.000476), (30, 1.017409), (60, 1.073182),
                                                (90, 1.180341)])
def test_prediction_covers_a_whole_large_swing(bay_head, degrees, ratio):
    """The period grows with the angle by these ratios (checks B7); a whole one is predicted."""
    assert 2.0 / np.pi * ellipk(np.sin(np.radians(degrees) / 2) ** 2) == pytest.approx(
        ratio, abs=1e-6)
    rig = stiff_pendulum(bay_head, 6.2, 3.0)
    anchor = np.array([0.0, 0.0, 5.0])
    angle = np.radians(degrees)
    # At the turning point the tether carries m g cos a.
    length = (rig.tether.rest_length_m
              + 6.2 * G * np.cos(angle) / rig.tether.stiffness_n_per_m)
    start = anchor + length * np.array([np.sin(angle), 0.0, -np.cos(angle)])
    swing = predict_cut(rig, start, ZERO, anchor, ZERO)
    assert swing.lower_map_m[0] == pytest.approx(-3.0 * np.sin(angle), rel=0.01)
    # At the bottom a pendulum pulls m g (3 - 2 cos a): energy and centripetal force.
    assert swing.tension_max_n == pytest.approx(6.2 * G * (3.0 - 2.0 * np.cos(angle)), rel=0.02)


def test_speed_at_the_bottom_by_energy(bay_head):
    rig = stiff_pendulum(bay_head, 6.2, 3.0)
    anchor = np.array([0.0, 0.0, 5.0])
    bottom = anchor - np.array([0.0, 0.0, 3.0])
    swing = predict_cut(rig, bottom, np.array([0.0, 1.5, 0.0]), anchor, ZERO)
    height = 1.5 ** 2 / (2.0 * G)
    assert swing.upper_map_m[2] - bottom[2] == pytest.approx(height, rel=0.01)
    assert swing.upper_map_m[1] == pytest.approx(
        3.0 * np.sin(np.arccos(1.0 - height / 3.0)), rel=1e-3)


def test_bounce_amplitude(bay_head):
    """Let go 0.2 m above where it hangs it bounces 0.2 m below, less what damping takes."""
    rest = equilibrium(bay_head)
    anchor = bay_head.carrier.anchor_m
    swing = predict_cut(bay_head, rest.position_map_m + np.array([0, 0, 0.2]), ZERO, anchor, ZERO)
    mass = bay_head.body.mass_kg + bay_head.tether.mass_kg / 3.0
    k, c = bay_head.tether.stiffness_n_per_m, bay_head.tether.damping_n_s_per_m
    ratio = c / (2.0 * np.sqrt(k * mass))
    # Logarithmic decrement over half a period.
    below = 0.2 * np.exp(-np.pi * ratio / np.sqrt(1.0 - ratio ** 2))
    assert rest.position_map_m[2] - swing.lower_map_m[2] == pytest.approx(below, rel=2e-3)
    assert swing.tension_min_n == pytest.approx(rest.tension_n - 0.2 * k, rel=1e-3)
    assert not swing.leaves_keep_in


def test_thrust_runs_down_as_an_impulse(bay_head):
    """Thrust falls as exp(-2 t / lag): an impulse of half a lag times the thrust."""
    rest = equilibrium(bay_head).position_map_m
    anchor = bay_head.carrier.anchor_m
    pushed = predict_cut(bay_head, rest, ZERO, anchor, np.array([30.0, 0.0, 0.0]))
    mass = bay_head.body.mass_kg + bay_head.tether.mass_kg / 3.0
    kicked = predict_cut(bay_head, rest, np.array([30.0 * 0.020 / mass, 0.0, 0.0]), anchor, ZERO)
    assert pushed.radius_m == pytest.approx(kicked.radius_m, rel=0.02)


def test_leaving_keep_in_is_said(bay_head):
    rest = equilibrium(bay_head).position_map_m
    anchor = bay_head.carrier.anchor_m
    assert not predict_cut(bay_head, rest, np.array([0.0, 2.4, 0.0]), anchor, ZERO).leaves_keep_in
    assert predict_cut(bay_head, rest, np.array([0.0, 4.0, 0.0]), anchor, ZERO).leaves_keep_in


def test_slack_after_a_cut_is_survived(bay_head):
    rest = equilibrium(bay_head).position_map_m
    swing = predict_cut(bay_head, rest, np.array([0.0, 0.0, 4.0]), bay_head.carrier.anchor_m, ZERO)
    assert swing.tension_min_n == 0.0
    assert np.isfinite(swing.upper_map_m).all()


def test_capability_of_the_reference_rigs(bay_head, seam_head):
    """The weakest axis is 45.8 N in reference_rigs; seam_head keeps half of its reach."""
    assert least_reach_n(bay_head) == pytest.approx(45.8, abs=0.1)
    assert not tolerates_rotor_loss(bay_head)
    assert tolerates_rotor_loss(seam_head)
    settings = SafetySettings.for_rig(bay_head)
    assert settings.stop_deceleration_m_s2 == pytest.approx(0.5 * 45.8 / 6.2, rel=1e-2)
    assert SafetySettings.for_rig(bay_head, speed_m_s=1.0).speed_m_s == 1.0
