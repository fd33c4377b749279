"""Where the zones' points and people come from, and what of the zones a census does not cover."""

from __future__ import annotations

import geopandas as gpd

from pipeline.overlay import measuring_crs
from pipeline.publish.markup import Html, tag
from pipeline.publish.results import Results
from pipeline.publish.words import count, number, percent

CENTROID_WORDS = {
    "given": "as the zones file gives it",
    "population_weighted": "the mean place of the people of finer points",
    "inside_polygon": "a point inside the polygon, wherever its people live",
}
COVERED = 0.999
"""A zone that a census covers to this share counts as covered: borders are drawn by hand."""


def zones_placed(results: Results) -> Html | None:
    """Sentences on centroids and on the area without census figures."""
    zones = results.zones
    if zones is None:
        return None
    kinds = zones["centroid_source"].value_counts()
    points = "; ".join(
        f"{words} ({count(int(kinds[kind]), 'zone')})"
        for kind, words in CENTROID_WORDS.items()
        if kind in kinds
    )
    parts = [tag("p", f"A zone's routes start at one point: {points}.")]
    several = results.study.zones.points.per_zone
    if several > 1:
        parts = [
            tag("p", f"Routes start at up to {several} places of each zone; its point is {points}.")
        ]
    census = _uncovered(results, zones)
    if census is not None:
        parts.append(census)
    return tag("div", tag("h3", "Zones"), *parts)


def _uncovered(results: Results, zones: gpd.GeoDataFrame) -> Html | None:
    """What of the zones' area no census unit covers; None without census units."""
    if "census_cover_share" not in zones:
        return None
    census = results.study.zones.census
    by = "the people of finer points" if census.method == "points" else "area"
    words = f"People and income came from census units, carried over to the zones by {by}. "
    share = zones["census_cover_share"]
    bare = share < COVERED
    if not bare.any():
        return tag("p", words + "The census units cover every zone whole.")
    area = gpd.GeoSeries(zones.geometry).to_crs(measuring_crs(gpd.GeoSeries(zones.geometry))).area
    square_km = float((area * (1 - share)).sum()) / 1e6
    least = zones["zone_name"].iloc[int(share.to_numpy().argmin())]
    return tag(
        "p",
        f"{words}They do not cover {number(square_km)} km² of the zones "
        f"({percent(square_km * 1e6 / float(area.sum()))} of their area), in "
        f"{count(int(bare.sum()), 'zone')}; least of all {least} "
        f"({percent(float(share.min()))} covered). Whoever lives there is missing from the "
        "zones' people.",
    )
