"""Which rows are fitted, and as which counts."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from pipeline.demand.build import build_samples
from pipeline.errors import DemandError
from tests.demand.worlds import a_sample, zones


def four_zones() -> pd.DataFrame:
    """Four zones, 10 visits in the records that stand for 50 a year.

    ====  ======  =======  ======  ====
    zone  people  sampled  visits  cost
    ====  ======  =======  ======  ====
    a     100     6        30      1
    b     200     4        20      2
    c     300     0        0       3
    d     400     0        0       4
    ====  ======  =======  ======  ====
    """
    return pd.DataFrame(
        {
            "zone_id": list("abcd"),
            "site_id": "fen",
            "population": [100.0, 200.0, 300.0, 400.0],
            "household_income": [1.0, 2.0, 4.0, 3.0],
            "sampled_visits": [6.0, 4.0, 0.0, 0.0],
            "visits": [30.0, 20.0, 0.0, 0.0],
            "travel_cost": [1.0, 2.0, 3.0, 4.0],
            "in_market": True,
        }
    )


def test_counts_before_expansion_are_fitted_and_the_expansion_stands_in_the_exposure() -> None:
    sample = a_sample(four_zones())
    assert sample.counts.tolist() == [6, 4, 0, 0]
    assert sample.exposure.tolist() == [20, 40, 60, 80]
    assert sample.rate.tolist() == [0.3, 0.1, 0, 0]
    assert sample.annual_visits == 50
    assert sample.notes == ()


def test_without_sampled_visits_the_visits_are_the_counts_and_the_note_says_so() -> None:
    sample = a_sample(four_zones().drop(columns="sampled_visits"))
    assert sample.counts.tolist() == [30, 20, 0, 0]
    assert "counted in full" in sample.notes[0]


def test_weighted_records_are_fitted_as_weighted_counts_of_the_sample_size() -> None:
    """Zone a's visits are expanded by 10, zone b's by 5: 80 visits from 10 records."""
    table = four_zones().assign(visits=[60.0, 20.0, 0.0, 0.0])
    sample = a_sample(table)
    assert sample.counts.tolist() == [7.5, 2.5, 0, 0]
    np.testing.assert_allclose(sample.rate * sample.people, table["visits"])
    assert "expansion differs" in sample.notes[0]


def test_rows_left_out_are_counted_by_what_they_lack_with_their_visits() -> None:
    table = four_zones().assign(
        travel_cost=[np.nan, 2, 3, 4],
        household_income=[np.nan, 2, np.nan, 3],
        population=[100, 200, 300, 0],
    )
    sample = a_sample(table, "household_income")
    assert sample.zone_ids == ("b",)
    assert sample.notes[0] == (
        "3 of 4 rows are left out (1 without travel_cost, 2 without household_income, "
        "1 without inhabitants); their 30 visits a year are in no figure."
    )


def test_zones_outside_the_market_are_not_fitted_and_a_missing_column_means_all_are_in() -> None:
    table = four_zones()
    assert a_sample(table.assign(in_market=[True, True, True, False])).nobs == 3
    assert a_sample(table.drop(columns="in_market")).nobs == 4


def test_sites_are_separate_samples_in_alphabetical_order() -> None:
    both = pd.concat([four_zones().assign(site_id="weir"), four_zones()], ignore_index=True)
    assert [s.site_id for s in build_samples(both, None, ())] == ["fen", "weir"]


def test_trip_records_have_weights_instead_of_exposure() -> None:
    trips = pd.DataFrame(
        {
            "record_id": list("abc"),
            "zone_id": ["0001", None, "0002"],
            "site_id": "fen",
            "trips": [3.0, 0.0, 1.0],
            "weight": [10.0, 30.0, 20.0],
            "travel_cost": [5.0, 9.0, 7.0],
        }
    )
    (sample,) = build_samples(None, trips, ())
    assert sample.exposure.tolist() == [1, 1, 1]
    assert sample.weight.tolist() == [0.5, 1.5, 1.0]
    assert sample.annual_visits == 50
    assert sample.zone_ids == ("0001", "", "0002")


@pytest.mark.parametrize(
    ("covariates", "words"),
    [
        (("incme",), "no column of the finished table"),
        (("household_incme",), "Did you mean 'household_income'"),
        (("zone_id",), "not a number"),
        (("travel_cost",), "in the regression already"),
        (("visits",), "in the regression already"),
        (("household_income", "household_income"), "in the regression already"),
    ],
)
def test_a_covariate_that_cannot_be_is_named(covariates: tuple[str, ...], words: str) -> None:
    with pytest.raises(DemandError, match=words):
        build_samples(four_zones(), None, covariates)


def test_no_table_at_all_is_an_error() -> None:
    with pytest.raises(DemandError, match="neither a zone_table nor a trip_table"):
        build_samples(None, None, ())


def test_the_table_is_not_changed() -> None:
    table = zones()
    before = table.copy(deep=True)
    a_sample(table, "household_income")
    pd.testing.assert_frame_equal(table, before)
