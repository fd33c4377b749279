"""Breaks a PBF in many ways, and says what reading each copy came to."""

from __future__ import annotations

import random
import struct
import zlib
from collections.abc import Callable
from concurrent.futures import ProcessPoolExecutor
from functools import partial
from multiprocessing import get_context
from pathlib import Path

import numpy as np
import osmium
from osmium.osm.mutable import Node, Way

from pipeline.errors import RoadsError
from pipeline.roads import RoadExtract, read_extract
from pipeline.roads import pbf_wire as wire
from pipeline.roads.arrays import Uint8
from pipeline.roads.pbf_blocks import DENSE
from pipeline.roads.pbf_frame import message

SIDE = 60  # nodes along each side


def town_pbf(file: Path) -> Path:
    """A town of 20 × 20 crossings, with two nodes between each and the next; streets of 10."""
    number = 0
    with osmium.SimpleWriter(str(file)) as writer:
        for y in range(SIDE):
            for x in range(SIDE):
                number += 1
                if x % 3 and y % 3:
                    continue  # within a block of houses
                tags = {"highway": "traffic_signals"} if number % 97 == 0 else {}
                place = (8.0 + x * 1e-3 + (y % 3) * 1e-4, 50.0 + y * 1e-3)
                writer.add_node(Node(id=number * 3, location=place, tags=tags))
        for way, refs in enumerate(_streets(), start=1):
            tags = {"highway": "residential", "name": f"Street {way}", "maxspeed": "50"}
            writer.add_way(Way(id=way, nodes=[3 * ref for ref in refs], tags=tags))
    return in_blocks(file)


def _streets() -> list[list[int]]:
    """Streets east and north, each of nine stretches."""
    grid = np.arange(1, SIDE * SIDE + 1).reshape(SIDE, SIDE)
    lines = [*grid[::3], *grid.T[::3]]
    parts = [line[k : k + 10].tolist() for line in lines for k in range(0, SIDE - 1, 9)]
    return [part for part in parts if len(part) > 1]


def in_blocks(file: Path) -> Path:
    """Write the objects of a small file again, 150 to a block."""
    frames: list[bytes] = []
    folder = file.parent
    chunk = folder / "chunk.osm.pbf"
    for kind in (osmium.osm.NODE, osmium.osm.WAY):
        total = sum(1 for _ in osmium.FileProcessor(str(file), kind))
        for start in range(0, total, 150):
            with osmium.SimpleWriter(str(chunk), overwrite=True) as writer:
                for k, item in enumerate(osmium.FileProcessor(str(file), kind)):
                    if start <= k < start + 150:
                        writer.add(item)
            head, *rest = split(chunk.read_bytes())
            frames += rest if frames else [head, *rest]
    file.write_bytes(b"".join(frames))
    return file


def split(content: bytes) -> list[bytes]:
    """The frames of a PBF: header and data blobs, each with its length before it."""
    frames, at = [], 0
    while at < len(content):
        (size,) = struct.unpack(">I", content[at : at + 4])
        stop = at + 4 + size + int(message(content[at + 4 : at + 4 + size])[3])
        frames.append(content[at:stop])
        at = stop
    return frames


# --- ways to break a file --------------------------------------------------------------------


def _flip(content: bytes, chance: random.Random) -> bytes:
    """Some bytes anywhere become others."""
    broken = bytearray(content)
    for _ in range(chance.choice([1, 1, 2, 20])):
        broken[chance.randrange(len(broken))] = chance.randrange(256)
    return bytes(broken)


def _cut(content: bytes, chance: random.Random) -> bytes:
    return content[: chance.randrange(len(content))]


def _cut_at_block(content: bytes, chance: random.Random) -> bytes:
    frames = split(content)
    return b"".join(frames[: chance.randrange(1, len(frames))])


def _without_block(content: bytes, chance: random.Random) -> bytes:
    frames = split(content)
    del frames[chance.randrange(1, len(frames))]
    return b"".join(frames)


def _shuffled(content: bytes, chance: random.Random) -> bytes:
    head, *frames = split(content)
    chance.shuffle(frames)
    return b"".join([head, *frames])


def _twice(content: bytes, chance: random.Random) -> bytes:
    frames = split(content)
    return b"".join([*frames, frames[chance.randrange(1, len(frames))]])


def _inside(content: bytes, chance: random.Random) -> bytes:
    """Ids, places and nodes of ways change within a block, and the block is packed again."""
    frames = split(content)
    number = chance.randrange(1, len(frames))
    frame = frames[number]
    (size,) = struct.unpack(">I", frame[:4])
    data = bytearray(zlib.decompress(message(frame[4 + size :])[3]))
    spots = _numbers(np.frombuffer(bytes(data), dtype=np.uint8))
    for _ in range(chance.choice([1, 1, 2, 10])):
        data[chance.choice(spots)] = chance.randrange(256)
    frames[number] = _packed(bytes(data))
    return b"".join(frames)


def _numbers(block: Uint8) -> list[int]:
    """Positions of the bytes of ids, coordinates and nodes of ways."""
    spots: list[int] = []
    for kind, start, stop in wire.survey(block)[3].tolist():
        at = start
        while at < stop:
            _, inner, end, at = wire.field(block, at, stop)
            while inner < end:
                before = inner
                number, begin, finish, inner = wire.field(block, inner, end)
                if number in ((1, 8, 9) if kind == DENSE else (1, 8)):
                    spots += range(begin if finish >= 0 else before + 1, inner)
    return spots


def _packed(data: bytes) -> bytes:
    """A data blob with its frame."""
    body = zlib.compress(data)
    blob = b"\x10" + _varint(len(data)) + b"\x1a" + _varint(len(body)) + body
    head = b"\x0a\x07OSMData\x18" + _varint(len(blob))
    return struct.pack(">I", len(head)) + head + blob


def _varint(value: int) -> bytes:
    out = bytearray()
    while value > 127:
        out.append(value & 127 | 128)
        value >>= 7
    return bytes([*out, value])


BREAKS: tuple[Callable[[bytes, random.Random], bytes], ...] = (
    _flip,
    _cut,
    _cut_at_block,
    _without_block,
    _shuffled,
    _twice,
    _inside,
    _inside,
    _inside,
)


def broken_copies(file: Path, folder: Path, count: int, chance: random.Random) -> list[Path]:
    """So many broken copies of a file."""
    content = file.read_bytes()
    copies = []
    for number in range(count):
        copy = folder / f"broken{number}.osm.pbf"
        copy.write_bytes(BREAKS[number % len(BREAKS)](content, chance))
        copies.append(copy)
    return copies


# --- what became of it -----------------------------------------------------------------------


def judge(copies: list[Path], whole: Path, seconds: float) -> list[str]:
    """Verdict on each copy, from processes that may neither hang nor die."""
    with ProcessPoolExecutor(2, mp_context=get_context("spawn")) as pool:
        verdict = partial(_verdict, whole=read_extract((whole,)))
        return list(pool.map(verdict, copies, chunksize=10, timeout=seconds))


def _verdict(copy: Path, *, whole: RoadExtract) -> str:
    """`refused`, `whole`, `counted` (missing pieces are), `moved` (other values), or `partial`."""
    try:
        extract = read_extract((copy,))
    except RoadsError:
        return "refused"
    if (extract.way_node < 0).any():
        return "counted"  # road_quality: ways cut, pieces cut out
    pieces = len(extract.way_node) - extract.ways
    if extract.ways == whole.ways and pieces == len(whole.way_node) - whole.ways:
        names = ("node_id", "node_lon_e7", "node_lat_e7", "way_id", "way_node")
        same = (np.array_equal(getattr(extract, name), getattr(whole, name)) for name in names)
        return "whole" if all(same) else "moved"
    return "partial"
