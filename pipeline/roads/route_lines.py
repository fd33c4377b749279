"""Lines of routes, for maps."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Self

import geopandas as gpd
import numpy as np
import shapely

from pipeline.roads.arrays import Float64, Int32, Int64, ranges
from pipeline.roads.extract import degrees
from pipeline.roads.graph import RoadGraph
from pipeline.roads.lines import line_strings
from pipeline.roads.passages import left_to
from pipeline.roads.places import Places
from pipeline.roads.trips import BY_END, BY_START, DIRECT, Trips
from pipeline.search import path_edges

METRES_PER_DEGREE = 111_694.0  # the longest degree of latitude, at the poles


@dataclass(frozen=True)
class Leg:
    """The way of one route through the graph.

    Attributes
    ----------
    zone_id, site_id, drive_time_min : of the route.
    zone, door : row of the zone and of the access point.
    leave : how it leaves the zone's place, as in ``Trips.leave``.
    edges : directed edges in the order of travel.
    seed : end of the access point's edge that it comes in by: 0 the start, 1 the end.
    """

    zone_id: str
    site_id: str
    drive_time_min: float
    zone: int
    door: int
    leave: int
    edges: Int32
    seed: int

    @classmethod
    def of(
        cls,
        graph: RoadGraph,
        homes: Places,
        trips: Trips,
        *,
        zone: int,
        door: int,
        names: tuple[str, str],
        drive_time_min: float,
    ) -> Self:
        """Walk down the tree of a search from a zone's place."""
        leave = int(trips.leave[zone])
        edges, seed = np.empty(0, dtype=np.int64), -1
        if leave != DIRECT:
            by_end = leave == BY_END
            spent = (homes.to_end if by_end else homes.to_start)[zone]
            edge = homes.edge[zone : zone + 1]
            node = int(left_to(graph, edge, np.array([spent == 0]), by_end=by_end)[0])
            edges, number = path_edges(trips.tree.parent, trips.tree.via, graph.in_edge, node)
            seed = int(trips.seed_end[number])
        return cls(*names, drive_time_min, zone, door, leave, edges.astype(np.int32), int(seed))


def draw_legs(
    graph: RoadGraph, homes: Places, doors: Places, legs: list[Leg], *, tolerance_m: float
) -> gpd.GeoDataFrame:
    """The table `route_lines`: one line per leg, from place to place on the roads.

    Parameters
    ----------
    graph : the road graph.
    homes, doors : places of the zones and of the access points.
    legs : the routes to draw.
    tolerance_m : lines are thinned by at most this much.
    """
    tolerance = tolerance_m / METRES_PER_DEGREE  # a degree of longitude is never longer
    lines = []
    for leg in legs:
        lon, lat = _vertices(graph, homes, doors, leg)
        line = line_strings(lon, lat, np.array([len(lon)]))[0]
        lines.append(_thinned(line, tolerance))
    return gpd.GeoDataFrame(
        {
            "zone_id": np.array([leg.zone_id for leg in legs], dtype=object),
            "site_id": np.array([leg.site_id for leg in legs], dtype=object),
        },
        geometry=gpd.GeoSeries(lines, crs="EPSG:4326"),
        crs="EPSG:4326",
    ).astype({"zone_id": "str", "site_id": "str"})


def _thinned(line: shapely.Geometry, tolerance: float) -> shapely.Geometry:
    """Douglas and Peucker's thinning; it may let a line touch itself, which a map can bear."""
    return shapely.simplify(line, tolerance, preserve_topology=False) if tolerance else line


def _vertices(graph: RoadGraph, homes: Places, doors: Places, leg: Leg) -> tuple[Float64, Float64]:
    """Coordinates along a leg: the zone's place, vertices, the access point's place."""
    first = _vertex_after(homes, leg.zone)
    last = _vertex_after(doors, leg.door)
    home_edge, door_edge = homes.edge[leg.zone], doors.edge[leg.door]
    if leg.leave == DIRECT:
        ahead = first <= last
        vertices = np.arange(first, last) if ahead else np.arange(first - 1, last - 1, -1)
    else:
        if leg.leave == BY_START:
            out = np.arange(first - 1, graph.edge_first[home_edge] - 1, -1)
        else:
            out = np.arange(first, graph.edge_first[home_edge + 1])
        if leg.seed == 0:
            into = np.arange(graph.edge_first[door_edge], last)
        else:
            into = np.arange(graph.edge_first[door_edge + 1] - 1, last - 1, -1)
        vertices = np.concatenate([out, _along_edges(graph, leg.edges), into])
    lon = degrees(graph.vertex_lon_e7[vertices])
    lat = degrees(graph.vertex_lat_e7[vertices])
    start, end = homes.nearest, doors.nearest
    return (
        np.concatenate([[start.lon[leg.zone]], lon, [end.lon[leg.door]]]),
        np.concatenate([[start.lat[leg.zone]], lat, [end.lat[leg.door]]]),
    )


def _vertex_after(places: Places, index: int) -> int:
    """First vertex of the edge that lies beyond a place."""
    return int(places.nearest.vertex[index]) + 1


def _along_edges(graph: RoadGraph, edges: Int32) -> Int64:
    """Vertices along directed edges, in the order of travel."""
    edge, backward = edges // 2, edges % 2 == 1
    starts = graph.edge_first[edge].astype(np.int64)
    counts = graph.edge_first[edge + 1].astype(np.int64) - starts
    vertices = ranges(starts, counts)
    mirrored = np.repeat(2 * starts + counts - 1, counts) - vertices
    return np.where(np.repeat(backward, counts), mirrored, vertices)
