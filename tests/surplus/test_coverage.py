"""Do the intervals hold the truth as often as they say? Simulated, so seeds are fixed."""

from __future__ import annotations

import numpy as np
import pytest

from pipeline.demand.counts import NegativeBinomial, Poisson
from pipeline.demand.family import FittedModel
from pipeline.demand.likelihood import LikelihoodFamily
from pipeline.demand.sample import Sample
from tests.demand.worlds import a_sample, bare_sample, zones

TRUE = 1 / 0.06


def covers(model: FittedModel) -> tuple[bool, float]:
    """Whether the delta interval of −1/b holds the truth, and how far off −1/b is."""
    value = -1 / model.price_coefficient
    error = model.std_error[1] * value**2
    return abs(value - TRUE) < model.quantile(0.95) * error, value - TRUE


def world(seed: int, shape: float | None, count: int) -> Sample:
    """Zones with a rate of exp(−4.5 − 0.06 × cost + 0.2 × x); 1/alpha is `shape`."""
    random = np.random.default_rng(seed)
    cost, other = random.uniform(2, 60, count), random.normal(size=count)
    people = random.lognormal(7.5, 0.8, count).round()
    mean = people * np.exp(-4.5 - 0.06 * cost + 0.2 * other)
    if shape is not None:
        mean = mean * random.gamma(shape, 1 / shape, count)
    return bare_sample(random.poisson(mean), cost, people, other=other)


def simulate(
    family: LikelihoodFamily, *, shape: float | None, errors: str, worlds: int, count: int
) -> tuple[float, float, float]:
    """Coverage, bias, and the bias's Monte Carlo error over so many worlds."""
    found = []
    for seed in range(worlds):
        model = family.fit(world(seed, shape, count), errors=errors)
        assert model.converged, (seed, model.problem)
        found.append(covers(model))
    held, off = (np.array(part) for part in zip(*found, strict=True))
    return float(held.mean()), float(off.mean()), float(off.std() / np.sqrt(worlds))


@pytest.mark.parametrize(
    ("family", "shape", "errors"),
    [
        (Poisson(), None, "model"),
        (Poisson(), 2.0, "HC3"),
        (NegativeBinomial(), 2.0, "model"),
        (NegativeBinomial(), 2.0, "HC3"),
    ],
    ids=lambda value: getattr(value, "name", str(value)),
)
def test_nominal_95_holds_about_95_times_in_100(
    family: LikelihoodFamily, shape: float | None, errors: str
) -> None:
    """200 worlds of 150 zones: two Monte Carlo errors are 3 points."""
    coverage, bias, noise = simulate(family, shape=shape, errors=errors, worlds=200, count=150)
    assert 0.92 <= coverage <= 0.98
    # −1/b is biased upward by about var(b)/|b|³, small beside its standard error.
    assert abs(bias) < 4 * noise + 0.02 * TRUE


def test_model_errors_of_a_poisson_miss_when_counts_vary_more() -> None:
    """Why robust errors are the default: NB2 counts, Poisson taken at its word."""
    coverage, _, _ = simulate(Poisson(), shape=2.0, errors="model", worlds=100, count=150)
    assert coverage < 0.7


def test_expanded_visits_taken_for_counts_make_model_errors_too_small() -> None:
    """Every record stands for 25 visits: fitted as if counted, the interval is a fifth as wide."""
    expanded = zones(shape=None, expansion=25.0)
    right = Poisson().fit(a_sample(expanded), errors="model")
    wrong = Poisson().fit(a_sample(expanded.drop(columns="sampled_visits")), errors="model")
    np.testing.assert_allclose(right.std_error / wrong.std_error, 5, rtol=1e-6)


@pytest.mark.slow
@pytest.mark.parametrize(
    ("family", "shape"),
    [(Poisson(), None), (Poisson(), 2.0), (NegativeBinomial(), 2.0)],
    ids=lambda value: getattr(value, "name", str(value)),
)
def test_a_thousand_worlds_of_400_zones(family: LikelihoodFamily, shape: float | None) -> None:
    coverage, _, _ = simulate(family, shape=shape, errors="HC3", worlds=1000, count=400)
    assert 0.93 <= coverage <= 0.97
