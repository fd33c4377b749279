"""Lengths and directions on the WGS 84 ellipsoid, fast where roads are mapped closely.

Up to `NEAR_M` and away from the poles Gauss's mid-latitude formula (Rapp, Geometric Geodesy,
part I, 1991; from memory) is as good as the geodesic: it leaves out terms of the third order,
under 0.05 mm there. Everything else is Karney's geodesic (2013), by PROJ.
"""

from __future__ import annotations

import numpy as np
from pyproj import Geod

from pipeline.roads.arrays import Float64, Int32, Int64, compiled
from pipeline.roads.extract import degrees

WGS84 = Geod(ellps="WGS84")
AXIS_M, FLATTENING = WGS84.a, WGS84.f
ECCENTRICITY2 = FLATTENING * (2 - FLATTENING)
NEAR_M = 1000.0
NEAR_LATITUDE = 80.0
UNIT = np.radians(1e-7)  # of a stored coordinate
TURN = 3_600_000_000  # units in a whole turn


def geodesics(lon_e7: Int32, lat_e7: Int32, a: Int64, b: Int64) -> tuple[Float64, Float64]:
    """Length in metres and bearing at the start, degrees from north, from points a to b.

    Parameters
    ----------
    lon_e7, lat_e7 : coordinates of all points, in units of 1e-7 degree.
    a, b : indices of the points.
    """
    length_m, bearing = _near(lon_e7, lat_e7, a, b)
    far = np.flatnonzero(np.isnan(length_m))
    if len(far):
        here, there = a[far], b[far]
        start = degrees(lon_e7[here]), degrees(lat_e7[here])
        azimuth, _, metres = WGS84.inv(*start, degrees(lon_e7[there]), degrees(lat_e7[there]))
        bearing[far], length_m[far] = azimuth, metres
    return length_m, bearing


@compiled
def _near(lon_e7: Int32, lat_e7: Int32, a: Int64, b: Int64) -> tuple[Float64, Float64]:
    """The same by the mid-latitude formula; NaN where that will not do."""
    length_m, bearing = np.empty(len(a)), np.empty(len(a))
    highest = np.radians(NEAR_LATITUDE)
    for k in range(len(a)):
        east = np.int64(lon_e7[b[k]]) - np.int64(lon_e7[a[k]])
        if east > TURN // 2:
            east -= TURN
        elif east < -TURN // 2:
            east += TURN
        north = np.int64(lat_e7[b[k]]) - np.int64(lat_e7[a[k]])
        middle = (np.int64(lat_e7[a[k]]) + np.int64(lat_e7[b[k]])) / 2 * UNIT
        shrink = 1 - ECCENTRICITY2 * np.sin(middle) ** 2
        across = AXIS_M / np.sqrt(shrink)
        x = across * np.cos(middle) * (east * UNIT)
        y = across * (1 - ECCENTRICITY2) / shrink * (north * UNIT)
        length = np.sqrt(x * x + y * y)
        if length > NEAR_M or abs(middle) > highest:
            length = np.nan
        length_m[k], bearing[k] = length, np.degrees(np.arctan2(x, y))
    return length_m, bearing
