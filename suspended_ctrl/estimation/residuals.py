"""What a sample differs from what the state says, and how that depends on the errors."""

from numba import types
import numpy as np

from suspended_ctrl.physics.kernel import kernel, MATRIX, OUT_MATRIX, OUT_VECTOR, REAL, VECTOR
from suspended_ctrl.rig.frozen import Array

# A motion of five times its standard deviation counts half.
SURE = 25.0


@kernel(types.void(VECTOR, VECTOR, MATRIX, VECTOR, VECTOR, VECTOR, OUT_MATRIX, OUT_VECTOR))
def imu_residual(x: Array, s: Array, j: Array, rate: Array, force: Array, arm: Array, h: Array,
                 nu: Array) -> None:
    """
    Write Jacobian and innovation of gyroscope and accelerometer.

    Parameters
    ----------
    x, j : ndarray
        State and Jacobian of its accelerations, see ``dynamics``.
    s : ndarray, shape (6,) or longer
        Mean specific force and angular acceleration since the last sample: accelerometers
        integrate, so that no motion between two samples is lost.
    rate, force : ndarray, shape (3,)
        Measured, in body axes.
    arm : ndarray, shape (3,)
        Sensor from the centre of mass, body axes.
    h : ndarray, shape (6, 24)
        Out: derivative of (rate, force) by the errors.
    nu : ndarray, shape (6,)
        Out: measured less expected.

    """
    for i in range(3):
        for k in range(24):
            h[i, k] = 0.0
            h[3 + i, k] = j[i, k]
        h[i, 9 + i] = 1.0
        h[i, 12 + i] = 1.0
        h[3 + i, 15 + i] = 1.0
        nu[i] = rate[i] - x[10 + i] - x[13 + i]
        nu[3 + i] = force[i] - s[i] - x[16 + i]
    if arm[0] == 0.0 and arm[1] == 0.0 and arm[2] == 0.0:
        return
    a, b, d = arm[0], arm[1], arm[2]
    u, v, w = x[10], x[11], x[12]
    # Turning of the arm: (alpha x arm) + rate x (rate x arm).
    along = u * a + v * b + w * d
    square = u * u + v * v + w * w
    nu[3] -= s[4] * d - s[5] * b + u * along - a * square
    nu[4] -= s[5] * a - s[3] * d + v * along - b * square
    nu[5] -= s[3] * b - s[4] * a + w * along - d * square
    for k in range(24):
        h[3, k] += j[4, k] * d - j[5, k] * b
        h[4, k] += j[5, k] * a - j[3, k] * d
        h[5, k] += j[3, k] * b - j[4, k] * a
    for i in range(3):
        for k in range(3):
            h[3 + i, 9 + k] += x[10 + i] * arm[k] - 2.0 * arm[i] * x[10 + k]
        h[3 + i, 9 + i] += along


@kernel(types.void(MATRIX, VECTOR, VECTOR, REAL, OUT_MATRIX, OUT_MATRIX))
def imu_noise(r: Array, n: Array, sensor: Array, dt: float, noise: Array, common: Array) -> None:
    """
    Write the IMU's noise and what it has in common with the process noise.

    The accelerometer feels the white force that has moved the platform since its last sample: its
    mean over that time is in the innovation, and its integral in the error of the velocity.

    Parameters
    ----------
    r : ndarray, shape (3, 3)
        Body to map.
    n : ndarray, shape (26,)
        Densities, see ``covariance``.
    sensor : ndarray, shape (6,)
        Variances of gyroscope and accelerometer.
    dt : float
        Since the last sample, s, above zero.
    noise : ndarray, shape (6, 6)
        Out: covariance of the innovation's noise.
    common : ndarray, shape (6, 24)
        Out: covariance of the innovation's noise and the errors.

    """
    for i in range(6):
        for k in range(6):
            noise[i, k] = 0.0
        noise[i, i] = sensor[i]
        for k in range(24):
            common[i, k] = 0.0
    for i in range(3):
        for k in range(3):
            shared = r[0, i] * n[k] + r[1, i] * n[3 + k] + r[2, i] * n[6 + k]
            common[3 + i, 6 + k] = shared
            common[3 + i, k] = 0.5 * dt * shared
    for i in range(3):
        for k in range(3):
            noise[3 + i, 3 + k] += (common[3 + i, 6] * r[0, k] + common[3 + i, 7] * r[1, k]
                                    + common[3 + i, 8] * r[2, k]) / dt


@kernel(types.void(VECTOR, MATRIX, VECTOR, VECTOR, VECTOR, OUT_MATRIX, OUT_VECTOR, OUT_VECTOR))
def pose_residual(x: Array, p: Array, position: Array, quaternion: Array, arm: Array, h: Array,
                  nu: Array, drift: Array) -> None:
    """
    Write Jacobian and innovation of a pose, and how the innovation answers to its stamp.

    Parameters
    ----------
    x, p : ndarray
        State and covariance.
    position : ndarray, shape (3,)
        Of the marker body, map.
    quaternion : ndarray, shape (4,)
        Attitude of the platform (not of the marker body) as measured.
    arm : ndarray, shape (3,)
        Marker body from the centre of mass, body axes.
    h : ndarray, shape (6, 24)
        Out: derivative of (position in map, attitude in body) by the errors.
    nu : ndarray, shape (6,)
        Out: measured less expected.
    drift : ndarray, shape (7,)
        Out: minus the velocity of the marker body and minus the rate; a pose stamped too late by
        d shows ``drift * d``. Each is shrunk towards zero where it is not well above its own
        error, which is in the innovation as well and would pass for an offset; the greater of the
        two shares left is last.

    """
    w, a, b, d = x[6], x[7], x[8], x[9]
    r = np.empty((3, 3))
    r[0, 0] = 1.0 - 2.0 * (b * b + d * d)
    r[0, 1] = 2.0 * (a * b - w * d)
    r[0, 2] = 2.0 * (a * d + w * b)
    r[1, 0] = 2.0 * (a * b + w * d)
    r[1, 1] = 1.0 - 2.0 * (a * a + d * d)
    r[1, 2] = 2.0 * (b * d - w * a)
    r[2, 0] = 2.0 * (a * d - w * b)
    r[2, 1] = 2.0 * (b * d + w * a)
    r[2, 2] = 1.0 - 2.0 * (a * a + b * b)
    for i in range(6):
        for k in range(24):
            h[i, k] = 0.0
    swing = np.empty(3)
    swing[0] = x[11] * arm[2] - x[12] * arm[1]
    swing[1] = x[12] * arm[0] - x[10] * arm[2]
    swing[2] = x[10] * arm[1] - x[11] * arm[0]
    for i in range(3):
        h[i, i] = 1.0
        h[3 + i, 3 + i] = 1.0
        h[i, 3] = r[i, 2] * arm[1] - r[i, 1] * arm[2]
        h[i, 4] = r[i, 0] * arm[2] - r[i, 2] * arm[0]
        h[i, 5] = r[i, 1] * arm[0] - r[i, 0] * arm[1]
        nu[i] = position[i] - x[i]
        drift[i] = -x[3 + i]
        for k in range(3):
            nu[i] -= r[i, k] * arm[k]
            drift[i] -= r[i, k] * swing[k]
        drift[3 + i] = -x[10 + i]
    drift[6] = 0.0
    for first in (0, 3):
        square = drift[first]**2 + drift[first + 1]**2 + drift[first + 2]**2
        error = p[6 + first, 6 + first] + p[7 + first, 7 + first] + p[8 + first, 8 + first]
        weight = square / (square + SURE * error + 1e-12)
        drift[6] = max(drift[6], weight)
        for i in range(3):
            drift[first + i] *= weight
    # Rotation vector of conj(q) times the measurement, Solà eq. 103.
    q0, q1, q2, q3 = quaternion[0], quaternion[1], quaternion[2], quaternion[3]
    e0 = w * q0 + a * q1 + b * q2 + d * q3
    e1 = w * q1 - a * q0 - b * q3 + d * q2
    e2 = w * q2 + a * q3 - b * q0 - d * q1
    e3 = w * q3 - a * q2 + b * q1 - d * q0
    sine = np.sqrt(e1 * e1 + e2 * e2 + e3 * e3)
    scale = 2.0
    if sine > 1e-9:
        scale = 2.0 * np.arctan2(sine, abs(e0)) / sine
    if e0 < 0.0:
        scale = -scale
    nu[3] = scale * e1
    nu[4] = scale * e2
    nu[5] = scale * e3
