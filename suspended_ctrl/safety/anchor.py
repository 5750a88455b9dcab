"""The anchor: does it go where it was told, and how it is brought to a stop without a step."""

import numpy as np

from suspended_ctrl.physics.carrier import carrier_step
from suspended_ctrl.physics.kernel import kernel, OUT_MATRIX, OUT_VECTOR, REAL, TRUTH, VECTOR
from suspended_ctrl.rig.frozen import Array, frozen
from suspended_ctrl.rig.rig import Rig
from suspended_ctrl.safety.settings import SafetySettings


@kernel(OUT_MATRIX(VECTOR, VECTOR, VECTOR, VECTOR, VECTOR, REAL))
def _ramp(position: Array, velocity: Array, deceleration: Array, lower: Array, upper: Array,
          dt: float) -> Array:
    """Setpoint and its rate after ``dt`` of even deceleration to rest, kept inside the travel."""
    out = np.zeros((2, position.shape[0]))
    for i in range(position.shape[0]):
        slower = max(abs(velocity[i]) - deceleration[i] * dt, 0.0)
        speed = slower if velocity[i] > 0.0 else -slower
        moved = position[i] + 0.5 * (velocity[i] + speed) * dt
        inside = min(max(moved, min(lower[i], position[i])), max(upper[i], position[i]))
        out[0, i] = inside
        out[1, i] = speed if inside == moved else 0.0
    return out


@kernel(OUT_VECTOR(VECTOR, VECTOR, VECTOR, VECTOR, REAL))
def _used(measured: Array, expected: Array, middle: Array, half: Array, following: float) -> Array:
    """Shares used of travel and of following error; nan if a number is not finite."""
    out = np.zeros(2)
    for i in range(measured.shape[0]):
        travel = abs(measured[i] - middle[i]) / half[i]
        if not np.isfinite(travel):
            out[:] = np.nan
            return out
        out[0] = max(out[0], travel)
        out[1] = max(out[1], abs(measured[i] - expected[i]) / following)
    return out


@kernel(TRUTH(VECTOR, VECTOR, REAL))
def _apart(a: Array, b: Array, limit: float) -> bool:
    widest = 0.0
    for i in range(a.shape[0]):
        widest = max(widest, abs(a[i] - b[i]))
    return widest > limit


class AnchorWatch:
    """
    Measured axes against the carrier model of the commands sent, and the commands of a stop.

    While rotor power is on and demands pass, they are the command. When they no longer pass, the
    setpoint in force is ramped to rest at the carrier's own deceleration from where it is and as
    fast as the axis moves, so that neither position nor speed steps. Once the axis is at rest
    there the command is the last measured position, moved only when the measured one has left it
    by ``anchor_deadband_m``: following noise would let the drive creep.

    Parameters
    ----------
    rig : Rig
    settings : SafetySettings

    Attributes
    ----------
    known : bool
        Whether the axes were measured; always true for a fixed anchor.
    anchor_map_m, velocity_map_m_s : ndarray, shape (3,)
        Newest measured.
    travel, following : float
        Shares used of the two limits.

    """

    def __init__(self, rig: Rig, settings: SafetySettings) -> None:
        carrier = rig.carrier
        self._carrier = carrier
        count = len(carrier.axes)
        self.count = count
        self.known = count == 0
        self._middle = frozen(0.5 * (carrier.min_m + carrier.max_m))
        self._half = frozen(0.5 * (carrier.max_m - carrier.min_m)
                            + settings.anchor_travel_tolerance_m)
        self._limit_m = settings.anchor_following_m
        self._deadband_m = settings.anchor_deadband_m
        self._settle_s = 6.0 * float(carrier.time_constant_s.max()) if count else 0.0
        self._zero = frozen(np.zeros(count))
        self.position_m: Array = self._zero
        self._expected: Array = self._zero
        self._expected_velocity: Array = self._zero
        self.setpoint_m: Array = self._zero
        self.setpoint_velocity_m_s: Array = self._zero
        # Whether there is something to ramp down, and for how long the ramp has been at its end.
        self._moving = False
        self._ramped_s = 0.0
        self.anchor_map_m: Array = frozen(carrier.anchor_map(self._zero))
        self.velocity_map_m_s: Array = frozen(np.zeros(3))
        self.travel = 0.0
        self.following = 0.0

    def measured(self, position_m: Array, velocity_m_s: Array) -> bool:
        """
        Take in measured axes.

        Parameters
        ----------
        position_m, velocity_m_s : ndarray, shape (k,)

        Returns
        -------
        bool
            False if a number is not finite; nothing is changed then.

        """
        first = not self.known
        used = _used(position_m, position_m if first else self._expected, self._middle,
                     self._half, self._limit_m)
        if used[0] != used[0] or not np.isfinite(velocity_m_s).all():
            return False
        self.position_m = position_m
        self.anchor_map_m = self._carrier.anchor_map(position_m)
        self.velocity_map_m_s = velocity_m_s @ self._carrier.direction_map
        self.travel, self.following = float(used[0]), float(used[1])
        if first:
            self.known = True
            self._rest_at(position_m)
        return True

    def _rest_at(self, position_m: Array) -> None:
        self.setpoint_m = self._expected = position_m
        self.setpoint_velocity_m_s = self._expected_velocity = self._zero
        self._moving = False

    def advance(self, dt_s: float) -> None:
        """Let the carrier model run for ``dt_s`` under the setpoint that was in force."""
        if self.known and self.count:
            self._expected, self._expected_velocity = carrier_step(
                self._carrier, self._expected, self._expected_velocity, self.setpoint_m, dt_s)

    def follow(self, position_m: Array, velocity_m_s: Array) -> None:
        """Take a gated demand as the setpoint."""
        self.setpoint_m = position_m
        self.setpoint_velocity_m_s = velocity_m_s
        self._moving = True
        self._ramped_s = -1.0

    def stop(self, dt_s: float, resting: bool) -> None:
        """
        Move the setpoint on by ``dt_s`` towards rest.

        Parameters
        ----------
        dt_s : float
        resting : bool
            Whether, once stopped, the command goes with the measured position (no rotor power)
            or stays (power on).

        """
        if not self.count or not self.known:
            return
        if self._moving:
            if self._ramped_s < 0.0:
                self.setpoint_velocity_m_s = self._expected_velocity
                self._ramped_s = 0.0
            ramp = _ramp(self.setpoint_m, self.setpoint_velocity_m_s,
                         self._carrier.acceleration_max_m_s2, self._carrier.min_m,
                         self._carrier.max_m, dt_s)
            self.setpoint_m, self.setpoint_velocity_m_s = ramp[0], ramp[1]
            if not self.setpoint_velocity_m_s.any():
                self._ramped_s += dt_s
                self._moving = self._ramped_s < self._settle_s
        elif resting and _apart(self.position_m, self.setpoint_m, self._deadband_m):
            self._rest_at(self.position_m)
