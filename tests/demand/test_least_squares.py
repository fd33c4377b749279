"""Least squares of the rate and of its log, against statsmodels in the table's own units."""

from __future__ import annotations

import numpy as np
import pytest
import statsmodels.api as sm

from pipeline.demand.least_squares import Linear, LogLinear
from tests.demand.worlds import a_sample, bare_sample, zones


@pytest.mark.parametrize(("errors", "name"), [("model", "nonrobust"), ("HC3", "HC3")])
def test_the_line_is_that_of_statsmodels(errors: str, name: str) -> None:
    sample = a_sample(zones(), "household_income")
    model = Linear().fit(sample, errors=errors)
    design = sample.design / [1, 1, 10_000]
    outside = sm.OLS(1000 * sample.rate, design).fit(cov_type=name, use_t=True)
    np.testing.assert_allclose(model.estimate * [1, 1, 10_000], outside.params, rtol=1e-9)
    np.testing.assert_allclose(model.std_error * [1, 1, 10_000], outside.bse, rtol=1e-9)
    half = (outside.conf_int()[:, 1] - outside.conf_int()[:, 0]) / 2
    np.testing.assert_allclose(
        model.quantile(0.95) * model.std_error * [1, 1, 10_000], half, rtol=1e-9
    )


def test_zones_without_visits_cannot_enter_a_logarithm_and_are_counted() -> None:
    """Rates e⁻¹, e⁻², e⁻³ at costs 1, 2, 3 and no visit at 4: slope −1 exactly."""
    rates = np.exp([-1.0, -2.0, -3.0])
    sample = bare_sample([*(1000 * rates), 0.0], [1, 2, 3, 4], [1000.0] * 4)
    model = LogLinear().fit(sample, errors="model")
    np.testing.assert_allclose(model.estimate, [0, -1, 1], atol=1e-12)
    assert model.terms == ("const", "travel_cost", "smearing")
    assert model.nobs == 3
    assert "1 of 4 rows have no visit" in model.notes[-1]


def test_the_log_rate_predicts_means_not_medians() -> None:
    """Two zones at each cost, one twice and one half the line: the mean is 1.25 times it."""
    line = 1000 * np.exp(-0.1 * np.array([1.0, 1, 2, 2, 3, 3]))
    counts = line * [2, 0.5, 2, 0.5, 2, 0.5]
    sample = bare_sample(counts.tolist(), [1, 1, 2, 2, 3, 3], [1000.0] * 6)
    model = LogLinear().fit(sample, errors="model")
    visits, _ = LogLinear().predict(model.estimate, sample)
    np.testing.assert_allclose(visits, 1.25 * line)
