"""One rule of the road per test, on a road from w by m to e along the equator."""

from __future__ import annotations

import math
from pathlib import Path

import pytest

from pipeline.errors import RoadsError, StudyError
from pipeline.roads import RoadGraph
from pipeline.roads.graph import unpack_distance_km, unpack_time_min
from pipeline.roads.rulebook import load_rules
from pipeline.roads.speeds import read_duration_min, read_limit_kmh
from tests.roads.worlds import ROAD, STEP_KM, Ways, a_study, arcs_between, graph_of

W, M, E, N = (0.0, 0.0), (0.01, 0.0), (0.02, 0.0), (0.01, 0.01)
PLACES = {"w": W, "m": M, "e": E, "n": N}
SPEED = load_rules(a_study().roads).speed


def with_road(folder: Path, tags: dict[str, str], **roads: object) -> RoadGraph:
    """``w ──tags── m ──ordinary── e``."""
    return graph_of(folder, PLACES, [("w m", tags), ("m e", ROAD)], **roads)[0]


def minutes(graph: RoadGraph) -> float:
    """Time of the edge that starts or ends at w."""
    west = int(graph.node_lon_e7.argmin())
    edge = int(((graph.edge_start == west) | (graph.edge_end == west)).argmax())
    return float(unpack_time_min(graph.edge_forward_cost[edge]))


@pytest.mark.parametrize(
    ("tags", "forward", "backward"),
    [
        ({}, True, True),
        ({"oneway": "yes"}, True, False),
        ({"oneway": "true"}, True, False),
        ({"oneway": "1"}, True, False),
        ({"oneway": "-1"}, False, True),
        ({"oneway": "reverse"}, False, True),
        ({"oneway": "no"}, True, True),
        ({"junction": "roundabout"}, True, False),
        ({"junction": "circular"}, True, False),
        ({"highway": "motorway"}, True, False),
        ({"highway": "motorway", "oneway": "no"}, True, True),
        ({"highway": "motorway_link"}, True, True),
        ({"oneway": "yes", "oneway:motor_vehicle": "no"}, True, True),
        ({"oneway": "sometimes"}, True, True),
        ({"oneway": "alternating"}, True, True),
        ({"oneway": "reversible"}, False, False),
    ],
)
def test_direction(tmp_path: Path, tags: dict[str, str], forward: bool, backward: bool) -> None:
    """``w ──tags── m ──ordinary── e``: which of w → m and m → w are open."""
    arcs = arcs_between(with_road(tmp_path, ROAD | tags))
    if forward and backward:  # m is no junction then: the chain runs from w to e
        assert arcs == {(W, E), (E, W)}
    else:
        assert ((W, M) in arcs, (M, W) in arcs) == (forward, backward)


@pytest.mark.parametrize(
    ("tags", "is_open"),
    [
        ({"access": "no"}, False),
        ({"access": "private"}, False),
        ({"access": "permit"}, False),
        ({"motor_vehicle": "agricultural"}, False),
        ({"motor_vehicle": "forestry"}, False),
        ({"access": "destination"}, True),
        ({"highway": "proposed", "proposed": "primary"}, False),
        ({"motor_vehicle": "no"}, False),
        ({"motorcar": "private"}, False),
        ({"vehicle": "no"}, False),
        ({"access": "no", "motor_vehicle": "yes"}, True),
        ({"access": "private", "vehicle": "no", "motorcar": "yes"}, True),
        ({"access": "yes", "motor_vehicle": "no"}, False),
        ({"motor_vehicle": "no", "motorcar": "permissive"}, True),
        ({"access": "no", "bicycle": "yes"}, False),
        ({"construction": "minor"}, True),
        ({"highway": "construction", "construction": "primary"}, False),
        ({"highway": "footway"}, False),
        ({"highway": "track"}, False),
    ],
)
def test_access(tmp_path: Path, tags: dict[str, str], is_open: bool) -> None:
    """``w ──tags── m ──ordinary── e``: whether a car gets as far as w."""
    arcs = arcs_between(with_road(tmp_path, ROAD | tags))
    assert any(W in arc for arc in arcs) == is_open


def test_tracks_are_roads_where_the_study_allows_them(tmp_path: Path) -> None:
    graph = with_road(tmp_path, {"highway": "track"}, tracks=True)
    assert any(W in arc for arc in arcs_between(graph))


@pytest.mark.parametrize(
    ("maxspeed", "kmh"),
    [("60", 60), ("60 km/h", 60), ("30 mph", 30 * 1.609344), ("none", 130), ("walk", 7)],
)
def test_speed_limit(tmp_path: Path, maxspeed: str, kmh: float) -> None:
    """One step w ── m of 1.11319 km at the limit."""
    places = {"w": W, "m": M}
    graph, _, _ = graph_of(tmp_path, places, [("w m", {"highway": "road", "maxspeed": maxspeed})])
    assert minutes(graph) == pytest.approx(STEP_KM / kmh * 60, abs=0.0001)


def test_unreadable_limit_is_counted_and_the_class_default_taken(tmp_path: Path) -> None:
    tags = {"highway": "secondary", "maxspeed": "fast"}
    graph, quality, _ = graph_of(tmp_path, {"w": W, "m": M}, [("w m", tags)])
    assert minutes(graph) == pytest.approx(STEP_KM / 70 * 60, abs=0.0001)
    counted = quality.set_index(["measure", "road_class"])["value"]
    assert counted["unreadable speed limits", "all"] == 1
    assert counted["share with a speed limit", "secondary"] == 0


def test_limits_by_direction(tmp_path: Path) -> None:
    """60 from w to m, 30 back."""
    tags = {"highway": "road", "maxspeed": "60", "maxspeed:backward": "30"}
    graph, _, _ = graph_of(tmp_path, {"w": W, "m": M}, [("w m", tags)])
    there, back = graph.edge_forward_cost[0], graph.edge_backward_cost[0]
    assert sorted(unpack_time_min(cost) for cost in (there, back)) == pytest.approx(
        [STEP_KM, 2 * STEP_KM], abs=0.0001
    )


def test_study_replaces_class_speed_and_scales_all(tmp_path: Path) -> None:
    """40 km/h × 0.5 for untagged roads."""
    roads = {"class_speed_kmh": {"road": 40.0}, "speed_factor": 0.5}
    graph, _, _ = graph_of(tmp_path, {"w": W, "m": M}, [("w m", {"highway": "road"})], **roads)
    assert minutes(graph) == pytest.approx(STEP_KM / 20 * 60, abs=0.0001)


def test_unknown_class_in_the_study_is_refused(tmp_path: Path) -> None:
    with pytest.raises(StudyError, match="'raod' is no road class"):
        graph_of(tmp_path, PLACES, [("w m", ROAD)], class_speed_kmh={"raod": 40.0})


def test_unpaved_and_toll_lengths_of_a_chain(tmp_path: Path) -> None:
    """w ──gravel── m ──paved── e is one edge of two steps, one of them unpaved.

    A toll road is never joined with another: w ──free── m ──toll── e are two edges.
    """
    ways: Ways = [("w m", ROAD | {"surface": "gravel"}), ("m e", ROAD)]
    graph, _, _ = graph_of(tmp_path, PLACES, ways)
    assert graph.edges == 1
    assert unpack_distance_km(graph.edge_forward_cost[0]) == pytest.approx(2 * STEP_KM, abs=1e-5)
    assert graph.edge_unpaved_m[0] == pytest.approx(1000 * STEP_KM, abs=0.01)
    graph, _, _ = graph_of(tmp_path, PLACES, [("w m", ROAD), ("m e", ROAD | {"toll": "yes"})])
    assert sorted(graph.edge_toll_m) == pytest.approx([0, 1000 * STEP_KM], abs=0.01)


@pytest.mark.parametrize(
    ("tags", "crossing_min"),
    [
        ({"duration": "0:10"}, 10),
        ({"duration": "10"}, 10),
        ({"duration": "PT10M"}, 10),
        ({}, STEP_KM / 20 * 60),
        ({"duration": "soon"}, STEP_KM / 20 * 60),
        ({"duration": "0:00:10"}, STEP_KM / 20 * 60),  # 400 km/h is not believed
    ],
)
def test_ferry_time(tmp_path: Path, tags: dict[str, str], crossing_min: float) -> None:
    """w ──road── m ~~ferry~~ e: boarding at m takes 5 minutes, leaving at e nothing."""
    ways: Ways = [("w m", ROAD), ("m e", {"route": "ferry"} | tags)]
    graph, _, _ = graph_of(tmp_path, PLACES, ways, ferry_wait_min=5.0)
    ferry = int(graph.edge_is_ferry.argmax())
    costs = (graph.edge_forward_cost[ferry], graph.edge_backward_cost[ferry])
    assert sorted(float(unpack_time_min(cost)) for cost in costs) == pytest.approx(
        [crossing_min, crossing_min + 5], abs=0.001
    )


@pytest.mark.parametrize(
    ("ferries", "tags", "ferry_edges"),
    [
        ("all", {}, 1),
        ("all", {"motor_vehicle": "no"}, 0),
        ("all", {"motorcar": "no"}, 0),
        ("car_tagged", {}, 0),
        ("car_tagged", {"motor_vehicle": "yes"}, 1),
        ("none", {"motorcar": "yes"}, 0),
    ],
)
def test_which_ferries_are_used(
    tmp_path: Path, ferries: str, tags: dict[str, str], ferry_edges: int
) -> None:
    ways: Ways = [("w m", ROAD), ("m e", {"route": "ferry"} | tags)]
    graph, _, _ = graph_of(tmp_path, PLACES, ways, ferries=ferries)
    assert int(graph.edge_is_ferry.sum()) == ferry_edges


def test_extract_without_open_roads_is_refused(tmp_path: Path) -> None:
    with pytest.raises(RoadsError, match="none of the 1 ways"):
        graph_of(tmp_path, PLACES, [("w m", {"highway": "path"})])


def test_limits_as_people_tag_them() -> None:
    assert read_limit_kmh("20 knots", SPEED) == pytest.approx(37.04)
    assert read_limit_kmh("50kmh", SPEED) == 50
    assert read_limit_kmh("70; 50", SPEED) == 50
    assert read_limit_kmh("signals;60", SPEED) == 60
    assert read_limit_kmh("DE:rural", SPEED) == 100
    assert read_limit_kmh("DE:zone30", SPEED) == read_limit_kmh("de:zone:30", SPEED) == 30
    assert read_limit_kmh("GB:zone20", SPEED) == pytest.approx(32.187, abs=1e-3)
    for unreadable in ("", "fast", "fast;slow", "0", "999", "-50", "XX:urban", "50 mps"):
        assert math.isnan(read_limit_kmh(unreadable, SPEED)), unreadable


def test_durations_as_people_tag_them() -> None:
    assert read_duration_min("1:05") == 65
    assert read_duration_min("01:05:30") == 65.5
    assert read_duration_min("PT1H5M") == 65
    assert read_duration_min("90") == 90
    for unreadable in ("", "0", "PT", "1:75", "an hour", "0:00"):
        assert math.isnan(read_duration_min(unreadable)), unreadable
