"""Day trips and overnight trips kept apart: each with its own demand, together the whole year.

The worlds are those of ``visit_world``: west (30 km) and east (60 km) of the reserve.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest

from pipeline.costs import cost
from pipeline.errors import CostError, GeocodingError, JoinError
from pipeline.finished import join
from pipeline.inputs import read_sites
from pipeline.origins import geocode
from pipeline.stays import split_records, split_sites
from pipeline.tables import Origins, ZoneTable
from tests.visit_world import (
    make_origins,
    make_records,
    make_routes,
    make_sites,
    make_study,
    make_zones,
)

SITES = split_sites(make_sites())
APART = {"stays": "apart"}


def split_routes() -> pd.DataFrame:
    """Routes to both stays of the reserve, and to the lake."""
    routes = make_routes()
    reserve = routes["site_id"] == "reserve"
    parts = [routes[reserve].assign(site_id=f"reserve_{stay}") for stay in ("day", "overnight")]
    return pd.concat([*parts, routes[~reserve]], ignore_index=True)


def finished(origins: pd.DataFrame, **sections: Any) -> pd.DataFrame:
    study = make_study(sites=APART, **sections)
    routes, zones = split_routes(), make_zones()
    (costs,) = cost(routes, zones, SITES, origins, study=study)
    table, _ = join(origins, costs, routes, zones, SITES, study=study)
    return ZoneTable.checked(table).set_index(["site_id", "zone_id"])


def test_a_site_becomes_two_at_its_place(tmp_path: Path) -> None:
    pd.DataFrame(make_sites()).to_csv(tmp_path / "s.csv", index=False)
    sites = read_sites(make_study(tmp_path, sites={"file": "s.csv", **APART}))
    assert sites["site_id"].unique().tolist() == ["reserve_day", "reserve_overnight", "lake"]
    assert sites["site_name"].unique().tolist() == [
        "Reserve, day trips",
        "Reserve, overnight trips",
        "Lake",
    ]
    assert sites["place_id"].tolist() == ["reserve"] * 4 + ["lake"]
    assert sites["stay"].fillna("").tolist() == ["day", "day", "overnight", "overnight", ""]


def test_records_go_to_their_stay_and_none_is_lost() -> None:
    records = make_records(["01001", "01002", "x"]).assign(nights=[0.0, 3.0, 1.0])
    study = make_study(sites=APART, visits={"max_unmatched_share": 1.0})
    origins, summary = geocode(records, make_zones(), None, study=study)
    assert origins["site_id"].tolist() == ["reserve_day", "reserve_overnight", "reserve_overnight"]
    assert summary["records"].sum() == len(records)


def test_a_record_without_nights_is_named() -> None:
    origins = make_origins(["west", "east"]).assign(nights=[0.0, np.nan])
    with pytest.raises(GeocodingError, match=r"row 2 \(record 'r1'\), column 'nights'"):
        split_records(origins, "census")
    with pytest.raises(GeocodingError, match="row 1"):
        split_records(make_origins(["west"]), "census")


def test_a_total_of_the_place_is_shared_as_the_records_show() -> None:
    """Four parties of two, one of them overnight: of 800 visits 600 are of day trips."""
    origins = split_records(
        make_origins(["west", "west", "east", "east"]).assign(nights=[0.0, 0.0, 0.0, 2.0]), "census"
    )
    table = finished(origins, visits={"annual_visits": {"reserve": 800}})
    visits = table["visits"].to_dict()
    assert visits["reserve_day", "west"] == pytest.approx(400)
    assert visits["reserve_day", "east"] == pytest.approx(200)
    assert visits["reserve_overnight", "east"] == pytest.approx(200)
    assert table["visits"].sum() == pytest.approx(800)


def test_totals_of_each_stay() -> None:
    origins = split_records(make_origins(["west", "east"]).assign(nights=[0.0, 2.0]), "census")
    totals = {"reserve_day": 500, "reserve_overnight": 90}
    table = finished(origins, visits={"annual_visits": totals})
    by_site = table["visits"].groupby(level="site_id").sum().to_dict()
    assert by_site == pytest.approx(totals)
    with pytest.raises(JoinError, match="'reserv', which is no site to be valued"):
        finished(origins, visits={"annual_visits": {"reserv": 1}})


def test_errors_of_a_shared_total_are_of_the_shared_sample() -> None:
    """Split or not, the records are the same sample: together they vary as the whole does."""
    places: list[str | None] = [*["west"] * 6, *["east"] * 6]
    origins = make_origins(places).assign(nights=[0.0, 1.0] * 6)
    visits = {"annual_visits": {"reserve": 240}}
    apart = finished(split_records(origins, "census"), visits=visits)
    # Two of each zone and stay of twelve: var = 12 ÷ 11 × 0.9 × Σ e², e = 20 or −5.
    error = apart["visits_se"].to_dict()["reserve_day", "west"]
    e = 240 / 12 * np.array([1 - 3 / 12] * 3 + [-3 / 12] * 9)
    assert error == pytest.approx(np.sqrt(12 / 11 * 0.9 * (e**2).sum()))


def test_lodging_is_in_overnight_trips_only_and_in_their_substitutes() -> None:
    """Two nights at 35 are 70 a person; overnight visitors would pay them at the lake, too."""
    origins = split_records(make_origins(["west", "east"]).assign(nights=[0.0, 2.0]), "census")
    study = make_study(costs={"lodging_per_person_night": 35.0}, sites=APART)
    (costs,) = cost(split_routes(), make_zones(), SITES, origins, study=study)
    priced = costs[costs["zone_id"] == "west"].set_index("site_id")
    assert priced["lodging_cost"].to_dict() == {
        "reserve_day": 0,
        "reserve_overnight": 70,
        "lake": 0,
    }
    prices = priced["travel_cost"].to_dict()
    assert prices["reserve_overnight"] == pytest.approx(prices["reserve_day"] + 70)
    table = finished(origins, costs={"lodging_per_person_night": 35.0})
    substitutes = table["substitute_cost"].to_dict()
    assert substitutes["reserve_day", "west"] == pytest.approx(prices["lake"])
    assert substitutes["reserve_overnight", "west"] == pytest.approx(prices["lake"] + 70)


def test_the_other_stay_at_the_same_place_is_no_substitute() -> None:
    origins = split_records(make_origins(["west", "east"]).assign(nights=[0.0, 2.0]), "census")
    table = finished(origins, market={"sites_are_substitutes": True})
    assert table["substitute_id"].dropna().unique().tolist() == ["lake"]


def test_a_household_that_takes_day_trips_only_made_no_overnight_trip() -> None:
    """Two respondents stand for 3,000 people in both demands: 4 day trips, 1 overnight."""
    told = make_origins(["west", "east"], trips=[4, 1]).assign(nights=[0.0, 2.0])
    origins = Origins.checked(split_records(told, "household"))
    assert origins["record_id"].tolist() == ["r0", "r1", "r0_overnight", "r1_day"]
    table = finished(origins, visits={"kind": "household"})
    by_site = table["visits"].groupby(level="site_id").sum().to_dict()
    assert by_site == pytest.approx({"reserve_day": 6000, "reserve_overnight": 1500})
    assert (table["sampled_records"].groupby(level="site_id").sum() == 2).all()


def test_parking_holds_for_both_stays_unless_one_has_its_own() -> None:
    study = make_study(
        costs={"parking_per_vehicle": {"reserve": 4.0, "reserve_overnight": 10.0}}, sites=APART
    )
    (costs,) = cost(split_routes(), make_zones(), SITES, None, study=study)
    parking = costs.groupby("site_id")["parking_cost_per_party"].first().to_dict()
    assert parking == {"lake": 0, "reserve_day": 4, "reserve_overnight": 10}
    wrong = make_study(costs={"parking_per_vehicle": {"reserv": 4.0}}, sites=APART)
    with pytest.raises(CostError, match="'reserv', which is no site"):
        cost(split_routes(), make_zones(), SITES, None, study=wrong)
