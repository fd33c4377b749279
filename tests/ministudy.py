"""A whole study on disk, small enough to read: one straight road, twelve zones, two sites.

::

    fen --- z01 --- z02 --- ... --- z12 --- mere        lon 10.0 .. 10.78 along latitude 50

Zones lie 0.06 degrees (4.3 km) apart on a two-way road with a speed limit of 60 km/h. The
site `fen` is at the western end, the substitute `mere` at the eastern. Visits fall with
distance and are written as one record per party, so every figure can be worked out by hand.
"""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import osmium
import pandas as pd

ZONES = 12
STEP = 0.06
LATITUDE = 50.0


def write_ministudy(folder: Path) -> Path:
    """Write the inputs and the study file into `folder`; return the study file's path."""
    folder.mkdir(parents=True, exist_ok=True)
    write_roads(folder / "roads.osm.pbf")
    zones().to_csv(folder / "zones.csv", index=False)
    sites().to_csv(folder / "sites.csv", index=False)
    visits().to_csv(folder / "visits.csv", index=False)
    study = folder / "mini.toml"
    study.write_text(STUDY, encoding="utf-8")
    return study


STUDY = """\
[study]
name = "mini"
title = "A fen at the end of a road"
notice = "Invented data."
currency = "EUR"
price_year = 2025

[sites]
file = "sites.csv"

[zones]
file = "zones.csv"

[zones.columns]
postal_code = "code"

[visits]
file = "visits.csv"
annual_visits = { fen = 9000 }

[visits.columns]
record_id = "permit"
postal_code = "home"
party_size = "people"

[roads]
files = ["roads.osm.pbf"]

[costs]
vehicle_cost_per_km = 0.2
wage_fraction = 0.3333

[demand]
covariates = ["household_income"]
"""


def write_roads(path: Path) -> None:
    """One road from `fen` to `mere`, and nothing else."""
    writer = osmium.SimpleWriter(str(path), overwrite=True)
    count = ZONES + 2
    for node in range(count):
        location = (10.0 + STEP * node, LATITUDE)
        writer.add_node(osmium.osm.mutable.Node(id=node + 1, location=location))
    for way in range(count - 1):
        tags = {"highway": "secondary", "maxspeed": "60"}
        writer.add_way(osmium.osm.mutable.Way(id=way + 1, nodes=[way + 1, way + 2], tags=tags))
    writer.close()


def zones() -> pd.DataFrame:
    """Twelve zones on the road, of 2,000 to 4,200 people."""
    number = np.arange(1, ZONES + 1)
    return pd.DataFrame(
        {
            "zone_id": [f"{n:02d}" for n in number],
            "code": [f"0{n:02d}A" for n in number],
            "population": 2000 + 200 * (number - 1),
            "household_income": 30_000 + 1_500 * (number * 5 % 7),
            "lon": 10.0 + STEP * number,
            "lat": LATITUDE,
        }
    )


def sites() -> pd.DataFrame:
    """`fen`, to be valued, and the substitute `mere`."""
    return pd.DataFrame(
        {
            "site_id": ["fen", "mere"],
            "site_name": ["The Fen", "The Mere"],
            "role": ["site", "substitute"],
            "lon": [10.0, 10.0 + STEP * (ZONES + 1)],
            "lat": [LATITUDE, LATITUDE],
            "fee": [0.0, 0.0],
        }
    )


def visits() -> pd.DataFrame:
    """Parties of two or three; fewer from far away, with a little unevenness."""
    rows = []
    for number in range(1, ZONES + 1):
        parties = round(60 * math.exp(-0.18 * number) * (1.0 + 0.25 * math.sin(2.5 * number)))
        rows += [(f"0{number:02d}A", 2 + party % 2) for party in range(parties)]
    frame = pd.DataFrame(rows, columns=["home", "people"])
    frame.insert(0, "permit", [f"P{row + 1:04d}" for row in range(len(frame))])
    frame["site_id"] = "fen"
    return frame
