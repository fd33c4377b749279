"""The sections [zones] and [visits] of a study file: who lives where, and who came."""

from __future__ import annotations

from typing import Annotated, ClassVar, Literal, Self

from pydantic import AfterValidator, Field, model_validator

from pipeline.countries import country_names
from pipeline.sections import (
    CrsName,
    FileSection,
    InputPath,
    NotNegative,
    Positive,
    Regex,
    Section,
    Share,
    setting,
)

MonthDay = Annotated[str, Field(pattern=r"^(0[1-9]|1[0-2])-(0[1-9]|[12][0-9]|3[01])$")]


def _country(value: str) -> str:
    if value not in country_names():
        raise ValueError("no ISO 3166 country code of two capitals")
    return value


CountryCode = Annotated[str, AfterValidator(_country)]


class ZoneColumns(Section):
    """The study's own column names in the zones file."""

    zone_id: str = setting("Zone's identifier.", "zone_id")
    postal_code: str = setting("Postal code of the zone; absent: the identifier.", "postal_code")
    zone_name: str = setting("Name to show; may be absent.", "zone_name")
    population: str = setting("People who live there; absent with [zones.census].", "population")
    household_income: str = setting(
        "Household income per year; absent: that of [zones.census], or [costs] "
        "fallback_household_income.",
        "household_income",
    )
    lon: str = setting("Longitude of the centroid, WGS 84; may be absent with polygons.", "lon")
    lat: str = setting("Latitude of the centroid, WGS 84; may be absent with polygons.", "lat")


class CensusSettings(FileSection):
    """Units of a census that are not the zones: their people are carried over to the zones."""

    section_name: ClassVar[str] = "zones.census"
    file: InputPath | None = setting("GIS layer of the census units' polygons.", None)
    unit_id: str = setting("Column of the unit's identifier.", "unit_id")
    population: str = setting("Column of the people who live there.", "population")
    household_income: str | None = setting(
        "Column of the household income per year; averaged over the people carried over.", None
    )
    counts: tuple[str, ...] = setting(
        "Further columns of counts, carried over as the people are; name them in covariates.", ()
    )
    averages: tuple[str, ...] = setting(
        "Further columns of averages per person; name them in covariates.", ()
    )
    method: Literal["area", "points"] = setting(
        "How a unit's people lie in it: evenly over its 'area', or as the people of the finer "
        "'points' of [zones.points] do.",
        "area",
        usual="points where blocks, a grid or addresses are at hand",
    )
    max_outside_share: Share = setting(
        "The run stops when a larger share of the census' people lives outside every zone.",
        0.01,
        unit="share",
        usual="0 to 0.02; more where the census covers more than the zones",
    )


class PointsSettings(FileSection):
    """Finer units than the zones (blocks, a grid, addresses), as weighted points."""

    section_name: ClassVar[str] = "zones.points"
    file: InputPath | None = setting(
        "CSV, Excel, Parquet or GIS layer of points or small polygons; then the zones' centroids "
        "are weighted by their people.",
        None,
    )
    people: str = setting("Column of the people at the point; absent: one each.", "population")
    lon: str = setting("Longitude, WGS 84; may be absent in a GIS layer.", "lon")
    lat: str = setting("Latitude, WGS 84; may be absent in a GIS layer.", "lat")
    per_zone: int = setting(
        "Places per zone, each with its share of the people, for the table zone_points.",
        1,
        usual="1; 3 to 10 where zones are large",
        ge=1,
        le=100,
    )


class ZonesSettings(FileSection):
    """Zones of origin with their people and income."""

    section_name: ClassVar[str] = "zones"
    file: InputPath | None = setting(
        "CSV, Excel or Parquet with centroids, or a GIS layer with polygons.", None
    )
    columns: ZoneColumns = setting("Column names in that file.", ZoneColumns())
    census: CensusSettings = setting("Census units in place of own figures.", CensusSettings())
    points: PointsSettings = setting("Finer units for centroids and census.", PointsSettings())
    covariates: tuple[str, ...] = setting(
        "Further columns of the zones file (numbers) to carry into the finished table.", ()
    )
    country: CountryCode | None = setting(
        "Country of the zones (ISO 3166, two letters): its postal code format says what is well "
        "formed, a ZIP+4 counts as its ZIP, a leading country prefix is dropped.",
        None,
    )
    postal_code_pattern: Regex | None = setting(
        "Regular expression that a normalised code (capitals and digits only) matches fully, for "
        "made-up or local codes; where it has a group, the first group is the zone's code and the "
        "rest says where in the zone. Default: the country's format; without a country a code is "
        "well formed when some code of the zones file has the same form.",
        None,
    )


class VisitColumns(Section):
    """The study's own column names in the visit records."""

    record_id: str = setting("Record's identifier; absent: its row in the file.", "record_id")
    postal_code: str = setting("Postal code of the visitor's home.", "postal_code")
    site_id: str = setting("Site visited; may be absent with one site.", "site_id")
    trips: str = setting("Trips that the record stands for; absent: 1.", "trips")
    party_size: str = setting(
        "People who came together; absent: adults and children, else unknown.", "party_size"
    )
    weight: str = setting("Sampling weight; absent: 1.", "weight")
    lon: str | None = setting("Longitude or easting of the home, in [visits] crs.", None)
    lat: str | None = setting("Latitude or northing of the home, in [visits] crs.", None)
    country: str | None = setting("Country of the home: two letters or English name.", None)
    adults: str | None = setting("Adults in the party.", None)
    children: str | None = setting("Children in the party.", None)
    vehicle: str | None = setting("Class of vehicle, as [costs] knows it.", None)
    mode: str | None = setting(
        "Means of travel: car, motorcycle, coach, bus, train, bicycle, foot, aeroplane.", None
    )
    nights: str | None = setting("Nights away from home.", None)
    lodging: str | None = setting("Kind of lodging.", None)
    hours_on_site: str | None = setting("Hours spent on the site.", None)
    trip_hours: str | None = setting(
        "Hours of the whole stay away, travel not counted (other places included).", None
    )
    stops: str | None = setting("Other places visited on the same trip.", None)
    purpose_share: str | None = setting(
        "Share of the trip's purpose that was this site, 0 to 1.", None
    )
    activity: str | None = setting("Main activity.", None)
    date: str | None = setting("Day of the visit, in [visits] date_format.", None)
    season: str | None = setting("Season; default: from the date by [visits] seasons.", None)
    household_income: str | None = setting("Respondent's household income per year.", None)
    surveyed: str | None = setting(
        "Whether the register's record was surveyed (kind sample_of_register).", None
    )
    trips_se: str | None = setting("Standard error of the count (kind zone_counts).", None)
    reported_distance_km: str | None = setting("Distance that was reported, one way, km.", None)
    reported_time_min: str | None = setting("Travel time that was reported, one way, min.", None)
    reported_cost: str | None = setting("Spending on travel that was reported, per party.", None)


class CrosswalkColumns(Section):
    """The study's own column names in the crosswalk."""

    postal_code: str = setting("Code that is no zone of its own.", "postal_code")
    zone_id: str = setting("Zone that the code belongs to.", "zone_id")


class VisitsSettings(FileSection):
    """Visit records and what turns them into a year of visits."""

    section_name: ClassVar[str] = "visits"
    file: InputPath | None = setting("CSV, Excel or Parquet; one row per record.", None)
    columns: VisitColumns = setting("Column names in that file.", VisitColumns())
    kind: Literal["census", "on_site", "household", "sample_of_register", "zone_counts"] = setting(
        "What a record is: 'census': a trip in a register or of a permit, all of them or an even "
        "sample; 'on_site': an interview on the site, which meets frequent visitors more often "
        "(trips: the respondent's in a year); 'household': a survey of residents with those who "
        "never came (trips: in a year, 0 included); 'sample_of_register': a register of which "
        "some records were surveyed; 'zone_counts': ready counts of a zone (trips: the count).",
        "census",
        usual="census for registers, permits and tickets",
    )
    records_are: Literal["by_kind", "parties", "persons"] = setting(
        "Whether a record's trip counts as many person-visits as its party has people, or one. "
        "'by_kind': parties in registers and on the site, persons in households and counts.",
        "by_kind",
        usual="by_kind",
    )
    crs: CrsName = setting("Coordinate reference system of the points of homes.", "EPSG:4326")
    date_format: str = setting("How a day is written (as in strftime).", "%Y-%m-%d")
    country_words: dict[str, str] = setting(
        "Words for countries in the records beside two-letter codes and English names.",
        {"UK": "GB", "USA": "US"},
    )
    covariates: tuple[str, ...] = setting(
        "Further columns of the records (numbers) to carry into the finished table of persons.", ()
    )
    crosswalk: InputPath | None = setting(
        "CSV, Excel or Parquet of codes that are no zone of their own (PO boxes, retired codes).",
        None,
    )
    crosswalk_columns: CrosswalkColumns = setting(
        "Column names in the crosswalk.", CrosswalkColumns()
    )
    foreign_countries: tuple[CountryCode, ...] = setting(
        "Countries whose codes mark a record as foreign where its country is not stated; only "
        "codes that cannot be the study's own are taken for theirs.",
        (),
    )
    foreign_codes: tuple[Regex, ...] = setting(
        "Regular expressions of codes of other countries; matched in full against the code as "
        "written (in capitals) and as normalised, after the zones' own codes.",
        (),
    )
    max_unmatched_share: Share = setting(
        "The run stops when a larger share of the records that are not foreign has no zone.",
        0.1,
        unit="share",
        usual="0.05 to 0.2",
    )
    annual_visits: dict[str, Positive] = setting(
        "Known person-visits in a year, per site, visitors from abroad included; the records are "
        "expanded to it. A site that is not named is taken as counted in full.",
        {},
        unit="visits/year",
        usual="a counter or ticket total",
    )
    annual_visits_se: dict[str, NotNegative] = setting(
        "Standard error of a known total, per site; absent: known for certain.",
        {},
        unit="visits/year",
        usual="5 to 20 % of the total for a counter; common practice, no source",
    )
    seasons: dict[str, tuple[MonthDay, MonthDay]] = setting(
        "First and last day (MM-DD) of each season; needs the column date, or season.", {}
    )
    season_visits: dict[str, dict[str, Positive]] = setting(
        "Known person-visits in a season, per season and site, in place of annual_visits.",
        {},
        unit="visits/season",
        usual="a counter or ticket total",
    )
    season_visits_se: dict[str, dict[str, NotNegative]] = setting(
        "Standard error of a season's known total.",
        {},
        unit="visits/season",
        usual="5 to 20 % of the total for a counter; common practice, no source",
    )
    margins: dict[str, dict[str, Positive]] = setting(
        "Known totals (or shares) of the classes of a column of the records, to which the "
        "weights are raked: one table per column. Records from abroad are left out.",
        {},
        usual="age, sex, season or activity where the sample is lopsided",
    )
    household_expansion: Literal["weights", "population", "zone_population"] = setting(
        "kind household: 'weights' are people per respondent; or the sample stands for the "
        "population of all zones, or each zone's respondents for the zone's population.",
        "population",
        usual="population; zone_population with 30 respondents or more in every zone",
    )
    register_classes: tuple[str, ...] = setting(
        "kind sample_of_register: surveyed records stand in for the others of their site and of "
        "the same value in these columns.",
        (),
        usual="season, or permit class",
    )
    other_purposes: Literal[
        "keep", "drop", "apportion_by_share", "by_time", "by_stops", "equal", "indicator"
    ] = setting(
        "Trips with other purposes: 'keep' as they are; 'drop'; count the share that belongs to "
        "the site: as stated (apportion_by_share), hours on site of the trip's (by_time), one of "
        "the places visited (by_stops), a half (equal); or keep them with the column "
        "multi_purpose for the regression (indicator). Trips are split in the zone table, the "
        "trip's cost in the table of persons.",
        "keep",
        usual="drop or apportion_by_share where records say so; keep where they do not",
    )

    @model_validator(mode="after")
    def _totals_are_of_something(self) -> Self:
        for site in self.annual_visits_se:
            if site not in self.annual_visits:
                raise ValueError(f"annual_visits_se names {site!r}, of which no total is known")
        for season, totals in self.season_visits.items():
            if self.seasons and season not in self.seasons:
                raise ValueError(f"season_visits names {season!r}, which is not in seasons")
            for site in totals:
                if site in self.annual_visits:
                    raise ValueError(f"{site!r} has a total in annual_visits and in season_visits")
        for season, errors in self.season_visits_se.items():
            for site in errors:
                if site not in self.season_visits.get(season, {}):
                    raise ValueError(f"season_visits_se: no total of {site!r} in {season!r}")
        return self
