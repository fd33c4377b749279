"""Streets of the invented towns: grids with one-way streets and a roundabout in the middle."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from demo_land import TOWNS, Town
from demo_ways import Network
from shapely.geometry import Polygon

HALF = 6
BLOCK_KM = 0.22
ARMS = ((1, 0), (0, 1), (-1, 0), (0, -1))


@dataclass(frozen=True)
class Streets:
    """Where the country roads meet the towns.

    Attributes
    ----------
    rim : nodes at the edge of the towns, the numbers of all towns together.
    gates : the same by town; the first four are the ends of the main streets.
    grids : outline of each town's grid (km).
    """

    rim: list[int]
    gates: list[list[int]]
    grids: list[Polygon]


def draw_streets(network: Network, rng: np.random.Generator) -> Streets:
    """Draw the grid of every town."""
    gates, grids = [], []
    for town in TOWNS:
        corner = _crossings(network, town, float(rng.uniform(0.1, 0.5)))
        _draw_grid(network, corner)
        _draw_roundabout(network, town, corner)
        mains = [(HALF, 0), (0, HALF), (-HALF, 0), (0, -HALF)]
        corners = [(HALF, HALF), (-HALF, HALF), (-HALF, -HALF), (HALF, -HALF)]
        gates.append([corner[end] for end in mains + corners])
        grids.append(Polygon([network.xy[corner[end]] for end in corners]))
    return Streets([node for town in gates for node in town], gates, grids)


def _crossings(network: Network, town: Town, turn: float) -> dict[tuple[int, int], int]:
    """Street corners by column and row, the middle left free for the roundabout."""
    axis = np.array([np.cos(turn), np.sin(turn)])
    across = np.array([-axis[1], axis[0]])
    steps = range(-HALF, HALF + 1)
    return {
        (i, j): network.add_node(np.array(town.xy) + BLOCK_KM * (i * axis + j * across))
        for i in steps
        for j in steps
        if (i, j) != (0, 0)
    }


def _draw_grid(network: Network, corner: dict[tuple[int, int], int]) -> None:
    steps = range(-HALF, HALF + 1)
    for line in steps:
        for along_columns in (True, False):
            nodes = [corner.get((s, line) if along_columns else (line, s)) for s in steps]
            tags = _street_tags(line)
            halves = [nodes] if line else [nodes[:HALF], nodes[HALF + 1 :]]
            for half in halves:
                network.add_way([node for node in half if node is not None], tags)


def _street_tags(line: int) -> dict[str, str]:
    """Main streets in the middle; one-way pairs beside them; some signs were never mapped."""
    if line == 0:
        return {"highway": "primary", "maxspeed": "50"}
    tags = {"highway": "residential"}
    if line in (-2, 2):
        tags["oneway"] = "yes" if line > 0 else "-1"
    if line % 3:
        tags["maxspeed"] = "30"
    return tags


def _draw_roundabout(network: Network, town: Town, corner: dict[tuple[int, int], int]) -> None:
    """Eight nodes, driven anticlockwise (traffic keeps right), with the four main streets."""
    start = network.at(corner[1, 0]) - np.array(town.xy)
    first = float(np.arctan2(start[1], start[0]))
    turns = first + np.arange(8) * np.pi / 4
    ring = [
        network.add_node(np.array(town.xy) + 0.03 * np.array([np.cos(a), np.sin(a)])) for a in turns
    ]
    network.add_way([*ring, ring[0]], {"highway": "primary", "junction": "roundabout"})
    for number, arm in enumerate(ARMS):
        arm_way = [corner[arm], ring[2 * number]]
        network.add_way(arm_way, {"highway": "primary", "maxspeed": "50"})
    middle = np.array(town.xy)
    people = str(round(town.people * town.districts, -2))
    network.add_node(middle, place="town", name=town.name, population=people.removesuffix(".0"))
