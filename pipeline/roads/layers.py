"""Reads layers of lines with the study's own column names: one line, one road.

Values become the tags that OSM would have, so the rules of the road hold for them alike. Roads
are joined where a line ends at another line's end or vertex, within a tolerance; where lines
only cross, on request.
"""

from __future__ import annotations

import math
from pathlib import Path
from typing import Any

import geopandas as gpd
import numpy as np
import numpy.typing as npt
import pandas as pd
import pyogrio
import shapely

from pipeline.errors import RoadsError
from pipeline.road_settings import RoadColumns, RoadsSettings
from pipeline.roads.arrays import Int64, offsets
from pipeline.roads.merge import FileRoads, TagColumn
from pipeline.roads.noding import at_crossings, node_numbers

PARQUET = (".parquet", ".geoparquet")
LAYERS = (".gpkg", ".shp", ".fgb", ".geojson", ".json", *PARQUET)
READ_ERRORS = (RuntimeError, ValueError, OSError, TypeError, KeyError)
YES, NO = ("yes", "true", "1", "y", "t"), ("no", "false", "0", "n", "f", "")
ONE_WAY = {"yes", "no", "-1", "reversible", "alternating"}
# Classes of `highway` that are no roads for cars, and may stand beside them in a layer.
NO_ROADS = {
    "footway", "cycleway", "path", "steps", "pedestrian", "bridleway", "corridor", "construction",
    "proposed", "busway", "raceway", "platform", "elevator", "rest_area", "services", "ferry",
}  # fmt: skip


def read_layers(paths: tuple[Path, ...], settings: RoadsSettings, classes: set[str]) -> FileRoads:
    """Roads of layers of lines, joined across the files.

    Parameters
    ----------
    paths : GeoPackage, Shapefile, FlatGeobuf, GeoJSON or GeoParquet files.
    settings : column names and values, tolerance, whether to join at crossings.
    classes : names of road classes.

    Raises
    ------
    RoadsError
        A file is no layer of lines, lacks a column, or has values that are not known.
    """
    frames = [_frame(path, settings) for path in paths]
    tags = pd.concat(
        [_tags(frame, settings, classes, path) for frame, path in zip(frames, paths, strict=True)],
        ignore_index=True,
    )
    lines = np.concatenate([frame.geometry.to_numpy() for frame in frames])
    kept = _once(lines, tags)
    lines, tags = lines[kept], tags.iloc[kept].reset_index(drop=True)
    level = tags.pop("level").to_numpy()
    if settings.node_at_crossings:
        lines = at_crossings(lines, level)
    points, line = shapely.get_coordinates(lines, return_index=True)
    place = np.rint(points * 1e7).astype(np.int64)
    crossed = level if settings.node_at_crossings else None
    number, first = node_numbers(place, line, settings.node_tolerance_m, crossed)
    count = len(first)
    return FileRoads(
        way_id=np.arange(1, len(lines) + 1, dtype=np.int64),
        way_start=offsets(np.bincount(line, minlength=len(lines)).astype(np.int64)),
        way_node=number,
        node_id=np.arange(-count, 0, dtype=np.int64),
        node_lon_e7=place[first, 0].astype(np.int32),
        node_lat_e7=place[first, 1].astype(np.int32),
        tags={str(key): _column(tags[key]) for key in tags},
    )


def _column(values: pd.Series[Any]) -> TagColumn:
    rows = np.flatnonzero(values.notna())
    return TagColumn.of(rows.tolist(), values.iloc[rows].tolist())


def _once(lines: npt.NDArray[np.object_], tags: pd.DataFrame) -> Int64:
    """Rows without those that repeat a two-way road, drawn either way."""
    keys = pd.DataFrame({"line": shapely.to_wkb(shapely.normalize(lines))})
    keys = pd.concat([keys, tags.fillna("")], axis=1)
    directed = tags["oneway"].notna() & (tags["oneway"] != "no")
    keys["own"] = np.where(directed, np.arange(len(tags)), -1)
    return np.flatnonzero(~keys.duplicated())


# --- one file --------------------------------------------------------------------------------


def _frame(path: Path, settings: RoadsSettings) -> gpd.GeoDataFrame:
    """Lines of one file in WGS 84, one row each."""
    try:
        if path.suffix in PARQUET:
            frame = gpd.read_parquet(path)
        else:
            frame = pyogrio.read_dataframe(path, layer=settings.layer)
    except READ_ERRORS as error:
        raise RoadsError(
            f"{path.name}: not a layer of lines that can be read ({error}). Save it again as "
            "GeoPackage, and name its layer in roads.layer if there are several."
        ) from None
    if not isinstance(frame, gpd.GeoDataFrame) or not len(frame):
        raise RoadsError(f"{path.name}: a layer without lines; name another in roads.layer.")
    if frame.crs is None:
        raise RoadsError(
            f"{path.name}: the layer does not say its coordinate reference system. "
            "Save it with one (a Shapefile needs its .prj file)."
        )
    frame = frame.to_crs(4326).explode(ignore_index=True)
    is_line = frame.geom_type == "LineString"
    if not is_line.all():
        row = int(np.flatnonzero(~is_line)[0])
        raise RoadsError(
            f"{path.name}: {int((~is_line).sum())} of {len(frame)} features are no lines (first: "
            f"row {row + 1}, {frame.geom_type.iloc[row] or 'nothing'}). Keep only lines in it."
        )
    frame.geometry = shapely.force_2d(frame.geometry.to_numpy())
    return frame


def _tags(
    frame: gpd.GeoDataFrame, settings: RoadsSettings, classes: set[str], path: Path
) -> pd.DataFrame:
    """What OSM would call the columns, as text; missing is missing."""
    names = settings.columns
    for field, default in RoadColumns():
        column = getattr(names, field)
        if column not in frame.columns and (field == "road_class" or column != default):
            have = ", ".join(str(name) for name in frame.columns if name != frame.geometry.name)
            raise RoadsError(
                f"{path.name}: column {column!r} is missing; the layer has: {have}. "
                f"Name the layer's own column in roads.columns.{field}."
            )
    texts = {
        field: _texts(list(frame[column]) if column in frame else [None] * len(frame))
        for field, column in names
    }
    road_class = texts["road_class"].replace(settings.class_values)
    _know(road_class, classes | NO_ROADS, path, names.road_class, "roads.class_values")
    oneway = texts["oneway"].replace(settings.oneway_values).map(_yes_or_no, na_action="ignore")
    _know(oneway, ONE_WAY, path, names.oneway, "roads.oneway_values")
    is_ferry = road_class == "ferry"
    speed = texts["speed"].where(texts["speed"] != "0")
    if settings.speed_unit == "mph":
        speed = speed.where(~speed.str.fullmatch(r"[\d.]+", na=False), speed + " mph")
    return pd.DataFrame(
        {
            "highway": road_class.where(~is_ferry),
            "route": road_class.where(is_ferry),
            "maxspeed": speed,
            "oneway": oneway,
            "toll": texts["toll"].map(_yes_or_no, na_action="ignore"),
            "surface": texts["surface"],
            "access": texts["access"],
            "level": texts["level"].fillna("0"),
        }
    )


def _texts(values: list[Any]) -> pd.Series[Any]:
    """Values as text: whole numbers without a point, truth as yes and no."""
    return pd.Series([_text(value) for value in values], dtype=object)


def _text(value: object) -> str | None:
    if value is None or (isinstance(value, float) and math.isnan(value)) or value is pd.NA:
        return None
    if isinstance(value, bool | np.bool_):
        return "yes" if value else "no"
    if isinstance(value, float | np.floating) and float(value).is_integer():
        return str(int(value))
    return str(value).strip() or None


def _yes_or_no(value: str) -> str:
    folded = value.casefold()
    return "yes" if folded in YES else "no" if folded in NO else value


def _know(values: pd.Series[Any], known: set[str], path: Path, column: str, key: str) -> None:
    """Raise RoadsError for values that nothing is known of."""
    strange = values[values.notna() & ~values.isin(known)]
    if len(strange):
        counts = strange.value_counts()
        listed = ", ".join(f"{value!r} ({count})" for value, count in counts.head(5).items())
        raise RoadsError(
            f"{path.name}: {len(strange)} of {len(values)} lines have a value in column "
            f"{column!r} that is not known: {listed}. Say what each means in {key}; known: "
            f"{', '.join(sorted(known))}."
        )
