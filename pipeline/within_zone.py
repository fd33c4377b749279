"""Trips inside their own zone: as long as they are on average, never nothing.

A site that lies in a zone is at no distance from "the zone" only as long as the zone is taken for
a point. Where the zone has several points, their routes say how far its people have to go. Where
it has one, the zone is taken as a disc of equal area with people spread evenly over it; the
mean straight distance from the site to them, times a circuity for the roads' detours, is the
length of the trip, driven at a local speed.
"""

from __future__ import annotations

from dataclasses import dataclass

import geopandas as gpd
import numpy as np
import pandas as pd
from pyproj import Geod
from scipy.spatial import cKDTree
from scipy.special import ellipe, ellipk

from pipeline.centroids import equal_area_crs
from pipeline.errors import RouteError
from pipeline.overlay import first_holding
from pipeline.road_settings import RoutesSettings
from pipeline.roads.arrays import Float64, Int64
from pipeline.roads.tariffs import CHARGES

WGS84 = Geod(ellps="WGS84")
LENGTHS = (
    "distance_km",
    "shortest_distance_km",
    "return_distance_km",
)
TIMES = ("drive_time_min", "return_drive_time_min")


def mean_distance_in_disc(radius: Float64, offset: Float64) -> Float64:
    """Mean distance from a point to the points of a disc, in the unit of the two arguments.

    With ρ = offset ÷ radius it is 4R ÷ 9π times (7 + ρ²) E(ρ) - 4 (1 - ρ²) K(ρ) inside the
    disc, and times ρ (7 + ρ²) E(1/ρ) - (ρ² - 1)(ρ² + 3) ÷ ρ K(1/ρ) outside, with the
    complete elliptic integrals by modulus (scipy takes its square). From memory; the tests
    hold it against quadrature and against the known 2R/3 and 32R/9π.
    """
    rho = np.asarray(offset / radius, dtype=np.float64)
    inner = np.minimum(rho, 1.0)
    outer = np.maximum(rho, 1.0)
    # K is infinite at modulus 1, and its factor nothing.
    k_in = np.where(inner < 1, ellipk(np.where(inner < 1, inner, 0) ** 2), 0)
    k_out = np.where(outer > 1, ellipk(np.where(outer > 1, 1 / outer, 0) ** 2), 0)
    inside = (7 + inner**2) * ellipe(inner**2) - 4 * (1 - inner**2) * k_in
    outside = outer * (7 + outer**2) * ellipe(1 / outer**2)
    outside -= (outer**2 - 1) * (outer**2 + 3) / outer * k_out
    return np.asarray(4 * radius / (9 * np.pi) * np.where(rho <= 1, inside, outside))


@dataclass(frozen=True)
class Discs:
    """Zones as discs, and which of them hold each access point.

    Attributes
    ----------
    radius_km : of a disc with the area of the zone's polygon; without polygons half the distance
        to the nearest other zone's point; missing where there is none.
    holding : row of the zone whose polygon holds each access point; -1: none, or no polygons.
    offset_km : from the zone's point to the access point that it holds.
    """

    radius_km: Float64
    holding: Int64
    offset_km: Float64

    @classmethod
    def of(cls, zones: pd.DataFrame, sites: pd.DataFrame) -> Discs:
        """Discs of the zones, as far as there are polygons."""
        lon, lat = sites["lon"].to_numpy(np.float64), sites["lat"].to_numpy(np.float64)
        x, y = zones["lon"].to_numpy(np.float64), zones["lat"].to_numpy(np.float64)
        shapes = _polygons(zones)
        radius_km = _half_way_to_next_km(x, y)
        holding = np.full(len(sites), -1, dtype=np.int64)
        if shapes is not None:
            area_m2 = shapes.to_crs(equal_area_crs(shapes)).area.to_numpy()
            radius_km = np.where(area_m2 > 0, np.sqrt(area_m2 / np.pi) / 1000, radius_km)
            holding[:] = first_holding(gpd.points_from_xy(lon, lat).to_numpy(), shapes.to_numpy())
        offset_km = np.asarray(WGS84.inv(x[holding], y[holding], lon, lat)[2]) / 1000
        return cls(radius_km, holding, offset_km)


def _polygons(zones: pd.DataFrame) -> gpd.GeoSeries | None:
    if "geometry" not in zones:
        return None
    shapes = gpd.GeoSeries(zones["geometry"], crs="EPSG:4326")
    areal = shapes.geom_type.isin(["Polygon", "MultiPolygon"])
    return shapes if areal.any() else None


def _half_way_to_next_km(lon: Float64, lat: Float64) -> Float64:
    """Half the distance to the nearest other point; missing for a single one."""
    theta, phi = np.radians(lon), np.radians(lat)
    sphere = np.column_stack(
        [np.cos(phi) * np.cos(theta), np.cos(phi) * np.sin(theta), np.sin(phi)]
    )
    if len(sphere) < 2:
        return np.full(len(sphere), np.nan)
    near = np.asarray(cKDTree(sphere).query(sphere, k=2)[1])
    own = np.arange(len(sphere))
    other = np.where(near[:, 0] == own, near[:, 1], near[:, 0])
    half_km = np.asarray(WGS84.inv(lon, lat, lon[other], lat[other])[2]) / 2000
    return np.where(half_km > 0, half_km, np.nan)


def charge_within(
    table: pd.DataFrame,
    discs: Discs,
    rows: Int64,
    points: Int64,
    sites: pd.DataFrame,
    settings: RoutesSettings,
) -> pd.DataFrame:
    """Mark the pairs inside one zone, and give those of a single point their mean length.

    Parameters
    ----------
    table : routes of all zones to one site.
    discs : the zones as discs.
    rows : rows of the site's access points.
    points : how many points each zone has.
    sites : the table of sites.
    settings : section [routes].

    Raises
    ------
    RouteError
        A zone's own size is not known.
    """
    routed = (table["route_status"] == "routed").to_numpy()
    at_door = routed & (table["distance_km"] == 0).to_numpy()
    mean_km = np.where(at_door, mean_distance_in_disc(discs.radius_km, 0 * discs.radius_km), np.nan)
    access = table["access_id"].to_numpy(dtype=object)
    inside = np.zeros(len(table), dtype=np.bool_)
    for row in rows[discs.holding[rows] >= 0]:
        zone = discs.holding[row]
        inside[zone] = True
        one = mean_distance_in_disc(discs.radius_km[[zone]], discs.offset_km[[row]])[0]
        if points[zone] == 1 and not mean_km[zone] <= one:
            mean_km[zone], access[zone] = one, sites["access_id"].iloc[row]
    inside = routed & (inside | at_door)
    by_disc = inside & ((points == 1) | at_door)
    _refuse_unknown(table, by_disc & np.isnan(mean_km))
    result = table.assign(route_status=np.where(inside, "within_zone", table["route_status"]))
    road_km = mean_km * settings.local_circuity
    for names, values in (
        (LENGTHS, road_km),
        (TIMES, road_km / settings.local_speed_kmh * 60),
        (("ferry_km", "ferry_min", "toll_km", *CHARGES), np.zeros(len(table))),
        (("unpaved_km", "delay_min"), np.full(len(table), np.nan)),
    ):
        for name in names:
            result[name] = np.where(by_disc, values, result[name])
    return result.assign(access_id=np.where(by_disc, access, table["access_id"]))


def _refuse_unknown(table: pd.DataFrame, lost: np.ndarray) -> None:
    if lost.any():
        first = table.loc[lost, ["zone_id", "site_id"]].iloc[0]
        raise RouteError(
            f"site {first['site_id']!r} stands at the very point of zone {first['zone_id']!r}, "
            "which has neither a polygon nor a neighbour to tell its size; a trip of no length "
            "has no price. Bring the zones as polygons, or with weighted points ([zones.points])."
        )
