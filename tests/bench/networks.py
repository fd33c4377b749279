"""Road-like networks for the bench: jittered grids with faster arterials, all seeded."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import osmium
from osmium.osm.mutable import Node, Way

from pipeline.roads.arrays import Int32, Int64
from pipeline.roads.graph import DISTANCE_BITS, best_arcs

Arcs = tuple[Int64, Int32, Int64, Int32]


def planar_arcs(arcs: int, seed: int = 1) -> Arcs:
    """A square grid of about so many arcs; every tenth street is an arterial of 90 km/h.

    Nodes stand in the order of rows within tiles of 64 by 64, so that neighbours lie close in
    memory as they do on a Hilbert curve.
    """
    side = int(np.sqrt(arcs / 4)) // 64 * 64
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
