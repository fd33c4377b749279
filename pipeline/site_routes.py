"""The routes of all zones to one site, from the trips to its access points."""

from __future__ import annotations

from dataclasses import dataclass

import geopandas as gpd
import numpy as np
import numpy.typing as npt
import pandas as pd

from pipeline.at_hand import Find
from pipeline.homes import MEANS, Homes, by_zone
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
from pipeline.roads.tariffs import CHARGES, Tariffs
from pipeline.roads.trips import Ends, Trips, trips_to
from pipeline.roads.weights import Weights
from pipeline.search import UNREACHED
from pipeline.within_zone import Discs, charge_within

ALONG = ("ferry_km", "ferry_min", "toll_km", "unpaved_km", "delay_min")


@dataclass(frozen=True)
class TiedEnds:
    """The points at the two ends of all trips, tied to the roads.

    Attributes
    ----------
    homes, doors : one per point of a zone, one per access point.
    places : their places, with what the searches need.
    """

    homes: Tied
    doors: Tied
    places: Ends

    @classmethod
    def of(
        cls, graph: RoadGraph, points: pd.DataFrame, sites: pd.DataFrame, settings: RoutesSettings
    ) -> TiedEnds:
        """Tie points and access points to the roads."""
        homes = tie_to_roads(graph, points, settings, gap_kmh=settings.zone_gap_speed_kmh)
        doors = tie_to_roads(graph, sites, settings, gap_kmh=settings.site_gap_speed_kmh)
        tariffs = Tariffs.of(graph, settings.charges)
        gaps = homes.gap_cost, doors.gap_cost
        places = Ends(
            homes=homes.places,
            doors=doors.places,
            weights=Weights.of(graph, tariffs, homes.places, doors.places, gaps, settings),
            tariffs=tariffs,
            home_dues=tariffs.of_places(graph, homes.places),
            door_dues=tariffs.of_places(graph, doors.places),
        )
        return cls(homes, doors, places)


@dataclass(frozen=True)
class Errand:
    """What the searches of every site need beside the graph."""

    zones: pd.DataFrame  # without geometry
    sites: pd.DataFrame
    homes: Homes
    discs: Discs
    ends: TiedEnds
    settings: RoutesSettings


def one_site(find: Find[Errand], rows: Int64) -> tuple[pd.DataFrame, list[Leg]]:
    """The routes of all zones to one site, and the ways of the shortest of them.

    This is what another process or machine does: the graph is opened there.
    """
    graph, errand = find()
    ends, homes, settings = errand.ends, errand.homes, errand.settings
    on_road = rows[ends.doors.status[rows] == TIED]
    trips = {int(row): trips_to(graph, ends.places, int(row)) for row in on_road}
    from_points, door = _site_routes(errand.zones, homes, errand.sites, ends, rows, trips)
    site, lead = by_zone(from_points, door, homes, (*MEANS, *ALONG, *CHARGES))
    site = charge_within(site, errand.discs, rows, homes.counts, errand.sites, settings)
    door = np.where(lead >= 0, door[lead], -1)
    return site, _legs(graph, ends, site, door, lead, trips, settings)


def _site_routes(
    zones: pd.DataFrame,
    homes: Homes,
    sites: pd.DataFrame,
    ends: TiedEnds,
    rows: Int64,
    trips: dict[int, Trips],
) -> tuple[pd.DataFrame, Int64]:
    """The routes of all points to one site, and the row of the access point that each takes.

    Parameters
    ----------
    zones, homes : the zones and their points.
    sites : the table of sites.
    ends : points and access points on the roads.
    rows : rows of the site's access points.
    trips : to those of them that are on a road.
    """
    door, shortest = _choose_doors(len(homes.zone), ends, trips)
    there, home, along, dues = _of_doors(len(homes.zone), door, trips)
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
    columns |= dict(zip(CHARGES, dues.T, strict=True))
    columns["zone_snap_m"] = _where(np.isfinite(ends.homes.gap_m), ends.homes.gap_m)
    nearest = rows[np.argmin(ends.doors.gap_m[rows])]
    columns["site_snap_m"] = ends.doors.gap_m[np.where(door >= 0, door, nearest)]
    columns["route_status"] = _status(ends.homes.status, reached)
    return pd.DataFrame(columns), door


def _choose_doors(count: int, ends: TiedEnds, trips: dict[int, Trips]) -> tuple[Int64, Int64]:
    """Row of the access point with the best route from each point (-1: none reached).

    The second array is the shortest distance to any access point, gaps included, mm.
    """
    door = np.full(count, -1, dtype=np.int64)
    best = np.full(count, UNREACHED)
    shortest = np.full(count, UNREACHED)
    home_gap_mm = ends.homes.gap_cost & DISTANCE_MASK
    for row, trip in trips.items():
        gap, weight = ends.doors.gap_cost[row], ends.places.weights.door_gap[row]
        total = np.where(trip.weight < UNREACHED, trip.weight + weight, UNREACHED)
        better = total < best
        door[better], best[better] = row, total[better]
        length = trip.shortest + (gap & DISTANCE_MASK) + home_gap_mm
        shortest = np.where(trip.shortest < UNREACHED, np.minimum(shortest, length), shortest)
    return door, shortest


def _of_doors(
    count: int, door: Int64, trips: dict[int, Trips]
) -> tuple[Int64, Int64, Float64, Float64]:
    """Costs there and home, what the route runs on, and what is due, by the access point."""
    there, home = np.full(count, UNREACHED), np.full(count, UNREACHED)
    along = np.full((count, len(ALONG)), np.nan)
    dues = np.full((count, len(CHARGES)), np.nan)
    for row, trip in trips.items():
        chosen = door == row
        there[chosen], home[chosen] = trip.there[chosen], trip.home[chosen]
        along[chosen], dues[chosen] = trip.along[chosen], trip.dues[chosen]
    return there, home, along, dues


def _status(tied: npt.NDArray[np.object_], reached: Bool) -> npt.NDArray[np.object_]:
    """What became of each point's route."""
    status = np.where(reached, "routed", NO_PATH).astype(object)
    return np.where(tied == TOO_FAR, TOO_FAR, status)


def _where(condition: Bool, values: Float64) -> Float64:
    return np.where(condition, values, np.nan)


# --- lines -----------------------------------------------------------------------------------


def _legs(
    graph: RoadGraph,
    ends: TiedEnds,
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
    zone_id, site_id = site["zone_id"].to_numpy(object), str(site["site_id"].iloc[0])
    return [
        Leg.of(
            graph,
            ends.homes.places,
            trips[int(door[zone])],
            zone=int(lead[zone]),
            door=int(door[zone]),
            names=(str(zone_id[zone]), site_id),
            drive_time_min=float(minutes[zone]),
        )
        for zone in order
    ]


def legs_to_keep(legs: list[Leg], sites: pd.DataFrame, settings: RoutesSettings) -> list[Leg]:
    """Those that are drawn: sites before substitutes, then the shortest drives."""
    roles = dict(zip(sites["site_id"], sites["role"], strict=True))
    ordered = sorted(legs, key=lambda leg: (roles[leg.site_id] != "site", leg.drive_time_min))
    return ordered[: settings.max_lines]


def lines_of(
    legs: list[Leg], graph: RoadGraph, ends: TiedEnds, settings: RoutesSettings
) -> gpd.GeoDataFrame:
    """The table `route_lines`, of the legs that are kept."""
    tolerance_m = settings.line_tolerance_m
    return draw_legs(graph, ends.homes.places, ends.doors.places, legs, tolerance_m=tolerance_m)
