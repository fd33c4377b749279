"""The nearest stretch of road to a point, by a grid of cells.

A stretch lies between two neighbouring vertices of an edge. It is listed in every cell that its
box touches; the cells around a point are looked through in rings until no further one can hold
anything nearer. Coordinates are taken in the plane that touches the ellipsoid at the point.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from pipeline.roads.arrays import Float64, Int32, Int64, compiled

PER_CELL = 4  # stretches, on average
E7 = 1e-7


Shape = tuple[int, float, float, float, float, int, int]
Vertices = tuple[Int32, Int32]


@dataclass(frozen=True)
class Grid:
    """Cells over some stretches.

    Attributes
    ----------
    vertices : longitude and latitude of all vertices, in units of 1e-7 degree.
    shape : the longitude that counts as zero, so that roads on both sides of the antimeridian
        lie together; west and south corner, width and height of a cell in the same units; how
        many columns and rows.
    first, listed : cell `c` (by rows) lists the stretches that start at the vertices
        ``listed[first[c]:first[c + 1]]``.
    """

    vertices: Vertices
    shape: Shape
    first: Int64
    listed: Int32

    @classmethod
    def of(cls, vertices: Vertices, edge_first: Int64, edges: Int64) -> Grid:
        """Cells over the stretches of some edges, at least one."""
        origin = int(vertices[0][edge_first[edges[0]]])
        *box, count = _extent(*vertices, edge_first, edges, origin)
        west, east, south, north = map(int, box)
        cells = max(1, count // PER_CELL)
        shrink = max(0.01, float(np.cos(np.radians((south + north) / 2 * E7))))
        wide, high = max(east - west, 1) * shrink, float(max(north - south, 1))
        side = max(float(np.sqrt(wide * high / cells)), max(wide, high) / cells, 1.0)
        width = side / shrink
        columns, rows = int((east - west) / width) + 1, int((north - south) / side) + 1
        shape = (origin, float(west), float(south), width, side, columns, rows)
        first = np.zeros(columns * rows + 1, dtype=np.int64)
        _list(*vertices, edge_first, edges, shape, first, np.empty(0, dtype=np.int32))
        first[1:] = np.cumsum(first[:-1])
        first[0] = 0
        listed = np.empty(int(first[-1]), dtype=np.int32)
        _list(*vertices, edge_first, edges, shape, first, listed)
        first[1:] = first[:-1].copy()
        first[0] = 0
        return cls(vertices, shape, first, listed)

    def nearest(
        self, lon: Float64, lat: Float64, east_m: Float64, north_m: Float64
    ) -> tuple[Int64, Float64]:
        """Vertex at which the nearest stretch of each point starts, and the share along it.

        Parameters
        ----------
        lon, lat : the points, degrees.
        east_m, north_m : metres per degree at each of them.
        """
        points = (lon, lat, east_m, north_m)
        return _nearest(*self.vertices, self.shape, self.first, self.listed, *points)


@compiled
def _turned(lon_e7: np.int64, origin: np.int64 | int) -> np.int64:
    """Longitude from the origin on, between -180 and 180 degrees."""
    return (lon_e7 - origin + 1_800_000_000) % 3_600_000_000 - 1_800_000_000


@compiled
def _ends(
    lon_e7: Int32, lat_e7: Int32, vertex: int, origin: int
) -> tuple[np.int64, np.int64, np.int64, np.int64]:
    """West, east, south and north of a stretch; one that crosses 180 degrees runs on."""
    x = _turned(np.int64(lon_e7[vertex]), origin)
    there = x + _turned(np.int64(lon_e7[vertex + 1]), np.int64(lon_e7[vertex]))
    y, up = np.int64(lat_e7[vertex]), np.int64(lat_e7[vertex + 1])
    return min(x, there), max(x, there), min(y, up), max(y, up)


@compiled
def _extent(
    lon_e7: Int32, lat_e7: Int32, edge_first: Int64, edges: Int64, origin: int
) -> tuple[np.int64, np.int64, np.int64, np.int64, int]:
    """Box of all stretches, and how many there are."""
    least, most = np.int64(4_000_000_000), np.int64(-4_000_000_000)
    west, east, south, north, count = least, most, least, most, 0
    for edge in edges:
        for vertex in range(edge_first[edge], edge_first[edge + 1] - 1):
            x, x_end, y, y_end = _ends(lon_e7, lat_e7, vertex, origin)
            west, east = min(west, x), max(east, x_end)
            south, north = min(south, y), max(north, y_end)
            count += 1
    return west, east, south, north, count


@compiled
def _list(
    lon_e7: Int32,
    lat_e7: Int32,
    edge_first: Int64,
    edges: Int64,
    shape: Shape,
    first: Int64,
    listed: Int32,
) -> None:
    """Put every stretch on the list of its cells, or (without lists) count them.

    `first` says where the next one of each cell goes, and moves on.
    """
    origin, west, south, width, height, columns, _ = shape
    counting = len(listed) == 0
    for edge in edges:
        for vertex in range(edge_first[edge], edge_first[edge + 1] - 1):
            x, x_end, y, y_end = _ends(lon_e7, lat_e7, vertex, origin)
            for row in range(int((y - south) / height), int((y_end - south) / height) + 1):
                for column in range(int((x - west) / width), int((x_end - west) / width) + 1):
                    cell = row * columns + column
                    if not counting:
                        listed[first[cell]] = vertex
                    first[cell] += 1


@compiled
def _nearest(
    lon_e7: Int32,
    lat_e7: Int32,
    shape: Shape,
    first: Int64,
    listed: Int32,
    lon: Float64,
    lat: Float64,
    east_m: Float64,
    north_m: Float64,
) -> tuple[Int64, Float64]:
    """Look through rings of cells around each point, and around it once round the earth."""
    origin, west, south, width, height, columns, rows = shape
    found, share = np.full(len(lon), -1, dtype=np.int64), np.zeros(len(lon))
    for point in range(len(lon)):
        best = (np.inf, np.int64(-1), 0.0)
        here = (lon[point], lat[point], east_m[point], north_m[point])
        east = (lon[point] * 1e7 - origin + 1.8e9) % 3.6e9 - 1.8e9
        y = (lat[point] * 1e7 - south) / height
        wide_m, high_m = width * E7 * east_m[point], height * E7 * north_m[point]
        row = int(np.floor(y))
        for around in (0.0, 3.6e9, -3.6e9):
            x = (east + around - west) / width
            column = int(np.floor(x))
            # The first ring that meets the cells, and the last one that does.
            ring = max(0, -column, column - columns + 1, -row, row - rows + 1)
            last = max(column, columns - 1 - column, row, rows - 1 - row)
            while ring <= last:
                past_x = min(x - (column - ring + 1), column + ring - x) * wide_m
                past_y = min(y - (row - ring + 1), row + ring - y) * high_m
                past = max(min(past_x, past_y), 0.0)
                if past * past > best[0]:
                    break
                at = (row, column, ring)
                best = _in_ring(lon_e7, lat_e7, shape, first, listed, at, here, best)
                ring += 1
        found[point], share[point] = best[1], best[2]
    return found, share


@compiled
def _in_ring(
    lon_e7: Int32,
    lat_e7: Int32,
    shape: Shape,
    first: Int64,
    listed: Int32,
    at: tuple[int, int, int],
    here: tuple[float, float, float, float],
    best: tuple[float, np.int64, float],
) -> tuple[float, np.int64, float]:
    """The nearest of the best so far and the stretches in a ring of cells; the first of equals."""
    columns, rows = shape[5], shape[6]
    row, column, ring = at
    gap2, nearest, share = best
    for r in range(max(row - ring, 0), min(row + ring, rows - 1) + 1):
        whole = ring == 0 or abs(r - row) == ring
        for c in range(column - ring, column + ring + 1, 1 if whole else 2 * ring):
            if c < 0 or c >= columns:
                continue
            cell = r * columns + c
            for vertex in listed[first[cell] : first[cell + 1]]:
                its_gap2, along = _gap(lon_e7, lat_e7, vertex, here)
                if its_gap2 < gap2 or (its_gap2 == gap2 and vertex < nearest):
                    gap2, nearest, share = its_gap2, np.int64(vertex), along
    return gap2, nearest, share


@compiled
def _gap(
    lon_e7: Int32,
    lat_e7: Int32,
    vertex: int,
    here: tuple[float, float, float, float],
) -> tuple[float, float]:
    """Squared distance from a point to a stretch, and how far along it the nearest place is."""
    lon, lat, east_m, north_m = here
    ax = ((lon_e7[vertex] * E7 - lon + 180) % 360 - 180) * east_m
    bx = ((lon_e7[vertex + 1] * E7 - lon + 180) % 360 - 180) * east_m
    ay, by = (lat_e7[vertex] * E7 - lat) * north_m, (lat_e7[vertex + 1] * E7 - lat) * north_m
    dx, dy = bx - ax, by - ay
    length2 = dx * dx + dy * dy
    share = -(ax * dx + ay * dy) / length2 if length2 > 0 else 0.0
    share = min(max(share, 0.0), 1.0)
    return (ax + share * dx) ** 2 + (ay + share * dy) ** 2, share
