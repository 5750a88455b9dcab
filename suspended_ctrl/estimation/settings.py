"""How much the filter trusts what."""

from dataclasses import dataclass

from suspended_ctrl.rig.rig import Rig


@dataclass(frozen=True)
class EstimatorSettings:
    """
    Noise and limits of the estimator.

    Attributes
    ----------
    position_noise_m, attitude_noise_rad : float
        Pose, 1 sigma each axis.
    rate_noise_rad_s, force_noise_m_s2 : float
        Gyroscope and accelerometer, 1 sigma a sample each axis.
    rate_bias_rad_s, force_bias_m_s2 : float
        Spread of their biases at start.
    pose_period_s : float
        Time between poses.
    force_white_n_s05, torque_white_nm_s05 : float
        Root density of white force and torque that the model does not explain, each axis.
    force_walk_n_s05, torque_walk_nm_s05 : float
        Root density of the random walk of the disturbances, N/s^0.5 and N m/s^0.5.
    rate_bias_walk, force_bias_walk : float
        Of the biases, rad/s^1.5 and m/s^2.5.
    rotor_noise_fraction : float
        Of the measured speeds.
    rotor_index, carrier_index : float
        Tracking indices of the filters of rotor speeds and anchor.
    gate_probability : float
        Share of good poses that pass the gate.
    recovery_s : float
        Poses refused for so long are believed.
    history_s : float
        How late a sample may come.
    alignment_s : float
        Length of the window at start in which the rig must be still; 0 starts from the first pose.
    still_m_s, still_rad_s : float
        Rates above which it is not still.
    moving_m_s, moving_rad_s : float
        Spread of the rates of a platform that starts without that window.

    """

    position_noise_m: float
    attitude_noise_rad: float
    rate_noise_rad_s: float = 0.005
    force_noise_m_s2: float = 0.05
    rate_bias_rad_s: float = 0.01
    force_bias_m_s2: float = 0.1
    pose_period_s: float = 0.005
    force_white_n_s05: float = 0.01
    torque_white_nm_s05: float = 0.004
    force_walk_n_s05: float = 1.2
    torque_walk_nm_s05: float = 0.3
    rate_bias_walk: float = 1e-5
    force_bias_walk: float = 1e-4
    rotor_noise_fraction: float = 0.0
    rotor_index: float = 0.2
    carrier_index: float = 0.3
    gate_probability: float = 0.999
    recovery_s: float = 0.3
    history_s: float = 0.6
    alignment_s: float = 0.4
    still_m_s: float = 0.05
    still_rad_s: float = 0.05
    moving_m_s: float = 2.0
    moving_rad_s: float = 1.0


def settings_for(rig: Rig) -> EstimatorSettings:
    """Derive settings from what the rig file says of its sensors."""
    pose, imu = rig.sensors.pose, rig.sensors.imu
    rotors = rig.sensors.rotor_states
    values = {} if imu is None else {
        'rate_noise_rad_s': imu.rate_noise_rad_s, 'force_noise_m_s2': imu.force_noise_m_s2,
        'rate_bias_rad_s': imu.rate_bias_rad_s, 'force_bias_m_s2': imu.force_bias_m_s2}
    return EstimatorSettings(
        position_noise_m=pose.position_noise_m, attitude_noise_rad=pose.attitude_noise_rad,
        pose_period_s=1.0 / pose.rate_hz,
        rotor_noise_fraction=rotors.noise_fraction if rotors else 0.0, **values)
