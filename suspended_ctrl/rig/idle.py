"""
Whether rotors that cannot stop can idle.

A rotor that turns one way and has a least speed always pushes. With such rotors live, the
platform rests only where their thrusts, each inside its own range, cancel out sideways and in
torque about the centre of mass; what is left may point up or down, since the tether carries
that, as long as it stays taut by its slack margin and under its working load. Reversible rotors
count with their whole range through zero: at rest they stand still.
"""

import numpy as np
from scipy.optimize import linprog

from suspended_ctrl.rig.frozen import Array

# Directions in a file are rounded to two to four digits: a hundredth of the forces at play.
IDLE_TOLERANCE = 0.01


def idle_residual(wrench_per_thrust: Array, thrust_min_n: Array, thrust_max_n: Array,
                  lift_min_n: float, lift_max_n: float) -> float:
    """
    Least share of the rotors' least thrusts that cannot be cancelled out.

    Parameters
    ----------
    wrench_per_thrust : ndarray, shape (6, n)
        Force (1) and torque about the centre of mass (m) in ``base_link`` axes of one newton.
    thrust_min_n, thrust_max_n : ndarray, shape (n,)
        Range of each rotor.
    lift_min_n, lift_max_n : float
        Range of the upward force that the tether can do with.

    Returns
    -------
    float
        Greatest of the sideways forces and of the torques that remain, forces over the sum of
        least thrusts, torques over that times the longest arm; 0 if every rotor may stop, inf if
        no thrusts keep the lift in its range.

    """
    count = len(thrust_min_n)
    force = float(np.maximum(thrust_min_n, 0.0).sum())
    if force == 0.0:
        return 0.0
    arm = float(np.abs(wrench_per_thrust[3:]).max())
    # In units of the least thrusts, so that the solver's absolute tolerance means the same
    # for rotors of any size.
    scale = np.array([1.0, 1.0, 0.0, *([1.0 / arm if arm else 0.0] * 3)])
    rows = (scale[:, None] * wrench_per_thrust)[[0, 1, 3, 4, 5]]
    slack = np.full((5, 1), -1.0)
    lift = np.append(wrench_per_thrust[2], 0.0)
    found = linprog(
        np.append(np.zeros(count), 1.0),
        A_ub=np.vstack((np.hstack((rows, slack)), np.hstack((-rows, slack)), lift, -lift)),
        b_ub=np.append(np.zeros(10), (lift_max_n / force, -lift_min_n / force)),
        bounds=[*zip(thrust_min_n / force, thrust_max_n / force, strict=True), (0.0, None)])
    return float(found.x[-1]) if found.status == 0 else np.inf
