"""Every figure of the supervisor, with the reason for its default."""

from dataclasses import dataclass, field

from suspended_ctrl.rig.rig import Rig
from suspended_ctrl.safety.capability import least_reach_n, tolerates_rotor_loss


@dataclass(frozen=True)
class SafetySettings:
    """
    Settings of the supervisor; ``SafetySettings.for_rig`` fills in what the rig decides.

    Attributes
    ----------
    period_s : float
        Nominal time between steps.
    stop_deceleration_m_s2 : float
        Deceleration a category 1 stop can count on; half the rotors' least reach over the mass.
    stop_reaction_s : float
        From the trip to full deceleration: latency, a few ticks, two rotor lags.
    rotor_losses_tolerated : int
        Dead rotors with which the layout still reaches all six directions: none or one.
    emergency_stop_required : bool
        Whether silence on the emergency stop's line is a stop; the rig file says.
    emergency_stop_silence_s : float
        Architecture, section 5: 200 ms.
    heartbeat_silence_s : float or None
        Longest silence of the operator's client; None where no such client is configured.
    pose_stale_s : float
        Age by stamp of the newest usable pose while live. A gap of 0.5 s is bridged.
    pose_age_max_s : float
        A pose older than this on arrival is not used.
    input_missing_s : float
        Silence of a required sensor that locks the rig while it is not live.
    imu_gone_s : float
        Silence (40 samples at 400 Hz) after which nothing bridges a missing pose.
    rotor_states_silence_s, carrier_states_silence_s : float
        30 samples at 200 Hz, 15 at 50 Hz.
    odometry_silence_s : float
        15 ticks; a little less than the demand's so that a dead estimator is named.
    demand_silence_s : float
        With a tick and the transport, zero is at the rotors within 120 ms; equals the drivers' own
        watchdog.
    carrier_demand_silence_s : float
        Three carrier periods and a half.
    stamp_age_max_s, carrier_stamp_age_max_s, stamp_ahead_max_s : float
        Odometry and demands outside this window around now are refused, whatever their content; a
        carrier demand takes effect a carrier period after what it started from. A pose ahead of
        now by more than the last is refused too.
    position_3sigma_m, position_3sigma_cut_m : float
        Position uncertainty that starts a stop, and that ends it.
    pose_disagreement_m, pose_disagreement_rad, pose_rejected_s, pose_disagreement_cut : float
        A pose this far from the odometry is not believed by it; for this long is a trip. Far over
        the innovations of a sound filter (millimetres), under what a marker swap gives. At this
        many times as far nobody knows where the platform is, and a stop under power is cut.
    tilt_rad, tilt_cut_rad : float
        Angle between the platform's z and the vertical; the second while stopping.
    rate_rad_s, rate_cut_rad_s, speed_m_s, speed_cut_m_s : float
        Over the fastest missions (2.4 m/s) by a half.
    hook_angle_rad : float
        Between tether and platform z.
    motion_hold_off_s : float
        Four poses at 200 Hz: a single outlier is no trip.
    rotor_following_fraction, rotor_following_hold_off_s, rotor_window_s : float
        Deviation of a measured speed from what it should be, of that speed; predictions this far
        back count as right, for the transport's delay.
    rotor_overspeed_fraction : float
        Over greatest speed by 8 sigma of a 1 % sensor.
    tether_lost_fraction : float
        Share of the tension expected from the stretch that load cell or accelerometer miss.
    anchor_travel_tolerance_m, anchor_following_m, anchor_following_hold_off_s : float
        Past the end of travel; between measured axis and carrier model.
    anchor_deadband_m : float
        Before power the commanded anchor is the last measured one; it is moved when the measured
        one leaves it by this, so that noise does not creep through the drive. 4 sigma.
    demand_clip_fraction : float
        Overshoot of a bound, of the range, that is clipped as rounding; beyond it is refused.
    demand_refused_s : float
        Nothing but refused demands for this long is a trip.
    tick_late_s : float
        A longer gap between steps has let the drivers' own watchdog cut.
    clock_jump_s : float
        Step of the ROS clock against the monotonic clock.
    rest_speed_m_s, rest_rate_rad_s, rest_time_s, stop_timeout_s : float
        Architecture, section 5.
    held_speed_m_s, held_rate_rad_s : float
        Standstill watch of a category 2 hold, from rest or ``stop_timeout_s`` on; four times rest.
    hold_timeout_s : float
        A category 2 hold that nobody acknowledges becomes a category 1 stop.
    chain : tuple of str
        Peers without which no controlled stop is possible.
    mission_peer : str
        Peer without which the rig holds.

    """

    stop_deceleration_m_s2: float
    rotor_losses_tolerated: int = 0
    period_s: float = 0.005
    stop_reaction_s: float = 0.15
    emergency_stop_required: bool = True
    emergency_stop_silence_s: float = 0.200
    heartbeat_silence_s: float | None = None
    pose_stale_s: float = 0.60
    pose_age_max_s: float = 0.15
    input_missing_s: float = 0.20
    imu_gone_s: float = 0.10
    rotor_states_silence_s: float = 0.15
    carrier_states_silence_s: float = 0.30
    odometry_silence_s: float = 0.075
    demand_silence_s: float = 0.080
    carrier_demand_silence_s: float = 0.35
    stamp_age_max_s: float = 0.20
    carrier_stamp_age_max_s: float = 0.50
    stamp_ahead_max_s: float = 0.05
    position_3sigma_m: float = 0.10
    position_3sigma_cut_m: float = 0.50
    pose_disagreement_m: float = 0.05
    pose_disagreement_rad: float = 0.15
    pose_rejected_s: float = 0.20
    pose_disagreement_cut: float = 6.0
    tilt_rad: float = 0.70
    tilt_cut_rad: float = 1.30
    rate_rad_s: float = 4.0
    rate_cut_rad_s: float = 8.0
    speed_m_s: float = 3.5
    speed_cut_m_s: float = 6.0
    hook_angle_rad: float = 0.90
    motion_hold_off_s: float = 0.020
    rotor_following_fraction: float = 0.15
    rotor_following_hold_off_s: float = 0.010
    rotor_window_s: float = 0.030
    rotor_overspeed_fraction: float = 1.08
    tether_lost_fraction: float = 0.75
    anchor_travel_tolerance_m: float = 0.02
    anchor_following_m: float = 0.04
    anchor_following_hold_off_s: float = 0.10
    anchor_deadband_m: float = 0.002
    demand_clip_fraction: float = 1e-3
    demand_refused_s: float = 0.020
    tick_late_s: float = 0.080
    clock_jump_s: float = 0.10
    rest_speed_m_s: float = 0.06
    rest_rate_rad_s: float = 0.12
    rest_time_s: float = 1.2
    stop_timeout_s: float = 12.0
    held_speed_m_s: float = 0.24
    held_rate_rad_s: float = 0.48
    hold_timeout_s: float = 60.0
    chain: tuple[str, ...] = field(
        default=('state_estimator', 'wrench_controller', 'effort_allocator'))
    mission_peer: str = 'mission_player'

    @classmethod
    def for_rig(cls, rig: Rig, **changes: object) -> 'SafetySettings':
        """
        Defaults for a rig.

        Parameters
        ----------
        rig : Rig
            The hardware.
        **changes : object
            Any attribute, instead of its default.

        Returns
        -------
        SafetySettings

        """
        derived: dict[str, object] = {}
        if 'stop_deceleration_m_s2' not in changes:
            derived['stop_deceleration_m_s2'] = 0.5 * least_reach_n(rig) / rig.body.mass_kg
        if 'rotor_losses_tolerated' not in changes:
            derived['rotor_losses_tolerated'] = int(tolerates_rotor_loss(rig))
        if 'emergency_stop_required' not in changes:
            derived['emergency_stop_required'] = rig.emergency_stop_required
        return cls(**derived, **changes)  # type: ignore[arg-type]
