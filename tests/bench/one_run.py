"""One run of a large job in a process of its own, so that its peak of memory can be told.

    python -m tests.bench.one_run FOLDER ZONES SITES      routes on a written graph
    python -m tests.bench.one_run ARCS ZONES SITES        from arrays of segments to routes

The last line says in JSON the seconds, the arcs, and the peak of resident memory (every page of
the mapped arrays that was touched counts) above that of the process before it began.
"""

from __future__ import annotations

import json
import resource
import sys
import time
from pathlib import Path

import numpy as np
import pandas as pd

from pipeline.roads import RoadGraph, build_roads
from pipeline.routes import route
from tests.bench.networks import chained_extract, planar_graph
from tests.roads.worlds import a_study, sites_at

STUDY = a_study()


def zones_of(graph: RoadGraph, count: int) -> pd.DataFrame:
    """Points near junctions all over the graph."""
    rng = np.random.default_rng(3)
    at = rng.choice(graph.nodes, count)
    lon = graph.node_lon_e7[at] * 1e-7 + rng.uniform(-2e-4, 2e-4, count)
    lat = graph.node_lat_e7[at] * 1e-7 + rng.uniform(-2e-4, 2e-4, count)
    return pd.DataFrame({"zone_id": [f"z{k}" for k in range(count)], "lon": lon, "lat": lat})


def routed(graph: RoadGraph, zones: int, sites: int) -> pd.DataFrame:
    """The routes of so many zones to so many sites."""
    at = np.linspace(0.1, 0.9, sites) * (graph.nodes - 1)
    lon, lat = graph.node_lon_e7[at.astype(int)] * 1e-7, graph.node_lat_e7[at.astype(int)] * 1e-7
    places = dict(zip((f"s{k}" for k in range(sites)), zip(lon, lat, strict=True), strict=True))
    return route(zones_of(graph, zones), sites_at(places), graph, study=STUDY)[0]


def resident_bytes() -> int:
    """Resident memory now."""
    pages = int(Path("/proc/self/statm").read_text().split()[1])
    return pages * resource.getpagesize()


def main() -> None:
    """Run it once small, to have everything compiled and imported, then as asked."""
    what, zones, sites = sys.argv[1], int(sys.argv[2]), int(sys.argv[3])
    if what.isdigit():
        work = chained_extract(int(what))
        small = chained_extract(4000)
        routed(build_roads(small, study=STUDY)[0], 10, 1)
        arcs = 2 * (len(work.way_node) - work.ways)
        started = time.perf_counter()
        graph, _, _ = build_roads(work, study=STUDY)
        built = time.perf_counter() - started
    else:
        routed(planar_graph(20_000), 10, 1)
        before = resident_bytes()
        graph, built, started = RoadGraph.read(Path(what)), 0.0, time.perf_counter()
        arcs = graph.arcs
    routes = routed(graph, zones, sites)
    seconds = time.perf_counter() - started
    assert (routes["route_status"] == "routed").mean() > 0.99
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * 1024
    above = peak - (0 if what.isdigit() else before)
    found = {"seconds": seconds, "built_s": built, "arcs": arcs, "peak_bytes": above}
    print(json.dumps(found))


if __name__ == "__main__":
    main()
