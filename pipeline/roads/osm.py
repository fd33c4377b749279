"""Reads OSM PBF and OSM XML into the internal form.

libosmium filters the ways, gives their nodes the locations and writes them as OPL, its own
one-line-per-object text; no object becomes a Python object on the way. The lists of nodes are
then parsed by compiled code, the tags line by line. Nodes are read first and ways second, so
that an unsorted file gives the same roads as a sorted one.
"""

from __future__ import annotations

import re
import tempfile
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import osmium
import pandas as pd

from pipeline.errors import RoadsError
from pipeline.roads.arrays import Int32, Int64, Uint8, compiled, offsets, ranges
from pipeline.roads.extract import TAG_KEYS, RoadExtract

READ_ERRORS = (RuntimeError, ValueError, OSError, MemoryError)
NO_PLACE = np.int32(2_147_483_647)  # a coordinate that the file does not give
OPL = "opl,add_metadata=false,locations_on_ways=true"
_ESCAPED = re.compile(r"%([0-9a-f]+)%")


@dataclass(frozen=True)
class _Ways:
    """Ways of one file: references to nodes with the locations that the file gives."""

    way_id: Int64
    ref_count: Int64
    ref: Int64
    lon_e7: Int32
    lat_e7: Int32
    tags: dict[str, tuple[list[int], list[str]]]


def read_extract(paths: tuple[Path, ...]) -> RoadExtract:
    """Read road extracts and merge them by OSM id.

    Parameters
    ----------
    paths : OSM PBF or OSM XML files (plain, .gz or .bz2), in any order of their objects.

    Raises
    ------
    RoadsError
        A file is truncated or malformed, or none of them holds a road.
    """
    if not paths:
        raise RoadsError("no road extract is given; set roads.files in the study file.")
    return _merge([_read_file(path) for path in paths], paths)


def _read_file(path: Path) -> _Ways:
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
    ways = _parse(content)
    return _with_negative_ids(ways, path) if (ways.ref < 0).any() else ways


def _filter_ways(path: Path, opl: Path) -> None:
    """Write the ways with a `highway` or `route` tag, and the places of their nodes, as OPL."""
    places = osmium.NodeLocationsForWays(osmium.index.create_map("sparse_mem_array"))
    places.ignore_errors()
    with osmium.io.Reader(str(path), osmium.osm.NODE) as nodes:
        osmium.apply(nodes, places)
    with (
        osmium.io.Reader(str(path), osmium.osm.WAY) as ways,
        osmium.SimpleWriter(osmium.io.File(str(opl), OPL)) as writer,
    ):
        osmium.apply(ways, places, osmium.filter.KeyFilter("highway", "route"), writer)


def _parse(content: bytes) -> _Ways:
    """Ways from OPL lines such as ``w7 Thighway=primary Nn1x-21.5y64.1,n2x-21.6y64.1``."""
    way_ids: list[int] = []
    node_lists: list[bytes] = []
    tags: dict[str, tuple[list[int], list[str]]] = {key: ([], []) for key in TAG_KEYS}
    for line in content.splitlines():
        way, tag_list, node_list = line.split(b" ")
        for pair in tag_list[1:].decode("utf-8").split(","):
            key, _, value = pair.partition("=")
            if key in tags:
                rows, values = tags[key]
                rows.append(len(way_ids))
                values.append(_ESCAPED.sub(_unescape, value) if "%" in value else value)
        way_ids.append(int(way[1:]))
        node_lists.append(node_list[1:])
    counts = np.array([nodes.count(b"n") for nodes in node_lists], dtype=np.int64)
    text = np.frombuffer(b",".join(node_lists) + b"\n", dtype=np.uint8)
    ref, lon, lat = _parse_nodes(text, int(counts.sum()))
    return _Ways(np.array(way_ids, dtype=np.int64), counts, ref, lon, lat, tags)


def _unescape(match: re.Match[str]) -> str:
    return chr(int(match.group(1), 16))


@compiled
def _parse_nodes(text: Uint8, count: int) -> tuple[Int64, Int32, Int32]:
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
    return ref, place[0], place[1]


def _with_negative_ids(ways: _Ways, path: Path) -> _Ways:
    """Locate nodes with negative ids (of editors; libosmium does not index them)."""
    wanted = set(ways.ref[ways.ref < 0].tolist())
    places = {}
    for node in osmium.FileProcessor(str(path), osmium.osm.NODE):
        if isinstance(node, osmium.osm.Node) and node.id in wanted and node.location.valid():
            places[node.id] = (node.location.x, node.location.y)
    lon, lat = ways.lon_e7.copy(), ways.lat_e7.copy()
    for position in np.flatnonzero(ways.ref < 0):
        nowhere = (int(NO_PLACE), int(NO_PLACE))
        lon[position], lat[position] = places.get(int(ways.ref[position]), nowhere)
    return _Ways(ways.way_id, ways.ref_count, ways.ref, lon, lat, ways.tags)


def _merge(files: list[_Ways], paths: tuple[Path, ...]) -> RoadExtract:
    """One extract of all files: a way or node that several files hold is taken once."""
    way_id, first = np.unique(np.concatenate([f.way_id for f in files]), return_index=True)
    if not len(way_id):
        names = ", ".join(path.name for path in paths)
        raise RoadsError(
            f"{names}: no way with a highway or ferry tag. "
            "Give an extract that holds roads in roads.files."
        )
    counts = np.concatenate([f.ref_count for f in files])
    places = ranges(offsets(counts)[:-1][first], counts[first])
    node_id, lon, lat, way_node = _nodes(
        np.concatenate([f.ref for f in files]),
        np.concatenate([f.lon_e7 for f in files]),
        np.concatenate([f.lat_e7 for f in files]),
    )
    return RoadExtract(
        node_id=node_id,
        node_lon_e7=lon,
        node_lat_e7=lat,
        way_id=way_id,
        way_start=offsets(counts[first]),
        way_node=way_node[places],
        way_tags=_tag_columns(files).take(first).reset_index(drop=True),
    )


def _nodes(ref: Int64, lon: Int32, lat: Int32) -> tuple[Int64, Int32, Int32, Int32]:
    """Located nodes, ascending by id, and for every reference its node's index or -1."""
    located = np.flatnonzero((lon != NO_PLACE) & (lat != NO_PLACE))
    node_id, first = np.unique(ref[located], return_index=True)
    if not len(node_id):
        return node_id, lon[:0], lat[:0], np.full(len(ref), -1, dtype=np.int32)
    index = np.searchsorted(node_id, ref)
    index = np.minimum(index, len(node_id) - 1)
    way_node = np.where(node_id[index] == ref, index, -1).astype(np.int32)
    return node_id, lon[located[first]], lat[located[first]], way_node


def _tag_columns(files: list[_Ways]) -> pd.DataFrame:
    """One categorical column per key, the files' ways one below the other."""
    total = sum(len(f.way_id) for f in files)
    starts = offsets(np.array([len(f.way_id) for f in files]))
    columns = {}
    for key in TAG_KEYS:
        rows = [np.array(f.tags[key][0], dtype=np.int64) for f in files]
        rows = [row + start for row, start in zip(rows, starts[:-1], strict=True)]
        values = [value for f in files for value in f.tags[key][1]]
        known, categories = pd.factorize(np.array(values, dtype=object), sort=True)
        codes = np.full(total, -1, dtype=np.int32)
        codes[np.concatenate(rows)] = known
        columns[key] = pd.Categorical.from_codes(
            codes, categories=pd.Index(categories, dtype=object)
        )
    return pd.DataFrame(columns)
