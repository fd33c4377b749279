"""What stands beside and across the roads: tags of nodes, and turn restrictions.

Node tags are barriers, signals, signs, crossings, toll booths and fords; turn restrictions are
relations of ways and nodes. Readers end in these two forms; ``restrictions`` and ``barriers``
give them their meaning.
"""

from __future__ import annotations

import re
from collections.abc import Iterable
from dataclasses import dataclass, field

import numpy as np
import pandas as pd

from pipeline.roads.arrays import Bool, Int8, Int32, Int64, offsets

NODE_KEYS = (
    "barrier",
    "highway",
    "ford",
    "access",
    "vehicle",
    "motor_vehicle",
    "motorcar",
    "motorcycle",
    "bicycle",
    "foot",
    "locked",
    "direction",
    "traffic_signals:direction",
)
# `highway` values of nodes that are kept; street lamps, bus stops and the like are not.
NODE_HIGHWAYS = frozenset({"traffic_signals", "stop", "give_way", "crossing", "toll_booth"})
RELATION_KEYS = (
    "restriction",
    "restriction:conditional",
    "restriction:motorcar",
    "restriction:motorcycle",
    "restriction:bicycle",
    "except",
    "type",
)
ROLES = ("from", "via", "to")

Pairs = list[tuple[str, str]]
_MEMBER = re.compile(r"([nw])(-?\d+)@([^,]*)")


def tag_table(
    count: int, keys: tuple[str, ...], found: Iterable[tuple[int, str, str]]
) -> pd.DataFrame:
    """One categorical column per key from (row, key, value); other keys are left out."""
    rows: dict[str, list[int]] = {key: [] for key in keys}
    values: dict[str, list[str]] = {key: [] for key in keys}
    for row, key, value in found:
        if key in rows:
            rows[key].append(row)
            values[key].append(value)
    columns = {}
    for key in keys:
        known, categories = pd.factorize(np.array(values[key], dtype=object), sort=True)
        codes = np.full(count, -1, dtype=np.int32)
        codes[np.array(rows[key], dtype=np.int64)] = known
        columns[key] = pd.Categorical.from_codes(
            codes, categories=pd.Index(categories, dtype=object)
        )
    return pd.DataFrame(columns, index=pd.RangeIndex(count))


def _no_relations() -> pd.DataFrame:
    return tag_table(0, RELATION_KEYS, ())


@dataclass(frozen=True)
class TurnRelations:
    """Turn restrictions as they were mapped.

    Attributes
    ----------
    relation_id : (r,) OSM relation ids, ascending.
    tags : one row per relation, one categorical column for each of `RELATION_KEYS`.
    member_first : (r + 1,) relation `i` has the members ``member_first[i]:member_first[i + 1]``.
    member_is_way : (m,) whether the member is a way; else it is a node.
    member_ref : (m,) OSM id of the member.
    member_role : (m,) position of its role in `ROLES`.
    """

    relation_id: Int64 = field(default_factory=lambda: np.zeros(0, dtype=np.int64))
    tags: pd.DataFrame = field(default_factory=_no_relations)
    member_first: Int64 = field(default_factory=lambda: np.zeros(1, dtype=np.int64))
    member_is_way: Bool = field(default_factory=lambda: np.zeros(0, dtype=np.bool_))
    member_ref: Int64 = field(default_factory=lambda: np.zeros(0, dtype=np.int64))
    member_role: Int8 = field(default_factory=lambda: np.zeros(0, dtype=np.int8))

    @property
    def count(self) -> int:
        """How many relations there are."""
        return len(self.relation_id)


def _no_nodes() -> pd.DataFrame:
    return tag_table(0, NODE_KEYS, ())


@dataclass(frozen=True)
class TaggedNodes:
    """Nodes with a tag that matters to the roads.

    Attributes
    ----------
    node : (k,) index into the nodes of the extract, ascending.
    tags : one row per node, one categorical column for each of `NODE_KEYS`.
    """

    node: Int32 = field(default_factory=lambda: np.zeros(0, dtype=np.int32))
    tags: pd.DataFrame = field(default_factory=_no_nodes)


@dataclass(frozen=True)
class Signs:
    """Tagged nodes and turn restrictions as a file lists them, in plain Python."""

    nodes: dict[int, Pairs] = field(default_factory=dict)
    relations: dict[int, tuple[Pairs, list[tuple[bool, int, int]]]] = field(default_factory=dict)

    def add_node(self, node_id: int, pairs: Pairs) -> None:
        """Keep a node if one of its tags matters to the roads."""
        kept = [pair for pair in pairs if pair[0] in NODE_KEYS and not _is_furniture(*pair)]
        if any(key in ("barrier", "highway", "ford") for key, _ in kept):
            self.nodes[node_id] = kept

    def add_relation(self, relation_id: int, pairs: Pairs, members: str) -> None:
        """Keep a turn restriction; `members` as in ``w7@from,n2@via,w8@to``."""
        found = [
            (kind == "w", int(ref), ROLES.index(role))
            for kind, ref, role in _MEMBER.findall(members)
            if role in ROLES
        ]
        self.relations[relation_id] = (pairs, found)


def _is_furniture(key: str, value: str) -> bool:
    return key == "highway" and value not in NODE_HIGHWAYS


def merge_signs(files: list[Signs], node_id: Int64) -> tuple[TaggedNodes, TurnRelations]:
    """One set of all files, by OSM id; tagged nodes that no way uses are left out."""
    nodes = {key: pairs for signs in reversed(files) for key, pairs in signs.nodes.items()}
    relations = {key: item for signs in reversed(files) for key, item in signs.relations.items()}
    ids = np.array(sorted(nodes), dtype=np.int64)
    index = np.searchsorted(node_id, ids)
    used = np.zeros(len(ids), dtype=np.bool_)
    inside = index < len(node_id)
    used[inside] = node_id[index[inside]] == ids[inside]
    kept = ids[used].tolist()
    tags = ((row, key, value) for row, node in enumerate(kept) for key, value in nodes[node])
    tagged = TaggedNodes(index[used].astype(np.int32), tag_table(len(kept), NODE_KEYS, tags))
    return tagged, _turn_relations(relations)


def _turn_relations(
    relations: dict[int, tuple[Pairs, list[tuple[bool, int, int]]]],
) -> TurnRelations:
    ordered = sorted(relations)
    members = [relations[number][1] for number in ordered]
    flat = np.array([m for ms in members for m in ms], dtype=np.int64).reshape(-1, 3)
    tags = (
        (row, key, value)
        for row, number in enumerate(ordered)
        for key, value in relations[number][0]
    )
    return TurnRelations(
        relation_id=np.array(ordered, dtype=np.int64),
        tags=tag_table(len(ordered), RELATION_KEYS, tags),
        member_first=offsets(np.array([len(ms) for ms in members], dtype=np.int64)),
        member_is_way=flat[:, 0].astype(np.bool_),
        member_ref=flat[:, 1],
        member_role=flat[:, 2].astype(np.int8),
    )
