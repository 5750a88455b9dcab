"""Records a graph's topics as they are on the wire."""

from collections.abc import Callable
from contextlib import suppress
from pathlib import Path
import time
from typing import Any

from rclpy.node import Node
from rclpy.qos import QoSProfile, ReliabilityPolicy

from suspended_ctrl.nodes.channels import Emptied
from suspended_ctrl.nodes.topics import latched, message_class, QOS
from suspended_ctrl.review.bag import BagWriter
from suspended_ctrl.review.log import RunFacts
from suspended_ctrl.review.mcap_file import Channel
from suspended_ctrl.review.messages import MessageError
from suspended_ctrl.review.qos import offered_qos
from suspended_ctrl.review.topics import JointNames, Topic, TOPICS

# A second of the fastest topic: nothing is lost if this process is away for so long.
_DEPTH = 400
_FLUSH_EVERY_S = 1.0


class _Line:
    def __init__(self, node: Node, topic: Topic, channel: Channel) -> None:
        profile = QOS[topic.name]
        self.channel = channel
        self.watchers: list[Callable[[bytes], None]] = []
        self.count = 0
        # A recording must not cost the nodes an answer to every message: what holds until the
        # next message is asked for reliably, of everything else it takes what comes.
        reliability = (ReliabilityPolicy.RELIABLE if latched(topic.name)
                       else ReliabilityPolicy.BEST_EFFORT)
        subscription = node.create_subscription(
            message_class(topic.message_type), topic.name, lambda _: None,
            QoSProfile(depth=_DEPTH, reliability=reliability, durability=profile.durability),
            callback_group=Emptied(), raw=True)
        self.handle: Any = subscription.handle
        self.message_class = subscription.msg_type


class Recorder:
    """
    Serialized messages of every topic into a recording, at the time they were sent.

    Parameters
    ----------
    node : Node
        Listens; its namespace is the stack's.
    names : JointNames
        A rig without axes has no carrier topics.
    path : Path
        The recording's folder; made here.

    """

    def __init__(self, node: Node, names: JointNames, path: Path) -> None:
        self._bag = BagWriter(path)
        self._lines = {}
        namespace = node.get_namespace().rstrip('/')
        for topic in TOPICS.values():
            if topic.joints and not topic.joint_names(names):
                continue
            full = topic.name if topic.name.startswith('/') else f'{namespace}/{topic.name}'
            channel = self._bag.add_topic(full, topic.message_type, offered_qos(topic.name))
            self._lines[topic.name] = _Line(node, topic, channel)
        self._flush_s = time.monotonic()

    def watch(self, topic: str, watcher: Callable[[bytes], None]) -> None:
        """Hand every message of a topic to ``watcher``, too; it may raise ``MessageError``."""
        self._lines[topic].watchers.append(watcher)

    def counts(self) -> dict[str, int]:
        """Messages recorded so far, by topic."""
        return {name: line.count for name, line in self._lines.items()}

    def take(self) -> None:
        """Record what came since the last time."""
        write = self._bag.write
        for line in self._lines.values():
            handle, kind, channel = line.handle, line.message_class, line.channel
            with handle:
                for _ in range(_DEPTH):
                    taken = handle.take_message(kind, True)
                    if taken is None:
                        break
                    data, info = taken
                    write(channel, info['source_timestamp'], data)
                    line.count += 1
                    for watcher in line.watchers:
                        # Recorded all the same; what is wrong with it, its receivers say.
                        with suppress(MessageError):
                            watcher(data)
        now = time.monotonic()
        if now >= self._flush_s:
            self._flush_s = now + _FLUSH_EVERY_S
            self._bag.flush()

    def close(self, facts: RunFacts) -> None:
        """Finish the recording."""
        self._bag.close(facts)
