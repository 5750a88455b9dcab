"""
The elastic tether: pulls, never pushes.

Its own mass counts by a third at the hook (Rayleigh's rule for a spring's mass) and hangs on it by
a half; both are under a hundredth of the platform's here, so only the hook's share is modelled.
"""

import numpy as np

from suspended_ctrl.physics.kernel import kernel, OUT_VECTOR, REAL, VECTOR
from suspended_ctrl.physics.rotation import cross, rotate, rotate_back
from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.rig import Tether


@kernel(OUT_VECTOR(VECTOR, VECTOR, VECTOR, VECTOR, REAL, REAL, REAL))
def hook_force(hook_map: Array, hook_velocity_map: Array, anchor_map: Array,
               anchor_velocity_map: Array, rest_length: float, stiffness: float,
               damping: float) -> Array:
    """
    Force on the hook in map, then tension.

    Parameters
    ----------
    hook_map, hook_velocity_map, anchor_map, anchor_velocity_map : ndarray, shape (3,)
        Both ends of the tether, m and m/s.
    rest_length, stiffness, damping : float
        m, N/m, N s/m.

    Returns
    -------
    ndarray, shape (4,)
        Force in map (N) and tension (N, zero when slack).

    """
    out = np.zeros(4)
    span = anchor_map - hook_map
    length = np.sqrt(span[0] * span[0] + span[1] * span[1] + span[2] * span[2])
    if length <= rest_length:
        return out
    stretch_rate = 0.0
    for i in range(3):
        stretch_rate += span[i] * (anchor_velocity_map[i] - hook_velocity_map[i]) / length
    tension = stiffness * (length - rest_length) + damping * stretch_rate
    if tension <= 0.0:
        return out
    for i in range(3):
        out[i] = tension * span[i] / length
    out[3] = tension
    return out


@kernel(OUT_VECTOR(VECTOR, VECTOR, VECTOR, VECTOR, VECTOR, VECTOR, VECTOR, VECTOR, REAL, REAL,
                   REAL))
def _wrench(position: Array, velocity: Array, quaternion: Array, rate_body: Array, anchor: Array,
            anchor_velocity: Array, hook: Array, centre: Array, rest_length: float,
            stiffness: float, damping: float) -> Array:
    hook_map = position + rotate(quaternion, hook)
    hook_velocity = velocity + rotate(quaternion, cross(rate_body, hook))
    pull = hook_force(hook_map, hook_velocity, anchor, anchor_velocity, rest_length, stiffness,
                      damping)
    force = rotate_back(quaternion, pull[:3])
    torque = cross(hook - centre, force)
    out = np.empty(7)
    out[:3] = force
    out[3:6] = torque
    out[6] = pull[3]
    return out


def tether_wrench(tether: Tether, centre_m: Array, position_map_m: Array, velocity_map_m_s: Array,
                  quaternion_wxyz: Array, rate_body_rad_s: Array, anchor_map_m: Array,
                  anchor_velocity_map_m_s: Array) -> Array:
    """
    Wrench of the tether on the platform, and its tension.

    Parameters
    ----------
    tether : Tether
        Its law and its hook.
    centre_m : ndarray, shape (3,)
        Point of the wrench, from the ``base_link`` origin.
    position_map_m, velocity_map_m_s, quaternion_wxyz, rate_body_rad_s : ndarray
        Of the ``base_link`` origin.
    anchor_map_m, anchor_velocity_map_m_s : ndarray, shape (3,)
        The other end.

    Returns
    -------
    ndarray, shape (7,)
        Force and torque in ``base_link`` axes (N, N m), tension (N).

    """
    out: Array = _wrench(position_map_m, velocity_map_m_s, quaternion_wxyz, rate_body_rad_s,
                         anchor_map_m, anchor_velocity_map_m_s, tether.hook_m, centre_m,
                         tether.rest_length_m, tether.stiffness_n_per_m,
                         tether.damping_n_s_per_m)
    return out
