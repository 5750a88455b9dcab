"""Node ``safety_supervisor``: demands in, commands out; the last in the row."""

import sys
import time
from typing import Any

import numpy as np
from rclpy.lifecycle import LifecycleState, TransitionCallbackReturn
from std_srvs.srv import SetBool, Trigger

from suspended_ctrl.nodes.cautions import CAUTIONS
from suspended_ctrl.nodes.channels import Inbox
from suspended_ctrl.nodes.managed import ManagedNode
from suspended_ctrl.nodes.peers import Peers
from suspended_ctrl.nodes.run import run_node
from suspended_ctrl.nodes.safety_parameters import SafetySupervisorParameters, settings_of
from suspended_ctrl.nodes.wire import placed_estimate_reader, value_reader
from suspended_ctrl.physics.values import CarrierCommand, RotorCommand
from suspended_ctrl.review.log import event_diagnostics, SafetyEvent
from suspended_ctrl.review.topics import JointNames, TOPICS
from suspended_ctrl.safety.supervisor import SafetySupervisor
from suspended_ctrl.safety.values import (
    EmergencyStop,
    Heartbeat,
    Message,
    Refused,
    SafetyInputs,
    SafetyOutputs,
)

NAME = 'safety_supervisor'
# Zero is said this often before the process ends, so that one lost message does not matter.
_LAST_WORDS = 10
_LAST_WORDS_EVERY_S = 0.005


class SafetySupervisorNode(ManagedNode):
    """
    Steps the supervisor on each rotor demand, and on a timer when none comes.

    Its outputs are plain publishers: a managed one is mute while the node is inactive, and then
    it must say zero and ``locked``.
    """

    parameters: SafetySupervisorParameters

    def __init__(self) -> None:
        super().__init__(NAME, SafetySupervisorParameters)

    def build(self) -> None:
        """Make the supervisor, its channels and services."""
        rig = self.rig
        self.part = SafetySupervisor(rig, settings_of(self.parameters, rig))
        sensors, axes = rig.sensors, rig.carrier.axes
        self._demand = self.inbox('rotor_demand')
        there = {'pose': True, 'imu': sensors.imu, 'rotor_states': sensors.rotor_states,
                 'carrier_states': axes, 'tether_load': sensors.tether_load,
                 'carrier_demand': axes}
        self._boxes: list[Inbox] = [self.inbox(topic) for topic, is_there in there.items()
                                    if is_there]
        self._boxes.append(self.inbox(
            'odometry', placed_estimate_reader(TOPICS['odometry'])))
        pressed = value_reader(TOPICS['emergency_stop'], JointNames((), ()))
        self._boxes.append(self.inbox(
            'emergency_stop', lambda data: EmergencyStop(pressed(data))))
        if self.parameters.heartbeat_silence_s > 0.0:
            self._boxes.append(self.inbox('operator_heartbeat', lambda _: Heartbeat()))
        self._reports = self.inbox('/diagnostics')
        self._peers = Peers(self.get_namespace())
        self._rotors = self.outbox('rotor_command', always=True)
        self._carrier = self.outbox('carrier_command', always=True) if axes else None
        self._state_out = self.outbox('safety/state', always=True)
        self._zero = np.zeros(rig.rotors.count)
        self._rest: CarrierCommand | None = None
        self._said = ''
        self._margin = np.zeros(0)
        self._offered = [
            self.create_service(SetBool, 'safety/enable', self._enable),
            self.create_service(Trigger, 'safety/stop', self._stop),
            self.create_service(Trigger, 'safety/reset', self._reset)]
        self._say_state('locked')
        self.loop.listen([self._demand], 1.0 / self.parameters.rate_hz, timer=True)

    def clean(self) -> None:
        """Withdraw the services."""
        for service in getattr(self, '_offered', ()):
            self.destroy_service(service)
        self._offered = []

    def start(self) -> None:
        """Say what must be said before rotors may turn."""
        for sentence in CAUTIONS:
            self.get_logger().warning(sentence)
        self._said = ''

    def on_deactivate(self, state: LifecycleState) -> TransitionCallbackReturn:
        """Cut at once: inactive means locked."""
        done = super().on_deactivate(state)
        self._say_zero(self.now_s())
        self._say_state('locked')
        return done

    def turn(self, t: float, due: bool) -> None:
        """Step if a demand came or the timer says so."""
        demands = self._demand.empty()
        if not demands and not due:
            return
        if demands:
            self.loop.stepped()
        self._step(t, demands)

    def idle(self, t: float, due: bool) -> None:
        """Keep saying zero and the last measured anchor."""
        if not due:
            return
        for box in self._boxes:
            if box.topic == 'carrier_states' and (sample := box.newest()) is not None:
                self._rest = CarrierCommand(t, sample.position_m, 0.0 * sample.position_m)
        self._say_zero(t)
        if self._carrier is not None and self._rest is not None:
            self._carrier.send(self._rest)

    def leave(self) -> None:
        """Say zero, several times."""
        if not hasattr(self, 'part'):
            return
        for _ in range(_LAST_WORDS):
            self._say_zero(self.now_s())
            time.sleep(_LAST_WORDS_EVERY_S)
        self._say_state('locked')

    def notes(self) -> dict[str, float]:
        """Margin of every limit: 1 untouched, 0 at the limit."""
        return {f'margin.{limit.name}': float(left)
                for limit, left in zip(self.part.limits, self._margin, strict=False)}

    # ------------------------------------------------------------ a step

    def _step(self, t: float, demands: list[Any],
              requests: tuple[str, ...] = ()) -> SafetyOutputs:
        now = time.monotonic()
        arrived: list[Message] = []
        for box in self._boxes:
            arrived += box.empty()
        arrived += demands
        for box in (*self._boxes, self._demand):
            if box.refusals:
                arrived += [Refused(box.topic, reason) for reason in box.refusals]
                box.refusals.clear()
        for report in self._reports.empty():
            self._peers.hear(now, report)
        started = time.perf_counter()
        outputs = self.part.step(now, SafetyInputs(
            t, tuple((now, message) for message in arrived), requests, self._peers.there(now)))
        self.health.stepped(time.perf_counter() - started)
        self._rotors.send(outputs.rotor_command)
        if self._carrier is not None and outputs.carrier_command is not None:
            self._carrier.send(outputs.carrier_command)
        self._margin = outputs.margin
        self._say_state(outputs.state)
        if outputs.events or outputs.changes:
            self._tell(t - now, outputs)
        return outputs

    def _tell(self, host_from_monotonic_s: float, outputs: SafetyOutputs) -> None:
        for change in outputs.changes:
            figures = ' '.join(f'{name}={value:.4g}' for name, value in change.values)
            self.get_logger().warning(
                f'{change.before} -> {change.after}: {change.cause} {figures}'.rstrip())
        for event in outputs.events:
            self.diagnostics.send(event_diagnostics(SafetyEvent(
                event.t_s + host_from_monotonic_s, event.cause, event.stop_category)))

    def _say_zero(self, t: float) -> None:
        self._rotors.send(RotorCommand(t, self._zero))

    def _say_state(self, state: str) -> None:
        if state != self._said:
            self._said = state
            self._state_out.send(state)

    # ------------------------------------------------------------ requests

    def _request(self, request: str, response: Any) -> Any:
        if not self.active:
            response.success, response.message = False, 'the supervisor is inactive'
            return response
        outputs = self._step(self.now_s(), self._demand.empty(), (request,))
        reply = outputs.replies[0]
        response.success, response.message = reply.success, reply.message
        return response

    def _enable(self, request: SetBool.Request, response: SetBool.Response) -> Any:
        return self._request('enable' if request.data else 'disable', response)

    def _stop(self, _: Trigger.Request, response: Trigger.Response) -> Any:
        return self._request('stop', response)

    def _reset(self, _: Trigger.Request, response: Trigger.Response) -> Any:
        return self._request('reset', response)


def main() -> int:
    """Run the node."""
    return run_node(NAME, __doc__ or '', SafetySupervisorParameters, SafetySupervisorNode)


if __name__ == '__main__':
    sys.exit(main())
