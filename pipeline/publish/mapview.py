"""The map of a site: zones by class, roads and routes over them, sites by name."""

from __future__ import annotations

from dataclasses import dataclass

import geopandas as gpd
import numpy as np
import numpy.typing as npt
import pandas as pd
import shapely

from pipeline.publish import mapframe
from pipeline.publish.labels import place_labels
from pipeline.publish.legend import class_name, legend, marker
from pipeline.publish.mapframe import MapFrame
from pipeline.publish.mapmeasures import MapFigures, Measure
from pipeline.publish.markup import Html, join, tag
from pipeline.publish.results import Results
from pipeline.publish.rows import rows_of
from pipeline.publish.stretches import take_apart
from pipeline.publish.words import number

LABEL_SIZE = 25.0
MOST_LABELS = 12
MOST_ROAD_PX = 25_000.0
MOST_NAMED_ZONES = 4_000
ROAD_RANK = (
    ("ferry",),
    ("motorway", "motorway_link", "trunk", "trunk_link"),
    ("primary", "primary_link"),
    ("secondary", "secondary_link"),
    ("tertiary", "tertiary_link"),
    ("unclassified", "residential", "living_street", "road", "service", "track"),
)


@dataclass(frozen=True)
class BaseMap:
    """What all maps of a run share: frame and shapes, defined once and used by reference."""

    frame: MapFrame
    defs: Html
    zone_names: dict[str, str]
    has_areas: bool
    has_roads: bool
    left_out: str


def base_map(results: Results) -> BaseMap | None:
    """Frame and shapes of the run's maps; None where there are no zones to draw."""
    zones = results.zones
    if zones is None or not len(zones):
        return None
    frame = mapframe.frame_around(_extent(zones, results.sites))
    shapes, has_areas = _zone_shapes(zones, frame)
    roads, left_out = _road_shapes(results.road_lines, frame)
    names = zones["zone_name"].where(zones["zone_name"].notna(), zones["zone_id"])
    defs = tag("defs", shapes, roads, _lines_across(), _dotted(), tag("g", id="nowhere"))
    return BaseMap(
        frame=frame,
        defs=tag("svg", defs, class_="store", width=0, height=0, aria_hidden="true"),
        zone_names=dict(zip(zones["zone_id"].astype(str), names.astype(str), strict=True)),
        has_areas=has_areas,
        has_roads=bool(roads),
        left_out=left_out,
    )


def _extent(zones: gpd.GeoDataFrame, sites: pd.DataFrame | None) -> gpd.GeoSeries:
    shapes = list(zones.geometry)
    if sites is not None:
        shapes += list(gpd.GeoSeries.from_xy(sites["lon"], sites["lat"]))
    return gpd.GeoSeries(shapes, crs="EPSG:4326")


def _zone_shapes(zones: gpd.GeoDataFrame, frame: MapFrame) -> tuple[Html, bool]:
    """One shape per zone (`z0`, `z1`, ...): its area, or a dot where it has none."""
    shapes = frame.project(zones.geometry)
    is_area = shapely.get_dimensions(shapes) == 2
    if is_area.any():
        thin = mapframe.simplified_areas(shapes[is_area], 0.9 * frame.metres_per_px)
        shapes = shapes.copy()
        shapes[is_area] = thin
    parts = [
        tag("path", id=f"z{i}", d=mapframe.area_path(shape, frame))
        if area
        else _dot(i, shape, frame, len(shapes))
        for i, (shape, area) in enumerate(zip(shapes, is_area, strict=True))
    ]
    return join(parts), bool(is_area.any())


def _dot(index: int, shape: shapely.Geometry, frame: MapFrame, total: int) -> Html:
    """A zone without an area: a dot, smaller where there are many."""
    x, y = frame.tenths(shapely.get_coordinates(shapely.centroid(shape)))[0]
    return tag("circle", id=f"z{index}", cx=x, cy=y, r=70 if total < 150 else 45)


def _road_shapes(lines: gpd.GeoDataFrame | None, frame: MapFrame) -> tuple[Html, str]:
    """Roads by rank, the great ones first, until they would hide the zones."""
    if lines is None or not len(lines):
        return Html(""), ""
    parts: list[Html] = []
    drawn_px = 0.0
    for rank, kinds in enumerate(ROAD_RANK):
        of_rank = lines[lines["road_class"].isin(kinds)]
        if of_rank.empty:
            continue
        shapes = mapframe.simplified_lines(frame.project(of_rank.geometry), frame.metres_per_px)
        drawn_px += float(shapely.length(shapes).sum()) / frame.metres_per_px
        if drawn_px > MOST_ROAD_PX and parts:
            return tag("g", *parts, id="road-lines"), "minor roads are not drawn"
        kind = "ferry" if rank == 0 else f"road rank{rank}"
        parts.append(tag("path", class_=kind, d=mapframe.line_path(shapes, frame)))
    return tag("g", *parts, id="road-lines"), ""


def _lines_across() -> Html:
    """Lines over a zone that is outside the market."""
    stroke = tag("line", x1=0, y1=0, x2=0, y2=70, class_="hatch")
    return tag("pattern", stroke, id="outside", patternTransform="rotate(45)", **_TILE)


def _dotted() -> Html:
    """Dots in a zone without a figure."""
    return tag("pattern", tag("circle", cx=35, cy=35, r=9, class_="void"), id="nothing", **_TILE)


_TILE: dict[str, object] = {"width": 70, "height": 70, "patternUnits": "userSpaceOnUse"}


def draw_map(results: Results, base: BaseMap, figures: MapFigures) -> Html:
    """Map of one site by its first measure, with the legends of all; a script switches them."""
    first = figures.measures[0]
    picture = tag(
        "svg",
        tag("title", first.title),
        tag(
            "g",
            _zones(base, first, figures.outside),
            tag("use", href="#road-lines", class_="casing") if base.has_roads else None,
            tag("use", href="#road-lines", class_="roads") if base.has_roads else None,
            _routes(results, base, figures.site_id),
            tag("use", href="#nowhere", class_="pick"),
            transform="scale(.1)",
        ),
        _sites(results, base, figures.site_id),
        _scale(base.frame),
        viewBox=f"0 0 {base.frame.width:g} {base.frame.height:g}",
        role="img",
        class_="map",
    )
    legends = [
        legend(measure, figures.outside, results, hidden=place > 0)
        for place, measure in enumerate(figures.measures)
    ]
    return join([picture, *legends])


def _zones(base: BaseMap, measure: Measure, outside: npt.NDArray[np.bool_]) -> Html:
    named = len(outside) <= MOST_NAMED_ZONES
    used = []
    rows = zip(base.zone_names.values(), measure.values, measure.places, strict=True)
    for i, (name, rate, place) in enumerate(rows):
        words = "no figure" if place == -2 else f"{number(rate)} visits per 1,000"
        class_ = class_name(int(place), len(measure.classes))
        title = tag("title", f"{name}: {words}") if named else None
        used.append(tag("use", title, href=f"#z{i}", class_=class_))
        if outside[i]:
            used.append(tag("use", href=f"#z{i}", class_="over"))
    return tag("g", *used, class_="zones shapes" if base.has_areas else "zones shapes dots")


def _routes(results: Results, base: BaseMap, site_id: str) -> Html | None:
    lines = results.route_lines
    if lines is None:
        return None
    of_site = lines[lines["site_id"] == site_id]
    if of_site.empty:
        return None
    shapes = _once(base.frame.project(of_site.geometry), base.frame)
    return tag("path", class_="routes", d=mapframe.line_path(shapes, base.frame))


def _once(lines: npt.NDArray[np.object_], frame: MapFrame) -> npt.NDArray[np.object_]:
    """Lines with every stretch kept once, however many routes run over it."""
    ends = take_apart(lines, decimals=1).ends
    if not len(ends):
        return np.array([], dtype=object)
    lines = np.asarray(shapely.linestrings(ends), dtype=object)
    return mapframe.simplified_lines(lines, frame.metres_per_px)


def _sites(results: Results, base: BaseMap, site_id: str) -> Html | None:
    if results.sites is None:
        return None
    sites = results.sites.assign(rank=results.sites["role"].eq("substitute").astype(int))
    sites.loc[sites["site_id"] == site_id, "rank"] = -1
    sites = sites.sort_values(["rank", "site_id", "access_id"], kind="stable")
    marks: list[Html] = []
    named: list[tuple[str, float, float]] = []
    for row in rows_of(sites):
        x, y = base.frame.place(row.lon, row.lat)
        marks.append(marker(x, y, str(row.role) if row.site_id != site_id else "here"))
        if str(row.site_name) not in [name for name, _, _ in named]:
            named.append((str(row.site_name), x, y))
    labels = place_labels(
        named[:MOST_LABELS], size=LABEL_SIZE, width=base.frame.width, height=base.frame.height
    )
    names = [
        tag("text", label.name, x=f"{label.x:.1f}", y=f"{label.y:.1f}", text_anchor=label.anchor)
        for label in labels
    ]
    return tag("g", *marks, tag("g", *names, class_="names"))


def _scale(frame: MapFrame) -> Html:
    length_km, length_px = mapframe.scale_bar(frame)
    y = frame.height - 14
    bar = tag("path", d=f"M16 {y - 6:g}v6h{length_px:.1f}v-6", class_="bar")
    words = tag("text", f"{length_km:g} km", x=f"{22 + length_px:.1f}", y=f"{y:g}")
    return tag("g", bar, words, class_="scale")
