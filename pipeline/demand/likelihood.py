"""Fit of any family that has a log-likelihood: standardise, climb, verify, transform back.

A new family states its log-likelihood with gradient and Hessian (`LikelihoodFamily`); how it is
fitted, checked, and given errors is the same for all of them.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass, replace

import numpy as np
from scipy.linalg import block_diag
from scipy.special import gammaln

from pipeline.demand.covariance import covariance, leverages
from pipeline.demand.curves import SemiLogCurve
from pipeline.demand.design import (
    Standardised,
    caution_notes,
    require_fittable,
    require_overlap,
    standardise,
)
from pipeline.demand.family import FittedModel, squared_correlation
from pipeline.demand.maximum import Maximum, maximise
from pipeline.demand.sample import FloatArray, IntArray, Sample
from pipeline.demand.spread import Spread

FEW_CLUSTERS = 40


@dataclass(frozen=True)
class Rows:
    """What a log-likelihood is computed from; regressors standardised.

    Attributes
    ----------
    counts, offset, weight : (n,) counts, log of exposure, weights that average one.
    design : (n, k).
    zero : (n, m) regressors of the part about zeros, where the family has one.
    levels, place : distinct counts, and where each row's count stands among them: functions
        of the count alone are computed once per distinct count.
    """

    counts: FloatArray
    offset: FloatArray
    weight: FloatArray
    design: FloatArray
    levels: FloatArray
    place: IntArray
    log_factorial: FloatArray
    zero: FloatArray

    @classmethod
    def of(cls, sample: Sample, design: FloatArray, zero: tuple[int, ...] = ()) -> Rows:
        """Rows of a sample on a standardised design; `zero`: columns of the part about zeros."""
        levels, place = np.unique(sample.counts, return_inverse=True)
        return cls(
            counts=sample.counts,
            offset=np.log(sample.exposure),
            weight=sample.weight,
            design=design,
            levels=levels,
            place=place,
            log_factorial=gammaln(sample.counts + 1),
            zero=design[:, list(zero)],
        )

    def weighted(self, weight: FloatArray) -> Rows:
        """The same rows with other weights; rows of weight zero are gone."""
        kept = weight > 0
        return Rows(
            counts=self.counts[kept],
            offset=self.offset[kept],
            weight=weight[kept],
            design=self.design[kept],
            levels=self.levels,
            place=self.place[kept],
            log_factorial=self.log_factorial[kept],
            zero=self.zero[kept],
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

    def restrict(self, sample: Sample) -> Sample:
        """The rows that the family is about; the others are left out, with a note."""
        return sample

    def zero_columns(self, sample: Sample) -> tuple[int, ...]:
        """Columns of the design in the part about zeros; most families have none."""
        del sample
        return ()

    def further_terms(self, sample: Sample) -> tuple[str, ...]:
        """Names of the parameters after the regressors' own."""
        del sample
        return self.extra_terms

    def to_table(
        self, theta: FloatArray, standard: Standardised, sample: Sample
    ) -> tuple[FloatArray, FloatArray]:
        """Parameters in the units of the table, and their Jacobian."""
        size = len(sample.terms)
        zero = list(self.zero_columns(sample))
        extra, derivative = self.natural(theta, size + len(zero))
        jacobian = block_diag(standard.back, standard.back[np.ix_(zero, zero)], np.diag(derivative))
        regressors = jacobian[: size + len(zero), : size + len(zero)] @ theta[: size + len(zero)]
        return np.concatenate([regressors, extra]), np.asarray(jacobian, dtype=float)

    def to_standard(
        self, estimate: FloatArray, standard: Standardised, sample: Sample
    ) -> FloatArray:
        """The way back from `to_table`: a start for another fit of the same rows."""
        size = len(sample.terms)
        zero = list(self.zero_columns(sample))
        back = block_diag(standard.back, standard.back[np.ix_(zero, zero)])
        regressors = np.linalg.solve(back, estimate[: len(back)])
        extra = estimate[size + len(zero) :]
        return np.concatenate([regressors, np.log(extra)])

    def natural(self, theta: FloatArray, size: int) -> tuple[FloatArray, FloatArray]:
        """Extra parameters as they are reported, and their derivatives; (extra,) each."""
        return theta[size:], np.ones(len(theta) - size)

    @abstractmethod
    def spread(self, estimate: FloatArray, sample: Sample) -> Spread:
        """Distribution of each row's count, as the sampling lets it through."""

    def at_bound(self, sample: Sample, errors: str) -> FittedModel | None:
        """The fit where the maximum is at a bound and the family is a simpler one; else None."""
        del sample, errors
        return None

    def no_maximum(self, problem: str, top: Maximum, sample: Sample) -> str:
        """What to say where the climb found no maximum."""
        del top, sample
        return f"No verified maximum: {problem}."

    def leverage(self, theta: FloatArray, rows: Rows) -> FloatArray:
        """Each row's pull on its own prediction."""
        return leverages(rows.design, rows.weight * self.information(theta, rows))

    def fit(self, sample: Sample, *, errors: str) -> FittedModel:
        """Fit to a sample.

        Parameters
        ----------
        sample : rows of one site.
        errors : 'model', 'HC0', 'HC1', 'HC2', 'HC3' or 'cluster'.

        Raises
        ------
        DemandError
            Too few rows, no visits, collinear regressors, separation.
        """
        used = self.restrict(sample)
        require_fittable(sample, rows=used.nobs)
        require_fittable(used)
        require_overlap(used)
        simpler = self.at_bound(used, errors)
        if simpler is not None:
            return simpler
        standard = standardise(used.design)
        rows = Rows.of(used, standard.matrix, self.zero_columns(used))
        top = climb(self, rows)
        problem = top.problem or self.runs_off(top.theta, rows)
        if problem:
            return FittedModel.failed(self.name, used, self.no_maximum(problem, top, used))
        estimate, jacobian = self.to_table(top.theta, standard, used)
        spread = covariance(
            top.hessian,
            self.scores(top.theta, rows) * rows.weight[:, None],
            self.leverage(top.theta, rows),
            errors,
            used.clusters,
        )
        return self._described(
            used,
            estimate=estimate,
            spread=jacobian @ spread @ jacobian.T,
            value=top.value,
            errors=errors,
        )

    def runs_off(self, theta: FloatArray, rows: Rows) -> str:
        """What is wrong with a supposed maximum that lies at no sensible place."""
        del theta, rows
        return ""

    def _described(
        self,
        sample: Sample,
        *,
        estimate: FloatArray,
        spread: FloatArray,
        value: float,
        errors: str,
    ) -> FittedModel:
        expected = self.spread(estimate, sample).mean / sample.exposure
        model = FittedModel(
            model=self.name,
            site_id=sample.site_id,
            terms=(*sample.terms, *self.further_terms(sample)),
            estimate=estimate,
            covariance=spread,
            nobs=sample.nobs,
            degrees=error_degrees(sample, errors),
            parameters=len(estimate),
            log_likelihood=value,
            r_squared=squared_correlation(sample.rate, expected),
            errors=errors,
            notes=(*sample.notes, *caution_notes(sample, errors), *cluster_notes(sample, errors)),
        )
        return replace(model, dispersion=self.dispersion(model, sample))

    def dispersion(self, model: FittedModel, sample: Sample) -> float:
        """α or δ where the family has one; else Pearson's chi-square over degrees of freedom."""
        if self.extra_terms:
            return float(model.estimate[-1])
        spread = self.spread(model.estimate, sample)
        variance = np.maximum(spread.variance, 1e-12)
        pearson = float(sample.weight @ ((sample.counts - spread.mean) ** 2 / variance))
        return pearson / (sample.nobs - len(model.estimate))

    def evaluate(self, theta: FloatArray, rows: Rows) -> tuple[float, FloatArray, FloatArray]:
        """Weighted log-likelihood with gradient and Hessian."""
        value = float(rows.weight @ self.log_likelihood(theta, rows))
        return value, rows.weight @ self.scores(theta, rows), self.hessian(theta, rows)


def error_degrees(sample: Sample, errors: str) -> float:
    """Degrees of freedom of Student's t; infinite (normal) unless errors are by cluster."""
    if errors != "cluster" or sample.clusters is None:
        return np.inf
    return float(len(np.unique(sample.clusters)) - 1)


def cluster_notes(sample: Sample, errors: str) -> tuple[str, ...]:
    """A caution where clusters are few.

    Cameron and Miller, Journal of Human Resources 50, 2015.
    """
    if errors != "cluster" or sample.clusters is None:
        return ()
    groups = len(np.unique(sample.clusters))
    if groups >= FEW_CLUSTERS:
        return ()
    return (f"Only {groups} clusters: errors by cluster are too small with so few.",)


def climb(family: LikelihoodFamily, rows: Rows, start: FloatArray | None = None) -> Maximum:
    """The verified maximum of a family's weighted log-likelihood, from its own start or another."""

    def value_gradient_hessian(theta: FloatArray) -> tuple[float, FloatArray, FloatArray]:
        # A step too far overflows; the line search sees a value that is not finite.
        with np.errstate(all="ignore"):
            return family.evaluate(theta, rows)

    return maximise(value_gradient_hessian, family.start(rows) if start is None else start)
