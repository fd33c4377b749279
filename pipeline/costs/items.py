"""The price of a trip, item by item, for parties that are already known.

Every item is first what the party pays. Per person it is divided by those who bear it: what the
vehicle costs by `bearers`; what each person costs (fares, fees, time) by the party's people, or
by its adults where the adults pay for the children. Amounts keep their full precision, so that
the items of a row add up to `travel_cost`; rounding to cents is for the report.
"""

from __future__ import annotations

import pandas as pd

from pipeline.cost_settings import CostsSettings
from pipeline.costs.figures import Figures
from pipeline.costs.modes import expected_fares, expected_hours, mode_shares
from pipeline.costs.wages import wage_hours
from pipeline.errors import CostError

ITEMS = (
    "vehicle_cost",
    "parking_cost",
    "toll_cost",
    "ferry_cost",
    "fare_cost",
    "time_cost",
    "fee_cost",
    "other_cost",
)


def price(
    trips: pd.DataFrame,
    party: pd.DataFrame,
    rates: pd.DataFrame,
    site_id: pd.Series[str],
    figures: Figures,
) -> pd.DataFrame:
    """Price every row.

    Parameters
    ----------
    trips : `round_trips` of every row.
    party : `party_size, adults, bearers`.
    rates : `vehicle_cost_per_km`, `hourly_wage` and `fee` of every row.
    site_id : site of every row, for parking.
    figures : the study's figures for these rows.

    Returns
    -------
    The items, `travel_cost`, the twins per party, `travel_hours` (expected, on foot and on the
    site included where they are charged), `road_share`, `time_value_per_hour`.
    """
    settings = figures.settings
    shares = mode_shares(trips["one_way_km"], settings)
    road = shares["road"]
    vehicle = _vehicle_items(trips, rates, site_id, figures).mul(road, axis=0)
    hours = wage_hours(trips, party["adults"], figures)
    elsewhere = expected_hours(trips["one_way_km"], shares, settings)
    riding = settings.wage_fraction_riding
    adult_hours = hours["wage_hours"] * road + elsewhere * (
        hours["wheel_share"] if riding is None else riding
    )
    # What each person pays; where the adults pay for the children, an adult pays for `each`.
    heads = party["adults"] if settings.shared_by == "adults" else party["party_size"]
    each = party["party_size"] / heads
    fares = _person_fares(trips, figures) * road
    shared = vehicle.div(party["bearers"], axis=0)
    items = shared.assign(
        ferry_cost=shared["ferry_cost"] + fares * each,
        fare_cost=expected_fares(trips["one_way_km"], shares, figures) * each,
        time_cost=_party_time(adult_hours, rates["hourly_wage"], party, settings) / heads,
        fee_cost=rates["fee"] * each,
        other_cost=_other_cost(figures) * each,
    )[[*ITEMS]].where(trips["round_trip_km"].notna(), axis=0)
    per_party = vehicle.assign(ferry_cost=vehicle["ferry_cost"] + fares * party["party_size"])
    walked = 2 * settings.walk_min / 60
    on_site = settings.hours_on_site if settings.wage_fraction_on_site else 0.0
    return pd.concat(
        [
            items.assign(travel_cost=items.sum(axis=1, skipna=False)),
            per_party.add_suffix("_per_party"),
            (trips["round_trip_hours"] * road + elsewhere + walked + on_site).rename(
                "travel_hours"
            ),
            road.where(trips["round_trip_km"].notna()).rename("road_share"),
            (rates["hourly_wage"] * hours["wheel_share"]).rename("time_value_per_hour"),
        ],
        axis=1,
    )


def _party_time(
    adult_hours: pd.Series[float],
    wage: pd.Series[float],
    party: pd.DataFrame,
    settings: CostsSettings,
) -> pd.Series[float]:
    """What the party's time costs: the adults', and the children's share of it."""
    children = party["party_size"] - party["adults"]
    people = party["adults"] + settings.child_time_share * children
    # Hours that cost nothing need no wage.
    return wage.where(adult_hours != 0, 0.0) * adult_hours * people


def _other_cost(figures: Figures) -> float:
    return figures.settings.other_cost_per_person * figures.factor("other_cost_per_person")


def _vehicle_items(
    trips: pd.DataFrame,
    rates: pd.DataFrame,
    site_id: pd.Series[str],
    figures: Figures,
) -> pd.DataFrame:
    """What the vehicle costs, there and back."""
    settings = figures.settings
    toll = settings.toll_per_km * figures.factor("toll_per_km")
    booth = settings.toll_per_booth * figures.factor("toll_per_booth")
    fare = settings.ferry_fare_per_vehicle * figures.factor("ferry_fare_per_vehicle")
    parking = site_id.map(settings.parking_per_vehicle).fillna(0.0).astype("float64")
    parking = parking * figures.factor("parking_per_vehicle")
    return pd.DataFrame(
        {
            "vehicle_cost": trips["driven_km"] * rates["vehicle_cost_per_km"],
            "parking_cost": parking.where(trips["round_trip_km"].notna()),
            "toll_cost": trips["toll_km"] * toll
            + trips["toll_booths"] * booth
            + trips["listed_toll"],
            "ferry_cost": trips["ferries"] * fare + trips["listed_fare_per_vehicle"],
        }
    )


def _person_fares(trips: pd.DataFrame, figures: Figures) -> pd.Series[float]:
    """Ferry fares of one person, there and back."""
    fare = figures.settings.ferry_fare_per_person
    usual = trips["ferries"] * fare * figures.factor("ferry_fare_per_person")
    return usual + trips["listed_fare_per_person"]


def fees(routes: pd.DataFrame, sites: pd.DataFrame) -> pd.Series[float]:
    """Entrance fee at the access point of each route; without one, the site's lowest.

    Raises
    ------
    CostError
        A route ends at a site that is not in the sites table.
    """
    pairs = routes[["site_id", "access_id"]].reset_index(drop=True)
    at_access = pairs.merge(
        sites[["site_id", "access_id", "fee"]],
        on=["site_id", "access_id"],
        how="left",
        validate="many_to_one",
    )["fee"]
    lowest = sites.groupby("site_id")["fee"].min()
    strange = ~pairs["site_id"].isin(lowest.index)
    if strange.any():
        raise CostError(
            f"{int(strange.sum())} routes end at a site that is not in the sites file; first: "
            f"{pairs.loc[strange, 'site_id'].iloc[0]!r}. Correct the routes table, or add the site."
        )
    return at_access.fillna(pairs["site_id"].map(lowest))
