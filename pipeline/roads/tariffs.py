"""What is due along routes: ferries, booths and tolls, counted and priced.

What a study lists by OSM id in [routes.charges] is priced by it; everything else is counted for
the stage ``cost``, which has the usual fares and tolls.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from pipeline.road_settings import ChargesSettings
from pipeline.roads.arrays import Bool, Float64, Int32, Int64, compiled, ranges
from pipeline.roads.charges import BOOTH, FERRY, TOLL_WAY
from pipeline.roads.graph import RoadGraph
from pipeline.roads.places import Places
from pipeline.search import Tree

CHARGES = (
    "ferry_count",
    "toll_booths",
    "listed_ferries",
    "listed_booths",
    "listed_toll_km",
    "listed_fare_per_vehicle",
    "listed_fare_per_person",
    "listed_toll",
)
WIDTH = len(CHARGES)

PARTS = ("to_start", "to_end", "from_start", "from_end")  # of an edge, on either side of a place
PartDues = dict[str, Float64]


@dataclass(frozen=True)
class Tariffs:
    """What each charge of a graph adds to a route, in the order of its `charge_edge`.

    Attributes
    ----------
    edge : (k,) directed edge, ascending.
    on_passing : (k, 8) due for the whole edge or at its far end: ferries and booths.
    by_length : (k, 8) due in the proportion of the edge that is driven: tolls of ways.
    """

    edge: Int32
    on_passing: Float64
    by_length: Float64

    @classmethod
    def of(cls, graph: RoadGraph, charges: ChargesSettings) -> Tariffs:
        """Look every charge of the graph up in the study's lists."""
        kind, osm_id = graph.charge_kind, graph.charge_id
        values = np.zeros((len(kind), WIDTH))
        ferry, booth, toll = (np.asarray(kind == k) for k in (FERRY, BOOTH, TOLL_WAY))
        fares, is_listed = _looked_up(osm_id, charges.ferry_per_vehicle)
        persons, also_listed = _looked_up(osm_id, charges.ferry_per_person)
        values[:, 0], values[:, 1] = ferry, booth
        values[:, 2] = ferry & (is_listed | also_listed)
        values[ferry, 5], values[ferry, 6] = fares[ferry], persons[ferry]
        at_booths, is_listed = _looked_up(osm_id, charges.toll_by_booth)
        values[:, 3] = booth & is_listed
        on_ways, is_listed = _looked_up(osm_id, charges.toll_by_way)
        toll_km = graph.edge_toll_m[graph.charge_edge // 2] / 1000
        values[:, 4] = np.where(toll & is_listed, toll_km, 0)
        values[:, 7] = at_booths * booth + on_ways * toll * graph.charge_share
        by_length = values * toll[:, np.newaxis]
        return cls(graph.charge_edge, values - by_length, by_length)

    @property
    def any(self) -> bool:
        """Whether there is anything to pay."""
        return len(self.edge) > 0

    def of_edges(self, edges: Int64, passing: Bool, share: Float64) -> Float64:
        """What is due on parts of directed edges.

        Parameters
        ----------
        edges : directed edges.
        passing : whether the part of each reaches its far end.
        share : share of its length that is driven.
        """
        low = np.searchsorted(self.edge, edges, "left")
        counts = (np.searchsorted(self.edge, edges, "right") - low).astype(np.int64)
        at = ranges(low.astype(np.int64), counts)
        row = np.repeat(np.arange(len(edges)), counts)
        result = np.zeros((len(edges), WIDTH))
        due = self.on_passing[at] * passing[row, np.newaxis]
        np.add.at(result, row, due + self.by_length[at] * share[row, np.newaxis])
        return result

    def of_places(self, graph: RoadGraph, places: Places) -> PartDues:
        """What is due between places and the ends of their edges, by part."""
        edge = np.maximum(places.edge, 0)
        length_m = np.maximum(graph.edge_toll_m[edge].astype(np.float64), 1e-9)
        start, end = places.start_toll_m / length_m, places.end_toll_m / length_m
        no = np.zeros(len(edge), dtype=np.bool_)
        dues = {
            "to_start": self.of_edges(2 * edge + 1, places.to_start > 0, start),
            "to_end": self.of_edges(2 * edge, places.to_end > 0, end),
            "from_start": self.of_edges(2 * edge, no, start),
            "from_end": self.of_edges(2 * edge + 1, no, end),
        }
        known = places.edge >= 0
        return {part: due * known[:, np.newaxis] for part, due in dues.items()}

    def along(self, tree: Tree, nodes: Int64, arc_edge: Int32) -> Float64:
        """What is due on the routes between some junctions and the tree's place, seeds left out."""
        total = self.on_passing + self.by_length
        return _due_along(tree.parent, tree.via, nodes, arc_edge, self.edge, total)


def _looked_up(osm_id: Int64, listed: dict[str, float]) -> tuple[Float64, Bool]:
    """Amount of each id (0 where it is not listed), and whether it is listed."""
    known = sorted((int(number), amount) for number, amount in listed.items())
    ids = np.array([number for number, _ in known], dtype=np.int64)
    amounts = np.array([amount for _, amount in known], dtype=np.float64)
    if not len(ids):
        return np.zeros(len(osm_id)), np.zeros(len(osm_id), dtype=np.bool_)
    place = np.minimum(np.searchsorted(ids, osm_id), len(ids) - 1)
    found = np.asarray(ids[place] == osm_id)
    return np.where(found, amounts[place], 0.0), found


@compiled
def _due_along(
    parent: Int32, via: Int32, nodes: Int64, arc_edge: Int32, charged: Int32, due: Float64
) -> Float64:
    """Climb from each node until a node with known sums, then hand them down again."""
    known = np.full(len(parent), -1, dtype=np.int32)  # row of the sums of each node
    sums = np.zeros((len(charged) + 1, due.shape[1]))  # row 0: nothing due
    used = 1
    climbed = np.empty(len(parent), dtype=np.int32)
    result = np.zeros((len(nodes), due.shape[1]))
    for k in range(len(nodes)):
        here, height = np.int64(nodes[k]), 0
        while known[here] < 0 and parent[here] >= 0:
            climbed[height] = here
            height += 1
            here = np.int64(parent[here])
        if known[here] < 0:
            known[here] = 0
        while height > 0:
            height -= 1
            below = climbed[height]
            edge = arc_edge[via[below]]
            low = np.searchsorted(charged, edge)
            row = known[here]
            if low < len(charged) and charged[low] == edge:
                if used == len(sums):
                    more = np.zeros((2 * used, sums.shape[1]))
                    more[:used] = sums
                    sums = more
                sums[used] = sums[row]
                while low < len(charged) and charged[low] == edge:
                    sums[used] += due[low]
                    low += 1
                row = used
                used += 1
            known[below] = row
            here = np.int64(below)
        result[k] = sums[known[np.int64(nodes[k])]]
    return result
