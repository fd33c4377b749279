"""From longitude and latitude to the drawing: projection, scale, and compact SVG paths.

The map is drawn in Lambert's azimuthal equal-area projection centred on the data (Snyder, Map
Projections: A Working Manual, USGS Professional Paper 1395, 1987): areas are true, and so are
lengths near the centre. Nothing is ever measured in degrees.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import geopandas as gpd
import numpy as np
import numpy.typing as npt
import pyproj
import shapely

WIDTH = 720.0
TENTHS = 10
TALLEST, LOWEST = 0.9, 0.55
MARGIN = 0.035
WGS84 = "EPSG:4326"


@dataclass(frozen=True)
class MapFrame:
    """A window on the projected world.

    Attributes
    ----------
    crs : local equal-area projection, in metres.
    west, north : its upper left corner, m.
    metres_per_px : scale of the drawing.
    width, height : size of the drawing, px.
    """

    crs: pyproj.CRS
    west: float
    north: float
    metres_per_px: float
    width: float
    height: float

    def project(self, series: gpd.GeoSeries) -> npt.NDArray[np.object_]:
        """Geometries in metres of the local projection."""
        return series.to_crs(self.crs).to_numpy()

    def place(self, lon: float, lat: float) -> tuple[float, float]:
        """Where a point of the world stands in the drawing, px."""
        to_map = pyproj.Transformer.from_crs(WGS84, self.crs, always_xy=True)
        x, y = to_map.transform(lon, lat)
        return (x - self.west) / self.metres_per_px, (self.north - y) / self.metres_per_px

    def tenths(self, points: npt.NDArray[np.float64]) -> npt.NDArray[np.int64]:
        """Points in metres as whole tenths of a px."""
        offset = points - np.array([self.west, self.north])
        tenths = np.rint(offset * [1, -1] * TENTHS / self.metres_per_px)
        return np.asarray(tenths, dtype=np.int64)


def frame_around(points: gpd.GeoSeries) -> MapFrame:
    """The frame that shows all of `points` (any geometry, WGS 84) with a margin."""
    west, south, east, north = (float(bound) for bound in points.total_bounds)
    crs = local_crs((west + east) / 2, (south + north) / 2)
    x0, y0, x1, y1 = (float(bound) for bound in points.to_crs(crs).total_bounds)
    pad = MARGIN * max(x1 - x0, y1 - y0, 1000.0)
    wide, high = x1 - x0 + 2 * pad, y1 - y0 + 2 * pad
    shape = min(max(high / wide, LOWEST), TALLEST)
    metres_per_px = max(wide / WIDTH, high / (shape * WIDTH))
    height = shape * WIDTH
    return MapFrame(
        crs=crs,
        west=(x0 + x1 - metres_per_px * WIDTH) / 2,
        north=(y0 + y1 + metres_per_px * height) / 2,
        metres_per_px=metres_per_px,
        width=WIDTH,
        height=round(height),
    )


def local_crs(lon: float, lat: float) -> pyproj.CRS:
    """Equal-area projection centred on a point, in metres."""
    return pyproj.CRS.from_proj4(
        f"+proj=laea +lat_0={lat:.4f} +lon_0={lon:.4f} +datum=WGS84 +units=m +no_defs"
    )


def simplified_areas(areas: npt.NDArray[np.object_], tolerance_m: float) -> npt.NDArray[np.object_]:
    """Areas with fewer vertices; shared borders stay shared (Visvalingam and Whyatt, 1993)."""
    return np.asarray(shapely.coverage_simplify(areas, tolerance_m), dtype=object)


def simplified_lines(lines: npt.NDArray[np.object_], tolerance_m: float) -> npt.NDArray[np.object_]:
    """Lines joined end to end, then thinned; stretches too short to be seen are left out."""
    merged = shapely.get_parts(shapely.line_merge(shapely.multilinestrings(_parts(lines))))
    thin = shapely.simplify(merged, tolerance_m)
    seen = thin[shapely.length(thin) > tolerance_m]
    return np.asarray(seen, dtype=object)


def _parts(lines: npt.NDArray[np.object_]) -> npt.NDArray[np.object_]:
    parts = shapely.get_parts(lines)
    return np.asarray(parts[~shapely.is_empty(parts)], dtype=object)


def area_path(area: shapely.Geometry, frame: MapFrame) -> str:
    """SVG path of a (multi)polygon with its holes, in whole tenths of a px."""
    rings = shapely.get_rings(shapely.get_parts(area))
    return "".join(_path(shapely.get_coordinates(ring)[:-1], frame) + "z" for ring in rings)


def line_path(lines: npt.NDArray[np.object_], frame: MapFrame) -> str:
    """SVG path of many lines, in whole tenths of a px."""
    return "".join(_path(shapely.get_coordinates(line), frame) for line in lines)


def _path(points: npt.NDArray[np.float64], frame: MapFrame) -> str:
    """One run of points: an absolute start, then steps; steps of nothing are left out."""
    tenths = frame.tenths(points)
    steps = np.diff(tenths, axis=0)
    steps = steps[(steps != 0).any(axis=1)]
    if not len(steps):
        steps = np.array([[1, 0]])
    moves = " ".join(f"{x} {y}" for x, y in steps)
    return f"M{tenths[0][0]} {tenths[0][1]}l{moves}"


def scale_bar(frame: MapFrame) -> tuple[float, float]:
    """A round length that takes about a fifth of the width: its km and its px."""
    wanted_km = frame.width * frame.metres_per_px / 1000 / 5
    size = 10.0 ** math.floor(math.log10(wanted_km))
    length_km = max(step * size for step in (1, 2, 5) if step * size <= wanted_km)
    return length_km, length_km * 1000 / frame.metres_per_px
