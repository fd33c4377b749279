"""Lines from arrays of vertices, cut where they cross the antimeridian."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt
import shapely

from pipeline.roads.arrays import Float64, Int64, offsets

Geometries = npt.NDArray[Any]


def line_strings(lon: Float64, lat: Float64, counts: Int64) -> Geometries:
    """One line for each run of `counts[i]` vertices.

    A line that crosses the 180th meridian becomes a MultiLineString cut there, as RFC 7946,
    section 3.1.9, asks for.
    """
    starts = offsets(counts)
    lines: Geometries = shapely.from_ragged_array(
        shapely.GeometryType.LINESTRING, np.column_stack([lon, lat]), (starts,)
    )
    jumps = np.flatnonzero(np.abs(np.diff(lon)) > 180)
    of_jump = np.searchsorted(starts, jumps, side="right") - 1
    for crossing in np.unique(of_jump[jumps + 1 < starts[of_jump + 1]]):
        run = slice(starts[crossing], starts[crossing + 1])
        lines[crossing] = _cut(lon[run], lat[run])
    return lines


def _cut(lon: Float64, lat: Float64) -> shapely.MultiLineString:
    """Cut one line at the 180th meridian."""
    parts: list[list[tuple[float, float]]] = [[(float(lon[0]), float(lat[0]))]]
    for i in range(1, len(lon)):
        if abs(lon[i] - lon[i - 1]) > 180:
            side = float(np.sign(lon[i - 1])) * 180
            ahead = lon[i] + 2 * side  # the next vertex, beyond the meridian
            share = (side - lon[i - 1]) / (ahead - lon[i - 1])
            middle = float(lat[i - 1] + share * (lat[i] - lat[i - 1]))
            parts[-1].append((side, middle))
            parts.append([(-side, middle)])
        parts[-1].append((float(lon[i]), float(lat[i])))
    return shapely.MultiLineString(parts)
