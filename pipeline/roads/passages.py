"""Which junctions, or copies of them, a place on an edge is left to and entered from.

At most edges that is just the junction at the end. See ``copies`` for the others. Who stands
at a junction can leave and be reached by any road there.
"""

from __future__ import annotations

import numpy as np

from pipeline.roads.arrays import Bool, Int32, Int64, ranges
from pipeline.roads.copies import START
from pipeline.roads.graph import RoadGraph


def left_to(graph: RoadGraph, edge: Int64, is_at: Bool, *, by_end: bool) -> Int64:
    """Junction or copy that a trip comes to which starts on an edge.

    Parameters
    ----------
    graph : the road graph.
    edge : edge of each place.
    is_at : whether the place is at that end of its edge, and so at the junction.
    by_end : whether the trip leaves by the edge's end; else by its start.
    """
    junction = _junction(graph, edge, by_end=by_end)
    if not len(graph.copy_of):
        return junction
    directed = 2 * edge + (not by_end)
    node = _looked_up(graph.head_edge, graph.head_node, directed, junction)
    starts = np.flatnonzero(graph.copy_kind == START)
    anywhere = _looked_up(graph.copy_of[starts], graph.nodes + starts, junction, junction)
    return np.where(is_at, anywhere, node)


def entered_from(
    graph: RoadGraph, edge: Int64, is_at: Bool, *, by_start: bool
) -> tuple[Int64, Int64]:
    """Junctions and copies from which a trip can end on an edge, as pairs (row, node).

    Parameters
    ----------
    graph : the road graph.
    edge : edge of each place.
    is_at : whether the place is at that end of its edge, and so at the junction.
    by_start : whether the trip comes in by the edge's start; else by its end.
    """
    rows = np.arange(len(edge))
    junction = _junction(graph, edge, by_end=not by_start)
    if not len(graph.copy_of):
        return rows, junction
    directed = 2 * edge + (not by_start)
    on_road, at = rows[~is_at], rows[is_at]
    row, node = _all_of(graph.tail_edge, graph.tail_node.astype(np.int64), directed[on_road])
    order = np.argsort(graph.copy_of, kind="stable")
    copies = _all_of(graph.copy_of[order], graph.nodes + order, junction[at])
    return (
        np.concatenate([rows, on_road[row], at[copies[0]]]),
        np.concatenate([junction, node, copies[1]]),
    )


def entry_node(
    graph: RoadGraph, label: Int64, edge: Int64, is_at: Bool, *, by_start: bool
) -> Int64:
    """What a trip can come from that ends on an edge: the one with the least label."""
    row, node = entered_from(graph, edge, is_at, by_start=by_start)
    if len(row) == len(edge):
        return node
    order = np.lexsort((node, label[node], row))
    first = np.flatnonzero(np.diff(row[order], prepend=-1))
    return np.asarray(node[order[first]])


def _junction(graph: RoadGraph, edge: Int64, *, by_end: bool) -> Int64:
    return (graph.edge_end if by_end else graph.edge_start)[edge].astype(np.int64)


def _looked_up(keys: Int32, values: Int32 | Int64, wanted: Int64, otherwise: Int64) -> Int64:
    """Value of each wanted key among ascending distinct ones; `otherwise` where there is none."""
    if not len(keys):
        return otherwise
    place = np.minimum(np.searchsorted(keys, wanted), len(keys) - 1)
    return np.where(keys[place] == wanted, values[place], otherwise)


def _all_of(keys: Int32, values: Int64, wanted: Int64) -> tuple[Int64, Int64]:
    """Pairs of a row of `wanted` and a value of that key, among ascending keys."""
    low, high = np.searchsorted(keys, wanted, "left"), np.searchsorted(keys, wanted, "right")
    counts = (high - low).astype(np.int64)
    places = ranges(low.astype(np.int64), counts)
    return np.repeat(np.arange(len(wanted)), counts), values[places]
