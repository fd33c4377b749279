"""A small invented county, all tables of a run of it, and a study to publish.

Nine square zones of about 11 km, three by three, around a fen (invented, like every name and
figure here). Numbers are zone ids; F is the fen (site), M a mere (substitute); `=` is the main
road that all routes follow, `-` a lane:

        007   008   009          population 1,000 each, 009 none
         |     |     |
        004 = 005 = 006
         |     F     |
        001   002   003 .. M

Visits per 1,000 people fall with travel cost by exp(5 − 0.2 × cost): every predicted figure
below is that function's, so that curve and points agree exactly.
"""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import geopandas as gpd
import numpy as np
import pandas as pd
import pytest
import shapely

from pipeline.provenance import InputFile, Provenance
from pipeline.publish import Publication, publish
from pipeline.study import Study, study_from

SITE, MERE = "fen", "mere"
WEST, SOUTH, SIDE = 8.0, 50.0, 0.1
COST = {
    "001": 8.0,
    "002": 4.0,
    "003": 9.0,
    "004": 7.0,
    "005": 3.0,
    "006": 7.5,
    "007": 12.0,
    "008": 10.0,
    "009": 13.0,
}
CONST, SLOPE = 5.0, -0.2
COVARIANCE = np.array([[0.04, -0.004, 0.0], [-0.004, 0.0005, 0.0], [0.0, 0.0, 0.01]])
TRUE_TRIP_VALUE = 5.0


def make_study(**sections: dict[str, Any]) -> Study:
    """A study that names no file."""
    raw: dict[str, Any] = {
        "study": {
            "name": "fenland",
            "title": "Value of Otter Fen <invented & small>",
            "notice": "Every figure here is invented.",
            "currency": "EUR",
            "price_year": 2024,
            "folder": "fenland",
        },
        "costs": {"vehicle_cost_per_km": 0.25, "wage_fraction": 0.33},
    }
    for name, keys in sections.items():
        raw[name] = {**raw.get(name, {}), **keys}
    return study_from(raw, base=Path(), source="study")


def make_provenance(study: Study) -> Provenance:
    return Provenance(
        inputs=(InputFile("visits.csv", "visits.file", 1234, "ab" * 32),),
        settings=study.resolved(),
        settings_set=(
            "study.name",
            "study.title",
            "costs.vehicle_cost_per_km",
            "costs.wage_fraction",
        ),
        versions={"roadworth": "0.1.0", "python": "3.11.0"},
        seed=1,
        code_sha256="cd" * 32,
        study_sha256="ef" * 32,
    )


def rate(cost: float) -> float:
    """Visits per 1,000 people by the function that everything here obeys."""
    return float(np.exp(CONST + SLOPE * cost))


def make_zones() -> gpd.GeoDataFrame:
    rows, shapes = [], []
    for index, zone_id in enumerate(COST):
        west, south = WEST + SIDE * (index % 3), SOUTH + SIDE * (index // 3)
        ring = [(0, 0), (0, 1), (1, 1), (1, 0)]  # clockwise: RFC 7946 wants the other way
        shapes.append(shapely.Polygon([(west + SIDE * x, south + SIDE * y) for x, y in ring]))
        rows.append(
            {
                "zone_id": zone_id,
                "postal_code": zone_id,
                "zone_name": None if zone_id == "003" else f"Parish {zone_id} & Co",
                "population": 0.0 if zone_id == "009" else 1000.0,
                "household_income": 40000.0,
                "lon": west + SIDE / 2,
                "lat": south + SIDE / 2,
                "centroid_source": "inside_polygon",
            }
        )
    return gpd.GeoDataFrame(pd.DataFrame(rows), geometry=shapes, crs="EPSG:4326")


def make_sites() -> pd.DataFrame:
    return pd.DataFrame(
        {
            "site_id": [SITE, MERE],
            "access_id": ["gate", "jetty"],
            "site_name": ["Otter Fen <hide>", "Long Mere"],
            "role": ["site", "substitute"],
            "lon": [8.15, 8.31],
            "lat": [50.11, 50.05],
            "fee": [0.0, 2.0],
        }
    )


def make_routes(zones: pd.DataFrame, sites: pd.DataFrame) -> pd.DataFrame:
    pairs = zones[["zone_id"]].merge(sites[["site_id", "access_id"]], how="cross")
    km = 4.0 * pairs["zone_id"].map(COST)
    lost = (pairs["zone_id"] == "009") & (pairs["site_id"] == MERE)
    figures: dict[str, Any] = {
        "distance_km": km,
        "drive_time_min": 1.2 * km,
        "shortest_distance_km": km,
        "return_distance_km": km,
        "return_drive_time_min": 1.2 * km,
        "ferry_km": 0.0,
        "ferry_min": 0.0,
        "toll_km": 0.0,
        "unpaved_km": 0.0,
        "zone_snap_m": 120.0,
        "site_snap_m": 15.0,
    }
    routes = pairs.assign(**figures)
    routes.loc[lost, [*figures, "access_id"]] = np.nan
    return routes.assign(route_status=np.where(lost, "no_path", "routed"))


def make_route_lines(zones: pd.DataFrame, sites: pd.DataFrame) -> gpd.GeoDataFrame:
    """To the main road, along that, then down to the site; 002 has its own lane to the fen."""
    rows, lines = [], []
    for site in sites.to_dict("records"):
        for zone in zones.to_dict("records"):
            if (zone["zone_id"], site["site_id"]) == ("009", MERE):
                continue
            main = SOUTH + 1.5 * SIDE
            steps = np.arange(min(zone["lon"], site["lon"]), max(zone["lon"], site["lon"]), 0.05)
            along = sorted({*steps, zone["lon"], site["lon"]}, reverse=zone["lon"] > site["lon"])
            path = [(zone["lon"], zone["lat"]), *((x, main) for x in along)]
            if (zone["zone_id"], site["site_id"]) == ("002", SITE):
                path = path[:1]
            lines.append(shapely.LineString([*path, (site["lon"], site["lat"])]))
            rows.append({"zone_id": zone["zone_id"], "site_id": site["site_id"]})
    return gpd.GeoDataFrame(pd.DataFrame(rows), geometry=lines, crs="EPSG:4326")


def make_road_lines() -> gpd.GeoDataFrame:
    main = shapely.LineString([(8.0, 50.15), (8.3, 50.15)])
    lanes = [shapely.LineString([(x, 50.0), (x, 50.3)]) for x in (8.05, 8.15, 8.25)]
    ferry = shapely.LineString([(8.25, 50.05), (8.31, 50.05)])
    classes = ["primary", "tertiary", "tertiary", "tertiary", "ferry"]
    return gpd.GeoDataFrame(
        {"road_class": classes, "distance_km": [21.4, 33.4, 33.4, 33.4, 4.3]},
        geometry=[main, *lanes, ferry],
        crs="EPSG:4326",
    )


def make_costs(routes: pd.DataFrame) -> pd.DataFrame:
    cost = routes["zone_id"].map(COST).where(routes["route_status"] == "routed")
    zero = cost * 0
    return routes[["zone_id", "site_id"]].assign(
        round_trip_km=8 * cost,
        round_trip_hours=0.16 * cost,
        party_size=2.0,
        vehicle_cost=cost,
        toll_cost=zero,
        ferry_cost=zero,
        time_cost=zero,
        fee_cost=0.0,
        other_cost=zero,
        travel_cost=cost,
        vehicle_cost_per_party=2 * cost,
        toll_cost_per_party=zero,
        ferry_cost_per_party=zero,
        cost_status=routes["route_status"].replace("routed", "priced"),
    )


def make_zone_table(zones: pd.DataFrame, site_id: str = SITE) -> pd.DataFrame:
    cost = zones["zone_id"].map(COST)
    visits = (cost.map(rate) * zones["population"] / 1000).round()
    visits[zones["zone_id"] == "008"] = 0.0
    inside = zones["zone_id"] != "009"
    return pd.DataFrame(
        {
            "zone_id": zones["zone_id"],
            "site_id": site_id,
            "population": zones["population"],
            "household_income": zones["household_income"],
            "sampled_visits": (visits / 4).round(),
            "visits": visits,
            "visits_se": np.sqrt(visits),
            "visits_per_1000": visits / zones["population"].where(zones["population"] > 0) * 1000,
            "distance_km": 4 * cost,
            "drive_time_min": 4.8 * cost,
            "travel_cost": cost,
            "substitute_cost": cost,
            "in_market": inside,
            "market_note": pd.Series(np.where(inside, "", "nobody lives there")).where(~inside),
        }
    )


def make_estimates(site_id: str = SITE) -> pd.DataFrame:
    """Estimates of both models; the negative binomial's are the function's own."""
    return pd.concat(
        [make_model("poisson", site_id), make_model("negative_binomial", site_id)],
        ignore_index=True,
    )


def make_model(model: str, site_id: str) -> pd.DataFrame:
    size = 2 if model == "poisson" else 3
    covariance = COVARIANCE[:size, :size]
    terms = ["const", "travel_cost", "alpha"][:size]
    values = np.array([CONST - np.log(1000), SLOPE, 0.1])[:size]
    errors = np.sqrt(np.diag(covariance))
    return pd.DataFrame(
        {
            "model": model,
            "site_id": site_id,
            "term": terms,
            "estimate": values,
            "std_error": errors,
            "ci_low": values - 1.96 * errors,
            "ci_high": values + 1.96 * errors,
            "p_value": [0.0, 1e-19, 0.3][:size],
            "covariance": [json.dumps(row.tolist()) for row in covariance],
        }
    )


def make_fit(site_id: str = SITE) -> pd.DataFrame:
    return pd.DataFrame(
        {
            "model": ["poisson", "negative_binomial"],
            "site_id": site_id,
            "nobs": 8,
            "log_likelihood": [-61.2, -40.1],
            "aic": [126.4, 86.2],
            "bic": [126.6, 86.4],
            "dispersion": [4.2, 0.1],
            "overdispersion_p": [0.001, np.nan],
            "r_squared": [0.92, 0.93],
            "converged": True,
            "chosen": [False, True],
            "errors": "robust",
            "note": [None, "Chosen because the counts vary more than Poisson allows (p = 0.001)."],
        }
    )


def make_surplus(visits: float, site_id: str = SITE) -> pd.DataFrame:
    rows = []
    for method, low, high in (("delta", 3.9, 6.1), ("simulated", 4.13, 6.42)):
        for measure, scale, unit in (
            ("surplus_per_trip", 1.0, "currency/trip"),
            ("annual_surplus", visits, "currency/year"),
        ):
            rows.append(
                {
                    "model": "negative_binomial",
                    "site_id": site_id,
                    "measure": measure,
                    "value": TRUE_TRIP_VALUE * scale,
                    "std_error": 0.56 * scale,
                    "ci_low": low * scale,
                    "ci_high": high * scale,
                    "method": method,
                    "unit": unit,
                    "note": None,
                }
            )
    return pd.DataFrame(rows)


def make_fee_schedule(visits: float, site_id: str = SITE) -> pd.DataFrame:
    fee = np.arange(0.0, 21.0, 2.5)
    left = visits * np.exp(SLOPE * fee)
    spread = 1 + 0.012 * fee
    return pd.DataFrame(
        {
            "site_id": site_id,
            "fee": fee,
            "visits": left,
            "visits_ci_low": left / spread,
            "visits_ci_high": left * spread,
            "revenue": fee * left,
            "revenue_ci_low": fee * left / spread,
            "revenue_ci_high": fee * left * spread,
            "consumer_surplus": TRUE_TRIP_VALUE * left,
            "consumer_surplus_ci_low": TRUE_TRIP_VALUE * left * 0.8 / spread,
            "consumer_surplus_ci_high": TRUE_TRIP_VALUE * left * 1.25 * spread,
            "surplus_lost": TRUE_TRIP_VALUE * (visits - left),
        }
    )


def make_zone_surplus(zone_table: pd.DataFrame) -> pd.DataFrame:
    predicted = zone_table["travel_cost"].map(rate) * zone_table["population"] / 1000
    return zone_table[["zone_id", "site_id"]].assign(
        predicted_visits=predicted, annual_surplus=TRUE_TRIP_VALUE * zone_table["visits"]
    )


def make_sensitivity(visits: float, site_id: str = SITE) -> pd.DataFrame:
    """The study, two alternatives, and one that gives no value."""
    per_trip = [TRUE_TRIP_VALUE, 4.0, 9.0, np.nan]
    spread = np.array([0.8, 0.85, 0.9, np.nan])
    annual = np.array(per_trip) * visits
    return pd.DataFrame(
        {
            "site_id": site_id,
            "variant": ["the study", "time at no cost", "nobody shares the vehicle", "model: odd"],
            "changed": [None, "costs.wage_fraction", "costs.shared_by", "demand.choose"],
            "from_value": [None, "0.33", "all", "test"],
            "to_value": [None, "0", "vehicle", "odd"],
            "model": ["negative_binomial"] * 3 + [None],
            "surplus_per_trip": per_trip,
            "ci_low": np.array(per_trip) * spread,
            "ci_high": np.array(per_trip) / spread,
            "annual_surplus": annual,
            "annual_ci_low": annual * spread,
            "annual_ci_high": annual / spread,
            "change_percent": [0.0, -20.0, 80.0, np.nan],
            "note": [None, None, None, "No value: it cannot be fitted."],
        }
    )


def make_tables() -> dict[str, Any]:
    """Every argument of `publish` but provenance and study, as the flow would hand it over."""
    zones, sites = make_zones(), make_sites()
    routes = make_routes(zones, sites)
    zone_table = make_zone_table(zones)
    visits = float(zone_table["visits"].sum())
    return {
        "origin_summary": pd.DataFrame(
            {
                "site_id": SITE,
                "origin_status": ["matched", "unknown_code", "foreign"],
                "records": [95, 3, 2],
                "trips": [120.0, 3.0, 2.0],
                "share": [0.95, 0.03, 0.02],
            }
        ),
        "road_quality": pd.DataFrame(
            {
                "measure": ["length", "speed_from_default"],
                "road_class": ["all", "tertiary"],
                "value": [121.6, 0.4],
                "unit": ["km", "share"],
                "note": [None, "speed of the class taken where the map has none"],
            }
        ),
        "road_lines": make_road_lines(),
        "routes": routes,
        "route_lines": make_route_lines(zones, sites),
        "zones": zones,
        "sites": sites,
        "costs": make_costs(routes),
        "reported_check": None,
        "zone_table": zone_table,
        "trip_table": None,
        "estimates": make_estimates(),
        "fit": make_fit(),
        "surplus": make_surplus(visits),
        "fee_schedule": make_fee_schedule(visits),
        "zone_surplus": make_zone_surplus(zone_table),
        "sensitivity": make_sensitivity(visits),
    }


def make_publication(study: Study | None = None, **instead: Any) -> Publication:
    """Publish the county, with some of its tables taken away or exchanged."""
    study = study or make_study()
    tables = {**make_tables(), **instead}
    return publish(make_provenance(study), **tables, study=study)[0]


@pytest.fixture(scope="session")
def publication() -> Publication:
    return make_publication()


@pytest.fixture(scope="session")
def folder(publication: Publication, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Where the county's publication has been written."""
    folder = tmp_path_factory.mktemp("output")
    publication.write(folder)
    return folder
