"""The cost stage: the price of a visit per person, item by item.

A round trip is the way there and the way back. Tolls and ferries are known of the way there and
taken to be the same on the way back. Kilometres on a ferry cost the fare, not the driving;
hours on it count as travel time. Amounts keep their full precision, so the items of a row add
up to `travel_cost`; rounding to cents is for the report.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from pipeline.errors import CostError
from pipeline.parties import mean_party_sizes, overall_party_size
from pipeline.settings import CostsSettings
from pipeline.study import Study
from pipeline.tables import REACHED_STATUSES

ITEMS = ("vehicle_cost", "toll_cost", "ferry_cost", "time_cost", "fee_cost", "other_cost")


def cost(
    routes: pd.DataFrame,
    zones: pd.DataFrame,
    sites: pd.DataFrame,
    origins: pd.DataFrame | None,
    *,
    study: Study,
) -> tuple[pd.DataFrame]:
    """Price the round trip of every zone–site pair, per person.

    Per person: (driven km × cost per km + tolls + ferry fares) ÷ party size
    + hours × wage fraction × household income ÷ working hours a year + entrance + other.

    Parameters
    ----------
    routes : one row per zone and site; distances in km, times in minutes, one way.
    zones : their household income, per year.
    sites : their entrance fees, per person; one row per access point.
    origins : for party sizes; None where [costs] party_size is a number.
    study : reads [costs].

    Returns
    -------
    The `costs` table; a pair without a path keeps its row, with no cost.

    Raises
    ------
    CostError
        A zone has no income and the study names no fallback; party sizes are to come from the
        records but none has one; a route has no distance; a zone or site is unknown.
    """
    settings = study.costs
    pairs = routes[["zone_id", "site_id"]].reset_index(drop=True)
    trips = round_trips(routes)
    party_size = _party_sizes(pairs["site_id"], origins, settings)
    per_hour = _time_values(routes, zones, settings)
    per_party = _per_party(trips, party_size, settings)
    is_priced = trips["round_trip_km"].notna()
    shared = {
        name.removesuffix("_per_party"): per_party[name] / party_size for name in per_party.columns
    }
    items = pd.DataFrame(
        {
            **shared,
            "time_cost": trips["round_trip_hours"] * per_hour,
            "fee_cost": _fees(routes, sites).where(is_priced),
            "other_cost": pd.Series(settings.other_cost_per_person, pairs.index).where(is_priced),
        }
    )
    items["travel_cost"] = items[list(ITEMS)].sum(axis=1, skipna=False)
    status = routes["route_status"].reset_index(drop=True).mask(is_priced, "priced")
    return (
        pd.concat(
            [
                pairs,
                trips[["round_trip_km", "round_trip_hours", "driven_km"]],
                pd.DataFrame({"party_size": party_size, "time_value_per_hour": per_hour}),
                items,
                per_party,
                status.rename("cost_status"),
            ],
            axis=1,
        ),
    )


def round_trips(routes: pd.DataFrame) -> pd.DataFrame:
    """Round trip of every pair that is reached; the others are missing.

    Where a route home is not known, it is taken to be as long as the way there.

    Returns
    -------
    `round_trip_km, round_trip_hours, driven_km, toll_km, ferries`, the last two there and back
    (`ferries`: 2 where the way there uses a ferry, however often, otherwise 0).

    Raises
    ------
    CostError
        A route that was found has no distance or no time.
    """
    table = routes.reset_index(drop=True)
    reached = table["route_status"].isin(REACHED_STATUSES)
    there_km, there_min = table["distance_km"], table["drive_time_min"]
    lacking = reached & (there_km.isna() | there_min.isna())
    if lacking.any():
        first = table[lacking].iloc[0]
        raise CostError(
            f"{int(lacking.sum())} routes are marked {first['route_status']!r} but have no "
            f"distance or time; first: zone {first['zone_id']!r} to site {first['site_id']!r}. "
            "Complete the routes table, or mark them 'no_path'."
        )
    back_km = table["return_distance_km"].fillna(there_km)
    back_min = table["return_drive_time_min"].fillna(there_min)
    ferry_km = 2 * table["ferry_km"].fillna(0.0)
    round_trip_km = there_km + back_km
    trips = pd.DataFrame(
        {
            "round_trip_km": round_trip_km,
            "round_trip_hours": (there_min + back_min) / 60,
            "driven_km": (round_trip_km - ferry_km).clip(lower=0),
            "toll_km": 2 * table["toll_km"].fillna(0.0),
            "ferries": np.where(ferry_km > 0, 2.0, 0.0),
        }
    )
    return trips.where(reached)


def _per_party(
    trips: pd.DataFrame, party_size: pd.Series[float], settings: CostsSettings
) -> pd.DataFrame:
    """What the party pays together, there and back."""
    fare = settings.ferry_fare_per_vehicle + settings.ferry_fare_per_person * party_size
    return pd.DataFrame(
        {
            "vehicle_cost_per_party": trips["driven_km"] * settings.vehicle_cost_per_km,
            "toll_cost_per_party": trips["toll_km"] * settings.toll_per_km,
            "ferry_cost_per_party": trips["ferries"] * fare,
        }
    )


def _party_sizes(
    site_id: pd.Series[str], origins: pd.DataFrame | None, settings: CostsSettings
) -> pd.Series[float]:
    """People who share the vehicle: the study's number, or the mean of the site's records.

    A substitute, or a site none of whose records has a party size, takes the mean of all.
    """
    if settings.party_size != "records":
        return pd.Series(float(settings.party_size), index=site_id.index)
    overall = None if origins is None else overall_party_size(origins)
    if origins is None or overall is None:
        raise CostError(
            '[costs] party_size = "records", but '
            + ("there are no visit records" if origins is None else "no record has a party size")
            + "; give the number of people who share a vehicle, or name the column of party "
            "sizes in [visits.columns] party_size."
        )
    return site_id.map(mean_party_sizes(origins)).fillna(overall).astype("float64")


def _time_values(
    routes: pd.DataFrame, zones: pd.DataFrame, settings: CostsSettings
) -> pd.Series[float]:
    """What an hour of travel costs a person of each pair's zone."""
    income = zones.set_index("zone_id")["household_income"]
    zone_id = routes["zone_id"].reset_index(drop=True)
    strange = ~zone_id.isin(income.index)
    if strange.any():
        raise CostError(
            f"{int(strange.sum())} routes start in a zone that is not in the zones file; first: "
            f"{zone_id[strange].iloc[0]!r}. Correct the routes table, or add the zone."
        )
    if settings.fallback_household_income is not None:
        income = income.fillna(settings.fallback_household_income)
    per_hour = zone_id.map(income).astype("float64") / settings.hours_per_year
    if settings.wage_fraction == 0:
        return pd.Series(0.0, index=zone_id.index)
    reached = routes["route_status"].isin(REACHED_STATUSES).reset_index(drop=True)
    without = zone_id[reached & per_hour.isna()].drop_duplicates()
    if not without.empty:
        raise CostError(
            f"{len(without)} of {zones['zone_id'].nunique()} zones have no household income, so "
            f"their travel time has no price; first: zone {without.iloc[0]!r}. Fill it in, or set "
            "[costs] fallback_household_income."
        )
    return per_hour * settings.wage_fraction


def _fees(routes: pd.DataFrame, sites: pd.DataFrame) -> pd.Series[float]:
    """Entrance fee at the access point of each route; without one, the site's lowest."""
    pairs = routes[["site_id", "access_id"]].reset_index(drop=True)
    at_access = pairs.merge(
        sites[["site_id", "access_id", "fee"]],
        on=["site_id", "access_id"],
        how="left",
        validate="many_to_one",
    )["fee"]
    lowest = sites.groupby("site_id")["fee"].min()
    strange = ~pairs["site_id"].isin(lowest.index)
    if strange.any():
        raise CostError(
            f"{int(strange.sum())} routes end at a site that is not in the sites file; first: "
            f"{pairs.loc[strange, 'site_id'].iloc[0]!r}. Correct the routes table, or add the site."
        )
    return at_access.fillna(pairs["site_id"].map(lowest))


def summarise_cost(outputs: tuple[Any, ...]) -> str:
    """One line: how many pairs are priced, and the middle price."""
    costs = outputs[0]
    priced = costs["cost_status"] == "priced"
    rest = costs.loc[~priced, "cost_status"].value_counts()
    without = "".join(f", {count:,} without price: {name}" for name, count in rest.items())
    median = costs.loc[priced, "travel_cost"].median()
    middle = f" (median {median:,.2f} per person)" if priced.any() else ""
    return f"{int(priced.sum()):,} of {len(costs):,} pairs priced{middle}{without}"
