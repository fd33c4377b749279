"""The demand stage: finished table in, estimates and fit out."""

from __future__ import annotations

from dataclasses import replace

import pandas as pd

from pipeline.demand.bootstrap import bootstrap_covariance
from pipeline.demand.build import study_samples
from pipeline.demand.choice import Choice, choose, p_words
from pipeline.demand.diagnostics import diagnose, placed
from pipeline.demand.family import FittedModel
from pipeline.demand.registry import FAMILIES
from pipeline.demand.residuals import zone_residuals
from pipeline.demand.rows import estimate_rows, fit_row, fitted_models
from pipeline.demand.sample import PRICE, Sample, stacked
from pipeline.errors import DemandError
from pipeline.executor import make_executor
from pipeline.settings import TEST_PAIRS, DemandSettings
from pipeline.study import Study
from pipeline.tables import Diagnostics, Estimates, Fit, Residuals


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
    for sites, sample in _fitted_samples(zone_table, trip_table, settings):
        models: dict[str, FittedModel] = {
            name: _fit(name, sample, study) for name in settings.models
        }
        choice = choose(
            models,
            sample,
            how=settings.choose,
            level=settings.test_level,
            pair=TEST_PAIRS[settings.sampling],
        )
        for site_id in sites:
            for model in models.values():
                of_site = replace(model, site_id=site_id)
                estimates.append(estimate_rows(of_site, confidence))
                fits.append(fit_row(of_site, choice))
        reasons.append(choice)
    _require_choice(reasons)
    return (
        Estimates.checked(pd.concat(estimates, ignore_index=True), source="demand: estimates"),
        Fit.checked(pd.DataFrame(fits), source="demand: fit"),
    )


def demand_with_diagnostics(
    zone_table: pd.DataFrame | None,
    trip_table: pd.DataFrame | None,
    zones: pd.DataFrame | None,
    *,
    study: Study,
) -> tuple[pd.DataFrame, pd.DataFrame, pd.DataFrame, pd.DataFrame | None]:
    """`demand`, with what speaks for and against each model, and what it leaves of each zone.

    Parameters
    ----------
    zones : where the zones lie, for the spatial correlation of the residuals; or None.

    Returns
    -------
    `estimates`, `fit`, `diagnostics`, `residuals` (None where the rows are records of persons).
    """
    estimates, fit = demand(zone_table, trip_table, study=study)
    found = []
    models = fitted_models(estimates, fit)
    for sites, sample in _fitted_samples(zone_table, trip_table, study.demand):
        for site_id in sites[:1]:
            own = {name: model for (site, name), model in models.items() if site == site_id}
            chosen = fit.loc[(fit["site_id"] == site_id) & fit["chosen"], "model"]
            found.append(
                diagnose(
                    replace(placed(sample, zones), site_id=site_id),
                    own,
                    chosen.iloc[0] if len(chosen) else None,
                    folds=study.demand.folds,
                    seed=study.study.seed,
                )
            )
    rows = pd.concat(found, ignore_index=True)
    return (
        estimates,
        fit,
        Diagnostics.checked(rows, source="demand: diagnostics"),
        _residuals(study_samples(zone_table, trip_table, study.demand), models, fit, study),
    )


def _residuals(
    samples: list[Sample],
    models: dict[tuple[str, str], FittedModel],
    fit: pd.DataFrame,
    study: Study,
) -> pd.DataFrame | None:
    """What the chosen models leave of each zone; None where the rows are no zones."""
    if not all(sample.zonal for sample in samples):
        return None
    chosen = fit[fit["chosen"]].set_index("site_id")["model"].to_dict()
    found = [
        zone_residuals(
            models[sample.site_id, chosen[sample.site_id]], sample, seed=study.study.seed
        )
        for sample in samples
        if sample.site_id in chosen
    ]
    rows = pd.concat(found, ignore_index=True)
    return Residuals.checked(rows, source="demand: residuals")


def _fitted_samples(
    zone_table: pd.DataFrame | None, trip_table: pd.DataFrame | None, settings: DemandSettings
) -> list[tuple[tuple[str, ...], Sample]]:
    """What is fitted together, with the sites that it is about: each by itself, or all."""
    samples = study_samples(zone_table, trip_table, settings)
    sites = tuple(sample.site_id for sample in samples)
    if settings.site_effects and len(samples) > 1:
        return [(sites, stacked(samples))]
    return [((sample.site_id,), sample) for sample in samples]


def _fit(name: str, sample: Sample, study: Study) -> FittedModel:
    errors = study.demand.errors
    sampling = study.demand.sampling
    try:
        model = FAMILIES[name].fit(sample, errors="HC3" if errors == "bootstrap" else errors)
    except DemandError as error:
        return replace(FittedModel.failed(name, sample, str(error)), errors=errors)
    model = replace(model, errors=model.errors or errors)
    if model.converged and errors == "bootstrap":
        count, seed = study.surplus.bootstrap or 500, study.study.seed
        with make_executor(study.compute) as executor:
            model = bootstrap_covariance(model, sample, count=count, seed=seed, executor=executor)
    return replace(model, notes=(*model.notes, *sampling_notes(name, sample, sampling)))


def sampling_notes(name: str, sample: Sample, sampling: str) -> tuple[str, ...]:
    """A caution where the model is not made for how the records came about."""
    if sampling == "on_site" and not name.startswith("on_site"):
        return (
            (
                "Naive for records of people met on the site: who comes often is met often, and "
                "this model takes them as drawn evenly; demand and surplus come out too large."
            ),
        )
    if sampling == "visitors" and not name.startswith(("truncated", "log_", "weighted_log")):
        return ("Naive for records of visitors only: it expects people without a visit, too.",)
    nobody = not sample.zonal and bool((sample.counts > 0).all())
    if sampling == "everybody" and nobody and not name.startswith(("truncated", "on_site")):
        return (
            (
                "Every record has a trip, so the records look like a sample of visitors; say so "
                "in demand.sampling and use truncated or on-site models."
            ),
        )
    return ()


def _require_choice(choices: list[Choice]) -> None:
    if not any(choice.model for choice in choices):
        first = choices[0].reason
        raise DemandError(f"no demand model can be used at any of {len(choices)} site(s): {first}")


def summarise_demand(outputs: tuple[pd.DataFrame, ...]) -> str:
    """The part after the colon of the stage's summary line."""
    estimates, fit = outputs[:2]
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
