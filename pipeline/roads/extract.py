"""The internal form that every reader of road data ends in: ways over located nodes."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
import pandas as pd

from pipeline.roads.arrays import Float64, Int32, Int64
from pipeline.roads.signs import TaggedNodes, TurnRelations

# Keys that the rules of the road read; readers keep these tags and no other.
TAG_KEYS = (
    "highway",
    "route",
    "junction",
    "access",
    "vehicle",
    "motor_vehicle",
    "motorcar",
    "motorcycle",
    "bicycle",
    "foot",
    "access:conditional",
    "vehicle:conditional",
    "motor_vehicle:conditional",
    "motorcar:conditional",
    "motorcycle:conditional",
    "bicycle:conditional",
    "foot:conditional",
    "seasonal",
    "oneway",
    "oneway:vehicle",
    "oneway:motor_vehicle",
    "oneway:motorcar",
    "oneway:motorcycle",
    "oneway:bicycle",
    "oneway:foot",
    "oneway:conditional",
    "maxspeed",
    "maxspeed:forward",
    "maxspeed:backward",
    "maxspeed:conditional",
    "maxspeed:type",
    "source:maxspeed",
    "zone:maxspeed",
    "surface",
    "smoothness",
    "tracktype",
    "ford",
    "4wd_only",
    "toll",
    "toll:motorcar",
    "duration",
)

E7 = 1e-7  # degrees in one unit of a stored coordinate


def degrees(coordinate_e7: Int32) -> Float64:
    """Stored coordinates in degrees."""
    return np.asarray(coordinate_e7 * E7, dtype=np.float64)


@dataclass(frozen=True)
class RoadExtract:
    """Roads and ferries as they were mapped, before any rule is applied.

    Attributes
    ----------
    node_id : (n,) OSM node ids, ascending.
    node_lon_e7, node_lat_e7 : (n,) WGS 84 in units of 1e-7 degree.
    way_id : (w,) OSM way ids, ascending.
    way_start : (w + 1,) way `i` runs over `way_node[way_start[i]:way_start[i + 1]]`.
    way_node : (r,) index into the nodes; -1 where the extract lacks the node.
    way_tags : one row per way, one categorical column for each of `TAG_KEYS`.
    tagged_nodes : nodes with barriers, signals, signs and the like.
    turn_relations : turn restrictions.
    """

    node_id: Int64
    node_lon_e7: Int32
    node_lat_e7: Int32
    way_id: Int64
    way_start: Int64
    way_node: Int32
    way_tags: pd.DataFrame
    tagged_nodes: TaggedNodes = field(default_factory=TaggedNodes)
    turn_relations: TurnRelations = field(default_factory=TurnRelations)

    @property
    def ways(self) -> int:
        """How many ways there are."""
        return len(self.way_id)

    def degrees(self, nodes: Int64 | Int32) -> tuple[Float64, Float64]:
        """Longitude and latitude of the given nodes."""
        return degrees(self.node_lon_e7[nodes]), degrees(self.node_lat_e7[nodes])
