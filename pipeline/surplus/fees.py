"""What an added fee would do to visits, revenue and surplus, and where the demand curve runs.

The observed visits are the visits without an added fee; the model says by which factor a fee
reduces them::

    visits(fee) = observed visits × predicted(fee) / predicted(0)

So the schedule starts at the count that the manager knows, for every model, and the surplus in
its first row is ``annual_surplus``. For the semi-log models the factor is exp(b × fee). What
visitors lose is the area under the curve between no fee and the fee; part of it becomes revenue.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd

from pipeline.demand.family import FittedModel
from pipeline.demand.registry import FAMILIES
from pipeline.demand.sample import FloatArray, Sample
from pipeline.settings import SurplusSettings
from pipeline.surplus.intervals import no_area_words

STEPS = 10
KEPT_AWAY = 0.9
NICE = (1.0, 2.0, 2.5, 5.0, 10.0)


@dataclass(frozen=True)
class FeeResponse:
    """Demand at each added fee, for each parameter vector; arrays are (vectors, fees)."""

    fees: FloatArray
    visits: FloatArray
    consumer_surplus: FloatArray
    surplus_lost: FloatArray

    @property
    def revenue(self) -> FloatArray:
        """Fee times visits."""
        return self.visits * self.fees


def fee_response(
    model: FittedModel,
    sample: Sample,
    fees: FloatArray,
    *,
    draws: FloatArray | None = None,
    calibrated: bool = True,
) -> FeeResponse:
    """Visits and surplus at added fees.

    Parameters
    ----------
    fees : (fees,) added per person and visit.
    draws : (vectors, parameters) to respond for; default: the estimates alone.
    calibrated : start from the observed visits; False gives the model's own prediction.
    """
    theta = model.estimate[None, :] if draws is None else draws
    totals = FAMILIES[model.model].totals(theta, sample, np.concatenate([[0.0], fees]))
    factor = np.ones((len(theta), 1))
    if calibrated:
        predicted = totals.visits[:, :1]
        some = predicted > 0
        factor = np.where(some, sample.annual_visits / np.where(some, predicted, 1.0), 0.0)
    return FeeResponse(
        fees=fees,
        visits=factor * totals.visits[:, 1:],
        consumer_surplus=_times(factor, totals.left[:, 1:]),
        surplus_lost=factor * totals.lost[:, 1:],
    )


def _times(factor: FloatArray, area: FloatArray) -> FloatArray:
    """Product where nothing times infinite is nothing."""
    return np.where(factor > 0, np.where(factor > 0, factor, 1.0) * area, 0.0)


def default_fees(model: FittedModel, sample: Sample) -> FloatArray:
    """Equal round steps from no fee to about the one that keeps nine visits in ten away."""
    if not _falls(model, sample):
        return np.zeros(1)
    low, high = 0.0, float(sample.price.max()) or 1.0
    while _share(model, sample, high) > 1 - KEPT_AWAY:
        low, high = high, 2 * high
    for _ in range(60):
        middle = (low + high) / 2
        if _share(model, sample, middle) > 1 - KEPT_AWAY:
            low = middle
        else:
            high = middle
    step = nice_step(high / STEPS)
    return np.array([float(f"{step * i:.10g}") for i in range(STEPS + 1)])


def _falls(model: FittedModel, sample: Sample) -> bool:
    return bool(FAMILIES[model.model].falls(model.estimate[None, :], sample)[0])


def fee_steps(model: FittedModel, sample: Sample, fees: tuple[float, ...]) -> FloatArray:
    """The study's fees with none before them, or the default; none alone where demand rises."""
    if not _falls(model, sample):
        return np.zeros(1)
    return np.array(sorted({0.0, *fees})) if fees else default_fees(model, sample)


def _share(model: FittedModel, sample: Sample, fee: float) -> float:
    """Share of the visits that remain at a fee."""
    visits = fee_response(model, sample, np.array([0.0, fee])).visits[0]
    return float(visits[1] / visits[0]) if visits[0] > 0 else 0.0


def nice_step(least: float) -> float:
    """The smallest of 1, 2, 2.5, 5 times a power of ten that is not below `least`."""
    power = 10.0 ** np.floor(np.log10(least))
    return float(next(n * power for n in NICE if n * power >= least * (1 - 1e-9)))


def fee_rows(
    model: FittedModel, sample: Sample, draws: FloatArray, *, settings: SurplusSettings
) -> pd.DataFrame:
    """Rows of `fee_schedule` for one site; only the one without a fee where demand rises."""
    fees = settings.fees
    steps = fee_steps(model, sample, fees)
    falls = _falls(model, sample)
    point = fee_response(model, sample, steps)
    drawn = fee_response(model, sample, steps, draws=draws)
    columns: dict[str, object] = {"site_id": sample.site_id, "fee": steps}
    for name in ("visits", "revenue", "consumer_surplus", "surplus_lost"):
        values = getattr(point, name)[0]
        low, high = _ends(getattr(drawn, name), settings.confidence)
        finite = falls or name != "consumer_surplus"
        columns[name] = values if finite else np.nan
        columns[f"{name}_ci_low"] = low if finite else np.nan
        columns[f"{name}_ci_high"] = high if finite else np.nan
    columns["note"] = None if falls else no_area_words(model)
    return pd.DataFrame(columns)


def _ends(values: FloatArray, confidence: float) -> tuple[FloatArray, FloatArray]:
    levels = [0.5 - confidence / 2, 0.5 + confidence / 2]
    found = np.quantile(values, levels, axis=0, method="inverted_cdf")
    found[~np.isfinite(found)] = np.nan
    return found[0], found[1]


def demand_curve(
    model: FittedModel,
    sample: Sample,
    draws: FloatArray,
    *,
    confidence: float,
    points: int = 101,
) -> pd.DataFrame:
    """The chosen curve for a figure: rate against cost, other regressors at their mean.

    Returns
    -------
    `travel_cost, rate, rate_ci_low, rate_ci_high`; visits per 1,000 people and year for zones,
    trips per person and year for records.
    """
    costs = np.linspace(0, float(sample.price.max()), points)
    family = FAMILIES[model.model]
    rate = family.rate_curve(model.estimate[None, :], sample, costs)[0] * sample.per
    low, high = _ends(family.rate_curve(draws, sample, costs) * sample.per, confidence)
    return pd.DataFrame(
        {"travel_cost": costs, "rate": rate, "rate_ci_low": low, "rate_ci_high": high}
    )
