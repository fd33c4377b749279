"""Simulated data sets that each family is right for: persons, and zones with their population.

Persons: 600 records, trips a year exp(1.2 − 0.06 × cost + 0.3 × age) (``tests/demand/persons.py``).
Zones: 200, visits per head exp(−4.5 − 0.06 × cost + 0.2 × other), populations from some hundreds to
some tens of thousands; of the straight lines 60 − 0.5 × cost + 3 × other visits per 1,000. All
invented.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from pipeline.demand.covariance import covariance
from pipeline.demand.design import standardise
from pipeline.demand.family import FittedModel
from pipeline.demand.likelihood import LikelihoodFamily, Rows
from pipeline.demand.registry import FAMILIES
from pipeline.demand.sample import FloatArray, Sample
from tests.demand import persons
from tests.demand.worlds import bare_sample

ZONAL = {"const": -4.5, "travel_cost": -0.06, "other": 0.2}
LINE = {"const": 60.0, "travel_cost": -0.5, "other": 3.0}
ALPHA, DELTA, NEVER = 0.5, 1.5, -0.6
ZONES = 200

COUNTED = (
    "poisson",
    "quasi_poisson",
    "negative_binomial",
    "negative_binomial_1",
    "zero_inflated_poisson",
    "zero_inflated_negative_binomial",
    "truncated_poisson",
    "truncated_negative_binomial",
)
LEAST_SQUARES = ("linear", "weighted_linear", "log_linear", "weighted_log_linear")


def counts(name: str, random: np.random.Generator, mean: FloatArray) -> FloatArray:
    """Counts with a given expected count that a family is right for.

    The quasi-Poisson's variance is in proportion to the mean, so its counts are an NB1's.
    """
    if name.startswith("truncated"):
        return persons.above_zero(random, mean, ALPHA if "negative" in name else 0.0)
    if name in ("quasi_poisson", "negative_binomial_1"):
        mean = random.gamma(mean / DELTA, DELTA)
    elif "negative" in name:
        mean = mean * random.gamma(1 / ALPHA, ALPHA, len(mean))
    drawn = random.poisson(mean)
    if name.startswith("zero_inflated"):
        drawn = np.where(random.random(len(mean)) > 1 / (1 + np.exp(-NEVER)), drawn, 0)
    return np.asarray(drawn, dtype=float)


def zones(name: str, seed: int, count: int = ZONES, *, uneven: bool = False) -> Sample:
    """Zones that a family is right for.

    Parameters
    ----------
    uneven : of least squares, the errors grow with the cost, so that only robust errors hold.
    """
    random = np.random.default_rng([seed, count])
    cost, other = random.uniform(2, 60, count), random.normal(size=count)
    people = random.lognormal(7.5, 0.8, count).round()
    if name in COUNTED:
        mean = people * np.exp(ZONAL["const"] - 0.06 * cost + 0.2 * other)
        return bare_sample(counts(name, random, mean), cost, people, other=other)
    noise = random.normal(size=count)
    if name.startswith("weighted"):
        noise = noise * np.sqrt(people.mean() / people)
    if uneven:
        noise = noise * (0.4 + cost / 40)
    if "log" in name:
        rate = np.exp(ZONAL["const"] - 0.06 * cost + 0.2 * other + 0.5 * noise)
    else:
        rate = (LINE["const"] - 0.5 * cost + 3 * other + 4 * noise) / 1000
    return bare_sample(rate * people, cost, people, other=other)


def zonal_truth(name: str) -> dict[str, float]:
    """Parameters that the zones are drawn with."""
    if name in ("linear", "weighted_linear"):
        return LINE
    return ZONAL | _further(name, ALPHA, DELTA, NEVER)


def personal_truth(name: str) -> dict[str, float]:
    """Parameters that the persons are drawn with."""
    any_trip = {f"any:{term}": value for term, value in persons.ANY.items()}
    further = _further(name, persons.ALPHA, persons.DELTA, persons.NEVER)
    return persons.TRUE | further | (any_trip if name == "hurdle" else {})


def _further(name: str, alpha: float, delta: float, never: float) -> dict[str, float]:
    found = {}
    if name.startswith("zero_inflated"):
        found["never:const"] = never
    if name.endswith("negative_binomial") or name == "hurdle":
        found["alpha"] = alpha
    if name == "negative_binomial_1":
        found["delta"] = delta
    return found


@dataclass(frozen=True)
class Simulation:
    """A family fitted to many worlds.

    Attributes
    ----------
    models : those with a verified fit.
    truth : parameters that the worlds were drawn with.
    """

    models: list[FittedModel]
    truth: dict[str, float]
    worlds: int

    @property
    def failed(self) -> float:
        """Share of worlds without a verified fit."""
        return 1 - len(self.models) / self.worlds

    @cached_property
    def coverage(self) -> dict[str, float]:
        """Share of the 95 % intervals that hold the truth, by term; a dispersion's by its log."""
        return {term: self._covered(term, true) for term, true in self.truth.items()}

    def _covered(self, term: str, true: float) -> float:
        held = []
        for model in self.models:
            place = model.terms.index(term) if term in model.terms else -1
            error = model.std_error[place] if place >= 0 else np.nan
            if not np.isfinite(error):  # at its bound: no interval of its own
                continue
            off, width = model.estimate[place] - true, model.quantile(0.95) * error
            if term in ("alpha", "delta"):
                off = np.log(model.estimate[place] / true)
                width = width / model.estimate[place]
            held.append(abs(off) < width)
        return float(np.mean(held))

    def bias(self, term: str = "travel_cost", first: int | None = None) -> tuple[float, float]:
        """Mean error of an estimate, in Monte Carlo errors, and as a share of the truth.

        Of the first so many worlds, where that is said.
        """
        models = self.models[:first]
        off = np.array([m.estimate[m.terms.index(term)] for m in models]) - self.truth[term]
        noise = off.std() / np.sqrt(len(off))
        return float(off.mean() / noise), float(off.mean() / abs(self.truth[term]))


def with_robust_errors(model: FittedModel, sample: Sample) -> FittedModel:
    """The same fit with HC3 errors; without climbing again where the maximum is interior."""
    family = FAMILIES[model.model]
    assert isinstance(family, LikelihoodFamily)
    used = family.restrict(sample)
    whole = len(used.terms) + len(family.further_terms(used))
    if len(model.estimate) < whole or not np.isfinite(model.std_error).all():
        return family.fit(sample, errors="HC3")
    standard = standardise(used.design)
    rows = Rows.of(used, standard.matrix, family.zero_columns(used))
    theta = family.to_standard(model.estimate, standard, used)
    _, jacobian = family.to_table(theta, standard, used)
    scores = family.scores(theta, rows) * rows.weight[:, None]
    leverage = family.leverage(theta, rows)
    spread = covariance(family.hessian(theta, rows), scores, leverage, "HC3")
    return replace(model, covariance=jacobian @ spread @ jacobian.T, errors="HC3")


def simulate(
    name: str, sample: Callable[[int], Sample], truth: dict[str, float], worlds: int
) -> dict[str, Simulation]:
    """Fit a family to the samples of the seeds 0, 1, 2 …: with model errors, and with HC3."""
    plain, robust = [], []
    for seed in range(worlds):
        drawn = sample(seed)
        model = FAMILIES[name].fit(drawn, errors="model")
        if model.converged:
            plain.append(model)
            robust.append(with_robust_errors(model, drawn))
    return {
        errors: Simulation(models, truth, worlds)
        for errors, models in (("model", plain), ("HC3", robust))
    }


def of_persons(name: str, *, worlds: int = 1000, count: int = 600) -> dict[str, Simulation]:
    """A family on its worlds of persons."""

    def sample(seed: int) -> Sample:
        return replace(persons.drawn(name, seed=seed, count=count), notes=())

    return simulate(name, sample, personal_truth(name), worlds)


def of_zones(name: str, *, worlds: int = 1000, count: int = ZONES) -> dict[str, Simulation]:
    """A family of counts on its worlds of zones."""

    def sample(seed: int) -> Sample:
        return zones(name, seed, count)

    return simulate(name, sample, zonal_truth(name), worlds)


def of_lines(name: str, *, worlds: int = 1000, count: int = ZONES) -> dict[str, Simulation]:
    """Least squares of zones; HC3 where errors grow with the cost, which the model's miss."""
    found = {}
    for errors in ("model", "HC3"):
        fitted = [
            FAMILIES[name].fit(zones(name, seed, count, uneven=errors == "HC3"), errors=errors)
            for seed in range(worlds)
        ]
        models = [model for model in fitted if model.converged]
        found[errors] = Simulation(models, zonal_truth(name), worlds)
    return found
