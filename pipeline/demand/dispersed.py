"""Counts whose variance is proportional to their mean: NB1, and the quasi-Poisson.

NB1 (Cameron and Trivedi, Journal of Applied Econometrics 1, 1986) has variance μ(1 + δ). The
quasi-Poisson has the Poisson's estimates with errors times the root of Pearson's chi-square over
its degrees of freedom (McCullagh and Nelder, Generalized Linear Models, 1989); it has no
likelihood.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from pipeline.demand import local as rows_local
from pipeline.demand.counts import NO_OVERDISPERSION, Poisson, log_mean, without_overdispersion
from pipeline.demand.family import DELTA, FittedModel
from pipeline.demand.indexed import IndexedFamily, with_dispersion
from pipeline.demand.likelihood import Rows, climb
from pipeline.demand.local import Local
from pipeline.demand.sample import FloatArray, Sample
from pipeline.demand.spread import Spread, negative_binomial_spread


class NegativeBinomial1(IndexedFamily):
    """Counts with variance μ(1 + δ) (NB1)."""

    name = "negative_binomial_1"
    label = "negative binomial with variance in proportion to the mean"
    extra_terms = (DELTA,)

    def at_bound(self, sample: Sample, errors: str) -> FittedModel | None:
        """A Poisson with δ = 0 where the likelihood does not rise with δ there."""
        poisson = Poisson().fit(sample, errors=errors)
        if not poisson.converged:
            return FittedModel.failed(self.name, sample, poisson.problem)
        mean = log_mean(poisson.estimate, sample)
        excess = float(sample.weight @ (((sample.counts - mean) ** 2 - sample.counts) / mean))
        if excess > NO_OVERDISPERSION * float(sample.weight.sum()):
            return None
        return without_overdispersion(poisson, self.name, "Poisson", "delta", DELTA)

    def start(self, rows: Rows) -> FloatArray:
        """The Poisson's maximum, and the δ of the overdispersion seen there."""
        top = climb(Poisson(), rows)
        mean = rows.mean(top.theta)
        excess = rows.weight @ (((rows.counts - mean) ** 2 - rows.counts) / mean)
        delta = max(float(excess), 0.0) / float(rows.weight.sum())
        return with_dispersion(self, top.theta, top.value, delta, rows)

    def local(self, indices: tuple[FloatArray, ...], log_alpha: float, rows: Rows) -> Local:
        """NB1 in η and log δ."""
        return rows_local.negative_binomial_1(rows.counts, indices[0], log_alpha)

    def spread(self, estimate: FloatArray, sample: Sample) -> Spread:
        """NB1."""
        mean, delta = log_mean(estimate, sample), float(estimate[-1])
        return negative_binomial_spread(mean, mean / delta if delta > 0 else np.inf)


class QuasiPoisson(Poisson):
    """A Poisson's estimates, with errors scaled by the dispersion; no likelihood."""

    name = "quasi_poisson"
    label = "quasi-Poisson"
    student = True

    def fit(self, sample: Sample, *, errors: str) -> FittedModel:
        """Fit to a sample; `errors` by cluster are kept, all others are the scaled ones."""
        kept = errors == "cluster"
        model = super().fit(sample, errors=errors if kept else "model")
        if not model.converged:
            return model
        scale = 1.0 if kept else model.dispersion
        degrees = model.degrees if kept else float(sample.nobs - len(sample.terms))
        return replace(
            model,
            covariance=model.covariance * scale,
            degrees=degrees,
            log_likelihood=np.nan,
            errors=errors if kept else "scaled",
        )
