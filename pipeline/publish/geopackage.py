"""One GeoPackage 1.2 for all layers, with styles, labels and metadata; same layers, same bytes.

The styles stand in a table ``layer_styles``, where common GIS software looks for them. It is
taken no notice of, without a word, when one of three things is amiss: the table must be listed
in ``gpkg_contents``, catalogue and schema must be empty texts (not NULL), and the geometry
column must be named.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Iterable, Sequence
from contextlib import closing
from dataclasses import dataclass
from pathlib import Path
from typing import Any
from xml.etree import ElementTree as Xml

import geopandas as gpd
import pyogrio
import shapely

from pipeline.publish.columns import column_labels
from pipeline.publish.stylefiles import qml, sld
from pipeline.publish.styles import looks_of

FIXED_TIME = "1970-01-01T00:00:00.000Z"
"""Stands for the time of writing, so that the same layers give the same bytes."""
GEOMETRY = "geom"
LAYER_WORDS = {
    "zones": "Zones of origin with visits, travel cost and surplus",
    "zone_points": "Zones of origin at the points that their routes start from",
    "routes": "Fastest route from every zone to every site",
    "roads_used": "Roads that the routes run over, with the visits they carry",
    "dropped_roads": "Roads of the extract that were left out of the graph, and why",
    "sites": "Access points of the sites and their substitutes, with the sites' values",
}


@dataclass(frozen=True)
class About:
    """What the metadata tables say: title, abstract, licence, lineage, and the run as JSON."""

    title: str
    abstract: str
    licence: str
    lineage: str
    manifest: str


def write_geopackage(
    layers: dict[str, gpd.GeoDataFrame], path: Path, *, crs: str, currency: str, about: About
) -> None:
    """Write the layers as a GeoPackage 1.2 (OGC 12-128r14), projected to `crs`."""
    for name, layer in layers.items():
        pyogrio.write_dataframe(
            layer.to_crs(crs),
            path,
            layer=name,
            driver="GPKG",
            promote_to_multi=_is_multi(layer),
            dataset_options={"VERSION": "1.2"},
            layer_options={
                "GEOMETRY_NAME": GEOMETRY,
                "FID": "fid",
                "IDENTIFIER": name,
                "DESCRIPTION": describe_layer(name),
            },
        )
    with closing(sqlite3.connect(path)) as database:
        _add_styles(database, layers, currency)
        _add_labels(database, layers, currency)
        _add_metadata(database, layers, about)
        database.execute("UPDATE gpkg_contents SET last_change = ?", (FIXED_TIME,))
        database.commit()
        database.execute("VACUUM")


def describe_layer(name: str) -> str:
    """What a layer holds, in one line."""
    if name in LAYER_WORDS:
        return LAYER_WORDS[name]
    if name.startswith("zones_"):
        return f"{LAYER_WORDS['zones']}: site {name.removeprefix('zones_')}"
    return name.replace("_", " ").capitalize()


def _is_multi(layer: gpd.GeoDataFrame) -> bool:
    """Whether the layer's geometries are lines or areas, which are written as collections."""
    return bool((shapely.get_dimensions(layer.geometry.to_numpy()) > 0).any())


def _insert(database: sqlite3.Connection, table: str, rows: Iterable[Sequence[Any]]) -> None:
    for row in rows:
        marks = ", ".join("?" * len(row))
        database.execute(f"INSERT INTO {table} VALUES ({marks})", row)


STYLES_TABLE = """
CREATE TABLE layer_styles (
  id INTEGER PRIMARY KEY AUTOINCREMENT NOT NULL,
  f_table_catalog TEXT(256), f_table_schema TEXT(256), f_table_name TEXT(256),
  f_geometry_column TEXT(256), styleName TEXT(30), styleQML TEXT, styleSLD TEXT,
  useAsDefault BOOLEAN, description TEXT, owner TEXT(30), ui TEXT(30),
  update_time DATETIME DEFAULT (strftime('%Y-%m-%dT%H:%M:%fZ', 'now')))
"""


def _add_styles(
    database: sqlite3.Connection, layers: dict[str, gpd.GeoDataFrame], currency: str
) -> None:
    database.execute(STYLES_TABLE)
    rows: list[Sequence[Any]] = []
    for name, layer in layers.items():
        labels = column_labels(layer.columns.drop("geometry"), currency=currency)
        for place, look in enumerate(looks_of(name, layer, currency=currency)):
            files = (qml(look, labels), sld(look))
            words = f"{describe_layer(name)}: {look.name.lower()}"
            is_default = int(place == 0)
            key = (len(rows) + 1, "", "", name, GEOMETRY, look.name)
            rows.append((*key, *files, is_default, words, "", None, FIXED_TIME))
    _insert(database, "layer_styles", rows)
    contents = ("layer_styles", "attributes", "layer_styles", "Styles of the layers", FIXED_TIME)
    _insert(database, "gpkg_contents", [(*contents, None, None, None, None, None)])


# OGC 12-128r14, annex F.9 (schema) and F.8 (metadata): tables as given there.
SCHEMA_TABLES = """
CREATE TABLE gpkg_data_columns (
  table_name TEXT NOT NULL, column_name TEXT NOT NULL, name TEXT, title TEXT,
  description TEXT, mime_type TEXT, constraint_name TEXT,
  CONSTRAINT pk_gdc PRIMARY KEY (table_name, column_name),
  CONSTRAINT gdc_tn UNIQUE (table_name, name));
CREATE TABLE gpkg_data_column_constraints (
  constraint_name TEXT NOT NULL, constraint_type TEXT NOT NULL, value TEXT,
  min NUMERIC, min_is_inclusive BOOLEAN, max NUMERIC, max_is_inclusive BOOLEAN,
  description TEXT, CONSTRAINT gdcc_ntv UNIQUE (constraint_name, constraint_type, value));
"""
METADATA_TABLES = """
CREATE TABLE gpkg_metadata (
  id INTEGER CONSTRAINT m_pk PRIMARY KEY ASC NOT NULL, md_scope TEXT NOT NULL DEFAULT 'dataset',
  md_standard_uri TEXT NOT NULL, mime_type TEXT NOT NULL DEFAULT 'text/xml',
  metadata TEXT NOT NULL DEFAULT '');
CREATE TABLE gpkg_metadata_reference (
  reference_scope TEXT NOT NULL, table_name TEXT, column_name TEXT, row_id_value INTEGER,
  timestamp DATETIME NOT NULL DEFAULT (strftime('%Y-%m-%dT%H:%M:%fZ','now')),
  md_file_id INTEGER NOT NULL, md_parent_id INTEGER,
  CONSTRAINT crmr_mfi_fk FOREIGN KEY (md_file_id) REFERENCES gpkg_metadata(id),
  CONSTRAINT crmr_mpi_fk FOREIGN KEY (md_parent_id) REFERENCES gpkg_metadata(id));
"""
EXTENSION = "http://www.geopackage.org/spec121/#extension_"


def _add_labels(
    database: sqlite3.Connection, layers: dict[str, gpd.GeoDataFrame], currency: str
) -> None:
    database.executescript(SCHEMA_TABLES)
    for name, layer in layers.items():
        labels = column_labels(layer.columns.drop("geometry"), currency=currency)
        rows = [(name, x.column, x.column, x.title, x.meaning, None, None) for x in labels]
        _insert(database, "gpkg_data_columns", rows)
    tables = ("gpkg_data_columns", "gpkg_data_column_constraints")
    rows_ = [(t, None, "gpkg_schema", f"{EXTENSION}schema", "read-write") for t in tables]
    _insert(database, "gpkg_extensions", rows_)


def _add_metadata(
    database: sqlite3.Connection, layers: dict[str, gpd.GeoDataFrame], about: About
) -> None:
    """Dublin Core for the file and for each layer, and the run's manifest."""
    database.executescript(METADATA_TABLES)
    core = "http://purl.org/dc/elements/1.1/"
    whole = _dublin_core(about.title, about.abstract, about)
    documents = [(1, "dataset", core, "text/xml", whole)]
    documents.append((2, "dataset", "urn:roadworth:run", "application/json", about.manifest))
    uses: list[Sequence[Any]] = [
        ("geopackage", None, None, None, FIXED_TIME, 1, None),
        ("geopackage", None, None, None, FIXED_TIME, 2, None),
    ]
    for number, name in enumerate(layers, start=3):
        words = _dublin_core(f"{about.title}: {name}", describe_layer(name), about)
        documents.append((number, "dataset", core, "text/xml", words))
        uses.append(("table", name, None, None, FIXED_TIME, number, 1))
    _insert(database, "gpkg_metadata", documents)
    _insert(database, "gpkg_metadata_reference", uses)
    tables = ("gpkg_metadata", "gpkg_metadata_reference")
    rows = [(t, None, "gpkg_metadata", f"{EXTENSION}metadata", "read-write") for t in tables]
    _insert(database, "gpkg_extensions", rows)


def _dublin_core(title: str, abstract: str, about: About) -> str:
    """Title, abstract, licence and lineage as Dublin Core elements (ISO 15836-1)."""
    root = Xml.Element("metadata", {"xmlns:dc": "http://purl.org/dc/elements/1.1/"})
    parts = (("title", title), ("description", abstract), ("rights", about.licence))
    for name, words in (*parts, ("source", about.lineage)):
        Xml.SubElement(root, f"dc:{name}").text = words
    return Xml.tostring(root, encoding="unicode")
