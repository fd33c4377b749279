"""Which roads are left out of the graph, as lines with the reason."""

from __future__ import annotations

from pathlib import Path

import pytest

from pipeline.publish.layers import dropped_roads, roads_in_use
from pipeline.roads.road_lines import CLOSED_BY_RULE, NO_WAY_BACK
from pipeline.tables import RoadLines
from tests.roads.worlds import ROAD, STEP_KM, Places, Ways, graph_of


def test_what_is_left_out_and_why(tmp_path: Path) -> None:
    """a ── b ── c is used; c ──private── d, the island p ── q and the stub b → n are not.

    The path a ··· d is no road for cars, and is not called one. The private way that lacks a
    node has no line.
    """
    places: Places = {name: (i * 0.01, 0.0) for i, name in enumerate("abcd")}
    places |= {"p": (0.0, 0.02), "q": (0.01, 0.02), "n": (0.01, -0.01)}
    ways: Ways = [
        ("a b c", ROAD),
        ("c d", ROAD | {"access": "private"}),
        ("p q", ROAD),
        ("b n", ROAD | {"oneway": "yes"}),
        ("a d", {"highway": "path"}),
        ("d missing", ROAD | {"access": "no"}),
    ]
    lines = graph_of(tmp_path, places, ways)[2]
    RoadLines.checked(lines)
    left_out = dropped_roads(lines)
    in_use = roads_in_use(lines)
    assert left_out is not None
    assert in_use is not None
    assert in_use["distance_km"].sum() == pytest.approx(2 * STEP_KM, abs=1e-5)
    found = left_out.groupby("left_out")["distance_km"].sum()
    assert found[CLOSED_BY_RULE] == pytest.approx(STEP_KM, abs=1e-5)
    assert found[NO_WAY_BACK] == pytest.approx(STEP_KM + 1.105743, abs=1e-5)
    assert left_out.geometry.notna().all()


def test_nothing_is_left_out_of_a_sound_network(tmp_path: Path) -> None:
    lines = graph_of(tmp_path, {"a": (0.0, 0.0), "b": (0.01, 0.0)}, [("a b", ROAD)])[2]
    left_out = dropped_roads(lines)
    assert left_out is not None
    assert left_out.empty
