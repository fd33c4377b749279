"""How long fits take (processor time, the median of three) and a bootstrap (by the clock)."""

from __future__ import annotations

import time
from concurrent.futures import ProcessPoolExecutor
from dataclasses import replace

import numpy as np
import pytest

from pipeline.demand.bootstrap import replicates
from pipeline.demand.counts import NegativeBinomial
from pipeline.demand.registry import FAMILIES
from pipeline.demand.sample import Sample
from tests.conftest import RecordCheck
from tests.demand.persons import drawn
from tests.demand.worlds import bare_sample

SOURCE = "own target, two cores"


def with_covariates(sample: Sample, number: int) -> Sample:
    """The sample with further covariates that explain nothing."""
    random = np.random.default_rng(1)
    more = random.normal(size=(sample.nobs, number))
    names = tuple(f"x{i}" for i in range(number))
    return replace(
        sample, design=np.column_stack([sample.design, more]), terms=(*sample.terms, *names)
    )


@pytest.mark.slow
@pytest.mark.parametrize("name", FAMILIES)
def test_a_fit_of_5000_rows_and_8_covariates(name: str, record_check: RecordCheck) -> None:
    kind = name if "linear" not in name else "negative_binomial"
    sample = with_covariates(drawn(kind, seed=1, count=5000), 6)
    assert len(sample.terms) == 9
    FAMILIES[name].fit(sample, errors="HC3")
    seconds = []
    for _ in range(3):
        start = time.process_time()
        model = FAMILIES[name].fit(sample, errors="HC3")
        seconds.append(time.process_time() - start)
    assert model.converged, model.problem
    label = f"speed, {name}: seconds for 5,000 rows and 8 covariates"
    record_check(label, float(np.median(seconds)), 0, 0.3, SOURCE)


@pytest.mark.slow
def test_a_thousand_replicates_of_33000_zones(record_check: RecordCheck) -> None:
    random = np.random.default_rng(1)
    count = 33_000
    cost = random.uniform(2, 200, count)
    income = random.normal(40_000, 10_000, count)
    people = random.lognormal(8, 1, count).round()
    mean = people * np.exp(-4.5 - 0.03 * cost + 0.2 * (income - 40_000) / 10_000)
    trips = random.poisson(mean * random.gamma(2, 1 / 2, count))
    sample = bare_sample(trips, cost, people, household_income=income)
    model = NegativeBinomial().fit(sample, errors="HC3")
    start = time.perf_counter()
    with ProcessPoolExecutor(2) as executor:
        found = replicates(model, sample, count=1000, seed=1, executor=executor)
    seconds = time.perf_counter() - start
    assert found.failed == 0
    label = "speed, bootstrap: seconds for 1,000 replicates of an NB2 of 33,000 zones"
    record_check(label, seconds, 0, 90, SOURCE)
