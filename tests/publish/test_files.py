"""The files that people take away, read back by other readers than the ones that wrote them."""

from __future__ import annotations

import csv
import hashlib
import json
import sqlite3
from contextlib import closing
from pathlib import Path
from typing import Any

import geopandas as gpd
import numpy as np
import pandas as pd
import pyogrio
import pytest
import shapely

from pipeline.publish import Publication
from tests.publish.conftest import COST, MERE, SITE, make_publication, make_study, make_tables

LAYERS = ["zones", "zone_points", "routes", "roads_used", "sites"]


def digests(folder: Path) -> dict[str, str]:
    files = sorted(path for path in folder.rglob("*") if path.is_file())
    return {
        path.relative_to(folder).as_posix(): hashlib.sha256(path.read_bytes()).hexdigest()
        for path in files
    }


def read_json(path: Path) -> Any:
    return json.loads(path.read_text(encoding="utf-8"))


def test_the_same_run_gives_the_same_bytes_in_another_folder(folder: Path, tmp_path: Path) -> None:
    make_publication().write(tmp_path)
    assert digests(tmp_path) == digests(folder)
    assert len(digests(folder)) == 1 + 3 + 6 + 2 * len(LAYERS) + 2 * 13 + 1


def test_geopackage_header_says_1_2(folder: Path) -> None:
    """OGC 12-128r14 (GeoPackage 1.2), requirement 2: 'GPKG' at byte 68, version 10200 at 60."""
    header = (folder / "fenland.gpkg").read_bytes()[:100]
    assert header[68:72] == b"GPKG"
    assert int.from_bytes(header[60:64], "big") == 10200


def test_geopackage_layers_open_and_hold_every_zone(folder: Path) -> None:
    path = folder / "fenland.gpkg"
    assert [str(name) for name in pyogrio.list_layers(path)[:, 0]] == [*LAYERS, "layer_styles"]
    zones = gpd.read_file(path, layer="zones", engine="pyogrio")
    assert list(zones["zone_id"]) == list(COST)
    assert list(zones["in_market"].astype(bool)) == [zone != "009" for zone in COST]
    assert zones.set_index("zone_id").loc["005", "annual_surplus"] == pytest.approx(5 * 81)
    assert zones.crs is not None
    assert zones.crs.to_epsg() == 4326


def test_geopackage_tables_are_sound(folder: Path) -> None:
    with closing(sqlite3.connect(folder / "fenland.gpkg")) as database:
        assert database.execute("PRAGMA integrity_check").fetchone() == ("ok",)
        assert database.execute("PRAGMA foreign_key_check").fetchall() == []
        times = database.execute("SELECT DISTINCT last_change FROM gpkg_contents").fetchall()
    assert times == [("1970-01-01T00:00:00.000Z",)]


def test_geopackage_is_projected_as_the_study_says(tmp_path: Path) -> None:
    make_publication(make_study(publish={"crs": "EPSG:3035"})).write(tmp_path)
    zones = gpd.read_file(tmp_path / "fenland.gpkg", layer="zones")
    assert zones.crs is not None
    assert zones.crs.to_epsg() == 3035
    site = gpd.read_file(tmp_path / "geojson" / "sites.geojson").iloc[0]
    assert site.geometry.coords[0] == (8.15, 50.11)


@pytest.mark.parametrize("layer", LAYERS)
def test_geojson_keeps_rfc_7946(folder: Path, layer: str) -> None:
    check_rfc_7946(folder / "geojson" / f"{layer}.geojson")


def check_rfc_7946(path: Path) -> None:
    """RFC 7946: no crs member (4), right-hand rule (3.1.6), WGS 84 with 6 decimals (11.2)."""
    content = read_json(path)
    assert content["type"] == "FeatureCollection"
    assert "crs" not in content
    assert content["features"]
    for feature in content["features"]:
        shape = shapely.geometry.shape(feature["geometry"])
        points = shapely.get_coordinates(shape)
        assert np.abs(points).max() <= 180
        assert np.array_equal(points, points.round(6))
        for part in shapely.get_parts(shape):
            if part.geom_type == "Polygon":
                assert shapely.is_ccw(part.exterior)
                assert not any(shapely.is_ccw(hole) for hole in part.interiors)


def test_zone_ids_come_out_as_they_came_in(folder: Path) -> None:
    features = read_json(folder / "geojson" / "zones.geojson")["features"]
    assert [feature["properties"]["zone_id"] for feature in features] == list(COST)
    with (folder / "tables" / "zone_table.csv").open(encoding="utf-8", newline="") as stream:
        assert [row["zone_id"] for row in csv.DictReader(stream)] == list(COST)


def test_csv_keeps_rfc_4180_and_every_figure(folder: Path, publication: Publication) -> None:
    """RFC 4180: CRLF at the end of every record, quotes around fields that hold commas."""
    raw = (folder / "tables" / "estimates.csv").read_bytes()
    assert raw.count(b"\r\n") == raw.count(b"\n") == 6
    for name, table in publication.tables.items():
        back = pd.read_csv(folder / "tables" / f"{name}.csv", dtype={"zone_id": str})
        columns = [c for c in table.columns if pd.api.types.is_float_dtype(table[c])]
        np.testing.assert_array_equal(back[columns], table[columns])
        assert list(back.columns) == [c for c in table.columns if c != "geometry"]


def test_parquet_equals_csv(folder: Path, publication: Publication) -> None:
    back = pd.read_parquet(folder / "tables" / "zone_table.parquet")
    pd.testing.assert_frame_equal(back, publication.tables["zone_table"])


def test_the_dictionary_explains_every_column(folder: Path, publication: Publication) -> None:
    dictionary = pd.read_csv(folder / "tables" / "data_dictionary.csv", keep_default_na=False)
    explained = set(zip(dictionary["table"], dictionary["column"], strict=True))
    written = {
        (name, column)
        for name, table in publication.tables.items()
        for column in table.columns
        if column != "geometry"
    }
    assert explained == written
    assert (dictionary["meaning"] != "").all()
    price = dictionary[dictionary["column"] == "travel_cost"]["unit"]
    assert set(price) == {"EUR"}


def test_run_json_says_what_was_used_and_found(folder: Path, publication: Publication) -> None:
    run = read_json(folder / "run.json")
    assert run["inputs"] == [
        {"name": "visits.csv", "role": "visits.file", "bytes": 1234, "sha256": "ab" * 32}
    ]
    assert run["settings"]["costs"]["vehicle_cost_per_km"] == 0.25
    assert (run["seed"], run["study"]["currency"]) == (1, "EUR")
    surplus = publication.tables["surplus"].set_index(["measure", "method"])["value"]
    (headline,) = run["headline"]
    assert headline["annual_surplus"]["value"] == surplus["annual_surplus", "simulated"]
    assert headline["surplus_per_trip"]["method"] == "simulated"
    assert headline["visits"] == publication.tables["zone_table"]["visits"].sum()


def test_roads_used_carry_the_visits_of_the_zones_behind_them(publication: Publication) -> None:
    """The last stretch from the main road to the fen carries everybody but 002."""
    roads = publication.layers["roads_used"]
    fen = roads[roads["site_id"] == SITE]
    table = publication.tables["zone_table"].set_index("zone_id")["visits"]
    last = fen[fen.intersects(shapely.Point(8.15, 50.12).buffer(1e-6))]
    assert list(last["visits"]) == [table.sum() - table["002"]]
    assert list(last["zones"]) == [8]
    west = fen[fen.intersects(shapely.Point(8.125, 50.15).buffer(1e-6))]
    assert list(west["visits"]) == [table[["001", "004", "007"]].sum()]
    assert roads.loc[roads["site_id"] == MERE, "visits"].isna().all()


def test_a_study_that_brings_a_finished_table_has_tables_only(tmp_path: Path) -> None:
    nothing = dict.fromkeys(
        ("origin_summary", "road_quality", "road_lines", "routes", "route_lines", "zones")
    )
    publication = make_publication(**nothing, sites=None, costs=None)
    publication.write(tmp_path)
    assert publication.layers == {}
    assert not list(tmp_path.glob("*.gpkg"))
    assert (tmp_path / "tables" / "zone_table.csv").is_file()


def test_records_of_people_are_never_written(tmp_path: Path) -> None:
    trips = pd.DataFrame(
        {
            "record_id": [f"permit-{n}" for n in range(40)],
            "site_id": SITE,
            "trips": np.tile([1.0, 2.0, 3.0, 4.0], 10),
            "travel_cost": np.linspace(2.0, 12.0, 40),
        }
    )
    publication = make_publication(trip_table=trips, zone_table=None)
    publication.write(tmp_path)
    written = b"".join(path.read_bytes() for path in tmp_path.rglob("*") if path.is_file())
    assert b"permit-" not in written
    assert "trip_table" not in publication.tables


def test_arguments_are_not_changed() -> None:
    tables, twin = make_tables(), make_tables()
    make_publication(make_study(publish={"suppress_below": 10}), **tables)
    for name, table in tables.items():
        if table is not None:
            pd.testing.assert_frame_equal(table, twin[name])
