"""How well the routes stand on the roads: gaps, delay, and times that were measured."""

from __future__ import annotations

from typing import Any

import geopandas as gpd
import numpy as np
import pandas as pd

from pipeline.road_settings import RoadsSettings, RoutesSettings
from pipeline.roads.delays import fit_calibration
from pipeline.roads.graph import RoadGraph
from pipeline.routes import route, summarise_route
from pipeline.study import Study
from pipeline.tables import REACHED_STATUSES

QUANTILES = {"median": 0.5, "p90": 0.9, "p99": 0.99, "largest": 1.0}
Row = tuple[str, float, str, str]


def route_and_check(
    zones: pd.DataFrame,
    sites: pd.DataFrame,
    graph: RoadGraph,
    zone_points: pd.DataFrame | None,
    measured: pd.DataFrame | None,
    *,
    study: Study,
) -> tuple[pd.DataFrame, gpd.GeoDataFrame, pd.DataFrame]:
    """`route`, with a table of how well its results stand on the roads.

    Parameters
    ----------
    measured : times that were measured or reported, or None; see `measured_times`.

    Returns
    -------
    `routes`, `route_lines`, `route_quality`.
    """
    routes, lines = route(zones, sites, graph, zone_points, study=study)
    return routes, lines, route_quality(routes, measured, study.routes, study.roads)


def route_quality(
    routes: pd.DataFrame,
    measured: pd.DataFrame | None,
    settings: RoutesSettings,
    roads: RoadsSettings,
) -> pd.DataFrame:
    """The table `route_quality`."""
    rows = _gaps(routes, settings) + _losses(routes) + _delay(routes, roads)
    if measured is not None:
        rows += _calibration(routes, measured, roads)
    return pd.DataFrame(rows, columns=["measure", "value", "unit", "note"])


def _gaps(routes: pd.DataFrame, settings: RoutesSettings) -> list[Row]:
    """Quantiles of the gaps between points and their roads, and those beyond the limit."""
    by_zone = routes.drop_duplicates("zone_id")
    at_sites = routes[routes["access_id"].notna()].drop_duplicates(["site_id", "access_id"])
    rows: list[Row] = []
    for what, gap_m in (("zone", by_zone["zone_snap_m"]), ("site", at_sites["site_snap_m"])):
        for name, share in QUANTILES.items():
            value = float(gap_m.quantile(share)) if gap_m.notna().any() else np.nan
            note = "straight line, charged at the gap speed of [routes]"
            rows.append((f"gap from {what} to road, {name}", value, "m", note))
    far = by_zone[by_zone["zone_snap_m"] > settings.max_snap_km * 1000]
    note = f"further than routes.max_snap_km = {settings.max_snap_km:g}; not routed"
    if len(far):
        worst = far.iloc[int(far["zone_snap_m"].argmax())]
        note += f"; furthest: zone {worst['zone_id']}, {worst['zone_snap_m'] / 1000:,.1f} km"
    rows.append(("zones too far from a road", float(len(far)), "zones", note))
    return rows


def _losses(routes: pd.DataFrame) -> list[Row]:
    status = routes["route_status"]
    rows: list[Row] = [
        ("pairs without a path", float((status == "no_path").sum()), "pairs", "not priced"),
        (
            "pairs within their own zone",
            float((status == "within_zone").sum()),
            "pairs",
            "mean length over the zone's people",
        ),
    ]
    if "routed_share" in routes:
        partly = routes["routed_share"].between(0, 1 - 1e-9, inclusive="neither")
        note = "the mean is over the points with a route"
        count = float(partly.sum())
        rows.append(("pairs with a route for some of the people", count, "pairs", note))
    return rows


def _delay(routes: pd.DataFrame, roads: RoadsSettings) -> list[Row]:
    """How much of the routed time is delay, and what the times are multiplied by."""
    known = routes[routes["route_status"].isin(REACHED_STATUSES) & routes["delay_min"].notna()]
    total = float(known["drive_time_min"].sum())
    share = float(known["delay_min"].sum()) / total if total > 0 else np.nan
    factor = roads.calibration_factor
    return [
        (
            "share of the routed time that is delay",
            share,
            "share",
            "at signals, signs, crossings, booths, fords and turns; see [roads] delay_s",
        ),
        (
            "calibration factor in use",
            factor,
            "ratio",
            "none: times as modelled" if factor == 1 else "multiplies all times on roads",
        ),
    ]


def _calibration(routes: pd.DataFrame, measured: pd.DataFrame, roads: RoadsSettings) -> list[Row]:
    """The factor that measured times ask for, and how far off times are without and with it."""
    found = fit_calibration(routes, measured)
    wanted = found.factor * roads.calibration_factor
    rows: list[tuple[str, Any, str, str]] = [
        ("measured times compared", found.pairs, "pairs", "routed, with time on roads"),
        (
            "calibration factor by the measured times",
            wanted,
            "ratio",
            f"set roads.calibration_factor = {wanted:.3f} to take it",
        ),
        ("error of the times as they are", found.error_before, "share", "median, of the measured"),
        ("error with that factor", found.error_after, "share", "median, of the measured"),
    ]
    return [(what, float(value), unit, note) for what, value, unit, note in rows]


def summarise_routes(outputs: tuple[pd.DataFrame, gpd.GeoDataFrame, pd.DataFrame]) -> str:
    """One line for people: how many pairs, what became of them, and what measured times say."""
    routes, lines, table = outputs
    return summarise_route((routes, lines)) + _said_of_measured(table)


def _said_of_measured(table: pd.DataFrame) -> str:
    values = table.set_index("measure")["value"]
    wanted = values.get("calibration factor by the measured times")
    if wanted is None:
        return ""
    before = values["error of the times as they are"]
    after = values["error with that factor"]
    change = f"error {before:.0%} to {after:.0%}"
    return f"; measured times ask for calibration_factor {wanted:.3f} ({change})"
