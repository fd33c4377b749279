"""Which model the surplus comes from, and a plain sentence why."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import special

from pipeline.demand.counts import NegativeBinomial, Poisson, expected_counts
from pipeline.demand.family import FittedModel
from pipeline.demand.sample import Sample


@dataclass(frozen=True)
class OverdispersionTest:
    """Test of a Poisson against variance μ + αμ²; `p_value` is one-sided (α > 0)."""

    alpha: float
    statistic: float
    p_value: float


@dataclass(frozen=True)
class Choice:
    """The chosen model (None: none can be used) and the sentence that says why."""

    model: str | None
    reason: str
    test: OverdispersionTest | None = None


def overdispersion_test(poisson: FittedModel, sample: Sample) -> OverdispersionTest:
    """Regression of ((y − μ)² − y) / μ on μ, without intercept, after a Poisson.

    Cameron and Trivedi, Journal of Econometrics 46, 1990: the coefficient is α, and its
    t statistic is normal where the counts are Poisson.
    """
    # Loading statsmodels takes longer than the fit; who fits nothing does not wait for it.
    from statsmodels.regression.linear_model import WLS

    mean = expected_counts(Poisson(), poisson, sample)
    response = ((sample.counts - mean) ** 2 - sample.counts) / mean
    result = WLS(response, mean, weights=sample.weight).fit()
    statistic = float(result.tvalues[0])
    return OverdispersionTest(
        alpha=float(result.params[0]),
        statistic=statistic,
        p_value=float(special.ndtr(-statistic)),
    )


def choose(models: dict[str, FittedModel], sample: Sample, *, how: str, level: float) -> Choice:
    """Choose among the models of one site.

    Parameters
    ----------
    models : every model that was tried, by name.
    how : 'test', or the name of a model.
    level : below this p-value the Poisson is rejected.
    """
    poisson = models.get(Poisson.name)
    testable = poisson is not None and poisson.converged and np.isfinite(poisson.dispersion)
    test = overdispersion_test(poisson, sample) if testable and poisson is not None else None
    if how != "test":
        return _named(models[how], test)
    other = models[NegativeBinomial.name]
    if test is None or poisson is None:
        problem = poisson.problem if poisson is not None else "not fitted"
        return Choice(None, f"Nothing is chosen: {problem}")
    figures = (
        f"overdispersion test, NB2 form: alpha {test.alpha:.3g}, t = {test.statistic:.2f}, "
        f"one-sided p {p_words(test.p_value)}"
    )
    if test.p_value >= level:
        return Choice(
            Poisson.name,
            f"Chosen: the counts do not vary clearly more than a Poisson allows ({figures}), "
            "so the simpler Poisson is kept.",
            test,
        )
    if other.converged:
        return Choice(
            NegativeBinomial.name,
            f"Chosen: the counts vary more than a Poisson allows ({figures}), "
            "so the negative binomial is used.",
            test,
        )
    return Choice(
        Poisson.name,
        f"Chosen: the counts vary more than a Poisson allows ({figures}), but the negative "
        f"binomial has no usable fit ({other.problem}); the Poisson is kept for its mean and "
        "needs robust errors.",
        test,
    )


def _named(model: FittedModel, test: OverdispersionTest | None) -> Choice:
    if model.converged:
        return Choice(model.model, "Chosen: named in the study file (demand.choose).", test)
    return Choice(None, f"Named in the study file but not usable: {model.problem}", test)


def p_words(p_value: float) -> str:
    """A p-value for a sentence."""
    return "< 0.001" if p_value < 0.001 else f"= {p_value:.3f}"
