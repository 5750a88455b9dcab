"""Where the platform is against its limits: one judgement for poses and odometry alike."""

from numba import types
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

# Order of the judgement, the same as the first rows of the table of limits; after them tension and
# the tether's direction in body axes.
JUDGED = ('outside', 'keep_in', 'swing', 'tilt', 'rates', 'speed', 'tether_slack', 'overload',
          'hook_angle')
TENSION = len(JUDGED)
DIRECTION = TENSION + 1
SIZE = DIRECTION + 3


@kernel(TRUTH(VECTOR, VECTOR, VECTOR, OUT_VECTOR))
def take_pose(position: Array, quaternion: Array, sensor: Array, out: Array) -> bool:
    """
    Pose of base_link from that of the marker body.

    Parameters
    ----------
    position, quaternion : ndarray, shape (3,), (4,)
        As measured.
    sensor : ndarray, shape (7,)
        Pose of the marker body in base_link, position then quaternion.
    out : ndarray, shape (7,)
        Out: position and unit quaternion of base_link.

    Returns
    -------
    bool
        False, and nothing written, if a number is not finite or the quaternion is more than a
        hundredth from unit length.

    """
    norm = np.sqrt(quaternion[0] * quaternion[0] + quaternion[1] * quaternion[1]
                   + quaternion[2] * quaternion[2] + quaternion[3] * quaternion[3])
    total = abs(position[0]) + abs(position[1]) + abs(position[2])
    if not (abs(norm - 1.0) < 0.01 and total < np.inf):
        return False
    turned = multiply(quaternion / norm, conjugate(sensor[3:7]))
    out[:3] = position - rotate(turned, sensor[:3])
    out[3:7] = turned
    return True


@kernel(TRUTH(VECTOR, VECTOR, VECTOR, VECTOR, OUT_VECTOR))
def take_motion(position: Array, velocity: Array, quaternion: Array, rate: Array,
                out: Array) -> bool:
    """
    Put odometry into one array.

    Parameters
    ----------
    position, velocity, quaternion, rate : ndarray, shapes (3,), (3,), (4,), (3,)
        Of the ``base_link`` origin.
    out : ndarray, shape (13,)
        Out: the four in this order, the quaternion of unit length.

    Returns
    -------
    bool
        False, and nothing written, if a number is not finite or the quaternion is more than a
        hundredth from unit length.

    """
    total = 0.0
    for i in range(3):
        total += abs(position[i]) + abs(velocity[i]) + abs(rate[i])
    norm = 0.0
    for i in range(4):
        norm += quaternion[i] * quaternion[i]
    norm = np.sqrt(norm)
    if not (total < np.inf and abs(norm - 1.0) < 0.01):
        return False
    out[:3] = position
    out[3:6] = velocity
    out[6:10] = quaternion / norm
    out[10:13] = rate
    return True


@kernel(REAL(VECTOR, VECTOR, REAL, REAL, REAL))
def disagreement(pose: Array, motion: Array, lead: float, limit_m: float,
                 limit_rad: float) -> float:
    """
    How far a pose is off odometry.

    Parameters
    ----------
    pose, motion : ndarray, shape (7,), (13,)
        Position and quaternion; what ``take_motion`` wrote.
    lead : float
        Stamp of the pose less that of the odometry, s; the odometry is moved on by it, up to
        0.1 s.
    limit_m, limit_rad : float
        Of distance and angle.

    Returns
    -------
    float
        Worse of the shares that distance and angle use of their limits.

    """
    lead = min(max(lead, -0.1), 0.1)
    square = 0.0
    for i in range(3):
        gap = pose[i] - motion[i] - motion[3 + i] * lead
        square += gap * gap
    rate = motion[10:13]
    turned = abs(lead) * np.sqrt(rate[0] * rate[0] + rate[1] * rate[1] + rate[2] * rate[2])
    angle = angle_between(motion[6:10], pose[3:7]) - turned
    worse: float = max(np.sqrt(square) / limit_m, angle / limit_rad)
    return worse


@kernel(OUT_VECTOR(VECTOR, VECTOR, VECTOR, VECTOR))
def judge(motion: Array, anchor: Array, thrust: Array, p: Array) -> Array:
    """
    Share of each limit that is used up.

    Parameters
    ----------
    motion : ndarray, shape (13,)
        Of the base_link origin: position and velocity in map, quaternion, rate in body.
    anchor : ndarray, shape (6,)
        Place and velocity in map.
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
    position, velocity, rate = motion[0:3], motion[3:6], motion[10:13]
    quaternion = motion[6:10]
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
        stretch_rate += span[i] * (anchor[3 + i] - hook_velocity[i])
    tension = 0.0
    if length > p[14]:
        tension = max(stiffness * (length - p[14]) + p[16] * stretch_rate, 0.0)
    along = rotate_back(quaternion, span)

    # Keep-in: where it is, where it could stop, where it would swing if cut now.
    after = velocity + rotate(quaternion, thrust) * (run_down / mass)
    pendulum = max(anchor[2] - position[2], 0.1 * p[14])
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


@kernel(types.void(VECTOR, VECTOR, TRUTH, TRUTH, TRUTH, TRUTH, REAL, REAL, VECTOR, VECTOR, VECTOR,
                   VECTOR, OUT_VECTOR, OUT_VECTOR, OUT_VECTOR, OUT_VECTOR))
def judge_both(pose: Array, motion: Array, pose_new: bool, motion_new: bool, pose_known: bool,
               motion_known: bool, lead: float, imu_rate: float, force: Array, anchor: Array,
               thrust: Array, p: Array, pose_used: Array, motion_used: Array, used: Array,
               told: Array) -> None:
    """
    Judge what is new of pose and odometry, and merge: the worse of both in each row.

    Parameters
    ----------
    pose, motion : ndarray, shape (7,), (13,)
        Of ``take_pose`` and ``take_motion``.
    pose_new, motion_new, pose_known, motion_known : bool
        Whether each is to be judged anew, whether it is there at all. A pose is judged without
        velocity: alone it tells places and angles.
    lead : float
        As for ``disagreement``.
    imu_rate : float
        Length of the gyroscope's rate, rad/s; nan where there is none.
    force, anchor, thrust, p : ndarray
        Specific force in body axes, the rest as for ``judge``.
    pose_used, motion_used : ndarray, shape (SIZE,)
        Kept between calls: the judgements.
    used : ndarray, at least as long as ``JUDGED``
        Out: the merged rows; nan where neither is known.
    told : ndarray, shape (3,)
        Out: tension in N from the stretch and from the balance of forces, nan where not known;
        share of the limits of disagreement, kept where nothing is new.

    """
    if motion_new:
        motion_used[:] = judge(motion, anchor, thrust, p)
    if pose_new:
        still = np.zeros(13)
        still[:3] = pose[:3]
        still[6:10] = pose[3:]
        hold = np.zeros(6)
        hold[:3] = anchor[:3]
        pose_used[:] = judge(still, hold, np.zeros(3), p)
        if motion_known:
            told[2] = disagreement(pose, motion, lead, p[22], p[23])
    for i in range(TENSION):
        used[i] = np.nan
        if pose_known:
            used[i] = pose_used[i]
        if motion_known and not used[i] > motion_used[i]:
            used[i] = motion_used[i]
    if imu_rate / p[9] > used[4] or (used[4] != used[4]):
        used[4] = imu_rate / p[9]
    told[0] = motion_used[TENSION] if motion_known else np.nan
    told[1] = 0.0
    for i in range(3):
        told[1] += (p[24] * force[i] - thrust[i]) * motion_used[DIRECTION + i]


def parameters(rig: Rig, settings: SafetySettings) -> Array:
    """Constants of the judgements for a rig, shape (25,)."""
    tether = rig.tether
    lower, upper = rig.keep_in.lower_m, rig.keep_in.upper_m
    return frozen([
        *(0.5 * (lower + upper)), *(0.5 * (upper - lower)), settings.stop_deceleration_m_s2,
        settings.stop_reaction_s, settings.tilt_rad, settings.rate_rad_s, settings.speed_m_s,
        tether.slack_margin_n, tether.working_load_n, settings.hook_angle_rad,
        tether.rest_length_m, tether.stiffness_n_per_m, tether.damping_n_s_per_m, *tether.hook_m,
        rig.body.mass_kg + tether.mass_kg / 3.0,
        # The integral of thrust that falls as exp(-2 t / lag).
        0.5 * float(rig.rotors.time_constant_s.max()),
        settings.pose_disagreement_m, settings.pose_disagreement_rad, rig.body.mass_kg], 25)
