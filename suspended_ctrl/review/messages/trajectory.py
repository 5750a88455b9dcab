"""Trajectories: the reference, the carrier's command and its plan; both ways."""

from collections.abc import Sequence
from typing import Any

import numpy as np

from suspended_ctrl.physics.reference import Reference, SPACING_MAX_S
from suspended_ctrl.physics.values import CarrierCommand, CarrierPlan
from suspended_ctrl.review.messages.build import (
    BASE_LINK,
    build_header,
    build_quaternion,
    build_vector,
    MAP,
    split_seconds,
)
from suspended_ctrl.review.messages.read import (
    name_order,
    read_numbers,
    read_stamp,
    read_time,
    UNIT_EXACT,
    UNIT_TOLERANCE,
)
from suspended_ctrl.review.messages.values import MessageError, MessageTypes
from suspended_ctrl.rig.frozen import Array, frozen

# Times travel in whole nanoseconds: a spacing may come out that much longer.
_ROUNDING_S = 2e-9


def _duration(types: MessageTypes, seconds: float) -> Any:
    whole, nanoseconds = split_seconds(seconds)
    return types('builtin_interfaces/msg/Duration')(sec=whole, nanosec=nanoseconds)


def build_reference(types: MessageTypes, reference: Reference | None,
                    stamp_s: float | None = None) -> Any:
    """
    Build a MultiDOFJointTrajectory in map: linear rates in map, angular ones in ``base_link``.

    Parameters
    ----------
    types : MessageTypes
        Of the library that the message is for.
    reference : Reference or None
        None gives the message without points that clears a reference.
    stamp_s : float, optional
        Start; the reference's own if left out.

    """
    points = []
    if reference is not None:
        stamp_s = reference.start_s if stamp_s is None else stamp_s
        point, transform, twist = (
            types('trajectory_msgs/msg/MultiDOFJointTrajectoryPoint'),
            types('geometry_msgs/msg/Transform'), types('geometry_msgs/msg/Twist'))
        for k, time_s in enumerate(reference.time_s.tolist()):
            points.append(point(
                transforms=[transform(
                    translation=build_vector(types, reference.position_map_m[k]),
                    rotation=build_quaternion(types, reference.quaternion_wxyz[k]))],
                velocities=[twist(
                    linear=build_vector(types, reference.velocity_map_m_s[k]),
                    angular=build_vector(types, reference.rate_body_rad_s[k]))],
                accelerations=[twist(
                    linear=build_vector(types, reference.acceleration_map_m_s2[k]),
                    angular=build_vector(types, reference.rate_dot_body_rad_s2[k]))],
                time_from_start=_duration(types, time_s)))
    return types('trajectory_msgs/msg/MultiDOFJointTrajectory')(
        header=build_header(types, stamp_s or 0.0, MAP), joint_names=[BASE_LINK], points=points)


def _point_row(point: Any, k: int) -> tuple[float, ...]:
    try:
        (place,), (speed,), (push,) = point.transforms, point.velocities, point.accelerations
    except ValueError:
        raise MessageError(
            f'point {k} wants one transform, one velocity and one acceleration') from None
    p, q = place.translation, place.rotation
    v, w, a, b = speed.linear, speed.angular, push.linear, push.angular
    return (read_time(point.time_from_start), p.x, p.y, p.z, q.w, q.x, q.y, q.z, v.x, v.y, v.z,
            w.x, w.y, w.z, a.x, a.y, a.z, b.x, b.y, b.z)


def read_reference(message: Any) -> Reference | None:
    """
    Read a MultiDOFJointTrajectory of ``base_link``.

    Returns
    -------
    Reference or None
        None for zero points, which clear the reference.

    Raises
    ------
    MessageError
        If a number is not finite, a quaternion is no rotation, the first point is not at zero,
        times do not rise or points are further apart than ``SPACING_MAX_S``.

    """
    if not message.points:
        return None
    rows = np.array([_point_row(point, k) for k, point in enumerate(message.points)])
    return checked_reference(read_stamp(message), message.joint_names, rows)


def checked_reference(stamp_s: float, joint_names: Sequence[str], rows: Array) -> Reference:
    """
    Build a reference from the numbers of a message.

    Parameters
    ----------
    stamp_s : float
        Of the message's header.
    joint_names : sequence of str
        Of the message.
    rows : ndarray, shape (m, 20)
        Of each point: time, position, quaternion (w, x, y, z), velocity, rate, acceleration,
        rate's derivative; changed where a quaternion is slightly off.

    Returns
    -------
    Reference

    Raises
    ------
    MessageError
        As ``read_reference``.

    """
    if list(joint_names) != [BASE_LINK]:
        raise MessageError(f'joint_names {list(joint_names)} is not [{BASE_LINK!r}]')
    finite = np.isfinite(rows).all(axis=1)
    if not finite.all():
        raise MessageError(f'point {int(np.argmin(finite))} has a number that is not finite')
    time_s = rows[:, 0]
    if time_s[0] != 0.0:
        raise MessageError(f'the first point is at {time_s[0]:g} s, 0 expected')
    steps = np.diff(time_s)
    if len(steps) and not (steps.min() > 0.0 and steps.max() <= SPACING_MAX_S + _ROUNDING_S):
        raise MessageError(f'points are {steps.min():g} to {steps.max():g} s apart, '
                           f'more than 0 and at most {SPACING_MAX_S:g} expected')
    quaternion = rows[:, 4:8]
    norm = np.sqrt((quaternion * quaternion).sum(axis=1))
    worst = int(np.argmax(np.abs(norm - 1.0)))
    if abs(norm[worst] - 1.0) > UNIT_TOLERANCE:
        raise MessageError(f'quaternion of point {worst} is not of unit length: {norm[worst]:g}')
    off = np.abs(norm - 1.0) > UNIT_EXACT
    quaternion[off] /= norm[off, None]
    return Reference(
        stamp_s, frozen(time_s), frozen(rows[:, 1:4]), frozen(rows[:, 8:11]),
        frozen(rows[:, 14:17]), frozen(quaternion), frozen(rows[:, 11:14]), frozen(rows[:, 17:20]))


def _joint_trajectory(types: MessageTypes, stamp_s: float, axes: Sequence[str],
                      rows: list[tuple[float, Array, Array]]) -> Any:
    point = types('trajectory_msgs/msg/JointTrajectoryPoint')
    return types('trajectory_msgs/msg/JointTrajectory')(
        header=build_header(types, stamp_s, MAP), joint_names=list(axes),
        points=[point(positions=types.floats(position), velocities=types.floats(velocity),
                      accelerations=types.floats(()), effort=types.floats(()),
                      time_from_start=_duration(types, time_s))
                for time_s, position, velocity in rows])


def build_carrier_command(types: MessageTypes, command: CarrierCommand,
                          axes: Sequence[str]) -> Any:
    """Build a JointTrajectory of one point, due at once."""
    return _joint_trajectory(types, command.stamp_s, axes,
                             [(0.0, command.position_m, command.velocity_m_s)])


def build_carrier_plan(types: MessageTypes, plan: CarrierPlan, axes: Sequence[str]) -> Any:
    """Build a JointTrajectory of the whole horizon."""
    return _joint_trajectory(types, plan.stamp_s, axes, list(zip(
        plan.time_s.tolist(), plan.position_m, plan.velocity_m_s, strict=True)))


def read_carrier_command(message: Any, axes: Sequence[str]) -> CarrierCommand:
    """Read a JointTrajectory of one point, in any order of names, into the rig's."""
    order = name_order(message.joint_names, axes)
    if len(message.points) != 1:
        raise MessageError(f'{len(message.points)} points, 1 expected')
    point = message.points[0]
    position = read_numbers(point.positions, len(axes), 'positions')
    velocity = read_numbers(point.velocities, len(axes), 'velocities')
    if order is not None:
        position, velocity = frozen(position[order]), frozen(velocity[order])
    return CarrierCommand(read_stamp(message), position, velocity)


def read_carrier_plan(message: Any, axes: Sequence[str]) -> CarrierPlan:
    """Read a JointTrajectory over a horizon, in any order of names, into the rig's."""
    order = name_order(message.joint_names, axes)
    count = len(axes)
    points = message.points
    if not points:
        raise MessageError('a plan without points')
    time_s = np.array([read_time(point.time_from_start) for point in points])
    if not (np.diff(time_s) > 0.0).all():
        raise MessageError('time_from_start does not rise from point to point')
    position = np.array([read_numbers(point.positions, count, 'positions') for point in points])
    velocity = np.array([read_numbers(point.velocities, count, 'velocities') for point in points])
    if order is not None:
        position, velocity = position[:, order], velocity[:, order]
    return CarrierPlan(read_stamp(message), frozen(time_s), frozen(position), frozen(velocity))
