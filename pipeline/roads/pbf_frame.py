"""The frame of an OSM PBF file: where its blocks are, and what each says that it holds."""

from __future__ import annotations

import mmap
import struct
import zlib
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from pipeline.roads import pbf_wire as wire
from pipeline.roads.arrays import Int64, Uint8
from pipeline.roads.pbf_blocks import DENSE, RELATIONS, WAYS

MOST_HEADER, MOST_BLOB = 64 * 1024, 32 * 1024 * 1024  # bytes, by the format's definition
MOST_TEXT = 1024  # bytes; libosmium takes no longer key, value or role
KNOWN_FEATURES = {"OsmSchema-V0.6", "DenseNodes"}


class OddFileError(Exception):
    """Something out of the usual; the reference reader decides what to make of the file."""


@dataclass(frozen=True)
class Block:
    """One decompressed block: its bytes, and what `pbf_blocks.survey` found in it."""

    data: bytes
    array: Uint8
    head: Int64
    strings: Int64
    groups: list[tuple[int, int, int]]

    def text(self, number: int) -> str:
        """A string of the block's table."""
        start, stop = self.strings[number]
        text = self.data[start:stop]
        if len(text) > MOST_TEXT or b"\0" in text:
            raise OddFileError("a text that is too long")
        return text.decode("utf-8")

    def keys(self, table: tuple[Uint8, Int64]) -> Int64:
        """For each string its position among the keys of a table, or -1."""
        return np.asarray(wire.match(self.array, self.strings, *table))


@dataclass(frozen=True)
class Source:
    """A file that is open, where its blocks of data are, and how many nodes are sampled."""

    path: Path
    raw: mmap.mmap
    places: list[tuple[int, int]]
    every: int

    def block(self, place: tuple[int, int]) -> Block:
        """Decompress a block and see what it holds."""
        data = _inflate(self.raw[place[0] : place[1]])
        array = np.frombuffer(data, dtype=np.uint8)
        sound, head, strings, groups = wire.survey(array)
        if sound != wire.GOOD:
            raise OddFileError("a block that cannot be read")
        kinds = [(int(kind), int(start), int(stop)) for kind, start, stop in groups]
        if any(kind not in (DENSE, WAYS, RELATIONS) for kind, _, _ in kinds):
            raise OddFileError("a block of an unusual kind")
        return Block(data, array, head, strings, kinds)


def find_blobs(raw: mmap.mmap) -> list[tuple[int, int]]:
    """Where the data blobs start and end."""
    places: list[tuple[int, int]] = []
    at = 0
    while at < len(raw):
        (size,) = struct.unpack(">I", raw[at : at + 4])
        if size > MOST_HEADER or at + 4 + size > len(raw):
            raise OddFileError("a header that is too long")
        header = message(raw[at + 4 : at + 4 + size])
        start = at + 4 + size
        stop = start + int(header.get(3, -1))
        if not start <= stop <= len(raw) or stop - start > MOST_BLOB:
            raise OddFileError("a block that is too long")
        if header.get(1) == b"OSMHeader" and not places:
            _check_header(_inflate(raw[start:stop]))
        elif header.get(1) == b"OSMData" and at:
            places.append((start, stop))
        else:
            raise OddFileError("a block of an unknown kind")
        at = stop
    return places


def message(data: bytes) -> dict[int, Any]:
    """The fields of a small message by number; the last one of each."""
    return dict(_fields(data))


def _fields(data: bytes) -> Iterator[tuple[int, Any]]:
    array = np.frombuffer(data, dtype=np.uint8)
    at = 0
    while at < len(array):
        number, start, stop, at = wire.field(array, at, len(array))
        if at < 0:
            raise OddFileError("a message that is cut")
        yield number, (data[start:stop] if stop >= 0 else start)


def _check_header(data: bytes) -> None:
    """Raise OddFileError where reading the file needs a feature that is not known here."""
    needed = {value.decode() for number, value in _fields(data) if number == 4}
    if not needed <= KNOWN_FEATURES:
        raise OddFileError(f"features {', '.join(sorted(needed))}")


def _inflate(blob: bytes) -> bytes:
    """The content of a blob, plain or compressed by zlib."""
    fields = message(blob)
    if 1 in fields:
        return bytes(fields[1])
    if 3 not in fields or not 0 <= int(fields.get(2, -1)) <= MOST_BLOB:
        raise OddFileError("a compression that is not zlib")
    size = int(fields[2])
    content = zlib.decompressobj()
    data = content.decompress(fields[3], size + 1)
    if len(data) != size or not content.eof:
        raise OddFileError("a block of another size than it says")
    return data
