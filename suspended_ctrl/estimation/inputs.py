"""
What the process model is driven by: rotor speeds and the anchor, freed of their noise.

An alpha-beta filter each (Kalata, IEEE TAES 20(2), 1984): the speed of a rotor and its rate, the
place of the anchor and its velocity. Between samples both are carried on along their rates.
"""

from numba import types
import numpy as np

from suspended_ctrl.physics.kernel import kernel, MATRIX, OUT_VECTOR, REAL, VECTOR
from suspended_ctrl.physics.rotor import _thrust, _wrench
from suspended_ctrl.rig.frozen import Array


def tracking_gains(index: float) -> tuple[float, float]:
    """
    Steady-state gains of an alpha-beta filter.

    Parameters
    ----------
    index : float
        Tracking index: acceleration noise times squared period over measurement noise.

    Returns
    -------
    alpha, beta : float
        Kalata 1984; on the position, and on the velocity over the period.

    """
    r = (4.0 + index - np.sqrt(8.0 * index + index * index)) / 4.0
    alpha = 1.0 - r * r
    return alpha, 2.0 * (2.0 - alpha) - 4.0 * np.sqrt(1.0 - alpha)


@kernel(types.void(OUT_VECTOR, VECTOR, REAL, REAL, REAL))
def track(z: Array, measured: Array, dt: float, alpha: float, beta: float) -> None:
    """
    One step of an alpha-beta filter in place.

    Parameters
    ----------
    z : ndarray, shape (2 n,)
        Values, then their rates.
    measured : ndarray, shape (n,)
    dt : float
        Since the last sample, s, above zero.
    alpha, beta : float

    """
    n = measured.shape[0]
    for i in range(n):
        expected = z[i] + z[n + i] * dt
        rest = measured[i] - expected
        z[i] = expected + alpha * rest
        z[n + i] += beta * rest / dt


@kernel(types.void(VECTOR, MATRIX, MATRIX, MATRIX, MATRIX, VECTOR, VECTOR, VECTOR, REAL,
                   OUT_VECTOR))
def rotor_inputs(z: Array, curve_speed: Array, curve_thrust: Array, axis: Array, arm: Array,
                 torque_coefficient: Array, spin: Array, inertia: Array, ahead: float,
                 u: Array) -> None:
    """
    Write the rotors' wrench, its rate and their angular momentum into the inputs.

    Parameters
    ----------
    z : ndarray, shape (2 n,)
        Speeds and their rates.
    curve_speed, curve_thrust, axis, arm, torque_coefficient, spin, inertia : ndarray
        As in ``physics.rotor``.
    ahead : float
        The wrench's rate is the mean over this time, s.
    u : ndarray, shape (24,)
        Inputs, see ``dynamics``; 6:21 are written.

    """
    n = z.shape[0] // 2
    still = np.zeros(3)
    speed = z[:n]
    rate = z[n:]
    now = _wrench(_thrust(speed, curve_speed, curve_thrust), speed, rate, axis, arm,
                  torque_coefficient, spin, inertia, still)
    later = speed + ahead * rate
    then = _wrench(_thrust(later, curve_speed, curve_thrust), later, rate, axis, arm,
                   torque_coefficient, spin, inertia, still)
    for i in range(6):
        u[6 + i] = now[i]
        u[15 + i] = (then[i] - now[i]) / ahead
    for i in range(3):
        u[12 + i] = 0.0
        for k in range(n):
            u[12 + i] += spin[k] * inertia[k] * speed[k] * axis[k, i]
