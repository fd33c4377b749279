"""The map of visit rates: zones by class, roads and routes over them, sites by name."""

from __future__ import annotations

from dataclasses import dataclass

import geopandas as gpd
import numpy as np
import numpy.typing as npt
import pandas as pd
import shapely

from pipeline.publish import mapframe
from pipeline.publish.classes import Classes, quantile_classes
from pipeline.publish.labels import place_labels
from pipeline.publish.mapframe import MapFrame
from pipeline.publish.markup import Html, join, tag, text
from pipeline.publish.results import Results
from pipeline.publish.rows import rows_of
from pipeline.publish.words import number

LABEL_SIZE = 25.0
MOST_LABELS = 12
MOST_ROAD_POINTS = 30_000
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
    zone_ids: tuple[str, ...]
    zone_names: tuple[str, ...]
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
    defs = tag("defs", shapes, roads, _lines_across(), _dotted())
    return BaseMap(
        frame=frame,
        defs=tag("svg", defs, class_="store", width=0, height=0, aria_hidden="true"),
        zone_ids=tuple(zones["zone_id"].astype(str)),
        zone_names=tuple(names.astype(str)),
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
    """Roads by rank, the great ones first, until the drawing would grow too heavy."""
    if lines is None or not len(lines):
        return Html(""), ""
    parts: list[Html] = []
    points = 0
    for rank, kinds in enumerate(ROAD_RANK):
        of_rank = lines[lines["road_class"].isin(kinds)]
        if of_rank.empty:
            continue
        shapes = mapframe.simplified_lines(frame.project(of_rank.geometry), frame.metres_per_px)
        points += int(shapely.get_num_coordinates(shapes).sum())
        if points > MOST_ROAD_POINTS and parts:
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


def rate_map(results: Results, base: BaseMap, site_id: str, figures: pd.DataFrame) -> Html:
    """Map of the visit rate to one site, with its legend.

    Parameters
    ----------
    figures : the finished table's rows of the site.
    """
    rows = figures.set_index("zone_id").reindex(list(base.zone_ids))
    rates = rows["visits_per_1000"].to_numpy(dtype=np.float64)
    classes = quantile_classes(rates)
    outside = _outside(rows)
    picture = tag(
        "svg",
        tag("title", f"Visits per 1,000 people, {results.site_name(site_id)}"),
        tag(
            "g",
            _zones(base, rates, classes, outside),
            tag("use", href="#road-lines", class_="casing") if base.has_roads else None,
            tag("use", href="#road-lines", class_="roads") if base.has_roads else None,
            _routes(results, base, site_id),
            transform="scale(.1)",
        ),
        _sites(results, base, site_id),
        _scale(base.frame),
        viewBox=f"0 0 {base.frame.width:g} {base.frame.height:g}",
        role="img",
        class_="map",
    )
    return join([picture, _legend(classes, rates, outside, results)])


def _outside(rows: pd.DataFrame) -> npt.NDArray[np.bool_]:
    if "in_market" not in rows:
        return np.zeros(len(rows), dtype=bool)
    left_out = ~rows["in_market"].astype("boolean")
    return left_out.fillna(value=False).to_numpy(dtype=bool)


def _zones(
    base: BaseMap,
    rates: npt.NDArray[np.float64],
    classes: Classes,
    outside: npt.NDArray[np.bool_],
) -> Html:
    places = classes.of(rates)
    used = []
    for i, (name, rate, place) in enumerate(zip(base.zone_names, rates, places, strict=True)):
        words = "no figure" if place == -2 else f"{number(rate)} visits per 1,000"
        class_ = _class_name(int(place), len(classes))
        used.append(tag("use", tag("title", f"{name}: {words}"), href=f"#z{i}", class_=class_))
        if outside[i]:
            used.append(tag("use", href=f"#z{i}", class_="over"))
    return tag("g", *used, class_="zones" if base.has_areas else "zones dots")


def _class_name(place: int, total: int) -> str:
    """Style of a class: its colour out of five, spread when there are fewer classes."""
    if place < 0:
        return "zero" if place == -1 else "none"
    return f"c{round(place * 4 / max(1, total - 1)) if total > 1 else 3}"


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
    points, owner = shapely.get_coordinates(lines, return_index=True)
    same = owner[1:] == owner[:-1]
    ends = np.column_stack([points[:-1], points[1:]])[same]
    back = (ends[:, 0] > ends[:, 2]) | ((ends[:, 0] == ends[:, 2]) & (ends[:, 1] > ends[:, 3]))
    ends[back] = ends[back][:, [2, 3, 0, 1]]
    stretches = np.unique(ends.round(1), axis=0).reshape(-1, 2, 2)
    stretches = stretches[(stretches[:, 0] != stretches[:, 1]).any(axis=1)]
    if not len(stretches):
        return np.array([], dtype=object)
    return mapframe.simplified_lines(shapely.linestrings(stretches), frame.metres_per_px)


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


def marker(x: float, y: float, kind: str) -> Html:
    """A ring with a dot for the site of the map, a ring for another, a square for a substitute."""
    if kind == "substitute":
        return tag("rect", x=f"{x - 5:.1f}", y=f"{y - 5:.1f}", width=10, height=10, class_="mark")
    ring = tag("circle", cx=f"{x:.1f}", cy=f"{y:.1f}", r=7, class_="mark")
    dot = tag("circle", cx=f"{x:.1f}", cy=f"{y:.1f}", r=3, class_="dot") if kind == "here" else None
    return join([ring, dot])


def _scale(frame: MapFrame) -> Html:
    length_km, length_px = mapframe.scale_bar(frame)
    y = frame.height - 14
    bar = tag("path", d=f"M16 {y - 6:g}v6h{length_px:.1f}v-6", class_="bar")
    words = tag("text", f"{length_km:g} km", x=f"{22 + length_px:.1f}", y=f"{y:g}")
    return tag("g", bar, words, class_="scale")


def _legend(
    classes: Classes,
    rates: npt.NDArray[np.float64],
    outside: npt.NDArray[np.bool_],
    results: Results,
) -> Html:
    """Colours with their bounds and number of zones, then the marks."""
    places = classes.of(rates)
    entries = [
        (_class_name(k, len(classes)), label, int((places == k).sum()))
        for k, label in enumerate(classes.labels())
    ]
    if (places == -1).any():
        entries.insert(0, ("zero", "no visit recorded", int((places == -1).sum())))
    if (places == -2).any():
        entries.append(("none", "no figure", int((places == -2).sum())))
    if outside.any():
        entries.append(("over", "outside the market", int(outside.sum())))
    items = [
        tag("li", _swatch(class_), label, tag("small", f" {total:,}"))
        for class_, label, total in entries
    ]
    items += [tag("li", _swatch_mark(kind), words) for kind, words in _marks(results)]
    title = tag("p", tag("b", "Visits per 1,000 people and year"), tag("small", " (zones)"))
    return tag("div", title, tag("ul", *items), class_="legend")


def _swatch(class_: str) -> Html:
    square = tag("rect", width=180, height=120, class_=class_)
    scaled = tag("g", square, transform="scale(.1)", class_="zones")
    return tag("svg", scaled, viewBox="0 0 18 12", class_="swatch", aria_hidden="true")


def _marks(results: Results) -> list[tuple[str, str]]:
    marks = []
    if results.sites is not None:
        marks.append(("here", "the site"))
        if len(results.headlines) > 1:
            marks.append(("site", "another valued site"))
        if results.sites["role"].eq("substitute").any():
            marks.append(("substitute", "substitute"))
    if results.road_lines is not None and len(results.road_lines):
        marks.append(("roads", "road"))
        if results.road_lines["road_class"].eq("ferry").any():
            marks.append(("ferry", "ferry"))
    if results.route_lines is not None and len(results.route_lines):
        marks.append(("routes", "route to the site"))
    return marks


def _swatch_mark(kind: str) -> Html:
    shape = (
        marker(9, 8, kind)
        if kind in ("here", "site", "substitute")
        else tag("path", d="M0 8h18", class_=text(f"key {kind}"))
    )
    return tag("svg", shape, viewBox="0 0 18 16", class_="swatch tall", aria_hidden="true")
