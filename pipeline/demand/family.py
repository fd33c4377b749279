"""What a demand model is: fitted coefficients, and the curve that they imply.

`Family` is the interface; ``registry`` lists the families by name. A family knows how it is
fitted and what its curve does when a fee is added to the travel cost. The surplus stage knows
no family: it asks for visits and areas under the curve.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Protocol

import numpy as np
from scipy import special

from pipeline.demand.sample import PRICE, BoolArray, FloatArray, Sample

ALPHA = "alpha"
DELTA = "delta"
SMEARING = "smearing"


@dataclass(frozen=True)
class FittedModel:
    """One model at one site, in the units of the finished table.

    Attributes
    ----------
    terms : names of the parameters; a dispersion or a smearing factor stands last.
    estimate, covariance : (p,) and (p, p); NaN where a parameter has no maximum of its own.
    degrees : residual degrees of freedom of Student's t; infinite for the normal.
    parameters : how many were estimated, for AIC and BIC.
    problem : why there is no verified maximum; empty where there is one.
    """

    model: str
    site_id: str
    terms: tuple[str, ...]
    estimate: FloatArray
    covariance: FloatArray
    nobs: int
    degrees: float = np.inf
    parameters: int = 0
    log_likelihood: float = np.nan
    dispersion: float = np.nan
    r_squared: float = np.nan
    errors: str = ""
    notes: tuple[str, ...] = field(default_factory=tuple)
    problem: str = ""

    @classmethod
    def failed(cls, model: str, sample: Sample, problem: str) -> FittedModel:
        """A model that could not be fitted, and why."""
        size = len(sample.terms)
        return cls(
            model=model,
            site_id=sample.site_id,
            terms=sample.terms,
            estimate=np.full(size, np.nan),
            covariance=np.full((size, size), np.nan),
            nobs=sample.nobs,
            problem=problem,
        )

    @property
    def converged(self) -> bool:
        """Whether the maximum was reached and verified."""
        return not self.problem

    @property
    def std_error(self) -> FloatArray:
        """Standard error of each parameter."""
        return np.sqrt(np.diag(self.covariance))

    @property
    def price_coefficient(self) -> float:
        """Coefficient of the travel cost."""
        return float(self.estimate[self.terms.index(PRICE)])

    @property
    def aic(self) -> float:
        """Akaike's information criterion."""
        return 2 * self.parameters - 2 * self.log_likelihood

    @property
    def bic(self) -> float:
        """Bayesian information criterion."""
        return float(np.log(max(self.nobs, 1))) * self.parameters - 2 * self.log_likelihood

    def quantile(self, confidence: float) -> float:
        """Half-width of a two-sided interval, in standard errors."""
        tail = 0.5 + confidence / 2
        normal = np.isinf(self.degrees)
        return float(special.ndtri(tail) if normal else special.stdtrit(self.degrees, tail))


@dataclass(frozen=True)
class Totals:
    """Demand of all rows together at several added fees, for several parameter vectors.

    Attributes
    ----------
    visits : (vectors, fees) visits per year.
    left : (vectors, fees) area under the curve beyond the fee; infinite where it has no end.
    lost : (vectors, fees) area between no fee and the fee.
    """

    visits: FloatArray
    left: FloatArray
    lost: FloatArray


class Family(Protocol):
    """A family of demand models; `student` says that its intervals use Student's t."""

    name: str
    label: str
    student: bool
    surplus_words: str
    elasticity_words: str

    def fit(self, sample: Sample, *, errors: str) -> FittedModel:
        """Fit to a sample; DemandError where it cannot be fitted at all."""
        ...

    def falls(self, theta: FloatArray, sample: Sample) -> BoolArray:
        """Whether visits fall with cost, so that an area is bounded; per vector."""
        ...

    def predict(
        self, theta: FloatArray, sample: Sample, fee: float = 0.0
    ) -> tuple[FloatArray, FloatArray]:
        """Visits per year of each row at an added fee, and the area beyond it (money a year)."""
        ...

    def totals(self, theta: FloatArray, sample: Sample, fees: FloatArray) -> Totals:
        """The curve of all rows together; `theta` is (vectors, parameters)."""
        ...

    def elasticity(self, theta: FloatArray, sample: Sample) -> FloatArray:
        """Per cent that all visits change by when every travel cost rises by one per cent."""
        ...

    def choke_cost(self, theta: FloatArray, sample: Sample) -> FloatArray | None:
        """Cost at which an average resident stops visiting; None where no cost does that."""
        ...

    def rate_curve(self, theta: FloatArray, sample: Sample, costs: FloatArray) -> FloatArray:
        """Visits per person and year at each cost, other regressors at their mean; per vector."""
        ...


def mean_regressors(sample: Sample) -> FloatArray:
    """Mean of each regressor over people (not rows)."""
    return np.asarray(sample.people @ sample.design / sample.people.sum(), dtype=float)


def squared_correlation(observed: FloatArray, predicted: FloatArray) -> float:
    """Squared correlation; NaN where one of the two does not vary."""
    if np.ptp(observed) == 0 or np.ptp(predicted) == 0:
        return float("nan")
    return float(min(1.0, np.corrcoef(observed, predicted)[0, 1] ** 2))
