"""Rotor drives, carrier and driver watchdogs."""

from dataclasses import replace

from bench_rigs import BAY_HEAD, exact_bench, k, run, SEAM_HEAD, TICK_S
from hypothesis import given, Phase, settings, strategies
import numpy as np
import pytest

from suspended_ctrl.bench.kernels import move_carrier
from suspended_ctrl.bench.plant import Plant
from suspended_ctrl.bench.values import Start
from suspended_ctrl.rig.frozen import frozen

STEP_S = 0.0025
# Shrinking a path of thousands of steps takes minutes and says little.
NO_SHRINKING = (Phase.explicit, Phase.reuse, Phase.generate)
HOVER = np.full(8, 500.0)


def speeds(bench) -> np.ndarray:
    return bench.truth().rotor_speed_rad_s


def test_speed_steps_by_its_lag():
    # First-order lag: 63.2121 % after one time constant, 95.0213 % after three.
    bench = exact_bench()
    bench.command_rotors(0.0, HOVER)
    bench.advance(0.040)
    np.testing.assert_allclose(speeds(bench), 500.0 * 0.632120559, rtol=1e-8)
    # The driver's own watchdog comes at 80 ms: command again.
    bench.command_rotors(0.040, HOVER)
    bench.advance(0.120)
    np.testing.assert_allclose(speeds(bench), 500.0 * 0.950212932, rtol=1e-8)


def test_a_command_counts_from_its_own_moment():
    bench = exact_bench()
    bench.advance(0.0061)
    bench.command_rotors(0.0061, HOVER)
    bench.advance(0.0200)
    np.testing.assert_allclose(speeds(bench), 500.0 * -np.expm1(-(0.0200 - 0.0061) / 0.040),
                               rtol=1e-9)


def test_true_lag_is_slower_by_the_mismatch():
    bench = exact_bench()
    mismatch = replace(bench.mismatch, lag_factor=1.1)
    slow = type(bench)(BAY_HEAD, 0, mismatch)
    slow.command_rotors(0.0, HOVER)
    slow.advance(0.044 + 1e-9)
    # The last whole step is at 42.5 ms.
    np.testing.assert_allclose(speeds(slow), 500.0 * -np.expm1(-0.0425 / 0.044), rtol=1e-9)


def test_thrust_at_speed_and_its_mismatch():
    bench = exact_bench()
    factor = np.linspace(0.9, 1.1, 8)
    bench = type(bench)(BAY_HEAD, 0, replace(bench.mismatch, thrust_factor=frozen(factor)))
    run(bench, 1.0, HOVER)
    # 3e-5 N/(rad/s)^2 at 500 rad/s.
    np.testing.assert_allclose(bench.truth().rotor_thrust_n, 7.5 * factor, rtol=1e-6)


def test_rotors_stop_80_ms_after_the_last_command():
    bench = exact_bench()
    run(bench, 0.500, HOVER)
    bench.advance(0.580)
    np.testing.assert_allclose(speeds(bench), 500.0, rtol=1e-4)
    bench.advance(0.620)
    np.testing.assert_allclose(speeds(bench), 500.0 * np.exp(-1.0), rtol=1e-4)
    # A command brings them back.
    bench.command_rotors(0.620, HOVER)
    bench.advance(0.660)
    np.testing.assert_allclose(speeds(bench), 500.0 * (1 - np.exp(-1.0) * (1 - np.exp(-1.0))),
                               rtol=1e-4)


@pytest.mark.parametrize(('rig', 'command', 'held'), [
    (BAY_HEAD, 1200.0, 900.0), (BAY_HEAD, -300.0, 0.0), (BAY_HEAD, 169.0, 0.0),
    (BAY_HEAD, 170.0, 170.0), (BAY_HEAD, 170.0 * (1 - 1e-12), 170.0),
    (SEAM_HEAD, -1200.0, -900.0), (SEAM_HEAD, -300.0, -300.0), (SEAM_HEAD, -119.0, 0.0),
    (SEAM_HEAD, 119.0, 0.0), (SEAM_HEAD, 120.0, 120.0)])
def test_drives_hold_only_what_they_can(rig, command, held):
    bench = exact_bench(rig)
    run(bench, 1.0, np.full(8, command))
    np.testing.assert_allclose(speeds(bench), held, atol=1e-6)


def test_reversing_passes_through_zero_and_flips_thrust():
    bench = exact_bench(SEAM_HEAD)
    run(bench, 1.0, np.full(8, 400.0))
    bench.command_rotors(1.0, np.full(8, -400.0))
    passed = []
    for i in range(16):
        bench.advance(1.0 + 0.0025 * (i + 1))
        passed.append(speeds(bench)[0])
    assert np.all(np.diff(passed) < 0.0)
    assert passed[0] > 0.0 > passed[-1]
    # Zero is passed at tau ln 2.
    np.testing.assert_allclose(passed, 400.0 * (2 * np.exp(-np.arange(1, 17) / 16.0) - 1),
                               rtol=1e-4)
    run(bench, 2.0, np.full(8, -400.0))
    np.testing.assert_allclose(bench.truth().rotor_thrust_n, -1.5e-5 * 400.0 ** 2, rtol=1e-6)


@pytest.mark.parametrize('bad', [
    np.array((1.0, np.nan) + (300.0,) * 6), np.full(8, np.inf), np.zeros(7), np.zeros((8, 1)),
    np.empty(0), None, 'fast', ['a'] * 8], ids=str)
def test_bad_rotor_commands_are_refused_and_counted(bad):
    bench = exact_bench()
    run(bench, 0.2, HOVER)
    assert not bench.command_rotors(0.2, bad)
    assert bench.refused == {'rotor_command': 1}
    # It keeps to the last good one, and does not count as a sign of life.
    bench.advance(0.28)
    np.testing.assert_allclose(speeds(bench), 500.0, rtol=1e-2)
    bench.advance(0.5)
    assert speeds(bench).max() < 5.0


@pytest.mark.parametrize(('position', 'velocity'), [
    ((0.1, np.nan, 0.0), (0.0, 0.0, 0.0)), ((0.1, 0.0, 0.0), (np.inf, 0.0, 0.0)),
    ((0.1, 0.0), (0.0, 0.0)), ((0.1, 0.0, 0.0), (0.0,))])
def test_bad_carrier_commands_are_refused_and_counted(position, velocity):
    bench = exact_bench()
    assert not bench.command_carrier(0.0, np.array(position), np.array(velocity))
    assert bench.refused == {'carrier_command': 1}
    bench.advance(0.25)
    np.testing.assert_array_equal(bench.truth().carrier_position_m, 0.0)


def axes(position: float = 0.0) -> tuple[np.ndarray, np.ndarray]:
    carrier = np.zeros((k.CARRIER_ROWS, 3))
    carrier[k.POSITION] = position
    return carrier, Plant(BAY_HEAD, STEP_S, Start())._carrier_fixed


def test_a_small_step_of_the_carrier_is_its_first_order_lag():
    # 2 mm: 8 mm/s at most, 32 mm/s2, inside all limits but for the start from rest.
    carrier, fixed = axes()
    carrier[k.SETPOINT] = 0.002
    moved = []
    for _ in range(400):
        move_carrier(carrier, fixed, STEP_S)
        moved.append(carrier[k.POSITION, 0])
    t = STEP_S * np.arange(1, 401)
    # Getting to 8 mm/s at 0.35 m/s2 takes 23 ms: as if the step came half of that later.
    np.testing.assert_allclose(moved[40:], -0.002 * np.expm1(-(t[40:] - 0.0114) / 0.25),
                               atol=2e-6)


def test_a_long_move_takes_the_time_of_a_trapezoid_and_the_lags_tail():
    carrier, fixed = axes()
    carrier[k.SETPOINT] = 1.0
    fastest, t = 0.0, 0.0
    while carrier[k.POSITION, 0] < 0.5:
        move_carrier(carrier, fixed, STEP_S)
        fastest = max(fastest, carrier[k.VELOCITY, 0])
        t += STEP_S
    # To the middle: 0.5 m at 0.30 m/s, and half of the 0.857 s of speeding up more.
    assert t == pytest.approx(0.5 / 0.30 + 0.5 * 0.30 / 0.35, abs=2 * STEP_S)
    assert fastest == pytest.approx(0.30, rel=1e-12)


@settings(max_examples=30, deadline=None, phases=NO_SHRINKING)
@given(strategies.lists(strategies.tuples(
    strategies.floats(-10.0, 10.0), strategies.integers(1, 400),
    strategies.sampled_from((k.FOLLOWS, k.STOPS, k.RUNS_AWAY)), strategies.floats(-0.3, 0.3)),
    min_size=1, max_size=8), strategies.floats(-1.5, 1.5))
def test_the_carrier_never_leaves_its_limits(orders, start):
    carrier, fixed = axes(start)
    lower, upper = fixed[:, k.LOWER], fixed[:, k.UPPER]
    carrier[k.POSITION] = np.clip(carrier[k.POSITION], lower, upper)
    for setpoint, steps, mode, runaway in orders:
        carrier[k.SETPOINT] = np.clip(setpoint, lower, upper)
        carrier[k.AXIS_MODE] = mode
        carrier[k.RUNAWAY] = runaway
        for _ in range(steps):
            before = carrier[k.VELOCITY].copy()
            move_carrier(carrier, fixed, STEP_S)
            position, velocity = carrier[k.POSITION], carrier[k.VELOCITY]
            # Rounding alone.
            assert np.all(position >= lower - 1e-12)
            assert np.all(position <= upper + 1e-12)
            assert np.all(np.abs(velocity) <= 0.30 + 1e-12)
            assert np.all(np.abs(velocity - before) <= 0.35 * STEP_S + 1e-12)


def test_carrier_arrives_and_moves_the_anchor():
    bench = exact_bench()
    run(bench, 6.0, position=np.array((0.5, -0.3, 0.2)))
    truth = bench.truth()
    # 0.25 s lag: e^-14 of the last move is left after 3.5 s.
    np.testing.assert_allclose(truth.carrier_position_m, (0.5, -0.3, 0.2), atol=1e-4)
    np.testing.assert_allclose(truth.anchor_map_m, (0.5, -0.3, 6.7), atol=1e-4)
    run(bench, 12.0, position=np.array((9.0, 0.0, 0.0)))
    # Asked for more than the travel it drives on to the end of it.
    run(bench, 26.0, position=np.array((9.0, 0.0, 0.0)))
    assert bench.truth().carrier_position_m[0] == pytest.approx(3.5, abs=1e-4)


def test_zero_offset_shifts_the_anchor_and_not_the_reading():
    carrier = replace(BAY_HEAD.carrier, zero_offset_m=frozen((0.05, 0.0, -0.1)))
    bench = exact_bench(replace(BAY_HEAD, carrier=carrier))
    np.testing.assert_allclose(bench.truth().anchor_map_m, (0.05, 0.0, 6.4), atol=1e-12)
    np.testing.assert_array_equal(bench.truth().carrier_position_m, 0.0)
    bench.advance(1.0)
    np.testing.assert_allclose(bench.truth().velocity_map_m_s, 0.0, atol=1e-9)


def test_carrier_stops_300_ms_after_the_last_command_by_its_own_deceleration():
    bench = exact_bench()
    run(bench, 2.0, position=np.array((3.0, 0.0, 0.0)))
    assert bench.truth().carrier_velocity_m_s[0] == pytest.approx(0.30)
    bench.advance(2.295)
    assert bench.truth().carrier_velocity_m_s[0] == pytest.approx(0.30)
    at = bench.truth().carrier_position_m[0]
    bench.advance(4.0)
    truth = bench.truth()
    assert truth.carrier_velocity_m_s[0] == 0.0
    # 5 ms at speed, then v^2 / 2a, with a step's rounding.
    assert truth.carrier_position_m[0] - at == pytest.approx(
        0.30 * 0.005 + 0.30 ** 2 / 0.70, abs=0.30 * STEP_S)


def test_rig_without_axes_takes_empty_commands():
    bench = exact_bench(SEAM_HEAD)
    assert bench.command_carrier(0.0, np.empty(0), np.empty(0))
    bench.advance(1.0)
    assert bench.truth().carrier_position_m.size == 0
    np.testing.assert_array_equal(bench.truth().anchor_map_m, SEAM_HEAD.carrier.anchor_m)


def test_tick_is_whole_steps():
    assert TICK_S / exact_bench().step_s == pytest.approx(2.0)
