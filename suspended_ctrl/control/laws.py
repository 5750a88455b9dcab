"""The wrench laws by name; other packages add theirs under the entry point group."""

from typing import Protocol

from suspended_ctrl.control.computed_torque import ComputedTorque
from suspended_ctrl.control.values import LawInputs
from suspended_ctrl.physics.registry import Registry
from suspended_ctrl.physics.values import Wrench


class Law(Protocol):
    """What every law has; it is made as ``Law(rig, bandwidth_hz, damping_ratio)``."""

    def step(self, t: float, inputs: LawInputs) -> Wrench:
        """Return the demand for the moment at which it is felt."""
        ...


LAWS: Registry[Law] = Registry('law', 'suspended_ctrl.laws', {'computed_torque': ComputedTorque})
