"""Counts of visitors only: the zero-truncated Poisson and NB2.

Records of people who came at least once, or zones with at least one visit. The demand is that of
everybody, exp(x'β), and the surplus of a trip −1/b (Creel and Loomis, American Journal of
Agricultural Economics 72, 1990); what is fitted is the count given that it is not zero.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from pipeline.demand import local as rows_local
from pipeline.demand.counts import NO_OVERDISPERSION, log_mean, without_overdispersion
from pipeline.demand.family import ALPHA, FittedModel
from pipeline.demand.indexed import IndexedFamily, with_dispersion
from pipeline.demand.likelihood import Rows, climb
from pipeline.demand.local import Local
from pipeline.demand.maximum import Maximum
from pipeline.demand.sample import FloatArray, Sample
from pipeline.demand.spread import Spread, nb2_spread, poisson_spread
from pipeline.errors import DemandError


def visited_rows(sample: Sample, name: str) -> Sample:
    """The rows with at least one visit, and a note of how many had none."""
    kept = sample.counts > 0
    if kept.all():
        return sample
    if not kept.any():
        raise DemandError(
            f"site {sample.site_id!r}: no row has a visit; {name} is fitted to rows with visits. "
            "Check site_id in the visit records and the market's extent."
        )
    empty = int((~kept).sum())
    note = f"{empty:,} of {sample.nobs:,} rows have no visit and are left out: {name} needs none."
    return replace(sample.rows(kept), notes=(*sample.notes, note))


class TruncatedPoisson(IndexedFamily):
    """Poisson counts given that they are not zero."""

    name = "truncated_poisson"
    label = "zero-truncated Poisson"

    def restrict(self, sample: Sample) -> Sample:
        """Rows with visits."""
        return visited_rows(sample, self.name)

    def start(self, rows: Rows) -> FloatArray:
        """Least squares of the log count."""
        return rows.first_guess()

    def local(self, indices: tuple[FloatArray, ...], log_alpha: float, rows: Rows) -> Local:
        """Log probability less that of any visit."""
        del log_alpha
        zero = rows_local.poisson(np.zeros_like(rows.counts), indices[0])
        return rows_local.poisson(rows.counts, indices[0]) - rows_local.log_one_minus_exp(zero)

    def spread(self, estimate: FloatArray, sample: Sample) -> Spread:
        """Truncated Poisson."""
        return poisson_spread(log_mean(estimate, sample)).truncated()


class TruncatedNegativeBinomial(IndexedFamily):
    """NB2 counts given that they are not zero."""

    name = "truncated_negative_binomial"
    label = "zero-truncated negative binomial"
    extra_terms = (ALPHA,)

    def restrict(self, sample: Sample) -> Sample:
        """Rows with visits."""
        return visited_rows(sample, self.name)

    def at_bound(self, sample: Sample, errors: str) -> FittedModel | None:
        """A truncated Poisson where the likelihood does not rise with α at zero."""
        simple = TruncatedPoisson().fit(sample, errors=errors)
        if not simple.converged:
            return None
        mean = log_mean(simple.estimate, sample)
        if truncated_excess(sample.counts, mean, sample.weight) > NO_OVERDISPERSION * float(
            sample.weight @ mean
        ):
            return None
        label = "truncated Poisson"
        return without_overdispersion(simple, self.name, label, "alpha", ALPHA)

    def start(self, rows: Rows) -> FloatArray:
        """The truncated Poisson's maximum, and the α of the overdispersion seen there."""
        top = climb(TruncatedPoisson(), rows)
        mean = rows.mean(top.theta)
        excess = truncated_excess(rows.counts, mean, rows.weight)
        alpha = max(excess, 0.0) / float(rows.weight @ mean**2)
        return with_dispersion(self, top.theta, top.value, alpha, rows)

    def local(self, indices: tuple[FloatArray, ...], log_alpha: float, rows: Rows) -> Local:
        """Log probability less that of any visit."""
        eta = indices[0]
        zero = rows_local.negative_binomial(np.zeros_like(rows.counts), eta, log_alpha)
        return rows_local.negative_binomial(
            rows.counts, eta, log_alpha
        ) - rows_local.log_one_minus_exp(zero)

    def no_maximum(self, problem: str, top: Maximum, sample: Sample) -> str:
        """Name the limit that the likelihood rises to."""
        del sample
        if top.theta[-1] > np.log(50):
            return (
                "No interior maximum: alpha grows without end, and the truncated negative "
                "binomial becomes a logarithmic series, whose constant is not determined. Most "
                "rows have a single visit; a truncated_poisson, or records with non-visitors, "
                "can be used."
            )
        return f"No verified maximum: {problem}."

    def spread(self, estimate: FloatArray, sample: Sample) -> Spread:
        """Truncated NB2."""
        return nb2_spread(log_mean(estimate, sample), float(estimate[-1])).truncated()


def truncated_excess(counts: FloatArray, mean: FloatArray, weight: FloatArray) -> float:
    """Twice the slope of a truncated NB2's log-likelihood in α at α = 0."""
    with np.errstate(over="ignore"):
        odds = 1 / np.expm1(mean)
    return float(weight @ ((counts - mean) ** 2 - counts + odds * mean**2))
