"""The demo: its files come out of its script again, and its answer is the stated truth."""

from __future__ import annotations

import importlib
import json
import os
import subprocess
import sys
import tomllib
from collections import Counter
from pathlib import Path
from typing import Any, NamedTuple

import geopandas as gpd
import osmium
import pandas as pd
import pytest
from geopandas.testing import assert_geodataframe_equal

from pipeline.files import read_table
from pipeline.runner import Run
from pipeline.study import load_study
from pipeline.tables import OriginSummary, Routes, Surplus

ROOT = Path(__file__).parents[1]
DEMO = ROOT / "data" / "demo"
STUDY_FILE = ROOT / "config" / "demo.toml"
TRUTH: dict[str, Any] = json.loads((DEMO / "truth.json").read_text(encoding="utf-8"))


@pytest.fixture(scope="module")
def remade(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """What the script writes today."""
    folder = tmp_path_factory.mktemp("demo")
    command = [sys.executable, str(DEMO / "make_demo.py"), "--output", str(folder)]
    environment = {**os.environ, "PYTHONPATH": str(ROOT)}
    subprocess.run(command, check=True, env=environment)
    return folder


@pytest.fixture(scope="module")
def work(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The stage tables of the demo, up to surplus."""
    output = tmp_path_factory.mktemp("run")
    Run(load_study(STUDY_FILE, output=output), lambda _: None).upto("surplus")
    return output / "work"


REMAKE = "run python data/demo/make_demo.py and put annual_visits of truth.json into the study"


@pytest.mark.parametrize(
    "name",
    [
        "input/permits.csv",
        "input/sites.csv",
        "input/crosswalk.csv",
        "truth.json",
        "truth_zones.csv",
    ],
)
def test_script_writes_the_tracked_file(remade: Path, name: str) -> None:
    assert (remade / name).read_bytes() == (DEMO / name).read_bytes(), REMAKE


def test_script_writes_the_tracked_zones_and_roads(remade: Path) -> None:
    """Compared by content: other versions of GDAL and osmium may pack the bytes otherwise."""
    tracked, today = (folder / "input" / "zones.gpkg" for folder in (DEMO, remade))
    assert_geodataframe_equal(gpd.read_file(today), gpd.read_file(tracked))
    tracked, today = (folder / "input" / "roads.osm.pbf" for folder in (DEMO, remade))
    assert _objects(today) == _objects(tracked), REMAKE


def test_same_seed_same_bytes(
    remade: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.syspath_prepend(str(DEMO))
    script = importlib.import_module("make_demo")
    script.write_geography(script.make_county(script.SEED), tmp_path)
    for name in ("zones.gpkg", "roads.osm.pbf", "sites.csv"):
        assert (tmp_path / name).read_bytes() == (remade / "input" / name).read_bytes(), name


def test_files_are_small() -> None:
    files = list((DEMO / "input").iterdir())
    assert sum(file.stat().st_size for file in files) < 3_000_000


def test_roads_hold_what_the_story_tells() -> None:
    objects = _objects(DEMO / "input" / "roads.osm.pbf")
    tags = Counter(f"{key}={value}" for item in objects for key, value in item.tags)
    assert sum(item.kind == "n" for item in objects) > 5_000
    assert tags["highway=motorway"] == 2
    assert tags["junction=roundabout"] == 3
    assert tags["restriction=no_left_turn"] == 3
    for once in ("toll=yes", "route=ferry", "access=private"):
        assert tags[once] == 1, once


def test_every_kind_of_damage_is_there_and_counted(work: Path) -> None:
    summary = read_table(OriginSummary, work / "origin_summary.parquet")
    records = summary.set_index("origin_status")["records"]
    permits = pd.read_csv(DEMO / "input" / "permits.csv", dtype="str", keep_default_na=False)
    assert records.sum() == len(permits) == TRUTH["permits"]
    for status in ("matched", "crosswalk", "malformed", "unknown_code", "missing", "foreign"):
        assert records[status] > 0, status
    codes = permits["home_code"]
    for damage in (r"^[0-9]{3}$", r"\.0$", r"^ | $", r"[a-z]{2}[0-9]", r"^$"):
        assert codes.str.contains(damage).any(), damage


def test_island_goes_by_ferry_islet_nowhere_and_the_bridge_takes_its_toll(work: Path) -> None:
    routes = read_table(Routes, work / "routes.parquet")
    to_reserve = routes[routes["site_id"] == "lissenmere"].set_index("zone_id")
    island, islet = to_reserve.loc["TS01"], to_reserve.loc["TS02"]
    assert island["route_status"] == "routed"
    assert island["ferry_km"] > 15
    assert islet["route_status"] in ("no_path", "too_far_from_road")
    assert pd.isna(islet["distance_km"])
    quenmouth = to_reserve[to_reserve.index.str.startswith("01")]
    assert (quenmouth["toll_km"] > 2).sum() > 30
    assert (to_reserve["ferry_km"] > 0).sum() == 1


@pytest.mark.parametrize("method", ["delta", "simulated"])
def test_interval_covers_the_surplus_that_the_visits_were_drawn_with(
    work: Path, method: str
) -> None:
    values = read_table(Surplus, work / "surplus.parquet")
    row = values[values["chosen"] & (values["method"] == method)].set_index("measure")
    per_trip = row.loc["surplus_per_trip"]
    assert per_trip["ci_low"] <= TRUTH["surplus_per_trip"] <= per_trip["ci_high"]
    # An interval that held anything would prove nothing: it is at most a third of the value wide.
    assert per_trip["ci_high"] - per_trip["ci_low"] < TRUTH["surplus_per_trip"] / 3


def test_study_knows_the_annual_visits_of_the_truth() -> None:
    study = tomllib.loads(STUDY_FILE.read_text(encoding="utf-8"))
    assert study["visits"]["annual_visits"] == {TRUTH["site_id"]: TRUTH["annual_visits"]}
    assert "invented" in study["study"]["notice"].lower()


class _Object(NamedTuple):
    """Everything of an OSM object that matters to a reader."""

    kind: str
    number: int
    version: int
    tags: tuple[tuple[str, str], ...]
    body: tuple[Any, ...]


def _objects(path: Path) -> list[_Object]:
    found = []
    for item in osmium.FileProcessor(str(path)):
        if isinstance(item, osmium.osm.Changeset):
            continue
        body: tuple[Any, ...] = ()
        if isinstance(item, osmium.osm.Node):
            body = (item.location.x, item.location.y)
        elif isinstance(item, osmium.osm.Way):
            body = tuple(node.ref for node in item.nodes)
        elif isinstance(item, osmium.osm.Relation):
            body = tuple((member.type, member.ref, member.role) for member in item.members)
        tags = tuple((tag.k, tag.v) for tag in item.tags)
        found.append(_Object(item.type_str(), item.id, item.version, tags, body))
    return found
