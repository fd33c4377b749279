"""Poisson and NB2: gradients by finite differences, estimates and errors against statsmodels."""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm

from pipeline.demand.build import build_samples
from pipeline.demand.counts import NegativeBinomial, Poisson
from pipeline.demand.covariance import covariance, leverages
from pipeline.demand.design import standardise
from pipeline.demand.likelihood import LikelihoodFamily, Rows
from pipeline.demand.sample import FloatArray, Sample
from tests.demand.worlds import a_sample, bare_sample, zones

FAMILIES = [Poisson(), NegativeBinomial()]


def rows_of(sample: Sample) -> Rows:
    return Rows.of(sample, standardise(sample.design).matrix)


def somewhere(family: LikelihoodFamily, rows: Rows) -> FloatArray:
    """A point that is no maximum."""
    return family.start(rows) + 0.1


@pytest.mark.parametrize("family", FAMILIES, ids=lambda f: f.name)
def test_the_gradient_is_that_of_the_log_likelihood(family: LikelihoodFamily) -> None:
    rows = rows_of(a_sample(zones(), "household_income"))
    theta = somewhere(family, rows)
    scores = family.scores(theta, rows)
    for j in range(len(theta)):
        step = np.zeros_like(theta)
        step[j] = 1e-6
        up, down = (family.log_likelihood(theta + s, rows) for s in (step, -step))
        np.testing.assert_allclose(scores[:, j], (up - down) / 2e-6, rtol=1e-5, atol=1e-5)


@pytest.mark.parametrize("family", FAMILIES, ids=lambda f: f.name)
def test_the_hessian_is_that_of_the_gradient(family: LikelihoodFamily) -> None:
    rows = rows_of(a_sample(zones(), "household_income"))
    theta = somewhere(family, rows)
    hessian = family.hessian(theta, rows)
    for j in range(len(theta)):
        step = np.zeros_like(theta)
        step[j] = 1e-6
        up, down = (rows.weight @ family.scores(theta + s, rows) for s in (step, -step))
        scale = np.abs(hessian).max()
        np.testing.assert_allclose(hessian[:, j], (up - down) / 2e-6, rtol=1e-5, atol=1e-7 * scale)


def test_poisson_and_its_robust_errors_agree_with_statsmodels() -> None:
    """Outside check: GLM of statsmodels, fitted by iterated weighted least squares."""
    sample = a_sample(zones(), "household_income")
    design = sample.design / [1, 1, 10_000]
    outside = sm.GLM(
        sample.counts, design, family=sm.families.Poisson(), offset=np.log(sample.exposure)
    )
    for kind, name in (("model", "nonrobust"), ("HC0", "HC0")):
        ours = Poisson().fit(sample, errors=kind)
        theirs = outside.fit(cov_type=name, tol=1e-12)
        np.testing.assert_allclose(ours.estimate * [1, 1, 10_000], theirs.params, rtol=1e-7)
        np.testing.assert_allclose(ours.std_error * [1, 1, 10_000], theirs.bse, rtol=1e-6)
        assert ours.log_likelihood == pytest.approx(theirs.llf, rel=1e-10)


def test_nb2_and_its_covariance_with_alpha_agree_with_statsmodels() -> None:
    """Outside check: NegativeBinomial of statsmodels, started at our maximum."""
    sample = a_sample(zones(), "household_income")
    scale = np.array([1, 1, 10_000, 1])
    outside = sm.NegativeBinomial(
        sample.counts, sample.design / scale[:3], offset=np.log(sample.exposure)
    )
    for kind, name in (("model", "nonrobust"), ("HC0", "HC0")):
        ours = NegativeBinomial().fit(sample, errors=kind)
        theirs = outside.fit(
            start_params=ours.estimate * scale, method="newton", cov_type=name, disp=0
        )
        np.testing.assert_allclose(ours.estimate * scale, theirs.params, rtol=1e-5)
        cov = ours.covariance * np.outer(scale, scale)
        np.testing.assert_allclose(
            cov, theirs.cov_params(), rtol=2e-3, atol=1e-4 * np.abs(cov).max()
        )
        assert ours.log_likelihood == pytest.approx(theirs.llf, rel=1e-9)


def test_hc1_is_hc0_with_the_small_sample_factor() -> None:
    sample = a_sample(zones(count=50))
    ratio = (
        Poisson().fit(sample, errors="HC1").covariance
        / Poisson().fit(sample, errors="HC0").covariance
    )
    np.testing.assert_allclose(ratio, 50 / 48)


def test_hc2_and_hc3_of_a_line_are_those_of_statsmodels() -> None:
    """The same code on the likelihood of a normal with variance 1: hat matrix of least squares."""
    sample = a_sample(zones(count=30))
    response = np.log(sample.counts + 1)
    fitted = sm.OLS(response, sample.design).fit()
    scores = sample.design * fitted.resid[:, None]
    hessian = -sample.design.T @ sample.design
    leverage = leverages(sample.design, np.ones(30))
    for kind in ("HC0", "HC1", "HC2", "HC3"):
        np.testing.assert_allclose(
            covariance(hessian, scores, leverage, kind),
            fitted.get_robustcov_results(kind).cov_params(),
            rtol=1e-8,
        )


def test_predicted_visits_of_a_poisson_add_up_to_the_observed() -> None:
    sample = a_sample(zones(expansion=12.5), "household_income")
    model = Poisson().fit(sample, errors="HC1")
    visits, _ = Poisson().predict(model.estimate, sample)
    assert visits.sum() == pytest.approx(sample.annual_visits, rel=1e-9)


def test_expansion_changes_no_error_and_no_slope() -> None:
    """The same records, standing for 1 or for 25 visits each: only the constant moves."""
    for family in FAMILIES:
        one = family.fit(a_sample(zones(expansion=1.0)), errors="model")
        many = family.fit(a_sample(zones(expansion=25.0)), errors="model")
        np.testing.assert_allclose(many.covariance, one.covariance, rtol=1e-7)
        np.testing.assert_allclose(many.estimate[1:], one.estimate[1:], rtol=1e-8)
        assert many.estimate[0] - one.estimate[0] == pytest.approx(np.log(25))


def test_counts_without_overdispersion_give_a_poisson_with_alpha_zero() -> None:
    """Counts equal to their mean, rounded: less variable than a Poisson's."""
    cost = np.linspace(1, 40, 40)
    counts = np.round(100 * np.exp(-0.05 * cost))
    sample = bare_sample(counts.tolist(), cost.tolist(), [1000.0] * 40)
    poisson = Poisson().fit(sample, errors="HC1")
    model = NegativeBinomial().fit(sample, errors="HC1")
    assert model.converged
    assert model.dispersion == 0
    assert model.log_likelihood == poisson.log_likelihood
    np.testing.assert_array_equal(model.estimate[:2], poisson.estimate)
    assert np.isnan(model.std_error[-1])
    assert "lower bound, zero" in model.notes[-1]


def test_a_record_of_weight_two_is_two_records() -> None:
    table = pd.DataFrame(
        {
            "record_id": [str(i) for i in range(8)],
            "site_id": "fen",
            "trips": [9.0, 0, 4, 6, 1, 2, 0, 1],
            "weight": [2.0, 1, 1, 2, 1, 1, 1, 2],
            "travel_cost": [1.0, 2, 3, 4, 5, 6, 7, 8],
        }
    )
    doubled = table.loc[table.index.repeat(table["weight"].astype(int))].assign(weight=1.0)
    doubled["record_id"] = [str(i) for i in range(len(doubled))]
    (weighted,), (plain,) = (build_samples(None, t, ()) for t in (table, doubled))
    for family in FAMILIES:
        np.testing.assert_allclose(
            family.fit(weighted, errors="HC0").estimate,
            family.fit(plain, errors="HC0").estimate,
            rtol=1e-6,
        )


@pytest.mark.parametrize("seed", range(40))
def test_nb2_is_found_where_overdispersion_is_hardly_there(seed: int) -> None:
    """Poisson counts: alpha is at zero or just above it, where searches are prone to drift."""
    sample = a_sample(zones(seed=seed, count=60, shape=None))
    poisson = Poisson().fit(sample, errors="HC1")
    model = NegativeBinomial().fit(sample, errors="HC1")
    assert model.converged
    assert model.log_likelihood >= poisson.log_likelihood
