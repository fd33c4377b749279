"""Diagnostics: right about as often as they say, and the same as outside packages."""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from esda.moran import Moran
from libpysal.weights import W

from pipeline.demand import demand_with_diagnostics
from pipeline.demand.bootstrap import replicates
from pipeline.demand.comparisons import cross_validate, vuong
from pipeline.demand.counts import NegativeBinomial, Poisson
from pipeline.demand.dispersed import NegativeBinomial1
from pipeline.demand.influence import influential_zones, price_shifts
from pipeline.demand.likelihood import LikelihoodFamily
from pipeline.demand.registry import FAMILIES
from pipeline.demand.residuals import (
    count_classes,
    moran,
    nearest,
    normality,
    quantile_residuals,
)
from tests.demand.persons import drawn
from tests.demand.worlds import a_sample, a_study, zones


def grid(count: int = 100) -> np.ndarray[tuple[int, ...], np.dtype[np.float64]]:
    """Places on a square grid near 10° E, 50° N."""
    side = int(np.sqrt(count))
    x, y = np.meshgrid(np.arange(side), np.arange(side))
    return np.column_stack([10 + 0.01 * x.ravel(), 50 + 0.007 * y.ravel()])


def test_moran_is_that_of_esda() -> None:
    """Outside check: esda with the same neighbours, row-standardised."""
    values = np.random.default_rng(1).normal(size=100) + grid()[:, 0] * 50
    near = nearest(grid(), 8)
    weights = W({i: list(map(int, row)) for i, row in enumerate(near)}, silence_warnings=True)
    weights.transform = "r"
    found = moran(values, grid(), seed=1)
    assert found.value == pytest.approx(Moran(values, weights, permutations=0).I, rel=1e-10)
    assert found.p_value == pytest.approx(0.002)
    assert found.expected == pytest.approx(-1 / 99)


def test_moran_finds_nothing_where_there_is_nothing() -> None:
    """200 fields of noise, tested at 5 %: 10 expected, standard deviation 3."""
    places = grid(64)
    small = [
        moran(np.random.default_rng(seed).normal(size=64), places, seed=seed).p_value < 0.05
        for seed in range(200)
    ]
    assert 2 <= sum(small) <= 19


def test_places_at_one_spot_are_neighbours_of_each_other_not_of_themselves() -> None:
    near = nearest(np.tile([[10.0, 50.0]], (5, 1)), 3)
    assert all(i not in row for i, row in enumerate(near.tolist()))


@pytest.mark.parametrize("name", ["poisson", "negative_binomial", "hurdle", "truncated_poisson"])
def test_quantile_residuals_of_the_right_model_are_standard_normal(name: str) -> None:
    sample = drawn(name, seed=21, count=2000)
    family = FAMILIES[name]
    assert isinstance(family, LikelihoodFamily)
    model = family.fit(sample, errors="model")
    residuals = quantile_residuals(family.spread(model.estimate, sample), sample, seed=1)
    assert abs(residuals.mean()) < 0.07
    assert abs(residuals.std() - 1) < 0.05
    assert normality(residuals)[1] > 0.05


def test_quantile_residuals_of_a_poisson_on_overdispersed_counts_are_not() -> None:
    sample = drawn("negative_binomial", seed=21, count=2000)
    model = Poisson().fit(sample, errors="model")
    residuals = quantile_residuals(Poisson().spread(model.estimate, sample), sample, seed=1)
    assert residuals.var() > 1.2
    assert normality(residuals)[1] < 0.01


def test_classes_of_counts_hold_all_rows_observed_and_expected() -> None:
    sample = a_sample(zones())
    model = NegativeBinomial().fit(sample, errors="model")
    classes = count_classes(NegativeBinomial().spread(model.estimate, sample), sample)
    assert sum(observed for _, observed, _ in classes) == 80
    assert sum(expected for _, _, expected in classes) == pytest.approx(80)
    assert [label for label, _, _ in classes][:4] == ["0", "1", "2", "3 to 4"]


def test_vuong_prefers_the_model_that_drew_the_counts() -> None:
    sample = drawn("zero_inflated_poisson", seed=22, count=1500)
    one = FAMILIES["zero_inflated_poisson"].fit(sample, errors="model")
    other = FAMILIES["poisson"].fit(sample, errors="model")
    found = vuong(one, other, sample)
    assert found["vuong"][0] > found["vuong_aic"][0] > found["vuong_bic"][0] > 3
    back = vuong(other, one, sample)
    assert back["vuong"][0] == pytest.approx(-found["vuong"][0])
    assert vuong(one, one, sample) == {}


def test_vuong_by_hand() -> None:
    """Sum of the differences of log-likelihood over root n times their standard deviation."""
    sample = drawn("negative_binomial", seed=23, count=300)
    one, other = (
        FAMILIES[name].fit(sample, errors="model")
        for name in ("negative_binomial", "negative_binomial_1")
    )
    rows = [
        np.log(np.diff([s.cdf(sample.counts - 1), s.cdf(sample.counts)], axis=0)[0])
        for s in (
            NegativeBinomial().spread(one.estimate, sample),
            NegativeBinomial1().spread(other.estimate, sample),
        )
    ]
    ahead = rows[0] - rows[1]
    expected = ahead.sum() / (ahead.std() * np.sqrt(300))
    assert vuong(one, other, sample)["vuong"][0] == pytest.approx(expected, rel=1e-6)
    assert vuong(one, other, sample)["vuong_bic"][0] == pytest.approx(expected, rel=1e-6)


def test_rows_left_out_are_predicted_better_by_the_right_model() -> None:
    sample = drawn("negative_binomial", seed=24, count=600)
    scores = {}
    for name in ("poisson", "negative_binomial", "zero_inflated_poisson"):
        model = FAMILIES[name].fit(sample, errors="model")
        found = cross_validate(model, sample, folds=10, seed=1)
        assert found is not None
        assert found[2] == 600
        # Worse than in the sample, where the estimates have seen the rows.
        assert found[1] > -model.log_likelihood / 600
        scores[name] = found[1]
    assert min(scores, key=lambda name: scores[name]) == "negative_binomial"


@pytest.mark.parametrize("name", ["poisson", "negative_binomial", "linear", "log_linear"])
def test_influence_is_the_coefficient_without_the_zone(name: str) -> None:
    """Each of the five that move it most left out by hand; the one-step order is about right."""
    sample = a_sample(zones(count=40), "household_income")
    family = FAMILIES[name]
    model = family.fit(sample, errors="model")
    zone_ids = np.array(sample.zone_ids)
    without = {
        str(zone): family.fit(sample.rows(zone_ids != zone), errors="model").price_coefficient
        for zone in zone_ids
    }
    found = influential_zones(model, sample)
    assert len(found) == 5
    for zone, price in found:
        assert price == pytest.approx(without[zone], rel=1e-6)
    largest = max(without, key=lambda zone: abs(without[zone] - model.price_coefficient))
    assert largest in dict(found)
    exact = np.array([without[z] - model.price_coefficient for z in zone_ids])
    assert np.corrcoef(price_shifts(model, sample), exact)[0, 1] > 0.9


def test_replicates_do_not_depend_on_who_makes_them() -> None:
    sample = drawn("negative_binomial", seed=25, count=200)
    model = NegativeBinomial().fit(sample, errors="HC3")
    alone = replicates(model, sample, count=120, seed=3)
    with ThreadPoolExecutor(3) as executor:
        together = replicates(model, sample, count=120, seed=3, executor=executor)
    np.testing.assert_array_equal(alone.theta, together.theta)
    fewer = replicates(model, sample, count=70, seed=3)
    np.testing.assert_array_equal(alone.theta[:70], fewer.theta)


@pytest.mark.parametrize("name", ["poisson", "negative_binomial", "log_linear", "hurdle"])
def test_the_spread_of_replicates_is_about_the_robust_error(name: str) -> None:
    sample = drawn("hurdle" if name == "hurdle" else "negative_binomial", seed=26, count=500)
    model = FAMILIES[name].fit(sample, errors="HC1")
    drawn_ = replicates(model, sample, count=300, seed=3)
    assert drawn_.failed <= 3
    ratio = drawn_.theta[:, 1].std() / model.std_error[1]
    assert 0.85 < ratio < 1.2


def test_clusters_are_drawn_as_a_whole() -> None:
    """Every record ten times: rows taken for independent halve the error three times over."""
    sample = drawn("poisson", seed=27, count=80).rows(np.repeat(np.arange(80), 10))
    model = Poisson().fit(sample, errors="HC1")
    apart = replicates(model, sample, count=200, seed=1).theta[:, 1].std()
    clustered = replace(sample, clusters=np.repeat(np.arange(80), 10))
    whole = replicates(model, clustered, count=200, seed=1).theta[:, 1].std()
    assert whole / apart == pytest.approx(np.sqrt(10), rel=0.2)


def test_the_table_says_what_there_is_to_say() -> None:
    table = zones(count=100)
    places = pd.DataFrame(grid(), columns=["lon", "lat"]).assign(zone_id=table["zone_id"])
    study = a_study(demand={"covariates": ("household_income",)})
    _, _, rows, _ = demand_with_diagnostics(table, None, places, study=study)
    assert {
        "overdispersion",
        "likelihood_ratio",
        "vuong_bic",
        "cross_validated_deviance",
        "residual_variance",
        "observed_count",
        "influence",
        "moran_i",
        "condition_number",
        "rows_per_coefficient",
        "cost_reaches",
    } - set(rows["diagnostic"]) == {"vuong_bic"}
    one = rows[rows["diagnostic"] == "likelihood_ratio"].iloc[0]
    assert (one["model"], one["subject"]) == ("negative_binomial", "poisson")
    _, _, unplaced, _ = demand_with_diagnostics(table, None, None, study=study)
    assert "moran_i" not in set(unplaced["diagnostic"])


def test_twelve_zones_with_six_covariates_are_reported_as_what_they_are() -> None:
    table = zones(count=12, seed=5)
    random = np.random.default_rng(1)
    names = tuple(f"x{i}" for i in range(5))
    table = table.assign(**{name: random.normal(size=12) for name in names})
    study = a_study(demand={"covariates": ("household_income", *names), "choose": "poisson"})
    _, fit, rows, _ = demand_with_diagnostics(table, None, None, study=study)
    per = rows[rows["diagnostic"] == "rows_per_coefficient"].iloc[0]
    assert per["value"] == pytest.approx(12 / 8)
    assert "too few to trust" in per["note"]
    assert fit["note"].str.contains("Only 12 rows for 8 coefficients").any()


def test_residuals_of_every_zone_are_about_standard_normal() -> None:
    """The chosen NB2 drew the counts; a zone with ten times its visits stands out."""
    table = zones(count=150)
    table.loc[7, ["visits", "sampled_visits"]] *= 10
    _, fit, _, rows = demand_with_diagnostics(table, None, None, study=a_study())
    assert rows is not None
    assert fit.loc[fit["chosen"], "model"].tolist() == ["negative_binomial"]
    assert rows["zone_id"].tolist() == table["zone_id"].tolist()
    assert set(rows["residual_kind"]) == {"randomised quantile"}
    left = rows["residual"].to_numpy(dtype=float)
    assert abs(left.mean()) < 0.25
    assert 0.8 < left.std() < 1.2
    assert left.argmax() == 7
    assert left[7] > 2


@pytest.mark.parametrize(
    "name", ["linear", "log_linear", "weighted_linear", "weighted_log_linear", "quasi_poisson"]
)
def test_residuals_without_a_likelihood_have_variance_one(name: str) -> None:
    """Divided by their own standard deviation: mean square (n − k)/n; logs need a visit."""
    table = zones(count=150)
    study = a_study(demand={"models": (name,), "choose": name})
    _, _, _, rows = demand_with_diagnostics(table, None, None, study=study)
    assert rows is not None
    assert set(rows["residual_kind"]) == {"standardised"}
    visited = table["visits"] > 0
    assert len(rows) == (visited.sum() if "log" in name else 150)
    left = rows["residual"].to_numpy(dtype=float)
    assert left @ left == pytest.approx(len(rows) - 2, rel=1e-6)


def test_stacked_sites_have_residuals_each_and_records_have_none() -> None:
    table = pd.concat([zones(), zones(seed=2, site_id="weir")], ignore_index=True)
    study = a_study(demand={"site_effects": True})
    rows = demand_with_diagnostics(table, None, None, study=study)[3]
    assert rows is not None
    assert rows["site_id"].value_counts().to_dict() == {"fen": 80, "weir": 80}
    sample = drawn("poisson", seed=1, count=100)
    trips = pd.DataFrame(
        {
            "record_id": [str(i) for i in range(100)],
            "site_id": "fen",
            "trips": sample.counts,
            "travel_cost": sample.price,
        }
    )
    assert demand_with_diagnostics(None, trips, None, study=a_study())[3] is None
