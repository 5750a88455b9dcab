"""An anchor that trails the platform's reference, inside the carrier's speed and acceleration."""

import numpy as np

from suspended_ctrl.physics.equilibrium import anchor_at_zero, equilibrium
from suspended_ctrl.physics.kernel import kernel, OUT_MATRIX, REAL, VECTOR
from suspended_ctrl.physics.loaded_body import loaded_body
from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.rig import Rig

# Share of the limits that setpoints use: the drive's own lag and a tick's rounding need the rest.
SHARE = 0.98


@kernel(OUT_MATRIX(VECTOR, VECTOR, VECTOR, REAL, VECTOR, VECTOR))
def _shape(position: Array, velocity: Array, goal: Array, dt: float, speed_max: Array,
           acceleration_max: Array) -> Array:
    """Move setpoints towards goals: speed from which they still stop there, within limits."""
    count = position.shape[0]
    out = np.empty((2, count))
    for i in range(count):
        gap = goal[i] - position[i]
        # Half a tick of braking less than the continuous rule, or the last step overshoots.
        step = acceleration_max[i] * dt
        stoppable = np.sqrt(2.0 * acceleration_max[i] * abs(gap) + 0.25 * step * step) - 0.5 * step
        limit = min(speed_max[i], stoppable)
        wanted = min(max(gap / max(dt, 1e-6), -limit), limit)
        speed = min(max(wanted, velocity[i] - step), velocity[i] + step)
        out[0, i] = position[i] + speed * dt
        out[1, i] = speed
    return out


class CarrierTrail:
    """
    Setpoints that follow the place above the reference as fast as the limits allow.

    Parameters
    ----------
    rig : Rig

    Attributes
    ----------
    unloaded_kg : float
        Moving mass without payload.

    """

    def __init__(self, rig: Rig) -> None:
        self.rig = rig
        self.unloaded_kg = loaded_body(rig).mass_kg
        self._position: Array | None = None
        self._velocity = np.zeros(len(rig.carrier.axes))
        self._t = 0.0

    def goal(self, position_map_m: Array, payload_kg: float) -> Array:
        """Axis readings (k,) that hang the platform at ``position_map_m`` with rotors at rest."""
        anchor = anchor_at_zero(self.rig)
        above = anchor - equilibrium(self.rig, anchor, payload_kg).position_map_m
        return self.rig.carrier.position_for(position_map_m + above)

    def start(self, t: float, position_m: Array, velocity_m_s: Array) -> None:
        """Begin at the carrier's own place and speed."""
        self._position = np.array(position_m, dtype=float)
        self._velocity = np.array(velocity_m_s, dtype=float)
        self._t = t

    @property
    def started(self) -> bool:
        """Whether there is a setpoint to go on from."""
        return self._position is not None

    def move(self, t: float, goal: Array) -> tuple[Array, Array]:
        """
        Advance to ``t``.

        Parameters
        ----------
        t : float
            Now, s.
        goal : ndarray, shape (k,)
            Axis readings to go to, m.

        Returns
        -------
        position_m, velocity_m_s : ndarray, shape (k,)

        """
        assert self._position is not None
        carrier = self.rig.carrier
        dt = min(max(t - self._t, 0.0), 0.1)
        self._t = t
        moved = _shape(self._position, self._velocity, goal, dt, SHARE * carrier.speed_max_m_s,
                       SHARE * carrier.acceleration_max_m_s2)
        self._position = np.minimum(np.maximum(moved[0], carrier.min_m), carrier.max_m)
        self._velocity = moved[1]
        return self._position, self._velocity
