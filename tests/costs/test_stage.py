"""Prices of the small world, worked by hand, and the identity of the items."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.costs import ITEMS, cost, summarise_cost
from pipeline.errors import CostError, StudyError
from pipeline.study import Study
from pipeline.tables import Costs
from tests.visit_world import make_origins, make_routes, make_sites, make_study, make_zones

ZONES, SITES = make_zones(), make_sites()


def table(study: Study, **changes: Any) -> pd.DataFrame:
    """`costs` of routes with some columns changed in every row."""
    routes = make_routes().assign(**changes)
    (costs,) = cost(routes, ZONES, SITES, None, study=study)
    return Costs.checked(costs)


def priced(study: Study, zone: str, site: str = "reserve", **changes: Any) -> dict[str, Any]:
    """The row of one zone and site."""
    costs = table(study, **changes)
    row = costs[(costs["zone_id"] == zone) & (costs["site_id"] == site)]
    return {str(name): row[name].iloc[0] for name in row}


def test_a_trip_from_the_west_by_hand() -> None:
    """30 km and half an hour each way, two in the car, a wage of 52,000 / 2,080 = 25 an hour.

    Driving 60 km × 0.30 = 18.00, per person 9.00; 1 h × 0.5 × 25 = 12.50; gate 4.00: 25.50.
    """
    row = priced(make_study(), "west")
    assert row["round_trip_km"] == pytest.approx(60)
    assert row["round_trip_hours"] == pytest.approx(1)
    assert row["vehicle_cost_per_party"] == pytest.approx(18)
    assert row["vehicle_cost"] == pytest.approx(9)
    assert row["time_value_per_hour"] == pytest.approx(12.5)
    assert row["time_cost"] == pytest.approx(12.5)
    assert row["fee_cost"] == pytest.approx(4)
    assert row["travel_cost"] == pytest.approx(25.5)
    assert row["cost_status"] == "priced"


def test_the_way_home_is_its_own() -> None:
    """East: 60 + 62 km and 45 + 48 min; the pier's fee is 6."""
    row = priced(make_study(), "east")
    assert row["round_trip_km"] == pytest.approx(122)
    assert row["round_trip_hours"] == pytest.approx(93 / 60)
    assert row["fee_cost"] == pytest.approx(6)


def test_an_unknown_way_home_is_as_long_as_the_way_there() -> None:
    row = priced(make_study(), "east", return_distance_km=np.nan, return_drive_time_min=np.nan)
    assert row["round_trip_km"] == pytest.approx(120)
    assert row["round_trip_hours"] == pytest.approx(1.5)


def test_a_toll_bridge_and_a_ferry_by_hand() -> None:
    """West: 10 of the 30 km by ferry, 5 on a toll road; a party of two.

    Driving (60 − 20) × 0.30 = 12; toll 2 × 5 × 0.40 = 4; ferry 2 × (15 + 2 × 3) = 42: per
    person 6 + 2 + 21. Time and gate as without: 12.50 + 4. Bus at the gate 1.
    """
    study = make_study(
        costs={
            "toll_per_km": 0.40,
            "ferry_fare_per_vehicle": 15.0,
            "ferry_fare_per_person": 3.0,
            "other_cost_per_person": 1.0,
        }
    )
    row = priced(study, "west", ferry_km=10.0, toll_km=5.0)
    assert row["driven_km"] == pytest.approx(40)
    assert row["toll_cost_per_party"] == pytest.approx(4)
    assert row["ferry_cost_per_party"] == pytest.approx(42)
    assert [row[item] for item in ITEMS] == pytest.approx([6, 0, 2, 21, 0, 12.5, 4, 0, 1])
    assert row["travel_cost"] == pytest.approx(46.5)


def test_a_pair_without_a_path_keeps_its_row_without_a_price() -> None:
    costs = table(make_study())
    assert len(costs) == 6
    isle = costs[costs["zone_id"] == "isle"]
    assert isle["cost_status"].tolist() == ["no_path", "no_path"]
    assert isle[[*ITEMS, "travel_cost", "round_trip_km"]].isna().all(axis=None)
    line = summarise_cost((costs,))
    assert line.startswith("4 of 6 pairs priced")
    assert "2 without price: no_path" in line


def test_an_access_point_that_is_not_known_costs_the_lowest_fee() -> None:
    assert priced(make_study(), "east", access_id=None)["fee_cost"] == 4


def test_party_sizes_come_from_the_records() -> None:
    """Reserve: one trip of 1 and three of 5 give (1 + 15) / 4 = 4; a party from abroad is out.

    The lake's own records have no party size, so it takes the mean of all, 4.
    """
    origins = make_origins(
        ["west", "east", "west", "west"],
        trips=[1, 3, 9, 1],
        party_size=[1, 5, 50, np.nan],
        origin_status=["matched", "matched", "foreign", "matched"],
        site_id=["reserve", "reserve", "reserve", "lake"],
    )
    study = make_study(costs={"party_size": "records"})
    (costs,) = cost(make_routes(), ZONES, SITES, origins, study=study)
    assert costs["party_size"].tolist() == [4.0] * 6


def test_party_sizes_are_weighted_and_by_site() -> None:
    """Reserve (2 × 3 + 4 × 1) / 4 = 2.5; lake 6; all (2 × 3 + 4 × 1 + 6 × 1) / 5."""
    origins = make_origins(
        ["west"] * 3,
        weight=[3, 1, 1],
        party_size=[2, 4, 6],
        site_id=["reserve", "reserve", "lake"],
    )
    study = make_study(costs={"party_size": "records"})
    (costs,) = cost(make_routes(), ZONES, SITES, origins, study=study)
    assert costs.groupby("site_id")["party_size"].first().to_dict() == {"lake": 6.0, "reserve": 2.5}


@pytest.mark.parametrize("origins", [None, make_origins(["west"], party_size=np.nan)])
def test_party_sizes_from_records_that_have_none_are_an_error(
    origins: pd.DataFrame | None,
) -> None:
    study = make_study(costs={"party_size": "records"})
    with pytest.raises(CostError, match="give the number of people who share a vehicle"):
        cost(make_routes(), ZONES, SITES, origins, study=study)


@pytest.mark.parametrize("party_size", [0.0, -1.0, "some"])
def test_a_party_of_nobody_is_refused(party_size: object) -> None:
    with pytest.raises(StudyError, match="party_size"):
        make_study(costs={"party_size": party_size})


def test_a_zone_without_income_needs_a_fallback() -> None:
    """The isle has no income, but nobody gets away from there, so nothing is asked for it."""
    zones = make_zones(household_income=[52_000, np.nan, np.nan])
    with pytest.raises(CostError, match=r"1 of 3 zones have no household income.*'east'"):
        cost(make_routes(), zones, SITES, None, study=make_study())
    study = make_study(costs={"fallback_household_income": 20_800.0})
    (costs,) = cost(make_routes(), zones, SITES, None, study=study)
    assert costs.loc[1, "time_value_per_hour"] == pytest.approx(5)
    free = make_study(costs={"wage_fraction": 0.0})
    (costs,) = cost(make_routes(), zones, SITES, None, study=free)
    assert costs.loc[1, "time_cost"] == 0


@pytest.mark.parametrize(
    ("column", "value", "message"),
    [
        ("zone_id", "mars", "not in the zones file; first: 'mars'"),
        ("site_id", "mars", "not in the sites file; first: 'mars'"),
        ("distance_km", np.nan, "4 routes are marked 'routed' but have no distance"),
    ],
)
def test_routes_that_fit_nothing_are_refused(column: str, value: Any, message: str) -> None:
    routes = make_routes().assign(**{column: value})
    with pytest.raises(CostError, match=message):
        cost(routes, ZONES, SITES, None, study=make_study())


AMOUNT = st.floats(0, 1e4, allow_nan=False)


@given(AMOUNT, AMOUNT, AMOUNT, AMOUNT, st.floats(0, 2), st.floats(0.5, 60), st.floats(0, 30))
@settings(derandomize=True, max_examples=40, deadline=None)
def test_items_add_up_to_the_travel_cost(
    per_km: float,
    toll: float,
    fare: float,
    other: float,
    fraction: float,
    party_size: float,
    ferry_km: float,
) -> None:
    study = make_study(
        costs={
            "vehicle_cost_per_km": per_km,
            "toll_per_km": toll,
            "ferry_fare_per_vehicle": fare,
            "ferry_fare_per_person": other,
            "other_cost_per_person": other,
            "wage_fraction": fraction,
            "party_size": party_size,
        }
    )
    costs = table(study, ferry_km=ferry_km, toll_km=ferry_km)
    costs = costs[costs["cost_status"] == "priced"]
    total = costs[list(ITEMS)].to_numpy() @ np.ones(len(ITEMS))
    assert total == pytest.approx(costs["travel_cost"].to_numpy(), rel=1e-9)
    for name in ("vehicle_cost", "toll_cost", "ferry_cost"):
        shared = costs[name] * party_size
        assert shared.to_numpy() == pytest.approx(costs[f"{name}_per_party"].to_numpy(), rel=1e-9)


def test_two_people_pay_half_the_car_each_and_not_half_the_time() -> None:
    alone = priced(make_study(costs={"party_size": 1.0}), "west")
    two = priced(make_study(), "west")
    assert two["vehicle_cost"] == pytest.approx(alone["vehicle_cost"] / 2)
    assert two["time_cost"] == pytest.approx(alone["time_cost"])
