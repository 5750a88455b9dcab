"""Ends of topics: an inbox that is emptied when the node wants to, an outbox for values."""

import time
from typing import Any

from rclpy.callback_groups import CallbackGroup
from rclpy.lifecycle import LifecycleNode

from suspended_ctrl.nodes.topics import GRAPH, message_class, QOS
from suspended_ctrl.nodes.wire import ReadValue, value_reader, value_writer
from suspended_ctrl.review.messages import MessageError
from suspended_ctrl.review.topics import JointNames

# More than any topic brings in a tick; what is left then waits for the next turn.
_EMPTY_MAX = 64
_COMPLAIN_EVERY_S = 1.0


class Emptied(CallbackGroup):
    """Group of subscriptions that no executor serves: their inboxes are emptied instead."""

    def can_execute(self, entity: Any) -> bool:
        """Never."""
        return False

    def beginning_execution(self, entity: Any) -> bool:
        """Never."""
        return False

    def ending_execution(self, entity: Any) -> None:
        """Nothing was begun."""


class Inbox:
    """
    What came on a topic since it was last emptied, as values.

    A message that must not be used is refused and counted, and said once a second at most.

    Parameters
    ----------
    node : LifecycleNode
    topic : str
        As in ``topics.GRAPH``.
    names : JointNames
    read : callable, optional
        Bytes to value, in place of the topic's own; raises ``MessageError``.

    Attributes
    ----------
    received, refused : int
        Messages since the node was configured.
    refusals : list of str
        Why, for whoever wants to know; emptied by them.

    """

    def __init__(self, node: LifecycleNode, topic: str, names: JointNames,
                 read: ReadValue | None = None) -> None:
        definition = GRAPH[topic]
        self.topic = topic
        self.received = 0
        self.refused = 0
        self.refusals: list[str] = []
        self._value = read or value_reader(definition, names)
        self._node = node
        self._complained_s = float('-inf')
        self.subscription = node.create_subscription(
            message_class(definition.message_type), topic, lambda _: None, QOS[topic],
            callback_group=Emptied(), raw=True)
        self.handle = self.subscription.handle
        self._message_class = self.subscription.msg_type

    def empty(self) -> list[Any]:
        """Take everything that waits, oldest first."""
        values: list[Any] = []
        handle = self.handle
        with handle:
            for _ in range(_EMPTY_MAX):
                taken = handle.take_message(self._message_class, True)
                if taken is None:
                    break
                self.received += 1
                try:
                    values.append(self._value(taken[0]))
                except MessageError as error:
                    self._refuse(str(error))
        return values

    def newest(self) -> Any:
        """Take everything that waits and keep the last, None if nothing came."""
        values = self.empty()
        return values[-1] if values else None

    def discard(self) -> None:
        """Throw away what waits, for example what came while the node was inactive."""
        handle = self.handle
        with handle:
            for _ in range(_EMPTY_MAX):
                if handle.take_message(self._message_class, True) is None:
                    break

    def _refuse(self, reason: str) -> None:
        self.refused += 1
        # A flood of bad messages must not fill the memory of a node that never asks why.
        if len(self.refusals) < _EMPTY_MAX:
            self.refusals.append(reason)
        now = time.monotonic()
        if now - self._complained_s >= _COMPLAIN_EVERY_S:
            self._complained_s = now
            self._node.get_logger().warning(
                f'{self.topic}: refused, {self.refused} so far: {reason}')


class Outbox:
    """
    Publishes values on a topic.

    Parameters
    ----------
    node : LifecycleNode
    topic : str
        As in ``topics.GRAPH``.
    names : JointNames
    always : bool
        Whether it speaks while the node is inactive, too; a managed publisher is mute then.

    """

    def __init__(self, node: LifecycleNode, topic: str, names: JointNames,
                 always: bool = False) -> None:
        self.topic = topic
        self.always = always
        definition = GRAPH[topic]
        self._data = value_writer(definition, names)
        create = node.create_publisher if always else node.create_lifecycle_publisher
        self.publisher = create(message_class(definition.message_type), topic, QOS[topic])

    def send(self, value: Any) -> None:
        """Publish a value of the topic's type."""
        self.publisher.publish(self._data(value))
