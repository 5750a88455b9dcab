"""Node ``state_estimator``: measurements in, odometry, disturbance and payload out."""

from operator import attrgetter
import sys
import time
from typing import Any

from pydantic import Field

from suspended_ctrl.estimation.estimator import Estimator, EstimatorInputs
from suspended_ctrl.nodes.channels import Inbox
from suspended_ctrl.nodes.managed import ManagedNode
from suspended_ctrl.nodes.parameters import NodeParameters
from suspended_ctrl.nodes.run import run_node
from suspended_ctrl.physics.values import Estimate
from suspended_ctrl.review.messages import Disturbance

NAME = 'state_estimator'
# The payload is sent when it changes, and this often for those who come later.
_PAYLOAD_EVERY_S = 0.5


class StateEstimatorParameters(NodeParameters):
    """Parameters of ``state_estimator``."""

    rate_hz: float = Field(200.0, ge=20.0, le=1000.0, description='Estimates a second while no '
                           'pose comes; each pose gives one at once.')


class StateEstimator(ManagedNode):
    """Steps the estimator on each pose, and on a timer when none comes."""

    parameters: StateEstimatorParameters

    def __init__(self) -> None:
        super().__init__(NAME, StateEstimatorParameters)

    def build(self) -> None:
        """Make the estimator and the channels of the sensors that the rig has."""
        sensors = self.rig.sensors
        self.part = Estimator(self.rig)
        self._pose = self.inbox('pose')
        there = {'imu': sensors.imu, 'rotor_states': sensors.rotor_states,
                 'carrier_states': sensors.carrier_states if self.rig.carrier.axes else None,
                 'tether_load': sensors.tether_load}
        self._others: list[Inbox] = [
            self.inbox(topic) for topic, sensor in there.items() if sensor is not None]
        self._others.append(self.inbox('payload_event'))
        self._odometry = self.outbox('odometry')
        self._disturbance = self.outbox('disturbance')
        self._payload = self.outbox('payload')
        self._payload_kg = float('nan')
        self._payload_due_s = 0.0
        self._stamp_s = float('-inf')
        self._notes: dict[str, float] = {}
        self._said = ''
        self.loop.listen([self._pose], 1.0 / self.parameters.rate_hz, timer=True)

    def turn(self, t: float, due: bool) -> None:
        """Take what came; step if a pose is among it or the timer says so."""
        samples: list[Any] = self._pose.empty()
        if not samples and not due:
            return
        if samples:
            self.loop.stepped()
        for box in self._others:
            samples += box.empty()
        # A pose is older than what came with it; out of order the filter would have to go back.
        samples.sort(key=attrgetter('stamp_s'))
        started = time.perf_counter()
        outputs = self.part.step(t, EstimatorInputs(tuple(samples)))
        self.health.stepped(time.perf_counter() - started)
        self._notes = outputs.diagnostics
        if outputs.message != self._said:
            self._said = outputs.message
            self.get_logger().info(outputs.message or 'started')
        estimate = outputs.estimate
        if estimate.valid and estimate.stamp_s != self._stamp_s:
            self._stamp_s = estimate.stamp_s
            self._send(t, estimate)

    def _send(self, t: float, estimate: Estimate) -> None:
        # Whoever steps on odometry finds the other two there already.
        self._disturbance.send(Disturbance(
            estimate.stamp_s, estimate.disturbance_force_map_n,
            estimate.disturbance_torque_map_nm))
        if estimate.payload.mass_kg != self._payload_kg or t >= self._payload_due_s:
            self._payload_kg = estimate.payload.mass_kg
            self._payload_due_s = t + _PAYLOAD_EVERY_S
            self._payload.send(estimate)
        self._odometry.send(estimate)

    def notes(self) -> dict[str, float]:
        """Figures of the last step."""
        return self._notes


def main() -> int:
    """Run the node."""
    return run_node(NAME, __doc__ or '', StateEstimatorParameters, StateEstimator)


if __name__ == '__main__':
    sys.exit(main())
