"""The surplus stage: estimates and finished table in, values in money out."""

from __future__ import annotations

from concurrent.futures import Executor
from typing import Any

import pandas as pd

from pipeline.demand import Sample, fitted_models, study_samples
from pipeline.demand.bootstrap import replicates
from pipeline.demand.family import FittedModel
from pipeline.demand.mixed_curve import MixedCurve
from pipeline.demand.registry import FAMILIES
from pipeline.demand.sample import FloatArray
from pipeline.errors import SurplusError
from pipeline.executor import make_executor
from pipeline.study import Study
from pipeline.surplus.draws import parameter_draws
from pipeline.surplus.fees import fee_rows, fee_steps
from pipeline.surplus.intervals import (
    BOOTSTRAP,
    DELTA,
    SIMULATED,
    delta_rows,
    fieller_rows,
    missing_rows,
    simulated_rows,
)
from pipeline.surplus.measures import ANNUAL, PER_TRIP, Valuation, measure_units
from pipeline.surplus.zones import every_zone, zone_rows
from pipeline.tables import FeeSchedule, Surplus, ZoneSurplus

#: Draws × rows of a model whose area is integrated numerically; more would take minutes.
MOST_INTEGRALS = 3_000_000


def surplus(
    estimates: pd.DataFrame,
    fit: pd.DataFrame,
    zone_table: pd.DataFrame | None,
    trip_table: pd.DataFrame | None,
    *,
    study: Study,
) -> tuple[pd.DataFrame, pd.DataFrame, pd.DataFrame]:
    """Value every model's demand curve; tabulate fees and zones by the chosen one.

    Parameters
    ----------
    estimates, fit : the demand stage's tables.
    zone_table, trip_table : the finished table that they were made from.
    study : its sections [surplus] and [demand] (covariates), the seed and the currency are read.

    Returns
    -------
    `surplus`, `fee_schedule`, `zone_surplus`. Where visits do not fall with cost the values are
    missing and the `note` says why. Sites without a usable model have no fee schedule.

    Raises
    ------
    SurplusError
        The estimates belong to another finished table, or none of them was chosen.
    """
    table = trip_table if trip_table is not None else zone_table
    samples = {s.site_id: s for s in study_samples(zone_table, trip_table, study.demand)}
    picked = {(str(s), str(m)) for s, m in fit.loc[fit["chosen"], ["site_id", "model"]].to_numpy()}
    values, fees, zones = [], [], []
    for key, model in fitted_models(estimates, fit).items():
        sample = _sample_of(model, samples)
        draws = _draws(model, sample, study)
        rows = _value_rows(model, sample, draws, study, replicated=key in picked)
        values.append(rows.assign(chosen=key in picked))
        if key in picked and draws is not None:
            fees.append(fee_rows(model, sample, draws, settings=study.surplus))
            zones.append(zone_rows(model, sample))
    if table is None or not fees:
        raise SurplusError("no model was chosen at any site; run the demand stage first.")
    return (
        Surplus.checked(pd.concat(values, ignore_index=True), source="surplus: surplus"),
        FeeSchedule.checked(pd.concat(fees, ignore_index=True), source="surplus: fee_schedule"),
        ZoneSurplus.checked(every_zone(zones, table), source="surplus: zone_surplus"),
    )


def _draws(model: FittedModel, sample: Sample, study: Study) -> FloatArray | None:
    """Parameter draws; fewer where each is a numerical integral over many rows."""
    if not model.converged:
        return None
    draws = study.surplus.draws
    family = FAMILIES[model.model]
    if isinstance(family, MixedCurve) and not family.is_minus_one_over_b(sample):
        draws = max(1000, min(draws, MOST_INTEGRALS // max(sample.nobs, 1)))
    return parameter_draws(model, draws=draws, seed=study.study.seed)


def _sample_of(model: FittedModel, samples: dict[str, Sample]) -> Sample:
    sample = samples.get(model.site_id)
    if sample is None or set(sample.terms) - set(model.terms):
        raise SurplusError(
            f"the estimates of {model.model!r} at site {model.site_id!r} were not made from this "
            "finished table (another site or other covariates); run the demand stage again."
        )
    return sample


def _value_rows(
    model: FittedModel,
    sample: Sample,
    draws: FloatArray | None,
    study: Study,
    *,
    replicated: bool,
) -> pd.DataFrame:
    """Rows of `surplus` for one model at one site; bootstrapped where it is the chosen one."""
    confidence, seed = study.surplus.confidence, study.study.seed
    if draws is None:
        rows = missing_rows(model)
    else:
        valued = _valuation(model, sample, study)
        rows = delta_rows(model, valued, confidence)
        rows += fieller_rows(model, valued, confidence)
        rows += simulated_rows(model, valued, draws, confidence, seed=seed)
        if replicated and study.surplus.bootstrap:
            with make_executor(study.compute) as executor:
                rows += bootstrap_rows(model, valued, study, executor)
    units = measure_units(study.study.currency)
    frame = pd.DataFrame(rows)
    return frame.assign(
        model=model.model, site_id=model.site_id, unit=frame["measure"].map(units)
    ).sort_values("measure", key=lambda names: names.map(list(units).index), kind="stable")


def _valuation(model: FittedModel, sample: Sample, study: Study) -> Valuation:
    income = study.surplus.income
    return Valuation(
        family=FAMILIES[model.model],
        sample=sample,
        fees=fee_steps(model, sample, study.surplus.fees),
        income=income if income in sample.terms else None,
        income_unit=study.surplus.income_unit,
    )


def bootstrap_rows(
    model: FittedModel, valued: Valuation, study: Study, executor: Executor
) -> list[dict[str, Any]]:
    """Intervals of every measure from refits to drawn rows; the visits stay as observed."""
    drawn = replicates(
        model,
        valued.sample,
        count=study.surplus.bootstrap,
        seed=study.study.seed,
        executor=executor,
    )
    if len(drawn.theta) < 2:
        return []
    said = f" {drawn.failed:,} more had no verified fit." if drawn.failed else ""
    return simulated_rows(
        model,
        valued,
        drawn.theta,
        study.surplus.confidence,
        seed=study.study.seed,
        method=BOOTSTRAP,
        said=said,
    )


def summarise_surplus(outputs: tuple[pd.DataFrame, pd.DataFrame, pd.DataFrame]) -> str:
    """The part after the colon of the stage's summary line; the interval is the simulated one."""
    values = outputs[0]
    chosen = values[values["chosen"]]
    words: list[str] = []
    for site_id, site in chosen.groupby("site_id", sort=True):
        point = site[site["method"] == DELTA].set_index("measure")
        trip, year = point.loc[PER_TRIP], point.loc[ANNUAL]
        if pd.isna(trip["value"]):
            words.append(f"{site_id}: no finite surplus (see surplus.csv)")
            continue
        ends = site[site["method"] == SIMULATED].set_index("measure").loc[PER_TRIP]
        high = f"{ends['ci_high']:,.2f}" if pd.notna(ends["ci_high"]) else "no upper end"
        words.append(
            f"{site_id}: {trip['value']:,.2f} {trip['unit']} "
            f"({ends['ci_low']:,.2f} to {high}), {year['value']:,.0f} {year['unit']}"
        )
    more = f"; {len(words) - 3} more sites" if len(words) > 3 else ""
    return "; ".join(words[:3]) + more
