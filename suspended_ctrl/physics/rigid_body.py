"""Newton-Euler equations of a free rigid body about its centre of mass."""

import numpy as np

from suspended_ctrl.physics.constants import GRAVITY_M_S2
from suspended_ctrl.physics.kernel import kernel, MATRIX, OUT_VECTOR, REAL, VECTOR
from suspended_ctrl.physics.rotation import apply, cross, rotate, rotate_back
from suspended_ctrl.rig.frozen import Array


@kernel(OUT_VECTOR(REAL, MATRIX, MATRIX, VECTOR, VECTOR, VECTOR))
def acceleration(mass: float, inertia: Array, inertia_inverse: Array, quaternion: Array,
                 rate_body: Array, wrench_body: Array) -> Array:
    """
    Linear and angular acceleration under a wrench and gravity.

    Parameters
    ----------
    mass : float
        kg.
    inertia, inertia_inverse : ndarray, shape (3, 3)
        About the centre of mass, body axes, and its inverse.
    quaternion : ndarray, shape (4,)
        Body to map.
    rate_body : ndarray, shape (3,)
        rad/s.
    wrench_body : ndarray, shape (6,)
        Force and torque at the centre of mass, body axes, gravity not included.

    Returns
    -------
    ndarray, shape (6,)
        Acceleration of the centre of mass in map (m/s^2), angular acceleration in body (rad/s^2).

    """
    force_map = rotate(quaternion, wrench_body[:3])
    momentum = apply(inertia, rate_body)
    gyroscopic = cross(rate_body, momentum)
    torque = np.empty(3)
    for i in range(3):
        torque[i] = wrench_body[3 + i] - gyroscopic[i]
    angular = apply(inertia_inverse, torque)
    out = np.empty(6)
    for i in range(3):
        out[i] = force_map[i] / mass
        out[3 + i] = angular[i]
    out[2] -= GRAVITY_M_S2
    return out


@kernel(OUT_VECTOR(REAL, MATRIX, VECTOR, VECTOR, VECTOR, VECTOR))
def wrench_for(mass: float, inertia: Array, quaternion: Array, rate_body: Array,
               acceleration_map: Array, rate_dot_body: Array) -> Array:
    """
    Wrench at the centre of mass that gives these accelerations, gravity being there anyway.

    Parameters
    ----------
    mass, inertia, quaternion, rate_body :
        As in ``acceleration``.
    acceleration_map : ndarray, shape (3,)
        Of the centre of mass, m/s^2.
    rate_dot_body : ndarray, shape (3,)
        rad/s^2.

    Returns
    -------
    ndarray, shape (6,)
        Force and torque in body axes.

    """
    force_map = np.empty(3)
    for i in range(3):
        force_map[i] = mass * acceleration_map[i]
    force_map[2] += mass * GRAVITY_M_S2
    force = rotate_back(quaternion, force_map)
    torque = apply(inertia, rate_dot_body)
    gyroscopic = cross(rate_body, apply(inertia, rate_body))
    out = np.empty(6)
    for i in range(3):
        out[i] = force[i]
        out[3 + i] = torque[i] + gyroscopic[i]
    return out


@kernel(OUT_VECTOR(VECTOR, VECTOR, VECTOR, VECTOR))
def point_velocity(velocity_map: Array, quaternion: Array, rate_body: Array, arm: Array) -> Array:
    """Velocity in map of the body point at ``arm`` (body axes) from one with ``velocity_map``."""
    out: Array = velocity_map + rotate(quaternion, cross(rate_body, arm))
    return out


@kernel(OUT_VECTOR(VECTOR, VECTOR, VECTOR, VECTOR, VECTOR))
def point_acceleration(acceleration_map: Array, quaternion: Array, rate_body: Array,
                       rate_dot_body: Array, arm: Array) -> Array:
    """Acceleration in map of the body point at ``arm`` from one with ``acceleration_map``."""
    turned = cross(rate_dot_body, arm) + cross(rate_body, cross(rate_body, arm))
    out: Array = acceleration_map + rotate(quaternion, turned)
    return out
