"""Trips of all zones to one access point, read off three searches."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from pipeline.roads.arrays import Bool, Float64, Int64
from pipeline.roads.graph import DISTANCE_MASK, RoadGraph
from pipeline.roads.places import Places
from pipeline.search import UNREACHED, Tree, search, sums_along

BY_END, BY_START, DIRECT = 0, 1, 2  # how a route leaves the zone's place


@dataclass(frozen=True)
class Trips:
    """Trips between every zone and one access point; arrays have one value per zone.

    Attributes
    ----------
    there, home : packed costs on the road of the fastest route; `UNREACHED` where there is
        none.
    shortest : the same of the shortest distance there, in millimetres.
    leave : how the route there leaves the zone's place: by the end of its edge (0), by the
        start (1), or along the edge to an access point on the same edge (2).
    along : (z, 4) of the route there: ferry km, ferry minutes, toll km, unpaved km.
    tree : the search behind `there`.
    """

    there: Int64
    home: Int64
    shortest: Int64
    leave: Int64
    along: Float64
    tree: Tree


def trips_to(graph: RoadGraph, homes: Places, doors: Places, door: int) -> Trips:
    """Search to and from one access point.

    Parameters
    ----------
    graph : the road graph.
    homes : places of the zones.
    doors : places of the access points.
    door : which of them.
    """
    edge = int(doors.edge[door])
    ends = np.array([graph.edge_start[edge], graph.edge_end[edge]], dtype=np.int32)
    to_door = np.array([doors.from_start[door], doors.from_end[door]])
    from_door = np.array([doors.to_start[door], doors.to_end[door]])
    into = (graph.in_first, graph.in_node, graph.in_cost)
    out = (graph.arc_first, graph.arc_node, graph.arc_cost)
    leaving = (homes.to_end, homes.to_start)
    direct = _direct(homes, doors, door, homewards=False)
    tree = search(*into, ends, to_door, by_time=True)
    there, leave = _best(graph, homes, tree.cost, (*leaving, direct))
    short = search(*into, ends, to_door, by_time=False)
    lengths = tuple(_length(cost) for cost in (*leaving, direct))
    shortest, _ = _best(graph, homes, short.cost, lengths)
    back = search(*out, ends, from_door, by_time=True)
    arriving = (homes.from_end, homes.from_start, _direct(homes, doors, door, homewards=True))
    home, _ = _best(graph, homes, back.cost, arriving)
    along = _along(graph, homes, doors, door, tree, np.where(there < UNREACHED, leave, -1))
    return Trips(there, home, shortest, leave, along, tree)


def _length(cost: Int64) -> Int64:
    return np.where(cost < 0, cost, cost & DISTANCE_MASK)


def _best(
    graph: RoadGraph, homes: Places, label: Int64, ways: tuple[Int64, ...]
) -> tuple[Int64, Int64]:
    """Least cost by the end of the zone's edge, by its start, or direct; and which it was."""
    by_end, by_start, direct = ways
    options = np.full((3, len(homes.edge)), UNREACHED)
    for option, cost, node in (
        (BY_END, by_end, graph.edge_end[homes.edge]),
        (BY_START, by_start, graph.edge_start[homes.edge]),
    ):
        is_open = (cost >= 0) & (label[node] < UNREACHED)
        options[option, is_open] = cost[is_open] + label[node[is_open]]
    options[DIRECT, direct >= 0] = direct[direct >= 0]
    options[:, homes.edge < 0] = UNREACHED
    return options.min(axis=0), options.argmin(axis=0)


def _direct(homes: Places, doors: Places, door: int, *, homewards: bool) -> Int64:
    """Packed cost along the edge that a zone shares with the access point; -1: not possible.

    Parameters
    ----------
    homes, doors : places of the zones and of the access points.
    door : which access point.
    homewards : whether the trip starts at the access point.
    """
    same = (homes.edge == doors.edge[door]) & (homes.edge >= 0)
    door_at, home_at = _position(doors)[door], _position(homes)
    along = doors.from_start[door] - homes.from_start
    back = homes.to_start - doors.to_start[door]
    ahead, behind = door_at >= home_at, door_at <= home_at
    if homewards:
        along, back, ahead, behind = -along, -back, behind, ahead
    forward_open: Bool = same & ahead & (homes.from_start >= 0) & (doors.from_start[door] >= 0)
    backward_open: Bool = same & behind & (homes.to_start >= 0) & (doors.to_start[door] >= 0)
    result = np.full(len(homes.edge), -1, dtype=np.int64)
    result[backward_open] = back[backward_open]
    better = forward_open & ((result < 0) | (along < result))
    result[better] = along[better]
    return result


def _position(places: Places) -> Float64:
    """Position on the edge: grows from its start to its end."""
    return np.asarray(places.nearest.vertex + places.nearest.share)


def _along(
    graph: RoadGraph, homes: Places, doors: Places, door: int, tree: Tree, leave: Int64
) -> Float64:
    """Ferry km, ferry minutes, toll km and unpaved km of each route there."""
    along = np.full((len(leave), 4), np.nan)
    seed_m = np.array(
        [
            [doors.start_toll_m[door], doors.start_unpaved_m[door]],
            [doors.end_toll_m[door], doors.end_unpaved_m[door]],
        ]
    )
    for option, node, toll_m, unpaved_m in (
        (BY_END, graph.edge_end, homes.end_toll_m, homes.end_unpaved_m),
        (BY_START, graph.edge_start, homes.start_toll_m, homes.start_unpaved_m),
    ):
        at = np.flatnonzero(leave == option)
        along[at] = sums_along(
            tree,
            node[homes.edge[at]].astype(np.int64),
            graph.in_edge,
            graph.in_cost,
            graph.edge_is_ferry,
            graph.edge_toll_m,
            graph.edge_unpaved_m,
            seed_m,
        )
        along[at, 2] += toll_m[at] / 1000
        along[at, 3] += unpaved_m[at] / 1000
    at = np.flatnonzero(leave == DIRECT)
    along[at, :2] = 0
    along[at, 2] = np.abs(doors.start_toll_m[door] - homes.start_toll_m[at]) / 1000
    along[at, 3] = np.abs(doors.start_unpaved_m[door] - homes.start_unpaved_m[at]) / 1000
    return along
