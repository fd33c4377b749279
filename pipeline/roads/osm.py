"""Reads OSM PBF and OSM XML into the internal form.

libosmium filters the ways, gives their nodes the locations and writes them as OPL, its own
one-line-per-object text, with the tagged nodes and the turn restrictions; no object becomes a
Python object on the way. The lists of nodes are then parsed by compiled code, the tags line by
line. Nodes are read first, ways and relations second, so that an unsorted file gives the same
roads as a sorted one.
"""

from __future__ import annotations

import re
import tempfile
from pathlib import Path

import numpy as np
import osmium

from pipeline.errors import RoadsError
from pipeline.roads.arrays import Int32, Int64, Uint8, compiled, offsets
from pipeline.roads.extract import TAG_KEYS
from pipeline.roads.merge import NO_PLACE, FileRoads, TagColumn
from pipeline.roads.signs import Pairs, Signs

READ_ERRORS = (RuntimeError, ValueError, OSError, MemoryError)
OPL = "opl,add_metadata=false,locations_on_ways=true"
_ESCAPED = re.compile(r"%([0-9a-f]+)%")


def read_osm(path: Path) -> FileRoads:
    """Roads of one OSM PBF or OSM XML file (plain, .gz or .bz2), its objects in any order.

    Raises
    ------
    RoadsError
        The file is truncated or malformed.
    """
    try:
        with tempfile.TemporaryDirectory(prefix="roads") as folder:
            opl = Path(folder) / "ways.opl"
            _filter_ways(path, opl)
            content = opl.read_bytes()
    except READ_ERRORS as error:
        raise RoadsError(
            f"{path.name}: not a whole OSM file that can be read ({error}). "
            "Nothing was taken from it; download or cut the extract again."
        ) from None
    signs = Signs()
    way_id, counts, ref, place, tags = _parse(content, signs)
    if (ref < 0).any():
        place = _with_negative_ids(ref, place, path)
    node_id, first, way_node = np.unique(ref, return_index=True, return_inverse=True)
    return FileRoads(
        way_id=way_id,
        way_start=offsets(counts),
        way_node=way_node,
        node_id=node_id,
        node_lon_e7=place[0, first],
        node_lat_e7=place[1, first],
        tags=tags,
        signs=signs,
    )


def _filter_ways(path: Path, opl: Path) -> None:
    """Write tagged nodes, ways that are roads or ferries, and turn restrictions as OPL."""
    places = osmium.NodeLocationsForWays(osmium.index.create_map("sparse_mem_array"))
    places.ignore_errors()
    signs = osmium.filter.KeyFilter("barrier", "highway", "ford")
    roads = osmium.filter.KeyFilter("highway", "route")
    roads.enable_for(osmium.osm.WAY)
    turns = osmium.filter.TagFilter(("type", "restriction"))
    turns.enable_for(osmium.osm.RELATION)
    entities = osmium.osm.WAY | osmium.osm.RELATION
    with (
        osmium.SimpleWriter(osmium.io.File(str(opl), OPL)) as writer,
        osmium.io.Reader(str(path), osmium.osm.NODE) as nodes,
    ):
        osmium.apply(nodes, places, signs, writer)
        with osmium.io.Reader(str(path), entities) as others:
            osmium.apply(others, places, roads, turns, writer)


def _parse(content: bytes, signs: Signs) -> tuple[Int64, Int64, Int64, Int32, dict[str, TagColumn]]:
    """Ids, node counts, nodes, places and tags of ``w7 Thighway=primary Nn1x-21.5y64.1,...``.

    What stands on lines of nodes and relations goes into `signs`.
    """
    way_ids: list[int] = []
    node_lists: list[bytes] = []
    tags: dict[str, tuple[list[int], list[str]]] = {key: ([], []) for key in TAG_KEYS}
    for line in content.splitlines():
        what, tag_list, rest = line.split(b" ", 2)
        if line.startswith(b"n"):
            signs.add_node(int(what[1:]), _pairs(tag_list))
            continue
        if line.startswith(b"r"):
            signs.add_relation(int(what[1:]), _pairs(tag_list), rest[1:].decode("utf-8"))
            continue
        for key, value in _pairs(tag_list):
            if key in tags:
                tags[key][0].append(len(way_ids))
                tags[key][1].append(value)
        way_ids.append(int(what[1:]))
        node_lists.append(rest[1:])
    counts = np.array([nodes.count(b"n") for nodes in node_lists], dtype=np.int64)
    text = np.frombuffer(b",".join(node_lists) + b"\n", dtype=np.uint8)
    ref, place = _parse_nodes(text, int(counts.sum()))
    columns = {key: TagColumn.of(*found) for key, found in tags.items()}
    return np.array(way_ids, dtype=np.int64), counts, ref, place, columns


def _pairs(tag_list: bytes) -> Pairs:
    """Keys and values from ``Thighway=primary,surface=sand%2c%``."""
    text = tag_list[1:].decode("utf-8")
    pairs = []
    for pair in text.split(","):
        key, _, value = pair.partition("=")
        pairs.append((key, _ESCAPED.sub(_unescape, value) if "%" in value else value))
    return pairs


def _unescape(match: re.Match[str]) -> str:
    return chr(int(match.group(1), 16))


@compiled
def _parse_nodes(text: Uint8, count: int) -> tuple[Int64, Int32]:
    """Ids and places (1e-7 degree) from ``n1x-21.5y64.1,n2xy,...``; exact, no float between."""
    ref = np.empty(count, dtype=np.int64)
    place = np.empty((2, count), dtype=np.int32)
    item, field = -1, 0  # field 0: id, 1: x, 2: y
    number, decimals, sign, digits = np.int64(0), 0, 1, 0
    after_point = False
    for c in text:
        if 48 <= c <= 57:  # 0-9
            number = number * 10 + (c - 48)
            digits += 1
            decimals += after_point
        elif c == 45:  # -
            sign = -1
        elif c == 46:  # .
            after_point = True
        else:  # n, x, y, comma or line end: the number before it is complete
            if digits and field == 0:
                ref[item] = sign * number
            elif field:
                value = sign * number * 10 ** (7 - decimals)
                place[field - 1, item] = value if digits else NO_PLACE
            number, decimals, sign, digits = np.int64(0), 0, 1, 0
            after_point = False
            item += c == 110  # n
            field = (c == 120) * 1 + (c == 121) * 2  # x, y
    return ref, place


def _with_negative_ids(ref: Int64, place: Int32, path: Path) -> Int32:
    """Locate nodes with negative ids (of editors; libosmium does not index them)."""
    wanted = set(ref[ref < 0].tolist())
    places = {}
    for node in osmium.FileProcessor(str(path), osmium.osm.NODE):
        if isinstance(node, osmium.osm.Node) and node.id in wanted and node.location.valid():
            places[node.id] = (node.location.x, node.location.y)
    located = place.copy()
    for position in np.flatnonzero(ref < 0):
        located[:, position] = places.get(int(ref[position]), (int(NO_PLACE), int(NO_PLACE)))
    return located
