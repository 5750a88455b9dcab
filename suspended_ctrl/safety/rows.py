"""
Places of the limits in every array of shares and margins, and the kernels that work on them.

A share is what is used up of a limit: 1 is the limit, nan where the limit does not apply.
"""

from numba import types
import numpy as np

from suspended_ctrl.physics.kernel import INTEGER, kernel, OUT_VECTOR, REAL, TRUTH, VECTOR
from suspended_ctrl.rig.frozen import Array

# The first nine are those of motion.JUDGED. In the order of limits.limit_table.
(OUTSIDE, KEEP_IN, SWING, TILT, RATES, SPEED, TETHER_SLACK, OVERLOAD, HOOK_ANGLE, EMERGENCY_STOP,
 EMERGENCY_STOP_SILENT, CLOCK_JUMP, TICK_LATE, PEER_GONE, TETHER_LOST, ROTOR_OVERSPEED,
 ODOMETRY_STALE, DEMAND_STALE, DEMAND_OUT_OF_BOUNDS, STOP_TIMEOUT, ROTOR_NOT_FOLLOWING,
 ROTOR_STATES_STALE, POSE_STALE, POSE_REJECTED, ESTIMATOR_INCONSISTENT, CARRIER_STATES_STALE,
 ANCHOR_TRAVEL, ANCHOR_FOLLOWING, CARRIER_DEMAND_STALE, STANDSTILL, HOLD_TIMEOUT, MISSION_GONE,
 OPERATOR_SILENT) = range(33)
COUNT = 33

# Places of the arrival times.
(IMU, LOAD, STOP_LINE, HEARTBEAT, ODOMETRY, ROTOR_DEMAND, ROTORS, CARRIER,
 CARRIER_DEMAND) = range(9)
SENDERS = 9

# Under this many slack margins of tension a missing share says little.
_TENSION_TOLD = 3.0


@kernel(types.void(REAL, VECTOR, VECTOR, VECTOR, VECTOR, VECTOR, REAL, REAL, REAL, REAL,
                   OUT_VECTOR))
def fill_timed(t: float, at: Array, silence: Array, rotors: Array, anchor: Array, told: Array,
               load: float, slack_margin: float, working_load: float, missing_max: float,
               used: Array) -> None:
    """
    Fill the rows that depend on when something came last, after the judgement of motion.

    Parameters
    ----------
    t : float
        Now, s.
    at, silence : ndarray, shape (SENDERS,)
        Newest arrivals, and how long each sender may be silent; nan where it is not required.
        For ``IMU`` and ``LOAD`` the time for which a sample is used.
    rotors : ndarray, shape (3,)
        ``RotorWatch.compared``.
    anchor : ndarray, shape (2,)
        ``AnchorWatch.compared``.
    told : ndarray, shape (3,)
        From ``motion.judge_both``.
    load : float
        Newest of the load cell, N.
    slack_margin, working_load : float
        N.
    missing_max : float
        Share of the tension that may be missing.
    used : ndarray, shape (COUNT,)
        Out.

    """
    used[EMERGENCY_STOP_SILENT] = (t - at[STOP_LINE]) / silence[STOP_LINE]
    used[OPERATOR_SILENT] = (t - at[HEARTBEAT]) / silence[HEARTBEAT]
    used[ODOMETRY_STALE] = (t - at[ODOMETRY]) / silence[ODOMETRY]
    used[DEMAND_STALE] = (t - at[ROTOR_DEMAND]) / silence[ROTOR_DEMAND]
    used[ROTOR_STATES_STALE] = (t - at[ROTORS]) / silence[ROTORS]
    used[CARRIER_STATES_STALE] = (t - at[CARRIER]) / silence[CARRIER]
    used[POSE_REJECTED] = told[2]

    telemetry = used[ROTOR_STATES_STALE] <= 1.0
    used[ROTOR_NOT_FOLLOWING] = rotors[0] if telemetry else np.nan
    used[ROTOR_OVERSPEED] = rotors[2] if telemetry else np.nan
    measured = used[CARRIER_STATES_STALE] <= 1.0
    used[ANCHOR_TRAVEL] = anchor[0] if measured else np.nan
    used[ANCHOR_FOLLOWING] = anchor[1] if measured else np.nan

    cell = t - at[LOAD] <= silence[LOAD]
    if cell:
        used[TETHER_SLACK] = max(used[TETHER_SLACK], slack_margin / max(load, 1e-9))
        used[OVERLOAD] = max(used[OVERLOAD], load / working_load)
    used[TETHER_LOST] = np.nan
    stretch = told[0]
    if stretch > _TENSION_TOLD * slack_margin:
        pull = stretch
        if t - at[IMU] <= silence[IMU] and (telemetry or silence[ROTORS] != silence[ROTORS]):
            pull = told[1]
        if cell:
            pull = min(pull, load)
        used[TETHER_LOST] = (stretch - pull) / (stretch * missing_max)


@kernel(INTEGER(REAL, VECTOR, OUT_VECTOR, VECTOR, VECTOR, TRUTH, OUT_VECTOR, OUT_VECTOR))
def hold_off(t: float, used: Array, since: Array, hold_off_s: Array, powered_only: Array,
             powered: bool, broken: Array, margin: Array) -> int:
    """
    Which limits are broken, and for how long.

    Parameters
    ----------
    t : float
        Now, s.
    used : ndarray, shape (n,)
        Share of its limit that each row uses.
    since : ndarray, shape (n,)
        Kept between calls: when each row broke, infinity where it is not broken.
    hold_off_s, powered_only : ndarray, shape (n,)
        Of each row; whether it applies only under rotor power.
    powered : bool
        Whether rotor power is on.
    broken : ndarray, shape (n,)
        Out: 0 whole, 1 beyond its limit, 2 for longer than its hold-off.
    margin : ndarray, shape (n,)
        Out: what is left, from 1 down to -10; nan where a row does not apply.

    Returns
    -------
    int
        The greatest entry of ``broken``.

    """
    worst = 0
    for i in range(used.shape[0]):
        broken[i] = 0.0
        share = used[i]
        if share != share or (powered_only[i] > 0.0 and not powered):
            since[i] = np.inf
            margin[i] = np.nan
            continue
        margin[i] = max(1.0 - share, -10.0)
        if share <= 1.0:
            since[i] = np.inf
            continue
        if since[i] == np.inf:
            since[i] = t
        broken[i] = 2.0 if t - since[i] >= hold_off_s[i] - 1e-9 else 1.0
        worst = max(worst, int(broken[i]))
    return worst
