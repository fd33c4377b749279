"""Sections [roads] and [routes] of a study file: how ways become roads and points meet them."""

from __future__ import annotations

from datetime import date
from typing import Annotated, Any, ClassVar, Literal

from pydantic import Field

from pipeline.sections import FileSection, InputPath, Section, setting


class RoadColumns(Section):
    """The study's own column names in layers of lines."""

    road_class: str = setting("Road class; needed.", "highway")
    speed: str = setting("Speed limit; absent: the default of the class.", "maxspeed")
    oneway: str = setting("Direction along the line: yes, no or -1; absent: both.", "oneway")
    toll: str = setting("Whether a toll is due; absent: none.", "toll")
    surface: str = setting("Surface, as OSM names it; absent: by the class.", "surface")
    access: str = setting("Access, as OSM names it; absent: open.", "access")
    level: str = setting("Level; lines of two levels do not meet where they cross.", "level")


class RoadsSettings(Section):
    """The road extract, and how its ways become roads that the vehicle can use."""

    section_name: ClassVar[str] = "roads"
    files: tuple[InputPath, ...] = setting(
        "OSM PBF, OSM XML (plain, .gz, .bz2) or GraphML as osmnx saves it, merged by OSM id; or "
        "layers of lines (GeoPackage, Shapefile, FlatGeobuf, GeoJSON, GeoParquet), joined where "
        "they meet.",
        (),
    )
    boundary: InputPath | None = setting(
        "Polygon (GeoPackage, GeoJSON, ...) inside which roads are downloaded from OpenStreetMap, "
        "beside or in place of `files`; once, into a file next to it that later runs read. Draw "
        "it wide enough for every route: what lies outside is not known. Its corners are sent to "
        "the server, and nothing else of the study.",
        None,
    )
    download_server: Annotated[str, Field(pattern=r"^https?://[^\s/]+\S*$")] | None = setting(
        "Address of the Overpass API to ask; not set: the public one that osmnx asks.", None
    )
    columns: RoadColumns = setting("Column names in layers of lines.", RoadColumns())
    layer: str | None = setting("Layer, where a file of lines has several.", None)
    class_values: dict[str, str] = setting(
        "What the layer's own class values mean: a class of config/roads.toml, or 'ferry'.", {}
    )
    oneway_values: dict[str, Literal["yes", "no", "-1"]] = setting(
        "What the layer's own values of direction mean; '-1': against the line.", {}
    )
    speed_unit: Literal["km/h", "mph"] = setting("Unit of speeds in layers of lines.", "km/h")
    node_tolerance_m: float = setting(
        "In layers of lines an end joins the ends and vertices of others that are no further.",
        0.1,
        unit="m",
        usual="0.01 to 5: less than the shortest road, and than a gap that is meant",
        ge=0,
        le=100,
    )
    node_at_crossings: bool = setting(
        "Whether lines of one level are also joined where they only cross.",
        default=False,
        usual="false; true where the lines were not split at junctions",
    )
    profile: Literal["car", "motorcycle", "bicycle", "foot"] = setting(
        "How people travel: decides access, classes, speeds, directions and barriers by "
        "config/roads.toml. On foot also for gathered goods (water, firewood); set the gap speeds "
        "of [routes] to walking, and the cost per km to what a km costs.",
        "car",
        usual="car",
    )
    rules: dict[str, dict[str, Any]] = setting(
        "Figures and lists of config/roads.toml to replace, by its sections: [roads.rules.gravel] "
        "is wrong, [roads.rules.unpaved_kmh] gravel = 45.0 is right.",
        {},
        usual="none: the table as it is",
    )
    toll_ways: tuple[int, ...] = setting(
        "OSM ids of ways that cost a toll though they are not tagged so.", (), usual="none"
    )
    class_speed_kmh: dict[str, Annotated[float, Field(gt=0, le=200)]] = setting(
        "Speed where no limit is tagged, by `highway` value; "
        "the other classes keep the figure of config/roads.toml.",
        {},
        unit="km/h",
        usual="as in config/roads.toml",
    )
    speed_factor: float = setting(
        "Driven speed as a share of the limit or class speed; calibrate on known drive times.",
        1.0,
        unit="share",
        usual="0.7 (towns) to 1.0 (open roads)",
        gt=0.1,
        le=1.5,
    )
    calibration_factor: float = setting(
        "Multiplies all times on roads, delays included; name measured or reported times in "
        "[routes.measured], and the table route_quality says what it should be.",
        1.0,
        unit="share",
        usual="1.0 (as modelled) to 1.5 (towns)",
        gt=0.2,
        le=5,
    )
    delay_s: dict[str, Annotated[float, Field(ge=0, le=600)]] = setting(
        "Delays at traffic_signals, stop, give_way, crossing, toll_booth, ford and on turning into "
        "a smaller_road (sharp_deg: the least angle); the others keep config/roads.toml.",
        {},
        unit="s",
        usual="as in config/roads.toml",
    )
    tracks: bool | Literal["last_stretch"] = setting(
        "Whether ways of class `track` are roads to drive on; 'last_stretch': only in the first "
        "and the last part of a trip, never as a way through. On foot and by bicycle they always "
        "are roads.",
        default=False,
        usual="false; true or 'last_stretch' where sites lie on farm, forest or highland tracks",
    )
    travel_date: date | None = setting(
        "Day of travel (year-month-day, unquoted): decides conditional access, directions, limits "
        "and turns, and seasonal roads. It goes before `season`.",
        None,
        usual="a day in the middle of the visitors' season",
    )
    season: Literal["spring", "summer", "autumn", "winter"] | None = setting(
        "Season of travel, in whole months (north: summer is June to August; the hemisphere "
        "is that of the roads). A condition that holds in part of it is not read.",
        None,
        usual="summer",
    )
    four_wheel_drive: bool = setting(
        "Whether the vehicle takes roads that are tagged for four-wheel drive only.",
        default=False,
        usual="false",
    )
    fords: Literal["open", "closed"] = setting(
        "Whether fords are driven through. Fords can kill: ask the road authority.",
        "open",
        usual="open on minor roads of the lowlands, closed for cars in mountains",
    )
    unpaved: Literal["open", "closed"] = setting(
        "Whether unpaved roads are driven on (some hire contracts forbid it).",
        "open",
        usual="open",
    )
    unpaved_speed_factor: float = setting(
        "Multiplies the speed on unpaved roads (a caravan, a low car).",
        1.0,
        unit="share",
        usual="0.7 to 1",
        gt=0.1,
        le=1.5,
    )
    rough_speed_factor: float = setting(
        "Multiplies the speed on roads for four-wheel drive only, where they are used.",
        1.0,
        unit="share",
        usual="0.5 to 1",
        gt=0.1,
        le=1.5,
    )
    ferries: Literal["all", "car_tagged", "none"] = setting(
        "Ferries to use: 'all' that are not closed to the vehicle, only those tagged open to it, "
        "none.",
        "all",
        usual="all",
    )
    ferry_speed_kmh: float = setting(
        "Speed of a ferry that has no readable duration.",
        20.0,
        unit="km/h",
        usual="15 to 35 (8 to 19 knots)",
        gt=0,
        le=90,
    )
    ferry_wait_min: float = setting(
        "Waiting and boarding, once for each ferry taken.",
        20.0,
        unit="min",
        usual="5 (shuttle) to 45 (sea crossing)",
        ge=0,
    )
    main_network_km: float = setting(
        "Besides the largest road network, one with at least this much road on which every "
        "place can be reached and left is routed on too (a second island).",
        100.0,
        unit="km",
        usual="50 to 500",
        gt=0,
    )


OsmId = Annotated[str, Field(pattern=r"^-?[0-9]{1,18}$")]
Listed = dict[OsmId, Annotated[float, Field(ge=0)]]


class ChargesSettings(Section):
    """Fares and tolls of their own, by OSM id; the others have those of [costs]."""

    section_name: ClassVar[str] = "routes.charges"
    ferry_per_vehicle: Listed = setting(
        "Fare of the vehicle, one way, by the id of the ferry's way (of several ways the one "
        'that the trip boards by): "4711" = 18.50.',
        {},
        unit="currency",
        usual="the operator's tariff",
    )
    ferry_per_person: Listed = setting(
        "Fare of each person, likewise.", {}, unit="currency", usual="the operator's tariff"
    )
    toll_by_way: Listed = setting(
        "Toll of the vehicle for all of a toll way, by the way's id; for a part of it in "
        "proportion.",
        {},
        unit="currency",
        usual="the operator's tariff",
    )
    toll_by_booth: Listed = setting(
        "Toll of the vehicle at a booth, by the id of its node.",
        {},
        unit="currency",
        usual="the operator's tariff",
    )


Amount = Annotated[float, Field(ge=0)]


class GeneralisedSettings(Section):
    """Prices by which routes are chosen where the generalised cost is made least.

    They choose the route; what it costs is worked out by [costs] all the same. Figures that are
    not set are taken from [costs], where it has one for all.
    """

    section_name: ClassVar[str] = "routes.generalised"
    value_of_time_per_hour: float | None = setting(
        "Worth of an hour to all in the vehicle; not set: [costs] hourly_wage × wage_fraction × "
        "party_size (or adults).",
        None,
        unit="currency/h",
        usual="5 to 20 in EUR or USD for a party; common practice, no source",
        gt=0,
    )
    vehicle_cost_per_km: Amount | None = setting(
        "Cost of driving; not set: that of [costs].", None, unit="currency/km", usual="as [costs]"
    )
    toll_per_km: Amount | None = setting(
        "Toll of roads that are not listed; not set: that of [costs].",
        None,
        unit="currency/km",
        usual="as [costs]",
    )
    toll_per_booth: Amount | None = setting(
        "Toll at booths that are not listed; not set: that of [costs].",
        None,
        unit="currency",
        usual="as [costs]",
    )
    ferry_fare_per_vehicle: Amount | None = setting(
        "Fare of ferries that are not listed; not set: that of [costs].",
        None,
        unit="currency",
        usual="as [costs]",
    )
    ferry_fare_per_person: Amount | None = setting(
        "The same for each person.", None, unit="currency", usual="as [costs]"
    )
    people: float | None = setting(
        "People in the vehicle; not set: [costs] party_size, if it is a number, else 1.",
        None,
        unit="people",
        usual="2 to 3.5",
        gt=0,
    )


class MeasuredColumns(Section):
    """The study's own column names in the file of measured times."""

    zone_id: str = setting("Zone of origin.", "zone_id")
    site_id: str = setting("Site.", "site_id")
    measured_min: str = setting("Time one way, door to site, minutes.", "measured_min")


class MeasuredSettings(FileSection):
    """Times that were measured or reported: they say by what factor the modelled ones are off."""

    section_name: ClassVar[str] = "routes.measured"
    columns: MeasuredColumns = setting("Column names in that file.", MeasuredColumns())


class RoutesSettings(Section):
    """How origins and sites are tied to the roads."""

    section_name: ClassVar[str] = "routes"
    table: InputPath | None = setting(
        "A ready routes table (CSV or Parquet); then no road extract is needed.", None
    )
    minimise: Literal["time", "distance", "generalised_cost"] = setting(
        "What people make least in choosing their route: its time, its distance, or what it costs "
        "in money and time ([routes.generalised]).",
        "time",
        usual="time",
    )
    generalised: GeneralisedSettings = setting(
        "Prices for minimise = 'generalised_cost'.", GeneralisedSettings()
    )
    measured: MeasuredSettings = setting(
        "Measured or reported times; the table route_quality gives the factor that they ask for.",
        MeasuredSettings(),
    )
    charges: ChargesSettings = setting(
        "Fares and tolls of single ferries, roads and booths.", ChargesSettings()
    )
    max_snap_km: float = setting(
        "A point further from its road is too_far_from_road.",
        5.0,
        unit="km",
        usual="2 to 10",
        gt=0,
    )
    zone_gap_speed_kmh: float = setting(
        "Speed on the straight gap between a zone's point and its road, charged as travelled.",
        20.0,
        unit="km/h",
        usual="20 (unmapped lanes) to 30",
        gt=0,
    )
    site_gap_speed_kmh: float = setting(
        "Speed on the straight gap between an access point and its road, charged as travelled.",
        20.0,
        unit="km/h",
        usual="5 (on foot) to 20 (unmapped lanes)",
        gt=0,
    )
    local_circuity: float = setting(
        "Road distance as a multiple of the straight one, for trips inside a zone that has a "
        "single point.",
        1.3,
        unit="ratio",
        usual="1.2 to 1.4 (Ballou, Rahardja and Sakai 2002, countries' means, from memory)",
        ge=1,
        le=5,
    )
    local_speed_kmh: float = setting(
        "Speed of such trips, door to site.",
        30.0,
        unit="km/h",
        usual="20 (towns) to 50 (country)",
        gt=0,
        le=130,
    )
    detached_road_km: float = setting(
        "Roads that join the main network nowhere and are at least this long in all count as "
        "an island: a point beside them is not moved to the main network.",
        0.5,
        unit="km",
        usual="0.2 to 2",
        ge=0,
    )
    detached_jump_km: float = setting(
        "A point beside such an island is moved to the main network all the same if that is no "
        "more than this much further than the island's road; else it has no_path.",
        0.3,
        unit="km",
        usual="0.1 to 0.5: less than a stretch of water without a bridge",
        ge=0,
    )
    max_lines: int = setting(
        "Route lines to keep; if there are more routed pairs, sites go before substitutes, "
        "then the shortest drives.",
        5000,
        ge=0,
    )
    line_tolerance_m: float = setting(
        "Route lines are thinned for maps by at most this much; distances are not touched.",
        20.0,
        unit="m",
        ge=0,
    )
