"""
Rotations as unit quaternions (w, x, y, z) and rotation vectors.

Hamilton convention, active, body to map where nothing else is said: ``v_map = R(q) v_body``.
Formulas: J. Solà, Quaternion kinematics for the error-state Kalman filter, arXiv:1711.02508.
"""

import numpy as np

from suspended_ctrl.physics.kernel import kernel, MATRIX, OUT_MATRIX, OUT_VECTOR, REAL, VECTOR
from suspended_ctrl.rig.frozen import Array

from transforms3d.euler import euler2quat, quat2euler

# Below this angle series replace quotients; their next term is under 1e-17 there.
_SMALL_RAD = 1e-4


@kernel(OUT_VECTOR(VECTOR, VECTOR))
def cross(a: Array, b: Array) -> Array:
    """Vector product of two 3-vectors."""
    out = np.empty(3)
    out[0] = a[1] * b[2] - a[2] * b[1]
    out[1] = a[2] * b[0] - a[0] * b[2]
    out[2] = a[0] * b[1] - a[1] * b[0]
    return out


@kernel(OUT_MATRIX(VECTOR))
def skew(v: Array) -> Array:
    """Matrix whose product with ``u`` is ``v x u``."""
    out = np.zeros((3, 3))
    out[0, 1] = -v[2]
    out[0, 2] = v[1]
    out[1, 0] = v[2]
    out[1, 2] = -v[0]
    out[2, 0] = -v[1]
    out[2, 1] = v[0]
    return out


@kernel(OUT_VECTOR(VECTOR, VECTOR))
def multiply(p: Array, q: Array) -> Array:
    """Hamilton product, Solà eq. 12; ``R(p q) = R(p) R(q)``."""
    out = np.empty(4)
    out[0] = p[0] * q[0] - p[1] * q[1] - p[2] * q[2] - p[3] * q[3]
    out[1] = p[0] * q[1] + p[1] * q[0] + p[2] * q[3] - p[3] * q[2]
    out[2] = p[0] * q[2] - p[1] * q[3] + p[2] * q[0] + p[3] * q[1]
    out[3] = p[0] * q[3] + p[1] * q[2] - p[2] * q[1] + p[3] * q[0]
    return out


@kernel(OUT_VECTOR(VECTOR))
def conjugate(q: Array) -> Array:
    """Inverse of a unit quaternion."""
    out = np.empty(4)
    out[0] = q[0]
    out[1] = -q[1]
    out[2] = -q[2]
    out[3] = -q[3]
    return out


@kernel(OUT_VECTOR(VECTOR))
def normalised(q: Array) -> Array:
    """Quaternion of unit norm with ``w >= 0``."""
    norm = np.sqrt(q[0] * q[0] + q[1] * q[1] + q[2] * q[2] + q[3] * q[3])
    if q[0] < 0.0:
        norm = -norm
    out: Array = q / norm
    return out


@kernel(OUT_MATRIX(VECTOR))
def matrix(q: Array) -> Array:
    """Rotation matrix of a unit quaternion, Solà eq. 115, shape (3, 3)."""
    w, x, y, z = q[0], q[1], q[2], q[3]
    out = np.empty((3, 3))
    out[0, 0] = 1.0 - 2.0 * (y * y + z * z)
    out[0, 1] = 2.0 * (x * y - w * z)
    out[0, 2] = 2.0 * (x * z + w * y)
    out[1, 0] = 2.0 * (x * y + w * z)
    out[1, 1] = 1.0 - 2.0 * (x * x + z * z)
    out[1, 2] = 2.0 * (y * z - w * x)
    out[2, 0] = 2.0 * (x * z - w * y)
    out[2, 1] = 2.0 * (y * z + w * x)
    out[2, 2] = 1.0 - 2.0 * (x * x + y * y)
    return out


@kernel(OUT_VECTOR(VECTOR, VECTOR))
def rotate(q: Array, v: Array) -> Array:
    """``R(q) v``."""
    t0 = 2.0 * (q[2] * v[2] - q[3] * v[1])
    t1 = 2.0 * (q[3] * v[0] - q[1] * v[2])
    t2 = 2.0 * (q[1] * v[1] - q[2] * v[0])
    out = np.empty(3)
    out[0] = v[0] + q[0] * t0 + q[2] * t2 - q[3] * t1
    out[1] = v[1] + q[0] * t1 + q[3] * t0 - q[1] * t2
    out[2] = v[2] + q[0] * t2 + q[1] * t1 - q[2] * t0
    return out


@kernel(OUT_VECTOR(VECTOR, VECTOR))
def rotate_back(q: Array, v: Array) -> Array:
    """``R(q)^T v``."""
    return rotate(conjugate(q), v)


@kernel(OUT_VECTOR(VECTOR))
def exponential(phi: Array) -> Array:
    """Turn a rotation vector in rad into a unit quaternion, Solà eq. 101."""
    angle2 = phi[0] * phi[0] + phi[1] * phi[1] + phi[2] * phi[2]
    angle = np.sqrt(angle2)
    out = np.empty(4)
    out[0] = np.cos(0.5 * angle)
    if angle < _SMALL_RAD:
        scale = 0.5 - angle2 / 48.0
    else:
        scale = np.sin(0.5 * angle) / angle
    out[1] = scale * phi[0]
    out[2] = scale * phi[1]
    out[3] = scale * phi[2]
    return out


@kernel(OUT_VECTOR(VECTOR))
def logarithm(q: Array) -> Array:
    """Rotation vector of a unit quaternion, at most pi long, Solà eq. 103."""
    sign = -1.0 if q[0] < 0.0 else 1.0
    sine = np.sqrt(q[1] * q[1] + q[2] * q[2] + q[3] * q[3])
    cosine = sign * q[0]
    if sine < _SMALL_RAD:
        scale = 2.0 / cosine * (1.0 - sine * sine / (3.0 * cosine * cosine))
    else:
        scale = 2.0 * np.arctan2(sine, cosine) / sine
    out = np.empty(3)
    out[0] = sign * scale * q[1]
    out[1] = sign * scale * q[2]
    out[2] = sign * scale * q[3]
    return out


@kernel(OUT_MATRIX(VECTOR))
def right_jacobian(phi: Array) -> Array:
    """Right Jacobian of SO(3), Solà eq. 183: ``Exp(phi + d) ~ Exp(phi) Exp(J d)``."""
    angle2 = phi[0] * phi[0] + phi[1] * phi[1] + phi[2] * phi[2]
    angle = np.sqrt(angle2)
    if angle < _SMALL_RAD:
        a = 0.5 - angle2 / 24.0
        b = 1.0 / 6.0 - angle2 / 120.0
    else:
        a = (1.0 - np.cos(angle)) / angle2
        b = (angle - np.sin(angle)) / (angle2 * angle)
    s = skew(phi)
    out = np.empty((3, 3))
    for i in range(3):
        for j in range(3):
            ss = s[i, 0] * s[0, j] + s[i, 1] * s[1, j] + s[i, 2] * s[2, j]
            out[i, j] = (1.0 if i == j else 0.0) - a * s[i, j] + b * ss
    return out


@kernel(OUT_MATRIX(VECTOR))
def right_jacobian_inverse(phi: Array) -> Array:
    """Inverse of the right Jacobian, Solà eq. 184."""
    angle2 = phi[0] * phi[0] + phi[1] * phi[1] + phi[2] * phi[2]
    angle = np.sqrt(angle2)
    if angle < _SMALL_RAD:
        b = 1.0 / 12.0 + angle2 / 720.0
    else:
        b = 1.0 / angle2 - (1.0 + np.cos(angle)) / (2.0 * angle * np.sin(angle))
    s = skew(phi)
    out = np.empty((3, 3))
    for i in range(3):
        for j in range(3):
            ss = s[i, 0] * s[0, j] + s[i, 1] * s[1, j] + s[i, 2] * s[2, j]
            out[i, j] = (1.0 if i == j else 0.0) + 0.5 * s[i, j] + b * ss
    return out


@kernel(OUT_VECTOR(VECTOR, VECTOR))
def attitude_error(quaternion: Array, quaternion_desired: Array) -> Array:
    """
    Geometric attitude error of Lee, Leok and McClamroch, CDC 2010, eq. 8 (number from memory).

    ``e = 1/2 vee(Rd^T R - R^T Rd)``: along the error's axis, its length the sine of the angle,
    so it falls again past 90 degrees.
    """
    d = multiply(conjugate(quaternion_desired), quaternion)
    out = np.empty(3)
    for i in range(3):
        out[i] = 2.0 * d[0] * d[i + 1]
    return out


@kernel(REAL(VECTOR, VECTOR))
def angle_between(p: Array, q: Array) -> float:
    """Angle in rad of the rotation from ``p`` to ``q``, 0 to pi."""
    d = multiply(conjugate(p), q)
    sine = np.sqrt(d[1] * d[1] + d[2] * d[2] + d[3] * d[3])
    angle: float = 2.0 * np.arctan2(sine, abs(d[0]))
    return angle


@kernel(OUT_VECTOR(MATRIX, VECTOR))
def apply(m: Array, v: Array) -> Array:
    """Product of a small matrix and a vector, without a call into BLAS."""
    rows, columns = m.shape
    out = np.zeros(rows)
    for i in range(rows):
        for j in range(columns):
            out[i] += m[i, j] * v[j]
    return out


def from_yaw_pitch_roll(yaw_rad: float, pitch_rad: float, roll_rad: float) -> Array:
    """Quaternion of yaw about z, then pitch about the new y, then roll about the new x."""
    return np.asarray(euler2quat(yaw_rad, pitch_rad, roll_rad, axes='rzyx'), dtype=np.float64)


def to_yaw_pitch_roll(quaternion: Array) -> tuple[float, float, float]:
    """Inverse of ``from_yaw_pitch_roll``, rad."""
    yaw, pitch, roll = quat2euler(quaternion, axes='rzyx')
    return float(yaw), float(pitch), float(roll)
