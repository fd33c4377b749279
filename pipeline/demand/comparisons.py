"""Models held against each other: Vuong's test, and rows left out.

Vuong, Econometrica 57, 1989. Its statistic favours the model with more parameters; the corrected
ones take off the difference in parameters (AIC) or half of it times log n (BIC).
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from scipy import special

from pipeline.demand.bootstrap import refit_weighted
from pipeline.demand.design import Standardised
from pipeline.demand.family import FittedModel
from pipeline.demand.likelihood import LikelihoodFamily, Rows
from pipeline.demand.registry import FAMILIES
from pipeline.demand.sample import FloatArray, Sample
from pipeline.demand.zeros import ZeroInflatedPoisson

#: Simple model, the one that it is a case of, and whether it is so at the bound of a parameter.
NESTED: tuple[tuple[str, str, bool], ...] = (
    ("poisson", "negative_binomial", True),
    ("poisson", "negative_binomial_1", True),
    ("zero_inflated_poisson", "zero_inflated_negative_binomial", True),
    ("truncated_poisson", "truncated_negative_binomial", True),
    ("on_site_poisson", "on_site_negative_binomial", True),
)
_SMALL_ALPHA = 1e-7


def row_log_likelihood(model: FittedModel, sample: Sample) -> FloatArray | None:
    """Log-likelihood of each row that the model uses, weighted; None where it has none."""
    family = FAMILIES[model.model]
    if not isinstance(family, LikelihoodFamily) or not np.isfinite(model.log_likelihood):
        return None
    used = family.restrict(sample)
    if isinstance(family, ZeroInflatedPoisson) and not _has_never(model):
        family = family.base
    as_is = Standardised(used.design, np.eye(len(used.terms)))
    rows = Rows.of(used, used.design, family.zero_columns(used))
    estimate = model.estimate.copy()
    if family.extra_terms:
        estimate[-1] = max(estimate[-1], _SMALL_ALPHA)
    theta = family.to_standard(estimate, as_is, used)
    return family.log_likelihood(theta, rows) * used.weight


def _has_never(model: FittedModel) -> bool:
    return any(term.startswith("never:") for term in model.terms)


def vuong(one: FittedModel, other: FittedModel, sample: Sample) -> dict[str, tuple[float, float]]:
    """Statistic (positive: `one` is closer) and two-sided p-value, plain and corrected.

    Empty where the models are not of the same rows, or cannot be told apart.
    """
    first, second = row_log_likelihood(one, sample), row_log_likelihood(other, sample)
    if first is None or second is None or len(first) != len(second):
        return {}
    ahead = first - second
    spread = float(ahead.std()) * np.sqrt(len(ahead))
    if spread <= 1e-9 * max(1.0, float(np.abs(first).max())):
        return {}
    more = one.parameters - other.parameters
    fines = {"vuong": 0.0, "vuong_aic": more, "vuong_bic": more / 2 * np.log(len(ahead))}
    found = {}
    for kind, fine in fines.items():
        statistic = (float(ahead.sum()) - fine) / spread
        found[kind] = (statistic, float(2 * special.ndtr(-abs(statistic))))
    return found


def cross_validate(
    model: FittedModel, sample: Sample, *, folds: int, seed: int
) -> tuple[float, float, int] | None:
    """Mean Poisson deviance and minus mean log probability of rows left out, and their number.

    Rows are dealt out at random, clusters as a whole. None where a part has no verified fit.
    """
    family = FAMILIES[model.model]
    used = family.restrict(sample) if isinstance(family, LikelihoodFamily) else sample
    unit = np.arange(used.nobs)
    if used.clusters is not None:
        _, unit = np.unique(used.clusters, return_inverse=True)
    units = int(unit.max()) + 1
    dealt = np.random.default_rng([seed, folds]).permutation(units) % folds
    deviance, score = np.zeros(used.nobs), np.zeros(used.nobs)
    parts = [dealt[unit] == fold for fold in range(min(folds, units))]
    weights = [np.where(held, 0.0, used.weight) for held in parts]
    refits = refit_weighted(model, used, weights)
    for held, estimate in zip(parts, refits, strict=True):
        if not np.isfinite(estimate).all():
            return None
        tested = used.rows(held)
        deviance[held] = _deviance(tested.counts, predicted_counts(model, estimate, tested))
        scored = row_log_likelihood(replace(model, estimate=estimate), tested)
        score[held] = np.nan if scored is None else scored / tested.weight
    total = float(used.weight.sum())
    return (
        float(used.weight @ deviance) / total,
        -float(used.weight @ score) / total,
        used.nobs,
    )


def predicted_counts(model: FittedModel, estimate: FloatArray, sample: Sample) -> FloatArray:
    """Expected count of each row, as the sampling lets it through."""
    family = FAMILIES[model.model]
    if isinstance(family, LikelihoodFamily):
        return family.spread(estimate, sample).mean
    return family.predict(estimate, sample)[0] / sample.people * sample.exposure


def _deviance(counts: FloatArray, mean: FloatArray) -> FloatArray:
    """Twice what a Poisson of the mean lacks in log probability to one of the count."""
    floor = np.maximum(mean, 1e-10)
    return np.asarray(2 * (special.xlogy(counts, counts / floor) - counts + floor), dtype=float)
