"""
Where the numbers of a message stand in its serialised bytes.

Messages of one topic mostly have the same names, frames and counts, so their numbers stand in the
same places: thousands of them are then read or written as one table of bytes. Serialisation is
CDR, little-endian, aligned from the byte after the four of its header (OMG DDSI-RTPS 2.3, 10.2).
"""

from dataclasses import dataclass
import struct
from typing import Any

import numpy as np
from rosbags.interfaces import Nodetype

from suspended_ctrl.review.bag_types import typestore

_SIZES = {'bool': 1, 'byte': 1, 'char': 1, 'int8': 1, 'uint8': 1, 'int16': 2, 'uint16': 2,
          'int32': 4, 'uint32': 4, 'int64': 8, 'uint64': 8, 'float32': 4, 'float64': 8}
_KINDS = {'bool': 'u1', 'byte': 'u1', 'char': 'u1', 'int8': 'i1', 'uint8': 'u1', 'int16': '<i2',
          'uint16': '<u2', 'int32': '<i4', 'uint32': '<u4', 'int64': '<i8', 'uint64': '<u8',
          'float32': '<f4', 'float64': '<f8'}
_LITTLE_ENDIAN = b'\x00\x01'


@dataclass(frozen=True)
class Leaf:
    """Numbers that stand side by side: first byte, numpy type, how many, or None for just one."""

    offset: int
    kind: str
    count: int | None


class Layout:
    """
    The places of one message's numbers.

    Parameters
    ----------
    message_type : str
    raw : bytes
        One serialised message.

    Attributes
    ----------
    leaves : dict of str to Leaf
        By path, such as ``pose.position.x`` or ``points[0].positions``.
    strings : dict of str to list of str
        By path; a single string is a list of one.
    size : int
        Length of the message in bytes.

    Raises
    ------
    ValueError
        If the bytes are no such message.

    """

    def __init__(self, message_type: str, raw: bytes) -> None:
        if raw[:2] != _LITTLE_ENDIAN:
            raise ValueError(f'serialised as {raw[:2].hex()}, only 0001 is read')
        self.size = len(raw)
        self.leaves: dict[str, Leaf] = {}
        self.strings: dict[str, list[str]] = {}
        self._raw = raw
        self._meant = np.zeros(self.size, dtype=bool)
        self._at = 4
        try:
            self._message(message_type, '')
        except (struct.error, UnicodeDecodeError) as error:
            raise ValueError(f'no {message_type}: {error}') from None
        constant = np.ones(self.size, dtype=bool)
        for leaf in self.leaves.values():
            width = np.dtype(leaf.kind).itemsize * (1 if leaf.count is None else leaf.count)
            constant[leaf.offset:leaf.offset + width] = False
        # Bytes that alignment left over may hold anything.
        self._constant = np.flatnonzero(constant & self._meant)

    def _message(self, message_type: str, prefix: str) -> None:
        for name, (node, argument) in typestore().fielddefs[message_type][1]:
            self._field(node, argument, f'{prefix}{name}')

    def _field(self, node: Nodetype, argument: Any, path: str) -> None:
        if node == Nodetype.NAME:
            self._message(argument, f'{path}.')
        elif node == Nodetype.BASE:
            if argument[0] == 'string':
                self.strings.setdefault(path, []).append(self._string())
            else:
                self._numbers(argument[0], None, path)
        else:
            (inner, inner_argument), _ = argument
            count = argument[1] if node == Nodetype.ARRAY else self._length()
            if inner == Nodetype.BASE and inner_argument[0] != 'string':
                self._numbers(inner_argument[0], count, path)
                return
            for k in range(count):
                same = inner == Nodetype.BASE
                self._field(inner, inner_argument, path if same else f'{path}[{k}]')

    def _numbers(self, base: str, count: int | None, path: str) -> None:
        size = _SIZES[base]
        total = size * (1 if count is None else count)
        if total:
            self._at += -(self._at - 4) % size
        if self._at + total > self.size:
            raise ValueError(f'ends inside {path}')
        self.leaves[path] = Leaf(self._at, _KINDS[base], count)
        self._at += total

    def _length(self) -> int:
        self._at += -(self._at - 4) % 4
        (length,) = struct.unpack_from('<I', self._raw, self._at)
        self._meant[self._at:self._at + 4] = True
        self._at += 4
        if length > self.size:
            raise ValueError(f'{length} elements in {self.size} bytes')
        return int(length)

    def _string(self) -> str:
        length = self._length()
        start, self._at = self._at, self._at + length
        if self._at > self.size:
            raise ValueError('ends inside a string')
        self._meant[start:self._at] = True
        return self._raw[start:self._at - 1].decode()

    def fits(self, rows: np.ndarray) -> bool:
        """Whether every row of bytes, shape (n, size), has the strings and counts of this one."""
        sample = np.frombuffer(self._raw, dtype=np.uint8)
        return bool((rows[:, self._constant] == sample[self._constant]).all())

    def get(self, rows: np.ndarray, path: str) -> np.ndarray:
        """Numbers of one leaf, shape (n,), or (n, count) of an array."""
        leaf = self.leaves[path]
        kind = np.dtype(leaf.kind)
        count = 1 if leaf.count is None else leaf.count
        part = np.ascontiguousarray(rows[:, leaf.offset:leaf.offset + kind.itemsize * count])
        numbers = part.view(kind).reshape(len(rows), count)
        return numbers[:, 0] if leaf.count is None else numbers

    def tiled(self, count: int) -> np.ndarray:
        """``count`` copies of the message, shape (count, size), to be filled in."""
        return np.tile(np.frombuffer(self._raw, dtype=np.uint8), (count, 1))

    def set(self, rows: np.ndarray, path: str, numbers: np.ndarray) -> None:  # noqa: A003
        """Put one leaf's numbers, shape (n,) or (n, count), into rows of bytes."""
        leaf = self.leaves[path]
        packed = np.ascontiguousarray(numbers, dtype=leaf.kind).reshape(len(rows), -1)
        view = packed.view(np.uint8)
        rows[:, leaf.offset:leaf.offset + view.shape[1]] = view
