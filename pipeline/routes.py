"""The stage ``route``: the fastest route of every zone to every site and home again.

One search per access point against the traffic gives every zone's way there, one with the
traffic the way home, one more the shortest distance; zones cost next to nothing.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import partial

import geopandas as gpd
import numpy as np
import numpy.typing as npt
import pandas as pd

from pipeline.at_hand import Find, at_hand
from pipeline.errors import RouteError
from pipeline.executor import make_executor
from pipeline.homes import MEANS, Homes, by_zone, homes_of
from pipeline.road_settings import RoutesSettings
from pipeline.roads.arrays import Bool, Float64, Int64
from pipeline.roads.graph import (
    DISTANCE_MASK,
    RoadGraph,
    unpack_distance_km,
    unpack_time_min,
)
from pipeline.roads.route_lines import Leg, draw_legs
from pipeline.roads.snapping import NO_PATH, TIED, TOO_FAR, Tied, tie_to_roads
from pipeline.roads.trips import Trips, trips_to
from pipeline.search import UNREACHED
from pipeline.study import Study
from pipeline.tables import REACHED_STATUSES, ROUTE_STATUSES
from pipeline.within_zone import Discs, charge_within

ALONG = ("ferry_km", "ferry_min", "toll_km", "unpaved_km", "delay_min")


@dataclass(frozen=True)
class Ends:
    """The points at the two ends of all trips, tied to the roads."""

    homes: Tied  # one per zone, or several
    doors: Tied  # one per access point


@dataclass(frozen=True)
class Errand:
    """What the searches of every site need beside the graph."""

    zones: pd.DataFrame  # without geometry
    sites: pd.DataFrame
    homes: Homes
    discs: Discs
    ends: Ends
    settings: RoutesSettings


def route(
    zones: pd.DataFrame,
    sites: pd.DataFrame,
    graph: RoadGraph,
    zone_points: pd.DataFrame | None = None,
    *,
    study: Study,
) -> tuple[pd.DataFrame, gpd.GeoDataFrame]:
    """Route every zone to every site and back.

    Parameters
    ----------
    zones, sites : tables of these names; a site has one row per access point.
    graph : the road graph.
    zone_points : several weighted points per zone; without them trips start at the centroid.
    study : sections [routes] and [compute].

    Returns
    -------
    `routes`, with a row for every zone and site, and `route_lines` of the routed pairs.
    Distances and times run from door to site: the straight gaps between the points and
    their roads are charged at the speeds that the study states. A site is reached by the
    access point with the fastest route there, and left by the same one;
    `shortest_distance_km` is to whichever access point is nearest by road. Figures of a zone
    with several points are means over its people; a trip inside its own zone is never nothing
    (see ``within_zone``).

    Raises
    ------
    RouteError
        A site has no access point near a road, or no zone reaches any site.
    """
    settings = study.routes
    homes = homes_of(zones, zone_points)
    ends = Ends(
        homes=tie_to_roads(graph, homes.points, settings, gap_kmh=settings.zone_gap_speed_kmh),
        doors=tie_to_roads(graph, sites, settings, gap_kmh=settings.site_gap_speed_kmh),
    )
    _refuse_sites_off_the_roads(sites, ends.doors, settings)
    points = pd.DataFrame(zones.drop(columns="geometry", errors="ignore"))
    errand = Errand(points, sites, homes, Discs.of(zones, sites), ends, settings)
    tables: list[pd.DataFrame] = []
    legs: list[Leg] = []
    with make_executor(study.compute) as executor, at_hand(graph, errand, executor) as find:
        for site, of_site in executor.map(partial(_one_site, find), _rows_of_sites(sites)):
            tables.append(site)
            legs = _kept(legs + of_site, sites, settings)
    routes = _zone_by_zone(tables)
    if not routes["route_status"].isin(REACHED_STATUSES).any():
        raise RouteError(_nothing_routed(routes))
    return routes, _lines(legs, graph, ends, settings)


def summarise_route(outputs: tuple[pd.DataFrame, gpd.GeoDataFrame]) -> str:
    """One line for people: how many pairs, and what became of them."""
    routes = outputs[0]
    words = [f"{routes['zone_id'].nunique():,} zones × {routes['site_id'].nunique():,} sites"]
    for status in ROUTE_STATUSES:
        count = int((routes["route_status"] == status).sum())
        if count or status == "routed":
            words.append(f"{count:,} {status.replace('_', ' ')}")
    return ", ".join(words) + " (see routes.csv)"


def _rows_of_sites(sites: pd.DataFrame) -> list[Int64]:
    """Rows of each site's access points."""
    site_ids = sites["site_id"].to_numpy()
    return [np.flatnonzero(site_ids == site_id) for site_id in pd.unique(sites["site_id"])]


# --- one site --------------------------------------------------------------------------------


def _one_site(find: Find[Errand], rows: Int64) -> tuple[pd.DataFrame, list[Leg]]:
    """The routes of all zones to one site, and the ways of the shortest of them.

    This is what another process or machine does: the graph is opened there.
    """
    graph, errand = find()
    ends, homes, settings = errand.ends, errand.homes, errand.settings
    on_road = rows[ends.doors.status[rows] == TIED]
    points, doors = ends.homes.places, ends.doors.places
    trips = {int(row): trips_to(graph, points, doors, int(row)) for row in on_road}
    from_points, door = _site_routes(errand.zones, homes, errand.sites, ends, rows, trips)
    site, lead = by_zone(from_points, door, homes, (*MEANS, *ALONG))
    site = charge_within(site, errand.discs, rows, homes.counts, errand.sites, settings)
    door = np.where(lead >= 0, door[lead], -1)
    return site, _legs(graph, ends, site, door, lead, trips, settings)


def _site_routes(
    zones: pd.DataFrame,
    homes: Homes,
    sites: pd.DataFrame,
    ends: Ends,
    rows: Int64,
    trips: dict[int, Trips],
) -> tuple[pd.DataFrame, Int64]:
    """The routes of all points to one site, and the row of the access point that each takes."""
    door, shortest = _choose_doors(len(homes.zone), ends, trips)
    there, home, along = _of_doors(len(homes.zone), door, trips)
    gaps = ends.homes.gap_cost + np.where(door >= 0, ends.doors.gap_cost[door], 0)
    reached = there < UNREACHED
    columns: dict[str, npt.NDArray[np.generic] | str] = {
        "zone_id": zones["zone_id"].to_numpy()[homes.zone],
        "site_id": sites["site_id"].iloc[rows[0]],
        "access_id": pd.Series(sites["access_id"].to_numpy()[door]).where(reached).to_numpy(),
        "distance_km": _where(reached, unpack_distance_km(there + gaps)),
        "drive_time_min": _where(reached, unpack_time_min(there + gaps)),
        "shortest_distance_km": _where(reached, shortest / 1e6),
        "return_distance_km": _where(home < UNREACHED, unpack_distance_km(home + gaps)),
        "return_drive_time_min": _where(home < UNREACHED, unpack_time_min(home + gaps)),
    }
    columns |= dict(zip(ALONG, along.T, strict=True))
    columns["zone_snap_m"] = _where(np.isfinite(ends.homes.gap_m), ends.homes.gap_m)
    nearest = rows[np.argmin(ends.doors.gap_m[rows])]
    columns["site_snap_m"] = ends.doors.gap_m[np.where(door >= 0, door, nearest)]
    columns["route_status"] = _status(ends.homes.status, reached)
    return pd.DataFrame(columns), door


def _choose_doors(count: int, ends: Ends, trips: dict[int, Trips]) -> tuple[Int64, Int64]:
    """Row of the access point with the fastest route from each zone (-1: none reached).

    The second array is the shortest distance to any access point, gaps included, mm.
    """
    door = np.full(count, -1, dtype=np.int64)
    best = np.full(count, UNREACHED)
    shortest = np.full(count, UNREACHED)
    home_gap_mm = ends.homes.gap_cost & DISTANCE_MASK
    for row, trip in trips.items():
        gap = ends.doors.gap_cost[row]
        total = np.where(trip.there < UNREACHED, trip.there + gap, UNREACHED)
        better = total < best
        door[better], best[better] = row, total[better]
        length = trip.shortest + (gap & DISTANCE_MASK) + home_gap_mm
        shortest = np.where(trip.shortest < UNREACHED, np.minimum(shortest, length), shortest)
    return door, shortest


def _of_doors(count: int, door: Int64, trips: dict[int, Trips]) -> tuple[Int64, Int64, Float64]:
    """Costs there and home, and what the route runs on, by the chosen access point."""
    there, home = np.full(count, UNREACHED), np.full(count, UNREACHED)
    along = np.full((count, len(ALONG)), np.nan)
    for row, trip in trips.items():
        chosen = door == row
        there[chosen], home[chosen] = trip.there[chosen], trip.home[chosen]
        along[chosen] = trip.along[chosen]
    return there, home, along


def _status(tied: npt.NDArray[np.object_], reached: Bool) -> npt.NDArray[np.object_]:
    """What became of each point's route."""
    status = np.where(reached, "routed", NO_PATH).astype(object)
    return np.where(tied == TOO_FAR, TOO_FAR, status)


def _where(condition: Bool, values: Float64) -> Float64:
    return np.where(condition, values, np.nan)


def _zone_by_zone(tables: list[pd.DataFrame]) -> pd.DataFrame:
    """All sites' tables in one, the sites of a zone together, both in the order given."""
    routes = pd.concat(tables)
    return routes.sort_index(kind="stable").reset_index(drop=True)


# --- lines -----------------------------------------------------------------------------------


def _legs(
    graph: RoadGraph,
    ends: Ends,
    site: pd.DataFrame,
    door: Int64,
    lead: Int64,
    trips: dict[int, Trips],
    settings: RoutesSettings,
) -> list[Leg]:
    """Ways through the graph of a site's routed pairs, the shortest drives first.

    `lead` is the point of each zone whose way is drawn, and `door` the access point it takes.
    """
    routed = np.flatnonzero(site["route_status"].to_numpy() == "routed")
    minutes = site["drive_time_min"].to_numpy()
    order = routed[np.argsort(minutes[routed], kind="stable")][: settings.max_lines]
    return [
        Leg.of(
            graph,
            ends.homes.places,
            trips[int(door[zone])],
            zone=int(lead[zone]),
            door=int(door[zone]),
            names=(str(site["zone_id"].iloc[zone]), str(site["site_id"].iloc[zone])),
            drive_time_min=float(minutes[zone]),
        )
        for zone in order
    ]


def _kept(legs: list[Leg], sites: pd.DataFrame, settings: RoutesSettings) -> list[Leg]:
    """Those that are drawn: sites before substitutes, then the shortest drives."""
    roles = dict(zip(sites["site_id"], sites["role"], strict=True))
    ordered = sorted(legs, key=lambda leg: (roles[leg.site_id] != "site", leg.drive_time_min))
    return ordered[: settings.max_lines]


def _lines(
    legs: list[Leg], graph: RoadGraph, ends: Ends, settings: RoutesSettings
) -> gpd.GeoDataFrame:
    tolerance_m = settings.line_tolerance_m
    return draw_legs(graph, ends.homes.places, ends.doors.places, legs, tolerance_m=tolerance_m)


# --- what cannot be --------------------------------------------------------------------------


def _refuse_sites_off_the_roads(sites: pd.DataFrame, doors: Tied, settings: RoutesSettings) -> None:
    """Every site needs an access point near a road (be it an island's)."""
    far = pd.Series(doors.status == TOO_FAR).groupby(sites["site_id"].to_numpy()).all()
    lost = [site_id for site_id in pd.unique(sites["site_id"]) if far[site_id]]
    if not lost:
        return
    row = int(np.flatnonzero((sites["site_id"] == lost[0]).to_numpy())[0])
    where = f"longitude {sites['lon'].iloc[row]:g}, latitude {sites['lat'].iloc[row]:g}"
    gap_km = doors.gap_m[row] / 1000
    raise RouteError(
        f"{len(lost)} site(s) too far from every road; first: {lost[0]!r} ({where}), "
        f"{gap_km:,.1f} km from the nearest one, and routes.max_snap_km is "
        f"{settings.max_snap_km:g}. Correct its coordinates (are they swapped?), give an access "
        "point on a road, give a road extract that reaches it, or raise routes.max_snap_km."
    )


def _nothing_routed(routes: pd.DataFrame) -> str:
    counts = routes["route_status"].value_counts()
    found = ", ".join(f"{count} {status}" for status, count in counts.items())
    return (
        f"no zone reaches any site ({found}). Look at the coordinates of zones and sites, and "
        "whether the road extract covers both and the roads and ferries between them."
    )
