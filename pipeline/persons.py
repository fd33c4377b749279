"""The table of persons: one row per record of an on-site or household survey, with its own price.

A row's weight is the number of people whom it stands for, so that trips × weight over the rows
are the visits of a year. In an on-site survey it falls with the trips of the respondent, who was
the more likely to be met the more often he came (Shaw, "On-site samples' regression", Journal
of Econometrics 37, 1988); whoever never came is in no such table. `sampling_weight` is without
that: what a record counts for in a likelihood that corrects for it itself.

A trip with other purposes keeps its place in the count, and the share of its cost that belongs
to the site is its price.
"""

from __future__ import annotations

import pandas as pd

from pipeline.errors import JoinError
from pipeline.tables import SurveyColumns, ZoneTable
from pipeline.visit_settings import VisitsSettings

PERSON_KINDS = ("on_site", "household")
PAIR = ["zone_id", "site_id"]
SHARED = ("vehicle_cost", "toll_cost")


def person_table(
    records: pd.DataFrame,
    origins: pd.DataFrame,
    costs: pd.DataFrame,
    zone_table: pd.DataFrame,
    visits: VisitsSettings,
) -> pd.DataFrame:
    """The `trip_table` of the records whose zone is in the market.

    Parameters
    ----------
    records : as `expanded_records` gives them.
    origins, costs, zone_table : tables of the flow; the zone table says what is in the market.
    visits : reads kind, other_purposes and covariates.

    Raises
    ------
    JoinError
        The records are no persons', or none of them is in the market.
    """
    if visits.kind not in PERSON_KINDS:
        raise JoinError(
            f'[market] level = "person" needs records of persons, but [visits] kind is '
            f'{visits.kind!r}. Set kind to "on_site" or "household", or level to "zone".'
        )
    placed = records[records["is_placed"] & (records["share"] > 0)]
    known = zone_table.loc[zone_table["in_market"]].drop(
        columns=["visits", "multi_purpose"], errors="ignore"
    )
    zones = known[[*PAIR, "household_income", "substitute_cost", *_covariates(known)]]
    table = (
        placed.drop(columns=["season"])
        .join(_told(origins, visits).loc[placed.index])
        .merge(zones, on=PAIR, how="inner", validate="many_to_one", suffixes=("_told", ""))
        .merge(_priced(costs), on=PAIR, how="left", validate="many_to_one")
    )
    if table.empty:
        raise JoinError("no record of a person is in the market; widen [market].")
    return _row_per_person(table)


def _row_per_person(table: pd.DataFrame) -> pd.DataFrame:
    size = table["party_size"].fillna(table["mean_party"])
    own = sum(table[f"{name}_per_party"] / size - table[name] for name in SHARED)
    price = (table["travel_cost"] + own) * table["share"]
    annual = table["person_visits"] * table["factor"]
    people = annual / table["trips"].where(table["trips"] > 0)
    people = people.fillna(table["weight"] * table["factor"])
    if "household_income_told" in table:
        table["household_income"] = table["household_income_told"].fillna(table["household_income"])
    rows = table.assign(
        weight=people,
        sampling_weight=table["weight"] * table["people"],
        visits=people * table["trips"],
        party_size=size,
        purpose_share_used=table["share"],
        travel_cost=price,
    )
    used = ["people", "is_filled", "person_visits", "share", "is_domestic", "is_placed", "factor"]
    used += ["household_income_told", "mean_party"]
    used += [f"{name}{twin}" for name in SHARED for twin in ("", "_per_party")]
    return rows.drop(columns=used, errors="ignore")


def _told(origins: pd.DataFrame, visits: VisitsSettings) -> pd.DataFrame:
    """What the records tell of persons and trips."""
    names = [name for name in (*SurveyColumns.columns(), *visits.covariates) if name in origins]
    return origins[["party_size", *names]]


def _covariates(zone_table: pd.DataFrame) -> list[str]:
    """Columns of the zone table that are the study's own."""
    return [name for name in zone_table.columns if name not in ZoneTable.columns()]


def _priced(costs: pd.DataFrame) -> pd.DataFrame:
    parts = [f"{name}{twin}" for name in SHARED for twin in ("", "_per_party")]
    named = costs.rename(columns={"party_size": "mean_party"})
    return named[[*PAIR, "travel_cost", "mean_party", *parts]]
