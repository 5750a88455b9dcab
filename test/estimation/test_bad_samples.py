"""Samples that are wrong, missing, frozen or far off, on a rig that hangs at rest."""

from dataclasses import replace

from hanging import after, BOUND_M, miss, off_m, record, run
import numpy as np
from numpy.testing import assert_array_equal
import pytest

from suspended_ctrl.estimation.estimator import Estimator
from suspended_ctrl.physics.values import ImuSample, PayloadEvent, PoseSample
from suspended_ctrl.rig.file import load_rig

PLACE = np.array([0.003, -0.002, 2.69])
LEVEL = np.array([1.0, 0.0, 0.0, 0.0])
SIDE = np.array([0.2, 0.0, 0.0])
ZERO = np.zeros(3)
NAN = float('nan')
# NIST/SEMATECH e-Handbook of Statistical Methods, 1.3.6.7.4: three degrees of freedom, 0.999.
CHI2_3_999 = 16.266
# The last stamp of both a pose and a sample of the IMU.
TAKEN_S = max(set.intersection(*({s.stamp_s for s in record().samples() if isinstance(s, kind)}
                                 for kind in (PoseSample, ImuSample))))


@pytest.fixture(name='rig', scope='module')
def _rig():
    return load_rig('bay_head')


@pytest.fixture(name='started')
def _started(rig):
    part = Estimator(rig)
    run(part, record())
    return part


def covered(estimate, recording):
    """Whether the covariance of the position covers its error."""
    error = miss(estimate, recording.truth_at(estimate.stamp_s))[:3]
    return error @ np.linalg.solve(estimate.covariance[:3, :3], error) < CHI2_3_999


def sigma_m(estimate):
    return float(np.sqrt(np.trace(estimate.covariance[:3, :3])))


@pytest.mark.parametrize('offer, reason', [
    (lambda e: e.pose(2.001, (NAN, 0.0, 2.7), LEVEL), 'pose.not_finite'),
    (lambda e: e.pose(2.001, PLACE, (1.0, 0.0, np.inf, 0.0)), 'pose.not_finite'),
    (lambda e: e.pose(NAN, PLACE, LEVEL), 'pose.not_finite'),
    (lambda e: e.pose(2.001, PLACE, 1.01 * LEVEL), 'pose.not_unit'),
    (lambda e: e.pose(2.001, PLACE, np.zeros(4)), 'pose.not_unit'),
    (lambda e: e.pose(2.001, PLACE[:2], LEVEL), 'pose.wrong_size'),
    (lambda e: e.pose(TAKEN_S, PLACE, LEVEL), 'pose.duplicate'),
    (lambda e: e.pose(-1.0, PLACE, LEVEL), 'pose.too_late'),
    (lambda e: e.pose(1.2, PLACE, LEVEL), 'pose.too_late'),
    (lambda e: e.pose(9.0, PLACE, LEVEL), 'pose.too_early'),
    (lambda e: e.imu(2.001, (NAN, 0.0, 0.0), ZERO), 'imu.not_finite'),
    (lambda e: e.imu(2.001, ZERO, (0.0, 0.0, -np.inf)), 'imu.not_finite'),
    (lambda e: e.imu(2.001, np.zeros(4), ZERO), 'imu.wrong_size'),
    (lambda e: e.imu(TAKEN_S, ZERO, ZERO), 'imu.duplicate'),
    (lambda e: e.imu(-0.5, ZERO, ZERO), 'imu.too_late'),
    (lambda e: e.rotors(2.001, np.zeros(3)), 'rotors.wrong_size'),
    (lambda e: e.rotors(2.001, np.full(8, NAN)), 'rotors.not_finite'),
    (lambda e: e.carrier(2.001, (0.0, NAN, 0.0)), 'carrier.not_finite'),
    (lambda e: e.tether_load(2.001, NAN), 'tether.not_finite'),
    (lambda e: e.payload(PayloadEvent(2.001, -1.0)), 'payload.negative'),
])
def test_refused_counted_and_without_effect(started, offer, reason):
    before = started.state(1.985)
    place, spread = before.position_map_m.copy(), before.covariance.copy()
    assert not started.guard.refused
    assert offer(started) is False
    assert dict(started.guard.refused) == {reason: 1}
    now = started.state(1.985)
    assert_array_equal(now.position_map_m, place)
    assert_array_equal(now.covariance, spread)


def test_a_quaternion_rounded_to_four_digits_is_taken(started):
    assert started.pose(2.0, PLACE, np.array([0.9998, -0.0091, -0.0149, 0.0]))


def test_frozen_poses_are_found_and_not_believed(rig):
    recording = record()
    held = []

    def freeze(sample):
        if sample.stamp_s < 1.0:
            held.append(sample)
            return sample
        return replace(held[-1], stamp_s=sample.stamp_s)

    outputs = run(Estimator(rig), recording.poses(freeze))
    last = outputs[-1][1]
    frozen = last.diagnostics['refused.pose.frozen'] + last.diagnostics['refused.pose.repeated']
    assert frozen == last.diagnostics['pose_repeats'] > 190
    assert last.estimate.pose_stamp_s == held[-1].stamp_s
    assert last.estimate.stamp_s > 1.98, 'the other samples go on'
    assert sigma_m(last.estimate) > 10.0 * sigma_m(after(outputs, 0.98)[0])
    assert covered(last.estimate, recording)


def test_a_gap_of_half_a_second_is_bridged(rig):
    recording = record()
    outputs = run(Estimator(rig), recording.poses(
        lambda s: None if 1.0 <= s.stamp_s < 1.5 else s))
    # Poses arrive 8 ms late, and three missing periods of 5 ms tell a gap.
    gap = [out.estimate for t, out in outputs if 1.04 < t < 1.5]
    assert all(estimate.valid and estimate.pose_stamp_s < 1.0 for estimate in gap)
    assert gap[-1].stamp_s > 1.48
    sigmas = [sigma_m(estimate) for estimate in gap]
    assert (np.diff(sigmas) > 0.0).all()
    assert sigmas[-1] > 4.0 * sigmas[0]
    assert all(covered(estimate, recording) for estimate in gap)
    back = after(outputs, 1.52)
    assert back[0].pose_stamp_s >= 1.5
    assert max(off_m(estimate, recording) for estimate in back) < BOUND_M
    assert outputs[-1][1].diagnostics['poses_gated'] == 0


def test_one_outlier_is_gated(rig):
    recording = record()
    spoiled = recording.poses(
        lambda s: replace(s, position_map_m=s.position_map_m + SIDE)
        if abs(s.stamp_s - 1.2) < 1e-6 else s)
    outputs = run(Estimator(rig), spoiled)
    assert max(off_m(estimate, recording) for estimate in after(outputs, 1.0)) < BOUND_M
    figures = outputs[-1][1].diagnostics
    assert figures['poses_gated'] == 1
    assert figures['recoveries'] == 0


def test_a_genuine_jump_is_believed_within_half_a_second(rig):
    recording = record()
    jumped = recording.poses(
        lambda s: replace(s, position_map_m=s.position_map_m + SIDE) if s.stamp_s > 1.0025 else s)
    outputs = run(Estimator(rig), jumped)
    doubting = [out.estimate for t, out in outputs if 1.0 < t < 1.28]
    assert max(off_m(estimate, recording) for estimate in doubting) < BOUND_M
    for estimate in after(outputs, 1.5):
        truth = recording.truth_at(estimate.stamp_s).position_map_m + SIDE
        assert np.linalg.norm(estimate.position_map_m - truth) < BOUND_M
    figures = outputs[-1][1].diagnostics
    assert figures['recoveries'] == 1
    # A platform at rest teaches nothing of the stamps: the monitor is where it began, at 10 ms.
    assert figures['stamp_offset_sigma_s'] == pytest.approx(0.010, rel=0.05)


def test_a_jump_of_the_clock_is_followed(rig):
    recording = record()
    later = recording.changed(
        lambda s: replace(s, stamp_s=s.stamp_s + 100.0) if s.stamp_s > 1.0 else s)
    outputs = run(Estimator(rig), later)
    last = outputs[-1][1]
    assert last.diagnostics['refused.clock.jump'] == 1
    assert last.estimate.valid
    assert last.estimate.stamp_s == pytest.approx(101.99, abs=0.01)
    place = recording.truth_at(last.estimate.stamp_s - 100.0).position_map_m
    assert np.linalg.norm(last.estimate.position_map_m - place) < BOUND_M
