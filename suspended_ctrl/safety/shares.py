"""The share of each limit that is used up now."""

import numpy as np

from suspended_ctrl.physics.kernel import INTEGER, kernel, OUT_VECTOR, REAL, TRUTH, VECTOR
from suspended_ctrl.rig.frozen import Array, frozen
from suspended_ctrl.rig.rig import Rig
from suspended_ctrl.safety import limits as row
from suspended_ctrl.safety import motion
from suspended_ctrl.safety.arrivals import Arrivals
from suspended_ctrl.safety.limits import Limit
from suspended_ctrl.safety.settings import SafetySettings

# Share of a limit that is broken or not, with nothing between.
_BROKEN = 2.0
# A pose this old is not judged any more beside the odometry.
_POSE_JUDGED_S = 0.1
_LOAD_SILENCE_S = 0.2
# Under this many slack margins of tension a missing share says little.
_TENSION_TOLD = 3.0


@kernel(OUT_VECTOR(VECTOR, VECTOR, TRUTH, TRUTH, OUT_VECTOR))
def _merge(pose: Array, odometry: Array, pose_known: bool, odometry_known: bool,
           used: Array) -> Array:
    """Worse of both judgements into the first rows; the better source's judgement back."""
    for i in range(motion.TENSION):
        used[i] = np.nan
        if pose_known:
            used[i] = pose[i]
        if odometry_known and not used[i] > odometry[i]:
            used[i] = odometry[i]
    if odometry_known:
        return odometry.copy()
    return pose.copy()


@kernel(INTEGER(REAL, VECTOR, OUT_VECTOR, VECTOR, VECTOR, TRUTH, OUT_VECTOR, OUT_VECTOR))
def hold_off(t: float, used: Array, since: Array, hold_off_s: Array, powered_only: Array,
             powered: bool, broken: Array, margin: Array) -> int:
    """
    Which limits are broken, and for how long.

    Parameters
    ----------
    t : float
    used : ndarray, shape (n,)
        Shares; nan where a row does not apply.
    since : ndarray, shape (n,)
        Kept between calls: when each row broke, infinity where it is not broken.
    hold_off_s, powered_only : ndarray, shape (n,)
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


class Shares:
    """
    Fills the shares of all limits from what arrived.

    Parameters
    ----------
    rig : Rig
    settings : SafetySettings
    limits : tuple of Limit

    Attributes
    ----------
    used : ndarray, shape (number of limits,)
        In the table's order; nan where a row does not apply.
    tension_n : float
        From the stretch; nan before the first pose.

    """

    def __init__(self, rig: Rig, settings: SafetySettings, limits: tuple[Limit, ...]) -> None:
        self._s = settings
        self._p = motion.parameters(rig, settings)
        self._telemetry = rig.sensors.rotor_states is not None
        self._axes = bool(rig.carrier.axes)
        self._told_n = _TENSION_TOLD * rig.tether.slack_margin_n
        self._working_n, self._slack_n = rig.tether.working_load_n, rig.tether.slack_margin_n
        self._zero = frozen(np.zeros(3))
        self._pose_used = np.zeros(motion.SIZE)
        self._odometry_used = np.zeros(motion.SIZE)
        self.used = np.full(len(limits), np.nan)
        self.tension_n = np.nan
        self._direction: Array = self._zero

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
        state : str
        in_state_s : float
            Time since the state was entered.
        settled : bool
            Whether the platform came to rest in this state.

        """
        s, used = self._s, self.used
        powered = state in ('live', 'stopping', 'holding')
        imu_fresh = t - seen.imu_at <= s.imu_gone_s
        rotors_fresh = t - seen.rotors_at <= s.rotor_states_silence_s
        self._judge_motion(t, seen)
        motion_tension = self.tension_n
        if imu_fresh:
            rate = seen.balance.rate_rad_s / s.rate_rad_s
            if not used[row.RATES] >= rate:
                used[row.RATES] = rate

        missing = np.nan
        if motion_tension > self._told_n:
            pull = motion_tension
            if imu_fresh and (rotors_fresh or not self._telemetry):
                pull = seen.balance.tension_n(seen.rotors.thrust_body_n, self._direction)
            if t - seen.load_at <= _LOAD_SILENCE_S:
                pull = min(pull, seen.load_n)
            missing = (motion_tension - pull) / (motion_tension * s.tether_lost_fraction)
        used[row.TETHER_LOST] = missing
        if t - seen.load_at <= _LOAD_SILENCE_S:
            load = max(seen.load_n, 1e-9)
            used[row.TETHER_SLACK] = max(used[row.TETHER_SLACK], self._slack_n / load)
            used[row.OVERLOAD] = max(used[row.OVERLOAD], load / self._working_n)

        used[row.EMERGENCY_STOP] = _BROKEN if seen.pressed else 0.0
        if s.emergency_stop_required:
            used[row.EMERGENCY_STOP_SILENT] = (t - seen.stop_at) / s.emergency_stop_silence_s
        used[row.TICK_LATE] = gap_s / s.tick_late_s
        used[row.CLOCK_JUMP] = abs(jump_s) / s.clock_jump_s
        used[row.PEER_GONE] = _BROKEN if seen.chain_gone else 0.0
        used[row.MISSION_GONE] = _BROKEN if seen.mission_gone else 0.0
        if s.heartbeat_silence_s is not None:
            used[row.OPERATOR_SILENT] = (t - seen.heartbeat_at) / s.heartbeat_silence_s

        used[row.ODOMETRY_STALE] = (t - seen.odometry_at) / s.odometry_silence_s
        used[row.DEMAND_STALE] = (t - seen.demand_at) / s.demand_silence_s
        used[row.DEMAND_OUT_OF_BOUNDS] = _BROKEN if seen.demand_refused else 0.0
        age = seen.now_s - seen.pose_stamp_s
        used[row.POSE_STALE] = age / (s.pose_stale_s if powered else s.input_missing_s)
        used[row.ESTIMATOR_INCONSISTENT] = seen.sigma3_m / s.position_3sigma_m

        if self._telemetry:
            used[row.ROTOR_STATES_STALE] = (t - seen.rotors_at) / s.rotor_states_silence_s
            used[row.ROTOR_OVERSPEED] = seen.rotors.overspeed if rotors_fresh else np.nan
            used[row.ROTOR_NOT_FOLLOWING] = seen.rotors.following if rotors_fresh else np.nan
        if self._axes:
            used[row.CARRIER_STATES_STALE] = (t - seen.carrier_at) / s.carrier_states_silence_s
            used[row.ANCHOR_TRAVEL] = seen.anchor.travel if seen.anchor.known else np.nan
            used[row.ANCHOR_FOLLOWING] = seen.anchor.following if seen.anchor.known else np.nan
            used[row.CARRIER_DEMAND_STALE] = (
                (t - seen.carrier_demand_at) / s.carrier_demand_silence_s
                if state == 'live' and seen.carrier_demand is not None else np.nan)

        used[row.STOP_TIMEOUT] = in_state_s / s.stop_timeout_s if state == 'stopping' else np.nan
        held = state == 'holding'
        used[row.HOLD_TIMEOUT] = in_state_s / s.hold_timeout_s if held else np.nan
        used[row.STANDSTILL] = np.nan
        if held and (settled or in_state_s > s.stop_timeout_s) and seen.odometry is not None:
            speed, rate = seen.speeds()
            used[row.STANDSTILL] = max(speed / s.held_speed_m_s, rate / s.held_rate_rad_s)

    def _judge_motion(self, t: float, seen: Arrivals) -> None:
        """Rows of ``motion.JUDGED`` and the agreement of pose and odometry."""
        anchor, odometry, pose = seen.anchor, seen.odometry, seen.pose
        if seen.odometry_new:
            seen.odometry_new = False
            assert odometry is not None
            self._odometry_used = motion.judge(
                odometry.position_map_m, odometry.velocity_map_m_s, odometry.quaternion_wxyz,
                odometry.rate_body_rad_s, anchor.anchor_map_m, anchor.velocity_map_m_s,
                seen.rotors.thrust_body_n, self._p)
        if seen.pose_new:
            seen.pose_new = False
            assert pose is not None
            # Without velocity: a pose alone tells places and angles.
            self._pose_used = motion.judge(
                pose[:3], self._zero, pose[3:], self._zero, anchor.anchor_map_m,
                self._zero, self._zero, self._p)
            if odometry is not None:
                self.used[row.POSE_REJECTED] = motion.disagreement(
                    pose, odometry.position_map_m, odometry.velocity_map_m_s,
                    odometry.quaternion_wxyz, odometry.rate_body_rad_s,
                    seen.pose_stamp_s - odometry.stamp_s, self._s.pose_disagreement_m,
                    self._s.pose_disagreement_rad)
        best = _merge(self._pose_used, self._odometry_used,
                      pose is not None and seen.now_s - seen.pose_stamp_s < _POSE_JUDGED_S,
                      odometry is not None, self.used)
        self.tension_n = float(best[motion.TENSION]) if odometry is not None else np.nan
        self._direction = best[motion.DIRECTION:]
