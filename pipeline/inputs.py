"""The study's own files: zones, crosswalk, sites, and tables that it brings.

Each reader maps the study's own column names to ours, fills what may be absent, and checks the
result; an error names the file, the row and the column as their owner knows them.
"""

from __future__ import annotations

from pathlib import Path
from typing import cast

import geopandas as gpd
import numpy as np
import pandas as pd

from pipeline.census import census_figures, read_finer_points, weighted_points
from pipeline.centroids import locate
from pipeline.errors import InputError, StudyError, TableError
from pipeline.mapped import Mapped, as_truth, read_section
from pipeline.schema import Table
from pipeline.stays import split_sites
from pipeline.study import Study
from pipeline.tables import Crosswalk, MeasuredTimes, Sites, ZonePoints, Zones
from pipeline.userfiles import PARQUET, TEXT, UserTable, read_user_table


def read_zones(study: Study) -> gpd.GeoDataFrame:
    """Read the zones of origin, with polygons where the file has them.

    Absent columns: `postal_code` and `zone_name` are the identifier; `household_income` is
    missing; `lon` and `lat` are a point inside the polygon, or where finer points are known
    ([zones.points]) the mean place of their people. People and income may come from census
    units instead ([zones.census]). The columns that [zones] covariates names are carried along
    under their own names.

    Returns
    -------
    The `zones` table with `geometry` in EPSG:4326: polygons, or the centroid points.

    Raises
    ------
    TableError
        A column is missing, a zone is there twice, a population is negative, a layer has no
        CRS, or a zone has neither polygon nor centroid.
    """
    columns = study.zones.columns
    table = read_section(study.zones)
    if table.frame.empty:
        raise TableError(f"{table.name}: no zone; fill in the rows under the header.")
    mapped = Mapped(table, columns)
    zone_id = mapped.texts("zone_id")
    frame = pd.DataFrame(
        {
            "zone_id": zone_id,
            "postal_code": mapped.texts("postal_code", zone_id),
            "zone_name": mapped.texts("zone_name", zone_id),
        }
    )
    place = locate(table, lon=columns.lon, lat=columns.lat)
    points = read_finer_points(study)
    shapes = gpd.GeoSeries(place.geometry)
    if points is not None:
        place = _weighted_centroids(place, weighted_points(shapes, points))
    people = _people(study, mapped, shapes, points)
    # A figure of the census takes the place of a column of the same name.
    own = _covariates(study, table, {*people.columns})
    located = pd.concat([frame, people, place, own], axis=1)
    zones = gpd.GeoDataFrame(located, geometry="geometry", crs=place.crs)
    checked = Zones.checked(zones, source=table.source(columns.model_dump()))
    return cast("gpd.GeoDataFrame", checked.reset_index(drop=True))


def read_zone_points(study: Study) -> pd.DataFrame | None:
    """Read several weighted points per zone; None where the study asks for one only.

    Returns
    -------
    The `zone_points` table. A zone without finer points has its centroid alone.
    """
    number = study.zones.points.per_zone
    points = read_finer_points(study)
    if points is None or number == 1:
        return None
    zones = read_zones(study)
    found = weighted_points(gpd.GeoSeries(zones.geometry), points, per_zone=number)
    zone_id = zones["zone_id"].to_numpy(dtype=object)
    several = found.assign(zone_id=zone_id[found["zone"].to_numpy()]).drop(columns="zone")
    alone = zones.loc[~zones["zone_id"].isin(several["zone_id"]), ["zone_id", "lon", "lat"]]
    table = pd.concat([several, pd.DataFrame(alone).assign(weight=1.0)])
    table = table.sort_values("zone_id", kind="stable", ignore_index=True)
    table["point_id"] = (table.groupby("zone_id").cumcount() + 1).astype("str")
    return ZonePoints.checked(table)


def _weighted_centroids(place: gpd.GeoDataFrame, centroids: pd.DataFrame) -> gpd.GeoDataFrame:
    """Places with the mean place of the people where finer points are known."""
    moved = place.copy()
    rows = moved.index[centroids["zone"].to_numpy()]
    moved.loc[rows, "lon"] = centroids["lon"].to_numpy()
    moved.loc[rows, "lat"] = centroids["lat"].to_numpy()
    moved.loc[rows, "centroid_source"] = "population_weighted"
    return moved


def _people(
    study: Study, mapped: Mapped, shapes: gpd.GeoSeries, points: gpd.GeoDataFrame | None
) -> pd.DataFrame:
    """Population and income of the zones' own file, or of the census."""
    income = mapped.numbers("household_income", np.nan)
    if study.zones.census.file is None:
        population = mapped.numbers("population")
        return pd.DataFrame({"population": population, "household_income": income})
    figures = census_figures(study, shapes, points)
    if "household_income" not in figures:
        figures["household_income"] = income
    return figures


def read_crosswalk(study: Study) -> pd.DataFrame | None:
    """Read the crosswalk of codes that are no zone of their own; None where there is none."""
    path = study.visits.crosswalk
    if path is None:
        return None
    columns = study.visits.crosswalk_columns
    table = read_user_table(path, encoding=study.visits.encoding)
    mapped = Mapped(table, columns)
    frame = pd.DataFrame(
        {"postal_code": mapped.texts("postal_code"), "zone_id": mapped.texts("zone_id")}
    )
    checked = Crosswalk.checked(frame, source=table.source(columns.model_dump()))
    return checked.reset_index(drop=True)


def read_measured_times(study: Study) -> pd.DataFrame | None:
    """Read measured or reported times; None where the study has none."""
    section = study.routes.measured
    if section.file is None:
        return None
    table = read_section(section)
    mapped = Mapped(table, section.columns)
    frame = pd.DataFrame(
        {
            "zone_id": mapped.texts("zone_id"),
            "site_id": mapped.texts("site_id"),
            "measured_min": mapped.numbers("measured_min"),
        }
    )
    checked = MeasuredTimes.checked(frame, source=table.source(section.columns.model_dump()))
    return checked.reset_index(drop=True)


def read_sites(study: Study) -> pd.DataFrame:
    """Read the sites to be valued and their substitutes, one row per access point.

    Absent columns: `access_id` counts the rows of a site from 1; `site_name` is the identifier;
    `role` is 'site'; `fee` is 0. With [sites] stays = "apart" each valued site is two.

    Raises
    ------
    TableError
        A column is missing, an access point is there twice, no site is to be valued, or a site
        has two roles.
    """
    columns = study.sites.columns
    table = read_section(study.sites)
    mapped = Mapped(table, columns)
    site_id = mapped.texts("site_id")
    numbered = (site_id.groupby(site_id).cumcount() + 1).astype("str")
    frame = pd.DataFrame(
        {
            "site_id": site_id,
            "access_id": mapped.texts("access_id", numbered),
            "site_name": mapped.texts("site_name", site_id),
            "role": mapped.texts("role", "site").str.lower(),
            "fee": mapped.numbers("fee", 0.0),
        }
    )
    place = locate(table, lon=columns.lon, lat=columns.lat)
    frame = frame.assign(lon=place["lon"], lat=place["lat"])
    checked = Sites.checked(frame, source=table.source(columns.model_dump()))
    _check_roles(table, checked)
    if study.sites.stays == "apart":
        checked = Sites.checked(split_sites(checked))
    return checked.reset_index(drop=True)


def read_brought(table_class: type[Table], path: Path) -> pd.DataFrame:
    """Read a table that the study brings ready made.

    Declared columns become what they are declared to be; of the others, a column of numbers
    becomes numbers unless a value starts with a needless zero, as codes do.

    Parameters
    ----------
    table_class : its declaration.
    path : CSV or Parquet, with our column names.

    Raises
    ------
    TableError
        The file is no such table.
    """
    if path.suffix.lower() not in (*TEXT, *PARQUET):
        raise InputError(
            f"{path.name}: a ready {table_class.table_name()} is read from CSV or Parquet; "
            "save it as one of them."
        )
    table = read_user_table(path)
    declared = table_class.to_schema().columns
    frame = pd.DataFrame(index=table.frame.index)
    for name in table.frame.columns:
        kind = str(declared[name].dtype) if name in declared else _kind(table, name)
        frame[name] = _as_kind(table, str(name), kind)
    if frame.empty:
        raise TableError(f"{table.name}: the table has no row; fill it in.")
    return table_class.checked(frame, source=table.source({})).reset_index(drop=True)


def _covariates(study: Study, table: UserTable, known: set[str]) -> pd.DataFrame:
    """Further columns of the zones, as numbers; those that are `known` are not read again."""
    fixed = {*Zones.columns(), "site_id", "visits", "travel_cost", "geometry"}
    for name in study.zones.covariates:
        if name in fixed:
            raise StudyError(f"[zones] covariates: {name!r} is a column of our own; remove it.")
        if name not in known:
            table.need(name, "named in [zones] covariates")
    names = [name for name in study.zones.covariates if name not in known]
    columns = {name: table.numbers(name) for name in names}
    return pd.DataFrame(columns, index=table.frame.index)


def _check_roles(table: UserTable, sites: pd.DataFrame) -> None:
    """At least one site is to be valued, and each site has one role."""
    if not (sites["role"] == "site").any():
        raise TableError(f"{table.name}: no row has the role 'site'; say which site is valued.")
    roles = sites.groupby("site_id")["role"].nunique()
    if (roles > 1).any():
        raise TableError(
            f"{table.name}: site {roles.idxmax()!r} is both 'site' and 'substitute'; give all its "
            "access points one role."
        )


def _kind(table: UserTable, name: str) -> str:
    """Type of an undeclared column of a brought table."""
    text = table.texts(name).dropna()
    as_code = text.str.match(r"0\d").any()
    numeric = pd.to_numeric(text, errors="coerce").notna().all()
    return "float64" if numeric and not as_code and not text.empty else "str"


def _as_kind(table: UserTable, name: str, kind: str) -> pd.Series:
    if kind in ("float64", "int64"):
        return table.numbers(name)
    return as_truth(table, name) if kind == "bool" else table.texts(name)
