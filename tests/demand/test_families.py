"""Every family of counts: gradients, distributions, limits, and what it recovers."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm

from pipeline.demand import demand
from pipeline.demand.comparisons import row_log_likelihood
from pipeline.demand.counts import NegativeBinomial, Poisson
from pipeline.demand.design import standardise
from pipeline.demand.hurdle import HurdlePoisson
from pipeline.demand.likelihood import LikelihoodFamily, Rows
from pipeline.demand.on_site import OnSiteNegativeBinomial, OnSitePoisson
from pipeline.demand.registry import FAMILIES
from pipeline.errors import DemandError
from tests.demand.persons import above_zero, drawn, nb2, people, person_sample
from tests.demand.worlds import a_sample, a_study, bare_sample, number, zones

COUNTS = {name: f for name, f in FAMILIES.items() if isinstance(f, LikelihoodFamily)}
OWN = [name for name in COUNTS if name != "quasi_poisson"]


def rows_of(family: LikelihoodFamily, name: str) -> Rows:
    sample = replace(drawn(name, seed=1, count=120), zero_terms=("const", "travel_cost"))
    sample = family.restrict(sample)
    return Rows.of(sample, standardise(sample.design).matrix, family.zero_columns(sample))


@pytest.mark.parametrize("name", OWN)
def test_gradient_and_hessian_are_those_of_the_log_likelihood(name: str) -> None:
    """Central differences at a point that is no maximum; and `evaluate` says the same."""
    family = COUNTS[name]
    rows = rows_of(family, name)
    rows = rows.weighted(np.linspace(0.5, 1.5, len(rows.counts)))
    theta = family.start(rows) + 0.1
    if family.extra_terms:
        theta[-1] = np.log(0.4)
    value, gradient, hessian = family.evaluate(theta, rows)
    scores = family.scores(theta, rows)
    assert value == pytest.approx(rows.weight @ family.log_likelihood(theta, rows), rel=1e-12)
    np.testing.assert_allclose(gradient, rows.weight @ scores, rtol=1e-9, atol=1e-9)
    np.testing.assert_allclose(hessian, family.hessian(theta, rows), rtol=1e-8, atol=1e-8)
    for j in range(len(theta)):
        step = np.zeros_like(theta)
        step[j] = 1e-6
        up, down = (family.log_likelihood(theta + s, rows) for s in (step, -step))
        np.testing.assert_allclose(scores[:, j], (up - down) / 2e-6, rtol=1e-5, atol=1e-6)
        up, down = (rows.weight @ family.scores(theta + s, rows) for s in (step, -step))
        scale = np.abs(hessian).max()
        np.testing.assert_allclose(hessian[:, j], (up - down) / 2e-6, rtol=1e-5, atol=1e-7 * scale)


@pytest.mark.parametrize("name", OWN)
def test_the_distribution_is_that_of_the_likelihood(name: str) -> None:
    """Steps of the cumulative probability are exp(log-likelihood); mean and variance follow."""
    family = COUNTS[name]
    sample = drawn(name, seed=2, count=150)
    model = family.fit(sample, errors="model")
    assert model.converged, model.problem
    spread = family.spread(model.estimate, sample)
    step = spread.cdf(sample.counts) - spread.cdf(sample.counts - 1)
    found = row_log_likelihood(model, sample)
    assert found is not None
    np.testing.assert_allclose(step, np.exp(found), rtol=1e-6, atol=1e-12)
    assert found.sum() == pytest.approx(model.log_likelihood)
    upto = np.array([spread.cdf(np.full(sample.nobs, float(y))) for y in range(-1, 800)])
    shares, values = np.diff(upto, axis=0), np.arange(800)[:, None]
    mean = (shares * values).sum(axis=0)
    np.testing.assert_allclose(spread.mean, mean, rtol=1e-6)
    variance = (shares * (values - mean) ** 2).sum(axis=0)
    np.testing.assert_allclose(spread.variance, variance, rtol=1e-4)


@pytest.mark.parametrize("name", OWN)
def test_the_truth_is_recovered(name: str) -> None:
    model = COUNTS[name].fit(drawn(name, seed=3, count=4000), errors="HC3")
    assert model.converged, model.problem
    off = (model.estimate[:3] - [1.2, -0.06, 0.3]) / model.std_error[:3]
    assert np.abs(off).max() < 3.5


@pytest.mark.parametrize("name", COUNTS)
def test_a_record_of_weight_two_is_two_records(name: str) -> None:
    sample = drawn(name, seed=4, count=150)
    times = np.arange(150) % 3 + 1
    weighted = replace(sample, weight=times / times.mean(), people=times.astype(float))
    repeated = sample.rows(np.repeat(np.arange(150), times))
    one, two = (COUNTS[name].fit(s, errors="HC0") for s in (weighted, repeated))
    np.testing.assert_allclose(one.estimate, two.estimate, rtol=1e-5)


def test_shaw_is_a_poisson_of_one_trip_less() -> None:
    sample = drawn("on_site_poisson", seed=5, count=200)
    less = replace(sample, counts=sample.counts - 1)
    one, two = OnSitePoisson().fit(sample, errors="model"), Poisson().fit(less, errors="model")
    np.testing.assert_allclose(one.estimate, two.estimate, rtol=1e-9)
    np.testing.assert_allclose(one.covariance, two.covariance, rtol=1e-7)


def test_the_on_site_nb2_is_an_nb2_of_one_trip_less() -> None:
    """μ* = μ(1 + α) and α* = α/(1 + α); the same log-likelihood, slopes and errors of slopes."""
    sample = drawn("on_site_negative_binomial", seed=5, count=600)
    less = replace(sample, counts=sample.counts - 1)
    one = OnSiteNegativeBinomial().fit(sample, errors="model")
    two = NegativeBinomial().fit(less, errors="model")
    alpha = one.estimate[-1]
    assert one.log_likelihood == pytest.approx(two.log_likelihood, rel=1e-10)
    assert two.estimate[-1] == pytest.approx(alpha / (1 + alpha), rel=1e-5)
    assert two.estimate[0] == pytest.approx(one.estimate[0] + np.log1p(alpha), rel=1e-5)
    np.testing.assert_allclose(one.estimate[1:3], two.estimate[1:3], rtol=1e-6)
    np.testing.assert_allclose(one.std_error[1:3], two.std_error[1:3], rtol=1e-4)


def test_an_on_site_nb2_without_interior_maximum_is_said_with_its_limit() -> None:
    """y − 1 drawn with alpha* = 1.6: no alpha gives that; the limit is geometric."""
    random, cost, age, mean = people(6, 800)
    sample = person_sample(nb2(random, 3 * mean, 1.6) + 1, cost, age)
    model = OnSiteNegativeBinomial().fit(sample, errors="HC3")
    assert not model.converged
    assert model.problem.startswith("No interior maximum: the counts less one are an NB2 with")
    assert "towards the geometric model of y − 1" in model.problem


def test_counts_of_one_only_leave_a_truncated_nb2_without_maximum_or_a_poisson() -> None:
    """A logarithmic series: the NB2's alpha grows without end, and that is said."""
    random, cost, age, _ = people(7, 1500)
    trips = random.logseries(np.clip(0.95 - 0.01 * cost, 0.05, 0.95)).astype(float)
    model = COUNTS["truncated_negative_binomial"].fit(person_sample(trips, cost, age), errors="HC3")
    assert not model.converged
    assert "logarithmic series" in model.problem


@pytest.mark.parametrize(
    ("name", "words"),
    [
        ("truncated_negative_binomial", "vary no more than a truncated Poisson's"),
        ("negative_binomial_1", "vary no more than a Poisson's: delta"),
        ("hurdle", "vary no more than a hurdle with a truncated Poisson's"),
        ("zero_inflated_poisson", "No zero inflation"),
        ("zero_inflated_negative_binomial", "No zero inflation"),
        ("on_site_negative_binomial", "vary no more than a Poisson of y − 1's"),
    ],
)
def test_a_family_at_its_bound_is_the_simpler_one_and_says_so(name: str, words: str) -> None:
    """Counts that vary less than a Poisson's: rounded means; some stay at home for a hurdle."""
    random, cost, age, mean = people(8, 300)
    trips = np.round(3 * mean) + (1 if "on_site" in name else 0)
    if name == "hurdle":
        trips *= random.random(300) < 0.8
    model = COUNTS[name].fit(person_sample(trips, cost, age), errors="HC3")
    assert model.converged, model.problem
    assert words in model.notes[-1]
    assert np.isfinite(model.std_error[1])


def test_the_hurdle_is_a_logit_and_a_truncated_count() -> None:
    """Outside check: the logit of statsmodels; the count part is the truncated NB2 by itself."""
    sample = drawn("hurdle", seed=9, count=700)
    model = FAMILIES["hurdle"].fit(sample, errors="model")
    logit = sm.Logit(sample.counts > 0, sample.design).fit(disp=0)
    count = COUNTS["truncated_negative_binomial"].fit(sample, errors="model")
    np.testing.assert_allclose(model.estimate[3:6], logit.params, rtol=1e-6)
    np.testing.assert_allclose(model.std_error[3:6], logit.bse, rtol=1e-5)
    np.testing.assert_allclose(model.estimate[[0, 1, 2, 6]], count.estimate, rtol=1e-6)
    assert model.log_likelihood == pytest.approx(logit.llf + count.log_likelihood)


def test_nb1_and_zero_inflated_poisson_agree_with_statsmodels() -> None:
    """Outside check: statsmodels, started at our maximum."""
    sample = drawn("negative_binomial_1", seed=10, count=800)
    ours = COUNTS["negative_binomial_1"].fit(sample, errors="model")
    theirs = sm.NegativeBinomial(sample.counts, sample.design, loglike_method="nb1").fit(
        start_params=ours.estimate, method="newton", disp=0
    )
    np.testing.assert_allclose(ours.estimate, theirs.params, rtol=1e-5)
    np.testing.assert_allclose(ours.std_error, theirs.bse, rtol=1e-3)
    sample = drawn("zero_inflated_poisson", seed=10, count=800)
    ours = COUNTS["zero_inflated_poisson"].fit(sample, errors="model")
    model = sm.ZeroInflatedPoisson(sample.counts, sample.design)
    start = np.concatenate([ours.estimate[3:], ours.estimate[:3]])
    theirs = model.fit(start_params=start, method="newton", disp=0)
    np.testing.assert_allclose(start, theirs.params, rtol=1e-5)
    assert ours.log_likelihood == pytest.approx(theirs.llf)


def test_quasi_poisson_scales_the_errors_as_statsmodels_does() -> None:
    sample = a_sample(zones(), "household_income")
    design = sample.design / [1, 1, 10_000]
    theirs = sm.GLM(
        sample.counts, design, family=sm.families.Poisson(), offset=np.log(sample.exposure)
    ).fit(scale="X2", tol=1e-12)
    ours = FAMILIES["quasi_poisson"].fit(sample, errors="HC3")
    np.testing.assert_allclose(ours.std_error * [1, 1, 10_000], theirs.bse, rtol=1e-6)
    assert ours.errors == "scaled"
    assert np.isnan(ours.log_likelihood)


def test_weighted_least_squares_weigh_by_exposure() -> None:
    sample = a_sample(zones(), "household_income")
    design = sample.design / [1, 1, 10_000]
    theirs = sm.WLS(sample.rate * 1000, design, weights=sample.people).fit()
    ours = FAMILIES["weighted_linear"].fit(sample, errors="model")
    np.testing.assert_allclose(ours.estimate * [1, 1, 10_000], theirs.params, rtol=1e-7)
    np.testing.assert_allclose(ours.std_error * [1, 1, 10_000], theirs.bse, rtol=1e-7)


def test_clustered_errors_agree_with_statsmodels() -> None:
    """Outside check: GLM and WLS of statsmodels, 50 clusters."""
    sample = drawn("poisson", seed=11, count=600)
    groups = np.array([int(z) for z in sample.zone_ids])
    sample = replace(sample, clusters=groups)
    theirs = sm.GLM(sample.counts, sample.design, family=sm.families.Poisson()).fit(
        cov_type="cluster", cov_kwds={"groups": groups}, tol=1e-12
    )
    ours = Poisson().fit(sample, errors="cluster")
    np.testing.assert_allclose(ours.std_error, theirs.bse, rtol=1e-6)
    assert ours.degrees == 49
    few = Poisson().fit(replace(sample, clusters=groups % 8), errors="cluster")
    assert "Only 8 clusters" in few.notes[-1]


def test_zones_may_be_truncated_or_zero_inflated_but_are_no_persons() -> None:
    sample = a_sample(zones(count=200, seed=3))
    for name in ("truncated_negative_binomial", "zero_inflated_negative_binomial"):
        model = FAMILIES[name].fit(sample, errors="HC3")
        assert model.converged, model.problem
        assert abs(model.price_coefficient + 0.06) < 4 * model.std_error[1]
    for name in ("hurdle", "on_site_poisson", "on_site_negative_binomial"):
        with pytest.raises(DemandError, match="for zones"):
            FAMILIES[name].fit(sample, errors="HC3")


def test_stacked_sites_share_slopes_and_have_a_constant_each() -> None:
    """Two sites, the second twice as popular: its effect is log 2."""
    table = pd.concat(
        [zones(count=300), zones(count=300, seed=2, site_id="weir")], ignore_index=True
    )
    second = table["site_id"] == "weir"
    table.loc[second, ["visits", "sampled_visits"]] *= 2
    study = a_study(demand={"site_effects": True, "errors": "cluster", "cluster": "zone_id"})
    estimates, fit = demand(table, None, study=study)
    of_fen = (estimates["model"] == "negative_binomial") & (estimates["site_id"] == "fen")
    rows = estimates[of_fen].set_index("term")
    effect, error = (number(rows, "site:weir", c) for c in ("estimate", "std_error"))
    assert abs(effect - np.log(2)) < 3.5 * error
    same = estimates.groupby(["model", "term"])["estimate"].nunique()
    assert (same == 1).all()
    assert (fit["nobs"] == fit["model"].map({"log_linear": fit["nobs"].min()}).fillna(600)).all()
    assert set(fit.loc[fit["chosen"], "site_id"]) == {"fen", "weir"}


def test_naive_models_of_on_site_records_are_called_naive() -> None:
    sample = drawn("on_site_negative_binomial", seed=12, count=400)
    table = pd.DataFrame(
        {
            "record_id": [str(i) for i in range(400)],
            "site_id": "fen",
            "trips": sample.counts,
            "travel_cost": sample.price,
        }
    )
    models = ("poisson", "negative_binomial", "on_site_poisson", "on_site_negative_binomial")
    study = a_study(demand={"models": models, "sampling": "on_site"})
    _, fit = demand(None, table, study=study)
    fit = fit.set_index("model")
    assert fit.index[fit["chosen"]].tolist() == ["on_site_negative_binomial"]
    assert "Naive for records of people met on the site" in str(fit["note"].to_dict()["poisson"])
    unsaid = a_study(demand={"models": models})
    _, fit = demand(None, table, study=unsaid)
    assert fit["note"].str.contains("look like a sample of visitors").any()


def test_choice_by_criterion_is_the_least() -> None:
    study = a_study(demand={"choose": "bic"})
    _, fit = demand(zones(), None, study=study)
    fit = fit.set_index("model")
    assert fit.index[fit["chosen"]].tolist() == ["negative_binomial"]
    assert number(fit, "negative_binomial", "bic") < number(fit, "poisson", "bic")
    assert str(fit["note"].to_dict()["negative_binomial"]).startswith("Chosen: least BIC")


def test_a_hurdle_without_dispersion_is_the_hurdle_poisson() -> None:
    random, cost, age, mean = people(13, 900)
    comes = random.random(900) < 0.7
    trips = np.where(comes, above_zero(random, mean, 0.0), 0.0)
    model = HurdlePoisson().fit(person_sample(trips, cost, age), errors="HC3")
    assert model.converged
    assert abs(model.price_coefficient + 0.06) < 3.5 * model.std_error[1]


def test_errors_by_cluster_need_a_column_that_is_there() -> None:
    with pytest.raises(DemandError, match=r"demand\.cluster names 'parish'"):
        demand(zones(), None, study=a_study(demand={"errors": "cluster", "cluster": "parish"}))


def test_a_zero_part_of_unknown_terms_is_refused() -> None:
    with pytest.raises(DemandError, match=r"demand\.zero_part names 'income'"):
        demand(zones(), None, study=a_study(demand={"zero_part": ("income",)}))


def test_no_visit_at_all_is_said_by_truncated_models() -> None:
    sample = bare_sample([0.0] * 9, np.arange(9.0), [10.0] * 9)
    with pytest.raises(DemandError, match="no row has a visit"):
        FAMILIES["truncated_poisson"].fit(sample, errors="model")
