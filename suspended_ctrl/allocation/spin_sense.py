"""
Which way each reversible rotor turns.

A reversible rotor cannot hold a speed below its least magnitude, so each has a sense at any time
and its thrust stays on that side: ``[T(min), T(max)]`` or its mirror image. A sense is changed
only when it pays: when the problem with the band left out costs less by more than a threshold for
longer than a dwell, and not again for a while.
"""

import numpy as np

from suspended_ctrl.allocation.rotor_qp import RotorAnswer, RotorQp
from suspended_ctrl.allocation.values import AllocationInputs
from suspended_ctrl.physics.rotor import RotorModel
from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.rig import Rotors

# The cost of a problem is in newtons given up across the tether: this many, for this long.
_PAYS_N = 1.0
_DWELL_S = 0.03
_STAY_S = 0.5


class SpinSense:
    """
    Sense of rotation of every rotor, with hysteresis.

    Parameters
    ----------
    rotors : Rotors
    model : RotorModel

    Attributes
    ----------
    sense : ndarray, shape (n,)
        +1 or -1.
    reversals : int
        Changes of sense so far, summed over rotors.

    """

    def __init__(self, rotors: Rotors, model: RotorModel) -> None:
        self._reversible = np.asarray(rotors.reversible, dtype=bool)
        self._any = bool(self._reversible.any())
        self._least = np.array(model.thrust(rotors.speed_min_rad_s))
        self.sense = np.ones(rotors.count)
        self.reversals = 0
        self._paying_since: float | None = None
        self._changed_at = -np.inf

    def bounds(self, t: float, inputs: AllocationInputs) -> tuple[Array, Array, Array]:
        """
        Bounds on this side of the band, and the thrust of least effort.

        Returns
        -------
        lower_n, upper_n, rest_n : ndarray, shape (n,)

        """
        rest = self._least * self.sense * inputs.healthy
        lower, upper = inputs.thrust_lower_n, inputs.thrust_upper_n
        if not self._any:
            return lower, upper, rest
        return *self._side(self.sense, inputs), rest

    def _side(self, sense: Array, inputs: AllocationInputs) -> tuple[Array, Array]:
        """Cut the bounds to the side of ``sense``; what is out of reach yet, as near as it can."""
        lower, upper = inputs.thrust_lower_n, inputs.thrust_upper_n
        cut = self._reversible & inputs.healthy
        low = np.where(cut & (sense > 0.0), np.minimum(np.maximum(lower, self._least), upper),
                       lower)
        high = np.where(cut & (sense < 0.0), np.maximum(np.minimum(upper, -self._least), lower),
                        upper)
        return low, high

    def note(self, t: float, inputs: AllocationInputs, wrench: Array, qp: RotorQp,
             answer: RotorAnswer) -> None:
        """Look at ``t`` if another sense would pay, by this tick's ``qp`` and its answer."""
        if not self._any or t - self._changed_at < _STAY_S:
            return
        cost = answer.solution.objective
        if cost < _PAYS_N:
            # No other sense can save more than all of it.
            self._paying_since = None
            return
        along = inputs.tether_direction_body
        free = qp.solve(wrench, along, inputs.thrust_lower_n, inputs.thrust_upper_n,
                        np.zeros_like(self.sense))
        if free.thrust_n is None:
            return
        wanted = np.where(self._reversible & inputs.healthy & (free.thrust_n != 0.0),
                          np.sign(free.thrust_n), self.sense)
        if (wanted == self.sense).all():
            self._paying_since = None
            return
        lower, upper = self._side(wanted, inputs)
        other = qp.solve(wrench, along, lower, upper, self._least * wanted * inputs.healthy)
        if other.thrust_n is None or other.solution.objective > cost - _PAYS_N:
            self._paying_since = None
            return
        if self._paying_since is None:
            self._paying_since = t
        elif t - self._paying_since >= _DWELL_S:
            self.reversals += int((wanted != self.sense).sum())
            self.sense = wanted
            self._changed_at = t
            self._paying_since = None
