"""One party worked to the cent, on paper first.

Five people, two of them adults, drive an electric car 84 km to the reserve:

    home ── 80 km of road, 12 of them tolled ── 4 km ferry ── reserve      96 min one way,
                                                                           24 of them on the ferry
"""

from __future__ import annotations

from typing import Any

import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.costs import ITEMS, cost
from pipeline.errors import CostError, StudyError
from pipeline.study import Study
from pipeline.tables import Costs
from tests.visit_world import make_routes, make_sites, make_study, make_zones

ELECTRIC: dict[str, Any] = {
    "vehicle_cost_per_km": None,
    "vehicles": {
        "electric": {
            "energy": "electricity",
            "consumption_per_100km": 18.0,
            "per_km": {"wear": 0.040, "tyres": 0.015, "depreciation": 0.082},
        }
    },
    "energy_prices": {"electricity": 0.35},
    "toll_per_km": 0.15,
    "ferry_fare_per_vehicle": 14.0,
    "ferry_fare_per_person": 2.5,
    "parking_per_vehicle": {"reserve": 6.0},
    "party_size": 5.0,
    "adults": 2.0,
    "child_time_share": 0.25,
    "wage_fraction": 1 / 3,
    "earners_per_household": 1.5,
}


def party_study(**costs: Any) -> Study:
    return make_study(costs={**ELECTRIC, **costs})


def price(study: Study) -> dict[str, float]:
    """The row of the party: the only routed pair, from a home of 62,400 a year."""
    route = make_routes().head(1)
    route = route.assign(
        distance_km=84.0,
        return_distance_km=84.0,
        shortest_distance_km=79.0,
        drive_time_min=96.0,
        return_drive_time_min=96.0,
        ferry_km=4.0,
        ferry_min=24.0,
        toll_km=12.0,
    )
    zones = make_zones(household_income=[62_400, 1, 1])
    (costs,) = cost(route, zones, make_sites(), None, study=study)
    row = Costs.checked(costs).iloc[0]
    return {str(name): row[name] for name in row.index}


def test_shared_by_all_to_the_cent() -> None:
    """A km: 0.18 × 0.35 = 0.063 of current, 0.137 of wear: 0.20.

    The party: 160 km × 0.20 = 32.00; parking 6.00; 24 km × 0.15 = 3.60;
    2 × (14 + 5 × 2.50) = 53.00; gate 5 × 4 = 20.00. The wage: 62,400 ÷ 1.5 ÷ 2,080 = 20 an
    hour; 3.2 h × 20 ÷ 3 = 21.33 an adult; (2 + 3 × 0.25) × 21.33 = 58.67.
    A fifth each: 6.40 + 1.20 + 0.72 + 10.60 + 11.73 + 4.00 = 34.65.
    """
    row = price(party_study())
    assert row["vehicle_cost_per_km"] == pytest.approx(0.20)
    assert row["hourly_wage"] == pytest.approx(20.0)
    assert row["driven_km"] == pytest.approx(160.0)
    assert row["vehicle_cost_per_party"] == pytest.approx(32.0)
    assert row["parking_cost_per_party"] == pytest.approx(6.0)
    assert row["toll_cost_per_party"] == pytest.approx(3.6)
    assert row["ferry_cost_per_party"] == pytest.approx(53.0)
    cents = {name: round(row[name], 2) for name in (*ITEMS, "travel_cost")}
    assert cents == {
        "vehicle_cost": 6.40,
        "parking_cost": 1.20,
        "toll_cost": 0.72,
        "ferry_cost": 10.60,
        "fare_cost": 0.0,
        "time_cost": 11.73,
        "fee_cost": 4.00,
        "lodging_cost": 0.0,
        "other_cost": 0.0,
        "travel_cost": 34.65,
    }


def test_the_adults_pay_for_the_children_to_the_cent() -> None:
    """Half each: 16.00 + 3.00 + 1.80 + 26.50 + 29.33 + 10.00 = 86.63."""
    row = price(party_study(shared_by="adults"))
    cents = [round(row[name], 2) for name in ITEMS]
    assert cents == [16.0, 3.0, 1.8, 26.5, 0.0, 29.33, 10.0, 0.0, 0.0]
    assert round(row["travel_cost"], 2) == 86.63


def test_a_vehicle_as_a_whole_to_the_cent() -> None:
    """All five in one: 32 + 6 + 3.60 + 53 + 58.67 + 20 = 173.27."""
    row = price(party_study(shared_by="vehicle"))
    cents = [round(row[name], 2) for name in ITEMS]
    assert cents == [32.0, 6.0, 3.6, 53.0, 0.0, 58.67, 20.0, 0.0, 0.0]
    assert round(row["travel_cost"], 2) == 173.27


def test_adults_who_are_to_pay_have_to_be_known() -> None:
    with pytest.raises(StudyError, match="shared_by = 'adults' needs adults"):
        party_study(shared_by="adults", adults=None)


def test_each_kind_of_hour_at_its_own_share_of_the_wage() -> None:
    """2.4 h on the road and 0.8 h on the ferry, two adults, children's time at nothing.

    Road: (driver ½ + rider ¼) ÷ 2 = 0.375 × 2.4 = 0.9; ferry 0.1 × 0.8 = 0.08; a quarter of an
    hour on foot each way at the whole wage, 0.5; four hours on site at 0.05, 0.2: 1.68 hours of a
    wage of 20, 33.60 an adult, two of five people: 13.44.
    """
    row = price(
        party_study(
            wage_fraction=0.5,
            wage_fraction_riding=0.25,
            wage_fraction_ferry=0.1,
            wage_fraction_walking=1.0,
            wage_fraction_on_site=0.05,
            walk_min=15.0,
            hours_on_site=4.0,
            child_time_share=0.0,
        )
    )
    assert row["time_cost"] == pytest.approx(13.44)
    assert row["travel_hours"] == pytest.approx(2.4 + 0.8 + 0.5 + 4.0)
    assert row["time_value_per_hour"] == pytest.approx(7.5)


def test_time_on_site_costs_nothing_unless_it_is_asked_for() -> None:
    assert price(party_study(hours_on_site=4.0))["time_cost"] == price(party_study())["time_cost"]


@pytest.mark.parametrize(
    ("bounds", "wage"),
    [
        ({"wage_floor_per_hour": 25.0}, 25.0),
        ({"wage_cap_per_hour": 15.0}, 15.0),
        ({"wage_floor_per_hour": 5.0, "wage_cap_per_hour": 90.0}, 20.0),
        ({"hourly_wage": 31.0}, 31.0),
        ({"hourly_wage": 31.0, "wage_cap_per_hour": 30.0}, 30.0),
    ],
)
def test_a_stated_wage_a_floor_and_a_cap(bounds: dict[str, float], wage: float) -> None:
    assert price(party_study(**bounds))["hourly_wage"] == pytest.approx(wage)


def test_the_shortest_route_saves_kilometres_and_no_time() -> None:
    """79 km each way, 8 of the 158 by ferry: 150 km × 0.20 = 30 for the party."""
    row = price(party_study(distance_along="shortest"))
    assert row["vehicle_cost_per_party"] == pytest.approx(30.0)
    assert row["round_trip_hours"] == pytest.approx(3.2)


def test_calibrated_distances_and_times() -> None:
    """A tenth more of the road, 160 to 176 km and 2.4 to 2.64 h; the ferry is as it is."""
    row = price(party_study(distance_factor=1.1, time_factor=1.1))
    assert row["driven_km"] == pytest.approx(176.0)
    assert row["round_trip_km"] == pytest.approx(184.0)
    assert row["round_trip_hours"] == pytest.approx(2.64 + 0.8)
    assert row["toll_cost_per_party"] == pytest.approx(3.96)


def test_more_adults_than_people_are_refused() -> None:
    with pytest.raises(CostError, match=r"more adults than people; first: 6 adults among 5"):
        price(party_study(adults=6.0))


MONEY = st.floats(0, 200, allow_nan=False)


@given(
    shared_by=st.sampled_from(["all", "adults", "vehicle"]),
    party=st.floats(1, 60),
    adult_share=st.floats(0.05, 1),
    child=st.floats(0, 1),
    amounts=st.tuples(MONEY, MONEY, MONEY, MONEY, MONEY),
    riding=st.floats(0, 2),
)
@settings(derandomize=True, max_examples=60, deadline=None)
def test_items_sum_to_the_cent_and_the_party_pays_what_its_people_pay(
    shared_by: str,
    party: float,
    adult_share: float,
    child: float,
    amounts: tuple[float, float, float, float, float],
    riding: float,
) -> None:
    study = party_study(
        shared_by=shared_by,
        party_size=party,
        adults=max(party * adult_share, 0.05),
        child_time_share=child,
        wage_fraction_riding=riding,
        ferry_fare_per_vehicle=amounts[0],
        ferry_fare_per_person=amounts[1],
        parking_per_vehicle={"reserve": amounts[2]},
        toll_per_km=amounts[3],
        other_cost_per_person=amounts[4],
    )
    row = price(study)
    assert abs(sum(row[name] for name in ITEMS) - row["travel_cost"]) < 0.005
    for name in ("vehicle_cost", "parking_cost", "toll_cost", "ferry_cost"):
        assert row[name] * row["bearers"] == pytest.approx(row[f"{name}_per_party"], abs=1e-6)


def test_the_whole_party_pays_the_same_however_it_is_shared() -> None:
    everyone = price(party_study())["travel_cost"] * 5
    adults = price(party_study(shared_by="adults"))["travel_cost"] * 2
    vehicle = price(party_study(shared_by="vehicle"))["travel_cost"]
    assert everyone == pytest.approx(adults) == pytest.approx(vehicle)
    assert vehicle == pytest.approx(173.2667, abs=1e-4)


def test_no_row_is_changed() -> None:
    routes, zones, sites = make_routes(), make_zones(), make_sites()
    before = routes.copy(), zones.copy(), sites.copy()
    cost(routes, zones, sites, None, study=make_study())
    for now, then in zip((routes, zones, sites), before, strict=True):
        pd.testing.assert_frame_equal(now, then)
