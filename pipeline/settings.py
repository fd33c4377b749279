"""The sections of a study file: every key, its meaning, unit, usual value and bounds.

A key is declared once, here. The commented study file that ``make new`` writes, the table of
assumptions in the report and the reference in ``docs/study_file.md`` are made from these
declarations. Sections are frozen and reject keys that they do not know.
"""

from __future__ import annotations

from typing import Annotated, ClassVar, Literal, Self

from pydantic import Field, model_validator

from pipeline.cost_settings import CostsSettings
from pipeline.road_settings import RoadsSettings, RoutesSettings
from pipeline.sections import (
    CrsName,
    FileSection,
    InputPath,
    OutputPath,
    Positive,
    Section,
    setting,
)
from pipeline.sensitivity_settings import SensitivitySettings
from pipeline.visit_settings import VisitsSettings, ZonesSettings


class StudySettings(Section):
    """Who the study is about, in which money, and where its files go."""

    section_name: ClassVar[str] = "study"
    name: str = setting("Short name; names the output files.", pattern=r"^[a-z][a-z0-9_-]*$")
    title: str = setting("Title of the report.")
    notice: str = setting(
        "Stands in the report's first lines: invented data, drawn visits, a draft.", ""
    )
    currency: str = setting("Currency of every amount (ISO 4217).", pattern=r"^[A-Z]{3}$")
    price_year: int = setting("Year of the prices.", ge=1900, le=2200)
    seed: int = setting("Seed of every random draw.", 1, ge=0)
    folder: OutputPath = setting(
        "Folder that holds work/ (stage tables) and output/ (what people take away); "
        "default: a folder with the study's name beside the study file.",
        None,
    )


class SiteColumns(Section):
    """The study's own column names in the sites file."""

    site_id: str = setting("Site's identifier.", "site_id")
    access_id: str = setting(
        "Access point's identifier; absent: numbered within the site.", "access_id"
    )
    site_name: str = setting("Name to show; absent: the identifier.", "site_name")
    role: str = setting("'site' (to be valued) or 'substitute'; absent: 'site'.", "role")
    lon: str = setting("Longitude, WGS 84; may be absent in a GIS layer of points.", "lon")
    lat: str = setting("Latitude, WGS 84; may be absent in a GIS layer of points.", "lat")
    fee: str = setting("Entrance fee per person and visit; absent: free.", "fee")


class SitesSettings(FileSection):
    """Where the sites and their substitutes are."""

    section_name: ClassVar[str] = "sites"
    file: InputPath | None = setting(
        "CSV, Excel, Parquet or GIS layer of points; one row per access point.", None
    )
    columns: SiteColumns = setting("Column names in that file.", SiteColumns())
    stays: Literal["together", "apart"] = setting(
        "Whether day trips and overnight trips to a site are valued 'together', or 'apart' with a "
        "demand of each: the site then becomes two, SITE_day and SITE_overnight, by the nights "
        "of the records ([visits.columns] nights). Known totals may be of either, or of the site.",
        "together",
        usual="together; apart where one visitor in ten or more stays overnight",
    )


class MarketSettings(Section):
    """Which zones belong to the market of a site."""

    section_name: ClassVar[str] = "market"
    zone_table: InputPath | None = setting(
        "A ready zone_table (CSV or Parquet); the flow starts at demand.", None
    )
    trip_table: InputPath | None = setting(
        "A ready trip_table (CSV or Parquet); the flow starts at demand.", None
    )
    level: Literal["zone", "person"] = setting(
        "What demand is fitted to: zones, or the records of persons (kinds on_site and "
        "household), which join then writes as trip_table.",
        "zone",
        usual="zone; person for surveys with trips per respondent",
    )
    max_distance_km: float | None = setting(
        "Zones further away are left out of the regression.",
        None,
        unit="km",
        usual="a day's drive: 150 to 300",
        gt=0,
    )
    max_drive_time_min: float | None = setting(
        "Zones with a longer one-way drive are left out of the regression.",
        None,
        unit="min",
        usual="120 to 240",
        gt=0,
    )
    sites_are_substitutes: bool = setting(
        "Whether the other valued sites count as substitutes of a site, too.",
        default=False,
        usual="false; true where the sites are alike",
    )
    substitute: Literal["cheapest", "second_cheapest", "index"] = setting(
        "What substitute_cost is: the price of the cheapest substitute that the zone reaches, of "
        "the second cheapest, or an index of all that it reaches, each weighted by its "
        "attractiveness: sum of weights / sum of (weight / price), so that a far one counts "
        "little.",
        "cheapest",
        usual="cheapest",
    )
    attractiveness: dict[str, Positive] = setting(
        "Weight of each substitute in the index: its size, or its visits from everywhere.",
        {},
        usual="hectares, length of shore, or annual visits",
    )


ModelName = Literal[
    "poisson",
    "negative_binomial",
    "negative_binomial_1",
    "quasi_poisson",
    "zero_inflated_poisson",
    "zero_inflated_negative_binomial",
    "truncated_poisson",
    "truncated_negative_binomial",
    "on_site_poisson",
    "on_site_negative_binomial",
    "hurdle",
    "log_linear",
    "linear",
    "weighted_log_linear",
    "weighted_linear",
]
#: Poisson and negative binomial by who could be in the records.
TEST_PAIRS: dict[str, tuple[ModelName, ModelName]] = {
    "everybody": ("poisson", "negative_binomial"),
    "visitors": ("truncated_poisson", "truncated_negative_binomial"),
    "on_site": ("on_site_poisson", "on_site_negative_binomial"),
}


class DemandSettings(Section):
    """The regression of visits on travel cost."""

    section_name: ClassVar[str] = "demand"
    models: tuple[ModelName, ...] = setting(
        "Models to fit. Counts, with the population as exposure: poisson, negative_binomial "
        "(variance mu + alpha mu^2), negative_binomial_1 (mu (1 + delta)), quasi_poisson, "
        "zero_inflated_*. Counts of visitors only: truncated_*; of visitors met on the site: "
        "on_site_*. Records of persons: hurdle. Least squares of the log rate and of the rate: "
        "log_linear, linear, and weighted by exposure, weighted_*.",
        ("poisson", "negative_binomial", "log_linear"),
        min_length=1,
    )
    sampling: Literal["everybody", "visitors", "on_site"] = setting(
        "Who could be in the records: 'everybody' (zones of a market, a survey of the "
        "population), 'visitors' only (a permit list without those who did not come), or people "
        "met 'on_site', where who comes often is met often. Says which pair 'test' chooses from.",
        "everybody",
        usual="everybody for zones; on_site for interviews at the site",
    )
    choose: Literal["test", "aic", "bic"] | ModelName = setting(
        "'test': Poisson or negative binomial by the overdispersion test; 'aic' or 'bic': the "
        "count model with the least; or a model's name.",
        "test",
        usual="test",
    )
    test_level: float = setting(
        "The Poisson is rejected when the overdispersion test's p-value is below this.",
        0.05,
        usual="0.05",
        gt=0,
        lt=1,
    )
    errors: Literal["model", "HC0", "HC1", "HC2", "HC3", "cluster", "bootstrap"] = setting(
        "Standard errors: 'model' takes the model's variance at its word; HC0 to HC3 are robust "
        "to it, HC3 with the most care for zones that pull hard on the fit (with 60 overdispersed "
        "zones a Poisson's 95 % interval held the truth 94 times in 100 with HC3, 88 with HC1); "
        "'cluster' lets rows of a cluster move together; 'bootstrap' draws rows, or clusters, "
        "again and again (surplus.bootstrap times, 500 if that is 0).",
        "HC3",
        usual="HC3; HC1 is much used and the same with several hundred zones",
    )
    covariates: tuple[str, ...] = setting(
        "Columns of the finished table beside travel_cost; coefficients are per unit of the "
        "column (income: per one of the currency a year).",
        (),
        usual="household_income, substitute_cost",
    )
    zero_part: tuple[str, ...] | None = setting(
        "Columns beside a constant in the part about zeros; default: all regressors in a hurdle, "
        "none in zero-inflated models.",
        None,
        usual="few; travel_cost belongs into a hurdle",
    )
    cluster: str | None = setting(
        "Column of the finished table whose equal values belong together, for errors = 'cluster' "
        "and for the bootstrap.",
        None,
        usual="zone_id for records of persons or stacked sites",
    )
    site_effects: bool = setting(
        "Fit all sites together with a constant for each, instead of one by one.",
        default=False,
        usual="false; true where each site has few visits and sites are alike",
    )
    folds: int = setting(
        "Parts of the cross-validation; 0: none.", 10, usual="5 to 10", ge=0, le=100
    )

    @model_validator(mode="after")
    def _choice_is_fitted(self) -> Self:
        needed: tuple[str, ...] = (self.choose,)
        if self.choose in ("test", "aic", "bic"):
            needed = TEST_PAIRS[self.sampling] if self.choose == "test" else ()
        missing = [name for name in needed if name not in self.models]
        if missing:
            raise ValueError(
                f"choose = {self.choose!r} needs {missing[0]!r} among models; add it to models"
            )
        if self.errors == "cluster" and self.cluster is None:
            raise ValueError("errors = 'cluster' needs the key cluster; name a column (zone_id)")
        return self


class SurplusSettings(Section):
    """Surplus, its interval, and the fees to look at."""

    section_name: ClassVar[str] = "surplus"
    confidence: float = setting("Level of every interval.", 0.95, usual="0.95", gt=0.5, lt=1)
    draws: int = setting(
        "Parameter draws for simulated intervals.", 10_000, usual="1,000 to 10,000", ge=1000
    )
    fees: tuple[Annotated[float, Field(ge=0)], ...] = setting(
        "Added fees per person and visit to tabulate; none: ten equal steps up to the fee that "
        "keeps nine visits in ten away.",
        (),
        unit="currency",
    )
    bootstrap: int = setting(
        "Bootstrap replicates of the chosen model; 0: no bootstrap intervals.",
        0,
        usual="0 while working, 1,000 to report",
        ge=0,
    )
    income: str = setting(
        "Covariate that is income, for exact welfare; used where it is in demand.covariates.",
        "household_income",
    )
    income_unit: Positive = setting(
        "Money that one unit of that covariate stands for, in the study's currency.",
        1.0,
        unit="currency",
        usual="1; 1,000 where income is in thousands",
    )


class ScenarioSettings(Section):
    """A change to be valued."""

    section_name: ClassVar[str] = "scenarios"


class PublishSettings(Section):
    """What people take away."""

    section_name: ClassVar[str] = "publish"
    crs: CrsName = setting(
        "Coordinate reference system of the GIS layers (EPSG:code, or any that PROJ knows).",
        "EPSG:4326",
    )
    suppress_below: int = setting(
        "Counts of visit records per zone below this are hidden in published tables; 0: none.",
        0,
        usual="3 to 10",
        ge=0,
    )
    attribution: str = setting(
        "Attribution and licence of the road data, shown on every map.",
        "Roads © OpenStreetMap contributors, ODbL 1.0",
    )


class ComputeSettings(Section):
    """How the work is done; never changes a figure."""

    section_name: ClassVar[str] = "compute"
    workers: int = setting(
        "Processes for searches, alternatives and replicates; 1: all in this one.", 1, ge=1
    )
    scheduler: str | None = setting(
        "Address of a dask.distributed scheduler (tcp://host:port) whose workers take the place "
        "of these processes; they need this program, and the study's folder by the same path.",
        None,
    )


SECTIONS: tuple[type[Section], ...] = (
    StudySettings,
    SitesSettings,
    ZonesSettings,
    VisitsSettings,
    RoadsSettings,
    RoutesSettings,
    CostsSettings,
    MarketSettings,
    DemandSettings,
    SurplusSettings,
    SensitivitySettings,
    PublishSettings,
    ComputeSettings,
)
