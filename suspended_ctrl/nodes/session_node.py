"""The session's own node: records the graph, hears what matters in it, asks its services."""

from collections.abc import Mapping
from pathlib import Path
import time
from typing import Any

import rclpy
from rclpy.client import Client
from rclpy.context import Context
from rclpy.executors import SingleThreadedExecutor
from rclpy.node import Node
from rclpy.parameter import Parameter
from rclpy.task import Future
from std_srvs.srv import SetBool, Trigger

from suspended_ctrl.nodes.recorder import Recorder
from suspended_ctrl.nodes.wire import value_reader
from suspended_ctrl.physics.reference import Reference
from suspended_ctrl.review.log import events_of, RunFacts
from suspended_ctrl.review.topics import JointNames, TOPICS
from suspended_ctrl.rig.rig import Rig

READY_FOR_S = 1.0
SERVICES: Mapping[str, Any] = {'safety/enable': SetBool, 'safety/stop': Trigger,
                               'mission/start': Trigger}


class SessionNode:
    """
    A session's ends of the graph.

    Parameters
    ----------
    rig : Rig
    domain : int
    namespace : str
    recording : Path
    services : mapping of str to type
        Those that it asks.

    Attributes
    ----------
    state : str
        The supervisor's.
    cause : str
        Of the last event that the supervisor told.
    reference : Reference or None
        First one with a path in it.

    """

    def __init__(self, rig: Rig, domain: int, namespace: str, recording: Path,
                 services: Mapping[str, Any] = SERVICES) -> None:
        self.state = 'locked'
        self.cause = ''
        self._since_s = time.monotonic()
        self.reference: Reference | None = None
        self._required = ['pose', *(['rotor_states'] if rig.sensors.rotor_states else []),
                          *(['carrier_states'] if rig.carrier.axes else [])]
        self._context = Context()
        rclpy.init(args=[], context=self._context, domain_id=domain)
        self._node: Node = rclpy.create_node(
            'session', context=self._context, namespace=namespace, enable_rosout=False,
            start_parameter_services=False,
            parameter_overrides=[Parameter('start_type_description_service', value=False)])
        self._executor = SingleThreadedExecutor(context=self._context)
        self._executor.add_node(self._node)
        self._clients: dict[str, Client] = {
            name: self._node.create_client(kind, name) for name, kind in services.items()}
        self._asked: list[Future] = []
        names = JointNames(rig.rotors.names, rig.carrier.axes)
        self._recorder = Recorder(self._node, names, recording)
        self._read = {name: value_reader(TOPICS[name], names)
                      for name in ('safety/state', '/diagnostics', 'reference')}
        self._recorder.watch('safety/state', self._hear_state)
        self._recorder.watch('/diagnostics', self._hear_diagnostics)
        self._recorder.watch('reference', self._hear_reference)
        self.watch = self._recorder.watch

    def now_s(self) -> float:
        """Host time, s."""
        return time.time()

    def answering(self) -> bool:
        """Whether every service that the session needs is there."""
        return not self.silent_services()

    def silent_services(self) -> list[str]:
        """Services that are not there."""
        return [name for name, client in self._clients.items() if not client.service_is_ready()]

    def silent_topics(self) -> list[str]:
        """Name the required driver topics that nothing came on."""
        counts = self._recorder.counts()
        return [name for name in self._required if not counts[name]]

    def settled(self) -> bool:
        """Whether the rig has been ready for a while: nodes that just came up have caught up."""
        return self.state == 'ready' and time.monotonic() - self._since_s >= READY_FOR_S

    def request(self, service: str, request: Any) -> Future:
        """Ask a service; turns bring the answer."""
        future = self._clients[service].call_async(request)
        self._asked.append(future)
        return future

    def turn(self) -> None:
        """Record what came, and take answers."""
        self._recorder.take()
        if self._asked:
            self._executor.spin_once(timeout_sec=0.0)
            self._asked = [future for future in self._asked if not future.done()]

    def close(self, facts: RunFacts) -> None:
        """Close the recording and leave the graph."""
        self._recorder.close(facts)
        self._executor.shutdown()
        self._node.destroy_node()
        self._context.try_shutdown()

    def _hear_state(self, data: bytes) -> None:
        self.state = self._read['safety/state'](data)
        self._since_s = time.monotonic()

    def _hear_diagnostics(self, data: bytes) -> None:
        for event in events_of(self._read['/diagnostics'](data)):
            if event.stop_category is not None:
                self.cause = event.cause

    def _hear_reference(self, data: bytes) -> None:
        reference = self._read['reference'](data)
        if reference is not None and self.reference is None:
            self.reference = reference
