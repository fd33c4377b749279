"""What speaks for and against each model: the rows of `diagnostics`."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pandas as pd

from pipeline.demand.choice import likelihood_ratio, overdispersion_test, p_words
from pipeline.demand.comparisons import NESTED, cross_validate, vuong
from pipeline.demand.counts import Poisson
from pipeline.demand.curves import SemiLogCurve
from pipeline.demand.design import standardise
from pipeline.demand.family import FittedModel
from pipeline.demand.influence import influential_zones
from pipeline.demand.likelihood import LikelihoodFamily
from pipeline.demand.registry import FAMILIES
from pipeline.demand.residuals import (
    count_classes,
    moran,
    normality,
    quantile_residuals,
    standardised_residuals,
)
from pipeline.demand.sample import PRICE, FloatArray, Sample

Row = dict[str, Any]


def placed(sample: Sample, zones: pd.DataFrame | None) -> Sample:
    """The sample with the places of its zones, where they are known."""
    if sample.positions is not None or zones is None or not sample.zonal:
        return sample
    places = zones.assign(zone_id=zones["zone_id"].astype(str)).set_index("zone_id")
    if not set(sample.zone_ids) <= set(places.index):
        return sample
    lon_lat = places.loc[list(sample.zone_ids), ["lon", "lat"]].to_numpy(dtype=float)
    return replace(sample, positions=lon_lat)


def diagnose(
    sample: Sample, models: dict[str, FittedModel], chosen: str | None, *, folds: int, seed: int
) -> pd.DataFrame:
    """Rows of `diagnostics` for one site.

    Parameters
    ----------
    sample : the rows that the models were fitted to.
    models : every model by name.
    chosen : the model that the surplus comes from; zones' influence is worked out for it alone.
    folds : parts of the cross-validation; 0: none.
    """
    usable = {name: model for name, model in models.items() if model.converged}
    rows = _design_rows(sample, chosen or next(iter(models)))
    rows += _test_rows(sample, usable)
    for name, model in usable.items():
        rows += _residual_rows(sample, model, seed)
        rows += _held_out_rows(sample, model, folds, seed)
        if name != chosen and chosen in usable:
            rows += _vuong_rows(sample, usable[chosen], model)
    if chosen in usable:
        rows += _reach_rows(sample, usable[chosen])
        rows += _influence_rows(sample, usable[chosen])
    frame = pd.DataFrame(rows).reindex(
        columns=["model", "diagnostic", "subject", "value", "expected", "p_value", "note"]
    )
    return frame.assign(site_id=sample.site_id)


def _row(
    model: str,
    diagnostic: str,
    value: float,
    note: str,
    *,
    subject: str | None = None,
    expected: float = np.nan,
    p_value: float = np.nan,
) -> Row:
    figures = {"value": value, "expected": expected, "p_value": p_value}
    finite = {name: float(v) if np.isfinite(v) else np.nan for name, v in figures.items()}
    return {"model": model, "diagnostic": diagnostic, "subject": subject, "note": note, **finite}


def _design_rows(sample: Sample, model: str) -> list[Row]:
    """How well the regressors can be told apart, and how few rows there are."""
    varies = np.ptp(sample.design[:, 1:], axis=0) > 0
    if sample.nobs <= len(sample.terms) or not varies.all():
        return []
    matrix = standardise(sample.design).matrix
    condition = float(np.linalg.cond(matrix))
    place = sample.terms.index(PRICE)
    others = np.delete(matrix, place, axis=1)
    fitted = others @ np.linalg.lstsq(others, matrix[:, place], rcond=None)[0]
    left = float(((matrix[:, place] - fitted) ** 2).mean())
    inflation = 1 / left if left > 0 else np.inf
    per = sample.nobs / len(sample.terms)
    return [
        _row(
            model,
            "condition_number",
            condition,
            "Of the standardised regressors; above 30 they are hard to tell apart (Belsley, Kuh "
            "and Welsch, Regression Diagnostics, 1980).",
        ),
        _row(
            model,
            "price_variance_inflation",
            inflation,
            "Times that the variance of the travel_cost coefficient grows because the other "
            "regressors move with the cost; above 10 is much (common practice, no source).",
            expected=1.0,
        ),
        _row(
            model,
            "rows_per_coefficient",
            per,
            f"{sample.nobs:,} rows for {len(sample.terms)} coefficients"
            + ("; too few to trust intervals made for large samples." if per < 10 else "."),
        ),
    ]


def _test_rows(sample: Sample, models: dict[str, FittedModel]) -> list[Row]:
    rows = []
    if Poisson.name in models and np.isfinite(models[Poisson.name].dispersion):
        test = overdispersion_test(models[Poisson.name], sample)
        words = "rejected" if test.p_value < 0.05 else "not rejected"
        rows.append(
            _row(
                Poisson.name,
                "overdispersion",
                test.statistic,
                f"Cameron and Trivedi's test, NB2 form: a Poisson's variance is {words} at 5 % "
                f"(alpha {test.alpha:.3g}, p {p_words(test.p_value)}).",
                p_value=test.p_value,
                expected=0.0,
            )
        )
    for simple, wide, bounded in NESTED:
        if simple not in models or wide not in models:
            continue
        one, other = models[simple], models[wide]
        if one.nobs != other.nobs:
            continue
        statistic, p_value = likelihood_ratio(one, other, bounded=bounded)
        rows.append(
            _row(
                wide,
                "likelihood_ratio",
                statistic,
                f"Against {simple}, which is a case of it"
                + (", at the bound of a parameter" if bounded else "")
                + f": p {p_words(p_value)}.",
                subject=simple,
                p_value=p_value,
                expected=0.0,
            )
        )
    return rows


def _vuong_rows(sample: Sample, chosen: FittedModel, other: FittedModel) -> list[Row]:
    names = {chosen.model, other.model}
    if any(names == {simple, wide} for simple, wide, _ in NESTED):
        return []
    found = vuong(chosen, other, sample)
    rows = []
    for kind, (statistic, p_value) in found.items():
        ahead = chosen.model if statistic > 0 else other.model
        clear = f"{ahead} is closer to the data" if p_value < 0.05 else "no clear difference"
        rows.append(
            _row(
                chosen.model,
                kind,
                statistic,
                f"Vuong's test against {other.model}: {clear} (two-sided p {p_words(p_value)}).",
                subject=other.model,
                p_value=p_value,
                expected=0.0,
            )
        )
    return rows


def _residual_rows(sample: Sample, model: FittedModel, seed: int) -> list[Row]:
    family = FAMILIES[model.model]
    used = family.restrict(sample) if isinstance(family, LikelihoodFamily) else sample
    rows = _moran_rows(used, model, seed)
    if not isinstance(family, LikelihoodFamily):
        return rows
    spread = family.spread(model.estimate, used)
    residuals = quantile_residuals(spread, used, seed=seed)
    words = "Randomised quantile residuals (Dunn and Smyth, 1996), standard normal if the model is"
    for name, value, expected in (
        ("residual_mean", residuals.mean(), 0.0),
        ("residual_variance", residuals.var(), 1.0),
    ):
        rows.append(_row(model.model, name, value, f"{words} right.", expected=expected))
    statistic, p_value = normality(residuals)
    rows.append(
        _row(
            model.model,
            "residual_normality",
            statistic,
            f"{words} right: Kolmogorov and Smirnov's distance, p {p_words(p_value)} (parameters "
            "were estimated, so p is rather too large).",
            p_value=p_value,
            expected=0.0,
        )
    )
    rows += [
        _row(
            model.model,
            "observed_count",
            observed,
            "Rows with so many visits, and how many the model expects.",
            subject=label,
            expected=expected,
        )
        for label, observed, expected in count_classes(spread, used)
    ]
    return rows


def _moran_rows(sample: Sample, model: FittedModel, seed: int) -> list[Row]:
    if sample.positions is None or not sample.zonal or sample.nobs < 12:
        return []
    residuals, kept = standardised_residuals(model, sample)
    found = moran(residuals, sample.positions[kept], seed=seed)
    words = (
        "neighbours are alike beyond what the model explains: errors are too small and a regressor "
        "that varies over the map may be missing"
        if found.p_value < 0.05 and found.value > found.expected
        else "no clear pattern on the map is left"
    )
    return [
        _row(
            model.model,
            "moran_i",
            found.value,
            f"Moran's I of the residuals, {found.neighbours} nearest zones, 999 permutations: "
            f"{words} (p {p_words(found.p_value)}).",
            p_value=found.p_value,
            expected=found.expected,
        )
    ]


def _held_out_rows(sample: Sample, model: FittedModel, folds: int, seed: int) -> list[Row]:
    if not folds:
        return []
    found = cross_validate(model, sample, folds=folds, seed=seed)
    if found is None:
        return []
    deviance, score, rows_used = found
    rows = [
        _row(
            model.model,
            "cross_validated_deviance",
            deviance,
            f"Poisson deviance per row of the means predicted for rows left out, {folds} parts, "
            f"{rows_used:,} rows; less is better, among models of the same rows.",
        )
    ]
    if np.isfinite(score):
        rows.append(
            _row(
                model.model,
                "cross_validated_log_score",
                score,
                f"Minus the log probability per row of rows left out, {folds} parts, "
                f"{rows_used:,} rows; less is better, among models of the same rows.",
            )
        )
    return rows


def _reach_rows(sample: Sample, model: FittedModel) -> list[Row]:
    """How much of the surplus lies at costs that nobody in the data pays."""
    price = model.price_coefficient
    if not isinstance(FAMILIES[model.model], SemiLogCurve) or price >= 0:
        return []
    visits: FloatArray = sample.visits
    beyond = float(visits @ np.exp(price * (sample.price.max() - sample.price)) / visits.sum())
    return [
        _row(
            model.model,
            "cost_reaches",
            beyond,
            f"Share of the surplus that lies at costs beyond {sample.price.max():,.4g}, the "
            "highest in the data: there the curve is drawn on, not observed.",
        )
    ]


def _influence_rows(sample: Sample, model: FittedModel) -> list[Row]:
    rows = []
    for zone_id, without in influential_zones(model, sample):
        price = model.price_coefficient
        change = price / without - 1 if without else np.nan
        note = f"Coefficient of travel_cost without zone {zone_id}, against {price:.4g} with it"
        if price < 0 and without < 0 and isinstance(FAMILIES[model.model], SemiLogCurve):
            note += f": surplus per trip −1/b {-1 / without:,.4g} instead of {-1 / price:,.4g}"
            note += f" ({change:+.1%})"
        rows.append(
            _row(model.model, "influence", without, f"{note}.", subject=zone_id, expected=price)
        )
    return rows
