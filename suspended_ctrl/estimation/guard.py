"""What is refused before it reaches the filter, and how often."""

from collections import Counter
import math

import numpy as np

from suspended_ctrl.estimation.settings import EstimatorSettings
from suspended_ctrl.estimation.timeline import KIND_NAMES, PAYLOAD, POSE
from suspended_ctrl.physics.kernel import kernel, REAL, TRUTH, VECTOR
from suspended_ctrl.rig.frozen import Array, ArrayLike

# A quaternion off unit norm by more was not made by rounding.
NORM_SLACK = 1e-3
# A stamp so far ahead of every other is a clock's jump, not a gap.
AHEAD_MAX_S = 0.5
# So many samples in a row on another clock, and the clock has jumped.
JUMP_SAMPLES = 20
# Poses equal to the last bit so many times in a row are a frozen source.
FROZEN_POSES = 3


@kernel(TRUTH(REAL, VECTOR, VECTOR))
def all_finite(t: float, a: Array, b: Array) -> bool:
    """Whether a stamp and two vectors have no inf and no nan."""
    # Zero times anything finite is zero, times inf or nan it is nan.
    total = 0.0 * t
    for value in a:
        total += 0.0 * value
    for value in b:
        total += 0.0 * value
    return total == 0.0


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
        self.newest_s = -math.inf
        self.offered = -math.inf
        self._wrong_time = 0
        self._pose: tuple[bytes, bytes] | None = None
        self.repeats = 0
        self._verdicts: dict[float, bool] = {}
        self.gated = 0
        self.accepted = 0

    def count(self, kind: int, reason: str) -> bool:
        """Count a refusal; false, for the caller to return."""
        self.refused[f'{KIND_NAMES[kind]}.{reason}'] += 1
        return False

    def vectors(self, kind: int, t: float, first: ArrayLike, size: int,
                second: ArrayLike = (), second_size: int = 0) -> tuple[Array, Array] | None:
        """
        Copy a sample's one or two vectors; None if it is not what it should be.

        Parameters
        ----------
        kind : int
            Of the sample, see ``timeline``.
        t : float
            Its stamp, s.
        first, second : array_like
            What it holds; the second may be left out.
        size, second_size : int
            Lengths that they must have.

        Returns
        -------
        tuple of ndarray, or None
            None for a wrong length and where the stamp or a component is not finite.

        """
        a = np.array(first, dtype=np.float64)
        b = np.array(second, dtype=np.float64)
        if a.shape != (size,) or b.shape != (second_size,):
            self.count(kind, 'wrong_size')
            return None
        if not all_finite(t, a, b):
            self.count(kind, 'not_finite')
            return None
        return a, b

    def unit(self, quaternion: Array) -> bool:
        """Whether a quaternion has unit norm."""
        w, x, y, z = quaternion.tolist()
        square = w * w + x * x + y * y + z * z
        return abs(square - 1.0) <= 2.0 * NORM_SLACK or self.count(POSE, 'not_unit')

    def frozen_pose(self, position: Array, quaternion: Array) -> bool:
        """Whether a pose repeats the one before to the last bit, which no live source does."""
        pose = (position.tobytes(), quaternion.tobytes())
        if pose != self._pose:
            self._pose = pose
            self.repeats = 0
            return False
        self.repeats += 1
        self.count(POSE, 'frozen' if self.repeats >= FROZEN_POSES else 'repeated')
        return True

    def stamp(self, kind: int, t: float, oldest_s: float) -> bool:
        """Whether a stamp is on the clock of the others and not before ``oldest_s``."""
        if t < oldest_s or t > self.newest_s + AHEAD_MAX_S > -math.inf:
            self._wrong_time += 1
            self.offered = t
            return self.count(kind, 'too_late' if t < oldest_s else 'too_early')
        self._wrong_time = 0
        if t > self.newest_s and kind != PAYLOAD:
            self.newest_s = t
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
