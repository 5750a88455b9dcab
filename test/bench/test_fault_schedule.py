"""When faults begin and end, and that they do not disturb one another."""

from bench_rigs import BAY_HEAD, exact_bench, run, SEAM_HEAD, TICK_S
from fault_runs import bench_with, faults, IDLE, of, QUIET, stamps
import numpy as np
import pytest

from suspended_ctrl.bench import fault_kinds as kinds
from suspended_ctrl.bench.effects import _EFFECTS
from suspended_ctrl.bench.values import FaultEvent, Start
from suspended_ctrl.physics.values import ImuSample, PoseSample
from suspended_ctrl.rig.errors import InputError
from suspended_ctrl.rig.frozen import frozen


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
