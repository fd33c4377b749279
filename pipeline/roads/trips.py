"""Trips of all zones to one access point, read off three searches."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from pipeline.roads.arrays import Bool, Float64, Int32, Int64
from pipeline.roads.graph import DISTANCE_MASK, RoadGraph
from pipeline.roads.passages import entered_from, entry_label, left_to
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
    along : (z, 5) of the route there: ferry km, ferry minutes, toll km, unpaved km, minutes of
        delay.
    tree : the search behind `there`.
    seed_end : of each seed of the tree the end of the access point's edge: 0 start, 1 end.
    """

    there: Int64
    home: Int64
    shortest: Int64
    leave: Int64
    along: Float64
    tree: Tree
    seed_end: Int64


@dataclass(frozen=True)
class _Seeds:
    """Junctions and copies next to an access point, with what it costs between them."""

    node: Int32
    cost: Int64
    end: Int64


def trips_to(graph: RoadGraph, homes: Places, doors: Places, door: int) -> Trips:
    """Search to and from one access point.

    Parameters
    ----------
    graph : the road graph.
    homes : places of the zones.
    doors : places of the access points.
    door : which of them.
    """
    to_door, from_door = _seeds_to(graph, doors, door), _seeds_from(graph, doors, door)
    into = (graph.in_first, graph.in_node, graph.in_cost)
    out = (graph.arc_first, graph.arc_node, graph.arc_cost)
    leaving = (homes.to_end, homes.to_start)
    direct = _direct(homes, doors, door, homewards=False)
    tree = search(*into, to_door.node, to_door.cost, by_time=True)
    there, leave = _best(homes, _leaving_labels(graph, homes, tree.cost), (*leaving, direct))
    short = search(*into, to_door.node, to_door.cost, by_time=False)
    lengths = tuple(_length(cost) for cost in (*leaving, direct))
    shortest, _ = _best(homes, _leaving_labels(graph, homes, short.cost), lengths)
    back = search(*out, from_door.node, from_door.cost, by_time=True)
    arriving = (homes.from_end, homes.from_start, _direct(homes, doors, door, homewards=True))
    home, _ = _best(homes, _arriving_labels(graph, homes, back.cost), arriving)
    leave = np.where(there < UNREACHED, leave, -1)
    along = _along(graph, homes, doors, door, tree, to_door.end, leave)
    return Trips(there, home, shortest, leave, along, tree, to_door.end)


def _seeds_to(graph: RoadGraph, doors: Places, door: int) -> _Seeds:
    """From where an access point can be reached, by either end of its edge."""
    edge = doors.edge[door : door + 1].astype(np.int64)
    node, cost, end = [], [], []
    for number, spent in enumerate((doors.from_start[door], doors.from_end[door])):
        _, found = entered_from(graph, edge, np.array([spent == 0]), by_start=number == 0)
        node.append(found)
        cost.append(np.full(len(found), spent))
        end.append(np.full(len(found), number))
    return _Seeds(np.concatenate(node).astype(np.int32), np.concatenate(cost), np.concatenate(end))


def _seeds_from(graph: RoadGraph, doors: Places, door: int) -> _Seeds:
    """Where a trip that starts at an access point comes to first."""
    edge = doors.edge[door : door + 1].astype(np.int64)
    cost = np.array([doors.to_start[door], doors.to_end[door]])
    node = [left_to(graph, edge, cost[end : end + 1] == 0, by_end=end == 1)[0] for end in (0, 1)]
    return _Seeds(np.array(node, dtype=np.int32), cost, np.arange(2))


def _leaving_labels(graph: RoadGraph, homes: Places, label: Int64) -> tuple[Int64, Int64]:
    """Labels where trips come to that leave the zones' places by the end, by the start."""
    by_end = left_to(graph, homes.edge, homes.to_end == 0, by_end=True)
    by_start = left_to(graph, homes.edge, homes.to_start == 0, by_end=False)
    return label[by_end], label[by_start]


def _arriving_labels(graph: RoadGraph, homes: Places, label: Int64) -> tuple[Int64, Int64]:
    """Least labels of where trips can come from that reach the zones' places by either end."""
    return (
        entry_label(graph, label, homes.edge, homes.from_end == 0, by_start=False),
        entry_label(graph, label, homes.edge, homes.from_start == 0, by_start=True),
    )


def _length(cost: Int64) -> Int64:
    return np.where(cost < 0, cost, cost & DISTANCE_MASK)


def _best(
    homes: Places, labels: tuple[Int64, Int64], ways: tuple[Int64, ...]
) -> tuple[Int64, Int64]:
    """Least cost by the end of the zone's edge, by its start, or direct; and which it was."""
    by_end, by_start, direct = ways
    options = np.full((3, len(homes.edge)), UNREACHED)
    for option, cost, label in ((BY_END, by_end, labels[0]), (BY_START, by_start, labels[1])):
        is_open = (cost >= 0) & (label < UNREACHED)
        options[option, is_open] = cost[is_open] + label[is_open]
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
    graph: RoadGraph,
    homes: Places,
    doors: Places,
    door: int,
    tree: Tree,
    seed_end: Int64,
    leave: Int64,
) -> Float64:
    """Ferry km, ferry minutes, toll km, unpaved km and delay of each route there."""
    along = np.full((len(leave), 5), np.nan)
    seed_m = np.array(
        [
            [doors.start_toll_m[door], doors.start_unpaved_m[door], doors.from_start_delay_s[door]],
            [doors.end_toll_m[door], doors.end_unpaved_m[door], doors.from_end_delay_s[door]],
        ]
    )[seed_end]
    for option, spent, toll_m, unpaved_m, delay_s in (
        (BY_END, homes.to_end, homes.end_toll_m, homes.end_unpaved_m, homes.to_end_delay_s),
        (
            BY_START,
            homes.to_start,
            homes.start_toll_m,
            homes.start_unpaved_m,
            homes.to_start_delay_s,
        ),
    ):
        at = np.flatnonzero(leave == option)
        node = left_to(graph, homes.edge[at], spent[at] == 0, by_end=option == BY_END)
        along[at] = sums_along(
            tree,
            node,
            graph.in_edge,
            graph.in_cost,
            graph.edge_is_ferry,
            graph.edge_toll_m,
            graph.edge_unpaved_m,
            graph.edge_delay_s,
            seed_m,
        )
        along[at, 2] += toll_m[at] / 1000
        along[at, 3] += unpaved_m[at] / 1000
        along[at, 4] += delay_s[at] / 60
    at = np.flatnonzero(leave == DIRECT)
    along[at, :2] = 0
    along[at, 2] = np.abs(doors.start_toll_m[door] - homes.start_toll_m[at]) / 1000
    along[at, 3] = np.abs(doors.start_unpaved_m[door] - homes.start_unpaved_m[at]) / 1000
    ahead = _position(doors)[door] >= _position(homes)[at]
    forward = doors.from_start_delay_s[door] - homes.from_start_delay_s[at]
    backward = homes.to_start_delay_s[at] - doors.to_start_delay_s[door]
    along[at, 4] = np.maximum(np.where(ahead, forward, backward), 0) / 60
    return along
