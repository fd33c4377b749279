"""Log-likelihoods of single rows with first and second derivatives in their indices.

A row's log-likelihood depends on the parameters through two or three numbers, its *indices*:
log of the expected count η, index ζ of the part about zeros, and log α. `Local` carries a value
with its derivatives in them, so that a family is put together from pieces (a count's log
probability, that of a zero, softplus) by the chain rule, and only the pieces are derived by hand.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.special import digamma, expit, gammaln, polygamma

from pipeline.demand.sample import BoolArray, FloatArray


@dataclass(frozen=True)
class Local:
    """A function of q indices at n rows: value (n,), first (q, n), second (q, q, n)."""

    value: FloatArray
    first: FloatArray
    second: FloatArray

    def __add__(self, other: Local) -> Local:
        return Local(self.value + other.value, self.first + other.first, self.second + other.second)

    def __neg__(self) -> Local:
        return Local(-self.value, -self.first, -self.second)

    def __sub__(self, other: Local) -> Local:
        return self + (-other)

    def through(self, value: FloatArray, slope: FloatArray, bend: FloatArray) -> Local:
        """f(self), given f, f' and f'' at self's value."""
        outer = (bend * self.first)[:, None] * self.first[None]
        return Local(value, slope * self.first, slope * self.second + outer)

    def at(self, places: tuple[int, ...], size: int) -> Local:
        """The same function where its indices are some of `size`."""
        first = np.zeros((size, len(self.value)))
        second = np.zeros((size, size, len(self.value)))
        first[list(places)] = self.first
        second[np.ix_(places, places)] = self.second
        return Local(self.value, first, second)


def where(mask: BoolArray, one: Local, other: Local) -> Local:
    """Rows of `one` where the mask holds, of `other` elsewhere."""
    return Local(
        np.where(mask, one.value, other.value),
        np.where(mask, one.first, other.first),
        np.where(mask, one.second, other.second),
    )


def identity(values: FloatArray) -> Local:
    """An index itself."""
    size = len(values)
    return Local(values, np.ones((1, size)), np.zeros((1, 1, size)))


def softplus(x: Local) -> Local:
    """log(1 + exp x)."""
    share = expit(x.value)
    return x.through(np.logaddexp(0.0, x.value), share, share * (1 - share))


def log_one_minus_exp(x: Local) -> Local:
    """log(1 − exp x) for x < 0: from the log probability of a zero to that of a visit."""
    odds = 1 / np.expm1(-x.value)
    return x.through(np.log(-np.expm1(x.value)), -odds, -odds * (1 + odds))


def poisson(counts: FloatArray, eta: FloatArray) -> Local:
    """Log probability of Poisson counts in η."""
    mean = np.exp(eta)
    return Local(
        counts * eta - mean - gammaln(counts + 1),
        (counts - mean)[None],
        -mean[None, None],
    )


def negative_binomial(counts: FloatArray, eta: FloatArray, log_alpha: float) -> Local:
    """Log probability of NB2 counts in η and log α."""
    size, mean = np.exp(-log_alpha), np.exp(eta)
    total = size + mean
    levels, place = np.unique(counts, return_inverse=True)
    of_count = (gammaln(levels + size) - gammaln(size) - levels * np.log(size))[place]
    psi = (digamma(levels + size) - digamma(size))[place]
    bend = (polygamma(1, levels + size) - polygamma(1, size))[place]
    in_size = psi - np.log1p(mean / size) + (mean - counts) / total
    size_size = bend + 1 / size - 1 / total - (mean - counts) / total**2
    value = of_count - gammaln(counts + 1) + counts * eta - (counts + size) * np.log1p(mean / size)
    second = np.empty((2, 2, len(counts)))
    second[0, 0] = -size * mean * (size + counts) / total**2
    second[0, 1] = second[1, 0] = -size * (counts - mean) * mean / total**2
    second[1, 1] = size**2 * size_size + size * in_size
    first = np.stack([size * (counts - mean) / total, -size * in_size])
    return Local(value, first, second)


def negative_binomial_1(counts: FloatArray, eta: FloatArray, log_delta: float) -> Local:
    """Log probability of NB1 counts (variance μ(1 + δ)) in η and log δ."""
    delta = np.exp(log_delta)
    size, share = np.exp(eta) / delta, delta / (1 + delta)
    in_size = digamma(counts + size) - digamma(size) - np.log1p(delta)
    size_size = polygamma(1, counts + size) - polygamma(1, size)
    both = size * in_size + size**2 * size_size
    value = (
        gammaln(counts + size)
        - gammaln(size)
        - gammaln(counts + 1)
        + counts * log_delta
        - (counts + size) * np.log1p(delta)
    )
    second = np.empty((2, 2, len(counts)))
    second[0, 0] = both
    second[0, 1] = second[1, 0] = -both - size * share
    second[1, 1] = both + 2 * size * share - (counts + size) * share * (1 - share)
    first = np.stack([size * in_size, -size * in_size + counts - (counts + size) * share])
    return Local(value, first, second)
