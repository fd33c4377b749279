"""Day trips and overnight trips kept apart: two sites of each place, each with its own demand.

Who stays overnight pays for lodging, comes from further away and shares the drive among more
days; one curve through both kinds of trips fits neither. With [sites] stays = "apart" every site
to be valued becomes two at the same place, ``<site>_day`` and ``<site>_overnight``, from the
sites' table on; their annual values add up to the place's. A record's nights say which of the two
it is of. A respondent of a household survey is a row of both, for whoever takes day trips only has
made no overnight trip.
"""

from __future__ import annotations

import numpy as np
import pandas as pd

from pipeline.errors import GeocodingError

STAYS = {"day": "day trips", "overnight": "overnight trips"}


def split_sites(sites: pd.DataFrame) -> pd.DataFrame:
    """Each valued site as two, with `place_id` (the site as it came) and `stay`.

    Substitutes stay as they are; their `stay` is missing.
    """
    valued = sites["role"] == "site"
    parts = [
        sites[valued].assign(
            place_id=sites["site_id"],
            site_id=sites["site_id"] + f"_{stay}",
            site_name=sites["site_name"] + f", {words}",
            stay=stay,
        )
        for stay, words in STAYS.items()
    ]
    rest = sites[~valued].assign(place_id=sites["site_id"], stay=None)
    return pd.concat([*parts, rest], ignore_index=True).astype({"stay": "str"})


def place_ids(sites: pd.DataFrame) -> pd.Series[str]:
    """Place of every row of the sites table: the site as the study's file has it."""
    return sites["place_id"] if "place_id" in sites else sites["site_id"]


def split_records(origins: pd.DataFrame, kind: str) -> pd.DataFrame:
    """Records with the site of their own stay.

    Parameters
    ----------
    origins : the `origins` table, with `nights`.
    kind : as [visits] kind. Of a household survey each record is there twice, with its trips
        at the one stay and none at the other.

    Raises
    ------
    GeocodingError
        A record with a trip does not tell how many nights it took.
    """
    nights = pd.Series(np.nan, origins.index)
    if "nights" in origins:
        nights = origins["nights"]
    silent = nights.isna() & (origins["trips"] > 0)
    if silent.any():
        row = int(silent.to_numpy().argmax())
        raise GeocodingError(
            f'[sites] stays = "apart", but {int(silent.sum())} record(s) do not tell how many '
            f"nights the trip took; first: row {row + 1} (record "
            f"{origins['record_id'].iloc[row]!r}), column 'nights'. Fill it in (0 for a day trip), "
            "name the column in [visits.columns] nights, or keep the trips together."
        )
    stay: pd.Series[str] = pd.Series("day", origins.index).mask(nights > 0, "overnight")
    split = origins.assign(site_id=origins["site_id"] + "_" + stay)
    if kind != "household":
        return split
    other = stay.map({"day": "overnight", "overnight": "day"}).astype("str")
    twin = origins.assign(
        record_id=origins["record_id"] + "_" + other,
        site_id=origins["site_id"] + "_" + other,
        trips=0.0,
        counted_trips=0.0,
        nights=np.nan,
    )
    return pd.concat([split, twin], ignore_index=True)
