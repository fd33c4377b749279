"""A map of differences between two runs: two colours, paler towards no change."""

from __future__ import annotations

import geopandas as gpd
import numpy as np
import numpy.typing as npt
import pandas as pd
import shapely

from pipeline.publish import mapframe
from pipeline.publish.classes import quantile_classes
from pipeline.publish.markup import Html, tag
from pipeline.publish.words import number, words_of

WORDS = ("much less", "less", "no change", "more", "much more")


def difference_map(zones: gpd.GeoDataFrame, both: pd.DataFrame, column: str, site: str) -> Html:
    """Change of a column from run A to run B, zone by zone.

    Classes are the same on both sides of no change (BrBG, ColorBrewer: Harrower and Brewer, 2003).

    Parameters
    ----------
    both : rows of one site with `<column>_a` and `<column>_b`.
    """
    if f"{column}_a" not in both:
        return Html("")
    rows = both.set_index("zone_id").reindex(zones["zone_id"])
    change = (rows[f"{column}_b"] - rows[f"{column}_a"]).to_numpy(dtype=np.float64)
    title = f"{words_of(column).capitalize()}, B minus A: {site}"
    if not (np.abs(np.nan_to_num(change)) > 1e-9).any():
        return tag("p", f"{title}: no zone has changed.")
    places, bound = _places(change)
    frame = mapframe.frame_around(zones.geometry.to_crs("EPSG:4326"))
    shapes = frame.project(zones.geometry)
    named = zip(zones["zone_id"], shapes, change, places, strict=True)
    drawn = [_zone(frame, *item) for item in named]
    picture = tag(
        "svg",
        tag("title", title),
        tag("g", *drawn, transform="scale(.1)", class_="zones"),
        viewBox=f"0 0 {frame.width:g} {frame.height:g}",
        role="img",
        class_="map",
    )
    keys = [
        tag("li", _swatch(f"d{k}"), words, tag("small", f" {int((places == k).sum()):,}"))
        for k, words in enumerate(WORDS)
    ]
    lead = f"More or less than {number(bound)} counts as much. Zones:"
    legend = tag(
        "div", tag("p", tag("b", title)), tag("p", lead), tag("ul", *keys), class_="legend"
    )
    return tag("figure", picture, legend)


def _places(change: npt.NDArray[np.float64]) -> tuple[npt.NDArray[np.int64], float]:
    """Class 0 to 4 of every change (−1: not known), and the bound between some and much."""
    sizes = np.abs(change)
    bounds = quantile_classes(np.where(sizes > 1e-9, sizes, np.nan)).bounds
    bound = bounds[len(bounds) // 2]
    steps = np.select([sizes <= 1e-9, sizes <= bound], [0, 1], 2)
    places = 2 + np.sign(np.nan_to_num(change)).astype(np.int64) * steps
    return np.where(np.isnan(change), -1, places), float(bound)


def _zone(
    frame: mapframe.MapFrame, zone_id: str, shape: shapely.Geometry, change: float, place: int
) -> Html:
    words = tag("title", f"{zone_id}: {number(change)}")
    style = f"d{place}" if place >= 0 else "zero"
    if shapely.get_dimensions(shape) == 2:
        return tag("path", words, d=mapframe.area_path(shape, frame), class_=style)
    x, y = frame.tenths(shapely.get_coordinates(shapely.centroid(shape)))[0]
    return tag("circle", words, cx=x, cy=y, r=60, class_=style)


def _swatch(style: str) -> Html:
    square = tag("rect", width=18, height=12, class_=style)
    return tag("svg", square, viewBox="0 0 18 12", class_="swatch", aria_hidden="true")
