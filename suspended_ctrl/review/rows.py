"""Rotations of many rows at once; the same conventions as ``physics.rotation``."""

import numpy as np

from suspended_ctrl.rig.frozen import Array


def matrices(quaternion: Array) -> Array:
    """Rotation matrices of unit quaternions (w, x, y, z), shape (n, 4) to (n, 3, 3)."""
    w, x, y, z = quaternion.T
    out: Array = np.stack((
        1.0 - 2.0 * (y * y + z * z), 2.0 * (x * y - w * z), 2.0 * (x * z + w * y),
        2.0 * (x * y + w * z), 1.0 - 2.0 * (x * x + z * z), 2.0 * (y * z - w * x),
        2.0 * (x * z - w * y), 2.0 * (y * z + w * x), 1.0 - 2.0 * (x * x + y * y),
    ), axis=1).reshape(-1, 3, 3)
    return out


def rotation_vectors(start: Array, end: Array) -> Array:
    """Rotation vectors in the start's axes from each start to each end, shape (n, 4) to (n, 3)."""
    w0, x0, y0, z0 = start.T
    w1, x1, y1, z1 = end.T
    w = w0 * w1 + x0 * x1 + y0 * y1 + z0 * z1
    vector = np.stack((w0 * x1 - x0 * w1 - y0 * z1 + z0 * y1,
                       w0 * y1 + x0 * z1 - y0 * w1 - z0 * x1,
                       w0 * z1 - x0 * y1 + y0 * x1 - z0 * w1), axis=1)
    sine = np.linalg.norm(vector, axis=1)
    # Near zero angle/sine is 2 to double precision.
    scale = np.where(sine > 1e-8, 2.0 * np.arctan2(sine, np.abs(w)) / np.maximum(sine, 1e-8), 2.0)
    out: Array = (np.where(w < 0.0, -1.0, 1.0) * scale)[:, None] * vector
    return out


def interpolated(t: Array, times: Array, values: Array) -> Array:
    """
    Linear between rows.

    Parameters
    ----------
    t : ndarray, shape (m,)
        Where to look.
    times : ndarray, shape (n,)
        Rising.
    values : ndarray, shape (n,) or (n, k)
        At ``times``.

    Returns
    -------
    ndarray, shape (m,) or (m, k)
        Held at the ends.

    """
    if values.ndim == 1:
        return np.asarray(np.interp(t, times, values))
    return np.stack([np.interp(t, times, column) for column in values.T], axis=1)


def interpolated_attitudes(t: Array, times: Array, quaternion: Array) -> Array:
    """Attitudes between rows at constant rate, shape (m, 4); held at the ends."""
    k = np.clip(np.searchsorted(times, t, side='right') - 1, 0, max(len(times) - 2, 0))
    following = np.minimum(k + 1, len(times) - 1)
    span = np.maximum(times[following] - times[k], 1e-12)
    part = np.clip((t - times[k]) / span, 0.0, 1.0)
    start = quaternion[k]
    turn = part[:, None] * rotation_vectors(start, quaternion[following])
    half = 0.5 * np.linalg.norm(turn, axis=1)
    scale = 0.5 * np.sinc(half / np.pi)
    w1, (x1, y1, z1) = np.cos(half), (scale[:, None] * turn).T
    w0, x0, y0, z0 = start.T
    return np.stack((w0 * w1 - x0 * x1 - y0 * y1 - z0 * z1,
                     w0 * x1 + x0 * w1 + y0 * z1 - z0 * y1,
                     w0 * y1 - x0 * z1 + y0 * w1 + z0 * x1,
                     w0 * z1 + x0 * y1 - y0 * x1 + z0 * w1), axis=1)
