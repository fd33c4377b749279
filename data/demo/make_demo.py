"""Writes the demo's input files and its truth: ``python data/demo/make_demo.py [--output DIR]``.

Everything is invented and drawn from one seed; the same code gives the same bytes. The price of
a visit comes from the product's own stages (roads, route, cost) run on the demo's own roads with
the settings of ``config/demo.toml``, so run this again when those change.
"""

from __future__ import annotations

import argparse
import json
import tomllib
from pathlib import Path

import pandas as pd
import pyogrio
from demo_land import HIDES_XY, LAGOON_XY, LAKE_XY, RESERVE_XY, County, make_county, to_lon_lat
from demo_network import make_network
from demo_osm import write_pbf
from demo_visits import CROSSWALK, Demand, draw_permits

from pipeline.costs import cost
from pipeline.inputs import read_sites, read_zones
from pipeline.roads import build_roads, read_extract
from pipeline.routes import route
from pipeline.study import Study, study_from

HERE = Path(__file__).resolve().parent
STUDY_FILE = HERE.parents[1] / "config" / "demo.toml"
SEED = 2025
SITE = "lissenmere"
SITES = (
    (SITE, "main", "Lissenmere Wetland", "site", RESERVE_XY, 3.0),
    (SITE, "hides", "Lissenmere Wetland", "site", HIDES_XY, 3.0),
    ("pellow_lagoon", "beach", "Pellow Lagoon", "substitute", LAGOON_XY, 0.0),
    ("ravensmire", "dam", "Ravensmire Water", "substitute", LAKE_XY, 2.0),
)


def main() -> None:
    """Write the input files into ``input/`` and the truth beside it."""
    parser = argparse.ArgumentParser(description="Write the invented demo's files.")
    parser.add_argument("--output", type=Path, default=HERE, help="folder that gets input/")
    folder: Path = parser.parse_args().output
    (folder / "input").mkdir(parents=True, exist_ok=True)
    truth = Demand()
    write_geography(make_county(SEED), folder / "input")
    zones = price_zones(folder / "input")
    permits = draw_permits(zones, truth, SEED)
    permits.to_csv(folder / "input" / "permits.csv", index=False, lineterminator="\n")
    write_truth(zones, permits, truth, folder)


def write_geography(county: County, folder: Path) -> None:
    """Write zones, sites, crosswalk and roads."""
    write_pbf(make_network(county, SEED), folder / "roads.osm.pbf")
    zones = folder / "zones.gpkg"
    zones.unlink(missing_ok=True)
    # GeoPackage records when it was last changed; a fixed time keeps the bytes the same.
    pyogrio.set_gdal_config_options({"OGR_CURRENT_DATE": "2025-01-01T00:00:00.000Z"})
    try:
        county.zones.to_file(zones, layer="districts", driver="GPKG")
    finally:
        pyogrio.set_gdal_config_options({"OGR_CURRENT_DATE": None})
    header = ["site", "car_park", "name", "role", "lon", "lat", "fee_eur"]
    rows = []
    for site, access, name, role, xy, fee in SITES:
        lon, lat = to_lon_lat(pd.DataFrame([xy]).to_numpy(dtype=float))[0].round(5)
        rows.append((site, access, name, role, lon, lat, fee))
    _write_csv(pd.DataFrame(rows, columns=header), folder / "sites.csv")
    crosswalk = pd.DataFrame(CROSSWALK.items(), columns=["postal_code", "zone_id"])
    _write_csv(crosswalk, folder / "crosswalk.csv")


def price_zones(folder: Path) -> pd.DataFrame:
    """Zones with the price of a visit and of the cheapest substitute, to the cent."""
    study = _study_on(folder)
    zones, sites = read_zones(study), read_sites(study)
    graph, _, _ = build_roads(read_extract(study.roads.files), study=study)
    routes, _ = route(zones, sites, graph, study=study)
    (costs,) = cost(routes, zones, sites, None, study=study)
    prices = costs.pivot_table(index="zone_id", columns="site_id", values="travel_cost").round(2)
    substitutes = prices.drop(columns=SITE).min(axis="columns")
    return zones.assign(
        travel_cost=zones["zone_id"].map(prices[SITE]),
        substitute_cost=zones["zone_id"].map(substitutes),
    )


def _study_on(folder: Path) -> Study:
    """The demo's study with its roads, zones and sites taken from `folder`; no visits yet."""
    raw = tomllib.loads(STUDY_FILE.read_text(encoding="utf-8"))
    del raw["visits"]
    raw["zones"]["file"] = str(folder.resolve() / "zones.gpkg")
    raw["sites"]["file"] = str(folder.resolve() / "sites.csv")
    raw["roads"]["files"] = [str(folder.resolve() / "roads.osm.pbf")]
    return study_from(raw, base=STUDY_FILE.parent, source=STUDY_FILE.name)


def write_truth(zones: pd.DataFrame, permits: pd.DataFrame, truth: Demand, folder: Path) -> None:
    """Write what the visits were drawn from, and the prices that they were drawn at."""
    expected = truth.expected_visits(zones)
    figures = {
        "note": "Invented. Person-visits a year per head = exp(constant + travel_cost * price + "
        "household_income * income + substitute_cost * price of the cheapest substitute).",
        "seed": SEED,
        "site_id": SITE,
        "constant": truth.constant,
        "travel_cost": truth.travel_cost,
        "household_income": truth.household_income,
        "substitute_cost": truth.substitute_cost,
        "alpha": truth.alpha,
        "one_permit_in": truth.one_permit_in,
        "mean_party_size": round(truth.mean_party, 4),
        "surplus_per_trip": round(truth.surplus_per_trip, 6),
        "expected_annual_visits": round(float(expected.sum())),
        "expected_annual_surplus": round(float(expected.sum()) * truth.surplus_per_trip),
        "permits": len(permits),
        "annual_visits": int(permits["people"].sum()) * truth.one_permit_in,
    }
    text = json.dumps(figures, indent=2) + "\n"
    (folder / "truth.json").write_text(text, encoding="utf-8")
    columns = ["zone_id", "population", "household_income", "travel_cost", "substitute_cost"]
    table = zones[columns].assign(expected_visits=expected.round(1))
    _write_csv(pd.DataFrame(table), folder / "truth_zones.csv")


def _write_csv(table: pd.DataFrame, path: Path) -> None:
    table.to_csv(path, index=False, lineterminator="\n")


if __name__ == "__main__":
    main()
