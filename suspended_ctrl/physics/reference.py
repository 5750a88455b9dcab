"""
A timed path of the platform: points at most 10 ms apart, quintic between them.

Linear rates in map, angular rates in ``base_link``, all of the ``base_link`` origin.
"""

from dataclasses import dataclass, replace

import numpy as np

from suspended_ctrl.physics.kernel import kernel, MATRIX, OUT_VECTOR, REAL, VECTOR
from suspended_ctrl.physics.rotation import (
    apply,
    conjugate,
    cross,
    exponential,
    logarithm,
    multiply,
    normalised,
    right_jacobian,
    right_jacobian_inverse,
)
from suspended_ctrl.rig.frozen import Array, frozen

SPACING_MAX_S = 0.010


@kernel(OUT_VECTOR(REAL, REAL, VECTOR, VECTOR, VECTOR, VECTOR, VECTOR, VECTOR))
def _quintic(t: float, span: float, x0: Array, v0: Array, a0: Array, x1: Array, v1: Array,
             a1: Array) -> Array:
    """Position, velocity, acceleration at ``t`` of the quintic through both ends, shape (9,)."""
    out = np.empty(9)
    s = t / span
    s2 = s * s
    s3 = s2 * s
    for i in range(3):
        c1 = v0[i] * span
        c2 = 0.5 * a0[i] * span * span
        gap = x1[i] - x0[i] - c1 - c2
        gap_v = v1[i] * span - c1 - 2.0 * c2
        gap_a = a1[i] * span * span - 2.0 * c2
        c3 = 10.0 * gap - 4.0 * gap_v + 0.5 * gap_a
        c4 = -15.0 * gap + 7.0 * gap_v - gap_a
        c5 = 6.0 * gap - 3.0 * gap_v + 0.5 * gap_a
        out[i] = x0[i] + c1 * s + c2 * s2 + s3 * (c3 + c4 * s + c5 * s2)
        out[3 + i] = (c1 + 2.0 * c2 * s + s2 * (3.0 * c3 + 4.0 * c4 * s + 5.0 * c5 * s2)) / span
        out[6 + i] = (2.0 * c2 + s * (6.0 * c3 + 12.0 * c4 * s + 20.0 * c5 * s2)) / (span * span)
    return out


@kernel(OUT_VECTOR(REAL, VECTOR, MATRIX, MATRIX, MATRIX, MATRIX, MATRIX, MATRIX))
def _sample(t: float, time: Array, position: Array, velocity: Array, acceleration: Array,
            quaternion: Array, rate: Array, rate_dot: Array) -> Array:
    out = np.zeros(19)
    last = time.shape[0] - 1
    if t <= time[0] or t >= time[last]:
        k = 0 if t <= time[0] else last
        out[:3] = position[k]
        out[9:13] = quaternion[k]
        return out
    k = np.searchsorted(time, t, side='right') - 1
    span = time[k + 1] - time[k]
    line = _quintic(t - time[k], span, position[k], velocity[k], acceleration[k],
                    position[k + 1], velocity[k + 1], acceleration[k + 1])
    out[:9] = line
    turn = logarithm(multiply(conjugate(quaternion[k]), quaternion[k + 1]))
    if turn[0] * turn[0] + turn[1] * turn[1] + turn[2] * turn[2] == 0.0 and (
            (rate[k] == 0.0).all() and (rate[k + 1] == 0.0).all()
            and (rate_dot[k] == 0.0).all() and (rate_dot[k + 1] == 0.0).all()):
        out[9:13] = quaternion[k]
        return out
    # Rotation vector from point k on. Its rate is J_r^-1 times the body rate; over 10 ms the
    # second derivative differs from J_r^-1 times the body acceleration by under one part in 1e4.
    jacobian_end = right_jacobian_inverse(turn)
    arc = _quintic(t - time[k], span, np.zeros(3), rate[k], rate_dot[k], turn,
                   apply(jacobian_end, rate[k + 1]), apply(jacobian_end, rate_dot[k + 1]))
    jacobian = right_jacobian(arc[:3])
    out[9:13] = normalised(multiply(quaternion[k], exponential(arc[:3])))
    body_rate = apply(jacobian, arc[3:6])
    out[13:16] = body_rate
    bend = cross(arc[3:6], body_rate)
    body_acceleration = apply(jacobian, arc[6:9])
    for i in range(3):
        out[16 + i] = body_acceleration[i] - 0.5 * bend[i]
    return out


@kernel(OUT_VECTOR(REAL, REAL, VECTOR, MATRIX, MATRIX, MATRIX, MATRIX, MATRIX, MATRIX))
def _bend(t: float, step: float, time: Array, position: Array, velocity: Array,
          acceleration: Array, quaternion: Array, rate: Array, rate_dot: Array) -> Array:
    """Second difference of the acceleration over ``step``."""
    out = np.empty(3)
    before = _sample(t - step, time, position, velocity, acceleration, quaternion, rate, rate_dot)
    now = _sample(t, time, position, velocity, acceleration, quaternion, rate, rate_dot)
    after = _sample(t + step, time, position, velocity, acceleration, quaternion, rate, rate_dot)
    for i in range(3):
        out[i] = (after[6 + i] - 2.0 * now[6 + i] + before[6 + i]) / (step * step)
    return out


@dataclass(frozen=True, eq=False, slots=True)
class ReferencePoint:
    """Where the platform should be at one moment; rates as in the module's head."""

    position_map_m: Array
    velocity_map_m_s: Array
    acceleration_map_m_s2: Array
    quaternion_wxyz: Array
    rate_body_rad_s: Array
    rate_dot_body_rad_s2: Array


@dataclass(frozen=True, eq=False, slots=True)
class Reference:
    """
    A whole timed path.

    Attributes
    ----------
    start_s : float
        Host time of the first point.
    time_s : ndarray, shape (m,)
        From ``start_s``, first 0, strictly rising, at most ``SPACING_MAX_S`` apart.
    position_map_m, velocity_map_m_s, acceleration_map_m_s2 : ndarray, shape (m, 3)
    quaternion_wxyz : ndarray, shape (m, 4)
    rate_body_rad_s, rate_dot_body_rad_s2 : ndarray, shape (m, 3)

    """

    start_s: float
    time_s: Array
    position_map_m: Array
    velocity_map_m_s: Array
    acceleration_map_m_s2: Array
    quaternion_wxyz: Array
    rate_body_rad_s: Array
    rate_dot_body_rad_s2: Array

    @property
    def end_s(self) -> float:
        """Host time of the last point."""
        return self.start_s + float(self.time_s[-1])

    def starting_at(self, start_s: float) -> 'Reference':
        """Return the same path with another start."""
        return replace(self, start_s=start_s)

    def at(self, t: float) -> ReferencePoint:
        """Point at host time ``t``; at rest on the first or last point outside the path."""
        row = _sample(t - self.start_s, self.time_s, self.position_map_m, self.velocity_map_m_s,
                      self.acceleration_map_m_s2, self.quaternion_wxyz, self.rate_body_rad_s,
                      self.rate_dot_body_rad_s2)
        return ReferencePoint(row[:3], row[3:6], row[6:9], row[9:13], row[13:16], row[16:])

    def acceleration_bend(self, t: float) -> Array:
        """Second derivative of the acceleration around host time ``t``, m/s^4, shape (3,)."""
        out: Array = _bend(
            t - self.start_s, SPACING_MAX_S, self.time_s, self.position_map_m,
            self.velocity_map_m_s, self.acceleration_map_m_s2, self.quaternion_wxyz,
            self.rate_body_rad_s, self.rate_dot_body_rad_s2)
        return out


def held(position_map_m: Array, quaternion_wxyz: Array, t: float) -> Reference:
    """Build the reference that stays where it is from ``t`` on."""
    still = np.zeros((2, 3))
    return Reference(t, frozen([0.0, SPACING_MAX_S]), frozen([position_map_m] * 2), frozen(still),
                     frozen(still), frozen([quaternion_wxyz] * 2), frozen(still), frozen(still))
