"""How far the plant's truth was from where it should have been."""

from dataclasses import dataclass

import numpy as np

from suspended_ctrl.review.log import RunLog
from suspended_ctrl.review.measure.geometry import distances, segments
from suspended_ctrl.review.measure.on_path import OnPath
from suspended_ctrl.review.measure.summary import largest, root_mean_square, Section
from suspended_ctrl.review.rows import rotation_vectors
from suspended_ctrl.rig.frozen import Array


@dataclass(frozen=True, eq=False)
class TrackingSeries:
    """
    Errors over time while on the path, all of shape (n,) or (n, 3); empty without truth.

    Attributes
    ----------
    time_s : ndarray
        Host time: the truth's stamps.
    position_error_map_m : ndarray, shape (n, 3)
        Truth less reference.
    path_distance_m : ndarray
        To the path's geometry, whatever the time.
    attitude_error_rad : ndarray
        Angle between truth and reference.

    """

    time_s: Array
    position_error_map_m: Array
    path_distance_m: Array
    attitude_error_rad: Array


def tracking_series(log: RunLog, path: OnPath) -> TrackingSeries:
    """Errors of ``ground_truth`` against the reference in force, at the truth's stamps."""
    truth = log.ground_truth
    time_s = truth.stamp_s
    on = path.mask(time_s)
    time_s = time_s[on]
    if not len(time_s):
        return TrackingSeries(time_s, np.zeros((0, 3)), time_s, time_s)
    position = truth.position_map_m[on]
    wanted = path.wanted(time_s)
    known = np.isfinite(wanted.position_map_m[:, 0])
    time_s, position = time_s[known], position[known]
    turn = rotation_vectors(wanted.quaternion_wxyz[known], truth.quaternion_wxyz[on][known])
    lines = path.lines()
    distance = (distances(position, np.vstack([segments(line) for line in lines]))
                if lines else np.zeros(0))
    return TrackingSeries(time_s, position - wanted.position_map_m[known], distance,
                          np.linalg.norm(turn, axis=1))


def tracking(series: TrackingSeries) -> Section:
    """
    ``tracking`` of metrics.json.

    ``position_max_m`` and ``position_rms_m`` of the distance at the same time, ``path_max_m`` of
    the distance to the path, ``attitude_max_rad`` and ``attitude_rms_rad`` of the angle.
    """
    distance = np.linalg.norm(series.position_error_map_m, axis=1)
    return {
        'position_max_m': largest(distance), 'position_rms_m': root_mean_square(distance),
        'path_max_m': largest(series.path_distance_m),
        'attitude_max_rad': largest(series.attitude_error_rad),
        'attitude_rms_rad': root_mean_square(series.attitude_error_rad)}
