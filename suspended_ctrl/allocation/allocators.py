"""The allocators by name; other packages add theirs under the entry point group."""

from typing import Protocol

from suspended_ctrl.allocation.priority_qp import PriorityQp
from suspended_ctrl.allocation.pseudo_inverse import PseudoInverse
from suspended_ctrl.allocation.values import Allocation, AllocationInputs
from suspended_ctrl.physics.registry import Registry


class Allocator(Protocol):
    """What every allocator has; it is made as ``Allocator(rig)``."""

    def step(self, t: float, inputs: AllocationInputs) -> Allocation:
        """Share one tick's wrench out."""
        ...


ALLOCATORS: Registry[Allocator] = Registry('allocator', 'suspended_ctrl.allocators', {
    'pseudo_inverse': PseudoInverse, 'priority_qp': PriorityQp})
