"""Ties zones and sites to the road that people would drive on, and to no other.

A point goes to the nearest place on a main network, wherever on a road that is. Two things
stop it:

- it is further from that road than ``routes.max_snap_km`` (`too_far_from_road`);
- a road that joins no main network lies nearer, and by more than ``routes.detached_jump_km``.
  Such roads are an island in the sea or in the data, unless they are trifling
  (``routes.detached_road_km``): to move the point would take it across the water that the road
  does not cross. It is left there without a route (`no_path`).

Ferries, and roads that can be reached but not left (or the other way round), are passed over.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
import pandas as pd

from pipeline.road_settings import RoutesSettings
from pipeline.roads.arrays import Float64, Int64
from pipeline.roads.graph import RoadGraph, pack
from pipeline.roads.places import Nearest, Places, nearest_places, split_edges

TIED, NO_PATH, TOO_FAR = "tied", "no_path", "too_far_from_road"


@dataclass(frozen=True)
class Tied:
    """Points with their places on the roads; all arrays have one value per point.

    Attributes
    ----------
    places : the places; of points that are tied to no road without an edge.
    status : 'tied', 'no_path' (beside an island's road) or 'too_far_from_road'.
    gap_m : distance to the road that decided the status; infinite if there is none at all.
    gap_cost : packed cost of the gap.
    """

    places: Places
    status: npt.NDArray[np.object_]
    gap_m: Float64
    gap_cost: Int64


def tie_to_roads(
    graph: RoadGraph, points: pd.DataFrame, settings: RoutesSettings, *, gap_kmh: float
) -> Tied:
    """Find the place on the roads of each point, or why it has none.

    Parameters
    ----------
    graph : the road graph.
    points : columns `lon`, `lat` (degrees, WGS 84).
    settings : section [routes].
    gap_kmh : speed on the gap.
    """
    lon, lat = points["lon"].to_numpy(np.float64), points["lat"].to_numpy(np.float64)
    limit_m = settings.max_snap_km * 1000
    main = nearest_places(graph, np.flatnonzero(graph.main_edges()), lon, lat, reach_m=limit_m)
    island = _nearest_island(graph, lon, lat, settings)
    is_beside_island = (island.gap_m <= limit_m) & (
        island.gap_m + settings.detached_jump_km * 1000 < main.gap_m
    )
    is_near = (main.gap_m <= limit_m) & (main.edge >= 0)
    status = np.where(is_beside_island, NO_PATH, np.where(is_near, TIED, TOO_FAR)).astype(object)
    gap_m = np.where(is_beside_island, island.gap_m, main.gap_m)
    tied_gap_m = np.where(status == TIED, gap_m, 0)
    return Tied(
        places=split_edges(graph, main, status == TIED),
        status=status,
        gap_m=gap_m,
        gap_cost=pack(tied_gap_m / (gap_kmh / 3.6), tied_gap_m),
    )


def _nearest_island(
    graph: RoadGraph, lon: Float64, lat: Float64, settings: RoutesSettings
) -> Nearest:
    """Nearest place on roads that join no main network, trifling ones left out."""
    of_island = (graph.edge_detached_km > 0) & ~graph.edge_is_ferry
    of_island &= graph.edge_detached_km >= settings.detached_road_km
    reach_m = settings.max_snap_km * 1000
    return nearest_places(graph, np.flatnonzero(of_island), lon, lat, reach_m=reach_m)
