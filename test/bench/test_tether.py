"""The tether: pendulums, bounce, sag, slack, by formula."""

from bench_rigs import (
    BAY_HEAD,
    crossings,
    exact_bench,
    free_plant,
    ideal,
    k,
    moving,
    traced,
    with_body,
    with_tether,
)
import numpy as np
import pytest
from scipy.linalg import eigh
from scipy.optimize import brentq
from scipy.spatial.transform import Rotation

from suspended_ctrl.bench.bench import Bench
from suspended_ctrl.bench.plant import Plant
from suspended_ctrl.bench.values import Start

G = 9.80665
# Stiff enough that the length changes by under 1e-4 in the largest swing.
STIFF_N_M = 1.0e6
# Six steps a radian of the stiff tether's bounce with 10 kg, 316 rad/s: well resolved.
FINE_S = 0.0005


@pytest.mark.parametrize(('degrees', 'ratio'), [
    (5, 1.000476), (30, 1.017409), (60, 1.073182), (90, 1.180341)])
def test_pendulum_period_grows_with_its_swing(degrees, ratio):
    # T/T0 = (2/pi) K(sin^2(a/2)); Nelson and Olsson, Am. J. Phys. 54, 112 (1986) (from memory).
    plant = Plant(ideal(BAY_HEAD, 10.0, STIFF_N_M, 2.9), FINE_S, Start())
    angle = np.radians(degrees)
    length = 2.9 + 10.0 * G * np.cos(angle) / STIFF_N_M
    anchor = BAY_HEAD.carrier.anchor_m
    plant.qpos[:3] = anchor + length * np.array((np.sin(angle), 0.0, -np.cos(angle)))
    small = 2.0 * np.pi * np.sqrt(2.9 / G)
    t, qpos, _ = traced(plant, 1.1 * ratio * small)
    through = crossings(t, qpos[:, 0])
    # The tether's stretch, up to 3 m g / k = 3e-4 m of 2.9 m, is worth half its share of time.
    assert 2.0 * (through[1] - through[0]) / small == pytest.approx(ratio, rel=6e-5)


@pytest.mark.parametrize(('direction', 'period'), [
    ((0.0, 0.0, 1.0), 0.4442883), ((1.0, 0.0, 0.0), 4.0373389)], ids=['heave', 'swing'])
def test_elastic_pendulum_has_its_two_small_modes(direction, period):
    # Heave sqrt(k/m), swing sqrt(g/(l0 + m g/k)); Lynch, Int. J. Non-Linear Mech. 37, 345 (2002)
    # (from memory).
    plant = Plant(ideal(BAY_HEAD, 10.0, 2000.0, 4.0), 0.0025, Start())
    rest = plant.qpos[:3].copy()
    plant.qpos[:3] += 1e-3 * np.array(direction)
    t, qpos, _ = traced(plant, 2.2 * period)
    through = crossings(t, (qpos[:, :3] - rest) @ direction)
    assert through[2] - through[0] == pytest.approx(period, rel=1e-5)


def test_platform_below_its_tether_has_the_modes_of_a_double_pendulum():
    # Lagrange's equations: M = [[m L^2, m L d], [m L d, I + m d^2]], K = diag(m g L, m g d);
    # L = 5 m, m = 20 kg, I = 2 kg m2, d = 0.4 m: 1.345200 and 6.520467 rad/s.
    mass, length, below, inertia = 20.0, 5.0, 0.4, 2.0
    M = np.array(((mass * length ** 2, mass * length * below),
                  (mass * length * below, inertia + mass * below ** 2)))
    squares, shapes = eigh(np.diag((mass * G * length, mass * G * below)), M)
    np.testing.assert_allclose(np.sqrt(squares), (1.345200, 6.520467), rtol=1e-6)
    rig = ideal(BAY_HEAD, mass, STIFF_N_M, length - mass * G / STIFF_N_M,
                np.diag((2.0, 2.0, 2.0)).tolist(), hook_m=(0.0, 0.0, below))
    for square, shape in zip(squares, shapes.T, strict=True):
        plant = Plant(rig, FINE_S, Start())
        tether, body = 1e-3 * shape / np.abs(shape).max()
        turn = Rotation.from_rotvec((0.0, -body, 0.0))
        out, up = length * np.sin(tether), length * (1.0 - np.cos(tether))
        hook = plant.qpos[:3] + np.array((out, 0.0, below + up))
        plant.qpos[:3] = hook - turn.apply((0.0, 0.0, below))
        plant.qpos[3:] = turn.as_quat(scalar_first=True)
        period = 2.0 * np.pi / np.sqrt(square)
        t, qpos, _ = traced(plant, 1.2 * period)
        through = crossings(t, qpos[:, 0])
        assert 2.0 * (through[1] - through[0]) == pytest.approx(period, rel=1e-5)


@pytest.mark.parametrize('share', [0.1, 0.5, 1.0])
def test_tether_mass_slows_the_bounce_by_rayleighs_third(share):
    # Rayleigh, The Theory of Sound: M + m/3; the exact first root of b tan b = m/M is lower by
    # 0.011, 0.21 and 0.66 percent, which is the error of this plant's model.
    mass = 10.0
    rig = with_tether(ideal(BAY_HEAD, mass, 2000.0, 3.0), mass_kg=share * mass)
    plant = Plant(rig, 0.0025, Start())
    rest = plant.qpos[2]
    plant.qpos[2] += 1e-3
    t, qpos, _ = traced(plant, 1.5)
    through = crossings(t, qpos[:, 2] - rest)
    ratio = 2.0 * np.pi / (through[2] - through[0]) / np.sqrt(2000.0 / mass)
    assert ratio == pytest.approx(1.0 / np.sqrt(1.0 + share / 3.0), rel=1e-5)
    # In b tan b = m/M, b is the frequency over that of the tether's own waves.
    b = brentq(lambda b: b * np.tan(b) - share, 1e-6, 1.5)
    assert ratio == pytest.approx(b / np.sqrt(share), rel=0.007)


def test_it_hangs_as_statics_say():
    bench = Bench(BAY_HEAD, 4)
    truth, rig = bench.truth(), bench.true_rig
    weight = (rig.body.mass_kg + rig.tether.mass_kg / 3.0) * G
    turn = Rotation.from_quat(truth.quaternion_wxyz, scalar_first=True)
    hook = truth.position_map_m + turn.apply(np.array(rig.tether.hook_m))
    np.testing.assert_allclose(truth.anchor_map_m - hook, (0.0, 0.0, rig.tether.rest_length_m
                               + weight / rig.tether.stiffness_n_per_m), atol=1e-9)
    # The centre of mass hangs straight below the hook.
    below = turn.apply(rig.body.centre_of_mass_m - rig.tether.hook_m)
    np.testing.assert_allclose(below[:2], 0.0, atol=1e-9)
    assert truth.tension_n == pytest.approx(weight, rel=1e-9)
    bench.advance(5.0)
    later = bench.truth()
    np.testing.assert_allclose(later.position_map_m, truth.position_map_m, atol=1e-9)
    np.testing.assert_allclose(later.quaternion_wxyz, truth.quaternion_wxyz, atol=1e-9)


def test_side_push_holds_it_at_the_angle_of_statics_and_letting_go_swings_it_over():
    # angle = atan(F / m g): 15 N on 20 kg, 8 m: 4.37339 degrees, 0.610048 m. Let go, it swings as
    # far to the other side (energy).
    anchor = BAY_HEAD.carrier.anchor_m
    plant = Plant(ideal(BAY_HEAD, 20.0, STIFF_N_M, 8.0), FINE_S, Start())
    pull = np.hypot(20.0 * G, 15.0)
    length = 8.0 + pull / STIFF_N_M
    angle = np.radians(4.37339)
    plant.qpos[:3] = anchor + length * np.array((np.sin(angle), 0.0, -np.cos(angle)))
    plant.world[k.PUSH] = 15.0
    _, qpos, _ = traced(plant, 1.0)
    # Six digits of the angle at 8 m.
    np.testing.assert_allclose(qpos[:, 0] - anchor[0], 0.610048, atol=5e-5)
    plant.world[k.PUSH] = 0.0
    _, qpos, _ = traced(plant, 3.5)
    assert qpos[:, 0].min() - anchor[0] == pytest.approx(-0.610048, rel=1e-3)


def test_slack_it_neither_pulls_nor_pushes_nor_damps():
    plant = Plant(with_body(BAY_HEAD, drag_area_m2=(0.0, 0.0, 0.0)), 0.0025, Start())
    plant.qpos[2] += 1.2
    moving(plant, velocity=(0.1, 0.0, 1.0))
    for _ in range(80):
        plant.step()
        assert plant.tension() == 0.0
    np.testing.assert_allclose(plant.qvel, (0.1, 0.0, 1.0 - 0.2 * G, 0.0, 0.0, 0.0), atol=1e-10)


def test_damping_never_turns_a_pull_into_a_push():
    rig = with_body(with_tether(BAY_HEAD, damping_n_s_per_m=50.0),
                    drag_area_m2=(0.0, 0.0, 0.0))
    plant = Plant(rig, 0.0025, Start())
    # A centimetre of stretch is 0.7 N; closing at 1 m/s, damping alone would be -50 N.
    plant.qpos[2] = BAY_HEAD.carrier.anchor_m[2] - 0.10 - 2.91
    moving(plant, velocity=(0.0, 0.0, 1.0))
    assert plant.tension() == 0.0
    plant.step()
    assert plant.tension() == 0.0
    # It falls freely, but for a spring that is cancelled at the middle of the step only.
    assert plant.qvel[2] - 1.0 == pytest.approx(-G * plant.step_s, rel=1e-4)


def test_bounce_dies_away_at_the_rate_of_its_damping():
    # Amplitude falls by exp(-c t / 2 m).
    mass = 6.2
    rig = with_tether(ideal(BAY_HEAD, mass, 74.0, 2.9), damping_n_s_per_m=1.5)
    plant = Plant(rig, 0.0025, Start())
    rest = plant.qpos[2]
    plant.qpos[2] += 0.05
    t, qpos, _ = traced(plant, 8.0)
    height = qpos[:, 2] - rest
    peaks = np.nonzero((height[1:-1] > height[:-2]) & (height[1:-1] >= height[2:]))[0] + 1
    slope = np.polyfit(t[peaks], np.log(height[peaks]), 1)[0]
    # Peaks fall up to half a step beside the true ones: 2e-5 of a height.
    assert slope == pytest.approx(-1.5 / (2.0 * mass), rel=5e-4)


def test_energy_stays_over_a_minute_of_swing_and_bounce():
    rig = ideal(BAY_HEAD, 6.2, 74.0, 2.9, np.diag((0.17, 0.16, 0.21)).tolist(), (0, 0, 0.1))
    plant = Plant(rig, 0.0025, Start())
    plant.qpos[:3] += (0.4, 0.2, 0.1)
    moving(plant, rate=(0.2, 0.3, 0.5))

    def energy():
        qpos, qvel = plant.qpos, plant.qvel
        spin = 0.5 * np.array((0.17, 0.16, 0.21)) @ qvel[3:] ** 2
        hook = qpos[:3] + Rotation.from_quat(qpos[3:], scalar_first=True).apply((0, 0, 0.1))
        stretch = np.linalg.norm(BAY_HEAD.carrier.anchor_m - hook) - 2.9
        return 0.5 * 6.2 * qvel[:3] @ qvel[:3] + spin + 6.2 * G * qpos[2] + 0.5 * 74 * stretch ** 2

    before = energy()
    for _ in range(24000):
        plant.step()
    # Joules move back and forth; a Runge-Kutta step loses the sixth power of its phase.
    assert energy() == pytest.approx(before, abs=1e-6)


def test_cut_and_snagged():
    plant = free_plant(BAY_HEAD)
    plant.step()
    assert plant.tension() == 0.0
    snagged = Plant(BAY_HEAD, 0.0025, Start())
    before = snagged.tension()
    snagged.set_tether(0.3, False)
    assert snagged.tension() == pytest.approx(before + 0.3 * 74.0, rel=1e-9)
    snagged.step()
    assert snagged.qvel[2] == pytest.approx(0.3 * 74.0 / 6.22 * 0.0025, rel=1e-3)


def test_held_until_let_go():
    bench = exact_bench(start=Start(np.array((0.3, 0.0, 0.0)), held=True))
    place = bench.equilibrium_map_m + np.array((0.3, 0.0, 0.0))
    bench.advance(1.0)
    np.testing.assert_allclose(bench.truth().position_map_m, place, atol=1e-12)
    bench.let_go()
    bench.advance(2.0)
    assert bench.truth().position_map_m[0] < place[0] - 0.05
