"""Node ``effort_allocator``: wrench demand in, rotor and carrier demands out."""

from collections import deque
from functools import partial
import sys
import time

import numpy as np
from pydantic import Field
from rcl_interfaces.msg import SetParametersResult
from rclpy.parameter import Parameter

from suspended_ctrl.allocation.allocator import EffortAllocator
from suspended_ctrl.allocation.allocators import Allocator, ALLOCATORS
from suspended_ctrl.allocation.settings import EffortSettings
from suspended_ctrl.allocation.values import EffortInputs
from suspended_ctrl.nodes.estimate_inbox import EstimateInbox
from suspended_ctrl.nodes.managed import ManagedNode
from suspended_ctrl.nodes.orders import OrdersInbox
from suspended_ctrl.nodes.parameters import NodeParameters, run_time
from suspended_ctrl.nodes.run import run_node

NAME = 'effort_allocator'
_PLANS_REMEMBERED = 1000
# The carrier answers in seconds: its demand need not go out at every tick.
_CARRIER_EVERY_S = 0.02


class EffortAllocatorParameters(NodeParameters):
    """Parameters of ``effort_allocator``."""

    allocator: str = run_time('horizon_qp', 'Name of the allocator; may be set while the node '
                              'runs, while live only without a step of the rotors.')
    transport_s: float = Field(0.0037, ge=0.0, le=0.1, description="From the allocator's step "
                               'to the drives, half a tick of hold included.')
    lag_gain: float = Field(1.3, ge=1.0, le=3.0, description='Lag inversion: commands lead by '
                            'this factor.')
    rate_hz: float = Field(200.0, ge=20.0, le=1000.0, description='Demands a second, as a rule.')


class EffortAllocatorNode(ManagedNode):
    """Steps the allocator on each wrench demand."""

    parameters: EffortAllocatorParameters

    def __init__(self) -> None:
        super().__init__(NAME, EffortAllocatorParameters)
        self._allocator = self.parameters.allocator
        self._prepared: tuple[str, Allocator] | None = None
        self.part: EffortAllocator | None = None
        self.add_on_set_parameters_callback(self._may_set)
        self.add_post_set_parameters_callback(self._have_set)

    def build(self) -> None:
        """Make the allocator and its channels."""
        p = self.parameters
        self.part = EffortAllocator(self.rig, EffortSettings(
            self._allocator, p.transport_s, 1.0 / p.rate_hz, p.lag_gain),
            self._prepare(self._allocator)[1])
        self._demand = self.inbox('wrench_demand')
        self._estimate = EstimateInbox(self)
        self._orders = OrdersInbox(self)
        axes = self.rig.carrier.axes
        self._measured = [
            *([self.inbox('rotor_states')] if self.rig.sensors.rotor_states else []),
            *([self.inbox('carrier_states')] if axes and self.rig.sensors.carrier_states else [])]
        self._rotors = self.outbox('rotor_demand')
        self._achieved = self.outbox('wrench_achieved')
        self._carrier = self.outbox('carrier_demand') if axes else None
        self._plan = self.outbox('carrier_plan') if axes else None
        self._carrier_due_s = 0.0
        self._notes: dict[str, float] = {}
        self._plan_s: deque[float] = deque(maxlen=_PLANS_REMEMBERED)
        self.loop.listen([self._demand], 1.0 / p.rate_hz)

    def start(self) -> None:
        """Forget estimates from before."""
        self._estimate.forget()

    def turn(self, t: float, due: bool) -> None:
        """Step if a demand came."""
        demand = self._demand.newest()
        if demand is None:
            return
        assert self.part is not None
        self.loop.stepped()
        reference = self._orders.take()
        samples = tuple(sample for box in self._measured for sample in box.empty())
        inputs = EffortInputs(demand, self._estimate.newest(), self._orders.state, samples,
                              reference)
        started = time.perf_counter()
        outputs = self.part.step(t, inputs)
        self.health.stepped(time.perf_counter() - started)
        self._rotors.send(outputs.rotor_demand)
        self._achieved.send(outputs.achieved)
        if (self._carrier is not None and outputs.carrier_demand is not None
                and t >= self._carrier_due_s):
            self._carrier_due_s = max(self._carrier_due_s + _CARRIER_EVERY_S, t)
            self._carrier.send(outputs.carrier_demand)
        if self._plan is not None and outputs.plan is not None:
            self._plan.send(outputs.plan)
        self._notes = outputs.diagnostics
        # Outside the tick: what it asks of the drives is on its way already.
        if (request := self.part.plan_request(t)) is not None:
            started = time.perf_counter()
            self.part.take_plan(self.part.solve_plan(request))
            self._plan_s.append(time.perf_counter() - started)

    def notes(self) -> dict[str, float]:
        """Figures of the last step and of the plans."""
        if not self._plan_s:
            return self._notes
        return {**self._notes, 'plan_p50_s': float(np.quantile(self._plan_s, 0.5)),
                'plan_p99_s': float(np.quantile(self._plan_s, 0.99))}

    # ------------------------------------------------------------ another allocator

    def _may_set(self, changes: list[Parameter]) -> SetParametersResult:
        """Say whether the allocator could be changed, without changing it."""
        for change in changes:
            if change.name != 'allocator' or self.part is None:
                continue
            try:
                # Compiling a problem takes a second; the rig may hang on this node's ticks.
                self._prepared = self.loop.meanwhile(partial(self._prepare, change.value))
            except (LookupError, ValueError) as error:
                return SetParametersResult(successful=False, reason=str(error))
            if refusal := self.part.swap_refusal(self._prepared[1]):
                return SetParametersResult(successful=False, reason=refusal)
        return SetParametersResult(successful=True)

    def _prepare(self, allocator: str) -> tuple[str, Allocator]:
        strategy = ALLOCATORS.maker(allocator)(self.rig)
        # What an allocator compiles when it is first needed must not be so while the rig is live.
        prepare = getattr(strategy, 'prepare', None)
        if prepare is not None:
            prepare()
        return allocator, strategy

    def _have_set(self, changes: list[Parameter]) -> None:
        for change in changes:
            if change.name == 'allocator':
                self._allocator = change.value
                if self.part is not None and self._prepared is not None:
                    self.part.swap(*self._prepared)
                    self.get_logger().info(f'allocator: {change.value}')
                self._prepared = None


def main() -> int:
    """Run the node."""
    return run_node(NAME, __doc__ or '', EffortAllocatorParameters, EffortAllocatorNode)


if __name__ == '__main__':
    sys.exit(main())
