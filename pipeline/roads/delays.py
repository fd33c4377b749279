"""Delays: seconds lost at signals, signs, crossings, booths and fords, and in turning off.

A node's delay is charged to whoever drives up to it, in the direction that the sign faces (a
stop or give-way sign that does not say is charged half in both). Turning off costs whoever
leaves a junction by an edge of a smaller class than the largest road there, if every turn into
it from those larger roads is sharp; who crosses a larger road on the smaller one has to give
way there, and pays the same.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd

from pipeline.errors import RouteError
from pipeline.roads.arrays import Bool, Float64, Int32, Int64, compiled, offsets
from pipeline.roads.extract import RoadExtract
from pipeline.roads.signs import NODE_HIGHWAYS


def node_delays_s(extract: RoadExtract, seconds: dict[str, float]) -> tuple[Float64, Float64]:
    """Delay at each node of the extract for who drives along its way, and against it.

    Parameters
    ----------
    extract : with its tagged nodes.
    seconds : section [delays_s] of config/roads.toml.
    """
    tags = extract.tagged_nodes.tags
    spent = _of_values(tags["highway"], {name: seconds[name] for name in sorted(NODE_HIGHWAYS)})
    spent = np.fmax(spent, _of_values(tags["barrier"], {"toll_booth": seconds["toll_booth"]}))
    spent = np.fmax(spent, (tags["ford"].astype(object) == "yes").to_numpy() * seconds["ford"])
    signal = tags["traffic_signals:direction"].astype(object)
    faces = np.asarray(signal.where(signal.notna(), tags["direction"].astype(object)))
    is_sign = tags["highway"].isin(["stop", "give_way"]).to_numpy()
    unknown = is_sign & (faces != "forward") & (faces != "backward") & (faces != "both")
    spent = np.where(unknown, spent / 2, spent)
    along, against = np.zeros(len(extract.node_id)), np.zeros(len(extract.node_id))
    along[extract.tagged_nodes.node] = np.where(faces == "backward", 0, spent)
    against[extract.tagged_nodes.node] = np.where(faces == "forward", 0, spent)
    return along, against


def _of_values(column: pd.Series[str], seconds: dict[str, float]) -> Float64:
    return np.array([seconds.get(value, 0.0) for value in column.astype(object)], dtype=np.float64)


def turns_off(
    node: Int64, bearing_deg: Float64, rank: Int32, is_road: Bool, sharp_deg: float
) -> Bool:
    """Ends of edges at which one turns off sharply into a smaller road.

    Parameters
    ----------
    node : junction of each end.
    bearing_deg : direction in which the edge leaves it.
    rank : class of the edge; higher is smaller.
    is_road : whether it is no ferry.
    sharp_deg : how far from straight on a turn is sharp.
    """
    order = np.argsort(node, kind="stable")
    first = offsets(np.bincount(node[order]).astype(np.int64))
    found = _turns_off(first, bearing_deg[order], rank[order], is_road[order], sharp_deg)
    result = np.zeros(len(node), dtype=np.bool_)
    result[order] = found
    return result


@compiled
def _turns_off(
    first: Int64, bearing_deg: Float64, rank: Int32, is_road: Bool, sharp_deg: float
) -> Bool:
    result = np.zeros(len(rank), dtype=np.bool_)
    for node in range(len(first) - 1):
        largest = 1 << 30
        for end in range(first[node], first[node + 1]):
            if is_road[end]:
                largest = min(largest, rank[end])
        for end in range(first[node], first[node + 1]):
            if not is_road[end] or rank[end] == largest:
                continue
            sharp = True
            for other in range(first[node], first[node + 1]):
                if is_road[other] and rank[other] == largest:
                    turn = abs((bearing_deg[end] - bearing_deg[other]) % 360.0 - 180.0)
                    sharp = sharp and turn >= sharp_deg
            result[end] = sharp
    return result


@dataclass(frozen=True)
class Calibration:
    """How measured times compare with modelled ones.

    Attributes
    ----------
    factor : what to multiply roads.calibration_factor by.
    pairs : how many pairs were compared.
    error_before, error_after : median absolute difference, as a share of the measured time.
    """

    factor: float
    pairs: int
    error_before: float
    error_after: float


def fit_calibration(routes: pd.DataFrame, measured: pd.DataFrame) -> Calibration:
    """One factor that makes the times on roads add up to the measured ones; ferries are exact.

    Parameters
    ----------
    routes : the table of routes.
    measured : `zone_id`, `site_id`, `measured_min` (door to site, one way).

    Raises
    ------
    RouteError
        No measured pair is routed with some time on roads.
    """
    pairs = measured.merge(routes, on=["zone_id", "site_id"], how="inner", validate="one_to_one")
    on_roads = pairs["drive_time_min"] - pairs["ferry_min"]
    wanted = pairs["measured_min"] - pairs["ferry_min"]
    usable = (on_roads > 0) & (wanted > 0)
    if not usable.any():
        raise RouteError(
            f"none of the {len(measured)} measured times belongs to a routed pair with time on "
            "roads; check zone_id and site_id of the measured table against the routes table."
        )
    on_roads, wanted, measured_min = on_roads[usable], wanted[usable], pairs["measured_min"][usable]
    factor = float(wanted.sum() / on_roads.sum())
    before, after = (
        float(((on_roads * f - wanted).abs() / measured_min).median()) for f in (1.0, factor)
    )
    return Calibration(factor, int(usable.sum()), before, after)
