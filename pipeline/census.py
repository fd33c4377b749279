"""Zones' people and income from census units, and their centroids from finer points."""

from __future__ import annotations

import geopandas as gpd
import numpy as np
import pandas as pd

from pipeline.centroids import POLYGONS, WGS84, equal_area_crs, locate, shapes_wgs84
from pipeline.errors import InputError, TableError
from pipeline.mapped import read_section
from pipeline.overlay import (
    Shares,
    carried_averages,
    carried_counts,
    first_holding,
    unit_shares,
)
from pipeline.study import Study
from pipeline.userfiles import UserTable, first_true
from pipeline.visit_settings import CensusSettings


def read_finer_points(study: Study) -> gpd.GeoDataFrame | None:
    """Finer points with `people`, in EPSG:4326; None where the study has none.

    Raises
    ------
    TableError
        A number of people is negative or missing, or nobody lives at any point.
    """
    section = study.zones.points
    if section.file is None:
        return None
    table = read_section(section)
    place = locate(table, lon=section.lon, lat=section.lat)
    people = pd.Series(1.0, index=table.frame.index)
    if table.has(section.people) or "people" in section.model_fields_set:
        table.need(section.people, "people who live at the point")
        people = table.numbers(section.people)
    wrong = ~(people >= 0)
    if wrong.any():
        first = first_true(wrong)
        raise TableError(
            f"{table.name}: {int(wrong.sum())} value(s) in column {section.people!r} are missing "
            f"or below 0; first: {people.iloc[first]:g}{table.row(wrong, first)}. Correct the file."
        )
    if people.sum() <= 0:
        raise TableError(f"{table.name}: nobody lives at any point; correct the file.")
    geometry = gpd.points_from_xy(place["lon"], place["lat"], crs=WGS84)
    return gpd.GeoDataFrame({"people": people}, geometry=geometry)


def weighted_points(
    zones: gpd.GeoSeries, points: gpd.GeoDataFrame, *, per_zone: int = 1
) -> pd.DataFrame:
    """Places of the people of each zone: their mean, or the means of several groups of them.

    The people of a zone are halved along the longer side of where they live, then the larger
    part again, until there are `per_zone` groups; each is represented by the mean place of its
    people, in an equal-area projection. The same input gives the same groups.

    Parameters
    ----------
    zones : polygons in EPSG:4326.
    points : `people` and geometry in EPSG:4326.

    Returns
    -------
    `zone` (position), `lon, lat, weight` (share of the zone's people); a zone without people at
    any point is absent.
    """
    crs = equal_area_crs(zones)
    zone = first_holding(points.geometry.to_numpy(), zones.to_numpy())
    planar = points.to_crs(crs).geometry
    frame = pd.DataFrame(
        {"zone": zone, "x": planar.x, "y": planar.y, "people": points["people"]}
    ).query("zone >= 0 and people > 0")
    rows: list[tuple[int, float, float, float]] = []
    for position, people in frame.groupby("zone", sort=True):
        total = float(people["people"].sum())
        for group in _groups(people, per_zone):
            weight = group["people"]
            x, y = np.average(group["x"], weights=weight), np.average(group["y"], weights=weight)
            rows.append((int(str(position)), float(x), float(y), float(weight.sum()) / total))
    means = pd.DataFrame(rows, columns=["zone", "x", "y", "weight"])
    lonlat = gpd.GeoSeries(gpd.points_from_xy(means["x"], means["y"], crs=crs)).to_crs(WGS84)
    return means.assign(lon=lonlat.x, lat=lonlat.y)[["zone", "lon", "lat", "weight"]]


def _groups(people: pd.DataFrame, number: int) -> list[pd.DataFrame]:
    """Split where people live into groups of about the same number, near each other."""
    groups = [people]
    while len(groups) < number:
        largest = max(groups, key=lambda group: (len(group) > 1, group["people"].sum()))
        if len(largest) < 2:
            break
        groups = [group for group in groups if group is not largest]
        groups += _halves(largest)
    return groups


def _halves(people: pd.DataFrame) -> list[pd.DataFrame]:
    spread = people[["x", "y"]].max() - people[["x", "y"]].min()
    ordered = people.sort_values([str(spread.idxmax()), "x", "y"], kind="stable")
    below = ordered["people"].cumsum() <= ordered["people"].sum() / 2
    cut = min(max(int(below.sum()), 1), len(ordered) - 1)
    return [ordered.iloc[:cut], ordered.iloc[cut:]]


def census_figures(
    study: Study, zones: gpd.GeoSeries, points: gpd.GeoDataFrame | None
) -> pd.DataFrame:
    """Census figures by zone.

    Returns
    -------
    `population, household_income` (if the census has it), the further counts and averages, and
    `census_cover_share` (of the zone's area), with the index of `zones`.

    Raises
    ------
    InputError
        Zones or units are no polygons, or a larger share of the census' people lives outside
        every zone than [zones.census] max_outside_share.
    """
    section = study.zones.census
    table = read_section(section)
    units = _polygons(table.name, shapes_wgs84(table) if table.has("geometry") else None)
    _polygons("zones", zones)
    if section.method == "points" and points is None:
        raise InputError(
            '[zones.census] method = "points" needs [zones.points] file; name it, or use "area".'
        )
    shares = unit_shares(units, zones, points if section.method == "points" else None)
    people = _checked(table, section.population)
    _check_outside(people, shares, table, section)
    number = len(zones)
    figures = {"population": carried_counts(people, shares, number)}
    for name in section.counts:
        figures[name] = carried_counts(_checked(table, name), shares, number)
    averages = dict.fromkeys(section.averages)
    if section.household_income is not None:
        averages |= {"household_income": section.household_income}
    for name, column in averages.items():
        values = _checked(table, column or name, may_miss=True)
        figures[name] = carried_averages(values, people, shares, number)
    return pd.DataFrame(figures | {"census_cover_share": shares.covered}, index=zones.index)


def _polygons(name: str, shapes: gpd.GeoSeries | None) -> gpd.GeoSeries:
    if shapes is None or not shapes.geom_type.isin(POLYGONS).all():
        raise InputError(
            f"{name}: census figures are carried over between polygons, and these are none. "
            "Bring a layer of polygons."
        )
    return shapes


def _checked(table: UserTable, column: str, *, may_miss: bool = False) -> np.ndarray:
    """A column of figures of the census, none below 0."""
    table.need(column, "named in [zones.census]")
    values = table.numbers(column)
    wrong = (values < 0) | (values.isna() & (not may_miss))
    if wrong.any():
        first = first_true(wrong)
        raise TableError(
            f"{table.name}: {int(wrong.sum())} value(s) in column {column!r} are missing or below "
            f"0; first: {values.iloc[first]:g}{table.row(wrong, first)}. Correct the census."
        )
    return values.to_numpy(dtype=float)


def _check_outside(
    people: np.ndarray, shares: Shares, table: UserTable, section: CensusSettings
) -> None:
    outside = float(people @ shares.outside)
    total = float(people.sum())
    if total <= 0:
        raise TableError(f"{table.name}: nobody lives in any census unit; correct the census.")
    if outside > section.max_outside_share * total:
        worst = int((people * shares.outside).argmax())
        unit = table.texts(section.unit_id).iloc[worst] if table.has(section.unit_id) else worst + 1
        raise InputError(
            f"{table.name}: {outside:,.0f} of {total:,.0f} people ({outside / total:.1%}) live "
            f"outside every zone; most in unit {unit} ({people[worst] * shares.outside[worst]:,.0f}"
            f"). The study allows {section.max_outside_share:.1%}: complete the zones, or raise "
            "[zones.census] max_outside_share."
        )
