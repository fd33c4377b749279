"""The fitted demand curve of every site, with its band, by the demand stage's own functions."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
import pandas as pd

from pipeline.demand.build import study_samples
from pipeline.demand.registry import FAMILIES
from pipeline.demand.rows import fitted_models
from pipeline.study import Study
from pipeline.surplus.draws import parameter_draws

Numbers = npt.NDArray[np.float64]
POINTS = 61
PER_ZONE = 1000.0


@dataclass(frozen=True)
class Curve:
    """Visits per 1,000 people (trips per person for records) at each cost, and its interval."""

    cost: Numbers
    rate: Numbers
    low: Numbers
    high: Numbers


def fitted_curves(
    zone_table: pd.DataFrame | None,
    trip_table: pd.DataFrame | None,
    estimates: pd.DataFrame,
    fit: pd.DataFrame,
    *,
    study: Study,
) -> dict[str, Curve]:
    """Demand by each site's chosen model, from its least to its greatest cost.

    Other terms stand at the means of the market. The band holds the study's share of the curves
    of the same parameter draws that the simulated intervals of the surplus come from.

    Parameters
    ----------
    zone_table, trip_table : the finished table, before small cells are hidden.

    Returns
    -------
    Curves by site.
    """
    samples = {
        sample.site_id: sample for sample in study_samples(zone_table, trip_table, study.demand)
    }
    unit = PER_ZONE if trip_table is None else 1.0
    tails = np.array([1 - study.surplus.confidence, 1 + study.surplus.confidence]) / 2
    curves = {}
    for (site_id, name), model in fitted_models(estimates, fit[fit["chosen"]]).items():
        sample = samples[site_id]
        cost = np.linspace(sample.price.min(), sample.price.max(), POINTS)
        family = FAMILIES[name]
        draws = parameter_draws(model, draws=study.surplus.draws, seed=study.study.seed)
        low, high = np.quantile(family.rate_curve(draws, sample, cost), tails, axis=0)
        rate = family.rate_curve(model.estimate[None, :], sample, cost)[0]
        curves[site_id] = Curve(cost, unit * rate, unit * low, unit * high)
    return curves
