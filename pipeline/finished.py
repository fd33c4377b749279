"""The join stage: visits, people and prices in one finished table, a row per zone and site.

**Visits** are expanded from the records by their kind (``expansion``), less what belongs to
other purposes of the trips (``purposes``), with standard errors (``sampling_errors``).

**Substitutes.** `substitute_cost` is the price of the cheapest site with the role 'substitute'
that the zone can reach, or of the second, or an index of all ([market] substitute);
sites_are_substitutes adds the other valued sites to the choice.

**Persons.** With [market] level = "person" the records of an on-site or household survey become
a table of their own (``persons``), each trip priced as the record tells of it.

**What a visit is.** One of a person, an adult or a vehicle, as the prices are ([costs]
shared_by).
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from pipeline.costs import own_trip_costs
from pipeline.errors import JoinError
from pipeline.expansion import expanded_records
from pipeline.persons import person_records, person_table
from pipeline.sampling_errors import visits_variance
from pipeline.settings import MarketSettings
from pipeline.stays import place_ids
from pipeline.study import Study
from pipeline.visit_settings import VisitsSettings

PAIR = ["zone_id", "site_id"]


def join(
    origins: pd.DataFrame,
    costs: pd.DataFrame,
    routes: pd.DataFrame,
    zones: pd.DataFrame,
    sites: pd.DataFrame,
    *,
    study: Study,
) -> tuple[pd.DataFrame, pd.DataFrame | None]:
    """Bring visits, population, income, prices and the market together.

    Parameters
    ----------
    origins, costs, routes, zones, sites : tables of the earlier stages.
    study : reads [visits], [zones] covariates, [market] and [costs].

    Returns
    -------
    The `zone_table`: every zone for every site to be valued, zones without a visit with zero,
    zones outside the market with the reason in `market_note`. And the `trip_table`, where
    [market] level asks for it, else None.

    Raises
    ------
    JoinError
        A known total is of no such site or has no record to spread it by, or a record's zone is
        not in the zones file.
    """
    valued = sites.loc[sites["role"] == "site", "site_id"].drop_duplicates()
    _check_zones(origins, zones)
    records = expanded_records(
        origins, zones, sites, costs, visits=study.visits, shared_by=study.costs.shared_by
    )
    people = zones[["zone_id", "population", "household_income", *study.zones.covariates]]
    pairs = zones[["zone_id"]].merge(valued.to_frame(), how="cross")
    table = pairs.merge(pd.DataFrame(people), on="zone_id", how="left", validate="many_to_one")
    for part in (
        zone_visits(records, origins, study.visits),
        _ways(routes),
        _prices(costs),
        substitute_costs(costs, sites, valued, study.market),
    ):
        table = table.merge(part, on=PAIR, how="left", validate="one_to_one")
    table = _in_market(_with_zeros(table, records), study)
    if study.market.level == "zone":
        return table, None
    told = person_records(records, origins, table, study.visits)
    prices = _own_prices(told, table, (routes, zones, sites, origins), study)
    return table, person_table(told, prices, table)


def _own_prices(
    told: pd.DataFrame, zone_table: pd.DataFrame, tables: tuple[pd.DataFrame, ...], study: Study
) -> pd.DataFrame:
    """`own_trip_costs` of the records, with what the same trip would cost to the substitute.

    An index of all substitutes is of no one trip: there the zone's price stands.
    """
    routes, zones, sites, origins = tables
    prices = own_trip_costs(told, routes, zones, sites, origins, study=study)
    instead = zone_table.set_index(PAIR)["substitute_id"].dropna().rename("instead")
    there = told.join(instead, on=PAIR, validate="many_to_one").dropna(subset="instead")
    elsewhere = there.assign(site_id=there["instead"])
    if elsewhere.empty:
        return prices.assign(substitute_cost=np.nan)
    other = own_trip_costs(elsewhere, routes, zones, sites, origins, study=study)
    return prices.assign(substitute_cost=other["travel_cost"])


def _in_market(table: pd.DataFrame, study: Study) -> pd.DataFrame:
    """The finished table with its rates and its market."""
    population = table["population"]
    rates = 1000 * table["visits"] / population.where(population > 0)
    notes = _market_notes(table, study)
    return table.assign(visits_per_1000=rates, market_note=notes, in_market=notes.isna()).drop(
        columns=["cost_status", "route_status"]
    )


def zone_visits(
    records: pd.DataFrame, origins: pd.DataFrame, visits: VisitsSettings
) -> pd.DataFrame:
    """Expanded visits of the zones that have a record.

    Returns
    -------
    `zone_id, site_id, sampled_records, sampled_visits, expansion_factor, visits, visits_se`, and
    where trips with other purposes are treated `other_purpose_visits, multi_purpose`.
    """
    variance = visits_variance(records, origins, visits).groupby(["zone_id", "site_id"]).sum()
    placed = records[records["is_placed"]]
    whole = placed["counted_visits"] * placed["factor"]
    sums = (
        placed[PAIR]
        .assign(
            sampled_records=1.0,
            sampled_visits=placed["counted_visits"] * placed["share"],
            visits=whole * placed["share"],
            other_purpose_visits=whole * (1 - placed["share"]),
            multi_purpose=whole * placed["multi_purpose"],
        )
        .groupby(PAIR)
        .sum()
    )
    factor = sums["visits"] / sums["sampled_visits"].where(sums["sampled_visits"] > 0)
    everything = sums["visits"] + sums["other_purpose_visits"]
    sums["multi_purpose"] = sums["multi_purpose"] / everything.where(everything > 0)
    sums = sums.assign(expansion_factor=factor, visits_se=(variance**0.5).reindex(sums.index))
    if visits.other_purposes == "keep":
        sums = sums.drop(columns=["other_purpose_visits", "multi_purpose"])
    return sums.reset_index()


def _with_zeros(table: pd.DataFrame, records: pd.DataFrame) -> pd.DataFrame:
    """Zones without a record: zero visits, and their site's means where a mean is needed."""
    filled = table.copy()
    counts = ["sampled_records", "sampled_visits", "visits", "visits_se", "other_purpose_visits"]
    for name in counts:
        if name in filled:
            filled[name] = filled[name].fillna(0.0)
    placed = records[records["is_placed"]]
    number = placed["person_visits"].groupby(placed["site_id"]).sum()
    means = {"expansion_factor": "factor", "multi_purpose": "multi_purpose"}
    for name, of_record in means.items():
        if name in filled:
            total = (placed[of_record] * placed["person_visits"]).groupby(placed["site_id"]).sum()
            mean = filled["site_id"].map(total / number.where(number > 0)).astype("float64")
            filled[name] = filled[name].fillna(mean)
    return filled


def substitute_costs(
    costs: pd.DataFrame, sites: pd.DataFrame, valued: pd.Series[str], market: MarketSettings
) -> pd.DataFrame:
    """Price of the substitutes of each zone and site, as [market] substitute asks for it.

    Returns
    -------
    `zone_id, site_id, substitute_cost, substitute_id` (missing for the index, which is of all);
    pairs whose zone reaches no such substitute are absent.

    Raises
    ------
    JoinError
        The index lacks the attractiveness of a substitute, or is given that of no substitute.
    """
    roles = sites.drop_duplicates("site_id").set_index("site_id")["role"]
    usable = roles.index if market.sites_are_substitutes else roles.index[roles == "substitute"]
    if market.substitute == "index":
        _check_attractiveness(market, list(usable))
    offers = costs.loc[
        costs["site_id"].isin(usable) & costs["travel_cost"].notna(),
        ["zone_id", "site_id", "travel_cost"],
    ].rename(columns={"site_id": "substitute_id", "travel_cost": "substitute_cost"})
    offers = offers.sort_values(["zone_id", "substitute_cost", "substitute_id"])
    found = [
        _substitute(offers[offers["substitute_id"].isin(_others(site, sites))], market).assign(
            site_id=site
        )
        for site in valued
    ]
    return _with_lodging(pd.concat(found)[[*PAIR, "substitute_cost", "substitute_id"]], costs)


def _others(site: str, sites: pd.DataFrame) -> pd.Series[str]:
    """Sites that visitors of a site could go to instead: other places, for the same stay."""
    place, stay = place_ids(sites), sites.get("stay", pd.Series(None, sites.index, dtype="str"))
    mine = sites["site_id"] == site
    elsewhere = place != place[mine].iloc[0]
    return sites.loc[elsewhere & (stay.isna() | stay.isin(stay[mine])), "site_id"]


def _with_lodging(substitutes: pd.DataFrame, costs: pd.DataFrame) -> pd.DataFrame:
    """Whoever stays overnight would do so elsewhere too: lodging is the site's own."""
    if "lodging_cost" not in costs:
        return substitutes
    nights = costs[[*PAIR, "lodging_cost"]]
    table = substitutes.merge(nights, on=PAIR, how="left", validate="one_to_one")
    table["substitute_cost"] = table["substitute_cost"] + table.pop("lodging_cost").fillna(0.0)
    return table


def _substitute(offers: pd.DataFrame, market: MarketSettings) -> pd.DataFrame:
    """One row per zone, of its offers from the cheapest on."""
    if market.substitute != "index":
        place = 1 if market.substitute == "second_cheapest" else 0
        return offers[offers.groupby("zone_id").cumcount() == place]
    weight = offers["substitute_id"].map(market.attractiveness).astype("float64")
    parts = offers.assign(weight=weight, per_price=weight / offers["substitute_cost"])
    sums = parts.groupby("zone_id")[["weight", "per_price"]].sum()
    index = (sums["weight"] / sums["per_price"]).rename("substitute_cost").reset_index()
    return index.assign(substitute_id=pd.Series(np.nan, index=index.index).astype("str"))


def _check_attractiveness(market: MarketSettings, usable: list[str]) -> None:
    strange = [site for site in market.attractiveness if site not in usable]
    lacking = [site for site in usable if site not in market.attractiveness]
    if strange or lacking:
        wrong = f"names {strange[0]!r}, which is no substitute" if strange else ""
        wrong = wrong or f"has no weight of {lacking[0]!r}"
        raise JoinError(
            f'[market] substitute = "index", but [market.attractiveness] {wrong} (substitutes: '
            f"{', '.join(usable) or 'none'}). Give every substitute its weight."
        )


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
    notes = _market_notes(table, study)
    table = table.assign(market_note=notes, in_market=notes.isna())
    return table[[*zone_table.columns, *table.columns.difference(zone_table.columns)]].drop(
        columns="cost_status"
    )


def _ways(routes: pd.DataFrame) -> pd.DataFrame:
    return routes[[*PAIR, "distance_km", "drive_time_min", "route_status"]]


def _prices(costs: pd.DataFrame) -> pd.DataFrame:
    return costs[[*PAIR, "travel_cost", "cost_status"]]


def _market_notes(table: pd.DataFrame, study: Study) -> pd.Series[str]:
    """Why a pair is left out of the market; missing where it is not. The first reason counts."""
    far, long = study.market.max_distance_km, study.market.max_drive_time_min
    nobody = table["population"] <= 0
    no_price = table["travel_cost"].isna()
    visited = nobody & (table["visits"] > 0)
    reasons: list[tuple[pd.Series[bool], Any]] = [
        (visited, "no people live in the zone, though it has visits"),
        (nobody, "no people live in the zone"),
        (no_price & table["cost_status"].isna(), "no route in the routes table"),
        (no_price, "no price: " + table["cost_status"].fillna("")),
    ]
    if study.visits.kind == "household" and study.visits.household_expansion == "zone_population":
        reasons.append((table["sampled_records"] == 0, "no respondent lives in the zone"))
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
    table, persons = outputs
    inside = table["in_market"]
    visits, outside = table.loc[inside, "visits"].sum(), table.loc[~inside, "visits"].sum()
    share = outside / (visits + outside) if visits + outside else 0.0
    line = (
        f"{_count(table['zone_id'].nunique(), 'zone')} × "
        f"{_count(table['site_id'].nunique(), 'site')}, "
        f"{_count(int((table['visits'] > 0).sum()), 'pair')} with visits, {visits:,.0f} visits a "
        f"year in the market ({_count(int(inside.sum()), 'pair')}), {share:.1%} of visits from "
        "outside it"
    )
    if "other_purpose_visits" in table:
        line += f", {table['other_purpose_visits'].sum():,.0f} visits left to other purposes"
    return line if persons is None else f"{line}; {_count(len(persons), 'record')} of persons"


def _count(number: int, thing: str) -> str:
    return f"{number:,} {thing}{'' if number == 1 else 's'}"
