"""From ways to a graph: contraction, parallels, rings, networks, lengths, writing."""

from __future__ import annotations

from itertools import pairwise
from pathlib import Path

import networkx as nx
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pyproj import Geod

from pipeline.errors import RoadsError
from pipeline.roads import RoadGraph, build_roads, summarise_roads
from pipeline.roads.graph import unpack_distance_km
from pipeline.tables import RoadLines, RoadQuality
from tests.roads.worlds import ROAD, STEP_KM, Places, Ways, a_study, extract_of, graph_of

LINE: Places = {name: (i * 0.01, 0.0) for i, name in enumerate("abcde")}


def test_a_chain_becomes_one_edge_with_its_geodesic_length(tmp_path: Path) -> None:
    """a ── b ── c ── d ── e in two ways, one mapped against the other."""
    graph, _, _ = graph_of(tmp_path, LINE, [("a b c", ROAD), ("e d c", ROAD)])
    assert (graph.nodes, graph.edges, graph.arcs) == (2, 1, 2)
    assert unpack_distance_km(graph.edge_forward_cost[0]) == pytest.approx(4 * STEP_KM, abs=1e-5)
    assert len(graph.vertex_lon_e7) == 5


def test_length_of_a_known_geodesic(tmp_path: Path) -> None:
    """One degree of the meridian from 0 to 1 north is 110.574 km, from 89 to 90 it is 111.694 km.

    Source: table "Length of a degree" for WGS 84 in the article "Latitude" of Wikipedia (from
    memory).
    """
    for south, km in ((0.0, 110.574), (89.0, 111.694)):
        places = {"s": (0.0, south), "n": (0.0, south + 1)}
        graph, _, _ = graph_of(tmp_path, places, [("s n", ROAD)])
        assert unpack_distance_km(graph.edge_forward_cost[0]) == pytest.approx(km, abs=5e-4)


def test_a_two_way_road_that_becomes_one_way_is_not_joined(tmp_path: Path) -> None:
    """a ══ b ──> c: whoever stands between a and b can still go back to a."""
    graph, _, _ = graph_of(tmp_path, LINE, [("a b", ROAD), ("b c", ROAD | {"oneway": "yes"})])
    assert (graph.nodes, graph.edges, graph.arcs) == (3, 2, 3)


def test_head_on_one_ways_are_not_joined(tmp_path: Path) -> None:
    """a ──> b <── c: nobody passes b."""
    oneway = ROAD | {"oneway": "yes"}
    graph, _, _ = graph_of(tmp_path, LINE, [("a b", oneway), ("c b", oneway)])
    assert (graph.nodes, graph.arcs) == (3, 2)


def test_a_closed_ring_without_a_junction(tmp_path: Path) -> None:
    """A ring p q r that touches nothing is one loop edge; it is kept, and has no arc."""
    places = LINE | {"p": (1.0, 0.0), "q": (1.01, 0.0), "r": (1.0, 0.01)}
    graph, _, _ = graph_of(tmp_path, places, [("a b", ROAD), ("p q r p", ROAD)])
    loops = np.flatnonzero(graph.edge_start == graph.edge_end)
    assert len(loops) == 1
    assert graph.arcs == 2


def test_a_lollipop(tmp_path: Path) -> None:
    """a ── b with a loop b c d b at its end: the loop starts and ends at junction b."""
    places = LINE | {"d": (0.02, 0.01)}
    graph, _, _ = graph_of(tmp_path, places, [("a b", ROAD), ("b c d b", ROAD)])
    assert (graph.nodes, graph.edges, graph.arcs) == (2, 2, 2)
    assert int((graph.edge_start == graph.edge_end).sum()) == 1


def test_parallel_carriageways_stay_apart(tmp_path: Path) -> None:
    """a ⇉ c by b (short, slow) and by n (long, fast): both arcs stay, a third is dropped."""
    places = LINE | {"n": (0.01, 0.01), "s": (0.01, -0.02)}
    ways: Ways = [
        ("a b c", ROAD | {"maxspeed": "10"}),
        ("a n c", ROAD | {"maxspeed": "100"}),
        ("a s c", ROAD | {"maxspeed": "10"}),
        ("a e", ROAD),
        ("c d", ROAD),
    ]
    graph, _, _ = graph_of(tmp_path, places, ways)
    assert len(graph.to_networkx().get_edge_data(*_nodes(graph))) == 3
    assert graph.edges == 5
    assert graph.arcs == 2 * 4


def _nodes(graph: RoadGraph) -> tuple[int, int]:
    place = {round(lon * 1e-7, 5): i for i, lon in enumerate(graph.node_lon_e7.tolist())}
    return place[0.0], place[0.02]


def test_across_the_antimeridian(tmp_path: Path) -> None:
    """179.99 east to 179.99 west is 0.02 degrees, 2.226 km; its map line is cut in two."""
    places = {"e": (179.99, 0.0), "w": (-179.99, 0.0)}
    graph, _, lines = graph_of(tmp_path, places, [("e w", ROAD)])
    assert unpack_distance_km(graph.edge_forward_cost[0]) == pytest.approx(2 * STEP_KM, abs=1e-5)
    line = lines.geometry.iloc[0]
    assert line.geom_type == "MultiLineString"
    assert line.length == pytest.approx(0.02)


def test_networks_and_islands(tmp_path: Path) -> None:
    """Main a ══ b ══ c; d ──> c can be left but not reached; an island p ══ q joins nothing."""
    places = LINE | {"p": (1.0, 0.0), "q": (1.01, 0.0)}
    ways: Ways = [("a b c", ROAD), ("d c", ROAD | {"oneway": "yes"}), ("p q", ROAD)]
    graph, quality, _ = graph_of(tmp_path, places, ways)
    by_lon = dict(zip(np.round(graph.node_lon_e7 * 1e-7, 5), graph.node_network, strict=True))
    assert by_lon == {0.0: 0, 0.02: 0, 0.03: -1, 1.0: -1, 1.01: -1}
    island = graph.edge_detached_km > 0
    assert graph.edge_detached_km[island] == pytest.approx([STEP_KM], abs=1e-5)
    counted = quality.set_index("measure")["value"]
    assert counted["main networks"] == 1
    assert counted["islands"] == 1
    assert counted["road off the main networks"] == pytest.approx(2 * STEP_KM, abs=1e-4)


def test_a_second_network_of_some_size_is_a_main_one(tmp_path: Path) -> None:
    places = LINE | {"p": (1.0, 0.0), "q": (1.01, 0.0)}
    graph, _, _ = graph_of(tmp_path, places, [("a b c", ROAD), ("p q", ROAD)], main_network_km=1.0)
    assert sorted(graph.node_network.tolist()) == [0, 0, 1, 1]


def test_a_ferry_in_pieces_is_boarded_once(tmp_path: Path) -> None:
    """a ── b ~~ c ~~ d ── e with a second ferry line ending at sea in c: one wait each way."""
    places = LINE | {"x": (0.02, 0.05), "y": (0.03, 0.05)}
    ferry = {"route": "ferry", "duration": "6"}
    ways: Ways = [("a b", ROAD), ("b c", ferry), ("c d", ferry), ("d e", ROAD)]
    ways += [("c x", ferry), ("x y", ROAD)]
    graph, _, _ = graph_of(tmp_path, places, ways, ferry_wait_min=30.0)
    on_line = np.flatnonzero(graph.node_lat_e7 == 0).tolist()
    by_lon = {round(float(graph.node_lon_e7[i]) * 1e-7, 5): i for i in on_line}
    net = graph.to_networkx()
    for ends in ((0.01, 0.03), (0.03, 0.01)):
        start, end = (by_lon[lon] for lon in ends)
        seconds = nx.dijkstra_path_length(net, start, end, weight="travel_time")
        assert seconds == pytest.approx((6 + 6 + 30) * 60)


def test_written_and_read_back_memory_mapped(tmp_path: Path) -> None:
    graph, quality, lines = graph_of(tmp_path, LINE, [("a b c", ROAD), ("b d", ROAD)])
    folder = tmp_path / RoadGraph.folder_name
    folder.mkdir()
    graph.write(folder)
    back = RoadGraph.read(folder)
    assert not back.arc_cost.flags.writeable
    for name in vars(graph):
        assert np.array_equal(getattr(graph, name), getattr(back, name)), name
    RoadQuality.checked(quality)
    assert RoadLines.checked(lines)["distance_km"].sum() == pytest.approx(4 * STEP_KM, abs=1e-4)
    assert summarise_roads((graph, quality, lines)) == "4 km of road, 4 junctions, 6 arcs"
    (folder / "arc_cost.npy").write_bytes(b"half")
    with pytest.raises(RoadsError, match="Run the stage 'roads' again"):
        RoadGraph.read(folder)


def test_same_extract_gives_the_same_bytes(tmp_path: Path) -> None:
    extract = extract_of(tmp_path, LINE, [("a b c", ROAD), ("b d", ROAD), ("c e", ROAD)])
    one, other = (build_roads(extract, study=a_study())[0] for _ in range(2))
    for name in vars(one):
        assert getattr(one, name).tobytes() == getattr(other, name).tobytes(), name


@settings(max_examples=40, derandomize=True, deadline=None)
@given(
    ways=st.lists(
        st.tuples(
            st.lists(st.sampled_from("abcdefgh"), min_size=2, max_size=5),
            st.sampled_from([{}, {"oneway": "yes"}, {"oneway": "-1"}]),
        ),
        min_size=1,
        max_size=6,
    )
)
def test_contraction_keeps_all_distances(
    tmp_path_factory: pytest.TempPathFactory, ways: list[tuple[list[str], dict[str, str]]]
) -> None:
    """Random ways over eight nodes: distances between junctions equal the uncontracted graph's."""
    rng = np.random.default_rng(7)
    places = {name: tuple(rng.uniform(0, 0.1, 2).round(7)) for name in "abcdefgh"}
    plain: nx.MultiDiGraph[tuple[float, float]] = nx.MultiDiGraph()
    geod = Geod(ellps="WGS84")
    for names, tags in ways:
        for one, two in pairwise(names):
            if one == two:
                continue
            metres = geod.inv(*places[one], *places[two])[2]
            if tags.get("oneway") != "-1":
                plain.add_edge(places[one], places[two], length=metres)
            if tags.get("oneway") != "yes":
                plain.add_edge(places[two], places[one], length=metres)
    if not plain:
        return
    drawn: Ways = [(" ".join(names), ROAD | tags) for names, tags in ways]
    folder = tmp_path_factory.mktemp("world")
    graph, _, _ = graph_of(folder, places, drawn)
    net = graph.to_networkx()
    where = [
        (round(lon * 1e-7, 7), round(lat * 1e-7, 7))
        for lon, lat in zip(graph.node_lon_e7.tolist(), graph.node_lat_e7.tolist(), strict=True)
    ]
    for node, place in enumerate(where):
        found = nx.single_source_dijkstra_path_length(net, node, weight="length")
        wanted = nx.single_source_dijkstra_path_length(plain, place, weight="length")
        assert {where[n] for n in found} == set(where) & set(wanted)
        for other, metres in found.items():
            assert metres == pytest.approx(wanted[where[other]], abs=0.01)
