"""Serialized messages into tuples with the fields as attributes."""

from collections import namedtuple
from collections.abc import Callable
from functools import cache
from operator import itemgetter
import struct
from typing import Any

import numpy as np
from rosbags.interfaces import Nodetype

from suspended_ctrl.nodes.wire.layout import CODES, fields, flat, HEADER_BYTES, one_size
from suspended_ctrl.review.messages import MessageError

# From the bytes after the header and a place among them: a value and the place after it.
Read = Callable[[bytes, int], tuple[Any, int]]

_ORDERS = {b'\x00\x01': '<', b'\x00\x00': '>'}
_tuple = tuple.__new__


def decode(data: bytes, type_name: str) -> Any:
    """
    Take a serialized message apart.

    Parameters
    ----------
    data : bytes
        With its header; what follows the message is left alone, since some publishers pad it.
    type_name : str
        For example ``sensor_msgs/msg/Imu``.

    Returns
    -------
    namespace

    Raises
    ------
    MessageError
        If the bytes are not such a message.

    """
    order = _ORDERS.get(bytes(data[:2]))
    if order is None:
        raise MessageError(f'header {bytes(data[:2]).hex()} is not plain CDR')
    try:
        return reader(type_name, order)(bytes(data[HEADER_BYTES:]), 0)[0]
    except (struct.error, UnicodeDecodeError, ValueError) as error:
        raise MessageError(f'no {type_name}: {error}') from None


@cache
def texts_reader(order: str) -> Read:
    """Make the function that reads a sequence of strings."""
    return _items_reader(_base_reader('string', order), order, None, True)


@cache
def _shape(type_name: str) -> Any:
    """Class of a message that was read: a tuple with the fields as attributes, quick to make."""
    return namedtuple(
        type_name.rsplit('/', 1)[1],
        [name for name, _, _ in fields(type_name)])


@cache
def reader(type_name: str, order: str) -> Read:
    """Make the function that reads a type in one byte order, '<' or '>'."""
    leaves = flat(type_name)
    if leaves and (size := one_size(leaves)) is not None:
        return _flat_reader(type_name, leaves, size, order)
    shape = _shape(type_name)
    parts = [_field_reader(node, argument, order)
             for _, node, argument in fields(type_name)]

    def read(body: bytes, at: int) -> tuple[Any, int]:
        values = []
        for part in parts:
            value, at = part(body, at)
            values.append(value)
        return _tuple(shape, values), at

    return read


def _flat_reader(type_name: str, leaves: list[tuple[str, str]], size: int, order: str) -> Read:
    numbers = struct.Struct(order + ''.join(code for _, code in leaves))
    unpack, width = numbers.unpack_from, numbers.size
    build, _ = _nest(type_name, 0)

    def read(body: bytes, at: int) -> tuple[Any, int]:
        at += -at % size
        return build(unpack(body, at)), at + width

    return read


def _nest(type_name: str, first: int) -> tuple[Callable[[tuple[Any, ...]], Any], int]:
    """Make the function that puts numbers in a row into a type's own shape."""
    shape = _shape(type_name)
    parts: list[Callable[[tuple[Any, ...]], Any]] = []
    simple = True
    at = first
    for _, node, argument in fields(type_name):
        if node == Nodetype.BASE:
            parts.append(itemgetter(at))
            at += 1
        else:
            inner, at = _nest(argument, at)
            parts.append(inner)
            simple = False
    if simple:
        return lambda row: _tuple(shape, row[first:at]), at
    return lambda row: _tuple(shape, [part(row) for part in parts]), at


def _field_reader(node: Nodetype, argument: Any, order: str) -> Read:
    if node == Nodetype.NAME:
        return reader(argument, order)
    if node == Nodetype.BASE:
        return _base_reader(argument[0], order)
    (inner, inner_argument), count = argument
    fixed = count if node == Nodetype.ARRAY else None
    if inner == Nodetype.BASE and inner_argument[0] in CODES:
        return _numbers_reader(CODES[inner_argument[0]], order, fixed)
    item = _field_reader(inner, inner_argument, order)
    return _items_reader(item, order, fixed, inner == Nodetype.BASE)


def _items_reader(item: Read, order: str, fixed: int | None, texts: bool) -> Read:
    length = struct.Struct(order + 'I').unpack_from
    # Names of joints are the same in every message of a topic: bytes that begin like the last
    # list, its count and lengths included, are that list.
    last_raw = b''
    last_items: list[Any] = []

    def read(body: bytes, at: int) -> tuple[Any, int]:
        nonlocal last_raw, last_items
        at += -at % 4
        if last_raw and body.startswith(last_raw, at):
            return last_items, at + len(last_raw)
        start, number = at, fixed
        if number is None:
            (number,) = length(body, at)
            at += 4
            if number > len(body):
                raise ValueError(f'{number} elements in {len(body)} bytes')
        items = []
        for _ in range(number):
            value, at = item(body, at)
            items.append(value)
        if texts and fixed is None:
            last_raw, last_items = body[start:at], items
        return items, at

    return read


def _base_reader(base: str, order: str) -> Read:
    if base == 'string':
        length = struct.Struct(order + 'I').unpack_from

        def read_text(body: bytes, at: int) -> tuple[Any, int]:
            at += -at % 4
            (size,) = length(body, at)
            end = at + 4 + size
            if end > len(body):
                raise ValueError('ends inside a string')
            return body[at + 4:max(end - 1, at + 4)].decode(), end

        return read_text
    number = struct.Struct(order + CODES[base])
    unpack, width = number.unpack_from, number.size

    def read_number(body: bytes, at: int) -> tuple[Any, int]:
        at += -at % width
        return unpack(body, at)[0], at + width

    return read_number


def _numbers_reader(code: str, order: str, fixed: int | None) -> Read:
    kind = np.dtype(order + code)
    width = kind.itemsize
    nothing = np.zeros(0, kind)
    length = struct.Struct(order + 'I').unpack_from

    def read(body: bytes, at: int) -> tuple[Any, int]:
        number = fixed
        if number is None:
            at += -at % 4
            (number,) = length(body, at)
            at += 4
        if not number:
            return nothing, at
        at += -at % width
        end = at + number * width
        if end > len(body):
            raise ValueError('ends inside an array')
        return np.frombuffer(body, kind, number, at), end

    return read
