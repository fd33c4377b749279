"""Bootstrap by pairs: rows, or whole clusters, drawn again and again with their regressors.

Efron and Tibshirani, An Introduction to the Bootstrap, 1993, chapter 9. A replicate weighs each
row by how often it was drawn and climbs from the estimates; it is verified like any other fit.
Replicates have a generator each, so that their number, order and the number of processes change
none of them.
"""

from __future__ import annotations

import zlib
from collections.abc import Iterable
from concurrent.futures import Executor
from dataclasses import dataclass, replace
from functools import partial

import numpy as np

from pipeline.demand.design import Standardised, standardise
from pipeline.demand.family import FittedModel
from pipeline.demand.likelihood import LikelihoodFamily, Rows, climb
from pipeline.demand.registry import FAMILIES
from pipeline.demand.sample import FloatArray, Sample
from pipeline.errors import DemandError

CHUNK = 50


@dataclass(frozen=True)
class Replicates:
    """Parameters of the replicates that have a verified fit, (replicates, p), and how many not."""

    theta: FloatArray
    failed: int


def replicates(
    model: FittedModel, sample: Sample, *, count: int, seed: int, executor: Executor | None = None
) -> Replicates:
    """Refit a model to drawn rows.

    Parameters
    ----------
    model, sample : a converged fit, and what it was fitted to.
    count : number of replicates.
    executor : spreads them over processes or machines; default: one after the other.
    """
    family = FAMILIES[model.model]
    used = family.restrict(sample) if isinstance(family, LikelihoodFamily) else sample
    stream = zlib.crc32(f"bootstrap|{model.model}|{model.site_id}".encode())
    work = partial(_chunk, replace(model, notes=()), used, (seed, stream))
    starts = range(0, count, CHUNK)
    tasks = [range(start, min(start + CHUNK, count)) for start in starts]
    found = list(map(work, tasks) if executor is None else executor.map(work, tasks))
    theta = np.concatenate(found) if found else np.empty((0, len(model.terms)))
    good = np.isfinite(theta).all(axis=1)
    return Replicates(theta[good], int((~good).sum()))


def draw_weights(sample: Sample, random: np.random.Generator) -> FloatArray:
    """How often each row was drawn, times its own weight."""
    unit = np.arange(sample.nobs)
    if sample.clusters is not None:
        _, unit = np.unique(sample.clusters, return_inverse=True)
    units = int(unit.max()) + 1
    times = np.bincount(random.integers(0, units, units), minlength=units)
    return np.asarray(times[unit] * sample.weight, dtype=float)


def _chunk(model: FittedModel, sample: Sample, seed: tuple[int, int], numbers: range) -> FloatArray:
    drawn = (draw_weights(sample, np.random.default_rng([*seed, number])) for number in numbers)
    return refit_weighted(model, sample, drawn)


def refit_weighted(model: FittedModel, sample: Sample, weights: Iterable[FloatArray]) -> FloatArray:
    """Estimates of the model on the rows with other weights; NaN where there is no verified fit.

    Parameters
    ----------
    sample : the rows that the model uses, all with visits where it needs them.
    weights : (n,) each; rows of weight zero are left out.

    Returns
    -------
    (weights, p), in the order of the model's terms.
    """
    family = FAMILIES[model.model]
    prepared = None
    if isinstance(family, LikelihoodFamily) and _has_interior(model, family, sample):
        prepared = _Prepared.of(family, model, sample)
    found = []
    for weight in weights:
        warm = prepared.refit(weight) if prepared is not None else None
        found.append(_cold(model, sample, weight) if warm is None else warm)
    return np.array(found).reshape(-1, len(model.terms))


def _has_interior(model: FittedModel, family: LikelihoodFamily, sample: Sample) -> bool:
    """Whether every parameter of the family was free, so that a climb can start there."""
    whole = len(sample.terms) + len(family.further_terms(sample))
    return len(model.estimate) == whole and bool(np.isfinite(np.diag(model.covariance)).all())


@dataclass(frozen=True)
class _Prepared:
    """A sample standardised once, for climbs that differ in their weights only."""

    family: LikelihoodFamily
    sample: Sample
    standard: Standardised
    rows: Rows
    start: FloatArray

    @classmethod
    def of(cls, family: LikelihoodFamily, model: FittedModel, sample: Sample) -> _Prepared:
        standard = standardise(sample.design)
        rows = Rows.of(sample, standard.matrix, family.zero_columns(sample))
        start = family.to_standard(model.estimate, standard, sample)
        return cls(family, sample, standard, rows, start)

    def refit(self, weight: FloatArray) -> FloatArray | None:
        rows = self.rows.weighted(weight)
        top = climb(self.family, rows, self.start)
        if top.problem or self.family.runs_off(top.theta, rows):
            return None
        return self.family.to_table(top.theta, self.standard, self.sample)[0]


def _cold(model: FittedModel, sample: Sample, weight: FloatArray) -> FloatArray:
    """A fit from scratch, with bounds and checks; NaN where there is none."""
    nothing = np.full(len(model.terms), np.nan)
    drawn = replace(sample.rows(weight > 0), weight=weight[weight > 0])
    try:
        found = FAMILIES[model.model].fit(drawn, errors="model")
    except DemandError:
        return nothing
    if not found.converged or found.terms != model.terms:
        return nothing
    return found.estimate


def bootstrap_covariance(
    model: FittedModel, sample: Sample, *, count: int, seed: int, executor: Executor | None = None
) -> FittedModel:
    """The model with the covariance of its replicates."""
    drawn = replicates(model, sample, count=count, seed=seed, executor=executor)
    free = np.isfinite(np.diag(model.covariance))
    spread = np.full_like(model.covariance, np.nan)
    spread[np.ix_(free, free)] = np.cov(drawn.theta[:, free], rowvar=False)
    note = f"Errors from {len(drawn.theta):,} bootstrap replicates"
    note += f"; {drawn.failed:,} more had no verified fit." if drawn.failed else "."
    return replace(model, covariance=spread, errors="bootstrap", notes=(*model.notes, note))
