"""The carrier: each axis follows its setpoint with a lag, inside its speed and acceleration."""

import numpy as np

from suspended_ctrl.physics.kernel import kernel, OUT_MATRIX, REAL, VECTOR
from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.rig import Carrier


@kernel(OUT_MATRIX(VECTOR, VECTOR, VECTOR, REAL, VECTOR, VECTOR, VECTOR))
def _step(position: Array, velocity: Array, setpoint: Array, dt: float, time_constant: Array,
          speed_max: Array, acceleration_max: Array) -> Array:
    count = position.shape[0]
    out = np.empty((2, count))
    for i in range(count):
        wanted = (setpoint[i] - position[i]) / time_constant[i]
        # Speed from which the axis still stops on its setpoint inside its acceleration.
        stoppable = np.sqrt(2.0 * acceleration_max[i] * abs(setpoint[i] - position[i]))
        limit = min(speed_max[i], stoppable)
        wanted = min(max(wanted, -limit), limit)
        change = acceleration_max[i] * dt
        speed = min(max(wanted, velocity[i] - change), velocity[i] + change)
        out[0, i] = position[i] + 0.5 * (velocity[i] + speed) * dt
        out[1, i] = speed
    return out


def carrier_step(carrier: Carrier, position_m: Array, velocity_m_s: Array, setpoint_m: Array,
                 dt_s: float) -> tuple[Array, Array]:
    """
    Move the axes for ``dt_s`` seconds towards a constant setpoint.

    Parameters
    ----------
    carrier : Carrier
        Limits and lags of the axes.
    position_m, velocity_m_s, setpoint_m : ndarray, shape (k,)
        Of each axis, m and m/s.
    dt_s : float
        Step, s.

    Returns
    -------
    position_m, velocity_m_s : ndarray, shape (k,)

    """
    out = _step(position_m, velocity_m_s, setpoint_m, dt_s, carrier.time_constant_s,
                carrier.speed_max_m_s, carrier.acceleration_max_m_s2)
    return out[0], out[1]
