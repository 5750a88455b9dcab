"""How far the estimate was from the plant's truth, and whether it knew."""

import numpy as np

from suspended_ctrl.review.log import RunLog
from suspended_ctrl.review.measure.on_path import OnPath
from suspended_ctrl.review.measure.summary import finite, root_mean_square, Section
from suspended_ctrl.review.rows import (
    interpolated,
    interpolated_attitudes,
    rotation_vectors,
)
from suspended_ctrl.rig.frozen import Array


def estimation(log: RunLog, path: OnPath) -> Section:
    """
    ``estimation`` of metrics.json: odometry against the truth at the odometry's own stamp.

    Truth between its samples is linear, attitude at constant rate. ``nees_mean``: the mean of the
    normalised error squared of the pose (6) plus that of the velocity (3), truth less estimate;
    nav_msgs/Odometry carries no covariance between the two, and each part's expectation is its
    number of components whatever it is, so a consistent estimator has 9 (Bar-Shalom, Li and
    Kirubarajan, Estimation with Applications to Tracking and Navigation, 2001, section 5.4).
    """
    result: Section = dict.fromkeys((
        'position_rms_m', 'velocity_rms_m_s', 'attitude_rms_rad', 'nees_mean'))
    truth, estimate = log.ground_truth, log.odometry
    if not len(truth) or not len(estimate):
        return result
    time_s = estimate.stamp_s
    known = truth.stamp_s
    on = path.mask(time_s) & (time_s >= known[0]) & (time_s <= known[-1])
    if not on.any():
        return result
    time_s = time_s[on]
    position = interpolated(time_s, known, truth.position_map_m) - estimate.position_map_m[on]
    velocity = interpolated(time_s, known, truth.velocity_map_m_s) - estimate.velocity_map_m_s[on]
    attitude = rotation_vectors(
        estimate.quaternion_wxyz[on],
        interpolated_attitudes(time_s, known, truth.quaternion_wxyz))
    result['position_rms_m'] = root_mean_square(np.linalg.norm(position, axis=1))
    result['velocity_rms_m_s'] = root_mean_square(np.linalg.norm(velocity, axis=1))
    result['attitude_rms_rad'] = root_mean_square(np.linalg.norm(attitude, axis=1))
    pose = normalised_square(np.hstack((position, attitude)), estimate.pose_covariance[on])
    speed = normalised_square(velocity, estimate.twist_covariance[on][:, :3, :3])
    if pose is not None and speed is not None:
        result['nees_mean'] = finite(float(np.mean(pose + speed)))
    return result


def normalised_square(error: Array, covariance: Array) -> Array | None:
    """
    Squares of errors over their covariances, shapes (n, d) and (n, d, d) to (n,).

    Returns
    -------
    ndarray or None
        None where a covariance is not positive definite, as of an estimator that states none.

    """
    try:
        lower = np.linalg.cholesky(covariance)
    except np.linalg.LinAlgError:
        return None
    white = np.linalg.solve(lower, error[:, :, None])[:, :, 0]
    out: Array = np.einsum('ni,ni->n', white, white)
    return out
