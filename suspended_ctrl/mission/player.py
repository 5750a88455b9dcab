"""Plays a timed mission: start, hold, stop, and the payload events on the way."""

from dataclasses import dataclass

import numpy as np

from suspended_ctrl.mission.pause import halted, resumed
from suspended_ctrl.mission.timing import TimedMission
from suspended_ctrl.physics.reference import Reference
from suspended_ctrl.physics.values import PayloadEvent
from suspended_ctrl.rig.frozen import Array

START_AHEAD_S = 0.5
START_WITHIN_M = 0.1


@dataclass(frozen=True)
class Reply:
    """Answer to a request: whether it was taken, and why or why not."""

    success: bool
    message: str


class MissionPlayer:
    """
    Hands out the reference of one mission.

    Parameters
    ----------
    mission : TimedMission

    Attributes
    ----------
    reference : Reference or None
        What is being followed.

    """

    def __init__(self, mission: TimedMission) -> None:
        self.mission = mission
        self.reference: Reference | None = None
        self._whole = mission.reference
        self._origin_s = np.nan
        self._held_at_s: float | None = None
        self._sent = 0

    def start(self, now: float, safety_state: str, position_map_m: Array | None,
              quaternion_wxyz: Array | None) -> Reply:
        """
        Start from the first waypoint, or go on from a hold.

        Parameters
        ----------
        now : float
            Host time, s.
        safety_state : str
            Of the supervisor.
        position_map_m, quaternion_wxyz : ndarray, shape (3,) and (4,), or None
            Of the platform, None when not known.

        Returns
        -------
        Reply
            Refused unless live and within 0.1 m of where the path begins.

        """
        if safety_state != 'live':
            return Reply(False, f'the rig is {safety_state}, not live: enable it first')
        if position_map_m is None or quaternion_wxyz is None:
            return Reply(False, 'no odometry yet: is the state estimator running?')
        if self.running(now) and self._held_at_s is None:
            return Reply(False, 'the mission is under way already')
        whole = self._whole
        begin = whole.starting_at(0.0).at(self._held_at_s or 0.0).position_map_m
        gap = float(np.linalg.norm(position_map_m - begin))
        if gap > START_WITHIN_M:
            place = ', '.join(f'{x:.2f}' for x in begin)
            return Reply(False, f'the platform is {gap:.2f} m from where the path begins, '
                         f'({place}) m: allowed is {START_WITHIN_M} m')
        start_s = now + START_AHEAD_S
        if self._held_at_s is None:
            self._whole = self.mission.approached_from(position_map_m, quaternion_wxyz)
            self.reference = self._whole.starting_at(start_s)
            self._origin_s, self._sent = start_s, 0
            message = f'{self.mission.mission.file.name} starts in {START_AHEAD_S} s'
        else:
            self.reference = resumed(whole, self._held_at_s, start_s)
            self._origin_s = self.reference.end_s - float(whole.time_s[-1])
            self._held_at_s = None
            message = f'{self.mission.mission.file.name} goes on in {START_AHEAD_S} s'
        return Reply(True, message)

    def hold(self, now: float) -> Reply:
        """Slow to a halt on the path; ``start`` goes on from there."""
        if not self.running(now) or self._held_at_s is not None or self.reference is None:
            return Reply(False, 'no mission is under way')
        whole = self._whole.starting_at(self._origin_s)
        self.reference, self._held_at_s = halted(whole, now)
        return Reply(True, f'holding {self._held_at_s:.1f} s into the path')

    def stop(self, now: float) -> Reply:
        """Give the path up; the controller then holds where it is."""
        if not self.running(now):
            return Reply(False, 'no mission is under way')
        self.clear()
        return Reply(True, 'the path is cleared')

    def clear(self) -> None:
        """Forget the path under way, as after a stop of the rig."""
        self._whole = self.mission.reference
        self.reference = None
        self._held_at_s = None
        self._origin_s = np.nan

    def running(self, now: float) -> bool:
        """Whether a path is under way or held."""
        if self.reference is None:
            return False
        return self._held_at_s is not None or now <= self.reference.end_s

    def finished(self, now: float) -> bool:
        """Whether the path was followed to its end."""
        return (self.reference is not None and self._held_at_s is None
                and now > self.reference.end_s)

    def path_window_s(self) -> tuple[float, float]:
        """Host times between which the mission is judged; nan before it has started."""
        return (self._origin_s + self.mission.path_start_s,
                self._origin_s + self.mission.path_end_s)

    def progress(self, now: float) -> float:
        """Share of the reference done, 0 to 1."""
        if self.reference is None:
            return 0.0
        done = self._held_at_s if self._held_at_s is not None else now - self._origin_s
        return float(np.clip(done / self.mission.reference.time_s[-1], 0.0, 1.0))

    def payload_events(self, now: float) -> list[PayloadEvent]:
        """Payload changes that have come due since the last call, in order."""
        due: list[PayloadEvent] = []
        if self.reference is None or self._held_at_s is not None:
            return due
        while self._sent < len(self.mission.payloads):
            item = self.mission.payloads[self._sent]
            at = self._origin_s + item.time_s
            if at > now:
                break
            due.append(PayloadEvent(at, item.payload.mass_kg, item.payload.position_m))
            self._sent += 1
        return due
