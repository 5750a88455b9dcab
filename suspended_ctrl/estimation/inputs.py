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
        The new sample.
    dt : float
        Since the last sample, s, above zero.
    alpha, beta : float
        Gains on value and rate.

    """
    n = measured.shape[0]
    for i in range(n):
        expected = z[i] + z[n + i] * dt
        rest = measured[i] - expected
        z[i] = expected + alpha * rest
        z[n + i] += beta * rest / dt


@kernel(types.void(VECTOR, MATRIX, MATRIX, MATRIX, MATRIX, VECTOR, VECTOR, VECTOR, REAL, REAL,
                   MATRIX, VECTOR, OUT_VECTOR, OUT_VECTOR))
def rotor_inputs(z: Array, curve_speed: Array, curve_thrust: Array, axis: Array, arm: Array,
                 torque_coefficient: Array, spin: Array, inertia: Array, ahead: float,
                 noise: float, r: Array, c: Array, u: Array, n: Array) -> None:
    """
    Write the rotors' wrench, its rate and their angular momentum into the inputs.

    Noise of the speeds is noise of the wrench: white, of twice its fraction of each thrust.

    Parameters
    ----------
    z : ndarray, shape (2 n,)
        Speeds and their rates.
    curve_speed, curve_thrust, axis, arm, torque_coefficient, spin, inertia : ndarray
        As in ``physics.rotor``.
    ahead : float
        The wrench's rate is the mean over this time, s.
    noise : float
        Root density of the speeds' noise, as a fraction of the speed, s^0.5.
    r : ndarray, shape (3, 3)
        Body to map.
    c : ndarray, shape (28,)
        Body, see ``dynamics``.
    u : ndarray, shape (24,)
        Inputs, see ``dynamics``; 6:21 are written.
    n : ndarray, shape (26,)
        Densities, see ``covariance``; 0:18 get the noise's part added.

    """
    count = z.shape[0] // 2
    still = np.zeros(3)
    speed = z[:count]
    rate = z[count:]
    thrust = _thrust(speed, curve_speed, curve_thrust)
    now = _wrench(thrust, speed, rate, axis, arm,
                  torque_coefficient, spin, inertia, still)
    later = speed + ahead * rate
    then = _wrench(_thrust(later, curve_speed, curve_thrust), later, rate, axis, arm,
                   torque_coefficient, spin, inertia, still)
    for i in range(6):
        u[6 + i] = now[i]
        u[15 + i] = (then[i] - now[i]) / ahead
    for i in range(3):
        u[12 + i] = 0.0
        for k in range(count):
            u[12 + i] += spin[k] * inertia[k] * speed[k] * axis[k, i]
    push = np.empty(3)
    twist = np.empty(3)
    for k in range(count):
        spread = 2.0 * noise * thrust[k]
        for i in range(3):
            push[i] = 0.0
            twist[i] = 0.0
            for m in range(3):
                push[i] += r[i, m] * axis[k, m] * spread / c[0]
                twist[i] += c[10 + 3 * i + m] * arm[k, m] * spread
        for i in range(3):
            for m in range(3):
                n[3 * i + m] += push[i] * push[m]
                n[9 + 3 * i + m] += twist[i] * twist[m]
