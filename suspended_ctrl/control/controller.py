"""The wrench controller: chooses what to follow, looks ahead to the felt moment, asks the law."""

from dataclasses import dataclass, replace
import math

import numpy as np

from suspended_ctrl.control.laws import Law, LAWS
from suspended_ctrl.control.stop_path import path_to_rest
from suspended_ctrl.control.values import ControlInputs, ControlOutputs, LawInputs
from suspended_ctrl.physics.constants import GRAVITY_M_S2
from suspended_ctrl.physics.equilibrium import anchor_at_zero, equilibrium
from suspended_ctrl.physics.lead import Lead, PlatformState
from suspended_ctrl.physics.loaded_body import loaded_body
from suspended_ctrl.physics.reference import held, Reference, ReferencePoint
from suspended_ctrl.physics.values import CarrierPlan, Estimate, Wrench
from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.rig import Rig

# A demand counts as saturated when what is achieved misses it by this share of the weight: well
# above the allocator's own trade of effort against accuracy.
_SATURATED_SHARE = 0.02
# Torque is held to the same share of the weight on this arm.
_SATURATED_ARM_M = 0.1
# A path that starts further off than this is not chased.
JOIN_WITHIN_M = 0.1


@dataclass(frozen=True)
class ControlSettings:
    """
    Settings of the controller.

    Attributes
    ----------
    law : str
        Name of a law.
    bandwidth_hz, damping_ratio : float
    transport_s : float
        From the controller's step to the drives, half a tick of hold included.
    lag_gain : float
        The allocator's lag inversion.

    """

    law: str = 'computed_torque'
    bandwidth_hz: float = 1.6
    damping_ratio: float = 0.9
    transport_s: float = 0.0045
    lag_gain: float = 1.3


def _usable(reference: Reference, t: float) -> bool:
    """Whether it has a path at all and its end is still to come."""
    return len(reference.time_s) >= 2 and reference.end_s >= t


def _joins(reference: Reference, t: float, felt: PlatformState) -> bool:
    """Whether the platform is near enough to where the path is now to go along."""
    gap = reference.at(t).position_map_m - felt.position_map_m
    return float(np.sqrt(gap @ gap)) <= JOIN_WITHIN_M


class WrenchController:
    """
    What wrench the platform needs.

    Parameters
    ----------
    rig : Rig
    settings : ControlSettings

    Raises
    ------
    UnknownNameError, BandwidthError
        If the law is not known or the rig cannot carry its bandwidth.

    """

    def __init__(self, rig: Rig, settings: ControlSettings) -> None:
        self.rig = rig
        self.settings = settings
        self.lead = Lead(rig, settings.transport_s, settings.lag_gain)
        self._law = self._made(settings.law)
        self._reference: Reference | None = None
        self._followed: Reference | None = None
        self._following = 'idle'
        self._state = 'locked'
        self._plan: CarrierPlan | None = None
        self._achieved: Wrench | None = None
        self._demand: Wrench | None = None
        self._anchor = anchor_at_zero(rig)
        self._body = loaded_body(rig)
        self._payload_kg = 0.0

    def _made(self, name: str) -> Law:
        return LAWS.maker(name)(self.rig, self.settings.bandwidth_hz, self.settings.damping_ratio)

    def swap(self, law: str) -> None:
        """
        Change the law; the next step uses it.

        Parameters
        ----------
        law : str
            Its name.

        Raises
        ------
        UnknownNameError, BandwidthError

        """
        self._law = self._made(law)
        self.settings = replace(self.settings, law=law)

    def step(self, t: float, inputs: ControlInputs) -> ControlOutputs:
        """
        One tick, on a new estimate.

        Parameters
        ----------
        t : float
            Now, s.
        inputs : ControlInputs
            What is new since the last step.

        Returns
        -------
        ControlOutputs
            The demand carries the estimate's stamp.

        """
        estimate = inputs.estimate
        self._take(t, inputs)
        felt = self.lead.predict(estimate, t, self._body)
        reference = self._choose(t, inputs.safety_state, estimate, felt)
        felt_s = t + self.lead.lead_s
        point = reference.at(felt_s)
        law_inputs = LawInputs(
            estimate, felt, point, self._feedforward(reference, point, felt_s), reference,
            self._body, self._anchor, self._plan, self._achieved, self._saturated())
        demand = self._law.step(t, law_inputs)
        self._demand = demand
        return ControlOutputs(demand, self._following, {
            'lead_s': felt_s - estimate.stamp_s, 'saturated': float(law_inputs.saturated)})

    def _take(self, t: float, inputs: ControlInputs) -> None:
        if inputs.achieved is not None:
            # It answers the demand of the step before, which was sent a tick ago.
            self.lead.record(t - self._tick(inputs.estimate), inputs.achieved)
            self._achieved = inputs.achieved
        if inputs.plan is not None:
            self._plan = inputs.plan
        if inputs.carrier is not None:
            self._anchor = self.rig.carrier.anchor_map(inputs.carrier.position_m)
        if inputs.reference is not None:
            self._reference = inputs.reference if _usable(inputs.reference, t) else None
        payload = inputs.estimate.payload
        if payload.mass_kg != self._payload_kg:
            self._payload_kg = payload.mass_kg
            self._body = loaded_body(self.rig, payload)

    def _tick(self, estimate: Estimate) -> float:
        if self._demand is None:
            return 0.005
        return float(np.clip(estimate.stamp_s - self._demand.stamp_s, 0.001, 0.02))

    def _choose(self, t: float, state: str, estimate: Estimate, felt: PlatformState) -> Reference:
        if self._state == 'live' and state != 'live':
            # What was under way before a stop is not resumed after it.
            self._reference = None
        self._state = state
        if (self._reference is not None and self._following != 'path'
                and not _joins(self._reference, t, felt)):
            self._reference = None
        wanted = {'live': 'path' if self._reference is not None else 'hold', 'holding': 'brake',
                  'stopping': 'stop'}.get(state, 'idle')
        if wanted == 'path':
            assert self._reference is not None
            self._following, self._followed = wanted, self._reference
        elif wanted == 'idle' or self._followed is None:
            # Asks for no correction, so that switching on starts without a step.
            self._following = wanted
            self._followed = held(felt.position_map_m, felt.quaternion_wxyz, t)
        elif wanted != self._following:
            self._enter(t, wanted, felt)
        return self._followed

    def _enter(self, t: float, wanted: str, felt: PlatformState) -> None:
        previous = self._followed
        assert previous is not None
        before, self._following = self._following, wanted
        if wanted == 'hold' and before == 'idle':
            self._followed = held(felt.position_map_m, felt.quaternion_wxyz, t)
            return
        start = previous.at(felt.stamp_s)
        goal = None
        if wanted == 'stop':
            goal = equilibrium(self.rig, self._anchor, self._payload_kg).position_map_m
        self._followed = path_to_rest(start, felt, goal)

    def _feedforward(self, reference: Reference, point: ReferencePoint, felt_s: float) -> Array:
        """Take the bend that a first-order lag adds out of the wanted acceleration."""
        bend = reference.acceleration_bend(felt_s)
        corrected: Array = point.acceleration_map_m_s2 - 0.5 * self.lead.lag_s ** 2 * bend
        return corrected

    def _saturated(self) -> bool:
        if self._achieved is None or self._demand is None:
            return False
        force = self._demand.force_body_n - self._achieved.force_body_n
        torque = self._demand.torque_body_nm - self._achieved.torque_body_nm
        most = _SATURATED_SHARE * self._body.mass_kg * GRAVITY_M_S2
        return (math.sqrt(float(force @ force)) > most
                or math.sqrt(float(torque @ torque)) > most * _SATURATED_ARM_M)
