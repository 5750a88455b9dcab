"""The compiled rotor problem with the split of a demand by priority."""

from dataclasses import dataclass

import numpy as np

from suspended_ctrl.allocation.rotor_problem import build_rotor_problem, RotorWeights
from suspended_ctrl.allocation.values import AllocationInputs
from suspended_ctrl.physics.kernel import kernel, OUT_VECTOR, VECTOR
from suspended_ctrl.qp import CompiledQp, Solution
from suspended_ctrl.rig.frozen import Array


@kernel(OUT_VECTOR(VECTOR, VECTOR))
def _split(wrench: Array, along: Array) -> Array:
    """Kept wrench (6), direction of the force across ``along`` (3), its size (1)."""
    out = np.empty(10)
    held = wrench[0] * along[0] + wrench[1] * along[1] + wrench[2] * along[2]
    size = 0.0
    for i in range(3):
        out[i] = held * along[i]
        out[3 + i] = wrench[3 + i]
        across = wrench[i] - out[i]
        out[6 + i] = across
        size += across * across
    size = np.sqrt(size)
    out[9] = size
    if size > 1e-9:
        for i in range(3):
            out[6 + i] /= size
    else:
        # Nothing across: any unit vector across does, and none of it will be taken.
        out[9] = 0.0
        k = 0 if abs(along[0]) < 0.6 else 1
        out[6:9] = 0.0
        out[6 + k] = 1.0
        dot = along[k]
        norm = np.sqrt(1.0 - dot * dot)
        for i in range(3):
            out[6 + i] = (out[6 + i] - dot * along[i]) / norm
    return out


def rotor_wrench_wanted(inputs: AllocationInputs) -> Array:
    """Demand less the tether and less what spinning up gives by itself, shape (6,)."""
    wanted = inputs.demand.vector() - inputs.tether.vector()
    wanted[3:] -= inputs.other_torque_body_nm
    return wanted


@dataclass(frozen=True, eq=False, slots=True)
class RotorAnswer:
    """Thrust (n,) where solved, and the solution behind it."""

    thrust_n: Array | None
    solution: Solution


class RotorQp:
    """
    Thrusts for a rotor wrench, by priority.

    Parameters
    ----------
    wrench_per_thrust : ndarray, shape (6, n)
    weights : RotorWeights, optional

    """

    def __init__(self, wrench_per_thrust: Array, weights: RotorWeights | None = None) -> None:
        self.problem = CompiledQp(build_rotor_problem(wrench_per_thrust, weights))

    def solve(self, wrench: Array, along: Array, lower_n: Array, upper_n: Array,
              rest_n: Array) -> RotorAnswer:
        """
        Solve for one wrench.

        Parameters
        ----------
        wrench : ndarray, shape (6,)
            Wanted of the rotors, ``base_link`` axes.
        along : ndarray, shape (3,)
            Unit vector along the tether.
        lower_n, upper_n, rest_n : ndarray, shape (n,)
            Reachable thrust, and the thrust of least effort.

        Returns
        -------
        RotorAnswer
            Thrust within its bounds exactly; None where the solver found no optimum.

        Raises
        ------
        ParameterError
            If a number is not finite.

        """
        split = _split(wrench, along)
        solution = self.problem.solve({
            'kept': split[:6], 'direction': split[6:9], 'lateral_wanted': split[9],
            'lower': lower_n, 'upper': upper_n, 'rest': rest_n})
        if not solution.optimal:
            return RotorAnswer(None, solution)
        # The solver keeps bounds to rounding, not to the last bit.
        thrust = np.minimum(np.maximum(solution['thrust'], lower_n), upper_n)
        return RotorAnswer(thrust, solution)
