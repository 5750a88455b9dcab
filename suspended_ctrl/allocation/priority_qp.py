"""Rotors by the priority problem, the carrier trailing the reference."""

import numpy as np

from suspended_ctrl.allocation.carrier_trail import CarrierTrail
from suspended_ctrl.allocation.pseudo_inverse import PseudoInverse
from suspended_ctrl.allocation.rotor_qp import rotor_wrench_wanted, RotorQp
from suspended_ctrl.allocation.spin_sense import SpinSense
from suspended_ctrl.allocation.values import Allocation, AllocationInputs
from suspended_ctrl.physics.rotor import RotorModel
from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.rig import Rig


class RotorShare:
    """
    The rotors' part of both priority allocators.

    Parameters
    ----------
    rig : Rig

    """

    def __init__(self, rig: Rig) -> None:
        self.model = RotorModel(rig.rotors, rig.body.centre_of_mass_m)
        self._qp = RotorQp(self.model.wrench_per_thrust)
        self._sense = SpinSense(rig.rotors, self.model)
        self._spare = PseudoInverse(rig)

    def thrust(self, t: float,
               inputs: AllocationInputs) -> tuple[Array, str | None, dict[str, float]]:
        """
        Solve for this tick's thrusts.

        Returns
        -------
        thrust_n : ndarray, shape (n,)
        fallback : str or None
            What the solver said where the clipped pseudo-inverse had to stand in.
        diagnostics : dict of str to float

        """
        wrench = rotor_wrench_wanted(inputs)
        along = inputs.tether_direction_body
        lower, upper, rest = self._sense.bounds(t, inputs)
        answer = self._qp.solve(wrench, along, lower, upper, rest)
        if answer.thrust_n is None:
            spare = self._spare.thrust(wrench, lower, upper, inputs.healthy)
            return spare, answer.solution.status.value, {}
        solution = answer.solution
        self._sense.note(t, inputs, wrench, self._qp, answer)
        return answer.thrust_n, None, {
            'lateral_given_up_n': float(
                max(0.0, float(np.linalg.norm(wrench[:3] - along * (along @ wrench[:3])))
                    - float(solution['lateral']))),
            'qp_iterations': float(solution.iterations),
            'qp_residual': max(solution.primal_residual, solution.dual_residual, solution.gap)}


class PriorityQp:
    """
    Torque and tension before force across the tether; the anchor chases the reference.

    Parameters
    ----------
    rig : Rig

    """

    def __init__(self, rig: Rig) -> None:
        self._rotors = RotorShare(rig)
        self._trail = CarrierTrail(rig) if rig.carrier.axes else None
        self._goal: Array | None = None

    def step(self, t: float, inputs: AllocationInputs) -> Allocation:
        """
        Allocate one tick.

        Parameters
        ----------
        t : float
            Now, s.
        inputs : AllocationInputs
            What a strategy sees in one tick.

        Returns
        -------
        Allocation

        """
        thrust, fallback, diagnostics = self._rotors.thrust(t, inputs)
        if self._trail is None:
            return Allocation(thrust, fallback=fallback, diagnostics=diagnostics)
        if not self._trail.started:
            self._trail.start(t, inputs.anchor_position_m, inputs.anchor_velocity_m_s)
        position, velocity = self._trail.move(t, self._goal_at(t, inputs))
        return Allocation(thrust, position, velocity, fallback=fallback, diagnostics=diagnostics)

    def _goal_at(self, t: float, inputs: AllocationInputs) -> Array:
        assert self._trail is not None
        load = max(0.0, inputs.body.mass_kg - self._trail.unloaded_kg)
        if inputs.reference is not None:
            self._goal = self._trail.goal(inputs.reference.at(t).position_map_m, load)
        elif self._goal is None:
            # Held where it was found: from then on the goal must not run after the platform.
            self._goal = self._trail.goal(inputs.felt.position_map_m, load)
        return self._goal
