"""Which numbers a message type is made of."""

import struct
from typing import Any

from rosbags.interfaces import Nodetype

from suspended_ctrl.review.bag_types import typestore

CODES = {'bool': '?', 'byte': 'B', 'char': 'B', 'int8': 'b', 'uint8': 'B', 'int16': 'h',
         'uint16': 'H', 'int32': 'i', 'uint32': 'I', 'int64': 'q', 'uint64': 'Q', 'float32': 'f',
         'float64': 'd'}
HEADER_BYTES = 4


def fields(type_name: str) -> list[tuple[str, Nodetype, Any]]:
    """Name, kind and argument of every field of a message type, as in rosbags."""
    return [(name, node, argument)
            for name, (node, argument) in typestore().fielddefs[type_name][1]]


def flat(type_name: str, prefix: str = '') -> list[tuple[str, str]] | None:
    """Paths and codes of the numbers of a type that has nothing else in it, else None."""
    leaves: list[tuple[str, str]] = []
    for name, node, argument in fields(type_name):
        if node == Nodetype.BASE and argument[0] in CODES:
            leaves.append((prefix + name, CODES[argument[0]]))
        elif node == Nodetype.NAME and (inner := flat(argument, f'{prefix}{name}.')) is not None:
            leaves.extend(inner)
        else:
            return None
    return leaves


def one_size(leaves: list[tuple[str, str]]) -> int | None:
    """Size of the numbers where all have the same, so that nothing stands between them."""
    sizes = {struct.calcsize(code) for _, code in leaves}
    return sizes.pop() if len(sizes) == 1 else None
