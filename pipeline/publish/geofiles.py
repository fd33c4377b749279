"""Writing GIS layers: one GeoPackage for all, one GeoJSON for each; same layers, same bytes."""

from __future__ import annotations

import sqlite3
from contextlib import closing
from pathlib import Path

import geopandas as gpd
import pyogrio
import shapely

LAYER_WORDS = {
    "zones": "Zones of origin with visits, travel cost and surplus",
    "zone_points": "Zones of origin at the points that their routes start from",
    "routes": "Fastest route from every zone to every site",
    "roads_used": "Roads that the routes run over, with the visits they carry",
    "sites": "Access points of the sites and their substitutes, with the sites' values",
}
FIXED_TIME = "1970-01-01T00:00:00.000Z"
"""Stands for the time of writing, so that the same layers give the same bytes."""


def write_geopackage(layers: dict[str, gpd.GeoDataFrame], path: Path, *, crs: str) -> None:
    """Write the layers as a GeoPackage 1.2 (OGC 12-128r14), projected to `crs`.

    Times are fixed and the file is repacked, so that the same layers give the same bytes.
    """
    for name, layer in layers.items():
        pyogrio.write_dataframe(
            layer.to_crs(crs),
            path,
            layer=name,
            driver="GPKG",
            promote_to_multi=_is_multi(layer),
            dataset_options={"VERSION": "1.2"},
            layer_options={
                "GEOMETRY_NAME": "geom",
                "FID": "fid",
                "IDENTIFIER": name,
                "DESCRIPTION": describe_layer(name),
            },
        )
    with closing(sqlite3.connect(path)) as database:
        database.execute("UPDATE gpkg_contents SET last_change = ?", (FIXED_TIME,))
        database.commit()
        database.execute("VACUUM")


def describe_layer(name: str) -> str:
    """What a layer holds, in one line."""
    if name in LAYER_WORDS:
        return LAYER_WORDS[name]
    return f"{LAYER_WORDS['zones']}: site {name.removeprefix('zones_')}"


def write_geojson(layer: gpd.GeoDataFrame, path: Path) -> None:
    """Write one layer as GeoJSON (RFC 7946): WGS 84, right-hand rule, 6 decimals, no crs."""
    pyogrio.write_dataframe(
        layer.to_crs("EPSG:4326"),
        path,
        driver="GeoJSON",
        layer_options={
            "RFC7946": "YES",
            "COORDINATE_PRECISION": "6",
            "WRITE_NAME": "NO",
            "AUTODETECT_JSON_STRINGS": "NO",
        },
    )


def _is_multi(layer: gpd.GeoDataFrame) -> bool:
    """Whether the layer's geometries are lines or areas, which are written as collections."""
    return bool((shapely.get_dimensions(layer.geometry.to_numpy()) > 0).any())
