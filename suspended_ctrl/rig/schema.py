"""A whole rig file: its sections and what must hold between them."""

from typing import Annotated

import numpy as np
from pydantic import Field, model_validator

from suspended_ctrl.rig.constants import GRAVITY_M_S2
from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.idle import idle_residual, IDLE_TOLERANCE
from suspended_ctrl.rig.parts import (
    AxisSection,
    BodySection,
    CarrierSection,
    KeepInSection,
    RotorSection,
    SensorsSection,
    TetherSection,
)
from suspended_ctrl.rig.section import Name, refuse, Section


class RigFile(Section):
    """Every key of a rig file."""

    name: Name
    body: BodySection
    rotors: Annotated[tuple[RotorSection, ...], Field(min_length=1)]
    tether: TetherSection
    carrier: CarrierSection
    sensors: SensorsSection
    keep_in_m: KeepInSection
    emergency_stop_required: bool = True

    def axes(self) -> dict[str, AxisSection]:
        """Axes that the carrier has, by name, in the order x, y, hoist."""
        given = self.carrier.axes
        if given is None:
            return {}
        all_axes = {'x': given.x, 'y': given.y, 'hoist': given.hoist}
        return {name: axis for name, axis in all_axes.items() if axis is not None}

    @property
    def weight_n(self) -> float:
        """Weight of platform and tether."""
        return (self.body.mass_kg + self.tether.mass_kg) * GRAVITY_M_S2

    @model_validator(mode='after')
    def _fits_together(self) -> 'RigFile':
        names = [rotor.name for rotor in self.rotors]
        for i, name in enumerate(names):
            if name in names[:i]:
                refuse(('rotors', i, 'name'), name, 'a name that no other rotor has')
        if self.axes() and self.sensors.carrier_states is None:
            refuse(('sensors', 'carrier_states'), None,
                   'required, the carrier has axes ' + ', '.join(self.axes()))
        self._check_tether()
        self._check_equilibrium()
        self._check_idle()
        return self

    def _check_tether(self) -> None:
        tether, weight = self.tether, self.weight_n
        if not tether.working_load_n > weight:
            refuse(('tether', 'working_load_n'), tether.working_load_n,
                   f'above the weight of platform and tether, {weight:.4g} newtons')
        if not tether.slack_margin_n < self.body.mass_kg * GRAVITY_M_S2:
            refuse(('tether', 'slack_margin_n'), tether.slack_margin_n,
                   f'below the weight of the platform, {self.body.mass_kg * GRAVITY_M_S2:.4g} '
                   'newtons')

    def _check_equilibrium(self) -> None:
        """Refuse a box that leaves out where the platform hangs, axes as near zero as they go."""
        tether, centre = self.tether, self.body.centre_of_mass_m
        tension = (self.body.mass_kg + tether.mass_kg / 3.0) * GRAVITY_M_S2
        travel = {name: float(np.clip(0.0, axis.min_m, axis.max_m)) + axis.zero_offset_m
                  for name, axis in self.axes().items()}
        below = tether.rest_length_m + tension / tether.stiffness_n_per_m + tether.hook_m[2]
        anchor = self.carrier.anchor_m
        rest = {'x': anchor[0] + travel.get('x', 0.0) - centre[0],
                'y': anchor[1] + travel.get('y', 0.0) - centre[1],
                'z': anchor[2] + travel.get('hoist', 0.0) - below}
        for key, at in rest.items():
            box = getattr(self.keep_in_m, key)
            if not box[0] < at < box[1]:
                refuse(('keep_in_m', key), box,
                       f'a range around the equilibrium of the platform, {at:.4g} metres')

    def _check_idle(self) -> None:
        least = np.array([0.0 if rotor.reversible else rotor.thrust_n(rotor.speed_min_rad_s)
                          for rotor in self.rotors])
        most = np.array([rotor.thrust_n(rotor.speed_max_rad_s) for rotor in self.rotors])
        reversible = np.array([rotor.reversible for rotor in self.rotors])
        wrench = self._wrench_per_thrust(most)
        weight = self.body.mass_kg * GRAVITY_M_S2
        slack = self.tether.slack_margin_n
        said = f'least thrusts {", ".join(f"{thrust:.3g}" for thrust in least)} newtons'
        tension = weight - float(wrench[2] @ least)
        if tension < slack:
            refuse('rotors', f'{said}, tether tension {tension:.3g} newtons',
                   f'at their least speeds the rotors leave slack_margin_n, {slack:g} newtons, '
                   'in the tether')
        residual = idle_residual(wrench, np.where(reversible, -most, least), most,
                                 weight - self.tether.working_load_n, weight - slack)
        if residual > IDLE_TOLERANCE:
            refuse('rotors', said, 'one-way rotors able to idle: thrusts between those at '
                   'speed_min_rad_s and speed_max_rad_s that cancel out but for a vertical force '
                   'which leaves the tether between slack_margin_n and working_load_n')

    def _wrench_per_thrust(self, thrust_max_n: Array) -> Array:
        """Force and torque about the centre of mass of one newton of each rotor, shape (6, n)."""
        axis = np.array([rotor.axis for rotor in self.rotors])
        arm = np.array([rotor.position_m for rotor in self.rotors]) - self.body.centre_of_mass_m
        drag = np.array([rotor.spin * rotor.torque_coefficient_nm_s2 * rotor.speed_max_rad_s ** 2
                         for rotor in self.rotors]) / thrust_max_n
        return np.vstack((axis.T, (np.cross(arm, axis) - drag[:, None] * axis).T))
