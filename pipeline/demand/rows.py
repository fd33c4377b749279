"""Fitted models as rows of `estimates` and `fit`, and back again."""

from __future__ import annotations

import json
from collections.abc import Hashable
from typing import Any

import numpy as np
import pandas as pd
from scipy import special

from pipeline.demand.choice import Choice
from pipeline.demand.family import ALPHA, DELTA, FittedModel
from pipeline.demand.registry import FAMILIES
from pipeline.demand.sample import FloatArray


def estimate_rows(model: FittedModel, confidence: float) -> pd.DataFrame:
    """Rows of `estimates`: one per term, with the term's row of the covariance matrix."""
    errors = model.std_error
    width = model.quantile(confidence) * errors
    low, high = model.estimate - width, model.estimate + width
    p_values = _p_values(model)
    if model.terms[-1] in (ALPHA, DELTA) and model.estimate[-1] > 0:
        # α (δ) is positive: its interval is that of log α. Zero is its bound, so there is no test.
        ratio = np.exp(width[-1] / model.estimate[-1])
        low[-1], high[-1] = model.estimate[-1] / ratio, model.estimate[-1] * ratio
    return pd.DataFrame(
        {
            "model": model.model,
            "site_id": model.site_id,
            "term": list(model.terms),
            "estimate": model.estimate,
            "std_error": errors,
            "ci_low": low,
            "ci_high": high,
            "p_value": p_values,
            "covariance": [_as_json(row) for row in model.covariance],
        }
    )


def _p_values(model: FittedModel) -> FloatArray:
    statistic = np.abs(model.estimate / model.std_error)
    normal = np.isinf(model.degrees)
    one_sided = special.ndtr(-statistic) if normal else special.stdtr(model.degrees, -statistic)
    p_values = np.asarray(2 * one_sided, dtype=float)
    if model.terms[-1] in (ALPHA, DELTA):
        p_values[-1] = np.nan
    return p_values


def fit_row(model: FittedModel, choice: Choice) -> dict[str, Any]:
    """One row of `fit`."""
    chosen = model.model == choice.model
    notes = [choice.reason] if chosen or choice.model is None else []
    notes += [*model.notes, model.problem]
    test = choice.test
    is_count = hasattr(FAMILIES[model.model], "scores")
    return {
        "model": model.model,
        "site_id": model.site_id,
        "nobs": model.nobs,
        "log_likelihood": model.log_likelihood,
        "aic": model.aic,
        "bic": model.bic,
        "dispersion": model.dispersion,
        "overdispersion_p": test.p_value if test is not None and is_count else np.nan,
        "r_squared": model.r_squared,
        "converged": model.converged,
        "chosen": chosen,
        "errors": model.errors,
        "degrees_of_freedom": model.degrees if np.isfinite(model.degrees) else np.nan,
        "note": " ".join(note for note in notes if note) or None,
    }


def fitted_models(estimates: pd.DataFrame, fit: pd.DataFrame) -> dict[tuple[str, str], FittedModel]:
    """Fitted models by site and model, read back from the two tables."""
    groups = estimates.groupby(["site_id", "model"], sort=False)
    models = {}
    for one in fit.to_dict("records"):
        site_id, model = str(one["site_id"]), str(one["model"])
        models[site_id, model] = _model(groups.get_group((site_id, model)), one)
    return models


def _model(rows: pd.DataFrame, one: dict[Hashable, Any]) -> FittedModel:
    covariance = np.array([_from_json(row) for row in rows["covariance"]])
    note = one["note"] if isinstance(one["note"], str) else ""
    degrees = float(one.get("degrees_of_freedom", np.nan))
    return FittedModel(
        model=one["model"],
        site_id=one["site_id"],
        terms=tuple(rows["term"]),
        estimate=rows["estimate"].to_numpy(dtype=float),
        covariance=covariance,
        nobs=int(one["nobs"]),
        degrees=degrees if np.isfinite(degrees) else np.inf,
        parameters=len(rows),
        log_likelihood=float(one["log_likelihood"]),
        dispersion=float(one["dispersion"]),
        r_squared=float(one["r_squared"]),
        errors=str(one["errors"]),
        notes=() if not one["converged"] else (note,),
        problem="" if one["converged"] else note,
    )


def _as_json(row: FloatArray) -> str:
    return json.dumps([float(v) if np.isfinite(v) else None for v in row])


def _from_json(row: str) -> list[float]:
    return [np.nan if value is None else float(value) for value in json.loads(row)]
