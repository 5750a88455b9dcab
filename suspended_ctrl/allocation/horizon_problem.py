"""
The carrier's plan for one axis over a horizon, as a reader of cvxpy sees it.

Seen from the wrench that the reference needs, an axis has at every moment a place from which the
tether alone would give it; what is missing to that place the rotors must hold by force. The
problem moves the axis' setpoint so that the square of that force, over time, becomes least. About
the vertical the axes do not influence one another, so each has a problem of its own.

The setpoint's acceleration is constant over each block; setpoint and axis then follow exactly:
``c' = v``, ``v' = u``, ``p' = (c - p) / T``.
"""

from dataclasses import dataclass

import cvxpy as cp
import numpy as np
from scipy.linalg import expm

from suspended_ctrl.rig.frozen import Array, frozen

# Blocks of the horizon: fine where the setpoint is used, coarse where it will be planned again.
BLOCKS_S = frozen([0.1] * 10 + [0.2] * 15 + [0.4] * 10)
# Price of squared acceleration against squared distance: 1 mm away for a tenth of a m/s^2. It
# makes the minimum unique and keeps a plan still where moving gains nothing.
_SMOOTH_S4 = 1e-4


@dataclass(frozen=True, eq=False)
class HorizonMaps:
    """
    States at the block ends from the state at the start and the blocks' accelerations.

    Attributes
    ----------
    time_s : ndarray, shape (h,)
        Block ends.
    axis_from_start, setpoint_from_start, speed_from_start : ndarray, shape (h, 3)
        Of (axis position, setpoint, setpoint speed) at the start.
    axis_from_acceleration, setpoint_from_acceleration, speed_from_acceleration : ndarray, (h, h)

    """

    time_s: Array
    axis_from_start: Array
    axis_from_acceleration: Array
    setpoint_from_start: Array
    setpoint_from_acceleration: Array
    speed_from_start: Array
    speed_from_acceleration: Array


def horizon_maps(time_constant_s: float, blocks_s: Array = BLOCKS_S) -> HorizonMaps:
    """
    Chain the blocks' exact discretisations.

    Parameters
    ----------
    time_constant_s : float
        Lag of the axis behind its setpoint.
    blocks_s : ndarray, shape (h,)
        Length of each block.

    Returns
    -------
    HorizonMaps

    """
    rate = np.zeros((4, 4))
    rate[0, :2] = [-1.0 / time_constant_s, 1.0 / time_constant_s]
    rate[1, 2] = 1.0
    rate[2, 3] = 1.0
    count = len(blocks_s)
    free = np.eye(3)
    forced = np.zeros((3, count))
    start = np.zeros((count, 3, 3))
    acceleration = np.zeros((count, 3, count))
    for k, span in enumerate(blocks_s):
        step = expm(rate * span)
        free = step[:3, :3] @ free
        forced = step[:3, :3] @ forced
        forced[:, k] += step[:3, 3]
        start[k], acceleration[k] = free, forced
    return HorizonMaps(frozen(np.cumsum(blocks_s)),
                       frozen(start[:, 0]), frozen(acceleration[:, 0]),
                       frozen(start[:, 1]), frozen(acceleration[:, 1]),
                       frozen(start[:, 2]), frozen(acceleration[:, 2]))


def build_horizon_problem(maps: HorizonMaps, blocks_s: Array = BLOCKS_S) -> cp.Problem:
    """
    Write the problem for axes of one time constant.

    Parameters
    ----------
    maps : HorizonMaps
        From ``horizon_maps``.
    blocks_s : ndarray, shape (h,)
        Length of each block.

    Returns
    -------
    cvxpy.Problem
        Variable ``acceleration`` (h,) in m/s^2. Parameters ``wanted`` (h,): place from which the
        tether gives everything, m; ``start`` (3,): axis, setpoint, setpoint speed; ``travel``
        (2,): least and greatest setpoint; ``speed``, ``acceleration_most`` (): limits.

    """
    count = len(blocks_s)
    acceleration = cp.Variable(count, name='acceleration')
    wanted = cp.Parameter(count, name='wanted')
    start = cp.Parameter(3, name='start')
    travel = cp.Parameter(2, name='travel')
    speed = cp.Parameter(nonneg=True, name='speed')
    acceleration_most = cp.Parameter(nonneg=True, name='acceleration_most')

    axis = maps.axis_from_start @ start + maps.axis_from_acceleration @ acceleration
    setpoint = maps.setpoint_from_start @ start + maps.setpoint_from_acceleration @ acceleration
    setpoint_speed = maps.speed_from_start @ start + maps.speed_from_acceleration @ acceleration
    # Each block end stands for half of the block before it and half of the one after.
    share = 0.5 * (np.asarray(blocks_s) + np.append(blocks_s[1:], blocks_s[-1]))
    cost = (cp.sum_squares(cp.multiply(np.sqrt(share), axis - wanted))
            + _SMOOTH_S4 * cp.sum_squares(cp.multiply(np.sqrt(blocks_s), acceleration)))
    return cp.Problem(cp.Minimize(cost), [
        -acceleration_most <= acceleration, acceleration <= acceleration_most,
        -speed <= setpoint_speed, setpoint_speed <= speed,
        travel[0] <= setpoint, setpoint <= travel[1]])
