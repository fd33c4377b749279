"""Every table of the flow, declared once: column, type, unit, meaning, checks.

The declaration validates each read and each write and prints the data dictionary. Columns
that are not declared may stand beside the declared ones (covariates of the study's own);
they are never dropped.

Money is in the study's currency; distances are in km and times in minutes, one way, unless
the name says ``round_trip_`` or ``return_``. Missing is NaN with a status column beside it.
"""

from __future__ import annotations

import pandas as pd
from pandera.typing import Series

from pipeline.schema import Table, column

ORIGIN_STATUSES = (
    "matched",
    "crosswalk",
    "point_in_zone",
    "outside_zones",
    "malformed",
    "unknown_code",
    "missing",
    "foreign",
)
PLACED_STATUSES = ("matched", "crosswalk", "point_in_zone")
MODES = ("car", "motorcycle", "coach", "bus", "train", "bicycle", "foot", "aeroplane")
ROUTE_STATUSES = ("routed", "within_zone", "no_path", "too_far_from_road")
REACHED_STATUSES = ("routed", "within_zone")
SITE_ROLES = ("site", "substitute")
CENTROID_SOURCES = ("given", "inside_polygon", "population_weighted")


# --- what the study brings -------------------------------------------------------------------


class SurveyColumns(Table):
    """What a record may tell beyond who came from where; a study names the columns it has."""

    adults: Series[float] | None = column("adults in the party", unit="people", ge=0, nullable=True)
    children: Series[float] | None = column(
        "children in the party", unit="people", ge=0, nullable=True
    )
    vehicle: Series[str] | None = column("class of vehicle", nullable=True)
    mode: Series[str] | None = column("means of travel", isin=MODES, nullable=True)
    nights: Series[float] | None = column(
        "nights away from home", unit="nights", ge=0, le=366, nullable=True
    )
    lodging: Series[str] | None = column("kind of lodging", nullable=True)
    hours_on_site: Series[float] | None = column(
        "hours spent on the site", unit="h", ge=0, le=8784, nullable=True
    )
    trip_hours: Series[float] | None = column(
        "hours of the whole stay away, travel not counted", unit="h", gt=0, le=8784, nullable=True
    )
    stops: Series[float] | None = column(
        "other places visited on the same trip", ge=0, le=1000, nullable=True
    )
    purpose_share: Series[float] | None = column(
        "share of the trip's purpose that was this site", unit="share", ge=0, le=1, nullable=True
    )
    activity: Series[str] | None = column("main activity", nullable=True)
    date: Series[str] | None = column("day of the visit (ISO 8601)", nullable=True)
    season: Series[str] | None = column("season of the visit", nullable=True)
    household_income: Series[float] | None = column(
        "respondent's household income per year", unit="currency/year", gt=0, nullable=True
    )
    surveyed: Series[bool] | None = column("whether the register's record was surveyed")
    trips_se: Series[float] | None = column(
        "standard error of the count", unit="trips", ge=0, nullable=True
    )
    reported_distance_km: Series[float] | None = column(
        "reported distance, one way", unit="km", ge=0, le=20_100, nullable=True
    )
    reported_time_min: Series[float] | None = column(
        "reported travel time, one way", unit="min", ge=0, nullable=True
    )
    reported_cost: Series[float] | None = column(
        "reported spending on travel, per party and trip", unit="currency", ge=0, nullable=True
    )


class VisitRecords(SurveyColumns):
    """Visit records as they came: one row per permit, interview or register line."""

    record_id: Series[str] = column("identifier of the record, unique")
    postal_code_raw: Series[str] = column("postal code as written in the record", nullable=True)
    site_id: Series[str] = column("site that was visited")
    trips: Series[float] = column("trips that the record stands for", unit="trips", ge=0)
    party_size: Series[float] = column(
        "people who travelled together", unit="people", gt=0, nullable=True
    )
    weight: Series[float] = column("how many records like it this record stands for", ge=0)
    lon: Series[float] | None = column(
        "longitude of the home", unit="degree", ge=-180, le=180, nullable=True
    )
    lat: Series[float] | None = column(
        "latitude of the home", unit="degree", ge=-90, le=90, nullable=True
    )
    country: Series[str] | None = column("country of the home (ISO 3166)", nullable=True)

    class Config:
        unique = ["record_id"]


class Zones(Table):
    """Zones of origin: one row per zone; a geometry in WGS 84 where the study has polygons."""

    zone_id: Series[str] = column("zone's identifier, exactly as it came in")
    postal_code: Series[str] = column("postal code that belongs to the zone")
    zone_name: Series[str] = column("name to show", nullable=True)
    population: Series[float] = column("people who live in the zone", unit="people", ge=0)
    household_income: Series[float] = column(
        "household income per year", unit="currency/year", gt=0, nullable=True
    )
    lon: Series[float] = column("longitude of the zone's centroid", unit="degree", ge=-180, le=180)
    lat: Series[float] = column("latitude of the zone's centroid", unit="degree", ge=-90, le=90)
    centroid_source: Series[str] = column("where the centroid comes from", isin=CENTROID_SOURCES)
    census_cover_share: Series[float] | None = column(
        "share of the zone's area that the census units cover", unit="share", ge=0, le=1
    )

    class Config:
        unique = ["zone_id"]


class ZonePoints(Table):
    """Several places per zone, each with its share of the zone's people."""

    zone_id: Series[str] = column("zone of origin")
    point_id: Series[str] = column("number of the place within its zone")
    lon: Series[float] = column("longitude", unit="degree", ge=-180, le=180)
    lat: Series[float] = column("latitude", unit="degree", ge=-90, le=90)
    weight: Series[float] = column(
        "share of the zone's people; a zone's add up to 1", unit="share", gt=0, le=1 + 1e-9
    )

    class Config:
        unique = ["zone_id", "point_id"]


class Crosswalk(Table):
    """Codes that are no zone of their own (PO boxes, retired codes) and the zone they stand for."""

    postal_code: Series[str] = column("postal code, unique")
    zone_id: Series[str] = column("zone that the code belongs to")

    class Config:
        unique = ["postal_code"]


class MeasuredTimes(Table):
    """Times from door to site that were measured or reported."""

    zone_id: Series[str] = column("zone of origin")
    site_id: Series[str] = column("site or substitute")
    measured_min: Series[float] = column("time one way", unit="min", gt=0)

    class Config:
        unique = ["zone_id", "site_id"]


class Sites(Table):
    """Sites to be valued and their substitutes: one row per access point."""

    site_id: Series[str] = column("site's identifier")
    access_id: Series[str] = column("access point's identifier, unique within the site")
    site_name: Series[str] = column("name to show")
    role: Series[str] = column("'site' (to be valued) or 'substitute'", isin=SITE_ROLES)
    lon: Series[float] = column("longitude of the access point", unit="degree", ge=-180, le=180)
    lat: Series[float] = column("latitude of the access point", unit="degree", ge=-90, le=90)
    fee: Series[float] = column("entrance fee per person and visit", unit="currency", ge=0)
    place_id: Series[str] | None = column(
        "the site as the study's file has it, where day and overnight trips are apart"
    )
    stay: Series[str] | None = column(
        "trips that the site stands for", isin=("day", "overnight"), nullable=True
    )

    class Config:
        unique = ["site_id", "access_id"]


# --- geocode ---------------------------------------------------------------------------------


class Origins(SurveyColumns):
    """Every visit record with its zone of origin, or the reason why it has none."""

    record_id: Series[str] = column("identifier of the record, unique")
    postal_code_raw: Series[str] = column("postal code as written in the record", nullable=True)
    postal_code: Series[str] = column("postal code after normalisation", nullable=True)
    zone_id: Series[str] = column("zone of origin", nullable=True)
    site_id: Series[str] = column("site that was visited")
    trips: Series[float] = column("trips that the record stands for", unit="trips", ge=0)
    party_size: Series[float] = column(
        "people who travelled together", unit="people", gt=0, nullable=True
    )
    weight: Series[float] = column("how many records like it this record stands for", ge=0)
    origin_status: Series[str] = column("how the zone was found, or why not", isin=ORIGIN_STATUSES)
    origin_note: Series[str] = column("what was changed, or the nearest valid codes", nullable=True)
    counted_trips: Series[float] = column(
        "trips that the record adds to the sample: trips times weight; of an interview on the "
        "site its weight, however often the respondent comes",
        unit="trips",
        ge=0,
    )
    weight_before_raking: Series[float] | None = column("weight as it came", ge=0)

    class Config:
        unique = ["record_id"]


class OriginSummary(Table):
    """Records, trips and person-visits by site and status; they add up to what went in."""

    site_id: Series[str] = column("site that was visited")
    origin_status: Series[str] = column("how the zone was found, or why not", isin=ORIGIN_STATUSES)
    records: Series[int] = column("visit records", unit="records", ge=0)
    trips: Series[float] = column("trips in those records", unit="trips", ge=0)
    person_visits: Series[float] = column(
        "counted trips times party size; unknown party sizes at the site's mean",
        unit="visits",
        ge=0,
    )
    party_size_filled: Series[int] | None = column(
        "records whose party size is the site's mean, being unknown", unit="records", ge=0
    )
    share: Series[float] = column("share of the site's records", ge=0, le=1)

    class Config:
        unique = ["site_id", "origin_status"]


# --- roads -----------------------------------------------------------------------------------


class RoadQuality(Table):
    """What the road extract holds: one row per measure (and road class where it applies)."""

    measure: Series[str] = column("what is counted or measured")
    road_class: Series[str] = column("road class, or 'all'")
    value: Series[float] = column("the figure")
    unit: Series[str] = column("unit of the figure")
    note: Series[str] = column("what it means for the result", nullable=True)

    class Config:
        unique = ["measure", "road_class"]


class RoadLines(Table):
    """Roads as lines (WGS 84), for maps: those of the graph, and those that were left out."""

    road_class: Series[str] = column("road class (OpenStreetMap `highway` value, or 'ferry')")
    distance_km: Series[float] = column("length along the line", unit="km", ge=0)
    left_out: Series[str] | None = column(
        "why no route runs on it; missing: routes can", nullable=True
    )


# --- route -----------------------------------------------------------------------------------


class Routes(Table):
    """One row per zone and site: fastest route there and back, shortest distance there."""

    zone_id: Series[str] = column("zone of origin")
    site_id: Series[str] = column("site or substitute")
    access_id: Series[str] = column("access point that the fastest route ends at", nullable=True)
    distance_km: Series[float] = column(
        "distance along the fastest route, from door to site", unit="km", ge=0, nullable=True
    )
    drive_time_min: Series[float] = column(
        "time of the fastest route, from door to site", unit="min", ge=0, nullable=True
    )
    shortest_distance_km: Series[float] = column(
        "distance of the shortest route, from door to site", unit="km", ge=0, nullable=True
    )
    return_distance_km: Series[float] = column(
        "distance along the fastest route home", unit="km", ge=0, nullable=True
    )
    return_drive_time_min: Series[float] = column(
        "time of the fastest route home", unit="min", ge=0, nullable=True
    )
    ferry_km: Series[float] = column("by ferry, of distance_km", unit="km", ge=0, nullable=True)
    ferry_min: Series[float] = column(
        "on ferries, of drive_time_min", unit="min", ge=0, nullable=True
    )
    toll_km: Series[float] = column("on toll roads, of distance_km", unit="km", ge=0, nullable=True)
    unpaved_km: Series[float] = column(
        "on unpaved roads, of distance_km", unit="km", ge=0, nullable=True
    )
    delay_min: Series[float] | None = column(
        "delays at signals, signs, crossings, booths, fords and turns, of drive_time_min",
        unit="min",
        ge=0,
        nullable=True,
    )
    ferry_count: Series[float] | None = column(
        "ferries boarded on the way there", ge=0, nullable=True
    )
    toll_booths: Series[float] | None = column(
        "toll booths passed on the way there", ge=0, nullable=True
    )
    listed_ferries: Series[float] | None = column(
        "of ferry_count, with a fare in [routes.charges]", ge=0, nullable=True
    )
    listed_booths: Series[float] | None = column(
        "of toll_booths, with a toll in [routes.charges]", ge=0, nullable=True
    )
    listed_toll_km: Series[float] | None = column(
        "of toll_km, on ways with a toll in [routes.charges]", unit="km", ge=0, nullable=True
    )
    listed_fare_per_vehicle: Series[float] | None = column(
        "fares of the listed ferries for the vehicle, one way",
        unit="currency",
        ge=0,
        nullable=True,
    )
    listed_fare_per_person: Series[float] | None = column(
        "fares of the listed ferries for each person, one way",
        unit="currency",
        ge=0,
        nullable=True,
    )
    listed_toll: Series[float] | None = column(
        "tolls of the listed ways and booths for the vehicle, one way",
        unit="currency",
        ge=0,
        nullable=True,
    )
    zone_snap_m: Series[float] = column(
        "gap between the zone's centroid and its road", unit="m", ge=0, nullable=True
    )
    site_snap_m: Series[float] = column(
        "gap between the access point and its road", unit="m", ge=0, nullable=True
    )
    routed_share: Series[float] | None = column(
        "share of the zone's people at points with a route; the means are over them",
        unit="share",
        ge=0,
        le=1 + 1e-9,
        nullable=True,
    )
    route_status: Series[str] = column(
        "whether a route was found; within_zone: the site lies in the zone", isin=ROUTE_STATUSES
    )

    class Config:
        unique = ["zone_id", "site_id"]


class RouteLines(Table):
    """Fastest route of each zone and site as a line (WGS 84)."""

    zone_id: Series[str] = column("zone of origin")
    site_id: Series[str] = column("site or substitute")

    class Config:
        unique = ["zone_id", "site_id"]


class RouteQuality(Table):
    """How well the routes stand on the roads: gaps, delay, measured times."""

    measure: Series[str] = column("what is counted or measured")
    value: Series[float] = column("the figure", nullable=True)
    unit: Series[str] = column("unit of the figure")
    note: Series[str] = column("what it means for the result", nullable=True)

    class Config:
        unique = ["measure"]


# --- cost ------------------------------------------------------------------------------------


class Costs(Table):
    """Price of a visit, itemised: one row per zone and site.

    A visit and its price are a person's; with [costs] shared_by 'adults' an adult's, with
    'vehicle' a vehicle's with all in it. Amounts keep their full precision; the items of a row
    add up to `travel_cost`.
    """

    zone_id: Series[str] = column("zone of origin")
    site_id: Series[str] = column("site or substitute")
    round_trip_km: Series[float] = column("there and back by road", unit="km", ge=0, nullable=True)
    round_trip_hours: Series[float] = column(
        "there and back by road", unit="h", ge=0, nullable=True
    )
    driven_km: Series[float] = column(
        "of round_trip_km, on the vehicle's own wheels (not by ferry)",
        unit="km",
        ge=0,
        nullable=True,
    )
    party_size: Series[float] = column("people who travel together", unit="people", gt=0)
    adults: Series[float] = column("adults among them", unit="people", gt=0)
    bearers: Series[float] = column("who share what the party spends", unit="visitors", gt=0)
    vehicle_cost_per_km: Series[float] = column(
        "what a km of driving costs", unit="currency/km", ge=0
    )
    hourly_wage: Series[float] = column("wage of an adult", unit="currency/h", ge=0, nullable=True)
    vehicle_cost: Series[float] = column(
        "vehicle, per person and trip", unit="currency", ge=0, nullable=True
    )
    parking_cost: Series[float] = column(
        "parking, per person and trip", unit="currency", ge=0, nullable=True
    )
    toll_cost: Series[float] = column(
        "tolls, per person and trip", unit="currency", ge=0, nullable=True
    )
    ferry_cost: Series[float] = column(
        "ferry fares, per person and trip", unit="currency", ge=0, nullable=True
    )
    fare_cost: Series[float] = column(
        "fares of other modes (train, coach, aeroplane), expected, per person and trip",
        unit="currency",
        ge=0,
        nullable=True,
    )
    time_cost: Series[float] = column(
        "travel time, per person and trip", unit="currency", ge=0, nullable=True
    )
    fee_cost: Series[float] = column(
        "entrance, per person and trip", unit="currency", ge=0, nullable=True
    )
    lodging_cost: Series[float] = column(
        "lodging, per person and trip", unit="currency", ge=0, nullable=True
    )
    other_cost: Series[float] = column(
        "other spending, per person and trip", unit="currency", ge=0, nullable=True
    )
    travel_cost: Series[float] = column(
        "price of a visit: the sum of the items, per person and trip",
        unit="currency",
        ge=0,
        nullable=True,
    )
    vehicle_cost_per_party: Series[float] = column(
        "vehicle, per party and trip", unit="currency", ge=0, nullable=True
    )
    parking_cost_per_party: Series[float] = column(
        "parking, per party and trip", unit="currency", ge=0, nullable=True
    )
    toll_cost_per_party: Series[float] = column(
        "tolls, per party and trip", unit="currency", ge=0, nullable=True
    )
    ferry_cost_per_party: Series[float] = column(
        "ferry fares, per party and trip", unit="currency", ge=0, nullable=True
    )
    travel_hours: Series[float] = column(
        "there and back by the mix of modes, with the time on foot and on the site that is charged",
        unit="h",
        ge=0,
        nullable=True,
    )
    road_share: Series[float] = column(
        "share of the visitors who come by road", unit="share", ge=0, le=1, nullable=True
    )
    time_value_per_hour: Series[float] = column(
        "what an hour on the road costs an adult", unit="currency/h", ge=0, nullable=True
    )
    cost_status: Series[str] = column("'priced', or the route_status that left no price")

    class Config:
        unique = ["zone_id", "site_id"]


class ReportedCheck(Table):
    """Routed and priced figures against those that the records report: by measure and distance."""

    measure: Series[str] = column(
        "distance and time (one way), spending (of the party on vehicle, parking, tolls, ferries)"
    )
    band: Series[str] = column("routed distance, one way, or 'all'")
    records: Series[int] = column("records that report it", unit="records", ge=0)
    reported_mean: Series[float] = column("mean of what is reported", nullable=True)
    routed_mean: Series[float] = column("mean of what is routed or priced", nullable=True)
    bias: Series[float] = column("mean of routed less reported", nullable=True)
    mean_absolute_error: Series[float] = column(
        "mean distance between the two", ge=0, nullable=True
    )
    median_ratio: Series[float] = column(
        "median of reported over routed: a calibration factor", ge=0, nullable=True
    )
    unit: Series[str] = column("unit of the means, the bias and the error")

    class Config:
        unique = ["measure", "band"]


# --- join ------------------------------------------------------------------------------------


class ZoneTable(Table):
    """The finished table: one row per zone and site; zones without a visit are rows, with zero."""

    zone_id: Series[str] = column("zone of origin")
    site_id: Series[str] = column("site that is valued")
    population: Series[float] = column("people who live in the zone", unit="people", ge=0)
    household_income: Series[float] | None = column(
        "household income per year", unit="currency/year", gt=0, nullable=True
    )
    sampled_records: Series[float] | None = column(
        "visit records from the zone", unit="records", ge=0, nullable=True
    )
    sampled_visits: Series[float] | None = column(
        "person-visits in the records, before expansion", unit="visits", ge=0, nullable=True
    )
    expansion_factor: Series[float] | None = column(
        "visits per year that a sampled visit of the site stands for", ge=0, nullable=True
    )
    visits: Series[float] = column(
        "visits of persons per year (of adults or vehicles where [costs] shared_by says so), "
        "expanded to the known total",
        unit="visits/year",
        ge=0,
    )
    visits_se: Series[float] | None = column(
        "standard error of the expanded visits", unit="visits/year", ge=0, nullable=True
    )
    other_purpose_visits: Series[float] | None = column(
        "person-visits per year that belong to other purposes of the trips, not in visits",
        unit="visits/year",
        ge=0,
        nullable=True,
    )
    multi_purpose: Series[float] | None = column(
        "share of the visits on trips with other purposes; without visits the site's share",
        unit="share",
        ge=0,
        le=1,
        nullable=True,
    )
    visits_per_1000: Series[float] | None = column(
        "person-visits per year per 1,000 people", unit="visits/1000/year", ge=0, nullable=True
    )
    distance_km: Series[float] | None = column(
        "distance along the fastest route, one way", unit="km", ge=0, nullable=True
    )
    drive_time_min: Series[float] | None = column(
        "time of the fastest route, one way", unit="min", ge=0, nullable=True
    )
    travel_cost: Series[float] = column("price of a visit", unit="currency", ge=0, nullable=True)
    substitute_cost: Series[float] | None = column(
        "price of a visit to the substitute ([market] substitute says which), per person",
        unit="currency",
        ge=0,
        nullable=True,
    )
    substitute_id: Series[str] | None = column(
        "that substitute; missing for an index of all", nullable=True
    )
    in_market: Series[bool] | None = column("whether the zone belongs to the market of the site")
    market_note: Series[str] | None = column("why the zone is left out", nullable=True)

    class Config:
        unique = ["zone_id", "site_id"]


class TripTable(Table):
    """The finished table where records are per person or household: one row per record."""

    record_id: Series[str] = column("identifier of the record, unique")
    zone_id: Series[str] | None = column("zone of origin", nullable=True)
    site_id: Series[str] = column("site that is valued")
    trips: Series[float] = column("trips of the person in a year", unit="trips/year", ge=0)
    weight: Series[float] | None = column("how many people the record stands for", ge=0)
    sampling_weight: Series[float] | None = column(
        "weight in the likelihood: as drawn, whatever the respondent's number of trips", ge=0
    )
    visits: Series[float] | None = column(
        "person-visits per year that the record stands for: trips times weight",
        unit="visits/year",
        ge=0,
    )
    party_size: Series[float] | None = column(
        "people who travelled together", unit="people", gt=0, nullable=True
    )
    adults: Series[float] | None = column("adults among them", unit="people", ge=0, nullable=True)
    bearers: Series[float] | None = column("who share what the party spends", unit="visitors", gt=0)
    vehicle_cost_per_km: Series[float] | None = column(
        "what a km of driving costs in the record's vehicle", unit="currency/km", ge=0
    )
    hourly_wage: Series[float] | None = column(
        "wage of an adult of the party", unit="currency/h", ge=0, nullable=True
    )
    purpose_share_used: Series[float] | None = column(
        "share of the trip, and of its cost, that belongs to the site", unit="share", ge=0, le=1
    )
    multi_purpose: Series[float] | None = column(
        "1 where the trip had other purposes, otherwise 0", ge=0, le=1
    )
    travel_cost: Series[float] = column(
        "price of a trip as its record tells of it: the sum of its items", unit="currency", ge=0
    )
    substitute_cost: Series[float] | None = column(
        "price of a trip to the cheapest substitute", unit="currency", ge=0, nullable=True
    )
    household_income: Series[float] | None = column(
        "household income per year", unit="currency/year", nullable=True
    )

    class Config:
        unique = ["record_id"]


# --- demand ----------------------------------------------------------------------------------


class Estimates(Table):
    """Estimated coefficients of every model that was tried: one row per term."""

    model: Series[str] = column("model's name")
    site_id: Series[str] = column("site that is valued")
    term: Series[str] = column(
        "'const', 'travel_cost', a covariate, 'site:' and a site (its effect), 'never:' or 'any:' "
        "and a term (part about zeros), 'alpha' or 'delta' (dispersion), or 'smearing' "
        "(log_linear: factor from the median to the mean)"
    )
    estimate: Series[float] = column(
        "coefficient in the units of the finished table", nullable=True
    )
    std_error: Series[float] = column("its standard error", ge=0, nullable=True)
    ci_low: Series[float] = column("lower end of the confidence interval", nullable=True)
    ci_high: Series[float] = column("upper end of the confidence interval", nullable=True)
    p_value: Series[float] = column("two-sided p-value against zero", ge=0, le=1, nullable=True)
    covariance: Series[str] = column(
        "JSON list: covariances with every term of the model, in the order of the rows; "
        "null where there is none"
    )

    class Config:
        unique = ["model", "site_id", "term"]


class Fit(Table):
    """How well each model fits, and which one was chosen and why: one row per model and site."""

    model: Series[str] = column("model's name")
    site_id: Series[str] = column("site that is valued")
    nobs: Series[int] = column("rows that the model was fitted to", ge=0)
    log_likelihood: Series[float] = column("log-likelihood", nullable=True)
    aic: Series[float] = column(
        "Akaike's information criterion; comparable among count models of the same rows only",
        nullable=True,
    )
    bic: Series[float] = column("Bayesian information criterion; as aic", nullable=True)
    dispersion: Series[float] = column(
        "alpha or delta of negative binomials; least squares: variance of the residuals; other "
        "models: Pearson chi-square over degrees of freedom",
        nullable=True,
    )
    overdispersion_p: Series[float] = column(
        "p-value of the overdispersion test", ge=0, le=1, nullable=True
    )
    r_squared: Series[float] = column(
        "squared correlation of the observed and predicted rate per person",
        ge=0,
        le=1,
        nullable=True,
    )
    converged: Series[bool] = column("whether the maximum was reached and verified")
    chosen: Series[bool] = column("whether the surplus comes from this model")
    errors: Series[str] = column("kind of standard errors")
    degrees_of_freedom: Series[float] | None = column(
        "of Student's t for the intervals; missing: normal", gt=0, nullable=True
    )
    note: Series[str] = column("why it was chosen, or what is wrong with it", nullable=True)

    class Config:
        unique = ["model", "site_id"]


class Diagnostics(Table):
    """What speaks for and against each model: one row per figure."""

    site_id: Series[str] = column("site that is valued")
    model: Series[str] = column("model that the figure is about")
    diagnostic: Series[str] = column(
        "overdispersion, likelihood_ratio, vuong, vuong_aic, vuong_bic, cross_validated_deviance, "
        "cross_validated_log_score, residual_mean, residual_variance, residual_normality, "
        "observed_count, influence, moran_i, condition_number, price_variance_inflation, "
        "rows_per_coefficient, cost_reaches"
    )
    subject: Series[str] = column(
        "what it is held against or about: another model, a class of counts, a zone",
        nullable=True,
    )
    value: Series[float] = column("the figure", nullable=True)
    expected: Series[float] = column("what the model, or no effect, leads to", nullable=True)
    p_value: Series[float] = column("p-value, where it is a test", ge=0, le=1, nullable=True)
    note: Series[str] = column("what it says, in a sentence", nullable=True)

    class Config:
        unique = ["site_id", "model", "diagnostic", "subject"]


class Residuals(Table):
    """What the chosen model leaves of each zone: one row per zone and site of the regression."""

    zone_id: Series[str] = column("zone of origin")
    site_id: Series[str] = column("site that is valued")
    model: Series[str] = column("the chosen model")
    residual: Series[float] = column(
        "more (positive) or fewer visits than expected, in standard deviations: about standard "
        "normal where the model is right"
    )
    residual_kind: Series[str] = column(
        "randomised quantile (counts with a likelihood) or standardised (least squares, "
        "quasi-Poisson)"
    )

    class Config:
        unique = ["zone_id", "site_id"]


# --- surplus ---------------------------------------------------------------------------------


class Surplus(Table):
    """Values in money with their intervals: one row per model, site, measure and method."""

    model: Series[str] = column("model's name")
    site_id: Series[str] = column("site that is valued")
    measure: Series[str] = column(
        "surplus_per_trip, surplus_per_trip_observed (linear: observed trips), "
        "surplus_per_trip_count_part (-1/b of the count part), annual_surplus (observed visits), "
        "annual_surplus_predicted, annual_surplus_trapezoid, access_value (closure), "
        "surplus_per_person_per_year, compensating_variation_per_trip, "
        "equivalent_variation_per_trip, annual_compensating_variation, "
        "annual_equivalent_variation, income_elasticity, price_elasticity, "
        "annual_visits_observed, annual_visits_predicted, choke_cost (linear)"
    )
    value: Series[float] = column("the figure", nullable=True)
    std_error: Series[float] = column("its standard error", ge=0, nullable=True)
    ci_low: Series[float] = column("lower end of the confidence interval", nullable=True)
    ci_high: Series[float] = column("upper end of the confidence interval", nullable=True)
    method: Series[str] = column(
        "how the interval was made: delta, fieller, simulated, bootstrap; observed: a count"
    )
    unit: Series[str] = column("unit of the figure")
    chosen: Series[bool] = column("whether it comes from the model that was chosen")
    note: Series[str] = column("what to know before using it", nullable=True)

    class Config:
        unique = ["model", "site_id", "measure", "method"]


class FeeSchedule(Table):
    """What an added entrance fee would do: one row per site and fee, from the chosen model."""

    site_id: Series[str] = column("site that is valued")
    fee: Series[float] = column("fee added per person and visit", unit="currency", ge=0)
    visits: Series[float] = column("person-visits per year at that fee", unit="visits/year", ge=0)
    visits_ci_low: Series[float] = column("lower end of its interval", ge=0, nullable=True)
    visits_ci_high: Series[float] = column("upper end of its interval", ge=0, nullable=True)
    revenue: Series[float] = column("fee times visits", unit="currency/year", ge=0)
    revenue_ci_low: Series[float] = column("lower end of its interval", ge=0, nullable=True)
    revenue_ci_high: Series[float] = column("upper end of its interval", ge=0, nullable=True)
    consumer_surplus: Series[float] = column(
        "surplus left to visitors at that fee", unit="currency/year", ge=0, nullable=True
    )
    consumer_surplus_ci_low: Series[float] = column("lower end of its interval", nullable=True)
    consumer_surplus_ci_high: Series[float] = column("upper end of its interval", nullable=True)
    surplus_lost: Series[float] = column(
        "surplus that visitors lose against no added fee, of which revenue is a part",
        unit="currency/year",
        nullable=True,
    )
    surplus_lost_ci_low: Series[float] = column("lower end of its interval", nullable=True)
    surplus_lost_ci_high: Series[float] = column("upper end of its interval", nullable=True)
    note: Series[str] = column("why there is no schedule, where there is none", nullable=True)

    class Config:
        unique = ["site_id", "fee"]


class ZoneSurplus(Table):
    """Surplus of each zone's visitors from the chosen model: one row per zone and site."""

    zone_id: Series[str] = column("zone of origin")
    site_id: Series[str] = column("site that is valued")
    predicted_visits: Series[float] = column(
        "visits per year by the chosen model", unit="visits/year", ge=0, nullable=True
    )
    annual_surplus: Series[float] = column(
        "surplus of the zone's predicted visits per year, scaled so that the zones of a site add "
        "up to its annual_surplus",
        unit="currency/year",
        nullable=True,
    )
    surplus_per_person: Series[float] = column(
        "annual_surplus per resident of the zone", unit="currency/person/year", nullable=True
    )

    class Config:
        unique = ["zone_id", "site_id"]


# --- sensitivity -----------------------------------------------------------------------------


class Sensitivity(Table):
    """What other assumptions would do: one row per alternative and site, the study itself first."""

    site_id: Series[str] = column("site that is valued")
    variant: Series[str] = column("the alternative, or 'the study'")
    changed: Series[str] = column(
        "keys of the study file that it changes; missing: the study itself", nullable=True
    )
    from_value: Series[str] = column("what they are in the study", nullable=True)
    to_value: Series[str] = column("what they are in the alternative", nullable=True)
    model: Series[str] = column("model that the figures come from", nullable=True)
    surplus_per_trip: Series[float] = column(
        "surplus per person-visit", unit="currency/visit", nullable=True
    )
    ci_low: Series[float] = column("lower end of its interval", nullable=True)
    ci_high: Series[float] = column("upper end of its interval", nullable=True)
    annual_surplus: Series[float] = column(
        "surplus of the visits in the market per year", unit="currency/year", nullable=True
    )
    annual_ci_low: Series[float] = column("lower end of its interval", nullable=True)
    annual_ci_high: Series[float] = column("upper end of its interval", nullable=True)
    change_percent: Series[float] = column(
        "change of annual_surplus against the study's", unit="%", nullable=True
    )
    note: Series[str] = column("why there is no value, where there is none", nullable=True)

    class Config:
        unique = ["site_id", "variant"]


TABLES: tuple[type[Table], ...] = (
    VisitRecords,
    Zones,
    ZonePoints,
    Crosswalk,
    MeasuredTimes,
    Sites,
    Origins,
    OriginSummary,
    RoadQuality,
    RoadLines,
    Routes,
    RouteLines,
    RouteQuality,
    Costs,
    ReportedCheck,
    ZoneTable,
    TripTable,
    Estimates,
    Fit,
    Diagnostics,
    Residuals,
    Surplus,
    FeeSchedule,
    ZoneSurplus,
    Sensitivity,
)


def data_dictionary(tables: tuple[type[Table], ...] = TABLES) -> pd.DataFrame:
    """Data dictionary of the given tables, one row per column."""
    return pd.concat([table.dictionary() for table in tables], ignore_index=True)
