"""Count models with mean exposure × exp(x'β): Poisson and negative binomial (NB2).

Written out in Cameron and Trivedi, Regression Analysis of Count Data, chapter 3. NB2 has
variance μ + αμ² and is fitted in log α, so that α stays positive.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from scipy.special import digamma, gammaln, polygamma

from pipeline.demand.family import ALPHA, FittedModel
from pipeline.demand.likelihood import LikelihoodFamily, Rows, climb
from pipeline.demand.sample import FloatArray, Sample
from pipeline.demand.spread import Spread, nb2_spread, poisson_spread

#: Overdispersion below this share of the mean cannot be told from none.
NO_OVERDISPERSION = 1e-3


class Poisson(LikelihoodFamily):
    """Counts with variance equal to their mean; with robust errors, whatever their variance."""

    name = "poisson"
    label = "Poisson"

    def start(self, rows: Rows) -> FloatArray:
        """Least squares of the log count."""
        return rows.first_guess()

    def log_likelihood(self, theta: FloatArray, rows: Rows) -> FloatArray:
        """Log-likelihood of each row."""
        eta = rows.design @ theta + rows.offset
        return np.asarray(rows.counts * eta - np.exp(eta) - rows.log_factorial, dtype=float)

    def scores(self, theta: FloatArray, rows: Rows) -> FloatArray:
        """Gradient of each row."""
        return np.asarray((rows.counts - rows.mean(theta))[:, None] * rows.design, dtype=float)

    def hessian(self, theta: FloatArray, rows: Rows) -> FloatArray:
        """Minus X'WX with W the weighted means."""
        weights = rows.weight * rows.mean(theta)
        return np.asarray(-(rows.design.T * weights) @ rows.design, dtype=float)

    def information(self, theta: FloatArray, rows: Rows) -> FloatArray:
        """The mean."""
        return rows.mean(theta)

    def spread(self, estimate: FloatArray, sample: Sample) -> Spread:
        """Poisson."""
        return poisson_spread(log_mean(estimate, sample))


class NegativeBinomial(LikelihoodFamily):
    """Counts with variance μ + αμ² (NB2)."""

    name = "negative_binomial"
    label = "negative binomial"
    extra_terms: tuple[str, ...] = (ALPHA,)

    def at_bound(self, sample: Sample, errors: str) -> FittedModel | None:
        """A Poisson with α = 0 where the counts vary no more than a Poisson's."""
        poisson = Poisson().fit(sample, errors=errors)
        if not poisson.converged:
            return FittedModel.failed(self.name, sample, poisson.problem)
        mean = log_mean(poisson.estimate, sample)
        excess = float(sample.weight @ ((sample.counts - mean) ** 2 - sample.counts))
        # The slope of the likelihood in α at zero: where it does not rise, zero is the maximum.
        if excess > NO_OVERDISPERSION * float(sample.weight @ mean):
            return None
        return without_overdispersion(poisson, self.name, "Poisson", "alpha", ALPHA)

    def start(self, rows: Rows) -> FloatArray:
        """The Poisson's maximum, and the α of the overdispersion seen there.

        α is halved until the point beats the Poisson, so that a climb from it cannot end there.
        """
        top = climb(Poisson(), rows)
        mean = rows.mean(top.theta)
        excess = float(rows.weight @ ((rows.counts - mean) ** 2 - rows.counts))
        alpha = max(excess, 0.0) / float(rows.weight @ mean**2) + 1e-8
        start = np.append(top.theta, np.log(alpha))
        for _ in range(40):
            if rows.weight @ self.log_likelihood(start, rows) > top.value:
                break
            start[-1] -= np.log(2)
        return start

    def log_likelihood(self, theta: FloatArray, rows: Rows) -> FloatArray:
        """Log-likelihood of each row; the last parameter is log α."""
        size = np.exp(-theta[-1])
        eta = rows.design @ theta[:-1] + rows.offset
        of_count = gammaln(rows.levels + size) - gammaln(size) - rows.levels * np.log(size)
        spread = (rows.counts + size) * np.log1p(np.exp(eta) / size)
        value = of_count[rows.place] - rows.log_factorial + rows.counts * eta - spread
        return np.asarray(value, dtype=float)

    def scores(self, theta: FloatArray, rows: Rows) -> FloatArray:
        """Gradient of each row."""
        size = np.exp(-theta[-1])
        mean = rows.mean(theta[:-1])
        in_eta = size * (rows.counts - mean) / (size + mean)
        return np.column_stack(
            [in_eta[:, None] * rows.design, -size * self._in_size(size, mean, rows)]
        )

    def hessian(self, theta: FloatArray, rows: Rows) -> FloatArray:
        """Hessian in β and log α."""
        size = np.exp(-theta[-1])
        mean = rows.mean(theta[:-1])
        total = size + mean
        eta_eta = -size * mean * (size + rows.counts) / total**2
        eta_log = -size * (rows.counts - mean) * mean / total**2
        trigamma = polygamma(1, rows.levels + size) - polygamma(1, size)
        size_size = trigamma[rows.place] + 1 / size - 1 / total - (mean - rows.counts) / total**2
        log_log = size**2 * size_size + size * self._in_size(size, mean, rows)
        cross = rows.design.T @ (rows.weight * eta_log)
        inner = (rows.design.T * (rows.weight * eta_eta)) @ rows.design
        corner = np.array([[float(rows.weight @ log_log)]])
        return np.block([[inner, cross[:, None]], [cross[None, :], corner]])

    def evaluate(self, theta: FloatArray, rows: Rows) -> tuple[float, FloatArray, FloatArray]:
        """Value, gradient and Hessian in one pass; terms of the count once per distinct count."""
        size, weight = float(np.exp(-theta[-1])), rows.weight
        eta = rows.design @ theta[:-1] + rows.offset
        mean = np.exp(eta)
        total, log_odds = size + mean, np.log1p(mean / size)
        share = size / total
        at_level = np.bincount(rows.place, weight, minlength=len(rows.levels))
        levels = rows.levels
        of_count = gammaln(levels + size) - gammaln(size) - levels * np.log(size)
        psi = digamma(levels + size) - digamma(size)
        bend = polygamma(1, levels + size) - polygamma(1, size)
        value = float(at_level @ of_count) + float(
            weight @ (rows.counts * eta - (rows.counts + size) * log_odds - rows.log_factorial)
        )
        surprise = weight * (rows.counts - mean) / total
        in_size = float(at_level @ psi - weight @ log_odds - surprise.sum())
        size_size = float(at_level @ bend) + float(
            weight.sum() / size - (weight / total).sum() + (surprise / total).sum()
        )
        in_eta = size * surprise
        gradient = np.append(rows.design.T @ in_eta, -size * in_size)
        inner_weight = -share * weight * mean * (size + rows.counts) / total
        inner = (rows.design.T * inner_weight) @ rows.design
        cross = -(rows.design.T @ (share * surprise * mean))
        corner = np.array([[size**2 * size_size + size * in_size]])
        return value, gradient, np.block([[inner, cross[:, None]], [cross[None, :], corner]])

    def _in_size(self, size: float, mean: FloatArray, rows: Rows) -> FloatArray:
        """Derivative of each row in 1/α."""
        of_count = digamma(rows.levels + size) - digamma(size)
        total = size + mean
        return np.asarray(
            of_count[rows.place] - np.log1p(mean / size) + (mean - rows.counts) / total,
            dtype=float,
        )

    def information(self, theta: FloatArray, rows: Rows) -> FloatArray:
        """μ / (1 + αμ)."""
        mean = rows.mean(theta[:-1])
        return np.asarray(mean / (1 + np.exp(theta[-1]) * mean), dtype=float)

    def natural(self, theta: FloatArray, size: int) -> tuple[FloatArray, FloatArray]:
        """α, and its derivative in log α, which is α."""
        alpha = np.exp(theta[size:])
        return alpha, alpha

    def spread(self, estimate: FloatArray, sample: Sample) -> Spread:
        """NB2."""
        return nb2_spread(log_mean(estimate, sample), float(estimate[-1]))


def without_overdispersion(
    simple: FittedModel, name: str, label: str, symbol: str, term: str
) -> FittedModel:
    """The simpler model as one whose dispersion is at its lower bound."""
    size = len(simple.terms)
    spread = np.full((size + 1, size + 1), np.nan)
    spread[:size, :size] = simple.covariance
    return replace(
        simple,
        model=name,
        terms=(*simple.terms, term),
        estimate=np.append(simple.estimate, 0.0),
        covariance=spread,
        parameters=size + 1,
        dispersion=0.0,
        notes=(
            *simple.notes,
            (
                f"The counts vary no more than a {label}'s: {symbol} is at its lower bound, zero, "
                f"and the model is the {label}."
            ),
        ),
    )


def log_mean(estimate: FloatArray, sample: Sample) -> FloatArray:
    """exp(x'β) × exposure of each row."""
    with np.errstate(over="ignore"):
        rate = np.exp(sample.design @ estimate[: len(sample.terms)])
    return np.asarray(rate * sample.exposure, dtype=float)
