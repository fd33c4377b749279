"""A published zonal example, to the printed digits.

King, D. M. and Mazzotta, M. J., Ecosystem Valuation (website), 2000, "Travel Cost Method",
hypothetical application of the zonal travel cost approach. Figures from memory.

====  =======  ======  ==========  =======
zone  people   visits  round trip  minutes
====  =======  ======  ==========  =======
0     1,000    400     0 miles     0
1     2,000    400     20 miles    30
2     4,000    400     40 miles    60
3     8,000    400     80 miles    120
====  =======  ======  ==========  =======

$0.30 a mile and $0.15 a minute. Printed: visits per 1,000 = 330 − 7.755 × travel cost; visits
1,600 (observed) without a fee and 954, 409, 129, 20, 0 at fees of 10 to 50; about $23,000 under
that curve.

The convention behind the printed digits: the rate per 1,000 of each zone is predicted at its cost
plus the fee, nothing below zero, *rounded to a whole visit*, times the zone's thousands; the first
point is the observed count, and the area is by the trapezoid rule. Unrounded rates give 953, 410,
129, 20, 0.
"""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest

from pipeline.demand.family import FittedModel
from pipeline.demand.least_squares import Linear
from pipeline.demand.sample import Sample
from pipeline.surplus import fee_response
from tests.demand.worlds import a_sample

FEES = np.array([0.0, 10, 20, 30, 40, 50])


@pytest.fixture
def sample() -> Sample:
    miles = np.array([0.0, 20, 40, 80])
    minutes = np.array([0.0, 30, 60, 120])
    return a_sample(
        pd.DataFrame(
            {
                "zone_id": ["0", "1", "2", "3"],
                "site_id": "site",
                "population": [1000.0, 2000, 4000, 8000],
                "visits": 400.0,
                "travel_cost": 0.30 * miles + 0.15 * minutes,
            }
        )
    )


@pytest.fixture
def model(sample: Sample) -> FittedModel:
    return Linear().fit(sample, errors="model")


def test_the_regression_is_the_printed_one(model: FittedModel) -> None:
    constant, price = model.estimate
    assert f"{constant:.0f}" == "330"
    assert f"{price:.3f}" == "-7.755"


def test_visits_at_each_fee_are_the_printed_ones(model: FittedModel, sample: Sample) -> None:
    thousands = sample.people / 1000
    by_zone = np.array([Linear().predict(model.estimate, sample, fee)[0] for fee in FEES])
    printed = np.round(by_zone / thousands) @ thousands
    assert printed[1:].tolist() == [954, 409, 129, 20, 0]


def test_unrounded_visits_are_within_two_of_the_printed_ones(
    model: FittedModel, sample: Sample
) -> None:
    visits = fee_response(model, sample, FEES, calibrated=False).visits[0]
    np.testing.assert_allclose(visits[1:], [954, 409, 129, 20, 0], atol=2)


def test_the_area_is_about_23_000(model: FittedModel, sample: Sample) -> None:
    visits = fee_response(model, sample, FEES, calibrated=False).visits[0]
    curve = np.concatenate([[sample.annual_visits], visits[1:]])
    assert sample.annual_visits == 1600
    assert round(float(np.trapezoid(curve, FEES)), -3) == 23_000
