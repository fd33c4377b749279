"""Where lines that were drawn one by one are joined."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt
import shapely
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components
from scipy.spatial import cKDTree

from pipeline.roads.arrays import Float64, Int64

EARTH_M = 6_371_008.8  # mean radius (IUGG); only to see what lies within a tolerance
LEAST_M = 0.006  # half the unit of a stored coordinate


def node_numbers(
    place: Int64, line: Int64, tolerance_m: float, level: npt.NDArray[Any] | None
) -> tuple[Int64, Int64]:
    """Number of the node of each vertex, and the first vertex of each node.

    Parameters
    ----------
    place : (v, 2) vertices in 1e-7 degree, the lines one after the other.
    line : (v,) line that each vertex belongs to, ascending.
    tolerance_m : the end of a line joins ends and vertices of others that are no further.
    level : of each line; given: vertices of one level at the same place are joined too.
    """
    count = len(place)
    is_end = np.ones(count, dtype=np.bool_)
    is_end[1:-1] = (line[1:-1] != line[:-2]) | (line[1:-1] != line[2:])
    ends = np.flatnonzero(is_end)
    points = _on_sphere(place)
    near = cKDTree(points[ends]).sparse_distance_matrix(
        cKDTree(points), max(tolerance_m, LEAST_M), output_type="coo_matrix"
    )
    one, other = ends[near.row], near.col.astype(np.int64)
    joined = (line[one] != line[other]) | is_end[other]
    pairs = [np.stack([one[joined], other[joined]])]
    if level is not None:
        pairs.append(_same_place(place, level[line]))
    a, b = np.concatenate(pairs, axis=1)
    links = coo_array((np.ones(len(a)), (a, b)), shape=(count, count))
    label = connected_components(links, directed=False)[1]
    _, first, number = np.unique(label, return_index=True, return_inverse=True)
    return number.astype(np.int64), first.astype(np.int64)


def _on_sphere(place: Int64) -> Float64:
    """Points in space, so that closeness holds anywhere, metres."""
    lon, lat = np.radians(place[:, 0] / 1e7), np.radians(place[:, 1] / 1e7)
    flat = np.cos(lat)
    unit = np.stack([flat * np.cos(lon), flat * np.sin(lon), np.sin(lat)], axis=1)
    return np.asarray(EARTH_M * unit, dtype=np.float64)


def _same_place(place: Int64, level: npt.NDArray[Any]) -> Int64:
    """Pairs of vertices that follow each other among those of one place and level."""
    number = np.unique(level, return_inverse=True)[1]
    order = np.lexsort((number, place[:, 1], place[:, 0]))
    p, n = place[order], number[order]
    equal = (p[1:] == p[:-1]).all(axis=1) & (n[1:] == n[:-1])
    return np.stack([order[:-1][equal], order[1:][equal]])


def at_crossings(
    lines: npt.NDArray[np.object_], level: npt.NDArray[Any]
) -> npt.NDArray[np.object_]:
    """Lines with a vertex wherever they meet another of their level."""
    one, other = shapely.STRtree(lines).query(lines, predicate="intersects")
    pairs = (one < other) & (level[one] == level[other])
    one, other = one[pairs], other[pairs]
    met, pair = shapely.get_coordinates(
        shapely.intersection(lines[one], lines[other]), return_index=True
    )
    vertices, line = shapely.get_coordinates(lines, return_index=True)
    points = np.concatenate([vertices, met, met])
    whose = np.concatenate([line, one[pair], other[pair]])
    along = shapely.line_locate_point(
        lines[whose[len(line) :]], shapely.points(points[len(line) :])
    )
    order = np.lexsort((np.concatenate([_along(vertices, line), along]), whose))
    points, whose = np.rint(points[order] * 1e7) / 1e7, whose[order]
    fresh = np.ones(len(points), dtype=np.bool_)
    fresh[1:] = (points[1:] != points[:-1]).any(axis=1) | (whose[1:] != whose[:-1])
    return np.asarray(shapely.linestrings(points[fresh], indices=whose[fresh]), dtype=object)


def _along(vertices: Float64, line: Int64) -> Float64:
    """Position of each vertex along its line, in the plane of the map as shapely has it."""
    step = np.hypot(*np.diff(vertices, axis=0, prepend=vertices[:1]).T)
    starts = np.flatnonzero(np.r_[True, line[1:] != line[:-1]])
    step[starts] = 0
    total = np.cumsum(step)
    return np.asarray(total - total[starts][line], dtype=np.float64)
