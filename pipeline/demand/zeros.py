"""Families with a part about zeros: zero-inflated counts, and the hurdle.

Zero-inflated (Lambert, Technometrics 34, 1992): a share of the rows never has a visit, logit of
that share ζ = z'γ (terms ``never:``); the others have Poisson or NB2 counts, zeros included.
Hurdle (Mullahy, Journal of Econometrics 33, 1986): whether there is any trip is a logit in ζ
(terms ``any:``); how many, given that there is one, is a zero-truncated NB2.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from scipy.special import expit, logit

from pipeline.demand import local as rows_local
from pipeline.demand.counts import (
    NO_OVERDISPERSION,
    NegativeBinomial,
    Poisson,
    log_mean,
    without_overdispersion,
)
from pipeline.demand.curves import price_column
from pipeline.demand.family import ALPHA, FittedModel
from pipeline.demand.indexed import IndexedFamily
from pipeline.demand.likelihood import LikelihoodFamily, Rows, climb
from pipeline.demand.local import Local
from pipeline.demand.maximum import Maximum
from pipeline.demand.mixed_curve import MixedCurve
from pipeline.demand.sample import CONST, FloatArray, Sample
from pipeline.demand.spread import Spread, nb2_spread
from pipeline.demand.truncated import TruncatedPoisson


class ZeroInflatedPoisson(MixedCurve, IndexedFamily):
    """Poisson counts of those who may come; others never do."""

    name = "zero_inflated_poisson"
    label = "zero-inflated Poisson"
    has_zero_part = True
    base: LikelihoodFamily = Poisson()

    def zero_columns(self, sample: Sample) -> tuple[int, ...]:
        """A constant, unless the study says more."""
        terms = sample.zero_terms or (CONST,)
        return tuple(sample.terms.index(term) for term in terms)

    def further_terms(self, sample: Sample) -> tuple[str, ...]:
        """`never:` terms, and the dispersion."""
        never = (f"never:{sample.terms[j]}" for j in self.zero_columns(sample))
        return (*never, *self.extra_terms)

    def at_bound(self, sample: Sample, errors: str) -> FittedModel | None:
        """The count model alone where zeros are no more than it expects."""
        plain = self.base.fit(sample, errors=errors)
        if len(self.zero_columns(sample)) > 1 or not plain.converged:
            return None
        zero = self.base.spread(plain.estimate, sample).zero
        excess = sample.weight @ (np.where(sample.counts == 0, 1 / np.maximum(zero, 1e-300), 0) - 1)
        if excess > NO_OVERDISPERSION * sample.weight.sum():
            return None
        note = (
            f"No zero inflation: there are no more rows without visits than the {self.base.label} "
            "expects, the share that never comes is at its lower bound, zero, and the model is "
            f"the {self.base.label}."
        )
        return replace(plain, model=self.name, notes=(*plain.notes, note))

    def start(self, rows: Rows) -> FloatArray:
        """Counts from the rows with visits alone, the share from the zeros that they leave over."""
        visited = rows.weighted(np.where(rows.counts > 0, rows.weight, 0.0))
        beta = climb(TruncatedPoisson(), visited).theta
        return np.concatenate([beta, _first_share(np.exp(-rows.mean(beta)), rows)])

    def local(self, indices: tuple[FloatArray, ...], log_alpha: float, rows: Rows) -> Local:
        """Mixture of never and a count."""
        size = 3 if self.extra_terms else 2
        places = (0, 2) if self.extra_terms else (0,)
        eta = indices[0]
        count = self.count(rows.counts, eta, log_alpha).at(places, size)
        zero = self.count(np.zeros_like(eta), eta, log_alpha).at(places, size)
        never = rows_local.identity(indices[1]).at((1,), size)
        none = never + rows_local.softplus(zero - never)
        return rows_local.where(rows.counts == 0, none, count) - rows_local.softplus(never)

    def count(self, counts: FloatArray, eta: FloatArray, log_alpha: float) -> Local:
        """Log probability of a count of those who may come."""
        del log_alpha
        return rows_local.poisson(counts, eta)

    def no_maximum(self, problem: str, top: Maximum, sample: Sample) -> str:
        """Separation in the part about zeros is what usually goes wrong."""
        size = len(sample.terms)
        if np.abs(top.theta[size : size + len(self.zero_columns(sample))]).max() > 15:
            return (
                "No verified maximum: the part about zeros runs to infinity: its regressors set "
                "rows apart that certainly come, or none is needed. Take terms out of "
                f"demand.zero_part or use {self.base.name}."
            )
        return f"No verified maximum: {problem}."

    def spread(self, estimate: FloatArray, sample: Sample) -> Spread:
        """Counts of those who may come, zero for the others."""
        alpha = float(estimate[-1]) if self.extra_terms else 0.0
        share = self.coming(estimate[None, :], sample, np.zeros((1, 1)))[0]
        return nb2_spread(log_mean(estimate, sample), alpha).with_share(share)

    def coming(self, theta: FloatArray, sample: Sample, fee: FloatArray) -> FloatArray:
        """Share that may come at an added fee, (vectors, rows)."""
        if theta.shape[1] == len(sample.terms) + len(self.extra_terms):
            return np.ones((len(theta), sample.nobs))
        never, price = self.zero_part(theta, sample)
        return np.asarray(expit(-(never + price[:, None] * fee)), dtype=float)

    def rates(self, theta: FloatArray, sample: Sample, fee: FloatArray) -> FloatArray:
        """Share that may come times exp(x'β)."""
        mean = np.exp(self.count_index(theta, sample, fee))
        return self.coming(theta, sample, fee) * mean

    def decay(self, theta: FloatArray, sample: Sample) -> FloatArray:
        """At high costs visits fall as the count does, unless ever fewer may come."""
        return np.maximum(-price_column(theta, sample), 1e-300)


class ZeroInflatedNegativeBinomial(ZeroInflatedPoisson):
    """NB2 counts of those who may come; others never do."""

    name = "zero_inflated_negative_binomial"
    label = "zero-inflated negative binomial"
    extra_terms = (ALPHA,)
    base: LikelihoodFamily = NegativeBinomial()

    def at_bound(self, sample: Sample, errors: str) -> FittedModel | None:
        """The NB2 where zeros are no more than it expects; α = 0 where counts are a ZIP's."""
        plain = super().at_bound(sample, errors)
        if plain is not None:
            return plain
        simple = ZeroInflatedPoisson().fit(sample, errors=errors)
        if not simple.converged:
            return None
        spread = ZeroInflatedPoisson().spread(simple.estimate, sample)
        mean = log_mean(simple.estimate, sample)
        comes = np.where(sample.counts > 0, 1.0, 1 - (spread.zero - np.exp(-mean)) / spread.zero)
        # For a row without visits, the probability that it might have had some.
        might = np.where(sample.counts > 0, 1.0, np.clip(comes * spread.mean / mean, 0, 1))
        excess = float(sample.weight @ (might * ((sample.counts - mean) ** 2 - sample.counts)))
        if excess > NO_OVERDISPERSION * float(sample.weight @ mean):
            return None
        label = "zero-inflated Poisson"
        return without_overdispersion(simple, self.name, label, "alpha", ALPHA)

    def start(self, rows: Rows) -> FloatArray:
        """The better of two: counts from the rows with visits alone, and the NB2's maximum."""
        one = np.append(super().start(rows), 0.0)
        plain = climb(NegativeBinomial(), rows).theta
        share = np.zeros(rows.zero.shape[1])
        share[0] = logit(0.1)
        two = np.concatenate([plain[:-1], share, plain[-1:]])
        values = [rows.weight @ self.log_likelihood(start, rows) for start in (one, two)]
        return two if values[1] > values[0] else one

    def count(self, counts: FloatArray, eta: FloatArray, log_alpha: float) -> Local:
        """Log probability of a count of those who may come."""
        return rows_local.negative_binomial(counts, eta, log_alpha)


def _first_share(zero: FloatArray, rows: Rows) -> FloatArray:
    """Constant of the logit of the share that never comes, other terms nothing."""
    empty = float(rows.weight @ (rows.counts == 0)) / float(rows.weight.sum())
    expected = float(rows.weight @ zero) / float(rows.weight.sum())
    found = np.zeros(rows.zero.shape[1])
    found[0] = logit(np.clip((empty - expected) / max(1 - expected, 1e-9), 0.02, 0.98))
    return found
