"""Routes by time, by distance, and by what they cost in money and time."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import networkx as nx
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.errors import StudyError
from pipeline.roads.graph import RoadGraph
from pipeline.routes import route
from tests.roads.worlds import (
    ROAD,
    STEP_KM,
    Places,
    Ways,
    a_study,
    graph_of,
    signed_graph_of,
    sites_at,
    zones_at,
)

#      n ════════ m        the northern road: longer, fast (120), toll
#      │          │
# a ── b ──────── c ── d   the road between b and c is slow (30), free and short
PLACES: Places = {
    "a": (0.0, 0.0),
    "b": (0.01, 0.0),
    "c": (0.05, 0.0),
    "d": (0.06, 0.0),
    "n": (0.01, 0.005),
    "m": (0.05, 0.005),
}
WAYS: Ways = [
    ("a b", ROAD),
    ("b c", {"highway": "primary", "maxspeed": "30"}),
    ("c d", ROAD),
    ("b n m c", {"highway": "primary", "maxspeed": "120", "toll": "yes"}),
]
FAR_KM = 4 * STEP_KM + 2 * 0.005 * 110.574  # by the northern road


def chosen(graph: RoadGraph, **routes: object) -> tuple[float, float, float]:
    """Distance, time and toll km there; the way home must be alike."""
    zones, sites = zones_at({"z": PLACES["a"]}), sites_at({"s": PLACES["d"]})
    row = route(zones, sites, graph, study=a_study(routes=routes))[0].iloc[0]
    assert row["return_distance_km"] == pytest.approx(row["distance_km"], abs=1e-6)
    assert row["return_drive_time_min"] == pytest.approx(row["drive_time_min"], abs=1e-3)
    assert row["shortest_distance_km"] == pytest.approx(6 * STEP_KM, abs=1e-4)
    return float(row["distance_km"]), float(row["drive_time_min"]), float(row["toll_km"])


def test_by_time_distance_and_cost(tmp_path: Path) -> None:
    """By time north, by distance south; by cost it depends on the toll.

    North is quicker by 4 steps at 30 (8.9 min) less 5.56 km at 120 (2.8 min): 6.1 min, worth 1.02
    at 10 an hour. It is 1.1 km longer (0.22 at 0.20 a km), so a toll of 0.10 a km (0.56) is worth
    paying, and one of 0.20 is not.
    """
    graph, _, _ = graph_of(tmp_path, PLACES, WAYS)
    slow_min, fast_min = 4 * STEP_KM / 30 * 60, FAR_KM / 120 * 60
    north = (2 * STEP_KM + FAR_KM, 2 * STEP_KM + fast_min, FAR_KM)
    south = (6 * STEP_KM, 2 * STEP_KM + slow_min, 0.0)
    assert chosen(graph) == pytest.approx(north, abs=1e-2)
    assert chosen(graph, minimise="distance") == pytest.approx(south, abs=1e-2)
    prices = {"value_of_time_per_hour": 10.0, "vehicle_cost_per_km": 0.2}
    for toll, expected in ((0.1, north), (0.2, south)):
        generalised = prices | {"toll_per_km": toll}
        found = chosen(graph, minimise="generalised_cost", generalised=generalised)
        assert found == pytest.approx(expected, abs=1e-2)


def test_listed_booths_decide_too(tmp_path: Path) -> None:
    """A booth at n (node 5): 0.50 is worth the time, 2.00 is not."""
    graph, _, _ = signed_graph_of(tmp_path, PLACES, WAYS, signs={"n": {"barrier": "toll_booth"}})
    generalised = {"value_of_time_per_hour": 10.0, "vehicle_cost_per_km": 0.2}
    for toll, toll_km in ((0.5, FAR_KM), (2.0, 0.0)):
        charges = {"toll_by_booth": {"5": toll}}
        found = chosen(graph, minimise="generalised_cost", generalised=generalised, charges=charges)
        assert found[2] == pytest.approx(toll_km, abs=1e-2)


def test_parallel_roads_stay_apart_for_the_cheap_one(tmp_path: Path) -> None:
    """Three roads b to c: fast with a toll, short, and one between in both; it is the cheapest.

    Fast: 6.5 km at 120; short: 4.45 km at 20; between: 4.9 km at 60 without toll.
    """
    places = PLACES | {"x": (0.03, 0.02), "y": (0.03, 0.01)}
    ways: Ways = [
        ("a b", ROAD),
        ("c d", ROAD),
        ("b x c", {"highway": "primary", "maxspeed": "120", "toll": "yes"}),
        ("b c", {"highway": "primary", "maxspeed": "20"}),
        ("b y c", ROAD),
    ]
    graph, _, _ = graph_of(tmp_path, places, ways)
    generalised = {
        "value_of_time_per_hour": 10.0,
        "vehicle_cost_per_km": 0.1,
        "toll_per_km": 1.0,
    }
    km, minutes, toll_km = chosen(graph, minimise="generalised_cost", generalised=generalised)
    assert toll_km == 0
    assert minutes == pytest.approx(km, abs=1e-2)  # 60 km/h all the way
    assert km < 8


@settings(max_examples=25, derandomize=True, deadline=None)
@given(seed=st.integers(0, 10_000))
def test_equals_networkx(tmp_path_factory: pytest.TempPathFactory, seed: int) -> None:
    """Random one-way, two-way and toll roads, parallel ones too: cost of each junction's route."""
    rng = np.random.default_rng(seed)
    names = "abcdefgh"
    at = rng.uniform(0, 0.1, (8, 2)).round(7)
    places: Places = {n: (float(x), float(y)) for n, (x, y) in zip(names, at, strict=True)}
    ways: Ways = []
    for _ in range(14):
        pair = rng.choice(list(names), 2, replace=False)
        tags = {
            "maxspeed": str(rng.choice(["20", "50", "90"])),
            "oneway": str(rng.choice(["yes", "no", "no"])),
            "toll": str(rng.choice(["yes", "no"])),
        }
        ways.append((" ".join(pair), ROAD | tags))
    graph, _, _ = graph_of(tmp_path_factory.mktemp("world"), places, ways)
    main = np.flatnonzero(graph.node_network == 0)
    if len(main) < 2:
        return
    lon, lat = graph.node_lon_e7 * 1e-7, graph.node_lat_e7 * 1e-7
    zones = zones_at({str(n): (float(lon[n]), float(lat[n])) for n in main})
    site = sites_at({"s": (float(lon[main[0]]), float(lat[main[0]]))})
    prices = {"value_of_time_per_hour": 12.0, "vehicle_cost_per_km": 0.3, "toll_per_km": 0.2}
    study = a_study(routes={"minimise": "generalised_cost", "generalised": prices})
    table = route(zones, site, graph, study=study)[0]
    table = table[table["route_status"] == "routed"]
    found = table["drive_time_min"] / 60 * 12 + table["distance_km"] * 0.3 + table["toll_km"] * 0.2
    net = graph.to_networkx()

    def money(_u: int, _v: int, parallel: dict[str, Any]) -> float:
        costs = [
            e["travel_time"] / 3600 * 12 + (e["length"] * 0.3 + e["toll_m"] * 0.2) / 1000
            for e in parallel.values()
        ]
        return float(min(costs))

    wanted = nx.single_source_dijkstra_path_length(net.reverse(), int(main[0]), weight=money)
    for zone, value in zip(table["zone_id"], found, strict=True):
        assert value == pytest.approx(wanted[int(zone)], abs=1e-3), zone


def test_prices_are_taken_from_the_costs() -> None:
    """Cost per km 0.20; an hour is worth 15 × 0.4 × 2 people = 12; no toll is known."""
    costs: dict[str, object] = {
        "vehicle_cost_per_km": 0.2,
        "wage_fraction": 0.4,
        "hourly_wage": 15.0,
        "party_size": 2.0,
        "toll_per_km": 0.1,
    }
    study = a_study(costs=costs, routes={"minimise": "generalised_cost"})
    prices = study.routes.generalised
    assert prices.value_of_time_per_hour == pytest.approx(12)
    assert (prices.vehicle_cost_per_km, prices.toll_per_km, prices.people) == (0.2, 0.1, 2)


def test_a_missing_price_is_refused() -> None:
    with pytest.raises(StudyError, match="value_of_time_per_hour is needed"):
        a_study(routes={"minimise": "generalised_cost"})
    dear = {"value_of_time_per_hour": 0.1}
    with pytest.raises(StudyError, match="time hardly counts"):
        a_study(routes={"minimise": "generalised_cost", "generalised": dear})
