"""The table `road_lines`: roads as lines for maps, with those that were left out and why."""

from __future__ import annotations

import geopandas as gpd
import numpy as np
import pandas as pd

from pipeline.roads.arrays import Bool, Int64, ranges
from pipeline.roads.contract import Chains
from pipeline.roads.extract import RoadExtract
from pipeline.roads.lines import line_strings
from pipeline.roads.rulebook import RoadRules
from pipeline.roads.rules import WayTraits
from pipeline.roads.segments import Segments, geodesic_m

CLOSED_BY_RULE = "closed to the vehicle by its tags, the season or the study"
NO_WAY_BACK = "no way to and from the main networks"


def lines_by_class(
    extract: RoadExtract,
    traits: WayTraits,
    rules: RoadRules,
    segments: Segments,
    chains: Chains,
    is_main: Bool,
) -> gpd.GeoDataFrame:
    """A line for each run of one class along an edge, and one for each way that is closed.

    Parameters
    ----------
    extract, traits, rules, segments, chains : the roads.
    is_main : of each edge, whether it is a ferry or lies on a main network.
    """
    code = traits.class_code[segments.way[chains.segment]]
    begins = np.zeros(len(code), dtype=np.bool_)
    begins[chains.first[:-1]] = True
    begins[1:] |= code[1:] != code[:-1]
    first = np.flatnonzero(begins)
    counts: Int64 = np.diff(np.append(first, len(code))).astype(np.int64)
    tail = np.where(chains.against, segments.b[chains.segment], segments.a[chains.segment])
    head = np.where(chains.against, segments.a[chains.segment], segments.b[chains.segment])
    run = np.repeat(np.arange(len(first)), counts)
    vertex = np.empty(len(code) + len(first), dtype=np.int64)
    vertex[np.arange(len(code)) + run] = tail
    vertex[np.cumsum(counts + 1) - 1] = head[first + counts - 1]
    lon, lat = extract.degrees(vertex)
    names = np.array(rules.classes, dtype=object)
    edge = np.searchsorted(chains.first, first, "right") - 1
    lines = gpd.GeoDataFrame(
        {
            "road_class": names[code[first]],
            "distance_km": np.add.reduceat(segments.length_m[chains.segment], first) / 1000,
            "left_out": pd.Series(NO_WAY_BACK, index=range(len(edge))).mask(is_main[edge]),
        },
        geometry=line_strings(lon, lat, counts + 1),
        crs="EPSG:4326",
    )
    closed = _closed_ways(extract, traits, names)
    return lines if closed.empty else pd.concat([lines, closed], ignore_index=True)


def _closed_ways(extract: RoadExtract, traits: WayTraits, names: np.ndarray) -> gpd.GeoDataFrame:
    """A line for each closed way of a class in use; those that lack a node are passed over."""
    way = np.flatnonzero(traits.closed & ~traits.is_ferry)
    counts = np.diff(extract.way_start)[way].astype(np.int64)
    lacking = np.add.reduceat(np.append(extract.way_node < 0, False), extract.way_start[:-1])
    usable = (counts > 1) & (lacking[way] == 0)
    way, counts = way[usable], counts[usable]
    starts = extract.way_start[:-1][way].astype(np.int64)
    node = extract.way_node[ranges(starts, counts)]
    last = np.cumsum(counts) - 1
    length_m = np.zeros(len(node))
    if len(node):
        length_m[:-1] = geodesic_m(extract, node[:-1], node[1:])
    length_m[last] = 0  # from one way to the next
    lon, lat = extract.degrees(node)
    return gpd.GeoDataFrame(
        {
            "road_class": names[traits.class_code[way]],
            "distance_km": np.add.reduceat(length_m, last - counts + 1) / 1000 if len(way) else [],
            "left_out": np.full(len(way), CLOSED_BY_RULE, dtype=object),
        },
        geometry=line_strings(lon, lat, counts) if len(way) else [],
        crs="EPSG:4326",
    )
