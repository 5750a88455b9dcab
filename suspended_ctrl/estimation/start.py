"""The filter's first state, from a rig that hangs still."""

import numpy as np

from suspended_ctrl.estimation.alignment import Alignment
from suspended_ctrl.estimation.dynamics import ERRORS
from suspended_ctrl.estimation.filter import ErrorStateFilter
from suspended_ctrl.estimation.settings import EstimatorSettings
from suspended_ctrl.physics.rotation import rotate


def set_start(state: ErrorStateFilter, settings: EstimatorSettings, found: Alignment,
              t: float) -> None:
    """
    Set state and covariance at the beginning of the window of alignment.

    Parameters
    ----------
    state : ErrorStateFilter
        Changed.
    settings : EstimatorSettings
    found : Alignment
    t : float
        Stamp of the beginning, s.

    """
    x = state.x
    x[6:10] = found.quaternion_wxyz
    x[:3] = found.position_map_m - rotate(x[6:10], state.body.pose_arm_m)
    window = max(settings.alignment_s, settings.pose_period_s)
    spread = np.empty(ERRORS)
    spread[0:3] = 3.0 * settings.position_noise_m + settings.still_m_s * window
    spread[3:6] = 3.0 * settings.attitude_noise_rad + settings.still_rad_s * window
    spread[6:9] = settings.still_m_s
    spread[9:12] = settings.still_rad_s
    spread[12:15] = settings.rate_bias_rad_s
    spread[15:18] = settings.force_bias_m_s2
    # Anything that the model can be wrong by within a second.
    spread[18:21] = 3.0 * settings.force_walk_n_s05
    spread[21:24] = 3.0 * settings.torque_walk_nm_s05
    state.start(t, np.diag(spread**2))
