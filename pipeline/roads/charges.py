"""Where money is due: ferries that are boarded, toll booths that are passed, toll roads.

The graph keeps a short list of its own for them, by directed edge, with the OSM ids by which a
study can give each its own price. Booths and the ends of toll roads are always junctions, so
that an edge has the toll of one way on all of it, or none.

- A ferry is boarded on the edge that leaves the land, under the id of that way.
- A booth is passed by whoever drives up to its node.
- The toll of a way is due in the proportion of its length that is driven.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

from pipeline.roads.arrays import Bool, Int64
from pipeline.roads.contract import Chains
from pipeline.roads.extract import RoadExtract
from pipeline.roads.segments import Segments

FERRY, BOOTH, TOLL_WAY = 1, 2, 3  # values of `charge_kind`


def booth_nodes(extract: RoadExtract) -> Int64:
    """Nodes of the extract that are toll booths."""
    tags = extract.tagged_nodes.tags
    is_booth = (tags["barrier"] == "toll_booth") | (tags["highway"] == "toll_booth")
    return extract.tagged_nodes.node[is_booth.to_numpy(np.bool_)].astype(np.int64)


def charged_nodes(extract: RoadExtract, segments: Segments, is_toll: Bool) -> Int64:
    """Nodes that are to be junctions: booths, and the ends of toll ways."""
    tolled = np.flatnonzero(is_toll[segments.way])
    way = segments.way[tolled]
    begins = np.flatnonzero(np.diff(way, prepend=-1))
    ends = np.append(begins[1:], len(way)) - 1
    nodes = [segments.a[tolled[begins]], segments.b[tolled[ends]]] if len(tolled) else []
    return np.concatenate([booth_nodes(extract), *nodes]).astype(np.int64)


def charges_of(
    extract: RoadExtract,
    segments: Segments,
    chains: Chains,
    *,
    is_ferry: Bool,
    is_toll: Bool,
    on_land: Bool,
) -> dict[str, npt.NDArray[Any]]:
    """The arrays `charge_*` of a graph.

    Parameters
    ----------
    extract, segments, chains : the roads.
    is_ferry : of each edge.
    is_toll : of each way.
    on_land : of each node of the extract, whether a road that is no ferry ends there.
    """
    first, last = chains.first[:-1], chains.first[1:] - 1
    way = segments.way[chains.segment]
    found: list[tuple[Int64, int, Int64, npt.NDArray[np.float64]]] = []
    for backward, tail, segment in ((0, chains.start, first), (1, chains.end, last)):
        boards = np.flatnonzero(is_ferry & on_land[tail])
        ids = extract.way_id[way[segment[boards]]]
        found.append((2 * boards + backward, FERRY, ids, np.ones(len(boards))))
    is_booth = np.zeros(len(extract.node_lon_e7), dtype=np.bool_)
    is_booth[booth_nodes(extract)] = True
    for backward, head in ((0, chains.end), (1, chains.start)):
        passes = np.flatnonzero(is_booth[head] & ~is_ferry)
        ids = extract.node_id[head[passes]]
        found.append((2 * passes + backward, BOOTH, ids, np.ones(len(passes))))
    toll = np.flatnonzero(is_toll[way[first]] & ~is_ferry)
    way_m = np.bincount(segments.way, segments.length_m, len(extract.way_id))
    edge_m = np.add.reduceat(segments.length_m[chains.segment], first)
    of_way = way[first[toll]]
    share = edge_m[toll] / np.maximum(way_m[of_way], 1e-9)
    found += [(2 * toll + back, TOLL_WAY, extract.way_id[of_way], share) for back in (0, 1)]
    return _sorted(found)


def _sorted(
    found: list[tuple[Int64, int, Int64, npt.NDArray[np.float64]]],
) -> dict[str, npt.NDArray[Any]]:
    edge = np.concatenate([item[0] for item in found])
    kind = np.concatenate([np.full(len(item[0]), item[1], dtype=np.uint8) for item in found])
    osm_id = np.concatenate([item[2] for item in found])
    share = np.concatenate([item[3] for item in found])
    order = np.lexsort((osm_id, kind, edge))
    return {
        "charge_edge": edge[order].astype(np.int32),
        "charge_kind": kind[order],
        "charge_id": osm_id[order].astype(np.int64),
        "charge_share": share[order].astype(np.float32),
    }
