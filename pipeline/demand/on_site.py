"""Visitors met on the site: who comes often is met often.

A visitor with y trips a year is met with a chance in proportion to y, so the count met has
probability y f(y) / μ. For a Poisson that is a Poisson of y − 1 (Shaw, Journal of Econometrics 37,
1988). For an NB2 (Englin and Shonkwiler, Review of Economics and Statistics 77, 1995) it is an NB2
of y − 1 with mean μ* = μ(1 + α) and dispersion α* = α / (1 + α) < 1. Where the counts less one are
more dispersed than that, no α is large enough: the likelihood rises towards the geometric model of
y − 1 (α* = 1) and has no interior maximum. The demand is that of everybody: exp(x'β).
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from pipeline.demand import local as rows_local
from pipeline.demand.counts import (
    NegativeBinomial,
    Poisson,
    log_mean,
    without_overdispersion,
)
from pipeline.demand.design import standardise
from pipeline.demand.family import ALPHA, FittedModel
from pipeline.demand.indexed import IndexedFamily
from pipeline.demand.likelihood import Rows, climb
from pipeline.demand.local import Local
from pipeline.demand.maximum import Maximum
from pipeline.demand.sample import PRICE, FloatArray, Sample
from pipeline.demand.spread import Spread, nb2_spread, poisson_spread
from pipeline.demand.truncated import visited_rows
from pipeline.errors import DemandError


def met_rows(sample: Sample, name: str) -> Sample:
    """Records with at least one trip; zones are no visitors."""
    if sample.zonal:
        raise DemandError(
            f"{name} is for records of visitors met on the site (market.trip_table), not for "
            "zones; use poisson, negative_binomial or a truncated model for zones."
        )
    return visited_rows(sample, name)


class OnSitePoisson(IndexedFamily):
    """Poisson trips of visitors met on the site: a Poisson of y − 1."""

    name = "on_site_poisson"
    label = "Poisson of visitors met on the site"

    def restrict(self, sample: Sample) -> Sample:
        """Records with trips."""
        return met_rows(sample, self.name)

    def start(self, rows: Rows) -> FloatArray:
        """Least squares of the log of the count less one."""
        return one_less(rows).first_guess()

    def local(self, indices: tuple[FloatArray, ...], log_alpha: float, rows: Rows) -> Local:
        """Log probability of y − 1."""
        del log_alpha
        return rows_local.poisson(rows.counts - 1, indices[0])

    def spread(self, estimate: FloatArray, sample: Sample) -> Spread:
        """One more than a Poisson."""
        return poisson_spread(log_mean(estimate, sample)).plus_one()


class OnSiteNegativeBinomial(IndexedFamily):
    """NB2 trips of visitors met on the site."""

    name = "on_site_negative_binomial"
    label = "negative binomial of visitors met on the site"
    extra_terms = (ALPHA,)

    def restrict(self, sample: Sample) -> Sample:
        """Records with trips."""
        return met_rows(sample, self.name)

    def at_bound(self, sample: Sample, errors: str) -> FittedModel | None:
        """α = 0 where y − 1 is not overdispersed; no maximum where α* is not below one."""
        less = replace(sample, counts=sample.counts - 1)
        starred = NegativeBinomial().fit(less, errors="model")
        if not starred.converged:
            return FittedModel.failed(self.name, sample, starred.problem)
        alpha = float(starred.estimate[-1])
        if alpha == 0:
            simple = OnSitePoisson().fit(sample, errors=errors)
            label = "Poisson of y − 1"
            return without_overdispersion(simple, self.name, label, "alpha", ALPHA)
        if alpha >= 1:
            return FittedModel.failed(self.name, sample, _no_interior(alpha, less))
        return None

    def start(self, rows: Rows) -> FloatArray:
        """The NB2 of y − 1, turned into α and μ."""
        starred = climb(NegativeBinomial(), one_less(rows)).theta
        alpha = min(float(np.exp(starred[-1])), 0.999)
        start = starred.copy()
        start[0] += np.log1p(-alpha)
        start[-1] = np.log(alpha / (1 - alpha))
        return start

    def local(self, indices: tuple[FloatArray, ...], log_alpha: float, rows: Rows) -> Local:
        """That of the plain count, plus log y − η."""
        count = rows_local.negative_binomial(rows.counts, indices[0], log_alpha)
        biased = count - rows_local.identity(indices[0]).at((0,), 2)
        return Local(biased.value + np.log(rows.counts), biased.first, biased.second)

    def no_maximum(self, problem: str, top: Maximum, sample: Sample) -> str:
        """Close to the limit α* = 1 the likelihood is too flat to verify."""
        if top.theta[-1] > np.log(50):
            starred = 1 / (1 + np.exp(-top.theta[-1]))
            return _no_interior(float(starred), replace(sample, counts=sample.counts - 1))
        return f"No verified maximum: {problem}."

    def spread(self, estimate: FloatArray, sample: Sample) -> Spread:
        """One more than an NB2 with μ(1 + α) and α / (1 + α)."""
        alpha = float(estimate[-1])
        mean = log_mean(estimate, sample)
        return nb2_spread(mean * (1 + alpha), alpha / (1 + alpha)).plus_one()


def one_less(rows: Rows) -> Rows:
    """The rows with one trip less: what is left of a visitor after the trip that met the survey."""
    levels = rows.levels - 1
    return replace(
        rows,
        counts=rows.counts - 1,
        levels=np.maximum(levels, 0),
        log_factorial=rows.log_factorial - np.log(rows.counts),
    )


class _Geometric(NegativeBinomial):
    """NB2 with α held at one: the limit of an on-site NB2."""

    extra_terms = ()

    def start(self, rows: Rows) -> FloatArray:
        return climb(Poisson(), rows).theta

    def evaluate(self, theta: FloatArray, rows: Rows) -> tuple[float, FloatArray, FloatArray]:
        whole = np.append(theta, 0.0)
        value, gradient, hessian = super().evaluate(whole, rows)
        return value, gradient[:-1], hessian[:-1, :-1]


def geometric_limit(less: Sample) -> tuple[float, float]:
    """Log-likelihood and price coefficient of the geometric model of y − 1."""
    standard = standardise(less.design)
    top = climb(_Geometric(), Rows.of(less, standard.matrix))
    coefficients = standard.back @ top.theta
    return top.value, float(coefficients[less.terms.index(PRICE)])


def _no_interior(alpha: float, less: Sample) -> str:
    value, price = geometric_limit(less)
    worth = f", −1/b = {-1 / price:.4g}" if price < 0 else ""
    return (
        f"No interior maximum: the counts less one are an NB2 with alpha* = {alpha:.3g}, and an "
        "on-site NB2 needs alpha* = alpha / (1 + alpha) below one. Its likelihood rises as alpha "
        "grows without end, towards the geometric model of y − 1 (log-likelihood "
        f"{value:.2f}, coefficient of travel_cost {price:.4g}{worth}). Either the records are no "
        "on-site sample, or the trips vary more than this model allows."
    )
