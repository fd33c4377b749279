"""Exact welfare: compensating and equivalent variation of losing a site.

Marshallian surplus is exact only where income has no effect. With income among the regressors the
demand integrates to an expenditure function in closed form (Hausman, American Economic Review 71,
1981; for the loss of a site Bockstael, Hanemann and Strand, Measuring the Benefits of Water
Quality Improvements Using Recreation Demand Models, 1986). Price coefficient α < 0, income
coefficient δ, q trips of a person at today's costs, x = δq/α:

===========  ==================================  ==================================
demand       compensating variation              equivalent variation
===========  ==================================  ==================================
semi-log     −log(1 + x) / δ                     log(1 − x) / δ
linear       (α/δ²) (log(1 + x) − x)             −(α/δ²) (exp(x) − 1 − x)
===========  ==================================  ==================================

Compensating: what visitors would have to be paid to be as well off without the site; infinite
where 1 + x ≤ 0. Equivalent: what they would give up to keep it. For a normal good (δ > 0) the
surplus lies between them. The income is that of the household, as in the regression.

Of a zero-inflated model the formulas hold for those who may come, where neither the cost nor the
income moves who may. The expected visits of a hurdle are no power of e: they integrate to no
expenditure function in closed form, and no exact figure is given.
"""

from __future__ import annotations

import numpy as np

from pipeline.demand.curves import LinearCurve, SemiLogCurve, index, price_column, row_blocks
from pipeline.demand.family import Family
from pipeline.demand.mixed_curve import MixedCurve
from pipeline.demand.sample import PRICE, FloatArray, Sample
from pipeline.demand.zeros import ZeroInflatedPoisson

#: Below this the differences are taken by their series.
_SMALL = 1e-3


def log1p_less(x: FloatArray) -> FloatArray:
    """log(1 + x) − x without cancellation; minus infinity where 1 + x ≤ 0."""
    series = -(x**2) * (1 / 2 - x * (1 / 3 - x * (1 / 4 - x * (1 / 5 - x / 6))))
    inside = np.where(x > -1, x, 0.0)
    plain = np.where(x > -1, np.log1p(inside) - inside, -np.inf)
    return np.where(np.abs(x) < _SMALL, series, plain)


def expm1_less(x: FloatArray) -> FloatArray:
    """exp(x) − 1 − x without cancellation."""
    series = x**2 * (1 / 2 + x * (1 / 6 + x * (1 / 24 + x * (1 / 120 + x / 720))))
    return np.where(np.abs(x) < _SMALL, series, np.expm1(x) - x)


def compensating(
    trips: FloatArray, price: FloatArray, income: FloatArray, *, linear: bool
) -> FloatArray:
    """Compensating variation of losing the site, per person; arrays broadcast; price < 0."""
    effect = np.where(income == 0, 1.0, income)
    x = income * trips / price
    if linear:
        found = price / effect**2 * log1p_less(x)
        return np.where(income == 0, -(trips**2) / (2 * price), found)
    inside = np.where(x > -1, x, 0.0)
    found = np.where(x > -1, -np.log1p(inside) / effect, np.inf)
    return np.where(income == 0, -trips / price, found)


def equivalent(
    trips: FloatArray, price: FloatArray, income: FloatArray, *, linear: bool
) -> FloatArray:
    """Equivalent variation of losing the site, per person; arrays broadcast; price < 0."""
    effect = np.where(income == 0, 1.0, income)
    x = income * trips / price
    if linear:
        return np.where(income == 0, -(trips**2) / (2 * price), -price / effect**2 * expm1_less(x))
    inside = np.where(x < 1, -x, 0.0)
    return np.where(income == 0, -trips / price, np.log1p(inside) / effect)


def has_closed_form(family: Family, sample: Sample, income: str) -> bool:
    """Whether the demand integrates to an expenditure function in closed form."""
    if not isinstance(family, MixedCurve):
        return True
    moved_by = {sample.terms[j] for j in family.zero_columns(sample)}
    return isinstance(family, ZeroInflatedPoisson) and not moved_by & {PRICE, income}


def exact_totals(
    family: Family, sample: Sample, theta: FloatArray, *, income: str, unit: float
) -> tuple[FloatArray, FloatArray]:
    """Compensating and equivalent variation of all people a year, per parameter vector.

    Parameters
    ----------
    income : term that is income.
    unit : money that one unit of it stands for.
    """
    both = [_block(family, sample, block, income, unit) for block in row_blocks(theta, sample)]
    paid, given = (np.concatenate(parts) for parts in zip(*both, strict=True))
    falls = family.falls(theta, sample)
    return np.where(falls, paid, np.inf), np.where(falls, given, np.inf)


def _block(
    family: Family, sample: Sample, theta: FloatArray, income: str, unit: float
) -> tuple[FloatArray, FloatArray]:
    linear = isinstance(family, LinearCurve)
    per = sample.per if linear else 1.0
    price = price_column(theta, sample)[:, None] / per
    effect = theta[:, [sample.terms.index(income)]] / (per * unit)
    base = index(theta, sample)
    if isinstance(family, SemiLogCurve):
        trips = family.level(theta, sample)[:, None] * np.exp(base)
    else:
        trips = np.maximum(base, 0) / per
    bounded = np.where(price < 0, price, -1.0)
    may_come = np.ones_like(base)
    if isinstance(family, ZeroInflatedPoisson):
        may_come = family.coming(theta, sample, np.zeros((1, 1)))
    return (
        (may_come * compensating(trips, bounded, effect, linear=linear)) @ sample.people,
        (may_come * equivalent(trips, bounded, effect, linear=linear)) @ sample.people,
    )
