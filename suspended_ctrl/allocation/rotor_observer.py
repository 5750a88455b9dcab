"""
Rotor speeds from the lag's model, kept true by telemetry, and rotors that do not follow.

The lag inversion multiplies what it is fed by its gain, so it is fed the model's speed, which has
no noise, with telemetry let in through a small gain only.
"""

from numba import types
import numpy as np
from numpy.typing import NDArray

from suspended_ctrl.physics.kernel import (
    kernel,
    OUT_FLAGS,
    OUT_MATRIX,
    OUT_VECTOR,
    REAL,
    VECTOR,
)
from suspended_ctrl.physics.rotor import lagged_speed
from suspended_ctrl.physics.values import RotorSample
from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.rig import Rotors

Flags = NDArray[np.bool_]

# Share of a telemetry error taken into the model each sample: 1 % noise comes through at 0.1 %,
# while a lag known wrong by a fifth leaves 10 % of a step's size for under a tenth of a second.
_GAIN = 0.03
# A rotor counts as not following when it is this far outside everything that the model went
# through lately, for this many samples in a row: beyond 6 sigma of 1 % noise at any speed, and
# what a lag 20 % wrong leaves of a full step. On a busy host commands and telemetry come late by
# tens of milliseconds, hence the window; a dead rotor leaves it all the same.
_OFF_RAD_S = 40.0
_OFF_SHARE = 0.08
_OFF_SAMPLES = 3
_WINDOW_S = 0.060
# Following again for this long, a rotor is taken back in.
_BACK_SAMPLES = 60
_KEPT = 48


@kernel(types.void(REAL, VECTOR, OUT_MATRIX, VECTOR, OUT_VECTOR, OUT_VECTOR, OUT_FLAGS))
def _correct(stamp: float, times: Array, speeds: Array, measured: Array, speed: Array,
             count: Array, healthy: Flags) -> None:
    """
    Let telemetry in and judge by it who follows, in place.

    Parameters
    ----------
    stamp : float
        Of the telemetry.
    times : ndarray, shape (m,)
        Rising; minus infinity where there is no row yet.
    speeds : ndarray, shape (m, n)
        What the model went through.
    measured : ndarray, shape (n,)
        The telemetry.
    speed : ndarray, shape (n,)
        The model now.
    count : ndarray, shape (n,)
        Samples in a row outside the window, below zero those inside it.
    healthy : ndarray of bool, shape (n,)
        Who follows.

    """
    last = times.shape[0] - 1
    k = 0
    while k < last - 1 and times[k + 1] < stamp:
        k += 1
    span = times[k + 1] - times[k]
    share = min(max((stamp - times[k]) / span, 0.0), 1.0) if 0.0 < span < np.inf else 1.0
    for i in range(measured.shape[0]):
        low, high = np.inf, -np.inf
        for row in range(times.shape[0]):
            if times[row] >= stamp - _WINDOW_S:
                low = min(low, speeds[row, i])
                high = max(high, speeds[row, i])
        outside = max(low - measured[i], measured[i] - high)
        if outside > _OFF_RAD_S + _OFF_SHARE * abs(measured[i]):
            count[i] = max(count[i], 0.0) + 1.0
        else:
            count[i] = min(count[i], 0.0) - 1.0
        healthy[i] = count[i] < _OFF_SAMPLES if healthy[i] else count[i] < -_BACK_SAMPLES
        # The model of a rotor that is out is left alone: it must come to the model to be believed.
        if healthy[i]:
            expected = speeds[k, i] + share * (speeds[k + 1, i] - speeds[k, i])
            change = _GAIN * (measured[i] - expected)
            speed[i] += change
            for row in range(times.shape[0]):
                speeds[row, i] += change


class RotorObserver:
    """
    Speed of every rotor at the moment when the next command reaches the drives.

    Parameters
    ----------
    rotors : Rotors
    arrival_s : float
        From a step to the drives.

    Attributes
    ----------
    speed_rad_s : ndarray, shape (n,)
    healthy : ndarray of bool, shape (n,)
        False from the tick on in which a rotor was found not to follow, until it follows again.
    measured_rad_s : ndarray, shape (n,)
        Last telemetry; zero before the first.

    """

    def __init__(self, rotors: Rotors, arrival_s: float) -> None:
        self._rotors = rotors
        self._arrival = arrival_s
        self.speed_rad_s = np.zeros(rotors.count)
        self.measured_rad_s = np.zeros(rotors.count)
        self.healthy = np.ones(rotors.count, dtype=bool)
        self._command = np.zeros(rotors.count)
        self._count = np.zeros(rotors.count)
        self._times = np.full(_KEPT, -np.inf)
        self._speeds = np.zeros((_KEPT, rotors.count))
        self._now: float | None = None

    def forgive(self) -> None:
        """Take every rotor back in, as after a reset."""
        self.healthy = np.ones(self._rotors.count, dtype=bool)
        self._count[:] = 0.0

    def advance(self, t: float) -> None:
        """Let the last command act until the one of the step at ``t`` arrives."""
        dt = 0.0 if self._now is None else min(max(t - self._now, 0.0), 1.0)
        self._now = t
        if dt > 0.0:
            self.speed_rad_s = lagged_speed(self.speed_rad_s, self._command, dt,
                                            self._rotors.time_constant_s)
        self._times[:-1] = self._times[1:]
        self._speeds[:-1] = self._speeds[1:]
        self._times[-1] = t + self._arrival
        self._speeds[-1] = self.speed_rad_s

    def correct(self, sample: RotorSample) -> None:
        """Let telemetry in, judge by it who follows; samples that are not finite are dropped."""
        measured = np.asarray(sample.speed_rad_s, dtype=float)
        if measured.shape != self.speed_rad_s.shape or not np.isfinite(measured).all():
            return
        if self._times[-2] == -np.inf or sample.stamp_s < self._times[0]:
            self.speed_rad_s = measured.copy()
            self._speeds[-1] = measured
            self.measured_rad_s = measured
            return
        speed = self.speed_rad_s.copy()
        healthy = self.healthy.copy()
        _correct(sample.stamp_s, self._times, self._speeds, measured, speed, self._count, healthy)
        self.speed_rad_s, self.healthy, self.measured_rad_s = speed, healthy, measured

    def commanded(self, speed_rad_s: Array) -> None:
        """Note the command of this step."""
        self._command = speed_rad_s
