"""What the invented roads are drawn on: numbered nodes (km on the plane), ways and their tags."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from demo_land import Points


@dataclass(frozen=True)
class Way:
    """An OSM way: its nodes' numbers and its tags."""

    nodes: tuple[int, ...]
    tags: dict[str, str]


@dataclass
class Network:
    """Roads while they are drawn: nodes (km), their tags, ways, and turns that are forbidden."""

    xy: list[tuple[float, float]] = field(default_factory=list)
    node_tags: dict[int, dict[str, str]] = field(default_factory=dict)
    ways: list[Way] = field(default_factory=list)
    no_turns: list[tuple[int, int, int]] = field(default_factory=list)

    def add_node(self, xy: Points | tuple[float, float], **tags: str) -> int:
        """Add a node; its number."""
        self.xy.append((float(xy[0]), float(xy[1])))
        if tags:
            self.node_tags[len(self.xy) - 1] = tags
        return len(self.xy) - 1

    def add_way(self, nodes: list[int], tags: dict[str, str]) -> int:
        """Add a way; its number."""
        self.ways.append(Way(tuple(nodes), dict(tags)))
        return len(self.ways) - 1

    def add_road(self, start: int, stop: int, between: Points, tags: dict[str, str]) -> int:
        """Add a way from node to node through new nodes `between`."""
        return self.add_way([start, *(self.add_node(xy) for xy in between), stop], tags)

    def at(self, node: int) -> Points:
        """Place of a node (km)."""
        return np.array(self.xy[node])

    def nearest(self, nodes: list[int], place: tuple[float, float] | Points) -> int:
        """The node of `nodes` that lies nearest to a place (km)."""
        away = [float(np.hypot(*(self.at(node) - place))) for node in nodes]
        return nodes[int(np.argmin(away))]


def bends(start: Points, stop: Points, rng: np.random.Generator) -> Points:
    """Points of a winding road, about every 300 m, both ends left out."""
    km = float(np.hypot(*(stop - start)))
    t = np.linspace(0, 1, max(round(km / 0.3), 2) + 1)[1:-1]
    side = np.array([-(stop - start)[1], (stop - start)[0]])
    waves, phase, size = rng.uniform(1, 3), rng.uniform(0, 2 * np.pi), rng.uniform(0.02, 0.08)
    sway = size * np.sin(np.pi * t) * np.sin(2 * np.pi * waves * t + phase)
    return np.asarray(start + t[:, None] * (stop - start) + sway[:, None] * side, dtype=np.float64)
