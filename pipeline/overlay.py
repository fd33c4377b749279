"""Census figures carried over from units that are not the zones (areal interpolation).

A unit's people lie in it evenly (area), or as finer points with people do (points); its figures go
to the zones in proportion (Goodchild and Lam, "Areal interpolation: a variant of the traditional
spatial problem", Geo-Processing 1, 1980; with finer points a dasymetric map). Counts keep
their sum: what the zones get and what lies outside every zone is what the units hold.
Averages are weighted by the people carried over. Pieces are cut in longitude and latitude, where
borders that are shared stay shared, and measured in a cylindrical equal-area projection, which
keeps meridians and parallels straight, so that the parts of a whole add up to it.
"""

from __future__ import annotations

from dataclasses import dataclass

import geopandas as gpd
import numpy as np
import numpy.typing as npt
import pandas as pd
import shapely
from pyproj import CRS

from pipeline.centroids import middle
from pipeline.errors import InputError

OVERLAP = 1e-6


@dataclass(frozen=True)
class Shares:
    """Where the people of each unit are.

    Attributes
    ----------
    table : `unit, zone` (positions) and `share` of the unit's people in the zone.
    outside : share of each unit's people outside every zone.
    covered : share of each zone's area that the units cover.
    by_area : units without a finer point, whose people are taken to lie evenly.
    """

    table: pd.DataFrame
    outside: npt.NDArray[np.float64]
    covered: npt.NDArray[np.float64]
    by_area: npt.NDArray[np.bool_]


def unit_shares(
    units: gpd.GeoSeries, zones: gpd.GeoSeries, points: gpd.GeoDataFrame | None = None
) -> Shares:
    """How each unit's people are spread over the zones.

    Parameters
    ----------
    units, zones : polygons in EPSG:4326; neither overlap themselves.
    points : finer points with `people`, or None: by area.

    Raises
    ------
    InputError
        Zones, or units, overlap each other, so that people would count twice.
    """
    crs = measuring_crs(zones)
    pieces = _pieces(units, zones, crs)
    areas = pieces["area"].groupby(pieces["unit"]).sum()
    whole = units.to_crs(crs).area.to_numpy()
    inside = areas.reindex(range(len(units)), fill_value=0.0).to_numpy()
    _refuse_overlap(inside / whole, "zones", "census unit")
    in_zone = pieces["area"].groupby(pieces["zone"]).sum()
    covered = (
        in_zone.reindex(range(len(zones)), fill_value=0.0).to_numpy()
        / zones.to_crs(crs).area.to_numpy()
    )
    _refuse_overlap(covered, "census units", "zone")
    even = pieces.assign(share=pieces["area"] / whole[pieces["unit"].to_numpy()])
    by_area = np.ones(len(units), dtype=bool)
    if points is not None:
        by_point = _point_shares(units, zones, points)
        by_area[by_point["unit"].unique()] = False
        even = pd.concat([by_point[by_point["zone"] >= 0], even[by_area[even["unit"].to_numpy()]]])
    table = even[["unit", "zone", "share"]].reset_index(drop=True)
    got = table["share"].groupby(table["unit"]).sum().reindex(range(len(units)), fill_value=0.0)
    outside = np.clip(1.0 - got.to_numpy(), 0.0, 1.0)
    return Shares(table, outside, np.minimum(covered, 1.0), by_area)


def measuring_crs(shapes: gpd.GeoSeries) -> CRS:
    """Cylindrical equal-area projection (WGS 84, metres), true to scale in the shapes' middle."""
    lon, lat = middle(shapes)
    return CRS.from_dict(
        {"proj": "cea", "lon_0": lon, "lat_ts": lat, "datum": "WGS84", "units": "m"}
    )


def _pieces(units: gpd.GeoSeries, zones: gpd.GeoSeries, crs: CRS) -> pd.DataFrame:
    """Area that each unit and zone share, where they share any."""
    of_unit, of_zone = units.to_numpy(), zones.to_numpy()
    unit, zone = shapely.STRtree(of_zone).query(of_unit, predicate="intersects")
    common = shapely.intersection(of_unit[unit], of_zone[zone])
    area = gpd.GeoSeries(common, crs=units.crs).to_crs(crs).area
    return pd.DataFrame({"unit": unit, "zone": zone, "area": area.to_numpy()}).query("area > 0")


def _refuse_overlap(share: npt.NDArray[np.float64], what: str, under: str) -> None:
    if (share > 1 + OVERLAP).any():
        first = int((share > 1 + OVERLAP).argmax())
        raise InputError(
            f"{what} overlap each other: those over {under} {first + 1} (its row) cover "
            f"{share[first]:.1%} of it, so people would count twice. Draw them without overlaps."
        )


def _point_shares(
    units: gpd.GeoSeries, zones: gpd.GeoSeries, points: gpd.GeoDataFrame
) -> pd.DataFrame:
    """Shares of each unit's points in the zones; zone −1 is outside of all."""
    geometry, people = points.geometry.to_numpy(), points["people"].to_numpy(dtype=float)
    unit = first_holding(geometry, units.to_numpy())
    zone = first_holding(geometry, zones.to_numpy())
    frame = pd.DataFrame({"unit": unit, "zone": zone, "people": people})
    frame = frame[(frame["unit"] >= 0) & (frame["people"] > 0)]
    sums = frame.groupby(["unit", "zone"], as_index=False)["people"].sum()
    total = sums.groupby("unit")["people"].transform("sum")
    shares: pd.DataFrame = sums.assign(share=sums["people"] / total)
    return shares


def first_holding(
    points: npt.NDArray[np.object_], polygons: npt.NDArray[np.object_]
) -> npt.NDArray[np.intp]:
    """Position of the first polygon that holds each point; −1 where none does."""
    point, polygon = shapely.STRtree(polygons).query(points, predicate="intersects")
    found = np.full(len(points), len(polygons), dtype=np.intp)
    np.minimum.at(found, point, polygon)
    found[found == len(polygons)] = -1
    return found


def carried_counts(
    counts: npt.NDArray[np.float64], shares: Shares, zones: int
) -> npt.NDArray[np.float64]:
    """A count of the units by zone."""
    table = shares.table
    parts = counts[table["unit"].to_numpy()] * table["share"].to_numpy()
    sums: npt.NDArray[np.float64] = np.bincount(
        table["zone"].to_numpy(), weights=parts, minlength=zones
    ).astype(np.float64)
    return sums


def carried_averages(
    averages: npt.NDArray[np.float64],
    people: npt.NDArray[np.float64],
    shares: Shares,
    zones: int,
) -> npt.NDArray[np.float64]:
    """An average of the units by zone, weighted by people; a unit without one is left out."""
    known = np.isfinite(averages)
    weights = np.where(known, people, 0.0)
    total = carried_counts(np.where(known, averages, 0.0) * weights, shares, zones)
    by = carried_counts(weights, shares, zones)
    means = np.full(zones, np.nan)
    np.divide(total, by, out=means, where=by > 0)
    return means
