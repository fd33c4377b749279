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

    `bearers` is how many share what the party spends: they are who makes the visits.

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


def own_parties(
    records: pd.DataFrame, origins: pd.DataFrame | None, settings: CostsSettings
) -> pd.DataFrame:
    """The party of every record: as it tells, else its site's as `parties` gives it.

    Where a record tells how many came but not how many of them adults, these are the site's
    share of the party.

    Parameters
    ----------
    records : `record_id, site_id, party_size` and, if known, `adults`.

    Raises
    ------
    CostError
        A record has more adults than people, or the adults are to pay and there are none.
    """
    mean = parties(records["site_id"], origins, settings)
    size = records["party_size"].fillna(mean["party_size"])
    adults = size * mean["adults"] / mean["party_size"]
    if "adults" in records:
        adults = records["adults"].fillna(adults)
    alone = adults <= 0
    if settings.shared_by == "adults" and alone.any():
        raise CostError(
            f"[costs] shared_by = 'adults', but {int(alone.sum())} record(s) tell of a party "
            f"without one; first: 0 in column 'adults' of record "
            f"{records.loc[alone, 'record_id'].iloc[0]!r}. Correct the record, or share by all."
        )
    return with_bearers(pd.DataFrame({"party_size": size, "adults": adults}), settings)


def mean_nights(
    site_id: pd.Series[str], origins: pd.DataFrame | None, settings: CostsSettings
) -> pd.Series[float]:
    """Nights of a trip to the site, on average over its records; 0 where lodging costs nothing.

    Raises
    ------
    CostError
        Lodging has a price, and no record tells of nights.
    """
    if settings.lodging_per_person_night == 0:
        return pd.Series(0.0, index=site_id.index)
    if origins is None or "nights" not in origins or origins["nights"].isna().all():
        raise CostError(
            "[costs] lodging_per_person_night is set, but no record tells how many nights the "
            "trip took; name the column in [visits.columns] nights."
        )
    of_site = mean_party_sizes(_as_party_size(origins, "nights"))
    return site_id.map(of_site).fillna(0.0).astype("float64")


def with_bearers(party: pd.DataFrame, settings: CostsSettings) -> pd.DataFrame:
    """Add who shares what the party spends, and hold the party against itself."""
    more = party["adults"] > party["party_size"] * (1 + 1e-9)
    if more.any():
        first = party[more].iloc[0]
        raise CostError(
            f"{int(more.sum())} parties have more adults than people; first: "
            f"{first['adults']:g} adults among {first['party_size']:g}. Correct [costs] adults "
            "or party_size."
        )
    bearers = {
        "all": party["party_size"],
        "adults": party["adults"],
        "vehicle": pd.Series(1.0, index=party.index),
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
