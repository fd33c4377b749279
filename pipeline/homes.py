"""Where trips start: one point per zone, or several, each with its share of the zone's people.

Every point is routed by itself, by the access point that suits it. A zone's figure is the mean
over its points, weighted by their people. Where only some of a zone's points have a route, their
weights are scaled up to make 1 again, and `routed_share` says how much of the zone's people the
figure stands for.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
import pandas as pd

from pipeline.errors import RouteError
from pipeline.roads.arrays import Float64, Int64
from pipeline.roads.snapping import NO_PATH, TOO_FAR

MEANS = (
    "distance_km",
    "drive_time_min",
    "shortest_distance_km",
    "return_distance_km",
    "return_drive_time_min",
)
SNAPS = ("zone_snap_m",)


@dataclass(frozen=True)
class Homes:
    """Points that trips start from.

    Attributes
    ----------
    points : `lon, lat` of each, zone by zone in the order of the zones.
    zone : row of the zone of each point, ascending.
    weight : share of the zone's people.
    zones : how many zones there are.
    """

    points: pd.DataFrame
    zone: Int64
    weight: Float64
    zones: int

    @property
    def counts(self) -> Int64:
        """How many points each zone has."""
        return np.bincount(self.zone, minlength=self.zones).astype(np.int64)

    def means(self, values: Float64) -> Float64:
        """Mean of a figure over each zone's points that have it; missing where none has."""
        known = ~np.isnan(values)
        weight = self.weight * known
        sums = np.bincount(self.zone, weight * np.where(known, values, 0), self.zones)
        total = np.bincount(self.zone, weight, self.zones)
        return np.where(total > 0, sums / np.where(total > 0, total, 1), np.nan)

    def share(self, chosen: npt.NDArray[np.bool_]) -> Float64:
        """Share of each zone's people at the chosen points."""
        part = np.bincount(self.zone, self.weight * chosen, self.zones)
        return np.asarray(part / np.bincount(self.zone, self.weight, self.zones))

    def heaviest(self, chosen: npt.NDArray[np.bool_]) -> Int64:
        """Of each zone the chosen point with the most people, the first of equals; -1: none."""
        rows = np.flatnonzero(chosen)
        order = rows[np.lexsort((rows, -self.weight[rows], self.zone[rows]))]
        first = np.flatnonzero(np.diff(self.zone[order], prepend=-1))
        result = np.full(self.zones, -1, dtype=np.int64)
        result[self.zone[order[first]]] = order[first]
        return result


def homes_of(zones: pd.DataFrame, zone_points: pd.DataFrame | None) -> Homes:
    """Points of every zone: its own where it has some, otherwise its centroid.

    Raises
    ------
    RouteError
        A point belongs to no zone.
    """
    zone_id = zones["zone_id"].to_numpy(dtype=object)
    row_of = pd.Series(np.arange(len(zones)), index=zone_id)
    several = pd.DataFrame({"row": [], "lon": [], "lat": [], "weight": []}, dtype=np.float64)
    if zone_points is not None:
        row = zone_points["zone_id"].map(row_of)
        _refuse_strange(zone_points, row)
        several = zone_points[["lon", "lat", "weight"]].assign(row=row)
    alone = pd.DataFrame(
        {"row": np.arange(len(zones)), "lon": zones["lon"], "lat": zones["lat"], "weight": 1.0}
    )
    alone = alone[~alone["row"].isin(several["row"])]
    points = pd.concat([several, alone]) if len(several) else alone
    points = points.sort_values("row", kind="stable", ignore_index=True)
    return Homes(
        points=points[["lon", "lat"]],
        zone=points["row"].to_numpy(np.int64),
        weight=points["weight"].to_numpy(np.float64),
        zones=len(zones),
    )


def _refuse_strange(zone_points: pd.DataFrame, row: pd.Series) -> None:
    strange = row.isna()
    if strange.any():
        first = zone_points.loc[strange, "zone_id"].iloc[0]
        raise RouteError(
            f"{int(strange.sum())} of {len(zone_points)} zone points belong to no zone (first: "
            f"{first!r}). Correct [zones.points], or add the zone."
        )


def by_zone(
    table: pd.DataFrame, door: Int64, homes: Homes, means: tuple[str, ...]
) -> tuple[pd.DataFrame, Int64]:
    """One row per zone from one row per point.

    Parameters
    ----------
    table : routes of every point to one site.
    door : row of the access point that each point takes; -1: none.
    homes : zones, weights.
    means : columns that are averaged over the points with a route.

    Returns
    -------
    The routes of the zones, and the point that speaks for each (its line is drawn, its access
    point named): of those that take the access point that most of the zone's people take, the
    one with the most people; -1 where no point has a route.
    """
    reached = door >= 0
    most = np.zeros(homes.zones)
    lead = np.full(homes.zones, -1, dtype=np.int64)
    for row in np.unique(door[reached]):
        share = homes.share(door == row)
        better = share > most + 1e-12
        lead[better] = homes.heaviest(door == row)[better]
        most[better] = share[better]
    stand_in = np.where(lead >= 0, lead, homes.heaviest(np.ones(len(door), dtype=np.bool_)))
    result = table.iloc[stand_in].reset_index(drop=True)
    for name in (*means, *SNAPS):
        result[name] = homes.means(table[name].to_numpy(np.float64))
    share = homes.share(reached)
    result["routed_share"] = share
    failed = np.where(
        homes.share(table["route_status"].to_numpy() == NO_PATH) > 0, NO_PATH, TOO_FAR
    )
    result["route_status"] = np.where(lead >= 0, "routed", failed)
    return result, lead
