"""Readings of the sensors that need arithmetic, one call a sample."""

import numpy as np

from suspended_ctrl.physics.kernel import kernel, OUT_VECTOR, REAL, VECTOR
from suspended_ctrl.physics.rotation import (
    conjugate,
    cross,
    exponential,
    logarithm,
    multiply,
    normalised,
    rotate,
    rotate_back,
)
from suspended_ctrl.rig.constants import GRAVITY_M_S2
from suspended_ctrl.rig.frozen import Array


@kernel(OUT_VECTOR(VECTOR, VECTOR, VECTOR, VECTOR))
def pose_reading(qpos: Array, place: Array, turn: Array, noise: Array) -> Array:
    """Position and quaternion of a body at ``place``, turned by ``turn``; noise (6,) to (7,)."""
    quaternion = qpos[3:7]
    arm = rotate(quaternion, place)
    out = np.empty(7)
    for i in range(3):
        out[i] = qpos[i] + arm[i] + noise[i]
    out[3:7] = normalised(multiply(multiply(quaternion, turn), exponential(noise[3:6])))
    return out


@kernel(OUT_VECTOR(VECTOR, VECTOR, VECTOR, VECTOR, VECTOR, REAL, VECTOR, VECTOR))
def imu_reading(qpos: Array, qvel: Array, before: Array, place: Array, turn: Array, step: float,
                bias: Array, noise: Array) -> Array:
    """
    Rate now and mean specific force over the last step, in sensor axes, shape (6,).

    The force is the change of the sensor's own velocity, lever arm included, less gravity, seen
    from the attitude halfway through the step.

    Parameters
    ----------
    qpos, qvel : ndarray, shapes (7,), (6,)
        As the step ends.
    before : ndarray, shape (10,)
        ``qvel``, then the quaternion, as it began.
    place, turn : ndarray, shapes (3,), (4,)
        Of the sensor in ``base_link``.
    step : float
        Its length, s.
    bias, noise : ndarray, shape (6,)
        Of rate (rad/s), then force (m/s^2), added.

    Returns
    -------
    ndarray, shape (6,)

    """
    departed = before[6:10]
    now = qpos[3:7]
    rate = qvel[3:6]
    swept_before = rotate(departed, cross(before[3:6], place))
    swept = rotate(now, cross(rate, place))
    force_map = np.empty(3)
    for i in range(3):
        change = qvel[i] + swept[i] - before[i] - swept_before[i]
        force_map[i] = change / step
    force_map[2] += GRAVITY_M_S2
    turning = logarithm(multiply(conjugate(departed), now))
    halfway = multiply(departed, exponential(0.5 * turning))
    force = rotate_back(turn, rotate_back(halfway, force_map))
    turned = rotate_back(turn, rate)
    out = np.empty(6)
    for i in range(3):
        out[i] = turned[i] + bias[i] + noise[i]
        out[3 + i] = force[i] + bias[3 + i] + noise[3 + i]
    return out
