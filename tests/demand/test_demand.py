"""The demand stage: every model of every site, one chosen, and why."""

from __future__ import annotations

import json
from pathlib import Path
from typing import get_args

import numpy as np
import pandas as pd
import pytest

from pipeline.demand import demand, fitted_models, summarise_demand
from pipeline.demand.choice import choose, overdispersion_test
from pipeline.demand.counts import Poisson
from pipeline.demand.family import FittedModel
from pipeline.demand.registry import FAMILIES
from pipeline.errors import DemandError, StudyError
from pipeline.settings import ModelName
from pipeline.tables import Estimates, Fit
from tests.demand.worlds import a_sample, a_study, number, zones

ALL = tuple(FAMILIES)
OF_PERSONS = ("on_site_poisson", "on_site_negative_binomial", "hurdle")
OF_ZONES = tuple(name for name in ALL if name not in OF_PERSONS)


def test_the_registry_and_the_study_file_know_the_same_models() -> None:
    assert a_study(demand={"models": ALL}).demand.models == ALL
    assert set(get_args(ModelName)) == set(ALL)


def test_overdispersed_counts_lead_to_the_negative_binomial_and_a_sentence() -> None:
    estimates, fit = demand(zones(), None, study=a_study())
    chosen = fit[fit["chosen"]]
    assert chosen["model"].tolist() == ["negative_binomial"]
    assert (
        chosen["note"]
        .iloc[0]
        .startswith(
            "Chosen: the counts vary more than a Poisson allows (overdispersion test, NB2 form"
        )
    )
    assert fit["converged"].all()
    assert set(estimates["model"]) == {"poisson", "negative_binomial", "log_linear"}
    true = estimates[(estimates["model"] == "negative_binomial")].set_index("term")
    assert number(true, "travel_cost", "ci_low") < -0.06 < number(true, "travel_cost", "ci_high")
    assert number(true, "alpha", "ci_low") < 0.5 < number(true, "alpha", "ci_high")


def test_poisson_counts_keep_the_poisson() -> None:
    study = a_study(demand={"covariates": ("household_income",)})
    _, fit = demand(zones(shape=None), None, study=study)
    chosen = fit[fit["chosen"]]
    assert chosen["model"].tolist() == ["poisson"]
    assert chosen["overdispersion_p"].iloc[0] > 0.05
    assert "the simpler Poisson is kept" in chosen["note"].iloc[0]


def test_the_overdispersion_test_is_right_about_as_often_as_it_says() -> None:
    """300 worlds of Poisson counts, tested at 5 %: 15 expected, standard deviation 3.8.

    Its t statistic is only roughly normal, as it hangs on the few zones with many visits.
    """
    rejected = 0
    for seed in range(300):
        sample = a_sample(zones(seed=seed, shape=None), "household_income")
        poisson = Poisson().fit(sample, errors="model")
        rejected += overdispersion_test(poisson, sample).p_value < 0.05
    assert 4 <= rejected <= 26


def test_the_covariance_survives_the_table() -> None:
    study = a_study(demand={"covariates": ("household_income",), "models": OF_ZONES})
    table = zones()
    estimates, fit = demand(table, None, study=study)
    models = fitted_models(estimates, fit)
    sample = a_sample(table, "household_income")
    for name in OF_ZONES:
        family = FAMILIES[name]
        fresh, read = family.fit(sample, errors="HC3"), models["fen", name]
        np.testing.assert_array_equal(read.estimate, fresh.estimate)
        np.testing.assert_array_equal(read.covariance, fresh.covariance)
        assert read.degrees == fresh.degrees
    row = json.loads(estimates["covariance"].iloc[1])
    assert row[1] == pytest.approx(estimates["std_error"].iloc[1] ** 2)


def test_a_site_that_cannot_be_fitted_keeps_its_rows_and_does_not_stop_the_others() -> None:
    lonely = zones(count=3, site_id="weir")
    both = pd.concat([zones(), lonely.assign(visits=0.0, sampled_visits=0.0)], ignore_index=True)
    estimates, fit = demand(both, None, study=a_study())
    weir = fit[fit["site_id"] == "weir"]
    assert not weir["converged"].any()
    assert not weir["chosen"].any()
    assert weir["note"].str.contains("no visit in 3 usable rows").all()
    assert estimates.loc[estimates["site_id"] == "weir", "estimate"].isna().all()
    assert fit.loc[fit["site_id"] == "fen", "chosen"].sum() == 1


def test_no_usable_model_anywhere_stops_the_run_with_the_reason() -> None:
    table = zones().assign(household_income=1.0)
    study = a_study(demand={"covariates": ("household_income",)})
    with pytest.raises(DemandError, match="'household_income' has the same value in every row"):
        demand(table, None, study=study)


def test_a_named_model_is_taken() -> None:
    study = a_study(demand={"choose": "log_linear"})
    _, fit = demand(zones(), None, study=study)
    assert fit.loc[fit["chosen"], "model"].tolist() == ["log_linear"]


@pytest.mark.parametrize(
    ("section", "words"),
    [
        ({"models": ("poisson",)}, "needs 'negative_binomial' among models"),
        ({"choose": "linear"}, "needs 'linear' among models"),
        ({"models": ("poison", "negative_binomial")}, "poison"),
        ({"errors": "HC9"}, "HC9"),
    ],
)
def test_a_study_that_asks_for_what_is_not_there(section: dict[str, object], words: str) -> None:
    with pytest.raises(StudyError, match=words):
        a_study(demand=section)


def test_the_summary_is_one_line() -> None:
    line = summarise_demand(demand(zones(), None, study=a_study()))
    assert line.startswith("3 models; negative_binomial on 80 rows, overdispersion p ")
    assert "; travel_cost -0.0" in line


def test_trip_records_are_fitted_one_by_one() -> None:
    random = np.random.default_rng(5)
    cost = random.uniform(1, 40, 600)
    trips = pd.DataFrame(
        {
            "record_id": [str(i) for i in range(600)],
            "site_id": "fen",
            "trips": random.poisson(np.exp(1.5 - 0.08 * cost)).astype(float),
            "weight": random.uniform(0.5, 20, 600),
            "travel_cost": cost,
        }
    )
    estimates, fit = demand(None, trips, study=a_study())
    price = estimates[estimates["term"] == "travel_cost"].set_index("model")
    assert number(price, "poisson", "ci_low") < -0.08 < number(price, "poisson", "ci_high")
    assert fit["nobs"].iloc[0] == 600


def test_an_unusable_negative_binomial_leaves_the_poisson_and_says_why() -> None:
    sample = a_sample(zones())
    poisson = Poisson().fit(sample, errors="HC3")
    failed = FittedModel.failed("negative_binomial", sample, "the Hessian is not definite")
    models = {"poisson": poisson, "negative_binomial": failed}
    choice = choose(models, sample, how="test", level=0.05)
    assert choice.model == "poisson"
    assert "no usable fit (the Hessian is not definite)" in choice.reason
    assert choose(models, sample, how="negative_binomial", level=0.05).model is None


def test_tables_survive_a_csv_file(tmp_path: Path) -> None:
    table = pd.concat([zones(), zones(count=3, site_id="weir")], ignore_index=True)
    written = demand(table, None, study=a_study(demand={"covariates": ("household_income",)}))
    for frame, kind in zip(written, (Estimates, Fit), strict=True):
        file = tmp_path / "table.csv"
        frame.to_csv(file, index=False)
        pd.testing.assert_frame_equal(kind.checked(pd.read_csv(file)), frame)
