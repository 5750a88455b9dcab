"""
Motion of the platform as the filter believes it, and its derivatives.

Flat vectors keep the calls cheap; every kernel of the filter reads them by the same places.
State ``x`` (25): position 0:3 and velocity 3:6 of the centre of mass (map), quaternion 6:10, rate
10:13 (body), gyroscope bias 13:16, accelerometer bias 16:19 (body), disturbance force 19:22 (map),
disturbance torque 22:25 (body).

Errors (24): position 0:3, attitude 3:6 (body rotation vector), velocity 6:9, rate 9:12, gyroscope
bias 12:15, accelerometer bias 15:18, disturbance force 18:21, disturbance torque 21:24.

Inputs ``u`` (24): anchor 0:3 and its velocity 3:6 (map), rotor wrench 6:12 (body, about the
centre of mass), rotor angular momentum 12:15, rate of the wrench 15:21, stamps of carrier and
rotors 21:23, what a load cell adds to the tension 23.

Body ``c`` (28): mass 0, inertia 1:10, its inverse 10:19, hook from the centre of mass 19:22, rest
length 22, stiffness 23, damping 24, gravity 25, longest extrapolation of rotors and carrier 26:28.
"""

from numba import types
import numpy as np

from suspended_ctrl.physics.kernel import kernel, OUT_MATRIX, OUT_VECTOR, REAL, VECTOR
from suspended_ctrl.rig.frozen import Array

STATES = 25
ERRORS = 24
INPUTS = 24
BODY = 28
FELT = 7


@kernel(types.void(OUT_VECTOR, REAL, REAL, REAL))
def _turn(x: Array, a: float, b: float, d: float) -> None:
    """Turn the attitude by the body rotation vector (a, b, d), Solà eq. 101."""
    angle2 = a * a + b * b + d * d
    angle = np.sqrt(angle2)
    if angle < 1e-4:
        scale = 0.5 - angle2 / 48.0
    else:
        scale = np.sin(0.5 * angle) / angle
    w1 = np.cos(0.5 * angle)
    x1 = scale * a
    y1 = scale * b
    z1 = scale * d
    w0, x0, y0, z0 = x[6], x[7], x[8], x[9]
    w = w0 * w1 - x0 * x1 - y0 * y1 - z0 * z1
    i = w0 * x1 + x0 * w1 + y0 * z1 - z0 * y1
    j = w0 * y1 - x0 * z1 + y0 * w1 + z0 * x1
    k = w0 * z1 + x0 * y1 - y0 * x1 + z0 * w1
    norm = 1.0 / np.sqrt(w * w + i * i + j * j + k * k)
    x[6] = w * norm
    x[7] = i * norm
    x[8] = j * norm
    x[9] = k * norm


@kernel(types.void(VECTOR, OUT_MATRIX))
def attitude_matrix(x: Array, r: Array) -> None:
    """Write the matrix from body to map of the state's quaternion, Solà eq. 115."""
    w, i, j, k = x[6], x[7], x[8], x[9]
    r[0, 0] = 1.0 - 2.0 * (j * j + k * k)
    r[0, 1] = 2.0 * (i * j - w * k)
    r[0, 2] = 2.0 * (i * k + w * j)
    r[1, 0] = 2.0 * (i * j + w * k)
    r[1, 1] = 1.0 - 2.0 * (i * i + k * k)
    r[1, 2] = 2.0 * (j * k - w * i)
    r[2, 0] = 2.0 * (i * k - w * j)
    r[2, 1] = 2.0 * (j * k + w * i)
    r[2, 2] = 1.0 - 2.0 * (i * i + j * j)


@kernel(types.void(OUT_VECTOR, REAL, REAL, REAL, REAL, REAL, REAL))
def _cross(out: Array, a0: float, a1: float, a2: float, b0: float, b1: float, b2: float) -> None:
    out[0] = a1 * b2 - a2 * b1
    out[1] = a2 * b0 - a0 * b2
    out[2] = a0 * b1 - a1 * b0


@kernel(types.void(OUT_MATRIX, types.int64, types.int64, REAL, VECTOR))
def _add_skew(m: Array, row: int, column: int, scale: float, v: Array) -> None:
    """Add ``scale [v]x`` to a 3x3 block of ``m``."""
    m[row, column + 1] -= scale * v[2]
    m[row, column + 2] += scale * v[1]
    m[row + 1, column] += scale * v[2]
    m[row + 1, column + 2] -= scale * v[0]
    m[row + 2, column] -= scale * v[1]
    m[row + 2, column + 1] += scale * v[0]


@kernel(types.void(VECTOR, VECTOR, VECTOR, REAL, OUT_VECTOR, OUT_MATRIX, OUT_MATRIX,
                   types.boolean))
def _model(x: Array, u: Array, c: Array, t: float, s: Array, j: Array, r: Array,
           want: bool) -> None:
    """
    Specific force and angular acceleration, and their Jacobian if wanted.

    ``s`` (7): specific force of the centre of mass 0:3 (body), angular acceleration 3:6 (body),
    tension 6. ``j`` (6, 24): derivative of s[0:6] by the errors. ``r`` (3, 3): body to map.
    """
    attitude_matrix(x, r)
    mass = c[0]
    rate = x[10:13]
    hook = c[19:22]
    age = min(max(t - u[22], 0.0), c[26])
    drift = min(max(t - u[21], 0.0), c[27])
    # Tether, in map.
    hook_rate = np.empty(3)
    _cross(hook_rate, rate[0], rate[1], rate[2], hook[0], hook[1], hook[2])
    span = np.empty(3)
    closing = np.empty(3)
    length2 = 0.0
    for i in range(3):
        arm = r[i, 0] * hook[0] + r[i, 1] * hook[1] + r[i, 2] * hook[2]
        swing = r[i, 0] * hook_rate[0] + r[i, 1] * hook_rate[1] + r[i, 2] * hook_rate[2]
        span[i] = u[i] + u[3 + i] * drift - x[i] - arm
        closing[i] = u[3 + i] - x[3 + i] - swing
        length2 += span[i] * span[i]
    length = np.sqrt(length2)
    tension = 0.0
    if c[23] > 0.0 and length > c[22]:
        stretch_rate = 0.0
        for i in range(3):
            span[i] /= length
            stretch_rate += span[i] * closing[i]
        tension = max(c[23] * (length - c[22]) + c[24] * stretch_rate + u[23], 0.0)
    pull = np.zeros(3)
    outside = np.empty(3)
    for i in range(3):
        for k in range(3):
            pull[i] += r[k, i] * tension * span[k]
        outside[i] = pull[i]
        for k in range(3):
            outside[i] += r[k, i] * x[19 + k]
    momentum = np.empty(3)
    for i in range(3):
        momentum[i] = (c[1 + 3 * i] * rate[0] + c[2 + 3 * i] * rate[1] + c[3 + 3 * i] * rate[2]
                       + u[12 + i])
    torque = np.empty(3)
    _cross(torque, momentum[0], momentum[1], momentum[2], rate[0], rate[1], rate[2])
    torque[0] += hook[1] * pull[2] - hook[2] * pull[1]
    torque[1] += hook[2] * pull[0] - hook[0] * pull[2]
    torque[2] += hook[0] * pull[1] - hook[1] * pull[0]
    for i in range(3):
        s[i] = (u[6 + i] + u[15 + i] * age + outside[i]) / mass
        torque[i] += u[9 + i] + u[18 + i] * age + x[22 + i]
    for i in range(3):
        s[3 + i] = (c[10 + 3 * i] * torque[0] + c[11 + 3 * i] * torque[1]
                    + c[12 + 3 * i] * torque[2])
    s[6] = tension
    if not want:
        return
    for i in range(6):
        for k in range(24):
            j[i, k] = 0.0
    # Rows 0:3 collect the tether's force in body axes, rows 3:6 the torque.
    if tension > 0.0:
        for i in range(3):
            for k in range(3):
                # Force by place of the hook, then by its velocity, in map.
                across = (1.0 if i == k else 0.0) - span[i] * span[k]
                by_rate = 0.0
                for n in range(3):
                    by_rate += ((1.0 if n == k else 0.0) - span[n] * span[k]) * closing[n]
                stiff = -(span[i] * (c[23] * span[k] + c[24] * by_rate / length)
                          + tension / length * across)
                damp = -c[24] * span[i] * span[k]
                for n in range(3):
                    j[n, k] += r[i, n] * stiff
                    j[n, 6 + k] += r[i, n] * damp
        for n in range(3):
            by_place = np.zeros(3)
            by_speed = np.zeros(3)
            for m in range(3):
                for k in range(3):
                    by_place[m] += j[n, k] * r[k, m]
                    by_speed[m] += j[n, 6 + k] * r[k, m]
            turned = np.empty(3)
            # row' (-[h]x) = (h x row)'
            _cross(turned, hook[0], hook[1], hook[2], by_place[0], by_place[1], by_place[2])
            for m in range(3):
                j[n, 3 + m] += turned[m]
            _cross(turned, hook_rate[0], hook_rate[1], hook_rate[2],
                   by_speed[0], by_speed[1], by_speed[2])
            for m in range(3):
                j[n, 3 + m] += turned[m]
            _cross(turned, hook[0], hook[1], hook[2], by_speed[0], by_speed[1], by_speed[2])
            for m in range(3):
                j[n, 9 + m] += turned[m]
    _add_skew(j, 0, 3, 1.0, pull)
    for k in range(12):
        j[3, k] = hook[1] * j[2, k] - hook[2] * j[1, k]
        j[4, k] = hook[2] * j[0, k] - hook[0] * j[2, k]
        j[5, k] = hook[0] * j[1, k] - hook[1] * j[0, k]
    _add_skew(j, 3, 9, 1.0, momentum)
    for k in range(3):
        # -[rate]x times the inertia, column k.
        a0, a1, a2 = c[1 + k], c[4 + k], c[7 + k]
        j[3, 9 + k] -= rate[1] * a2 - rate[2] * a1
        j[4, 9 + k] -= rate[2] * a0 - rate[0] * a2
        j[5, 9 + k] -= rate[0] * a1 - rate[1] * a0
    for k in range(12):
        b0, b1, b2 = j[3, k], j[4, k], j[5, k]
        for i in range(3):
            j[3 + i, k] = c[10 + 3 * i] * b0 + c[11 + 3 * i] * b1 + c[12 + 3 * i] * b2
    push = np.empty(3)
    for i in range(3):
        push[i] = outside[i] - pull[i]
    _add_skew(j, 0, 3, 1.0, push)
    for i in range(3):
        for k in range(3):
            j[i, 18 + k] = r[k, i]
            j[3 + i, 21 + k] = c[10 + 3 * i + k]
        for k in range(24):
            j[i, k] /= mass


@kernel(types.void(VECTOR, VECTOR, VECTOR, REAL, OUT_VECTOR, OUT_MATRIX, OUT_MATRIX))
def linearise(x: Array, u: Array, c: Array, t: float, s: Array, j: Array, r: Array) -> None:
    """
    Write what the model says of the accelerations now, and its derivative.

    Parameters
    ----------
    x, u, c : ndarray
        State, inputs, body; see the module.
    t : float
        Stamp of the state, s.
    s : ndarray, shape (7,)
        Out: specific force of the centre of mass, angular acceleration (body axes), tension.
    j : ndarray, shape (6, 24)
        Out: derivative of the first six by the errors.
    r : ndarray, shape (3, 3)
        Out: body to map.

    """
    _model(x, u, c, t, s, j, r, True)


@kernel(types.void(VECTOR, VECTOR, VECTOR, REAL, OUT_VECTOR))
def evaluate(x: Array, u: Array, c: Array, t: float, s: Array) -> None:
    """Write ``s`` of ``linearise`` for the same ``x``, ``u``, ``c`` and ``t``, no derivative."""
    _model(x, u, c, t, s, np.empty((6, 24)), np.empty((3, 3)), False)


@kernel(types.void(OUT_VECTOR, VECTOR, VECTOR, REAL, REAL, OUT_VECTOR))
def move(x: Array, u: Array, c: Array, t: float, dt: float, felt: Array) -> None:
    """
    Move the state from ``t`` by ``dt`` seconds in place, by the midpoint rule.

    Parameters
    ----------
    x, u, c : ndarray
        State (changed), inputs, body; see the module.
    t, dt : float
        Stamp of the state and length of the step, s.
    felt : ndarray, shape (7,)
        Specific force and angular acceleration times ``dt`` are added to 0:6, ``dt`` to 6.

    """
    s = np.empty(7)
    unused = np.empty((6, 24))
    r = np.empty((3, 3))
    y = x.copy()
    half = 0.5 * dt
    _model(x, u, c, t, s, unused, r, False)
    for i in range(3):
        a = r[i, 0] * s[0] + r[i, 1] * s[1] + r[i, 2] * s[2]
        if i == 2:
            a -= c[25]
        y[i] += half * x[3 + i]
        y[3 + i] += half * a
        y[10 + i] += half * s[3 + i]
    _turn(y, half * x[10], half * x[11], half * x[12])
    _model(y, u, c, t + half, s, unused, r, False)
    _turn(x, dt * y[10], dt * y[11], dt * y[12])
    for i in range(3):
        a = r[i, 0] * s[0] + r[i, 1] * s[1] + r[i, 2] * s[2]
        if i == 2:
            a -= c[25]
        x[i] += dt * (x[3 + i] + half * a)
        x[3 + i] += dt * a
        x[10 + i] += dt * s[3 + i]
        felt[i] += dt * s[i]
        felt[3 + i] += dt * s[3 + i]
    felt[6] += dt


@kernel(types.void(OUT_VECTOR, VECTOR))
def inject(x: Array, error: Array) -> None:
    """Correct the state in place by an error of 24 components."""
    for i in range(3):
        x[i] += error[i]
        x[3 + i] += error[6 + i]
        x[10 + i] += error[9 + i]
        x[13 + i] += error[12 + i]
        x[16 + i] += error[15 + i]
        x[19 + i] += error[18 + i]
        x[22 + i] += error[21 + i]
    _turn(x, error[3], error[4], error[5])
