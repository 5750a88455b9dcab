"""What is refused before it reaches the filter, and how often."""

from collections import Counter

import numpy as np

from suspended_ctrl.estimation.settings import EstimatorSettings
from suspended_ctrl.estimation.timeline import KIND_NAMES, POSE
from suspended_ctrl.rig.frozen import Array

# A quaternion off unit norm by more was not made by rounding.
NORM_SLACK = 1e-3
# A stamp so far ahead of every other is a clock's jump, not a gap.
AHEAD_MAX_S = 0.5
# So many samples in a row on another clock, and the clock has jumped.
JUMP_SAMPLES = 20
# Poses equal to the last bit so many times in a row are a frozen source.
FROZEN_POSES = 3


class Guard:
    """
    Checks of single samples.

    Parameters
    ----------
    settings : EstimatorSettings

    Attributes
    ----------
    refused : Counter of str
        By ``kind.reason``.
    newest_s : float
        Newest stamp taken; -inf before the first.
    offered : float
        Stamp of the last sample refused for its stamp.
    gated, accepted : int
        Poses that the filter refused and took.

    """

    def __init__(self, settings: EstimatorSettings) -> None:
        self._history_s = settings.history_s
        self.refused: Counter[str] = Counter()
        self.newest_s = -np.inf
        self.offered = -np.inf
        self._wrong_time = 0
        self._pose: tuple[float, ...] | None = None
        self.repeats = 0
        self._verdicts: dict[float, bool] = {}
        self.gated = 0
        self.accepted = 0

    def count(self, kind: int, reason: str) -> bool:
        """Count a refusal; false, for the caller to return."""
        self.refused[f'{KIND_NAMES[kind]}.{reason}'] += 1
        return False

    def numbers(self, kind: int, t: float, first: Array | float,
                second: Array | float = 0.0) -> bool:
        """Whether the stamp and every component are finite numbers."""
        total = t + np.sum(first) + np.sum(second)
        # A sum is finite if and only if its terms are, short of overflow.
        return bool(np.isfinite(total)) or self.count(kind, 'not_finite')

    def unit(self, quaternion: Array) -> bool:
        """Whether a quaternion has unit norm."""
        square = float(quaternion @ quaternion)
        return abs(square - 1.0) <= 2.0 * NORM_SLACK or self.count(POSE, 'not_unit')

    def frozen_pose(self, position: Array, quaternion: Array) -> bool:
        """Whether a pose repeats the one before to the last bit, which no live source does."""
        pose = (*position.tolist(), *quaternion.tolist())
        if pose != self._pose:
            self._pose = pose
            self.repeats = 0
            return False
        self.repeats += 1
        self.count(POSE, 'frozen' if self.repeats >= FROZEN_POSES else 'repeated')
        return True

    def stamp(self, kind: int, t: float, oldest_s: float) -> bool:
        """Whether a stamp is on the clock of the others and not older than ``oldest_s``."""
        if t <= oldest_s or (t > self.newest_s + AHEAD_MAX_S and np.isfinite(self.newest_s)):
            self._wrong_time += 1
            self.offered = t
            return self.count(kind, 'too_late' if t <= oldest_s else 'too_early')
        self._wrong_time = 0
        self.newest_s = max(self.newest_s, t)
        return True

    @property
    def jumped(self) -> bool:
        """Whether the clock of the samples has jumped."""
        return self._wrong_time >= JUMP_SAMPLES

    def restart(self) -> None:
        """Begin a new time, that of the last sample refused."""
        self._wrong_time = 0
        self.newest_s = self.offered
        self._verdicts.clear()
        self.refused['clock.jump'] += 1

    def verdict(self, t: float, accepted: bool) -> None:
        """Note what became of a pose; coming again over the same pose counts once."""
        before = self._verdicts.get(t)
        if before is not None:
            self.accepted -= before
            self.gated -= not before
        self._verdicts[t] = accepted
        self.accepted += accepted
        self.gated += not accepted
        if len(self._verdicts) > 1000:
            limit = t - self._history_s - 1.0
            self._verdicts = {s: v for s, v in self._verdicts.items() if s >= limit}
