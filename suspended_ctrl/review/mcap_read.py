"""
What general readers of recordings leave out: killed files, and texts put into a file.

Only for files of ``mcap_file.McapWriter``, whose chunks are not compressed.
"""

from binascii import crc32
from collections.abc import Iterator
from pathlib import Path
import struct

from suspended_ctrl.review.mcap_file import (
    CHANNEL,
    Channel,
    CHUNK,
    MAGIC,
    MESSAGE,
    METADATA,
    METADATA_INDEX,
    RECORD_HEAD,
    SCHEMA,
)


def salvaged(path: Path) -> Iterator[tuple[Channel, int, bytes]]:
    """
    Messages of a file whose writer was killed, up to the last whole chunk.

    Parameters
    ----------
    path : Path
        A file of ``McapWriter``: uncompressed chunks.

    Yields
    ------
    Channel, int, bytes
        Topic, time in ns, serialised message; in the order of the file.

    Raises
    ------
    ValueError
        If the file does not begin as an MCAP file.

    """
    types: dict[int, str] = {}
    channels: dict[int, Channel] = {}
    with path.open('rb') as file:
        if file.read(len(MAGIC)) != MAGIC:
            raise ValueError('not an MCAP file')
        while len(head := file.read(RECORD_HEAD.size)) == RECORD_HEAD.size:
            opcode, length = RECORD_HEAD.unpack(head)
            body = file.read(length)
            if len(body) < length:
                return
            if opcode == CHUNK:
                yield from _chunk_messages(body, types, channels)


def _chunk_messages(body: bytes, types: dict[int, str],
                    channels: dict[int, Channel]) -> Iterator[tuple[Channel, int, bytes]]:
    _, _, size, checksum = struct.unpack_from('<QQQI', body)
    if body[28:32] != b'\0\0\0\0':
        raise ValueError('a chunk is compressed')
    inside = body[40:40 + size]
    if len(inside) < size or (checksum and crc32(inside) != checksum):
        return
    at = 0
    while at < size:
        opcode, length = RECORD_HEAD.unpack_from(inside, at)
        start = at + RECORD_HEAD.size
        at = start + length
        if opcode == MESSAGE:
            number, _, time_ns, _ = struct.unpack_from('<HIQQ', inside, start)
            yield channels[number], time_ns, inside[start + 22:at]
        elif opcode == SCHEMA:
            (key,) = struct.unpack_from('<H', inside, start)
            types[key] = _text_at(inside, start + 2)
        elif opcode == CHANNEL:
            number, key = struct.unpack_from('<HH', inside, start)
            channels[number] = Channel(number, _text_at(inside, start + 4), types[key], '')


def _text_at(data: bytes, at: int) -> str:
    (length,) = struct.unpack_from('<I', data, at)
    return data[at + 4:at + 4 + length].decode()


def metadata(path: Path, name: str) -> dict[str, str]:
    """
    Named texts that ``McapWriter.add_metadata`` put into a closed file.

    Parameters
    ----------
    path : Path
        Of the file.
    name : str
        Of the texts.

    Returns
    -------
    dict of str to str
        Empty where there are none, or the file was not closed.

    """
    with path.open('rb') as file:
        size = file.seek(0, 2)
        if size < 37:
            return {}
        file.seek(size - 37)
        footer = file.read(37)
        if footer[0] != 2 or footer[-8:] != MAGIC:
            return {}
        (summary_at,) = struct.unpack_from('<Q', footer, 9)
        if not 0 < summary_at < size:
            return {}
        file.seek(summary_at)
        summary = file.read(size - 37 - summary_at)
        at = 0
        while at + RECORD_HEAD.size <= len(summary):
            opcode, length = RECORD_HEAD.unpack_from(summary, at)
            at += RECORD_HEAD.size
            if opcode == METADATA_INDEX and _text_at(summary, at + 16) == name:
                file.seek(struct.unpack_from('<Q', summary, at)[0])
                head = file.read(RECORD_HEAD.size)
                opcode, length = RECORD_HEAD.unpack(head)
                return _metadata_pairs(file.read(length)) if opcode == METADATA else {}
            at += length
    return {}


def _metadata_pairs(body: bytes) -> dict[str, str]:
    at = 4 + struct.unpack_from('<I', body)[0]
    end = at + 4 + struct.unpack_from('<I', body, at)[0]
    at += 4
    pairs = {}
    while at < end:
        texts = []
        for _ in range(2):
            text = _text_at(body, at)
            texts.append(text)
            at += 4 + struct.unpack_from('<I', body, at)[0]
        pairs[texts[0]] = texts[1]
    return pairs
