"""Whether a strategy may take over from another while the rotors turn."""

import numpy as np

from suspended_ctrl.allocation.values import Allocation, AllocationInputs
from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.rig import Rig

# Thrusts beyond reach by less than this, of the greatest, are a solver's rounding.
_ROUNDING = 1e-3


def swap_refusal(rig: Rig, seen: AllocationInputs, allocation: Allocation,
                 setpoint_m: Array | None, tick_s: float) -> str | None:
    """
    Why a strategy must not take over.

    Parameters
    ----------
    rig : Rig
        The hardware.
    seen : AllocationInputs
        Of the last tick.
    allocation : Allocation
        What the strategy makes of them.
    setpoint_m : ndarray, shape (k,), or None
        Of the carrier's axes as last demanded.
    tick_s : float
        Length of a tick.

    Returns
    -------
    str or None
        None where rotors and carrier can follow the change within one tick.

    """
    thrust, lower, upper = allocation.thrust_n, seen.thrust_lower_n, seen.thrust_upper_n
    if not np.isfinite(thrust).all():
        return 'its rotor thrust is not finite'
    over = np.maximum(lower - thrust, thrust - upper)
    worst = int(np.argmax(over))
    if over[worst] > _ROUNDING * float(np.abs(upper).max()):
        return (f'{rig.rotors.names[worst]} would step to {thrust[worst]:.2f} N, within one tick '
                f'it gets from {lower[worst]:.2f} to {upper[worst]:.2f} N')
    place = allocation.carrier_position_m
    if place is None or setpoint_m is None:
        return None
    carrier = rig.carrier
    room = carrier.speed_max_m_s * tick_s
    moved = np.abs(place - setpoint_m)
    axis = int(np.argmax(moved - room))
    if moved[axis] > room[axis]:
        return (f'axis {carrier.axes[axis]} would step by {moved[axis]:.4f} m, within one tick it '
                f'moves {room[axis]:.4f} m')
    return None
