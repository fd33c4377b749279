"""Fastest and shortest routes from one place to every junction, or to it from every junction.

A label-correcting search with a bucket queue (Dial 1969; buckets wider than the smallest arc
as in Meyer and Sanders 2003, one bucket at a time). Costs are the packed integers of
``roads.graph``, so one search carries time and distance, and ties of time are decided by
distance. The result is exact; it does not depend on the width of the buckets.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from pipeline.roads.arrays import Bool, Float32, Float64, Int32, Int64, compiled
from pipeline.roads.graph import DISTANCE_BITS, DISTANCE_MASK

UNREACHED = np.int64(2**62)
BITS = DISTANCE_BITS
MASK = DISTANCE_MASK
MOST_BUCKETS = 1 << 16
OUT = -2  # mark of a node that waits in no bucket


@dataclass(frozen=True)
class Tree:
    """Best routes between one place and all junctions.

    Attributes
    ----------
    cost : (n,) packed cost of the best route; of a shortest-distance search millimetres;
        `UNREACHED` where there is none.
    parent : (n,) next junction towards the place; -1 at the ends of the place's own edge and
        where there is no route.
    via : (n,) arc taken to `parent`, as an index into the arcs that were searched; at the ends
        of the place's own edge -2 minus the number of the seed.
    """

    cost: Int64
    parent: Int32
    via: Int32


def search(
    first: Int64,
    node: Int32,
    cost: Int64,
    seed_node: Int32,
    seed_cost: Int64,
    *,
    by_time: bool,
) -> Tree:
    """Search from the seeds along the given arcs to every node.

    Parameters
    ----------
    first, node, cost : arcs by the node they leave, as in ``RoadGraph.arc_*``; with the arrays
        ``in_*`` the search runs against the traffic, from the place to all that can reach it.
    seed_node, seed_cost : nodes to start from, with the packed cost already spent there;
        -1: not to be started from.
    by_time : least time, then least distance; else least distance alone.
    """
    width = _bucket_bits(cost, by_time=by_time)
    mask = -1 if by_time else MASK
    return Tree(*_search(first, node, cost, seed_node, seed_cost, mask, width))


def _bucket_bits(cost: Int64, *, by_time: bool) -> int:
    """How many bits of a cost one bucket spans: about a mean arc, at most 65,536 buckets."""
    low = BITS if by_time else 0
    sample = cost[:: max(1, len(cost) // 10_000)]
    sizes = (sample >> BITS) if by_time else (sample & MASK)
    mean = float(sizes.mean()) if len(sizes) else 1.0
    return low + max(0, int(np.log2(mean + 1)))


@compiled
def _search(
    first: Int64,
    node: Int32,
    cost: Int64,
    seed_node: Int32,
    seed_cost: Int64,
    mask: int,
    width: int,
) -> tuple[Int64, Int32, Int32]:
    """Empty the buckets from the lowest; a node that gets cheaper moves to a lower bucket."""
    nodes = len(first) - 1
    label = np.full(nodes, UNREACHED)
    parent, via = np.full(nodes, -1, dtype=np.int32), np.full(nodes, -1, dtype=np.int32)
    after, before = np.full(nodes, -1, dtype=np.int32), np.full(nodes, OUT, dtype=np.int32)
    buckets, width = _buckets(cost, seed_cost, mask, width)
    head, last = np.full(buckets, -1, dtype=np.int32), buckets - 1
    current, waiting = UNREACHED, 0
    for seed in range(len(seed_node)):
        start, value = seed_node[seed], seed_cost[seed] & mask
        if seed_cost[seed] >= 0 and value < label[start]:
            waiting += before[start] == OUT
            if before[start] != OUT:
                _take_out(start, (label[start] >> width) & last, head, after, before)
            label[start], via[start] = value, -2 - seed
            _put_in(start, (value >> width) & last, head, after, before)
            current = min(current, value >> width)
    while waiting > 0:
        while head[current & last] < 0:
            current += 1
        here, waiting = head[current & last], waiting - 1
        _take_out(here, current & last, head, after, before)
        for arc in range(first[here], first[here + 1]):
            there, value = node[arc], label[here] + (cost[arc] & mask)
            if value >= label[there]:
                continue
            old, new = (label[there] >> width) & last, (value >> width) & last
            label[there], parent[there], via[there] = value, here, arc
            if before[there] == OUT:
                waiting += 1
            elif old == new:
                continue
            else:
                _take_out(there, old, head, after, before)
            _put_in(there, new, head, after, before)
    return label, parent, via


@compiled
def _buckets(cost: Int64, seed_cost: Int64, mask: int, width: int) -> tuple[int, int]:
    """How many buckets the longest arc can reach over (a power of two), and their width."""
    largest = np.int64(0)
    for arc in range(len(cost)):
        largest = max(largest, cost[arc] & mask)
    for seed in range(len(seed_cost)):
        if seed_cost[seed] >= 0:
            largest = max(largest, seed_cost[seed] & mask)
    while (largest >> width) + 2 > MOST_BUCKETS:
        width += 1
    buckets = 1
    while buckets < (largest >> width) + 2:
        buckets *= 2
    return buckets, width


@compiled
def _put_in(node: int, bucket: np.int64, head: Int32, after: Int32, before: Int32) -> None:
    """Make a node the first of a bucket's list."""
    top = head[bucket]
    if top >= 0:
        before[top] = node
    after[node], before[node], head[bucket] = top, -1, node


@compiled
def _take_out(node: int, bucket: np.int64, head: Int32, after: Int32, before: Int32) -> None:
    """Take a node out of a bucket's list."""
    up, down = before[node], after[node]
    if up >= 0:
        after[up] = down
    else:
        head[bucket] = down
    if down >= 0:
        before[down] = up
    before[node] = OUT


def sums_along(
    tree: Tree,
    nodes: Int64,
    arc_edge: Int32,
    arc_cost: Int64,
    edge_is_ferry: Bool,
    edge_toll_m: Float32,
    edge_unpaved_m: Float32,
    edge_delay_s: Float32,
    seed_m: Float64,
) -> Float64:
    """What the routes between some junctions and the tree's place run on.

    Parameters
    ----------
    tree : a search along the arcs that `arc_edge` and `arc_cost` describe.
    nodes : (k,) junctions that the tree reaches.
    arc_edge, arc_cost : of the arcs that were searched.
    edge_is_ferry, edge_toll_m, edge_unpaved_m : of the edges.
    edge_delay_s : of the directed edges.
    seed_m : (seeds, 3) toll and unpaved metres and seconds of delay between each seed and the
        place.

    Returns
    -------
    (k, 5): ferry km, ferry minutes, toll km, unpaved km, minutes of delay.
    """
    sums = _sums(
        tree.parent,
        tree.via,
        nodes,
        arc_edge,
        arc_cost,
        edge_is_ferry,
        edge_toll_m,
        edge_unpaved_m,
        edge_delay_s,
        seed_m,
    )
    return np.asarray(sums / np.array([1e6, 6000.0, 1000.0, 1000.0, 60.0]))


@compiled
def _sums(
    parent: Int32,
    via: Int32,
    nodes: Int64,
    arc_edge: Int32,
    arc_cost: Int64,
    edge_is_ferry: Bool,
    edge_toll_m: Float32,
    edge_unpaved_m: Float32,
    edge_delay_s: Float32,
    seed_m: Float64,
) -> Float64:
    """Climb from each node until a node with known sums, then hand them down again."""
    known = np.zeros(len(parent), dtype=np.bool_)
    sums = np.empty((len(parent), 5), dtype=np.float64)
    climbed = np.empty(len(parent), dtype=np.int32)
    result = np.empty((len(nodes), 5), dtype=np.float64)
    for k in range(len(nodes)):
        here = np.int64(nodes[k])
        height = 0
        while not known[here] and parent[here] >= 0:
            climbed[height] = here
            height += 1
            here = np.int64(parent[here])
        if not known[here]:
            known[here] = True
            sums[here, :2] = 0.0
            sums[here, 2:] = seed_m[-2 - via[here]]
        while height > 0:
            height -= 1
            below = climbed[height]
            arc = via[below]
            edge = arc_edge[arc] // 2
            sums[below] = sums[here]
            if edge_is_ferry[edge]:
                sums[below, 0] += arc_cost[arc] & MASK
                sums[below, 1] += arc_cost[arc] >> BITS
            sums[below, 2] += edge_toll_m[edge]
            sums[below, 3] += edge_unpaved_m[edge]
            sums[below, 4] += edge_delay_s[arc_edge[arc]]
            known[below] = True
            here = np.int64(below)
        result[k] = sums[nodes[k]]
    return result


def cost_along(tree: Tree, nodes: Int64, arc_cost: Int64, seed_cost: Int64) -> Int64:
    """Packed costs of the routes between some junctions and the tree's place.

    Parameters
    ----------
    tree : a search that made something else least.
    nodes : (k,) junctions; `UNREACHED` where the tree does not reach one.
    arc_cost : of the arcs that were searched.
    seed_cost : between each seed and the place.
    """
    return _cost_along(tree.cost, tree.parent, tree.via, nodes, arc_cost, seed_cost)


@compiled
def _cost_along(
    label: Int64, parent: Int32, via: Int32, nodes: Int64, arc_cost: Int64, seed_cost: Int64
) -> Int64:
    known = np.full(len(parent), np.int64(-1))
    climbed = np.empty(len(parent), dtype=np.int32)
    result = np.full(len(nodes), UNREACHED)
    for k in range(len(nodes)):
        here, height = np.int64(nodes[k]), 0
        if label[here] >= UNREACHED:
            continue
        while known[here] < 0 and parent[here] >= 0:
            climbed[height] = here
            height += 1
            here = np.int64(parent[here])
        if known[here] < 0:
            known[here] = seed_cost[-2 - via[here]]
        total = known[here]
        while height > 0:
            height -= 1
            total += arc_cost[via[climbed[height]]]
            known[climbed[height]] = total
        result[k] = total
    return result


def seeds_of(tree: Tree, nodes: Int64) -> Int64:
    """Number of the seed at the end of the route of each of some junctions."""
    return _seeds_of(tree.parent, tree.via, nodes)


@compiled
def _seeds_of(parent: Int32, via: Int32, nodes: Int64) -> Int64:
    """Climb until a node with a known seed, then hand it down again."""
    seed = np.full(len(parent), -1, dtype=np.int32)
    result = np.empty(len(nodes), dtype=np.int64)
    for k in range(len(nodes)):
        here = np.int64(nodes[k])
        while seed[here] < 0 and parent[here] >= 0:
            here = np.int64(parent[here])
        if seed[here] < 0:
            seed[here] = -2 - via[here]
        found = seed[here]
        here = np.int64(nodes[k])
        while seed[here] < 0:
            seed[here] = found
            here = np.int64(parent[here])
        result[k] = found
    return result


@compiled
def path_edges(parent: Int32, via: Int32, arc_edge: Int32, node: int) -> tuple[Int64, int]:
    """Directed edges from `node` to the tree's place, and the number of the seed at its end."""
    count = 0
    here = node
    while parent[here] >= 0:
        count += 1
        here = parent[here]
    edges = np.empty(count, dtype=np.int64)
    here = node
    for step in range(count):
        edges[step] = arc_edge[via[here]]
        here = parent[here]
    return edges, -2 - via[here]
