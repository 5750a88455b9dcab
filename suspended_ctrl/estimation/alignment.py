"""Start-up: is the rig still, where does it hang, are its instruments in the right units."""

from dataclasses import dataclass

import numpy as np

from suspended_ctrl.estimation.settings import EstimatorSettings
from suspended_ctrl.physics.rotation import (
    conjugate,
    exponential,
    logarithm,
    multiply,
    normalised,
)
from suspended_ctrl.rig.constants import GRAVITY_M_S2
from suspended_ctrl.rig.frozen import Array, frozen

# A resting accelerometer reads one g give or take its bias and a coarse scale error.
FORCE_SLACK_M_S2 = 1.0
# Spread that covers bias and noise many times, and that a reading in degrees does not fit in.
RATE_SPREADS = 10.0


@dataclass(frozen=True, eq=False)
class Alignment:
    """
    What the still rig shows.

    Attributes
    ----------
    ok : bool
    message : str
        What to do if not ok; what is wrong with an instrument otherwise, or nothing.
    position_map_m, quaternion_wxyz : ndarray
        Mean of the poses, of the marker body.
    imu_usable : bool
    still : bool
        False where stillness was not asked for.
    mass_kg : float
        What hangs on the tether, from the load cell, else from the stretch and the stiffness in
        the rig file; nan if it could not be told.
    rest_length_m : float
        Of the tether, from its length and the load cell, else the weight in the rig file; or nan.

    """

    ok: bool
    message: str
    position_map_m: Array
    quaternion_wxyz: Array
    imu_usable: bool = True
    still: bool = True
    mass_kg: float = float('nan')
    rest_length_m: float = float('nan')


def align(settings: EstimatorSettings, stamps_s: Array, positions: Array, quaternions: Array,
          rates: Array, forces: Array) -> Alignment:
    """
    Judge a window of samples.

    Parameters
    ----------
    settings : EstimatorSettings
        Figures that the caller chose.
    stamps_s : ndarray, shape (k,)
        Of the poses, rising.
    positions, quaternions : ndarray, shape (k, 3) and (k, 4)
        Poses of the marker body.
    rates, forces : ndarray, shape (m, 3)
        Samples of the IMU, none if there is none.

    Returns
    -------
    Alignment
        Refused with ``hold still`` if the mean rates over the window pass the settings' limits.

    """
    reference = quaternions[-1]
    turns = np.array([logarithm(multiply(conjugate(reference), normalised(q)))
                      for q in quaternions])
    time = stamps_s - stamps_s.mean()
    square = float(time @ time)
    velocity = time @ positions / square
    rate = time @ turns / square
    # A regression over the window knows the rates this well.
    noise_v = settings.position_noise_m / np.sqrt(square)
    noise_w = settings.attitude_noise_rad / np.sqrt(square)
    quaternion = frozen(multiply(reference, exponential(turns.mean(axis=0))))
    position = frozen(positions.mean(axis=0))
    swing = np.abs(positions - positions.mean(axis=0)).max()
    tilt = np.abs(turns - turns.mean(axis=0)).max()
    window = stamps_s[-1] - stamps_s[0]
    still = (np.linalg.norm(velocity) <= settings.still_m_s + 3.0 * noise_v
             and np.linalg.norm(rate) <= settings.still_rad_s + 3.0 * noise_w
             and swing <= settings.still_m_s * window + 6.0 * settings.position_noise_m
             and tilt <= settings.still_rad_s * window + 6.0 * settings.attitude_noise_rad)
    if not still:
        return Alignment(False, f'hold still: moving at {np.linalg.norm(velocity):.3f} m/s and '
                         f'{np.linalg.norm(rate):.3f} rad/s, limits {settings.still_m_s} and '
                         f'{settings.still_rad_s}', position, quaternion, still=False)
    message = check_imu(settings, rate, rates, forces)
    return Alignment(True, message, position, quaternion, imu_usable=not message)


def check_imu(settings: EstimatorSettings, rate: Array, rates: Array, forces: Array) -> str:
    """Say what is wrong with the units of a resting IMU while the rig turns at ``rate``."""
    if not rates.size:
        return ''
    force = float(np.linalg.norm(forces.mean(axis=0)))
    if abs(force - GRAVITY_M_S2) > FORCE_SLACK_M_S2 + 5.0 * settings.force_bias_m_s2:
        unit = ' (in g?)' if abs(force - 1.0) < 0.2 else ''
        return f'accelerometer reads {force:.3f} m/s^2 at rest{unit}: IMU not used'
    turned = float(np.linalg.norm(rates.mean(axis=0) - rate))
    noise = float(rates.std(axis=0).max())
    if (turned > RATE_SPREADS * settings.rate_bias_rad_s + settings.still_rad_s
            or noise > RATE_SPREADS * settings.rate_noise_rad_s + settings.still_rad_s):
        return (f'gyroscope reads {turned:.3f} rad/s, noise {noise:.3f}, at rest (in degrees?): '
                'IMU not used')
    return ''
