"""From a mission's steps to one timed reference, and whether the rotors reach it."""

from dataclasses import dataclass

import numpy as np

from suspended_ctrl.mission.feasible import shortest_duration_s
from suspended_ctrl.mission.file import Mission, MoveTo
from suspended_ctrl.mission.reach_check import check_keep_in, ReachUse, use_of_reach
from suspended_ctrl.physics.equilibrium import equilibrium
from suspended_ctrl.physics.loaded_body import loaded_body, LoadedBody
from suspended_ctrl.physics.path import joined, minimum_jerk, Progress, straight, trapezoid
from suspended_ctrl.physics.reference import Reference
from suspended_ctrl.physics.rotation import from_yaw_pitch_roll, to_yaw_pitch_roll
from suspended_ctrl.physics.values import Payload
from suspended_ctrl.rig.errors import InputError
from suspended_ctrl.rig.frozen import Array, frozen

PEAK_OVER_MEAN_MINIMUM_JERK = 1.875
# A third of the time speeding up, a third slowing down.
PEAK_OVER_MEAN_TRAPEZOID = 1.5
APPROACH_PEAK_SPEED_M_S = 0.3
APPROACH_SHORTEST_S = 2.0
SETTLE_S = 1.0


@dataclass(frozen=True, eq=False)
class TimedPayload:
    """What hangs on from ``time_s`` of the reference on; zero mass is nothing."""

    time_s: float
    payload: Payload


@dataclass(frozen=True, eq=False)
class TimedMission:
    """
    A mission ready to be followed.

    Attributes
    ----------
    mission : Mission
    reference : Reference
        From the equilibrium on; its time 0 is the start of the approach.
    approach : Reference
        Its first leg, to the mission's start.
    path_start_s, path_end_s : float
        Part of the reference that the mission is judged on.
    payloads : tuple of TimedPayload
    waypoints_map_m : ndarray, shape (w, 3)
        Start and goals of the moves.
    reach : ReachUse
        Greatest use of the rotors' reach.

    """

    mission: Mission
    reference: Reference
    approach: Reference
    path_start_s: float
    path_end_s: float
    payloads: tuple[TimedPayload, ...]
    waypoints_map_m: Array
    reach: ReachUse

    def approached_from(self, position_map_m: Array, quaternion_wxyz: Array) -> Reference:
        """Return the reference with its approach starting from another pose, at rest there."""
        first = len(self.approach.time_s) - 1
        leg = straight(minimum_jerk(float(self.approach.time_s[-1])), position_map_m,
                       self.approach.position_map_m[-1], quaternion_wxyz,
                       self.approach.quaternion_wxyz[-1])
        rest = self.reference
        return joined([leg, Reference(
            0.0, rest.time_s[first:] - rest.time_s[first], rest.position_map_m[first:],
            rest.velocity_map_m_s[first:], rest.acceleration_map_m_s2[first:],
            rest.quaternion_wxyz[first:], rest.rate_body_rad_s[first:],
            rest.rate_dot_body_rad_s2[first:])])


class _Builder:
    def __init__(self, mission: Mission, position: Array, quaternion: Array) -> None:
        self.mission = mission
        self.parts: list[Reference] = []
        self.owners: list[int] = []
        self.time_s = 0.0
        self.position = position
        self.quaternion = quaternion
        self.body = loaded_body(mission.rig)
        self.loads: list[tuple[float, LoadedBody]] = [(0.0, self.body)]
        self.payloads: list[TimedPayload] = []
        self.waypoints: list[Array] = []

    def move(self, progress: Progress, position: Array, quaternion: Array) -> None:
        self.parts.append(straight(progress, self.position, position, self.quaternion, quaternion))
        self.time_s += float(progress.time_s[-1])
        self.position, self.quaternion = position, quaternion

    def dwell(self, seconds: float) -> None:
        self.move(minimum_jerk(seconds), self.position, self.quaternion)

    def carry(self, payload: Payload) -> None:
        self.body = loaded_body(self.mission.rig, payload)
        self.loads.append((self.time_s, self.body))
        self.payloads.append(TimedPayload(self.time_s, payload))


def timed(mission: Mission) -> TimedMission:
    """
    Put times to a mission: approach from the equilibrium, settle, then its own steps.

    Parameters
    ----------
    mission : Mission
        As read from its file.

    Returns
    -------
    TimedMission

    Raises
    ------
    InputError
        If a point lies outside keep_in or, unless ``out_of_reach: attempt``, the path asks for
        more than the rotors reach: where, in which direction, by how much, and the peak speed
        that would do.

    """
    file, rig = mission.file, mission.rig
    level = from_yaw_pitch_roll(0.0, 0.0, 0.0)
    builder = _Builder(mission, equilibrium(rig).position_map_m, level)
    start = frozen(file.start.position_m)
    distance = float(np.linalg.norm(start - builder.position))
    approach_s = max(APPROACH_SHORTEST_S,
                     PEAK_OVER_MEAN_MINIMUM_JERK * distance / APPROACH_PEAK_SPEED_M_S)
    builder.move(minimum_jerk(approach_s), start,
                 from_yaw_pitch_roll(np.deg2rad(file.start.yaw_deg), 0.0, 0.0))
    builder.dwell(SETTLE_S)
    path_start_s = builder.time_s
    builder.waypoints.append(start)
    for step in file.path:
        if step.move_to is not None:
            goal = frozen(step.move_to.position_m)
            quaternion = _goal_attitude(builder.quaternion, step.move_to)
            builder.move(_progress(builder, step.move_to, goal, quaternion), goal, quaternion)
            builder.waypoints.append(goal)
        elif step.dwell is not None:
            builder.dwell(step.dwell.seconds)
        elif step.pick is not None:
            builder.carry(Payload(step.pick.mass_kg, frozen(step.pick.position_m)))
        else:
            builder.carry(Payload())
    reference = joined(builder.parts)
    check_keep_in(mission, reference)
    reach = use_of_reach(rig, reference, builder.loads)
    if reach.share > 1.0 and file.out_of_reach == 'refuse':
        raise InputError(f'{mission.path}: path: {reach.sentence()}')
    return TimedMission(mission, reference, builder.parts[0], path_start_s, builder.time_s,
                        tuple(builder.payloads), frozen(np.array(builder.waypoints)), reach)


def _goal_attitude(quaternion: Array, move: MoveTo) -> Array:
    angles = list(to_yaw_pitch_roll(quaternion))
    for index, degrees in enumerate((move.yaw_deg, move.pitch_deg, move.roll_deg)):
        if degrees is not None:
            angles[index] = float(np.deg2rad(degrees))
    return from_yaw_pitch_roll(*angles)


def _progress(builder: _Builder, move: MoveTo, goal: Array, quaternion: Array) -> Progress:
    file = builder.mission.file
    distance = float(np.linalg.norm(goal - builder.position))
    if file.timing == 'feasible' and move.duration_s is None:
        fastest = None
        if move.peak_speed_m_s is not None:
            fastest = PEAK_OVER_MEAN_MINIMUM_JERK * distance / move.peak_speed_m_s
        return minimum_jerk(shortest_duration_s(
            builder.mission.rig, builder.body, builder.position, goal, builder.quaternion,
            quaternion, file.feasible_margin, fastest))
    trapezoidal = file.timing == 'trapezoid'
    ratio = PEAK_OVER_MEAN_TRAPEZOID if trapezoidal else PEAK_OVER_MEAN_MINIMUM_JERK
    duration = move.duration_s
    if duration is None:
        assert move.peak_speed_m_s is not None
        duration = ratio * distance / move.peak_speed_m_s
    return trapezoid(duration, ratio / duration) if trapezoidal else minimum_jerk(duration)
