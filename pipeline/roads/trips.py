"""Trips of all zones to one access point, read off three searches."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from pipeline.roads.arrays import Bool, Float64, Int32, Int64
from pipeline.roads.graph import DISTANCE_MASK, RoadGraph
from pipeline.roads.passages import entered_from, entry_node, left_to
from pipeline.roads.places import Places
from pipeline.roads.tariffs import WIDTH, PartDues, Tariffs
from pipeline.roads.weights import Weights
from pipeline.search import UNREACHED, Tree, cost_along, search, seeds_of, sums_along

BY_END, BY_START, DIRECT = 0, 1, 2  # how a route leaves the zone's place


@dataclass(frozen=True)
class Ends:
    """Places at the two ends of all trips, and all that is worked out once for them.

    Attributes
    ----------
    homes, doors : places of the zones' points, and of the access points.
    weights : what the search makes least.
    tariffs : what is due along the roads.
    home_dues, door_dues : what is due between the places and the ends of their edges.
    """

    homes: Places
    doors: Places
    weights: Weights
    tariffs: Tariffs
    home_dues: PartDues
    door_dues: PartDues


@dataclass(frozen=True)
class Trips:
    """Trips between every zone's points and one access point; one value per point.

    Attributes
    ----------
    weight : what was made least, of the route there; `UNREACHED` where there is none.
    there, home : packed costs on the road of the best route there, and back.
    shortest : the same of the shortest distance there, in millimetres.
    leave : how the route there leaves the zone's place: by the end of its edge (0), by the
        start (1), or along the edge to an access point on the same edge (2).
    along : (z, 5) of the route there: ferry km, ferry minutes, toll km, unpaved km, minutes of
        delay.
    dues : (z, 8) of the route there: see ``tariffs.CHARGES``.
    tree : the search behind `there`.
    seed_end : of each seed of the tree the end of the access point's edge: 0 start, 1 end.
    """

    weight: Int64
    there: Int64
    home: Int64
    shortest: Int64
    leave: Int64
    along: Float64
    dues: Float64
    tree: Tree
    seed_end: Int64


@dataclass(frozen=True)
class _Seeds:
    """Junctions and copies next to an access point, with what it costs between them.

    `cost` is what the search counts, `packed` time and distance.
    """

    node: Int32
    cost: Int64
    packed: Int64
    end: Int64


def trips_to(graph: RoadGraph, ends: Ends, door: int) -> Trips:
    """Search to and from one access point.

    Parameters
    ----------
    graph : the road graph.
    ends : places of the zones' points and of the access points.
    door : which access point.
    """
    homes, doors, weights = ends.homes, ends.doors, ends.weights
    to_door = _seeds_to(graph, doors, weights.doors, door)
    into = (graph.in_first, graph.in_node)
    into_weight = weights.of_arcs(graph, ends.tariffs, "in_cost")
    tree = search(*into, into_weight, to_door.node, to_door.cost, by_time=weights.by_time)
    nodes = _leaving_nodes(graph, homes)
    options = (
        weights.homes.to_end,
        weights.homes.to_start,
        _direct(weights.homes, weights.doors, door, homewards=False),
    )
    weight, leave = _best(homes, (tree.cost[nodes[0]], tree.cost[nodes[1]]), options)
    real = (homes.to_end, homes.to_start, _direct(homes, doors, door, homewards=False))
    there = weight
    if not weights.is_plain:
        sums = [cost_along(tree, node, graph.in_cost, to_door.packed) for node in nodes]
        there = _taken(weight, leave, (sums[0], sums[1]), real)
    packed = _seeds_to(graph, doors, doors, door)
    label = search(*into, graph.in_cost, packed.node, packed.packed, by_time=False).cost
    lengths = tuple(_length(cost) for cost in real)
    shortest, _ = _best(homes, (label[nodes[0]], label[nodes[1]]), lengths)
    del label
    leave = np.where(weight < UNREACHED, leave, -1)
    return Trips(
        weight=weight,
        there=there,
        home=_homewards(graph, ends, door),
        shortest=shortest,
        leave=leave,
        along=_along(graph, homes, doors, door, tree, to_door.end, leave),
        dues=_dues(graph, ends, door, tree, to_door.end, leave),
        tree=tree,
        seed_end=to_door.end,
    )


def _homewards(graph: RoadGraph, ends: Ends, door: int) -> Int64:
    """Packed costs of the best routes from an access point to the zones' places."""
    homes, doors, weights = ends.homes, ends.doors, ends.weights
    seeds = _seeds_from(graph, doors, weights.doors, door)
    out = (graph.arc_first, graph.arc_node)
    weight_out = weights.of_arcs(graph, ends.tariffs, "arc_cost")
    back = search(*out, weight_out, seeds.node, seeds.cost, by_time=weights.by_time)
    by_end = entry_node(graph, back.cost, homes.edge, homes.from_end == 0, by_start=False)
    by_start = entry_node(graph, back.cost, homes.edge, homes.from_start == 0, by_start=True)
    direct = _direct(weights.homes, weights.doors, door, homewards=True)
    options = (weights.homes.from_end, weights.homes.from_start, direct)
    weight, arrive = _best(homes, (back.cost[by_end], back.cost[by_start]), options)
    if weights.is_plain:
        return weight
    sums = [cost_along(back, node, graph.arc_cost, seeds.packed) for node in (by_end, by_start)]
    real = (homes.from_end, homes.from_start, _direct(homes, doors, door, homewards=True))
    return _taken(weight, arrive, (sums[0], sums[1]), real)


def _taken(
    weight: Int64, option: Int64, sums: tuple[Int64, Int64], ways: tuple[Int64, ...]
) -> Int64:
    """Packed costs of the options that were the best by weight."""
    totals = np.stack([ways[BY_END] + sums[0], ways[BY_START] + sums[1], ways[DIRECT]])
    chosen = totals[option, np.arange(len(option))]
    return np.where(weight < UNREACHED, chosen, UNREACHED)


def _seeds_to(graph: RoadGraph, doors: Places, weighed: Places, door: int) -> _Seeds:
    """From where an access point can be reached, by either end of its edge."""
    edge = doors.edge[door : door + 1].astype(np.int64)
    node, cost, packed, end = [], [], [], []
    sides = ((doors.from_start, weighed.from_start), (doors.from_end, weighed.from_end))
    for number, (spent, weight) in enumerate(sides):
        at = np.array([spent[door] == 0])
        _, found = entered_from(graph, edge, at, by_start=number == 0)
        node.append(found)
        cost.append(np.full(len(found), weight[door]))
        packed.append(np.full(len(found), spent[door]))
        end.append(np.full(len(found), number))
    return _Seeds(
        np.concatenate(node).astype(np.int32),
        np.concatenate(cost),
        np.concatenate(packed),
        np.concatenate(end),
    )


def _seeds_from(graph: RoadGraph, doors: Places, weighed: Places, door: int) -> _Seeds:
    """Where a trip that starts at an access point comes to first."""
    edge = doors.edge[door : door + 1].astype(np.int64)
    packed = np.array([doors.to_start[door], doors.to_end[door]])
    cost = np.array([weighed.to_start[door], weighed.to_end[door]])
    node = [left_to(graph, edge, packed[end : end + 1] == 0, by_end=end == 1)[0] for end in (0, 1)]
    return _Seeds(np.array(node, dtype=np.int32), cost, packed, np.arange(2))


def _leaving_nodes(graph: RoadGraph, homes: Places) -> tuple[Int64, Int64]:
    """Where trips come to that leave the zones' places by the end, and by the start."""
    return (
        left_to(graph, homes.edge, homes.to_end == 0, by_end=True),
        left_to(graph, homes.edge, homes.to_start == 0, by_end=False),
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


def _dues(
    graph: RoadGraph, ends: Ends, door: int, tree: Tree, seed_end: Int64, leave: Int64
) -> Float64:
    """What is due on each route there: at home's edge, along the roads, at the site's edge."""
    dues = np.full((len(leave), WIDTH), np.nan)
    dues[leave >= 0] = 0.0
    tariffs, homes = ends.tariffs, ends.homes
    if not tariffs.any:
        return dues
    at_door = np.stack([ends.door_dues["from_start"][door], ends.door_dues["from_end"][door]])
    for option, part, by_end in ((BY_END, "to_end", True), (BY_START, "to_start", False)):
        at = np.flatnonzero(leave == option)
        spent = getattr(homes, part)[at]
        node = left_to(graph, homes.edge[at], spent == 0, by_end=by_end)
        dues[at] = ends.home_dues[part][at] + tariffs.along(tree, node, graph.in_edge)
        dues[at] += at_door[seed_end[seeds_of(tree, node)]]
    at = np.flatnonzero(leave == DIRECT)
    edge = homes.edge[at]
    toll_m = np.abs(ends.doors.start_toll_m[door] - homes.start_toll_m[at])
    share = toll_m / np.maximum(graph.edge_toll_m[edge].astype(np.float64), 1e-9)
    backward = _position(ends.doors)[door] < _position(homes)[at]
    dues[at] = tariffs.of_edges(2 * edge + backward, np.zeros(len(at), dtype=np.bool_), share)
    return dues
