"""How people travel: what a car, a motorcycle, a bicycle and people on foot may use.

Conventions: OpenStreetMap wiki, "OSM tags for routing/Access restrictions", Key:oneway:bicycle,
Key:barrier (from memory). Walking speed: Tobler, "Three presentations on geographical analysis
and modeling", 1993: 6 exp(-3.5 |slope + 0.05|) km/h, 5.04 on the level.
"""

from __future__ import annotations

import math
from pathlib import Path

import pytest

from pipeline.errors import StudyError
from pipeline.roads.rulebook import load_rules
from pipeline.routes import route
from tests.roads.worlds import (
    ROAD,
    STEP_KM,
    Places,
    Turns,
    Ways,
    a_study,
    graph_of,
    signed_graph_of,
    sites_at,
    zones_at,
)

W, M, E = (0.0, 0.0), (0.01, 0.0), (0.02, 0.0)
PLACES: Places = {"w": W, "m": M, "e": E}
PROFILES = ("car", "motorcycle", "bicycle", "foot")


def who_passes(folder: Path, tags: dict[str, str], *, homewards: bool = False) -> str:
    """Initials of the profiles that get from w to e: ``w ──ordinary── m ──tags── e``.

    A track of everybody's (w x e, much longer) makes both ends places that can be reached.
    """
    places = PLACES | {"x": (0.01, 0.1)}
    around = {"highway": "track", "access": "yes"}
    ways: Ways = [("w m", ROAD), ("m e", tags), ("w x e", around)]
    passing = ""
    start, end = (E, M) if homewards else (M, E)
    for profile in PROFILES:
        graph, _, _ = graph_of(folder, places, ways, profile=profile, tracks=True)
        study = a_study(routes={"zone_gap_speed_kmh": 5.0})
        row = route(zones_at({"z": start}), sites_at({"s": end}), graph, study=study)[0].iloc[0]
        passing += profile[0] if row["distance_km"] < 2 * STEP_KM else "-"
    return passing


@pytest.mark.parametrize(
    ("tags", "passing"),
    [
        ({"highway": "primary"}, "cmbf"),
        ({"highway": "motorway", "oneway": "no"}, "cm--"),
        ({"highway": "footway"}, "---f"),
        ({"highway": "footway", "bicycle": "yes"}, "--bf"),
        ({"highway": "footway", "access": "yes"}, "---f"),
        ({"highway": "cycleway"}, "--bf"),
        ({"highway": "steps"}, "---f"),
        ({"highway": "path"}, "--bf"),
        ({"highway": "path", "foot": "no"}, "--b-"),
        ({"highway": "path", "bicycle": "dismount"}, "---f"),
        ({"highway": "primary", "access": "no", "foot": "yes"}, "---f"),
        ({"highway": "primary", "vehicle": "no"}, "---f"),
        ({"highway": "primary", "motor_vehicle": "no"}, "--bf"),
        ({"highway": "primary", "motor_vehicle": "no", "motorcycle": "yes"}, "-mbf"),
        ({"highway": "primary", "motorcar": "no"}, "-mbf"),
        ({"highway": "primary", "bicycle": "use_sidepath"}, "cm-f"),
        ({"highway": "residential", "oneway": "-1"}, "---f"),
        ({"highway": "residential", "oneway": "-1", "oneway:bicycle": "no"}, "--bf"),
        ({"highway": "residential", "oneway:foot": "-1"}, "cmb-"),
        ({"highway": "primary", "toll": "yes", "ford": "yes", "4wd_only": "yes"}, "--bf"),
    ],
)
def test_who_passes(tmp_path: Path, tags: dict[str, str], passing: str) -> None:
    """``w ──ordinary── m ──tags── e``, with a long way round."""
    assert who_passes(tmp_path, tags) == passing


def test_a_roundabout_binds_wheels_only(tmp_path: Path) -> None:
    tags = ROAD | {"junction": "roundabout"}
    assert who_passes(tmp_path, tags) == "cmbf"
    assert who_passes(tmp_path, tags, homewards=True) == "---f"


@pytest.mark.parametrize(
    ("barrier", "passing"),
    [("bollard", "--bf"), ("gate", "cmbf"), ("stile", "---f"), ("fence", "----")],
)
def test_barriers(tmp_path: Path, barrier: str, passing: str) -> None:
    """``w ── m ── e`` with the barrier at m: whether e is reached from w (it is from beyond m)."""
    found = ""
    for profile in PROFILES:
        graph, _, _ = signed_graph_of(
            tmp_path,
            PLACES,
            [("w m e", ROAD)],
            signs={"m": {"barrier": barrier}},
            roads={"profile": profile, "main_network_km": 0.5},
        )
        zones = zones_at({"z": W, "y": (0.015, 0.0)})
        status = route(zones, sites_at({"s": E}), graph, study=a_study())[0]["route_status"]
        assert status[1] == "routed"
        found += profile[0] if status[0] == "routed" else "-"
    assert found == passing


@pytest.mark.parametrize(
    ("tags", "passing"),
    [
        ({"restriction": "no_straight_on"}, "---f"),
        ({"restriction": "no_straight_on", "except": "bicycle"}, "--bf"),
        ({"restriction": "no_straight_on", "except": "motorcar;motorcycle"}, "cm-f"),
        ({"restriction:bicycle": "no_straight_on"}, "cm-f"),
    ],
)
def test_turns(tmp_path: Path, tags: dict[str, str], passing: str) -> None:
    """``w ── m ── e`` with a side road m ── n: straight on from w is forbidden at m.

    Who must not go straight on turns round at n: two steps more.
    """
    ways: Ways = [("w m", ROAD), ("m e", ROAD), ("m n", ROAD)]
    turns: Turns = [("1 m 2", tags)]
    found = ""
    for profile in PROFILES:
        graph, _, _ = signed_graph_of(
            tmp_path, PLACES | {"n": (0.01, 0.01)}, ways, turns=turns, roads={"profile": profile}
        )
        row = route(zones_at({"z": W}), sites_at({"s": E}), graph, study=a_study())[0].iloc[0]
        found += profile[0] if row["distance_km"] < 2.5 * STEP_KM else "-"
    assert found == passing


@pytest.mark.parametrize(
    ("profile", "tags", "kmh"),
    [
        ("car", {"highway": "primary", "maxspeed": "100"}, 100),
        ("bicycle", {"highway": "primary", "maxspeed": "100"}, 16),
        ("bicycle", {"highway": "primary", "maxspeed": "10"}, 10),
        ("bicycle", {"highway": "path", "surface": "sand"}, 5),
        ("foot", {"highway": "footway"}, 5),
        ("foot", {"highway": "path", "smoothness": "bad"}, 4.5),
        ("foot", {"highway": "steps"}, 2.5),
    ],
)
def test_speeds(tmp_path: Path, profile: str, tags: dict[str, str], kmh: float) -> None:
    """``w ── e`` of two steps: a limit is driven by motor vehicles, and kept by others."""
    graph, _, _ = graph_of(tmp_path, PLACES, [("w e", tags)], profile=profile)
    row = route(zones_at({"z": W}), sites_at({"s": E}), graph, study=a_study())[0].iloc[0]
    assert row["drive_time_min"] == pytest.approx(2 * STEP_KM / kmh * 60, abs=1e-2)


def test_walking_speed_is_toblers() -> None:
    foot = load_rules(a_study(roads={"profile": "foot"}).roads)
    kmh = foot.class_kmh[foot.classes.index("footway")]
    assert kmh == pytest.approx(6 * math.exp(-3.5 * 0.05), abs=0.05)


def test_water_is_walked_for_on_paths(tmp_path: Path) -> None:
    """The well at e: on foot by the path w ── e; by car round by the road w ── n ── e.

    The zone's point lies 0.001 degrees off the path (110.6 m, walked at 4 km/h).
    """
    places = PLACES | {"n": (0.01, 0.02)}
    ways: Ways = [("w m e", {"highway": "path"}), ("w n e", ROAD)]
    graph, _, _ = graph_of(tmp_path, places, ways, profile="foot")
    study = a_study(routes={"zone_gap_speed_kmh": 4.0, "site_gap_speed_kmh": 4.0})
    zones, sites = zones_at({"village": (0.005, -0.001)}), sites_at({"well": E})
    row = route(zones, sites, graph, study=study)[0].iloc[0]
    assert row["distance_km"] == pytest.approx(1.5 * STEP_KM + 0.11057, abs=1e-4)
    minutes = 1.5 * STEP_KM / 4.5 * 60 + 0.11057 / 4 * 60
    assert row["drive_time_min"] == pytest.approx(minutes, abs=0.02)


@pytest.mark.parametrize(
    ("rules", "tags", "kmh"),
    [
        ({"unpaved_kmh": {"gravel": 45.0}}, {"surface": "gravel"}, 45),
        ({"unpaved_kmh": {"laterite": 35.0}}, {"surface": "laterite"}, 35),
        ({"smoothness_kmh": {"bad": 20.0}}, {"smoothness": "bad"}, 20),
        ({"tracktype_kmh": {"grade2": 25.0}}, {"tracktype": "grade2"}, 25),
        ({"speed": {"none_kmh": 140}}, {"maxspeed": "none"}, 140),
        ({"classes": {"primary": {"kmh": 55.0}}}, {"maxspeed": "odd"}, 55),
        ({"classes": {"ice_road": {"kmh": 45.0}}}, {"highway": "ice_road", "maxspeed": ""}, 45),
    ],
)
def test_a_study_replaces_any_figure(
    tmp_path: Path, rules: dict[str, object], tags: dict[str, str], kmh: float
) -> None:
    """``w ── e`` of two steps, of class primary with a limit of 60 unless the tags say so."""
    graph, _, _ = graph_of(tmp_path, PLACES, [("w e", ROAD | tags)], rules=rules)
    row = route(zones_at({"z": W}), sites_at({"s": E}), graph, study=a_study())[0].iloc[0]
    assert row["drive_time_min"] == pytest.approx(2 * STEP_KM / kmh * 60, abs=1e-2)


def test_a_study_replaces_any_list(tmp_path: Path) -> None:
    """A gate is closed where the study says so, and a private road open."""
    rules = {"access": {"closed": ["no"], "open": ["yes", "private"]}}
    ways: Ways = [("w m", ROAD), ("m e", ROAD | {"access": "private"})]
    graph, _, _ = graph_of(tmp_path, PLACES, ways, rules=rules)
    row = route(zones_at({"z": W}), sites_at({"s": E}), graph, study=a_study())[0].iloc[0]
    assert row["distance_km"] == pytest.approx(2 * STEP_KM, abs=1e-5)


@pytest.mark.parametrize(
    ("rules", "said"),
    [
        ({"unpavd_kmh": {"gravel": 45.0}}, "'unpavd_kmh' is no section .* 'unpaved_kmh'"),
        ({"speed": {"walk": 5.0}}, "'walk' is not known; the nearest is 'walk_kmh'"),
        ({"unpaved_kmh": {"gravel": "slow"}}, "not of the kind that it replaces"),
        ({"classes": {"new": {"oneway": True}}}, "a new class needs its kmh"),
    ],
)
def test_a_wrong_rule_is_refused(rules: dict[str, object], said: str) -> None:
    with pytest.raises(StudyError, match=said):
        load_rules(a_study(roads={"rules": rules}).roads)


def test_slower_where_it_is_rough(tmp_path: Path) -> None:
    """w ──gravel (60 at most) × 0.5── m ──for four wheels × 0.25── e, both at 60."""
    ways: Ways = [("w m", ROAD | {"surface": "gravel"}), ("m e", ROAD | {"4wd_only": "yes"})]
    graph, _, _ = graph_of(
        tmp_path,
        PLACES,
        ways,
        four_wheel_drive=True,
        unpaved_speed_factor=0.5,
        rough_speed_factor=0.25,
    )
    row = route(zones_at({"z": W}), sites_at({"s": E}), graph, study=a_study())[0].iloc[0]
    assert row["drive_time_min"] == pytest.approx(2 * STEP_KM + 4 * STEP_KM, abs=1e-2)


def test_a_toll_way_that_is_not_tagged(tmp_path: Path) -> None:
    graph, _, _ = graph_of(tmp_path, PLACES, [("w m", ROAD), ("m e", ROAD)], toll_ways=[2])
    row = route(zones_at({"z": W}), sites_at({"s": E}), graph, study=a_study())[0].iloc[0]
    assert row["toll_km"] == pytest.approx(STEP_KM, abs=1e-5)
