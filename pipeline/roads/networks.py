"""Main networks: parts of the graph in which every place can be reached and left."""

from __future__ import annotations

from typing import Literal

import numpy as np
from scipy.sparse import csr_array
from scipy.sparse.csgraph import connected_components

from pipeline.roads.arrays import Float32, Float64, Int32, Int64


def main_networks(
    tail: Int32, head: Int32, edge_start: Int32, edge_end: Int32, road_km: Float64, least_km: float
) -> tuple[Int32, Int32]:
    """Number of the main network of each node (-1: none), and its weakly connected part.

    Parameters
    ----------
    tail, head : ends of the open arcs.
    edge_start, edge_end : ends of all edges.
    road_km : length of each edge; 0 for ferries.
    least_km : a strongly connected part other than the largest is a main network of its own
        if it has at least this much road.
    """
    nodes = int(max(edge_start.max(), edge_end.max())) + 1
    strong = labels(tail, head, nodes, strong=True)
    weak = labels(edge_start, edge_end, nodes, strong=False)
    inside = strong[edge_start] == strong[edge_end]
    km = np.bincount(strong[edge_start[inside]], road_km[inside], minlength=strong.max() + 1)
    order = np.argsort(-km, kind="stable")
    chosen = order[km[order] >= least_km]
    chosen = chosen if len(chosen) else order[:1]
    number = np.full(len(km), -1, dtype=np.int32)
    number[chosen] = np.arange(len(chosen), dtype=np.int32)
    return number[strong], weak


def detached_km(
    edge_start: Int32, node_network: Int32, weak: Int32, road_km: Float64
) -> tuple[Float32, int]:
    """Road in each edge's part where that part touches no main network, else 0; and how many."""
    parts = int(weak.max()) + 1
    has_main = np.zeros(parts, dtype=np.bool_)
    has_main[weak[node_network >= 0]] = True
    km = np.bincount(weak[edge_start], road_km, minlength=parts)
    km[has_main] = 0
    return km[weak[edge_start]].astype(np.float32), int((~has_main).sum())


def labels(tail: Int32 | Int64, head: Int32 | Int64, nodes: int, *, strong: bool) -> Int32:
    """Number of the strongly or weakly connected part of each node."""
    links: Float64 = np.ones(len(tail))  # parallel arcs add up, and stay above zero
    matrix = csr_array((links, (tail, head)), shape=(nodes, nodes))
    connection: Literal["strong", "weak"] = "strong" if strong else "weak"
    return np.asarray(
        connected_components(matrix, directed=True, connection=connection)[1], dtype=np.int32
    )
