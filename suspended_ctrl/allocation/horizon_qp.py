"""Rotors by the priority problem, the anchor planned over a preview of the reference."""

import numpy as np

from suspended_ctrl.allocation.carrier_plan import (
    CarrierPlanner,
    HORIZON_S,
    PERIOD_S,
    PlanRequest,
    SetpointPlan,
)
from suspended_ctrl.allocation.priority_qp import RotorShare
from suspended_ctrl.allocation.values import Allocation, AllocationInputs
from suspended_ctrl.allocation.wanted_anchor import needed_force
from suspended_ctrl.physics.carrier import carrier_step
from suspended_ctrl.physics.reference import held, Reference
from suspended_ctrl.physics.values import CarrierPlan
from suspended_ctrl.rig.frozen import Array, frozen
from suspended_ctrl.rig.rig import Rig

# A plan follows the disturbance more slowly than the estimator's noise comes and goes.
_DISTURBANCE_S = 0.5
# Steps in which the axes are followed to the moment a plan takes effect.
_STEPS = 5


class HorizonQp:
    """
    Torque and tension before force across the tether; the tether carries what is slow.

    Planning is kept out of ``step``: ``plan_request`` says, once a period, what to plan from;
    ``take_plan`` brings the answer, which is followed from the moment the request names.

    Parameters
    ----------
    rig : Rig

    """

    def __init__(self, rig: Rig) -> None:
        self.rig = rig
        self._rotors = RotorShare(rig)
        self._plan: SetpointPlan | None = None
        self._next: SetpointPlan | None = None
        self._due_s = -np.inf
        self._seen: AllocationInputs | None = None
        self._disturbance: Array | None = None
        self._t = 0.0
        self._hold: Reference | None = None
        self._late = 0
        self._failed = 0
        self._planner: CarrierPlanner | None = None

    def step(self, t: float, inputs: AllocationInputs) -> Allocation:
        """
        Allocate one tick, following the plan there is.

        Parameters
        ----------
        t : float
            Now, s.
        inputs : AllocationInputs
            What a strategy sees in one tick.

        Returns
        -------
        Allocation
            ``plan`` in the tick in which a new one takes effect.

        """
        thrust, fallback, diagnostics = self._rotors.thrust(t, inputs)
        self._note(t, inputs)
        if not self.rig.carrier.axes:
            return Allocation(thrust, fallback=fallback, diagnostics=diagnostics)
        new = None
        if self._next is not None and t >= self._next.stamp_s - 1e-9:
            new = self._plan = self._next
            self._next = None
        setpoint, speed = self._setpoint(t, inputs)
        diagnostics.update(plans_late=float(self._late), plans_failed=float(self._failed))
        return Allocation(thrust, setpoint, speed, new, fallback, diagnostics)

    def _note(self, t: float, inputs: AllocationInputs) -> None:
        dt = max(t - self._t, 0.0)
        self._t = t
        self._seen = inputs
        force = inputs.disturbance_force_map_n
        if self._disturbance is None:
            self._disturbance = np.array(force)
        else:
            self._disturbance = (self._disturbance
                                 + min(dt / _DISTURBANCE_S, 1.0) * (force - self._disturbance))

    def _setpoint(self, t: float, inputs: AllocationInputs) -> tuple[Array, Array]:
        if self._plan is None:
            # Rest where it is until the first plan takes effect.
            carrier = self.rig.carrier
            place = np.clip(inputs.anchor_position_m, carrier.min_m, carrier.max_m)
            still = np.zeros((1, len(place)))
            self._plan = SetpointPlan(t, frozen([0.0]), frozen([place]), frozen(still),
                                      frozen([place]), frozen(still))
        return self._plan.setpoint_at(t)

    def plan_request(self, t: float) -> PlanRequest | None:
        """
        Say what to plan from now, once a period.

        Parameters
        ----------
        t : float
            Time of the step just made, s.

        Returns
        -------
        PlanRequest or None
            None when the period is not over yet, or there is no carrier or no state.

        """
        if self._seen is None or self._plan is None or t < self._due_s - 1e-9:
            return None
        self._due_s = t + PERIOD_S
        effect = t + PERIOD_S
        seen = self._seen
        axis, axis_speed, setpoint, speed = self._expected(t, effect)
        return PlanRequest(effect, frozen(axis), frozen(axis_speed), frozen(setpoint),
                           frozen(speed), frozen(self._needed(effect, seen)))

    def _expected(self, t: float, effect: float) -> tuple[Array, Array, Array, Array]:
        """Axes, their speeds, setpoints, their speeds at ``effect``, by the plan in force."""
        assert self._plan is not None
        assert self._seen is not None
        carrier = self.rig.carrier
        place, speed = self._seen.anchor_position_m, self._seen.anchor_velocity_m_s
        dt = (effect - t) / _STEPS
        for step in range(_STEPS):
            target, _ = self._plan.setpoint_at(t + (step + 0.5) * dt)
            place, speed = carrier_step(carrier, place, speed, target, dt)
        return place, speed, *self._plan.setpoint_at(effect)

    def _needed(self, effect: float, seen: AllocationInputs) -> Array:
        """Return hook and force that the reference asks for at the block ends, shape (h, 6)."""
        reference = seen.reference
        if reference is None:
            if self._hold is None:
                self._hold = held(seen.felt.position_map_m, seen.felt.quaternion_wxyz, effect)
            reference = self._hold
        else:
            self._hold = None
        points = [reference.at(effect + ahead) for ahead in HORIZON_S]
        assert self._disturbance is not None
        needed: Array = needed_force(
            np.array([p.position_map_m for p in points]),
            np.array([p.quaternion_wxyz for p in points]),
            np.array([p.acceleration_map_m_s2 for p in points]), self._disturbance,
            self.rig.tether.hook_m, seen.body.mass_kg)
        return needed

    def prepare(self) -> None:
        """Compile the planner's problems now, not when the first plan is asked for."""
        if self._planner is None:
            self._planner = CarrierPlanner(self.rig)

    def solve_plan(self, request: PlanRequest) -> SetpointPlan:
        """Solve a request here; another process uses a ``CarrierPlanner`` of its own."""
        self.prepare()
        assert self._planner is not None
        return self._planner.solve(request)

    def take_plan(self, plan: CarrierPlan) -> None:
        """
        Bring the answer to a request; one whose moment has passed is counted and dropped.

        Parameters
        ----------
        plan : CarrierPlan
            As ``solve_plan`` returned it.

        """
        assert isinstance(plan, SetpointPlan)
        if plan.stamp_s < self._t - 1e-9:
            self._late += 1
            return
        self._failed += plan.failure is not None
        self._next = plan
