"""Demand: visits regressed on travel cost.

==================  ==========================================================================
module              what it holds
==================  ==========================================================================
``sample``          the rows of one site: counts, exposure, regressors
``design``          standardising; collinearity and separation, named
``family``          the interface of a model, and a fitted one
``curves``          semi-log and linear demand curves: visits and areas at an added fee
``likelihood``      fit of any family with a log-likelihood
``maximum``         Newton's method, and the verification of its end
``covariance``      model-based and robust covariance
``counts``          ``poisson``, ``negative_binomial``
``least_squares``   ``linear``, ``log_linear``
``registry``        families by name
``choice``          overdispersion test; which model is used, and why
``rows``            fitted models as table rows and back
``stage``           the stage itself
==================  ==========================================================================
"""

from pipeline.demand.rows import fitted_models
from pipeline.demand.sample import Sample, build_samples
from pipeline.demand.stage import demand, summarise_demand

__all__ = ["Sample", "build_samples", "demand", "fitted_models", "summarise_demand"]
