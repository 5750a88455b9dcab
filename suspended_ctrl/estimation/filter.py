"""The error-state filter: one state, moved forward by stamps, corrected by what is measured."""

from dataclasses import dataclass
import math

import numpy as np
from scipy.stats import chi2

from suspended_ctrl.estimation.body import BodyModel
from suspended_ctrl.estimation.correction import correct, imu_noise, imu_residual, pose_residual
from suspended_ctrl.estimation.covariance import DENSITIES, spread
from suspended_ctrl.estimation.dynamics import (
    attitude_matrix,
    ERRORS,
    evaluate,
    FELT,
    inject,
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
# A longer time without IMU is a gap, over which its next sample says nothing, s.
IMU_GAP_S = 0.012
# One standard deviation of the stamps' offset that the monitor starts from, s.
OFFSET_SPREAD_S = 0.010
OFFSET_WALK_S_S05 = 0.0005
# Motion of under ten times its standard deviation teaches the monitor nothing.
TEACHING_SHARE = 0.8
# Share of a load cell's difference to the model that each of its samples takes out.
TENSION_GAIN = 0.2


@dataclass(frozen=True, eq=False, slots=True)
class Snapshot:
    """Everything that a filter needs to go on from here."""

    t: float
    key: tuple[float, int]
    flat: Array
    covariance: Array
    body: BodyModel
    offset: tuple[float, float]
    accepted_s: float
    refused_since_s: float


class ErrorStateFilter:
    """
    State, covariance and inputs of one moment, and how samples change them.

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
    nis : float
        Squared distance of the last pose, chi-square with six degrees of freedom if all is well.

    """

    def __init__(self, settings: EstimatorSettings, body: BodyModel) -> None:
        self.settings = settings
        self.body = body
        self.t = float('nan')
        count = body.rotors.rotors.count if body.rotors else 0
        self.flat = np.zeros(STATES + INPUTS + ERRORS + FELT + 2 * count)
        self.x = self.flat[:STATES]
        self.u = self.flat[STATES:STATES + INPUTS]
        self._lag = self.flat[STATES + INPUTS:STATES + INPUTS + ERRORS]
        self._felt = self.flat[STATES + INPUTS + ERRORS:STATES + INPUTS + ERRORS + FELT]
        self._speeds = self.flat[STATES + INPUTS + ERRORS + FELT:]
        self.x[6] = 1.0
        self.u[21:23] = -np.inf
        self.p = np.zeros((ERRORS, ERRORS))
        self.nis = float('nan')
        self.offset = (0.0, OFFSET_SPREAD_S**2)
        self._teaching = 0.0
        self.accepted_s = float('nan')
        self.refused_since_s = float('nan')
        self._s = np.zeros(7)
        self._j = np.zeros((6, ERRORS))
        self._r = np.eye(3)
        self._work = np.zeros((12, ERRORS))
        self._h = np.zeros((6, ERRORS))
        self._nu = np.zeros(6)
        self._drift = np.zeros(7)
        self._still = np.zeros(6)
        self._out = np.zeros(29)
        self._gain = np.zeros((ERRORS, 6))
        self.imu_gain = np.zeros((ERRORS, 6))
        self._options = np.zeros(4)
        self._gate = float(chi2.ppf(settings.gate_probability, 6))
        self._pose_noise = np.diag(np.repeat(
            [settings.position_noise_m**2, settings.attitude_noise_rad**2], 3))
        self._imu_variance = np.repeat(
            [settings.rate_noise_rad_s**2, settings.force_noise_m_s2**2], 3)
        self._imu_noise = np.diag(self._imu_variance)
        self._common = np.zeros((6, ERRORS))
        self._nothing = np.zeros((0, ERRORS))
        self._rotor_gains = tracking_gains(settings.rotor_index)
        self._carrier_gains = tracking_gains(settings.carrier_index)
        self._noise = np.zeros(DENSITIES)
        self._white = np.zeros(18)
        self.set_body(body)

    # ------------------------------------------------------------ the model

    def set_body(self, body: BodyModel) -> None:
        """Replace the body; position and velocity move to its centre of mass."""
        shift = body.centre_m - self.body.centre_m
        if shift.any():
            attitude_matrix(self.x, self._r)
            lever = self._r @ _skew(shift)
            swing = self._r @ _skew(np.cross(self.x[10:13], shift))
            self.x[:3] += self._r @ shift
            self.x[3:6] += self._r @ np.cross(self.x[10:13], shift)
            change = np.eye(ERRORS)
            change[:3, 3:6] = -lever
            change[6:9, 3:6] = -swing
            change[6:9, 9:12] = -lever
            self.p[:] = change @ self.p @ change.T
            self.p[:] = 0.5 * (self.p + self.p.T)
        self.body = body
        set_ = self.settings
        inverse = body.vector[10:19].reshape(3, 3)
        white = self._white
        white[:9] = (set_.force_white_n_s05**2 / body.vector[0]**2 * np.eye(3)).ravel()
        white[9:] = (set_.torque_white_nm_s05**2 * inverse @ inverse.T).ravel()
        self._noise[:18] = white
        self._noise[18:21] = set_.force_walk_n_s05**2
        self._noise[21:24] = set_.torque_walk_nm_s05**2
        self._noise[24] = set_.rate_bias_walk**2
        self._noise[25] = set_.force_bias_walk**2
        if not math.isnan(self.t):
            self._linearise()

    def _linearise(self) -> None:
        linearise(self.x, self.u, self.body.vector, self.t, self._s, self._j)
        attitude_matrix(self.x, self._r)

    def start(self, t: float, covariance: Array) -> None:
        """Begin at ``t`` from ``x`` as set by the caller."""
        self.t = t
        self.p[:] = covariance
        self._lag[:] = 0.0
        self._linearise()

    # ------------------------------------------------------------ moving

    def advance(self, t: float) -> None:
        """Move state and covariance to ``t``; a stamp in the past changes nothing."""
        while t > self.t:
            left = t - self.t
            dt = left if left <= STEP_MAX_S else left / np.ceil(left / STEP_MAX_S)
            spread(self.p, self._lag, self._r, self._j, self._s, self.x[10:13], self.body.vector,
                   dt, self._noise, self._work)
            move(self.x, self.u, self.body.vector, self.t, dt, self._felt)
            self.t = t if dt == left else self.t + dt
            self._linearise()

    def coast(self, t: float) -> None:
        """Move the state alone to ``t``."""
        while t > self.t:
            left = t - self.t
            dt = left if left <= STEP_MAX_S else left / np.ceil(left / STEP_MAX_S)
            move(self.x, self.u, self.body.vector, self.t, dt, self._felt)
            self.t = t if dt == left else self.t + dt

    def foresee(self, t: float, samples: int) -> Array:
        """
        Covariance at ``t``, coarsely: one step of the model, then the IMU's samples as one.

        Parameters
        ----------
        t : float
            At or after the present stamp.
        samples : int
            Of the IMU in between.

        Returns
        -------
        ndarray, shape (24, 24)
            The filter itself is left as it is.

        """
        p, lag = self.p.copy(), self._lag.copy()
        spread(p, lag, self._r, self._j, self._s, self.x[10:13], self.body.vector, t - self.t,
               self._noise, self._work)
        if samples:
            imu_residual(self.x, self._s, self._j, self.x[10:13], self._s[:3],
                         self.body.imu_arm_m, self._h, self._nu)
            options = np.array([np.inf, 0.0, 0.0, 0.0])
            # What the model's white force adds is known from them about as well as they are.
            correct(p, self._h, self._still, np.diag(self._imu_variance / samples), self._nothing,
                    self._still, options, lag, np.empty((ERRORS, 6)), self._out)
        return p

    # ------------------------------------------------------------ samples

    def imu(self, rate: Array, force: Array) -> None:
        """Absorb a sample of the IMU (body axes) at the present stamp."""
        dt = self._mean()
        imu_residual(self.x, self._s, self._j, rate, force, self.body.imu_arm_m, self._h, self._nu)
        options = self._options
        options[0] = np.inf
        options[1], options[2] = self.offset
        options[3] = self._teaching
        imu_noise(self._r, self._noise, self._imu_variance, dt, self._imu_noise, self._common)
        correct(self.p, self._h, self._nu, self._imu_noise, self._common, self._still, options,
                self._lag, self.imu_gain, self._out)
        self.offset = (float(self._out[27]), float(self._out[28]))
        inject(self.x, self._out)

    def _mean(self) -> float:
        """Put the mean since the last sample of the IMU in ``_s``; the time it speaks for, s."""
        dt = float(self._felt[6])
        if 0.0 < dt < IMU_GAP_S:
            self._s[:6] = self._felt[:6] / dt
        else:
            dt = STEP_MAX_S
        self._felt[:] = 0.0
        return dt

    def imu_while_coasting(self, rate: Array, force: Array) -> None:
        """Correct the state by a sample of the IMU with the last gain."""
        if not 0.0 < self._felt[6] < IMU_GAP_S:
            evaluate(self.x, self.u, self.body.vector, self.t, self._s)
        self._mean()
        imu_residual(self.x, self._s, self._j, rate, force, self.body.imu_arm_m, self._h, self._nu)
        inject(self.x, self.imu_gain @ self._nu)

    def pose(self, position: Array, quaternion: Array) -> bool:
        """
        Absorb a pose at the present stamp if it passes the gate.

        Parameters
        ----------
        position : ndarray, shape (3,)
            Of the marker body in map.
        quaternion : ndarray, shape (4,)
            Attitude of the platform.

        Returns
        -------
        bool
            Whether it was absorbed.

        """
        variance = self.offset[1]
        if not math.isnan(self.accepted_s):
            variance += OFFSET_WALK_S_S05**2 * max(self.t - self.accepted_s, 0.0)
        pose_residual(self.x, self.p, position, quaternion, self.body.pose_arm_m, self._h,
                      self._nu, self._drift)
        options = self._options
        options[0] = self._gate
        options[1] = self.offset[0]
        options[2] = variance
        self._teaching = options[3] = float(self._drift[6] > TEACHING_SHARE)
        correct(self.p, self._h, self._nu, self._pose_noise, self._nothing, self._drift, options,
                self._lag, self._gain, self._out)
        self.nis = float(self._out[24])
        if self._out[26] == 0.0:
            if math.isnan(self.refused_since_s):
                self.refused_since_s = self.t
            if self.t - self.refused_since_s < self.settings.recovery_s:
                return False
            self._open()
            options[0] = np.inf
            correct(self.p, self._h, self._nu, self._pose_noise, self._nothing, self._drift,
                    options, self._lag, self._gain, self._out)
        self.offset = (float(self._out[27]), float(self._out[28]))
        inject(self.x, self._out)
        self.accepted_s = self.t
        self.refused_since_s = float('nan')
        return True

    def _open(self) -> None:
        """Give up what is known of place and motion, so that the next pose is believed."""
        gap = max(self.settings.recovery_s, 0.05)
        spread_p = float(np.linalg.norm(self._nu[:3])) + 0.01
        spread_q = float(np.linalg.norm(self._nu[3:])) + 0.01
        wide = np.zeros(ERRORS)
        wide[0:3] = spread_p**2
        wide[3:6] = spread_q**2
        wide[6:9] = (spread_p / gap)**2
        wide[9:12] = (spread_q / gap)**2
        self.p[np.diag_indices(ERRORS)] += wide
        self.offset = (0.0, OFFSET_SPREAD_S**2)
        self._lag[:] = 0.0

    def rotors(self, t: float, speed: Array) -> None:
        """Take measured rotor speeds as input from ``t`` on."""
        model = self.body.rotors
        if model is None:
            return
        n = speed.size
        age = t - self.u[22]
        if not 0.0 < age < 0.1:
            self._speeds[:n] = speed
            self._speeds[n:] = 0.0
            age = 0.005
        else:
            track(self._speeds, speed, age, *self._rotor_gains)
        self.u[22] = t
        rotors = model.rotors
        self._noise[:18] = self._white
        noise = self.settings.rotor_noise_fraction * math.sqrt(min(age, 0.1))
        rotor_inputs(self._speeds, rotors.curve_speed_rad_s, rotors.curve_thrust_n, model.axis,
                     model.arm, rotors.torque_coefficient_nm_s2, rotors.spin,
                     rotors.inertia_kg_m2, min(age, 0.02), noise, self._r, self.body.vector,
                     self.u, self._noise)

    def anchor(self, t: float, position: Array) -> None:
        """Take the measured anchor (map) as input from ``t`` on."""
        age = t - self.u[21]
        if not 0.0 < age < 0.5:
            self.u[:3] = position
            self.u[3:6] = 0.0
        else:
            track(self.u[:6], position, age, *self._carrier_gains)
        self.u[21] = t

    def tension(self, measured: float) -> None:
        """Let a measured tension correct what the model says of the tether."""
        evaluate(self.x, self.u, self.body.vector, self.t, self._s)
        self.u[23] += TENSION_GAIN * (measured - self._s[6])

    # ------------------------------------------------------------ keeping and going back

    def snapshot(self, key: tuple[float, int]) -> Snapshot:
        """Copy of everything, to come back to."""
        return Snapshot(self.t, key, self.flat.copy(), self.p.copy(), self.body, self.offset,
                        self.accepted_s, self.refused_since_s)

    def restore(self, snapshot: Snapshot) -> None:
        """Go back to a snapshot."""
        self.flat[:] = snapshot.flat
        self.p[:] = snapshot.covariance
        self.offset = snapshot.offset
        self.accepted_s = snapshot.accepted_s
        self.refused_since_s = snapshot.refused_since_s
        self.t = snapshot.t
        if self.body is not snapshot.body:
            self.body = snapshot.body
            self.set_body(snapshot.body)
        else:
            self._linearise()

    def copy_from(self, other: 'ErrorStateFilter') -> None:
        """Become what another filter is now."""
        self.restore(other.snapshot((other.t, 0)))
        self.imu_gain[:] = other.imu_gain


def _skew(v: Array) -> Array:
    return np.array([[0.0, -v[2], v[1]], [v[2], 0.0, -v[0]], [-v[1], v[0], 0.0]])
