"""Fault files: every kind is read, and what is wrong is said in one line."""

from bench_rigs import BAY_HEAD, SEAM_HEAD
import pytest

from suspended_ctrl.bench import fault_kinds as kinds
from suspended_ctrl.bench.faults import load_faults
from suspended_ctrl.rig.errors import InputError

EVERY_KIND = """
faults:
  - {kind: pose_gone, at_s: 4.0, for_s: 0.5}
  - {kind: pose_late, at_s: 4.0, by_s: 0.04}
  - {kind: pose_jump, at_s: 4.0, by_m: [0.2, 0, 0], by_deg: 30}
  - {kind: pose_outliers, at_s: 0.0, fraction: 0.01, by_m: 0.2, by_deg: 30}
  - {kind: pose_frozen, at_s: 4.0}
  - {kind: pose_nan, at_s: 4.0, for_s: 0.1}
  - {kind: imu_gone, at_s: 4.0}
  - {kind: imu_bias_step, at_s: 4.0, rate_rad_s: 0.2, force_m_s2: 1.0}
  - {kind: rotor_dead, at_s: 4.0, rotor: r1}
  - {kind: rotor_stuck, at_s: 4.0, rotor: r1}
  - {kind: rotor_weak, at_s: 4.0, rotor: r1, factor: 0.5}
  - {kind: telemetry_gone, at_s: 4.0}
  - {kind: tether_cut, at_s: 4.0}
  - {kind: tether_snag, at_s: 4.0, shorter_by_m: 0.3}
  - {kind: carrier_stall, at_s: 4.0, axis: x}
  - {kind: carrier_runaway, at_s: 4.0, axis: x, speed_m_s: 0.3}
  - {kind: push, at_s: 4.0, for_s: 0.2, force_n: [20, 0, 0]}
  - {kind: gust, at_s: 0.0, speed_m_s: 3.0}
  - {kind: payload_drop, at_s: 4.0}
  - {kind: emergency_stop, at_s: 4.0}
  - {kind: process_killed, at_s: 4.0, node: effort_allocator}
  - {kind: process_stopped, at_s: 4.0, node: wrench_controller, for_s: 1.0}
  - {kind: clock_jump, at_s: 4.0, by_s: -2.0}
  - {kind: message_flood, at_s: 4.0, topic: pose, rate_hz: 5000, for_s: 1.0}
"""


def written(tmp_path, text: str):
    file = tmp_path / 'faults.yaml'
    file.write_text(text)
    return file


def test_every_kind(tmp_path):
    read = load_faults(written(tmp_path, EVERY_KIND), BAY_HEAD)
    assert tuple(type(fault) for fault in read) == kinds.KINDS
    assert read[0].for_s == 0.5
    assert read[1].for_s is None
    assert read[16].force_n == (20.0, 0.0, 0.0)


def test_no_fault_at_all(tmp_path):
    assert load_faults(written(tmp_path, 'faults: []\n'), BAY_HEAD) == ()


def test_place_in_place_of_time(tmp_path):
    text = ('faults:\n  - kind: rotor_dead\n    rotor: r2\n'
            '    at_place: {position_m: [0.5, 0, 2.7], within_m: 0.1}\n')
    fault, = load_faults(written(tmp_path, text), BAY_HEAD)
    assert fault.at_s is None
    assert fault.at_place.within_m == 0.1


@pytest.mark.parametrize(('entry', 'said'), [
    ('{kind: rotor_ded, at_s: 4.0, rotor: r1}', 'rotor_dead'),
    ('{at_s: 4.0}', 'kind'),
    ('{kind: rotor_dead, at_s: 4.0}', 'faults[0].rotor: value missing'),
    ('{kind: rotor_dead, at_s: 4.0, rotor: r9}', "faults[0].rotor: value 'r9': one of r1, r2"),
    ('{kind: rotor_weak, at_s: 4.0, rotor: r1, factor: 1.5}', 'faults[0].factor: value 1.5'),
    ('{kind: pose_late, at_s: 4.0, by_ms: 40}', 'faults[0].by_ms: value 40: unknown unit, did you '
                                                'mean by_s'),
    ('{kind: pose_late, at_s: -1.0, by_s: 0.04}', 'faults[0].at_s: value -1'),
    ('{kind: pose_late, at_s: 4.0, by_s: .nan}', 'faults[0].by_s'),
    ('{kind: pose_late, at_s: soon, by_s: 0.04}',
     "faults[0].at_s: value 'soon': a number in seconds"),
    ('{kind: pose_gone, at_s: 4.0, for_s: 0}', 'faults[0].for_s: value 0'),
    ('{kind: tether_cut, at_s: 4.0, for_s: 1.0}', 'faults[0].for_s: value 1.0: unknown key'),
    ('{kind: pose_gone}', 'faults[0].at_s: value missing'),
    ('{kind: pose_gone, at_s: 1, at_place: {position_m: [0, 0, 2], within_m: 1}}',
     'either this or at_place'),
    ('{kind: push, at_s: 4.0, force_n: 20}', 'faults[0].force_n: value 20: a list'),
    ('{kind: push, at_s: 4.0, force_n: [20, 0]}', 'faults[0].force_n'),
    ('{kind: carrier_stall, at_s: 4.0, axis: z}', "one of 'x', 'y' or 'hoist'"),
    ('{kind: process_killed, at_s: 4.0, node: estimator}', "'state_estimator'"),
    ('{kind: message_flood, at_s: 4.0, topic: tether_load, rate_hz: 100}',
     "faults[0].topic: value 'tether_load': one of pose, imu"),
    ('{kind: gust, at_s: 0.0, speed_m_s: 0}', 'faults[0].speed_m_s: value 0: a number above 0'),
])
def test_what_is_wrong_is_said_in_one_line(tmp_path, entry, said):
    file = written(tmp_path, f'faults:\n  - {entry}\n')
    with pytest.raises(InputError) as caught:
        load_faults(file, BAY_HEAD)
    message = str(caught.value)
    assert message.startswith(f'{file}:2: ')
    assert said in message
    assert '\n' not in message


def test_fixed_anchor_has_no_axis_to_fail(tmp_path):
    file = written(tmp_path, 'faults:\n  - {kind: carrier_stall, at_s: 4.0, axis: x}\n')
    with pytest.raises(InputError, match='seam_head has, it has no axis'):
        load_faults(file, SEAM_HEAD)


def test_missing_file(tmp_path):
    with pytest.raises(InputError, match='no such file'):
        load_faults(tmp_path / 'none.yaml', BAY_HEAD)
