"""Reported figures against the routed ones, by hand."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
import pytest

from pipeline.costs import cost, cost_and_check
from pipeline.costs.reported import reported_pairs
from pipeline.errors import CostError
from pipeline.publish.reported import hide_few
from pipeline.tables import ReportedCheck
from tests.publish.conftest import make_publication
from tests.visit_world import make_origins, make_routes, make_sites, make_study, make_zones


def records(**columns: Any) -> pd.DataFrame:
    """Three from the west (30 km, 30 min), one from the east (60 km, 45 min), one unplaced."""
    return make_origins(["west", "west", "west", "east", None], **columns)


def check(**columns: Any) -> pd.DataFrame:
    _, table = cost_and_check(
        make_routes(), make_zones(), make_sites(), records(**columns), study=make_study()
    )
    return ReportedCheck.checked(table).set_index(["measure", "band"])


def test_bias_and_error_by_hand() -> None:
    """Reported 33, 27, nothing and 72 km; the unplaced record's 500 is not compared.

    Routed less reported: −3, +3, −12: bias −4, mean absolute error 6; ratios 1.1, 0.9, 1.2.
    """
    table = check(reported_distance_km=[33.0, 27.0, np.nan, 72.0, 500.0])
    whole = table.xs(("distance", "all")).to_dict()
    assert whole["records"] == 3
    assert whole["bias"] == pytest.approx(-4)
    assert whole["mean_absolute_error"] == pytest.approx(6)
    assert whole["median_ratio"] == pytest.approx(1.1)
    near = table.xs(("distance", "25 to 50 km")).to_dict()
    assert (near["records"], near["bias"], near["mean_absolute_error"]) == (2, 0.0, 3.0)
    assert table.xs(("distance", "50 to 100 km")).to_dict()["records"] == 1
    assert len(table) == 3


def test_spending_of_the_party_against_the_priced() -> None:
    """West: 60 km × 0.30 = 18 the party; 20 reported: 2 too little priced."""
    table = check(reported_cost=[20.0, np.nan, np.nan, np.nan, np.nan])
    row = table.xs(("spending", "all")).to_dict()
    assert row["routed_mean"] == pytest.approx(18)
    assert row["bias"] == pytest.approx(-2)
    assert row["unit"] == "currency"


def test_the_pairs_behind_the_figures_hold_no_record() -> None:
    """Two distances and one time: three rows, in the order of the measures."""
    told = records(
        reported_distance_km=[33.0, np.nan, np.nan, 72.0, 500.0],
        reported_time_min=[40.0, np.nan, np.nan, np.nan, 9.0],
    )
    routes = make_routes()
    (costs,) = cost(routes, make_zones(), make_sites(), told, study=make_study())
    pairs = reported_pairs(routes, costs, told)
    assert pairs.to_numpy().tolist() == [
        ["distance", "km", 30.0, 33.0, 30.0],
        ["distance", "km", 60.0, 72.0, 60.0],
        ["time", "min", 30.0, 40.0, 30.0],
    ]
    assert pairs.columns.tolist() == ["measure", "unit", "distance_km", "reported", "routed"]
    assert reported_pairs(routes, costs, records()).empty


def test_the_report_draws_a_mark_for_each_band() -> None:
    """Bands of 25 to 50 and 50 to 100 km; a band that is hidden is not drawn either."""
    table = check(reported_distance_km=[33.0, 27.0, np.nan, 72.0, np.nan]).reset_index()
    report = make_publication(reported_check=table).report
    assert "Distance: reported against routed, means by band of distance" in report
    assert "25 to 50 km: reported 30.0, routed 30.0 km; 2 records" in report
    assert "50 to 100 km: reported 72.0, routed 60.0 km; 1 record" in report
    hidden = hide_few(table, below=3)
    assert hidden is not None
    assert "means by band of distance" not in make_publication(reported_check=hidden).report


def test_nothing_reported_is_an_empty_table() -> None:
    assert check().empty


def test_factors_from_the_records() -> None:
    """The median of 1.1, 0.9 and 1.2: 60 km and 1.1 are 66; time as routed."""
    study = make_study(costs={"distance_factor": "records"})
    told = records(reported_distance_km=[33.0, 27.0, np.nan, 72.0, 500.0])
    (costs,) = cost(make_routes(), make_zones(), make_sites(), told, study=study)
    assert costs["round_trip_km"].iloc[0] == pytest.approx(66)
    assert costs["round_trip_hours"].iloc[0] == pytest.approx(1)


@pytest.mark.parametrize("told", [None, records(), records(reported_time_min=np.nan)])
def test_a_factor_from_records_that_report_nothing(told: pd.DataFrame | None) -> None:
    study = make_study(costs={"time_factor": "records"})
    with pytest.raises(CostError, match=r"time_factor = .records.*reports its time.*a number"):
        cost(make_routes(), make_zones(), make_sites(), told, study=study)


def test_a_band_of_few_records_takes_the_other_bands_with_it() -> None:
    """Else the few would follow from all less the others."""
    table = check(reported_distance_km=[33.0, 27.0, np.nan, 72.0, 500.0]).reset_index()
    shown = hide_few(table, below=2)
    assert shown is not None
    assert shown["band"].tolist() == ["all"]
    assert hide_few(table, below=0) is table
    nothing = hide_few(table, below=4)
    assert nothing is not None
    assert nothing.empty


def test_the_report_shows_it_where_there_is_something() -> None:
    table = check(reported_distance_km=[33.0, 27.0, np.nan, 72.0, 500.0]).reset_index()
    assert "Reported and routed" in make_publication(reported_check=table).report
    assert "Reported and routed" not in make_publication().report
