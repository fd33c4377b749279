"""Everything that the flow found out, in one place, with the questions a report asks of it."""

from __future__ import annotations

from dataclasses import dataclass

import geopandas as gpd
import pandas as pd

from pipeline.provenance import Provenance
from pipeline.publish.curve import Curve
from pipeline.publish.feecurve import FeeCurve
from pipeline.publish.rows import rows_of
from pipeline.study import Study

METHOD_ORDER = ("simulated", "delta")
VISITORS = {"all": "person", "adults": "adult", "vehicle": "vehicle"}


@dataclass(frozen=True)
class Figure:
    """One value in money (or another unit) with its interval."""

    value: float
    ci_low: float
    ci_high: float
    unit: str
    method: str
    note: str


@dataclass(frozen=True)
class Headline:
    """What a site is worth, from the model that was chosen for it.

    Attributes
    ----------
    annual_surplus : currency per year; None where the flow could not work it out.
    surplus_per_trip : currency per visit, of whom `Results.visitor` says.
    visits : such visits per year in the finished table.
    """

    site_id: str
    site_name: str
    model: str
    annual_surplus: Figure | None
    surplus_per_trip: Figure | None
    visits: float


@dataclass(frozen=True)
class Results:
    """The tables of a run. What a study did not build or bring is None.

    `zone_table` and `zone_surplus` are as they may be published: small cells are blank.
    """

    study: Study
    provenance: Provenance
    origin_summary: pd.DataFrame | None
    road_quality: pd.DataFrame | None
    road_lines: gpd.GeoDataFrame | None
    routes: pd.DataFrame | None
    route_lines: gpd.GeoDataFrame | None
    zones: gpd.GeoDataFrame | None
    sites: pd.DataFrame | None
    costs: pd.DataFrame | None
    reported_check: pd.DataFrame | None
    zone_table: pd.DataFrame | None
    trip_means: pd.DataFrame | None
    estimates: pd.DataFrame
    fit: pd.DataFrame
    surplus: pd.DataFrame
    fee_schedule: pd.DataFrame
    zone_surplus: pd.DataFrame
    sensitivity: pd.DataFrame
    curves: dict[str, Curve]
    fees: dict[str, FeeCurve]
    headlines: tuple[Headline, ...]
    diagnostics: pd.DataFrame | None = None
    residuals: pd.DataFrame | None = None
    route_quality: pd.DataFrame | None = None
    dropped_roads: gpd.GeoDataFrame | None = None

    @property
    def currency(self) -> str:
        """ISO code of the study's currency."""
        return self.study.study.currency

    @property
    def visitor(self) -> str:
        """Who makes a visit and bears its price: 'person', 'adult' or 'vehicle'."""
        return "person" if self.costs is None else VISITORS[self.study.costs.shared_by]

    def site_zones(self, site_id: str) -> pd.DataFrame | None:
        """The finished table's rows of one site."""
        if self.zone_table is None:
            return None
        return self.zone_table[self.zone_table["site_id"] == site_id]

    def site_name(self, site_id: str) -> str:
        """Name to show for a site; its identifier where there is no name."""
        return site_name(self.sites, site_id)


def site_name(sites: pd.DataFrame | None, site_id: str) -> str:
    """Name to show for a site; its identifier where there is no name."""
    if sites is None:
        return site_id
    names = sites.loc[sites["site_id"] == site_id, "site_name"].dropna()
    return str(names.iloc[0]) if len(names) else site_id


def headlines(
    fit: pd.DataFrame,
    surplus: pd.DataFrame,
    finished: pd.DataFrame,
    sites: pd.DataFrame | None,
) -> tuple[Headline, ...]:
    """What every site is worth, in the order of the `fit` table.

    Where a measure has intervals of several kinds the simulated one is the headline's: it
    follows the skewness of a ratio, which the delta method's cannot.

    Parameters
    ----------
    finished : `zone_table` or `trip_table`, before small cells are hidden.
    """
    chosen = fit[fit["chosen"].astype(bool)]
    return tuple(
        Headline(
            site_id=row.site_id,
            site_name=site_name(sites, row.site_id),
            model=row.model,
            annual_surplus=_measure(surplus, row.site_id, row.model, "annual_surplus"),
            surplus_per_trip=_measure(surplus, row.site_id, row.model, "surplus_per_trip"),
            visits=_visits(finished, row.site_id),
        )
        for row in rows_of(chosen)
    )


def _visits(finished: pd.DataFrame, site_id: str) -> float:
    """Person-visits per year of one site in the finished table."""
    rows = finished[finished["site_id"] == site_id]
    if "visits" in rows:
        return float(rows["visits"].sum())
    return float((rows["trips"] * rows.get("weight", 1.0)).sum())


def _measure(surplus: pd.DataFrame, site_id: str, model: str, measure: str) -> Figure | None:
    """A measure of the chosen model; the preferred kind of interval where there are several."""
    rows = surplus[
        (surplus["site_id"] == site_id)
        & (surplus["model"] == model)
        & (surplus["measure"] == measure)
    ]
    if rows.empty:
        return None
    rank = {method: first for first, method in enumerate(METHOD_ORDER)}
    place = rows["method"].map(rank).fillna(len(rank)).to_numpy()
    row = rows.iloc[int(place.argmin())]
    return Figure(
        value=float(row["value"]),
        ci_low=float(row["ci_low"]),
        ci_high=float(row["ci_high"]),
        unit=str(row["unit"]),
        method=str(row["method"]),
        note="" if pd.isna(row["note"]) else str(row["note"]),
    )
