"""What is hidden before anything is published: small cells, and every record.

A zone with few visit records may point at a household. Counts from 1 to n − 1 are blanked with
everything that would give them away. Zero is published: it tells of nobody.

A total gives a blank away: published are, of each site, the visits of the market and, through
the known total, those from outside it. So in each of these two blocks further counts are
blanked, the smallest first, until what is hidden holds at least two counts and so much that
none of them is known to within n, even to somebody who knows that every one is at least 1
(complementary suppression: Willenborg and de Waal, Elements of Statistical Disclosure Control,
2001, from memory). The reason that stands beside a blank does not say which of the two it is,
for that would narrow it down. A block too small to hide anything in is named.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
import pandas as pd

COUNT_COLUMNS = ("sampled_records", "sampled_visits", "visits")
HIDDEN_COLUMNS = (
    "sampled_records",
    "sampled_visits",
    "visits",
    "visits_se",
    "visits_per_1000",
    "expansion_factor",
    "other_purpose_visits",
    "multi_purpose",
)
GIVEN_AWAY = "; the total gives it away"
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
    counts = zone_table[name].fillna(0.0)
    small = (counts > 0) & (counts < below)
    hidden, exposed = _with_company(zone_table, counts, small, below)
    words = f"fewer than {below} records, or hides such a zone"
    note = np.where(exposed, words + GIVEN_AWAY, words)
    result = zone_table.copy()
    result.loc[hidden, [c for c in HIDDEN_COLUMNS if c in result]] = np.nan
    result[REASON] = pd.Series(note, index=result.index, dtype="str").where(hidden)
    return result


def _with_company(
    zone_table: pd.DataFrame, counts: pd.Series, small: pd.Series, below: int
) -> tuple[pd.Series, pd.Series]:
    """What to hide, and which of it the total of its block gives away all the same."""
    hidden, exposed = small.copy(), pd.Series(data=False, index=zone_table.index)
    inside = zone_table.get("in_market", True)
    block = zone_table.assign(inside=inside)[["site_id", "inside"]]
    for _, rows in block[counts > 0].groupby(["site_id", "inside"], sort=True):
        ordered = counts.loc[rows.index].sort_values(kind="stable")
        number = int(small[rows.index].sum())
        if number == 0:
            continue
        while number < len(ordered) and not is_safe(ordered.iloc[:number].to_numpy(), below):
            number += 1
        company = ordered.index[:number]
        hidden.loc[company] = True
        exposed.loc[company] = not is_safe(ordered.iloc[:number].to_numpy(), below)
    return hidden, exposed


def is_safe(hidden_counts: npt.NDArray[np.float64], below: int) -> bool:
    """Whether counts that are hidden together cannot be told from their sum.

    Each is at least 1, so with k counts of sum S each lies between 1 and S − k + 1; that range
    is to span `below` or more.
    """
    number = len(hidden_counts)
    return number >= 2 and float(hidden_counts.sum()) - number >= below


def hide_residuals(
    residuals: pd.DataFrame | None, zone_table: pd.DataFrame | None
) -> pd.DataFrame | None:
    """Without the hidden zones: what a model leaves of a count gives the count away."""
    if residuals is None or zone_table is None or REASON not in zone_table:
        return residuals
    hidden = zone_table.loc[zone_table[REASON].notna(), ["zone_id", "site_id"]]
    key = pd.MultiIndex.from_frame(residuals[["zone_id", "site_id"]])
    return residuals[~key.isin(pd.MultiIndex.from_frame(hidden))].reset_index(drop=True)


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
