"""Where the anchor would have to be for the tether to give what a reference needs."""

import numpy as np

from suspended_ctrl.physics.constants import GRAVITY_M_S2 as GRAVITY
from suspended_ctrl.physics.kernel import kernel, MATRIX, OUT_MATRIX, OUT_VECTOR, REAL, VECTOR
from suspended_ctrl.physics.rotation import rotate
from suspended_ctrl.rig.frozen import Array

_ROUNDS = 6


@kernel(OUT_MATRIX(MATRIX, MATRIX, MATRIX, VECTOR, VECTOR, REAL))
def needed_force(position: Array, quaternion: Array, acceleration: Array, disturbance: Array,
                 hook: Array, mass: float) -> Array:
    """
    Compute the hook and the force that a reference asks for.

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

    Returns
    -------
    ndarray, shape (h, 6)
        Hook in map (m), then the force that keeps the reference against gravity (N).

    """
    count = position.shape[0]
    out = np.empty((count, 6))
    for k in range(count):
        arm = rotate(quaternion[k], hook)
        for i in range(3):
            out[k, i] = position[k, i] + arm[i]
            out[k, 3 + i] = mass * acceleration[k, i] - disturbance[i]
        out[k, 5] += mass * GRAVITY
    return out


@kernel(OUT_MATRIX(MATRIX, REAL, REAL, REAL))
def wanted_anchor(needed: Array, rest_length: float, stiffness: float,
                  least_tension: float) -> Array:
    """
    Anchor from which the tether gives all of the force: in its direction, at stretched length.

    Parameters
    ----------
    needed : ndarray, shape (h, 6)
        As ``needed_force`` returns it.
    rest_length, stiffness : float
        m, N/m.
    least_tension : float
        N; a force that asks for less is taken as straight up.

    Returns
    -------
    ndarray, shape (h, 3)
        Map, m.

    """
    count = needed.shape[0]
    out = np.empty((count, 3))
    for k in range(count):
        size = np.sqrt(needed[k, 3] ** 2 + needed[k, 4] ** 2 + needed[k, 5] ** 2)
        upright = size < least_tension or needed[k, 5] <= 0.0
        if upright:
            size = least_tension
        length = rest_length + size / stiffness
        for i in range(3):
            share = (1.0 if i == 2 else 0.0) if upright else needed[k, 3 + i] / size
            out[k, i] = needed[k, i] + share * length
    return out


@kernel(OUT_VECTOR(MATRIX, MATRIX, REAL, REAL, REAL))
def wanted_height(needed: Array, anchor: Array, rest_length: float, stiffness: float,
                  least_tension: float) -> Array:
    """
    Height of an anchor that is not where it is wanted, for the least force missing.

    Away from its place the anchor stretches the tether. With the direction to the hook given, the
    force comes nearest when the tension is its part along that direction.

    Parameters
    ----------
    needed : ndarray, shape (h, 6)
        As ``needed_force`` returns it.
    anchor : ndarray, shape (h, 3)
        Map, m; its third column is not read.
    rest_length, stiffness, least_tension : float
        As in ``wanted_anchor``.

    Returns
    -------
    ndarray, shape (h,)
        Map, m.

    """
    count = needed.shape[0]
    out = np.empty(count)
    for k in range(count):
        x = anchor[k, 0] - needed[k, 0]
        y = anchor[k, 1] - needed[k, 1]
        aside = x * x + y * y
        length = rest_length + max(needed[k, 5], least_tension) / stiffness
        # The tension changes little with the height: a few rounds settle it to a millimetre.
        for _ in range(_ROUNDS):
            rise = np.sqrt(max(length * length - aside, 0.25 * length * length))
            span = np.sqrt(aside + rise * rise)
            along = (needed[k, 3] * x + needed[k, 4] * y + needed[k, 5] * rise) / span
            length = rest_length + max(along, least_tension) / stiffness
        out[k] = needed[k, 2] + rise
    return out
