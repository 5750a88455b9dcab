"""When the mission was on its path, and where the platform should have been then."""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from suspended_ctrl.physics.reference import Reference
from suspended_ctrl.review.log import RunLog
from suspended_ctrl.rig.frozen import Array


@dataclass(frozen=True, eq=False)
class Wanted:
    """Pose that the reference asks for at some times: shapes (n, 3) and (n, 4), nan where none."""

    position_map_m: Array
    quaternion_wxyz: Array


class OnPath:
    """
    The part of a run that it is judged on.

    On the path means between ``path_start_s`` and ``path_end_s`` while the supervisor is ``live``;
    recordings without states count as live throughout. The times are those of the run's facts, or
    else those of the last reference.

    Parameters
    ----------
    log : RunLog

    Attributes
    ----------
    start_s, end_s : float
        Host times, nan where there was no path.

    """

    def __init__(self, log: RunLog) -> None:
        rows = log.rows('reference')
        self._references = [(t, ref if ref is not None and len(ref.time_s) > 1 else None)
                            for t, ref in zip(rows.times, rows.rows, strict=True)]
        paths = [ref for _, ref in self._references if ref is not None]
        facts = log.facts
        self.start_s = self.end_s = np.nan
        if facts.path_start_s is not None and facts.path_end_s is not None:
            self.start_s, self.end_s = facts.path_start_s, facts.path_end_s
        elif paths:
            self.start_s, self.end_s = paths[-1].start_s, paths[-1].end_s
        states = log.rows('safety/state')
        self._state_s = states.log_s
        self._live = np.array([state == 'live' for state in states.rows])

    @property
    def exists(self) -> bool:
        """Whether there was a path at all."""
        return bool(np.isfinite(self.start_s))

    def mask(self, times_s: Array) -> np.ndarray:
        """Whether each time is on the path, shape (n,) of bool."""
        if not self.exists or not len(times_s):
            return np.zeros(len(times_s), dtype=bool)
        inside = (times_s >= self.start_s) & (times_s <= self.end_s)
        if len(self._live):
            k = np.searchsorted(self._state_s, times_s, side='right') - 1
            inside &= (k >= 0) & self._live[np.maximum(k, 0)]
        return inside

    def _spans(self) -> Iterator[tuple[float, float, Reference | None]]:
        for k, (since, reference) in enumerate(self._references):
            last = k + 1 == len(self._references)
            yield since, np.inf if last else self._references[k + 1][0], reference

    def wanted(self, times_s: Array) -> Wanted:
        """Pose of the reference in force at each host time, shape (n,)."""
        position = np.full((len(times_s), 3), np.nan)
        quaternion = np.full((len(times_s), 4), np.nan)
        for since, until, reference in self._spans():
            if reference is None:
                continue
            for k in np.flatnonzero((times_s >= since) & (times_s < until)).tolist():
                point = reference.at(float(times_s[k]))
                position[k] = point.position_map_m
                quaternion[k] = point.quaternion_wxyz
        return Wanted(position, quaternion)

    def lines(self) -> list[Array]:
        """Points of the path in map, one array of shape (m, 3) for each reference flown."""
        found = []
        for since, until, reference in self._spans():
            if reference is None:
                continue
            time_s = reference.start_s + reference.time_s
            begin, end = max(since, self.start_s), min(until, self.end_s)
            flown = (time_s >= begin - 1e-9) & (time_s <= end + 1e-9)
            if flown.sum() > 1:
                found.append(reference.position_map_m[flown])
        return found
