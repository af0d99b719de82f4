"""MCAP files, read record after record from the start, so that one that was cut short is read as far as it goes.

References
----------
The open specification of the format, version 0: records of an opcode (one byte), a length (eight) and that many bytes;
from memory, checked by files that another library writes.
"""

import re
import struct
from collections.abc import Iterator
from functools import partial
from typing import Any

from stillbench.foundation.errors import LogError
from stillbench.logs.arrays import ArrayTable
from stillbench.logs.contents import LARGEST_EXPANDED, Contents, check_expansion
from stillbench.logs.formats import Format, missing_library
from stillbench.logs.messages import chosen_topic, read_messages
from stillbench.vocabulary.log_sheet import LogSection

MAGIC = b"\x89MCAP0\r\n"
SCHEMA, CHANNEL, MESSAGE, CHUNK, DATA_END = 0x03, 0x04, 0x05, 0x06, 0x0F
HEAD = 9
PIECE = 1 << 16
LONGEST_FIXED = 5
"""Digits of the length of a fixed array in a message definition; longer ones are no sensor's."""


class _Cut(Exception):  # noqa: N818  an end, no fault
    """The file ends within a record."""


def _records(data: memoryview) -> Iterator[tuple[int, memoryview]]:
    """Opcode and body of each record."""
    place = 0
    while place < len(data):
        if place + HEAD > len(data):
            raise _Cut
        kind, length = struct.unpack_from("<BQ", data, place)
        place += HEAD
        if place + length > len(data):
            if kind == CHUNK:
                yield kind, data[place:]  # what there is of it
            raise _Cut
        yield kind, data[place : place + length]
        place += length


def _text(body: memoryview, place: int) -> tuple[str, int]:
    (length,) = struct.unpack_from("<I", body, place)
    return bytes(body[place + 4 : place + 4 + length]).decode("utf-8", "replace"), place + 4 + length


def _expanded(body: memoryview) -> memoryview:
    """Return the records within a chunk."""
    size = struct.unpack_from("<Q", body, 16)[0]
    compression, place = _text(body, 28)
    (length,) = struct.unpack_from("<Q", body, place)
    packed = body[place + 8 : place + 8 + length]
    if not compression:
        return packed
    import pyarrow as pa  # noqa: PLC0415  heavy, wanted only when a file is read

    check_expansion(size, len(packed), "a chunk")
    if compression not in ("zstd", "lz4"):
        raise LogError(f"its chunks are packed by {compression[:20]!r}", "zstd, lz4 or none")
    stream = pa.CompressedInputStream(pa.BufferReader(pa.py_buffer(packed)), compression)
    parts = bytearray()
    try:
        while len(parts) < size and (piece := stream.read(min(PIECE, size - len(parts)))):
            parts += piece
    except (pa.ArrowException, OSError):
        pass  # it is cut short: what came before is whole
    return memoryview(parts)


class _Scan:
    """Schemas, channels and messages of a file."""

    def __init__(self, data: memoryview) -> None:
        self.schemas: dict[int, tuple[str, str, str]] = {}
        self.channels: dict[int, tuple[int, str, str]] = {}
        self.messages: dict[int, list[tuple[int, memoryview]]] = {}
        self.cut = False
        self.ended = False
        import pyarrow as pa  # noqa: PLC0415  heavy, wanted only when a file is read

        self._expanded = 0
        try:
            self._take(data)
        except (_Cut, struct.error, pa.ArrowException, OSError):
            self.cut = True

    def _take(self, data: memoryview, *, within: bool = False) -> None:
        for kind, body in _records(data):
            if kind == 0:
                raise _Cut
            if kind == DATA_END:
                self.ended = True
                return
            if kind == SCHEMA:
                (number,) = struct.unpack_from("<H", body)
                name, place = _text(body, 2)
                encoding, place = _text(body, place)
                self.schemas[number] = (name, encoding, _text(body, place)[0])
            elif kind == CHANNEL:
                number, schema = struct.unpack_from("<HH", body)
                topic, place = _text(body, 4)
                self.channels[number] = (schema, topic, _text(body, place)[0])
            elif kind == MESSAGE:
                number, _, received, _ = struct.unpack_from("<HIQQ", body)
                self.messages.setdefault(number, []).append((received, body[22:]))
            elif kind == CHUNK and not within:
                part = _expanded(body)
                self._expanded += len(part)
                if self._expanded > LARGEST_EXPANDED:
                    raise LogError("its chunks expand beyond reason", f"at most {LARGEST_EXPANDED >> 30} GiB")
                self._take(part, within=True)


def read_mcap(contents: Contents, section: LogSection) -> ArrayTable:
    """Read one topic of an MCAP file: ROS 1, ROS 2 or JSON messages.

    Raises
    ------
    LogError
        When nothing can be read, the topic cannot be told, or the library is missing.
    """
    scan = _Scan(memoryview(contents.data)[len(MAGIC) :])
    names = {number: (scan.schemas.get(schema, ("", "", ""))[0]) for number, (schema, _, _) in scan.channels.items()}
    topics = {topic: names[number] for number, (_, topic, _) in scan.channels.items()}
    counts: dict[str, int] = {}
    for number, (_, topic, _) in scan.channels.items():
        counts[topic] = counts.get(topic, 0) + len(scan.messages.get(number, ()))
    topic = chosen_topic(topics, counts, section.dataset, contents.name)
    numbers = [number for number, (_, name, _) in scan.channels.items() if name == topic]
    number = numbers[0]
    decoders = {}
    for each in numbers:
        schema, _, encoding = scan.channels[each]
        decoders[each] = decoder(scan.schemas.get(schema, ("", "", "")), encoding, contents.name)
    arrived = sorted(
        ((instant, each, body) for each in numbers for instant, body in scan.messages.get(each, [])),
        key=lambda message: message[0],
    )
    table = read_messages(
        ((instant, partial(decoders[each], bytes(body))) for instant, each, body in arrived),
        f"MCAP, topic {topic}, {names[number]}",
        contents.name,
    )
    if scan.cut or not scan.ended:
        table.remarks.append("the file is cut short or damaged: the messages before that are read")
    return table


def decoder(schema: tuple[str, str, str], encoding: str, name: str) -> Any:  # noqa: ANN401  a function of bytes
    """Return what turns the bytes of a message into an object.

    Parameters
    ----------
    schema : (name, encoding, text)
    encoding : str
        ``cdr``, ``ros1`` or ``json``.
    name : str
        Of the file, for messages.
    """
    if encoding == "json":
        import json  # noqa: PLC0415

        return json.loads
    if encoding not in ("cdr", "ros1") or schema[1] not in ("ros2msg", "ros1msg"):
        raise LogError(f"the messages of {name!r} are in {encoding or schema[1]!r}", "ROS 1, ROS 2 or JSON messages")
    try:
        from rosbags.typesys import Stores, get_types_from_msg, get_typestore  # noqa: PLC0415  an extra
    except ImportError as error:
        raise missing_library(f"{name!r} holds ROS messages: reading them", "rosbags", "bags") from error
    if re.search(rf"\[<?=?\s*\d{{{LONGEST_FIXED},}}\s*\]", schema[2]):
        raise LogError(
            f"the message type {schema[0]!r} of {name!r} declares arrays beyond reason", "messages of a sensor"
        )
    kind = schema[0] if "/msg/" in schema[0] else schema[0].replace("/", "/msg/", 1)
    store = get_typestore(Stores.EMPTY)
    try:
        store.register(get_types_from_msg(schema[2], kind))
    except Exception as error:  # the library's own tree of errors
        raise LogError(
            f"the message type {schema[0]!r} of {name!r} cannot be understood", "a definition with it"
        ) from error
    if encoding == "cdr":
        return lambda body: store.deserialize_cdr(body, kind)
    return lambda body: store.deserialize_ros1(body, kind)


FORMAT = Format(("mcap",), lambda contents: bytes(contents.data[: len(MAGIC)]) == MAGIC, read_mcap)
