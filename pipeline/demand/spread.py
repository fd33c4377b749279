"""Distribution of a row's count by a fitted model: mean, variance, cumulative probability.

What residuals and predicted counts are made from. The count is the one that the sampling lets
through: of a truncated model the count given that there is one.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy import special

from pipeline.demand.sample import FloatArray


@dataclass(frozen=True)
class Spread:
    """Counts of n rows: `mean`, `variance` (n,), and `cdf(counts)` (n,), zero below zero."""

    mean: FloatArray
    variance: FloatArray
    cdf: Callable[[FloatArray], FloatArray]

    @property
    def zero(self) -> FloatArray:
        """Probability of no visit."""
        return self.cdf(np.zeros_like(self.mean))

    def truncated(self) -> Spread:
        """The count given that it is not zero."""
        zero, cdf = self.zero, self.cdf
        kept = np.maximum(1 - zero, 1e-300)
        mean = self.mean / kept
        square = (self.variance + self.mean**2) / kept
        return Spread(
            mean, square - mean**2, lambda y: np.where(y < 1, 0.0, (cdf(y) - zero) / kept)
        )

    def with_share(self, share: FloatArray) -> Spread:
        """The count with probability `share`, otherwise zero."""
        cdf = self.cdf
        mean = share * self.mean
        square = share * (self.variance + self.mean**2)
        return Spread(
            mean, square - mean**2, lambda y: np.where(y < 0, 0.0, 1 - share + share * cdf(y))
        )

    def plus_one(self) -> Spread:
        """The count of a visitor met on the site: one more."""
        cdf = self.cdf
        return Spread(self.mean + 1, self.variance, lambda y: cdf(y - 1))


def poisson_spread(mean: FloatArray) -> Spread:
    """Poisson counts."""
    return Spread(
        mean,
        mean,
        lambda y: np.where(y < 0, 0.0, special.pdtr(np.floor(np.maximum(y, 0)), mean)),
    )


def negative_binomial_spread(mean: FloatArray, size: FloatArray | float) -> Spread:
    """Counts with variance mean + mean²/size; `size` infinite is the Poisson."""
    if np.isinf(size).all():
        return poisson_spread(mean)
    sizes = np.broadcast_to(np.asarray(size, dtype=float), mean.shape)

    def cdf(counts: FloatArray) -> FloatArray:
        whole = np.floor(np.maximum(counts, 0))
        below = special.betainc(sizes, whole + 1, sizes / (sizes + mean))
        return np.where(counts < 0, 0.0, below)

    return Spread(mean, mean + mean**2 / sizes, cdf)


def nb2_spread(mean: FloatArray, alpha: float) -> Spread:
    """Counts with variance μ + αμ²; α = 0 is the Poisson."""
    return negative_binomial_spread(mean, 1 / alpha if alpha > 0 else np.inf)
