"""Reading OSM files: formats, order, missing nodes, broken files."""

from __future__ import annotations

import bz2
import gzip
from pathlib import Path

import numpy as np
import osmium
import pandas as pd
import pytest
from osmium.osm.mutable import Node, Way

from pipeline.errors import RoadsError
from pipeline.roads import RoadExtract, build_roads, read_extract
from tests.roads.worlds import ROAD, Places, Ways, a_study, extract_of, osm_xml

PLACES: Places = {"a": (-21.9, 64.1), "b": (-21.8999999, 64.2), "c": (0.0, -64.0000001)}
WAYS: Ways = [("a b", ROAD | {"surface": "sand, wet=100%"}), ("b c", {"route": "ferry"})]


def same(one: RoadExtract, other: RoadExtract) -> None:
    for name in ("node_id", "node_lon_e7", "node_lat_e7", "way_id", "way_start", "way_node"):
        assert np.array_equal(getattr(one, name), getattr(other, name)), name
    pd.testing.assert_frame_equal(one.way_tags, other.way_tags)


def test_coordinates_and_tags_come_out_as_they_went_in(tmp_path: Path) -> None:
    """Two ways over three nodes; exact to 1e-7 degree, signs and odd characters included."""
    extract = extract_of(tmp_path, PLACES, WAYS)
    assert extract.node_lon_e7.tolist() == [-219_000_000, -218_999_999, 0]
    assert extract.node_lat_e7.tolist() == [641_000_000, 642_000_000, -640_000_001]
    assert extract.way_node.tolist() == [0, 1, 1, 2]
    assert extract.way_tags["surface"].tolist()[0] == "sand, wet=100%"
    assert extract.way_tags["route"].iloc[1] == "ferry"


@pytest.mark.parametrize("suffix", [".osm.gz", ".osm.bz2", ".osm.pbf", "unsorted.osm"])
def test_formats_give_the_same_extract(tmp_path: Path, suffix: str) -> None:
    plain = extract_of(tmp_path, PLACES, WAYS)
    file = tmp_path / f"other{suffix}"
    text = osm_xml(PLACES, WAYS, ways_first="unsorted" in suffix).encode()
    if suffix == ".osm.pbf":
        with osmium.SimpleWriter(str(file)) as writer:
            for number, place in enumerate(PLACES.values(), start=1):
                writer.add_node(Node(id=number, location=place))
            writer.add_way(Way(id=1, nodes=[1, 2], tags=WAYS[0][1]))
            writer.add_way(Way(id=2, nodes=[2, 3], tags=WAYS[1][1]))
    else:
        packed = {".osm.gz": gzip.compress(text), ".osm.bz2": bz2.compress(text)}
        file.write_bytes(packed.get(suffix, text))
    same(read_extract((file,)), plain)


def test_negative_ids_of_editors_are_read(tmp_path: Path) -> None:
    text = osm_xml(PLACES, WAYS)
    for number in (1, 2, 3):
        text = text.replace(f'<node id="{number}"', f'<node id="-{number}"')
        text = text.replace(f'ref="{number}"', f'ref="-{number}"')
    file = tmp_path / "drawn.osm"
    file.write_text(text, encoding="utf-8")
    extract = read_extract((file,))
    assert extract.node_id.tolist() == [-3, -2, -1]
    assert extract.node_lat_e7.tolist() == [-640_000_001, 642_000_000, 641_000_000]


def test_several_extracts_are_merged_by_id(tmp_path: Path) -> None:
    """North holds ways 1 and 2, south holds way 2 again: three nodes, two ways."""
    both = extract_of(tmp_path, PLACES, WAYS)
    north, south = tmp_path / "north.osm", tmp_path / "south.osm"
    north.write_text(osm_xml(PLACES, WAYS), encoding="utf-8")
    south.write_text(
        osm_xml(PLACES, WAYS).replace('<way id="1">', '<way id="2"><tag k="x" v="y"/>'),
        encoding="utf-8",
    )
    merged = read_extract((north, south))
    assert merged.way_id.tolist() == both.way_id.tolist()
    assert merged.node_id.tolist() == both.node_id.tolist()


def test_a_way_that_leaves_the_extract_is_cut_and_counted(tmp_path: Path) -> None:
    """a ── b ── (missing) ── c: a ── b is left, c stands alone and is not a road."""
    extract = extract_of(tmp_path, PLACES, [("a b missing c", ROAD)])
    graph, quality, _ = build_roads(extract, study=a_study())
    assert graph.edges == 1
    counted = quality.set_index("measure")["value"]
    assert counted["ways cut"] == 1
    assert counted["pieces cut out"] == 2


def test_truncated_and_garbage_files_are_refused(tmp_path: Path) -> None:
    """Every cut of a small PBF but those at the end of a block is an error, never half a graph."""
    whole = tmp_path / "whole.osm.pbf"
    with osmium.SimpleWriter(str(whole)) as writer:
        for number in range(1, 500):
            writer.add_node(Node(id=number, location=(number * 1e-3, 1.0)))
        writer.add_way(Way(id=1, nodes=list(range(1, 500)), tags=ROAD))
    content = whole.read_bytes()
    broken = tmp_path / "broken.osm.pbf"
    for size in (1, 50, len(content) // 2, len(content) - 1):
        broken.write_bytes(content[:size])
        with pytest.raises(RoadsError, match=r"broken\.osm\.pbf: .*(again|roads\.files)"):
            read_extract((broken,))
    broken.write_bytes(np.random.default_rng(1).bytes(2000))
    with pytest.raises(RoadsError, match=r"not a whole OSM file"):
        read_extract((broken,))


def test_what_is_no_road_file_is_refused(tmp_path: Path) -> None:
    text = tmp_path / "notes.txt"
    text.write_text("roads", encoding="utf-8")
    with pytest.raises(RoadsError, match=r"notes\.txt: not a whole OSM file"):
        read_extract((text,))
    with pytest.raises(RoadsError, match=r"no road extract is given"):
        read_extract(())
    with pytest.raises(RoadsError, match=r"no way with a highway or ferry tag"):
        extract_of(tmp_path, PLACES, [("a b", {"waterway": "river"})])


def test_signs_and_turn_restrictions_are_read(tmp_path: Path) -> None:
    """a ── b ── c with a gate at b, a street lamp at c, and a restriction from a b to b c."""
    signs = {"b": {"barrier": "gate", "access": "no, never"}, "c": {"highway": "street_lamp"}}
    turns = [("1 b 2", {"restriction": "no_u_turn", "except": "psv"}), ("1 2 1", {"x": "y"})]
    extract = extract_of(tmp_path, PLACES, WAYS, signs, turns)
    tagged = extract.tagged_nodes
    assert tagged.node.tolist() == [1]
    assert tagged.tags[["barrier", "access"]].to_numpy().tolist() == [["gate", "no, never"]]
    found = extract.turn_relations
    assert found.relation_id.tolist() == [1, 2]
    assert found.tags["restriction"].tolist()[0] == "no_u_turn"
    assert found.member_first.tolist() == [0, 3, 6]
    assert found.member_ref.tolist() == [1, 2, 2, 1, 2, 1]
    assert found.member_is_way.tolist() == [True, False, True, True, True, True]
    assert found.member_role.tolist() == [0, 1, 2, 0, 1, 2]


def test_a_tagged_node_without_a_road_is_left_out(tmp_path: Path) -> None:
    places = PLACES | {"far": (1.0, 1.0)}
    extract = extract_of(tmp_path, places, WAYS, {"far": {"barrier": "gate"}})
    assert len(extract.tagged_nodes.node) == 0
