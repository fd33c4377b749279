"""Post-stratification: weights that give the known totals of several columns at once.

Iterative proportional fitting (Deming and Stephan, "On a least squares adjustment of a sampled
frequency table when the expected marginal totals are known", Annals of Mathematical Statistics
11, 1940): the weights of each class are multiplied by its known total over its sum, column by
column, until nothing changes.
"""

from __future__ import annotations

import difflib

import numpy as np
import numpy.typing as npt
import pandas as pd

from pipeline.errors import GeocodingError
from pipeline.parties import counted_trips
from pipeline.visit_settings import VisitsSettings

MOST_ROUNDS = 1000
CLOSE_ENOUGH = 1e-10


def rake_weights(origins: pd.DataFrame, visits: VisitsSettings) -> pd.DataFrame:
    """Rake the weights of all records but the foreign ones to [visits] margins.

    What is counted is the trip (of household surveys the person). Where the totals of one
    column do not add up to those of the first, they are taken as shares of it.

    Returns
    -------
    The records with new `weight` and, beside it, `weight_before_raking`; unchanged where the
    study knows no margins.

    Raises
    ------
    GeocodingError
        A column is not there, a record has no class or one without a total, a total is of no
        record, or no weights fit.
    """
    if not visits.margins:
        return origins
    raked = (origins["origin_status"] != "foreign").to_numpy()
    part = origins[raked]
    counts = part["weight"] if visits.kind == "household" else counted_trips(part, visits.kind)
    classes = [_classes(part, name, totals) for name, totals in visits.margins.items()]
    goals = _agreeing_goals([np.array([*t.values()], dtype=float) for t in visits.margins.values()])
    factors = rake(np.asarray(counts, dtype=np.float64), classes, goals)
    if factors is None:
        raise GeocodingError(
            "no weights give all of [visits] margins at once "
            f"({', '.join(visits.margins)}): some combinations of classes have no record. Merge "
            "classes, or leave one column out."
        )
    weight = origins["weight"].to_numpy(dtype=float).copy()
    weight[raked] *= factors
    return origins.assign(weight=weight, weight_before_raking=origins["weight"])


def rake(
    counts: npt.NDArray[np.float64],
    classes: list[npt.NDArray[np.intp]],
    goals: list[npt.NDArray[np.float64]],
) -> npt.NDArray[np.float64] | None:
    """Factors of the counts that give every goal.

    Parameters
    ----------
    counts : what each record counts for.
    classes : per column, the class of each record.
    goals : per column, the total of each class; of all columns the same sum.

    Returns
    -------
    One factor per record; None where there are none.
    """
    factors = np.ones(len(counts))
    for _ in range(MOST_ROUNDS):
        worst = 0.0
        for position, goal in zip(classes, goals, strict=True):
            sums = np.bincount(position, weights=counts * factors, minlength=len(goal))
            if (sums <= 0).any():
                return None
            step = goal / sums
            worst = max(worst, float(np.abs(step - 1).max()))
            factors = factors * step[position]
        if worst < CLOSE_ENOUGH:
            return factors
    return None


def _classes(part: pd.DataFrame, name: str, totals: dict[str, float]) -> npt.NDArray[np.intp]:
    """Position of each record's class among the totals."""
    if name not in part:
        near = difflib.get_close_matches(name, list(part.columns), n=1, cutoff=0.0)
        raise GeocodingError(
            f"[visits.margins] names {name!r}, which is no column of the records; the nearest is "
            f"{near[0]!r}. Map the column in [visits.columns], or correct the name."
        )
    values = _as_text(part[name])
    position = pd.Index(list(totals)).get_indexer(pd.Index(values))
    lost = position < 0
    if lost.any():
        first = int(lost.argmax())
        value = values.iloc[first]
        what = "no value" if pd.isna(value) else f"{value!r}, of which no total is known"
        raise GeocodingError(
            f"[visits.margins.{name}]: {int(lost.sum())} record(s) cannot be weighted; first: "
            f"record {part['record_id'].iloc[first]!r} has {what} in column {name!r} "
            f"(totals: {', '.join(totals)}). Complete the records or the totals."
        )
    empty = set(range(len(totals))) - set(position)
    if empty:
        raise GeocodingError(
            f"[visits.margins.{name}]: no record is of the class {list(totals)[min(empty)]!r}, "
            "so none can stand for it. Merge it with another class."
        )
    return position


def _as_text(values: pd.Series) -> pd.Series[str]:
    """Classes as the study file writes them: 2 for a 2.0."""
    if pd.api.types.is_float_dtype(values):
        return values.map(lambda value: f"{value:g}", na_action="ignore").astype("str")
    return values.astype("str").where(values.notna())


def _agreeing_goals(goals: list[npt.NDArray[np.float64]]) -> list[npt.NDArray[np.float64]]:
    """All columns' totals with the sum of the first's."""
    total = goals[0].sum()
    return [goal * (total / goal.sum()) for goal in goals]
