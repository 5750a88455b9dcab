"""The baseline everyone knows: least-squares thrusts, clipped, anchor held."""

import numpy as np

from suspended_ctrl.allocation.rotor_qp import rotor_wrench_wanted
from suspended_ctrl.allocation.values import Allocation, AllocationInputs
from suspended_ctrl.physics.rotor import RotorModel
from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.rig import Rig


class PseudoInverse:
    """
    Thrusts of least norm for the wrench, each then clipped to what it can reach.

    Parameters
    ----------
    rig : Rig

    """

    def __init__(self, rig: Rig) -> None:
        model = RotorModel(rig.rotors, rig.body.centre_of_mass_m)
        self._wrench_per_thrust = model.wrench_per_thrust
        self._everything = np.ones(rig.rotors.count, dtype=bool)
        self._healthy = self._everything
        self._inverse = np.linalg.pinv(self._wrench_per_thrust)

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
            The carrier is left where it is.

        """
        return Allocation(self.thrust(rotor_wrench_wanted(inputs), inputs.thrust_lower_n,
                                      inputs.thrust_upper_n, inputs.healthy))

    def thrust(self, wrench: Array, lower_n: Array, upper_n: Array, healthy: Array) -> Array:
        """
        Clipped least-squares thrusts, shape (n,).

        Parameters
        ----------
        wrench : ndarray, shape (6,)
            Wanted of the rotors.
        lower_n, upper_n : ndarray, shape (n,)
            Reachable thrust.
        healthy : ndarray of bool, shape (n,)
            The others give what their bounds say.

        """
        if not np.array_equal(healthy, self._healthy):
            self._healthy = healthy.copy()
            self._inverse = np.linalg.pinv(self._wrench_per_thrust * healthy)
        fixed = np.where(healthy, 0.0, lower_n)
        free = self._inverse @ (wrench - self._wrench_per_thrust @ fixed)
        return np.asarray(np.minimum(np.maximum(free + fixed, lower_n), upper_n))
