"""Country roads of the invented county: which places they join, their classes and their bends."""

from __future__ import annotations

import itertools
from typing import Any, TypeAlias

import networkx as nx
import numpy as np
import shapely
from demo_land import Points
from demo_streets import Streets
from demo_ways import Network, bends
from scipy.spatial import Delaunay
from shapely.geometry import LineString, Polygon

Roads: TypeAlias = "nx.Graph[Any]"
MAXSPEED = {"trunk": "100", "primary": "90", "secondary": "80", "tertiary": "70"}
MAXSPEED_MISSING = {"trunk": 0.0, "primary": 0.1, "secondary": 0.4, "tertiary": 0.6}
_CLASSES = ("unclassified", "tertiary", "secondary", "primary", "trunk")


def country_graph(
    network: Network,
    nodes: list[int],
    land: Polygon,
    streets: Streets,
    rng: np.random.Generator,
) -> Roads:
    """Neighbours on dry land, each with the bends of its road; a tenth of the roads left out."""
    xy = np.array([network.xy[node] for node in nodes])
    dry = land.buffer(-0.15)
    shapely.prepare(dry)
    graph: Roads = nx.Graph()
    graph.add_nodes_from(nodes)
    for i, j in _gabriel(xy):
        between = bends(xy[i], xy[j], rng)
        line = LineString([xy[i], *between, xy[j]])
        if dry.contains(line) and not any(
            grid.buffer(-0.1).intersects(line) for grid in streets.grids
        ):
            graph.add_edge(nodes[i], nodes[j], km=float(line.length), bends=between, of=nodes[i])
    for edge in sorted(graph.edges):
        data = graph.edges[edge]
        graph.remove_edge(*edge)
        needed = not nx.has_path(graph, *edge)
        if needed or rng.random() > 0.1:
            graph.add_edge(*edge, **data)
    return graph


def _gabriel(xy: Points) -> list[tuple[int, int]]:
    """Pairs of points with no third point in the circle whose diameter they span."""
    corners = Delaunay(xy).simplices
    pairs = {
        tuple(sorted((int(t[a]), int(t[b])))) for t in corners for a, b in ((0, 1), (1, 2), (0, 2))
    }
    kept = []
    for i, j in sorted(pairs):
        middle, radius = (xy[i] + xy[j]) / 2, float(np.hypot(*(xy[i] - xy[j]))) / 2
        if int((np.hypot(*(xy - middle).T) < radius * 0.999).sum()) == 0:
            kept.append((i, j))
    return kept


def classify(
    roads: Roads,
    streets: Streets,
    junctions: list[int],
    bridge: tuple[int, int],
    villages: list[int],
) -> None:
    """Give roads that are on the way between places a higher class."""
    for edge in roads.edges:
        roads.edges[edge]["highway"] = "unclassified"
    towns = streets.gates
    for village in villages:
        for gates in towns:
            _raise_class(roads, village, gates[0], "tertiary")
        _raise_class(roads, village, min(_by_km(roads, village, towns))[1], "secondary")
    for end, gates in zip(junctions[:2], (towns[0], towns[1]), strict=True):
        _raise_class(roads, end, min(_by_km(roads, end, [gates]))[1], "trunk")
    for junction in junctions[2:]:
        _raise_class(roads, junction, min(_by_km(roads, junction, towns))[1], "primary")
    _raise_class(roads, junctions[3], min(_by_km(roads, junctions[3], [towns[2]]))[1], "trunk")
    for shore, gates in zip(bridge, (towns[0], towns[1]), strict=True):
        _raise_class(roads, shore, min(_by_km(roads, shore, [gates]))[1], "primary")
    for reserve in villages[-4:-2]:
        _raise_class(roads, bridge[1], reserve, "secondary")


def _by_km(roads: Roads, start: int, towns: list[list[int]]) -> list[tuple[float, int]]:
    km = nx.single_source_dijkstra_path_length(roads, start, weight="km")
    return [(km[gate], gate) for gates in towns for gate in gates if gate in km]


def _raise_class(roads: Roads, start: int, stop: int, highway: str) -> None:
    path = nx.dijkstra_path(roads, start, stop, weight="km")
    for edge in itertools.pairwise(path):
        had = roads.edges[edge]["highway"]
        roads.edges[edge]["highway"] = max(had, highway, key=_CLASSES.index)


def draw_country_roads(network: Network, roads: Roads, rng: np.random.Generator) -> None:
    """Draw every country road with its class; signs and surfaces as patchy as in a real map."""
    for first, second in sorted(roads.edges):
        edge = roads.edges[first, second]
        start, stop = (first, second) if edge["of"] == first else (second, first)
        highway = edge["highway"]
        tags = {"highway": highway}
        if rng.random() > MAXSPEED_MISSING.get(highway, 0.85):
            tags["maxspeed"] = MAXSPEED.get(highway, "60")
        if highway == "unclassified":
            tags["surface"] = "gravel" if rng.random() < 0.2 else "asphalt"
        edge["way"] = network.add_road(start, stop, edge["bends"], tags)


def forbid_turns(network: Network, roads: Roads) -> None:
    """Three crossings where turning left out of one road is forbidden."""
    crossings = [node for node in sorted(roads.nodes) if roads.degree(node) >= 5][:3]
    for via in crossings:
        origin, *others = sorted(roads.neighbors(via))
        inward = network.at(via) - network.at(origin)
        lefts = [np.cross([*inward, 0], [*(network.at(o) - network.at(via)), 0])[2] for o in others]
        leftmost = others[int(np.argmax(lefts))]
        turn = (roads.edges[origin, via]["way"], via, roads.edges[via, leftmost]["way"])
        network.no_turns.append(turn)
