"""
The figures of a run, from its log and its rig alone.

So the loop, the graph and a later review of the recording say the same thing. Every figure's
definition stands where it is computed, in ``review.measure``.
"""

from collections.abc import Mapping
from dataclasses import dataclass
import json
from typing import Any

import numpy as np

from suspended_ctrl.review.acceptance import Bound, Criterion, judged
from suspended_ctrl.review.log import RunLog
from suspended_ctrl.review.measure.effort import effort, tether
from suspended_ctrl.review.measure.estimation import estimation
from suspended_ctrl.review.measure.on_path import OnPath
from suspended_ctrl.review.measure.safety import safety
from suspended_ctrl.review.measure.timing import loop_timing
from suspended_ctrl.review.measure.tracking import tracking, tracking_series
from suspended_ctrl.rig.rig import Rig

SCHEMA = 'suspended_ctrl/metrics/1'
# The log's last record may fall this much short of the path's end: a tick at the slowest rate.
_SHORT_S = 0.05


@dataclass(frozen=True)
class Assessment:
    """
    Figures and verdict of a run.

    Attributes
    ----------
    metrics : dict
        Contents of ``metrics.json``: numbers, text, lists and None, never nan.
    criteria : list of Criterion
        First whether the run completed.

    """

    metrics: dict[str, Any]
    criteria: list[Criterion]

    @property
    def passed(self) -> bool:
        """Whether every criterion was met."""
        return all(criterion.passed for criterion in self.criteria)

    def text(self) -> str:
        """``metrics.json``."""
        return json.dumps(self.metrics, indent=2, allow_nan=False) + '\n'


def trouble_of(log: RunLog, path: OnPath) -> str | None:
    """Why a run did not complete; None where it did."""
    if log.facts.ended is not None:
        return log.facts.ended
    if not path.exists:
        return 'no path was flown'
    if not log.end_s >= path.end_s - _SHORT_S:
        return f'the recording ends {path.end_s - log.end_s:.2f} s before the path'
    for t, state in zip(log.rows('safety/state').times, log.rows('safety/state').rows,
                        strict=True):
        if path.start_s <= t <= path.end_s and state not in ('live', 'holding'):
            return f'{state} {t - path.start_s:.2f} s into the path'
    return None


def assess(log: RunLog, rig: Rig, criteria: Mapping[str, Bound] | None = None) -> Assessment:
    """
    Compute every figure and hold it to the criteria.

    Parameters
    ----------
    log : RunLog
        The run.
    rig : Rig
        The hardware.
    criteria : mapping of str to bound, optional
        See ``acceptance.judged``.

    Returns
    -------
    Assessment
        ``duration_s``: host time from the first record to the last; ``realtime_factor``: that over
        the wall-clock time of the run.

    """
    facts = log.facts
    path = OnPath(log)
    duration = log.end_s - log.start_s
    duration_s = float(duration) if np.isfinite(duration) else None
    fast = duration_s is not None and facts.wall_s is not None and facts.wall_s > 0.0
    figures: dict[str, Any] = {
        'duration_s': duration_s,
        'realtime_factor': duration / facts.wall_s if fast and facts.wall_s else None,
        'tracking': tracking(tracking_series(log, path)),
        'effort': effort(log, rig, path),
        'tether': tether(log, rig, path),
        'estimation': estimation(log, path),
        'loop': loop_timing(log, path),
        'safety': safety(log, rig, path),
    }
    judgement = judged(figures, criteria or {}, trouble_of(log, path))
    failed = [criterion.key for criterion in judgement if not criterion.passed]
    return Assessment({
        'schema': SCHEMA, 'verdict': 'fail' if failed else 'pass', 'failed_criteria': failed,
        'mission': facts.mission, 'rig': facts.rig or rig.name, 'seed': facts.seed,
        'law': facts.law, 'allocator': facts.allocator, **figures}, judgement)
