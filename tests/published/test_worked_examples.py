"""Worked examples of a textbook and of an article, to the printed digits (both from memory).

**A lake and five zones** (Boardman, Greenberg, Vining and Weimer, Cost-Benefit Analysis: Concepts
and Practice, chapter on valuing impacts from observed behaviour, "Illustration of the travel cost
method").

====  ========  ==========  ================  ==============  =======================
zone  people    cost, $     visits a person   surplus each    surplus of the zone, $M
====  ========  ==========  ================  ==============  =======================
A     10,000    20          15                525             5.25
B     10,000    30          13                390             3.90
C     20,000    65          6                 75              1.50
D     10,000    80          3                 15              0.15
E     10,000    90          1                 0               0
====  ========  ==========  ================  ==============  =======================

Printed: 440 thousand visits worth $10.80 million a year, on the line cost = 95 − 5 × visits. The
convention behind the printed digits: a person pays for *whole* visits, so the surplus is that of
steps below the line, q (q − 1) ÷ 2|b| in place of the triangle q² ÷ 2|b|.

**Petrol at twice the price** (Hausman, American Economic Review 71, 1981): gallons a month
= 4.95 − 14.22 × price + 0.082 × income, income $720, price up from $0.75 to $1.50. Printed:
compensating variation $37.17, deadweight loss $2.88.
"""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
from scipy.optimize import brentq

from pipeline.demand.family import FittedModel
from pipeline.demand.least_squares import Linear
from pipeline.demand.sample import Sample
from pipeline.surplus import fee_response
from pipeline.surplus.welfare import compensating
from tests.conftest import RecordCheck
from tests.demand.worlds import a_sample

LAKE = "Boardman, Greenberg, Vining and Weimer, Cost-Benefit Analysis (from memory)"
PETROL = "Hausman, American Economic Review 71, 1981 (from memory)"


@pytest.fixture
def lake() -> Sample:
    people = np.array([10_000.0, 10_000, 20_000, 10_000, 10_000])
    return a_sample(
        pd.DataFrame(
            {
                "zone_id": list("ABCDE"),
                "site_id": "lake",
                "population": people,
                "visits": people * [15, 13, 6, 3, 1],
                "travel_cost": [20.0, 30, 65, 80, 90],
            }
        )
    )


@pytest.fixture
def line(lake: Sample) -> FittedModel:
    return Linear().fit(lake, errors="model")


def test_the_line_of_the_lake(lake: Sample, line: FittedModel, record_check: RecordCheck) -> None:
    """Visits a person = 19 − cost / 5."""
    constant, price = line.estimate / lake.per
    record_check("lake in five zones: intercept of the line, $", -constant / price, 95, 1e-6, LAKE)
    record_check("lake in five zones: slope of the line, $ per visit", 1 / price, -5, 1e-6, LAKE)


def test_the_surplus_of_the_lake(
    lake: Sample, line: FittedModel, record_check: RecordCheck
) -> None:
    visits, area = Linear().predict(line.estimate, lake)
    record_check("lake in five zones: visits, thousand", visits.sum() / 1e3, 440, 1e-6, LAKE)
    slope = -line.price_coefficient / lake.per
    steps = area - visits / (2 * slope)
    each = steps / lake.people
    for zone, value, printed in zip("ABCDE", each, (525, 390, 75, 15, 0), strict=True):
        what = f"lake in five zones: surplus of a person of zone {zone}, $"
        record_check(what, float(value), printed, 1e-6, LAKE)
    total = float(steps.sum()) / 1e6
    record_check("lake in five zones: surplus a year, million $", total, 10.80, 1e-6, LAKE)


def test_the_lake_at_a_fee(lake: Sample, line: FittedModel) -> None:
    """Each of the visits is worth the line's height less the cost: at +$5 all come once less."""
    found = fee_response(line, lake, np.array([0.0, 5.0]), calibrated=False).visits[0]
    assert found[1] == pytest.approx(found[0] - lake.people.sum())


def test_petrol_at_twice_the_price(record_check: RecordCheck) -> None:
    """What is paid on the way from 0.75 to 1.50: doing without from the one, less from the other.

    Doing without petrol from 0.75 upwards costs the way to 1.50 and doing without from there,
    with the compensation in hand.
    """
    slope, income = np.array(-14.22), np.array(0.082)

    def gallons(price: float, extra: float) -> float:
        return 4.95 + float(slope) * price + float(income) * (720 + extra)

    def without(price: float, extra: float) -> float:
        trips = np.array(gallons(price, extra))
        return float(compensating(trips, slope, income, linear=True))

    paid = float(brentq(lambda m: without(0.75, 0) - without(1.50, m) - m, 0, 100))
    record_check("petrol at twice the price: compensating variation, $", paid, 37.17, 0.005, PETROL)
    lost = paid - 0.75 * gallons(1.50, paid)
    record_check("petrol at twice the price: deadweight loss, $", lost, 2.88, 0.006, PETROL)


def test_compensation_and_surplus_differ_as_willig_says(record_check: RecordCheck) -> None:
    """(CV − S) / S ≈ η S / 2m, for an income elasticity η that is constant at an income of m.

    The semi-log's is constant while the price rises, δm; S is 4 % of the income here. (That of a
    line grows without end on the way to the choke price, where the rule does not hold.)
    """
    trips, price, income, money = 10.0, -0.05, 1e-5, 5_000.0
    surplus, elasticity = trips / -price, income * money
    paid = float(compensating(np.array(trips), np.array(price), np.array(income), linear=False))
    record_check(
        "Willig's rule, semi-log: (CV − S) / S over η S / 2m",
        (paid - surplus) / surplus / (elasticity * surplus / (2 * money)),
        1,
        0.02,
        "Willig, American Economic Review 66, 1976",
    )
