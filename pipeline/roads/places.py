"""Places on roads: ties points to the nearest place on the nearest road."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
import shapely
from scipy.spatial import cKDTree

from pipeline.roads.arrays import Bool, Float32, Float64, Int64, offsets, ranges
from pipeline.roads.extract import degrees
from pipeline.roads.graph import CLOSED, TOLL, UNPAVED, RoadGraph, pack
from pipeline.roads.segments import WGS84

AXIS_M, FLATTENING = WGS84.a, WGS84.f
ECCENTRICITY2 = FLATTENING * (2 - FLATTENING)
HERE_M = 0.0005  # half the unit of a packed distance
CHUNK = 2000  # points whose candidates are looked at together


@dataclass(frozen=True)
class Nearest:
    """Nearest place of each point on some edges; all arrays have one value per point.

    Attributes
    ----------
    edge : number of the edge; -1: none within reach.
    vertex : vertex of the graph at which the stretch with the place starts.
    share : how far along that stretch the place is, 0 to 1.
    lon, lat : the place, degrees; NaN where there is none.
    gap_m : geodesic distance from the point; where none is within reach, that of the nearest
        vertex; infinite where there are no edges at all.
    """

    edge: Int64
    vertex: Int64
    share: Float64
    lon: Float64
    lat: Float64
    gap_m: Float64


@dataclass(frozen=True)
class Places:
    """Places that split an edge: what it costs to drive from them and to them.

    Attributes
    ----------
    edge : edge that each place is on; -1: the point is tied to no road.
    to_start, to_end, from_start, from_end : packed costs between the place and the ends of its
        edge; -1 where that direction is closed.
    to_start_delay_s, to_end_delay_s, from_start_delay_s, from_end_delay_s : delays in those costs.
    start_toll_m, end_toll_m, start_unpaved_m, end_unpaved_m : on either side of the place.
    nearest : where the place is.
    """

    edge: Int64
    to_start: Int64
    to_end: Int64
    from_start: Int64
    from_end: Int64
    to_start_delay_s: Float64
    to_end_delay_s: Float64
    from_start_delay_s: Float64
    from_end_delay_s: Float64
    start_toll_m: Float64
    end_toll_m: Float64
    start_unpaved_m: Float64
    end_unpaved_m: Float64
    nearest: Nearest


def nearest_places(
    graph: RoadGraph, edges: Int64, lon: Float64, lat: Float64, *, reach_m: float
) -> Nearest:
    """Nearest place on any of some edges, exact to the geodesic within `reach_m`.

    The nearest vertex bounds the distance; every edge that touches a box of that size around
    the point is then looked at, stretch by stretch, in the plane that touches the ellipsoid at
    the point. Long stretches and the antimeridian are no special cases.

    Parameters
    ----------
    graph : the road graph.
    edges : numbers of the edges that count.
    lon, lat : the points, degrees.
    reach_m : places further away need not be found.
    """
    result = _nowhere(len(lon))
    if not len(edges):
        return result
    counts = np.diff(graph.edge_first)[edges].astype(np.int64)
    vertices = ranges(graph.edge_first[:-1][edges].astype(np.int64), counts)
    x, y = degrees(graph.vertex_lon_e7[vertices]), degrees(graph.vertex_lat_e7[vertices])
    _, at = cKDTree(_on_sphere(x, y), balanced_tree=False).query(_on_sphere(lon, lat))
    result.gap_m[:] = WGS84.inv(lon, lat, x[at], y[at])[2]
    boxes = shapely.STRtree(_boxes(x, y, counts))
    # A place within reach can be further from any vertex by half the longest stretch.
    limit_m = reach_m + _longest_stretch_m(x, y, counts) / 2
    within = np.flatnonzero(result.gap_m <= limit_m)
    for chunk in np.array_split(within, max(1, -(-len(within) // CHUNK))):
        if len(chunk):
            _refine(graph, edges, boxes, chunk, lon, lat, result)
    return result


def _nowhere(count: int) -> Nearest:
    return Nearest(
        edge=np.full(count, -1, dtype=np.int64),
        vertex=np.full(count, -1, dtype=np.int64),
        share=np.full(count, np.nan),
        lon=np.full(count, np.nan),
        lat=np.full(count, np.nan),
        gap_m=np.full(count, np.inf),
    )


def _on_sphere(lon: Float64, lat: Float64) -> Float64:
    """Unit vectors; only for finding a near vertex, never for a distance."""
    theta, phi = np.radians(lon), np.radians(lat)
    return np.column_stack([np.cos(phi) * np.cos(theta), np.cos(phi) * np.sin(theta), np.sin(phi)])


def _turn(degrees: Float64) -> Float64:
    """Difference of longitudes between -180 and 180."""
    return np.asarray((degrees + 180) % 360 - 180)


def _boxes(x: Float64, y: Float64, counts: Int64) -> npt.NDArray[np.object_]:
    """Box of each run of vertices; one that crosses the antimeridian runs on beyond 180."""
    starts = offsets(counts)[:-1]
    origin = np.repeat(x[starts], counts)
    unrolled = origin + _turn(x - origin)
    return np.asarray(
        shapely.box(
            np.minimum.reduceat(unrolled, starts),
            np.minimum.reduceat(y, starts),
            np.maximum.reduceat(unrolled, starts),
            np.maximum.reduceat(y, starts),
        )
    )


def _longest_stretch_m(x: Float64, y: Float64, counts: Int64) -> float:
    step = np.linalg.norm(np.diff(_on_sphere(x, y), axis=0), axis=1)
    step[offsets(counts)[1:-1] - 1] = 0  # from one edge to the next
    return float(step.max(initial=0)) * AXIS_M * 1.01


def _scales(lat: Float64) -> tuple[Float64, Float64]:
    """Metres per degree of longitude and of latitude on the ellipsoid at a latitude."""
    phi = np.radians(lat)
    shrink = 1 - ECCENTRICITY2 * np.sin(phi) ** 2
    east = AXIS_M / np.sqrt(shrink) * np.cos(phi)
    north = AXIS_M * (1 - ECCENTRICITY2) / shrink**1.5
    return np.radians(east), np.radians(north)


def _refine(
    graph: RoadGraph,
    edges: Int64,
    boxes: shapely.STRtree,
    chunk: Int64,
    lon: Float64,
    lat: Float64,
    result: Nearest,
) -> None:
    """Put the exact nearest place of the points of a chunk into `result`."""
    point, candidate = _candidates(boxes, lon[chunk], lat[chunk], result.gap_m[chunk])
    edge = edges[candidate]
    counts = (np.diff(graph.edge_first)[edge] - 1).astype(np.int64)
    vertex = ranges(graph.edge_first[:-1][edge].astype(np.int64), counts)
    owner = chunk[np.repeat(point, counts)]
    edge = np.repeat(edge, counts)
    east, north = _scales(lat[owner])

    def plane(v: Int64) -> tuple[Float64, Float64]:
        x = _turn(degrees(graph.vertex_lon_e7[v]) - lon[owner]) * east
        return x, (degrees(graph.vertex_lat_e7[v]) - lat[owner]) * north

    (ax, ay), (bx, by) = plane(vertex), plane(vertex + 1)
    dx, dy = bx - ax, by - ay
    length2 = dx**2 + dy**2
    share = -(ax * dx + ay * dy) / np.where(length2 > 0, length2, 1)
    share = np.clip(share, 0, 1)
    gap2 = (ax + share * dx) ** 2 + (ay + share * dy) ** 2
    starts = np.flatnonzero(np.diff(owner, prepend=-1))
    least = np.minimum.reduceat(gap2, starts)
    best = np.flatnonzero(gap2 == np.repeat(least, np.diff(np.append(starts, len(owner)))))
    best = best[np.flatnonzero(np.diff(owner[best], prepend=-1))]
    who, v, s = owner[best], vertex[best], share[best]
    x0, y0 = degrees(graph.vertex_lon_e7[v]), degrees(graph.vertex_lat_e7[v])
    place_lon = _turn(x0 + s * _turn(degrees(graph.vertex_lon_e7[v + 1]) - x0))
    place_lat = y0 + s * (degrees(graph.vertex_lat_e7[v + 1]) - y0)
    result.edge[who], result.vertex[who], result.share[who] = edge[best], v, s
    result.lon[who], result.lat[who] = place_lon, place_lat
    result.gap_m[who] = WGS84.inv(lon[who], lat[who], place_lon, place_lat)[2]


def _candidates(
    boxes: shapely.STRtree, lon: Float64, lat: Float64, radius_m: Float64
) -> tuple[Int64, Int64]:
    """Pairs of a point and an edge whose box comes within the radius, by point, then edge."""
    radius_m = radius_m * 1.001 + 0.01  # room for the plane's error
    high = np.degrees(radius_m / 6.33e6)  # the ellipsoid's least radius of curvature is 6,335 km
    furthest = np.minimum(np.abs(lat) + high, 89.99)
    wide = np.minimum(high / np.cos(np.radians(furthest)), 180.0)
    pairs = []
    for shift in (0, 360, -360):
        x = lon + shift
        around = shapely.box(x - wide, lat - high, x + wide, lat + high)
        pairs.append(boxes.query(around))
    point, edge = np.unique(np.concatenate(pairs, axis=1), axis=1)
    return point.astype(np.int64), edge.astype(np.int64)


def split_edges(graph: RoadGraph, nearest: Nearest, usable: Bool) -> Places:
    """What it costs to drive between each place and the ends of its edge.

    Parameters
    ----------
    graph : the road graph.
    nearest : where the places are.
    usable : points that are tied to their road; the others get no place.
    """
    edge = np.where(usable, nearest.edge, -1)
    at = np.flatnonzero(edge >= 0)
    sides = _sides(graph, edge[at], nearest.vertex[at], nearest.share[at])
    (start_m, start_along, start_back, start_toll, start_unpaved), end = sides
    delays = _side_delays(graph, edge[at], nearest.vertex[at])
    end_m, end_along, end_back, end_toll, end_unpaved = end
    forward_open = graph.edge_forward_cost[edge[at]] != CLOSED
    backward_open = graph.edge_backward_cost[edge[at]] != CLOSED

    def cost(drive_s: Float64, delay_s: Float64, length_m: Float64, is_open: Bool) -> Int64:
        result = np.full(len(edge), CLOSED, dtype=np.int64)
        # Who stands at a junction can take any road there, not just the one tied to.
        is_there = length_m < HERE_M
        time_s = np.where(is_there, 0, np.where(is_open, drive_s + delay_s, np.nan))
        result[at] = pack(time_s, np.where(is_there, 0, length_m))
        return result

    def spread(values: Float64) -> Float64:
        result = np.zeros(len(edge))
        result[at] = values
        return result

    return Places(
        edge=edge,
        to_start=cost(start_back, delays[0], start_m, backward_open),
        to_end=cost(end_along, delays[1], end_m, forward_open),
        from_start=cost(start_along, delays[2], start_m, forward_open),
        from_end=cost(end_back, delays[3], end_m, backward_open),
        to_start_delay_s=spread(np.where(start_m < HERE_M, 0, delays[0])),
        to_end_delay_s=spread(np.where(end_m < HERE_M, 0, delays[1])),
        from_start_delay_s=spread(np.where(start_m < HERE_M, 0, delays[2])),
        from_end_delay_s=spread(np.where(end_m < HERE_M, 0, delays[3])),
        start_toll_m=spread(start_toll),
        end_toll_m=spread(end_toll),
        start_unpaved_m=spread(start_unpaved),
        end_unpaved_m=spread(end_unpaved),
        nearest=nearest,
    )


def _sides(
    graph: RoadGraph, edge: Int64, vertex: Int64, share: Float64
) -> tuple[list[Float64], list[Float64]]:
    """Sums on the start side and on the end side of each place.

    Each list holds length (m), time along and against the edge (s), toll and unpaved (m).
    """
    if not len(edge):
        return [np.zeros(0)] * 5, [np.zeros(0)] * 5
    counts = (np.diff(graph.edge_first)[edge] - 1).astype(np.int64)
    v = ranges(graph.edge_first[:-1][edge].astype(np.int64), counts)
    x, y = graph.vertex_lon_e7, graph.vertex_lat_e7
    here, there = (degrees(x[v]), degrees(y[v])), (degrees(x[v + 1]), degrees(y[v + 1]))
    length = np.asarray(WGS84.inv(*here, *there)[2])
    before = np.clip(np.repeat(vertex, counts) - v, 0, 1).astype(np.float64)
    before = np.where(v == np.repeat(vertex, counts), np.repeat(share, counts), before)
    values = [
        length,
        _seconds(length, graph.vertex_forward_kmh[v]),
        _seconds(length, graph.vertex_backward_kmh[v]),
        length * ((graph.vertex_flags[v] & TOLL) > 0),
        length * ((graph.vertex_flags[v] & UNPAVED) > 0),
    ]
    starts = offsets(counts)[:-1]
    return (
        [np.add.reduceat(value * before, starts) for value in values],
        [np.add.reduceat(value * (1 - before), starts) for value in values],
    )


def _side_delays(graph: RoadGraph, edge: Int64, vertex: Int64) -> tuple[Float64, ...]:
    """Delays from each place to the start and the end of its edge, and from these to it.

    The delay of a stretch waits at its far end: who stops on the stretch does not pay it.
    """
    if not len(edge):
        return (np.zeros(0),) * 4
    counts = (np.diff(graph.edge_first)[edge] - 1).astype(np.int64)
    v = ranges(graph.edge_first[:-1][edge].astype(np.int64), counts)
    here, starts = np.repeat(vertex, counts), offsets(counts)[:-1]
    forward, backward = graph.vertex_forward_delay_s[v], graph.vertex_backward_delay_s[v]

    def total(delay_s: Float32, paid: Bool) -> Float64:
        return np.asarray(np.add.reduceat(delay_s * paid.astype(np.float64), starts))

    return (
        total(backward, v <= here),
        total(forward, v >= here),
        total(forward, v < here) + graph.edge_turn_s[2 * edge],
        total(backward, v > here) + graph.edge_turn_s[2 * edge + 1],
    )


def _seconds(length_m: Float64, kmh: Float32) -> Float64:
    speed = kmh.astype(np.float64)
    return np.where(speed > 0, length_m / np.where(speed > 0, speed, 1) * 3.6, 0)
