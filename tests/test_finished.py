"""The finished table of the small world, worked by hand."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pipeline.costs import cost
from pipeline.errors import JoinError
from pipeline.finished import join, summarise_join
from pipeline.study import Study
from pipeline.tables import ZoneTable
from tests.visit_world import make_origins, make_routes, make_sites, make_study, make_zones

ZONES = make_zones()
COSTS = cost(make_routes(), ZONES, make_sites(), None, study=make_study())[0]
NOWHERE: list[str | None] = [None]


def finished(origins: pd.DataFrame, study: Study, **tables: pd.DataFrame) -> pd.DataFrame:
    """`zone_table` by zone (the reserve's rows are the only ones)."""
    zones, sites = tables.get("zones", make_zones()), tables.get("sites", make_sites())
    routes = tables.get("routes", make_routes())
    (costs,) = cost(routes, zones, sites, origins, study=study)
    (table,) = join(origins, costs, routes, zones, sites, study=study)
    return ZoneTable.checked(table).set_index("zone_id")


def test_visits_are_trips_times_party_times_weight() -> None:
    """West: 1 × 2 × 1 and 3 × 4 × 0.5 = 8; a record without party size takes the mean.

    Mean per trip: (1 × 2 + 3 × 0.5 × 4) / (1 + 1.5) = 3.2, so east has 2 × 3.2 = 6.4.
    """
    origins = make_origins(
        ["west", "west", "east"],
        trips=[1, 3, 2],
        party_size=[2, 4, np.nan],
        weight=[1, 0.5, 1],
    )
    table = finished(origins, make_study())
    assert table["visits"].to_dict() == pytest.approx({"west": 8, "east": 6.4, "isle": 0})
    assert table["visits_per_1000"].to_dict() == pytest.approx(
        {"west": 8, "east": 3.2, "isle": np.nan}, nan_ok=True
    )
    assert (table["expansion_factor"] == 1).all()


def test_without_any_party_size_a_trip_is_one_person() -> None:
    table = finished(make_origins(["west", "west"], party_size=np.nan), make_study())
    assert table.loc["west", "visits"] == 2


def test_a_known_total_is_spread_over_the_zones() -> None:
    """10 visits: 6 west, 1 east, 1 of an unknown code, 2 from abroad; 1,000 in the year.

    A fifth is foreign, so 800 are domestic, spread as 6 to 1: factor 800 / 7.
    """
    origins = make_origins(
        [*["west"] * 6, "east", None, None, None],
        party_size=1.0,
        origin_status=["matched"] * 6 + ["crosswalk", "unknown_code", "foreign", "foreign"],
    )
    table = finished(origins, make_study(visits={"annual_visits": {"reserve": 1000}}))
    assert table["visits"].sum() == pytest.approx(800)
    assert table.loc["west", "visits"] == pytest.approx(800 * 6 / 7)
    assert table.loc["west", "expansion_factor"] == pytest.approx(800 / 7)
    assert table["sampled_visits"].to_dict() == {"west": 6, "east": 1, "isle": 0}


def test_only_sites_to_be_valued_are_rows_and_zones_without_a_visit_are_zeros() -> None:
    table = finished(make_origins(["west"]), make_study())
    assert table["site_id"].tolist() == ["reserve"] * 3
    assert table["visits"].to_dict() == {"west": 2, "east": 0, "isle": 0}


def test_the_market_and_why_a_zone_is_left_out() -> None:
    near = make_study(market={"max_distance_km": 50.0})
    quick = make_study(market={"max_drive_time_min": 40.0})
    both = make_study(market={"max_distance_km": 50.0, "max_drive_time_min": 40.0})
    origins = make_origins(["west", "isle"])
    for study, note in (
        (near, "further than 50 km"),
        (quick, "longer drive than 40 min"),
        (both, "further than 50 km"),
    ):
        table = finished(origins, study)
        assert table["in_market"].to_dict() == {"west": True, "east": False, "isle": False}
        assert table.loc["east", "market_note"] == note
        assert table.loc["isle", "market_note"] == (
            "no people live in the zone, though it has visits"
        )
    assert table["market_note"].isna().to_dict() == {"west": True, "east": False, "isle": False}


def test_a_zone_that_is_not_reached_is_out_of_the_market() -> None:
    zones = make_zones(population=[1000, 2000, 10])
    table = finished(make_origins(["west"]), make_study(), zones=zones)
    assert table.loc["isle", "market_note"] == "no price: no_path"
    fewer = make_routes().query("zone_id != 'isle'")
    table = finished(make_origins(["west"]), make_study(), zones=zones, routes=fewer)
    assert table.loc["isle", "market_note"] == "no route in the routes table"
    assert not table.loc["isle", "in_market"]


def test_the_cheapest_substitute() -> None:
    """Lake from the west: 120 km × 0.30 / 2 + 2 h × 12.50 + 1 = 18 + 25 + 1 = 44."""
    table = finished(make_origins(["west"]), make_study())
    assert table.loc["west", "substitute_cost"] == pytest.approx(44)
    assert table.loc["west", "substitute_id"] == "lake"
    nothing = {"west": False, "east": False, "isle": True}
    assert table["substitute_cost"].isna().to_dict() == nothing
    assert table["substitute_id"].isna().to_dict() == nothing


def test_valued_sites_are_substitutes_of_each_other_only_where_the_study_says_so() -> None:
    sites = make_sites().assign(role="site")
    origins = make_origins(["west", "west"], site_id=["reserve", "lake"])
    for alike in (False, True):
        study = make_study(market={"sites_are_substitutes": alike})
        table = finished(origins, study, sites=sites)
        west = table.loc["west"].set_index("site_id")
        assert west["substitute_cost"].notna().tolist() == [alike, alike]
    assert west["substitute_id"].to_dict() == {"lake": "reserve", "reserve": "lake"}
    assert west.loc["lake", "substitute_cost"] == pytest.approx(25.5)


def test_covariates_are_carried_along() -> None:
    zones = make_zones().assign(cars=[500, 900, 0], shops=1)
    table = finished(
        make_origins(["west"]), make_study(zones={"covariates": ["cars"]}), zones=zones
    )
    assert table["cars"].to_dict() == {"west": 500, "east": 900, "isle": 0}
    assert "shops" not in table


@pytest.mark.parametrize(
    ("annual", "message"),
    [
        ({"reserv": 10}, "'reserv', which is no site to be valued; the nearest is 'reserve'"),
        ({"reserve": 10}, "cannot be spread over the zones"),
    ],
)
def test_a_total_that_cannot_be_spread_is_refused(annual: dict[str, float], message: str) -> None:
    with pytest.raises(JoinError, match=message):
        finished(make_origins(NOWHERE), make_study(visits={"annual_visits": annual}))


def test_a_record_of_a_zone_that_is_gone_is_refused() -> None:
    with pytest.raises(JoinError, match="zone 'north' of record 'r1'"):
        finished(make_origins(["west", "north"]), make_study())


def test_summary_line() -> None:
    """West has 2 visits in the market, east 4 outside it."""
    study = make_study(market={"max_distance_km": 50.0})
    table = finished(make_origins(["west", "east", "east"]), study).reset_index()
    assert summarise_join((table,)) == (
        "3 zones × 1 site, 2 pairs with visits, 2 visits a year in the market (1 pairs), "
        "66.7% of visits from outside it"
    )


RECORD = st.tuples(
    st.sampled_from(["west", "east", "isle", None]),
    st.sampled_from(["matched", "foreign"]),
    st.integers(1, 5),
    st.one_of(st.just(np.nan), st.integers(1, 9)),
    st.floats(0.1, 10),
)


@given(st.lists(RECORD, min_size=1, max_size=25), st.floats(1, 1e7))
@settings(derandomize=True, max_examples=40, deadline=None)
def test_the_domestic_part_of_a_known_total_is_conserved(
    rows: list[tuple[str | None, str, int, float, float]], total: float
) -> None:
    """Whatever the records are: zone totals = known total × domestic share of person-visits."""
    rows = [("west", "matched", 1, 2.0, 1.0), *rows]
    zones, kinds, trips, sizes, weights = (list(column) for column in zip(*rows, strict=True))
    status = [
        kind if kind == "foreign" else ("unknown_code" if zone is None else "matched")
        for zone, kind in zip(zones, kinds, strict=True)
    ]
    zones = [
        zone if state == "matched" else None for zone, state in zip(zones, status, strict=True)
    ]
    origins = make_origins(
        zones, trips=trips, party_size=sizes, weight=weights, origin_status=status
    )
    w = np.array(trips) * np.array(weights)
    size = np.array(sizes, dtype=float)
    domestic = np.array([state != "foreign" for state in status])
    known = domestic & ~np.isnan(size)
    people = w * np.where(np.isnan(size), (w * size)[known].sum() / w[known].sum(), size)
    study = make_study(visits={"annual_visits": {"reserve": total}})
    (table,) = join(origins, COSTS, make_routes(), ZONES, make_sites(), study=study)
    expected = total * people[domestic].sum() / people.sum()
    assert table["visits"].sum() == pytest.approx(expected, rel=1e-9)
    placed = np.array([state == "matched" for state in status])
    assert table["sampled_visits"].sum() == pytest.approx(people[placed].sum(), rel=1e-9)
