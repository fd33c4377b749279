"""The publish stage: everything that people take away, made in memory, then written plainly."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import geopandas as gpd
import pandas as pd
from matplotlib.figure import Figure as Canvas

from pipeline.errors import PublishError
from pipeline.provenance import Provenance
from pipeline.publish.curve import fitted_curves
from pipeline.publish.descriptor import data_package
from pipeline.publish.effects import coarse
from pipeline.publish.feecurve import fee_curves
from pipeline.publish.figures import draw_figures, write_figures
from pipeline.publish.geofiles import write_geojson, write_geoparquet
from pipeline.publish.geopackage import About, write_geopackage
from pipeline.publish.layers import build_layers, dropped_roads, roads_in_use
from pipeline.publish.manifest import manifest_text, run_manifest
from pipeline.publish.privacy import (
    hide_residuals,
    hide_small_cells,
    hide_zone_surplus,
    trip_means,
)
from pipeline.publish.report import build_report
from pipeline.publish.reported import hide_few
from pipeline.publish.results import Headline, Results, headlines
from pipeline.publish.tabular import PUBLISHED, describe_tables, write_csv, write_table_files
from pipeline.publish.words import count
from pipeline.study import Study


@dataclass(frozen=True)
class Publication:
    """What people take away.

    Attributes
    ----------
    name : short name of the study; names the GeoPackage.
    crs : coordinate reference system of the GeoPackage.
    layers : GIS layers by name, in WGS 84.
    tables : published tables by name; small cells are blank, records of people are absent.
    dictionary : what every column of the tables means, one row per column.
    report : the report, one HTML page without any outside reference.
    manifest : content of run.json.
    attribution : whose road data it is, and under which licence.
    figures : figures for papers, by file name without its ending.
    headlines : what every site is worth.
    """

    name: str
    crs: str
    layers: dict[str, gpd.GeoDataFrame]
    tables: dict[str, pd.DataFrame]
    dictionary: pd.DataFrame
    report: str
    manifest: dict[str, Any]
    attribution: str
    figures: dict[str, Canvas]
    headlines: tuple[Headline, ...]

    def write(self, folder: Path) -> None:
        """Write report.html, run.json, layers, tables and datapackage.json into `folder`."""
        _write_text(self.report, folder / "report.html")
        _write_text(manifest_text(self.manifest), folder / "run.json")
        if self.layers:
            self._write_layers(folder)
        if self.figures:
            (folder / "figures").mkdir()
            write_figures(self.figures, folder / "figures")
        (folder / "tables").mkdir()
        for name, table in self.tables.items():
            write_table_files(table, folder / "tables", name)
        write_csv(self.dictionary, folder / "tables" / "data_dictionary.csv")
        package = data_package(
            folder,
            manifest=self.manifest,
            tables=self.tables,
            dictionary=self.dictionary,
            layers=self.layers,
            attribution=self.attribution,
            figures=tuple(self.figures),
        )
        _write_text(manifest_text(package), folder / "datapackage.json")

    def _write_layers(self, folder: Path) -> None:
        """`<name>.gpkg`, geojson/ and geoparquet/."""
        about = about_layers(self.manifest, attribution=self.attribution)
        currency = self.manifest["study"]["currency"]
        path = folder / f"{self.name}.gpkg"
        write_geopackage(self.layers, path, crs=self.crs, currency=currency, about=about)
        (folder / "geojson").mkdir()
        (folder / "geoparquet").mkdir()
        for name, layer in self.layers.items():
            write_geojson(layer, folder / "geojson" / f"{name}.geojson")
            write_geoparquet(layer, folder / "geoparquet" / f"{name}.parquet", crs=self.crs)


def about_layers(manifest: dict[str, Any], *, attribution: str) -> About:
    """The GeoPackage's own words about itself."""
    study = manifest["study"]
    values = " ".join(f"{headline['words']}." for headline in manifest["headline"])
    files = ", ".join(file["name"] for file in manifest["inputs"])
    versions = manifest["versions"]
    return About(
        title=study["title"],
        abstract=" ".join(words for words in (study["notice"], values) if words),
        licence=attribution,
        lineage=(
            f"Worked out by roadworth {versions.get('roadworth', '')} from {files or 'no file'}; "
            f"digests, settings and versions stand in the run's manifest (settings "
            f"{manifest['study_sha256'][:12]}, code {manifest['code_sha256'][:12]})."
        ),
        manifest=manifest_text(manifest),
    )


def _write_text(text: str, path: Path) -> None:
    path.write_text(text, encoding="utf-8", newline="\n")


def publish(
    provenance: Provenance,
    origin_summary: pd.DataFrame | None,
    road_quality: pd.DataFrame | None,
    road_lines: gpd.GeoDataFrame | None,
    routes: pd.DataFrame | None,
    route_lines: gpd.GeoDataFrame | None,
    zones: gpd.GeoDataFrame | None,
    sites: pd.DataFrame | None,
    costs: pd.DataFrame | None,
    reported_check: pd.DataFrame | None,
    zone_table: pd.DataFrame | None,
    trip_table: pd.DataFrame | None,
    estimates: pd.DataFrame,
    fit: pd.DataFrame,
    surplus: pd.DataFrame,
    fee_schedule: pd.DataFrame,
    zone_surplus: pd.DataFrame,
    sensitivity: pd.DataFrame,
    diagnostics: pd.DataFrame | None = None,
    residuals: pd.DataFrame | None = None,
    route_quality: pd.DataFrame | None = None,
    *,
    study: Study,
) -> tuple[Publication]:
    """Make the layers, tables, report and run.json of a run.

    Parameters
    ----------
    provenance : what the run was made from.
    origin_summary, ..., route_quality : the tables of the flow; those that the study neither
        built nor brought are None, and the report says what is missing for it.

    Raises
    ------
    PublishError
        There is no finished table, or no model was chosen for any site.
    """
    finished = _finished(zone_table, trip_table)
    if not fit["chosen"].any():
        raise PublishError(
            "no model is chosen for any site (column 'chosen' of the fit table is false in all "
            f"{len(fit)} rows), so there is no value to publish; see the notes in the fit table."
        )
    below = study.publish.suppress_below
    shown = None if zone_table is None else hide_small_cells(zone_table, below=below)
    results = Results(
        study=study,
        provenance=provenance,
        origin_summary=origin_summary,
        road_quality=road_quality,
        road_lines=roads_in_use(road_lines),
        dropped_roads=dropped_roads(road_lines),
        routes=routes,
        route_lines=route_lines,
        zones=zones,
        sites=sites,
        costs=costs,
        reported_check=hide_few(reported_check, below=below),
        zone_table=shown,
        trip_means=None if trip_table is None else trip_means(trip_table, below=below),
        estimates=estimates,
        fit=fit,
        surplus=surplus,
        fee_schedule=fee_schedule,
        zone_surplus=zone_surplus if shown is None else hide_zone_surplus(zone_surplus, shown),
        sensitivity=coarse(sensitivity) if below else sensitivity,
        diagnostics=diagnostics,
        residuals=hide_residuals(residuals, shown),
        route_quality=route_quality,
        curves=fitted_curves(zone_table, trip_table, estimates, fit, study=study),
        fees=fee_curves(zone_table, trip_table, estimates, fit, fee_schedule, study=study),
        headlines=headlines(fit, surplus, finished, sites),
    )
    return (_publication(results),)


def summarise_publish(outputs: tuple[Publication]) -> str:
    """What was written, and the headline values."""
    (publication,) = outputs
    parts = [
        "report.html",
        count(len(publication.layers), "layer"),
        count(len(publication.tables), "table"),
    ]
    values = [headline["words"] for headline in publication.manifest["headline"]]
    return "; ".join([", ".join(parts), *values])


def _finished(zone_table: pd.DataFrame | None, trip_table: pd.DataFrame | None) -> pd.DataFrame:
    finished = zone_table if zone_table is not None else trip_table
    if finished is None:
        raise PublishError(
            "neither a zone_table nor a trip_table was handed over, so there is nothing to "
            "publish; run the join stage, or name one under [market]."
        )
    return finished


def _publication(results: Results) -> Publication:
    names = {table.table_name() for table in PUBLISHED}
    tables = {
        name: table
        for name, table in vars(results).items()
        if name in names and isinstance(table, pd.DataFrame)
    }
    return Publication(
        name=results.study.study.name,
        crs=results.study.publish.crs,
        layers=build_layers(results),
        tables=tables,
        dictionary=describe_tables(tables, currency=results.currency),
        report=build_report(results),
        manifest=run_manifest(results),
        attribution=results.study.publish.attribution,
        figures=draw_figures(results),
        headlines=results.headlines,
    )
