"""Values that only messages and recordings need, and the faults of messages."""

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any, Protocol

import numpy as np

from suspended_ctrl.rig.frozen import Array


class MessageError(ValueError):
    """A message that must not be used; its text is one line saying what is wrong with it."""


class MessageTypes(Protocol):
    """
    One library's message classes.

    The library is rosbags (recordings) or rclpy's generated classes (nodes); both take every field
    by keyword and give it back as an attribute.
    """

    def __call__(self, name: str) -> Any:
        """Class of a message type such as ``geometry_msgs/msg/PoseStamped``."""

    def floats(self, values: Sequence[float] | Array) -> Any:
        """Sequence of float64 as the library's fields want it."""

    def byte(self, value: int) -> Any:
        """Byte as the library's fields want it."""


@dataclass(frozen=True, eq=False, slots=True)
class Disturbance:
    """Force (N), torque (N m) at the centre of mass, map axes, that the model does not explain."""

    stamp_s: float
    force_map_n: Array
    torque_map_nm: Array


@dataclass(frozen=True, slots=True)
class NodeStatus:
    """One node's diagnostics: level 0 ok, 1 warning, 2 error, 3 stale; values as text."""

    name: str
    level: int
    message: str
    values: dict[str, str] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Diagnostics:
    """What one or several nodes said of themselves at ``stamp_s``."""

    stamp_s: float
    statuses: tuple[NodeStatus, ...]


NO_COVARIANCE = np.zeros((12, 12))
NO_COVARIANCE.setflags(write=False)
