"""Where a zone or a site lies: the columns that say so, or a point inside its polygon."""

from __future__ import annotations

import geopandas as gpd
import numpy as np
import pandas as pd
import shapely
from pyproj import CRS

from pipeline.errors import TableError
from pipeline.userfiles import UserTable, first_true

WGS84 = "EPSG:4326"
POLYGONS = ("Polygon", "MultiPolygon")


def locate(table: UserTable, *, lon: str, lat: str) -> gpd.GeoDataFrame:
    """Centroid and shape of each row.

    A row's centroid is what the lon and lat columns say (degrees, WGS 84). Where they are
    absent or empty it is the row's own point, or a point inside its polygon.

    Parameters
    ----------
    table : the user's table, with or without `geometry` in any CRS.
    lon, lat : names of its columns of longitude and latitude.

    Returns
    -------
    `lon, lat, centroid_source, geometry` (EPSG:4326), with the table's index; the geometry is
    the centroid itself where the table has none.

    Raises
    ------
    TableError
        There is neither geometry nor lon and lat, or the geometry has no CRS, is empty, or is
        neither point nor polygon.
    """
    given = pd.DataFrame(
        {
            name: table.numbers(column) if table.has(column) else np.nan
            for name, column in (("lon", lon), ("lat", lat))
        },
        index=table.frame.index,
    )
    if not table.has("geometry"):
        table.need(lon, "longitude; the file has no geometry")
        table.need(lat, "latitude; the file has no geometry")
        points = gpd.points_from_xy(given["lon"], given["lat"], crs=WGS84)
        return gpd.GeoDataFrame(given.assign(centroid_source="given"), geometry=points)
    shapes = shapes_wgs84(table)
    unknown = given.isna().any(axis=1)
    inside = inside_points(gpd.GeoSeries(shapes[unknown]))
    given.loc[unknown, "lon"] = shapely.get_x(inside.to_numpy())
    given.loc[unknown, "lat"] = shapely.get_y(inside.to_numpy())
    from_polygon = unknown & (shapes.geom_type != "Point")
    source = np.where(from_polygon, "inside_polygon", "given")
    return gpd.GeoDataFrame(given.assign(centroid_source=source), geometry=shapes)


def shapes_wgs84(table: UserTable) -> gpd.GeoSeries:
    """The table's points or polygons in EPSG:4326, valid and not empty."""
    shapes = gpd.GeoSeries(table.frame["geometry"])
    if shapes.crs is None:
        raise TableError(
            f"{table.name}: the layer does not say its coordinate reference system (CRS), so its "
            "coordinates have no place on Earth. Write it into the file (a .prj beside a "
            "shapefile; 'assign projection' in a GIS)."
        )
    _refuse(table, shapes.isna() | shapes.is_empty, "without a geometry", "Draw or remove them.")
    kinds = (*POLYGONS, "Point")
    _refuse(
        table,
        ~shapes.geom_type.isin(kinds),
        f"neither point nor polygon (the first is a {shapes.geom_type.iloc[0]})",
        "Use a layer of polygons or of points.",
    )
    broken = ~shapes.is_valid
    if broken.any():
        # A ring that crosses itself; the repair keeps the area that the ring encloses.
        shapes = shapes.where(~broken, shapes.make_valid(method="structure"))
    return shapes.to_crs(WGS84)


def _refuse(table: UserTable, wrong: pd.Series[bool], what: str, remedy: str) -> None:
    if wrong.any():
        count = int(wrong.sum())
        row = table.row(wrong, first_true(wrong))
        raise TableError(
            f"{table.name}: {count} of {len(wrong)} features are {what}; first:{row}. {remedy}"
        )


def inside_points(shapes: gpd.GeoSeries) -> gpd.GeoSeries:
    """A point that lies inside each polygon, found in an equal-area projection.

    Parameters
    ----------
    shapes : polygons or points in EPSG:4326.

    Returns
    -------
    Points in EPSG:4326; a point is its own.
    """
    if shapes.empty:
        return shapes
    projected = shapes.to_crs(equal_area_crs(shapes))
    return projected.representative_point().to_crs(WGS84)


def equal_area_crs(shapes: gpd.GeoSeries) -> CRS:
    """Lambert azimuthal equal-area projection (WGS 84, metres) about the middle of `shapes`."""
    lon, lat = middle(shapes)
    return CRS.from_dict(
        {"proj": "laea", "lon_0": lon, "lat_0": lat, "datum": "WGS84", "units": "m"}
    )


def middle(shapes: gpd.GeoSeries) -> tuple[float, float]:
    """Longitude and latitude of the middle of shapes in EPSG:4326.

    It is the mean direction of the shapes' bounding-box centres, so that shapes on both sides of
    the 180th meridian have theirs between them.
    """
    bounds = shapes.bounds
    lon = np.radians((bounds["minx"] + bounds["maxx"]).to_numpy() / 2)
    lat = np.radians((bounds["miny"] + bounds["maxy"]).to_numpy() / 2)
    x, y, z = np.cos(lat) * np.cos(lon), np.cos(lat) * np.sin(lon), np.sin(lat)
    middle_lon = np.degrees(np.arctan2(y.mean(), x.mean()))
    middle_lat = np.degrees(np.arctan2(z.mean(), np.hypot(x.mean(), y.mean())))
    return float(middle_lon), float(middle_lat)
