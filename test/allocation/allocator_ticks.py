"""An allocator in ticks, with rotors and carrier that do what they are told, late by their lag."""

import numpy as np

from suspended_ctrl.allocation import EffortAllocator, EffortInputs, EffortSettings
from suspended_ctrl.physics.carrier import carrier_step
from suspended_ctrl.physics.constants import GRAVITY_M_S2
from suspended_ctrl.physics.equilibrium import equilibrium
from suspended_ctrl.physics.loaded_body import loaded_body
from suspended_ctrl.physics.rotor import lagged_speed
from suspended_ctrl.physics.values import (
    CarrierSample,
    Estimate,
    Payload,
    RotorSample,
    Wrench,
)

TICK_S = 0.005
ZERO = np.zeros(3)


def estimate(t, position):
    return Estimate(t, position, ZERO, np.array([1.0, 0, 0, 0]), ZERO, 1e-6 * np.eye(12), ZERO,
                    ZERO, Payload(), t, True)


class Ticks:
    """
    The platform rests where its tether carries it; rotors in ``dead`` do not turn.

    Parameters
    ----------
    rig : Rig
    allocator : str
    strategy : Allocator, optional

    """

    def __init__(self, rig, allocator='horizon_qp', strategy=None):
        self.rig = rig
        self.part = EffortAllocator(rig, EffortSettings(allocator=allocator), strategy)
        self.t = 100.0
        self.position = equilibrium(rig).position_map_m
        self.weight = loaded_body(rig).mass_kg * GRAVITY_M_S2
        self.speed = np.zeros(rig.rotors.count)
        self.command = np.zeros(rig.rotors.count)
        self.dead = np.zeros(rig.rotors.count, dtype=bool)
        self.axis = self.axis_speed = np.zeros(len(rig.carrier.axes))
        self.setpoint = self.axis

    def demand(self, force=ZERO, torque=ZERO):
        return Wrench(self.t, np.array([0, 0, self.weight]) + force, np.array(torque, float))

    def step(self, force=ZERO, torque=ZERO, state='live', reference=None, demand=None):
        self.t += TICK_S
        self.speed = lagged_speed(self.speed, self.command, TICK_S,
                                  self.rig.rotors.time_constant_s)
        self.speed = np.where(self.dead, 0.0, self.speed)
        samples = [RotorSample(self.t, self.speed)]
        if self.rig.carrier.axes:
            self.axis, self.axis_speed = carrier_step(
                self.rig.carrier, self.axis, self.axis_speed, self.setpoint, TICK_S)
            samples.append(CarrierSample(self.t, self.axis, self.axis_speed))
        out = self.part.step(self.t, EffortInputs(
            demand or self.demand(force, torque), estimate(self.t, self.position), state,
            tuple(samples), reference))
        self.command = out.rotor_demand.speed_rad_s
        if out.carrier_demand is not None:
            self.setpoint = out.carrier_demand.position_m
        return out

    def plan(self):
        """Answer a request for a plan at once; the request, or None."""
        request = self.part.plan_request(self.t)
        if request is not None:
            self.part.take_plan(self.part.solve_plan(request))
        return request
