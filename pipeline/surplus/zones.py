"""Where the surplus goes: predicted visits and surplus of each zone."""

from __future__ import annotations

import numpy as np
import pandas as pd

from pipeline.demand.family import FittedModel
from pipeline.demand.registry import FAMILIES
from pipeline.demand.sample import Sample


def zone_rows(model: FittedModel, sample: Sample) -> pd.DataFrame:
    """Rows of `zone_surplus` for the zones that the model was fitted to.

    A zone's surplus is that of its predicted visits, scaled so that the zones add up to
    ``annual_surplus``. Predicted visits, not the zone's own count, so that one party more or
    less from a village does not colour the map and no small count can be worked back from it.
    """
    visits, area = FAMILIES[model.model].predict(model.estimate, sample)
    falls = FAMILIES[model.model].falls(model.estimate[None, :], sample)[0]
    scale = sample.annual_visits / visits.sum() if visits.sum() > 0 else 0.0
    rows = pd.DataFrame(
        {
            "zone_id": list(sample.zone_ids),
            "people": sample.people,
            "predicted_visits": visits,
            "annual_surplus": area * scale if falls else np.nan,
        }
    )
    by_zone = rows[rows["zone_id"] != ""].groupby("zone_id", sort=False)
    zones = by_zone.sum(min_count=1).reset_index()
    zones["surplus_per_person"] = zones["annual_surplus"] / zones["people"]
    return zones.drop(columns="people").assign(site_id=sample.site_id)


def every_zone(rows: list[pd.DataFrame], table: pd.DataFrame) -> pd.DataFrame:
    """The zones of all sites, with those that are in no regression as rows without figures."""
    if "zone_id" not in table:
        table = table.assign(zone_id=None)
    pairs = table[["zone_id", "site_id"]].dropna().drop_duplicates()
    figures = ["predicted_visits", "annual_surplus", "surplus_per_person"]
    found = pd.concat(rows, ignore_index=True).astype({"zone_id": str, "site_id": str})
    pairs = pairs.astype({"zone_id": str, "site_id": str})
    merged = pairs.merge(found, on=["zone_id", "site_id"], how="left", validate="one_to_one")
    return merged[["zone_id", "site_id", *figures]].reset_index(drop=True)
