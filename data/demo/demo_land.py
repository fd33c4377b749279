"""The invented county: coast, towns, postal zones and sites, on a flat plane in km.

Everything here is made up. The county lies in the open Atlantic, where there is no land, so
that no real place is shown. East is x, north is y, both in km from the county's middle.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TypeAlias

import geopandas as gpd
import numpy as np
import pyproj
import shapely
from numpy.typing import NDArray
from shapely.geometry import MultiPoint, Point, Polygon

Points: TypeAlias = NDArray[np.float64]

MIDDLE_LON, MIDDLE_LAT = -23.5, 48.6
_PLANE = pyproj.CRS.from_proj4(
    f"+proj=aeqd +lat_0={MIDDLE_LAT} +lon_0={MIDDLE_LON} +datum=WGS84 +units=km"
)
_TO_WGS84 = pyproj.Transformer.from_crs(_PLANE, "EPSG:4326", always_xy=True)

RESERVE_XY = (-40.0, 0.9)
HIDES_XY = (-34.5, 1.2)
LAGOON_XY = (6.0, 30.0)
LAKE_XY = (31.0, -23.0)
ISLAND_XY = (-76.0, -13.0)
ISLET_XY = (-73.0, 24.0)
BRIDGE_X = -27.0


@dataclass(frozen=True)
class Town:
    """A town: its name, middle (km), spread of its districts (km), people and code prefix."""

    name: str
    xy: tuple[float, float]
    spread_km: float
    districts: int
    people: float
    household_income: float
    prefix: str


TOWNS = (
    Town("Quenmouth", (-29.0, 17.0), 4.6, 44, 3_900, 39_000, "01"),
    Town("Tarvensted", (-21.0, -19.0), 4.0, 31, 3_300, 34_500, "TV"),
    Town("Orrelby", (28.0, 4.0), 3.3, 20, 2_900, 36_500, "02"),
)
VILLAGES = (
    "Brindlow", "Cattersey", "Dunnering", "Elmswade", "Farrowick", "Gossamley", "Hennerby",
    "Ivelthorn", "Jarrowden", "Kelmersh", "Lathergill", "Mistlewick", "Nunnerdale", "Oxmarden",
    "Pellowby", "Ravensmire", "Sallowfen", "Thrupmarsh", "Ulverden", "Wexcombe", "Yarnerby",
    "Ashmerrow", "Bellowfen", "Crakesham",
)  # fmt: skip
DISTRICTS = (
    "Old Quay", "Northgate", "Southgate", "Mill Side", "Chandlers", "Ropewalk", "Lower Green",
    "Upper Green", "Saltings", "Castle Mound", "Weavers", "Brickfields", "Long Acre", "The Rows",
    "Tanners", "Hill Foot", "Station", "Gasworks", "Orchard End", "Hospital", "Five Elms",
    "Race Field", "Priory", "Market", "Docks", "Windmill", "Quarry", "Coopers", "Barrack",
    "Almshouse", "Sandpits", "Lime Kiln", "Cold Harbour", "Meadow", "Ferry Lane", "Reservoir",
    "Foundry", "New Bridge", "Kiln Field", "Shepherds", "Glebe", "Park Side", "Cross Keys",
    "Fish Hill",
)  # fmt: skip


@dataclass(frozen=True)
class County:
    """Coast, zones and where people live; all in km on the plane."""

    mainland: Polygon
    island: Polygon
    islet: Polygon
    seeds: Points
    zones: gpd.GeoDataFrame


def to_lon_lat(xy: Points) -> Points:
    """Plane (km) to longitude and latitude (WGS 84), to the 1e-7 degree that OSM stores."""
    lon, lat = _TO_WGS84.transform(xy[:, 0], xy[:, 1])
    return np.round(np.column_stack([lon, lat]), 7)


def make_county(seed: int) -> County:
    """Draw the county. The same seed gives the same county."""
    rng = np.random.default_rng([seed, 1])
    mainland = _coast(rng)
    island = _wavy(ISLAND_XY, 5.0, rng)
    islet = _wavy(ISLET_XY, 0.9, rng)
    seeds = np.vstack([_district_seeds(mainland, rng), [ISLAND_XY, ISLET_XY]])
    shapes = [*_cells(seeds[:-2], mainland), island, islet]
    return County(mainland, island, islet, seeds, _zone_table(shapes, rng))


def _coast(rng: np.random.Generator) -> Polygon:
    """A rounded rectangle of about 110 by 80 km with a ragged coast and a deep estuary."""
    angle = np.linspace(0, 2 * np.pi, 420, endpoint=False)
    radius = (np.abs(np.cos(angle) / 56) ** 3 + np.abs(np.sin(angle) / 40) ** 3) ** (-1 / 3)
    for waves, share in ((3, 0.03), (5, 0.02), (8, 0.015), (13, 0.01), (21, 0.006), (55, 0.004)):
        radius = radius * (1 + share * np.sin(waves * angle + rng.uniform(0, 2 * np.pi)))
    coast = Polygon(np.column_stack([radius * np.cos(angle), radius * np.sin(angle)]))
    land = coast.difference(_estuary())
    parts: list[Polygon] = list(shapely.get_parts(land))
    return max(parts, key=lambda part: float(part.area))


def _estuary() -> Polygon:
    x = np.linspace(-80, -8, 90)
    half = estuary_half_width_km(x)
    middle = estuary_middle_km(x)
    upper = np.column_stack([x, middle + half])
    lower = np.column_stack([x, middle - half])
    return Polygon(np.vstack([lower, upper[::-1]]))


def estuary_middle_km(x: Points) -> Points:
    """Northing of the estuary's middle at an easting."""
    return np.asarray(5.0 + 1.2 * np.sin(x / 9), dtype=np.float64)


def estuary_half_width_km(x: Points) -> Points:
    """Half the width of the estuary at an easting, from 0.25 km at its head."""
    return np.asarray(0.25 + 2.6 * ((-8 - x) / 45) ** 1.2, dtype=np.float64)


def _wavy(middle: tuple[float, float], radius_km: float, rng: np.random.Generator) -> Polygon:
    angle = np.linspace(0, 2 * np.pi, 60, endpoint=False)
    radius = radius_km * (1 + 0.1 * np.sin(3 * angle + rng.uniform(0, 6)))
    radius = radius * (1 + 0.05 * np.sin(7 * angle + rng.uniform(0, 6)))
    return Polygon(
        np.array(middle) + np.column_stack([np.cos(angle), np.sin(angle)]) * radius[:, None]
    )


def _district_seeds(land: Polygon, rng: np.random.Generator) -> Points:
    """Where the districts' people live: crowded in the towns, apart in the country."""
    kept: list[Points] = []
    for town in TOWNS:
        last = len(kept) + town.districts
        while len(kept) < last:
            _keep_if_apart(kept, rng.normal(town.xy, town.spread_km), land, 0.8)
    last = len(kept) + len(VILLAGES)
    while len(kept) < last:
        _keep_if_apart(kept, rng.uniform((-55, -39), (55, 39)), land, 7.0)
    return np.array(kept)


def _keep_if_apart(kept: list[Points], xy: Points, land: Polygon, apart_km: float) -> None:
    near = [float(np.hypot(*(xy - other))) for other in kept]
    if min(near, default=np.inf) > apart_km and land.buffer(-0.6).contains(Point(xy)):
        kept.append(xy)


def _cells(seeds: Points, land: Polygon) -> list[Polygon]:
    """Voronoi cells cut by the coast; a piece across the water joins its neighbour on land."""
    cells = shapely.get_parts(
        shapely.voronoi_polygons(MultiPoint(seeds), extend_to=land.envelope, ordered=True)
    )
    shapes: list[Polygon] = []
    strays: list[Polygon] = []
    for cell, seed in zip(cells, seeds, strict=True):
        for part in shapely.get_parts(cell.intersection(land)):
            (shapes if part.contains(Point(seed)) else strays).append(part)
    for stray in strays:
        shared = [float(stray.intersection(shape).length) for shape in shapes]
        widest = int(np.argmax(shared))
        (shapes[widest],) = shapely.get_parts(shapes[widest].union(stray))
    return shapes


def _zone_table(shapes: list[Polygon], rng: np.random.Generator) -> gpd.GeoDataFrame:
    codes, names, people, incomes = [], [], [], []
    for town in TOWNS:
        for number in range(town.districts):
            codes.append(f"{town.prefix}{number + 1:02d}")
            names.append(f"{town.name} {DISTRICTS[number]}")
            people.append(town.people * rng.lognormal(-0.08, 0.4))
            incomes.append(town.household_income + rng.normal(0, 5_500))
    for number, village in enumerate(VILLAGES):
        codes.append(f"03{number * 4 + 1:02d}")
        names.append(village)
        people.append(1_700 * rng.lognormal(-0.12, 0.5))
        incomes.append(35_000 + rng.normal(0, 4_500))
    codes += ["TS01", "TS02"]
    names += ["Isle of Tessamay", "Little Tessamay"]
    people += [1_240.0, 9.0]
    incomes += [31_000.0, 29_500.0]
    return gpd.GeoDataFrame(
        {
            "postcode": codes,
            "district": names,
            "residents": np.round(people).astype(np.int64),
            "income_eur": np.round(incomes, -2).astype(np.int64),
        },
        geometry=[_in_degrees(shape) for shape in shapes],
        crs="EPSG:4326",
    )


def _in_degrees(shape: Polygon) -> Polygon:
    return shapely.transform(shape, lambda xy: np.round(to_lon_lat(xy), 6))
