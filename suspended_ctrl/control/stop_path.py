"""The controller's own way to rest, for stops: brake first, then move over the equilibrium."""

import numpy as np

from suspended_ctrl.physics.lead import PlatformState
from suspended_ctrl.physics.path import joined, minimum_jerk, straight, to_rest
from suspended_ctrl.physics.reference import Reference, ReferencePoint
from suspended_ctrl.physics.rotation import from_yaw_pitch_roll, to_yaw_pitch_roll
from suspended_ctrl.rig.frozen import Array

# Under a third of what the reference rigs' rotors give in their weakest direction.
BRAKE_M_S2 = 3.0
RETURN_PEAK_SPEED_M_S = 0.5
_PEAK_OVER_MEAN = 1.875
_SHORTEST_S = 0.5


def path_to_rest(start: ReferencePoint, felt: PlatformState,
                 goal_map_m: Array | None) -> Reference:
    """
    Brake from where the reference was; then, given a goal, go there and level off.

    Parameters
    ----------
    start : ReferencePoint
        What was followed until now, so that nothing jumps.
    felt : PlatformState
        Gives the start's time, and the place when the platform is far from what was followed.
    goal_map_m : ndarray, shape (3,), optional
        Where to come to rest; where the brake ends if left out.

    Returns
    -------
    Reference

    """
    position, velocity = start.position_map_m, start.velocity_map_m_s
    quaternion, acceleration = start.quaternion_wxyz, start.acceleration_map_m_s2
    # Past the rotors' limits the platform is not where the reference is: start from the truth.
    if np.linalg.norm(felt.position_map_m - position) > 0.05:
        position, velocity = felt.position_map_m, felt.velocity_map_m_s
        quaternion, acceleration = felt.quaternion_wxyz, np.zeros(3)
    level = from_yaw_pitch_roll(to_yaw_pitch_roll(quaternion)[0], 0.0, 0.0)
    speed = float(np.linalg.norm(velocity))
    duration = max(_SHORTEST_S, _PEAK_OVER_MEAN * speed / BRAKE_M_S2)
    halt = position + 0.5 * duration * velocity
    brake = to_rest(position, velocity, acceleration, quaternion, halt, level, duration, 0.0)
    if goal_map_m is None:
        return brake.starting_at(felt.stamp_s)
    distance = float(np.linalg.norm(goal_map_m - halt))
    back = straight(
        minimum_jerk(max(_SHORTEST_S, _PEAK_OVER_MEAN * distance / RETURN_PEAK_SPEED_M_S)),
        halt, goal_map_m, level, level)
    return joined([brake, back]).starting_at(felt.stamp_s)
