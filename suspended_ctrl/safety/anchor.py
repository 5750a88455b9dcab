"""The anchor: does it go where it was told, and how it is brought to a stop without a step."""

import numpy as np

from suspended_ctrl.physics.carrier import carrier_step
from suspended_ctrl.physics.kernel import (
    kernel,
    MATRIX,
    OUT_MATRIX,
    OUT_VECTOR,
    REAL,
    TRUTH,
    VECTOR,
)
from suspended_ctrl.rig.frozen import Array, frozen
from suspended_ctrl.rig.rig import Rig
from suspended_ctrl.safety.settings import SafetySettings

# At the end of a ramp an axis is given this many of its lags to come to rest there.
_LAGS_TO_REST = 6.0
# One carrier period and a half: without a new demand for so long the setpoint stands.
_STANDS_S = 0.15


@kernel(OUT_MATRIX(VECTOR, VECTOR, VECTOR, VECTOR, VECTOR, REAL))
def ramp_to_rest(position: Array, velocity: Array, deceleration: Array, lower: Array,
                 upper: Array, dt: float) -> Array:
    """
    Setpoint after ``dt`` of even deceleration, kept inside the travel.

    Parameters
    ----------
    position, velocity : ndarray, shape (k,)
        Setpoint in force and its rate.
    deceleration, lower, upper : ndarray, shape (k,)
        m/s^2, and the ends of travel, m.
    dt : float
        Step, s.

    Returns
    -------
    ndarray, shape (2, k)
        Position and rate.

    """
    out = np.zeros((2, position.shape[0]))
    for i in range(position.shape[0]):
        slower = max(abs(velocity[i]) - deceleration[i] * dt, 0.0)
        speed = slower if velocity[i] > 0.0 else -slower
        moved = position[i] + 0.5 * (velocity[i] + speed) * dt
        inside = min(max(moved, min(lower[i], position[i])), max(upper[i], position[i]))
        out[0, i] = inside
        out[1, i] = speed if inside == moved else 0.0
    return out


@kernel(TRUTH(VECTOR, VECTOR, VECTOR, VECTOR, VECTOR, REAL, MATRIX, VECTOR, VECTOR, OUT_VECTOR,
              OUT_VECTOR))
def _take(position: Array, velocity: Array, expected: Array, middle: Array, half: Array,
          following: float, direction: Array, zero: Array, offset: Array, out: Array,
          anchor: Array) -> bool:
    """Shares of travel and following error, place and velocity of the anchor; false if bad."""
    total = 0.0
    for i in range(position.shape[0]):
        total += abs(position[i]) + abs(velocity[i])
    if not total < np.inf:
        return False
    out[:] = 0.0
    anchor[:3] = zero
    anchor[3:] = 0.0
    for i in range(position.shape[0]):
        out[0] = max(out[0], abs(position[i] - middle[i]) / half[i])
        out[1] = max(out[1], abs(position[i] - expected[i]) / following)
        for j in range(3):
            anchor[j] += (position[i] + offset[i]) * direction[i, j]
            anchor[3 + j] += velocity[i] * direction[i, j]
    return True


class AnchorWatch:
    """
    Measured axes against the carrier model of the commands sent, and the commands of a stop.

    While demands pass, they are the command. When they no longer pass, the setpoint in force is
    ramped to rest at the carrier's own deceleration, from where it is and from the speed that the
    last demand gave it, so that neither its place nor its speed steps. After a silence it stands
    already and stays. Once the axis is at rest there the command is the last measured position,
    moved only when the measured one has left it by ``anchor_deadband_m``: following noise would
    let the drive creep.

    Parameters
    ----------
    rig : Rig
    settings : SafetySettings

    Attributes
    ----------
    count : int
        Number of axes.
    known : bool
        Whether the axes were measured; always true for a fixed anchor.
    anchor : ndarray, shape (6,)
        Place and velocity of the anchor in ``map``, newest measured.
    compared : ndarray, shape (2,)
        Shares used of travel and of following error.
    setpoint_m, setpoint_velocity_m_s : ndarray, shape (k,)
        The command.

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
        self._settle_s = _LAGS_TO_REST * float(carrier.time_constant_s.max()) if count else 0.0
        self._zero = frozen(np.zeros(count))
        self.position_m: Array = self._zero
        self._expected: Array = self._zero
        self._expected_velocity: Array = self._zero
        self.setpoint_m: Array = self._zero
        self.setpoint_velocity_m_s: Array = self._zero
        # Whether there is something to ramp down, and for how long the ramp has been at its end.
        self._moving = False
        self._ramped_s = 0.0
        self._since_demand_s = 0.0
        self.anchor = np.array([*carrier.anchor_map(self._zero), 0.0, 0.0, 0.0])
        self.compared = np.zeros(2)

    def measured(self, position_m: Array, velocity_m_s: Array) -> bool:
        """
        Take in measured axes.

        Parameters
        ----------
        position_m, velocity_m_s : ndarray, shape (k,)
            Of each axis.

        Returns
        -------
        bool
            False if a number is not finite; nothing is changed then.

        """
        carrier = self._carrier
        if not _take(position_m, velocity_m_s, self._expected if self.known else position_m,
                     self._middle, self._half, self._limit_m, carrier.direction_map,
                     carrier.anchor_m, carrier.zero_offset_m, self.compared, self.anchor):
            return False
        self.position_m = position_m
        if not self.known:
            self.known = True
            self._rest_at(position_m)
        return True

    def _rest_at(self, position_m: Array) -> None:
        self.setpoint_m = self._expected = position_m
        self.setpoint_velocity_m_s = self._expected_velocity = self._zero

    def advance(self, dt_s: float) -> None:
        """Let the carrier model run for ``dt_s`` under the setpoint that was in force."""
        if self.known and self._moving:
            self._since_demand_s += dt_s
            self._expected, self._expected_velocity = carrier_step(
                self._carrier, self._expected, self._expected_velocity, self.setpoint_m, dt_s)

    def follow(self, position_m: Array, velocity_m_s: Array) -> None:
        """Take a new gated demand as the setpoint."""
        self._since_demand_s = 0.0
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
            Step.
        resting : bool
            Whether, once stopped, the command goes with the measured position (no rotor power)
            or stays (power on).

        """
        if self._moving:
            if self._ramped_s < 0.0:
                self._ramped_s = 0.0
                if self._since_demand_s > _STANDS_S:
                    self.setpoint_velocity_m_s = self._zero
            carrier = self._carrier
            self.setpoint_m, self.setpoint_velocity_m_s = ramp_to_rest(
                self.setpoint_m, self.setpoint_velocity_m_s, carrier.acceleration_max_m_s2,
                carrier.min_m, carrier.max_m, dt_s)
            if not self.setpoint_velocity_m_s.any():
                self._ramped_s += dt_s
                self._moving = self._ramped_s < self._settle_s
        elif resting and np.abs(self.position_m - self.setpoint_m).max() > self._deadband_m:
            self._rest_at(self.position_m)
