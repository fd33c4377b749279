"""Writing tables: CSV for people, Parquet for programs, and what every column means."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pandas as pd

from pipeline.publish.privacy import HIDDEN_COLUMNS, REASON
from pipeline.tables import (
    Costs,
    Diagnostics,
    Estimates,
    FeeSchedule,
    Fit,
    OriginSummary,
    ReportedCheck,
    Residuals,
    RoadQuality,
    RouteQuality,
    Routes,
    Sensitivity,
    Sites,
    Surplus,
    Zones,
    ZoneSurplus,
    ZoneTable,
    data_dictionary,
)

PUBLISHED = (
    OriginSummary,
    RoadQuality,
    Zones,
    Sites,
    Routes,
    RouteQuality,
    Costs,
    ReportedCheck,
    ZoneTable,
    Estimates,
    Fit,
    Diagnostics,
    Residuals,
    Surplus,
    FeeSchedule,
    ZoneSurplus,
    Sensitivity,
)
"""Tables that people take away; records of people (`origins`, `trip_table`) are none of them."""

DICTIONARY_COLUMNS = ["table", "column", "type", "unit", "required", "missing_allowed", "meaning"]
TYPE_WORDS = {"f": "number", "i": "integer", "u": "integer", "b": "boolean"}


def write_table_files(frame: pd.DataFrame, folder: Path, name: str) -> None:
    """Write one table as `<name>.csv` (UTF-8, RFC 4180) and `<name>.parquet`."""
    plain = pd.DataFrame(frame.drop(columns="geometry", errors="ignore"))
    write_csv(plain, folder / f"{name}.csv")
    plain.to_parquet(folder / f"{name}.parquet", index=False, compression="zstd")


def write_csv(frame: pd.DataFrame, path: Path) -> None:
    """Write a table as CSV: UTF-8, comma, CRLF, quotes where needed; missing is empty."""
    frame.to_csv(path, index=False, encoding="utf-8", lineterminator="\r\n")


def describe_tables(tables: dict[str, pd.DataFrame], *, currency: str) -> pd.DataFrame:
    """Data dictionary of what is really in `tables`: declared columns and the study's own.

    Returns
    -------
    One row per table and column: `table, column, type, unit, required, missing_allowed,
    meaning`; the word currency in a unit is replaced by the study's own.
    """
    entries = data_dictionary(PUBLISHED).to_dict("records")
    declared = {(row["table"], row["column"]): row for row in entries}
    rows: list[dict[Any, Any]] = []
    for name, frame in tables.items():
        for column in frame.columns.drop("geometry", errors="ignore"):
            row: dict[Any, Any] = {**(declared.get((name, column)) or _own_column(frame, column))}
            if name == "zone_table" and column in HIDDEN_COLUMNS and REASON in frame:
                row["missing_allowed"] = True
            rows.append({**row, "table": name, "column": column})
    dictionary = pd.DataFrame(rows)[DICTIONARY_COLUMNS]
    dictionary["unit"] = dictionary["unit"].str.replace("currency", currency, regex=False)
    return dictionary


def _own_column(frame: pd.DataFrame, column: str) -> dict[str, object]:
    """Entry of a column that the study brought itself."""
    meaning = (
        "why the zone's visits are hidden" if column == REASON else "column of the study's own"
    )
    return {
        "type": TYPE_WORDS.get(frame[column].dtype.kind, "string"),
        "unit": "",
        "required": False,
        "missing_allowed": True,
        "meaning": meaning,
    }
