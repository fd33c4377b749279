"""Least squares of the visit rate: a straight line, and the log of the rate.

Fitted by statsmodels on standardised regressors and transformed back. Intervals use Student's t.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from pipeline.demand.curves import LinearCurve, SemiLogCurve, index
from pipeline.demand.design import caution_notes, require_fittable, standardise
from pipeline.demand.family import SMEARING, FittedModel, squared_correlation
from pipeline.demand.likelihood import cluster_notes, error_degrees
from pipeline.demand.sample import FloatArray, Sample


class Linear(LinearCurve):
    """Rate per 1,000 people (per person for trip records) as a straight line in the cost."""

    name = "linear"
    label = "linear least squares of the rate"
    student = True
    by_exposure = False

    def fit(self, sample: Sample, *, errors: str) -> FittedModel:
        """Fit to a sample; every row counts alike, whatever its population."""
        require_fittable(sample)
        weighted = weigh(sample) if self.by_exposure else sample
        model = least_squares(self.name, weighted, sample.rate * sample.per, errors)
        predicted = self.predict(model.estimate, sample)[0] / sample.people
        return replace(model, r_squared=squared_correlation(sample.rate, predicted))


class LogLinear(SemiLogCurve):
    """Log of the rate per person as a straight line in the cost; rows without visits drop out."""

    name = "log_linear"
    label = "least squares of the log rate"
    student = True
    by_exposure = False

    def fit(self, sample: Sample, *, errors: str) -> FittedModel:
        """Fit to the rows with visits, and say how many had none."""
        visited = with_visits(sample)
        require_fittable(sample, rows=visited.nobs)
        require_fittable(visited)
        response = np.log(visited.rate)
        weighted = weigh(visited) if self.by_exposure else visited
        model = _with_smearing(least_squares(self.name, weighted, response, errors), weighted)
        predicted = self.predict(model.estimate, sample)[0] / sample.people
        empty = sample.nobs - visited.nobs
        note = (
            f"{empty:,} of {sample.nobs:,} rows have no visit and cannot enter a logarithm, "
            "which biases the estimate; a count model keeps them."
        )
        return replace(
            model,
            r_squared=squared_correlation(sample.rate, predicted),
            notes=(*model.notes, *([note] if empty else [])),
        )

    def level(self, theta: FloatArray, sample: Sample) -> FloatArray:
        """The smearing factor."""
        del sample
        return theta[:, -1]


def _with_smearing(model: FittedModel, visited: Sample) -> FittedModel:
    """Add the factor that turns exp(x'β), the median, into the mean: the mean of exp(residual).

    Duan, Journal of the American Statistical Association 78, 1983. It is taken as known (no
    covariance), and cancels out of the surplus per trip and of the fee schedule.
    """
    residual = np.log(visited.rate) - index(model.estimate[None, :], visited)[0]
    factor = float(visited.weight @ np.exp(residual) / visited.weight.sum())
    size = len(model.terms)
    spread = np.full((size + 1, size + 1), np.nan)
    spread[:size, :size] = model.covariance
    return replace(
        model,
        terms=(*model.terms, SMEARING),
        estimate=np.append(model.estimate, factor),
        covariance=spread,
    )


def with_visits(sample: Sample) -> Sample:
    """The rows with at least one visit."""
    return sample.rows(sample.counts > 0)


class WeightedLinear(Linear):
    """The line with each zone weighted by its exposure: rates of large zones are better known.

    The variance of a zone's rate falls with its population (Bowes and Loomis, Land Economics 56,
    1980).
    """

    name = "weighted_linear"
    label = "weighted least squares of the rate"
    by_exposure = True


class WeightedLogLinear(LogLinear):
    """The log rate with each zone weighted by its exposure.

    The variance of a count's log is about one over the count; weights by visits would depend on
    the response, so exposure × a common rate, which is exposure, stands for the expected count.
    """

    name = "weighted_log_linear"
    label = "weighted least squares of the log rate"
    by_exposure = True


def weigh(sample: Sample) -> Sample:
    """The sample with weights times exposure, averaging one."""
    weight = sample.weight * sample.exposure
    return replace(sample, weight=weight / weight.mean())


def least_squares(name: str, sample: Sample, response: FloatArray, errors: str) -> FittedModel:
    """Weighted least squares of a response on the sample's regressors."""
    # Loading statsmodels takes longer than the fit; who fits nothing does not wait for it.
    from statsmodels.regression.linear_model import WLS

    standard = standardise(sample.design)
    regression = WLS(response, standard.matrix, weights=sample.weight)
    if errors == "cluster" and sample.clusters is not None:
        groups = {"groups": sample.clusters}
        result = regression.fit(cov_type="cluster", cov_kwds=groups, use_t=True)
    else:
        kind = "nonrobust" if errors == "model" else errors
        result = regression.fit(cov_type=kind, use_t=True)
    spread = np.asarray(result.cov_params(), dtype=float)
    degrees = error_degrees(sample, errors)
    return FittedModel(
        model=name,
        site_id=sample.site_id,
        terms=sample.terms,
        estimate=standard.back @ np.asarray(result.params, dtype=float),
        covariance=standard.back @ spread @ standard.back.T,
        nobs=sample.nobs,
        degrees=degrees if np.isfinite(degrees) else float(sample.nobs - len(sample.terms)),
        parameters=len(sample.terms) + 1,
        log_likelihood=float(result.llf),
        dispersion=float(result.scale),
        errors=errors,
        notes=(
            *sample.notes,
            *caution_notes(sample, errors, student=True),
            *cluster_notes(sample, errors),
        ),
    )
