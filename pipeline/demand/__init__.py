"""Demand: visits regressed on travel cost.

==================  ==========================================================================
module              what it holds
==================  ==========================================================================
``sample``          the rows of one site: counts, exposure, regressors
``build``           samples of the finished table; covariates checked, unusable rows named
``design``          standardising; collinearity and separation, named
``family``          the interface of a model, and a fitted one
``curves``          semi-log and linear demand curves: visits and areas at an added fee
``likelihood``      fit of any family with a log-likelihood
``maximum``         Newton's method, and the verification of its end
``covariance``      model-based, robust and clustered covariance
``bootstrap``       refits to drawn rows or clusters
``spread``          distribution of a count: mean, variance, cumulative probability
``counts``          ``poisson``, ``negative_binomial``
``local``           log-likelihoods of rows with derivatives, to put families together from
``indexed``         families put together so; ``dispersed`` (NB1, quasi-Poisson), ``truncated``,
                    ``on_site``, ``zeros`` (zero-inflated), ``hurdle``
``mixed_curve``     demand curve of the last two, by numerical integration
``least_squares``   ``linear``, ``log_linear``, and weighted
``registry``        families by name
``choice``          tests; which model is used, and why
``diagnostics``     what speaks for and against each model; ``comparisons``, ``residuals``,
                    ``influence``
``rows``            fitted models as table rows and back
``stage``           the stage itself
==================  ==========================================================================
"""

from pipeline.demand.build import build_samples, study_samples
from pipeline.demand.rows import fitted_models
from pipeline.demand.sample import Sample
from pipeline.demand.stage import demand, demand_with_diagnostics, summarise_demand

__all__ = [
    "Sample",
    "build_samples",
    "demand",
    "demand_with_diagnostics",
    "fitted_models",
    "study_samples",
    "summarise_demand",
]
