"""Reported distances, times and spending of the records against what was routed and priced.

People round what they report, and a few report another trip; so the calibration factor is the
median of reported ÷ routed, which neither moves much.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
import pandas as pd

from pipeline.cost_settings import CostsSettings
from pipeline.errors import CostError
from pipeline.tables import PLACED_STATUSES, REACHED_STATUSES, ReportedCheck

PAIR = ["zone_id", "site_id"]
BAND_ENDS_KM = (25.0, 50.0, 100.0, 200.0, 400.0)
ALL = "all"
SPENT = ("vehicle_cost", "parking_cost", "toll_cost", "ferry_cost")


@dataclass(frozen=True)
class Measure:
    """A figure that records report, and the one that the flow has for it."""

    name: str
    reported: str
    routed: str
    unit: str


MEASURES = (
    Measure("distance", "reported_distance_km", "distance_km", "km"),
    Measure("time", "reported_time_min", "drive_time_min", "min"),
    Measure("spending", "reported_cost", "spent", "currency"),
)


def reported_check(
    routes: pd.DataFrame, costs: pd.DataFrame, origins: pd.DataFrame | None
) -> pd.DataFrame:
    """Bias and mean absolute error of the routed figures, over all records and by distance.

    Parameters
    ----------
    routes : one way, before any calibration.
    costs : what the party spends on vehicle, parking, tolls and ferries, there and back.
    origins : records with `reported_distance_km`, `reported_time_min` (one way) and
        `reported_cost` (per party and trip), as far as the study has them.

    Returns
    -------
    The `reported_check` table; without rows where nothing is reported.
    """
    rows = []
    if origins is not None:
        told = _told(routes, costs, origins)
        for measure in MEASURES:
            if measure.reported in told:
                rows += _rows(told, measure)
    return pd.DataFrame(rows, columns=ReportedCheck.columns())


def reported_pairs(
    routes: pd.DataFrame, costs: pd.DataFrame, origins: pd.DataFrame
) -> pd.DataFrame:
    """Every reported figure beside the one that was routed or priced for it.

    For fitting speeds or factors to what people report; it holds no zone and no record's name.

    Parameters
    ----------
    routes, costs, origins : as for `reported_check`.

    Returns
    -------
    `measure` (distance and time one way, spending of the party there and back), `unit`,
    `distance_km` (routed, one way), `reported`, `routed`; a row per record and measure.
    """
    told = _told(routes, costs, origins)
    columns = ["measure", "unit", "distance_km", "reported", "routed"]
    parts = []
    for one in MEASURES:
        if one.reported in told:
            both = _both(told, one)
            figures = {"reported": both[one.reported], "routed": both[one.routed]}
            parts.append(both.assign(measure=one.name, unit=one.unit, **figures))
    if not parts:
        return pd.DataFrame(columns=columns)
    return pd.concat([part[columns] for part in parts], ignore_index=True)


def calibrated(
    settings: CostsSettings, routes: pd.DataFrame, origins: pd.DataFrame | None
) -> CostsSettings:
    """The settings with the factors that the study takes from its records.

    Raises
    ------
    CostError
        A factor is to come from the records, and none reports the figure.
    """
    found: dict[str, float] = {}
    for measure, key in zip(MEASURES, ("distance_factor", "time_factor"), strict=False):
        if getattr(settings, key) != "records":
            continue
        told = None if origins is None else _with_routes(origins, routes)
        if told is None or measure.reported not in told:
            raise CostError(_nothing_reported(key, measure))
        ratios = _ratios(told, measure)
        if ratios.empty:
            raise CostError(_nothing_reported(key, measure))
        found[key] = float(ratios.median())
    return settings.model_copy(update=found) if found else settings


def _nothing_reported(key: str, measure: Measure) -> str:
    return (
        f'[costs] {key} = "records", but no record with a route reports its {measure.name}; give '
        f"the factor as a number, or name the column in [visits.columns] {measure.reported}."
    )


def _with_routes(origins: pd.DataFrame, routes: pd.DataFrame) -> pd.DataFrame:
    """Records with a zone and a route, with the routed distance and time."""
    reached = routes[routes["route_status"].isin(REACHED_STATUSES)]
    placed = origins[origins["origin_status"].isin(PLACED_STATUSES)]
    ways = reached[[*PAIR, "distance_km", "drive_time_min"]]
    return placed.merge(ways, on=PAIR, how="inner", validate="many_to_one")


def _told(routes: pd.DataFrame, costs: pd.DataFrame, origins: pd.DataFrame) -> pd.DataFrame:
    spent = costs[PAIR].assign(spent=costs[[f"{name}_per_party" for name in SPENT]].sum(axis=1))
    told = _with_routes(origins, routes).merge(spent, on=PAIR, how="left", validate="many_to_one")
    ends = [-math.inf, *BAND_ENDS_KM, math.inf]
    bands = [f"up to {BAND_ENDS_KM[0]:g} km"]
    bands += [f"{a:g} to {b:g} km" for a, b in pairwise(BAND_ENDS_KM)]
    bands += [f"over {BAND_ENDS_KM[-1]:g} km"]
    return told.assign(band=pd.cut(told["distance_km"], ends, labels=bands))


def _both(told: pd.DataFrame, measure: Measure) -> pd.DataFrame:
    return told[told[measure.reported].notna() & told[measure.routed].notna()]


def _ratios(told: pd.DataFrame, measure: Measure) -> pd.Series[float]:
    both = _both(told, measure)
    both = both[(both[measure.routed] > 0) & (both[measure.reported] > 0)]
    return both[measure.reported] / both[measure.routed]


def _rows(told: pd.DataFrame, measure: Measure) -> list[dict[str, object]]:
    both = _both(told, measure)
    groups = [(ALL, both)] + [
        (str(band), rows) for band, rows in both.groupby("band", observed=True) if len(rows)
    ]
    return [_row(measure, band, rows) for band, rows in groups if len(rows)]


def _row(measure: Measure, band: str, rows: pd.DataFrame) -> dict[str, object]:
    error = rows[measure.routed] - rows[measure.reported]
    ratios = _ratios(rows, measure)
    return {
        "measure": measure.name,
        "band": band,
        "records": len(rows),
        "reported_mean": float(rows[measure.reported].mean()),
        "routed_mean": float(rows[measure.routed].mean()),
        "bias": float(error.mean()),
        "mean_absolute_error": float(error.abs().mean()),
        "median_ratio": float(ratios.median()) if len(ratios) else np.nan,
        "unit": measure.unit,
    }
