"""Each kind of fault does what it says, from when to when it says, alone and together."""

import math

from bench_rigs import (
    BAY_HEAD,
    exact_bench,
    quiet_imu,
    quiet_pose,
    run,
    SEAM_HEAD,
    TICK_S,
    with_tether,
)
import numpy as np
import pytest
from scipy.spatial.transform import Rotation

from suspended_ctrl.bench import fault_kinds as kinds
from suspended_ctrl.bench.effects import _EFFECTS
from suspended_ctrl.bench.faults import FaultFile
from suspended_ctrl.bench.values import EmergencyStopSample, FaultEvent, Start
from suspended_ctrl.physics.values import CarrierSample, ImuSample, PoseSample, RotorSample
from suspended_ctrl.rig.errors import InputError
from suspended_ctrl.rig.frozen import frozen

QUIET = quiet_pose(quiet_imu(BAY_HEAD))
IDLE = np.full(8, 300.0)
# Ten times the damping: bounces die away at c / 2m = 1.2 /s.
DAMPED = with_tether(QUIET, damping_n_s_per_m=15.0)


def faults(*entries: dict) -> tuple:
    def plain(value):
        if isinstance(value, dict):
            return {key: plain(one) for key, one in value.items()}
        return tuple(value) if isinstance(value, list) else value
    return FaultFile.model_validate({'faults': tuple(plain(e) for e in entries)}).faults


def bench_with(*entries: dict, rig=QUIET, start_s: float = 0.0, **options):
    bench = exact_bench(rig, faults=faults(*entries), **options)
    bench.path_start_s = start_s
    return bench


def of(samples: list, kind: type) -> list:
    return [sample for sample in samples if type(sample) is kind]


def stamps(samples: list, kind: type) -> np.ndarray:
    return np.array([sample.stamp_s for sample in of(samples, kind)])


def test_every_kind_has_an_effect():
    assert set(_EFFECTS) == set(kinds.KINDS)
    names = [kind.model_fields['kind'].annotation.__args__[0] for kind in kinds.KINDS]
    assert len(set(names)) == 24


def test_nothing_happens_before_the_path_starts_and_then_on_time():
    bench = exact_bench(QUIET, faults=faults({'kind': 'pose_gone', 'at_s': 0.5, 'for_s': 0.2}))
    assert len(of(run(bench, 2.0), PoseSample)) > 390
    assert bench.fault_events == ()
    bench.path_start_s = 2.0
    seen = stamps(run(bench, 4.0), PoseSample)
    inside = seen[(seen > 2.0) & (seen < 3.5)]
    assert inside[np.argmax(np.diff(inside))] == pytest.approx(2.5)
    assert np.diff(inside).max() == pytest.approx(0.205)
    assert bench.fault_events == (FaultEvent(pytest.approx(2.5), 0, 'pose_gone', True),
                                  FaultEvent(pytest.approx(2.7), 0, 'pose_gone', False))


def test_for_ever_without_for_s():
    seen = stamps(run(bench_with({'kind': 'pose_gone', 'at_s': 0.5}), 3.0), PoseSample)
    assert seen.max() == pytest.approx(0.5)


def test_at_a_place():
    """The platform swings from 0.3 m out through the middle; the fault waits there."""
    bench = bench_with({'kind': 'imu_gone', 'at_place': {'position_m': [0.0, 0.0, 2.68],
                                                         'within_m': 0.05}},
                       start=Start(frozen((0.3, 0.0, 0.0))))
    while not bench.fault_events:
        run(bench, bench.t_s + TICK_S)
    # A quarter of the pendulum's period, 2 pi sqrt(3.8 / g) / 4, less what 0.05 m are of it.
    assert bench.fault_events[0].t_s == pytest.approx(0.98 * (1 - 2 / np.pi * 0.167), abs=0.05)
    away = np.linalg.norm(bench.truth().position_map_m - (0.0, 0.0, 2.68))
    assert 0.04 < away < 0.052
    late = stamps(run(bench, 3.0), ImuSample)
    assert late.size == 0 or late.max() <= bench.fault_events[0].t_s + 1e-9


def test_no_place_counts_before_the_path_starts():
    entry = {'kind': 'imu_gone', 'at_place': {'position_m': [0.0, 0.0, 2.68], 'within_m': 0.1}}
    bench = exact_bench(QUIET, faults=faults(entry))
    run(bench, 0.5)
    assert bench.fault_events == ()
    bench.path_start_s = 0.8
    run(bench, 1.0)
    assert bench.fault_events[0].t_s == pytest.approx(0.8)


# ---------------------------------------------------------------- measurements


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


# ---------------------------------------------------------------- plant


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


def test_killed_and_stopped_parts_are_silent():
    bench = bench_with({'kind': 'process_killed', 'at_s': 4.0, 'node': 'effort_allocator'},
                       {'kind': 'process_stopped', 'at_s': 4.0, 'node': 'wrench_controller',
                        'for_s': 1.0}, start_s=1.0)
    assert bench.silent_parts(4.99) == frozenset()
    assert bench.silent_parts(5.0) == {'effort_allocator', 'wrench_controller'}
    assert bench.silent_parts(6.0) == {'effort_allocator'}


def test_a_killed_bench_neither_measures_nor_listens():
    bench = bench_with({'kind': 'process_killed', 'at_s': 0.5, 'node': 'rig_bench'})
    run(bench, 0.495, IDLE)
    assert run(bench, 1.0, IDLE) == []
    # Its drivers hear nothing any more and stop by themselves.
    assert bench.truth().rotor_speed_rad_s.max() < 1.0


# ---------------------------------------------------------------- composition


def test_faults_overlap_without_disturbing_one_another():
    both = bench_with({'kind': 'pose_jump', 'at_s': 0.2, 'by_m': [0.1, 0.0, 0.0], 'for_s': 0.6},
                      {'kind': 'pose_jump', 'at_s': 0.4, 'by_m': [0.0, 0.2, 0.0], 'for_s': 0.2})
    poses = {round(p.stamp_s, 4): p.position_map_m - both.equilibrium_map_m
             for p in of(run(both, 1.0), PoseSample)}
    np.testing.assert_allclose(poses[0.3], (0.1, 0.0, 0.0), atol=1e-9)
    np.testing.assert_allclose(poses[0.5], (0.1, 0.2, 0.0), atol=1e-9)
    np.testing.assert_allclose(poses[0.7], (0.1, 0.0, 0.0), atol=1e-9)
    np.testing.assert_allclose(poses[0.9], 0.0, atol=1e-9)


def test_a_faults_draws_do_not_depend_on_others():
    outliers = {'kind': 'pose_outliers', 'at_s': 0.0, 'fraction': 0.2, 'by_m': 0.2}
    alone = of(run(bench_with(outliers), 2.0), PoseSample)
    among = of(run(bench_with({'kind': 'imu_bias_step', 'at_s': 0.0, 'rate_rad_s': 0.1}, outliers,
                              {'kind': 'telemetry_gone', 'at_s': 0.1}), 2.0), PoseSample)
    for one, other in zip(alone, among, strict=True):
        np.testing.assert_array_equal(one.position_map_m, other.position_map_m)


@pytest.mark.parametrize(('rig', 'entry'), [
    (BAY_HEAD, {'kind': 'rotor_dead', 'at_s': 0.0, 'rotor': 'r9'}),
    (SEAM_HEAD, {'kind': 'carrier_stall', 'at_s': 0.0, 'axis': 'x'}),
    (BAY_HEAD, {'kind': 'message_flood', 'at_s': 0.0, 'topic': 'tether_load', 'rate_hz': 10})])
def test_bench_refuses_faults_of_what_is_not_there(rig, entry):
    with pytest.raises(InputError, match=r'faults\[0\]\.'):
        exact_bench(rig, faults=faults(entry))
