"""`make bench`: how fast roads are read and searched, as ratios in one run, into docs/.

    python -m tests.bench.run [--arcs 1,5,20] [--pbf FILE]

Ratios are medians of runs that take turns, so that a busy machine slows both sides alike.
"""

from __future__ import annotations

import argparse
import json
import platform
import shutil
import statistics
import subprocess
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import networkx as nx
import numpy as np
from scipy.sparse import csr_array
from scipy.sparse.csgraph import dijkstra

from pipeline.roads import read_extract
from pipeline.roads.graph import DISTANCE_BITS, DISTANCE_MASK
from pipeline.search import search
from tests.bench.networks import Arcs, planar_arcs, write_pbf

DOCS = Path(__file__).parents[2] / "docs"
CACHE = Path(__file__).parents[2] / "data" / "bench" / "work"
TURNS = 5
Figures = dict[str, dict[str, Any]]


def seconds(work: Callable[[], object]) -> float:
    """Wall time of one run."""
    start = time.perf_counter()
    work()
    return time.perf_counter() - start


def ratio(ours: Callable[[], object], other: Callable[[], object], turns: int = TURNS) -> float:
    """Median of ours / other over runs that take turns, after one of each to warm up."""
    ours()
    return statistics.median(seconds(ours) / seconds(other) for _ in range(turns))


def reading(file: Path) -> Figures:
    """PBF → merged extract against a pass that only decodes the same file."""
    if shutil.which("osmium"):
        command = ["osmium", "fileinfo", "-e", "--no-progress", str(file)]
        how = "osmium fileinfo -e"

        def bare() -> None:
            subprocess.run(command, check=True, stdout=subprocess.DEVNULL)
    else:
        import osmium

        how = "pyosmium, a pass without a handler"

        def bare() -> None:
            osmium.apply(osmium.io.Reader(str(file)))

    value = ratio(lambda: read_extract((file,)), bare)
    size = file.stat().st_size / 1e6
    return figure("read_vs_bare_pass", value, "ratio", TURNS, f"{size:.0f} MB PBF against {how}")


def searching(arcs: Arcs) -> Figures:
    """Both searches of a site against scipy with one weight each, and against networkx."""
    first, node, cost, _ = arcs
    seed = np.array([len(first) // 2], dtype=np.int32), np.array([0], dtype=np.int64)
    weights = [
        csr_array((w.astype(np.float64), node, first.astype(np.int32)))
        for w in (cost >> DISTANCE_BITS, cost & DISTANCE_MASK)
    ]

    def ours() -> None:
        for by_time in (True, False):
            search(first, node, cost, *seed, by_time=by_time)

    def scipy_searches() -> None:
        for matrix in weights:
            dijkstra(matrix, directed=True, indices=[int(seed[0][0])])

    value = ratio(ours, scipy_searches)
    how = f"{len(node):,} arcs, two searches each: time with distance, and distance"
    return figure("search_vs_scipy", value, "ratio", TURNS, how)


def against_networkx(arcs: Arcs) -> Figures:
    """How many times faster than networkx, one search by one weight."""
    first, node, cost, _ = arcs
    tail = np.repeat(np.arange(len(first) - 1), np.diff(first))
    time_cs = (cost >> DISTANCE_BITS).tolist()
    graph: nx.DiGraph[int] = nx.DiGraph()
    graph.add_weighted_edges_from(zip(tail.tolist(), node.tolist(), time_cs, strict=True))
    seed = np.array([len(first) // 2], dtype=np.int32), np.array([0], dtype=np.int64)
    value = 1 / ratio(
        lambda: search(first, node, cost, *seed, by_time=True),
        lambda: nx.single_source_dijkstra_path_length(graph, int(seed[0][0])),
        turns=1,
    )
    return figure("search_vs_networkx", value, "times faster", 1, f"{len(node):,} arcs, one search")


def growth(sizes: list[int]) -> Figures:
    """Exponent of time over arcs, and of time over sites."""
    networks = [planar_arcs(size) for size in sizes]
    took = [_median_s(arcs, 1) for arcs in networks]
    arcs_fit = np.polyfit(np.log([len(a[1]) for a in networks]), np.log(took), 1)[0]
    sites = [1, 2, 4, 8]
    smallest = networks[0]
    by_sites = [_median_s(smallest, count) for count in sites]
    sites_fit = np.polyfit(np.log(sites), np.log(by_sites), 1)[0]
    by_arcs = f"one search; arcs {', '.join(f'{len(a[1]):,}' for a in networks)}"
    how = f"1 to 8 sites, {len(smallest[1]):,} arcs"
    return figure("growth_arcs", float(arcs_fit), "exponent", 3, by_arcs) | figure(
        "growth_sites", float(sites_fit), "exponent", 3, how
    )


def _median_s(arcs: Arcs, sites: int) -> float:
    return statistics.median(seconds(lambda: _one(arcs, sites)) for _ in range(3))


def _one(arcs: Arcs, sites: int) -> None:
    first, node, cost, _ = arcs
    for site in range(sites):
        seed = np.array([(len(first) - 2) * (site + 1) // (sites + 1)], dtype=np.int32)
        search(first, node, cost, seed, np.array([0], dtype=np.int64), by_time=True)


def figure(name: str, value: float, unit: str, n: int, how: str) -> Figures:
    """One entry of docs/bench.json."""
    entry = {"value": round(value, 3), "unit": unit, "n": n, "how": how}
    print(f"{name}: {entry['value']} {unit} ({how})", flush=True)
    return {name: entry}


def main() -> None:
    """Run what is asked for and write docs/bench.json and docs/bench.md."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--arcs", default="1,5", help="millions of arcs, separated by commas")
    parser.add_argument("--pbf", type=Path, help="a PBF of your own instead of the made one")
    options = parser.parse_args()
    sizes = [int(float(size) * 1e6) for size in options.arcs.split(",")]
    file = options.pbf
    if file is None:
        CACHE.mkdir(parents=True, exist_ok=True)
        file = CACHE / "made.osm.pbf"
        if not file.exists():
            write_pbf(file, side=1290, inner=1)
    path = DOCS / "bench.json"
    figures: Figures = json.loads(path.read_text(encoding="utf-8")) if path.exists() else {}
    figures |= reading(file)
    network = planar_arcs(sizes[0])
    figures |= searching(network) | against_networkx(network) | growth(sizes)
    path.write_text(json.dumps(figures, indent=1) + "\n", encoding="utf-8")
    (DOCS / "bench.md").write_text(_page(figures), encoding="utf-8")


def _page(figures: Figures) -> str:
    rows = "".join(
        f"| {name} | {f['value']} | {f['unit']} | {f['n']} | {f['how']} |\n"
        for name, f in figures.items()
    )
    return (
        "# Measured by `make bench`\n\nMedians of runs that take turns; "
        f"Python {platform.python_version()}.\n\n"
        "| figure | value | unit | runs | how |\n|---|---|---|---|---|\n" + rows
    )


if __name__ == "__main__":
    main()
