"""The flow: the stages in their order, and what each reads and writes.

To find the stage that makes a table, look for the table's class under ``writes``. A stage is a
pure function: it gets what ``reads`` lists, in that order, and the study restricted to the
sections that it names; it returns what ``writes`` lists. Reading inputs, writing tables and
skipping what has not changed is the work of ``runner``.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from pipeline import inputs, records
from pipeline.cost_settings import CostsSettings
from pipeline.costs import cost_and_check, summarise_cost
from pipeline.demand import demand_with_diagnostics, summarise_demand
from pipeline.finished import join, summarise_join
from pipeline.origins import geocode, summarise_geocode
from pipeline.provenance import Provenance, trace
from pipeline.publish import Publication, publish, summarise_publish
from pipeline.road_settings import RoadsSettings, RoutesSettings
from pipeline.roads import (
    RoadExtract,
    RoadGraph,
    build_roads,
    read_extract,
    summarise_roads,
)
from pipeline.route_quality import route_and_check, summarise_routes
from pipeline.sections import Section
from pipeline.sensitivity import sensitivity, summarise_sensitivity
from pipeline.sensitivity_settings import SensitivitySettings
from pipeline.settings import (
    SECTIONS,
    ComputeSettings,
    DemandSettings,
    MarketSettings,
    ScenarioSettings,
    SitesSettings,
    SurplusSettings,
)
from pipeline.study import Study
from pipeline.surplus import summarise_surplus, surplus
from pipeline.tables import (
    Costs,
    Crosswalk,
    Diagnostics,
    Estimates,
    FeeSchedule,
    Fit,
    MeasuredTimes,
    Origins,
    OriginSummary,
    ReportedCheck,
    Residuals,
    RoadLines,
    RoadQuality,
    RouteLines,
    RouteQuality,
    Routes,
    Sensitivity,
    Sites,
    Surplus,
    TripTable,
    VisitRecords,
    ZonePoints,
    Zones,
    ZoneSurplus,
    ZoneTable,
)
from pipeline.visit_settings import VisitsSettings, ZonesSettings

Kind = type[Any]


@dataclass(frozen=True)
class Maybe:
    """A table that a stage takes where there is one, and does without where there is none."""

    kind: Kind


@dataclass(frozen=True)
class Either:
    """Tables of which a stage needs at least one; the others come as None."""

    kinds: tuple[Kind, ...]


Read = Kind | Maybe | Either


@dataclass(frozen=True)
class Stage:
    """One step of the flow.

    Attributes
    ----------
    name : as on the command line.
    run : the pure function; gets what `reads` lists and the keyword `study`.
    reads, writes : classes of tables and artefacts, in the order of arguments and results; a
        stage returns None for a table that the study does not ask for.
    sections : sections of the study that it reads beside [study].
    summarise : one line for people from what it returned.
    """

    name: str
    run: Callable[..., tuple[Any, ...]]
    reads: tuple[Read, ...]
    writes: tuple[Kind, ...]
    sections: tuple[type[Section], ...]
    summarise: Callable[[tuple[Any, ...]], str]

    def read_kinds(self) -> Iterator[tuple[Kind, bool]]:
        """Every class that it reads, with whether the stage that writes it must have run."""
        for item in self.reads:
            if isinstance(item, Maybe):
                yield item.kind, False
            elif isinstance(item, Either):
                yield from ((kind, True) for kind in item.kinds)
            else:
                yield item, True


@dataclass(frozen=True)
class Input:
    """Something that is read from the study's own files: its class, reader, sections, key."""

    kind: Kind
    read: Callable[[Study], Any]
    sections: tuple[type[Section], ...]
    key: str


def _extract(study: Study) -> RoadExtract:
    return read_extract(study.roads.files, study.roads)


INPUTS: dict[Kind, Input] = {
    item.kind: item
    for item in (
        Input(
            VisitRecords,
            records.read_visit_records,
            (VisitsSettings, SitesSettings),
            "visits.file",
        ),
        Input(Zones, inputs.read_zones, (ZonesSettings,), "zones.file"),
        Input(ZonePoints, inputs.read_zone_points, (ZonesSettings,), "zones.points.file"),
        Input(MeasuredTimes, inputs.read_measured_times, (RoutesSettings,), "routes.measured.file"),
        Input(Crosswalk, inputs.read_crosswalk, (VisitsSettings,), "visits.crosswalk"),
        Input(Sites, inputs.read_sites, (SitesSettings,), "sites.file"),
        Input(RoadExtract, _extract, (RoadsSettings,), "roads.files"),
        Input(Provenance, trace, SECTIONS[1:], "study"),
    )
}

BROUGHT: dict[Kind, Callable[[Study], Path | None]] = {
    Routes: lambda study: study.routes.table,
    ZoneTable: lambda study: study.market.zone_table,
    TripTable: lambda study: study.market.trip_table,
}

FINISHED = Either((ZoneTable, TripTable))

FLOW: tuple[Stage, ...] = (
    Stage(
        "geocode",
        geocode,
        reads=(VisitRecords, Zones, Maybe(Crosswalk)),
        writes=(Origins, OriginSummary),
        sections=(VisitsSettings, ZonesSettings, SitesSettings),
        summarise=summarise_geocode,
    ),
    Stage(
        "roads",
        build_roads,
        reads=(RoadExtract,),
        writes=(RoadGraph, RoadQuality, RoadLines),
        sections=(RoadsSettings,),
        summarise=summarise_roads,
    ),
    Stage(
        "route",
        route_and_check,
        reads=(Zones, Sites, RoadGraph, Maybe(ZonePoints), Maybe(MeasuredTimes)),
        writes=(Routes, RouteLines, RouteQuality),
        sections=(RoutesSettings, RoadsSettings, ComputeSettings),
        summarise=summarise_routes,
    ),
    Stage(
        "cost",
        cost_and_check,
        reads=(Routes, Zones, Sites, Maybe(Origins)),
        writes=(Costs, ReportedCheck),
        sections=(CostsSettings,),
        summarise=summarise_cost,
    ),
    Stage(
        "join",
        join,
        reads=(Origins, Costs, Routes, Zones, Sites),
        writes=(ZoneTable, TripTable),
        sections=(VisitsSettings, MarketSettings, ZonesSettings, CostsSettings),
        summarise=summarise_join,
    ),
    Stage(
        "demand",
        demand_with_diagnostics,
        reads=(FINISHED, Maybe(Zones)),
        writes=(Estimates, Fit, Diagnostics, Residuals),
        sections=(DemandSettings, SurplusSettings, ComputeSettings),
        summarise=summarise_demand,
    ),
    Stage(
        "surplus",
        surplus,
        reads=(Estimates, Fit, FINISHED),
        writes=(Surplus, FeeSchedule, ZoneSurplus),
        sections=(DemandSettings, SurplusSettings, ComputeSettings),
        summarise=summarise_surplus,
    ),
    Stage(
        "sensitivity",
        sensitivity,
        reads=(
            Maybe(Origins),
            Maybe(Routes),
            Maybe(Zones),
            Maybe(Sites),
            FINISHED,
            Fit,
            Surplus,
            Maybe(RoadGraph),
            Maybe(ZonePoints),
        ),
        writes=(Sensitivity,),
        sections=(
            RoutesSettings,
            CostsSettings,
            VisitsSettings,
            ZonesSettings,
            MarketSettings,
            DemandSettings,
            SurplusSettings,
            SensitivitySettings,
            ComputeSettings,
        ),
        summarise=summarise_sensitivity,
    ),
    Stage(
        "publish",
        publish,
        reads=(
            Provenance,
            Maybe(OriginSummary),
            Maybe(RoadQuality),
            Maybe(RoadLines),
            Maybe(Routes),
            Maybe(RouteLines),
            Maybe(Zones),
            Maybe(Sites),
            Maybe(Costs),
            Maybe(ReportedCheck),
            FINISHED,
            Estimates,
            Fit,
            Surplus,
            FeeSchedule,
            ZoneSurplus,
            Sensitivity,
            Maybe(Diagnostics),
            Maybe(Residuals),
            Maybe(RouteQuality),
        ),
        writes=(Publication,),
        sections=(*SECTIONS[1:], ScenarioSettings),
        summarise=summarise_publish,
    ),
)

STAGES: dict[str, Stage] = {stage.name: stage for stage in FLOW}


def brought(study: Study) -> dict[Kind, Path]:
    """Tables that the study brings ready made, with their files."""
    paths = {kind: path(study) for kind, path in BROUGHT.items()}
    return {kind: path for kind, path in paths.items() if path is not None}


def plan(study: Study) -> tuple[Stage, ...]:
    """The stages that a study needs: from publish backwards, as far as it brings no table."""
    ready = brought(study)
    finished_ready = any(kind in ready for kind in FINISHED.kinds)
    wanted = set(FLOW[-1].writes)
    stages: list[Stage] = []
    for stage in reversed(FLOW):
        if not wanted.intersection(stage.writes):
            continue
        stages.append(stage)
        for kind, needed in stage.read_kinds():
            is_ready = kind in ready or (finished_ready and kind in FINISHED.kinds)
            if needed and not is_ready:
                wanted.add(kind)
    return tuple(reversed(stages))
