"""Segments: every stretch between two neighbouring nodes of a way that a car can use."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from pipeline.road_settings import RoadsSettings
from pipeline.roads.arrays import Bool, Float64, Int32, Int64
from pipeline.roads.delays import node_delays_s
from pipeline.roads.extract import RoadExtract
from pipeline.roads.geodesy import geodesics
from pipeline.roads.rulebook import RoadRules
from pipeline.roads.rules import WayTraits


@dataclass(frozen=True)
class Segments:
    """Stretches of road, in the order of their ways; all arrays have one value per segment.

    Attributes
    ----------
    a, b : nodes of the extract at its ends, in the order of the way.
    way : way of the extract that it belongs to.
    length_m : geodesic length.
    forward_s, backward_s : driving time from a to b and from b to a; NaN where that way is closed.
    forward_delay_s, backward_delay_s : delay on coming to b from a, and to a from b.
    """

    a: Int32
    b: Int32
    way: Int64
    length_m: Float64
    forward_s: Float64
    backward_s: Float64
    forward_delay_s: Float64
    backward_delay_s: Float64

    @property
    def count(self) -> int:
        """How many segments there are."""
        return len(self.a)


@dataclass(frozen=True)
class Losses:
    """What could not be used as it was mapped."""

    cut_ways: int  # car ways of which the extract lacks a node
    cut_places: int  # neighbouring nodes that could not be joined for that
    fallback_ferries: int  # ferries without a duration that can be believed


def segments_of(
    extract: RoadExtract, traits: WayTraits, rules: RoadRules, settings: RoadsSettings
) -> tuple[Segments, Losses]:
    """Cut the open ways of an extract into segments, with their lengths and times."""
    way_of = np.repeat(np.arange(extract.ways, dtype=np.int64), np.diff(extract.way_start))
    first = np.flatnonzero(way_of[:-1] == way_of[1:])
    first = first[(traits.forward | traits.backward)[way_of[first]]]
    a, b, way = extract.way_node[first], extract.way_node[first + 1], way_of[first]
    located = (a >= 0) & (b >= 0)
    cut = np.unique(way[~located])
    kept = located & (a != b)
    a, b, way = a[kept], b[kept], way[kept]
    length_m = geodesic_m(extract, a, b)
    forward_kmh, backward_kmh, fallbacks = _with_ferries(
        traits, way, length_m, cut, rules, settings
    )
    along_s, against_s = node_delays_s(extract, rules.delays_s)
    is_road = ~traits.is_ferry[way]
    segments = Segments(
        a=a,
        b=b,
        way=way,
        length_m=length_m,
        forward_s=_seconds(length_m, forward_kmh[way], traits.forward[way]),
        backward_s=_seconds(length_m, backward_kmh[way], traits.backward[way]),
        forward_delay_s=along_s[b] * is_road,
        backward_delay_s=against_s[a] * is_road,
    )
    return segments, Losses(len(cut), int((~located).sum()), fallbacks)


def geodesic_m(extract: RoadExtract, a: Int32, b: Int32) -> Float64:
    """Length of the geodesic between nodes on the WGS 84 ellipsoid."""
    nodes = a.astype(np.int64), b.astype(np.int64)
    return geodesics(extract.node_lon_e7, extract.node_lat_e7, *nodes)[0]


def _with_ferries(
    traits: WayTraits,
    way: Int64,
    length_m: Float64,
    cut: Int64,
    rules: RoadRules,
    settings: RoadsSettings,
) -> tuple[Float64, Float64, int]:
    """Speeds of all ways, those of ferries by their duration; how many fell back.

    A ferry that the extract cuts falls back too: its duration is that of the whole crossing.
    """
    way_km = np.bincount(way, weights=length_m, minlength=len(traits.is_ferry)) / 1000
    by_duration = way_km / (traits.ferry_min / 60)
    believed = (by_duration >= rules.ferry["slowest_kmh"]) & (
        by_duration <= rules.ferry["fastest_kmh"]
    )
    believed[cut] = False
    ferry_kmh = np.where(believed, by_duration, settings.ferry_speed_kmh)
    used = traits.is_ferry & (way_km > 0)
    forward = np.where(traits.is_ferry, ferry_kmh, traits.forward_kmh)
    backward = np.where(traits.is_ferry, ferry_kmh, traits.backward_kmh)
    return forward, backward, int((used & ~believed).sum())


def _seconds(length_m: Float64, kmh: Float64, is_open: Bool) -> Float64:
    return np.where(is_open, length_m / (kmh / 3.6), np.nan)
