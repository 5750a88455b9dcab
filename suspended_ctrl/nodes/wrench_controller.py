"""Node ``wrench_controller``: odometry and reference in, wrench demand out."""

from functools import partial
import sys
import time

from pydantic import Field
from rcl_interfaces.msg import SetParametersResult
from rclpy.parameter import Parameter

from suspended_ctrl.control.controller import ControlSettings, WrenchController
from suspended_ctrl.control.laws import LAWS
from suspended_ctrl.control.values import ControlInputs
from suspended_ctrl.nodes.estimate_inbox import EstimateInbox
from suspended_ctrl.nodes.managed import ManagedNode
from suspended_ctrl.nodes.orders import OrdersInbox
from suspended_ctrl.nodes.parameters import NodeParameters, run_time
from suspended_ctrl.nodes.run import run_node

NAME = 'wrench_controller'


class WrenchControllerParameters(NodeParameters):
    """Parameters of ``wrench_controller``."""

    law: str = run_time('computed_torque', 'Name of the law; may be set while the node runs.')
    bandwidth_hz: float = Field(1.6, ge=0.05, le=20.0, description='Bandwidth of the law; more '
                                'than the rotor lag carries is refused.')
    damping_ratio: float = Field(0.9, ge=0.3, le=2.0, description='Damping ratio of the law.')
    transport_s: float = Field(0.0045, ge=0.0, le=0.1, description="From the controller's step "
                               'to the drives, half a tick of hold included.')
    lag_gain: float = Field(1.3, ge=1.0, le=3.0, description='Lag inversion of the allocator; '
                            'both nodes need the same.')
    rate_hz: float = Field(200.0, ge=20.0, le=1000.0, description='Odometry a second, as a rule.')


class WrenchControllerNode(ManagedNode):
    """Steps the controller on each odometry."""

    parameters: WrenchControllerParameters

    def __init__(self) -> None:
        super().__init__(NAME, WrenchControllerParameters)
        self.add_on_set_parameters_callback(self._may_set)
        self.add_post_set_parameters_callback(self._have_set)
        self._law = self.parameters.law

    def build(self) -> None:
        """Make the controller and its channels."""
        p = self.parameters
        self.part = WrenchController(self.rig, ControlSettings(
            self._law, p.bandwidth_hz, p.damping_ratio, p.transport_s, p.lag_gain))
        self._estimate = EstimateInbox(self)
        self._orders = OrdersInbox(self)
        self._achieved = self.inbox('wrench_achieved')
        self._carrier = None
        self._plan = None
        if self.rig.carrier.axes:
            self._plan = self.inbox('carrier_plan')
            self._carrier = self.inbox('carrier_states')
        self._demand = self.outbox('wrench_demand')
        self._notes: dict[str, float] = {}
        self.loop.listen([self._estimate.odometry], 1.0 / p.rate_hz)

    def start(self) -> None:
        """Forget estimates from before."""
        self._estimate.forget()

    def turn(self, t: float, due: bool) -> None:
        """Step if odometry came."""
        estimate = self._estimate.newest()
        if estimate is None:
            return
        self.loop.stepped()
        reference = self._orders.take()
        inputs = ControlInputs(
            estimate, self._orders.state, reference,
            self._plan.newest() if self._plan else None, self._achieved.newest(),
            self._carrier.newest() if self._carrier else None)
        started = time.perf_counter()
        outputs = self.part.step(t, inputs)
        self.health.stepped(time.perf_counter() - started)
        self._demand.send(outputs.demand)
        self._notes = outputs.diagnostics

    def notes(self) -> dict[str, float]:
        """Figures of the last step."""
        return self._notes

    def _may_set(self, changes: list[Parameter]) -> SetParametersResult:
        """Say whether the law could be changed, without changing it."""
        for change in changes:
            if change.name == 'law' and hasattr(self, 'rig'):
                p = self.parameters
                try:
                    # Some laws take a while to make; the rig may hang on this node's ticks.
                    self.loop.meanwhile(partial(LAWS.maker(change.value), self.rig,
                                                p.bandwidth_hz, p.damping_ratio))
                except (LookupError, ValueError) as error:
                    return SetParametersResult(successful=False, reason=str(error))
        return SetParametersResult(successful=True)

    def _have_set(self, changes: list[Parameter]) -> None:
        for change in changes:
            if change.name == 'law':
                self._law = change.value
                if hasattr(self, 'part'):
                    self.part.swap(change.value)
                    self.get_logger().info(f'law: {change.value}')


def main() -> int:
    """Run the node."""
    return run_node(NAME, __doc__ or '', WrenchControllerParameters, WrenchControllerNode)


if __name__ == '__main__':
    sys.exit(main())
