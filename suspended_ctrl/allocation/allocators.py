"""The allocators by name; other packages add theirs under the entry point group."""

from typing import Protocol, runtime_checkable

from suspended_ctrl.allocation.carrier_plan import PlanRequest
from suspended_ctrl.allocation.horizon_qp import HorizonQp
from suspended_ctrl.allocation.priority_qp import PriorityQp
from suspended_ctrl.allocation.pseudo_inverse import PseudoInverse
from suspended_ctrl.allocation.values import Allocation, AllocationInputs
from suspended_ctrl.physics.registry import Registry
from suspended_ctrl.physics.values import CarrierPlan


class Allocator(Protocol):
    """What every allocator has; it is made as ``Allocator(rig)``."""

    def step(self, t: float, inputs: AllocationInputs) -> Allocation:
        """Share one tick's wrench out."""
        ...


ALLOCATORS: Registry[Allocator] = Registry('allocator', 'suspended_ctrl.allocators', {
    'pseudo_inverse': PseudoInverse, 'priority_qp': PriorityQp,
    'horizon_qp': HorizonQp})


@runtime_checkable
class PlanningAllocator(Allocator, Protocol):
    """An allocator that plans outside the tick."""

    def plan_request(self, t: float) -> PlanRequest | None:
        """Say what to plan from, once a period; None in between."""
        ...

    def solve_plan(self, request: PlanRequest) -> CarrierPlan:
        """Solve a request."""
        ...

    def take_plan(self, plan: CarrierPlan) -> None:
        """Bring the answer."""
        ...
