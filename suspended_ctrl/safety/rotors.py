"""Do the rotors do what they were told: measured speeds against the commands and their lag."""

from numba import types
import numpy as np

from suspended_ctrl.physics.kernel import (
    INTEGER,
    kernel,
    MATRIX,
    OUT_MATRIX,
    OUT_VECTOR,
    REAL,
    TRUTH,
    VECTOR,
)
from suspended_ctrl.physics.rotor import _thrust
from suspended_ctrl.rig.frozen import Array, frozen
from suspended_ctrl.rig.rig import Rig
from suspended_ctrl.safety.settings import SafetySettings


@kernel(types.void(OUT_VECTOR, VECTOR, REAL, VECTOR, OUT_MATRIX, INTEGER))
def _advance(expected: Array, command: Array, dt: float, lag: Array, window: Array,
             row: int) -> None:
    """Move the expected speeds on by ``dt`` and put them into row ``row`` of the window."""
    for i in range(expected.shape[0]):
        expected[i] = command[i] + (expected[i] - command[i]) * np.exp(-dt / lag[i])
        window[row, i] = expected[i]


@kernel(types.void(VECTOR, MATRIX, MATRIX, MATRIX, OUT_VECTOR))
def _force(speed: Array, curve_speed: Array, curve_thrust: Array, axis: Array,
           out: Array) -> None:
    """Sum of the thrusts at these speeds, shape (3,)."""
    thrust = _thrust(speed, curve_speed, curve_thrust)
    out[:] = 0.0
    for i in range(speed.shape[0]):
        for j in range(3):
            out[j] += axis[i, j] * thrust[i]


@kernel(TRUTH(VECTOR, OUT_MATRIX, VECTOR, VECTOR, VECTOR, REAL, OUT_VECTOR))
def _compare(measured: Array, window: Array, floor: Array, top: Array, watched: Array,
             fraction: float, out: Array) -> bool:
    """Share of the following limit, the rotor that makes it, share of full speed; false if bad."""
    for i in range(measured.shape[0]):
        if not np.isfinite(measured[i]):
            return False
    out[:] = 0.0
    for i in range(measured.shape[0]):
        low = window[0, i]
        high = window[0, i]
        for k in range(1, window.shape[0]):
            low = min(low, window[k, i])
            high = max(high, window[k, i])
        gap = max(low - measured[i], measured[i] - high, 0.0)
        share = watched[i] * gap / (fraction * max(abs(low), abs(high), floor[i]))
        if share > out[0]:
            out[0] = share
            out[1] = i
        out[2] = max(out[2], abs(measured[i]) / top[i])
    return True


class RotorWatch:
    """
    The rotors' expected speeds and what telemetry says of them.

    A measured speed counts as right if it was expected at any moment of the last
    ``rotor_window_s``: the transport's delay is not known. The deviation is taken of the expected
    speed, not less than the least speed that can be held.

    Parameters
    ----------
    rig : Rig
    settings : SafetySettings

    Attributes
    ----------
    compared : ndarray, shape (3,)
        Share used of the following limit, the rotor that makes it, share used of the overspeed
        limit.
    lost : tuple of int
        Rotors no longer watched, because the rig goes on without them.
    thrust_body_n : ndarray, shape (3,)
        Force of the rotors at the newest measured speeds; at the expected ones without telemetry.
    measured_rad_s : ndarray, shape (n,)

    """

    def __init__(self, rig: Rig, settings: SafetySettings) -> None:
        rotors = rig.rotors
        self._rotors = rotors
        self._lag = frozen(rotors.time_constant_s)
        self._floor = frozen(np.maximum(rotors.speed_min_rad_s, 0.1 * rotors.speed_max_rad_s))
        self._top = frozen(settings.rotor_overspeed_fraction * rotors.speed_max_rad_s)
        self._fraction = settings.rotor_following_fraction
        depth = max(round(settings.rotor_window_s / settings.period_s), 1)
        self._window = np.zeros((depth, rotors.count))
        self._row = 0
        self._telemetry = rig.sensors.rotor_states is not None
        self.expected_rad_s = np.zeros(rotors.count)
        self.measured_rad_s = np.zeros(rotors.count)
        self.thrust_body_n = np.zeros(3)
        self.compared = np.zeros(3)
        self.lost: tuple[int, ...] = ()
        self._watched = np.ones(rotors.count)

    def advance(self, dt_s: float, command_rad_s: Array) -> None:
        """Let the expected speeds run for ``dt_s`` under the command that was in force."""
        _advance(self.expected_rad_s, command_rad_s, dt_s, self._lag, self._window, self._row)
        self._row = (self._row + 1) % len(self._window)
        if not self._telemetry:
            self._sum(self.expected_rad_s)

    def measured(self, speed_rad_s: Array) -> bool:
        """
        Take in telemetry.

        Parameters
        ----------
        speed_rad_s : ndarray, shape (n,)
            Of each rotor.

        Returns
        -------
        bool
            False if a number is not finite; nothing is changed then.

        """
        if not _compare(speed_rad_s, self._window, self._floor, self._top, self._watched,
                        self._fraction, self.compared):
            return False
        self.measured_rad_s = speed_rad_s
        self._sum(speed_rad_s)
        return True

    def _sum(self, speed_rad_s: Array) -> None:
        rotors = self._rotors
        _force(speed_rad_s, rotors.curve_speed_rad_s, rotors.curve_thrust_n, rotors.axis,
               self.thrust_body_n)

    @property
    def worst(self) -> int:
        """Rotor that makes the share of the following limit."""
        return int(self.compared[1])

    def give_up(self, rotor: int) -> None:
        """Stop watching a rotor that is known to be lost."""
        self._watched[rotor] = 0.0
        self.lost = (*self.lost, rotor)
        self.compared[0] = 0.0

    def watch_all(self) -> None:
        """Watch every rotor again."""
        self._watched[:] = 1.0
        self.lost = ()
