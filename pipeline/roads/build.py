"""The stage ``roads``: from an extract to a road graph."""

from __future__ import annotations

from typing import Any

import geopandas as gpd
import numpy as np
import numpy.typing as npt
import pandas as pd

from pipeline.errors import RoadsError
from pipeline.road_settings import RoadsSettings
from pipeline.roads.arrays import Bool, Float32, Float64, Int32, Int64, grouped
from pipeline.roads.barriers import cut_at_barriers
from pipeline.roads.charges import charged_nodes, charges_of
from pipeline.roads.conditions import calendar_of
from pipeline.roads.contract import Chains, contract, reorder
from pipeline.roads.copies import Copies, copy_junctions
from pipeline.roads.delays import turns_off
from pipeline.roads.extract import RoadExtract
from pipeline.roads.geodesy import geodesics
from pipeline.roads.graph import CLOSED, RoadGraph, best_arcs, flag_bits, pack
from pipeline.roads.hilbert import hilbert_order
from pipeline.roads.limited import through_roads
from pipeline.roads.networks import detached_km, main_networks
from pipeline.roads.quality import quality
from pipeline.roads.restrictions import Run, edge_runs, read_restrictions
from pipeline.roads.road_lines import lines_by_class
from pipeline.roads.rulebook import RoadRules, load_rules
from pipeline.roads.rules import (
    WayTraits,
    closed_barriers,
    turn_values,
    way_traits,
)
from pipeline.roads.segments import Segments, segments_of
from pipeline.study import Study

COPIES = ("copy_of", "copy_kind", "head_edge", "head_node", "tail_edge", "tail_node")


def build_roads(
    extract: RoadExtract, *, study: Study
) -> tuple[RoadGraph, pd.DataFrame, gpd.GeoDataFrame]:
    """Turn an extract into a directed, routable graph.

    Parameters
    ----------
    extract : ways over located nodes.
    study : section [roads].

    Returns
    -------
    The graph, the table `road_quality`, and the roads as lines (`road_lines`, WGS 84), each
    once whatever its directions, with those that were left out of the graph and why.

    Raises
    ------
    RoadsError
        No way of the extract is open to the vehicle.
    StudyError
        The study gives a speed for an unknown class.
    """
    settings = study.roads
    rules = load_rules(settings)
    southern = bool(len(extract.node_lat_e7)) and float(np.median(extract.node_lat_e7)) < 0
    calendar = calendar_of(settings.travel_date, settings.season, southern=southern)
    traits = way_traits(extract, rules, settings, calendar)
    segments, losses = segments_of(extract, traits, rules, settings)
    if not segments.count or traits.is_ferry[segments.way].all():
        raise RoadsError(
            f"none of the {extract.ways} ways of the road extract is a road open to the vehicle. "
            "Give an extract with roads, or allow tracks by roads.tracks."
        )
    extract, segments = cut_at_barriers(
        extract, segments, closed_barriers(extract, rules, settings)
    )
    turns = read_restrictions(extract, segments, turn_values(extract, rules, calendar))
    group = (traits.is_ferry * 1 + traits.is_limited * 2).astype(np.uint8)[segments.way]
    tolled = charged_nodes(extract, segments, traits.is_toll)
    forced = np.append(np.array(turns.nodes, dtype=np.int64), tolled)
    chains = contract(segments, len(extract.node_lon_e7), group, forced)
    nodes, rank = _hilbert_order(extract, chains)
    by_end = grouped(rank[chains.end], len(nodes))[1]
    chains = reorder(chains, by_end[grouped(rank[chains.start][by_end], len(nodes))[1]])
    runs = edge_runs(turns.runs, chains)
    graph, parts = _graph(extract, traits, segments, chains, nodes, rank, runs, rules, settings)
    table = quality(extract, traits, rules, segments, losses, graph, parts, turns, calendar)
    is_main = graph.main_edges() | graph.edge_is_ferry
    return graph, table, lines_by_class(extract, traits, rules, segments, chains, is_main)


def summarise_roads(outputs: tuple[RoadGraph, pd.DataFrame, gpd.GeoDataFrame]) -> str:
    """One line for people: what the graph holds."""
    graph, table, _ = outputs
    total = table.loc[(table["measure"] == "road length") & (table["road_class"] == "all"), "value"]
    return f"{total.iloc[0]:,.0f} km of road, {graph.nodes:,} junctions, {graph.arcs:,} arcs"


def _hilbert_order(extract: RoadExtract, chains: Chains) -> tuple[Int64, Int32]:
    """Junctions in the order of a Hilbert curve, and the rank of each node of the extract."""
    is_junction = np.zeros(len(extract.node_lon_e7), dtype=np.bool_)
    is_junction[chains.start] = True
    is_junction[chains.end] = True
    junctions = np.flatnonzero(is_junction)
    order = hilbert_order(extract.node_lon_e7[junctions], extract.node_lat_e7[junctions])
    nodes = junctions[order]
    rank = np.full(len(extract.node_lon_e7), -1, dtype=np.int32)
    rank[nodes] = np.arange(len(nodes), dtype=np.int32)
    return nodes, rank


def _graph(
    extract: RoadExtract,
    traits: WayTraits,
    segments: Segments,
    chains: Chains,
    nodes: Int64,
    rank: Int32,
    runs: list[Run],
    rules: RoadRules,
    settings: RoadsSettings,
) -> tuple[RoadGraph, int]:
    """The graph, and how many parts of it join no main network."""
    start, end = rank[chains.start], rank[chains.end]
    way = segments.way[chains.segment[chains.first[:-1]]]
    is_ferry, is_limited = traits.is_ferry[way], traits.is_limited[way]
    turn_s = _turn_delays(extract, traits, segments, chains, is_ferry, rules)
    on_land = _on_land(chains, is_ferry, len(extract.node_lon_e7))
    forward, backward = _costs(
        segments,
        chains,
        is_ferry & on_land[chains.start],
        is_ferry & on_land[chains.end],
        turn_s,
        settings,
    )
    charges = charges_of(
        extract, segments, chains, is_ferry=is_ferry, is_toll=traits.is_toll, on_land=on_land
    )
    number = np.arange(len(start), dtype=np.int32)
    is_open = np.concatenate([forward != CLOSED, backward != CLOSED])
    tail = np.concatenate([start, end])[is_open]
    head = np.concatenate([end, start])[is_open]
    directed = np.concatenate([2 * number, 2 * number + 1])[is_open]
    road_km = np.where(is_ferry, 0, _edge_sums(segments.length_m, chains) / 1000)
    limited = through_roads(
        tail, head, directed // 2, start, end, is_limited, road_km, settings.main_network_km
    )
    copies = copy_junctions(tail, head, directed, limited[directed // 2], runs, len(nodes))
    both = np.concatenate([forward, backward])
    arcs, arcs_in = _arcs(copies, both, len(start), len(nodes), charges["charge_edge"])
    network, weak = main_networks(tail, head, start, end, road_km, settings.main_network_km)
    island_km, islands = detached_km(start, network, weak, road_km)
    graph = RoadGraph(
        node_lon_e7=extract.node_lon_e7[nodes],
        node_lat_e7=extract.node_lat_e7[nodes],
        node_network=network,
        edge_start=start,
        edge_end=end,
        edge_forward_cost=forward,
        edge_backward_cost=backward,
        edge_is_ferry=is_ferry,
        edge_toll_m=_flagged_m(traits.is_toll, segments, chains),
        edge_unpaved_m=_flagged_m(traits.is_unpaved & ~traits.is_ferry, segments, chains),
        edge_detached_km=island_km,
        **_delays_of_edges(segments, chains, turn_s),
        **_geometry(extract, traits, segments, chains),
        **_named("arc", arcs),
        **_named("in", arcs_in),
        **{name: getattr(copies, name) for name in COPIES},
        **charges,
    )
    return graph, islands


def _arcs(
    copies: Copies, cost: Int64, edges: int, junctions: int, charged: Int32
) -> tuple[tuple[Int64, Int32, Int64, Int32], tuple[Int64, Int32, Int64, Int32]]:
    """Arcs by tail and by head, with the packed costs of their edges."""
    arc_cost = cost[copies.edge // 2 + edges * (copies.edge % 2)]
    nodes = junctions + len(copies.copy_of)
    apart = np.isin(copies.edge, charged)
    return (
        best_arcs(copies.tail, copies.head, arc_cost, copies.edge, nodes, apart),
        best_arcs(copies.head, copies.tail, arc_cost, copies.edge, nodes, apart),
    )


def _named(prefix: str, arcs: tuple[Int64, Int32, Int64, Int32]) -> dict[str, npt.NDArray[Any]]:
    """The four arrays of arcs by the names that they have in the graph."""
    first, node, cost, edge = arcs
    return {
        f"{prefix}_first": first,
        f"{prefix}_node": node,
        f"{prefix}_cost": cost,
        f"{prefix}_edge": edge,
    }


def _on_land(chains: Chains, is_ferry: Bool, nodes: int) -> Bool:
    """Of each node of the extract, whether a road that is no ferry ends there."""
    on_land = np.zeros(nodes, dtype=np.bool_)
    on_land[chains.start[~is_ferry]] = True
    on_land[chains.end[~is_ferry]] = True
    return on_land


def _costs(
    segments: Segments,
    chains: Chains,
    boards_forward: Bool,
    boards_backward: Bool,
    turn_s: tuple[Float64, Float64],
    settings: RoadsSettings,
) -> tuple[Int64, Int64]:
    """Packed costs of each edge forward and backward.

    Waiting and boarding come with the arc that leaves the land: a ferry edge whose tail is
    also the end of a road. A crossing that is mapped in several pieces is boarded once.
    """
    times = _directed(segments.forward_s, segments.backward_s, chains)
    length = _edge_sums(segments.length_m, chains)
    wait_s = settings.ferry_wait_min * 60
    costs = []
    delays = _directed(segments.forward_delay_s, segments.backward_delay_s, chains)
    boards = (boards_forward, boards_backward)
    for time_s, delay_s, turn, boarding in zip(times, delays, turn_s, boards, strict=True):
        time = np.add.reduceat(time_s + delay_s, chains.first[:-1]) + turn
        costs.append(pack(time + np.where(boarding, wait_s, 0), length))
    return costs[0], costs[1]


def _turn_delays(
    extract: RoadExtract,
    traits: WayTraits,
    segments: Segments,
    chains: Chains,
    is_ferry: Bool,
    rules: RoadRules,
) -> tuple[Float64, Float64]:
    """Delay of turning off into each edge at its start, and at its end."""
    tail = np.where(chains.against, segments.b[chains.segment], segments.a[chains.segment])
    head = np.where(chains.against, segments.a[chains.segment], segments.b[chains.segment])
    first, last = chains.first[:-1], chains.first[1:] - 1
    here, there = (
        np.concatenate([tail[first], head[last]]),
        np.concatenate([head[first], tail[last]]),
    )
    places = (extract.node_lon_e7, extract.node_lat_e7)
    _, bearing = geodesics(*places, here.astype(np.int64), there.astype(np.int64))
    rank = traits.class_code[segments.way[chains.segment[np.concatenate([first, last])]]]
    is_road = np.concatenate([~is_ferry, ~is_ferry])
    sharp_deg = rules.delays_s["sharp_deg"]
    off = turns_off(here.astype(np.int64), bearing, rank, is_road, sharp_deg)
    seconds = np.where(off, rules.delays_s["smaller_road"], 0.0)
    return seconds[: len(first)], seconds[len(first) :]


def _delays_of_edges(
    segments: Segments, chains: Chains, turn_s: tuple[Float64, Float64]
) -> dict[str, npt.NDArray[Any]]:
    """Delays of the directed edges, forward and backward by turns."""
    delays = _directed(segments.forward_delay_s, segments.backward_delay_s, chains)
    sums = [np.add.reduceat(delay, chains.first[:-1]) for delay in delays]
    both = [one + turn for one, turn in zip(sums, turn_s, strict=True)]
    return {
        "edge_turn_s": np.column_stack(turn_s).ravel().astype(np.float32),
        "edge_delay_s": np.column_stack(both).ravel().astype(np.float32),
    }


def _directed(ab: Float64, ba: Float64, chains: Chains) -> tuple[Float64, Float64]:
    """Values of the segments of each edge along the edge and against it."""
    along, back = ab[chains.segment], ba[chains.segment]
    return np.where(chains.against, back, along), np.where(chains.against, along, back)


def _edge_sums(values: Float64, chains: Chains) -> Float64:
    """Sum of a segment's value over the segments of each edge."""
    return np.asarray(np.add.reduceat(values[chains.segment], chains.first[:-1]))


def _flagged_m(flag: Bool, segments: Segments, chains: Chains) -> Float32:
    """Length of each edge on ways with a flag."""
    return _edge_sums(segments.length_m * flag[segments.way], chains).astype(np.float32)


def _geometry(
    extract: RoadExtract, traits: WayTraits, segments: Segments, chains: Chains
) -> dict[str, npt.NDArray[Any]]:
    """Vertices of the edges, with what holds on the stretch from each to the next."""
    edges = len(chains.start)
    edge_first = chains.first + np.arange(edges + 1)
    stretch = np.arange(len(chains.segment)) + np.repeat(
        np.arange(edges), np.diff(chains.first)
    )  # vertex that each segment starts at
    tail = np.where(chains.against, segments.b[chains.segment], segments.a[chains.segment])
    vertex = np.empty(edge_first[-1], dtype=np.int64)
    vertex[stretch] = tail
    vertex[edge_first[1:] - 1] = chains.end

    def on_stretches(values: npt.NDArray[Any]) -> npt.NDArray[Any]:
        result = np.zeros(len(vertex), dtype=values.dtype)
        result[stretch] = values
        return result

    way = segments.way[chains.segment]
    kmh = _directed(*_speeds(segments), chains)
    delay = _directed(segments.forward_delay_s, segments.backward_delay_s, chains)
    flags = flag_bits(traits.is_toll[way], traits.is_unpaved[way])
    return {
        "edge_first": edge_first,
        "vertex_lon_e7": extract.node_lon_e7[vertex],
        "vertex_lat_e7": extract.node_lat_e7[vertex],
        "vertex_forward_kmh": on_stretches(kmh[0].astype(np.float32)),
        "vertex_backward_kmh": on_stretches(kmh[1].astype(np.float32)),
        "vertex_forward_delay_s": on_stretches(delay[0].astype(np.float32)),
        "vertex_backward_delay_s": on_stretches(delay[1].astype(np.float32)),
        "vertex_flags": on_stretches(flags),
    }


def _speeds(segments: Segments) -> tuple[Float64, Float64]:
    """Speed of each segment in both directions, km/h; 0 where closed."""
    speeds = []
    for time_s in (segments.forward_s, segments.backward_s):
        usable = np.where(time_s > 0, time_s, np.inf)
        kmh = np.where(np.isnan(time_s), 0, segments.length_m / usable * 3.6)
        speeds.append(np.where(time_s == 0, 1, kmh))  # no length: any speed will do
    return speeds[0], speeds[1]
