"""
The rotor problem as a reader of cvxpy sees it: thrusts for a wrench, inside each rotor's reach.

The wanted rotor wrench is split into what must be kept (torque, force along the tether) and the
force across the tether, of which the problem may take any share from nothing to all along its own
direction. Giving up a newton of that has a fixed price, while errors of what must be kept cost by
their square: below its reach the problem meets everything, beyond it the force across the tether
takes the whole deficit but for an error of ``price / (2 weight lever)``, 0.2 mN m here.
"""

from dataclasses import dataclass

import cvxpy as cp
import numpy as np

from suspended_ctrl.rig.frozen import Array


@dataclass(frozen=True)
class RotorWeights:
    """
    Prices in the rotor problem.

    Attributes
    ----------
    torque : float
        Of squared torque error, 1/(N m)^2.
    force : float
        Of squared force error along the tether and across the wanted direction, 1/N^2.
    lateral : float
        Of each newton given up across the tether, 1/N.
    effort : float
        Of squared thrust beyond rest, 1/N^2. Small enough never to outbid the others, great
        enough for one well-conditioned minimum.

    """

    torque: float = 1e4
    force: float = 1e2
    lateral: float = 1.0
    effort: float = 1e-3


def build_rotor_problem(wrench_per_thrust: Array,
                        weights: RotorWeights | None = None) -> cp.Problem:
    """
    Write the problem for one set of rotors.

    Parameters
    ----------
    wrench_per_thrust : ndarray, shape (6, n)
        Force and torque of one newton from each rotor.
    weights : RotorWeights, optional
        Of the terms of the objective.

    Returns
    -------
    cvxpy.Problem
        Variables ``thrust`` (n,) in N and ``lateral`` () in N. Parameters ``kept`` (6,): the
        wrench that must be kept; ``direction`` (3,): unit vector of the force across the tether;
        ``lateral_wanted`` (); ``lower``, ``upper`` (n,): reachable thrust; ``rest`` (n,): thrust
        of least effort.

    """
    w = weights or RotorWeights()
    count = np.shape(wrench_per_thrust)[1]
    thrust = cp.Variable(count, name='thrust')
    lateral = cp.Variable(name='lateral')
    kept = cp.Parameter(6, name='kept')
    direction = cp.Parameter(3, name='direction')
    lateral_wanted = cp.Parameter(nonneg=True, name='lateral_wanted')
    lower = cp.Parameter(count, name='lower')
    upper = cp.Parameter(count, name='upper')
    rest = cp.Parameter(count, name='rest')

    force_error = wrench_per_thrust[:3] @ thrust - kept[:3] - lateral * direction
    torque_error = wrench_per_thrust[3:] @ thrust - kept[3:]
    cost = (w.torque * cp.sum_squares(torque_error)
            + w.force * cp.sum_squares(force_error)
            + w.lateral * (lateral_wanted - lateral)
            + w.effort * cp.sum_squares(thrust - rest))
    return cp.Problem(cp.Minimize(cost), [lower <= thrust, thrust <= upper,
                                          lateral >= 0, lateral <= lateral_wanted])
