"""A real city end to end: ZIP codes of Ohio, roads of Columbus, and visits with a known truth.

Population and household income of each ZIP code are the US Census Bureau's, the roads
OpenStreetMap's (ODbL 1.0); the reserve, its substitute and the visits are invented. Visits are
drawn, with scatter between zones, from a demand with a surplus of 9.00 USD a visit, at the prices
of the flow itself; half of their codes are damaged as spreadsheets damage them. The extract
covers the city alone, the zones the whole state.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import osmium
import pandas as pd
import pytest

from pipeline.costs import cost
from pipeline.files import read_table
from pipeline.inputs import read_sites, read_zones
from pipeline.runner import Run
from pipeline.study import Study, load_study
from pipeline.tables import OriginSummary, Routes, Surplus, ZoneTable
from tests.open_data import COLUMBUS_ROADS, MISSING, OHIO_ZIPS

SURPLUS_PER_VISIT = 9.0
VISITS_AT_NO_COST = 1.6
SCATTER = 0.05
KM_PER_DEGREE = 111.2

pytestmark = [
    pytest.mark.slow,
    pytest.mark.skipif(not (COLUMBUS_ROADS.is_file() and OHIO_ZIPS.is_file()), reason=MISSING),
]

STUDY = f"""\
[study]
name = "columbus"
title = "A reserve by the river at Columbus"
notice = "The reserve and its visits are invented; people and roads are real."
currency = "USD"
price_year = 2024
seed = 5

[sites]
file = "sites.csv"

[zones]
file = "zones.csv"
country = "US"

[visits]
file = "visits.csv"

[visits.columns]
postal_code = "zip"

[roads]
files = ["{COLUMBUS_ROADS}"]

[costs]
vehicle_cost_per_km = 0.15
wage_fraction = 0.3333
party_size = 2.0
fallback_household_income = 60000.0

[demand]
models = ["poisson", "negative_binomial"]
"""


def test_surplus_of_drawn_visits_is_recovered(columbus: Study) -> None:
    values = read_table(Surplus, columbus.study.folder / "work" / "surplus.parquet")
    rows = values[values["chosen"] & (values["measure"] == "surplus_per_trip")]
    assert set(rows["method"]) >= {"delta", "simulated"}
    assert (rows["ci_low"] <= SURPLUS_PER_VISIT).all(), rows
    assert (rows["ci_high"] >= SURPLUS_PER_VISIT).all(), rows
    # An interval that holds everything would hold the truth, too.
    assert (rows["ci_high"] - rows["ci_low"] < 0.6 * SURPLUS_PER_VISIT).all(), rows


def test_every_damaged_code_is_read_back(columbus: Study) -> None:
    summary = read_table(OriginSummary, columbus.study.folder / "work" / "origin_summary.parquet")
    assert summary["origin_status"].tolist() == ["matched"]
    assert int(summary["records"].sum()) == len(
        pd.read_csv(columbus.study.folder.parent / "visits.csv")
    )


def test_zip_codes_off_the_extract_are_reported_and_not_routed(columbus: Study) -> None:
    folder = columbus.study.folder / "work"
    routes = read_table(Routes, folder / "routes.parquet").merge(
        pd.DataFrame(read_zones(columbus))[["zone_id", "lon", "lat"]], on="zone_id"
    )
    west, south, east, north = road_bounds()
    reach = columbus.routes.max_snap_km / KM_PER_DEGREE
    wide = reach / np.cos(np.radians(north))
    off = (
        (routes["lon"] < west - wide)
        | (routes["lon"] > east + wide)
        | (routes["lat"] < south - reach)
        | (routes["lat"] > north + reach)
    )
    assert off.sum() > 2_000
    assert (routes.loc[off, "route_status"] == "too_far_from_road").all()
    assert routes.loc[off, ["distance_km", "drive_time_min"]].isna().all(axis=None)
    inside = routes[~off & (routes["site_id"] == "reserve")]
    assert (inside["route_status"] == "routed").sum() >= 30
    lost = routes[(routes["site_id"] == "reserve") & (routes["route_status"] != "routed")]
    table = read_table(ZoneTable, folder / "zone_table.parquet")
    left_out = table[~table["in_market"]]
    assert set(left_out["zone_id"]) == set(lost["zone_id"])
    assert set(left_out["market_note"]) == {"no price: too_far_from_road"}


def road_bounds() -> tuple[float, float, float, float]:
    """West, south, east and north of the nodes of the extract."""
    nodes = osmium.FileProcessor(str(COLUMBUS_ROADS), osmium.osm.NODE)
    places = np.array([(n.lon, n.lat) for n in nodes if isinstance(n, osmium.osm.Node)])
    (west, south), (east, north) = places.min(axis=0), places.max(axis=0)
    return west, south, east, north


@pytest.fixture(scope="module")
def columbus(tmp_path_factory: pytest.TempPathFactory) -> Study:
    """The study, run up to the surplus."""
    folder = tmp_path_factory.mktemp("columbus")
    study = write_study(folder)
    Run(study, lambda _: None).upto("surplus")
    return study


def write_study(folder: Path) -> Study:
    """Write the study and its inputs; routes are searched on the way, for the visits' prices."""
    zips = pd.read_csv(OHIO_ZIPS, dtype={"zip": "str"})
    zips = zips[zips["population"].notna() & zips["lon"].notna()]
    zips.rename(
        columns={
            "zip": "zone_id",
            "city": "zone_name",
            "median_household_income_usd": "household_income",
        }
    ).to_csv(folder / "zones.csv", index=False)
    pd.DataFrame(
        {
            "site_id": ["reserve", "lake"],
            "role": ["site", "substitute"],
            "lon": [-83.01, -82.90],
            "lat": [39.93, 40.07],
        }
    ).to_csv(folder / "sites.csv", index=False)
    path = folder / "columbus.toml"
    path.write_text(STUDY, encoding="utf-8")
    (folder / "visits.csv").write_text("zip,party_size\n43001,2\n", encoding="utf-8")
    study = load_study(path)
    Run(study, lambda _: None).upto("route")
    draw_visits(study).to_csv(folder / "visits.csv", index=False)
    return study


def draw_visits(study: Study) -> pd.DataFrame:
    """One row per party of two, with the code as somebody's spreadsheet left it."""
    zones = read_zones(study)
    routes = read_table(Routes, study.study.folder / "work" / "routes.parquet")
    (costs,) = cost(routes, zones, read_sites(study), None, study=study)
    reserve = costs[(costs["site_id"] == "reserve") & costs["travel_cost"].notna()]
    people = reserve["zone_id"].map(zones.set_index("zone_id")["population"])
    rng = np.random.default_rng(study.study.seed)
    rate = VISITS_AT_NO_COST * np.exp(-reserve["travel_cost"] / SURPLUS_PER_VISIT)
    scatter = rng.gamma(1 / SCATTER, SCATTER, len(reserve))
    parties = rng.poisson(people * rate * scatter / 2 / 40)  # one party in forty is asked
    codes = np.repeat(reserve["zone_id"].to_numpy(), parties)
    damage = rng.integers(0, 4, len(codes))
    written = [
        (code, f"{int(code)}.0", f"{int(code):.4E}", f"{code}-{1000 + place % 9000}")[kind]
        for place, (code, kind) in enumerate(zip(codes, damage, strict=True))
    ]
    return pd.DataFrame({"zip": written, "party_size": 2})
