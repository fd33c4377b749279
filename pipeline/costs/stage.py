"""The cost stage: the price of a visit per person, item by item, for every zone and site."""

from __future__ import annotations

import difflib
from typing import Any

import pandas as pd

from pipeline.cost_settings import CostsSettings
from pipeline.costs.driving import cost_per_km, own_cost_per_km, refuse_strange_vehicles
from pipeline.costs.figures import Figures
from pipeline.costs.items import fees, parking, price
from pipeline.costs.modes import mode_shares, own_shares
from pipeline.costs.people import mean_nights, own_parties, parties
from pipeline.costs.reported import calibrated, reported_check
from pipeline.costs.trips import round_trips
from pipeline.costs.wages import hourly_wages
from pipeline.errors import CostError
from pipeline.stays import place_ids
from pipeline.study import Study


def cost(
    routes: pd.DataFrame,
    zones: pd.DataFrame,
    sites: pd.DataFrame,
    origins: pd.DataFrame | None,
    *,
    study: Study,
) -> tuple[pd.DataFrame]:
    """Price the round trip of every zone–site pair, per person.

    In the plainest study, per person: (driven km × cost per km + tolls + ferry fares) ÷ party
    size + hours × wage fraction × household income ÷ working hours a year + entrance + other.

    Parameters
    ----------
    routes : one row per zone and site; distances in km, times in minutes, one way.
    zones : their household income, per year, and the columns that [costs.zone_columns] names.
    sites : their entrance fees, per person; one row per access point.
    origins : for the parties; None where [costs] gives their size.
    study : reads [costs].

    Returns
    -------
    The `costs` table; a pair without a path keeps its row, with no cost.

    Raises
    ------
    CostError
        A zone has no income and the study names no fallback; party sizes are to come from the
        records but none has one; a route has no distance; a zone or site is unknown; a figure
        of a zone is negative; an index year is missing.
    """
    settings = calibrated(study.costs, routes, origins)
    pairs = routes[["zone_id", "site_id"]].reset_index(drop=True)
    _refuse_strangers(pairs, zones, sites, origins, settings)
    figures = Figures(settings, zones, pairs["zone_id"], study.study.price_year)
    trips = round_trips(routes, settings)
    party = parties(pairs["site_id"], origins, settings)
    priced = trips["round_trip_km"].notna()
    rates = _rates(figures, routes, sites, priced)
    rates["nights"] = mean_nights(pairs["site_id"], origins, settings)
    items = price(trips, party, rates, mode_shares(trips["one_way_km"], settings), figures)
    status = routes["route_status"].reset_index(drop=True).mask(priced, "priced")
    parts = [
        pairs,
        trips[["round_trip_km", "round_trip_hours", "driven_km"]],
        party,
        rates[["vehicle_cost_per_km", "hourly_wage"]],
        items,
        status.rename("cost_status"),
    ]
    return (pd.concat(parts, axis=1),)


def _rates(
    figures: Figures,
    routes: pd.DataFrame,
    sites: pd.DataFrame,
    reached: pd.Series[bool],
    income: pd.Series[float] | None = None,
) -> pd.DataFrame:
    """What a km, an hour and the entrance cost in every row, and the hours that are charged."""
    return pd.DataFrame(
        {
            "parking": parking(routes["site_id"].reset_index(drop=True), sites, figures),
            "vehicle_cost_per_km": cost_per_km(figures),
            "hourly_wage": hourly_wages(figures, reached, income),
            "fee": fees(routes, sites) * figures.factor("fee"),
            "hours_on_site": figures.settings.hours_on_site,
        }
    )


def own_trip_costs(
    records: pd.DataFrame,
    routes: pd.DataFrame,
    zones: pd.DataFrame,
    sites: pd.DataFrame,
    origins: pd.DataFrame | None,
    *,
    study: Study,
) -> pd.DataFrame:
    """Price the trip of every record by what it tells: party, vehicle, mode, income, nights.

    What a record does not tell is what `cost` takes for its zone and site.

    Parameters
    ----------
    records : rows of the `origins` table whose zone and site have a route.
    routes, zones, sites, origins : as for `cost`.
    study : reads [costs].

    Returns
    -------
    `party_size, adults, bearers, vehicle_cost_per_km, hourly_wage`, the items and `travel_cost`,
    with the index of `records`.

    Raises
    ------
    CostError
        As `cost`; or a record's vehicle or mode has no price, or its party does not fit.
    """
    settings = calibrated(study.costs, routes, origins)
    rows = records.reset_index(drop=True)
    pairs = rows[["zone_id", "site_id"]]
    ways = pairs.merge(routes, on=["zone_id", "site_id"], how="left", validate="many_to_one")
    figures = Figures(settings, zones, pairs["zone_id"], study.study.price_year)
    trips = round_trips(ways, settings)
    party = own_parties(rows, origins, settings)
    own = settings.wage_of == "respondent"
    income = rows["household_income"] if own and "household_income" in rows else None
    rates = _rates(figures, ways, sites, trips["round_trip_km"].notna(), income)
    rates["vehicle_cost_per_km"] = own_cost_per_km(rows, rates["vehicle_cost_per_km"], figures)
    rates["nights"] = _told(rows, "nights", mean_nights(rows["site_id"], origins, settings))
    rates["hours_on_site"] = _told(rows, "hours_on_site", rates["hours_on_site"])
    shares = mode_shares(trips["one_way_km"], settings)
    if "mode" in rows:
        shares = own_shares(rows["mode"], shares, rows["record_id"])
    items = price(trips, party, rates, shares, figures)
    told = pd.concat([party, rates[["vehicle_cost_per_km", "hourly_wage"]], items], axis=1)
    return told.set_axis(records.index)


def _told(records: pd.DataFrame, name: str, otherwise: pd.Series[float]) -> pd.Series[float]:
    """A figure as the records tell it, and `otherwise` where they do not."""
    return records[name].fillna(otherwise) if name in records else otherwise


def cost_and_check(
    routes: pd.DataFrame,
    zones: pd.DataFrame,
    sites: pd.DataFrame,
    origins: pd.DataFrame | None,
    *,
    study: Study,
) -> tuple[pd.DataFrame, pd.DataFrame]:
    """`cost`, with the routed figures held against those that the records report.

    Returns
    -------
    `costs`, `reported_check`.
    """
    (costs,) = cost(routes, zones, sites, origins, study=study)
    return costs, reported_check(routes, costs, origins)


def _refuse_strangers(
    pairs: pd.DataFrame,
    zones: pd.DataFrame,
    sites: pd.DataFrame,
    origins: pd.DataFrame | None,
    settings: CostsSettings,
) -> None:
    """Zones, sites and vehicles that nothing is known of."""
    strange = ~pairs["zone_id"].isin(zones["zone_id"])
    if strange.any():
        raise CostError(
            f"{int(strange.sum())} routes start in a zone that is not in the zones file; first: "
            f"{pairs.loc[strange, 'zone_id'].iloc[0]!r}. Correct the routes table, or add the zone."
        )
    there = [*dict.fromkeys([*sites["site_id"], *place_ids(sites)])]
    for site in settings.parking_per_vehicle:
        if site not in there:
            near = difflib.get_close_matches(site, there, n=1, cutoff=0.0)
            raise CostError(
                f"[costs.parking_per_vehicle] names {site!r}, which is no site; the nearest is "
                f"{near[0]!r}. Correct the name."
            )
    if origins is not None:
        refuse_strange_vehicles(origins, settings)


def summarise_cost(outputs: tuple[Any, ...]) -> str:
    """One line: how many pairs are priced, and the middle price."""
    costs = outputs[0]
    priced = costs["cost_status"] == "priced"
    rest = costs.loc[~priced, "cost_status"].value_counts()
    without = "".join(f", {count:,} without price: {name}" for name, count in rest.items())
    median = costs.loc[priced, "travel_cost"].median()
    middle = f" (median {median:,.2f} per person)" if priced.any() else ""
    return f"{int(priced.sum()):,} of {len(costs):,} pairs priced{middle}{without}"
