"""Where the anchor would have to be for the tether alone to give a wrench."""

import numpy as np

from suspended_ctrl.physics.constants import GRAVITY_M_S2 as GRAVITY
from suspended_ctrl.physics.kernel import kernel, MATRIX, OUT_MATRIX, REAL, VECTOR
from suspended_ctrl.physics.rotation import rotate
from suspended_ctrl.rig.frozen import Array


@kernel(OUT_MATRIX(MATRIX, MATRIX, MATRIX, VECTOR, VECTOR, REAL, VECTOR, REAL, REAL, REAL))
def wanted_anchor(position: Array, quaternion: Array, acceleration: Array, disturbance: Array,
                  hook: Array, mass: float, anchor_zero: Array, rest_length: float,
                  stiffness: float, least_tension: float) -> Array:
    """
    Anchor for each of ``h`` moments of a reference.

    The force that mass, acceleration and disturbance need is the tether's when the anchor lies in
    its direction from the hook, at the stretched length.

    Parameters
    ----------
    position, quaternion, acceleration : ndarray, shapes (h, 3), (h, 4), (h, 3)
        Of the ``base_link`` origin, map.
    disturbance : ndarray, shape (3,)
        Force that acts besides, map, N.
    hook : ndarray, shape (3,)
        From the ``base_link`` origin, body axes.
    mass : float
        Moving mass, kg.
    anchor_zero : ndarray, shape (3,)
        Subtracted from the answer.
    rest_length, stiffness : float
        m, N/m.
    least_tension : float
        N; a force that asks for less is taken as straight up.

    Returns
    -------
    ndarray, shape (h, 3)
        Anchor from ``anchor_zero``, map, m.

    """
    count = position.shape[0]
    out = np.empty((count, 3))
    force = np.empty(3)
    for k in range(count):
        size = 0.0
        for i in range(3):
            force[i] = mass * acceleration[k, i] - disturbance[i]
            if i == 2:
                force[i] += mass * GRAVITY
            size += force[i] * force[i]
        size = np.sqrt(size)
        if size < least_tension or force[2] <= 0.0:
            force[0] = 0.0
            force[1] = 0.0
            force[2] = least_tension
            size = least_tension
        arm = rotate(quaternion[k], hook)
        length = rest_length + size / stiffness
        for i in range(3):
            out[k, i] = position[k, i] + arm[i] + force[i] / size * length - anchor_zero[i]
    return out
