"""A world of three zones, two sites and one substitute that tests work through by hand.

    01001 (west, 1,000 people, 52,000 a year) ── 30 km, 30 min ── reserve
    01002 (east, 2,000 people, 41,600 a year) ── 60 km, 45 min ── reserve
    99001 (isle, nobody lives there) ── no road ── reserve

The lake is twice as far as the reserve from each zone; it is the substitute.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from pipeline.study import Study, study_from
from pipeline.tables import Origins, Routes, Sites, VisitRecords, Zones


def make_study(base: Path = Path(), **sections: dict[str, Any]) -> Study:
    """A study with the least that it needs, and what a test sets."""
    needed: dict[str, Any] = {
        "study": {
            "name": "small",
            "title": "Small world (invented)",
            "currency": "EUR",
            "price_year": 2024,
            "folder": "small",
        },
        "costs": {"vehicle_cost_per_km": 0.30, "wage_fraction": 0.5, "party_size": 2.0},
    }
    for name, keys in sections.items():
        needed[name] = {**needed.get(name, {}), **keys}
    return study_from(needed, base=base, source="small.toml")


def make_zones(**columns: list[object]) -> pd.DataFrame:
    frame = {
        "zone_id": ["west", "east", "isle"],
        "postal_code": ["01001", "01002", "99001"],
        "zone_name": ["West", "East", "Isle"],
        "population": [1000, 2000, 0],
        "household_income": [52_000, 41_600, np.nan],
        "lon": [10.0, 10.1, 10.2],
        "lat": [50.0, 50.0, 50.0],
        "centroid_source": ["given"] * 3,
    }
    return Zones.checked(pd.DataFrame({**frame, **columns}))


def make_sites() -> pd.DataFrame:
    return Sites.checked(
        pd.DataFrame(
            {
                "site_id": ["reserve", "reserve", "lake"],
                "access_id": ["gate", "pier", "1"],
                "site_name": ["Reserve", "Reserve", "Lake"],
                "role": ["site", "site", "substitute"],
                "lon": 10.5,
                "lat": 50.2,
                "fee": [4.0, 6.0, 1.0],
            }
        )
    )


def make_records(codes: list[str | None], **columns: object) -> pd.DataFrame:
    frame = {
        "record_id": [f"r{i}" for i in range(len(codes))],
        "postal_code_raw": codes,
        "site_id": "reserve",
        "trips": 1.0,
        "party_size": 2.0,
        "weight": 1.0,
    }
    return VisitRecords.checked(pd.DataFrame({**frame, **columns}))


def make_origins(zones: list[str | None], **columns: object) -> pd.DataFrame:
    """Records of those zones; None: a code that is not known."""
    frame = {
        "record_id": [f"r{i}" for i in range(len(zones))],
        "postal_code_raw": "x",
        "postal_code": "X",
        "zone_id": zones,
        "site_id": "reserve",
        "trips": 1.0,
        "party_size": 2.0,
        "weight": 1.0,
        "origin_status": ["unknown_code" if zone is None else "matched" for zone in zones],
        "origin_note": None,
    }
    origins = pd.DataFrame({**frame, **columns})
    return Origins.checked(origins.assign(counted_trips=origins["trips"] * origins["weight"]))


def make_routes() -> pd.DataFrame:
    """Routes of the drawing; the way home to the east is 2 km and 3 min longer."""
    pairs = [
        ("west", "reserve", "gate", 30.0, 30.0, 30.0, 30.0, "routed"),
        ("east", "reserve", "pier", 60.0, 45.0, 62.0, 48.0, "routed"),
        ("isle", "reserve", None, *[np.nan] * 4, "no_path"),
        ("west", "lake", "1", 60.0, 60.0, 60.0, 60.0, "routed"),
        ("east", "lake", "1", 120.0, 90.0, 120.0, 90.0, "routed"),
        ("isle", "lake", None, *[np.nan] * 4, "no_path"),
    ]
    names = ["zone_id", "site_id", "access_id", "distance_km", "drive_time_min"]
    names += ["return_distance_km", "return_drive_time_min", "route_status"]
    routes = pd.DataFrame(pairs, columns=names)
    for name in ("ferry_km", "ferry_min", "toll_km", "unpaved_km", "zone_snap_m", "site_snap_m"):
        routes[name] = 0.0
    routes["shortest_distance_km"] = routes["distance_km"]
    return Routes.checked(routes)
