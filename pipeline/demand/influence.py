"""Which zones move the price coefficient most: each left out in turn.

The change is first worked out by one Newton step for every zone (Pregibon, Annals of Statistics 9,
1981), then by a refit for the few that move it most.
"""

from __future__ import annotations

import numpy as np

from pipeline.demand.bootstrap import refit_weighted
from pipeline.demand.design import Standardised, standardise
from pipeline.demand.family import FittedModel
from pipeline.demand.likelihood import LikelihoodFamily, Rows
from pipeline.demand.registry import FAMILIES
from pipeline.demand.sample import PRICE, FloatArray, Sample

SHOWN = 5


def influential_zones(model: FittedModel, sample: Sample) -> list[tuple[str, float]]:
    """Zones that move the price coefficient most, and the coefficient without each.

    Records without a zone are left alone: what is shown is of zones, never of persons.
    """
    family = FAMILIES[model.model]
    used = family.restrict(sample) if isinstance(family, LikelihoodFamily) else sample
    zones = np.array(used.zone_ids)
    names, place = np.unique(zones, return_inverse=True)
    shift = np.bincount(place, price_shifts(model, used), minlength=len(names))
    shift[names == ""] = 0.0
    order = np.argsort(-np.abs(shift), kind="stable")[:SHOWN]
    most = [str(names[i]) for i in order if shift[i] != 0]
    weights = [np.where(zones == name, 0.0, used.weight) for name in most]
    without = refit_weighted(model, used, weights)[:, model.terms.index(PRICE)]
    return [(n, float(b)) for n, b in zip(most, without, strict=True) if np.isfinite(b)]


def price_shifts(model: FittedModel, sample: Sample) -> FloatArray:
    """One-step change of the price coefficient when a row is left out, (n,)."""
    family = FAMILIES[model.model]
    place = sample.terms.index(PRICE)
    standard = standardise(sample.design)
    if isinstance(family, LikelihoodFamily) and len(model.estimate) >= len(sample.terms):
        scores, bread = _likelihood_parts(family, model, sample, standard)
    else:
        fitted = sample.design @ model.estimate[: len(sample.terms)]
        with np.errstate(divide="ignore"):
            response = np.log(sample.rate) if "log" in model.model else sample.rate * sample.per
        residual = np.where(np.isfinite(response), response - fitted, 0.0) * sample.weight
        scores = standard.matrix * residual[:, None]
        bread = np.asarray(
            np.linalg.inv((standard.matrix.T * sample.weight) @ standard.matrix), dtype=float
        )
    shift = -(scores @ bread)
    return np.asarray(shift[:, : len(sample.terms)] @ standard.back[place], dtype=float)


def _likelihood_parts(
    family: LikelihoodFamily, model: FittedModel, sample: Sample, standard: Standardised
) -> tuple[FloatArray, FloatArray]:
    estimate = model.estimate.copy()
    whole = len(sample.terms) + len(family.further_terms(sample))
    if len(estimate) < whole:
        none = np.full(len(family.zero_columns(sample)), 0.0)
        none[0] = -20.0
        estimate = np.insert(estimate, len(sample.terms), none)
    if family.extra_terms:
        estimate[-1] = max(estimate[-1], 1e-6)
    rows = Rows.of(sample, standard.matrix, family.zero_columns(sample))
    theta = family.to_standard(estimate, standard, sample)
    scores = family.scores(theta, rows) * rows.weight[:, None]
    size = len(sample.terms)
    # The regressors' own block: the rest is held where it is.
    bread = np.linalg.inv(-family.hessian(theta, rows)[:size, :size])
    return scores[:, :size], np.asarray(bread, dtype=float)
