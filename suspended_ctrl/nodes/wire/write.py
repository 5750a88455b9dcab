"""Messages, as namespaces of their fields, into bytes."""

from collections.abc import Callable, Sequence
from functools import cache
from operator import attrgetter
import struct
from types import SimpleNamespace
from typing import Any

import numpy as np
from rosbags.interfaces import Nodetype

from suspended_ctrl.nodes.wire.layout import CODES, fields, flat, one_size
from suspended_ctrl.rig.frozen import Array

# Appends a value's bytes to those before it.
Write = Callable[[bytearray, Any], None]

_PADDING = [b'\0' * n for n in range(8)]
_HEADER = b'\x00\x01\x00\x00'


class WireTypes:
    """Message classes for ``review.messages``: any type is a namespace of its fields."""

    def __call__(self, name: str) -> Any:
        """Class of a message type."""
        return SimpleNamespace

    def floats(self, values: Sequence[float] | Array) -> Any:
        """Array of float64."""
        return np.asarray(values, dtype=np.float64)

    def byte(self, value: int) -> Any:
        """Byte as an integer."""
        return value


def encode(message: Any, type_name: str) -> bytes:
    """
    Serialize a message, little-endian.

    Parameters
    ----------
    message : object
        With the type's fields as attributes.
    type_name : str
        Such as ``geometry_msgs/msg/PoseStamped``.

    Returns
    -------
    bytes
        With the header.

    """
    body = bytearray()
    writer(type_name)(body, message)
    return _HEADER + bytes(body)


@cache
def writer(type_name: str) -> Write:
    """Make the function that writes a type, little-endian."""
    leaves = flat(type_name)
    if leaves and (size := one_size(leaves)) is not None:
        return _flat_writer(leaves, size)
    parts = [(name, _field_writer(node, argument))
             for name, node, argument in fields(type_name)]

    def write(body: bytearray, message: Any) -> None:
        for name, part in parts:
            part(body, getattr(message, name))

    return write


def _flat_writer(leaves: list[tuple[str, str]], size: int) -> Write:
    pack = struct.Struct('<' + ''.join(code for _, code in leaves)).pack
    get = attrgetter(*(path for path, _ in leaves))
    single = len(leaves) == 1

    def write(body: bytearray, message: Any) -> None:
        body += _PADDING[-len(body) % size]
        body += pack(get(message)) if single else pack(*get(message))

    return write


def _field_writer(node: Nodetype, argument: Any) -> Write:
    if node == Nodetype.NAME:
        return writer(argument)
    if node == Nodetype.BASE:
        return _base_writer(argument[0])
    (inner, inner_argument), count = argument
    fixed = count if node == Nodetype.ARRAY else None
    if inner == Nodetype.BASE and inner_argument[0] in CODES:
        return _numbers_writer(CODES[inner_argument[0]], fixed)
    item = _field_writer(inner, inner_argument)

    def write(body: bytearray, values: Any) -> None:
        if fixed is None:
            body += _PADDING[-len(body) % 4]
            body += struct.pack('<I', len(values))
        for value in values:
            item(body, value)

    return write


def _base_writer(base: str) -> Write:
    if base == 'string':
        def write_text(body: bytearray, text: Any) -> None:
            data = text.encode() + b'\0'
            body += _PADDING[-len(body) % 4]
            body += struct.pack('<I', len(data))
            body += data

        return write_text
    number = struct.Struct('<' + CODES[base])

    def write_number(body: bytearray, value: Any) -> None:
        body += _PADDING[-len(body) % number.size]
        body += number.pack(value)

    return write_number


def _numbers_writer(code: str, fixed: int | None) -> Write:
    kind = np.dtype('<' + code)

    def write(body: bytearray, values: Any) -> None:
        array = np.ascontiguousarray(values, dtype=kind)
        if fixed is None:
            body += _PADDING[-len(body) % 4]
            body += struct.pack('<I', len(array))
        elif array.shape != (fixed,):
            raise ValueError(f'{array.shape} instead of ({fixed},) numbers')
        if len(array):
            body += _PADDING[-len(body) % kind.itemsize]
            body += array.tobytes()

    return write
