"""The error-state filter: a moving state, corrected by what is measured."""

import math

import numpy as np
from scipy.stats import chi2

from suspended_ctrl.estimation.body import BodyModel
from suspended_ctrl.estimation.correction import correct
from suspended_ctrl.estimation.covariance import spread
from suspended_ctrl.estimation.dynamics import ERRORS, evaluate, inject
from suspended_ctrl.estimation.motion import MovingState, STEP_MAX_S
from suspended_ctrl.estimation.residuals import imu_noise, imu_residual, pose_residual
from suspended_ctrl.estimation.settings import EstimatorSettings
from suspended_ctrl.rig.frozen import Array

# A longer time without IMU is a gap, over which its next sample says nothing, s.
IMU_GAP_S = 0.012
# A sample of the IMU less probable than this is not the noise that the filter knows of.
SURPRISE_PROBABILITY = 1e-9
# Where no IMU tells, each pose after the first that is refused in a row lets the disturbance be
# off by so much more: a push is followed, a single outlier changes nothing.
PUSH_SHARE_OF_WEIGHT = 0.1
PUSH_ARM_M = 0.05
# Monitor of the stamps: what it starts from, how fast an offset may drift, and the motion, in
# standard deviations, squared share, below which it learns nothing.
OFFSET_SPREAD_S = 0.010
OFFSET_WALK_S_S05 = 0.0005
TEACHING_SHARE = 0.8


class ErrorStateFilter(MovingState):
    """
    An error-state Kalman filter on pose, gyroscope and accelerometer.

    Parameters
    ----------
    settings : EstimatorSettings
    body : BodyModel

    Attributes
    ----------
    nis : float
        Squared distance of the last pose, chi-square with six degrees of freedom if all is well.
    accepted_s, refused_since_s : float
        Stamps of the last pose absorbed and of the first refused after it; nan for none.
    offset_s, offset_variance_s2 : float
        What the monitor makes of an offset of the pose stamps.
    load_mark : tuple of float
        Vertical disturbance and its variance as the last load was taken.
    surprises : int
        Samples of the IMU that were far from what the filter expected.
    recoveries : int
        Times that poses were believed because they had been refused for long.

    """

    def __init__(self, settings: EstimatorSettings, body: BodyModel) -> None:
        super().__init__(settings, body)
        self.nis = float('nan')
        self.accepted_s = float('nan')
        self.refused_since_s = float('nan')
        self.offset_s = 0.0
        self.offset_variance_s2 = OFFSET_SPREAD_S**2
        self.surprises = 0
        self.recoveries = 0
        self.load_mark = (0.0, 0.0)
        self._teaching = 0.0
        self._surprised = 0.0
        self._gate = float(chi2.ppf(settings.gate_probability, 6))
        self._surprise = float(chi2.isf(SURPRISE_PROBABILITY, 6))
        self._pose_noise = np.diag(np.repeat(
            [settings.position_noise_m**2, settings.attitude_noise_rad**2], 3))
        self._imu_variance = np.repeat(
            [settings.rate_noise_rad_s**2, settings.force_noise_m_s2**2], 3)
        self._imu_noise = np.zeros((6, 6))
        self._common = np.zeros((6, ERRORS))
        self._nothing = np.zeros((0, ERRORS))
        self._h = np.zeros((6, ERRORS))
        self._nu = np.zeros(6)
        self._drift = np.zeros(7)
        self._still = np.zeros(6)
        self._options = np.zeros(4)
        self._out = np.zeros(29)
        self._gain = np.zeros((ERRORS, 6))
        self._imu_gain = np.zeros((ERRORS, 6))

    # ------------------------------------------------------------ IMU

    def imu(self, rate: Array, force: Array) -> bool:
        """
        Absorb a sample of the IMU (body axes) at the present stamp.

        Parameters
        ----------
        rate, force : ndarray, shape (3,)
            Body axes, rad/s and m/s^2.

        Returns
        -------
        bool
            False for a sample far off; a second in a row is absorbed, after biases and
            disturbances have been opened for the poses to tell which of them it was.

        """
        dt = self._mean()
        imu_residual(self.x, self.s, self.j, rate, force, self.body.imu_arm_m, self._h, self._nu)
        imu_noise(self.r, self.noise, self._imu_variance, dt, self._imu_noise, self._common)
        if not self._correct_imu(self._surprise):
            self.surprises += 1
            self._surprised += 1.0
            if self._surprised < 2.0:
                return False
            self._open_imu()
            self._correct_imu(math.inf)
        self._surprised = 0.0
        return True

    def _correct_imu(self, gate: float) -> bool:
        return self._correct(self._imu_noise, self._common, self._still, gate,
                             self.offset_variance_s2, self._teaching, self._imu_gain)

    def _open_imu(self) -> None:
        turned, pushed = self._nu[:3]**2, self._nu[3:]**2
        inertia = self.body.vector[1:10].reshape(3, 3)
        wide = np.zeros(ERRORS)
        wide[9:12] = wide[12:15] = turned
        wide[15:18] = pushed
        wide[18:21] = self.body.vector[0]**2 * pushed.max()
        wide[21:24] = np.diag(inertia)**2 * turned / STEP_MAX_S**2
        self.p[np.diag_indices(ERRORS)] += wide

    def _mean(self) -> float:
        """Put the mean since the last sample of the IMU in ``s``; the time it speaks for, s."""
        dt = float(self.felt[6])
        if 0.0 < dt < IMU_GAP_S:
            self.s[:6] = self.felt[:6] / dt
        else:
            dt = STEP_MAX_S
        self.felt[:] = 0.0
        return dt

    def imu_while_coasting(self, rate: Array, force: Array) -> None:
        """Correct the state by a sample of the IMU with the last gain."""
        if not 0.0 < self.felt[6] < IMU_GAP_S:
            evaluate(self.x, self.u, self.body.vector, self.t, self.s)
        self._mean()
        imu_residual(self.x, self.s, self.j, rate, force, self.body.imu_arm_m, self._h, self._nu)
        inject(self.x, self._imu_gain @ self._nu)

    # ------------------------------------------------------------ pose

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
        since = self.t - self.accepted_s
        variance = self.offset_variance_s2
        if since > 0.0:
            variance += OFFSET_WALK_S_S05**2 * since
        pose_residual(self.x, self.p, position, quaternion, self.body.pose_arm_m, self._h,
                      self._nu, self._drift)
        self._teaching = float(self._drift[6] > TEACHING_SHARE)
        taken = self._correct_pose(self._gate, variance)
        self.nis = float(self._out[24])
        if not taken and not self._believe(variance):
            return False
        self.accepted_s = self.t
        self.refused_since_s = float('nan')
        return True

    def _correct_pose(self, gate: float, variance: float) -> bool:
        return self._correct(self._pose_noise, self._nothing, self._drift, gate, variance,
                             self._teaching, self._gain)

    def _believe(self, variance: float) -> bool:
        """Absorb a refused pose if poses have been refused for long."""
        if math.isnan(self.refused_since_s):
            self.refused_since_s = self.t
            return False
        refused_s = self.t - self.refused_since_s
        if refused_s < self.settings.recovery_s:
            if self.felt[6] > IMU_GAP_S:
                self._open_disturbance()
            return False
        # Give up what is known of place and motion.
        self.recoveries += 1
        off_m, off_rad = self.settings.position_noise_m, self.settings.attitude_noise_rad
        moved = float(np.linalg.norm(self._nu[:3])) + off_m
        turned = float(np.linalg.norm(self._nu[3:])) + off_rad
        wide = np.zeros(ERRORS)
        wide[0:3], wide[3:6] = moved**2, turned**2
        wide[6:9], wide[9:12] = (moved / refused_s)**2, (turned / refused_s)**2
        self.p[np.diag_indices(ERRORS)] += wide
        self.lag[:] = 0.0
        self.offset_s = 0.0
        taken = self._correct_pose(math.inf, 0.0)
        # The correction has left the variance that it was given, zero, and the monitor deaf.
        self.offset_variance_s2 = OFFSET_SPREAD_S**2
        return taken

    def _open_disturbance(self) -> None:
        push = PUSH_SHARE_OF_WEIGHT * self.body.vector[0] * self.body.vector[25]
        wide = np.zeros(ERRORS)
        wide[18:21] = push**2
        wide[21:24] = (PUSH_ARM_M * push)**2
        self.p[np.diag_indices(ERRORS)] += wide

    # ------------------------------------------------------------ both

    def _correct(self, noise: Array, common: Array, drift: Array, gate: float, variance: float,
                 teaching: float, gain: Array) -> bool:
        options, out = self._options, self._out
        options[0], options[1], options[2], options[3] = gate, self.offset_s, variance, teaching
        correct(self.p, self._h, self._nu, noise, common, drift, options, self.lag, gain, out)
        if out[26] == 0.0:
            return False
        self.offset_s, self.offset_variance_s2 = float(out[27]), float(out[28])
        inject(self.x, out)
        return True

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
        p, lag = self.p.copy(), self.lag.copy()
        spread(p, lag, self.r, self.j, self.s, self.x[10:13], self.body.vector, t - self.t,
               self.noise, self._work)
        if samples:
            imu_residual(self.x, self.s, self.j, self._still[:3], self._still[:3],
                         self.body.imu_arm_m, self._h, self._nu)
            options = np.array([math.inf, 0.0, 0.0, 0.0])
            correct(p, self._h, self._still, np.diag(self._imu_variance / samples), self._nothing,
                    self._still, options, lag, np.empty((ERRORS, 6)), self._out)
        return p

    def copy_from(self, other: 'ErrorStateFilter') -> None:
        """Become what another filter is now."""
        self.restore(other.snapshot((other.t, 0)))
        self._imu_gain[:] = other._imu_gain

    def _scalars(self) -> tuple[float, ...]:
        return (self.offset_s, self.offset_variance_s2, self.accepted_s, self.refused_since_s,
                self._teaching, self._surprised, *self.load_mark)

    def _set_scalars(self, scalars: tuple[float, ...]) -> None:
        (self.offset_s, self.offset_variance_s2, self.accepted_s, self.refused_since_s,
         self._teaching, self._surprised, *mark) = scalars
        self.load_mark = (mark[0], mark[1])
