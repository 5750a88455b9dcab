"""The fastest minimum-jerk timing of one move that keeps the rotors inside their reach."""

import numpy as np

from suspended_ctrl.physics.equilibrium import anchor_at_zero
from suspended_ctrl.physics.loaded_body import LoadedBody
from suspended_ctrl.physics.needed_wrench import rotor_wrench_along
from suspended_ctrl.physics.path import minimum_jerk, straight
from suspended_ctrl.physics.reach import Reach
from suspended_ctrl.rig.errors import InputError
from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.rig import Rig

_RESOLUTION = 0.002
_LONGEST_S = 600.0
_SHORTEST_S = 0.05


def shortest_duration_s(rig: Rig, body: LoadedBody, position_from: Array, position_to: Array,
                        quaternion_from: Array, quaternion_to: Array, margin: float,
                        at_least_s: float | None = None) -> float:
    """
    Bisect the duration of a move until it uses all of the reach but a margin.

    The anchor is taken where the carrier's zero stands: it may be anywhere near when the move
    comes, and inertia rules at the speeds that this finds.

    Parameters
    ----------
    rig : Rig
        The hardware.
    body : LoadedBody
        The moving mass with what payload there is.
    position_from, position_to : ndarray, shape (3,)
        Of the ``base_link`` origin in map, m.
    quaternion_from, quaternion_to : ndarray, shape (4,)
        Body to map.
    margin : float
        Share of the reach kept free.
    at_least_s : float, optional
        Not faster than this.

    Returns
    -------
    float
        s, at most 0.2 % above the shortest.

    Raises
    ------
    InputError
        If no duration will do, since holding still on the way is out of reach already.

    """
    reach = Reach(rig)
    anchor = anchor_at_zero(rig)

    def fits(duration: float) -> bool:
        line = straight(minimum_jerk(duration), position_from, position_to, quaternion_from,
                        quaternion_to)
        every = max(1, len(line.time_s) // 400)
        wrench = rotor_wrench_along(rig, body, line, np.tile(anchor, (len(line.time_s), 1)))
        return bool(reach.use(wrench[::every]).max() <= 1.0 - margin)

    low = max(_SHORTEST_S, at_least_s or 0.0)
    if fits(low):
        return low
    high = max(2.0 * low, 1.0)
    while not fits(high):
        low, high = high, 2.0 * high
        if high > _LONGEST_S:
            place = ', '.join(f'{x:.2f}' for x in position_to)
            raise InputError(f'path: the move to ({place}) m: the rotors cannot hold the platform '
                             f'on it with {margin:.0%} of their reach free at any speed')
    while high / low > 1.0 + _RESOLUTION:
        middle = 0.5 * (low + high)
        low, high = (low, middle) if fits(middle) else (middle, high)
    return high
