"""What the supervisor did, and how quickly."""

from typing import Any

import numpy as np

from suspended_ctrl.review.log import RunLog
from suspended_ctrl.review.measure.effort import tensions
from suspended_ctrl.review.measure.on_path import OnPath
from suspended_ctrl.review.rows import matrices
from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.rig import Rig
from suspended_ctrl.safety.settings import SafetySettings

_REACTIONS = ('holding', 'stopping', 'tripped')


def first_breach_s(log: RunLog, rig: Rig) -> float | None:
    """
    Host time at which the plant's truth first broke a limit while live; None where it never did.

    Limits: keep-in, tilt and speed of the supervisor's defaults, working load and slack.
    """
    path = OnPath(log)
    found = []
    truth = log.ground_truth
    if len(truth):
        position = truth.position_map_m
        upright = matrices(truth.quaternion_wxyz)[:, 2, 2]
        broken = ((position < rig.keep_in.lower_m) | (position > rig.keep_in.upper_m)).any(axis=1)
        broken |= upright < np.cos(SafetySettings.tilt_rad)
        broken |= np.linalg.norm(truth.velocity_map_m_s, axis=1) > SafetySettings.speed_m_s
        found.append(_first(truth.stamp_s, broken & path.mask(truth.stamp_s)))
        time_s, tension_n = tensions(log, rig)
        wrong = (tension_n > rig.tether.working_load_n) | (tension_n <= 0.0)
        found.append(_first(time_s, wrong & path.mask(time_s)))
    return min((t for t in found if t is not None), default=None)


def _first(time_s: Array, condition: np.ndarray) -> float | None:
    return float(time_s[np.argmax(condition)]) if condition.any() else None


def safety(log: RunLog, rig: Rig, path: OnPath) -> dict[str, Any]:
    """
    ``safety`` of metrics.json.

    ``state``: the last one recorded. ``reaction_latency_s``: from the injected fault, or else the
    truth's first breach of a limit, to the first change of state to ``holding``, ``stopping``
    or ``tripped``. ``cut_latency_s``: from the same moment to the first rotor command of zeros.
    Both only where an event stopped the run. ``t_s`` of an event counts from the start of the path
    (from the first record where there was no path).
    """
    states = log.rows('safety/state')
    origin = path.start_s if path.exists else log.start_s
    events = log.facts.events
    result: dict[str, Any] = {
        'state': states.rows[-1] if states.rows else None,
        'reaction_latency_s': None, 'cut_latency_s': None,
        'events': [{'t_s': float(event.t_s - origin), 'cause': event.cause,
                    'stop_category': event.stop_category} for event in events]}
    stops = [event.t_s for event in events if event.stop_category is not None]
    if not stops:
        return result
    began = log.facts.fault_s
    if began is None or began > stops[0]:
        began = first_breach_s(log, rig)
    if began is None:
        return result
    reacted = [t for t, state in zip(states.times, states.rows, strict=True)
               if t >= began and state in _REACTIONS]
    if reacted:
        result['reaction_latency_s'] = float(reacted[0] - began)
    commands = log.rotor_command
    if reacted and len(commands):
        off = (commands.log_s >= reacted[0]) & ~commands.speed_rad_s.any(axis=1)
        cut = _first(commands.log_s, off)
        result['cut_latency_s'] = None if cut is None else float(cut - began)
    return result
