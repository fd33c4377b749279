"""From records to a year: what each visit record stands for, by the kind of records.

Every record has a factor; visits of a zone are the sum of factor × person-visits × the site's
share over its records. Where a visit is an adult's or a vehicle's ([costs] shared_by), the
record's adults or vehicles stand in place of its persons; factor and totals stay of persons.

Where the study knows a site's person-visits in a year or season, they are divided by the shares
that the records show. Visitors from abroad have their share of the
total and are left out, being outside the market. The rest is domestic; records without a zone
are taken to come from the zones in the proportions of those with one. So

    factor = total × domestic ÷ (domestic + foreign) ÷ with a zone,

in person-visits of the site's records (of the season), and the zones' visits, with what belongs
to other purposes, add up to the domestic part of the known total. Without a known total:

``census``, ``sample_of_register``, ``zone_counts``   1: the records are all there is
``on_site``      1 where the weights say how many visits an interview stands for
``household``    people per weight: of all zones, or of each zone; or 1 where weights are people
"""

from __future__ import annotations

import difflib
from dataclasses import dataclass

import numpy as np
import pandas as pd

from pipeline.errors import JoinError
from pipeline.parties import class_labels, people_per_trip, visits_per_person
from pipeline.purposes import purposes
from pipeline.stays import place_ids
from pipeline.tables import PLACED_STATUSES
from pipeline.visit_settings import VisitsSettings

WHOLE_YEAR = "year"


@dataclass(frozen=True)
class Total:
    """Known person-visits of a site in a year or season, and their standard error."""

    visits: float
    std_error: float


def known_totals(visits: VisitsSettings) -> dict[tuple[str, str], Total]:
    """Known totals by site and season (`WHOLE_YEAR` where a site has one total)."""
    totals = {
        (site, WHOLE_YEAR): Total(number, visits.annual_visits_se.get(site, 0.0))
        for site, number in visits.annual_visits.items()
    }
    for season, numbers in visits.season_visits.items():
        errors = visits.season_visits_se.get(season, {})
        for site, number in numbers.items():
            totals[site, season] = Total(number, errors.get(site, 0.0))
    return totals


def expanded_records(
    origins: pd.DataFrame,
    zones: pd.DataFrame,
    sites: pd.DataFrame,
    costs: pd.DataFrame,
    *,
    visits: VisitsSettings,
    shared_by: str,
) -> pd.DataFrame:
    """What each record of the valued sites stands for in a year.

    Parameters
    ----------
    origins, zones, sites : tables of the earlier stages.
    costs : the `costs` table, for parties that are not known.
    visits : the section [visits].
    shared_by : as [costs] shared_by: whose a visit is.

    Returns
    -------
    One row per record, with the index of `origins`: `record_id, zone_id, site_id, total_of`
    (whose known total), `season,
    trips, weight, people` (per trip), `is_filled` (by a mean), `person_visits` (in the sample),
    `counted_visits` (the same as visits of persons, adults or vehicles), `multi_purpose`,
    `share` (of the trip that is the site's), `is_domestic`, `is_placed`, `factor` (visits a
    year per person-visit of the sample; 0 for what has no zone).

    Raises
    ------
    JoinError
        A total is of no such site, or has no record to spread it by; records of a season have
        no total; an on-site survey has neither total nor weights; a household survey has no
        respondent with a zone.
    """
    totals = known_totals(visits)
    valued = sites.loc[sites["role"] == "site"].drop_duplicates("site_id")
    places = place_ids(valued).set_axis(valued["site_id"])
    _check_sites(totals, [*places.index, *places])
    of_valued = origins[origins["site_id"].isin(places.index)]
    records = of_valued[["record_id", "zone_id", "site_id", "trips", "weight"]].copy()
    records["total_of"] = _total_of(records["site_id"], places, totals)
    records["season"] = _seasons(of_valued, records["total_of"], totals)
    people = people_per_trip(origins, visits).loc[of_valued.index]
    records[["people", "is_filled"]] = people
    records["person_visits"] = of_valued["counted_trips"] * people["people"]
    unit = visits_per_person(of_valued, people["people"], costs, visits, shared_by)
    records["counted_visits"] = records["person_visits"] * unit
    records[["multi_purpose", "share"]] = purposes(of_valued, visits.other_purposes)
    if visits.kind == "sample_of_register" and visits.other_purposes != "keep":
        records = _with_stand_ins(records, of_valued, visits)
    records["is_domestic"] = of_valued["origin_status"] != "foreign"
    records["is_placed"] = of_valued["origin_status"].isin(PLACED_STATUSES)
    records["factor"] = _factors(records, zones, totals, visits)
    return records


def _with_stand_ins(
    records: pd.DataFrame, origins: pd.DataFrame, visits: VisitsSettings
) -> pd.DataFrame:
    """Records that were not surveyed take the mean purposes of the surveyed of their class."""
    asked = [name for name in ("purpose_share", "stops") if name in origins]
    surveyed = origins.get("surveyed", origins[asked].notna().any(axis=1))
    label = class_labels(origins, visits.register_classes)
    trips = records["person_visits"].where(surveyed, 0.0)
    filled = records.copy()
    for name in ("multi_purpose", "share"):
        mean = (records[name] * trips).groupby(label).sum() / trips.groupby(label).sum()
        filled[name] = records[name].where(surveyed, label.map(mean))
    lost = filled["share"].isna()
    if lost.any():
        first = filled[lost].iloc[0]
        raise JoinError(
            f"{int(lost.sum())} records of the register are of a class of which none was surveyed; "
            f"first: record {first['record_id']!r} of {first['site_id']!r}. Name fewer columns in "
            "[visits] register_classes."
        )
    return filled.assign(is_filled=records["is_filled"] | ~surveyed)


def _total_of(
    site_id: pd.Series[str], places: pd.Series[str], totals: dict[tuple[str, str], Total]
) -> pd.Series[str]:
    """Whose known total a record belongs to: its site's own, or its place's; else its site."""
    with_total = {site for site, _ in totals}
    place = site_id.map(places)
    of_place = ~site_id.isin(with_total) & place.isin(with_total)
    return site_id.mask(of_place, place)


def _check_sites(totals: dict[tuple[str, str], Total], known: list[str]) -> None:
    for site, season in totals:
        if site not in known:
            near = difflib.get_close_matches(site, known, n=1, cutoff=0.0)
            key = "annual_visits" if season == WHOLE_YEAR else f"season_visits.{season}"
            raise JoinError(
                f"[visits] {key} names {site!r}, which is no site to be valued; "
                f"the nearest is {near[0]!r}. Correct the name."
            )


def _seasons(
    origins: pd.DataFrame, total_of: pd.Series[str], totals: dict[tuple[str, str], Total]
) -> pd.Series[str]:
    """Season of each record where its site has totals by season; else the whole year."""
    season = pd.Series(WHOLE_YEAR, index=origins.index, dtype="str")
    by_season = {site for site, name in totals if name != WHOLE_YEAR}
    if not by_season:
        return season
    if "season" not in origins:
        raise JoinError(
            "[visits] season_visits are known, but the records have no season; name its column "
            "in [visits.columns] season, or give [visits] seasons and the column date."
        )
    concerned = total_of.isin(by_season)
    season = season.mask(concerned, origins["season"])
    known = pd.MultiIndex.from_tuples(list(totals))
    here = pd.MultiIndex.from_arrays([total_of, season.fillna("")])
    lost = concerned & ~here.isin(known)
    if lost.any():
        first = origins[lost].iloc[0]
        raise JoinError(
            f"{int(lost.sum())} visit records of {first['site_id']!r} are of a season without a "
            f"known total; first: record {first['record_id']!r}, season {first['season']!r}. "
            "Add it to [visits] season_visits."
        )
    return season


def _factors(
    records: pd.DataFrame,
    zones: pd.DataFrame,
    totals: dict[tuple[str, str], Total],
    visits: VisitsSettings,
) -> pd.Series[float]:
    """Factor of each record; 0 where it has no zone."""
    factor = pd.Series(1.0, index=records.index)
    if visits.kind == "household":
        factor = _people_factors(records, zones, visits)
    for (site, season), total in totals.items():
        here = (records["total_of"] == site) & (records["season"] == season)
        factor = factor.mask(here, _total_factor(records[here], site, season, total))
    if visits.kind == "on_site":
        _check_interviews(records, totals)
    return factor.where(records["is_placed"], 0.0)


def _total_factor(records: pd.DataFrame, site: str, season: str, total: Total) -> float:
    number = records["person_visits"]
    placed = float(number[records["is_placed"]].sum())
    if placed <= 0:
        when = "" if season == WHOLE_YEAR else f" in {season!r}"
        raise JoinError(
            f"[visits] annual_visits: the total of {site!r}{when} cannot be spread over the zones, "
            "because none of its visits has a zone. Bring records of that site."
        )
    domestic = float(number[records["is_domestic"]].sum())
    return float(total.visits * domestic / number.sum() / placed)


def _people_factors(
    records: pd.DataFrame, zones: pd.DataFrame, visits: VisitsSettings
) -> pd.Series[float]:
    """Household surveys: people that one unit of a respondent's weight stands for."""
    if visits.household_expansion == "weights":
        return pd.Series(1.0, index=records.index)
    weight = records["weight"].where(records["is_placed"], 0.0)
    population = zones.set_index("zone_id")["population"]
    group = [records["site_id"]]
    if visits.household_expansion == "zone_population":
        group.append(records["zone_id"].fillna(""))
        people = records["zone_id"].map(population).astype("float64")
    else:
        people = pd.Series(float(population.sum()), index=records.index)
    respondents = weight.groupby(group).transform("sum")
    return people / respondents.where(respondents > 0, np.nan)


def _check_interviews(records: pd.DataFrame, totals: dict[tuple[str, str], Total]) -> None:
    known = {site for site, _ in totals}
    rest = records[~records["total_of"].isin(known)]
    for site, part in rest.groupby("site_id"):
        if (part["weight"] == 1).all():
            raise JoinError(
                f"the interviews on site {site!r} stand for an unknown number of visits: give its "
                "total in [visits] annual_visits, or weights in [visits.columns] weight."
            )
