"""Invented persons with trips drawn from a stated demand, as records."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pandas as pd

from pipeline.demand.build import build_samples
from pipeline.demand.sample import FloatArray, Sample

#: Trips = exp(1.2 − 0.06 × cost + 0.3 × age), age standard normal, cost 2 to 60.
TRUE = {"const": 1.2, "travel_cost": -0.06, "age": 0.3}
ALPHA = 0.6
DELTA = 1.5
#: Logit of never coming (zero-inflated) and of any trip (hurdle).
NEVER = -0.6
ANY = {"const": 1.5, "travel_cost": -0.05, "age": 0.2}


def people(seed: int, count: int) -> tuple[np.random.Generator, FloatArray, FloatArray, FloatArray]:
    """Generator, cost, age and expected trips."""
    random = np.random.default_rng(seed)
    cost, age = random.uniform(2, 60, count), random.normal(size=count)
    return random, cost, age, np.exp(1.2 - 0.06 * cost + 0.3 * age)


def nb2(random: np.random.Generator, mean: FloatArray, alpha: float = ALPHA) -> FloatArray:
    """NB2 counts."""
    return random.poisson(mean * random.gamma(1 / alpha, alpha, len(mean))).astype(float)


def above_zero(random: np.random.Generator, mean: FloatArray, alpha: float) -> FloatArray:
    """Counts drawn until they are not zero."""
    counts = np.zeros(len(mean))
    while (empty := counts == 0).any():
        again = mean[empty]
        counts[empty] = nb2(random, again, alpha) if alpha else random.poisson(again)
    return counts


def drawn(model: str, *, seed: int, count: int) -> Sample:
    """A sample that the model is right for."""
    random, cost, age, mean = people(seed, count)
    if model in ("poisson", "quasi_poisson"):
        trips = random.poisson(mean).astype(float)
    elif model == "negative_binomial":
        trips = nb2(random, mean)
    elif model == "negative_binomial_1":
        trips = random.poisson(random.gamma(mean / DELTA, DELTA)).astype(float)
    elif model == "truncated_poisson":
        trips = above_zero(random, mean, 0.0)
    elif model == "truncated_negative_binomial":
        trips = above_zero(random, mean, ALPHA)
    elif model == "on_site_poisson":
        trips = random.poisson(mean) + 1.0
    elif model == "on_site_negative_binomial":
        # Gamma weights biased by size: shape one more, so that y − 1 is Poisson of them.
        trips = random.poisson(mean * random.gamma(1 / ALPHA + 1, ALPHA, count)) + 1.0
    elif model.startswith("zero_inflated"):
        comes = random.random(count) > 1 / (1 + np.exp(-NEVER))
        counts = nb2(random, mean) if "negative" in model else random.poisson(mean)
        trips = np.where(comes, counts, 0.0).astype(float)
    elif model == "hurdle":
        zeta = ANY["const"] + ANY["travel_cost"] * cost + ANY["age"] * age
        comes = random.random(count) < 1 / (1 + np.exp(-zeta))
        trips = np.where(comes, above_zero(random, mean, ALPHA), 0.0)
    else:
        raise ValueError(model)
    return person_sample(trips, cost, age)


def person_sample(trips: FloatArray, cost: FloatArray, age: FloatArray) -> Sample:
    """Records as a sample."""
    table = pd.DataFrame(
        {
            "record_id": [str(i) for i in range(len(trips))],
            "zone_id": [f"{i % 50:04d}" for i in range(len(trips))],
            "site_id": "fen",
            "trips": trips,
            "travel_cost": cost,
            "age": age,
        }
    )
    (sample,) = build_samples(None, table, ("age",))
    return replace(sample, notes=())
