"""Roads that are open only at the ends of a trip, and barriers on nodes."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import networkx as nx
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pyproj import Geod

from pipeline.roads.snapping import TIED, tie_to_roads
from pipeline.routes import route
from tests.roads.worlds import (
    ROAD,
    STEP_KM,
    Places,
    Ways,
    a_study,
    signed_graph_of,
    sites_at,
    zones_at,
)

GEOD = Geod(ellps="WGS84")
# a ── b ══ c ── d along the equator, and a way round from b by n to c.
PLACES: Places = {
    "a": (0.0, 0.0),
    "b": (0.01, 0.0),
    "c": (0.02, 0.0),
    "d": (0.03, 0.0),
    "n": (0.01, 0.01),
    "m": (0.02, 0.01),
    "x": (0.015, -0.01),
}
DESTINATION = ROAD | {"access": "destination"}
ROUND: Ways = [("a b", ROAD), ("c d", ROAD), ("b n m c", ROAD)]


def steps(
    folder: Path,
    ways: Ways,
    start: tuple[float, float],
    end: tuple[float, float],
    roads: dict[str, object] | None = None,
) -> float:
    """Distance of the fastest route in steps of a hundredth of a degree; NaN: none."""
    graph, _, _ = signed_graph_of(folder, PLACES, ways, roads=roads)
    zones, sites = zones_at({"z": start, "s": end}), sites_at({"s": end})
    routes, _ = route(zones, sites, graph, study=a_study())
    there = routes.iloc[0]
    return float(there["distance_km"]) / STEP_KM


@pytest.mark.parametrize("value", ["destination", "customers", "delivery"])
def test_nobody_drives_through(tmp_path: Path, value: str) -> None:
    """::

         n ── m
         │    │
    a ── b ══ c ── d      b ══ c is open to those who have business there
    """
    ways = [*ROUND, ("b c", ROAD | {"motor_vehicle": value})]
    assert steps(tmp_path, ways, PLACES["a"], PLACES["d"]) == pytest.approx(5, abs=0.05)


def test_a_trip_may_start_and_end_there(tmp_path: Path) -> None:
    """The middle of b ══ c is 1.5 steps from a and from d, whichever way one goes."""
    ways, middle = [*ROUND, ("b c", DESTINATION)], (0.015, 0.0)
    for start, end in ((PLACES["a"], middle), (middle, PLACES["d"]), (middle, PLACES["a"])):
        assert steps(tmp_path, ways, start, end) == pytest.approx(1.5, abs=0.01)


def test_roads_behind_limited_ones_can_be_reached_and_not_driven_through(tmp_path: Path) -> None:
    """b ══ x ── (an ordinary stub x y) and x ══ c: y lies behind; a to d goes round."""
    ways = [*ROUND, ("b x", DESTINATION), ("x c", DESTINATION), ("x y", ROAD)]
    places = PLACES | {"y": (0.015, -0.02)}
    graph, _, _ = signed_graph_of(tmp_path, places, ways)
    zones = zones_at({"a": PLACES["a"], "y": places["y"]})
    routes, _ = route(zones, sites_at({"s": PLACES["d"]}), graph, study=a_study())
    by_zone = routes.set_index("zone_id")["distance_km"] / STEP_KM
    assert by_zone["a"] == pytest.approx(5, abs=0.05)
    assert by_zone["y"] == pytest.approx(1 + 2 * 1.118 + 0, abs=0.15)


def test_a_limited_cul_de_sac_costs_no_copies(tmp_path: Path) -> None:
    """A driveway cannot be driven through, so the graph needs nothing for it."""
    graph, _, _ = signed_graph_of(tmp_path, PLACES, [*ROUND, ("b x", DESTINATION)])
    assert len(graph.copy_of) == 0
    graph, _, _ = signed_graph_of(tmp_path, PLACES, [*ROUND, ("b c", DESTINATION)])
    assert len(graph.copy_of) == 4


def test_tracks_for_the_last_stretch(tmp_path: Path) -> None:
    """b ══ c is a track: no way through, yet the way to a hut at its middle."""
    ways, middle = [*ROUND, ("b c", {"highway": "track", "maxspeed": "60"})], (0.015, 0.0)
    last: dict[str, object] = {"tracks": "last_stretch"}
    assert steps(tmp_path, ways, PLACES["a"], PLACES["d"], last) == pytest.approx(5, abs=0.05)
    assert steps(tmp_path, ways, PLACES["a"], middle, last) == pytest.approx(1.5, abs=0.01)
    through = steps(tmp_path, ways, PLACES["a"], PLACES["d"], {"tracks": True})
    assert through == pytest.approx(3, abs=0.01)


@pytest.mark.parametrize(
    ("tags", "passes"),
    [
        ({"barrier": "bollard"}, False),
        ({"barrier": "block"}, False),
        ({"barrier": "bollard", "motor_vehicle": "yes"}, True),
        ({"barrier": "gate"}, True),
        ({"barrier": "gate", "access": "private"}, False),
        ({"barrier": "gate", "locked": "yes"}, False),
        ({"barrier": "lift_gate"}, True),
        ({"barrier": "lift_gate", "motorcar": "no"}, False),
        ({"barrier": "cattle_grid"}, True),
        ({"highway": "crossing", "access": "no"}, True),  # no barrier
    ],
)
def test_barriers(tmp_path: Path, tags: dict[str, str], passes: bool) -> None:
    """a ── b ─x─ c ── d with the barrier in the middle; the way round is 2 steps longer."""
    places = PLACES | {"g": (0.015, 0.0)}
    ways = [*ROUND, ("b g c", ROAD)]
    graph, _, _ = signed_graph_of(tmp_path, places, ways, signs={"g": tags})
    zones, sites = zones_at({"z": PLACES["a"]}), sites_at({"s": PLACES["d"]})
    row = route(zones, sites, graph, study=a_study())[0].iloc[0]
    assert row["distance_km"] / STEP_KM == pytest.approx(3 if passes else 5, abs=0.05)


def test_both_sides_of_a_barrier_can_be_driven_up_to(tmp_path: Path) -> None:
    """Two zones a metre or so on either side of a bollard go to a and to d without passing it."""
    places = PLACES | {"g": (0.015, 0.0)}
    graph, _, _ = signed_graph_of(
        tmp_path, places, [*ROUND, ("b g c", ROAD)], signs={"g": {"barrier": "bollard"}}
    )
    zones = zones_at({"west": (0.01499, 0.0), "east": (0.01501, 0.0)})
    routes, _ = route(zones, sites_at({"s": PLACES["a"]}), graph, study=a_study())
    km = routes.set_index("zone_id")["distance_km"] / STEP_KM
    assert km["west"] == pytest.approx(1.499, abs=0.001)
    assert km["east"] == pytest.approx(0.499 + 3 + 1, abs=0.05)


NAMES = "abcdefgh"
Edge = tuple[str, str, int]


def _random_world(rng: np.random.Generator) -> tuple[Places, Ways]:
    places: Places = {
        n: (float(x), float(y))
        for n, (x, y) in zip(NAMES, rng.uniform(0, 0.1, (8, 2)).round(6), strict=True)
    }
    pairs = {tuple(sorted(map(str, rng.choice(list(NAMES), 2, replace=False)))) for _ in range(14)}
    ways: Ways = [
        (
            " ".join(rng.permutation(pair).tolist()),
            (DESTINATION if rng.random() < 0.35 else ROAD)
            | {"oneway": str(rng.choice(["yes", "no", "no"]))},
        )
        for pair in sorted(pairs)
    ]
    return places, ways


def _layered(places: Places, ways: Ways) -> nx.DiGraph[Any]:
    """Three layers: limited roads from the start, ordinary ones, limited ones to the end.

    Roads off the largest strongly connected part of ordinary roads count as limited.
    """
    edges: list[Edge] = []
    for number, (text, tags) in enumerate(ways):
        one, two = text.split()
        edges += [(one, two, number)] + ([(two, one, number)] if tags["oneway"] == "no" else [])
    main = _main_places(places, ways, edges)
    graph: nx.DiGraph[Any] = nx.DiGraph()
    for tail, head, number in edges:
        is_ordinary = "access" not in ways[number][1] and {tail, head} <= main
        for layer in (1,) if is_ordinary else (0, 2):
            _add(graph, (layer, tail), (layer, head), _metres(places, tail, head))
    for name in NAMES:
        _add(graph, (0, name), (1, name), 0)
        _add(graph, (1, name), (2, name), 0)
    return graph


def _metres(places: Places, tail: str, head: str) -> float:
    return float(GEOD.inv(*places[tail], *places[head])[2])


def _main_places(places: Places, ways: Ways, edges: list[Edge]) -> set[str]:
    """Places on the strongly connected part of ordinary roads with most kilometres."""
    ordinary: nx.MultiDiGraph[Any] = nx.MultiDiGraph()
    for tail, head, number in edges:
        if "access" not in ways[number][1]:
            ordinary.add_edge(tail, head, number=number)

    def length(part: set[str]) -> float:
        inside = {d["number"] for _, _, d in ordinary.subgraph(part).edges(data=True)}
        return sum(_metres(places, *ways[number][0].split()) for number in sorted(inside))

    return max(nx.strongly_connected_components(ordinary), key=length, default=set())


def _add(graph: nx.DiGraph[Any], one: object, two: object, weight: float) -> None:
    known = graph.get_edge_data(one, two, {"weight": np.inf})["weight"]
    graph.add_edge(one, two, weight=min(known, weight))


@settings(max_examples=15, derandomize=True, deadline=None)
@given(seed=st.integers(0, 100_000))
def test_equals_networkx_on_layered_graphs(
    tmp_path_factory: pytest.TempPathFactory, seed: int
) -> None:
    """Random roads, a third of them for destination only; all pairs, there and home."""
    places, ways = _random_world(np.random.default_rng(seed))
    graph, _, _ = signed_graph_of(tmp_path_factory.mktemp("w"), places, ways)
    study = a_study(routes={"max_snap_km": 1e-6})
    tied = tie_to_roads(graph, zones_at(places), study.routes, gap_kmh=20.0).status == TIED
    kept = {name: places[name] for name, is_tied in zip(places, tied, strict=True) if is_tied}
    routes, _ = route(zones_at(kept), sites_at(kept), graph, study=study)
    layered = _layered(places, ways)
    for row in routes.to_dict("records"):
        ends = (row["zone_id"], row["site_id"])
        if ends[0] == ends[1]:
            continue
        for column, (one, two) in (
            ("distance_km", ends),
            ("shortest_distance_km", ends),
            ("return_distance_km", ends[::-1]),
        ):
            if one != ends[0] and row["route_status"] != "routed":
                continue  # no way there, so no way home is looked for
            try:
                wanted = nx.dijkstra_path_length(layered, (0, one), (2, two)) / 1000
            except nx.NetworkXNoPath:
                assert np.isnan(row[column]), (ends, column)
                continue
            assert row[column] == pytest.approx(wanted, abs=1e-4), (ends, column)
