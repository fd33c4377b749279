"""Residuals of a fitted model: on the normal scale, as counts, and over the map."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd
from scipy import special
from scipy.spatial import cKDTree

from pipeline.demand.dispersed import QuasiPoisson
from pipeline.demand.family import FittedModel
from pipeline.demand.least_squares import Linear, LogLinear, weigh
from pipeline.demand.likelihood import LikelihoodFamily
from pipeline.demand.registry import FAMILIES
from pipeline.demand.sample import FloatArray, IntArray, Sample
from pipeline.demand.spread import Spread

NEIGHBOURS = 8
PERMUTATIONS = 999
#: Least count of each class; further ones go on 1, 2, 5.
_EDGES = tuple([0, 1, 2, 3, 5] + [n * 10**k for k in range(1, 8) for n in (1, 2, 5)])


def quantile_residuals(spread: Spread, sample: Sample, *, seed: int) -> FloatArray:
    """Randomised quantile residuals.

    Dunn and Smyth, Journal of Computational and Graphical Statistics 5, 1996: uniform between the
    cumulative probabilities below and at the count, on the normal scale.
    """
    counts = np.floor(sample.counts)
    low, high = spread.cdf(counts - 1), spread.cdf(counts)
    uniform = np.random.default_rng([seed, 1]).random(sample.nobs)
    share = np.clip(low + uniform * (high - low), 1e-12, 1 - 1e-12)
    return np.asarray(special.ndtri(share), dtype=float)


def normality(residuals: FloatArray) -> tuple[float, float]:
    """Kolmogorov and Smirnov's distance from the standard normal, and its p-value."""
    from scipy.stats import kstest

    found = kstest(residuals, "norm")
    return float(found.statistic), float(found.pvalue)


def count_classes(spread: Spread, sample: Sample) -> list[tuple[str, float, float]]:
    """Rows by count: label, observed, expected (weighted)."""
    needed = int(np.searchsorted(_EDGES, sample.counts.max(), side="right")) + 1
    edges = _EDGES[:needed]
    found = []
    below = np.zeros(sample.nobs)
    for low, upper in zip(edges, [*edges[1:], None], strict=True):
        upto, inside, label = np.ones(sample.nobs), sample.counts >= low, f"{low:,} and more"
        if upper is not None:
            upto = spread.cdf(np.full(sample.nobs, upper - 1.0))
            inside &= sample.counts < upper
            label = f"{low:,}" if upper == low + 1 else f"{low:,} to {upper - 1:,}"
        found.append((label, float(sample.weight @ inside), float(sample.weight @ (upto - below))))
        below = upto
    return found


def standardised_residuals(model: FittedModel, sample: Sample) -> tuple[FloatArray, IntArray]:
    """Residuals over their standard deviation by the model, and which rows of the sample they are.

    Least squares: of its own response (the rate, or the log of it). Quasi-Poisson: the variance is
    the mean times the dispersion.
    """
    family = FAMILIES[model.model]
    kept = np.arange(sample.nobs)
    if isinstance(family, LikelihoodFamily):
        spread = family.spread(model.estimate, sample)
        scale = model.dispersion if isinstance(family, QuasiPoisson) else 1.0
        deviation = np.sqrt(np.maximum(scale * spread.variance, 1e-300))
        return (sample.counts - spread.mean) / deviation, kept
    if isinstance(family, LogLinear):
        kept = np.flatnonzero(sample.counts > 0)
    used = sample.rows(kept)
    by_exposure = isinstance(family, Linear | LogLinear) and family.by_exposure
    used = weigh(used) if by_exposure else used
    response = np.log(used.rate) if isinstance(family, LogLinear) else used.rate * used.per
    left = response - used.design @ model.estimate[: len(sample.terms)]
    degrees = max(used.nobs - len(sample.terms), 1)
    variance = float(used.weight @ left**2) / degrees
    return left * np.sqrt(used.weight / max(variance, 1e-300)), kept


def zone_residuals(model: FittedModel, sample: Sample, *, seed: int) -> pd.DataFrame:
    """Rows of `residuals` for the zones that a model was fitted to.

    Counts with a likelihood: randomised quantile residuals, which are standard normal where the
    model is right, however small the counts. Others have no distribution to take quantiles of.
    """
    family = FAMILIES[model.model]
    used = family.restrict(sample) if isinstance(family, LikelihoodFamily) else sample
    if isinstance(family, LikelihoodFamily) and not isinstance(family, QuasiPoisson):
        spread = family.spread(model.estimate, used)
        residuals, kept = quantile_residuals(spread, used, seed=seed), np.arange(used.nobs)
        kind = "randomised quantile"
    else:
        residuals, kept = standardised_residuals(model, used)
        kind = "standardised"
    return pd.DataFrame(
        {
            "zone_id": [used.zone_ids[i] for i in kept],
            "site_id": sample.site_id,
            "model": model.model,
            "residual": residuals,
            "residual_kind": kind,
        }
    )


@dataclass(frozen=True)
class Moran:
    """Moran's I, what it is expected to be without a pattern, and its permutation p-value."""

    value: float
    expected: float
    p_value: float
    neighbours: int


def nearest(positions: FloatArray, neighbours: int) -> IntArray:
    """Row numbers of the nearest places of each place, (n, neighbours), along great circles.

    Parameters
    ----------
    positions : (n, 2) longitude and latitude, degrees.
    """
    lon, lat = np.radians(positions).T
    points = np.column_stack([np.cos(lat) * np.cos(lon), np.cos(lat) * np.sin(lon), np.sin(lat)])
    found = np.asarray(cKDTree(points).query(points, k=neighbours + 1)[1])
    rows = np.arange(len(points))[:, None]
    # A place is not its own neighbour, wherever it stands among places at the same spot.
    own = found == rows
    own[~own.any(axis=1), -1] = True
    return np.asarray(found[~own].reshape(len(points), neighbours))


def moran(values: FloatArray, positions: FloatArray, *, seed: int) -> Moran:
    """Moran's I over the nearest places, each weighing the same; two-sided permutation p-value.

    Moran, Biometrika 37, 1950; permutations as in Anselin, Geographical Analysis 27, 1995.
    """
    neighbours = min(NEIGHBOURS, len(values) - 1)
    near = nearest(positions, neighbours)
    centred = values - values.mean()
    square = float(centred @ centred)
    observed = float(centred @ centred[near].mean(axis=1)) / square
    random = np.random.default_rng([seed, 2])
    drawn = np.empty(PERMUTATIONS)
    for i in range(PERMUTATIONS):
        shuffled = random.permutation(centred)
        drawn[i] = float(shuffled @ shuffled[near].mean(axis=1)) / square
    above = int((drawn >= observed).sum())
    fewer = min(above, PERMUTATIONS - above)
    return Moran(
        value=observed,
        expected=-1 / (len(values) - 1),
        p_value=min(1.0, 2 * (fewer + 1) / (PERMUTATIONS + 1)),
        neighbours=neighbours,
    )
