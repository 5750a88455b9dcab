"""
What the hardware is, as frozen values.

Lengths are in ``base_link`` axes from the ``base_link`` origin unless a name says ``map``.
"""

from dataclasses import dataclass

import numpy as np

from suspended_ctrl.rig.frozen import Array

AXIS_DIRECTION_MAP = {'x': (1.0, 0.0, 0.0), 'y': (0.0, 1.0, 0.0), 'hoist': (0.0, 0.0, 1.0)}


@dataclass(frozen=True, eq=False)
class Body:
    """
    The platform as a rigid body.

    Attributes
    ----------
    mass_kg : float
        Mass with rotors, without payload and tether.
    inertia_kg_m2 : ndarray, shape (3, 3)
        About the centre of mass, in ``base_link`` axes.
    centre_of_mass_m : ndarray, shape (3,)
        From the ``base_link`` origin.
    drag_area_m2 : ndarray, shape (3,)
        Drag coefficient times area along each ``base_link`` axis.

    """

    mass_kg: float
    inertia_kg_m2: Array
    centre_of_mass_m: Array
    drag_area_m2: Array


@dataclass(frozen=True, eq=False)
class Rotors:
    """
    The rotors, one entry a rotor in every array.

    Thrust is piecewise linear in squared speed between knots, through the origin and on with the
    last slope beyond the last knot; two knots are the square law exactly.

    Attributes
    ----------
    names : tuple of str
        In the order of every array here and of every rotor message.
    position_m : ndarray, shape (n, 3)
        Hub, from the ``base_link`` origin.
    axis : ndarray, shape (n, 3)
        Unit vector; thrust on the body at positive speed.
    curve_speed_rad_s, curve_thrust_n : ndarray, shape (n, m)
        Knots of thrust over speed magnitude, first (0, 0), strictly rising, m >= 2.
    torque_coefficient_nm_s2 : ndarray, shape (n,)
        Drag torque on the body is ``-spin * k_q * w |w| * axis``.
    spin : ndarray, shape (n,)
        +1 turns right-handed about ``axis`` at positive speed, else -1.
    speed_min_rad_s, speed_max_rad_s : ndarray, shape (n,)
        Least magnitude that can be held, greatest magnitude allowed.
    reversible : ndarray of bool, shape (n,)
        Whether negative speeds may be commanded.
    time_constant_s : ndarray, shape (n,)
        First-order lag of speed behind its command.
    inertia_kg_m2 : ndarray, shape (n,)
        Polar inertia of the spinning parts.

    """

    names: tuple[str, ...]
    position_m: Array
    axis: Array
    curve_speed_rad_s: Array
    curve_thrust_n: Array
    torque_coefficient_nm_s2: Array
    spin: Array
    speed_min_rad_s: Array
    speed_max_rad_s: Array
    reversible: np.ndarray
    time_constant_s: Array
    inertia_kg_m2: Array

    @property
    def count(self) -> int:
        """How many rotors there are."""
        return len(self.names)

    @property
    def thrust_coefficient_n_s2(self) -> Array:
        """Thrust over squared speed at the top of each curve, shape (n,), N/(rad/s)^2."""
        return self.curve_thrust_n[:, -1] / self.curve_speed_rad_s[:, -1] ** 2


@dataclass(frozen=True, eq=False)
class Tether:
    """
    The elastic tether between the anchor and the hook.

    Attributes
    ----------
    hook_m : ndarray, shape (3,)
        Attachment on the platform, from the ``base_link`` origin.
    rest_length_m, stiffness_n_per_m, damping_n_s_per_m, mass_kg : float
        It pulls with stiffness times stretch plus damping times stretch rate, never pushes; a
        third of its mass moves with the hook.
    slack_margin_n, working_load_n : float
        Tension that must be left, tension that must not be passed.

    """

    hook_m: Array
    rest_length_m: float
    stiffness_n_per_m: float
    damping_n_s_per_m: float
    mass_kg: float
    slack_margin_n: float
    working_load_n: float


@dataclass(frozen=True, eq=False)
class Carrier:
    """
    The slow overhead carrier; its axes are some of x, y, hoist, in this order.

    Attributes
    ----------
    anchor_m : ndarray, shape (3,)
        Anchor in ``map`` with all axes at zero.
    axes : tuple of str
        Names of the axes there are; empty for a fixed anchor.
    direction_map : ndarray, shape (k, 3)
        Unit travel direction of each axis.
    min_m, max_m, speed_max_m_s, acceleration_max_m_s2, time_constant_s : ndarray, shape (k,)
        Travel, limits and first-order lag of each axis behind its command.
    zero_offset_m : ndarray, shape (k,)
        Added to an axis' reading to give its travel from ``anchor_m``.

    """

    anchor_m: Array
    axes: tuple[str, ...]
    direction_map: Array
    min_m: Array
    max_m: Array
    speed_max_m_s: Array
    acceleration_max_m_s2: Array
    time_constant_s: Array
    zero_offset_m: Array

    def anchor_map(self, position_m: Array) -> Array:
        """Anchor in ``map`` for axis readings ``position_m``, shape (k,) to (3,)."""
        if not self.axes:
            return self.anchor_m
        anchor: Array = self.anchor_m + (position_m + self.zero_offset_m) @ self.direction_map
        return anchor

    def position_for(self, anchor_map: Array) -> Array:
        """Axis readings that bring the anchor nearest to ``anchor_map``, clipped to travel."""
        reading = self.direction_map @ (anchor_map - self.anchor_m) - self.zero_offset_m
        return np.clip(reading, self.min_m, self.max_m)


@dataclass(frozen=True, eq=False)
class PoseSensor:
    """Motion capture: rate, latency, 1-sigma noise each axis, pose of its body in base_link."""

    rate_hz: float
    latency_s: float
    position_noise_m: float
    attitude_noise_rad: float
    position_m: Array
    quaternion_wxyz: Array


@dataclass(frozen=True, eq=False)
class ImuSensor:
    """Gyroscope, accelerometer: rate, 1-sigma noise a sample, bias spread, pose in base_link."""

    rate_hz: float
    rate_noise_rad_s: float
    rate_bias_rad_s: float
    force_noise_m_s2: float
    force_bias_m_s2: float
    position_m: Array
    quaternion_wxyz: Array


@dataclass(frozen=True)
class RotorTelemetry:
    """Measured rotor speeds: rate and white noise as a fraction of the speed."""

    rate_hz: float
    noise_fraction: float


@dataclass(frozen=True)
class CarrierSensor:
    """Measured axis positions: rate and 1-sigma noise."""

    rate_hz: float
    noise_m: float


@dataclass(frozen=True)
class TetherLoadSensor:
    """Load cell in the tether: rate and 1-sigma noise."""

    rate_hz: float
    noise_n: float


@dataclass(frozen=True)
class Sensors:
    """What is measured; None where the rig has no such sensor."""

    pose: PoseSensor
    imu: ImuSensor | None
    rotor_states: RotorTelemetry | None
    carrier_states: CarrierSensor | None
    tether_load: TetherLoadSensor | None


@dataclass(frozen=True, eq=False)
class KeepIn:
    """Box in ``map`` that the ``base_link`` origin must not leave, shapes (3,)."""

    lower_m: Array
    upper_m: Array


@dataclass(frozen=True, eq=False)
class Rig:
    """
    A whole rig.

    Attributes
    ----------
    name : str
    body, rotors, tether, carrier, sensors : Body, Rotors, Tether, Carrier, Sensors
        The parts.
    keep_in : KeepIn
        Where the platform may be.
    emergency_stop_required : bool
        Whether silence of the emergency stop counts as a stop.

    """

    name: str
    body: Body
    rotors: Rotors
    tether: Tether
    carrier: Carrier
    sensors: Sensors
    keep_in: KeepIn
    emergency_stop_required: bool = True
