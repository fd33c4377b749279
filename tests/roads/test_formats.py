"""The same network in every format, and layers with names of their own."""

from __future__ import annotations

import warnings
from collections.abc import Sequence
from pathlib import Path
from typing import Any

import geopandas as gpd
import networkx as nx
import numpy as np
import osmium
import osmnx
import pandas as pd
import pytest
from shapely import LineString, MultiLineString, Point
from shapely.geometry.base import BaseGeometry

from pipeline.errors import RoadsError
from pipeline.road_settings import RoadsSettings
from pipeline.roads import RoadExtract, build_roads, read_extract
from pipeline.routes import route
from tests.roads.worlds import ROAD, Places, Ways, a_study, osm_xml, sites_at, zones_at

# Three streets north, three east, a bend between b2 and c2, and one-way roads both ways:
#
#     a3 ──── b3 ←─── c3        r: a1-a2-a3      one-way a3 → ... none
#     │       │       │         b2 ⌒ c2 bends by m
#     a2 ──── b2 ⌒m── c2        b3 ← c3 is tagged oneway=-1 from b3 to c3
#     │       ↑       │         b1 → b2 is tagged oneway=yes
#     a1 ──── b1 ──── c1 ~ferry~ d
PLACES: Places = {
    "a1": (0.0, 0.0), "b1": (0.01, 0.0), "c1": (0.02, 0.0), "d": (0.05, 0.0),
    "a2": (0.0, 0.01), "b2": (0.01, 0.01), "c2": (0.02, 0.01), "m": (0.015, 0.013),
    "a3": (0.0, 0.02), "b3": (0.01, 0.02), "c3": (0.02, 0.0200001),
    "e": (0.06, 0.001),
}  # fmt: skip
SLOW = {"highway": "residential"}
WAYS: Ways = [
    ("a1 b1 c1", ROAD),
    ("a2 b2 m c2", SLOW | {"maxspeed": "30"}),
    ("a3 b3", SLOW),
    ("b3 c3", SLOW | {"oneway": "-1"}),
    ("a1 a2 a3", {"highway": "secondary", "toll": "yes"}),
    ("b1 b2", SLOW | {"oneway": "yes"}),
    ("b2 b3", SLOW),
    ("c1 c2 c3", ROAD),
    ("c1 d", {"route": "ferry", "duration": "12"}),
    ("d e", SLOW),
]
ZONES: Places = {"z1": (0.0001, 0.0005), "z2": (0.0149, 0.0125), "z3": (0.06, 0.001)}
SITES: Places = {"s1": (0.0199, 0.0195), "s2": (0.0051, 0.02)}


def xml_world(folder: Path) -> Path:
    file = folder / "world.osm"
    file.write_text(osm_xml(PLACES, WAYS), encoding="utf-8")
    return file


def routes_of(extract: RoadExtract) -> pd.DataFrame:
    study = a_study(roads={"main_network_km": 0.5}, routes={"max_snap_km": 2.0})
    graph, _, _ = build_roads(extract, study=study)
    return route(zones_at(ZONES), sites_at(SITES), graph, study=study)[0]


def osmnx_graph(file: Path, *, simplify: bool = False) -> nx.MultiDiGraph[int]:
    """As osmnx reads the file, with the tags that the rules of the road need."""
    before = list(osmnx.settings.useful_tags_way)
    osmnx.settings.useful_tags_way = [*before, "route", "duration", "toll", "surface"]
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")  # osmnx: the file was not made by its own writer
            graph: nx.MultiDiGraph[int] = osmnx.graph_from_xml(
                file, simplify=False, retain_all=True
            )
    finally:
        osmnx.settings.useful_tags_way = before
    if simplify:
        graph = osmnx.simplify_graph(graph, edge_attrs_differ=["highway", "route"])
    return graph


def pbf_of(xml: Path) -> Path:
    file = xml.with_suffix(".osm.pbf")
    with osmium.SimpleWriter(str(file)) as writer:
        for item in osmium.FileProcessor(str(xml)):
            writer.add(item)
    return file


def layer_of(xml: Path) -> gpd.GeoDataFrame:
    """Edges as osmnx gives them, every direction a line; class, speed and toll renamed."""
    edges = osmnx.graph_to_gdfs(osmnx_graph(xml), nodes=False).reset_index()
    edges["kind"] = (
        edges["highway"]
        .fillna(edges.get("route"))
        .map({"primary": "A", "secondary": "B", "residential": "C", "ferry": "boat"})
    )
    back = set(zip(edges["v"], edges["u"], strict=True))
    edges["flow"] = [
        "B" if pair in back else "FT" for pair in zip(edges["u"], edges["v"], strict=True)
    ]
    edges["kmh"] = pd.to_numeric(edges["maxspeed"])
    edges["fee"] = edges["toll"].eq("yes").map({True: "Y", False: "N"})
    return edges[["kind", "flow", "kmh", "fee", "duration", "geometry"]]


OWN_NAMES = RoadsSettings.model_validate(
    {
        "columns": {"road_class": "kind", "oneway": "flow", "speed": "kmh", "toll": "fee"},
        "class_values": {"A": "primary", "B": "secondary", "C": "residential", "boat": "ferry"},
        "oneway_values": {"B": "no", "FT": "yes"},
    }
)


def test_one_network_in_four_formats_gives_the_same_routes(tmp_path: Path) -> None:
    """XML, PBF, GraphML (plain and simplified) and GeoPackage agree to the metre."""
    xml = xml_world(tmp_path)
    expected = routes_of(read_extract((xml,)))
    assert (expected["route_status"] == "routed").all()
    files: list[tuple[Path, RoadsSettings | None]] = [(pbf_of(xml), None)]
    for name, simplify in (("plain", False), ("simple", True)):
        osmnx.save_graphml(osmnx_graph(xml, simplify=simplify), tmp_path / f"{name}.graphml")
        files.append((tmp_path / f"{name}.graphml", None))
    for suffix in (".gpkg", ".fgb", ".geojson", ".shp"):
        layer_of(xml).to_file(tmp_path / f"own{suffix}")
        files.append((tmp_path / f"own{suffix}", OWN_NAMES))
    layer_of(xml).to_parquet(tmp_path / "own.parquet")
    files.append((tmp_path / "own.parquet", OWN_NAMES))
    for file, settings in files:
        found = routes_of(read_extract((file,), settings))
        for column in ("distance_km", "shortest_distance_km", "return_distance_km", "toll_km"):
            assert np.allclose(found[column], expected[column], atol=0.001), (file.name, column)
        assert found["route_status"].tolist() == expected["route_status"].tolist(), file.name


def test_two_graphml_files_that_overlap_count_each_road_once(tmp_path: Path) -> None:
    xml = xml_world(tmp_path)
    for name in ("north", "south"):
        osmnx.save_graphml(osmnx_graph(xml, simplify=True), tmp_path / f"{name}.graphml")
    both = read_extract((tmp_path / "north.graphml", tmp_path / "south.graphml"))
    assert both.ways == read_extract((tmp_path / "north.graphml",)).ways


# --- layers ----------------------------------------------------------------------------------


def layer(tmp_path: Path, lines: Sequence[BaseGeometry], **columns: Any) -> Path:
    file = tmp_path / "lines.gpkg"
    named = {"highway": ["primary"] * len(lines), **columns}
    frame = gpd.GeoDataFrame(named, geometry=lines, crs=4326)
    frame.to_file(file)
    return file


def junctions(extract: RoadExtract) -> int:
    """Nodes that more than one way uses, or one way twice."""
    return int((np.bincount(extract.way_node) > 1).sum())


def test_ends_are_joined_within_the_tolerance_and_no_further(tmp_path: Path) -> None:
    """a ── b and c ── d with 0.11 m between b and c, on a metre grid near the equator."""
    file = layer(
        tmp_path, [LineString([(0, 0), (0.01, 0)]), LineString([(0.010001, 0), (0.02, 0)])]
    )
    for tolerance, expected in ((0.1, 0), (0.2, 1)):
        settings = RoadsSettings(node_tolerance_m=tolerance)
        assert junctions(read_extract((file,), settings)) == expected


def test_an_end_joins_a_vertex_but_a_crossing_only_on_request(tmp_path: Path) -> None:
    """
         e                    t ends at vertex v of the long line: joined at once.
         │                    x crosses it between two vertices: joined on request, and
    a ───x──── v ──── b       not where it is a bridge (another level).
         │     │
         f     t
    """
    lines = [
        LineString([(0, 0), (0.01, 0), (0.02, 0)]),
        LineString([(0.01, 0), (0.01, -0.01)]),
        LineString([(0.005, 0.01), (0.005, -0.01)]),
    ]
    flat = layer(tmp_path, lines)
    assert junctions(read_extract((flat,))) == 1
    crossing = RoadsSettings(node_at_crossings=True)
    joined = read_extract((flat,), crossing)
    assert junctions(joined) == 2
    assert joined.node_lon_e7[np.bincount(joined.way_node) > 1].tolist() == [50_000, 100_000]
    bridge = layer(tmp_path, lines, level=["0", "0", "1"])
    assert junctions(read_extract((bridge,), crossing)) == 1


def test_closed_rings_and_parts_are_roads(tmp_path: Path) -> None:
    """A ring meets itself, and both parts of a multi-line are ways."""
    ring = LineString([(0, 0), (0.01, 0), (0.01, 0.01), (0, 0)])
    parts = MultiLineString([[(1, 1), (1.1, 1)], [(1.1, 1), (1.2, 1)]])
    extract = read_extract((layer(tmp_path, [ring, parts]),))
    assert extract.ways == 3
    assert junctions(extract) == 2


def test_miles_and_reference_systems(tmp_path: Path) -> None:
    """Coordinates in UTM, speeds in miles: 30 is '30 mph', nothing is nothing, as is 0."""
    lines = [LineString([(0, k / 10), (0.01, k / 10)]) for k in range(3)]
    frame = gpd.GeoDataFrame(
        {"highway": "primary", "maxspeed": [30.0, 0, None]}, geometry=lines, crs=4326
    )
    file = tmp_path / "utm.gpkg"
    frame.to_crs(32631).to_file(file)
    extract = read_extract((file,), RoadsSettings(speed_unit="mph"))
    assert extract.way_tags["maxspeed"].tolist()[0] == "30 mph"
    assert extract.way_tags["maxspeed"].isna().tolist() == [False, True, True]
    assert np.abs(extract.node_lon_e7 - np.rint(extract.node_lon_e7 / 100_000) * 100_000).max() <= 1


@pytest.mark.parametrize(
    ("columns", "geometry", "message"),
    [
        (
            {"highway": ["A1"]},
            None,
            r"'highway' that is not known: 'A1' \(1\).*class_values",
        ),
        ({"oneway": ["left"]}, None, r"'oneway' that is not known: 'left'.*oneway_values"),
        ({}, Point(0, 0), r"1 of 1 features are no lines \(first: row 1, Point\)"),
    ],
)
def test_values_that_are_not_known_are_refused(
    tmp_path: Path, columns: dict[str, Any], geometry: BaseGeometry | None, message: str
) -> None:
    line = LineString([(0, 0), (1, 0)]) if geometry is None else geometry
    with pytest.raises(RoadsError, match=message):
        read_extract((layer(tmp_path, [line], **columns),))


def test_a_graph_that_joins_roads_and_ferries_is_refused(tmp_path: Path) -> None:
    """osmnx has simplified c1 ~ferry~ d ── e to one edge: it can no longer be told apart."""
    graph = osmnx.simplify_graph(osmnx_graph(xml_world(tmp_path)))
    osmnx.save_graphml(graph, tmp_path / "joined.graphml")
    with pytest.raises(RoadsError, match=r"1 road.* edge_attrs_differ"):
        read_extract((tmp_path / "joined.graphml",))


def test_files_that_are_none_of_this_are_refused(tmp_path: Path) -> None:
    for name, says in (("a.graphml", "not GraphML"), ("b.gpkg", "not a layer of lines")):
        (tmp_path / name).write_text("roads", encoding="utf-8")
        with pytest.raises(RoadsError, match=says):
            read_extract((tmp_path / name,))
    lines = layer(tmp_path, [LineString([(0, 0), (1, 0)])])
    with pytest.raises(RoadsError, match=r"column 'kind' is missing; the layer has: highway"):
        read_extract((lines,), OWN_NAMES)
    with pytest.raises(RoadsError, match=r"lines\.gpkg is a layer of lines, and the others"):
        read_extract((lines, tmp_path / "a.graphml"))
    flat: nx.Graph[int] = nx.Graph([(1, 2)])
    for node in flat:
        flat.nodes[node].update(x=0.0, y=0.0)
    nx.write_graphml(flat, tmp_path / "flat.graphml")
    with pytest.raises(RoadsError, match=r"has no directions"):
        read_extract((tmp_path / "flat.graphml",))
