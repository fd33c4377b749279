"""How long fits and a bootstrap take, by the clock; the fits the least of five, so that what else
the machine does counts little.
"""

from __future__ import annotations

import time
from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from pipeline.demand.bootstrap import replicates
from pipeline.demand.counts import NegativeBinomial
from pipeline.demand.registry import FAMILIES
from pipeline.demand.sample import Sample
from pipeline.executor import InProcess, make_executor
from pipeline.files import read_table
from pipeline.inputs import read_sites, read_zones
from pipeline.runner import Run
from pipeline.sensitivity import Pricing, Tables, run_variants
from pipeline.settings import ComputeSettings
from pipeline.study import load_study
from pipeline.tables import Origins, Routes, Sites, ZoneTable
from pipeline.variants import own_variants
from tests.conftest import RecordCheck
from tests.demand.persons import drawn
from tests.demand.worlds import bare_sample

SOURCE = "own target, two cores"
TWO = ComputeSettings(workers=2)
DEMO = Path(__file__).parents[2] / "config" / "demo.toml"


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
    for _ in range(5):
        start = time.perf_counter()
        model = FAMILIES[name].fit(sample, errors="HC3")
        seconds.append(time.perf_counter() - start)
    assert model.converged, model.problem
    label = f"speed, {name}: seconds for 5,000 rows and 8 covariates"
    record_check(label, min(seconds), 0, 0.3, SOURCE)


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
    with make_executor(TWO) as executor:
        found = replicates(model, sample, count=1000, seed=1, executor=executor)
    seconds = time.perf_counter() - start
    assert found.failed == 0
    label = "speed, bootstrap: seconds for 1,000 replicates of an NB2 of 33,000 zones"
    record_check(label, seconds, 0, 90, SOURCE)


@pytest.mark.slow
def test_two_hundred_alternatives_of_the_demo(tmp_path: Path, record_check: RecordCheck) -> None:
    """The whole of each: prices, the finished table, all models and the surplus."""
    study = load_study(DEMO, output=tmp_path)
    run = Run(study, lambda _: None)
    run.upto("surplus")
    origins, routes, finished = (
        read_table(kind, tmp_path / "work" / f"{kind.table_name()}.parquet")
        for kind in (Origins, Routes, ZoneTable)
    )
    zones, sites = read_zones(study), Sites.checked(read_sites(study))
    tables = Tables(Pricing(origins, routes, zones, sites), finished, None)
    grid = {
        "costs.wage_fraction": tuple(round(0.05 * step, 2) for step in range(1, 21)),
        "costs.vehicle_cost_per_km": tuple(round(0.1 + 0.03 * step, 2) for step in range(10)),
    }
    asked = study.sensitivity.model_copy(update={"grid": grid, "variants": ()})
    variants = own_variants(study.model_copy(update={"sensitivity": asked}))
    assert len(variants) == 200
    start = time.perf_counter()
    with make_executor(TWO) as executor:
        rows = run_variants(variants, tables, study, executor)
    seconds = time.perf_counter() - start
    assert len(rows) == 200
    here = run_variants(variants[:3], tables, study, InProcess())
    pd.testing.assert_frame_equal(pd.DataFrame(rows[:3]), pd.DataFrame(here), check_exact=True)
    label = "speed, sensitivity: seconds for 200 alternatives of the demo in two processes"
    record_check(label, seconds, 0, 60, SOURCE)
