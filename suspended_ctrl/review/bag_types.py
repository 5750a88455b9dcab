"""The message classes that recordings are written and read with."""

from collections.abc import Sequence
from functools import cache
from typing import Any

import numpy as np
from rosbags.typesys import get_typestore, Stores
from rosbags.typesys.store import Typestore

from suspended_ctrl.rig.frozen import Array


@cache
def typestore() -> Typestore:
    """Definitions of the standard messages as of the ROS 2 release that we support."""
    return get_typestore(Stores.ROS2_JAZZY)


class BagTypes:
    """rosbags' message classes, see ``MessageTypes``."""

    def __init__(self) -> None:
        self._classes: dict[str, Any] = dict(typestore().types)

    def __call__(self, name: str) -> Any:
        """Class of a message type."""
        return self._classes[name]

    def floats(self, values: Sequence[float] | Array) -> Any:
        """Array of float64."""
        return np.asarray(values, dtype=np.float64)

    def byte(self, value: int) -> Any:
        """Byte as an integer."""
        return value
