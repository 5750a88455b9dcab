"""What the rotors can still do, found once when the supervisor is set up."""

from functools import lru_cache

import numpy as np
from scipy.optimize import linprog

from suspended_ctrl.physics.rotor import RotorModel
from suspended_ctrl.rig.frozen import Array
from suspended_ctrl.rig.rig import Rig

# A layout that keeps this share of its reach in every direction flies on with a rotor out.
REACH_KEPT_MIN = 0.25


def _reach(columns: Array, lower: Array, upper: Array) -> Array:
    """Greatest force and torque in both senses of six axes, the rest zero, shape (12,)."""
    # A linear programme an axis: facets of the whole set grow with the fifth power of the number
    # of rotors, and this runs once.
    count = columns.shape[1]
    out = np.zeros(12)
    bounds = [*zip(lower, upper, strict=True), (0.0, None)]
    cost = np.append(np.zeros(count), -1.0)
    for k in range(12):
        direction = np.zeros((6, 1))
        direction[k // 2] = -1.0 if k % 2 else 1.0
        answer = linprog(cost, A_eq=np.hstack((columns, -direction)), b_eq=np.zeros(6),
                         bounds=bounds)
        out[k] = answer.x[-1] if answer.status == 0 else 0.0
    return out


@lru_cache(maxsize=8)
def _full_reach(rig: Rig) -> Array:
    model = RotorModel(rig.rotors, rig.body.centre_of_mass_m)
    return _reach(model.wrench_per_thrust, model.thrust_min_n, model.thrust_max_n)


def least_reach_n(rig: Rig) -> float:
    """Least force in N that the rotors reach along either sense of the three body axes."""
    return float(_full_reach(rig)[:6].min())


@lru_cache(maxsize=8)
def tolerates_rotor_loss(rig: Rig) -> bool:
    """
    Whether any one rotor can be lost with all six directions still in reach.

    Parameters
    ----------
    rig : Rig
        The hardware.

    Returns
    -------
    bool
        True if the others, none below its idle, keep a quarter of the full reach in each of the
        twelve senses.

    """
    model = RotorModel(rig.rotors, rig.body.centre_of_mass_m)
    columns = model.wrench_per_thrust
    full = _full_reach(rig)
    for i in range(rig.rotors.count):
        kept = np.arange(rig.rotors.count) != i
        if np.linalg.matrix_rank(columns[:, kept]) < 6:
            return False
        left = _reach(columns[:, kept], model.thrust_min_n[kept], model.thrust_max_n[kept])
        if (left < REACH_KEPT_MIN * full).any():
            return False
    return True
