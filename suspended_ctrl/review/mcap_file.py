"""
A recording's file, written so that a kill loses at most what came since the last flush.

Format: the MCAP specification, version 0, profile ``ros2``, uncompressed chunks with message
indexes, and a summary. Records are an opcode, a length and a body; numbers are little-endian.
"""

from binascii import crc32
from collections import defaultdict
from collections.abc import Mapping
from dataclasses import dataclass
import os
from pathlib import Path
import struct

MAGIC = b'\x89MCAP0\r\n'
HEADER, FOOTER, SCHEMA, CHANNEL, MESSAGE, CHUNK = 1, 2, 3, 4, 5, 6
MESSAGE_INDEX, CHUNK_INDEX, STATISTICS, METADATA = 7, 8, 11, 12
METADATA_INDEX, SUMMARY_OFFSET, DATA_END = 13, 14, 15
_CHUNK_BYTES = 1 << 20
_MESSAGE_HEAD = struct.Struct('<BQHIQQ')
RECORD_HEAD = struct.Struct('<BQ')


def _text(text: str | bytes) -> bytes:
    data = text.encode() if isinstance(text, str) else text
    return struct.pack('<I', len(data)) + data


def _record(opcode: int, body: bytes) -> bytes:
    return RECORD_HEAD.pack(opcode, len(body)) + body


def _pairs(pairs: Mapping[str, str]) -> bytes:
    return _text(b''.join(_text(key) + _text(value) for key, value in pairs.items()))


@dataclass(frozen=True)
class Channel:
    """A topic in the file."""

    number: int
    topic: str
    message_type: str
    qos: str


class McapWriter:
    """
    Streaming writer.

    Parameters
    ----------
    path : Path
        A file that does not exist yet.
    library : str
        Who writes, for the file's header.

    Attributes
    ----------
    channels : list of Channel
    counts : dict of int to int
        Messages by channel number.
    start_ns, end_ns : int
        Times of the first and last message.

    Raises
    ------
    FileExistsError
        If the file exists.

    """

    def __init__(self, path: Path, library: str) -> None:
        self._file = path.open('xb')
        self._at = 0
        self.channels: list[Channel] = []
        self.counts: dict[int, int] = {}
        self.start_ns = 2**63 - 1
        self.end_ns = 0
        self._schemas: dict[str, int] = {}
        self._definitions: list[bytes] = []
        self._chunk: list[bytes] = []
        self._chunk_bytes = 0
        self._chunk_start = 2**63 - 1
        self._chunk_end = 0
        self._index: dict[int, list[int]] = defaultdict(list)
        self._chunk_indexes: list[bytes] = []
        self._metadata_indexes: list[bytes] = []
        self._put(MAGIC + _record(HEADER, _text('ros2') + _text(library)))

    def _put(self, data: bytes) -> None:
        self._file.write(data)
        self._at += len(data)

    def _stage(self, data: bytes) -> None:
        self._chunk.append(data)
        self._chunk_bytes += len(data)

    def add_channel(self, topic: str, message_type: str, definition: str, qos: str) -> Channel:
        """
        Declare a topic.

        Parameters
        ----------
        topic, message_type : str
            Its name and its type.
        definition : str
            Text of the message type's definition with those it needs (``ros2msg``).
        qos : str
            Offered quality of service, YAML.

        Returns
        -------
        Channel

        """
        if message_type not in self._schemas:
            self._schemas[message_type] = len(self._schemas) + 1
            schema = _record(SCHEMA, struct.pack('<H', self._schemas[message_type])
                             + _text(message_type) + _text('ros2msg') + _text(definition))
            self._definitions.append(schema)
            self._stage(schema)
        channel = Channel(len(self.channels) + 1, topic, message_type, qos)
        record = _record(
            CHANNEL, struct.pack('<HH', channel.number, self._schemas[message_type])
            + _text(topic) + _text('cdr') + _pairs({'offered_qos_profiles': qos}))
        self._definitions.append(record)
        self._stage(record)
        self.channels.append(channel)
        self.counts[channel.number] = 0
        return channel

    def write(self, channel: Channel, time_ns: int, data: bytes) -> None:
        """Add a serialised message recorded at ``time_ns``."""
        number = channel.number
        index = self._index[number]
        index.append(time_ns)
        index.append(self._chunk_bytes)
        self._chunk.append(
            _MESSAGE_HEAD.pack(MESSAGE, 22 + len(data), number, 0, time_ns, time_ns))
        self._chunk.append(data)
        self._chunk_bytes += _MESSAGE_HEAD.size + len(data)
        if time_ns < self._chunk_start:
            self._chunk_start = time_ns
        if time_ns > self._chunk_end:
            self._chunk_end = time_ns
        if self._chunk_bytes > _CHUNK_BYTES:
            self._close_chunk()

    def flush(self, to_disk: bool = False) -> None:
        """Hand everything so far to the system, and to the disk if asked: a kill keeps it."""
        if self._chunk:
            self._close_chunk()
        self._file.flush()
        if to_disk:
            os.fsync(self._file.fileno())

    def _close_chunk(self) -> None:
        body = b''.join(self._chunk)
        messages = any(self._index.values())
        start, end = (self._chunk_start, self._chunk_end) if messages else (0, 0)
        at = self._at
        self._put(_record(CHUNK, struct.pack('<QQQI', start, end, len(body), crc32(body))
                          + _text('') + struct.pack('<Q', len(body)) + body))
        chunk_length = self._at - at
        offsets = b''
        for number, flat in self._index.items():
            offsets += struct.pack('<HQ', number, self._at)
            entries = struct.pack(f'<{len(flat)}Q', *flat)
            self._put(_record(MESSAGE_INDEX, struct.pack('<H', number) + _text(entries)))
            self.counts[number] += len(flat) // 2
        self._chunk_indexes.append(_record(
            CHUNK_INDEX, struct.pack('<QQQQ', start, end, at, chunk_length) + _text(offsets)
            + struct.pack('<Q', self._at - at - chunk_length) + _text('')
            + struct.pack('<QQ', len(body), len(body))))
        if messages:
            self.start_ns, self.end_ns = min(start, self.start_ns), max(end, self.end_ns)
        self._chunk, self._chunk_bytes = [], 0
        self._chunk_start, self._chunk_end = 2**63 - 1, 0
        self._index = defaultdict(list)

    def add_metadata(self, name: str, pairs: Mapping[str, str]) -> None:
        """Put named texts into the file."""
        self.flush()
        record = _record(METADATA, _text(name) + _pairs(pairs))
        self._metadata_indexes.append(_record(
            METADATA_INDEX, struct.pack('<QQ', self._at, len(record)) + _text(name)))
        self._put(record)

    def close(self) -> None:
        """Write the summary and close; nothing happens the second time."""
        if self._file.closed:
            return
        self.flush()
        self._put(_record(DATA_END, struct.pack('<I', 0)))
        summary_at = self._at
        counts = b''.join(struct.pack('<HQ', k, n) for k, n in self.counts.items())
        total = sum(self.counts.values())
        statistics = _record(STATISTICS, struct.pack(
            '<QHIIIIQQ', total, len(self._schemas), len(self.channels), 0,
            len(self._metadata_indexes), len(self._chunk_indexes),
            self.start_ns if total else 0, self.end_ns) + _text(counts))
        groups = b''
        for opcode, records in (
                (SCHEMA, [r for r in self._definitions if r[0] == SCHEMA]),
                (CHANNEL, [r for r in self._definitions if r[0] == CHANNEL]),
                (STATISTICS, [statistics]), (METADATA_INDEX, self._metadata_indexes),
                (CHUNK_INDEX, self._chunk_indexes)):
            at = self._at
            for record in records:
                self._put(record)
            if records:
                groups += _record(SUMMARY_OFFSET, struct.pack('<BQQ', opcode, at, self._at - at))
        offsets_at = self._at
        self._put(groups)
        self._put(_record(FOOTER, struct.pack('<QQI', summary_at, offsets_at, 0)) + MAGIC)
        self._file.close()
