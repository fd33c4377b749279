"""The table of persons: a row per respondent, with his own price and the people he stands for."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
import pytest

from pipeline.costs import cost
from pipeline.demand import demand
from pipeline.errors import JoinError
from pipeline.finished import join, summarise_join
from pipeline.parties import counted_trips
from pipeline.tables import TripTable
from tests.visit_world import make_origins, make_routes, make_sites, make_study, make_zones


def persons(origins: pd.DataFrame, **visits: Any) -> tuple[pd.DataFrame, pd.DataFrame]:
    """`zone_table` and `trip_table` of the small world."""
    study = make_study(visits=visits, market={"level": "person"})
    zones, routes, sites = make_zones(), make_routes(), make_sites()
    origins = origins.assign(counted_trips=counted_trips(origins, study.visits.kind))
    (costs,) = cost(routes, zones, sites, None, study=study)
    table, trips = join(origins, costs, routes, zones, sites, study=study)
    assert trips is not None
    return table, TripTable.checked(trips).set_index("record_id")


def test_the_cost_of_a_respondent_is_shared_by_his_own_party() -> None:
    """West to the reserve: 60 km × 0.30 = 18 for the car, 1 h × 12.50, 4 entrance.

    A party of two (the study's number): 9 + 12.50 + 4 = 25.50; alone 34.50; of three 22.50.
    """
    origins = make_origins(["west"] * 3, party_size=[np.nan, 1, 3], trips=[1, 2, 3])
    _, trips = persons(origins, kind="household")
    assert trips["travel_cost"].tolist() == pytest.approx([25.5, 34.5, 22.5])
    assert trips["party_size"].tolist() == [2, 1, 3]
    assert trips["trips"].tolist() == [1, 2, 3]


def test_weights_times_trips_are_the_visits_of_the_year() -> None:
    """Interviews: who comes 12 times is met 12 times as often, and stands for a twelfth."""
    origins = make_origins(["west", "west", "east"], trips=[12, 1, 2], party_size=1.0)
    table, trips = persons(origins, kind="on_site", annual_visits={"reserve": 900})
    assert trips["weight"].tolist() == pytest.approx([25, 300, 150])
    assert trips["sampling_weight"].tolist() == [1, 1, 1]
    assert (trips["weight"] * trips["trips"]).sum() == pytest.approx(900)
    assert trips["visits"].sum() == pytest.approx(table["visits"].sum())


def test_whoever_never_came_is_a_row_of_a_household_survey() -> None:
    _, trips = persons(make_origins(["west", "east"], trips=[0, 2]), kind="household")
    assert trips["trips"].tolist() == [0, 2]
    assert trips["weight"].tolist() == [1500, 1500]


def test_the_cost_of_a_trip_with_other_purposes_is_apportioned() -> None:
    origins = make_origins(["west"] * 2, party_size=2.0).assign(purpose_share=[1.0, 0.4])
    _, trips = persons(origins, kind="household", other_purposes="apportion_by_share")
    assert trips["travel_cost"].tolist() == pytest.approx([25.5, 0.4 * 25.5])
    assert trips["purpose_share_used"].tolist() == [1, 0.4]
    _, kept = persons(origins, kind="household", other_purposes="indicator")
    assert kept["travel_cost"].tolist() == pytest.approx([25.5, 25.5])
    assert kept["multi_purpose"].tolist() == [0, 1]
    _, dropped = persons(origins, kind="household", other_purposes="drop")
    assert dropped.index.tolist() == ["r0"]


def test_survey_columns_income_and_covariates_come_along() -> None:
    origins = make_origins(["west", "east"]).assign(
        household_income=[70_000, np.nan], activity=["birds", "walk"], age=[30.0, 40.0]
    )
    _, trips = persons(origins, kind="household", covariates=("age",))
    assert trips["household_income"].tolist() == [70_000, 41_600]
    assert trips["activity"].tolist() == ["birds", "walk"]
    assert trips["age"].tolist() == [30, 40]
    assert trips["substitute_cost"].notna().all()


def test_records_of_parties_in_a_register_are_no_persons() -> None:
    with pytest.raises(JoinError, match=r"needs records of persons, but .* kind is 'census'"):
        persons(make_origins(["west"]))


def test_records_outside_the_market_are_no_rows() -> None:
    """Nobody lives on the isle and no road leads there; the line says how many are left."""
    table, trips = persons(make_origins(["west", "isle"]), kind="household")
    assert trips["zone_id"].tolist() == ["west"]
    assert summarise_join((table, trips.reset_index())).endswith("; 1 record of persons")


def test_demand_of_visitors_met_on_the_site_is_recovered() -> None:
    """Trips are Poisson with a mean of exp(1 − 0.04 × cost); met in proportion to their trips.

    8,000 interviews, with costs shared by parties of one to four. The on-site model gives the
    coefficient within three standard errors; weights that corrected once more would not.
    """
    rng = np.random.default_rng(11)
    party = rng.integers(1, 5, 40_000)
    price = 18 / party + 16.5
    trips = rng.poisson(np.exp(1 - 0.04 * price))
    met = rng.choice(40_000, 8_000, p=trips / trips.sum())
    places: list[str | None] = ["west"] * len(met)
    origins = make_origins(places, trips=trips[met], party_size=party[met])
    _, table = persons(
        origins, kind="on_site", records_are="persons", annual_visits={"reserve": trips.sum()}
    )
    models = {"models": ("on_site_poisson",), "choose": "on_site_poisson"}
    estimates = demand(None, table.reset_index(), study=make_study(demand=models))[0]
    row = estimates.set_index("term").loc["travel_cost"]
    assert abs(row["estimate"] + 0.04) < 3 * row["std_error"]
    assert row["std_error"] < 0.004
    assert table["weight"].sum() == pytest.approx((trips > 0).sum(), rel=0.05)
