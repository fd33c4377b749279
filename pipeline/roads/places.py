"""Places on roads: ties points to the nearest place on the nearest road."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from pipeline.roads.arrays import Bool, Float32, Float64, Int64, offsets, ranges
from pipeline.roads.extract import degrees
from pipeline.roads.geodesy import AXIS_M, ECCENTRICITY2, WGS84
from pipeline.roads.graph import CLOSED, TOLL, UNPAVED, RoadGraph, pack
from pipeline.roads.stretches import Grid

HERE_M = 0.0005  # half the unit of a packed distance


@dataclass(frozen=True)
class Nearest:
    """Nearest place of each point on some edges; all arrays have one value per point.

    Attributes
    ----------
    edge : number of the edge; -1: none within reach.
    vertex : vertex of the graph at which the stretch with the place starts.
    share : how far along that stretch the place is, 0 to 1.
    lon, lat : the place, degrees; NaN where there is none.
    gap_m : geodesic distance from the point; far beyond reach about that of the nearest place;
        infinite where there are no edges at all.
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

    Every stretch is looked at in the plane that touches the ellipsoid at the point (see
    ``stretches``). Long stretches and the antimeridian are no special cases.

    Parameters
    ----------
    graph : the road graph.
    edges : numbers of the edges that count.
    lon, lat : the points, degrees.
    reach_m : a place further away is no place, and only its distance is told: that to a road
        near the nearest one, since the plane is no longer true so far out.
    """
    if not len(edges):
        return _nowhere(len(lon))
    vertices = (np.asarray(graph.vertex_lon_e7), np.asarray(graph.vertex_lat_e7))
    grid = Grid.of(vertices, np.asarray(graph.edge_first), edges)
    vertex, share = grid.nearest(lon, lat, *_scales(lat))
    x, y = degrees(vertices[0][vertex]), degrees(vertices[1][vertex])
    place_lon = _turn(x + share * _turn(degrees(vertices[0][vertex + 1]) - x))
    place_lat = y + share * (degrees(vertices[1][vertex + 1]) - y)
    gap_m = np.asarray(WGS84.inv(lon, lat, place_lon, place_lat)[2])
    within = gap_m <= reach_m
    edge = np.searchsorted(graph.edge_first, vertex, side="right") - 1
    return Nearest(
        edge=np.where(within, edge, -1),
        vertex=np.where(within, vertex, -1),
        share=np.where(within, share, np.nan),
        lon=np.where(within, place_lon, np.nan),
        lat=np.where(within, place_lat, np.nan),
        gap_m=gap_m,
    )


def _nowhere(count: int) -> Nearest:
    return Nearest(
        edge=np.full(count, -1, dtype=np.int64),
        vertex=np.full(count, -1, dtype=np.int64),
        share=np.full(count, np.nan),
        lon=np.full(count, np.nan),
        lat=np.full(count, np.nan),
        gap_m=np.full(count, np.inf),
    )


def _turn(degrees: Float64) -> Float64:
    """Difference of longitudes between -180 and 180."""
    return np.asarray((degrees + 180) % 360 - 180)


def _scales(lat: Float64) -> tuple[Float64, Float64]:
    """Metres per degree of longitude and of latitude on the ellipsoid at a latitude."""
    phi = np.radians(lat)
    shrink = 1 - ECCENTRICITY2 * np.sin(phi) ** 2
    east = AXIS_M / np.sqrt(shrink) * np.cos(phi)
    north = AXIS_M * (1 - ECCENTRICITY2) / shrink**1.5
    return np.radians(east), np.radians(north)


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
