"""How regular and how quick the loop was, by the wall clock."""

import numpy as np

from suspended_ctrl.review.log import RunLog
from suspended_ctrl.review.measure.on_path import OnPath
from suspended_ctrl.review.measure.summary import largest, quantile, Section
from suspended_ctrl.rig.frozen import Array

_SAME_STAMP_S = 5e-7


def loop_timing(log: RunLog, path: OnPath) -> Section:
    """
    ``loop`` of metrics.json.

    ``rate_hz``: rotor demands a second of log time, on the path where there is one. ``tick_*_s``:
    wall clock of a tick, where the run measured it (the four parts in one process); else, in a
    graph, from the recording of a pose to that of the rotor command with the same stamp.
    ``plan_p99_s``: wall clock of a carrier plan where measured; else the largest ``plan_p99_s``
    that any node's diagnostics say.
    """
    times = log.rotor_demand.log_s
    on = path.mask(times)
    times = times[on] if on.any() else times
    rate = (len(times) - 1) / (times[-1] - times[0]) if len(times) > 1 else None
    ticks = log.facts.tick_wall_s if len(log.facts.tick_wall_s) else pose_to_command(log, path)
    plans = log.facts.plan_wall_s
    return {
        'rate_hz': None if rate is None else float(rate),
        'tick_p50_s': quantile(ticks, 0.5), 'tick_p99_s': quantile(ticks, 0.99),
        'tick_max_s': largest(ticks),
        'plan_p99_s': quantile(plans, 0.99) if len(plans) else _said(log, 'plan_p99_s')}


def pose_to_command(log: RunLog, path: OnPath) -> Array:
    """Seconds from recording a pose to recording the first command with its stamp, on the path."""
    pose, command = log.pose, log.rotor_command
    if not len(pose) or not len(command):
        return np.zeros(0)
    stamps, first = np.unique(command.stamp_s, return_index=True)
    on = path.mask(pose.log_s)
    wanted, seen = pose.stamp_s[on], pose.log_s[on]
    k = np.clip(np.searchsorted(stamps, wanted - _SAME_STAMP_S), 0, len(stamps) - 1)
    met = np.abs(stamps[k] - wanted) <= _SAME_STAMP_S
    delay = command.log_s[first[k[met]]] - seen[met]
    later: Array = delay[delay > 0.0]
    return later


def _said(log: RunLog, key: str) -> float | None:
    found = []
    for value in log.rows('/diagnostics').rows:
        for status in value.statuses:
            if key in status.values:
                try:
                    found.append(float(status.values[key]))
                except ValueError:
                    continue
    finite = [value for value in found if np.isfinite(value)]
    return max(finite, default=None)
