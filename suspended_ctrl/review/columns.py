"""
Whole columns of values from many messages at once, and back.

The same mapping as ``review.messages``, on tables of bytes; a test holds the two together.
"""

from dataclasses import dataclass

import numpy as np

from suspended_ctrl.physics.lead import PlatformState
from suspended_ctrl.physics.values import (
    CarrierCommand,
    CarrierSample,
    Estimate,
    ImuSample,
    PayloadEvent,
    PoseSample,
    RotorCommand,
    RotorSample,
    TetherLoadSample,
    Wrench,
)
from suspended_ctrl.review.cdr_layout import Layout
from suspended_ctrl.review.messages import Disturbance
from suspended_ctrl.review.messages.read import name_order, UNIT_EXACT, UNIT_TOLERANCE
from suspended_ctrl.review.rows import matrices
from suspended_ctrl.review.topics import JointNames, Topic
from suspended_ctrl.rig.frozen import Array


def _xyz(path: str) -> tuple[str, ...]:
    return tuple(f'{path}.{axis}' for axis in 'xyz')


def _wxyz(path: str) -> tuple[str, ...]:
    return tuple(f'{path}.{axis}' for axis in 'wxyz')


_SPEED: dict[str, tuple[str, ...]] = {'speed_rad_s': ('velocity',)}
_STATE = {
    'position_map_m': _xyz('pose.pose.position'),
    'quaternion_wxyz': _wxyz('pose.pose.orientation'),
    'velocity_map_m_s': _xyz('twist.twist.linear'),
    'rate_body_rad_s': _xyz('twist.twist.angular')}

# Columns of each kind of value, and the numbers in the message that they stand in.
LEAVES: dict[type, dict[str, tuple[str, ...]]] = {
    PoseSample: {'position_map_m': _xyz('pose.position'),
                 'quaternion_wxyz': _wxyz('pose.orientation')},
    ImuSample: {'rate_rad_s': _xyz('angular_velocity'), 'force_m_s2': _xyz('linear_acceleration')},
    RotorSample: _SPEED,
    RotorCommand: _SPEED,
    CarrierSample: {'position_m': ('position',), 'velocity_m_s': ('velocity',)},
    CarrierCommand: {'position_m': ('points[0].positions',),
                     'velocity_m_s': ('points[0].velocities',)},
    TetherLoadSample: {'tension_n': ('wrench.force.z',)},
    PayloadEvent: {'mass_kg': ('inertia.m',), 'position_m': _xyz('inertia.com')},
    PlatformState: _STATE,
    Estimate: _STATE | {'pose_covariance': ('pose.covariance',),
                        'twist_covariance': ('twist.covariance',)},
    Disturbance: {'force_map_n': _xyz('wrench.force'), 'torque_map_nm': _xyz('wrench.torque')},
    Wrench: {'force_body_n': _xyz('wrench.force'), 'torque_body_nm': _xyz('wrench.torque')},
}


@dataclass(frozen=True)
class Decoded:
    """Columns of the messages that may be used, and which of all those were."""

    columns: dict[str, Array]
    good: np.ndarray


def _turned(covariance: Array, first: int, turn: Array) -> Array:
    """Turn three rows and columns of each 6x6 matrix by each rotation."""
    block = slice(first, first + 3)
    out = covariance.copy()
    out[:, block] = turn @ out[:, block]
    out[:, :, block] = out[:, :, block] @ turn.transpose(0, 2, 1)
    return out


def decode(topic: Topic, layout: Layout, rows: np.ndarray, names: JointNames) -> Decoded:
    """
    Columns from messages of one layout.

    Parameters
    ----------
    topic : Topic
        One whose value type is in ``LEAVES``.
    layout : Layout
        Of every message.
    rows : ndarray of uint8, shape (n, size)
        The messages.
    names : JointNames
        Of the rig.

    Returns
    -------
    Decoded
        Messages that ``review.messages`` would refuse are left out.

    Raises
    ------
    MessageError
        If the joints are not the rig's.
    KeyError
        If the messages lack a field, for example a point of a trajectory.

    """
    columns: dict[str, Array] = {}
    nanoseconds = layout.get(rows, 'header.stamp.nanosec')
    columns['stamp_s'] = layout.get(rows, 'header.stamp.sec') + 1e-9 * nanoseconds
    good = nanoseconds < 1_000_000_000
    for column, paths in LEAVES[topic.value_type].items():
        parts = [layout.get(rows, path) for path in paths]
        numbers = parts[0].astype(np.float64) if len(parts) == 1 else np.stack(parts, axis=1)
        if topic.joints:
            numbers = _in_rig_order(topic, layout, numbers, names)
        good &= np.isfinite(numbers).reshape(len(rows), -1).all(axis=1)
        columns[column] = numbers
    if 'mass_kg' in columns:
        good &= columns['mass_kg'] >= 0.0
    if 'quaternion_wxyz' in columns:
        square = (columns['quaternion_wxyz'] ** 2).sum(axis=1)
        good &= np.abs(square - 1.0) < 2.0 * UNIT_TOLERANCE
        off = good & (np.abs(square - 1.0) > UNIT_EXACT)
        columns['quaternion_wxyz'][off] /= np.sqrt(square[off])[:, None]
    if not good.all():
        columns = {name: numbers[good] for name, numbers in columns.items()}
    if 'velocity_map_m_s' in columns:
        turn = matrices(columns['quaternion_wxyz'])
        columns['velocity_map_m_s'] = np.einsum('nij,nj->ni', turn, columns['velocity_map_m_s'])
        if topic.value_type is Estimate:
            back = turn.transpose(0, 2, 1)
            columns['pose_covariance'] = _turned(
                columns['pose_covariance'].reshape(-1, 6, 6), 3, back)
            columns['twist_covariance'] = _turned(
                columns['twist_covariance'].reshape(-1, 6, 6), 0, turn)
    return Decoded(columns, good)


def _in_rig_order(topic: Topic, layout: Layout, numbers: Array, names: JointNames) -> Array:
    given = layout.strings.get('name') or layout.strings.get('joint_names') or []
    order = name_order(given, topic.joint_names(names))
    if numbers.shape[1] != len(given):
        raise KeyError(topic.name)
    return numbers if order is None else numbers[:, order]


def encode(topic: Topic, layout: Layout, columns: dict[str, Array]) -> np.ndarray:
    """
    Messages of one layout from columns, the inverse of ``decode``.

    Parameters
    ----------
    topic : Topic
        One whose value type is in ``LEAVES``.
    layout : Layout
        Of one message with the joints in the rig's order.
    columns : dict of str to ndarray, shape (n, ...)
        By field.

    Returns
    -------
    ndarray of uint8, shape (n, size)

    """
    stamp = columns['stamp_s']
    rows = layout.tiled(len(stamp))
    seconds = np.floor(stamp)
    nanoseconds = np.rint((stamp - seconds) * 1e9)
    carried = nanoseconds >= 1e9
    layout.set(rows, 'header.stamp.sec', seconds + carried)
    layout.set(rows, 'header.stamp.nanosec', np.where(carried, 0.0, nanoseconds))
    out = dict(columns)
    if 'velocity_map_m_s' in out:
        turn = matrices(out['quaternion_wxyz'])
        back = turn.transpose(0, 2, 1)
        out['velocity_map_m_s'] = np.einsum('nij,nj->ni', back, out['velocity_map_m_s'])
        if topic.value_type is Estimate:
            out['pose_covariance'] = _turned(out['pose_covariance'], 3, turn)
            out['twist_covariance'] = _turned(out['twist_covariance'], 0, back)
    for column, paths in LEAVES[topic.value_type].items():
        if len(paths) == 1:
            layout.set(rows, paths[0], out[column].reshape(len(stamp), -1))
        else:
            for k, path in enumerate(paths):
                layout.set(rows, path, out[column][:, k])
    return rows
