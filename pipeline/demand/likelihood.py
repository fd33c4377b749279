"""Fit of any family that has a log-likelihood: standardise, climb, verify, transform back.

A new family states its log-likelihood with gradient and Hessian (`LikelihoodFamily`); how it is
fitted, checked, and given errors is the same for all of them.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass, replace

import numpy as np
from scipy.special import gammaln

from pipeline.demand.covariance import covariance, leverages
from pipeline.demand.curves import SemiLogCurve
from pipeline.demand.design import (
    caution_notes,
    require_fittable,
    require_overlap,
    standardise,
)
from pipeline.demand.family import FittedModel, squared_correlation
from pipeline.demand.maximum import Maximum, maximise
from pipeline.demand.sample import FloatArray, Sample


@dataclass(frozen=True)
class Rows:
    """What a log-likelihood is computed from; regressors standardised.

    Attributes
    ----------
    counts, offset, weight : (n,) counts, log of exposure, weights that average one.
    design : (n, k).
    levels, place : distinct counts, and where each row's count stands among them: functions
        of the count alone are computed once per distinct count.
    """

    counts: FloatArray
    offset: FloatArray
    weight: FloatArray
    design: FloatArray
    levels: FloatArray
    place: np.ndarray[tuple[int], np.dtype[np.intp]]
    log_factorial: FloatArray

    @classmethod
    def of(cls, sample: Sample, design: FloatArray) -> Rows:
        """Rows of a sample on a standardised design."""
        levels, place = np.unique(sample.counts, return_inverse=True)
        return cls(
            counts=sample.counts,
            offset=np.log(sample.exposure),
            weight=sample.weight,
            design=design,
            levels=levels,
            place=place,
            log_factorial=gammaln(sample.counts + 1),
        )

    def mean(self, beta: FloatArray) -> FloatArray:
        """Expected count of each row: exp(x'β) times exposure."""
        return np.asarray(np.exp(self.design @ beta + self.offset), dtype=float)

    def first_guess(self) -> FloatArray:
        """Least squares of log((count + 1/2) / exposure): a start for exp(x'β)."""
        response = np.log(self.counts + 0.5) - self.offset
        root = np.sqrt(self.weight)
        solution = np.linalg.lstsq(self.design * root[:, None], response * root, rcond=None)
        return np.asarray(solution[0], dtype=float)


class LikelihoodFamily(SemiLogCurve, ABC):
    """A family fitted by maximum likelihood with mean exp(x'β); others override the curve."""

    name: str
    label: str
    student = False
    extra_terms: tuple[str, ...] = ()

    @abstractmethod
    def start(self, rows: Rows) -> FloatArray:
        """A point where the log-likelihood is finite; (k + extra terms,)."""

    @abstractmethod
    def log_likelihood(self, theta: FloatArray, rows: Rows) -> FloatArray:
        """Log-likelihood of each row, unweighted; (n,)."""

    @abstractmethod
    def scores(self, theta: FloatArray, rows: Rows) -> FloatArray:
        """Gradient of each row's log-likelihood, unweighted; (n, p)."""

    @abstractmethod
    def hessian(self, theta: FloatArray, rows: Rows) -> FloatArray:
        """Hessian of the weighted log-likelihood; (p, p)."""

    @abstractmethod
    def information(self, theta: FloatArray, rows: Rows) -> FloatArray:
        """Expected information of each row about x'β, unweighted; (n,). For leverages."""

    def natural(self, theta: FloatArray, size: int) -> tuple[FloatArray, FloatArray]:
        """Extra parameters as they are reported, and their derivatives; (extra,) each."""
        return theta[size:], np.ones(len(theta) - size)

    def fit(self, sample: Sample, *, errors: str) -> FittedModel:
        """Fit to a sample.

        Parameters
        ----------
        sample : rows of one site.
        errors : 'model', 'HC0', 'HC1', 'HC2' or 'HC3'.

        Raises
        ------
        DemandError
            Too few rows, no visits, collinear regressors, separation.
        """
        require_fittable(sample)
        require_overlap(sample)
        standard = standardise(sample.design)
        rows = Rows.of(sample, standard.matrix)
        top = climb(self, rows)
        if top.problem:
            return FittedModel.failed(self.name, sample, f"No verified maximum: {top.problem}.")
        size = len(sample.terms)
        extra, derivative = self.natural(top.theta, size)
        back = standard.full_back(len(extra))
        back[size:, size:] = np.diag(derivative)
        weights = rows.weight * self.information(top.theta, rows)
        spread = covariance(
            top.hessian,
            self.scores(top.theta, rows) * rows.weight[:, None],
            leverages(rows.design, weights),
            errors,
        )
        return self._described(
            sample,
            estimate=np.concatenate([standard.back @ top.theta[:size], extra]),
            spread=back @ spread @ back.T,
            value=top.value,
            errors=errors,
        )

    def _described(
        self,
        sample: Sample,
        *,
        estimate: FloatArray,
        spread: FloatArray,
        value: float,
        errors: str,
    ) -> FittedModel:
        predicted = self.predict(estimate, sample)[0] / sample.people
        model = FittedModel(
            model=self.name,
            site_id=sample.site_id,
            terms=(*sample.terms, *self.extra_terms),
            estimate=estimate,
            covariance=spread,
            nobs=sample.nobs,
            parameters=len(estimate),
            log_likelihood=value,
            r_squared=squared_correlation(sample.rate, predicted),
            errors=errors,
            notes=(*sample.notes, *caution_notes(sample)),
        )
        return replace(model, dispersion=self.dispersion(model, sample))

    @abstractmethod
    def dispersion(self, model: FittedModel, sample: Sample) -> float:
        """How much the counts vary beyond the model's mean."""


def climb(family: LikelihoodFamily, rows: Rows) -> Maximum:
    """The verified maximum of a family's weighted log-likelihood, from its own start."""

    def value_gradient_hessian(theta: FloatArray) -> tuple[float, FloatArray, FloatArray]:
        # A step too far overflows; the line search sees a value that is not finite.
        with np.errstate(all="ignore"):
            value = float(rows.weight @ family.log_likelihood(theta, rows))
            gradient = rows.weight @ family.scores(theta, rows)
            return value, gradient, family.hessian(theta, rows)

    return maximise(value_gradient_hessian, family.start(rows))
