"""
Covariance of the 24 errors through a step of the process model.

Errors and body as in ``dynamics``. Process noise: white force and torque, random walks of the
disturbances and of the biases. Its discretisation is Van Loan's (IEEE TAC 23(3), 1978) for the
chains position-velocity-force and attitude-rate-torque, exact when nothing else couples them.

Densities ``n`` (26): white acceleration 0:9 (3x3, map axes, m^2/s^3), white angular acceleration
9:18 (3x3, body axes, rad^2/s^3), walk of the disturbance force 18:21 (map axes, N^2/s), of the
disturbance torque 21:24 (body axes, (N m)^2/s), of the gyroscope bias 24 (rad^2/s^3) and of the
accelerometer bias 25 (m^2/s^5).
"""

from numba import types
import numpy as np

from suspended_ctrl.physics.kernel import kernel, MATRIX, OUT_MATRIX, OUT_VECTOR, REAL, VECTOR
from suspended_ctrl.rig.frozen import Array

DENSITIES = 26


@kernel(types.void(OUT_MATRIX, types.int64, types.int64, REAL))
def _add_twice(p: Array, i: int, k: int, a: float) -> None:
    p[i, k] += a
    p[k, i] += a


@kernel(types.void(OUT_MATRIX, VECTOR, VECTOR, REAL))
def add_noise(p: Array, n: Array, c: Array, dt: float) -> None:
    """Add what the densities ``n`` leave in ``dt`` seconds to the covariance ``p`` (24, 24)."""
    dt2 = dt * dt
    mass = c[0]
    for i in range(3):
        walk = n[18 + i]
        fall = walk / (mass * mass)
        p[i, i] += dt2 * dt2 * dt * fall / 20.0
        p[6 + i, 6 + i] += dt2 * dt * fall / 3.0
        p[18 + i, 18 + i] += dt * walk
        _add_twice(p, i, 6 + i, dt2 * dt2 * fall / 8.0)
        _add_twice(p, i, 18 + i, dt2 * dt * walk / (6.0 * mass))
        _add_twice(p, 6 + i, 18 + i, 0.5 * dt2 * walk / mass)
        p[12 + i, 12 + i] += dt * n[24]
        p[15 + i, 15 + i] += dt * n[25]
        p[21 + i, 21 + i] += dt * n[21 + i]
        for k in range(3):
            white = n[3 * i + k]
            p[i, k] += dt2 * dt * white / 3.0
            p[6 + i, 6 + k] += dt * white
            _add_twice(p, i, 6 + k, 0.5 * dt2 * white)
            white = n[9 + 3 * i + k]
            walk = c[10 + 3 * i + k] * n[21 + k]
            fall = 0.0
            for m in range(3):
                fall += c[10 + 3 * i + m] * n[21 + m] * c[10 + 3 * k + m]
            p[3 + i, 3 + k] += dt2 * dt * (white / 3.0 + dt2 * fall / 20.0)
            p[9 + i, 9 + k] += dt * (white + dt2 * fall / 3.0)
            _add_twice(p, 3 + i, 9 + k, dt2 * (0.5 * white + dt2 * fall / 8.0))
            _add_twice(p, 3 + i, 21 + k, dt2 * dt * walk / 6.0)
            _add_twice(p, 9 + i, 21 + k, 0.5 * dt2 * walk)


@kernel(types.void(MATRIX, MATRIX, VECTOR, VECTOR, REAL, OUT_MATRIX, OUT_MATRIX))
def step_matrix(r: Array, j: Array, s: Array, rate: Array, dt: float, f: Array, e: Array) -> None:
    """
    Write the parts of the transition that are not an identity.

    Parameters
    ----------
    r : ndarray, shape (3, 3)
        Body to map.
    j, s : ndarray
        From ``dynamics.linearise``.
    rate : ndarray, shape (3,)
        Body, rad/s.
    dt : float
        Length of the step, s.
    f : ndarray, shape (6, 24)
        Out: rows of velocity and rate.
    e : ndarray, shape (3, 3)
        Out: attitude by attitude, second order in ``rate * dt``.

    """
    half = 0.5 * dt
    for k in range(24):
        for i in range(3):
            f[i, k] = dt * (r[i, 0] * j[0, k] + r[i, 1] * j[1, k] + r[i, 2] * j[2, k])
            f[3 + i, k] = dt * j[3 + i, k]
    for i in range(3):
        # - R [specific force]x on the attitude.
        f[i, 3] += dt * (r[i, 2] * s[1] - r[i, 1] * s[2])
        f[i, 4] += dt * (r[i, 0] * s[2] - r[i, 2] * s[0])
        f[i, 5] += dt * (r[i, 1] * s[0] - r[i, 0] * s[1])
    # The midpoint's attitude and place count, hence the half steps of rate and velocity.
    for i in range(6):
        for k in range(3):
            f[i, 9 + k] += half * f[i, 3 + k]
            f[i, 6 + k] += half * f[i, k]
    for i in range(3):
        f[i, 6 + i] += 1.0
        f[3 + i, 9 + i] += 1.0
    a, b, d = dt * rate[0], dt * rate[1], dt * rate[2]
    e[0, 0] = 1.0 - 0.5 * (b * b + d * d)
    e[1, 1] = 1.0 - 0.5 * (a * a + d * d)
    e[2, 2] = 1.0 - 0.5 * (a * a + b * b)
    e[0, 1] = d + 0.5 * a * b
    e[1, 0] = -d + 0.5 * a * b
    e[0, 2] = -b + 0.5 * a * d
    e[2, 0] = b + 0.5 * a * d
    e[1, 2] = a + 0.5 * b * d
    e[2, 1] = -a + 0.5 * b * d


@kernel(types.void(OUT_MATRIX, OUT_VECTOR, MATRIX, MATRIX, VECTOR, VECTOR, VECTOR, REAL, VECTOR,
                   OUT_MATRIX))
def spread(p: Array, lag: Array, r: Array, j: Array, s: Array, rate: Array, c: Array, dt: float,
           n: Array, work: Array) -> None:
    """
    Take the covariance through a step: ``p <- F p F' + Q``, and ``lag <- F lag``.

    Parameters
    ----------
    p : ndarray, shape (24, 24)
        Changed in place; stays symmetric to the last bit.
    lag : ndarray, shape (24,)
        Shift of the state for each second of offset of the pose stamps.
    r, j, s, rate :
        As in ``step_matrix``.
    c, n : ndarray
        Body and densities.
    dt : float
        Length of the step, s.
    work : ndarray, shape (12, 24)
        Scratch.

    """
    f = np.empty((6, 24))
    e = np.empty((3, 3))
    step_matrix(r, j, s, rate, dt, f, e)
    half = 0.5 * dt
    # Rows of F p; f has no entries in the bias columns 12:18, nor velocity in the torque's.
    for i in range(6):
        row = 6 + i
        for m in range(24):
            work[row, m] = 0.0
        for k in range(12):
            g = f[i, k]
            for m in range(24):
                work[row, m] += g * p[k, m]
        first = 18 if i < 3 else 21
        for k in range(first, first + 3):
            g = f[i, k]
            for m in range(24):
                work[row, m] += g * p[k, m]
    for i in range(3):
        for m in range(24):
            work[i, m] = p[i, m] + half * (p[6 + i, m] + work[6 + i, m])
            work[3 + i, m] = (e[i, 0] * p[3, m] + e[i, 1] * p[4, m] + e[i, 2] * p[5, m]
                              + half * (p[9 + i, m] + work[9 + i, m]))
    for i in range(12):
        for m in range(12, 24):
            p[i, m] = work[i, m]
            p[m, i] = work[i, m]
    # Columns of (F p) F', upper half.
    for i in range(12):
        for k in range(6):
            total = 0.0
            for m in range(12):
                total += work[i, m] * f[k, m]
            first = 18 if k < 3 else 21
            for m in range(first, first + 3):
                total += work[i, m] * f[k, m]
            p[i, 6 + k] = total
        for k in range(3):
            turned = (work[i, 3] * e[k, 0] + work[i, 4] * e[k, 1] + work[i, 5] * e[k, 2])
            p[i, k] = work[i, k] + half * (work[i, 6 + k] + p[i, 6 + k])
            p[i, 3 + k] = turned + half * (work[i, 9 + k] + p[i, 9 + k])
    for i in range(12):
        for k in range(i):
            p[i, k] = p[k, i]
    add_noise(p, n, c, dt)
    old = lag.copy()
    for i in range(6):
        total = 0.0
        for m in range(24):
            total += f[i, m] * old[m]
        lag[6 + i] = total
    for i in range(3):
        lag[i] += half * (old[6 + i] + lag[6 + i])
        lag[3 + i] = (e[i, 0] * old[3] + e[i, 1] * old[4] + e[i, 2] * old[5]
                      + half * (old[9 + i] + lag[9 + i]))
