"""From the finished table to samples: one per site, of the rows that a regression can use.

A row without a cost, a covariate, inhabitants or a weight is left out, and the sample's notes say
how many and why.
"""

from __future__ import annotations

import difflib
from dataclasses import replace
from typing import Any

import numpy as np
import pandas as pd

from pipeline.demand.sample import CONST, PER_ZONE_RATE, PRICE, FloatArray, Sample
from pipeline.errors import DemandError
from pipeline.settings import DemandSettings

RESPONSES = ("visits", "sampled_visits", "visits_per_1000", "trips")
SITE_EFFECT = "site:"
CLUSTER_CODE = "cluster_code"


def study_samples(
    zone_table: pd.DataFrame | None, trip_table: pd.DataFrame | None, settings: DemandSettings
) -> list[Sample]:
    """The samples that the [demand] section of a study asks for."""
    return build_samples(
        zone_table,
        trip_table,
        settings.covariates,
        zero_terms=settings.zero_part,
        cluster=settings.cluster,
        site_effects=settings.site_effects,
    )


def build_samples(
    zone_table: pd.DataFrame | None,
    trip_table: pd.DataFrame | None,
    covariates: tuple[str, ...],
    *,
    zero_terms: tuple[str, ...] | None = None,
    cluster: str | None = None,
    site_effects: bool = False,
) -> list[Sample]:
    """One sample per site, sites in alphabetical order; the records where there are any.

    Parameters
    ----------
    zone_table : one row per zone and site, or None.
    trip_table : one row per record, or None; where both are given the records are used.
    covariates : columns that stand in the regression beside the travel cost.
    zero_terms : regressors beside the constant in the part about zeros of a hurdle or
        zero-inflated model; None leaves it to the model.
    cluster : column whose equal values make a cluster.
    site_effects : add a constant for every site but the first; the samples of the sites can
        then be stacked (`stacked`).

    Raises
    ------
    DemandError
        Neither table is given, or a covariate is not there, not a number, or the response.
    """
    table = trip_table if trip_table is not None else zone_table
    if table is None:
        raise DemandError(
            "neither a zone_table nor a trip_table is there to fit a demand to; "
            "run the join stage or bring one ([market] zone_table or trip_table)."
        )
    _check_covariates(table, covariates)
    if table.empty:
        raise DemandError("the finished table has no rows; nothing can be fitted to it.")
    table, covariates = _with_site_effects(table, covariates, wanted=site_effects)
    table = _with_cluster_codes(table, cluster)
    build = _zone_sample if trip_table is None else _trip_sample
    return [
        replace(
            build(str(site_id), rows, covariates),
            zero_terms=_checked_zero_terms(zero_terms, covariates),
        )
        for site_id, rows in table.groupby("site_id", sort=True)
    ]


def _with_site_effects(
    table: pd.DataFrame, covariates: tuple[str, ...], *, wanted: bool
) -> tuple[pd.DataFrame, tuple[str, ...]]:
    if not wanted:
        return table, covariates
    others = sorted(table["site_id"].astype(str).unique())[1:]
    effects = {
        f"{SITE_EFFECT}{site}": table["site_id"].astype(str).eq(site).astype(float)
        for site in others
    }
    return table.assign(**effects), (*covariates, *effects)


def _with_cluster_codes(table: pd.DataFrame, cluster: str | None) -> pd.DataFrame:
    if cluster is None:
        return table
    if cluster not in table:
        raise DemandError(
            f"demand.cluster names {cluster!r}, which is no column of the finished table; "
            "name one whose equal values belong together (zone_id)."
        )
    codes, _ = pd.factorize(table[cluster], use_na_sentinel=False)
    return table.assign(**{CLUSTER_CODE: codes})


def _checked_zero_terms(
    zero_terms: tuple[str, ...] | None, covariates: tuple[str, ...]
) -> tuple[str, ...] | None:
    if zero_terms is None:
        return None
    strange = [term for term in zero_terms if term not in (PRICE, *covariates)]
    if strange:
        raise DemandError(
            f"demand.zero_part names {strange[0]!r}, which is neither {PRICE!r} nor one of "
            "demand.covariates; add it there or remove it."
        )
    return (CONST, *zero_terms)


def _optional_arrays(used: pd.DataFrame) -> dict[str, Any]:
    """Clusters, errors of the visits and positions, as far as the table has them."""
    found: dict[str, Any] = {}
    if CLUSTER_CODE in used:
        found["clusters"] = used[CLUSTER_CODE].to_numpy(dtype=np.intp)
    if "visits_se" in used and used["visits_se"].notna().all():
        found["visits_se"] = used["visits_se"].to_numpy(dtype=float)
    if {"lon", "lat"} <= set(used) and used[["lon", "lat"]].notna().all(axis=None):
        found["positions"] = used[["lon", "lat"]].to_numpy(dtype=float)
    return found


def _check_covariates(table: pd.DataFrame, covariates: tuple[str, ...]) -> None:
    for name in covariates:
        if name in (PRICE, *RESPONSES) or covariates.count(name) > 1:
            raise DemandError(
                f"demand.covariates names {name!r}, which is in the regression already; remove it."
            )
        if name not in table:
            near = difflib.get_close_matches(name, list(table.columns), n=1)
            hint = f" Did you mean {near[0]!r}?" if near else ""
            raise DemandError(
                f"demand.covariates names {name!r}, which is no column of the finished table."
                f"{hint} Correct demand.covariates or add the column (zones.covariates)."
            )
        if not pd.api.types.is_numeric_dtype(table[name]):
            raise DemandError(
                f"covariate {name!r} is not a number (first value: {table[name].iloc[0]!r}); "
                "turn categories into columns of 0 and 1."
            )


def _zone_sample(site_id: str, rows: pd.DataFrame, covariates: tuple[str, ...]) -> Sample:
    in_market = rows["in_market"].astype(bool) if "in_market" in rows else rows["visits"].ge(0)
    market = rows[in_market]
    lacking = {"inhabitants": market["population"].le(0)}
    used, notes = _usable(market, covariates, lacking, visits="visits")
    population = used["population"].to_numpy(dtype=float)
    visits = used["visits"].to_numpy(dtype=float)
    counts, expansion, expansion_notes = _counts_before_expansion(used, visits)
    return Sample(
        site_id=site_id,
        zone_ids=tuple(used["zone_id"].astype(str)),
        terms=(CONST, PRICE, *covariates),
        design=_design(used, covariates),
        counts=counts,
        exposure=population / expansion,
        weight=np.ones(len(used)),
        people=population,
        visits=visits,
        per=PER_ZONE_RATE,
        notes=(*notes, *expansion_notes),
        **_optional_arrays(used),
    )


def _trip_sample(site_id: str, rows: pd.DataFrame, covariates: tuple[str, ...]) -> Sample:
    weights = rows["weight"] if "weight" in rows else pd.Series(1.0, index=rows.index)
    weighted = rows.assign(weight=weights, visits=rows["trips"] * weights)
    lacking = {"weight": ~weighted["weight"].gt(0)}
    used, notes = _usable(weighted, covariates, lacking, visits="visits")
    people = used["weight"].to_numpy(dtype=float)
    if "weight" not in rows:
        notes = (*notes, "Without weights the annual figures are those of the records alone.")
    zone_ids = used["zone_id"] if "zone_id" in used else pd.Series("", index=used.index)
    return Sample(
        site_id=site_id,
        zone_ids=tuple(zone_ids.fillna("").astype(str)),
        terms=(CONST, PRICE, *covariates),
        design=_design(used, covariates),
        counts=used["trips"].to_numpy(dtype=float),
        exposure=np.ones(len(used)),
        weight=_likelihood_weights(used),
        people=people,
        visits=used["visits"].to_numpy(dtype=float),
        per=1.0,
        notes=notes,
        **_optional_arrays(used),
    )


def _likelihood_weights(rows: pd.DataFrame) -> FloatArray:
    """What each record counts for in the likelihood.

    Where records of visitors met on the site stand for fewer people the more often they came,
    the on-site models correct for that already, and `sampling_weight` is without it. Weights
    that average one leave the likelihood on the scale of the records.
    """
    name = "sampling_weight" if "sampling_weight" in rows else "weight"
    weights = rows[name].to_numpy(dtype=float)
    return weights / weights.mean() if len(weights) else weights


def _usable(
    rows: pd.DataFrame, covariates: tuple[str, ...], lacking: dict[str, pd.Series], *, visits: str
) -> tuple[pd.DataFrame, tuple[str, ...]]:
    """Rows with everything that the regression needs, and how many lack what."""
    reasons = {name: rows[name].isna() for name in (PRICE, *covariates)} | lacking
    out = pd.Series(data=False, index=rows.index)
    parts = []
    for name, lacks in reasons.items():
        if lacks.any():
            parts.append(f"{int(lacks.sum()):,} without {name}")
            out |= lacks
    if not parts:
        return rows, ()
    lost = float(rows.loc[out, visits].sum())
    return rows[~out], (
        (
            f"{int(out.sum()):,} of {len(rows):,} rows are left out ({', '.join(parts)}); "
            f"their {lost:,.0f} visits a year are in no figure."
        ),
    )


def _design(rows: pd.DataFrame, covariates: tuple[str, ...]) -> FloatArray:
    columns = [np.ones(len(rows))]
    columns += [rows[name].to_numpy(dtype=float) for name in (PRICE, *covariates)]
    return np.column_stack(columns)


def _counts_before_expansion(
    rows: pd.DataFrame, visits: FloatArray
) -> tuple[FloatArray, float, tuple[str, ...]]:
    """Counts to fit, annual visits per counted visit, and what to know about them."""
    if "sampled_visits" not in rows or rows["sampled_visits"].isna().any():
        return visits, 1.0, ("Visits are taken as counted in full (no complete sampled_visits).",)
    sampled = rows["sampled_visits"].to_numpy(dtype=float)
    if sampled.sum() <= 0 or visits.sum() <= 0:
        return sampled, 1.0, ()
    expansion = float(visits.sum() / sampled.sum())
    if np.allclose(visits, sampled * expansion, rtol=1e-6, atol=1e-9 * expansion):
        return sampled, expansion, ()
    # Weighted records: the weighted visits, brought back to the size of the sample.
    return (
        visits / expansion,
        expansion,
        ("The expansion differs between zones (weighted records): weighted counts are fitted.",),
    )
