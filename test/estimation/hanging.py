"""A platform that hangs at rest with its rotors off, recorded once for many estimators."""

from dataclasses import dataclass, replace
from functools import cache

import numpy as np

from suspended_ctrl.bench.bench import Bench
from suspended_ctrl.bench.values import EmergencyStopSample, Start, Truth
from suspended_ctrl.estimation.estimator import EstimatorInputs
from suspended_ctrl.physics.rotation import conjugate, logarithm, multiply
from suspended_ctrl.physics.values import PoseSample, Sample
from suspended_ctrl.rig.file import load_rig
from suspended_ctrl.rig.frozen import frozen

TICK_S = 0.005
# The bay head's motion capture: 0.3 mm on each axis. Three axes together pass 1 mm once in 90
# poses (chi-square 11.1, three degrees of freedom), so that a filter which only hands poses
# through does not keep under it for hundreds of them.
BOUND_M = 0.001


@dataclass(frozen=True)
class Recording:
    """Batches of samples by time of arrival, s, and the truth by milliseconds / 5."""

    batches: tuple[tuple[float, tuple[Sample, ...]], ...]
    truth: tuple[Truth, ...]

    def samples(self):
        return [sample for _, batch in self.batches for sample in batch]

    def truth_at(self, t):
        tick = round(t / TICK_S)
        assert abs(tick * TICK_S - t) < 1e-6, f'no truth at {t}'
        return self.truth[tick]

    def changed(self, change):
        """Make a recording whose samples are ``change(sample)``, without those that are None."""
        def batch(samples):
            return tuple(new for new in map(change, samples) if new is not None)
        return replace(self, batches=tuple((t, batch(s)) for t, s in self.batches))

    def poses(self, change):
        """Make a recording with its poses changed."""
        return self.changed(lambda s: change(s) if isinstance(s, PoseSample) else s)


@cache
def record(seed=1, seconds=2.0, offset=(0.0, 0.0, 0.0)):
    """Record a bay head that differs from its file as the seed says."""
    bench = Bench(load_rig('bay_head'), seed, start=Start(frozen(offset, 3)))
    batches, truth = [], [bench.truth()]
    for tick in range(1, round(seconds / TICK_S) + 1):
        t = tick * TICK_S
        bench.advance(t)
        truth.append(bench.truth())
        batches.append((t, tuple(s for s in bench.samples(t)
                                 if not isinstance(s, EmergencyStopSample))))
    return Recording(tuple(batches), tuple(truth))


def run(part, recording):
    """Feed a recording; what came out, by time."""
    return [(t, part.step(t, EstimatorInputs(batch))) for t, batch in recording.batches]


def after(outputs, t_s):
    """Estimates given after ``t_s``."""
    return [out.estimate for t, out in outputs if t > t_s]


def miss(estimate, truth):
    """Error of an estimate: position, attitude, velocity, rate, as its covariance has them."""
    turned = logarithm(multiply(conjugate(truth.quaternion_wxyz), estimate.quaternion_wxyz))
    return np.concatenate((estimate.position_map_m - truth.position_map_m, turned,
                           estimate.velocity_map_m_s - truth.velocity_map_m_s,
                           estimate.rate_body_rad_s - truth.rate_body_rad_s))


def off_m(estimate, recording):
    """Error of the position, m."""
    truth = recording.truth_at(estimate.stamp_s)
    return float(np.linalg.norm(estimate.position_map_m - truth.position_map_m))
