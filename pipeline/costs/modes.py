"""Shares of the modes by distance: the cost of a trip that is to be expected.

Near visitors come by road; far ones may fly or take the train. The study gives the shares by
band of distance, and the cost of a row is the sum over the modes of share × cost.
"""

from __future__ import annotations

import numpy as np
import pandas as pd

from pipeline.cost_checks import ROAD
from pipeline.cost_settings import CostsSettings
from pipeline.costs.figures import Figures
from pipeline.errors import CostError

OWN_VEHICLE = ("car", "motorcycle")


def mode_shares(one_way_km: pd.Series[float], settings: CostsSettings) -> pd.DataFrame:
    """Share of every mode in every row, by the band that its distance lies in.

    A band holds distances up to and with its `up_to_km`. Without bands all go by road.
    """
    names = (ROAD, *settings.modes)
    if not settings.mode_bands:
        return pd.DataFrame({name: float(name == ROAD) for name in names}, index=one_way_km.index)
    ends = [np.inf if band.up_to_km is None else band.up_to_km for band in settings.mode_bands]
    place = np.searchsorted(ends, one_way_km.fillna(0.0).to_numpy(), side="left")
    table = np.array([[band.shares.get(n, 0.0) for n in names] for band in settings.mode_bands])
    return pd.DataFrame(table[place], columns=list(names), index=one_way_km.index)


def own_shares(
    mode: pd.Series[str], expected: pd.DataFrame, record_id: pd.Series[str]
) -> pd.DataFrame:
    """Shares of the modes of trips whose own mode is known: all of it; else what is expected.

    A car or a motorcycle is the road.

    Parameters
    ----------
    mode : mode of every row as its record tells it, or missing.
    expected : as `mode_shares` gives them.
    record_id : what to call the record of a row.

    Raises
    ------
    CostError
        [costs.modes] has no figures of a mode.
    """
    name = mode.where(~mode.isin(OWN_VEHICLE), ROAD)
    strange = name.notna() & ~name.isin(expected.columns)
    if strange.any():
        raise CostError(
            f"{int(strange.sum())} record(s) tell of a way of travelling that has no price; first: "
            f"{mode[strange].iloc[0]!r} in column 'mode' of record {record_id[strange].iloc[0]!r}. "
            f"Add [costs.modes.{mode[strange].iloc[0]}] with its fare and speed, or leave out "
            "[visits.columns] mode."
        )
    own = pd.DataFrame(
        {column: (name == column).astype("float64") for column in expected}, index=expected.index
    )
    return own.where(name.notna(), expected)


def expected_access_km(shares: pd.DataFrame, settings: CostsSettings) -> pd.Series[float]:
    """Kilometres that a party drives to stations and airports, there and back, as expected."""
    total = pd.Series(0.0, index=shares.index)
    for name, mode in settings.modes.items():
        total = total + shares[name] * 2 * mode.access_km
    return total


def expected_fares(
    one_way_km: pd.Series[float], shares: pd.DataFrame, figures: Figures
) -> pd.Series[float]:
    """Expected fares of a person, there and back: share × fare, over the modes that have one."""
    total = pd.Series(0.0, index=one_way_km.index)
    for name, mode in figures.settings.modes.items():
        fare = 2 * (mode.fare_per_person + mode.fare_per_km * one_way_km)
        total = total + shares[name] * fare * figures.factor("modes")
    return total


def expected_hours(
    one_way_km: pd.Series[float], shares: pd.DataFrame, settings: CostsSettings
) -> pd.Series[float]:
    """Expected hours of a person in the modes other than the road, there and back."""
    total = pd.Series(0.0, index=one_way_km.index)
    for name, mode in settings.modes.items():
        total = total + shares[name] * 2 * (one_way_km / mode.speed_kmh + mode.extra_min / 60)
    return total
