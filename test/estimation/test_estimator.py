"""The estimator on a simulated rig that hangs at rest: promises of accuracy and of order."""

from hanging import after, BOUND_M, miss, off_m, record, run
import numpy as np
from numpy.testing import assert_allclose, assert_array_equal
import pytest
from scipy.stats import chi2

from suspended_ctrl.estimation.estimator import Estimator
from suspended_ctrl.estimation.settings import EstimatorSettings
from suspended_ctrl.physics.values import ImuSample, PoseSample
from suspended_ctrl.rig.file import load_rig

SEEDS = range(8)


@pytest.fixture(name='rig', scope='module')
def _rig():
    return load_rig('bay_head')


@pytest.fixture(name='hung', scope='module')
def _hung(rig):
    """Eight rigs, each off from its file in its own way: recording and what came out."""
    return [(record(seed, 1.0), run(Estimator(rig), record(seed, 1.0))) for seed in SEEDS]


def test_starts_within_a_second_and_knows_the_place_within_a_millimetre(hung):
    for recording, outputs in hung:
        started = min(t for t, out in outputs if out.estimate.valid)
        assert 0.4 <= started < 1.0, 'the window of alignment is 0.4 s'
        valid = [out.estimate for _, out in outputs if out.estimate.valid]
        assert max(off_m(estimate, recording) for estimate in valid) < BOUND_M
        assert outputs[-1][1].message == ''


def test_estimates_are_better_than_the_poses(hung):
    square, count = 0.0, 0
    for recording, outputs in hung:
        errors = [off_m(estimate, recording) for estimate in after(outputs, 0.6)]
        square += float(np.sum(np.square(errors)))
        count += len(errors)
    # Poses: 0.3 mm on each of three axes.
    assert np.sqrt(square / count) < 0.5 * 0.0003 * np.sqrt(3.0)


def test_before_the_start_there_is_no_estimate(rig):
    outputs = run(Estimator(rig), record(1, 1.0))
    early = [out.estimate for t, out in outputs if t < 0.39]
    assert early
    assert not any(estimate.valid for estimate in early)
    assert all(np.isnan(estimate.position_map_m).all() for estimate in early)


@pytest.mark.parametrize('parts', [slice(0, 3), slice(0, 6), slice(0, 12)])
def test_covariance_covers_the_truth(hung, parts):
    # Bar-Shalom, Li, Kirubarajan 2001, 5.4: the sum over independent runs is chi-square.
    total, freedom = 0.0, 0
    for recording, outputs in hung:
        estimate = outputs[-1][1].estimate
        error = miss(estimate, recording.truth_at(estimate.stamp_s))[parts]
        total += error @ np.linalg.solve(estimate.covariance[parts, parts], error)
        freedom += error.size
    # Wrong alarms once in a thousand draws of the seeds, on either side.
    assert chi2.ppf(0.0005, freedom) < total < chi2.ppf(0.9995, freedom)


def test_a_swinging_platform_does_not_start(rig):
    outputs = run(Estimator(rig), record(1, 1.0, (0.3, 0.0, 0.0)))
    assert not any(out.estimate.valid for _, out in outputs)
    assert 'hold still' in outputs[-1][1].message


def test_same_inputs_same_outputs(rig):
    first, second = (run(Estimator(rig), record()) for _ in range(2))
    for (_, a), (_, b) in zip(first, second, strict=True):
        assert a.estimate.stamp_s == b.estimate.stamp_s or not a.estimate.valid
        assert_array_equal(a.estimate.position_map_m, b.estimate.position_map_m)
        assert_array_equal(a.estimate.covariance, b.estimate.covariance)
        assert_array_equal(a.estimate.disturbance_force_map_n, b.estimate.disturbance_force_map_n)


def test_stamps_never_go_back(rig):
    rng = np.random.default_rng(2)
    recording = record().poses(lambda s: s if rng.random() < 0.5 else None)
    stamps = [estimate.stamp_s for estimate in after(run(Estimator(rig), recording), 0.6)]
    assert (np.diff(stamps) >= 0.0).all()
    assert stamps[-1] > 1.9


# ---------------------------------------------------------------- order of arrival


def shuffled(sample, rng):
    return rng.uniform(0.0, 0.1)


def late_poses(sample, rng):
    return 0.15 if isinstance(sample, PoseSample) else 0.0


def late_imu(sample, rng):
    return 0.1 if isinstance(sample, ImuSample) else 0.0


@pytest.mark.parametrize('lateness', [shuffled, late_poses, late_imu])
def test_order_of_arrival_does_not_matter(rig, lateness):
    rng = np.random.default_rng(4)
    samples = sorted(record().samples(), key=lambda s: s.stamp_s)
    # Start-up is the same for both.
    first = [s for s in samples if s.stamp_s < 0.7]
    rest = [s for s in samples if s.stamp_s >= 0.7]
    mixed = [s for _, _, s in sorted((s.stamp_s + lateness(s, rng), i, s)
                                     for i, s in enumerate(rest))]
    assert [s.stamp_s for s in mixed] != [s.stamp_s for s in rest]
    inside, outside = Estimator(rig), Estimator(rig)
    for part, order in ((inside, rest), (outside, mixed)):
        for sample in first + order:
            assert part.take(sample)
    end = max(s.stamp_s for s in rest if isinstance(s, PoseSample))
    assert outside.guard.accepted == inside.guard.accepted > 390
    want, have = inside.state(end), outside.state(end)
    # Going back linearises once more at the snapshot than going on did: second order of a
    # correction of 1e-5, far under the standard deviations of 1e-4 m and 1e-3 m/s.
    assert_allclose(have.position_map_m, want.position_map_m, atol=1e-8)
    assert_allclose(have.velocity_map_m_s, want.velocity_map_m_s, atol=1e-7)
    assert_allclose(have.quaternion_wxyz, want.quaternion_wxyz, atol=1e-8)
    assert_allclose(have.disturbance_force_map_n, want.disturbance_force_map_n, atol=1e-5)
    assert_allclose(np.diag(have.covariance), np.diag(want.covariance), rtol=1e-4)


# ---------------------------------------------------------------- without a rig


def test_without_a_rig_poses_and_imu_are_enough():
    part = Estimator(None, EstimatorSettings(position_noise_m=0.0003, attitude_noise_rad=0.001))
    recording = record()
    outputs = run(part, recording)
    estimates = after(outputs, 0.6)
    assert all(estimate.valid for estimate in estimates)
    # This rig's marker body and IMU sit at the origin.
    assert max(off_m(estimate, recording) for estimate in estimates) < BOUND_M
    assert not part.rotors(2.1, np.zeros(8))
    assert not part.carrier(2.1, np.zeros(3))


def test_without_rig_and_settings_it_says_what_is_missing():
    with pytest.raises(ValueError, match='settings'):
        Estimator()


def test_starts_from_the_first_pose_if_told_so():
    settings = EstimatorSettings(position_noise_m=0.0003, attitude_noise_rad=0.001,
                                 alignment_s=0.0)
    recording = record()
    outputs = run(Estimator(None, settings), recording)
    assert min(t for t, out in outputs if out.estimate.valid) < 0.02
    # It begins at any speed up to metres a second and has to learn the weight.
    late = after(outputs, 1.0)
    assert max(off_m(estimate, recording) for estimate in late) < BOUND_M
