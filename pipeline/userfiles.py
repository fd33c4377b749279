"""Reading a file of the study's own as a table of text: CSV, Excel, Parquet, GIS layer.

Nothing is guessed about the values here: text stays text, so that a code keeps its leading
zeros. ``UserTable.texts`` and ``UserTable.numbers`` say what a column is meant to be, and
errors speak of the file's own column names and row numbers.
"""

from __future__ import annotations

import csv
import difflib
import io
import warnings
import zipfile
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import geopandas as gpd
import numpy as np
import pandas as pd
import pyarrow.parquet as pq
import pyogrio

from pipeline.errors import InputError, TableError
from pipeline.schema import Source

EXCEL = (".xlsx", ".xlsm")
PARQUET = (".parquet", ".geoparquet", ".pq")
TEXT = (".csv", ".txt", ".tsv")
GIS = (".gpkg", ".shp", ".geojson", ".json", ".fgb", ".gml", ".kml", ".zip")
DELIMITERS = (",", ";", "\t")
NO_NUMBER = ("", "NA", "N/A", "#N/A", "NaN", "nan", "NULL", "null", "None")


@dataclass(frozen=True)
class UserTable:
    """A table as its owner wrote it.

    Attributes
    ----------
    name : the file's name.
    frame : the columns as they stand; the index is the position in the file, from 0, and
        entirely blank rows are gone.
    first_line : line of the file that row 1 stands in, under a header 2; 0 without lines.
    decimal_comma : whether a comma in a number is its decimal mark (files with ';').
    """

    name: str
    frame: pd.DataFrame
    first_line: int = 0
    decimal_comma: bool = False

    def has(self, column: str) -> bool:
        """Whether the file has the column."""
        return column in self.frame.columns

    def row(self, rows: pd.Series[Any], position: int) -> str:
        """' in row 7' for a position in a column of this table."""
        return self.source({}).row(rows.index[position])

    def source(self, names: dict[str, str]) -> Source:
        """Where a table made of this one came from; `names`: the file's columns by ours."""
        return Source(self.name, names, self.first_line)

    def need(self, column: str, meaning: str) -> None:
        """Raise TableError unless the file has the column."""
        if self.has(column):
            return
        have = [str(name) for name in self.frame.columns if name != "geometry"]
        folded = {name.casefold(): name for name in have}
        near = difflib.get_close_matches(column.casefold(), folded, n=1)
        hint = f"; the nearest is {folded[near[0]]!r}" if near else ""
        raise TableError(
            f"{self.name}: column {column!r} ({meaning}) is missing; the file has: "
            f"{', '.join(have[:20])}{hint}. Add it, or name the file's own column in the "
            "study file."
        )

    def texts(self, column: str) -> pd.Series[str]:
        """A column as text, trimmed; empty is missing; whole numbers have no '.0'."""
        values = self.frame[column]
        if pd.api.types.is_float_dtype(values):
            whole = bool((values.dropna() % 1 == 0).all())
            values = values.astype("Int64") if whole else values
        text = values.astype("str").where(values.notna()).str.strip()
        return text.mask(text == "")

    def numbers(self, column: str) -> pd.Series[float]:
        """A column as numbers; empty (also 'NA', 'NULL') is missing.

        Raises
        ------
        TableError
            A value is no number.
        """
        values = self.frame[column]
        if pd.api.types.is_numeric_dtype(values) and not pd.api.types.is_bool_dtype(values):
            return values.astype("float64")
        text = values.astype("str").where(values.notna()).str.strip()
        text = text.mask(text.isin(NO_NUMBER))
        if self.decimal_comma:
            text = text.str.replace(",", ".", regex=False)
        numbers = pd.to_numeric(text, errors="coerce").astype("float64")
        wrong = text.notna() & ~np.isfinite(numbers)
        if wrong.any():
            first = first_true(wrong)
            count = int(wrong.sum())
            raise TableError(
                f"{self.name}: {count} value{'' if count == 1 else 's'} in column {column!r} "
                f"{'is' if count == 1 else 'are'} no number; first: {text.iloc[first]!r}"
                f"{self.row(wrong, first)}. Correct the file (numbers are written plainly, "
                "as 1234.5, without thousands separators and units)."
            )
        return numbers


def first_true(mask: pd.Series[bool]) -> int:
    """Position of the first true value."""
    return int(mask.to_numpy().argmax())


def read_user_table(
    path: Path,
    *,
    sheet: str | None = None,
    layer: str | None = None,
    encoding: str = "utf-8",
) -> UserTable:
    """Read a file of the study's own by its suffix.

    Parameters
    ----------
    path : CSV (',', ';' or tab), Excel, Parquet, GeoParquet or any layer that GDAL knows.
    sheet, layer : which one, where the file holds several.
    encoding : of a text file; a byte order mark is no part of the first column's name.

    Returns
    -------
    Its columns; a GIS layer also has `geometry`, with the layer's own CRS.

    Raises
    ------
    InputError
        The file cannot be read as what its suffix says.
    """
    suffix = path.suffix.lower()
    if suffix in TEXT:
        table = _read_csv(path, encoding)
    elif suffix in EXCEL:
        table = _read_excel(path, sheet)
    elif suffix in PARQUET:
        table = _read_parquet(path)
    elif suffix in GIS:
        table = _read_layer(path, layer)
    else:
        known = ", ".join((*TEXT, *EXCEL, *PARQUET, *GIS))
        raise InputError(f"{path.name}: files of this kind are not read; use one of: {known}.")
    attributes = table.frame.drop(columns="geometry", errors="ignore")
    blank = attributes.isna().all(axis=1) if "geometry" not in table.frame else None
    if blank is not None and blank.any():
        return UserTable(table.name, table.frame[~blank], table.first_line, table.decimal_comma)
    return table


def _read_csv(path: Path, encoding: str) -> UserTable:
    """Read every field as text."""
    codec = "utf-8-sig" if encoding.lower().replace("_", "-") in ("utf-8", "utf8") else encoding
    try:
        with path.open(encoding=codec, newline="") as handle:
            header = _header(handle.readline(), path)
        with warnings.catch_warnings():
            warnings.simplefilter("error", pd.errors.ParserWarning)
            frame = pd.read_csv(
                path,
                sep=header.delimiter,
                dtype=str,
                encoding=codec,
                keep_default_na=False,
                na_values=[""],
                skip_blank_lines=False,
                index_col=False,
            )
    except UnicodeDecodeError as error:
        raise TableError(_wrong_encoding(path, encoding, error)) from None
    except LookupError:
        raise TableError(f"{path.name}: there is no encoding {encoding!r}; use 'utf-8'.") from None
    except (pd.errors.ParserError, pd.errors.ParserWarning, OSError) as error:
        raise TableError(
            f"{path.name}: not a regular table with as many fields in each line as in the header "
            f"({str(error).strip()}). Correct the file (put text that holds the delimiter "
            f"{header.delimiter!r} in double quotes)."
        ) from None
    frame.columns = pd.Index(header.names)
    return UserTable(path.name, frame, 2, decimal_comma=header.delimiter == ";")


@dataclass(frozen=True)
class _Header:
    names: list[str]
    delimiter: str


def _header(line: str, path: Path) -> _Header:
    """Column names and the delimiter that splits the first line into most of them."""
    if not line.strip():
        raise TableError(f"{path.name}: the file is empty or its first line is blank; add a header")
    rows = {mark: next(csv.reader(io.StringIO(line), delimiter=mark)) for mark in DELIMITERS}
    delimiter = max(DELIMITERS, key=lambda mark: len(rows[mark]))
    names = [name.strip() for name in rows[delimiter]]
    doubled = next((name for name in names if name and names.count(name) > 1), None)
    if doubled is not None:
        raise TableError(
            f"{path.name}: the header names column {doubled!r} twice; rename one of the two."
        )
    return _Header(names, delimiter)


def _wrong_encoding(path: Path, encoding: str, error: UnicodeDecodeError) -> str:
    with path.open("rb") as handle:
        line = handle.read(error.start + 1).count(b"\n") + 1 if error.start < 2**24 else 0
    place = f" near line {line}" if line else ""
    return (
        f"{path.name}: not text in {encoding}{place} (byte {error.object[error.start]:#04x}). "
        'Save it as UTF-8, or say how it was saved: encoding = "latin-1" (or "cp1252") in the '
        "study file's section of this file."
    )


def _read_excel(path: Path, sheet: str | None) -> UserTable:
    """Read one sheet; every cell as the text that a person would type."""
    try:
        with warnings.catch_warnings():
            # openpyxl warns of styles and validations that it drops; cells are all we read.
            warnings.filterwarnings("ignore", category=UserWarning, module="openpyxl")
            with pd.ExcelFile(path, engine="openpyxl") as book:
                names = [str(name) for name in book.sheet_names]
                if sheet is not None and sheet not in names:
                    raise TableError(
                        f"{path.name}: there is no sheet {sheet!r}; it has: {', '.join(names)}. "
                        "Correct the key 'sheet' in the study file."
                    )
                frame = pd.read_excel(
                    book,
                    sheet_name=sheet or 0,
                    dtype=str,
                    keep_default_na=False,
                    na_values=[""],
                )
    except (zipfile.BadZipFile, ValueError, KeyError, OSError) as error:
        raise TableError(
            f"{path.name}: not a readable workbook ({error}); save it again as .xlsx or CSV."
        ) from None
    frame.columns = pd.Index([str(name).strip() for name in frame.columns])
    return UserTable(path.name, frame, 2)


def _read_parquet(path: Path) -> UserTable:
    try:
        is_geo = b"geo" in (pq.read_schema(path).metadata or {})
        frame = gpd.read_parquet(path) if is_geo else pd.read_parquet(path)
    except (OSError, ValueError) as error:
        raise TableError(f"{path.name}: not a readable Parquet file ({error}).") from None
    if isinstance(frame, gpd.GeoDataFrame):
        frame = _named_geometry(frame)
    return UserTable(path.name, frame.reset_index(drop=True))


def _read_layer(path: Path, layer: str | None) -> UserTable:
    """Read a GIS layer; errors of GDAL become ours."""
    try:
        layers = [str(name) for name in pyogrio.list_layers(path)[:, 0]]
        if layer is not None and layer not in layers:
            raise TableError(
                f"{path.name}: there is no layer {layer!r}; it has: {', '.join(layers)}. "
                "Correct the key 'layer' in the study file."
            )
        if layer is None and len(layers) > 1:
            raise TableError(
                f"{path.name}: the file has several layers ({', '.join(layers)}); "
                "name one by the key 'layer' in the study file."
            )
        frame = pyogrio.read_dataframe(path, layer=layer or layers[0])
    except (pyogrio.errors.DataSourceError, pyogrio.errors.DataLayerError, OSError) as error:
        raise InputError(f"{path.name}: not a readable GIS layer ({error}).") from None
    if not isinstance(frame, gpd.GeoDataFrame):
        return UserTable(path.name, frame)
    return UserTable(path.name, _named_geometry(frame))


def _named_geometry(frame: gpd.GeoDataFrame) -> gpd.GeoDataFrame:
    """Call the geometry 'geometry'."""
    name = frame.geometry.name
    return frame if name == "geometry" else frame.rename_geometry("geometry")
