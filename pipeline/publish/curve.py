"""The fitted demand curve of a site, with its band, from the published estimates."""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
import pandas as pd
from scipy.stats import norm

from pipeline.publish.results import Headline, Results

Numbers = npt.NDArray[np.float64]
SAME_SCALE = 0.01
COUNT_MODELS = ("poisson", "negative_binomial")


@dataclass(frozen=True)
class Curve:
    """Visits per 1,000 people (or trips per person) at every cost, with the ends of the band."""

    cost: Numbers
    rate: Numbers
    low: Numbers
    high: Numbers


@dataclass(frozen=True)
class _Terms:
    """Terms of the linear predictor with their estimates and covariance."""

    names: tuple[str, ...]
    estimates: Numbers
    covariance: Numbers | None


def fitted_curve(results: Results, headline: Headline, cost: Numbers) -> Curve | None:
    """Demand by the chosen model at every `cost`, other terms at the market's means.

    The level and the link are taken from the model's own predictions by zone: the curve is
    drawn only where estimates and predictions agree within 1 %. The band is the delta method's
    on the scale of the linear predictor, at the study's level.

    Returns
    -------
    None where the estimates alone do not give the curve.
    """
    rows = results.site_zones(headline.site_id)
    terms = _terms(results.estimates, headline)
    if rows is None:
        return _per_person(results, headline, terms, cost)
    market = rows[rows["in_market"].astype(bool)] if "in_market" in rows else rows
    market = market[market["population"] > 0].dropna(subset=["travel_cost"])
    covariates = [name for name in terms.names if name not in ("const", "travel_cost")]
    if any(name not in market or market[name].isna().any() for name in covariates):
        return None
    scale = _scale(results, market, terms)
    if scale is None or market.empty:
        return None
    weights = market["population"].to_numpy(dtype=np.float64)
    means = {
        name: float(np.average(market[name].to_numpy(dtype=np.float64), weights=weights))
        for name in covariates
    }
    return _curve(terms, means, cost, scale, results.study.surplus.confidence)


def _terms(estimates: pd.DataFrame, headline: Headline) -> _Terms:
    rows = estimates[
        (estimates["site_id"] == headline.site_id) & (estimates["model"] == headline.model)
    ]
    lists = [json.loads(str(value) or "[]") for value in rows["covariance"]]
    full = all(isinstance(part, list) and len(part) == len(rows) for part in lists)
    keep = (~rows["term"].isin(["alpha"])).to_numpy()
    covariance = np.array(lists, dtype=np.float64)[np.ix_(keep, keep)] if full else None
    return _Terms(
        names=tuple(rows["term"][keep]),
        estimates=rows["estimate"].to_numpy(dtype=np.float64)[keep],
        covariance=covariance,
    )


def _design(terms: _Terms, columns: dict[str, Numbers], rows: int) -> Numbers:
    """One row per point, one column per term."""
    ones = np.ones(rows)
    return np.column_stack([ones if n == "const" else columns[n] for n in terms.names])


def _scale(
    results: Results, market: pd.DataFrame, terms: _Terms
) -> tuple[float, Callable[[Numbers], Numbers]] | None:
    """Factor and link that turn the linear predictor into the predicted visits per 1,000."""
    predicted = market[["zone_id", "site_id"]].merge(
        results.zone_surplus, on=["zone_id", "site_id"], how="left", validate="one_to_one"
    )["predicted_visits"]
    rate = predicted.to_numpy(dtype=np.float64) * 1000 / market["population"].to_numpy()
    columns = {n: market[n].to_numpy(dtype=np.float64) for n in terms.names if n != "const"}
    eta = _design(terms, columns, len(market)) @ terms.estimates
    for link in (np.exp, _identity):
        with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
            ratio = rate / link(eta)
        ratio = ratio[np.isfinite(ratio) & (rate > 0)]
        if len(ratio) and np.ptp(ratio) <= SAME_SCALE * abs(np.median(ratio)):
            return float(np.median(ratio)), link
    return None


def _identity(eta: Numbers) -> Numbers:
    return eta


def _per_person(results: Results, headline: Headline, terms: _Terms, cost: Numbers) -> Curve | None:
    """Trips per person where the finished table holds records and cost is the only term."""
    if headline.model not in COUNT_MODELS or set(terms.names) != {"const", "travel_cost"}:
        return None
    return _curve(terms, {}, cost, (1.0, np.exp), results.study.surplus.confidence)


def _curve(
    terms: _Terms,
    means: dict[str, float],
    cost: Numbers,
    scale: tuple[float, Callable[[Numbers], Numbers]],
    confidence: float,
) -> Curve:
    columns = {name: np.full(len(cost), mean) for name, mean in means.items()}
    design = _design(terms, {"travel_cost": cost, **columns}, len(cost))
    eta = design @ terms.estimates
    spread = np.full(len(cost), np.nan)
    if terms.covariance is not None:
        variance = np.einsum("ij,jk,ik->i", design, terms.covariance, design)
        spread = norm.ppf((1 + confidence) / 2) * np.sqrt(np.maximum(variance, 0))
    factor, link = scale
    low, middle, high = (
        np.maximum(factor * link(eta + shift), 0.0) for shift in (-spread, 0 * eta, spread)
    )
    return Curve(cost=cost, rate=middle, low=low, high=high)
