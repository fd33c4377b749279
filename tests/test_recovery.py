"""The truth comes back: visits drawn from a stated demand function, estimated by the stages.

Coverage is a property of the interval, not of one draw: over many years drawn from the same
function, a 95 % interval must hold the truth about 95 % of the time. With 200 years the share
that a correct interval shows lies between 92 % and 98 % (two binomial standard errors, 1.5 %).
"""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from tests import world

YEARS = 200


@pytest.fixture(scope="module")
def per_trip() -> pd.DataFrame:
    """Surplus per trip of 200 years, by the chosen model; seeds 0 to 199, none left out."""
    # Sixty zones: the study file's advice below about 100 zones is HC3.
    values = world.estimate_many(range(YEARS), world.study(errors="HC3"))
    return values[(values["measure"] == "surplus_per_trip") & values["chosen"]]


@pytest.mark.parametrize("method", ["delta", "simulated"])
def test_interval_of_surplus_per_trip_covers_truth(per_trip: pd.DataFrame, method: str) -> None:
    rows = per_trip[per_trip["method"] == method]
    truth = world.TRUTH.surplus_per_trip
    covered = (rows["ci_low"] <= truth) & (truth <= rows["ci_high"])
    assert len(rows) == YEARS
    assert 0.92 <= covered.mean() <= 0.98


def test_standard_error_is_the_scatter_of_the_estimates(per_trip: pd.DataFrame) -> None:
    rows = per_trip[per_trip["method"] == "delta"]
    assert rows["std_error"].mean() == pytest.approx(rows["value"].std(), rel=0.15)
    # The mean of 200 estimates lies within three of its own standard errors of the truth.
    error_of_mean = rows["value"].std() / np.sqrt(YEARS)
    assert abs(rows["value"].mean() - world.TRUTH.surplus_per_trip) < 3 * error_of_mean


def test_an_interval_that_trusts_the_poisson_variance_is_too_narrow() -> None:
    """The check above can fail: parties and scatter between zones break the Poisson's variance."""
    settings = world.study(errors="model", models=("poisson",), choose="poisson")
    values = world.estimate_many(range(40), settings)
    rows = values[(values["measure"] == "surplus_per_trip") & (values["method"] == "delta")]
    truth = world.TRUTH.surplus_per_trip
    covered = (rows["ci_low"] <= truth) & (truth <= rows["ci_high"])
    assert covered.mean() < 0.6


def test_prices_of_the_world_by_hand() -> None:
    """Zone z01: 1.5 km and 1.125 min to `fen`; 28,000 + 2,000 x 5 = 38,000 a year.

    Vehicle 3 km x 0.25 / 2.1 people; time 0.0375 h x 0.3333 x 38,000 / 2,080.
    """
    first = world.prices().iloc[0]
    assert first["zone_id"] == "z01"
    assert first["vehicle_cost"] == pytest.approx(0.35714, abs=1e-5)
    assert first["time_cost"] == pytest.approx(0.22834, abs=1e-5)
    assert first["travel_cost"] == pytest.approx(0.58548, abs=1e-5)
