"""Faults of drives, tether, carrier and air do what they say."""

from bench_rigs import run
from fault_runs import bench_with, DAMPED, IDLE, of
import numpy as np
import pytest

from suspended_ctrl.physics.values import RotorSample


def test_rotor_dead_coasts_down_and_says_so():
    bench = bench_with({'kind': 'rotor_dead', 'at_s': 0.5, 'rotor': 'r3'})
    run(bench, 0.5, IDLE)
    samples = run(bench, 0.54, IDLE)
    speed = bench.truth().rotor_speed_rad_s
    np.testing.assert_allclose(speed[2], 300.0 * np.exp(-1.0), rtol=1e-3)
    np.testing.assert_allclose(np.delete(speed, 2), 300.0, rtol=1e-3)
    measured = of(samples, RotorSample)[-1].speed_rad_s
    np.testing.assert_allclose(measured, speed, rtol=0.06)
    run(bench, 1.5, IDLE)
    assert abs(bench.truth().rotor_thrust_n[2]) < 1e-9


def test_rotor_stuck_keeps_its_speed_whatever_it_is_told():
    bench = bench_with({'kind': 'rotor_stuck', 'at_s': 0.5, 'rotor': 'r3', 'for_s': 1.0})
    run(bench, 0.5, IDLE)
    kept = bench.truth().rotor_speed_rad_s[2]
    run(bench, 1.0, np.full(8, 800.0))
    assert bench.truth().rotor_speed_rad_s[2] == kept
    bench.advance(1.4)
    assert bench.truth().rotor_speed_rad_s[2] == kept
    assert bench.truth().rotor_speed_rad_s[1] < 1.0
    bench.advance(1.8)
    assert bench.truth().rotor_speed_rad_s[2] < 1.0


def test_rotor_weak_loses_thrust_and_shows_nothing():
    bench = bench_with({'kind': 'rotor_weak', 'at_s': 0.5, 'rotor': 'r3', 'factor': 0.5},
                       {'kind': 'rotor_weak', 'at_s': 1.0, 'rotor': 'r3', 'factor': 0.5})
    run(bench, 0.9, IDLE)
    truth = bench.truth()
    np.testing.assert_allclose(truth.rotor_thrust_n, np.where(np.arange(8) == 2, 1.35, 2.7),
                               rtol=1e-3)
    np.testing.assert_allclose(truth.rotor_speed_rad_s, 300.0, rtol=1e-6)
    run(bench, 1.1, IDLE)
    assert bench.truth().rotor_thrust_n[2] == pytest.approx(0.675, rel=1e-3)


def test_tether_cut_lets_the_platform_fall():
    bench = bench_with({'kind': 'tether_cut', 'at_s': 0.5})
    run(bench, 1.0)
    truth = bench.truth()
    assert truth.tension_n == 0.0
    # Half a second of fall, drag takes under 1 %.
    assert truth.position_map_m[2] == pytest.approx(
        bench.equilibrium_map_m[2] - 0.125 * 9.80665, abs=0.012)


def test_tether_snag_shortens_and_lets_go():
    bench = bench_with({'kind': 'tether_snag', 'at_s': 0.5, 'shorter_by_m': 0.3, 'for_s': 5.0},
                       rig=DAMPED)
    weight = bench.truth().tension_n
    run(bench, 0.5)
    bench.advance(0.5025)
    # Within the first step it has hardly moved: 0.04 m/s times 15 N s/m.
    assert bench.truth().tension_n == pytest.approx(weight + 0.3 * 74.0, abs=0.3)
    bench.advance(5.5)
    # e^-6 of 0.3 m is left.
    assert bench.truth().position_map_m[2] == pytest.approx(bench.equilibrium_map_m[2] + 0.3,
                                                            abs=0.002)
    bench.advance(10.5)
    assert bench.truth().position_map_m[2] == pytest.approx(bench.equilibrium_map_m[2], abs=0.002)


def test_carrier_stall_brakes_one_axis():
    bench = bench_with({'kind': 'carrier_stall', 'at_s': 2.0, 'axis': 'x', 'for_s': 2.0})
    goal = np.array((3.0, 1.4, 0.0))
    run(bench, 2.0, position=goal)
    at = bench.truth().carrier_position_m[0]
    run(bench, 3.9, position=goal)
    truth = bench.truth()
    assert truth.carrier_velocity_m_s[0] == 0.0
    assert truth.carrier_position_m[0] - at == pytest.approx(0.30 ** 2 / 0.70, abs=0.002)
    assert truth.carrier_position_m[1] - at > 0.5
    run(bench, 6.0, position=goal)
    assert bench.truth().carrier_velocity_m_s[0] == pytest.approx(0.30)


def test_carrier_runaway_goes_to_the_end_of_its_travel():
    bench = bench_with({'kind': 'carrier_runaway', 'at_s': 0.5, 'axis': 'hoist',
                        'speed_m_s': -0.2})
    run(bench, 2.5, position=np.zeros(3))
    truth = bench.truth()
    assert truth.carrier_velocity_m_s[2] == pytest.approx(-0.2)
    # Speeding up takes v / a, half of it lost.
    assert truth.carrier_position_m[2] == pytest.approx(-0.2 * (2.0 - 0.1 / 0.35), abs=0.002)
    bench.advance(10.0)
    truth = bench.truth()
    assert truth.carrier_position_m[2] == pytest.approx(-0.6, abs=1e-6)
    assert truth.anchor_map_m[2] == pytest.approx(5.9, abs=1e-6)


def test_push_gives_its_impulse():
    bench = bench_with({'kind': 'push', 'at_s': 0.5, 'for_s': 0.2, 'force_n': [20.0, 0.0, 0.0]})
    run(bench, 0.7)
    # 4 N s on 6.22 kg at the centre of mass, less the tether's pull back over 0.2 s: the
    # pendulum's sin(w t) / w t with w = 1.6 rad/s, 1.7 %.
    velocity = bench.truth().velocity_map_m_s
    assert velocity[0] == pytest.approx(4.0 / 6.22, rel=0.03)
    run(bench, 0.9)
    assert bench.truth().velocity_map_m_s[0] < velocity[0]


def test_pushes_add_up():
    one = {'kind': 'push', 'at_s': 0.5, 'force_n': [5.0, 0.0, 0.0]}
    two = {'kind': 'push', 'at_s': 0.5, 'force_n': [0.0, 5.0, 0.0], 'for_s': 0.1}
    bench = bench_with(one, two)
    run(bench, 0.55)
    velocity = bench.truth().velocity_map_m_s
    assert velocity[0] == pytest.approx(velocity[1], rel=0.02)


def test_gust_blows_and_dies():
    bench = bench_with({'kind': 'gust', 'at_s': 0.5, 'speed_m_s': 8.0, 'for_s': 3.0})
    run(bench, 0.5)
    assert np.abs(bench.truth().velocity_map_m_s).max() < 1e-9
    run(bench, 3.4)
    assert np.abs(bench.truth().position_map_m - bench.equilibrium_map_m)[:2].max() > 0.02
    assert bench._plant.world[6:9].any()
    run(bench, 3.6)
    assert not bench._plant.world[6:9].any()


def test_payload_drop():
    bench = bench_with({'kind': 'payload_drop', 'at_s': 5.0}, rig=DAMPED)
    bench.attach_payload(0.6, np.array((0.0, 0.0, -0.25)))
    run(bench, 4.9)
    assert bench.payload.mass_kg == 0.6
    below = bench.equilibrium_map_m[2] - bench.truth().position_map_m[2]
    assert below == pytest.approx(0.6 * 9.80665 / 74.0, abs=0.001)
    assert bench.truth().tension_n == pytest.approx(6.82 * 9.80665, rel=1e-3)
    run(bench, 10.0)
    assert bench.payload.mass_kg == 0.0
    assert bench.truth().position_map_m[2] == pytest.approx(bench.equilibrium_map_m[2], abs=0.001)
    bench.release_payload()
