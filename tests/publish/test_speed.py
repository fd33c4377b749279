"""Speed and size of the report: a grid of zones around several sites, tables as the flow's own."""

from __future__ import annotations

import time
from typing import Any

import geopandas as gpd
import numpy as np
import pandas as pd
import pytest
import shapely

from pipeline.publish import Publication
from pipeline.surplus import surplus
from tests.publish import conftest as county

pytestmark = pytest.mark.slow


def grid(zones: int, sites: int) -> dict[str, Any]:
    """`zones` squares around `sites` sites in a row, with wavy borders of 40 points each.

    Visits obey the county's function; there are no routes and no roads to draw.
    """
    side = int(np.ceil(np.sqrt(zones)))
    place = np.arange(zones)
    west, south = 8.0 + 0.02 * (place % side), 50.0 + 0.02 * (place // side)
    shapes = shapely.box(west, south, west + 0.02, south + 0.02)
    shapes = shapely.segmentize(shapes, 0.002)
    ids = np.array([f"{n:05d}" for n in place])
    base = pd.DataFrame(
        {
            "zone_id": ids,
            "postal_code": ids,
            "zone_name": [f"Parish {zone}" for zone in ids],
            "population": 1000.0,
            "household_income": 40_000.0,
            "lon": west + 0.01,
            "lat": south + 0.01,
            "centroid_source": "inside_polygon",
        }
    )
    names = [f"site{n}" for n in range(sites)]
    at = 8.0 + 0.02 * side * (np.arange(sites) + 0.5) / sites
    frames = []
    for name, x in zip(names, at, strict=True):
        cost = 3.0 + 10 * np.hypot(west - x, south - 50.0 - 0.01 * side)
        visits = np.round(1000 * np.exp(5 - 0.2 * cost) / 1000)
        frames.append(
            base[["zone_id", "population", "household_income"]].assign(
                site_id=name,
                sampled_visits=visits,
                visits=visits,
                visits_per_1000=visits,
                distance_km=4 * cost,
                drive_time_min=5 * cost,
                travel_cost=cost,
                substitute_cost=cost,
                in_market=True,
                market_note=None,
            )
        )
    one = county.make_sites().iloc[0].to_dict()
    return {
        "zones": gpd.GeoDataFrame(base, geometry=shapes, crs="EPSG:4326"),
        "sites": pd.DataFrame(
            [
                {**one, "site_id": n, "site_name": n, "lon": x}
                for n, x in zip(names, at, strict=True)
            ]
        ),
        "zone_table": pd.concat(frames, ignore_index=True),
        "estimates": pd.concat([county.make_estimates(n) for n in names], ignore_index=True),
        "fit": pd.concat([county.make_fit(n) for n in names], ignore_index=True),
    }


def publish_grid(zones: int, sites: int) -> tuple[Publication, float]:
    """The publication of a grid, and the seconds of processor time that it took."""
    study = county.make_study(surplus={"draws": 1_000})
    tables = grid(zones, sites)
    known = (tables["estimates"], tables["fit"], tables["zone_table"], None)
    values, fees, shares = surplus(*known, study=study)
    nothing = dict.fromkeys(
        ("origin_summary", "road_quality", "road_lines", "routes", "route_lines", "costs")
    )
    found = {"surplus": values, "fee_schedule": fees, "zone_surplus": shares}
    started = time.process_time()
    publication = county.make_publication(study, **{**tables, **nothing, **found})
    return publication, time.process_time() - started


@pytest.mark.parametrize(
    ("zones", "sites", "seconds", "megabytes"), [(1_000, 1, 10.0, 3.0), (33_000, 10, 90.0, 12.0)]
)
def test_report_is_quick_and_small(
    zones: int, sites: int, seconds: float, megabytes: float
) -> None:
    publication, used = publish_grid(zones, sites)
    size = len(publication.report.encode())
    print(f"{zones} zones, {sites} sites: {used:.1f} s, {size / 1e6:.2f} MB")
    assert used < seconds
    assert size < megabytes * 1e6
