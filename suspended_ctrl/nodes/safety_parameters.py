"""Parameters of ``safety_supervisor``: the limits that an integrator sets."""

from typing import Any

from pydantic import Field

from suspended_ctrl.nodes.parameters import NodeParameters
from suspended_ctrl.rig.rig import Rig
from suspended_ctrl.safety.settings import SafetySettings


def _limit(default: float, lower: float, upper: float, sentence: str) -> Any:
    return Field(default, ge=lower, le=upper, description=sentence)


class SafetySupervisorParameters(NodeParameters):
    """
    Parameters of ``safety_supervisor``.

    Names and defaults are those of ``safety.settings``, which has the reasons; the bounds keep a
    limit from being set where it protects nothing.
    """

    rate_hz: float = _limit(200.0, 50.0, 1000.0, 'Commands a second while no demand comes; each '
                            'rotor demand gives one at once.')
    heartbeat_silence_s: float = _limit(0.0, 0.0, 10.0, 'Longest silence on operator_heartbeat '
                                        'before the rig holds; 0 asks for no heartbeat.')
    emergency_stop_silence_s: float = _limit(0.2, 0.02, 0.2, "Silence on the emergency stop's "
                                             'line that is a stop.')
    pose_stale_s: float = _limit(0.6, 0.05, 1.0, 'Age by stamp of the newest pose, while live.')
    imu_gone_s: float = _limit(0.1, 0.01, 0.5, 'Silence of the IMU after which nothing bridges a '
                               'missing pose.')
    rotor_states_silence_s: float = _limit(0.15, 0.02, 1.0, 'Silence of the rotor telemetry.')
    carrier_states_silence_s: float = _limit(0.3, 0.05, 1.0, 'Silence of the carrier.')
    odometry_silence_s: float = _limit(0.075, 0.02, 0.08, 'Silence of the estimator.')
    demand_silence_s: float = _limit(0.08, 0.02, 0.08, 'Silence of the allocator; the drives cut '
                                     'after 80 ms by themselves.')
    carrier_demand_silence_s: float = _limit(0.35, 0.05, 0.5, 'Silence of the carrier demand.')
    position_3sigma_m: float = _limit(0.1, 0.005, 0.5, 'Uncertainty of position, 3 sigma, that '
                                      'starts a stop.')
    pose_disagreement_m: float = _limit(0.05, 0.005, 0.5, 'A pose this far from the odometry is '
                                        'not believed by it.')
    pose_disagreement_rad: float = _limit(0.15, 0.02, 0.8, 'The same for attitude.')
    tilt_rad: float = _limit(0.7, 0.05, 1.2, "Angle of the platform's z axis from the vertical.")
    rate_rad_s: float = _limit(4.0, 0.2, 8.0, 'Angular rate.')
    speed_m_s: float = _limit(3.5, 0.1, 6.0, 'Speed of the base_link origin.')
    hook_angle_rad: float = _limit(0.9, 0.1, 1.4, 'Angle between tether and platform z.')
    rotor_following_fraction: float = _limit(0.15, 0.05, 0.5, "Deviation of a rotor's speed from "
                                             'what was commanded, of that speed.')
    anchor_following_m: float = _limit(0.04, 0.005, 0.3, 'Deviation of a carrier axis from what '
                                       'was commanded.')
    rest_speed_m_s: float = _limit(0.06, 0.005, 0.2, 'At rest below this speed ...')
    rest_rate_rad_s: float = _limit(0.12, 0.01, 0.5, '... and this rate ...')
    rest_time_s: float = _limit(1.2, 0.2, 5.0, '... for this long.')
    stop_timeout_s: float = _limit(12.0, 1.0, 60.0, 'A stop that is not at rest by then is cut.')
    hold_timeout_s: float = _limit(60.0, 1.0, 600.0, 'A hold that nobody resets becomes a stop.')


def settings_of(parameters: SafetySupervisorParameters, rig: Rig) -> SafetySettings:
    """Derive the supervisor's settings for a rig."""
    given = parameters.model_dump(exclude={'rig', 'activate', 'rate_hz', 'heartbeat_silence_s'})
    return SafetySettings.for_rig(
        rig, period_s=1.0 / parameters.rate_hz,
        heartbeat_silence_s=parameters.heartbeat_silence_s or None,
        emergency_stop_required=rig.emergency_stop_required, **given)
