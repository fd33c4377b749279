"""Which model the surplus comes from, and a plain sentence why."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import special

from pipeline.demand.counts import NegativeBinomial, Poisson, log_mean
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

    mean = log_mean(poisson.estimate, sample)
    response = ((sample.counts - mean) ** 2 - sample.counts) / mean
    result = WLS(response, mean, weights=sample.weight).fit()
    statistic = float(result.tvalues[0])
    return OverdispersionTest(
        alpha=float(result.params[0]),
        statistic=statistic,
        p_value=float(special.ndtr(-statistic)),
    )


def choose(
    models: dict[str, FittedModel],
    sample: Sample,
    *,
    how: str,
    level: float,
    pair: tuple[str, str] = (Poisson.name, NegativeBinomial.name),
) -> Choice:
    """Choose among the models of one site.

    Parameters
    ----------
    models : every model that was tried, by name.
    how : 'test', 'aic', 'bic', or the name of a model.
    level : below this p-value the Poisson is rejected.
    pair : names of the Poisson and the negative binomial that 'test' chooses from.
    """
    plain = models.get(Poisson.name)
    testable = plain is not None and plain.converged and np.isfinite(plain.dispersion)
    test = overdispersion_test(plain, sample) if testable and plain is not None else None
    if how in ("aic", "bic"):
        return _by_criterion(models, how, test)
    if how != "test":
        return _named(models[how], test)
    if pair[0] != Poisson.name:
        return _by_likelihood_ratio(models[pair[0]], models[pair[1]], level, test)
    return _by_test(models, test, level)


def _by_test(
    models: dict[str, FittedModel], test: OverdispersionTest | None, level: float
) -> Choice:
    poisson, other = models.get(Poisson.name), models[NegativeBinomial.name]
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


def likelihood_ratio(
    simple: FittedModel, wide: FittedModel, *, bounded: bool
) -> tuple[float, float]:
    """Statistic and p-value of a model against one that it is a case of.

    Where the parameter that tells them apart is at its bound under the simple model (`bounded`:
    a dispersion, a share that never comes), the statistic is zero half of the time, and the
    p-value is half that of chi-square (Self and Liang, Journal of the American Statistical
    Association 82, 1987).
    """
    statistic = max(0.0, 2 * (wide.log_likelihood - simple.log_likelihood))
    degrees = max(wide.parameters - simple.parameters, 1)
    tail = float(special.gammaincc(degrees / 2, statistic / 2))
    return statistic, tail / 2 if bounded and statistic > 0 else tail


def _by_likelihood_ratio(
    poisson: FittedModel, other: FittedModel, level: float, test: OverdispersionTest | None
) -> Choice:
    """Of a truncated or on-site pair, by the likelihood ratio of the dispersion."""
    if not poisson.converged:
        return Choice(None, f"Nothing is chosen: {poisson.problem}", test)
    if not other.converged:
        return Choice(
            poisson.model,
            f"Chosen: {other.model} has no usable fit ({other.problem}) The {poisson.model} is "
            "kept for want of a better one and needs robust errors.",
            test,
        )
    statistic, p_value = likelihood_ratio(poisson, other, bounded=True)
    figures = f"likelihood ratio {statistic:.2f}, p {p_words(p_value)}"
    if p_value < level:
        words = f"Chosen: trips vary more than a Poisson allows ({figures})."
        return Choice(other.model, words, test)
    words = f"Chosen: trips do not vary clearly more than a Poisson allows ({figures})."
    return Choice(poisson.model, words, test)


def _by_criterion(
    models: dict[str, FittedModel], how: str, test: OverdispersionTest | None
) -> Choice:
    """The count model with the least AIC or BIC; models of fewer rows or of rates have another."""
    counted = [m for m in models.values() if m.converged and np.isfinite(m.log_likelihood)]
    counted = [m for m in counted if "linear" not in m.model]
    most = max((m.nobs for m in counted), default=0)
    whole = [m for m in counted if m.nobs == most]
    if not whole:
        return Choice(None, "Nothing is chosen: no count model has a usable fit.", test)
    ranked = sorted(whole, key=lambda m: getattr(m, how))
    best = ranked[0]
    words = f"Chosen: least {how.upper()} ({getattr(best, how):,.1f}) of {len(whole)} count models"
    if len(ranked) > 1:
        words += f"; next {ranked[1].model} ({getattr(ranked[1], how):,.1f})"
    return Choice(best.model, f"{words}.", test)


def _named(model: FittedModel, test: OverdispersionTest | None) -> Choice:
    if model.converged:
        return Choice(model.model, "Chosen: named in the study file (demand.choose).", test)
    return Choice(None, f"Named in the study file but not usable: {model.problem}", test)


def p_words(p_value: float) -> str:
    """A p-value for a sentence."""
    return "< 0.001" if p_value < 0.001 else f"= {p_value:.3f}"
