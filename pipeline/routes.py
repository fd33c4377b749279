"""The stage ``route``: the best route of every zone to every site and home again.

One search per access point against the traffic gives every zone's way there, one with the
traffic the way home, one more the shortest distance; zones cost next to nothing. Sites are
searched by whatever executor the study asks for.
"""

from __future__ import annotations

from functools import partial

import geopandas as gpd
import numpy as np
import pandas as pd

from pipeline.at_hand import at_hand
from pipeline.errors import RouteError
from pipeline.executor import make_executor
from pipeline.gathering import Gathering
from pipeline.homes import homes_of
from pipeline.road_settings import RoutesSettings
from pipeline.roads.arrays import Int64
from pipeline.roads.graph import RoadGraph
from pipeline.roads.route_lines import Leg
from pipeline.roads.snapping import TOO_FAR, Tied
from pipeline.site_routes import Errand, TiedEnds, legs_to_keep, lines_of, one_site
from pipeline.study import Study
from pipeline.tables import REACHED_STATUSES, ROUTE_STATUSES
from pipeline.within_zone import Discs


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
    access point with the best route there, and left by the same one;
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
    ends = TiedEnds.of(graph.opened_again(), homes.points, sites, settings)
    _refuse_sites_off_the_roads(sites, ends.doors, settings)
    points = pd.DataFrame(zones.drop(columns="geometry", errors="ignore"))
    errand = Errand(points, sites, homes, Discs.of(zones, sites), ends, settings)
    rows = _rows_of_sites(sites)
    gathering = Gathering(len(rows))
    legs: list[Leg] = []
    with make_executor(study.compute) as executor, at_hand(graph, errand, executor) as find:
        found = executor.map(partial(one_site, find), rows)
        for place, (site, of_site) in enumerate(found):
            gathering.put(place, site)
            legs = legs_to_keep(legs + of_site, sites, settings)
    routes = gathering.table()
    if not routes["route_status"].isin(REACHED_STATUSES).any():
        raise RouteError(_nothing_routed(routes))
    return routes, lines_of(legs, graph, ends, settings)


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
