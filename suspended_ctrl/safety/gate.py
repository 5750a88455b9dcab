"""The gate: a demand passes whole, is clipped by rounding, or does not pass."""

from collections.abc import Sequence

import numpy as np

from suspended_ctrl.physics.kernel import kernel, OUT_VECTOR, REAL, TRUTH, VECTOR
from suspended_ctrl.rig.frozen import Array, frozen
from suspended_ctrl.rig.rig import Rig
from suspended_ctrl.safety.settings import SafetySettings


@kernel(TRUTH(VECTOR, VECTOR, VECTOR, REAL, OUT_VECTOR))
def bounded(demand: Array, lower: Array, upper: Array, spare: float, out: Array) -> bool:
    """
    Put a demand inside its bounds.

    Parameters
    ----------
    demand, lower, upper : ndarray, shape (n,)
        One number a rotor or axis, and what it may be.
    spare : float
        Overshoot that is clipped, as a share of the range.
    out : ndarray, shape (n,)
        Out: the demand, overshoot clipped.

    Returns
    -------
    bool
        False if an entry is not finite or further out; ``out`` is of no use then.

    """
    for i in range(demand.shape[0]):
        allowed = spare * (upper[i] - lower[i])
        if not (lower[i] - allowed <= demand[i] <= upper[i] + allowed):
            return False
        out[i] = min(max(demand[i], lower[i]), upper[i])
    return True


def in_order(names: Sequence[str], values: Sequence[float], wanted: Sequence[str]) -> Array | None:
    """
    Values of a named message in the rig's order.

    Parameters
    ----------
    names, values : sequence
        As they came.
    wanted : sequence of str
        The rig's names, in its order.

    Returns
    -------
    ndarray, shape (len(wanted),), or None
        None unless there is exactly one value for each wanted name and none besides.

    """
    if len(names) != len(wanted) or len(values) != len(wanted):
        return None
    if tuple(names) == tuple(wanted):
        return frozen(values)
    named = dict(zip(names, values, strict=True))
    if named.keys() != set(wanted):
        return None
    return frozen([named[name] for name in wanted])


class Gate:
    """
    Bounds of the two demands for one rig.

    A rotor may be told to stop in every rig: a one-way rotor below its least speed is no hazard,
    and the controlled stop after a rotor loss needs it.

    Parameters
    ----------
    rig : Rig
    settings : SafetySettings

    """

    def __init__(self, rig: Rig, settings: SafetySettings) -> None:
        rotors, carrier = rig.rotors, rig.carrier
        self._spare = settings.demand_clip_fraction
        self._rotor_upper = frozen(rotors.speed_max_rad_s)
        self._rotor_lower = frozen(np.where(rotors.reversible, -rotors.speed_max_rad_s, 0.0))
        self._axis_lower = frozen(carrier.min_m)
        self._axis_upper = frozen(carrier.max_m)
        self._axis_speed = frozen(carrier.speed_max_m_s)
        self._axis_back = frozen(-carrier.speed_max_m_s)

    def rotors(self, speed_rad_s: Array) -> Array | None:
        """Rotor speeds that pass, shape (n,), or None."""
        if speed_rad_s.shape != self._rotor_upper.shape:
            return None
        out = np.empty(speed_rad_s.shape)
        if not bounded(speed_rad_s, self._rotor_lower, self._rotor_upper, self._spare, out):
            return None
        return out

    def carrier(self, position_m: Array, velocity_m_s: Array) -> tuple[Array, Array] | None:
        """Axis positions and velocities that pass, shapes (k,), or None."""
        shape = self._axis_upper.shape
        if position_m.shape != shape or velocity_m_s.shape != shape:
            return None
        place, speed = np.empty(shape), np.empty(shape)
        if (bounded(position_m, self._axis_lower, self._axis_upper, self._spare, place)
                and bounded(velocity_m_s, self._axis_back, self._axis_speed, self._spare, speed)):
            return place, speed
        return None
