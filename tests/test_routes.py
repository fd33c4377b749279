"""Routes on worlds small enough to check by hand: 60 km/h, so minutes are kilometres."""

from __future__ import annotations

from pathlib import Path

import geopandas as gpd
import networkx as nx
import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pyproj import Geod

from pipeline.errors import RouteError
from pipeline.roads import RoadGraph
from pipeline.routes import route, summarise_route
from pipeline.tables import RouteLines, Routes
from tests.roads.worlds import (
    ROAD,
    STEP_KM,
    Places,
    Ways,
    a_study,
    graph_of,
    sites_at,
    zones_at,
)

LINE: Places = {name: (i * 0.01, 0.0) for i, name in enumerate("abcde")}
GEOD = Geod(ellps="WGS84")


def routes_of(
    graph: RoadGraph,
    zones: Places,
    sites: Places,
    site_ids: list[str] | None = None,
    **keys: object,
) -> tuple[pd.DataFrame, gpd.GeoDataFrame]:
    """Checked tables; keywords are keys of [routes]."""
    study = a_study(routes=keys)
    routes, lines = route(zones_at(zones), sites_at(sites, site_ids), graph, study=study)
    RouteLines.checked(lines)
    return Routes.checked(routes).set_index("zone_id"), lines


def test_both_ends_split_an_edge(tmp_path: Path) -> None:
    """One edge a ────── e of 4 steps, zone at 0.5 and site at 3.25: 2.75 steps, either way."""
    graph, _, _ = graph_of(tmp_path, LINE, [("a b c d e", ROAD)])
    routes, lines = routes_of(graph, {"z": (0.005, 0.0)}, {"s": (0.0325, 0.0)})
    row = routes.loc["z"]
    for column in ("distance_km", "shortest_distance_km", "return_distance_km"):
        assert row[column] == pytest.approx(2.75 * STEP_KM, abs=1e-5), column
    for column in ("drive_time_min", "return_drive_time_min"):
        assert row[column] == pytest.approx(2.75 * STEP_KM, abs=1e-3), column
    assert row["route_status"] == "routed"
    assert lines.geometry.iloc[0].bounds == pytest.approx((0.005, 0.0, 0.0325, 0.0))


def test_one_way_edge_shared_by_zone_and_site(tmp_path: Path) -> None:
    """A one-way block a → b → n → a. From z to s along a → b it is half a step; home is round.

    The way home: s to b, b to n (1 step north), n to a, a to z.
    """
    places = {"a": (0.0, 0.0), "b": (0.01, 0.0), "n": (0.01, 0.01), "x": (-0.01, 0.0)}
    places |= {"y": (0.02, 0.0)}
    oneway = ROAD | {"oneway": "yes"}
    ways: Ways = [("a b", oneway), ("b n a", oneway), ("x a", ROAD), ("b y", ROAD)]
    graph, _, _ = graph_of(tmp_path, places, ways)
    routes, _ = routes_of(graph, {"z": (0.0025, 0.0)}, {"s": (0.0075, 0.0)})
    north = GEOD.inv(0.01, 0.0, 0.01, 0.01)[2] / 1000
    slant = GEOD.inv(0.01, 0.01, 0.0, 0.0)[2] / 1000
    assert routes.loc["z", "distance_km"] == pytest.approx(STEP_KM / 2, abs=1e-5)
    assert routes.loc["z", "return_distance_km"] == pytest.approx(
        STEP_KM / 2 + north + slant, abs=1e-5
    )


def test_fastest_and_shortest_differ(tmp_path: Path) -> None:
    """a → c by b: 2 steps at 10 km/h; by n: longer at 100 km/h, partly gravel and toll."""
    places = LINE | {"n": (0.01, 0.01)}
    fast = ROAD | {"maxspeed": "100"}
    ways: Ways = [
        ("a b c", ROAD | {"maxspeed": "10"}),
        ("a n", fast | {"toll": "yes"}),
        ("n c", fast | {"surface": "compacted"}),
        ("c d", ROAD),
    ]
    graph, _, _ = graph_of(tmp_path, places, ways)
    row = routes_of(graph, {"z": LINE["a"]}, {"s": LINE["d"]})[0].loc["z"]
    slant = GEOD.inv(0.0, 0.0, 0.01, 0.01)[2] / 1000
    assert row["distance_km"] == pytest.approx(2 * slant + STEP_KM, abs=1e-5)
    assert row["shortest_distance_km"] == pytest.approx(3 * STEP_KM, abs=1e-5)
    assert row["drive_time_min"] == pytest.approx(
        slant / 100 * 60 + slant / 70 * 60 + STEP_KM, abs=1e-3
    )
    assert row["toll_km"] == pytest.approx(slant, abs=1e-4)
    assert row["unpaved_km"] == pytest.approx(slant, abs=1e-4)
    assert row["ferry_km"] == 0


def test_gaps_are_recorded_and_charged(tmp_path: Path) -> None:
    """Zone 0.01 degrees north of b (1.10574 km, walked at 5 km/h), site on d."""
    graph, _, _ = graph_of(tmp_path, LINE, [("a b c d e", ROAD)])
    routes, _ = routes_of(graph, {"z": (0.01, 0.01)}, {"s": LINE["d"]}, zone_gap_speed_kmh=5.0)
    gap_km = GEOD.inv(0.01, 0.0, 0.01, 0.01)[2] / 1000
    row = routes.loc["z"]
    assert row["zone_snap_m"] == pytest.approx(1000 * gap_km, abs=0.01)
    assert row["distance_km"] == pytest.approx(2 * STEP_KM + gap_km, abs=1e-5)
    assert row["drive_time_min"] == pytest.approx(2 * STEP_KM + gap_km / 5 * 60, abs=1e-3)


def test_a_long_stretch_is_met_in_its_middle(tmp_path: Path) -> None:
    """A stretch of 100 km without a vertex; the point is 0.5 km off its middle, not 50 km."""
    places = {"a": (0.0, 0.0), "b": (0.9, 0.0), "c": (0.9, 0.5)}
    graph, _, _ = graph_of(tmp_path, places, [("a b c", ROAD)])
    routes, _ = routes_of(graph, {"z": (0.45, 0.0045)}, {"s": (0.9, 0.0)})
    assert routes.loc["z", "zone_snap_m"] == pytest.approx(497.6, abs=0.1)
    assert routes.loc["z", "distance_km"] == pytest.approx(45 * STEP_KM + 0.4976, abs=1e-3)


def test_too_far_is_a_status_and_not_a_number(tmp_path: Path) -> None:
    """A zone 14 km off its road: reported with its gap, not routed; the others are."""
    graph, _, _ = graph_of(tmp_path, LINE, [("a b c d e", ROAD)])
    zones = {"far": (0.02, 0.1266), "near": LINE["a"]}
    routes, lines = routes_of(graph, zones, {"s": LINE["e"]})
    assert routes["route_status"].to_dict() == {"far": "too_far_from_road", "near": "routed"}
    assert routes.loc["far", "zone_snap_m"] == pytest.approx(14_000, abs=5)
    assert routes.loc["far"].isna()[["distance_km", "drive_time_min", "ferry_km"]].all()
    assert lines["zone_id"].tolist() == ["near"]


ISLAND: Places = LINE | {"p": (0.02, 0.02), "q": (0.03, 0.02)}


@pytest.mark.parametrize(
    ("point", "keys", "status"),
    [
        ((0.025, 0.0199), {}, "no_path"),  # on the island's road; the shore is 2.2 km off
        ((0.025, 0.0199), {"detached_road_km": 2.0}, "routed"),  # the island's road is trifling
        ((0.025, 0.0199), {"detached_jump_km": 3.0}, "routed"),
        ((0.025, 0.0111), {}, "routed"),  # in between: as near to the shore within 0.3 km
        ((0.025, 0.0120), {}, "no_path"),
        ((0.025, 0.0050), {}, "routed"),
    ],
)
def test_a_point_on_an_island_is_not_moved_across_the_water(
    tmp_path: Path, point: tuple[float, float], keys: dict[str, object], status: str
) -> None:
    """Shore road a ── e; island road p ── q of 1.1 km, 2.2 km to the north, without a ferry."""
    graph, _, _ = graph_of(tmp_path, ISLAND, [("a b c d e", ROAD), ("p q", ROAD)])
    zones = {"z": point, "ashore": LINE["b"]}
    routes, _ = routes_of(graph, zones, {"s": LINE["e"]}, None, **keys)
    assert routes.loc["z", "route_status"] == status


def test_an_island_with_a_ferry_is_routed_to(tmp_path: Path) -> None:
    """The same island with a ferry p ~~ c of 10 minutes and 20 to board, each way."""
    ways: Ways = [("a b c d e", ROAD), ("p q", ROAD)]
    ways.append(("p c", {"route": "ferry", "duration": "10"}))
    graph, _, _ = graph_of(tmp_path, ISLAND, ways)
    row = routes_of(graph, {"z": ISLAND["q"]}, {"s": LINE["e"]})[0].loc["z"]
    ferry_km = GEOD.inv(0.02, 0.02, 0.02, 0.0)[2] / 1000
    assert row["ferry_km"] == pytest.approx(ferry_km, abs=1e-5)
    assert row["ferry_min"] == pytest.approx(30, abs=1e-3)
    assert row["distance_km"] == pytest.approx(3 * STEP_KM + ferry_km, abs=1e-4)
    assert row["drive_time_min"] == pytest.approx(3 * STEP_KM + 30, abs=1e-2)
    assert row["return_drive_time_min"] == pytest.approx(row["drive_time_min"], abs=1e-2)


def test_points_pass_over_roads_that_cannot_be_left(tmp_path: Path) -> None:
    """A one-way stub c → n leads nowhere; a zone beside n goes to the road a ── e."""
    places = LINE | {"n": (0.02, 0.005)}
    ways: Ways = [("a b c d e", ROAD), ("c n", ROAD | {"oneway": "yes"})]
    graph, _, _ = graph_of(tmp_path, places, ways)
    routes, _ = routes_of(graph, {"z": places["n"]}, {"s": LINE["e"]})
    assert routes.loc["z", "zone_snap_m"] == pytest.approx(552.9, abs=0.1)


def test_the_best_access_point_is_named(tmp_path: Path) -> None:
    """Gates at a and at e of one site: z at b takes the west gate, y at d the east gate."""
    graph, _, _ = graph_of(tmp_path, LINE, [("a b c d e", ROAD)])
    gates = {"west": LINE["a"], "east": LINE["e"], "lost": (5.0, 5.0)}
    zones = {"z": LINE["b"], "y": (0.031, 0.0)}
    routes, _ = routes_of(graph, zones, gates, ["s", "s", "s"])
    assert routes["access_id"].to_dict() == {"z": "west", "y": "east"}
    assert routes["distance_km"].tolist() == pytest.approx([STEP_KM, 0.9 * STEP_KM], abs=1e-5)


def test_zone_and_site_at_one_place(tmp_path: Path) -> None:
    """z and s both at b; y one step on. Half a step, two thirds of it, by 1.3, at 30 km/h."""
    graph, _, _ = graph_of(tmp_path, LINE, [("a b c d e", ROAD)])
    routes, lines = routes_of(graph, {"z": LINE["b"], "y": LINE["c"]}, {"s": LINE["b"]})
    assert routes["route_status"].tolist() == ["within_zone", "routed"]
    assert routes.loc["z", "distance_km"] == pytest.approx(1.3 * STEP_KM / 3, abs=1e-6)
    assert routes.loc["z", "drive_time_min"] == pytest.approx(2 * 1.3 * STEP_KM / 3, abs=1e-6)
    assert lines["zone_id"].tolist() == ["y"]


def test_a_site_off_the_roads_is_refused(tmp_path: Path) -> None:
    """Its coordinates swapped: the message names it, the gap and the remedy."""
    graph, _, _ = graph_of(tmp_path, LINE, [("a b c d e", ROAD)])
    with pytest.raises(RouteError, match=r"'s' \(longitude 0, latitude 1\), 110\.6 km .*swapped"):
        routes_of(graph, {"z": LINE["a"]}, {"s": (0.0, 1.0)})


def test_nothing_routed_is_refused(tmp_path: Path) -> None:
    graph, _, _ = graph_of(tmp_path, LINE, [("a b c d e", ROAD)])
    with pytest.raises(RouteError, match=r"no zone reaches any site \(1 too_far_from_road\)"):
        routes_of(graph, {"z": (50.0, 50.0)}, {"s": LINE["a"]})


def test_every_pair_has_a_row_zone_by_zone(tmp_path: Path) -> None:
    graph, _, _ = graph_of(tmp_path, LINE, [("a b c d e", ROAD)])
    zones, sites = zones_at(LINE), sites_at({"s": LINE["a"], "t": LINE["e"]})
    one, lines = route(zones, sites, graph, study=a_study())
    assert one["zone_id"].tolist() == [z for z in "abcde" for _ in range(2)]
    assert one["site_id"].tolist() == ["s", "t"] * 5
    assert summarise_route((one, lines)) == (
        "5 zones × 2 sites, 8 routed, 2 within zone (see routes.csv)"
    )


def test_lines_to_keep_go_to_sites_first_and_then_to_short_drives(tmp_path: Path) -> None:
    graph, _, _ = graph_of(tmp_path, LINE, [("a b c d e", ROAD)])
    sites = sites_at({"s": LINE["a"], "t": LINE["e"]}).assign(role=["substitute", "site"])
    _, lines = route(zones_at(LINE), sites, graph, study=a_study(routes={"max_lines": 5}))
    assert list(zip(lines["zone_id"], lines["site_id"], strict=True)) == [
        ("d", "t"),
        ("c", "t"),
        ("b", "t"),
        ("a", "t"),
        ("b", "s"),
    ]


@settings(max_examples=40, derandomize=True, deadline=None)
@given(seed=st.integers(0, 10_000))
def test_equals_networkx_between_junctions(
    tmp_path_factory: pytest.TempPathFactory, seed: int
) -> None:
    """Random one-way and two-way roads: zones on all junctions, one site, both weights."""
    rng = np.random.default_rng(seed)
    names = "abcdefgh"
    places: Places = {
        n: (float(x), float(y))
        for n, (x, y) in zip(names, rng.uniform(0, 0.1, (8, 2)).round(7), strict=True)
    }
    ways: Ways = []
    for _ in range(12):
        pair = rng.choice(list(names), 2, replace=False)
        speed, oneway = rng.choice(["20", "50", "90"]), rng.choice(["yes", "no", "no"])
        ways.append((" ".join(pair), ROAD | {"maxspeed": str(speed), "oneway": str(oneway)}))
    graph, _, _ = graph_of(tmp_path_factory.mktemp("world"), places, ways)
    main = np.flatnonzero(graph.node_network == 0)
    at = {
        str(n): (float(graph.node_lon_e7[n]) * 1e-7, float(graph.node_lat_e7[n]) * 1e-7)
        for n in main
    }
    if len(main) < 2:
        return
    routes, _ = routes_of(graph, at, {"s": at[str(main[0])]})
    net = graph.to_networkx()
    for column, weight, scale in (
        ("drive_time_min", "travel_time", 60),
        ("shortest_distance_km", "length", 1000),
    ):
        wanted = dict(
            nx.single_source_dijkstra_path_length(net.reverse(), int(main[0]), weight=weight)
        )
        for zone, value in routes.loc[routes["route_status"] == "routed", column].items():
            assert value == pytest.approx(wanted[int(str(zone))] / scale, abs=2e-4), (zone, column)
    assert (routes["shortest_distance_km"] <= routes["distance_km"]).all()


def test_a_point_at_a_junction_can_take_any_road_there(tmp_path: Path) -> None:
    """z and s stand at junctions b and c; whichever road they are tied to, b ── c is open.

    One-way stubs and rings at both junctions leave in all directions: b → n → c, c → m → b.
    """
    places = LINE | {"n": (0.015, 0.02), "m": (0.015, -0.02)}
    oneway = ROAD | {"oneway": "yes"}
    ways: Ways = [("b n c", oneway), ("c m b", oneway), ("a b", ROAD), ("b c", ROAD), ("c d", ROAD)]
    graph, _, _ = graph_of(tmp_path, places, ways)
    routes, _ = routes_of(graph, {"z": LINE["b"], "y": LINE["c"]}, {"s": LINE["c"]})
    assert routes["route_status"].tolist() == ["routed", "within_zone"]
    assert routes.loc["z", "distance_km"] == pytest.approx(STEP_KM, abs=1e-5)
    assert routes.loc["z", "return_distance_km"] == pytest.approx(STEP_KM, abs=1e-5)


def test_points_are_tied_and_routed_across_the_antimeridian(tmp_path: Path) -> None:
    """a ── b from 179.99 to -179.99 east, without a vertex between: 2 steps over the meridian.

    The zone lies 0.0045 degrees north of 179.995, the site on the road at -179.995: one step.
    """
    places: Places = {"a": (179.99, 0.0), "b": (-179.99, 0.0)}
    graph, _, _ = graph_of(tmp_path, places, [("a b", ROAD)])
    routes, lines = routes_of(graph, {"z": (179.995, 0.0045)}, {"s": (-179.995, 0.0)})
    row = routes.loc["z"]
    assert row["zone_snap_m"] == pytest.approx(497.6, abs=0.1)
    assert row["distance_km"] == pytest.approx(STEP_KM + 0.4976, abs=1e-3)
    assert lines.geometry.iloc[0].length == pytest.approx(
        0.01, abs=1e-6
    )  # cut, not round the world
