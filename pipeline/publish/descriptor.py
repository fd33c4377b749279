"""datapackage.json: every file that people take away, by the Data Package standard (v1)."""

from __future__ import annotations

import hashlib
from pathlib import Path
from typing import Any

import geopandas as gpd
import pandas as pd

from pipeline.publish.geopackage import describe_layer

TYPES = {"number": "number", "integer": "integer", "boolean": "boolean"}
FIGURE_KINDS = {"png": "image/png", "svg": "image/svg+xml", "pdf": "application/pdf"}
ROLES = {
    "report.html": ("report", "html", "text/html", "The report: one page, no network needed"),
    "run.json": ("run", "json", "application/json", "What the run was made from, and its values"),
}


def data_package(
    folder: Path,
    *,
    manifest: dict[str, Any],
    tables: dict[str, pd.DataFrame],
    dictionary: pd.DataFrame,
    layers: dict[str, gpd.GeoDataFrame],
    attribution: str,
    figures: tuple[str, ...] = (),
) -> dict[str, Any]:
    """Describe the files in `folder`: title, sources, and one resource each with its SHA-256."""
    about = manifest["study"]
    resources = [_resource(folder, path, *words) for path, words in ROLES.items()]
    if layers:
        path, media = f"{about['name']}.gpkg", "application/geopackage+sqlite3"
        words = "All GIS layers with styles, labels and metadata"
        resources.append(_resource(folder, path, "layers", "gpkg", media, words))
    for name in layers:
        words = describe_layer(name)
        path = f"geojson/{name}.geojson"
        resources.append(
            _resource(folder, path, f"{name}-geojson", "geojson", "application/geo+json", words)
        )
        path = f"geoparquet/{name}.parquet"
        kind = "application/vnd.apache.parquet"
        resources.append(_resource(folder, path, f"{name}-geoparquet", "parquet", kind, words))
    resources += [
        _resource(folder, f"figures/{name}.{kind}", f"{name}-{kind}", kind, media, f"Figure {name}")
        for name in figures
        for kind, media in FIGURE_KINDS.items()
    ]
    for name, table in tables.items():
        rows = dictionary[dictionary["table"] == name]
        resources += _table_resources(folder, name, table, rows)
    resources.append(_dictionary_resource(folder))
    return {
        "profile": "data-package",
        "name": about["name"].lower().replace(" ", "-").replace("_", "-"),
        "title": about["title"],
        "description": about["notice"] or "Travel cost study: tables, GIS layers and report.",
        "licenses": [{"name": "other-attribution", "title": attribution}],
        "sources": [
            {"title": f"{file['name']} (sha256 {file['sha256']})"} for file in manifest["inputs"]
        ],
        "resources": resources,
    }


def _resource(
    folder: Path, path: str, name: str, kind: str, media: str, words: str
) -> dict[str, Any]:
    content = (folder / path).read_bytes()
    return {
        "name": name.replace("_", "-"),
        "type": "table" if kind == "csv" else "file",
        "path": path,
        "title": words,
        "format": kind,
        "mediatype": media,
        "bytes": len(content),
        "hash": f"sha256:{hashlib.sha256(content).hexdigest()}",
    }


def _table_resources(
    folder: Path, name: str, table: pd.DataFrame, rows: pd.DataFrame
) -> list[dict[str, Any]]:
    """A table as CSV with its schema, and its twin as Parquet."""
    words = f"Table {name}"
    csv = _csv_resource(folder, f"tables/{name}.csv", name, words)
    columns = table.columns.drop("geometry", errors="ignore")
    meanings = {str(row["column"]): row for row in rows.to_dict("records")}
    csv["schema"] = {
        "fields": [_field(column, meanings[column]) for column in columns],
        "missingValues": [""],
    }
    kind = "application/vnd.apache.parquet"
    path = f"tables/{name}.parquet"
    return [csv, _resource(folder, path, f"{name}-parquet", "parquet", kind, words)]


def _csv_resource(folder: Path, path: str, name: str, words: str) -> dict[str, Any]:
    resource = _resource(folder, path, name, "csv", "text/csv", words)
    return {
        **resource,
        "profile": "tabular-data-resource",
        "encoding": "utf-8",
        "dialect": {"delimiter": ",", "lineTerminator": "\r\n", "quoteChar": '"'},
    }


def _field(column: str, row: dict[Any, Any]) -> dict[str, Any]:
    kind = TYPES.get(str(row["type"]), "string")
    field: dict[str, Any] = {"name": column, "type": kind, "description": str(row["meaning"])}
    if kind == "boolean":
        field |= {"trueValues": ["True"], "falseValues": ["False"]}
    if row["unit"]:
        field["unit"] = str(row["unit"])
    if not row["missing_allowed"]:
        field["constraints"] = {"required": True}
    return field


def _dictionary_resource(folder: Path) -> dict[str, Any]:
    path = "tables/data_dictionary.csv"
    resource = _csv_resource(folder, path, "data_dictionary", "What every column means")
    columns = ("table", "column", "type", "unit", "required", "missing_allowed", "meaning")
    resource["schema"] = {"fields": [{"name": c, "type": "string"} for c in columns]}
    return resource
