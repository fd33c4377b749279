"""The cost stage: the price of a visit per person, item by item, for every zone and site."""

from __future__ import annotations

import difflib
from typing import Any

import pandas as pd

from pipeline.costs.driving import cost_per_km
from pipeline.costs.figures import Figures
from pipeline.costs.items import fees, price
from pipeline.costs.people import parties
from pipeline.costs.reported import calibrated, reported_check
from pipeline.costs.trips import round_trips
from pipeline.costs.wages import hourly_wages
from pipeline.errors import CostError
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
    _refuse_strange_zones(pairs["zone_id"], zones)
    _refuse_strange_sites(tuple(settings.parking_per_vehicle), sites)
    figures = Figures(settings, zones, pairs["zone_id"], study.study.price_year)
    trips = round_trips(routes, settings)
    party = parties(pairs["site_id"], origins, settings)
    priced = trips["round_trip_km"].notna()
    rates = pd.DataFrame(
        {
            "vehicle_cost_per_km": cost_per_km(figures),
            "hourly_wage": hourly_wages(figures, priced),
            "fee": fees(routes, sites) * figures.factor("fee"),
        }
    )
    items = price(trips, party, rates, pairs["site_id"], figures)
    status = routes["route_status"].reset_index(drop=True).mask(priced, "priced")
    return (
        pd.concat(
            [
                pairs,
                trips[["round_trip_km", "round_trip_hours", "driven_km"]],
                party,
                rates[["vehicle_cost_per_km", "hourly_wage"]],
                items,
                status.rename("cost_status"),
            ],
            axis=1,
        ),
    )


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


def _refuse_strange_zones(zone_id: pd.Series[str], zones: pd.DataFrame) -> None:
    strange = ~zone_id.isin(zones["zone_id"])
    if strange.any():
        raise CostError(
            f"{int(strange.sum())} routes start in a zone that is not in the zones file; first: "
            f"{zone_id[strange].iloc[0]!r}. Correct the routes table, or add the zone."
        )


def _refuse_strange_sites(named: tuple[str, ...], sites: pd.DataFrame) -> None:
    there = list(sites["site_id"].unique())
    for site in named:
        if site not in there:
            near = difflib.get_close_matches(site, there, n=1, cutoff=0.0)
            raise CostError(
                f"[costs.parking_per_vehicle] names {site!r}, which is no site; the nearest is "
                f"{near[0]!r}. Correct the name."
            )


def summarise_cost(outputs: tuple[Any, ...]) -> str:
    """One line: how many pairs are priced, and the middle price."""
    costs = outputs[0]
    priced = costs["cost_status"] == "priced"
    rest = costs.loc[~priced, "cost_status"].value_counts()
    without = "".join(f", {count:,} without price: {name}" for name, count in rest.items())
    median = costs.loc[priced, "travel_cost"].median()
    middle = f" (median {median:,.2f} per person)" if priced.any() else ""
    return f"{int(priced.sum()):,} of {len(costs):,} pairs priced{middle}{without}"
