"""Party sizes and person-visits of visit records: one rule for every stage."""

from __future__ import annotations

import numpy as np
import pandas as pd

from pipeline.visit_settings import VisitsSettings

KINDS_OF_PERSONS = ("household", "zone_counts")


def counted_trips(origins: pd.DataFrame, kind: str) -> pd.Series[float]:
    """Trips that each record adds to the sample.

    An interview on the site is one visit that was met, however often the respondent comes:
    those who come often are met more often, each time as one visit. Of every other kind a
    record adds the trips that it tells of. Both times its weight.
    """
    if kind == "on_site":
        return origins["weight"].astype("float64")
    return origins["trips"] * origins["weight"]


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
    return _mean_per_trip(known, known["site_id"])


def overall_party_size(origins: pd.DataFrame) -> float | None:
    """Mean party size per trip over all records; None where no record has one."""
    known = _known(origins)
    trips = known["counted_trips"]
    if trips.sum() == 0:
        return None
    return float((known["party_size"] * trips).sum() / trips.sum())


def records_are_parties(visits: VisitsSettings) -> bool:
    """Whether a record's trip counts for its whole party."""
    if visits.records_are == "by_kind":
        return visits.kind not in KINDS_OF_PERSONS
    return visits.records_are == "parties"


def people_per_trip(origins: pd.DataFrame, visits: VisitsSettings) -> pd.DataFrame:
    """People whom one trip of each record counts for.

    One, where records are of persons. Of parties it is the party size; a record without takes
    the mean of its site (of a surveyed register, of its class). Where no record of a site has
    one, a trip counts as one person: such records are tickets or permits of persons.

    Parameters
    ----------
    origins : the `origins` table.
    visits : reads kind, records_are and register_classes.

    Returns
    -------
    `people` and `is_filled` (whether it is a mean), with the index of `origins`.
    """
    if not records_are_parties(visits):
        return pd.DataFrame({"people": 1.0, "is_filled": False}, index=origins.index)
    size = origins["party_size"]
    filled = size
    if visits.kind == "sample_of_register":
        known = _known(origins)
        label = class_labels(origins, visits.register_classes)
        filled = filled.fillna(label.map(_mean_per_trip(known, label.loc[known.index]).dropna()))
    site_mean = origins["site_id"].map(mean_party_sizes(origins).dropna()).astype("float64")
    filled = filled.fillna(site_mean)
    is_filled = size.isna() & filled.notna()
    return pd.DataFrame({"people": filled.fillna(1.0), "is_filled": is_filled})


def visits_per_person(
    origins: pd.DataFrame,
    people: pd.Series[float],
    costs: pd.DataFrame,
    visits: VisitsSettings,
    shared_by: str,
) -> pd.Series[float]:
    """Visits that one person-visit of each record counts for, by who a visit is of.

    Of 'all' persons: 1. Of 'adults': the adults of the party over its people; respondents of a
    household survey are adults. Of a 'vehicle': 1 over the people in it. A record that does not
    tell takes its site's mean, as the prices have it.

    Parameters
    ----------
    origins : the `origins` table.
    people : as `people_per_trip` gives it.
    costs : the `costs` table: party size and adults by site.
    visits : reads kind and records_are.
    shared_by : as [costs] shared_by.
    """
    if shared_by == "all":
        return pd.Series(1.0, index=origins.index)
    of_site = costs.groupby("site_id")[["party_size", "adults"]].first()
    site_size = origins["site_id"].map(of_site["party_size"]).astype("float64")
    size = origins["party_size"].fillna(site_size)
    if shared_by == "vehicle":
        return 1 / (people if records_are_parties(visits) else size)
    if visits.kind == "household" and not records_are_parties(visits):
        return pd.Series(1.0, index=origins.index)
    of_party = origins["site_id"].map(of_site["adults"] / of_site["party_size"]).astype("float64")
    if "adults" not in origins:
        return of_party
    return (origins["adults"] / size).fillna(of_party)


def class_labels(origins: pd.DataFrame, classes: tuple[str, ...]) -> pd.Series[int]:
    """A number for each combination of the site and the given columns."""
    return origins.groupby(["site_id", *classes], sort=True, dropna=False).ngroup()


def _mean_per_trip(known: pd.DataFrame, group: pd.Series) -> pd.Series[float]:
    trips = known["counted_trips"].groupby(group).sum()
    people = (known["party_size"] * known["counted_trips"]).groupby(group).sum()
    return people / trips.where(trips > 0, np.nan)


def _known(origins: pd.DataFrame) -> pd.DataFrame:
    """Party size and counted trips of the records that have a party size and are not foreign."""
    is_known = origins["party_size"].notna() & (origins["origin_status"] != "foreign")
    return origins.loc[is_known, ["site_id", "party_size", "counted_trips"]]
