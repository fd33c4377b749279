"""The hourly wage, and what the hours of a trip are worth as hours of that wage.

An hour of travel costs a share of the hourly wage. The shares of the driver, of those who ride
along, on ferries, on foot and on the site may differ. The share is a convention: a third of the
wage is common practice (common practice, no source); see the presets for official guidance.
"""

from __future__ import annotations

import pandas as pd

from pipeline.cost_settings import CostsSettings
from pipeline.costs.figures import Figures
from pipeline.errors import CostError


def hourly_wages(
    figures: Figures, reached: pd.Series[bool], income: pd.Series[float] | None = None
) -> pd.Series[float]:
    """Hourly wage of an adult of every row: stated, or from a household income.

    household income ÷ earners per household ÷ working hours a year, within floor and cap.

    Parameters
    ----------
    figures : the study's figures for these rows.
    reached : rows that need a wage.
    income : the respondent's own per year, where known; else the zone's is taken.

    Raises
    ------
    CostError
        A zone that is reached has no income, and the study names neither wage nor fallback.
    """
    settings = figures.settings
    wages = figures.each("hourly_wage", settings.hourly_wage)
    if wages.isna().any():
        wages = wages.fillna(_from_income(figures, income))
    if _time_costs_something(figures):
        _refuse_gaps(figures, reached & wages.isna())
    return within_bounds(wages, figures)


def within_bounds(wages: pd.Series[float], figures: Figures) -> pd.Series[float]:
    """Wages between the study's floor and cap."""
    floor, cap = figures.settings.wage_floor_per_hour, figures.settings.wage_cap_per_hour
    if floor is not None:
        wages = wages.clip(lower=floor * figures.factor("wage_floor_per_hour"))
    if cap is not None:
        wages = wages.clip(upper=cap * figures.factor("wage_cap_per_hour"))
    return wages


def from_household(income: pd.Series[float], figures: Figures) -> pd.Series[float]:
    """Hourly wage of one person from a household's income per year."""
    settings = figures.settings
    earners = figures.each("earners_per_household", settings.earners_per_household)
    return income / earners.where(earners > 0) / settings.hours_per_year


def wage_hours(
    trips: pd.DataFrame,
    adults: pd.Series[float],
    hours_on_site: pd.Series[float],
    figures: Figures,
) -> pd.DataFrame:
    """Hours of wage that the trip costs an adult, on average over the party's adults.

    Of the hours on the road those that were enjoyed themselves cost nothing.

    Returns
    -------
    `wage_hours`: each kind of hour × its share of the wage; `wheel_share`: the share on the road,
    of one driver and those who ride along.
    """
    settings = figures.settings
    driving = figures.each("wage_fraction", settings.wage_fraction)
    riding = _share(settings.wage_fraction_riding, driving)
    several = adults.clip(lower=1)
    on_wheels = (driving + (several - 1) * riding) / several
    on_ferry = _share(settings.wage_fraction_ferry, driving)
    endured = trips["wheel_hours"] * (1 - settings.enjoyed_drive_share)
    hours = endured * on_wheels + trips["ferry_hours"] * on_ferry
    hours = hours + _off_the_road(driving, hours_on_site, settings)
    return pd.DataFrame({"wage_hours": hours, "wheel_share": on_wheels})


def _off_the_road(
    driving: pd.Series[float], hours_on_site: pd.Series[float], settings: CostsSettings
) -> pd.Series[float]:
    """Hours of wage on foot from the car, there and back, and on the site."""
    walking = _share(settings.wage_fraction_walking, driving)
    on_site = settings.wage_fraction_on_site or 0.0
    return 2 * settings.walk_min / 60 * walking + hours_on_site * on_site


def _share(stated: float | None, driving: pd.Series[float]) -> pd.Series[float]:
    return driving if stated is None else pd.Series(stated, index=driving.index)


def _from_income(figures: Figures, own: pd.Series[float] | None) -> pd.Series[float]:
    settings = figures.settings
    of_zone = figures.zones.set_index("zone_id")["household_income"]
    per_year = figures.zone_id.map(of_zone).astype("float64")
    if own is not None:
        per_year = own.fillna(per_year)
    per_year = per_year * figures.factor("household_income")
    fallback = settings.fallback_household_income
    if fallback is not None:
        per_year = per_year.fillna(fallback * figures.factor("fallback_household_income"))
    return from_household(per_year, figures)


def _time_costs_something(figures: Figures) -> bool:
    settings = figures.settings
    shares = (
        settings.wage_fraction,
        settings.wage_fraction_riding,
        settings.wage_fraction_ferry,
        settings.wage_fraction_walking,
        settings.wage_fraction_on_site,
    )
    return any(shares) or "wage_fraction" in settings.zone_columns


def _refuse_gaps(figures: Figures, lacking: pd.Series[bool]) -> None:
    without = figures.zone_id[lacking].drop_duplicates()
    if not without.empty:
        raise CostError(
            f"{len(without)} of {figures.zones['zone_id'].nunique()} zones have no household "
            f"income, so their travel time has no price; first: zone {without.iloc[0]!r}. Fill "
            "it in, or set [costs] fallback_household_income or hourly_wage."
        )
