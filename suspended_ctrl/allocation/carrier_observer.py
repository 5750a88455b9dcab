"""Where the carrier's axes are, between its samples."""

import numpy as np

from suspended_ctrl.physics.values import CarrierSample
from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.rig import Carrier

# Gains of the position and speed correction at one sample of 50 Hz: 0.5 mm of noise comes through
# as 0.2 mm and 4 mm/s, and a change of speed is followed within a tenth of a second.
_GAIN = 0.3
_RATE_GAIN_1_S = 2.5


class CarrierObserver:
    """
    Position and speed of the axes, straight on between samples.

    Parameters
    ----------
    carrier : Carrier

    Attributes
    ----------
    position_m, velocity_m_s : ndarray, shape (k,)
        At the last step; zero before the first sample.

    """

    def __init__(self, carrier: Carrier) -> None:
        count = len(carrier.axes)
        self._carrier = carrier
        self.position_m = np.zeros(count)
        self.velocity_m_s = np.zeros(count)
        self._t: float | None = None
        self._seen = False

    def at(self, t: float) -> tuple[Array, Array]:
        """Position and velocity at ``t``, shapes (k,)."""
        if self._t is None:
            return self.position_m, self.velocity_m_s
        return self.position_m + (t - self._t) * self.velocity_m_s, self.velocity_m_s

    def advance(self, t: float) -> None:
        """Go on to ``t``."""
        self.position_m, self.velocity_m_s = self.at(t)
        self._t = t

    def correct(self, sample: CarrierSample) -> None:
        """Let a sample in; one that is not finite is dropped."""
        measured = np.asarray(sample.position_m, dtype=float)
        if measured.shape != self.position_m.shape or not np.isfinite(measured).all():
            return
        if not self._seen:
            self.position_m = measured.copy()
            self._seen = True
            return
        error = measured - self.at(sample.stamp_s)[0]
        limit = self._carrier.speed_max_m_s
        self.position_m = self.position_m + _GAIN * error
        self.velocity_m_s = np.clip(self.velocity_m_s + _RATE_GAIN_1_S * error, -limit, limit)
