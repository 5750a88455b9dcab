"""Commands that make rotors reach a target sooner than their lag would; what can be reached."""

import numpy as np

from suspended_ctrl.physics.kernel import FLAGS, kernel, OUT_MATRIX, OUT_VECTOR, REAL, VECTOR
from suspended_ctrl.rig.frozen import Array


@kernel(OUT_MATRIX(VECTOR, VECTOR, VECTOR, FLAGS, REAL))
def reachable_speed(speed: Array, least: Array, most: Array, reversible: Array,
                    gain: float) -> Array:
    """
    Lowest and highest target whose command ``w + gain (target - w)`` stays inside the range.

    Parameters
    ----------
    speed : ndarray, shape (n,)
        Speed when the command arrives, rad/s.
    least, most : ndarray, shape (n,)
        Least and greatest magnitude.
    reversible : ndarray of bool, shape (n,)
        Which rotors turn both ways.
    gain : float
        At least 1.

    Returns
    -------
    ndarray, shape (2, n)
        One-way rotors: inside ``least`` to ``most`` as far as that can be reached.

    """
    count = speed.shape[0]
    out = np.empty((2, count))
    for i in range(count):
        low = -most[i] if reversible[i] else least[i]
        lowest = speed[i] + (low - speed[i]) / gain
        highest = speed[i] + (most[i] - speed[i]) / gain
        highest = min(highest, most[i])
        lowest = max(lowest, low)
        out[0, i] = min(lowest, highest)
        out[1, i] = highest
    return out


@kernel(OUT_VECTOR(VECTOR, VECTOR, VECTOR, VECTOR, FLAGS, REAL))
def led_command(speed: Array, target: Array, least: Array, most: Array, reversible: Array,
                gain: float) -> Array:
    """
    Command ``w + gain (target - w)`` inside the range, never at rest in an unusable band.

    Parameters
    ----------
    speed, target, least, most, reversible, gain :
        As in ``reachable_speed``.

    Returns
    -------
    ndarray, shape (n,)

    """
    out = np.empty(speed.shape[0])
    for i in range(speed.shape[0]):
        command = speed[i] + gain * (target[i] - speed[i])
        low = -most[i] if reversible[i] else least[i]
        command = min(max(command, low), most[i])
        if reversible[i] and abs(command) < least[i]:
            command = least[i] if target[i] >= 0.0 else -least[i]
        out[i] = command
    return out
