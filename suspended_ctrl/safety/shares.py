"""The share of each limit that is used up now."""

import numpy as np

from suspended_ctrl.rig.frozen import frozen
from suspended_ctrl.rig.rig import Rig
from suspended_ctrl.safety import motion, rows
from suspended_ctrl.safety.arrivals import Arrivals
from suspended_ctrl.safety.settings import SafetySettings

# A pose this old is not judged any more beside the odometry.
_POSE_JUDGED_S = 0.1
_LOAD_USED_S = 0.2


class Shares:
    """
    Fills the shares of all limits from what arrived.

    Parameters
    ----------
    rig : Rig
    settings : SafetySettings

    Attributes
    ----------
    used : ndarray, shape (rows.COUNT,)
        In the table's order; nan where a row does not apply.

    """

    def __init__(self, rig: Rig, settings: SafetySettings) -> None:
        s = self._s = settings
        self._p = motion.parameters(rig, settings)
        self._slack_n, self._working_n = rig.tether.slack_margin_n, rig.tether.working_load_n
        silence = np.full(rows.SENDERS, np.nan)
        silence[rows.IMU], silence[rows.LOAD] = s.imu_gone_s, _LOAD_USED_S
        silence[rows.ODOMETRY] = s.odometry_silence_s
        silence[rows.ROTOR_DEMAND] = s.demand_silence_s
        if s.emergency_stop_required:
            silence[rows.STOP_LINE] = s.emergency_stop_silence_s
        if s.heartbeat_silence_s is not None:
            silence[rows.HEARTBEAT] = s.heartbeat_silence_s
        if rig.sensors.rotor_states is not None:
            silence[rows.ROTORS] = s.rotor_states_silence_s
        if rig.carrier.axes:
            silence[rows.CARRIER] = s.carrier_states_silence_s
        self._silence = frozen(silence)
        self._pose_used = np.zeros(motion.SIZE)
        self._motion_used = np.zeros(motion.SIZE)
        self._told = np.full(3, np.nan)
        self.used = np.full(rows.COUNT, np.nan)

    def measure(self, t: float, gap_s: float, jump_s: float, seen: Arrivals, state: str,
                in_state_s: float, settled: bool) -> None:
        """
        Work out every share.

        Parameters
        ----------
        t : float
            Monotonic time of this step.
        gap_s, jump_s : float
            Time since the last step; step of the ROS clock against it.
        seen : Arrivals
            The newest of everything.
        state : str
            One of ``SAFETY_STATES``.
        in_state_s : float
            Time since the state was entered.
        settled : bool
            Whether the platform came to rest in this state.

        """
        s, used, at = self._s, self.used, seen.at
        pose_age = seen.now_s - seen.pose_stamp_s
        imu_rate = seen.balance.rate_rad_s if t - at[rows.IMU] <= s.imu_gone_s else np.nan
        motion.judge_both(
            seen.pose, seen.motion, seen.pose_new, seen.motion_new, pose_age < _POSE_JUDGED_S,
            seen.motion_known, seen.pose_stamp_s - seen.motion_stamp_s, imu_rate,
            seen.balance.state, seen.anchor.anchor, seen.rotors.thrust_body_n, self._p,
            self._pose_used, self._motion_used, used, self._told)
        seen.pose_new = seen.motion_new = False
        rows.fill_timed(t, at, self._silence, seen.rotors.compared, seen.anchor.compared,
                        self._told, seen.load_n, self._slack_n, self._working_n,
                        s.tether_lost_fraction, used)

        used[rows.EMERGENCY_STOP] = 2.0 * seen.pressed
        used[rows.PEER_GONE] = 2.0 * seen.chain_gone
        used[rows.MISSION_GONE] = 2.0 * seen.mission_gone
        used[rows.DEMAND_OUT_OF_BOUNDS] = 2.0 * seen.demand_refused
        used[rows.TICK_LATE] = gap_s / s.tick_late_s
        used[rows.CLOCK_JUMP] = max(abs(jump_s), abs(seen.pose_jump_s)) / s.clock_jump_s
        used[rows.ESTIMATOR_INCONSISTENT] = seen.sigma3_m / s.position_3sigma_m
        powered = state == 'live' or state == 'stopping' or state == 'holding'
        used[rows.POSE_STALE] = pose_age / (s.pose_stale_s if powered else s.input_missing_s)

        used[rows.CARRIER_DEMAND_STALE] = np.nan
        if state == 'live':
            if seen.carrier_demand is not None:
                silent = t - at[rows.CARRIER_DEMAND]
                used[rows.CARRIER_DEMAND_STALE] = silent / s.carrier_demand_silence_s
            used[rows.STOP_TIMEOUT] = used[rows.HOLD_TIMEOUT] = used[rows.STANDSTILL] = np.nan
            return
        held = state == 'holding'
        used[rows.STOP_TIMEOUT] = in_state_s / s.stop_timeout_s if state == 'stopping' else np.nan
        used[rows.HOLD_TIMEOUT] = in_state_s / s.hold_timeout_s if held else np.nan
        used[rows.STANDSTILL] = np.nan
        if held and (settled or in_state_s > s.stop_timeout_s):
            speed, rate = seen.speeds()
            used[rows.STANDSTILL] = max(speed / s.held_speed_m_s, rate / s.held_rate_rad_s)
