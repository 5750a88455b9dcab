"""Recordings to disk: a rosbag2 folder with one MCAP file, from a log or message by message."""

from collections.abc import Mapping
import dataclasses
import json
from pathlib import Path
from typing import Any

import numpy as np
from ruamel.yaml import YAML

import suspended_ctrl
from suspended_ctrl.physics.values import Estimate, Payload
from suspended_ctrl.review.bag_types import BagTypes, typestore
from suspended_ctrl.review.cdr_layout import Layout
from suspended_ctrl.review.columns import encode, LEAVES
from suspended_ctrl.review.log import RunFacts, RunLog
from suspended_ctrl.review.mcap_file import Channel, McapWriter
from suspended_ctrl.review.qos import offered_qos
from suspended_ctrl.review.table import Rows, Table
from suspended_ctrl.review.topics import JointNames, Topic, TOPICS

FACTS = 'suspended_ctrl'
LIBRARY = f'suspended_ctrl {suspended_ctrl.__version__}'


class BagWriter:
    """
    A rosbag2 folder, filled with serialised messages as they come.

    ``metadata.yaml`` is written on closing; a folder whose writer was killed has only the file,
    whole up to the last ``flush``.

    Parameters
    ----------
    path : Path
        The folder; made here.

    Raises
    ------
    FileExistsError
        If the folder exists.

    """

    def __init__(self, path: Path) -> None:
        path.mkdir(parents=True)
        self._path = path
        self._file = path / f'{path.name}.mcap'
        self._writer = McapWriter(self._file, LIBRARY)
        self._closed = False

    def add_topic(self, topic: str, message_type: str, qos: str = '') -> Channel:
        """
        Declare a topic.

        Parameters
        ----------
        topic : str
            Full name, with namespace.
        message_type : str
            One of the standard messages.
        qos : str, optional
            Offered quality of service, YAML.

        Returns
        -------
        Channel
            For ``write``.

        """
        definition, _ = typestore().generate_msgdef(message_type, ros_version=2)
        return self._writer.add_channel(topic, message_type, definition, qos)

    def write(self, channel: Channel, time_ns: int, data: bytes) -> None:
        """Add a serialised message received at ``time_ns``."""
        self._writer.write(channel, time_ns, data)

    def flush(self, to_disk: bool = False) -> None:
        """Hand everything so far to the system; call it once a second while recording live."""
        self._writer.flush(to_disk)

    def close(self, facts: RunFacts | None = None) -> None:
        """Finish file and folder; nothing happens the second time."""
        if self._closed:
            return
        self._closed = True
        custom = {}
        if facts is not None:
            self._writer.add_metadata(FACTS, {'facts': facts_text(facts)})
            custom = {key: str(value) for key in ('mission', 'rig', 'seed', 'law', 'allocator')
                      if (value := getattr(facts, key)) is not None}
        self._writer.close()
        with (self._path / 'metadata.yaml').open('w') as file:
            yaml = YAML()
            yaml.default_flow_style = False
            yaml.dump(_metadata(self._writer, self._file.name, custom), file)


def _metadata(writer: McapWriter, file: str, custom: Mapping[str, str]) -> dict[str, Any]:
    """Contents of a rosbag2 folder's ``metadata.yaml``, version 9."""
    count = sum(writer.counts.values())
    start = writer.start_ns if count else 0
    duration = {'nanoseconds': writer.end_ns - start}
    starting = {'nanoseconds_since_epoch': start}
    hashes = {channel.message_type: typestore().hash_rihs01(channel.message_type)
              for channel in writer.channels}
    return {'rosbag2_bagfile_information': {
        'version': 9, 'storage_identifier': 'mcap', 'duration': duration,
        'starting_time': starting, 'message_count': count,
        'topics_with_message_count': [{
            'topic_metadata': {
                'name': channel.topic, 'type': channel.message_type,
                'serialization_format': 'cdr',
                'offered_qos_profiles': YAML(typ='safe').load(channel.qos) or [],
                'type_description_hash': hashes[channel.message_type]},
            'message_count': writer.counts[channel.number]} for channel in writer.channels],
        'compression_format': '', 'compression_mode': '', 'relative_file_paths': [file],
        'files': [{'path': file, 'starting_time': dict(starting), 'duration': dict(duration),
                   'message_count': count}],
        'custom_data': dict(custom), 'ros_distro': 'jazzy'}}


def facts_text(facts: RunFacts) -> str:
    """Facts as JSON; wall-clock times rounded to nanoseconds."""
    fields = dataclasses.asdict(facts)
    for name in ('tick_wall_s', 'plan_wall_s'):
        fields[name] = np.round(fields[name], 9).tolist()
    return json.dumps(fields, allow_nan=False)


def write_bag(log: RunLog, names: JointNames, path: Path, namespace: str = '') -> None:
    """
    Write a log as a rosbag2 folder.

    Parameters
    ----------
    log : RunLog
        Its times are host times from zero on.
    names : JointNames
        Of the rig.
    path : Path
        The folder, which must not exist.
    namespace : str
        For example ``/cell``.

    Raises
    ------
    FileExistsError
        If the folder exists.

    """
    bag = BagWriter(path)
    channels: list[Channel] = []
    times: list[np.ndarray] = []
    messages: list[list[bytes]] = []
    for topic in TOPICS.values():
        table = log[topic.name]
        if not len(table) or (topic.joints and not topic.joint_names(names)):
            continue
        full = topic.name if topic.name.startswith('/') else f'{namespace}/{topic.name}'
        channels.append(bag.add_topic(full, topic.message_type, offered_qos(topic.name)))
        times.append(np.rint(table.log_s * 1e9).astype(np.int64))
        messages.append(serialised(topic, table, names))
    if channels:
        owner = np.repeat(np.arange(len(channels)), [len(t) for t in times])
        place = np.concatenate([np.arange(len(t)) for t in times])
        stamps = np.concatenate(times)
        order = np.argsort(stamps, kind='stable')
        for k, i, t in zip(owner[order].tolist(), place[order].tolist(), stamps[order].tolist(),
                           strict=True):
            bag.write(channels[k], t, messages[k][i])
    bag.close(log.facts)


def serialised(topic: Topic, table: Table, names: JointNames) -> list[bytes]:
    """Messages of a whole table."""
    types = BagTypes()
    store = typestore()
    if topic.value_type not in LEAVES:
        assert isinstance(table, Rows)
        return [bytes(store.serialize_cdr(topic.build(types, value, names), topic.message_type))
                for value in table.rows]
    columns = {name: table.column(name)
               for name in ('stamp_s', *LEAVES[topic.value_type])}
    first = topic.build(types, _first_value(topic, columns), names)
    layout = Layout(topic.message_type, bytes(store.serialize_cdr(first, topic.message_type)))
    return [row.tobytes() for row in encode(topic, layout, columns)]


def _first_value(topic: Topic, columns: dict[str, Any]) -> Any:
    fields = {name: column[0] for name, column in columns.items()}
    if topic.value_type is not Estimate:
        return topic.value_type(**fields)
    for name in ('pose_covariance', 'twist_covariance'):
        del fields[name]
    nothing = np.zeros(3)
    return Estimate(**fields, covariance=np.zeros((12, 12)), disturbance_force_map_n=nothing,
                    disturbance_torque_map_nm=nothing, payload=Payload(),
                    pose_stamp_s=fields['stamp_s'], valid=True)
