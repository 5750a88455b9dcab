"""Values from and to bytes, by topic: the quick way where it goes, else through messages."""

from collections.abc import Callable
from typing import Any

import numpy as np

from suspended_ctrl.nodes.wire.quick import Fields, Make, QuickReader, QuickWriter
from suspended_ctrl.nodes.wire.read import decode
from suspended_ctrl.nodes.wire.reference import decode_reference, encode_reference
from suspended_ctrl.nodes.wire.write import encode, WireTypes
from suspended_ctrl.physics.lead import PlatformState
from suspended_ctrl.physics.rotation import rotate, rotate_back
from suspended_ctrl.physics.values import Estimate, Payload, PayloadEvent
from suspended_ctrl.review.columns import LEAVES
from suspended_ctrl.review.messages import MessageError, read_motion
from suspended_ctrl.review.messages.covariance import turned
from suspended_ctrl.review.topics import JointNames, Topic
from suspended_ctrl.rig.frozen import Array, frozen

ReadValue = Callable[[bytes], Any]
WriteValue = Callable[[Any], bytes]

_TYPES = WireTypes()
_NO_NAMES = JointNames((), ())
_ZERO = frozen(np.zeros(3))
_PLACED = LEAVES[PlatformState] | {'pose_covariance': ('pose.covariance',)}


def value_reader(topic: Topic, names: JointNames) -> ReadValue:
    """
    Make the function that reads a topic's values from bytes.

    Parameters
    ----------
    topic : Topic
        As in ``review.topics``.
    names : JointNames
        The rig's names of what travels as joints.

    Returns
    -------
    callable
        Raises ``MessageError`` for a message that must not be used.

    """
    if topic.name == 'reference':
        return decode_reference

    def read(message: Any) -> Any:
        return topic.read(message, names)

    kind = topic.value_type
    # A payload's mass has a bound of its own, and comes now and then only.
    if kind not in LEAVES or kind in (Estimate, PayloadEvent):
        return lambda data: read(decode(data, topic.message_type))
    make = _moving(PlatformState) if kind is PlatformState else kind
    return _reader(topic, names, LEAVES[kind], make, read)


def motion_reader(topic: Topic) -> ReadValue:
    """Make the function that reads odometry without covariance, as a ``PlatformState``."""
    return _reader(topic, _NO_NAMES, LEAVES[PlatformState], _moving(PlatformState), read_motion)


def placed_estimate_reader(topic: Topic) -> ReadValue:
    """
    Make the function that reads odometry as an estimate, with the covariance of position alone.

    That is all the supervisor judges, and it needs no turning into other axes.
    """
    def make(pose_covariance: Array, **motion: Any) -> Estimate:
        return _placed(PlatformState(**motion), pose_covariance)

    def read(message: Any) -> Estimate:
        covariance = np.array(message.pose.covariance, dtype=np.float64)
        if covariance.shape != (36,) or not np.isfinite(covariance).all():
            raise MessageError('pose covariance is not 36 finite numbers')
        return _placed(read_motion(message), covariance)

    return _reader(topic, _NO_NAMES, _PLACED, _moving(make), read)


def _placed(motion: PlatformState, pose_covariance: Array) -> Estimate:
    covariance = np.zeros((12, 12))
    covariance[:3, :3] = pose_covariance.reshape(6, 6)[:3, :3]
    return Estimate(
        motion.stamp_s, motion.position_map_m, motion.velocity_map_m_s, motion.quaternion_wxyz,
        motion.rate_body_rad_s, covariance, _ZERO, _ZERO, Payload(), motion.stamp_s, True)


def _moving(make: Make) -> Make:
    """Let a maker have the velocity in map: in odometry it is in the child frame."""
    def made(quaternion_wxyz: Array, velocity_map_m_s: Array, **rest: Any) -> Any:
        velocity = rotate(quaternion_wxyz, velocity_map_m_s)
        velocity.setflags(write=False)
        return make(quaternion_wxyz=quaternion_wxyz, velocity_map_m_s=velocity, **rest)

    return made


def _reader(topic: Topic, names: JointNames, fields: Fields, make: Make,
            read: Callable[[Any], Any]) -> ReadValue:
    quick = QuickReader(topic, names, fields, make)

    def value(data: bytes) -> Any:
        found = quick.read(data)
        if found is None:
            found = read(decode(data, topic.message_type))
            quick.learn(data)
        return found

    return value


def value_writer(topic: Topic, names: JointNames) -> WriteValue:
    """
    Make the function that writes a topic's values into bytes.

    Parameters
    ----------
    topic : Topic
        As in ``review.topics``.
    names : JointNames
        The rig's names of what travels as joints.

    Returns
    -------
    callable

    """
    if topic.name == 'reference':
        return encode_reference

    def write(value: Any) -> bytes:
        return encode(topic.build(_TYPES, value, names), topic.message_type)

    kind: Any = topic.value_type
    if kind not in LEAVES:
        return write
    fields = LEAVES[kind]

    def plain(value: Any) -> list[Any]:
        return [getattr(value, name) for name in fields]

    split = _SPLIT.get(kind, plain)
    quick: list[QuickWriter] = []

    def data(value: Any) -> bytes:
        if type(value) is kind:  # a topic may take other kinds, through messages
            if quick and (done := quick[0].write(value.stamp_s, split(value))) is not None:
                return done
            quick[:] = [QuickWriter(topic, write(value), fields)]
        return write(value)

    return data


def _split_motion(value: Any) -> list[Any]:
    quaternion = value.quaternion_wxyz
    return [value.position_map_m, quaternion, rotate_back(quaternion, value.velocity_map_m_s),
            value.rate_body_rad_s]


def _split_estimate(value: Estimate) -> list[Any]:
    quaternion, covariance = value.quaternion_wxyz, value.covariance
    pose = turned(np.ascontiguousarray(covariance[:6, :6]), 3, quaternion, True)
    twist = turned(np.ascontiguousarray(covariance[6:, 6:]), 0, quaternion, False)
    return [*_split_motion(value), pose, twist]


_SPLIT: dict[type, Callable[[Any], list[Any]]] = {
    PlatformState: _split_motion, Estimate: _split_estimate}
