"""Writes the invented roads as an OSM PBF file: fixed numbers, versions and times."""

from __future__ import annotations

import datetime as dt
from pathlib import Path
from typing import Any

import numpy as np
import osmium
from demo_land import to_lon_lat
from demo_ways import Network
from osmium.osm import mutable

FIRST_NODE, FIRST_WAY, FIRST_RELATION = 1_001, 500_001, 900_001
WRITTEN = dt.datetime(2025, 1, 1, tzinfo=dt.UTC)


def write_pbf(network: Network, path: Path) -> None:
    """Write `network` to `path` (OSM PBF); the same network gives the same bytes."""
    header = osmium.io.Header()
    header.set("generator", "invented demo roads")
    places = to_lon_lat(np.array(network.xy))
    writer = osmium.SimpleWriter(str(path), header=header, overwrite=True)
    try:
        for number, (lon, lat) in enumerate(places):
            tags = network.node_tags.get(number, {})
            writer.add_node(
                mutable.Node(location=(lon, lat), **_attributes(FIRST_NODE + number, tags))
            )
        for number, way in enumerate(network.ways):
            nodes = [FIRST_NODE + node for node in way.nodes]
            writer.add_way(mutable.Way(nodes=nodes, **_attributes(FIRST_WAY + number, way.tags)))
        for number, turn in enumerate(network.no_turns):
            writer.add_relation(_no_turn(FIRST_RELATION + number, turn))
    finally:
        writer.close()


def _attributes(number: int, tags: dict[str, str]) -> dict[str, Any]:
    return {"id": number, "version": 1, "timestamp": WRITTEN, "tags": tags}


def _no_turn(number: int, turn: tuple[int, int, int]) -> mutable.Relation:
    from_way, via, to_way = turn
    members = [
        ("w", FIRST_WAY + from_way, "from"),
        ("n", FIRST_NODE + via, "via"),
        ("w", FIRST_WAY + to_way, "to"),
    ]
    tags = {"type": "restriction", "restriction": "no_left_turn"}
    return mutable.Relation(members=members, **_attributes(number, tags))
