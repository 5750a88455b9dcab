"""Who supplies the wrench: rotors and carrier share the work."""

from suspended_ctrl.allocation.allocator import EffortAllocator
from suspended_ctrl.allocation.allocators import Allocator, ALLOCATORS
from suspended_ctrl.allocation.settings import EffortSettings
from suspended_ctrl.allocation.values import (
    Allocation,
    AllocationInputs,
    EffortInputs,
    EffortOutputs,
)

__all__ = ['ALLOCATORS', 'Allocation', 'AllocationInputs', 'Allocator', 'EffortAllocator',
           'EffortInputs', 'EffortOutputs', 'EffortSettings']
