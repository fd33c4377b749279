"""What a road extract holds and what was lost of it."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd

from pipeline.roads.arrays import Bool, Float64
from pipeline.roads.conditions import Calendar
from pipeline.roads.extract import RoadExtract
from pipeline.roads.graph import RoadGraph, unpack_distance_km, unpack_time_min
from pipeline.roads.restrictions import Restrictions
from pipeline.roads.rulebook import FERRY, RoadRules
from pipeline.roads.rules import WayTraits
from pipeline.roads.segments import Losses, Segments

NO_CLASS = "all"


def quality(
    extract: RoadExtract,
    traits: WayTraits,
    rules: RoadRules,
    segments: Segments,
    losses: Losses,
    graph: RoadGraph,
    islands: int,
    turns: Restrictions,
    calendar: Calendar,
) -> pd.DataFrame:
    """The table `road_quality`: lengths and tagged limits by class, then what was lost."""
    by_class = _by_class(traits, rules, segments)
    whole = _whole(extract, traits, segments, losses, graph, islands)
    whole += _turns(turns) + _unread(calendar)
    return pd.DataFrame(
        by_class + whole, columns=["measure", "road_class", "value", "unit", "note"]
    )


def _by_class(traits: WayTraits, rules: RoadRules, segments: Segments) -> list[tuple[Any, ...]]:
    """Length of each class, and the share of it that has a readable limit."""
    code = traits.class_code[segments.way]
    km = segments.length_m / 1000
    readable = (traits.limit_tagged & ~traits.limit_unreadable)[segments.way]
    names = rules.classes
    length = np.bincount(code, km, minlength=len(names))
    tagged = np.bincount(code, km * readable, minlength=len(names))
    rows: list[tuple[Any, ...]] = []
    for name, total, with_limit in zip(names, length, tagged, strict=True):
        if total > 0:
            what = "ferry length" if name == FERRY else "road length"
            rows.append((what, name, total, "km", "each road once, both directions together"))
        if total > 0 and name != FERRY:
            note = "the rest is driven at the default speed of its class"
            rows.append(("share with a speed limit", name, with_limit / total, "share", note))
    on_land = code != names.index(FERRY)
    road = float(km[on_land].sum())
    share = float(km[on_land & readable].sum()) / road
    rows.append(("road length", NO_CLASS, road, "km", "ferries not included"))
    rows.append(
        ("share with a speed limit", NO_CLASS, share, "share", "times rest on defaults elsewhere")
    )
    return rows


def _whole(
    extract: RoadExtract,
    traits: WayTraits,
    segments: Segments,
    losses: Losses,
    graph: RoadGraph,
    islands: int,
) -> list[tuple[Any, ...]]:
    """Counts over the whole extract and graph."""
    way, km, road = segments.way, segments.length_m / 1000, ~traits.is_ferry
    on_road = (traits.class_code >= 0) & road
    networks = int(graph.node_network.max()) + 1
    dropped = ~graph.main_edges() & ~graph.edge_is_ferry
    dropped_km = float(km_of_edges(graph)[dropped].sum())
    rows = [
        ("ways in the extract", extract.ways, "ways", "highway or ferry tag"),
        ("ways for the vehicle", int((traits.class_code >= 0).sum()), "ways", "of a class in use"),
        ("ways closed to the vehicle", int(traits.closed.sum()), "ways", "by their access tags"),
        (
            "unreadable speed limits",
            int((traits.limit_unreadable & on_road).sum()),
            "ways",
            "driven at the default speed of their class",
        ),
        ("ways cut", losses.cut_ways, "ways", "nodes outside the extract; the rest is used"),
        ("pieces cut out", losses.cut_places, "pieces", "between nodes that were not given"),
        ("ferries without duration", losses.fallback_ferries, "ways", "at roads.ferry_speed_kmh"),
        ("one-way length", _one_way_km(segments, road), "km", "without ferries"),
        ("toll length", float(km[traits.is_toll[way]].sum()), "km", "ferries included"),
        (
            "unpaved length",
            float(km[(traits.is_unpaved & road)[way]].sum()),
            "km",
            "by surface, or by class where none is tagged",
        ),
        (
            "share of the time that is delay",
            _delay_share(graph),
            "share",
            "every road driven once in each open direction; that of a route is its delay_min",
        ),
        ("junctions", graph.nodes, "junctions", "nodes of the graph"),
        ("edges", graph.edges, "edges", "stretches between junctions"),
        ("arcs", graph.arcs, "arcs", "directed; of parallel ones the best, loops left out"),
        ("main networks", networks, "networks", "in which every place can be reached and left"),
        ("islands", islands, "parts", "join no main network; not routed to"),
        ("road off the main networks", dropped_km, "km", "no point is tied to it"),
    ]
    return [(measure, NO_CLASS, float(value), unit, note) for measure, value, unit, note in rows]


def _turns(turns: Restrictions) -> list[tuple[Any, ...]]:
    """What became of the turn restrictions."""
    example = "".join(f"; relation {number}: {why}" for number, why in turns.unread[:1])
    rows = [
        ("turn restrictions applied", turns.applied, "in force for the vehicle and the season"),
        ("turn restrictions moot", turns.moot, "on roads that are closed anyway"),
        ("turn restrictions unread", len(turns.unread), f"not applied{example}"),
    ]
    return [(what, NO_CLASS, float(count), "relations", note) for what, count, note in rows]


MOST_CONDITIONS = 30


def _unread(calendar: Calendar) -> list[tuple[Any, ...]]:
    """Conditions that could not be read, the most frequent ones by their words."""
    total = sum(calendar.unread.values())
    note = "left out of account; set roads.travel_date or roads.season if none is"
    rows = [("conditions unread", NO_CLASS, float(total), "tags", note)]
    for text, count in sorted(calendar.unread.items(), key=lambda item: (-item[1], item[0])):
        rows.append((f"condition unread: {text}", NO_CLASS, float(count), "tags", "left out"))
    return rows[: MOST_CONDITIONS + 1]


def km_of_edges(graph: RoadGraph) -> Float64:
    """Length of each edge, km."""
    cost = np.where(graph.edge_forward_cost >= 0, graph.edge_forward_cost, graph.edge_backward_cost)
    return unpack_distance_km(cost)


def _delay_share(graph: RoadGraph) -> float:
    """Delays as a share of the time of all open directions of the roads."""
    costs = np.column_stack([graph.edge_forward_cost, graph.edge_backward_cost])
    is_open = (costs >= 0) & ~graph.edge_is_ferry[:, np.newaxis]
    delay_s = float(graph.edge_delay_s.reshape(-1, 2)[is_open].sum())
    return delay_s / max(60 * float(unpack_time_min(costs[is_open]).sum()), 0.01)


def _one_way_km(segments: Segments, road: Bool) -> float:
    one_way = np.isnan(segments.forward_s) != np.isnan(segments.backward_s)
    return float(segments.length_m[one_way & road[segments.way]].sum() / 1000)
