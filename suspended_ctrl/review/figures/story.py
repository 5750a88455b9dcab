"""What the figures draw: a run's series on one time axis that starts with its path."""

from dataclasses import dataclass

import numpy as np

from suspended_ctrl.review.log import RunLog, SafetyEvent
from suspended_ctrl.review.measure.effort import rotor_speeds, tensions
from suspended_ctrl.review.measure.on_path import OnPath
from suspended_ctrl.review.measure.tracking import tracking_series, TrackingSeries
from suspended_ctrl.review.rows import interpolated
from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.rig import Rig


@dataclass(frozen=True, eq=False)
class Story:
    """
    Series for drawing; times are seconds from ``origin_s``, the start of the path.

    Attributes
    ----------
    log : RunLog
    rig : Rig
    path : OnPath
    origin_s, start_s, end_s : float
        Host time of zero; first and last time of the recording, from zero.
    tracking : TrackingSeries
        Its times are host times.
    motion_s, position_map_m : ndarray, shape (n,) and (n, 3)
        Where the platform was: the truth, or the estimate where there is none.
    from_truth : bool
    rotor_s, rotor_speed_rad_s : ndarray, shape (r,) and (r, rotors)
    tension_s, tension_n : ndarray, shape (m,)
    states : list of (float, float, str)
        From, to, state.
    events : list of (float, SafetyEvent)

    """

    log: RunLog
    rig: Rig
    path: OnPath
    origin_s: float
    start_s: float
    end_s: float
    tracking: TrackingSeries
    motion_s: Array
    position_map_m: Array
    from_truth: bool
    rotor_s: Array
    rotor_speed_rad_s: Array
    tension_s: Array
    tension_n: Array
    states: list[tuple[float, float, str]]
    events: list[tuple[float, SafetyEvent]]

    @property
    def path_span(self) -> tuple[float, float] | None:
        """From and to of what is judged; None where there was no path."""
        if not self.path.exists:
            return None
        end = min(self.path.end_s - self.origin_s, self.end_s)
        left = [t for t, _, state in self.states
                if 0.0 < t < end and state in ('stopping', 'tripped', 'locked')]
        return 0.0, min(left, default=end)

    def anchor_map(self, host_s: Array) -> Array:
        """Anchor in map at host times, shape (n, 3), as measured or else as commanded."""
        carrier = self.rig.carrier
        out = np.tile(carrier.anchor_m, (len(host_s), 1))
        table = (self.log.carrier_states if len(self.log.carrier_states)
                 else self.log.carrier_command)
        if carrier.axes and len(table):
            reading = interpolated(host_s, table.stamp_s, table.position_m)
            out += (reading + carrier.zero_offset_m) @ carrier.direction_map
        return out


def told(log: RunLog, rig: Rig) -> Story:
    """
    Gather a run's series.

    Parameters
    ----------
    log : RunLog
        The run.
    rig : Rig
        The hardware.

    Returns
    -------
    Story

    """
    path = OnPath(log)
    origin = path.start_s if path.exists else log.start_s
    origin = origin if np.isfinite(origin) else 0.0
    start, end = log.start_s - origin, log.end_s - origin
    if not np.isfinite(start):
        start, end = 0.0, 1.0
    from_truth = len(log.ground_truth) > 0
    motion = log.ground_truth if from_truth else log.odometry
    speeds = rotor_speeds(log)
    tension_s, tension_n = tensions(log, rig)
    states = log.rows('safety/state')
    times = [*(t - origin for t in states.times), end]
    return Story(
        log, rig, path, origin, start, end, tracking_series(log, path),
        motion.stamp_s - origin if len(motion) else np.zeros(0),
        motion.position_map_m if len(motion) else np.zeros((0, 3)), from_truth,
        speeds.stamp_s - origin if len(speeds) else np.zeros(0),
        speeds.speed_rad_s if len(speeds) else np.zeros((0, rig.rotors.count)),
        tension_s - origin, tension_n,
        [(times[k], times[k + 1], state) for k, state in enumerate(states.rows)],
        [(event.t_s - origin, event) for event in log.facts.events])
