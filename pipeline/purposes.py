"""Trips with other purposes: which they are, and the share of them that belongs to the site.

A trip has other purposes when its record states a purpose share below 1, or other stops. What
share of it belongs to the site is a matter of judgement, so it is a switch
([visits] other_purposes) and every answer that depends on it can be looked at:

``keep``, ``indicator``    1
``drop``                   0
``apportion_by_share``     the share that the record states
``by_time``                hours on the site ÷ hours of the stay (24 a night where only nights
                           are known)
``by_stops``               1 ÷ (1 + other stops)
``equal``                  a half: the site on one side, all the rest on the other

A trip without other purposes belongs to the site whole.
"""

from __future__ import annotations

import numpy as np
import pandas as pd

from pipeline.errors import JoinError

HOURS_A_NIGHT = 24.0
NEEDS = {
    "apportion_by_share": ("purpose_share",),
    "by_time": ("hours_on_site", "trip_hours or nights"),
    "by_stops": ("stops",),
}


def purposes(origins: pd.DataFrame, treatment: str) -> pd.DataFrame:
    """Whether each record's trip has other purposes, and the share of it that is the site's.

    A multi-purpose record that does not say what the share needs takes the mean of its site's.

    Parameters
    ----------
    origins : the `origins` table with its survey columns.
    treatment : as [visits] other_purposes.

    Returns
    -------
    `multi_purpose` (0 or 1) and `share` (0 to 1), with the index of `origins`.

    Raises
    ------
    JoinError
        The records do not tell which trips have other purposes, or what the share needs.
    """
    multi = _multi_purpose(origins)
    if treatment != "keep" and multi is None:
        raise JoinError(
            f"[visits] other_purposes = {treatment!r}, but the records do not say which trips had "
            "other purposes; name the column in [visits.columns] purpose_share or stops."
        )
    if multi is None:
        multi = pd.Series(data=False, index=origins.index)
    said = _shares(origins, treatment).where(multi)
    share = _filled(said, multi, origins, treatment).where(multi, 1.0)
    return pd.DataFrame({"multi_purpose": multi.astype("float64"), "share": share})


def _multi_purpose(origins: pd.DataFrame) -> pd.Series[bool] | None:
    """Whether a trip had other purposes; None where no column tells."""
    tells = [name for name in ("purpose_share", "stops") if name in origins]
    if not tells:
        return None
    shared = origins["purpose_share"] < 1 if "purpose_share" in tells else False
    stopped = origins["stops"] > 0 if "stops" in tells else False
    return pd.Series(shared | stopped, index=origins.index)


def _shares(origins: pd.DataFrame, treatment: str) -> pd.Series[float]:
    """The site's share of a multi-purpose trip; missing where the record does not say."""
    _check_columns(origins, treatment)
    if treatment == "apportion_by_share":
        return origins["purpose_share"]
    if treatment == "by_time":
        return _time_shares(origins)
    if treatment == "by_stops":
        return 1 / (1 + origins["stops"])
    whole = {"drop": 0.0, "equal": 0.5}.get(treatment, 1.0)
    return pd.Series(whole, index=origins.index)


def _check_columns(origins: pd.DataFrame, treatment: str) -> None:
    for needed in NEEDS.get(treatment, ()):
        if not any(name in origins for name in needed.split(" or ")):
            raise JoinError(
                f"[visits] other_purposes = {treatment!r} needs the column {needed} of the "
                "records; name it in [visits.columns], or choose another treatment."
            )


def _time_shares(origins: pd.DataFrame) -> pd.Series[float]:
    """Hours on the site of the hours of the stay; never above 1."""
    away = pd.Series(np.nan, index=origins.index)
    if "trip_hours" in origins:
        away = away.fillna(origins["trip_hours"])
    if "nights" in origins:
        away = away.fillna(HOURS_A_NIGHT * origins["nights"].where(origins["nights"] > 0))
    return (origins["hours_on_site"] / away).clip(upper=1.0)


def _filled(
    said: pd.Series[float], multi: pd.Series[bool], origins: pd.DataFrame, treatment: str
) -> pd.Series[float]:
    """Shares of multi-purpose trips; the site's mean per trip where a record has none."""
    lacking = multi & said.isna()
    if not lacking.any():
        return said
    trips = origins["counted_trips"].where(said.notna(), 0.0)
    sites = origins["site_id"]
    of_site = (said.fillna(0.0) * trips).groupby(sites).sum() / trips.groupby(sites).sum()
    filled = said.fillna(sites.map(of_site).astype("float64"))
    nothing = multi & filled.isna()
    if nothing.any():
        first = origins[nothing].iloc[0]
        raise JoinError(
            f"[visits] other_purposes = {treatment!r}: {int(nothing.sum())} trips to "
            f"{first['site_id']!r} have other purposes, but no record says what share is the "
            f"site's; first: record {first['record_id']!r}. Fill it in, or choose another "
            "treatment."
        )
    return filled
