"""Reads OSM PBF files by compiled code, several blocks at a time.

The fast way to what ``osm`` reads by libosmium, which stays the reference: the two give the
same roads, object by object. Ways come first, then only the nodes that they use, so a block is
decompressed once and no table of all nodes is kept. A file that is in any way out of the usual
(an optional feature, another compression, a broken block) is not read here at all.
"""

from __future__ import annotations

import mmap
import struct
import zlib
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np

from pipeline.errors import RoadsError
from pipeline.roads import pbf_blocks as blocks
from pipeline.roads.arrays import Int32, Int64, Uint8, offsets
from pipeline.roads.extract import TAG_KEYS
from pipeline.roads.merge import NO_PLACE, FileRoads, TagColumn
from pipeline.roads.pbf_frame import Block, OddFileError, Source, find_blobs
from pipeline.roads.pbf_wire import GOOD
from pipeline.roads.signs import ROLES, Pairs, Signs

WORKERS = 2
SIGN_KEYS = ("barrier", "highway", "ford")
WAY_KEYS = ("highway", "route")
# A node without a tag is there for a way. More than this share, and this many, that belong to
# none (in whole files it is well under a thousandth): the file ends before its ways do.
MOST_ORPHANS, FEWEST_ORPHANS = 0.005, 20
SAMPLED, SMALL_FILE = 61, 4_000_000  # of larger files (bytes) one node in so many is looked at


class _UnsortedError(Exception):
    """Ways stand before the last nodes."""


def _table(keys: tuple[str, ...]) -> tuple[Uint8, Int64]:
    """Keys one after the other, and where each ends."""
    coded = [key.encode() for key in keys]
    return np.frombuffer(b"".join(coded), np.uint8), np.cumsum([len(key) for key in coded])


# The keys that make a way a road come first.
_WAY_TABLE_KEYS = (*WAY_KEYS, *(key for key in TAG_KEYS if key not in WAY_KEYS))
_WAY_TABLE, _SIGN_TABLE = _table(_WAY_TABLE_KEYS), _table(SIGN_KEYS)
_TYPE_TABLE = _table(("type", "restriction"))


@dataclass
class _Found:
    """What the blocks held, in the order of the file."""

    way_id: list[Int64] = field(default_factory=list)
    count: list[Int64] = field(default_factory=list)
    ref: list[Int64] = field(default_factory=list)
    sample: list[Int64] = field(default_factory=list)
    tags: list[tuple[Int64, list[str]]] = field(default_factory=list)
    relations: list[tuple[int, Pairs, list[tuple[bool, int, int]]]] = field(default_factory=list)
    has_nodes: bool = False
    has_ways: bool = False


def read_pbf(path: Path) -> FileRoads:
    """Roads of one OSM PBF file.

    Raises
    ------
    OddFileError
        The file is not as most are; nothing is said about its being whole.
    RoadsError
        A node lies off the earth, or nodes lack their ways: the file was cut short.
    """
    if not path.stat().st_size:
        raise OddFileError("an empty file")
    with path.open("rb") as stream, mmap.mmap(stream.fileno(), 0, access=mmap.ACCESS_READ) as raw:
        try:
            every = SAMPLED if len(raw) > SMALL_FILE else 1
            source = Source(path, raw, find_blobs(raw), every)
            with ThreadPoolExecutor(WORKERS) as pool:
                try:
                    return _read(source, pool, is_sorted=True)
                except _UnsortedError:
                    return _read(source, pool, is_sorted=False)
        except (UnicodeDecodeError, zlib.error, struct.error) as error:
            raise OddFileError(str(error)) from None


def _read(source: Source, pool: ThreadPoolExecutor, *, is_sorted: bool) -> FileRoads:
    """Read ways first, then their nodes, then see whether all fits together."""
    found, unread = _ways_first(source, pool, is_sorted=is_sorted)
    ref = _joined([part for f in found for part in f.ref])
    node_id, way_node = np.unique(ref, return_inverse=True)
    lon, lat = np.full(len(node_id), NO_PLACE), np.full(len(node_id), NO_PLACE)
    signs, alone, located = Signs(), [], 0
    later = source.places[unread:]
    jobs = [(place, True) for place in source.places[:unread]]
    jobs += [(place, False) for place, f in zip(later, found, strict=True) if f.has_nodes]
    for parts, tags, sampled in pool.map(lambda job: _nodes(source, *job, wanted=node_id), jobs):
        for position, x, y in parts:
            lon[position], lat[position] = x, y
            located += len(position)
        for node, pairs in tags:
            signs.add_node(node, pairs)
        alone.append(sampled)
    if located != int((lon != NO_PLACE).sum()):
        raise OddFileError("a node that is there twice")
    _refuse_orphans(source.path, _joined(alone), [part for f in found for part in f.sample])
    for f in found:
        signs.relations.update({number: (pairs, who) for number, pairs, who in f.relations})
    return FileRoads(
        way_id=_joined([part for f in found for part in f.way_id]),
        way_start=offsets(_joined([part for f in found for part in f.count])),
        way_node=way_node,
        node_id=node_id,
        node_lon_e7=lon,
        node_lat_e7=lat,
        tags=_tags(found),
        signs=signs,
    )


def _joined(parts: list[Int64]) -> Int64:
    return np.concatenate([np.empty(0, dtype=np.int64), *parts])


# --- ways and relations ----------------------------------------------------------------------


def _ways_first(
    source: Source, pool: ThreadPoolExecutor, *, is_sorted: bool
) -> tuple[list[_Found], int]:
    """What the blocks with ways and relations hold, and how many before them were not read.

    In a sorted file the blocks are read from the last one on until one holds nodes alone.
    """
    found: list[_Found] = []
    unread = len(source.places)
    while unread > 0:
        part = source.places[max(0, unread - 4 * WORKERS) : unread]
        read = list(pool.map(lambda place: _ways(source.block(place), source.every), part))
        found = read + found
        unread -= len(part)
        if is_sorted and any(f.has_nodes and not f.has_ways for f in read):
            break
    return found, unread


def _ways(block: Block, every: int) -> _Found:
    """Ways and turn restrictions of a block."""
    found = _Found()
    for kind, start, stop in block.groups:
        if kind == blocks.DENSE:
            found.has_nodes = True
            continue
        found.has_ways = True
        if kind == blocks.RELATIONS:
            found.relations += _relations(block, start, stop)
            continue
        key = block.keys(_WAY_TABLE)
        sound, way_id, count, ref, tags, sample = blocks.ways(
            block.array, start, stop, key, len(WAY_KEYS), every
        )
        if sound != GOOD:
            raise OddFileError("a way that cannot be read")
        values, code = np.unique(tags[:, 2], return_inverse=True)
        coded = np.stack([tags[:, 0], key[tags[:, 1]], code], axis=1)
        found.way_id.append(way_id)
        found.count.append(count)
        found.ref.append(ref)
        found.sample.append(sample)
        found.tags.append((coded, [block.text(int(value)) for value in values]))
    return found


def _relations(
    block: Block, start: int, stop: int
) -> list[tuple[int, Pairs, list[tuple[bool, int, int]]]]:
    """Turn restrictions: id, tags, and members as (is a way, id, role)."""
    kinds = block.keys(_TYPE_TABLE)
    type_key, restriction = (np.flatnonzero(kinds == k) for k in (0, 1))
    if not len(type_key) or not len(restriction):
        return []
    if len(type_key) > 1 or len(restriction) > 1:
        raise OddFileError("a text that is there twice")
    sound, ids, tags, members = blocks.relations(
        block.array, start, stop, len(block.strings), int(type_key[0]), int(restriction[0])
    )
    if sound != GOOD:
        raise OddFileError("a relation that cannot be read")
    result: list[tuple[int, Pairs, list[tuple[bool, int, int]]]] = [
        (int(number), [], []) for number in ids
    ]
    for row, key, value in tags.tolist():
        result[row][1].append((block.text(key), block.text(value)))
    for row, kind, member, role in members.tolist():
        name = block.text(role)
        if kind < 2 and name in ROLES:
            result[row][2].append((kind == 1, member, ROLES.index(name)))
    return result


def _tags(found: list[_Found]) -> dict[str, TagColumn]:
    """Columns of tags over all ways, the blocks one after the other."""
    rows: dict[int, list[Int64]] = {k: [] for k in range(len(_WAY_TABLE_KEYS))}
    codes: dict[int, list[Int64]] = {k: [] for k in rows}
    number: dict[str, int] = {}
    before = 0
    for f in found:
        for way_id, (tags, values) in zip(f.way_id, f.tags, strict=True):
            known = np.array([number.setdefault(v, len(number)) for v in values], dtype=np.int64)
            order = np.argsort(tags[:, 1], kind="stable")
            ends = np.searchsorted(tags[order, 1], np.arange(len(rows) + 1))
            for k in range(len(rows)):
                part = tags[order[ends[k] : ends[k + 1]]]
                if len(part):
                    rows[k].append(part[:, 0] + before)
                    codes[k].append(known[part[:, 2]])
            before += len(way_id)
    texts = np.array(list(number), dtype=object)
    return {key: _column(rows[k], codes[k], texts) for k, key in enumerate(_WAY_TABLE_KEYS)}


def _column(rows: list[Int64], codes: list[Int64], texts: Any) -> TagColumn:
    used, code = np.unique(_joined(codes), return_inverse=True)
    return TagColumn(_joined(rows), code.astype(np.int64), texts[used].tolist())


# --- nodes -----------------------------------------------------------------------------------

_Places = list[tuple[Int64, Int32, Int32]]


def _nodes(
    source: Source,
    place: tuple[int, int],
    alone: bool,  # noqa: FBT001 - nothing but nodes is expected there
    *,
    wanted: Int64,
) -> tuple[_Places, list[tuple[int, Pairs]], Int64]:
    """Positions and places of the wanted nodes, those that are signs, and sampled others."""
    block = source.block(place)
    parts: _Places = []
    signs: dict[int, Pairs] = {}
    untagged: list[Int64] = []
    for kind, start, stop in block.groups:
        if kind != blocks.DENSE and alone:
            raise _UnsortedError
        if kind != blocks.DENSE:
            continue
        key = block.keys(_SIGN_TABLE)
        sound, position, lon, lat, tags, sampled = blocks.dense(
            block.array, start, stop, block.head, key, wanted, source.every
        )
        if sound == blocks.OFF_EARTH:
            raise RoadsError(
                f"{source.path.name}: node {position[0]} lies off the earth. The file is damaged, "
                "and nothing was taken from it; download or cut the extract again."
            )
        if sound != GOOD:
            raise OddFileError("nodes that cannot be read")
        parts.append((position, lon, lat))
        untagged.append(sampled)
        for here, name, value in tags.tolist():
            pair = block.text(name), block.text(value)
            signs.setdefault(int(wanted[here]), []).append(pair)
    return parts, list(signs.items()), _joined(untagged)


def _refuse_orphans(path: Path, alone: Int64, of_ways: list[Int64]) -> None:
    """Raise RoadsError where too many sampled nodes without a tag belong to no way."""
    orphans = ~np.isin(alone, _joined(of_ways))
    if orphans.sum() < FEWEST_ORPHANS or orphans.mean() <= MOST_ORPHANS:
        return
    raise RoadsError(
        f"{path.name}: about {orphans.mean():.0%} of its untagged nodes belong to no way "
        f"(such as node {alone[orphans][0]}): the file ends before its ways do. Nothing was "
        "taken from it; download or cut the extract again."
    )
