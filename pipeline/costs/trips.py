"""Round trips from routes: kilometres and hours, by what they are spent on.

A round trip is the way there and the way back. Tolls and ferries are known of the way there and
taken to be the same on the way back. Kilometres on a ferry cost the fare, not the driving;
hours on it count as travel time.
"""

from __future__ import annotations

import pandas as pd

from pipeline.cost_settings import CostsSettings
from pipeline.errors import CostError
from pipeline.tables import REACHED_STATUSES

LISTED = ("listed_toll", "listed_fare_per_vehicle", "listed_fare_per_person")


def round_trips(routes: pd.DataFrame, settings: CostsSettings) -> pd.DataFrame:
    """Round trip of every row that is reached; the others are missing.

    Where a route home is not known, it is taken to be as long as the way there; the shortest
    route is known of the way there only.

    Returns
    -------
    `one_way_km, round_trip_km, round_trip_hours, driven_km, toll_km, toll_booths, ferries,
    listed_toll, listed_fare_per_vehicle, listed_fare_per_person, wheel_hours, ferry_hours`, all
    but the first there and back. What [routes.charges] lists is in the listed amounts, and not
    in the kilometres and counts before. A routes table that does not count its ferries has one
    each way where it has ferry km.

    Raises
    ------
    CostError
        A route that was found has no distance or no time.
    """
    table = routes.reset_index(drop=True)
    distance_factor, time_factor = _number(settings.distance_factor), _number(settings.time_factor)
    reached = table["route_status"].isin(REACHED_STATUSES)
    there_km, home_km = _distances(table, settings)
    there_min = table["drive_time_min"]
    _refuse_gaps(table, reached & (there_km.isna() | there_min.isna()))
    home_min = table["return_drive_time_min"].fillna(there_min)
    ferry_km = 2 * table["ferry_km"].fillna(0.0)
    ferry_hours = 2 * table["ferry_min"].fillna(0.0) / 60
    driven_km = (there_km + home_km - ferry_km).clip(lower=0) * distance_factor
    wheel_hours = ((there_min + home_min) / 60 - ferry_hours).clip(lower=0) * time_factor
    trips = pd.DataFrame(
        {
            "one_way_km": (driven_km + ferry_km) / 2,
            "round_trip_km": driven_km + ferry_km,
            "round_trip_hours": wheel_hours + ferry_hours,
            "driven_km": driven_km,
            **_dues(table, distance_factor),
            "wheel_hours": wheel_hours,
            "ferry_hours": ferry_hours,
        }
    )
    return trips.where(reached)


def _dues(table: pd.DataFrame, distance_factor: float) -> dict[str, pd.Series[float]]:
    """Tolls and ferries there and back, and the amounts of those that are listed."""
    none = pd.Series(0.0, index=table.index)

    def both_ways(name: str) -> pd.Series[float]:
        return 2 * table[name].fillna(0.0) if name in table else none

    counted = both_ways("ferry_count")
    if "ferry_count" not in table:
        counted = none.mask(table["ferry_km"].fillna(0.0) > 0, 2.0)
    toll_km = both_ways("toll_km") - both_ways("listed_toll_km")
    return {
        "toll_km": toll_km.clip(lower=0) * distance_factor,
        "toll_booths": both_ways("toll_booths") - both_ways("listed_booths"),
        "ferries": counted - both_ways("listed_ferries"),
        **{name: both_ways(name) for name in LISTED},
    }


def _number(factor: str | float) -> float:
    """A factor of the study; one that comes from the records is put in its place before."""
    if isinstance(factor, str):
        raise CostError("a calibration factor is to come from the records; see calibrated().")
    return factor


def _distances(
    table: pd.DataFrame, settings: CostsSettings
) -> tuple[pd.Series[float], pd.Series[float]]:
    """Kilometres there and home, along the route that the study pays for."""
    if settings.distance_along == "shortest":
        return table["shortest_distance_km"], table["shortest_distance_km"]
    there = table["distance_km"]
    return there, table["return_distance_km"].fillna(there)


def _refuse_gaps(table: pd.DataFrame, lacking: pd.Series[bool]) -> None:
    if lacking.any():
        first = table[lacking].iloc[0]
        raise CostError(
            f"{int(lacking.sum())} routes are marked {first['route_status']!r} but have no "
            f"distance or time; first: zone {first['zone_id']!r} to site {first['site_id']!r}. "
            "Complete the routes table, or mark them 'no_path'."
        )
