"""Prices of records by what each tells of its own trip, worked by hand.

All go from the west to the reserve, 30 km and half an hour each way, where the wage is 25 an
hour, an hour costs half of it and the gate 4. A km costs 0.20 with petrol (8 l × 1.50 = 0.12 and
0.08 of wear), 0.16 with current (18 kWh × 0.50 = 0.09 and 0.07), and half of the cars are each.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from pipeline.costs import ITEMS, cost, own_trip_costs
from pipeline.errors import CostError
from pipeline.study import Study
from tests.visit_world import make_origins, make_routes, make_sites, make_study, make_zones

CLASSES: dict[str, Any] = {
    "vehicle_cost_per_km": None,
    "energy_prices": {"petrol": 1.5, "current": 0.5},
    "vehicles": {
        "petrol": {"energy": "petrol", "consumption_per_100km": 8.0, "per_km": {"wear": 0.08}},
        "electric": {"energy": "current", "consumption_per_100km": 18.0, "per_km": {"wear": 0.07}},
    },
    "vehicle_mix": {"petrol": 0.5, "electric": 0.5},
    "modes": {
        "train": {"fare_per_person": 5.0, "speed_kmh": 60.0, "extra_min": 15.0, "access_km": 2.0}
    },
    "child_time_share": 0.5,
}


def classes_study(**costs: Any) -> Study:
    return make_study(costs={**CLASSES, **costs})


def own(study: Study, **told: Any) -> dict[str, float]:
    """Prices of one record of the west."""
    origins = make_origins(["west"], **{name: [value] for name, value in told.items()})
    tables = make_routes(), make_zones(), make_sites(), origins
    row = own_trip_costs(origins, *tables, study=study).iloc[0]
    assert row[list(ITEMS)].sum() == pytest.approx(row["travel_cost"])
    return {str(name): float(row[name]) for name in row.index}


def test_a_record_that_tells_nothing_has_the_price_of_its_zone() -> None:
    """60 km × 0.18 ÷ 2 = 5.40, time 12.50, gate 4: 21.90."""
    row = own(classes_study(), party_size=np.nan)
    assert row["travel_cost"] == pytest.approx(21.90)
    (costs,) = cost(make_routes(), make_zones(), make_sites(), None, study=classes_study())
    assert row["travel_cost"] == pytest.approx(costs.loc[0, "travel_cost"])


FAMILY: dict[str, Any] = {
    "party_size": 4.0,
    "adults": 2.0,
    "vehicle": "electric",
    "household_income": 83_200.0,
}


def test_a_family_in_an_electric_car_with_its_own_income() -> None:
    """60 km × 0.16 ÷ 4 = 2.40; 83,200 ÷ 2,080 = 40 an hour, an adult's hour costs 20.

    Two adults and two children at half: 3 × 20 ÷ 4 = 15.00; gate 4: 21.40.
    """
    row = own(classes_study(), **FAMILY)
    assert row["hourly_wage"] == pytest.approx(40)
    assert row["vehicle_cost"] == pytest.approx(2.40)
    assert row["time_cost"] == pytest.approx(15.00)
    assert row["travel_cost"] == pytest.approx(21.40)


@pytest.mark.parametrize(("shared_by", "price"), [("all", 21.40), ("adults", 42.80),
                                                  ("vehicle", 85.60)])  # fmt: skip
def test_the_family_pays_the_same_whoever_shares_it(shared_by: str, price: float) -> None:
    row = own(classes_study(shared_by=shared_by, adults=1.5), **FAMILY)
    assert row["travel_cost"] == pytest.approx(price)


def test_the_wage_may_be_the_zone_s_or_a_stated_one() -> None:
    assert own(classes_study(wage_of="zone"), **FAMILY)["hourly_wage"] == pytest.approx(25)
    assert own(classes_study(hourly_wage=18.0), **FAMILY)["hourly_wage"] == pytest.approx(18)


def test_an_own_income_makes_up_for_a_zone_without_one() -> None:
    origins = make_origins(["east", "west"]).assign(household_income=[41_600.0, np.nan])
    zones = make_zones(household_income=[52_000, np.nan, np.nan])
    tables = make_routes(), zones, make_sites(), origins
    wages = own_trip_costs(origins, *tables, study=make_study())["hourly_wage"]
    assert wages.tolist() == [20, 25]
    silent = origins.assign(household_income=np.nan)
    with pytest.raises(CostError, match=r"1 of 3 zones have no household income.*'east'"):
        own_trip_costs(silent, *tables, study=make_study())


def test_a_train_with_the_way_to_the_station() -> None:
    """Alone: fare 2 × 5; 4 km of driving × 0.20 = 0.80; 2 × (½ h + ¼ h) × 12.50 = 18.75; gate 4.

    33.55 in all, whatever share of its zone comes by car; a car would have been 28.50.
    """
    row = own(classes_study(), party_size=1.0, vehicle="petrol", mode="train")
    amounts = [row[name] for name in ("fare_cost", "vehicle_cost", "time_cost", "travel_cost")]
    assert amounts == pytest.approx([10.0, 0.80, 18.75, 33.55])
    assert row["road_share"] == 0
    car = own(classes_study(), party_size=1.0, vehicle="petrol", mode="motorcycle")
    assert car["travel_cost"] == pytest.approx(12 + 12.5 + 4)


def test_a_mode_or_vehicle_without_figures_is_named() -> None:
    with pytest.raises(CostError, match=r"'coach' in column 'mode' of record 'r0'"):
        own(classes_study(), mode="coach")
    origins = make_origins(["west", "east"]).assign(vehicle=["petrol", "tractor"])
    with pytest.raises(CostError, match=r"'tractor' in column 'vehicle', row 2 \(record 'r1'"):
        cost(make_routes(), make_zones(), make_sites(), origins, study=classes_study())
    # A flat figure holds for every vehicle.
    cost(make_routes(), make_zones(), make_sites(), origins, study=make_study())


def test_own_nights_and_hours_on_the_site() -> None:
    """Two nights at 30 are 60 a person; 3 h on the site at a tenth of 25 are 7.50."""
    study = classes_study(lodging_per_person_night=30.0, wage_fraction_on_site=0.1)
    row = own(study, nights=2.0, hours_on_site=3.0)
    assert row["lodging_cost"] == pytest.approx(60)
    assert row["time_cost"] == pytest.approx(12.5 + 7.5)


def test_adults_who_are_to_pay_and_are_not_there() -> None:
    study = classes_study(shared_by="adults", adults=1.5)
    with pytest.raises(CostError, match=r"a party without one; .*'adults' of record 'r0'"):
        own(study, party_size=3.0, adults=0.0)


def test_lodging_is_the_mean_of_the_site_s_records() -> None:
    """One trip of 3 nights and three of none: ¾ night × 40 = 30 a person; none at the lake."""
    origins = make_origins(["west", "east"], trips=[1, 3]).assign(nights=[3.0, 0.0])
    study = make_study(costs={"lodging_per_person_night": 40.0})
    (costs,) = cost(make_routes(), make_zones(), make_sites(), origins, study=study)
    first = costs.groupby("site_id")["lodging_cost"].first().to_dict()
    assert first == {"reserve": 30.0, "lake": 0.0}
    with pytest.raises(CostError, match="no record tells how many nights"):
        cost(make_routes(), make_zones(), make_sites(), make_origins(["west"]), study=study)


def test_a_drive_that_was_enjoyed_costs_less_time_and_no_less_fuel() -> None:
    enjoyed = own(make_study(costs={"enjoyed_drive_share": 0.4}))
    plain = own(make_study())
    assert enjoyed["time_cost"] == pytest.approx(0.6 * plain["time_cost"])
    assert enjoyed["vehicle_cost"] == plain["vehicle_cost"]
    assert enjoyed["time_value_per_hour"] == pytest.approx(7.5)


def test_a_ferry_is_not_part_of_the_drive_that_was_enjoyed() -> None:
    """Of an hour there and back 20 min are on the ferry: 40 min × 0.6 + 20 min = 44 min."""
    routes = make_routes().assign(ferry_km=1.0, ferry_min=10.0)
    study = make_study(costs={"enjoyed_drive_share": 0.4})
    (costs,) = cost(routes, make_zones(), make_sites(), None, study=study)
    assert costs.loc[0, "time_cost"] == pytest.approx(12.5 * 44 / 60)


def test_a_study_s_records_price_themselves_in_the_finished_table() -> None:
    """Items of a trip with other purposes are the site's share of it; they add up to its price."""
    from pipeline.finished import join
    from pipeline.parties import counted_trips
    from pipeline.tables import TripTable

    origins = make_origins(["west", "west"], party_size=4.0).assign(
        vehicle=["electric", "petrol"],
        adults=2.0,
        household_income=[83_200.0, np.nan],
        purpose_share=[1.0, 0.5],
    )
    study = make_study(
        costs=CLASSES,
        visits={"kind": "household", "other_purposes": "apportion_by_share"},
        market={"level": "person"},
    )
    origins["counted_trips"] = counted_trips(origins, "household")
    routes, zones, sites = make_routes(), make_zones(), make_sites()
    (costs,) = cost(routes, zones, sites, origins, study=study)
    _, trips = join(origins, costs, routes, zones, sites, study=study)
    assert trips is not None
    table = TripTable.checked(trips)
    # The other: 60 × 0.20 ÷ 4 = 3; 3 × 12.50 ÷ 4 = 9.375; gate 4: half of 16.375.
    assert table["travel_cost"].tolist() == pytest.approx([21.40, 8.1875])
    assert table[list(ITEMS)].sum(axis=1).tolist() == pytest.approx([21.40, 8.1875])
    assert table["household_income"].tolist() == [83_200, 52_000]
    # The lake, twice as far: 120 × 0.16 ÷ 4 = 4.80; 2 h × 20 × 3 ÷ 4 = 30; fee 1. And the other:
    # 120 × 0.20 ÷ 4 = 6; 2 × 12.50 × 3 ÷ 4 = 18.75; 1.
    assert table["substitute_cost"].tolist() == pytest.approx([35.80, 25.75])
    assert "total_of" not in table
