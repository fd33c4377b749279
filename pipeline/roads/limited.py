"""Roads that are open only at the ends of a trip, as far as one could drive through them."""

from __future__ import annotations

import numpy as np

from pipeline.roads.arrays import Bool, Float64, Int32, Int64
from pipeline.roads.networks import labels, main_networks


def through_roads(
    tail: Int32,
    head: Int32,
    edge: Int32,
    edge_start: Int32,
    edge_end: Int32,
    is_limited: Bool,
    road_km: Float64,
    least_km: float,
) -> Bool:
    """Edges that are limited to the ends of trips, and would shorten others otherwise.

    Edges tagged as limited, and ordinary ones that are cut off from the main networks of
    ordinary roads by them. Parts of them that touch those networks at one junction (a driveway)
    or nowhere cannot be driven through; they are left out, unless one that can be driven
    through touches the same junction.

    Parameters
    ----------
    tail, head, edge : ends and number of the edge of the open arcs.
    edge_start, edge_end : ends of all edges.
    is_limited : whether each edge is tagged so.
    road_km, least_km : as in `main_networks`.
    """
    if not is_limited.any():
        return is_limited
    nodes = int(max(edge_start.max(), edge_end.max())) + 1
    ordinary = ~is_limited[edge]
    ordinary_km = np.where(is_limited, 0, road_km)
    network, _ = main_networks(
        tail[ordinary], head[ordinary], edge_start, edge_end, ordinary_km, least_km
    )
    is_main = network >= 0
    off = is_limited | ~is_main[edge_start] | ~is_main[edge_end]
    part = _parts(edge_start, edge_end, off, is_main, nodes)
    known = np.zeros(int(part.max()) + 1, dtype=np.bool_)
    known[part[is_limited]] = True
    at_part, at_node = _doors(edge_start, edge_end, off, is_main, part)
    through = known & (np.bincount(at_part, minlength=len(known)) >= 2)
    # Who comes to a junction by a part that is driven through may go on into a cul-de-sac there.
    reached = np.zeros(nodes, dtype=np.bool_)
    reached[at_node[through[at_part]]] = True
    through[at_part[reached[at_node]]] = True
    return np.asarray(off & through[part])


def _parts(edge_start: Int32, edge_end: Int32, off: Bool, is_main: Bool, nodes: int) -> Int64:
    """Number of the part of each edge that is off: they hang together beside the main nodes.

    An edge between two main nodes is a part of its own; edges that are not off have part 0.
    """
    inner = off & ~is_main[edge_start] & ~is_main[edge_end]
    label = labels(edge_start[inner], edge_end[inner], nodes, strong=False).astype(np.int64)
    own = nodes + np.arange(len(edge_start))
    at_start, at_end = ~is_main[edge_start], ~is_main[edge_end]
    part = np.where(at_start, label[edge_start], np.where(at_end, label[edge_end], own))
    return np.where(off, part + 1, 0)


def _doors(
    edge_start: Int32, edge_end: Int32, off: Bool, is_main: Bool, part: Int64
) -> tuple[Int64, Int64]:
    """Every pair of a part and a main node that it touches."""
    touched = []
    for node in (edge_start, edge_end):
        at = off & is_main[node]
        touched.append(np.stack([part[at], node[at].astype(np.int64)]))
    pairs = np.unique(np.concatenate(touched, axis=1), axis=1)
    return pairs[0], pairs[1]
