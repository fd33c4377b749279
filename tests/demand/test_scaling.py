"""The same data in other units, another order, or shifted: the same surplus to six digits.

Costs × 1,000 (from thousands to units, say), income ÷ 10,000, rows in another order, a constant
added to a covariate. Every family, each on data that it is right for.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from pipeline.demand.family import FittedModel
from pipeline.demand.registry import FAMILIES
from pipeline.demand.sample import PRICE, Sample
from tests.demand.persons import drawn

SMALLER, LARGER = 1e-4, 1e3


def with_income(name: str) -> Sample:
    """500 records; income explains nothing, which is no matter here."""
    kind = name if "linear" not in name else "negative_binomial"
    sample = drawn(kind, seed=31, count=500)
    income = np.random.default_rng(31).normal(40_000, 8_000, 500)
    return replace(
        sample,
        terms=(*sample.terms, "household_income"),
        design=np.column_stack([sample.design, income]),
    )


def changed(sample: Sample) -> Sample:
    """Costs × 1,000, age + 57, income ÷ 10,000, rows shuffled."""
    design = sample.design * [1, LARGER, 1, SMALLER] + [0, 0, 57, 0]
    order = np.random.default_rng(5).permutation(sample.nobs)
    return replace(sample, design=design).rows(order)


def per_trip(name: str, model: FittedModel, sample: Sample) -> float:
    """Area beyond today's costs over the visits, all people together."""
    totals = FAMILIES[name].totals(model.estimate[None, :], sample, np.zeros(1))
    return float(totals.left[0, 0] / totals.visits[0, 0])


@pytest.mark.parametrize("name", FAMILIES)
@pytest.mark.parametrize("errors", ["model", "HC3"])
def test_other_units_order_and_origin_change_nothing(name: str, errors: str) -> None:
    sample = with_income(name)
    other = changed(sample)
    one, two = (FAMILIES[name].fit(s, errors=errors) for s in (sample, other))
    assert one.converged, one.problem
    assert two.converged, two.problem
    value = per_trip(name, one, sample)
    assert per_trip(name, two, other) / LARGER == pytest.approx(value, rel=1e-6)
    place = one.terms.index(PRICE)
    assert two.std_error[place] * LARGER == pytest.approx(one.std_error[place], rel=1e-6)
    own, others = (
        FAMILIES[name].elasticity(m.estimate[None, :], s)[0]
        for m, s in ((one, sample), (two, other))
    )
    assert others == pytest.approx(own, rel=1e-6)
    if np.isfinite(one.log_likelihood):
        assert two.log_likelihood == pytest.approx(one.log_likelihood, rel=1e-9)
