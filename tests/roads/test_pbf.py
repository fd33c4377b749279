"""The compiled PBF reader against libosmium's, object by object, and broken files."""

from __future__ import annotations

import random
from pathlib import Path

import numpy as np
import osmium
import pandas as pd
import pytest
from hypothesis import Phase, given, settings
from hypothesis import strategies as st
from osmium.osm.mutable import Node, Relation, Way

from pipeline.errors import RoadsError
from pipeline.roads import RoadExtract, read_extract
from pipeline.roads.merge import merge
from pipeline.roads.osm import read_osm
from pipeline.roads.pbf import read_pbf
from pipeline.roads.pbf_frame import OddFileError
from tests.roads.broken_files import broken_copies, judge, town_pbf
from tests.roads.test_osm import same

KEYS = st.sampled_from(["highway", "route", "maxspeed", "barrier", "name", "Straße"])
# Not beyond U+FFFFF: libosmium 2.2x writes characters of the last plane as others in OPL.
TEXTS = st.text(
    st.characters(codec="utf-8", min_codepoint=1, max_codepoint=0xFFFFF), min_size=1, max_size=12
)
TAGS = st.dictionaries(KEYS, TEXTS, max_size=4)
IDS = st.integers(-30, 30).filter(bool)
NODES = st.dictionaries(
    IDS,
    st.tuples(st.integers(-1_800_000_000, 1_800_000_000), st.integers(-899_999_999, 900_000_000)),
    max_size=12,
)
WAYS = st.dictionaries(IDS, st.tuples(st.lists(IDS, max_size=6), TAGS), min_size=1, max_size=6)
TURNS = st.dictionaries(
    st.integers(1, 30),
    st.tuples(
        st.lists(
            st.tuples(
                st.sampled_from("nwr"), st.integers(-9, 9), st.sampled_from(["from", "via", "x"])
            ),
            max_size=4,
        ),
        st.sampled_from(["restriction", "route", "multipolygon"]),
    ),
    max_size=3,
)


def same_objects(one: RoadExtract, other: RoadExtract) -> None:
    """Ways, nodes, signs and turn restrictions of two extracts are the same."""
    same(one, other)
    assert np.array_equal(one.tagged_nodes.node, other.tagged_nodes.node)
    pd.testing.assert_frame_equal(one.tagged_nodes.tags, other.tagged_nodes.tags)
    pd.testing.assert_frame_equal(one.turn_relations.tags, other.turn_relations.tags)
    for name in ("relation_id", "member_first", "member_is_way", "member_ref", "member_role"):
        assert np.array_equal(
            getattr(one.turn_relations, name), getattr(other.turn_relations, name)
        ), name


@settings(max_examples=40, derandomize=True, deadline=None, phases=[Phase.explicit, Phase.generate])
@given(nodes=NODES, ways=WAYS, turns=TURNS, tags=TAGS, nodes_last=st.booleans())
def test_equals_the_reference_object_by_object(
    tmp_path_factory: pytest.TempPathFactory,
    nodes: dict[int, tuple[int, int]],
    ways: dict[int, tuple[list[int], dict[str, str]]],
    turns: dict[int, tuple[list[tuple[str, int, str]], str]],
    tags: dict[str, str],
    nodes_last: bool,
) -> None:
    """Any ids, places, texts and members, in sorted and unsorted files."""
    file = tmp_path_factory.mktemp("pbf") / "any.osm.pbf"
    with osmium.SimpleWriter(str(file)) as writer:
        for first in (True, False):
            if first != nodes_last:
                for number, (x, y) in nodes.items():
                    place = osmium.osm.Location(x / 1e7, y / 1e7)
                    writer.add_node(Node(id=number, location=place, tags=tags))
            else:
                for number, (refs, pairs) in ways.items():
                    writer.add_way(Way(id=number, nodes=refs, tags=pairs))
        for number, (members, kind) in turns.items():
            writer.add_relation(
                Relation(id=number, members=members, tags={"type": kind, "restriction": "no_exit"})
            )
    same_objects(merge([read_pbf(file)]), merge([read_osm(file)]))


@pytest.mark.parametrize("options", ["pbf_dense_nodes=false", "pbf_compression=none"])
def test_other_kinds_of_pbf_are_read(tmp_path: Path, options: str) -> None:
    """Nodes one by one (left to the reference) and blocks without compression."""
    town = town_pbf(tmp_path / "town.osm.pbf")
    file = tmp_path / "other.osm.pbf"
    header = osmium.io.File(str(file), f"pbf,{options}")
    with osmium.SimpleWriter(header) as writer:
        for item in osmium.FileProcessor(str(town)):
            writer.add(item)
    same_objects(read_extract((file,)), read_extract((town,)))


def test_two_places_of_one_node_are_left_to_the_reference(tmp_path: Path) -> None:
    file = tmp_path / "twice.osm.pbf"
    with osmium.SimpleWriter(str(file)) as writer:
        for lon in (1.0, 2.0):
            writer.add_node(Node(id=1, location=(lon, 1.0)))
        writer.add_way(Way(id=1, nodes=[1, 1], tags={"highway": "road"}))
    with pytest.raises(OddFileError):
        read_pbf(file)
    assert len(read_extract((file,)).node_id) == 1


def test_a_file_that_ends_before_its_last_ways_is_refused(tmp_path: Path) -> None:
    """Nodes 1-1,000 and only the first of ten ways of 100 nodes: cut at the end of a block."""
    file = tmp_path / "cut.osm.pbf"
    with osmium.SimpleWriter(str(file)) as writer:
        for number in range(1, 1001):
            writer.add_node(Node(id=number, location=(number * 1e-3, 1.0)))
        writer.add_way(Way(id=1, nodes=list(range(1, 101)), tags={"highway": "road"}))
    with pytest.raises(RoadsError, match=r"about 90% of its untagged nodes .* download or cut"):
        read_extract((file,))


def test_a_file_that_lost_nodes_is_refused(tmp_path: Path) -> None:
    """Ten ways, nine of them without one of their nodes."""
    file = tmp_path / "holes.osm.pbf"
    with osmium.SimpleWriter(str(file)) as writer:
        for number in range(1, 1001):
            if number % 100 != 50 or number < 100:
                writer.add_node(Node(id=number, location=(number * 1e-3, 1.0)))
        for way in range(10):
            refs = list(range(100 * way + 1, 100 * way + 101))
            writer.add_way(Way(id=way + 1, nodes=refs, tags={"highway": "road"}))
    with pytest.raises(RoadsError, match=r"9 of 10 roads .* cut the extract again with complete"):
        read_extract((file,))


@pytest.mark.parametrize(
    "count", [60, pytest.param(1000, marks=pytest.mark.slow)], ids=["some", "all"]
)
def test_broken_files_never_give_half_a_graph(tmp_path: Path, count: int) -> None:
    """Bytes, ids, coordinates, whole blocks and ends of a town's PBF are broken at random.

    Every copy is read in a process of its own pool: it must come to an end in time, and give
    an error, or all roads, or roads of which the missing pieces are counted.
    """
    town = town_pbf(tmp_path / "town.osm.pbf")
    copies = broken_copies(town, tmp_path, count, random.Random(3))
    verdicts = judge(copies, town, seconds=120 + count)
    assert set(verdicts) <= {"refused", "whole", "counted", "moved"}
    assert verdicts.count("refused") > count // 3
