"""Reads GraphML as osmnx saves it: a directed graph of streets, simplified or not.

A direction of travel is an edge of its own there. Two edges along the same line with the same
tags become one two-way road, any other a one-way road, so that directions are those of the
graph and of no tag. Where a simplified graph has joined ways of several values, the first class
counts, and other values are listed as OSM lists them.
"""

from __future__ import annotations

import ast
import hashlib
from collections.abc import Iterator
from pathlib import Path
from typing import Any
from xml.etree.ElementTree import ParseError

import networkx as nx
import numpy as np
import pyproj
import shapely

from pipeline.errors import RoadsError
from pipeline.roads.arrays import Float64, Int64, offsets
from pipeline.roads.extract import TAG_KEYS
from pipeline.roads.merge import FileRoads, TagColumn
from pipeline.roads.signs import NODE_KEYS, Signs

WGS84 = pyproj.CRS.from_epsg(4326)
OWN_KEYS = tuple(key for key in TAG_KEYS if not key.startswith("oneway"))
Line = tuple[int, int, bytes, tuple[tuple[str, str], ...]]  # ends, places, tags


def read_graphml(path: Path) -> FileRoads:
    """Roads of one GraphML file; nodes and ways without an OSM id get a negative one.

    Raises
    ------
    RoadsError
        The file is no GraphML of a directed street graph.
    """
    try:
        graph = nx.read_graphml(path, force_multigraph=True)
        places = _places(graph)
        lines = _lines(graph, places)
    except (ParseError, nx.NetworkXError, KeyError, ValueError, OSError, SyntaxError) as error:
        raise RoadsError(
            f"{path.name}: not GraphML of a street graph as osmnx saves it ({error}). "
            "Save the graph again by osmnx.save_graphml."
        ) from None
    if not graph.is_directed():
        raise RoadsError(
            f"{path.name}: the graph has no directions, so one-way streets are lost. "
            "Save the directed graph, before osmnx.convert.to_undirected."
        )
    mixed = sum(1 for line in lines if {"highway", "route"} <= dict(line[3]).keys())
    if mixed:
        raise RoadsError(
            f"{path.name}: {mixed} road(s) joined with a ferry in one edge. Save the graph before "
            "it is simplified, or simplify it with edge_attrs_differ=['highway', 'route']."
        )
    return _file_roads(lines, places, _signs(graph))


def _places(graph: nx.Graph[Any]) -> dict[int, tuple[int, int]]:
    """Place of every node by its id, in 1e-7 degree."""
    ids = [int(node) for node in graph.nodes]
    points = np.array(
        [(float(data["x"]), float(data["y"])) for _, data in graph.nodes(data=True)]
    ).reshape(-1, 2)
    return dict(zip(ids, map(tuple, _e7(points, graph).tolist()), strict=True))


def _e7(points: Float64, graph: nx.Graph[Any]) -> Int64:
    """Coordinates of the graph in 1e-7 degree of WGS 84."""
    crs = pyproj.CRS.from_user_input(graph.graph.get("crs", "EPSG:4326"))
    if not crs.equals(WGS84, ignore_axis_order=True):
        change = pyproj.Transformer.from_crs(crs, WGS84, always_xy=True)
        points = np.stack(change.transform(points[:, 0], points[:, 1]), axis=1)
    return np.asarray(np.rint(points * 1e7), dtype=np.int64)


def _lines(graph: nx.Graph[Any], places: dict[int, tuple[int, int]]) -> dict[Line, bool]:
    """Every road once, with whether it is open both ways."""
    lines: dict[Line, bool] = {}
    for tail, head, data in graph.edges(data=True):
        u, v = int(tail), int(head)
        if "geometry" in data:
            line = _e7(shapely.get_coordinates(shapely.from_wkt(data["geometry"])), graph)
        else:
            line = np.array([places[u], places[v]], dtype=np.int64)
        tags = tuple(_tags(data))
        twin = (v, u, line[::-1].tobytes(), tags)
        if twin in lines:
            lines[twin] = True
        else:
            lines.setdefault((u, v, line.tobytes(), tags), False)
    return lines


def _tags(data: dict[str, Any]) -> Iterator[tuple[str, str]]:
    """Tags of an edge; of several values of a class the first."""
    for key in OWN_KEYS:
        text = str(data.get(key, ""))
        if text.startswith("["):
            values = [str(value) for value in ast.literal_eval(text)]
            text = values[0] if key in ("highway", "route", "junction") else ";".join(values)
        if text:
            yield key, text


def _signs(graph: nx.Graph[Any]) -> Signs:
    signs = Signs()
    for node, data in graph.nodes(data=True):
        pairs = [(key, str(data[key])) for key in NODE_KEYS if key in data]
        if pairs:
            signs.add_node(int(node), pairs)
    return signs


def _file_roads(
    lines: dict[Line, bool], places: dict[int, tuple[int, int]], signs: Signs
) -> FileRoads:
    """Roads over the graph's nodes, and over nodes of their own between those."""
    located = dict(places)
    way_id: list[int] = []
    refs: list[list[int]] = []
    rows: dict[str, tuple[list[int], list[str]]] = {key: ([], []) for key in TAG_KEYS}
    for row, ((u, v, line, tags), both_ways) in enumerate(lines.items()):
        number = _hashed(repr((u, v, tags)).encode() + line)
        inner = np.frombuffer(line, dtype=np.int64).reshape(-1, 2)[1:-1].tolist()
        between = {-1 - (number * 1_000_003 + k) % 2**62: (x, y) for k, (x, y) in enumerate(inner)}
        located.update(between)
        way_id.append(-1 - number)
        refs.append([u, *between, v])
        for key, value in (*tags, ("oneway", "no" if both_ways else "yes")):
            rows[key][0].append(row)
            rows[key][1].append(value)
    ref = np.array([node for line in refs for node in line], dtype=np.int64)
    node_id, way_node = np.unique(ref, return_inverse=True)
    place = np.array([located[int(node)] for node in node_id], dtype=np.int32).reshape(-1, 2)
    return FileRoads(
        way_id=np.array(way_id, dtype=np.int64),
        way_start=offsets(np.array([len(line) for line in refs], dtype=np.int64)),
        way_node=way_node,
        node_id=node_id,
        node_lon_e7=place[:, 0],
        node_lat_e7=place[:, 1],
        tags={key: TagColumn.of(*found) for key, found in rows.items()},
        signs=signs,
    )


def _hashed(content: bytes) -> int:
    """A number below 2^62 that stands for a road, the same in every file."""
    return int.from_bytes(hashlib.blake2b(content, digest_size=8).digest()) >> 2
