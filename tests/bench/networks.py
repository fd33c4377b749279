"""Road-like networks for the bench: jittered grids with faster arterials, all seeded."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import osmium
import pandas as pd
from osmium.osm.mutable import Node, Way

from pipeline.roads.arrays import Int32, Int64
from pipeline.roads.extract import TAG_KEYS, RoadExtract
from pipeline.roads.graph import DISTANCE_BITS, DISTANCE_MASK, RoadGraph, best_arcs

Arcs = tuple[Int64, Int32, Int64, Int32]


def planar_arcs(arcs: int, seed: int = 1) -> Arcs:
    """A square grid of about so many arcs; every tenth street is an arterial of 90 km/h.

    Nodes stand in the order of rows within tiles of 64 by 64, so that neighbours lie close in
    memory as they do on a Hilbert curve.
    """
    side = -(-int(np.sqrt(arcs / 4)) // 64) * 64
    rng = np.random.default_rng(seed)
    y, x = np.divmod(np.arange(side * side, dtype=np.int64), side)
    tile = (y // 64) * (side // 64) + x // 64
    rank = np.empty(side * side, dtype=np.int32)
    rank[np.argsort(tile, kind="stable")] = np.arange(side * side, dtype=np.int32)
    tails, heads, costs = [], [], []
    for across, here in ((1, np.flatnonzero(x < side - 1)), (side, np.flatnonzero(y < side - 1))):
        street = y[here] if across == 1 else x[here]
        kmh = np.where(street % 10 == 0, 90.0, 40.0)
        metres = rng.uniform(80, 160, len(here))
        cost = (np.rint(metres / kmh * 360).astype(np.int64) << DISTANCE_BITS) + np.rint(
            metres * 1000
        ).astype(np.int64)
        tails += [rank[here], rank[here + across]]
        heads += [rank[here + across], rank[here]]
        costs += [cost, cost]
    tail, head, cost = np.concatenate(tails), np.concatenate(heads), np.concatenate(costs)
    number = np.arange(len(tail), dtype=np.int32)
    return best_arcs(tail, head, cost, number, side * side)


def planar_graph(arcs: int) -> RoadGraph:
    """The square grid as a road graph: every stretch between two crossings is an edge."""
    first, node, cost, _ = planar_arcs(arcs)
    nodes = len(first) - 1
    tail = np.repeat(np.arange(nodes, dtype=np.int32), np.diff(first))
    once = np.flatnonzero(tail < node)
    start, end, forward = tail[once], node[once], cost[once]
    edges = len(once)
    lon, lat = _places(nodes)
    number = 2 * np.arange(edges, dtype=np.int32)
    both = (np.concatenate([start, end]), np.concatenate([end, start]))
    costs, directed = np.concatenate([forward, forward]), np.concatenate([number, number + 1])
    out = best_arcs(*both, costs, directed, nodes)
    into = best_arcs(*both[::-1], costs, directed, nodes)
    vertex = np.column_stack([start, end]).ravel()
    metres = (forward & DISTANCE_MASK) / 1000
    kmh = (metres / (forward >> DISTANCE_BITS) * 360).astype(np.float32)
    speed = np.column_stack([kmh, np.zeros(edges, dtype=np.float32)]).ravel()
    return RoadGraph(
        node_lon_e7=lon,
        node_lat_e7=lat,
        node_network=np.zeros(nodes, dtype=np.int32),
        edge_start=start,
        edge_end=end,
        edge_forward_cost=forward,
        edge_backward_cost=forward,
        edge_first=2 * np.arange(edges + 1, dtype=np.int64),
        vertex_lon_e7=lon[vertex],
        vertex_lat_e7=lat[vertex],
        vertex_forward_kmh=speed,
        vertex_backward_kmh=speed,
        **_named("arc", out),
        **_named("in", into),
        **_plain(edges),
    )


def _named(prefix: str, arcs: Arcs) -> dict[str, Any]:
    names = (f"{prefix}_{name}" for name in ("first", "node", "cost", "edge"))
    return dict(zip(names, arcs, strict=True))


def _plain(edges: int) -> dict[str, Any]:
    """No ferry, no toll, no delay, no restriction."""
    nothing, still = (np.zeros(count, dtype=np.float32) for count in (edges, 2 * edges))
    none = np.empty(0, dtype=np.int32)
    return {
        "edge_is_ferry": np.zeros(edges, dtype=np.bool_),
        "vertex_flags": np.zeros(2 * edges, dtype=np.uint8),
        **dict.fromkeys(("copy_kind", "charge_kind"), np.empty(0, dtype=np.uint8)),
        "charge_id": np.empty(0, dtype=np.int64),
        "charge_share": np.empty(0, dtype=np.float32),
        **dict.fromkeys(("edge_toll_m", "edge_unpaved_m", "edge_detached_km"), nothing),
        **dict.fromkeys(("edge_turn_s", "edge_delay_s"), still),
        **dict.fromkeys(("vertex_forward_delay_s", "vertex_backward_delay_s"), still),
        **dict.fromkeys(("copy_of", "head_edge", "head_node", "tail_edge", "tail_node"), none),
        "charge_edge": none,
    }


def _places(nodes: int) -> tuple[Int32, Int32]:
    """Longitudes and latitudes of the crossings, a thousandth of a degree apart, tile by tile."""
    side = int(np.sqrt(nodes))
    y, x = np.divmod(np.arange(nodes, dtype=np.int64), side)
    order = np.argsort((y // 64) * (side // 64) + x // 64, kind="stable")
    lon, lat = 50_000_000 + x[order] * 10_000, 450_000_000 + y[order] * 10_000
    return lon.astype(np.int32), lat.astype(np.int32)


def chained_extract(arcs: int, inner: int = 1) -> RoadExtract:
    """An extract of about so many arcs before contraction: streets east and north, bent between.

    Every street is one way from edge to edge of the square, with `inner` nodes between each
    crossing and the next.
    """
    side = int(np.sqrt(arcs / (4 * (inner + 1))))
    step = 1 + inner
    rng = np.random.default_rng(1)
    line = np.arange((side - 1) * step + 1, dtype=np.int64)  # nodes along a street
    across = np.arange(side, dtype=np.int64)
    inside = line % step > 0
    count = side * side
    east = np.where(inside, 0, line // step)[None, :] + side * across[:, None]
    north = np.where(inside, 0, line // step * side)[None, :] + across[:, None]
    between = int(inside.sum())
    east[:, inside] = count + np.arange(side * between).reshape(side, between)
    north[:, inside] = count + side * between + np.arange(side * between).reshape(side, between)
    nodes = count + 2 * side * between
    lon, lat = np.empty(nodes, dtype=np.int64), np.empty(nodes, dtype=np.int64)
    for way, along, fixed in ((east, lon, lat), (north, lat, lon)):
        along[way] = line[None, :] * (10_000 // step)
        fixed[way] = across[:, None] * (10_000 // step * step)
    bend = rng.integers(-1500, 1500, (2, nodes))
    tags = pd.DataFrame({key: pd.Categorical([None] * (2 * side)) for key in TAG_KEYS})
    classes = np.where(np.arange(2 * side) % 10 == 0, "primary", "residential")
    return RoadExtract(
        node_id=np.arange(nodes, dtype=np.int64),
        node_lon_e7=(50_000_000 + lon + bend[0]).astype(np.int32),
        node_lat_e7=(450_000_000 + lat + bend[1]).astype(np.int32),
        way_id=np.arange(2 * side, dtype=np.int64),
        way_start=len(line) * np.arange(2 * side + 1, dtype=np.int64),
        way_node=np.concatenate([east.ravel(), north.ravel()]).astype(np.int32),
        way_tags=tags.assign(highway=pd.Categorical(classes)),
    )


def write_pbf(file: Path, side: int, inner: int, seed: int = 1) -> Path:
    """A PBF of side × side crossings, with `inner` nodes between each and the next.

    Every block of houses has a way on two sides; 1,290 and 1 give about 5 M nodes in 830 k
    ways of several nodes each.
    """
    rng = np.random.default_rng(seed)
    step = 1e-3
    with osmium.SimpleWriter(str(file)) as writer:
        number = 0
        for row in range(side):
            shifts = rng.uniform(-2e-4, 2e-4, (side, 1 + 2 * inner, 2))
            for column in range(side):
                for k in range(1 + 2 * inner):
                    number += 1
                    if (k and k <= inner and column == side - 1) or (k > inner and row == side - 1):
                        continue  # no street goes on beyond the last crossing
                    along = (k + inner - 1) % max(inner, 1) + 1 if k else 0
                    east = along / (inner + 1) * step * (1 <= k <= inner)
                    north = along / (inner + 1) * step * (k > inner)
                    lon = 5 + column * step + east + shifts[column, k, 0] / 4
                    lat = 45 + row * step + north + shifts[column, k, 1] / 4
                    writer.add_node(Node(id=number, location=(lon, lat)))
        for way, (refs, arterial) in enumerate(_streets(side, inner), start=1):
            tags = {"highway": "primary" if arterial else "residential", "name": f"Street {way}"}
            writer.add_way(Way(id=way, nodes=refs, tags=tags))
    return file


def _streets(side: int, inner: int) -> list[tuple[list[int], bool]]:
    """Ways of four stretches east and north."""
    per = 1 + 2 * inner
    first = 1 + per * np.arange(side * side).reshape(side, side)
    streets = []
    for heads, shift in ((first, 1), (first.T, 1 + inner)):
        for line, nodes in enumerate(heads.tolist()):
            for start in range(0, side - 1, 4):
                part = nodes[start : start + 5]
                refs = [
                    n
                    for node in part[:-1]
                    for n in (node, *range(node + shift, node + shift + inner))
                ]
                streets.append(([*refs, part[-1]], line % 10 == 0))
    return streets
