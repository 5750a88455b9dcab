"""Figures of runs whose errors are known in closed form."""

from itertools import pairwise
import json
import math

import numpy as np
import pytest
from scipy.spatial.transform import Rotation
from scipy.stats import chi2

from suspended_ctrl.physics.lead import PlatformState
from suspended_ctrl.physics.path import joined, minimum_jerk, straight
from suspended_ctrl.physics.rotation import exponential, multiply
from suspended_ctrl.physics.rotor import RotorModel
from suspended_ctrl.physics.tether import tether_wrench
from suspended_ctrl.physics.values import (
    CarrierCommand,
    CarrierSample,
    Estimate,
    Payload,
    PoseSample,
    RotorCommand,
    RotorSample,
    TetherLoadSample,
)
from suspended_ctrl.review.bag import write_bag
from suspended_ctrl.review.bag_read import read_bag
from suspended_ctrl.review.log import RunFacts, RunLog
from suspended_ctrl.review.measure.effort import tensions, thrusts
from suspended_ctrl.review.measure.geometry import distances, segments
from suspended_ctrl.review.metrics import assess
from suspended_ctrl.review.rows import (
    interpolated_attitudes,
    matrices,
    rotation_vectors,
)
from suspended_ctrl.rig.file import load_rig

from synthetic_run import names_of, synthetic_run

RIG = load_rig('bay_head')
LEVEL = np.array([1.0, 0.0, 0.0, 0.0])
ZERO = np.zeros(3)
START_S = 10.0
PATH = joined([straight(minimum_jerk(1.0), np.array([0.0, 0.0, 2.6]), np.array([0.5, 0.0, 2.6]),
                        LEVEL, LEVEL),
               straight(minimum_jerk(1.0), np.array([0.5, 0.0, 2.6]), np.array([0.5, 0.4, 2.6]),
                        LEVEL, LEVEL)]).starting_at(START_S)
TICKS = START_S - 1.0 + 0.005 * np.arange(801)   # one second before the path to one after it

KEYS = {
    'tracking': ['position_max_m', 'position_rms_m', 'path_max_m', 'attitude_max_rad',
                 'attitude_rms_rad'],
    'effort': ['rotor_effort_n1p5_s', 'rotor_energy_j', 'rotor_saturated_fraction',
               'rotor_reversals', 'carrier_travel_m'],
    'tether': ['tension_min_n', 'tension_max_n'],
    'estimation': ['position_rms_m', 'velocity_rms_m_s', 'attitude_rms_rad', 'nees_mean'],
    'loop': ['rate_hz', 'tick_p50_s', 'tick_p99_s', 'tick_max_s', 'plan_p99_s'],
    'safety': ['state', 'reaction_latency_s', 'cut_latency_s', 'events']}
TOP = ['schema', 'verdict', 'failed_criteria', 'mission', 'rig', 'seed', 'law', 'allocator',
       'duration_s', 'realtime_factor', *KEYS]


def flown(offset=ZERO, turn=ZERO, late_s=0.0):
    """Log of a platform beside its reference, turned from it, or late on it."""
    log = RunLog(RunFacts(path_start_s=START_S, path_end_s=PATH.end_s))
    log.append('reference', START_S - 0.5, PATH)
    log.append('safety/state', TICKS[0], 'live')
    for t in TICKS.tolist():
        point = PATH.at(t - late_s)
        # Far off while not on the path, which must not count.
        place = point.position_map_m + (offset if START_S <= t <= PATH.end_s else 1.0)
        log.append('ground_truth', t, PlatformState(
            t, place, point.velocity_map_m_s,
            multiply(point.quaternion_wxyz, exponential(np.asarray(turn))), ZERO))
    return log


def test_every_key_is_there_and_null_where_nothing_is_known():
    metrics = assess(RunLog(), RIG).metrics
    assert list(metrics) == TOP
    for section, keys in KEYS.items():
        assert list(metrics[section]) == keys
        for key in keys:
            assert metrics[section][key] == ([] if key == 'events' else None), (section, key)
    assert metrics['verdict'] == 'fail'
    assert metrics['failed_criteria'] == ['run_completed']
    assert metrics['rig'] == 'bay_head'


def test_constant_errors_come_out_as_they_went_in():
    log = flown(offset=np.array([0.003, 0.0, 0.004]), turn=[0.006, 0.008, 0.0])
    tracking = assess(log, RIG).metrics['tracking']
    # Truth is exact here; rounding of positions about 3 m and of a quaternion's small parts.
    assert tracking['position_max_m'] == pytest.approx(0.005, abs=1e-14)
    assert tracking['position_rms_m'] == pytest.approx(0.005, abs=1e-14)
    assert tracking['attitude_max_rad'] == pytest.approx(0.010, abs=1e-14)
    assert tracking['attitude_rms_rad'] == pytest.approx(0.010, abs=1e-14)


def test_a_late_platform_is_off_its_reference_but_on_its_path():
    """
    Late by T, the error's peak is T times the peak speed, 1.875 L/T of a minimum-jerk move.

    Flash and Hogan 1985. Third order in T is left: (T^2/24) of the speed's curvature, under 1e-4.
    """
    tracking = assess(flown(late_s=0.010), RIG).metrics['tracking']
    assert tracking['position_max_m'] == pytest.approx(0.010 * 1.875 * 0.5, rel=1e-3)
    assert tracking['path_max_m'] < 1e-9


def test_path_distance_counts_sideways_only():
    tracking = assess(flown(offset=np.array([0.0, 0.0, 0.004])), RIG).metrics['tracking']
    assert tracking['path_max_m'] == pytest.approx(0.004, abs=1e-12)
    # Along the first leg the error lies on the path; past its corner it does not.
    tracking = assess(flown(offset=np.array([0.004, 0.0, 0.0])), RIG).metrics['tracking']
    assert tracking['path_max_m'] == pytest.approx(0.004, abs=1e-12)
    assert tracking['position_max_m'] == pytest.approx(0.004, abs=1e-12)


def test_distances_to_pieces_against_dense_sampling():
    rng = np.random.default_rng(1)
    line = np.cumsum(rng.normal(size=(20, 3)), axis=0)
    points = rng.normal(size=(50, 3)) * 3
    dense = np.concatenate([a + (b - a) * np.linspace(0, 1, 2001)[:, None]
                            for a, b in pairwise(line)])
    nearest = np.array([np.linalg.norm(dense - p, axis=1).min() for p in points])
    # Samples 2 mm apart miss the foot by 1 mm: second order beside distances over 0.1 m.
    np.testing.assert_allclose(distances(points, segments(line)), nearest, atol=1e-4)


def test_straight_moves_become_single_pieces():
    points = PATH.position_map_m
    assert len(segments(points)) == 2
    circle = np.stack((np.cos(np.linspace(0, 1, 101)), np.sin(np.linspace(0, 1, 101)),
                       np.zeros(101)), axis=1)
    assert len(segments(circle)) == 100
    assert len(segments(np.zeros((5, 3)))) == 1


def test_rotor_effort_of_constant_speeds():
    """Thrust 3.0e-5 w^2 of reference_rigs; 2 s of it."""
    log = flown()
    speed = np.array([400.0, 500.0] * 4)
    for t in TICKS[::4].tolist():
        log.append('ground_truth_rotors', t, RotorSample(t, speed))
        log.append('rotor_command', t, RotorCommand(t, speed))
    effort = assess(log, RIG).metrics['effort']
    load = 4 * ((3.0e-5 * 400.0 ** 2) ** 1.5 + (3.0e-5 * 500.0 ** 2) ** 1.5)
    assert effort['rotor_effort_n1p5_s'] == pytest.approx(2.0 * load, rel=1e-12)
    # Shaft power k_Q w^3.
    power = 4 * 4.8e-7 * (400.0 ** 3 + 500.0 ** 3)
    assert effort['rotor_energy_j'] == pytest.approx(2.0 * power, rel=1e-12)
    assert effort['rotor_saturated_fraction'] == 0.0
    assert effort['rotor_reversals'] == 0


def test_rotor_energy_is_momentum_theorys_for_the_disc_that_the_coefficients_imply():
    """P = T sqrt(T / (2 rho A)); Leishman, Principles of Helicopter Aerodynamics, ch. 2."""
    thrust_coefficient, torque_coefficient, density = 3.0e-5, 4.8e-7, 1.225
    area = thrust_coefficient ** 3 / (2.0 * density * torque_coefficient ** 2)
    thrust = thrust_coefficient * 500.0 ** 2
    ideal = thrust * math.sqrt(thrust / (2.0 * density * area))
    assert ideal == pytest.approx(torque_coefficient * 500.0 ** 3, rel=1e-12)
    # A disc of this size is an ordinary one of ten inches.
    assert 2.0 * math.sqrt(area / math.pi) == pytest.approx(0.247, abs=0.001)


def test_saturation_and_reversals_are_counted_on_the_path():
    log = flown()
    for k, t in enumerate(TICKS.tolist()):
        speed = np.full(8, 300.0)
        if START_S <= t < START_S + 0.5:
            speed[2] = 900.0
        speed[5] *= 1.0 if (k // 100) % 2 else -1.0
        speed[6] = 0.0 if k % 2 else 300.0
        log.append('rotor_command', t, RotorCommand(t, speed))
    effort = assess(log, RIG).metrics['effort']
    assert effort['rotor_saturated_fraction'] == pytest.approx(100 / 401)
    # 401 ticks on the path in blocks of 100: four changes of sign, zeros are none.
    assert effort['rotor_reversals'] == 4


def test_carrier_travel_is_the_commands_way():
    log = flown()
    for t in TICKS[::20].tolist():
        x = 0.1 * math.sin(2 * math.pi * (t - START_S))   # two whole periods on the path
        log.append('carrier_command', t, CarrierCommand(t, np.array([x, 0.0, -x]), ZERO))
    # Each axis goes there and back four times 0.1 m a period; 0.1 s samples miss the peaks by 5 %.
    peak = 0.1 * math.sin(2 * math.pi * 0.2)
    assert assess(log, RIG).metrics['effort']['carrier_travel_m'] == pytest.approx(
        2 * 2 * 4 * peak, rel=1e-9)


def test_thrusts_follow_the_rotor_model():
    model = RotorModel(RIG.rotors, RIG.body.centre_of_mass_m)
    speeds = np.random.default_rng(2).uniform(-950, 950, size=(20, 8))
    np.testing.assert_allclose(thrusts(RIG.rotors, speeds),
                               [model.thrust(row) for row in speeds], rtol=1e-12)


def test_tension_comes_from_the_best_source():
    log = flown()
    log.append('carrier_states', TICKS[0], CarrierSample(TICKS[0], ZERO, np.array([0.1, 0, 0.2])))
    log.append('carrier_states', TICKS[-1], CarrierSample(
        TICKS[-1], np.array([0.1, 0.2, 0.3]), np.array([0.1, 0, 0.2])))
    time_s, tension_n = tensions(log, RIG)
    k = 400
    share = (time_s[k] - TICKS[0]) / (TICKS[-1] - TICKS[0])
    truth = log.ground_truth
    expected = tether_wrench(
        RIG.tether, RIG.body.centre_of_mass_m, truth.position_map_m[k], truth.velocity_map_m_s[k],
        truth.quaternion_wxyz[k], ZERO, np.array([0, 0, 6.5]) + share * np.array([0.1, 0.2, 0.3]),
        np.array([0.1, 0, 0.2]))[6]
    assert tension_n[k] == pytest.approx(expected, rel=1e-12)
    for t, tension in ((START_S + 0.5, 41.0), (START_S + 1.0, 73.0), (START_S - 0.5, 5.0)):
        log.append('ground_truth_tether', t, TetherLoadSample(t, tension))
    assert assess(log, RIG).metrics['tether'] == {'tension_min_n': 41.0, 'tension_max_n': 73.0}


def estimated(bias=None, covariance=None):
    """Estimates off the truth by a bias, or scattered as their covariance says."""
    log = flown()
    rng = np.random.default_rng(0)
    full = np.eye(12) if covariance is None else covariance
    root = np.linalg.cholesky(full[:9, :9])
    for t in (TICKS + 0.001)[:-1].tolist():
        point = PATH.at(t)
        error = root @ rng.normal(size=9) if bias is None else bias
        log.append('odometry', t + 0.01, Estimate(
            t, point.position_map_m - error[:3], point.velocity_map_m_s - error[6:9],
            multiply(point.quaternion_wxyz, exponential(-error[3:6])), ZERO, full, ZERO, ZERO,
            Payload(), t, True))
    return log


def test_estimates_are_held_to_the_truth_at_their_own_stamp():
    bias = np.array([0.001, 0.002, 0.002, 0.01, 0.0, 0.0, 0.03, 0.0, 0.04])
    estimation = assess(estimated(bias), RIG).metrics['estimation']
    # Truth is 5 ms apart and taken as linear between: off by at most a h^2/8, h = 5 ms, and the
    # reference's acceleration is 5.77 L/T^2 = 2.9 m/s^2, its jerk 60 L/T^3 = 30 m/s^3.
    assert estimation['position_rms_m'] == pytest.approx(0.003, abs=2.9 * 0.005 ** 2 / 8)
    assert estimation['velocity_rms_m_s'] == pytest.approx(0.05, abs=30 * 0.005 ** 2 / 8)
    assert estimation['attitude_rms_rad'] == pytest.approx(0.01, abs=1e-12)
    # Unit covariance: the squares themselves.
    assert estimation['nees_mean'] == pytest.approx(
        0.003 ** 2 + 0.05 ** 2 + 0.01 ** 2, rel=3e-3)


def test_a_consistent_estimator_has_a_nees_of_nine():
    """
    Band of the mean of N chi-squares of 9; D2 of the checks: Bar-Shalom et al. 2001, 5.4.

    Pose and velocity are correlated here, so the variance of their sum is greater than chi-square
    of 9 has, at most four times; the band is made that much wider.
    """
    rng = np.random.default_rng(5)
    root = np.tril(rng.normal(size=(12, 12))) * 1e-3
    root[6:9, :6] *= 3.0
    covariance = root @ root.T + 1e-8 * np.eye(12)
    nees = assess(estimated(covariance=covariance), RIG).metrics['estimation']['nees_mean']
    count = 400
    low, high = chi2.ppf([0.001, 0.999], 9 * count / 4) / (count / 4)
    assert low < nees < high
    assert 7.0 < low < high < 11.0


def test_an_estimator_that_states_no_covariance_has_no_nees():
    log = estimated(covariance=np.eye(12))
    for k, row in enumerate(log.rows('odometry').rows):
        log.rows('odometry').rows[k] = Estimate(
            row.stamp_s, row.position_map_m, row.velocity_map_m_s, row.quaternion_wxyz, ZERO,
            np.zeros((12, 12)), ZERO, ZERO, Payload(), row.stamp_s, True)
    estimation = assess(log, RIG).metrics['estimation']
    assert estimation['nees_mean'] is None
    assert estimation['position_rms_m'] > 0


def test_timing_by_the_clock_or_by_the_stamps():
    log = flown()
    for t in TICKS.tolist():
        log.append('pose', t, PoseSample(t - 0.008, ZERO, LEVEL))
        log.append('rotor_demand', t + 0.003, RotorCommand(t - 0.008, np.zeros(8)))
        log.append('rotor_command', t + 0.004, RotorCommand(t - 0.008, np.zeros(8)))
    loop = assess(log, RIG).metrics['loop']
    assert loop['rate_hz'] == pytest.approx(200.0, rel=1e-9)
    # Times are differences of doubles about 10.
    assert loop['tick_p50_s'] == pytest.approx(0.004, abs=1e-12)
    log.facts.tick_wall_s = np.linspace(0.0, 0.1, 101)
    log.facts.plan_wall_s = np.linspace(0.0, 1.0, 101)
    loop = assess(log, RIG).metrics['loop']
    assert (loop['tick_p50_s'], loop['tick_p99_s'], loop['tick_max_s'], loop['plan_p99_s']) == (
        pytest.approx(0.05), pytest.approx(0.099), 0.1, pytest.approx(0.99))


def stopped(fault_s=None):
    log = flown()
    for t in TICKS.tolist():
        speed = np.full(8, 300.0 if t < START_S + 1.06 else 0.0)
        log.append('rotor_command', t, RotorCommand(t, speed))
    log.append('safety/state', START_S + 1.05, 'tripped')
    log.add_event(START_S + 1.05, 'pose_stale', 0)
    log.facts.fault_s = fault_s
    return log


def test_latencies_run_from_the_fault():
    metrics = assess(stopped(START_S + 1.0), RIG).metrics
    safety = metrics['safety']
    assert safety['state'] == 'tripped'
    assert safety['reaction_latency_s'] == pytest.approx(0.05, abs=1e-9)
    assert safety['cut_latency_s'] == pytest.approx(0.06, abs=0.0051)   # to the tick
    assert safety['events'] == [{'t_s': pytest.approx(1.05), 'cause': 'pose_stale',
                                 'stop_category': 0}]
    assert metrics['failed_criteria'] == ['run_completed']


def test_latencies_run_from_the_truths_breach_without_a_fault():
    assert assess(stopped(), RIG).metrics['safety']['reaction_latency_s'] is None
    log = stopped()
    rows = log.rows('ground_truth').rows
    for k, row in enumerate(rows):
        if row.stamp_s >= START_S + 1.02:
            rows[k] = PlatformState(row.stamp_s, np.array([4.3, 0.0, 2.6]), ZERO, LEVEL, ZERO)
    safety = assess(log, RIG).metrics['safety']
    assert safety['reaction_latency_s'] == pytest.approx(0.03, abs=1e-9)


def test_what_is_off_the_path_after_a_trip_does_not_count():
    log = stopped()
    rows = log.rows('ground_truth').rows
    for k, row in enumerate(rows):
        if row.stamp_s > START_S + 1.05:
            rows[k] = PlatformState(row.stamp_s, row.position_map_m + 1.0, ZERO, LEVEL, ZERO)
    assert assess(log, RIG).metrics['tracking']['position_max_m'] < 1e-12


def test_criteria_upper_lower_and_on_nothing():
    log = flown(offset=np.array([0.003, 0.0, 0.004]))
    criteria = {'tracking.position_max_m': 0.004, 'tracking.path_max_m': 0.0051,
                'tether.tension_min_n': {'at_least': 5.0}, 'duration_s': {'at_least': 1.0},
                'safety.state': 1.0}
    assessment = assess(log, RIG, criteria)
    assert assessment.metrics['failed_criteria'] == [
        'tracking.position_max_m', 'tether.tension_min_n', 'safety.state']
    assert assessment.metrics['verdict'] == 'fail'
    assert not assessment.passed
    reasons = {one.key: one.reason for one in assessment.criteria}
    assert reasons['tracking.position_max_m'] == 'tracking.position_max_m: 0.005 is above 0.004'
    assert 'no figure' in reasons['tether.tension_min_n']


def test_a_run_that_stopped_early_fails_whatever_its_figures():
    log = flown()
    assert assess(log, RIG).metrics['verdict'] == 'pass'
    log.facts.ended = 'interrupted'
    assert assess(log, RIG).metrics['failed_criteria'] == ['run_completed']


def test_a_recording_gives_the_figures_of_its_run(tmp_path):
    log, rig = synthetic_run(until_s=9.0)
    write_bag(log, names_of(rig), tmp_path / 'run')
    one = json.loads(assess(log, rig).text())
    two = json.loads(assess(read_bag(tmp_path / 'run'), rig).text())
    assert one['tracking']['position_max_m'] > 0
    assert one['estimation']['nees_mean'] > 0

    def compare(a, b, where=''):
        if isinstance(a, dict):
            assert list(a) == list(b)
            for key in a:
                compare(a[key], b[key], f'{where}.{key}')
        elif isinstance(a, float):
            # Times travel in whole nanoseconds, at speeds about 1 m/s.
            assert b == pytest.approx(a, rel=1e-6, abs=1e-8), where
        else:
            assert a == b, where

    compare(one, two)


def test_rows_of_rotations_against_scipy():
    rng = np.random.default_rng(4)
    first, second = Rotation.random(20, rng=rng), Rotation.random(20, rng=rng)
    one, two = first.as_quat(scalar_first=True), second.as_quat(scalar_first=True)
    np.testing.assert_allclose(matrices(one), first.as_matrix(), atol=1e-14)
    np.testing.assert_allclose(rotation_vectors(one, two), (first.inv() * second).as_rotvec(),
                               atol=1e-12)
    part = interpolated_attitudes(np.array([0.25]), np.array([0.0, 1.0]),
                                  np.stack((one[0], two[0])))
    expected = first[0] * Rotation.from_rotvec(0.25 * (first[0].inv() * second[0]).as_rotvec())
    np.testing.assert_allclose(matrices(part)[0], expected.as_matrix(), atol=1e-12)
