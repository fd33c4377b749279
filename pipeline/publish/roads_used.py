"""The roads that visitors use: route lines taken apart, and every stretch kept once."""

from __future__ import annotations

import geopandas as gpd
import numpy as np
import numpy.typing as npt
import pandas as pd
import shapely

from pipeline.publish.stretches import take_apart

WGS84 = "EPSG:4326"
COLUMNS = ["site_id", "zones", "visits"]
DECIMALS = 7


def roads_used(route_lines: gpd.GeoDataFrame, zone_table: pd.DataFrame | None) -> gpd.GeoDataFrame:
    """Stretches of road by site, with how many zones' routes run over them and their visits.

    Parameters
    ----------
    route_lines : one line per zone and site, WGS 84.
    zone_table : gives the visits, person-visits per year; a hidden cell adds nothing.

    Returns
    -------
    `site_id, zones, visits, geometry`: lines, cut wherever the traffic changes; `visits` is
    missing without a zone table, and for substitutes. The piece from a zone's own place to the
    next vertex of its road is a line of its own.
    """
    parts = [
        _of_site(site_id, route_lines[route_lines["site_id"] == site_id], zone_table)
        for site_id in sorted(set(route_lines["site_id"]))
    ]
    parts = [part for part in parts if len(part)]
    if not parts:
        return gpd.GeoDataFrame({c: [] for c in COLUMNS}, geometry=[], crs=WGS84)
    return gpd.GeoDataFrame(pd.concat(parts, ignore_index=True), geometry="geometry", crs=WGS84)


def _of_site(
    site_id: str, lines: gpd.GeoDataFrame, zone_table: pd.DataFrame | None
) -> gpd.GeoDataFrame:
    parts = take_apart(lines.geometry.to_numpy(), decimals=DECIMALS)
    zones = np.bincount(parts.stretch, minlength=len(parts.ends)).astype(np.float64)
    visits = _visits(site_id, lines, zone_table)
    carried = np.zeros(len(parts.ends))
    np.add.at(carried, parts.stretch, np.nan_to_num(visits)[parts.line])
    if np.isnan(visits).all():
        carried[:] = np.nan
    return _merged(site_id, parts.ends, zones, carried)


def _visits(
    site_id: str, lines: gpd.GeoDataFrame, zone_table: pd.DataFrame | None
) -> npt.NDArray[np.float64]:
    """Visits of every line's zone; missing where there are none to know of."""
    if zone_table is None:
        return np.full(len(lines), np.nan)
    of_site = zone_table[zone_table["site_id"] == site_id].set_index("zone_id")["visits"]
    return of_site.reindex(lines["zone_id"]).to_numpy(dtype=np.float64)


def _merged(
    site_id: str,
    ends: npt.NDArray[np.float64],
    zones: npt.NDArray[np.float64],
    visits: npt.NDArray[np.float64],
) -> gpd.GeoDataFrame:
    """Stretches with the same traffic joined to lines."""
    order = np.lexsort((visits, zones))
    change = np.diff(zones[order]) != 0
    change |= ~np.isclose(np.diff(visits[order]), 0, equal_nan=True) & ~np.isnan(visits[order][1:])
    rows = []
    for same in np.split(order, np.flatnonzero(change) + 1):
        pieces = np.asarray(shapely.linestrings(ends[np.sort(same)]), dtype=object)
        line = shapely.line_merge(shapely.multilinestrings(pieces))
        traffic = (site_id, int(zones[same[0]]), float(visits[same[0]]))
        rows += [(*traffic, part) for part in shapely.get_parts(line)]
    frame = pd.DataFrame(rows, columns=[*COLUMNS, "geometry"])
    return gpd.GeoDataFrame(frame, geometry="geometry", crs=WGS84)
