"""Party sizes and person-visits of visit records: one rule for every stage."""

from __future__ import annotations

import pandas as pd


def mean_party_sizes(origins: pd.DataFrame) -> pd.Series[float]:
    """Mean party size per trip at each site.

    The mean is over trips, weighted as the records are; a vehicle's cost divided by it is the
    cost per person on average. Records from abroad are left out: they are outside the market.

    Parameters
    ----------
    origins : the `origins` table.

    Returns
    -------
    People per party by `site_id`; a site none of whose records has a party size is absent.
    """
    known = _known(origins)
    trips = (known["trips"] * known["weight"]).groupby(known["site_id"]).sum()
    people = (known["party_size"] * known["trips"] * known["weight"]).groupby(known["site_id"])
    return people.sum() / trips[trips > 0]


def overall_party_size(origins: pd.DataFrame) -> float | None:
    """Mean party size per trip over all records; None where no record has one."""
    known = _known(origins)
    trips = known["trips"] * known["weight"]
    if trips.sum() == 0:
        return None
    return float((known["party_size"] * trips).sum() / trips.sum())


def person_visits(origins: pd.DataFrame) -> pd.Series[float]:
    """Person-visits that each record stands for: trips × party size × weight.

    A record without party size takes the mean of its site. Where no record of a site has one, a
    trip counts as one person: such records are tickets or permits of persons, not of parties.

    Parameters
    ----------
    origins : the `origins` table.

    Returns
    -------
    Person-visits, with the index of `origins`.
    """
    site_mean = origins["site_id"].map(mean_party_sizes(origins).dropna())
    party_size = origins["party_size"].fillna(site_mean).fillna(1.0)
    return origins["trips"] * party_size * origins["weight"]


def _known(origins: pd.DataFrame) -> pd.DataFrame:
    is_known = origins["party_size"].notna() & (origins["origin_status"] != "foreign")
    return origins.loc[is_known, ["site_id", "party_size", "trips", "weight"]]
