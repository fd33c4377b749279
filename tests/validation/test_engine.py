"""Routes against an independent general-purpose engine (OSRM, Luxen and Vetter 2011).

On a strict cut of an extract both see the same roads: every shortest distance has to agree. On
the whole of it each has rules of its own: what differs is put down to its cause.
"""

from __future__ import annotations

import os
from collections.abc import Callable
from dataclasses import dataclass, replace
from itertools import pairwise
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from pipeline.roads import RoadExtract, RoadGraph, build_roads, read_extract
from pipeline.roads.arrays import Bool, Float64, Int64
from pipeline.roads.graph import DISTANCE_BITS, DISTANCE_MASK
from pipeline.roads.signs import TaggedNodes, TurnRelations
from pipeline.routes import route
from pipeline.search import UNREACHED, Tree, search
from pipeline.study import Study
from tests.conftest import RecordCheck, RecordNote
from tests.roads.worlds import a_study, sites_at, zones_at
from tests.validation.engine import ACCESS, ENGINE_PYTHON, ROOT, Engine, Matrix, strict_cut

SOURCE = "OSRM (osrm-bindings 26.10), car profile, least distance or least duration"
FOLDERS = (
    Path(os.environ.get("ROADWORTH_EXTRACTS", ROOT.parent / "shared" / "data" / "osm")),
    ROOT / "data" / "iceland" / "input",
)
FILES = sorted(file for folder in FOLDERS for file in folder.glob("*.osm.pbf"))
ZONES, SITES = 250, 40
LEAST_KM = 1.0  # below it a metre of rounding is more than the tolerances
DIFFERENT = 0.01
KEYS = ("seasonal", *(f"{key}:conditional" for key in (*ACCESS, "oneway", "maxspeed")))

pytestmark = [
    pytest.mark.slow,
    pytest.mark.skipif(
        not ENGINE_PYTHON.exists(),
        reason="needs the engine in an environment of its own: make validate makes it where "
        "there is a Python 3.12 or later",
    ),
]
each_extract = pytest.mark.parametrize(
    "file",
    [pytest.param(file, id=file.name.partition(".")[0]) for file in FILES]
    or [
        pytest.param(
            Path(),
            marks=pytest.mark.skip(
                reason="no extract: run data/iceland/fetch.py, or name a folder of extracts in "
                "ROADWORTH_EXTRACTS"
            ),
        )
    ],
)


@dataclass(frozen=True)
class Points:
    """Nodes along two-way roads of a graph, to start from and to go to.

    At a junction an engine stands on one of the roads there, and which is its own affair.
    """

    lon: Float64
    lat: Float64

    @classmethod
    def of(cls, graph: RoadGraph) -> Points:
        """Drawn from the largest network."""
        both_ways = (graph.edge_forward_cost >= 0) & (graph.edge_backward_cost >= 0)
        both_ways &= (graph.node_network[graph.edge_start] == 0) & graph.main_edges()
        long = np.diff(graph.edge_first) > 2
        edges = np.random.default_rng(1).choice(
            np.flatnonzero(both_ways & long), ZONES + SITES, replace=False
        )
        vertex = graph.edge_first[edges] + 1
        return cls(graph.vertex_lon_e7[vertex] * 1e-7, graph.vertex_lat_e7[vertex] * 1e-7)

    def routed(self, graph: RoadGraph) -> tuple[Float64, Float64]:
        """Our shortest km and least minutes, (zones, sites); NaN where there is no route."""
        places = list(zip(self.lon.tolist(), self.lat.tolist(), strict=True))
        zones = zones_at({f"z{k}": place for k, place in enumerate(places[:ZONES])})
        sites = sites_at({f"s{k}": place for k, place in enumerate(places[ZONES:])})
        routes, _ = route(zones, sites, graph, study=a_study(routes={"max_lines": 0}))
        columns = routes[["shortest_distance_km", "drive_time_min"]].to_numpy(np.float64)
        km, minutes = columns.T.reshape(2, ZONES, SITES)
        return km, minutes

    def asked(self, extract: Path, folder: Path, weight: str) -> Matrix:
        """What the engine says of the same trips."""
        return Engine.build(extract, folder, weight).matrix(self.lon, self.lat, ZONES)


def apart(ours: Float64, theirs: Float64) -> Float64:
    return np.asarray(np.abs(theirs / ours - 1))


@each_extract
def test_the_same_roads_give_the_same_routes(
    file: Path, tmp_path: Path, record_check: RecordCheck
) -> None:
    """Tolerances of distances and durations are those that two such engines keep to."""
    cut = strict_cut(file, tmp_path / "cut.osm.pbf")
    graph, _, _ = build_roads(read_extract((cut,)), study=a_study())
    points = Points.of(graph)
    km, minutes = points.routed(graph)
    there = points.asked(cut, tmp_path, "distance").km
    assert np.isfinite(km).all()
    assert np.isfinite(there).all(), "the engine finds no way where there is one"
    far = km > LEAST_KM
    name, off = file.name.partition(".")[0], apart(km[far], there[far])
    for words, part, most in (("median", 50, 0.05), ("p90", 90, 0.1), ("p99", 99, 0.25)):
        label = f"engine, {name}, shortest distance: {words} difference, %"
        record_check(label, 100 * float(np.percentile(off, part)), 0, most, SOURCE)
    label = f"engine, {name}, shortest distance: largest difference, %"
    record_check(label, 100 * float(off.max()), 0, 1, SOURCE)
    took = points.asked(cut, tmp_path, "duration").minutes[far]
    off = scaled(minutes[far], took)
    for words, part, most in (("median", 50, 5), ("p90", 90, 13), ("p99", 99, 25)):
        label = f"engine, {name}, duration after one factor: {words} difference, %"
        record_check(label, 100 * float(np.percentile(off, part)), 0, most, SOURCE)
    guess = scaled(km[far], took)
    label = f"engine, {name}, duration: median difference over that of a constant speed"
    record_check(label, float(np.median(off) / np.median(guess)), 0, 1, SOURCE)


def scaled(ours: Float64, theirs: Float64) -> Float64:
    """How far apart after the factor that makes the median ratio one."""
    return apart(ours * np.median(theirs / ours), theirs)


@each_extract
def test_what_differs_on_the_whole_network_has_a_cause(
    file: Path, tmp_path: Path, record_check: RecordCheck, record_note: RecordNote
) -> None:
    """A cause explains a pair if the graph without that rule of ours agrees with the engine."""
    extract = read_extract((file,))
    graph, _, _ = build_roads(extract, study=a_study())
    points = Points.of(graph)
    there = points.asked(file, tmp_path, "distance")
    left = differing(points.routed(graph)[0], there.km)
    pairs, first = left.size, int(left.sum())
    moved = np.abs(there.moved_m) > 1
    causes = {"snapping": left & (moved[:ZONES, None] | moved[None, ZONES:])}
    left = left & ~causes["snapping"]
    for cause, build in without_a_rule(extract).items():
        km, _ = points.routed(build())
        causes[cause] = left & ~differing(km, there.km)
        left = left & ~causes[cause]
    causes["a rule of the engine's own"] = left
    found = ", ".join(f"{words} {int(c.sum())}" for words, c in causes.items() if c.any())
    name = file.name.partition(".")[0]
    record_note(
        f"Engine, whole network of {name}: {first} of {pairs} shortest distances differ by over "
        f"1 %, by cause: {found or 'none'}."
    )
    label = f"engine, {name}, whole network: pairs over 1 % apart by rules of the engine's own, %"
    record_check(label, 100 * float(left.sum()) / pairs, 0, 10, SOURCE)


def differing(ours: Float64, theirs: Float64) -> Bool:
    """Pairs with routes of different lengths, or with a route on one side only."""
    known = np.isfinite(ours) & np.isfinite(theirs)
    far = np.where(known, ours, 2) > LEAST_KM
    off = apart(np.where(known, ours, 1), np.where(known, theirs, 1)) > DIFFERENT
    return np.asarray((known & far & off) | (np.isfinite(ours) != np.isfinite(theirs)))


def without_a_rule(extract: RoadExtract) -> dict[str, Callable[[], RoadGraph]]:
    """Graphs that lack one rule each."""

    def built(changed: RoadExtract, study: Study) -> Callable[[], RoadGraph]:
        return lambda: build_roads(changed, study=study)[0]

    tags, usual = extract.way_tags, a_study()

    def untagged(*keys: str) -> RoadExtract:
        blank = {key: pd.Categorical([None] * len(tags)) for key in keys}
        return replace(extract, way_tags=tags.assign(**blank))

    return {
        "roads for four-wheel drive only": built(
            extract, a_study(roads={"four_wheel_drive": True})
        ),
        "tracks": built(extract, a_study(roads={"tracks": True})),
        "gates and other barriers": built(replace(extract, tagged_nodes=TaggedNodes()), usual),
        "private and limited roads": built(untagged(*ACCESS), usual),
        "season and conditions": built(untagged(*KEYS), usual),
        "ferries": built(extract, a_study(roads={"ferries": "none"})),
        "turn restrictions, and turning round": built(
            replace(extract, turn_relations=TurnRelations()), usual
        ),
        "several of these together": built(
            replace(
                untagged(*ACCESS, *KEYS), tagged_nodes=TaggedNodes(), turn_relations=TurnRelations()
            ),
            a_study(roads={"tracks": True}),
        ),
    }


@each_extract
def test_shortest_is_never_longer_and_fastest_never_slower(
    file: Path, record_check: RecordCheck
) -> None:
    """Exact, in millimetres and hundredths of a second, at every junction of the network."""
    graph, _, _ = build_roads(read_extract((file,)), study=a_study())
    places = np.random.default_rng(2).choice(np.flatnonzero(graph.node_network == 0), 3)
    arcs = graph.in_first, graph.in_node, graph.in_cost
    broken = 0
    for place in places.tolist():
        seed = np.array([place], dtype=np.int32), np.zeros(1, dtype=np.int64)
        fastest = search(*arcs, *seed, by_time=True)
        shortest = search(*arcs, *seed, by_time=False)
        reached = np.flatnonzero(fastest.cost < UNREACHED)
        time_cs = times_along(shortest, graph.in_cost, reached)
        broken += int((shortest.cost[reached] > (fastest.cost[reached] & DISTANCE_MASK)).sum())
        broken += int(((fastest.cost[reached] >> DISTANCE_BITS) > time_cs[reached]).sum())
    label = f"invariants, {file.name.partition('.')[0]}: junctions with a shorter or faster way"
    record_check(label, broken, 0, 0, "the definition of a shortest and of a fastest route")


def times_along(tree: Tree, cost: Int64, nodes: Int64) -> Int64:
    """Hundredths of a second along the tree's ways, of the nodes asked for."""
    time_cs = np.full(len(tree.cost), -1, dtype=np.int64)
    for node in nodes.tolist():
        way = [node]
        while time_cs[way[-1]] < 0 and tree.parent[way[-1]] >= 0:
            way.append(int(tree.parent[way[-1]]))
        if time_cs[way[-1]] < 0:
            time_cs[way[-1]] = 0
        for below, above in pairwise(reversed(way)):
            time_cs[above] = time_cs[below] + (int(cost[tree.via[above]]) >> DISTANCE_BITS)
    return time_cs
