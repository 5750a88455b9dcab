"""
Tension by balance of forces: what the accelerometer feels less what the rotors give.

The stretch of the tether cannot show that the tether is cut. The accelerometer can: mass times
specific force is the sum of all forces but gravity, so less the rotors' it is the tether's pull.
"""

import numpy as np

from suspended_ctrl.physics.kernel import kernel, OUT_VECTOR, REAL, VECTOR
from suspended_ctrl.physics.rotation import cross, rotate
from suspended_ctrl.rig.frozen import Array, frozen
from suspended_ctrl.rig.rig import Rig

# Four samples at 400 Hz: keeps the noise of the differenced angular rate down.
_FILTER_S = 0.010
_GAP_S = 0.050


@kernel(REAL(VECTOR, VECTOR, REAL, VECTOR, OUT_VECTOR))
def _take(rate: Array, force: Array, stamp: float, placement: Array, state: Array) -> float:
    """
    Filter the specific force at the centre of mass; angular rate's length, nan if bad.

    ``placement`` is the sensor's place from the centre of mass and its attitude; ``state`` is the
    filtered force, the filtered angular acceleration, the last rate and the last stamp.
    """
    size: float = np.sqrt(rate[0] * rate[0] + rate[1] * rate[1] + rate[2] * rate[2])
    if not np.isfinite(size + abs(force[0]) + abs(force[1]) + abs(force[2]) + stamp):
        return np.nan
    turning = rotate(placement[3:7], rate)
    felt = rotate(placement[3:7], force)
    step = stamp - state[9]
    known = 0.0 < step < _GAP_S
    share = min(step / _FILTER_S, 1.0) if known else 1.0
    for i in range(3):
        slope = (turning[i] - state[6 + i]) / step if known else 0.0
        state[3 + i] += share * (slope - state[3 + i])
    arm = placement[:3]
    swept = cross(state[3:6], arm)
    centripetal = cross(turning, cross(turning, arm))
    for i in range(3):
        state[i] += share * (felt[i] - swept[i] - centripetal[i] - state[i])
        state[6 + i] = turning[i]
    state[9] = stamp
    return size


class ForceBalance:
    """
    Filtered inertial measurements of one rig.

    Parameters
    ----------
    rig : Rig

    Attributes
    ----------
    state : ndarray, shape (10,)
        Filtered specific force at the centre of mass in body axes, m/s^2; then the filter's own.
    rate_rad_s : float
        Length of the newest angular rate.

    """

    def __init__(self, rig: Rig) -> None:
        sensor = rig.sensors.imu
        place = np.zeros(3) if sensor is None else sensor.position_m - rig.body.centre_of_mass_m
        turn = np.array([1.0, 0, 0, 0]) if sensor is None else sensor.quaternion_wxyz
        self._placement = frozen([*place, *turn], 7)
        self.state = np.zeros(10)
        self.state[9] = -np.inf
        self.rate_rad_s = 0.0

    def take(self, stamp_s: float, rate_rad_s: Array, force_m_s2: Array) -> bool:
        """Take in one sample in sensor axes, shapes (3,); False if a number is not finite."""
        size = _take(rate_rad_s, force_m_s2, stamp_s, self._placement, self.state)
        if size != size:
            return False
        self.rate_rad_s = size
        return True
