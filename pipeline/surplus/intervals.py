"""Intervals of the measures: delta method, and simulation from parameter draws."""

from __future__ import annotations

from typing import Any

import numpy as np

from pipeline.demand.family import FittedModel
from pipeline.demand.registry import FAMILIES
from pipeline.demand.sample import PRICE, FloatArray, Sample
from pipeline.surplus.measures import (
    ANNUAL,
    AREAS,
    PER_PERSON,
    PER_TRIP,
    VISITS_OBSERVED,
    measure_notes,
    measure_values,
)

DELTA = "delta"
SIMULATED = "simulated"
OBSERVED = "observed"
_STEP = 1e-4

Row = dict[str, Any]


def delta_rows(model: FittedModel, sample: Sample, confidence: float) -> list[Row]:
    """Each measure at the estimates, with the interval of the delta method.

    The gradient is taken by central differences over a ten-thousandth of each standard error.
    """
    family = FAMILIES[model.model]
    free = np.flatnonzero(np.isfinite(np.diag(model.covariance)))
    steps = np.zeros((len(free), len(model.terms)))
    steps[np.arange(len(free)), free] = _STEP * model.std_error[free]
    points = np.vstack([model.estimate, model.estimate + steps, model.estimate - steps])
    covariance = model.covariance[np.ix_(free, free)]
    notes = measure_notes(family, sample)
    rows = []
    for measure, values in measure_values(family, sample, points).items():
        if measure in AREAS and model.price_coefficient >= 0:
            rows.append(_row(measure, DELTA, note=no_area_words(model)))
            continue
        if measure == VISITS_OBSERVED:
            rows.append(_row(measure, OBSERVED, float(values[0]), note=notes[measure]))
            continue
        up, down = values[1 : len(free) + 1], values[len(free) + 1 :]
        with np.errstate(invalid="ignore"):
            gradient = (up - down) / (2 * _STEP * model.std_error[free])
            variance = float(gradient @ covariance @ gradient)
        error = float(np.sqrt(variance)) if np.isfinite(variance) else np.nan
        width = model.quantile(confidence) * error
        value = float(values[0])
        rows.append(
            _row(measure, DELTA, value, value - width, value + width, error, note=notes[measure])
        )
    return rows


def simulated_rows(
    model: FittedModel, sample: Sample, draws: FloatArray, confidence: float
) -> list[Row]:
    """Median and percentiles of each measure over parameter draws.

    A draw whose price coefficient is not negative bounds no area and counts as infinite: where
    there are enough of them the interval has no upper end. No standard error is given: the
    ratio −1/b has no variance.
    """
    family = FAMILIES[model.model]
    wrong = float(np.mean(draws[:, model.terms.index(PRICE)] >= 0))
    said = f"{wrong:.2%} of the draws have a price coefficient that is not negative."
    notes = measure_notes(family, sample)
    rows = []
    for measure, values in measure_values(family, sample, draws).items():
        if measure == VISITS_OBSERVED:
            continue
        if measure in AREAS and model.price_coefficient >= 0:
            rows.append(_row(measure, SIMULATED, note=no_area_words(model)))
            continue
        median, low, high = percentiles(values, confidence)
        note = f"{notes[measure]} Median of {len(draws):,} draws. {said}"
        if not np.isfinite(high):
            note += " The interval has no finite upper end."
        rows.append(_row(measure, SIMULATED, median, low, high, note=note))
    return rows


def percentiles(values: FloatArray, confidence: float) -> tuple[float, float, float]:
    """Median, lower and upper end; by order statistics, so that infinite values may stand."""
    levels = [0.5, 0.5 - confidence / 2, 0.5 + confidence / 2]
    found = np.quantile(values, levels, axis=0, method="inverted_cdf")
    return float(found[0]), float(found[1]), float(found[2])


def no_area_words(model: FittedModel) -> str:
    """Why a model without a falling demand has no surplus."""
    return (
        f"No finite surplus: the price coefficient is {model.price_coefficient:.4g}, not negative. "
        "Visits do not fall with cost in these data, so no area under the curve is bounded."
    )


def missing_rows(model: FittedModel) -> list[Row]:
    """Rows of a model that has no verified fit."""
    return [
        _row(measure, method, note=f"No fit: {model.problem}")
        for measure in (PER_TRIP, ANNUAL, PER_PERSON)
        for method in (DELTA, SIMULATED)
    ]


def _row(
    measure: str,
    method: str,
    value: float = np.nan,
    low: float = np.nan,
    high: float = np.nan,
    error: float = np.nan,
    *,
    note: str,
) -> Row:
    figures = {"value": value, "std_error": error, "ci_low": low, "ci_high": high}
    finite = {name: v if np.isfinite(v) else np.nan for name, v in figures.items()}
    return {"measure": measure, **finite, "method": method, "note": note}
