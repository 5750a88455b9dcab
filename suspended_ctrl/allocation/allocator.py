"""The effort allocator: everything that surrounds a strategy in a tick."""

from dataclasses import replace

import numpy as np

from suspended_ctrl.allocation.allocators import Allocator, ALLOCATORS, PlanningAllocator
from suspended_ctrl.allocation.carrier_observer import CarrierObserver
from suspended_ctrl.allocation.carrier_plan import PlanRequest
from suspended_ctrl.allocation.lag_inversion import led_command, reachable_speed
from suspended_ctrl.allocation.pseudo_inverse import PseudoInverse
from suspended_ctrl.allocation.rotor_observer import RotorObserver
from suspended_ctrl.allocation.rotor_qp import rotor_wrench_wanted
from suspended_ctrl.allocation.settings import EffortSettings
from suspended_ctrl.allocation.swap import swap_refusal
from suspended_ctrl.allocation.values import (
    Allocation,
    AllocationInputs,
    EffortInputs,
    EffortOutputs,
)
from suspended_ctrl.physics.lead import Lead
from suspended_ctrl.physics.loaded_body import loaded_body
from suspended_ctrl.physics.reference import Reference
from suspended_ctrl.physics.rotation import rotate, rotate_back
from suspended_ctrl.physics.rotor import RotorModel
from suspended_ctrl.physics.tether import tether_wrench
from suspended_ctrl.physics.values import (
    CarrierCommand,
    CarrierPlan,
    CarrierSample,
    Estimate,
    RotorCommand,
    RotorSample,
    Wrench,
)
from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.rig import Rig

TURNING = ('live', 'holding', 'stopping')


class EffortAllocator:
    """
    Rotor and carrier commands for a wrench demand.

    Parameters
    ----------
    rig : Rig
    settings : EffortSettings
    strategy : Allocator, optional
        Made beforehand by the maker of the settings' name.

    Raises
    ------
    UnknownNameError
        If there is no such strategy.

    """

    def __init__(self, rig: Rig, settings: EffortSettings,
                 strategy: Allocator | None = None) -> None:
        self.rig = rig
        self.settings = settings
        self._use(strategy or ALLOCATORS.maker(settings.allocator)(rig))
        self._model = RotorModel(rig.rotors, rig.body.centre_of_mass_m)
        self._lead = Lead(rig, settings.transport_s, settings.lag_gain)
        self._rotors = RotorObserver(
            rig.rotors, max(0.0, settings.transport_s - 0.5 * settings.tick_s))
        self._carrier = CarrierObserver(rig.carrier)
        self._spare = PseudoInverse(rig)
        self._body = loaded_body(rig)
        self._payload_kg = 0.0
        self._reversible = np.ascontiguousarray(rig.rotors.reversible, dtype=bool)
        self._estimate: Estimate | None = None
        self._reference: Reference | None = None
        self._setpoint: Array | None = None
        self._rate = np.zeros(rig.rotors.count)
        self._state = 'locked'
        self._fallbacks = self._bad_demands = 0
        self._last: tuple[float, AllocationInputs] | None = None

    def swap_refusal(self, strategy: Allocator) -> str | None:
        """Why a strategy of this rig must not take over now, see ``swap``; None if it may."""
        return None if self._last is None or self._state not in TURNING else swap_refusal(
            self.rig, self._last[1], strategy.step(*self._last), self._setpoint,
            self.settings.tick_s)

    def swap(self, allocator: str, strategy: Allocator) -> None:
        """Change to a strategy of this rig, made by the maker of that name."""
        self._use(strategy)
        self.settings = replace(self.settings, allocator=allocator)

    def _use(self, strategy: Allocator) -> None:
        self._strategy = strategy
        # Asking a protocol takes longer than the tick's arithmetic.
        self._planner = strategy if isinstance(strategy, PlanningAllocator) else None

    def step(self, t: float, inputs: EffortInputs) -> EffortOutputs:
        """
        One tick, on a new demand.

        Parameters
        ----------
        t : float
            Now, s.
        inputs : EffortInputs
            What is new since the last step.

        Returns
        -------
        EffortOutputs
            Zero rotors and the carrier where it is, unless the state has the rotors turning.

        """
        self._take(t, inputs)
        stamp = t if inputs.demand is None else inputs.demand.stamp_s
        if inputs.safety_state not in TURNING or self._estimate is None:
            return self._at_rest(t, stamp)
        seen = self._seen(t, stamp, inputs.demand)
        self._last = t, seen
        allocation = self._allocated(t, seen)
        target = self._model.speed_for_thrust(allocation.thrust_n)
        rotors = self.rig.rotors
        command = led_command(self._rotors.speed_rad_s, target, rotors.speed_min_rad_s,
                              rotors.speed_max_rad_s, self._reversible, self.settings.lag_gain)
        # What is out is asked for its least speed: only by following that does it come back in.
        command = np.where(seen.healthy, command, rotors.speed_min_rad_s)
        self._rotors.commanded(command)
        self._note_rate(command)
        achieved = self._achieved(stamp, seen, target)
        self._lead.record(t, achieved)
        carrier = self._carrier_command(stamp, allocation)
        diagnostics = {'fallbacks': float(self._fallbacks),
                       'bad_demands': float(self._bad_demands),
                       'rotors_out': float(np.logical_not(seen.healthy).sum()),
                       **allocation.diagnostics}
        return EffortOutputs(RotorCommand(stamp, command), carrier, allocation.plan, achieved,
                             diagnostics)

    def plan_request(self, t: float) -> PlanRequest | None:
        """
        Say what the carrier's plan is to be made from, after the step at ``t``.

        Parameters
        ----------
        t : float
            Time of the step just made, s.

        Returns
        -------
        PlanRequest or None
            None unless a period is over, the rotors turn and the strategy plans.

        """
        if self._state not in TURNING or self._planner is None:
            return None
        return self._planner.plan_request(t)

    def solve_plan(self, request: PlanRequest) -> CarrierPlan:
        """Solve a request here; it may take milliseconds and belongs outside the tick."""
        assert self._planner is not None
        return self._planner.solve_plan(request)

    def take_plan(self, plan: CarrierPlan) -> None:
        """Bring the answer to a request, from here or from another process."""
        if self._planner is not None:
            self._planner.take_plan(plan)

    # ------------------------------------------------------------ what is known

    def _take(self, t: float, inputs: EffortInputs) -> None:
        if inputs.safety_state in TURNING and self._state not in TURNING:
            self._rotors.forgive()
        self._state = inputs.safety_state
        self._rotors.advance(t)
        self._carrier.advance(t)
        for sample in inputs.samples:
            if isinstance(sample, RotorSample):
                self._rotors.correct(sample)
            elif isinstance(sample, CarrierSample):
                self._carrier.correct(sample)
        if inputs.reference is not None:
            usable = len(inputs.reference.time_s) >= 2 and inputs.reference.end_s >= t
            self._reference = inputs.reference if usable else None
        if inputs.estimate is not None:
            self._estimate = inputs.estimate
            if inputs.estimate.payload.mass_kg != self._payload_kg:
                self._payload_kg = inputs.estimate.payload.mass_kg
                self._body = loaded_body(self.rig, inputs.estimate.payload)

    def _seen(self, t: float, stamp: float, demand: Wrench | None) -> AllocationInputs:
        assert self._estimate is not None
        rig, rotors = self.rig, self.rig.rotors
        felt = self._lead.predict(self._estimate, t, self._body)
        ahead = self._carrier.at(felt.stamp_s)
        anchor = rig.carrier.anchor_map(ahead[0])
        moving = ahead[1] @ rig.carrier.direction_map if rig.carrier.axes else np.zeros(3)
        pull = tether_wrench(rig.tether, rig.body.centre_of_mass_m, felt.position_map_m,
                             felt.velocity_map_m_s, felt.quaternion_wxyz, felt.rate_body_rad_s,
                             anchor, moving)
        hook = felt.position_map_m + rotate(felt.quaternion_wxyz, rig.tether.hook_m)
        span = anchor - hook
        length = float(np.sqrt(span @ span))
        up = span / length if length > 1e-6 else np.array([0.0, 0.0, 1.0])
        speed = self._rotors.speed_rad_s
        reach = reachable_speed(speed, rotors.speed_min_rad_s, rotors.speed_max_rad_s,
                                self._reversible, self.settings.lag_gain)
        lower, upper = self._model.thrust(reach[0]), self._model.thrust(reach[1])
        healthy = self._rotors.healthy
        if not healthy.all():
            left = self._model.thrust(self._rotors.measured_rad_s)
            lower, upper = np.where(healthy, lower, left), np.where(healthy, upper, left)
        tether = Wrench(stamp, pull[:3], pull[3:6])
        if demand is None or not demand.finite():
            # With nothing asked that could be asked, the tether carries and the rotors idle.
            self._bad_demands += 1
            demand = None
        return AllocationInputs(
            tether if demand is None else demand, tether,
            rotate_back(felt.quaternion_wxyz, up), self._other_torque(speed, felt.rate_body_rad_s),
            lower, upper, speed, healthy, True, felt, *self._carrier.at(t), self._reference,
            self._body, self._estimate.disturbance_force_map_n)

    def _other_torque(self, speed: Array, rate_body: Array) -> Array:
        """Spin-up and gyroscopic torque that the present commands lead to."""
        still = self._model.wrench(speed, np.zeros_like(speed), np.zeros(3))
        whole = self._model.wrench(speed, self._rate, rate_body)
        out: Array = whole[3:] - still[3:]
        return out

    def _note_rate(self, command: Array) -> None:
        # What a command gives now has died away by half when its thrust is felt; smoothing over
        # the lag left stands for that, and keeps one tick's torque from asking for the next one's.
        lag = self._lead.lag_s
        rate = (command - self._rotors.speed_rad_s) / self.rig.rotors.time_constant_s
        share = self.settings.tick_s / (lag + self.settings.tick_s)
        self._rate = self._rate + share * (rate - self._rate)

    def _allocated(self, t: float, seen: AllocationInputs) -> Allocation:
        allocation = self._strategy.step(t, seen)
        if allocation.fallback is None and np.isfinite(allocation.thrust_n).all():
            return allocation
        self._fallbacks += 1
        if np.isfinite(allocation.thrust_n).all():
            return allocation
        thrust = self._spare.thrust(rotor_wrench_wanted(seen), seen.thrust_lower_n,
                                    seen.thrust_upper_n, seen.healthy)
        return Allocation(thrust, allocation.carrier_position_m, allocation.carrier_velocity_m_s,
                          allocation.plan, 'not finite')

    def _achieved(self, stamp: float, seen: AllocationInputs, target: Array) -> Wrench:
        given = self._model.wrench(target, np.zeros_like(target), np.zeros(3))
        return Wrench(stamp, given[:3] + seen.tether.force_body_n,
                      given[3:] + seen.tether.torque_body_nm + seen.other_torque_body_nm)

    def _carrier_command(self, stamp: float, allocation: Allocation) -> CarrierCommand | None:
        if not self.rig.carrier.axes:
            return None
        if allocation.carrier_position_m is not None:
            assert allocation.carrier_velocity_m_s is not None
            self._setpoint = allocation.carrier_position_m
            return CarrierCommand(stamp, allocation.carrier_position_m,
                                  allocation.carrier_velocity_m_s)
        if self._setpoint is None:
            self._setpoint = self._carrier.position_m
        return CarrierCommand(stamp, self._setpoint, np.zeros(len(self.rig.carrier.axes)))

    def _at_rest(self, t: float, stamp: float) -> EffortOutputs:
        still = np.zeros(self.rig.rotors.count)
        self._rotors.commanded(still)
        self._rate = still
        self._setpoint = None
        self._lead.clear()
        carrier = None
        if self.rig.carrier.axes:
            carrier = CarrierCommand(stamp, self._carrier.position_m,
                                     np.zeros(len(self.rig.carrier.axes)))
        nothing = Wrench(stamp, np.zeros(3), np.zeros(3))
        if self._estimate is not None:
            nothing = self._seen(t, stamp, Wrench(stamp, np.zeros(3), np.zeros(3))).tether
        return EffortOutputs(RotorCommand(stamp, still), carrier, None, nothing,
                             {'fallbacks': float(self._fallbacks),
                              'bad_demands': float(self._bad_demands)})
