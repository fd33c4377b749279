"""The section [costs] of a study file: what a trip costs."""

from __future__ import annotations

from typing import Annotated, Any, ClassVar, Literal, Self

from pydantic import Field, ModelWrapValidatorHandler, model_validator

from pipeline.cost_checks import check_costs
from pipeline.cost_parts import ModeBand, ModeSettings, VehicleSettings
from pipeline.presets import load_preset
from pipeline.sections import NotNegative, Positive, Section, Share, setting

WageShare = Annotated[float, Field(ge=0, le=2)]


class CostsSettings(Section):
    """What a trip costs."""

    section_name: ClassVar[str] = "costs"
    preset: str | None = setting(
        "File of config/costs/ whose figures stand where the study sets none. Its figures are of "
        "one country, currency and year: check that they hold for yours.",
        None,
    )
    vehicle_cost_per_km: NotNegative | None = setting(
        "Cost of driving that grows with distance: fuel, wear, tyres. No fixed yearly cost. This, "
        "or vehicle_cost_per_mile, or [costs.vehicles].",
        None,
        unit="currency/km",
        usual="0.10 to 0.45 in EUR or USD; common practice, no source",
    )
    vehicle_cost_per_mile: NotNegative | None = setting(
        "The same per mile.",
        None,
        unit="currency/mile",
        usual="0.15 to 0.35 in USD without fixed costs; common practice, no source",
    )
    vehicles: dict[str, VehicleSettings] = setting(
        "Classes of vehicle, each built up from energy and wear: [costs.vehicles.<class>].",
        {},
        usual="the region's registered cars",
    )
    vehicle_mix: dict[str, Share] = setting(
        "Share of the trips by class; may be left out with one class.",
        {},
        unit="share",
        usual="the region's registered cars",
    )
    energy_prices: dict[str, NotNegative] = setting(
        "Price of each fuel, and of current, at the pump or plug.",
        {},
        unit="currency/l or currency/kWh",
        usual="the year's mean in the region",
    )
    vehicle_cost_factor: float = setting(
        "Multiplies the cost per km, whatever it comes from.", 1.0, usual="1", ge=0
    )
    distance_along: Literal["fastest", "shortest"] = setting(
        "Route whose kilometres are paid for. The time is the fastest route's in both cases.",
        "fastest",
        usual="fastest",
    )
    distance_factor: Literal["records"] | Positive = setting(
        "Multiplies routed distances; 'records': the median of reported over routed (see the table "
        "reported_check).",
        1.0,
        usual="0.95 to 1.1",
    )
    time_factor: Literal["records"] | Positive = setting(
        "Multiplies routed times; 'records': the median of reported over routed (see the table "
        "reported_check).",
        1.0,
        usual="0.9 to 1.2",
    )
    toll_per_km: float = setting(
        "Toll per vehicle and km of toll road.",
        0.0,
        unit="currency/km",
        usual="0.05 to 0.15 in EUR; common practice, no source",
        ge=0,
    )
    toll_per_booth: float = setting(
        "Toll per vehicle at each booth that [routes.charges] does not list.",
        0.0,
        unit="currency",
        usual="0 where tolls are by km; else the operator's tariff",
        ge=0,
    )
    ferry_fare_per_vehicle: float = setting(
        "Ferry fare of the vehicle (with its driver where the operator counts so), one way.",
        0.0,
        unit="currency",
        usual="the operator's tariff",
        ge=0,
    )
    ferry_fare_per_person: float = setting(
        "Ferry fare of each person, one way.",
        0.0,
        unit="currency",
        usual="the operator's tariff",
        ge=0,
    )
    parking_per_vehicle: dict[str, NotNegative] = setting(
        "Parking per vehicle and visit, by site; a site that is not named is free.",
        {},
        unit="currency",
        usual="the site's tariff",
    )
    lodging_per_person_night: float = setting(
        "Lodging per person and night that the trip makes necessary, times the nights that records "
        "tell of ([visits.columns] nights): the record's own, or the mean per trip of its site's.",
        0.0,
        unit="currency/night",
        usual="0; the cheapest lodging that serves, less what a night at home costs",
        ge=0,
    )
    other_cost_per_person: float = setting(
        "Other spending that the trip itself makes necessary, per person and trip.",
        0.0,
        unit="currency",
        usual="0; food and gear are no part of the price of the trip",
        ge=0,
    )
    party_size: Literal["records"] | Positive = setting(
        "People who travel together: a number, or 'records': the mean per trip of the site's "
        "visit records (of all records for substitutes).",
        "records",
        unit="people",
        usual="2 to 3.5",
    )
    adults: Literal["records"] | Positive | None = setting(
        "Adults among them: a number, or 'records'; not set: all of them.",
        None,
        unit="people",
        usual="1.7 to 2.2",
    )
    shared_by: Literal["all", "adults", "vehicle"] = setting(
        "Who bears what the party spends, and so what a visit is. 'all' alike: visits and prices "
        "are a person's; its 'adults', who pay for the children too: visits are those of adults, "
        "children are not counted; or the 'vehicle' as a whole: a visit is a vehicle's with all "
        "in it. Known totals ([visits] annual_visits) are of persons in every case.",
        "all",
        usual="all",
    )
    wage_fraction: float = setting(
        "Share of the hourly wage that an hour of travel costs; of the driver where "
        "wage_fraction_riding is set.",
        unit="share",
        usual="0.25 to 0.5; a third is common practice",
        ge=0,
        le=2,
    )
    wage_fraction_riding: WageShare | None = setting(
        "The same for those who ride along; not set: as wage_fraction.",
        None,
        unit="share",
        usual="0.25 to 0.5",
    )
    wage_fraction_ferry: WageShare | None = setting(
        "The same on ferries and waiting for them; not set: as wage_fraction.",
        None,
        unit="share",
        usual="0.25 to 0.5",
    )
    wage_fraction_walking: WageShare | None = setting(
        "The same on foot between car and site; not set: as wage_fraction.",
        None,
        unit="share",
        usual="0.33 to 1",
    )
    wage_fraction_on_site: WageShare | None = setting(
        "The same for time on the site; not set: that time costs nothing.",
        None,
        unit="share",
        usual="not set: the visit is what is valued",
    )
    enjoyed_drive_share: float = setting(
        "Share of the hours on the road that were themselves enjoyed; they cost nothing. What the "
        "vehicle costs stays.",
        0.0,
        unit="share",
        usual="0; 0.25 to 0.5 on scenic roads, where a survey says so; common practice, no source",
        ge=0,
        le=1,
    )
    walk_min: float = setting(
        "Walk between car and site that no route holds, one way.", 0.0, unit="min", usual="0", ge=0
    )
    hours_on_site: float = setting(
        "Time on the site, where it is to be charged.", 0.0, unit="h", usual="1 to 6", ge=0
    )
    child_time_share: float = setting(
        "What a child's time costs, as a share of an adult's.",
        0.0,
        unit="share",
        usual="0 to 0.5; common practice, no source",
        ge=0,
        le=1,
    )
    wage_of: Literal["respondent", "zone"] = setting(
        "Whose household income the wage comes from where [market] level is 'person': the "
        "respondent's (the zone's where a record has none), or always the zone's.",
        "respondent",
        usual="respondent; zone where many refuse to say",
    )
    hourly_wage: NotNegative | None = setting(
        "A stated wage, or with wage_fraction = 1 a stated value of time; not set: from the "
        "zone's household income.",
        None,
        unit="currency/h",
        usual="the region's median",
    )
    hours_per_year: float = setting(
        "Working hours a year that turn income into an hourly wage.",
        2080.0,
        unit="h/year",
        usual="1,700 to 2,080",
        gt=0,
    )
    earners_per_household: float = setting(
        "Household income is divided by this to get one person's.",
        1.0,
        unit="people",
        usual="1 (household income taken as the wage earner's) to 1.6",
        gt=0,
    )
    wage_floor_per_hour: NotNegative | None = setting(
        "No wage counts as less.", None, unit="currency/h", usual="the minimum wage"
    )
    wage_cap_per_hour: NotNegative | None = setting(
        "No wage counts as more.", None, unit="currency/h", usual="not set"
    )
    fallback_household_income: float | None = setting(
        "Taken for zones whose income is missing; without it such a zone is an error.",
        None,
        unit="currency/year",
        usual="the region's median",
        gt=0,
    )
    zone_columns: dict[str, str] = setting(
        'Figures that differ by zone: our key = "column of the zones" (named in [zones] '
        "covariates, too). Keys: vehicle_cost_per_km, vehicle_cost_per_mile, hourly_wage, "
        "wage_fraction, earners_per_household, energy_prices.<name>, vehicle_mix.<class>. Where "
        "the column is empty, the study's figure holds.",
        {},
        usual="none",
    )
    modes: dict[str, ModeSettings] = setting(
        "Other ways of travelling than one's own vehicle: [costs.modes.<name>].",
        {},
        usual="the operators' tariffs and timetables",
    )
    mode_bands: tuple[ModeBand, ...] = setting(
        "How people travel by distance, nearest band first: [[costs.mode_bands]]. None: all by "
        "road. The cost is then what is expected over the modes.",
        (),
        usual="a national travel survey",
    )
    price_years: dict[str, Annotated[int, Field(ge=1900, le=2200)]] = setting(
        "Year of an amount that is not in prices of [study] price_year, by key of this section, "
        "or household_income (of zones) or fee (of sites).",
        {},
        usual="the study's price year",
    )
    price_index: dict[str, Positive] = setting(
        "Price index by year (consumer prices), which brings such amounts to price_year.",
        {},
        unit="index",
        usual="the statistical office's consumer price index",
    )

    @model_validator(mode="wrap")
    @classmethod
    def _with_preset(cls, data: Any, handler: ModelWrapValidatorHandler[Self]) -> Self:
        if not isinstance(data, dict) or not isinstance(data.get("preset"), str):
            return handler(data)
        filled, taken = load_preset(data["preset"]).fill(data)
        made = handler(filled)
        # What the preset gave is not what the study set.
        made.model_fields_set.difference_update(taken, {"price_years"} - set(data))
        return made

    @model_validator(mode="after")
    def _fits_together(self) -> Self:
        check_costs(self)
        return self

    def price_factor(self, key: str, price_year: int) -> float:
        """What brings an amount of `key` to prices of `price_year`.

        Raises
        ------
        ValueError
            [costs.price_index] lacks one of the two years.
        """
        year = self.price_years.get(key, price_year)
        if year == price_year:
            return 1.0
        for needed in (year, price_year):
            if str(needed) not in self.price_index:
                raise ValueError(
                    f"{key} is in prices of {year}, the study in prices of {price_year}, and "
                    f"[costs.price_index] has no {needed} (it has: "
                    f"{', '.join(sorted(self.price_index)) or 'nothing'}). Add that year's index, "
                    "or correct the year"
                )
        return self.price_index[str(price_year)] / self.price_index[str(year)]
