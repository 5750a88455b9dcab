"""
The table of limits: name, stop category of IEC 60204-1, hold-off, limit.

A row's measure is the share of the limit that is used up; 1 is the limit. What makes each share
is in ``shares`` and ``motion``. A row broken for its hold-off raises its category. Some rows get
worse: beyond ``cut`` (a multiple of the limit), and where nothing is left to stop with, category 0
applies in place of 1. Rows that are ``powered`` apply only while rotor power is on; all others are
checks that must be green before enable. Where several rows break at once the first in the table is
the cause that is named, category 0 before 1 before 2.
"""

from dataclasses import dataclass

from suspended_ctrl.rig.rig import Rig
from suspended_ctrl.safety.motion import JUDGED
from suspended_ctrl.safety.settings import SafetySettings


@dataclass(frozen=True)
class Limit:
    """
    One row.

    Attributes
    ----------
    name : str
    category : int
        Stop category: 0, 1 or 2.
    hold_off_s : float
        How long the limit must be broken without a break.
    limit : float
        The figure at share 1, in ``unit``.
    unit : str
        Suffix for names of figures; ``share`` for a pure number.
    meaning : str
    cut : float or None
        Share from which category 0 applies.
    powered : bool
        Whether it applies only while rotor power is on.
    lower : bool
        Whether the figure must stay above the limit; the share is then limit over figure.

    """

    name: str
    category: int
    hold_off_s: float
    limit: float
    unit: str
    meaning: str
    cut: float | None = None
    powered: bool = False
    lower: bool = False


def limit_table(rig: Rig, settings: SafetySettings) -> tuple[Limit, ...]:
    """Rows for a rig, in the order of every array of shares and margins."""
    s = settings
    motion = s.motion_hold_off_s
    rows = (
        # The first rows are those of motion.JUDGED, in its order.
        Limit('outside', 0, motion, 1.0, 'share', 'origin outside keep_in, of its half width'),
        Limit('keep_in', 1, motion, 1.0, 'share',
              'place where it could stop outside keep_in, of its half width'),
        Limit('swing', 1, motion, 1.0, 'share',
              'swing after a cut from here outside keep_in, of its half width'),
        Limit('tilt', 1, motion, s.tilt_rad, 'rad', 'angle of platform z from the vertical',
              s.tilt_cut_rad / s.tilt_rad),
        Limit('rates', 1, motion, s.rate_rad_s, 'rad_s', 'angular rate, odometry and gyroscope',
              s.rate_cut_rad_s / s.rate_rad_s),
        Limit('speed', 1, motion, s.speed_m_s, 'm_s', 'speed of the origin',
              s.speed_cut_m_s / s.speed_m_s),
        Limit('tether_slack', 1, motion, rig.tether.slack_margin_n, 'n', 'tension too low',
              lower=True),
        Limit('overload', 1, motion, rig.tether.working_load_n, 'n', 'tension too high'),
        Limit('hook_angle', 1, motion, s.hook_angle_rad, 'rad', 'tether from platform z'),
        Limit('emergency_stop', 0, 0.0, 1.0, 'share', 'emergency stop pressed'),
        Limit('emergency_stop_silent', 0, 0.0, s.emergency_stop_silence_s, 's',
              'silence on the emergency stop line'),
        Limit('clock_jump', 1, 0.0, s.clock_jump_s, 's', 'step of the ROS clock', powered=True),
        Limit('tick_late', 0, 0.0, s.tick_late_s, 's', 'gap between two steps', powered=True),
        Limit('peer_gone', 0, 0.0, 1.0, 'share', 'estimator, controller or allocator gone'),
        Limit('tether_lost', 0, 0.040, s.tether_lost_fraction, 'share',
              'tension missing from what the stretch gives', powered=True),
        Limit('rotor_overspeed', 0, 0.010, s.rotor_overspeed_fraction, 'share',
              'rotor speed of its greatest'),
        Limit('odometry_stale', 0, 0.0, s.odometry_silence_s, 's', 'silence of the estimator'),
        Limit('demand_stale', 0, 0.0, s.demand_silence_s, 's', 'silence of the allocator'),
        Limit('demand_out_of_bounds', 0, s.demand_refused_s, 1.0, 'share',
              'newest rotor demand refused'),
        Limit('stop_timeout', 0, 0.0, s.stop_timeout_s, 's', 'not at rest in time', powered=True),
        Limit('rotor_not_following', 1, s.rotor_following_hold_off_s, s.rotor_following_fraction,
              'share', 'rotor speed off what was commanded'),
        Limit('rotor_states_stale', 1, 0.0, s.rotor_states_silence_s, 's',
              'silence of the rotor telemetry'),
        Limit('pose_stale', 1, 0.0, s.pose_stale_s, 's', 'age by stamp of the newest pose'),
        Limit('pose_rejected', 1, s.pose_rejected_s, 1.0, 'share',
              'pose off the odometry, of what may be', s.pose_disagreement_cut),
        Limit('estimator_inconsistent', 1, 0.0, s.position_3sigma_m, 'm',
              '3 sigma of position', s.position_3sigma_cut_m / s.position_3sigma_m),
        Limit('carrier_states_stale', 1, 0.0, s.carrier_states_silence_s, 's',
              'silence of the carrier'),
        Limit('anchor_travel', 1, motion, 1.0, 'share', 'anchor past its travel, of the half'),
        Limit('anchor_following', 1, s.anchor_following_hold_off_s, s.anchor_following_m, 'm',
              'anchor off what was commanded'),
        Limit('carrier_demand_stale', 1, 0.0, s.carrier_demand_silence_s, 's',
              'silence of the carrier demand', powered=True),
        Limit('standstill', 1, 0.1, 1.0, 'share', 'moving while held', powered=True),
        Limit('hold_timeout', 1, 0.0, s.hold_timeout_s, 's', 'held for too long', powered=True),
        Limit('mission_gone', 2, 0.0, 1.0, 'share', 'mission player gone', powered=True),
        Limit('operator_silent', 2, 0.0, s.heartbeat_silence_s or 1.0, 's',
              "silence of the operator's client"),
    )
    assert tuple(row.name for row in rows[:len(JUDGED)]) == JUDGED
    return rows
