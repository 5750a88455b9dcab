"""Parameter files: what ROS would ignore in silence is refused."""

import os
from typing import Any

from suspended_ctrl.nodes.parameters import check
from suspended_ctrl.nodes.registry import MODELS
from suspended_ctrl.rig.errors import InputError
from suspended_ctrl.rig.yaml_file import read_text
from suspended_ctrl.rig.yaml_tree import parse, value_text

_EVERY_NODE = '/**'
_SECTION = 'ros__parameters'


def check_file(path: str | os.PathLike[str]) -> dict[str, dict[str, Any]]:
    """
    Hold a parameter file of this package to the nodes' models.

    Parameters
    ----------
    path : path-like
        The file.

    Returns
    -------
    dict of str to dict
        What the file gives each node that it speaks of, by name of the executable.

    Raises
    ------
    InputError
        For a key that no node in any namespace would read, and as ``parameters.check``.

    """
    file = os.fspath(path)
    tree = parse(read_text(file), file)
    found: dict[str, dict[str, Any]] = {}
    for key, value in tree.value.items():
        nodes = _nodes(key)
        if not nodes:
            raise InputError(f'{file}:{tree.line((key,))}: {key}: value {value_text(value)}: '
                             f'{_EVERY_NODE} or {_EVERY_NODE}/NODE, NODE one of '
                             f'{", ".join(MODELS)}; anything else is ignored under a namespace')
        if not isinstance(value, dict) or list(value) != [_SECTION] or not isinstance(
                value[_SECTION], dict):
            raise InputError(f'{file}:{tree.line((key,))}: {key}: value {value_text(value)}: '
                             f'a mapping with the one key {_SECTION}')
        for node in nodes:
            found.setdefault(node, {}).update(value[_SECTION])
            check(MODELS[node], value[_SECTION], f'{file}:{tree.line((key, _SECTION))}')
    return found


def _nodes(key: str) -> list[str]:
    if key == _EVERY_NODE:
        return list(MODELS)
    name = key.removeprefix(f'{_EVERY_NODE}/')
    return [name] if name != key and name in MODELS else []
