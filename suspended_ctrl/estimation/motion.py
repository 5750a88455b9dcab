"""State, covariance and inputs of one moment, moved from stamp to stamp."""

from dataclasses import dataclass
import math

import numpy as np

from suspended_ctrl.estimation.body import BodyModel
from suspended_ctrl.estimation.covariance import DENSITIES, spread
from suspended_ctrl.estimation.dynamics import (
    attitude_matrix,
    ERRORS,
    evaluate,
    FELT,
    INPUTS,
    linearise,
    move,
    STATES,
)
from suspended_ctrl.estimation.inputs import rotor_inputs, track, tracking_gains
from suspended_ctrl.estimation.settings import EstimatorSettings
from suspended_ctrl.rig.frozen import Array

# Longest step of the midpoint rule and of the covariance, s.
STEP_MAX_S = 0.005
# After so long without telemetry the rotors' wrench is a guess, and the disturbance walks faster.
TELEMETRY_GAP_S = 0.03
UNKNOWN_WALK_FACTOR = 8.0
# Longer gaps start the filters of rotor speeds and anchor anew.
ROTOR_RESTART_S = 0.1
ANCHOR_RESTART_S = 0.5
# Share of a load cell's difference to the model that each of its samples takes out.
TENSION_GAIN = 0.2


@dataclass(frozen=True, eq=False, slots=True)
class Snapshot:
    """Everything that a filter needs to go on from a moment; ``scalars`` are the filter's own."""

    t: float
    key: tuple[float, int]
    flat: Array
    covariance: Array
    body: BodyModel
    scalars: tuple[float, ...]


class MovingState:
    """
    The process model at work.

    Parameters
    ----------
    settings : EstimatorSettings
    body : BodyModel

    Attributes
    ----------
    t : float
        Stamp of the state; nan before it is set.
    x, u, p : ndarray
        State (25,), inputs (24,), covariance (24, 24); see ``dynamics``.
    body : BodyModel

    """

    def __init__(self, settings: EstimatorSettings, body: BodyModel) -> None:
        self.settings = settings
        self.body = body
        self.t = float('nan')
        speeds = 2 * body.rotors.rotors.count if body.rotors else 0
        sizes = (STATES, INPUTS, ERRORS, FELT, DENSITIES, speeds)
        # One block, so that a snapshot is one copy.
        self._flat = np.zeros(sum(sizes))
        parts = np.split(self._flat, np.cumsum(sizes)[:-1])
        self.x, self.u, self.lag, self.felt, self.noise, self._speeds = parts
        self.p = np.zeros((ERRORS, ERRORS))
        self.x[6] = 1.0
        self.u[21:23] = -np.inf
        # What linearise writes: accelerations, their Jacobian, attitude.
        self.s = np.zeros(7)
        self.j = np.zeros((6, ERRORS))
        self.r = np.eye(3)
        self._work = np.zeros((12, ERRORS))
        self._white = np.zeros(18)
        self._walk = np.zeros(6)
        self._blind = False
        self._rotor_gains = tracking_gains(settings.rotor_index)
        self._carrier_gains = tracking_gains(settings.carrier_index)
        self._set_noise()

    # ------------------------------------------------------------ the model

    def start(self, t: float, covariance: Array) -> None:
        """Begin at ``t`` from ``x`` as set by the caller."""
        self.t = t
        self.p[:] = covariance
        self.lag[:] = 0.0
        self.felt[:] = 0.0
        self.linearise()

    def linearise(self) -> None:
        """Bring accelerations, Jacobian and attitude matrix up to the state."""
        linearise(self.x, self.u, self.body.vector, self.t, self.s, self.j, self.r)

    def set_body(self, body: BodyModel) -> None:
        """Replace the body; position and velocity move to its centre of mass."""
        shift = body.centre_m - self.body.centre_m
        if shift.any():
            attitude_matrix(self.x, self.r)
            swing = np.cross(self.x[10:13], shift)
            change = np.eye(ERRORS)
            change[0:3, 3:6] = change[6:9, 9:12] = -self.r @ _skew(shift)
            change[6:9, 3:6] = -self.r @ _skew(swing)
            self.x[0:3] += self.r @ shift
            self.x[3:6] += self.r @ swing
            moved = change @ self.p @ change.T
            self.p[:] = 0.5 * (moved + moved.T)
        self.body = body
        self._set_noise()
        if not math.isnan(self.t):
            self.linearise()

    def _set_noise(self) -> None:
        settings, vector = self.settings, self.body.vector
        inverse = vector[10:19].reshape(3, 3)
        self._white[:9] = (np.eye(3) * (settings.force_white_n_s05 / vector[0])**2).ravel()
        self._white[9:] = (settings.torque_white_nm_s05**2 * inverse @ inverse.T).ravel()
        self._walk[:3] = settings.force_walk_n_s05**2
        self._walk[3:] = settings.torque_walk_nm_s05**2
        self.noise[:18] = self._white
        self.noise[18:24] = self._walk
        self.noise[24] = settings.rate_bias_walk**2
        self.noise[25] = settings.force_bias_walk**2

    # ------------------------------------------------------------ moving

    def advance(self, t: float) -> None:
        """Move state and covariance to ``t``; a stamp in the past changes nothing."""
        while t > self.t:
            self._check_telemetry()
            dt, end = _step(self.t, t)
            spread(self.p, self.lag, self.r, self.j, self.s, self.x[10:13], self.body.vector, dt,
                   self.noise, self._work)
            move(self.x, self.u, self.body.vector, self.t, dt, self.felt)
            self.t = end
            self.linearise()

    def coast(self, t: float) -> None:
        """Move the state alone to ``t``."""
        while t > self.t:
            dt, end = _step(self.t, t)
            move(self.x, self.u, self.body.vector, self.t, dt, self.felt)
            self.t = end

    def _check_telemetry(self) -> None:
        blind = TELEMETRY_GAP_S < self.t - self.u[22] < math.inf
        if blind != self._blind:
            self._blind = blind
            self.noise[18:24] = self._walk * (UNKNOWN_WALK_FACTOR**2 if blind else 1.0)

    # ------------------------------------------------------------ inputs

    def rotors(self, t: float, speed: Array) -> None:
        """Take measured rotor speeds as input from ``t`` on."""
        model = self.body.rotors
        if model is None:
            return
        count = speed.size
        age = t - float(self.u[22])
        period = 0.5 * self.body.vector[26]
        if 0.0 < age < ROTOR_RESTART_S:
            track(self._speeds, speed, age, *self._rotor_gains)
            period = age
        else:
            self._speeds[:count] = speed
            self._speeds[count:] = 0.0
        self.u[22] = t
        rotors = model.rotors
        self.noise[:18] = self._white
        rotor_inputs(self._speeds, rotors.curve_speed_rad_s, rotors.curve_thrust_n, model.axis,
                     model.arm, rotors.torque_coefficient_nm_s2, rotors.spin,
                     rotors.inertia_kg_m2, period,
                     self.settings.rotor_noise_fraction * math.sqrt(period), self.r,
                     self.body.vector, self.u, self.noise)

    def anchor(self, t: float, position: Array) -> None:
        """Take where the anchor was measured, in map, as input from ``t`` on."""
        age = t - float(self.u[21])
        if 0.0 < age < ANCHOR_RESTART_S:
            track(self.u[:6], position, age, *self._carrier_gains)
        else:
            self.u[0:3] = position
            self.u[3:6] = 0.0
        self.u[21] = t

    def tension(self, measured: float) -> None:
        """Let a measured tension correct what the model says of the tether."""
        evaluate(self.x, self.u, self.body.vector, self.t, self.s)
        self.u[23] += TENSION_GAIN * (measured - self.s[6])

    # ------------------------------------------------------------ keeping and going back

    def _scalars(self) -> tuple[float, ...]:
        return ()

    def _set_scalars(self, scalars: tuple[float, ...]) -> None:
        pass

    def snapshot(self, key: tuple[float, int]) -> Snapshot:
        """Copy of everything, to come back to."""
        return Snapshot(self.t, key, self._flat.copy(), self.p.copy(), self.body, self._scalars())

    def restore(self, snapshot: Snapshot) -> None:
        """Go back to a snapshot."""
        self.t = snapshot.t
        if self.body is not snapshot.body:
            self.body = snapshot.body
            self._set_noise()
        self._flat[:] = snapshot.flat
        self.p[:] = snapshot.covariance
        self._set_scalars(snapshot.scalars)
        self._blind = bool(self.noise[18] > self._walk[0])
        self.linearise()


def _step(start: float, end: float) -> tuple[float, float]:
    """First of the equal steps, none too long, from start to end: its length and end."""
    left = end - start
    if left <= STEP_MAX_S:
        return left, end
    dt = left / math.ceil(left / STEP_MAX_S)
    return dt, start + dt


def _skew(v: Array) -> Array:
    return np.array([[0.0, -v[2], v[1]], [v[2], 0.0, -v[0]], [-v[1], v[0], 0.0]])
