"""From the filter's state at the centre of mass to the estimate at the ``base_link`` origin."""

from numba import types
import numpy as np

from suspended_ctrl.estimation.dynamics import attitude_matrix
from suspended_ctrl.estimation.filter import ErrorStateFilter
from suspended_ctrl.physics.kernel import kernel, MATRIX, OUT_MATRIX, OUT_VECTOR, VECTOR
from suspended_ctrl.physics.rotation import normalised
from suspended_ctrl.physics.values import Estimate, Payload
from suspended_ctrl.rig.frozen import Array


@kernel(types.void(VECTOR, MATRIX, MATRIX, VECTOR, OUT_VECTOR, OUT_MATRIX))
def at_origin(x: Array, p: Array, r: Array, centre: Array, out: Array, covariance: Array) -> None:
    """
    Write position, velocity, disturbance torque and covariance of the ``base_link`` origin.

    Parameters
    ----------
    x, p : ndarray
        State and covariance of the filter, see ``dynamics``.
    r : ndarray, shape (3, 3)
        Body to map.
    centre : ndarray, shape (3,)
        Centre of mass from the origin, body axes.
    out : ndarray, shape (9,)
        Out: position and velocity of the origin, disturbance torque, all map.
    covariance : ndarray, shape (12, 12)
        Out: of position, attitude, velocity, rate.

    """
    swing = np.empty(3)
    swing[0] = x[11] * centre[2] - x[12] * centre[1]
    swing[1] = x[12] * centre[0] - x[10] * centre[2]
    swing[2] = x[10] * centre[1] - x[11] * centre[0]
    lever = np.empty((3, 3))
    turned = np.empty((3, 3))
    for i in range(3):
        out[i] = x[i]
        out[3 + i] = x[3 + i]
        out[6 + i] = 0.0
        for k in range(3):
            out[i] -= r[i, k] * centre[k]
            out[3 + i] -= r[i, k] * swing[k]
            out[6 + i] += r[i, k] * x[22 + k]
        # R [centre]x and R [rate x centre]x.
        lever[i, 0] = r[i, 1] * centre[2] - r[i, 2] * centre[1]
        lever[i, 1] = r[i, 2] * centre[0] - r[i, 0] * centre[2]
        lever[i, 2] = r[i, 0] * centre[1] - r[i, 1] * centre[0]
        turned[i, 0] = r[i, 1] * swing[2] - r[i, 2] * swing[1]
        turned[i, 1] = r[i, 2] * swing[0] - r[i, 0] * swing[2]
        turned[i, 2] = r[i, 0] * swing[1] - r[i, 1] * swing[0]
    rows = np.empty((12, 12))
    for k in range(12):
        for i in range(3):
            rows[i, k] = p[i, k]
            rows[3 + i, k] = p[3 + i, k]
            rows[6 + i, k] = p[6 + i, k]
            rows[9 + i, k] = p[9 + i, k]
            for m in range(3):
                rows[i, k] += lever[i, m] * p[3 + m, k]
                rows[6 + i, k] += turned[i, m] * p[3 + m, k] + lever[i, m] * p[9 + m, k]
    for k in range(12):
        for i in range(3):
            covariance[k, i] = rows[k, i]
            covariance[k, 3 + i] = rows[k, 3 + i]
            covariance[k, 6 + i] = rows[k, 6 + i]
            covariance[k, 9 + i] = rows[k, 9 + i]
            for m in range(3):
                covariance[k, i] += lever[i, m] * rows[k, 3 + m]
                covariance[k, 6 + i] += (turned[i, m] * rows[k, 3 + m]
                                         + lever[i, m] * rows[k, 9 + m])
    for i in range(12):
        for k in range(i):
            covariance[i, k] = covariance[k, i]


def estimate_of(state: ErrorStateFilter) -> Estimate:
    """
    Estimate at the stamp of a filter.

    Parameters
    ----------
    state : ErrorStateFilter
        The filter.

    Returns
    -------
    Estimate
        Its disturbance is what the nominal model does not explain, tether included: what a load
        cell added to the tension is part of it.

    """
    out, covariance = np.empty(9), np.empty((12, 12))
    x, u, r = state.x, state.u, np.empty((3, 3))
    attitude_matrix(x, r)
    at_origin(x, state.p, r, state.body.centre_m, out, covariance)
    force, torque = x[19:22].copy(), out[6:9]
    if u[23] != 0.0:
        hook = r @ state.body.vector[19:22]
        span = u[:3] - x[:3] - hook
        pull = u[23] / np.linalg.norm(span) * span
        force += pull
        torque = torque + np.cross(hook, pull)
    return Estimate(
        stamp_s=state.t, position_map_m=out[0:3], velocity_map_m_s=out[3:6],
        quaternion_wxyz=normalised(x[6:10]), rate_body_rad_s=x[10:13].copy(),
        covariance=covariance, disturbance_force_map_n=force, disturbance_torque_map_nm=torque,
        payload=state.body.payload, pose_stamp_s=state.accepted_s, valid=True)


def no_estimate() -> Estimate:
    """Make the estimate of one who knows nothing."""
    nothing = np.full(3, np.nan)
    return Estimate(
        stamp_s=float('nan'), position_map_m=nothing, velocity_map_m_s=nothing,
        quaternion_wxyz=np.full(4, np.nan), rate_body_rad_s=nothing,
        covariance=np.full((12, 12), np.nan), disturbance_force_map_n=nothing,
        disturbance_torque_map_nm=nothing, payload=Payload(), pose_stamp_s=float('nan'),
        valid=False)
