"""Ferries, booths and tolls: counted along the route, and priced by their OSM ids."""

from __future__ import annotations

from pathlib import Path

import pandas as pd
import pytest

from pipeline.costs import cost
from pipeline.routes import route
from pipeline.tables import Costs, Routes
from tests.roads.worlds import (
    ROAD,
    STEP_KM,
    Places,
    Ways,
    a_study,
    graph_of,
    signed_graph_of,
    sites_at,
    zones_at,
)

# a ── b ── c ── d ── e along the equator.
LINE: Places = {name: (i * 0.01, 0.0) for i, name in enumerate("abcde")}
TOLL = ROAD | {"toll": "yes"}
FERRY = {"route": "ferry", "duration": "10"}


def charged(
    folder: Path,
    ways: Ways,
    start: tuple[float, float],
    end: tuple[float, float],
    *,
    signs: dict[str, dict[str, str]] | None = None,
    charges: dict[str, object] | None = None,
    places: Places = LINE,
) -> pd.Series:
    """The row of the route from one point to the other."""
    graph, _, _ = signed_graph_of(folder, places, ways, signs=signs)
    study = a_study(routes={"charges": charges or {}})
    table = Routes.checked(
        route(zones_at({"z": start}), sites_at({"s": end}), graph, study=study)[0]
    )
    return table.iloc[0]


def test_a_listed_toll_is_due_in_proportion(tmp_path: Path) -> None:
    """b ══ c ══ d is one toll way (id 2) of 8.00 for all of it; of it a zone half way b c uses 3/4.

    From a to e all of it is driven, and none of it is left for the price per km.
    """
    ways: Ways = [("a b", ROAD), ("b c d", TOLL), ("d e", ROAD)]
    charges: dict[str, object] = {"toll_by_way": {"2": 8.0}}
    row = charged(tmp_path, ways, LINE["a"], LINE["e"], charges=charges)
    assert row["listed_toll"] == pytest.approx(8.0)
    assert row["listed_toll_km"] == pytest.approx(row["toll_km"]) == pytest.approx(2 * STEP_KM)
    row = charged(tmp_path, ways, (0.015, 0.0), LINE["e"], charges=charges)
    assert row["listed_toll"] == pytest.approx(6.0, abs=1e-4)
    row = charged(tmp_path, ways, LINE["e"], (0.015, 0.0), charges=charges)
    assert row["listed_toll"] == pytest.approx(6.0, abs=1e-4)
    row = charged(tmp_path, ways, (0.0125, 0.0), (0.0225, 0.0), charges=charges)
    assert row["listed_toll"] == pytest.approx(4.0, abs=1e-4)
    row = charged(tmp_path, ways, LINE["a"], LINE["e"])
    assert (row["listed_toll"], row["listed_toll_km"]) == (0, 0)


@pytest.mark.parametrize("tags", [{"barrier": "toll_booth"}, {"highway": "toll_booth"}])
def test_booths_are_counted_where_they_are_passed(tmp_path: Path, tags: dict[str, str]) -> None:
    """Booths at b (node 2, 1.50) and d (node 4, not listed); a zone past b pays at d only."""
    ways: Ways = [("a b c d e", ROAD)]
    signs, charges = {"b": tags, "d": tags}, {"toll_by_booth": {"2": 1.5}}
    row = charged(tmp_path, ways, LINE["a"], LINE["e"], signs=signs, charges=dict(charges))
    assert row[["toll_booths", "listed_booths", "listed_toll"]].tolist() == [2, 1, 1.5]
    row = charged(tmp_path, ways, (0.015, 0.0), LINE["e"], signs=signs, charges=dict(charges))
    assert row[["toll_booths", "listed_booths", "listed_toll"]].tolist() == [1, 0, 0]
    row = charged(tmp_path, ways, LINE["e"], (0.015, 0.0), signs=signs, charges=dict(charges))
    assert row["toll_booths"] == 1
    row = charged(tmp_path, ways, (0.015, 0.0), (0.025, 0.0), signs=signs)
    assert row["toll_booths"] == 0


def test_ferries_are_counted_and_a_crossing_in_pieces_is_one(tmp_path: Path) -> None:
    """a ── b ~~ c ~~ d ── e: one crossing of two ways (2 and 3), boarded at b by way 2."""
    ways: Ways = [("a b", ROAD), ("b c", FERRY), ("c d", FERRY), ("d e", ROAD)]
    charges: dict[str, object] = {
        "ferry_per_vehicle": {"2": 20.0, "3": 30.0},
        "ferry_per_person": {"2": 5.0, "3": 7.0},
    }
    row = charged(tmp_path, ways, LINE["a"], LINE["e"], charges=charges)
    assert row[["ferry_count", "listed_ferries"]].tolist() == [1, 1]
    assert (row["listed_fare_per_vehicle"], row["listed_fare_per_person"]) == (20, 5)
    row = charged(tmp_path, ways, LINE["e"], LINE["a"], charges=charges)
    assert (row["listed_fare_per_vehicle"], row["listed_fare_per_person"]) == (30, 7)
    row = charged(tmp_path, ways, LINE["a"], LINE["e"])
    assert row[["ferry_count", "listed_ferries", "listed_fare_per_vehicle"]].tolist() == [1, 0, 0]


def test_two_ferries_are_two_fares_and_persons_pay_theirs(tmp_path: Path) -> None:
    """a ~~ b ── c ~~ d ── e: way 1 is listed (12 a car, 3 a head), the other has the usual fare.

    A party of 2, there and back: vehicle 2 × (12 + 10) ÷ 2 each, persons 2 × (3 + 4); a toll of
    0.10 a km on d ── e and a booth of 2.00 at c: 2 × (0.10 × km + 2) ÷ 2 each.
    """
    ways: Ways = [("a b", FERRY), ("b c", ROAD), ("c d", FERRY), ("d e", TOLL), ("a f", ROAD)]
    places = LINE | {"f": (-0.01, 0.0)}
    signs = {"c": {"barrier": "toll_booth"}}
    graph, _, _ = signed_graph_of(
        tmp_path, places, ways, signs=signs, roads={"main_network_km": 0.1}
    )
    charges = {"ferry_per_vehicle": {"1": 12.0}, "ferry_per_person": {"1": 3.0}}
    costs: dict[str, object] = {
        "vehicle_cost_per_km": 0.2,
        "wage_fraction": 0.0,
        "party_size": 2.0,
        "ferry_fare_per_vehicle": 10.0,
        "ferry_fare_per_person": 4.0,
        "toll_per_km": 0.1,
        "toll_per_booth": 2.0,
    }
    study = a_study(routes={"charges": charges}, costs=costs)
    zones = zones_at({"z": places["f"]}).assign(household_income=30_000.0)
    sites = sites_at({"s": LINE["e"]})
    routes = route(zones, sites, graph, study=study)[0]
    assert routes[["ferry_count", "listed_ferries", "toll_booths"]].iloc[0].tolist() == [2, 1, 1]
    row = Costs.checked(cost(routes, zones, sites, None, study=study)[0]).iloc[0]
    assert row["ferry_cost"] == pytest.approx(22 + 14)
    assert row["toll_cost"] == pytest.approx(0.1 * STEP_KM + 2, abs=1e-5)


def test_a_routes_table_without_counts_is_priced_as_before(tmp_path: Path) -> None:
    """A table that a study brings has ferry km only: one ferry each way."""
    graph, _, _ = graph_of(tmp_path, LINE, [("a b", ROAD), ("b c d", FERRY), ("d e", ROAD)])
    zones = zones_at({"z": LINE["a"]}).assign(household_income=30_000.0)
    sites = sites_at({"s": LINE["e"]})
    costs: dict[str, object] = {
        "vehicle_cost_per_km": 0.2,
        "wage_fraction": 0.0,
        "party_size": 1.0,
        "ferry_fare_per_vehicle": 10.0,
    }
    study = a_study(costs=costs)
    routes = route(zones, sites, graph, study=study)[0]
    bare = routes.drop(
        columns=[c for c in map(str, routes) if c.startswith(("listed", "ferry_count"))]
    )
    for table in (routes, bare):
        row = cost(table, zones, sites, None, study=study)[0].iloc[0]
        assert row["ferry_cost"] == pytest.approx(20)
