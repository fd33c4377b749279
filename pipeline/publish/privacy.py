"""What is hidden before anything is published: small cells, and every record.

A zone with few visit records may point at a household. Counts from 1 to n − 1 are blanked with
everything that would give them away, and the reason stands beside them. Zero is published: it
tells of nobody. Where a site would be left with a single blank, its next smallest count is
blanked too, or the known total would give the blank away (complementary suppression: Willenborg
and de Waal, Elements of Statistical Disclosure Control, 2001, from memory).
"""

from __future__ import annotations

import numpy as np
import pandas as pd

COUNT_COLUMNS = ("sampled_records", "sampled_visits", "visits")
HIDDEN_COLUMNS = (
    "sampled_records",
    "sampled_visits",
    "visits",
    "visits_se",
    "visits_per_1000",
)
REASON = "hidden_note"
FEWEST_PER_MEAN = 5


def hide_small_cells(zone_table: pd.DataFrame, *, below: int) -> pd.DataFrame:
    """Blank the visit figures of zones with few records; `hidden_note` says why.

    Parameters
    ----------
    zone_table : one row per zone and site. The count is `sampled_records` where the table has
        it, else `sampled_visits`, else `visits`.
    below : counts from 1 to `below` − 1 are hidden; 0 hides nothing and adds no column.
    """
    if below < 1:
        return zone_table
    name = next(column for column in COUNT_COLUMNS if column in zone_table)
    counts = zone_table[name]
    small = (counts > 0) & (counts < below)
    partner = _partners(zone_table, counts, small)
    hidden = small | partner
    note = np.select([small, partner], [f"count below {below}", "protects another"], "")
    result = zone_table.copy()
    result.loc[hidden, [c for c in HIDDEN_COLUMNS if c in result]] = np.nan
    result[REASON] = pd.Series(note, index=result.index, dtype="str").where(hidden)
    return result


def _partners(zone_table: pd.DataFrame, counts: pd.Series, small: pd.Series) -> pd.Series:
    """The next smallest count of every site that has exactly one small one."""
    partner = pd.Series(data=False, index=zone_table.index)
    for site_id in zone_table["site_id"].unique():
        of_site = zone_table["site_id"] == site_id
        others = counts[of_site & ~small & (counts > 0)]
        if (small & of_site).sum() == 1 and len(others):
            partner.loc[others.index[int(others.argmin())]] = True
    return partner


def hide_zone_surplus(zone_surplus: pd.DataFrame, zone_table: pd.DataFrame) -> pd.DataFrame:
    """Blank the surplus of hidden zones, from which their visits could be worked out."""
    if REASON not in zone_table:
        return zone_surplus
    hidden = zone_table.loc[zone_table[REASON].notna(), ["zone_id", "site_id"]]
    key = pd.MultiIndex.from_frame(zone_surplus[["zone_id", "site_id"]])
    blank = key.isin(pd.MultiIndex.from_frame(hidden))
    result = zone_surplus.copy()
    result.loc[blank, ["annual_surplus"]] = np.nan
    return result


def trip_means(trip_table: pd.DataFrame, *, below: int) -> pd.DataFrame:
    """Mean trips by classes of travel cost, so that no record is ever shown.

    Returns
    -------
    One row per site and class: `site_id, travel_cost, trips, records`; weighted means. Every
    class holds at least as many records as `below`, and never fewer than five.
    """
    fewest = max(below, FEWEST_PER_MEAN)
    rows = []
    for site_id, records in trip_table.groupby("site_id"):
        ordered = records.sort_values(["travel_cost", "record_id"], kind="stable")
        classes = max(1, min(12, len(ordered) // fewest))
        for part in np.array_split(np.arange(len(ordered)), classes):
            if len(part) < fewest:
                continue
            cell = ordered.iloc[part]
            weight = cell["weight"] if "weight" in cell else pd.Series(1.0, index=cell.index)
            total = max(float(weight.sum()), np.finfo(float).tiny)
            rows.append(
                {
                    "site_id": site_id,
                    "travel_cost": float((cell["travel_cost"] * weight).sum()) / total,
                    "trips": float((cell["trips"] * weight).sum()) / total,
                    "records": len(cell),
                }
            )
    return pd.DataFrame(rows, columns=["site_id", "travel_cost", "trips", "records"])
