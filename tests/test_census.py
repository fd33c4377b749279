"""Census figures carried over to zones, and centroids from finer points; worked by hand.

Zones are two squares of 0.1 degrees side by side, west and east of 10.1° E at 50° N; census units
are strips and squares over them.
"""

from __future__ import annotations

import itertools
from pathlib import Path
from typing import Any

import geopandas as gpd
import numpy as np
import pandas as pd
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from tobler.area_weighted import area_interpolate

from pipeline.census import weighted_points
from pipeline.errors import InputError, TableError
from pipeline.inputs import read_zone_points, read_zones
from pipeline.overlay import carried_averages, carried_counts, measuring_crs, unit_shares
from pipeline.study import Study
from pipeline.tables import ZonePoints
from tests.visit_world import make_study

WGS84 = "EPSG:4326"
ZONES = gpd.GeoSeries(
    [shapely.box(10.0, 50, 10.1, 50.1), shapely.box(10.1, 50, 10.2, 50.1)], crs=WGS84
)


def boxes(*bounds: tuple[float, float, float, float]) -> gpd.GeoSeries:
    return gpd.GeoSeries([shapely.box(*box) for box in bounds], crs=WGS84)


def census_study(folder: Path, units: gpd.GeoDataFrame, **census: Any) -> Study:
    """A study on disk with the two zones and a census layer."""
    zones = gpd.GeoDataFrame({"zone_id": ["west", "east"]}, geometry=ZONES)
    zones.to_file(folder / "zones.gpkg")
    units.to_file(folder / "census.gpkg")
    points = census.pop("points", {})
    keys = census.pop("zones", {})
    section = {"file": "census.gpkg", **census}
    return make_study(
        folder, zones={"file": "zones.gpkg", "census": section, "points": points, **keys}
    )


def three_units() -> gpd.GeoDataFrame:
    """One unit in the west, one half in each zone, one three quarters in the east."""
    strips = boxes((10.0, 50, 10.05, 50.1), (10.05, 50, 10.15, 50.1), (10.15, 50, 10.20, 50.1))
    return gpd.GeoDataFrame(
        {
            "unit_id": ["a", "b", "c"],
            "population": [100, 60, 40],
            "income": [10_000.0, 20_000, np.nan],
            "homes": [10, 20, 30],
        },
        geometry=strips,
    )


def test_people_by_area(tmp_path: Path) -> None:
    """West: 100 + half of 60 = 130; east 30 + 40 = 70; income weighted by the people."""
    study = census_study(
        tmp_path,
        three_units(),
        household_income="income",
        counts=("homes",),
        zones={"covariates": ("homes",)},
    )
    zones = read_zones(study).set_index("zone_id")
    assert zones["population"].to_dict() == pytest.approx({"west": 130, "east": 70}, rel=1e-9)
    assert zones["homes"].to_dict() == pytest.approx({"west": 20, "east": 40}, rel=1e-9)
    income = {"west": (100 * 10_000 + 30 * 20_000) / 130, "east": 20_000}
    assert zones["household_income"].to_dict() == pytest.approx(income, rel=1e-9)
    assert zones["census_cover_share"].to_numpy() == pytest.approx(1)


def test_people_by_finer_points(tmp_path: Path) -> None:
    """Of the middle unit's 60, three quarters live at a point in the east; unit a has no point."""
    pd.DataFrame({"lon": [10.09, 10.11, 10.17], "lat": 50.05, "population": [1, 3, 7]}).to_csv(
        tmp_path / "points.csv", index=False
    )
    study = census_study(tmp_path, three_units(), method="points", points={"file": "points.csv"})
    zones = read_zones(study).set_index("zone_id")
    assert zones["population"].to_dict() == pytest.approx({"west": 115, "east": 85})
    assert zones["centroid_source"].tolist() == ["population_weighted"] * 2
    assert zones["lon"].to_dict() == pytest.approx(
        {"west": 10.09, "east": (3 * 10.11 + 7 * 10.17) / 10}, abs=1e-5
    )


def test_people_outside_every_zone_stop_the_run(tmp_path: Path) -> None:
    units = three_units()
    strips = [*units.geometry[:2], shapely.box(10.15, 50, 10.25, 50.1)]  # half of c lies outside
    units = units.set_geometry(gpd.GeoSeries(strips, crs=WGS84))
    with pytest.raises(InputError, match=r"20 of 200 people \(10.0%\) .* in unit c \(20\)"):
        read_zones(census_study(tmp_path, units))
    zones = read_zones(census_study(tmp_path, units, max_outside_share=0.2))
    assert zones["population"].sum() == pytest.approx(180, abs=0.01)


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"population": [1, -1, 1]}, "'population' are missing or below 0; first: -1 in row 2"),
        ({"population": [0, 0, 0]}, "nobody lives in any census unit"),
        ({"homes": [1, np.nan, 1]}, "'homes' are missing or below 0; first: nan in row 2"),
    ],
)
def test_figures_that_cannot_be(
    tmp_path: Path, change: dict[str, list[float]], message: str
) -> None:
    study = census_study(tmp_path, three_units().assign(**change), counts=("homes",))
    with pytest.raises(TableError, match=message):
        read_zones(study)


def test_overlapping_units_are_refused() -> None:
    twice = boxes((10.0, 50, 10.1, 50.1), (10.0, 50, 10.08, 50.1))
    with pytest.raises(InputError, match="census units overlap each other: those over zone 1"):
        unit_shares(twice, ZONES)


CUTS = st.lists(st.floats(10.001, 10.199), min_size=1, max_size=6, unique=True)


@given(CUTS, st.lists(st.integers(0, 10_000), min_size=7, max_size=7), st.floats(0.0, 0.05))
@settings(derandomize=True, max_examples=40, deadline=None)
def test_people_are_conserved(cuts: list[float], numbers: list[int], beyond: float) -> None:
    """To the person: the zones' people and those outside add up to the units'."""
    edges = [10.0, *sorted(cuts), 10.2 + beyond]
    units = boxes(*((a, 50.0, b, 50.1) for a, b in itertools.pairwise(edges)))
    people = np.array(numbers[: len(units)], dtype=float)
    shares = unit_shares(units, ZONES)
    inside = carried_counts(people, shares, 2)
    assert inside.sum() + people @ shares.outside == pytest.approx(people.sum(), abs=1e-4)
    even = carried_averages(np.full(len(units), 7.0), people, shares, 2)
    assert even[np.isfinite(even)] == pytest.approx(7)


def test_the_same_as_the_tobler_library() -> None:
    """Area interpolation of a count and of an average against tobler's, in the same projection."""
    rng = np.random.default_rng(3)
    corners = [(10 + i * 0.04, 50 + j * 0.05) for i in range(5) for j in range(2)]
    units = boxes(*((x, y, x + 0.04, y + 0.05) for x, y in corners))
    people = rng.integers(1, 500, len(units)).astype(float)
    shares = unit_shares(units, ZONES)
    crs = measuring_crs(ZONES)
    source = gpd.GeoDataFrame({"people": people}, geometry=units).to_crs(crs)
    targets = gpd.GeoDataFrame(geometry=ZONES).to_crs(crs)
    theirs = area_interpolate(source, targets, ["people"])
    ours = carried_counts(people, shares, 2)
    assert ours == pytest.approx(theirs["people"].to_numpy(), rel=1e-6)


def test_several_places_per_zone(tmp_path: Path) -> None:
    """Four people in the west at two ends of the zone are two places; nobody in the east, one."""
    pd.DataFrame({"lon": [10.01, 10.012, 10.08, 10.09], "lat": 50.05}).to_csv(
        tmp_path / "points.csv", index=False
    )
    points = {"file": "points.csv", "per_zone": 2}
    study = census_study(tmp_path, three_units(), points=points)
    table = read_zone_points(study)
    assert table is not None
    table = ZonePoints.checked(table).set_index(["zone_id", "point_id"])
    assert table["weight"].to_dict() == {("east", "1"): 1, ("west", "1"): 0.5, ("west", "2"): 0.5}
    assert table["lon"]["west", "1"] == pytest.approx(10.011, abs=1e-5)
    assert table["lon"]["west", "2"] == pytest.approx(10.085, abs=1e-5)
    zones = read_zones(study).set_index("zone_id")
    assert zones["centroid_source"].to_dict() == {
        "west": "population_weighted",
        "east": "inside_polygon",
    }


@given(st.integers(1, 6), st.lists(st.integers(1, 50), min_size=1, max_size=20))
@settings(derandomize=True, max_examples=30, deadline=None)
def test_the_places_of_a_zone_share_its_people(per_zone: int, people: list[int]) -> None:
    lon = 10.0 + 0.1 * np.arange(len(people)) / len(people)
    points = gpd.GeoDataFrame(
        {"people": people}, geometry=gpd.points_from_xy(lon, np.full(len(people), 50.05)), crs=WGS84
    )
    found = weighted_points(ZONES, points, per_zone=per_zone)
    assert len(found) == min(per_zone, len(people))
    assert found["weight"].sum() == pytest.approx(1)
    # Whatever the groups, their mean is the zone's centroid.
    one = weighted_points(ZONES, points)
    assert (found["lon"] * found["weight"]).sum() == pytest.approx(one["lon"].iloc[0], abs=1e-6)
