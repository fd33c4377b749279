"""Layers as GeoJSON and GeoParquet; same layers, same bytes."""

from __future__ import annotations

from pathlib import Path

import geopandas as gpd
import pyogrio


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


def write_geoparquet(layer: gpd.GeoDataFrame, path: Path, *, crs: str) -> None:
    """Write one layer as GeoParquet 1.1 with a bounding box per row, packed by Zstandard.

    The column `bbox` and its entry under ``covering`` let a reader skip rows that lie elsewhere.
    """
    layer.to_crs(crs).to_parquet(
        path,
        index=False,
        compression="zstd",
        schema_version="1.1.0",
        geometry_encoding="WKB",
        write_covering_bbox=True,
    )
