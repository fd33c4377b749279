"""The hurdle: a logit for any trip, and a zero-truncated count of trips given that there is one.

Mullahy, Journal of Econometrics 33, 1986. The two parts share no parameter, so each is fitted
alone and the whole is verified together.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from scipy.special import expit, logit

from pipeline.demand import local as rows_local
from pipeline.demand.counts import log_mean, without_overdispersion
from pipeline.demand.curves import price_column
from pipeline.demand.design import logit_separated_terms
from pipeline.demand.family import ALPHA, FittedModel
from pipeline.demand.indexed import IndexedFamily
from pipeline.demand.likelihood import Rows, climb
from pipeline.demand.local import Local
from pipeline.demand.maximum import Maximum, maximise
from pipeline.demand.mixed_curve import MixedCurve
from pipeline.demand.sample import BoolArray, FloatArray, Sample
from pipeline.demand.spread import Spread, nb2_spread
from pipeline.demand.truncated import TruncatedNegativeBinomial, TruncatedPoisson
from pipeline.errors import DemandError


class HurdlePoisson(MixedCurve, IndexedFamily):
    """Logit for any trip, zero-truncated Poisson for how many: the hurdle with α = 0."""

    name = "hurdle_poisson"
    label = "hurdle with a Poisson"
    has_zero_part = True
    positive: IndexedFamily = TruncatedPoisson()

    def restrict(self, sample: Sample) -> Sample:
        """Records with and without trips; zones have no single decision to come."""
        if sample.zonal:
            raise DemandError(
                f"{self.name} is for records of persons (market.trip_table): a zone has no "
                "decision of its own to come or not; use a zero-inflated model for zones."
            )
        if (sample.counts > 0).all():
            raise DemandError(
                f"site {sample.site_id!r}: every record has a trip, so there is no hurdle to fit; "
                "use truncated_negative_binomial, or an on-site model for visitors met there."
            )
        columns = self.zero_columns(sample)
        terms = tuple(sample.terms[j] for j in columns)
        separated = logit_separated_terms(sample.design[:, list(columns)], sample.counts > 0, terms)
        if separated:
            raise DemandError(
                f"site {sample.site_id!r}: separation in the hurdle: "
                f"{', '.join(map(repr, separated))} tells rows with and without trips apart "
                "without error; take it out of demand.zero_part."
            )
        return sample

    def zero_columns(self, sample: Sample) -> tuple[int, ...]:
        """All regressors, unless the study says which."""
        terms = sample.zero_terms or sample.terms
        return tuple(sample.terms.index(term) for term in terms)

    def further_terms(self, sample: Sample) -> tuple[str, ...]:
        """`any:` terms, and the dispersion."""
        some = (f"any:{sample.terms[j]}" for j in self.zero_columns(sample))
        return (*some, *self.extra_terms)

    def start(self, rows: Rows) -> FloatArray:
        """Each part at its own maximum."""
        visited = rows.weighted(np.where(rows.counts > 0, rows.weight, 0.0))
        count = climb(self.positive, visited).theta
        size = rows.design.shape[1]
        return np.concatenate([count[:size], _logit(rows), count[size:]])

    def local(self, indices: tuple[FloatArray, ...], log_alpha: float, rows: Rows) -> Local:
        """Logit of any trip, and the truncated count where there is one."""
        size = 3 if self.extra_terms else 2
        places = (0, 2) if self.extra_terms else (0,)
        some = rows_local.identity(indices[1]).at((1,), size)
        # A row without trips says nothing about how many; any count will do in its place.
        counts = np.maximum(rows.counts, 1)
        stand_in = replace(rows, counts=counts)
        count = self.positive.local(indices[:1], log_alpha, stand_in).at(places, size)
        nothing = count - count
        return rows_local.where(rows.counts > 0, some + count, nothing) - rows_local.softplus(some)

    def no_maximum(self, problem: str, top: Maximum, sample: Sample) -> str:
        """The count part's trouble is that of the truncated model."""
        return self.positive.no_maximum(problem, top, sample)

    def spread(self, estimate: FloatArray, sample: Sample) -> Spread:
        """Truncated count with the share that comes at all."""
        alpha = float(estimate[-1]) if self.extra_terms else 0.0
        some, _ = self.zero_part(estimate[None, :], sample)
        truncated = nb2_spread(log_mean(estimate, sample), alpha).truncated()
        return truncated.with_share(expit(some[0]))

    def rates(self, theta: FloatArray, sample: Sample, fee: FloatArray) -> FloatArray:
        """Chance of any trip times the trips given that there is one."""
        some, price = self.zero_part(theta, sample)
        mean = np.exp(self.count_index(theta, sample, fee))
        alpha = theta[:, -1:] if self.extra_terms else np.zeros((len(theta), 1))
        curved = np.where(alpha > 0, alpha, 1.0)
        log_zero = np.where(alpha > 0, -np.log1p(curved * mean) / curved, -mean)
        visit = -np.expm1(log_zero)
        # Trips given any: one where the mean vanishes.
        trips = np.where(mean > 1e-12, mean / np.maximum(visit, 1e-300), 1.0)
        return np.asarray(expit(some + price[:, None] * fee) * trips, dtype=float)

    def is_minus_one_over_b(self, sample: Sample) -> bool:
        """Never: the chance of any trip has a curve of its own."""
        del sample
        return False

    def falls(self, theta: FloatArray, sample: Sample) -> BoolArray:
        """Both parts must fall: beyond any cost a hurdle leaves one trip to whoever comes."""
        _, price = self.zero_part(theta, sample)
        return (price_column(theta, sample) < 0) & (price < 0)

    def decay(self, theta: FloatArray, sample: Sample) -> FloatArray:
        """At high costs visits fall as the chance of any trip does."""
        return np.maximum(-self.zero_part(theta, sample)[1], 1e-300)


class Hurdle(HurdlePoisson):
    """Logit for any trip, zero-truncated NB2 for how many."""

    name = "hurdle"
    label = "hurdle: logit and zero-truncated negative binomial"
    extra_terms = (ALPHA,)
    positive: IndexedFamily = TruncatedNegativeBinomial()

    def at_bound(self, sample: Sample, errors: str) -> FittedModel | None:
        """α = 0 where the trips of those who come vary no more than a truncated Poisson's."""
        visited = sample.rows(sample.counts > 0)
        simple = self.positive.at_bound(visited, "model")
        if simple is None:
            return None
        poisson = HurdlePoisson().fit(sample, errors=errors)
        label = "hurdle with a truncated Poisson"
        return without_overdispersion(poisson, self.name, label, "alpha", ALPHA)


def _logit(rows: Rows) -> FloatArray:
    """Maximum of the logit of any trip, on standardised regressors."""
    some = (rows.counts > 0).astype(float)

    def likelihood(gamma: FloatArray) -> tuple[float, FloatArray, FloatArray]:
        zeta = rows.zero @ gamma
        share = expit(zeta)
        value = float(rows.weight @ (some * zeta - np.logaddexp(0, zeta)))
        curvature = rows.weight * share * (1 - share)
        gradient = rows.zero.T @ (rows.weight * (some - share))
        return value, gradient, -(rows.zero.T * curvature) @ rows.zero

    start = np.zeros(rows.zero.shape[1])
    start[0] = logit(np.clip(some.mean(), 1e-3, 1 - 1e-3))
    return maximise(likelihood, start).theta
