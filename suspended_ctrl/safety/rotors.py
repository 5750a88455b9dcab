"""Do the rotors do what they were told: measured speeds against the commands and their lag."""

import numpy as np

from suspended_ctrl.physics.kernel import kernel, OUT_MATRIX, OUT_VECTOR, REAL, VECTOR
from suspended_ctrl.physics.rotation import apply
from suspended_ctrl.physics.rotor import RotorModel
from suspended_ctrl.rig.frozen import Array, frozen
from suspended_ctrl.rig.rig import Rig
from suspended_ctrl.safety.settings import SafetySettings


@kernel(OUT_VECTOR(VECTOR, VECTOR, REAL, VECTOR, OUT_MATRIX, REAL))
def _advance(expected: Array, command: Array, dt: float, lag: Array, window: Array,
             row: float) -> Array:
    """Move the expected speeds on by ``dt`` and put them into row ``row`` of the window."""
    out = np.empty(expected.shape[0])
    for i in range(expected.shape[0]):
        out[i] = command[i] + (expected[i] - command[i]) * np.exp(-dt / lag[i])
        window[int(row), i] = out[i]
    return out


@kernel(OUT_VECTOR(VECTOR, OUT_MATRIX, VECTOR, VECTOR, VECTOR, REAL))
def _compare(measured: Array, window: Array, floor: Array, top: Array, watched: Array,
             fraction: float) -> Array:
    """Share of the following limit, the rotor that makes it, share of full speed; nan if bad."""
    out = np.zeros(3)
    for i in range(measured.shape[0]):
        low = window[0, i]
        high = window[0, i]
        for k in range(1, window.shape[0]):
            low = min(low, window[k, i])
            high = max(high, window[k, i])
        gap = max(low - measured[i], measured[i] - high, 0.0)
        share = watched[i] * gap / (fraction * max(abs(low), abs(high), floor[i]))
        if not np.isfinite(share):
            out[0] = np.nan
            return out
        if share > out[0]:
            out[0] = share
            out[1] = i
        out[2] = max(out[2], abs(measured[i]) / top[i])
    return out


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
    following, overspeed : float
        Shares used of the two limits.
    worst : int
        Rotor that makes ``following``.
    lost : tuple of int
        Rotors no longer watched, because the rig goes on without them.
    thrust_body_n : ndarray, shape (3,)
        Force of the rotors at the newest measured speeds; at the expected ones without telemetry.
    measured_rad_s : ndarray, shape (n,)

    """

    def __init__(self, rig: Rig, settings: SafetySettings) -> None:
        rotors = rig.rotors
        self._rotors = rotors
        self._model = RotorModel(rotors, rig.body.centre_of_mass_m)
        self._axes = frozen(rotors.axis.T)
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
        self.following = 0.0
        self.overspeed = 0.0
        self.worst = 0
        self.lost: tuple[int, ...] = ()
        self._watched = np.ones(rotors.count)

    def advance(self, dt_s: float, command_rad_s: Array) -> None:
        """Let the expected speeds run for ``dt_s`` under the command that was in force."""
        self.expected_rad_s = _advance(self.expected_rad_s, command_rad_s, dt_s, self._lag,
                                       self._window, float(self._row))
        self._row = (self._row + 1) % len(self._window)
        if not self._telemetry:
            self.thrust_body_n = apply(self._axes, self._model.thrust(self.expected_rad_s))

    def measured(self, speed_rad_s: Array) -> bool:
        """
        Take in telemetry.

        Parameters
        ----------
        speed_rad_s : ndarray, shape (n,)

        Returns
        -------
        bool
            False if a number is not finite; nothing is changed then.

        """
        out = _compare(speed_rad_s, self._window, self._floor, self._top, self._watched,
                       self._fraction)
        if out[0] != out[0]:
            return False
        self.following, self.worst, self.overspeed = float(out[0]), int(out[1]), float(out[2])
        self.measured_rad_s = speed_rad_s
        self.thrust_body_n = apply(self._axes, self._model.thrust(speed_rad_s))
        return True

    def give_up(self, rotor: int) -> None:
        """Stop watching a rotor that is known to be lost."""
        self._watched[rotor] = 0.0
        self.lost = (*self.lost, rotor)
        self.following = 0.0

    def watch_all(self) -> None:
        """Watch every rotor again."""
        self._watched[:] = 1.0
        self.lost = ()
