"""The invented county's roads: country roads, streets, a motorway, a toll bridge, a ferry.

Country roads join villages, hamlets and road junctions that are neighbours (Gabriel graph:
Gabriel and Sokal, 1969), unless water lies between; what the towns and villages use most
becomes a higher class. Coordinates are km on the plane of ``demo_land``.
"""

from __future__ import annotations

import numpy as np
import shapely
from demo_country import Roads, classify, country_graph, draw_country_roads, forbid_turns
from demo_land import (
    BRIDGE_X,
    HIDES_XY,
    ISLAND_XY,
    LAGOON_XY,
    LAKE_XY,
    RESERVE_XY,
    TOWNS,
    County,
    Points,
    estuary_half_width_km,
    estuary_middle_km,
)
from demo_streets import Streets, draw_streets
from demo_ways import Network, bends
from scipy.interpolate import CubicSpline
from shapely.geometry import Point

MOTORWAY = ((-21.0, 20.5), (-10.0, 16.0), (0.5, 8.0), (2.5, -1.0), (-3.0, -10.0), (-13.5, -16.5))
JUNCTIONS_AT = (0.22, 0.5, 0.78)


def make_network(county: County, seed: int) -> Network:
    """Draw all roads of the county. The same seed gives the same roads."""
    rng = np.random.default_rng([seed, 2])
    network = Network()
    streets = draw_streets(network, rng)
    junctions = _motorway(network)
    places = _mainland_places(county, streets, rng)
    nodes = streets.rim + junctions + [network.add_node(xy) for xy in places]
    roads = country_graph(network, nodes, county.mainland, streets, rng)
    bridge = _toll_bridge(network, roads)
    villages = [network.nearest(nodes, place) for place in _villages(county)]
    classify(roads, streets, junctions, bridge, villages)
    draw_country_roads(network, roads, rng)
    forbid_turns(network, roads)
    _estate_road(network, roads)
    _island(network, county, nodes, rng)
    _reserve(network, nodes)
    return network


def _villages(county: County) -> Points:
    first = sum(town.districts for town in TOWNS)
    return np.vstack([county.seeds[first:-2], [RESERVE_XY, HIDES_XY, LAGOON_XY, LAKE_XY]])


def _mainland_places(county: County, streets: Streets, rng: np.random.Generator) -> Points:
    """District middles outside the street grids, sites, and hamlets in between."""
    fixed = np.vstack([county.seeds[:-2], [RESERVE_XY, HIDES_XY, LAGOON_XY, LAKE_XY]])
    kept = [xy for xy in fixed if not any(grid.contains(Point(xy)) for grid in streets.grids)]
    inland = county.mainland.buffer(-0.7)
    shapely.prepare(inland)
    for xy in rng.uniform((-57, -41), (57, 41), size=(6_000, 2)):
        if len(kept) > 560:
            break
        apart = min(float(np.hypot(*(xy - other))) for other in kept)
        in_town = any(grid.buffer(0.5).contains(Point(xy)) for grid in streets.grids)
        if apart > 1.8 and not in_town and inland.contains(Point(xy)):
            kept.append(xy)
    return np.array(kept)


def _motorway(network: Network) -> list[int]:
    """Two one-way carriageways with links; returns its end and junction nodes."""
    control = np.array(MOTORWAY)
    along = np.concatenate([[0], np.cumsum(np.hypot(*np.diff(control, axis=0).T))])
    curve = CubicSpline(along, control)
    at = np.linspace(0, along[-1], round(along[-1] / 0.3))
    middle, slope = curve(at), curve(at, 1)
    right = np.column_stack([slope[:, 1], -slope[:, 0]]) / np.hypot(*slope.T)[:, None]
    ends = [network.add_node(middle[0]), network.add_node(middle[-1])]
    south = [network.add_node(xy) for xy in (middle + 0.012 * right)[1:-1]]
    north = [network.add_node(xy) for xy in (middle - 0.012 * right)[1:-1]]
    tags = {"highway": "motorway", "ref": "M1", "oneway": "yes", "maxspeed": "120", "lanes": "2"}
    network.add_way([ends[0], *south, ends[1]], tags)
    network.add_way([ends[1], *reversed(north), ends[0]], tags)
    junctions = []
    for share in JUNCTIONS_AT:
        m = round(share * len(south))
        junction = network.add_node(middle[m + 1] + 0.5 * right[m + 1])
        junctions.append(junction)
        for start, stop in ((south[m - 2], junction), (junction, south[m + 2])):
            _link(network, start, stop, over=False)
        for start, stop in ((north[m + 2], junction), (junction, north[m - 2])):
            _link(network, start, stop, over=True)
    return ends + junctions


def _link(network: Network, start: int, stop: int, *, over: bool) -> None:
    tags = {"highway": "motorway_link", "oneway": "yes"}
    if over:
        tags |= {"bridge": "yes", "layer": "1"}
    ramp = np.linspace(network.at(start), network.at(stop), 4)[1:-1]
    network.add_road(start, stop, ramp, tags)


def _toll_bridge(network: Network, roads: Roads) -> tuple[int, int]:
    """A bridge over the mouth of the estuary, with a toll."""
    x = np.array([BRIDGE_X])
    middle, half = float(estuary_middle_km(x)[0]), float(estuary_half_width_km(x)[0])
    nodes = list(roads.nodes)
    shores = [(BRIDGE_X, middle + (half + 0.9)), (BRIDGE_X, middle - (half + 0.9))]
    north, south = (network.nearest(nodes, shore) for shore in shores)
    between = np.linspace(network.at(north), network.at(south), 9)[1:-1]
    tags = {"highway": "primary", "ref": "A3", "name": "Sallow Reach Bridge"}
    tags |= {"bridge": "yes", "toll": "yes", "maxspeed": "70", "layer": "1"}
    network.add_road(north, south, between, tags)
    return north, south


def _estate_road(network: Network, roads: Roads) -> None:
    """A tempting short cut through a private estate: closed to visitors."""
    nodes = list(roads.nodes)
    lodge, reserve = (network.nearest(nodes, xy) for xy in ((-37.5, -9.5), RESERVE_XY))
    between = np.linspace(network.at(lodge), network.at(reserve), 30)[1:-1]
    tags = {"highway": "unclassified", "access": "private", "name": "Gossamley Estate Drive"}
    network.add_road(lodge, reserve, between, tags | {"maxspeed": "60"})


def _island(network: Network, county: County, nodes: list[int], rng: np.random.Generator) -> None:
    """A ring road with spokes on the island, and the car ferry from the mainland."""
    ring = [
        np.array(ISLAND_XY) + 2.8 * np.array([np.cos(a), np.sin(a)])
        for a in np.arange(8) * np.pi / 4
    ]
    around = [network.add_node(xy) for xy in ring]
    middle = network.add_node(ISLAND_XY, place="village", name="Tessamay Haven", population="1240")
    for number, node in enumerate(around):
        following = around[(number + 1) % 8]
        ring_road = bends(network.at(node), network.at(following), rng)
        network.add_road(node, following, ring_road, {"highway": "tertiary"})
        if number % 2 == 0:
            spoke = bends(network.at(node), network.at(middle), rng)
            network.add_road(node, middle, spoke, {"highway": "unclassified", "maxspeed": "50"})
    port = network.nearest(nodes, (-55.0, -13.0))
    quay = network.add_node(
        shapely.get_coordinates(
            county.mainland.exterior.interpolate(
                county.mainland.exterior.project(Point(network.xy[port]))
            )
        )[0]
    )
    road = np.linspace(network.at(port), network.at(quay), 4)[1:-1]
    network.add_road(port, quay, road, {"highway": "secondary"})
    crossing = np.linspace(network.at(quay), network.at(around[0]), 6)[1:-1]
    tags = {"route": "ferry", "name": "Tessamay Ferry", "motor_vehicle": "yes", "foot": "yes"}
    network.add_road(quay, around[0], crossing, tags | {"duration": "00:45"})


def _reserve(network: Network, nodes: list[int]) -> None:
    """Car parks, boardwalks and hides: no car goes further than the car park."""
    for name, place in (("Main", RESERVE_XY), ("Hides", HIDES_XY)):
        node = network.nearest(nodes, place)
        park = network.add_node(network.at(node) + np.array([0.08, 0.06]), amenity="parking")
        tags = {"highway": "service", "service": "parking_aisle", "name": f"{name} car park"}
        network.add_way([node, park], tags)
        steps = [np.array([0.09 * step, 0.05 * (step % 3)]) for step in range(1, 7)]
        walk = [park, *(network.add_node(network.at(park) + step) for step in steps)]
        network.add_way(walk, {"highway": "path", "bridge": "boardwalk", "surface": "wood"})
        network.node_tags[walk[-1]] = {"leisure": "bird_hide", "name": f"{name} hide"}
