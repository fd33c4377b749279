"""The table of persons: one row per record of an on-site or household survey, with its own price.

A row's weight is the number of people whom it stands for, so that trips × weight over the rows
are the visits of a year. In an on-site survey it falls with the trips of the respondent, who was
the more likely to be met the more often he came (Shaw, "On-site samples' regression", Journal
of Econometrics 37, 1988); whoever never came is in no such table. `sampling_weight` is without
that: what a record counts for in a likelihood that corrects for it itself.

A trip is priced as its record tells of it: party, vehicle, mode, income, nights. A trip with
other purposes keeps its place in the count, and the share of its cost that belongs to the site
is its price, item by item. The substitute is the zone's, at the price of the record's own trip.
"""

from __future__ import annotations

import pandas as pd

from pipeline.costs import ITEMS
from pipeline.errors import JoinError
from pipeline.tables import SurveyColumns, ZoneTable
from pipeline.visit_settings import VisitsSettings

PERSON_KINDS = ("on_site", "household")
PAIR = ["zone_id", "site_id"]
PRICED = ("party_size", "adults", "bearers", "vehicle_cost_per_km", "hourly_wage")


def person_records(
    records: pd.DataFrame, origins: pd.DataFrame, zone_table: pd.DataFrame, visits: VisitsSettings
) -> pd.DataFrame:
    """The records of persons whose zone is in the market, with what they tell of the trip.

    Parameters
    ----------
    records : as `expanded_records` gives them.
    origins : the `origins` table.
    zone_table : says what is in the market.
    visits : reads kind and covariates.

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
    placed = records[records["is_placed"] & (records["share"] > 0)].drop(columns="season")
    names = [name for name in (*SurveyColumns.columns(), *visits.covariates) if name in origins]
    told = placed.join(origins.loc[placed.index, ["party_size", *names]])
    market = pd.MultiIndex.from_frame(zone_table.loc[zone_table["in_market"], PAIR])
    inside = told[pd.MultiIndex.from_frame(told[PAIR]).isin(market)]
    if inside.empty:
        raise JoinError("no record of a person is in the market; widen [market].")
    return inside


def person_table(
    told: pd.DataFrame, prices: pd.DataFrame, zone_table: pd.DataFrame
) -> pd.DataFrame:
    """The `trip_table`: a row for each record, with its own price and the people it stands for.

    Parameters
    ----------
    told : as `person_records` gives them.
    prices : as `own_trip_costs` gives them, with the same index, and `substitute_cost`.
    zone_table : gives the zone's income, substitutes and covariates.
    """
    known = zone_table.drop(columns=["visits", "multi_purpose"], errors="ignore")
    own = [name for name in known.columns if name not in ZoneTable.columns()]
    of_zone = known[[*PAIR, "household_income", "substitute_cost", *own]]
    amounts = [*ITEMS, "travel_cost"]
    table = told.drop(columns=["party_size", "adults"], errors="ignore").join(
        prices[[*PRICED, *amounts, "substitute_cost"]]
    )
    table[amounts] = table[amounts].mul(table["share"], axis=0)
    table = table.merge(
        of_zone, on=PAIR, how="left", validate="many_to_one", suffixes=("", "_of_zone")
    )
    for name in ("household_income", "substitute_cost"):
        if f"{name}_of_zone" in table:
            table[name] = table[name].fillna(table.pop(f"{name}_of_zone"))
    annual = table["counted_visits"] * table["factor"]
    people = (annual / table["trips"].where(table["trips"] > 0)).fillna(
        table["weight"] * table["factor"]
    )
    number = table["person_visits"]
    unit = (table["counted_visits"] / number.where(number > 0)).fillna(1.0)
    rows = table.assign(
        weight=people,
        sampling_weight=table["weight"] * table["people"] * unit,
        visits=people * table["trips"],
        purpose_share_used=table["share"],
    )
    used = ["people", "is_filled", "person_visits", "counted_visits", "share", "is_domestic"]
    return rows.drop(columns=[*used, "is_placed", "factor", "total_of"])
