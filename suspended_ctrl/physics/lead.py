"""
Where the platform will be when a command sent now is felt.

A command needs its way to the drives and half a tick of being held (transport), and the rotors
follow it with what is left of their lag. A first-order lag of T delays a ramp by T, so a demand is
made for the moment transport + T ahead, from the state predicted for that moment with the wrenches
already on their way. Error of that: T^2/2 times the wrench's second derivative.
"""

from dataclasses import dataclass

import numpy as np

from suspended_ctrl.physics.kernel import kernel, MATRIX, OUT_VECTOR, REAL, VECTOR
from suspended_ctrl.physics.loaded_body import LoadedBody
from suspended_ctrl.physics.rigid_body import acceleration
from suspended_ctrl.physics.rotation import (
    cross,
    exponential,
    multiply,
    normalised,
    rotate,
    rotate_back,
)
from suspended_ctrl.physics.values import Estimate, Wrench
from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.rig import Rig

_HISTORY = 64
_STEP_MAX_S = 0.005


@dataclass(frozen=True, eq=False, slots=True)
class PlatformState:
    """Pose and velocity of the ``base_link`` origin (map), rate in body, at ``stamp_s``."""

    stamp_s: float
    position_map_m: Array
    velocity_map_m_s: Array
    quaternion_wxyz: Array
    rate_body_rad_s: Array


@kernel(OUT_VECTOR(VECTOR, REAL, REAL, VECTOR, MATRIX, VECTOR, REAL, MATRIX, MATRIX, VECTOR,
                   VECTOR))
def _predict(state: Array, start: float, end: float, felt: Array, wrenches: Array,
             disturbance: Array, mass: float, inertia: Array, inertia_inverse: Array,
             centre: Array, nominal_centre: Array) -> Array:
    """Integrate (position, velocity, quaternion, rate) of the origin from start to end."""
    quaternion = state[6:10].copy()
    rate = state[10:13].copy()
    place = state[:3] + rotate(quaternion, centre)
    velocity = state[3:6] + rotate(quaternion, cross(rate, centre))
    shift = nominal_centre - centre
    count = felt.shape[0]
    t = start
    k = 0
    total = np.empty(6)
    while t < end - 1e-9:
        while k < count - 1 and felt[k + 1] <= t + 1e-9:
            k += 1
        stop = min(end, t + _STEP_MAX_S)
        if k < count - 1 and felt[k + 1] < stop and felt[k + 1] > t + 1e-9:
            stop = felt[k + 1]
        dt = stop - t
        force = wrenches[k, :3]
        total[:3] = force + rotate_back(quaternion, disturbance[:3])
        total[3:] = (wrenches[k, 3:] + cross(shift, force)
                     + rotate_back(quaternion, disturbance[3:]))
        rates = acceleration(mass, inertia, inertia_inverse, quaternion, rate, total)
        place = place + dt * velocity + (0.5 * dt * dt) * rates[:3]
        velocity = velocity + dt * rates[:3]
        turn = dt * rate + (0.5 * dt * dt) * rates[3:]
        quaternion = normalised(multiply(quaternion, exponential(turn)))
        rate = rate + dt * rates[3:]
        t = stop
    out = np.empty(13)
    out[:3] = place - rotate(quaternion, centre)
    out[3:6] = velocity - rotate(quaternion, cross(rate, centre))
    out[6:10] = quaternion
    out[10:13] = rate
    return out


def rotor_lag_left_s(rig: Rig, lag_gain: float) -> float:
    """
    Lag of the rotors behind a demand when commands are led by ``lag_gain``.

    A command of ``w + gain (target - w)`` makes a rotor of time constant T follow its target with
    T / gain. The slowest rotor counts.

    Parameters
    ----------
    rig : Rig
        The hardware.
    lag_gain : float
        At least 1.

    Returns
    -------
    float
        Seconds.

    """
    return float(rig.rotors.time_constant_s.max()) / lag_gain


class Lead:
    """
    The moment at which a command is felt, and the platform's state then.

    Parameters
    ----------
    rig : Rig
    transport_s : float
        From a part's step to the drives, half a tick of hold included.
    lag_gain : float
        Lag inversion of the allocator, see ``rotor_lag_left_s``.

    Attributes
    ----------
    lag_s, lead_s : float
        Rotor lag left; from a step to the felt moment.

    """

    def __init__(self, rig: Rig, transport_s: float, lag_gain: float) -> None:
        self.transport_s = transport_s
        self.lag_s = rotor_lag_left_s(rig, lag_gain)
        self.lead_s = transport_s + self.lag_s
        # Oldest first; unused places hold the first wrench, felt since ever.
        self._felt = np.full(_HISTORY, -np.inf)
        self._wrenches = np.zeros((_HISTORY, 6))
        self._empty = True

    def clear(self) -> None:
        """Forget the wrenches on their way."""
        self._felt[:] = -np.inf
        self._empty = True

    def record(self, t: float, achieved: Wrench) -> None:
        """Note the wrench that the commands of the step at ``t`` are expected to give."""
        felt, wrenches = self._felt, self._wrenches
        if self._empty:
            wrenches[:, :3] = achieved.force_body_n
            wrenches[:, 3:] = achieved.torque_body_nm
            self._empty = False
        else:
            wrenches[:-1] = wrenches[1:]
            felt[:-1] = felt[1:]
            wrenches[-1, :3] = achieved.force_body_n
            wrenches[-1, 3:] = achieved.torque_body_nm
        felt[-1] = t + self.lead_s

    def predict(self, estimate: Estimate, t: float, body: LoadedBody) -> PlatformState:
        """
        Platform at the felt moment of a command sent at ``t``.

        Parameters
        ----------
        estimate : Estimate
            Where the prediction starts, at its own stamp.
        t : float
            Now, s.
        body : LoadedBody
            The moving mass with what payload there is.

        Returns
        -------
        PlatformState
            Stamped ``t + lead_s``. With no wrench recorded yet, weight is taken as held.

        """
        felt_s = t + self.lead_s
        if self._empty:
            return PlatformState(felt_s, estimate.position_map_m, estimate.velocity_map_m_s,
                                 estimate.quaternion_wxyz, estimate.rate_body_rad_s)
        state = np.concatenate((estimate.position_map_m, estimate.velocity_map_m_s,
                                estimate.quaternion_wxyz, estimate.rate_body_rad_s))
        disturbance = np.concatenate((estimate.disturbance_force_map_n,
                                      estimate.disturbance_torque_map_nm))
        # An estimate older than the history would be pushed by the wrong wrench for long.
        start = max(estimate.stamp_s, felt_s - 0.25)
        out = _predict(state, start, felt_s, self._felt, self._wrenches, disturbance,
                       body.mass_kg, body.inertia_kg_m2, body.inertia_inverse, body.centre_m,
                       body.nominal_centre_m)
        return PlatformState(felt_s, out[:3], out[3:6], out[6:10], out[10:])
