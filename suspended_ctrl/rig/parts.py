"""What the sections of a rig file may hold: keys, types and ranges."""

from collections.abc import Sequence
from typing import Annotated, Any

import numpy as np
from pydantic import BeforeValidator, Field, model_validator

from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.section import (
    Direction,
    MAGNITUDE_MAX,
    Name,
    NonNegative,
    NonNegative3,
    Number,
    Positive,
    Range,
    refuse,
    Rotation,
    Section,
    Sign,
    Vector3,
)

# A thin plate meets the triangle inequality with equality, and files hold rounded numbers.
_TRIANGLE_TOLERANCE = 1e-3
# Programs that export a matrix print at least seven digits.
_SYMMETRY_TOLERANCE = 1e-6


def _inertia(value: Any) -> Any:
    """Turn a diagonal into a matrix; leave what is no list of three to the type's own check."""
    if (isinstance(value, Sequence) and len(value) == 3
            and all(isinstance(x, int | float) and not isinstance(x, bool) for x in value)):
        for i, moment in enumerate(value):
            if not 0.0 < moment <= MAGNITUDE_MAX:
                refuse(i, moment, 'a moment of inertia above 0 in kilogram square metres')
        return tuple(tuple(float(x) if i == j else 0.0 for j in range(3))
                     for i, x in enumerate(value))
    if not (isinstance(value, Sequence) and len(value) == 3
            and all(isinstance(row, Sequence) and not isinstance(row, str) and len(row) == 3
                    for row in value)):
        refuse((), value, '3 numbers (the diagonal) or 3 rows of 3, in kilogram square metres')
    return value


Inertia = Annotated[tuple[Vector3, ...], BeforeValidator(_inertia)]


class BodySection(Section):
    """The platform as a rigid body."""

    mass_kg: Positive
    inertia_kg_m2: Inertia
    centre_of_mass_m: Vector3
    drag_area_m2: NonNegative3

    @model_validator(mode='after')
    def _possible(self) -> 'BodySection':
        inertia = np.array(self.inertia_kg_m2)
        size = np.abs(inertia).max()
        if np.abs(inertia - inertia.T).max() > _SYMMETRY_TOLERANCE * size:
            refuse('inertia_kg_m2', self.inertia_kg_m2, 'a symmetric matrix')
        moments = np.linalg.eigvalsh(0.5 * (inertia + inertia.T))
        said = ', '.join(f'{moment:.4g}' for moment in moments)
        if not moments[0] > 0.0:
            refuse('inertia_kg_m2', self.inertia_kg_m2,
                   f'positive principal moments, these are {said} kg m2')
        if moments[2] > moments[0] + moments[1] + _TRIANGLE_TOLERANCE * moments[2]:
            refuse('inertia_kg_m2', self.inertia_kg_m2,
                   f'no principal moment above the sum of the other two, these are {said} kg m2')
        return self


class ThrustCurveSection(Section):
    """Measured thrust over speed."""

    speed_rad_s: Annotated[tuple[NonNegative, ...], Field(min_length=1)]
    thrust_n: Annotated[tuple[NonNegative, ...], Field(min_length=1)]

    @model_validator(mode='after')
    def _rising(self) -> 'ThrustCurveSection':
        speed, thrust = self.speed_rad_s, self.thrust_n
        if len(thrust) != len(speed):
            refuse('thrust_n', thrust, f'one thrust a speed, there are {len(speed)} speeds')
        if speed[-1] == 0.0:
            refuse('speed_rad_s', speed, 'at least one speed above 0')
        if speed[0] == 0.0 and thrust[0] != 0.0:
            refuse(('thrust_n', 0), thrust[0], '0 at speed 0')
        for key, values in (('speed_rad_s', speed), ('thrust_n', thrust)):
            if values[0] == 0.0 and speed[0] > 0.0:
                refuse((key, 0), values[0], 'above 0 where the speed is')
            for i in range(1, len(values)):
                if not values[i] > values[i - 1]:
                    refuse((key, i), values[i], f'above the one before, {values[i - 1]:g}')
        return self


class RotorSection(Section):
    """One rotor."""

    name: Name
    position_m: Vector3
    axis: Direction
    thrust_coefficient_n_s2: Positive | None = None
    thrust_curve: ThrustCurveSection | None = None
    torque_coefficient_nm_s2: NonNegative
    spin: Sign
    speed_min_rad_s: NonNegative
    speed_max_rad_s: Positive
    reversible: bool
    time_constant_s: Positive
    inertia_kg_m2: NonNegative

    @model_validator(mode='after')
    def _one_law_in_range(self) -> 'RotorSection':
        curve = self.thrust_curve
        if self.thrust_coefficient_n_s2 is None and curve is None:
            refuse('thrust_coefficient_n_s2', None, 'a number above 0 in newtons per (rad/s)^2, '
                   'or else a thrust_curve')
        if self.thrust_coefficient_n_s2 is not None and curve is not None:
            refuse('thrust_coefficient_n_s2', self.thrust_coefficient_n_s2,
                   'either this or thrust_curve, not both')
        if not self.speed_min_rad_s < self.speed_max_rad_s:
            refuse('speed_min_rad_s', self.speed_min_rad_s,
                   f'below speed_max_rad_s, {self.speed_max_rad_s:g} radians per second')
        if curve is not None and curve.speed_rad_s[-1] < self.speed_max_rad_s:
            refuse('speed_max_rad_s', self.speed_max_rad_s,
                   f'at most the last speed of thrust_curve, {curve.speed_rad_s[-1]:g}')
        return self

    def knots(self) -> tuple[Array, Array]:
        """Speeds in rad/s and thrusts in N of the curve, from (0, 0) on, shapes (m,), m >= 2."""
        curve = self.thrust_curve
        if curve is None:
            top = self.speed_max_rad_s
            coefficient = self.thrust_coefficient_n_s2 or 0.0
            return np.array([0.0, top]), np.array([0.0, coefficient * top ** 2])
        start = (0.0,) if curve.speed_rad_s[0] > 0.0 else ()
        return np.array(start + curve.speed_rad_s), np.array(start + curve.thrust_n)

    def thrust_n(self, speed_rad_s: float) -> float:
        """Thrust at a speed of this rotor's range, linear in squared speed between knots."""
        speed, thrust = self.knots()
        return float(np.interp(speed_rad_s ** 2, speed ** 2, thrust))


class TetherSection(Section):
    """The elastic tether."""

    hook_m: Vector3
    rest_length_m: Positive
    stiffness_n_per_m: Positive
    damping_n_s_per_m: NonNegative
    mass_kg: NonNegative
    slack_margin_n: NonNegative
    working_load_n: Positive


class AxisSection(Section):
    """One axis of the carrier."""

    min_m: Number
    max_m: Number
    speed_max_m_s: Positive
    acceleration_max_m_s2: Positive
    time_constant_s: Positive
    zero_offset_m: Number = 0.0

    @model_validator(mode='after')
    def _ordered(self) -> 'AxisSection':
        if not self.min_m < self.max_m:
            refuse('min_m', self.min_m, f'below max_m, {self.max_m:g} metres')
        return self


class AxesSection(Section):
    """Some of the carrier's three axes."""

    x: AxisSection | None = None
    y: AxisSection | None = None
    hoist: AxisSection | None = None


class CarrierSection(Section):
    """The overhead carrier, or a fixed anchor where it has no axes."""

    anchor_m: Vector3
    axes: AxesSection | None = None


class PoseSection(Section):
    """Motion capture."""

    rate_hz: Positive
    latency_s: NonNegative
    position_noise_m: NonNegative
    attitude_noise_rad: NonNegative
    position_m: Vector3 = (0.0, 0.0, 0.0)
    rotation_wxyz: Rotation = (1.0, 0.0, 0.0, 0.0)


class ImuSection(Section):
    """Gyroscope and accelerometer."""

    rate_hz: Positive
    rate_noise_rad_s: NonNegative
    rate_bias_rad_s: NonNegative
    force_noise_m_s2: NonNegative
    force_bias_m_s2: NonNegative
    position_m: Vector3 = (0.0, 0.0, 0.0)
    rotation_wxyz: Rotation = (1.0, 0.0, 0.0, 0.0)


class RotorStatesSection(Section):
    """Measured rotor speeds; with ``telemetry: false`` there are none."""

    telemetry: bool = True
    rate_hz: Positive | None = None
    noise_fraction: Annotated[float, Field(ge=0.0, lt=1.0)] | None = None

    @model_validator(mode='after')
    def _complete(self) -> 'RotorStatesSection':
        for key in ('rate_hz', 'noise_fraction'):
            if self.telemetry and getattr(self, key) is None:
                refuse(key, None, 'required, unless telemetry: false')
        return self


class CarrierStatesSection(Section):
    """Measured axis positions."""

    rate_hz: Positive
    noise_m: NonNegative


class TetherLoadSection(Section):
    """Load cell in the tether."""

    rate_hz: Positive
    noise_n: NonNegative


class SensorsSection(Section):
    """What is measured."""

    pose: PoseSection
    imu: ImuSection | None = None
    rotor_states: RotorStatesSection | None = None
    carrier_states: CarrierStatesSection | None = None
    tether_load: TetherLoadSection | None = None


class KeepInSection(Section):
    """Box in map for the base_link origin."""

    x: Range
    y: Range
    z: Range
