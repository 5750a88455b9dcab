"""Distance of points to a path, whatever the time."""

import numpy as np

from suspended_ctrl.physics.kernel import kernel, MATRIX, OUT_VECTOR
from suspended_ctrl.rig.frozen import Array

# Steps shorter than this have no direction worth comparing.
_STILL_M = 1e-7
# A line may bend by this much and still count as one: 1 um sideways over a metre.
_STRAIGHT_RAD = 1e-6


def segments(points: Array) -> Array:
    """
    Straight pieces of a line of points.

    Parameters
    ----------
    points : ndarray, shape (m, 3)
        In order along the line.

    Returns
    -------
    ndarray, shape (s, 6)
        Start and end of each; points on a straight line are joined, so that a path of thousands of
        points has a few dozen pieces.

    """
    corners = [points[0]]
    last = points[0]
    direction = None
    for point in points[1:]:
        step = point - last
        length = float(np.sqrt(step @ step))
        if length < _STILL_M:
            continue
        along = step / length
        if direction is not None:
            across = along - (along @ direction) * direction
            if along @ direction < 0.0 or across @ across > _STRAIGHT_RAD ** 2:
                corners.append(last)
                direction = along
        else:
            direction = along
        last = point
    corners.append(last)
    line = np.array(corners)
    return np.hstack((line[:-1], line[1:]))


@kernel(OUT_VECTOR(MATRIX, MATRIX))
def distances(points: Array, pieces: Array) -> Array:
    """Distance in m of each point (n, 3) to the nearest of the straight pieces (s, 6)."""
    out = np.empty(points.shape[0])
    for i in range(points.shape[0]):
        best = np.inf
        for k in range(pieces.shape[0]):
            dot = 0.0
            square = 0.0
            for j in range(3):
                edge = pieces[k, 3 + j] - pieces[k, j]
                dot += (points[i, j] - pieces[k, j]) * edge
                square += edge * edge
            part = 0.0 if square == 0.0 else min(max(dot / square, 0.0), 1.0)
            gap = 0.0
            for j in range(3):
                nearest = pieces[k, j] + part * (pieces[k, 3 + j] - pieces[k, j])
                gap += (points[i, j] - nearest) ** 2
            best = min(best, gap)
        out[i] = np.sqrt(best)
    return out
