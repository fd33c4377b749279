"""Trips inside their own zone, and zones of several points.

Published: the mean distance from the centre of a disc is 2R/3 and from its edge 32R/9π (Santaló,
"Integral Geometry and Geometric Probability", 1976; from memory). Everything between and beyond
is held against quadrature.
"""

from __future__ import annotations

from pathlib import Path

import geopandas as gpd
import numpy as np
import pandas as pd
import pytest
import shapely
from scipy.integrate import quad

from pipeline.errors import RouteError
from pipeline.routes import route
from pipeline.within_zone import mean_distance_in_disc
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
WAYS: Ways = [("a b c d e", ROAD)]


def by_quadrature(offset: float) -> float:
    """Mean distance from a point to a disc of radius 1, in polar coordinates about the point.

    Along a ray at an angle t from the centre's direction the disc lies between two distances;
    the mean is the integral of their cubes' difference, by 3, over the area.
    """

    def along(t: float) -> float:
        middle, half = offset * np.cos(t), np.sqrt(max(1 - (offset * np.sin(t)) ** 2, 0))
        near = middle - half if offset > 1 else 0.0
        return float(((middle + half) ** 3 - near**3) / 3)

    reach = np.arcsin(1 / offset) if offset > 1 else np.pi
    return float(quad(along, -reach, reach, epsabs=1e-10, limit=200)[0] / np.pi)


@pytest.mark.parametrize(
    ("offset", "mean"),
    [(0.0, 2 / 3), (1.0, 32 / (9 * np.pi)), *((x, by_quadrature(x)) for x in (0.3, 0.8, 1.5, 4.0))],
)
def test_mean_distance_to_a_disc(offset: float, mean: float) -> None:
    found = mean_distance_in_disc(np.array([7.0]), np.array([7.0 * offset]))
    assert found[0] == pytest.approx(7.0 * mean, rel=1e-7)


def square(west: float, south: float, side: float) -> shapely.Polygon:
    return shapely.box(west, south, west + side, south + side)


def zones_of(shapes: dict[str, shapely.Polygon]) -> gpd.GeoDataFrame:
    points = {name: (shape.centroid.x, shape.centroid.y) for name, shape in shapes.items()}
    return gpd.GeoDataFrame(zones_at(points), geometry=list(shapes.values()), crs="EPSG:4326")


def test_a_site_within_a_zone_of_one_point(tmp_path: Path) -> None:
    """Zones of 0.02 by 0.02 degrees about b and d; the site 0.005 degrees east of b.

    Routed from b it is half a step; the people of the zone have further to go: the disc's radius
    is the square's side by √π, the site is half a step from its middle.
    """
    graph, _, _ = graph_of(tmp_path, LINE, WAYS)
    zones = zones_of({"w": square(0.0, -0.01, 0.02), "e": square(0.02, -0.01, 0.02)})
    sites = sites_at({"s": (0.015, 0.0)})
    keys: dict[str, object] = {"local_circuity": 1.2, "local_speed_kmh": 24.0}
    table = route(zones, sites, graph, study=a_study(routes=keys))[0].set_index("zone_id")
    # A degree of latitude is 110.574 km at the equator, of longitude 100 steps.
    radius_km = np.sqrt(2 * STEP_KM * 0.02 * 110.574 / np.pi)
    km = 1.2 * mean_distance_in_disc(np.array([radius_km]), np.array([STEP_KM / 2]))[0]
    assert table["route_status"].to_dict() == {"w": "within_zone", "e": "routed"}
    assert table.loc["w", "distance_km"] == pytest.approx(km, rel=1e-4)
    assert table.loc["w", "return_distance_km"] == pytest.approx(km, rel=1e-4)
    assert table.loc["w", "drive_time_min"] == pytest.approx(km / 24 * 60, rel=1e-4)
    assert table.loc["w", "ferry_km"] == 0
    assert table.loc["e", "distance_km"] == pytest.approx(1.5 * STEP_KM, abs=1e-5)


def points_of(zone_id: str, places: Places, weights: list[float]) -> pd.DataFrame:
    table = zones_at(places).assign(zone_id=zone_id, weight=weights)
    return table.assign(point_id=[str(n) for n in range(len(places))])


def test_several_points_by_their_people(tmp_path: Path) -> None:
    """z lives at a (three quarters) and c; s is at e: (3 × 4 + 1 × 2) ÷ 4 = 3.5 steps.

    The other zone has no finer point: its centroid d stands for it.
    """
    graph, _, _ = graph_of(tmp_path, LINE, WAYS)
    zones = zones_at({"z": LINE["b"], "y": LINE["d"]})
    points = points_of("z", {"1": LINE["a"], "2": LINE["c"]}, [0.75, 0.25])
    table, lines = route(zones, sites_at({"s": LINE["e"]}), graph, points, study=a_study())
    table = table.set_index("zone_id")
    assert table.loc["z", "distance_km"] == pytest.approx(3.5 * STEP_KM, abs=1e-5)
    assert table.loc["z", "drive_time_min"] == pytest.approx(3.5 * STEP_KM, abs=1e-3)
    assert table.loc["y", "distance_km"] == pytest.approx(STEP_KM, abs=1e-5)
    assert table["routed_share"].tolist() == [1, 1]
    # The line drawn is that of the point with most people.
    assert lines.set_index("zone_id").geometry["z"].length == pytest.approx(0.04, abs=1e-6)


def test_points_without_a_route_leave_the_mean_to_the_others(tmp_path: Path) -> None:
    """A fifth of z's people live 1 degree off every road, the others at a and b: (4 + 3) ÷ 2."""
    graph, _, _ = graph_of(tmp_path, LINE, WAYS)
    zones = zones_at({"z": LINE["b"]})
    places = {"1": LINE["a"], "2": LINE["b"], "3": (0.0, 1.0)}
    points = points_of("z", places, [0.4, 0.4, 0.2])
    row = route(zones, sites_at({"s": LINE["e"]}), graph, points, study=a_study())[0].iloc[0]
    assert row["route_status"] == "routed"
    assert row["routed_share"] == pytest.approx(0.8)
    assert row["distance_km"] == pytest.approx(3.5 * STEP_KM, abs=1e-5)


def test_each_point_takes_the_access_point_that_suits_it(tmp_path: Path) -> None:
    """Gates at a and e: of z's people at b and d most take the west gate; all go one step."""
    graph, _, _ = graph_of(tmp_path, LINE, WAYS)
    zones = zones_at({"z": LINE["c"], "y": LINE["c"]})
    points = points_of("z", {"1": LINE["b"], "2": (0.031, 0.0)}, [0.6, 0.4])
    gates = sites_at({"west": LINE["a"], "east": LINE["e"]}, ["s", "s"])
    table = route(zones, gates, graph, points, study=a_study())[0].set_index("zone_id")
    assert table.loc["z", "access_id"] == "west"
    assert table.loc["z", "distance_km"] == pytest.approx((0.6 + 0.36) * STEP_KM, abs=1e-5)


def test_a_zone_with_points_uses_them_for_a_site_within(tmp_path: Path) -> None:
    """The site stands at b in the zone's middle; its people live at a and c, one step each way."""
    graph, _, _ = graph_of(tmp_path, LINE, WAYS)
    zones = zones_of({"z": square(-0.005, -0.015, 0.03)})
    points = points_of("z", {"1": LINE["a"], "2": LINE["c"]}, [0.5, 0.5])
    row = route(zones, sites_at({"s": LINE["b"]}), graph, points, study=a_study())[0].iloc[0]
    assert row["route_status"] == "within_zone"
    assert row["distance_km"] == pytest.approx(STEP_KM, abs=1e-5)


def test_a_zone_of_unknown_size_at_its_site_is_refused(tmp_path: Path) -> None:
    graph, _, _ = graph_of(tmp_path, LINE, WAYS)
    with pytest.raises(RouteError, match="stands at the very point of zone 'z'"):
        route(zones_at({"z": LINE["b"]}), sites_at({"s": LINE["b"]}), graph, study=a_study())


def test_a_point_of_no_zone_is_refused(tmp_path: Path) -> None:
    graph, _, _ = graph_of(tmp_path, LINE, WAYS)
    points = points_of("y", {"1": LINE["a"]}, [1.0])
    zones, sites = zones_at({"z": LINE["b"]}), sites_at({"s": LINE["e"]})
    with pytest.raises(RouteError, match="1 of 1 zone points belong to no zone"):
        route(zones, sites, graph, points, study=a_study())
