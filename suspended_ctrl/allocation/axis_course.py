"""How an axis goes along a planned setpoint, its own limits included."""

import numpy as np

from suspended_ctrl.physics.kernel import kernel, OUT_MATRIX, REAL, VECTOR
from suspended_ctrl.rig.frozen import Array

_STEP_S = 0.02


@kernel(OUT_MATRIX(REAL, REAL, VECTOR, VECTOR, VECTOR, REAL, REAL, REAL))
def axis_course(position: float, velocity: float, time: Array, setpoint: Array, speed: Array,
                time_constant: float, speed_max: float, acceleration_max: float) -> Array:
    """
    Follow a setpoint whose acceleration is constant between knots.

    Parameters
    ----------
    position, velocity : float
        Of the axis at the first knot, m and m/s.
    time, setpoint, speed : ndarray, shape (h,)
        Knots: s, m, m/s.
    time_constant, speed_max, acceleration_max : float
        Of the axis; the rule is that of ``physics.carrier``.

    Returns
    -------
    ndarray, shape (2, h)
        Position and velocity of the axis at the knots.

    """
    count = time.shape[0]
    out = np.empty((2, count))
    out[0, 0] = position
    out[1, 0] = velocity
    for k in range(count - 1):
        span = time[k + 1] - time[k]
        steps = max(int(np.ceil(span / _STEP_S - 1e-9)), 1)
        dt = span / steps
        bend = (speed[k + 1] - speed[k]) / span
        for j in range(steps):
            since = (j + 0.5) * dt
            target = setpoint[k] + since * speed[k] + 0.5 * since * since * bend
            gap = target - position
            limit = min(speed_max, np.sqrt(2.0 * acceleration_max * abs(gap)))
            # The lag's mean speed over the step.
            wanted = gap * (1.0 - np.exp(-dt / time_constant)) / dt
            wanted = min(max(wanted, -limit), limit)
            change = acceleration_max * dt
            moved = min(max(wanted, velocity - change), velocity + change)
            position += 0.5 * (velocity + moved) * dt
            velocity = moved
        out[0, k + 1] = position
        out[1, k + 1] = velocity
    return out
