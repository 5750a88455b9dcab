"""Where the platform is against its limits: one kernel for poses and odometry alike."""

import numpy as np

from suspended_ctrl.physics.constants import GRAVITY_M_S2
from suspended_ctrl.physics.kernel import kernel, OUT_VECTOR, REAL, TRUTH, VECTOR
from suspended_ctrl.physics.rotation import (
    angle_between,
    conjugate,
    cross,
    multiply,
    rotate,
    rotate_back,
)
from suspended_ctrl.rig.frozen import Array, frozen
from suspended_ctrl.rig.rig import Rig
from suspended_ctrl.safety.settings import SafetySettings

# Order of the judgement, the same as the rows of the table of limits; after them tension and the
# tether's direction in body axes.
JUDGED = ('outside', 'keep_in', 'swing', 'tilt', 'rates', 'speed', 'tether_slack', 'overload',
          'hook_angle')
TENSION = len(JUDGED)
DIRECTION = TENSION + 1
SIZE = DIRECTION + 3


@kernel(OUT_VECTOR(VECTOR, VECTOR, VECTOR))
def base_pose(position: Array, quaternion: Array, sensor: Array) -> Array:
    """
    Pose of base_link from that of the marker body.

    Parameters
    ----------
    position, quaternion : ndarray, shape (3,), (4,)
        As measured.
    sensor : ndarray, shape (7,)
        Pose of the marker body in base_link, position then quaternion.

    Returns
    -------
    ndarray, shape (7,)
        Position and unit quaternion; all nan if a number is not finite or the quaternion is more
        than a hundredth from unit length.

    """
    out = np.full(7, np.nan)
    norm = np.sqrt(quaternion[0] * quaternion[0] + quaternion[1] * quaternion[1]
                   + quaternion[2] * quaternion[2] + quaternion[3] * quaternion[3])
    total = position[0] + position[1] + position[2]
    if not (abs(norm - 1.0) < 0.01 and abs(total) < np.inf):
        return out
    turned = multiply(quaternion / norm, conjugate(sensor[3:7]))
    out[:3] = position - rotate(turned, sensor[:3])
    out[3:7] = turned
    return out


@kernel(TRUTH(VECTOR, VECTOR, VECTOR, VECTOR))
def sound_motion(position: Array, velocity: Array, quaternion: Array, rate: Array) -> bool:
    """Whether everything is finite and the quaternion within a hundredth of unit length."""
    total = 0.0
    for i in range(3):
        total += abs(position[i]) + abs(velocity[i]) + abs(rate[i])
    norm = 0.0
    for i in range(4):
        norm += quaternion[i] * quaternion[i]
    return total < np.inf and abs(np.sqrt(norm) - 1.0) < 0.01


@kernel(REAL(VECTOR, VECTOR, VECTOR, VECTOR, VECTOR, REAL, REAL, REAL))
def disagreement(pose: Array, position: Array, velocity: Array, quaternion: Array, rate: Array,
                 lead: float, limit_m: float, limit_rad: float) -> float:
    """Worse of distance and angle, of their limits, of a pose off odometry led by ``lead``."""
    lead = min(max(lead, -0.1), 0.1)
    square = 0.0
    for i in range(3):
        gap = pose[i] - position[i] - velocity[i] * lead
        square += gap * gap
    angle = angle_between(quaternion, pose[3:7])
    turned = abs(lead) * np.sqrt(rate[0] * rate[0] + rate[1] * rate[1] + rate[2] * rate[2])
    worse: float = max(np.sqrt(square) / limit_m, (angle - turned) / limit_rad)
    return worse


@kernel(OUT_VECTOR(VECTOR, VECTOR, VECTOR, VECTOR, VECTOR, VECTOR, VECTOR, VECTOR))
def judge(position: Array, velocity: Array, quaternion: Array, rate: Array, anchor: Array,
          anchor_velocity: Array, thrust: Array, p: Array) -> Array:
    """
    Share of each limit that is used up.

    Parameters
    ----------
    position, velocity, quaternion, rate : ndarray
        Of the base_link origin; map, map, body to map, body.
    anchor, anchor_velocity : ndarray, shape (3,)
    thrust : ndarray, shape (3,)
        Measured force of the rotors in body axes, for its run-down after a cut.
    p : ndarray
        From ``parameters``.

    Returns
    -------
    ndarray, shape (SIZE,)
        In the order of ``JUDGED`` (1 is the limit), then tension in N from the stretch, then the
        unit direction from hook to anchor in body axes.

    """
    out = np.zeros(SIZE)
    deceleration, reaction, mass, run_down = p[6], p[7], p[20], p[21]
    hook = p[17:20]
    stiffness = p[15]

    hook_map = rotate(quaternion, hook)
    hook_velocity = velocity + rotate(quaternion, cross(rate, hook))
    span = np.empty(3)
    square = 0.0
    for i in range(3):
        span[i] = anchor[i] - position[i] - hook_map[i]
        square += span[i] * span[i]
    length = max(np.sqrt(square), 1e-9)
    stretch_rate = 0.0
    for i in range(3):
        span[i] /= length
        stretch_rate += span[i] * (anchor_velocity[i] - hook_velocity[i])
    tension = 0.0
    if length > p[14]:
        tension = max(stiffness * (length - p[14]) + p[16] * stretch_rate, 0.0)
    along = rotate_back(quaternion, span)

    # Keep-in: where it is, where it could stop, where it would swing if cut now.
    after = velocity + rotate(quaternion, thrust) * (run_down / mass)
    height = anchor[2] - position[2]
    pendulum = max(height, 0.1 * p[14])
    swing_square = 0.0
    for i in range(3):
        offset = position[i] - p[i]
        half = p[3 + i]
        speed = velocity[i]
        way = speed * reaction + 0.5 * speed * abs(speed) / deceleration
        out[0] = max(out[0], abs(offset) / half)
        out[1] = max(out[1], abs(offset) / half, abs(offset + way) / half)
        if i < 2:
            amplitude2 = ((position[i] - anchor[i]) ** 2
                          + after[i] ** 2 * pendulum / GRAVITY_M_S2)
            swing_square += amplitude2
            out[2] = max(out[2], (abs(anchor[i] - p[i]) + np.sqrt(amplitude2)) / half)
    # Vertically a bounce about the place where it hangs, lowered by the swing's centrifugal pull
    # (m v^2 / L over the stiffness, v^2 = A^2 g / L) and raised at the swing's ends (A^2 / 2 L).
    level = anchor[2] - p[14] - hook[2] - mass * GRAVITY_M_S2 / stiffness
    bounce = np.sqrt((position[2] - level) ** 2 + after[2] ** 2 * mass / stiffness)
    lower = level - bounce - mass * GRAVITY_M_S2 * swing_square / (pendulum ** 2 * stiffness)
    upper = level + bounce + 0.5 * swing_square / pendulum
    out[2] = max(out[2], abs(lower - p[2]) / p[5], abs(upper - p[2]) / p[5])

    up = 1.0 - 2.0 * (quaternion[1] ** 2 + quaternion[2] ** 2)
    out[3] = np.arccos(min(max(up, -1.0), 1.0)) / p[8]
    out[4] = np.sqrt(rate[0] ** 2 + rate[1] ** 2 + rate[2] ** 2) / p[9]
    out[5] = np.sqrt(velocity[0] ** 2 + velocity[1] ** 2 + velocity[2] ** 2) / p[10]
    out[6] = p[11] / tension if tension > 0.0 else np.inf
    out[7] = tension / p[12]
    out[8] = np.arccos(min(max(along[2], -1.0), 1.0)) / p[13]
    out[TENSION] = tension
    out[DIRECTION:DIRECTION + 3] = along
    return out


def parameters(rig: Rig, settings: SafetySettings) -> Array:
    """Constants of ``judge`` for a rig, shape (22,)."""
    tether = rig.tether
    lower, upper = rig.keep_in.lower_m, rig.keep_in.upper_m
    return frozen([
        *(0.5 * (lower + upper)), *(0.5 * (upper - lower)), settings.stop_deceleration_m_s2,
        settings.stop_reaction_s, settings.tilt_rad, settings.rate_rad_s, settings.speed_m_s,
        tether.slack_margin_n, tether.working_load_n, settings.hook_angle_rad,
        tether.rest_length_m, tether.stiffness_n_per_m, tether.damping_n_s_per_m, *tether.hook_m,
        rig.body.mass_kg + tether.mass_kg / 3.0,
        # The integral of thrust that falls as exp(-2 t / lag).
        0.5 * float(rig.rotors.time_constant_s.max())], 22)
