"""
The values that sensors, the four parts and the drivers exchange.

Every array is float64 and should be treated as read-only; the constructors that users call freeze
them with ``frozen``. Stamps are seconds of the host's clock. Quaternions are (w, x, y, z), body to
map. Poses and velocities speak of the ``base_link`` origin, wrenches of the nominal centre of
mass.
"""

from dataclasses import dataclass, field
import math

import numpy as np

from suspended_ctrl.rig.frozen import Array


def _zeros(*shape: int) -> Array:
    array = np.zeros(shape)
    array.setflags(write=False)
    return array


# ---------------------------------------------------------------- measurements


@dataclass(frozen=True, eq=False, slots=True)
class PoseSample:
    """Motion capture: pose of the marker body in ``map`` as measured at ``stamp_s``."""

    stamp_s: float
    position_map_m: Array
    quaternion_wxyz: Array


@dataclass(frozen=True, eq=False, slots=True)
class ImuSample:
    """Gyroscope rate in rad/s and specific force in m/s^2, both in the sensor's axes."""

    stamp_s: float
    rate_rad_s: Array
    force_m_s2: Array


@dataclass(frozen=True, eq=False, slots=True)
class RotorSample:
    """Measured rotor speeds, shape (n,), rad/s, positive in the thrust direction."""

    stamp_s: float
    speed_rad_s: Array


@dataclass(frozen=True, eq=False, slots=True)
class CarrierSample:
    """Measured axis positions (m) and velocities (m/s), shape (k,)."""

    stamp_s: float
    position_m: Array
    velocity_m_s: Array


@dataclass(frozen=True, slots=True)
class TetherLoadSample:
    """Measured tension, N."""

    stamp_s: float
    tension_n: float


@dataclass(frozen=True, eq=False, slots=True)
class PayloadEvent:
    """What the mission says hangs on the platform from ``stamp_s`` on; zero mass is nothing."""

    stamp_s: float
    mass_kg: float
    position_m: Array = field(default_factory=lambda: _zeros(3))


Sample = (
    PoseSample | ImuSample | RotorSample | CarrierSample | TetherLoadSample | PayloadEvent
)


# ---------------------------------------------------------------- estimate


@dataclass(frozen=True, eq=False, slots=True)
class Payload:
    """Payload as estimated: mass and place from the ``base_link`` origin."""

    mass_kg: float = 0.0
    position_m: Array = field(default_factory=lambda: _zeros(3))


@dataclass(frozen=True, eq=False, slots=True)
class Estimate:
    """
    What the estimator knows, valid at ``stamp_s``.

    Attributes
    ----------
    stamp_s : float
        The newest pose's stamp while poses flow, else that of the newest input.
    position_map_m, velocity_map_m_s : ndarray, shape (3,)
    quaternion_wxyz : ndarray, shape (4,)
    rate_body_rad_s : ndarray, shape (3,)
    covariance : ndarray, shape (12, 12)
        Of errors (position map, attitude as body rotation vector, velocity map, rate body).
    disturbance_force_map_n, disturbance_torque_map_nm : ndarray, shape (3,)
        At the centre of mass, map axes: what the model does not explain.
    payload : Payload
    pose_stamp_s : float
        Stamp of the newest pose accepted; nan before the first.
    valid : bool
        False until started up, and when the estimate must not be flown on.

    """

    stamp_s: float
    position_map_m: Array
    velocity_map_m_s: Array
    quaternion_wxyz: Array
    rate_body_rad_s: Array
    covariance: Array
    disturbance_force_map_n: Array
    disturbance_torque_map_nm: Array
    payload: Payload
    pose_stamp_s: float
    valid: bool


# ---------------------------------------------------------------- wrench


@dataclass(frozen=True, eq=False, slots=True)
class Wrench:
    """
    Force and torque in ``base_link`` axes at the nominal centre of mass, N and N m.

    As a demand: total, tether included, gravity not, for the moment at which the rotors' effect of
    a command sent now is felt (``physics.lead``). As achieved: what rotors and tether give now.
    """

    stamp_s: float
    force_body_n: Array
    torque_body_nm: Array

    def vector(self) -> Array:
        """Force then torque, shape (6,)."""
        return np.concatenate((self.force_body_n, self.torque_body_nm))

    def finite(self) -> bool:
        """Whether every component is a finite number."""
        # One of them not finite makes the sum of squares so.
        force, torque = self.force_body_n, self.torque_body_nm
        return math.isfinite(float(force @ force) + float(torque @ torque))


# ---------------------------------------------------------------- commands


@dataclass(frozen=True, eq=False, slots=True)
class RotorCommand:
    """Rotor speeds, shape (n,), rad/s, in the rig's order."""

    stamp_s: float
    speed_rad_s: Array


@dataclass(frozen=True, eq=False, slots=True)
class CarrierCommand:
    """Axis positions (m) and velocities (m/s), shape (k,), in the rig's order."""

    stamp_s: float
    position_m: Array
    velocity_m_s: Array


@dataclass(frozen=True, eq=False, slots=True)
class CarrierPlan:
    """Planned axis positions over a horizon: ``time_s`` (h,), the others (h, k)."""

    stamp_s: float
    time_s: Array
    position_m: Array
    velocity_m_s: Array


SAFETY_STATES = ('locked', 'ready', 'live', 'holding', 'stopping', 'tripped')
