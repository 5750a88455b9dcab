"""
Rotors: thrust and torque from speed, lag of speed behind command, and what they do to the body.

Thrust over squared speed is piecewise linear (the square law has one piece). Drag torque on the
body is ``-spin k_q w |w| axis``; spinning up turns the body the other way (reaction), and the
spinning mass resists tilting (gyroscopic torque).
"""

import numpy as np

from suspended_ctrl.physics.kernel import kernel, MATRIX, OUT_VECTOR, REAL, VECTOR
from suspended_ctrl.physics.rotation import cross
from suspended_ctrl.rig.frozen import Array, frozen
from suspended_ctrl.rig.rig import Rotors


@kernel(OUT_VECTOR(VECTOR, MATRIX, MATRIX))
def _thrust(speed: Array, curve_speed: Array, curve_thrust: Array) -> Array:
    count, knots = curve_speed.shape
    out = np.empty(count)
    for i in range(count):
        square = speed[i] * speed[i]
        k = 1
        while k < knots - 1 and square > curve_speed[i, k] * curve_speed[i, k]:
            k += 1
        low = curve_speed[i, k - 1] * curve_speed[i, k - 1]
        high = curve_speed[i, k] * curve_speed[i, k]
        slope = (curve_thrust[i, k] - curve_thrust[i, k - 1]) / (high - low)
        magnitude = curve_thrust[i, k - 1] + slope * (square - low)
        out[i] = magnitude if speed[i] >= 0.0 else -magnitude
    return out


@kernel(OUT_VECTOR(VECTOR, MATRIX, MATRIX))
def _speed_for_thrust(thrust: Array, curve_speed: Array, curve_thrust: Array) -> Array:
    count, knots = curve_speed.shape
    out = np.empty(count)
    for i in range(count):
        magnitude = abs(thrust[i])
        k = 1
        while k < knots - 1 and magnitude > curve_thrust[i, k]:
            k += 1
        low = curve_speed[i, k - 1] * curve_speed[i, k - 1]
        high = curve_speed[i, k] * curve_speed[i, k]
        slope = (high - low) / (curve_thrust[i, k] - curve_thrust[i, k - 1])
        square = low + slope * (magnitude - curve_thrust[i, k - 1])
        speed = np.sqrt(max(square, 0.0))
        out[i] = speed if thrust[i] >= 0.0 else -speed
    return out


@kernel(OUT_VECTOR(VECTOR, VECTOR, VECTOR, MATRIX, MATRIX, VECTOR, VECTOR, VECTOR, VECTOR))
def _wrench(thrust: Array, speed: Array, speed_rate: Array, axis: Array, arm: Array,
            torque_coefficient: Array, spin: Array, inertia: Array, rate_body: Array) -> Array:
    out = np.zeros(6)
    momentum = np.zeros(3)
    for i in range(thrust.shape[0]):
        twist = -spin[i] * (torque_coefficient[i] * speed[i] * abs(speed[i])
                            + inertia[i] * speed_rate[i])
        for j in range(3):
            out[j] += axis[i, j] * thrust[i]
            out[3 + j] += arm[i, j] * thrust[i] + axis[i, j] * twist
            momentum[j] += spin[i] * inertia[i] * speed[i] * axis[i, j]
    gyroscopic = cross(rate_body, momentum)
    for j in range(3):
        out[3 + j] -= gyroscopic[j]
    return out


@kernel(OUT_VECTOR(VECTOR, VECTOR, REAL, VECTOR))
def lagged_speed(speed: Array, command: Array, dt: float, time_constant: Array) -> Array:
    """Speeds after ``dt`` seconds of first-order lag behind a constant command, exact."""
    out = np.empty(speed.shape[0])
    for i in range(speed.shape[0]):
        out[i] = command[i] + (speed[i] - command[i]) * np.exp(-dt / time_constant[i])
    return out


class RotorModel:
    """
    The rotors' equations for one rig.

    Parameters
    ----------
    rotors : Rotors
    centre_m : ndarray, shape (3,)
        Point about which torques are taken, from the ``base_link`` origin.

    Attributes
    ----------
    torque_per_thrust_m : ndarray, shape (n,)
        Drag torque over thrust at full speed.
    wrench_per_thrust : ndarray, shape (6, n)
        Force and torque in ``base_link`` axes of one newton from each rotor, drag torque included.

    """

    def __init__(self, rotors: Rotors, centre_m: Array) -> None:
        self.rotors = rotors
        self.axis = frozen(rotors.axis)
        self.arm = frozen(np.cross(rotors.position_m - centre_m, rotors.axis))
        self.torque_per_thrust_m = frozen(
            rotors.torque_coefficient_nm_s2 / rotors.thrust_coefficient_n_s2)
        drag = -(rotors.spin * self.torque_per_thrust_m)[:, None] * rotors.axis
        self.wrench_per_thrust = frozen(np.vstack((rotors.axis.T, (self.arm + drag).T)))
        self.thrust_max_n = frozen(self.thrust(rotors.speed_max_rad_s))
        one_way = np.where(rotors.reversible, -self.thrust_max_n,
                           self.thrust(rotors.speed_min_rad_s))
        self.thrust_min_n = frozen(one_way)

    def thrust(self, speed_rad_s: Array) -> Array:
        """Thrust in N at each speed, shape (n,), odd in speed."""
        rotors = self.rotors
        out: Array = _thrust(speed_rad_s, rotors.curve_speed_rad_s, rotors.curve_thrust_n)
        return out

    def speed_for_thrust(self, thrust_n: Array) -> Array:
        """Speed in rad/s that gives each thrust, shape (n,); inverse of ``thrust``."""
        out: Array = _speed_for_thrust(
            thrust_n, self.rotors.curve_speed_rad_s, self.rotors.curve_thrust_n)
        return out

    def wrench(self, speed_rad_s: Array, speed_rate_rad_s2: Array,
               rate_body_rad_s: Array) -> Array:
        """
        Force and torque on the body from the rotors.

        Parameters
        ----------
        speed_rad_s, speed_rate_rad_s2 : ndarray, shape (n,)
            Of each rotor, and its rate of change.
        rate_body_rad_s : ndarray, shape (3,)
            For the gyroscopic torque.

        Returns
        -------
        ndarray, shape (6,)
            N and N m, ``base_link`` axes, about the centre given to the constructor.

        """
        rotors = self.rotors
        out: Array = _wrench(
            self.thrust(speed_rad_s), speed_rad_s, speed_rate_rad_s2, self.axis, self.arm,
            rotors.torque_coefficient_nm_s2, rotors.spin, rotors.inertia_kg_m2, rate_body_rad_s)
        return out
