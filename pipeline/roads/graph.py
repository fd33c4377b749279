"""The road graph: arrays on disk, memory-mapped on read, and the ways to look at it."""

from __future__ import annotations

from dataclasses import dataclass, fields
from pathlib import Path
from typing import Any, ClassVar, Self

import networkx as nx
import numpy as np
import numpy.typing as npt

from pipeline.errors import RoadsError
from pipeline.roads.arrays import Bool, Float32, Float64, Int32, Int64, Uint8, compiled, grouped
from pipeline.roads.extract import degrees

# A cost packs both weights of a stretch of road into one integer: hundredths of a second in
# the upper bits, millimetres in the lower 34. Costs add up like the weights themselves, and
# comparing two costs compares times first and distances second. The sums hold 17,179 km and
# 62 days.
DISTANCE_BITS = 34
DISTANCE_MASK = (1 << DISTANCE_BITS) - 1
CLOSED = -1

TOLL, UNPAVED = 1, 2  # bits of `vertex_flags`


@dataclass(frozen=True, eq=False)
class RoadGraph:
    """Junctions, the edges between them with their geometry, and directed arcs to search on.

    An edge is a stretch of road between two junctions, whatever its directions; an arc is an
    edge in one direction. Arcs are what a search needs and no more: loops have none, and of
    parallel arcs only those that no other beats in time and distance are there. Nodes stand in
    the order of a Hilbert curve and edges in that of their start, so that neighbours lie close
    in memory.

    Attributes
    ----------
    node_lon_e7, node_lat_e7 : (n,) WGS 84, units of 1e-7 degree.
    node_network : (n,) number of the main network that the node belongs to (0: the largest);
        -1: none. In a main network every place can be reached from every other.
    edge_start, edge_end : (e,) nodes at the ends.
    edge_forward_cost, edge_backward_cost : (e,) packed time and distance; -1: closed.
    edge_is_ferry : (e,) whether it is a ferry.
    edge_toll_m, edge_unpaved_m : (e,) how much of its length.
    edge_turn_s : (2e,) delay of turning off into each directed edge (twice the edge's number,
        plus one backwards).
    edge_delay_s : (2e,) all delays on each directed edge, of its time.
    edge_detached_km : (e,) all roads of the part that joins no main network at all (an
        island); 0 for edges of any other part.
    edge_first : (e + 1,) vertices ``edge_first[i]:edge_first[i + 1]`` are the edge's geometry.
    vertex_lon_e7, vertex_lat_e7 : (v,) geometry.
    vertex_forward_kmh, vertex_backward_kmh : (v,) speed on the stretch from this vertex to the
        next one of the edge; 0: closed (and on the last vertex).
    vertex_forward_delay_s, vertex_backward_delay_s : (v,) delay at the far end of that stretch,
        driven forward, and backward.
    vertex_flags : (v,) of that stretch: 1 toll, 2 unpaved.
    arc_first, arc_node, arc_cost, arc_edge : arcs by the node that they leave:
        ``arc_first[i]:arc_first[i + 1]``, with the node they enter, packed cost, and twice
        the edge's number, plus one for the backward direction.
    in_first, in_node, in_cost, in_edge : the same arcs by the node that they enter, with the
        node that they leave.
    copy_of, copy_kind : (c,) junction of each copy and its kind, see ``copies``; copy `i` has
        the node number ``n + i`` among the arcs.
    head_edge, head_node : directed edges, ascending, that lead a trip which starts on them to a
        copy, and the copy.
    tail_edge, tail_node : directed edges, ascending, with copies from which a trip can end on
        them.
    charge_edge, charge_kind, charge_id, charge_share : directed edges, ascending, where money is
        due, what for, the OSM id, and how much of it; see ``charges``.
    """

    folder_name: ClassVar[str] = "road_graph"

    node_lon_e7: Int32
    node_lat_e7: Int32
    node_network: Int32
    edge_start: Int32
    edge_end: Int32
    edge_forward_cost: Int64
    edge_backward_cost: Int64
    edge_is_ferry: Bool
    edge_toll_m: Float32
    edge_unpaved_m: Float32
    edge_turn_s: Float32
    edge_delay_s: Float32
    edge_detached_km: Float32
    edge_first: Int64
    vertex_lon_e7: Int32
    vertex_lat_e7: Int32
    vertex_forward_kmh: Float32
    vertex_backward_kmh: Float32
    vertex_forward_delay_s: Float32
    vertex_backward_delay_s: Float32
    vertex_flags: Uint8
    arc_first: Int64
    arc_node: Int32
    arc_cost: Int64
    arc_edge: Int32
    in_first: Int64
    in_node: Int32
    in_cost: Int64
    in_edge: Int32
    copy_of: Int32
    copy_kind: Uint8
    head_edge: Int32
    head_node: Int32
    tail_edge: Int32
    tail_node: Int32
    charge_edge: Int32
    charge_kind: Uint8
    charge_id: Int64
    charge_share: Float32

    @property
    def nodes(self) -> int:
        """How many junctions there are."""
        return len(self.node_lon_e7)

    @property
    def edges(self) -> int:
        """How many stretches of road between junctions there are."""
        return len(self.edge_start)

    @property
    def arcs(self) -> int:
        """How many directed arcs there are."""
        return len(self.arc_node)

    @property
    def folder(self) -> Path | None:
        """Where the arrays lie, if they have been opened there."""
        mapped = self.arc_cost.base
        if isinstance(mapped, np.memmap) and mapped.filename is not None:
            return Path(str(mapped.filename)).parent
        return None

    def opened_again(self) -> Self:
        """The same graph by a mapping of its own: memory that it takes goes when it goes."""
        return self if self.folder is None else type(self).read(self.folder)

    def main_edges(self) -> Bool:
        """Edges that can be reached from the rest of a main network and left to it again."""
        network = self.node_network
        start, end = network[self.edge_start], network[self.edge_end]
        return np.asarray((start >= 0) & (start == end) & ~self.edge_is_ferry, dtype=np.bool_)

    def write(self, folder: Path) -> None:
        """Write one ``.npy`` file per array into an existing folder."""
        for field in fields(self):
            np.save(folder / f"{field.name}.npy", getattr(self, field.name), allow_pickle=False)

    @classmethod
    def read(cls, folder: Path) -> Self:
        """Open a written graph; its arrays are memory-mapped and read-only.

        Raises
        ------
        RoadsError
            An array is missing or is not one.
        """
        arrays = {}
        for field in fields(cls):
            try:
                arrays[field.name] = _open(folder / f"{field.name}.npy")
            except (OSError, ValueError) as error:
                raise RoadsError(
                    f"{folder.name}: array {field.name!r} of the road graph cannot be read "
                    f"({error}). Run the stage 'roads' again."
                ) from None
        return cls(**arrays)

    def to_networkx(self) -> nx.MultiDiGraph[int]:
        """The graph in memory, every open direction of every edge, as osmnx names things.

        Returns
        -------
        Nodes are junctions with `x` and `y` (degrees). Edges have `length` (m), `travel_time`
        (s), `is_ferry`, `toll_m` and `unpaved_m`; their key is twice the number of the edge,
        plus one for the backward direction. Loops and slower parallels are included. It knows
        no turn restrictions and no roads that are open only at the ends of a trip.
        """
        graph: nx.MultiDiGraph[int] = nx.MultiDiGraph(crs="EPSG:4326")
        places = zip(degrees(self.node_lon_e7), degrees(self.node_lat_e7), strict=True)
        graph.add_nodes_from((i, {"x": x, "y": y}) for i, (x, y) in enumerate(places))
        for edge in range(self.edges):
            ends = (int(self.edge_start[edge]), int(self.edge_end[edge]))
            shared = {
                "is_ferry": bool(self.edge_is_ferry[edge]),
                "toll_m": float(self.edge_toll_m[edge]),
                "unpaved_m": float(self.edge_unpaved_m[edge]),
            }
            costs = (self.edge_forward_cost[edge], self.edge_backward_cost[edge])
            for backward, cost in enumerate(map(int, costs)):
                if cost == CLOSED:
                    continue
                tail, head = ends[::-1] if backward else ends
                graph.add_edge(
                    tail,
                    head,
                    key=2 * edge + backward,
                    length=(cost & DISTANCE_MASK) / 1000,
                    travel_time=(cost >> DISTANCE_BITS) / 100,
                    **shared,
                )
        return graph


def _open(path: Path) -> npt.NDArray[Any]:
    try:
        array = np.load(path, mmap_mode="r", allow_pickle=False)
    except ValueError:  # an empty file cannot be mapped
        array = np.load(path, allow_pickle=False)
    return np.asarray(array)


def pack(time_s: Float64, distance_m: Float64) -> Int64:
    """Packed costs of times and distances; closed where the time is NaN."""
    is_open = ~np.isnan(time_s)
    time_cs = np.rint(np.where(is_open, time_s, 0) * 100).astype(np.int64)
    distance_mm = np.rint(distance_m * 1000).astype(np.int64)
    return np.where(is_open, (time_cs << DISTANCE_BITS) + distance_mm, CLOSED)


def unpack_time_min(cost: Int64) -> Float64:
    """Minutes of packed costs."""
    return np.asarray((cost >> DISTANCE_BITS) / 6000, dtype=np.float64)


def unpack_distance_km(cost: Int64) -> Float64:
    """Kilometres of packed costs."""
    return np.asarray((cost & DISTANCE_MASK) / 1e6, dtype=np.float64)


def best_arcs(
    tail: Int32,
    head: Int32,
    cost: Int64,
    edge: Int32,
    nodes: int,
    apart: Bool | None = None,
) -> tuple[Int64, Int32, Int64, Int32]:
    """Arcs by tail: of parallel ones those that no other beats in time and distance; no loops.

    Parameters
    ----------
    tail, head : nodes that each arc leaves and enters.
    cost : packed costs, none of them closed.
    edge : number of the directed edge.
    nodes : how many nodes there are.
    apart : arcs that cost money beside: they are kept, and beat no other.
    """
    first, order = grouped(tail, nodes)
    _sort_groups(first, order, head, cost, edge)
    order = order[tail[order] != head[order]]
    if apart is None:
        apart = np.zeros(len(tail), dtype=np.bool_)
    kept = order[_unbeaten(tail[order], head[order], cost[order], apart[order])]
    counts = np.bincount(tail[kept], minlength=nodes).astype(np.int64)
    first_arc = np.concatenate([[0], np.cumsum(counts)]).astype(np.int64)
    return first_arc, head[kept], cost[kept], edge[kept]


@compiled
def _unbeaten(tail: Int32, head: Int32, cost: Int64, apart: Bool) -> Bool:
    """Of arcs by tail, head and time those that are shorter than every faster parallel one."""
    result = np.ones(len(tail), dtype=np.bool_)
    shortest = np.int64(0)
    for arc in range(len(tail)):
        if arc == 0 or tail[arc] != tail[arc - 1] or head[arc] != head[arc - 1]:
            shortest = np.int64(DISTANCE_MASK) + 1
        distance = cost[arc] & DISTANCE_MASK
        if apart[arc]:
            continue
        result[arc] = distance < shortest
        shortest = min(shortest, distance)
    return result


@compiled
def _sort_groups(first: Int64, order: Int64, head: Int32, cost: Int64, edge: Int32) -> None:
    """Sort the few arcs that leave each node by head, cost and edge (by insertion)."""
    for tail in range(len(first) - 1):
        for row in range(first[tail] + 1, first[tail + 1]):
            arc, place = order[row], row
            while place > first[tail]:
                other = order[place - 1]
                if (head[other], cost[other], edge[other]) <= (head[arc], cost[arc], edge[arc]):
                    break
                order[place] = other
                place -= 1
            order[place] = arc


def flag_bits(is_toll: Bool, is_unpaved: Bool) -> Uint8:
    """Bits of `vertex_flags`."""
    return (is_toll * TOLL + is_unpaved * UNPAVED).astype(np.uint8)
