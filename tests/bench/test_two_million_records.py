"""Two million visit records through geocode and join: in half a minute and 2 GiB.

The records have 130,000 different ways to write the codes of 30,000 zones: every twentieth a
trailing '.0', another its zeros eaten, another a code drawn blindly. Measured in a process of
its own, so that the peak is that of these two stages.
"""

from __future__ import annotations

import json
import resource
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from pipeline.finished import join
from pipeline.origins import geocode
from tests.visit_world import make_study

RECORDS, ZONES = 2_000_000, 30_000
SECONDS, PEAK_GIB = 30.0, 2.0


@pytest.mark.slow
def test_two_million_records_in_half_a_minute_and_two_gib() -> None:
    root = Path(__file__).parent.parent.parent
    command = [sys.executable, "-m", "tests.bench.test_two_million_records"]
    done = subprocess.run(command, cwd=root, capture_output=True, text=True, check=True)
    measured = json.loads(done.stdout)
    print(measured)
    assert measured["records"] == RECORDS
    assert measured["seconds"] < SECONDS
    assert measured["peak_gib"] < PEAK_GIB


def measure() -> dict[str, float]:
    """Seconds of processor time (one thread) and peak memory of the two stages."""
    records, zones = world()
    study = make_study(
        visits={"max_unmatched_share": 1.0, "annual_visits": {"reserve": 9e6}},
        zones={"country": "US"},
    )
    pairs = zones[["zone_id"]].assign(site_id="reserve")
    costs = pairs.assign(travel_cost=10.0, cost_status="priced")
    routes = pairs.assign(distance_km=50.0, drive_time_min=45.0, route_status="routed")
    sites = pd.DataFrame({"site_id": ["reserve"], "role": ["site"]})
    start = time.process_time()
    origins, summary = geocode(records, zones, None, study=study)
    table, _ = join(origins, costs, routes, zones, sites, study=study)
    seconds = time.process_time() - start
    assert len(table) == ZONES
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 2**20
    return {"records": int(summary["records"].sum()), "seconds": seconds, "peak_gib": peak}


def world() -> tuple[pd.DataFrame, pd.DataFrame]:
    """Records and zones."""
    rng = np.random.default_rng(1)
    codes = pd.Series(np.sort(rng.choice(100_000, ZONES, replace=False))).astype("str")
    codes = codes.str.zfill(5)
    zones = pd.DataFrame(
        {"zone_id": codes, "postal_code": codes, "population": 1000.0, "household_income": 5e4}
    )
    raw = codes.iloc[rng.integers(0, ZONES, RECORDS)].reset_index(drop=True)
    kind = rng.integers(0, 20, RECORDS)
    wrong = pd.Series(rng.integers(0, 100_000, RECORDS)).astype("str").str.zfill(5)
    raw = raw.where(kind != 1, raw + ".0").where(kind != 2, raw.str.lstrip("0"))
    raw = raw.where(kind != 3, wrong)
    records = pd.DataFrame(
        {
            "record_id": np.arange(RECORDS).astype("str"),
            "postal_code_raw": raw,
            "site_id": "reserve",
            "trips": 1.0,
            "party_size": np.where(kind == 4, np.nan, 1.0 + kind % 5),
            "weight": 1.0,
        }
    )
    return records, zones


if __name__ == "__main__":
    print(json.dumps(measure()))
