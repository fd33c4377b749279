"""1,000 simulated data sets per family: coverage, bias, failures; and how far naive models miss.

Data are drawn from a stated demand (tests/demand/persons.py), 600 persons each: nominal 95 %
intervals of the price coefficient should hold the truth 95 times in 100. With 1,000 data sets one
Monte Carlo error of that share is 0.7 points.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from pipeline.demand.family import FittedModel
from pipeline.demand.registry import FAMILIES
from pipeline.demand.sample import FloatArray
from tests.conftest import RecordCheck
from tests.demand.persons import ALPHA, TRUE, drawn

WORLDS = 1000
PERSONS = 600
FAMILY_NAMES = (
    "poisson",
    "negative_binomial",
    "negative_binomial_1",
    "quasi_poisson",
    "zero_inflated_poisson",
    "zero_inflated_negative_binomial",
    "truncated_poisson",
    "truncated_negative_binomial",
    "on_site_poisson",
    "on_site_negative_binomial",
    "hurdle",
)
SOURCE = "nominal level; data drawn from a stated demand, seeds 0 to 999"


def fits(name: str, *, errors: str) -> list[FittedModel]:
    """The family on each of its worlds."""
    family = FAMILIES[name]
    return [
        family.fit(drawn(name, seed=seed, count=PERSONS), errors=errors) for seed in range(WORLDS)
    ]


@pytest.mark.slow
@pytest.mark.parametrize("name", FAMILY_NAMES)
def test_intervals_hold_the_truth_as_often_as_they_say(
    name: str, record_check: RecordCheck
) -> None:
    models = fits(name, errors="model")
    good = [model for model in models if model.converged]
    failed = (WORLDS - len(good)) / WORLDS
    prices = np.array([model.price_coefficient for model in good])
    widths = np.array([model.quantile(0.95) * model.std_error[1] for model in good])
    off = prices - TRUE["travel_cost"]
    label = f"simulated, {name}"
    record_check(f"{label}: share without a verified fit", failed, 0, 0.001, SOURCE)
    record_check(
        f"{label}: coverage of 95 % intervals",
        float((np.abs(off) < widths).mean()),
        0.95,
        0.02,
        SOURCE,
    )
    noise = float(off.std() / np.sqrt(len(off)))
    record_check(
        f"{label}: bias of the price coefficient in Monte Carlo errors",
        float(off.mean()) / noise,
        0,
        3.5,
        SOURCE,
    )


def naive_ratio(name: str, naive: str, count: int) -> FloatArray:
    """Surplus per trip −1/b of a naive model of on-site records over the true one."""
    family = FAMILIES[naive]
    found = []
    for seed in range(50):
        sample = drawn(name, seed=seed, count=count)
        model = family.fit(sample, errors="model")
        found.append(TRUE["travel_cost"] / model.price_coefficient)
    return np.array(found)


@pytest.mark.slow
def test_a_naive_poisson_of_on_site_records_misses_as_theory_says(
    record_check: RecordCheck,
) -> None:
    """Met on the site, a Poisson visitor has μ + 1 expected trips (Shaw, 1988).

    So a naive Poisson fits log(μ + 1), whose slope in the cost is b μ / (μ + 1) at each cost: the
    coefficient is the one that solves its own first-order conditions with μ + 1 in the place of
    the count, which is worked out here without any draw.
    """
    sample = drawn("on_site_poisson", seed=0, count=20_000)
    mean = np.exp(sample.design @ np.array(list(TRUE.values())))
    theory = FAMILIES["poisson"].fit(replace(sample, counts=mean + 1), errors="model")
    expected = TRUE["travel_cost"] / theory.price_coefficient
    found = naive_ratio("on_site_poisson", "poisson", PERSONS)
    noise = float(found.std() / np.sqrt(len(found)))
    record_check(
        "simulated, naive Poisson of on-site records: surplus per trip, times the true one",
        float(found.mean()),
        expected,
        4 * noise + 0.01 * expected,
        "Shaw, Journal of Econometrics 37, 1988: E(y met on site) = μ + 1",
    )
    assert expected > 1.2


@pytest.mark.slow
def test_a_naive_nb2_of_on_site_records_misses_as_theory_says(record_check: RecordCheck) -> None:
    """Met on the site, an NB2 visitor has 1 + μ(1 + α) expected trips."""
    sample = drawn("on_site_negative_binomial", seed=0, count=20_000)
    mean = np.exp(sample.design @ np.array(list(TRUE.values())))
    theory = FAMILIES["poisson"].fit(replace(sample, counts=1 + mean * (1 + ALPHA)), errors="model")
    expected = TRUE["travel_cost"] / theory.price_coefficient
    found = naive_ratio("on_site_negative_binomial", "poisson", PERSONS)
    noise = float(found.std() / np.sqrt(len(found)))
    record_check(
        "simulated, naive Poisson of on-site NB2 records: surplus per trip, times the true one",
        float(found.mean()),
        expected,
        4 * noise + 0.01 * expected,
        "Englin and Shonkwiler, Rev. Econ. Stat. 77, 1995: E(y met on site) = 1 + μ(1 + α)",
    )
