"""Faults of the measurements do what they say."""

import math

from bench_rigs import run, TICK_S
from fault_runs import bench_with, of, stamps
import numpy as np
import pytest
from scipy.spatial.transform import Rotation

from suspended_ctrl.bench.values import EmergencyStopSample, Start
from suspended_ctrl.physics.values import CarrierSample, ImuSample, PoseSample, RotorSample
from suspended_ctrl.rig.frozen import frozen


def test_pose_late():
    bench = bench_with({'kind': 'pose_late', 'at_s': 0.5, 'for_s': 0.5, 'by_s': 0.04})
    arrivals = {}
    for tick in range(1, 301):
        t = tick * TICK_S
        bench.advance(t)
        for sample in of(bench.samples(t), PoseSample):
            arrivals[round(sample.stamp_s / TICK_S)] = t
    late = np.array([t - stamp * TICK_S for stamp, t in sorted(arrivals.items())])
    # Ticks round up: 8 ms is two of them, 48 ms ten.
    np.testing.assert_allclose(late[:101], 0.010, atol=1e-9)
    np.testing.assert_allclose(late[101:201], 0.050, atol=1e-9)
    np.testing.assert_allclose(late[201:], 0.010, atol=1e-9)


def test_pose_jump():
    bench = bench_with({'kind': 'pose_jump', 'at_s': 0.5, 'by_m': [0.2, 0.0, -0.1], 'by_deg': 30})
    poses = of(run(bench, 1.0), PoseSample)
    step = poses[-1].position_map_m - poses[0].position_map_m
    np.testing.assert_allclose(step, (0.2, 0.0, -0.1), atol=1e-9)
    turn = Rotation.from_quat([p.quaternion_wxyz for p in poses], scalar_first=True)
    np.testing.assert_allclose((turn[-1] * turn[0].inv()).as_rotvec(),
                               (0.0, 0.0, math.radians(30.0)), atol=1e-9)
    np.testing.assert_allclose(bench.truth().position_map_m, bench.equilibrium_map_m, atol=1e-9)


def test_pose_outliers():
    bench = bench_with({'kind': 'pose_outliers', 'at_s': 0.0, 'fraction': 0.1, 'by_m': 0.2,
                        'by_deg': 30})
    poses = of(run(bench, 10.0), PoseSample)[1:]
    off = np.array([p.position_map_m for p in poses]) - bench.equilibrium_map_m
    far = np.linalg.norm(off, axis=1)
    thrown = far > 1e-6
    np.testing.assert_allclose(far[thrown], 0.2, rtol=1e-6)
    # Binomial: 2000 draws of 0.1, five sigma.
    assert abs(thrown.mean() - 0.1) < 5 * math.sqrt(0.09 / len(poses))
    angle = np.array([2 * math.acos(min(1.0, p.quaternion_wxyz[0])) for p in poses])
    np.testing.assert_allclose(angle[thrown], math.radians(30.0), rtol=1e-6)
    np.testing.assert_allclose(angle[~thrown], 0.0, atol=1e-6)
    # In no direction more than in others.
    assert np.all(np.abs(off[thrown].mean(axis=0)) < 5 * 0.2 / math.sqrt(3 * thrown.sum()))


def test_pose_frozen_keeps_the_value_and_not_the_stamp():
    bench = bench_with({'kind': 'pose_frozen', 'at_s': 0.5, 'for_s': 0.5},
                       start=Start(frozen((0.3, 0.0, 0.0))))
    poses = of(run(bench, 1.5), PoseSample)
    x = {round(p.stamp_s, 4): p.position_map_m[0] for p in poses}
    assert len(x) == len(poses)
    assert {x[round(0.5 + 0.005 * i, 4)] for i in range(101)} == {x[0.5]}
    assert x[1.005] != x[0.5]
    assert abs(x[0.5] - x[0.495]) > 1e-4


def test_pose_nan():
    poses = of(run(bench_with({'kind': 'pose_nan', 'at_s': 0.5, 'for_s': 0.1}), 1.0), PoseSample)
    bad = [p for p in poses if np.isnan(p.position_map_m).all()]
    assert len(bad) == 20
    assert all(np.isnan(p.quaternion_wxyz).all() for p in bad)
    np.testing.assert_allclose(np.diff([p.stamp_s for p in bad]), 0.005)


def test_imu_and_telemetry_gone():
    samples = run(bench_with({'kind': 'imu_gone', 'at_s': 0.5},
                             {'kind': 'telemetry_gone', 'at_s': 0.6, 'for_s': 0.1}), 1.0)
    assert stamps(samples, ImuSample).max() == pytest.approx(0.5)
    assert np.diff(stamps(samples, RotorSample)).max() == pytest.approx(0.105)
    assert stamps(samples, PoseSample).max() > 0.98


def test_imu_bias_step():
    bench = bench_with({'kind': 'imu_bias_step', 'at_s': 0.5, 'rate_rad_s': 0.2,
                        'force_m_s2': 1.0})
    imu = of(run(bench, 1.0), ImuSample)
    np.testing.assert_allclose(imu[0].rate_rad_s, 0.0, atol=1e-9)
    for sample in imu[202:]:
        assert np.linalg.norm(sample.rate_rad_s) == pytest.approx(0.2, rel=1e-6)
        assert np.linalg.norm(sample.force_m_s2 - (0, 0, 9.80665)) == pytest.approx(1.0, rel=1e-6)
        np.testing.assert_array_equal(sample.rate_rad_s, imu[-1].rate_rad_s)


def test_emergency_stop():
    samples = of(run(bench_with({'kind': 'emergency_stop', 'at_s': 0.5, 'for_s': 0.5}), 2.0),
                 EmergencyStopSample)
    np.testing.assert_allclose([s.stamp_s for s in samples if s.stop], np.arange(11, 21) / 20.0)


def test_clock_jump_shifts_every_stamp_and_no_arrival():
    bench = bench_with({'kind': 'clock_jump', 'at_s': 0.5, 'by_s': -2.0})
    before, after = run(bench, 0.5), run(bench, 1.0)
    assert len(after) == len(run(bench_with(), 1.0)) - len(before)
    for kind in (ImuSample, RotorSample, CarrierSample):
        assert stamps(before, kind).max() == pytest.approx(0.5)
        assert stamps(after, kind).min() < -1.47
        assert stamps(after, kind).max() == pytest.approx(-1.0)


def test_message_flood():
    bench = bench_with({'kind': 'message_flood', 'at_s': 0.5, 'topic': 'pose', 'rate_hz': 5000,
                        'for_s': 0.2})
    count = {}
    for tick in range(1, 301):
        t = tick * TICK_S
        bench.advance(t)
        count[tick] = len(of(bench.samples(t), PoseSample))
    # From 8 ms after its beginning to 8 ms after its end, like any pose: 25 copies a tick.
    assert sum(count.values()) == pytest.approx(300 + 1000, abs=6)
    assert max(count.values()) == 26
    assert all(n <= 1 for tick, n in count.items() if tick <= 101 or tick >= 143)
    seen = stamps(run(bench_with({'kind': 'message_flood', 'at_s': 0.2, 'topic': 'pose',
                                  'rate_hz': 1000, 'for_s': 0.2}), 0.5), PoseSample)
    assert np.all(np.diff(seen) >= 0.0)
