"""
References on the wire, all points at once.

A reference has thousands of points. One by one they keep a controller for some tenths of a second,
longer than the supervisor waits; every point has the same 184 bytes, so numpy takes them as rows.
"""

import struct
from typing import Any

import numpy as np

from suspended_ctrl.nodes.wire.layout import HEADER_BYTES
from suspended_ctrl.nodes.wire.read import decode, reader, texts_reader
from suspended_ctrl.nodes.wire.write import encode, WireTypes
from suspended_ctrl.physics.reference import Reference
from suspended_ctrl.review.messages import (
    build_reference,
    checked_reference,
    read_reference,
    read_time,
)
from suspended_ctrl.review.topics import TOPICS
from suspended_ctrl.rig.frozen import Array

_TYPE = TOPICS['reference'].message_type
# One transform, one velocity, one acceleration and the time; counts come before each, and eight
# bytes are aligned to eight (see ``wire``).
_POINT = np.dtype({
    'names': ['transforms', 'transform', 'velocities', 'velocity', 'accelerations',
              'acceleration', 'sec', 'nanosec'],
    'formats': ['<u4', ('<f8', 7), '<u4', ('<f8', 6), '<u4', ('<f8', 6), '<i4', '<u4'],
    'offsets': [0, 8, 64, 72, 120, 128, 176, 180], 'itemsize': 184})
_COUNTS = ('transforms', 'velocities', 'accelerations')


def encode_reference(reference: Reference | None) -> bytes:
    """Serialize a reference; None gives the message without points that clears one."""
    message = build_reference(WireTypes(), None, reference.start_s if reference else None)
    head = encode(message, _TYPE)
    if reference is None:
        return head
    count = len(reference.time_s)
    rows = np.zeros(count, _POINT)
    for name in _COUNTS:
        rows[name] = 1
    rows['transform'][:, :3] = reference.position_map_m
    rows['transform'][:, 3:] = reference.quaternion_wxyz[:, [1, 2, 3, 0]]
    rows['velocity'][:, :3] = reference.velocity_map_m_s
    rows['velocity'][:, 3:] = reference.rate_body_rad_s
    rows['acceleration'][:, :3] = reference.acceleration_map_m_s2
    rows['acceleration'][:, 3:] = reference.rate_dot_body_rad_s2
    nanoseconds = np.rint(reference.time_s * 1e9).astype(np.int64)
    rows['sec'], rows['nanosec'] = np.divmod(nanoseconds, 1_000_000_000)
    body = rows.tobytes()
    # The message ends in the number of points, which was none.
    return (head[:-4] + np.uint32(count).tobytes()
            + (body[:4] + body[8:] if _close(len(head)) else body))


def decode_reference(data: bytes) -> Reference | None:
    """
    Take a serialized reference apart.

    Parameters
    ----------
    data : bytes
        Bytes of the message, CDR.

    Returns
    -------
    Reference or None
        None for zero points, which clear the reference.

    Raises
    ------
    MessageError
        As ``review.messages.read_reference``.

    """
    data = bytes(data)
    try:
        stamp, names, place, count = _head(data)
        rows = _rows(data, place, count)
    except (ValueError, IndexError, struct.error):
        rows = None
    if rows is None:
        # Whatever is wrong or unusual is said, or read, point by point.
        return read_reference(decode(data, _TYPE))
    return checked_reference(read_time(stamp), names, rows)


def _close(place: int) -> bool:
    """Whether the first count of the first point stands right before its numbers."""
    return (place - HEADER_BYTES) % 8 == 4


def _head(data: bytes) -> tuple[Any, list[str], int, int]:
    """Stamp, joint names, place of the first point, number of points."""
    if data[:2] != b'\x00\x01':
        raise ValueError('not little-endian')
    body = data[HEADER_BYTES:]
    header, at = reader('std_msgs/msg/Header', '<')(body, 0)
    names, at = texts_reader('<')(body, at)
    at += -at % 4
    return header.stamp, names, at + 4 + HEADER_BYTES, int.from_bytes(body[at:at + 4], 'little')


def _rows(data: bytes, place: int, count: int) -> Array | None:
    """Numbers of all points for ``checked_reference``; None where they do not stand in rows."""
    if _close(place):
        data = data[:place] + data[place:place + 4] + data[place:]
    if not 0 < count <= (len(data) - place) // _POINT.itemsize:
        return None
    points = np.frombuffer(data, _POINT, count, place)
    if any((points[name] != 1).any() for name in _COUNTS):
        return None
    if (points['nanosec'] >= 1_000_000_000).any():
        return None
    rows: Array = np.empty((count, 20))
    rows[:, 0] = points['sec'] + 1e-9 * points['nanosec']
    rows[:, 1:4] = points['transform'][:, :3]
    rows[:, 4:8] = points['transform'][:, [6, 3, 4, 5]]
    rows[:, 8:14] = points['velocity']
    rows[:, 14:20] = points['acceleration']
    return rows
