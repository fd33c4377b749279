"""The price of a trip, item by item, for parties that are already known.

Every item is first what the party pays: what the vehicle costs, what each of its people costs
(fares, fees, lodging), and its people's time. A visit's price is that over the `bearers`: all of
the party, its adults, or the vehicle as one. Amounts keep their full precision, so that the
items of a row add up to `travel_cost`; rounding to cents is for the report.
"""

from __future__ import annotations

import pandas as pd

from pipeline.cost_settings import CostsSettings
from pipeline.costs.figures import Figures
from pipeline.costs.modes import expected_access_km, expected_fares, expected_hours
from pipeline.costs.wages import wage_hours
from pipeline.errors import CostError
from pipeline.stays import place_ids

ITEMS = (
    "vehicle_cost",
    "parking_cost",
    "toll_cost",
    "ferry_cost",
    "fare_cost",
    "time_cost",
    "fee_cost",
    "lodging_cost",
    "other_cost",
)
VEHICLE_ITEMS = ("vehicle_cost", "parking_cost", "toll_cost", "ferry_cost")


def price(
    trips: pd.DataFrame,
    party: pd.DataFrame,
    rates: pd.DataFrame,
    shares: pd.DataFrame,
    figures: Figures,
) -> pd.DataFrame:
    """Price every row.

    Parameters
    ----------
    trips : `round_trips` of every row.
    party : `party_size, adults, bearers`.
    rates : `parking`, `vehicle_cost_per_km`, `hourly_wage`, `fee`, `nights` and `hours_on_site`
        of every row.
    shares : share of each mode in every row.
    figures : the study's figures for these rows.

    Returns
    -------
    The items, `travel_cost`, the twins per party, `travel_hours` (expected, on foot and on the
    site included where they are charged), `road_share`, `time_value_per_hour`.
    """
    reached = trips["round_trip_km"].notna()
    spent = _vehicle_items(trips, rates, shares, figures)
    people = _items_of_a_person(trips, rates, shares, figures).mul(party["party_size"], axis=0)
    spent["ferry_cost"] = spent["ferry_cost"] + people.pop("ferry_cost")
    time = _time(trips, party, rates, shares, figures)
    per_party = pd.concat([spent, people, time.pop("time_cost")], axis=1)[[*ITEMS]]
    per_party = per_party.where(reached, axis=0)
    items = per_party.div(party["bearers"], axis=0)
    return pd.concat(
        [
            items.assign(travel_cost=items.sum(axis=1, skipna=False)),
            per_party[[*VEHICLE_ITEMS]].add_suffix("_per_party"),
            time,
            shares["road"].where(reached).rename("road_share"),
        ],
        axis=1,
    )


def _time(
    trips: pd.DataFrame,
    party: pd.DataFrame,
    rates: pd.DataFrame,
    shares: pd.DataFrame,
    figures: Figures,
) -> pd.DataFrame:
    """What the party's hours cost, how many there are, and what one of them costs an adult."""
    settings, road = figures.settings, shares["road"]
    hours = wage_hours(trips, party["adults"], rates["hours_on_site"], figures)
    elsewhere = expected_hours(trips["one_way_km"], shares, settings)
    riding = settings.wage_fraction_riding
    adult_hours = hours["wage_hours"] * road + elsewhere * (
        hours["wheel_share"] if riding is None else riding
    )
    walked = 2 * settings.walk_min / 60
    on_site = rates["hours_on_site"] if settings.wage_fraction_on_site else 0.0
    endured = 1 - settings.enjoyed_drive_share
    return pd.DataFrame(
        {
            "time_cost": _party_time(adult_hours, rates["hourly_wage"], party, settings),
            "travel_hours": trips["round_trip_hours"] * road + elsewhere + walked + on_site,
            "time_value_per_hour": rates["hourly_wage"] * hours["wheel_share"] * endured,
        }
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


def _vehicle_items(
    trips: pd.DataFrame, rates: pd.DataFrame, shares: pd.DataFrame, figures: Figures
) -> pd.DataFrame:
    """What the vehicle costs, there and back, of those who come by road or drive to a station."""
    settings, road = figures.settings, shares["road"]
    toll = settings.toll_per_km * figures.factor("toll_per_km")
    booth = settings.toll_per_booth * figures.factor("toll_per_booth")
    fare = settings.ferry_fare_per_vehicle * figures.factor("ferry_fare_per_vehicle")
    access_km = expected_access_km(shares, settings)
    return pd.DataFrame(
        {
            "vehicle_cost": (trips["driven_km"] * road + access_km) * rates["vehicle_cost_per_km"],
            "parking_cost": rates["parking"] * road,
            "toll_cost": road
            * (trips["toll_km"] * toll + trips["toll_booths"] * booth + trips["listed_toll"]),
            "ferry_cost": road * (trips["ferries"] * fare + trips["listed_fare_per_vehicle"]),
        }
    )


def _items_of_a_person(
    trips: pd.DataFrame, rates: pd.DataFrame, shares: pd.DataFrame, figures: Figures
) -> pd.DataFrame:
    """What one person costs, there and back: ferry and other fares, entrance, lodging, other."""
    settings = figures.settings
    fare = settings.ferry_fare_per_person * figures.factor("ferry_fare_per_person")
    listed = trips["listed_fare_per_person"]
    night = settings.lodging_per_person_night * figures.factor("lodging_per_person_night")
    return pd.DataFrame(
        {
            "ferry_cost": shares["road"] * (trips["ferries"] * fare + listed),
            "fare_cost": expected_fares(trips["one_way_km"], shares, figures),
            "fee_cost": rates["fee"],
            "lodging_cost": rates["nights"] * night,
            "other_cost": settings.other_cost_per_person * figures.factor("other_cost_per_person"),
        }
    )


def parking(site_id: pd.Series[str], sites: pd.DataFrame, figures: Figures) -> pd.Series[float]:
    """Parking of a vehicle at the site of every row, by the site's name or its place's."""
    stated = figures.settings.parking_per_vehicle
    place = dict(zip(sites["site_id"], place_ids(sites), strict=True))
    tariff = {site: stated.get(site, stated.get(of, 0.0)) for site, of in place.items()}
    amount = figures.factor("parking_per_vehicle")
    return site_id.map(tariff).fillna(0.0).astype("float64") * amount


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
