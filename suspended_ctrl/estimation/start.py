"""Start-up: from a window of samples of a still rig to the filter's first state."""

from dataclasses import replace

import numpy as np

from suspended_ctrl.estimation.alignment import align, Alignment
from suspended_ctrl.estimation.dynamics import ERRORS
from suspended_ctrl.estimation.filter import ErrorStateFilter
from suspended_ctrl.estimation.settings import EstimatorSettings
from suspended_ctrl.estimation.timeline import CARRIER, IMU, POSE, ROTORS, TETHER, Timeline
from suspended_ctrl.physics.rotation import rotate
from suspended_ctrl.rig.frozen import Array


def try_start(line: Timeline, settings: EstimatorSettings,
              state: ErrorStateFilter) -> Alignment | None:
    """
    Start the filter if the window of alignment is full and the rig was still in it.

    Parameters
    ----------
    line : Timeline
        Samples so far; those before the window are dropped.
    settings : EstimatorSettings
        Figures that the caller chose.
    state : ErrorStateFilter
        Set to the beginning of the window if all is well.

    Returns
    -------
    Alignment or None
        None while the window is not full.

    """
    newest_s = max(key[0] for key in line.keys if key[1] == POSE)
    start_s = newest_s - settings.alignment_s
    full = line.keys[0][0] <= start_s + 1.5 * settings.pose_period_s
    line.drop(start_s)
    samples = list(zip(line.keys, line.entries, strict=True))
    poses = [(key[0], *entry) for key, entry in samples if key[1] == POSE]
    if not full or (settings.alignment_s > 0.0 and len(poses) < 2):
        return None
    if settings.alignment_s == 0.0:
        found = Alignment(True, '', poses[-1][1], poses[-1][2], still=False)
        _set_first(state, settings, found)
        state.start(newest_s, _first_covariance(settings, found))
        return found
    stamps, positions, attitudes = (np.array(column) for column in zip(*poses, strict=True))
    readings = [entry for key, entry in samples if key[1] == IMU]
    rates, forces = (np.array([reading[i] for reading in readings]) for i in range(2))
    found = align(settings, stamps, positions, attitudes, rates, forces)
    if not found.ok:
        return found
    _set_first(state, settings, found)
    # The inputs as they are in the window, for the forces that keep the platform still.
    loads = []
    for key, entry in samples:
        if key[1] == CARRIER:
            state.anchor(key[0], entry[0])
        elif key[1] == ROTORS:
            state.rotors(key[0], entry[0])
        elif key[1] == TETHER:
            loads.append(float(entry[0][0]))
    state.start(float(stamps[0]), _first_covariance(settings, found))
    return _balanced(state, found, float(np.mean(loads)) if loads else None)


def _set_first(state: ErrorStateFilter, settings: EstimatorSettings, found: Alignment) -> None:
    x = state.x
    x[:] = 0.0
    x[6:10] = found.quaternion_wxyz
    x[:3] = found.position_map_m - rotate(x[6:10], state.body.pose_arm_m)


def _first_covariance(settings: EstimatorSettings, found: Alignment) -> Array:
    window = settings.alignment_s
    speed, turning = ((settings.still_m_s, settings.still_rad_s) if found.still
                      else (settings.moving_m_s, settings.moving_rad_s))
    spread = np.empty(ERRORS)
    spread[0:3] = 3.0 * settings.position_noise_m + speed * window
    spread[3:6] = 3.0 * settings.attitude_noise_rad + turning * window
    spread[6:9] = speed
    spread[9:12] = turning
    spread[12:15] = settings.rate_bias_rad_s
    spread[15:18] = settings.force_bias_m_s2
    # Anything that the model can come to be wrong by within ten seconds.
    spread[18:21] = 3.0 * settings.force_walk_n_s05
    spread[21:24] = 3.0 * settings.torque_walk_nm_s05
    covariance: Array = np.diag(spread**2)
    return covariance


def _balanced(state: ErrorStateFilter, found: Alignment, load_n: float | None) -> Alignment:
    """Set the disturbances to what keeps the platform still; what the tether says of the rig."""
    x, vector = state.x, state.body.vector
    mass, gravity, stiffness = vector[0], vector[25], vector[23]
    model_n = float(state.s[6])
    if load_n is not None:
        state.u[23] = load_n - model_n
        state.linearise()
    held = state.r @ (mass * state.s[:3])
    x[19:22] = -held
    x[21] += mass * gravity
    x[22:25] = -vector[1:10].reshape(3, 3) @ state.s[3:6]
    state.linearise()
    if model_n <= 0.0:
        return found
    # Without a load cell the rest length follows from the weight that the rotors leave to it.
    borne = load_n
    if borne is None:
        borne = mass * gravity - (float(held[2]) - model_n)
    length = vector[22] + model_n / stiffness
    return replace(found, mass_kg=float(held[2]) / gravity,
                   rest_length_m=float(length - borne / stiffness))
