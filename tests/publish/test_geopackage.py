"""Styles, labels and metadata of the GeoPackage, read as the software that opens it reads them."""

from __future__ import annotations

import json
import sqlite3
from collections.abc import Iterator
from contextlib import closing
from pathlib import Path
from xml.etree import ElementTree as Xml

import geopandas as gpd
import numpy as np
import pandas as pd
import pytest

from pipeline.publish import Publication
from pipeline.publish.columns import column_labels
from pipeline.publish.styles import MISSING, Look, Rule, looks_of
from tests.publish.conftest import make_publication, make_study
from tests.publish.test_files import LAYERS

SE, OGC = "{http://www.opengis.net/se}", "{http://www.opengis.net/ogc}"


@pytest.fixture
def database(folder: Path) -> Iterator[sqlite3.Connection]:
    with closing(sqlite3.connect(folder / "fenland.gpkg")) as connection:
        yield connection


def test_styles_are_found_by_their_readers(database: sqlite3.Connection) -> None:
    """Listed in the contents; catalogue and schema empty, not NULL; the geometry column named."""
    listed = "SELECT data_type FROM gpkg_contents WHERE table_name = 'layer_styles'"
    assert database.execute(listed).fetchone() == ("attributes",)
    rows = database.execute(
        "SELECT f_table_name, f_table_catalog, f_table_schema, f_geometry_column, useAsDefault, "
        "styleName FROM layer_styles"
    ).fetchall()
    assert {row[1:4] for row in rows} == {("", "", "geom")}
    assert [row[0] for row in rows if row[4]] == LAYERS
    assert [row[5] for row in rows if row[0] == "zones"] == ["Visit rate", "Travel cost"]


def fits(rule: Rule, row: pd.Series) -> bool:
    """Whether a row falls under a rule."""
    figure = row[rule.column]
    if rule.missing or pd.isna(figure):
        return rule.missing and pd.isna(figure)
    if rule.value is not None:
        return bool(figure == rule.value)
    assert rule.low is not None
    assert rule.high is not None
    return bool(rule.low <= figure < rule.high or (rule.top and figure == rule.high))


@pytest.mark.parametrize("below", [0, 5])
def test_every_row_falls_under_exactly_one_class(below: int) -> None:
    layers = make_publication(make_study(publish={"suppress_below": below})).layers
    for name, layer in layers.items():
        for look in looks_of(name, layer, currency="EUR"):
            counts = [sum(fits(rule, row) for rule in look.rules) for _, row in layer.iterrows()]
            assert counts == [1] * len(layer), (name, look.name)


def test_missing_and_zero_have_classes_of_their_own() -> None:
    """Rates 0, 1 and unknown: three classes, and the bounds hold the one."""
    places = gpd.GeoSeries.from_xy([0, 0, 0], [0, 1, 2], crs="EPSG:4326")
    rates = pd.DataFrame({"visits_per_1000": [0.0, 1.0, np.nan]})
    layer = gpd.GeoDataFrame(rates, geometry=places)
    (look,) = looks_of("zones", layer, currency="EUR")
    assert [rule.label.split(" visits")[0] for rule in look.rules] == ["0", "1 to 1.1", "no figure"]
    assert look.rules[-1].colour == MISSING


def test_sld_says_the_same_as_the_look(
    database: sqlite3.Connection, publication: Publication
) -> None:
    """OGC Symbology Encoding 1.1: a rule's title is its legend label, its filter its class."""
    query = "SELECT styleSLD FROM layer_styles WHERE f_table_name = 'zones' AND useAsDefault"
    root = Xml.fromstring(database.execute(query).fetchone()[0])
    look: Look = looks_of("zones", publication.layers["zones"], currency="EUR")[0]
    assert root.get("version") == "1.1.0"
    assert [title.text for title in root.iter(f"{SE}Title")] == [r.label for r in look.rules]
    fills = [p.text for p in root.iter(f"{SE}SvgParameter") if p.get("name") == "fill"]
    assert fills == [rule.colour for rule in look.rules]
    assert len(list(root.iter(f"{OGC}PropertyIsNull"))) == 1
    highest = list(root.iter(f"{OGC}PropertyIsLessThanOrEqualTo"))
    assert [float(p[1].text or "") for p in highest] == [look.rules[-2].high]


def test_aliases_are_the_labels(database: sqlite3.Connection) -> None:
    query = "SELECT styleQML FROM layer_styles WHERE f_table_name = 'zones' AND useAsDefault"
    root = Xml.fromstring(database.execute(query).fetchone()[0].split("\n", 1)[1])
    aliases = {alias.get("field"): alias.get("name") for alias in root.iter("alias")}
    titles = dict(
        database.execute(
            "SELECT column_name, title FROM gpkg_data_columns WHERE table_name = 'zones'"
        ).fetchall()
    )
    assert aliases == titles
    assert titles["distance_km"] == "Distance, km"
    assert titles["travel_cost"] == "Travel cost, EUR"


def test_every_column_has_a_label_and_a_meaning(database: sqlite3.Connection) -> None:
    for name in LAYERS:
        columns = {row[1] for row in database.execute(f"PRAGMA table_info({name})")}
        query = "SELECT column_name, title, description FROM gpkg_data_columns WHERE table_name = ?"
        rows = database.execute(query, (name,)).fetchall()
        assert {row[0] for row in rows} == columns - {"fid", "geom"}
        assert all(row[1] and row[2] for row in rows)
        assert "column of the study's own" not in {row[2] for row in rows}


def test_a_column_of_the_study_s_own_keeps_its_name() -> None:
    (label,) = column_labels(["wetness_index"], currency="EUR")
    assert (label.title, label.meaning) == ("Wetness index", "column of the study's own")


def test_metadata_hold_licence_lineage_and_the_run(
    database: sqlite3.Connection, folder: Path
) -> None:
    rows = database.execute("SELECT md_standard_uri, metadata FROM gpkg_metadata").fetchall()
    run = json.loads(rows[1][1])
    assert run == json.loads((folder / "run.json").read_text(encoding="utf-8"))
    core = "{http://purl.org/dc/elements/1.1/}"
    about = {item.tag.removeprefix(core): item.text or "" for item in Xml.fromstring(rows[0][1])}
    assert about["title"] == "Value of Otter Fen <invented & small>"
    assert about["rights"] == "Roads © OpenStreetMap contributors, ODbL 1.0"
    assert "EUR 1,430 a year" in about["description"]
    assert "visits.csv" in about["source"]
    used = "SELECT table_name FROM gpkg_metadata_reference WHERE reference_scope = 'table'"
    assert [row[0] for row in database.execute(used)] == LAYERS
