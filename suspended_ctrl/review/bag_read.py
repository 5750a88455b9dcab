"""Recordings from disk: a rosbag2 folder or a bare MCAP file into a log."""

from collections.abc import Iterator
import json
from pathlib import Path
from typing import Any

import numpy as np
from rosbags.rosbag2 import Reader

from suspended_ctrl.review.bag import FACTS
from suspended_ctrl.review.bag_types import typestore
from suspended_ctrl.review.cdr_layout import Layout
from suspended_ctrl.review.columns import decode, LEAVES
from suspended_ctrl.review.log import events_of, RunFacts, RunLog, SafetyEvent
from suspended_ctrl.review.mcap_read import metadata, salvaged
from suspended_ctrl.review.messages import MessageError
from suspended_ctrl.review.table import Columns, Rows
from suspended_ctrl.review.topics import JointNames, Topic, TOPICS
from suspended_ctrl.rig.errors import InputError


class RecordingError(InputError):
    """A recording that cannot be read; its text is one line."""


class _Stream:
    """Serialised messages of one topic, side by side."""

    def __init__(self, topic: Topic) -> None:
        self.topic = topic
        self.times_ns: list[int] = []
        self.sizes: list[int] = []
        self.data = bytearray()

    def messages(self) -> Iterator[tuple[int, bytes]]:
        at = 0
        for t, size in zip(self.times_ns, self.sizes, strict=True):
            yield t, bytes(self.data[at:at + size])
            at += size


def read_bag(path: Path, names: JointNames | None = None) -> RunLog:
    """
    Read a recording, the bench's or a robot's.

    Parameters
    ----------
    path : Path
        A rosbag2 folder, or one MCAP file; a file whose writer was killed is read as far as it is
        whole.
    names : JointNames, optional
        The rig's; without them those of the first messages that name any.

    Returns
    -------
    RunLog
        Topics in any namespace; ``refused`` counts messages that could not be used.

    Raises
    ------
    RecordingError
        If there is nothing there to read, or nothing that the stack would have recorded.

    """
    file = _file_of(path)
    try:
        # A killed writer leaves the file without the folder's metadata.
        whole = path.is_file() or file is None or (path / 'metadata.yaml').exists()
        streams = _streams(path if whole or file is None else file)
    except Exception as error:  # the library's readers trip over foreign bytes in many ways
        if file is None:
            raise RecordingError(f'{path}: not a recording: {_one_line(error)}') from None
        streams = _salvaged(file, error)
    if not any(stream.times_ns for stream in streams.values()):
        raise RecordingError(f"{path}: none of the stack's topics in it")
    log = RunLog(_facts(file))
    names = names or _names(streams)
    for name in list(streams):
        _read(streams.pop(name), names, log)
    if not log.facts.events:
        log.facts.events = [event for value in log.rows('/diagnostics').rows
                            for event in events_of(value)]
    return log


def _one_line(error: Exception) -> str:
    return str(error).split('\n', maxsplit=1)[0].rstrip('.')


def _file_of(path: Path) -> Path | None:
    if not path.exists():
        raise RecordingError(f'{path}: no such file or folder')
    if path.is_file():
        return path
    files = sorted(path.glob('*.mcap'))
    return files[0] if len(files) == 1 else None


def _relative(full: str) -> str | None:
    """Name of a topic of the stack without its namespace; None for other topics."""
    if full in TOPICS:
        return full
    parts = full.strip('/').split('/')
    for count in (2, 1):
        if (name := '/'.join(parts[-count:])) in TOPICS:
            return name
    return None


def _add(streams: dict[str, _Stream], full: str, message_type: str) -> _Stream | None:
    name = _relative(full)
    if name is None or TOPICS[name].message_type != message_type:
        return None
    return streams.setdefault(name, _Stream(TOPICS[name]))


def _streams(path: Path) -> dict[str, _Stream]:
    streams: dict[str, _Stream] = {}
    with Reader(path) as reader:
        wanted = {one.id: stream for one in reader.connections
                  if (stream := _add(streams, one.topic, one.msgtype)) is not None}
        connections = [one for one in reader.connections if one.id in wanted]
        if not connections:
            return streams
        for connection, time_ns, data in reader.messages(connections):
            stream = wanted[connection.id]
            stream.times_ns.append(time_ns)
            stream.sizes.append(len(data))
            stream.data += data
    return streams


def _salvaged(file: Path, error: Exception) -> dict[str, _Stream]:
    streams: dict[str, _Stream] = {}
    try:
        for channel, time_ns, data in salvaged(file):
            if (stream := _add(streams, channel.topic, channel.message_type)) is not None:
                stream.times_ns.append(time_ns)
                stream.sizes.append(len(data))
                stream.data += data
    except (ValueError, KeyError):
        streams = {}
    if not streams:
        raise RecordingError(f'{file}: not a recording: {_one_line(error)}')
    return streams


def _facts(file: Path | None) -> RunFacts:
    text = metadata(file, FACTS).get('facts') if file is not None else None
    if text is None:
        return RunFacts()
    fields: dict[str, Any] = json.loads(text)
    for name in ('tick_wall_s', 'plan_wall_s'):
        fields[name] = np.array(fields[name])
    fields['events'] = [SafetyEvent(**event) for event in fields['events']]
    return RunFacts(**fields)


def _names(streams: dict[str, _Stream]) -> JointNames:
    found: dict[str, tuple[str, ...]] = {'rotors': (), 'axes': ()}
    for stream in streams.values():
        joints = stream.topic.joints
        if joints and not found[joints]:
            for _, raw in stream.messages():
                layout = Layout(stream.topic.message_type, raw)
                found[joints] = tuple(layout.strings.get('name')
                                      or layout.strings.get('joint_names') or ())
                break
    return JointNames(found['rotors'], found['axes'])


def _read(stream: _Stream, names: JointNames, log: RunLog) -> None:
    """Put one topic into the log, in columns where all its messages are of one layout."""
    topic = stream.topic
    order = np.argsort(np.array(stream.times_ns, dtype=np.int64), kind='stable')
    times_s = np.array(stream.times_ns, dtype=np.float64)[order] * 1e-9
    if topic.value_type in LEAVES and len(set(stream.sizes)) == 1:
        data = np.frombuffer(stream.data, dtype=np.uint8).reshape(len(times_s), -1)
        try:
            layout = Layout(topic.message_type, data[0].tobytes())
            if layout.fits(data):
                decoded = decode(topic, layout, data[order], names)
                log.put(Columns(topic, times_s[decoded.good], decoded.columns))
                _refuse(log, topic, len(times_s) - int(decoded.good.sum()))
                return
        except (MessageError, KeyError, ValueError):
            pass  # message by message, each for itself
    table = Rows(topic)
    refused = 0
    for t, raw in sorted(stream.messages(), key=lambda item: item[0]):
        try:
            value = topic.read(typestore().deserialize_cdr(raw, topic.message_type), names)
        except MessageError:
            refused += 1
            continue
        except Exception:
            refused += 1
            continue
        table.times.append(t * 1e-9)
        table.rows.append(value)
    log.put(table)
    _refuse(log, topic, refused)


def _refuse(log: RunLog, topic: Topic, count: int) -> None:
    if count:
        log.refused[topic.name] = count
