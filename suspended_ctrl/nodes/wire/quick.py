"""
Values straight from and to the bytes of messages that look like the one before.

Messages of a topic mostly have the same names, frames and counts, so their numbers stand in the
same places (``review.cdr_layout``). One struct call then takes them out or puts them in, a quarter
of the work of going through messages. Which number belongs where is ``review.columns``; whatever
does not look the same, or may not be right, is left to ``review.messages``.
"""

from collections.abc import Callable, Mapping, Sequence
from itertools import chain
from math import isfinite
import struct
from typing import Any

import numpy as np

from suspended_ctrl.review.cdr_layout import Layout
from suspended_ctrl.review.messages.build import split_seconds
from suspended_ctrl.review.messages.read import UNIT_EXACT
from suspended_ctrl.review.topics import JointNames, Topic

# A topic with more kinds of messages than this has no usual one.
_PLANS_MAX = 3
_STAMP = ('header.stamp.sec', 'header.stamp.nanosec')
_CODES = {'<i4': 'i', '<u4': 'I', '<f8': 'd'}
_NANOSECONDS = 1_000_000_000
_PAIR = struct.Struct('<iI')

Fields = Mapping[str, tuple[str, ...]]
Make = Callable[..., Any]


def _places(layout: Layout, paths: tuple[str, ...]) -> list[tuple[int, str]]:
    """First byte and struct code of the numbers at some paths, in their order."""
    found = []
    for path in paths:
        leaf = layout.leaves[path]
        size = np.dtype(leaf.kind).itemsize
        found += [(leaf.offset + k * size, _CODES[leaf.kind])
                  for k in range(1 if leaf.count is None else leaf.count)]
    return found


class _Plan:
    """How to take a value out of messages that look like ``data``."""

    def __init__(self, topic: Topic, data: bytes, fields: Fields, names: JointNames) -> None:
        layout = Layout(topic.message_type, data)
        if topic.joints:
            given = layout.strings.get('name') or layout.strings.get('joint_names')
            if given != list(topic.joint_names(names)):
                raise ValueError('joints in another order')
        self._size = len(data)
        free = np.ones(len(data), dtype=bool)
        for leaf in layout.leaves.values():
            width = np.dtype(leaf.kind).itemsize * (1 if leaf.count is None else leaf.count)
            free[leaf.offset:leaf.offset + width] = False
        edges = np.flatnonzero(np.diff(np.concatenate(([0], free.astype(np.int8), [0]))))
        self._same = [(slice(a, b), data[a:b])
                      for a, b in zip(edges[::2].tolist(), edges[1::2].tolist(), strict=True)]
        places = [_places(layout, paths) for paths in (_STAMP, *fields.values())]
        order = sorted(chain(*places))
        form, at = '<', 0
        for offset, code in order:
            form += f'{offset - at}x{code}'
            at = offset + struct.calcsize(code)
        self._unpack = struct.Struct(form).unpack_from
        rank = {place: k for k, place in enumerate(order)}
        self._parts = [(name, _picker([rank[place] for place in spots]))
                       for name, spots in zip(fields, places[1:], strict=True)]
        self._scalars = {name for name, paths in fields.items()
                         if len(paths) == 1 and layout.leaves[paths[0]].count is None}

    def fits(self, data: bytes) -> bool:
        """Whether a message has the strings and counts of the example."""
        if len(data) != self._size:
            return False
        for where, what in self._same:
            if data[where] != what:
                return False
        return True

    def read(self, data: bytes, make: Make) -> Any:
        """Value of a message; None if it must be looked at more closely."""
        if not self.fits(data):
            return None
        numbers = self._unpack(data)
        if not (isfinite(sum(numbers)) and numbers[1] < _NANOSECONDS):
            return None
        values: dict[str, Any] = {}
        for name, pick in self._parts:
            picked = pick(numbers)
            if name == 'quaternion_wxyz':
                w, x, y, z = picked
                if abs(w * w + x * x + y * y + z * z - 1.0) > UNIT_EXACT:
                    return None
            if name in self._scalars:
                values[name] = picked[0]
                continue
            array = np.array(picked)
            array.setflags(write=False)
            values[name] = array
        return make(stamp_s=numbers[0] + 1e-9 * numbers[1], **values)


def _picker(ranks: list[int]) -> Callable[[Any], Any]:
    first = ranks[0] if ranks else 0
    if ranks == list(range(first, first + len(ranks))):
        where = slice(first, first + len(ranks))
        return lambda numbers: numbers[where]
    return lambda numbers: tuple(numbers[k] for k in ranks)


class QuickReader:
    """
    Reads the messages of a topic.

    Parameters
    ----------
    topic : Topic
    names : JointNames
    fields : mapping of str to tuple of str
        Where each of the value's fields stands, as in ``review.columns.LEAVES``.
    make : callable
        Takes ``stamp_s`` and the fields by keyword, gives the value or None.

    """

    def __init__(self, topic: Topic, names: JointNames, fields: Fields, make: Make) -> None:
        self._topic, self._names = topic, names
        self._fields, self._make = fields, make
        self._plans: list[_Plan] = []

    def read(self, data: bytes) -> Any:
        """Value of a message; None where ``review.messages`` must look at it."""
        for plan in self._plans:
            if (value := plan.read(data, self._make)) is not None:
                return value
        return None

    def learn(self, data: bytes) -> None:
        """Take a message that was found right as an example of what comes next."""
        if len(self._plans) >= _PLANS_MAX or any(plan.fits(data) for plan in self._plans):
            return
        try:
            self._plans.append(_Plan(self._topic, data, self._fields, self._names))
        except (ValueError, KeyError):
            # Not of the usual kind: there is nothing to learn from it.
            return


class QuickWriter:
    """
    Writes values into copies of a message.

    Parameters
    ----------
    topic : Topic
    data : bytes
        A message of the topic with the joints in the rig's order.
    fields : mapping of str to tuple of str
        As for ``QuickReader``.

    """

    def __init__(self, topic: Topic, data: bytes, fields: Fields) -> None:
        layout = Layout(topic.message_type, data)
        self._data = data
        self._stamp_at = layout.leaves[_STAMP[0]].offset
        places = list(chain(*(_places(layout, paths) for paths in fields.values())))
        self._count = len(places)
        order = sorted(range(len(places)), key=lambda k: places[k])
        self._runs: list[tuple[int, struct.Struct, Callable[[Any], Any]]] = []
        first = 0
        for k in range(1, len(order) + 1):
            if k == len(order) or places[order[k]][0] != places[order[k - 1]][0] + 8:
                run = order[first:k]
                self._runs.append((places[run[0]][0], struct.Struct(f'<{len(run)}d'),
                                   _picker(run)))
                first = k

    def write(self, stamp_s: float, fields: Sequence[Any]) -> bytes | None:
        """Message of fields in their order; None where they are more or fewer than before."""
        numbers: list[float] = []
        for field in fields:
            numbers += field.ravel().tolist() if isinstance(field, np.ndarray) else [field]
        if len(numbers) != self._count:
            return None
        out = bytearray(self._data)
        _PAIR.pack_into(out, self._stamp_at, *split_seconds(stamp_s))
        for at, run, pick in self._runs:
            run.pack_into(out, at, *pick(numbers))
        return bytes(out)
