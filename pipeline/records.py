"""The visit records as the study's file has them: registers, interviews, household surveys, counts.

Only the columns that the study names are read (``[visits.columns]``), so that a file's own
column 'date' or 'mode' is no surprise. Each is checked against its declaration, and errors name
the file, the row and the column as their owner knows them.
"""

from __future__ import annotations

from collections.abc import Callable

import geopandas as gpd
import numpy as np
import pandas as pd

from pipeline.centroids import WGS84
from pipeline.countries import country_names
from pipeline.errors import StudyError, TableError
from pipeline.inputs import read_sites
from pipeline.mapped import Mapped, as_truth, read_section
from pipeline.stays import place_ids
from pipeline.study import Study
from pipeline.tables import SurveyColumns, VisitRecords
from pipeline.userfiles import UserTable, first_true
from pipeline.visit_settings import VisitColumns, VisitsSettings

PARTY_TOLERANCE = 1e-6


def read_visit_records(study: Study) -> pd.DataFrame:
    """Read the visit records.

    Absent columns: `record_id` is the row in the file; `site_id` is the only site to be valued;
    `trips` and `weight` are 1; `party_size` is adults and children together, or unknown. A
    record whose home is a point (columns lon and lat, or a GIS layer) needs no postal code.

    Raises
    ------
    TableError
        The file is empty, lacks a column, or holds a value that cannot be right: a party of
        zero, a record twice, a purpose share over 1, weights that sum to nothing, a site that
        is not in the sites file.
    """
    visits = study.visits
    table = read_section(visits)
    if table.frame.empty:
        raise TableError(f"{table.name}: no visit record; fill in the rows under the header.")
    sites = read_sites(study)
    mapped = Mapped(table, visits.columns)
    rows = table.frame.index
    points = _points(table, mapped, visits)
    no_code: float | None = None if points.empty else np.nan
    frame = pd.DataFrame(
        {
            "record_id": mapped.texts("record_id", pd.Series(rows + 1, rows)),
            "postal_code_raw": mapped.texts("postal_code", no_code),
            "site_id": mapped.texts("site_id", _only_site(sites)),
            "trips": mapped.numbers("trips", 1.0),
            "party_size": _party_sizes(table, mapped, visits.columns),
            "weight": mapped.numbers("weight", 1.0),
        },
        index=rows,
    )
    frame = pd.concat([frame, points, _survey(table, mapped, visits)], axis=1)
    names = {**visits.columns.model_dump(exclude_none=True)}
    names["postal_code_raw"] = visits.columns.postal_code
    checked = VisitRecords.checked(frame, source=table.source(names))
    _check_sites(table, visits.columns.site_id, checked["site_id"], sites)
    _check_weights(table, visits.columns.weight, checked)
    if visits.kind == "on_site":
        _check_interviews(table, visits.columns.trips, checked["trips"])
    return checked.reset_index(drop=True)


def _survey(table: UserTable, mapped: Mapped, visits: VisitsSettings) -> pd.DataFrame:
    """The survey columns that the study names, by our names; and its covariates."""
    special: dict[str, Callable[[str], pd.Series]] = {
        "mode": lambda column: table.texts(column).str.lower(),
        "date": lambda column: _dates(table, column, visits.date_format),
        "country": lambda column: _countries(table, column, visits.country_words),
        "surveyed": lambda column: as_truth(table, column),
    }
    schema = VisitRecords.to_schema().columns
    found: dict[str, pd.Series] = {}
    for name in (*SurveyColumns.columns(), "country"):
        if not mapped.has(name):
            continue
        column = str(getattr(visits.columns, name))
        table.need(column, f"{name}: {schema[name].description}")
        if name in special:
            found[name] = special[name](column)
        elif str(schema[name].dtype) == "float64":
            found[name] = table.numbers(column)
        else:
            found[name] = table.texts(column)
    for name in visits.covariates:
        if name in schema:
            raise StudyError(f"[visits] covariates: {name!r} is a column of our own; remove it.")
        table.need(name, "named in [visits] covariates")
        found[name] = table.numbers(name)
    if visits.seasons and "season" not in found:
        found["season"] = _seasons(table, found.get("date"), visits)
    return pd.DataFrame(found, index=table.frame.index)


def _party_sizes(table: UserTable, mapped: Mapped, columns: VisitColumns) -> pd.Series[float]:
    """Party size as given; adults and children together where it is not."""
    size = mapped.numbers("party_size", np.nan)
    _check_adults(table, mapped, columns, size)
    names = [name for name in ("adults", "children") if mapped.has(name)]
    if "adults" not in names:
        return size
    parts = [mapped.numbers(name) for name in names]
    together = parts[0] if len(parts) == 1 else parts[0] + parts[1]
    wrong = (size - together).abs() > PARTY_TOLERANCE
    if len(parts) == 2 and wrong.any():
        first = first_true(wrong)
        raise TableError(
            f"{table.name}: in {int(wrong.sum())} record(s) adults and children do not add up to "
            f"the party; first: {parts[0].iloc[first]:g} + {parts[1].iloc[first]:g} in columns "
            f"{columns.adults!r} and {columns.children!r}, but {size.iloc[first]:g} "
            f"in column {columns.party_size!r}{table.row(wrong, first)}. Correct the record."
        )
    return size.fillna(together)


def _check_adults(
    table: UserTable, mapped: Mapped, columns: VisitColumns, size: pd.Series[float]
) -> None:
    """No party has more adults than people."""
    if not mapped.has("adults"):
        return
    adults = mapped.numbers("adults")
    wrong = adults > size + PARTY_TOLERANCE
    if wrong.any():
        first = first_true(wrong)
        raise TableError(
            f"{table.name}: in {int(wrong.sum())} record(s) there are more adults than people; "
            f"first: {adults.iloc[first]:g} in column {columns.adults!r}, but "
            f"{size.iloc[first]:g} in column {columns.party_size!r}{table.row(wrong, first)}. "
            "Correct the record."
        )


def _points(table: UserTable, mapped: Mapped, visits: VisitsSettings) -> pd.DataFrame:
    """`lon, lat` (WGS 84) of the homes; no column where the records have no points."""
    if mapped.has("lon") != mapped.has("lat"):
        raise StudyError("[visits.columns] names only one of lon and lat; name both.")
    if mapped.has("lon"):
        x, y = mapped.numbers("lon"), mapped.numbers("lat")
        shapes = gpd.GeoSeries(gpd.points_from_xy(x, y, crs=visits.crs), index=table.frame.index)
    elif table.has("geometry"):
        shapes = gpd.GeoSeries(table.frame["geometry"])
        if shapes.crs is None:
            raise TableError(f"{table.name}: the layer has no CRS; write it into the file.")
        if not gpd.GeoSeries(shapes.dropna()).geom_type.isin(["Point"]).all():
            raise TableError(f"{table.name}: homes are points; the layer has other shapes.")
        x, y = shapes.x, shapes.y
    else:
        return pd.DataFrame(index=table.frame.index)
    placed = shapes.to_crs(WGS84)
    known = (x.notna() & y.notna()).to_numpy()
    lonlat = pd.DataFrame({"lon": placed.x, "lat": placed.y}, index=table.frame.index)
    lonlat = lonlat.where(pd.Series(known, index=table.frame.index))
    lost = known & ~np.isfinite(lonlat.to_numpy()).all(axis=1)
    if lost.any():
        wrong = pd.Series(lost, index=table.frame.index)
        first = first_true(wrong)
        raise TableError(
            f"{table.name}: {int(lost.sum())} point(s) lie outside what {visits.crs} can hold; "
            f"first: {x.iloc[first]:g}, {y.iloc[first]:g}{table.row(wrong, first)}. "
            "Correct the point, or [visits] crs."
        )
    return lonlat


def _dates(table: UserTable, column: str, form: str) -> pd.Series[str]:
    """Days as ISO 8601 text."""
    values = table.frame[column]
    if pd.api.types.is_datetime64_any_dtype(values):
        days_given: pd.Series[str] = values.dt.strftime("%Y-%m-%d").astype("str")
        return days_given
    text = table.texts(column)
    days = pd.to_datetime(text, format=form, errors="coerce")
    wrong = text.notna() & days.isna()
    if wrong.any():
        first = first_true(wrong)
        raise TableError(
            f"{table.name}: {int(wrong.sum())} value(s) in column {column!r} are no day written "
            f"as {form}; first: {text.iloc[first]!r}{table.row(wrong, first)}. Correct the file, "
            "or say how days are written: [visits] date_format."
        )
    return days.dt.strftime("%Y-%m-%d").astype("str")


def _seasons(
    table: UserTable, dates: pd.Series[str] | None, visits: VisitsSettings
) -> pd.Series[str]:
    """Season of each record by its date; a season may run over the turn of the year."""
    if dates is None:
        raise StudyError(
            "[visits] seasons needs the day of each visit: name its column in [visits.columns] "
            "date, or the season's own column in season."
        )
    day = dates.str.slice(5)
    season: pd.Series[str] = pd.Series(np.nan, index=dates.index).astype("str")
    for name, (first, last) in visits.seasons.items():
        after, before = day >= first, day <= last
        season = season.mask(after & before if first <= last else after | before, name)
    lost = season.isna()
    if lost.any():
        row = first_true(lost)
        raise TableError(
            f"{table.name}: {int(lost.sum())} record(s) fall into no season; first: "
            f"{dates.iloc[row]!r}{table.row(lost, row)}. Fill in the date, or extend "
            "[visits] seasons to the whole year."
        )
    return season


def _countries(table: UserTable, column: str, words: dict[str, str]) -> pd.Series[str]:
    """Two-letter codes of the countries that a column names."""
    names = country_names()
    known = {name.casefold(): code for code, name in names.items()}
    known |= {code.casefold(): code for code in names}
    known |= {word.casefold(): code for word, code in words.items()}
    text = table.texts(column)
    codes = text.str.casefold().map(known).astype("str")
    wrong = text.notna() & codes.isna()
    if wrong.any():
        first = first_true(wrong)
        raise TableError(
            f"{table.name}: {int(wrong.sum())} value(s) in column {column!r} are no country; "
            f"first: {text.iloc[first]!r}{table.row(wrong, first)}. Write its two-letter code, or "
            f'add the word to the study file: country_words = {{ "{text.iloc[first]}" = "..." }}.'
        )
    return codes.where(text.notna())


def _only_site(sites: pd.DataFrame) -> str | None:
    """The one site to be valued, for records that do not name theirs; None if there are more."""
    valued = place_ids(sites)[sites["role"] == "site"].unique()
    return str(valued[0]) if len(valued) == 1 else None


def _check_sites(table: UserTable, column: str, site_id: pd.Series, sites: pd.DataFrame) -> None:
    """Every record is of a known site."""
    places = place_ids(sites)
    unknown = ~site_id.isin(places)
    if unknown.any():
        first = first_true(unknown)
        raise TableError(
            f"{table.name}: {int(unknown.sum())} of {len(site_id)} records are of a site that is "
            f"not in the sites file; first: {column} {site_id.iloc[first]!r}"
            f"{table.row(unknown, first)} (sites: {', '.join(places.unique())}). "
            "Add the site to the sites file, or correct the records."
        )


def _check_weights(table: UserTable, column: str, records: pd.DataFrame) -> None:
    """The weights of a site's records do not sum to nothing."""
    weights = records.groupby("site_id", sort=False)["weight"].transform("sum")
    nothing = weights <= 0
    if nothing.any():
        first = first_true(nothing)
        raise TableError(
            f"{table.name}: the weights in column {column!r} of the {int(nothing.sum())} records "
            f"of site {records['site_id'].iloc[first]!r} sum to nothing; first: 0"
            f"{table.row(nothing, first)}. Give at least one of them a weight."
        )


def _check_interviews(table: UserTable, column: str, trips: pd.Series[float]) -> None:
    """Whoever is met on the site has come at least once."""
    wrong = trips < 1
    if wrong.any():
        first = first_true(wrong)
        raise TableError(
            f"{table.name}: {int(wrong.sum())} interview(s) on the site tell of less than one trip "
            f"in column {column!r}; first: {trips.iloc[first]:g}{table.row(wrong, first)}. Count "
            "the trip on which the person was met, or set [visits] kind."
        )
