"""Records whose home is a point: the zone whose polygon holds it."""

from __future__ import annotations

import geopandas as gpd
import numpy as np
import pandas as pd
import shapely

from pipeline.centroids import POLYGONS
from pipeline.errors import GeocodingError
from pipeline.tables import PLACED_STATUSES


def place_points(origins: pd.DataFrame, zones: pd.DataFrame) -> pd.DataFrame:
    """Place the records that no code has placed by their points.

    A point on the border of several zones belongs to the one that comes first in the zones
    file, so that the same input gives the same zone.

    Parameters
    ----------
    origins : records with `lon, lat` (WGS 84), `zone_id`, `origin_status`, `origin_note`.
    zones : the `zones` table with polygons.

    Returns
    -------
    The records; those with a point but no zone are now `point_in_zone` or `outside_zones`.

    Raises
    ------
    GeocodingError
        The zones have no polygons to place points in.
    """
    # A code of another country says more than a point, which may be where the car was hired.
    settled = origins["origin_status"].isin([*PLACED_STATUSES, "foreign"])
    to_place = ~settled & origins["lon"].notna() & origins["lat"].notna()
    if not to_place.any():
        return origins
    found = zone_positions(origins.loc[to_place, "lon"], origins.loc[to_place, "lat"], zones)
    inside = found >= 0
    zone_ids = zones["zone_id"].to_numpy(dtype=object)
    placed = origins.loc[to_place, ["origin_status", "origin_note"]].copy()
    by_code = "placed by its point; its code is " + placed["origin_status"]
    placed["origin_note"] = by_code.where(placed["origin_status"] != "missing")
    ids = pd.Series(zone_ids[np.maximum(found, 0)], index=placed.index)
    placed["zone_id"] = ids.where(inside)
    placed["origin_status"] = np.where(inside, "point_in_zone", "outside_zones")
    result = origins.copy()
    for name in ("zone_id", "origin_status", "origin_note"):
        result.loc[to_place, name] = placed[name]
    return result


def zone_positions(
    lon: pd.Series[float], lat: pd.Series[float], zones: pd.DataFrame
) -> np.ndarray[tuple[int], np.dtype[np.intp]]:
    """Position of the zone that holds each point; -1 where none does."""
    shapes = zones.get("geometry")
    if shapes is None or not gpd.GeoSeries(shapes).geom_type.isin(POLYGONS).all():
        raise GeocodingError(
            f"{len(lon)} visit records are to be placed by their points, but the zones have no "
            "polygons. Bring a layer of polygons in [zones] file, or the records' postal codes."
        )
    points = np.asarray(shapely.points(lon.to_numpy(), lat.to_numpy()), dtype=object)
    point, zone = shapely.STRtree(np.asarray(shapes)).query(points, predicate="intersects")
    found = np.full(len(points), len(shapes), dtype=np.intp)
    np.minimum.at(found, point, zone)
    found[found == len(shapes)] = -1
    return found
