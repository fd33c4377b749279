"""The demand stage: finished table in, estimates and fit out."""

from __future__ import annotations

from dataclasses import replace

import pandas as pd

from pipeline.demand.choice import Choice, choose, p_words
from pipeline.demand.family import FittedModel
from pipeline.demand.registry import FAMILIES
from pipeline.demand.rows import estimate_rows, fit_row
from pipeline.demand.sample import PRICE, Sample, build_samples
from pipeline.errors import DemandError
from pipeline.settings import DemandSettings
from pipeline.study import Study
from pipeline.tables import Estimates, Fit


def demand(
    zone_table: pd.DataFrame | None, trip_table: pd.DataFrame | None, *, study: Study
) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Fit every model of the study file to every site, and choose one per site.

    Parameters
    ----------
    zone_table : one row per zone and site, or None.
    trip_table : one row per record, or None; where both are given the records are used.
    study : its sections [demand] and [surplus] (confidence) are read.

    Returns
    -------
    `estimates` and `fit`. A model that cannot be fitted keeps its rows, without figures, and
    its `note` says why.

    Raises
    ------
    DemandError
        A covariate is not there, or at no site there is a model that can be used.
    """
    settings = study.demand
    confidence = study.surplus.confidence
    estimates, fits, reasons = [], [], []
    for sample in build_samples(zone_table, trip_table, settings.covariates):
        models: dict[str, FittedModel] = {
            name: _fit(name, sample, settings) for name in settings.models
        }
        choice = choose(models, sample, how=settings.choose, level=settings.test_level)
        for model in models.values():
            estimates.append(estimate_rows(model, confidence))
            fits.append(fit_row(model, choice))
        reasons.append(choice)
    _require_choice(reasons)
    return (
        Estimates.checked(pd.concat(estimates, ignore_index=True), source="demand: estimates"),
        Fit.checked(pd.DataFrame(fits), source="demand: fit"),
    )


def _fit(name: str, sample: Sample, settings: DemandSettings) -> FittedModel:
    try:
        model = FAMILIES[name].fit(sample, errors=settings.errors)
    except DemandError as error:
        model = FittedModel.failed(name, sample, str(error))
    return replace(model, errors=settings.errors)


def _require_choice(choices: list[Choice]) -> None:
    if not any(choice.model for choice in choices):
        first = choices[0].reason
        raise DemandError(f"no demand model can be used at any of {len(choices)} site(s): {first}")


def summarise_demand(outputs: tuple[pd.DataFrame, pd.DataFrame]) -> str:
    """The part after the colon of the stage's summary line."""
    estimates, fit = outputs
    chosen = fit[fit["chosen"]]
    first = chosen.iloc[0]
    rows = estimates[estimates["term"] == PRICE]
    price = chosen.merge(rows, on=["model", "site_id"], validate="one_to_one").iloc[0]
    sites = fit["site_id"].nunique()
    test = (
        f", overdispersion p {p_words(first['overdispersion_p'])}"
        if pd.notna(first["overdispersion_p"])
        else ""
    )
    where = f"{first['site_id']}: " if sites > 1 else ""
    more = f" (and {len(chosen) - 1} more of {sites} sites)" if sites > 1 else ""
    return (
        f"{fit['model'].nunique()} models; {where}{first['model']} on {first['nobs']:,} rows"
        f"{test}; travel_cost {price['estimate']:.4g} "
        f"({price['ci_low']:.4g} to {price['ci_high']:.4g}){more}"
    )
