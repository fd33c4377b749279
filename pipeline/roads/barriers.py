"""Barriers on nodes: a closed one cuts every road at its node.

Either side can be driven up to; nobody passes. The node becomes as many nodes as stretches end
there, all at the same place.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from pipeline.roads.arrays import Bool, Int32
from pipeline.roads.extract import RoadExtract
from pipeline.roads.segments import Segments


def cut_at_barriers(
    extract: RoadExtract, segments: Segments, is_closed: Bool
) -> tuple[RoadExtract, Segments]:
    """Give every stretch that ends at a closed barrier an end of its own.

    Parameters
    ----------
    extract : the roads; the result has more nodes, without ids, after its own.
    segments : open stretches of road.
    is_closed : of each tagged node, whether it is a barrier that the vehicle cannot pass.
    """
    closed = np.zeros(len(extract.node_id), dtype=np.bool_)
    closed[extract.tagged_nodes.node[is_closed]] = True
    at_a, at_b = np.flatnonzero(closed[segments.a]), np.flatnonzero(closed[segments.b])
    if not len(at_a) and not len(at_b):
        return extract, segments
    cut = np.concatenate([segments.a[at_a], segments.b[at_b]])
    new: Int32 = np.arange(len(cut), dtype=np.int32) + np.int32(len(extract.node_lon_e7))
    a, b = segments.a.copy(), segments.b.copy()
    a[at_a], b[at_b] = new[: len(at_a)], new[len(at_a) :]
    more = replace(
        extract,
        node_lon_e7=np.concatenate([extract.node_lon_e7, extract.node_lon_e7[cut]]),
        node_lat_e7=np.concatenate([extract.node_lat_e7, extract.node_lat_e7[cut]]),
    )
    return more, replace(segments, a=a, b=b)
