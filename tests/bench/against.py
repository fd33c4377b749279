"""Our side and the other side of each ratio of the bench."""

from __future__ import annotations

import shutil
import subprocess
from collections.abc import Callable
from pathlib import Path
from typing import Any

import networkx as nx
import numpy as np
import osmium
import osmnx
from scipy.sparse import csr_array
from scipy.sparse.csgraph import dijkstra

from pipeline.roads import build, build_roads, read_extract
from pipeline.roads.arrays import Float64, Int64
from pipeline.roads.conditions import calendar_of
from pipeline.roads.contract import Chains, contract
from pipeline.roads.graph import DISTANCE_BITS, DISTANCE_MASK
from pipeline.roads.rulebook import load_rules
from pipeline.roads.rules import way_traits
from pipeline.roads.segments import Segments, segments_of
from pipeline.search import search
from tests.bench.measure import Figures, figure, interleaved, seconds
from tests.bench.networks import Arcs, chained_extract
from tests.roads.worlds import a_study

STEPS = (
    *("way_traits", "segments_of", "contract", "_hilbert_order", "_graph"),
    *("quality", "lines_by_class"),
)


def bare_pass(file: Path) -> tuple[Callable[[], object], str]:
    """A pass that only decodes a file, and what it is."""
    if shutil.which("osmium"):
        command = ["osmium", "fileinfo", "-e", "--no-progress", str(file)]
        return lambda: subprocess.run(command, check=True, stdout=subprocess.DEVNULL), (
            "osmium fileinfo -e"
        )
    return lambda: osmium.apply(osmium.io.Reader(str(file))), "pyosmium, a pass without a handler"


def read_and_build(file: Path, took: dict[str, float]) -> None:
    """PBF to routable arrays; `took` gets the seconds of each step."""

    def timed(name: str, step: Callable[..., Any]) -> Callable[..., Any]:
        def run(*arguments: Any, **keys: Any) -> Any:
            result: list[Any] = []
            took[name.strip("_")] = seconds(lambda: result.append(step(*arguments, **keys)))
            return result[0]

        return run

    plain = {name: getattr(build, name) for name in STEPS}
    extract = timed("read_extract", read_extract)((file,))
    try:
        for name, step in plain.items():
            setattr(build, name, timed(name, step))
        build_roads(extract, study=a_study())
    finally:
        for name, step in plain.items():
            setattr(build, name, step)


# --- contraction -----------------------------------------------------------------------------


def contraction(arcs: int = 200_000) -> Figures:
    """Chains of degree-2 nodes joined, against osmnx on the same network; distances unchanged."""
    extract, settings = chained_extract(arcs, inner=3), a_study().roads
    rules, calendar = load_rules(settings), calendar_of(None, None, southern=False)
    traits = way_traits(extract, rules, settings, calendar)
    segments, _ = segments_of(extract, traits, rules, settings)
    nodes, nothing = len(extract.node_id), np.empty(0, dtype=np.int64)
    group = np.zeros(segments.count, dtype=np.uint8)

    def ours() -> Chains:
        return contract(segments, nodes, group, nothing)

    lon, lat = extract.degrees(np.arange(nodes))
    graph: nx.MultiDiGraph[int] = nx.MultiDiGraph(crs="EPSG:4326")
    places = enumerate(zip(lon.tolist(), lat.tolist(), strict=True))
    graph.add_nodes_from((k, {"x": x, "y": y}) for k, (x, y) in places)
    for a, b, way, metres in zip(
        segments.a.tolist(),
        segments.b.tolist(),
        segments.way.tolist(),
        segments.length_m.tolist(),
        strict=True,
    ):
        graph.add_edge(a, b, osmid=way, length=metres)
        graph.add_edge(b, a, osmid=way, length=metres)
    value = 1 / interleaved(ours, lambda: osmnx.simplify_graph(graph), 3)
    worst = _furthest_apart(segments, ours(), nodes)
    assert worst <= 1e-6, worst
    how = (
        f"{2 * segments.count:,} arcs to {2 * len(ours().start):,}, against osmnx.simplify_graph; "
        f"distances between junctions unchanged to {worst:.0e} of themselves"
    )
    return figure("contraction_vs_osmnx", value, "times faster", 3, how)


def _furthest_apart(segments: Segments, chains: Chains, nodes: int) -> float:
    """Largest relative difference of distances between junctions before and after."""
    length = np.add.reduceat(segments.length_m[chains.segment], chains.first[:-1])
    before = _undirected(segments.a, segments.b, segments.length_m, nodes)
    after = _undirected(chains.start, chains.end, length, nodes)
    junctions = np.unique(np.concatenate([chains.start, chains.end]))
    places = junctions[:: max(1, len(junctions) // 5)]
    one, two = (dijkstra(m, directed=False, indices=places)[:, junctions] for m in (before, after))
    return float((np.abs(two - one) / np.maximum(one, 1)).max())


def _undirected(a: Any, b: Any, length: Float64, nodes: int) -> csr_array:
    return csr_array((length, (a, b)), shape=(nodes, nodes))


# --- search ----------------------------------------------------------------------------------


def searches(arcs: Arcs, sites: int) -> None:
    """One search by time from each of so many sites."""
    first, node, cost, _ = arcs
    for site in range(sites):
        seed = np.array([(len(first) - 2) * (site + 1) // (sites + 1)], dtype=np.int32)
        search(first, node, cost, seed, np.array([0], dtype=np.int64), by_time=True)


def scipy_searches(arcs: Arcs) -> Figures:
    """Both searches of a site against scipy with one weight each."""
    first, node, cost, _ = arcs
    seed = _middle(first)
    weights = [
        csr_array((w.astype(np.float64), node, first.astype(np.int32)))
        for w in (cost >> DISTANCE_BITS, cost & DISTANCE_MASK)
    ]

    def ours() -> None:
        for by_time in (True, False):
            search(first, node, cost, *seed, by_time=by_time)

    def theirs() -> None:
        for matrix in weights:
            dijkstra(matrix, directed=True, indices=[int(seed[0][0])])

    how = f"{len(node):,} arcs, two searches each: time with distance, and distance"
    return figure("search_vs_scipy", interleaved(ours, theirs, 5), "ratio", 5, how)


def script_of_today(arcs: Arcs) -> Figures:
    """All that a site needs against the script that a user would write today.

    The script has the road graph as osmnx gives it, a MultiDiGraph with `length` and
    `travel_time` on its edges, and asks networkx for the least time there, the least distance
    there, and the least time home: three calls, as one call has one weight and one direction. It
    does not even add up the distance along the fastest routes, which ours does.
    """
    first, node, cost, _ = arcs
    seed = _middle(first)
    tail = np.repeat(np.arange(len(first) - 1), np.diff(first)).tolist()
    metres, time_s = (cost & DISTANCE_MASK) / 1000, (cost >> DISTANCE_BITS) / 100
    graph: nx.MultiDiGraph[int] = nx.MultiDiGraph()
    graph.add_edges_from(
        (a, b, {"length": m, "travel_time": s})
        for a, b, m, s in zip(tail, node.tolist(), metres.tolist(), time_s.tolist(), strict=True)
    )
    against_traffic = graph.reverse(copy=False)

    def theirs() -> None:
        site = int(seed[0][0])
        nx.single_source_dijkstra_path_length(against_traffic, site, weight="travel_time")
        nx.single_source_dijkstra_path_length(against_traffic, site, weight="length")
        nx.single_source_dijkstra_path_length(graph, site, weight="travel_time")

    def ours() -> None:
        for by_time in (True, False, True):
            search(first, node, cost, *seed, by_time=by_time)

    how = (
        f"{len(node):,} arcs, one site: least time there, least distance there, least time home; "
        "networkx on osmnx's graph, one call for each"
    )
    return figure("search_vs_networkx", 1 / interleaved(ours, theirs, 3), "times faster", 3, how)


def _middle(first: Int64) -> tuple[Any, Int64]:
    return np.array([len(first) // 2], dtype=np.int32), np.array([0], dtype=np.int64)
