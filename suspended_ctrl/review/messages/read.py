"""
Standard ROS 2 messages into values, by attribute access alone.

Each function gives a value that may be used, or raises ``MessageError``; a message with anything
that is not a finite number in it, of another length or with other names is refused.
"""

from collections.abc import Sequence
from math import isfinite
from typing import Any

import numpy as np

from suspended_ctrl.physics.lead import PlatformState
from suspended_ctrl.physics.rotation import rotate
from suspended_ctrl.physics.values import (
    CarrierSample,
    Estimate,
    ImuSample,
    Payload,
    PayloadEvent,
    PoseSample,
    RotorCommand,
    RotorSample,
    SAFETY_STATES,
    TetherLoadSample,
    Wrench,
)
from suspended_ctrl.review.messages.covariance import turned
from suspended_ctrl.review.messages.values import (
    Diagnostics,
    Disturbance,
    MessageError,
    NodeStatus,
)
from suspended_ctrl.rig.frozen import Array, frozen

# Single-precision drivers are off by 1e-7; past this the four numbers are no rotation.
UNIT_TOLERANCE = 1e-3
# Inside this a quaternion is left bit for bit as it came.
UNIT_EXACT = 1e-9
_ZERO = frozen([0.0, 0.0, 0.0])
_NO_PAYLOAD = Payload()


def read_time(time: Any) -> float:
    """Seconds of a Time or Duration."""
    nanoseconds = time.nanosec
    if nanoseconds >= 1_000_000_000:
        raise MessageError(f'time has {nanoseconds} ns, 999999999 at most')
    return float(time.sec + 1e-9 * nanoseconds)


def read_stamp(message: Any) -> float:
    """Header stamp in seconds."""
    return read_time(message.header.stamp)


def read_vector(vector: Any, what: str) -> Array:
    """Shape (3,) from anything with x, y, z."""
    x, y, z = vector.x, vector.y, vector.z
    if not isfinite(x + y + z):
        raise MessageError(f'{what} is not finite: {x:g} {y:g} {z:g}')
    out = np.array((x, y, z))
    out.setflags(write=False)
    return out


def read_quaternion(quaternion: Any) -> Array:
    """Read a unit quaternion (w, x, y, z), normalised where single precision left it a bit off."""
    w, x, y, z = quaternion.w, quaternion.x, quaternion.y, quaternion.z
    square = w * w + x * x + y * y + z * z
    if not abs(square - 1.0) < 2.0 * UNIT_TOLERANCE:
        raise MessageError(f'quaternion x {x:g} y {y:g} z {z:g} w {w:g} is not of unit length')
    out = np.array((w, x, y, z))
    if abs(square - 1.0) > UNIT_EXACT:
        out /= np.sqrt(square)
    out.setflags(write=False)
    return out


def read_numbers(values: Any, count: int, what: str) -> Array:
    """Shape (count,) from a message's sequence of numbers."""
    out = np.array(values, dtype=np.float64)
    if out.shape != (count,):
        raise MessageError(f'{what} has {len(values)} numbers, {count} expected')
    if not isfinite(out.sum()):
        raise MessageError(f'{what} is not finite: {" ".join(f"{v:g}" for v in out)}')
    out.setflags(write=False)
    return out


def name_order(given: Any, names: Sequence[str]) -> list[int] | None:
    """
    Places of the rig's names in the message's; None where they already agree.

    Raises
    ------
    MessageError
        If a name is missing, unknown or given twice.

    """
    came = list(given)
    wanted = list(names)
    if came == wanted:
        return None
    if unknown := [name for name in came if name not in wanted]:
        raise MessageError(f'name {unknown[0]!r} is not in the rig: {", ".join(wanted)}')
    if missing := [name for name in wanted if name not in came]:
        raise MessageError(f'name {missing[0]!r} is missing')
    if len(came) != len(wanted):
        raise MessageError(f'a name is given twice: {", ".join(came)}')
    return [came.index(name) for name in wanted]


def _in_order(values: Array, order: list[int] | None) -> Array:
    return values if order is None else frozen(values[order])


def read_pose(message: Any) -> PoseSample:
    """Read a PoseStamped."""
    pose = message.pose
    return PoseSample(read_stamp(message), read_vector(pose.position, 'position'),
                      read_quaternion(pose.orientation))


def read_imu(message: Any) -> ImuSample:
    """Imu; its orientation is not used."""
    return ImuSample(read_stamp(message),
                     read_vector(message.angular_velocity, 'angular velocity'),
                     read_vector(message.linear_acceleration, 'linear acceleration'))


def _read_speeds(message: Any, rotors: Sequence[str]) -> Array:
    order = name_order(message.name, rotors)
    return _in_order(read_numbers(message.velocity, len(rotors), 'velocity'), order)


def read_rotors(message: Any, rotors: Sequence[str]) -> RotorSample:
    """Read a JointState of measured rotor speeds, in any order of names, into the rig's."""
    return RotorSample(read_stamp(message), _read_speeds(message, rotors))


def read_rotor_command(message: Any, rotors: Sequence[str]) -> RotorCommand:
    """Read a JointState of commanded rotor speeds, in any order of names, into the rig's."""
    return RotorCommand(read_stamp(message), _read_speeds(message, rotors))


def read_carrier(message: Any, axes: Sequence[str]) -> CarrierSample:
    """Read a JointState of the carrier's axes, in any order of names, into the rig's."""
    order = name_order(message.name, axes)
    return CarrierSample(
        read_stamp(message),
        _in_order(read_numbers(message.position, len(axes), 'position'), order),
        _in_order(read_numbers(message.velocity, len(axes), 'velocity'), order))


def read_wrench(message: Any) -> Wrench:
    """Read a WrenchStamped in ``base_link``."""
    wrench = message.wrench
    return Wrench(read_stamp(message), read_vector(wrench.force, 'force'),
                  read_vector(wrench.torque, 'torque'))


def read_disturbance(message: Any) -> Disturbance:
    """Read a WrenchStamped in map."""
    wrench = message.wrench
    return Disturbance(read_stamp(message), read_vector(wrench.force, 'force'),
                       read_vector(wrench.torque, 'torque'))


def read_tether_load(message: Any) -> TetherLoadSample:
    """Read a WrenchStamped whose ``force.z`` is the tension; it may be a little below zero."""
    tension = message.wrench.force.z
    if not isfinite(tension):
        raise MessageError(f'tension is not finite: {tension:g}')
    return TetherLoadSample(read_stamp(message), float(tension))


def _read_mass(inertia: Any) -> float:
    mass = inertia.m
    if not (isfinite(mass) and mass >= 0.0):
        raise MessageError(f'mass {mass:g} is not a finite number of at least 0')
    return float(mass)


def read_payload(message: Any) -> Payload:
    """Read an InertiaStamped as the estimator's payload."""
    return Payload(_read_mass(message.inertia), read_vector(message.inertia.com, 'com'))


def read_payload_event(message: Any) -> PayloadEvent:
    """Read an InertiaStamped as what the mission says hangs on the platform."""
    return PayloadEvent(read_stamp(message), _read_mass(message.inertia),
                        read_vector(message.inertia.com, 'com'))


def _read_covariance(values: Any, what: str) -> Array:
    out = np.array(values, dtype=np.float64)
    if out.shape != (36,) or not isfinite(out.sum()):
        raise MessageError(f'{what} covariance is not 36 finite numbers')
    return out.reshape(6, 6)


def read_motion(message: Any) -> PlatformState:
    """Odometry without its covariances."""
    pose, twist = message.pose.pose, message.twist.twist
    quaternion = read_quaternion(pose.orientation)
    velocity = rotate(quaternion, read_vector(twist.linear, 'linear velocity'))
    velocity.setflags(write=False)
    return PlatformState(read_stamp(message), read_vector(pose.position, 'position'), velocity,
                         quaternion, read_vector(twist.angular, 'angular velocity'))


def read_odometry(message: Any, disturbance: Disturbance | None = None,
                  payload: Payload | None = None) -> Estimate:
    """
    Odometry as the estimate that it was built from.

    Parameters
    ----------
    message : nav_msgs/Odometry
        As it came.
    disturbance, payload
        The newest of the estimator's other two topics; zero where left out.

    Returns
    -------
    Estimate
        The message has no covariance between pose and twist: those blocks are zero. It says
        nothing of the newest pose either: ``pose_stamp_s`` is the stamp, ``valid`` is true.

    Raises
    ------
    MessageError
        If a number is not finite or the quaternion is no rotation.

    """
    motion = read_motion(message)
    quaternion = motion.quaternion_wxyz
    covariance = np.zeros((12, 12))
    covariance[:6, :6] = turned(
        _read_covariance(message.pose.covariance, 'pose'), 3, quaternion, False)
    covariance[6:, 6:] = turned(
        _read_covariance(message.twist.covariance, 'twist'), 0, quaternion, True)
    covariance.setflags(write=False)
    return Estimate(
        motion.stamp_s, motion.position_map_m, motion.velocity_map_m_s, motion.quaternion_wxyz,
        motion.rate_body_rad_s, covariance,
        _ZERO if disturbance is None else disturbance.force_map_n,
        _ZERO if disturbance is None else disturbance.torque_map_nm,
        _NO_PAYLOAD if payload is None else payload, motion.stamp_s, True)


def read_safety_state(message: Any) -> str:
    """Read a String that is one of the supervisor's states."""
    state = message.data
    if state not in SAFETY_STATES:
        raise MessageError(f'state {state!r} is none of {", ".join(SAFETY_STATES)}')
    return str(state)


def read_flag(message: Any) -> bool:
    """Read a Bool."""
    return bool(message.data)


def read_diagnostics(message: Any) -> Diagnostics:
    """DiagnosticArray."""
    return Diagnostics(read_stamp(message), tuple(
        NodeStatus(one.name, one.level[0] if isinstance(one.level, bytes) else int(one.level),
                   one.message, {pair.key: pair.value for pair in one.values})
        for one in message.status))
