"""The search against networkx's Dijkstra, at every node, on both weights."""

from __future__ import annotations

import networkx as nx
import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.roads.arrays import Int32, Int64
from pipeline.roads.graph import DISTANCE_BITS, DISTANCE_MASK, best_arcs
from pipeline.search import UNREACHED, Tree, path_edges, search, sums_along

Arc = tuple[int, int, int, int]  # tail, head, hundredths of a second, millimetres

NODES = 8
ARCS = st.lists(
    st.tuples(
        st.integers(0, NODES - 1),
        st.integers(0, NODES - 1),
        st.sampled_from([0, 1, 2, 3, 50, 10_000, 5_000_000]),
        st.sampled_from([0, 1, 2, 3, 70, 20_000, 900_000_000]),
    ),
    max_size=40,
)


def packed(arcs: list[Arc], nodes: int = NODES) -> tuple[Int64, Int32, Int64, Int32]:
    """Arrays to search on, as the graph holds them."""
    table = np.array(arcs, dtype=np.int64).reshape(-1, 4)
    cost = (table[:, 2] << DISTANCE_BITS) + table[:, 3]
    number = np.arange(len(table), dtype=np.int32)
    tail, head = table[:, 0].astype(np.int32), table[:, 1].astype(np.int32)
    return best_arcs(tail, head, cost, number, nodes)


def from_node(arcs: list[Arc], start: int, *, by_time: bool, nodes: int = NODES) -> Tree:
    first, node, cost, _ = packed(arcs, nodes)
    seed = np.array([start], dtype=np.int32), np.array([0], dtype=np.int64)
    return search(first, node, cost, *seed, by_time=by_time)


def networkx_costs(arcs: list[Arc], start: int, *, by_time: bool) -> dict[int, int]:
    """Least cost of every reached node; tuples of (time, distance) as one big integer."""
    graph: nx.MultiDiGraph[int] = nx.MultiDiGraph()
    graph.add_nodes_from(range(NODES))
    for tail, head, time, distance in arcs:
        graph.add_edge(
            tail, head, weight=(time << DISTANCE_BITS) + distance if by_time else distance
        )
    found = nx.single_source_dijkstra_path_length(graph, start)
    return {node: int(cost) for node, cost in found.items()}


@settings(max_examples=150, derandomize=True, deadline=None)
@given(arcs=ARCS, start=st.integers(0, NODES - 1))
def test_equals_networkx_on_both_weights(arcs: list[Arc], start: int) -> None:
    """Parallel arcs, loops, arcs of no length and parts out of reach included."""
    for by_time in (True, False):
        tree = from_node(arcs, start, by_time=by_time)
        expected = np.full(NODES, UNREACHED)
        for node, cost in networkx_costs(arcs, start, by_time=by_time).items():
            expected[node] = cost
        assert tree.cost.tolist() == expected.tolist()


@settings(max_examples=100, derandomize=True, deadline=None)
@given(arcs=ARCS, start=st.integers(0, NODES - 1))
def test_the_tree_adds_up_to_its_costs(arcs: list[Arc], start: int) -> None:
    """Walking down the tree from any node ends at the start and costs what the label says."""
    first, _, cost, edge = packed(arcs)
    tree = from_node(arcs, start, by_time=True)
    for node in np.flatnonzero(tree.cost < UNREACHED):
        edges, seed = path_edges(tree.parent, tree.via, edge, int(node))
        assert seed == 0
        spent = sum((arcs[e][2] << DISTANCE_BITS) + arcs[e][3] for e in edges)
        assert spent == tree.cost[node]
    assert len(first) == NODES + 1
    assert len(cost) == len(edge)


@settings(max_examples=60, derandomize=True, deadline=None)
@given(arcs=ARCS, start=st.integers(0, NODES - 1))
def test_fastest_is_never_shorter_than_shortest(arcs: list[Arc], start: int) -> None:
    fastest = from_node(arcs, start, by_time=True).cost
    shortest = from_node(arcs, start, by_time=False).cost
    reached = fastest < UNREACHED
    assert (reached == (shortest < UNREACHED)).all()
    assert (shortest[reached] <= fastest[reached] & DISTANCE_MASK).all()


def test_ties_of_time_go_to_the_shorter_road() -> None:
    """0 → 1 → 3 and 0 → 2 → 3 take 20 each; by 2 it is 7 mm, by 1 it is 9."""
    arcs = [(0, 1, 10, 4), (1, 3, 10, 5), (0, 2, 10, 3), (2, 3, 10, 4)]
    tree = from_node(arcs, 0, by_time=True)
    assert divmod(int(tree.cost[3]), 1 << DISTANCE_BITS) == (20, 7)
    assert tree.parent[3] == 2


def test_parallel_arcs_keep_the_fastest_and_the_shortest_and_are_never_summed() -> None:
    """0 ⇉ 1 by a fast long road, a slow short one, and one that is neither."""
    arcs = [(0, 1, 10, 900), (0, 1, 90, 100), (0, 1, 95, 950), (0, 0, 1, 1)]
    _, node, cost, edge = packed(arcs)
    assert node.tolist() == [1, 1]
    assert edge.tolist() == [0, 1]
    assert (cost >> DISTANCE_BITS).tolist() == [10, 90]
    assert from_node(arcs, 0, by_time=True).cost[1] == (10 << DISTANCE_BITS) + 900
    assert from_node(arcs, 0, by_time=False).cost[1] == 100


def test_seeds_carry_what_was_spent_and_closed_ones_are_left_out() -> None:
    """From a place on 0 ── 1: 7 to node 0, node 1 closed; then 0 → 2 by 5."""
    first, node, cost, _ = packed([(0, 2, 5, 1), (1, 2, 1, 1)])
    seed_cost = np.array([7 << DISTANCE_BITS, -1])
    tree = search(first, node, cost, np.array([0, 1], dtype=np.int32), seed_cost, by_time=True)
    assert int(tree.cost[2]) >> DISTANCE_BITS == 12
    assert tree.cost[1] == UNREACHED


def test_sums_along_a_route() -> None:
    """0 ─toll─ 1 ~ferry~ 2 ─unpaved─ 3, read off at 3; 40 m of toll before node 0."""
    arcs = [(0, 1, 100, 1000), (1, 2, 6000, 2_000_000), (2, 3, 100, 3000)]
    _, _, cost, edge = packed(arcs)
    tree = from_node(arcs, 0, by_time=True)
    sums = sums_along(
        tree,
        np.array([3, 0]),
        (edge * 2).astype(np.int32),
        cost,
        np.array([False, True, False]),
        np.array([1000, 0, 0], dtype=np.float32),
        np.array([0, 0, 3000], dtype=np.float32),
        np.array([60, 0, 0, 0, 120, 0], dtype=np.float32),
        np.array([[40.0, 0.0, 30.0]]),
    )
    assert sums[0].tolist() == [2.0, 1.0, 1.04, 3.0, 3.5]
    assert sums[1].tolist() == [0.0, 0.0, 0.04, 0.0, 0.5]


def test_graph_without_arcs() -> None:
    tree = from_node([], 0, by_time=True)
    assert tree.cost.tolist() == [0] + [UNREACHED] * (NODES - 1)
