"""What the drives make of a command."""

import numpy as np

from suspended_ctrl.physics.kernel import kernel, MATRIX, OUT_VECTOR, TRUTH, VECTOR
from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.rig import Carrier, Rotors

# A command this close under the least speed, as a fraction of it, is that speed, rounded.
_ROUNDING = 1e-6


@kernel(TRUTH(VECTOR, MATRIX, OUT_VECTOR))
def take_speeds(speed: Array, limits: Array, target: Array) -> bool:
    """
    Write the speeds that the drives will go to; false, and nothing written, if one is no number.

    Clipped to the greatest speed, and to zero for a one-way rotor told to turn backwards. Speed
    controllers cannot hold a speed that they cannot measure (common practice), so a command below
    the least speed, zero among them, switches the drive off and the rotor coasts down.

    Parameters
    ----------
    speed : ndarray, shape (n,)
        As commanded, rad/s.
    limits : ndarray, shape (n, 3)
        From ``rotor_limits``.
    target : ndarray, shape (n,)
        Written.

    Returns
    -------
    bool

    """
    for i in range(speed.shape[0]):
        if not np.isfinite(speed[i]):
            return False
    for i in range(speed.shape[0]):
        clipped = min(max(speed[i], limits[i, 0]), limits[i, 1])
        target[i] = clipped if abs(clipped) >= limits[i, 2] else 0.0
    return True


@kernel(TRUTH(VECTOR, VECTOR, MATRIX, OUT_VECTOR))
def take_positions(position: Array, velocity: Array, limits: Array, target: Array) -> bool:
    """
    Write where the axes will go, clipped to their travel.

    Parameters
    ----------
    position, velocity : ndarray, shape (k,)
        As commanded, m and m/s.
    limits : ndarray, shape (k, 2)
        From ``axis_limits``.
    target : ndarray, shape (k,)
        Written.

    Returns
    -------
    bool
        False, and nothing written, if anything is no finite number.

    """
    for i in range(position.shape[0]):
        if not (np.isfinite(position[i]) and np.isfinite(velocity[i])):
            return False
    for i in range(position.shape[0]):
        target[i] = min(max(position[i], limits[i, 0]), limits[i, 1])
    return True


def rotor_limits(rotors: Rotors) -> Array:
    """Least and greatest target, least speed that can be held, shape (n, 3), rad/s."""
    least = np.where(rotors.reversible, -rotors.speed_max_rad_s, 0.0)
    held = rotors.speed_min_rad_s * (1.0 - _ROUNDING)
    return np.ascontiguousarray(np.column_stack((least, rotors.speed_max_rad_s, held)))


def axis_limits(carrier: Carrier) -> Array:
    """Return the ends of travel, shape (k, 2), m."""
    return np.ascontiguousarray(np.column_stack((carrier.min_m, carrier.max_m)))


def row(value: object, count: int) -> Array | None:
    """Return ``value`` as a contiguous array of ``count`` numbers, None if it is none."""
    try:
        array = np.ascontiguousarray(value, dtype=np.float64)
    except (TypeError, ValueError):
        return None
    return array if array.shape == (count,) else None
