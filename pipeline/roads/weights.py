"""What the search makes least: time, distance, or money and time together.

A search carries two weights in one integer (see ``graph``): it makes the upper one least, and
among equals the lower one, which is the distance in millimetres. The upper one is the time in
hundredths of a second. For the generalised cost, money is added to it as the time that is worth
as much, so that the search is as exact, and as fast, as for time alone.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from pipeline.road_settings import GeneralisedSettings, RoutesSettings
from pipeline.roads.arrays import Bool, Float64, Int32, Int64
from pipeline.roads.graph import DISTANCE_BITS, DISTANCE_MASK, RoadGraph
from pipeline.roads.places import Places
from pipeline.roads.tariffs import PARTS, PartDues, Tariffs

SIDES = {
    "to_start": "start_toll_m",
    "from_start": "start_toll_m",
    "to_end": "end_toll_m",
    "from_end": "end_toll_m",
}


@dataclass(frozen=True)
class Weights:
    """Costs as the search sees them.

    Attributes
    ----------
    homes, doors : the places with such costs between them and the ends of their edges.
    home_gap, door_gap : of the gaps between points and their roads.
    by_time : whether the upper weight counts; else distance alone.
    price : of a trip, where money counts; None: the packed costs themselves are searched.
    """

    homes: Places
    doors: Places
    home_gap: Int64
    door_gap: Int64
    by_time: bool = True
    price: Price | None = None
    _made: dict[str, Int64] = field(default_factory=dict)

    @property
    def is_plain(self) -> bool:
        """Whether what is made least is the time."""
        return self.by_time and self.price is None

    def of_arcs(self, graph: RoadGraph, tariffs: Tariffs, name: str) -> Int64:
        """Weights of the graph's arcs, for `arc_cost` or `in_cost`; worked out once."""
        cost: Int64 = getattr(graph, name)
        if self.price is None:
            return cost
        if name not in self._made:
            edge = getattr(graph, name.replace("cost", "edge"))
            self._made[name] = self.price.of_arcs(graph, tariffs, cost, edge)
        return self._made[name]

    def __getstate__(self) -> dict[str, Any]:
        """What goes to another process: not the weights of arcs, which it works out itself."""
        return {**self.__dict__, "_made": {}}

    def __setstate__(self, state: dict[str, Any]) -> None:
        """Take what came from another process."""
        self.__dict__.update(state)

    @classmethod
    def of(
        cls,
        graph: RoadGraph,
        tariffs: Tariffs,
        homes: Places,
        doors: Places,
        gaps: tuple[Int64, Int64],
        settings: RoutesSettings,
    ) -> Weights:
        """Weights of what [routes] minimise asks for."""
        if settings.minimise == "time":
            return cls(homes, doors, *gaps)
        if settings.minimise == "distance":
            return cls(
                _lengths(homes),
                _lengths(doors),
                gaps[0] & DISTANCE_MASK,
                gaps[1] & DISTANCE_MASK,
                by_time=False,
            )
        price = Price.of(settings.generalised)
        return cls(
            price.of_places(homes, tariffs.of_places(graph, homes)),
            price.of_places(doors, tariffs.of_places(graph, doors)),
            price.of_gaps(gaps[0]),
            price.of_gaps(gaps[1]),
            price=price,
        )


def _lengths(places: Places) -> Places:
    """The places with distances for costs; closed directions stay closed."""
    costs = {part: getattr(places, part) for part in PARTS}
    return replace(
        places, **{part: np.where(c < 0, c, c & DISTANCE_MASK) for part, c in costs.items()}
    )


@dataclass(frozen=True)
class Price:
    """What a trip costs the party, in money, and what its time is worth.

    Attributes
    ----------
    per_mm : of driving.
    toll_per_m : of toll roads that are not listed.
    charge : (8,) of one unit of each of ``tariffs.CHARGES``.
    value_per_cs : of a hundredth of a second.
    """

    per_mm: float
    toll_per_m: float
    charge: Float64
    value_per_cs: float

    @classmethod
    def of(cls, settings: GeneralisedSettings) -> Price:
        """Prices as the study states them; what it leaves out costs nothing."""
        people = settings.people or 1.0
        ferry = (settings.ferry_fare_per_vehicle or 0.0) + people * (
            settings.ferry_fare_per_person or 0.0
        )
        booth, per_km = settings.toll_per_booth or 0.0, settings.toll_per_km or 0.0
        return cls(
            per_mm=(settings.vehicle_cost_per_km or 0.0) / 1e6,
            toll_per_m=per_km / 1000,
            charge=np.array([ferry, booth, -ferry, -booth, -per_km, 1.0, people, 1.0]),
            value_per_cs=(settings.value_of_time_per_hour or np.nan) / 360_000,
        )

    def weigh(self, cost: Int64, money: Float64) -> Int64:
        """Packed costs with money as time; closed ones stay closed."""
        extra = np.rint(money / self.value_per_cs).astype(np.int64)
        return np.where(cost < 0, cost, cost + (extra << DISTANCE_BITS))

    def of_arcs(self, graph: RoadGraph, tariffs: Tariffs, cost: Int64, arc_edge: Int32) -> Int64:
        """Weights of the graph's arcs."""
        edge = arc_edge // 2
        on_road: Bool = ~graph.edge_is_ferry[edge]
        money = on_road * (cost & DISTANCE_MASK) * self.per_mm
        money += graph.edge_toll_m[edge].astype(np.float64) * self.toll_per_m
        charged = np.flatnonzero(np.isin(arc_edge, tariffs.edge))
        whole = np.ones(len(charged))
        due = tariffs.of_edges(arc_edge[charged].astype(np.int64), whole > 0, whole)
        money[charged] += due @ self.charge
        return self.weigh(np.asarray(cost), money)

    def of_gaps(self, cost: Int64) -> Int64:
        """Weights of the gaps between points and roads, driven as any other road."""
        return self.weigh(cost, np.asarray((cost & DISTANCE_MASK) * self.per_mm, dtype=np.float64))

    def of_places(self, places: Places, dues: PartDues) -> Places:
        """Places with weights for costs."""
        weights: dict[str, Any] = {}
        for part in PARTS:
            cost = getattr(places, part)
            money = np.where(cost < 0, 0, cost & DISTANCE_MASK) * self.per_mm
            money = money + getattr(places, SIDES[part]) * self.toll_per_m
            weights[part] = self.weigh(cost, money + dues[part] @ self.charge)
        return replace(places, **weights)
