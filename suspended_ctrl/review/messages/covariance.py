"""
Covariance between the estimate's axes and those of nav_msgs/Odometry.

The estimate keeps attitude errors in body axes and velocity errors in map axes; the message wants
the pose in its header's frame (map) and the twist in its child's (``base_link``).
"""


from suspended_ctrl.physics.kernel import (
    INTEGER,
    kernel,
    MATRIX,
    OUT_MATRIX,
    TRUTH,
    VECTOR,
)
from suspended_ctrl.physics.rotation import matrix
from suspended_ctrl.rig.frozen import Array


@kernel(OUT_MATRIX(MATRIX, INTEGER, VECTOR, TRUTH))
def turned(covariance: Array, first: int, quaternion: Array, to_map: bool) -> Array:
    """
    Turn three rows and columns of a 6x6 covariance.

    Parameters
    ----------
    covariance : ndarray, shape (6, 6)
        Of two vectors of three.
    first : int
        0 or 3: which three are turned.
    quaternion : ndarray, shape (4,)
        Body to map.
    to_map : bool
        From body axes to map axes, else back.

    Returns
    -------
    ndarray, shape (6, 6)

    """
    turn = matrix(quaternion)
    half = covariance.copy()
    for i in range(3):
        for k in range(6):
            total = 0.0
            for j in range(3):
                total += (turn[i, j] if to_map else turn[j, i]) * covariance[first + j, k]
            half[first + i, k] = total
    out = half.copy()
    for i in range(3):
        for k in range(6):
            total = 0.0
            for j in range(3):
                total += (turn[i, j] if to_map else turn[j, i]) * half[k, first + j]
            out[k, first + i] = total
    return out
