"""Samples of every kind, checked and brought to body axes."""

from suspended_ctrl.estimation.guard import Guard
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
    ImuSample,
    PayloadEvent,
    PoseSample,
    RotorSample,
    Sample,
    TetherLoadSample,
)
from suspended_ctrl.rig.frozen import Array, ArrayLike
from suspended_ctrl.rig.rig import Rig


class SampleIntake:
    """
    One method for each kind of sample.

    Parameters
    ----------
    rig : Rig or None
        Where its sensors sit and how they are turned.
    guard : Guard

    """

    def __init__(self, rig: Rig | None, guard: Guard) -> None:
        self.rig = rig
        self.guard = guard
        self._imu_usable = True
        self._marker_back: Array | None = None
        self._imu_rotation: Array | None = None
        if rig is None:
            return
        pose, imu = rig.sensors.pose, rig.sensors.imu
        if abs(pose.quaternion_wxyz[0]) != 1.0:
            self._marker_back = conjugate(pose.quaternion_wxyz)
        if imu is not None and abs(imu.quaternion_wxyz[0]) != 1.0:
            self._imu_rotation = matrix(imu.quaternion_wxyz)

    def _push(self, t: float, kind: int, entry: Entry) -> bool:
        raise NotImplementedError

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
        if not self._imu_usable:
            return self.guard.count(IMU, 'not_usable')
        sample = self.guard.vectors(IMU, t, rate, 3, force, 3)
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
            Where it is, m.
        quaternion_wxyz : array_like, shape (4,)
            Its attitude, body to map.

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
        return sample is not None and self._push(t, ROTORS, sample)

    def carrier(self, t: float, position: ArrayLike, velocity: ArrayLike = ()) -> bool:
        """Take measured axis positions, m (their velocity is not used); returns whether taken."""
        if self.rig is None:
            return False
        sample = self.guard.vectors(CARRIER, t, position, len(self.rig.carrier.axes))
        if sample is None:
            return False
        return self._push(t, CARRIER, (self.rig.carrier.anchor_map(sample[0]), sample[1]))

    def tether_load(self, t: float, tension: float) -> bool:
        """Take a measured tension, N; returns whether taken."""
        if self.rig is None:
            return False
        sample = self.guard.vectors(TETHER, t, (tension,), 1)
        return sample is not None and self._push(t, TETHER, sample)

    def payload(self, event: PayloadEvent) -> bool:
        """Take what hangs on the platform from ``event.stamp_s`` on; returns whether taken."""
        if self.rig is None:
            return False
        sample = self.guard.vectors(PAYLOAD, event.stamp_s, (event.mass_kg,), 1,
                                    event.position_m, 3)
        if sample is None:
            return False
        if event.mass_kg < 0.0:
            return self.guard.count(PAYLOAD, 'negative')
        return self._push(event.stamp_s, PAYLOAD, sample)

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
