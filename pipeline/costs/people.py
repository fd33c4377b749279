"""Parties: how many travel together, how many of them are adults, and who bears the cost."""

from __future__ import annotations

from typing import Literal

import pandas as pd

from pipeline.cost_settings import CostsSettings
from pipeline.errors import CostError
from pipeline.parties import mean_party_sizes, overall_party_size


def parties(
    site_id: pd.Series[str], origins: pd.DataFrame | None, settings: CostsSettings
) -> pd.DataFrame:
    """The party of every row: `party_size, adults, bearers`.

    `bearers` is how many share what the vehicle costs.

    Raises
    ------
    CostError
        The records are to give a figure and none does, or there are more adults than people.
    """
    size = _figure("party_size", settings.party_size, site_id, origins)
    adults = size
    if settings.adults is not None:
        adults = _figure("adults", settings.adults, site_id, origins)
    return with_bearers(pd.DataFrame({"party_size": size, "adults": adults}), settings)


def with_bearers(party: pd.DataFrame, settings: CostsSettings) -> pd.DataFrame:
    """Add who shares the vehicle's cost, and hold the party against itself."""
    more = party["adults"] > party["party_size"] * (1 + 1e-9)
    if more.any():
        first = party[more].iloc[0]
        raise CostError(
            f"{int(more.sum())} parties have more adults than people; first: "
            f"{first['adults']:g} adults among {first['party_size']:g}. Correct [costs] adults "
            "or party_size."
        )
    bearers = {
        "everyone": party["party_size"],
        "adults": party["adults"],
        "nobody": pd.Series(1.0, index=party.index),
    }
    return party.assign(bearers=bearers[settings.shared_by])


def _figure(
    column: str,
    stated: Literal["records"] | float,
    site_id: pd.Series[str],
    origins: pd.DataFrame | None,
) -> pd.Series[float]:
    """The study's number, or the mean per trip of the site's records.

    A substitute, or a site none of whose records has the figure, takes the mean of all.
    """
    if stated != "records":
        return pd.Series(float(stated), index=site_id.index)
    has_column = origins is not None and column in origins
    records = None if origins is None or not has_column else _as_party_size(origins, column)
    overall = None if records is None else overall_party_size(records)
    if records is None or overall is None:
        what = column.replace("_", " ")
        raise CostError(
            f'[costs] {column} = "records", but '
            + ("there are no visit records" if origins is None else f"no record has a {what}")
            + "; give the number of people who share a vehicle, or name the column in "
            f"[visits.columns] {column}."
        )
    return site_id.map(mean_party_sizes(records)).fillna(overall).astype("float64")


def _as_party_size(origins: pd.DataFrame, column: str) -> pd.DataFrame:
    return origins.assign(party_size=origins[column])
