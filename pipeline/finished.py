"""The join stage: visits, people and prices in one finished table, a row per zone and site.

**Expansion.** Where the study knows a site's person-visits in a year (`annual_visits`), they are
divided by the shares that the records show. Visitors from abroad have their share of the total
and are left out, being outside the market. The rest is domestic; records without a zone are
taken to come from the zones in the proportions of those with one. So

    expansion_factor = annual_visits × domestic ÷ (domestic + foreign) ÷ with a zone,

in person-visits of the site's records, and the zones' visits add up to the domestic part of the
known total. Without a known total the visits with a zone stand as they are, factor 1.

**Substitutes.** `substitute_cost` is the price of the cheapest site with the role 'substitute'
that the zone can reach; [market] sites_are_substitutes adds the other valued sites to the choice.
"""

from __future__ import annotations

import difflib
from typing import Any

import numpy as np
import pandas as pd

from pipeline.errors import JoinError
from pipeline.parties import person_visits
from pipeline.settings import MarketSettings
from pipeline.study import Study
from pipeline.tables import PLACED_STATUSES

PAIR = ["zone_id", "site_id"]


def join(
    origins: pd.DataFrame,
    costs: pd.DataFrame,
    routes: pd.DataFrame,
    zones: pd.DataFrame,
    sites: pd.DataFrame,
    *,
    study: Study,
) -> tuple[pd.DataFrame]:
    """Bring visits, population, income, prices and the market together.

    Parameters
    ----------
    origins, costs, routes, zones, sites : tables of the earlier stages.
    study : reads [visits] annual_visits, [zones] covariates and [market].

    Returns
    -------
    The `zone_table`: every zone for every site to be valued, zones without a visit with zero,
    zones outside the market with the reason in `market_note`.

    Raises
    ------
    JoinError
        A known total is of no such site or has no record to spread it by, or a record's zone is
        not in the zones file.
    """
    valued = sites.loc[sites["role"] == "site", "site_id"].drop_duplicates()
    _check_zones(origins, zones)
    factors = expansion_factors(origins, valued, study.visits.annual_visits)
    pairs = zones[["zone_id"]].merge(valued.to_frame(), how="cross")
    people = zones[["zone_id", "population", "household_income", *study.zones.covariates]]
    table = (
        pairs.merge(pd.DataFrame(people), on="zone_id", how="left", validate="many_to_one")
        .merge(sampled_visits(origins), on=PAIR, how="left", validate="one_to_one")
        .merge(_ways(routes), on=PAIR, how="left", validate="one_to_one")
        .merge(_prices(costs), on=PAIR, how="left", validate="one_to_one")
        .merge(
            substitute_costs(costs, sites, valued, study.market),
            on=PAIR,
            how="left",
            validate="one_to_one",
        )
    )
    table["sampled_visits"] = table["sampled_visits"].fillna(0.0)
    table["expansion_factor"] = table["site_id"].map(factors)
    table["visits"] = table["sampled_visits"] * table["expansion_factor"]
    population = table["population"]
    table["visits_per_1000"] = 1000 * table["visits"] / population.where(population > 0)
    table["market_note"] = _market_notes(table, study.market)
    table["in_market"] = table["market_note"].isna()
    return (table.drop(columns=["cost_status", "route_status"]),)


def sampled_visits(origins: pd.DataFrame) -> pd.DataFrame:
    """Person-visits in the records with a zone: `zone_id, site_id, sampled_visits`."""
    placed = origins["origin_status"].isin(PLACED_STATUSES)
    visits = origins.loc[placed, PAIR].assign(sampled_visits=person_visits(origins)[placed])
    return visits.groupby(PAIR, as_index=False).agg(sampled_visits=("sampled_visits", "sum"))


def expansion_factors(
    origins: pd.DataFrame, valued: pd.Series[str], annual_visits: dict[str, float]
) -> dict[str, float]:
    """Visits per year that a sampled visit stands for, by site (see the module's text).

    Raises
    ------
    JoinError
        A known total is of no site to be valued, or none of its visits has a zone.
    """
    for site in annual_visits:
        if site not in set(valued):
            near = difflib.get_close_matches(site, list(valued), n=1, cutoff=0.0)
            raise JoinError(
                f"[visits] annual_visits names {site!r}, which is no site to be valued; "
                f"the nearest is {near[0]!r}. Correct the name."
            )
    visits = person_visits(origins)
    everyone = _by_site(visits, origins)
    domestic = _by_site(visits[origins["origin_status"] != "foreign"], origins)
    placed = _by_site(visits[origins["origin_status"].isin(PLACED_STATUSES)], origins)
    factors = {str(site): 1.0 for site in valued}
    for site, total in annual_visits.items():
        if placed.get(site, 0.0) <= 0:
            raise JoinError(
                f"[visits] annual_visits: the total of {site!r} cannot be spread over the zones, "
                "because none of its visits has a zone. Bring records of that site."
            )
        factors[site] = total * domestic[site] / everyone[site] / placed[site]
    return factors


def _by_site(visits: pd.Series[float], origins: pd.DataFrame) -> dict[str, float]:
    sums = visits.groupby(origins["site_id"].loc[visits.index]).sum()
    return {str(site): float(value) for site, value in sums.items()}


def substitute_costs(
    costs: pd.DataFrame, sites: pd.DataFrame, valued: pd.Series[str], market: MarketSettings
) -> pd.DataFrame:
    """Cheapest substitute of each zone and site.

    Returns
    -------
    `zone_id, site_id, substitute_cost, substitute_id`; pairs whose zone reaches no substitute are
    absent.
    """
    roles = sites.drop_duplicates("site_id").set_index("site_id")["role"]
    usable = roles.index if market.sites_are_substitutes else roles.index[roles == "substitute"]
    offers = costs.loc[
        costs["site_id"].isin(usable) & costs["travel_cost"].notna(),
        ["zone_id", "site_id", "travel_cost"],
    ].rename(columns={"site_id": "substitute_id", "travel_cost": "substitute_cost"})
    offers = offers.sort_values(["zone_id", "substitute_cost", "substitute_id"])
    cheapest = [
        offers[offers["substitute_id"] != site].drop_duplicates("zone_id").assign(site_id=site)
        for site in valued
    ]
    return pd.concat(cheapest)[[*PAIR, "substitute_cost", "substitute_id"]]


def repriced(
    zone_table: pd.DataFrame, costs: pd.DataFrame, sites: pd.DataFrame, *, study: Study
) -> pd.DataFrame:
    """The finished table with other prices or another market; its visits stay as they are.

    Equal to joining again where neither the records nor [visits] have changed, and much quicker
    with millions of records.

    Parameters
    ----------
    zone_table : as `join` made it, with other prices.
    costs, sites : tables of the flow.
    study : reads [market].
    """
    valued = sites.loc[sites["role"] == "site", "site_id"].drop_duplicates()
    changing = ["travel_cost", "substitute_cost", "substitute_id"]
    table = (
        zone_table.drop(columns=changing, errors="ignore")
        .merge(_prices(costs), on=PAIR, how="left", validate="one_to_one")
        .merge(
            substitute_costs(costs, sites, valued, study.market),
            on=PAIR,
            how="left",
            validate="one_to_one",
        )
    )
    notes = _market_notes(table, study.market)
    table = table.assign(market_note=notes, in_market=notes.isna())
    return table[[*zone_table.columns, *table.columns.difference(zone_table.columns)]].drop(
        columns="cost_status"
    )


def _ways(routes: pd.DataFrame) -> pd.DataFrame:
    return routes[[*PAIR, "distance_km", "drive_time_min", "route_status"]]


def _prices(costs: pd.DataFrame) -> pd.DataFrame:
    return costs[[*PAIR, "travel_cost", "cost_status"]]


def _market_notes(table: pd.DataFrame, market: MarketSettings) -> pd.Series[str]:
    """Why a pair is left out of the market; missing where it is not. The first reason counts."""
    far, long = market.max_distance_km, market.max_drive_time_min
    nobody = table["population"] <= 0
    no_price = table["travel_cost"].isna()
    visited = nobody & (table["visits"] > 0)
    reasons: list[tuple[pd.Series[bool], Any]] = [
        (visited, "no people live in the zone, though it has visits"),
        (nobody, "no people live in the zone"),
        (no_price & table["cost_status"].isna(), "no route in the routes table"),
        (no_price, "no price: " + table["cost_status"].fillna("")),
    ]
    if far is not None:
        reasons.append((table["distance_km"] > far, f"further than {far:g} km"))
    if long is not None:
        reasons.append((table["drive_time_min"] > long, f"longer drive than {long:g} min"))
    notes: pd.Series[str] = pd.Series(np.nan, index=table.index).astype("str")
    for applies, words in reversed(reasons):
        notes = notes.mask(applies, words)
    return notes.where(notes.notna())


def _check_zones(origins: pd.DataFrame, zones: pd.DataFrame) -> None:
    strange = origins["zone_id"].notna() & ~origins["zone_id"].isin(zones["zone_id"])
    if strange.any():
        first = origins[strange].iloc[0]
        raise JoinError(
            f"{int(strange.sum())} visit records come from a zone that is not in the zones file; "
            f"first: zone {first['zone_id']!r} of record {first['record_id']!r}. "
            "Run geocode again with the same zones."
        )


def summarise_join(outputs: tuple[Any, ...]) -> str:
    """One line: rows, zones with visits, visits in the market, and what lies outside."""
    table = outputs[0]
    inside = table["in_market"]
    visits, outside = table.loc[inside, "visits"].sum(), table.loc[~inside, "visits"].sum()
    share = outside / (visits + outside) if visits + outside else 0.0
    sites = table["site_id"].nunique()
    return (
        f"{table['zone_id'].nunique():,} zones × {sites:,} site{'' if sites == 1 else 's'}, "
        f"{int((table['visits'] > 0).sum()):,} pairs with visits, {visits:,.0f} visits a year in "
        f"the market ({int(inside.sum()):,} pairs), {share:.1%} of visits from outside it"
    )
