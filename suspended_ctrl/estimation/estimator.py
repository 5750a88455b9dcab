"""
Where the platform is: stamped samples in, in any order, an estimate out.

The estimate speaks of the newest accepted pose's stamp while poses flow, else of the newest
sample.
"""

from dataclasses import dataclass, field

import numpy as np

from suspended_ctrl.estimation.alignment import align, Alignment
from suspended_ctrl.estimation.body import BodyModel, build_body
from suspended_ctrl.estimation.filter import ErrorStateFilter
from suspended_ctrl.estimation.guard import Guard
from suspended_ctrl.estimation.horizon import Horizon
from suspended_ctrl.estimation.output import at_origin
from suspended_ctrl.estimation.settings import EstimatorSettings, settings_for
from suspended_ctrl.estimation.start import set_start
from suspended_ctrl.estimation.timeline import (
    CARRIER,
    Entry,
    IMU,
    PAYLOAD,
    POSE,
    ROTORS,
    TETHER,
)
from suspended_ctrl.physics.rotation import conjugate, matrix, multiply, normalised
from suspended_ctrl.physics.values import (
    CarrierSample,
    Estimate,
    ImuSample,
    Payload,
    PayloadEvent,
    PoseSample,
    RotorSample,
    Sample,
    TetherLoadSample,
)
from suspended_ctrl.rig.frozen import Array, ArrayLike
from suspended_ctrl.rig.rig import Rig

# Poses count as stopped after so many periods without one.
MISSING_PERIODS = 3.0


@dataclass(frozen=True, eq=False)
class EstimatorInputs:
    """Samples that arrived since the last step."""

    samples: tuple[Sample, ...] = ()


@dataclass(frozen=True, eq=False)
class EstimatorOutputs:
    """The estimate, figures for diagnostics, and a sentence for people if something is wrong."""

    estimate: Estimate
    diagnostics: dict[str, float] = field(default_factory=dict)
    message: str = ''


class Estimator:
    """
    State estimation for a rig, or for any body with an IMU and a motion-capture pose.

    Parameters
    ----------
    rig : Rig, optional
        None is a plain inertial filter: nothing is known of what moves the body.
    settings : EstimatorSettings, optional
        From the rig if left out; must be given without one.

    Attributes
    ----------
    guard : Guard
        Counts of what was refused.
    alignment : Alignment or None
        What start-up found.
    message : str
        What people should know, or nothing.

    Raises
    ------
    ValueError
        If both are left out.

    """

    def __init__(self, rig: Rig | None = None, settings: EstimatorSettings | None = None) -> None:
        if settings is None:
            if rig is None:
                raise ValueError('without a rig the settings (noise) must be given')
            settings = settings_for(rig)
        self.rig = rig
        self.settings = settings
        self.guard = Guard(settings)
        self.alignment: Alignment | None = None
        self.message = ''
        sensors = rig.sensors if rig else None
        imu = sensors.imu if sensors else None
        self._marker_back = _unless_identity(sensors.pose.quaternion_wxyz if sensors else None)
        self._imu_rotation = _unless_identity(imu.quaternion_wxyz if imu else None)
        if self._marker_back is not None:
            self._marker_back = conjugate(self._marker_back)
        if self._imu_rotation is not None:
            self._imu_rotation = matrix(self._imu_rotation)
        self._imu_usable = True
        body = build_body(rig, Payload())
        self._horizon = Horizon(settings, body, self._loaded, self.guard.verdict)
        if rig is not None:
            self._horizon.filter.u[:3] = rig.carrier.anchor_map(np.zeros(len(rig.carrier.axes)))
        self._pose_lag_s = 0.0
        self._pose_newest_s = -np.inf
        self._given: Estimate | None = None

    # ------------------------------------------------------------ samples

    def imu(self, t: float, rate: ArrayLike, force: ArrayLike) -> bool:
        """
        Take a sample of the IMU.

        Parameters
        ----------
        t : float
            Stamp, s.
        rate, force : array_like, shape (3,)
            rad/s and m/s^2 (specific force), sensor axes.

        Returns
        -------
        bool
            Whether it was taken; ``guard.refused`` counts why not.

        """
        sample = self.guard.vectors(IMU, t, rate, 3, force, 3) if self._imu_usable else None
        if sample is None:
            return False
        if self._imu_rotation is not None:
            sample = self._imu_rotation @ sample[0], self._imu_rotation @ sample[1]
        return self._push(t, IMU, sample)

    def pose(self, t: float, position: ArrayLike, quaternion_wxyz: ArrayLike) -> bool:
        """
        Take a pose of the marker body in map.

        Parameters
        ----------
        t : float
            Stamp, s.
        position : array_like, shape (3,)
        quaternion_wxyz : array_like, shape (4,)

        Returns
        -------
        bool
            Whether it was taken; the gate may yet refuse it.

        """
        guard = self.guard
        sample = guard.vectors(POSE, t, position, 3, quaternion_wxyz, 4)
        if sample is None or not guard.unit(sample[1]) or guard.frozen_pose(*sample):
            return False
        place, attitude = sample[0], normalised(sample[1])
        if self._marker_back is not None:
            attitude = multiply(attitude, self._marker_back)
        return self._push(t, POSE, (place, attitude))

    def rotors(self, t: float, speed: ArrayLike) -> bool:
        """Take measured rotor speeds, rad/s, in the rig's order; returns whether taken."""
        if self.rig is None:
            return False
        sample = self.guard.vectors(ROTORS, t, speed, self.rig.rotors.count)
        return sample is not None and self._push(t, ROTORS, sample[0])

    def carrier(self, t: float, position: ArrayLike, velocity: ArrayLike = ()) -> bool:
        """Take measured axis positions, m (their velocity is not used); returns whether taken."""
        if self.rig is None:
            return False
        sample = self.guard.vectors(CARRIER, t, position, len(self.rig.carrier.axes))
        return sample is not None and self._push(
            t, CARRIER, self.rig.carrier.anchor_map(sample[0]))

    def tether_load(self, t: float, tension: float) -> bool:
        """Take a measured tension, N; returns whether taken."""
        if self.rig is None:
            return False
        sample = self.guard.vectors(TETHER, t, (tension,), 1)
        return sample is not None and self._push(t, TETHER, tension)

    def payload(self, event: PayloadEvent) -> bool:
        """Take what hangs on the platform from ``event.stamp_s`` on; returns whether taken."""
        if self.rig is None:
            return False
        sample = self.guard.vectors(PAYLOAD, event.stamp_s, (event.mass_kg,), 1,
                                    event.position_m, 3)
        if sample is None or event.mass_kg < 0.0:
            return False
        return self._push(event.stamp_s, PAYLOAD, event)

    def take(self, sample: Sample) -> bool:
        """Hand a sample of any kind to the method for its kind."""
        if isinstance(sample, ImuSample):
            return self.imu(sample.stamp_s, sample.rate_rad_s, sample.force_m_s2)
        if isinstance(sample, PoseSample):
            return self.pose(sample.stamp_s, sample.position_map_m, sample.quaternion_wxyz)
        if isinstance(sample, RotorSample):
            return self.rotors(sample.stamp_s, sample.speed_rad_s)
        if isinstance(sample, CarrierSample):
            return self.carrier(sample.stamp_s, sample.position_m, sample.velocity_m_s)
        if isinstance(sample, TetherLoadSample):
            return self.tether_load(sample.stamp_s, sample.tension_n)
        return self.payload(sample)

    # ------------------------------------------------------------ answers

    def step(self, t: float, inputs: EstimatorInputs) -> EstimatorOutputs:
        """
        Take samples and say where the platform is.

        Parameters
        ----------
        t : float
            Now, s.
        inputs : EstimatorInputs

        Returns
        -------
        EstimatorOutputs
            Stamps of estimates never go back, except after a jump of the clock.

        """
        for sample in inputs.samples:
            self.take(sample)
        return EstimatorOutputs(self._answer(), self._diagnostics(t), self.message)

    def state(self, t: float) -> Estimate:
        """
        Estimate at any stamp.

        Parameters
        ----------
        t : float
            s; see ``horizon.Horizon.at``.

        Returns
        -------
        Estimate
            Not valid before start-up, nor where the memory ends.

        """
        known = self._horizon.at(t) if self.alignment else None
        return _blank() if known is None else self._estimate(known)

    def _answer(self) -> Estimate:
        if self.alignment is None:
            return _blank()
        accepted = self._horizon.filter.accepted_s
        newest = self.guard.newest_s
        late = not newest - accepted <= self._pose_lag_s + self._missing_s
        target = newest if late else accepted
        if self._given is None or target > self._given.stamp_s:
            self._given = self.state(target)
        return self._given

    # ------------------------------------------------------------ inside

    @property
    def _missing_s(self) -> float:
        return MISSING_PERIODS * self.settings.pose_period_s

    def _push(self, t: float, kind: int, entry: Entry) -> bool:
        guard, horizon = self.guard, self._horizon
        if not guard.stamp(kind, t, horizon.oldest_s):
            if guard.jumped:
                self._rebase()
            return False
        if not horizon.note((t, kind), entry):
            return guard.count(kind, 'duplicate')
        if kind == POSE:
            self._pose_lag_s = max(guard.newest_s - t, 0.98 * self._pose_lag_s)
            self._pose_newest_s = max(self._pose_newest_s, t)
            if self.alignment is None:
                self._try_start()
        if self.alignment is not None:
            limit = self._pose_newest_s
            if guard.newest_s - limit > self._pose_lag_s + self._missing_s:
                limit = guard.newest_s - self._pose_lag_s - self.settings.pose_period_s
            horizon.absorb(limit)
        return True

    def _loaded(self, event: PayloadEvent) -> BodyModel:
        return build_body(self.rig, Payload(event.mass_kg, event.position_m))

    def _try_start(self) -> None:
        line, settings = self._horizon.line, self.settings
        start_s = self._pose_newest_s - settings.alignment_s
        poses = [(key[0], *entry) for key, entry in zip(line.keys, line.entries, strict=True)
                 if key[1] == POSE and key[0] >= start_s]
        if len(poses) < 2 or line.keys[0][0] > start_s + 1.5 * settings.pose_period_s:
            return
        samples = [entry for key, entry in zip(line.keys, line.entries, strict=True)
                   if key[1] == IMU and key[0] >= start_s]
        stamps, positions, attitudes = (np.array(column) for column in zip(*poses, strict=True))
        rates, forces = (np.array([s[i] for s in samples]) for i in range(2))
        found = align(settings, stamps, positions, attitudes, rates, forces)
        self.message = found.message
        line.rewind((start_s, -1))
        line.forget(start_s)
        if not found.ok:
            return
        self._imu_usable = found.imu_usable
        self.alignment = found
        set_start(self._horizon.filter, settings, found, float(stamps[0]))
        self._horizon.begin()

    def _rebase(self) -> None:
        """Go on with the present state on the clock that the samples now have."""
        self.guard.restart()
        self._pose_newest_s = self.guard.offered
        self._given = None
        self._horizon.line.clear()
        if self.alignment is not None:
            state = self._horizon.filter
            state.t = self.guard.offered
            state.u[21:23] = -np.inf
            state.accepted_s = state.refused_since_s = float('nan')
            self._horizon.begin()

    def _estimate(self, state: ErrorStateFilter) -> Estimate:
        out, covariance, r = np.empty(9), np.empty((12, 12)), matrix(state.x[6:10])
        at_origin(state.x, state.p, r, state.body.centre_m, out, covariance)
        return Estimate(
            stamp_s=state.t, position_map_m=out[:3], velocity_map_m_s=out[3:6],
            quaternion_wxyz=normalised(state.x[6:10]), rate_body_rad_s=state.x[10:13].copy(),
            covariance=covariance, disturbance_force_map_n=state.x[19:22].copy(),
            disturbance_torque_map_nm=out[6:9], payload=state.body.payload,
            pose_stamp_s=state.accepted_s, valid=True)

    def _diagnostics(self, t: float) -> dict[str, float]:
        state, guard = self._horizon.filter, self.guard
        return {
            'started': float(self.alignment is not None),
            'pose_age_s': t - state.accepted_s,
            'nis': state.nis,
            'poses_accepted': float(guard.accepted),
            'poses_gated': float(guard.gated),
            'pose_repeats': float(guard.repeats),
            'stamp_offset_s': state.offset[0],
            'stamp_offset_sigma_s': state.offset[1] ** 0.5,
            **{f'refused.{name}': float(count) for name, count in guard.refused.items()},
        }


def _unless_identity(quaternion: Array | None) -> Array | None:
    return None if quaternion is None or abs(quaternion[0]) == 1.0 else quaternion


def _blank() -> Estimate:
    nothing = np.full(3, np.nan)
    return Estimate(
        stamp_s=float('nan'), position_map_m=nothing, velocity_map_m_s=nothing,
        quaternion_wxyz=np.full(4, np.nan), rate_body_rad_s=nothing,
        covariance=np.full((12, 12), np.nan), disturbance_force_map_n=nothing,
        disturbance_torque_map_nm=nothing, payload=Payload(), pose_stamp_s=float('nan'),
        valid=False)
